"""What the floating path says of a model in an examination."""

from __future__ import annotations

import time
from collections.abc import Callable
from functools import cached_property

from realize.arithmetic.floating import FloatingPath, FloatingReach, OpenedFloating
from realize.errors import EntryError, PrecisionError
from realize.examination.eigenvectors import Eigenvectors
from realize.examination.nearest import Answered, Nearest, nearest_of
from realize.examination.pairing import Replay, replayed
from realize.examination.why import Coordinates
from realize.forms.kalman import hidden_blocks, reach_and_see
from realize.model.realization import Realization
from realize.results import Mode, Part, RankDecision
from realize.tolerance import rounding_floor

__all__ = ["FloatingAnswer"]


class FloatingAnswer:
    """What the floating path says of the model; nothing, where no scaling fits doubles."""

    def __init__(self, model: Realization, tolerance: float | None) -> None:
        began = time.perf_counter()
        self.path = FloatingPath(tolerance)
        self.failed: str | None = None
        self.run: tuple[FloatingReach, FloatingReach] | None = None
        try:
            self.opened: OpenedFloating | None = self.path.open(model)
            self.run = reach_and_see(self.opened)
        except (PrecisionError, EntryError) as error:
            self.opened, self.failed = None, str(error)
        self.order = None if self.run is None else self.run[1].dimension
        self.unscaled_order = _unscaled_order(model, tolerance)
        self.seconds = time.perf_counter() - began

    def _ran(self) -> tuple[OpenedFloating, tuple[FloatingReach, FloatingReach]]:
        if self.opened is None or self.run is None:
            raise PrecisionError(f"the floating path did not run: {self.failed}")
        return self.opened, self.run

    def replay(self, stairs: tuple[tuple[int, ...], tuple[int, ...]]) -> Replay | None:
        """Return the replay with exact stairs."""
        return (
            None if self.failed is not None else Replay.of(self._ran()[0], stairs, self._ran()[1])
        )

    def nearest(
        self, model: Realization, answered: Callable[[Realization, Coordinates], Answered]
    ) -> tuple[Nearest, Answered] | None:
        """Return the nearest model of lower order that the staircases show, and what it hides."""
        return nearest_of(model, *self._ran(), answered)

    def nearest_by_eigenvectors(
        self, model: Realization, answered: Callable[[Realization, Coordinates], Answered]
    ) -> tuple[Nearest, Answered] | None:
        """Return a model of lower order within rounding that only eigenvectors show, if any."""
        opened, _ = self._ran()
        within = rounding_floor(model.order, 1.0)
        for run in self.eigenvectors.splits():
            found = nearest_of(model, opened, run, answered, within)
            if found is not None:
                return found
        return None

    def decisions(self) -> tuple[RankDecision, ...]:
        """Return the rank decisions of both staircases; none where the path did not run."""
        if self.failed is not None:
            return ()
        _, run = self._ran()
        return run[0].decisions() + run[1].decisions()

    @cached_property
    def eigenvectors(self) -> Eigenvectors:
        """The eigenvectors of the scaled model."""
        return Eigenvectors.of(self._ran()[0])

    def nearly_hidden(self) -> int:
        """Return how many modes eigenvectors show within the cutoff of being hidden."""
        return 0 if self.failed is not None else self.eigenvectors.nearly_hidden()

    def hidden_modes(
        self, stairs: tuple[tuple[int, ...], tuple[int, ...]] | None = None
    ) -> tuple[Mode, ...]:
        """Return the hidden modes by the path's own ranks, or by the stairs given."""
        opened, (reach, sight) = self._ran()
        if stairs is not None:
            reach, sight = replayed(opened, stairs, (reach, sight))
        return opened.modes(hidden_blocks(opened, reach, sight))

    def visible_modes(self) -> tuple[Mode, ...]:
        """Return the modes that the path shows; none where it did not run."""
        if self.failed is not None:
            return ()
        opened, (_, sight) = self._ran()
        return opened.modes([(Part.CONTROLLABLE_OBSERVABLE, sight.A.T)])


def _unscaled_order(model: Realization, tolerance: float | None) -> int | None:
    try:
        opened = FloatingPath(tolerance, scaled=False).open(model)
        return reach_and_see(opened)[1].dimension
    except (PrecisionError, EntryError):
        return None
