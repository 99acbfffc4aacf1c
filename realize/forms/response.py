"""How much a reduction changes the frequency response."""

from __future__ import annotations

import cmath
import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
import scipy.linalg

from realize.model.realization import Realization
from realize.results import ResponseChange

__all__ = ["Factored", "dropping_change", "response_change"]

Array = np.ndarray[Any, Any]

_GRID: Final = 400
"""Frequencies of the coarse search."""

_PEAKS: Final = 4
"""How many of its highest points are refined."""


def response_change(model: Realization, reduced: Realization) -> ResponseChange:
    """Return the largest change of the frequency response, in the 2-norm, and where it is.

    Searched on a grid around the magnitudes of all poles, zero frequency and the far end
    included, then refined about the highest points. A search, so the true maximum can only be
    larger; and where the change is nothing but rounding, its size is that of the rounding.

    Parameters
    ----------
    model, reduced : Realization, floating, with the same inputs, outputs and sampling period.
    """
    with np.errstate(all="ignore"):
        return _searched(model, reduced)


def _searched(model: Realization, reduced: Realization) -> ResponseChange:
    period = model.sampling_period
    if not model.input_count or not model.output_count:
        return ResponseChange(size=0.0, relative=0.0, frequency=0.0)
    first, second = _Response(model), _Response(reduced)
    grid = _frequencies(first.poles, None if period is None else float(period))

    def change(frequency: float) -> float:
        point = first.beside(second.beside(_point(frequency, period)))
        return _norm(first.at(point) - second.at(point))

    def size(frequency: float) -> float:
        return _norm(first.at(first.beside(_point(frequency, period))))

    return _highest_of(
        change, grid, np.array([change(w) for w in grid]), size, np.array([size(w) for w in grid])
    )


def _highest_of(
    change: Callable[[float], float],
    grid: Array,
    changes: Array,
    size: Callable[[float], float],
    sizes: Array,
) -> ResponseChange:
    """Return where a change is largest, about the highest points of a grid of frequencies."""
    largest, where = float(changes.max()), float(grid[int(changes.argmax())])
    for k in np.argsort(changes)[::-1][:_PEAKS]:
        low, high = grid[max(k - 1, 0)], grid[min(k + 1, len(grid) - 1)]
        frequency, value = _highest(change, float(low), float(high))
        if value > largest:
            largest, where = value, frequency
    whole = max(float(sizes.max()), size(where))
    return ResponseChange(
        size=largest,
        relative=largest / whole if whole else 0.0,
        frequency=where,
    )


@dataclass(frozen=True, slots=True)
class Factored:
    """gain * product(s - zeros) / product(s - poles)."""

    gain: float
    zeros: Array
    poles: Array

    def at(self, points: Array) -> Array:
        """Return the values; factors are paired, so that products stay in range."""
        paired = min(self.zeros.size, self.poles.size)
        above, below = points[:, None] - self.zeros, points[:, None] - self.poles
        value = self.gain * np.prod(above[:, :paired] / below[:, :paired], axis=1)
        rest = np.prod(above[:, paired:], axis=1) / np.prod(below[:, paired:], axis=1)
        return np.asarray(value * rest)


