"""The nearby model that a floating reduction reduces exactly.

The floating reduction is an exact reduction of a nearby model: the one whose dropped blocks are
exactly zero in the coordinates found. Its distance from the model reduced is the backward error of
the reduction, for all hidden modes at once.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, Final, Protocol

import numpy as np
import scipy.linalg

from realize.arithmetic.floating import OpenedFloating
from realize.arithmetic.rational import RationalMatrix
from realize.arithmetic.scaling import Scaling
from realize.errors import PrecisionError
from realize.forms.kalman import decompose, reach_and_see, zeroed
from realize.model.realization import Kind, Realization
from realize.tolerance import rounding_floor

__all__ = ["Nearby", "Spanned", "nearby"]

Array = np.ndarray[Any, Any]

_STEPS: Final = 4
"""Gauss-Newton steps at most."""

_FARTHER: Final = 2.0
"""Factor by which the split of the unreached part may move the model away."""


@dataclass(frozen=True, slots=True)
class Nearby:
    """A nearby model with exact zeros where the reduction dropped.

    ``model`` is in coordinates of its own, with doubles for entries; ``T`` leads back: the user's
    state is T @ state.
    """

    model: Realization
    T: Array

    def in_units(self, scaling: Scaling) -> Nearby:
        """Return the same model for the user's model in scaled units."""
        A, B, C, D = self.model.matrices()
        scaled = Realization._trusted(
            np.ldexp(A, -scaling.time),
            np.ldexp(B, scaling.inputs),
            np.ldexp(C, -scaling.outputs[:, None]),
            D,
            kind=Kind.FLOATING,
        )
        return Nearby(scaled, np.ldexp(self.T, -scaling.states[:, None]))

    def distance(self, user: Realization) -> float:
        """Return the relative distance from a rational model, in the user's units.

        Frobenius norm of the change of [A B; C 0] over that of [A B; C 0].
        """
        return self.distances(user)[0]

    def distances(self, user: Realization) -> tuple[float, float]:
        """Return the relative distance, and the largest one of A, of an input or of an output.

        The second does not depend on the units of time, inputs and outputs. With R = A T - T A',
        the change of A is R T^-1; R is formed exactly, because it is all cancellation, and doubles
        are enough for the rest.
        """
        A, B, C = (RationalMatrix.from_array(M) for M in (user.A, user.B, user.C))
        own_A, own_B, own_C = (RationalMatrix.from_floats(M) for M in self.model.matrices()[:3])
        T = RationalMatrix.from_floats(self.T)
        back = np.linalg.inv(self.T)
        changes = (
            (A @ T - T @ own_A).rounded() @ back,
            (B - T @ own_B).rounded(),
            (C @ T - own_C).rounded() @ back,
        )
        sizes = A.rounded(), B.rounded(), C.rounded()
        size = math.hypot(*map(_norm, sizes))
        whole = math.hypot(*map(_norm, changes)) / size if size else 0.0
        shares = [_share(changes[0].ravel(), sizes[0].ravel())]
        shares += [_share(*pair) for pair in zip(changes[1].T, sizes[1].T, strict=True)]
        shares += [_share(*pair) for pair in zip(changes[2], sizes[2], strict=True)]
        return whole, max(shares)


def _share(change: Array, of: Array) -> float:
    moved, size = _norm(change), _norm(of)
    return moved / size if size else (math.inf if moved else 0.0)


class Spanned(Protocol):
    """An orthogonal Q whose first ``dimension`` columns span what is reached (or is seen)."""

    @property
    def Q(self) -> Array:
        """The orthogonal matrix, in the scaled coordinates."""
        ...

    @property
    def dimension(self) -> int:
        """The dimension of the subspace."""
        ...


def nearby(opened: OpenedFloating, run: tuple[Spanned, Spanned]) -> Nearby:
    """Return the model that the reduction with these two staircases reduces exactly.

    Raises
    ------
    PrecisionError
        When the rank decisions contradict each other.
    """
    return Nearby(*_shaped(opened, run))


