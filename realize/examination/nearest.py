"""The nearest model of lower order that the floating reduction shows.

The model that the floating reduction reduces exactly (`realize.forms.nearby`) is read as stored, so
that its hidden modes are exact and can be proved.
"""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, Protocol, TypeVar

from realize.arithmetic.floating import OpenedFloating
from realize.arithmetic.rational import RationalMatrix
from realize.entries import Reading
from realize.examination.why import Coordinates
from realize.forms.nearby import Nearby, Spanned, nearby
from realize.model.realization import Kind, Realization
from realize.results import Deferred

__all__ = ["Nearest", "nearest_of"]


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Nearest:
    """The nearest model of lower order found.

    Attributes
    ----------
    order : int
        Its minimal order: proved, or by multiprecision steps where the answer is.
    relative_distance : float
        Frobenius norm of the change of [A B; C 0] over that of [A B; C 0], in the user's units,
        for all hidden modes at once.
    largest_share : float
        The largest relative change of A, of one column of B or of one row of C, which does not
        depend on the units of time, inputs and outputs. This is held against the rounding floor.
    """

    order: int
    relative_distance: float
    largest_share: float
    _witness: Deferred[Realization]

    @property
    def witness(self) -> Realization:
        """The exact model itself, in the user's coordinates; computed at first access."""
        return self._witness.get()

    def to_dict(self) -> dict[str, Any]:
        """Return order and distance as plain JSON values."""
        return {
            "order": self.order,
            "relative_distance": self.relative_distance,
            "largest_share": self.largest_share if math.isfinite(self.largest_share) else None,
        }


class Answering(Protocol):
    """What one path says of one exact model."""

    @property
    def order(self) -> int:
        """The minimal order."""
        ...


Answered = TypeVar("Answered", bound=Answering)


def _scaled_share(near: Nearby, opened: OpenedFloating) -> float:
    """Return the largest share of the change in scaled units, where no entry is lost in a norm."""
    scaled = Realization._trusted(
        opened.A, opened.B, opened.C, opened.model.D, kind=Kind.FLOATING
    ).read(Reading.STORED)
    return near.in_units(opened.scaling).distances(scaled)[1]


def nearest_of(
    user: Realization,
    opened: OpenedFloating,
    run: tuple[Spanned, Spanned],
    answered: Callable[[Realization, Coordinates], Answered],
    within: float = math.inf,
) -> tuple[Nearest, Answered] | None:
    """Return the nearby model that the floating reduction reduces exactly, and what it hides.

    The distance is from the user's model as stored, or as given; ``opened`` is its rounded copy.
    ``answered`` says what the nearby model hides, by one path or another. None where the largest
    share of the change, in the user's units or in the scaled ones, is above ``within``; nothing is
    asked then.

    Raises
    ------
    BudgetError
        When that path has no time left for it.
    PrecisionError
        When the rank decisions of the floating path contradict each other.
    """
    near = nearby(opened, run)
    # Irrational constants are rounded for it, which is far below what doubles can tell.
    plain = user.to_float() if user._holds_constants() else user
    rational = plain if plain.kind == Kind.RATIONAL else plain.read(Reading.STORED)
    distance, share = near.distances(rational)
    if share > within or (within < math.inf and _scaled_share(near, opened) > within):
        return None
    shaped = near.model.read(Reading.STORED)
    answer = answered(shaped, Coordinates(opened.model, near.T))

    def witness() -> Realization:
        A, B, C = (RationalMatrix.from_array(M) for M in shaped.matrices()[:3])
        T = RationalMatrix.from_floats(near.T)
        back = RationalMatrix(T.matrix.inv())
        return Realization._trusted(
            (T @ A @ back).to_array(),
            (T @ B).to_array(),
            (C @ back).to_array(),
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
            relative_distance=distance,
            largest_share=share,
            _witness=Deferred(witness),
        ),
        answer,
    )
