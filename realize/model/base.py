"""What the two kinds of model share: names, sampling period, identity, freezing."""

from __future__ import annotations

import hashlib
import json
from collections.abc import Callable, Iterator, Sequence
from fractions import Fraction
from typing import Any, ClassVar, Self

import numpy as np

from realize.entries import (
    EXACT_READINGS,
    Constant,
    Entry,
    Kind,
    Reading,
    is_constant,
    known_word,
    parse_entry,
    read_float,
    spell_fraction,
)
from realize.errors import (
    EntryError,
    RealizeError,
    SamplingPeriodError,
    ShapeError,
    UnknownWordError,
    UnsupportedEntryError,
)

__all__ = [
    "Names",
    "Period",
    "SystemModel",
    "count_text",
    "default_names",
    "encode_entry",
    "entry_reader",
    "expression",
    "fit_names",
    "own_names",
    "parse_names",
    "parse_period",
    "refuse_masked",
]

Names = tuple[str, ...]
Period = float | Fraction | None


def encode_entry(entry: Entry | Constant) -> float | str:
    """Return an entry as JSON holds it: a double as a number, anything else as a string.

    An expression of sympy is spelled in full, which tells it from every other, for a digest.
    """
    if isinstance(entry, float):
        # The sign of a zero says nothing about a model; adding 0.0 drops it.
        return entry + 0.0
    if isinstance(entry, Fraction):
        return spell_fraction(entry)
    import sympy

    return str(sympy.srepr(entry))


def expression(entry: Entry | Constant) -> Any:
    """Return an entry as an expression of sympy, a float as the number it is."""
    import sympy

    if isinstance(entry, float):
        entry = Fraction(entry)
    if isinstance(entry, Fraction):
        return sympy.Rational(entry.numerator, entry.denominator)
    return entry


def entry_reader(reading: Reading) -> Callable[[Entry | Constant], Fraction | Constant]:
    """Return the function that reads floats by a reading and leaves other entries alone."""
    zero = Fraction(0)

    def read(entry: Entry | Constant) -> Fraction | Constant:
        if not isinstance(entry, float):
            return entry
        return read_float(entry, reading) if entry else zero

    return read


def parse_names(names: Sequence[str] | None, argument: str) -> Names | None:
    """Return the names as a tuple, checked one by one; None means the default names."""
    if names is None:
        return None
    if isinstance(names, str) or not isinstance(names, Sequence):
        raise UnsupportedEntryError(
            f"{argument}: found a value of type {type(names).__name__}; give a list of texts",
            where=argument,
            found=type(names).__name__,
        )
    for name in names:
        if not isinstance(name, str):
            raise UnsupportedEntryError(
                f"{argument}: found a name of type {type(name).__name__}; a name is a text",
                where=argument,
                found=type(name).__name__,
            )
        if not name or not name.isprintable():
            # Names are printed on terminals and may come from someone else's file.
            raise EntryError(
                f"{argument}: {name!r} is empty or holds control characters; "
                "give a name that can be printed",
                where=argument,
                found=name,
            )
    if len(set(names)) != len(names):
        twice = next(name for name in names if list(names).count(name) > 1)
        raise EntryError(
            f"{argument}: {twice!r} occurs twice; names tell things apart, make them different",
            where=argument,
            found=twice,
        )
    return tuple(str(name) for name in names)


def fit_names(names: Names | None, letter: str, count: int, argument: str) -> Names | None:
    """Return the names if their number is right; None if they are the default ones."""
    if names is None:
        return None
    if len(names) != count:
        raise ShapeError(
            f"{argument}: found {len(names)} names, wanted {count}; give one name each, "
            "or leave the argument out",
            where=argument,
            found=len(names),
            wanted=count,
        )
    return own_names(names, letter)


def own_names(names: Names | None, letter: str) -> Names | None:
    """Return the names, None if they are the default ones."""
    return None if names is None or names == default_names(letter, len(names)) else names


def default_names(letter: str, count: int) -> Names:
    """Names by number, from one."""
    return tuple(f"{letter}{index}" for index in range(1, count + 1))


