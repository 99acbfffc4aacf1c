"""Common factors of two polynomials in floating point.

References
----------
Corless, Gianni, Trager, Watt (1995), The singular value decomposition for polynomial systems,
ISSAC. Zeng (2011), The numerical greatest common divisor of univariate polynomials, Contemporary
Mathematics 556, for the cofactors and their refinement.
"""

from __future__ import annotations

import math
from typing import Any, Final

import numpy as np

__all__ = ["convolution", "split", "sylvester", "variable_unit"]

Array = np.ndarray[Any, Any]

_STEPS: Final = 8
"""Gauss-Newton steps at most; convergence is quadratic when the factor is there."""


def split(f: Array, g: Array, degree: int) -> tuple[Array, Array, Array, float]:
    """Return h, u, v with f = h u and g = h v as nearly as a factor of this degree allows.

    Parameters
    ----------
    f, g : float arrays of coefficients, descending powers, leading ones not zero.
    degree : int
        Degree of the common factor h, at least 1 and at most that of f and g.

    Returns
    -------
    h, u, v : arrays
        h is monic.
    residual : float
        The larger of ||f - h u|| / ||f|| and ||g - h v|| / ||g||.

    Notes
    -----
    Cofactors come from the null vector of a Sylvester submatrix, the factor from least squares,
    and all three are refined together by Gauss-Newton, with the leading coefficient of h held.
    """
    # Powers of two, so that squares neither overflow nor vanish.
    longer = f if f.size >= g.size else g
    unit = variable_unit(_levelled(longer, 0)[0])
    (f, f_shift), (g, g_shift) = _levelled(f, unit), _levelled(g, unit)
    f_norm, g_norm = float(np.linalg.norm(f)), float(np.linalg.norm(g))
    f, g = f / f_norm, g / g_norm
    null = np.linalg.svd(sylvester(f, g, degree))[2][-1]
    v, u = null[: g.size - degree], -null[g.size - degree :]
    h = _factor_of(f, g, u, v, degree)
    best = _residual(f, g, h, u, v)
    for _ in range(_STEPS):
        step = _gauss_newton(f, g, h, u, v)
        h_next, u_next, v_next = h + step[0], u + step[1], v + step[2]
        residual = _residual(f, g, h_next, u_next, v_next)
        if not residual < best:
            break
        h, u, v, best = h_next, u_next, v_next, residual
    h = np.ldexp(h, unit * np.arange(h.size))
    u = np.ldexp(u * f_norm, unit * np.arange(u.size) + f_shift)
    v = np.ldexp(v * g_norm, unit * np.arange(v.size) + g_shift)
    return h, u, v, best


def _levelled(polynomial: Array, unit: int) -> tuple[Array, int]:
    """Return a polynomial in a unit of its variable, its largest coefficient about 1, and a shift.

    The coefficients are those returned times two to the unit times their place, plus the shift.
    """
    places = unit * np.arange(polynomial.size)
    shift = int((np.frexp(polynomial)[1] - places)[polynomial != 0.0].max())
    return np.ldexp(polynomial, -places - shift), shift


def variable_unit(polynomial: Array) -> int:
    """Return the power of two for the variable that levels the first and last coefficients."""
    kept = np.flatnonzero(polynomial)
    span = int(kept[-1] - kept[0])
    if not span:
        return 0
    first, last = (math.log2(abs(polynomial[k])) for k in (kept[0], kept[-1]))
    return round((last - first) / span)


def convolution(polynomial: Array, columns: int) -> Array:
    """Return the matrix whose product with coefficients is the product of polynomials."""
    result = np.zeros((polynomial.size + columns - 1, columns))
    for j in range(columns):
        result[j : j + polynomial.size, j] = polynomial
    return result


def sylvester(f: Array, g: Array, degree: int) -> Array:
    """Return [conv(f), conv(g)] with room for cofactors of a common factor of this degree."""
    return np.hstack([convolution(f, g.size - degree), convolution(g, f.size - degree)])


def _factor_of(f: Array, g: Array, u: Array, v: Array, degree: int) -> Array:
    """Return the monic h that fits f = h u and g = h v best; scales u and v along with it."""
    stacked = np.vstack([convolution(u, degree + 1), convolution(v, degree + 1)])
    h = np.linalg.lstsq(stacked, np.concatenate([f, g]), rcond=None)[0]
    lead = h[0] if h[0] else 1.0
    u *= lead
    v *= lead
    return np.asarray(h / lead)


def _residual(f: Array, g: Array, h: Array, u: Array, v: Array) -> float:
    return float(max(np.linalg.norm(f - np.convolve(h, u)), np.linalg.norm(g - np.convolve(h, v))))


def _gauss_newton(f: Array, g: Array, h: Array, u: Array, v: Array) -> tuple[Array, Array, Array]:
    """Return the change of h (leading coefficient held), u and v that lowers the residual."""
    upper = np.hstack(
        [
            convolution(u, h.size)[:, 1:],
            convolution(h, u.size),
            np.zeros((f.size, v.size)),
        ]
    )
    lower = np.hstack(
        [
            convolution(v, h.size)[:, 1:],
            np.zeros((g.size, u.size)),
            convolution(h, v.size),
        ]
    )
    right = np.concatenate([f - np.convolve(h, u), g - np.convolve(h, v)])
    step = np.linalg.lstsq(np.vstack([upper, lower]), right, rcond=None)[0]
    inner = h.size - 1
    return (
        np.concatenate([[0.0], step[:inner]]),
        step[inner : inner + u.size],
        step[inner + u.size :],
    )
