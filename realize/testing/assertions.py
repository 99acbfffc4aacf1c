"""Assertions for test suites: exact, or within a number that is stated."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, Final

import numpy as np

from realize.arithmetic.exact import ExactPath
from realize.convert import as_realization
from realize.errors import ToleranceError
from realize.forms import reduce
from realize.forms.response import response_change
from realize.model.realization import Realization
from realize.proof.compare import same_transfer
from realize.proof.record import Counterexample
from realize.results import Mode, ResponseChange
from realize.testing.reading import rational_model

__all__ = ["assert_minimal", "assert_same_transfer", "response_error"]

Array = np.ndarray[Any, Any]

_NAMED: Final = 3
"""Modes and entries that a message names; the others are counted."""


def assert_same_transfer(
    first: Any, second: Any, *, reading: str = "stored", within: float | None = None
) -> None:
    """Assert that two models have the same transfer matrix.

    Parameters
    ----------
    first, second : Realization, TransferMatrix, or what `realize.as_realization` takes.
    reading : {"stored", "written", "intended"}, keyword-only
        Which exact models floats stand for. A model without floats is what it is.
    within : float, keyword-only, optional
        None decides exactly. A number allows that much of a difference: the largest 2-norm of the
        difference of the two frequency responses, over the largest 2-norm of the first, both
        searched on a grid around the poles of the two models and refined about its highest points.
        Floats are then taken as they are, whatever the reading.

    Raises
    ------
    AssertionError
        When they differ; it says in what, at which point or frequency, and by how much.
    ToleranceError
        When `within` is not a number, or negative.

    Notes
    -----
    The exact question is that of `realize.same_transfer`.

    Examples
    --------
    >>> from realize import Realization
    >>> from realize.testing import assert_same_transfer
    >>> whole = Realization([[-1, 0], [0, -2]], [1, 0], [1, 1])
    >>> assert_same_transfer(whole, Realization([[-1]], [1], [1]))
    >>> assert_same_transfer(whole, Realization([[-1]], [2], [1]))
    Traceback (most recent call last):
    AssertionError: the transfer matrices differ at s = 1: from input u1 to output y1 the first has
    1/2, the second 1: off by 1/2 (100 %)
    """
    __tracebackhide__ = True
    if within is None:
        left, right = (rational_model(thing, reading) for thing in (first, second))
        _assert_one_shape(left, right)
        compared = same_transfer(left, right, reading=reading)
        if compared.counterexample is not None:
            raise AssertionError(_differing(left, compared.counterexample))
        return
    if isinstance(within, bool) or not isinstance(within, (int, float)) or not within >= 0:
        raise ToleranceError(
            f"within is {within!r}; wanted a number, not negative, or None to decide exactly",
            argument="within",
            found=repr(within),
        )
    left, right = (as_realization(thing).to_float() for thing in (first, second))
    _assert_one_shape(left, right)
    change = response_error(left, right)
    if not change.relative <= within:
        unit = "unit of time" if left.sampling_period is None else "unit of the sampling period"
        raise AssertionError(
            f"the frequency responses differ by {change.size:.3g} at {change.frequency:.3g} "
            f"radians per {unit}: {change.relative:.3g} of the largest response of the first; "
            f"allowed {within:.3g}"
        )


def assert_minimal(model: Any, *, order: int | None = None, reading: str = "stored") -> None:
    """Assert that a model is minimal: all of its modes are reached and seen.

    Parameters
    ----------
    model : Realization, TransferMatrix, or what `realize.as_realization` takes
        A transfer matrix is realized as it is given.
    order : int, keyword-only, optional
        The number of states that it must have as well.
    reading : {"stored", "written", "intended"}, keyword-only
        Which exact model floats stand for.

    Raises
    ------
    AssertionError
        When it is not; it names the order it could have, and what is hidden.

    Examples
    --------
    >>> from realize import Realization
    >>> from realize.testing import assert_minimal
    >>> assert_minimal(Realization([[-1]], [1], [1]), order=1)
    >>> assert_minimal(Realization([[-1, 0], [0, -2]], [1, 0], [1, 1]))
    Traceback (most recent call last):
    AssertionError: the model is not minimal: 2 states, and a realization with 1 has the same
    transfer matrix; hidden: -2 (uncontrollable, observable)
    """
    __tracebackhide__ = True
    rational = rational_model(model, reading)
    reduction = reduce(ExactPath(), rational)
    if reduction.order < rational.order:
        states = f"{rational.order} state{'s' * (rational.order != 1)}"
        wanted = "" if order in (None, reduction.order) else f"; order {order} was wanted"
        raise AssertionError(
            f"the model is not minimal: {states}, and a realization with {reduction.order} has the "
            f"same transfer matrix; hidden: {_named(reduction.removed.modes)}{wanted}"
        )
    if order is not None and rational.order != order:
        raise AssertionError(
            f"the model is minimal, but of order {rational.order}; order {order} was wanted"
        )


def response_error(first: Realization, second: Realization) -> ResponseChange:
    """Return the largest difference of two frequency responses, relative to the first.

    Searched around the poles of each in turn: a resonance that only one of them has is not missed.
    """
    forward = response_change(first, second)
    backward = response_change(second, first)
    if not backward.size > forward.size:
        return forward
    largest = forward.size / forward.relative if forward.relative else 0.0
    return ResponseChange(
        size=backward.size,
        relative=backward.size / largest if largest else float("inf"),
        frequency=backward.frequency,
    )


def _assert_one_shape(first: Realization, second: Realization) -> None:
    __tracebackhide__ = True
    shapes = [
        f"{model.output_count} by {model.input_count} (outputs by inputs)"
        for model in (first, second)
    ]
    if shapes[0] != shapes[1]:
        raise AssertionError(
            f"the transfer matrices have different shapes: the first is {shapes[0]}, the second "
            f"{shapes[1]}"
        )
    periods = [
        "in continuous time"
        if model.sampling_period is None
        else f"sampled with period {model.sampling_period}"
        for model in (first, second)
    ]
    if periods[0] != periods[1]:
        raise AssertionError(
            f"the models have different time domains: the first is {periods[0]}, the second is "
            f"{periods[1]}"
        )


def _differing(first: Realization, found: Counterexample) -> str:
    """Return what differs, where, and by how much: the worst entry first."""
    left, right = found.first, found.second
    differing = sorted(
        ((abs(left[i, j] - right[i, j]), -i, -j) for i, j in np.ndindex(left.shape)), reverse=True
    )
    differing = [each for each in differing if each[0]]
    size, i, j = differing[0]
    i, j = -i, -j
    variable = "s" if first.sampling_period is None else "z"
    share = f" ({_short(100 * size / abs(left[i, j]))} %)" if left[i, j] else ""
    text = (
        f"the transfer matrices differ at {variable} = {found.point}: from input "
        f"{first.input_names[j]} to output {first.output_names[i]} the first has "
        f"{_short(left[i, j])}, the second {_short(right[i, j])}: off by {_short(size)}{share}"
    )
    if left.size > 1:
        text += f"; {len(differing)} of {left.size} entries differ there"
    return text


def _short(number: Any) -> str:
    """Return a fraction as it is when that is short, else its size."""
    exact = str(number)
    if len(exact) <= 12:
        return exact
    try:
        return f"{float(number):.6g}"
    except OverflowError:
        return f"{'-' * (number < 0)}10^{len(str(abs(int(number)))) - 1}"


def _named(modes: Sequence[Mode]) -> str:
    texts = []
    for mode in modes[:_NAMED]:
        value = mode.value
        shown = f"{value.real:.6g}" if not value.imag else f"{value:.6g}"
        often = f", {mode.multiplicity} times" if mode.multiplicity > 1 else ""
        texts.append(f"{shown} ({mode.part}{often})")
    more = len(modes) - _NAMED
    return ", ".join(texts) + (f", and {more} more" if more > 0 else "")
