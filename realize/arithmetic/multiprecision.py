"""The multiprecision path: the floating staircase with any number of digits, on mpmath.

Inside, matrices are object arrays of the numbers of one mpmath context, which belongs to the path:
no global precision is read or changed. A double enters as the number it is, a rational or an
irrational constant rounded to the digits of the path.

What leaves is a model of kind "rational": its entries are the very numbers computed, each a binary
fraction, as Fractions. So a result pickles, compares, is saved and evaluated like any model, and
nothing of mpmath crosses the boundary. Like a model in doubles it is near the model asked about, to
so many digits, and not that model: rank decisions on it are decisions about rounded numbers, and
the exact path would take the rounding for meaning.

References
----------
Those of `realize.arithmetic.floating`. Kailath (1980), Linear Systems, sections 2.3 and 2.4.
"""

from __future__ import annotations

import cmath
import math
from collections.abc import Iterable, Sequence
from fractions import Fraction
from typing import Any, Final

import numpy as np
from mpmath import MPContext
from mpmath.libmp import from_rational

from realize import tolerance as rule
from realize.arithmetic import reflections
from realize.arithmetic.path import Completion, Frame, Sequenced, SharedFactor, frozen
from realize.arithmetic.scaling import Scaling, scaling_of, unscaled
from realize.entries import constant_near, fraction_array, is_constant, make_fraction
from realize.errors import EntryError, LimitError, PrecisionError, UnsupportedEntryError
from realize.model.realization import Kind, Realization
from realize.model.transfer import TransferMatrix
from realize.results import Evidence, Mode, Part, RankDecision
from realize.stability import Stability, computed_stability, damping, time_constant

__all__ = [
    "MAX_DIGITS",
    "MIN_DIGITS",
    "MultiprecisionPath",
    "MultiprecisionReach",
    "Numbers",
    "OpenedMultiprecision",
]

Array = np.ndarray[Any, Any]

MIN_DIGITS: Final = 8
"""Fewest digits; with fewer the default tolerance would exceed most models."""

MAX_DIGITS: Final = 10_000
"""Most digits. Numbers in results grow with them, and so does the time."""

_GUARD: Final = 10
"""Digits of an irrational constant beyond those of the path, so that it is rounded once."""

_EDGE: Final = 900
"""Binary exponent, up or down, up to which an entry takes part in the scaling as it is."""

_PASSES: Final = 8
"""Scalings at most, each of which brings an entry beyond that nearer by as much."""

_CLUSTER: Final = 4
"""Eigenvalues that lie this many times their doubt apart may be one multiple eigenvalue."""

_NEAR: Final = 1e-8
"""Largest such doubt, over the norm of the model. The m-th root of the rounding grows with m, and
many eigenvalues that lie within it are many eigenvalues: 50 digits find up to six in one place."""


class Numbers:
    """Numbers with so many digits: a context, and the way in and out of it."""

    __slots__ = ("context", "digits", "roundoff")

    def __init__(self, digits: int) -> None:
        if isinstance(digits, bool) or not isinstance(digits, int | np.integer):
            raise UnsupportedEntryError(
                f"digits is {digits!r}; wanted an integer",
                where="digits",
                found=type(digits).__name__,
            )
        if not MIN_DIGITS <= digits <= MAX_DIGITS:
            raise LimitError(
                f"digits is {digits}; wanted from {MIN_DIGITS} to {MAX_DIGITS}",
                what="digits",
                where="digits",
                found=int(digits),
                limit=MIN_DIGITS if digits < MIN_DIGITS else MAX_DIGITS,
            )
        self.digits = int(digits)
        self.context = MPContext()
        self.context.dps = self.digits
        self.roundoff = Fraction(1, 2 ** (self.context.prec - 1))

    def number(self, value: Any) -> Any:
        """Return the number of the context nearest to a float or a rational."""
        if isinstance(value, float):
            return self.context.mpf(value)
        numerator, denominator = int(value.numerator), int(value.denominator)
        return self.context.make_mpf(from_rational(numerator, denominator, self.context.prec, "n"))

    def fraction(self, number: Any) -> Fraction:
        """Return a number of the context as the binary fraction it is."""
        sign, digits, exponent, _ = self.context.convert(number)._mpf_
        digits = -int(digits) if sign else int(digits)
        if not digits and exponent:
            raise PrecisionError("a number that is not finite came out; give more digits")
        if exponent >= 0:
            return make_fraction(digits << exponent, 1)
        return make_fraction(digits, 1 << -exponent)

    def rounded(self, entry: Any, where: str) -> Fraction:
        """Return an entry of any kind, or a Fraction, rounded to the digits."""
        if is_constant(entry):
            entry = constant_near(entry, self.digits + _GUARD, where)
        return self.fraction(self.number(entry))

    def table(self, M: Array) -> Array:
        """Return an array of rationals as numbers of the context."""
        numbers = (self.number(value) for value in M.flat)
        return np.fromiter(numbers, object, M.size).reshape(M.shape)

    def fractions(self, M: Array) -> Array:
        """Return an array of numbers of the context as Fractions."""
        return fraction_array(map(self.fraction, M.flat), M.shape)

    def shifted(self, M: Array, exponents: Any) -> Array:
        """Return entries times powers of two, exactly."""
        powers = np.broadcast_to(exponents, M.shape)
        shift = self.context.ldexp
        shifted = (shift(x, int(e)) for x, e in zip(M.flat, powers.flat, strict=True))
        return np.fromiter(shifted, object, M.size).reshape(M.shape)

    def norm(self, *matrices: Array) -> Any:
        """Return the Frobenius norm of several matrices together."""
        entries = [x for M in matrices for x in M.flat]
        return self.context.sqrt(self.context.fdot(entries, entries))


