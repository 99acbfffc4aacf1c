"""What must not change when only the description of a model changes (exact face)."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize import Realization, exact
from tests.helpers import (
    PARTS,
    Polynomial,
    assert_equal_exact,
    change_coordinates,
    identity,
    product,
    times,
)
from tests.strategies import Planted, generators, permutation, planted, unimodular

# Planted hidden modes are of every kind; the warnings are tested with `minimal`.
pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")

powers = st.integers(-20, 20)


def assert_same_answers(old: Realization, new: Realization, time_scale: Fraction) -> None:
    """The order, the stairs, and the parts of both models are one.

    ``time_scale`` c says that A was multiplied by c: a root r becomes c r.
    """
    assert exact.minimal(new).order == exact.minimal(old).order
    for side in ("input", "output"):
        assert exact.staircase(new, side=side).stairs == exact.staircase(old, side=side).stairs
    before, after = exact.kalman_parts(old), exact.kalman_parts(new)
    assert dict(after.dimensions) == dict(before.dimensions)
    for part in PARTS:
        expected = scale_roots(before.polynomials[part], time_scale)
        assert_equal_exact(after.polynomials[part], expected, part)


def unreached_polynomial(case: Planted) -> Polynomial:
    """The product of the two planted polynomials that no input reaches."""
    return times(*(p for part, p in case.polynomials.items() if part.startswith("un")))


def scale_roots(p: Polynomial, factor: Fraction) -> Polynomial:
    """The monic polynomial whose roots are those of p times the factor."""
    return tuple(c * factor**k for k, c in enumerate(p))


def diagonal(rng: np.random.Generator, size: int) -> np.ndarray:
    """An exact diagonal matrix of powers of two between 2^-20 and 2^20."""
    result = identity(size)
    for i in range(size):
        result[i, i] = Fraction(2) ** int(rng.integers(-20, 21))
    return result


def rebuilt(
    model: Realization, A: np.ndarray, B: np.ndarray, C: np.ndarray, D: np.ndarray
) -> Realization:
    """A model with other matrices and the same sampling period."""
    return Realization(A, B, C, D, sampling_period=model.sampling_period)


@given(planted(most=1), generators)
def test_a_change_of_coordinates_changes_no_answer(case: Planted, rng: np.random.Generator) -> None:
    """Order, stairs and parts survive an exact change of state coordinates."""
    T = unimodular(rng, case.model.order, steps=10, largest=3)
    new = rebuilt(case.model, *change_coordinates(case.model.matrices(), T))
    assert_same_answers(case.model, new, Fraction(1))


@given(planted(most=1), generators)
def test_permuting_states_inputs_and_outputs_changes_no_answer(
    case: Planted, rng: np.random.Generator
) -> None:
    """Order, stairs and parts do not depend on the order in which anything is listed."""
    model = case.model
    A, B, C, D = change_coordinates(model.matrices(), permutation(rng, model.order))
    right, left = permutation(rng, model.input_count), permutation(rng, model.output_count)
    new = rebuilt(model, A, product(B, right), product(left, C), product(left, D, right))
    assert_same_answers(model, new, Fraction(1))


@given(planted(most=1), generators)
def test_units_of_states_inputs_and_outputs_change_no_answer(
    case: Planted, rng: np.random.Generator
) -> None:
    """Order, stairs and parts do not depend on units that differ by powers of two."""
    model = case.model
    A, B, C, D = change_coordinates(model.matrices(), diagonal(rng, model.order))
    right, left = diagonal(rng, model.input_count), diagonal(rng, model.output_count)
    new = rebuilt(model, A, product(B, right), product(left, C), product(left, D, right))
    assert_same_answers(model, new, Fraction(1))


@given(planted(most=1), powers)
def test_the_unit_of_time_scales_the_modes_and_nothing_else(case: Planted, power: int) -> None:
    """With time measured in another unit the roots scale, and the dimensions stay."""
    model, scale = case.model, Fraction(2) ** power
    A, B, C, D = model.matrices()
    new = rebuilt(model, scale * A, scale * B, C, D)
    assert_same_answers(model, new, scale)


@given(planted(most=1))
def test_doubling_an_input_or_an_output_changes_no_part(case: Planted) -> None:
    """A second copy of the inputs and outputs reaches and shows nothing more."""
    A, B, C, D = case.model.matrices()
    new = rebuilt(case.model, A, np.hstack([B, B]), np.vstack([C, C]), np.block([[D, D], [D, D]]))
    before, after = exact.kalman_parts(case.model), exact.kalman_parts(new)
    assert dict(after.dimensions) == dict(before.dimensions)
    assert after.polynomials == before.polynomials


@given(planted(most=1), generators)
def test_state_feedback_moves_no_unreachable_mode(case: Planted, rng: np.random.Generator) -> None:
    """A + B F has the stairs of A, and the polynomial of what is not reached."""
    A, B, C, D = case.model.matrices()
    F = identity(max(B.shape[1], A.shape[0]))[: B.shape[1], : A.shape[0]]
    F = F * Fraction(int(rng.integers(-3, 4)))
    new = rebuilt(case.model, A + product(B, F), B, C, D)
    assert exact.staircase(new).stairs == exact.staircase(case.model).stairs
    before, after = exact.kalman_parts(case.model), exact.kalman_parts(new)
    for form in (before, after):
        found = times(*(p for part, p in form.polynomials.items() if part.startswith("un")))
        assert_equal_exact(found, unreached_polynomial(case))


@given(planted(most=1))
def test_duality_swaps_reachable_and_observable(case: Planted) -> None:
    """What the inputs reach in the dual is what the outputs see in the model."""
    dual = case.model.dual()
    for here, there in (("input", "output"), ("output", "input")):
        form, mirrored = exact.staircase(dual, side=here), exact.staircase(case.model, side=there)
        assert form.stairs == mirrored.stairs
        assert form.dimension == mirrored.dimension
    before, after = exact.kalman_parts(case.model), exact.kalman_parts(dual)
    swap = {
        "controllable, observable": "controllable, observable",
        "controllable, unobservable": "uncontrollable, observable",
        "uncontrollable, observable": "controllable, unobservable",
        "uncontrollable, unobservable": "uncontrollable, unobservable",
    }
    for part, other in swap.items():
        assert after.dimensions[part] == before.dimensions[other]
        assert_equal_exact(after.polynomials[part], before.polynomials[other], part)


@given(planted(most=1))
def test_duality_keeps_the_minimal_order(case: Planted) -> None:
    """A model and its dual have one minimal order, and the dual of the dual is the model."""
    assert exact.minimal(case.model.dual()).order == exact.minimal(case.model).order
    assert case.model.dual().dual() == case.model
