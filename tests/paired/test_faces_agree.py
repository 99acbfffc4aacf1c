"""The exact and the floating face on one model."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

import realize
from realize import Realization, TransferMatrix, exact, floating
from tests.helpers import (
    PARTS,
    assert_close,
    assert_equal_exact,
    controllability_matrix,
    rank,
)
from tests.helpers import exact as as_exact
from tests.strategies import (
    Planted,
    PlantedFraction,
    fractions_with_common_factor,
    generators,
    planted_mild,
    planted_on_axes,
    transfer_matrices,
    unstructured,
)

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")

models = st.one_of(
    planted_on_axes().map(lambda case: case.model),
    planted_mild().map(lambda case: case.model),
    unstructured(),
)


@given(models)
def test_stairs_agree(model: Realization) -> None:
    """Both faces find the same stairs, which are invariants of the model, from both sides."""
    for side in ("input", "output"):
        proved = exact.staircase(model, side=side)
        computed = floating.staircase(model.to_float(), side=side)
        assert computed.stairs == proved.stairs
        assert computed.dimension == proved.dimension


@given(models)
def test_orders_agree(model: Realization) -> None:
    """Both faces find one minimal order, and remove as many modes."""
    proved, computed = exact.minimal(model), floating.minimal(model.to_float())
    assert computed.order == proved.order
    assert computed.removed.count == proved.removed.count


@given(models)
def test_parts_agree(model: Realization) -> None:
    """Both faces find the same four dimensions."""
    proved, computed = exact.kalman_parts(model), floating.kalman_parts(model.to_float())
    assert dict(computed.dimensions) == dict(proved.dimensions)


@given(planted_mild())
def test_polynomials_agree(case: Planted) -> None:
    """The floating polynomials of the parts are near the exact ones."""
    proved = exact.kalman_parts(case.model).polynomials
    computed = floating.kalman_parts(case.model.to_float()).polynomials
    for part in PARTS:
        assert_close(computed[part], proved[part], relative=1e-9, what=part)


@given(models)
def test_stored_doubles_are_the_same_model(model: Realization) -> None:
    """Dyadic entries survive the way to doubles and back by the reading `stored`."""
    back = model.to_float().read("stored")
    assert back.kind == "rational"
    for name, left, right in zip("ABCD", back.matrices(), model.matrices(), strict=True):
        assert_equal_exact(left, right, name)


@given(planted_on_axes())
def test_transfer_matrices_before_and_after_are_equal(case: Planted) -> None:
    """The transfer matrix of the exact reduction is that of the doubles as stored."""
    model = case.model.to_float()
    reduced = exact.minimal(model.read("stored")).model
    before = exact.transfer_matrix(case.model)
    after = exact.transfer_matrix(reduced)
    for i in range(before.output_count):
        for j in range(before.input_count):
            left = np.polymul(list(before.numerators[i][j]), list(after.denominators[i][j]))
            right = np.polymul(list(after.numerators[i][j]), list(before.denominators[i][j]))
            assert not np.polysub(left, right).any()


@given(planted_mild(), st.complex_numbers(min_magnitude=20, max_magnitude=1000))
def test_transfer_matrices_agree_as_functions(case: Planted, point: complex) -> None:
    """Far from the poles the two transfer matrices have one value, and that of the definition."""
    model = case.model.to_float()
    computed = floating.transfer_matrix(model).evaluate(point)
    A, B, C, D = model.matrices()
    defined = C @ np.linalg.solve(point * np.eye(len(A)) - A, B) + D
    size = max(1.0, float(abs(defined).max()))
    assert computed.shape == defined.shape
    assert abs(computed - defined).max() <= 1e-9 * size
    proved = exact.transfer_matrix(case.model).to_float().evaluate(point)
    assert abs(computed - proved).max() <= 1e-9 * size


@given(planted_mild())
def test_markov_parameters_of_integers_agree_exactly(case: Planted) -> None:
    """Small integer products are exact in doubles: both faces return the same numbers."""
    count = min(2 * case.model.order + 1, 8)
    proved = exact.markov_parameters(case.model, count)
    computed = floating.markov_parameters(case.model.to_float(), count)
    assert float(abs(computed).max(initial=0.0)) < 2.0**53
    assert_equal_exact(
        [as_exact(block) for block in computed], [as_exact(block) for block in proved]
    )


@given(fractions_with_common_factor(), st.sampled_from(["input", "output"]))
def test_companion_forms_agree(case: PlantedFraction, side: str) -> None:
    """Companion forms of one fraction hold the same numbers, rounded."""
    source = TransferMatrix(case.numerator, case.denominator)
    proved = exact.companion(source, side=side)
    computed = floating.companion(source.to_float(), side=side)
    assert computed.order == proved.order
    for name, left, right in zip("ABCD", computed.matrices(), proved.matrices(), strict=True):
        assert_close(left, right, relative=1e-12, absolute=1e-13, what=name)


@given(transfer_matrices().filter(lambda t: t.input_count == 1 or t.output_count == 1))
@example(TransferMatrix([[[1, 0, 1], ["2/7", "6/7"]]], [[[1, 0, 1], [1, 4, 2, -5, -8, -6]]]))
def test_companion_forms_of_rows_and_columns_agree(source: TransferMatrix) -> None:
    """For a row or a column both faces have the Markov parameters of the source.

    The orders may differ: doubles have no common denominator smaller than the product.
    """
    for side in ("input", "output"):
        proved = exact.companion(source, side=side)
        computed = floating.companion(source.to_float(), side=side)
        count = proved.order + 2
        assert_close(
            floating.markov_parameters(computed, count),
            exact.markov_parameters(proved, count),
            relative=1e-10,
            absolute=1e-12,
        )


@given(models)
def test_the_top_level_follows_the_data(model: Realization) -> None:
    """Rational models go to the exact path, doubles to the floating one, with equal answers."""
    top, low = realize.staircase(model), exact.staircase(model)
    assert top.stairs == low.stairs
    assert_equal_exact(top.transformation, low.transformation)
    doubles = model.to_float()
    top, low = realize.staircase(doubles), floating.staircase(doubles)
    assert top.stairs == low.stairs
    assert top.transformation.dtype == float
    assert (top.transformation == low.transformation).all()


@given(models)
def test_the_floating_face_rounds_rational_models(model: Realization) -> None:
    """`realize.floating` takes rational models, and answers as for their doubles, bit for bit."""
    direct, rounded = floating.staircase(model), floating.staircase(model.to_float())
    assert direct.model == rounded.model
    assert direct.stairs == rounded.stairs


@given(planted_on_axes(), generators)
def test_power_of_two_units_change_no_bit_of_a_verdict(
    case: Planted, rng: np.random.Generator
) -> None:
    """Scaling is by powers of two: in other units the stairs and parts are the exact ones."""
    A, B, C, D = case.model.to_float().matrices()
    x = 2.0 ** rng.integers(-20, 21, len(A))
    model = Realization(A * x / x[:, None], B / x[:, None], C * x, D)
    assert floating.staircase(model).stairs == exact.staircase(case.model).stairs
    assert dict(floating.kalman_parts(model).dimensions) == case.dimensions


@given(models)
def test_the_examination_sees_agreement(model: Realization) -> None:
    """On such models the paths agree, and every decision has the exact rank beside it."""
    found = realize.examine(model.to_float())
    assert found.paths_agree is True
    assert found.minimal_order["stored"] == found.floating_order == exact.minimal(model).order
    for decision in found.decisions:
        assert decision.exact_rank["stored"] == decision.rank


@given(models)
def test_the_cutoff_range_holds_the_default_and_reproduces_the_order(model: Realization) -> None:
    """Any tolerance inside the range for `stored` gives the exact order on the floating path."""
    found = realize.examine(model.to_float())
    low, high = found.cutoff_ranges["stored"]
    assert 0 <= low < high
    cutoffs = {decision.cutoff for decision in found.decisions}
    assert all(low <= cutoff <= high for cutoff in cutoffs)


@given(unstructured())
def test_reachable_dimensions_are_krylov_ranks(model: Realization) -> None:
    """Both faces agree with the rank of [B, AB, ...] by plain elimination."""
    expected = rank(controllability_matrix(model.A, model.B)) if model.order else 0
    assert exact.staircase(model).dimension == expected
    assert floating.staircase(model.to_float()).dimension == expected
