"""Short ways to write the models of the literature, in exact numbers.

Nothing here calls the code under test, except that models are built with its two classes, and
that `controllability_matrix` and `resultant_size` read a matrix off its Markov parameters.

Each check names its source and says how the value came to us:

published
    the value, or where it says so only the data, was read in the source;
memory
    data or value are remembered from the source, which was not looked up again;
recomputed
    the value was computed a second time, exactly or with 50 digits, and agrees
    (alone: the value is our own and serves as a regression value);
common practice
    a fact of the trade, without one particular source.
"""

import json
from collections.abc import Iterable, Sequence
from fractions import Fraction
from pathlib import Path
from typing import Any

import flint
import numpy as np

from realize import Realization, TransferMatrix, exact
from tests.helpers import Polynomial, identity, plus, rank, strip, times

Number = int | str | Fraction
Fractions = Sequence[Sequence[tuple[Sequence[Number], Sequence[Number]]]]


def data(name: str) -> Any:
    """A table from the data directory."""
    return json.loads((Path(__file__).parent / "data" / f"{name}.json").read_text("utf-8"))


def poly(*coefficients: Number) -> Polynomial:
    """The polynomial with these coefficients, descending, without leading zeros."""
    return strip(coefficients)


def scaled(factor: Number, polynomial: Sequence[Number]) -> Polynomial:
    """A number times a polynomial."""
    return strip(Fraction(factor) * Fraction(value) for value in polynomial)


def with_roots(*roots: Number) -> Polynomial:
    """The monic polynomial with these roots."""
    return times(*((1, -Fraction(root)) for root in roots))


def monic(polynomial: Sequence[Number]) -> Polynomial:
    """The polynomial divided by its leading coefficient."""
    return scaled(1 / Fraction(polynomial[0]), polynomial)


def derivative(polynomial: Sequence[Number]) -> Polynomial:
    """The derivative."""
    top = len(polynomial) - 1
    return strip(Fraction(c) * (top - i) for i, c in enumerate(polynomial[:-1]))


def chebyshev(degree: int, second: bool = False) -> Polynomial:
    """T_degree, or U_degree, by the three-term recurrence."""
    previous, current = poly(1), poly(2, 0) if second else poly(1, 0)
    if degree == 0:
        return previous
    for _ in range(degree - 1):
        previous, current = current, plus(times((2, 0), current), scaled(-1, previous))
    return current


def value_at(polynomial: Iterable[Any], point: Any) -> Any:
    """The value at a point (exact when both are)."""
    total: Any = 0
    for coefficient in polynomial:
        total = total * point + coefficient
    return total


def matrix(rows: Iterable[Iterable[Number]]) -> np.ndarray:
    """An object array of fractions; at least one row and one column."""
    return np.array([[Fraction(value) for value in row] for row in rows], dtype=object)


def diagonal(*values: Number) -> np.ndarray:
    """A diagonal matrix."""
    size = len(values)
    return matrix([[values[i] if i == j else 0 for j in range(size)] for i in range(size)])


def column(*values: Number) -> np.ndarray:
    """One column."""
    return matrix([[value] for value in values])


def row(*values: Number) -> np.ndarray:
    """One row."""
    return matrix([values])


def unit(size: int, *which: int) -> np.ndarray:
    """Unit vectors as columns; the first is number 1, as in the sources."""
    return matrix([[int(i + 1 == j) for j in which] for i in range(size)])


def shift(size: int) -> np.ndarray:
    """Ones above the diagonal."""
    return matrix([[int(j == i + 1) for j in range(size)] for i in range(size)])


def companion_matrix(polynomial: Sequence[Number]) -> np.ndarray:
    """Ones above the diagonal, minus the coefficients in the last row."""
    A = shift(len(polynomial) - 1)
    A[-1] = [-value for value in reversed(monic(polynomial)[1:])]
    return A


