"""Hidden modes within rounding that no staircase shows, and that eigenvectors do."""

from __future__ import annotations

import warnings
from fractions import Fraction

import numpy as np
import pytest

import realize
from realize import Realization, examine
from realize.testing import families, problem

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")


def dense(order: int, hidden: int, *, side: str = "input", seed: int = 0) -> Realization:
    """A dense symmetric A with one input that leaves some modes out, one of them growing."""
    rng = np.random.default_rng(seed)
    values = -rng.uniform(0.1, 3.0, order)
    values[0] = 0.3
    b = rng.standard_normal((order, 1))
    b[:hidden] = 0.0
    Q = np.linalg.qr(rng.standard_normal((order, order)))[0]
    model = Realization(Q @ np.diag(values) @ Q.T, Q @ b, rng.standard_normal((1, order)) @ Q.T)
    return model if side == "input" else model.dual()


@pytest.mark.parametrize("side", ["input", "output"])
def test_a_large_dense_model_shows_its_unstable_mode(side: str) -> None:
    """The staircase of 100 states in doubles shows full order; the answer is not taken in by it."""
    found = examine(dense(100, 10, side=side))
    assert found.floating_order == 100
    assert (found.answer.order, found.answer.basis) == (90, "nearest")
    assert found.nearest is not None
    assert found.nearest.relative_distance < 1e-14
    growing = [mode.value.real for mode in found.hidden_modes if mode.stability == "unstable"]
    assert growing == pytest.approx([0.3])
    assert "no" in (found.stabilizable, found.detectable)
    assert found.status == 4
    assert "the floating path has another order" in found.fragile


def test_the_witness_has_the_modes_exactly() -> None:
    """In the user's coordinates, as near as was said, and of that order by the exact path."""
    model = dense(30, 4, seed=3)
    found = examine(model)
    assert found.nearest is not None
    assert found.answer.order == 26
    witness = found.nearest.witness
    assert realize.exact.minimal(witness).order == 26
    stored = model.read("stored")
    change = np.hstack([witness.A - stored.A, witness.B - stored.B]).astype(float)
    size = np.linalg.norm(np.hstack([model.A, model.B]).astype(float))
    assert np.linalg.norm(change) / size < 1e-14


@pytest.mark.parametrize("seed", range(4))
def test_links_that_are_small_but_there_are_kept(seed: int) -> None:
    """A weak cascade that is not cut keeps its order; one that is cut loses what is cut off."""
    for difficulty in (4, 7, 9):
        asked = problem("weak_cascade", difficulty=difficulty, seed=seed)
        assert examine(asked.model).answer.order == asked.order


def test_small_entries_are_not_lost_in_a_norm() -> None:
    """In units far apart a change that is nothing beside A may be all of an entry."""
    for seed in range(4):
        asked = problem("stiff_scales", difficulty=6, seed=seed)
        found = examine(asked.model)
        assert found.answer.order == asked.order


def test_clean_models_have_nothing_of_the_kind() -> None:
    """No trivial problem of any family is given an order that it does not have."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", realize.HiddenInstabilityWarning)
        for family in families():
            for seed in range(3):
                asked = problem(family.name, difficulty=0, seed=seed)
                assert examine(asked.model).answer.order == asked.order, family.name


def test_rational_models_are_what_they_are() -> None:
    """Nothing near is put in the place of a model whose entries are exact."""
    rows = [[-1, 0], [0, Fraction(-1) - Fraction(1, 10**15)]]
    found = examine(Realization(rows, [1, 1], [1, 1]))
    assert (found.answer.order, found.answer.basis) == (2, "given")
