"""Models made of models: series, parallel, side by side, a loop, any wiring of named blocks.

A connected model remembers its blocks. Its matrices hold what the blocks' entries multiply out to,
in doubles if any entry is one, and as expressions if there are irrational constants and no doubles.
`Realization.read` goes back to the blocks, reads each of them as it was given, and connects
exactly. Two models with equal entries are equal, whatever they remember.

One text serves all five functions. The inputs v of all blocks, their outputs w, the external
inputs u and outputs y satisfy ``v = K w + L u`` and ``y = M w + N u`` with the gains of the wires,
and ``w = C x + D v`` with the blocks side by side. Solving ``(I - K D) v = K C x + L u`` for v is
all there is to do. Where the direct gains K D run in no circle this is substitution; where they
do, each circle is an algebraic loop, solved for itself.

References
----------
Kailath (1980), Linear Systems, section 2.4, for series, parallel and feedback connections.
Higham (2002), Accuracy and Stability of Numerical Algorithms, section 7.2, for the condition
number that is behind `AlgebraicLoop.margin`.
"""

from __future__ import annotations

import math
import sys
import warnings
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from enum import StrEnum
from fractions import Fraction
from typing import TYPE_CHECKING, Any, Final, NoReturn

import numpy as np

from realize.entries import (
    Constant,
    Entry,
    Kind,
    Reading,
    constant_near,
    decided,
    fraction_array,
    is_constant,
    known_word,
    make_fraction,
    parse_entry,
    place_text,
    round_entry,
)
from realize.errors import (
    AlgebraicLoopError,
    AlgebraicLoopWarning,
    EntryError,
    LimitError,
    SamplingPeriodError,
    ShapeError,
    UnknownWordError,
    UnsupportedEntryError,
)
from realize.model.base import (
    Names,
    Period,
    count_text,
    entry_reader,
    expression,
    own_names,
    parse_names,
)
from realize.model.realization import Matrix, Realization
from realize.tolerance import LOOP_MARGIN, UNIT_ROUNDOFF

if TYPE_CHECKING:
    from flint import fmpq_mat

__all__ = [
    "AlgebraicLoop",
    "Connection",
    "Feedback",
    "assemble",
    "block_diagonal",
    "cascade",
    "listed",
    "loop",
    "sum_of",
]

LARGEST_LOOP: Final = 6
"""Most signals in an algebraic loop whose gains are expressions, which grow as it is solved."""

Link = tuple[int, int, Entry | Constant]
"""A gain from a column (where a signal comes from) to a row (where it goes)."""

_Matrices = tuple[Matrix, Matrix, Matrix, Matrix]
_ONE = Fraction(1)
_LARGEST = Fraction(sys.float_info.max)
_SHOWN = 8  # names listed in a message
_GAIN = "gain of a wire"
_OUTSIDE = {"output": "input", "input": "output"}  # what serves a wire beside a block's port


class Feedback(StrEnum):
    """How the output of the plant meets the reference: subtracted or added."""

    NEGATIVE = "negative"
    POSITIVE = "positive"


# ---------------------------------------------------------------------------------------------
# What a connected model remembers
# ---------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, kw_only=True)
class AlgebraicLoop:
    """Direct feedthroughs that run in a circle.

    Attributes
    ----------
    ports : tuple of str
        The ports around the loop, "block.port"; in the order of the signal if it is one circle.
    margin : float
        Changes of the direct gains from input to input around the loop that are all smaller than
        this, relative to each gain, cannot make it ill-posed. For a single circle the margin is,
        to first order, also the change that does. It does not depend on the units of the signals.
        Infinity when the gains are too large for doubles, and nothing is measured.
    """

    ports: tuple[str, ...]
    margin: float


@dataclass(frozen=True, slots=True, kw_only=True)
class Joined:
    """A connection multiplied out: the matrices A, B, C, D, and the algebraic loops solved."""

    matrices: _Matrices
    loops: tuple[AlgebraicLoop, ...]


