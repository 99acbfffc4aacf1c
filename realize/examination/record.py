"""The record of an examination."""

from __future__ import annotations

import hashlib
import json
import os
import sys
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Final

import numpy as np

from realize.arithmetic.steps import PrecisionSteps
from realize.examination.alike import Alike
from realize.examination.nearest import Nearest
from realize.model.connections import AlgebraicLoop
from realize.model.files import to_document
from realize.model.realization import Realization
from realize.polynomials import Polynomial
from realize.results import Deferred, Mode, Part, RankDecision, Reduction, ResponseChange, spelled
from realize.stability import (
    NEARLY_ILL_POSED_LOOP,
    WEAK_IS_NOT_HIDDEN,
    Stability,
    hidden_cautions,
)
from realize.tolerance import LOOP_MARGIN
from realize.uncertainty import Uncertainty
from realize.within.weigh import Weighed, Within

__all__ = ["Answer", "Examination", "environment", "peak_memory"]

NEAR_EDGE: Final = 1000.0
"""Factor between the cutoff and another answer below which the answer counts as fragile."""


@dataclass(frozen=True, kw_only=True, slots=True)
class Answer:
    """The order that the examination stands by.

    Attributes
    ----------
    order : int
    basis : str
        "given", "stored", "written": the reading it is proved for; "nearest": proved for an exact
        model within the rounding floor of the one examined, or within the uncertainty where one
        was given; "multiprecision": the exact path has no answer, and the steps of precision are
        the evidence for this one, which is no proof; "floating": by the floating path alone, and
        nothing is proved.
    """

    order: int
    basis: str


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Examination:
    """What both paths say of one model.

    Attributes
    ----------
    model : Realization
    order : int
        Number of states.
    minimal_order : dict
        Reading -> minimal order, proved.
    floating_order, unscaled_order : int
        What the floating path takes at the cutoff, on the scaled model and in the user's units;
        None where the entries reach beyond what doubles can hold.
    paths_agree : bool
        Whether for some reading the floating order is the exact one.
    readings_agree : bool
        Whether all readings examined have one minimal order.
    answer : Answer
    verdict : str
        The answer in one sentence.
    nearest : Nearest or None
        The nearest model of lower order that the floating reduction shows.
    cutoff_ranges : dict
        Reading -> (low, high): every cutoff from low up to high gives the floating path the exact
        ranks at every stage; None when no single cutoff does. In the units of the decisions'
        cutoffs; divide by their scale for a tolerance.
    conflicts : dict
        Reading -> the stages that leave no cutoff, in words; empty where there is a range.
    routes : dict
        Reading -> {"state": order, "polynomial": order, "hankel": order}.
    uncertainty : Uncertainty or None
        The one given.
    weighed : Weighed or None
        What is known of the models within it: bounds, and what they rest on.
    not_done : tuple of str
        What was skipped and why.
    precision_steps : dict
        Reading -> the steps of precision that were taken for want of an exact answer: "given" for
        a model of rationals and constants, "nearest" for the nearest model of lower order. Where
        the answer's basis is "multiprecision" it rests on the first of them. Empty where the
        exact path answered.
    hidden_parts : dict
        Reading -> hidden part -> exact characteristic polynomial.
    seconds : dict
        Path -> wall-clock seconds; "uncertainty" too, where one was weighed.
    peak_memory : int or None
        Bytes, the most that the process has held so far; None where the system does not tell.
    """

    model: Realization
    order: int
    minimal_order: dict[str, int]
    floating_order: int | None
    unscaled_order: int | None
    paths_agree: bool
    readings_agree: bool
    answer: Answer
    verdict: str
    nearest: Nearest | None
    cutoff_ranges: dict[str, tuple[float, float] | None]
    conflicts: dict[str, tuple[str, ...]]
    routes: dict[str, dict[str, int]]
    not_done: tuple[str, ...]
    seconds: dict[str, float]
    peak_memory: int | None
    precision_steps: dict[str, PrecisionSteps] = field(default_factory=dict)
    uncertainty: Uncertainty | None = None
    weighed: Weighed | None = None
    _decisions: Deferred[tuple[RankDecision, ...]]
    _hidden: Deferred[tuple[Mode, ...]]
    _visible: Deferred[tuple[Mode, ...]]
    _parts: Deferred[dict[str, dict[str, Polynomial | None]]]
    hidden_parts: dict[str, dict[str, Polynomial]]
    _unsimple: Deferred[int]
    _reduction: Deferred[Reduction | None]
    _nearly_hidden: Deferred[int]
    _loops: Deferred[tuple[AlgebraicLoop, ...]]
    _alike: Deferred[tuple[Alike, ...]]

    @property
    def algebraic_loops(self) -> tuple[AlgebraicLoop, ...]:
        """The algebraic loops of a connected model; none where feedthroughs run in no circle."""
        return self._loops.get()

    @property
    def within_uncertainty(self) -> Within | None:
        """Whether all models within the uncertainty are minimal; None when none was given.

        "minimal": every one is, proved. "not minimal": `witness` is not. "open": neither is known.
        """
        return None if self.weighed is None else self.weighed.within

    @property
    def witness(self) -> Realization | None:
        """An exact model within the uncertainty that is not minimal, if one was found."""
        return None if self.weighed is None else self.weighed.witness

    @property
    def decisions(self) -> tuple[RankDecision, ...]:
        """Every rank decision of the floating path, with the exact ranks beside it."""
        return self._decisions.get()

    @property
    def hidden_modes(self) -> tuple[Mode, ...]:
        """The modes of the answer that the transfer matrix does not show."""
        return self._hidden.get()

    @property
    def stabilizable(self) -> str:
        """Whether every mode that is not reached decays: "yes", "no" or "cannot tell"."""
        return self._decaying(Part.UNCONTROLLABLE_OBSERVABLE, Part.UNCONTROLLABLE_UNOBSERVABLE)

    @property
    def detectable(self) -> str:
        """Whether every mode that is not seen decays: "yes", "no" or "cannot tell"."""
        return self._decaying(Part.CONTROLLABLE_UNOBSERVABLE, Part.UNCONTROLLABLE_UNOBSERVABLE)

    def _decaying(self, *parts: Part) -> str:
        found = {mode.stability for mode in self.hidden_modes if mode.part in parts}
        if found & {Stability.UNSTABLE, Stability.MARGINAL}:
            return "no"
        return "cannot tell" if Stability.CANNOT_TELL in found else "yes"

    @property
    def modes(self) -> tuple[Mode, ...]:
        """All modes of the answer, the hidden ones first.

        The visible ones come from the exact path within its budget, and otherwise from the
        floating path, with infinite radius.
        """
        return self._hidden.get() + self._visible.get()

    @property
    def alike(self) -> tuple[Alike, ...]:
        """Modes that agree, and visible modes and zeros that do, within what the data can tell.

        Within the uncertainty, or one ulp of every entry where none was given, to first order.
        None of exact data without an uncertainty.
        """
        return self._alike.get()

    @property
    def parts(self) -> dict[str, dict[str, Polynomial | None]]:
        """Reading -> part -> exact characteristic polynomial.

        The polynomial of the visible part costs more than all the rest; it is computed at first
        access, and is None where the budget does not suffice for it.
        """
        return self._parts.get()

    @property
    def response_change(self) -> ResponseChange | None:
        """What removing the hidden modes changes, by the floating reduction.

        None when nothing is hidden, or when the floating path has another order than the answer.
        """
        reduction = self._reduction.get()
        return None if reduction is None else reduction.response_change

    @property
    def cautions(self) -> tuple[str, ...]:
        """What must be said of the hidden modes of the answer, and of what is nearly another."""
        said = hidden_cautions(self.hidden_modes)
        if self.nearest is not None and self.nearest.order < self.answer.order:
            said += (WEAK_IS_NOT_HIDDEN,)
        if any(found.margin < LOOP_MARGIN for found in self.algebraic_loops):
            said += (NEARLY_ILL_POSED_LOOP,)
        return said

    @property
    def entries_without_simple_fraction(self) -> int:
        """How many floats have no simple fraction near; says how far to trust `intended`."""
        return self._unsimple.get()

    @property
    def fragile(self) -> tuple[str, ...]:
        """What makes the answer fragile, in words; empty when nothing does.

        A floating order that is not the answer's, an answer that no cutoff gives, a cutoff within
        three decades of one that gives another answer, steps of precision that are not settled,
        eigenvectors that show more modes within the cutoff of being hidden than the answer hides,
        a hidden mode of which it cannot be told whether it decays.
        """
        found: list[str] = []
        if self.floating_order is None:
            found.append("the floating path did not run")
        elif self.floating_order != self.answer.order:
            found.append("the floating path has another order")
        basis = self.rests_on
        span = self.cutoff_ranges.get(basis)
        cutoff = next((decision.cutoff for decision in self.decisions), 0.0)
        conflict = basis in self.cutoff_ranges and span is None
        if span is None:
            near_edge = (basis == "nearest" or conflict) and self._margin() < NEAR_EDGE
        else:
            near_edge = not span[0] * NEAR_EDGE <= cutoff <= span[1] / NEAR_EDGE
        # Rounding makes the exact ranks of single stages the largest that there can be, which no
        # cutoff gives; where the order is the answer's all the same, only its margin counts.
        if conflict and self.floating_order != self.answer.order and self.decisions:
            found.append("no cutoff gives the answer")
        elif near_edge:
            found.append("a cutoff less than three decades away gives another order")
        steps = self.leading_steps
        if steps is not None and not steps.is_settled:
            found.append("the steps of precision are not settled")
        if self._nearly_hidden.get() > self.order - self.answer.order:
            found.append("eigenvectors show a nearly hidden mode that the staircase does not")
        if any(mode.stability is Stability.CANNOT_TELL for mode in self.hidden_modes):
            found.append("it cannot be told whether a hidden mode decays")
        return tuple(found)

    @property
    def rests_on(self) -> str:
        """The reading, or the other model, that the answer is about; "floating" without one."""
        if self.answer.basis == "multiprecision":
            return next(iter(self.precision_steps))
        return self.answer.basis

    @property
    def leading_steps(self) -> PrecisionSteps | None:
        """The steps of precision that the answer rests on; None where there are none."""
        if self.answer.basis == "multiprecision":
            return self.precision_steps[self.rests_on]
        return None

    def _margin(self) -> float:
        """Return the smallest factor between the cutoff and a singular value it decided on."""
        factors = [float("inf")]
        for decision in self.decisions:
            if decision.smallest_kept is not None and decision.cutoff:
                factors.append(decision.smallest_kept / decision.cutoff)
            if decision.largest_dropped:
                factors.append(decision.cutoff / decision.largest_dropped)
        return min(factors)

    @property
    def digest(self) -> str:
        """SHA-256 of what the exact path says; the same on every machine."""
        exact = {
            "model": self.model.digest,
            "minimal_order": self.minimal_order,
            "routes": self.routes,
            "hidden": _plain_parts(self.hidden_parts),
        }
        text = json.dumps(exact, sort_keys=True, separators=(",", ":"), ensure_ascii=True)
        return hashlib.sha256(text.encode("ascii")).hexdigest()

    @property
    def status(self) -> int:
        """Exit status of the command line.

        0: nothing hidden, and nothing in doubt. 1: hidden modes, or paths or readings that
        disagree. 3: undecided: nothing is proved, though steps of precision may be evidence, or
        the question is open within the uncertainty.
        4: a hidden mode is not known to be stable.
        """
        if any(mode.stability is not Stability.STABLE for mode in self.hidden_modes):
            return 4
        if self.answer.basis in ("floating", "multiprecision"):
            return 3
        if self.within_uncertainty is Within.OPEN:
            return 3
        clean = self.answer.order == self.order and self.paths_agree and self.readings_agree
        return 0 if clean else 1

    def to_dict(self) -> dict[str, Any]:
        """Return the examination as plain JSON values."""
        return {
            "format": "realize-examination",
            "version": 1,
            "model": self.model.digest,
            "order": self.order,
            "inputs": self.model.input_count,
            "outputs": self.model.output_count,
            "minimal_order": dict(self.minimal_order),
            "floating_order": self.floating_order,
            "unscaled_order": self.unscaled_order,
            "paths_agree": self.paths_agree,
            "readings_agree": self.readings_agree,
            "answer": {"order": self.answer.order, "basis": self.answer.basis},
            "verdict": self.verdict,
            "fragile": list(self.fragile),
            "stabilizable": self.stabilizable,
            "detectable": self.detectable,
            "nearest": None if self.nearest is None else self.nearest.to_dict(),
            "response_change": (
                None if self.response_change is None else self.response_change.to_dict()
            ),
            "parts": _plain_parts(self.parts),
            "modes": [mode.to_dict() for mode in self.modes],
            "alike": [pair.to_dict() for pair in self.alike],
            "decisions": [decision.to_dict() for decision in self.decisions],
            "cutoff_ranges": {
                reading: None if span is None else [_finite(value) for value in span]
                for reading, span in self.cutoff_ranges.items()
            },
            "conflicts": {reading: list(text) for reading, text in self.conflicts.items()},
            "routes": {reading: dict(found) for reading, found in self.routes.items()},
            "uncertainty": None if self.uncertainty is None else str(self.uncertainty),
            "within_uncertainty": (
                None if self.within_uncertainty is None else str(self.within_uncertainty)
            ),
            "weighed": None if self.weighed is None else self.weighed.to_dict(),
            "witness": None if self.witness is None else to_document(self.witness),
            "cautions": list(self.cautions),
            "not_done": list(self.not_done),
            "precision_steps": {
                reading: steps.to_dict() for reading, steps in self.precision_steps.items()
            },
            "seconds": dict(self.seconds),
            "peak_memory": self.peak_memory,
            "algebraic_loops": [
                {"ports": list(found.ports), "margin": _finite(found.margin)}
                for found in self.algebraic_loops
            ],
            "environment": environment(),
            "digest": self.digest,
        }

    def __str__(self) -> str:
        from realize.examination.page import page

        return page(self)

    def __repr__(self) -> str:
        return f"<Examination: {self.verdict}>"


