"""How far each entry of a model may lie from the number given.

An uncertainty says it in one of two ways. *Bounds*: each entry lies within a radius, made up of
a share of its size, an absolute figure and its rounding, which add up. *Spread*: standard
deviations, or a covariance of all entries, as an identification gives them. Both turn into
radii, one exact rational for each entry (`Uncertainty.radii`).
"""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from decimal import Decimal
from enum import StrEnum
from fractions import Fraction
from statistics import NormalDist
from typing import Any, Final, TypeAlias, cast, overload

import numpy as np

from realize import tolerance as rule
from realize.entries import (
    Entry,
    Kind,
    known_word,
    parse_entry,
    read_float,
    round_fraction,
)
from realize.errors import RealizeError, UncertaintyError, UnsupportedEntryError
from realize.model.realization import Realization
from realize.model.transfer import Table, TransferMatrix

__all__ = [
    "CoefficientRadii",
    "MatrixRadii",
    "Rounding",
    "Uncertainty",
    "as_uncertainty",
]

Array = np.ndarray[Any, Any]
Model: TypeAlias = Realization | TransferMatrix

_ZERO: Final = Fraction(0)
_MATRICES: Final = ("A", "B", "C", "D")
_TABLES: Final = ("numerators", "denominators")

_ASYMMETRY: Final = 2.0**-40
"""Difference of two mirrored covariances, over the larger deviation product, that is rounding."""


class Rounding(StrEnum):
    """How the entries were rounded before they came.

    ``ulp``: each float may be off by the spacing of the doubles at it. ``last digit``: by half a
    unit in the last digit of its shortest decimal, as Python writes it.
    """

    ULP = "ulp"
    LAST_DIGIT = "last digit"


@dataclass(frozen=True, kw_only=True, slots=True)
class MatrixRadii:
    """A radius for every entry of a realization.

    Attributes
    ----------
    A, B, C, D : object arrays of Fraction, shapes as in the model
    """

    A: Array
    B: Array
    C: Array
    D: Array


@dataclass(frozen=True, kw_only=True, slots=True)
class CoefficientRadii:
    """A radius for every coefficient of a transfer matrix.

    Attributes
    ----------
    numerators, denominators : nested tuples of Fraction, [output][input][coefficient]
    """

    numerators: Table
    denominators: Table


