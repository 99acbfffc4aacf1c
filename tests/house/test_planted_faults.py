"""Faults planted in the arithmetic must be caught: the library answers rightly or not at all."""

from __future__ import annotations

import itertools
from collections.abc import Callable
from fractions import Fraction
from typing import Any

import flint
import numpy as np
import pytest

import realize
from realize import Realization, errors, exact, floating, forms, polynomials
from realize.arithmetic import modular
from realize.arithmetic.exact import ExactPath, verified
from realize.arithmetic.modular import Profile
from realize.arithmetic.rational import RationalMatrix
from tests.helpers import PARTS
from tests.strategies import FACTORS, plant

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")


def model() -> Realization:
    """A seeded planted model in general coordinates: six states, four reached, three visible."""
    chain = dict(zip(PARTS, ([FACTORS[0]], FACTORS[1:4], [], [FACTORS[8]]), strict=True))
    planted = plant(
        [{part: tuple(factors) for part, factors in chain.items()}],
        rng=np.random.default_rng(7),
        more_inputs=1,
        more_outputs=1,
        steps=20,
        largest=2,
        scales=(Fraction(1, 7), Fraction(3)),
    )
    assert (planted.model.order, planted.reachable, planted.order) == (6, 4, 3)
    return planted.model


def within(seconds: float, form: Callable[..., Any], *arguments: Any) -> Any:
    """Ask for a form on an exact path with a budget of time."""
    return form(ExactPath(seconds), *arguments)


def spoiled(function: Callable[..., Any], spoil: Callable[[Any], Any], calls: int | None) -> Any:
    """The function, its first calls (all when None) spoiled."""
    numbers = itertools.count()

    def faulty(*arguments: Any, **options: Any) -> Any:
        result = function(*arguments, **options)
        return spoil(result) if calls is None or next(numbers) < calls else result

    return faulty


def test_the_verification_refuses_a_wrong_basis() -> None:
    """One entry changed anywhere in the lifted basis, and the subspace is not accepted."""
    A, B, C, _ = model().matrices()
    arrays = RationalMatrix.from_array(A), RationalMatrix.from_array(B)
    right = ExactPath().open(model()).lift_reached(*arrays)
    below = right.below.matrix
    assert verified(*arrays, right.pivots, right.others, right.below) is not None
    for i, j in itertools.product(range(below.nrows()), range(below.ncols())):
        wrong = flint.fmpq_mat(below)
        wrong[i, j] = below[i, j] + 1
        assert verified(*arrays, right.pivots, right.others, RationalMatrix(wrong)) is None


def test_wrong_numbers_lifted_at_first_do_no_harm(monkeypatch: pytest.MonkeyPatch) -> None:
    """A wrong reconstruction is refused by the verification, and more primes give the answer."""
    expected = exact.minimal(model())

    def spoil(numbers: Any) -> Any:
        return numbers and [numbers[0] + 1, *numbers[1:]]

    monkeypatch.setattr(modular, "_to_rationals", spoiled(modular._to_rationals, spoil, 2))
    assert exact.minimal(model()).model == expected.model


def test_wrong_numbers_for_ever_give_no_answer(monkeypatch: pytest.MonkeyPatch) -> None:
    """When every reconstruction is wrong the path stops with an error and answers nothing."""

    def spoil(numbers: Any) -> Any:
        return numbers and [numbers[0] + 1, *numbers[1:]]

    monkeypatch.setattr(modular, "_to_rationals", spoiled(modular._to_rationals, spoil, None))
    with pytest.raises((errors.VerificationError, errors.BudgetError)):
        within(0.3, forms.minimal, model())


@pytest.mark.parametrize("form", ["minimal", "kalman_parts"])
def test_a_prime_that_loses_rank_does_no_harm(form: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """A first prime under which a dimension is missing changes no answer."""
    expected = getattr(exact, form)(model())

    def lose(profile: Profile) -> Profile:
        if not profile.pivots:
            return profile
        rank, width = len(profile.pivots) - 1, profile.rows.ncols()
        rows = flint.nmod_mat(
            rank, width, profile.rows.entries()[: rank * width], profile.rows.modulus()
        )
        return Profile(rows, profile.pivots[:-1])

    monkeypatch.setattr(modular, "reached_rows", spoiled(modular.reached_rows, lose, 1))
    found = getattr(exact, form)(model())
    assert found.model == expected.model


def test_stairs_that_lie_are_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    """A staircase whose stages were swapped is not returned."""

    def swap(steps: list[Profile]) -> list[Profile]:
        return steps[::-1]

    monkeypatch.setattr(modular, "krylov_steps", spoiled(modular.krylov_steps, swap, None))
    with pytest.raises((errors.VerificationError, errors.BudgetError)):
        within(0.3, forms.staircase, model(), "input")


def test_a_division_that_leaves_a_remainder_is_an_error() -> None:
    """An exact quotient that is none is refused."""
    s_plus_1 = (Fraction(1), Fraction(1))
    with pytest.raises(errors.VerificationError):
        polynomials.divide_exact((Fraction(1), Fraction(0), Fraction(1)), s_plus_1)


def test_a_common_factor_that_is_none_is_an_error(monkeypatch: pytest.MonkeyPatch) -> None:
    """A wrong greatest common divisor never reaches the caller of cancel."""
    wrong = (Fraction(1), Fraction(5))
    monkeypatch.setattr(polynomials, "gcd", lambda *_: wrong)
    with pytest.raises(errors.VerificationError):
        exact.cancel(realize.TransferMatrix([1, 1], [1, 3, 2]))


def test_contradicting_rank_decisions_are_an_error() -> None:
    """With a tolerance that no model can meet the floating path never returns nonsense shapes.

    Either the parts add up, or the contradiction is named.
    """
    doubles = model().to_float()
    for tolerance in (0.0, 1e-3, 0.03, 0.1, 0.3, 1.0):
        try:
            found = floating.kalman_parts(doubles, tolerance=tolerance)
        except errors.PrecisionError as error:
            assert "tolerance" in str(error)
            continue
        assert sum(found.dimensions.values()) == doubles.order
