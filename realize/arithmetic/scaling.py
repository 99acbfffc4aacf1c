"""Scaling by powers of two, so that the user's units do not change a verdict.

Every state, input and output is given a power of two as its unit, and time one more. Three steps:

1. Breadth-first potentials on the zero pattern: the entries on the tree get exponent 0. Two models
   that differ by powers of two in their units become the same model here, bit for bit.
2. Least squares of log2|entry| over all units, that of time included, rounded.
3. Norm balancing of the states (Parlett and Reinsch 1969, Numer. Math. 13; James, Langou, Lowery
   2014 for the 2-norm), with the columns of B, the rows of C and A brought to norm 1.

Scaling serves rank decisions only. It can also lift noise: an entry of 1e-17 that stands alone in
its row becomes 1. That is why the unscaled verdict stays available.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
from scipy.linalg import lapack

__all__ = ["Scaling", "scaling_of", "unscaled"]

Array = np.ndarray[Any, Any]

_RIDGE: Final = 2.0**-20
"""Weight that holds the unit of time where nothing else does, far below that of one entry."""


@dataclass(frozen=True, slots=True)
class Scaling:
    """Exponents of the units, and the model in them.

    ``A = 2^-time X^-1 (user's A) X``, ``B = X^-1 (user's B) U``, ``C = Y^-1 (user's C) X`` with
    ``X = diag(2^states)``, ``U = diag(2^inputs)``, ``Y = diag(2^outputs)``. ``scale`` is the
    Frobenius norm of ``[A B; C 0]``.
    """

    states: Array
    inputs: Array
    outputs: Array
    time: int
    A: Array
    B: Array
    C: Array
    scale: float


def unscaled(A: Array, B: Array, C: Array) -> Scaling:
    """Return the model in the user's own units."""
    states, inputs, outputs = (np.zeros(k, dtype=np.int32) for k in (*B.shape, C.shape[0]))
    return Scaling(states, inputs, outputs, 0, A, B, C, _frobenius(A, B, C))


def scaling_of(A: Array, B: Array, C: Array) -> Scaling:
    """Return the scaling of a model.

    Parameters
    ----------
    A, B, C : float arrays (n, n), (n, m), (p, n).
    """
    order, inputs = B.shape
    first_output = order + inputs
    size = first_output + C.shape[0]
    # One graph of states, inputs and outputs: entry (i, j) is how j acts on i.
    graph = np.zeros((size, size), order="F")
    graph[:order, :order] = A
    graph[:order, order:first_output] = B
    graph[first_output:, :order] = C
    units = _balanced_units(graph, order)
    states = units[:order]
    scaled_A = np.ldexp(A, states - states[:, None])
    time = _exponent(scaled_A)
    if time:
        scaled_A = np.ldexp(scaled_A, -time)
    scaled_B, by_input = _normalised(np.ldexp(B, units[order:first_output] - states[:, None]), 0)
    scaled_C, by_output = _normalised(np.ldexp(C, states - units[first_output:, None]), 1)
    return Scaling(
        states,
        units[order:first_output] - by_input,
        units[first_output:] + by_output,
        time,
        scaled_A,
        scaled_B,
        scaled_C,
        _frobenius(scaled_A, scaled_B, scaled_C),
    )


def _balanced_units(graph: Array, order: int) -> Array:
    """Return the exponents of the units of states, inputs and outputs."""
    mantissas, exponents = np.frexp(graph)
    pattern = mantissas != 0.0
    units, roots = _tree_potentials(pattern, exponents)
    units = _least_squares(pattern, mantissas, exponents, units, roots, order)
    np.ldexp(graph, units - units[:, None], out=graph)
    # A at norm 1 while the states are balanced: its weight against B and C must not depend on
    # the unit of time.
    block = graph[:order, :order]
    time = _exponent(block)
    if time:
        np.ldexp(block, -time, out=block)
    factors = lapack.dgebal(graph, scale=1, permute=0, overwrite_a=1)[3]
    moved: Array = np.frexp(factors)[1]
    return units + moved - 1


def _frobenius(A: Array, B: Array, C: Array) -> float:
    return math.sqrt(np.vdot(A, A) + np.vdot(B, B) + np.vdot(C, C))


def _exponent(A: Array) -> int:
    """Return the power of two next above the Frobenius norm; 0 for a zero matrix."""
    return math.frexp(math.sqrt(np.vdot(A, A)))[1]


def _normalised(M: Array, axis: int) -> tuple[Array, Array]:
    """Bring columns (axis 0) or rows (axis 1) to norms from 1/2 to 1, by powers of two."""
    exponents = np.frexp(np.sqrt((M * M).sum(axis=axis)))[1]
    return np.ldexp(M, -exponents if axis == 0 else -exponents[:, None]), exponents


def _tree_potentials(pattern: Array, exponents: Array) -> tuple[Array, list[int]]:
    """Return potentials that give the entries of a breadth-first forest exponent 0, and its roots.

    The tree depends on the zero pattern alone, so the scaled model does not depend on the units.
    """
    size = pattern.shape[0]
    linked = pattern | pattern.T
    units = np.zeros(size, dtype=np.int32)
    waiting = np.ones(size, dtype=bool)
    roots: list[int] = []
    left = size
    for root in range(size):
        if not left:
            break
        if not waiting[root]:
            continue
        roots.append(root)
        waiting[root] = False
        left -= 1
        queue = [root]
        for node in queue:
            if not left:
                break
            children = (linked[node] & waiting).nonzero()[0]
            if not children.size:
                continue
            waiting[children] = False
            left -= children.size
            units[children] = units[node] + np.where(
                pattern[node, children], -exponents[node, children], exponents[children, node]
            )
            queue.extend(children.tolist())
    return units, roots


def _least_squares(
    pattern: Array,
    mantissas: Array,
    exponents: Array,
    units: Array,
    roots: list[int],
    order: int,
) -> Array:
    """Refine potentials by least squares of log2|entry|, rounded to integers.

    One unknown for each node, and one for the unit of time, which is common to all entries of A.
    The normal equations are those of a graph Laplacian, grounded at the root of each component,
    bordered by time; where the pattern leaves the unit of time open, the ridge settles it. The
    whole exponents are added to the logarithms of the mantissas, so that the sums, and their
    rounding, do not depend on the user's units.
    """
    size = pattern.shape[0]
    weights = pattern.astype(float)
    logs = np.log2(np.abs(mantissas) + (1.0 - weights))
    logs += (exponents + (units - units[:, None])) * weights
    normal = np.empty((size + 1, size + 1), order="F")
    laplacian = normal[:size, :size]
    np.negative(weights + weights.T, out=laplacian)
    # The diagonal of A says nothing about nodes: its own terms cancel here and in the sums below.
    balance = weights.sum(axis=0) + weights.sum(axis=1)
    diagonal = np.einsum("ii->i", laplacian)
    diagonal += balance
    diagonal[roots] += 1.0
    state = weights[:order, :order]
    border = np.zeros(size)
    border[:order] = state.sum(axis=1) - state.sum(axis=0)
    normal[size, :size] = normal[:size, size] = border
    normal[size, size] = state.sum() + _RIDGE
    right = np.empty(size + 1)
    right[:size] = logs.sum(axis=1) - logs.sum(axis=0)
    right[size] = logs[:order, :order].sum()
    solution, info = lapack.dposv(normal, right, lower=1, overwrite_a=1)[1:]
    if info:  # pragma: no cover  # the ridge and the grounds make it positive definite
        raise AssertionError(f"normal equations not positive definite (info {info})")
    steps: Array = np.rint(solution[:size]).astype(np.int32)
    return units + steps
