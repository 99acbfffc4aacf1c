"""The nearest pair of polynomials with a common factor: how far it is, and an exact witness.

Given f, g and a degree k, change the coefficients as little as possible so that both have one
factor h of degree k. For a fixed h the changes that work form a plane, so the nearest one is a
linear problem: with C(h) the matrix of the powers x^i modulo h, and changes L xi measured by the
length of xi,

    minimise ||xi||  subject to  C(h) L xi = -(f mod h, g mod h).

What is left is a search over the k coefficients of h, by Gauss-Newton on the manifold of pairs
with a common factor: (f + df) mod h changes with h at the rate -(quotient times power) mod h, so
each step is a least-squares problem with k unknowns. L is diagonal for independent coefficients
(its zeros are coefficients that are fixed) and a square root of the covariance for correlated
ones; what is proved or taken to be common already, c, stays common: changes are then c times
something.

Remainders are computed in rational arithmetic and only then rounded, and h is kept with many
digits. Where f mod h is a thousand million million times smaller than f, doubles would see
rounding alone. The answer is therefore not limited by the precision of a double, and its witness
is exact: h divides both of its polynomials, term by term. Where coefficients reach so far that even
scaled they leave the range of doubles a search ends with an infinite cost; callers switch numpy's
warnings off.

A lower bound comes from a Sylvester matrix: a pair with a common factor of degree k has a
singular k-th one, so sigma_min(S_k(f, g)) <= ||S_k(df, dg)||.

References
----------
Corless, Gianni, Trager, Watt (1995), The singular value decomposition for polynomial systems,
ISSAC. Karmarkar and Lakshman (1998), On approximate GCDs of univariate polynomials, J. Symbolic
Computation 26. Zeng (2011), The numerical greatest common divisor of univariate polynomials,
Contemporary Mathematics 556. Golub and Pereyra (1973), The differentiation of pseudo-inverses and
nonlinear least squares problems whose variables separate, SIAM J. Numerical Analysis 10.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any, Final

import numpy as np
import scipy.linalg

from realize import polynomials
from realize import tolerance as rule
from realize.arithmetic.divisors import convolution, sylvester
from realize.polynomials import Polynomial

__all__ = [
    "Metric",
    "NearDivisors",
    "Trial",
    "has_no_real_root",
    "is_out_of_reach",
    "least_change",
    "level_weights",
    "near_float",
    "size_of_change",
]

Array = np.ndarray[Any, Any]

_STEPS: Final = 40
"""Gauss-Newton steps at most. Convergence is fast when the change is small, linear when not."""

_HALVINGS: Final = 12
"""How often a step that does not lower the change is halved."""

_GRID: Final = 2**240
"""Coefficients of h are kept to one part in this, in units where they are of size one."""

_SINGULAR: Final = 2.0**-44
"""Singular value over the largest one below which fixed coefficients leave a direction no room."""

_MET: Final = 2.0**-40
"""Size of a remainder, over that of all, that is noise where no coefficient is free to take it up
but those that others need."""

_RIGID: Final = 2.0**-120
"""Size of a remainder that counts as zero where no coefficient enters at all; remainders are
exact, so this is a question of how far a search goes on."""

_FREE: Final = 2.0**40
"""Weight, over the largest coefficient, beyond which more freedom changes nothing."""

_FAR: Final = 2**10
"""Size of a coefficient of h, in units where those of the longer polynomial are level, at which a
search is given up: it has lost its way."""

_SETTLED: Final = 1e-7
"""Relative gain of a step below which the search ends."""

_WORK: Final = 60_000
"""Degree times bits of a coefficient up to which real roots are isolated for a proof: a second or
two."""

_BITS: Final = 2_000
"""Bits of a coefficient up to which that is tried. Roots whose sizes differ by hundreds of decades
take minutes."""

_ROUNDS: Final = 6
"""Linear programs at most in a search for the smallest box."""


@dataclass(frozen=True, slots=True)
class Metric:
    """What a change of the coefficients is measured by.

    Attributes
    ----------
    f, g : sequences of Fraction
        The size that counts as one for each coefficient, 0 where it is fixed.
    covariance : float array, or None
        Of all coefficients, those of f first; then f and g hold standard deviations.
    """

    f: Sequence[Fraction]
    g: Sequence[Fraction]
    covariance: Array | None = None


@dataclass(frozen=True, slots=True)
class _System:
    """For a fixed factor: whole xi = -target, rows in `units`; powers of x modulo the factor."""

    powers: Array
    units: Array
    whole: Array
    target: Array


@dataclass(slots=True)
class Trial:
    """A trial factor in the scaled variable, what it costs, and the step that lowers the cost.

    Attributes
    ----------
    h : tuple of Fraction
        Monic.
    cost : float
        Size of the smallest change that makes it common.
    unmet : pair of float
        Remainders where no coefficient is free to take them up: those of conditions that none
        enters at all, and those of conditions that depend on others; 0.0 where they are noise.
    xi : array
        That change, in the coordinates of the metric.
    step : array
        Gauss-Newton step of the coefficients of h, the leading one left out.
    """

    h: Polynomial
    cost: float
    unmet: tuple[float, float]
    xi: Array
    step: Array

    @property
    def is_met(self) -> bool:
        """Whether the conditions that no coefficient is free to take up hold."""
        return not any(self.unmet)

    @property
    def merit(self) -> tuple[float, float, float]:
        """What a search lowers: what is not met first, then the cost."""
        return (*self.unmet, self.cost)


class NearDivisors:
    """The pairs near (f, g) with a common factor beyond the one they have.

    Parameters
    ----------
    f, g : tuple of Fraction
        Descending powers, leading coefficients not zero.
    common, f_rest, g_rest : tuple of Fraction
        f = common * f_rest and g = common * g_rest, exactly or to within a tolerance.
    """

    def __init__(
        self,
        f: Polynomial,
        g: Polynomial,
        common: Polynomial,
        f_rest: Polynomial,
        g_rest: Polynomial,
    ) -> None:
        self.originals = f, g
        self.common = common
        longer = f_rest if len(f_rest) >= len(g_rest) else g_rest
        self.unit = _unit(longer)
        self.shifts = [_size_exponent(_graded(p, -self.unit)) for p in (f_rest, g_rest)]
        self.rests = [
            _scaled(_graded(p, -self.unit), -shift)
            for p, shift in zip((f_rest, g_rest), self.shifts, strict=True)
        ]
        self.flint = [polynomials.to_flint(p) for p in self.rests]
        self.floats = [_floats(p) for p in self.rests]
        graded = _graded(common, -self.unit)
        self.convolutions = [
            convolution(_floats(graded), len(rest)) if len(common) > 1 else None
            for rest in self.rests
        ]
        self.degree_limit = min(len(p) for p in self.rests) - 1

    # Scaling

    def scaled_factor(self, h: Polynomial) -> Polynomial:
        """Return a monic factor in the scaled variable."""
        return _graded(h, -self.unit)

    def weights(self, metric: Metric) -> list[Array]:
        """Return the weights of both sides in scaled coefficients, as doubles."""
        # Beyond this a coefficient is as free as can be.
        return [
            np.minimum(_floats(_scaled(_graded(tuple(w), -self.unit), -shift)), _FREE)
            for w, shift in zip((metric.f, metric.g), self.shifts, strict=True)
        ]

    def root(self, metric: Metric) -> Array:
        """Return L: changes of the scaled rests are L xi, and ||xi|| is their size."""
        weights = np.concatenate(self.weights(metric))
        if metric.covariance is None:
            base = np.diag(weights)
        else:
            base = _square_root(metric.covariance, weights)
        if self.convolutions[0] is None:
            return base
        # Changes of the originals are base eta = convolution delta; find the eta that fit.
        whole = scipy.linalg.block_diag(*self.convolutions)
        size = float(np.abs(base).max(initial=0.0)) or 1.0
        null = scipy.linalg.null_space(np.hstack([base / size, -whole]))
        eta, delta = null[: base.shape[1]], null[base.shape[1] :] * size
        triangle = np.linalg.qr(eta, mode="r")
        return np.asarray(scipy.linalg.solve_triangular(triangle, delta.T, trans="T").T)

    # The search

    def descend(self, start: Polynomial, root: Array) -> Trial:
        """Return the nearest local solution from a start, by Gauss-Newton.

        Parameters
        ----------
        start : tuple of Fraction
            Monic, in the scaled variable.
        root : array
            L of `root`.
        """
        point = self.point(start, root)
        for _ in range(_STEPS):
            if max(abs(c) for c in point.h) > _FAR * max(map(abs, start)):
                break
            better = self._shortened(point, root)
            if better is None:
                break
            gain = point.cost - better.cost
            settled = point.is_met and gain <= _SETTLED * point.cost
            point = better
            if settled:
                break
        return point

    def _shortened(self, point: Trial, root: Array) -> Trial | None:
        """Return the first of the step, its half, ... that lowers the merit."""
        step = point.step
        if not np.isfinite(step).all() or not step.any():
            return None
        # Not further than the factor is large: the slope holds nearby only.
        reach = max(float(abs(c)) for c in point.h)
        step = step * min(1.0, reach / float(np.abs(step).max()))
        for _ in range(_HALVINGS):
            trial = self.point(_moved(point.h, step), root)
            if trial.merit < point.merit:
                return trial
            step = step / 2
        return None

    def point(self, h: Polynomial, root: Array) -> Trial:
        """Return the least change for a fixed factor, and the Gauss-Newton step of the factor."""
        system = self._linear(h, root)
        if not (np.isfinite(system.whole).all() and np.isfinite(system.target).all()):
            # Powers of a factor this large are out of range; no search comes from here.
            nothing = np.zeros(root.shape[1])
            return Trial(h, math.inf, (math.inf, math.inf), nothing, np.zeros(len(h) - 1))
        rigid = ~system.whole.any(axis=1)
        whole, target = system.whole[~rigid], system.target[~rigid]
        left, values, right = np.linalg.svd(whole, full_matrices=True)
        kept = int(np.count_nonzero(values > _SINGULAR * values.max(initial=0.0)))
        inside, outside = left[:, :kept], left[:, kept:]
        costs = (inside.T @ target) / values[:kept]
        xi = -(right[:kept].T @ costs)
        slope = self._slope(h, root @ xi, system)
        hard = np.concatenate([system.target[rigid], outside.T @ target])
        hard_slope = np.vstack([slope[rigid], outside.T @ slope[~rigid]])
        unmet = [float(np.linalg.norm(part)) for part in np.split(hard, [int(rigid.sum())])]
        noise = _RIGID, _MET * float(np.linalg.norm(target))
        rates = (inside.T @ slope[~rigid]) / values[:kept, None]
        return Trial(
            h=h,
            cost=float(np.linalg.norm(costs)),
            unmet=(
                unmet[0] if unmet[0] > noise[0] else 0.0,
                unmet[1] if unmet[1] > noise[1] else 0.0,
            ),
            xi=xi,
            step=_constrained(rates, -costs, hard_slope, -hard),
        )

    def _linear(self, h: Polynomial, root: Array) -> _System:
        """Return the conditions for a fixed factor, each side in units of its own."""
        divisor = polynomials.to_flint(h)
        degree = len(h) - 1
        powers = _powers(h, max(len(p) for p in self.rests))
        first, second = (len(rest) for rest in self.rests)
        halves = [powers[:, first - 1 :: -1] @ root[:first]]
        halves.append(powers[:, second - 1 :: -1] @ root[first:])
        units = np.repeat([float(np.abs(half).max(initial=0.0)) or 1.0 for half in halves], degree)
        rho = [_floats(_padded(divmod(p, divisor)[1], degree)) for p in self.flint]
        return _System(
            powers=powers,
            units=units,
            whole=np.vstack(halves) / units[:, None],
            target=np.concatenate(rho) / units,
        )

    def _slope(self, h: Polynomial, delta: Array, system: _System) -> Array:
        """Return how the remainders of the changed pair move with the coefficients of h.

        The coefficient of x^j changes the remainder by -(x^j times the quotient) mod h.
        """
        degree = len(h) - 1
        count = len(self.rests[0])
        factor = _floats(h)
        slopes = []
        for rest, change in zip(self.floats, (delta[:count], delta[count:]), strict=True):
            size = rest.size - degree
            # Division from the top; doubles do, since only the direction of a step depends on it.
            u = scipy.linalg.solve_triangular(
                convolution(factor, size)[:size],
                (rest + change)[:size],
                lower=True,
                unit_diagonal=True,
                check_finite=False,
            )[::-1]
            slopes.append(
                -np.column_stack(
                    [system.powers[:, j : j + size] @ u for j in range(degree - 1, -1, -1)]
                )
            )
        return np.vstack(slopes) / system.units[:, None]

    def smallest_box(
        self, point: Trial, metric: Metric, root: Array
    ) -> tuple[Polynomial, Array, float]:
        """Return a factor and changes whose largest ratio to the weights is a local minimum.

        A sequence of linear programs, each with a bound on how far the factor may move.

        Returns
        -------
        factor, changes of the scaled rests (concatenated), ratio
        """
        weights = np.concatenate(self.weights(metric))
        changes = root
        if self.convolutions[0] is not None:
            changes = scipy.linalg.block_diag(*self.convolutions) @ root
        free = weights > 0
        ratios = changes[free] / weights[free, None]
        h, delta = point.h, root @ point.xi
        best = float(np.abs(ratios @ point.xi).max(initial=0.0))
        if best > 1.0:
            settled = self._program(h, delta, root, ratios, 0.0)
            if settled is not None and settled[2] < best:
                delta, best = root @ settled[0], settled[2]
        reach = 10.0
        for _ in range(_ROUNDS):
            if best <= 1.0:
                # Inside the box, which is all that is asked.
                break
            moved = self._program(h, delta, root, ratios, reach)
            trial = None if moved is None else _moved(h, moved[1])
            settled = None
            if trial is not None and self.point(trial, root).is_met:
                settled = self._program(trial, delta, root, ratios, 0.0)
            if trial is not None and settled is not None and settled[2] < best * (1 - 1e-6):
                h, delta, best = trial, root @ settled[0], settled[2]
            else:
                reach /= 8
        return h, delta, best

    def _program(
        self, h: Polynomial, delta: Array, root: Array, ratios: Array, reach: float
    ) -> tuple[Array, Array, float] | None:
        """Return xi, the change of the factor and the ratio that a linear program finds.

        `reach` bounds what the change of the factor does to the remainder, in units of the
        larger of the remainder and of what the weights can take up.
        """
        from scipy.optimize import linprog

        degree = len(h) - 1
        system = self._linear(h, root)
        slope = self._slope(h, delta, system)
        # A coefficient of the factor that moves nothing is left as it is.
        rates = np.maximum(np.abs(slope).max(axis=0), 1e-300)
        slope = slope / rates
        moves = degree if reach else 0
        reach *= max(1.0, float(np.abs(system.target).max()))
        size = root.shape[1]
        equal = np.hstack([system.whole, slope[:, :moves], np.zeros((2 * degree, 1))])
        # A row that no coefficient enters still says how the factor may move.
        heights = np.abs(equal).max(axis=1)
        scale = np.where(system.whole.any(axis=1) | (heights == 0), 1.0, heights)[:, None]
        one = np.hstack([ratios, np.zeros((len(ratios), moves)), -np.ones((len(ratios), 1))])
        other = np.hstack([-one[:, :-1], one[:, -1:]])
        if not all(np.isfinite(part).all() for part in (equal, one, system.target)):
            return None
        found = linprog(
            np.append(np.zeros(size + moves), 1.0),
            A_ub=np.vstack([one, other]),
            b_ub=np.zeros(2 * len(ratios)),
            A_eq=equal / scale,
            b_eq=-system.target / scale[:, 0],
            bounds=[(None, None)] * size + [(-reach, reach)] * moves + [(0, None)],
        )
        if found.x is None:
            return None
        return found.x[:size], found.x[size : size + moves] / rates[:moves], float(found.x[-1])

    # The witness

    def witness(
        self, h: Polynomial, delta: Array, metric: Metric
    ) -> tuple[Polynomial, Polynomial, Polynomial] | None:
        """Return the factor and an exact pair that it divides, with fixed coefficients as given.

        None when the fixed coefficients leave no room for an exact pair of rationals.
        """
        count = len(self.rests[0])
        for factor in _tidied(h):
            pair = []
            sides = (delta[:count], delta[count:])
            for k, (change, weights) in enumerate(zip(sides, (metric.f, metric.g), strict=True)):
                found = self._divisible(k, factor, change, weights)
                if found is None:
                    break
                pair.append(found)
            if len(pair) == 2:
                return _graded(factor, self.unit), pair[0], pair[1]
        return None

    def _divisible(
        self, side: int, h: Polynomial, change: Array, weights: Sequence[Fraction]
    ) -> Polynomial | None:
        """Return an exact multiple of common * h near one side plus a change.

        What doubles leave over is taken up exactly, in as many coefficients as there are
        conditions, chosen by pivoting where the weights are large for what is needed.
        """
        from flint import fmpq, fmpq_mat

        rest = _changed(self.rests[side], change)
        divisor = polynomials.to_flint(h)
        size, degree = len(rest), len(h) - 1
        graded = _graded(tuple(weights), -self.unit)
        sizes = _floats(_scaled(graded, -self.shifts[side]))[:size]
        free = list(range(size))
        held: list[tuple[list[Fraction], Fraction]] = []
        if len(self.common) == 1:
            free = [j for j in free if weights[j]]
        else:
            held = self._held(side, rest, weights)
            least = sizes[sizes > 0].min(initial=1.0)
            sizes = np.maximum(sizes, least)
        table = (
            np.vstack(
                [
                    _floats(c for row, _ in held for c in row).reshape(len(held), size),
                    _powers(h, size)[:, ::-1],
                ]
            )[:, free]
            * sizes[free]
        )
        if not np.isfinite(table).all():
            return None
        heights = np.abs(table).max(axis=1, initial=0.0)
        used = np.flatnonzero(heights)
        table = table[used] / heights[used, None]
        kept = [int(used[k]) for k in _independent(table)]
        chosen = [free[k] for k in _independent(table[_independent(table)].T)]
        if len(chosen) < len(kept):
            return None
        columns = {}
        for j in chosen:
            monomial = (Fraction(1), *[Fraction(0)] * (size - 1 - j))
            below = _padded(divmod(polynomials.to_flint(monomial), divisor)[1], degree)
            columns[j] = [row[j] for row, _ in held] + below
        remainder = _padded(divmod(polynomials.to_flint(rest), divisor)[1], degree)
        right = [missing for _, missing in held] + [-c for c in remainder]
        entries = [columns[j][i] for i in kept for j in chosen]
        matrix = fmpq_mat(len(kept), len(kept), [fmpq(c.numerator, c.denominator) for c in entries])
        vector = fmpq_mat(
            len(kept), 1, [fmpq(right[i].numerator, right[i].denominator) for i in kept]
        )
        if kept and not matrix.det():
            return None
        solution = matrix.solve(vector) if kept else vector
        moved = list(rest)
        for position, j in enumerate(chosen):
            entry = solution[position, 0]
            moved[j] += Fraction(int(entry.p), int(entry.q))
        return self._verified(side, tuple(moved), h, weights)

    def _held(
        self, side: int, rest: Polynomial, weights: Sequence[Fraction]
    ) -> list[tuple[list[Fraction], Fraction]]:
        """Return the conditions that fixed coefficients of common * rest put on the rest."""
        common = _graded(self.common, -self.unit)
        wanted = _scaled(_graded(self.originals[side], -self.unit), -self.shifts[side])
        held = []
        for k, weight in enumerate(weights):
            row = [
                common[k - j] if 0 <= k - j < len(common) else Fraction(0) for j in range(len(rest))
            ]
            if not weight and any(row):
                found = sum((a * b for a, b in zip(row, rest, strict=True)), Fraction(0))
                held.append((row, wanted[k] - found))
        return held

    def _verified(
        self, side: int, rest: Polynomial, h: Polynomial, weights: Sequence[Fraction]
    ) -> Polynomial | None:
        """Return common * rest in the user's variable; None when it is not what was asked for."""
        if not rest[0] or divmod(polynomials.to_flint(rest), polynomials.to_flint(h))[1]:
            return None
        rest = _graded(_scaled(rest, self.shifts[side]), self.unit)
        whole = polynomials.multiply(self.common, rest)
        for weight, before, after in zip(weights, self.originals[side], whole, strict=True):
            if not weight and before != after:
                return None
        return whole


