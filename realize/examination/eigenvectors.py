"""Modes that are nearly hidden although no rank decision shows it: the eigenvector test."""

from __future__ import annotations

from typing import Any, Final

import numpy as np
import scipy.linalg

from realize.arithmetic.floating import OpenedFloating

__all__ = ["nearly_hidden"]

Array = np.ndarray[Any, Any]

_PARALLEL: Final = 1e-3
"""Singular value of unit vectors below which two of them count as one."""


def nearly_hidden(opened: OpenedFloating) -> int:
    """Return how many modes are within the cutoff of being out of reach or unseen.

    With a left eigenvector y of length 1, a change of B by the length of y' B puts the mode out of
    reach; so what is counted is really that near, whatever the staircase shows. A staircase can
    lose such a mode: the product of its links is small, and none of them is. Vectors that are
    nearly parallel, as those of a defective eigenvalue, count once.

    References
    ----------
    The test of Popov, Belevitch and Hautus: Kailath (1980), Linear Systems, section 2.4. That
    links need not show: Paige (1981), IEEE Trans. Automatic Control 26.
    """
    if not opened.A.shape[0]:
        return 0
    _, left, right = scipy.linalg.eig(opened.A, left=True, right=True)
    unreached = _lengths(opened.B.T @ left.conj()) <= opened.cutoff
    unseen = _lengths(opened.C @ right) <= opened.cutoff
    return _count(left[:, unreached]) + _count(right[:, unseen & ~unreached])


def _lengths(vectors: Array) -> Array:
    return np.asarray(np.linalg.norm(vectors, axis=0))


def _count(vectors: Array) -> int:
    return int(np.linalg.matrix_rank(vectors, tol=_PARALLEL)) if vectors.size else 0
