"""The distance to uncontrollability, and its dual, with a proof from both sides.

    tau(A, B) = min over complex z of the least singular value of [A - zI, B]

is the least 2-norm of a change (dA, dB), complex ones allowed, after which the pair has a mode
that the inputs do not reach (Eising 1984). Time plays no part: continuous and discrete models are
alike. How each side is proved: `realize.nearness.search`, `realize.nearness.witness`.

References
----------
Eising (1984), Between controllable and uncontrollable, Systems and Control Letters 4.
"""

from __future__ import annotations

import math
import time
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np

from realize.arithmetic.exact import OpenedExact
from realize.arithmetic.modular import Clock
from realize.entries import Reading
from realize.errors import BudgetError, UnsupportedEntryError
from realize.model.realization import Kind, Realization
from realize.nearness.pencil import Pencil, rounded
from realize.nearness.search import OutOfTime, Search
from realize.nearness.witness import Pair, RealModel, exact_pair, real_model, root_above
from realize.polynomials import roots
from realize.results import Deferred
from realize.tolerance import DEFAULT_RTOL, DISTANCE_BUDGET, check_rtol

__all__ = ["Distance", "distance_to_uncontrollability", "distance_to_unobservability"]

Array = np.ndarray[Any, Any]


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Distance:
    """A distance between two bounds, and what attains the upper one.

    Attributes
    ----------
    lower, upper : float
        The distance lies between them, in the 2-norm of the change, in the units of the entries.
        Both are 0.0 for a model that is exactly uncontrollable, and inf for one without states,
        which no change makes so.
    point : complex
        The mode that the change leaves without input (or unseen); nan without states.
    perturbation : (dA, dB), or (dA, dC) for unobservability
        Arrays of doubles; with them the mode is there, up to their rounding. Real where the point
        is.
    proved : bool
        Whether both bounds are rigorous.
    """

    lower: float
    upper: float
    point: complex
    perturbation: tuple[Array, Array]
    proved: bool
    _witness: Deferred[tuple[Realization | None, float]]
    _pair: Deferred[Pair | None]
    # The exact model, and what it is far from: "uncontrollability" or "unobservability".
    _source: Realization
    _word: str = "uncontrollability"

    @property
    def witness(self) -> Realization | None:
        """An exact real model that has the mode exactly, or a pair of them; None without states.

        Computed at first access. For a point off the real line it is farther than ``upper``.
        """
        return self._witness.get()[0]

    @property
    def real_upper(self) -> float:
        """The distance of the witness, rounded up; computed at first access."""
        return self._witness.get()[1]

    def __repr__(self) -> str:
        proof = "proved" if self.proved else "not proved"
        return f"<Distance: {self.lower:.6g} to {self.upper:.6g}, {proof}, at {self.point:.6g}>"


def distance_to_uncontrollability(
    model: Realization, *, rtol: float = DEFAULT_RTOL, budget: float | None = DISTANCE_BUDGET
) -> Distance:
    """Return how far a model is from the nearest one with a mode that its inputs do not reach.

    Parameters
    ----------
    model : Realization, A (n, n), B (n, m)
        Floats are taken as the numbers that they are (the reading ``"stored"``). Nothing is scaled.
    rtol : float, keyword-only
        The bounds differ by at most this share of the upper one.
    budget : float or None, keyword-only
        Seconds allowed; None for no limit.

    Returns
    -------
    Distance

    Raises
    ------
    BudgetError
        When the time is too short; its ``lower``, ``upper`` and ``point`` are what was reached.
    ToleranceError
        For an rtol that is none.
    PrecisionError
        When three or more singular directions are lost in rounding together.
    UnsupportedEntryError
        For anything but a `Realization`, for irrational constants, for a budget that is none.

    Notes
    -----
    The least change may be complex where the point is; ``witness`` is a real model, and
    ``real_upper`` its distance. The time grows with the number of near-minima: one input is
    slower than many.

    References
    ----------
    Eising (1984), Systems and Control Letters 4. Burke, Lewis, Overton (2004), SIAM J. Matrix
    Analysis 26.

    Examples
    --------
    >>> import realize
    >>> spring = realize.Realization(
    ...     [[0, 0, 1, 0], [0, 0, 0, 1], [-1, 1, 0, 0], [1, -1, 0, 0]], [0, 0, 1, 0], [1, 0, 0, 0]
    ... )
    >>> found = realize.distance_to_uncontrollability(spring, rtol=1e-3)
    >>> found.proved, found.lower <= 0.333097992 <= found.upper
    (True, True)
    """
    if not isinstance(model, Realization):
        raise UnsupportedEntryError(
            f"model: found a value of type {type(model).__name__}; wanted a Realization, which "
            "as_realization makes of other things",
            where="model",
            found=type(model).__name__,
        )
    allowed = check_rtol(rtol)
    if budget is not None and (
        isinstance(budget, bool) or not isinstance(budget, (int, float)) or not budget >= 0
    ):
        raise UnsupportedEntryError(
            f"budget is {budget!r}; wanted seconds, not negative, or None for no limit"
        )
    return _distance(_exact(model), allowed, budget)


