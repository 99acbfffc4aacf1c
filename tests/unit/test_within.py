"""An uncertainty weighed: minimal for every model, a witness that is not, or open."""

from __future__ import annotations

import inspect
import itertools
import json
import pickle
from fractions import Fraction
from typing import Any

import click.testing
import numpy as np
import pytest
import scipy.linalg

from realize import Realization, Uncertainty, errors, exact, examine, load, loop, save
from realize.arithmetic.exact import ExactPath
from realize.cli import main
from realize.forms.kalman import reach_and_see
from realize.results import Side
from realize.within.box import Box, InDoubles
from realize.within.covering import Covering
from realize.within.discs import Discs
from realize.within.exactly import exactly
from realize.within.search import closest, eigenvalues, starts
from realize.within.weigh import Within, weigh

F = Fraction


def lags(*poles: Any, **more: Any) -> Realization:
    """First-order lags side by side, driven and seen with weight one."""
    A = np.full((len(poles), len(poles)), F(0), dtype=object)
    for k, pole in enumerate(poles):
        A[k, k] = F(pole)
    return Realization(A, [1] * len(poles), [1] * len(poles), **more)


def chamber() -> Realization:
    """One mode out of reach as the decimals were written, none as the doubles are stored."""
    return Realization([[-0.1, -0.2], [0.0, -0.3]], [0.1, 0.1], [1.0, 0.0])


def box(model: Realization, *words: Any, **figures: Any) -> Box:
    """The box of a model."""
    return Box.of(model, Uncertainty(relative=words[0]) if words else Uncertainty(**figures))


def words_of(examination: Any) -> str:
    """The page in one line."""
    return " ".join(str(examination).split())


# --------------------------------------------------------------------------- boxes


def test_a_box_is_exact() -> None:
    """Doubles stay the dyadic rationals that they are; membership is decided entry by entry."""
    given = box(Realization([[0.1, 0], [1, -2]], [1.0, 0], [1, 1]), "1/10")
    assert given.centre.A[0, 0] == F(0.1)
    assert given.holds(given.centre)
    corner = given.moved((given.radii.A, given.radii.B, -given.radii.C))
    assert given.holds(corner)
    assert given.distance(corner) == 1
    past = given.moved((given.radii.A * F(10**30 + 1, 10**30), given.radii.B, given.radii.C))
    assert not given.holds(past)


def test_zeros_stay_zero() -> None:
    """A relative uncertainty leaves zeros, so a model with another number there lies outside."""
    given = box(lags(-1, -2), 10**6)
    change = np.array([[0, F(1, 10**9)], [0, 0]], dtype=object)
    nothing = given.radii.B * 0, given.radii.C * 0
    assert not given.holds(given.moved((change, *nothing)))
    assert given.distance(given.moved((change, *nothing))) == float("inf")


# --------------------------------------------------------------------------- minimal


@pytest.mark.parametrize("side", list(Side))
def test_a_disc_proves_no_more_than_is_true(side: Side) -> None:
    """Around the mode that a model in the box hides, no disc proves its distance or more."""
    rng = np.random.default_rng(8)
    for _ in range(6):
        n, inputs = int(rng.integers(2, 5)), int(rng.integers(1, 3))
        matrices = [rng.integers(-20, 21, shape) for shape in ((n, n), (n, inputs), (inputs, n))]
        hiding = [np.vectorize(F)(matrix) for matrix in matrices]
        # The last state is not reached, or not seen, and its mode is that entry of A.
        if side is Side.INPUT:
            hiding[0][-1, :-1], hiding[1][-1] = F(0), F(0)
        else:
            hiding[0][:-1, -1], hiding[2][:, -1] = F(0), F(0)
        moved = [m + np.vectorize(F)(rng.integers(-9, 10, m.shape), 10) for m in hiding]
        given = box(Realization(*moved), absolute={"A": 1, "B": 1, "C": 1})
        distance = given.distance(Realization(*hiding))
        doubles = InDoubles(given)
        z = np.array([complex(float(hiding[0][-1, -1]) * 2.0**-doubles.time)] * 3)
        proved = Discs(doubles.pencil(side), 2.0).proved(z, np.array([0.0, 1e-9, 0.1]))
        assert (proved.factor <= float(distance)).all()
        covering = Covering(doubles.pencil(side), 2.0)
        for _ in range(3):
            covering.refine(2.0)
        covering.split_box(200, lambda: False)
        assert covering.lower <= float(distance)


