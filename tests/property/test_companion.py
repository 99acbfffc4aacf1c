"""Laws of companion forms (exact face)."""

from __future__ import annotations

from fractions import Fraction

from hypothesis import given
from hypothesis import strategies as st

from realize import TransferMatrix, exact
from tests.helpers import (
    assert_equal_exact,
    assert_same_transfer,
    characteristic_polynomial,
    reachable_ranks,
)
from tests.strategies import (
    SAMPLING_PERIODS,
    PlantedFraction,
    coprime_fractions,
    fractions_with_common_factor,
)

sides = st.sampled_from(["input", "output"])
periods = st.sampled_from(SAMPLING_PERIODS)


def monic(p: tuple[Fraction, ...]) -> tuple[Fraction, ...]:
    """The polynomial divided by its leading coefficient."""
    return tuple(c / p[0] for c in p)


@given(fractions_with_common_factor(), sides, periods)
def test_a_fraction_is_realized_as_given(
    case: PlantedFraction, side: str, period: int | Fraction | None
) -> None:
    """The order is the degree of the denominator as given, common factors included."""
    source = TransferMatrix(case.numerator, case.denominator, sampling_period=period)
    model = exact.companion(source, side=side)
    assert model.order == len(case.denominator) - 1
    assert model.sampling_period == source.sampling_period
    assert_equal_exact(characteristic_polynomial(model.A), monic(case.denominator))


@given(fractions_with_common_factor(), sides)
def test_the_transfer_function_comes_back(case: PlantedFraction, side: str) -> None:
    """The transfer function of the companion form is the one it was made from."""
    source = TransferMatrix(case.numerator, case.denominator)
    model = exact.companion(source, side=side)
    assert_same_transfer(exact.transfer_matrix(model), source)


@given(fractions_with_common_factor())
def test_the_input_form_is_always_reachable(case: PlantedFraction) -> None:
    """From the input everything is reached; the common factor is what is not seen."""
    model = exact.companion(TransferMatrix(case.numerator, case.denominator))
    A, B, C, _ = model.matrices()
    assert sum(reachable_ranks(A, B)) == model.order
    assert sum(reachable_ranks(A.T, C.T)) == case.coprime_order


@given(fractions_with_common_factor())
def test_the_output_form_is_always_observable(case: PlantedFraction) -> None:
    """At the output everything is seen; the common factor is what is not reached."""
    model = exact.companion(TransferMatrix(case.numerator, case.denominator), side="output")
    A, B, C, _ = model.matrices()
    assert sum(reachable_ranks(A.T, C.T)) == model.order
    assert sum(reachable_ranks(A, B)) == case.coprime_order


@given(fractions_with_common_factor())
def test_the_common_factor_is_the_hidden_polynomial(case: PlantedFraction) -> None:
    """What the input form hides from the output is exactly the planted factor."""
    model = exact.companion(TransferMatrix(case.numerator, case.denominator))
    hidden = exact.kalman_parts(model).polynomials["controllable, unobservable"]
    assert_equal_exact(hidden, case.common)


@given(fractions_with_common_factor(), sides)
def test_the_matrix_is_a_companion_matrix(case: PlantedFraction, side: str) -> None:
    """Apart from one row or column A is a shift: at most n ones, and n coefficients."""
    model = exact.companion(TransferMatrix(case.numerator, case.denominator), side=side)
    size = model.order
    coefficients = sorted(-c for c in monic(case.denominator)[1:])
    lines = [*model.A, *model.A.T]
    if size == 0:
        return
    assert any(sorted(line) == coefficients for line in lines)
    ones = [Fraction(1)] * (size - 1)
    rest = sorted(ones + coefficients + [Fraction(0)] * (size * size - 2 * size + 1))
    assert sorted(model.A.ravel()) == rest


@given(coprime_fractions(), sides)
def test_a_companion_form_of_a_companion_form_is_itself(case: PlantedFraction, side: str) -> None:
    """The form is canonical: made twice it is the same model."""
    first = exact.companion(TransferMatrix(case.numerator, case.denominator), side=side)
    assert exact.companion(first, side=side) == first
