"""Transfer matrices: fractions of polynomials, one for each pair of output and input.

The fractions are kept as given; common factors stay until someone asks to cancel them.
"""

from __future__ import annotations

import html
import math
from collections.abc import Callable, Iterator, Sequence
from fractions import Fraction
from typing import Any, Self, TypeAlias

import numpy as np
from numpy.typing import NDArray

from realize.entries import (
    Constant,
    Entry,
    Kind,
    decided,
    fraction_array,
    is_constant,
    parse_entry,
    round_entry,
)
from realize.errors import (
    EntryError,
    ImproperError,
    ShapeError,
    UnsupportedEntryError,
    ZeroDenominatorError,
)
from realize.model.base import (
    Names,
    Period,
    SystemModel,
    count_text,
    encode_entry,
    entry_reader,
    expression,
    fit_names,
    own_names,
    parse_names,
    parse_period,
    refuse_masked,
)

__all__ = ["Coefficients", "Table", "TransferMatrix"]

Coefficients: TypeAlias = tuple[Any, ...]
"""Coefficients in descending powers: all floats, all Fractions, or all expressions of sympy."""

Table: TypeAlias = tuple[tuple[Coefficients, ...], ...]
"""A polynomial for each output and input: table[output][input]."""

_Gaussian: TypeAlias = tuple[Any, Any]
"""Real and imaginary part: Fractions, or expressions of sympy."""

_ZERO = Fraction(0)


