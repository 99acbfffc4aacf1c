"""Exact models with a known answer: what is planted, and coordinates changed without rounding.

Plain arithmetic on arrays of Fractions. It shares no code with the paths that the models test.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import reduce
from typing import Any

import numpy as np

from realize import polynomials
from realize.model.realization import Realization
from realize.polynomials import Polynomial
from realize.results import Part

__all__ = [
    "Chain",
    "Draft",
    "Planted",
    "Small",
    "companion_block",
    "plant",
    "shown",
    "times",
    "zeros",
]

Array = np.ndarray[Any, Any]
Chain = Mapping[str, Sequence[Polynomial]]
"""Part -> monic factors of the characteristic polynomial of that part."""
Small = Callable[[int, int], Array]
"""Draws a table of small numbers with the rows and columns asked for."""

_REACHED = (Part.CONTROLLABLE_OBSERVABLE, Part.CONTROLLABLE_UNOBSERVABLE)
_SEEN = (Part.CONTROLLABLE_OBSERVABLE, Part.UNCONTROLLABLE_OBSERVABLE)


@dataclass(frozen=True, kw_only=True, slots=True, eq=False, repr=False)
class Planted:
    """A model with what was planted in it.

    Attributes
    ----------
    model : Realization
        The rational model that was planted, or its entries rounded to doubles.
    exact : Realization
        The rational model that was planted.
    dimensions : dict
        Part -> number of states.
    polynomials : dict
        Part -> monic characteristic polynomial, descending powers.
    """

    model: Realization
    exact: Realization
    dimensions: dict[str, int]
    polynomials: dict[str, Polynomial]

    @property
    def order(self) -> int:
        """The order of a minimal realization."""
        return self.dimensions[Part.CONTROLLABLE_OBSERVABLE]

    @property
    def reachable(self) -> int:
        """The dimension of the reachable part."""
        return sum(self.dimensions[part] for part in _REACHED)

    @property
    def observable(self) -> int:
        """The dimension of the observable part."""
        return sum(self.dimensions[part] for part in _SEEN)

    def __repr__(self) -> str:
        held = ", ".join(f"{part}: {count}" for part, count in self.dimensions.items())
        return f"<Planted: {shown(self.model)}; {held}>"


def shown(model: Realization) -> str:
    """Return all numbers of a model on one line."""
    tables = ", ".join(
        f"{name}={_rows(matrix)}" for name, matrix in zip("ABCD", model.matrices(), strict=True)
    )
    period = model.sampling_period
    return tables if period is None else f"{tables}, sampling_period={period}"


def _rows(matrix: Array) -> str:
    return "[" + ", ".join(f"[{', '.join(map(str, row))}]" for row in matrix.tolist()) + "]"


def zeros(rows: int, columns: int) -> Array:
    """Return a table of exact zeros."""
    return np.full((rows, columns), Fraction(0), dtype=object)


def times(*factors: Iterable[Any]) -> Polynomial:
    """Return the product of polynomials; one when there is none."""
    read = (tuple(Fraction(c) for c in factor) for factor in factors)
    return reduce(polynomials.multiply, read, polynomials.ONE)


def companion_block(denominator: Polynomial) -> Array:
    """Return the companion matrix of a monic polynomial; its last state is the one driven.

    Driven there and seen at its first state it has no zeros.
    """
    size = len(denominator) - 1
    A = zeros(size, size)
    for i in range(size - 1):
        A[i, i + 1] = Fraction(1)
    for j in range(size):
        A[size - 1, j] = -Fraction(denominator[size - j])
    return A


class Draft:
    """A model being made, with what it hides: tables of Fractions, changed in place.

    Parameters
    ----------
    A, B, C, D : arrays (n, n), (n, m), (p, n), (p, m) of Fractions
    states : dict
        Part -> the states that it has; no coordinates may mix before this is said.
    polynomials : dict
        Part -> monic characteristic polynomial; a part that is left out has none.
    """

    def __init__(
        self,
        A: Array,
        B: Array,
        C: Array,
        D: Array,
        *,
        states: Mapping[str, Sequence[int]],
        polynomials: Mapping[str, Polynomial],
    ) -> None:
        self.A, self.B, self.C, self.D = A, B, C, D
        self.states = {str(part): tuple(places) for part, places in states.items()}
        self.dimensions = {str(part): len(states.get(part, ())) for part in Part}
        self.polynomials = {str(part): polynomials.get(part, times()) for part in Part}
        visible = list(states[Part.CONTROLLABLE_OBSERVABLE])
        #: A, B, C of the part that shows, in the coordinates in which it was written.
        self.visible = (A[np.ix_(visible, visible)].copy(), B[visible].copy(), C[:, visible].copy())

    @property
    def order(self) -> int:
        """How many states there are."""
        return int(self.A.shape[0])

    def permute(self, places: Sequence[int], signs: Sequence[int]) -> None:
        """Make the old state `places[k]`, with a sign, the new state k."""
        places = list(places)
        sign = np.array([Fraction(int(s)) for s in signs], dtype=object)
        self.A = self.A[np.ix_(places, places)] * sign[:, None] * sign
        self.B = self.B[places] * sign[:, None]
        self.C = self.C[:, places] * sign

    def add(self, i: int, j: int, factor: int | Fraction) -> None:
        """Change coordinates by an elementary matrix: x_i = new x_i + factor * new x_j."""
        factor = Fraction(factor)
        self.A[i] -= factor * self.A[j]
        self.A[:, j] += factor * self.A[:, i]
        self.B[i] -= factor * self.B[j]
        self.C[:, j] += factor * self.C[:, i]

    def scale(self, i: int, factor: int | Fraction) -> None:
        """Change the unit of a state: x_i = factor * new x_i."""
        factor = Fraction(factor)
        self.A[:, i] *= factor
        self.A[i] /= factor
        self.B[i] /= factor
        self.C[:, i] *= factor

    def reflect(self, vector: Sequence[int]) -> None:
        """Change coordinates by the reflection 1 - 2 v v' / v' v: orthogonal and rational."""
        v = np.array([Fraction(int(x)) for x in vector], dtype=object)
        twice = 2 * v / (v @ v)
        self.A -= np.outer(twice, v @ self.A)
        self.A -= np.outer(self.A @ v, twice)
        self.B -= np.outer(twice, v @ self.B)
        self.C -= np.outer(self.C @ v, twice)

    def exact(self, sampling_period: Any = None) -> Realization:
        """Return the rational model."""
        return Realization(self.A, self.B, self.C, self.D, sampling_period=sampling_period)

    def minimal(self, sampling_period: Any = None) -> Realization:
        """Return a minimal realization, in the coordinates in which the parts were written."""
        return Realization(*self.visible, self.D, sampling_period=sampling_period)

    def planted(self, *, sampling_period: Any = None, floating: bool = False) -> Planted:
        """Return the model with what is planted in it."""
        exact = self.exact(sampling_period)
        return Planted(
            model=exact.to_float() if floating else exact,
            exact=exact,
            dimensions=self.dimensions,
            polynomials=self.polynomials,
        )


def plant(
    chains: Sequence[Chain], *, small: Small, more_inputs: int = 0, more_outputs: int = 0
) -> Draft:
    """Return the direct sum of chains, in the coordinates of its parts.

    One chain is, in these coordinates,

    ``unobservable <- observable <- input`` (controllable) and
    ``observable <- autonomous`` (uncontrollable, observable),

    where every link is an all-pole companion block. All-pole blocks in series are controllable from
    their input and observable from their output whatever their polynomials are, so equal, multiple
    and defective eigenvalues may be planted at will, and the dimensions stay known.

    Parameters
    ----------
    chains : sequence of dict
        Each has its own input and output, in this order.
    small : callable
        Draws the feedthrough, the couplings that the block pattern allows, and the columns of the
        inputs and the rows of the outputs that are added.
    more_inputs, more_outputs : int
        How many are added.
    """
    place: dict[tuple[int, Part], range] = {}
    at = 0
    for part in Part:
        for number, chain in enumerate(chains):
            size = sum(len(p) - 1 for p in chain[part])
            place[number, part] = range(at, at + size)
            at += size
    order, inputs, outputs = at, len(chains) + more_inputs, len(chains) + more_outputs
    A, B, C = zeros(order, order), zeros(order, inputs), zeros(outputs, order)
    D = small(outputs, inputs)

    for number, chain in enumerate(chains):
        states = {part: place[number, part] for part in Part}
        for part in Part:
            A[np.ix_(states[part], states[part])] = companion_block(times(*chain[part]))
        # Signals run from an end (its first state) into the last state of the next block.
        driven = [states[part] for part in _REACHED if states[part]]
        if driven:
            B[driven[0][-1], number] = Fraction(1)
        if len(driven) == 2:
            A[driven[1][-1], driven[0][0]] = Fraction(1)
        seen = [states[part] for part in _SEEN if states[part]]
        if seen:
            C[number, seen[0][0]] = Fraction(1)
        if len(seen) == 2:
            A[seen[0][-1], seen[1][0]] = Fraction(1)

    def fill(target: Array, rows: list[int], columns: list[int]) -> None:
        target[np.ix_(rows, columns)] = small(len(rows), len(columns))

    def of(*parts: Part) -> list[int]:
        return [i for n in range(len(chains)) for part in parts for i in place[n, part]]

    reached_unseen, reached_seen, neither, seen_only = Part
    fill(A, of(reached_unseen), of(neither, seen_only))
    fill(A, of(neither), of(seen_only))
    fill(B, of(reached_unseen, reached_seen), list(range(len(chains), inputs)))
    fill(C, list(range(len(chains), outputs)), of(reached_seen, seen_only))
    return Draft(
        A,
        B,
        C,
        D,
        states={part: of(part) for part in Part},
        polynomials={part: times(*(p for c in chains for p in c[part])) for part in Part},
    )