def block_diagonal(*blocks: np.ndarray) -> np.ndarray:
    """The blocks along the diagonal, zeros elsewhere."""
    rows = sum(block.shape[0] for block in blocks)
    columns = sum(block.shape[1] for block in blocks)
    out = matrix([[0] * columns] * rows)
    r = c = 0
    for block in blocks:
        out[r : r + block.shape[0], c : c + block.shape[1]] = block
        r, c = r + block.shape[0], c + block.shape[1]
    return out


def model(
    A: Any, B: Any, C: Any, D: Any = None, *, sampling_period: Number | None = None
) -> Realization:
    """A rational model; every entry is read as the number it spells."""
    return Realization(
        matrix(A),
        matrix(B),
        matrix(C),
        None if D is None else matrix(D),
        sampling_period=sampling_period,
    )


def transfer(rows: Fractions, *, sampling_period: Number | None = None) -> TransferMatrix:
    """A rational transfer matrix from rows of (numerator, denominator)."""
    return TransferMatrix(
        [[strip(numerator) for numerator, _ in line] for line in rows],
        [[strip(denominator) for _, denominator in line] for line in rows],
        sampling_period=sampling_period,
    )


def sequence(values: Iterable[Number]) -> np.ndarray:
    """Markov parameters of one input and one output: D = 0, then the values."""
    return np.array([[[Fraction(0)]], *([[Fraction(v)]] for v in values)], dtype=object)


def determinant(array: np.ndarray) -> Fraction:
    """The exact determinant, by FLINT."""
    rows, columns = array.shape
    entries = [flint.fmpq(v.numerator, v.denominator) for v in map(Fraction, array.ravel())]
    value = flint.fmpq_mat(rows, columns, entries).det()
    return Fraction(int(value.p), int(value.q))


def controllability_matrix(system: Realization) -> np.ndarray:
    """[B, AB, A^2 B, ...], which are the Markov parameters of the model with C = I."""
    states_out = Realization(system.A, system.B, identity(system.order))
    return np.hstack(list(exact.markov_parameters(states_out, system.order + 1)[1:]))


def resultant_size(denominator: Sequence[Number], numerator: Sequence[Number]) -> Fraction:
    """The size of the resultant, through the controllable companion form of a fraction.

    The observability matrix of that form has the determinant of the values of the (monic)
    fraction's numerator at the roots of its denominator, multiplied, up to sign.
    """
    form = exact.companion(transfer([[(numerator, denominator)]]))
    lead = abs(Fraction(denominator[0]))
    size = abs(determinant(controllability_matrix(form.dual())))
    return size * lead ** (len(strip(numerator)) - 1 + form.order)


def same_span(first: np.ndarray, second: np.ndarray) -> bool:
    """Whether the columns of two matrices span the same space."""
    return rank(first) == rank(second) == rank(np.hstack([first, second]))


def assert_transfer(found: TransferMatrix, rows: Fractions, *, proved: bool | None = None) -> None:
    """Hold a transfer matrix to a table: exactly, or at four points to eight digits.

    Exactly where it is proved; unless told otherwise, that is where it is rational.
    """
    assert (found.output_count, found.input_count) == (len(rows), len(rows[0]))
    if found.kind == "rational" if proved is None else proved:
        for i, line in enumerate(rows):
            for j, (numerator, denominator) in enumerate(line):
                left = times(found.numerators[i][j], denominator)
                right = times(found.denominators[i][j], numerator)
                assert left == right, f"entry {i}, {j}"
        return
    table = [
        [(strip(numerator), strip(denominator)) for numerator, denominator in line] for line in rows
    ]
    for point in (0.7 + 0.9j, -0.4 + 2.1j, 2.5 - 0.3j, 1.3 + 4.0j):
        wanted = np.array(
            [
                [value_at(map(float, n), point) / value_at(map(float, d), point) for n, d in line]
                for line in table
            ]
        )
        size = max(1.0, float(np.abs(wanted).max()))
        assert np.abs(np.asarray(found.evaluate(point)) - wanted).max() <= 1e-8 * size, point