@dataclass(frozen=True, kw_only=True, slots=True)
class Uncertainty:
    """How far each entry of a model may lie from the number given.

    Parameters
    ----------
    relative : number, or mapping from matrix to number or array
        Radius over the size of the entry; entries that are zero stay zero.
    absolute : number, or mapping
        Radius in the unit of the entry. A single number holds for every entry, zeros too.
    rounding : {"ulp", "last digit"}
        See `Rounding`. An exact entry has no spacing of its own: for "ulp" it moves only where no
        double holds it, for "last digit" only where it is a decimal and no integer. Zeros stay.
    standard_deviation : number, or mapping
        Standard deviation of each entry, in its unit; entries independent and normal.
    covariance : array_like (count, count)
        Of all entries: matrices in the order A, B, C, D, each row by row; or numerators, then
        denominators, output by output and input by input, descending powers. Zero rows and
        columns for what is fixed.
    confidence : number between 0 and 1
        For standard deviations and a covariance: the model lies within the radii, all at once,
        with at least this probability. 19/20 unless given.

    Raises
    ------
    UncertaintyError
        When a figure is negative, not finite or no number, when nothing is given, or when bounds
        and standard deviations are given together; from `radii`, also for shapes that do not fit
        the model.
    UnknownWordError
        When `rounding`, or a key of a mapping, is another word.

    Notes
    -----
    `relative`, `absolute` and `rounding` add up. A mapping has the keys "A", "B", "C", "D" for a
    realization, "numerators", "denominators" for a transfer matrix; what it leaves out is exact.
    Its values are numbers, or arrays of the shape of the matrix; for coefficients, lists nested
    as in the transfer matrix. Figures given as floats are read as written: 0.1 is 1/10. Leading
    zeros that a transfer matrix dropped stay zero.

    The radii of a spread are quantiles of the normal distribution for each entry, with the
    probability of being outside shared out equally (Bonferroni), so that correlations do not
    matter.

    Examples
    --------
    >>> from realize import TransferMatrix, Uncertainty
    >>> transfer = TransferMatrix([1, 0], [1, "3/2", 2])
    >>> Uncertainty(relative=0.01).radii(transfer).denominators
    (((Fraction(1, 100), Fraction(3, 200), Fraction(1, 50)),),)
    >>> fixed = Uncertainty(absolute={"denominators": [0, 0.1, 0.1]})
    >>> fixed.radii(transfer).numerators
    (((Fraction(0, 1), Fraction(0, 1)),),)
    """

    relative: Any = None
    absolute: Any = None
    rounding: Rounding | None = None
    standard_deviation: Any = None
    covariance: Any = None
    confidence: Any = None

    def __post_init__(self) -> None:
        for name in ("relative", "absolute", "standard_deviation"):
            _settle(self, name, _figures(getattr(self, name), name))
        if self.rounding is not None:
            _settle(self, "rounding", known_word(Rounding, self.rounding, "uncertainty"))
        _settle(self, "covariance", _covariance(self.covariance))
        bounds = [n for n in ("relative", "absolute", "rounding") if getattr(self, n) is not None]
        spread = [n for n in ("standard_deviation", "covariance") if getattr(self, n) is not None]
        if not bounds and not spread:
            raise UncertaintyError(
                "uncertainty: found no figure; give relative, absolute, rounding, "
                "standard_deviation or covariance, or leave the uncertainty at None"
            )
        if (bounds and spread) or len(spread) > 1:
            names = " and ".join([*bounds, *spread])
            raise UncertaintyError(
                f"uncertainty: found {names} together; give bounds (relative, absolute, rounding) "
                "or one of standard_deviation and covariance"
            )
        if self.confidence is not None and not spread:
            raise UncertaintyError(
                "confidence: has no meaning for bounds; give it with standard_deviation or "
                "covariance",
                argument="confidence",
            )
        if spread:
            _settle(self, "confidence", _confidence(self.confidence))

    def __str__(self) -> str:
        shown = []
        for name in ("relative", "absolute", "standard_deviation"):
            figure = getattr(self, name)
            if figure is not None:
                text = "by matrix" if isinstance(figure, dict) else _shown(figure)
                shown.append(f"{name.replace('_', ' ')} {text}")
        if self.covariance is not None:
            shown.append("covariance")
        if self.confidence is not None:
            shown.append(f"confidence {float(self.confidence):.6g}")
        if self.rounding is not None:
            shown.append(f"rounding {self.rounding}")
        return ", ".join(shown)

    @property
    def is_spread(self) -> bool:
        """Whether it is given by standard deviations or a covariance, and not by bounds."""
        return self.confidence is not None

    @overload
    def radii(self, model: Realization) -> MatrixRadii: ...
    @overload
    def radii(self, model: TransferMatrix) -> CoefficientRadii: ...
    def radii(self, model: Model) -> MatrixRadii | CoefficientRadii:
        """Return how far each entry may lie from the number given, as exact rationals.

        Parameters
        ----------
        model : Realization or TransferMatrix
            With its entries as they were given; sizes of floats are those of the stored doubles.

        Raises
        ------
        UncertaintyError
            When arrays or lists do not have the shapes of the model, or its keys.
        UnsupportedEntryError
            When the model has irrational constants.
        """
        entries = _entries(model)
        if not self.is_spread:
            relative = _fitted(self.relative, "relative", model)
            absolute = _fitted(self.absolute, "absolute", model)
            sizes = [abs(Fraction(entry)) for entry in entries]
            found = [r * size + a for r, a, size in zip(relative, absolute, sizes, strict=True)]
            if self.rounding is not None:
                rounded = _ulp if self.rounding is Rounding.ULP else _last_digit
                found = [radius + rounded(e) for radius, e in zip(found, entries, strict=True)]
            return _packed(found, model)
        deviations = self._deviations(model)
        count = sum(1 for deviation in deviations if deviation)
        outside = (1 - float(self.confidence)) / (2 * max(count, 1))
        # The margin covers the rounding of the quantile.
        quantile = Fraction(-NormalDist().inv_cdf(outside) * (1 + 1e-9))
        return _packed([quantile * deviation for deviation in deviations], model)

    def spread(self, model: Model) -> Array:
        """Return the covariance of all entries, as doubles, in the order of `covariance`.

        Raises
        ------
        UncertaintyError
            When it is given by bounds, or does not fit the model.
        """
        if not self.is_spread:
            raise UncertaintyError(
                "uncertainty: bounds have no covariance; give standard_deviation or covariance"
            )
        deviations = self._deviations(model)
        if self.covariance is None:
            return np.diag([round_fraction(d * d, "standard_deviation") for d in deviations])
        return np.array(self.covariance, dtype=float)

    def _deviations(self, model: Model) -> list[Fraction]:
        """Return the standard deviation of every entry."""
        if self.covariance is None:
            return _fitted(self.standard_deviation, "standard_deviation", model)
        count = len(_entries(model))
        if len(self.covariance) != count:
            raise UncertaintyError(
                f"covariance: found {len(self.covariance)} rows, wanted {count}, one for each "
                "entry of the model; give zero rows and columns for entries that are fixed",
                argument="covariance",
                found=str(len(self.covariance)),
            )
        return [Fraction(math.sqrt(row[k])) for k, row in enumerate(self.covariance)]


