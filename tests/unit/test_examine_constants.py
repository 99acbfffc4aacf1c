"""Examination where the exact path has no answer: irrational constants, and no time."""

from __future__ import annotations

import json
import math
import pickle
import sys
from fractions import Fraction
from typing import Any

import numpy as np
import pytest
import sympy

from realize import Realization, assemble, cascade, errors, examine, loop
from realize.arithmetic.modular import Clock
from realize.arithmetic.steps import PrecisionSteps, precision_steps
from realize.entries import Reading
from realize.examination import stepped
from realize.examination.answer import reading_seconds
from tests.helpers import (
    CONTROLLABLE_OBSERVABLE,
    CONTROLLABLE_UNOBSERVABLE,
    UNCONTROLLABLE_OBSERVABLE,
    UNCONTROLLABLE_UNOBSERVABLE,
)

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")

F = Fraction
ROOT = sympy.sqrt(2)
ROOM = sys.modules["realize.examination.answer"]


def in_coordinates(A: Any, B: Any, C: Any, T: Any, **options: Any) -> Realization:
    """The model T^-1 A T, T^-1 B, C T, multiplied out so that what is zero is written as zero."""
    A, B, C, T = map(sympy.Matrix, (A, B, C, T))
    back = T.inv().applyfunc(sympy.radsimp)
    tables = (back * A * T, back * B, C * T)
    return Realization(
        *(M.applyfunc(lambda x: sympy.radsimp(sympy.expand(x))).tolist() for M in tables),
        **options,
    )


def irrational(growing: Any = 3, **options: Any) -> Realization:
    """One state in each part: -1, -sqrt(2), growing and -4, in irrational coordinates.

    By construction: B is zero in the last two states, C in the first and the third, and A couples
    the parts only as the Kalman decomposition lets them be coupled.
    """
    A = [[-1, 1, 1, 1], [0, -ROOT, 0, 1], [0, 0, growing, 1], [0, 0, 0, -4]]
    T = [[1, ROOT, 0, 0], [0, 1, ROOT, 0], [0, 0, 1, ROOT], [ROOT, 0, 0, 1]]
    return in_coordinates(A, [[0], [1], [0], [0]], [[0, 1, 0, 0]], T, **options)


def mirrored(values: Any, B: Any) -> Realization:
    """diag(values), all states seen, mirrored in a plane across all axes: exact, no zeros."""
    v = sympy.Matrix(range(1, len(values) + 1))
    T = sympy.eye(len(values)) - 2 * v * v.T / (v.T * v)[0]
    A = T * sympy.diag(*values) * T
    return Realization(
        A.tolist(), (T * sympy.Matrix(B)).tolist(), (sympy.ones(1, len(B)) * T).tolist()
    )


def without_time(monkeypatch: pytest.MonkeyPatch) -> None:
    """Leave the steps no time but that of the budget."""
    monkeypatch.setattr(ROOM, "STEPS_BUDGET", 0.0)


# --------------------------------------------------------------------------- constants


