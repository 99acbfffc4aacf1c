"""Families of models with answers known by construction, each from trivial to brutal.

What is the right order of a table of doubles? A problem asks for the order of the exact model that
was planted, whose entries, correctly rounded, the doubles are. That is a question with one answer:
the doubles lie within half a unit in the last place of the exact model, entry by entry, and
whatever else is planted, a near cancellation or a weak link, is larger than that by a factor of a
thousand at the least. How far the doubles alone *show* the answer is another matter; it is what
makes a problem hard, and at high difficulty a routine that is backward stable may fail on all of a
family.
"""

from __future__ import annotations

import zlib
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from typing import Any, Final

import numpy as np

from realize.entries import Reading
from realize.errors import UnknownWordError, UnsupportedEntryError
from realize.model.realization import Realization
from realize.polynomials import Polynomial
from realize.results import Deferred, Part
from realize.testing import builders
from realize.testing.builders import Plan

__all__ = ["DIFFICULTIES", "Family", "Problem", "families", "problem"]

DIFFICULTIES: Final = tuple(range(10))
"""From 0, trivial, to 9, brutal."""

_READINGS: Final = (Reading.STORED, Reading.WRITTEN, Reading.INTENDED)


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Problem:
    """One model with its answer.

    Attributes
    ----------
    family : str
    difficulty : int
        0, trivial, to 9, brutal.
    seed : int
    model : Realization
        The doubles that a routine is given.
    exact : Realization
        The rational model whose entries, rounded, they are. The question is about this one.
    order : int
        The order of its minimal realizations.
    dimensions : dict
        Part -> number of states of `exact`.
    polynomials : dict
        Part -> monic characteristic polynomial, descending powers.
    minimal : Realization
        A minimal realization of `exact`, in coordinates that are well conditioned where the family
        has such.
    distance : (float, float) or None
        Between which numbers the distance of `exact` to the nearest model with a mode out of reach
        lies: the least 2-norm of [dA dB]. A lower end of 0.0 says nothing; None where nothing is
        known.
    """

    family: str
    difficulty: int
    seed: int
    model: Realization
    exact: Realization
    order: int
    dimensions: dict[str, int]
    polynomials: dict[str, Polynomial]
    minimal: Realization
    distance: tuple[float, float] | None
    _reading: Deferred[str | None]

    @property
    def reading(self) -> str | None:
        """The first reading, of stored, written and intended, that turns `model` into `exact`.

        None where rounding has hidden it from all of them. Computed at first access.
        """
        return self._reading.get()

    def __repr__(self) -> str:
        return (
            f"<Problem: {self.family}, difficulty {self.difficulty}, seed {self.seed}: "
            f"{self.model.order} states, order {self.order}>"
        )


@dataclass(frozen=True, kw_only=True, slots=True)
class Family:
    """A seeded family of problems.

    Attributes
    ----------
    name, summary : str
    source : str
        Where it comes from.
    """

    name: str
    summary: str
    source: str
    _build: Callable[[int, np.random.Generator], Plan] = field(repr=False)

    def problem(self, *, difficulty: int = 0, seed: int = 0) -> Problem:
        """Return one problem of the family; the same for the same difficulty and seed."""
        _check(difficulty, "difficulty", DIFFICULTIES[-1])
        _check(seed, "seed", None)
        key = [zlib.crc32(self.name.encode("ascii")), difficulty, seed]
        plan = self._build(difficulty, np.random.default_rng(key))
        draft, period = plan.draft, plan.sampling_period
        exact = draft.exact(period)
        model = exact.to_float()
        return Problem(
            family=self.name,
            difficulty=difficulty,
            seed=seed,
            model=model,
            exact=exact,
            order=draft.dimensions[Part.CONTROLLABLE_OBSERVABLE],
            dimensions=draft.dimensions,
            polynomials=draft.polynomials,
            minimal=draft.minimal(period),
            distance=plan.distance,
            _reading=Deferred(lambda: _reading_of(model, exact)),
        )

    def problems(
        self, *, difficulties: Any = DIFFICULTIES, seeds: Any = range(10)
    ) -> Iterator[Problem]:
        """Yield the problems of the difficulties and seeds, in that order."""
        for difficulty in difficulties:
            for seed in seeds:
                yield self.problem(difficulty=difficulty, seed=seed)


def _check(value: int, name: str, largest: int | None) -> None:
    if isinstance(value, bool) or not isinstance(value, (int, np.integer)) or value < 0:
        raise UnsupportedEntryError(f"{name} is {value!r}; wanted a whole number, not negative")
    if largest is not None and value > largest:
        raise UnsupportedEntryError(f"{name} is {value}; wanted 0, trivial, to {largest}, brutal")


def _reading_of(model: Realization, exact: Realization) -> str | None:
    for reading in _READINGS:
        if model.read(reading) == exact:
            return str(reading)
    return None


_OWN: Final = "our own"
_SOURCES: Final[dict[str, str]] = {
    "hidden_modes": _OWN,
    "wilkinson_chain": (
        "our own, about the bidiagonal matrix of Wilkinson (1965), The Algebraic Eigenvalue "
        "Problem, chapter 2, whose eigenvalues are ill-conditioned (from memory)"
    ),
    "common_factor": (
        "our own, about the polynomial of Wilkinson (1963), Rounding Errors in Algebraic "
        "Processes, chapter 2 (from memory)"
    ),
    "near_cancellation": _OWN,
    "weak_cascade": _OWN,
    "quiet_staircase": (
        "our own; that small entries need not show is from Paige (1981), Properties of numerical "
        "algorithms related to computing controllability, IEEE Trans. Automatic Control 26"
    ),
    "buried_mode": _OWN,
    "stiff_scales": _OWN,
    "repeated_blocks": _OWN,
    "fast_sampling": _OWN,
}


def families() -> tuple[Family, ...]:
    """Return all families of problems.

    Returns
    -------
    tuple of Family
        Each with `name`, `summary`, `source`, `problem(difficulty=, seed=)` and
        `problems(difficulties=, seeds=)`.

    Examples
    --------
    >>> from realize.testing import families
    >>> [family.name for family in families()][:3]
    ['hidden_modes', 'wilkinson_chain', 'common_factor']
    """
    found = []
    for name, source in _SOURCES.items():
        build = getattr(builders, name)
        summary = (build.__doc__ or "").split("\n\n")[0].strip().rstrip(".")
        found.append(Family(name=name, summary=summary, source=source, _build=build))
    return tuple(found)


def family(name: str) -> Family:
    """Return the family of that name.

    Raises
    ------
    UnknownWordError
        When there is none.
    """
    known = {each.name: each for each in families()}
    if name not in known:
        raise UnknownWordError(
            f"there is no family {name!r}; wanted one of {', '.join(known)}",
            argument="name",
            found=str(name),
            allowed=tuple(known),
        )
    return known[name]


def problem(name: str, *, difficulty: int = 0, seed: int = 0) -> Problem:
    """Return one problem of a family.

    Parameters
    ----------
    name : str
        The name of the family.
    difficulty : int, keyword-only
        0, trivial, to 9, brutal.
    seed : int, keyword-only
        The same seed gives the same problem.

    Returns
    -------
    Problem

    Raises
    ------
    UnknownWordError
        When there is no such family.
    UnsupportedEntryError
        When the difficulty or the seed is not one.

    Examples
    --------
    >>> from realize.testing import problem
    >>> problem("near_cancellation", difficulty=6, seed=1)
    <Problem: near_cancellation, difficulty 6, seed 1: 4 states, order 4>
    """
    return family(name).problem(difficulty=difficulty, seed=seed)
