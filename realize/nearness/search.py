"""Branch and bound over the complex plane for the distance to uncontrollability.

*Where to look.* For z at distance d from the field of values of A, ``sigma(A - zI) >= d``, and B
adds to it. So the least singular value of M(z) = [A - zI, B] is below a number t only within t of
the field of values, and a box around that is covered. A and B are real, so ``sigma(M(z))`` is the
same at the conjugate point: the upper half is enough.

*What closes a square* of half diagonal r around c, for a level t. Either its corners:
``sigma(M(z))^2 - |z - c|^2`` is the least of ``u* H(z) u - |z - c|^2`` over unit vectors u, each of
which is affine in z (the squares of |z| cancel), so it is concave and its least value over the
square is at a corner; ``sigma^2 >= t^2 + r^2`` at four corners is enough, and corners are shared.
Or the reduced problem around its centre (`realize.nearness.squares`), which leaves the smaller
squares that it cannot close. Otherwise the square is halved both ways.

*The level* is the best upper bound so far times 1 - rtol. Whatever point turns out to lie below the
level is improved locally and lowers both; squares closed at a higher level stay closed. At the end
no point lies below the level.

References
----------
Eising (1984), Between controllable and uncontrollable, Systems and Control Letters 4. Burke, Lewis,
Overton (2004), Pseudospectral components and the distance to uncontrollability, SIAM J. Matrix
Analysis 26. Gu (2000), SIAM J. Matrix Analysis 21.
"""

from __future__ import annotations

import math
import time
from dataclasses import dataclass
from fractions import Fraction
from typing import Any, Final

import numpy as np

from realize.entries import fraction_array
from realize.errors import PrecisionError
from realize.nearness.pencil import ROUNDOFF, Pencil, Point, rounded
from realize.nearness.proof import (
    CLEAR,
    MOST_ROWS,
    Decomposed,
    bits_for,
    decompose,
    reduce_in_balls,
    reduce_in_doubles,
    refined_vector,
)
from realize.nearness.squares import Reduced
from realize.polynomials import working_precision

__all__ = ["OutOfTime", "Search"]

Array = np.ndarray[Any, Any]

_SHARE: Final = 0.05
"""Share of the room between the bounds that rounding, or a series cut off, may take."""

_NEWS: Final = 0.2
"""Share of the room between the bounds by which a value must undercut the upper one to be news."""

_STARTS: Final = 2
"""How many eigenvalues the local search begins from."""

_STEPS: Final = 30
"""Steps of one local search at most."""

_NOISE: Final = 1e3
"""How far above the roundoff a singular value must lie to be taken from doubles."""

_SMALLEST: Final = 1e-140
"""The least distance over the size of the pair that is searched for: its square is a double too."""

_GRID_BITS: Final = 6
"""Bits of the side of the largest squares."""

_FIRST: Final = 0.2
"""Half diagonal, over a typical singular value, below which a first decomposition is tried."""

_CORNERS: Final = (0.3, 200.0)
"""Half diagonals, over the level, between which corners are cheaper than a reduced problem."""

_MANY: Final = 12
"""States from which on that holds; the decomposition of a small matrix is cheap."""

_PATIENCE: Final = (64, 0.15)
"""... unless, of so many squares of one size, corners have closed less than this share."""

_DOUBTFUL: Final = 3.0
"""How many times the doubt of a corner test must fit into the level it tests."""

_ROUGH: Final = 0.9
"""Room between the bounds that is asked for once half of the time is gone."""

_LEFT: Final = 200
"""How many squares are looked at once more when the time is up."""

_LEAST: Final = 1e-6
"""The least share of the upper bound that is then worth telling."""

_FINEST: Final = 40
"""Halvings after which corners are not looked at any more, if they are doubles so long."""


class OutOfTime(Exception):  # noqa: N818  # caught inside the room, never shown
    """The time is spent."""


@dataclass(frozen=True, kw_only=True, slots=True)
class _Square:
    """A square of the grid: level of halving, column, row.

    ``known`` tells the spectrum at the centre of an ancestor.
    """

    level: int
    column: int
    row: int
    known: tuple[complex, Array] | None = None


