"""Answers by multiprecision steps, where the exact path has none: evidence, not proof.

The exact path may be out of budget, and it cannot hold irrational constants. Both staircases are
then replayed at rising precision (`realize.arithmetic.steps`); the order and the modes are those
of the highest.
"""

from __future__ import annotations

from functools import cached_property
from typing import Final

from realize.arithmetic.modular import Clock
from realize.arithmetic.multiprecision import (
    MultiprecisionPath,
    MultiprecisionReach,
    OpenedMultiprecision,
)
from realize.arithmetic.steps import PrecisionSteps, precision_steps
from realize.errors import BudgetError
from realize.examination.why import Coordinates, explained_from_decimals
from realize.forms.kalman import hidden_blocks
from realize.model.realization import Realization
from realize.results import Mode, Part

__all__ = ["SteppedAnswer"]

_LADDERS: Final = ((16, 32, 64, 128), (128, 256, 512))
"""Digits of the steps, and those climbed to when the first do not settle every value.

A ladder bears out couplings down to about 10^-64 of the model, the longer one down to 10^-256,
which is near the end of the range of doubles.
"""


class SteppedAnswer:
    """What the multiprecision steps say of one model.

    Attributes
    ----------
    model : Realization
        Of rational numbers, or of rational numbers and constants.
    steps : PrecisionSteps
    """

    def __init__(
        self, model: Realization, clock: Clock, coordinates: Coordinates | None = None
    ) -> None:
        """Climb until every step is settled, or the time is up.

        Raises
        ------
        BudgetError
            When the clock does not even leave time for the first steps.
        """
        self.model, self.coordinates = model, coordinates
        self.steps: PrecisionSteps = precision_steps(model, digits=_LADDERS[0], clock=clock)
        self.stopped: str | None = None
        for digits in _LADDERS[1:]:
            if self.steps.is_settled:
                break
            try:
                self.steps = precision_steps(model, digits=digits, clock=clock)
            except BudgetError as error:
                self.stopped = str(error)
                break

    @property
    def order(self) -> int:
        """The minimal order at the highest precision."""
        return self.steps.order

    @cached_property
    def _run(self) -> tuple[OpenedMultiprecision, MultiprecisionReach, MultiprecisionReach]:
        """The model at the highest precision, and both staircases with the stairs found there."""
        opened = MultiprecisionPath(self.steps.digits[-1]).open(self.model)
        stairs = self.steps.stairs
        reach = opened.reached(opened.A, opened.B, opened.C, "reached", stairs[0])
        sight = opened.reached(reach.A.T, reach.C.T, reach.B.T, "seen", stairs[1])
        return opened, reach, sight

    def hidden_modes(self) -> tuple[Mode, ...]:
        """Return the hidden modes, computed at the highest precision, and why they are hidden."""
        if self.order == self.model.order:
            return ()
        opened, reach, sight = self._run
        modes = opened.modes(hidden_blocks(opened, reach, sight))
        return explained_from_decimals(modes, opened, self.coordinates)

    def visible_modes(self) -> tuple[Mode, ...]:
        """Return the modes that the transfer matrix shows."""
        opened, _, sight = self._run
        return opened.modes([(Part.CONTROLLABLE_OBSERVABLE, sight.A.T)])
