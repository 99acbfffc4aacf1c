"""Comparing an examination with a recorded one."""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, Final, TextIO

from realize.errors import ModelFileError

__all__ = ["Difference", "differences", "read_record"]

NOTABLE: Final = 0.5
"""Decades by which a singular value may move without being told: a factor of three."""

_PLAIN: Final = (
    "model",
    "order",
    "minimal_order",
    "floating_order",
    "unscaled_order",
    "paths_agree",
    "readings_agree",
    "answer",
    "within_uncertainty",
    "stabilizable",
    "detectable",
    "routes",
    "parts",
)


@dataclass(frozen=True, kw_only=True, slots=True)
class Difference:
    """One thing that is not as it was recorded.

    Attributes
    ----------
    what : str
        A key of the record, or the stage of a rank decision.
    before, after : Any
        Plain JSON values.
    decades : float or None
        For a singular value: by how many powers of ten it moved.
    """

    what: str
    before: Any
    after: Any
    decades: float | None = None

    def __str__(self) -> str:
        if self.decades is None:
            return f"{self.what}: was {_short(self.before)}, is {_short(self.after)}"
        return (
            f"{self.what}: was {self.before:.3g}, is {self.after:.3g} ({self.decades:+.1f} decades)"
        )


def read_record(stream: TextIO) -> dict[str, Any]:
    """Return a recorded examination, as `Examination.to_dict` made it.

    Raises
    ------
    ModelFileError
        When the text is not JSON, or not a record of a version that is known.
    """
    try:
        record = json.load(stream)
    except (ValueError, RecursionError) as error:
        raise ModelFileError(
            f"the record is not JSON ({error}); give what `realize examine --json` printed"
        ) from None
    fields: dict[str, Any] = record if isinstance(record, dict) else {}
    found = fields.get("format"), fields.get("version")
    if found != ("realize-examination", 1):
        raise ModelFileError(
            f"found format {found[0]!r}, version {found[1]!r}; wanted 'realize-examination', "
            "version 1: give what `realize examine --json` printed"
        )
    return fields


def differences(before: Mapping[str, Any], after: Mapping[str, Any]) -> tuple[Difference, ...]:
    """Return what differs between two records: answers, hidden modes, and rank decisions.

    Timings, versions and texts are not compared. A singular value counts when its decision took
    another rank, or when it moved by more than `NOTABLE` decades.
    """
    found = [
        Difference(what=key, before=before.get(key), after=after.get(key))
        for key in _PLAIN
        if before.get(key) != after.get(key)
    ]
    hidden = [_hidden(record) for record in (before, after)]
    if hidden[0] != hidden[1]:
        found.append(Difference(what="hidden modes", before=hidden[0], after=hidden[1]))
    old = {decision["where"]: decision for decision in before.get("decisions", [])}
    new = {decision["where"]: decision for decision in after.get("decisions", [])}
    for where in dict.fromkeys([*old, *new]):
        if where not in old or where not in new:
            found.append(
                Difference(
                    what=where,
                    before=_rank(old.get(where)),
                    after=_rank(new.get(where)),
                )
            )
            continue
        found.extend(_moved(where, old[where], new[where]))
    return tuple(found)


def _moved(where: str, before: Mapping[str, Any], after: Mapping[str, Any]) -> list[Difference]:
    found: list[Difference] = []
    ranks_differ = before["rank"] != after["rank"]
    if ranks_differ:
        found.append(Difference(what=f"{where}, rank", before=before["rank"], after=after["rank"]))
    for key, name in (("smallest_kept", "kept"), ("largest_dropped", "dropped")):
        old, new = before[key], after[key]
        if not old or not new:
            continue
        # What is dropped is noise, and noise moves; only its distance from the cutoff matters.
        if key == "largest_dropped" and max(old, new) < 1e-3 * after["cutoff"]:
            continue
        decades = math.log10(new / old)
        if abs(decades) > NOTABLE or ranks_differ:
            found.append(
                Difference(what=f"{where}, {name}", before=old, after=new, decades=decades)
            )
    return found


def _hidden(record: Mapping[str, Any]) -> list[str]:
    """Return the hidden modes as text that compares: value, part and stability."""
    return sorted(
        f"{mode['real']:.12g}{mode['imaginary']:+.12g}j {mode['part']} {mode['stability']}"
        for mode in record.get("modes", [])
        if mode["part"] != "controllable, observable"
    )


def _rank(decision: Mapping[str, Any] | None) -> str:
    return "no such stage" if decision is None else f"rank {decision['rank']}"


def _short(value: Any) -> str:
    text = value if isinstance(value, str) else json.dumps(value)
    return text if len(text) <= 60 else f"{text[:57]}..."
