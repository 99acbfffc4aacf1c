"""The paired examination of one model."""

from __future__ import annotations

import time
from collections.abc import Iterable, Sequence
from typing import Final

from realize.arithmetic.floating import FloatingPath, FloatingReach, OpenedFloating
from realize.arithmetic.modular import Clock
from realize.entries import Reading, is_simple, known_word
from realize.errors import (
    AlgebraicLoopError,
    BudgetError,
    EntryError,
    PrecisionError,
    UnknownWordError,
    UnsupportedEntryError,
)
from realize.examination.accuracy import settle
from realize.examination.alike import alike
from realize.examination.doubt import weighed_modes
from realize.examination.lost import with_loss
from realize.examination.nearest import Nearest, nearest_of
from realize.examination.pairing import ExactAnswer, Replay, with_exact_ranks
from realize.examination.record import Answer, Examination, peak_memory
from realize.examination.why import by_pattern
from realize.forms.kalman import decompose, reach_and_see
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

_READING_SECONDS: Final = 6e-6
"""Estimated time to read one entry, by the slowest reading."""

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
        whether every model within it is minimal.
    budget : float or None, keyword-only
        Seconds that the exact path may take; None for no limit. When they do not suffice, the
        answer is the floating one, and says so. As many again may go to the uncertainty.

    Returns
    -------
    Examination
        Costly fields are computed at first access.

    Raises
    ------
    DisagreementError
        When the three routes to the minimal order differ, which would be a bug.
    UncertaintyError
        When the uncertainty is negative, or does not have the shapes of the model.
    UnknownWordError
        For an unknown reading, or one that does not fit the model, or an unknown uncertainty.

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
    exact, not_done, exact_seconds = _exact_answers(model, words, budget)
    orders = {word: found.order for word, found in exact.items()}
    if floating.failed is not None:
        if not exact:
            raise PrecisionError(
                f"neither path has an answer: {'; '.join(not_done)}; {floating.failed}"
            )
        not_done.append(f"the floating path did not run: {floating.failed}")
    replays = {word: floating.replay(found.stairs) for word, found in exact.items()}
    answer, about, nearest = _answer(model, exact, orders, floating, budget, not_done)
    weighed = None
    seconds = {"floating": floating.seconds, "exact": exact_seconds}
    if box is not None:
        began = time.perf_counter()
        settled = settle(box, model, exact, nearest, budget, not_done)
        answer, about, weighed = settled.answer, settled.about, settled.weighed
        seconds["uncertainty"] = time.perf_counter() - began
    radii = None if box is None else box.radii
    accuracy = None if radii is None else radii.A
    hidden = Deferred(
        lambda: weighed_modes(_hidden_modes(about, floating, answer), model, answer.basis, accuracy)
    )
    visible = Deferred(
        lambda: weighed_modes(
            _visible_modes(about, floating, budget), model, answer.basis, accuracy
        )
    )
    connection = model._connection
    stairs = {word: found.stairs for word, found in exact.items()}
    return Examination(
        model=model,
        order=model.order,
        minimal_order=orders,
        floating_order=floating.order,
        unscaled_order=floating.unscaled_order,
        paths_agree=floating.order in orders.values(),
        readings_agree=len(set(orders.values())) == 1,
        answer=answer,
        verdict=_verdict(model.order, answer, orders, floating.order, weighed),
        nearest=nearest,
        cutoff_ranges={
            word: None if replay is None else replay.interval for word, replay in replays.items()
        },
        conflicts={
            word: () if replay is None else replay.conflicts for word, replay in replays.items()
        },
        routes={word: found.routes for word, found in exact.items()},
        not_done=tuple(not_done),
        seconds=seconds,
        peak_memory=peak_memory(),
        uncertainty=given,
        weighed=weighed,
        _decisions=Deferred(lambda: with_exact_ranks(floating.decisions(), stairs)),
        _hidden=Deferred(lambda: with_loss(hidden.get(), model, answer.basis, budget)),
        _loops=Deferred(lambda: () if connection is None else connection.join().loops),
        _visible=visible,
        _alike=Deferred(
            lambda: (
                ()
                if model.kind is Kind.RATIONAL and box is None
                else alike(hidden.get() + visible.get(), model, radii)
            )
        ),
        _parts=Deferred(lambda: {word: _parts_of(found, budget) for word, found in exact.items()}),
        hidden_parts={
            word: {str(part): polynomial for part, polynomial in found.hidden.items()}
            for word, found in exact.items()
        },
        _unsimple=Deferred(lambda: _count_unsimple(model)),
        _reduction=Deferred(
            lambda: (
                reduce(floating.path, model)
                if floating.order == answer.order < model.order
                else None
            )
        ),
    )


