"""Why a mode is hidden: by the zero pattern, or by the values."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any, Final, TypeVar

import numpy as np
from scipy.sparse import csr_array
from scipy.sparse.csgraph import maximum_bipartite_matching

from realize import polynomials
from realize.arithmetic.exact import OpenedExact
from realize.arithmetic.multiprecision import OpenedMultiprecision
from realize.arithmetic.rational import RationalMatrix
from realize.arithmetic.scaling import scaling_of
from realize.model.realization import Realization
from realize.polynomials import Polynomial
from realize.results import Mode, Part
from realize.tolerance import SAME_MODE

__all__ = ["Coordinates", "by_pattern", "explained", "explained_from_decimals"]

Array = np.ndarray[Any, Any]
Place = TypeVar("Place")
"""Where modes lie: a factor that they are roots of, or a value."""

_EXACT_VECTORS: Final = 32
"""Up to this order vectors of rational modes are exact; beyond, they are computed in doubles."""

_AT_ZERO: Final[Polynomial] = (Fraction(1), Fraction(0))

_PHASE: Final = 1e-6
"""Share of a component below which its imaginary, or its real, part is rounding."""

_SAME: Final = 1e-12
"""Distance over the norm of A within which two modes computed with many digits are one."""

_NEGLIGIBLE: Final = 1e-9
"""Components of a computed vector below this share of the largest are not shown."""


def explained(
    modes: Iterable[Mode], opened: OpenedExact, coordinates: Coordinates | None
) -> tuple[Mode, ...]:
    """Return hidden modes with their reasons.

    ``coordinates``: where the model examined stands in other coordinates than the user's, the way
    back to them.

    Structural: the mode belongs to states that no path of non-zero entries joins to an input (or
    to an output), or to a pattern with too few ways in (or out), so no change of the values would
    show it (Lin 1974, Structural controllability, IEEE Trans. Automatic Control 19). By value: it
    comes with a left vector w, w A = z w and w B = 0 (or a right vector v, A v = z v and C v = 0),
    in named states.
    """

    def roots(states: list[int]) -> Iterable[tuple[Polynomial, int]]:
        # Every root of a factor is a mode of its own; one root of each part tells how many.
        return polynomials.factor(opened.A.take(states, states).characteristic_polynomial())

    def is_at(mode: Mode, factor: Polynomial) -> bool:
        return mode.polynomial == factor

    modes = tuple(modes)
    structural: set[int] = set()
    if coordinates is None:  # in others no pattern is the user's
        structural = _structural(modes, opened.model, roots, is_at, _AT_ZERO)
    return _told(modes, opened.model, (opened.A, opened.B, opened.C), structural, coordinates)


def explained_from_decimals(
    modes: Iterable[Mode], opened: OpenedMultiprecision, coordinates: Coordinates | None
) -> tuple[Mode, ...]:
    """Return hidden modes with their reasons, as `explained`, from computed modes.

    The zero pattern is as exact as there; which mode belongs to which states is told by values
    that agree to `_SAME`, and vectors are computed in doubles.
    """
    model = opened.model
    A, B, C = (RationalMatrix.from_array(M) for M in model.matrices()[:3])
    size = float(np.linalg.norm(A.rounded()))
    unit = opened.numbers.context.ldexp(1, opened.scaling.time)

    def roots(states: list[int]) -> Iterable[tuple[complex, int]]:
        block = opened.A[np.ix_(states, states)]
        return [(complex(value * unit), copies) for value, copies, _ in opened.eigenvalues(block)]

    def is_at(mode: Mode, value: complex) -> bool:
        return abs(mode.value - value) <= _SAME * size

    modes = tuple(modes)
    structural: set[int] = set()
    if coordinates is None:
        structural = _structural(modes, model, roots, is_at, 0j)
    return _told(modes, model, (A, B, C), structural, coordinates)


def by_pattern(modes: Iterable[Mode], model: Realization) -> tuple[Mode, ...]:
    """Return modes computed in doubles, with the reason of those that the zero pattern hides.

    Needs neither the exact path nor many digits, so it serves models that are too large for both.
    Values agree to `SAME_MODE`; what is not structural is left without a reason.
    """
    modes = tuple(modes)
    near = SAME_MODE * float(np.abs(model.A).max(initial=0.0))

    def roots(states: list[int]) -> Iterable[tuple[complex, int]]:
        values = np.linalg.eigvals(np.asarray(model.A[np.ix_(states, states)], dtype=float))
        return [(value, int((np.abs(values - value) <= near).sum())) for value in values.tolist()]

    def is_at(mode: Mode, value: complex) -> bool:
        return abs(mode.value - value) <= near

    counted = [
        replace(
            mode,
            multiplicity=sum(m.part is mode.part and is_at(m, mode.value) for m in modes),
        )
        for mode in modes
    ]
    structural = _structural(counted, model, roots, is_at, 0j)
    return tuple(
        replace(mode, why="structural") if k in structural else mode for k, mode in enumerate(modes)
    )


def _told(
    modes: Sequence[Mode],
    model: Realization,
    matrices: tuple[RationalMatrix, RationalMatrix, RationalMatrix],
    structural: set[int],
    coordinates: Coordinates | None,
) -> tuple[Mode, ...]:
    """Return modes with the reason in words, and the vector where it is by value."""
    A, B, C = matrices
    names = (model if coordinates is None else coordinates.model).state_names
    found: list[Mode] = []
    for index, mode in enumerate(modes):
        by_output = mode.part is Part.CONTROLLABLE_UNOBSERVABLE
        if index in structural:
            found.append(replace(mode, why="structural"))
            continue
        # Transposed, a left vector is a right one of the dual.
        pair = (A, C) if by_output else (A.T, B.T)
        vector = _vector(*pair, mode)
        if coordinates is not None:
            vector = coordinates.back(vector, by_output)
        shown = tuple((name, value) for name, value in zip(names, vector, strict=True) if value)
        side = "right" if by_output else "left"
        found.append(
            replace(mode, why=f"by value, {side} vector {_combination(shown)}", vector=shown)
        )
    return tuple(found)


@dataclass(frozen=True, slots=True)
class Coordinates:
    """The user's model, and T with the user's state = T @ state of the model examined."""

    model: Realization
    T: Array

    def back(self, vector: Sequence[Any], by_output: bool) -> Sequence[Any]:
        """Return a right vector (by output) or a left one in the user's states."""
        floats = np.array([complex(value) for value in vector])
        moved = self.T @ floats if by_output else np.linalg.solve(self.T.T, floats)
        return _cleaned(_levelled(moved).tolist())


