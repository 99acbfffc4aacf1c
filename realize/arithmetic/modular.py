"""Subspaces modulo word-size primes, and lifting them to the rationals.

The controllability matrix over the rationals is never built: its entries explode. Modulo a prime
the reachable subspace costs a few matrix products, and a rank modulo a prime never exceeds the
true rank. What the primes agree on is lifted by the Chinese remainder theorem and rational
reconstruction, and *verified* over the rationals: the lifted subspace holds B and is invariant,
so it contains the reachable one, and its dimension was a lower bound already.

References
----------
Mulders and Storjohann (2004), Certified dense linear system solving, J. Symbolic Computation 37,
for lifting and verifying. Wang, Guy, Davenport (1982), P-adic reconstruction of rational numbers,
ACM SIGSAM Bulletin 16. von zur Gathen and Gerhard, Modern Computer Algebra, section 5.10.
"""

from __future__ import annotations

import math
import time
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import cache
from typing import Any, Final, Protocol

from flint import fmpq, fmpz, fmpz_mat, nmod_mat

from realize.errors import BudgetError, VerificationError

__all__ = [
    "Clock",
    "Profile",
    "images",
    "krylov_steps",
    "lift",
    "pivot_columns",
    "primes",
    "reached_rank",
    "reached_rows",
]

PRIME_BITS: Final = 62

_PROBES: Final = 12
"""How many single entries are reconstructed before all of them are."""

_SPARE_BITS: Final = 16
"""Bits by which a modulus must exceed a probed entry; a chance agreement has odds of 2^-16."""

_REFUSALS: Final = 8
"""How often a lifted subspace may fail its verification; unlucky primes are far rarer."""


@cache
def _prime_below(start: int) -> int:
    candidate = start - 1
    while not fmpz(candidate).is_prime():
        candidate -= 1
    return candidate


def primes() -> Iterator[int]:
    """Yield word-size primes, always the same ones, so that the exact path is reproducible."""
    prime = 1 << PRIME_BITS
    while True:
        prime = _prime_below(prime)
        yield prime


class Reducible(Protocol):
    """A rational matrix that can be taken modulo a prime."""

    def modulo(self, prime: int) -> nmod_mat | None: ...


def images(*matrices: Reducible) -> Iterator[tuple[nmod_mat, ...]]:
    """Yield the matrices modulo one prime after the other, primes in denominators left out."""
    for prime in primes():
        found = [matrix.modulo(prime) for matrix in matrices]
        if all(image is not None for image in found):
            yield tuple(found)


class Clock:
    """A budget of time, looked at between steps.

    Parameters
    ----------
    seconds : float or None
        None for no limit.
    runner : str
        What spends it, for messages.
    """

    __slots__ = ("_end", "runner", "seconds")

    def __init__(self, seconds: float | None, runner: str = "the exact path") -> None:
        self.seconds, self.runner = seconds, runner
        self._end = math.inf if seconds is None else time.monotonic() + seconds

    def check(self, where: str) -> None:
        """Raise when the time is up.

        Raises
        ------
        BudgetError
            Saying where the time ran out.
        """
        if time.monotonic() > self._end:
            raise BudgetError(
                f"{self.runner} ran out of its budget of {self.seconds:g} s in: {where}. Give a "
                "larger budget, or use the floating path alone"
            )

    def afford(self, estimate: float, where: str) -> None:
        """Raise when a step is expected to take longer than what is left.

        Raises
        ------
        BudgetError
            Saying what was estimated. FLINT calls cannot be interrupted, so a step that is far
            too long must not be begun.
        """
        left = self._end - time.monotonic()
        if estimate > left:
            raise BudgetError(
                f"{self.runner} did not begin: {where} is estimated at {estimate:.3g} s, and "
                f"{max(left, 0.0):.3g} s of the budget of {self.seconds:g} s are left. Give a "
                "larger budget, or use the floating path alone"
            )


@dataclass(frozen=True, slots=True)
class Profile:
    """A row space modulo a prime in reduced echelon form.

    ``rows`` has ``len(pivots)`` rows; row i has a 1 in column ``pivots[i]``. ``stairs`` are the
    rank increments of [B, AB, ...] where the space was reached from B.
    """

    rows: nmod_mat
    pivots: tuple[int, ...]
    stairs: tuple[int, ...] = ()


def pivot_columns(echelon: nmod_mat, rank: int) -> tuple[int, ...]:
    """Return the column of the leading 1 of each non-zero row of a reduced echelon form."""
    found: list[int] = []
    column = 0
    for i in range(rank):
        while int(echelon[i, column]) == 0:
            column += 1
        found.append(column)
        column += 1
    return tuple(found)


