"""Transfer matrices: nesting, kinds, evaluation, readings, identity."""

from __future__ import annotations

import copy
import pickle
from fractions import Fraction
from typing import Any

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from realize.entries import EXACT_READINGS, Kind
from realize.errors import EntryError, UnknownWordError, UnsupportedEntryError
from realize.model.transfer import TransferMatrix

F = Fraction


def mixed() -> TransferMatrix:
    """Two inputs, one output, floats and rationals."""
    return TransferMatrix(
        [[[0.1], [1, 0.3333333333333333]]],
        [[["1/3", 1], [1.0, 2]]],
        sampling_period=0.1,
        input_names=["a", "b"],
        output_names=["c"],
    )


# Nesting


def test_two_flat_lists() -> None:
    """Flat lists are one input and one output, coefficients in descending powers."""
    transfer = TransferMatrix([1, 2], (3, 4, 5))
    assert transfer.numerators == (((1, 2),),)
    assert transfer.denominators == (((3, 4, 5),),)
    assert (transfer.input_count, transfer.output_count) == (1, 1)


def test_nested_lists_are_outputs_of_inputs() -> None:
    """The outer list runs over outputs, the next over inputs."""
    transfer = TransferMatrix([[[1], [2], [3]], [[4], [5], [6]]], [[[1, 7]] * 3, [[1, 8]] * 3])
    assert (transfer.input_count, transfer.output_count) == (3, 2)
    assert transfer.numerators[1][2] == (6,)
    assert transfer.denominators[1][0] == (1, 8)


def test_one_denominator_for_all() -> None:
    """A flat denominator serves every entry of a nested numerator."""
    transfer = TransferMatrix([[[1], [2]]], [1, 3])
    assert transfer.denominators == (((1, 3), (1, 3)),)


@pytest.mark.parametrize("convert", [np.array, lambda rows: [np.array(row) for row in rows]])
def test_arrays_of_coefficients(convert: Any) -> None:
    """Arrays serve at any level of the nesting, and their floats stay floats."""
    transfer = TransferMatrix(convert([[[1.0, 2.0], [3.0, 4.0]]]), np.array([1, 2, 3]))
    assert transfer.numerators == (((1.0, 2.0), (3.0, 4.0)),)
    assert transfer.kind is Kind.FLOATING


def test_a_matrix_class_does_not_nest_for_ever() -> None:
    """A numpy.matrix, whose rows are matrices again, is read as the table it is."""
    with pytest.warns(PendingDeprecationWarning):
        rows = np.matrix([[1, 2]])
    with pytest.raises(ValueError, match="numerators"):
        TransferMatrix(rows, [1, 1])


def test_leading_zeros_are_dropped_and_nothing_else() -> None:
    """Leading zeros go, the last coefficient stays, common factors stay."""
    transfer = TransferMatrix([0, 0.0, 2, 2], [0, 1, 2, 1, 0])
    assert transfer.numerators == (((2, 2),),)
    assert transfer.denominators == (((1, 2, 1, 0),),)
    assert TransferMatrix([0, 0], [5]).numerators == (((0,),),)


def test_no_inputs_or_no_outputs() -> None:
    """Rows without entries have no inputs; without rows the names count the inputs."""
    assert TransferMatrix([[], []], [[], []]).output_count == 2
    assert TransferMatrix([[], []], [[], []]).input_count == 0
    assert TransferMatrix([], []).output_count == 0
    assert TransferMatrix([], [], input_names=["a", "b"]).input_count == 2


# Kinds and readings


def test_kinds() -> None:
    """Rational coefficients make Fractions; one float makes all of them floats."""
    rational = TransferMatrix([1, "1/3"], [1, 2])
    assert rational.kind is Kind.RATIONAL
    assert {type(c) for c in (*rational.numerators[0][0], *rational.denominators[0][0])} == {F}
    floating = mixed()
    assert floating.kind == "floating"
    assert {type(c) for c in floating.denominators[0][0]} == {float}
    assert floating.denominators[0][0][0] == 1 / 3


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
    transfer = mixed().read(reading)
    assert transfer.kind is Kind.RATIONAL
    assert transfer.numerators == (((tenth,), (1, third)),)
    assert transfer.denominators == (((F(1, 3), 1), (1, 2)),)
    assert transfer.sampling_period == tenth
    assert transfer.input_names == ("a", "b")


def test_reading_a_rational_one_gives_it_back() -> None:
    """There is nothing to read in a rational transfer matrix."""
    transfer = TransferMatrix([1], [1, 2])
    for reading in (*EXACT_READINGS, "given"):
        assert transfer.read(reading) is transfer


def test_unknown_readings() -> None:
    """Unknown words, and "given" for floats, are refused."""
    for transfer, word in ((mixed(), "given"), (mixed(), "exact"), (mixed().read("stored"), "x")):
        with pytest.raises(UnknownWordError):
            transfer.read(word)


