"""The kit for other test suites: assertions, problems with known answers, scores."""

from __future__ import annotations

import json
import os
import pickle
import re
import subprocess
import sys
from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from click.testing import CliRunner

import realize
import realize.testing
from realize import Realization, TransferMatrix, exact, floating
from realize.cli import main
from realize.errors import (
    NotBuiltError,
    ToleranceError,
    UnknownWordError,
    UnsupportedEntryError,
)
from realize.testing import (
    Problem,
    Scorecard,
    assert_minimal,
    assert_same_transfer,
    families,
    problem,
    score,
)
from realize.testing.scoring import load_routine
from tests.helpers import assert_same_response

NAMES = [family.name for family in families()]
WHOLE = Realization([[-1, 0], [0, -2]], [1, 0], [1, 1])
HALF = Realization([[-1]], [1], [1])


def fresh(code: str) -> str:
    """What a line of Python prints in a fresh process."""
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", code],
        capture_output=True,
        text=True,
        timeout=60,
        check=True,
        env=os.environ | {"PYTHONPATH": os.pathsep.join(p for p in sys.path if p)},
    )
    return done.stdout.strip()


# ------------------------------------------------------------------------- the package


def test_no_test_runner_is_loaded_before_it_is_used() -> None:
    """Assertions, problems and scores load no pytest, no Hypothesis, no matplotlib."""
    heard = fresh(
        "import sys, realize.testing as kit\n"
        "kit.assert_minimal(kit.problem('near_cancellation').exact)\n"
        "kit.score(lambda A, B, C, D: 4, ['near_cancellation'], difficulties=[0], seeds=[0])\n"
        "print([m for m in ('pytest', 'hypothesis', 'matplotlib') if m in sys.modules])\n"
        "kit.strategies.planted\n"
        "print('hypothesis' in sys.modules)"
    )
    assert heard.split("\n") == ["[]", "True"]


def test_every_name_of_the_kit_is_there() -> None:
    """Each listed name can be had; another is an AttributeError."""
    for name in realize.testing.__all__:
        assert getattr(realize.testing, name) is not None
        assert name in dir(realize.testing)
    with pytest.raises(AttributeError, match="no attribute 'nothing'"):
        _ = realize.testing.nothing


# ------------------------------------------------------------------------- problems


@pytest.mark.parametrize("difficulty", [0, 3, 6, 9])
@pytest.mark.parametrize("name", NAMES)
def test_the_answers_are_those_of_the_exact_path(name: str, difficulty: int) -> None:
    """What a family says it planted is what the exact path proves of its exact model."""
    for seed in range(3):
        asked = problem(name, difficulty=difficulty, seed=seed)
        parts = exact.kalman_parts(asked.exact)
        assert dict(parts.dimensions) == asked.dimensions, asked
        assert dict(parts.polynomials) == asked.polynomials, asked
        assert asked.order == asked.dimensions["controllable, observable"]
        assert asked.minimal.order == asked.order
        assert asked.model == asked.exact.to_float()
        if asked.exact.order < 12:
            assert_same_response(asked.exact, asked.minimal)
        if asked.reading is not None:
            assert asked.model.read(asked.reading) == asked.exact


def test_a_problem_is_the_same_for_the_same_seed_only() -> None:
    """Family, difficulty and seed fix the numbers; another seed gives others; all pickle."""
    for family in families():
        first = family.problem(difficulty=4, seed=1)
        assert first.model == problem(family.name, difficulty=4, seed=1).model
        assert first.model != family.problem(difficulty=4, seed=2).model
        again: Problem = pickle.loads(pickle.dumps(first))
        assert (again.model, again.reading, again.order) == (
            first.model,
            first.reading,
            first.order,
        )


def test_every_family_says_what_it_is_and_where_it_comes_from() -> None:
    """A summary, and a source or that it is our own."""
    for family in families():
        assert family.summary
        assert "our own" in family.source
    assert len({family.summary for family in families()}) == len(NAMES) >= 9


