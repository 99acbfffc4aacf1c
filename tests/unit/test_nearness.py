"""The distance to uncontrollability: bounds, pair, witness, errors, odd shapes."""

from __future__ import annotations

import math
import pickle
from fractions import Fraction
from typing import Any

import numpy as np
import pytest

import realize
from realize import (
    BudgetError,
    PrecisionError,
    Realization,
    ShapeError,
    ToleranceError,
    UnsupportedEntryError,
    distance_to_uncontrollability,
    distance_to_unobservability,
    exact,
)
from realize.nearness.pencil import Pencil
from realize.nearness.proof import (
    bits_for,
    decompose,
    reduce_in_balls,
    reduce_in_doubles,
)
from realize.nearness.witness import root_above
from realize.polynomials import working_precision
from tests.helpers import walk

GAO = Realization([[1, 1, 1], ["0.1", 3, 5], [0, -1, -1]], [1, "0.1", 0], [1, 0, 2])


def draw(n: int, m: int, p: int = 1, seed: int = 5) -> Realization:
    rng = np.random.default_rng(seed)
    return Realization(
        rng.standard_normal((n, n)), rng.standard_normal((n, m)), rng.standard_normal((p, n))
    )


def pencil_of(model: Realization) -> Pencil:
    stored = model if model.kind == "rational" else model.read("stored")
    return Pencil(stored.A, stored.B)


def sigma(model: Realization, z: complex) -> float:
    A, B = model.to_float().matrices()[:2]
    return float(np.linalg.svd(np.hstack([A - z * np.eye(len(A)), B]), compute_uv=False)[-1])


def test_bounds_and_point_agree() -> None:
    """The least singular value at the point lies between the bounds, close to the upper one."""
    for model in (GAO, draw(6, 2), draw(9, 1)):
        found = distance_to_uncontrollability(model)
        assert 0.9 * found.upper <= found.lower < found.upper
        assert 0.99 * found.upper <= sigma(model, found.point) <= found.upper * (1 + 1e-12)


@pytest.mark.parametrize("rtol", [0.9, 0.3, 1e-3, 1e-7])
def test_the_room_asked_for_is_kept(rtol: float) -> None:
    """(upper - lower) / upper is at most rtol, and not absurdly smaller."""
    found = distance_to_uncontrollability(GAO, rtol=rtol)
    room = (found.upper - found.lower) / found.upper
    assert 0.5 * rtol < room <= rtol


def test_the_perturbation_has_the_norm_and_makes_the_mode() -> None:
    """Its 2-norm is the upper bound, and with it the pencil is singular at the point."""
    for model in (GAO, draw(7, 3)):
        found = distance_to_uncontrollability(model)
        dA, dB = found.perturbation
        A, B = model.to_float().matrices()[:2]
        assert np.linalg.norm(np.hstack([dA, dB]), 2) == pytest.approx(found.upper, rel=1e-12)
        changed = np.hstack([A + dA - found.point * np.eye(len(A)), B + dB])
        assert np.linalg.svd(changed, compute_uv=False)[-1] < 1e-13


def test_the_exact_pair_proves_the_upper_bound() -> None:
    """|u* M(z)|^2 / |u|^2 of the pair kept, in fractions, is the square and below upper^2."""
    found = distance_to_uncontrollability(GAO)
    pair = found._pair.get()
    assert pair is not None
    x, y = pair.point
    total = Fraction(0)
    for j in range(4):
        column = GAO.A[:, j] if j < 3 else GAO.B[:, 0]
        re = sum((a * v for a, v in zip(pair.real, column, strict=True)), Fraction(0))
        im = sum((-b * v for b, v in zip(pair.imaginary, column, strict=True)), Fraction(0))
        if j < 3:
            # (a - ib)(x + iy) = (ax + by) + i (ay - bx)
            re -= pair.real[j] * x + pair.imaginary[j] * y
            im -= pair.real[j] * y - pair.imaginary[j] * x
        total += re * re + im * im
    length = sum((v * v for v in (*pair.real, *pair.imaginary)), Fraction(0))
    assert total / length == pair.square <= Fraction(found.upper) ** 2


@pytest.mark.parametrize("model", [GAO, draw(5, 2), draw(4, 1, seed=3)])
def test_the_witness_hides_a_mode_exactly(model: Realization) -> None:
    """An exact real model, not controllable, at the distance stated, no nearer than lower."""
    found = distance_to_uncontrollability(model, rtol=0.01)
    witness = found.witness
    assert witness is not None
    assert exact.staircase(witness).dimension < model.order
    stored = model if model.kind == "rational" else model.read("stored")
    change = np.hstack([witness.A - stored.A, witness.B - stored.B]).astype(float)
    assert np.linalg.norm(change, 2) == pytest.approx(found.real_upper, rel=1e-9)
    assert found.lower <= found.real_upper
    assert (witness.C == stored.C).all()


