"""Assertions and a small exact algebra shared by the tests.

The algebra works on Python integers and Fractions alone, by the plainest method, so that the
tests can check the library against something that shares none of its code.
"""

from __future__ import annotations

import dataclasses
from collections.abc import Iterable, Iterator, Mapping, Sequence
from fractions import Fraction
from typing import Any

import numpy as np

Polynomial = tuple[Fraction, ...]

ONE: Polynomial = (Fraction(1),)

CONTROLLABLE_OBSERVABLE = "controllable, observable"
CONTROLLABLE_UNOBSERVABLE = "controllable, unobservable"
UNCONTROLLABLE_OBSERVABLE = "uncontrollable, observable"
UNCONTROLLABLE_UNOBSERVABLE = "uncontrollable, unobservable"

#: The four parts, in the order of the blocks of the Kalman decomposition.
PARTS = (
    CONTROLLABLE_UNOBSERVABLE,
    CONTROLLABLE_OBSERVABLE,
    UNCONTROLLABLE_UNOBSERVABLE,
    UNCONTROLLABLE_OBSERVABLE,
)


# --------------------------------------------------------------------------- assertions


def assert_equal_exact(actual: Any, expected: Any, what: str = "value") -> None:
    """Both sides have one shape, hold exact numbers only, and are equal entry by entry."""
    left = np.asarray(actual, dtype=object)
    right = np.asarray(expected, dtype=object)
    assert left.shape == right.shape, f"{what}: shape {left.shape}, expected {right.shape}"
    for index in np.ndindex(left.shape):
        for side, entry in (("actual", left[index]), ("expected", right[index])):
            assert type(entry) in (int, Fraction), (
                f"{what}: the {side} entry at {index} is {entry!r}, not an int or a Fraction"
            )
        assert left[index] == right[index], (
            f"{what}: the entry at {index} is {left[index]}, expected {right[index]}"
        )


def assert_close(
    actual: Any, expected: Any, *, relative: float, absolute: float = 0.0, what: str = "value"
) -> None:
    """Finite arrays of one shape, whose difference is small beside the largest entry expected."""
    left = np.asarray(actual)
    right = np.asarray(expected)
    if left.dtype == object:
        left = left.astype(float)
    if right.dtype == object:
        right = right.astype(float)
    assert left.shape == right.shape, f"{what}: shape {left.shape}, expected {right.shape}"
    if left.size == 0:
        return
    assert np.isfinite(left).all(), f"{what}: an entry is not finite: {left}"
    error = float(np.abs(left - right).max())
    allowed = relative * float(np.abs(right).max()) + absolute
    assert error <= allowed, f"{what}: off by {error:.3g}, allowed {allowed:.3g}"


# --------------------------------------------------------------------------- exact matrices


def matrix(rows: Iterable[Iterable[Any]] | np.ndarray, shape: tuple[int, int]) -> np.ndarray:
    """An object array of Fractions with the shape given, also when it is empty."""
    result = np.empty(shape, dtype=object)
    for i, row in enumerate(rows):
        for j, entry in enumerate(row):
            result[i, j] = Fraction(entry)
    return result


def exact(array: np.ndarray) -> np.ndarray:
    """The same numbers as Fractions; doubles as the dyadic rationals that they are."""
    return matrix(array.tolist(), (array.shape[0], array.shape[1]))


def zeros(rows: int, columns: int) -> np.ndarray:
    """A matrix of exact zeros."""
    return matrix([[0] * columns] * rows, (rows, columns))


def identity(size: int) -> np.ndarray:
    """The exact identity."""
    return matrix([[int(i == j) for j in range(size)] for i in range(size)], (size, size))


def product(*factors: np.ndarray) -> np.ndarray:
    """The exact product of matrices, defined also when an inner size is zero."""
    result = factors[0]
    for factor in factors[1:]:
        assert result.shape[1] == factor.shape[0]
        left, right = result.tolist(), list(zip(*factor.tolist(), strict=True))
        if not right:
            right = [()] * factor.shape[1]
        rows = [
            [
                sum((x * y for x, y in zip(row, column, strict=True)), Fraction(0))
                for column in right
            ]
            for row in left
        ]
        result = matrix(rows, (result.shape[0], factor.shape[1]))
    return result


def join(blocks: Sequence[Sequence[np.ndarray]]) -> np.ndarray:
    """One matrix from a grid of blocks; blocks may be empty."""
    return np.concatenate([np.concatenate(list(row), axis=1) for row in blocks], axis=0)


