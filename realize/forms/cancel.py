"""Cancelling common factors of a transfer matrix, entry by entry."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any, Final

import numpy as np

from realize import polynomials
from realize.arithmetic.path import Path, SharedFactor
from realize.errors import NotBuiltError
from realize.forms.sources import accept
from realize.model.realization import Kind
from realize.model.transfer import TransferMatrix
from realize.results import Cancellation, Deferred, NearPair
from realize.stability import Stability, computed_stability, hidden_cautions
from realize.tolerance import root_doubt

__all__ = ["cancel"]

Array = np.ndarray[Any, Any]

NEAR: Final = 1e-4
"""Relative change of the coefficients below which a pair that it would make cancel is reported as
near. A heuristic for what is worth a line; it decides nothing."""


@dataclass(frozen=True, slots=True)
class _Cancelled:
    """A mode that a cancellation hides."""

    value: complex
    stability: Stability
    part: str = "cancelled"


def cancel(path: Path, transfer: TransferMatrix, uncertainty: Any) -> Cancellation:
    """Return the coprime fractions and what was common."""
    accept(transfer, TransferMatrix)
    if uncertainty is not None:
        raise NotBuiltError(
            "cancel takes no uncertainty yet; leave it at None. Pairs that lie close together are "
            "in the attribute near"
        )
    transfer = path.admit(transfer)
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
        _near=Deferred(lambda: near_pairs(coprime)),
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


def near_pairs(transfer: TransferMatrix) -> tuple[NearPair, ...]:
    """Return the pole-zero pairs of coprime fractions that lie close together, in doubles."""
    found: list[NearPair] = []
    exact = transfer.kind == Kind.RATIONAL
    for i in range(transfer.output_count):
        for j in range(transfer.input_count):
            above, below = transfer.numerators[i][j], transfer.denominators[i][j]
            if len(above) < 2 or len(below) < 2:
                continue
            zeros, poles = _roots(above, exact), _roots(below, exact)
            f, g = (np.array([float(c) for c in p]) for p in (above, below))
            for pole in poles:
                if pole.imag < 0:
                    continue
                zero = min(zeros, key=lambda z, p=pole: abs(z - p))  # type: ignore[misc]
                change = _smallest_change(f, g, pole, zero)
                if change > NEAR:
                    continue
                period = transfer.sampling_period
                found.append(
                    NearPair(
                        pole=pole,
                        zero=zero,
                        output=i,
                        input=j,
                        change=change,
                        response_change=_response_change(f, g, pole, zero, period),
                        stability=computed_stability(pole, period, root_doubt(pole)),
                    )
                )
    return tuple(sorted(found, key=lambda pair: pair.change))


def _roots(polynomial: tuple[Any, ...], exact: bool) -> list[complex]:
    if exact:
        return [root.value for root in polynomials.roots(polynomial)]
    return [complex(value) for value in np.roots(polynomial).tolist()]


def _smallest_change(f: Array, g: Array, pole: complex, zero: complex) -> float:
    """Return the smallest relative change of coefficients that gives both a root between the two.

    Both polynomials have unit norm; for a common root w the squared change is
    (|f(w)|^2 / sum |w|^2i) + (|g(w)|^2 / sum |w|^2i) (Karmarkar and Lakshman 1998, On approximate
    GCDs of univariate polynomials, J. Symbolic Computation 26). Searched on the segment.
    """
    f, g = f / np.linalg.norm(f), g / np.linalg.norm(g)
    w = pole + (zero - pole) * np.linspace(0.0, 1.0, 65)
    change = sum(
        np.abs(np.polyval(p, w)) ** 2 / (np.abs(w[:, None]) ** (2 * np.arange(p.size))).sum(axis=1)
        for p in (f, g)
    )
    return float(np.sqrt(np.min(change)))


def _response_change(f: Array, g: Array, pole: complex, zero: complex, period: Any) -> float:
    """Return the largest change of the frequency response when the pair is dropped, relative."""
    if period is None:
        size = max(float(np.abs(np.roots(g)).max()), 1e-300)
        near = abs(pole)
        grid = np.concatenate(
            [[0.0], np.geomspace(1e-6, 1e6, 2001) * size, near * (1 + np.linspace(-0.1, 0.1, 401))]
        )
        points = 1j * grid
    else:
        angles = np.concatenate(
            [np.linspace(0.0, math.pi, 2001), abs(np.angle(pole)) + np.linspace(-0.05, 0.05, 401)]
        )
        points = np.exp(1j * angles)
    on_boundary = np.abs(points - pole).min() == 0.0
    if on_boundary:
        return math.inf
    response = np.polyval(f, points) / np.polyval(g, points)
    factor = (points - pole) / (points - zero)
    if pole.imag:
        factor = factor * (points - pole.conjugate()) / (points - zero.conjugate())
    with np.errstate(divide="ignore", invalid="ignore"):
        change = np.abs(response * (factor - 1.0))
    largest = float(np.abs(response).max())
    finite = change[np.isfinite(change)]
    return float(finite.max()) / largest if largest and finite.size else math.inf
