"""The transfer matrix of a model, nothing cancelled."""

from __future__ import annotations

from realize.arithmetic.path import Path
from realize.forms.sources import accept
from realize.model.realization import Realization
from realize.model.transfer import TransferMatrix

__all__ = ["transfer_matrix"]


def transfer_matrix(path: Path, model: Realization) -> TransferMatrix:
    """Return numerators over the characteristic polynomial of A, entry by entry."""
    accept(model, Realization)
    opened = path.open(model)
    below, above = opened.numerators()
    return TransferMatrix._trusted(
        above,
        tuple(tuple(below for _ in row) for row in above),
        kind=path.kind,
        sampling_period=opened.model.sampling_period,
        input_names=opened.model.input_names,
        output_names=opened.model.output_names,
    )