@pytest.mark.parametrize("difficulty", [0, 1, 2, 3])
def test_the_distance_of_a_quiet_staircase_lies_in_its_bracket(difficulty: int) -> None:
    """sigma_min [A - z, B] comes under the upper end at -1, and nowhere under the lower one."""
    asked = problem("quiet_staircase", difficulty=difficulty, seed=5)
    assert asked.distance is not None
    low, high = asked.distance
    A, B = asked.model.A, asked.model.B

    def smallest(z: complex) -> float:
        pencil = np.hstack([A - z * np.eye(len(A)), B])
        return float(np.linalg.svd(pencil, compute_uv=False)[-1])

    assert smallest(-1.0) <= high * (1 + 1e-6)
    rng = np.random.default_rng(1)
    near = [-1 + 0.3 * complex(*rng.standard_normal(2)) for _ in range(100)]
    wide = [8 * complex(*rng.standard_normal(2)) for _ in range(100)]
    assert min(map(smallest, [-1.0, *near, *wide])) >= low


@pytest.mark.parametrize("name", ["near_cancellation", "weak_cascade"])
def test_the_distance_of_a_weak_link_is_not_above_its_bracket(name: str) -> None:
    """At an eigenvalue of A, sigma_min [A - z, B] comes under the upper end."""
    seen = 0
    for seed in range(8):
        asked = problem(name, difficulty=2, seed=seed)
        if asked.distance is None:
            continue
        seen += 1
        A, B = asked.model.A, asked.model.B
        smallest = min(
            np.linalg.svd(np.hstack([A - z * np.eye(len(A)), B]), compute_uv=False)[-1]
            for z in np.linalg.eigvals(A)
        )
        assert smallest <= asked.distance[1] * (1 + 1e-6) + 1e-13
    assert seen > 1


def test_a_hidden_mode_has_distance_zero_and_a_full_order_has_not() -> None:
    """A bracket that ends at zero belongs to a model with a mode out of reach, exactly."""
    for name in NAMES:
        for seed in range(4):
            asked = problem(name, difficulty=3, seed=seed)
            out_of_reach = asked.exact.order - sum(
                count for part, count in asked.dimensions.items() if part.startswith("controllable")
            )
            if asked.distance is not None:
                assert (asked.distance[1] == 0.0) == (out_of_reach > 0), asked


@pytest.mark.parametrize(
    ("arguments", "error", "message"),
    [
        ({"name": "no_such"}, UnknownWordError, "no family 'no_such'; wanted one of hidden_modes"),
        ({"name": NAMES[0], "difficulty": 10}, UnsupportedEntryError, "0, trivial, to 9, brutal"),
        ({"name": NAMES[0], "difficulty": 1.5}, UnsupportedEntryError, "difficulty is 1.5"),
        ({"name": NAMES[0], "seed": -1}, UnsupportedEntryError, "seed is -1"),
    ],
)
def test_what_is_no_problem_is_refused(
    arguments: dict[str, Any], error: type[Exception], message: str
) -> None:
    """An unknown family, difficulty or seed is an error that says what is wanted."""
    with pytest.raises(error, match=message):
        problem(**arguments)


# ------------------------------------------------------------------------- assertions


def test_equal_transfer_matrices_pass() -> None:
    """Realizations, transfer matrices, tuples and floats that stand for one transfer matrix."""
    assert_same_transfer(WHOLE, HALF)
    assert_same_transfer(WHOLE, TransferMatrix([1], [1, 1]))
    assert_same_transfer(TransferMatrix([1, 3], [1, 4, 3]), ([1], [1, 1]))
    third = Realization([[-0.1]], [1.0], [1.0])
    assert_same_transfer(third, Realization([["-1/10"]], [1], [1]), reading="written")
    assert_same_transfer(Realization([], [], [], 2), Realization([[-1]], [0], [1], 2))


def said(*arguments: Any, **options: Any) -> str:
    """The message of an assertion that fails."""
    with pytest.raises(AssertionError) as caught:
        assert_same_transfer(*arguments, **options)
    return str(caught.value)