def _norm(M: Array) -> float:
    return float(np.linalg.norm(M))


def _shaped(opened: OpenedFloating, run: tuple[Spanned, Spanned]) -> tuple[Realization, Array]:
    """Return the model with exact zeros where the reduction dropped, and its coordinates T.

    States: reached and seen; reached and unseen; not reached. What is not reached is then split
    by what the outputs see of it, so that all four parts are exact.
    """
    reach, sight = run
    model = opened.model
    order, reached, visible = model.order, reach.dimension, sight.dimension
    # Orthonormal in the user's units: the distance is measured there, and a change that is small
    # in the scaled ones need not be small here. Inputs and outputs weigh as much as A does.
    norm = _norm(model.A) or 1.0
    B, C = _weighed(model.B, norm), _weighed(model.C.T, norm).T
    Q, R = np.linalg.qr(opened.transformation(reach.Q))
    outer = _shear(Q.T @ model.A @ Q, Q.T @ B, reached)
    T, T_inverse = Q @ np.linalg.inv(outer), outer @ Q.T
    A = T_inverse @ model.A @ T
    inner, inner_inverse = np.eye(order), np.eye(order)
    # What the dual reaches, in these coordinates of the reached part.
    seen = np.linalg.qr(np.linalg.solve(R[:reached, :reached].T, sight.Q))[0]
    turned = _shear(
        seen.T @ A[:reached, :reached].T @ seen, seen.T @ (C @ T)[:, :reached].T, visible
    )
    inner[:reached, :reached] = seen @ turned.T
    inner_inverse[:reached, :reached] = np.linalg.inv(turned).T @ seen.T
    T, T_inverse = T @ inner, inner_inverse @ T_inverse
    # The seen part comes first here; the decomposition has it second.
    front = [*range(visible, reached), *range(visible), *range(reached, order)]
    T, T_inverse = T[:, front], T_inverse[front]
    hidden = reached - visible
    spans: tuple[slice, ...] = (
        slice(0, hidden),
        slice(hidden, reached),
        slice(reached, reached),
        slice(reached, order),
    )
    if reached < order:
        T, T_inverse, spans = _split_unreached(
            T_inverse @ model.A @ T, T_inverse @ B, C @ T, T, T_inverse, spans, opened
        )
    A, B, C = zeroed(opened, T_inverse @ model.A @ T, T_inverse @ model.B, model.C @ T, spans)
    shaped = Realization._trusted(
        A,
        B,
        C,
        model.D,
        kind=Kind.FLOATING,
        sampling_period=model.sampling_period,
        input_names=model._input_names,
        output_names=model._output_names,
    )
    return shaped, T


def _weighed(B: Array, norm: float) -> Array:
    """Return columns scaled to a norm; a column of zeros stays."""
    sizes = np.linalg.norm(B, axis=0)
    return np.asarray(B * (norm / np.where(sizes > 0.0, sizes, norm)))


