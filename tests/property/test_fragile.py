"""False alarms and missed ones: clean models, models with hidden parts, planted fragile ones."""

from __future__ import annotations

import numpy as np
import pytest

from realize import Realization, examine

TRIALS = 500


def rotated(seed: int, gap: float | None) -> tuple[Realization, int]:
    """A model in rotated doubles whose last states are linked to the rest by a gap only.

    None links them fully. Returns the model and how many states it would keep without the link.
    """
    rng = np.random.default_rng(seed)
    order = int(rng.integers(2, 9))
    kept = int(rng.integers(1, order))
    A, B, C = (rng.standard_normal(shape) for shape in ((order, order), (order, 1), (1, order)))
    if gap is not None:
        A[kept:, :kept] *= gap
        B[kept:] *= gap
    T = np.linalg.qr(rng.standard_normal((order, order)))[0]
    return Realization(T @ A @ T.T, T @ B, C @ T.T), order if gap is None else kept


@pytest.mark.parametrize(("gap", "first"), [(None, 0), (0.0, 10_000)])
def test_clean_models_are_not_called_fragile(gap: float | None, first: int) -> None:
    """Well separated, all shown or some hidden: at most 2 in 100 flagged, the order right."""
    flagged = 0
    for seed in range(first, first + TRIALS):
        model, kept = rotated(seed, gap)
        found = examine(model)
        assert found.answer.order == kept, f"seed {seed}"
        flagged += bool(found.fragile)
    assert flagged <= 0.02 * TRIALS


def test_planted_fragile_models_are_called_fragile() -> None:
    """Links from 1e-11 to 3e-9, between the rounding of the data and the cutoff: all flagged."""
    missed = []
    for seed in range(TRIALS):
        gap = 10.0 ** np.random.default_rng(seed + 1).uniform(-11, -8.5)
        model, _ = rotated(seed, float(gap))
        if not examine(model).fragile:
            missed.append(seed)
    assert missed == []


def test_a_lost_hidden_part_is_told_by_eigenvectors() -> None:
    """200 states, 40 of them out of reach: the staircase loses them, without a small number."""
    rng = np.random.default_rng(1)
    order, kept = 200, 160
    A, B, C = (rng.standard_normal(shape) for shape in ((order, order), (order, 1), (1, order)))
    A[kept:, :kept] = 0.0
    B[kept:] = 0.0
    T = np.linalg.qr(rng.standard_normal((order, order)))[0]
    found = examine(Realization(T @ A @ T.T, T @ B, C @ T.T), budget=0)
    assert found.floating_order != kept
    assert "eigenvectors show a nearly hidden mode" in " ".join(found.fragile)


def test_stages_that_rounding_widened_are_no_alarm() -> None:
    """Two outputs that see the same states: rounding makes two ranks of one, and no order moves."""
    rng = np.random.default_rng(2)
    T = np.linalg.qr(rng.standard_normal((4, 4)))[0]
    A = np.diag([-1.0, -2.0, -3.0, -4.0])
    C = np.array([[1.0, 1.0, 1.0, 1.0], [0.0, 0.0, 0.0, 0.0]])
    C[1] = C[0] @ A
    found = examine(Realization(T @ A @ T.T, T @ np.ones((4, 1)), C @ T.T))
    assert found.cutoff_ranges["stored"] is None
    assert found.floating_order == found.answer.order == 4
    assert found.fragile == ()
