"""Whether two models have the same transfer matrix, decided exactly."""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from itertools import count
from typing import Any

import numpy as np

from realize import exact
from realize.errors import EntryError
from realize.testing.reading import rational_model

__all__ = ["Compared", "same_transfer"]

Array = np.ndarray[Any, Any]


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Compared:
    """Truthy when the two are the same.

    Attributes
    ----------
    counterexample : (Fraction, array, array) or None
        A point that is a pole of neither, and the two values there.
    """

    counterexample: tuple[Fraction, Array, Array] | None

    def __bool__(self) -> bool:
        return self.counterexample is None


def same_transfer(first: Any, second: Any, *, reading: str) -> Compared:
    """Return whether two models of one shape and sampling period have the same transfer matrix.

    D and n1 + n2 Markov parameters of the difference decide: the difference is a model of order
    n1 + n2, so by the theorem of Cayley and Hamilton all others vanish with them.
    """
    left, right = (rational_model(thing, reading) for thing in (first, second))
    number = left.order + right.order + 1
    pair = [exact.markov_parameters(model, number) for model in (left, right)]
    if (pair[0] == pair[1]).all():
        return Compared(counterexample=None)
    transfers = [exact.transfer_matrix(model) for model in (left, right)]
    # The difference has finitely many zeros and poles; the points 0, 1, -1, 2, ... pass them all.
    for k in count():
        point = Fraction((k + 1) // 2 * (-1) ** (k + 1))
        try:
            values = [transfer.evaluate(point) for transfer in transfers]
        except EntryError:
            # A pole of one of the two, or of a mode that is hidden.
            continue
        if (values[0] != values[1]).any():
            return Compared(counterexample=(point, values[0], values[1]))
    raise AssertionError("unreachable")
