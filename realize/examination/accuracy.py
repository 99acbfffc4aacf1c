"""What the uncertainty of the data leaves of an answer."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

from realize.arithmetic.modular import Clock
from realize.entries import Reading
from realize.errors import BudgetError
from realize.examination.nearest import Nearest
from realize.examination.pairing import ExactAnswer
from realize.examination.record import Answer
from realize.model.realization import Kind, Realization
from realize.within.box import Box
from realize.within.weigh import Weighed, Within, weigh

__all__ = ["Settled", "settle"]

_LEADING: Final = (Reading.GIVEN, Reading.STORED, Reading.WRITTEN)


@dataclass(frozen=True, slots=True, eq=False)
class Settled:
    """The answer within an uncertainty, the exact model that it rests on, and what was weighed."""

    answer: Answer
    about: ExactAnswer | None
    weighed: Weighed


def settle(
    box: Box,
    model: Realization,
    exact: dict[str, ExactAnswer],
    nearest: Nearest | None,
    budget: float | None,
    not_done: list[str],
) -> Settled:
    """Return the lowest order for which there is an exact model within the uncertainty.

    Asked in turn: the readings that lie within it, the centre, the nearest model of the floating
    reduction if it does, and at last all models there are.
    What there was no time for is added to ``not_done``.
    """
    order = box.centre.order
    own = str(Reading.GIVEN if model.kind is Kind.RATIONAL else Reading.STORED)
    if model._connection is not None:
        # A reading connects exactly; the middle is the doubles that were multiplied out.
        own = "nearest"
    inside = {
        word: exact[word]
        for word in map(str, _LEADING)
        if word in exact and box.holds(exact[word].model)
    }
    if exact and all(found.model != box.centre for found in inside.values()):
        # Not among the readings asked for, or a connection.
        try:
            centre = ExactAnswer(box.centre, Clock(budget))
            centre.find_hidden()
            inside[own] = centre
        except BudgetError as error:
            not_done.append(f"the middle of the uncertainty was not examined: {error}")
    best = min(inside, key=lambda word: inside[word].order, default=own)
    about = inside.get(best)
    if nearest is not None and nearest.order < min(order, about.order if about else order):
        near = nearest.witness
        if box.holds(near):
            best, about = "nearest", _answered(box, near)
    known = None if about is None or about.order == order else about
    weighed = weigh(box, budget, None if known is None else known.model)
    if weighed.within is Within.NOT_MINIMAL and weighed.witness is not None:
        if known is None or weighed.witness != known.model:
            best, about = "nearest", _answered(box, weighed.witness)
        if about is None or about.order >= order:
            raise AssertionError("the witness is minimal")
        return Settled(Answer(order=about.order, basis=best), about, weighed)
    return Settled(Answer(order=order, basis=best), about, weighed)


def _answered(box: Box, witness: Realization) -> ExactAnswer:
    """Return what the exact path says of a witness, which must lie within the uncertainty."""
    if not box.holds(witness):
        raise AssertionError("the witness lies outside the uncertainty")
    answer = ExactAnswer(witness, Clock(None))
    answer.find_hidden()
    return answer
