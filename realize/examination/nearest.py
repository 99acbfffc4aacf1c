"""The nearest model of lower order that the floating reduction shows.

The floating reduction is an exact reduction of a nearby model: the one whose dropped blocks are
exactly zero in the coordinates found. That model is formed exactly, so that its hidden modes are
exact, and its distance is measured in the user's coordinates.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any, Final

import numpy as np
import scipy.linalg

from realize.arithmetic.floating import FloatingReach, OpenedFloating
from realize.arithmetic.modular import Clock
from realize.arithmetic.rational import RationalMatrix
from realize.entries import Reading
from realize.examination.pairing import ExactAnswer
from realize.examination.why import Coordinates
from realize.forms.kalman import decompose, reach_and_see
from realize.model.realization import Kind, Realization
from realize.results import Deferred

__all__ = ["Nearest", "nearest_of"]

Array = np.ndarray[Any, Any]

_STEPS: Final = 4
"""Gauss-Newton steps at most."""


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Nearest:
    """The nearest model of lower order found.

    Attributes
    ----------
    order : int
        Its minimal order, proved.
    relative_distance : float
        Frobenius norm of the change of [A B; C 0] over that of [A B; C 0], in the user's units,
        for all hidden modes at once.
    """

    order: int
    relative_distance: float
    _witness: Deferred[Realization]

    @property
    def witness(self) -> Realization:
        """The exact model itself, in the user's coordinates; computed at first access."""
        return self._witness.get()

    def to_dict(self) -> dict[str, Any]:
        """Return order and distance as plain JSON values."""
        return {"order": self.order, "relative_distance": self.relative_distance}


def nearest_of(
    user: Realization,
    opened: OpenedFloating,
    run: tuple[FloatingReach, FloatingReach],
    clock: Clock,
) -> tuple[Nearest, ExactAnswer]:
    """Return the nearby model that the floating reduction reduces exactly, and what it hides.

    The distance is from the user's model as stored, or as given; ``opened`` is its rounded copy.

    Raises
    ------
    BudgetError
        When the exact path has no time left for it.
    PrecisionError
        When the rank decisions of the floating path contradict each other.
    """
    shaped, T = _shaped(opened, run)
    answer = ExactAnswer(shaped.read(Reading.STORED), clock, Coordinates(opened.model, T))
    answer.find_hidden()
    rational = user if user.kind == Kind.RATIONAL else user.read(Reading.STORED)
    own_A, own_B, own_C = (
        RationalMatrix.from_array(M) for M in (rational.A, rational.B, rational.C)
    )
    exact_T = _exact(T)
    # With R = A T - T A', the change of A is R T^-1; R is formed exactly, because it is all
    # cancellation, and a double is enough for the rest.
    residual_A = _rounded(own_A @ exact_T - exact_T @ _exact(shaped.A))
    residual_B = _rounded(own_B - exact_T @ _exact(shaped.B))
    residual_C = _rounded(own_C @ exact_T - _exact(shaped.C))
    T_inverse = np.linalg.inv(T)
    change = math.hypot(
        float(np.linalg.norm(residual_A @ T_inverse)),
        float(np.linalg.norm(residual_B)),
        float(np.linalg.norm(residual_C @ T_inverse)),
    )
    size = math.hypot(*(float(np.linalg.norm(M)) for M in opened.model.matrices()[:3]))

    def witness() -> Realization:
        inverse = RationalMatrix(exact_T.matrix.inv())
        return Realization._trusted(
            (exact_T @ _exact(shaped.A) @ inverse).to_array(),
            (exact_T @ _exact(shaped.B)).to_array(),
            (_exact(shaped.C) @ inverse).to_array(),
            rational.D,
            kind=Kind.RATIONAL,
            sampling_period=rational.sampling_period,
            state_names=user.state_names,
            input_names=user.input_names,
            output_names=user.output_names,
        )

    return (
        Nearest(
            order=answer.order,
            relative_distance=change / size if size else 0.0,
            _witness=Deferred(witness),
        ),
        answer,
    )


def _shaped(
    opened: OpenedFloating, run: tuple[FloatingReach, FloatingReach]
) -> tuple[Realization, Array]:
    """Return the model with exact zeros where the reduction dropped, and its coordinates T.

    States: reached and seen; reached and unseen; not reached. What is not reached is then split
    by what the outputs see of it, so that all four parts are exact.
    """
    reach, sight = run
    order, reached, visible = opened.model.order, reach.dimension, sight.dimension
    Q = reach.Q
    outer = _shear(Q.T @ opened.A @ Q, Q.T @ opened.B, reached)
    T, T_inverse = Q @ np.linalg.inv(outer), outer @ Q.T
    A, C = T_inverse @ opened.A @ T, opened.C @ T
    inner, inner_inverse = np.eye(order), np.eye(order)
    dual = A[:reached, :reached].T, C[:, :reached].T
    turned = _shear(sight.Q.T @ dual[0] @ sight.Q, sight.Q.T @ dual[1], visible)
    inner[:reached, :reached] = sight.Q @ turned.T
    inner_inverse[:reached, :reached] = np.linalg.inv(turned).T @ sight.Q.T
    T, T_inverse = T @ inner, inner_inverse @ T_inverse
    A, B, C = T_inverse @ opened.A @ T, T_inverse @ opened.B, opened.C @ T
    A[:visible, visible:reached] = 0.0
    A[reached:, :reached] = 0.0
    B[reached:] = 0.0
    C[:, visible:reached] = 0.0
    if reached < order:
        D = np.zeros((C.shape[0], B.shape[1]))
        scaled = Realization._trusted(A, B, C, D, kind=Kind.FLOATING)
        again = OpenedFloating(scaled, opened.tolerance, scaled=False)
        run = reach_and_see(again)
        if (run[0].dimension, run[1].dimension) == (reached, visible):
            parts = decompose(again, *run)
            A, B, C, T = parts.A, parts.B, parts.C, T @ parts.T
    return opened.close(A, B, C), opened.transformation(T)


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


def _exact(values: Array) -> RationalMatrix:
    flat = [value.as_integer_ratio() for value in np.asarray(values, dtype=float).ravel().tolist()]
    return RationalMatrix.from_ratios(values.shape, flat)


def _rounded(matrix: RationalMatrix) -> Array:
    return np.array(
        [value.numerator / value.denominator for value in matrix.to_array().ravel().tolist()]
    ).reshape(matrix.shape)
