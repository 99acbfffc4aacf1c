"""Which answer an examination stands by: the exact path's, that of steps, that of a model near."""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from typing import Final

import numpy as np

from realize.arithmetic.modular import Clock
from realize.entries import Reading
from realize.errors import (
    AlgebraicLoopError,
    BudgetError,
    EntryError,
    LimitError,
    PrecisionError,
)
from realize.examination.accuracy import Settled
from realize.examination.floating_answer import FloatingAnswer
from realize.examination.nearest import Answered, Nearest
from realize.examination.pairing import ExactAnswer
from realize.examination.record import Answer
from realize.examination.stepped import SteppedAnswer
from realize.examination.why import Coordinates
from realize.model.realization import Kind, Realization
from realize.tolerance import rounding_floor
from realize.within.weigh import Within

__all__ = ["Found", "answered", "exact_answers", "reading_seconds", "with_uncertainty"]

STEPS_BUDGET: Final = 5.0
"""Seconds that the multiprecision steps may take in one examination where its budget is smaller.

They run only where the exact path has no answer, and are most wanted where its budget is small.
"""

LARGEST_FOR_EIGENVECTORS: Final = 300
"""Up to this order eigenvectors are always asked for hidden modes that no staircase shows; they
cost some twenty times as much as a staircase."""

_READING_SECONDS: Final = {
    Reading.STORED: 1e-6,
    Reading.WRITTEN: 2.3e-6,
    Reading.INTENDED: 1.3e-5,
    Reading.GIVEN: 0.0,
}
"""Estimated time to read one entry that is not zero."""

_ZERO_SECONDS: Final = 1.2e-7
"""Estimated time to pass over one entry that is."""

_JOINING_SECONDS: Final = 1.2e-6
"""Estimated time of one product of numbers in joining the blocks of a connection."""

_GROWTH: Final = 80
"""Signals in an algebraic loop with which that time doubles; their square where the entries have
denominators of their own, as they have as intended."""

_LEADING: Final = (Reading.STORED, Reading.WRITTEN)
"""Readings that may lead an answer; `intended` is a hypothesis and never does."""


def exact_answers(
    model: Realization, words: Sequence[Reading], budget: float | None, *, floating_ran: bool
) -> tuple[dict[str, ExactAnswer], list[str], float]:
    """Return reading -> exact answer; readings that give one model share one answer."""
    began = time.perf_counter()
    clock = Clock(budget)
    found: dict[str, ExactAnswer] = {}
    not_done: list[str] = []
    late: dict[str, list[str]] = {}
    unnamed: dict[str, list[str]] = {}
    if model._holds_constants():
        not_done.append(
            "the exact path did not run: the model holds irrational constants, which no rational "
            "numbers are"
        )
        words = ()
    for word in words:
        try:
            clock.afford(reading_seconds(model, word), f"reading the entries as {word}")
            rational = model.read(word)
            for other in found.values():
                if other.model == rational:
                    found[str(word)] = other
                    break
            else:
                answer = ExactAnswer(rational, clock)
                try:
                    answer.find_hidden()
                except BudgetError as error:
                    # The order is proved all the same; the floating path can name the modes.
                    if not floating_ran:
                        raise
                    unnamed.setdefault(str(error), []).append(str(word))
                found[str(word)] = answer
                if not answer.stairs_proved:
                    not_done.append(
                        f"the ranks of single stages as {word} hold modulo several primes; only "
                        "their sum is proved"
                    )
        except (BudgetError, AlgebraicLoopError) as error:
            # A reading of a connection may be ill-posed where its doubles are not.
            late.setdefault(str(error), []).append(str(word))
    for error_text, missed in late.items():
        not_done.append(f"the exact path did not run as {', '.join(missed)}: {error_text}")
    for error_text, missed in unnamed.items():
        not_done.append(
            f"the hidden modes as {', '.join(missed)} are named by the floating path, with the "
            f"stairs proved: {error_text}"
        )
    return found, not_done, time.perf_counter() - began


@dataclass(frozen=True, slots=True)
class Found:
    """An answer, and what it rests on.

    ``word``: the reading it is about, or "nearest", or "floating". ``about``: what an exact path,
    or one of many digits, says of that model; None where only the floating path has an answer.
    """

    answer: Answer
    word: str
    about: ExactAnswer | SteppedAnswer | None = None
    nearest: Nearest | None = None
    stepped: dict[str, SteppedAnswer] = field(default_factory=dict)


def answered(
    model: Realization,
    words: Sequence[Reading],
    exact: dict[str, ExactAnswer],
    floating: FloatingAnswer,
    budget: float | None,
    not_done: list[str],
) -> Found:
    """Return the answer: by the exact path, by steps of precision, or by the floating path.

    Raises
    ------
    PrecisionError
        When none of them has an answer.
    """
    leading = [word for word in words if word in (*_LEADING, Reading.GIVEN)]
    proved = [str(word) for word in leading if word in exact]
    if proved:
        best = min(proved, key=lambda word: exact[word].order)
        order = exact[best].order
        found = Found(Answer(order=order, basis=best), best, exact[best])
        return _or_nearest(model, found, floating, budget, not_done)
    stepped: dict[str, SteppedAnswer] = {}
    if leading:
        clock = Clock(
            None if budget is None else max(budget, STEPS_BUDGET), "the multiprecision steps"
        )
        stepped = _stepped_answers(model, leading, clock, not_done)
        if stepped:
            return _by_steps(model, stepped, floating, clock, not_done)
    else:
        not_done.append(
            "no reading was asked for that may lead an answer, since intended is a hypothesis; "
            "without one the floating path says what is near"
        )
    if floating.order is None:
        raise PrecisionError(f"no path has an answer: {'; '.join(not_done)}")
    found = Found(Answer(order=floating.order, basis="floating"), "floating")
    # Where the exact path has no time for the model, it has none for one near it.
    return found if leading else _or_nearest(model, found, floating, budget, not_done)