# Lower bounds


def least_change(f: Polynomial, g: Polynomial, metric: Metric, degree: int, unit: int) -> float:
    """Return a lower bound of the size of a change that gives a common factor of this degree.

    By sigma_min(S_k(f, g)) <= ||S_k(df, dg)|| in the Frobenius norm, in the scaled variable. The
    singular value is lowered by the rounding floor of its computation.
    """
    (first, first_weights), (second, second_weights) = _levelled(f, g, metric, unit)
    table = sylvester(first, second, degree)
    least = _least_singular(table)
    # A change of size one has entries up to the weights, each in as many columns.
    largest = max(
        math.sqrt(second.size - degree) * float(first_weights.max()),
        math.sqrt(first.size - degree) * float(second_weights.max()),
    )
    return least / largest


def is_out_of_reach(f: Polynomial, g: Polynomial, metric: Metric, degree: int, unit: int) -> bool:
    """Return whether no pair within the box has a common factor of this degree.

    S_k(f, g) keeps full rank when its smallest singular value exceeds the norm of S_k of the
    radii, which bounds that of every S_k(df, dg). Measured in the scaled variable.
    """
    (first, first_radii), (second, second_radii) = _levelled(f, g, metric, unit)
    least = _least_singular(sylvester(first, second, degree))
    reach = float(np.linalg.norm(sylvester(first_radii, second_radii, degree), 2))
    return bool(least > reach * (1 + 1e-10))