def test_the_real_witness_is_better_than_a_first_guess() -> None:
    """The subspace is chosen: the plane of the complex vector alone gives a farther model."""
    from realize.nearness.witness import _changed

    model = GAO
    found = distance_to_uncontrollability(model)
    pair = found._pair.get()
    assert pair is not None
    assert found.point.imag != 0
    first = _changed(pencil_of(model), [pair.real, pair.imaginary])
    assert found.real_upper < 0.999 * root_above(first.square)
    assert found.real_upper <= 2 * found.upper


def test_a_real_point_has_real_answers() -> None:
    """Then the change is real, and the witness lies as near as the complex bound."""
    model = Realization([[0, 1], [-2, -3]], [0, 1], [1, 0])
    found = distance_to_uncontrollability(model)
    assert found.point.imag == 0.0
    assert found.perturbation[0].dtype == float
    assert found.real_upper == pytest.approx(found.upper, rel=1e-9)


def test_unobservability_is_the_dual() -> None:
    """Bounds are those of the dual; the perturbation is (dA, dC), the witness hides a mode."""
    model = draw(5, 1, p=2)
    found = distance_to_unobservability(model)
    dual = distance_to_uncontrollability(model.dual())
    assert (found.lower, found.upper) == (dual.lower, dual.upper)
    dA, dC = found.perturbation
    assert dC.shape == (2, 5)
    A, _, C, _ = model.matrices()
    changed = np.vstack([A + dA - found.point * np.eye(5), C + dC])
    assert np.linalg.svd(changed, compute_uv=False)[-1] < 1e-13
    assert found.witness is not None
    assert found.witness.C.shape == (2, 5)
    assert exact.staircase(found.witness, side="output").dimension < 5


def test_time_plays_no_part() -> None:
    """A discrete model has the distance of the continuous one; its witness keeps the period."""
    A, B, C, _ = GAO.matrices()
    discrete = Realization(A, B, C, sampling_period="1/10")
    found, same = distance_to_uncontrollability(discrete), distance_to_uncontrollability(GAO)
    assert (found.lower, found.upper) == (same.lower, same.upper)
    assert found.witness is not None
    assert found.witness.sampling_period == Fraction(1, 10)


@pytest.mark.parametrize("exponent", [-900, -40, 40, 900])
def test_a_power_of_two_scales_everything(exponent: int) -> None:
    """One factor on A and B alike scales the bounds, bit for bit, also near the ends of range."""
    A, B = draw(4, 1).matrices()[:2]
    there = Realization(np.ldexp(A, exponent), np.ldexp(B, exponent), np.zeros((1, 4)))
    here = Realization(A, B, np.zeros((1, 4)))
    found, same = distance_to_uncontrollability(there), distance_to_uncontrollability(here)
    assert found.lower == math.ldexp(same.lower, exponent)
    assert found.upper == math.ldexp(same.upper, exponent)


def test_no_states() -> None:
    """No change hides a mode where there is none: infinite, by convention."""
    found = distance_to_uncontrollability(Realization([], [], [], [[1]]))
    assert found.lower == found.upper == found.real_upper == math.inf
    assert found.witness is None
    assert math.isnan(found.point.real)


@pytest.mark.parametrize(
    ("A", "B", "point"),
    [
        ([[2]], [[0]], 2),
        ([[0.0]], [[0.0]], 0),
        ([[1, 0], [0, 1]], [[1], [1]], 1),
        ([["1/3", 0], [0, 5]], [[0], [1]], 1 / 3),
        ([[0.5, 1.0], [0.0, 0.5]], [[1.0], [0.0]], 0.5),
    ],
)
def test_exactly_uncontrollable_is_zero(A: Any, B: Any, point: complex) -> None:
    """Not 1e-17: zero, with the mode, no change, and the model itself as the witness."""
    model = Realization(A, B, [[1] * len(A)])
    found = distance_to_uncontrollability(model)
    assert found.lower == found.upper == found.real_upper == 0.0
    assert found.proved
    assert found.point == point
    assert not found.perturbation[0].any()
    assert found.witness == (model if model.kind == "rational" else model.read("stored"))


def test_no_inputs() -> None:
    """Without inputs every mode is out of reach."""
    model = Realization([[1, 2], [3, 4]], np.zeros((2, 0)), [[1, 0]])
    assert distance_to_uncontrollability(model).upper == 0.0


