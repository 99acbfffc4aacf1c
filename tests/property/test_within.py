"""Uncertainties whose answer was planted: neither word is ever said wrongly."""

from __future__ import annotations

import itertools
from fractions import Fraction
from typing import Any

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from realize import Realization, Uncertainty, exact, examine
from realize.arithmetic.exact import ExactPath
from realize.forms.kalman import reach_and_see
from realize.within.box import Box
from realize.within.weigh import Within, weigh
from tests.strategies import Planted, generators, planted_mild

F = Fraction

tenths = st.integers(-30, 30).map(lambda k: F(k, 10))
radii = st.integers(0, 40).map(lambda k: F(k, 100))


def order_of(model: Realization) -> int:
    """The minimal order of a rational model, without a warning about what is hidden."""
    return reach_and_see(ExactPath().open(model))[1].dimension


def diagonal(values: list[Fraction]) -> np.ndarray:
    """A diagonal matrix of Fractions."""
    A = np.full((len(values), len(values)), F(0), dtype=object)
    for k, value in enumerate(values):
        A[k, k] = value
    return A


@given(st.lists(st.tuples(tenths, radii), min_size=1, max_size=4))
@settings(max_examples=25)
def test_lags_are_alike_where_their_ranges_meet(lags: list[tuple[Fraction, Fraction]]) -> None:
    """Side by side they are minimal exactly as long as no two ranges of poles share a point."""
    ranges = sorted((pole - radius, pole + radius) for pole, radius in lags)
    apart = all(a[1] < b[0] for a, b in itertools.pairwise(ranges))
    ones = [1] * len(lags)
    model = Realization(diagonal([pole for pole, _ in lags]), ones, ones)
    figures = {"A": diagonal([radius for _, radius in lags]).tolist()}
    found = examine(model, uncertainty=Uncertainty(absolute=figures), budget=20)
    allowed = {"minimal", "open"} if apart else {"not minimal", "open"}
    assert found.within_uncertainty in allowed
    gap = min((b[0] - a[1] for a, b in itertools.pairwise(ranges)), default=F(1))
    if abs(gap) >= F(3, 100):
        assert found.within_uncertainty != "open"


@given(planted_mild(), generators, st.sampled_from([F(1, 1000), F(1, 10**7), F(1, 10**12)]))
@settings(max_examples=12)
def test_a_planted_model_in_the_box_is_never_denied(
    planted: Planted, rng: np.random.Generator, radius: Fraction
) -> None:
    """Every entry moved within its radius: "minimal" would be wrong, and a witness is a witness."""

    def noise(shape: tuple[int, ...]) -> Any:
        steps = rng.integers(-900, 901, shape)
        return np.vectorize(lambda k: F(int(k), 1000) * radius, otypes=[object])(steps)

    A, B, C, D = planted.model.matrices()
    if planted.order == planted.model.order or not A.size:
        return
    moved = [M + noise(M.shape) if M.size else M for M in (A, B, C)]
    model = Realization(*moved, D, sampling_period=planted.model.sampling_period)
    given_box = Uncertainty(absolute=dict.fromkeys("ABC", radius))
    found = examine(model, uncertainty=given_box, budget=3)
    assert found.within_uncertainty != "minimal"
    if found.witness is not None:
        assert Box.of(model, given_box).holds(found.witness)
        assert order_of(found.witness) == found.answer.order < model.order


@given(generators, st.integers(1, 5), st.integers(1, 2), st.sampled_from([0.003, 0.02, 0.1]))
@settings(max_examples=25)
def test_no_sampled_model_contradicts_a_proof(
    rng: np.random.Generator, order: int, inputs: int, share: float
) -> None:
    """Corners and random members of a box that was proved minimal hide nothing, exactly.

    And bounds are in order: what is proved lies below what was reached.
    """
    shapes = (order, order), (order, inputs), (inputs, order)
    model = Realization(*(rng.integers(-20, 21, shape) for shape in shapes))
    box = Box.of(model, Uncertainty(relative=share))
    weighed = weigh(box, 3.0)
    assert weighed.proved <= weighed.reached or weighed.within is Within.NOT_MINIMAL
    if weighed.within is Within.NOT_MINIMAL:
        assert weighed.witness is not None
        assert box.holds(weighed.witness)
        assert order_of(weighed.witness) < order
    if weighed.within is Within.MINIMAL:
        for corner in (True, False) * 8:
            changes = []
            for radius in (box.radii.A, box.radii.B, box.radii.C):
                steps = (
                    rng.choice([-1000, 1000], radius.shape)
                    if corner
                    else rng.integers(-1000, 1001, radius.shape)
                )
                changes.append(radius * np.vectorize(lambda k: F(int(k), 1000))(steps))
            assert exact.minimal(box.moved((changes[0], changes[1], changes[2]))).order == order
