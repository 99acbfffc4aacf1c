"""The proof that every model in a box is controllable: a covering of the complex plane.

On a disc |z - z0| <= r take an approximate right inverse X of M(z0) = [A - z0 I, B]. For every z in
the disc and every model in the box M X = I - P with |P| <= |I - M(z0) X| + (R + r [I 0]) |X|, entry
by entry. Where a positive vector v has |P| v < v, the spectral radius of P is below 1 (Collatz and
Wielandt; Berman and Plemmons, Nonnegative Matrices in the Mathematical Sciences, chapter 2), so M X
is not singular and M has full rank. With t R for R the inequality is linear in t, so each disc has
a largest factor t that it proves.

Every bound is for the numbers as they are, not as they were computed: an inner product of length k
in doubles is off by no more than k u / (1 - k u) times that of the sizes, in whatever order it was
summed (Higham, Accuracy and Stability of Numerical Algorithms, section 3.1).
"""

from __future__ import annotations

import math
from typing import Any, Final

import numpy as np

from realize.within.box import Pencil

__all__ = ["Covering"]

Array = np.ndarray[Any, Any]

_U: Final = 2.0**-52
"""Twice the unit roundoff, so that single operations are covered with room."""

_BATCH: Final = 64
_STEPS: Final = 5
_FIRST: Final = 8

_APART: Final = 0.02
"""Share of the covering's reach by which two places must differ to count as two."""