def has_no_real_root(f: Polynomial, g: Polynomial, metric: Metric) -> bool:
    """Return whether no pair within the box has a common real root: a proof, sharp up to `_WORK`.

    A polynomial within the radii r of f has the root x exactly when |f(x)| <= sum r_k |x|^k = F(x),
    so on each half of the real line the question is whether F^2 - f^2 and G^2 - g^2 are both
    nonnegative somewhere. Between their roots, which are isolated exactly, signs are constant.

    References
    ----------
    Oettli and Prager (1964), Numerische Mathematik 6, for the condition.
    """
    for sign in (1, -1):
        rooms = []
        for p, radii in ((f, metric.f), (g, metric.g)):
            turned = polynomials.strip(
                tuple(c * sign ** (k % 2) for k, c in enumerate(reversed(p)))[::-1]
            )
            reach = polynomials.strip(tuple(radii))
            square = polynomials.multiply(turned, turned)
            rooms.append(
                polynomials.add(polynomials.multiply(reach, reach), tuple(-c for c in square))
            )
        if _may_meet(rooms[0], rooms[1]):
            return False
    return True


def _may_meet(P: Polynomial, Q: Polynomial) -> bool:
    """Return False only when P >= 0 and Q >= 0 hold together at no x >= 0."""
    if polynomials.degree(P) < 0 or polynomials.degree(Q) < 0:
        return True
    product = polynomials.multiply(P, Q)
    numerators = polynomials.to_flint(product).numer()
    bits = numerators.height_bits()
    if bits > _BITS or numerators.degree() * bits > _WORK:
        return True
    intervals = [
        (max(low, Fraction(0)), high)
        for low, high in polynomials.real_intervals(product)
        if high >= 0
    ]
    # One point in every gap between roots, before the first and after the last.
    ends = [Fraction(0), *(end for pair in intervals for end in pair)]
    ends.append(ends[-1] + 1)
    samples = [(low + high) / 2 for low, high in zip(ends[::2], ends[1::2], strict=True)]

    def holds(p: Polynomial, x: Fraction) -> bool:
        return polynomials.evaluate(p, x) >= 0

    if any(holds(P, x) and holds(Q, x) for x in samples):
        return True
    roots = [polynomials.square_free(p) if len(p) > 1 else None for p in (P, Q)]
    for low, high in intervals:
        # At the root itself one of the two is zero; the other must be negative there.
        touched = [
            simple is not None
            and polynomials.evaluate(simple, low) * polynomials.evaluate(simple, high) <= 0
            for simple in roots
        ]
        if all(
            touch or holds(p, low) or holds(p, high)
            for touch, p in zip(touched, (P, Q), strict=True)
        ):
            return True
    return False


