"""The minimal realization: what is reached, and of that what is seen."""

from __future__ import annotations

import warnings
from typing import Any

from realize.arithmetic.floating import OpenedFloating
from realize.arithmetic.path import Opened, Path, Reach
from realize.entries import Reading
from realize.errors import EntryError, HiddenInstabilityWarning
from realize.forms.companion import realize_transfer
from realize.forms.kalman import decompose, reach_and_see
from realize.forms.nearby import nearby
from realize.forms.response import response_change
from realize.forms.sources import accept
from realize.model.realization import Realization
from realize.model.transfer import TransferMatrix
from realize.results import Deferred, Part, Reduction, RemovedModes
from realize.stability import Stability, hidden_warning

__all__ = ["minimal", "reduce"]


def minimal(path: Path, source: Realization | TransferMatrix) -> Reduction:
    """Return a minimal realization, and warn of what the transfer matrix no longer shows."""
    reduction, opened, blocks = _reduce(path, source)
    if reduction.order < reduction.source_order and not all(
        opened.decays(block) for _, block in blocks
    ):
        try:
            modes = opened.modes(blocks)
        except EntryError:
            # A mode that no double can hold cannot be named.
            modes = ()
        doubtful = [mode for mode in modes if mode.stability is not Stability.STABLE]
        # The caller called a face, and the face called this.
        warnings.warn(hidden_warning(doubtful), HiddenInstabilityWarning, stacklevel=3)
    return reduction


def reduce(path: Path, source: Realization | TransferMatrix) -> Reduction:
    """Return a minimal realization of a model or of a transfer matrix, without warning."""
    return _reduce(path, source)[0]


def _reduce(
    path: Path, source: Realization | TransferMatrix
) -> tuple[Reduction, Opened[Reach], list[tuple[Part, Any]]]:
    """Return the reduction, the opened model, and the blocks removed, not yet sorted into parts."""
    accept(source, Realization, TransferMatrix)
    from_transfer = isinstance(source, TransferMatrix)
    model = realize_transfer(path, source) if isinstance(source, TransferMatrix) else source
    opened = path.open(model)
    reach, sight = reach_and_see(opened)
    order = sight.dimension

    blocks = [
        (Part.CONTROLLABLE_UNOBSERVABLE, sight.quotient()),
        (Part.UNCONTROLLABLE_UNOBSERVABLE, reach.quotient()),
    ]

    def removed() -> RemovedModes:
        polynomial: tuple[Any, ...] | None = None
        if path.is_exact:
            first, second = (opened.characteristic_polynomial(block) for _, block in blocks)
            polynomial = path.multiply(first, second)
        return RemovedModes(
            count=model.order - order,
            polynomial=polynomial,
            _modes=Deferred(lambda: opened.modes(decompose(opened, reach, sight).hidden_blocks())),
        )

    # The reduced state is U x on the reachable part, with U the transposed basis of the dual.
    state_map = Deferred(
        lambda: None if from_transfer else opened.state_map(sight.basis.T @ reach.coordinates)
    )
    reduced = opened.close(sight.A.T, sight.C.T, sight.B.T)
    reduction = Reduction(
        model=reduced,
        order=order,
        source_order=model.order,
        _removed=Deferred(removed),
        _state_map=state_map,
        _decisions=Deferred(lambda: reach.decisions() + sight.decisions()),
        _condition=Deferred(
            lambda: None if (map_ := state_map.get()) is None else opened.condition(map_)
        ),
        **_changes(opened, (reach, sight), reduced),
        _source=source,
        _evidence=Deferred(lambda: opened.evidence(reach, sight)),
    )
    return reduction, opened, blocks


def _changes(opened: Any, run: tuple[Any, Any], reduced: Realization) -> dict[str, Deferred[Any]]:
    """Return what a floating reduction changes; an exact one changes nothing."""
    if not isinstance(opened, OpenedFloating):
        return {}
    model = opened.model

    def backward_error() -> float:
        if reduced.order == model.order:
            return 0.0
        return nearby(opened, run).distance(model.read(Reading.STORED))

    return {
        "_backward_error": Deferred(backward_error),
        "_response_change": Deferred(lambda: response_change(model, reduced)),
    }
