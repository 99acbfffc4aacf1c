"""The paired examination of one model."""

from __future__ import annotations

import time
from collections.abc import Iterable
from typing import Final

from realize.entries import Reading, is_simple, known_word, read_float
from realize.errors import EntryError, UnknownWordError, UnsupportedEntryError
from realize.examination.accuracy import settle
from realize.examination.alike import alike
from realize.examination.answer import Found, answered, exact_answers, with_uncertainty
from realize.examination.doubt import with_doubt
from realize.examination.floating_answer import FloatingAnswer
from realize.examination.lost import with_loss
from realize.examination.pairing import ExactAnswer, with_exact_ranks
from realize.examination.record import Examination, peak_memory
from realize.examination.stepped import SteppedAnswer
from realize.examination.why import by_pattern
from realize.forms.minimal import reduce
from realize.forms.sources import accept
from realize.model.realization import Kind, Realization
from realize.polynomials import Polynomial
from realize.results import Deferred, Mode, Part
from realize.tolerance import check_tolerance
from realize.uncertainty import Uncertainty, as_uncertainty
from realize.within.box import Box
from realize.within.weigh import Weighed, Within

__all__ = ["DEFAULT_BUDGET", "examine"]

DEFAULT_BUDGET: Final = 10.0
"""Seconds that the exact path may take in one examination, unless another budget is given."""


_VISIBLE_ORDER: Final = 24
"""Up to this order the modes that show are computed with many digits where nothing is exact."""


_READINGS: Final = (Reading.STORED, Reading.WRITTEN, Reading.INTENDED)


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
    floating = FloatingAnswer(model, tolerance)
    exact, not_done, exact_seconds = exact_answers(
        model, words, budget, floating_ran=floating.failed is None
    )
    orders = {word: found.order for word, found in exact.items()}
    if floating.failed is not None:
        not_done.append(f"the floating path did not run: {floating.failed}")
    replays = {word: floating.replay(found.stairs) for word, found in exact.items()}
    seconds = {"floating": floating.seconds, "exact": exact_seconds}
    began = time.perf_counter()
    found = answered(model, words, exact, floating, budget, not_done)
    if found.stepped:
        seconds["multiprecision"] = time.perf_counter() - began
    weighed = None
    if box is not None:
        began = time.perf_counter()
        settled = settle(box, model, exact, found.nearest, budget, not_done)
        seconds["uncertainty"] = time.perf_counter() - began
        found, weighed = with_uncertainty(found, settled), settled.weighed
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


def _parts_of(answer: ExactAnswer, budget: float | None) -> dict[str, Polynomial | None]:
    known = {**(answer.hidden or {}), Part.CONTROLLABLE_OBSERVABLE: answer.visible_within(budget)}
    return {str(part): known.get(part) for part in Part}


def _visible_modes(
    about: ExactAnswer | SteppedAnswer | None,
    floating: FloatingAnswer,
    budget: float | None,
    model: Realization,
) -> tuple[tuple[Mode, ...], bool]:
    """Return the modes that show, and whether they are more than computed in doubles."""
    if isinstance(about, SteppedAnswer):
        if model.order > _VISIBLE_ORDER and floating.failed is None:
            return floating.visible_modes(), False
    elif about is None or about.visible_within(budget) is None:
        return floating.visible_modes(), False
    try:
        return about.visible_modes(), True
    except EntryError:
        # One of them is too large for a double; the table says how many are missing.
        return floating.visible_modes(), False


def _count_unsimple(model: Realization) -> int:
    return sum(not is_simple(read_float(value, Reading.INTENDED)) for value in model._floats())


def _verdict(
    order: int,
    found: Found,
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
