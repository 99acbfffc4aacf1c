"""Irrational constants as entries: taken, rounded, compared, kept, and refused."""

from __future__ import annotations

import copy
import io
import os
import pickle
import subprocess
import sys
from collections.abc import Callable
from fractions import Fraction
from typing import Any

import mpmath
import numpy as np
import pytest
import sympy
from hypothesis import given
from hypothesis import strategies as st

import realize
from realize import Realization, TransferMatrix, errors, exact, floating
from realize.entries import constant_near, parse_entry, round_constant, round_entry

F = Fraction

ROOT = sympy.sqrt(2)
DECAY = sympy.exp(sympy.Rational(-1, 10))


def model() -> Realization:
    """Two states, with a root in A and a sampled decay in C."""
    return Realization([[0, ROOT], ["1/3", -2]], [0, 1], [1, DECAY])


def mixed() -> Realization:
    """The same with a float in it, which makes it a model in doubles."""
    return Realization([[0.1, ROOT], ["1/3", -2]], [0, 1], [1, DECAY])


def transfer() -> TransferMatrix:
    """(s + sqrt 2) / (s^2 + (3 + sqrt 2) s + 1/2)."""
    return TransferMatrix([1, ROOT], [1, 3 + ROOT, "1/2"])


# --------------------------------------------------------------------------- numbers


@pytest.mark.parametrize(
    "value",
    [
        ROOT,
        sympy.pi,
        DECAY,
        sympy.cos(1),
        sympy.CRootOf(sympy.Symbol("x") ** 5 - sympy.Symbol("x") - 1, 0),
        sympy.gamma(sympy.Rational(1, 3)),
        sympy.pi - sympy.Rational(355, 113),
        -sympy.exp(-600) * ROOT,
    ],
    ids=str,
)
def test_constants_are_taken_as_they_are(value: Any) -> None:
    """With the keyword a real number of sympy is an entry; without it is refused."""
    assert parse_entry(value, constants=True) is value
    with pytest.raises(errors.UnsupportedEntryError):
        parse_entry(value)


def test_numbers_of_other_kinds_do_not_change() -> None:
    """The keyword changes nothing about floats and rationals."""
    assert parse_entry("1/3", constants=True) == F(1, 3)
    assert parse_entry(sympy.Rational(1, 3), constants=True) == F(1, 3)
    assert type(parse_entry(sympy.Float("0.1"), constants=True)) is float


@pytest.mark.parametrize(
    ("value", "message"),
    [
        (sympy.I, "not known to be a real number"),
        (sympy.sqrt(-2), "not known to be a real number"),
        (sympy.Symbol("k") * ROOT, "put numbers in"),
        (sympy.Float("0.1") * ROOT, "holds a float"),
        (sympy.true, "not known to be a real number"),
        (sympy.Function("f")(1), "not known to be a real number"),
        (sympy.AccumBounds(0, 1), "no decimals"),
    ],
    ids=lambda value: type(value).__name__,
)
def test_what_is_no_constant_is_refused_by_name(value: Any, message: str) -> None:
    """Complex numbers, symbols, floats inside an expression and other objects are no constants."""
    with pytest.raises(errors.UnsupportedEntryError, match=message) as caught:
        parse_entry(value, ("A", 0, 1), constants=True)
    assert caught.value.where == "A, row 1, column 2"


@pytest.mark.parametrize(
    "value",
    [
        (1 + ROOT) ** 2 - 3 - 2 * ROOT,
        sympy.cos(1) ** 2 + sympy.sin(1) ** 2 - 1,
        sympy.Add(ROOT, -ROOT, evaluate=False),
    ],
    ids=str,
)
def test_what_cannot_be_told_from_zero_is_refused(value: Any) -> None:
    """Nothing is simplified to find a zero, so a hidden zero is the caller's to write."""
    with pytest.raises(errors.EntryError, match=r"cannot be told from zero.*write 0"):
        Realization([[-1, value], [0, -1]], [0, 1], [1, 0])


@pytest.mark.parametrize("value", [sympy.exp(10**4), sympy.exp(-sympy.exp(100))], ids=str)
def test_constants_beyond_all_measure_are_refused(value: Any) -> None:
    """The limit on exponents holds before a number is expanded."""
    with pytest.raises(errors.LimitError):
        parse_entry(value, constants=True)


