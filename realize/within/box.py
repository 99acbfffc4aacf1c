"""A box of models: an exact centre, and how far each entry may lie from it."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from typing import Any, Final

import numpy as np

from realize.arithmetic.scaling import Scaling, scaling_of
from realize.entries import round_entry
from realize.errors import PrecisionError
from realize.model.realization import Kind, Realization
from realize.results import Side
from realize.uncertainty import MatrixRadii, Uncertainty

__all__ = ["Box", "InDoubles", "Pencil", "doubles_above", "in_doubles"]

Array = np.ndarray[Any, Any]

_TINY: Final = 2.0**-1000
"""Bound on what is lost where scaling by a power of two leaves the range of normal doubles."""


@dataclass(frozen=True, slots=True, eq=False)
class Box:
    """All models whose entries lie within radii of a centre, entry by entry.

    Attributes
    ----------
    centre : Realization
        Rational: the entries as they were given, doubles as they are stored.
    radii : MatrixRadii
    """

    centre: Realization
    radii: MatrixRadii

    @classmethod
    def of(cls, model: Realization, uncertainty: Uncertainty) -> Box:
        """Return the box of a model.

        Raises
        ------
        UncertaintyError
            When the uncertainty does not fit the model.
        UnsupportedEntryError
            When the model has irrational constants.
        """
        radii = uncertainty.radii(model)
        return cls(_like(model, [_fractions(matrix) for matrix in model._as_given()]), radii)

    def _pairs(self) -> list[tuple[Array, Array]]:
        radii = self.radii
        return list(zip(self.centre.matrices(), (radii.A, radii.B, radii.C, radii.D), strict=True))

    def distance(self, model: Realization) -> Fraction | float:
        """Return the largest change of an entry over its radius; inf where a fixed one changed."""
        largest: Fraction | float = Fraction(0)
        for matrix, (centre, radii) in zip(model.matrices(), self._pairs(), strict=True):
            for entry, middle, radius in zip(matrix.flat, centre.flat, radii.flat, strict=True):
                if entry != middle:
                    largest = max(largest, abs(entry - middle) / radius if radius else math.inf)
        return largest

    def holds(self, model: Realization) -> bool:
        """Whether a rational model lies in the box, compared exactly."""
        return self.distance(model) <= 1

    def moved(self, changes: tuple[Array, Array, Array]) -> Realization:
        """Return the centre with exact changes of A, B and C."""
        A, B, C, D = self.centre.matrices()
        return _like(self.centre, [A + changes[0], B + changes[1], C + changes[2], D.copy()])


@dataclass(frozen=True, slots=True, eq=False)
class Pencil:
    """[A - zI, B], or [A' - zI, C'] for side "output", in doubles and in units of its own.

    Attributes
    ----------
    matrix, radius : float arrays (n, n + m)
        [A, B] rounded, and numbers not below the radii.
    lost : float array (n, n + m)
        Not below what rounding took from `matrix`.
    exact : object array of Fraction (n, n + m)
        `matrix` before it was rounded.
    """

    matrix: Array
    radius: Array
    lost: Array
    exact: Array

    @property
    def order(self) -> int:
        """Number of states."""
        return int(self.matrix.shape[0])


def in_doubles(matrix: Array) -> Array:
    """Return entries of any kind as doubles.

    Raises
    ------
    EntryError
        When one lies beyond the range of doubles.
    """
    if matrix.dtype != object:
        return matrix
    flat = [round_entry(entry, "entry") for entry in matrix.ravel().tolist()]
    return np.array(flat, dtype=float).reshape(matrix.shape)


class InDoubles:
    """A box in doubles, in units that are powers of two, so that they lose nothing.

    A point z of the user is ``z * 2**-time`` here; a right vector x is ``x * 2**-states``, a left
    one ``u * 2**states``.

    Raises
    ------
    PrecisionError
        When no units bring the entries into the range of doubles, or radii lie beyond it.
    """

    def __init__(self, box: Box) -> None:
        A, B, C = (in_doubles(matrix) for matrix in box.centre.matrices()[:3])
        scaling = scaling_of(A, B, C)
        self.time, self.states = scaling.time, scaling.states.astype(np.int64)
        self.A, self.B, self.C = self._in_units((A, B, C), scaling)
        radii = (box.radii.A, box.radii.B, box.radii.C)
        self.radii = self._in_units(tuple(map(doubles_above, radii)), scaling)
        if not all(np.isfinite(radius).all() for radius in self.radii):
            raise PrecisionError(
                "the uncertainty of an entry is too large for doubles; give a smaller one"
            )
        given = box.centre.matrices()[:3]
        lost = (
            doubles_above(np.abs(matrix - _fractions(near)))
            for matrix, near in zip(given, (A, B, C), strict=True)
        )
        self.lost = self._in_units(tuple(lost), scaling)
        self.exact = self._in_units(given, scaling, _shifted)

    @staticmethod
    def _in_units(
        matrices: tuple[Array, ...],
        scaling: Scaling,
        shift: Callable[[Array, Array], Array] = np.ldexp,
    ) -> tuple[Array, ...]:
        states = scaling.states.astype(np.int64)
        A, B, C = matrices
        return (
            shift(A, states[None, :] - states[:, None] - scaling.time),
            shift(B, scaling.inputs.astype(np.int64)[None, :] - states[:, None]),
            shift(C, states[None, :] - scaling.outputs.astype(np.int64)[:, None]),
        )

    def pencil(self, side: Side) -> Pencil:
        """Return the pencil of one side."""
        of: Callable[[Array, Array, Array], Array]
        if side is Side.INPUT:
            of = lambda A, B, C: np.hstack([A, B])  # noqa: E731  # one expression, two shapes
        else:
            of = lambda A, B, C: np.hstack([A.T, C.T])  # noqa: E731
        return Pencil(
            of(self.A, self.B, self.C),
            of(*self.radii) + _TINY,
            of(*self.lost) + _TINY,
            of(*self.exact),
        )

    def point(self, z: complex) -> complex:
        """Return a point in the user's units."""
        return complex(math.ldexp(z.real, self.time), math.ldexp(z.imag, self.time))


def _like(model: Realization, matrices: list[Array]) -> Realization:
    return Realization._trusted(
        *matrices,
        kind=Kind.RATIONAL,
        sampling_period=model.sampling_period,
        state_names=model.state_names,
        input_names=model.input_names,
        output_names=model.output_names,
    )


def _fractions(matrix: Array) -> Array:
    result = np.empty(matrix.size, dtype=object)
    result[:] = [Fraction(entry) for entry in matrix.ravel().tolist()]
    return result.reshape(matrix.shape)


def _shifted(matrix: Array, exponents: Array) -> Array:
    """Multiply exact numbers by powers of two."""
    result = np.empty(matrix.shape, dtype=object)
    for place, entry in np.ndenumerate(matrix):
        result[place] = entry * Fraction(2) ** int(exponents[place])
    return result


def doubles_above(matrix: Array) -> Array:
    """Return doubles that are not below exact numbers."""
    flat = [_double_above(entry) for entry in matrix.ravel().tolist()]
    return np.array(flat, dtype=float).reshape(matrix.shape)


def _double_above(number: Fraction) -> float:
    try:
        near = float(number)
    except OverflowError:
        return math.inf
    return near if Fraction(near) >= number else math.nextafter(near, math.inf)