def test_discs_hold_for_sampled_models() -> None:
    """Corners of the box, anywhere in the disc: the pencil has full rank, as was proved."""
    rng = np.random.default_rng(3)
    tested = 0
    for _ in range(30):
        n = int(rng.integers(2, 6))
        model = Realization(rng.standard_normal((n, n)), rng.standard_normal((n, 1)), [[1.0] * n])
        pencil = InDoubles(box(model, F(1, 20))).pencil(Side.INPUT)
        z = rng.standard_normal(8) + 1j * np.abs(rng.standard_normal(8))
        r = 10.0 ** rng.uniform(-4, 0, 8)
        proved = Discs(pencil, 4.0).proved(z, r)
        for k in np.flatnonzero(proved.factor > 0):
            factor = min(proved.factor[k], 4.0)
            for _ in range(20):
                corner = factor * pencil.radius * rng.choice([-1, 1], pencil.matrix.shape)
                point = z[k] + r[k] * np.exp(2j * np.pi * rng.uniform())
                M = pencil.matrix + corner - point * np.eye(*corner.shape)
                assert np.linalg.svd(M, compute_uv=False)[-1] > 1e-13
                tested += 1
    assert tested > 500


@pytest.mark.parametrize("most", [0, 4000])
def test_splitting_the_box_proves_what_one_inverse_cannot(most: int) -> None:
    """Two oscillators whose stiffness differs: real changes cannot make them alike.

    Changes that may be complex can, so without splitting nothing is proved.
    """
    A = np.zeros((4, 4), dtype=object)
    A[0, 1] = A[2, 3] = 1
    A[1, :2], A[3, 2:] = ["-2", "-1/5"], ["-5/2", "-1/5"]
    model = Realization(A, [0, 1, 0, 1], [1, 0, 1, 0])
    radii = np.zeros((4, 4), dtype=object)
    radii[1, :2] = radii[3, 2:] = [F(1, 5), F(1, 20)]
    pencil = InDoubles(box(model, absolute={"A": radii.tolist()})).pencil(Side.INPUT)
    covering = Covering(pencil, 2.0)
    for _ in range(8):
        covering.refine(1.0)
    covering.split_box(most, lambda: False)
    assert (covering.lower >= 1) == bool(most)


def test_structure_that_no_value_can_break() -> None:
    """A chain of ten with links uncertain by 95 % is minimal: no link can vanish."""
    A = np.diag([F(-2)] * 10) + np.diag([F(1)] * 9, -1) + np.diag([F(1, 2)] * 9, 1)
    model = Realization(A, [1] + [0] * 9, [0] * 9 + [1])
    assert examine(model, uncertainty=0.95).within_uncertainty == "minimal"
    assert examine(model, uncertainty=1).within_uncertainty == "not minimal"


@pytest.mark.parametrize("share", [F(1, 2), F(9, 10), F(101, 100), F(11, 10)])
def test_uncertainties_far_below_an_ulp(share: Fraction) -> None:
    """Where doubles see nothing, balls prove and exact numbers refute, both sides of the truth.

    With A = [a b; 0 d] and B = [p; q] the mode d is reached unless p (d - a) = b q. The stored
    doubles miss that by rounding alone, and the relative uncertainty that makes up for it is
    known to first order, which at 1e-17 is all of it.
    """
    model = chamber()
    (a, b), (_, d) = ([F(x) for x in row] for row in model.A.tolist())
    p, q = (F(x) for x in model.B.ravel().tolist())
    missing = abs(p * (d - a) - b * q)
    needed = missing / (abs(p) * (abs(d) + abs(a)) + abs(p * (d - a)) + 2 * abs(b * q))
    assert needed < F(1, 10**15)
    found = examine(model, readings=["stored"], uncertainty=Uncertainty(relative=share * needed))
    assert found.within_uncertainty == ("minimal" if share < 1 else "not minimal")
    assert found.answer.order == (2 if share < 1 else 1)


