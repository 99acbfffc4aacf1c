"""Uncertainties: figures in, one exact radius for each entry out."""

from __future__ import annotations

import math
import pickle
from fractions import Fraction
from typing import Any

import numpy as np
import pytest
import sympy
from hypothesis import given
from hypothesis import strategies as st

from realize import Realization, TransferMatrix, Uncertainty, errors
from realize.uncertainty import CoefficientRadii, MatrixRadii, Rounding, as_uncertainty

F = Fraction

MODEL = Realization([[-1, "1/2"], [0, -3]], [0.5, 0.0], [1, 2])
FRACTION = TransferMatrix(["1", "0"], ["2", "3/10", "-4"])
TABLE = TransferMatrix([[[1], [2, 3]]], [[[1, 1], [1, 0, 4]]])


def flat(radii: MatrixRadii | CoefficientRadii) -> list[F]:
    """All radii in order."""
    if isinstance(radii, MatrixRadii):
        return [r for part in (radii.A, radii.B, radii.C, radii.D) for r in part.ravel()]
    tables = (radii.numerators, radii.denominators)
    return [r for table in tables for row in table for p in row for r in p]


def test_a_number_is_relative_and_zeros_stay() -> None:
    """Entry by entry, zeros get the radius zero; a float figure is read as written."""
    radii = as_uncertainty(0.1).radii(MODEL)  # type: ignore[union-attr]
    assert radii.A.tolist() == [[F(1, 10), F(1, 20)], [0, F(3, 10)]]
    assert radii.B.tolist() == [[F(1, 20)], [0]]
    assert radii.C.tolist() == [[F(1, 10), F(1, 5)]]
    assert radii.D.tolist() == [[0]]
    assert all(type(r) is F for r in flat(radii))


def test_an_absolute_number_moves_zeros_too() -> None:
    """An absolute figure says otherwise about zeros; the two add up."""
    radii = Uncertainty(relative="1/10", absolute=F(1, 100)).radii(FRACTION)
    assert radii.numerators == (((F(11, 100), F(1, 100)),),)
    assert radii.denominators == (((F(21, 100), F(4, 100), F(41, 100)),),)


def test_figures_for_each_matrix() -> None:
    """A mapping names matrices; arrays have their shapes, and what is left out is exact."""
    radii = Uncertainty(absolute={"A": np.array([[0.5, 0], [0, 0]]), "B": ["1/3", 0]}).radii(MODEL)
    assert radii.A.tolist() == [[F(1, 2), 0], [0, 0]]
    assert radii.B.tolist() == [[F(1, 3)], [0]]
    assert not any(radii.C.ravel())
    assert not any(radii.D.ravel())
    assert Uncertainty(relative={"C": 0.5}).radii(MODEL).C.tolist() == [[F(1, 2), 1]]


def test_figures_for_each_coefficient() -> None:
    """Lists nest as in the transfer matrix; dropped leading zeros need no figure but zero."""
    radii = Uncertainty(absolute={"numerators": [1, 2], "denominators": [0, 0, 3]}).radii(FRACTION)
    assert (radii.numerators, radii.denominators) == ((((1, 2),),), (((0, 0, 3),),))
    padded = TransferMatrix([0, 0, 5], [1, 2, 3])
    radii = Uncertainty(absolute={"numerators": [0, 0, "1/7"]}).radii(padded)
    assert radii.numerators == (((F(1, 7),),),)
    radii = Uncertainty(absolute={"denominators": [[[0, 1], [0, 2, 3]]]}).radii(TABLE)
    assert radii.denominators == (((0, 1), (0, 2, 3)),)
    assert flat(Uncertainty(absolute={"numerators": 2}).radii(TABLE)) == [2, 2, 2, 0, 0, 0, 0, 0]


def test_rounding_of_floats() -> None:
    """Doubles may be off by their spacing, or by half a unit of the last digit written."""
    model = TransferMatrix([0.25, -100.0, 1.5e-7, 0.0], [1.0, 3e20, 0.1, 0.125])
    ulps = flat(as_uncertainty("ulp").radii(model))  # type: ignore[union-attr]
    values = [0.25, -100.0, 1.5e-7, 0.0, 1.0, 3e20, 0.1, 0.125]
    assert ulps == [F(math.ulp(v)) if v else 0 for v in values]
    digits = flat(as_uncertainty("last digit").radii(model))  # type: ignore[union-attr]
    # Python writes -100.0, 1.5e-07, 3e+20.
    wanted = ["1/200", "1/20", "5e-9", "0", "1/20", "5e19", "1/20", "1/2000"]
    assert digits == list(map(F, wanted))