def test_an_irrational_model_whose_parts_are_known() -> None:
    """Every field says it its own way: evidence, no proof, the parts that were planted."""
    model = irrational()
    assert model.kind == "parametric"
    found = examine(model)
    assert (found.answer.order, found.answer.basis) == (1, "multiprecision")
    assert found.floating_order == 1
    assert found.minimal_order == found.parts == found.routes == found.cutoff_ranges == {}
    assert found.nearest is None
    assert (found.paths_agree, found.readings_agree) == (False, False)
    assert {mode.part: mode.value for mode in found.modes} == pytest.approx(
        {
            CONTROLLABLE_UNOBSERVABLE: -1,
            CONTROLLABLE_OBSERVABLE: -math.sqrt(2),
            UNCONTROLLABLE_UNOBSERVABLE: 3,
            UNCONTROLLABLE_OBSERVABLE: -4,
        },
        rel=1e-15,
    )
    assert {mode.part: str(mode.stability) for mode in found.hidden_modes} == {
        CONTROLLABLE_UNOBSERVABLE: "stable",
        UNCONTROLLABLE_UNOBSERVABLE: "unstable",
        UNCONTROLLABLE_OBSERVABLE: "stable",
    }
    assert all(math.isinf(mode.radius) for mode in found.modes)
    assert (found.stabilizable, found.detectable, found.status) == ("no", "no", 4)
    steps = found.precision_steps["given"]
    assert found.leading_steps is steps
    assert (steps.digits, steps.order, steps.is_settled) == ((16, 32, 64, 128), 1, True)
    assert found.fragile == ()
    assert found.not_done == (
        "the exact path did not run: the model holds irrational constants, which no rational "
        "numbers are",
    )
    assert found.verdict == (
        "not minimal: 3 of 4 states are hidden, order 1 remains; by steps of 16 to 128 digits, "
        "evidence and not proof, for the model as given"
    )
    assert found.entries_without_simple_fraction == 0
    assert set(found.seconds) == {"floating", "exact", "multiprecision"}
    for mode in found.hidden_modes:
        assert mode.why is not None
        vector = np.array([dict(mode.vector).get(f"x{k}", 0) for k in range(1, 5)], dtype=float)
        A, B, C, _ = model.to_float().matrices()
        if mode.part == CONTROLLABLE_UNOBSERVABLE:
            assert mode.why.startswith("by value, right vector")
            assert np.allclose(A @ vector, mode.value.real * vector, atol=1e-12)
            assert np.allclose(C @ vector, 0, atol=1e-12)
        else:
            assert mode.why.startswith("by value, left vector")
            assert np.allclose(vector @ A, mode.value.real * vector, atol=1e-12)
            assert np.allclose(vector @ B, 0, atol=1e-12)


def test_the_page_of_an_irrational_model() -> None:
    """It says that it is evidence, at which digits, that it is settled, and what it cannot be."""
    page = str(examine(irrational(growing=-3)))
    assert max(map(len, page.splitlines())) <= 80
    words = " ".join(page.split())
    for text in (
        "evidence and not proof, for the model as given.",
        "the exact path did not run; nothing here is proved. Steps of precision as given: order "
        "1, every step settled at 16, 32, 64 and 128 digits; floating path: 1.",
        "Next reduce with realize.multiprecision.minimal at 128 digits, and keep the list of what "
        "was removed; nothing proves the order, and no larger budget does.",
        "every hidden mode is stable",
    ):
        assert text in words
    assert examine(irrational(growing=-3)).status == 3


def test_the_record_of_an_irrational_model_is_json() -> None:
    """Steps, trends and digits are in it; so are the keys of any other record; it pickles."""
    found = examine(irrational())
    document = found.to_dict()
    back = json.loads(json.dumps(document, allow_nan=False))
    (steps,) = back["precision_steps"].values()
    assert (steps["digits"], steps["order"], steps["settled"]) == ([16, 32, 64, 128], 1, True)
    assert {step["trend"] for step in steps["steps"]} == {"stays", "shrinks"}
    assert back["answer"] == {"order": 1, "basis": "multiprecision"}
    assert set(back) == set(examine(Realization([[-1]], [1], [1])).to_dict())
    again = pickle.loads(pickle.dumps(found))
    assert again.precision_steps == found.precision_steps
    assert again.hidden_modes == found.hidden_modes


def test_a_hidden_mode_on_the_boundary_cannot_be_told() -> None:
    """A hidden integrator of irrational coordinates: no number of digits tells it from its like."""
    found = examine(irrational(growing=0))
    (mode,) = (m for m in found.hidden_modes if m.part == UNCONTROLLABLE_UNOBSERVABLE)
    assert abs(mode.value) < 1e-60
    assert mode.stability == "cannot tell"
    assert (found.stabilizable, found.detectable, found.status) == ("cannot tell",) * 2 + (4,)
    assert "which no number of digits can tell" in " ".join(str(found).split())
    assert found.fragile == ("it cannot be told whether a hidden mode decays",)


