"""Laws of the exact staircase form."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize import Realization, exact
from tests.helpers import (
    assert_equal_exact,
    change_coordinates,
    inverse,
    join,
    product,
    rank,
    reachable_ranks,
)
from tests.strategies import Planted, planted, unstructured

sides = st.sampled_from(["input", "output"])


def pair(model: Realization, side: str) -> tuple:
    """(A, B), or (A^T, C^T) for the output side."""
    A, B, C, _ = model.matrices()
    return (A, B) if side == "input" else (A.T, C.T)


@given(planted())
def test_the_planted_reachable_dimension_is_found(case: Planted) -> None:
    """The staircase from the input has the dimension of the two controllable parts."""
    assert exact.staircase(case.model).dimension == case.reachable


@given(planted())
def test_the_planted_observable_dimension_is_found(case: Planted) -> None:
    """The staircase from the output has the dimension of the two observable parts."""
    assert exact.staircase(case.model, side="output").dimension == case.observable


@given(planted(), sides)
def test_stairs_are_the_growth_of_the_krylov_rank(case: Planted, side: str) -> None:
    """Stair k is the rank of [B, ..., A^k B] minus that of [B, ..., A^(k-1) B]."""
    form = exact.staircase(case.model, side=side)
    assert list(form.stairs) == reachable_ranks(*pair(case.model, side))


@given(unstructured(), sides)
def test_stairs_of_unplanned_models(model: Realization, side: str) -> None:
    """The same holds for small models in which nothing was planted."""
    form = exact.staircase(model, side=side)
    assert list(form.stairs) == reachable_ranks(*pair(model, side))


@given(planted(), sides)
def test_stairs_never_rise_and_add_up(case: Planted, side: str) -> None:
    """Stairs are positive, do not increase, and sum to the dimension."""
    form = exact.staircase(case.model, side=side)
    assert all(s > 0 for s in form.stairs)
    assert list(form.stairs) == sorted(form.stairs, reverse=True)
    assert sum(form.stairs) == form.dimension


@given(planted(), sides)
def test_the_model_is_the_old_one_in_the_coordinates_named(case: Planted, side: str) -> None:
    """New A, B, C, D are T^-1 A T, T^-1 B, C T and D, exactly; names and period stay."""
    form = exact.staircase(case.model, side=side)
    expected = change_coordinates(case.model.matrices(), form.transformation)
    for name, new, old in zip("ABCD", form.model.matrices(), expected, strict=True):
        assert_equal_exact(new, old, name)
    assert form.model.sampling_period == case.model.sampling_period
    assert form.model.input_names == case.model.input_names
    assert form.model.output_names == case.model.output_names


@given(planted(), sides)
def test_what_must_be_zero_is_zero(case: Planted, side: str) -> None:
    """Nothing enters the part that is not reached, and nothing leaves the part not seen."""
    form = exact.staircase(case.model, side=side)
    A, B = pair(form.model, side)
    k = form.dimension
    assert not A[k:, :k].any()
    assert not B[k:].any()


@given(planted(), sides)
def test_the_blocks_form_a_staircase(case: Planted, side: str) -> None:
    """Below the first subdiagonal blocks all is zero; each subdiagonal block has full row rank."""
    form = exact.staircase(case.model, side=side)
    A, B = pair(form.model, side)
    if not form.stairs:
        assert not B.any()
        return
    stairs = form.stairs
    assert rank(B[: stairs[0]]) == stairs[0]
    assert not B[stairs[0] :].any()
    start = 0
    for here, below in zip(stairs, (*stairs, 0)[1:], strict=True):
        end = start + here
        block = A[end : end + below, start:end]
        assert rank(block) == below
        assert not A[end + below :, start:end].any()
        start = end


@given(planted(), sides)
def test_the_first_coordinates_span_the_reachable_subspace(case: Planted, side: str) -> None:
    """The first columns of T (rows of T^-1 for the output side) span what B reaches."""
    form = exact.staircase(case.model, side=side)
    A, B = pair(case.model, side)
    T = form.transformation
    if side == "output":
        T = inverse(T).T
    basis = T[:, : form.dimension]
    assert rank(join([[basis, B]])) == form.dimension
    assert rank(join([[basis, product(A, basis)]])) == form.dimension


@pytest.mark.parametrize("side", ["input", "output"])
@given(planted())
def test_a_staircase_of_a_staircase_has_the_same_stairs(side: str, case: Planted) -> None:
    """Doing it twice finds nothing new."""
    first = exact.staircase(case.model, side=side)
    assert exact.staircase(first.model, side=side).stairs == first.stairs