def test_no_uncertainty_at_all() -> None:
    """Zero leaves the model itself, and that is minimal or it is not."""
    assert examine(chamber(), uncertainty=0).within_uncertainty == "minimal"
    assert examine(lags(-1, -1), uncertainty=0).within_uncertainty == "not minimal"


@pytest.mark.parametrize(
    ("model", "word"),
    [
        (Realization([], [], [], [[1.0]]), "minimal"),
        (Realization([[-1]], np.zeros((1, 0)), [[1]]), "not minimal"),
        (Realization([[-1]], [[1]], np.zeros((0, 1))), "not minimal"),
        (Realization([[0]], [[1]], [[1]]), "minimal"),
    ],
)
def test_empty_models(model: Realization, word: str) -> None:
    """No states, no inputs, no outputs, nothing but zeros in A."""
    assert examine(model, uncertainty=0.01).within_uncertainty == word


# --------------------------------------------------------------------------- not minimal


@pytest.mark.parametrize("sampling_period", [None, F(1, 10)])
def test_a_witness_is_exact(sampling_period: Any) -> None:
    """It lies in the box entry by entry, hides a mode exactly, and keeps names and periods."""
    model = lags("-1/2", "-51/100", "-3/10", state_names=["a", "b", "c"],
                 sampling_period=sampling_period)  # fmt: skip
    found = examine(model, uncertainty=Uncertainty(relative={"A": 0.02}))
    assert found.within_uncertainty is Within.NOT_MINIMAL
    assert found.witness is not None
    given = box(model, relative={"A": 0.02})
    assert given.holds(found.witness)
    assert found.witness.kind == "rational"
    assert exact.minimal(found.witness).order == found.answer.order == 2
    assert (found.witness.A != model.A).sum() in (1, 2)
    assert found.witness.A[2, 2] == F(-3, 10)
    assert found.witness.state_names == ("a", "b", "c")
    assert found.witness.sampling_period == sampling_period
    assert found.answer.basis == "nearest"
    assert [str(mode.part) for mode in found.hidden_modes] == ["uncontrollable, unobservable"]


@pytest.mark.parametrize(("radius", "word"), [("1/10", "not minimal"), ("99/1000", "minimal")])
def test_on_the_edge(radius: str, word: str) -> None:
    """Two intervals that touch in one point hold a model that is not minimal; apart they do not."""
    found = examine(
        lags(-1, "-6/5"), uncertainty=Uncertainty(absolute={"A": [[radius, 0], [0, radius]]})
    )
    assert found.within_uncertainty == word
    if found.witness is not None:
        assert found.witness.A[0, 0] == found.witness.A[1, 1] == F(-11, 10)


def test_a_pair_is_hidden_as_a_pair() -> None:
    """Two oscillators that can be made alike: both modes of one are hidden, in a real model."""
    A = np.zeros((4, 4), dtype=object)
    A[0, 1] = A[2, 3] = 1
    A[1, :2], A[3, 2:] = ["-2", "-1/5"], ["-21/10", "-1/4"]
    model = Realization(A, [0, 1, 0, 2], [1, 0, 1, 0])
    radii = np.zeros((4, 4), dtype=object)
    radii[1, :2] = radii[3, 2:] = F(1, 10)
    found = examine(model, uncertainty=Uncertainty(absolute={"A": radii.tolist()}))
    assert found.within_uncertainty == "not minimal"
    assert found.answer.order == 2
    witness = found.witness
    assert witness is not None
    assert (witness.A[1, 0], witness.A[1, 1]) == (witness.A[3, 2], witness.A[3, 3])
    assert witness.A[0, 1] == witness.A[2, 3] == 1


def test_as_many_modes_as_will_go() -> None:
    """Three lags within the uncertainty of each other: two of them can be hidden at once."""
    found = examine(
        lags(-1, "-101/100", "-102/100", -4), uncertainty=Uncertainty(relative={"A": 0.02})
    )
    assert found.answer.order == 2
    assert found.witness is not None
    assert exact.minimal(found.witness).order == 2


