"""Steps of precision: whether a small singular value is a zero, seen from more and more digits.

A singular value that shrinks with the precision is rounding noise about a zero; one that stays is
not.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from enum import StrEnum
from itertools import pairwise
from time import perf_counter
from typing import TYPE_CHECKING, Any, Final

from realize.arithmetic.multiprecision import MultiprecisionPath
from realize.entries import is_constant
from realize.errors import LimitError
from realize.model.realization import Realization

if TYPE_CHECKING:
    from realize.arithmetic.modular import Clock

__all__ = ["PrecisionStep", "PrecisionSteps", "Trend", "precision_steps"]


class Trend(StrEnum):
    """What a singular value does as the precision rises."""

    SHRINKS = "shrinks"
    STAYS = "stays"
    CANNOT_TELL = "cannot tell"


@dataclass(frozen=True, kw_only=True, slots=True)
class PrecisionStep:
    """One singular value of a staircase at rising precision.

    Attributes
    ----------
    where : str
        The stage, such as ``"reached, stage 2"``.
    kept : bool
        Whether it was kept at the highest precision (the smallest that was), or dropped (the
        largest that was).
    values : tuple of float
        Its size over the Frobenius norm of the scaled model, for each number of digits; 0.0 also
        where it lies below the range of doubles.
    trend : Trend
        ``"shrinks"``: with the precision, so it is a zero. ``"stays"``: it is not.
    """

    where: str
    kept: bool
    values: tuple[float, ...]
    trend: Trend

    @property
    def is_settled(self) -> bool:
        """Whether the trend bears out the decision."""
        return self.trend is (Trend.STAYS if self.kept else Trend.SHRINKS)

    def to_dict(self) -> dict[str, Any]:
        """Return the step as plain JSON values."""
        return {
            "where": self.where,
            "kept": self.kept,
            "values": list(self.values),
            "trend": str(self.trend),
        }


@dataclass(frozen=True, kw_only=True, slots=True)
class PrecisionSteps:
    """What the singular values of both staircases do as the precision rises.

    Attributes
    ----------
    digits : tuple of int
        The precisions, rising.
    order : int
        The minimal order at the highest precision.
    stairs : tuple of two tuples of int
        The stairs there: of what is reached, and of what of that is seen.
    steps : tuple of PrecisionStep
        At each stage the largest value dropped and the smallest kept.
    """

    digits: tuple[int, ...]
    order: int
    stairs: tuple[tuple[int, ...], tuple[int, ...]]
    steps: tuple[PrecisionStep, ...]

    @property
    def is_settled(self) -> bool:
        """Whether every value kept stays and every value dropped shrinks."""
        return all(step.is_settled for step in self.steps)

    def to_dict(self) -> dict[str, Any]:
        """Return the record as plain JSON values."""
        return {
            "digits": list(self.digits),
            "order": self.order,
            "settled": self.is_settled,
            "stairs": [list(stairs) for stairs in self.stairs],
            "steps": [step.to_dict() for step in self.steps],
        }


_SLACK: Final = 6
"""Decades by which rounding noise at two precisions may differ beyond the digits between them."""

_APART: Final = 2 * _SLACK
"""Fewest digits between two precisions of which a trend can be read."""

_AGREE: Final = 0.01
"""Relative difference up to which two precisions show the same singular value."""

_REFLECTION_SECONDS: Final = 1e-5
"""Estimated time of one staircase at 128 digits over the cube of the order: a generous figure."""

_ROTATION_SECONDS: Final = 4e-4
"""The same for its singular values, over the order times the square of the channels."""

_LIGHTER: Final = 0.75
"""Share of the time of the first staircase that those after it take, on the average."""

_CONSTANT_SECONDS: Final = 7e-4
"""Estimated time to compute the digits of one irrational constant, which may be a long one."""


def precision_steps(
    model: Realization,
    *,
    digits: Sequence[int] = (16, 32, 64, 128),
    clock: Clock | None = None,
) -> PrecisionSteps:
    """Replay both staircases at rising precision, and say which singular values are zeros.

    Parameters
    ----------
    model : Realization
        Floats count as the numbers they are; irrational constants are computed anew for each
        precision.
    digits : sequence of int, keyword-only
        At least two precisions, each at least 12 more than the one before.
    clock : Clock or None, keyword-only
        The time that they may take: estimated before the first step, and from the time of the
        first staircase, the dearest, before the second.

    Returns
    -------
    PrecisionSteps

    Raises
    ------
    LimitError, UnsupportedEntryError
        When digits are no such integers, or beyond the limits of the path.
    BudgetError
        When the clock does not leave the time.

    Notes
    -----
    The ranks are those of the highest precision with the default tolerance, so that the stages of
    all precisions are the same; the trend is read from the last two. A value that neither shrinks
    nor stays lies near the noise of one of them: give more digits. Evidence, not proof: zero to
    all digits tried is not zero.
    """
    paths = [MultiprecisionPath(count) for count in digits]
    ladder = tuple(path.numbers.digits for path in paths)
    if len(ladder) < 2 or any(high < low + _APART for low, high in pairwise(ladder)):
        raise LimitError(
            f"digits is {ladder!r}; wanted two numbers of digits or more, each at least {_APART} "
            "more than the one before",
            what="digits",
        )
    if clock is not None:
        clock.afford(_seconds(model) * len(ladder), f"steps of {_ladder_text(ladder)} digits")
    stairs: tuple[Any, Any] = (None, None)
    columns: list[list[tuple[str, bool, Any]]] = []
    for path in reversed(paths):
        began = perf_counter()
        opened = path.open(model)
        reach = opened.reached(opened.A, opened.B, opened.C, "reached", stairs[0])
        if clock is not None:
            # The second staircase is of what the first reached; fewer digits cost little less.
            left = 2 * (len(ladder) - len(columns)) - 1
            spent = perf_counter() - began
            clock.afford(spent * left * _LIGHTER, f"the rest of {_ladder_text(ladder)} digits")
        sight = opened.reached(reach.A.T, reach.C.T, reach.B.T, "seen", stairs[1])
        stairs = reach.stairs, sight.stairs
        columns.append(
            [
                # A model without any entry but zero has scale zero, and its values are zero.
                (f"{where}, stage {stage}", kept, values[index] / (opened.scaling.scale or 1))
                for where, run in (("reached", reach), ("seen", sight))
                for stage, (_, values, rank) in enumerate(run.stages, start=1)
                for kept, index in ((True, rank - 1), (False, rank))
                if 0 <= index < len(values)
            ]
        )
    steps = []
    for found in zip(*reversed(columns), strict=True):
        values = [value for _, _, value in found]
        steps.append(
            PrecisionStep(
                where=found[-1][0],
                kept=found[-1][1],
                values=tuple(map(float, values)),
                trend=_trend(values[-2], values[-1], *ladder[-2:]),
            )
        )
    return PrecisionSteps(digits=ladder, order=sum(stairs[1]), stairs=stairs, steps=tuple(steps))


def _seconds(model: Realization) -> float:
    """Return the estimated time of both staircases at one precision."""
    order, channels = model.order, (model.input_count, model.output_count)
    constants = sum(is_constant(entry) for matrix in model.matrices() for entry in matrix.flat)
    return (
        2 * _REFLECTION_SECONDS * order**3
        + sum(_ROTATION_SECONDS * order * min(order, count) ** 2 for count in channels)
        + _CONSTANT_SECONDS * constants
    )


def _ladder_text(digits: Sequence[int]) -> str:
    return ", ".join(map(str, digits))


def _trend(before: Any, after: Any, fewer: int, more: int) -> Trend:
    """Return what a value did between two precisions."""
    if abs(after - before) <= _AGREE * after:
        return Trend.STAYS if after else Trend.SHRINKS
    # Noise that happens to be zero, or nearly, at the lower precision is still noise there.
    noise = max(before, before.context.mpf(10) ** -fewer)
    return Trend.SHRINKS if after * 10 ** (more - fewer - _SLACK) <= noise else Trend.CANNOT_TELL
