"""The page that a person reads: the answer first, the explanation after."""

from __future__ import annotations

import sys
import textwrap
from collections.abc import Iterable
from typing import TYPE_CHECKING

from realize.polynomials import Polynomial
from realize.polynomials import text as polynomial_text
from realize.results import Mode, Part, Side
from realize.stability import Stability
from realize.tolerance import default_tolerance
from realize.within.weigh import Weighed, Within

if TYPE_CHECKING:
    from realize.arithmetic.steps import PrecisionSteps
    from realize.examination.record import Examination

__all__ = ["findings", "page"]

WIDTH = 80
_MARGIN = 11
_BLUR = 1e-6
"""Share of the largest entry of A below which a doubtful mode's distance from the axis is noise."""

_ROUNDING = 1e-12
"""Relative change of a response below which a size and a place would be those of rounding."""

_SHORT = 12
"""Up to this order the polynomial of the visible part is shown."""


def page(examination: Examination, name: str = "") -> str:
    """Return the examination as lines of at most 80 columns; the name is the model's."""
    lines = [findings(examination, name), "", *_tables(examination), *_ran(examination)]
    if examination.cautions:
        lines.append("")
        for caution in examination.cautions:
            lines.extend(_field("Caution", caution))
    return "\n".join(lines)


def findings(examination: Examination, name: str = "") -> str:
    """Return what the page begins with: the answer, and what follows from it."""
    lines: list[str] = []
    for label, text in (
        ("Model", (f"{name}: " if name else "") + _model(examination)),
        ("Answer", examination.verdict[0].upper() + examination.verdict[1:] + "."),
        ("Danger", _danger(examination)),
        ("Hidden", _hidden(examination)),
        ("Why", _why(examination)),
        ("Basis", _basis(examination)),
        *([("Within", _within(examination))] if examination.weighed else []),
        ("Cutoffs", _cutoffs(examination)),
        ("Removal", _removal(examination)),
        ("Next", _next(examination)),
        ("Not done", _not_done(examination)),
    ):
        lines.extend(_field(label, text))
    return "\n".join(lines)


def _field(label: str, text: str) -> list[str]:
    return textwrap.wrap(
        text,
        WIDTH,
        initial_indent=f"{label:<{_MARGIN}}",
        subsequent_indent=" " * _MARGIN,
        break_on_hyphens=False,
    )


def _count(number: int, thing: str) -> str:
    return f"{number} {thing}{'' if number == 1 else 's'}"


def number_text(value: float) -> str:
    """Return a number short enough to read."""
    return f"{value:.6g}"


def mode_text(value: complex) -> str:
    """Return a mode's value short enough to read; a pair is named by its upper member."""
    if value.imag == 0.0:
        return number_text(value.real)
    sign = "+-" if value.imag > 0 else "-+"
    return f"{number_text(value.real)} {sign} {number_text(abs(value.imag))}j"


def _named(examination: Examination, modes: Iterable[Mode]) -> list[tuple[str, Mode, int]]:
    """Return each mode's text, the mode, and how often it occurs in its part.

    A mode of which it cannot be told whether it decays is named by the place on the boundary that
    it cannot be told from; its other digits are noise.
    """
    blur = _BLUR * _largest(examination) if modes else 0.0
    found: dict[tuple[str, Part], tuple[str, Mode, int]] = {}
    for mode in modes:
        # Within an uncertainty that was given the value is one of many, but no noise.
        doubtful = mode.stability is Stability.CANNOT_TELL and examination.weighed is None
        value = mode.value
        if doubtful and examination.model.sampling_period is None:
            value = complex(0.0, value.imag if abs(value.imag) > blur else 0.0)
        elif doubtful:
            value = value / abs(value)
            value = complex(value.real, value.imag if abs(value.imag) > _BLUR else 0.0)
        if value.imag < 0.0:
            continue
        text = f"{'about ' if doubtful else ''}{mode_text(value)}"
        _, first, times = found.get((text, mode.part), (text, mode, 0))
        found[text, mode.part] = (text, first, times + mode.multiplicity)
    return list(found.values())


def _largest(examination: Examination) -> float:
    entries = examination.model.A.ravel().tolist()
    return max((float(min(abs(value), sys.float_info.max)) for value in entries), default=0.0)


