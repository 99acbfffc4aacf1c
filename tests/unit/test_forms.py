"""Hand cases of every form, on all faces and at the top level; empty shapes; refusals."""

from __future__ import annotations

import math
import pickle
import warnings
from collections.abc import Callable
from fractions import Fraction
from types import ModuleType
from typing import Any

import numpy as np
import pytest

import realize
from realize import Realization, TransferMatrix, errors, exact, floating, multiprecision
from tests.helpers import PARTS, assert_close, assert_equal_exact, matrix

F = Fraction

quiet = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")

#: (module, exact?) : where a form may be asked for, and which arithmetic answers.
PLACES = [
    pytest.param(exact, True, id="exact"),
    pytest.param(floating, False, id="floating"),
    pytest.param(multiprecision, False, id="multiprecision"),
    pytest.param(realize, True, id="top, rational"),
    pytest.param(realize, False, id="top, floats"),
]
places = pytest.mark.parametrize(("place", "rational"), PLACES)


def in_kind(model: Any, rational: bool) -> Any:
    """The rational model itself, or its doubles."""
    return model if rational else model.to_float()


def assert_same(actual: Any, expected: Any, rational: bool) -> None:
    """Exactly equal on the exact path, equal to rounding on the floating one."""
    if rational:
        assert_equal_exact(actual, expected)
    else:
        assert_close(actual, expected, relative=1e-12, absolute=1e-14)


def two_tanks() -> Realization:
    """Two separate states: the input reaches the first, and the output sees both."""
    return Realization([[-1, 0], [0, -2]], [[1], [0]], [[1, 1]], [[5]])


def four_parts() -> Realization:
    """One state in each part, coupled where the parts allow it."""
    return Realization(
        [[-1, 1, 1, 1], [0, -2, 0, 1], [0, 0, -3, 1], [0, 0, 0, -4]],
        [[0], [1], [0], [0]],
        [[0, 1, 0, 0]],
    )


def static_gain() -> Realization:
    """No states, three inputs, two outputs."""
    return Realization([], [], [], [[1, 2, 3], [4, 5, 6]])


def lag_with_cancellation() -> TransferMatrix:
    """(s + 1) / ((s + 1)(s + 2))."""
    return TransferMatrix([1, 1], [1, 3, 2])


# --------------------------------------------------------------------------- hand cases


@places
def test_staircase_of_two_tanks(place: ModuleType, rational: bool) -> None:
    """One state is reached, two are seen."""
    model = in_kind(two_tanks(), rational)
    reached = place.staircase(model)
    assert (reached.stairs, reached.dimension) == ((1,), 1)
    seen = place.staircase(model, side="output")
    assert (seen.stairs, seen.dimension) == ((1, 1), 2)
    expected = "rational" if rational or place is multiprecision else "floating"
    assert reached.model.kind == seen.model.kind == expected


@places
def test_staircase_of_several_inputs(place: ModuleType, rational: bool) -> None:
    """Two inputs reach two states at once and a third one step later; one stays out of reach."""
    A = [[0, 0, 1, 0], [0, 0, 0, 0], [1, 0, 0, 0], [0, 0, 0, 7]]
    B = [[1, 0], [0, 1], [0, 0], [0, 0]]
    model = in_kind(Realization(A, B, [[1, 1, 1, 1]]), rational)
    assert place.staircase(model).stairs == (2, 1)


@places
def test_minimal_of_two_tanks(place: ModuleType, rational: bool) -> None:
    """The second state is lost: 1/(s + 1) + 5 is left."""
    reduction = place.minimal(in_kind(two_tanks(), rational))
    assert reduction.order == reduction.model.order == 1
    assert_same(reduction.model.A, matrix([[-1]], (1, 1)), rational)
    gain = reduction.model.C[0, 0] * reduction.model.B[0, 0]
    assert_same([gain], [F(1)], rational)
    assert_same(reduction.model.D, matrix([[5]], (1, 1)), rational)
    assert reduction.removed.count == 1
    (mode,) = reduction.removed.modes
    assert mode.value == pytest.approx(-2, rel=1e-12)
    assert mode.part == "uncontrollable, observable"
    assert mode.stability == "stable"
    if rational:
        assert_equal_exact(reduction.removed.polynomial, (F(1), F(2)))


