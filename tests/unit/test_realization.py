"""State-space models: shapes, kinds, readings, rounding, identity."""

from __future__ import annotations

import copy
import pickle
from decimal import Decimal
from fractions import Fraction
from typing import Any

import numpy as np
import pytest
import sympy
from hypothesis import given
from hypothesis import strategies as st

from realize.entries import EXACT_READINGS, Kind
from realize.errors import EntryError, NotBuiltError, UnknownWordError
from realize.model.realization import Realization

F = Fraction


def mixed() -> Realization:
    """Return a model that holds floats and rationals, and names for everything."""
    return Realization(
        [[0, 0.1], ["-1/3", -2]],
        [0, 1],
        [1, 0.3333333333333333],
        sampling_period=0.1,
        state_names=["angle", "rate"],
        input_names=["torque"],
        output_names=["sensor"],
    )


# Shapes


def test_flat_input_is_a_column_and_flat_output_a_row() -> None:
    """A flat B is one column, a flat C one row, and D is zero unless given."""
    model = Realization([[0, 1], [-2, -3]], [4, 5], [6, 7])
    assert model.B.tolist() == [[4], [5]]
    assert model.C.tolist() == [[6, 7]]
    assert model.D.tolist() == [[0]]
    assert (model.order, model.input_count, model.output_count) == (2, 1, 1)


def test_single_numbers_serve_for_one_state() -> None:
    """For one state, input and output, numbers stand for matrices of one entry."""
    model = Realization(-1, 2, 3, 4)
    assert [matrix.tolist() for matrix in model.matrices()] == [[[-1]], [[2]], [[3]], [[4]]]


@pytest.mark.parametrize(
    ("D", "shape"), [([[1, 2], [3, 4]], (2, 2)), ([[1, 2]], (1, 2)), (5, (1, 1)), ([5.0], (1, 1))]
)
def test_static_gain(D: Any, shape: tuple[int, int]) -> None:
    """A model with no states takes its inputs and outputs from D."""
    model = Realization([], [], [], D)
    assert model.A.shape == (0, 0)
    assert model.B.shape == (0, shape[1])
    assert model.C.shape == (shape[0], 0)
    assert model.D.shape == shape
    assert model.order == 0


@pytest.mark.parametrize(("m", "p"), [(0, 0), (2, 0), (0, 3), (2, 3)])
def test_empty_arrays_keep_their_shapes(m: int, p: int) -> None:
    """Arrays of no states tell inputs and outputs by their shapes."""
    model = Realization(np.zeros((0, 0)), np.zeros((0, m)), np.zeros((p, 0)))
    assert [matrix.shape for matrix in model.matrices()] == [(0, 0), (0, m), (p, 0), (p, m)]
    assert model.kind == "floating"


@pytest.mark.parametrize(("m", "p"), [(0, 1), (1, 0), (0, 0)])
def test_states_without_inputs_or_outputs(m: int, p: int) -> None:
    """A model may have states and no inputs, or no outputs."""
    model = Realization(np.eye(2), np.zeros((2, m)), np.zeros((p, 2)))
    assert (model.order, model.input_count, model.output_count) == (2, m, p)
    assert model.D.shape == (p, m)


def test_rows_without_entries() -> None:
    """Lists of empty rows are a matrix without columns."""
    model = Realization([[1, 0], [0, 1]], [[], []], [[1, 0]])
    assert model.B.shape == (2, 0)
    assert model.D.shape == (1, 0)


def test_flat_feedthrough() -> None:
    """A flat D is a row for one output, a column for one input."""
    assert Realization([[1]], [[1, 2]], [1], [3, 4]).D.shape == (1, 2)
    assert Realization([[1]], [1], [[1], [2]], [3, 4]).D.shape == (2, 1)


# Kinds


def test_integers_and_strings_are_exact() -> None:
    """Rational entries of every kind make a rational model of Fractions."""
    model = Realization(
        [[1, "1/3"], [Decimal("0.5"), sympy.Rational(1, 7)]],
        np.array([1, 2]),
        np.array([["1e-3", F(2)]], dtype=object),
    )
    assert model.kind is Kind.RATIONAL
    assert model.A.tolist() == [[1, F(1, 3)], [F(1, 2), F(1, 7)]]
    assert model.C.tolist() == [[F(1, 1000), 2]]
    for matrix in model.matrices():
        assert {type(entry) for entry in matrix.flat} == {Fraction}


