"""Every public answer about one model, for tests of what answers have in common."""

from __future__ import annotations

import warnings
from types import ModuleType
from typing import Any

import realize
from realize import HiddenInstabilityWarning, Realization


def hidden_in_every_part() -> Realization:
    """Two states in each part, with complex, repeated and unstable eigenvalues."""
    return Realization(
        [
            [0, 1, 1, 0, 2, 0, 1, 0],
            [-2, -2, 0, 0, 0, 1, 0, 0],
            [0, 0, 0, 1, 0, 0, 1, 0],
            [0, 0, -1, -2, 0, 0, 0, 0],
            [0, 0, 0, 0, 1, 1, 0, 3],
            [0, 0, 0, 0, 0, 1, 0, 0],
            [0, 0, 0, 0, 0, 0, 0, 1],
            [0, 0, 0, 0, 0, 0, "1/3", "-1/7"],
        ],
        [[0, 1], [1, 0], [0, 0], [1, 1], [0, 0], [0, 0], [0, 0], [0, 0]],
        [[0, 0, 1, 0, 0, 0, 0, 0], [0, 0, 2, 1, 0, 0, 1, 0]],
        [["1/2", 0], [0, 1]],
    )


def answers(place: ModuleType, model: Realization) -> dict[str, Any]:
    """All forms of a model in one place, by name."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", HiddenInstabilityWarning)
        transfer = place.transfer_matrix(model)
        parameters = place.markov_parameters(model, 5)
        return {
            "staircase": place.staircase(model),
            "staircase, output": place.staircase(model, side="output"),
            "minimal": place.minimal(model),
            "minimal of a transfer matrix": place.minimal(transfer),
            "kalman_parts": place.kalman_parts(model),
            "companion": place.companion(
                realize.TransferMatrix(
                    transfer.numerators[0][0],
                    transfer.denominators[0][0],
                    sampling_period=transfer.sampling_period,
                )
            ),
            "transfer_matrix": transfer,
            "cancel": place.cancel(transfer),
            "markov_parameters": parameters,
            "from_markov_parameters": place.from_markov_parameters(parameters),
        }