def test_rounding_of_exact_entries() -> None:
    """An exact entry moves where a double cannot hold it, or where it is a decimal."""
    model = TransferMatrix(["1/2", "1/10", 0], [1, "1/3", "0.25", 7])
    ulps = flat(Uncertainty(rounding=Rounding.ULP).radii(model))
    assert ulps == [0, F(math.ulp(0.1)), 0, 0, F(math.ulp(1 / 3)), 0, 0]
    digits = flat(as_uncertainty("last digit").radii(model))  # type: ignore[union-attr]
    assert digits == [F(1, 20), F(1, 20), 0, 0, 0, F(1, 200), 0]


def test_mixed_models_keep_their_exact_entries() -> None:
    """Beside floats an exact entry is still the number given."""
    model = TransferMatrix([1], [1.5, F(1, 3), 2])
    radii = Uncertainty(relative=1).radii(model)
    assert radii.denominators == (((F(3, 2), F(1, 3), 2),),)


def test_standard_deviations_become_a_box() -> None:
    """One entry: the quantile of the normal distribution; two: wider, for both at once."""
    one = Uncertainty(standard_deviation={"numerators": [0.5, 0]}).radii(FRACTION)
    # 1.959964 is the two-sided 95 % quantile: common practice.
    assert float(one.numerators[0][0][0]) == pytest.approx(0.5 * 1.959963985, rel=1e-8)
    assert one.numerators[0][0][1] == 0
    two = Uncertainty(standard_deviation={"numerators": 0.5}).radii(FRACTION)
    # Two-sided 97.5 %: 2.241403.
    assert float(two.numerators[0][0][0]) == pytest.approx(0.5 * 2.241402728, rel=1e-8)
    sure = Uncertainty(standard_deviation={"numerators": 0.5}, confidence=0.999).radii(FRACTION)
    assert sure.numerators[0][0][0] > two.numerators[0][0][0]


def test_covariance_and_standard_deviations_agree() -> None:
    """A diagonal covariance says what its deviations say; correlations do not change the box."""
    deviations = [0.5, 0.25, 0.0, 2.0, 1.0]
    lists = {"numerators": deviations[:2], "denominators": deviations[2:]}
    plain = Uncertainty(standard_deviation=lists)
    table = np.diag(np.square(deviations))
    assert Uncertainty(covariance=table).radii(FRACTION) == plain.radii(FRACTION)
    assert np.array_equal(plain.spread(FRACTION), table)
    table[0, 1] = table[1, 0] = 0.1
    assert Uncertainty(covariance=table).radii(FRACTION) == plain.radii(FRACTION)
    assert np.array_equal(Uncertainty(covariance=table).spread(FRACTION), table)


@given(st.integers(0, 2**32 - 1), st.floats(0.5, 0.99))
def test_the_box_holds_what_it_promises(seed: int, confidence: float) -> None:
    """Correlated draws lie in the box at least as often as the confidence says."""
    rng = np.random.default_rng(seed)
    factor = rng.normal(size=(5, 5))
    radii = Uncertainty(covariance=factor @ factor.T, confidence=confidence).radii(FRACTION)
    box = np.array([float(r) for r in flat(radii)])
    draws = rng.normal(size=(2000, 5)) @ factor.T
    share = float((np.abs(draws) <= box).all(axis=1).mean())
    # Five standard deviations of the count.
    assert share >= confidence - 5 * math.sqrt(confidence * (1 - confidence) / 2000)