def test_both_sides_at_once() -> None:
    """A state nearly out of reach and another nearly unseen share the changes of A."""
    A = [["-1", "1/100", "1/2"], ["1/3", "-2", "1/200"], ["1/2", "1/3", "-3"]]
    model = Realization(A, ["1/200", 1, 1], ["1", "1/3", "1/100"])
    given = Uncertainty(absolute={"A": "3/5", "B": "1/100", "C": "1/50"})
    found = examine(model, uncertainty=given)
    assert found.within_uncertainty == "not minimal"
    assert found.answer.order == 1
    assert found.witness is not None
    assert Box.of(model, given).holds(found.witness)
    parts = {str(mode.part) for mode in found.hidden_modes}
    assert parts == {"uncontrollable, observable", "controllable, unobservable"}


def test_a_reading_within_the_uncertainty_is_a_witness() -> None:
    """The decimals as written lie within one ulp of the doubles, and hide a mode."""
    found = examine(chamber(), uncertainty="ulp")
    assert (found.answer.order, found.answer.basis) == (1, "written")
    assert found.witness == chamber().read("written")


def test_a_reading_outside_the_uncertainty_does_not_lead() -> None:
    """The decimals as written are no answer when the doubles are meant to 1e-20."""
    found = examine(chamber(), uncertainty=1e-20)
    assert (found.answer.order, found.answer.basis) == (2, "stored")
    assert found.within_uncertainty == "minimal"


def test_a_model_that_hides_a_mode_already() -> None:
    """The centre is a witness at once, and one that hides more is looked for."""
    found = examine(lags(-1, -1, -2), uncertainty=Uncertainty(relative={"A": 0.01}))
    assert (found.answer.order, found.answer.basis) == (2, "given")
    assert found.witness == lags(-1, -1, -2)
    more = examine(lags(-1, -1, "-101/100"), uncertainty=Uncertainty(relative={"A": 0.02}))
    assert (more.answer.order, more.answer.basis) == (1, "nearest")


def test_columns_without_uncertainty_are_equations() -> None:
    """Only one coefficient is uncertain; the vector must meet all the other columns exactly."""
    # (s + 1.01) over (s + 1)(s + 2)(s + 3) in companion form: the numerator may hit the pole.
    model = Realization([[0, 1, 0], [0, 0, 1], [-6, -11, -6]], [0, 0, 1], ["101/100", 1, 0])
    found = examine(model, uncertainty=Uncertainty(absolute={"C": [["1/50", 0, 0]]}))
    assert found.within_uncertainty == "not minimal"
    assert found.witness is not None
    assert found.witness.C.tolist() == [[1, 1, 0]]
    assert [mode.value for mode in found.hidden_modes] == [-1]


def test_the_search_and_its_exact_end() -> None:
    """What is found in doubles becomes exact with the same factor, for modes and pairs."""
    rng = np.random.default_rng(21)
    kinds = set()
    for _ in range(6):
        model = Realization(*(rng.standard_normal(s).round(2) for s in ((4, 4), (4, 1), (1, 4))))
        given = box(model, F(1, 20))
        doubles = InDoubles(given)
        for side in Side:
            for _, mode in starts(doubles, side, eigenvalues(doubles))[:3]:
                found = closest(doubles, (mode,), 0.0, lambda: False)
                if found is None:
                    continue
                witness = exactly(given, doubles, found, 0.0)
                if witness is None:
                    continue
                kinds.add(found.modes[0].is_real)
                assert float(witness.factor) >= found.factor * (1 - 1e-4)
                assert given.distance(witness.model) == witness.factor
                _, sight = reach_and_see(ExactPath().open(witness.model))
                assert sight.dimension <= 4 - found.modes[0].count
                assert abs(found.weights.sum() - 1) < 1e-6
    assert kinds == {True, False}


# --------------------------------------------------------------------------- open


def open_case() -> Realization:
    """A dense model: the bounds stay apart, and the factor 1 lies between them."""
    rng = np.random.default_rng(0)
    return Realization(*(rng.standard_normal(s).round(3) for s in ((6, 6), (6, 1), (1, 6))))


