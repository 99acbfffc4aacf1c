"""The only cutoff rule: when a path that rounds calls a number zero.

Every rank decision of such a path compares singular values with one number,
``cutoff = tolerance * scale``, fixed before the first decision. The scale is the Frobenius norm of
the whole scaled model ``[A B; C 0]``, never of the block at hand: cutoffs scaled by the current
block lose to cutoffs scaled by the whole problem, because the blocks shrink as the reduction goes
on while the rounding errors do not.

The default is a heuristic, and it is part of the interface. Factors between 1e3 and 1e10 times
``order * eps`` decide alike on well separated models; 2**-32 lies in the middle of that range on a
logarithmic scale. With more digits than a double has there is room on both sides; see
`digits_tolerance`.
"""

from __future__ import annotations

import math
from fractions import Fraction
from typing import Any, Final, TypeVar

from realize.errors import ToleranceError

__all__ = [
    "DEFAULT_FACTOR",
    "DEFAULT_RTOL",
    "DISTANCE_BUDGET",
    "FLOOR_FACTOR",
    "LOOP_MARGIN",
    "SAME_MODE",
    "SMALLEST_RTOL",
    "check_rtol",
    "check_tolerance",
    "cutoff",
    "default_tolerance",
    "difference",
    "digits_tolerance",
    "root_doubt",
    "rounding_floor",
]

_Number = TypeVar("_Number", float, Fraction)

DEFAULT_FACTOR: Final = 2.0**-32
"""Default tolerance for each state; the default tolerance is the order times this."""

FLOOR_FACTOR: Final = 8.0
"""Rounding noise for each state, in units of the roundoff."""

UNIT_ROUNDOFF: Final = 2.0**-52
"""Spacing of the doubles next to 1."""

SAME_MODE: Final = 1e-6
"""Distance, over the largest entry of A, up to which computed modes of two models count as one.

A double root is good to half of the digits; this leaves it two decades more.
"""

LOOP_MARGIN: Final = 1e-6
"""An algebraic loop with a smaller margin is called nearly ill-posed, with a warning.

Few measured gains are known to one part in a million, so such data cannot tell the loop from one
that has no solution; and the connected model has lost six digits of the doubles' sixteen.
"""

SHARE_OF_DIGITS: Final = Fraction(1, 2)
"""Share of the digits of the multiprecision path within which a number counts as not zero."""

DEFAULT_RTOL: Final = 0.1
"""Room between the bounds of a distance, over the upper one: what a distance is for is its size."""

SMALLEST_RTOL: Final = 1e-10
"""The least such room: the bounds are doubles, and so is most of what they are computed from."""

DISTANCE_BUDGET: Final = 300.0
"""Seconds that a distance may take unless another budget is given: 60 states with one input and a
distance below the roundoff are done in that time."""


def check_rtol(rtol: float) -> float:
    """Return the room between the bounds that a caller allows; refuse what is none.

    Raises
    ------
    ToleranceError
        When it is no real number, not below 1, or below `SMALLEST_RTOL`.
    """
    number = isinstance(rtol, (int, float)) and not isinstance(rtol, bool)
    if not number or not SMALLEST_RTOL <= rtol < 1:
        raise ToleranceError(
            f"rtol is {rtol!r}; wanted a number from {SMALLEST_RTOL:g} to below 1, the room "
            "between the bounds over the upper one",
            argument="rtol",
            found=repr(rtol),
        )
    return float(rtol)


def check_tolerance(tolerance: float | None) -> float | None:
    """Return the tolerance as a float, or None for the default; refuse what is no tolerance.

    Raises
    ------
    ToleranceError
        When it is negative, not finite, or no real number.
    """
    if tolerance is None:
        return None
    if isinstance(tolerance, bool) or not isinstance(tolerance, (int, float)):
        raise ToleranceError(
            f"tolerance is {tolerance!r}; wanted a non-negative number, or None for the default"
        )
    value = float(tolerance)
    if not math.isfinite(value) or value < 0.0:
        raise ToleranceError(
            f"tolerance is {tolerance!r}; wanted a finite number that is not negative. Pass None "
            "for the default"
        )
    return value


def default_tolerance(order: int) -> float:
    """Return the tolerance used when none is given: ``order * 2**-32``."""
    return max(order, 1) * DEFAULT_FACTOR


def digits_tolerance(order: int, digits: int) -> Fraction:
    """Return the default tolerance of the multiprecision path: ``order * 10**-(digits // 2)``.

    A number is lost on two sides: rounding noise is amplified as the reduction goes on, and what
    is really there may be small. Half of the digits is left to each, so that doubling the digits
    makes room on both. Measured at 30, 50 and 100 digits on 112 models of 5 to 20 states with a
    planted hidden part (dense; diagonal with close or stiff eigenvalues; weakly coupled chains;
    companion forms of consecutive integers): 4, 2 and 0 wrong orders, all of them stiff, where
    noise grew by up to 1e14; with two thirds of the digits 5, 2 and 0, with three quarters 14, 4
    and 2. At 30 states noise grew by up to 1e27, and chains hold values down to 1e-26.
    """
    return max(order, 1) * Fraction(1, 10 ** int(SHARE_OF_DIGITS * digits))


def cutoff(order: int, scale: float, tolerance: float | None) -> float:
    """Return the number below which a singular value counts as zero.

    Parameters
    ----------
    order : int
        Number of states of the whole model.
    scale : float
        Frobenius norm of the whole scaled model.
    tolerance : float or None
        The caller's tolerance; None for the default.
    """
    return (default_tolerance(order) if tolerance is None else tolerance) * scale


def difference(first: _Number, second: _Number, roundoff: Any = UNIT_ROUNDOFF) -> _Number:
    """Return first - second, and zero where that is within the rounding of the two numbers.

    The rest of such a difference has no digit in common with what was meant, and a scaling would
    lift it to full size.
    """
    value = first - second
    return value if abs(value) > 4 * roundoff * max(abs(first), abs(second)) else 0 * value


def rounding_floor(order: int, scale: Any, roundoff: Any = UNIT_ROUNDOFF) -> Any:
    """Return the size below which a singular value is rounding noise: ``8 order eps scale``.

    The bound for a product of Householder transformations is a modest constant times
    ``order * eps`` (Higham, Accuracy and Stability of Numerical Algorithms, section 19.3); 8 is
    the heuristic part.
    """
    return FLOOR_FACTOR * max(order, 1) * roundoff * scale


def root_doubt(root: complex) -> float:
    """Return how far a root computed in doubles may lie from the true one.

    A root of multiplicity k is good to the k-th root of the rounding only; two is the guess for
    what is not known to be multiple.
    """
    return math.sqrt(UNIT_ROUNDOFF) * max(1.0, abs(root))
