"""Markov parameters, from a model and back."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from realize.arithmetic.path import Path
from realize.entries import Constant, Entry, parse_entry
from realize.errors import ShapeError
from realize.forms.sources import accept
from realize.model.base import parse_period
from realize.model.realization import Realization
from realize.polynomials import ONE
from realize.results import Deferred, Reduction, RemovedModes

__all__ = ["markov_parameters", "read_parameters", "realize_parameters"]

Array = np.ndarray[Any, Any]


def markov_parameters(path: Path, model: Realization, count: int) -> Array:
    """Return D, CB, CAB, ...: an array (count, outputs, inputs)."""
    accept(model, Realization)
    if isinstance(count, bool) or not isinstance(count, (int, np.integer)):
        raise ShapeError(f"count is {count!r}; wanted an integer that is not negative")
    if count < 0:
        raise ShapeError(f"count is {count}; wanted an integer that is not negative")
    return path.open(model).markov_parameters(int(count))


def read_parameters(parameters: Any) -> tuple[list[Entry | Constant], tuple[int, int, int]]:
    """Return the entries of a sequence of Markov parameters, and its shape.

    A flat sequence is one input and one output.

    Raises
    ------
    ShapeError
        When the items do not have one shape (outputs, inputs), or there is none.
    """
    items = (
        [] if np.ndim(parameters) == 0 else [np.array(item, dtype=object) for item in parameters]
    )
    if not items:
        raise ShapeError(
            "parameters is empty; wanted at least the Markov parameter 0, which is D. "
            "Pass an array (count, outputs, inputs)"
        )
    if all(item.ndim == 0 for item in items):
        items = [item.reshape(1, 1) for item in items]
    shape = items[0].shape
    for k, item in enumerate(items):
        if item.ndim != 2 or item.shape != shape:
            raise ShapeError(
                f"parameters[{k}] has shape {item.shape}, parameters[0] has {shape}; wanted one "
                "shape (outputs, inputs) for all. Pass an array (count, outputs, inputs)"
            )
    entries = [
        parse_entry(value, f"parameters[{k}]", constants=True)
        for k, item in enumerate(items)
        for value in item.ravel().tolist()
    ]
    return entries, (len(items), int(shape[0]), int(shape[1]))


def realize_parameters(
    path: Path,
    entries: Sequence[Entry | Constant],
    shape: tuple[int, int, int],
    sampling_period: Any,
) -> Reduction:
    """Return a realization with the fewest states that has these Markov parameters."""
    values = path.array([entries], (1, len(entries))).reshape(shape)
    found = path.sequence(values[1:])
    order = found.A.shape[0]
    nothing = RemovedModes(
        count=0, polynomial=ONE if path.is_exact else None, _modes=Deferred.known(())
    )
    return Reduction(
        model=Realization._trusted(
            found.A,
            found.B,
            found.C,
            values[0],
            kind=path.kind,
            sampling_period=parse_period(sampling_period),
        ),
        order=order,
        source_order=order,
        _removed=Deferred.known(nothing),
        _state_map=Deferred.known(None),
        _decisions=Deferred.known(found.decisions),
        _condition=Deferred.known(None),
    )
