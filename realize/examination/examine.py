"""The paired examination of one model."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property
from typing import Final

import numpy as np

from realize.arithmetic.floating import FloatingPath, FloatingReach, OpenedFloating
from realize.arithmetic.modular import Clock
from realize.entries import Reading, is_simple, known_word, read_float
from realize.errors import (
    AlgebraicLoopError,
    BudgetError,
    EntryError,
    LimitError,
    PrecisionError,
    UnknownWordError,
    UnsupportedEntryError,
)
from realize.examination.accuracy import Settled, settle
from realize.examination.alike import alike
from realize.examination.doubt import with_doubt
from realize.examination.eigenvectors import Eigenvectors
from realize.examination.lost import with_loss
from realize.examination.nearest import Answered, Nearest, nearest_of
from realize.examination.pairing import ExactAnswer, Replay, replayed, with_exact_ranks
from realize.examination.record import Answer, Examination, peak_memory
from realize.examination.stepped import SteppedAnswer
from realize.examination.why import Coordinates, by_pattern
from realize.forms.kalman import hidden_blocks, reach_and_see
from realize.forms.minimal import reduce
from realize.forms.sources import accept
from realize.model.realization import Kind, Realization
from realize.polynomials import Polynomial
from realize.results import Deferred, Mode, Part, RankDecision
from realize.tolerance import check_tolerance, rounding_floor
from realize.uncertainty import Uncertainty, as_uncertainty
from realize.within.box import Box
from realize.within.weigh import Weighed, Within

__all__ = ["DEFAULT_BUDGET", "examine"]

DEFAULT_BUDGET: Final = 10.0
"""Seconds that the exact path may take in one examination, unless another budget is given."""

STEPS_BUDGET: Final = 5.0
"""Seconds that the multiprecision steps may take in one examination where its budget is smaller.

