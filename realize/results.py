"""Frozen records that the forms return.

Nothing here computes. A field that is costly is a `Deferred`: it is computed at first access and
kept, and it is computed before a record is pickled.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass, field
from enum import StrEnum
from typing import Any, Generic, TypeVar

import numpy as np

from realize.entries import spell_fraction
from realize.model.realization import Realization
from realize.model.transfer import TransferMatrix
from realize.polynomials import Polynomial
from realize.stability import Stability

__all__ = [
    "Cancellation",
    "Deferred",
    "Echelon",
    "Evidence",
    "KalmanParts",
    "Mode",
    "NearFactor",
    "Part",
    "RankDecision",
    "Reduction",
    "RemovedModes",
    "ResponseChange",
    "Side",
    "Staircase",
    "spelled",
]

Array = np.ndarray[Any, Any]
T = TypeVar("T")


class Side(StrEnum):
    """Which side of a model a question is about."""

    INPUT = "input"
    OUTPUT = "output"


class Part(StrEnum):
    """The four parts of the Kalman decomposition, in the order of the blocks."""

    CONTROLLABLE_UNOBSERVABLE = "controllable, unobservable"
    CONTROLLABLE_OBSERVABLE = "controllable, observable"
    UNCONTROLLABLE_UNOBSERVABLE = "uncontrollable, unobservable"
    UNCONTROLLABLE_OBSERVABLE = "uncontrollable, observable"

    @property
    def hidden(self) -> bool:
        """Whether the transfer matrix does not show the modes of this part."""
        return self is not Part.CONTROLLABLE_OBSERVABLE


class Deferred(Generic[T]):
    """A value computed at first access, once."""

    __slots__ = ("_compute", "_value")

    def __init__(self, compute: Callable[[], T]) -> None:
        self._compute: Callable[[], T] | None = compute

    @classmethod
    def known(cls, value: T) -> Deferred[T]:
        """Wrap a value that needs no computing."""
        kept = cls.__new__(cls)
        kept._compute = None
        kept._value = value
        return kept

    def get(self) -> T:
        """Return the value, computing it if this is the first time."""
        if self._compute is not None:
            self._value: T = self._compute()
            self._compute = None
        return self._value

    def __reduce__(self) -> tuple[Any, ...]:
        return (Deferred.known, (self.get(),))


@dataclass(frozen=True, kw_only=True, slots=True)
class RankDecision:
    """One place where a path said "this many are not zero".

    Attributes
    ----------
    where : str
        The stage, such as ``"reached, stage 2"``.
    shape : tuple of int
        Shape of the block whose rank was decided.
    rank : int
        The rank taken.
    scale, cutoff : float
        Frobenius norm of the whole scaled model, and the number compared with; 0.0 on the exact
        path, which compares with nothing.
    smallest_kept, largest_dropped : float or None
        The singular values on both sides of the decision; None where there is none.
    exact_rank : dict
        Reading -> the exact rank at the same place; filled by the paired examination.
    """

    where: str
    shape: tuple[int, int]
    rank: int
    scale: float
    cutoff: float
    smallest_kept: float | None
    largest_dropped: float | None
    exact_rank: dict[str, int] = field(default_factory=dict)

    def to_dict(self) -> dict[str, Any]:
        """Return the decision as plain JSON values."""
        return {
            "where": self.where,
            "shape": list(self.shape),
            "rank": self.rank,
            "scale": self.scale,
            "cutoff": self.cutoff,
            "smallest_kept": self.smallest_kept,
            "largest_dropped": self.largest_dropped,
            "exact_rank": dict(self.exact_rank),
        }


@dataclass(frozen=True, kw_only=True, slots=True)
class Mode:
    """One eigenvalue of the state matrix, with what is known of it.

    Attributes
    ----------
    value : complex
        Double closest to the eigenvalue, each part rounded (units: 1 / time; dimensionless in
        discrete time).
    radius : float
        The eigenvalue lies within this distance of ``value``: proved on the exact path, ``inf``
        on the floating path, which proves nothing.
    part : Part
        Which part of the Kalman decomposition holds it.
    multiplicity : int
        How often it occurs in that part.
    stability : Stability
        What it does when left alone.
    time_constant : float or None
        Time to fall (or, negative, to grow) by a factor e, in the time unit of the model.
    damping : float or None
        Damping ratio, 1 for a real stable mode.
    doubling_time : float or None
        Time in which a growing mode doubles, in the same unit; None for any other.
    polynomial : tuple of Fraction, or None
        Monic irreducible factor it is a root of; None on the floating path.
    why : str or None
        For a hidden mode of an examination: "structural", when the zero pattern alone hides it,
        or "by value", with the left or right vector in named states.
    vector : tuple of (str, number)
        That vector: the states it involves, the largest component 1.
    lost : str or None
        For a hidden mode of a connected model: whether it was hidden in a block before, or how the
        connection hid it.
    inputs, outputs : tuple of str, or None
        Names of the inputs that reach the mode and of the outputs that see it, each taken alone;
        None where that was not computed.
    sensitivity : float or None
        In an examination: how far the uncertainty of the entries of A, or one ulp of each where
        none was given, can move the value, to first order; inf where nothing of first order
        bounds it (units: 1 / time; none in discrete time).
    """

    value: complex
    radius: float
    part: Part
    multiplicity: int
    stability: Stability
    time_constant: float | None
    damping: float | None
    polynomial: Polynomial | None = None
    why: str | None = None
    vector: tuple[tuple[str, Any], ...] = ()
    lost: str | None = None
    inputs: tuple[str, ...] | None = None
    outputs: tuple[str, ...] | None = None
    sensitivity: float | None = None

    @property
    def doubling_time(self) -> float | None:
        """Time in which a growing mode doubles: ln 2 times the time in which it grows e-fold."""
        if self.time_constant is None or self.time_constant >= 0.0:
            return None
        return -math.log(2.0) * self.time_constant

    def to_dict(self) -> dict[str, Any]:
        """Return the mode as plain JSON values."""
        return {
            "real": self.value.real,
            "imaginary": self.value.imag,
            "radius": self.radius if self.radius != float("inf") else None,
            "part": str(self.part),
            "multiplicity": self.multiplicity,
            "stability": str(self.stability),
            "time_constant": self.time_constant,
            "doubling_time": self.doubling_time,
            "damping": self.damping,
            "polynomial": None if self.polynomial is None else spelled(self.polynomial),
            "why": self.why,
            "lost": self.lost,
            "inputs": None if self.inputs is None else list(self.inputs),
            "outputs": None if self.outputs is None else list(self.outputs),
            "sensitivity": self.sensitivity if self.sensitivity != float("inf") else None,
        }


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class RemovedModes:
    """What a reduction removed.

    Attributes
    ----------
    count : int
        How many states were removed.
    polynomial : tuple of Fraction, or None
        Characteristic polynomial of what was removed, monic; None on the floating path.
    modes : tuple of Mode
        The modes removed, with their stability.
    """

    count: int
    polynomial: Polynomial | None
    _modes: Deferred[tuple[Mode, ...]]

    @property
    def modes(self) -> tuple[Mode, ...]:
        """The modes removed; computed at first access."""
        return self._modes.get()

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, RemovedModes):
            return NotImplemented
        mine, theirs = ((r.count, r.polynomial, r.modes) for r in (self, other))
        return mine == theirs

    __hash__ = None  # type: ignore[assignment]  # compared by value


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Staircase:
    """A model in staircase form.

    Attributes
    ----------
    model : Realization
        The model in the new coordinates.
    transformation : array (n, n)
        T, with state = T @ new state. On the floating path a scaling by powers of two times an
        orthogonal matrix.
    stairs : tuple of int
        Rank increments of [B, AB, A^2 B, ...] (of the dual for side "output"), without the
        closing zero.
    side : Side
        "input": the reachable part comes first. "output": the observable part comes first.
    dimension : int
        Dimension of the reachable, or observable, part.
    """

    model: Realization
    transformation: Array
    stairs: tuple[int, ...]
    side: Side
    dimension: int
    _decisions: Deferred[tuple[RankDecision, ...]]

    @property
    def decisions(self) -> tuple[RankDecision, ...]:
        """Every rank decision taken, in order."""
        return self._decisions.get()

    def __repr__(self) -> str:
        part = "reachable" if self.side is Side.INPUT else "observable"
        return f"<Staircase: {part} {self.dimension} of {self.model.order}, stairs {self.stairs}>"


@dataclass(frozen=True, kw_only=True, slots=True)
class ResponseChange:
    """The largest change of a frequency response.

    Attributes
    ----------
    size : float
        2-norm of the change of the transfer matrix where it is largest.
    relative : float
        The same over the largest 2-norm of the transfer matrix.
    frequency : float
        Where: radians per unit of time.
    """

    size: float
    relative: float
    frequency: float

    def to_dict(self) -> dict[str, float]:
        """Return the record as plain JSON values."""
        return {"size": self.size, "relative": self.relative, "frequency": self.frequency}


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Echelon:
    """A basis of a subspace: independent columns, the identity in the rows `pivots`.

    Attributes
    ----------
    size : int
        Number of rows.
    pivots : tuple of int, of length k
    rest : array (size - k, k) of Fraction
        The other rows.
    """

    size: int
    pivots: tuple[int, ...]
    rest: Array


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Evidence:
    """What a reduction found on its way, for a certificate of it.

    Attributes
    ----------
    model : Realization, order n
        What was reduced; the realization of the transfer matrix where the source was one.
    state_map : array (order, n), or None
        Reduced state = state_map @ state of ``model``, on the floating path.
    reached : Echelon, or None
        Basis V (n, k) of what the inputs reach, on the exact path.
    seen : Echelon, or None
        Basis (k, order) of what the outputs see of it, in the dual: reduced state = U w for the
        state V w, with U its transpose.
    modulus : int
        A prime modulo which the reduced model is seen to be reachable and observable.
    """

    model: Realization
    state_map: Array | None = None
    reached: Echelon | None = None
    seen: Echelon | None = None
    modulus: int = 0


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Reduction:
    """A minimal realization and what was removed to reach it.

    Attributes
    ----------
    model : Realization
        The minimal realization, of order `order`.
    order : int
        Its number of states.
    source_order : int
        Number of states of the realization that was reduced.
    """

    model: Realization
    order: int
    source_order: int
    _removed: Deferred[RemovedModes]
    _state_map: Deferred[Array | None]
    _decisions: Deferred[tuple[RankDecision, ...]]
    _condition: Deferred[float | None]
    _backward_error: Deferred[float | None] = field(default_factory=lambda: Deferred.known(None))
    _response_change: Deferred[ResponseChange | None] = field(
        default_factory=lambda: Deferred.known(None)
    )
    _source: Realization | TransferMatrix | None = None
    _evidence: Deferred[Evidence | None] = field(default_factory=lambda: Deferred.known(None))

    @property
    def backward_error(self) -> float | None:
        """Relative size of the change of the model that makes the reduction exact.

        Frobenius norm over that of [A B; C 0], in the user's units, for all hidden modes at once.
        0.0 when nothing was removed. Computed at first access; None off the floating path.
        """
        return self._backward_error.get()

    @property
    def response_change(self) -> ResponseChange | None:
        """The largest change of the frequency response; None off the floating path."""
        return self._response_change.get()

    @property
    def removed(self) -> RemovedModes:
        """The modes removed; computed at first access."""
        return self._removed.get()

    @property
    def state_map(self) -> Array | None:
        """Array (order, n): reduced state = state_map @ state on the reachable part.

        None when the source was not a state model.
        """
        return self._state_map.get()

    @property
    def state_map_condition(self) -> float | None:
        """2-norm condition number of `state_map`; None on the exact path."""
        return self._condition.get()

    @property
    def decisions(self) -> tuple[RankDecision, ...]:
        """Every rank decision taken, in order."""
        return self._decisions.get()

    def __repr__(self) -> str:
        return f"<Reduction: order {self.source_order} to {self.order}, {self.model.kind}>"


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class KalmanParts:
    """The Kalman decomposition.

    Attributes
    ----------
    model : Realization
        The model in the new coordinates, blocks in the order of `Part`.
    transformation : array (n, n)
        T, with state = T @ new state.
    dimensions : dict
        Part -> number of states.
    """

    model: Realization
    transformation: Array
    dimensions: dict[str, int]
    _polynomials: Deferred[dict[str, tuple[Any, ...]]]
    _decisions: Deferred[tuple[RankDecision, ...]]

    @property
    def polynomials(self) -> dict[str, tuple[Any, ...]]:
        """Part -> monic characteristic polynomial, descending powers."""
        return self._polynomials.get()

    @property
    def decisions(self) -> tuple[RankDecision, ...]:
        """Every rank decision taken, in order."""
        return self._decisions.get()

    def __repr__(self) -> str:
        return f"<KalmanParts: {', '.join(f'{k}: {v}' for k, v in self.dimensions.items())}>"


@dataclass(frozen=True, kw_only=True, slots=True)
class NearFactor:
    """Poles and zeros that a small change of the coefficients makes cancel, and that do not.

    Attributes
    ----------
    output, input : int
        Which entry of the transfer matrix (0-based).
    poles, zeros : tuple of complex
        What would be dropped, as many of each; a complex pair with both its members.
    factor : tuple of Fraction
        Monic, descending powers: the factor that `witness` has more in common.
    change : float
        Relative size of the smallest change found that makes the factor common: the change of
        each coefficient over the size at which it counts as large (its own; where it is zero or
        small by accident, what its neighbours call for), as a root mean square for the numerator
        and for the denominator, then as one 2-norm. A local minimum, all coefficients free. It
        depends neither on the unit of time nor on the gain.
    least_change : float
        No smaller change makes a common factor of this degree, whichever it is. Zero where
        doubles cannot tell.
    witness : TransferMatrix
        Exact, one input, one output: the fraction changed so that the factor cancels exactly.
        Within the uncertainty where `allowed` is "yes"; nearest in standard deviations where
        these were given; else nearest in the sense of `change`.
    response_change : ResponseChange
        The largest change of the frequency response, and where, if the pairs are dropped and the
        gain kept at zero frequency or at infinity, whichever changes less; infinite when a pole
        that would be dropped lies on the boundary of stability.
    stability : Stability
        Of the poles: the worst of them.
    allowed : str or None
        Whether the uncertainty allows it: "yes", with `witness` within it, entry by entry; "no",
        when no pair within it has a common factor of this degree; "cannot tell". None without
        bounds.
    deviations : float or None
        For standard deviations and a covariance: distance to the nearest fraction in which the
        factor cancels, in standard deviations (Mahalanobis distance). A local minimum.
    confidence : float or None
        At this confidence the region of the coefficients first touches a fraction in which the
        factor cancels: chi-squared with the degree of the factor, at `deviations` squared. Above
        it pole and zero overlap, below it they are apart.
    """

    output: int
    input: int
    poles: tuple[complex, ...]
    zeros: tuple[complex, ...]
    factor: Polynomial
    change: float
    least_change: float
    witness: TransferMatrix
    response_change: ResponseChange
    stability: Stability
    allowed: str | None = None
    deviations: float | None = None
    confidence: float | None = None

    @property
    def pole(self) -> complex:
        """The first of the poles."""
        return self.poles[0]

    @property
    def zero(self) -> complex:
        """The zero that would be dropped with it."""
        return self.zeros[0]

    @property
    def degree(self) -> int:
        """How many poles, and zeros, would be dropped."""
        return len(self.poles)

    def __repr__(self) -> str:
        return f"<NearFactor: degree {self.degree}, near {self.pole:.6g}, change {self.change:.3g}>"


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Cancellation:
    """What cancels in a transfer matrix, entry by entry.

    Attributes
    ----------
    transfer : TransferMatrix
        The coprime fractions.
    common : tuple
        Monic common factor, descending powers; for several entries a tuple of rows of them.
    decisions : tuple of RankDecision
        Rank decisions of the floating path, entry by entry; empty on the exact path.
    cautions : tuple of str
    """

    transfer: TransferMatrix
    common: tuple[Any, ...]
    decisions: tuple[RankDecision, ...]
    cautions: tuple[str, ...]
    _factors: Deferred[tuple[Any, ...]]
    _near: Deferred[tuple[NearFactor, ...]]

    @property
    def factors(self) -> tuple[Any, ...]:
        """Irreducible factors of `common` over the rationals, with multiplicity.

        Pairs (polynomial, multiplicity); for several entries a tuple of rows of such tuples. On
        the floating path the factors have degree one or two and come from computed roots.
        """
        return self._factors.get()

    @property
    def near(self) -> tuple[NearFactor, ...]:
        """Poles and zeros that a small change makes cancel, smallest change first.

        Each pair (or complex pair of pairs) alone, and for each degree from two on the nearest
        common factor of that degree.
        """
        return self._near.get()

    def __repr__(self) -> str:
        inputs, outputs = self.transfer.input_count, self.transfer.output_count
        if inputs == outputs == 1:
            return f"<Cancellation: common factor of degree {len(self.common) - 1}>"
        degrees = [[len(c) - 1 for c in row] for row in self.common]
        return f"<Cancellation: common factors of degrees {degrees}>"


def spelled(polynomial: Polynomial) -> list[str]:
    """Return exact coefficients as strings, however long."""
    return [spell_fraction(coefficient) for coefficient in polynomial]