def test_one_state() -> None:
    """The distance is the length of the row b, also far below the roundoff."""
    assert distance_to_uncontrollability(Realization([[7]], [[3, 4]], [[1]])).upper == 5.0
    found = distance_to_uncontrollability(Realization([[2]], [["1e-40"]], [[1]]))
    assert found.lower <= 1e-40 <= found.upper <= 1.0000001e-40


def test_two_weak_directions_at_once() -> None:
    """Two equal tiny singular values, where one direction alone cannot be told apart."""
    model = Realization([[1, 0], [0, 1]], [[1, 0], [0, "1e-25"]], [[1, 1]])
    found = distance_to_uncontrollability(model)
    assert found.lower <= 1e-25 <= found.upper * (1 + 1e-12)
    twice = Realization(
        [[2, 0, 0, 0], [0, "1/3", 0, 0], [0, 0, 2, 0], [0, 0, 0, "1/3"]],
        [[1, 0], ["1e-25", 0], [0, 1], [0, "1e-25"]],
        [[1, 1, 1, 1]],
    )
    alone = Realization([[2, 0], [0, "1/3"]], [1, "1e-25"], [1, 1])
    both, one = distance_to_uncontrollability(twice), distance_to_uncontrollability(alone)
    assert both.lower <= one.upper
    assert one.lower <= both.upper


def test_floats_are_taken_as_stored() -> None:
    """0.1 in doubles is not 1/10: the model of doubles is controllable, the written one is not."""
    chamber = Realization([[-0.1, -0.2], [0.0, -0.3]], [0.1, 0.1], [1.0, 0.0])
    found = distance_to_uncontrollability(chamber)
    assert 0 < found.lower <= found.upper < 1e-16
    assert distance_to_uncontrollability(chamber.read("written")).upper == 0.0


def test_both_makers_give_the_same_problem() -> None:
    """In doubles and in balls the reduced problem has the same terms and about the same bounds."""
    pencil = pencil_of(GAO)
    found = decompose(pencil, (Fraction(1, 8), Fraction(1, 8)))
    radius = 0.2 * float(found.values[1])
    first = reduce_in_doubles(pencil, found, 1, radius, 1e-12)
    with working_precision(bits_for(1e-3, 1e-6)):
        second = reduce_in_balls(pencil, found, 1, radius, 1e-12)
    assert first is not None
    assert second is not None
    count = min(len(first.terms), len(second.terms))
    assert first.scale == second.scale
    assert np.abs(first.terms[:count] - second.terms[:count]).max() < 1e-13
    assert first.left == pytest.approx(second.left, rel=1e-6)
    # The bound of the second is the looser one, by a thousandth.
    assert first.right == pytest.approx(second.right, rel=2e-3)


@pytest.mark.parametrize("k", [1, 2, 3])
def test_the_reduced_problem_bounds_from_both_sides(k: int) -> None:
    """At offsets drawn, what is proved of small squares is true, and nearly all that is true."""
    model = draw(8, 2)
    pencil = pencil_of(model)
    found = decompose(pencil, (Fraction(1, 16), Fraction(1, 32)))
    side = 0.3 * float(found.values[-1 - k]) / 2
    reduced = reduce_in_doubles(pencil, found, k, side, 1e-12)
    assert reduced is not None
    lowest = min(
        float(np.linalg.svd(pencil.matrix(1 / 16 + x + 1j * (1 / 32 + y)), compute_uv=False)[-1])
        for x in np.linspace(-side / 2, side / 2, 21)
        for y in np.linspace(-side / 2, side / 2, 21)
    )
    assert reduced.cover(side, 0.9 * lowest, 0.9 * lowest).open == ()
    refused = reduced.cover(side, 1.05 * lowest, 1.05 * lowest)
    assert refused.low is not None or refused.open


def test_the_corner_test_never_says_too_much() -> None:
    """Levels above the least eigenvalue are refused, levels a little below are proved."""
    pencil = pencil_of(draw(12, 2))
    for z in (0.1 + 0.2j, -0.3j, 0.5 + 0j):
        least = float(np.linalg.svd(pencil.matrix(z), compute_uv=False)[-1]) ** 2
        assert not pencil.above(z, least * (1 + 1e-9))
        assert pencil.above(z, least * (1 - 1e-9) - 2 * pencil.doubt(z, least))


def test_a_root_is_rounded_up() -> None:
    """Never below the root, and at most a spacing or two above it, at any size."""
    for number in (Fraction(2), Fraction(1, 3), Fraction(7) ** 300, Fraction(1, 10**400)):
        root = root_above(number)
        assert Fraction(root) ** 2 >= number
        assert Fraction(math.nextafter(math.nextafter(root, 0.0), 0.0)) ** 2 < number
    assert root_above(Fraction(0)) == 0.0