They run only where the exact path has no answer, and are most wanted where its budget is small.
"""

LARGEST_FOR_EIGENVECTORS: Final = 300
"""Up to this order eigenvectors are always asked for hidden modes that no staircase shows; they
cost some twenty times as much as a staircase."""

_VISIBLE_ORDER: Final = 24
"""Up to this order the modes that show are computed with many digits where nothing is exact."""

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

_READINGS: Final = (Reading.STORED, Reading.WRITTEN, Reading.INTENDED)
_LEADING: Final = (Reading.STORED, Reading.WRITTEN)
"""Readings that may lead an answer; `intended` is a hypothesis and never does."""


def examine(
    model: Realization,
    *,
    readings: Iterable[str] | None = None,
    tolerance: float | None = None,
    uncertainty: Uncertainty | float | str | None = None,
    budget: float | None = DEFAULT_BUDGET,
) -> Examination:
    """Examine a model on both paths: which modes are hidden, and how much is the tolerance's doing.

    Parameters
    ----------
    model : Realization, A (n, n), B (n, m), C (p, n), D (p, m).
    readings : iterable of str, keyword-only
        Which exact models the floats stand for. None: "stored", "written" and "intended"; a
        rational model has one reading, "given".
    tolerance : float, keyword-only
        For the floating path: the cutoff is this times the Frobenius norm of the scaled model.
        None for the default, order * 2**-32.
    uncertainty : number, "ulp", "last digit", Uncertainty or None, keyword-only
        How far each entry may lie from the number given; a number is relative, and zeros stay
        zero. Then the answer is the lowest order found within it, and `within_uncertainty` says
        whether every model within it is minimal. This may take as long as the exact path.
    budget : float or None, keyword-only
        Seconds that the exact path may take; None for no limit. When they do not suffice for any
        reading that may lead, and for irrational constants, the answer is that of steps of
        rising precision, which may take as long, and `STEPS_BUDGET` seconds at the least; when
        these do not suffice either, it is the floating one. Both say that nothing is proved.

    Returns
    -------
    Examination
        Costly fields are computed at first access.

    Raises
    ------
    DisagreementError
        When the three routes to the minimal order differ, which would be a bug.
    PrecisionError
        When no path has an answer.
    UncertaintyError
        When the uncertainty is negative, or does not have the shapes of the model.
    UnknownWordError
        For an unknown reading, or one that does not fit the model.

    References
    ----------
    Kalman (1963), Mathematical description of linear dynamical systems, SIAM J. Control 1. The
    replay rests on the stairs being invariants: Brunovsky (1970), Kybernetika 6.

    Examples
    --------
    >>> import realize
    >>> model = realize.Realization([[-1, 0], [0, -2]], [1, 0], [1, 1])
    >>> examination = realize.examine(model)
    >>> examination.minimal_order
    {'given': 1}
    >>> [(mode.value, str(mode.part)) for mode in examination.hidden_modes]
    [((-2+0j), 'uncontrollable, observable')]
    """
    accept(model, Realization)
    given = as_uncertainty(uncertainty)
    box = None if given is None else Box.of(model, given)
    words = _readings_of(model, readings)
    tolerance = check_tolerance(tolerance)
    _check_budget(budget)
    floating = _Floating(model, tolerance)
    exact, not_done, exact_seconds = _exact_answers(
        model, words, budget, floating_ran=floating.failed is None
    )
    orders = {word: found.order for word, found in exact.items()}
    if floating.failed is not None:
        not_done.append(f"the floating path did not run: {floating.failed}")
    replays = {word: floating.replay(found.stairs) for word, found in exact.items()}
    seconds = {"floating": floating.seconds, "exact": exact_seconds}
    began = time.perf_counter()
    found = _answered(model, words, exact, floating, budget, not_done)
    if found.stepped:
        seconds["multiprecision"] = time.perf_counter() - began
    weighed = None
    if box is not None:
        began = time.perf_counter()
        settled = settle(box, model, exact, found.nearest, budget, not_done)
        seconds["uncertainty"] = time.perf_counter() - began
        found, weighed = _within(found, settled), settled.weighed
    answer, about = found.answer, found.about
    radii = None if box is None else box.radii

    def of_data(modes: tuple[Mode, ...], exactly: bool) -> tuple[Mode, ...]:
        return with_doubt(modes, model, found.word, None if radii is None else radii.A, exactly)

    def hidden_ones() -> tuple[Mode, ...]:
        if about is None:
            # Where the exact path did not run, all may still be proved to show.
            shows = answer.basis != "floating"
            modes = () if shows else by_pattern(floating.hidden_modes(), model)
        elif isinstance(about, ExactAnswer) and about.hidden is None:
            modes = by_pattern(floating.hidden_modes(about.stairs), model)
        else:
            return with_loss(of_data(about.hidden_modes(), True), model, answer.basis, budget)
        return with_loss(of_data(modes, False), model, answer.basis, budget)

    hidden = Deferred(hidden_ones)
    visible = Deferred(lambda: of_data(*_visible_modes(about, floating, budget, model)))
    connection = model._connection
    stairs = {word: each.stairs for word, each in exact.items()}
    return Examination(
        model=model,
        order=model.order,
        minimal_order=orders,
        floating_order=floating.order,
        unscaled_order=floating.unscaled_order,
        paths_agree=floating.order in orders.values(),
        readings_agree=len(set(orders.values())) == 1,
        answer=answer,
        verdict=_verdict(model.order, found, orders, floating.order, weighed),
        nearest=found.nearest,
        cutoff_ranges={
            word: None if replay is None else replay.interval for word, replay in replays.items()
        },
        conflicts={
            word: () if replay is None else replay.conflicts for word, replay in replays.items()
        },
        routes={word: each.routes for word, each in exact.items()},
        not_done=tuple(not_done),
        seconds=seconds,
        peak_memory=peak_memory(),
        precision_steps={word: each.steps for word, each in found.stepped.items()},
        _decisions=Deferred(lambda: with_exact_ranks(floating.decisions(), stairs)),
        uncertainty=given,
        weighed=weighed,
        _hidden=hidden,
        _loops=Deferred(lambda: () if connection is None else connection.join().loops),
        _visible=visible,
        _alike=Deferred(
            lambda: (
                alike(hidden.get() + visible.get(), model, radii)
                if model.kind is Kind.FLOATING or box is not None
                else ()
            )
        ),
        _parts=Deferred(lambda: {word: _parts_of(each, budget) for word, each in exact.items()}),
        hidden_parts={
            word: {str(part): polynomial for part, polynomial in (each.hidden or {}).items()}
            for word, each in exact.items()
        },
        _unsimple=Deferred(lambda: _count_unsimple(model)),
        _reduction=Deferred(
            lambda: (
                reduce(floating.path, model)
                if floating.order == answer.order < model.order
                else None
            )
        ),
        _nearly_hidden=Deferred(floating.nearly_hidden),
    )


class _Floating:
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


def _readings_of(model: Realization, readings: Iterable[str] | None) -> tuple[Reading, ...]:
    if isinstance(readings, str):
        raise UnknownWordError(
            f"readings is the text {readings!r}; wanted a list of words, such as ({readings!r},)",
            argument="readings",
            found=readings,
        )
    if model.kind != Kind.FLOATING:
        for word in readings or ():
            known_word(Reading, word, "readings")
        return (Reading.GIVEN,)
    if readings is None:
        return _READINGS
    words = tuple(dict.fromkeys(known_word(Reading, word, "readings") for word in readings))
    for word in words:
        if word is Reading.GIVEN:
            raise UnknownWordError(
                'readings holds "given", but the model has floats; wanted some of "stored", '
                '"written", "intended"',
                argument="readings",
                found="given",
                allowed=tuple(str(known) for known in _READINGS),
            )
    if not words:
        raise UnknownWordError(
            'readings is empty; wanted some of "stored", "written", "intended", or None for all',
            argument="readings",
            found="",
            allowed=tuple(str(known) for known in _READINGS),
        )
    return words


def _check_budget(budget: float | None) -> None:
    if budget is None:
        return
    if isinstance(budget, bool) or not isinstance(budget, (int, float)) or not budget >= 0:
        raise UnsupportedEntryError(
            f"budget is {budget!r}; wanted seconds, not negative, or None for no limit"
        )


def _exact_answers(
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
            clock.afford(_reading_seconds(model, word), f"reading the entries as {word}")
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
class _Found:
    """An answer, and what it rests on.

    ``word``: the reading it is about, or "nearest", or "floating". ``about``: what an exact path,
    or one of many digits, says of that model; None where only the floating path has an answer.
    """

    answer: Answer
    word: str
    about: ExactAnswer | SteppedAnswer | None = None
    nearest: Nearest | None = None
    stepped: dict[str, SteppedAnswer] = field(default_factory=dict)


def _answered(
    model: Realization,
    words: Sequence[Reading],
    exact: dict[str, ExactAnswer],
    floating: _Floating,
    budget: float | None,
    not_done: list[str],
) -> _Found:
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
        found = _Found(Answer(order=order, basis=best), best, exact[best])
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
    found = _Found(Answer(order=floating.order, basis="floating"), "floating")
    # Where the exact path has no time for the model, it has none for one near it.
    return found if leading else _or_nearest(model, found, floating, budget, not_done)


def _within(found: _Found, settled: Settled) -> _Found:
    """Return the answer within an uncertainty, where one was settled exactly."""
    if settled.about is None and settled.weighed.within is Within.OPEN:
        return found
    return replace(found, answer=settled.answer, word=settled.answer.basis, about=settled.about)


def _or_nearest(
    model: Realization,
    found: _Found,
    floating: _Floating,
    budget: float | None,
    not_done: list[str],
) -> _Found:
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
        return _Found(Answer(order=near.order, basis="nearest"), "nearest", near, nearest)
    return replace(found, nearest=nearest)


def _by_steps(
    model: Realization,
    stepped: dict[str, SteppedAnswer],
    floating: _Floating,
    clock: Clock,
    not_done: list[str],
) -> _Found:
    """Return the answer of the steps: of a reading, or of the nearest model within rounding."""
    best = min(stepped, key=lambda word: stepped[word].order)
    stepped = {best: stepped[best], **stepped}
    about = stepped[best]
    found = _Found(Answer(order=about.order, basis="multiprecision"), best, about, stepped=stepped)
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
        return _Found(Answer(order=order, basis="floating"), "floating", stepped=stepped)
    nearest, near = pair
    if _within_rounding(model, nearest):
        return _Found(
            Answer(order=near.order, basis="multiprecision"),
            "nearest",
            near,
            nearest,
            {"nearest": near, **stepped},
        )
    return replace(found, nearest=nearest)


def _formed(
    model: Realization,
    floating: _Floating,
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


def _has_more_nearly_hidden(model: Realization, floating: _Floating, above: int) -> bool:
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
            clock.afford(_reading_seconds(model, word), f"reading the entries as {word}")
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


def _reading_seconds(model: Realization, word: Reading) -> float:
    """Return the estimated time to read a model, blocks and connection included."""
    connection = model._connection
    if connection is None:
        return sum(
            _ZERO_SECONDS * matrix.size + _READING_SECONDS[word] * np.count_nonzero(matrix)
            for matrix in model.matrices()
        )
    products, largest = connection.work()
    growth = largest**2 if word is Reading.INTENDED else largest
    return sum(_reading_seconds(block, word) for block in connection.blocks) + (
        _JOINING_SECONDS * products * (1 + growth / _GROWTH)
    )


def _parts_of(answer: ExactAnswer, budget: float | None) -> dict[str, Polynomial | None]:
    known = {**(answer.hidden or {}), Part.CONTROLLABLE_OBSERVABLE: answer.visible_within(budget)}
    return {str(part): known.get(part) for part in Part}


def _visible_modes(
    about: ExactAnswer | SteppedAnswer | None,
    floating: _Floating,
    budget: float | None,
    model: Realization,
) -> tuple[tuple[Mode, ...], bool]:
    """Return the modes that show, and whether they are more than computed in doubles."""
    if isinstance(about, SteppedAnswer):
        if model.order > _VISIBLE_ORDER and floating.failed is None:
            return floating.visible_modes(), False
    elif about is None or about.visible_within(budget) is None:
        return floating.visible_modes(), False
    return about.visible_modes(), True


def _count_unsimple(model: Realization) -> int:
    return sum(not is_simple(read_float(value, Reading.INTENDED)) for value in model._floats())


def _verdict(
    order: int,
    found: _Found,
    orders: dict[str, int],
    floating_order: int | None,
    weighed: Weighed | None,
) -> str:
    """Return the answer in one sentence."""
    answer = found.answer
    about = {
        "given": "the model as given",
        "stored": "the doubles as stored",
        "written": "the decimals as written",
        "nearest": "a model within rounding of this one",
        "floating": "",
    }[found.word]
    if answer.basis == "floating":
        grounds = "by the floating path alone, nothing is proved"
    elif isinstance(found.about, SteppedAnswer):
        digits = found.about.steps.digits
        grounds = (
            f"by steps of {digits[0]} to {digits[-1]} digits, evidence and not proof, for {about}"
            if found.about.steps.is_settled
            else f"by steps of up to {digits[-1]} digits that are not settled, so a guess, for "
            f"{about}"
        )
    else:
        grounds = f"proved for {about}"
    if weighed is not None and weighed.within is Within.MINIMAL:
        grounds = "proved for every model within the uncertainty"
    elif weighed is not None and answer.basis == "nearest":
        grounds = "proved for a model within the uncertainty"
    elif weighed is not None and weighed.within is Within.OPEN:
        grounds += ", but open for other models within the uncertainty"
    if answer.order == order:
        text = "minimal: it has no states"
        if order:
            text = (
                "minimal: its one state shows"
                if order == 1
                else f"minimal: all {order} states show"
            )
    else:
        hidden = order - answer.order
        text = (
            f"not minimal: {hidden} of {order} states {'is' if hidden == 1 else 'are'} hidden, "
            f"order {answer.order} remains"
        )
    seen = orders | {f"steps as {word}": each.order for word, each in found.stepped.items()}
    others = [f"{word} gives {value}" for word, value in seen.items() if value != answer.order]
    if floating_order not in (None, answer.order) and answer.basis != "floating":
        others.append(f"the floating path gives {floating_order}")
    return f"{text}; {grounds}" + (f" ({', '.join(others)})" if others else "")