@dataclass(frozen=True, slots=True, kw_only=True, eq=False)
class Connection:
    """Blocks and the gains between them, as they were given.

    Attributes
    ----------
    names : tuple of str
        One for each block; none holds a dot.
    blocks : tuple of Realization
    input_count, output_count : int
        External inputs and outputs.
    inner, entering, leaving, through : tuple of (int, int, entry)
        The gains K, L, M, N: from the outputs of blocks to the inputs of blocks; from external
        inputs to inputs of blocks; from outputs of blocks to external outputs; from external
        inputs to external outputs. Rows and columns count ports block after block. Gains with
        one place add up.
    """

    names: Names
    blocks: tuple[Realization, ...]
    input_count: int
    output_count: int
    inner: tuple[Link, ...] = ()
    entering: tuple[Link, ...] = ()
    leaving: tuple[Link, ...] = ()
    through: tuple[Link, ...] = ()

    @property
    def kind(self) -> Kind:
        """Floating when a block or a gain is; else parametric when one is; else rational."""
        kinds = {block.kind for block in self.blocks}
        for _, _, gain in self._links():
            if isinstance(gain, float):
                kinds.add(Kind.FLOATING)
            elif is_constant(gain):
                kinds.add(Kind.PARAMETRIC)
        return next(
            (kind for kind in (Kind.FLOATING, Kind.PARAMETRIC) if kind in kinds), Kind.RATIONAL
        )

    def _links(self) -> tuple[Link, ...]:
        return (*self.inner, *self.entering, *self.leaving, *self.through)

    def placed(self) -> Iterator[tuple[str, Entry | Constant]]:
        """Yield what a reading reads, with places; nothing of blocks that are all doubles."""
        for name, block in zip(self.names, self.blocks, strict=True):
            for where, entry in block._readable():
                yield f"block {name}: {where}", entry
        for _, _, gain in self._links():
            yield _GAIN, gain

    def floats(self) -> Iterator[float]:
        """Yield the floats of all blocks and gains."""
        for block in self.blocks:
            yield from block._floats()
        for _, _, gain in self._links():
            if isinstance(gain, float):
                yield gain

    def read(self, reading: Reading) -> Connection:
        """Return the connection with every float of it read, and its constants kept."""
        blocks = [block._with_floats_read(reading) for block in self.blocks]
        return self._with(blocks, entry_reader(reading))

    def to_float(self) -> Connection:
        """Return the connection with blocks and gains in doubles."""
        return self._with(map(_in_doubles, self.names, self.blocks), _rounded_gain)

    def dual(self) -> Connection:
        """Return the connection of the dual blocks by the transposed wiring."""
        return replace(
            self,
            blocks=tuple(block.dual() for block in self.blocks),
            input_count=self.output_count,
            output_count=self.input_count,
            inner=_transposed(self.inner),
            entering=_transposed(self.leaving),
            leaving=_transposed(self.entering),
            through=_transposed(self.through),
        )

    def _with(
        self,
        blocks: Iterable[Realization],
        gain: Callable[[Entry | Constant], Entry | Constant],
    ) -> Connection:
        def links(given: tuple[Link, ...]) -> tuple[Link, ...]:
            return tuple((row, column, gain(entry)) for row, column, entry in given)

        return replace(
            self,
            blocks=tuple(blocks),
            inner=links(self.inner),
            entering=links(self.entering),
            leaving=links(self.leaving),
            through=links(self.through),
        )

    def work(self) -> tuple[int, int]:
        """Return how many products of numbers joining takes, and the size of the largest loop.

        Counted on the patterns of zeros, without the blocks' own connections.
        """
        given = [[(M != 0).astype(float) for M in block.matrices()] for block in self.blocks]
        _, B, C, D = (_beside([each[letter] for each in given], 0.0) for letter in range(4))
        inputs, outputs = B.shape[1], len(C)
        K = _pattern(self.inner, (inputs, outputs))
        L = _pattern(self.entering, (inputs, self.input_count))
        M = _pattern(self.leaving, (self.output_count, outputs))
        direct = K @ D > 0.0
        reach = _closure(direct)
        circles = (reach & reach.T) & (direct.any(axis=1) & direct.any(axis=0))
        largest = int(circles.sum(axis=0).max(initial=0))
        driven = reach.astype(float) @ np.concatenate([K @ C, L], axis=1) > 0.0
        # To the inputs of blocks; from there to the states, and to the outputs; and the loops.
        products = K.sum(axis=0) @ (C.sum(axis=1) + D.sum(axis=1))
        products += (B.sum(axis=0) + D.sum(axis=0)) @ driven.sum(axis=1)
        products += M.sum() * driven.shape[1] + largest**2 * driven.shape[1]
        return int(products), largest

    def join(self) -> Joined:
        """Return the connection multiplied out, in doubles if it holds any, else exactly.

        Irrational constants are multiplied out as expressions. Nothing is simplified; a number
        made so must be known to be zero or not, by its decimals or by being expanded.

        Raises
        ------
        AlgebraicLoopError
            When an algebraic loop has no solution, or more than one.
        EntryError
            When a number is too large for a double; when one made of constants cannot be told
            from zero.
        LimitError
            When an algebraic loop of more than `LARGEST_LOOP` signals holds constants.
        """
        zero: Entry | Constant = make_fraction(0, 1)
        blocks, kind = self.blocks, self.kind
        if kind is Kind.FLOATING:
            zero, blocks = 0.0, tuple(map(_in_doubles, self.names, self.blocks))
        given: list[Sequence[Matrix]] = [block.matrices() for block in blocks]
        if kind is Kind.PARAMETRIC:
            zero = expression(zero)
            given = [[_expressions(matrix) for matrix in matrices] for matrices in given]
        A, B, C, D = (_beside([each[letter] for each in given], zero) for letter in range(4))
        order, inputs, outputs = len(A), B.shape[1], len(C)
        K = _gains(self.inner, (inputs, outputs), zero)
        L = _gains(self.entering, (inputs, self.input_count), zero)
        M = _gains(self.leaving, (self.output_count, outputs), zero)
        N = _gains(self.through, (self.output_count, self.input_count), zero)
        # What overflows is found at the end, with its place.
        with np.errstate(over="ignore", invalid="ignore", divide="ignore"):
            driven, loops = self._solve(K, D, np.concatenate([_times(K, C), L], axis=1))
            from_states, from_inputs = driven[:, :order], driven[:, order:]
            matrices = (
                _plus(A, _times(B, from_states)),
                _times(B, from_inputs),
                _times(M, _plus(C, _times(D, from_states))),
                _plus(N, _times(M, _times(D, from_inputs))),
            )
        for letter, matrix in zip("ABCD", matrices, strict=True):
            if kind is Kind.PARAMETRIC:
                # Two wires, or two blocks, may add up to a zero that is not written as one.
                _decide(matrix, letter)
            _check_finite(matrix, letter)
        return Joined(matrices=matrices, loops=loops)

    def _solve(
        self, K: Matrix, D: Matrix, right: Matrix
    ) -> tuple[Matrix, tuple[AlgebraicLoop, ...]]:
        """Return V with (I - K D) V = right, and the loops that had to be solved for it."""
        direct, exact = _times(K, D), self.kind is not Kind.FLOATING
        if self.kind is Kind.PARAMETRIC:
            _decide(direct, "gains from input to input")
        solution, loops = right.copy(), []
        for here in _components(direct != 0):
            around, others = direct[np.ix_(here, here)], direct[here]
            others[:, here] = 0
            solution[here] += _times(others, solution)
            if not (around != 0).any():
                continue
            ports = self._around(here, around != 0, K, D)
            if self.kind is Kind.PARAMETRIC:
                inverse = _expressions_inverse_beside_one(around, ports)
            else:
                inverse = _inverse_beside_one(around)
            margin = 0.0 if inverse is None else _margin(inverse, around)
            found = AlgebraicLoop(ports=ports, margin=margin)
            if inverse is None or (not exact and margin < UNIT_ROUNDOFF):
                raise _ill_posed(ports, exact)
            solution[here] = _times(inverse, solution[here])
            loops.append(found)
        return solution, tuple(loops)

    def _around(self, here: Matrix, follows: Matrix, K: Matrix, D: Matrix) -> tuple[str, ...]:
        """Name the ports of a loop, in the order of the signal where it is a single circle."""
        ins = self._ports(lambda block: block.input_names)
        outs = self._ports(lambda block: block.output_names)
        if (follows.sum(axis=0) > 1).any():
            on = (D[:, here] != 0).any(axis=1) & (K[here] != 0).any(axis=0)
            return tuple([ins[i] for i in here] + [outs[j] for j in np.flatnonzero(on)])
        named: list[str] = []
        at = 0
        for _ in here:
            to = int(np.flatnonzero(follows[:, at])[0])
            on = (D[:, here[at]] != 0) & (K[here[to]] != 0)
            named += [ins[here[at]], *(outs[j] for j in np.flatnonzero(on))]
            at = to
        return tuple(named)

    def _ports(self, of: Callable[[Realization], Names]) -> list[str]:
        return [
            f"{name}.{port}"
            for name, block in zip(self.names, self.blocks, strict=True)
            for port in of(block)
        ]

    def state_names(self) -> Names:
        """Return "block.state" for all states; different, since no block's name holds a dot."""
        return tuple(self._ports(lambda block: block.state_names))

    def sampling_period(self) -> Period:
        """Return the sampling period of all blocks.

        Raises
        ------
        SamplingPeriodError
            When two blocks have different ones.
        """
        periods = [block.sampling_period for block in self.blocks]
        for name, period in zip(self.names, periods, strict=True):
            if period != periods[0]:
                first, other = _period_text(periods[0]), _period_text(period)
                raise SamplingPeriodError(
                    f"{self.names[0]} has {first}, {name} has {other}; blocks that are connected "
                    "need equal sampling periods, static gains included. Give the models one",
                    found=f"{first}, {other}",
                )
        # Of 0.5 and "1/2" the exact one says what both mean, under every reading.
        exact = [period for period in periods if isinstance(period, Fraction)]
        return next(iter(exact or periods), None)