def test_a_hidden_mode_beside_the_boundary_is_told() -> None:
    """10^-40 from it, where doubles see the boundary itself."""
    found = examine(irrational(growing=sympy.Rational(1, 10**40)))
    (mode,) = (m for m in found.hidden_modes if m.part == UNCONTROLLABLE_UNOBSERVABLE)
    assert mode.value == pytest.approx(1e-40, rel=1e-12)
    assert mode.stability == "unstable"


def test_discrete_time_with_sampled_decays() -> None:
    """exp(-1/10) and exp(-2/10), sampled exactly; one of them is not reached."""
    T = sympy.Matrix([[1, ROOT], [ROOT, 1]])
    decays = sympy.diag(sympy.exp(-sympy.Rational(1, 10)), sympy.exp(-sympy.Rational(1, 5)))
    found = examine(in_coordinates(decays, [[1], [0]], [[1, 1]], T, sampling_period="1/10"))
    (mode,) = found.hidden_modes
    assert (found.answer.order, mode.part) == (1, UNCONTROLLABLE_OBSERVABLE)
    assert mode.value == pytest.approx(math.exp(-0.2), rel=1e-15)
    assert mode.time_constant == pytest.approx(0.5)
    assert found.status == 3


def test_what_the_pattern_hides_is_structural_among_constants_too() -> None:
    """A state that nothing leads to, beside one that is hidden by values alone."""
    A = [[-ROOT, 0, 0], [0, -ROOT, 0], [1, 1, -3]]
    found = examine(Realization(A, [1, 1, 0], [0, 0, 1]))
    (mode,) = found.hidden_modes
    assert mode.why is not None
    assert mode.why.startswith("by value, left vector")
    cut = Realization([[-1, 0], [ROOT, -ROOT]], [0, 1], [0, 1])
    assert [mode.why for mode in examine(cut).hidden_modes] == ["structural"]


def test_constants_beside_floats_keep_their_readings() -> None:
    """The floats are read as stored and as written, the constants stay: written hides a mode."""
    model = Realization([[-0.1, -0.2], [0.0, -0.3]], [ROOT, ROOT], [1.0, 0.0])
    found = examine(model)
    assert found.model.kind == "floating"
    assert {word: steps.order for word, steps in found.precision_steps.items()} == {
        "written": 1,
        "stored": 2,
    }
    assert (found.answer.order, found.rests_on) == (1, "written")
    assert "for the decimals as written (steps as stored gives 2)" in found.verdict
    (mode,) = found.hidden_modes
    assert mode.value == pytest.approx(-0.1)
    assert list(examine(model, readings=["stored"]).precision_steps)[-1] == "stored"


def test_an_observer_loop_of_irrational_gains() -> None:
    """The error of the estimate is not reached from the reference, whatever the gains."""
    plant = Realization([[0, 1], [ROOT, 0]], [0, 1], [1, 0])
    # The estimate x' = (A - l c) x + B u + l y with l = (sqrt 2, 3 + sqrt 2), driven by u and y.
    gains = [3 + ROOT, 2 * ROOT]
    observer = Realization([[-ROOT, 1], [-3, 0]], [[0, ROOT], [1, 3 + ROOT]], sympy.eye(2).tolist())
    wires = [
        ("reference", "plant"),
        ("reference", "observer.u1"),
        ("plant", "observer.u2"),
        ("plant", "position"),
    ]
    for source, gain in zip(("y1", "y2"), gains, strict=True):
        wires += [(f"observer.{source}", port, -gain) for port in ("plant", "observer.u1")]
    model = assemble(
        {"plant": plant, "observer": observer}, wires, inputs=["reference"], outputs=["position"]
    )
    found = examine(model)
    assert model.kind == "parametric"
    assert (found.order, found.answer.order) == (4, 2)
    assert {mode.part for mode in found.hidden_modes} == {UNCONTROLLABLE_OBSERVABLE}
    error = np.linalg.eigvals(observer.to_float().A)
    assert sorted(m.value.imag for m in found.hidden_modes) == pytest.approx(sorted(error.imag))
    assert found.stabilizable == "yes"