def _levelled(vector: Array) -> Array:
    """Return the vector with its largest component 1 and what is rounding noise left out."""
    vector = np.asarray(vector / vector[np.argmax(np.abs(vector))], dtype=complex)
    for part in (vector.real, vector.imag):
        part[np.abs(part) < _NEGLIGIBLE] = 0.0
    return vector


def _cleaned(vector: Sequence[complex]) -> list[complex | float]:
    """Return the vector over its first largest component, phases of rounding size left out."""
    largest = max(map(abs, vector))
    lead = next(value for value in vector if abs(value) >= (1.0 - _PHASE) * largest)
    found: list[complex | float] = []
    for value in vector:
        share = value / lead
        if abs(share.imag) <= _PHASE * abs(share):
            found.append(share.real)
        else:
            found.append(
                complex(share.real if abs(share.real) > _PHASE * abs(share) else 0.0, share.imag)
            )
    return found


def _structural(
    modes: Sequence[Mode],
    model: Realization,
    roots: Callable[[list[int]], Iterable[tuple[Place, int]]],
    is_at: Callable[[Mode, Place], bool],
    zero: Place,
) -> set[int]:
    """Return the indices of the modes that the zero pattern alone hides.

    The states cut off from the inputs (the outputs; both) hold some copies of a root. When those
    are all the copies that are not controllable (not observable; neither), no other copy could be
    meant. ``roots`` returns those of the block of some states, with their copies.
    """
    A, B, C = (np.asarray(M != 0) for M in model.matrices()[:3])
    unreached, unseen = _cut_off(A, np.any(B, axis=1)), _cut_off(A.T, np.any(C, axis=0))
    neither = Part.UNCONTROLLABLE_UNOBSERVABLE
    not_reached = (Part.UNCONTROLLABLE_OBSERVABLE, neither)
    not_seen = (Part.CONTROLLABLE_UNOBSERVABLE, neither)

    def covered(parts: tuple[Part, ...], place: Place, copies: int) -> set[int]:
        here = [k for k, m in enumerate(modes) if m.part in parts and is_at(m, place)]
        hidden = {modes[k].part: modes[k].multiplicity for k in here}
        return set(here) if sum(hidden.values()) <= copies else set()

    found: set[int] = set()
    for states, parts in (
        (unreached, not_reached),
        (unseen, not_seen),
        ([i for i in unreached if i in set(unseen)], (neither,)),
    ):
        for place, copies in roots(states) if states else ():
            found |= covered(parts, place, copies)
    found |= covered(not_reached, zero, _missing(A, B))
    found |= covered(not_seen, zero, _missing(A.T, C.T))
    return found


