"""From a change found in doubles to an exact model that hides the modes exactly.

Points become rational numbers, or the coefficients of a rational quadratic; vectors become
rational, and exactly such that columns without uncertainty need no change; then the changes of the
other columns are solved for exactly. For one real mode the least changes are known in closed form
(Oettli and Prager 1964, Numer. Math. 6): column j of u' (M + D) = 0 can be met with |D| <= t R if
and only if |u' M|_j <= t (|u|' R)_j, and then by D_ij = -(u' M)_j sign(u_i) R_ij / (|u|' R)_j.
Otherwise the changes found are kept, but for as many as there are equations.
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any, Final

import numpy as np
import scipy.linalg

from realize.arithmetic.rational import RationalMatrix
from realize.model.realization import Realization
from realize.results import Side
from realize.within.box import Box, InDoubles
from realize.within.search import Found, Hidden

__all__ = ["Witness", "exactly"]

Array = np.ndarray[Any, Any]

_ZERO: Final = Fraction(0)

_ROUNDINGS: Final = ((1, 16), (60, 24), (10**4, 30), (10**7, 40), (None, 53), (None, 106))
"""Largest denominator of a point, and bits of a vector: short numbers first, where they serve."""

_NEAR: Final = Fraction(1, 10**7)
"""How far a short point may lie from the one found, relative to the norm of A."""

_NOTHING: Final = (1e-6, 1e-10)
"""Components of a vector below this share of the largest count as zero, tried in turn.

