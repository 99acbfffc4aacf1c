"""Models from tuples, arrays, and the systems of other libraries."""

from __future__ import annotations

from fractions import Fraction
from typing import Any

import numpy as np
import pytest
import scipy.signal
import sympy

from realize.convert import as_realization, as_transfer_matrix
from realize.errors import (
    EntryError,
    ImproperError,
    SamplingPeriodError,
    ShapeError,
    UnsupportedEntryError,
)
from realize.model.realization import Realization
from realize.model.transfer import TransferMatrix

F = Fraction


class Thing:
    """An object with the attributes given."""

    def __init__(self, **attributes: Any) -> None:
        self.__dict__.update(attributes)


def test_models_are_themselves() -> None:
    """A model of the form that is wanted comes back as it is."""
    model = Realization([[1]], [1], [1])
    transfer = TransferMatrix([1], [1, 2])
    assert as_realization(model) is model
    assert as_transfer_matrix(transfer) is transfer


def test_tuples() -> None:
    """Four things are matrices, two are polynomials."""
    assert as_realization(([[1]], [2], [3], [4])) == Realization([[1]], [2], [3], [4])
    assert as_transfer_matrix(([1], [1, 2])) == TransferMatrix([1], [1, 2])
    with pytest.raises(ShapeError) as caught:
        as_realization(([[1]], [2], [3]))
    assert caught.value.found == 3


@pytest.mark.parametrize(
    "gain",
    [[[1, "1/2"]], np.array([[1, F(1, 2)]], dtype=object), sympy.Matrix([[1, sympy.S.Half]])],
    ids=["list", "array", "sympy"],
)
def test_arrays_are_static_gains(gain: Any) -> None:
    """A table alone is a gain without states."""
    assert as_realization(gain) == Realization([], [], [], [[1, "1/2"]])
    transfer = as_transfer_matrix(gain)
    assert transfer.evaluate(7).tolist() == [[1, F(1, 2)]]


def test_a_gain_needs_rows() -> None:
    """A flat list is not a table."""
    with pytest.raises(ShapeError):
        as_realization([1, 2])


def test_own_method() -> None:
    """An object may say for itself which realization it is, and must not say anything else."""

    class Plant:
        def __realization__(self) -> Realization:
            return Realization([[-1]], [1], [1])

    class Other:
        def __realization__(self) -> int:
            return 3

    assert as_realization(Plant()) == Realization([[-1]], [1], [1])
    assert as_transfer_matrix(Plant()) == TransferMatrix([1], [1, 1])
    with pytest.raises(UnsupportedEntryError, match="int"):
        as_realization(Other())


@pytest.mark.parametrize("thing", [None, 3, "model.json", {}, object(), Thing(A=1, B=1)])
def test_other_things(thing: Any) -> None:
    """What is of no known kind is refused, with the kinds that are."""
    for convert in (as_realization, as_transfer_matrix):
        with pytest.raises(UnsupportedEntryError, match=r"give|load"):
            convert(thing)


# Transfer matrices to states and back


@pytest.mark.parametrize(
    ("transfer", "order"),
    [
        (TransferMatrix([1, 1], [1, 3, 2]), 2),
        (TransferMatrix([[[1]], [[2, 0]]], [1, 3, 2]), 2),
        (TransferMatrix([[[1], [2, 0]]], [1, 3, 2]), 2),
        (TransferMatrix([[[1], [1, 0]], [[3], [1]]], [[[1, 1], [1, 2]], [[1, 3], [1]]]), 3),
        (TransferMatrix([3], [2]), 0),
    ],
    ids=["one", "outputs", "inputs", "both", "gain"],
)
def test_transfer_matrices_are_realized_as_given(transfer: TransferMatrix, order: int) -> None:
    """A realization has the same values at every point, and keeps common factors as states."""
    for source in (transfer, transfer.to_float()):
        model = as_realization(source)
        assert model.order == order
        assert model.kind == source.kind
    back = as_transfer_matrix(as_realization(transfer))
    for point in (F(1, 3), 5, F(-7, 2)):
        assert back.evaluate(point).tolist() == transfer.evaluate(point).tolist()


def test_improper_transfer_matrices_have_no_realization() -> None:
    """An improper fraction cannot be realized."""
    with pytest.raises(ImproperError):
        as_realization(TransferMatrix([1, 0], [1], improper=True))


# Systems of scipy.signal


def test_state_space_of_scipy() -> None:
    """The four matrices and the sampling period are taken as they are."""
    matrices = ([[0.0, 1.0], [-2.0, -3.0]], [[0.0], [1.0]], [[1.0, 0.0]], [[0.5]])
    assert as_realization(scipy.signal.StateSpace(*matrices)) == Realization(*matrices)
    discrete = as_realization(scipy.signal.StateSpace(*matrices, dt=0.25))
    assert discrete == Realization(*matrices, sampling_period=0.25)