def test_to_float_rounds_each_coefficient() -> None:
    """Each coefficient is the nearest double, and only doubles are left to read."""
    transfer = TransferMatrix([F(2**53 + 1)], ["1/3", 1]).to_float()
    assert transfer.numerators == (((2.0**53,),),)
    assert transfer.denominators == (((1 / 3, 1.0),),)
    assert transfer.to_float() is transfer
    assert mixed().to_float().read("stored").denominators[0][0][0] == F(1 / 3)


def test_rounding_keeps_the_degree_of_a_denominator() -> None:
    """A leading coefficient of a denominator that rounds to zero is refused, not dropped."""
    tiny = "1e-400"
    with pytest.raises(EntryError, match="denominator of output 1, input 1"):
        TransferMatrix([1], [tiny, 1]).to_float()
    with pytest.raises(EntryError, match="leading coefficient"):
        TransferMatrix([1], [tiny, 1.0])
    assert TransferMatrix([tiny, 1.0], [1, 1]).numerators == (((1.0,),),)


def test_dual_transposes() -> None:
    """The dual is the transpose with names changed over; its dual is the original."""
    dual = mixed().dual()
    assert (dual.input_count, dual.output_count) == (1, 2)
    assert dual.numerators == (((0.1,),), ((1.0, 0.3333333333333333),))
    assert dual.input_names == ("c",)
    assert dual.output_names == ("a", "b")
    assert dual.dual() == mixed()
    assert dual.read("written") == mixed().read("written").dual()
    for empty in (TransferMatrix([[], []], [[], []]), TransferMatrix([], [], input_names=["a"])):
        assert empty.dual().dual() == empty
        assert (empty.dual().input_count, empty.dual().output_count) == (
            empty.output_count,
            empty.input_count,
        )


# Evaluation


def test_exact_value_at_a_rational_point() -> None:
    """A rational transfer matrix at a rational point gives Fractions, worked out by hand."""
    transfer = TransferMatrix([[[1, 1], [2]], [[0], [1, 0]]], [[[1, 3, 2], [1, 2]], [[1], [3, 1]]])
    value = transfer.evaluate(F(1, 2))
    assert value.shape == (2, 2)
    assert value.tolist() == [[F(2, 5), F(4, 5)], [F(0), F(1, 5)]]
    assert transfer.evaluate("1/2").tolist() == value.tolist()
    assert transfer.evaluate(0)[0, 0] == F(1, 2)


def test_values_in_floats() -> None:
    """Floating transfer matrices, and floating points, give doubles; complex points complex."""
    transfer = TransferMatrix([1.0], [1.0, 2.0])
    assert transfer.evaluate(2).dtype == np.float64
    assert transfer.evaluate(2)[0, 0] == 0.25
    value = transfer.evaluate(2j)
    assert value.dtype == np.complex128
    assert value[0, 0] == 0.25 - 0.25j
    assert TransferMatrix([1], [1, 2]).evaluate(2.0).dtype == np.float64
    assert TransferMatrix([1], [1, 0]).evaluate(np.complex64(2j))[0, 0] == -0.5j


def test_values_do_not_overflow_on_the_way() -> None:
    """Powers beyond the range of doubles do not spoil a value inside it."""
    transfer = TransferMatrix([1.0, 0.0, 0.0], [2.0, 0.0, 1.0])
    assert transfer.evaluate(1e300)[0, 0] == 0.5
    assert transfer.evaluate(1e200j)[0, 0] == 0.5


coefficients = st.lists(st.integers(-9, 9), min_size=1, max_size=5)


@given(coefficients, coefficients, st.fractions(-5, 5, max_denominator=20))
def test_value_is_the_quotient_of_two_sums(
    above: list[int], below: list[int], point: Fraction
) -> None:
    """A value is the sum of coefficients times powers above, over the same below."""

    def total(polynomial: list[int]) -> Fraction:
        top = len(polynomial) - 1
        return sum((c * point ** (top - k) for k, c in enumerate(polynomial)), F(0))

    assume(total(below) != 0)
    transfer = TransferMatrix(above, below, improper=True)
    assert transfer.evaluate(point)[0, 0] == total(above) / total(below)


@given(coefficients, coefficients, st.floats(-5, 5), st.floats(-5, 5))
def test_complex_values_are_correctly_rounded(
    above: list[int], below: list[int], x: float, y: float
) -> None:
    """At a complex point each part of the value agrees with 60-digit arithmetic."""
    import mpmath

    with mpmath.workdps(60):
        z = mpmath.mpc(x, y)
        bottom = mpmath.polyval(below, z)
        assume(abs(bottom) > 1e-20)
        expected = mpmath.polyval(above, z) / bottom
        value = TransferMatrix(above, below, improper=True).evaluate(complex(x, y))[0, 0]
        size = abs(expected)
        assert abs(value.real - expected.real) <= 2.0**-53 * size + 1e-300
        assert abs(value.imag - expected.imag) <= 2.0**-53 * size + 1e-300