def echelon(array: np.ndarray) -> tuple[list[list[Fraction]], list[int]]:
    """Reduced row echelon form and its pivot columns, by Gauss-Jordan elimination."""
    rows = [[Fraction(x) for x in row] for row in array.tolist()]
    pivots: list[int] = []
    for column in range(array.shape[1]):
        top = len(pivots)
        found = next((i for i in range(top, len(rows)) if rows[i][column] != 0), None)
        if found is None:
            continue
        rows[top], rows[found] = rows[found], rows[top]
        pivot = rows[top][column]
        rows[top] = [x / pivot for x in rows[top]]
        for i, row in enumerate(rows):
            if i != top and row[column] != 0:
                factor = row[column]
                rows[i] = [x - factor * y for x, y in zip(row, rows[top], strict=True)]
        pivots.append(column)
    return rows[: len(pivots)], pivots


def rank(array: np.ndarray) -> int:
    """Exact rank."""
    return len(echelon(array)[1])


def inverse(array: np.ndarray) -> np.ndarray:
    """Exact inverse of an invertible matrix."""
    size = array.shape[0]
    if size == 0:
        return zeros(0, 0)
    rows, pivots = echelon(join([[array, identity(size)]]))
    assert pivots == list(range(size)), "the matrix is singular"
    return matrix([row[size:] for row in rows], (size, size))


def controllability_matrix(A: np.ndarray, B: np.ndarray) -> np.ndarray:
    """[B, AB, ..., A^(n-1) B], exact."""
    blocks = [exact(B)]
    for _ in range(A.shape[0] - 1):
        blocks.append(product(A, blocks[-1]))
    return np.concatenate(blocks, axis=1)


def reachable_ranks(A: np.ndarray, B: np.ndarray) -> list[int]:
    """The growth of the rank of [B, AB, ...], step by step: the stairs, by definition."""
    stairs: list[int] = []
    columns = block = exact(B)
    while True:
        step = rank(columns) - sum(stairs)
        if step == 0:
            return stairs
        stairs.append(step)
        block = product(A, block)
        columns = join([[columns, block]])


def characteristic_polynomial(A: np.ndarray) -> Polynomial:
    """det(sI - A), monic, descending powers (Faddeev and Le Verrier's recursion)."""
    size = A.shape[0]
    coefficients = [Fraction(1)]
    power = identity(size)
    for k in range(1, size + 1):
        step = product(A, power)
        coefficient = -sum((step[i, i] for i in range(size)), Fraction(0)) / k
        coefficients.append(coefficient)
        power = step + coefficient * identity(size)
    return tuple(coefficients)


# --------------------------------------------------------------------------- exact polynomials


def strip(p: Iterable[Any]) -> Polynomial:
    """Fractions without leading zeros; the zero polynomial is (0,)."""
    coefficients = [Fraction(c) for c in p]
    while len(coefficients) > 1 and coefficients[0] == 0:
        del coefficients[0]
    return tuple(coefficients) or (Fraction(0),)


def times(*factors: Iterable[Any]) -> Polynomial:
    """The product of polynomials; one when there is none."""
    result: list[Fraction] = [Fraction(1)]
    for factor in factors:
        other = [Fraction(c) for c in factor]
        step = [Fraction(0)] * (len(result) + len(other) - 1)
        for i, x in enumerate(result):
            for j, y in enumerate(other):
                step[i + j] += x * y
        result = step
    return strip(result)


def plus(p: Polynomial, q: Polynomial) -> Polynomial:
    """The sum of two polynomials."""
    size = max(len(p), len(q))
    pad = [(Fraction(0),) * (size - len(r)) + r for r in (p, q)]
    return strip(x + y for x, y in zip(*pad, strict=True))


def remainder(p: Polynomial, q: Polynomial) -> Polynomial:
    """The remainder of p divided by q."""
    rest = list(p)
    while len(rest) >= len(q):
        factor = rest[0] / q[0]
        for i, c in enumerate(q):
            rest[i] -= factor * c
        del rest[0]
    return strip(rest) if rest else (Fraction(0),)


def common_factor(p: Polynomial, q: Polynomial) -> Polynomial:
    """The monic greatest common divisor, by Euclid's algorithm."""
    while q != (Fraction(0),):
        p, q = q, remainder(p, q)
    return tuple(c / p[0] for c in p)


# --------------------------------------------------------------------------- models by hand