def distance_to_unobservability(
    model: Realization, *, rtol: float = DEFAULT_RTOL, budget: float | None = DISTANCE_BUDGET
) -> Distance:
    """Return how far a model is from the nearest one with a mode that its outputs do not show.

    That of the dual model; `distance_to_uncontrollability` says all else. The perturbation is
    (dA, dC).

    Parameters
    ----------
    model : Realization, A (n, n), C (p, n)
    rtol, budget
        As there.

    Returns
    -------
    Distance

    Raises
    ------
    BudgetError, ToleranceError, PrecisionError, UnsupportedEntryError
        As there.

    References
    ----------
    Eising (1984), Systems and Control Letters 4; Kailath (1980), Linear Systems, section 2.4, for
    duality.
    """
    found = distance_to_uncontrollability(
        model.dual() if isinstance(model, Realization) else model, rtol=rtol, budget=budget
    )

    def witness() -> tuple[Realization | None, float]:
        return None if found.witness is None else found.witness.dual(), found.real_upper

    first, second = found.perturbation
    return Distance(
        lower=found.lower,
        upper=found.upper,
        point=found.point,
        perturbation=(first.T, second.T),
        proved=found.proved,
        _witness=Deferred(witness),
        _pair=found._pair,
        _source=_exact(model),
        _word="unobservability",
    )


def _exact(model: Realization) -> Realization:
    return model if model.kind is Kind.RATIONAL else model.read(Reading.STORED)


def _distance(model: Realization, rtol: float, budget: float | None) -> Distance:
    if model.order == 0:
        return Distance(
            lower=math.inf,
            upper=math.inf,
            point=complex(math.nan, math.nan),
            perturbation=(np.zeros((0, 0)), np.zeros(model.B.shape)),
            proved=True,
            _witness=Deferred.known((None, math.inf)),
            _pair=Deferred.known(None),
            _source=model,
        )
    began = time.monotonic()
    deadline = math.inf if budget is None else began + budget
    if not any(model.B.flat):
        return _hidden(model, 0j, budget)
    search = _Search(model, rtol, deadline)
    try:
        search.start()
        search.settle()
        search.run()
        search.improve(search.point, _FINAL_SHARE)
        search.settle(_FINAL_SHARE)
        pair = _pair(search)
    except _Uncontrollable:
        return _hidden(model, rounded(search.point), budget)
    except OutOfTime as error:
        raise _out_of_time(search, budget, time.monotonic() - began) from error
    unit = Fraction(2) ** search.pencil.exponent

    def witness() -> tuple[Realization, float]:
        found = real_model(search.pencil, pair, search.upper)
        return _with(model, found), root_above(found.square)

    return Distance(
        lower=_root_below(search.lower, unit),
        upper=root_above(pair.square),
        point=_in_doubles(pair),
        perturbation=pair.perturbation,
        proved=True,
        _witness=Deferred(witness),
        _pair=Deferred.known(pair),
        _source=model,
    )


class _Uncontrollable(Exception):  # noqa: N818  # caught inside this module, never shown
    """The exact path has shown that a mode is not reached."""


class _Search(Search):
    """A search that asks the exact path once, when a singular value is within rounding of zero."""

    def __init__(self, model: Realization, rtol: float, deadline: float) -> None:
        super().__init__(Pencil(model.A, model.B), rtol * _OWN_SHARE, deadline)
        self._model = model
        self._asked = False

    def when_small(self) -> None:
        if self._asked:
            return
        self._asked = True
        left = self.deadline - time.monotonic()
        try:
            reached = _reached(self._model, None if math.isinf(left) else max(left, 0.0))
        except BudgetError as error:
            raise OutOfTime from error
        if reached.dimension < self._model.order:
            raise _Uncontrollable


_OWN_SHARE = 1 - 2.0**-10
"""The search is asked for a little more, so that rounding the bounds keeps them close enough."""

_FINAL_SHARE = 2.0**-12
"""Share of the room between the bounds to which the upper one is improved in the end."""


def _reached(model: Realization, budget: float | None) -> Any:
    opened = OpenedExact(model, Clock(budget))
    return opened.reached(opened.A, opened.B, opened.C, "reached")


def _hidden(model: Realization, near: complex, budget: float | None) -> Distance:
    """Return the distance of a model that is exactly uncontrollable: zero, and its mode."""
    reached = _reached(model, budget)
    hidden = reached.quotient().characteristic_polynomial()
    point = min((root.value for root in roots(hidden)), key=lambda value: abs(value - near))
    return Distance(
        lower=0.0,
        upper=0.0,
        point=complex(point),
        perturbation=(np.zeros(model.A.shape), np.zeros(model.B.shape)),
        proved=True,
        _witness=Deferred.known((model, 0.0)),
        _pair=Deferred.known(None),
        _source=model,
    )


def _pair(search: Search) -> Pair:
    return exact_pair(search.pencil, search.vector(), search.upper)


def _in_doubles(pair: Pair) -> complex:
    return rounded(pair.point)


def _root_below(value: float, unit: Fraction) -> float:
    """Return a double not above value times the unit."""
    exact = Fraction(value) * unit
    found = float(exact)
    return found if Fraction(found) <= exact else math.nextafter(found, 0.0)


def _with(model: Realization, found: RealModel) -> Realization:
    return Realization._trusted(
        found.A,
        found.B,
        model.C,
        model.D,
        kind=Kind.RATIONAL,
        sampling_period=model.sampling_period,
        state_names=model._state_names,
        input_names=model._input_names,
        output_names=model._output_names,
    )


def _out_of_time(search: Search, budget: float | None, spent: float) -> BudgetError:
    lower = upper = point = None
    told = "nothing was reached"
    if math.isfinite(search.upper):
        search.deadline = math.inf  # the last few steps must be made
        pair = _pair(search)
        upper, point = root_above(pair.square), _in_doubles(pair)
        lower = _root_below(search.lower, Fraction(2) ** search.pencil.exponent)
        told = f"the distance lies between {lower:.4g} and {upper:.4g}"
    return BudgetError(
        f"the distance took longer than its budget of {budget:g} s; {told}. Give a larger budget "
        "or a larger rtol",
        budget=budget,
        spent=spent,
        lower=lower,
        upper=upper,
        point=point,
    )