@places
def test_kalman_parts_of_one_state_each(place: ModuleType, rational: bool) -> None:
    """Every part has one state and the root written on the diagonal."""
    form = place.kalman_parts(in_kind(four_parts(), rational))
    assert dict(form.dimensions) == dict.fromkeys(PARTS, 1)
    for part, root in zip(PARTS, (-1, -2, -3, -4), strict=True):
        assert_same(form.polynomials[part], (F(1), F(-root)), rational)


@places
@quiet
def test_minimal_of_one_state_in_each_part(place: ModuleType, rational: bool) -> None:
    """Only the root -2 is left, and the three others are named with the part that hid them."""
    reduction = place.minimal(in_kind(four_parts(), rational))
    assert_same(reduction.model.A, matrix([[-2]], (1, 1)), rational)
    hidden = {round(mode.value.real): str(mode.part) for mode in reduction.removed.modes}
    assert hidden == {-1: PARTS[0], -3: PARTS[2], -4: PARTS[3]}


@places
def test_minimal_of_a_transfer_matrix(place: ModuleType, rational: bool) -> None:
    """(s + 1) / ((s + 1)(s + 2)) needs one state."""
    reduction = place.minimal(in_kind(lag_with_cancellation(), rational))
    assert reduction.order == 1
    assert_same(reduction.model.A, matrix([[-2]], (1, 1)), rational)


@places
def test_minimal_of_a_two_by_two_transfer_matrix(place: ModuleType, rational: bool) -> None:
    """All four entries 1/(s + 1) share one pole and need one state; with -1 once, two."""
    one, lag = [1], [1, 1]
    source = TransferMatrix([[one, one], [one, one]], [[lag, lag], [lag, lag]])
    assert place.minimal(in_kind(source, rational)).order == 1
    source = TransferMatrix([[one, one], [one, [-1]]], [[lag, lag], [lag, lag]])
    assert place.minimal(in_kind(source, rational)).order == 2


@places
@pytest.mark.parametrize("side", ["input", "output"])
def test_companion_keeps_the_common_factor(place: ModuleType, rational: bool, side: str) -> None:
    """Two states for (s + 1) / (s^2 + 3 s + 2), of which the other side sees or reaches one."""
    model = place.companion(in_kind(lag_with_cancellation(), rational), side=side)
    assert model.order == 2
    other = "output" if side == "input" else "input"
    assert place.staircase(model, side=side).dimension == 2
    assert place.staircase(model, side=other).dimension == 1


@places
def test_companion_of_one_input_and_two_outputs(place: ModuleType, rational: bool) -> None:
    """A column of fractions over one denominator needs its degree in states."""
    source = TransferMatrix([[[1]], [[1, 0]]], [[[1, 3, 2]], [[1, 3, 2]]])
    model = place.companion(in_kind(source, rational))
    assert (model.order, model.input_count, model.output_count) == (2, 1, 2)
    assert_same(
        place.markov_parameters(model, 3),
        [[[F(0)], [F(0)]], [[F(0)], [F(1)]], [[F(1)], [F(-3)]]],
        rational,
    )


@places
def test_companion_of_a_fraction_with_direct_term(place: ModuleType, rational: bool) -> None:
    """(2 s + 3) / (s + 1) is 2 + 1/(s + 1)."""
    model = place.companion(in_kind(TransferMatrix([2, 3], [1, 1]), rational))
    assert_same(model.D, matrix([[2]], (1, 1)), rational)
    assert_same([model.C[0, 0] * model.B[0, 0]], [F(1)], rational)


