"""Whether the claim of a certificate is true, decided from the claim alone.

Plain Fractions and the plainest methods; it shares no code and no method with the checker: no
evidence is looked at, Markov parameters are compared, and ranks are taken over the rationals.
Distances alone are in doubles, by the plainest descent.
"""

from __future__ import annotations

import math
import re
from fractions import Fraction
from functools import cache
from typing import Any

import numpy as np

Rows = list[list[Fraction]]


#: Longer numbers say nothing here; no original has any.
LONGEST = 4000


class Unreadable(Exception):  # noqa: N818  # an answer, not a fault
    """The claim does not say anything definite."""


def truth(claim: Any) -> bool:
    """Whether a claim is readable and true."""
    try:
        return bool(_judge(claim))
    except (Unreadable, KeyError, IndexError, TypeError, AttributeError):
        return False


def _judge(claim: dict[str, Any]) -> bool:
    kind = claim["kind"]
    if kind in ("distance to uncontrollability", "distance to unobservability"):
        model, lower, upper = System(claim["model"]), number(claim["lower"]), number(claim["upper"])
        if not model.n or not model.fractions_hold():
            return False
        dual = kind.endswith("unobservability")
        A = [list(row) for row in zip(*model.A, strict=True)] if dual else model.A
        B = model.C if dual else [list(row) for row in zip(*model.B, strict=True)]
        found = distance(tuple(map(tuple, A)), tuple(map(tuple, B)))
        return lower * (1 - MARGIN) <= found <= upper * (1 + MARGIN)
    if kind == "minimal realization":
        model, reduced = System(claim["model"]), System(claim["reduced"])
        if not model.ports_equal(reduced) or model.names != reduced.names:
            return False
        if not same(model, reduced) or not model.fractions_hold():
            return False
        if "delivered" in claim:
            other = {**claim["reduced"], **claim["delivered"]}
            far = number(claim["distance"])
            squares = sum(
                ((x - y) ** 2)
                for mine, theirs in zip(reduced.tables, System(other).tables, strict=True)
                for row, line in zip(mine, theirs, strict=True)
                for x, y in zip(row, line, strict=True)
            )
            if far < 0 or squares > far**2:
                return False
        return hankel_rank(reduced) == reduced.n
    first, second = System(claim["first"]), System(claim["second"])
    if not (first.fractions_hold() and second.fractions_hold()):
        return False
    if kind == "different sampling periods":
        return first.period != second.period
    if kind == "different sizes":
        return (first.m, first.p) != (second.m, second.p)
    if not first.ports_equal(second):
        return False
    if kind == "same transfer matrix":
        if claim["transformation"] is None:
            return same(first, second)
        n = first.n
        T = table(claim["transformation"], n, second.n)
        return (
            n == second.n
            and rank(T) == n
            and times(first.A, T, n) == times(T, second.A, n)
            and times(T, second.B, first.m) == first.B
            and times(first.C, T, n) == second.C
            and first.D == second.D
        )
    if kind == "different transfer matrices":
        point = number(claim["point"])
        values = [table(claim["values"][key], first.p, first.m) for key in ("first", "second")]
        found = [first.value(point), second.value(point)]
        return values == found and values[0] != values[1]
    raise Unreadable


MARGIN = Fraction(1, 10**7)
"""How well a minimum that is found by steps is known, relatively."""


@cache
def distance(A: tuple[tuple[Fraction, ...], ...], B: tuple[tuple[Fraction, ...], ...]) -> Fraction:
    """The distance to uncontrollability for the columns B; exact when it is zero.

    Local minima from the eigenvalues and from a grid. One that is missed makes the value too large
    and the oracle too strict about what an upper bound may be, never too lax about a lower one.
    """
    vectors = [list(b) for b in B]
    krylov = list(vectors)
    for _ in range(len(A) - 1):
        vectors = [
            [sum((x * y for x, y in zip(row, v, strict=True)), Fraction(0)) for row in A]
            for v in vectors
        ]
        krylov += vectors
    if rank(krylov) < len(A):
        return Fraction(0)
    a, b = np.array(A, dtype=float), np.array(B, dtype=float).T

    def least(z: Any) -> Any:
        shifted = a - np.asarray(z)[..., None, None] * np.eye(len(a))
        wide = np.broadcast_to(b, (*shifted.shape[:-1], b.shape[1]))
        return np.linalg.svd(np.concatenate([shifted, wide], axis=-1), compute_uv=False)[..., -1]

    reach = float(np.linalg.norm(a)) + 1e-3
    x, y = np.meshgrid(np.linspace(-reach, reach, 41), np.linspace(0, reach, 21))
    grid = (x + 1j * y).ravel()
    starts = [*np.linalg.eigvals(a), *grid[np.argsort(least(grid))[:2]]]
    found = math.inf
    for z in starts:
        step, value = reach / 8, float(least(z))
        around = np.exp(2j * np.pi * np.arange(12) / 12)
        while step > 1e-10 * reach:
            values = least(z + step * around)
            if values.min() < value:
                z, value = z + step * around[values.argmin()], float(values.min())
            else:
                step /= 2
        found = min(found, value)
    return Fraction(found)


def number(text: Any) -> Fraction:
    """The number that a text spells, by a grammar as strict as can be."""
    if type(text) is not str or not re.fullmatch(r"-?[0-9]+(/[0-9]+)?", text, re.ASCII):
        raise Unreadable
    above, _, below = text.partition("/")
    if len(text) > LONGEST:
        raise Unreadable
    if below and not int(below):
        raise Unreadable
    return Fraction(int(above), int(below or 1))