def test_a_cancelled_constant_is_found_through_a_connection() -> None:
    """(s + sqrt 2)/(s + 3) after 1/(s + sqrt 2): one mode is hidden, also beside floats."""
    lead = Realization([[-3]], [1], [ROOT - 3], 1)
    found = examine(cascade(Realization([[-ROOT]], [1], [1]), lead))
    assert found.answer.order == 1
    (mode,) = found.hidden_modes
    assert mode.value == pytest.approx(-math.sqrt(2))
    beside = cascade(Realization([[-ROOT, 0], [0, -0.1]], [1, 0.1], [1, 0]), lead)
    found = examine(beside)
    assert beside.kind == "floating"
    assert (found.answer.order, found.rests_on) == (1, "stored")


def test_only_the_words_known_are_readings_of_constants() -> None:
    """Any known word means the model as given; another is refused."""
    assert list(examine(irrational(), readings=["written"]).precision_steps) == ["given"]
    with pytest.raises(errors.UnknownWordError):
        examine(irrational(), readings=["guessed"])


# --------------------------------------------------------------------------- no time


def test_without_time_the_steps_say_what_the_exact_path_proves() -> None:
    """A rational model at budget 0: the order, modes, parts and reasons that are then proved."""
    model = mirrored([-1, -2, -2, F(-5, 2), 1], [1, 1, 0, 0, 0])
    found, proved = examine(model, budget=0), examine(model)
    assert (found.answer.basis, proved.answer.basis) == ("multiprecision", "given")
    assert found.answer.order == proved.answer.order == 2
    assert found.precision_steps["given"].is_settled
    told, known = (
        sorted((m.part, round(m.value.real, 12), m.multiplicity, str(m.stability)) for m in e.modes)
        for e in (found, proved)
    )
    assert told == known
    assert proved.precision_steps == {}
    assert "multiprecision" not in proved.seconds
    assert (found.status, proved.status) == (4, 4)


def test_without_time_an_unstable_mode_hidden_within_rounding_is_named() -> None:
    """Doubles out of arithmetic: the steps read every one of them, and the nearest model leads."""
    Q = np.linalg.qr(np.random.default_rng(7).standard_normal((4, 4)))[0]
    A, B, C = np.diag([-1.0, -2.0, -3.0, 0.5]), np.array([[1.0], [1], [1], [0]]), np.ones((1, 4))
    model = Realization(Q.T @ A @ Q, Q.T @ B, C @ Q)
    found = examine(model, budget=0)
    assert {word: steps.order for word, steps in found.precision_steps.items()} == {
        "nearest": 3,
        "stored": 4,
        "written": 4,
    }
    assert (found.answer.order, found.answer.basis) == (3, "multiprecision")
    assert found.nearest is not None
    assert found.nearest.relative_distance < 1e-14
    (mode,) = found.hidden_modes
    assert (mode.value, str(mode.stability)) == (pytest.approx(0.5), "unstable")
    assert found.status == 4
    assert "evidence and not proof, for a model within rounding of this one" in found.verdict
    assert "A model of order 3 lies at relative distance" in " ".join(str(found).split())


def test_a_distant_model_does_not_lead_the_steps() -> None:
    """A coupling of 1e-11 is no rounding: the order stays, the distance is told."""
    model = Realization([[-1.0, 0.0], [1e-11, -2.0]], [1.0, 0.0], [1.0, 1.0])
    proved = examine(model, tolerance=1e-9)
    found = examine(model, tolerance=1e-9, budget=0)
    assert proved.answer.order == found.answer.order
    assert proved.nearest is not None
    assert found.nearest is not None
    assert found.nearest.to_dict() == proved.nearest.to_dict()
    assert found.rests_on == proved.answer.basis


