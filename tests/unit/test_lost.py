"""How a hidden mode of a connected model was lost: hand cases, and the theorem behind them."""

from __future__ import annotations

import math
import sys
from fractions import Fraction

import pytest

import realize
from realize import (
    AlgebraicLoopWarning,
    Realization,
    TransferMatrix,
    assemble,
    cascade,
    companion,
    examine,
    loop,
    sum_of,
)
from realize.errors import BudgetError
from realize.examination.pairing import ExactAnswer
from realize.stability import (
    HIDDEN_IS_RELATIVE,
    NEARLY_ILL_POSED_LOOP,
    NOT_INTERCHANGEABLE,
    WEAK_IS_NOT_HIDDEN,
)

F = Fraction
ROOM = sys.modules["realize.examination.answer"]


def fraction(numerator: list[object], denominator: list[object]) -> Realization:
    """The companion form of a transfer function."""
    return companion(TransferMatrix(numerator, denominator))


def lost(model: Realization) -> dict[complex, str | None]:
    """Value -> how it was lost, for the hidden modes of an examination."""
    return {mode.value: mode.lost for mode in examine(model).hidden_modes}


@pytest.mark.parametrize("number", [F, float], ids=["exact", "floating"])
def test_a_cancellation_is_made_by_the_connection(number: type) -> None:
    """The pole of one block meets the zero of the other; in both orders of the two."""
    plant = fraction([number(1)], [number(1), number(-2)])
    shaper = fraction([number(1), number(-2)], [number(1), number(4), number(3)])
    text = "made by the connection from a mode of {} that meets a zero of {}"
    assert lost(cascade(shaper, plant)) == {2: text.format("second", "first")}
    assert lost(cascade(plant, shaper)) == {2: text.format("first", "second")}


def test_a_mode_hidden_in_a_block_was_there_before() -> None:
    """It stays hidden whatever the block is connected to, and the block is named."""
    pump = Realization([[-1, 0], [0, -2]], [1, 0], [1, 1])
    line = Realization([[-5]], [1], [1])
    assert lost(cascade(pump, line)) == {-2: "there before, in first"}
    assert lost(cascade(line, pump)) == {-2: "there before, in second"}
    wired = assemble(
        {"line": line, "pump": pump},
        [("u", "line.u1"), ("line.y1", "pump.u1"), ("pump.y1", "y")],
        inputs=["u"],
        outputs=["y"],
    )
    assert lost(wired) == {-2: "there before, in pump"}


def test_a_mode_may_be_lost_partly_before() -> None:
    """One copy was not reached before; the other is lost because two lags share one input."""
    first = Realization([[-1, 0], [0, -1]], [1, 0], [1, 1])
    second = Realization([[-1]], [1], [1])
    found = examine(sum_of(first, second)).hidden_modes
    (neither,) = found
    assert (str(neither.part), neither.multiplicity) == ("uncontrollable, unobservable", 2)
    assert neither.lost == (
        "1 of 2 there before, in first; the rest made by the connection from a mode of first, "
        "second"
    )


def test_the_two_sides_may_differ() -> None:
    """Not reached since ever, and unseen only because the next block has a zero there."""
    first = Realization([[-1, 0], [0, -2]], [1, 0], [1, 1])
    second = fraction([1, 2], [1, 7, 12])
    assert lost(cascade(first, second)) == {
        -2: "unreached: there before, in first; unseen: made by the connection from a mode of "
        "first that meets a zero of second"
    }


def test_a_loop_makes_modes_of_its_own() -> None:
    """An observer's error decays as nothing in the blocks does; the loop hides it."""
    plant = Realization([[0, 1], [0, 0]], [0, 1], [[1, 0], [0, 1]])
    # The estimator's states follow the plant's with error poles at -3 and -4.
    estimator = Realization(
        [[-7, 1], [-12, 0]],
        [[7, 0, 0], [12, 0, 1]],
        [[1, 0], [0, 1]],
        [[0, 0, 0], [0, 0, 0]],
        input_names=["position", "rate", "force"],
        output_names=["p", "r"],
    )
    gains = Realization([], [], [], [[-2, -3]], input_names=["p", "r"], output_names=["force"])
    model = assemble(
        {"plant": plant, "estimator": estimator, "gains": gains},
        [
            ("reference", "plant.u1"),
            ("reference", "estimator.force"),
            ("gains.force", "plant.u1"),
            ("gains.force", "estimator.force"),
            ("plant.y1", "estimator.position"),
            ("plant.y2", "estimator.rate"),
            ("estimator.p", "gains.p"),
            ("estimator.r", "gains.r"),
            ("plant.y1", "y"),
        ],
        inputs=["reference"],
        outputs=["y"],
    )
    assert lost(model) == {
        -3: "made by the connection from a mode of estimator",
        -4: "made by the connection from a mode of estimator",
    }


