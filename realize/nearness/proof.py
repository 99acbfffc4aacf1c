"""The reduced problem of a square, with every rounding error accounted for.

Two makers. `reduce_in_doubles` reads it off a computed singular value decomposition and pays for
that with a priori bounds; it serves where the distance is well above the roundoff.
`reduce_in_balls` takes the computed vectors as nothing but a preconditioner: the exact matrix is
multiplied by them in ball arithmetic, so the tiny singular values come out with as many digits as
are asked for, however small they are.

*In doubles.* Let U, S, V be computed, ``dU = |U*U - I|``, ``dV = |V V* - I|`` and
``E = M(c) - U [S 0] V``. Then ``M(c + w) = U ([S 0] - w P') V + E`` with
``P' = U^-1 [I 0] V^-1``, which differs from ``P = U* [I 0] V*`` by at most 1.1 (dU + dV) as long as
both are below 0.01. So

    sigma(M) >= sigma([S 0] - w P) (1 - dU - dV) - |E| - 1.1 |w| (dU + dV),

and G11 = S1, G12 = 0, G21 = 0 in the text of `realize.nearness.squares`. The products U*U, V V* and
U S V are computed; each rounds by at most ``gamma_{4 n}`` times the product of the moduli
(Higham 2002, sections 3.5 and 3.6), whose Frobenius norm is at most n, n + m and
``sqrt(n) |S|``. The rows c_j and the terms y_j round too: a product of a row with P11 by at most
``e = 8 n gamma_4`` of its length per step, which sums to less than ``6 e r^2 q`` for r q <= 1/2.

*In balls.* ``G = U* M(c) V*`` and ``P = U* [I 0] V*`` are enclosed; ``G11 = S1 + F`` with F small,
and ``x G11^-1`` is the limit of ``x -> (b - x F) S1^-1``; after i steps, begun at zero, the error
is at most ``f^i / (1 - f) |b| / s`` with ``f = |F| / s``. What is left of U and V is ``sigma(M) >=
sigma(G) / (|U| |V|)``.

References
----------
Rump (2006), Verification of positive definiteness, BIT 46. Rump (2010), Verification methods:
rigorous results using floating-point arithmetic, Acta Numerica 19, for preconditioners that need
no proof of their own. Johansson (2017), Arb: efficient arbitrary-precision midpoint-radius
interval arithmetic, IEEE Transactions on Computers 66.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction
from typing import Any, Final

import numpy as np
from flint import acb, acb_mat, arb, ctx

from realize.entries import fraction_array
from realize.errors import VerificationError
from realize.nearness.pencil import ROUNDOFF, Pencil, Point, rounded
from realize.nearness.squares import Reduced

__all__ = ["Decomposed", "decompose", "reduce_in_balls", "reduce_in_doubles", "refined_vector"]

Array = np.ndarray[Any, Any]

_LONGEST: Final = 80
"""How many terms of the series are taken at most; the square must be smaller then."""

_MOST_ROWS: Final = 3
"""How many singular directions are kept at most."""

_CLEAR: Final = 3.0
"""How many times the offset the singular values left out must be; the series needs it."""

_APART: Final = 1.4
"""... and how many times the level; the bounds need it."""

_SPARE_BITS: Final = 40
"""Bits of a ball beyond those that the distance and the ratio asked for call for."""


@dataclass(frozen=True, kw_only=True, slots=True)
class Decomposed:
    """A computed decomposition at a point: ``M = left @ [diag(values) 0] @ right``."""

    point: Point
    left: Array
    values: Array
    right: Array

    def split(self, radius: float, target: float) -> int | None:
        """Return how many small singular directions to keep for a square, None if too many.

        The large ones must stay clear of the level and of the offset, so that little is lost.
        """
        values = self.values
        size = len(values)
        for k in range(1, min(_MOST_ROWS, size) + 1):
            if k == size or values[size - 1 - k] >= max(_CLEAR * radius, _APART * target):
                return k
        return None


def decompose(pencil: Pencil, point: Point) -> Decomposed:
    """Return the decomposition of M at the doubles nearest to a point."""
    left, values, right = pencil.decomposition(rounded(point))
    return Decomposed(point=point, left=left, values=values, right=right)


def _turns(found: Decomposed) -> tuple[float, float]:
    """Return bounds of |U*U - I| and |V V* - I|."""
    bounds = []
    for factor in (found.left, found.right):
        size = len(factor)
        product = factor.conj().T @ factor
        np.einsum("ii->i", product)[...] -= 1
        bounds.append(1.01 * (float(np.linalg.norm(product)) + 5 * size * size * ROUNDOFF))
    return bounds[0], bounds[1]


def reduce_in_doubles(
    pencil: Pencil, found: Decomposed, k: int, radius: float, enough: float
) -> Reduced | None:
    """Return the reduced problem with a priori bounds, None where its series is too slow.

    Parameters
    ----------
    k : int
        How many singular directions to keep.
    radius : float
        Largest offset.
    enough : float
        The series may be cut where the rest is below this.
    """
    n = pencil.order
    U, s, V = found.left, found.values, found.right
    turn_left, turn_right = _turns(found)
    turn = turn_left + turn_right
    rest = pencil.matrix(rounded(found.point)) - (U * s) @ V[:n]
    z_size = abs(rounded(found.point))
    scale = pencil.size + math.sqrt(n) * z_size
    residual = 1.01 * float(np.linalg.norm(rest)) + ROUNDOFF * scale * (6 * n * math.sqrt(n) + 8)
    U1, X = U[:, : n - k], U[:, n - k :]
    right_top = V[:, :n].conj().T  # [I 0] V*, n by n + m
    V1, Z = right_top[:, : n - k], right_top[:, n - k :]
    large = s[: n - k]
    gap = float(large[-1]) if n > k else math.inf
    corner = X.conj().T @ Z
    terms = [np.zeros_like(corner), -corner]
    terms[0][:, :k] = np.diag(s[n - k :])
    left = right = 0.0
    missing = 0.0
    if n > k:
        rows = (X.conj().T @ V1) / large  # P21 S1^-1
        columns = U1.conj().T @ Z  # P12
        left = 1.0001 * float(np.linalg.norm(rows))
        right = 1.0001 * float(np.linalg.norm(columns / large[:, None]))
        breadth = 1.0001 * float(np.linalg.norm(columns))
        share = radius / gap
        if share > 0.5:
            return None
        rows = -rows
        power = radius * radius
        while True:
            terms.append(rows @ columns)
            missing = power * share * float(np.linalg.norm(rows)) * breadth / (1 - share)
            if missing <= enough:
                break
            if len(terms) > _LONGEST:
                return None
            rows = ((rows @ U1.conj().T) @ V1) / large
            power *= radius
        missing = 1.001 * missing + 6 * (34 * n * ROUNDOFF) * radius * share
    return Reduced(
        terms=np.array(terms),
        gap=gap * (1 - 1e-12),
        left=left + 1e-12 / gap,
        right=right + 1e-12 / gap,
        left_rest=0.0,
        right_rest=0.0,
        radius=radius * (1 + 1e-12),
        tail=missing,
        shift=residual + pencil.slack + 1.1 * radius * turn,
        stretch=1 + 1.1 * turn,
    )


# ---------------------------------------------------------------------------------------------
# Ball arithmetic
# ---------------------------------------------------------------------------------------------


def bits_for(target: float, rtol: float) -> int:
    """Return the precision in which a distance of that size can be told to that ratio."""
    return 53 + _SPARE_BITS + math.ceil(-math.log2(target) - math.log2(rtol))


def _balls(values: Array) -> Any:
    flat = [acb(v.real, v.imag) for v in values.ravel().tolist()]
    return acb_mat(values.shape[0], values.shape[1], flat)


def _part(matrix: Any, rows: range, columns: range) -> Any:
    table = matrix.tolist()
    return acb_mat(len(rows), len(columns), [table[i][j] for i in rows for j in columns])


def _split_ball(value: Any) -> tuple[complex, float]:
    """Return the midpoint in doubles and a bound of the distance to anything in the ball."""
    real, imaginary = value.real, value.imag
    middle = complex(float(real.mid()), float(imaginary.mid()))
    radius = float(real.rad()) + float(imaginary.rad())
    return middle, radius + 2 * ROUNDOFF * abs(middle)


def _midpoints(matrix: Any) -> tuple[Array, float]:
    """Return midpoints as doubles, and a bound of the Frobenius norm of what that leaves out."""
    pairs = [_split_ball(value) for value in matrix.entries()]
    middles = np.array([middle for middle, _ in pairs]).reshape(matrix.nrows(), matrix.ncols())
    return middles, 1.01 * math.sqrt(sum(radius * radius for _, radius in pairs))


def _size(matrix: Any) -> float:
    """Return a bound of the Frobenius norm."""
    middles, rest = _midpoints(matrix)
    return 1.0001 * (float(np.linalg.norm(middles)) + rest)


@dataclass(frozen=True, kw_only=True, slots=True)
class Preconditioned:
    """The exact pencil between computed singular vectors, in balls of the precision in force."""

    corner: Any  # G22, k by k + m
    corner_slope: Any  # P22
    above: Any  # G12
    above_slope: Any  # P12
    beside: Any  # G21
    beside_slope: Any  # P21
    inner_slope: Any  # P11
    rest: Any  # F = G11 - diag(S1)
    large: Array
    rest_size: float
    inverse: Any  # diag(1 / S1)

    def over(self, rows: Any, enough: float = 0.0) -> Any:
        """Enclose rows G11^-1, to an error of about ``enough`` or as well as the balls allow."""
        if not len(self.large):
            return rows
        gap = float(self.large[-1])
        share = self.rest_size / gap
        bits = ctx.prec if enough <= 0 else min(ctx.prec, 10 - math.log2(min(enough, 1.0)))
        steps = max(1, math.ceil(bits / max(-math.log2(max(share, 1e-300)), 1.0)))
        found = first = rows * self.inverse
        for _ in range(steps - 1):
            found = first - found * self.rest * self.inverse
        error = 1.01 * share**steps / (1 - share) * _size(rows) / gap
        doubt = arb(0, error)
        ball = acb(doubt, doubt)
        return acb_mat(found.nrows(), found.ncols(), [value + ball for value in found.entries()])


def precondition(pencil: Pencil, found: Decomposed, k: int) -> Preconditioned | None:
    """Return the exact pencil between the computed vectors; None where they do not separate it."""
    n, whole = pencil.order, pencil.order + pencil.inputs
    U = _balls(found.left.conj().T)
    V = _balls(found.right.conj().T)
    G = U * (pencil.in_balls(found.point) * V)
    P = U * _part(V, range(n), range(whole))
    first, last = range(n - k), range(n - k, n)
    wide = range(n - k, whole)
    large = found.values[: n - k]
    inner = _part(G, first, first)
    rest = acb_mat(
        n - k,
        n - k,
        [
            value - (float(large[i]) if i == j else 0.0)
            for i, row in enumerate(inner.tolist())
            for j, value in enumerate(row)
        ],
    )
    rest_size = _size(rest)
    if len(large) and not rest_size < 0.01 * float(large[-1]):
        return None
    inverse = acb_mat(n - k, n - k)
    for i, value in enumerate(large.tolist()):
        inverse[i, i] = 1 / arb(value)
    return Preconditioned(
        inverse=inverse,
        corner=_part(G, last, wide),
        corner_slope=_part(P, last, wide),
        above=_part(G, first, wide),
        above_slope=_part(P, first, wide),
        beside=_part(G, last, first),
        beside_slope=_part(P, last, first),
        inner_slope=_part(P, first, first),
        rest=rest,
        large=large,
        rest_size=rest_size,
    )


def reduce_in_balls(
    pencil: Pencil, found: Decomposed, k: int, radius: float, enough: float
) -> Reduced | None:
    """Return the reduced problem in balls of the precision in force; see `reduce_in_doubles`.

    None where the series is too slow, or where doubles do not separate the singular directions.
    """
    n = pencil.order
    turn = sum(_turns(found))
    exact = precondition(pencil, found, k)
    if exact is None:
        return None
    s = float(exact.large[-1]) if n > k else math.inf
    gap = (s - exact.rest_size) * (1 - 1e-12)
    share = radius * (1 + 2 * turn) / gap
    if share > 0.5:
        return None
    above, breadth = _size(exact.above), _size(exact.above_slope)
    beside, beside_slope = exact.over(exact.beside), exact.over(exact.beside_slope)
    enclosed = [exact.corner - beside * exact.above]
    # Errors of the rows enter the terms from w on, and those of later rows from w^2 on.
    fine = enough / max(radius * breadth, 1e-300) if math.isfinite(enough) else 1e-20
    rows = exact.over(beside * exact.inner_slope, fine) - beside_slope
    enclosed.append(beside * exact.above_slope - exact.corner_slope - rows * exact.above)
    # How many terms are needed is guessed from midpoints, and then proved once.
    row, inner, large = _midpoints(rows)[0], _midpoints(exact.inner_slope)[0], exact.large
    count, power = 0, radius * radius
    while n > k and power * float(np.linalg.norm(row)) * breadth > enough / 2:
        row = (row @ inner) / large
        power *= radius
        count += 1
        if count > _LONGEST:
            return None
    for _ in range(max(count, 1)):
        enclosed.append(rows * exact.above_slope)
        rows = exact.over(rows * exact.inner_slope, fine)
        enclosed[-1] = enclosed[-1] - rows * exact.above
    missing = radius ** len(enclosed) * _size(rows) * (breadth + above / gap) / (1 - share)
    if missing > 2 * enough:
        return None
    terms, power = [], 1.0
    for matrix in enclosed:
        middles, rest = _midpoints(matrix)
        terms.append(middles)
        missing += power * rest
        power *= radius
    columns, columns_rest = _midpoints(exact.above_slope)
    right = float(np.linalg.norm(columns / exact.large[:, None])) + columns_rest / s
    stretched = 1 / (1 - exact.rest_size / s)
    return Reduced(
        terms=np.array(terms),
        gap=gap / (1 + 2 * turn),
        left=_size(beside_slope),
        right=1.001 * right * stretched,
        left_rest=_size(beside),
        right_rest=above / gap,
        radius=radius * (1 + 1e-12),
        tail=1.01 * missing,
        shift=0.0,
        stretch=1 + turn,
    )


def refined_vector(pencil: Pencil, found: Decomposed, direction: Array) -> Array:
    """Return the left vector of the reduced problem in the room of the states, (n, 2).

    ``direction* ([U1 X]* from the left, with [-G21 G11^-1, I])``, to the precision in force; a
    computed vector alone would leave ``|u* M|`` at the size of the roundoff.
    """
    n, k = pencil.order, len(direction)
    exact = precondition(pencil, found, k)
    if exact is None:
        raise VerificationError("the decomposition no longer separates the singular directions")
    U = _balls(found.left.conj().T)
    rows = _part(U, range(n - k, n), range(n))
    if n > k:
        rows = rows - exact.over(exact.beside) * _part(U, range(n - k), range(n))
    row = _balls(direction.conj()[None, :]) * rows
    flat = []
    for value in row.entries():
        flat += [_rational(value.real), -_rational(value.imag)]
    return fraction_array(flat, (n, 2))


def _rational(ball: Any) -> Fraction:
    """Return the midpoint of a ball."""
    mantissa, exponent = ball.mid().man_exp()
    return Fraction(int(mantissa)) * Fraction(2) ** int(exponent)