def table(rows: Any, height: int, width: int) -> Rows:
    """A matrix of the shape wanted."""
    if type(rows) is not list or len(rows) != height:
        raise Unreadable
    if any(type(row) is not list or len(row) != width for row in rows):
        raise Unreadable
    return [[number(text) for text in row] for row in rows]


def times(left: Rows, right: Rows, width: int) -> Rows:
    """The product of two matrices."""
    return [
        [
            sum((x * line[j] for x, line in zip(row, right, strict=True)), Fraction(0))
            for j in range(width)
        ]
        for row in left
    ]


def rank(rows: Rows) -> int:
    """The rank, by elimination."""
    rows, found = [list(row) for row in rows], 0
    for column in range(len(rows[0]) if rows else 0):
        pivot = next((i for i in range(found, len(rows)) if rows[i][column]), None)
        if pivot is None:
            continue
        rows[found], rows[pivot] = rows[pivot], rows[found]
        for i in range(found + 1, len(rows)):
            factor = rows[i][column] / rows[found][column]
            if factor:
                rows[i] = [x - factor * y for x, y in zip(rows[i], rows[found], strict=True)]
        found += 1
    return found


class System:
    """A model as a claim tells it."""

    def __init__(self, value: dict[str, Any]) -> None:
        sizes = [value[key] for key in ("order", "input_count", "output_count")]
        if any(type(size) is not int or size < 0 for size in sizes):
            raise Unreadable
        self.n, self.m, self.p = sizes
        self.A, self.B = table(value["A"], self.n, self.n), table(value["B"], self.n, self.m)
        self.C, self.D = table(value["C"], self.p, self.n), table(value["D"], self.p, self.m)
        self.tables = self.A, self.B, self.C, self.D
        period = value["sampling_period"]
        self.period = None if period is None else number(period)
        if self.period is not None and self.period <= 0:
            raise Unreadable
        self.names = value["input_names"], value["output_names"]
        for names, count in zip(self.names, (self.m, self.p), strict=True):
            if type(names) is not list or len(names) != count:
                raise Unreadable
            if not all(type(name) is str for name in names):
                raise Unreadable
        self.transfer = value.get("transfer")

    def ports_equal(self, other: System) -> bool:
        """Sizes and time."""
        return (self.m, self.p, self.period) == (other.m, other.p, other.period)

    def markov(self, count: int) -> list[Rows]:
        """D, C B, C A B, ..."""
        found, power = [self.D], self.B
        while len(found) < count:
            found.append(times(self.C, power, self.m))
            power = times(self.A, power, self.m)
        return found

    def value(self, point: Fraction) -> Rows:
        """The transfer matrix at a point that is not an eigenvalue."""
        shifted = [
            [point * (i == j) - x for j, x in enumerate(row)] for i, row in enumerate(self.A)
        ]
        if rank(shifted) < self.n:
            raise Unreadable
        X = solve(shifted, self.B)
        return [
            [x + d for x, d in zip(row, line, strict=True)]
            for row, line in zip(times(self.C, X, self.m), self.D, strict=True)
        ]

    def fractions_hold(self) -> bool:
        """Whether the fractions beside the model, if any, are its transfer matrix.

        Both are proper, and agree at more points than they have poles together.
        """
        if self.transfer is None:
            return True
        above, below = self.transfer["numerators"], self.transfer["denominators"]
        if {*self.transfer} != {"numerators", "denominators"}:
            raise Unreadable
        for i in range(self.p):
            for j in range(self.m):
                top = [number(x) for x in above[i][j]]
                bottom = [number(x) for x in below[i][j]]
                if not bottom or not bottom[0] or not top or len(top) > len(bottom):
                    return False
                good, point = 0, Fraction(0)
                while good <= self.n + len(bottom):
                    point += 1
                    down = horner(bottom, point)
                    try:
                        value = self.value(point)[i][j]
                    except Unreadable:
                        continue
                    if down:
                        if horner(top, point) / down != value:
                            return False
                        good += 1
        shape = [len(above), len(below), *map(len, above), *map(len, below)]
        return shape == [self.p, self.p, *[self.m] * (2 * self.p)]


def horner(p: list[Fraction], at: Fraction) -> Fraction:
    """The value of a polynomial."""
    value = Fraction(0)
    for coefficient in p:
        value = value * at + coefficient
    return value


def solve(M: Rows, right: Rows) -> Rows:
    """The solution of M X = right, M invertible, by elimination."""
    size = len(M)
    rows = [[*row, *line] for row, line in zip(M, right, strict=True)]
    for column in range(size):
        pivot = next(i for i in range(column, size) if rows[i][column])
        rows[column], rows[pivot] = rows[pivot], rows[column]
        rows[column] = [x / rows[column][column] for x in rows[column]]
        for i in range(size):
            factor = rows[i][column]
            if i != column and factor:
                rows[i] = [x - factor * y for x, y in zip(rows[i], rows[column], strict=True)]
    return [row[size:] for row in rows]


def same(first: System, second: System) -> bool:
    """Equal Markov parameters up to the sum of the orders, which proves equality of all."""
    count = first.n + second.n + 1
    return first.markov(count) == second.markov(count)


def hankel_rank(model: System) -> int:
    """The minimal order: the rank of the Hankel matrix of the Markov parameters."""
    n, h = model.n, model.markov(2 * model.n + 1)
    return rank(
        [
            [x for j in range(n) for x in h[i + j + 1][output]]
            for i in range(n)
            for output in range(model.p)
        ]
    )