def test_a_difference_is_told_with_its_place_and_size() -> None:
    """The point, the entry, both values, and by how much; named signals by their names."""
    text = said(WHOLE, Realization([[-1]], [2], [1]))
    assert text == (
        "the transfer matrices differ at s = 1: from input u1 to output y1 the first has 1/2, the "
        "second 1: off by 1/2 (100 %)"
    )
    first = Realization([[0]], [[1, 0]], [[1], [0]], sampling_period=1, input_names=["a", "b"])
    second = Realization([[0]], [[1, 0]], [[1], [5]], sampling_period=1)
    text = said(first, second)
    assert "differ at z = 1: from input a to output y2" in text
    assert text.endswith("1 of 4 entries differ there")


def test_a_hidden_pole_at_the_first_points_is_passed_over() -> None:
    """0, 1 and -1 are poles: the counterexample is found beyond them."""
    first = Realization(np.diag([0, 1, -1]).tolist(), [1, 1, 1], [1, 1, 1])
    assert "differ at s = 2" in said(first, Realization([[0]], [1], [1]))


def test_a_difference_below_double_precision_is_seen() -> None:
    """Exact means exact: 1e-30 of a difference is a difference."""
    text = said(HALF, Realization([[-1]], [1], [Fraction(1) + Fraction(1, 10**30)]))
    assert "off by 5e-31" in text


def test_the_reading_decides() -> None:
    """As stored, 0.1 is not 1/10."""
    model = Realization([[-0.1]], [1.0], [1.0])
    assert "off by" in said(model, Realization([["-1/10"]], [1], [1]))


@pytest.mark.parametrize("within", [None, 1e-3])
def test_shapes_and_time_domains_are_told_apart(within: float | None) -> None:
    """Another shape or sampling period is said as such, not as a number."""
    wide = Realization([[-1]], [[1, 1]], [1])
    assert said(WHOLE, wide, within=within) == (
        "the transfer matrices have different shapes: the first is 1 by 1 (outputs by inputs), "
        "the second 1 by 2 (outputs by inputs)"
    )
    sampled = Realization([[-1]], [1], [1], sampling_period="1/2")
    text = said(HALF, sampled, within=within)
    assert text.startswith("the models have different time domains: the first is in continuous")
    assert text.endswith("the second is sampled with period " + "1/2")


def test_within_allows_a_difference_and_no_more() -> None:
    """The number is the largest difference of the frequency response, relative to the first."""
    near = Realization([[-1]], [1.001], [1])
    assert_same_transfer(HALF, near, within=1.01e-3)
    text = said(HALF, near, within=0.99e-3)
    assert re.fullmatch(
        r"the frequency responses differ by 0\.001 at \S+ radians per unit of time: 0\.001 of the "
        r"largest response of the first; allowed 0\.00099",
        text,
    )
    with pytest.raises(ToleranceError, match="within is -1"):
        assert_same_transfer(HALF, near, within=-1)


def test_a_resonance_of_the_second_alone_is_found() -> None:
    """A peak far from all poles of the first, too narrow for its grid."""
    size = Fraction(1, 10**6)
    peak = TransferMatrix([size], [1, Fraction(1, 10**6), 10**6])
    second = realize.sum_of(HALF, realize.as_realization(peak))
    text = said(HALF, second, within=5e-4)
    assert "differ by 0.001" in text
    assert "at 1e+03 radians" in text


def test_minimal_models_pass() -> None:
    """Of any order, the empty one too."""
    assert_minimal(HALF, order=1)
    assert_minimal(Realization([], [], [], 3), order=0)
    assert_minimal(TransferMatrix([1, 3], [1, 4]))