@places
def test_transfer_matrix_of_two_tanks(place: ModuleType, rational: bool) -> None:
    """5 + 1/(s + 1) at s = 1 is 11/2, and at infinity 5."""
    transfer = place.transfer_matrix(in_kind(two_tanks(), rational))
    assert_same(transfer.evaluate(1), matrix([[F(11, 2)]], (1, 1)), rational)


@places
@quiet
def test_cancel_finds_the_planted_factor(place: ModuleType, rational: bool) -> None:
    """s + 1 is common, 1/(s + 2) is left."""
    found = place.cancel(in_kind(lag_with_cancellation(), rational))
    assert_same(found.common, (F(1), F(1)), rational)
    assert_same(found.transfer.denominators[0][0], (F(1), F(2)), rational)
    assert_same(found.transfer.numerators[0][0], (F(1),), rational)
    assert len(found.factors) == 1


@places
@quiet
def test_cancel_works_entry_by_entry(place: ModuleType, rational: bool) -> None:
    """Each entry has a common factor of its own; a pole shared by entries is none."""
    source = TransferMatrix([[[1, 1], [1]]], [[[1, 3, 2], [1, 3, 2]]])
    found = place.cancel(in_kind(source, rational))
    assert_same(found.common[0][0], (F(1), F(1)), rational)
    assert_same(found.common[0][1], (F(1),), rational)


@places
@quiet
def test_a_fraction_that_is_zero_cancels_to_zero_over_one(
    place: ModuleType, rational: bool
) -> None:
    """0 / (s + 2) has no pole; its common factor is s + 2."""
    found = place.cancel(in_kind(TransferMatrix([0], [1, 2]), rational))
    assert_same(found.transfer.denominators[0][0], (F(1),), rational)
    assert_same(found.transfer.numerators[0][0], (F(0),), rational)
    assert_same(found.common, (F(1), F(2)), rational)


@places
def test_markov_parameters_of_a_decay(place: ModuleType, rational: bool) -> None:
    """3, 1, 1/2, 1/4, ... for one state that halves."""
    model = in_kind(Realization([["1/2"]], [[1]], [[1]], [[3]], sampling_period=1), rational)
    found = place.markov_parameters(model, 4)
    assert found.shape == (4, 1, 1)
    assert_same(found.ravel(), [F(3), F(1), F(1, 2), F(1, 4)], rational)


@places
@quiet
def test_fibonacci_numbers_need_two_states(place: ModuleType, rational: bool) -> None:
    """0, 1, 1, 2, 3, 5, 8 come from z^2 - z - 1."""
    numbers = np.array([0, 1, 1, 2, 3, 5, 8]).reshape(7, 1, 1)
    if not rational:
        numbers = numbers.astype(float)
    found = place.from_markov_parameters(numbers, sampling_period=1)
    assert found.order == 2
    assert found.model.sampling_period == 1
    expected = numbers if not rational else [[[F(int(x))]] for x in numbers.ravel()]
    assert_same(place.markov_parameters(found.model, 7), expected, rational)


# --------------------------------------------------------------------------- empty shapes


@places
def test_a_static_gain_has_every_form(place: ModuleType, rational: bool) -> None:
    """Without states every form answers, and D comes through."""
    model = in_kind(static_gain(), rational)
    # Multiprecision returns the numbers that the doubles are.
    same = model.read("stored") if place is multiprecision else model
    assert (model.order, model.input_count, model.output_count) == (0, 3, 2)
    for side in ("input", "output"):
        form = place.staircase(model, side=side)
        assert (form.stairs, form.dimension) == ((), 0)
        assert form.transformation.shape == (0, 0)
        assert form.model == same
    reduction = place.minimal(model)
    assert reduction.order == 0
    assert reduction.model == same
    assert reduction.removed.count == 0
    form = place.kalman_parts(model)
    assert dict(form.dimensions) == dict.fromkeys(PARTS, 0)
    for part in PARTS:
        assert_same(form.polynomials[part], (F(1),), rational)
    transfer = place.transfer_matrix(model)
    assert_same(transfer.evaluate(7), matrix(static_gain().D, (2, 3)), rational)
    found = place.markov_parameters(model, 3)
    assert found.shape == (3, 2, 3)
    assert not found[1:].any()
    back = place.from_markov_parameters(found)
    assert back.order == 0
    assert_same(back.model.D, matrix(static_gain().D, (2, 3)), rational)