def test_floats_of_any_precision_make_a_floating_model() -> None:
    """Doubles are kept, shorter floats widened, and the arrays are doubles."""
    model = Realization(
        np.array([[0.5]], dtype=np.float32),
        np.array([0.1], dtype=np.float16),
        np.array([1.5], dtype=">f8"),
    )
    assert model.kind is Kind.FLOATING
    assert {matrix.dtype for matrix in model.matrices()} == {np.dtype(float)}
    assert model.B[0, 0] == float(np.float16(0.1))
    assert model.C[0, 0] == 1.5


def test_one_float_makes_a_floating_model() -> None:
    """A model with one float has arrays of doubles, rationals correctly rounded."""
    model = mixed()
    assert model.kind == "floating"
    assert model.A.dtype == float
    assert model.A[1, 0] == -1 / 3


def test_matrices_of_sympy() -> None:
    """Matrices of sympy are read entry by entry, empty ones by their shape."""
    A = sympy.Matrix([[0, 1], [sympy.Rational(-1, 2), 3]])
    model = Realization(A, sympy.Matrix([0, 1]), sympy.Matrix([[1, 0]]))
    assert model.A.tolist() == [[0, 1], [F(-1, 2), 3]]
    static = Realization(sympy.zeros(0, 0), sympy.zeros(0, 2), sympy.zeros(1, 0))
    assert static.D.tolist() == [[0, 0]]


def test_rows_may_be_arrays() -> None:
    """A list of arrays is a list of rows."""
    model = Realization([np.array([1.0, 2.0]), np.array([3.0, 4.0])], [1.0, 0.0], [0.0, 1.0])
    assert model.A.tolist() == [[1.0, 2.0], [3.0, 4.0]]


def test_large_integers_among_floats_are_not_rounded_away() -> None:
    """An integer that is no double keeps its value when the model is read."""
    model = Realization([[2**60 + 1, 0.5], [0, 0]], [1, 0], [1, 0])
    assert model.A[0, 0] == 2.0**60
    assert model.read("stored").A[0, 0] == 2**60 + 1


# Readings


@pytest.mark.parametrize(
    ("reading", "tenth", "third"),
    [
        ("stored", F(0.1), F(0.3333333333333333)),
        ("written", F(1, 10), F(3333333333333333, 10**16)),
        ("intended", F(1, 10), F(1, 3)),
    ],
)
def test_a_reading_touches_floats_alone(reading: str, tenth: Fraction, third: Fraction) -> None:
    """Floats and the float sampling period are read; rationals and names stay."""
    model = mixed().read(reading)
    assert model.kind is Kind.RATIONAL
    assert model.A.tolist() == [[0, tenth], [F(-1, 3), -2]]
    assert model.C.tolist() == [[1, third]]
    assert model.sampling_period == tenth
    assert model.state_names == ("angle", "rate")
    assert model.input_names == ("torque",)
    assert model.output_names == ("sensor",)


@pytest.mark.parametrize("reading", ["stored", "written", "intended", "given"])
def test_reading_a_rational_model_gives_it_back(reading: str) -> None:
    """There is nothing to read in a rational model."""
    model = Realization([["1/3"]], [1], [1], sampling_period="1/10")
    assert model.read(reading) is model


def test_float_period_of_a_rational_model_is_read() -> None:
    """The matrices decide the kind; a float sampling period is read beside them."""
    model = Realization([["1/3"]], [1], [1], sampling_period=0.1)
    assert model.kind is Kind.RATIONAL
    assert model.read("given") is model
    assert model.read("written").sampling_period == F(1, 10)


def test_given_is_no_reading_of_floats() -> None:
    """A model with floats has no reading "given"; the error lists the ones it has."""
    with pytest.raises(UnknownWordError) as caught:
        mixed().read("given")
    assert caught.value.allowed == tuple(map(str, EXACT_READINGS))


@given(st.lists(st.floats(allow_nan=False, allow_infinity=False), min_size=4, max_size=4))
def test_reading_then_rounding_is_the_model_itself(entries: list[float]) -> None:
    """Every reading of doubles rounds back to the same doubles."""
    model = Realization([entries[:2], entries[2:]], entries[:2], entries[2:])
    for reading in EXACT_READINGS:
        assert model.read(reading).to_float() == model