def _period_text(period: Period) -> str:
    return "continuous time" if period is None else f"the sampling period {period}"


def _transposed(links: tuple[Link, ...]) -> tuple[Link, ...]:
    return tuple((column, row, gain) for row, column, gain in links)


def _ill_posed(ports: tuple[str, ...], exact: bool) -> AlgebraicLoopError:
    within = "" if exact else "within the rounding of doubles "
    return AlgebraicLoopError(
        f"the direct feedthroughs around {listed(ports)} form an algebraic loop that is "
        f"ill-posed: {within}its equations have no unique solution. Change a gain, or give a block "
        "around the loop no direct feedthrough",
        ports=ports,
    )


def listed(names: Sequence[str]) -> str:
    """Return names for a message, the first of them when there are many."""
    shown = ", ".join(names[:_SHOWN])
    return shown if len(names) <= _SHOWN else f"{shown} and {len(names) - _SHOWN} more"


# ---------------------------------------------------------------------------------------------
# Arithmetic on arrays of doubles, of Fractions, or of expressions
# ---------------------------------------------------------------------------------------------


def _full(shape: tuple[int, int], zero: Entry | Constant) -> Matrix:
    return np.full(shape, zero, dtype=float if isinstance(zero, float) else object)


def _beside(parts: Sequence[Matrix], zero: Entry | Constant) -> Matrix:
    """Return the block diagonal matrix of the parts."""
    rows, columns = (sum(part.shape[axis] for part in parts) for axis in (0, 1))
    result = _full((rows, columns), zero)
    row = column = 0
    for part in parts:
        result[row : row + part.shape[0], column : column + part.shape[1]] = part
        row, column = row + part.shape[0], column + part.shape[1]
    return result


def _gains(links: Iterable[Link], shape: tuple[int, int], zero: Entry | Constant) -> Matrix:
    """Return the matrix of the links; those with one place are added exactly."""
    sums: dict[tuple[int, int], list[Entry | Constant]] = {}
    for row, column, gain in links:
        sums.setdefault((row, column), []).append(gain)
    result = _full(shape, zero)
    for place, gains in sums.items():
        if any(map(is_constant, gains)):
            total = decided(sum(map(expression, gains)), _GAIN)
        else:
            total = sum((Fraction(gain) for gain in gains), Fraction(0))
            if not isinstance(zero, Fraction | float):
                total = expression(total)
        result[place] = _rounded_gain(total) if isinstance(zero, float) else total
    return result


def _pattern(links: Iterable[Link], shape: tuple[int, int]) -> Matrix:
    """Return ones where there are links."""
    result = np.zeros(shape)
    for row, column, _ in links:
        result[row, column] = 1.0
    return result