def test_an_open_question_has_both_bounds(monkeypatch: pytest.MonkeyPatch) -> None:
    """What is proved, what was reached, what counts most, and what would settle it."""
    # Ended by work done, not by the clock.
    monkeypatch.setattr("realize.within.weigh._PIECES", 100)
    found = examine(open_case(), uncertainty=0.05, budget=None)
    assert found.within_uncertainty is Within.OPEN
    assert found.witness is None
    weighed = found.weighed
    assert weighed is not None
    # How near the bounds come depends on how much a machine does in that time.
    assert 0 < weighed.proved < 1 < weighed.reached < 2
    assert found.status == 3
    assert found.answer.order == 6
    assert weighed.unfinished
    text = words_of(found)
    for words in (
        "uncertainty relative 0.05: open. Within 0.",
        "times it suffices to hide a mode at -1.63",
        "measure better what counts most: A, row",
        "but open for other models within the uncertainty",
        "whether one is, and whether that is stable, is open",
        "the uncertainty was weighed, but not settled",
    ):
        assert words in text, text
    smaller = examine(open_case(), uncertainty=0.05 * weighed.proved * 0.99)
    assert smaller.within_uncertainty == "minimal"
    larger = examine(open_case(), uncertainty=0.05 * weighed.reached * 1.01)
    assert larger.within_uncertainty == "not minimal"


def test_no_time_is_open_and_not_wrong() -> None:
    """With no time at all nothing is claimed, and it is said why."""
    weighed = weigh(box(open_case(), F(1, 20)), 0.0)
    assert weighed.within is Within.OPEN
    assert weighed.unfinished is not None
    assert "time" in weighed.unfinished
    assert weigh(box(lags(-1, -2), F(1, 100)), None).within is Within.MINIMAL


@pytest.mark.parametrize("radius", ["1e200", "1e400"])
def test_radii_beyond_doubles(radius: str) -> None:
    """Nothing overflows aloud: the middle decides where it can, and the rest is open."""
    given = Uncertainty(absolute=radius)
    assert examine(lags(-1, -1), uncertainty=given).within_uncertainty == "not minimal"
    found = examine(lags(-1, -2), uncertainty=given, budget=1)
    assert found.within_uncertainty in ("not minimal", "open")
    assert f"absolute {'1e+200' if radius == '1e200' else 'about 2^1328'}" in words_of(found)
    json.dumps(found.to_dict(), allow_nan=False)


def test_entries_beyond_doubles_are_open() -> None:
    """No scaling brings them into doubles; the error of that is what is told."""
    model = Realization([["1e400", 1], [1, "-1e400"]], [1, 1], [1, 1])
    found = examine(model, uncertainty=0.01)
    assert found.within_uncertainty == "open"
    assert found.status == 3
    assert found.weighed is not None
    assert "too large for a double" in str(found.weighed.unfinished)


# --------------------------------------------------------------------------- what is told


def test_the_page_says_what_was_weighed() -> None:
    """Minimal, not minimal, and nothing weighed: one line each."""
    minimal = examine(lags(-1, -2), uncertainty=0.01)
    text = words_of(minimal)
    assert "proved for every model within the uncertainty" in text
    assert (
        "Within uncertainty relative 0.01: every model within it, and within twice it, is" in text
    )
    assert "nothing within the uncertainty hides a mode" in text
    assert "Not done nothing." in text
    assert minimal.status == 0
    witnessed = examine(lags(-1, "-1001/1000"), uncertainty=Uncertainty(relative={"A": "1/100"}))
    text = words_of(witnessed)
    assert "the witness, is not minimal; 0.05 of it suffices to hide a mode at -1" in text
    assert "which --json prints" in text
    assert witnessed.status == 1
    assert "no uncertainty was given" in words_of(examine(lags(-1, -2)))
    for page in (minimal, witnessed):
        assert max(map(len, str(page).splitlines())) <= 80


def test_a_doubtful_sign_outranks() -> None:
    """A mode hidden within the uncertainty that may not decay is status 4."""
    found = examine(lags("-1/1000", "-1/1001", -5), uncertainty=Uncertainty(absolute={"A": 0.01}))
    assert found.within_uncertainty == "not minimal"
    assert [str(mode.stability) for mode in found.hidden_modes] == ["cannot tell"]
    assert found.status == 4


