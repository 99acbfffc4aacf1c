"""The forms in double precision, on LAPACK. Rational models and constants are rounded.

``tolerance``: a singular value counts as zero when it is at most tolerance times the Frobenius
norm of the whole scaled model [A B; C 0]; None for the default, order * 2**-32
(`realize.tolerance`).
"""

from __future__ import annotations

from typing import Any

import numpy as np

from realize import forms
from realize.arithmetic.floating import FloatingPath
from realize.entries import round_entry
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


def staircase(
    model: Realization, *, side: str = "input", tolerance: float | None = None
) -> Staircase:
    """Return a model in staircase form. See `realize.staircase`."""
    return forms.staircase(FloatingPath(tolerance), model, side)


def minimal(source: Realization | TransferMatrix, *, tolerance: float | None = None) -> Reduction:
    """Return a minimal realization. See `realize.minimal`."""
    return forms.minimal(FloatingPath(tolerance), source)


def kalman_parts(model: Realization, *, tolerance: float | None = None) -> KalmanParts:
    """Return the Kalman decomposition. See `realize.kalman_parts`."""
    return forms.kalman_parts(FloatingPath(tolerance), model)


def companion(
    source: Realization | TransferMatrix, *, side: str = "input", tolerance: float | None = None
) -> Realization:
    """Return a companion form. See `realize.companion`."""
    return forms.companion(FloatingPath(tolerance), source, side)


def transfer_matrix(model: Realization, *, tolerance: float | None = None) -> TransferMatrix:
    """Return the transfer matrix of a model. See `realize.transfer_matrix`."""
    return forms.transfer_matrix(FloatingPath(tolerance), model)


def cancel(
    transfer: TransferMatrix, *, uncertainty: Any = None, tolerance: float | None = None
) -> Cancellation:
    """Cancel common factors, entry by entry. See `realize.cancel`."""
    return forms.cancel(FloatingPath(tolerance), transfer, uncertainty)


def markov_parameters(model: Realization, count: int, *, tolerance: float | None = None) -> Array:
    """Return the first Markov parameters. See `realize.markov_parameters`."""
    return forms.markov_parameters(FloatingPath(tolerance), model, count)


def from_markov_parameters(
    parameters: Any, *, sampling_period: Any = None, tolerance: float | None = None
) -> Reduction:
    """Realize a sequence of Markov parameters. See `realize.from_markov_parameters`."""
    given, shape = forms.read_parameters(parameters)
    entries = [round_entry(entry, "parameters") for entry in given]
    return forms.realize_parameters(FloatingPath(tolerance), entries, shape, sampling_period)