def _levelled(f: Polynomial, g: Polynomial, metric: Metric, unit: int) -> list[tuple[Array, Array]]:
    """Return coefficients and weights of both in the scaled variable, of size about one."""
    sides = []
    for p, weights in ((f, metric.f), (g, metric.g)):
        graded = _graded(p, -unit)
        shift = -_size_exponent(graded)
        sides.append(
            (
                _floats(_scaled(graded, shift)),
                _floats(_scaled(_graded(tuple(weights), -unit), shift)),
            )
        )
    return sides


def _least_singular(table: Array) -> float:
    """Return a lower bound of the smallest singular value."""
    least = float(np.linalg.svd(table, compute_uv=False)[-1])
    least -= float(rule.rounding_floor(len(table), float(np.linalg.norm(table))))
    return max(least, 0.0)


def size_of_change(
    original: Sequence[Polynomial], changed: Sequence[Polynomial], metric: Metric
) -> float:
    """Return the 2-norm of the changes of two polynomials, each over its weight."""
    ratios = [
        (after - before) / weight
        for p, q, weights in zip(original, changed, (metric.f, metric.g), strict=True)
        for before, after, weight in zip(p, q, weights, strict=True)
        if after != before
    ]
    largest = max(map(abs, ratios), default=Fraction(0))
    if not largest:
        return 0.0
    return near_float(largest) * float(np.linalg.norm([float(r / largest) for r in ratios]))


