"""The floating path: LAPACK, orthogonal transformations on a scaled model, one cutoff.

References
----------
Paige (1981), Properties of numerical algorithms related to computing controllability, IEEE Trans.
Automatic Control 26. Van Dooren (1981), The generalized eigenstructure problem in linear system
theory, same journal. Golub and Van Loan, Matrix Computations, sections 5.2, 7.4.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from functools import lru_cache
from typing import Any

import numpy as np
from scipy.linalg import lapack

from realize import tolerance as rule
from realize.arithmetic.divisors import split
from realize.arithmetic.path import Completion, Frame, Sequenced, SharedFactor, frozen
from realize.arithmetic.scaling import Scaling, scaling_of, unscaled
from realize.errors import PrecisionError
from realize.model.realization import Kind, Realization
from realize.results import Evidence, Mode, Part, RankDecision
from realize.stability import Stability, computed_stability, damping, time_constant

__all__ = ["FloatingPath", "FloatingReach", "OpenedFloating"]

Array = np.ndarray[Any, Any]

_BLOCK = 32
"""Columns LAPACK works on at once, for workspace sizes."""


@lru_cache(maxsize=32)
def _hessenberg_mask(size: int) -> Array:
    """Return ones where an upper Hessenberg matrix may be non-zero; cheaper than finding them."""
    return np.asfortranarray(np.tri(size, k=1).T)


class FloatingReach:
    """The reachable subspace by orthogonal transformations: a staircase form.

    ``A = Q^T (given A) Q`` is block Hessenberg, B is zero below its first stair, and the first
    ``dimension`` columns of Q span the subspace.
    """

    __slots__ = ("A_all", "B_all", "C_all", "Q", "_opened", "_stages", "_where", "dimension",
                 "stairs")  # fmt: skip

    def __init__(
        self,
        opened: OpenedFloating,
        A: Array,
        B: Array,
        C: Array,
        where: str,
        ranks: Sequence[int] | None = None,
    ) -> None:
        self._opened, self._where = opened, where
        order, inputs = B.shape
        self.C_all = C
        if order == 0 or inputs == 0:
            self.A_all, self.B_all, self.Q = A.copy(), B, np.eye(order)
            self.stairs: tuple[int, ...] = ()
            self._stages: Any = []
        elif inputs == 1:
            self._one_input(A, B, ranks)
        else:
            self._several_inputs(A, B, ranks)
        self.dimension = sum(self.stairs)
        if self.dimension < order:
            self.A_all[self.dimension :, : self.dimension] = 0.0

    def _one_input(self, A: Array, B: Array, ranks: Sequence[int] | None) -> None:
        """Reduce [0 0; b A] to Hessenberg form: its subdiagonal holds every stage at once."""
        order = A.shape[0]
        bordered = np.zeros((order + 1, order + 1), order="F")
        bordered[1:, :1] = B
        bordered[1:, 1:] = A
        space = (order + 1) * _BLOCK
        reduced, tau, _ = lapack.dgehrd(bordered, lwork=space, overwrite_a=1)
        pivots = np.abs(reduced.ravel(order="K")[1 :: order + 2])
        Q, _ = lapack.dorghr(reduced, tau, lwork=space)[:2]
        reduced *= _hessenberg_mask(order + 1)
        if ranks is None:
            small = (pivots <= self._opened.cutoff).nonzero()[0]
            reach = int(small[0]) if small.size else order
        else:
            reach = sum(ranks)
        self.A_all = reduced[1:, 1:]
        self.B_all = reduced[1:, :1]
        if reach == 0:
            self.B_all[0, 0] = 0.0
        self.Q = Q[1:, 1:]
        self.C_all = self.C_all @ self.Q
        self.stairs = (1,) * reach
        self._stages = pivots

    def _several_inputs(self, A: Array, B: Array, ranks: Sequence[int] | None) -> None:
        """Compress the rows of each coupling block in turn (QR, then SVD of the small factor)."""
        order = A.shape[0]
        A, B, Q = np.array(A, order="F"), np.array(B, order="F"), np.eye(order, order="F")
        C = np.array(self.C_all, order="F")
        cutoff = self._opened.cutoff
        stages: list[tuple[tuple[int, int], Array]] = []
        stairs: list[int] = []
        block, top = B, 0
        while top < order and block.shape[1]:
            values, rank = _compress(A, Q, C, block, top, cutoff, ranks, len(stairs))
            stages.append((block.shape, values))
            block[rank:] = 0.0
            if rank == 0:
                break
            stairs.append(rank)
            left = top
            top += rank
            block = A[top:, left:top]
        self.A_all, self.B_all, self.C_all, self.Q = A, B, C, Q
        self.stairs = tuple(stairs)
        self._stages = stages

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
        opened = self._opened
        found: list[RankDecision] = []
        for stage, (shape, values, rank) in enumerate(self._stage_values(), start=1):
            found.append(
                RankDecision(
                    where=f"{self._where}, stage {stage}",
                    shape=shape,
                    rank=rank,
                    scale=opened.scaling.scale,
                    cutoff=opened.cutoff,
                    smallest_kept=float(values[rank - 1]) if rank else None,
                    largest_dropped=float(values[rank]) if rank < len(values) else None,
                )
            )
        return tuple(found)

    def _stage_values(self) -> list[tuple[tuple[int, int], Array, int]]:
        order = self.A_all.shape[0]
        if isinstance(self._stages, list):
            ranks = (*self.stairs, 0)
            return [
                ((int(shape[0]), int(shape[1])), values, ranks[k])
                for k, (shape, values) in enumerate(self._stages)
            ]
        reach = self.dimension
        values = self._stages
        return [
            ((order - k, 1), values[k : k + 1], int(k < reach))
            for k in range(min(reach + 1, order))
        ]


def _compress(
    A: Array,
    Q: Array,
    C: Array,
    block: Array,
    top: int,
    cutoff: float,
    ranks: Sequence[int] | None,
    stage: int,
) -> tuple[Array, int]:
    """Rotate the rows from `top` on so that the block's row space comes first; return its SVD.

    The block is a view of B or of A below the stairs found so far, so what is written to it is
    written there. Returns the singular values and the rank taken.
    """
    height, width = block.shape
    factored, tau, _, _ = lapack.dgeqrf(block, lwork=width * _BLOCK)
    small = np.triu(factored[: min(height, width)])
    U, values, Vt = np.linalg.svd(small, full_matrices=True)
    if ranks is None:
        rank = int(np.count_nonzero(values > cutoff))
    else:
        rank = min(ranks[stage], len(values)) if stage < len(ranks) else 0
    reflectors = factored[:, : len(tau)]
    for side, transpose, target in (
        ("L", "T", A[top:]),
        ("R", "N", A[:, top:]),
        ("R", "N", Q[:, top:]),
        ("R", "N", C[:, top:]),
    ):
        if target.size:
            space = max(target.shape) * _BLOCK
            target[...] = lapack.dormqr(side, transpose, reflectors, tau, target, space)[0]
    count = U.shape[0]
    A[top : top + count] = U.T @ A[top : top + count]
    A[:, top : top + count] = A[:, top : top + count] @ U
    Q[:, top : top + count] = Q[:, top : top + count] @ U
    C[:, top : top + count] = C[:, top : top + count] @ U
    block[:rank] = values[:rank, None] * Vt[:rank]
    return values, rank


class OpenedFloating:
    """A model opened on the floating path: scaled, with the cutoff fixed."""

    __slots__ = ("A", "B", "C", "cutoff", "model", "scaling", "tolerance")

    def __init__(self, model: Realization, tolerance: float | None, scaled: bool = True) -> None:
        self.model = model
        A, B, C = model.A, model.B, model.C
        with np.errstate(all="ignore"):
            # What overflows is found by the norm of the result, and refused there.
            self.scaling: Scaling = scaling_of(A, B, C) if scaled else unscaled(A, B, C)
        self.A, self.B, self.C = self.scaling.A, self.scaling.B, self.scaling.C
        self.tolerance = tolerance
        self.cutoff = rule.cutoff(model.order, self.scaling.scale, tolerance)

    def reached(
        self, A: Array, B: Array, C: Array, where: str, ranks: Sequence[int] | None = None
    ) -> FloatingReach:
        """Return the reachable subspace; `ranks` forces the stairs instead of deciding them."""
        return FloatingReach(self, A, B, C, where, ranks)

    flag = reached

    def complete(self, matrix: Array) -> Completion:
        Q, R = np.linalg.qr(matrix, mode="complete")
        factor = R[: matrix.shape[1]]
        diagonal = np.abs(np.diagonal(factor))
        if diagonal.size and diagonal.min() <= self.cutoff:
            raise PrecisionError(
                "the rank decisions of the floating path contradict each other: a subspace that "
                f"should have dimension {matrix.shape[1]} shows a pivot of {diagonal.min():.3g} at "
                f"cutoff {self.cutoff:.3g}. Give another tolerance, or use the exact path"
            )
        return Completion(basis=Q, inverse=Q.T, factor=factor, factor_inverse=np.linalg.inv(factor))

    def block(self, rows: Sequence[Sequence[Array]]) -> Array:
        return np.block([list(row) for row in rows])

    def identity(self, size: int) -> Array:
        return np.eye(size)

    def zeros(self, rows: int, columns: int) -> Array:
        return np.zeros((rows, columns))

    def close(self, A: Array, B: Array, C: Array) -> Realization:
        scaling, model = self.scaling, self.model
        return Realization._trusted(
            np.ldexp(A, scaling.time),
            np.ldexp(B, -scaling.inputs),
            np.ldexp(C, scaling.outputs[:, None]),
            model.D,
            kind=Kind.FLOATING,
            sampling_period=model.sampling_period,
            input_names=model._input_names,
            output_names=model._output_names,
        )

    def transformation(self, basis: Array) -> Array:
        return frozen(np.ldexp(basis, self.scaling.states[:, None]))

    def state_map(self, matrix: Array) -> Array:
        return frozen(np.ldexp(matrix, -self.scaling.states))

    def evidence(self, reach: FloatingReach, sight: FloatingReach) -> Evidence:
        return Evidence(
            model=self.model, state_map=self.state_map(sight.basis.T @ reach.coordinates)
        )

    def condition(self, state_map: Array) -> float | None:
        return float(np.linalg.cond(state_map)) if state_map.size else 1.0

    def eigenvalues(self, A: Array) -> Array:
        """Return the eigenvalues of a block, in the user's unit of time."""
        if not A.size:
            return np.zeros(0, dtype=complex)
        values = np.linalg.eigvals(A).astype(complex)
        return np.asarray(values * math.ldexp(1.0, self.scaling.time))

    def characteristic_polynomial(self, A: Array) -> tuple[float, ...]:
        """Return the polynomial of the computed eigenvalues, monic."""
        if not A.size:
            return (1.0,)
        coefficients = np.poly(np.linalg.eigvals(A)).real
        powers = self.scaling.time * np.arange(coefficients.size)
        return tuple(np.ldexp(coefficients, powers).tolist())

    def _doubt(self) -> float:
        """Return by how much a computed eigenvalue may be off.

        A double eigenvalue moves by the square root of the rounding.
        """
        scale = self.scaling.scale
        floor = rule.rounding_floor(self.model.order, scale)
        return math.ldexp(math.sqrt(floor * scale), self.scaling.time)

    def decays(self, block: Array) -> bool:
        if not block.size:
            return True
        values, doubt = self.eigenvalues(block), self._doubt()
        if self.model.sampling_period is None:
            return float(values.real.max()) < -doubt
        return float(np.abs(values).max()) < 1.0 - doubt

    def modes(self, blocks: Iterable[tuple[Part, Array]]) -> tuple[Mode, ...]:
        """Return computed eigenvalues, about which nothing is proved."""
        period, doubt = self.model.sampling_period, self._doubt()
        found: list[Mode] = []
        for part, block in blocks:
            for value in sorted(self.eigenvalues(block).tolist(), key=lambda v: (v.real, v.imag)):
                found.append(
                    Mode(
                        value=value,
                        radius=math.inf,
                        part=part,
                        multiplicity=1,
                        stability=computed_stability(value, period, doubt),
                        time_constant=time_constant(value, period),
                        damping=damping(value, period),
                    )
                )
        return tuple(found)

    def numerators(self) -> tuple[tuple[Any, ...], tuple[tuple[tuple[Any, ...], ...], ...]]:
        """Return det(s - A) and the numerators over it, from the Markov parameters.

        The coefficient of s^(n-k) is sum_j a_(k-j) H_j, because numerator = denominator times
        the series H_0 + H_1 / s + ... (Kailath, Linear Systems, section 2.3). Done in the scaled
        unit of time, where powers of A neither grow nor vanish fast.
        """
        scaling, model = self.scaling, self.model
        order = model.order
        below = np.poly(np.linalg.eigvals(self.A)).real if order else np.ones(1)
        series = np.empty((order + 1, model.output_count, model.input_count))
        series[0] = 0.0
        power = self.B
        for k in range(1, order + 1):
            series[k] = self.C @ power
            power = self.A @ power
        units = scaling.outputs[:, None] - scaling.inputs
        above = np.empty_like(series)
        for k in range(order + 1):
            above[k] = np.tensordot(below[k::-1], series[: k + 1], axes=1)
        steps = scaling.time * np.arange(order + 1)
        # One factor A fewer than in the denominator: the series starts at C B / s.
        shifted = (steps - scaling.time)[:, None, None] + units
        with np.errstate(over="ignore"):
            above = np.ldexp(above, shifted)
            denominator = _in_range(np.ldexp(below, steps), "the characteristic polynomial")
        _in_range(above, "a numerator")
        above += denominator[:, None, None] * model.D
        rows = tuple(
            tuple(_stripped(above[:, i, j]) for j in range(model.input_count))
            for i in range(model.output_count)
        )
        return tuple(denominator.tolist()), rows

    def markov_parameters(self, count: int) -> Array:
        model = self.model
        result = np.empty((count, model.output_count, model.input_count))
        if count:
            result[0] = model.D
        power = model.B
        with np.errstate(over="ignore", invalid="ignore"):
            for k in range(1, count):
                result[k] = model.C @ power
                power = model.A @ power
        return _in_range(result, "a Markov parameter")