def _times(count: int) -> str:
    return f" (x{count})" if count > 1 else ""


def _model(examination: Examination) -> str:
    model = examination.model
    period = model.sampling_period
    domain = "continuous time" if period is None else f"discrete time, period {float(period):g}"
    return (
        f"{_count(examination.order, 'state')}, {_names(model.input_names)} to "
        f"{_names(model.output_names)}, {domain}, {model.kind}, "
        f"digest {model.digest[:12]}"
    )


def _names(names: tuple[str, ...]) -> str:
    if not names:
        return "nothing"
    shown = ", ".join(names[:4])
    return shown if len(names) <= 4 else f"{shown} and {len(names) - 4} more"


def _danger(examination: Examination) -> str:
    hidden = examination.hidden_modes
    for stability, text in (
        (Stability.UNSTABLE, "a hidden mode is unstable"),
        (Stability.MARGINAL, "a hidden mode does not decay"),
        (Stability.CANNOT_TELL, "it cannot be told whether a hidden mode decays"),
    ):
        found = _named(examination, [mode for mode in hidden if mode.stability is stability])
        if found:
            named = ", ".join(
                f"{value} ({mode.part}{_doubling(mode)})" for value, mode, _ in found[:4]
            )
            return (
                f"{text}: {named}. The transfer function does not show it, the plant has it. "
                f"Stabilizable: {examination.stabilizable}. Detectable: {examination.detectable}."
            )
    if not hidden:
        near = examination.nearest
        if near is not None and near.order < examination.answer.order:
            return (
                f"no mode is hidden, but a model at relative distance {near.relative_distance:.2g} "
                f"hides {_count(examination.order - near.order, 'mode')}; what those do, the "
                "transfer function of that model does not show."
            )
        if examination.within_uncertainty is Within.OPEN:
            return (
                "no mode is hidden in the model itself; whether one is, and whether that is "
                "stable, is open for other models within the uncertainty."
            )
        steps = examination.leading_steps
        if steps is not None and not steps.is_settled:
            return (
                "no hidden mode was found, but the steps of precision are not settled: one may be "
                "hidden, and may be unstable."
            )
        return "no mode is hidden, so none can be unstable unseen."
    constants = [mode.time_constant for mode in hidden]
    slowest = max((constant for constant in constants if constant is not None), default=0.0)
    settles = f"the slowest has a time constant of {number_text(slowest)}"
    if None in constants:
        settles = "the slowest decays too slowly for its time constant to be told from none"
    elif not slowest:
        settles = "all of them are delays, which die out in as many steps"
    return (
        f"every hidden mode is stable; {settles}. Stabilizable: {examination.stabilizable}. "
        f"Detectable: {examination.detectable}."
    )


def _hidden(examination: Examination) -> str:
    modes = _named(examination, examination.hidden_modes)
    if not modes:
        return "nothing."
    shown = "; ".join(
        f"{value}{_times(times)}{' (a delay)' if _is_delay(examination, mode) else ''}, {mode.part}"
        for value, mode, times in modes[:6]
    )
    return shown + (f"; and {len(modes) - 6} more." if len(modes) > 6 else ".")


def _is_delay(examination: Examination, mode: Mode) -> bool:
    return examination.model.sampling_period is not None and mode.value == 0


def _why(examination: Examination) -> str:
    modes = _named(examination, examination.hidden_modes)
    if not modes:
        return "every state is reached and seen."
    untold = "not told, because no exact polynomial stands behind it"
    if all(mode.why is None for _, mode, _ in modes):
        return f"{untold}."
    grouped: dict[str, list[str]] = {}
    for value, mode, _ in modes:
        reason = (mode.why or untold) + ("" if mode.lost is None else f", {mode.lost}")
        grouped.setdefault(reason, []).append(value)
    texts = [
        f"{', '.join(values[:4])}{f' and {len(values) - 4} more' if len(values) > 4 else ''}: {why}"
        for why, values in list(grouped.items())[:4]
    ]
    if len(grouped) > 4:
        rest = sum(len(values) for values in list(grouped.values())[4:])
        texts.append(f"and {rest} more")
    return "; ".join(texts) + "."


