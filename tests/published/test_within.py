"""Uncertainties of published models: the answer must agree with what is known of each."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest

from realize import Realization, Uncertainty, examine

F = Fraction

#: Gao and Neumann 1993, "A global minimum search algorithm for estimating the distance to
#: uncontrollability" (model and 0.0392 from memory; the digits recomputed: the distance in the
#: 2-norm, complex changes allowed, with a certified lower bound).
GAO_NEUMANN = Realization(
    [["1", "1", "1"], ["1/10", "3", "5"], ["0", "-1", "-1"]],
    ["1", "1/10", "0"],
    np.eye(3, dtype=int),
)
DISTANCE = 0.0392384268709


@pytest.mark.parametrize("share", [0.9, 0.999])
def test_no_model_nearer_than_the_distance(share: float) -> None:
    """Radii whose matrix has a norm below the distance leave every model controllable."""
    norm = np.linalg.norm(np.ones((3, 4)), 2)
    radius = share * DISTANCE / norm
    found = examine(GAO_NEUMANN, uncertainty=Uncertainty(absolute={"A": radius, "B": radius}))
    assert found.within_uncertainty != "not minimal"
    if share < 0.95:
        assert found.within_uncertainty == "minimal"


def test_a_witness_is_as_far_as_the_distance() -> None:
    """Whatever model is found, its change has no smaller 2-norm than the distance."""
    found = examine(GAO_NEUMANN, uncertainty=Uncertainty(absolute={"A": "1/10", "B": "1/10"}))
    assert found.within_uncertainty == "not minimal"
    assert found.witness is not None
    assert str(found.hidden_modes[0].part) == "uncontrollable, observable"
    change = np.hstack(
        [
            (found.witness.A - GAO_NEUMANN.A).astype(float),
            (found.witness.B - GAO_NEUMANN.B).astype(float),
        ]
    )
    assert np.linalg.norm(change, 2) >= DISTANCE


@pytest.mark.parametrize(
    ("relative", "word"), [("33/100", "minimal"), ("1/3", "not minimal"), ("2/5", "not minimal")]
)
def test_halving_lags(relative: str, word: str) -> None:
    """Paige 1981: poles 1, 1/2, ..., 2^-9 (model from memory; the threshold is ours).

    Two neighbours can be equal when p (1 - r) = (p / 2) (1 + r), so at r = 1/3.
    """
    A = np.full((10, 10), F(0), dtype=object)
    for k in range(10):
        A[k, k] = F(1, 2**k)
    found = examine(
        Realization(A, [1] * 10, [1] * 10), uncertainty=Uncertainty(relative={"A": relative})
    )
    assert found.within_uncertainty == word


@pytest.mark.parametrize(("relative", "word"), [("1/250", "minimal"), ("1/150", "not minimal")])
def test_a_constant_resistance_network_almost(relative: str, word: str) -> None:
    """(R1 in series with L) beside (R2 in series with C): a mode is lost where R1 R2 = L / C.

    Kalman 1963 and Chen 1999 (from memory). With R1 = R2 = L = 1 and C = 100/101 the poles are 1
    and 101/100 in size, so 1/201 of each is just enough.
    """
    model = Realization([[-1, 0], [0, "-101/100"]], [1, "101/100"], [1, -1], [[1]])
    found = examine(model, uncertainty=Uncertainty(relative={"A": relative}))
    assert found.within_uncertainty == word
    if word == "not minimal":
        assert found.answer.order == 1
