"""The forms in rational arithmetic. Floats are refused: say which exact model you mean.

Irrational constants are refused too: `realize.multiprecision` takes them.

Every answer is proved: subspaces are found modulo primes, lifted, and verified over the
rationals before anything is returned.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from realize import forms
from realize.arithmetic.exact import ExactPath
from realize.entries import is_constant
from realize.errors import InexactInputError, UnsupportedEntryError
from realize.model.realization import Realization
from realize.model.transfer import TransferMatrix
from realize.results import Cancellation, KalmanParts, Reduction, Staircase

__all__ = [
    "cancel",
    "companion",
    "from_markov_parameters",
    "kalman_parts",
    "markov_parameters",
    "minimal",
    "staircase",
    "transfer_matrix",
]

Array = np.ndarray[Any, Any]


def staircase(model: Realization, *, side: str = "input") -> Staircase:
    """Return a model in staircase form. See `realize.staircase`."""
    return forms.staircase(ExactPath(), model, side)


def minimal(source: Realization | TransferMatrix) -> Reduction:
    """Return a minimal realization. See `realize.minimal`."""
    return forms.minimal(ExactPath(), source)


def kalman_parts(model: Realization) -> KalmanParts:
    """Return the Kalman decomposition. See `realize.kalman_parts`."""
    return forms.kalman_parts(ExactPath(), model)


def companion(source: Realization | TransferMatrix, *, side: str = "input") -> Realization:
    """Return a companion form. See `realize.companion`."""
    return forms.companion(ExactPath(), source, side)


def transfer_matrix(model: Realization) -> TransferMatrix:
    """Return the transfer matrix of a model. See `realize.transfer_matrix`."""
    return forms.transfer_matrix(ExactPath(), model)


def cancel(transfer: TransferMatrix, *, uncertainty: Any = None) -> Cancellation:
    """Cancel common factors, entry by entry. See `realize.cancel`."""
    return forms.cancel(ExactPath(), transfer, uncertainty)


def markov_parameters(model: Realization, count: int) -> Array:
    """Return the first Markov parameters. See `realize.markov_parameters`."""
    return forms.markov_parameters(ExactPath(), model, count)


def from_markov_parameters(parameters: Any, *, sampling_period: Any = None) -> Reduction:
    """Realize a sequence of Markov parameters. See `realize.from_markov_parameters`."""
    entries, shape = forms.read_parameters(parameters)
    for entry in entries:
        if isinstance(entry, float):
            raise InexactInputError(
                f"parameters hold the float {entry!r}; the exact face takes rational numbers only. "
                "Write them as integers, fractions or strings, or use realize.floating"
            )
        if is_constant(entry):
            raise UnsupportedEntryError(
                f"parameters hold the irrational constant {entry}; the exact face takes rational "
                "numbers only. Use realize.multiprecision",
                where="parameters",
                found=type(entry).__name__,
            )
    return forms.realize_parameters(ExactPath(), entries, shape, sampling_period)
