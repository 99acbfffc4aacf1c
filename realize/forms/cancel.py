"""Cancelling common factors of a transfer matrix, entry by entry."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

from realize.arithmetic.path import Path, SharedFactor
from realize.forms.near_factors import near_factors
from realize.forms.sources import accept
from realize.model.realization import Kind
from realize.model.transfer import TransferMatrix
from realize.results import Cancellation, Deferred
from realize.stability import Stability, hidden_cautions
from realize.uncertainty import as_uncertainty

__all__ = ["cancel"]


@dataclass(frozen=True, slots=True)
class _Cancelled:
    """A mode that a cancellation hides."""

    value: complex
    stability: Stability
    part: str = "cancelled"


def cancel(path: Path, source: TransferMatrix, uncertainty: Any) -> Cancellation:
    """Return the coprime fractions, what was common, and what is nearly so."""
    accept(source, TransferMatrix)
    allowed = as_uncertainty(uncertainty)
    transfer = path.admit(source)
    given = transfer if source.kind == Kind.PARAMETRIC else source
    if allowed is not None:
        # Figures that do not fit are told at once, not at the first look at `near`.
        _ = allowed.spread(given) if allowed.is_spread else allowed.radii(given)
    outputs, inputs = range(transfer.output_count), range(transfer.input_count)
    table: list[list[SharedFactor]] = [
        [
            path.shared_factor(
                transfer.numerators[i][j],
                transfer.denominators[i][j],
                f"common factor of output {i + 1}, input {j + 1}",
            )
            for j in inputs
        ]
        for i in outputs
    ]
    coprime = TransferMatrix._trusted(
        tuple(tuple(item.numerator for item in row) for row in table),
        tuple(tuple(item.denominator for item in row) for row in table),
        kind=path.kind,
        sampling_period=transfer.sampling_period,
        input_names=transfer.input_names,
        output_names=transfer.output_names,
    )
    single = len(table) == 1 and len(table[0]) == 1
    common = tuple(tuple(item.common for item in row) for row in table)
    return Cancellation(
        transfer=coprime,
        common=common[0][0] if single else common,
        decisions=tuple(d for row in table for item in row for d in item.decisions),
        cautions=_cautions(path, common, transfer),
        _factors=Deferred(
            lambda: (
                path.factors(common[0][0])
                if single
                else tuple(tuple(path.factors(entry) for entry in row) for row in common)
            )
        ),
        _near=Deferred(lambda: near_factors(given, transfer, table, allowed)),
    )


def _cautions(
    path: Path, common: Sequence[Sequence[tuple[Any, ...]]], transfer: TransferMatrix
) -> tuple[str, ...]:
    """Return what must be said of the modes that cancel."""
    modes = [
        _Cancelled(value, stability)
        for shared_row, row in zip(common, transfer.denominators, strict=True)
        for shared, below in zip(shared_row, row, strict=True)
        if len(shared) > 1
        for value, stability in path.judged(shared, below, transfer.sampling_period)
    ]
    return hidden_cautions(modes)
