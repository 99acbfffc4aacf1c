"""The exact path: rational arithmetic on FLINT, subspaces lifted from primes and verified."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from itertools import islice
from typing import Any, Final

import numpy as np
from flint import fmpq

from realize import polynomials
from realize.arithmetic import modular
from realize.arithmetic.modular import Clock, Profile
from realize.arithmetic.path import Completion, Frame, Sequenced, SharedFactor, frozen
from realize.arithmetic.rational import RationalMatrix
from realize.arithmetic.similar import rank_modulus
from realize.entries import Reading
from realize.errors import InexactInputError
from realize.model.realization import Kind, Realization
from realize.polynomials import Polynomial
from realize.results import Echelon, Evidence, Mode, Part, RankDecision
from realize.stability import Stability, damping, is_stable, judge, time_constant

__all__ = ["ExactPath", "ExactReach", "OpenedExact"]

Array = np.ndarray[Any, Any]

PRODUCT_SECONDS: Final = 6e-10
"""Estimated time of one product modulo a prime, over n^3. Only used to refuse what cannot end."""

POLYNOMIAL_SECONDS: Final = 1.3e-9
"""The same for a characteristic polynomial."""

_SMALL: Final = 16
"""Up to this order no estimate is needed, and stairs are always lifted."""

_STAIR_PRIMES: Final = 3
"""How many primes the stairs of a large model are taken from where their shape leaves doubt."""


@dataclass(frozen=True, slots=True)
class _Lifted:
    """A subspace over the rationals: basis rows in reduced echelon form, model read off it."""

    pivots: tuple[int, ...]
    others: tuple[int, ...]
    below: RationalMatrix  # the non-pivot rows of the basis, (n - r, r)
    A: RationalMatrix
    stairs: tuple[int, ...] = ()  # rank increments, the largest of all primes


class ExactReach:
    """The reachable subspace over the rationals, proved.

    The basis V is in reduced echelon form (by columns): its pivot rows are the identity, so the
    restricted model is read off the pivot rows of A V and of B.
    """

    def __init__(
        self,
        opened: OpenedExact,
        A: RationalMatrix,
        B: RationalMatrix,
        C: RationalMatrix,
        where: str,
    ) -> None:
        self._opened, self._where = opened, where
        self._A, self._B, self._C = A, B, C
        self._lifted = opened.lift_reached(A, B)
        self.dimension = len(self._lifted.pivots)
        self._stairs: tuple[tuple[int, ...], bool] | None = None

    @property
    def stairs(self) -> tuple[int, ...]:
        return self._stairs_and_proof()[0]

    @property
    def stairs_proved(self) -> bool:
        """Whether every stair is proved, and not only their sum."""
        return self._stairs_and_proof()[1]

    def _stairs_and_proof(self) -> tuple[tuple[int, ...], bool]:
        if self._stairs is None:
            self._stairs = self._opened.stairs(self._A, self._B, self._lifted)
        return self._stairs

    @property
    def A(self) -> RationalMatrix:
        return self._lifted.A

    @property
    def B(self) -> RationalMatrix:
        if not self._lifted.others:
            return self._B
        return self._B.take(self._lifted.pivots, range(self._B.shape[1]))

    @property
    def C(self) -> RationalMatrix:
        lifted = self._lifted
        if not lifted.others:
            return self._C
        outputs = range(self._C.shape[0])
        return self._C.take(outputs, lifted.pivots) + (
            self._C.take(outputs, lifted.others) @ lifted.below
        )

    @property
    def basis(self) -> RationalMatrix:
        lifted = self._lifted
        size, rank = len(lifted.pivots) + len(lifted.others), len(lifted.pivots)
        entries: list[Any] = [0] * (size * rank)
        for k, i in enumerate(lifted.pivots):
            entries[i * rank + k] = 1
        table = lifted.below.matrix.tolist()
        for k, i in enumerate(lifted.others):
            entries[i * rank : (i + 1) * rank] = table[k]
        return RationalMatrix.from_entries(size, rank, entries)

    def echelon(self) -> Echelon:
        """Return the basis as plain values."""
        lifted = self._lifted
        size = len(lifted.pivots) + len(lifted.others)
        return Echelon(size=size, pivots=lifted.pivots, rest=frozen(lifted.below.to_array()))

    @property
    def coordinates(self) -> RationalMatrix:
        lifted = self._lifted
        size, rank = len(lifted.pivots) + len(lifted.others), len(lifted.pivots)
        entries = [0] * (size * rank)
        for k, i in enumerate(lifted.pivots):
            entries[k * size + i] = 1
        return RationalMatrix.from_entries(rank, size, entries)

    def frame(self) -> Frame:
        lifted = self._lifted
        rank, rest = len(lifted.pivots), len(lifted.others)
        size = rank + rest
        basis: list[Any] = [0] * (size * size)
        inverse: list[Any] = [0] * (size * size)
        table = lifted.below.matrix.tolist()
        for k, i in enumerate(lifted.pivots):
            basis[i * size + k] = 1
            inverse[k * size + i] = 1
        for k, i in enumerate(lifted.others):
            basis[i * size : i * size + rank] = table[k]
            basis[i * size + rank + k] = 1
            inverse[(rank + k) * size + i] = 1
            for j, pivot in enumerate(lifted.pivots):
                inverse[(rank + k) * size + pivot] = -table[k][j]
        T = RationalMatrix.from_entries(size, size, basis)
        inverse_T = RationalMatrix.from_entries(size, size, inverse)
        return Frame(
            basis=T,
            inverse=inverse_T,
            A=inverse_T @ self._A @ T,
            B=inverse_T @ self._B,
            C=self._C @ T,
        )

    def quotient(self) -> RationalMatrix:
        lifted = self._lifted
        return self._A.take(lifted.others, lifted.others) - (
            lifted.below @ self._A.take(lifted.pivots, lifted.others)
        )

    def decisions(self) -> tuple[RankDecision, ...]:
        order = self._A.shape[0]
        found: list[RankDecision] = []
        rest, width = order, self._B.shape[1]
        for stage, rank in enumerate((*self.stairs, 0), start=1):
            if rest == 0 or width == 0:
                break
            found.append(
                RankDecision(
                    where=f"{self._where}, stage {stage}",
                    shape=(rest, width),
                    rank=rank,
                    scale=0.0,
                    cutoff=0.0,
                    smallest_kept=None,
                    largest_dropped=None,
                )
            )
            rest, width = rest - rank, rank
        return tuple(found)


class ExactFlag(ExactReach):
    """The same subspace, with a basis adapted to every stage of the staircase, proved."""

    def __init__(
        self,
        opened: OpenedExact,
        A: RationalMatrix,
        B: RationalMatrix,
        C: RationalMatrix,
        where: str,
    ) -> None:
        super().__init__(opened, A, B, C, where)
        stairs, self._frame = opened.lift_flag(A, B, C, self._lifted)
        self._stairs = stairs, True

    def frame(self) -> Frame:
        return self._frame


class OpenedExact:
    """A rational model opened on the exact path."""

    def __init__(self, model: Realization, clock: Clock) -> None:
        self.model = model
        self.clock = clock
        self.A = RationalMatrix.from_array(model.A)
        self.B = RationalMatrix.from_array(model.B)
        self.C = RationalMatrix.from_array(model.C)

    def reached(
        self, A: RationalMatrix, B: RationalMatrix, C: RationalMatrix, where: str
    ) -> ExactReach:
        return ExactReach(self, A, B, C, where)

    def flag(
        self, A: RationalMatrix, B: RationalMatrix, C: RationalMatrix, where: str
    ) -> ExactReach:
        return ExactFlag(self, A, B, C, where)

    def lift_reached(self, A: RationalMatrix, B: RationalMatrix) -> _Lifted:
        """Return the reachable subspace, verified over the rationals."""
        order = A.shape[0]
        self.clock.afford(4 * PRODUCT_SECONDS * order**3, "the reachable subspace")
        whole = _Lifted(tuple(range(order)), (), RationalMatrix.zeros(0, order), A)
        if order == 0:
            return whole

        def compute(prime: int) -> tuple[tuple[Any, ...], list[int]] | None:
            A_image, B_image = A.modulo(prime), B.modulo(prime)
            if A_image is None or B_image is None:
                return None
            profile = modular.reached_rows(A_image, B_image, self.clock)
            stairs.append(profile.stairs)
            if len(profile.pivots) == order:
                return profile.pivots, []
            return profile.pivots, _below(profile, order)

        def verify(pivots: tuple[Any, ...], values: list[fmpq]) -> _Lifted | None:
            rank = len(pivots)
            if rank == order:
                return replace(whole, stairs=max(stairs))
            kept = set(pivots)
            others = tuple(i for i in range(order) if i not in kept)
            below = RationalMatrix.from_entries(order - rank, rank, values)
            found = verified(A, B, pivots, others, below)
            return None if found is None else replace(found, stairs=max(stairs))

        stairs: list[tuple[int, ...]] = []
        lifted: _Lifted = modular.lift(compute, _better, verify, self.clock)
        return lifted

    def lift_flag(
        self, A: RationalMatrix, B: RationalMatrix, C: RationalMatrix, lifted: _Lifted
    ) -> tuple[tuple[int, ...], Frame]:
        """Return the stairs and a frame adapted to every stage, verified over the rationals."""
        order, rank = A.shape[0], len(lifted.pivots)
        if rank == 0:
            one = RationalMatrix.identity(order)
            return (), Frame(basis=one, inverse=one, A=A, B=B, C=C)

        def compute(prime: int) -> tuple[tuple[Any, ...], list[int]] | None:
            A_image, B_image = A.modulo(prime), B.modulo(prime)
            if A_image is None or B_image is None:
                return None
            steps = modular.krylov_steps(A_image, B_image, self.clock)
            residues = [int(value) for step in steps for value in step.rows.entries()]
            return tuple(step.pivots for step in steps), residues

        def better(first: tuple[Any, ...], second: tuple[Any, ...]) -> bool:
            sizes = [[len(step) for step in steps] for steps in (first, second)]
            return (sizes[0], [-j for step in first for j in step]) > (
                sizes[1],
                [-j for step in second for j in step],
            )

        def verify(profile: tuple[Any, ...], values: list[fmpq]) -> Any | None:
            stairs = tuple(len(step) for step in profile)
            if sum(stairs) != rank:
                return None
            V = RationalMatrix.from_entries(rank, order, values).T
            pivots = [j for step in profile for j in step]
            taken = set(pivots)
            rest = [j for j in range(order) if j not in taken]
            unit = RationalMatrix.from_entries(
                order, len(rest), [int(i == j) for i in range(order) for j in rest]
            )
            T = RationalMatrix.block([[V, unit]])
            inverse = RationalMatrix(T.matrix.inv())
            frame = Frame(basis=T, inverse=inverse, A=inverse @ A @ T, B=inverse @ B, C=C @ T)
            return (stairs, frame) if _is_staircase(frame, stairs, order) else None

        flag: tuple[tuple[int, ...], Frame] = modular.lift(compute, better, verify, self.clock)
        return flag

    def stairs(
        self, A: RationalMatrix, B: RationalMatrix, lifted: _Lifted
    ) -> tuple[tuple[int, ...], bool]:
        """Return the rank increments of [B, AB, ...], and whether each of them is proved.

        Every partial rank modulo a prime is a lower bound, and the total is proved. Where the
        lower bounds meet what the shape allows nothing is left to prove. Otherwise the stages of a
        small model are lifted and verified; those of a large one are taken from several primes.
        """
        dimension, inputs = len(lifted.pivots), B.shape[1]
        if inputs == 1 or not dimension:
            return (1,) * dimension, True
        if sum(lifted.stairs) == dimension and _pinned(lifted.stairs, inputs, dimension, B.rank):
            return lifted.stairs, True
        if A.shape[0] <= _SMALL:
            return self.lift_flag(A, B, RationalMatrix.zeros(0, A.shape[0]), lifted)[0], True
        images = islice(modular.images(A, B), _STAIR_PRIMES)
        found = max(modular.reached_rows(a, b, self.clock).stairs for a, b in images)
        return found, False

    def complete(self, matrix: RationalMatrix) -> Completion:
        """Complete independent columns to a basis, the columns in reduced echelon form first."""
        size, count = matrix.shape
        echelon, _ = matrix.T.matrix.rref()
        table = echelon.tolist()
        pivots = [next(j for j, value in enumerate(row) if value != 0) for row in table[:count]]
        taken = set(pivots)
        rest = [j for j in range(size) if j not in taken]
        unit = RationalMatrix.from_entries(
            size, len(rest), [int(i == j) for i in range(size) for j in rest]
        )
        columns = RationalMatrix(echelon).T[:, :count]
        factor = matrix.take(pivots, range(count))
        basis = RationalMatrix.block([[columns, unit]])
        return Completion(
            basis=basis,
            inverse=RationalMatrix(basis.matrix.inv()) if size else basis,
            factor=factor,
            factor_inverse=RationalMatrix(factor.matrix.inv()) if count else factor,
        )

    def block(self, rows: Sequence[Sequence[RationalMatrix]]) -> RationalMatrix:
        return RationalMatrix.block(rows)

    def identity(self, size: int) -> RationalMatrix:
        return RationalMatrix.identity(size)

    def zeros(self, rows: int, columns: int) -> RationalMatrix:
        return RationalMatrix.zeros(rows, columns)

    def close(self, A: RationalMatrix, B: RationalMatrix, C: RationalMatrix) -> Realization:
        model = self.model
        return Realization._trusted(
            A.to_array(),
            B.to_array(),
            C.to_array(),
            model.D,
            kind=Kind.RATIONAL,
            sampling_period=model.sampling_period,
            input_names=model._input_names,
            output_names=model._output_names,
        )

    def transformation(self, basis: RationalMatrix) -> Array:
        return frozen(basis.to_array())

    def state_map(self, matrix: RationalMatrix) -> Array:
        return frozen(matrix.to_array())

    def evidence(self, reach: ExactReach, sight: ExactReach) -> Evidence:
        return Evidence(
            model=self.model,
            reached=reach.echelon(),
            seen=sight.echelon(),
            modulus=rank_modulus(sight.A.T, sight.C.T, sight.B.T, self.clock),
        )

    def condition(self, state_map: Array) -> float | None:
        return None

    def characteristic_polynomial(self, A: RationalMatrix) -> Polynomial:
        order = A.shape[0]
        if order > _SMALL:
            # FLINT works modulo about order * bits / 62 primes, O(n^3) for each.
            images = 1 + order * (A.bits() + order.bit_length()) / modular.PRIME_BITS
            self.clock.afford(POLYNOMIAL_SECONDS * order**3 * images, "a characteristic polynomial")
        return A.characteristic_polynomial()

    def decays(self, block: RationalMatrix) -> bool:
        """Decide by the Routh-Hurwitz test, without a root."""
        return is_stable(self.characteristic_polynomial(block), self.model.sampling_period)

    def modes(self, blocks: Iterable[tuple[Part, RationalMatrix]]) -> tuple[Mode, ...]:
        return modes_of(
            ((part, self.characteristic_polynomial(block)) for part, block in blocks),
            self.A,
            self.model.sampling_period,
        )

    def numerators(
        self,
    ) -> tuple[tuple[Any, ...], tuple[tuple[tuple[Any, ...], ...], ...]]:
        """Return det(s - A), and det(s - A + b c) - det(s - A) + d det(s - A), entry by entry.

        The rank-one update formula (Kailath, Linear Systems, appendix A.11).
        """
        below = self.characteristic_polynomial(self.A)
        order, inputs, outputs = self.model.order, self.model.input_count, self.model.output_count
        columns = [self.B.take(range(order), [j]) for j in range(inputs)]
        rows = [self.C.take([i], range(order)) for i in range(outputs)]
        above = tuple(
            tuple(
                _numerator(
                    below,
                    self.characteristic_polynomial(self.A - columns[j] @ rows[i]),
                    self.model.D[i, j],
                )
                for j in range(inputs)
            )
            for i in range(outputs)
        )
        return below, above

    def markov_parameters(self, count: int) -> Array:
        model = self.model
        result = np.empty((count, model.output_count, model.input_count), dtype=object)
        if count:
            result[0] = model.D
        power = self.B
        for k in range(1, count):
            result[k] = (self.C @ power).to_array()
            power = self.A @ power
        return result


def _numerator(below: Polynomial, shifted: Polynomial, feedthrough: Fraction) -> Polynomial:
    values = [s - (1 - feedthrough) * b for s, b in zip(shifted, below, strict=True)]
    return polynomials.strip(tuple(values))


def _better(first: tuple[Any, ...], second: tuple[Any, ...]) -> bool:
    """Whether the first pivots are nearer the true ones: more of them, then earlier ones.

    Modulo a prime the rank can only fall and pivots can only move right.
    """
    return len(first) > len(second) or (len(first) == len(second) and first < second)


def _below(profile: Profile, order: int) -> list[int]:
    """Return the non-pivot rows of the basis (columns of the echelon rows), row by row."""
    kept = set(profile.pivots)
    table = profile.rows.tolist()
    return [int(row[i]) for i in range(order) if i not in kept for row in table]


def verified(
    A: RationalMatrix,
    B: RationalMatrix,
    pivots: tuple[int, ...],
    others: tuple[int, ...],
    below: RationalMatrix,
) -> _Lifted | None:
    """Return the subspace if it holds B and is invariant, over the rationals; else None.

    With V the identity in the pivot rows and `below` elsewhere: B = V B1 reads
    ``B[others] = below @ B[pivots]``, and A V = V A1 the same for A V.
    """
    inputs = range(B.shape[1])
    if B.take(others, inputs) != below @ B.take(pivots, inputs):
        return None
    top = A.take(pivots, pivots) + A.take(pivots, others) @ below
    bottom = A.take(others, pivots) + A.take(others, others) @ below
    if bottom != below @ top:
        return None
    return _Lifted(pivots, others, below, top)


def _is_staircase(frame: Frame, stairs: tuple[int, ...], order: int) -> bool:
    """Whether A and B in the frame vanish where a staircase form must."""
    edges = [0]
    for rank in stairs:
        edges.append(edges[-1] + rank)
    reached = edges[-1]
    if not frame.B.take(range(edges[1], order), range(frame.B.shape[1])).is_zero():
        return False
    for stage in range(1, len(edges)):
        lowest = edges[stage + 1] if stage + 1 < len(edges) else reached
        columns = range(edges[stage - 1], edges[stage])
        if not frame.A.take(range(lowest, order), columns).is_zero():
            return False
    return True


def _pinned(stairs: tuple[int, ...], inputs: int, dimension: int, rank_of_inputs: Any) -> bool:
    """Whether the lower bounds on the partial ranks can only be the true ones.

    Increments never grow, so a partial rank is at most the last one plus the last increment; when
    the first increment is the rank of B and each partial rank is as large as that bound or as the
    total, nothing is left open.
    """
    if not stairs:
        return True
    if stairs[0] != inputs and stairs[0] != dimension and stairs[0] != rank_of_inputs():
        return False
    total, last = stairs[0], stairs[0]
    for rank in stairs[1:]:
        total += rank
        if rank != last and total != dimension:
            return False
        last = rank
    return True


def modes_of(
    blocks: Iterable[tuple[Part, Polynomial]], A: RationalMatrix, sampling_period: Any
) -> tuple[Mode, ...]:
    """Return the roots of part polynomials as modes, with exact stability.

    On the boundary of stability the Jordan structure of the whole A decides: a repeated boundary
    mode with too few eigenvectors grows.
    """
    found: list[Mode] = []
    for part, polynomial in blocks:
        if len(polynomial) == 1:
            continue
        for root, factor, stability in judge(
            polynomial, sampling_period, lambda f: _is_semisimple(A, f)
        ):
            found.append(
                Mode(
                    value=root.value,
                    radius=root.radius,
                    part=part,
                    multiplicity=root.multiplicity,
                    stability=stability,
                    time_constant=time_constant(root.value, sampling_period),
                    damping=damping(root.value, sampling_period),
                    polynomial=factor,
                )
            )
    return tuple(found)


def _is_semisimple(A: RationalMatrix, factor: Polynomial) -> bool:
    """Whether the roots of an irreducible factor have as many eigenvectors as copies.

    f(A) has the same rank as f(A)^2 exactly when no Jordan block of a root of f is larger than 1.
    """
    power = RationalMatrix.identity(A.shape[0])
    value = RationalMatrix.zeros(*A.shape)
    for coefficient in reversed(factor):
        value = value + power.scaled(coefficient)
        power = power @ A
    return value.rank() == (value @ value).rank()


class ExactPath:
    """Rational arithmetic; refuses floats.

    Parameters
    ----------
    budget : float or None
        Seconds after which the path gives up with a `BudgetError`; None for no limit.
    """

    is_exact = True
    kind = Kind.RATIONAL

    def __init__(self, budget: float | None = None) -> None:
        self.clock = Clock(budget)

    def open(self, model: Realization) -> OpenedExact:
        return OpenedExact(self.admit(model), self.clock)

    def admit(self, source: Any) -> Any:
        source._refuse_constants(
            "the exact path takes rational numbers only. Use realize.multiprecision, which takes "
            "any number of digits of it"
        )
        if source.kind != Kind.RATIONAL:
            raise InexactInputError(
                f"found a model with floats ({source!r}), wanted a rational one. Say which exact "
                f'model you mean: model.read("{Reading.STORED}"), model.read("{Reading.WRITTEN}") '
                f'or model.read("{Reading.INTENDED}")'
            )
        return source

    def array(self, values: Sequence[Sequence[Any]], shape: tuple[int, int]) -> Array:
        result = np.empty(shape, dtype=object)
        for i, row in enumerate(values):
            for j, value in enumerate(row):
                result[i, j] = Fraction(value)
        return result

    def common_denominator(
        self, denominators: Sequence[Polynomial]
    ) -> tuple[Polynomial, tuple[Polynomial, ...]]:
        """Return the least common multiple."""
        monic = [polynomials.monic(denominator) for denominator in denominators]
        common: Polynomial = polynomials.ONE
        for denominator in monic:
            shared = polynomials.gcd(common, denominator)
            common = polynomials.multiply(common, polynomials.divide_exact(denominator, shared))
        return common, tuple(polynomials.divide_exact(common, denominator) for denominator in monic)

    def multiply(self, first: Polynomial, second: Polynomial) -> Polynomial:
        return polynomials.multiply(first, second)

    def difference(self, first: Fraction, second: Fraction) -> Fraction:
        return first - second

    def shared_factor(
        self, numerator: Polynomial, denominator: Polynomial, where: str
    ) -> SharedFactor:
        common = polynomials.gcd(numerator, denominator)
        return SharedFactor(
            common=common,
            numerator=polynomials.divide_exact(numerator, common),
            denominator=polynomials.divide_exact(denominator, common),
            decisions=(),
        )

    def factors(self, polynomial: Polynomial) -> tuple[tuple[Polynomial, int], ...]:
        return polynomials.factor(polynomial)

    def judged(
        self, factor: Polynomial, whole: Polynomial, period: Any
    ) -> list[tuple[complex, Stability]]:
        multiplicities = dict(polynomials.factor(whole))
        # The companion form has one eigenvector for each eigenvalue, so a repeated pole is
        # defective.
        judged = judge(factor, period, lambda f: multiplicities[f] == 1)
        return [(root.value, stability) for root, _, stability in judged]

    def sequence(self, parameters: Array) -> Sequenced:
        """Realize a finite sequence with the fewest states, exactly.

        Rows of the Hankel matrix are taken in order; a row counts as dependent when its known
        part is a combination of the known parts of the rows taken before it (B. L. Ho and R. E.
        Kalman 1966; A. J. Tether 1970, Construction of minimal linear state-variable models from
        finite input-output data, IEEE Trans. AC-15). The realization is in observer coordinates:
        the state holds the rows taken, A shifts them.
        """
        count, outputs, inputs = parameters.shape
        flat = [fmpq(q.numerator, q.denominator) for q in parameters.ravel().tolist()]

        def known(block: int, output: int, columns: int) -> list[fmpq]:
            """Return row (block, output) of the Hankel matrix, the first block columns of it."""
            width = inputs
            return [
                flat[((block + j) * outputs + output) * width + i]
                for j in range(columns)
                for i in range(width)
            ]

        taken: list[tuple[int, int]] = []
        relation: dict[tuple[int, int], list[fmpq]] = {}
        open_outputs = list(range(outputs))
        decisions: list[RankDecision] = []
        for block in range(count):
            columns = count - block
            before = len(taken)
            for output in tuple(open_outputs):
                row = known(block, output, columns)
                basis = [known(b, o, columns) for b, o in taken]
                solution = _combination(basis, row)
                if solution is None:
                    taken.append((block, output))
                else:
                    relation[block, output] = solution
                    open_outputs.remove(output)
            decisions.append(
                RankDecision(
                    where=f"hankel, block row {block + 1}",
                    shape=(outputs, columns * inputs),
                    rank=len(taken) - before,
                    scale=0.0,
                    cutoff=0.0,
                    smallest_kept=None,
                    largest_dropped=None,
                )
            )
        order = len(taken)
        place = {row: k for k, row in enumerate(taken)}

        def expressed(row: tuple[int, int]) -> list[Any]:
            if row in place:
                return [int(k == place[row]) for k in range(order)]
            # Past the data every row is free; zero is as good as any, and is the simplest.
            given = relation.get(row, [])
            return given + [0] * (order - len(given))

        A = [value for b, o in taken for value in expressed((b + 1, o))]
        B = [value for b, o in taken for value in known(b, o, 1)] if count else []
        C = [value for o in range(outputs) for value in expressed((0, o))]
        return Sequenced(
            A=RationalMatrix.from_entries(order, order, A).to_array(),
            B=RationalMatrix.from_entries(order, inputs, B).to_array(),
            C=RationalMatrix.from_entries(outputs, order, C).to_array(),
            decisions=tuple(decisions),
        )


def _combination(basis: list[list[fmpq]], row: list[fmpq]) -> list[fmpq] | None:
    """Return coefficients with sum(coefficient * basis row) = row, or None."""
    if not basis:
        return [] if all(value == 0 for value in row) else None
    width = len(row)
    # Columns are equations: [basis^T | row^T] reduced; a pivot in the last column means none.
    entries = [value for j in range(width) for value in (*(b[j] for b in basis), row[j])]
    reduced, rank = RationalMatrix.from_entries(width, len(basis) + 1, entries).matrix.rref()
    solution: list[fmpq] = [fmpq(0)] * len(basis)
    column = 0
    for i in range(rank):
        while reduced[i, column] == 0:
            column += 1
        if column == len(basis):
            return None
        solution[column] = reduced[i, len(basis)]
        column += 1
    return solution