def _doubling(mode: Mode) -> str:
    if mode.stability is not Stability.UNSTABLE or mode.doubling_time is None:
        return ""
    return f", doubles in {number_text(mode.doubling_time)}"


def _basis(examination: Examination) -> str:
    floating = examination.floating_order
    if examination.minimal_order:
        orders = ", ".join(f"{word} {value}" for word, value in examination.minimal_order.items())
        text = f"exact minimal order: {orders}; "
    elif examination.precision_steps:
        text = f"the exact path did not run; nothing here is proved. {_steps(examination)}; "
    else:
        return "the exact path did not run; nothing here is proved."
    text += "the floating path did not run" if floating is None else f"floating path: {floating}"
    if examination.unscaled_order not in (None, floating):
        text += f" ({examination.unscaled_order} without scaling)"
    if examination.nearest is not None:
        nearest = examination.nearest
        kind = "n exact" if examination.leading_steps is None else ""
        text += (
            f". A{kind} model of order {nearest.order} lies at relative distance "
            f"{nearest.relative_distance:.2g}"
        )
    if examination.model.kind == "floating" and "intended" in examination.minimal_order:
        count = examination.entries_without_simple_fraction
        if count:
            text += (
                f". {_count(count, 'entry' if count == 1 else 'entrie')} with no simple fraction"
            )
    return text + "."


def _steps(examination: Examination) -> str:
    """Say what the steps of precision found, and whether they settle it."""
    told: dict[str, list[str]] = {}
    for word, steps in examination.precision_steps.items():
        *fewer, most = map(str, steps.digits)
        digits = f"{', '.join(fewer)} and {most} digits"
        unsettled = [step for step in steps.steps if not step.is_settled]
        if unsettled:
            text = (
                f"order {steps.order}, NOT settled at {digits} ({len(unsettled)} of "
                f"{_count(len(steps.steps), 'value')} neither stays nor shrinks as it must, the "
                f"first at {unsettled[0].where})"
            )
        else:
            text = f"order {steps.order}, every step settled at {digits}"
        told.setdefault(text, []).append(word)
    texts = [f"as {', '.join(words)}: {text}" for text, words in told.items()]
    return "Steps of precision " + "; ".join(texts)


def _cutoffs(examination: Examination) -> str:
    if not examination.cutoff_ranges:
        fragile = examination.fragile
        told = "no exact ranks to compare with."
        return told + (f" Fragile: {', '.join(fragile)}." if fragile else "")
    if examination.floating_order is None:
        return "none; the floating path did not run."
    scale = next((d.scale for d in examination.decisions), 0.0)
    cutoff = next((d.cutoff for d in examination.decisions), 0.0)
    grouped: dict[str, list[str]] = {}
    for reading, span in examination.cutoff_ranges.items():
        if span is None:
            conflict = "; ".join(examination.conflicts[reading])
            text = f"no single cutoff gives the exact ranks ({conflict})"
        else:
            inside = "inside" if span[0] <= cutoff < span[1] else "OUTSIDE"
            upper = "any size" if span[1] == float("inf") else f"{span[1]:.2g}"
            text = f"{span[0]:.2g} to {upper}, the one used is {inside}"
        grouped.setdefault(text, []).append(reading)
    texts = [f"{', '.join(words)}: {text}" for text, words in grouped.items()]
    used = f"used {cutoff:.2g} (scale {scale:.3g}"
    used += f", default tolerance {default_tolerance(examination.order):.2g})"
    told = "; ".join(texts) + f"; {used}."
    if examination.fragile:
        told += f" Fragile: {', '.join(examination.fragile)}."
    return told


def _removal(examination: Examination) -> str:
    if not examination.hidden_modes:
        return "nothing to remove."
    removed = examination.order - examination.answer.order
    text = (
        f"the minimal realization has {_count(examination.answer.order, 'state')}, {removed} "
        "fewer; what is removed stays in the plant."
    )
    change = examination.response_change
    if change is None:
        return text + " The floating path does not give this order, so its reduction is another."
    if change.relative < _ROUNDING:
        return text + " In doubles the frequency response stays what it was, to rounding."
    return (
        f"{text} In doubles it moves the frequency response by {change.relative:.2g} of its "
        f"largest value, at {number_text(change.frequency)} rad per unit of time."
    )