def _rounded_gain(gain: Entry | Constant) -> float:
    return round_entry(gain, _GAIN)


def _times(left: Matrix, right: Matrix) -> Matrix:
    """Return the product, also where it is empty; exactly, zero rows and columns cost nothing."""
    if left.dtype != object:
        product: Matrix = left @ right
        return product
    if _holds_expressions(left) or _holds_expressions(right):
        return _expressions_times(left, right)
    result = _full((len(left), right.shape[1]), make_fraction(0, 1))
    rows, within = (np.flatnonzero(left.any(axis=axis)) for axis in (1, 0))
    columns = np.flatnonzero(right[within].any(axis=0))
    if columns.size:
        factors = _to_flint(left[np.ix_(rows, within)]), _to_flint(right[np.ix_(within, columns)])
        result[np.ix_(rows, columns)] = _from_flint(factors[0] * factors[1])
    return result


def _plus(left: Matrix, right: Matrix) -> Matrix:
    """Return the sum; what has nothing added to it is not touched."""
    result = left.copy()
    at = right.astype(bool)
    result[at] += right[at]
    return result


def _closure(pattern: Matrix) -> Matrix:
    """Return which rows are reached from which columns, in any number of steps or none."""
    reach: Matrix = pattern | np.eye(len(pattern), dtype=bool)
    while True:
        # Counting paths in doubles is far faster than boolean products, and as exact.
        further = reach.astype(float) @ reach.astype(float) > 0.0
        if (further == reach).all():
            return reach
        reach = further


def _components(pattern: Matrix) -> Iterator[Matrix]:
    """Yield the strongly connected components of row <- column, what they depend on first."""
    reach = _closure(pattern)
    # Whatever depends on something is reached from more places than that is, or from the same.
    sources = reach.sum(axis=1)
    done = np.zeros(len(pattern), dtype=bool)
    for index in np.argsort(sources, kind="stable"):
        if not done[index]:
            here = np.flatnonzero(reach[index] & reach[:, index])
            done[here] = True
            yield here


def _inverse_beside_one(around: Matrix) -> Matrix | None:
    """Return the inverse of I - around; None when it is singular."""
    size = len(around)
    if around.dtype != object:
        try:
            inverse: Matrix = np.linalg.inv(np.eye(size) - around)
        except np.linalg.LinAlgError:
            return None
        return inverse
    difference = -around
    difference.flat[:: size + 1] += 1
    try:
        return _from_flint(_to_flint(difference).inv())
    except ZeroDivisionError:  # FLINT's word for singular
        return None


def _expressions(matrix: Matrix) -> Matrix:
    """Return an object array of Fractions and constants as expressions."""
    return fraction_array(map(expression, matrix.flat), matrix.shape)


def _holds_expressions(matrix: Matrix) -> bool:
    return any(not isinstance(entry, Fraction | int) for entry in matrix.flat)


def _expressions_times(left: Matrix, right: Matrix) -> Matrix:
    """Return the product of two matrices of expressions, multiplied out and no more."""
    import sympy

    result = _full((len(left), right.shape[1]), sympy.Integer(0))
    columns = [[(k, entry) for k, entry in enumerate(column) if entry] for column in right.T]
    for i, row in enumerate(left):
        for j, column in enumerate(columns):
            result[i, j] = sympy.Add(*(row[k] * entry for k, entry in column if row[k]))
    return result


def _decide(matrix: Matrix, what: str) -> None:
    """Replace what is zero by zero, in place; refuse what cannot be told from it.

    Raises
    ------
    EntryError
        Saying where, and what to do.
    """
    for (i, j), entry in np.ndenumerate(matrix):
        try:
            matrix[i, j] = decided(expression(entry), (what, i, j))
        except EntryError as error:
            raise EntryError(
                f"connecting the blocks makes a number of which it cannot be told whether it is "
                f"zero: {error.message}. Simplify the entries of the blocks first, or give "
                "floats or fractions near them",
                where=error.where,
                found=error.found,
            ) from None


def _expressions_inverse_beside_one(around: Matrix, ports: tuple[str, ...]) -> Matrix | None:
    """Return the inverse of I - around, by elimination; None when it is singular.

    A pivot is a number known not to be zero by its decimals, and a column without one is known to
    be zero; what cannot be told is refused.
    """
    import sympy

    size = len(around)
    if size > LARGEST_LOOP:
        raise LimitError(
            f"the algebraic loop around {listed(ports)} has {size} signals and holds irrational "
            f"constants; at most {LARGEST_LOOP} are solved. Give floats or fractions near them",
            what="signals of a loop with constants",
            found=size,
            limit=LARGEST_LOOP,
        )
    one = _expressions(np.array([[Fraction(i == j) for j in range(size)] for i in range(size)]))
    table = np.concatenate([one - around, one], axis=1)
    for column in range(size):
        below = table[column:, column : column + 1]
        _decide(below, f"the algebraic loop around {listed(ports)}")
        pivot = next((i for i, (entry,) in enumerate(below, start=column) if entry), None)
        if pivot is None:
            return None
        table[[column, pivot]] = table[[pivot, column]]
        table[column] = table[column] / table[column, column]
        for row in range(size):
            if row != column and table[row, column]:
                table[row] = table[row] - table[row, column] * table[column]
                table[row, column] = sympy.Integer(0)
    inverse: Matrix = table[:, size:]
    _decide(inverse, f"the algebraic loop around {listed(ports)}")
    return inverse


def _to_flint(matrix: Matrix) -> fmpq_mat:
    from flint import fmpq, fmpq_mat

    entries = [fmpq(entry.numerator, entry.denominator) for entry in matrix.flat]
    return fmpq_mat(*matrix.shape, entries)


