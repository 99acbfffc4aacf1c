"""A small problem that bounds the least singular value over a whole square.

Let c be a point, w the offset from it, and ``M(c + w) = M(c) - w [I 0]``. Multiply from the left by
``[U1 X]*`` and from the right by ``[V1 Z]``, where U1 and V1 hold all singular vectors of M(c) but
the k smallest ones. What comes out is

    G(w) = [ T(w)            G12 - w P12 ]      T(w) = G11 - w P11,   P = [U1 X]* [I 0] [V1 Z],
           [ G21 - w P21     G22 - w P22 ]

with G11 close to the diagonal matrix S1 of the large singular values, and G12, G21 close to zero.
*Elimination.* With ``l(w) = -(G21 - w P21) T(w)^-1`` and the Schur complement

    Y(w) = G22 - w P22 - (G21 - w P21) T(w)^-1 (G12 - w P12)                     k by (k + m)

``[l, I] G = [0, Y]``. So a unit row v with ``|v Y| = sigma(Y)`` gives the vector ``v [l, I]``, and

    sigma(G(w)) <= sigma(Y(w)) / sqrt(1 + |v l(w)|^2).                                       (upper)

*From below.* ``G = [I 0; -l I] [T, G12 - w P12; 0 Y]``, and with ``p(w) = T^-1 (G12 - w P12)`` and
any right inverse R of Y, ``[T^-1, -p R; 0, R] [I 0; l I]`` is a right inverse of G. Its blocks are
``T^-1 - p R l``, ``-p R``, ``R l`` and ``R``, and a matrix of blocks has at most the norm of the
matrix of the norms of its blocks. With eta = 1 / sigma(Y)

    1 / sigma(G(w)) <= | [ |T^-1| + |p| eta |l|    |p| eta ] |                               (lower)
                       | [ eta |l|                 eta     ] |

where ``|T^-1| <= 1 / (s - |w|)``, s the least of the large singular values. Both sides agree to
first order in w, and no information on the other n - k directions is lost in between: the whole
square is searched in a problem of k rows.

*The series.* ``(G21 - w P21) T^-1 = sum w^j c_j`` with ``c_0 = G21 G11^-1``,
``c_1 = c_0 Q - P21 G11^-1``, ``c_j = c_{j-1} Q`` after that, ``Q = P11 G11^-1``. Hence
``Y = sum w^j y_j``, ``y_j = [j=0] G22 - [j=1] P22 - c_j G12 + c_{j-1} P12``, and since
``|Q| <= q`` the terms after J sum to at most
``r^(J+1) |c_J| (|P12| + q |G12|) / (1 - r q)`` on ``|w| <= r``.

*On a smaller square*, centre v, half diagonal h: ``Y(v + d) = Y(v) + d Y'(v) + rest`` with
``|rest| <= h^2 / 2 sum j (j - 1) R^(j-2) |y_j|``, R = |v| + h. For k = 1 the least length of
``y + d y'`` over the disc is explicit. For k > 1 the square of sigma(Y + d Y') minus
``|d|^2 |Y'|^2`` is concave in d (it is the least of functions ``|u* (Y + d Y')|^2 - |d|^2 |Y'|^2``,
each of which is concave), so its least value over the square is at a corner.

References
----------
Gu (2000), New methods for estimating the distance to uncontrollability, SIAM J. Matrix Analysis 21,
and Burke, Lewis, Overton (2004), Pseudospectral components and the distance to uncontrollability,
SIAM J. Matrix Analysis 26, for the function and its many local minima. Horn and Johnson (2013),
Matrix Analysis, sections 0.7 and 5.6, for Schur complements and norms of blocks.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from realize.nearness.pencil import ROUNDOFF

__all__ = ["Cover", "Reduced"]

Array = np.ndarray[Any, Any]

_DEEPEST: Final = 44
"""How often a square may be halved inside one reduced problem: the centres, whose grid has six bits
of its own, are then doubles exactly."""

_WIDEST: Final = (256, 64)
"""How many squares of one size may stay open inside one reduced problem, of one row or more."""

_FEW: Final = 5
"""How many squares a reduced problem may leave open, unless they are its quarters."""

_SAFE: Final = 1e-11
"""Relative allowance for the rounding of the few last operations on norms."""


@dataclass(frozen=True, kw_only=True, slots=True)
class Cover:
    """What a reduced problem could say about a square.

    ``open`` holds (level, column, row) of the squares left, level 0 being the whole; ``low`` an
    offset where the least singular value is so low that it is news, None when none was met.
    """

    open: tuple[tuple[int, int, int], ...]
    low: complex | None


@dataclass(frozen=True, kw_only=True, slots=True)
class Reduced:
    """The problem in the k smallest singular directions around a point.

    Attributes
    ----------
    terms : complex array (J + 1, k, k + m)
        y_0, y_1 scale, ..., y_J scale^J, so that neither they nor their squares overflow.
    scale : float
        A power of two, not below the radius.
    gap : float
        A lower bound of the least singular value of G11; divided into |w| wherever T is inverted.
    left, right : float
        Bounds of |P21 G11^-1| and |G11^-1 P12|.
    left_rest, right_rest : float
        Bounds of |G21 G11^-1| and |G11^-1 G12|.
    radius : float
        The bounds hold for offsets up to this size.
    tail : float
        Bounds what is missing in Y anywhere up to the radius: the series cut off, rounding.
    shift : float
        sigma(M) is at least sigma(G) minus this.
    stretch : float
        ... and divided by this.
    """

    terms: Array
    scale: float
    gap: float
    left: float
    right: float
    left_rest: float
    right_rest: float
    radius: float
    tail: float
    shift: float
    stretch: float

    @property
    def rows(self) -> int:
        """The number k of singular directions kept."""
        return int(self.terms.shape[1])

    def _sizes(self) -> Array:
        """Return |y_j| scale^j, (J + 1)."""
        return np.asarray(np.sqrt((np.abs(self.terms) ** 2).sum(axis=(1, 2))))

    def at(self, offsets: Array) -> tuple[Array, Array]:
        """Return Y and its derivative at offsets (N), each of shape (N, k, k + m)."""
        w = offsets[:, None, None] / self.scale
        value = np.broadcast_to(self.terms[-1], (len(offsets), *self.terms.shape[1:])).copy()
        slope = np.zeros_like(value)
        for term in self.terms[-2::-1]:
            slope = slope * w + value
            value = value * w + term
        return value, slope / self.scale

    def _inside(self, eta_inverse: Array, reach: Array, target: float) -> Array:
        """Whether (lower) shows sigma(M) >= target, for 1 / eta and |w| given."""
        ok = (eta_inverse > 0) & (reach < 0.9 * self.gap) & (reach <= self.radius)
        eta = 1 / np.where(ok, eta_inverse, 1.0)
        share = np.where(ok, reach / self.gap, 0.0)
        left = (self.left * reach + self.left_rest) / (1 - share)
        right = (self.right * reach + self.right_rest) / (1 - share)
        # Near the least distances squares would overflow, so the largest of the norms comes out.
        with np.errstate(over="ignore", invalid="ignore"):
            corner = 1 / (self.gap * (1 - share)) + right * eta * left
            largest = np.maximum(np.maximum(corner, eta), eta * np.maximum(left, right))
            parts = (corner, right * eta, eta * left, eta)
            total = sum((part / largest) ** 2 for part in parts)
            # The determinant of the four norms is eta / (s - |w|).
            product = eta / largest / (self.gap * (1 - share)) / largest
            root = np.sqrt(np.maximum(total**2 - 4 * product**2, 0.0))
            norm = largest * np.sqrt((total + root) / 2)
        return np.asarray(ok & (norm * (target * (1 + _SAFE)) <= 1))

    def cover(self, side: float, target: float, news: float) -> Cover:
        """Say on which parts of the square around the point sigma(M) >= target is proved.

        Parameters
        ----------
        side : float
            The side of the square; its corners lie within the radius.
        target : float
        news : float
            At least the target; the search ends at a centre where sigma(M) is lower than this.
        """
        wanted = (target + self.shift) * self.stretch * (1 + _SAFE)
        sizes = self._sizes()
        count = np.arange(len(sizes))
        # What evaluating Y and, times h, its derivative can round.
        horner = 16 * (len(sizes) + 2) ** 2 * ROUNDOFF
        xs = ys = np.zeros(1, dtype=np.int64)
        left: list[tuple[int, int, int]] = []
        low: complex | None = None
        for level in range(_DEEPEST):
            step = side / (1 << level)
            half = step * 0.7071067811865476 * (1 + 1e-14)
            w = (-side / 2 + (xs + 0.5) * step) + 1j * (-side / 2 + (ys + 0.5) * step)
            reach = (np.abs(w) + half) * (1 + 1e-14)
            powers = (reach[:, None] / self.scale) ** count
            lost = self.tail + horner * (powers @ sizes)
            bend = (powers[:, : len(sizes) - 2] * (count[2:] * (count[2:] - 1))) @ sizes[2:]
            value, slope = self.at(w)
            least, here = _least_over(value, slope, step, half)
            proved = self._inside(
                least * (1 - _SAFE) - lost - (half / self.scale) ** 2 / 2 * bend * (1 + _SAFE),
                reach,
                wanted,
            )
            below = here < news
            if below.any():
                low = complex(w[int(np.argmin(np.where(below, here, np.inf)))])
                break
            # Where even the centre alone is not proved, smaller squares will not help here.
            hopeless = ~proved & ~self._inside(here * (1 - _SAFE) - lost, np.abs(w), wanted)
            left += [
                (level, int(x), int(y)) for x, y in zip(xs[hopeless], ys[hopeless], strict=True)
            ]
            again = ~proved & ~hopeless
            xs, ys = xs[again], ys[again]
            if not len(xs):
                break
            if 4 * len(xs) > _WIDEST[self.rows > 1]:
                break
            xs = np.concatenate([2 * xs, 2 * xs + 1, 2 * xs, 2 * xs + 1])
            ys = np.concatenate([2 * ys, 2 * ys, 2 * ys + 1, 2 * ys + 1])
        else:
            level = _DEEPEST
        left += [(level, int(x), int(y)) for x, y in zip(xs, ys, strict=True)]
        return Cover(open=_gathered(left), low=low)


def _gathered(left: list[tuple[int, int, int]]) -> tuple[tuple[int, int, int], ...]:
    """Return few squares that hold all those left, as small as that allows.

    Each square left costs a decomposition of its own, so scattered small ones are not worth having.
    """
    found: set[tuple[int, int, int]] = set()
    for level in range(max((level for level, _, _ in left), default=-1) + 1):
        held = {
            (min(own, level), x >> max(own - level, 0), y >> max(own - level, 0))
            for own, x, y in left
        }
        if len(held) > _FEW and level > 1:
            break
        found = held
    return tuple(sorted(found))


def _least(value: Array) -> Array:
    """Return the least singular value of each of a stack of matrices (N, k, k + m)."""
    if value.shape[1] == 1:
        return np.asarray(np.sqrt((np.abs(value) ** 2).sum(axis=(1, 2))))
    return np.asarray(np.linalg.svd(value, compute_uv=False)[:, -1])


def _least_over(value: Array, slope: Array, step: float, half: float) -> tuple[Array, Array]:
    """Return bounds of sigma(Y + d Y') over squares from below, and sigma(Y) at the centres."""
    if value.shape[1] == 1:
        a, b = value[:, 0, :], slope[:, 0, :]
        square = (np.abs(b) ** 2).sum(axis=1)
        inner = (b.conj() * a).sum(axis=1)
        nearest = np.where(square > 0, -inner / np.where(square > 0, square, 1.0), 0.0)
        rest = a + nearest[:, None] * b
        beyond = np.maximum(np.abs(nearest) - half, 0.0)
        least = np.sqrt((np.abs(rest) ** 2).sum(axis=1) + square * beyond**2)
        return least, np.sqrt((np.abs(a) ** 2).sum(axis=1))
    square = np.linalg.norm(slope, axis=(1, 2)) ** 2
    corners = np.full(len(value), np.inf)
    for d in (step / 2) * np.array([1 + 1j, 1 - 1j, -1 + 1j, -1 - 1j]):
        corners = np.minimum(corners, _least_proved(value + d * slope))
    return np.sqrt(np.maximum(corners**2 - square * half**2 * (1 + _SAFE), 0.0)), _least(value)


def _least_proved(value: Array) -> Array:
    """Return lower bounds of the least singular value of each of a stack of matrices.

    From value = U S V + E follows sigma >= s sqrt((1 - |U*U - I|) (1 - |V V* - I|)) - |E|; what the
    products themselves round is below ``16 (k + m)^2 u`` times the sizes that enter.
    """
    U, s, V = np.linalg.svd(value, full_matrices=False)
    rows, columns = value.shape[1:]
    doubt = 16 * columns**2 * ROUNDOFF
    one = np.eye(rows)
    turn_left = np.linalg.norm(U.conj().swapaxes(1, 2) @ U - one, axis=(1, 2)) + doubt
    turn_right = np.linalg.norm(V @ V.conj().swapaxes(1, 2) - one, axis=(1, 2)) + doubt
    rest = np.linalg.norm(value - (U * s[:, None, :]) @ V, axis=(1, 2))
    rest += doubt * np.linalg.norm(value, axis=(1, 2))
    return np.asarray(s[:, -1] * (1 - turn_left - turn_right) - rest)
