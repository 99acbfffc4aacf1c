"""Laws of Markov parameters and of realizations made from them (exact face)."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize import exact
from tests.helpers import assert_equal_exact, assert_same_response, markov_by_hand, reachable_ranks
from tests.strategies import Planted, planted

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")


@given(planted(), st.integers(1, 12))
def test_they_are_the_products_that_define_them(case: Planted, count: int) -> None:
    """Item 0 is D, item k is C A^(k-1) B."""
    found = exact.markov_parameters(case.model, count)
    assert found.shape == (count, case.model.output_count, case.model.input_count)
    for k, expected in enumerate(markov_by_hand(case.model, count)):
        assert_equal_exact(found[k], expected, f"item {k}")


@given(planted(most=1))
def test_enough_of_them_give_the_model_back(case: Planted) -> None:
    """From 2n + 1 of them comes a model with the same transfer matrix and minimal order."""
    count = 2 * case.order + 1
    found = exact.from_markov_parameters(
        exact.markov_parameters(case.model, count), sampling_period=case.model.sampling_period
    )
    assert found.order == case.order
    assert_same_response(found.model, case.model)
    assert found.model.sampling_period == case.model.sampling_period


@given(planted(most=1))
def test_more_of_them_change_nothing(case: Planted) -> None:
    """Additional parameters of the same model do not raise the order."""
    found = exact.from_markov_parameters(exact.markov_parameters(case.model, 2 * case.order + 4))
    assert found.order == case.order
    assert_same_response(found.model, case.model)


@given(planted(most=1))
def test_the_model_made_from_them_is_minimal(case: Planted) -> None:
    """Both Krylov ranks of the result are full."""
    count = 2 * case.order + 1
    found = exact.from_markov_parameters(exact.markov_parameters(case.model, count))
    A, B, C, _ = found.model.matrices()
    assert sum(reachable_ranks(A, B)) == sum(reachable_ranks(A.T, C.T)) == found.order