def _in_range(values: Array, what: str) -> Array:
    """Return the values, or refuse what is too large for a double."""
    if not np.isfinite(values).all():
        raise PrecisionError(
            f"{what} is too large for a double; give time another unit, or use the exact path"
        )
    return values


def _stripped(coefficients: Array) -> tuple[float, ...]:
    """Drop leading coefficients that are exactly zero."""
    kept = np.flatnonzero(coefficients)
    return tuple(coefficients[kept[0] :].tolist()) if kept.size else (0.0,)


class FloatingPath:
    """Double precision; rational models are rounded.

    Parameters
    ----------
    tolerance : float or None
        The cutoff is this times the Frobenius norm of the scaled model; None for the default.
    scaled : bool
        Whether rank decisions are taken on the scaled model.
    """

    is_exact = False
    kind = Kind.FLOATING

    def __init__(self, tolerance: float | None = None, *, scaled: bool = True) -> None:
        self.tolerance = rule.check_tolerance(tolerance)
        self.scaled = scaled

    def open(self, model: Realization) -> OpenedFloating:
        return OpenedFloating(self.admit(model), self.tolerance, self.scaled)

    def admit(self, source: Any) -> Any:
        return source if source.kind == Kind.FLOATING else source.to_float()

    def array(self, values: Sequence[Sequence[Any]], shape: tuple[int, int]) -> Array:
        return np.array(values, dtype=float).reshape(shape)

    def common_denominator(
        self, denominators: Sequence[tuple[float, ...]]
    ) -> tuple[tuple[float, ...], tuple[tuple[float, ...], ...]]:
        """Return the product of the distinct denominators.

        Floats have no common factors that could be relied on.
        """
        monic = [tuple((np.asarray(d) / d[0]).tolist()) for d in denominators]
        distinct = list(dict.fromkeys(monic))
        cofactors = {own: _product(other for other in distinct if other != own) for own in distinct}
        return _product(distinct), tuple(cofactors[own] for own in monic)

    def multiply(self, first: tuple[float, ...], second: tuple[float, ...]) -> tuple[float, ...]:
        return tuple(np.convolve(first, second).tolist())

    def difference(self, first: float, second: float) -> float:
        return rule.difference(first, second)

    def shared_factor(
        self, numerator: tuple[float, ...], denominator: tuple[float, ...], where: str
    ) -> SharedFactor:
        """Return the common factor that the companion form hides.

        A common factor is an unobservable mode of the companion form of the fraction, so the
        degree is decided by the same staircase, at the same cutoff, that `minimal` uses. A factor
        that does not reproduce the coefficients to within the tolerance is not common; then one
        degree less is tried.
        """
        above, below = np.asarray(numerator), np.asarray(denominator)
        if not above[0]:
            return SharedFactor(
                common=tuple((below / below[0]).tolist()),
                numerator=(0.0,),
                denominator=(float(below[0]),),
                decisions=(),
            )
        opened, seen = self._companion_sight(above, below, where)
        degree = min(opened.model.order - seen.dimension, above.size - 1, below.size - 1)
        allowed = (
            rule.default_tolerance(opened.model.order) if self.tolerance is None else self.tolerance
        )
        while degree > 0:
            common, upper, lower, residual = split(above, below, degree)
            if residual <= allowed:
                return SharedFactor(
                    common=tuple(common.tolist()),
                    numerator=tuple(upper.tolist()),
                    denominator=tuple(lower.tolist()),
                    decisions=seen.decisions(),
                )
            degree -= 1
        return SharedFactor(
            common=(1.0,),
            numerator=numerator,
            denominator=denominator,
            decisions=seen.decisions(),
        )

    def _companion_sight(
        self, above: Array, below: Array, where: str
    ) -> tuple[OpenedFloating, FloatingReach]:
        """Return what the output of the companion form of a fraction sees."""
        # The roles of the two do not matter for what they share; an improper fraction is turned.
        c, a = (above, below) if above.size <= below.size else (below, above)
        order = a.size - 1
        A = np.eye(order, k=1)
        A[-1:] = -(a[:0:-1] / a[0])
        B = np.zeros((order, 1))
        B[-1:] = 1.0
        padded = np.concatenate([np.zeros(a.size - c.size), c / a[0]])
        strict = [
            rule.difference(p, padded[0] * q) for p, q in zip(padded[1:], a[1:] / a[0], strict=True)
        ]
        C = np.array(strict)[::-1].reshape(1, order)
        model = Realization._trusted(A, B, C, np.zeros((1, 1)), kind=Kind.FLOATING)
        opened = OpenedFloating(model, self.tolerance, self.scaled)
        return opened, opened.reached(opened.A.T, opened.C.T, opened.B.T, where)

    def factors(self, polynomial: tuple[float, ...]) -> tuple[tuple[tuple[float, ...], int], ...]:
        """Return monic factors of degree one or two, one for each computed root or pair."""
        found: list[tuple[tuple[float, ...], int]] = []
        for root in sorted(np.roots(polynomial).tolist(), key=lambda r: (r.real, r.imag)):
            if root.imag == 0:
                found.append(((1.0, -float(root.real)), 1))
            elif root.imag > 0:
                found.append(((1.0, -2.0 * root.real, abs(root) ** 2), 1))
        return tuple(found)

    def judged(
        self, factor: tuple[float, ...], whole: tuple[float, ...], period: Any
    ) -> list[tuple[complex, Stability]]:
        return [
            (value, computed_stability(value, period, rule.root_doubt(value)))
            for value in np.roots(factor).astype(complex).tolist()
        ]

    def sequence(self, parameters: Array) -> Sequenced:
        """Realize a finite sequence, by the singular values of its Hankel matrix.

        The squarest block Hankel matrix of the data gives the order and, by one shift, the
        realization (Ho and Kalman 1966; Kung 1978). Where that realization does not reproduce the
        data the sequence is a partial one whose order the one block does not show; then the rows
        are taken in order instead (Tether 1970).
        """
        from realize.arithmetic.sequences import hankel_realization, row_realization

        shifted = hankel_realization(parameters, self.tolerance)
        return shifted if shifted is not None else row_realization(parameters, self.tolerance)


def _product(factors: Iterable[tuple[float, ...]]) -> tuple[float, ...]:
    product = np.ones(1)
    for factor in factors:
        product = np.convolve(product, factor)
    return tuple(product.tolist())
