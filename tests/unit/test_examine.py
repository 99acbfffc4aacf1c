"""Hand cases of the paired examination: every attribute, word and number of the record."""

from __future__ import annotations

import json
import math
import os
import pickle
import re
import subprocess
import sys
import time
from fractions import Fraction
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest

from realize import Realization, TransferMatrix, errors, exact, examine, floating
from realize.arithmetic import modular
from realize.tolerance import default_tolerance, rounding_floor
from tests.helpers import (
    CONTROLLABLE_OBSERVABLE,
    CONTROLLABLE_UNOBSERVABLE,
    ONE,
    PARTS,
    UNCONTROLLABLE_OBSERVABLE,
    UNCONTROLLABLE_UNOBSERVABLE,
    change_coordinates,
    characteristic_polynomial,
    identity,
    matrix,
    product,
)

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")

F = Fraction
READINGS = ("stored", "written", "intended")


# --------------------------------------------------------------------------- models


def diagonal(*values: Any, B: Any = None, C: Any = None, **more: Any) -> Realization:
    """Separate states; the input reaches those with a B, the output sees those with a C."""
    size = len(values)
    rows = [[x if i == j else 0 for j in range(size)] for i, x in enumerate(values)]
    return Realization(rows, B or [1] * size, C or [1] * size, **more)


def chamber() -> Realization:
    """Decimals that no double holds. The left vector (1, -1) of -1/10 has no input.

    (1, -1) A = (-0.1, -0.2 + 0.3) = -0.1 (1, -1), and 0.1 - 0.1 = 0; in doubles neither holds.
    """
    return Realization(
        [[-0.1, -0.2], [0.0, -0.3]],
        [0.1, 0.1],
        [1.0, 0.0],
        state_names=["bed", "air"],
        input_names=["burner"],
        output_names=["sensor"],
    )


def four_parts() -> Realization:
    """One state in each part: -1, -2, 3 and -4, in the order of the parts; coupled, mixed."""
    A = [[-1, 1, 1, 1], [0, -2, 0, 1], [0, 0, 3, 1], [0, 0, 0, -4]]
    T = matrix([[1, 0, 0, 0], [2, 1, 0, 0], [-1, 1, 1, 0], [0, 3, -1, 1]], (4, 4))
    matrices = (
        matrix(A, (4, 4)),
        matrix([[0], [1], [0], [0]], (4, 1)),
        matrix([[0, 1, 0, 0]], (1, 4)),
        matrix([[0]], (1, 1)),
    )
    return Realization(*change_coordinates(matrices, T))


def mirrored(model: Realization, *direction: int) -> Realization:
    """The rational model in coordinates mirrored in the plane normal to a direction: exact."""
    v = matrix([[x] for x in direction], (model.order, 1))
    weight = Fraction(2, sum(x * x for x in direction))
    T = identity(model.order) - weight * product(v, v.T)
    return Realization(*change_coordinates(model.matrices(), T))


def nearly_equal(gap: Fraction) -> Realization:
    """Modes -1 and -1 - gap, and -2, which is not reached: order 2 however small the gap.

    The staircase must keep a number of the size of the gap, and behind it the rounding of the
    entries shows at the rounding over the gap.
    """
    return mirrored(diagonal(-1, -1 - gap, -2, B=[1, 1, 0]), 1, 2, 3)


def two_by_two() -> Realization:
    """Six states, two inputs and outputs: two not reached, one of the reached not seen."""
    rng = np.random.default_rng(11)
    A = rng.integers(-3, 4, (6, 6))
    B, C = rng.integers(-3, 4, (6, 2)), rng.integers(-3, 4, (2, 6))
    A[4:, :4] = 0
    B[4:] = 0
    A[:3, 3] = 0
    A[4:, 3] = 0
    C[:, 3] = 0
    return mirrored(Realization(A, B, C), 1, -1, 2, 1, 1, 1)


def rotated() -> Realization:
    """-1, -2, -3 and a growing 1/2 that is not reached, in orthogonal coordinates in doubles."""
    Q = np.linalg.qr(np.random.default_rng(7).standard_normal((4, 4)))[0]
    A, B, C = np.diag([-1.0, -2.0, -3.0, 0.5]), np.array([[1.0], [1], [1], [0]]), np.ones((1, 4))
    return Realization(Q.T @ A @ Q, Q.T @ B, C @ Q, [[0.3]])


def lone_gain() -> Realization:
    """No states, two outputs, three inputs, a float among the gains."""
    return Realization([], [], [], [[1, 2, 3], [4, 5, 6.5]])


MODELS = {
    "decimals": chamber,
    "four parts": four_parts,
    "four parts in floats": lambda: four_parts().to_float(),
    "nearly equal": lambda: nearly_equal(F(1, 10**4)),
    "in conflict": lambda: nearly_equal(F(1, 10**11)),
    "two inputs": two_by_two,
    "two inputs in floats": lambda: two_by_two().to_float(),
    "rotated": rotated,
    "no states": lone_gain,
    "nothing reached": lambda: diagonal(-1, -2, B=[0, 0]),
    "nothing seen": lambda: diagonal(-1.5, -2.5, C=[0, 0]),
    "nothing reached or seen": lambda: diagonal(-1, 2, B=[0, 0], C=[0, 0]),
    "reached or seen, never both": lambda: diagonal(-1, -2, B=[1, 0], C=[0, 1]),
    "no inputs": lambda: Realization(np.diag([-1, -2]), np.zeros((2, 0), int), [[1, 1]]),
    "no outputs": lambda: Realization(np.diag([-1.0, -2.0]), [1, 1], np.zeros((0, 2))),
    "no inputs in floats": lambda: Realization(np.diag([-1.0, -2]), np.zeros((2, 0)), [[1, 1]]),
    "discrete": lambda: diagonal("1/2", -1, 0, B=[1, 0, 0], sampling_period="1/10"),
    "pair": lambda: Realization(
        [[0, 1, 0], [-2, F(-1, 5), 0], [0, 0, -1]], [0, 0, 1], [1, 0, 1], sampling_period=None
    ),
}
every_model = pytest.mark.parametrize("name", MODELS)