class TransferMatrix(SystemModel):
    """A matrix of fractions of polynomials in s, or in z with a sampling period.

    Parameters
    ----------
    numerators, denominators : nested sequences, [output][input][coefficient]
        Coefficients in descending powers, of the kinds that `Realization` takes. For one input
        and one output two flat lists serve; a flat denominator serves all entries of a nested
        numerator.
    sampling_period : number, keyword-only, optional
        None for continuous time; else a positive number.
    improper : bool, keyword-only, optional
        Whether a numerator may have a higher degree than its denominator.
    input_names, output_names : sequence of str, keyword-only, optional
        u1, u2, ... and y1, y2, ... unless given.

    Raises
    ------
    ShapeError
        Lists that are empty, ragged or nested to a wrong depth.
    ImproperError
        An improper fraction, unless `improper` is true.
    ZeroDenominatorError
        A denominator that is zero.
    EntryError, UnsupportedEntryError, LimitError
        A coefficient that is not a usable number; see `realize.entries.parse_entry`.
    SamplingPeriodError
        A sampling period that is not a positive number.

    Notes
    -----
    Leading zeros are dropped, nothing else is changed. Immutable. Two transfer matrices are equal
    when their coefficients are, which is more than being equal as functions.

    References
    ----------
    Kailath (1980), Linear Systems, section 6.1.

    Examples
    --------
    >>> transfer = TransferMatrix([1, 1], [1, 3, 2])
    >>> transfer
    <TransferMatrix: 1 input, 1 output, continuous time, rational>
    >>> transfer.evaluate("1/2")[0, 0]
    Fraction(2, 5)
    """

    __slots__ = ("_denominators", "_given", "_input_count", "_numerators")

    _KEY = "transfer"
    _numerators: Table
    _denominators: Table
    # The coefficients before rounding, floats and Fractions together; None unless both occur.
    _given: tuple[Table, Table] | None
    _input_count: int

    def __init__(
        self,
        numerators: Any,
        denominators: Any,
        *,
        sampling_period: Any = None,
        improper: bool = False,
        input_names: Sequence[str] | None = None,
        output_names: Sequence[str] | None = None,
    ) -> None:
        above, below = _parse(numerators, denominators)
        for row, column, numerator, denominator in _pairs(above, below):
            if not any(denominator):
                where = _entry_text(row, column)
                raise ZeroDenominatorError(
                    f"{where}: the denominator is zero; give one with a coefficient that is "
                    "not zero",
                    where=where,
                )
            if len(numerator) > len(denominator) and not improper:
                where = _entry_text(row, column)
                raise ImproperError(
                    f"{where}: the numerator has degree {len(numerator) - 1}, the denominator "
                    f"degree {len(denominator) - 1}; a realization needs a proper fraction, "
                    "pass improper=True to keep this one as a transfer matrix",
                    where=where,
                    numerator_degree=len(numerator) - 1,
                    denominator_degree=len(denominator) - 1,
                )
        floats, others = _holds(_is_float, above, below), _holds(_is_no_float, above, below)
        constants = others and _holds(is_constant, above, below)
        self._given = None
        if floats and others:
            self._given = above, below
            above, below = _round_tables(above, below)
        elif constants:
            above, below = _map(_expressions, above), _map(_expressions, below)
        self._numerators = above
        self._denominators = below
        self._kind = Kind.FLOATING if floats else Kind.PARAMETRIC if constants else Kind.RATIONAL
        self._digest = None
        self._sampling_period = parse_period(sampling_period)
        inputs = parse_names(input_names, "input_names")
        # Without outputs there is no row to count inputs in.
        self._input_count = len(above[0]) if above else len(inputs or ())
        self._input_names = fit_names(inputs, "u", self._input_count, "input_names")
        self._output_names = fit_names(
            parse_names(output_names, "output_names"), "y", len(above), "output_names"
        )

    @classmethod
    def _trusted(
        cls,
        numerators: Table,
        denominators: Table,
        *,
        kind: Kind,
        sampling_period: Period = None,
        input_count: int | None = None,
        input_names: Names | None = None,
        output_names: Names | None = None,
    ) -> Self:
        """Return a transfer matrix of stripped tables of one kind, without checks.

        Without outputs there is no row to count inputs in; then `input_count` does, or the names.
        """
        if input_count is None:
            input_count = len(numerators[0]) if numerators else len(input_names or ())
        self = cls.__new__(cls)
        self._numerators = numerators
        self._denominators = denominators
        self._given = None
        self._kind = kind
        self._digest = None
        self._sampling_period = sampling_period
        self._input_count = input_count
        self._input_names = input_names
        self._output_names = output_names
        return self

    # Numbers

    @property
    def numerators(self) -> Table:
        """Numerators: coefficient tuples in descending powers, by output, then input."""
        return self._numerators

    @property
    def denominators(self) -> Table:
        """Denominators: coefficient tuples in descending powers, by output, then input."""
        return self._denominators

    @property
    def input_count(self) -> int:
        """The number of inputs, m."""
        return self._input_count

    @property
    def output_count(self) -> int:
        """The number of outputs, p."""
        return len(self._numerators)

    @property
    def is_proper(self) -> bool:
        """Whether no numerator has a higher degree than its denominator."""
        return all(
            len(numerator) <= len(denominator)
            for _, _, numerator, denominator in _pairs(self._numerators, self._denominators)
        )

    def evaluate(self, point: Any) -> NDArray[Any]:
        """Return the value of every entry at a point of the complex plane.

        Parameters
        ----------
        point : int, Fraction, str, float, complex
            A value of s, or of z. The fractions are taken as given, so a common factor that is
            zero at the point makes it a pole.

        Returns
        -------
        numpy.ndarray, shape (outputs, inputs)
            Fractions for a rational model at a rational point; expressions of sympy for a
            parametric one, exact, not simplified. Else doubles, complex ones at a complex point:
            the value of the stored coefficients at the stored point, correctly rounded.

        Raises
        ------
        EntryError
            At a pole of an entry; at a point that is not finite; where a value is too large for
            a double. With irrational constants also where it cannot be told whether the point is
            a pole, or whether a value to be rounded is zero.
        UnsupportedEntryError
            A point that is not a number.

        Notes
        -----
        Computed in rational arithmetic and rounded once, so that nothing overflows or cancels on
        the way. Cost grows with the square of the degree. Irrational constants are carried along
        as expressions; see `realize.entries.decided` for when one counts as zero.
        """
        at, exact, is_complex = _parse_point(point)
        numerators, denominators = self._as_given()
        constants = self._holds_constants()
        if constants:
            at = expression(at[0]), expression(at[1])
        values: list[_Gaussian] = []
        for row, column, numerator, denominator in _pairs(numerators, denominators):
            where = _entry_text(row, column)
            below = _horner(denominator, at)
            if constants:
                below = _decided_denominator(below, where, point)
            if not any(below):
                raise EntryError(
                    f"{where}: the point {point!r} is a pole; evaluate next to it, or cancel "
                    "first if it is only a common factor",
                    where=where,
                    found=repr(point),
                )
            values.append(_quotient(_horner(numerator, at), below))
        shape = (self.output_count, self.input_count)
        if exact and self._kind is Kind.RATIONAL:
            return fraction_array((real for real, _ in values), shape)
        if exact and self._kind is Kind.PARAMETRIC:
            return fraction_array((expression(real) for real, _ in values), shape)
        if constants:
            values = [(decided(real, "value"), decided(other, "value")) for real, other in values]
        real = [round_entry(part, "value") for part, _ in values]
        if not is_complex:
            return np.array(real, dtype=np.float64).reshape(shape)
        imaginary = [round_entry(part, "value") for _, part in values]
        return np.array(list(map(complex, real, imaginary)), dtype=np.complex128).reshape(shape)

    # Other models

    def read(self, reading: str) -> TransferMatrix:
        """Return the rational transfer matrix that this one stands for.

        Parameters
        ----------
        reading : {"stored", "written", "intended", "given"}
            See `realize.entries.Reading`. Only floats are read, a float sampling period included;
            rational coefficients stay.

        Returns
        -------
        TransferMatrix
            A rational one; this one, when nothing is to be read.

        Raises
        ------
        UnknownWordError
            For another word, and for "given" when there are floats.
        UnsupportedEntryError
            When there are irrational constants.
        """
        word = self._reading(reading)
        if word is None:
            return self
        period = self._period_read(word)
        if self._kind is Kind.RATIONAL:
            if period is self._sampling_period:
                return self
            tables = self._numerators, self._denominators
        else:
            reader = entry_reader(word)
            numerators, denominators = self._as_given()

            def change(polynomial: Coefficients) -> Coefficients:
                return tuple(map(reader, polynomial))

            tables = _map(change, numerators), _map(change, denominators)
        return self._like(*tables, Kind.RATIONAL, period)._read_from(word, self)

    def to_float(self) -> TransferMatrix:
        """Return the transfer matrix in doubles, each coefficient correctly rounded.

        The sampling period is kept as given.

        Raises
        ------
        EntryError
            When a coefficient is too large for a double, or a leading one of a denominator too
            small.
        """
        if self._kind is Kind.FLOATING and self._given is None:
            return self
        tables = self._numerators, self._denominators
        if self._kind is not Kind.FLOATING:
            tables = _round_tables(*tables)
        return self._like(*tables, Kind.FLOATING, self._sampling_period)

    def dual(self) -> TransferMatrix:
        """Return the transpose: inputs and outputs change places."""

        def transpose(table: Table) -> Table:
            return tuple(zip(*table, strict=True)) if table else ((),) * self._input_count

        dual = TransferMatrix._trusted(
            transpose(self._numerators),
            transpose(self._denominators),
            kind=self._kind,
            input_count=self.output_count,
            sampling_period=self._sampling_period,
            input_names=own_names(self._output_names, "y"),
            output_names=own_names(self._input_names, "u"),
        )
        if self._given is not None:
            dual._given = (transpose(self._given[0]), transpose(self._given[1]))
        return dual

    def _like(
        self, numerators: Table, denominators: Table, kind: Kind, period: Period
    ) -> TransferMatrix:
        """Return a transfer matrix of other tables of the same size, with the names of this one."""
        return TransferMatrix._trusted(
            numerators,
            denominators,
            kind=kind,
            input_count=self._input_count,
            sampling_period=period,
            input_names=self._input_names,
            output_names=self._output_names,
        )

    # Identity

    def _key(self) -> tuple[Any, ...]:
        numerators, denominators = self._as_given()
        # 1.0 and 1 compare equal but are read differently.
        exact = self._given and tuple(
            _map(lambda polynomial: tuple(isinstance(c, Fraction) for c in polynomial), table)
            for table in self._given
        )
        return self._input_count, numerators, denominators, exact

    def _as_given(self) -> tuple[Table, Table]:
        """Return both tables with each coefficient as it was given."""
        return self._given or (self._numerators, self._denominators)

    def _placed(self) -> Iterator[tuple[str, Entry | Constant]]:
        if self._kind is Kind.FLOATING and self._given is None:
            return
        tables = self._as_given()
        for part, table in zip(("numerator", "denominator"), tables, strict=True):
            for row, line in enumerate(table):
                for column, polynomial in enumerate(line):
                    for index, entry in enumerate(polynomial):
                        where = f"{part} of {_entry_text(row, column)}, coefficient {index + 1}"
                        yield where, entry

    def _body(self) -> dict[str, Any]:
        numerators, denominators = self._as_given()
        return {
            "numerators": _encoded(numerators),
            "denominators": _encoded(denominators),
        }

    def _extras(self) -> dict[str, Any]:
        extras: dict[str, Any] = {}
        if not (self.input_count and self.output_count):
            extras = {"inputs": self.input_count, "outputs": self.output_count}
            if self._kind is Kind.FLOATING:
                extras["kind"] = str(self._kind)
        if not self.is_proper:
            extras["improper"] = True
        return extras

    def _state(self) -> tuple[Any, ...]:
        return (
            (self._numerators, self._denominators),
            self._given,
            self._kind,
            self._input_count,
            self._sampling_period,
            (self._input_names, self._output_names),
        )

    @classmethod
    def _restore(cls, *state: Any) -> Self:
        tables, given, kind, input_count, period, names = state
        self = cls._trusted(
            *tables,
            kind=kind,
            input_count=input_count,
            sampling_period=period,
            input_names=names[0],
            output_names=names[1],
        )
        self._given = given
        return self

    # Looks

    def _summary(self) -> str:
        return (
            f"{count_text(self.input_count, 'input')}, {count_text(self.output_count, 'output')}, "
            f"{self._time_text()}, {self._kind}"
        )

    def __repr__(self) -> str:
        return f"<TransferMatrix: {self._summary()}>"

    def _repr_html_(self) -> str:
        """Return the sizes, and the fractions when they are few, as a notebook shows them."""
        latex = self._repr_latex_()
        return f"<p>TransferMatrix: {html.escape(self._summary())}</p>" + (
            f"<p>{html.escape(latex)}</p>" if latex else ""
        )

    def _repr_latex_(self) -> str | None:
        """Return the fractions as a matrix, when they are few; else None."""
        numerators, denominators = self._as_given()
        terms = [
            max(len(numerator), len(denominator))
            for _, _, numerator, denominator in _pairs(numerators, denominators)
        ]
        if not terms or sum(terms) > _MOST_TERMS:
            return None
        variable = "s" if self._sampling_period is None else "z"
        rows = [
            " & ".join(
                rf"\frac{{{_latex(n, variable)}}}{{{_latex(d, variable)}}}"
                for n, d in zip(*row, strict=True)
            )
            for row in zip(numerators, denominators, strict=True)
        ]
        body = r" \\ ".join(rows)
        return rf"$\begin{{bmatrix}}{body}\end{{bmatrix}}$"


