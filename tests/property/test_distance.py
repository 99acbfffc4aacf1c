"""Laws of the distance to uncontrollability, and an independent search to hold it against."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import minimize

from realize import Realization, distance_to_uncontrollability

Array = np.ndarray


def model_of(A: Array, B: Array) -> Realization:
    return Realization(A, B, np.zeros((1, len(A))))


def draw(rng: np.random.Generator) -> tuple[Array, Array]:
    n, m = int(rng.integers(2, 8)), int(rng.integers(1, 4))
    A = rng.standard_normal((n, n))
    if rng.integers(2):
        A = np.triu(A, -1) * rng.choice([1.0, 8.0])
    return A, rng.standard_normal((n, m)) * rng.choice([1.0, 0.01])


def searched(A: Array, B: Array) -> float:
    """The least singular value found on a dense grid, improved from the ten best points."""
    n = len(A)

    def sigma(point: Array) -> float:
        M = np.hstack([A - (point[0] + 1j * point[1]) * np.eye(n), B])
        return float(np.linalg.svd(M, compute_uv=False)[-1])

    reach = np.linalg.norm(A, 2)
    grid = [(x, y) for x in np.linspace(-reach, reach, 41) for y in np.linspace(0, reach, 21)]
    grid += [(z.real, abs(z.imag)) for z in np.linalg.eigvals(A)]
    grid.sort(key=lambda point: sigma(np.array(point)))
    return min(
        float(
            minimize(
                sigma,
                start,
                method="Nelder-Mead",
                options={"xatol": 1e-10, "fatol": 1e-14, "maxiter": 400},
            ).fun
        )
        for start in grid[:6]
    )


@pytest.mark.parametrize("seed", range(12))
def test_no_search_gets_below(seed: int) -> None:
    """A dense grid with local minimisation finds nothing below lower, and gets down to upper."""
    A, B = draw(np.random.default_rng(seed))
    found = distance_to_uncontrollability(model_of(A, B), rtol=0.02)
    best = searched(A, B)
    assert found.lower <= best * (1 + 1e-9)
    assert best >= 0.98 * found.upper * (1 - 1e-9)
    assert found.upper <= best / 0.98 * (1 + 1e-9)


@pytest.mark.parametrize("seed", range(6))
def test_orthogonal_coordinates_and_shifts(seed: int) -> None:
    """Orthogonal changes of state and input coordinates and A + aI leave the distance alone."""
    rng = np.random.default_rng(seed)
    A, B = draw(rng)
    Q, P = (np.linalg.qr(rng.standard_normal((k, k)))[0] for k in B.shape)
    first = distance_to_uncontrollability(model_of(A, B), rtol=0.05)
    moved = Q @ A @ Q.T + 1.5 * np.eye(len(A))
    second = distance_to_uncontrollability(model_of(moved, Q @ B @ P), rtol=0.05)
    assert first.lower <= second.upper * (1 + 1e-9)
    assert second.lower <= first.upper * (1 + 1e-9)


@pytest.mark.parametrize("seed", range(6))
def test_more_inputs_are_never_nearer(seed: int) -> None:
    """A column added to B cannot bring an uncontrollable model nearer."""
    rng = np.random.default_rng(seed)
    A, B = draw(rng)
    wider = np.hstack([B, rng.standard_normal((len(A), 1))])
    few, many = (distance_to_uncontrollability(model_of(A, M), rtol=0.05) for M in (B, wider))
    assert few.lower <= many.upper * (1 + 1e-12)
