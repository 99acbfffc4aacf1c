"""Companion forms, and realizing a transfer matrix as it is given."""

from __future__ import annotations

from itertools import accumulate
from typing import Any

import numpy as np

from realize.arithmetic.path import Path
from realize.entries import known_word
from realize.errors import ImproperError, NotBuiltError
from realize.forms.sources import accept
from realize.forms.transfer import transfer_matrix
from realize.model.realization import Realization
from realize.model.transfer import TransferMatrix
from realize.results import Side

__all__ = ["companion", "realize_transfer"]

Array = np.ndarray[Any, Any]


def companion(path: Path, source: Realization | TransferMatrix, side: str) -> Realization:
    """Return the controllable ("input") or observable ("output") companion form."""
    accept(source, Realization, TransferMatrix)
    word = known_word(Side, side, "side")
    source = path.admit(source)
    if source.input_count > 1 and source.output_count > 1:
        raise NotBuiltError(
            f"companion of a source with {source.input_count} inputs and {source.output_count} "
            "outputs is not built. Take one row or one column of it, or use staircase, which "
            "takes any number of inputs and outputs"
        )
    transfer = source if isinstance(source, TransferMatrix) else transfer_matrix(path, source)
    if word is Side.OUTPUT:
        return _by_columns(path, transfer.dual()).dual()
    return _by_columns(path, transfer)


def realize_transfer(path: Path, transfer: TransferMatrix) -> Realization:
    """Return a realization of a transfer matrix as given, by rows or columns, the smaller one.

    Each column (or row) is brought over one denominator and realized in companion form, one
    below the other, so that one side is controllable (or observable) from the start (Gilbert
    1963; Kailath, Linear Systems, section 6.1).
    """
    transfer = path.admit(transfer)
    turned = transfer.dual()
    columns = sum(len(below) - 1 for below, _ in _column_denominators(path, transfer))
    rows = sum(len(below) - 1 for below, _ in _column_denominators(path, turned))
    if rows < columns:
        return _by_columns(path, turned).dual()
    return _by_columns(path, transfer)


def _column_denominators(
    path: Path, transfer: TransferMatrix
) -> list[tuple[tuple[Any, ...], tuple[tuple[Any, ...], ...]]]:
    """Return, for each input, the common denominator and the cofactor of each entry's own."""
    outputs = range(transfer.output_count)
    return [
        path.common_denominator([transfer.denominators[i][j] for i in outputs])
        for j in range(transfer.input_count)
    ]


def _by_columns(path: Path, transfer: TransferMatrix) -> Realization:
    """Realize every column in controllable companion form over its common denominator."""
    inputs, outputs = transfer.input_count, transfer.output_count
    columns = _column_denominators(path, transfer)
    sizes = [len(below) - 1 for below, _ in columns]
    order = sum(sizes)
    starts = [0, *accumulate(sizes)]
    A: list[list[Any]] = [[0] * order for _ in range(order)]
    B: list[list[Any]] = [[0] * inputs for _ in range(order)]
    C: list[list[Any]] = [[0] * order for _ in range(outputs)]
    D: list[list[Any]] = [[0] * inputs for _ in range(outputs)]
    for j, (below, cofactors) in enumerate(columns):
        size, start = sizes[j], starts[j]
        for k in range(size - 1):
            A[start + k][start + k + 1] = 1
        for k in range(size):
            A[start + size - 1][start + k] = -below[size - k]
        if size:
            B[start + size - 1][j] = 1
        for i in range(outputs):
            D[i][j], rest = _over(path, transfer, i, j, cofactors[i], size)
            C[i][start : start + size] = rest[::-1]
    return Realization._trusted(
        path.array(A, (order, order)),
        path.array(B, (order, inputs)),
        path.array(C, (outputs, order)),
        path.array(D, (outputs, inputs)),
        kind=path.kind,
        sampling_period=transfer.sampling_period,
        input_names=transfer.input_names,
        output_names=transfer.output_names,
    )


def _over(
    path: Path, transfer: TransferMatrix, i: int, j: int, cofactor: tuple[Any, ...], size: int
) -> tuple[Any, list[Any]]:
    """Return an entry's feedthrough, and the numerator of the rest over the common denominator.

    The rest is taken before it is brought over the common denominator: in the products rounding
    would leave traces of what is zero, which a scaling would lift to full size.
    """
    own = transfer.denominators[i][j]
    above = transfer.numerators[i][j]
    if len(above) > len(own):
        raise ImproperError(
            f"entry (output {i + 1}, input {j + 1}) is improper: numerator of degree "
            f"{len(above) - 1} over a denominator of degree {len(own) - 1}. A realization has no "
            "such transfer function; divide out the polynomial part first"
        )
    direct = above[0] / own[0] if len(above) == len(own) else 0
    strict = tuple(value / own[0] for value in above[-len(own) + 1 :]) if len(own) > 1 else ()
    if direct:
        strict = tuple(
            path.difference(value, direct * (below / own[0]))
            for value, below in zip(strict, own[1:], strict=True)
        )
    widened = path.multiply(strict, cofactor) if any(strict) else ()
    return direct, [0] * (size - len(widened)) + list(widened)
