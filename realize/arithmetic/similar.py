"""Whether two minimal models of one order differ by coordinates only, decided exactly.

References
----------
Kalman (1963), Mathematical description of linear dynamical systems, SIAM J. Control 1: minimal
realizations of one transfer matrix differ by one change of coordinates, which is unique.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from flint import fmpq, fmpq_mat, nmod_mat

from realize.arithmetic import modular
from realize.arithmetic.modular import Clock
from realize.arithmetic.rational import RationalMatrix

__all__ = ["inverse_modulus", "point_solution", "rank_modulus", "similarity"]

Triple = tuple[RationalMatrix, RationalMatrix, RationalMatrix]


class _Different(Exception):  # noqa: N818  # an answer, not an error
    """No change of coordinates leads from one model to the other."""


def similarity(first: Triple, second: Triple, clock: Clock) -> RationalMatrix | None:
    """Return T with A1 T = T A2, B1 = T B2 and C1 T = C2, or None when there is none.

    Parameters
    ----------
    first, second : triples A (r, r), B (r, m), C (p, r)
        Both minimal, of one order.

    Notes
    -----
    Such a T maps A2^j B2 to A1^j B1, which determines it. Modulo a prime that divides no
    denominator and leaves r of the columns A2^j B2 independent, T is the quotient of the same
    columns; when it does not satisfy the three equations there, no T over the rationals does.
    When it does, it is lifted, and verified over the rationals.
    """
    order = first[0].shape[0]

    def compute(prime: int) -> tuple[tuple[Any, ...], list[int]] | None:
        images = [matrix.modulo(prime) for matrix in (*first, *second)]
        found = [image for image in images if image is not None]
        if len(found) < len(images):
            return None
        T = _quotient(found[0], found[1], found[3], found[4], clock)
        if T is None:
            return None
        if T * found[3] != found[0] * T or T * found[4] != found[1] or found[2] * T != found[5]:
            raise _Different
        return (), [int(value) for value in T.entries()]

    def verify(_: tuple[Any, ...], values: list[fmpq]) -> RationalMatrix | None:
        T = RationalMatrix.from_entries(order, order, values)
        (A1, B1, C1), (A2, B2, C2) = first, second
        return T if A1 @ T == T @ A2 and T @ B2 == B1 and C1 @ T == C2 else None

    if order == 0:
        return RationalMatrix.zeros(0, 0)
    try:
        found: RationalMatrix = modular.lift(compute, lambda *_: False, verify, clock)
    except _Different:
        return None
    return found


def _quotient(
    A1: nmod_mat, B1: nmod_mat, A2: nmod_mat, B2: nmod_mat, clock: Clock
) -> nmod_mat | None:
    """Return T with T A2^j B2 = A1^j B1 on independent columns; None when they do not span."""
    order, inputs, prime = B2.nrows(), B2.ncols(), B2.modulus()
    upper: list[list[Any]] = [[] for _ in range(order)]
    lower: list[list[Any]] = [[] for _ in range(order)]
    count, wanted = 0, -(-order // inputs) + 1
    while True:
        while count < wanted:
            clock.check("a change of coordinates modulo a prime")
            for table, block in ((upper, B1), (lower, B2)):
                for row, values in zip(table, block.tolist(), strict=True):
                    row.extend(values)
            B1, B2, count = A1 * B1, A2 * B2, count + 1
        columns = count * inputs
        echelon, rank = nmod_mat(order, columns, _flat(lower), prime).rref()
        if rank == order:
            break
        if wanted > order:
            return None
        wanted = min(order + 1, 2 * count)
    places = modular.pivot_columns(echelon, rank)
    left, right = (
        nmod_mat(order, order, [row[j] for row in table for j in places], prime)
        for table in (upper, lower)
    )
    return left * right.inv()


def _flat(table: list[list[Any]]) -> list[Any]:
    return [value for row in table for value in row]


def rank_modulus(A: RationalMatrix, B: RationalMatrix, C: RationalMatrix, clock: Clock) -> int:
    """Return a prime modulo which a minimal model is seen to be reachable and observable."""
    order = A.shape[0]
    for image_A, image_B, image_C in modular.images(A, B, C):
        reached = modular.reached_rank(image_A, image_B, clock)
        if reached < order:
            continue
        if modular.reached_rank(image_A.transpose(), image_C.transpose(), clock) == order:
            return int(image_A.modulus())
    raise AssertionError("the primes never end")


def inverse_modulus(matrices: Sequence[RationalMatrix]) -> int:
    """Return a prime modulo which invertible matrices are seen to be invertible."""
    for found in modular.images(*matrices):
        if all(image.rank() == image.nrows() for image in found):
            return int(found[0].modulus())
    raise AssertionError("the primes never end")


def point_solution(A: RationalMatrix, B: RationalMatrix, point: int) -> RationalMatrix | None:
    """Return (z - A)^-1 B at an integer z, or None when z is an eigenvalue of A."""
    order = A.shape[0]
    if not order:
        return B
    shifted = fmpq_mat(order, order, [point * (i == j) for i in range(order) for j in range(order)])
    try:
        return RationalMatrix((shifted - A.matrix).solve(B.matrix))
    except ZeroDivisionError:
        return None