_MOST_TERMS = 60  # more coefficients than this are counted, not shown, in a notebook


def _latex(polynomial: Coefficients, variable: str) -> str:
    """Return a polynomial in LaTeX, coefficients as they are."""
    text = ""
    for power, entry in zip(range(len(polynomial) - 1, -1, -1), polynomial, strict=True):
        if not entry and len(polynomial) > 1:
            continue
        symbol = "" if power == 0 else variable if power == 1 else f"{variable}^{{{power}}}"
        if is_constant(entry):
            import sympy

            term = rf"\left({sympy.latex(entry)}\right) {symbol}".rstrip()
            text += f" + {term}" if text else term
            continue
        size = abs(entry)
        term = symbol if size == 1 and symbol else f"{size} {symbol}".rstrip()
        if text:
            text += f" - {term}" if entry < 0 else f" + {term}"
        else:
            text = f"-{term}" if entry < 0 else term
    return text


# Tables of polynomials


def _map(change: Callable[[Coefficients], Coefficients], table: Table) -> Table:
    """Return a change made to every polynomial of a table."""
    return tuple(tuple(map(change, row)) for row in table)


def _pairs(
    numerators: Table, denominators: Table
) -> Iterator[tuple[int, int, Coefficients, Coefficients]]:
    """(output, input, numerator, denominator) of every entry, row by row."""
    for row, (above, below) in enumerate(zip(numerators, denominators, strict=True)):
        for column, (numerator, denominator) in enumerate(zip(above, below, strict=True)):
            yield row, column, numerator, denominator