def _from_flint(matrix: fmpq_mat) -> Matrix:
    entries = (make_fraction(int(entry.p), int(entry.q)) for entry in matrix.entries())
    return fraction_array(entries, (matrix.nrows(), matrix.ncols()))


def _margin(inverse: Matrix, around: Matrix) -> float:
    """Return the reciprocal of the spectral radius of |inverse| |around|.

    If every gain changes by less than this, relative to itself, then I - around stays regular.
    The radius does not change when signals get other units, which the norm of the inverse does.
    """
    product = _sizes(inverse) @ _sizes(around)
    if not np.isfinite(product).all():
        return math.inf
    return float(1.0 / np.abs(np.linalg.eigvals(product)).max())


def _sizes(matrix: Matrix) -> Matrix:
    """Return absolute values in doubles, infinity where they are too large."""
    if matrix.dtype != object:
        return np.abs(matrix)
    sizes = [abs(_rational_near(entry)) for entry in matrix.flat]
    doubles = [math.inf if size > _LARGEST else float(size) for size in sizes]
    return np.array(doubles).reshape(matrix.shape)


def _rational_near(entry: Constant) -> Fraction:
    """Return an exact entry, or a rational near an irrational one, near enough for a size."""
    if is_constant(entry):
        return constant_near(entry, 20)
    return Fraction(int(entry.numerator), int(entry.denominator))


def _check_finite(matrix: Matrix, letter: str) -> None:
    if matrix.dtype == object or np.isfinite(matrix).all():
        return
    row, column = (int(index) for index in np.argwhere(~np.isfinite(matrix))[0])
    place = place_text((letter, row, column))
    raise EntryError(
        f"{place}: connecting the blocks makes a number too large for a double; scale the blocks, "
        "or give them as rationals",
        where=place,
    )


def _in_doubles(name: str, block: Realization) -> Realization:
    try:
        return block.to_float()
    except EntryError as error:
        raise EntryError(
            f"block {name}: {error.message}", where=error.where, found=error.found
        ) from None


# ---------------------------------------------------------------------------------------------
# What callers give
# ---------------------------------------------------------------------------------------------


def cascade(first: Realization, second: Realization) -> Realization:
    """Return two models in series: the outputs of the first are the inputs of the second.

    Parameters
    ----------
    first : Realization, A (n, n), B (n, m), C (k, n), D (k, m).
    second : Realization, A (l, l), B (l, k), C (p, l), D (p, k).

    Returns
    -------
    Realization
        Of order n + l, with m inputs and p outputs; of the kind that its blocks call for. It
        remembers its blocks, "first" and "second": see `Realization.read`.

    Raises
    ------
    ShapeError
        When the second has not as many inputs as the first has outputs.
    SamplingPeriodError
        When the sampling periods differ.
    EntryError
        When a number becomes too large for a double, or one made of irrational constants cannot
        be told from zero.
    UnsupportedEntryError
        When an argument is no Realization.

    Notes
    -----
    The transfer matrix is that of the second times that of the first. Zeros of the one that are
    poles of the other become hidden modes. Inputs keep their names, as do outputs; a state is
    called "first.x1".

    References
    ----------
    Kailath (1980), Linear Systems, section 2.4.

    Examples
    --------
    >>> lag = Realization([[-1]], [1], [1])
    >>> lead = Realization([[-3]], [1], [-2], 1)  # (s + 1)/(s + 3)
    >>> chain = cascade(lag, lead)
    >>> chain.A.tolist()
    [[Fraction(-1, 1), Fraction(0, 1)], [Fraction(1, 1), Fraction(-3, 1)]]
    >>> chain.state_names
    ('first.x1', 'second.x1')
    """
    names = _check_blocks({"first": first, "second": second})
    _check_counts(
        "second has {found}, but first has {wanted}; in series each output of the first is an "
        "input of the second",
        (second.input_count, "input"),
        (first.output_count, "output"),
    )
    connection = Connection(
        names=names,
        blocks=(first, second),
        input_count=first.input_count,
        output_count=second.output_count,
        inner=_ones(first.output_count, row=first.input_count),
        entering=_ones(first.input_count),
        leaving=_ones(second.output_count, column=first.output_count),
    )
    return _connected(connection, first.input_names, second.output_names)


def sum_of(first: Realization, second: Realization) -> Realization:
    """Return two models in parallel: the same inputs drive both, and the outputs are added.

    Parameters
    ----------
    first : Realization, A (n, n), B (n, m), C (p, n), D (p, m).
    second : Realization, A (l, l), B (l, m), C (p, l), D (p, m).

    Returns
    -------
    Realization
        Of order n + l, with m inputs and p outputs; of the kind that its blocks call for. It
        remembers its blocks, "first" and "second": see `Realization.read`.

    Raises
    ------
    ShapeError
        When the two have not equally many inputs, or outputs.
    SamplingPeriodError
        When the sampling periods differ.
    EntryError
        When a number becomes too large for a double, or one made of irrational constants cannot
        be told from zero.
    UnsupportedEntryError
        When an argument is no Realization.

    Notes
    -----
    The transfer matrices add up. With one input or one output, poles that both have become hidden
    modes. Inputs and outputs keep the names of the first.

    References
    ----------
    Kailath (1980), Linear Systems, section 2.4.

    Examples
    --------
    >>> both = sum_of(Realization([[-1]], [1], [1]), Realization([[-2]], [1], [-1]))
    >>> both.C.tolist()
    [[Fraction(1, 1), Fraction(-1, 1)]]
    """
    names = _check_blocks({"first": first, "second": second})
    for thing, found, wanted in (
        ("input", second.input_count, first.input_count),
        ("output", second.output_count, first.output_count),
    ):
        _check_counts(
            "second has {found}, but first has {wanted}; in parallel both take the same inputs, "
            "and their outputs are added one by one",
            (found, thing),
            (wanted, thing),
        )
    inputs, outputs = first.input_count, first.output_count
    connection = Connection(
        names=names,
        blocks=(first, second),
        input_count=inputs,
        output_count=outputs,
        entering=_ones(inputs) + _ones(inputs, row=inputs),
        leaving=_ones(outputs) + _ones(outputs, column=outputs),
    )
    return _connected(connection, first.input_names, first.output_names)