@places
def test_a_constant_fraction_has_a_companion_form_without_states(
    place: ModuleType, rational: bool
) -> None:
    """3/2 as a transfer function is a static gain."""
    for side in ("input", "output"):
        model = place.companion(in_kind(TransferMatrix([3], [2]), rational), side=side)
        assert model.order == 0
        assert_same(model.D, matrix([[F(3, 2)]], (1, 1)), rational)


@places
@pytest.mark.parametrize(
    ("B", "C", "part"),
    [
        ([[0], [0]], [[1, 0]], "uncontrollable, observable"),
        ([[0], [1]], [[0, 0]], "controllable, unobservable"),
        ([[0], [0]], [[0, 0]], "uncontrollable, unobservable"),
    ],
    ids=["nothing reached", "nothing seen", "neither"],
)
def test_a_model_without_minimal_part(
    place: ModuleType, rational: bool, B: list, C: list, part: str
) -> None:
    """Two states, all hidden: the minimal realization is D alone."""
    model = in_kind(Realization([[0, 1], [-2, -3]], B, C, [[9]]), rational)
    reduction = place.minimal(model)
    assert reduction.order == 0
    assert reduction.model.A.shape == (0, 0)
    assert reduction.model.B.shape == (0, 1)
    assert reduction.model.C.shape == (1, 0)
    assert_same(reduction.model.D, matrix([[9]], (1, 1)), rational)
    form = place.kalman_parts(model)
    assert {p: d for p, d in form.dimensions.items() if d} == {part: 2}
    assert_same(form.polynomials[part], (F(1), F(3), F(2)), rational)
    assert_same(place.transfer_matrix(model).evaluate(1), matrix([[9]], (1, 1)), rational)


@places
@pytest.mark.parametrize("inputs", [0, 1])
@pytest.mark.parametrize("outputs", [0, 1])
def test_no_inputs_or_no_outputs(
    place: ModuleType, rational: bool, inputs: int, outputs: int
) -> None:
    """With no inputs nothing is reached, with no outputs nothing is seen."""
    ones = np.ones((2, 2), dtype=int)
    source = Realization([[-1, 0], [0, -2]], ones[:, :inputs], ones[:outputs])
    model = in_kind(source, rational)
    assert place.staircase(model).dimension == 2 * inputs
    assert place.staircase(model, side="output").dimension == 2 * outputs
    assert place.minimal(model).order == 2 * inputs * outputs
    assert sum(place.kalman_parts(model).dimensions.values()) == 2
    assert place.transfer_matrix(model).evaluate(3).shape == (outputs, inputs)
    assert place.markov_parameters(model, 3).shape == (3, outputs, inputs)


# --------------------------------------------------------------------------- refusals

FORMS_OF_MODELS: list[tuple[str, Callable[[ModuleType, Any], Any]]] = [
    ("staircase", lambda place, m: place.staircase(m)),
    ("minimal", lambda place, m: place.minimal(m)),
    ("kalman_parts", lambda place, m: place.kalman_parts(m)),
    ("companion", lambda place, m: place.companion(m)),
    ("transfer_matrix", lambda place, m: place.transfer_matrix(m)),
    ("markov_parameters", lambda place, m: place.markov_parameters(m, 3)),
]
forms_of_models = pytest.mark.parametrize(
    "form", [f for _, f in FORMS_OF_MODELS], ids=[name for name, _ in FORMS_OF_MODELS]
)