class MultiprecisionReach:
    """The reachable subspace by Householder reflections: a staircase form.

    ``A = Q^T (given A) Q`` is block Hessenberg, B is zero below its first stair, and the first
    ``dimension`` columns of Q span the subspace.
    """

    __slots__ = ("A_all", "B_all", "C_all", "Q", "_opened", "_where", "dimension", "stages",
                 "stairs")  # fmt: skip

    def __init__(
        self,
        opened: OpenedMultiprecision,
        A: Array,
        B: Array,
        C: Array,
        where: str,
        ranks: Sequence[int] | None = None,
    ) -> None:
        self._opened, self._where = opened, where
        order = A.shape[0]
        zero = opened.numbers.context.zero
        A, B, C, Q = A.copy(), B.copy(), C.copy(), opened.identity(order)
        stages: list[tuple[tuple[int, int], list[Any], int]] = []
        block, top, left = B, 0, 0
        while top < order and block.shape[1]:
            forced = None if ranks is None else (*ranks, 0)[len(stages)]
            # Left of the block the rows below are zero already.
            rows = A[top:, left:]
            values, rank = self._compress((rows, A, Q, C), block, top, forced)
            stages.append(((block.shape[0], block.shape[1]), values, rank))
            block[rank:] = zero
            if rank == 0:
                break
            left, top = top, top + rank
            block = A[top:, left:top]
        self.A_all, self.B_all, self.C_all, self.Q = A, B, C, Q
        self.stages = stages
        self.stairs = tuple(rank for _, _, rank in stages if rank)
        self.dimension = sum(self.stairs)
        self.A_all[self.dimension :, : self.dimension] = zero

    def _compress(
        self, targets: tuple[Array, ...], block: Array, top: int, forced: int | None
    ) -> tuple[list[Any], int]:
        """Rotate the states from `top` on so that the block's row space comes first.

        The first target has these states for rows, the others have all states for columns. The
        block is a view of B or of A below the stairs found so far, so what is written to it is
        written there. Returns the singular values and the rank taken.
        """
        context = self._opened.numbers.context
        rows, *others = targets
        R = reflections.triangularised(context, block, rows, *(M[:, top:].T for M in others))
        count = min(block.shape)
        G, rotated, values = reflections.orthogonal_rows(context, R[:count])
        if forced is None:
            rank = sum(value > self._opened.cutoff for value in values)
        else:
            rank = min(forced, count)
        bottom = top + count
        if count > 1:
            rows[:count] = G @ rows[:count]
            for M in others:
                M[:, top:bottom] = M[:, top:bottom] @ G.T
        block[:rank] = rotated[:rank]
        return values, rank

    @property
    def A(self) -> Array:
        return self.A_all[: self.dimension, : self.dimension]

    @property
    def B(self) -> Array:
        return self.B_all[: self.dimension]

    @property
    def C(self) -> Array:
        return self.C_all[:, : self.dimension]

    @property
    def basis(self) -> Array:
        return self.Q[:, : self.dimension]

    @property
    def coordinates(self) -> Array:
        return self.basis.T

    def frame(self) -> Frame:
        return Frame(basis=self.Q, inverse=self.Q.T, A=self.A_all, B=self.B_all, C=self.C_all)

    def quotient(self) -> Array:
        return self.A_all[self.dimension :, self.dimension :]

    def decisions(self) -> tuple[RankDecision, ...]:
        """Return the rank decisions taken, in order.

        Their numbers are rounded to doubles; those below the range of doubles become zero.
        """
        opened = self._opened
        return tuple(
            RankDecision(
                where=f"{self._where}, stage {stage}",
                shape=shape,
                rank=rank,
                scale=float(opened.scaling.scale),
                cutoff=float(opened.cutoff),
                smallest_kept=float(values[rank - 1]) if rank else None,
                largest_dropped=float(values[rank]) if rank < len(values) else None,
            )
            for stage, (shape, values, rank) in enumerate(self.stages, start=1)
        )