# Rounding, dual, symbols


def test_to_float_rounds_each_entry_once() -> None:
    """Each entry is the nearest double; the sampling period is kept as given."""
    model = Realization([[F(2**53 + 1)]], [F(1, 3)], [1], sampling_period="1/10").to_float()
    assert model.kind is Kind.FLOATING
    assert model.A[0, 0] == 2.0**53
    assert model.B[0, 0] == 1 / 3
    assert model.sampling_period == F(1, 10)
    assert model.to_float() is model


def test_to_float_forgets_the_rationals() -> None:
    """After rounding there are only doubles left to read."""
    model = mixed().to_float()
    assert model != mixed()
    assert model.read("written").A[1, 0] == F(-3333333333333333, 10**16)


def test_to_float_of_what_is_too_large() -> None:
    """An entry beyond the doubles is refused with its place."""
    model = Realization([[1, 0], [0, 10**400]], [1, 1], [1, 1])
    with pytest.raises(EntryError, match="A, row 2, column 2"):
        model.to_float()


def test_dual_transposes_and_swaps_names() -> None:
    """The dual has the transposed matrices; its dual is the model."""
    model = Realization(
        [[1, 2], [3, 4]],
        [[1, 2, 3], [4, 5, 6]],
        [[7, 8]],
        [[9, 10, 11]],
        state_names=["a", "b"],
        input_names=["p", "q", "r"],
    )
    dual = model.dual()
    assert dual.A.tolist() == [[1, 3], [2, 4]]
    assert dual.B.tolist() == [[7], [8]]
    assert dual.C.tolist() == [[1, 4], [2, 5], [3, 6]]
    assert dual.D.tolist() == [[9], [10], [11]]
    assert dual.output_names == ("p", "q", "r")
    assert dual.input_names == ("u1",)
    assert dual.state_names == ("a", "b")
    assert dual.dual() == model
    assert mixed().dual().dual() == mixed()


def test_reading_commutes_with_the_dual() -> None:
    """The dual of a mixed model still knows which entries were rational."""
    for reading in EXACT_READINGS:
        assert mixed().dual().read(reading) == mixed().read(reading).dual()


def test_symbols_are_not_built() -> None:
    """Putting numbers in for symbols says that it is not built."""
    with pytest.raises(NotBuiltError) as caught:
        mixed().at({"k": 1})
    assert caught.value.feature == "symbols"


# Identity


def test_names_are_given_or_numbered() -> None:
    """Names default to letters with numbers, and spelling the default out changes nothing."""
    model = Realization(np.eye(2), np.eye(2), np.eye(2))
    assert model.state_names == ("x1", "x2")
    assert model.input_names == ("u1", "u2")
    assert model.output_names == ("y1", "y2")
    spelled = Realization(
        np.eye(2), np.eye(2), np.eye(2), state_names=["x1", "x2"], input_names=("u1", "u2")
    )
    assert spelled == model
    assert spelled.digest == model.digest
    assert hash(spelled) == hash(model)


def variations() -> list[Realization]:
    """Models that differ from one another in one thing each."""
    return [
        Realization([[1]], [1], [1]),
        Realization([[1.0]], [1], [1]),
        Realization([[1.0]], [1.0], [1.0]),
        Realization([[1]], [1], [1], 1),
        Realization([[1]], [1], [2]),
        Realization([[1]], [1], [1], sampling_period=1),
        Realization([[1]], [1], [1], sampling_period=1.0),
        Realization([[1]], [1], [1], sampling_period="1/2"),
        Realization([[1]], [1], [1], state_names=["a"]),
        Realization([[1]], [1], [1], input_names=["a"]),
        Realization([[1]], [1], [1], output_names=["a"]),
        Realization([[1]], [[1, 1]], [1]),
        Realization([], [], [], [[1]]),
        Realization([], [], [], [[1.0]]),
        Realization([], [], []),
        Realization([], [], []).to_float(),
        Realization([], np.zeros((0, 2)), []),
        Realization([], [], np.zeros((2, 0))),
    ]


