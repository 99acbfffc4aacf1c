"""Scoring anybody's routine on the families of problems."""

from __future__ import annotations

import importlib
import operator
import os
import sys
import time
import warnings
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from enum import StrEnum
from pathlib import Path
from typing import Any, Final

import numpy as np

from realize.convert import as_realization
from realize.errors import RealizeError, UnsupportedEntryError
from realize.model.realization import Realization
from realize.testing.problems import DIFFICULTIES, Family, Problem, families, family

__all__ = [
    "ALLOWED_ERROR",
    "Outcome",
    "Result",
    "Routine",
    "Scorecard",
    "check_picture_name",
    "load_routine",
    "score",
]

Array = np.ndarray[Any, Any]
Routine = Callable[[Any, Any, Any, Any], Any]
"""Takes float arrays A, B, C, D; returns an order, or A, B, C, D of a reduced model."""

ALLOWED_ERROR: Final = 1e-3
"""Relative error of the frequency response up to which a model of the right order is right.

The answer to a problem is an order; the model must only be one of the system that was asked about,
to three digits.
"""

ALLOWED_LOSS: Final = 10.0
"""Where rounding the entries to doubles alone moves the response by more, how many times that."""

_KINDS: Final = (".png", ".svg", ".pdf")

_SAMPLES: Final = 40
"""Frequencies at which responses are compared."""


class Outcome(StrEnum):
    """What became of one problem."""

    RIGHT = "right"
    WRONG = "wrong"
    CRASHED = "crashed"


@dataclass(frozen=True, kw_only=True, slots=True)
class Result:
    """What a routine made of one problem.

    Attributes
    ----------
    family : str
    difficulty, seed : int
    states, order : int
        Of the model given, and of its minimal realizations.
    outcome : Outcome
    found : int or None
        The order found; None when it crashed.
    error : float or None
        Largest difference of the frequency response, relative; None when no model was returned.
    reason : str or None
        For a crash: the exception, or what was wrong with the thing returned.
    seconds : float
    """

    family: str
    difficulty: int
    seed: int
    states: int
    order: int
    outcome: Outcome
    found: int | None
    error: float | None
    reason: str | None
    seconds: float

    @property
    def off_by(self) -> int | None:
        """The order found less the right one."""
        return None if self.found is None else self.found - self.order

    def to_dict(self) -> dict[str, Any]:
        """Return the result as plain JSON values."""
        return {
            "family": self.family,
            "difficulty": self.difficulty,
            "seed": self.seed,
            "states": self.states,
            "order": self.order,
            "outcome": str(self.outcome),
            "found": self.found,
            "off_by": self.off_by,
            "error": None if self.error is None or not np.isfinite(self.error) else self.error,
            "reason": self.reason,
        }