class Search:
    """The search for one pencil.

    Attributes
    ----------
    upper, point : float, Point
        The least singular value found, about, and where.
    lower : float
        The level that no point lies below, as far as it is proved.
    """

    def __init__(self, pencil: Pencil, rtol: float, deadline: float) -> None:
        self.pencil = pencil
        self.rtol = rtol
        self.deadline = deadline
        self.upper = math.inf
        self.point: Point = (Fraction(0), Fraction(0))
        self.lower = 0.0
        self._goal = rtol
        self._tallies: dict[int, list[int]] = {}
        self._corners: dict[tuple[int, int], tuple[float, float]] = {}

    @property
    def level(self) -> float:
        """What has to be proved: the least upper bound less what the caller allows."""
        return self.upper * (1 - self._goal)

    @property
    def _news(self) -> float:
        """A value below this is worth a local search.

        Nearer the upper bound than the level is: squares astride the curve where sigma equals the
        level could not be closed, however small.
        """
        return self.upper * (1 - _NEWS * self.rtol)

    # Upper bounds

    def start(self) -> None:
        """Find a first upper bound, from the eigenvalues that the inputs reach least."""
        values, vectors = np.linalg.eig(self.pencil.A.T)
        reached = np.linalg.norm(vectors.T @ self.pencil.B, axis=1)
        above = np.flatnonzero(values.imag >= 0)
        order = above[np.argsort(reached[above], kind="stable")]
        for index in order[:_STARTS]:
            self.improve(_point(complex(values[index])))

    def improve(self, point: Point, share: float = _SHARE) -> None:
        """Go down from a point to a local minimum, and keep it if it is the least so far.

        Newton's method in a trust region, on ``|v [l, I] M|^2 / |v [l, I]|^2``;
        see `realize.nearness.squares`.
        """
        here = self._local(point)
        trust = here.reach
        for _ in range(_STEPS):
            step, gain = here.step(trust)
            if gain < share * self.rtol * here.value**2:
                break
            there = self._local(_moved(here.point, step))
            if there.value < here.value:
                here, trust = there, min(2 * trust, there.reach)
            else:
                trust = abs(step) / 4
        if here.value < self.upper:
            self.upper, self.point = here.value, here.point

    def _improved(self, point: Point) -> bool:
        """Go down from a point; whether the upper bound fell."""
        before = self.upper
        self.improve(point)
        return self.upper < before

    def _local(self, point: Point) -> _Local:
        """Return the least singular value at a point, and how it changes nearby."""
        self.check_time()
        found = decompose(self.pencil, point)
        if float(found.values[-1]) * self.rtol > _NOISE * self._noise:
            return _sketch(found)
        self.when_small()
        reduced, left, least = self._in_balls(found)
        terms = left.conj() @ reduced.terms[:3]
        terms /= (reduced.scale ** np.arange(len(terms)))[:, None]
        return _Local(
            point=point,
            value=least,
            terms=terms,
            turn=reduced.left,
            reach=reduced.radius,
        )

    def settle(self, share: float = _SHARE) -> None:
        """Take the point on the real line beside the best one where that costs next to nothing.

        ``share`` is what it may cost, over the room between the bounds.
        """
        x, y = self.point
        if y:
            here = self._local((x, Fraction(0)))
            if here.value <= self.upper * (1 + share * self.rtol):
                self.improve(here.point, share)
                if self.point[1]:
                    self.upper, self.point = here.value, here.point

    def vector(self) -> Array:
        """Return the left singular vector at the best point, (n, 2): rational real, imaginary."""
        found = decompose(self.pencil, self.point)
        if self.upper * self.rtol > _NOISE * self._noise:
            flat = [Fraction(part) for v in found.left[:, -1] for part in (v.real, v.imag)]
            return fraction_array(flat, (self.pencil.order, 2))
        _, left, _ = self._in_balls(found)
        with working_precision(bits_for(self.upper, self.rtol)):
            return refined_vector(self.pencil, found, left)

    def _told(self, point: Point) -> complex:
        """Return a point in the user's units, for a message."""
        unit = Fraction(2) ** self.pencil.exponent
        return rounded((point[0] * unit, point[1] * unit))

    @property
    def _noise(self) -> float:
        """About what rounding does to a singular value taken from doubles."""
        return float(ROUNDOFF * self.pencil.order * self.pencil.size)

    def _in_balls(self, found: Decomposed) -> tuple[Reduced, Array, float]:
        """Return the reduced problem, the left singular vector in it, the least singular value."""
        n, noise = self.pencil.order, self._noise
        value = float(found.values[-1])
        k = next(
            (k for k in range(1, n) if found.values[n - 1 - k] > max(_NOISE * noise, 8 * value)), n
        )
        radius = 0.3 * float(found.values[n - 1 - k]) if k < n else 1.0
        bits = bits_for(max(value, noise * ROUNDOFF), self.rtol)
        while True:
            self.check_time()
            with working_precision(bits):
                reduced = reduce_in_balls(self.pencil, found, k, radius, math.inf)
            if reduced is None:
                raise PrecisionError(
                    f"near {self._told(found.point)} doubles do not separate the singular values "
                    "of [A - zI, B]; nothing is proved there"
                )
            left, least, _ = np.linalg.svd(reduced.terms[0])
            if least[-1] <= _SMALLEST and 1e6 * 2.0**-bits <= _SMALLEST:
                raise PrecisionError(
                    f"[A - zI, B] has a singular value below {_SMALLEST:g} of its size near "
                    f"{self._told(found.point)}, which is out of the range of this search. The "
                    "model is not exactly uncontrollable; ask realize.exact about small entries"
                )
            if least[-1] > max(1e6 * 2.0**-bits, _SMALLEST):
                return reduced, left[:, -1], float(least[-1])
            bits *= 2

    # Lower bounds

    def run(self) -> None:
        """Prove the lower bound; lowers the upper one where lower points are met.

        Raises
        ------
        OutOfTime
            With `lower` as far as it was proved.
        """
        low, high, top = self.pencil.field_of_values()
        # The last term is for the rounding of the few sums below.
        room = self.upper * (1 + 1e-9) + self.pencil.slack + 16 * ROUNDOFF * self.pencil.size
        width = high - low + 2 * room
        height = max(top + room, width / 8)
        # Corners must be doubles, so the grid has few bits: its unit is a power of two.
        exponent = math.frexp(height)[1] - _GRID_BITS
        unit = 2.0**exponent
        self._side = math.ceil(height / unit) * unit
        self._left = math.floor((low - room) / unit) * unit
        columns = math.ceil((width + unit) / self._side)
        # So many halvings leave every corner a whole number of units that a double holds.
        farthest = max(abs(self._left), abs(self._left + columns * self._side), self._side)
        self._finest = min(_FINEST, 52 - math.frexp(farthest / unit)[1])
        self._stack = [_Square(level=0, column=i, row=0) for i in reversed(range(columns))]
        last = self.deadline
        now = time.monotonic()
        self.deadline = now + (last - now) / 2
        if not self._emptied():
            # Half of the time is gone. A rough bound comes first now, lest there be none.
            left, goal = list(self._stack), self._goal
            self._goal = max(goal, _ROUGH)
            self.deadline = now + 0.75 * (last - now)
            if self._emptied():
                self.lower = self.level
            self._stack, self._goal, self.deadline = left, goal, last
            if not self._emptied():
                self.lower = max(self.lower, self._left_open())
                raise OutOfTime
        self.lower = self.level

    def _emptied(self) -> bool:
        """Close squares until none is left; False when the time is up before."""
        while self._stack:
            square = self._stack.pop()
            try:
                self._close(square)
            except OutOfTime:
                self._stack.append(square)
                return False
            if time.monotonic() > self.deadline:
                return not self._stack
        return True

    def _left_open(self) -> float:
        """Return a lower bound over the squares still open, from their centres alone.

        The least singular value changes no faster than the point moves.
        """
        bound = self.level
        for square in self._stack[:_LEFT]:
            side = self._side * 0.5**square.level
            z = rounded(self._centre(square))
            radius = side * math.sqrt(0.5) * (1 + 1e-14) + 4 * ROUNDOFF * abs(z)
            while bound > _LEAST * self.upper and not self.pencil.above(
                z, (bound + radius + self.pencil.slack) ** 2 * (1 + 1e-12)
            ):
                bound /= 2
        return 0.0 if len(self._stack) > _LEFT or bound <= _LEAST * self.upper else bound

    def _close(self, square: _Square) -> None:
        """Close a square, or put what is left of it on the stack."""
        side = self._side * 0.5**square.level
        radius = side * math.sqrt(0.5) * (1 + 1e-14)
        tally = self._tallies.setdefault(square.level, [0, 0])
        tally[0] += 1
        if self._by_corners(square, radius):
            tally[1] += 1
            return
        known = square.known
        centre = self._centre(square)
        near = rounded(centre)
        target = self.level
        if self._worth(square, near, radius):
            found = decompose(self.pencil, centre)
            known = (near, found.values)
            if found.values[-1] + self.pencil.slack < self._news and self._improved(centre):
                self._stack.append(square)
                return
            floor = _NOISE * self._noise
            k = found.split(radius, target, floor)
            if k is None and radius < floor:
                raise PrecisionError(
                    f"near {self._told(centre)} more singular values of [A - zI, B] lie within "
                    "rounding of zero than this search can tell apart; nothing is proved there"
                )
            if k is not None:
                reduced = self._reduced(found, k, radius, target)
                if reduced is not None:
                    cover = reduced.cover(side, target, self._news)
                    if cover.low is not None and self._improved(_moved(centre, cover.low)):
                        self._stack.append(square)
                        return
                    if cover.open != ((0, 0, 0),):
                        self._stack += [
                            _Square(
                                level=square.level + level,
                                column=(square.column << level) + column,
                                row=(square.row << level) + row,
                                known=known,
                            )
                            for level, column, row in cover.open
                        ]
                        return
        self._stack += [
            _Square(
                level=square.level + 1,
                column=2 * square.column + i,
                row=2 * square.row + j,
                known=known,
            )
            for j in (1, 0)
            for i in (1, 0)
        ]

    def _worth(self, square: _Square, centre: complex, radius: float) -> bool:
        """Whether a decomposition at the centre may lead to a reduced problem."""
        level = self.level
        low, high = _CORNERS
        banded = self.pencil.order >= _MANY and low * level < radius < high * level
        if banded and not self._vain(square.level) and self._affordable(centre, radius):
            return False
        if square.known is None:
            return radius < _FIRST * self.pencil.size / math.sqrt(self.pencil.order)
        where, values = square.known
        best = values + abs(centre - where)
        n = len(values)
        return n <= MOST_ROWS or float(best[n - 1 - MOST_ROWS]) >= CLEAR * radius

    def _reduced(self, found: Decomposed, k: int, radius: float, target: float) -> Reduced | None:
        room = _SHARE * self.rtol * target
        noise = ROUNDOFF * self.pencil.order**2 * self.pencil.size
        if room > noise:
            reduced = reduce_in_doubles(self.pencil, found, k, radius, room)
            if reduced is not None and reduced.shift + reduced.tail <= 2 * room:
                return reduced
        with working_precision(bits_for(target, self.rtol)):
            return reduce_in_balls(self.pencil, found, k, radius, room)

    def _by_corners(self, square: _Square, radius: float) -> bool:
        if square.level > self._finest:
            return False
        level = ((self.level + self.pencil.slack) ** 2 + radius * radius) * (1 + 1e-12)
        finest = 1 << (_FINEST - square.level)
        for j in (0, 1):
            for i in (0, 1):
                key = ((square.column + i) * finest, (square.row + j) * finest)
                good, bad = self._corners.get(key, (0.0, math.inf))
                if good >= level:
                    continue
                if bad <= level:
                    return False
                z = complex(
                    self._left + self._side * 0.5**square.level * (square.column + i),
                    self._side * 0.5**square.level * (square.row + j),
                )
                if not self._affordable(z, radius):
                    return False
                if not self.pencil.above(z, level):
                    self._corners[key] = (good, level)
                    return False
                self._corners[key] = (level, bad)
        return True

    def _vain(self, level: int) -> bool:
        """Whether corners have closed too few squares of this size to go on with them alone."""
        tried, closed = self._tallies[level]
        return tried >= _PATIENCE[0] and closed < _PATIENCE[1] * tried

    def _affordable(self, z: complex, radius: float) -> bool:
        """Whether rounding leaves the corner test for a square something to say."""
        level = self.level**2 + radius * radius
        return bool(_DOUBTFUL * self.pencil.doubt(z, level) < level)

    def _centre(self, square: _Square) -> Point:
        side = Fraction(self._side) / 2 ** (square.level + 1)
        return Fraction(self._left) + side * (2 * square.column + 1), side * (2 * square.row + 1)

    def check_time(self) -> None:
        """Stop when the time is up."""
        if time.monotonic() > self.deadline:
            raise OutOfTime

    def when_small(self) -> None:
        """Be told that a singular value is within rounding of zero; the caller replaces this."""