def _strip(polynomial: Coefficients) -> Coefficients:
    """Return the polynomial without leading zeros; the last coefficient always stays."""
    first = 0
    while first < len(polynomial) - 1 and not polynomial[first]:
        first += 1
    return polynomial[first:] if first else polynomial


def _is_float(entry: Entry | Constant) -> bool:
    return isinstance(entry, float)


def _is_no_float(entry: Entry | Constant) -> bool:
    return not isinstance(entry, float)


def _expressions(polynomial: Coefficients) -> Coefficients:
    return tuple(map(expression, polynomial))


def _holds(test: Callable[[Entry | Constant], bool], *tables: Table) -> bool:
    return any(
        test(entry)
        for table in tables
        for row in table
        for polynomial in row
        for entry in polynomial
    )


def _round_tables(numerators: Table, denominators: Table) -> tuple[Table, Table]:
    """Both tables in doubles, stripped again, since a tiny coefficient may round to zero."""
    above = tuple(
        tuple(
            _strip(_rounded(polynomial, f"numerator of {_entry_text(row, column)}"))
            for column, polynomial in enumerate(line)
        )
        for row, line in enumerate(numerators)
    )
    below = tuple(
        tuple(
            _rounded(polynomial, f"denominator of {_entry_text(row, column)}")
            for column, polynomial in enumerate(line)
        )
        for row, line in enumerate(denominators)
    )
    for row, column, _, denominator in _pairs(above, below):
        if not denominator[0]:
            # Dropping it would lower the degree, which is another transfer function.
            where = f"denominator of {_entry_text(row, column)}"
            raise EntryError(
                f"{where}: the leading coefficient is too small for a double; multiply "
                "numerator and denominator by a common factor",
                where=where,
            )
    return above, below