def plain(found: Any) -> dict[str, Any]:
    """The dictionary of an examination without the time and the memory it took."""
    document: dict[str, Any] = found.to_dict()
    del document["seconds"], document["peak_memory"]
    return document


# --------------------------------------------------------------------------- orders and verdict


def test_readings_of_decimals() -> None:
    """Stored, nothing is hidden; written, one mode is; and every field says it its own way."""
    found = examine(chamber())
    assert found.model == chamber()
    assert found.order == 2
    assert found.minimal_order == {"stored": 2, "written": 1, "intended": 1}
    assert found.floating_order == 1
    assert found.paths_agree is True
    assert found.readings_agree is False
    assert (found.answer.order, found.answer.basis) == (1, "written")
    assert (found.stabilizable, found.detectable) == ("yes", "yes")
    assert found.nearest is None
    assert found.within_uncertainty is None
    assert found.witness is None
    assert found.not_done == ()
    assert found.status == 1
    assert found.entries_without_simple_fraction == 0
    assert set(found.seconds) == {"floating", "exact"}
    assert all(0 < seconds < 60 for seconds in found.seconds.values())
    assert found.verdict == (
        "not minimal: 1 of 2 states is hidden, order 1 remains; proved for the decimals as written "
        "(stored gives 2)"
    )
    assert repr(found) == f"<Examination: {found.verdict}>"


def test_parts_of_a_rational_model() -> None:
    """One reading, given, with the four polynomials that were planted."""
    found = examine(four_parts())
    assert found.minimal_order == {"given": 1}
    assert (found.floating_order, found.unscaled_order) == (1, 1)
    assert (found.answer.order, found.answer.basis) == (1, "given")
    assert found.paths_agree
    assert found.readings_agree
    planted = {
        CONTROLLABLE_UNOBSERVABLE: (F(1), F(1)),
        CONTROLLABLE_OBSERVABLE: (F(1), F(2)),
        UNCONTROLLABLE_UNOBSERVABLE: (F(1), F(-3)),
        UNCONTROLLABLE_OBSERVABLE: (F(1), F(4)),
    }
    assert found.parts == {"given": planted}
    assert list(found.parts["given"]) == list(PARTS)
    del planted[CONTROLLABLE_OBSERVABLE]
    assert found.hidden_parts == {"given": planted}
    assert {mode.part: mode.value for mode in found.modes} == {
        CONTROLLABLE_UNOBSERVABLE: -1,
        CONTROLLABLE_OBSERVABLE: -2,
        UNCONTROLLABLE_UNOBSERVABLE: 3,
        UNCONTROLLABLE_OBSERVABLE: -4,
    }
    assert found.modes[: len(found.hidden_modes)] == found.hidden_modes
    assert (found.stabilizable, found.detectable) == ("no", "no")
    assert found.status == 4
    assert found.entries_without_simple_fraction == 0


def test_a_minimal_model() -> None:
    """Nothing hidden, nothing in doubt: status 0, no caution, though a visible mode grows."""
    found = examine(diagonal(-1, 2))
    assert (found.order, found.answer.order, found.status) == (2, 2, 0)
    assert found.cautions == ()
    assert found.hidden_modes == ()
    assert (found.stabilizable, found.detectable) == ("yes", "yes")
    assert [str(mode.stability) for mode in found.modes] == ["stable", "unstable"]
    assert found.verdict.startswith("minimal: ")


@pytest.mark.parametrize("words", [["stored"], ["written", "stored"], ("intended",), {"stored"}])
def test_readings_asked_for(words: Any) -> None:
    """Only the readings named are examined, in the order named.

    Where the only one named is `intended` it does not lead all the same.
    """
    found = examine(chamber(), readings=words)
    known = examine(chamber()).minimal_order
    assert list(found.minimal_order) == list(words)
    for fields in (found.parts, found.cutoff_ranges, found.conflicts, found.routes):
        assert list(fields) == list(words)
    assert found.minimal_order == {word: known[word] for word in words}
    assert found.readings_agree is (len(set(found.minimal_order.values())) == 1)
    assert found.answer.basis in {*words, "nearest"} - {"intended"}


def test_intended_never_leads() -> None:
    """0.3333333333333333 twice hides a mode with 1/3 only as intended; the answer stays 2."""
    model = Realization([[-0.3333333333333333, 0], [0, "-1/3"]], [1, 1], [1, 1])
    found = examine(model)
    assert found.minimal_order == {"stored": 2, "written": 2, "intended": 1}
    # As doubles the two are one number, so the floating path sees one mode, rounding away.
    assert found.floating_order == 1
    assert (found.answer.order, found.answer.basis) == (1, "nearest")
    given = examine(model, tolerance=0.0, readings=["stored", "intended"])
    assert given.minimal_order == {"stored": 2, "intended": 1}
    assert given.answer.basis != "intended"


def test_a_repeated_reading_counts_once() -> None:
    """Naming a reading twice changes nothing."""
    found = examine(chamber(), readings=["written", "written"])
    assert found.minimal_order == {"written": 1}


@pytest.mark.parametrize("word", ["stored", "written", "intended", "given"])
def test_a_rational_model_has_one_reading(word: str) -> None:
    """Any known word is right for a model without floats, and means the model as given."""
    assert examine(four_parts(), readings=[word]).minimal_order == {"given": 1}