def _next(examination: Examination) -> str:
    status = examination.status
    told = {mode.stability for mode in examination.hidden_modes}
    steps = examination.leading_steps
    if status == 4 and not told & {Stability.UNSTABLE, Stability.MARGINAL}:
        if steps is not None and examination.model.kind != "floating":
            return (
                "work out by hand whether the hidden mode lies on the boundary, which no number of "
                "digits can tell. Until then treat it as one that does not decay."
            )
        return (
            "go back for better data, or give the entries exactly: these numbers do not tell "
            "whether the hidden mode decays. Until then treat it as one that does not."
        )
    if status == 4:
        return (
            "do not ship the reduced model as a model of the plant. Move a sensor or an actuator, "
            "or stop cancelling that pole; then examine again."
        )
    if examination.within_uncertainty is Within.OPEN:
        return _to_settle(examination)
    if steps is not None and status == 3:
        return _after_steps(examination, steps)
    if status == 3:
        return "give the exact path a larger budget, or treat the order as a guess."
    if examination.answer.order < examination.order:
        return _how_to_reduce(examination)
    if examination.within_uncertainty is Within.MINIMAL:
        return "use the model as it is: nothing within the uncertainty hides a mode."
    if not examination.paths_agree or not examination.readings_agree:
        return "say which reading is meant before a routine with a tolerance decides for you."
    return "use the model as it is."


def _after_steps(examination: Examination, steps: PrecisionSteps) -> str:
    """Say how far to trust steps of precision, and how to get further."""
    if examination.model._holds_constants():
        more = "nothing proves the order, and no larger budget does"
        further = "look with more digits through realize.multiprecision"
    else:
        more = "a larger budget for the exact path proves the order"
        further = "give the exact path a larger budget"
    if not steps.is_settled:
        return f"treat the order as a guess; {further}."
    if examination.answer.order == examination.order:
        return f"use the model as it is; {more}."
    return (
        f"reduce with realize.multiprecision.minimal at {steps.digits[-1]} digits, and keep the "
        f"list of what was removed; {more}."
    )


def _how_to_reduce(examination: Examination) -> str:
    """Say which reduction gives the answer, and not another one."""
    basis = examination.answer.basis
    kept = "and keep the list of what was removed"
    if basis in ("stored", "written"):
        return f"reduce with `realize minimal --reading {basis}`, {kept}."
    if basis == "nearest" and examination.witness is not None:
        return (
            "the data do not tell this model from the witness, which --json prints and `realize "
            f"minimal` reduces: reduce that, {kept}; or go back for better data."
        )
    if basis == "nearest":
        return f"reduce with `realize minimal`, whose floating path gives this order, {kept}."
    return f"reduce with `realize minimal`, {kept}."


def _not_done(examination: Examination) -> str:
    undone = list(examination.not_done)
    weighed = examination.weighed
    if weighed is None:
        undone.append("no uncertainty was given, so none was weighed")
    elif weighed.unfinished is not None:
        undone.append(f"the uncertainty was weighed, but not settled: {weighed.unfinished}")
    return "; ".join(undone or ["nothing"]) + "."


def _within(examination: Examination) -> str:
    """Say what was weighed and what came of it."""
    weighed = examination.weighed
    if weighed is None:
        raise AssertionError("no uncertainty was weighed")
    given = f"uncertainty {examination.uncertainty}"
    if weighed.within is Within.MINIMAL:
        more = "twice it" if weighed.proved >= 2 else f"{_down(weighed.proved)} times it"
        more = f", and within {more}," if weighed.proved >= 1.01 else ""
        return f"{given}: every model within it{more} is minimal, proved."
    proved = f"within {_down(weighed.proved)} of it every model is minimal, proved"
    if weighed.within is Within.NOT_MINIMAL:
        text = f"{given}: an exact model within it, the witness, is not minimal"
        if weighed.point is not None and weighed.reached < 1:
            text += f"; {weighed.reached:.2g} of it suffices to hide {_nearby(weighed)}"
        return f"{text}; {proved}." if weighed.proved > 0 else f"{text}."
    text = f"{given}: open. {proved[0].upper()}{proved[1:]}"
    if weighed.point is None:
        return f"{text}; no model that is not minimal was found."
    return f"{text}; {weighed.reached:.3g} times it suffices to hide {_nearby(weighed)}."