@dataclass(frozen=True, kw_only=True, slots=True)
class _Local:
    """The least singular value near a point: y(w) of the reduced problem to second order."""

    point: Point
    value: float
    terms: Array  # y_0, y_1, y_2 as rows
    turn: float
    reach: float

    def step(self, trust: float) -> tuple[complex, float]:
        """Return a step within the trust region, and by how much the square falls."""
        y0, y1, y2 = self.terms[:3] if len(self.terms) > 2 else (*self.terms, 0 * self.terms[0])
        slope = complex(np.vdot(y0, y1))
        twist = complex(np.vdot(y0, y2))
        bend = float(np.vdot(y1, y1).real) - (self.value * self.turn) ** 2
        gradient = np.array([2 * slope.real, -2 * slope.imag])
        hessian = np.array(
            [
                [2 * bend + 4 * twist.real, -4 * twist.imag],
                [-4 * twist.imag, 2 * bend - 4 * twist.real],
            ]
        )
        values, turn = np.linalg.eigh(hessian)
        along = turn.T @ gradient
        size = float(np.abs(values).max()) + float(np.linalg.norm(gradient)) / trust
        if size == 0:
            return 0j, 0.0
        damping = max(0.0, -1.01 * float(values[0])) + 1e-12 * size
        while float(np.linalg.norm(along / (values + damping))) > trust:
            damping = 2 * damping + 0.05 * size
        step = -along / (values + damping)
        gain = -float(along @ step + step @ (values * step) / 2)
        moved = turn @ step
        return complex(moved[0], moved[1]), gain


