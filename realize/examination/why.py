"""Why a mode is hidden: by the zero pattern, or by the values."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any, Final

import numpy as np
from scipy.sparse import csr_array
from scipy.sparse.csgraph import maximum_bipartite_matching

from realize import polynomials
from realize.arithmetic.exact import OpenedExact
from realize.arithmetic.rational import RationalMatrix
from realize.arithmetic.scaling import scaling_of
from realize.model.realization import Realization
from realize.polynomials import Polynomial
from realize.results import Mode, Part
from realize.tolerance import SAME_MODE

__all__ = ["Coordinates", "by_pattern", "explained"]

Array = np.ndarray[Any, Any]

_EXACT_VECTORS: Final = 32
"""Up to this order vectors of rational modes are exact; beyond, they are computed in doubles."""

_UNREACHED: Final = (Part.UNCONTROLLABLE_OBSERVABLE, Part.UNCONTROLLABLE_UNOBSERVABLE)
_UNSEEN: Final = (Part.CONTROLLABLE_UNOBSERVABLE, Part.UNCONTROLLABLE_UNOBSERVABLE)

_AT_ZERO: Final[Polynomial] = (Fraction(1), Fraction(0))

_PHASE: Final = 1e-6
"""Share of a component below which its imaginary, or its real, part is rounding."""

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
    modes = tuple(modes)
    user = opened.model if coordinates is None else coordinates.model
    names = user.state_names
    structural = () if coordinates is not None else _structural(modes, opened)
    found: list[Mode] = []
    for mode in modes:
        by_output = mode.part is Part.CONTROLLABLE_UNOBSERVABLE
        if (mode.part, mode.polynomial) in structural:
            found.append(replace(mode, why="structural"))
            continue
        # Transposed, a left vector is a right one of the dual.
        pair = (opened.A, opened.C) if by_output else (opened.A.T, opened.B.T)
        vector = _vector(*pair, mode)
        if coordinates is not None:
            vector = coordinates.back(vector, by_output)
        shown = tuple((name, value) for name, value in zip(names, vector, strict=True) if value)
        side = "right" if by_output else "left"
        found.append(
            replace(mode, why=f"by value, {side} vector {_combination(shown)}", vector=shown)
        )
    return tuple(found)


def by_pattern(modes: Iterable[Mode], model: Realization) -> tuple[Mode, ...]:
    """Return computed hidden modes, with the reason of those that the zero pattern alone hides.

    Needs no exact path, so it serves models that are too large for it: graph reachability is
    exact, and which computed mode belongs to the states cut off is told by its value.
    """
    found = list(modes)
    A, B, C = (np.asarray(M != 0) for M in (model.A, model.B, model.C))
    near = SAME_MODE * float(np.abs(model.A).max(initial=0.0))
    for states, parts in _cuts(A, B, C):
        values = np.linalg.eigvals(np.asarray(model.A[np.ix_(states, states)], dtype=float))
        inside = [mode for mode in found if mode.part in parts]
        for k, mode in enumerate(found):
            if mode.part in parts:
                copies = np.count_nonzero(np.abs(values - mode.value) <= near)
                hidden = sum(abs(other.value - mode.value) <= near for other in inside)
                if hidden <= copies:
                    found[k] = replace(mode, why="structural")
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


def _structural(modes: Sequence[Mode], opened: OpenedExact) -> set[tuple[Part, Polynomial | None]]:
    """Return the parts and factors whose modes the zero pattern alone hides.

    The states cut off from the inputs (the outputs; both) hold some copies of a factor. When those
    are all the copies that are not controllable (not observable; neither), no other copy could be
    meant.
    """
    model = opened.model
    A, B, C = (np.asarray(M != 0) for M in (model.A, model.B, model.C))
    found: set[tuple[Part, Polynomial | None]] = set()
    for states, parts in _cuts(A, B, C):
        block = opened.A.take(states, states).characteristic_polynomial()
        for factor, copies in polynomials.factor(block):
            # Every root of a factor is a mode of its own; one root of each part tells how many.
            hidden = {
                mode.part: mode.multiplicity
                for mode in modes
                if mode.part in parts and mode.polynomial == factor
            }
            if sum(hidden.values()) <= copies:
                found |= {(part, factor) for part in hidden}
    found |= _dilations(modes, A, B, _UNREACHED)
    found |= _dilations(modes, A.T, C.T, _UNSEEN)
    return found


def _cuts(A: Array, B: Array, C: Array) -> list[tuple[list[int], tuple[Part, ...]]]:
    """Return the states cut off from the inputs, the outputs, or both, and the parts they are in.

    Takes the zero patterns; leaves out what holds no state.
    """
    unreached, unseen = _cut_off(A, np.any(B, axis=1)), _cut_off(A.T, np.any(C, axis=0))
    both = sorted(set(unreached) & set(unseen))
    cuts = (
        (unreached, _UNREACHED),
        (unseen, _UNSEEN),
        (both, (Part.UNCONTROLLABLE_UNOBSERVABLE,)),
    )
    return [(states, parts) for states, parts in cuts if states]


def _dilations(
    modes: Sequence[Mode], A: Array, B: Array, parts: tuple[Part, ...]
) -> set[tuple[Part, Polynomial | None]]:
    """Return the zero modes that the pattern hides because too few entries lead into the states.

    The pattern of [A B] has rank n for almost all values of its entries, or for none; what is
    missing are modes at zero (Lin 1974, the dilation half).
    """
    pattern = csr_array(np.hstack([A, B]).astype(np.int8))
    missing = A.shape[0] - int(np.count_nonzero(maximum_bipartite_matching(pattern) >= 0))
    hidden = {
        mode.part: mode.multiplicity
        for mode in modes
        if mode.part in parts and mode.polynomial == _AT_ZERO
    }
    return {(part, _AT_ZERO) for part in hidden} if sum(hidden.values()) <= missing else set()


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