@forms_of_models
def test_the_exact_face_refuses_floats(form: Callable[[ModuleType, Any], Any]) -> None:
    """A model of doubles is refused, and the message says which call makes it exact."""
    with pytest.raises(errors.InexactInputError, match="read") as caught:
        form(exact, two_tanks().to_float())
    assert isinstance(caught.value, TypeError)


def test_the_exact_face_refuses_float_fractions_and_parameters() -> None:
    """The same for transfer matrices and for Markov parameters."""
    doubles = lag_with_cancellation().to_float()
    for form in (exact.minimal, exact.companion, exact.cancel):
        with pytest.raises(errors.InexactInputError, match="read"):
            form(doubles)
    with pytest.raises(errors.InexactInputError):
        exact.from_markov_parameters(np.ones((3, 1, 1)))


@forms_of_models
def test_a_reading_makes_floats_acceptable(form: Callable[[ModuleType, Any], Any]) -> None:
    """What the message advises works."""
    form(exact, two_tanks().to_float().read("written"))


@pytest.mark.parametrize("place", [exact, floating, realize], ids=["exact", "floating", "top"])
@pytest.mark.parametrize("side", ["", "Input", "left", "inputs", None, 1])
def test_unknown_sides_are_refused(place: ModuleType, side: Any) -> None:
    """The message names the word found and the words wanted."""
    for form, source in (
        (place.staircase, two_tanks()),
        (place.companion, lag_with_cancellation()),
    ):
        with pytest.raises(errors.UnknownWordError, match="output") as caught:
            form(source, side=side)
        assert repr(side) in str(caught.value)
        assert isinstance(caught.value, ValueError)


@pytest.mark.parametrize("place", [exact, floating, realize], ids=["exact", "floating", "top"])
def test_companion_of_several_inputs_and_outputs_is_not_built(place: ModuleType) -> None:
    """Two inputs and two outputs: an error that says what is missing."""
    lag = [1, 1]
    fractions = TransferMatrix([[[1], [2]], [[3], [4]]], [[lag, lag], [lag, lag]])
    model = Realization([[-1]], [[1, 2]], [[1], [2]])
    for source in (fractions, model):
        with pytest.raises(errors.NotBuiltError, match=r"2 inputs.*2 outputs") as caught:
            place.companion(source)
        assert isinstance(caught.value, NotImplementedError)


@pytest.mark.parametrize("place", [exact, floating, realize], ids=["exact", "floating", "top"])
@pytest.mark.parametrize("form", ["companion", "minimal"])
def test_improper_fractions_have_no_state_model(place: ModuleType, form: str) -> None:
    """s^2 / (s + 1), kept on request, cannot be realized."""
    improper = TransferMatrix([1, 0, 0], [1, 1], improper=True)
    with pytest.raises(errors.ImproperError):
        getattr(place, form)(improper)


TOLERANT: list[tuple[str, Callable[..., Any]]] = [
    ("staircase", lambda **k: floating.staircase(two_tanks(), **k)),
    ("minimal", lambda **k: floating.minimal(two_tanks(), **k)),
    ("kalman_parts", lambda **k: floating.kalman_parts(two_tanks(), **k)),
    ("cancel", lambda **k: floating.cancel(lag_with_cancellation(), **k)),
    ("from_markov_parameters", lambda **k: floating.from_markov_parameters(
        np.ones((3, 1, 1)), sampling_period=1, **k)),
    ("examine", lambda **k: realize.examine(two_tanks(), **k)),
]  # fmt: skip


@pytest.mark.parametrize("call", [call for _, call in TOLERANT], ids=[name for name, _ in TOLERANT])
@pytest.mark.parametrize("tolerance", [-1e-9, math.nan, math.inf, "1e-9", True, 1j])
def test_tolerances_that_are_none_are_refused(call: Callable[..., Any], tolerance: Any) -> None:
    """Negative, not finite, text, bool and complex tolerances are refused at the door."""
    with pytest.raises(errors.ToleranceError, match="tolerance") as caught:
        call(tolerance=tolerance)
    assert isinstance(caught.value, ValueError)