def _rounded(polynomial: Coefficients, where: str) -> Coefficients:
    return tuple(round_entry(entry, where) for entry in polynomial)


def _encoded(table: Table) -> list[list[list[float | str]]]:
    return [[list(map(encode_entry, polynomial)) for polynomial in row] for row in table]


def _entry_text(row: int, column: int) -> str:
    return f"output {row + 1}, input {column + 1}"


# From what a caller gives to two tables


def _parse(numerators: Any, denominators: Any) -> tuple[Table, Table]:
    """Return the two tables of parsed coefficients without leading zeros, of one shape."""
    above, below = _listed(numerators, "numerators"), _listed(denominators, "denominators")
    if above == [] and below == []:
        return (), ()
    if _is_flat(above):
        if not _is_flat(below):
            raise ShapeError(
                "denominators: found nested lists where numerators is flat; nest both as "
                "[output][input][coefficient], or neither",
                where="denominators",
            )
        above, below = [[above]], [[below]]
    top = _table(above, "numerators")
    if _is_flat(below) and below:
        # One denominator for all entries: parsed once, shared.
        shared = _polynomial(below, "denominators")
        return top, tuple(tuple(shared for _ in row) for row in top)
    bottom = _table(below, "denominators")
    sizes = (len(top), len(top[0])), (len(bottom), len(bottom[0]) if bottom else 0)
    if sizes[0] != sizes[1]:
        raise ShapeError(
            f"denominators: found {sizes[1][0]} by {sizes[1][1]} entries, wanted {sizes[0][0]} by "
            f"{sizes[0][1]} as in numerators; give one denominator for each entry, or one flat "
            "list for all",
            where="denominators",
            found=sizes[1],
            wanted=sizes[0],
        )
    return top, bottom


def _listed(value: Any, where: str) -> Any:
    """Arrays as nested lists, and tuples as lists, at every level; entries untouched."""
    if isinstance(value, np.ndarray):
        refuse_masked(value, where)
        # Not tolist, in which extended precision would lose its type; and a plain array, since
        # iterating over a numpy.matrix gives matrices for ever.
        value = list(np.asarray(value)) if value.ndim else value[()]
    if isinstance(value, list | tuple):
        return [_listed(item, where) for item in value]
    if not isinstance(value, str) and hasattr(value, "__iter__"):
        raise UnsupportedEntryError(
            f"{where}: found a value of type {type(value).__name__}; give lists of coefficients "
            "in descending powers",
            where=where,
            found=type(value).__name__,
        )
    return value