class OpenedMultiprecision:
    """A model opened on the multiprecision path: scaled, with the cutoff fixed."""

    __slots__ = ("A", "B", "C", "cutoff", "model", "numbers", "scaling")

    def __init__(self, model: Realization, numbers: Numbers, tolerance: Any) -> None:
        """Open a model whose entries are numbers of the path already."""
        self.model, self.numbers = model, numbers
        self.scaling = _scaling(numbers, *(numbers.table(M) for M in model.matrices()[:3]))
        self.A, self.B, self.C = self.scaling.A, self.scaling.B, self.scaling.C
        self.cutoff = numbers.number(tolerance) * self.scaling.scale

    def reached(
        self, A: Array, B: Array, C: Array, where: str, ranks: Sequence[int] | None = None
    ) -> MultiprecisionReach:
        """Return the reachable subspace; `ranks` forces the stairs instead of deciding them."""
        return MultiprecisionReach(self, A, B, C, where, ranks)

    flag = reached

    def complete(self, matrix: Array) -> Completion:
        context, width = self.numbers.context, matrix.shape[1]
        inverse = self.identity(matrix.shape[0])
        factor = reflections.triangularised(context, matrix, inverse)[:width]
        smallest = min((abs(factor[k, k]) for k in range(width)), default=None)
        if smallest is not None and smallest <= self.cutoff:
            raise PrecisionError(
                "the rank decisions of the multiprecision path contradict each other: a subspace "
                f"that should have dimension {width} shows a pivot of {float(smallest):.3g} at "
                f"cutoff {float(self.cutoff):.3g}. Give more digits, or another tolerance"
            )
        return Completion(
            basis=inverse.T,
            inverse=inverse,
            factor=factor,
            factor_inverse=reflections.solve_triangle(context, factor, self.identity(width)),
        )

    def block(self, rows: Sequence[Sequence[Array]]) -> Array:
        return np.block([list(row) for row in rows])

    def identity(self, size: int) -> Array:
        return reflections.identity(self.numbers.context, size)

    def zeros(self, rows: int, columns: int) -> Array:
        return reflections.zeros(self.numbers.context, rows, columns)

    def close(self, A: Array, B: Array, C: Array) -> Realization:
        numbers, scaling, model = self.numbers, self.scaling, self.model
        return Realization._trusted(
            numbers.fractions(numbers.shifted(A, scaling.time)),
            numbers.fractions(numbers.shifted(B, -scaling.inputs)),
            numbers.fractions(numbers.shifted(C, scaling.outputs[:, None])),
            model.D,
            kind=Kind.RATIONAL,
            sampling_period=model.sampling_period,
            input_names=model._input_names,
            output_names=model._output_names,
        )

    def transformation(self, basis: Array) -> Array:
        numbers = self.numbers
        return frozen(numbers.fractions(numbers.shifted(basis, self.scaling.states[:, None])))

    def state_map(self, matrix: Array) -> Array:
        numbers = self.numbers
        return frozen(numbers.fractions(numbers.shifted(matrix, -self.scaling.states)))

    def evidence(self, reach: MultiprecisionReach, sight: MultiprecisionReach) -> Evidence:
        return Evidence(
            model=self.model, state_map=self.state_map(sight.basis.T @ reach.coordinates)
        )

    def condition(self, state_map: Array) -> float | None:
        if not state_map.size:
            return 1.0
        context = self.numbers.context
        table = context.matrix(self.numbers.table(state_map).tolist())
        values = context.svd_r(table, compute_uv=False)
        smallest = values[len(values) - 1]
        return float(values[0] / smallest) if smallest else math.inf

    def eigenvalues(self, A: Array) -> list[tuple[Any, int, Any]]:
        """Return eigenvalues, their multiplicity and how far off they may be, in scaled time.

        An eigenvalue of multiplicity m is computed as m of them about it, as far away as the m-th
        root of the rounding. So m that lie that close together, where that is close at all, are
        taken for one, at their mean, in which most of that error cancels. What is alone is doubted
        like a double one.
        """
        context, scale = self.numbers.context, self.scaling.scale
        values = reflections.eigenvalues(context, A)
        roundoff = self.numbers.number(self.numbers.roundoff)
        floor = rule.rounding_floor(self.model.order, context.one, roundoff)
        radii = [scale * context.root(floor, m) for m in range(1, max(len(values), 2) + 1)]
        # The upper half plane first; what is found there is mirrored.
        waiting = sorted(values, key=lambda value: -value.imag)
        found: list[tuple[Any, int, Any]] = []
        while waiting:
            value = waiting[0]
            near = sorted(waiting, key=lambda other: abs(other - value))
            size = 1
            for m in range(2, len(near) + 1):
                if radii[m - 1] > _NEAR * scale:
                    break
                if abs(near[m - 1] - value) <= _CLUSTER * radii[m - 1]:
                    size = m
            cluster = near[:size]
            for each in cluster:
                waiting.remove(each)
            mirrored = [context.conj(each) for each in cluster if each.imag]
            above_axis = all(each.imag > 0 for each in cluster)
            for each in mirrored:
                if each in waiting:
                    waiting.remove(each)
                    if not above_axis:
                        cluster.append(each)
            size = len(cluster)
            mean, doubt = context.fsum(cluster) / size, radii[max(size, 2) - 1]
            if above_axis:
                found += [(mean, size, doubt), (context.conj(mean), size, doubt)]
            else:
                found.append((context.mpc(mean.real), size, doubt))
        return found

    def judged(self, A: Array, period: Any) -> list[tuple[complex, int, Stability]]:
        """Return the eigenvalues of a block as doubles, multiplicities, and what a mode there does.

        Raises
        ------
        EntryError
            When an eigenvalue is too large for a double.
        """
        found = []
        for value, size, stability in self._judged(A, period):
            rounded = complex(value)
            if not cmath.isfinite(rounded):
                raise EntryError(
                    f"a mode of about 2^{self.numbers.context.mag(value)} is too large for a "
                    "double; scale the time of the model",
                    where="mode",
                )
            found.append((rounded, size, stability))
        return sorted(found, key=lambda each: (each[0].real, each[0].imag))

    def _judged(self, A: Array, period: Any) -> list[tuple[Any, int, Stability]]:
        """Return the same with all digits, by which the stability is decided."""
        unit = self.numbers.context.ldexp(1, self.scaling.time)
        return [
            (value * unit, size, computed_stability(value * unit, period, doubt * unit))
            for value, size, doubt in self.eigenvalues(A)
        ]

    def characteristic_polynomial(self, A: Array) -> tuple[Fraction, ...]:
        numbers = self.numbers
        coefficients = reflections.characteristic_polynomial(numbers.context, A)
        powers = self.scaling.time * np.arange(len(coefficients))
        return tuple(numbers.fractions(numbers.shifted(_vector(coefficients), powers)).tolist())

    def decays(self, block: Array) -> bool:
        judged = self._judged(block, self.model.sampling_period)
        return all(stability is Stability.STABLE for _, _, stability in judged)

    def modes(self, blocks: Iterable[tuple[Part, Array]]) -> tuple[Mode, ...]:
        """Return computed eigenvalues, about which nothing is proved."""
        period = self.model.sampling_period
        return tuple(
            Mode(
                value=value,
                radius=math.inf,
                part=part,
                multiplicity=size,
                stability=stability,
                time_constant=time_constant(value, period),
                damping=damping(value, period),
            )
            for part, block in blocks
            for value, size, stability in self.judged(block, period)
        )

    def numerators(self) -> tuple[tuple[Any, ...], tuple[tuple[tuple[Any, ...], ...], ...]]:
        """Return det(s - A) and the numerators over it, from the Markov parameters.

        The coefficient of s^(n-k) is sum_j a_(k-j) H_j, because numerator = denominator times
        the series H_0 + H_1 / s + ... Leading coefficients that are not above the rounding of
        what they are computed from are zero.
        """
        numbers, scaling, model = self.numbers, self.scaling, self.model
        context, order = numbers.context, model.order
        below = reflections.characteristic_polynomial(context, self.A)
        series, sizes = self._series(order)
        steps = [scaling.time * k for k in range(order + 1)]
        D = numbers.table(model.D)
        noise = rule.rounding_floor(order**2, context.one, numbers.number(numbers.roundoff))
        rows = []
        for i in range(model.output_count):
            row = []
            for j in range(model.input_count):
                unit = int(scaling.outputs[i] - scaling.inputs[j] - scaling.time)
                above: list[Any] = []
                for k in range(order + 1):
                    value = context.fdot(below[k::-1], [H[i, j] for H in series[: k + 1]])
                    size = context.fdot(map(abs, below[k::-1]), [H[i, j] for H in sizes[: k + 1]])
                    if not any(above) and abs(value) <= noise * size:
                        value = context.zero
                    above.append(context.ldexp(value, steps[k] + unit))
                if D[i, j]:
                    above = [
                        a + D[i, j] * context.ldexp(b, step)
                        for a, b, step in zip(above, below, steps, strict=True)
                    ]
                row.append(self._stripped(above))
            rows.append(tuple(row))
        denominator = [context.ldexp(b, s) for b, s in zip(below, steps, strict=True)]
        return tuple(map(numbers.fraction, denominator)), tuple(rows)

    def _series(self, count: int) -> tuple[list[Array], list[Array]]:
        """Return 0, C B, C A B, ... in scaled units, and the same of the absolute values."""
        series = [self.zeros(self.C.shape[0], self.B.shape[1])]
        sizes = [series[0]]
        power, size = self.B, abs(self.B)
        for _ in range(count):
            series.append(self.C @ power)
            sizes.append(abs(self.C) @ size)
            power, size = self.A @ power, abs(self.A) @ size
        return series, sizes

    def _stripped(self, coefficients: list[Any]) -> tuple[Fraction, ...]:
        """Drop leading coefficients that are zero."""
        first = next((k for k, value in enumerate(coefficients) if value), len(coefficients) - 1)
        return tuple(map(self.numbers.fraction, coefficients[first:]))

    def markov_parameters(self, count: int) -> Array:
        numbers, model = self.numbers, self.model
        A, B, C = (numbers.table(M) for M in model.matrices()[:3])
        result = np.empty((count, model.output_count, model.input_count), dtype=object)
        if count:
            result[0] = model.D
        power = B
        for k in range(1, count):
            result[k] = numbers.fractions(C @ power)
            power = A @ power
        return result