def _echelon(matrix: nmod_mat) -> tuple[nmod_mat, int]:
    """Return the non-zero rows of the reduced echelon form, and their number."""
    reduced, rank = matrix.rref()
    if rank == matrix.nrows():
        return reduced, rank
    width, prime = matrix.ncols(), matrix.modulus()
    return nmod_mat(rank, width, reduced.entries()[: rank * width], prime), rank


def _stack(upper: nmod_mat, lower: nmod_mat) -> nmod_mat:
    return nmod_mat(
        upper.nrows() + lower.nrows(),
        upper.ncols(),
        upper.entries() + lower.entries(),
        upper.modulus(),
    )


def reached_rows(A: nmod_mat, B: nmod_mat, clock: Clock) -> Profile:
    """Return the row space of [B, AB, A^2 B, ...] transposed, modulo a prime, and its stairs.

    Blocks are added until one of them adds nothing (then none after it does) or everything is
    reached. The pivot columns of one echelon form tell how many each block adds; those columns
    alone are then reduced by rows.

    Parameters
    ----------
    A : nmod_mat (n, n)
    B : nmod_mat (n, m)
    """
    order, prime = B.nrows(), B.modulus()
    table, columns, stairs = _independent_columns(A, B, clock)
    basis = [row[column] for column in columns for row in table]
    rows, rank = nmod_mat(len(columns), order, basis, prime).rref()
    return Profile(rows, pivot_columns(rows, rank), tuple(step for step in stairs if step))


def reached_rank(A: nmod_mat, B: nmod_mat, clock: Clock) -> int:
    """Return the rank of [B, AB, A^2 B, ...] modulo a prime."""
    return len(_independent_columns(A, B, clock)[1])


