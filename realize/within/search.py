"""The search for the smallest change, in shares of the radii, that hides given modes.

A mode at z is out of the inputs' reach in the model A + dA, B + dB when a left vector u has
u' (A + dA - z) = 0 and u' (B + dB) = 0; it is not seen when a right vector does the like with C.
With dA_ij = R_ij d_ij the smallest bound t on the sizes of all d_ij is wanted. The equations are
bilinear in the vectors, the points z and the changes; Newton's method on them, with a linear
program in each step for the least t, ends in a corner in few steps. Several modes, of both sides,
may be asked for at once: they share the change of A.

Nothing here is proved: what is found is made exact, and checked, elsewhere.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from typing import Any, Final

import numpy as np
import scipy.linalg
from scipy.sparse import coo_array

from realize.results import Side
from realize.within.box import InDoubles, in_doubles

__all__ = ["Found", "Hidden", "closest", "eigenvalues", "starts"]

Array = np.ndarray[Any, Any]

_STEPS: Final = 20
"""Newton steps at most."""

_SECONDS: Final = 5.0
"""Time for one linear program, which cannot be broken off otherwise."""

_FREE_STEPS: Final = 4
"""Steps before they are held back more and more: corners can take turns for ever."""

_CLOSED: Final = 1e-6
"""Share of the first residual below which the equations count as met."""

_SETTLED: Final = 1e-5
"""Relative change of the factor below which the steps end."""

_TURN: Final = 0.5
"""How far a vector, its largest component 1, and a point may move in one step."""

_LEAST_WEIGHT: Final = 1e-3
"""Weight of a column without uncertainty, relative to the one with most, when a search begins."""

_FINE: Final = 1e-6
"""Largest radius, relative to the norm of A, below which equations are evaluated exactly."""

_ON_AXIS: Final = 1e-7
"""Imaginary part, relative to the norm of A, below which a point is real."""


@dataclass(frozen=True, slots=True, eq=False)
class Hidden:
    """A mode to be hidden: from which side, where, and with which vector (scaled units).

    A real point and a real vector are one mode; others stand for a pair. The rests are what
    doubles do not hold of the point and of the vector.
    """

    side: Side
    point: complex
    vector: Array
    rest_of_point: complex = 0j
    rest_of_vector: Array | float = 0.0

    @property
    def exact_point(self) -> tuple[Fraction, Fraction]:
        """Real and imaginary part of the point, with its rest."""
        z, rest = complex(self.point), complex(self.rest_of_point)
        return Fraction(z.real) + Fraction(rest.real), Fraction(z.imag) + Fraction(rest.imag)

    @property
    def exact_vector(self) -> tuple[Array, Array]:
        """Real and imaginary parts of the vector, with its rest, as Fractions."""
        rest = self.rest_of_vector + np.zeros(len(self.vector))
        return (
            _fractions(self.vector.real) + _fractions(rest.real),
            _fractions(self.vector.imag) + _fractions(rest.imag),
        )

    def moved(self, point: complex, vector: Array) -> Hidden:
        """Return the mode with changes added, what is lost in doubles kept as rests."""
        point, vector = self.rest_of_point + point, self.rest_of_vector + vector
        new_point, new_vector = self.point + point, self.vector + vector
        return Hidden(
            self.side,
            complex(new_point),
            new_vector,
            complex((self.point - new_point) + point),
            (self.vector - new_vector) + vector,
        )

    @property
    def is_real(self) -> bool:
        """Whether it is one mode, and not a pair."""
        return not np.iscomplexobj(self.vector)

    @property
    def place(self) -> complex | float:
        """The point, a float where it is real."""
        return self.point.real if self.is_real else self.point

    @property
    def count(self) -> int:
        """How many modes it hides."""
        return 1 if self.is_real else 2


@dataclass(frozen=True, slots=True, eq=False)
class Found:
    """Modes and a change that hides them, nearly: ``factor`` times the radii suffices.

    ``shares`` are the changes over the radii, uncertain entries of A, B and C one after the
    other. ``weights`` say how much each radius counts: smaller by a small share of itself, it
    raises the factor by its weight times that share. They add up to 1.
    """

    modes: tuple[Hidden, ...]
    shares: Array
    factor: float
    weights: Array


def starts(box: InDoubles, side: Side, points: Sequence[complex]) -> list[tuple[float, Hidden]]:
    """Return hidden modes to begin from, with a measure of how far each is away, nearest first.

    At each point the singular vector that the columns with much uncertainty let go most easily;
    at points off the axis also its real neighbour.
    """
    pencil = box.pencil(side)
    n = pencil.order
    scale = max(float(np.linalg.norm(box.A)), 1e-300)
    weight = pencil.radius.sum(axis=0)
    weight = np.maximum(weight, _LEAST_WEIGHT * weight.max(initial=0.0))
    weight = weight / weight.max(initial=0.0) if weight.any() else np.ones(len(weight))
    found: list[tuple[float, Hidden]] = []
    places: list[complex] = []
    for point in points:
        real = abs(point.imag) <= _ON_AXIS * scale
        for place in (complex(point.real), None if real else complex(point.real, abs(point.imag))):
            if place is not None and not any(abs(place - p) <= 1e-6 * scale for p in places):
                places.append(place)
    for place in places:
        matrix = pencil.matrix - place * np.eye(*pencil.matrix.shape)
        if place.imag == 0:
            matrix = matrix.real
        U, s, _ = np.linalg.svd(matrix / weight)
        vector = U[:, n - 1].conj()
        found.append((float(s[n - 1]), Hidden(side, place, _levelled(vector))))
    return sorted(found, key=lambda pair: pair[0])


def closest(
    box: InDoubles, modes: Sequence[Hidden], wanted: float, late: Callable[[], bool]
) -> Found | None:
    """Return the nearest change found that hides the modes, or None when none was found.

    It stops early where a step shows that the modes are hidden with a factor well below
    ``wanted``, and when it is late.
    """
    found = _descend(box, modes, wanted, late)
    if found is None or all(mode.is_real or not _is_flat(box, mode) for mode in found.modes):
        return found
    # A pair that met on the axis is a real mode, which is sought as one.
    flat = [
        Hidden(mode.side, complex(mode.point.real), _levelled(mode.vector.real))
        if not mode.is_real and _is_flat(box, mode)
        else mode
        for mode in found.modes
    ]
    return _descend(box, flat, wanted, late)


def _is_flat(box: InDoubles, mode: Hidden) -> bool:
    return abs(mode.point.imag) <= _ON_AXIS * max(float(np.linalg.norm(box.A)), 1e-300)


def _descend(
    box: InDoubles, modes: Sequence[Hidden], wanted: float, late: Callable[[], bool]
) -> Found | None:
    program = _Program(box)
    if not program.count:
        return None
    current = Found(tuple(modes), np.zeros(program.count), np.inf, np.zeros(program.count))
    first = program.residual(current)
    best: Found | None = None
    for number in range(_STEPS):
        if late():
            return best
        if not first:
            # Nothing to be met: the centre hides them, to rounding.
            return replace(current, factor=0.0)
        stepped = program.step(current, _TURN * 2.0 ** min(0, _FREE_STEPS - number))
        if stepped is None:
            return best
        settled = abs(stepped.factor - current.factor) <= _SETTLED * stepped.factor
        closed = program.residual(stepped) <= _CLOSED * first
        current = stepped
        if closed and (best is None or current.factor < best.factor):
            best = current
        if closed and (settled or current.factor < 0.5 * wanted):
            break
    return best


class _Program:
    """The linear program of one step."""

    def __init__(self, box: InDoubles) -> None:
        self.box = box
        self.places = []
        at = 0
        for radius in box.radii:
            index = np.full(radius.shape, -1)
            uncertain = radius > 0
            index[uncertain] = np.arange(at, at + int(uncertain.sum()))
            at += int(uncertain.sum())
            self.places.append(index)
        self.count = at
        self.radius = np.concatenate([r[r > 0] for r in box.radii])
        self.unit = float(self.radius.max(initial=0.0)) or 1.0

    def _sides(self, side: Side, shares: Array) -> tuple[Array, Array, Array]:
        """Return matrix, its change and the places of the uncertain entries, for one side."""
        box = self.box
        matrices = []
        for own, index in zip((box.A, box.B, box.C), self.places, strict=True):
            change = np.zeros(own.shape)
            change[index >= 0] = (self.radius * shares)[index[index >= 0]]
            matrices.append((own, change, index))
        A, B, C = matrices
        if side is Side.INPUT:
            both = [np.hstack([a, b]) for a, b in zip(A, B, strict=True)]
        else:
            both = [np.hstack([a.T, c.T]) for a, c in zip(A, C, strict=True)]
        return both[0], both[1], both[2]

    def residual(self, found: Found) -> float:
        """Return the largest residual of the equations."""
        worst = 0.0
        for mode in found.modes:
            left = self._value(mode) + mode.vector @ self._sides(mode.side, found.shares)[1]
            worst = max(worst, float(np.abs(left).max(initial=0.0)))
        return worst

    def _value(self, mode: Hidden) -> Array:
        """Return u' M(z), exactly rounded where the radii are so small that it matters."""
        n = len(mode.vector)
        if self.unit > _FINE * float(np.linalg.norm(self.box.A)):
            value = mode.vector @ self._sides(mode.side, np.zeros(self.count))[0]
            value[:n] -= mode.place * mode.vector
            return value
        A, B, C = self.box.exact
        matrix = np.hstack([A, B]) if mode.side is Side.INPUT else np.hstack([A.T, C.T])
        (x, y), (p, q) = mode.exact_point, mode.exact_vector
        real, imag = p @ matrix, q @ matrix
        real[:n] -= x * p - y * q
        imag[:n] -= x * q + y * p
        return in_doubles(real) if mode.is_real else in_doubles(real) + 1j * in_doubles(imag)

    def step(self, found: Found, turn: float) -> Found | None:
        """Take one Newton step, with the least factor; None when the program has no solution."""
        n = self.box.A.shape[0]
        left, parts = 0.0, []
        for mode in found.modes:
            matrix, change, index = self._sides(mode.side, found.shares)
            eye = np.eye(*matrix.shape)
            matrix = matrix - mode.place * eye
            value = self._value(mode)
            left = max(left, float(np.abs(value).max(initial=0.0)))
            parts.append((mode, matrix + change, index, value))
        unit = left or 1.0
        rows: list[Array] = []
        columns: list[Array] = []
        values: list[Array] = []
        right: list[Array] = []
        low, high = [], []
        height, width = 0, 0
        for mode, matrix, index, value in parts:
            size = n + 1
            # Unknown: the change of the vector, then that of the point, over the unit.
            dense = np.vstack([matrix, -np.concatenate([mode.vector, 0 * value[n:]])[None, :]]).T
            i, j = np.nonzero(index >= 0)
            coefficient = mode.vector[i] * self.radius[index[i, j]] / self.unit
            blocks = [(dense.real, coefficient.real)]
            if not mode.is_real:
                dense = np.hstack([dense, 1j * dense])
                blocks = [(dense.real, coefficient.real), (dense.imag, coefficient.imag)]
                size *= 2
            pivot = int(np.abs(mode.vector).argmax())
            bound = np.full(size, turn / unit)
            bound[pivot :: n + 1] = 0.0
            low.append(-bound)
            high.append(bound)
            for number, (block, shares) in enumerate(blocks):
                r, c = np.nonzero(block)
                rows += [r + height, j + height]
                columns += [c + width, -1 - index[i, j]]
                values += [block[r, c], shares]
                right.append(-(value.imag if number else value.real) / unit)
                height += len(value)
            width += size
        # The shares follow the vectors and points, the factor comes last.
        column = np.concatenate(columns)
        column = np.where(column < 0, width - 1 - column, column)
        total = width + self.count + 1
        equations = coo_array(
            (np.concatenate(values), (np.concatenate(rows), column)), shape=(height, total)
        ).tocsr()
        k = np.arange(self.count)
        ones = np.ones(self.count)
        bounds = coo_array(
            (
                np.concatenate([ones, -ones, -ones, -ones]),
                (
                    np.concatenate([k, k + self.count, k, k + self.count]),
                    np.concatenate([k + width, k + width, np.full(2 * self.count, total - 1)]),
                ),
            ),
            shape=(2 * self.count, total),
        ).tocsr()
        infinite = np.full(self.count, np.inf)
        # Half as dear to load as all the rest of scipy, and hardly ever asked for.
        from scipy.optimize import linprog

        solved = linprog(
            np.concatenate([np.zeros(total - 1), [1.0]]),
            A_ub=bounds,
            b_ub=np.zeros(2 * self.count),
            A_eq=equations,
            b_eq=np.concatenate(right),
            bounds=np.column_stack(
                [
                    np.concatenate([*low, -infinite, [0.0]]),
                    np.concatenate([*high, infinite, [np.inf]]),
                ]
            ),
            method="highs",
            options={"time_limit": _SECONDS},
        )
        if solved.status != 0:
            return None
        moved: list[Hidden] = []
        at = 0
        for mode in found.modes:
            change = solved.x[at : at + n + 1] * unit
            at += n + 1
            if not mode.is_real:
                change = change + 1j * solved.x[at : at + n + 1] * unit
                at += n + 1
            moved.append(mode.moved(change[n], change[:n]))
        shares = solved.x[width : width + self.count] * (unit / self.unit)
        weights = np.abs(equations.T @ solved.eqlin.marginals)[width : width + self.count]
        factor = float(solved.x[-1]) * unit / self.unit
        return Found(tuple(moved), shares, factor, weights)


def _fractions(values: Array) -> Array:
    result = np.empty(len(values), dtype=object)
    result[:] = [Fraction(value) for value in values.tolist()]
    return result


def _levelled(vector: Array) -> Array:
    """Return the vector with its largest component 1."""
    return np.asarray(vector / vector[np.abs(vector).argmax()])


def eigenvalues(box: InDoubles) -> list[complex]:
    """Return the eigenvalues of the centre, upper half plane."""
    values = scipy.linalg.eigvals(box.A) if box.A.size else []
    return [complex(value) for value in values if value.imag >= 0]
