"""The pencil M(z) = [A - zI, B] in three arithmetics: doubles, balls, rationals.

Everything inside this room is measured in one unit, a power of two chosen for the whole problem, so
that the largest entry of [A, B] lies between 1/2 and 2. No state, input or output is scaled by
itself: the distance is a norm in the user's own coordinates.

What is proved with doubles here is the corner test. With ``H(z) = M(z) M(z)*`` the table

    G = fl(W - x S + i y K + (|z|^2 - level - delta) I),   W = A A' + B B', S = A + A', K = A - A'

is handed to a Cholesky factorisation. Let u be the roundoff, F the Frobenius norm of [A, B], and
``gamma_k = k u / (1 - k u)``. The inner products in W err by at most ``gamma_{n+m} F^2``
(Frobenius norm, hence 2-norm); the rounding of S and K, the two products and the three sums add at
most ``u (12 F^2 + 24 F |z| + 12 |z|^2 + 8 level)``. If the factorisation runs to its end in
floating point its factor R satisfies ``R* R = G + D`` with ``|D_ij| <= gamma' |r_i| |r_j|``, r_i
the columns, and ``|r_i|^2 <= G_ii / (1 - gamma')``, so the 2-norm of D is at most ``gamma' / (1 -
gamma') trace(G)``. For complex numbers ``gamma' = gamma_{4 (n + 2)}`` is safe: a complex product
errs by less than sqrt(2) gamma_2. Since R* R is positive semidefinite, the smallest eigenvalue of
H(z) is at least ``level`` as soon as ``delta`` exceeds all of these together.

References
----------
Rump (2006), Verification of positive definiteness, BIT Numerical Mathematics 46. Higham (2002),
Accuracy and Stability of Numerical Algorithms, sections 3.1, 3.6 and 10.1. Eising (1984), Between
controllable and uncontrollable, Systems and Control Letters 4, for the distance as the least
singular value of the pencil.
"""

from __future__ import annotations

import math
from collections.abc import Iterable
from fractions import Fraction
from typing import Any, Final

import numpy as np
from flint import acb, acb_mat, arb, fmpq
from scipy.linalg import lapack

__all__ = ["ROUNDOFF", "Pencil", "Point", "rounded"]

Array = np.ndarray[Any, Any]
Point = tuple[Fraction, Fraction]
"""A point of the complex plane, exactly: real and imaginary part."""

ROUNDOFF: Final = 2.0**-53
"""Half the spacing of the doubles next to 1: the relative error of one rounding."""

_TINY: Final = 1e-290
"""Above anything that gradual underflow can do to a sum of numbers of size one."""


def rounded(point: Point) -> complex:
    """Return the doubles nearest to a point."""
    return complex(float(point[0]), float(point[1]))


def _binary_exponent(values: Iterable[Fraction]) -> int | None:
    """Return e with 2^(e-1) < the largest size < 2^(e+1); None when all are zero."""
    return max(
        (abs(v.numerator).bit_length() - v.denominator.bit_length() for v in values if v),
        default=None,
    )


def _scaled(values: Array, exponent: int) -> Array:
    """Return rationals times 2^-exponent as doubles, each correctly rounded."""
    up, down = max(-exponent, 0), max(exponent, 0)
    flat = [(v.numerator << up) / (v.denominator << down) for v in values.ravel().tolist()]
    return np.array(flat, dtype=float).reshape(values.shape)