def test_the_record_of_a_witness_is_a_model_file(tmp_path: Any) -> None:
    """JSON holds the witness as a document that loads, and the bounds; pickles come back."""
    found = examine(lags(-1, "-101/100"), uncertainty=Uncertainty(relative={"A": 0.01}))
    record = json.loads(json.dumps(found.to_dict(), allow_nan=False))
    assert record["within_uncertainty"] == "not minimal"
    assert record["uncertainty"] == "relative by matrix"
    path = tmp_path / "witness.json"
    path.write_text(json.dumps(record["witness"]))
    assert load(path) == found.witness
    assert record["weighed"]["reached"] < 1
    back = pickle.loads(pickle.dumps(found))
    assert back.witness == found.witness
    assert back.within_uncertainty is Within.NOT_MINIMAL


def test_a_connection_is_weighed_around_its_entries() -> None:
    """The entries multiplied out are the centre, whatever the blocks were."""
    inner = loop(Realization([[-0.1]], [0.3], [0.7]), Realization([[-0.9]], [0.11], [0.13]))
    found = examine(inner, uncertainty=1e-3)
    assert found.within_uncertainty == "minimal"
    assert found.answer.order == 2


@pytest.mark.parametrize(
    ("uncertainty", "error"),
    [
        (-0.1, errors.UncertaintyError),
        ("inch", errors.UnknownWordError),
        (float("nan"), errors.UncertaintyError),
        ([0.1], errors.UncertaintyError),
        (Uncertainty(absolute={"A": [[1, 2]]}), errors.UncertaintyError),
        (Uncertainty(absolute={"numerators": 1}), errors.UncertaintyError),
    ],
)
def test_uncertainties_that_are_none(uncertainty: Any, error: type[Exception]) -> None:
    """Negative, unknown, not finite, of another shape, or for another kind of model."""
    with pytest.raises(error):
        examine(lags(-1, -2), uncertainty=uncertainty)


def command(*arguments: str) -> Any:
    """Run the command line in this process."""
    known = inspect.signature(click.testing.CliRunner).parameters
    options: dict[str, Any] = {"mix_stderr": False} if "mix_stderr" in known else {}
    runner = click.testing.CliRunner(**options)
    return runner.invoke(main, list(arguments), catch_exceptions=False, prog_name="realize")


@pytest.mark.parametrize(
    ("how", "status", "word"),
    [("0.001", 0, "minimal"), ("1/100", 1, "not minimal"), ("last digit", 0, "minimal"),
     ("ulp", 0, "minimal")],
)  # fmt: skip
def test_the_command_line_takes_an_uncertainty(
    tmp_path: Any, how: str, status: int, word: str
) -> None:
    """A number, exact as it is spelled, or a word; the exit status follows."""
    path = str(tmp_path / "model.json")
    save(lags(-1, "-101/100"), path)
    found = command("examine", path, "--uncertainty", how, "--json")
    assert json.loads(found.stdout)["within_uncertainty"] == word
    assert found.exit_code == status
    wrong = command("examine", path, "--uncertainty", "inch")
    assert wrong.exit_code == 2
    assert "inch" in wrong.stderr


# --------------------------------------------------------------------------- sensitivity


@pytest.mark.parametrize("period", [None, F(1, 2)])
def test_sensitivity_is_the_first_order_bound(period: Any) -> None:
    """Of a diagonal model it is the radius of the entry; of a companion it is worse than that."""
    found = examine(
        lags(-1, -2, sampling_period=period),
        uncertainty=Uncertainty(absolute={"A": [["1/8", 0], [0, "1/4"]]}),
    )
    assert {mode.value.real: mode.sensitivity for mode in found.modes} == {-1: 0.125, -2: 0.25}
    ulps = examine(lags(-1, -3, sampling_period=period))
    assert {mode.value.real: mode.sensitivity for mode in ulps.modes} == {
        -1: 2.0**-52,
        -3: 3 * 2.0**-52,
    }