def as_uncertainty(given: Any) -> Uncertainty | None:
    """Return the uncertainty that a caller's argument means.

    Parameters
    ----------
    given : None, Uncertainty, number or str
        A number is relative, entry by entry; a word names a rounding ("ulp", "last digit").

    Raises
    ------
    UncertaintyError, UnknownWordError
        For anything else.
    """
    if given is None or isinstance(given, Uncertainty):
        return given
    if isinstance(given, str):
        return Uncertainty(rounding=known_word(Rounding, given, "uncertainty"))
    if isinstance(given, Mapping | Sequence | np.ndarray):
        raise UncertaintyError(
            f"uncertainty: found a value of type {type(given).__name__}; say what its numbers are "
            "with realize.Uncertainty(relative=...) or realize.Uncertainty(absolute=...)",
            argument="uncertainty",
            found=type(given).__name__,
        )
    return Uncertainty(relative=given)


# From what a caller gives to exact figures


def _shown(figure: Fraction) -> str:
    """Return a figure short enough to read, whatever its size."""
    bits = figure.numerator.bit_length() - figure.denominator.bit_length()
    if figure and abs(bits) > 1000:
        return f"about 2^{bits}"
    return f"{float(figure):.6g}"


def _settle(record: Uncertainty, name: str, value: Any) -> None:
    object.__setattr__(record, name, value)


def _figure(value: Any, argument: str, where: str) -> Fraction:
    """Return one figure as an exact number that is not negative."""
    try:
        entry = parse_entry(value, where)
    except RealizeError as error:
        raise UncertaintyError(
            f"{error.message}; wanted a finite number that is not negative",
            argument=argument,
            found=repr(value)[:60],
            where=where,
        ) from error
    number = read_float(entry, "written") if isinstance(entry, float) else entry
    if number < 0:
        raise UncertaintyError(
            f"{where}: found {value!r}, which is negative; an uncertainty is a size",
            argument=argument,
            found=repr(value)[:60],
            where=where,
        )
    return number


def _figures(value: Any, argument: str) -> Any:
    """Return a number as a Fraction, a mapping with its values checked and nested in tuples."""
    if value is None:
        return None
    if not isinstance(value, Mapping):
        if isinstance(value, list | tuple | np.ndarray):
            raise UncertaintyError(
                f"{argument}: found a value of type {type(value).__name__}; name what it is for: "
                f'{argument}={{"A": ...}}, or {{"numerators": ..., "denominators": ...}}',
                argument=argument,
                found=type(value).__name__,
            )
        return _figure(value, argument, argument)
    for key in value:
        if key not in (*_MATRICES, *_TABLES):
            raise UncertaintyError(
                f"{argument}: found the key {key!r}; use "
                f"{', '.join(map(repr, (*_MATRICES, *_TABLES)))}",
                argument=argument,
                found=repr(key)[:60],
            )
    return {key: _nested(item, argument, f"{argument}, {key}") for key, item in value.items()}