def test_what_is_hidden_is_named() -> None:
    """The order there could be, the hidden modes with their parts, and how many more."""
    with pytest.raises(AssertionError) as caught:
        assert_minimal(WHOLE)
    assert str(caught.value) == (
        "the model is not minimal: 2 states, and a realization with 1 has the same transfer "
        "matrix; hidden: -2 (uncontrollable, observable)"
    )
    many = Realization(np.diag([-1, -2, -3, -4, -5]).tolist(), [1, 0, 0, 0, 0], [1, 0, 0, 0, 0])
    with pytest.raises(AssertionError, match=r"-3 .*, and 1 more; order 4 was wanted$"):
        assert_minimal(many, order=4)
    with pytest.raises(AssertionError, match=r"is minimal, but of order 1; order 2 was wanted$"):
        assert_minimal(HALF, order=2)
    chamber = Realization([[-0.1, -0.2], [0.0, -0.3]], [0.1, 0.1], [1.0, 0.0])
    assert_minimal(chamber)
    with pytest.raises(AssertionError, match=r"hidden: -0\.1"):
        assert_minimal(chamber, reading="written")


# ------------------------------------------------------------------------- scores


def truth(A: Any, B: Any, C: Any, D: Any) -> Any:
    """The floating path, which is right on what is asked of it here."""
    return floating.minimal(Realization(A, B, C, D)).model.matrices()


def raises(A: Any, B: Any, C: Any, D: Any) -> Any:
    """A routine that gives up."""
    raise ValueError("no\nluck")


EASY = {"difficulties": [0, 1], "seeds": [0, 1, 2]}


def test_a_right_routine_is_right() -> None:
    """Orders and models are accepted alike, and the error of a model is small."""
    card = score(truth, **EASY)
    assert (card.right, card.wrong, card.crashed) == (6 * len(NAMES), 0, 0)
    assert all(r.error is not None and r.error < 1e-9 for r in card.results)
    orders = score(lambda *model: len(truth(*model)[0]), **EASY)
    assert orders.right == card.right
    assert all(r.error is None for r in orders.results)
    assert [r.off_by for r in orders.results] == [0] * len(orders.results)


def test_a_routine_that_keeps_all_states_is_right_only_where_nothing_is_hidden() -> None:
    """Counts by family: always n is right on near cancellations and quiet staircases alone."""
    card = score(lambda A, B, C, D: np.int64(len(A)), **EASY)
    for name in NAMES:
        asked = [problem(name, difficulty=r.difficulty, seed=r.seed) for r in card.of(name)]
        full = sum(each.order == each.model.order for each in asked)
        assert card.count("right", name) == full
        assert card.count("wrong", name) == 6 - full
    assert card.count("right", "near_cancellation") == card.count("right", "quiet_staircase") == 6
    assert card.count("right", "hidden_modes") == 0
    assert card.right + card.wrong == len(card.results)


def test_a_routine_that_raises_has_crashed() -> None:
    """Every problem, with the error on one line."""
    card = score(raises, ["hidden_modes"], **EASY)
    assert (card.right, card.wrong, card.crashed) == (0, 0, 6)
    assert {r.reason for r in card.results} == {"ValueError: no luck"}
    assert "crash: ValueError: no luck" in str(card)
    assert str(card).split("\n")[5].split()[-2:] == ["-", "-"]


def test_what_stops_a_program_stops_the_score() -> None:
    """An interrupt is not a crash of the routine."""

    def stopped(A: Any, B: Any, C: Any, D: Any) -> Any:
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        score(stopped, ["hidden_modes"], **EASY)


def test_a_routine_that_is_off_by_one_is_wrong_by_one() -> None:
    """The order found less the right one."""
    card = score(lambda *model: len(truth(*model)[0]) + 1, ["buried_mode"], **EASY)
    assert card.wrong == 6
    assert {r.off_by for r in card.results} == {1}
    assert "+1" in str(card).split("\n")[5]