def level_weights(polynomial: Polynomial) -> list[Fraction]:
    """Return the size that a coefficient has to count as large, for each coefficient.

    On a logarithmic scale, the upper convex hull of the sizes (the Newton polygon, whose slopes
    are the sizes of the roots): the size itself for most coefficients, what its neighbours call
    for where one is zero or small by accident. The last slope goes on where the last coefficients
    are zero. Times the root of the number of coefficients, so that a change of all by one part in
    a thousand of these sizes has the size 1e-3. Neither the unit of time nor roots of very
    different sizes bend this measure.
    """
    points = [(k, _log2(c)) for k, c in enumerate(polynomial) if c]
    if not points:
        return [Fraction(1)] * len(polynomial)
    hull: list[tuple[int, float]] = []
    for k, height in points:
        while len(hull) > 1 and _is_below(hull[-2], hull[-1], (k, height)):
            hull.pop()
        hull.append((k, height))
    ends = hull if len(hull) > 1 else [hull[0], (hull[0][0] + 1, hull[0][1])]
    heights = np.interp(np.arange(len(polynomial)), [k for k, _ in ends], [h for _, h in ends])
    (before, low), (last, high) = ends[-2:]
    for k in range(last + 1, len(polynomial)):
        heights[k] = high + (k - last) * (high - low) / (last - before)
    root = Fraction(math.sqrt(len(polynomial)))
    sizes = dict(points)
    return [
        root * (abs(c) if c and sizes[k] >= height else _power_of_two(float(height)))
        for k, (c, height) in enumerate(zip(polynomial, heights, strict=True))
    ]


