"""Householder reflections over any number of digits.

Matrices are object arrays of the numbers of one mpmath context. Every function takes the context;
none changes it.

References
----------
Golub and Van Loan, Matrix Computations, sections 5.1, 5.2, 7.4, 7.5. Wilkinson (1965), The
Algebraic Eigenvalue Problem, chapter 6, section 57 (from memory), for the polynomial of a
Hessenberg matrix.
"""

from __future__ import annotations

from typing import Any, Final

import numpy as np

from realize.errors import PrecisionError

__all__ = [
    "characteristic_polynomial",
    "eigenvalues",
    "hessenberg",
    "identity",
    "least_squares",
    "orthogonal_rows",
    "reflect",
    "reflection",
    "solve_triangle",
    "triangularised",
    "zeros",
]

Array = np.ndarray[Any, Any]

_SWEEPS: Final = 60
"""Sweeps of rotations at most; they converge quadratically once the rows are nearly orthogonal."""

_STEPS: Final = 40
"""Steps of a QR iteration at most, for each digit and eigenvalue. A few in all are common, but to a
multiple eigenvalue the iteration converges by less than a digit a step."""


def zeros(context: Any, rows: int, columns: int) -> Array:
    """Return a matrix of zeros."""
    return np.full((rows, columns), context.zero, dtype=object)


def identity(context: Any, size: int) -> Array:
    """Return the identity."""
    result = zeros(context, size, size)
    np.fill_diagonal(result, context.one)
    return result


def reflection(context: Any, x: Array) -> tuple[Array, Any]:
    """Return v and f for which 1 - f v v^T reflects x, which is not empty, to the first axis."""
    v = x.copy()
    size = context.sqrt(context.fdot(x, x))
    if size == 0:
        return v, context.zero
    # The sign that adds: nothing cancels.
    v[0] += size if v[0] >= 0 else -size
    return v, 2 / context.fdot(v, v)


def reflect(context: Any, v: Array, factor: Any, *targets: Array) -> None:
    """Apply 1 - factor v v^T from the left to each target, in place."""
    for target in targets:
        row = np.empty(target.shape[1], dtype=object)
        for j in range(target.shape[1]):
            row[j] = factor * context.fdot(v, target[:, j])
        target -= np.multiply.outer(v, row)


def triangularised(context: Any, M: Array, *targets: Array) -> Array:
    """Return the triangle R of M = Q R, with Q^T applied to the rows of each target in place."""
    R = M.copy()
    for k in range(min(R.shape)):
        v, factor = reflection(context, R[k:, k])
        reflect(context, v, factor, R[k:, k:], *(target[k:] for target in targets))
        R[k + 1 :, k] = context.zero
    return R


def solve_triangle(context: Any, R: Array, right: Array) -> Array:
    """Return X with R X = right, R upper triangular and invertible.

    Parameters
    ----------
    R : (k, k).
    right : (k, m).
    """
    X = right.copy()
    for i in range(R.shape[0] - 1, -1, -1):
        for j in range(X.shape[1]):
            rest = X[i, j] - context.fdot(R[i, i + 1 :], X[i + 1 :, j])
            X[i, j] = rest / R[i, i]
    return X


def least_squares(context: Any, M: Array, right: Array, cutoff: Any) -> tuple[Array, Any]:
    """Return x for which M x is nearest to a vector, and the distance left.

    The columns are taken in the order of what the ones before leave of them; those of which no
    more than the cutoff is left take no part.

    Parameters
    ----------
    M : (rows, columns).
    right : (rows,).
    """
    R, rest = M.copy(), right.reshape(-1, 1).copy()
    order = np.arange(M.shape[1])
    rank = 0
    while rank < min(M.shape):
        left = [context.fdot(column, column) for column in R[rank:, rank:].T]
        pivot = rank + max(range(len(left)), key=left.__getitem__)
        if context.sqrt(left[pivot - rank]) <= cutoff:
            break
        R[:, [rank, pivot]] = R[:, [pivot, rank]]
        order[[rank, pivot]] = order[[pivot, rank]]
        v, factor = reflection(context, R[rank:, rank])
        reflect(context, v, factor, R[rank:, rank:], rest[rank:])
        rank += 1
    x = np.full(M.shape[1], context.zero, dtype=object)
    x[order[:rank]] = solve_triangle(context, R[:rank, :rank], rest[:rank])[:, 0]
    distance = rest[rank:, 0]
    return x, context.sqrt(context.fdot(distance, distance))


