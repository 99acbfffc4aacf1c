"""Laying the two paths side by side: exact answers for each reading, and the replay."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace

from realize import polynomials
from realize.arithmetic.exact import OpenedExact, modes_of
from realize.arithmetic.floating import FloatingReach, OpenedFloating
from realize.arithmetic.modular import Clock
from realize.errors import BudgetError
from realize.examination.channels import with_channels
from realize.examination.routes import routes
from realize.examination.why import Coordinates, explained
from realize.forms.kalman import reach_and_see
from realize.model.realization import Realization
from realize.polynomials import Polynomial
from realize.results import Mode, Part, RankDecision
from realize.tolerance import rounding_floor

__all__ = ["ExactAnswer", "Replay", "replayed", "with_exact_ranks"]


class ExactAnswer:
    """What the exact path says of one rational model; costly parts at first access."""

    def __init__(
        self, model: Realization, clock: Clock, coordinates: Coordinates | None = None
    ) -> None:
        self.model = model
        self.coordinates = coordinates
        self.opened = OpenedExact(model, clock)
        opened = self.opened
        self.reach, self.sight = reach_and_see(opened)
        self.order: int = self.sight.dimension
        self.stairs = (self.reach.stairs, self.sight.stairs)
        self.stairs_proved = self.reach.stairs_proved and self.sight.stairs_proved
        self.routes = routes(opened, self.order)
        self.hidden: dict[Part, Polynomial] | None = None
        self._visible: Polynomial | None = None

    def find_hidden(self) -> None:
        """Find the polynomials of the three hidden parts.

        A on the unobservable subspace N is seen to by the dual of the whole model. The part in
        both N and the reachable subspace R is known, and divides; what R leaves over is the rest
        of N and the last part.
        """
        opened, polynomial = self.opened, self.opened.characteristic_polynomial
        both = polynomial(self.sight.quotient())
        unreached = polynomial(self.reach.quotient())
        if len(unreached) == 1:
            neither = polynomials.ONE
        else:
            whole = opened.reached(opened.A.T, opened.C.T, opened.B.T, "seen")
            neither = polynomials.divide_exact(polynomial(whole.quotient()), both)
        self.hidden = {
            Part.CONTROLLABLE_UNOBSERVABLE: both,
            Part.UNCONTROLLABLE_UNOBSERVABLE: neither,
            Part.UNCONTROLLABLE_OBSERVABLE: polynomials.divide_exact(unreached, neither),
        }

    def visible_within(self, budget: float | None) -> Polynomial | None:
        """Return the polynomial of the part that shows, or None where the budget is too small."""
        if self._visible is None:
            self.opened.clock = Clock(budget)
            try:
                self._visible = self.opened.characteristic_polynomial(self.sight.A)
            except BudgetError:
                return None
        return self._visible

    def hidden_modes(self) -> tuple[Mode, ...]:
        """Return the hidden modes, with exact stability and the reason they are hidden."""
        if self.hidden is None:
            raise AssertionError("find_hidden comes first")
        modes = self._modes(self.hidden.items())
        return explained(modes, self.opened, self.coordinates)

    def visible_modes(self) -> tuple[Mode, ...]:
        """Return the modes that the transfer matrix shows."""
        if self._visible is None:
            raise AssertionError("visible_within comes first")
        return self._modes([(Part.CONTROLLABLE_OBSERVABLE, self._visible)])

    def _modes(self, blocks: Iterable[tuple[Part, Polynomial]]) -> tuple[Mode, ...]:
        modes = modes_of(blocks, self.opened.A, self.model.sampling_period)
        return with_channels(modes, self.opened)


def replayed(
    opened: OpenedFloating,
    stairs: tuple[Sequence[int], Sequence[int]],
    run: tuple[FloatingReach, FloatingReach],
) -> tuple[FloatingReach, FloatingReach]:
    """Return both staircases with given stairs; `run` serves where it took the very same ranks."""
    reach, sight = run
    if reach.stairs != tuple(stairs[0]):
        reach = opened.reached(opened.A, opened.B, opened.C, "reached", stairs[0])
    if reach is not run[0] or sight.stairs != tuple(stairs[1]):
        sight = opened.reached(reach.A.T, reach.C.T, reach.B.T, "seen", stairs[1])
    return reach, sight


@dataclass(frozen=True, slots=True)
class Replay:
    """The floating staircases replayed with the exact ranks.

    ``low`` and ``high`` bound the cutoffs that give the exact ranks at every stage; ``conflicts``
    names the stages that leave no room between them.
    """

    low: float
    high: float
    conflicts: tuple[str, ...]

    @property
    def interval(self) -> tuple[float, float] | None:
        """The interval, or None when it is empty."""
        return (self.low, self.high) if self.low < self.high else None

    @classmethod
    def of(
        cls,
        opened: OpenedFloating,
        stairs: tuple[Sequence[int], Sequence[int]],
        run: tuple[FloatingReach, FloatingReach],
    ) -> Replay:
        """Replay with given stairs."""
        reach, sight = replayed(opened, stairs, run)
        decisions = reach.decisions() + sight.decisions()
        floor = rounding_floor(opened.model.order, opened.scaling.scale)
        low, lowest_at = floor, "the rounding floor"
        high, highest_at = float("inf"), ""
        for decision in decisions:
            if decision.largest_dropped is not None and decision.largest_dropped > low:
                low, lowest_at = decision.largest_dropped, decision.where
            if decision.smallest_kept is not None and decision.smallest_kept < high:
                high, highest_at = decision.smallest_kept, decision.where
        conflicts: tuple[str, ...] = ()
        if low >= high:
            conflicts = (
                f"{highest_at}: must keep {high:.3g}",
                f"{lowest_at}: must drop {low:.3g}"
                if lowest_at != "the rounding floor"
                else f"{lowest_at}: {low:.3g}",
            )
        return cls(low, high, conflicts)


def with_exact_ranks(
    decisions: Iterable[RankDecision], stairs: dict[str, tuple[tuple[int, ...], tuple[int, ...]]]
) -> tuple[RankDecision, ...]:
    """Return the decisions of the floating path with the exact rank of the same stage beside each.

    A stage that the exact staircase does not reach has rank 0 there.
    """
    found: list[RankDecision] = []
    counts = {"reached": 0, "seen": 0}
    for decision in decisions:
        side = decision.where.split(",")[0]
        stage = counts[side]
        counts[side] += 1
        ranks = {
            reading: steps[stage] if stage < len(steps) else 0
            for reading, pair in stairs.items()
            for steps in (pair[0 if side == "reached" else 1],)
        }
        found.append(replace(decision, exact_rank=ranks))
    return tuple(found)