@dataclass(frozen=True, kw_only=True, slots=True)
class Scorecard:
    """How a routine did; `str()` is a table of 80 columns.

    Attributes
    ----------
    name : str
        Of the routine.
    results : tuple of Result
        One for each problem, by family, difficulty and seed.
    """

    name: str
    results: tuple[Result, ...]

    @property
    def right(self) -> int:
        """How many answers are right."""
        return self.count(Outcome.RIGHT)

    @property
    def wrong(self) -> int:
        """How many answers are wrong."""
        return self.count(Outcome.WRONG)

    @property
    def crashed(self) -> int:
        """How often there was no usable answer."""
        return self.count(Outcome.CRASHED)

    @property
    def families(self) -> tuple[str, ...]:
        """The families, in the order in which they were asked."""
        return tuple(dict.fromkeys(result.family for result in self.results))

    @property
    def difficulties(self) -> tuple[int, ...]:
        """The difficulties, ascending."""
        return tuple(sorted({result.difficulty for result in self.results}))

    def of(self, family: str | None = None, difficulty: int | None = None) -> tuple[Result, ...]:
        """Return the results of one family, of one difficulty, or of both."""
        return tuple(
            result
            for result in self.results
            if family in (None, result.family) and difficulty in (None, result.difficulty)
        )

    def count(self, outcome: str, family: str | None = None, difficulty: int | None = None) -> int:
        """Return how many results have an outcome."""
        return sum(result.outcome == outcome for result in self.of(family, difficulty))

    def to_dict(self) -> dict[str, Any]:
        """Return the scorecard as plain JSON values."""
        return {
            "format": "realize-scorecard",
            "version": 1,
            "routine": self.name,
            "problems": len(self.results),
            **{str(outcome): self.count(outcome) for outcome in Outcome},
            "families": {
                name: {
                    **{str(outcome): self.count(outcome, name) for outcome in Outcome},
                    "right_by_difficulty": {
                        str(d): [self.count(Outcome.RIGHT, name, d), len(self.of(name, d))]
                        for d in self.difficulties
                    },
                }
                for name in self.families
            },
            "results": [result.to_dict() for result in self.results],
        }

    def picture(self) -> Any:
        """Return a matplotlib Figure: the share of right answers by family and difficulty.

        Needs the extra `plot`.
        """
        from realize.testing.picture import draw

        return draw(self)

    def save_picture(self, target: str | Path) -> None:
        """Write the picture to a file; its ending, .png, .svg or .pdf, names the kind.

        Raises
        ------
        UnsupportedEntryError
            When the name has another ending.
        """
        check_picture_name(target)
        self.picture().savefig(target, dpi=150)

    def __str__(self) -> str:
        return _text(self)

    def __repr__(self) -> str:
        return (
            f"<Scorecard: {self.name}, {self.right} right, {self.wrong} wrong, "
            f"{self.crashed} crashed>"
        )


