"""State-space models: four matrices of doubles, of rationals, of irrational constants.

The matrices are kept as given and never change. A model with any float is a floating model; where
it also holds rationals or constants, these are kept beside the rounded matrices, so that a reading
touches the floats alone. Constants without any float make a parametric model.
"""

from __future__ import annotations

import html
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from fractions import Fraction
from itertools import chain
from typing import TYPE_CHECKING, Any, Self

import numpy as np
from numpy.typing import NDArray

from realize.entries import (
    Constant,
    Entry,
    Kind,
    Reading,
    fraction_array,
    is_constant,
    make_fraction,
    parse_entry,
    place_text,
    round_entry,
)
from realize.errors import NotBuiltError, ShapeError, UnsupportedEntryError
from realize.model.base import (
    Names,
    Period,
    SystemModel,
    count_text,
    default_names,
    encode_entry,
    entry_reader,
    expression,
    fit_names,
    own_names,
    parse_names,
    parse_period,
    refuse_masked,
)

if TYPE_CHECKING:
    from realize.model.connections import Connection

__all__ = ["Kind", "Matrix", "Realization"]

Matrix = NDArray[Any]
"""A matrix of doubles, or an object array of Fractions or of expressions of sympy."""

_Matrices = tuple[Matrix, Matrix, Matrix, Matrix]

_LETTERS = ("A", "B", "C", "D")
_DOUBLE = np.dtype(np.float64)
_LONGEST_TABLE = 12  # rows and columns; larger tables are named, not shown, in a notebook