def block_diagonal(first: Realization, second: Realization) -> Realization:
    """Return two models side by side, each with its own inputs and outputs.

    Parameters
    ----------
    first : Realization, A (n, n), B (n, m), C (p, n), D (p, m).
    second : Realization, A (l, l), B (l, k), C (q, l), D (q, k).

    Returns
    -------
    Realization
        Of order n + l, with m + k inputs and p + q outputs; of the kind that its
        blocks call for. It remembers its blocks, "first" and "second": see `Realization.read`.

    Raises
    ------
    SamplingPeriodError
        When the sampling periods differ.
    EntryError
        When an entry is too large for a double, and the other model is floating.
    UnsupportedEntryError
        When an argument is no Realization.

    Notes
    -----
    Inputs keep their names if all of them are different, and are called "first.u1", "second.u1"
    and so on if not; so do outputs.

    References
    ----------
    Kailath (1980), Linear Systems, section 2.4.

    Examples
    --------
    >>> pair = block_diagonal(Realization([[-1]], [1], [1]), Realization([], [], [], [[2, 3]]))
    >>> pair.input_names, pair.output_names
    (('first.u1', 'second.u1', 'second.u2'), ('first.y1', 'second.y1'))
    >>> pair.D.tolist()[1]
    [Fraction(0, 1), Fraction(2, 1), Fraction(3, 1)]
    """
    names = _check_blocks({"first": first, "second": second})
    inputs = first.input_count + second.input_count
    outputs = first.output_count + second.output_count
    connection = Connection(
        names=names,
        blocks=(first, second),
        input_count=inputs,
        output_count=outputs,
        entering=_ones(inputs),
        leaving=_ones(outputs),
    )
    return _connected(
        connection,
        _told_apart(names, (first.input_names, second.input_names)),
        _told_apart(names, (first.output_names, second.output_names)),
    )


def loop(plant: Realization, controller: Realization, *, feedback: str = "negative") -> Realization:
    """Return a closed loop, from the reference to the output of the plant.

    The controller is driven by the reference minus the output of the plant, and drives the plant.

    Parameters
    ----------
    plant : Realization, A (n, n), B (n, m), C (p, n), D (p, m).
    controller : Realization, A (l, l), B (l, p), C (m, l), D (m, p).
    feedback : {"negative", "positive"}, keyword-only
        "positive": the controller is driven by the reference plus the output of the plant.

    Returns
    -------
    Realization
        Of order n + l, with p inputs, named as those of the controller, and p outputs, named as
        those of the plant; of the kind that its blocks call for. It remembers its blocks,
        "plant" and "controller": see `Realization.read`.

    Raises
    ------
    AlgebraicLoopError
        When I + D Dc (I - D Dc for positive feedback) is singular, D being the feedthrough of the
        plant and Dc that of the controller; in doubles also when it is singular to within their
        rounding.
    LimitError
        When the loop has more than `LARGEST_LOOP` signals and holds irrational constants.
    ShapeError
        When inputs and outputs of the two do not fit.
    SamplingPeriodError
        When the sampling periods differ.
    EntryError
        When a number becomes too large for a double, or one made of irrational constants cannot
        be told from zero.
    UnknownWordError
        When feedback is another word.
    UnsupportedEntryError
        When an argument is no Realization.

    Warns
    -----
    AlgebraicLoopWarning
        When the loop is nearly ill-posed: its margin is below
        `realize.tolerance.LOOP_MARGIN`.

    Notes
    -----
    With P and K for the two transfer matrices, (I + P K)^-1 P K. A pole of the plant that the
    controller cancels is a hidden mode of the loop. For a controller in the feedback path, or one
    that takes the reference apart from the measurement, there is `assemble`.

    References
    ----------
    Kailath (1980), Linear Systems, section 2.4.

    Examples
    --------
    >>> plant = Realization([[1]], [1], [1])
    >>> loop(plant, Realization([], [], [], [[3]])).A.tolist()
    [[Fraction(-2, 1)]]
    >>> gain = Realization([], [], [], [[1]])
    >>> loop(gain, gain, feedback="positive")
    Traceback (most recent call last):
        ...
    realize.errors.AlgebraicLoopError: the direct feedthroughs around plant.u1, plant.y1,
    controller.u1, controller.y1 form an algebraic loop that is ill-posed: its equations have no
    unique solution. Change a gain, or give a block around the loop no direct feedthrough
    """
    names = _check_blocks({"plant": plant, "controller": controller})
    sign = -_ONE if known_word(Feedback, feedback, "feedback") is Feedback.NEGATIVE else _ONE
    for taker, giver, found, wanted in (
        ("controller", "plant", controller.input_count, plant.output_count),
        ("plant", "controller", plant.input_count, controller.output_count),
    ):
        _check_counts(
            f"{taker} has {{found}}, but {giver} has {{wanted}}; in a loop each output of the "
            f"{giver} meets an input of the {taker}",
            (found, "input"),
            (wanted, "output"),
        )
    inputs, outputs = plant.input_count, plant.output_count
    connection = Connection(
        names=names,
        blocks=(plant, controller),
        input_count=outputs,
        output_count=outputs,
        inner=_ones(inputs, column=outputs) + _ones(outputs, row=inputs, gain=sign),
        entering=_ones(outputs, row=inputs),
        leaving=_ones(outputs),
    )
    return _connected(connection, controller.input_names, plant.output_names)


