"""The nearby model that a floating reduction reduces exactly.

The floating reduction is an exact reduction of a nearby model: the one whose dropped blocks are
exactly zero in the coordinates found. Its distance from the model reduced is the backward error of
the reduction, for all hidden modes at once.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
import scipy.linalg

from realize.arithmetic.floating import FloatingReach, OpenedFloating
from realize.arithmetic.rational import RationalMatrix
from realize.forms.kalman import decompose, reach_and_see
from realize.model.realization import Kind, Realization

__all__ = ["Nearby", "nearby"]

Array = np.ndarray[Any, Any]

_STEPS: Final = 4
"""Gauss-Newton steps at most."""


@dataclass(frozen=True, slots=True)
class Nearby:
    """A nearby model with exact zeros where the reduction dropped.

    ``model`` is in coordinates of its own, with doubles for entries; ``T`` leads back: the user's
    state is T @ state.
    """

    model: Realization
    T: Array

    def distance(self, user: Realization) -> float:
        """Return the relative distance from a rational model, in the user's units.

        Frobenius norm of the change of [A B; C 0] over that of [A B; C 0]. With R = A T - T A',
        the change of A is R T^-1; R is formed exactly, because it is all cancellation, and doubles
        are enough for the rest.
        """
        A, B, C = (RationalMatrix.from_array(M) for M in (user.A, user.B, user.C))
        own_A, own_B, own_C = (RationalMatrix.from_floats(M) for M in self.model.matrices()[:3])
        T = RationalMatrix.from_floats(self.T)
        back = np.linalg.inv(self.T)
        change = math.hypot(
            _norm((A @ T - T @ own_A).rounded() @ back),
            _norm((B - T @ own_B).rounded()),
            _norm((C @ T - own_C).rounded() @ back),
        )
        size = math.hypot(*(_norm(M.rounded()) for M in (A, B, C)))
        return change / size if size else 0.0


def nearby(opened: OpenedFloating, run: tuple[FloatingReach, FloatingReach]) -> Nearby:
    """Return the model that the reduction with these two staircases reduces exactly.

    Raises
    ------
    PrecisionError
        When the rank decisions contradict each other.
    """
    return Nearby(*_shaped(opened, run))


def _norm(M: Array) -> float:
    return float(np.linalg.norm(M))


def _shaped(
    opened: OpenedFloating, run: tuple[FloatingReach, FloatingReach]
) -> tuple[Realization, Array]:
    """Return the model with exact zeros where the reduction dropped, and its coordinates T.

    States: reached and seen; reached and unseen; not reached. What is not reached is then split
    by what the outputs see of it, so that all four parts are exact.
    """
    reach, sight = run
    model = opened.model
    order, reached, visible = model.order, reach.dimension, sight.dimension
    # Orthonormal in the user's units: the distance is measured there, and a change that is small
    # in the scaled ones need not be small here.
    Q, R = np.linalg.qr(opened.transformation(reach.Q))
    outer = _shear(Q.T @ model.A @ Q, Q.T @ model.B, reached)
    T, T_inverse = Q @ np.linalg.inv(outer), outer @ Q.T
    A, C = T_inverse @ model.A @ T, model.C @ T
    inner, inner_inverse = np.eye(order), np.eye(order)
    # What the dual reaches, in these coordinates of the reached part.
    seen = np.linalg.qr(np.linalg.solve(R[:reached, :reached].T, sight.Q))[0]
    turned = _shear(seen.T @ A[:reached, :reached].T @ seen, seen.T @ C[:, :reached].T, visible)
    inner[:reached, :reached] = seen @ turned.T
    inner_inverse[:reached, :reached] = np.linalg.inv(turned).T @ seen.T
    T, T_inverse = T @ inner, inner_inverse @ T_inverse
    A, B, C = T_inverse @ model.A @ T, T_inverse @ model.B, model.C @ T
    A[:visible, visible:reached] = 0.0
    A[reached:, :reached] = 0.0
    B[reached:] = 0.0
    C[:, visible:reached] = 0.0
    if reached < order:
        shaped = Realization._trusted(A, B, C, model.D, kind=Kind.FLOATING)
        again = OpenedFloating(shaped, opened.tolerance, scaled=False)
        run = reach_and_see(again)
        if (run[0].dimension, run[1].dimension) == (reached, visible):
            parts = decompose(again, *run)
            A, B, C, T = parts.A, parts.B, parts.C, T @ parts.T
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