Linear programs leave noise of about 1e-8, which exact equations would take at its word."""

_SAME: Final = 1e-6
"""Relative difference up to which two points are one mode, hidden from both sides."""

_ROOMY: Final = 16
"""Size of a component of a vector, its largest 1, as far as there is room to move it."""

_WORSE: Final = 1.001
"""Factor on the factor found up to which a rounding counts as serving."""


@dataclass(frozen=True, slots=True, eq=False)
class Witness:
    """An exact model that hides modes exactly.

    Attributes
    ----------
    model : Realization
    factor : Fraction
        Its largest change, over the radius of the entry.
    changes : tuple of object arrays of Fraction
        Of A, B and C.
    """

    model: Realization
    factor: Fraction
    changes: tuple[Array, Array, Array]


@dataclass(frozen=True, slots=True, eq=False)
class _Rows:
    """Rows W with W (A + dA) = L W and W (B + dB) = 0, in the orientation of one side.

    ``change`` is [dA, dB], settled for the columns that the rows were fitted to, a start for the
    others.
    """

    side: Side
    W: Array
    L: Array
    change: Array


def exactly(box: Box, doubles: InDoubles, found: Found, wanted: float) -> Witness | None:
    """Return an exact model with the modes hidden, or None where roundings do not lead to one.

    The first rounding whose factor does not exceed ``wanted``, or hardly exceeds the one found.
    """
    best: Witness | None = None
    start = _placed(box, doubles, found)
    sides = [side for side in Side if any(mode.side is side for mode in found.modes)]
    for nothing, (denominator, bits) in itertools.product(_NOTHING, _ROUNDINGS):
        rows: list[_Rows] = []
        for side in sides:
            modes = [mode for mode in found.modes if mode.side is side]
            others = [mode.point for mode in found.modes if mode.side is not side]
            apart = all(abs(m.point - p) > _SAME * abs(p) for m in modes for p in others)
            beside = rows[0].W if rows and apart else np.empty((0, box.centre.order), dtype=object)
            change = _turned(side, *start)
            exact = _rows(box, doubles, modes, change, beside, denominator, bits, nothing)
            if exact is None:
                break
            rows.append(exact)
        if len(rows) < len(sides):
            continue
        witness = _solved(box, rows, start)
        if witness is None:
            continue
        if best is None or witness.factor < best.factor:
            best = witness
        if best.factor <= wanted or best.factor <= _WORSE * found.factor:
            break
    return best


def _oriented(box: Box, side: Side) -> tuple[Array, Array]:
    """Return [A, B] and radii, transposed for side "output"."""
    radii = box.radii
    return _turned(side, *box.centre.matrices()[:3]), _turned(side, radii.A, radii.B, radii.C)


def _turned(side: Side, A: Array, B: Array, C: Array) -> Array:
    """Return [A, B], or [A', C'] for side "output"."""
    return np.hstack([A, B]) if side is Side.INPUT else np.hstack([A.T, C.T])


def _short(exact: Fraction, denominator: int | None, allowed: Fraction) -> Fraction | None:
    """Return a fraction with a short denominator, if one is near; None for any length."""
    if denominator is None:
        return exact
    near = exact.limit_denominator(denominator)
    return near if abs(near - exact) <= allowed else None


def _rows(
    box: Box,
    doubles: InDoubles,
    modes: Sequence[Hidden],
    change: Array,
    beside: Array,
    denominator: int | None,
    bits: int,
    nothing: float,
) -> _Rows | None:
    """Return rational rows for the modes of one side; None where no short points are near.

    All rows must agree with each column. One with fewer uncertain entries than there are rows
    leaves them no choice, and they are fitted to it; with it its changes. Left vectors and right
    ones of different modes are orthogonal: ``beside`` holds those of the other side.
    """
    side = modes[0].side
    units = doubles.states if side is Side.OUTPUT else -doubles.states
    depth = sum(mode.count for mode in modes)
    L = np.full((depth, depth), _ZERO, dtype=object)
    targets: list[Array] = []
    for mode in modes:
        unit = Fraction(2) ** doubles.time
        x, y = (part * unit for part in mode.exact_point)
        allowed = _NEAR * unit * Fraction(max(float(np.linalg.norm(doubles.A)), abs(mode.point)))
        shown = (np.abs(mode.vector) > nothing * np.abs(mode.vector).max()).astype(object)
        p, q = (part * shown for part in mode.exact_vector)
        at = len(targets)
        if mode.is_real:
            point = _short(x, denominator, allowed)
            if point is None:
                return None
            L[at, at] = point
            targets.append(p)
            continue
        first = _short(-2 * x, denominator, allowed)
        last = _short(x * x + y * y, denominator, allowed * Fraction(abs(mode.point)) * unit)
        if first is None or last is None:
            return None
        # Rows p and r with p A = r and r A = -last p - first r.
        L[at, at + 1], L[at + 1, at], L[at + 1, at + 1] = Fraction(1), -last, -first
        targets += [p, x * p - y * q]
    # Rounded to few bits in scaled units, where the components are comparable.
    W = _table(
        [
            [
                _bits(value, bits) * Fraction(2) ** int(unit)
                for value, unit in zip(row.tolist(), units, strict=True)
            ]
            for row in targets
        ]
    )
    matrix, radius = _oriented(box, side)
    carried = np.abs(W).sum(axis=0)[:, None] * radius != 0
    tight = [j for j in range(matrix.shape[1]) if carried[:, j].sum() < depth]
    rows = _Rows(side, W, L, change)
    # What no change can help first: components that are held later must fit it already.
    rigid = [j for j in tight if not carried[:, j].any()]
    for columns in (rigid, tight):
        if (columns or len(beside)) and (columns is rigid or len(rigid) < len(tight)):
            fitted = _fitted(rows, matrix, radius, columns, beside, units)
            if fitted is None:
                return None
            rows = fitted
    return rows


def _bits(value: Fraction, bits: int) -> Fraction:
    """Return a number rounded to about so many binary digits."""
    if not value:
        return _ZERO
    exponent = value.numerator.bit_length() - value.denominator.bit_length()
    unit = Fraction(2) ** (exponent - bits)
    return round(value / unit) * unit


def _table(rows: Sequence[Sequence[Fraction]]) -> Array:
    result = np.empty((len(rows), len(rows[0])), dtype=object)
    for i, row in enumerate(rows):
        result[i] = row
    return result


def _fitted(
    rows: _Rows,
    matrix: Array,
    radius: Array,
    tight: Sequence[int],
    beside: Array,
    units: Array,
) -> _Rows | None:
    """Return rows nearby, and changes of tight columns, that meet the equations of these exactly.

    The rows come out orthogonal to those ``beside`` them.

    Where such a column has uncertain entries, the components of the rows that they multiply stay
    as they are; then the equations are linear in the other components and in the changes.
    """
    W, L = rows.W, rows.L
    depth, n = W.shape
    support = [k for k in range(n) if W[:, k].any()]
    held = {i for i in support for j in tight if radius[i, j]}
    free = [k for k in support if k not in held]
    moved = [(i, j) for j in tight for i in support if radius[i, j]]
    place = {(d, k): at for at, (d, k) in enumerate((d, k) for d in range(depth) for k in free)}
    first_change = len(place)
    equations, wanted = [], []
    for j in tight:
        for d in range(depth):
            # Row d of W (M + change) - L W in column j, apart from what is held.
            row, right = [_ZERO] * (first_change + len(moved)), _ZERO
            for k in support:
                if (d, k) in place:
                    row[place[d, k]] += matrix[k, j]
                else:
                    right -= W[d, k] * matrix[k, j]
            if j in support:
                for e in range(depth):
                    if (e, j) in place:
                        row[place[e, j]] -= L[d, e]
                    else:
                        right += L[d, e] * W[e, j]
            for at, (i, column) in enumerate(moved):
                if column == j:
                    row[first_change + at] += W[d, i]
            equations.append(row)
            wanted.append(right)
    for other in beside:
        for d in range(depth):
            row = [_ZERO] * (first_change + len(moved))
            for k in free:
                row[place[d, k]] = other[k]
            equations.append(row)
            wanted.append(-sum((W[d, k] * other[k] for k in held), _ZERO))
    if not place and not moved:
        return rows if not any(wanted) else None
    start = [W[d, k] for d, k in place] + [rows.change[i, j] for i, j in moved]
    size = [Fraction(2) ** int(units[k]) * _ROOMY for _, k in place]
    solved = _near(
        _table(equations),
        np.array(wanted, dtype=object),
        np.array(size + [radius[i, j] for i, j in moved], dtype=object),
        np.array(start, dtype=object),
    )
    if solved is None:
        return None
    fitted, change = W.copy(), rows.change.copy()
    for (d, k), at in place.items():
        fitted[d, k] = solved[at]
    for at, (i, j) in enumerate(moved):
        change[i, j] = solved[first_change + at]
    if not all(row.any() for row in fitted):
        return None
    return _Rows(rows.side, fitted, L, change)


def _solved(box: Box, rows: Sequence[_Rows], start: tuple[Array, ...]) -> Witness | None:
    """Return the model changed so that all rows hold exactly, with changes near those found."""
    n = box.centre.order
    radii = (box.radii.A, box.radii.B, box.radii.C)
    if len(rows) == 1:
        side, W = rows[0].side, rows[0].W
        matrix, radius = _oriented(box, side)
        wanted = -(W @ matrix)
        wanted[:, :n] += rows[0].L @ W
        solved = rows[0].change.copy()
        for j in range(matrix.shape[1]):
            if len(W) == 1:
                column = _least(W[0], wanted[0, j], radius[:, j])
            else:
                column = _near(W, wanted[:, j], radius[:, j], solved[:, j])
            if column is None:
                return None
            solved[:, j] = column
        nothing = [np.full(radius.shape, _ZERO, dtype=object) for radius in radii]
        if side is Side.INPUT:
            changes = (solved[:, :n].copy(), solved[:, n:].copy(), nothing[2])
        else:
            changes = (solved[:, :n].T.copy(), nothing[1], solved[:, n:].T.copy())
    else:
        together = _solve_together(box, rows, radii, start)
        if together is None:
            return None
        changes = together
    model = box.moved(changes)
    _assert_hidden(model, rows)
    ratios = [
        abs(change) / radius
        for matrix, radius_of in zip(changes, radii, strict=True)
        for change, radius in zip(matrix.flat, radius_of.flat, strict=True)
        if radius
    ]
    return Witness(model, max(ratios, default=_ZERO), changes)


def _placed(box: Box, doubles: InDoubles, found: Found) -> tuple[Array, Array, Array]:
    """Return the changes found, exact and in the places of their entries."""
    placed, at = [], 0
    exact = (box.radii.A, box.radii.B, box.radii.C)
    for radius, in_units in zip(exact, doubles.radii, strict=True):
        change = np.full(radius.shape, _ZERO, dtype=object)
        for place in np.argwhere(in_units > 0).tolist():
            change[tuple(place)] = Fraction(float(found.shares[at])) * radius[tuple(place)]
            at += 1
        placed.append(change)
    return placed[0], placed[1], placed[2]


def _least(u: Array, wanted: Fraction, radius: Array) -> Array | None:
    """Return the smallest change of one column, in shares of its radii."""
    if not wanted:
        return np.full(len(u), _ZERO, dtype=object)
    weight = (np.abs(u) * radius).sum()
    if not weight:
        return None
    share = wanted / weight
    return np.array(
        [share * r * (1 if x > 0 else -1) if x else _ZERO for x, r in zip(u, radius, strict=True)],
        dtype=object,
    )


def _near(K: Array, wanted: Array, radius: Array, start: Array) -> Array | None:
    """Return a solution of K x = wanted near a start; None when there is none.

    x is zero where the radius is. As many components as there are independent equations are
    solved for, those with most room first; the others stay.
    """
    open_places = [i for i in range(len(radius)) if radius[i]]
    x = np.full(len(radius), _ZERO, dtype=object)
    x[open_places] = start[open_places]
    if not open_places:
        return x if not any(wanted) else None
    room = [max(1.0 - float(abs(x[i]) / radius[i]), 1e-6) for i in open_places]
    weighted = np.array(
        [
            [
                _to_float(row[i] * radius[i]) * space
                for i, space in zip(open_places, room, strict=True)
            ]
            for row in K.tolist()
        ]
    )
    heights = np.abs(weighted).max(axis=1, keepdims=True)
    weighted = weighted / np.where(heights > 0, heights, 1.0)
    order = scipy.linalg.qr(weighted, mode="r", pivoting=True)[1]
    chosen = [open_places[k] for k in order.tolist()]
    rest = wanted - K @ x
    table = np.hstack([K[:, chosen], rest[:, None]])
    reduced, rank = RationalMatrix.from_array(table).matrix.rref()
    solved = RationalMatrix(reduced).to_array()
    for r in range(rank):
        pivot = next(c for c in range(len(chosen) + 1) if solved[r, c])
        if pivot == len(chosen):
            return None
        x[chosen[pivot]] += solved[r, -1]
    return x


def _to_float(value: Fraction) -> float:
    try:
        return float(value)
    except OverflowError:
        return math.copysign(1e300, value)


def _solve_together(
    box: Box, rows: Sequence[_Rows], radii: tuple[Array, ...], start: tuple[Array, ...]
) -> tuple[Array, Array, Array] | None:
    """Solve for all changes at once, where both sides hide modes and share the change of A."""
    changes = tuple(np.full(radius.shape, _ZERO, dtype=object) for radius in radii)
    places = [
        (which, i, j)
        for which, radius in enumerate(radii)
        for (i, j), value in np.ndenumerate(radius)
        if value
    ]
    number = {place: at for at, place in enumerate(places)}
    equations, wanted = [], []
    for equation, value in _equations(box, rows):
        line = [_ZERO] * len(places)
        for place, coefficient in equation:
            if place in number:
                line[number[place]] += coefficient
        equations.append(line)
        wanted.append(value)
    if not places:
        return None
    found = _near(
        _table(equations),
        np.array(wanted, dtype=object),
        np.array([radii[which][i, j] for which, i, j in places], dtype=object),
        np.array([start[which][i, j] for which, i, j in places], dtype=object),
    )
    if found is None:
        return None
    for (which, i, j), value in zip(places, found, strict=True):
        changes[which][i, j] = value
    return changes[0], changes[1], changes[2]


_Term = tuple[tuple[int, int, int], Fraction]


def _equations(box: Box, rows: Sequence[_Rows]) -> Iterator[tuple[list[_Term], Fraction]]:
    """Give each equation: what multiplies which entry's change, and the right side."""
    n = box.centre.order
    for each in rows:
        matrix, _ = _oriented(box, each.side)
        wanted = -(each.W @ matrix)
        wanted[:, :n] += each.L @ each.W
        other = 1 if each.side is Side.INPUT else 2
        for (k, j), value in np.ndenumerate(wanted):
            which, column = (0, j) if j < n else (other, j - n)
            terms = []
            for i in range(n):
                if each.W[k, i]:
                    place = (i, column) if each.side is Side.INPUT else (column, i)
                    terms.append(((which, *place), each.W[k, i]))
            yield terms, value


def _assert_hidden(model: Realization, rows: Sequence[_Rows]) -> None:
    """Check, exactly, that the rows hide what they are to hide."""
    A, B, C = model.matrices()[:3]
    for each in rows:
        own_A, own_B = (A, B) if each.side is Side.INPUT else (A.T, C.T)
        left = each.W @ own_A - each.L @ each.W
        if left.any() or (each.W @ own_B).any() or not each.W.any():
            raise AssertionError("the changes solved for do not hide the modes")
