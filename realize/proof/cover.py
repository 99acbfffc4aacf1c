"""A covering of the plane by squares that shows a distance to uncontrollability from below.

What makes a square enough is in `realize.checker`, paragraph 6. Here doubles choose the squares;
nothing depends on their being right but whether the checker says yes.
"""

from __future__ import annotations

import math
from fractions import Fraction
from typing import Any, Final

import numpy as np

from realize.nearness.pencil import ROUNDOFF, Pencil

__all__ = ["radius", "squares"]

Array = np.ndarray[Any, Any]

_SPARE: Final = 2.0**-6
"""Share of upper^2 - lower^2 that the checker's integers may take; see its `semidefinite`."""

_SMALLEST: Final = 2.0**-6
"""Squares are not cut once r^2 is below this share of it: what is left will not close."""

_TOGETHER: Final = 2**19
"""Entries of the matrices that are decomposed in one call."""


def radius(pencil: Pencil, lower: Fraction) -> Fraction:
    """Return R >= lower + |A|, of few bits, in the user's units."""
    size = float(lower * pencil.unit) + 1.0001 * float(np.linalg.norm(pencil.A))
    size += pencil.slack + 2.0**-40
    step = 2.0 ** (math.frexp(size)[1] - 4)
    return Fraction(math.ceil(size / step) * step) / pencil.unit


def squares(
    pencil: Pencil, lower: Fraction, upper: Fraction, radius: Fraction, most: int
) -> list[str] | None:
    """Return the squares level by level, "x" for one that is cut in four; None if too many.

    Parameters
    ----------
    pencil : Pencil
    lower, upper, radius : Fraction
        The bounds and R, in the user's units.
    most : int
        How many squares at most.
    """
    low, high, side = (float(value * pencil.unit) for value in (lower, upper, radius))
    room = high**2 - low**2
    xs, ys = np.array([-1.0, 0.0]), np.zeros(2)
    words: list[str] = []
    closed = 0
    while len(xs):
        corners = (xs + 1j * ys)[:, None] + np.array([0, 1j, 1, 1 + 1j])
        places, where = np.unique(corners, return_inverse=True)
        needed = low**2 + side**2 / 2 + _SPARE * room
        values = _square_below(pencil, places * side)[where.reshape(corners.shape)]
        cut = values.min(axis=1) < needed
        closed += int((~cut).sum())
        left = int(cut.sum())
        if closed + 4 * left > most or (left and side**2 < _SMALLEST * room):
            return None
        words.append("".join(".x"[each] for each in cut.tolist()))
        xs = (2 * xs[cut][:, None] + np.array([0, 0, 1, 1])).ravel()
        ys = (2 * ys[cut][:, None] + np.array([0, 1, 0, 1])).ravel()
        side /= 2
    return words


def _square_below(pencil: Pencil, places: Array) -> Array:
    """Return the square of the least singular value of M at places, less what doubles may err."""
    n, m = pencil.order, pencil.inputs
    doubt = 16 * (n + m) * ROUNDOFF * (pencil.size + np.abs(places)) + pencil.slack
    found = np.empty(len(places))
    step = max(1, _TOGETHER // (n * (n + m)))
    pair = np.hstack([pencil.A, pencil.B]).astype(complex)
    for start in range(0, len(places), step):
        part = places[start : start + step]
        stack = np.repeat(pair[None], len(part), axis=0)
        np.einsum("kii->ki", stack[:, :, :n])[...] -= part[:, None]
        found[start : start + step] = np.linalg.svd(stack, compute_uv=False)[:, -1]
    return np.asarray(np.maximum(found - doubt, 0.0) ** 2)