def assemble(
    blocks: Mapping[str, Realization],
    wires: Iterable[Sequence[Any]],
    *,
    inputs: Sequence[str],
    outputs: Sequence[str],
) -> Realization:
    """Return named blocks connected by wires, with external inputs and outputs.

    Parameters
    ----------
    blocks : mapping of str to Realization
        The blocks by name. A name holds no dot.
    wires : iterable of (source, target) or (source, target, gain)
        A source is an output of a block or an external input; a target is an input of a block or
        an external output. A port of a block is written "block.port", by the name that it has in
        the block; of a block with one output, "block" is enough for a source, and of a block with
        one input, for a target. External ports are written by their name. The gain is any entry,
        1 unless given. What several wires bring to one target is added; a target without a wire
        is zero.
    inputs, outputs : sequence of str, keyword-only
        The external ports, in order. A name holds no dot and is not that of a block.

    Returns
    -------
    Realization
        Its states are those of the blocks, in their order, called "block.state"; of the kind that
        blocks and gains call for. It remembers its blocks: see `Realization.read`.

    Raises
    ------
    UnknownWordError
        When an end of a wire is no port, or could be one of several.
    AlgebraicLoopError
        When direct feedthroughs run in a circle and have no unique solution; in doubles also when
        that is so to within their rounding.
    EntryError
        When a name cannot serve, a gain is no finite number, a number becomes too large for a
        double, or one made of irrational constants cannot be told from zero.
    LimitError
        When an algebraic loop of more than `LARGEST_LOOP` signals holds irrational constants.
    ShapeError
        When a wire has not two or three items.
    SamplingPeriodError
        When the sampling periods differ.
    UnsupportedEntryError
        When an argument is of another type.

    Warns
    -----
    AlgebraicLoopWarning
        When a loop is nearly ill-posed: its margin is below
        `realize.tolerance.LOOP_MARGIN`.

    References
    ----------
    Kailath (1980), Linear Systems, section 2.4.

    Examples
    --------
    A tank with a controller that sees the level and the reference apart:

    >>> tank = Realization(
    ...     [[-0.1]], [[0.2, 1.0]], [1.0], input_names=["valve", "leak"], output_names=["level"]
    ... )
    >>> model = assemble(
    ...     {"tank": tank, "controller": Realization([], [], [], [[2, "-1/2"]])},
    ...     [
    ...         ("reference", "controller.u1"),
    ...         ("tank", "controller.u2"),
    ...         ("controller", "tank.valve"),
    ...         ("disturbance", "tank.leak", -1),
    ...         ("tank.level", "level"),
    ...     ],
    ...     inputs=["reference", "disturbance"],
    ...     outputs=["level"],
    ... )
    >>> model.read("written").A.tolist(), model.read("written").B.tolist()
    ([[Fraction(-1, 5)]], [[Fraction(2, 5), Fraction(-1, 1)]])
    """
    if not isinstance(blocks, Mapping):
        raise UnsupportedEntryError(
            f"blocks: found a value of type {type(blocks).__name__}; give a dict from names to "
            "Realizations",
            where="blocks",
            found=type(blocks).__name__,
        )
    names = _check_blocks(blocks)
    outside_in = _check_outside(inputs, "inputs", names)
    outside_out = _check_outside(outputs, "outputs", names)
    parts = tuple(blocks.values())
    sources = _Ends("output", names, [block.output_names for block in parts], outside_in)
    targets = _Ends("input", names, [block.input_names for block in parts], outside_out)
    links: dict[tuple[bool, bool], list[Link]] = {
        (from_outside, to_outside): []
        for from_outside in (False, True)
        for to_outside in (False, True)
    }
    for place, source, target, gain in _check_wires(wires):
        from_outside, column = sources.find(source, place)
        to_outside, row = targets.find(target, place)
        links[from_outside, to_outside].append((row, column, gain))
    connection = Connection(
        names=names,
        blocks=parts,
        input_count=len(outside_in),
        output_count=len(outside_out),
        inner=tuple(links[False, False]),
        entering=tuple(links[True, False]),
        leaving=tuple(links[False, True]),
        through=tuple(links[True, True]),
    )
    return _connected(connection, outside_in, outside_out)


def _connected(connection: Connection, input_names: Names, output_names: Names) -> Realization:
    """Return the model that a connection makes, which remembers it; called by public functions."""
    period = connection.sampling_period()
    joined = connection.join()
    for found in joined.loops:
        if found.margin < LOOP_MARGIN:
            warnings.warn(
                f"the algebraic loop around {listed(found.ports)} is nearly ill-posed: a relative "
                f"change of its direct gains by {found.margin:.2g} can leave it without a solution",
                AlgebraicLoopWarning,
                stacklevel=3,  # the caller of the public function
            )
    return Realization._trusted(
        *joined.matrices,
        kind=connection.kind,
        sampling_period=period,
        state_names=own_names(connection.state_names(), "x"),
        input_names=own_names(input_names, "u"),
        output_names=own_names(output_names, "y"),
        connection=connection,
    )