@pytest.mark.parametrize(
    "figures",
    [
        {"relative": -0.1},
        {"relative": math.nan},
        {"relative": math.inf},
        {"relative": True},
        {"relative": "much"},
        {"relative": 1j},
        {"relative": [0.1, 0.2]},
        {"relative": {"E": 1}},
        {"absolute": {"A": [[0, -1], [0, 0]]}},
        {"absolute": {"A": [[0, math.nan], [0, 0]]}},
        {"standard_deviation": -1},
        {"standard_deviation": 1, "relative": 1},
        {"standard_deviation": 1, "covariance": [[1]]},
        {"standard_deviation": 1, "confidence": 1},
        {"standard_deviation": 1, "confidence": 0},
        {"standard_deviation": 1, "confidence": math.nan},
        {"relative": 1, "confidence": 0.9},
        {"covariance": [[1, 2], [2, 1]]},
        {"covariance": [[1, 0.5], [0.4, 1]]},
        {"covariance": [[-1]]},
        {"covariance": [[0, 1], [1, 1]]},
        {"covariance": [[math.nan]]},
        {"covariance": [1, 2]},
        {"covariance": "wide"},
        {},
    ],
)
def test_bad_figures_are_refused(figures: dict[str, Any]) -> None:
    """Negative, not finite, no number, no covariance, together what excludes each other."""
    with pytest.raises(errors.UncertaintyError):
        Uncertainty(**figures)


@pytest.mark.parametrize(
    "figures",
    [
        {"absolute": {"A": [[1, 2]]}},
        {"absolute": {"A": [[1, 2], [3]]}},
        {"absolute": {"A": [[[1], [2]], [[1], [2]]]}},
        {"absolute": {"B": [1, 2, 3]}},
        {"absolute": {"numerators": 1}},
        {"covariance": [[1]]},
    ],
)
def test_wrong_shapes_are_refused(figures: dict[str, Any]) -> None:
    """Figures that do not have the shape, or the keys, of a realization."""
    with pytest.raises(errors.UncertaintyError):
        Uncertainty(**figures).radii(MODEL)


@pytest.mark.parametrize(
    "figures",
    [
        {"numerators": [1]},
        {"numerators": [1, 2, 3]},
        {"denominators": [[[1, 2, 3], [1, 2, 3]]]},
        {"denominators": [[1, 2, 3]]},
        {"numerators": [[[[1], 2]]]},
        {"A": 1},
    ],
)
def test_wrong_lists_are_refused(figures: dict[str, Any]) -> None:
    """Figures that do not have the shape, or the keys, of a transfer matrix."""
    with pytest.raises(errors.UncertaintyError):
        Uncertainty(absolute=figures).radii(FRACTION)


def test_other_arguments() -> None:
    """None is none; words are known or refused; a list does not say what it is for."""
    assert as_uncertainty(None) is None
    kept = Uncertainty(relative=1)
    assert as_uncertainty(kept) is kept
    assert as_uncertainty(F(1, 3)) == Uncertainty(relative="1/3")
    with pytest.raises(errors.UnknownWordError, match="ulp") as caught:
        as_uncertainty("about")
    assert caught.value.argument == "uncertainty"
    with pytest.raises(errors.UncertaintyError, match=r"realize\.Uncertainty"):
        as_uncertainty([0.1])
    with pytest.raises(errors.UncertaintyError):
        as_uncertainty(-1)
    with pytest.raises(errors.UncertaintyError, match="covariance"):
        Uncertainty(relative=1).spread(FRACTION)
    with pytest.raises(errors.UnsupportedEntryError, match="constants"):
        Uncertainty(relative=1).radii(TransferMatrix([1], [1, sympy.sqrt(2)]))


def test_records_are_values() -> None:
    """Pickled, an uncertainty is equal to itself; the caller's array stays as it was."""
    array = np.array([[1.0, 0.0], [0.0, 2.0]])
    first = Uncertainty(absolute={"A": array})
    assert pickle.loads(pickle.dumps(first)) == first
    array[0, 0] = 9.0
    assert first == Uncertainty(absolute={"A": [[1, 0], [0, 2]]})


def test_models_without_entries() -> None:
    """No states, no outputs: no radii of that kind, and no failure."""
    empty = Realization([], [], [], [[2]])
    radii = Uncertainty(relative=1).radii(empty)
    assert radii.A.shape == (0, 0)
    assert radii.D.tolist() == [[2]]
    none = TransferMatrix([], [], input_names=["u"])
    assert Uncertainty(relative=1).radii(none) == CoefficientRadii(numerators=(), denominators=())