def with_uncertainty(found: Found, settled: Settled) -> Found:
    """Return the answer within an uncertainty, where one was settled exactly."""
    if settled.about is None and settled.weighed.within is Within.OPEN:
        return found
    return replace(found, answer=settled.answer, word=settled.answer.basis, about=settled.about)


def _or_nearest(
    model: Realization,
    found: Found,
    floating: FloatingAnswer,
    budget: float | None,
    not_done: list[str],
) -> Found:
    """Return the answer found, or that about the nearest model where this is within rounding."""
    above = model.order if found.about is None else found.answer.order

    def proved(shaped: Realization, coordinates: Coordinates) -> ExactAnswer:
        answer = ExactAnswer(shaped, Clock(budget), coordinates)
        answer.find_hidden()
        return answer

    pair = _formed(model, floating, above, proved, not_done)
    if pair is None:
        return found
    nearest, near = pair
    if _within_rounding(model, nearest):
        return Found(Answer(order=near.order, basis="nearest"), "nearest", near, nearest)
    return replace(found, nearest=nearest)


def _by_steps(
    model: Realization,
    stepped: dict[str, SteppedAnswer],
    floating: FloatingAnswer,
    clock: Clock,
    not_done: list[str],
) -> Found:
    """Return the answer of the steps: of a reading, or of the nearest model within rounding."""
    best = min(stepped, key=lambda word: stepped[word].order)
    stepped = {best: stepped[best], **stepped}
    about = stepped[best]
    found = Found(Answer(order=about.order, basis="multiprecision"), best, about, stepped=stepped)
    if model.kind != Kind.FLOATING:
        return found

    def answered(shaped: Realization, coordinates: Coordinates) -> SteppedAnswer:
        return SteppedAnswer(shaped, clock, coordinates)

    pair = _formed(model, floating, about.order, answered, not_done)
    if pair is None:
        if floating.order is None or floating.order >= about.order:
            return found
        # What the floating path hides may be hidden within the rounding of the data, so the
        # dangers that it names must not be passed over.
        order = floating.order
        return Found(Answer(order=order, basis="floating"), "floating", stepped=stepped)
    nearest, near = pair
    if _within_rounding(model, nearest):
        return Found(
            Answer(order=near.order, basis="multiprecision"),
            "nearest",
            near,
            nearest,
            {"nearest": near, **stepped},
        )
    return replace(found, nearest=nearest)


def _formed(
    model: Realization,
    floating: FloatingAnswer,
    above: int,
    answered: Callable[[Realization, Coordinates], Answered],
    not_done: list[str],
) -> tuple[Nearest, Answered] | None:
    """Return the nearest model of an order below one, and what it hides, or say why not.

    The one that the staircases show; where that is none, or lies beyond rounding, one within
    rounding that eigenvectors show.
    """
    pair = None
    try:
        if floating.order is not None and floating.order < above:
            pair = floating.nearest(model, answered)
            if pair is not None and _within_rounding(model, pair[0]):
                return pair
        if _has_more_nearly_hidden(model, floating, above):
            closer = floating.nearest_by_eigenvectors(model, answered)
            if closer is not None and closer[1].order < above:
                return closer
    except (BudgetError, PrecisionError) as error:
        not_done.append(f"the nearest model of lower order was not formed: {error}")
    return pair


def _has_more_nearly_hidden(model: Realization, floating: FloatingAnswer, above: int) -> bool:
    """Whether eigenvectors of doubles show more hidden modes than an order leaves."""
    return (
        model.kind == Kind.FLOATING
        and 0 < model.order <= LARGEST_FOR_EIGENVECTORS
        and floating.nearly_hidden() > model.order - above
    )


def _within_rounding(model: Realization, nearest: Nearest) -> bool:
    floor = rounding_floor(model.order, 1.0)
    return model.kind == Kind.FLOATING and nearest.largest_share <= floor


def _stepped_answers(
    model: Realization, words: Sequence[Reading], clock: Clock, not_done: list[str]
) -> dict[str, SteppedAnswer]:
    """Return reading -> answer by steps of precision; readings of one model share one answer."""
    found: dict[str, SteppedAnswer] = {}
    late: dict[str, list[str]] = {}
    for word in words:
        try:
            clock.afford(reading_seconds(model, word), f"reading the entries as {word}")
            read = model if word is Reading.GIVEN else model._with_floats_read(word)
            same = next((other for other in found.values() if other.model == read), None)
            answer = SteppedAnswer(read, clock) if same is None else same
        except (
            BudgetError,
            AlgebraicLoopError,
            EntryError,
            LimitError,
            PrecisionError,
        ) as error:
            late.setdefault(str(error), []).append(str(word))
            continue
        found[str(word)] = answer
        if answer.stopped is not None and same is None:
            not_done.append(f"more digits were not tried as {word}: {answer.stopped}")
    for error_text, missed in late.items():
        not_done.append(f"no steps of precision as {', '.join(missed)}: {error_text}")
    return found


def reading_seconds(model: Realization, word: Reading) -> float:
    """Return the estimated time to read a model, blocks and connection included."""
    connection = model._connection
    if connection is None:
        return sum(
            _ZERO_SECONDS * matrix.size + _READING_SECONDS[word] * np.count_nonzero(matrix)
            for matrix in model.matrices()
        )
    products, largest = connection.work()
    growth = largest**2 if word is Reading.INTENDED else largest
    return sum(reading_seconds(block, word) for block in connection.blocks) + (
        _JOINING_SECONDS * products * (1 + growth / _GROWTH)
    )