@pytest.mark.parametrize(
    ("answer", "reason"),
    [
        (lambda A, B, C, D: (A, B, C[:, :-1], D), "returned no model: ShapeError"),
        (lambda A, B, C, D: (A, B, C), "returned no model"),
        (lambda A, B, C, D: (A, np.hstack([B, B]), C, np.hstack([D, D])), "outputs, inputs"),
        (lambda A, B, C, D: (A * 1j, B, C, D), "returned no model: UnsupportedEntryError"),
        (lambda A, B, C, D: (A * np.nan, B, C, D), "returned no model: EntryError"),
        (lambda A, B, C, D: None, "returned a NoneType; wanted an order, or A, B, C, D"),
        (lambda A, B, C, D: 3.0, "returned a float"),
        (lambda A, B, C, D: True, "returned a bool"),
        (lambda A, B, C, D: -1, "returned the order -1"),
    ],
)
def test_what_is_neither_order_nor_model_has_crashed(answer: Any, reason: str) -> None:
    """Wrong shapes, missing matrices, complex or missing numbers, other things."""
    card = score(answer, ["near_cancellation"], difficulties=[0], seeds=[0])
    assert card.crashed == 1
    assert card.results[0].reason is not None
    assert reason in card.results[0].reason


def test_a_model_of_the_right_order_with_another_response_is_wrong() -> None:
    """An order alone does not make a model right; its error is told."""

    def bent(*model: Any) -> Any:
        A, B, C, D = truth(*model)
        return A, 1.01 * B, C, D

    card = score(bent, ["hidden_modes"], **EASY)
    assert card.wrong == 6
    assert all(r.off_by == 0 and 1e-3 < r.error < 1e-1 for r in card.results)


def test_a_routine_cannot_spoil_the_problem() -> None:
    """It gets arrays of its own: what it writes to them is not what is compared with."""

    def spoiling(A: Any, B: Any, C: Any, D: Any) -> Any:
        found = truth(A, B, C, D)
        A[:], B[:], C[:] = 7.0, 7.0, 7.0
        return found

    assert score(spoiling, ["hidden_modes"], **EASY).right == 6


def test_the_scorecard_in_text_and_in_json() -> None:
    """At most 80 columns; the counts of the dictionary are those of the results."""
    done = []
    card = score(
        lambda A, B, C, D: len(A), name="all states", progress=lambda *n: done.append(n), **EASY
    )
    assert done[-1] == (len(card.results), len(card.results))
    text = str(card)
    assert max(map(len, text.split("\n"))) <= 80
    assert text.startswith(f"all states: {card.right} of {len(card.results)} right")
    record = json.loads(json.dumps(card.to_dict(), allow_nan=False))
    assert record["right"] + record["wrong"] + record["crashed"] == record["problems"]
    for name, found in record["families"].items():
        by_hand = [r for r in record["results"] if r["family"] == name]
        assert found["right"] == sum(r["outcome"] == "right" for r in by_hand)
        assert found["right_by_difficulty"]["1"] == [
            sum(r["outcome"] == "right" and r["difficulty"] == 1 for r in by_hand),
            3,
        ]
    assert isinstance(card, Scorecard)
    assert repr(card).startswith("<Scorecard: all states, ")


def test_families_by_name_and_as_such() -> None:
    """Names and families are taken alike; a bare name is refused with what is wanted."""
    family = families()[0]
    by_name = score(lambda A, B, C, D: 0, [family.name], **EASY)
    assert [r.outcome for r in score(lambda A, B, C, D: 0, [family], **EASY).results] == [
        r.outcome for r in by_name.results
    ]
    with pytest.raises(UnsupportedEntryError, match="wanted a list"):
        score(lambda A, B, C, D: 0, family.name)
    with pytest.raises(UnknownWordError, match="no family"):
        score(lambda A, B, C, D: 0, ["no_such"])


# ------------------------------------------------------------------------- picture


