"""Hypothesis strategies of our own suite; those that anybody can use are in `realize.testing`."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction

import numpy as np
from hypothesis import strategies as st

from realize import Realization, TransferMatrix
from realize.testing import planting
from realize.testing.planting import Chain, Planted
from realize.testing.strategies import (
    CONTINUOUS_STABLE,
    DISCRETE_STABLE,
    FACTORS,
    RATIONAL_FACTORS,
    SAMPLING_PERIODS,
    planted,
    realizations,
)
from tests.helpers import Polynomial, identity, times, zeros

__all__ = [
    "CONTINUOUS_STABLE",
    "DISCRETE_STABLE",
    "FACTORS",
    "RATIONAL_FACTORS",
    "Planted",
    "PlantedFraction",
    "coprime_fractions",
    "fractions_with_common_factor",
    "generators",
    "permutation",
    "plant",
    "planted",
    "planted_mild",
    "planted_on_axes",
    "transfer_matrices",
    "unimodular",
    "unstructured",
]


def plant(
    chains: Sequence[Chain],
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
    """The planted model of the chains, in coordinates drawn from a generator.

    ``steps`` elementary operations with factors up to ``largest`` change the coordinates; then
    each state is scaled by one of ``scales``, if there are any. With ``signed_permutation`` the
    coordinates are only permuted and their signs drawn.
    """
    draft = planting.plant(
        chains,
        small=lambda rows, columns: _small(rng, rows, columns),
        more_inputs=more_inputs,
        more_outputs=more_outputs,
    )
    order = draft.order
    places = rng.permutation(order)
    draft.permute(places, rng.choice([-1, 1], order))
    if order > 1 and not signed_permutation:
        for _ in range(steps):
            i, j = rng.choice(order, 2, replace=False)
            draft.add(i, j, int(rng.integers(-largest, largest + 1)))
    for i in range(order):
        if scales:
            draft.scale(i, scales[rng.integers(len(scales))])
    return draft.planted(sampling_period=sampling_period)


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


def planted_mild() -> st.SearchStrategy[Planted]:
    """Integer models whose coordinates stay near the planted ones, for the floating path."""
    return planted(
        factors=FACTORS[:9], most=1, max_more_inputs=1, max_more_outputs=1, moves=4, largest=1
    )


def planted_on_axes() -> st.SearchStrategy[Planted]:
    """Models in permuted planted coordinates, scaled by powers of two."""
    return planted(
        factors=FACTORS[:9],
        most=1,
        max_more_inputs=0,
        max_more_outputs=0,
        moves=0,
        units=(1, Fraction(1, 1024), 64, 2),
    )


def unstructured() -> st.SearchStrategy[Realization]:
    """Small integer models with no plan: low ranks by accident, zero rows, zero columns."""
    return realizations(max_inputs=3, max_outputs=3, structure="any")


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