def score(
    routine: Routine,
    families: Iterable[Family | str] | None = None,
    *,
    difficulties: Iterable[int] = DIFFICULTIES,
    seeds: Iterable[int] = range(10),
    name: str | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> Scorecard:
    """Run a routine over families of problems and count what is right.

    Parameters
    ----------
    routine : callable
        Takes float arrays A (n, n), B (n, m), C (p, n), D (p, m); returns an order, or a reduced
        model as a tuple of four matrices. It gets copies that are its own. A sampling period is not
        passed on: an order does not depend on it.
    families : iterable of Family or str, optional
        None for all.
    difficulties, seeds : iterable of int, keyword-only
    name : str, keyword-only, optional
        What to call the routine; its own name unless given.
    progress : callable, keyword-only, optional
        Called with the number of problems done and of all.

    Returns
    -------
    Scorecard
        An answer is right when its order is; a model must also have the frequency response asked
        about, to within `ALLOWED_ERROR` or `ALLOWED_LOSS` times what rounding the entries costs. A
        routine that raises, or returns what is neither an order nor a model with the right inputs
        and outputs, has crashed.

    Raises
    ------
    UnknownWordError
        When there is no family of a name.

    Examples
    --------
    >>> from realize.testing import score
    >>> card = score(lambda A, B, C, D: len(A), ["near_cancellation"], seeds=[0])
    >>> card.right, card.wrong, card.crashed
    (10, 0, 0)
    """
    asked = _asked(families)
    difficulties, seeds = list(difficulties), list(seeds)
    total = len(asked) * len(difficulties) * len(seeds)
    results: list[Result] = []
    for each in asked:
        for problem in each.problems(difficulties=difficulties, seeds=seeds):
            results.append(_result(routine, problem))
            if progress is not None:
                progress(len(results), total)
    return Scorecard(name=name or _name_of(routine), results=tuple(results))


def check_picture_name(target: str | Path) -> None:
    """Raise UnsupportedEntryError unless the name ends in a kind of picture."""
    if Path(target).suffix.lower() not in _KINDS:
        raise UnsupportedEntryError(
            f"a picture cannot be written to {str(target)!r}; wanted a name that ends in "
            f"{', '.join(_KINDS)}"
        )


def load_routine(text: str) -> Routine:
    """Return the function that MODULE:FUNCTION names; the current directory is looked in first.

    Raises
    ------
    UnsupportedEntryError
        When there is no such module or function, or importing the module fails.
    """
    module, colon, function = text.partition(":")
    if not (module and colon and function):
        raise UnsupportedEntryError(
            f"the routine is {text!r}; wanted MODULE:FUNCTION, such as mypackage.mymodule:reduce"
        )
    here = os.getcwd()
    if here not in sys.path:
        sys.path.insert(0, here)
    caught = _Caught()
    with caught:
        found: Any = importlib.import_module(module)
    if caught.error is not None:
        raise UnsupportedEntryError(
            f"{module} cannot be imported: {_one_line(caught.error)}"
        ) from caught.error
    for part in function.split("."):
        if not hasattr(found, part):
            raise UnsupportedEntryError(f"{module} has no {function}")
        found = getattr(found, part)
    if not callable(found):
        raise UnsupportedEntryError(f"{text} is a {type(found).__name__}; wanted a function")
    return found  # type: ignore[no-any-return]


class _Caught:
    """Keeps whatever error foreign code raises; what stops a program goes through."""

    def __init__(self) -> None:
        self.error: Exception | None = None

    def __enter__(self) -> _Caught:
        return self

    def __exit__(self, kind: Any, error: BaseException | None, trace: Any) -> bool:
        if isinstance(error, Exception):
            self.error = error
            return True
        return False


def _asked(chosen: Iterable[Family | str] | None) -> tuple[Family, ...]:
    if chosen is None:
        return families()
    if isinstance(chosen, (str, Family)):
        raise UnsupportedEntryError(
            f"families is {chosen!r}; wanted a list of families or of their names"
        )
    return tuple(each if isinstance(each, Family) else family(each) for each in chosen)


def _name_of(routine: Routine) -> str:
    module = getattr(routine, "__module__", None)
    name = getattr(routine, "__qualname__", type(routine).__qualname__)
    return f"{module}:{name}" if module else name


def _result(routine: Routine, problem: Problem) -> Result:
    caught, answer = _Caught(), None
    began = time.perf_counter()
    # A routine may warn as it likes, also where warnings are errors.
    with warnings.catch_warnings(), caught:
        warnings.simplefilter("ignore")
        answer = routine(*(matrix.copy() for matrix in problem.model.matrices()))
    seconds = time.perf_counter() - began
    outcome, found, error, reason = Outcome.CRASHED, None, None, None
    if caught.error is not None:
        reason = _one_line(caught.error)
    else:
        found, error, reason = _judged(answer, problem)
    if found is not None:
        right = found == problem.order and (error is None or _is_small(error, problem))
        outcome = Outcome.RIGHT if right else Outcome.WRONG
    return Result(
        family=problem.family,
        difficulty=problem.difficulty,
        seed=problem.seed,
        states=problem.model.order,
        order=problem.order,
        outcome=outcome,
        found=found,
        error=error,
        reason=reason,
        seconds=seconds,
    )


def _judged(answer: Any, problem: Problem) -> tuple[int | None, float | None, str | None]:
    """Return the order found, the error of the response, and why there is no answer."""
    if not isinstance(answer, bool) and hasattr(answer, "__index__"):
        order = operator.index(answer)
        return (order, None, None) if order >= 0 else (None, None, f"returned the order {order}")
    if not isinstance(answer, (tuple, list, Realization)):
        return None, None, f"returned a {type(answer).__name__}; wanted an order, or A, B, C, D"
    try:
        given = as_realization(tuple(answer) if isinstance(answer, list) else answer)
        model = Realization(
            *given.to_float().matrices(), sampling_period=problem.model.sampling_period
        )
    except RealizeError as error:
        return None, None, f"returned no model: {_one_line(error)}"
    shape = (problem.model.output_count, problem.model.input_count)
    found = (model.output_count, model.input_count)
    if found != shape:
        return None, None, f"returned a model with outputs, inputs {found}; wanted {shape}"
    return model.order, _error(problem, model), None


def _is_small(error: float, problem: Problem) -> bool:
    return error <= ALLOWED_ERROR or error <= ALLOWED_LOSS * _error(problem, problem.model)


def _error(problem: Problem, model: Realization) -> float:
    """Return the largest difference of the response from the one asked about, relative.

    In the 2-norm, at frequencies spread evenly on a logarithmic scale from a hundredth of the
    smallest pole's magnitude to a hundred times the largest one's (in discrete time of the angles
    of poles and of their distances from 1, up to just below half the sampling rate).
    """
    asked = problem.minimal.to_float()
    points = _points(asked)
    first, second = _response(asked, points), _response(model, points)
    size = float(np.linalg.norm(first, 2, axis=(1, 2)).max())
    if not np.isfinite(second).all():
        return float("inf")
    change = float(np.linalg.norm(first - second, 2, axis=(1, 2)).max())
    return change / size if size else change


def _points(model: Realization) -> Array:
    poles = np.linalg.eigvals(model.A) if model.order else np.ones(1)
    if model.sampling_period is None:
        sizes = np.abs(poles)
    else:
        sizes = np.hypot(np.angle(poles), np.abs(poles) - 1.0)
    sizes = sizes[sizes > 0.0] if sizes.any() else np.ones(1)
    low, high = sizes.min() / 100.0, sizes.max() * 100.0
    if model.sampling_period is None:
        return np.asarray(1j * np.geomspace(low, high, _SAMPLES))
    return np.asarray(np.exp(1j * np.geomspace(min(low, 0.01), 0.99 * np.pi, _SAMPLES)))


def _response(model: Realization, points: Array) -> Array:
    """Return the values at points, (points, outputs, inputs); not a number at a pole."""
    A, B, C, D = model.matrices()
    values = np.empty((len(points), *D.shape), dtype=complex)
    for k, point in enumerate(points):
        try:
            values[k] = C @ np.linalg.solve(point * np.eye(model.order) - A, B) + D
        except np.linalg.LinAlgError:
            values[k] = np.nan
    return values


def _one_line(error: Exception) -> str:
    text = " ".join(str(error).split())
    return f"{type(error).__name__}: {text}" if text else type(error).__name__


# ------------------------------------------------------------------------- as text


def _text(card: Scorecard) -> str:
    """Return the scorecard as a table of at most 80 columns."""
    head = f"{card.name}: {card.right} of {len(card.results)} right"
    lines = [f"{head}, {card.wrong} wrong, {card.crashed} crashed", ""]
    columns = card.difficulties
    each = max((len(card.of(name, d)) for name in card.families for d in columns), default=0)
    width = max(3, len(str(each)) + 1)
    lines.append(f"right of {each}, by difficulty (. for all), and what went wrong")
    lines.append("")
    names = max((len(name) for name in card.families), default=0)
    header = "".join(f"{d:>{width}}" for d in columns)
    lines.append(f"{'':{names}}{header}  wrong  crash  off by    error")
    for name in card.families:
        cells = []
        for d in columns:
            right, count = card.count(Outcome.RIGHT, name, d), len(card.of(name, d))
            cells.append(f"{'.' if right == count else right:>{width}}")
        results = card.of(name)
        lines.append(
            f"{name:{names}}{''.join(cells)}"
            f"{card.count(Outcome.WRONG, name):>7}{card.count(Outcome.CRASHED, name):>7}"
            f"{_off_text(results):>8}{_error_text(results):>9}"
        )
    lines += ["", "off by: the orders found less the right ones, least to greatest"]
    if any(result.error is not None for result in card.results):
        lines.append(
            f"error: of the frequency response, the largest; right up to {ALLOWED_ERROR:g}"
        )
    reasons = dict.fromkeys(r.reason for r in card.results if r.reason is not None)
    lines += [f"crash: {_cut(reason, 72)}" for reason in list(reasons)[:3]]
    if len(reasons) > 3:
        lines.append(f"crash: {len(reasons) - 3} more kinds")
    return "\n".join(lines)


def _off_text(results: Sequence[Result]) -> str:
    found = [result.off_by for result in results if result.off_by is not None]
    if not found:
        return "-"
    low, high = min(found), max(found)
    if low == high == 0:
        return "0"
    return f"{low:+d}" if low == high else f"{low:+d}..{high:+d}".replace("+0", "0")


def _error_text(results: Sequence[Result]) -> str:
    errors = [result.error for result in results if result.error is not None]
    return f"{max(errors):.0e}" if errors else "-"


def _cut(text: str, width: int) -> str:
    return text if len(text) <= width else f"{text[: width - 3]}..."