@quiet
@pytest.mark.parametrize("call", [call for _, call in TOLERANT], ids=[name for name, _ in TOLERANT])
def test_zero_is_a_tolerance(call: Callable[..., Any]) -> None:
    """Zero is allowed: then only exact zeros are dropped."""
    call(tolerance=0)
    call(tolerance=0.0)


@pytest.mark.parametrize("place", [exact, floating, realize], ids=["exact", "floating", "top"])
@pytest.mark.parametrize("thing", [None, "a model", object(), 3 + 4j, {"A": [[1]]}])
def test_things_that_are_no_model_are_refused(place: ModuleType, thing: Any) -> None:
    """A designed error, which a caller can also catch as a builtin one."""
    for form in (place.staircase, place.minimal, place.kalman_parts):
        with pytest.raises(errors.RealizeError) as caught:
            form(thing)
        assert isinstance(caught.value, (TypeError, ValueError))


@pytest.mark.parametrize("place", [exact, floating, realize], ids=["exact", "floating", "top"])
@pytest.mark.parametrize("count", [-1, 1.5, "3", None, True])
def test_counts_that_are_none_are_refused(place: ModuleType, count: Any) -> None:
    """A count of Markov parameters is a whole number that is not negative."""
    with pytest.raises(errors.RealizeError) as caught:
        place.markov_parameters(two_tanks(), count)
    assert isinstance(caught.value, (TypeError, ValueError))


@pytest.mark.parametrize("place", [exact, floating, realize], ids=["exact", "floating", "top"])
@pytest.mark.parametrize("shape", [(), (2, 2), (0,), (0, 1, 1), (1, 1, 1, 1)])
def test_markov_parameters_of_a_wrong_shape_are_refused(
    place: ModuleType, shape: tuple[int, ...]
) -> None:
    """Three axes, or one for a single input and output, and at least one item."""
    with pytest.raises(errors.ShapeError):
        place.from_markov_parameters(np.ones(shape, dtype=int))


@pytest.mark.parametrize("bad", [math.nan, math.inf])
def test_markov_parameters_that_are_no_numbers_are_refused(bad: float) -> None:
    """NaN and infinity are refused with their place."""
    numbers = np.ones((3, 1, 1))
    numbers[1, 0, 0] = bad
    for place in (floating, realize):
        with pytest.raises(errors.EntryError):
            place.from_markov_parameters(numbers)


def test_sampling_periods_of_realized_parameters_are_checked() -> None:
    """Zero and negative periods are refused."""
    numbers = np.ones((3, 1, 1), dtype=int)
    for period in (0, -1, "-1/2"):
        for place in (exact, floating, realize):
            with pytest.raises(errors.SamplingPeriodError):
                place.from_markov_parameters(numbers, sampling_period=period)


# --------------------------------------------------------------------------- side effects


@quiet
@places
def test_inputs_are_never_changed(place: ModuleType, rational: bool) -> None:
    """Arrays handed over keep every bit, and stay writeable; so does the model made from them."""
    A = np.array([[-1, 1, 0], [0, -2, 0], [0, 0, 3]])
    B, C, D = np.array([[1], [1], [0]]), np.array([[1, 0, 1]]), np.array([[2]])
    arrays = [A, B, C, D] if rational else [x.astype(float) for x in (A, B, C, D)]
    copies = [x.copy() for x in arrays]
    model = Realization(*arrays)
    before = pickle.dumps(model)
    place.staircase(model)
    place.staircase(model, side="output")
    place.minimal(model)
    place.kalman_parts(model)
    place.companion(model)
    place.cancel(place.transfer_matrix(model))
    parameters = place.markov_parameters(model, 7)
    held = np.array(parameters)
    place.from_markov_parameters(held)
    assert (held == parameters).all()
    realize.examine(model)
    for array, copy in zip(arrays, copies, strict=True):
        assert array.dtype == copy.dtype
        assert (array == copy).all()
        assert array.flags.writeable
    assert pickle.dumps(model) == before