def test_a_complex_expression_of_a_real_root_says_what_to_do() -> None:
    """Cardano's formula of a real root is complex to the rounding; its real part is taken."""
    x = sympy.Symbol("x")
    root = sympy.solve(x**3 - 3 * x + 1, x)[0]
    with pytest.raises(errors.UnsupportedEntryError, match=r"sympy\.re"):
        parse_entry(root, constants=True)
    value = constant_near(parse_entry(sympy.re(root), constants=True), 30)
    assert abs(value**3 - 3 * value + 1) < F(1, 10**28)


@given(st.integers(2, 10**6), st.integers(17, 200))
def test_digits_are_those_of_the_square_root(number: int, digits: int) -> None:
    """Squared, the rational near a root is the number to the digits asked for."""
    root = sympy.sqrt(number)
    if root.is_Integer:
        return
    near = constant_near(root, digits)
    assert abs(near**2 - number) <= 3 * number * F(1, 10**digits)
    # Correct rounding: the square lies between those of the midpoints beside the double.
    double = round_constant(root)
    below, above = (F(double) + F(np.nextafter(double, end)) for end in (-np.inf, np.inf))
    assert (below / 2) ** 2 < number < (above / 2) ** 2


def test_the_middle_between_two_doubles_is_named() -> None:
    """A constant that is such a middle in disguise is refused; a double in disguise is rounded."""
    one = (ROOT - 1) * (ROOT + 1)
    assert round_constant(one) == 1.0
    middle = sympy.Add(one, sympy.Rational(1, 2**53), evaluate=False)
    with pytest.raises(errors.EntryError, match="middle between two doubles"):
        round_constant(middle)


def test_rounding_takes_entries_of_every_kind() -> None:
    """Floats stay, rationals of both libraries and constants are rounded."""
    assert round_entry(0.1) == 0.1
    assert round_entry(F(1, 3)) == round_entry(sympy.Rational(1, 3)) == 1 / 3
    assert round_entry(sympy.pi) == np.pi
    with pytest.raises(errors.EntryError, match="too large for a double"):
        round_entry(sympy.exp(1000))


# --------------------------------------------------------------------------- models


def test_a_model_of_constants_is_parametric() -> None:
    """All entries become expressions of sympy, rationals included, D included."""
    found = model()
    assert found.kind == "parametric"
    assert repr(found) == "<Realization: 2 states, 1 input, 1 output, continuous time, parametric>"
    for matrix in found.matrices():
        assert all(isinstance(entry, sympy.Expr) for entry in matrix.flat)
        assert not matrix.flags.writeable
    assert found.A[0, 1] is ROOT
    assert found.A[1, 0] == sympy.Rational(1, 3)
    assert transfer().kind == "parametric"
    assert transfer().denominators == (((1, 3 + ROOT, sympy.Rational(1, 2)),),)


def test_a_float_makes_it_a_model_in_doubles() -> None:
    """Then the constants are kept beside the doubles, and count for equality and the digest."""
    found = mixed()
    assert found.kind == "floating"
    assert found.A.tolist() == [[0.1, np.sqrt(2)], [1 / 3, -2.0]]
    assert found != found.to_float()
    assert found.digest != found.to_float().digest
    fraction = TransferMatrix([1.0], [1, ROOT])
    assert fraction.kind == "floating"
    assert fraction.denominators == (((1.0, np.sqrt(2)),),)


def test_an_integer_model_does_not_become_parametric() -> None:
    """Numbers of sympy that are rational make a rational model, in lists and in its matrices."""
    assert Realization(sympy.Matrix([[sympy.S.Half]]), [1], [1]).kind == "rational"
    assert Realization(sympy.Matrix([[ROOT]]), [1], [1]).kind == "parametric"


def test_empty_matrices_beside_constants() -> None:
    """A gain of constants without states is parametric; its other matrices are empty."""
    found = Realization([], [], [], [[ROOT, 1]])
    assert (found.kind, found.order, found.input_count) == ("parametric", 0, 2)
    assert found.to_float().D.tolist() == [[np.sqrt(2), 1.0]]


@pytest.mark.parametrize("make", [model, mixed, transfer], ids=lambda make: make.__name__)
def test_identity(make: Callable[[], Any]) -> None:
    """Equal entries make equal models with equal hashes and digests, also after a pickle."""
    first, second = make(), make()
    back = pickle.loads(pickle.dumps(first))
    assert first == second == back == copy.deepcopy(first)
    assert hash(first) == hash(second) == hash(back)
    assert first.digest == second.digest == back.digest
    assert first.dual().dual() == first