def test_transfer_function_of_scipy() -> None:
    """Numerator and denominator are taken as they are, rows of numerators as outputs."""
    system = scipy.signal.TransferFunction([1.0, 1.0], [1.0, 3.0, 2.0])
    assert as_transfer_matrix(system) == TransferMatrix([1.0, 1.0], [1.0, 3.0, 2.0])
    assert as_realization(system).order == 2
    rows = Thing(num=np.array([[1.0, 2.0], [3.0, 4.0]]), den=np.array([1.0, 5.0]))
    assert as_transfer_matrix(rows) == TransferMatrix([[[1.0, 2.0]], [[3.0, 4.0]]], [1.0, 5.0])


def test_discrete_time_without_a_period() -> None:
    """An object that is discrete but names no sampling period is refused."""
    system = scipy.signal.TransferFunction([1.0], [1.0, 0.5], dt=True)
    with pytest.raises(SamplingPeriodError, match="sampling period"):
        as_transfer_matrix(system)


# Zeros, poles and gain


def test_roots_are_multiplied_out_exactly() -> None:
    """Rational zeros, poles and gain give the exact coefficients, worked out by hand."""
    thing = Thing(zeros=[F(1, 2)], poles=[-1, "-1/3"], gain=6)
    assert as_transfer_matrix(thing) == TransferMatrix([6, -3], [1, "4/3", "1/3"])


def test_conjugate_pairs_give_real_coefficients() -> None:
    """(s - 1 - 2i)(s - 1 + 2i) = s^2 - 2 s + 5, in floats because complex numbers are."""
    thing = Thing(zeros=[], poles=np.array([1 + 2j, 1 - 2j]), gain=np.float64(1), dt=0.5)
    assert as_transfer_matrix(thing) == TransferMatrix([1.0], [1.0, -2.0, 5.0], sampling_period=0.5)


def test_coefficients_are_correctly_rounded() -> None:
    """Coefficients are those of the roots given, rounded once and not once per factor."""
    poles = [0.1, 0.2, 0.3, 0.7]
    exact = [F(1)]
    for pole in poles:
        shifted = [-F(pole) * c for c in exact]
        exact = [a + b for a, b in zip([*exact, F(0)], [F(0), *shifted], strict=True)]
    transfer = as_transfer_matrix(Thing(zeros=np.array([]), poles=np.array(poles), gain=1.0))
    assert transfer.denominators[0][0] == tuple(float(c) for c in exact)


def test_noise_on_roots_is_rounding() -> None:
    """Imaginary parts, and conjugates, within rounding noise are taken for what they stand for."""
    thing = Thing(zeros=[], poles=[-1 + 1e-17j, 2 + 1j, 2 - 1.0000000000000002j], gain=1.0)
    denominator = as_transfer_matrix(thing).denominators[0][0]
    assert denominator == pytest.approx([1, -3, 1, 5], rel=1e-15)


@pytest.mark.parametrize("poles", [[1j], [1 + 1j, 1 + 1j], [1 + 1j, 1 - 1.001j]])
def test_complex_roots_need_their_conjugates(poles: list[complex]) -> None:
    """A complex root without its conjugate is refused."""
    with pytest.raises(EntryError, match="conjugate") as caught:
        as_transfer_matrix(Thing(zeros=[], poles=poles, gain=1))
    assert caught.value.where == "poles"


@pytest.mark.parametrize(
    ("thing", "error"),
    [
        (Thing(zeros=[], poles=[float("nan")], gain=1), EntryError),
        (Thing(zeros=[], poles=[complex("inf")], gain=1), EntryError),
        (Thing(zeros=[], poles=[[1], [2]], gain=1), ShapeError),
        (Thing(zeros=[], poles=[1], gain=1j), UnsupportedEntryError),
        (Thing(zeros=[], poles=[None], gain=1), UnsupportedEntryError),
        (Thing(zeros=[1, 2], poles=[1], gain=1), ImproperError),
    ],
)
def test_roots_and_gains_that_are_none(thing: Thing, error: type[Exception]) -> None:
    """Roots that are not finite, tables of roots, and complex gains are refused."""
    with pytest.raises(error):
        as_transfer_matrix(thing)


@pytest.mark.parametrize("analog", [True, False])
@pytest.mark.parametrize("order", [1, 2, 5, 9])
@pytest.mark.parametrize("design", ["butter", "cheby1", "ellip", "bessel"])
def test_filters_of_scipy(design: str, order: int, analog: bool) -> None:
    """Designed filters come in all three forms with the degree of the design."""
    ripple = {"butter": (), "cheby1": (1,), "ellip": (1, 40), "bessel": ()}[design]
    make = getattr(scipy.signal, design)
    roots = make(order, *ripple, 0.3, output="zpk", analog=analog)
    period = {} if analog else {"dt": 0.5}
    system = scipy.signal.ZerosPolesGain(*roots, **period)
    transfer = as_transfer_matrix(system)
    assert transfer.kind == "floating"
    assert transfer.sampling_period == (None if analog else 0.5)
    assert len(transfer.denominators[0][0]) == order + 1
    # scipy multiplies out in floats; the two differ by its rounding only.
    expected = scipy.signal.zpk2tf(*roots)[1]
    assert transfer.denominators[0][0] == pytest.approx(expected, rel=1e-9)
    assert as_realization(system).order == order
    assert as_realization(system.to_ss()).order == order
