"""Rational matrices that read like arrays, on FLINT.

The wrapper exists so that a form's text is the same on every path: it slices, transposes,
multiplies and adds like an array. FLINT objects stay behind it.
"""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from fractions import Fraction
from typing import Any, Final

import numpy as np
from flint import fmpq, fmpq_mat, fmpz_mat, nmod_mat

from realize.entries import make_fraction
from realize.polynomials import Polynomial, from_flint

__all__ = ["RationalMatrix"]

Array = np.ndarray[Any, Any]

_COMMON_BITS: Final = 4096
"""Longest common denominator that is multiplied out; above, entries are reduced one by one."""


def _fraction(value: fmpq) -> Fraction:
    return make_fraction(int(value.p), int(value.q))


class RationalMatrix:
    """A matrix over the rationals, (rows, columns), immutable."""

    __slots__ = ("_common", "_integer", "matrix", "shape")

    def __init__(self, matrix: fmpq_mat) -> None:
        self.matrix = matrix
        self.shape: tuple[int, int] = (matrix.nrows(), matrix.ncols())
        self._integer: fmpz_mat | None = None
        self._common: int | None = None

    @classmethod
    def from_array(cls, values: Array) -> RationalMatrix:
        """Take an object array of Fractions, (rows, columns)."""
        rows, columns = values.shape
        flat = values.ravel().tolist()
        if all(q.denominator == 1 for q in flat):
            integers = fmpz_mat(rows, columns, [q.numerator for q in flat])
            result = cls(fmpq_mat(integers))
            result._integer, result._common = integers, 1
            return result
        return cls(fmpq_mat(rows, columns, [fmpq(q.numerator, q.denominator) for q in flat]))

    @classmethod
    def from_floats(cls, values: Array) -> RationalMatrix:
        """Take doubles as the dyadic rationals that they are, (rows, columns)."""
        flat = [fmpq(*value.as_integer_ratio()) for value in values.ravel().tolist()]
        return cls(fmpq_mat(values.shape[0], values.shape[1], flat))

    @classmethod
    def from_entries(cls, rows: int, columns: int, entries: Sequence[Any]) -> RationalMatrix:
        """Take FLINT rationals or integers, row by row."""
        return cls(fmpq_mat(rows, columns, entries))

    @classmethod
    def identity(cls, size: int) -> RationalMatrix:
        """Return the identity."""
        entries = [0] * (size * size)
        entries[:: size + 1] = [1] * size
        return cls(fmpq_mat(fmpz_mat(size, size, entries)))

    @classmethod
    def zeros(cls, rows: int, columns: int) -> RationalMatrix:
        """Return a matrix of zeros."""
        return cls(fmpq_mat(rows, columns))

    @classmethod
    def block(cls, rows: Sequence[Sequence[RationalMatrix]]) -> RationalMatrix:
        """Assemble a matrix from blocks."""
        lines: list[list[Any]] = []
        for row in rows:
            tables = [item.matrix.tolist() for item in row]
            for i in range(row[0].shape[0]):
                lines.append([entry for table in tables for entry in table[i]])
        height = sum(row[0].shape[0] for row in rows)
        width = sum(item.shape[1] for item in rows[0]) if rows else 0
        return cls(fmpq_mat(height, width, [entry for line in lines for entry in line]))

    def to_array(self) -> Array:
        """Return an object array of Fractions."""
        result = np.empty(self.shape[0] * self.shape[1], dtype=object)
        result[:] = [_fraction(value) for value in self.matrix.entries()]
        return result.reshape(self.shape)

    def rounded(self) -> Array:
        """Return an array of doubles, each correctly rounded."""
        flat = [int(value.p) / int(value.q) for value in self.matrix.entries()]
        return np.array(flat, dtype=float).reshape(self.shape)

    def _common_denominator(self) -> int | None:
        """Return the common denominator, or None when it is too long to multiply out.

        Thousands of unrelated denominators have a common one of as many words, in every entry.
        """
        if self._common is None:
            common = 1
            for value in self.matrix.entries():
                denominator = int(value.q)
                if common % denominator:
                    common = math.lcm(common, denominator)
                    if common.bit_length() > _COMMON_BITS:
                        common = 0
                        break
            self._common = common
        return self._common or None

    def modulo(self, prime: int) -> nmod_mat | None:
        """Return the matrix modulo a prime, or None when the prime divides a denominator."""
        common = self._common_denominator()
        if common is None:
            residues = []
            for value in self.matrix.entries():
                denominator = int(value.q) % prime
                if not denominator:
                    return None
                residues.append(int(value.p) * pow(denominator, -1, prime) % prime)
            return nmod_mat(*self.shape, residues, prime)
        if common % prime == 0:
            return None
        if self._integer is None:
            self._integer = self.matrix.numer_denom()[0]
        image = nmod_mat(self._integer, prime)
        return image if common == 1 else image * pow(common, -1, prime)

    def take(self, rows: Iterable[int], columns: Iterable[int]) -> RationalMatrix:
        """Return the submatrix of the rows and columns named, in that order."""
        entries, width = self.matrix.entries(), self.shape[1]
        chosen_rows, chosen = list(rows), list(columns)
        picked = [entries[i * width + j] for i in chosen_rows for j in chosen]
        return RationalMatrix(fmpq_mat(len(chosen_rows), len(chosen), picked))

    def __getitem__(self, key: tuple[slice, slice]) -> RationalMatrix:
        rows, columns = (
            range(*part.indices(size)) for part, size in zip(key, self.shape, strict=True)
        )
        if len(rows) == self.shape[0] and len(columns) == self.shape[1]:
            return self
        return self.take(rows, columns)

    @property
    def T(self) -> RationalMatrix:
        result = RationalMatrix(self.matrix.transpose())
        result._common = self._common
        if self._integer is not None:
            result._integer = self._integer.transpose()
        return result

    def __matmul__(self, other: RationalMatrix) -> RationalMatrix:
        return RationalMatrix(self.matrix * other.matrix)

    def __add__(self, other: RationalMatrix) -> RationalMatrix:
        return RationalMatrix(self.matrix + other.matrix)

    def __sub__(self, other: RationalMatrix) -> RationalMatrix:
        return RationalMatrix(self.matrix - other.matrix)

    def __eq__(self, other: object) -> bool:
        return isinstance(other, RationalMatrix) and bool(self.matrix == other.matrix)

    __hash__ = None  # type: ignore[assignment]  # compared by value, so not hashable by identity

    def scaled(self, factor: Fraction) -> RationalMatrix:
        """Return the matrix times a number."""
        return RationalMatrix(self.matrix * fmpq(factor.numerator, factor.denominator))

    def bits(self) -> int:
        """Return about how long the integers are when denominators are cleared."""
        entries = self.matrix.entries()
        longest = max((int(value.p).bit_length() for value in entries), default=0)
        common = self._common_denominator()
        if common is None:
            return longest + sum(int(value.q).bit_length() for value in entries)
        return longest + common.bit_length()

    def is_zero(self) -> bool:
        """Whether every entry is zero."""
        return not any(self.matrix.entries())

    def rank(self) -> int:
        """Return the rank."""
        return int(self.matrix.rank())

    def characteristic_polynomial(self) -> Polynomial:
        """Return det(s - A), monic, descending powers."""
        return from_flint(self.matrix.charpoly())