def _is_flat(value: Any) -> bool:
    """Whether a listed value is a list of entries; an empty list is both flat and nested."""
    if not isinstance(value, list):
        raise ShapeError(
            "numerators and denominators: found a single value; give a list of coefficients in "
            "descending powers, [1] for the constant one"
        )
    return not any(isinstance(item, list) for item in value)


def _table(value: list[Any], where: str) -> Table:
    """Return a listed value, nested to [output][input][coefficient], as a table."""
    rows = []
    for row, line in enumerate(value):
        place = f"{where}, output {row + 1}"
        if not isinstance(line, list):
            raise _wrong_depth(place)
        if len(line) != len(value[0]):
            raise ShapeError(
                f"{place}: found {len(line)} entries where output 1 has {len(value[0])}; give "
                "every output one entry for each input",
                where=place,
                found=len(line),
                wanted=len(value[0]),
            )
        for polynomial in line:
            if not isinstance(polynomial, list):
                raise _wrong_depth(place)
        rows.append(
            tuple(
                _polynomial(polynomial, f"{place}, input {column + 1}")
                for column, polynomial in enumerate(line)
            )
        )
    return tuple(rows)


def _wrong_depth(where: str) -> ShapeError:
    return ShapeError(
        f"{where}: found a coefficient where a list was wanted; nest lists as "
        "[output][input][coefficient]; two flat lists serve for one input and one output",
        where=where,
    )


def _polynomial(value: list[Any], where: str) -> Coefficients:
    if not value:
        raise ShapeError(
            f"{where}: found no coefficients; give [0] for the zero polynomial", where=where
        )
    entries: list[Entry] = []
    for index, item in enumerate(value):
        place = f"{where}, coefficient {index + 1}"
        if isinstance(item, list):
            raise ShapeError(f"{place}: found a list, wanted a number", where=place)
        entries.append(parse_entry(item, place, constants=True))
    return _strip(tuple(entries))


# Evaluation in Gaussian rationals


def _parse_point(point: Any) -> tuple[_Gaussian, bool, bool]:
    """(point, whether it is rational, whether it is complex)."""
    if isinstance(point, complex | np.complexfloating):
        number = complex(point)
        if not (math.isfinite(number.real) and math.isfinite(number.imag)):
            raise EntryError(
                f"point: {number!r} is not finite; evaluate at a finite point",
                where="point",
                found=repr(number),
            )
        return (Fraction(number.real), Fraction(number.imag)), False, True
    entry = parse_entry(point, "point")
    return (Fraction(entry), _ZERO), isinstance(entry, Fraction), False


def _horner(polynomial: Coefficients, point: _Gaussian) -> _Gaussian:
    x, y = point
    as_number = Fraction if isinstance(x, Fraction) else expression
    real, imaginary = as_number(_ZERO), as_number(_ZERO)
    if not y:
        for entry in polynomial:
            real = real * x + as_number(entry)
        return real, imaginary
    for entry in polynomial:
        real, imaginary = real * x - imaginary * y + as_number(entry), real * y + imaginary * x
    return real, imaginary


def _decided_denominator(below: _Gaussian, where: str, point: Any) -> _Gaussian:
    """Return a value of a denominator made of constants, with zeros written as zeros."""
    real, imaginary = below
    try:
        return decided(real, where), decided(imaginary, where)
    except EntryError as error:
        raise EntryError(
            f"{where}: it cannot be told whether the point {point!r} is a pole: {error.message}. "
            "Evaluate next to it, or evaluate to_float()",
            where=where,
            found=repr(point),
        ) from None


def _quotient(above: _Gaussian, below: _Gaussian) -> _Gaussian:
    (a, b), (c, d) = above, below
    if not (b or d):
        return a / c, _ZERO
    size = c * c + d * d
    return (a * c + b * d) / size, (b * c - a * d) / size
