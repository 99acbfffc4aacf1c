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
from realize.examination import routes
from tests.helpers import PARTS, markov_by_hand
from tests.strategies import FACTORS, plant

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")


def planted_model(sizes: tuple[tuple[int, ...], ...], channels: int) -> Realization:
    """A seeded model in general coordinates; `sizes` picks the factors of each of the parts."""
    chain = {
        part: tuple(FACTORS[k] for k in picked) for part, picked in zip(PARTS, sizes, strict=True)
    }
    return plant(
        [chain],
        rng=np.random.default_rng(7),
        more_inputs=channels - 1,
        more_outputs=channels - 1,
        steps=20,
        largest=2,
        scales=(Fraction(1, 7), Fraction(3)),
    ).model


def model(channels: int = 2) -> Realization:
    """Six states, four of them reached and three of those seen."""
    return planted_model(((0,), (1, 2, 3), (), (8,)), channels)


def test_the_model_is_what_it_should_be() -> None:
    """The planted faults below meet a subspace that must be lifted, and hidden modes."""
    found = exact.minimal(model())
    assert (found.source_order, found.order) == (6, 3)
    assert exact.staircase(model()).dimension == 4


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
    A, B, _C, _ = model().matrices()
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


@pytest.mark.parametrize("tolerance", [0.0, 1e-3, 0.03, 0.1, 0.3, 1.0])
def test_parts_add_up_or_the_contradiction_is_named(tolerance: float) -> None:
    """At a tolerance far too coarse the floating path returns no nonsense."""
    doubles = model().to_float()
    try:
        found = floating.kalman_parts(doubles, tolerance=tolerance)
    except errors.PrecisionError as error:
        said = str(error)
    else:
        said = f"{sum(found.dimensions.values())} states in all"
    assert said == "6 states in all" or "contradict" in said


@pytest.mark.parametrize("route", ["_coprime_order", "_hankel_rank"])
@pytest.mark.parametrize("lie", [1, -1])
def test_a_route_that_lies_is_caught(route: str, lie: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """One route off by one, always: the examination refuses to answer and shows all three."""
    honest = getattr(routes, route)
    monkeypatch.setattr(routes, route, lambda *arguments: honest(*arguments) + lie)
    with pytest.raises(errors.DisagreementError, match="bug") as caught:
        realize.examine(model())
    assert caught.value.answers["state"] == 3
    assert sorted(set(caught.value.answers.values())) == sorted({3, 3 + lie})


@pytest.mark.parametrize("route", ["_coprime_order", "_hankel_rank"])
def test_a_route_that_falls_short_once_does_no_harm(
    route: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    """An order modulo a prime is a lower bound: one unlucky prime is made good by the next."""
    honest = getattr(routes, route)
    monkeypatch.setattr(routes, route, spoiled(honest, lambda order: order - 1, 1))
    assert set(realize.examine(model()).routes["given"].values()) == {3}


def test_a_rank_that_lies_upwards_is_caught(monkeypatch: pytest.MonkeyPatch) -> None:
    """A subspace claimed to be everything needs no lifting; the other routes contradict it."""

    def everything(profile: Profile) -> Profile:
        width, prime = profile.rows.ncols(), profile.rows.modulus()
        unit = [int(i == j) for i in range(width) for j in range(width)]
        return Profile(flint.nmod_mat(width, width, unit, prime), tuple(range(width)))

    monkeypatch.setattr(modular, "reached_rows", spoiled(modular.reached_rows, everything, None))
    with pytest.raises(errors.DisagreementError):
        realize.examine(model(channels=1))


def test_a_hidden_polynomial_that_does_not_divide_is_caught(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """A wrong characteristic polynomial of a hidden block does not get past the division."""
    honest = RationalMatrix.characteristic_polynomial

    def wrong(self: RationalMatrix) -> tuple[Fraction, ...]:
        found = honest(self)
        return (*found[:-1], found[-1] + 1) if len(found) == 4 else found

    # One hidden state in each part, and one more that is not reached: three are not reached.
    subject = planted_model(((0,), (1,), (3,), (8,)), 1)
    realize.examine(subject)
    monkeypatch.setattr(RationalMatrix, "characteristic_polynomial", wrong)
    with pytest.raises(errors.VerificationError):
        realize.examine(subject)


@pytest.mark.parametrize("first", [2, 3, 5, 7, 11])
def test_small_primes_do_not_decide_wrongly(first: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """Equal and different models, with primes that lose ranks and divide denominators first."""
    genuine = modular.primes
    small = [prime for prime in (2, 3, 5, 7, 11, 13) if prime >= first]
    monkeypatch.setattr(modular, "primes", lambda: itertools.chain(small, genuine()))
    rng, different = np.random.default_rng(first), 0
    for _ in range(15):
        order = int(rng.integers(1, 4))
        A, B = rng.integers(-3, 4, (order, order)), rng.integers(-3, 4, (order, 1))
        C, T = rng.integers(-3, 4, (1, order)), np.eye(order, dtype=int)
        T[0, -1] += order > 1
        back = np.eye(order, dtype=int)
        back[0, -1] -= order > 1
        model = Realization(A, B, C)
        other = back @ A @ T, back @ B, C @ T
        found = realize.same_transfer(model, Realization(*other))
        assert found
        realize.check(realize.certify(found))
        # Modulo each of the small primes this is the same model.
        away = Realization(other[0], other[1], other[2] + 30030)
        changed = realize.same_transfer(model, away)
        parameters = [markov_by_hand(each, 2 * order + 1) for each in (model, away)]
        equal = all(map(np.array_equal, *parameters))
        assert bool(changed) == equal
        different += not equal
        realize.check(realize.certify(changed))
    assert different > 5
