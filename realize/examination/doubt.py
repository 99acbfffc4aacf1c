"""Stability that the accuracy of the data cannot tell."""

from __future__ import annotations

import math
from collections.abc import Iterable
from dataclasses import replace
from typing import Any, Final

import numpy as np
import scipy.linalg

from realize.model.realization import Kind, Realization
from realize.results import Mode
from realize.stability import Stability, root_counts
from realize.tolerance import UNIT_ROUNDOFF, rounding_floor

__all__ = ["with_doubt"]

Array = np.ndarray[Any, Any]

_ALLOWANCE: Final = 2.0
"""Factor on a first-order bound."""


def with_doubt(modes: Iterable[Mode], model: Realization, basis: str) -> tuple[Mode, ...]:
    """Return modes, with "cannot tell" where the data reach across the boundary of stability.

    The exact verdict is about one exact model. A model with floats stands for all within the
    accuracy of its data: half a unit in the last place of each entry when its own reading leads,
    the rounding floor of the whole when a nearby model does. A mode that lies off the boundary
    by less than that can move it has no sign. A mode exactly on the boundary keeps its verdict:
    that is structure, not noise. Rational models have no such doubt.

    Notes
    -----
    First-order bound |y|' E |x| / |y' x| for the change of an eigenvalue with left and right
    vectors y and x (Stewart and Sun, Matrix Perturbation Theory, section IV.2), and never more
    than the square root that a double eigenvalue moves by.
    """
    found = tuple(modes)
    doubtful = (Stability.STABLE, Stability.UNSTABLE)
    if model.kind != Kind.FLOATING or not any(mode.stability in doubtful for mode in found):
        return found
    period = model.sampling_period
    # In a unit of time that keeps squares within doubles; the boundary |z| = 1 has none to choose.
    largest_entry = float(np.abs(model.A).max(initial=0.0))
    shift = max(math.frexp(largest_entry)[1], -1000) if period is None else 0
    A = np.ldexp(model.A, -shift)
    unit = math.ldexp(1.0, -shift)
    norm = float(np.linalg.norm(A))
    if basis == "nearest":
        accuracy = np.full(A.shape, rounding_floor(model.order, norm) / model.order)
    else:
        accuracy = UNIT_ROUNDOFF * np.abs(A)
    values, left, right = scipy.linalg.eig(A, left=True, right=True)
    largest = _ALLOWANCE * math.sqrt(float(np.linalg.norm(accuracy)) * norm)
    return tuple(
        replace(mode, stability=Stability.CANNOT_TELL)
        if mode.stability in doubtful
        and not _on_boundary(mode, period)
        and abs(_margin(mode.value * unit, period)) <= largest
        and abs(_margin(mode.value * unit, period))
        <= _reach(mode.value * unit, values, left, right, accuracy)
        else mode
        for mode in found
    )


def _margin(value: complex, period: Any) -> float:
    """Return how far a computed value lies off the boundary."""
    return value.real if period is None else abs(value) - 1.0


def _on_boundary(mode: Mode, period: Any) -> bool:
    """Whether the mode, an exact root, lies exactly on the boundary: counted, not computed."""
    return mode.polynomial is not None and root_counts(mode.polynomial, period).boundary > 0


def _reach(value: complex, values: Array, left: Array, right: Array, accuracy: Array) -> float:
    """Return how far the accuracy of the data can move the computed eigenvalue nearest a mode."""
    k = int(np.abs(values - value).argmin())
    y, x = np.abs(left[:, k]), np.abs(right[:, k])
    overlap = abs(np.vdot(left[:, k], right[:, k]))
    change = _ALLOWANCE * float(y @ accuracy @ x)
    return math.inf if overlap * 1e300 <= change else change / overlap
