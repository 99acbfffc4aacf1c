"""Scaling by powers of two, so that the user's units do not change a verdict.

Every state, input and output is given a power of two as its unit, and time one more. Three steps:

1. Breadth-first potentials on the zero pattern: the entries on the tree get exponent 0. Two models
   that differ by powers of two in their units become the same model here, bit for bit.
2. Least squares of log2|entry| over all units, that of time included, rounded; where entries
   differ so much that some may be rounding noise, those far below the largest are left out.
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

from realize.errors import PrecisionError

__all__ = ["Scaling", "scaling_of", "unscaled"]

Array = np.ndarray[Any, Any]

OUT_OF_RANGE: Final = (
    "the entries reach so far that no powers of two bring the model into the range of doubles; "
    "use the exact path, or give the states other units"
)

_LARGEST: Final = 480
"""Exponent beyond which a square overflows or vanishes, with room for sums."""

_RIDGE: Final = 2.0**-20
"""Weight that holds the unit of time where nothing else does, far below that of one entry."""

_SPREAD: Final = 26
"""Binades within which entries are taken as they are; beyond, outliers are looked for."""

_NOISE: Final = 36.0
"""Binades below the largest entry from which an entry takes no part in the scaling."""

_TYPICAL: Final = 8.0
"""Binades by which entries of a well scaled model may differ; a misfit counts no more than this."""

_CLEARLY: Final = 0.5
"""Share of the other misfit at which a misfit is clearly the smaller one."""

_TRACE: Final = 1e-6
"""Weight of an entry that is left out."""

_REFITS: Final = 12
"""Fits at most."""


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
    # One power of two for all, so that squares neither overflow nor vanish.
    largest = max(float(np.abs(M).max(initial=0.0)) for M in (A, B, C))
    shift = math.frexp(largest)[1]
    norm = _frobenius(*(np.ldexp(M, -shift) for M in (A, B, C)))
    if shift > _LARGEST or shift < -_LARGEST:
        raise PrecisionError(OUT_OF_RANGE)
    return Scaling(states, inputs, outputs, 0, A, B, C, math.ldexp(norm, shift))


def scaling_of(A: Array, B: Array, C: Array) -> Scaling:
    """Return the scaling of a model.

    Parameters
    ----------
    A, B, C : float arrays (n, n), (n, m), (p, n).
    """
    order, inputs = B.shape
    if not order:
        return unscaled(A, B, C)
    first_output = order + inputs
    size = first_output + C.shape[0]
    # One graph of states, inputs and outputs: entry (i, j) is how j acts on i.
    graph = np.zeros((size, size), order="F")
    graph[:order, :order] = A
    graph[:order, order:first_output] = B
    graph[first_output:, :order] = C
    units, time = _balance(graph, order)
    scaled_A = graph[:order, :order]
    squares = _squares(scaled_A)
    shift = math.frexp(math.sqrt(squares))[1]
    if shift:
        np.ldexp(scaled_A, -shift, out=scaled_A)
        squares = math.ldexp(squares, -2 * shift)
    scaled_B, by_input, squares_B = _normalised(graph[:order, order:first_output], 0)
    scaled_C, by_output, squares_C = _normalised(graph[first_output:, :order], 1)
    return Scaling(
        units[:order],
        units[order:first_output] - by_input,
        units[first_output:] + by_output,
        time + shift,
        scaled_A,
        scaled_B,
        scaled_C,
        math.sqrt(squares + squares_B + squares_C),
    )


def _balance(graph: Array, order: int) -> tuple[Array, int]:
    """Scale the graph in place; return the exponents of its units, and of that of time."""
    size = graph.shape[0]
    # One row and column more than the graph has: the unit of time will be an unknown as well.
    # Single precision is enough for exponents that will be rounded, and half the memory: for a
    # large model, fresh memory costs more than the arithmetic.
    work = np.empty((size + 1, size + 1), dtype=np.float32, order="F")
    logs = work[:size, :size]
    exponents = np.empty((size, size), dtype=np.int32, order="F")
    np.frexp(graph, logs, exponents, casting="same_kind")
    pattern = graph != 0.0
    units, roots = _tree_potentials(pattern, exponents)
    np.abs(logs, out=logs)
    logs[~pattern] = 1.0
    np.log2(logs, out=logs)
    # Whole exponents are added to the logarithms of the mantissas, so that the sums, and their
    # rounding, do not depend on the user's units.
    logs += exponents
    logs += units
    logs -= units[:, None]
    logs *= pattern
    noise = None
    if max(-np.minimum.reduce(logs, None), np.maximum.reduce(logs, None)) > _SPREAD:
        moved, noise = _robust(logs, units, pattern, roots, order)
    else:
        moved = _least_squares(work, logs, pattern, roots, order)
    whole = np.rint(moved).astype(np.int32)
    units = units + whole[:size]
    powers = np.subtract(units, units[:, None], out=exponents)
    powers[:order, :order] -= whole[size]
    np.ldexp(graph, powers, out=graph)
    # A at norm 1 while the states are balanced: its weight against B and C must not depend on
    # the unit of time.
    block = graph[:order, :order]
    time = _exponent(block)
    if time:
        np.ldexp(block, -time, out=block)
    time += int(whole[size])
    if not math.isfinite(_squares(graph)):
        raise PrecisionError(OUT_OF_RANGE)
    if noise is None:
        factors = lapack.dgebal(graph, scale=1, permute=0, overwrite_a=1)[3]
        steps: Array = np.frexp(factors)[1] - 1
    else:
        clean = graph.copy(order="F")
        clean[noise] = 0.0
        factors = lapack.dgebal(clean, scale=1, permute=0, overwrite_a=1)[3]
        steps = np.frexp(factors)[1] - 1
        np.ldexp(graph, steps - steps[:, None], out=graph)
    return units + steps, time


def _squares(M: Array) -> float:
    return float(np.einsum("ij,ij->", M, M))


def _frobenius(A: Array, B: Array, C: Array) -> float:
    return math.sqrt(_squares(A) + _squares(B) + _squares(C))


def _exponent(A: Array) -> int:
    """Return the power of two next above the Frobenius norm; 0 for a zero matrix."""
    return math.frexp(math.sqrt(_squares(A)))[1]


def _normalised(M: Array, axis: int) -> tuple[Array, Array, float]:
    """Bring columns (axis 0) or rows (axis 1) to norms from 1/2 to 1, by powers of two.

    Returns the matrix, the exponents, and the sum of squares of what came out.
    """
    squares = np.add.reduce(M * M, axis)
    exponents: Array = np.frexp(np.sqrt(squares))[1]
    scaled = np.ldexp(M, -exponents if axis == 0 else -exponents[:, None])
    return scaled, exponents, float(np.add.reduce(np.ldexp(squares, -2 * exponents)))


def _tree_potentials(pattern: Array, exponents: Array) -> tuple[Array, list[int]]:
    """Return potentials that give the entries of a breadth-first forest exponent 0, and its roots.

    The tree depends on the zero pattern alone, so the scaled model does not depend on the units.
    """
    size = pattern.shape[0]
    packed = np.packbits(pattern | pattern.T, axis=1, bitorder="little")
    links = [int.from_bytes(row.tobytes(), "little") for row in packed]
    units = [0] * size
    waiting = (1 << size) - 1
    roots: list[int] = []
    while waiting:
        root = (waiting & -waiting).bit_length() - 1
        roots.append(root)
        waiting &= waiting - 1
        queue = [root]
        for node in queue:
            children = links[node] & waiting
            waiting ^= children
            while children:
                child = (children & -children).bit_length() - 1
                children &= children - 1
                if pattern[node, child]:
                    units[child] = units[node] - int(exponents[node, child])
                else:
                    units[child] = units[node] + int(exponents[child, node])
                queue.append(child)
            if not waiting:
                break
    return np.array(units, dtype=np.int32), roots


def _least_squares(work: Array, logs: Array, weights: Array, roots: list[int], order: int) -> Array:
    """Return the changes of potentials, and of the unit of time, that bring logs nearest to 0.

    One unknown for each node, and one for the unit of time, which is common to all entries of A.
    The normal equations are those of a weighted graph Laplacian, grounded at the root of each
    component, bordered by time; where the pattern leaves the unit of time open, the ridge settles
    it.

    ``logs`` are already weighted. They may lie in ``work``, which is overwritten by the normal
    equations and whose precision is that of the solution.
    """
    size = weights.shape[0]
    total = np.add.reduce
    right = np.empty(size + 1, dtype=work.dtype)
    np.subtract(total(logs, 1), total(logs, 0), out=right[:size])
    right[size] = total(total(logs[:order, :order], 0))
    laplacian = work[:size, :size]
    np.add(weights, weights.T, out=laplacian, dtype=work.dtype)
    degrees = total(laplacian, 0)
    np.negative(laplacian, out=laplacian)
    # The diagonal of A says nothing about nodes: its own terms cancel here and in the sums above.
    diagonal = work.ravel(order="K")[:: size + 2]
    diagonal[:size] += degrees
    for root in roots:
        diagonal[root] += 1.0
    state = weights[:order, :order]
    to_state = total(state, 1, dtype=work.dtype)
    work[size] = 0.0
    work[size, :order] = to_state - total(state, 0, dtype=work.dtype)
    work[:, size] = work[size]
    work[size, size] = total(to_state) + _RIDGE
    solve = lapack.sposv if work.dtype == np.float32 else lapack.dposv
    solution, info = solve(work, right, lower=1, overwrite_a=1)[1:]
    if info:  # pragma: no cover  # the ridge and the grounds make it positive definite
        raise AssertionError(f"normal equations not positive definite (info {info})")
    return np.asarray(solution)


def _robust(
    logs: Array, units: Array, pattern: Array, roots: list[int], order: int
) -> tuple[Array, Array]:
    """Return the same changes with noise left out, and which entries are noise.

    Rounding leaves entries of 1e-16 where zeros were meant. As terms of least squares they would
    bend every unit. Entries that come out far below the largest are left out and the rest is
    fitted again, until nothing more changes. There are two starts: nothing left out, which does
    not depend on the user's units; and what is far below its neighbours in the user's units, which
    finds the noise where it outnumbers the rest. The pattern alone cannot always tell which of two
    entries is noise, so the second is taken unless the first leaves the entries clearly nearer
    each other.
    """
    size = logs.shape[0]
    given = logs + units[:, None] - units
    given[~pattern] = -np.inf
    far = given < given.max(axis=0) - _NOISE
    far[order:] = given[order:] < given[order:].max(axis=1, initial=-np.inf)[:, None] - _NOISE
    far[:order, :order] = (
        given[:order, :order] < given[:order, :order].max(initial=-np.inf) - _NOISE
    )
    free = _refitted(logs, pattern, np.zeros((size, size), dtype=bool), roots, order)
    near = _refitted(logs, pattern, far & pattern, roots, order)
    return (free if free[2] < _CLEARLY * near[2] else near)[:2]


def _refitted(
    logs: Array, pattern: Array, noise: Array, roots: list[int], order: int
) -> tuple[Array, Array, float]:
    """Return changes, noise and misfit, from a first guess at the noise."""
    size = logs.shape[0]
    work = np.empty((size + 1, size + 1), order="F")
    for _ in range(_REFITS):
        # What is left out keeps a trace of weight, so that every unit stays determined.
        weights = np.where(noise, _TRACE, 1.0) * pattern
        moved = _least_squares(work, logs * weights, weights, roots, order)
        residual = logs + moved[:size] - moved[:size, None]
        residual[:order, :order] -= moved[size]
        found = (residual < residual[pattern].max() - _NOISE) & pattern
        if np.array_equal(found, noise):
            break
        noise = found
    misfit = float(np.minimum(np.abs(residual[pattern]), _TYPICAL).sum())
    return moved, noise, misfit
