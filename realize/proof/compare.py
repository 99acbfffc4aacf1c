"""Whether two models have the same transfer matrix, decided exactly."""

from __future__ import annotations

from fractions import Fraction
from itertools import count
from typing import Any

import numpy as np

from realize import forms
from realize.arithmetic.exact import ExactPath
from realize.arithmetic.modular import Clock
from realize.arithmetic.path import frozen
from realize.arithmetic.rational import RationalMatrix
from realize.arithmetic.similar import point_solution, similarity
from realize.convert import as_realization
from realize.entries import Kind, Reading, known_word
from realize.model.realization import Realization
from realize.model.transfer import TransferMatrix
from realize.proof.record import Comparison, Counterexample, Difference, Side

__all__ = ["same_transfer"]

Array = np.ndarray[Any, Any]


def same_transfer(first: Any, second: Any, *, reading: str = "stored") -> Comparison:
    """Decide exactly whether two models have the same transfer matrix.

    Parameters
    ----------
    first, second : Realization or TransferMatrix
        Or whatever `as_realization` takes. Inputs and outputs are matched by position; their
        names play no part.
    reading : {"stored", "written", "intended"}, keyword-only
        Which exact numbers the floats stand for; see `Realization.read`. Rational entries stay.

    Returns
    -------
    Comparison
        True or false; ``transformation`` when both are minimal and equal, ``counterexample`` when
        the transfer matrices differ, and what each side hides.

    Raises
    ------
    UnsupportedEntryError
        When a model holds irrational constants, or is no model.
    ImproperError
        For a transfer matrix that no realization has.
    UnknownWordError
        For another reading, and for "given" when there are floats.

    Notes
    -----
    Both are reduced exactly. Minimal realizations of one transfer matrix differ by a unique change
    of coordinates, which is found modulo primes, lifted, and verified over the rationals; where it
    does not exist modulo one prime, it does not exist. Then a rational point where the values
    differ is sought among the integers: at most as many fail as there are states in both models.

    References
    ----------
    Kalman (1963), Mathematical description of linear dynamical systems, SIAM J. Control 1.
    Kailath (1980), Linear Systems, section 2.4.

    Examples
    --------
    >>> import realize
    >>> one = realize.Realization([[-1, 0], [0, -2]], [1, 1], [1, 0])
    >>> realize.same_transfer(one, realize.TransferMatrix([1], [1, 1]))
    <Comparison: the same transfer matrix, order 1>
    >>> realize.same_transfer(one, realize.TransferMatrix([1], [1, 2]))
    <Comparison: different; Counterexample: at 1 output 1, input 1 is 1/2 and 1/3>
    """
    word = known_word(Reading, reading, "reading")
    sides = _side(first, word), _side(second, word)
    orders = sides[0].reduction.order, sides[1].reduction.order
    models = sides[0].model, sides[1].model
    between = counterexample = solutions = None
    difference = _apart(*models)
    if difference is None:
        between = _between(sides)
        if between is None:
            difference = Difference.TRANSFER_MATRIX
            counterexample, solutions = _counterexample(*models)
    return Comparison(
        difference=difference,
        # The exact path leaves a minimal model in its own coordinates.
        transformation=between if models[0].order == models[1].order == orders[0] else None,
        counterexample=counterexample,
        orders=orders,
        reading=str(word),
        _sides=sides,
        _between=between,
        _solutions=solutions,
    )


def _side(thing: Any, reading: Reading) -> Side:
    """Read one side, and reduce it."""
    if not isinstance(thing, Realization | TransferMatrix):
        thing = as_realization(thing)
    source = thing
    if thing.kind is not Kind.RATIONAL or isinstance(thing.sampling_period, float):
        source = thing.read(reading)
    path = ExactPath()
    model = forms.realize_transfer(path, source) if isinstance(source, TransferMatrix) else source
    return Side(source=source, model=model, reduction=forms.reduce(path, model))


def _apart(first: Realization, second: Realization) -> Difference | None:
    """Return what makes two models differ before any value is compared."""
    if (first.output_count, first.input_count) != (second.output_count, second.input_count):
        return Difference.SIZES
    if first.sampling_period != second.sampling_period:
        return Difference.SAMPLING_PERIOD
    return None


def _between(sides: tuple[Side, Side]) -> Array | None:
    """Return the change of coordinates between the two reductions, or None."""
    first, second = (side.reduction.model for side in sides)
    if first.order != second.order or not np.array_equal(first.D, second.D):
        return None
    triples = [
        (
            RationalMatrix.from_array(model.A),
            RationalMatrix.from_array(model.B),
            RationalMatrix.from_array(model.C),
        )
        for model in (first, second)
    ]
    found = similarity(triples[0], triples[1], Clock(None))
    return None if found is None else frozen(found.to_array())


def _counterexample(
    first: Realization, second: Realization
) -> tuple[Counterexample, tuple[Array, Array]]:
    """Return an integer where the values differ, and which is an eigenvalue of neither model."""
    tables = [
        [RationalMatrix.from_array(matrix) for matrix in model.matrices()]
        for model in (first, second)
    ]
    for point in (sign * size for size in count(1) for sign in (1, -1)):
        solutions: list[RationalMatrix] = []
        for A, B, _, _ in tables:
            solution = point_solution(A, B, point)
            if solution is None:
                break
            solutions.append(solution)
        else:
            values = [C @ X + D for (_, _, C, D), X in zip(tables, solutions, strict=True)]
            if values[0] != values[1]:
                example = Counterexample(
                    point=Fraction(point),
                    first=frozen(values[0].to_array()),
                    second=frozen(values[1].to_array()),
                )
                left, right = (frozen(solution.to_array()) for solution in solutions)
                return example, (left, right)
    raise AssertionError("the integers never end")
