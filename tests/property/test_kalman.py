"""Laws of the exact Kalman decomposition."""

from __future__ import annotations

import itertools

import numpy as np
from hypothesis import given

from realize import Realization, exact
from tests.helpers import (
    PARTS,
    assert_equal_exact,
    change_coordinates,
    characteristic_polynomial,
    reachable_ranks,
    times,
)
from tests.strategies import Planted, planted, unstructured

#: Block (row, column) pairs, in the order of PARTS, that must vanish in A.
ZERO_BLOCKS = ((1, 0), (1, 2), (2, 0), (2, 1), (3, 0), (3, 1), (3, 2))


def slices(dimensions: dict[str, int]) -> list[slice]:
    """Where each block lies."""
    ends = np.cumsum([0, *(dimensions[part] for part in PARTS)])
    return [slice(int(a), int(b)) for a, b in itertools.pairwise(ends)]


@given(planted())
def test_planted_dimensions_are_found(case: Planted) -> None:
    """Each of the four parts has the dimension that was planted."""
    assert dict(exact.kalman_parts(case.model).dimensions) == case.dimensions


@given(planted())
def test_planted_polynomials_are_found(case: Planted) -> None:
    """Each of the four parts has the characteristic polynomial that was planted."""
    found = exact.kalman_parts(case.model).polynomials
    assert set(found) == set(PARTS)
    for part in PARTS:
        assert_equal_exact(found[part], case.polynomials[part], part)


@given(unstructured())
def test_dimensions_of_unplanned_models(model: Realization) -> None:
    """The parts add up to the order, and pairs of them to what Krylov ranks say."""
    found = exact.kalman_parts(model).dimensions
    A, B, C, _ = model.matrices()
    assert sum(found.values()) == model.order
    reached = found["controllable, observable"] + found["controllable, unobservable"]
    seen = found["controllable, observable"] + found["uncontrollable, observable"]
    assert reached == sum(reachable_ranks(A, B))
    assert seen == sum(reachable_ranks(A.T, C.T))


@given(unstructured())
def test_polynomials_multiply_to_that_of_the_model(model: Realization) -> None:
    """The product of the four polynomials is the characteristic polynomial of A."""
    found = exact.kalman_parts(model).polynomials
    whole = characteristic_polynomial(model.A)
    assert_equal_exact(times(*(found[part] for part in PARTS)), whole)


@given(planted())
def test_polynomials_are_those_of_the_diagonal_blocks(case: Planted) -> None:
    """Each polynomial belongs to the block of the new A that stands for its part."""
    form = exact.kalman_parts(case.model)
    for part, block in zip(PARTS, slices(form.dimensions), strict=True):
        expected = characteristic_polynomial(form.model.A[block, block])
        assert_equal_exact(form.polynomials[part], expected, part)


@given(planted())
def test_the_model_is_the_old_one_in_the_coordinates_named(case: Planted) -> None:
    """New A, B, C, D are T^-1 A T, T^-1 B, C T and D, exactly."""
    form = exact.kalman_parts(case.model)
    expected = change_coordinates(case.model.matrices(), form.transformation)
    for name, new, old in zip("ABCD", form.model.matrices(), expected, strict=True):
        assert_equal_exact(new, old, name)
    assert form.model.sampling_period == case.model.sampling_period


@given(planted())
def test_what_must_be_zero_is_zero(case: Planted) -> None:
    """Inputs reach no uncontrollable block, outputs see no unobservable one, A keeps both."""
    form = exact.kalman_parts(case.model)
    at = slices(form.dimensions)
    A, B, C, _ = form.model.matrices()
    for row, column in ZERO_BLOCKS:
        assert not A[at[row], at[column]].any(), f"block {PARTS[row]} from {PARTS[column]}"
    assert not B[at[2]].any()
    assert not B[at[3]].any()
    assert not C[:, at[0]].any()
    assert not C[:, at[2]].any()


@given(planted())
def test_the_visible_block_alone_is_minimal(case: Planted) -> None:
    """The controllable, observable block is reachable and observable by itself."""
    form = exact.kalman_parts(case.model)
    block = slices(form.dimensions)[1]
    A, B, C, _ = form.model.matrices()
    size = case.order
    assert sum(reachable_ranks(A[block, block], B[block])) == size
    assert sum(reachable_ranks(A[block, block].T, C[:, block].T)) == size