def _missing(A: Array, B: Array) -> int:
    """Return how many modes at zero the pattern hides, too few entries leading into the states.

    The pattern of [A B] has rank n for almost all values of its entries, or for none; what is
    missing are modes at zero (Lin 1974, the dilation half).
    """
    pattern = csr_array(np.hstack([A, B]).astype(np.int8))
    return int(A.shape[0] - np.count_nonzero(maximum_bipartite_matching(pattern) >= 0))


def _cut_off(pattern: Array, first: Array) -> list[int]:
    """Return the states that no path of non-zero entries reaches from the first ones."""
    reached = np.array(first, dtype=bool)
    frontier = reached
    while frontier.any():
        frontier = pattern[:, frontier].any(axis=1) & ~reached
        reached = reached | frontier
    return list(np.flatnonzero(~reached).tolist())


def _vector(A: RationalMatrix, C: RationalMatrix, mode: Mode) -> Sequence[Any]:
    """Return v with A v = z v and C v = 0, its largest component 1.

    Exact where z is rational; else computed in doubles, from the least singular value.
    """
    order = A.shape[0]
    factor = mode.polynomial
    if factor is not None and len(factor) == 2 and order <= _EXACT_VECTORS:
        value = RationalMatrix.identity(order).scaled(-factor[1])
        stacked = RationalMatrix.block([[A - value], [C]])
        exact = _null_vector(stacked)
        largest = max(exact, key=abs)
        return [component / largest for component in exact]
    # In units of its own: with states in very unlike units, a small component may be essential.
    scaling = scaling_of(A.rounded(), np.zeros((order, 0)), C.rounded())
    point = mode.value * math.ldexp(1.0, -scaling.time)
    pencil = np.vstack([scaling.A - point * np.eye(order), scaling.C])
    vector = _levelled(np.linalg.svd(pencil)[2][-1].conj())
    units = np.exp2(scaling.states.astype(float))
    return _cleaned([v * u for v, u in zip(vector.tolist(), units.tolist(), strict=True)])


def _null_vector(matrix: RationalMatrix) -> list[Fraction]:
    """Return one non-zero vector that the matrix takes to zero."""
    reduced, rank = matrix.matrix.rref()
    table = RationalMatrix(reduced).to_array()
    width = matrix.shape[1]
    pivots = [next(j for j in range(width) if table[i, j] != 0) for i in range(rank)]
    free = next(j for j in range(width) if j not in pivots)
    vector = [Fraction(0)] * width
    vector[free] = Fraction(1)
    for i, pivot in enumerate(pivots):
        vector[pivot] = -table[i, free]
    return vector


def _combination(shown: Sequence[tuple[str, Any]]) -> str:
    """Return a combination of named states, the larger components first, in few words."""
    # Rounded, so that components of one size keep the order of the states.
    ordered = sorted(shown, key=lambda item: -float(f"{float(abs(item[1])):.6g}"))
    terms = [f"{_number(value)} {name}" for name, value in ordered[:4]]
    rest = len(ordered) - 4
    return ", ".join(terms) + (f" and {rest} more" if rest > 0 else "")


def _number(value: Any) -> str:
    if isinstance(value, complex):
        if value.imag:
            return f"({value.real:.3g}{value.imag:+.3g}j)"
        value = value.real
    text = str(value) if isinstance(value, Fraction) else ""
    return text if text and len(text) <= 9 else f"{float(value):.4g}"