@pytest.mark.parametrize("point", [-1, F(-1), "-1", -1.0, -1 + 0j])
def test_a_pole_has_no_value(point: object) -> None:
    """At a pole there is an error that names the entry, common factor or not."""
    transfer = TransferMatrix([[[1], [1, 1]]], [[[1, 2], [1, 3, 2]]])
    with pytest.raises(EntryError, match="output 1, input 2") as caught:
        transfer.evaluate(point)
    assert caught.value.found == repr(point)


@pytest.mark.parametrize("point", [float("nan"), complex("inf"), complex(0, float("nan"))])
def test_points_that_are_not_finite(point: object) -> None:
    """There is no value at a point that is not finite."""
    with pytest.raises(EntryError, match="finite"):
        TransferMatrix([1], [1, 1]).evaluate(point)


def test_points_of_other_kinds() -> None:
    """A point that is no number is refused."""
    for point in (None, True, [1]):
        with pytest.raises(UnsupportedEntryError):
            TransferMatrix([1], [1, 1]).evaluate(point)


def test_values_too_large_for_a_double() -> None:
    """A value beyond the doubles is an error, not an infinity."""
    with pytest.raises(EntryError, match="too large"):
        TransferMatrix([1.0], [1.0, 0.0, 0.0]).evaluate(1e-200)


# Identity


def variations() -> list[TransferMatrix]:
    """Transfer matrices that differ from one another in one thing each."""
    return [
        TransferMatrix([1], [1, 1]),
        TransferMatrix([1.0], [1, 1]),
        TransferMatrix([1.0], [1.0, 1.0]),
        TransferMatrix([1], [1.0, 1.0]),
        TransferMatrix([2], [1, 1]),
        TransferMatrix([2], [2, 2]),
        TransferMatrix([1], [1, 1], sampling_period=1),
        TransferMatrix([1], [1, 1], sampling_period=1.0),
        TransferMatrix([1], [1, 1], input_names=["a"]),
        TransferMatrix([1], [1, 1], output_names=["a"]),
        TransferMatrix([[[1], [1]]], [1, 1]),
        TransferMatrix([[[1]], [[1]]], [1, 1]),
        TransferMatrix([1, 0, 0], [1, 1], improper=True),
        TransferMatrix([], []),
        TransferMatrix([], []).to_float(),
        TransferMatrix([], [], input_names=["u1"]),
        TransferMatrix([[]], [[]]),
    ]


def test_transfer_matrices_differ_in_anything_that_counts() -> None:
    """Kind of coefficient, value, size, sampling period and names each make another one."""
    for i, first in enumerate(variations()):
        for j, second in enumerate(variations()):
            assert (first == second) is (i == j)
            assert (first.digest == second.digest) is (i == j)
            if i == j:
                assert hash(first) == hash(second)


def test_pickles_and_copies() -> None:
    """Transfer matrices survive pickling with all they hold, and are their own copies."""
    for transfer in [*variations(), mixed(), mixed().dual()]:
        assert pickle.loads(pickle.dumps(transfer)) == transfer
        assert pickle.loads(pickle.dumps(transfer)).digest == transfer.digest
        assert copy.deepcopy(transfer) is transfer


def test_nothing_can_be_changed() -> None:
    """No attribute can be set."""
    for name in ("numerators", "kind", "input_count", "colour"):
        with pytest.raises(AttributeError):
            setattr(mixed(), name, 1)


def test_trusted_tables_make_the_same_transfer_matrix() -> None:
    """The unchecked constructor makes what the checked one makes."""
    transfer = TransferMatrix([[[1], [2, 3]]], [[[1, 4], [1, 5]]])
    assert transfer == TransferMatrix._trusted(
        transfer.numerators, transfer.denominators, kind=transfer.kind
    )


def test_is_proper() -> None:
    """A transfer matrix is proper when no numerator outranks its denominator."""
    assert TransferMatrix([1, 0], [1, 1]).is_proper
    assert not TransferMatrix([1, 0, 0], [1, 1], improper=True).is_proper


# Looks


def test_repr_is_one_line_of_sizes() -> None:
    """The short text names sizes, time and kind, not coefficients."""
    assert repr(mixed()) == ("<TransferMatrix: 2 inputs, 1 output, sampling period 0.1, floating>")


def test_notebook_views() -> None:
    """Notebooks show small fractions as given, and sizes alone for large ones."""
    latex = TransferMatrix([1, -1, 0], [1, "-1/2", -3])._repr_latex_()
    assert latex == r"$\begin{bmatrix}\frac{s^{2} - s}{s^{2} - 1/2 s - 3}\end{bmatrix}$"
    assert TransferMatrix([1], [1, 2], sampling_period=1)._repr_latex_() == (
        r"$\begin{bmatrix}\frac{1}{z + 2}\end{bmatrix}$"
    )
    large = TransferMatrix([1], [1] * 100)
    assert large._repr_latex_() is None
    assert "1 input" in large._repr_html_()
    assert TransferMatrix([], [])._repr_latex_() is None