def test_a_budget_too_small_keeps_what_was_reached() -> None:
    """The error holds both bounds and the point, and they are true."""
    chain = np.eye(24, k=-1) - np.triu(np.ones((24, 24)))
    model = Realization(chain, np.eye(24, 1), np.ones((1, 24)))
    with pytest.raises(BudgetError, match="lies between") as caught:
        distance_to_uncontrollability(model, rtol=1e-6, budget=0.3)
    error = caught.value
    assert error.lower is not None
    assert error.upper is not None
    assert error.point is not None
    assert error.budget == 0.3
    assert sigma(model, error.point) == pytest.approx(error.upper, rel=1e-2)
    truth = distance_to_uncontrollability(model)
    assert 0 <= error.lower <= truth.upper
    assert truth.lower <= error.upper
    assert pickle.loads(pickle.dumps(error)).upper == error.upper


def test_no_time_at_all() -> None:
    """Nothing was reached, and the error says so."""
    with pytest.raises(BudgetError, match="nothing was reached") as caught:
        distance_to_uncontrollability(draw(4, 1), budget=0)
    assert caught.value.lower is caught.value.upper is None


@pytest.mark.parametrize("rtol", [0, -0.1, 1, 2.0, math.nan, 1e-11, True, "0.1", None])
def test_bad_rtol(rtol: Any) -> None:
    """Outside the range, or no number: refused with the range."""
    with pytest.raises(ToleranceError, match="rtol is"):
        distance_to_uncontrollability(GAO, rtol=rtol)


@pytest.mark.parametrize("budget", [-1, math.nan, "10", True])
def test_bad_budget(budget: Any) -> None:
    """A budget is seconds, not negative, or None."""
    with pytest.raises(UnsupportedEntryError, match="budget is"):
        distance_to_uncontrollability(GAO, budget=budget)


def test_bad_models() -> None:
    """Only models are taken; shapes and NaN are refused when a model is made."""
    for question in (distance_to_uncontrollability, distance_to_unobservability):
        with pytest.raises(UnsupportedEntryError, match="wanted a Realization"):
            question(np.eye(2))  # type: ignore[arg-type]
    with pytest.raises(ShapeError):
        Realization([[1.0, 2.0]], [[1.0]], [[1.0]])
    with pytest.raises(realize.EntryError):
        Realization([[math.nan]], [[1.0]], [[1.0]])


def test_out_of_range_is_said() -> None:
    """Distances below 1e-140 of the pair are beyond the search, which says so."""
    model = Realization([[2, 0], [0, "1/3"]], [1, "1e-200"], [1, 1])
    with pytest.raises(PrecisionError, match="out of the range"):
        distance_to_uncontrollability(model)


def test_pickles() -> None:
    """A distance is computed to the end before it is pickled."""
    found = distance_to_uncontrollability(GAO)
    again = pickle.loads(pickle.dumps(found))
    assert again.real_upper == found.real_upper
    assert again.witness == found.witness
    assert repr(again) == repr(found)


def test_results_are_plain_and_precision_is_left_alone() -> None:
    """No object of FLINT is in the answer, and its precision is what it was, balls or no balls."""
    import flint

    before = flint.ctx.prec
    weak = Realization([[2, 0], [0, "1/3"]], [1, "1e-25"], [1, 1])
    for model in (weak, GAO):
        found = distance_to_uncontrollability(model)
        assert found.real_upper > 0
        for where, value in walk(found):
            assert not type(value).__module__.startswith("flint"), where
    assert flint.ctx.prec == before


def test_rationals_that_no_double_holds() -> None:
    """Thirds and sevenths: the rounding of the entries is part of what is proved."""
    model = Realization(
        [["1/3", "2/7", 1], ["-1/7", "1/9", "1/3"], [0, "5/7", "-1/3"]],
        ["1/3", 0, "1/11"],
        [1, 0, 0],
    )
    assert pencil_of(model).slack > 0
    found = distance_to_uncontrollability(model, rtol=1e-8)
    near = distance_to_uncontrollability(model.to_float(), rtol=1e-8)
    assert found.lower <= near.upper * (1 + 1e-12)
    assert near.lower <= found.upper * (1 + 1e-12)
    assert found.upper != near.upper


@pytest.mark.parametrize("size", [1e-100, 1e-126, 1e-138])
def test_distances_whose_squares_are_beyond_doubles(size: float) -> None:
    """One state beside an input of that size: the distance is the size, and nothing overflows."""
    found = distance_to_uncontrollability(Realization([[1.0]], [[size]], [[1.0]]))
    assert found.proved
    assert found.lower <= size <= found.upper * (1 + 1e-12)
    assert found.lower >= 0.89 * size