def _is_below(left: tuple[int, float], middle: tuple[int, float], right: tuple[int, float]) -> bool:
    """Return whether the middle point lies on or below the line between its neighbours."""
    run, rise = right[0] - left[0], right[1] - left[1]
    return (middle[1] - left[1]) * run <= rise * (middle[0] - left[0])


def _power_of_two(exponent: float) -> Fraction:
    whole = math.floor(exponent)
    return Fraction(2) ** whole * Fraction(2.0 ** (exponent - whole))


# Small helpers


def _unit(polynomial: Polynomial) -> int:
    """Return the power of two for the variable that levels the coefficients."""
    kept = [k for k, c in enumerate(polynomial) if c]
    span = kept[-1] - kept[0]
    if not span:
        return 0
    first, last = (_log2(polynomial[k]) for k in (kept[0], kept[-1]))
    return round((last - first) / span)


def _log2(number: Fraction) -> float:
    if not number:
        return -math.inf
    return math.log2(abs(number.numerator)) - math.log2(number.denominator)


def _graded(polynomial: Polynomial, unit: int) -> Polynomial:
    """Return the coefficients k times 2^(unit k): the variable in another unit."""
    if not unit:
        return polynomial
    return tuple(c * Fraction(2) ** (unit * k) for k, c in enumerate(polynomial))