def controllable_companion(
    numerator: Polynomial, denominator: Polynomial
) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """A, B, C, D of a proper fraction, states from the output end to the input end."""
    size = len(denominator) - 1
    den = [c / denominator[0] for c in denominator]
    num = [Fraction(0)] * (size + 1 - len(numerator)) + [c / denominator[0] for c in numerator]
    A = zeros(size, size)
    for i in range(size - 1):
        A[i, i + 1] = Fraction(1)
    for j in range(size):
        A[size - 1, j] = -den[size - j]
    B = zeros(size, 1)
    if size:
        B[size - 1, 0] = Fraction(1)
    C = matrix([[num[size - j] - num[0] * den[size - j] for j in range(size)]], (1, size))
    return A, B, C, matrix([[num[0]]], (1, 1))


def change_coordinates(
    matrices: tuple[np.ndarray, ...], T: np.ndarray
) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """T^-1 A T, T^-1 B, C T, D, exact: state = T @ new state."""
    A, B, C, D = (exact(m) for m in matrices)
    back = inverse(T)
    return product(back, A, T), product(back, B), product(C, T), D


def assert_same_transfer(first: Any, second: Any) -> None:
    """Two exact transfer matrices are equal as functions: n1 d2 = n2 d1 in every entry."""
    assert (first.output_count, first.input_count) == (second.output_count, second.input_count)
    for i in range(first.output_count):
        for j in range(first.input_count):
            left = times(first.numerators[i][j], second.denominators[i][j])
            right = times(second.numerators[i][j], first.denominators[i][j])
            assert_equal_exact(left, right, f"cross product of entry ({i}, {j})")


def assert_same_response(first: Any, second: Any) -> None:
    """Two exact models have one D and equal Markov parameters to the sum of their orders.

    Equality of that many proves equality of all, by the Cayley-Hamilton theorem.
    """
    for left, right in zip(
        markov_by_hand(first, first.order + second.order + 1),
        markov_by_hand(second, first.order + second.order + 1),
        strict=True,
    ):
        assert_equal_exact(left, right, "Markov parameter")


def markov_by_hand(model: Any, count: int) -> list[np.ndarray]:
    """D, CB, CAB, ... by definition, exact."""
    A, block, C, D = (exact(m) for m in model.matrices())
    result = [D]
    while len(result) < count:
        result.append(product(C, block))
        block = product(A, block)
    return result[:count]


# --------------------------------------------------------------------------- walking results


def walk(thing: Any, path: str = "result") -> Iterator[tuple[str, Any]]:
    """Every value reachable from a result through attributes, items and array entries."""
    seen: set[int] = set()
    stack: list[tuple[str, Any]] = [(path, thing)]
    keep: list[Any] = []  # holds every object alive, so that an id is never used twice
    while stack:
        where, value = stack.pop()
        if id(value) in seen:
            continue
        seen.add(id(value))
        keep.append(value)
        yield where, value
        if isinstance(value, (str, bytes, int, float, complex, Fraction, type(None), type)):
            continue
        if isinstance(value, np.ndarray):
            if value.dtype == object:
                stack += [(f"{where}[{i}]", x) for i, x in enumerate(value.ravel())]
            continue
        if isinstance(value, Mapping):
            stack += [(f"{where} key {k!r}", k) for k in value]
            stack += [(f"{where}[{k!r}]", x) for k, x in value.items()]
            continue
        if isinstance(value, (tuple, list, set, frozenset)):
            stack += [(f"{where}[{i}]", x) for i, x in enumerate(value)]
            continue
        stack += [(f"{where}.{name}", x) for name, x in attributes(value)]


def attributes(value: Any) -> Iterator[tuple[str, Any]]:
    """Names and values of the fields, slots, instance dictionary and properties of an object."""
    names: dict[str, None] = {}
    if dataclasses.is_dataclass(value):
        names.update(dict.fromkeys(f.name for f in dataclasses.fields(value)))
    for base in type(value).__mro__:
        slots = base.__dict__.get("__slots__", ())
        names.update(dict.fromkeys((slots,) if isinstance(slots, str) else slots))
        if base.__module__.startswith("realize"):
            names.update(
                dict.fromkeys(n for n, x in base.__dict__.items() if isinstance(x, property))
            )
    names.update(dict.fromkeys(getattr(value, "__dict__", {})))
    for name in names:
        # Name mangling and slots never filled are the only reasons for an absent attribute.
        if name not in ("__dict__", "__weakref__") and hasattr(value, name):
            yield name, getattr(value, name)