def _scaling(numbers: Numbers, A: Array, B: Array, C: Array) -> Scaling:
    """Return the scaling that the floating path would take, applied to all digits."""
    sizes = (A.shape[0], B.shape[1], C.shape[0])
    states, inputs, outputs = (np.zeros(size, dtype=int) for size in sizes)
    time = 0
    # A loop whose gain is beyond the range stays there in every unit, so the passes are counted.
    for _ in range(_PASSES):
        (a, b, c), beyond = _in_doubles(numbers.context, A, B, C)
        found = scaling_of(a, b, c) if sizes[0] else unscaled(a, b, c)
        A = numbers.shifted(A, found.states - found.states[:, None] - found.time)
        B = numbers.shifted(B, found.inputs - found.states[:, None])
        C = numbers.shifted(C, found.states - found.outputs[:, None])
        states, inputs, outputs = (
            states + found.states,
            inputs + found.inputs,
            outputs + found.outputs,
        )
        time += found.time
        if not beyond:
            break
    return Scaling(states, inputs, outputs, time, A, B, C, numbers.norm(A, B, C))


def _in_doubles(context: Any, *matrices: Array) -> tuple[list[Array], bool]:
    """Return matrices in doubles, and whether an entry lies far beyond their range.

    Such an entry is brought to the edge of the range, from where a scaling brings it nearer.
    """
    found, beyond = [], False
    for M in matrices:
        doubles = np.zeros(M.shape)
        for index, value in np.ndenumerate(M):
            if value:
                exponent = context.mag(value)
                kept = min(max(exponent, -_EDGE), _EDGE)
                beyond = beyond or kept != exponent
                doubles[index] = float(context.ldexp(value, kept - exponent))
        found.append(doubles)
    return found, beyond