class _Floating:
    """What the floating path says of the model; nothing, where no scaling fits doubles."""

    def __init__(self, model: Realization, tolerance: float | None) -> None:
        began = time.perf_counter()
        self.model = model
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

    def nearest(self, model: Realization, clock: Clock) -> tuple[Nearest, ExactAnswer]:
        """Return the nearest model of lower order, and what it hides."""
        return nearest_of(model, *self._ran(), clock)

    def decisions(self) -> tuple[RankDecision, ...]:
        if self.failed is not None:
            return ()
        _, run = self._ran()
        return run[0].decisions() + run[1].decisions()

    def hidden_modes(self) -> tuple[Mode, ...]:
        opened, (reach, sight) = self._ran()
        try:
            blocks = decompose(opened, reach, sight).hidden_blocks()
        except PrecisionError:
            # At this tolerance what is not reached cannot be split by what is seen of it.
            blocks = [
                (Part.CONTROLLABLE_UNOBSERVABLE, sight.quotient()),
                (Part.UNCONTROLLABLE_UNOBSERVABLE, reach.quotient()),
            ]
        return opened.modes(blocks)

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
    if model.kind == Kind.RATIONAL:
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
    model: Realization, words: Sequence[Reading], budget: float | None
) -> tuple[dict[str, ExactAnswer], list[str], float]:
    """Return reading -> exact answer; readings that give one model share one answer."""
    began = time.perf_counter()
    clock = Clock(budget)
    found: dict[str, ExactAnswer] = {}
    not_done: list[str] = []
    late: dict[str, list[str]] = {}
    for word in words:
        try:
            clock.afford(_READING_SECONDS * model.order**2, f"reading the entries as {word}")
            rational = model.read(word)
            for other in found.values():
                if other.model == rational:
                    found[str(word)] = other
                    break
            else:
                answer = ExactAnswer(rational, clock)
                answer.find_hidden()
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
    return found, not_done, time.perf_counter() - began


def _answer(
    model: Realization,
    exact: dict[str, ExactAnswer],
    orders: dict[str, int],
    floating: _Floating,
    budget: float | None,
    not_done: list[str],
) -> tuple[Answer, ExactAnswer | None, Nearest | None]:
    """Return the answer, the exact answer it rests on, and the nearest model of lower order."""
    if not exact:
        order = model.order if floating.order is None else floating.order
        return Answer(order=order, basis="floating"), None, None
    if Reading.GIVEN in exact:
        leading = [str(Reading.GIVEN)]
    else:
        leading = [str(word) for word in _LEADING if word in exact] or list(exact)
    best = min(leading, key=lambda word: orders[word])
    answer, about = Answer(order=orders[best], basis=best), exact[best]
    if floating.order is None or floating.order >= answer.order:
        return answer, about, None
    try:
        nearest, near = floating.nearest(model, Clock(budget))
    except (BudgetError, PrecisionError) as error:
        not_done.append(f"the nearest model of lower order was not formed: {error}")
        return answer, about, None
    floor = rounding_floor(model.order, 1.0)
    if model.kind == Kind.FLOATING and nearest.largest_share <= floor:
        return Answer(order=near.order, basis="nearest"), near, nearest
    return answer, about, nearest


def _parts_of(answer: ExactAnswer, budget: float | None) -> dict[str, Polynomial | None]:
    known = {**answer.hidden, Part.CONTROLLABLE_OBSERVABLE: answer.visible_within(budget)}
    return {str(part): known[part] for part in Part}


def _hidden_modes(
    about: ExactAnswer | None, floating: _Floating, answer: Answer
) -> tuple[Mode, ...]:
    if about is not None:
        return about.hidden_modes()
    # Where the exact path did not run, all may still be proved to show.
    return (
        ()
        if answer.order == floating.model.order
        else by_pattern(floating.hidden_modes(), floating.model)
    )


def _visible_modes(
    about: ExactAnswer | None, floating: _Floating, budget: float | None
) -> tuple[Mode, ...]:
    if about is None or about.visible_within(budget) is None:
        return floating.visible_modes()
    return about.visible_modes()


def _count_unsimple(model: Realization) -> int:
    if model.kind == Kind.RATIONAL:
        return 0
    read = model.read(Reading.INTENDED)
    return sum(
        not is_simple(value)
        for matrix, exact in zip(model.matrices(), read.matrices(), strict=True)
        for value in exact.ravel().tolist()
    )


def _verdict(
    order: int,
    answer: Answer,
    orders: dict[str, int],
    floating_order: int | None,
    weighed: Weighed | None,
) -> str:
    """Return the answer in one sentence."""
    grounds = {
        "given": "proved for the model as given",
        "stored": "proved for the doubles as stored",
        "written": "proved for the decimals as written",
        "intended": "proved for the fractions as intended, which is a hypothesis",
        "nearest": "proved for a model within rounding of this one",
        "floating": "by the floating path alone, nothing is proved",
    }[answer.basis]
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
    others = [f"{word} gives {value}" for word, value in orders.items() if value != answer.order]
    if floating_order not in (None, answer.order) and answer.basis != "floating":
        others.append(f"the floating path gives {floating_order}")
    return f"{text}; {grounds}" + (f" ({', '.join(others)})" if others else "")