def test_the_picture_shows_the_counts(tmp_path: Path) -> None:
    """A cell for each family and difficulty, its number of right answers in it; three kinds."""
    card = score(raises, ["hidden_modes", "buried_mode"], **EASY)
    figure = card.picture()
    axes = figure.axes[0]
    assert [text.get_text() for text in axes.texts] == ["0", "3 crashed"] * 4
    assert [label.get_text() for label in axes.get_yticklabels()] == ["hidden modes", "buried mode"]
    for ending in (".png", ".svg", ".pdf"):
        target = tmp_path / f"card{ending}"
        card.save_picture(target)
        assert target.stat().st_size > 1000
    with pytest.raises(UnsupportedEntryError, match=r"ends in \.png, \.svg, \.pdf"):
        card.save_picture(tmp_path / "card.doc")


def test_a_picture_opens_no_window() -> None:
    """The object interface alone: pyplot is not loaded."""
    heard = fresh(
        "import sys; from realize.testing import score\n"
        "score(lambda A, B, C, D: 4, ['near_cancellation'], seeds=[0]).picture()\n"
        "print('matplotlib.pyplot' in sys.modules)"
    )
    assert heard == "False"


def test_without_matplotlib_the_extra_is_named(monkeypatch: pytest.MonkeyPatch) -> None:
    """The error says what to install."""
    monkeypatch.setitem(sys.modules, "matplotlib.figure", None)
    with pytest.raises(NotBuiltError, match=r"install the extra plot"):
        score(raises, ["hidden_modes"], **EASY).picture()


# ------------------------------------------------------------------------- command line

USERS = """
import realize

def good(A, B, C, D):
    return realize.floating.minimal(realize.Realization(A, B, C, D)).order

def bad(A, B, C, D):
    return 1

thing = 3
"""


@pytest.fixture
def users_module(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> str:
    """A module of somebody's in the current directory."""
    (tmp_path / "somebodys_routines.py").write_text(USERS, "utf-8")
    (tmp_path / "broken_routines.py").write_text("1 / 0", "utf-8")
    monkeypatch.chdir(tmp_path)
    monkeypatch.setattr(sys, "path", list(sys.path))
    return "somebodys_routines"


def command(*arguments: str) -> Any:
    """What `realize score` does."""
    return CliRunner().invoke(main, ["score", *arguments])


def test_realize_score(users_module: str, tmp_path: Path) -> None:
    """0 when all is right; 1 when not; JSON is the scorecard's dictionary; a picture is drawn."""
    few = ["--hardest", "1", "--seeds", "2", "--family", "hidden_modes"]
    done = command(f"{users_module}:good", *few, "--picture", "card.png")
    assert done.exit_code == 0, done.output
    assert done.stdout.startswith(f"{users_module}:good: 4 of 4 right, 0 wrong, 0 crashed\n")
    assert (tmp_path / "card.png").exists()
    done = command(f"{users_module}:bad", *few, "--json")
    assert done.exit_code == 1
    record = json.loads(done.stdout)
    assert (record["format"], record["problems"]) == ("realize-scorecard", 4)
    assert record["wrong"] == 4


@pytest.mark.parametrize(
    ("routine", "message"),
    [
        ("somebodys_routines", "wanted MODULE:FUNCTION"),
        ("no_such_module:f", "no_such_module cannot be imported: ModuleNotFoundError"),
        ("broken_routines:f", "broken_routines cannot be imported: ZeroDivisionError"),
        ("somebodys_routines:no_such", "somebodys_routines has no no_such"),
        ("somebodys_routines:thing", "is a int; wanted a function"),
    ],
)
@pytest.mark.usefixtures("users_module")
def test_a_routine_that_cannot_be_had_is_an_input_error(routine: str, message: str) -> None:
    """Status 2 and one line."""
    done = command(routine)
    assert done.exit_code == 2
    assert message in done.stderr
    assert done.stdout == ""
    with pytest.raises(UnsupportedEntryError):
        load_routine(routine)


@pytest.mark.usefixtures("users_module")
def test_a_picture_that_cannot_be_written_is_told_before_the_work() -> None:
    """A name with another ending is an input error, and nothing is scored."""
    done = command("somebodys_routines:good", "--picture", "card.doc")
    assert done.exit_code == 2
    assert "ends in .png, .svg, .pdf" in done.stderr