def _sketch(found: Decomposed) -> _Local:
    """Return the second-order picture from a decomposition in doubles."""
    U, s, V = found.left, found.values, found.right
    n = len(s)
    top = V[:, :n].conj().T
    x = U[:, -1].conj() @ top
    first = np.zeros(V.shape[0] - n + 1, dtype=complex)
    first[0] = s[-1]
    turn = x[: n - 1] / s[: n - 1]
    second = -(turn @ U[:, : n - 1].conj().T) @ top[:, n - 1 :]
    return _Local(
        point=found.point,
        value=float(s[-1]),
        terms=np.array([first, -x[n - 1 :], second]),
        turn=float(np.linalg.norm(turn)),
        reach=0.5 * float(s[-2]) if n > 1 else 1.0,
    )


def _point(z: complex) -> Point:
    return Fraction(z.real), Fraction(z.imag)


def _moved(point: Point, step: complex) -> Point:
    """Return a point moved; bits far below the step are dropped, that numbers stay short."""
    parts = []
    for part, by in zip(point, (step.real, step.imag), strict=True):
        moved = part + Fraction(by)
        fine = 2 ** max(0, 70 - math.frexp(abs(step) or 1.0)[1])
        parts.append(Fraction(round(moved * fine), fine))
    return parts[0], parts[1]
