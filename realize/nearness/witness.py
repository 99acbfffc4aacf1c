"""The exact side: a vector that proves the upper bound, and a real model with a hidden mode.

*The upper bound.* For any row u* and point z, ``D = -u (u* M(z)) / |u|^2`` gives
``u* (M(z) + D) = 0``: the pair (A, B) + D has the uncontrollable mode z, and the 2-norm of D is
``|u* M(z)| / |u|``. With u and z Gaussian rationals that is the root of an exact rational number.

*A real model.* D is complex where z is. For a real W of full row rank (one row, or two for a pair
of complex modes) and any real L

    A' = A - W' (W W')^-1 (W A - L W),      B' = B - W' (W W')^-1 W B

satisfies ``W A' = L W`` and ``W B' = 0``, so the eigenvalues of L are uncontrollable modes. With
``R = [W A - L W, W B]`` the change has the Gram matrix ``R' (W W')^-1 R``, so its 2-norm is the
root of the largest eigenvalue of ``(W W')^-1 R R'``. For given W with orthonormal rows
``R R' = R0 R0' + (W A W' - L)(W A W' - L)'``, where R0 belongs to ``L = W A W'``: that L is the
best one whatever the norm. What is left is a minimum over the subspaces spanned by W, which is not
smooth where both singular values of R agree; it is approached with the p-norm of the two, p
growing. Its gradient, for orthonormal W and ``S = f^(1-p) G^(p-1)``, ``G = R R'``, is
``2 (S (A R1' + B R2')' - L' S R1)`` made orthogonal to W, R1 and R2 being the two blocks of R.

References
----------
Eising (1984), Between controllable and uncontrollable, Systems and Control Letters 4. Paige (1981),
Properties of numerical algorithms related to computing controllability, IEEE Transactions on
Automatic Control 26. Edelman, Arias, Smith (1998), The geometry of algorithms with orthogonality
constraints, SIAM J. Matrix Analysis 20.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from fractions import Fraction
from typing import Any, Final

import numpy as np

from realize.arithmetic.rational import RationalMatrix
from realize.entries import fraction_array
from realize.nearness.pencil import Pencil, Point

__all__ = ["Pair", "RealModel", "exact_pair", "real_model", "root_above"]

Array = np.ndarray[Any, Any]

_SPARE_BITS: Final = 34
"""Bits of u beyond those that the distance takes: the bound is then good to about 1e-10."""

_SMOOTH: Final = (1, 4, 16, 64)
"""The powers p by which the larger of two singular values is approached."""

_SEEN: Final = 1e-9
"""Below this share of the size of the pair doubles do not see the changes that W is chosen for."""


def root_above(square: Fraction) -> float:
    """Return a double not below the root of a rational number, the nearest such or the next."""
    if square <= 0:
        return 0.0
    shift = 128 - (square.numerator.bit_length() - square.denominator.bit_length())
    shift += shift % 2
    scaled = square * Fraction(2) ** shift
    root = Fraction(math.isqrt(math.ceil(scaled)) + 1) / Fraction(2) ** (shift // 2)
    try:
        found = float(root)
    except OverflowError:
        return math.inf
    return found if Fraction(found) >= root else math.nextafter(found, math.inf)


@dataclass(frozen=True, kw_only=True, slots=True)
class Pair:
    """A row u* and a point z, exactly, and what they prove.

    Attributes
    ----------
    real, imaginary : tuple of Fraction
        u = real + i imaginary, (n).
    point : (Fraction, Fraction)
        z, in the user's units.
    square : Fraction
        |u* M(z)|^2 / |u|^2, in the user's units.
    perturbation : (dA, dB)
        Arrays of doubles, real where u and z are.
    """

    real: tuple[Fraction, ...]
    imaginary: tuple[Fraction, ...]
    point: Point
    square: Fraction
    perturbation: tuple[Array, Array]


def exact_pair(pencil: Pencil, vector: Array, point: Point, value: float) -> Pair:
    """Return the pair for a vector (object array of pairs of Fraction), rounded to short numbers.

    Parameters
    ----------
    vector : array (n, 2) of Fraction
        u, in any length near one.
    point : Point
        z in the pencil's units.
    value : float
        About what the bound will be, in the pencil's units.
    """
    bits = _SPARE_BITS + max(0, -math.frexp(value)[1])
    short = [[round(v * 2**bits) for v in row] for row in vector.tolist()]
    real, imaginary = [[row[i] for row in short] for i in (0, 1)]
    n = pencil.order
    A, B = (RationalMatrix.from_array(M) for M in pencil.exact)
    unit = Fraction(2) ** pencil.exponent
    x, y = point[0] * unit, point[1] * unit
    rows = RationalMatrix.from_entries(2, n, real + imaginary)
    # u* = real' - i imaginary'
    by_A = (rows @ A).to_array()
    by_B = (rows @ B).to_array()
    left = [
        [*(by_A[0, j] - x * real[j] - y * imaginary[j] for j in range(n)), *by_B[0]],
        [*(-by_A[1, j] + x * imaginary[j] - y * real[j] for j in range(n)), *(-v for v in by_B[1])],
    ]
    length = sum(v * v for v in real) + sum(v * v for v in imaginary)
    square = sum((v * v for row in left for v in row), Fraction(0)) / length
    scale = math.isqrt(length)
    u = np.array([a / scale for a in real]) + 1j * np.array([b / scale for b in imaginary])
    row = np.array([_quotient(a, scale) for a in left[0]]) + 1j * np.array(
        [_quotient(b, scale) for b in left[1]]
    )
    change = -np.outer(u, row) * (scale * scale / length)
    if not y and not any(imaginary):
        change = change.real
    return Pair(
        real=tuple(Fraction(v, 2**bits) for v in real),
        imaginary=tuple(Fraction(v, 2**bits) for v in imaginary),
        point=(x, y),
        square=square,
        perturbation=(change[:, :n].copy(), change[:, n:].copy()),
    )


def _quotient(value: Fraction, scale: int) -> float:
    return value.numerator / (value.denominator * scale)


# ---------------------------------------------------------------------------------------------
# Real models
# ---------------------------------------------------------------------------------------------


@dataclass(frozen=True, kw_only=True, slots=True)
class RealModel:
    """An exact real pair (A, B) that is not controllable, and the square of its distance."""

    A: Array
    B: Array
    square: Fraction


def real_model(pencil: Pencil, pair: Pair, value: float) -> RealModel:
    """Return the nearest exact real pair found that is not controllable."""
    rows = [pair.real] if not any(pair.imaginary) else [pair.real, pair.imaginary]
    found = [_changed(pencil, rows)]
    if len(rows) == 2:
        start = np.array([[float(v) for v in row] for row in rows])
        if value > _SEEN * pencil.size:
            bits = _SPARE_BITS + max(0, -math.frexp(value)[1])
            better = (_best_plane(pencil, start, value), _best_line(pencil, pair, value))
            found += [
                _changed(
                    pencil, [[Fraction(round(v * 2.0**bits), 2**bits) for v in row] for row in W]
                )
                for W in better
            ]
    return min(found, key=lambda model: model.square)


def _changed(pencil: Pencil, rows: Any) -> RealModel:
    """Return A' and B' for the subspace spanned by rows of Fractions, with the best L."""
    flat = [v for row in rows for v in row]
    W = RationalMatrix.from_array(fraction_array(flat, (len(rows), len(flat) // len(rows))))
    A, B = (RationalMatrix.from_array(M) for M in pencil.exact)
    inverse = RationalMatrix((W @ W.T).matrix.inv())
    moved = W @ A
    L = moved @ W.T @ inverse
    first, second = moved - L @ W, W @ B
    lift = W.T @ inverse
    gram = (inverse @ (first @ first.T + second @ second.T)).to_array()
    if len(rows) == 1:
        square = gram[0, 0]
    else:
        half = (gram[0, 0] + gram[1, 1]) / 2
        rest = half * half - (gram[0, 0] * gram[1, 1] - gram[0, 1] * gram[1, 0])
        square = half + _root_rational(rest)
    return RealModel(
        A=(A - lift @ first).to_array(), B=(B - lift @ second).to_array(), square=square
    )


def _root_rational(square: Fraction) -> Fraction:
    """Return a rational a little above the root of another."""
    return Fraction(root_above(square)) if square > 0 else Fraction(0)


def _best_plane(pencil: Pencil, start: Array, value: float) -> Array:
    """Return two orthonormal rows, the plane they span a local minimum of the change."""
    from scipy.optimize import minimize

    A, B = pencil.A / value, pencil.B / value
    n = pencil.order

    def change(flat: Array, p: int) -> tuple[float, Array]:
        W = flat.reshape(2, n)
        T = np.linalg.cholesky(W @ W.T)
        Q = np.linalg.solve(T, W)
        moved = Q @ A
        L = moved @ Q.T
        first, second = moved - L @ Q, Q @ B
        values, turn = np.linalg.eigh(first @ first.T + second @ second.T)
        values = np.maximum(values, 0.0)
        top = float(values[-1])
        shares = values / top
        total = float((shares**p).sum()) ** (1 / p)
        # S = f^(1 - p) G^(p - 1), written so that nothing overflows.
        S = (turn * (total ** (1 - p) * shares ** (p - 1))) @ turn.T
        gradient = 2 * (S @ (A @ first.T + B @ second.T).T - L.T @ S @ first)
        gradient -= (gradient @ Q.T) @ Q
        return top * total, np.linalg.solve(T.T, gradient).ravel()

    W = np.linalg.qr(start.T)[0].T
    for p in _SMOOTH:
        W = minimize(change, W.ravel(), args=(p,), jac=True, method="L-BFGS-B").x.reshape(2, n)
        W = np.linalg.qr(W.T)[0].T
    return np.asarray(W)


def _best_line(pencil: Pencil, pair: Pair, value: float) -> Array:
    """Return one unit row: the left singular vector at a real point where it is lowest, nearby."""
    from scipy.optimize import minimize_scalar

    def least(x: float) -> float:
        M = pencil.matrix(complex(x)).real
        return float(np.linalg.svd(M, compute_uv=False)[-1])

    middle = float(pair.point[0] * pencil.unit)
    reach = abs(float(pair.point[1] * pencil.unit)) + value
    x = minimize_scalar(least, bounds=(middle - reach, middle + reach), method="bounded").x
    return np.linalg.svd(pencil.matrix(complex(x)).real)[0][:, -1:].T