def test_a_coupling_beyond_the_first_digits_makes_the_steps_climb() -> None:
    """Modes 10^-90 apart: 128 digits do not settle it, 512 do, and doubles see one mode less."""
    model = mirrored([-1, -1 - F(1, 10**90), -2], [1, 1, 0])
    assert not precision_steps(model).is_settled
    found = examine(model, budget=0)
    steps = found.precision_steps["given"]
    assert (steps.digits, steps.order, steps.is_settled) == ((128, 256, 512), 2, True)
    assert found.answer.order == examine(model).answer.order == 2
    assert "by steps of 128 to 512 digits" in found.verdict
    assert found.fragile == ("the floating path has another order",)


def unsettled() -> Realization:
    """Modes 10^-90 and 10^-300 apart, and one that is not reached: order 4 of 5."""
    values = [-1, -1 - F(1, 10**90), -3, -3 - F(1, 10**300), -2]
    return mirrored(values, [1, 1, 1, 1, 0])


def test_steps_that_are_not_settled_say_so() -> None:
    """512 digits do not suffice: the answer is called a guess everywhere, and is fragile."""
    found = examine(unsettled(), budget=0)
    steps = found.precision_steps["given"]
    assert not steps.is_settled
    assert steps.digits == (128, 256, 512)
    assert found.answer.basis == "multiprecision"
    assert "the steps of precision are not settled" in found.fragile
    assert "by steps of up to 512 digits that are not settled, so a guess" in found.verdict
    assert found.status == 3
    assert found.to_dict()["precision_steps"]["given"]["settled"] is False
    words = " ".join(str(found).split())
    assert "NOT settled at 128, 256 and 512 digits" in words
    assert "Fragile: the floating path has another order, the steps of precision are not" in words
    assert "Danger no hidden mode was found, but the steps of precision are not settled" in words
    assert "treat the order as a guess; give the exact path a larger budget" in words
    # The exact path needs no digits.
    assert examine(unsettled()).answer.order == 4


def test_time_may_run_out_while_climbing(monkeypatch: pytest.MonkeyPatch) -> None:
    """The first ladder is kept, unsettled, and what was not tried is said."""
    model = mirrored([-1, -1 - F(1, 10**90), -2], [1, 1, 0])

    def late(model: Realization, *, digits: tuple[int, ...], clock: Clock) -> PrecisionSteps:
        spent = clock if digits[0] == 16 else Clock(0.0, clock.runner)
        return precision_steps(model, digits=digits, clock=spent)

    monkeypatch.setattr(stepped, "precision_steps", late)
    found = examine(model, budget=0)
    assert found.precision_steps["given"].digits == (16, 32, 64, 128)
    assert any("more digits were not tried as given" in text for text in found.not_done)
    assert "the steps of precision are not settled" in found.fragile


def test_steps_that_would_take_too_long_are_not_begun() -> None:
    """120 states with constants: hours of nothing are spared, and the estimate is told."""
    size = 120
    rng = np.random.default_rng(5)
    A = rng.integers(-3, 4, (size, size)).astype(object)
    A[0, 0] = ROOT
    found = examine(Realization(A, [1] * size, [1] * size))
    assert found.answer.basis == "floating"
    assert found.precision_steps == {}
    assert (
        "no steps of precision as given: the multiprecision steps did not begin"
        in (found.not_done[1])
    )
    assert found.status in (3, 4)