def test_other_entries_make_other_models() -> None:
    """Expressions are compared as they are written; nothing is simplified."""
    assert Realization([[ROOT]], [1], [1]) != Realization([[sympy.sqrt(3)]], [1], [1])
    assert Realization([[ROOT]], [1], [1]).digest != Realization([[-ROOT]], [1], [1]).digest
    square = Realization([[(1 + ROOT) ** 2]], [1], [1])
    assert square != Realization([[3 + 2 * ROOT]], [1], [1])
    assert square.to_float() == Realization([[3 + 2 * ROOT]], [1], [1]).to_float()


def test_the_digest_is_the_same_in_every_process() -> None:
    """Expressions are spelled in an order that no hash seed decides."""
    code = (
        "import sympy; from realize import Realization;"
        "a = sympy.sqrt(2) * sympy.pi + sympy.exp(-sympy.Rational(1, 10)) * sympy.cos(1);"
        "print(Realization([[a, 1], [2, sympy.E**sympy.sqrt(3)]], [1, 0], [0, a]).digest)"
    )
    found = {
        subprocess.run(
            [sys.executable, "-c", code],
            capture_output=True,
            text=True,
            check=True,
            timeout=60,
            env=os.environ
            | {"PYTHONHASHSEED": seed, "PYTHONPATH": os.pathsep.join(p for p in sys.path if p)},
        ).stdout
        for seed in ("1", "2", "3")
    }
    assert len(found) == 1
    assert len(found.pop().strip()) == 64


@pytest.mark.parametrize("make", [model, mixed, transfer], ids=lambda make: make.__name__)
@pytest.mark.parametrize("reading", ["stored", "written", "intended"])
def test_constants_have_no_reading(make: Callable[[], Any], reading: str) -> None:
    """Reading names the first constant and points to the face that takes it."""
    with pytest.raises(errors.UnsupportedEntryError, match=r"sqrt\(2\).*realize\.multiprecision"):
        make().read(reading)
    with pytest.raises(errors.UnknownWordError):
        make().read("guessed")


def test_the_place_of_a_constant_is_named() -> None:
    """Matrix, row and column of a realization; fraction and coefficient of a transfer matrix."""
    with pytest.raises(errors.UnsupportedEntryError) as caught:
        model().read("stored")
    assert caught.value.where == "A, row 1, column 2"
    with pytest.raises(errors.UnsupportedEntryError) as caught:
        TransferMatrix([[[1], [1]]], [[[1, 2], [1, 0, ROOT]]]).read("stored")
    assert caught.value.where == "denominator of output 1, input 2, coefficient 3"


@pytest.mark.parametrize("make", [model, mixed, transfer], ids=lambda make: make.__name__)
def test_model_files_hold_numbers_only(make: Callable[[], Any]) -> None:
    """Saving is refused before anything is written; what is rounded can be saved."""
    target = io.StringIO()
    with pytest.raises(errors.UnsupportedEntryError, match=r"model files hold.*pickle"):
        realize.save(make(), target)
    assert target.getvalue() == ""
    realize.save(make().to_float(), target)
    assert realize.load(io.StringIO(target.getvalue())) == make().to_float()


def test_a_model_file_is_never_an_expression() -> None:
    """The text of a constant in a file is refused like any text that is no number."""
    text = '{"format": "realize-model", "version": 1, "realization": {"A": [["sqrt(2)"]], '
    with pytest.raises(errors.EntryError, match="not a number"):
        realize.load(io.StringIO(text + '"B": [[1]], "C": [[1]]}}'))


def test_what_stays_rational() -> None:
    """A sampling period and a point are no constants."""
    with pytest.raises(errors.SamplingPeriodError):
        Realization([[-1]], [1], [1], sampling_period=sympy.pi)
    with pytest.raises(errors.UnsupportedEntryError):
        TransferMatrix([1], [1, 2]).evaluate(ROOT)


@pytest.mark.parametrize("point", [1, "1/3", F(-2, 7), 0])
def test_values_of_constants_are_expressions_at_a_rational_point(point: Any) -> None:
    """Exact: the value is the fraction of the polynomials there, and nothing is rounded."""
    (value,) = transfer().evaluate(point).flat
    assert isinstance(value, sympy.Expr)
    at = sympy.Rational(str(F(point)))
    assert sympy.simplify(value - (at + ROOT) / (at**2 + (3 + ROOT) * at + F(1, 2))) == 0