def _split_unreached(
    A: Array,
    B: Array,
    C: Array,
    T: Array,
    T_inverse: Array,
    spans: tuple[slice, ...],
    opened: OpenedFloating,
) -> tuple[Array, Array, tuple[slice, ...]]:
    """Return coordinates in which what is not reached is split by what the outputs see of it.

    The split is refined like the other two. Where the decisions contradict each other, or the
    split lies far from the model, the unreached part stays whole.
    """
    unsplit = T, T_inverse, spans
    A, B, C = zeroed(opened, A, B, C, spans)
    shaped = Realization._trusted(A, B, C, np.zeros((C.shape[0], B.shape[1])), kind=Kind.FLOATING)
    again = OpenedFloating(shaped, opened.tolerance, scaled=False)
    run = reach_and_see(again)
    if (run[0].dimension, run[1].dimension) != (spans[1].stop, spans[1].stop - spans[1].start):
        return unsplit
    try:
        parts = decompose(again, *run)
    except PrecisionError:
        return unsplit
    order = A.shape[0]
    split = parts.T
    split_inverse = np.linalg.inv(split)
    A, C = split_inverse @ A @ split, C @ split
    unseen, seen = parts.spans[2], [*_indices(parts.spans[1]), *_indices(parts.spans[3])]
    if unseen.stop > unseen.start:
        # In the order seen, unseen this is the dual of the question that _shear answers; the part
        # that is reached and unseen takes no part in it.
        both = [*seen, *_indices(unseen)]
        turned = _shear(A[np.ix_(both, both)].T, C[:, both].T, len(seen))
        shear = np.eye(order)
        shear[np.ix_(both, both)] = turned.T
        split = split @ shear
    dropped_before = _smallness(T, T_inverse, spans, opened)
    T, T_inverse = T @ split, np.linalg.inv(split) @ T_inverse
    allowed = max(_FARTHER * dropped_before, rounding_floor(order, 0.5))
    if _smallness(T, T_inverse, parts.spans, opened) > allowed:
        return unsplit
    return T, T_inverse, parts.spans


def _indices(span: slice) -> range:
    return range(span.start, span.stop)


def _smallness(
    T: Array, T_inverse: Array, spans: tuple[slice, ...], opened: OpenedFloating
) -> float:
    """Return about how far from the model the shape is."""
    model = opened.model
    A, B, C = T_inverse @ model.A @ T, T_inverse @ model.B, model.C @ T
    kept = zeroed(opened, A, B, C, spans)
    change = (
        _norm(T @ (A - kept[0]) @ T_inverse) / (_norm(model.A) or 1.0)
        + _norm(T @ (B - kept[1])) / (_norm(model.B) or 1.0)
        + _norm((C - kept[2]) @ T_inverse) / (_norm(model.C) or 1.0)
    )
    return float(change)


def _shear(A: Array, B: Array, reached: int) -> Array:
    """Return S = [1 0; Z 1] for which the lower left of S A S^-1 and the lower of S B are small.

    A staircase drops what is small at one entry, which may be far from the nearest model that can
    drop it. Gauss-Newton on all of them: Z A11 - A22 Z = -A21 and Z B1 = -B2 in least squares,
    row by row in the Schur coordinates of A22. Steps that do not help are not taken.
    """
    order = A.shape[0]
    best = np.eye(order)
    if reached in (0, order):
        return best
    size = _dropped(A, B, reached)
    for _ in range(_STEPS):
        undo = np.linalg.inv(best)
        A_now, B_now = best @ A @ undo, best @ B
        A11, B1 = A_now[:reached, :reached], B_now[:reached]
        triangle, U = scipy.linalg.schur(A_now[reached:, reached:], output="complex")
        right_A, right_B = U.conj().T @ A_now[reached:, :reached], U.conj().T @ B_now[reached:]
        Y = np.zeros((order - reached, reached), dtype=complex)
        for i in range(order - reached - 1, -1, -1):
            matrix = np.vstack([A11.T - triangle[i, i] * np.eye(reached), B1.T])
            right = np.concatenate([triangle[i, i + 1 :] @ Y[i + 1 :] - right_A[i], -right_B[i]])
            Y[i] = np.linalg.lstsq(matrix, right, rcond=None)[0]
        step = np.eye(order)
        step[reached:, :reached] = (U @ Y).real
        candidate = step @ best
        undo = np.linalg.inv(candidate)
        dropped = _dropped(candidate @ A @ undo, candidate @ B, reached)
        if not dropped < size / 2:
            break
        best, size = candidate, dropped
    return best


def _dropped(A: Array, B: Array, reached: int) -> float:
    return math.hypot(
        float(np.linalg.norm(A[reached:, :reached])), float(np.linalg.norm(B[reached:]))
    )
