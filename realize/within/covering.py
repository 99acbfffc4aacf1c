"""The proof that every model in a box is controllable: a covering of the complex plane by squares.

Squares whose discs prove too little are split in four. Where that is of no more use, because the
right inverse of one centre does not serve all models of the box, or because a change that is real
is less than one that may be complex, the box is split too, entry by entry.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from realize.within.box import Pencil
from realize.within.discs import Discs

__all__ = ["Covering"]

Array = np.ndarray[Any, Any]

_U: Final = 2.0**-52

_FIRST: Final = 8
"""Squares from left to right to begin with."""

_BATCH: Final = 64
"""Squares that are split at a time."""

_NUMBERS: Final = 2**17
"""How many complex numbers the pencils of one round hold at most, so that time can be kept."""

_STEPS: Final = 8
"""Power iterations towards a bound on all eigenvalues."""

FINEST: Final = 2.0**-90
"""Half side of the squares that are split no more, over the covering's reach."""

_APART: Final = 0.02
"""Share of the covering's reach by which two places must differ to count as two."""

_CORNERS: Final = np.array([-1 - 1j, -1 + 1j, 1 - 1j, 1 + 1j])


class Covering:
    """Squares that cover all eigenvalues of all models in a box, upper half plane only.

    ``largest``: factors above this are of no interest; the covering holds for radii up to
    ``largest`` times those of the box. When it is ``late``, what takes long is left out.
    """

    def __init__(
        self, pencil: Pencil, largest: float, late: Callable[[], bool] = lambda: False
    ) -> None:
        self.pencil, self.largest = pencil, largest
        self.discs = Discs(pencil, largest, late)
        reach = self.reach = self._reach()
        side = 2.0 * reach / _FIRST
        x = -reach + side * (np.arange(_FIRST) + 0.5)
        y = side * (np.arange(_FIRST // 2) + 0.5)
        self.z = (x[None, :] + 1j * y[:, None]).ravel()
        self.rest = np.zeros(self.z.shape, dtype=complex)
        self.half = np.full(self.z.shape, side / 2)
        self.factor = np.zeros(self.z.shape)
        self.limit = np.zeros(self.z.shape)
        self.count = 0
        if pencil.order == 0:
            self.factor[:] = self.limit[:] = largest
        elif math.isfinite(reach):
            self._weigh(np.arange(len(self.z)))

    def _reach(self) -> float:
        """Return a power of two that no eigenvalue of any model exceeds in size.

        For any positive v the largest (|A| v)_i / v_i is such a bound.
        """
        n = self.pencil.order
        sizes = np.abs(self.pencil.matrix) + self.pencil.lost + self.largest * self.pencil.radius
        sizes = sizes[:, :n]
        v, best = np.ones(n), math.inf
        if not n or not np.isfinite(sizes).all():
            return 1.0 if not n else math.inf
        for _ in range(_STEPS):
            image = sizes @ v
            best = min(best, float((image / v).max()) * self.discs.slack)
            v = image / image.max() + 1e-3
        return 2.0 ** math.ceil(math.log2(best))

    @property
    def lower(self) -> float:
        """The factor up to which every model is proved to be controllable."""
        return float(self.factor.min(initial=self.largest))

    @property
    def bound(self) -> float:
        """About what `lower` can reach by smaller squares alone."""
        return float(self.limit.min(initial=self.largest))

    @property
    def fineness(self) -> float:
        """Half side of the smallest square that proves less than 1, over the covering's reach."""
        left = self.factor < 1
        return float(self.half[left].min() / self.reach) if left.any() else 1.0

    def failing(self, most: int) -> list[complex]:
        """Return where a factor of 1 is not proved, places well apart, the worst first."""
        found: list[complex] = []
        left = np.flatnonzero(self.factor < 1)
        for k in left[np.lexsort((self.half[left], self.limit[left]))].tolist():
            if len(found) == most:
                break
            if all(abs(self.z[k] - other) > _APART * self.reach for other in found):
                found.append(complex(self.z[k]))
        return found

    def refine(self, wanted: float) -> bool:
        """Split the squares that prove least; False when none proves less than wanted."""
        order = np.argsort(self.factor)
        order = order[self.half[order] > FINEST * self.reach][:_BATCH]
        split = order[self.factor[order] < wanted]
        if not len(split):
            return False
        keep = np.ones(len(self.z), dtype=bool)
        keep[split] = False
        quarter = self.half[split] / 2
        z, rest = _split(self.z[split], self.rest[split], quarter)
        first = int(keep.sum())
        self.z = np.concatenate([self.z[keep], z])
        self.rest = np.concatenate([self.rest[keep], rest])
        self.half = np.concatenate([self.half[keep], np.repeat(quarter, 4)])
        self.factor = np.concatenate([self.factor[keep], np.repeat(self.factor[split], 4)])
        self.limit = np.concatenate([self.limit[keep], np.repeat(self.limit[split], 4)])
        self._weigh(np.arange(first, len(self.z)))
        return True

    def _weigh(self, cells: Array) -> None:
        """Find what squares prove."""
        count = max(4, min(4 * _BATCH, _NUMBERS // max(self.pencil.matrix.size, 1)))
        for start in range(0, len(cells), count):
            if start and self.discs.late():
                # What is left keeps what the square around it proved.
                break
            some = cells[start : start + count]
            proved = self.discs.proved(self.z[some], _around(self.half[some]), self.rest[some])
            self.factor[some] = np.maximum(self.factor[some], proved.factor)
            self.limit[some] = np.minimum(np.maximum(proved.limit, self.factor[some]), self.largest)
            self.count += len(some)

    def split_box(self, most: int, late: Callable[[], bool]) -> None:
        """Try to prove what is left for a factor of 1 by splitting the box too.

        What is proved of a square in all its pieces is proved of the square. It ends when
        ``most`` pieces were tested, or are waiting, or when it is late.
        """
        last = self.count + most
        left = np.flatnonzero(self.factor < 1)
        n, width = self.pencil.matrix.shape
        pieces = _Pieces(
            left,
            self.z[left],
            self.rest[left],
            self.half[left],
            np.broadcast_to(self.pencil.matrix, (len(left), n, width)),
            np.broadcast_to(self.pencil.radius, (len(left), n, width)),
        )
        while len(pieces.z) and len(pieces.z) < most and self.count < last and not late():
            # The last ones first, so that a square is done with before the next is begun.
            now, later = pieces.some(slice(-_BATCH, None)), pieces.some(slice(None, -_BATCH))
            r = _around(now.half)
            proved = self.discs.proved(now.z, r, now.rest, now.matrix, now.radius)
            self.count += len(r)
            open_ones = np.flatnonzero(proved.factor < 1)
            if not len(open_ones):
                pieces = later
                continue
            if now.half.min() <= FINEST * self.reach:
                # Closing in on a point, where a mode may well be hidden.
                break
            of_disc, of_entries = self.discs.burdens(proved, r, now.radius)
            halves = now.some(open_ones).split(of_disc[open_ones], of_entries[open_ones])
            pieces = later.joined(halves)
        # A round that was broken off leaves its pieces where they were.
        done = np.setdiff1d(left, pieces.owner)
        self.factor[done] = np.maximum(self.factor[done], 1.0)
        self.limit[done] = np.maximum(self.limit[done], 1.0)


@dataclass(frozen=True, slots=True, eq=False)
class _Pieces:
    """Squares with boxes of their own; `owner` is the square of the covering they belong to."""

    owner: Array
    z: Array
    rest: Array
    half: Array
    matrix: Array
    radius: Array

    def some(self, which: Any) -> _Pieces:
        return _Pieces(
            self.owner[which],
            self.z[which],
            self.rest[which],
            self.half[which],
            self.matrix[which],
            self.radius[which],
        )

    def joined(self, other: _Pieces) -> _Pieces:
        return _Pieces(
            np.concatenate([self.owner, other.owner]),
            np.concatenate([self.z, other.z]),
            np.concatenate([self.rest, other.rest]),
            np.concatenate([self.half, other.half]),
            np.concatenate([self.matrix, other.matrix]),
            np.concatenate([self.radius, other.radius]),
        )

    def split(self, of_disc: Array, of_entries: Array) -> _Pieces:
        """Split each in four by its square, or in two by its most burdensome entry."""
        flat = of_entries.reshape(len(self.z), -1)
        worst = flat.argmax(axis=1)
        by_square = ~(flat.max(axis=1) > of_disc)
        squares, boxes = self.some(by_square), self.some(~by_square)
        quarter = squares.half / 2
        fours = _Pieces(
            np.repeat(squares.owner, 4),
            *_split(squares.z, squares.rest, quarter),
            np.repeat(quarter, 4),
            np.repeat(squares.matrix, 4, axis=0),
            np.repeat(squares.radius, 4, axis=0),
        )
        i, j = np.divmod(worst[~by_square], self.matrix.shape[2])
        k = np.arange(len(i))
        radius = boxes.radius.copy()
        half = radius[k, i, j] / 2
        down, up = boxes.matrix.copy(), boxes.matrix.copy()
        down[k, i, j] -= half
        up[k, i, j] += half
        # Wide enough for the rounding of the new centres.
        radius[k, i, j] = half + _U * (np.abs(boxes.matrix[k, i, j]) + half)
        for matrix in (down, up):
            fours = fours.joined(
                _Pieces(boxes.owner, boxes.z, boxes.rest, boxes.half, matrix, radius)
            )
        return fours


def _split(z: Array, rest: Array, quarter: Array) -> tuple[Array, Array]:
    """Return the centres of the four quarters of squares, exactly, as doubles and rests.

    Centres are on a grid, so sums of rests are exact; what adding them to the doubles loses is
    the new rest (Knuth, The Art of Computer Programming, volume 2, section 4.2.2, theorem B).
    """
    added = (rest[:, None] + quarter[:, None] * _CORNERS).ravel()
    z = np.repeat(z, 4)
    total = z + added
    part = total - z
    return total, (z - (total - part)) + (added - part)


def _around(half: Array) -> Array:
    """Return the half diagonal of squares, rounded up."""
    return np.asarray(half * (math.sqrt(2.0) * (1 + 2 * _U)))