def orthogonal_rows(context: Any, M: Array) -> tuple[Array, Array, list[Any]]:
    """Return an orthogonal G, the rows of G M, orthogonal to each other, and their norms, falling.

    The norms are the singular values. One-sided Jacobi rotations: G is a product of rotations and
    so orthogonal whatever the rank of M, which the accumulated factor of a bidiagonal iteration
    need not be where singular values are rounding noise.

    Raises
    ------
    PrecisionError
        When the rotations do not settle.

    References
    ----------
    Golub and Van Loan, Matrix Computations, section 8.6.
    """
    count, width = M.shape
    joined = np.concatenate([M, identity(context, count)], axis=1)
    noise = context.eps * context.sqrt(context.fdot(M.flat, M.flat))
    small = 8 * max(width, 1) * context.eps
    for _ in range(_SWEEPS):
        settled = True
        for i in range(count):
            for j in range(i + 1, count):
                first, second = joined[i, :width], joined[j, :width]
                a, b = context.fdot(first, first), context.fdot(second, second)
                c = context.fdot(first, second)
                sizes = context.sqrt(a), context.sqrt(b)
                if min(sizes) <= noise or abs(c) <= small * sizes[0] * sizes[1]:
                    continue
                settled = False
                ratio = (b - a) / (2 * c)
                tangent = 1 / (abs(ratio) + context.sqrt(1 + ratio**2))
                cosine = 1 / context.sqrt(1 + tangent**2)
                sine = cosine * (tangent if ratio >= 0 else -tangent)
                joined[i], joined[j] = (
                    cosine * joined[i] - sine * joined[j],
                    sine * joined[i] + cosine * joined[j],
                )
        if settled:
            break
    else:
        raise PrecisionError(
            f"the singular values of a block of shape {M.shape} did not settle in {_SWEEPS} sweeps"
        )
    norms = [context.sqrt(context.fdot(row, row)) for row in joined[:, :width]]
    falling = sorted(range(count), key=norms.__getitem__, reverse=True)
    joined = joined[falling]
    return joined[:, width:], joined[:, :width], [norms[k] for k in falling]


def hessenberg(context: Any, A: Array) -> Array:
    """Return an upper Hessenberg matrix orthogonally similar to A."""
    H = A.copy()
    for k in range(H.shape[0] - 2):
        v, factor = reflection(context, H[k + 1 :, k])
        reflect(context, v, factor, H[k + 1 :, k:], H[:, k + 1 :].T)
        H[k + 2 :, k] = context.zero
    return H


def characteristic_polynomial(context: Any, A: Array) -> list[Any]:
    """Return det(s - A), descending powers, by way of a Hessenberg form H.

    The leading minors obey p_k = (s - h_kk) p_(k-1) - sum_j h_(j,k) (h_(j+1,j) ... h_(k,k-1))
    p_(j-1).
    """
    H = hessenberg(context, A)
    minors: list[list[Any]] = [[context.one]]
    for k in range(H.shape[0]):
        factors = [-H[k, k]]
        product = context.one
        for j in range(k - 1, -1, -1):
            product *= H[j + 1, j]
            factors.append(-H[j, k] * product)
        # A minor of order k - i has its coefficients i + 1 places further right.
        polynomial = [*minors[k], context.zero]
        for i, factor in enumerate(factors):
            for place, coefficient in enumerate(minors[k - i], start=i + 1):
                polynomial[place] += factor * coefficient
        minors.append(polynomial)
    return minors[-1]


def eigenvalues(context: Any, A: Array) -> list[Any]:
    """Return the eigenvalues as complex numbers, pairs exactly conjugate.

    Francis's QR iteration with double shifts on a Hessenberg form; what is below the rounding of
    the whole matrix is zero.

    Raises
    ------
    PrecisionError
        When the iteration does not converge.
    """
    H = hessenberg(context, A)
    negligible = context.eps * context.sqrt(context.fdot(A.flat, A.flat))
    found: list[Any] = []
    high, steps, most = H.shape[0], 0, _STEPS * context.dps
    while high:
        low = high - 1
        while low and abs(H[low, low - 1]) > negligible:
            low -= 1
        if high - low > 2:
            if steps == most:
                raise PrecisionError(
                    f"the eigenvalues of a block of order {A.shape[0]} did not converge in "
                    f"{most} steps; give another number of digits"
                )
            steps += 1
            _francis_step(context, H[low:high, low:high], usual=bool(steps % 10))
            continue
        if high - low == 1:
            found.append(context.mpc(H[low, low]))
        else:
            (a, b), (c, d) = H[low:high, low:high]
            middle, root = (a + d) / 2, context.sqrt(((a - d) / 2) ** 2 + b * c)
            found += [context.mpc(middle + root), context.mpc(middle - root)]
        high, steps = low, 0
    return found


def _francis_step(context: Any, H: Array, *, usual: bool) -> None:
    """Take one step with two shifts, in place, on a Hessenberg matrix of order three or more."""
    size = H.shape[0]
    if usual:
        (a, b), (c, d) = H[-2:, -2:]
        total, product = a + d, a * d - b * c
    else:
        # Shifts out of the ordinary, where the ordinary ones go round in circles.
        far = abs(H[-1, -2]) + abs(H[-2, -3])
        total, product = 3 * far / 2, far**2
    column = [
        H[0, 0] * (H[0, 0] - total) + H[0, 1] * H[1, 0] + product,
        H[1, 0] * (H[0, 0] + H[1, 1] - total),
        H[1, 0] * H[2, 1],
    ]
    for k in range(size - 1):
        width = min(3, size - k)
        if k:
            column = list(H[k : k + width, k - 1])
        v, factor = reflection(context, np.array(column, dtype=object))
        last = min(k + 4, size)
        rows = slice(k, k + width)
        reflect(context, v, factor, H[rows, max(k - 1, 0) :], H[:last, rows].T)
        if k:
            H[k + 1 : k + width, k - 1] = context.zero