@pytest.mark.parametrize(
    ("model", "answers"),
    [
        pytest.param(diagonal(-0.5, -2.0), 1, id="dyadic, all three equal"),
        pytest.param(chamber(), 2, id="decimals, written as intended"),
        pytest.param(diagonal(-0.1, -0.3333333333333333), 3, id="all three apart"),
    ],
)
def test_equal_readings_are_computed_once(
    model: Realization, answers: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Readings that give one exact model share one exact answer."""
    room = sys.modules["realize.examination.answer"]
    made: list[Realization] = []
    original = room.ExactAnswer  # type: ignore[attr-defined]

    def counted(rational: Realization, *rest: Any) -> Any:
        made.append(rational)
        return original(rational, *rest)

    monkeypatch.setattr(room, "ExactAnswer", counted)
    found = examine(model)
    assert list(found.minimal_order) == list(READINGS)
    assert len(made) == answers
    assert len(set(made)) == answers


def test_entries_without_a_simple_fraction() -> None:
    """The root of two has no simple fraction near, and one third has."""
    model = Realization([[-math.sqrt(2.0), 0.0], [0.0, -1 / 3]], [math.pi, 1.0], [1.0, 1.0])
    assert examine(model).entries_without_simple_fraction == 2


def test_units_change_the_unscaled_order_only() -> None:
    """A state in another unit by 2^45: scaling undoes it; without, the state looks unreached."""
    far = 2.0**45
    model = Realization([[-1.0, 0.0], [1.0 / far, -2.0]], [1.0, 0.0], [0.0, far])
    found = examine(model)
    assert set(found.minimal_order.values()) == {2}
    assert found.floating_order == 2
    assert found.unscaled_order < 2


# --------------------------------------------------------------------------- decisions, cutoffs


def ranks(decisions: Any, side: str) -> tuple[int, ...]:
    """The ranks taken on one side, without zeros: the stairs."""
    return tuple(d.rank for d in decisions if d.where.split(",")[0] == side and d.rank)


def takes_the_exact_ranks(model: Realization, reading: str, cutoff: float, scale: float) -> bool:
    """Whether the floating face, at this cutoff, finds the order and stairs of the exact face."""
    rational = model if reading == "given" else model.read(reading)
    proved = exact.minimal(rational)
    found = floating.minimal(model, tolerance=cutoff / scale)
    same_stairs = all(
        ranks(found.decisions, side) == ranks(proved.decisions, side)
        for side in ("reached", "seen")
    )
    assert found.order == proved.order or not same_stairs
    return same_stairs


RANGED = [
    "decimals",
    "four parts",
    "four parts in floats",
    "nearly equal",
    "two inputs",
    "two inputs in floats",
    "nothing reached",
    "nothing seen",
    "reached or seen, never both",
    "pair",
    "discrete",
]


@pytest.mark.parametrize("name", RANGED)
def test_cutoffs_inside_the_range(name: str) -> None:
    """Every cutoff inside the range gives the floating face the exact order and stairs."""
    model = MODELS[name]()
    found = examine(model)
    scale = found.decisions[0].scale
    spans = {word: span for word, span in found.cutoff_ranges.items() if span is not None}
    assert spans
    for reading, (low, high) in spans.items():
        assert rounding_floor(model.order, scale) <= low < high
        top = min(high, scale)
        for cutoff in (low * 1.001, math.sqrt(low * top), top * 0.999):
            assert takes_the_exact_ranks(model, reading, cutoff, scale), (reading, cutoff)


@pytest.mark.parametrize("name", RANGED)
def test_cutoffs_outside_the_range(name: str) -> None:
    """Above the range a stage loses rank; below it one keeps noise, unless rounding ends it."""
    model = MODELS[name]()
    found = examine(model)
    scale = found.decisions[0].scale
    for reading, span in found.cutoff_ranges.items():
        if span is None:
            continue
        low, high = span
        if math.isfinite(high):
            assert not takes_the_exact_ranks(model, reading, high * 1.001, scale), reading
        if low > rounding_floor(model.order, scale):
            assert not takes_the_exact_ranks(model, reading, low * 0.999, scale), reading


def test_noise_behind_a_weak_link_bounds_the_range_from_below() -> None:
    """With modes 1e-4 apart the range begins well above the rounding floor, and ends near 1e-4.

    So the test above has a lower end to step over.
    """
    found = examine(nearly_equal(F(1, 10**4)))
    span = found.cutoff_ranges["given"]
    assert span is not None
    assert rounding_floor(3, found.decisions[0].scale) < span[0] < 1e-9
    assert 1e-6 < span[1] < 1e-3


def test_the_range_comes_from_a_replay() -> None:
    """Modes 1e-11 apart: the run drops the second, and the range still ends where it begins.

    One run cannot know what it would have seen behind a stage at which it stopped.
    """
    model = diagonal(-1, -1 - F(1, 10**11))
    found = examine(model)
    assert (found.minimal_order, found.floating_order) == ({"given": 2}, 1)
    assert found.paths_agree is False
    second = found.decisions[1]
    assert (second.rank, second.exact_rank) == (0, {"given": 1})
    span = found.cutoff_ranges["given"]
    assert span is not None
    assert found.conflicts == {"given": ()}
    assert span[1] == pytest.approx(second.largest_dropped, rel=1e-9, abs=0)
    assert not span[0] <= second.cutoff < span[1]
    assert floating.minimal(model, tolerance=0.5 * span[1] / second.scale).order == 2
    assert "OUTSIDE" in str(found)
    # A rational model is what it says: the answer stays 2, and the nearest model is told.
    assert (found.answer.order, found.answer.basis) == (2, "given")
    assert found.nearest is not None
    assert found.nearest.order == 1
    assert found.status == 1


def test_conflicting_stages_are_named() -> None:
    """What must be kept is below what must be dropped: no range, and both stages named."""
    found = examine(nearly_equal(F(1, 10**11)))
    assert found.minimal_order == {"given": 2}
    assert found.cutoff_ranges == {"given": None}
    keep, drop = found.conflicts["given"]
    kept = re.fullmatch(r"reached, stage 2: must keep (\S+)", keep)
    dropped = re.fullmatch(r"reached, stage 3: must drop (\S+)", drop)
    assert kept is not None
    assert dropped is not None
    assert 0 < float(kept[1]) < float(dropped[1])
    words = " ".join(str(found).split())
    assert f"no single cutoff gives the exact ranks ({keep}; {drop})" in words


def test_decisions_carry_the_exact_ranks() -> None:
    """Each decision has the exact rank of its stage for every reading, and one scale and cutoff."""
    found = examine(chamber())
    assert [d.where for d in found.decisions] == [
        "reached, stage 1",
        "reached, stage 2",
        "seen, stage 1",
    ]
    assert [d.rank for d in found.decisions] == [1, 0, 1]
    assert [d.exact_rank for d in found.decisions] == [
        {"stored": 1, "written": 1, "intended": 1},
        {"stored": 1, "written": 0, "intended": 0},
        {"stored": 1, "written": 1, "intended": 1},
    ]
    for decision in found.decisions:
        assert decision.scale == found.decisions[0].scale > 0
        assert decision.cutoff == default_tolerance(2) * decision.scale
        if decision.rank:
            assert decision.smallest_kept is not None
            assert decision.smallest_kept > decision.cutoff
        else:
            assert decision.smallest_kept is None
            assert decision.largest_dropped is not None
            assert decision.largest_dropped <= decision.cutoff


def test_the_tolerance_is_for_the_floating_path_alone() -> None:
    """A coarse tolerance lowers the floating order; ranges and exact orders do not move."""
    fine, coarse = examine(chamber()), examine(chamber(), tolerance=10.0)
    assert coarse.floating_order == 0
    assert coarse.decisions[0].cutoff == 10.0 * coarse.decisions[0].scale
    assert coarse.minimal_order == fine.minimal_order
    assert coarse.cutoff_ranges == fine.cutoff_ranges
    assert coarse.digest == fine.digest


@every_model
def test_routes(name: str) -> None:
    """Three routes, one order, for each reading."""
    found = examine(MODELS[name]())
    assert list(found.routes) == list(found.minimal_order)
    for reading, orders in found.routes.items():
        order = found.minimal_order[reading]
        assert orders == {"state": order, "polynomial": order, "hankel": order}


# --------------------------------------------------------------------------- nearest


def distance(first: Realization, second: Realization) -> float:
    """The Frobenius norm of the change of [A B; C 0] over that of [A B; C 0], summed exactly."""
    pairs = list(zip(first.matrices()[:3], second.matrices()[:3], strict=True))
    change = sum(((x - y) ** 2).sum() for x, y in pairs)
    size = sum((x**2).sum() for x, _ in pairs)
    return math.sqrt(F(change) / F(size))


@pytest.mark.parametrize(
    ("model", "reading", "order"),
    [
        pytest.param(rotated(), "stored", 3, id="rotated"),
        pytest.param(rotated().dual(), "stored", 3, id="rotated, not seen"),
        pytest.param(diagonal(-0.3, -(0.1 + 0.2)), "stored", 1, id="one unit of rounding"),
        pytest.param(diagonal(-1, -1 - F(1, 10**11)), "given", 1, id="rational"),
        pytest.param(two_by_two().to_float(), "stored", 3, id="two inputs"),
    ],
)
def test_the_nearest_model_is_what_it_says(model: Realization, reading: str, order: int) -> None:
    """Its witness has exactly the order said, at the distance said, under the user's names."""
    nearest = examine(model).nearest
    assert nearest is not None
    assert nearest.order == order
    witness = nearest.witness
    assert witness.kind == "rational"
    assert exact.minimal(witness).order == order
    rational = model.read(reading)
    assert exact.minimal(rational).order > order
    measured = distance(rational, witness)
    assert nearest.relative_distance == pytest.approx(measured, rel=1e-6, abs=0)
    assert 0 < measured < 1e-10
    assert (witness.D == rational.D).all()
    assert witness.state_names == model.state_names
    assert nearest.to_dict() == {
        "order": order,
        "relative_distance": nearest.relative_distance,
        "largest_share": nearest.largest_share,
    }
    assert 0 < nearest.largest_share < 1e-9


def test_an_unstable_mode_hidden_within_rounding_is_named() -> None:
    """Orthogonal coordinates in doubles: no reading hides the mode, the nearest model does."""
    found = examine(rotated())
    assert found.minimal_order["stored"] == 4
    assert found.floating_order == 3
    assert (found.answer.order, found.answer.basis) == (3, "nearest")
    assert found.nearest is not None
    assert found.nearest.relative_distance < 1e-15
    (mode,) = found.hidden_modes
    assert mode.value == pytest.approx(0.5, abs=1e-12)
    assert (mode.part, mode.stability) == (UNCONTROLLABLE_OBSERVABLE, "unstable")
    assert (found.stabilizable, found.detectable, found.status) == ("no", "yes", 4)
    assert "unstable" in found.cautions[0]
    assert sum(each.multiplicity for each in found.modes) == 4
    # Its left vector, in the user's states: the last row of Q.
    Q = np.linalg.qr(np.random.default_rng(7).standard_normal((4, 4)))[0]
    vector = np.array([dict(mode.vector)[f"x{i}"] for i in range(1, 5)])
    row = Q[3] / Q[3][np.argmax(np.abs(Q[3]))]
    assert vector == pytest.approx(row, abs=1e-9)


def test_the_distance_of_a_rational_model_is_its_own() -> None:
    """Modes 1e-16 apart are one double: the distance is that of the fractions, and not zero.

    However small it is, a model that is given exactly is what it says, and its order leads.
    """
    model = diagonal(-1, -1 - F(1, 10**16), D=[["1/3"]])
    found = examine(model)
    assert (found.answer.order, found.answer.basis) == (2, "given")
    assert found.nearest is not None
    assert found.nearest.order == 1
    assert found.nearest.witness.D == model.D
    measured = distance(model, found.nearest.witness)
    assert measured > 0
    assert found.nearest.relative_distance == pytest.approx(measured, rel=1e-6, abs=0)


def test_a_distant_model_does_not_lead() -> None:
    """With a coarse tolerance the floating order is low, but the model behind it is far away."""
    found = examine(diagonal(-1.0, -1.25), tolerance=0.3)
    assert found.floating_order < 2
    assert found.nearest is not None
    assert found.nearest.relative_distance > 1e-3
    assert (found.answer.order, found.answer.basis) == (2, "stored")


# --------------------------------------------------------------------------- modes and stability


def hidden(model: Realization, **options: Any) -> dict[complex, str]:
    """Value -> stability of the hidden modes."""
    return {mode.value: str(mode.stability) for mode in examine(model, **options).hidden_modes}


@pytest.mark.parametrize("rational", [True, False])
def test_a_hidden_integrator_is_marginal_and_two_in_a_row_are_unstable(rational: bool) -> None:
    """One integrator holds its value; two in a row grow. The words appear where they are true."""
    single = diagonal(0, -1, B=[0, 1])
    double = Realization([[0, 1, 0], [0, 0, 0], [0, 0, -1]], [0, 0, 1], [1, 0, 1])
    apart = diagonal(0, 0, -1, B=[0, 0, 1])
    for model, stability in ((single, "marginal"), (double, "unstable"), (apart, "marginal")):
        found = examine(model if rational else model.to_float())
        (caution, *_) = found.cautions
        assert {str(m.stability) for m in found.hidden_modes} == {stability}
        assert stability in caution
        assert ({"unstable", "marginal"} - {stability}).pop() not in " ".join(found.cautions)
        assert (found.stabilizable, found.status) == ("no", 4)


def test_an_integrator_hidden_behind_a_visible_one_grows() -> None:
    """The Jordan structure of the whole A decides: x1' = x2, only x1 driven, only x1 seen."""
    found = examine(Realization([[0, 1], [0, 0]], [1, 0], [1, 0]))
    (mode,) = found.hidden_modes
    assert (mode.value, mode.stability) == (0, "unstable")


def test_discrete_time() -> None:
    """The unit circle is the boundary; z = 0 is over at once."""
    period = F(1, 10)
    values = [F(1, 3), F(-1, 2), 0, 1, -1, 2]
    model = diagonal(*values, B=[1, 0, 0, 0, 0, 0], sampling_period=period)
    assert hidden(model) == {
        -0.5: "stable",
        0: "stable",
        1: "marginal",
        -1: "marginal",
        2: "unstable",
    }
    found = examine(model)
    modes = {mode.value: mode for mode in found.hidden_modes}
    assert modes[-0.5].time_constant == pytest.approx(0.1 / math.log(2.0))
    assert modes[2].time_constant == pytest.approx(-0.1 / math.log(2.0))
    assert modes[0].time_constant == 0.0
    assert modes[1].time_constant is None
    assert "discrete time, period 0.1" in str(found)
    assert found.parts["given"][UNCONTROLLABLE_OBSERVABLE] == characteristic_polynomial(
        matrix(np.diag(values[1:]).tolist(), (5, 5))
    )


def test_enclosures_hold_the_roots() -> None:
    """Hidden roots 2^(1/2) and -2^(1/2): the disc around each value holds it, and is small."""
    found = examine(Realization([[0, 1, 0], [2, 0, 0], [0, 0, -1]], [0, 0, 1], [1, 0, 1]))
    low, high = sorted(found.hidden_modes, key=lambda mode: mode.value.real)
    for mode, sign in ((low, -1), (high, 1)):
        middle, radius = sign * F(mode.value.real), F(mode.radius)
        assert mode.value.imag == 0
        assert 0 < radius < F(1, 10**15)
        assert (middle - radius) ** 2 < 2 < (middle + radius) ** 2
        assert mode.polynomial == (1, 0, -2)
        assert mode.multiplicity == 1


def test_multiplicity_and_pairs() -> None:
    """A double mode counts twice; a pair has two members, one damping, and one caution."""
    found = examine(Realization([[-2, 1, 0], [0, -2, 0], [0, 0, -1]], [0, 0, 1], [1, 0, 1]))
    (mode,) = found.hidden_modes
    assert (mode.value, mode.multiplicity) == (-2, 2)
    growing = Realization([[1, 2, 0], [-2, 1, 0], [0, 0, -1]], [0, 0, 1], [1, 0, 1])
    found = examine(growing)
    assert [mode.value for mode in found.hidden_modes] == [1 - 2j, 1 + 2j]
    assert all(mode.damping == pytest.approx(-1 / 5**0.5) for mode in found.hidden_modes)
    assert sum("unstable" in caution for caution in found.cautions) == 1


def test_cautions_are_about_hidden_modes_alone() -> None:
    """Stable hidden modes beside growing and steady visible ones: neither word is said."""
    found = examine(diagonal(1, 0, -1, B=[1, 1, 0]))
    assert {str(m.stability) for m in found.modes} == {"unstable", "marginal", "stable"}
    assert len(found.cautions) == 2
    assert not any("unstable" in caution for caution in found.cautions)
    assert "marginal" not in found.cautions[0]
    assert (found.stabilizable, found.detectable, found.status) == ("yes", "yes", 1)


def vector_of(mode: Any, names: tuple[str, ...]) -> np.ndarray:
    """The vector of a mode as a column of Fractions over all states."""
    shown = dict(mode.vector)
    return matrix([[shown.get(name, 0)] for name in names], (len(names), 1))


@pytest.mark.parametrize("model", [chamber().read("written"), four_parts(), two_by_two()])
def test_vectors_prove_that_a_mode_is_hidden(model: Realization) -> None:
    """By value: w A = z w and w B = 0, or A v = z v and C v = 0, exactly, in named states."""
    found = examine(model)
    checked = 0
    for mode in found.hidden_modes:
        assert mode.why is not None
        if mode.polynomial is None or len(mode.polynomial) > 2 or not mode.vector:
            continue
        vector = vector_of(mode, model.state_names)
        by_output = mode.part == CONTROLLABLE_UNOBSERVABLE
        A, B = (model.A, model.C) if by_output else (model.A.T, model.B.T)
        assert (product(A, vector) == -mode.polynomial[1] * vector).all()
        assert not product(B, vector).any()
        assert vector.any()
        assert f"{'right' if by_output else 'left'} vector" in mode.why
        checked += 1
    assert checked


def test_why_a_mode_is_hidden() -> None:
    """By the zero pattern, whichever side shows it; or by value, in the names of the states."""
    assert [m.why for m in examine(diagonal(-1, -2, B=[1, 0])).hidden_modes] == ["structural"]
    (mode,) = examine(chamber()).hidden_modes
    assert mode.why == "by value, left vector 1 bed, -1 air"
    assert mode.vector == (("bed", 1), ("air", -1))
    assert mode.to_dict()["why"] == mode.why
    visible = [m for m in examine(chamber()).modes if m.part == CONTROLLABLE_OBSERVABLE]
    assert [m.why for m in visible] == [None]


def test_the_zero_pattern_of_the_outputs_alone_can_hide_a_mode() -> None:
    """Neither reached, by value, nor seen, whatever the values: that is structural."""
    found = examine(diagonal(-1, -2, -2, C=[1, 0, 0]))
    assert {m.part: m.why for m in found.hidden_modes} == {
        CONTROLLABLE_UNOBSERVABLE: "structural",
        UNCONTROLLABLE_UNOBSERVABLE: "structural",
    }


# --------------------------------------------------------------------------- models without much

HIDDEN_SIZES: dict[str, tuple[int, dict[str, int]]] = {
    "no states": (0, {}),
    "nothing reached": (0, {UNCONTROLLABLE_OBSERVABLE: 2}),
    "nothing seen": (0, {CONTROLLABLE_UNOBSERVABLE: 2}),
    "nothing reached or seen": (0, {UNCONTROLLABLE_UNOBSERVABLE: 2}),
    "reached or seen, never both": (
        0,
        {CONTROLLABLE_UNOBSERVABLE: 1, UNCONTROLLABLE_OBSERVABLE: 1},
    ),
    "no inputs": (0, {UNCONTROLLABLE_OBSERVABLE: 2}),
    "no inputs in floats": (0, {UNCONTROLLABLE_OBSERVABLE: 2}),
    "no outputs": (0, {CONTROLLABLE_UNOBSERVABLE: 2}),
}


@pytest.mark.parametrize("name", HIDDEN_SIZES)
def test_models_that_show_nothing(name: str) -> None:
    """No states, nothing reached, nothing seen, no minimal part: order 0, parts as they are."""
    order, sizes = HIDDEN_SIZES[name]
    found = examine(MODELS[name]())
    assert set(found.minimal_order.values()) == {order}
    assert found.floating_order == order
    assert found.answer.order == order
    for parts in found.parts.values():
        assert {part: len(p) - 1 for part, p in parts.items() if p != ONE} == sizes
    assert sum(mode.multiplicity for mode in found.modes) == sum(sizes.values())
    assert all(span is not None for span in found.cutoff_ranges.values())
    assert found.nearest is None


def test_a_gain_is_minimal() -> None:
    """No states: nothing hidden, nothing in doubt, nothing decided."""
    found = examine(lone_gain())
    assert (found.order, found.status, found.decisions, found.modes) == (0, 0, (), ())
    assert (found.stabilizable, found.detectable) == ("yes", "yes")
    assert found.verdict.startswith("minimal: ")


# --------------------------------------------------------------------------- budget


def test_without_time_for_any_steps_the_answer_is_the_floating_one(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """No time at all: nothing is proved, every reading is named with the reason, status 3."""
    monkeypatch.setattr(sys.modules["realize.examination.answer"], "STEPS_BUDGET", 0.0)
    found = examine(chamber(), budget=0)
    assert found.answer.basis == "floating"
    assert found.answer.order == found.floating_order == 1
    for empty in (found.minimal_order, found.parts, found.cutoff_ranges, found.conflicts):
        assert empty == {}
    assert found.routes == {}
    assert found.nearest is None
    assert found.paths_agree is False
    missed = [f"did not run as {word}" for word in READINGS]
    missed += [f"no steps of precision as {word}" for word in READINGS[:2]]
    for start, text in zip(missed, found.not_done, strict=True):
        assert start in text
        assert "budget" in text
    assert found.precision_steps == {}
    assert found.status == 3
    assert "nothing is proved" in found.verdict
    assert [mode.value for mode in found.hidden_modes] == pytest.approx([-0.1])
    assert all(math.isinf(mode.radius) for mode in found.modes)
    assert sum(mode.multiplicity for mode in found.modes) == 2
    words = " ".join(str(found).split())
    assert "the exact path did not run; nothing here is proved" in words


def test_without_time_danger_still_outranks_doubt() -> None:
    """A growing hidden mode that nothing proves is named, and the status is 4."""
    found = examine(diagonal(-1.0, 0.25, B=[1, 0]), budget=0)
    assert found.answer.basis == "multiprecision"
    assert found.status == 4
    assert found.stabilizable == "no"
    assert "unstable" in found.cautions[0]


def test_without_time_a_mode_at_the_boundary_cannot_be_told() -> None:
    """The floating path does not call the sign of rounding noise a verdict."""
    found = examine(diagonal(-1.0, 0.0, B=[1, 0]), budget=0)
    (mode,) = found.hidden_modes
    assert mode.stability == "cannot tell"
    assert (found.stabilizable, found.detectable, found.status) == ("cannot tell", "yes", 4)
    assert not re.search(r"\b(unstable|marginal)\b", " ".join(found.cautions))


def test_a_model_too_large_for_the_budget() -> None:
    """300 states, a hundredth of a second: the exact path is not begun, and that is said."""
    rng = np.random.default_rng(3)
    size = 300
    model = Realization(
        rng.standard_normal((size, size)),
        rng.standard_normal((size, 1)),
        rng.standard_normal((1, size)),
    )
    began = time.perf_counter()
    found = examine(model, budget=0.01)
    assert time.perf_counter() - began < 30
    assert (found.answer.basis, found.answer.order, found.status) == ("floating", size, 3)
    missed, steps = found.not_done[:3], found.not_done[3:]
    assert all("0.01 s" in text for text in missed)
    assert len(steps) == 2
    for word, text in zip(("stored", "written"), steps, strict=True):
        assert re.search(rf"no steps of precision as {word}.*budget of 5 s", text)
    assert found.precision_steps == {}
    assert max(map(len, str(found).splitlines())) <= 80


class Ticking:
    """A clock that goes forward by one at each look."""

    def __init__(self) -> None:
        self.now = 0.0

    def monotonic(self) -> float:
        """Return the time, one later than at the look before."""
        self.now += 1.0
        return self.now


@pytest.mark.parametrize("name", ["decimals", "two inputs", "rotated"])
def test_time_may_run_out_anywhere(name: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """Whichever step uses up the budget, each reading is answered or named as not done."""
    model = MODELS[name]()
    whole = examine(model)
    words = list(whole.minimal_order)
    complete = False
    for budget in range(200):
        clock = Ticking()
        monkeypatch.setattr(modular, "time", SimpleNamespace(monotonic=clock.monotonic))
        found = examine(model, budget=budget)
        clock.now += 1e9  # fields may be looked at long after
        plain(found)
        assert str(found)
        done = list(found.minimal_order)
        named = [w for w in words if any(w in text for text in found.not_done)]
        assert done + [w for w in named if w not in done] == words
        assert all(found.minimal_order[word] == whole.minimal_order[word] for word in done)
        # An order may be proved in time, and the polynomials of what it hides not be.
        parts = found.hidden_parts
        unnamed = [word for word in done if not parts[word] and whole.hidden_parts[word]]
        assert set(unnamed) <= set(named)
        assert all(parts[w] == whole.hidden_parts[w] for w in done if w not in unnamed)
        proved = any(word != "intended" for word in done)
        assert (found.answer.basis in ("floating", "multiprecision")) is (not proved)
        if done == words and found.answer == whole.answer:
            complete = True
            break
    assert complete
    assert budget > 3


def test_fields_do_not_expire() -> None:
    """What is computed at first access has the budget anew, however late that is."""
    found = examine(four_parts(), budget=0.2)
    time.sleep(0.25)
    assert found.parts == examine(four_parts()).parts
    assert len(found.modes) == 4
    assert found.to_dict()["digest"] == examine(four_parts()).digest


def test_no_limit() -> None:
    """None is no limit."""
    assert examine(four_parts(), budget=None).minimal_order == {"given": 1}


# --------------------------------------------------------------------------- JSON, digest, pickle

KEYS = {
    "algebraic_loops",
    "peak_memory",
    "format", "version", "model", "order", "inputs", "outputs", "minimal_order", "floating_order",
    "unscaled_order", "paths_agree", "readings_agree", "answer", "verdict", "stabilizable",
    "detectable", "nearest", "parts", "modes", "decisions", "cutoff_ranges", "conflicts",
    "response_change", "routes", "fragile", "precision_steps",
    "uncertainty", "within_uncertainty", "weighed", "witness", "alike", "cautions", "not_done",
    "seconds", "environment", "digest",
}  # fmt: skip


@every_model
def test_the_dictionary_is_json_and_stable(name: str) -> None:
    """One set of keys, the same bytes twice, and nothing that JSON does not have."""
    model = MODELS[name]()
    found = examine(model)
    text = json.dumps(found.to_dict(), allow_nan=False)
    assert text == json.dumps(found.to_dict(), allow_nan=False)
    assert plain(found) == plain(examine(model))
    back = json.loads(text)
    assert back == found.to_dict()
    assert set(back) == KEYS
    assert (back["format"], back["version"]) == ("realize-examination", 1)
    assert (back["inputs"], back["outputs"]) == (model.input_count, model.output_count)
    assert back["digest"] == found.digest
    for reading, parts in back["parts"].items():
        for part, coefficients in parts.items():
            assert tuple(map(F, coefficients)) == found.parts[reading][part]


def test_the_dictionary_says_what_the_record_says() -> None:
    """Values by hand: the numbers of the record, infinity as null."""
    found = examine(rotated())
    back = json.loads(json.dumps(found.to_dict(), allow_nan=False))
    assert back["minimal_order"] == found.minimal_order
    assert back["answer"] == {"order": 3, "basis": "nearest"}
    assert back["nearest"]["order"] == 3
    assert back["cutoff_ranges"] == {
        word: None if span is None else list(span) for word, span in found.cutoff_ranges.items()
    }
    assert back["cautions"] == list(found.cautions)
    assert back["seconds"] == found.seconds
    unbounded = examine(MODELS["nothing reached"]())
    span = unbounded.cutoff_ranges["given"]
    assert span is not None
    assert math.isinf(span[1])
    assert unbounded.to_dict()["cutoff_ranges"] == {"given": [span[0], None]}
    first = back["modes"][0]
    assert first["stability"] == "unstable"
    assert complex(first["real"], first["imaginary"]) == found.modes[0].value


def test_the_digest() -> None:
    """SHA-256 in hexadecimal: one for one model, another for another."""
    digest = examine(four_parts()).digest
    assert re.fullmatch(r"[0-9a-f]{64}", digest)
    assert digest == examine(four_parts()).digest
    assert digest != examine(four_parts().dual()).digest
    A, B, C, D = four_parts().matrices()
    assert digest != examine(Realization(A, B, 2 * C, D)).digest
    assert digest != examine(four_parts().to_float()).digest


def test_other_processes_say_the_same() -> None:
    """Fresh processes with other hash seeds give the same dictionary, apart from the time."""
    code = (
        "import json\n"
        "from tests.unit.test_examine import chamber, plain, two_by_two\n"
        "from realize import examine\n"
        "for model in (chamber(), two_by_two()):\n"
        "    print(json.dumps(plain(examine(model))))\n"
    )
    path = os.pathsep.join(part for part in sys.path if part)
    texts = {
        subprocess.run(
            [sys.executable, "-c", code],
            capture_output=True,
            text=True,
            check=True,
            timeout=60,
            env=os.environ | {"PYTHONHASHSEED": seed, "PYTHONPATH": path},
        ).stdout
        for seed in ("1", "2")
    }
    assert len(texts) == 1
    assert json.loads(texts.pop().splitlines()[0]) == plain(examine(chamber()))


@every_model
def test_pickling(name: str) -> None:
    """A pickled examination says what the first one said, fields not yet looked at included."""
    found = examine(MODELS[name]())
    again = pickle.loads(pickle.dumps(found))
    assert again.to_dict() == found.to_dict()
    assert str(again) == str(found)
    assert again.model == found.model
    if found.nearest is not None:
        assert again.nearest.witness == found.nearest.witness


# --------------------------------------------------------------------------- the page

LABELS = [
    "Model", "Answer", "Danger", "Hidden", "Why", "Basis", "Cutoffs", "Removal", "Next", "Not done",
]  # fmt: skip


def labels(page: str) -> list[str]:
    """The labels of the lines before the first empty one."""
    head = page.split("\n\n")[0]
    return [line[:11].strip() for line in head.splitlines() if line[:1].strip()]


@every_model
@pytest.mark.parametrize("budget", [None, 0])
def test_the_page_begins_with_its_lines(name: str, budget: float | None) -> None:
    """The ten answers in their order, on at most 80 columns, whatever the model."""
    page = str(examine(MODELS[name](), budget=budget))
    assert labels(page) == LABELS
    assert max(map(len, page.splitlines())) <= 80
    assert page == page.strip()


def test_the_page_in_words() -> None:
    """Names, verdict, danger, reason, range and default of the chamber are all there."""
    found = examine(chamber())
    words = " ".join(str(found).split())
    for text in (
        "2 states, burner to sensor, continuous time, floating",
        chamber().digest[:12],
        found.verdict[1:],
        "every hidden mode is stable; the slowest has a time constant of 10.",
        "Stabilizable: yes. Detectable: yes.",
        "-0.1, uncontrollable, observable",
        "left vector 1 bed, -1 air",
        "stored 2, written 1, intended 1; floating path: 1",
        "stored: no single cutoff",
        "the one used is inside",
        "default tolerance 4.7e-10",
        "1 state, 1 fewer",
        "no uncertainty was given",
        "s + 3/10",
        "reached, stage 2",
        "state 1, polynomial 1, hankel 1",
    ):
        assert text in words, text


@pytest.mark.parametrize(
    ("model", "text"),
    [
        (diagonal(-1, 2, B=[1, 0]), "a hidden mode is unstable: 2 (uncontrollable, observable, "),
        (diagonal(-1, 0, B=[1, 0]), "a hidden mode does not decay: 0"),
        (diagonal(-1, -4, C=[1, 0]), "every hidden mode is stable; the slowest has a time"),
        (diagonal(-1, -2), "no mode is hidden, so none can be unstable unseen"),
    ],
)
def test_the_danger_is_always_told(model: Realization, text: str) -> None:
    """Unstable, marginal, stable, or nothing hidden: the third line says which."""
    words = " ".join(str(examine(model)).split())
    assert f"Danger {text}" in words


def test_a_page_about_a_large_model() -> None:
    """Seventy hidden modes of all kinds and five inputs: long lists are cut, lines are not."""
    rng = np.random.default_rng(5)
    size = 80
    A = np.diag(rng.integers(-(10**6), 10**6, size))
    A[np.arange(0, 40, 2), np.arange(1, 40, 2)] = 12345
    A[np.arange(1, 40, 2), np.arange(0, 40, 2)] = -54321
    B = np.zeros((size, 5), dtype=int)
    B[70:] = rng.integers(1, 9, (10, 5))
    model = Realization(A, B, np.ones((3, size), dtype=int))
    page = str(examine(model, budget=60))
    assert labels(page) == LABELS
    assert max(map(len, page.splitlines())) <= 80
    assert "u1, u2, u3, u4 and 1 more to y1, y2, y3" in " ".join(page.split())


def test_long_names_do_not_break_the_page() -> None:
    """A name that fills more than a line is broken, not the page."""
    name = "temperature-of-the-second-bed-behind-the-third-baffle-of-the-drying-chamber-number-four"
    model = Realization([[-1, 0], [1, -1]], [1, -1], [1, 0], state_names=[name, "b" * 200],
                        input_names=["c" * 81], output_names=["d" * 80])  # fmt: skip
    page = str(examine(model))
    assert max(map(len, page.splitlines())) <= 80
    assert "".join(page.split()).count("c" * 81) == 1


# --------------------------------------------------------------------------- bad arguments


@pytest.mark.parametrize(
    "thing", [TransferMatrix([1], [1, 1]), None, [[1]], "model", ([[1]], [1], [1])]
)
def test_only_realizations_are_examined(thing: Any) -> None:
    """Anything else is refused, with the way to make one."""
    with pytest.raises(errors.UnsupportedEntryError, match="as_realization"):
        examine(thing)


@pytest.mark.parametrize(
    "words", [["rounded"], ["stored", "Written"], "stored", [], [None], ["given"]]
)
def test_readings_that_are_none(words: Any) -> None:
    """Unknown words, a bare text, an empty list, and `given` for floats."""
    with pytest.raises(errors.UnknownWordError, match="reading") as caught:
        examine(chamber(), readings=words)
    assert isinstance(caught.value, ValueError)
    assert caught.value.argument == "readings"


@pytest.mark.parametrize("words", [["rounded"], "given"])
def test_readings_that_are_none_of_a_rational_model(words: Any) -> None:
    """A rational model knows every word, but no other."""
    with pytest.raises(errors.UnknownWordError):
        examine(four_parts(), readings=words)


@pytest.mark.parametrize("budget", [-1, -1e-9, math.nan, "10", True, 1j, [1]])
def test_budgets_that_are_none(budget: Any) -> None:
    """Negative, not a number, text, bool, complex and lists."""
    with pytest.raises(errors.RealizeError, match="budget"):
        examine(chamber(), budget=budget)


@pytest.mark.parametrize("tolerance", [-1e-9, math.nan, math.inf, "1e-9"])
def test_tolerances_that_are_none(tolerance: Any) -> None:
    """The tolerance is checked at the door, by the same rule as on the floating face."""
    with pytest.raises(errors.ToleranceError, match="tolerance"):
        examine(chamber(), tolerance=tolerance)


def test_the_record_cannot_be_changed() -> None:
    """Frozen, without room for other attributes."""
    found = examine(chamber())
    with pytest.raises(AttributeError):
        found.order = 3  # type: ignore[misc]
    with pytest.raises((AttributeError, TypeError)):
        found.other = 3  # type: ignore[attr-defined]


def test_modes_beyond_doubles_are_counted() -> None:
    """The order is exact, the page is printed, and it says how many modes it cannot show."""
    found = examine(Realization([["1e400", 1], [1, "-1e400"]], [1, 1], [1, 1]))
    assert found.minimal_order == {"given": 2}
    assert found.modes == ()
    assert "2 more: beyond the range of doubles, not shown" in str(found)