def _ones(count: int, *, row: int = 0, column: int = 0, gain: Entry = _ONE) -> tuple[Link, ...]:
    """Return one gain for each of so many ports, from a first column to a first row on."""
    return tuple((row + index, column + index, gain) for index in range(count))


def _told_apart(blocks: Names, names: Sequence[Names]) -> Names:
    """Return the names of all blocks as they are if no two are equal, else "block.name"."""
    plain = tuple(name for group in names for name in group)
    if len(set(plain)) == len(plain):
        return plain
    return tuple(
        f"{block}.{name}" for block, group in zip(blocks, names, strict=True) for name in group
    )


def _check_counts(message: str, found: tuple[int, str], wanted: tuple[int, str]) -> None:
    if found[0] != wanted[0]:
        raise ShapeError(
            message.format(found=count_text(*found), wanted=count_text(*wanted)),
            where=message.split()[0],
            found=found[0],
            wanted=wanted[0],
        )


def _check_blocks(blocks: Mapping[str, Realization]) -> Names:
    """Return the names of the blocks; refuse what is no block."""
    names = parse_names(tuple(blocks), "blocks") or ()
    for name, block in blocks.items():
        _refuse_dot(name, "blocks")
        if not isinstance(block, Realization):
            raise UnsupportedEntryError(
                f"{name}: found a value of type {type(block).__name__}; give a Realization, which "
                "realize.as_realization makes of many things",
                where=name,
                found=type(block).__name__,
            )
    return names


def _refuse_dot(name: str, argument: str) -> None:
    if "." in name:
        raise EntryError(
            f"{argument}: the name {name!r} holds a dot, which parts a block from its port; give a "
            "name without",
            where=argument,
            found=name,
        )


def _check_outside(names: Sequence[str], argument: str, blocks: Names) -> Names:
    """Return the names of external ports, which must differ from those of blocks."""
    checked = parse_names(names, argument)
    if checked is None:
        raise UnsupportedEntryError(
            f"{argument}: found None; give a list of texts, which may be empty",
            where=argument,
            found="NoneType",
        )
    for name in checked:
        _refuse_dot(name, argument)
        if name in blocks:
            raise EntryError(
                f"{argument}: {name!r} is also the name of a block, and a wire could not tell the "
                "two apart; give the external port another name",
                where=argument,
                found=name,
            )
    return checked


def _check_wires(
    wires: Iterable[Sequence[Any]],
) -> Iterator[tuple[str, str, str, Entry | Constant]]:
    """Yield place, source, target and gain of each wire."""
    if isinstance(wires, str | Mapping) or not isinstance(wires, Iterable):
        raise UnsupportedEntryError(
            f"wires: found a value of type {type(wires).__name__}; give a list of pairs "
            "(source, target)",
            where="wires",
            found=type(wires).__name__,
        )
    for number, wire in enumerate(wires, start=1):
        place = f"wires, item {number}"
        if not isinstance(wire, tuple | list):
            raise UnsupportedEntryError(
                f"{place}: found a value of type {type(wire).__name__}; give a pair (source, "
                "target), or (source, target, gain)",
                where=place,
                found=type(wire).__name__,
            )
        if len(wire) not in (2, 3):
            raise ShapeError(
                f"{place}: found {len(wire)} items, wanted two, (source, target), or three, "
                "(source, target, gain)",
                where=place,
                found=len(wire),
                wanted=2,
            )
        for end in wire[:2]:
            if not isinstance(end, str):
                raise UnsupportedEntryError(
                    f"{place}: found an end of type {type(end).__name__}; an end is a text such "
                    'as "block.port"',
                    where=place,
                    found=type(end).__name__,
                )
        source, target = wire[:2]
        place = f"{place} ({source!r} to {target!r})"
        gain = parse_entry(wire[2] if len(wire) == 3 else 1, place, constants=True)
        yield place, source, target, gain


class _Ends:
    """The places where one kind of end of a wire may be: ports of blocks, and external ports."""

    def __init__(self, side: str, blocks: Names, ports: Sequence[Names], outside: Names) -> None:
        self.side = side  # of a block
        self.outside = {name: index for index, name in enumerate(outside)}
        self.blocks: dict[str, dict[str, int]] = {}
        count = 0
        for block, names in zip(blocks, ports, strict=True):
            self.blocks[block] = {name: count + index for index, name in enumerate(names)}
            count += len(names)

    def find(self, text: str, place: str) -> tuple[bool, int]:
        """Return whether an end is external, and its number among such ends."""
        if text in self.outside:
            return True, self.outside[text]
        block, dot, port = text.partition(".")
        if block not in self.blocks:
            port = "" if dot else f", and no external {_OUTSIDE[self.side]}"
            self.fail(text, place, f"there is no block {block!r}{port}")
        ports = self.blocks[block]
        if dot and port not in ports:
            self.fail(text, place, f"block {block!r} has no {self.side} {port!r}", block)
        if not dot and len(ports) != 1:
            has = count_text(len(ports), self.side)
            self.fail(text, place, f"block {block!r} has {has}, so name the port", block)
        return False, ports[port] if dot else next(iter(ports.values()))

    def fail(self, text: str, place: str, what: str, block: str | None = None) -> NoReturn:
        """Say what is wrong with an end, and what is known."""
        allowed = [
            f"{name}.{port}"
            for name, ports in self.blocks.items()
            for port in ports
            if block in (None, name)
        ]
        if block is None:
            allowed = [*self.outside, *allowed]
        raise UnknownWordError(
            f"{place}: {what}; known here: {listed(allowed) or 'none'}",
            argument="wires",
            found=text,
            allowed=allowed,
        )