def _scaled(polynomial: Polynomial, shift: int) -> Polynomial:
    return tuple(c * Fraction(2) ** shift for c in polynomial)


def _size_exponent(polynomial: Polynomial) -> int:
    return round(max(_log2(c) for c in polynomial if c))


def _changed(polynomial: Polynomial, change: Array) -> Polynomial:
    """Return the polynomial with doubles added to its coefficients, exactly."""
    return tuple(c + Fraction(float(d)) for c, d in zip(polynomial, change, strict=True))


def near_float(number: Fraction) -> float:
    """Return the nearest double; an infinity where there is none."""
    return float(number) if _log2(number) < 1023 else math.inf if number > 0 else -math.inf


def _floats(polynomial: Iterable[Fraction]) -> Array:
    return np.array([near_float(c) for c in polynomial])


def _padded(remainder: Any, degree: int) -> list[Fraction]:
    """Return the coefficients of a remainder modulo a polynomial of this degree, all of them."""
    coefficients = polynomials.from_flint(remainder)
    return [Fraction(0)] * (degree - len(coefficients)) + list(coefficients)


def _powers(h: Polynomial, count: int) -> Array:
    """Return the powers 0, 1, ... of x modulo a monic polynomial, one column for each."""
    tail = _floats(h[1:])
    powers = np.zeros((tail.size, count))
    power = np.zeros(tail.size)
    power[-1] = 1.0
    for k in range(count):
        powers[:, k] = power
        power = np.append(power[1:], 0.0) - power[0] * tail
    return powers


