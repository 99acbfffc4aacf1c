"""Filters that SciPy designs: their order is known, and not one state may be lost.

A filter of order n has n poles and, away from rounding, none of them at a zero, so its minimal
order is n. Read as stored the coefficients are one exact filter, whose order is checked as well.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
import pytest
import scipy.signal

from realize import Realization, TransferMatrix, as_realization, as_transfer_matrix, exact, floating

ORDERS = (2, 3, 4, 5, 6, 8, 10, 12, 16, 20)


class Filter(NamedTuple):
    """A design, as the arguments of SciPy's functions."""

    family: str
    order: int
    analog: bool
    cutoff: float

    def design(self, output: str) -> Any:
        """The filter in one of the three forms."""
        words = {"analog": self.analog, "output": output}
        if self.family == "butter":
            return scipy.signal.butter(self.order, self.cutoff, **words)
        if self.family == "cheby1":
            return scipy.signal.cheby1(self.order, 1.0, self.cutoff, **words)
        if self.family == "ellip":
            return scipy.signal.ellip(self.order, 1.0, 60.0, self.cutoff, **words)
        return scipy.signal.bessel(self.order, self.cutoff, **words)

    @property
    def period(self) -> float | None:
        """None in continuous time, else two samples to the unit of the cutoff."""
        return None if self.analog else 0.5


#: Every family and order: continuous at 1 and at 1000 rad/s, discrete at 0.3 of Nyquist's.
FILTERS = [
    pytest.param(Filter(family, order, analog, cutoff), id=f"{family}-{order}-{time}")
    for family in ("butter", "cheby1", "ellip", "bessel")
    for order in ORDERS
    for analog, cutoff, time in (
        (True, 1.0, "continuous"),
        (True, 1000.0, "kiloradian"),
        (False, 0.3, "discrete"),
    )
]


def as_fraction(design: Filter) -> TransferMatrix:
    """The numerator and denominator that SciPy gives."""
    above, below = design.design("ba")
    return TransferMatrix(
        [float(v) for v in above], [float(v) for v in below], sampling_period=design.period
    )


def as_states(design: Filter) -> Realization:
    """The state space that SciPy makes of the poles and zeros."""
    zpk = design.design("zpk")
    return Realization(*scipy.signal.zpk2ss(*zpk), sampling_period=design.period)


def as_zeros_and_poles(design: Filter) -> TransferMatrix:
    """The zeros, poles and gain, taken as SciPy's own object."""
    more = {} if design.analog else {"dt": design.period}
    return as_transfer_matrix(scipy.signal.ZerosPolesGain(*design.design("zpk"), **more))


FORMS = {"tf": as_fraction, "zpk": as_zeros_and_poles, "ss": as_states}


@pytest.mark.parametrize("form", FORMS)
@pytest.mark.parametrize("design", FILTERS)
def test_exact_order_as_stored(design: Filter, form: str) -> None:
    """The doubles delivered are one exact filter, and it has the full order."""
    source = FORMS[form](design)
    assert exact.minimal(source.read("stored")).order == design.order


@pytest.mark.parametrize("form", FORMS)
@pytest.mark.parametrize("design", FILTERS)
def test_floating_path_keeps_every_state(design: Filter, form: str) -> None:
    """The floating path loses no state of a filter."""
    source = FORMS[form](design)
    assert floating.minimal(source).order == design.order


@pytest.mark.parametrize("design", FILTERS)
def test_nothing_cancels_as_stored(design: Filter) -> None:
    """In the doubles delivered, no pole of a filter cancels a zero."""
    assert exact.cancel(as_fraction(design).read("stored")).common == (1,)


@pytest.mark.parametrize("design", FILTERS)
def test_nothing_cancels_in_floats(design: Filter) -> None:
    """The floating path cancels no pole of a filter either."""
    assert tuple(floating.cancel(as_fraction(design)).common) == (1.0,)


@pytest.mark.parametrize("form", FORMS)
@pytest.mark.parametrize("design", [item for item in FILTERS if item.values[0].order <= 10])
def test_reduced_filter_has_the_same_response(design: Filter, form: str) -> None:
    """What the floating path returns filters alike, in band and out of band.

    Up to order 10: the response of one companion form of higher order turns on bits that the
    coefficients no longer hold, so there the doubles have no response to compare with.
    """
    source = FORMS[form](design)
    reduced = floating.minimal(source).model
    before = as_realization(source)
    frequencies = design.cutoff * np.array([0.1, 0.7, 1.0, 1.3, 2.5])
    points = 1j * frequencies if design.analog else np.exp(1j * np.pi * frequencies)
    for z in points:
        found, wanted = (
            m.C @ np.linalg.solve(z * np.eye(m.order) - m.A, m.B) + m.D for m in (reduced, before)
        )
        assert abs(found - wanted).max() <= 1e-7, z


@pytest.mark.parametrize("binades", [-20, -10, 3, 10, 20])
@pytest.mark.parametrize("order", [4, 12, 14, 16, 20])
def test_unit_of_time_decides_nothing(order: int, binades: int) -> None:
    """A filter in seconds and in units of 2^k seconds has one order."""
    system = as_realization(as_fraction(Filter("ellip", order, True, 1.0)))
    factor = 2.0**binades
    other = Realization(factor * system.A, factor * system.B, system.C, system.D)
    assert floating.minimal(system).order == order
    assert floating.minimal(other).order == order
