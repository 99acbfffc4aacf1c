"""The staircase form."""

from __future__ import annotations

from realize.arithmetic.path import Path
from realize.entries import known_word
from realize.forms.sources import accept
from realize.model.realization import Realization
from realize.results import Deferred, Side, Staircase

__all__ = ["staircase"]


def staircase(path: Path, model: Realization, side: str) -> Staircase:
    """Return a model in staircase form; the output side is the dual of the input side."""
    accept(model, Realization)
    word = known_word(Side, side, "side")
    opened = path.open(model)
    if word is Side.INPUT:
        reach = opened.flag(opened.A, opened.B, opened.C, "reached")
        frame = reach.frame()
        A, B, C, basis = frame.A, frame.B, frame.C, frame.basis
    else:
        reach = opened.flag(opened.A.T, opened.C.T, opened.B.T, "seen")
        frame = reach.frame()
        # Coordinates z of the dual: A^T = T A' T^-1. The model itself then has basis T^-T.
        A, B, C, basis = frame.A.T, frame.C.T, frame.B.T, frame.inverse.T
    return Staircase(
        model=opened.close(A, B, C),
        transformation=opened.transformation(basis),
        stairs=reach.stairs,
        side=word,
        dimension=reach.dimension,
        _decisions=Deferred(reach.decisions),
    )