def test_models_differ_in_anything_that_counts() -> None:
    """Kind of entry, value, size, sampling period and names each make another model."""
    models = variations()
    for i, first in enumerate(models):
        for j, second in enumerate(variations()):
            assert (first == second) is (i == j)
            assert (first.digest == second.digest) is (i == j)
            if i == j:
                assert hash(first) == hash(second)


def test_the_sign_of_zero_does_not_count() -> None:
    """Models that differ in the sign of a zero are equal in every sense."""
    plus, minus = Realization([[0.0]], [1.0], [0.0]), Realization([[-0.0]], [1.0], [-0.0])
    assert plus == minus
    assert hash(plus) == hash(minus)
    assert plus.digest == minus.digest


def test_digest_is_fixed() -> None:
    """The digest is SHA-256 of the canonical document, written out here by hand."""
    import hashlib

    document = (
        '{"format":"realize-model","realization":{"A":[["0",0.1],["-1/3","-2"]],'
        '"B":[["0"],["1"]],"C":[["1",0.3333333333333333]],"D":[[0.0]]},"sampling_period":null,'
        '"version":1}'
    )
    model = Realization([[0, 0.1], ["-1/3", -2]], [0, 1], [1, 0.3333333333333333], 0.0)
    assert model.digest == hashlib.sha256(document.encode()).hexdigest()


def test_a_model_is_no_other_thing() -> None:
    """Comparing with something else is unequal, not an error."""
    assert mixed() != "a model"
    assert mixed() != mixed().matrices()


@pytest.mark.parametrize("protocol", range(pickle.HIGHEST_PROTOCOL + 1))
def test_pickles(protocol: int) -> None:
    """Models survive pickling with all they hold, read-only arrays included."""
    for model in [*variations(), mixed(), mixed().dual()]:
        again = pickle.loads(pickle.dumps(model, protocol))
        assert again == model
        assert again.digest == model.digest
        assert not any(matrix.flags.writeable for matrix in again.matrices())


def test_copies_are_the_model() -> None:
    """An immutable model is its own copy."""
    model = mixed()
    assert copy.copy(model) is model
    assert copy.deepcopy(model) is model


def test_nothing_can_be_changed() -> None:
    """Neither attributes nor entries can be set."""
    model = mixed()
    for name in ("A", "order", "sampling_period", "kind", "state_names", "colour"):
        with pytest.raises(AttributeError):
            setattr(model, name, 1)
    for matrix in (*model.matrices(), *model.read("stored").matrices()):
        with pytest.raises(ValueError, match="read-only"):
            matrix[0, 0] = 1


def test_what_was_given_stays_apart() -> None:
    """Changing an array afterwards does not change the model, nor is the array frozen."""
    for dtype in (float, int, object):
        A = np.array([[1, 2], [3, 4]], dtype=dtype)
        model = Realization(A, [1, 0], [0, 1])
        A[0, 0] = 9
        assert model.A[0, 0] == 1


def test_trusted_arrays_make_the_same_model() -> None:
    """The unchecked constructor makes the model that the checked one makes."""
    for model in (Realization([[0.5]], [1.0], [2.0]), Realization([["1/2"]], [1], [2])):
        matrices = [matrix.copy() for matrix in model.matrices()]
        trusted = Realization._trusted(*matrices, kind=model.kind)
        assert trusted == model
        assert trusted.state_names == ("x1",)
        assert not any(matrix.flags.writeable for matrix in matrices)


# Looks


def test_repr_is_one_line_of_sizes() -> None:
    """The short text names sizes, time and kind, not entries."""
    assert repr(mixed()) == (
        "<Realization: 2 states, 1 input, 1 output, sampling period 0.1, floating>"
    )
    assert repr(Realization([], [], [], [[1, 2]])) == (
        "<Realization: no states, 2 inputs, 1 output, continuous time, rational>"
    )


def test_notebook_views() -> None:
    """Notebooks show entries as given for small models, and sizes alone for large ones."""
    small = mixed()
    assert "<td>-1/3</td>" in small._repr_html_()
    latex = small._repr_latex_()
    assert latex is not None
    assert r"-\frac{1}{3}" in latex
    large = Realization(np.eye(30), np.ones(30), np.ones(30))
    assert "<td>" not in large._repr_html_()
    assert large._repr_latex_() is None
    assert Realization([], [], [])._repr_latex_() is not None