def _moved(h: Polynomial, step: Array) -> Polynomial:
    """Return a monic factor with its other coefficients changed, on the grid."""
    return (
        h[0],
        *(
            Fraction(round((c + Fraction(float(d))) * _GRID), _GRID)
            for c, d in zip(h[1:], step, strict=True)
        ),
    )


def _tidied(h: Polynomial) -> Iterator[Polynomial]:
    """Yield the factor, and before it the one without coefficients that are rounding noise."""
    largest = max(abs(c) for c in h)
    tidy = tuple(c if abs(c) > largest / 2**60 else Fraction(0) for c in h)
    if tidy != h:
        yield tidy
    yield h


def _square_root(covariance: Array, deviations: Array) -> Array:
    """Return a root of a covariance, given in units where its deviations are these."""
    own = np.sqrt(np.diagonal(covariance))
    free = own > 0
    correlations = covariance[np.ix_(free, free)] / np.outer(own[free], own[free])
    values, vectors = np.linalg.eigh(correlations)
    kept = values > _SINGULAR * max(float(values.max(initial=0.0)), 1e-300)
    root = np.zeros((own.size, int(kept.sum())))
    root[free] = deviations[free, None] * vectors[:, kept] * np.sqrt(values[kept])
    return root


def _constrained(A: Array, b: Array, E: Array, d: Array) -> Array:
    """Return x that minimises ||A x - b|| among those with E x = d (least squares in both)."""
    if not all(np.isfinite(part).all() for part in (A, b, E, d)):
        return np.zeros(A.shape[1])
    if not len(E):
        return np.asarray(np.linalg.lstsq(A, b, rcond=None)[0])
    size = float(np.abs(E).max(initial=0.0))
    if not size:
        return np.asarray(np.linalg.lstsq(A, b, rcond=None)[0])
    left, values, right = np.linalg.svd(E)
    kept = int(np.count_nonzero(values > _SINGULAR * values[0]))
    particular = right[:kept].T @ ((left[:, :kept].T @ d) / values[:kept])
    null = right[kept:].T
    if not null.shape[1]:
        return np.asarray(particular)
    free = np.linalg.lstsq(A @ null, b - A @ particular, rcond=None)[0]
    return np.asarray(particular + null @ free)


def _independent(table: Array) -> list[int]:
    """Return rows that span the row space, by pivoting."""
    if not table.size:
        return []
    _, triangle, order = scipy.linalg.qr(table.T, mode="economic", pivoting=True)
    diagonal = np.abs(np.diagonal(triangle))
    rank = int(np.count_nonzero(diagonal > _SINGULAR * max(diagonal.max(initial=0.0), 1e-300)))
    return [int(k) for k in order[:rank]]