class Realization(SystemModel):
    """A linear time-invariant state-space model.

    Continuous time, ``x' = A x + B u``, ``y = C x + D u``, or, with a sampling period,
    ``x[k+1] = A x[k] + B u[k]``, ``y[k] = C x[k] + D u[k]``.

    Parameters
    ----------
    A, B, C : array_like, shapes (n, n), (n, m), (p, n)
        Entries are ints, floats, Fractions, Decimals, numbers of numpy or sympy, or strings such
        as ``"1/3"``. Integers and strings are exact. Irrational constants of sympy, such as
        sqrt(2), are taken too. A flat B of length n is one column, a flat C of length n one row. A
        model with no states has ``[]`` for all three, or arrays of shapes (0, 0), (0, m), (p, 0).
    D : array_like, shape (p, m), optional
        Zeros unless given. A number serves when there is one input and one output.
    E : None, keyword-only
        Kept for generalised models, which are not built yet.
    sampling_period : number, keyword-only, optional
        None for continuous time; else a positive number.
    state_names, input_names, output_names : sequence of str, keyword-only, optional
        x1, x2, ...; u1, u2, ...; y1, y2, ... unless given.

    Raises
    ------
    ShapeError
        Ragged rows, or shapes or names that do not fit together.
    EntryError, UnsupportedEntryError, LimitError
        An entry that is not a usable number; see `realize.entries.parse_entry`.
    SamplingPeriodError
        A sampling period that is not a positive number.
    NotBuiltError
        Any E but None.

    Notes
    -----
    Immutable: arrays are copied and read-only. Two models are equal when kind, entries (floats and
    rationals apart), sampling period and names are.

    References
    ----------
    Kailath (1980), Linear Systems, section 2.1.

    Examples
    --------
    >>> model = Realization([[0, 1], ["-1/3", -2]], [0, 1], [1, 0])
    >>> model
    <Realization: 2 states, 1 input, 1 output, continuous time, rational>
    >>> model.A[1, 0]
    Fraction(-1, 3)
    >>> Realization([[0.0, 1.0], [-0.1, -2.0]], [0.0, 1.0], [1.0, 0.0]).read("written").A[1, 0]
    Fraction(-1, 10)
    """

    __slots__ = ("_A", "_B", "_C", "_D", "_connection", "_given", "_state_names")

    _KEY = "realization"
    _A: Matrix
    _B: Matrix
    _C: Matrix
    _D: Matrix
    # The blocks of a connected model, which are what is read; no part of the model's identity.
    _connection: Connection | None
    # The entries before rounding, floats and Fractions together; None unless both occur.
    _given: _Matrices | None
    _state_names: Names | None

    def __init__(
        self,
        A: Any,
        B: Any,
        C: Any,
        D: Any = None,
        *,
        E: None = None,
        sampling_period: Any = None,
        state_names: Sequence[str] | None = None,
        input_names: Sequence[str] | None = None,
        output_names: Sequence[str] | None = None,
    ) -> None:
        if E is not None:
            raise NotBuiltError(
                "E: generalised models E x' = A x + B u are not built yet; leave E out, and "
                "multiply A and B by its inverse first if it has one",
                feature="E",
            )
        matrices, kind, given = _assemble(A, B, C, D)
        self._A, self._B, self._C, self._D = matrices
        self._kind = kind
        self._given = given
        self._connection = None
        self._digest = None
        self._sampling_period = None if sampling_period is None else parse_period(sampling_period)
        outputs, inputs = matrices[3].shape
        self._state_names = fit_names(
            parse_names(state_names, "state_names"), "x", len(matrices[0]), "state_names"
        )
        self._input_names = fit_names(
            parse_names(input_names, "input_names"), "u", inputs, "input_names"
        )
        self._output_names = fit_names(
            parse_names(output_names, "output_names"), "y", outputs, "output_names"
        )

    @classmethod
    def _trusted(
        cls,
        A: Matrix,
        B: Matrix,
        C: Matrix,
        D: Matrix,
        *,
        kind: Kind,
        sampling_period: Period = None,
        state_names: Names | None = None,
        input_names: Names | None = None,
        output_names: Names | None = None,
        connection: Connection | None = None,
    ) -> Self:
        """Return a model of arrays that fit, without checks or copies; they become read-only."""
        self = cls.__new__(cls)
        A.flags.writeable = False
        B.flags.writeable = False
        C.flags.writeable = False
        D.flags.writeable = False
        self._A = A
        self._B = B
        self._C = C
        self._D = D
        self._kind = kind
        self._given = None
        self._connection = connection
        self._digest = None
        self._sampling_period = sampling_period
        self._state_names = state_names
        self._input_names = input_names
        self._output_names = output_names
        return self

    # Numbers

    @property
    def A(self) -> Matrix:  # mathematics keeps its letters
        """State matrix, shape (n, n)."""
        return self._A

    @property
    def B(self) -> Matrix:  # mathematics keeps its letters
        """Input matrix, shape (n, m)."""
        return self._B

    @property
    def C(self) -> Matrix:  # mathematics keeps its letters
        """Output matrix, shape (p, n)."""
        return self._C

    @property
    def D(self) -> Matrix:  # mathematics keeps its letters
        """Direct feedthrough, shape (p, m)."""
        return self._D

    @property
    def E(self) -> None:  # mathematics keeps its letters
        """None: the model is not generalised."""
        return None

    def matrices(self) -> _Matrices:
        """Return the four matrices A, B, C, D."""
        return self._A, self._B, self._C, self._D

    @property
    def order(self) -> int:
        """The number of states, n."""
        return len(self._A)

    @property
    def input_count(self) -> int:
        """The number of inputs, m."""
        return int(self._D.shape[1])

    @property
    def output_count(self) -> int:
        """The number of outputs, p."""
        return int(self._D.shape[0])

    @property
    def state_names(self) -> Names:
        """The names of the states, x1, x2, ... unless given."""
        if self._state_names is None:
            return default_names("x", self.order)
        return self._state_names

    # Other models

    def read(self, reading: str) -> Realization:
        """Return the rational model that this one stands for.

        Parameters
        ----------
        reading : {"stored", "written", "intended", "given"}
            See `realize.entries.Reading`. Only floats are read, a float sampling period included;
            rational entries stay.

        Returns
        -------
        Realization
            A rational model; this one, when nothing is to be read.

        Notes
        -----
        A connected model (see `realize.assemble`) is read block by block, each block and gain as
        it was given, and then connected exactly; its own doubles are what rounding made of that.
        So are its copies, its pickles, its dual and what `to_float` makes of it. A model file
        holds the entries alone.

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
        connection = None if self._connection is None else self._connection.read(word)
        if self._kind is Kind.RATIONAL:
            if period is self._sampling_period:
                return self
            return self._like(self.matrices(), Kind.RATIONAL, period, connection)
        return self._joined_or_read(word, Kind.RATIONAL, period, connection)._read_from(word, self)

    def _joined_or_read(
        self, word: Reading, kind: Kind, period: Period, connection: Connection | None
    ) -> Realization:
        """Return the model of a connection whose floats are read, or of own entries read here."""
        if connection is not None:
            matrices = connection.join().matrices
        else:
            reader = entry_reader(word)
            matrices = _each(
                lambda matrix, _: fraction_array(
                    map(reader, matrix.ravel().tolist()), matrix.shape
                ),
                self._as_given(),
            )
            if kind is Kind.PARAMETRIC:
                matrices = _each(_expressions, matrices)
        return self._like(matrices, kind, period, connection)

    def _with_floats_read(self, word: Reading) -> Realization:
        """Return the model with its floats read and its irrational constants kept.

        Like `read`, and for models that hold constants a parametric model.
        """
        if not self._holds_constants():
            return self.read(word)
        if self._kind is Kind.PARAMETRIC:
            return self
        connection = None if self._connection is None else self._connection.read(word)
        return self._joined_or_read(word, Kind.PARAMETRIC, self._period_read(word), connection)

    def to_float(self) -> Realization:
        """Return the model in doubles, each entry correctly rounded.

        The sampling period is kept as given.

        Raises
        ------
        EntryError
            When an entry is too large for a double.
        """
        if self._kind is Kind.FLOATING and self._given is None:
            return self
        matrices = self.matrices()
        if self._kind is not Kind.FLOATING:
            matrices = _each(_rounded, matrices)
        connection = None if self._connection is None else self._connection.to_float()
        return self._like(matrices, Kind.FLOATING, self._sampling_period, connection)

    def dual(self) -> Realization:
        """Return the dual model (A', C', B', D'): inputs and outputs change places."""
        dual = Realization._trusted(
            self._A.T,
            self._C.T,
            self._B.T,
            self._D.T,
            kind=self._kind,
            sampling_period=self._sampling_period,
            state_names=self._state_names,
            input_names=own_names(self._output_names, "y"),
            output_names=own_names(self._input_names, "u"),
            connection=None if self._connection is None else self._connection.dual(),
        )
        if self._given is not None:
            A, B, C, D = self._given
            dual._given = (A.T, C.T, B.T, D.T)
        return dual

    def at(self, values: Mapping[Any, Any]) -> Realization:
        """Return the model with numbers put in for symbols; models with symbols are not built yet.

        Raises
        ------
        NotBuiltError
            Always.
        """
        raise NotBuiltError(
            f"at({values!r}): models with symbols are not built yet, and this one is "
            f"{self._kind}; put the numbers in before making the model",
            feature="symbols",
        )

    def _like(
        self,
        matrices: _Matrices,
        kind: Kind,
        period: Period,
        connection: Connection | None = None,
    ) -> Realization:
        """Return a model of other matrices of the same shapes, with the names of this one."""
        return Realization._trusted(
            *matrices,
            kind=kind,
            sampling_period=period,
            state_names=self._state_names,
            input_names=self._input_names,
            output_names=self._output_names,
            connection=connection,
        )

    # Identity

    def _names(self) -> dict[str, Names | None]:
        return {"state_names": own_names(self._state_names, "x"), **super()._names()}

    def _key(self) -> tuple[Any, ...]:
        entries = tuple(chain.from_iterable(matrix.flat for matrix in self._as_given()))
        exact: tuple[int, ...] = ()
        if self._given is not None:
            # 1.0 and 1 compare equal but are read differently.
            exact = tuple(i for i, entry in enumerate(entries) if isinstance(entry, Fraction))
        return self._A.shape, self._D.shape, entries, exact

    def _as_given(self) -> _Matrices:
        """Return the four matrices with each entry as it was given."""
        return self._given or self.matrices()

    def _placed(self) -> Iterator[tuple[str, Entry | Constant]]:
        if self._kind is Kind.FLOATING and self._given is None:
            return
        for letter, matrix in zip(_LETTERS, self._as_given(), strict=True):
            for (i, j), entry in np.ndenumerate(matrix):
                yield place_text((letter, i, j)), entry

    def _readable(self) -> Iterator[tuple[str, Entry | Constant]]:
        return self._placed() if self._connection is None else self._connection.placed()

    def _floats(self) -> Iterator[float]:
        """Yield the floats that a reading reads: of a connected model those of its blocks."""
        if self._connection is not None:
            yield from self._connection.floats()
        elif self._kind is Kind.FLOATING:
            for matrix in self._as_given():
                yield from (x for x in matrix.ravel().tolist() if isinstance(x, float))

    def _body(self) -> dict[str, Any]:
        return {
            letter: [[encode_entry(entry) for entry in row] for row in matrix.tolist()]
            for letter, matrix in zip(_LETTERS, self._as_given(), strict=True)
        }

    def _extras(self) -> dict[str, Any]:
        if all(matrix.size for matrix in self.matrices()):
            return {}
        extras: dict[str, Any] = {
            "states": self.order,
            "inputs": self.input_count,
            "outputs": self.output_count,
        }
        if self._kind is Kind.FLOATING and not any(matrix.size for matrix in self.matrices()):
            extras["kind"] = str(self._kind)
        return extras

    def _state(self) -> tuple[Any, ...]:
        return (
            self.matrices(),
            self._given,
            self._kind,
            self._sampling_period,
            (self._state_names, self._input_names, self._output_names),
            self._connection,
        )

    @classmethod
    def _restore(cls, *state: Any) -> Self:
        matrices, given, kind, period, names, connection = state
        self = cls._trusted(
            *matrices,
            kind=kind,
            sampling_period=period,
            state_names=names[0],
            input_names=names[1],
            output_names=names[2],
            connection=connection,
        )
        self._given = given
        return self

    # Looks

    def _summary(self) -> str:
        return (
            f"{count_text(self.order, 'state')}, {count_text(self.input_count, 'input')}, "
            f"{count_text(self.output_count, 'output')}, {self._time_text()}, {self._kind}"
        )

    def __repr__(self) -> str:
        return f"<Realization: {self._summary()}>"

    def _repr_html_(self) -> str:
        """Return the sizes, and the matrices when they are small, as a notebook shows them."""
        parts = [f"<p>Realization: {html.escape(self._summary())}</p>"]
        if max(*self._A.shape, *self._D.shape) <= _LONGEST_TABLE:
            for letter, matrix in zip(_LETTERS, self._as_given(), strict=True):
                rows = "".join(
                    "<tr>" + "".join(f"<td>{html.escape(str(x))}</td>" for x in row) + "</tr>"
                    for row in matrix.tolist()
                )
                parts.append(f"<p>{letter}</p><table>{rows}</table>")
        return "".join(parts)

    def _repr_latex_(self) -> str | None:
        """Return the matrices as one block, when they are small; else None."""
        if max(*self._A.shape, *self._D.shape) > _LONGEST_TABLE:
            return None
        A, B, C, D = (matrix.tolist() for matrix in self._as_given())
        rows = [a + b for a, b in zip(A, B, strict=True)]
        rows += [c + d for c, d in zip(C, D, strict=True)]
        lines = [" & ".join(map(_latex_entry, row)) for row in rows]
        if self.order and self.output_count:
            lines[self.order] = r"\hline " + lines[self.order]
        columns = "r" * self.order + "|" + "r" * self.input_count
        body = r" \\ ".join(lines)
        return rf"$\left[\begin{{array}}{{{columns}}}{body}\end{{array}}\right]$"


def _latex_entry(entry: Entry | Constant) -> str:
    if not isinstance(entry, float | Fraction):
        import sympy

        return str(sympy.latex(entry))
    if isinstance(entry, float) or entry.denominator == 1:
        return str(entry)
    sign = "-" if entry < 0 else ""
    return rf"{sign}\frac{{{abs(entry.numerator)}}}{{{entry.denominator}}}"


def _each(change: Callable[[Matrix, str], Matrix], matrices: Sequence[Matrix]) -> _Matrices:
    """Return a change made to each of the four matrices, which is told its letter."""
    A, B, C, D = map(change, matrices, _LETTERS)
    return A, B, C, D


def _rounded(matrix: Matrix, letter: str) -> Matrix:
    """Return an object array of entries of any kind in doubles."""
    columns = matrix.shape[1]
    return np.fromiter(
        (
            round_entry(entry, (letter, *divmod(index, columns)))
            for index, entry in enumerate(matrix.flat)
        ),
        dtype=_DOUBLE,
        count=matrix.size,
    ).reshape(matrix.shape)


# From what a caller gives to four matrices that fit


def _assemble(A: Any, B: Any, C: Any, D: Any) -> tuple[_Matrices, Kind, _Matrices | None]:
    """(matrices, kind, given): read, shaped and made read-only."""
    tables = [_table(A, "A"), _table(B, "B"), _table(C, "C")]
    if D is not None:
        tables.append(_table(D, "D"))
    tables, shape = _fit(tables)
    # Empty matrices have a say in the kind only when there is nothing else.
    telling = [table for table in tables if table.size] or tables
    if all(table.dtype is _DOUBLE for table in telling):
        kind, mixed = Kind.FLOATING, False
        tables = [table if table.dtype is _DOUBLE else table.astype(_DOUBLE) for table in tables]
    elif any(table.dtype is _DOUBLE or _has_float(table) for table in telling):
        kind, mixed = Kind.FLOATING, True
    else:
        constants = any(is_constant(entry) for table in telling for entry in table.flat)
        kind, mixed = (Kind.PARAMETRIC if constants else Kind.RATIONAL), False
        tables = [table.astype(object) if table.dtype is _DOUBLE else table for table in tables]
    if D is None:
        tables.append(_zeros(shape, kind))
    given: _Matrices | None = None
    a, b, c, d = tables
    if kind is Kind.PARAMETRIC:
        a, b, c, d = _each(_expressions, (a, b, c, d))
    if mixed:
        given = _each(lambda matrix, _: matrix.astype(object), (a, b, c, d))
        a, b, c, d = _each(_rounded, given)
    for matrix in (a, b, c, d, *(given or ())):
        matrix.flags.writeable = False
    return (a, b, c, d), kind, given


def _expressions(matrix: Matrix, _: str) -> Matrix:
    """Return an object array of Fractions and constants as expressions of sympy."""
    return np.fromiter(map(expression, matrix.flat), object, matrix.size).reshape(matrix.shape)


def _zeros(shape: tuple[int, int], kind: Kind) -> Matrix:
    if kind is Kind.FLOATING:
        return np.zeros(shape)
    return np.full(shape, make_fraction(0, 1), dtype=object)


def _has_float(matrix: Matrix) -> bool:
    return any(isinstance(entry, float) for entry in matrix.flat)


def _table(value: Any, letter: str) -> Matrix:
    """Return a fresh array of at most two dimensions: doubles, or an object array of entries.

    The shape is that of the value; what a flat row or a single number means is for `_fit`.
    """
    if type(value) is np.ndarray and value.dtype is _DOUBLE:
        array = np.array(value, order="C")
    elif isinstance(value, list | tuple):
        return _table_of_rows(value, letter)
    elif isinstance(value, str):
        return _entries([value], (), letter)
    elif hasattr(value, "__array__"):
        return _table_of_array(value, letter)
    elif isinstance(value, Iterable):
        raise UnsupportedEntryError(
            f"{letter}: found a value of type {type(value).__name__}; give a dense array or a "
            "list of rows",
            where=letter,
            found=type(value).__name__,
        )
    else:
        return _entries([value], (), letter)
    _check_table(array, letter)
    return array


def _check_table(array: Matrix, letter: str) -> None:
    """Refuse doubles that are not finite, and more than two dimensions."""
    if array.ndim > 2:
        raise ShapeError(
            f"{letter}: found an array of shape {array.shape}, wanted two dimensions",
            where=letter,
            found=array.shape,
        )
    # On small matrices a search for a zero byte is three times faster than a reduction.
    finite = np.isfinite(array)
    if 0 in finite.tobytes():
        index = int(np.flatnonzero(~finite)[0])
        parse_entry(float(array.flat[index]), _place(letter, index, array.shape))


def _place(letter: str, index: int, shape: tuple[int, ...]) -> tuple[str, int, int]:
    if len(shape) == 2:
        return (letter, *divmod(index, shape[1]))
    # A flat B is a column, everything else that is flat a row.
    return (letter, index, 0) if letter == "B" else (letter, 0, index)


def _entries(values: Sequence[Any], shape: tuple[int, ...], letter: str) -> Matrix:
    """Values parsed one by one; doubles when all of them are floats."""
    entries = [
        parse_entry(value, _place(letter, index, shape), constants=True)
        for index, value in enumerate(values)
    ]
    if entries and all(isinstance(entry, float) for entry in entries):
        return np.array(entries, dtype=_DOUBLE).reshape(shape)
    array = np.empty(len(entries), dtype=object)
    array[:] = entries
    return array.reshape(shape)


def _table_of_array(value: Any, letter: str) -> Matrix:
    """Arrays of every type but plain doubles, and whatever turns itself into an array."""
    refuse_masked(value, letter)
    array = np.asarray(value)
    if array.dtype.kind == "f" and array.dtype.itemsize <= 8:
        array = np.array(array, dtype=_DOUBLE, order="C")
        _check_table(array, letter)
        return array
    if array.ndim > 2:
        _check_table(array, letter)
    if array.dtype.kind in "iu":
        numbers = (make_fraction(number, 1) for number in array.ravel().tolist())
        return fraction_array(numbers, array.shape)
    # Iterated, not listed: tolist would turn extended precision into something else on some
    # machines before parse_entry has refused it.
    return _entries(list(array.flat), array.shape, letter)


def _table_of_rows(value: Sequence[Any], letter: str) -> Matrix:
    """Return a list of numbers, or a list of rows."""
    rows = [_row(item) for item in value]
    lists = [row for row in rows if row is not None]
    shape: tuple[int, ...] = (len(rows),)
    if not lists:
        flat = list(value)
    else:
        width = len(lists[0])
        for index, row in enumerate(rows):
            if row is None:
                raise ShapeError(
                    f"{letter}, row {index + 1}: found a single value among rows; give every "
                    "row as a list",
                    where=f"{letter}, row {index + 1}",
                )
            if len(row) != width:
                raise ShapeError(
                    f"{letter}, row {index + 1}: found {len(row)} entries where row 1 has "
                    f"{width}; make all rows equally long",
                    where=f"{letter}, row {index + 1}",
                    found=len(row),
                    wanted=width,
                )
        flat, shape = list(chain.from_iterable(lists)), (len(rows), width)
    if set(map(type, flat)) == {float}:
        array = np.array(flat, dtype=_DOUBLE).reshape(shape)
        _check_table(array, letter)
        return array
    for index, item in enumerate(flat):
        if _row(item) is not None:
            place = f"{letter}, row {_place(letter, index, shape)[1] + 1}"
            raise ShapeError(
                f"{place}: found a list inside the row; wanted two dimensions", where=place
            )
    return _entries(flat, shape, letter)


def _row(item: Any) -> Sequence[Any] | None:
    """Return an item of a list as a row of entries, None if it is an entry."""
    if isinstance(item, list | tuple):
        return item
    if isinstance(item, np.ndarray) and item.ndim:
        return list(item)
    return None


def _fit(tables: list[Matrix]) -> tuple[list[Matrix], tuple[int, int]]:
    """Return the tables A, B, C and, if given, D in two dimensions, and the shape that D has."""
    a, b, c, *rest = tables
    order = _order(a.shape)
    inputs, outputs = _width(b.shape, order), _height(c.shape, order)
    if rest:
        outputs, inputs = _feedthrough(rest[0].shape, outputs, inputs)
    else:
        outputs, inputs = outputs or 0, inputs or 0
    shapes = ((order, order), (order, inputs), (outputs, order), (outputs, inputs))
    fitted = [
        table if table.shape == shape else table.reshape(shape)
        for table, shape in zip(tables, shapes, strict=False)
    ]
    return fitted, (outputs, inputs)


def _order(shape: tuple[int, ...]) -> int:
    """Return the number of states that A tells."""
    if len(shape) == 2 and shape[0] == shape[1]:
        return shape[0]
    if shape in {(), (1,)}:
        return 1
    if shape in {(0,), (1, 0)}:
        return 0
    raise _misfit("A", shape, "a square matrix")


def _width(shape: tuple[int, ...], order: int) -> int | None:
    """Return the number of inputs that B tells; None when an empty B leaves it to D."""
    if order == 0 and shape in {(0,), (1, 0)}:
        return None
    if len(shape) == 2 and shape[0] == order:
        return shape[1]
    if order and (shape == (order,) or (order == 1 and shape == ())):
        return 1
    raise _misfit("B", shape, f"{count_text(order, 'row')}, one for each state")


def _height(shape: tuple[int, ...], order: int) -> int | None:
    """Return the number of outputs that C tells; None when an empty C leaves it to D."""
    if order == 0 and shape == (0,):
        return None
    if len(shape) == 2 and shape[1] == order:
        return shape[0]
    if order and (shape == (order,) or (order == 1 and shape == ())):
        return 1
    raise _misfit("C", shape, f"{count_text(order, 'column')}, one for each state")


def _feedthrough(
    shape: tuple[int, ...], outputs: int | None, inputs: int | None
) -> tuple[int, int]:
    """Return the shape of D, which must be the one that B and C tell, as far as they do."""
    if len(shape) == 2:
        found = (shape[0], shape[1])
    elif shape in {(), (1,)}:
        found = (1, 1)
    elif shape == (0,):
        found = outputs or 0, inputs or 0
        if found[0] * found[1]:
            found = 0, 0
    elif outputs == 1:
        found = 1, shape[0]
    elif inputs == 1:
        found = shape[0], 1
    else:
        raise _misfit("D", shape, "a list of rows, one for each output")
    if found != (found[0] if outputs is None else outputs, found[1] if inputs is None else inputs):
        rows = "any number of" if outputs is None else str(outputs)
        columns = "any number of" if inputs is None else str(inputs)
        raise _misfit("D", shape, f"{rows} rows (outputs) and {columns} columns (inputs)")
    return found


def _misfit(letter: str, shape: tuple[int, ...], wanted: str) -> ShapeError:
    if len(shape) == 2:
        found = f"{count_text(shape[0], 'row')} and {count_text(shape[1], 'column')}"
    elif shape:
        found = f"a flat list of {count_text(shape[0], 'entry').replace('entrys', 'entries')}"
    else:
        found = "a single number"
    return ShapeError(f"{letter}: found {found}, wanted {wanted}", where=letter, found=shape)