def _independent_columns(
    A: nmod_mat, B: nmod_mat, clock: Clock
) -> tuple[list[list[Any]], tuple[int, ...], list[int]]:
    """Return the rows of [B, AB, ...], which of its columns are independent, and the stairs."""
    order, inputs, prime = B.nrows(), B.ncols(), B.modulus()
    if not order or not inputs:
        return [], (), []
    block = B
    table: list[list[Any]] = [[] for _ in range(order)]
    count, wanted = 0, -(-order // inputs) + 1
    while True:
        while count < wanted:
            clock.check("the reachable subspace modulo a prime")
            for row, values in zip(table, block.tolist(), strict=True):
                row.extend(values)
            count += 1
            block = A * block
        flat = [value for row in table for value in row]
        echelon, rank = nmod_mat(order, count * inputs, flat, prime).rref()
        columns = pivot_columns(echelon, rank)
        stairs = [0] * count
        for column in columns:
            stairs[column // inputs] += 1
        if rank == order or stairs[-1] == 0:
            return table, columns, stairs
        wanted = min(order + 1, 2 * count)


def krylov_steps(A: nmod_mat, B: nmod_mat, clock: Clock) -> list[Profile]:
    """Return, for each stage, a canonical basis of what the stage adds, modulo a prime.

    Stage t adds span[B, ..., A^t B] over span[B, ..., A^(t-1) B]. Its basis vectors vanish in
    the pivots of all earlier stages and are in reduced echelon form, which makes them unique, so
    that they can be lifted.
    """
    order = A.nrows()
    power = A.transpose()
    steps: list[Profile] = []
    pending = B.transpose()
    # All stages so far, each pivot cleared from all rows but its own.
    known: Profile | None = None
    while True:
        clock.check("the staircase modulo a prime")
        if known is not None:
            pending = _clear(pending, known)
        rows, rank = _echelon(pending)
        if rank == 0:
            return steps
        step = Profile(rows, pivot_columns(rows, rank))
        steps.append(step)
        if known is None:
            known = step
        else:
            known = Profile(_stack(_clear(known.rows, step), rows), known.pivots + step.pivots)
        if len(known.pivots) == order:
            return steps
        pending = rows * power


def _clear(matrix: nmod_mat, step: Profile) -> nmod_mat:
    """Subtract the multiples of a stage's rows that clear its pivots."""
    width, entries = matrix.ncols(), matrix.entries()
    chosen = [entries[i * width + j] for i in range(matrix.nrows()) for j in step.pivots]
    factors = nmod_mat(matrix.nrows(), len(step.pivots), chosen, matrix.modulus())
    return matrix - factors * step.rows


def _reconstruct(residue: int, modulus: int, bound: int) -> tuple[int, int] | None:
    """Return (p, q) with p = q * residue modulo the modulus, both at most the bound, or None."""
    first, second = modulus, residue % modulus
    left, right = 0, 1
    while second > bound:
        quotient = first // second
        first, second = second, first - quotient * second
        left, right = right, left - quotient * right
    if right == 0 or abs(right) > bound or math.gcd(second, right) != 1:
        return None
    return (second, right) if right > 0 else (-second, -right)


def _combine(images: list[list[int]], moduli: list[int]) -> tuple[list[int], int]:
    """Join residues by the Chinese remainder theorem, all entries at once."""
    if len(moduli) == 1:
        return images[0], moduli[0]
    modulus = math.prod(moduli)
    weights = [(modulus // prime) * pow(modulus // prime, -1, prime) % modulus for prime in moduli]
    count = len(images[0])
    flat = [images[k][i] for i in range(count) for k in range(len(moduli))]
    joined = fmpz_mat(count, len(moduli), flat) * fmpz_mat(len(moduli), 1, weights)
    return [int(value) % modulus for value in joined.entries()], modulus


def _to_rationals(residues: list[int], modulus: int) -> list[fmpq] | None:
    """Reconstruct every residue; a denominator found once is tried on the rest first."""
    bound = math.isqrt((modulus - 1) // 2)
    denominator = 1
    found: list[fmpq] = []
    for residue in residues:
        scaled = residue * denominator % modulus
        if scaled > modulus // 2:
            scaled -= modulus
        if abs(scaled) <= bound:
            found.append(fmpq(scaled, denominator))
            continue
        pair = _reconstruct(residue, modulus, bound)
        if pair is None:
            return None
        found.append(fmpq(*pair))
        common = math.lcm(denominator, pair[1])
        if common <= bound:
            denominator = common
    return found


def _settled(images: list[list[int]], moduli: list[int]) -> bool:
    """Whether a few single entries can be reconstructed, with bits to spare."""
    count = len(images[0])
    if not count:
        return True
    chosen = sorted({k * (count - 1) // (_PROBES - 1) for k in range(_PROBES)})
    joined, modulus = _combine([[image[k] for k in chosen] for image in images], moduli)
    bound = math.isqrt((modulus - 1) // 2)
    for residue in joined:
        pair = _reconstruct(residue, modulus, bound)
        if pair is None:
            return False
        if abs(pair[0]).bit_length() + pair[1].bit_length() > modulus.bit_length() - _SPARE_BITS:
            return False
    return True


def lift(
    compute: Callable[[int], tuple[tuple[Any, ...], list[int]] | None],
    better: Callable[[tuple[Any, ...], tuple[Any, ...]], bool],
    verify: Callable[[tuple[Any, ...], list[fmpq]], Any | None],
    clock: Clock,
) -> Any:
    """Lift residues modulo primes to rationals and return what `verify` makes of them.

    Parameters
    ----------
    compute : callable
        prime -> (profile, residues), or None when the prime divides a denominator. Residues of
        different primes belong together only when the profiles are equal.
    better : callable
        Whether the first profile is nearer the truth than the second.
    verify : callable
        (profile, rationals) -> the answer when they hold over the rationals, else None.

    Raises
    ------
    VerificationError
        When the verification keeps refusing what several primes agree on, which is a bug.
    BudgetError
        When the time is up.

    Notes
    -----
    No height bound is needed. A few single entries are the probe: while one of them cannot be
    reconstructed with bits to spare, nothing else is tried. (A combination of all entries would be
    as long as their common denominator, which may be many times longer than any of them.) The
    proof is the verification.
    """
    profile: tuple[Any, ...] | None = None
    images: list[list[int]] = []
    moduli: list[int] = []
    refused = 0
    wanted = 1
    for prime in primes():
        clock.check("lifting a subspace to the rationals")
        image = compute(prime)
        if image is None:
            continue
        found, residues = image
        if profile is None or better(found, profile):
            profile, images, moduli, wanted = found, [], [], 1
        elif found != profile:
            continue
        images.append(residues)
        moduli.append(prime)
        if len(moduli) < wanted or not _settled(images, moduli):
            continue
        rationals = _to_rationals(*_combine(images, moduli))
        answer = None if rationals is None else verify(profile, rationals)
        if answer is not None:
            return answer
        # Some entry is longer than those that were probed; a few primes more each time.
        wanted = len(moduli) + 1 + len(moduli) // 4
        refused += rationals is not None
        if refused > _REFUSALS:
            raise VerificationError(
                f"a subspace on which several primes agree was refused {refused} times by the "
                "verification over the rationals. This is a bug in realize; please report the model"
            )
    raise AssertionError("the primes never end")