def peak_memory() -> int | None:
    """Return the most bytes that the process has held so far, where the system tells."""
    try:
        import resource
    except ImportError:  # not every system has it
        return None
    held = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    return held if sys.platform == "darwin" else 1024 * held


def _finite(value: float) -> float | None:
    """Return None for infinity, which JSON cannot hold."""
    return None if value == float("inf") else value


def _plain_parts(
    parts: Mapping[str, Mapping[str, Polynomial | None]],
) -> dict[str, dict[str, list[str] | None]]:
    return {
        reading: {
            part: None if polynomial is None else spelled(polynomial)
            for part, polynomial in found.items()
        }
        for reading, found in parts.items()
    }


def environment() -> dict[str, str]:
    """Return what the floating path ran on: one numpy on one machine can round in several ways."""
    import scipy

    config: dict[str, Any] = np.show_config(mode="dicts")  # type: ignore[assignment,unused-ignore]
    blas = config.get("Build Dependencies", {}).get("blas", {})
    return {
        "numpy": np.__version__,
        "scipy": scipy.__version__,
        "blas": f"{blas.get('name', 'unknown')} {blas.get('version', '')}".strip(),
        "blas_kernel": str(blas.get("openblas configuration", "unknown")),
        "threads": os.environ.get("OPENBLAS_NUM_THREADS", "not set"),
    }
