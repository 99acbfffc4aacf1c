"""Whether every model within an uncertainty is minimal.

A proof for both sides of the model (`covering`), or an exact model within the uncertainty that is
not minimal (`search` and `exactly`), or neither, with the bounds that were reached.
"""

from __future__ import annotations

import math
import time
from collections.abc import Iterable
from dataclasses import dataclass
from enum import StrEnum
from typing import Any, Final

import numpy as np

from realize.arithmetic.exact import ExactPath
from realize.entries import place_text
from realize.errors import EntryError, PrecisionError
from realize.forms.kalman import reach_and_see
from realize.model.realization import Realization
from realize.results import Side
from realize.within.box import Box, InDoubles
from realize.within.covering import FINEST, Covering
from realize.within.exactly import Witness, exactly
from realize.within.search import Found, Hidden, closest, eigenvalues, starts

__all__ = ["Weighed", "Within", "weigh"]

_CLOSE: Final = 0.9
"""Share of what smaller squares alone could prove at which the refining of an open case ends."""

_PROVING: Final = 0.6
"""Share of the time that the proof may take before a witness is looked for."""

_ALONE: Final = 0.6
"""Share of the time after which no more single modes are sought, once there is a witness."""

_SAME: Final = 1e-5
"""Relative difference up to which two points, or two vectors, are the same."""

_SPLITTING: Final = 0.85
"""Share of the time after which the box is not split any more."""

_PIECES: Final = 6000
"""How many pieces are tested on each side before splitting the box is given up."""

_ZOOMED: Final = 2.0**-12
"""Share of the reach at which squares have closed in on a point, so that a mode may be there."""

_LARGEST: Final = 2.0
"""Factor on the radii up to which minimality is of interest."""

_HEAVY: Final = 3
"""How many entries are named as those that count."""

_PLACES: Final = 4
"""How many places where the proof fails are searched, on each side."""


class Within(StrEnum):
    """What is known of the models within an uncertainty."""

    MINIMAL = "minimal"
    NOT_MINIMAL = "not minimal"
    OPEN = "open"


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Weighed:
    """What is known of the models within an uncertainty, and the evidence.

    Attributes
    ----------
    within : Within
        "minimal": proved for every model. "not minimal": `witness` is one that is not. "open".
    proved : float
        With the radii times any factor below this every model is minimal, proved. Factors above
        2 were not looked at.
    reached : float
        With the radii times this there is an exact model that is not minimal; inf when none was
        found.
    side : Side or None
        From which side its mode is hidden: "input", not reached; "output", not seen.
    point : complex or None
        Where that mode lies, or the upper one of a pair (units: 1 / time; none in discrete time).
    weights : tuple of (str, float)
        The entries whose uncertainty counts most, with their shares: a radius smaller by a small
        part raises `reached` by its share of that part.
    witness : Realization or None
        An exact model within the uncertainty that is not minimal.
    squares : int
        How many squares of the complex plane were tested.
    unfinished : str or None
        What kept the bounds apart, in words; None when the question is settled.
    """

    within: Within
    proved: float
    reached: float
    side: Side | None
    point: complex | None
    weights: tuple[tuple[str, float], ...]
    witness: Realization | None
    squares: int
    unfinished: str | None

    def to_dict(self) -> dict[str, Any]:
        """Return bounds and evidence as plain JSON values, without the witness."""
        return {
            "proved": self.proved,
            "reached": self.reached if math.isfinite(self.reached) else None,
            "side": None if self.side is None else str(self.side),
            "point": None if self.point is None else [self.point.real, self.point.imag],
            "weights": [[name, share] for name, share in self.weights],
            "squares": self.squares,
            "unfinished": self.unfinished,
        }


def weigh(box: Box, seconds: float | None, known: Realization | None = None) -> Weighed:
    """Return what is known of a box of models: whether they are all minimal.

    Parameters
    ----------
    box : Box
    seconds : float or None
        Time to stop after with what was reached; None for none.
    known : Realization or None
        A rational model in the box that is known not to be minimal. One that hides more is
        looked for.
    """
    return _Weighing(box, seconds, known).result()