def _down(factor: float) -> str:
    """Return a proved factor to three digits, not rounded up."""
    shown = float(f"{factor:.3g}")
    return f"{factor * (1 - 5e-3):.3g}" if shown > factor else f"{shown:g}"


def _nearby(weighed: Weighed) -> str:
    """Name the mode that is hidden nearest."""
    point = weighed.point or 0j
    how = "from the inputs" if weighed.side is Side.INPUT else "from the outputs"
    return f"a mode at {mode_text(point)} {how}"


def _to_settle(examination: Examination) -> str:
    """Say what would settle an open question."""
    weighed = examination.weighed
    if weighed is None or not weighed.weights:
        return (
            "give a larger budget, or a smaller uncertainty; until then it is open whether the "
            "data hide a mode."
        )
    entries = ", ".join(f"{name} ({share:.0%})" for name, share in weighed.weights)
    return (
        f"measure better what counts most: {entries}. A larger budget may settle it as well; "
        "until then it is open whether the data hide a mode."
    )


def _shown_parts(examination: Examination) -> dict[str, dict[str, Polynomial | int | None]]:
    """Return the polynomials, and a degree instead of a long visible one, which costs too much."""
    shown: dict[str, dict[str, Polynomial | int | None]] = {}
    for word, hidden in examination.hidden_parts.items():
        visible: Polynomial | int | None = examination.minimal_order[word]
        if examination.order <= _SHORT:
            visible = examination.parts[word][Part.CONTROLLABLE_OBSERVABLE]
        known = {**hidden, str(Part.CONTROLLABLE_OBSERVABLE): visible}
        shown[word] = {str(part): known.get(str(part)) for part in Part}
    return shown


def _short(polynomial: Polynomial | int | None, variable: str) -> str:
    if polynomial is None:
        return "not computed within the budget"
    if isinstance(polynomial, int):
        return f"degree {polynomial}"
    if all(abs(c.numerator) < 10**9 and c.denominator < 10**9 for c in polynomial):
        text = polynomial_text(polynomial, variable)
        if len(text) <= 44:
            return text
    return f"degree {len(polynomial) - 1}"


def _data_table(examination: Examination, modes: tuple[Mode, ...]) -> list[str]:
    """Return how far the data move the modes, where that shows, and what they do not tell apart."""
    largest = _largest(examination)
    shown = [
        (value, mode.sensitivity)
        for value, mode, _ in _named(examination, modes)
        if mode.sensitivity is not None
        and (examination.weighed is not None or mode.sensitivity > _BLUR * largest)
    ]
    lines: list[str] = []
    if shown:
        by = "one ulp of every entry" if examination.weighed is None else "the uncertainty"
        lines.append(f"How far {by} moves the modes, to first order")
        lines += [f"  {value:<26}{size:.2g}" for value, size in shown[:40]]
        if len(shown) > 40:
            lines.append(f"  and {len(shown) - 40} more")
        lines.append("")
    pairs = examination.alike
    if pairs:
        lines.append("These agree within what the data can tell")
        for pair in pairs[:20]:
            second = f"the {'zero' if pair.is_zero else 'mode'} {mode_text(pair.second)}"
            text = (
                f"  the mode {mode_text(pair.first)} and {second}: {pair.apart:.2g} apart, and the "
                f"data move them by {pair.within:.2g}"
            )
            lines += textwrap.wrap(text, WIDTH, subsequent_indent="    ", break_on_hyphens=False)
        if len(pairs) > 20:
            lines.append(f"  and {len(pairs) - 20} more")
        lines.append("")
    return lines