def _vector(values: Sequence[Any]) -> Array:
    return np.fromiter(values, object, len(values))


class MultiprecisionPath:
    """Any number of digits; models of every kind are rounded to them.

    Parameters
    ----------
    digits : int
        Decimal digits carried.
    tolerance : float or None
        The cutoff is this times the Frobenius norm of the scaled model; None for the default,
        `realize.tolerance.digits_tolerance`.
    """

    is_exact = False
    kind = Kind.RATIONAL

    def __init__(self, digits: int = 50, tolerance: float | None = None) -> None:
        self.numbers = Numbers(digits)
        self.tolerance = rule.check_tolerance(tolerance)

    def allowed(self, order: int) -> Any:
        """Return the tolerance for a model of some order."""
        if self.tolerance is None:
            return rule.digits_tolerance(order, self.numbers.digits)
        return self.tolerance

    def open(self, model: Realization) -> OpenedMultiprecision:
        return self._open(self.admit(model))

    def _open(self, model: Realization) -> OpenedMultiprecision:
        return OpenedMultiprecision(model, self.numbers, self.allowed(model.order))

    def admit(self, source: Any) -> Any:
        """Return the source with its entries rounded to the digits, as a rational model."""
        rounded = self.numbers.rounded
        if isinstance(source, TransferMatrix):
            above, below = (
                tuple(
                    tuple(tuple(rounded(c, "coefficient") for c in entry) for entry in row)
                    for row in table
                )
                for table in source._given or (source.numerators, source.denominators)
            )
            return source._like(above, below, Kind.RATIONAL, source.sampling_period)
        A, B, C, D = (
            fraction_array((rounded(entry, letter) for entry in M.flat), M.shape)
            for letter, M in zip("ABCD", source._as_given(), strict=True)
        )
        return source._like((A, B, C, D), Kind.RATIONAL, source.sampling_period)

    def array(self, values: Sequence[Sequence[Any]], shape: tuple[int, int]) -> Array:
        entries = (self.numbers.rounded(value, "entry") for row in values for value in row)
        return fraction_array(entries, shape)

    def common_denominator(
        self, denominators: Sequence[tuple[Any, ...]]
    ) -> tuple[tuple[Any, ...], tuple[tuple[Any, ...], ...]]:
        """Return the product of the distinct denominators.

        Rounded numbers have no common factors that could be relied on.
        """
        monic = [
            tuple(self.numbers.rounded(c / d[0], "denominator") for c in d) for d in denominators
        ]
        distinct = list(dict.fromkeys(monic))
        cofactors = {
            own: self._product(other for other in distinct if other != own) for own in distinct
        }
        return self._product(distinct), tuple(cofactors[own] for own in monic)

    def _product(self, factors: Iterable[tuple[Any, ...]]) -> tuple[Any, ...]:
        product: tuple[Any, ...] = (Fraction(1),)
        for factor in factors:
            product = self.multiply(product, factor)
        return product

    def multiply(self, first: tuple[Any, ...], second: tuple[Any, ...]) -> tuple[Any, ...]:
        numbers = self.numbers
        f, g = ([numbers.number(c) for c in p] for p in (first, second))
        return tuple(
            numbers.fraction(
                numbers.context.fdot(
                    (f[i], g[k - i]) for i in range(max(0, k - len(g) + 1), min(k + 1, len(f)))
                )
            )
            for k in range(len(f) + len(g) - 1)
        )

    def difference(self, first: Any, second: Any) -> Any:
        return rule.difference(first, second, self.numbers.roundoff)

    def shared_factor(
        self, numerator: tuple[Any, ...], denominator: tuple[Any, ...], where: str
    ) -> SharedFactor:
        """Return the common factor that the companion form hides.

        A common factor is an unobservable mode of the companion form of the fraction, so it is the
        characteristic polynomial of what the output does not see. A factor that leaves remainders
        above the tolerance is not common; then one degree less is tried.
        """
        if not any(numerator):
            return SharedFactor(
                common=self.multiply(denominator, (1 / denominator[0],)),
                numerator=(Fraction(0),),
                denominator=(denominator[0],),
                decisions=(),
            )
        # The roles of the two do not matter for what they share; an improper fraction is turned.
        turned = len(numerator) > len(denominator)
        pair = (denominator, numerator) if turned else (numerator, denominator)
        opened = self._companion(*pair)
        dual = opened.A.T, opened.C.T, opened.B.T
        seen = opened.reached(*dual, where)
        decisions = seen.decisions()
        time = opened.scaling.time
        allowed = self.numbers.number(self.allowed(opened.model.order))
        least = min(len(numerator), len(denominator)) - 1
        for degree in range(min(opened.model.order - seen.dimension, least), 0, -1):
            kept = opened.model.order - degree
            if seen.dimension != kept:
                seen = opened.reached(*dual, where, (1,) * kept)
            common = opened.characteristic_polynomial(seen.quotient())
            above = self._divided(numerator, common, allowed, time)
            below = self._divided(denominator, common, allowed, time)
            if above is not None and below is not None:
                return SharedFactor(
                    common=common, numerator=above, denominator=below, decisions=decisions
                )
        return SharedFactor(
            common=(Fraction(1),),
            numerator=numerator,
            denominator=denominator,
            decisions=decisions,
        )

    def _divided(
        self, polynomial: tuple[Any, ...], factor: tuple[Any, ...], allowed: Any, time: int
    ) -> tuple[Fraction, ...] | None:
        """Return the quotient by a monic factor; None when the remainder is not small.

        It is measured, in the scaled unit of time, against the terms of which it is the rest.
        """
        numbers = self.numbers
        rest = _vector([numbers.number(c) for c in polynomial])
        divisor = _vector([numbers.number(c) for c in factor])
        size = abs(rest)
        count = len(polynomial) - len(factor) + 1
        for k in range(count):
            step = rest[k] * divisor
            size[k + 1 : k + len(divisor)] += abs(step[1:])
            rest[k + 1 : k + len(divisor)] -= step[1:]
        powers = -time * np.arange(len(polynomial))
        left = numbers.norm(numbers.shifted(rest[count:], powers[count:]))
        if left > allowed * numbers.norm(numbers.shifted(size, powers)):
            return None
        return tuple(map(numbers.fraction, rest[:count]))

    def _companion(
        self, numerator: Sequence[Any], denominator: Sequence[Any]
    ) -> OpenedMultiprecision:
        """Open the companion form of a fraction that is proper."""
        order = len(denominator) - 1
        monic = [c / denominator[0] for c in denominator]
        above = [Fraction(0)] * (order + 1 - len(numerator))
        above += [c / denominator[0] for c in numerator]
        A = [[int(j == i + 1) for j in range(order)] for i in range(order)]
        if order:
            A[-1] = [-c for c in monic[:0:-1]]
        strict = [
            self.difference(a, above[0] * b) for a, b in zip(above[1:], monic[1:], strict=True)
        ]
        return self._open(
            Realization._trusted(
                self.array(A, (order, order)),
                self.array([[int(i == order - 1)] for i in range(order)], (order, 1)),
                self.array([strict[::-1]], (1, order)),
                self.array([[above[0]]], (1, 1)),
                kind=Kind.RATIONAL,
            )
        )

    def factors(self, polynomial: tuple[Any, ...]) -> tuple[tuple[tuple[Any, ...], int], ...]:
        """Return monic factors of degree one or two, from the computed roots."""
        numbers = self.numbers
        opened = self._companion((), polynomial)
        unit = numbers.context.ldexp(1, opened.scaling.time)
        found: list[tuple[tuple[Any, ...], int]] = []
        roots = [(v * unit, m) for v, m, _ in opened.eigenvalues(opened.A)]
        for root, multiplicity in sorted(roots, key=lambda each: (each[0].real, each[0].imag)):
            if root.imag == 0:
                found.append(((Fraction(1), -numbers.fraction(root.real)), multiplicity))
            elif root.imag > 0:
                size = root.real**2 + root.imag**2
                pair = -numbers.fraction(2 * root.real), numbers.fraction(size)
                found.append(((Fraction(1), *pair), multiplicity))
        return tuple(found)

    def judged(
        self, factor: tuple[Any, ...], whole: tuple[Any, ...], period: Any
    ) -> Sequence[tuple[complex, Stability]]:
        opened = self._companion((), factor)
        return [(value, stability) for value, _, stability in opened.judged(opened.A, period)]

    def sequence(self, parameters: Array) -> Sequenced:
        """Realize a finite sequence with the fewest states.

        Rows of the Hankel matrix are taken in order; a row is new when its known part is further
        than the cutoff from every combination of the known parts of the rows taken before it (Ho
        and Kalman 1966; Tether 1970).
        """
        numbers, context = self.numbers, self.numbers.context
        count, outputs, inputs = parameters.shape
        scaled, time, by_output, by_input = self._in_units(parameters)
        scale = numbers.norm(scaled)
        cutoff = numbers.number(self.allowed(count)) * scale
        taken: list[tuple[int, int]] = []
        relation: dict[tuple[int, int], Array] = {}
        pending = list(range(outputs))
        decisions: list[RankDecision] = []
        for block in range(count):
            columns = count - block
            for output in tuple(pending):
                row = scaled[block:, output].reshape(-1)
                rows = [scaled[b : b + columns, o].reshape(-1) for b, o in taken]
                basis = np.array(rows, dtype=object).reshape(len(taken), columns * inputs)
                solution, residual = reflections.least_squares(context, basis.T, row, cutoff)
                new = bool(residual > cutoff)
                decisions.append(
                    RankDecision(
                        where=f"hankel, row {block + 1} of output {output + 1}",
                        shape=(len(taken) + 1, columns * inputs),
                        rank=int(new),
                        scale=float(scale),
                        cutoff=float(cutoff),
                        smallest_kept=float(residual) if new else None,
                        largest_dropped=None if new else float(residual),
                    )
                )
                if new:
                    taken.append((block, output))
                else:
                    relation[block, output] = solution
                    pending.remove(output)
        order = len(taken)
        place = {row: k for k, row in enumerate(taken)}

        def expressed(row: tuple[int, int]) -> Array:
            result = np.full(order, context.zero, dtype=object)
            if row in place:
                result[place[row]] = context.one
            elif row in relation:
                result[: relation[row].size] = relation[row]
            return result

        def stacked(rows: list[Any], shape: tuple[int, int], exponents: Any) -> Array:
            table = np.array(rows, dtype=object).reshape(shape)
            return numbers.fractions(numbers.shifted(table, exponents))

        return Sequenced(
            A=stacked([expressed((b + 1, o)) for b, o in taken], (order, order), time),
            B=stacked([scaled[b, o] for b, o in taken], (order, inputs), by_input),
            C=stacked(
                [expressed((0, o)) for o in range(outputs)], (outputs, order), by_output[:, None]
            ),
            decisions=tuple(decisions),
        )

    def _in_units(self, parameters: Array) -> tuple[Array, int, Array, Array]:
        """Scale time, outputs and inputs by powers of two, so that units do not change the order.

        The unit of time makes the largest parameter of the second half about as large as that of
        the first; outputs and inputs are brought to norm 1.
        """
        numbers, context = self.numbers, self.numbers.context
        count, outputs, inputs = parameters.shape
        scaled = numbers.table(parameters)

        def exponent(values: Array) -> int:
            size = numbers.norm(values)
            return int(context.mag(size)) if size else 0

        first, second = scaled[: (count + 1) // 2], scaled[count // 2 :]
        time = 0
        if any(first.flat) and any(second.flat):
            time = round((exponent(second) - exponent(first)) / max(count // 2, 1))
        scaled = numbers.shifted(scaled, (-time * np.arange(count))[:, None, None])
        by_output = np.array([exponent(scaled[:, i]) for i in range(outputs)], dtype=int)
        scaled = numbers.shifted(scaled, -by_output[:, None])
        by_input = np.array([exponent(scaled[:, :, j]) for j in range(inputs)], dtype=int)
        return numbers.shifted(scaled, -by_input), time, by_output, by_input