def parse_period(period: Any) -> Period:
    """Return a sampling period: None for continuous time, or a positive number."""
    if period is None:
        return None
    try:
        number = parse_entry(period, "sampling_period")
    except RealizeError as error:
        raise SamplingPeriodError(
            f"{error.message}; a sampling period is a positive number, or None for continuous time",
            found=repr(period)[:60],
        ) from error
    if number <= 0:
        raise SamplingPeriodError(
            f"sampling_period: found {period!r}, wanted a positive number, "
            "or None for continuous time",
            found=repr(period)[:60],
        )
    return number


def refuse_masked(value: Any, where: str) -> None:
    """Refuse arrays of numpy.ma with entries masked, whose values mean nothing."""
    if isinstance(value, np.ma.MaskedArray) and np.ma.is_masked(value):
        raise EntryError(f"{where}: an entry is masked; fill it in", where=where, found="masked")


class SystemModel:
    """Names, sampling period, equality, digest and pickling of a model.

    A subclass keeps its numbers in slots of its own and gives `_body` (its numbers as a JSON
    object), `_key` (its numbers as something hashable) and the pair `_state` and `_restore`.
    """

    __slots__ = (
        "_digest",
        "_input_names",
        "_kind",
        "_origin",
        "_output_names",
        "_sampling_period",
    )

    _KEY: ClassVar[str]
    """The name of the numbers in a document: "realization" or "transfer"."""

    _digest: str | None
    _input_names: Names | None
    _kind: Kind
    # The reading that made this model, and the model that was read; filled by `read` alone. No
    # part of the model's identity.
    _origin: tuple[Reading, SystemModel]
    _output_names: Names | None
    _sampling_period: Period

    @property
    def kind(self) -> Kind:
        """The arithmetic the entries call for.

        "floating" when any is a float; else "parametric" when any is an irrational constant; else
        "rational".
        """
        return self._kind

    @property
    def sampling_period(self) -> Period:
        """None in continuous time; else the sampling period, in the model's unit of time."""
        return self._sampling_period

    @property
    def input_count(self) -> int:
        """The number of inputs."""
        raise NotImplementedError

    @property
    def output_count(self) -> int:
        """The number of outputs."""
        raise NotImplementedError

    @property
    def input_names(self) -> Names:
        """The names of the inputs, u1, u2, ... unless given."""
        if self._input_names is None:
            return default_names("u", self.input_count)
        return self._input_names

    @property
    def output_names(self) -> Names:
        """The names of the outputs, y1, y2, ... unless given."""
        if self._output_names is None:
            return default_names("y", self.output_count)
        return self._output_names

    @property
    def digest(self) -> str:
        """SHA-256 of the canonical document of the model, in hexadecimal.

        The same on every machine. Equal models have equal digests: names, sampling period and
        the kind of each entry count, the sign of a zero does not.
        """
        if self._digest is None:
            text = json.dumps(
                self._document(), sort_keys=True, separators=(",", ":"), ensure_ascii=True
            )
            self._digest = hashlib.sha256(text.encode("ascii")).hexdigest()
        return self._digest

    @property
    def provenance(self) -> tuple[str, str]:
        """The reading that made this model, and the digest of the table that was read.

        "given" and its own digest for a model that is no reading of another.
        """
        if hasattr(self, "_origin"):
            reading, table = self._origin
            return str(reading), table.digest
        return str(Reading.GIVEN), self.digest

    def _read_from(self, reading: Reading, table: SystemModel) -> Self:
        """Remember where this model comes from, and return it."""
        self._origin = reading, table
        return self

    def _body(self) -> dict[str, Any]:
        """Return the numbers of the model as a JSON object, entries by `encode_entry`."""
        raise NotImplementedError

    def _extras(self) -> dict[str, Any]:
        """Return what the numbers do not tell: sizes, and the kind, where there are no entries."""
        raise NotImplementedError

    def _names(self) -> dict[str, Names | None]:
        """Return the names that are not the default ones, by the name of their argument."""
        return {
            "input_names": own_names(self._input_names, "u"),
            "output_names": own_names(self._output_names, "y"),
        }

    def _key(self) -> tuple[Any, ...]:
        """Return the numbers of the model, hashable, equal exactly when those of two models are."""
        raise NotImplementedError

    def _placed(self) -> Iterator[tuple[str, Entry | Constant]]:
        """Yield the numbers as they were given, with places in words; none if all are doubles."""
        raise NotImplementedError

    def _readable(self) -> Iterator[tuple[str, Entry | Constant]]:
        """Yield the numbers that `read` goes back to, with places; none if all are doubles."""
        return self._placed()

    def _holds_constants(self) -> bool:
        """Whether `read` would meet an irrational constant."""
        return self._kind is not Kind.RATIONAL and any(
            is_constant(entry) for _, entry in self._readable()
        )

    def _refuse_constants(
        self, advice: str, placed: Iterator[tuple[str, Entry | Constant]] | None = None
    ) -> None:
        """Refuse a model that holds irrational constants, naming the first.

        ``placed``: the numbers to look at, unless they are those of the model itself.

        Raises
        ------
        UnsupportedEntryError
            Saying where it is, and the advice.
        """
        if self._kind is Kind.RATIONAL:
            return
        for where, entry in self._placed() if placed is None else placed:
            if is_constant(entry):
                raise UnsupportedEntryError(
                    f"{where}: found the irrational constant {entry}; {advice}",
                    where=where,
                    found=type(entry).__name__,
                )

    def _state(self) -> tuple[Any, ...]:
        """Return the arguments from which `_restore` makes the model again."""
        raise NotImplementedError

    @classmethod
    def _restore(cls, *state: Any) -> Self:
        """Return the model that `_state` described."""
        raise NotImplementedError

    def _document(self) -> dict[str, Any]:
        """Return the model as a JSON document; see the schema beside this module."""
        document: dict[str, Any] = {
            "format": "realize-model",
            "version": 1,
            self._KEY: self._body(),
            "sampling_period": None
            if self._sampling_period is None
            else encode_entry(self._sampling_period),
        }
        document.update(self._extras())
        for argument, names in self._names().items():
            if names is not None:
                document[argument] = list(names)
        return document

    def _reading(self, reading: str) -> Reading | None:
        """Return the reading to apply, None when there is nothing to read."""
        word = known_word(Reading, reading, "reading")
        self._refuse_constants(
            "no rational number is what it stands for, so the model has no reading. Use "
            "realize.multiprecision, which takes any number of digits of it, or to_float()",
            self._readable(),
        )
        if self._kind is Kind.RATIONAL:
            return None if word is Reading.GIVEN else word
        if word is Reading.GIVEN:
            allowed = tuple(str(each) for each in EXACT_READINGS)
            raise UnknownWordError(
                "reading='given' is for models whose entries are all rational, and this one "
                f"holds floats; say which exact model they stand for, "
                f"with one of {', '.join(map(repr, allowed))}",
                argument="reading",
                found="given",
                allowed=allowed,
            )
        return word

    def _period_read(self, reading: Reading) -> Period:
        period = self._sampling_period
        return read_float(period, reading) if isinstance(period, float) else period

    def _period_key(self) -> tuple[str, Period]:
        return type(self._sampling_period).__name__, self._sampling_period

    def __eq__(self, other: object) -> bool:
        if type(self) is not type(other):
            return NotImplemented
        assert isinstance(other, SystemModel)
        return (
            self._kind is other._kind
            and self._period_key() == other._period_key()
            and self._names() == other._names()
            and self._key() == other._key()
        )

    def __hash__(self) -> int:
        return hash((self._kind, self._period_key(), self._key()))

    def __reduce__(self) -> tuple[Any, ...]:
        if hasattr(self, "_origin"):
            return type(self)._restore, self._state(), self._origin
        return type(self)._restore, self._state()

    def __setstate__(self, origin: tuple[Reading, SystemModel]) -> None:
        self._origin = origin

    # A model cannot change, so it is its own copy.
    def __copy__(self) -> Self:
        return self

    def __deepcopy__(self, memo: dict[int, Any]) -> Self:
        return self

    def _time_text(self) -> str:
        if self._sampling_period is None:
            return "continuous time"
        return f"sampling period {self._sampling_period}"


def count_text(count: int, thing: str) -> str:
    """Return a count with its noun: "1 state", "2 states", "no states"."""
    return f"{count or 'no'} {thing}{'' if count == 1 else 's'}"
