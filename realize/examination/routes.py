"""Three independent routes to the minimal order, modulo a prime.

Minimal means reachable and observable (state), coprime (polynomial), and full Hankel rank
(hankel). The state route is proved over the rationals elsewhere. The other two are computed here
modulo a prime, each by its own method. A rank modulo a prime is a lower bound, and so is the order
of a coprime fraction modulo a prime; when both reach the proved order, all three agree.
"""

from __future__ import annotations

from itertools import islice

from flint import nmod_mat, nmod_poly

from realize.arithmetic import modular
from realize.arithmetic.exact import POLYNOMIAL_SECONDS, OpenedExact
from realize.arithmetic.modular import Clock
from realize.errors import DisagreementError

__all__ = ["routes"]

_PRIMES = 8
"""How many primes may fall short before the disagreement is reported as a bug."""


def routes(opened: OpenedExact, order: int) -> dict[str, int]:
    """Return the minimal order by the three routes.

    Parameters
    ----------
    opened : OpenedExact
    order : int
        What the state route proved.

    Raises
    ------
    DisagreementError
        When the routes differ, which is a bug.
    """
    found = {"state": order, "polynomial": -1, "hankel": -1}
    for A, B, C in islice(modular.images(opened.A, opened.B, opened.C), _PRIMES):
        opened.clock.check("the polynomial and Hankel routes")
        found["polynomial"] = max(found["polynomial"], _coprime_order(A, B, C, opened.clock))
        found["hankel"] = max(found["hankel"], _hankel_rank(A, B, C, opened.clock))
        if found["polynomial"] == found["hankel"] == order:
            return found
        if max(found.values()) > order:
            break
    raise DisagreementError(
        "the three routes to the minimal order disagree: "
        + ", ".join(f"{route} {value}" for route, value in found.items())
        + ". This is a bug in realize, not a property of the model; please report the model",
        answers=found,
    )


def _coprime_order(A: nmod_mat, B: nmod_mat, C: nmod_mat, clock: Clock) -> int:
    """Return the degree of the denominator of a coprime matrix fraction, modulo a prime.

    Numerators come from det(s - A + b c) - det(s - A), entry by entry. The fraction
    ``d(s)^-1 N(s)``, from the side with fewer channels, is made coprime by the greatest common
    left divisor of [d I, N] (Kailath, Linear Systems, section 6.3): the order is
    ``deg det(d I) - deg det(divisor)``.
    """
    order, inputs = A.nrows(), B.ncols()
    outputs = C.nrows()
    if not order or not inputs or not outputs:
        return 0
    prime = A.modulus()
    below = A.charpoly()
    columns = [nmod_mat(order, 1, [B[i, j] for i in range(order)], prime) for j in range(inputs)]
    rows = [nmod_mat(1, order, [C[i, j] for j in range(order)], prime) for i in range(outputs)]
    clock.afford(
        POLYNOMIAL_SECONDS * order**3 * inputs * outputs, "the numerators of the polynomial route"
    )
    table = []
    for row in rows:
        clock.check("the polynomial route")
        table.append([(A - column * row).charpoly() - below for column in columns])
    if outputs > inputs:
        table = [list(line) for line in zip(*table, strict=True)]
    size = len(table)
    return int(size * order - _divisor_degree(below, table))


def _divisor_degree(below: nmod_poly, table: list[list[nmod_poly]]) -> int:
    """Return the degree of det of the greatest common left divisor of [below I, table].

    Column operations bring the rows to triangular form one after the other. Multiples of `below`
    times a unit vector lie in the lattice, so entries may be reduced modulo `below` all along.
    """
    size = len(table)
    zero = below - below
    columns = [[table[i][j] for i in range(size)] for j in range(len(table[0]))]
    degree = 0
    for i in range(size):
        # The multiple of the unit vector i that is always in the lattice.
        pivot = [zero] * size
        pivot[i] = below
        rest: list[list[nmod_poly]] = []
        for column in columns:
            first, second = pivot, column
            while not second[i].is_zero():
                quotient = first[i] // second[i]
                first, second = second, _minus(first, quotient, second, below, i)
            pivot = first
            if any(not value.is_zero() for value in second[i + 1 :]):
                rest.append(second)
        degree += int(pivot[i].degree())
        columns = rest
    return degree


def _minus(
    first: list[nmod_poly], factor: nmod_poly, second: list[nmod_poly], below: nmod_poly, row: int
) -> list[nmod_poly]:
    """Return first - factor * second; entries after `row` modulo `below`."""
    return [
        a if k < row else (a - factor * b if k == row else (a - factor * b) % below)
        for k, (a, b) in enumerate(zip(first, second, strict=True))
    ]


def _hankel_rank(A: nmod_mat, B: nmod_mat, C: nmod_mat, clock: Clock) -> int:
    """Return the rank of the block Hankel matrix of the Markov parameters, modulo a prime.

    n block rows and columns suffice for an order of at most n (Kalman, Falb, Arbib 1969, Topics
    in Mathematical System Theory, chapter 10); by Cayley-Hamilton the smaller of n and the number
    that already gives rank n does.
    """
    order, inputs, outputs = A.nrows(), B.ncols(), C.nrows()
    if not order or not inputs or not outputs:
        return 0
    power = B
    parameters: list[list[list[int]]] = []
    blocks = max(1, -(-order // min(inputs, outputs)))
    rank = -1
    while True:
        clock.check("the Hankel route")
        while len(parameters) < 2 * blocks - 1:
            parameters.append((C * power).tolist())
            power = A * power
        rank = _rank_of(parameters, blocks, A.modulus(), outputs, inputs)
        if rank == order or blocks == order:
            return rank
        blocks = min(order, 2 * blocks)


def _rank_of(
    parameters: list[list[list[int]]], blocks: int, prime: int, outputs: int, inputs: int
) -> int:
    entries = [
        value
        for i in range(blocks)
        for r in range(outputs)
        for j in range(blocks)
        for value in parameters[i + j][r]
    ]
    return int(nmod_mat(blocks * outputs, blocks * inputs, entries, prime).rank())