def test_sensitivity_is_reached() -> None:
    """Changing every entry by a small share moves a mode by nearly that, and never by much more."""
    rng = np.random.default_rng(2)
    A = rng.standard_normal((5, 5))
    model = Realization(A, [1.0] * 5, [1.0] * 5)
    share = 1e-6
    found = examine(model, uncertainty=share)
    for mode in found.modes:
        values, left, right = scipy.linalg.eig(A, left=True)
        k = int(np.abs(values - mode.value).argmin())
        # The change that moves this mode along the real axis the most.
        direction = (left[:, k].conj()[:, None] * right[:, k][None, :]) / np.vdot(
            left[:, k], right[:, k]
        )
        moved = np.linalg.eigvals(A + share * np.abs(A) * np.sign(direction.real))
        step = float(np.abs(moved - mode.value).min())
        assert mode.sensitivity is not None
        assert 0.3 * mode.sensitivity <= step <= 1.01 * mode.sensitivity


def test_what_agrees_within_the_data() -> None:
    """A double pole but for one ulp: both modes show, and the data do not tell them apart."""
    model = Realization([[-2.0, 1.0], [-1.0 + 2.0**-52, 0.0]], [0.0, 1.0], [1.0, 0.0])
    found = examine(model)
    assert found.answer.order == 2
    (pair,) = found.alike
    assert not pair.is_zero
    assert pair.apart == pytest.approx(2.0**-25, rel=1e-6)
    assert pair.apart < pair.within < 4 * pair.apart
    words = "These agree within what the data can tell the mode -1 and the mode -1"
    assert words in words_of(found)
    assert found.to_dict()["alike"] == [pair.to_dict()]
    assert examine(model.read("stored")).alike == ()
    apart = Realization([[-1.0, 1.0], [0.0, -1.5]], [0.0, 1.0], [1.0, 0.0])
    assert examine(apart).alike == ()


def test_a_pole_and_a_zero_agree() -> None:
    """Half a bound each to first order: told to agree, and a witness where they can meet."""
    model = Realization([[-3.0, -2.0], [1.0, 0.0]], [1.0, 0.0], [1.0, 1.0005])
    radii = {"A": [["1/2000", "1/2000"], [0, 0]], "C": [[0, "1/10000"]]}
    found = examine(model, uncertainty=Uncertainty(absolute=radii))
    pairs = [pair for pair in found.alike if pair.is_zero]
    if found.within_uncertainty == "not minimal":
        assert found.answer.order == 1
    else:
        assert len(pairs) == 1
    far = examine(model, uncertainty=Uncertainty(absolute={"C": [[0, "1/10000"]]}))
    assert far.within_uncertainty == "minimal"
    assert far.alike == ()
    near = examine(model, uncertainty=Uncertainty(absolute={"C": [[0, "1/1000"]]}))
    assert near.within_uncertainty == "not minimal"


def test_sampling_and_corners_of_a_proved_box() -> None:
    """No corner of a box that was proved minimal hides a mode, exactly; all 2^8 are asked."""
    model = Realization([[-1, "1/2"], ["1/3", -2]], [1, "1/2"], [1, -1])
    given = box(model, F(1, 20))
    assert examine(model, uncertainty=0.05).within_uncertainty == "minimal"
    for signs in itertools.product([-1, 1], repeat=8):
        s = np.array([F(sign) for sign in signs], dtype=object)
        corner = given.moved((
            given.radii.A * s[:4].reshape(2, 2),
            given.radii.B * s[4:6].reshape(2, 1),
            given.radii.C * s[6:].reshape(1, 2),
        ))  # fmt: skip
        assert exact.minimal(corner).order == 2


@pytest.mark.parametrize(("inputs", "outputs"), [(0, 0), (2, 1), (0, 1)])
def test_a_model_without_states_is_minimal_whatever_moves(inputs: int, outputs: int) -> None:
    """There is no mode to hide, also where there is nothing at all."""
    empty = Realization(
        np.zeros((0, 0)), np.zeros((0, inputs)), np.zeros((outputs, 0)), np.ones((outputs, inputs))
    )
    for uncertainty in (0.1, "ulp"):
        found = examine(empty, uncertainty=uncertainty)
        assert found.within_uncertainty is Within.MINIMAL
        assert found.answer.order == 0