class Covering:
    """Squares that cover all eigenvalues of all models in a box, upper half plane only.

    ``largest``: factors above this are of no interest; the covering holds for radii up to
    ``largest`` times those of the box.
    """

    def __init__(self, pencil: Pencil, largest: float) -> None:
        self.pencil, self.largest = pencil, largest
        n = pencil.order
        self.slack = 1 + (pencil.matrix.shape[1] + 16) * 8 * _U
        reach = self._reach()
        side = 2.0 * reach / _FIRST
        x = -reach + side * (np.arange(_FIRST) + 0.5)
        y = side * (np.arange(_FIRST // 2) + 0.5)
        self.z = (x[None, :] + 1j * y[:, None]).ravel()
        self.half = np.full(self.z.shape, side / 2)
        self.factor = np.zeros(self.z.shape)
        self.limit = np.zeros(self.z.shape)
        self.count = 0
        if n and math.isfinite(reach):
            self._weigh(np.arange(len(self.z)))

    def _reach(self) -> float:
        """Return a power of two that no eigenvalue of any model exceeds in size."""
        n = self.pencil.order
        if not n:
            return 1.0
        sizes = np.abs(self.pencil.matrix) + self.pencil.lost + self.largest * self.pencil.radius
        sizes = sizes[:, :n]
        v = np.ones(n)
        best = math.inf
        for _ in range(_STEPS):
            image = sizes @ v
            best = min(best, float((image / v).max()) * self.slack)
            v = image / image.max() + 1e-3 if np.isfinite(image).all() and image.max() > 0 else v
        return 2.0 ** math.ceil(math.log2(best)) if 0 < best < math.inf else 1.0 if not best else best

    @property
    def lower(self) -> float:
        """The factor up to which every model is proved to be controllable."""
        return float(self.factor.min(initial=self.largest))

    @property
    def bound(self) -> float:
        """What `lower` can reach by smaller squares alone."""
        return float(self.limit.min(initial=self.largest))

    def failing(self, most: int) -> list[complex]:
        """Return where the least is proved, places well apart, the worst first."""
        found: list[complex] = []
        for k in np.argsort(self.limit).tolist():
            if self.limit[k] >= 1 or len(found) == most:
                break
            apart = _APART * float(np.abs(self.z).max())
            if all(abs(self.z[k] - other) > apart for other in found):
                found.append(complex(self.z[k]))
        return found

    def refine(self, wanted: float) -> bool:
        """Split the squares that prove least; False when none proves less than wanted."""
        order = np.argsort(self.factor)[:_BATCH]
        split = order[self.factor[order] < wanted]
        if not len(split):
            return False
        keep = np.ones(len(self.z), dtype=bool)
        keep[split] = False
        quarter = self.half[split] / 2
        corners = np.array([-1 - 1j, -1 + 1j, 1 - 1j, 1 + 1j])
        z = (self.z[split][:, None] + quarter[:, None] * corners).ravel()
        first = int(keep.sum())
        self.z = np.concatenate([self.z[keep], z])
        self.half = np.concatenate([self.half[keep], np.repeat(quarter, 4)])
        self.factor = np.concatenate([self.factor[keep], np.repeat(self.factor[split], 4)])
        self.limit = np.concatenate([self.limit[keep], np.repeat(self.limit[split], 4)])
        self._weigh(np.arange(first, len(self.z)))
        return True

    def _weigh(self, cells: Array) -> None:
        """Find what the squares prove."""
        for start in range(0, len(cells), 4 * _BATCH):
            some = cells[start : start + 4 * _BATCH]
            # The half diagonal, rounded up.
            radius = self.half[some] * (math.sqrt(2.0) * (1 + 2 * _U))
            with np.errstate(all="ignore"):
                found, limit = self._factors(self.z[some], radius)
            self.factor[some] = np.maximum(self.factor[some], found)
            self.limit[some] = np.minimum(limit, self.largest)
            self.count += len(some)

    def _factors(self, z: Array, r: Array) -> tuple[Array, Array]:
        pencil, n = self.pencil, self.pencil.order
        eye = np.eye(*pencil.matrix.shape)
        M = pencil.matrix - z.real[:, None, None] * eye
        y = z.imag[:, None, None]
        X = self._inverse(M - 1j * y * eye, r)
        size = np.abs(M)
        diagonal = size * eye
        size += np.abs(y) * eye
        own = pencil.lost + _U * diagonal + (4 * (pencil.matrix.shape[1] + 8) * _U) * size
        real, imag = np.ascontiguousarray(X.real), np.ascontiguousarray(X.imag)
        residual = np.abs(np.eye(n) - (M @ real + y * imag[:, :n])) + np.abs(
            M @ imag - y * real[:, :n]
        )
        sizes = np.hypot(real, imag) * (1 + 4 * _U)
        H = (pencil.radius @ sizes) * self.slack
        point = (residual + own @ sizes + 4 * _U * np.eye(n)) * self.slack
        disc = (point + r[:, None, None] * sizes[:, :n]) * self.slack
        return self._largest(disc, H), self._largest(point, H)

    def _inverse(self, M: Array, r: Array) -> Array:
        """Return approximate right inverses, small where the matrix is uncertain."""
        n = self.pencil.order
        weight = self.pencil.radius.sum(axis=0)[None, :] + np.zeros((len(r), 1))
        weight[:, :n] += r[:, None]
        weight = np.maximum(weight, 1e-3 * weight.max(axis=1, keepdims=True))
        D = np.where(weight > 0, 1 / weight, 1.0)
        good = np.isfinite(M).all(axis=(1, 2)) & np.isfinite(D).all(axis=1)
        D[~good] = 1.0
        scaled = np.where(good[:, None, None], M * D[:, None, :], np.eye(*M.shape[1:]))
        U, s, W = np.linalg.svd(scaled, full_matrices=False)
        s = np.maximum(s, s[:, :1] * 2.0**-52)
        return D[:, :, None] * ((W.conj().transpose(0, 2, 1) / s[:, None, :]) @ U.conj().transpose(0, 2, 1))

    def _largest(self, G: Array, H: Array) -> Array:
        """Return factors t with (G + t H) v < v for some positive v; below 0: not even t = 0."""
        n = G.shape[1]
        best = np.full(len(G), -1.0)
        fit = np.isfinite(G).all(axis=(1, 2)) & np.isfinite(H).all(axis=(1, 2))
        G, H = G[fit], H[fit]
        found = np.full(len(G), -1.0)
        try:
            K = np.linalg.inv(np.eye(n) - G)
        except np.linalg.LinAlgError:
            return best
        start = K.sum(axis=2)
        v = start = np.maximum(start / np.abs(start).max(axis=1, keepdims=True), 0.0)
        for _ in range(_STEPS):
            left = v - (G @ v[:, :, None])[:, :, 0] * self.slack
            used = (H @ v[:, :, None])[:, :, 0] * self.slack
            each = np.where(left > 0, np.where(used > 0, left / used, np.inf), -1.0)
            each[v <= 0] = -1.0
            found = np.fmax(found, each.min(axis=1) * (1 - 16 * _U))
            v = (K @ used[:, :, None])[:, :, 0]
            top = v.max(axis=1, keepdims=True)
            v = np.where(top > 0, v / top, 0.0) + 1e-4 * start
        best[fit] = found
        return best