def _channel_table(examination: Examination, modes: tuple[Mode, ...]) -> list[str]:
    """Return which channel reaches or sees which mode, where there is more than one of a kind."""
    model = examination.model
    shown = [each for each in _named(examination, modes) if each[1].inputs is not None][:40]
    if not shown or max(model.input_count, model.output_count) < 2:
        return []
    lines = ["Modes by channel"]
    for value, mode, _ in shown:
        reached = ", ".join(mode.inputs or ()) or "nothing"
        seen = ", ".join(mode.outputs or ()) or "nothing"
        lines.extend(
            textwrap.wrap(
                f"  {value:<26}reached by {reached}; seen in {seen}",
                WIDTH,
                subsequent_indent=" " * 28,
                break_on_hyphens=False,
            )
        )
    return [*lines, ""]


def _mode_table(examination: Examination, modes: tuple[Mode, ...]) -> list[str]:
    """Return the modes by part, with times in the unit of time of the model."""
    head = f"  {'value':<26}{'times':<7}{'stability':<13}{'in time':<24}damping"
    lines = ["Modes of the answer", head]
    part = None
    named = _named(examination, modes)
    for value, mode, times in named[:40]:
        if mode.part is not part:
            part = mode.part
            lines.append(f" {part}")
        ratio = "-" if mode.damping is None else f"{mode.damping:.3g}"
        when = _in_time(examination, mode)
        lines.append(f"  {value:<26}{times:<7}{mode.stability:<13}{when:<24}{ratio}")
    if len(named) > 40:
        lines.append(f"  and {len(named) - 40} more")
    shown = sum(mode.multiplicity for mode in modes)
    if shown < examination.order:
        lines.append(f"  {examination.order - shown} more: beyond the range of doubles, not shown")
    return [*lines, ""]


def _in_time(examination: Examination, mode: Mode) -> str:
    """Return what a mode does in the time unit of the model, in few words."""
    if _is_delay(examination, mode):
        return "a delay, over at once"
    if mode.stability in (Stability.MARGINAL, Stability.CANNOT_TELL):
        return "-"
    if mode.doubling_time is not None:
        return f"doubles in {mode.doubling_time:.4g}"
    if mode.time_constant is not None:
        return f"time constant {mode.time_constant:.4g}"
    return "slower than can be told"


def _tables(examination: Examination) -> list[str]:
    lines: list[str] = []
    if examination.minimal_order:
        lines.append("Parts (exact characteristic polynomials)")
        variable = "s" if examination.model.sampling_period is None else "z"
        shown: dict[str, list[str]] = {}
        for reading, parts in _shown_parts(examination).items():
            block = []
            for part, polynomial in parts.items():
                text = _short(polynomial, variable)
                block.append(f"  {part:<32}{text}")
            shown.setdefault("\n".join(block), []).append(reading)
        for block_text, words in shown.items():
            lines.append(f" as {', '.join(words)}")
            lines.extend(block_text.split("\n"))
        lines.append("")
    modes = examination.modes
    lines.extend(_mode_table(examination, modes))
    lines.extend(_channel_table(examination, modes))
    lines.extend(_data_table(examination, modes))
    lines.append("Rank decisions of the floating path")
    readings = list(examination.minimal_order)
    head = "".join(f"{word:>10}" for word in readings)
    lines.append(f"  {'stage':<20}{'rank':>5}{'kept':>10}{'dropped':>10}{head}")
    for decision in examination.decisions[:60]:
        kept, dropped = (
            "-" if value is None else f"{value:.2g}"
            for value in (decision.smallest_kept, decision.largest_dropped)
        )
        exact = "".join(f"{decision.exact_rank[word]:>10}" for word in readings)
        lines.append(f"  {decision.where:<20}{decision.rank:>5}{kept:>10}{dropped:>10}{exact}")
    if len(examination.decisions) > 60:
        lines.append(f"  and {len(examination.decisions) - 60} more")
    if examination.routes:
        lines.append("")
        lines.append("Three routes to the minimal order")
        for reading, found in examination.routes.items():
            lines.append(f"  {reading:<12}" + ", ".join(f"{k} {v}" for k, v in found.items()))
    return lines


def _ran(examination: Examination) -> list[str]:
    """Return what the examination took."""
    seconds = ", ".join(f"{path} {used:.2g} s" for path, used in examination.seconds.items())
    memory = examination.peak_memory
    used = "not measured on this system" if memory is None else f"{memory / 2**20:.0f} MiB"
    return ["", *_field("Took", f"{seconds}; most memory the process held: {used}.")]