def dropping_change(
    whole: Factored, kept: Factored, dropped: Factored | None, period: Any
) -> ResponseChange:
    """Return how much a fraction changes on the frequency axis when factors are dropped.

    Parameters
    ----------
    whole, kept : Factored
        The fraction before and after.
    dropped : Factored or None
        What was dropped, whole = kept * dropped. Then the gain of what is kept is that of the
        whole at infinity, or at zero frequency, whichever changes less, and the change is computed
        without cancellation. None: kept is compared as it is.
    period : number or None
        None for continuous time.
    """
    if dropped is not None:
        margins = dropped.poles.real if period is None else np.abs(dropped.poles) - 1.0
        if (margins == 0.0).any():
            on = complex(dropped.poles[margins == 0.0][0])
            where = on.imag if period is None else cmath.phase(on) / float(period)
            return ResponseChange(size=math.inf, relative=math.inf, frequency=abs(where))
    grid = _frequencies(whole.poles, None if period is None else float(period))

    def points(frequencies: Array) -> Array:
        found = np.array([_point(float(w), period) for w in frequencies])
        on = (found[:, None] == whole.poles).any(axis=1)
        return np.where(on, found + 1e-9 * np.maximum(np.abs(found), 1e-300), found)

    def sizes(frequencies: Array) -> Array:
        return _finite(whole.at(points(frequencies)))

    def changes(frequencies: Array, factor: float) -> Array:
        at = points(frequencies)
        if dropped is None:
            return _finite(whole.at(at) - kept.at(at))
        below = np.prod(at[:, None] - dropped.poles, axis=1)
        moved = np.prod(at[:, None] - dropped.zeros, axis=1) - factor * below
        return _finite(kept.at(at) * (moved / below))

    def found(factor: float) -> ResponseChange:
        return _highest_of(
            lambda w: float(changes(np.array([w]), factor)[0]),
            grid,
            changes(grid, factor),
            lambda w: float(sizes(np.array([w]))[0]),
            sizes(grid),
        )

    factors = [1.0]
    with np.errstate(all="ignore"):
        if dropped is not None:
            level = float(dropped.at(np.array([0.0 if period is None else 1.0]))[0].real)
            if math.isfinite(level) and level:
                factors.append(level)
        return min(map(found, factors), key=lambda each: each.size)


def _finite(values: Array) -> Array:
    """Return the moduli; 0.0 where doubles do not reach, so that it is passed over."""
    sizes = np.abs(values)
    return np.where(np.isfinite(sizes), sizes, 0.0)


class _Response:
    """G(s) by a triangular solve for each point, after one Schur decomposition."""

    def __init__(self, model: Realization) -> None:
        self.D = model.D
        self.poles: Array = np.zeros(0, dtype=complex)
        if not model.order:
            return
        self.triangle, unitary = scipy.linalg.schur(model.A, output="complex")
        self.B, self.C = unitary.conj().T @ model.B, model.C @ unitary
        self.poles = np.diagonal(self.triangle)

    def beside(self, point: complex) -> complex:
        """Return the point, or one beside it where the response is infinite."""
        if np.any(self.poles == point):
            return point + 1e-9 * max(abs(point), float(np.abs(self.poles).max()), 1e-300)
        return point

    def at(self, point: complex) -> Array:
        if not self.poles.size:
            return np.asarray(self.D, dtype=complex)
        shifted = -self.triangle
        diagonal = np.einsum("ii->i", shifted)
        diagonal += point
        return np.asarray(self.C @ scipy.linalg.solve_triangular(shifted, self.B) + self.D)


def _point(frequency: float, period: Any) -> complex:
    if period is None:
        return complex(0.0, frequency)
    angle = frequency * float(period)
    return complex(math.cos(angle), math.sin(angle))


def _frequencies(poles: Array, period: float | None) -> Array:
    """Return frequencies where something may happen, in radians per unit of time."""
    if period is not None:
        with np.errstate(divide="ignore"):
            angles = np.abs(np.angle(poles))
        spread = np.concatenate([np.linspace(0.0, math.pi, _GRID), angles])
        return np.unique(spread) / period
    sizes = np.abs(poles)
    sizes = np.clip(sizes[sizes > 0.0], 1e-290, 1e290)
    low, high = (sizes.min() / 100.0, sizes.max() * 100.0) if sizes.size else (1e-2, 1e2)
    return np.unique(
        np.concatenate([[0.0], np.geomspace(low, high, _GRID), np.abs(poles.imag), sizes])
    )


def _highest(f: Any, low: float, high: float) -> tuple[float, float]:
    """Return the highest point found by golden section between two frequencies."""
    ratio = (math.sqrt(5.0) - 1.0) / 2.0
    a, b = high - ratio * (high - low), low + ratio * (high - low)
    fa, fb = f(a), f(b)
    for _ in range(40):
        if fa > fb:
            high, b, fb = b, a, fa
            a = high - ratio * (high - low)
            fa = f(a)
        else:
            low, a, fa = a, b, fb
            b = low + ratio * (high - low)
            fb = f(b)
    return (a, fa) if fa > fb else (b, fb)


def _norm(M: Array) -> float:
    """Return the 2-norm; 0.0 where doubles do not reach, so that it is passed over."""
    if not M.size or not np.isfinite(M).all():
        return 0.0
    return float(np.linalg.norm(M, 2))
