"""Hypothesis strategies: models whose hidden parts are known because they were planted.

A planted model is a direct sum of chains. One chain is, in the coordinates of its own parts,

    unobservable  <-  observable  <-  input          (controllable part)
                      observable  <-  autonomous     (uncontrollable, observable part)

where every link is an all-pole companion block. All-pole blocks in series are controllable from
their input and observable from their output whatever their polynomials are, so equal, multiple
and defective eigenvalues may be planted at will and the dimensions stay known. Then come more
inputs and outputs, couplings that the block pattern allows, and a change of coordinates with an
exact inverse.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from hypothesis import strategies as st

from realize import Realization, TransferMatrix
from tests.helpers import (
    CONTROLLABLE_OBSERVABLE,
    CONTROLLABLE_UNOBSERVABLE,
    PARTS,
    UNCONTROLLABLE_OBSERVABLE,
    UNCONTROLLABLE_UNOBSERVABLE,
    Polynomial,
    change_coordinates,
    controllable_companion,
    identity,
    product,
    strip,
    times,
    zeros,
)

#: Distinct monic polynomials, irreducible over the rationals, with small integer coefficients:
#: real, complex, irrational, repeated across parts, on both boundaries and at the origin.
FACTORS: tuple[Polynomial, ...] = tuple(
    strip(p)
    for p in (
        (1, 1), (1, 0), (1, 2), (1, -1), (1, 3), (1, -2),
        (1, 0, 1), (1, 1, 1), (1, 2, 5), (1, 0, -2), (1, -1, 1),
    )
)  # fmt: skip

#: Irreducible polynomials whose coefficients are not integers.
RATIONAL_FACTORS: tuple[Polynomial, ...] = tuple(
    strip(p)
    for p in ((1, Fraction(1, 2)), (1, Fraction(-1, 3)), (1, Fraction(-3, 5), Fraction(1, 4)))
)

#: Factors with every root in the open left half plane, and inside the unit circle.
CONTINUOUS_STABLE: tuple[Polynomial, ...] = tuple(
    strip(p) for p in ((1, 1), (1, 2), (1, 3), (1, 1, 1), (1, 2, 5), (1, Fraction(1, 2)))
)
DISCRETE_STABLE: tuple[Polynomial, ...] = tuple(
    strip(p)
    for p in (
        (1, 0), (1, Fraction(1, 2)), (1, Fraction(-1, 3)), (1, Fraction(-3, 5), Fraction(1, 4)),
    )
)  # fmt: skip

SAMPLING_PERIODS = (None, Fraction(1, 10), 1)


@dataclass(frozen=True, kw_only=True, slots=True)
class Planted:
    """A model with what was planted in it."""

    model: Realization
    dimensions: dict[str, int]
    polynomials: dict[str, Polynomial]

    @property
    def order(self) -> int:
        """The order of a minimal realization."""
        return self.dimensions[CONTROLLABLE_OBSERVABLE]

    @property
    def reachable(self) -> int:
        """The dimension of the reachable part."""
        return self.order + self.dimensions[CONTROLLABLE_UNOBSERVABLE]

    @property
    def observable(self) -> int:
        """The dimension of the observable part."""
        return self.order + self.dimensions[UNCONTROLLABLE_OBSERVABLE]


Chain = dict[str, tuple[Polynomial, ...]]


def plant(
    chains: list[Chain],
    *,
    rng: np.random.Generator,
    more_inputs: int,
    more_outputs: int,
    steps: int,
    largest: int,
    scales: tuple[Fraction, ...] = (),
    signed_permutation: bool = False,
    sampling_period: int | Fraction | None = None,
) -> Planted:
    """The planted model of the chains.

    ``steps`` elementary operations with factors up to ``largest`` change the coordinates; then
    each state is scaled by one of ``scales``, if there are any. With ``signed_permutation`` the
    coordinates are only permuted and their signs drawn.
    """
    place: dict[tuple[int, str], range] = {}
    at = 0
    for part in PARTS:
        for number, chain in enumerate(chains):
            size = sum(len(p) - 1 for p in chain[part])
            place[number, part] = range(at, at + size)
            at += size
    order, inputs, outputs = at, len(chains) + more_inputs, len(chains) + more_outputs
    A, B, C = zeros(order, order), zeros(order, inputs), zeros(outputs, order)
    D = _small(rng, outputs, inputs)

    for number, chain in enumerate(chains):
        states = {part: place[number, part] for part in PARTS}
        for part in PARTS:
            block = controllable_companion((Fraction(1),), times(*chain[part]))[0]
            for i, row in enumerate(states[part]):
                for j, column in enumerate(states[part]):
                    A[row, column] = block[i, j]
        # Signals run from an end (its first state) into the last state of the next block.
        driven = [
            states[p] for p in (CONTROLLABLE_OBSERVABLE, CONTROLLABLE_UNOBSERVABLE) if states[p]
        ]
        if driven:
            B[driven[0][-1], number] = Fraction(1)
        if len(driven) == 2:
            A[driven[1][-1], driven[0][0]] = Fraction(1)
        seen = [
            states[p] for p in (CONTROLLABLE_OBSERVABLE, UNCONTROLLABLE_OBSERVABLE) if states[p]
        ]
        if seen:
            C[number, seen[0][0]] = Fraction(1)
        if len(seen) == 2:
            A[seen[0][-1], seen[1][0]] = Fraction(1)

    def fill(target: np.ndarray, rows: list[int], columns: list[int]) -> None:
        target[np.ix_(rows, columns)] = _small(rng, len(rows), len(columns))

    def of(*parts: str) -> list[int]:
        return [i for n in range(len(chains)) for part in parts for i in place[n, part]]

    fill(A, of(CONTROLLABLE_UNOBSERVABLE), of(*PARTS[2:]))
    fill(A, of(UNCONTROLLABLE_UNOBSERVABLE), of(UNCONTROLLABLE_OBSERVABLE))
    fill(B, of(*PARTS[:2]), list(range(len(chains), inputs)))
    fill(
        C,
        list(range(len(chains), outputs)),
        of(CONTROLLABLE_OBSERVABLE, UNCONTROLLABLE_OBSERVABLE),
    )

    T = permutation(rng, order, signs=True)
    if not signed_permutation:
        T = product(T, unimodular(rng, order, steps=steps, largest=largest))
    for i in range(order):
        if scales:
            T[:, i] *= scales[rng.integers(len(scales))]
    matrices = change_coordinates((A, B, C, D), T)
    return Planted(
        model=Realization(*matrices, sampling_period=sampling_period),
        dimensions={part: sum(len(place[n, part]) for n in range(len(chains))) for part in PARTS},
        polynomials={part: times(*(p for c in chains for p in c[part])) for part in PARTS},
    )


def permutation(rng: np.random.Generator, size: int, *, signs: bool = False) -> np.ndarray:
    """An exact permutation matrix, with random signs if asked."""
    result = identity(size)[rng.permutation(size)]
    if signs:
        for i in range(size):
            result[i] *= int(rng.choice([-1, 1]))
    return result


def unimodular(
    rng: np.random.Generator, size: int, *, steps: int = 8, largest: int = 2
) -> np.ndarray:
    """A product of elementary integer matrices: determinant 1, integer inverse."""
    result = identity(size)
    if size > 1:
        for _ in range(steps):
            i, j = rng.choice(size, 2, replace=False)
            result[i] += int(rng.integers(-largest, largest + 1)) * result[j]
    return result


def _small(rng: np.random.Generator, rows: int, columns: int) -> np.ndarray:
    """A random matrix of the integers -2 to 2, half of them zero on average."""
    result = zeros(rows, columns)
    for i in range(rows):
        for j in range(columns):
            result[i, j] = Fraction(int(rng.choice([0, 0, 0, -2, -1, 1, 2])))
    return result


generators = st.integers(0, 2**32 - 1).map(np.random.default_rng)


def chains(
    factors: tuple[Polynomial, ...], *, most: int = 2, most_chains: int = 2
) -> st.SearchStrategy[list[Chain]]:
    """Lists of chains with up to ``most`` factors in each part of the first."""

    def chain(limit: int) -> st.SearchStrategy[Chain]:
        part = st.lists(st.sampled_from(factors), max_size=limit).map(tuple)
        visible = st.lists(st.sampled_from(factors), min_size=1, max_size=limit + 1).map(tuple)
        nothing = st.just(())
        return st.one_of(
            st.fixed_dictionaries(dict.fromkeys(PARTS, part)),
            st.fixed_dictionaries(dict.fromkeys(PARTS, part) | {CONTROLLABLE_OBSERVABLE: visible}),
            st.fixed_dictionaries(
                dict.fromkeys(PARTS, nothing) | {CONTROLLABLE_OBSERVABLE: visible}
            ),
        )

    return st.tuples(chain(most), st.lists(chain(1), max_size=most_chains - 1)).map(
        lambda pair: [pair[0], *pair[1]]
    )


@st.composite
def planted(
    draw: st.DrawFn,
    *,
    factors: tuple[Polynomial, ...] = FACTORS + RATIONAL_FACTORS,
    most: int = 2,
    sampling_periods: tuple[int | Fraction | None, ...] = SAMPLING_PERIODS,
) -> Planted:
    """Rational models in general coordinates, with nothing guaranteed to be visible."""
    return plant(
        draw(chains(factors, most=most)),
        rng=draw(generators),
        more_inputs=draw(st.integers(0, 2)),
        more_outputs=draw(st.integers(0, 2)),
        steps=draw(st.integers(0, 12)),
        largest=3,
        scales=draw(st.sampled_from([(), (Fraction(1), Fraction(1, 3), Fraction(-5, 2))])),
        sampling_period=draw(st.sampled_from(sampling_periods)),
    )


@st.composite
def planted_mild(draw: st.DrawFn) -> Planted:
    """Integer models whose coordinates stay near the planted ones, for the floating path."""
    return plant(
        draw(chains(FACTORS[:9], most=1)),
        rng=draw(generators),
        more_inputs=draw(st.integers(0, 1)),
        more_outputs=draw(st.integers(0, 1)),
        steps=draw(st.integers(0, 4)),
        largest=1,
        sampling_period=draw(st.sampled_from(SAMPLING_PERIODS)),
    )


@st.composite
def planted_on_axes(draw: st.DrawFn) -> Planted:
    """Models in permuted planted coordinates, scaled by powers of two."""
    return plant(
        draw(chains(FACTORS[:9], most=1)),
        rng=draw(generators),
        more_inputs=0,
        more_outputs=0,
        steps=0,
        largest=0,
        scales=draw(
            st.sampled_from([(), (Fraction(1), Fraction(1, 1024), Fraction(64), Fraction(2))])
        ),
        signed_permutation=True,
        sampling_period=draw(st.sampled_from(SAMPLING_PERIODS)),
    )


@st.composite
def unstructured(draw: st.DrawFn) -> Realization:
    """Small integer models with no plan: low ranks by accident, zero rows, zero columns."""
    order, inputs, outputs = (
        draw(st.integers(0, 4)),
        draw(st.integers(1, 3)),
        draw(st.integers(1, 3)),
    )

    def entries(rows: int, columns: int) -> np.ndarray:
        numbers = draw(
            st.lists(st.integers(-2, 2), min_size=rows * columns, max_size=rows * columns)
        )
        result = zeros(rows, columns)
        for k, x in enumerate(numbers):
            result[k // columns, k % columns] = Fraction(x)
        return result

    return Realization(
        entries(order, order),
        entries(order, inputs),
        entries(outputs, order),
        entries(outputs, inputs),
        sampling_period=draw(st.sampled_from(SAMPLING_PERIODS)),
    )


@dataclass(frozen=True, kw_only=True, slots=True)
class PlantedFraction:
    """A proper fraction with its common factor known."""

    numerator: Polynomial
    denominator: Polynomial
    common: Polynomial

    @property
    def coprime_order(self) -> int:
        """The degree of the denominator once the common factor is gone."""
        return len(self.denominator) - len(self.common)


@st.composite
def fractions_with_common_factor(
    draw: st.DrawFn,
    *,
    factors: tuple[Polynomial, ...] = FACTORS + RATIONAL_FACTORS,
    most_common: int = 2,
) -> PlantedFraction:
    """Proper fractions: coprime numerator and denominator times a planted common factor.

    The pool holds distinct irreducible polynomials, so lists without a shared member are coprime.
    """
    poles = draw(st.lists(st.sampled_from(factors), max_size=3))
    degree = sum(len(p) - 1 for p in poles)
    zeros_left: list[Polynomial] = []
    for p in draw(st.lists(st.sampled_from(factors), max_size=3)):
        if p not in poles and sum(len(q) - 1 for q in [*zeros_left, p]) <= degree:
            zeros_left.append(p)
    common = times(*draw(st.lists(st.sampled_from(factors), max_size=most_common)))
    gain = draw(st.sampled_from([Fraction(1), Fraction(-3), Fraction(2, 7)]))
    lead = draw(st.sampled_from([Fraction(1), Fraction(-2), Fraction(3, 4)]))
    return PlantedFraction(
        numerator=times((gain,), *zeros_left, common),
        denominator=times((lead,), *poles, common),
        common=common,
    )


def coprime_fractions() -> st.SearchStrategy[PlantedFraction]:
    """Proper fractions without a common factor."""
    return fractions_with_common_factor(most_common=0)


@st.composite
def transfer_matrices(draw: st.DrawFn) -> TransferMatrix:
    """Rational transfer matrices of one to two outputs and inputs, common factors included."""
    rows, columns = draw(st.integers(1, 2)), draw(st.integers(1, 2))
    entries = [
        [draw(fractions_with_common_factor(most_common=1)) for _ in range(columns)]
        for _ in range(rows)
    ]
    return TransferMatrix(
        [[e.numerator for e in row] for row in entries],
        [[e.denominator for e in row] for row in entries],
        sampling_period=draw(st.sampled_from(SAMPLING_PERIODS)),
    )
