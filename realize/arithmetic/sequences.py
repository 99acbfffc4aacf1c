"""Realizing a finite sequence of Markov parameters in floating point.

References
----------
Ho and Kalman (1966), Effective construction of linear state-variable models from input/output
functions, Regelungstechnik 14. Kung (1978), A new identification and model reduction algorithm
via singular value decomposition, 12th Asilomar Conference. Tether (1970), Construction of minimal
linear state-variable models from finite input-output data, IEEE Trans. Automatic Control 15.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from realize import tolerance as rule
from realize.arithmetic.path import Sequenced
from realize.results import RankDecision

__all__ = ["hankel_realization", "row_realization"]

Array = np.ndarray[Any, Any]


def _in_units(parameters: Array) -> tuple[Array, int, Array, Array]:
    """Scale time, outputs and inputs by powers of two, so that units do not change the order.

    The unit of time makes the largest parameter of the second half as large as that of the first;
    outputs and inputs are brought to norm 1.
    """
    count = parameters.shape[0]
    # One power of two first, so that squares neither overflow nor vanish.
    shift = int(np.frexp(np.abs(parameters).max(initial=0.0))[1])
    parameters = np.ldexp(parameters, -shift)
    sizes = np.abs(parameters).max(axis=(1, 2), initial=0.0)
    first, second = sizes[: (count + 1) // 2], sizes[count // 2 :]
    time = 0
    if first.max(initial=0.0) > 0.0 and second.max(initial=0.0) > 0.0:
        steps = max(count // 2, 1)
        time = round((math.log2(second.max()) - math.log2(first.max())) / steps)
    scaled = np.ldexp(parameters, (-time * np.arange(count))[:, None, None])
    outputs = np.frexp(np.sqrt((scaled**2).sum(axis=(0, 2))))[1]
    scaled = np.ldexp(scaled, -outputs[:, None])
    inputs = np.frexp(np.sqrt((scaled**2).sum(axis=(0, 1))))[1]
    return np.ldexp(scaled, -inputs), time, outputs + shift, inputs


def _hankel(parameters: Array, rows: int, columns: int, start: int = 0) -> Array:
    outputs, inputs = parameters.shape[1:]
    result = np.empty((rows * outputs, columns * inputs))
    for i in range(rows):
        for j in range(columns):
            result[i * outputs : (i + 1) * outputs, j * inputs : (j + 1) * inputs] = parameters[
                start + i + j
            ]
    return result


def _decision(where: str, M: Array, values: Array, rank: int, scale: float, cutoff: float) -> Any:
    return RankDecision(
        where=where,
        shape=(int(M.shape[0]), int(M.shape[1])),
        rank=rank,
        scale=scale,
        cutoff=cutoff,
        smallest_kept=float(values[rank - 1]) if rank else None,
        largest_dropped=float(values[rank]) if rank < values.size else None,
    )


def hankel_realization(parameters: Array, tolerance: float | None) -> Sequenced | None:
    """Realize by the singular values of the squarest Hankel matrix and one shift.

    Returns None when the result does not reproduce the data, or when the data are too short to
    shift.
    """
    count, outputs, inputs = parameters.shape
    if count < 2 or not outputs or not inputs:
        return None
    scaled, time, by_output, by_input = _in_units(parameters)
    rows = count // 2
    columns = count - rows
    M = _hankel(scaled, rows, columns)
    U, values, Vt = np.linalg.svd(M, full_matrices=False)
    scale = float(np.linalg.norm(scaled))
    cutoff = rule.cutoff(count, scale, tolerance)
    rank = int(np.count_nonzero(values > cutoff))
    root = np.sqrt(values[:rank])
    observe, control = U[:, :rank] * root, root[:, None] * Vt[:rank]
    # The shift needs one more parameter than rows + columns - 1, so the last block row is left out.
    upper, lower = observe[: (rows - 1) * outputs], observe[outputs:]
    if upper.shape[0] < rank:
        return None
    A = np.linalg.lstsq(upper, lower, rcond=None)[0]
    B, C = control[:, :inputs], observe[:outputs]
    power = B
    for k in range(count):
        if np.abs(C @ power - scaled[k]).max(initial=0.0) > cutoff:
            return None
        power = A @ power
    return Sequenced(
        A=np.ldexp(A, time),
        B=np.ldexp(B, by_input),
        C=np.ldexp(C, by_output[:, None]),
        decisions=(_decision("hankel", M, values, rank, scale, cutoff),),
    )


def row_realization(parameters: Array, tolerance: float | None) -> Sequenced:
    """Take the rows of the Hankel matrix in order; a row is new when its residual is kept."""
    count, outputs, inputs = parameters.shape
    scaled, time, by_output, by_input = _in_units(parameters)
    scale = float(np.linalg.norm(scaled))
    cutoff = rule.cutoff(count, scale, tolerance)
    taken: list[tuple[int, int]] = []
    relation: dict[tuple[int, int], Array] = {}
    pending = list(range(outputs))
    decisions: list[RankDecision] = []
    for block in range(count):
        columns = count - block
        for output in tuple(pending):
            row = scaled[block:, output].reshape(-1)
            basis = np.array([scaled[b : b + columns, o].reshape(-1) for b, o in taken]).reshape(
                len(taken), columns * inputs
            )
            solution = np.linalg.lstsq(basis.T, row, rcond=None)[0]
            residual = float(np.linalg.norm(row - basis.T @ solution))
            new = residual > cutoff
            decisions.append(
                _decision(
                    f"hankel, row {block + 1} of output {output + 1}",
                    basis.T[:, :1] if taken else row[:, None],
                    np.array([residual]),
                    int(new),
                    scale,
                    cutoff,
                )
            )
            if new:
                taken.append((block, output))
            else:
                relation[block, output] = solution
                pending.remove(output)
    order = len(taken)
    place = {row: k for k, row in enumerate(taken)}

    def expressed(row: tuple[int, int]) -> Array:
        result = np.zeros(order)
        if row in place:
            result[place[row]] = 1.0
        elif row in relation:
            result[: relation[row].size] = relation[row]
        return result

    A = np.array([expressed((b + 1, o)) for b, o in taken]).reshape(order, order)
    B = np.array([scaled[b, o] for b, o in taken]).reshape(order, inputs)
    C = np.array([expressed((0, o)) for o in range(outputs)]).reshape(outputs, order)
    return Sequenced(
        A=np.ldexp(A, time),
        B=np.ldexp(B, by_input),
        C=np.ldexp(C, by_output[:, None]),
        decisions=tuple(decisions),
    )