class _Weighing:
    def __init__(self, box: Box, seconds: float | None, known: Realization | None) -> None:
        self.box = box
        self.began = time.monotonic()
        self.seconds = math.inf if seconds is None else seconds
        self.best: tuple[Witness, Found] | None = None
        self.known = known
        self.lowest = None if known is None else _order(known)
        self.witness = known
        self.coverings: dict[Side, Covering] = {}
        self.unfinished: str | None = None
        self.doubles: InDoubles | None = None

    def result(self) -> Weighed:
        try:
            doubles = self.doubles = InDoubles(self.box)
        except (PrecisionError, EntryError) as error:
            self.unfinished = str(error)
            return self._told()
        # Where numbers overflow, what comes of it proves nothing and is no witness.
        with np.errstate(all="ignore"):
            self._weigh(doubles)
        return self._told()

    def _weigh(self, doubles: InDoubles) -> None:
        if self.known is None:
            for side in Side:
                self.coverings[side] = Covering(doubles.pencil(side), _LARGEST, self._late)
            self._prove(1.0, _PROVING)
            if self._lower() < 1:
                self._look(doubles)
            # First a bound that an open answer can be told with, then what takes longer.
            if self._lower() < 1 < self._upper():
                self._prove(_CLOSE, _SPLITTING)
            if self._lower() < 1 < self._upper():
                self._split()
        if self.witness is not None:
            self._hide_more(doubles)

    # Bounds

    def _lower(self) -> float:
        return min((c.lower for c in self.coverings.values()), default=0.0)

    def _upper(self) -> float:
        if self.best is not None:
            return float(self.best[0].factor)
        return math.inf if self.known is None else float(self.box.distance(self.known))

    def _late(self, share: float = 1.0) -> bool:
        return time.monotonic() - self.began > share * self.seconds

    # Steps

    def _prove(self, wanted: float, share: float) -> None:
        """Refine until all is proved, or what cannot be proved is seen, or the time is up.

        ``wanted`` 1: stop as soon as smaller squares alone cannot prove a factor of 1, or close
        in on a point. Below 1: go on until what they can prove is nearly reached.
        """
        for covering in self.coverings.values():
            while covering.lower < 1:
                if wanted == 1 and (covering.bound < 1 or covering.fineness < _ZOOMED):
                    break
                if covering.lower >= wanted * covering.bound or covering.fineness <= FINEST:
                    break
                if self._late(share):
                    self.unfinished = "the time was up before the plane was covered"
                    return
                covering.refine(1.0)

    def _split(self) -> None:
        """Try to prove what is left by splitting the box too, as long as there is hope."""
        for covering in self.coverings.values():
            # As long as smaller squares may do it alone, they are cheaper.
            while covering.bound >= 1 and covering.lower < 1 and not self._late(_SPLITTING):
                if covering.fineness <= FINEST:
                    break
                covering.refine(1.0)
            covering.split_box(_PIECES, lambda: self._late(_SPLITTING))
            if covering.lower < 1:
                return

    def _look(self, doubles: InDoubles) -> None:
        """Look for a model that is not minimal, first where the proof fails."""
        values = eigenvalues(doubles)
        tries: list[tuple[bool, float, Hidden]] = []
        for side in Side:
            failing = self.coverings[side].failing(_PLACES)
            tries += [(False, far, mode) for far, mode in starts(doubles, side, failing)]
            tries += [(True, far, mode) for far, mode in starts(doubles, side, values)]
        for _, _, mode in sorted(tries, key=lambda each: each[:2]):
            if self._late():
                self.unfinished = "the time was up before all starting points were tried"
                return
            self._try(doubles, (mode,))
            if self._upper() <= 1:
                return

    def _try(self, doubles: InDoubles, modes: tuple[Hidden, ...]) -> None:
        found = closest(doubles, modes, 1.0, self._late)
        if found is None or found.factor > self._upper():
            return
        witness = exactly(self.box, doubles, found, 1.0)
        if witness is None:
            return
        if witness.factor < self._upper():
            self.best = witness, found
        if witness.factor <= 1:
            self._accept(witness)

    def _accept(self, witness: Witness) -> bool:
        """Keep a model within the uncertainty if it is of lower order than the one kept."""
        order = _order(witness.model)
        if self.lowest is not None and order >= self.lowest:
            return False
        self.lowest, self.witness = order, witness.model
        return True

    def _hide_more(self, doubles: InDoubles) -> None:
        """Look for models within the uncertainty that hide more modes at once.

        First every mode that can be hidden alone, then as many of these together as will go, the
        nearest first.
        """
        alone: list[Found] = []
        values = eigenvalues(doubles)
        tries = [each for side in Side for each in starts(doubles, side, values)]
        if self.best is not None:
            alone.append(self.best[1])
        for _, mode in sorted(tries, key=lambda each: each[0]):
            if self._late(_ALONE):
                break
            found = closest(doubles, (mode,), 1.0, self._late)
            if found is not None and found.factor <= 1 and not _is_known(doubles, found, alone):
                alone.append(found)
        together: tuple[Hidden, ...] = ()
        for each in sorted(alone, key=lambda found: found.factor):
            if self._late():
                break
            if not together:
                together = each.modes
                self._settle(doubles, each)
                continue
            found = closest(doubles, (*together, *each.modes), 1.0, self._late)
            if found is not None and found.factor <= 1 and self._settle(doubles, found):
                together = found.modes

    def _settle(self, doubles: InDoubles, found: Found) -> bool:
        witness = exactly(self.box, doubles, found, 1.0)
        return witness is not None and witness.factor <= 1 and self._accept(witness)

    # Telling

    def _told(self) -> Weighed:
        lower, upper = self._lower(), self._upper()
        within = Within.OPEN
        if self.witness is not None:
            within = Within.NOT_MINIMAL
        elif lower >= 1:
            within = Within.MINIMAL
        side, point = None, None
        weights: tuple[tuple[str, float], ...] = ()
        if self.best is not None and self.doubles is not None:
            found = self.best[1]
            mode = found.modes[0]
            side, point = mode.side, self.doubles.point(mode.point)
            weights = tuple(self._heaviest(found))
        return Weighed(
            within=within,
            proved=lower,
            reached=upper,
            side=side,
            point=point,
            weights=weights,
            witness=self.witness,
            squares=sum(c.count for c in self.coverings.values()),
            unfinished=None if within is not Within.OPEN else self._why_open(),
        )

    def _why_open(self) -> str:
        return self.unfinished or "smaller squares would not prove more"

    def _heaviest(self, found: Found) -> Iterable[tuple[str, float]]:
        radii = self.box.radii
        names = [
            place_text((letter, int(i), int(j)))
            for letter, radius in (("A", radii.A), ("B", radii.B), ("C", radii.C))
            for i, j in np.argwhere(radius != 0).tolist()
        ]
        order = np.argsort(-found.weights)[:_HEAVY]
        for k in order.tolist():
            if found.weights[k] > 0.01:
                yield names[k], float(found.weights[k])


def _order(model: Realization) -> int:
    """Return the minimal order of a rational model."""
    return reach_and_see(ExactPath().open(model))[1].dimension


def _is_known(doubles: InDoubles, found: Found, others: Iterable[Found]) -> bool:
    """Whether another one hides the same mode, up to small differences."""
    mode = found.modes[0]
    scale = max(float(np.linalg.norm(doubles.A)), abs(mode.point))
    return any(
        mode.side is other.side
        and abs(mode.point - other.point) <= _SAME * scale
        and float(np.abs(mode.vector - other.vector).max()) <= math.sqrt(_SAME)
        for each in others
        for other in each.modes
    )