@pytest.mark.parametrize(
    "make", [transfer, lambda: TransferMatrix([1.0, ROOT], [1, 3 + ROOT, 0.5])]
)
@pytest.mark.parametrize("point", [0.1, -3.75, 0.1 + 2j, 1j])
def test_values_of_constants_in_doubles(make: Callable[[], TransferMatrix], point: Any) -> None:
    """At a float or complex point correctly rounded, beside floats too: 40 digits round alike."""
    (value,) = make().evaluate(point).flat
    with mpmath.workdps(40):
        s = mpmath.mpmathify(point)
        root = mpmath.sqrt(2)
        expected = (s + root) / (s * s + (3 + root) * s + mpmath.mpf(1) / 2)
        rounded = complex(float(mpmath.re(expected)), float(mpmath.im(expected)))
    assert value == (rounded if isinstance(point, complex) else rounded.real)
    assert type(value) in (np.float64, np.complex128)


def test_poles_among_constants() -> None:
    """A zero that multiplying out shows is a pole; one that nothing decides is said to be so."""
    hidden = TransferMatrix([1], [(1 + ROOT) ** 2, -3 - 2 * ROOT])
    with pytest.raises(errors.EntryError, match="the point 1 is a pole"):
        hidden.evaluate(1)
    open_one = TransferMatrix([1], [sympy.cos(1) ** 2, sympy.sin(1) ** 2 - 1])
    with pytest.raises(errors.EntryError, match=r"cannot be told whether the point 1 is a pole"):
        open_one.evaluate(1)
    assert TransferMatrix([ROOT, -ROOT], [1, ROOT]).evaluate(1.0).tolist() == [[0.0]]
    with pytest.raises(errors.EntryError, match=r"value: .* cannot be told from zero"):
        TransferMatrix([sympy.cos(1) ** 2, sympy.sin(1) ** 2 - 1], [1, 1]).evaluate(1.0)


def test_looks() -> None:
    """In a notebook constants are typeset, and their text is escaped."""
    assert r"\sqrt{2}" in (model()._repr_latex_() or "")
    assert "<td>sqrt(2)</td>" in model()._repr_html_()
    assert r"\left(\sqrt{2} + 3\right) s" in (transfer()._repr_latex_() or "")
    assert r"\sqrt{2}" in transfer()._repr_html_()


# --------------------------------------------------------------------------- the other faces


@pytest.mark.parametrize("make", [model, mixed], ids=lambda make: make.__name__)
def test_the_exact_face_refuses_constants(make: Callable[[], Any]) -> None:
    """By their place, and with the face to use; not as floats, which they are not."""
    for form in (exact.minimal, exact.staircase, exact.kalman_parts, exact.transfer_matrix):
        with pytest.raises(errors.UnsupportedEntryError, match=r"sqrt\(2\).*multiprecision"):
            form(make())
    with pytest.raises(errors.UnsupportedEntryError, match=r"sqrt\(2\).*multiprecision"):
        exact.cancel(transfer())


def test_the_floating_face_rounds_constants() -> None:
    """It answers as for the doubles nearest to the entries."""
    assert floating.staircase(model()).model == floating.staircase(model().to_float()).model
    assert floating.cancel(transfer()).transfer == floating.cancel(transfer().to_float()).transfer


def test_the_global_precision_does_not_matter_and_stays() -> None:
    """Digits of constants do not depend on mpmath's own precision, which is left alone."""
    before = mpmath.mp.prec
    expected = constant_near(sympy.zeta(3) * sympy.gamma(sympy.Rational(1, 3)), 60)
    mpmath.mp.prec = 20
    try:
        assert constant_near(sympy.zeta(3) * sympy.gamma(sympy.Rational(1, 3)), 60) == expected
        with pytest.raises(errors.EntryError):
            constant_near((1 + ROOT) ** 2 - 3 - 2 * ROOT, 60)
        assert mpmath.mp.prec == 20
    finally:
        mpmath.mp.prec = before


def test_sympy_is_not_loaded_without_constants() -> None:
    """Rational and floating models are made, compared and read without sympy."""
    code = (
        "import sys; from realize import Realization;"
        "m = Realization([['1/2', 1.5]] * 2, [1, 2], [1, 0]);"
        "m.read('written'); m.digest; m == m.to_float(); m._repr_html_(); m._repr_latex_();"
        "print('sympy' in sys.modules)"
    )
    done = subprocess.run(
        [sys.executable, "-c", code],
        capture_output=True,
        text=True,
        check=True,
        timeout=60,
        env=os.environ | {"PYTHONPATH": os.pathsep.join(p for p in sys.path if p)},
    )
    assert done.stdout.strip() == "False"
