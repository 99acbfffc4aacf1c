"""Modes that are nearly hidden although no rank decision shows it: the eigenvector test.

With a left eigenvector y of length 1, a change of B by the length of y' B puts the mode out of
reach; so what is counted is really that near, whatever the staircase shows. A staircase can lose
such a mode: the product of its links is small, and none of them is.

References
----------
The test of Popov, Belevitch and Hautus: Kailath (1980), Linear Systems, section 2.4. That links
need not show: Paige (1981), IEEE Trans. Automatic Control 26.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
import scipy.linalg

from realize.arithmetic.floating import OpenedFloating
from realize.tolerance import rounding_floor

__all__ = ["Eigenvectors", "Split"]

Array = np.ndarray[Any, Any]

_PARALLEL: Final = 1e-3
"""Singular value of unit vectors below which two of them count as one."""


_FINER: Final = 100.0
"""Factor between two sizes that are tried for what counts as hidden."""


@dataclass(frozen=True, slots=True)
class Split:
    """An orthogonal Q whose first ``dimension`` columns span what is reached (or is seen)."""

    Q: Array
    dimension: int


@dataclass(frozen=True, slots=True)
class Eigenvectors:
    """Eigenvectors of length 1 of a scaled model, and how far each is from being hidden."""

    opened: OpenedFloating
    left: Array
    right: Array
    unreached: Array
    unseen: Array

    @classmethod
    def of(cls, opened: OpenedFloating) -> Eigenvectors:
        """Return those of an opened model."""
        if not opened.A.shape[0]:
            none = np.zeros((0, 0))
            return cls(opened, none, none, np.zeros(0), np.zeros(0))
        _, left, right = scipy.linalg.eig(opened.A, left=True, right=True)
        reach, sight = opened.B.T @ left.conj(), opened.C @ right
        return cls(opened, left, right, *(np.linalg.norm(M, axis=0) for M in (reach, sight)))

    def _hidden(self, limit: float) -> tuple[Array, Array]:
        """Return the left vectors of what is not reached, the right ones of the rest unseen."""
        unreached = self.unreached <= limit
        return self.left[:, unreached], self.right[:, (self.unseen <= limit) & ~unreached]

    def nearly_hidden(self) -> int:
        """Return how many modes are within the cutoff of being out of reach or unseen.

        Vectors that are nearly parallel, as those of a defective eigenvalue, count once.
        """
        return sum(_basis(vectors).shape[1] for vectors in self._hidden(self.opened.cutoff))

    def splits(self) -> Iterator[tuple[Split, Split]]:
        """Yield what is reached, and what of that is seen; what hides the most comes first.

        What counts as hidden is tried from the cutoff down to rounding. A split is a guess, good
        for a nearby model that is then refined and measured.
        """
        order = len(self.left)
        limit = self.opened.cutoff
        floor = rounding_floor(order, self.opened.scaling.scale)
        before = None
        while limit >= floor:
            unreached, unseen = self._hidden(limit)
            counts = unreached.shape[1], unseen.shape[1]
            if counts != before and any(counts):
                outer = _split(unreached)
                inner = outer.Q[:, : outer.dimension].T @ unseen
                yield outer, _split(inner)
            before, limit = counts, limit / _FINER


def _basis(vectors: Array) -> Array:
    """Return an orthonormal real basis of the span of vectors and their conjugates."""
    if not vectors.size:
        return np.zeros((vectors.shape[0], 0))
    both = np.hstack([vectors.real, vectors.imag])
    U, values, _ = np.linalg.svd(both, full_matrices=False)
    return np.asarray(U[:, values > _PARALLEL])


def _split(vectors: Array) -> Split:
    """Return the split whose last columns span the vectors."""
    last = _basis(vectors)
    order, count = last.shape
    Q = np.linalg.qr(last, mode="complete")[0]
    return Split(np.hstack([Q[:, count:], Q[:, :count]]), order - count)
