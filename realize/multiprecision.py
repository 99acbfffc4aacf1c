"""The forms with any number of digits, on mpmath. Models of every kind are rounded.

``digits``: decimal digits carried through the whole computation; the default is 50. Doubles enter
as the numbers they are; rationals, and irrational constants such as sqrt(2), are rounded.

``tolerance``: a singular value counts as zero when it is at most tolerance times the Frobenius
norm of the whole scaled model [A B; C 0]; None for the default, order * 10**-(digits // 2)
(`realize.tolerance`). Data that are good to fewer digits than that call for a tolerance of their
own.

Results are models of kind "rational": the numbers computed, as Fractions. They are near what was
asked for to so many digits, and nothing about them is proved.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from realize import forms
from realize.arithmetic.multiprecision import MultiprecisionPath
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
    model: Realization, *, side: str = "input", digits: int = 50, tolerance: float | None = None
) -> Staircase:
    """Return a model in staircase form. See `realize.staircase`."""
    return forms.staircase(MultiprecisionPath(digits, tolerance), model, side)


def minimal(
    source: Realization | TransferMatrix, *, digits: int = 50, tolerance: float | None = None
) -> Reduction:
    """Return a minimal realization. See `realize.minimal`."""
    return forms.minimal(MultiprecisionPath(digits, tolerance), source)


def kalman_parts(
    model: Realization, *, digits: int = 50, tolerance: float | None = None
) -> KalmanParts:
    """Return the Kalman decomposition. See `realize.kalman_parts`."""
    return forms.kalman_parts(MultiprecisionPath(digits, tolerance), model)


def companion(
    source: Realization | TransferMatrix,
    *,
    side: str = "input",
    digits: int = 50,
    tolerance: float | None = None,
) -> Realization:
    """Return a companion form. See `realize.companion`."""
    return forms.companion(MultiprecisionPath(digits, tolerance), source, side)


def transfer_matrix(
    model: Realization, *, digits: int = 50, tolerance: float | None = None
) -> TransferMatrix:
    """Return the transfer matrix of a model. See `realize.transfer_matrix`."""
    return forms.transfer_matrix(MultiprecisionPath(digits, tolerance), model)


def cancel(
    transfer: TransferMatrix,
    *,
    uncertainty: Any = None,
    digits: int = 50,
    tolerance: float | None = None,
) -> Cancellation:
    """Cancel common factors, entry by entry. See `realize.cancel`."""
    return forms.cancel(MultiprecisionPath(digits, tolerance), transfer, uncertainty)


def markov_parameters(
    model: Realization, count: int, *, digits: int = 50, tolerance: float | None = None
) -> Array:
    """Return the first Markov parameters. See `realize.markov_parameters`."""
    return forms.markov_parameters(MultiprecisionPath(digits, tolerance), model, count)


def from_markov_parameters(
    parameters: Any,
    *,
    sampling_period: Any = None,
    digits: int = 50,
    tolerance: float | None = None,
) -> Reduction:
    """Realize a sequence of Markov parameters. See `realize.from_markov_parameters`."""
    entries, shape = forms.read_parameters(parameters)
    path = MultiprecisionPath(digits, tolerance)
    return forms.realize_parameters(path, entries, shape, sampling_period)