def test_models_that_are_no_connection_say_nothing() -> None:
    """A flat model's hidden modes have no such history, and the page has no word of it."""
    flat = cascade(fraction([1, -2], [1, 4, 3]), fraction([1], [1, -2]))
    flat = Realization(*flat.matrices())
    found = examine(flat)
    assert [mode.lost for mode in found.hidden_modes] == [None]
    assert "connection" not in str(found)
    assert found.hidden_modes[0].to_dict()["lost"] is None


def test_near_the_doubles_blocks_are_told_by_their_values() -> None:
    """Zeros and poles computed in doubles agree to rounding only; the nearest model answers."""
    # The zero of the shaper is at pi, to rounding.
    shaper = Realization([[-1.0, 1.0], [0.0, -3.0]], [0.0, 1.0], [-1.0 - math.pi, 1.0])
    plant = Realization([[math.pi * (1 + 2**-51)]], [1.0], [1.0])
    found = examine(cascade(shaper, plant))
    assert found.answer.basis == "nearest"
    (mode,) = found.hidden_modes
    assert mode.lost == "made by the connection from a mode of second"
    before = Realization([[-1.0, 0.0], [1e-18, 0.7]], [1.0, 0.0], [1.0, 1.0])
    found = examine(cascade(before, Realization([[-0.3]], [1.0], [1.0])))
    assert [mode.lost for mode in found.hidden_modes if abs(mode.value - 0.7) < 1e-9] == [
        "there before, in first"
    ]


def test_without_time_it_is_said_that_it_is_not_told() -> None:
    """The budget of the exact path bounds the look at the blocks, too."""
    from realize.examination.lost import with_loss

    model = cascade(fraction([1, -2], [1, 4, 3]), fraction([1], [1, -2]))
    modes = examine(model).hidden_modes
    (mode,) = with_loss(modes, model, "given", 0.0)
    assert mode.lost is not None
    assert mode.lost.startswith("not told how it was lost: ")


def test_growth_is_told_as_a_doubling_time() -> None:
    """ln 2 over the rate, in the time unit of the model; also in discrete time."""
    continuous = Realization([[F(1, 2), 0], [0, -1]], [0, 1], [1, 1])
    (mode,) = examine(continuous).hidden_modes
    assert mode.doubling_time == pytest.approx(2 * math.log(2))
    assert "doubles in 1.38629" in " ".join(str(examine(continuous)).split("Hidden")[0].split())
    assert mode.to_dict()["doubling_time"] == mode.doubling_time
    discrete = Realization([[2, 0], [0, "1/2"]], [0, 1], [1, 1], sampling_period="1/4")
    (mode,) = examine(discrete).hidden_modes
    assert mode.doubling_time == pytest.approx(0.25)
    page = str(examine(discrete))
    assert "doubles in 0.25" in page
    assert f"time constant {0.25 / math.log(2):.4g}" in page  # 1/2 each quarter of a unit


def test_what_does_not_grow_has_no_doubling_time() -> None:
    """Neither a decaying mode, nor a marginal one, nor a delay."""
    model = Realization([[-1, 0, 0], [0, 0, 0], [0, 0, 1]], [0, 0, 1], [1, 1, 1])
    assert {mode.doubling_time for mode in examine(model).hidden_modes} == {None}
    delay = Realization([[0, 0], [0, "1/2"]], [0, 1], [1, 1], sampling_period=1)
    assert examine(delay).hidden_modes[0].doubling_time is None
    assert "a delay, over at once" in str(examine(delay))


def test_a_nearly_ill_posed_loop_is_a_caution_of_the_page() -> None:
    """The page names it, the record holds the margin; a well-posed loop says nothing."""
    plant, controller = (
        Realization([[-1]], [1], [1], [1]),
        Realization([], [], [], [[F(10**7 + 1, 10**7)]]),
    )
    with pytest.warns(AlgebraicLoopWarning):
        near = loop(plant, controller, feedback="positive")
    found = examine(near)
    assert NEARLY_ILL_POSED_LOOP in found.cautions
    (circle,) = found.algebraic_loops
    assert circle.margin < 1e-6
    assert found.to_dict()["algebraic_loops"][0]["ports"] == list(circle.ports)
    assert "nearly without a solution" in " ".join(str(found).split())
    well = examine(loop(plant, Realization([], [], [], [["1/2"]])))
    assert NEARLY_ILL_POSED_LOOP not in well.cautions
    assert well.algebraic_loops[0].margin > 0.1
    assert examine(plant).algebraic_loops == ()


