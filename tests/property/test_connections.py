"""Orders of connected systems, with the connections written out by hand (exact face).

Two coprime fractions are realized by hand, connected by hand, and reduced by the library. The
orders expected come from the polynomials alone: Kailath (1980), Linear Systems, section 2.4
(memory), for series, parallel and feedback connections of scalar systems.
"""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from realize import Realization, exact
from tests.helpers import (
    Polynomial,
    assert_equal_exact,
    common_factor,
    controllable_companion,
    join,
    plus,
    product,
    times,
    zeros,
)
from tests.strategies import PlantedFraction, coprime_fractions

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")

fractions = coprime_fractions()
Matrices = tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]


def by_hand(case: PlantedFraction) -> Matrices:
    """A controllable companion form, written down by the tests."""
    return controllable_companion(case.numerator, case.denominator)


def series(first: Matrices, second: Matrices) -> Realization:
    """The first feeds the second."""
    (A1, B1, C1, D1), (A2, B2, C2, D2) = first, second
    return Realization(
        join([[A1, zeros(len(A1), len(A2))], [product(B2, C1), A2]]),
        join([[B1], [product(B2, D1)]]),
        join([[product(D2, C1), C2]]),
        product(D2, D1),
    )


def parallel(first: Matrices, second: Matrices) -> Realization:
    """One input drives both, and the outputs are added."""
    (A1, B1, C1, D1), (A2, B2, C2, D2) = first, second
    return Realization(
        join([[A1, zeros(len(A1), len(A2))], [zeros(len(A2), len(A1)), A2]]),
        join([[B1], [B2]]),
        join([[C1, C2]]),
        D1 + D2,
    )


def feedback(plant: Matrices, controller: Matrices) -> Realization:
    """The controller measures the output of the plant and is subtracted at its input."""
    (A1, B1, C1, D1), (A2, B2, C2, D2) = plant, controller
    gain = 1 + D1[0, 0] * D2[0, 0]
    inner = Fraction(1) / gain
    # u1 = (r - C2 x2 - D2 C1 x1) / gain; y1 = C1 x1 + D1 u1
    from1, from2 = -inner * product(D2, C1), -inner * C2
    y1_from1, y1_from2 = C1 + product(D1, from1), product(D1, from2)
    return Realization(
        join(
            [
                [A1 + product(B1, from1), product(B1, from2)],
                [product(B2, y1_from1), A2 + product(B2, y1_from2)],
            ]
        ),
        join([[inner * B1], [inner * product(B2, D1)]]),
        join([[y1_from1, y1_from2]]),
        inner * D1,
    )


def degree(p: Polynomial) -> int:
    """The degree of a polynomial that is not zero."""
    return len(p) - 1


def hidden_polynomial(model: Realization) -> Polynomial:
    """The product of the polynomials of the three hidden parts."""
    parts = exact.kalman_parts(model).polynomials
    return times(*(p for part, p in parts.items() if part != "controllable, observable"))


@given(fractions, fractions)
def test_series_loses_what_cancels_between_the_two(
    first: PlantedFraction, second: PlantedFraction
) -> None:
    """Zeros of one that are poles of the other are lost, and nothing else."""
    model = series(by_hand(first), by_hand(second))
    lost = times(
        common_factor(first.numerator, second.denominator),
        common_factor(second.numerator, first.denominator),
    )
    assert exact.minimal(model).order == model.order - degree(lost)
    assert_equal_exact(hidden_polynomial(model), lost)


@given(fractions, fractions)
def test_in_series_each_side_hides_its_own(first: PlantedFraction, second: PlantedFraction) -> None:
    """Zeros of the first hide poles of the second from the input; the other way, from the output.

    The hand-made companion forms are controllable, so this is the whole story for the dimensions.
    """
    model = series(by_hand(first), by_hand(second))
    not_reached = degree(common_factor(first.numerator, second.denominator))
    not_seen = degree(common_factor(second.numerator, first.denominator))
    assert exact.staircase(model).dimension == model.order - not_reached
    assert exact.staircase(model, side="output").dimension == model.order - not_seen


@given(fractions, fractions)
def test_parallel_loses_common_poles(first: PlantedFraction, second: PlantedFraction) -> None:
    """The order is the degree of the sum in lowest terms; without common poles nothing is lost."""
    model = parallel(by_hand(first), by_hand(second))
    top = plus(
        times(first.numerator, second.denominator), times(second.numerator, first.denominator)
    )
    bottom = times(first.denominator, second.denominator)
    lost = common_factor(bottom, top)
    assert exact.minimal(model).order == model.order - degree(lost)
    assert_equal_exact(hidden_polynomial(model), lost)
    if degree(common_factor(first.denominator, second.denominator)) == 0:
        assert degree(lost) == 0


@given(fractions, fractions)
def test_feedback_loses_what_cancels_in_the_closed_loop(
    plant: PlantedFraction, controller: PlantedFraction
) -> None:
    """From reference to output n1 d2 / (d1 d2 + n1 n2) loses its common factor, and no more.

    There is one exactly when a zero of the plant is a pole of the controller.
    """
    P, K = by_hand(plant), by_hand(controller)
    assume(1 + P[3][0, 0] * K[3][0, 0] != 0)
    model = feedback(P, K)
    lost = common_factor(
        plus(
            times(plant.denominator, controller.denominator),
            times(plant.numerator, controller.numerator),
        ),
        times(plant.numerator, controller.denominator),
    )
    assert exact.minimal(model).order == model.order - degree(lost)
    assert_equal_exact(hidden_polynomial(model), lost)
    meets = common_factor(plant.numerator, controller.denominator)
    assert (degree(lost) > 0) == (degree(meets) > 0)


@given(fractions, st.integers(-5, 5))
def test_output_feedback_of_a_coprime_fraction_hides_nothing(
    case: PlantedFraction, gain: int
) -> None:
    """Constant output feedback keeps the order, the stairs and the minimality."""
    P = by_hand(case)
    assume(1 + P[3][0, 0] * gain != 0)
    empty = controllable_companion((Fraction(gain),), (Fraction(1),))
    model = feedback(P, empty)
    assert exact.minimal(model).order == degree(case.denominator)


@given(fractions, fractions)
def test_side_by_side_nothing_is_lost(first: PlantedFraction, second: PlantedFraction) -> None:
    """With inputs and outputs of their own minimal models stay minimal, whatever their poles."""
    (A1, B1, C1, D1), (A2, B2, C2, D2) = by_hand(first), by_hand(second)

    def beside(left: np.ndarray, right: np.ndarray) -> np.ndarray:
        return join(
            [
                [left, zeros(left.shape[0], right.shape[1])],
                [zeros(right.shape[0], left.shape[1]), right],
            ]
        )

    model = Realization(beside(A1, A2), beside(B1, B2), beside(C1, C2), beside(D1, D2))
    assert exact.minimal(model).order == model.order