def test_a_model_beyond_doubles_without_time(monkeypatch: pytest.MonkeyPatch) -> None:
    """Where neither other path has an answer the steps have one; and without them none is given."""
    model = Realization([[-1, 0], [0, -2]], [1, 0], [1, 1], [[10**400]])
    found = examine(model, budget=0)
    assert found.floating_order is None
    assert [mode.value for mode in found.modes] == [-2, -1]
    assert "the floating path did not run" in found.not_done[1]
    assert "Steps of precision as given: order 1" in " ".join(str(found).split())
    assert (found.answer.order, found.answer.basis) == (1, "multiprecision")
    without_time(monkeypatch)
    with pytest.raises(errors.PrecisionError, match="no path has an answer"):
        examine(model, budget=0)


# --------------------------------------------------------------------------- intended alone


def thirds() -> Realization:
    """0.3333333333333333 and 1/3: one mode is hidden as intended, and within rounding."""
    return Realization([[-0.3333333333333333, 0], [0, "-1/3"]], [1, 1], [1, 1])


def test_intended_alone_does_not_lead() -> None:
    """Asked for alone it is answered, and the answer is about the nearest model all the same."""
    found = examine(thirds(), readings=["intended"])
    assert found.minimal_order == {"intended": 1}
    assert (found.answer.order, found.answer.basis) == (1, "nearest")
    assert "intended is a hypothesis" in found.not_done[0]
    assert found.precision_steps == {}


def test_intended_alone_leaves_the_answer_to_the_floating_path() -> None:
    """Where nothing lies within rounding nothing is proved: floating, undecided."""
    found = examine(thirds(), readings=["intended"], tolerance=0.0)
    assert found.minimal_order == {"intended": 1}
    assert (found.answer.order, found.answer.basis) == (2, "floating")
    assert found.status == 3
    assert "by the floating path alone, nothing is proved (intended gives 1)" in found.verdict
    assert "intended is a hypothesis" in " ".join(str(found).split())


# --------------------------------------------------------------------------- connections


def test_entries_without_a_simple_fraction_are_those_of_the_blocks() -> None:
    """A loop of tenths multiplies out to long fractions; the blocks hold simple ones."""
    plant = Realization([[0.1, 0.7], [0.3, -0.9]], [0.1, 0.3], [0.7, 0.9], 0.3)
    closed = loop(plant, Realization([[-0.3]], [0.7], [0.1], 0.9))
    assert examine(closed).entries_without_simple_fraction == 0
    odd = loop(plant, Realization([[-math.sqrt(2.0)]], [0.7], [0.1], [["1/3"]]))
    assert examine(odd).entries_without_simple_fraction == 1
    flat = Realization(*closed.matrices())
    assert examine(flat).entries_without_simple_fraction > 0


def test_rational_entries_are_not_floats_without_a_simple_fraction() -> None:
    """Only floats are counted: 1/3 to many digits beside a float was given so."""
    long = F(10**40 + 1, 3 * 10**40)
    assert examine(Realization([[long]], [0.5], [1.0])).entries_without_simple_fraction == 0


def test_the_estimate_of_reading_knows_connections() -> None:
    """Joining costs more than reading, and a large loop as intended far more."""
    rng = np.random.default_rng(0)

    def block(order: int, channels: int) -> Realization:
        shapes = (order, order), (order, channels), (channels, order), (channels, channels)
        return Realization(*(rng.standard_normal(shape) for shape in shapes))

    small, wide = loop(block(8, 2), block(8, 2)), loop(block(30, 20), block(30, 20))
    for model, largest in ((small, 4), (wide, 40)):
        connection = model._connection
        assert connection is not None
        products, found = connection.work()
        assert found == largest
        assert products >= 2 * largest * model.order
        apart = sum(reading_seconds(each, Reading.STORED) for each in connection.blocks)
        assert reading_seconds(model, Reading.STORED) > apart
    assert reading_seconds(wide, Reading.INTENDED) > 5 * reading_seconds(wide, Reading.STORED)
    # Substitution is no loop: a chain without feedthrough has none.
    chain = cascade(block(3, 1), Realization([[-1.0]], [1.0], [1.0]))._connection
    assert chain is not None
    assert chain.work()[1] == 0
