"""Modes that agree, and poles and zeros that do, within what the data can tell."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
import scipy.linalg

from realize.errors import EntryError
from realize.model.realization import Realization
from realize.results import Mode, Part
from realize.tolerance import UNIT_ROUNDOFF
from realize.uncertainty import MatrixRadii
from realize.within.box import doubles_above, in_doubles

__all__ = ["Alike", "alike"]

Array = np.ndarray[Any, Any]

_AT_INFINITY: Final = 1e-8
"""Share of its partner below which the second of a pair of generalised eigenvalues is zero."""

_BLURRED: Final = 0.1
"""Sensitivity over the largest entry of A above which a value says nothing: it agrees with none."""


@dataclass(frozen=True, kw_only=True, slots=True)
class Alike:
    """Two values that the data do not tell apart.

    Attributes
    ----------
    first, second : complex
        A mode, and another mode or an invariant zero (units: 1 / time; none in discrete time).
    is_zero : bool
        Whether the second is a zero.
    apart : float
        How far apart they are.
    within : float
        How far the data can move the two together, to first order.
    """

    first: complex
    second: complex
    is_zero: bool
    apart: float
    within: float

    def to_dict(self) -> dict[str, Any]:
        """Return the pair as plain JSON values."""
        return {
            "first": [self.first.real, self.first.imag],
            "second": [self.second.real, self.second.imag],
            "is_zero": self.is_zero,
            "apart": self.apart,
            "within": self.within,
        }


def alike(
    modes: Iterable[Mode], model: Realization, radii: MatrixRadii | None
) -> tuple[Alike, ...]:
    """Return the pairs of modes, and of visible modes and zeros, that agree within the data.

    Values that are equal exactly are not listed. Zeros are those of a model with as many outputs
    as inputs, less one beside each hidden mode, which is a zero of the model and no pole beside
    it. A pair stands for its upper member.

    Parameters
    ----------
    modes : iterable of Mode, with sensitivities
    radii : MatrixRadii or None
        None: every entry is good to one ulp.
    """
    try:
        matrices = tuple(in_doubles(matrix) for matrix in model.matrices())
    except EntryError:
        return ()
    size = float(np.abs(matrices[0]).max(initial=0.0))
    upper = [
        mode
        for mode in modes
        if mode.value.imag >= 0
        and mode.sensitivity is not None
        and mode.sensitivity <= _BLURRED * size
    ]
    found: list[Alike] = []
    for at, mode in enumerate(upper):
        for other in upper[at + 1 :]:
            if mode.polynomial is None or mode.polynomial != other.polynomial:
                _compare(found, mode, other.value, other.sensitivity or 0.0, is_zero=False)
    visible = [mode for mode in upper if mode.part is Part.CONTROLLABLE_OBSERVABLE]
    hidden = [mode.value for mode in upper if mode.part is not Part.CONTROLLABLE_OBSERVABLE]
    # Where numbers overflow, no zero is found that is finite.
    with np.errstate(all="ignore"):
        every = _zeros(matrices, radii)
    zeros = [zero for zero in every if zero[0].imag >= 0 and zero[1] <= _BLURRED * size]
    for value in hidden:
        if zeros:
            zeros.pop(min(range(len(zeros)), key=lambda k: abs(zeros[k][0] - value)))
    for mode in visible:
        for zero, sensitivity in zeros:
            _compare(found, mode, zero, sensitivity, is_zero=True)
    return tuple(found)


def _compare(
    found: list[Alike], mode: Mode, value: complex, sensitivity: float, *, is_zero: bool
) -> None:
    apart = abs(mode.value - value)
    within = (mode.sensitivity or 0.0) + sensitivity
    if apart <= within and within > 0:
        found.append(
            Alike(first=mode.value, second=value, is_zero=is_zero, apart=apart, within=within)
        )


def _zeros(matrices: Sequence[Array], radii: MatrixRadii | None) -> list[tuple[complex, float]]:
    """Return the finite invariant zeros and how far the data move each, to first order.

    They are the eigenvalues of the pencil [A - z I, B; C, D]; with left and right vectors y and x
    one moves by no more than |y|' E |x| / |y' N x|, N = diag(I, 0).
    """
    A, B, C, D = matrices
    n, inputs = B.shape
    if inputs != C.shape[0] or not n or not inputs:
        return []
    whole = np.block([[A, B], [C, D]])
    if radii is None:
        data = UNIT_ROUNDOFF * np.abs(whole)
    else:
        each = (doubles_above(radius) for radius in (radii.A, radii.B, radii.C, radii.D))
        r_A, r_B, r_C, r_D = each
        data = np.block([[r_A, r_B], [r_C, r_D]])
    ones = np.diag(np.concatenate([np.ones(n), np.zeros(inputs)]))
    (above, below), left, right = scipy.linalg.eig(
        whole, ones, left=True, right=True, homogeneous_eigvals=True
    )
    found = []
    for k in range(n + inputs):
        overlap = float(abs(np.vdot(left[:n, k], right[:n, k])))
        if abs(below[k]) <= _AT_INFINITY * abs(above[k]) or not overlap:
            continue
        change = float(np.abs(left[:, k]) @ data @ np.abs(right[:, k])) / overlap
        if math.isfinite(change) and below[k]:
            found.append((complex(above[k] / below[k]), change))
    return found