@quiet
@places
def test_results_cannot_be_changed(place: ModuleType, rational: bool) -> None:
    """Records are frozen, and the arrays in them are read-only."""
    model = in_kind(four_parts(), rational)
    reduction = place.minimal(model)
    for result in (place.staircase(model), place.kalman_parts(model), reduction):
        with pytest.raises((AttributeError, TypeError)):
            result.model = None
    for array in (
        place.staircase(model).transformation,
        place.kalman_parts(model).transformation,
        reduction.state_map,
        reduction.model.A,
    ):
        with pytest.raises(ValueError, match="read-only"):
            array[0, 0] = 0


@quiet
@places
def test_results_can_be_pickled(place: ModuleType, rational: bool) -> None:
    """A pickled result is the same result, deferred fields included."""
    model = in_kind(four_parts(), rational)
    back = pickle.loads(pickle.dumps(place.staircase(model)))
    assert back.stairs == (1, 1)
    assert back.model == place.staircase(model).model
    back = pickle.loads(pickle.dumps(place.kalman_parts(model)))
    assert dict(back.dimensions) == dict.fromkeys(PARTS, 1)
    assert back.polynomials == place.kalman_parts(model).polynomials
    back = pickle.loads(pickle.dumps(place.minimal(model)))
    assert back.order == 1
    assert back.removed.count == 3
    transfer = place.transfer_matrix(model)
    back = pickle.loads(pickle.dumps(place.cancel(transfer)))
    assert back.common == place.cancel(transfer).common


@quiet
@places
def test_short_texts(place: ModuleType, rational: bool) -> None:
    """repr of every result fits two lines and holds no matrix."""
    model = in_kind(four_parts(), rational)
    for result in (
        place.staircase(model),
        place.kalman_parts(model),
        place.minimal(model),
        place.cancel(place.transfer_matrix(model)),
        model,
        place.transfer_matrix(model),
    ):
        assert len(repr(result)) <= 200
        assert "array" not in repr(result)


# --------------------------------------------------------------------------- warnings


@places
@pytest.mark.parametrize(
    ("hidden", "period", "warns"),
    [
        (-1, None, False), (1, None, True), (0, None, True),
        ("1/2", 1, False), (-2, 1, True), (-1, 1, True), (0, 1, False),
    ],
)  # fmt: skip
def test_minimal_warns_of_hidden_modes_that_are_not_stable(
    place: ModuleType, rational: bool, hidden: Any, period: int | None, warns: bool
) -> None:
    """Exactly when the mode removed lies on or beyond the stability boundary."""
    source = Realization([[hidden, 0], [0, "-1/4"]], [[0], [1]], [[1, 1]], sampling_period=period)
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always")
        place.minimal(in_kind(source, rational))
    assert [w.category for w in caught] == [realize.HiddenInstabilityWarning] * warns
    for warning in caught:
        assert warning.filename == __file__, "the warning should point at the caller"


@places
def test_no_warning_for_visible_modes(place: ModuleType, rational: bool) -> None:
    """An unstable mode that is kept is no reason to warn (warnings are errors here)."""
    source = Realization([[1, 0], [0, -1]], [[1], [0]], [[1, 0]])
    assert place.minimal(in_kind(source, rational)).order == 1


@pytest.mark.parametrize("scale", [1e-140, 1e70, 1e140])
def test_common_factors_in_extreme_units_of_time(scale: float) -> None:
    """Neither the powers of a pole nor the squares of coefficients leave the range of doubles."""
    denominator = [1.0, 3.0 * scale, 2.0 * scale * scale]
    found = floating.cancel(TransferMatrix([1e-30, 1e-30 * scale], denominator))
    assert np.roots(found.common).tolist() == pytest.approx([-scale])
    apart = floating.cancel(TransferMatrix([1e-30, 5e-30 * scale], denominator))
    assert tuple(apart.common) == (1.0,)