def test_cautions_fit_what_was_found() -> None:
    """Hidden: what it is relative to. Nearly hidden: weak is not hidden. Neither: nothing."""
    hidden = Realization([[-1, 0], [0, -2]], [1, 0], [1, 1])
    assert examine(hidden).cautions == (HIDDEN_IS_RELATIVE, NOT_INTERCHANGEABLE)
    shown = Realization([[-1, 0], [0, -2]], [1, 1], [1, 1])
    assert examine(shown).cautions == ()
    weak = Realization([[-1.0, 0.0], [1e-11, -2.0]], [1.0, 0.0], [1.0, 1.0])
    found = examine(weak, tolerance=1e-6)
    assert found.answer.order == 2
    assert found.cautions == (() if found.floating_order == 2 else (WEAK_IS_NOT_HIDDEN,))
    close = Realization([[-1.0, 0.0], [0.0, -1.000000001]], [1.0, 1.0], [1.0, 1.0])
    assert examine(close, tolerance=1e-6).cautions == (WEAK_IS_NOT_HIDDEN,)


def test_the_page_says_what_it_took() -> None:
    """Seconds of each path and the memory of the process, which is more than numpy alone needs."""
    found = examine(realize.Realization([[-1]], [1], [1]))
    assert found.peak_memory is None or 20 * 2**20 < found.peak_memory < 2**40
    assert found.to_dict()["peak_memory"] == found.peak_memory
    took = str(found).split("\nTook ")[1]
    assert "floating" in took
    assert "exact" in took


@pytest.mark.parametrize("side", ["input", "output"])
def test_the_pattern_tells_without_the_exact_path(
    side: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    """With no time for the exact path, modes of states cut off are still told as structural."""
    rows = [[-1.0, 0.0, 0.0, 0.0], [1.0, -2.0, 0.0, 0.0], [0.0, 0.0, 0.5, 0.0], [0, 0, 1, -0.25]]
    model = Realization(rows, [1.0, 0.0, 0.0, 0.0], [0.0, 1.0, 0.0, 1.0])
    if side == "output":
        model = model.dual()
    monkeypatch.setattr(ROOM, "STEPS_BUDGET", 0.0)
    found = examine(model, budget=0)
    assert found.answer.basis == "floating"
    values = sorted(mode.value.real for mode in found.hidden_modes)
    assert values == pytest.approx([-0.25, 0.5])
    assert {mode.why for mode in found.hidden_modes} == {"structural"}
    assert ": structural." in " ".join(str(found).split())


def test_the_pattern_does_not_tell_what_values_hide(monkeypatch: pytest.MonkeyPatch) -> None:
    """Two equal lags on one input: every state is joined to it, so nothing is structural."""
    monkeypatch.setattr(ROOM, "STEPS_BUDGET", 0.0)
    model = Realization([[-1.0, 0.0], [0.0, -1.0]], [1.0, 1.0], [1.0, 2.0])
    found = examine(model, budget=0)
    assert [mode.why for mode in found.hidden_modes] == [None]
    assert "not told, because no exact polynomial stands behind it" in " ".join(str(found).split())
    # And a copy that is cut off does not make the other one structural.
    three = Realization(
        [[-1.0, 0.0, 0.0], [0.0, -1.0, 0.0], [0.0, 0.0, -1.0]], [1.0, 1.0, 0.0], [1.0, 2.0, 3.0]
    )
    assert {mode.why for mode in examine(three, budget=0).hidden_modes} == {None}


def test_modes_with_one_reason_share_it() -> None:
    """The page does not say one thing four times."""
    model = Realization(
        [[-k if i == k else 0 for i in range(6)] for k in range(6)], [1, *[0] * 5], [1] * 6
    )
    words = " ".join(str(examine(model)).split())
    assert "Why -5, -4, -3, -2 and 1 more: structural. Basis" in words


def test_a_proved_order_stands_without_the_polynomials(monkeypatch: pytest.MonkeyPatch) -> None:
    """Where time is left for the order only, the floating path names what is hidden."""

    def out_of_time(_: ExactAnswer) -> None:
        raise BudgetError("no time for a characteristic polynomial", budget=1.0)

    rows = [[-1.0, 0.0, 0.0], [0.0, -1.0, 0.0], [0.0, 0.0, 0.5]]
    model = Realization(rows, [1.0, 1.0, 0.0], [1.0, 2.0, 1.0])
    whole = examine(model)
    monkeypatch.setattr(ExactAnswer, "find_hidden", out_of_time)
    found = examine(model)
    assert found.answer == whole.answer
    assert found.minimal_order == whole.minimal_order
    assert found.cutoff_ranges == whole.cutoff_ranges
    assert found.hidden_parts == {"stored": {}, "written": {}, "intended": {}}
    assert [round(mode.value.real, 9) for mode in found.hidden_modes] == [-1.0, 0.5]
    assert found.stabilizable == "no"
    assert found.status == 4
    assert "not computed within the budget" in str(found)
    assert any("named by the floating path" in text for text in found.not_done)
    told = list(found.to_dict()["parts"]["stored"].values())
    assert told.count(None) == 3  # all but what shows
