"""Laws of cancellation (exact face)."""

from __future__ import annotations

import pytest
from hypothesis import given

from realize import TransferMatrix, exact
from tests.helpers import assert_equal_exact, assert_same_transfer, common_factor, times
from tests.strategies import PlantedFraction, fractions_with_common_factor, transfer_matrices

# Planted common factors are of every kind; a warning of one that is not stable is in order here.
pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")


@given(fractions_with_common_factor())
def test_the_planted_factor_is_found(case: PlantedFraction) -> None:
    """The common factor is the planted one, monic."""
    found = exact.cancel(TransferMatrix(case.numerator, case.denominator))
    assert_equal_exact(found.common, case.common)


@given(fractions_with_common_factor())
def test_its_irreducible_factors_multiply_to_it(case: PlantedFraction) -> None:
    """Factors with multiplicity multiply to the common factor, and are distinct."""
    found = exact.cancel(TransferMatrix(case.numerator, case.denominator))
    parts = [p for p, multiplicity in found.factors for _ in range(multiplicity)]
    assert_equal_exact(times(*parts), case.common)
    assert len({p for p, _ in found.factors}) == len(found.factors)
    assert all(len(p) > 1 and p[0] == 1 for p, _ in found.factors)


@given(transfer_matrices())
def test_what_is_left_is_coprime(source: TransferMatrix) -> None:
    """In every entry numerator and denominator have no common factor left."""
    left = exact.cancel(source).transfer
    for numerators, denominators in zip(left.numerators, left.denominators, strict=True):
        for p, q in zip(numerators, denominators, strict=True):
            assert common_factor(q, p) == (1,)


@given(transfer_matrices())
def test_the_functions_do_not_change(source: TransferMatrix) -> None:
    """Cancelling changes the fractions and not the functions."""
    left = exact.cancel(source).transfer
    assert_same_transfer(left, source)
    assert left.sampling_period == source.sampling_period


@given(transfer_matrices())
def test_cancelling_twice_changes_nothing(source: TransferMatrix) -> None:
    """The second time there is nothing to cancel."""
    once = exact.cancel(source).transfer
    assert exact.cancel(once).transfer == once


@given(fractions_with_common_factor())
def test_the_order_left_is_the_minimal_order(case: PlantedFraction) -> None:
    """The degree left equals the order of a minimal realization."""
    source = TransferMatrix(case.numerator, case.denominator)
    left = exact.cancel(source).transfer
    assert len(left.denominators[0][0]) - 1 == exact.minimal(source).order == case.coprime_order