def _nested(value: Any, argument: str, where: str) -> Any:
    """Return nested sequences as nested tuples of exact numbers; a single number stays one."""
    if isinstance(value, np.ndarray):
        value = list(value) if value.ndim else value[()]
    if isinstance(value, list | tuple):
        return tuple(
            _nested(item, argument, f"{where}, item {index + 1}")
            for index, item in enumerate(value)
        )
    return _figure(value, argument, where)


def _confidence(value: Any) -> Fraction:
    if value is None:
        return rule.DEFAULT_CONFIDENCE
    number = _figure(value, "confidence", "confidence")
    if not 0 < number < 1:
        raise UncertaintyError(
            f"confidence: found {value!r}, wanted a number between 0 and 1, both left out",
            argument="confidence",
            found=repr(value)[:60],
        )
    return number


def _covariance(value: Any) -> Any:
    """Return a covariance as nested tuples of doubles, exactly symmetric."""
    if value is None:
        return None
    try:
        table = np.array(value, dtype=float)
    except (TypeError, ValueError) as error:
        raise _bad_covariance("found something that is no table of numbers") from error
    if table.ndim != 2 or table.shape[0] != table.shape[1]:
        raise _bad_covariance(f"found the shape {table.shape}, wanted a square table")
    if not np.isfinite(table).all():
        raise _bad_covariance("found an entry that is not finite")
    variances = np.diagonal(table)
    if (variances < 0).any():
        raise _bad_covariance(f"found the variance {float(variances.min())!r}, which is negative")
    deviations = np.sqrt(variances)
    bound = np.outer(deviations, deviations)
    if (np.abs(table - table.T) > _ASYMMETRY * bound).any():
        raise _bad_covariance("found a table that is not symmetric")
    table = (table + table.T) / 2
    # Correlations, so that units do not decide.
    scale = np.where(deviations > 0, deviations, 1.0)
    least = np.linalg.eigvalsh(table / np.outer(scale, scale)).min(initial=0.0)
    if (np.abs(table) > bound * (1 + _ASYMMETRY)).any() or least < -_ASYMMETRY * max(len(table), 1):
        raise _bad_covariance("found a table that is no covariance: it has a negative eigenvalue")
    return tuple(map(tuple, table.tolist()))


def _bad_covariance(what: str) -> UncertaintyError:
    return UncertaintyError(
        f"covariance: {what}; give a symmetric table of finite numbers with no negative "
        "eigenvalue, a row and a column for each entry of the model",
        argument="covariance",
    )


# The entries of a model, one after the other


def _entries(model: Model) -> list[Entry]:
    """Return the entries as they were given, in the order of `Uncertainty.covariance`."""
    if model.kind == Kind.PARAMETRIC:
        raise UnsupportedEntryError(
            "the model has irrational constants; an uncertainty needs rational entries or floats. "
            "Take to_float(), or the model that realize.multiprecision returns"
        )
    parts = model._as_given()
    if isinstance(model, Realization):
        return [entry for matrix in parts for entry in cast(Array, matrix).ravel().tolist()]
    return [c for table in parts for row in table for polynomial in row for c in polynomial]


def _packed(flat: Sequence[Fraction], model: Model) -> MatrixRadii | CoefficientRadii:
    """Return a flat list of radii in the shapes of the model."""
    radii = iter(flat)
    if isinstance(model, Realization):
        arrays = {}
        for name, matrix in zip(_MATRICES, model.matrices(), strict=True):
            array = np.empty(matrix.size, dtype=object)
            array[:] = [next(radii) for _ in range(matrix.size)]
            arrays[name] = array.reshape(matrix.shape)
        return MatrixRadii(**arrays)
    above, below = (
        tuple(tuple(tuple(next(radii) for _ in polynomial) for polynomial in row) for row in table)
        for table in (model.numerators, model.denominators)
    )
    return CoefficientRadii(numerators=above, denominators=below)


def _fitted(figures: Any, argument: str, model: Model) -> list[Fraction]:
    """Return one figure for each entry of the model."""
    if not isinstance(figures, dict):
        return [_ZERO if figures is None else figures] * len(_entries(model))
    names = _MATRICES if isinstance(model, Realization) else _TABLES
    for key in figures:
        if key not in names:
            kind = "realization" if isinstance(model, Realization) else "transfer matrix"
            raise UncertaintyError(
                f"{argument}: found the key {key!r}, which a {kind} does not have; "
                f"use {', '.join(map(repr, names))}",
                argument=argument,
                found=repr(key),
            )
    fitted: list[Fraction] = []
    for name, part in zip(names, model._as_given(), strict=True):
        where = f"{argument}, {name}"
        figure = figures.get(name, _ZERO)
        if isinstance(model, Realization):
            fitted += _matrix(figure, cast(Array, part).shape, argument, where)
        else:
            fitted += _table(figure, cast(Table, part), argument, where)
    return fitted