class Pencil:
    """[A - zI, B] for one exact pair (A, B), in units of 2^exponent.

    Parameters
    ----------
    A, B : object arrays of Fraction, shapes (n, n), (n, m)
        Not all zero.

    Attributes
    ----------
    A, B : float arrays
        The pair in units of 2^exponent, each entry correctly rounded.
    slack : float
        The 2-norm of [A, B] minus its rounding is at most this; zero where doubles hold the pair.
    size : float
        Frobenius norm of [A, B], rounded up.
    evaluations : int
        How many singular values, or tests of one against a level, were computed so far.
    """

    def __init__(self, A: Array, B: Array) -> None:
        exponent = _binary_exponent((*A.ravel().tolist(), *B.ravel().tolist()))
        if exponent is None:
            raise ZeroDivisionError("the pencil of a pair of zeros has no unit")
        self.exact = A, B
        self.exponent = exponent
        self.order, self.inputs = B.shape
        self.A, self.B = _scaled(A, exponent), _scaled(B, exponent)
        self.slack = self._rounding()
        self.size = 1.0001 * math.hypot(
            float(np.linalg.norm(self.A)), float(np.linalg.norm(self.B))
        )
        self.evaluations = 0
        self._gram = self.A @ self.A.T + self.B @ self.B.T
        self._sum, self._difference = self.A + self.A.T, self.A - self.A.T
        self._gram_trace, self._trace = float(np.trace(self._gram)), float(np.trace(self.A))
        self._balls: tuple[int, list[list[Any]]] = (0, [])

    def _rounding(self) -> float:
        """Return a bound of the 2-norm of what rounding changed."""
        unit = self.unit
        exact = all(
            Fraction(short) == long * unit
            for rounded_, given in zip((self.A, self.B), self.exact, strict=True)
            for short, long in zip(rounded_.ravel().tolist(), given.ravel().tolist(), strict=True)
        )
        if exact:
            return 0.0
        size = math.hypot(float(np.linalg.norm(self.A)), float(np.linalg.norm(self.B)))
        return 2 * ROUNDOFF * size + _TINY

    @property
    def unit(self) -> Fraction:
        """What exact entries are multiplied by to be in units of 2^exponent."""
        return Fraction(2) ** -self.exponent

    # Doubles

    def matrix(self, z: complex) -> Array:
        """Return M(z) in doubles, (n, n + m)."""
        M = np.empty((self.order, self.order + self.inputs), dtype=complex)
        M[:, : self.order] = self.A
        M[:, self.order :] = self.B
        np.einsum("ii->i", M[:, : self.order])[...] -= z
        return M

    def decomposition(self, z: complex) -> tuple[Array, Array, Array]:
        """Return the singular value decomposition of M(z), all right vectors included."""
        self.evaluations += 1
        M = self.matrix(z)
        return np.linalg.svd(M if z.imag else M.real)

    def doubt(self, z: complex, level: float) -> float:
        """Return by how much the corner test at z can err: delta of the module's text."""
        x, y = z.real, z.imag
        square = x * x + y * y
        trace = 1.01 * (self._gram_trace - 2 * x * self._trace + self.order * square)
        whole = (self.size + math.sqrt(square)) ** 2
        trace += 1e-12 * self.order * whole  # its own cancellation
        terms = 1.02 * (self.order + self.inputs + 12) * whole
        return float(ROUNDOFF * (terms + 4.2 * (self.order + 2) * trace + 8 * level) + _TINY)

    def above(self, z: complex, level: float) -> bool:
        """Whether it is proved that no eigenvalue of M(z) M(z)* lies below the level.

        z is taken as the pair of doubles that it is, and A and B as they are rounded.
        """
        self.evaluations += 1
        x, y = z.real, z.imag
        G = np.empty((self.order, self.order), dtype=complex)
        G.real = self._gram - x * self._sum
        G.imag = y * self._difference
        np.einsum("ii->i", G)[...] += (x * x + y * y) - (level + self.doubt(z, level))
        # The transpose is the conjugate, which is definite alike, and lies as LAPACK wants it.
        return int(lapack.zpotrf(G.T, lower=1, clean=0, overwrite_a=1)[1]) == 0

    def field_of_values(self) -> tuple[float, float, float]:
        """Return bounds of the field of values of A: least and largest real part, imaginary part.

        Each is what LAPACK says, moved outward until a Cholesky factorisation proves it.
        """
        A = self.A
        real, imaginary = (A + A.T) / 2, (A - A.T) / 2j
        low, high = (float(v) for v in np.linalg.eigvalsh(real)[[0, -1]])
        top = float(np.linalg.eigvalsh(imaginary)[-1])
        return (
            -_proved_top(-real, -low),
            _proved_top(real, high),
            max(_proved_top(imaginary, top), 0.0),
        )

    # Balls and rationals

    def in_balls(self, point: Point) -> Any:
        """Return M at a point in balls of the precision in force (acb_mat, n by n + m)."""
        from flint import ctx

        if self._balls[0] != ctx.prec:
            A, B = self.exact
            unit = self.unit
            rows = [
                [_ball(value * unit) for value in (*first, *second)]
                for first, second in zip(A.tolist(), B.tolist(), strict=True)
            ]
            self._balls = (ctx.prec, rows)
        z = acb(_ball(point[0]), _ball(point[1]))
        moved = [list(row) for row in self._balls[1]]
        for i, row in enumerate(moved):
            row[i] = row[i] - z
        return acb_mat(self.order, self.order + self.inputs, [v for row in moved for v in row])


def _ball(value: Fraction) -> arb:
    return arb(fmpq(value.numerator, value.denominator))


def _proved_top(hermitian: Array, guess: float) -> float:
    """Return a number that no eigenvalue of a Hermitian matrix exceeds, not far above a guess."""
    size = len(hermitian)
    norm = float(np.linalg.norm(hermitian)) + abs(guess)
    step = 64 * size * ROUNDOFF * norm + _TINY
    while True:
        G = -hermitian.astype(complex)
        # One rounding in each entry of the Hermitian part, two on the diagonal, and those of the
        # factorisation; see the module's text.
        trace = abs(guess + step) * size + float(np.abs(np.trace(hermitian)))
        doubt = ROUNDOFF * (4 * norm + 4.2 * (size + 2) * trace) + _TINY
        np.einsum("ii->i", G)[...] += guess + step - doubt
        if int(lapack.zpotrf(np.asfortranarray(G), lower=1, clean=0)[1]) == 0:
            return guess + step
        step *= 4
