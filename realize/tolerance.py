"""The only cutoff rule: when the floating path calls a number zero.

Every rank decision of the floating path compares singular values with one number,
``cutoff = tolerance * scale``, fixed before the first decision. The scale is the Frobenius norm of
the whole scaled model ``[A B; C 0]``, never of the block at hand: cutoffs scaled by the current
block lose to cutoffs scaled by the whole problem, because the blocks shrink as the reduction goes
on while the rounding errors do not.

The default is a heuristic, and it is part of the interface. Factors between 1e3 and 1e10 times
``order * eps`` decide alike on well separated models; 2**-32 lies in the middle of that range on a
logarithmic scale.
"""

from __future__ import annotations

import math
from typing import Final

from realize.errors import ToleranceError

__all__ = [
    "DEFAULT_FACTOR",
    "FLOOR_FACTOR",
    "check_tolerance",
    "cutoff",
    "default_tolerance",
    "difference",
    "rounding_floor",
]

DEFAULT_FACTOR: Final = 2.0**-32
"""Default tolerance for each state; the default tolerance is the order times this."""

FLOOR_FACTOR: Final = 8.0
"""Rounding noise for each state, in units of the roundoff."""

UNIT_ROUNDOFF: Final = 2.0**-52
"""Spacing of the doubles next to 1."""


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
            f"tolerance is {tolerance!r}; wanted a non-negative number, or None for the default "
            "(order * 2**-32)"
        )
    value = float(tolerance)
    if not math.isfinite(value) or value < 0.0:
        raise ToleranceError(
            f"tolerance is {tolerance!r}; wanted a finite number that is not negative. Pass None "
            "for the default (order * 2**-32)"
        )
    return value


def default_tolerance(order: int) -> float:
    """Return the tolerance used when none is given: ``order * 2**-32``."""
    return max(order, 1) * DEFAULT_FACTOR


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


def difference(first: float, second: float) -> float:
    """Return first - second, and zero where that is within the rounding of the two numbers.

    The rest of such a difference has no digit in common with what was meant, and a scaling would
    lift it to full size.
    """
    value = first - second
    return value if abs(value) > 4.0 * UNIT_ROUNDOFF * max(abs(first), abs(second)) else 0.0


def rounding_floor(order: int, scale: float) -> float:
    """Return the size below which a singular value is rounding noise: ``8 order eps scale``.

    The bound for a product of Householder transformations is a modest constant times
    ``order * eps`` (Higham, Accuracy and Stability of Numerical Algorithms, section 19.3); 8 is
    the heuristic part.
    """
    return FLOOR_FACTOR * max(order, 1) * UNIT_ROUNDOFF * scale
