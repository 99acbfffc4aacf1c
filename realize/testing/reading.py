"""Which exact model a thing stands for."""

from __future__ import annotations

from typing import Any

from realize.arithmetic.exact import ExactPath
from realize.convert import as_realization
from realize.forms import realize_transfer
from realize.model.realization import Realization
from realize.model.transfer import TransferMatrix

__all__ = ["rational_model"]


def rational_model(thing: Any, reading: str) -> Realization:
    """Return the rational model: floats are read first, and only then is anything computed."""
    if isinstance(thing, TransferMatrix):
        return realize_transfer(ExactPath(), thing.read(reading))
    return as_realization(thing).read(reading)
