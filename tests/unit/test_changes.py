"""What a floating reduction changes: backward error and frequency response."""

from __future__ import annotations

import math

import numpy as np
import pytest

from realize import Realization, exact, floating


def weakly_hidden(size: float, period: float | None = None) -> Realization:
    """Two modes, the second reached with a gain of this size only.

    Scaling shares the gain between B and C, so a staircase sees its square root.
    """
    poles = [-1.0, -2.0] if period is None else [0.5, 0.25]
    return Realization(np.diag(poles), [1.0, size], [1.0, 1.0], sampling_period=period)


def test_nothing_removed_changes_nothing() -> None:
    """A minimal model has backward error 0 and a response that moves by rounding at most."""
    reduction = floating.minimal(weakly_hidden(1.0))
    assert reduction.backward_error == 0.0
    assert reduction.response_change is not None
    assert reduction.response_change.relative < 1e-14


def test_the_exact_path_changes_nothing_and_says_none() -> None:
    """The records are the floating path's; an exact reduction is exact."""
    reduction = exact.minimal(weakly_hidden(0.0).read("stored"))
    assert reduction.order == 1
    assert reduction.backward_error is None
    assert reduction.response_change is None


@pytest.mark.parametrize("size", [1e-9, 1e-7, 1e-5])
def test_the_backward_error_is_the_entry_dropped(size: float) -> None:
    """Dropping one entry of B is a change of that size, and no nearer model is needed."""
    model = weakly_hidden(size)
    reduction = floating.minimal(model, tolerance=10 * math.sqrt(size))
    assert reduction.order == 1
    norm = math.sqrt(sum(float((M**2).sum()) for M in model.matrices()[:3]))
    assert reduction.backward_error is not None
    assert reduction.backward_error <= size / norm * (1 + 1e-6)
    assert reduction.backward_error >= size / norm / 10


@pytest.mark.parametrize("size", [1e-9, 1e-7, 1e-5])
def test_the_response_change_is_that_of_the_mode_dropped(size: float) -> None:
    """The dropped term size / (s + 2) is size / 2 at most; the kept mode moves by as much."""
    reduction = floating.minimal(weakly_hidden(size), tolerance=10 * math.sqrt(size))
    change = reduction.response_change
    assert change is not None
    assert size / 10 < change.size < 2 * size
    assert change.relative == pytest.approx(change.size / (1 + size / 2), rel=1e-3)


def test_a_resonance_between_grid_points_is_found() -> None:
    """A dropped pair of damping 1e-4 shows at its own frequency, height 1 / (2 z w) times it."""
    w, z, size = 3.7, 1e-4, 1e-12
    A = np.array([[-1.0, 0, 0], [0, 0, 1.0], [0, -w * w, -2 * z * w]])
    reduction = floating.minimal(Realization(A, [1.0, 0, size], [1.0, 1.0, 0]), tolerance=1e-9)
    assert reduction.order == 1
    change = reduction.response_change
    assert change is not None
    assert change.frequency == pytest.approx(w, rel=1e-3)
    assert change.size == pytest.approx(size / (2 * z * w * w), rel=1e-2)


def test_discrete_frequencies_are_in_radians_per_unit_of_time() -> None:
    """A dropped mode at z = -0.9 is largest at the Nyquist frequency, pi over the period."""
    model = Realization(np.diag([0.5, -0.9]), [1.0, 1e-11], [1.0, 1.0], sampling_period=0.1)
    reduction = floating.minimal(model)
    assert reduction.order == 1
    change = reduction.response_change
    assert change is not None
    assert change.frequency == pytest.approx(math.pi / 0.1, rel=1e-4)
    assert change.size == pytest.approx(1e-11 / 0.1, rel=0.2)


def test_a_model_without_channels_or_minimal_part_has_an_answer() -> None:
    """No inputs, no outputs, nothing that connects them: the change is 0."""
    for B, C in ((np.zeros((2, 0)), np.eye(2)), (np.eye(2), np.zeros((0, 2)))):
        reduction = floating.minimal(Realization(-np.eye(2), B, C, np.zeros((len(C), B.shape[1]))))
        assert reduction.response_change is not None
        assert reduction.response_change.size == 0.0
    reduction = floating.minimal(Realization([[-1.0]], [0.0], [1.0], [3.0]))
    assert reduction.order == 0
    assert reduction.response_change is not None
    assert reduction.response_change.size == 0.0
    assert reduction.backward_error == 0.0
