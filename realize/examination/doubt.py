"""How far the accuracy of the data moves a mode, and what cannot be told for it."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import dataclass, replace
from typing import Any, Final

import numpy as np
import scipy.linalg

from realize.errors import EntryError
from realize.model.realization import Kind, Realization
from realize.results import Mode
from realize.stability import Stability, root_counts
from realize.tolerance import UNIT_ROUNDOFF, rounding_floor
from realize.within.box import doubles_above, in_doubles

__all__ = ["with_doubt"]

Array = np.ndarray[Any, Any]

_ALLOWANCE: Final = 2.0
"""Factor on a first-order bound."""


def with_doubt(
    modes: Iterable[Mode],
    model: Realization,
    basis: str,
    radii: Array | None = None,
    exactly: bool = True,
) -> tuple[Mode, ...]:
    """Return modes with their sensitivity, and "cannot tell" where the data cannot tell.

    ``radii``: how far each entry of A may lie from the number given; None where no uncertainty
    was given, and then an entry is good to one ulp. ``exactly``: the modes are more than computed
    in doubles; others had their doubt when they were computed.

    The exact verdict on stability is about one exact model. A model with floats stands for all
    within the accuracy of its data: the uncertainty, where one was given; half a unit in the last
    place of each entry when its own reading leads; the rounding floor of the whole when a nearby
    model does. A mode that lies off the boundary by less than that can move it has no sign. A
    mode exactly on the boundary keeps its verdict: that is structure, not noise. Rational models
    have such doubt only where an uncertainty was given.

    Notes
    -----
    First-order bound |y|' E |x| / |y' x| for the change of an eigenvalue with left and right
    vectors y and x (Stewart and Sun, Matrix Perturbation Theory, section IV.2), and for the
    doubt never more than the square root that a double eigenvalue moves by.
    """
    found = tuple(modes)
    if not found:
        return found
    try:
        A = in_doubles(model.A)
    except EntryError:
        # Entries beyond doubles: no mode of theirs can be followed in doubles.
        return found
    period = model.sampling_period
    # In a unit that keeps squares within doubles.
    shift = max(math.frexp(float(np.abs(A).max(initial=0.0)))[1], -1000)
    A = np.ldexp(A, -shift)
    unit = math.ldexp(1.0, -shift)
    data = UNIT_ROUNDOFF * np.abs(A) if radii is None else np.ldexp(doubles_above(radii), -shift)
    norm = float(np.linalg.norm(A))
    spectrum = _Spectrum(*scipy.linalg.eig(A, left=True, right=True))
    found = tuple(
        replace(mode, sensitivity=_unscaled(spectrum.reach(mode.value * unit, data), shift))
        for mode in found
    )
    if not exactly or (model.kind is not Kind.FLOATING and radii is None):
        return found
    if radii is None and basis == "nearest":
        data = np.full(A.shape, rounding_floor(model.order, norm) / model.order)
    with np.errstate(all="ignore"):
        largest = _ALLOWANCE * math.sqrt(float(np.linalg.norm(data)) * norm)
    return tuple(
        replace(mode, stability=Stability.CANNOT_TELL)
        if mode.stability in (Stability.STABLE, Stability.UNSTABLE)
        and not _on_boundary(mode, period)
        and abs(_margin(mode.value, period)) * unit
        <= min(largest, _ALLOWANCE * spectrum.reach(mode.value * unit, data))
        else mode
        for mode in found
    )


@dataclass(frozen=True, slots=True, eq=False)
class _Spectrum:
    """Eigenvalues with left and right vectors."""

    values: Array
    left: Array
    right: Array

    def reach(self, value: complex, data: Array) -> float:
        """Return how far the data can move the computed eigenvalue nearest to a value."""
        k = int(np.abs(self.values - value).argmin())
        y, x = np.abs(self.left[:, k]), np.abs(self.right[:, k])
        overlap = abs(np.vdot(self.left[:, k], self.right[:, k]))
        with np.errstate(all="ignore"):
            # Radii may be infinite, and then the change is, or is none that doubles can tell.
            change = float(y @ data @ x)
        return change / overlap if change < overlap * 1e300 else math.inf


def _unscaled(size: float, shift: int) -> float:
    try:
        return math.ldexp(size, shift)
    except OverflowError:
        return math.inf


def _margin(value: complex, period: Any) -> float:
    """Return how far a computed value lies off the boundary."""
    return value.real if period is None else abs(value) - 1.0


def _on_boundary(mode: Mode, period: Any) -> bool:
    """Whether the mode, an exact root, lies exactly on the boundary: counted, not computed."""
    return mode.polynomial is not None and root_counts(mode.polynomial, period).boundary > 0
