"""What a disc of the complex plane proves about all models in a box.

On a disc |z - z0| <= r take an approximate right inverse X of M(z0) = [A - z0 I, B]. For every z in
the disc and every model in the box M X = I - P with |P| <= |I - M(z0) X| + (R + r [I 0]) |X|, entry
by entry. Where a positive vector v has |P| v < v, the spectral radius of P is below 1 (Collatz and
Wielandt; Berman and Plemmons, Nonnegative Matrices in the Mathematical Sciences, chapter 2), so M X
is not singular and M has full rank. With t R for R the inequality is linear in t, so each disc has
a largest factor t that it proves.

Any X will do for a proof, and which one is taken decides how much is proved. Three are tried: the
one of least size, columns weighted; those that leave columns out; and the best of these sharpened.

Every bound is for the numbers as they are, not as they were computed: an inner product of length k
in doubles is off by no more than k u / (1 - k u) times that of the sizes, in whatever order it was
summed (Higham, Accuracy and Stability of Numerical Algorithms, section 3.1). Where doubles do not
suffice, balls do it.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from typing import Any, Final

import numpy as np

from realize.polynomials import working_precision
from realize.within.box import Pencil

__all__ = ["Discs", "Proved"]

Array = np.ndarray[Any, Any]

_U: Final = 2.0**-52
"""Twice the unit roundoff, so that single operations are covered with room."""

_STEPS: Final = 5
"""Power iterations towards a Perron vector."""

_LIGHTEST: Final = 1e-3
"""Weight of the columns with least uncertainty, beside those with most."""

_FACTORS: Final = (0.3, 0.6, 0.8, 0.9, 1.001, 1.05)
"""Factors for which a vector is sought where power iterations do not find one."""

_SCALINGS: Final = 3
"""How often such a vector is computed, each time in the units of the one before."""

_TIGHT: Final = 1.5
"""Factor at the centre below which more right inverses are tried."""

_SETS: Final = 40
"""How many right inverses that leave out columns are tried at most."""

_SINGULAR: Final = 1e-10
"""Share below which a number in an inverse of random entries of size one counts as zero."""

_NO_RADIUS: Final = 2.0**-900
"""Radii that stand for zero."""

_FLOORS: Final = (1e-1, 1e-2, 1e-3, 1e-4, 1e-5, 1e-6)
"""Weights of the smallest components, beside the largest, from round to round of sharpening."""

_SHARPENED: Final = 24
"""Up to this order right inverses are sharpened; the time goes with its fourth power."""

_GROUP: Final = 16
"""Discs for which many right inverses are held at a time."""

_FINE: Final = 4.0
"""A disc is small enough for balls when its radius is below this times the least singular value."""

_CLOSE: Final = 1e-11
"""Ratio of singular values below which a right inverse in doubles is not to be trusted."""

_BITS: Final = (128, 256, 512)
"""Precisions of ball arithmetic, tried in turn."""

_SMALL: Final = 1e-6
"""Residual with which a right inverse in balls is good enough."""


@dataclass(frozen=True, slots=True, eq=False)
class Proved:
    """What discs prove.

    Attributes
    ----------
    factor : float array (count,)
        With radii up to this times those of the box every model has full rank in the disc; below
        0 where not even the centre of the box is proved to.
    limit : float array (count,)
        About what small discs around the same centres could prove; an estimate.
    inverse : complex array (count, n + m, n)
        The right inverses that these rest on.
    """

    factor: Array
    limit: Array
    inverse: Array


class Discs:
    """Discs for one pencil; boxes inside that of the pencil may be given instead of all of it.

    When it is ``late``, proofs that take long are not tried.
    """

    def __init__(
        self, pencil: Pencil, largest: float, late: Callable[[], bool] = lambda: False
    ) -> None:
        self.pencil, self.largest, self.late = pencil, largest, late
        n, width = pencil.matrix.shape
        self.slack = 1 + (width + 16) * 8 * _U
        self.eye = np.eye(n, width)
        self._found_bases: list[tuple[list[int], Array]] | None = None

    def proved(
        self,
        z: Array,
        r: Array,
        rest: Array | None = None,
        matrix: Array | None = None,
        radius: Array | None = None,
    ) -> Proved:
        """Return what discs prove.

        Parameters
        ----------
        z : complex array (count,)
        r : float array (count,)
        rest : complex array (count,), or None
            What doubles do not hold of the centres: they are z + rest.
        matrix, radius : float arrays (count, n, n + m)
            The centres and radii of other boxes. None: those of the pencil.
        """
        shape = (len(z), *self.pencil.matrix.shape)
        whole = matrix is None
        if matrix is None or radius is None:
            matrix = np.broadcast_to(self.pencil.matrix, shape)
            radius = np.broadcast_to(self.pencil.radius, shape)
        with np.errstate(all="ignore"):
            rest = np.zeros(len(z), dtype=complex) if rest is None else rest
            return self._proved(_Many(z, rest, r, matrix, radius), whole)

    def _proved(self, many: _Many, whole: bool) -> Proved:
        M = self._complex(many)
        X, spread = _least(M, many.weights(self.eye))
        sizes = _sizes(X)
        G, H = self._bounds(many, X, sizes)
        found = self._largest(G, H)
        limit = np.full(len(M), self.largest)
        trusted = spread[:, 0] >= _CLOSE * spread[:, 1]
        for k in self._for_balls(many, found, spread, trusted, sizes, H) if whole else ():
            if self.late():
                break
            G_k, H_k, point = self._in_balls(many.some([k]))
            found[k] = max(found[k], self._largest(G_k[None], H_k[None])[0])
            limit[k] = self._largest(point[None], H_k[None])[0]
        open_ones = np.flatnonzero((found < 1) & trusted)
        if len(open_ones):
            points = many.some(open_ones).shrunk()
            at_point, _ = _least(M[open_ones], points.weights(self.eye))
            H = points.radius @ _sizes(at_point)
            limit[open_ones] = self._largest(0 * H, H)
            tight = open_ones[limit[open_ones] < _TIGHT]
            for start in range(0, len(tight), _GROUP):
                if self.late():
                    break
                few = tight[start : start + _GROUP]
                better = self._tried(many.some(few), M[few], X[few])
                found[few] = np.maximum(found[few], better.factor)
                limit[few] = np.maximum(limit[few], better.limit)
                X[few] = better.inverse
        return Proved(found, np.minimum(limit, self.largest), X)

    def _for_balls(
        self, many: _Many, found: Array, spread: Array, trusted: Array, sizes: Array, H: Array
    ) -> list[int]:
        """Return the discs for which balls may prove what doubles do not.

        Where the centre is nearly as close to a hidden mode as doubles can tell, or where it is
        rounding that stands in the way, if the disc is small enough for its centre.
        """
        n = self.pencil.order
        fine = many.r <= _FINE * spread[:, 0] + 4 * n * _U * spread[:, 1]
        asked = np.flatnonzero((found < 1) & fine)
        if not len(asked):
            return []
        exact = self._largest(many.r[asked, None, None] * sizes[asked, :n], H[asked])
        return list(asked[~trusted[asked] | (exact >= 1)].tolist())

    def _complex(self, many: _Many) -> Array:
        return np.asarray(many.matrix - many.z[:, None, None] * self.eye)

    def _bounds(self, many: _Many, X: Array, sizes: Array) -> tuple[Array, Array]:
        """Return G and H with |I - M X| <= G + t H for radii t R, whatever was rounded."""
        n, width = self.pencil.matrix.shape
        y = many.z.imag[:, None, None]
        M = many.matrix - many.z.real[:, None, None] * self.eye
        size = np.abs(M) + np.abs(y) * self.eye
        # The differences on the diagonal are rounded, and so are the products below.
        own = self.pencil.lost + (4 * (width + 8) * _U) * size
        real, imag = np.ascontiguousarray(X.real), np.ascontiguousarray(X.imag)
        residual = np.abs(np.eye(n) - (M @ real + y * imag[:, :n]))
        residual += np.abs(M @ imag - y * real[:, :n])
        off = (many.r + np.abs(many.rest)) * (1 + 4 * _U)
        own = own + off[:, None, None] * self.eye
        G = (residual + own @ sizes + 4 * _U * np.eye(n)) * self.slack
        return G, (many.radius @ sizes) * self.slack

    def _largest(self, G: Array, H: Array) -> Array:
        """Return factors t with (G + t H) v < v for some positive v; below 0: not even t = 0."""
        n = G.shape[1]
        best = np.full(len(G), -1.0)
        fit = np.isfinite(G).all(axis=(1, 2)) & np.isfinite(H).all(axis=(1, 2))
        G, H = G[fit], H[fit]
        K = _inverses(np.eye(n) - G)
        start = K.sum(axis=2)
        v = start = np.maximum(start / np.abs(start).max(axis=1, keepdims=True), 0.0)
        found = np.full(len(G), -1.0)
        for _ in range(_STEPS):
            each, used = self._factor_of(G, H, v)
            found = np.fmax(found, each)
            v = (K @ used[:, :, None])[:, :, 0]
            top = v.max(axis=1, keepdims=True)
            v = np.where(top > 0, v / top, 0.0) + 1e-4 * start
        # Where components of v must differ by many orders, a vector made for a factor does it.
        for wanted in _FACTORS:
            left = np.flatnonzero((found < wanted) & (start > 0).all(axis=1))
            if not len(left):
                continue
            P = G[left] + wanted * H[left]
            v = np.ones((len(left), n))
            for _ in range(_SCALINGS):
                # In the units of the last vector, so that its small components are accurate too.
                v = v * _inverses(np.eye(n) - P * v[:, None, :] / v[:, :, None]).sum(axis=2)
                found[left] = np.fmax(found[left], self._factor_of(G[left], H[left], v)[0])
                v = np.maximum(np.abs(v) / np.abs(v).max(axis=1, keepdims=True), 1e-200)
        best[fit] = found
        return best

    def _factor_of(self, G: Array, H: Array, v: Array) -> tuple[Array, Array]:
        """Return the factors that vectors prove, below 0 for none, and H v."""
        left = v - (G @ v[:, :, None])[:, :, 0] * self.slack
        used = (H @ v[:, :, None])[:, :, 0] * self.slack
        each = np.where(left > 0, np.where(used > 0, left / used, np.inf), -1.0)
        each[~(v > 0)] = -1.0
        return each.min(axis=1) * (1 - 16 * _U), used

    # Other right inverses

    def _tried(self, many: _Many, M: Array, X: Array) -> Proved:
        """Return the best of several right inverses for each disc."""
        n, width = self.pencil.matrix.shape
        best, limit = np.full(len(M), -1.0), np.full(len(M), -1.0)
        chosen = X.copy()
        for sharpen in (False, True) if n <= _SHARPENED else (False,):
            tried = self._sharpened(many, M, chosen)[:, None] if sharpen else self._spared(M)
            count = tried.shape[1]
            repeated = many.some(np.repeat(np.arange(len(M)), count))
            inverses = tried.reshape(-1, width, n)
            sizes = _sizes(inverses)
            G, H = self._bounds(repeated, inverses, sizes)
            best = np.maximum(best, self._largest(G, H).reshape(-1, count).max(axis=1))
            shrunk = G - repeated.r[:, None, None] * sizes[:, :n]
            at_point = self._largest(shrunk, H).reshape(-1, count)
            better = at_point.max(axis=1) > limit
            chosen[better] = tried[np.arange(len(M)), at_point.argmax(axis=1)][better]
            limit = np.maximum(limit, at_point.max(axis=1))
        return Proved(best, limit, chosen)

    def _spared(self, M: Array) -> Array:
        """Return right inverses that leave out as many columns as there are too many.

        Where the uncertainty sits in few columns, or the zero pattern alone decides, such an
        inverse proves more than one of least size.
        """
        n, width = self.pencil.matrix.shape
        found = []
        for kept, pattern in self._bases():
            square = M[:, :, kept]
            inverse = np.zeros((len(M), width, n), dtype=complex)
            inverse[:, kept] = _solved(square, np.broadcast_to(np.eye(n), square.shape)) * pattern
            found.append(inverse)
        if not found:
            return np.zeros((len(M), 1, width, n), dtype=complex)
        stacked = np.stack(found, axis=1)
        return np.where(np.isfinite(stacked), stacked, 0.0)

    def _bases(self) -> list[tuple[list[int], Array]]:
        """Return sets of as many columns as rows, and where the inverse of each is not zero.

        Rounding leaves noise where the pattern demands zeros, and with entries of very unlike
        sizes it would cover what is left. The pattern is that of the inverse of a matrix of
        random numbers with the same zeros; sets that are singular for any numbers are left out.
        """
        if self._found_bases is None:
            n, width = self.pencil.matrix.shape
            rng = np.random.default_rng(0)
            uncertain = self.pencil.radius > _NO_RADIUS
            filled = (self.pencil.matrix != 0) | uncertain | (self.eye != 0)
            random = np.where(filled, rng.uniform(0.5, 1.5, (n, width)), 0.0)
            random *= rng.choice([-1, 1], (n, width))
            self._found_bases = []
            sets = itertools.combinations(range(width), width - n)
            for dropped in itertools.islice(sets, _SETS):
                kept = [j for j in range(width) if j not in dropped]
                s = np.linalg.svd(random[:, kept], compute_uv=False)
                if s[-1] > _SINGULAR * s[0]:
                    inverse = np.abs(np.linalg.inv(random[:, kept]))
                    self._found_bases.append((kept, inverse > _SINGULAR * inverse.max()))
        return self._found_bases

    def _sharpened(self, many: _Many, M: Array, X: Array) -> Array:
        """Return right inverses for which the spectral radius of (R + r [I 0]) |X| is small.

        Its derivative is w' (R + r [I 0]) d|X| v with the Perron vectors w and v, so for given w
        column k of X should have the least sum of s_j |x_j|, s = w' (R + r [I 0]), among the
        solutions of M x = e_k. The sum of sizes is minimised by least squares, weighted again and
        again (heuristic; what comes out is tested like any other X).
        """
        n = self.pencil.order
        S = many.radius + many.r[:, None, None] * self.eye
        star = M.conj().transpose(0, 2, 1)
        unit = np.eye(n)[None, :, :, None] + np.zeros((len(M), 1, 1, 1))
        w = np.ones((len(M), n))
        for floor in _FLOORS:
            sizes = np.abs(X)
            w = _perron((S @ sizes).transpose(0, 2, 1), w)
            s = (w[:, None, :] @ S)[:, 0, :]
            s = np.maximum(s, 1e-6 * s.max(axis=1, keepdims=True))
            D = sizes / s[:, :, None]
            D = np.sqrt(D + floor * D.max(axis=1, keepdims=True)).transpose(0, 2, 1)
            if not (np.isfinite(D).all() and D.all()):
                break
            # One weighted least squares problem for each column of each X.
            Q, triangle = np.linalg.qr(D[:, :, :, None] * star[:, None])
            solved = _solved(triangle.conj().transpose(0, 1, 3, 2), unit)
            X = (D * (Q @ solved)[:, :, :, 0]).transpose(0, 2, 1)
        return X

    def _in_balls(self, here: _Many) -> tuple[Array, Array, Array]:
        """Return G, H and the part of G that is left when the disc shrinks, by ball arithmetic.

        The right inverse is that of least norm, columns weighted as in doubles.
        """
        from flint import acb, acb_mat

        pencil = self.pencil
        n, width = pencil.matrix.shape
        z, rest, r = complex(here.z[0]), complex(here.rest[0]), float(here.r[0])
        weight = here.weights(self.eye)[0].tolist()
        for bits in _BITS:
            with working_precision(bits):
                rows = [[acb(_ball(entry)) for entry in row] for row in pencil.exact]
                for i in range(n):
                    rows[i][i] -= acb(z.real, z.imag) + acb(rest.real, rest.imag)
                M = acb_mat(rows)
                D = acb_mat(width, width, [0] * (width * width))
                for j in range(width):
                    D[j, j] = acb(1 / weight[j] ** 2)
                star = D * M.conjugate().transpose()
                try:
                    X = (star * (M * star).mid().inv().mid()).mid()
                except ZeroDivisionError:
                    continue
                left = M * X
                for i in range(n):
                    left[i, i] -= 1
                point, sizes = _above_balls(left), _above_balls(X)
            if point.max(initial=0.0) < _SMALL:
                break
        else:
            nothing = np.full((n, n), np.inf)
            return nothing, nothing, nothing
        G = (point + r * sizes[:n]) * self.slack
        return G, (pencil.radius @ sizes) * self.slack, point

    # What a disc suffers from

    def burdens(self, proved: Proved, r: Array, radius: Array) -> tuple[Array, Array]:
        """Return how much the size of each disc, and each radius, adds to the spectral radius.

        Returns
        -------
        of_disc : float array (count,)
        of_entries : float array (count, n, n + m)
        """
        sizes = np.abs(proved.inverse)
        P = (radius + r[:, None, None] * self.eye) @ sizes
        ones = np.ones(P.shape[:2])
        v = _perron(P, ones)
        w = _perron(P.transpose(0, 2, 1), ones)
        image = (sizes @ v[:, :, None])[:, :, 0]
        n = self.pencil.order
        of_disc = r * (w * image[:, :n]).sum(axis=1)
        return of_disc, w[:, :, None] * radius * image[:, None, :]


@dataclass(frozen=True, slots=True, eq=False)
class _Many:
    """Discs and boxes, one box for each disc."""

    z: Array
    rest: Array
    r: Array
    matrix: Array
    radius: Array

    def some(self, which: Any) -> _Many:
        return _Many(
            self.z[which], self.rest[which], self.r[which], self.matrix[which], self.radius[which]
        )

    def shrunk(self) -> _Many:
        return _Many(self.z, self.rest, 0 * self.r, self.matrix, self.radius)

    def weights(self, eye: Array) -> Array:
        """Return how much a column of M should be spared by a right inverse."""
        weight = self.radius.sum(axis=1) + self.r[:, None] * eye.sum(axis=0)
        largest = weight.max(axis=1, keepdims=True)
        weight = np.maximum(weight, _LIGHTEST * largest) / np.where(largest > 0, largest, 1.0)
        return np.where(np.isfinite(weight) & (weight > 0), weight, 1.0)


def _least(M: Array, weights: Array) -> tuple[Array, Array]:
    """Return approximate right inverses of least size, columns weighted.

    Also the least and the largest singular value of the weighted matrices.
    """
    D = 1 / weights
    good = np.asarray(np.isfinite(M).all(axis=(1, 2)))
    scaled = np.where(good[:, None, None], M * D[:, None, :], np.eye(*M.shape[1:]))
    U, s, W = np.linalg.svd(scaled, full_matrices=False)
    spread = s[:, [-1, 0]]
    s = np.maximum(s, s[:, :1] * _U)
    X = (W.conj().transpose(0, 2, 1) / s[:, None, :]) @ U.conj().transpose(0, 2, 1)
    return D[:, :, None] * X, spread


def _perron(P: Array, start: Array) -> Array:
    """Return about the Perron vectors of matrices that are not negative, largest component 1."""
    v = start
    for _ in range(_STEPS):
        v = (P @ v[:, :, None])[:, :, 0]
        top = v.max(axis=1, keepdims=True)
        v = np.where(top > 0, v / top, 1.0) + 1e-3
    return v


def _inverses(matrices: Array) -> Array:
    """Return the inverses; of a singular matrix, something that proves nothing."""
    try:
        return np.asarray(np.linalg.inv(matrices))
    except np.linalg.LinAlgError:
        size = matrices.shape[1]
        finite = np.asarray(np.isfinite(matrices).all(axis=(1, 2)))
        matrices = np.where(finite[:, None, None], matrices, 0.0)
        matrices[np.linalg.matrix_rank(matrices) < size] = -np.eye(size)
        return np.asarray(np.linalg.inv(matrices))


def _solved(matrices: Array, right: Array) -> Array:
    """Solve; where a matrix is singular the solutions are of no use, but are numbers."""
    try:
        return np.asarray(np.linalg.solve(matrices, right))
    except np.linalg.LinAlgError:
        size = np.abs(matrices).max(axis=(-2, -1), keepdims=True)
        nudge = np.where(size > 0, size, 1.0) * 1e-13 * np.eye(matrices.shape[-1])
        return np.asarray(np.linalg.solve(matrices + nudge, right))


def _sizes(X: Array) -> Array:
    """Return numbers not below the sizes of complex entries."""
    return np.asarray(np.hypot(X.real, X.imag) * (1 + 4 * _U))


def _ball(entry: Fraction) -> Any:
    from flint import arb, fmpq

    return arb(fmpq(entry.numerator, entry.denominator))


def _above_balls(matrix: Any) -> Array:
    """Return doubles not below the sizes of the entries of a matrix of balls."""
    flat = [float(abs(entry).abs_upper()) for entry in matrix.entries()]
    return np.array(flat).reshape(matrix.nrows(), matrix.ncols()) * (1 + 4 * _U) + 2.0**-1000
