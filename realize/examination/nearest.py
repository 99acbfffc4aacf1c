"""The nearest model of lower order that the floating reduction shows.

The floating reduction is an exact reduction of a nearby model: the one whose dropped blocks are
exactly zero in the coordinates found. That model is formed exactly, so that its hidden modes are
exact, and its distance is measured in the user's coordinates.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np

from realize.arithmetic.floating import FloatingReach, OpenedFloating
from realize.arithmetic.modular import Clock
from realize.arithmetic.rational import RationalMatrix
from realize.entries import Reading
from realize.errors import BudgetError
from realize.examination.pairing import ExactAnswer
from realize.model.realization import Kind, Realization
from realize.results import Deferred

__all__ = ["Nearest", "nearest_of"]

Array = np.ndarray[Any, Any]


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
    opened: OpenedFloating, run: tuple[FloatingReach, FloatingReach], clock: Clock
) -> tuple[Nearest | None, ExactAnswer | None]:
    """Return the nearby model that the floating reduction reduces exactly, and what it hides.

    None where the exact path has no time left for it.
    """
    shaped, T = _shaped(opened, run)
    try:
        answer = ExactAnswer(shaped.read(Reading.STORED), clock)
    except BudgetError:
        return None, None
    user = opened.model
    exact_T = _exact(T)
    # With R = A T - T A', the change of A is R T^-1; R is formed exactly, because it is all
    # cancellation, and a double is enough for the rest.
    residual_A = _rounded(_exact(user.A) @ exact_T - exact_T @ _exact(shaped.A))
    residual_B = _rounded(_exact(user.B) - exact_T @ _exact(shaped.B))
    residual_C = _rounded(_exact(user.C) @ exact_T - _exact(shaped.C))
    T_inverse = np.linalg.inv(T)
    change = math.hypot(
        float(np.linalg.norm(residual_A @ T_inverse)),
        float(np.linalg.norm(residual_B)),
        float(np.linalg.norm(residual_C @ T_inverse)),
    )
    size = math.hypot(*(float(np.linalg.norm(M)) for M in (user.A, user.B, user.C)))

    def witness() -> Realization:
        inverse = RationalMatrix(exact_T.matrix.inv())
        return Realization._trusted(
            (exact_T @ _exact(shaped.A) @ inverse).to_array(),
            (exact_T @ _exact(shaped.B)).to_array(),
            (_exact(shaped.C) @ inverse).to_array(),
            user.read(Reading.STORED).D,
            kind=Kind.RATIONAL,
            sampling_period=answer.model.sampling_period,
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

    States: reached and seen; reached and unseen; not reached.
    """
    reach, sight = run
    order, reached, visible = opened.model.order, reach.dimension, sight.dimension
    inner = np.eye(order)
    inner[:reached, :reached] = sight.Q
    A = inner.T @ reach.A_all @ inner
    A[:reached, :reached] = sight.A_all.T
    A[reached:, :reached] = 0.0
    B = np.zeros_like(reach.B_all)
    B[:reached] = sight.C_all.T
    C = reach.C_all.copy()
    C[:, :reached] = sight.B_all.T
    C[:, visible:reached] = 0.0
    T = opened.transformation(reach.Q @ inner)
    return opened.close(A, B, C), T


def _exact(values: Array) -> RationalMatrix:
    flat = [value.as_integer_ratio() for value in np.asarray(values, dtype=float).ravel().tolist()]
    return RationalMatrix.from_ratios(values.shape, flat)


def _rounded(matrix: RationalMatrix) -> Array:
    return np.array(
        [value.numerator / value.denominator for value in matrix.to_array().ravel().tolist()]
    ).reshape(matrix.shape)