def _matrix(figure: Any, shape: tuple[int, ...], argument: str, where: str) -> list[Fraction]:
    rows, columns = shape
    if isinstance(figure, Fraction):
        return [figure] * (rows * columns)
    # A flat list serves where the matrix has one row or one column, as it does in a model.
    if figure and not any(isinstance(row, tuple) for row in figure) and 1 in shape:
        figure = (figure,) if rows == 1 else tuple((item,) for item in figure)
    lengths = [len(row) if isinstance(row, tuple) else -1 for row in figure]
    if lengths != [columns] * rows:
        raise _misfit(argument, where, f"{rows} rows of {columns}")
    flat = [item for row in figure for item in row]
    return _all_numbers(flat, argument, where, f"{rows} rows of {columns}")


def _table(figure: Any, table: Table, argument: str, where: str) -> list[Fraction]:
    if isinstance(figure, Fraction):
        return [figure for row in table for polynomial in row for _ in polynomial]
    flat = not any(isinstance(item, tuple) for item in figure)
    single = len(table) == 1 and len(table[0]) == 1
    if flat and (single or len({len(p) for row in table for p in row}) <= 1):
        # One list for all entries, as a flat denominator serves them all.
        figure = tuple(tuple(figure for _ in row) for row in table)
    wanted = f"lists of the shape of the {where.rpartition(', ')[2]}"
    if len(figure) != len(table):
        raise _misfit(argument, where, wanted)
    found: list[Fraction] = []
    for figures, row in zip(figure, table, strict=True):
        if not isinstance(figures, tuple) or len(figures) != len(row):
            raise _misfit(argument, where, wanted)
        for item, polynomial in zip(figures, row, strict=True):
            found += _coefficients(item, len(polynomial), argument, where)
    return found


def _coefficients(item: Any, count: int, argument: str, where: str) -> list[Fraction]:
    if isinstance(item, Fraction):
        return [item] * count
    surplus = len(item) - count
    # The transfer matrix dropped leading zeros, which stay zero.
    if surplus < 0 or any(item[:surplus]):
        raise _misfit(argument, where, f"{count} coefficients, zero for any leading zero")
    return _all_numbers(item[surplus:], argument, where, f"{count} coefficients")


def _all_numbers(flat: Sequence[Any], argument: str, where: str, wanted: str) -> list[Fraction]:
    if any(isinstance(item, tuple) for item in flat):
        raise _misfit(argument, where, wanted)
    return list(flat)


def _misfit(argument: str, where: str, wanted: str) -> UncertaintyError:
    return UncertaintyError(
        f"{where}: found a shape that is not that of the model, wanted {wanted}, or one number "
        "for all",
        argument=argument,
        where=where,
    )


# Rounding


def _ulp(entry: Entry) -> Fraction:
    if not entry:
        return _ZERO
    if isinstance(entry, float):
        return Fraction(math.ulp(entry))
    near = round_fraction(entry, "entry")
    return _ZERO if Fraction(near) == entry else Fraction(math.ulp(near))


def _last_digit(entry: Entry) -> Fraction:
    if not entry:
        return _ZERO
    if isinstance(entry, float):
        exponent = cast(int, Decimal(float.__repr__(entry)).as_tuple().exponent)
        return Fraction(10) ** exponent / 2
    digits = _decimal_digits(entry)
    return Fraction(1, 2 * 10**digits) if digits else _ZERO


def _decimal_digits(number: Fraction) -> int:
    """Return the digits after the point of a decimal; 0 for an integer and for what is none."""
    denominator = number.denominator
    twos = (denominator & -denominator).bit_length() - 1
    rest, fives = denominator >> twos, 0
    while rest % 5 == 0:
        rest, fives = rest // 5, fives + 1
    return max(twos, fives) if rest == 1 else 0
