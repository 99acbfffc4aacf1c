"""The distance to uncontrollability: how fast, and whether anything ever lies outside the bounds.

``python -m benchmarks.nearness`` measures the numbers to reach, prints a table and writes a dated
record; ``python -m benchmarks.nearness models`` draws 1,000 random models and holds the bounds
against a dense grid with local minimisation, and ``python -m benchmarks.nearness models 100`` does
so for the first 100. The exit status is 1 when a number is not reached or a value lies outside.
"""

from __future__ import annotations

import os
import sys

if not __package__:
    # As a script this directory would come first, and numbers.py in it hides a standard module.
    os.chdir(os.path.dirname(os.path.dirname(os.path.abspath(__file__))))
    os.execv(sys.executable, [sys.executable, "-m", "benchmarks.nearness", *sys.argv[1:]])

if os.environ.setdefault("OPENBLAS_NUM_THREADS", "1") != "1":
    sys.exit("OPENBLAS_NUM_THREADS is set to something else than 1; the ratios need one thread")

import math
import statistics
import time
from dataclasses import asdict, dataclass, field
from fractions import Fraction
from typing import Any, Final

import numpy as np
from scipy.optimize import minimize

from benchmarks.measure import ROOT, interleaved, save, table
from realize import Distance, Realization, distance_to_uncontrollability
from realize.nearness.pencil import Pencil
from realize.nearness.search import Search

Array = np.ndarray[Any, Any]

SEED: Final = 20240401
MODELS: Final = 1000
DRAWS: Final = 5
RANDOM: Final = ((40, 8, 200.0), (100, 8, 350.0), (40, 1, 1500.0))
"""States, inputs, singular value decompositions allowed."""


@dataclass(frozen=True, kw_only=True, slots=True)
class Number:
    """One number: what, how much was asked for at most (None: only told), and what came out."""

    what: str
    asked: float | None
    measured: float
    unit: str
    facts: dict[str, Any] = field(default_factory=dict)

    @property
    def reached(self) -> bool:
        """Whether it is as small as was asked for."""
        return self.asked is None or self.measured <= self.asked


def model_of(A: Any, B: Any) -> Realization:
    return Realization(A, B, [[0] * len(A)])


# ---------------------------------------------------------------------------------------------
# The models
# ---------------------------------------------------------------------------------------------


def three_states() -> Realization:
    """The classical three-state example (Gao and Neumann 1993)."""
    return model_of([[1, 1, 1], ["0.1", 3, 5], [0, -1, -1]], [[1], ["0.1"], [0]])


def wilkinson_companion(size: int) -> Realization:
    """The companion form of (s - 1) ... (s - n), coefficients in the last row."""
    polynomial = [1]
    for root in range(1, size + 1):
        polynomial = [
            high - root * low for high, low in zip([*polynomial, 0], [0, *polynomial], strict=True)
        ]
    A = [[int(j == i + 1) for j in range(size)] for i in range(size)]
    A[-1] = [-value for value in reversed(polynomial[1:])]
    return model_of(A, [[int(i == size - 1)] for i in range(size)])


def weak_chain(size: int) -> Realization:
    """A perfect staircase of ones that lies within 2^(1 - n) of an uncontrollable pair."""
    A = [[0] * size for _ in range(size)]
    for j in range(size - 1):
        for i in range(j + 1):
            A[i][j] = -1
        A[j + 1][j] = 1
    A[0][-1], A[1][-1] = 1, -1
    return model_of(A, [[int(i == 0)] for i in range(size)])


def dense(states: int, inputs: int, seed: int) -> Realization:
    rng = np.random.default_rng([SEED, states, inputs, seed])
    A, B = rng.standard_normal((states, states)), rng.standard_normal((states, inputs))
    return model_of(A, B)


# ---------------------------------------------------------------------------------------------
# How fast
# ---------------------------------------------------------------------------------------------


def evaluations() -> Number:
    """Singular values evaluated, or tested against a level, for a bracket of 1e-6."""
    model = three_states()
    search = Search(Pencil(model.A, model.B), 1e-6, math.inf)
    search.start()
    search.run()
    return Number(
        what="three states, bracket of 1e-6",
        asked=500,
        measured=search.pencil.evaluations,
        unit="evaluations",
        facts={"room": (search.upper - search.lower) / search.upper},
    )


def random_models() -> list[Number]:
    """Time of the whole call over that of one decomposition at one complex point."""
    numbers = []
    for states, inputs, asked in RANDOM:
        plain, full = [], []
        for seed in range(DRAWS):
            model = dense(states, inputs, seed)
            assert distance_to_uncontrollability(model).proved
            M = np.hstack([model.A - (0.3 + 0.4j) * np.eye(states), model.B])
            seconds = interleaved(
                {
                    "distance": lambda model=model: distance_to_uncontrollability(model),
                    "values": lambda M=M: np.linalg.svd(M, compute_uv=False),
                    "vectors": lambda M=M: np.linalg.svd(M),
                },
                rounds=3,
            )
            medians = {name: statistics.median(values) for name, values in seconds.items()}
            plain.append(medians["distance"] / medians["values"])
            full.append(medians["distance"] / medians["vectors"])
        numbers.append(
            Number(
                what=f"random, {states} states, {inputs} inputs, to 10 %, proved",
                asked=asked,
                measured=statistics.median(plain),
                unit="decompositions",
                facts={
                    "each": plain,
                    "in decompositions with vectors": full,
                    "worst": max(plain),
                },
            )
        )
    return numbers


def one(what: str, model: Realization, rtol: float, asked: float | None) -> Number:
    """Seconds by the clock on the wall for one hard model."""
    began, busy = time.perf_counter(), time.process_time()
    found = distance_to_uncontrollability(model, rtol=rtol, budget=None)
    took, busy = time.perf_counter() - began, time.process_time() - busy
    assert found.proved
    return Number(
        what=what,
        asked=asked,
        measured=took,
        unit="s",
        facts={"lower": found.lower, "upper": found.upper, "processor seconds": busy},
    )


def hard_models() -> list[Number]:
    return [
        one(
            "companion form of (s-1)...(s-10), to 10 %, proved", wilkinson_companion(10), 0.1, None
        ),
        one("weak chain, 40 states, factor of 2, proved", weak_chain(40), 0.5, 60.0),
        one("weak chain, 60 states, factor of 2, proved", weak_chain(60), 0.5, 300.0),
    ]


def numbers() -> int:
    measured = [evaluations(), *random_models(), *hard_models()]
    rows = [
        (
            number.what,
            f"{number.measured:.3g} {number.unit}",
            "-" if number.asked is None else f"{number.asked:.3g}",
            "" if number.reached else "not reached",
        )
        for number in measured
    ]
    print(table(("number", "measured", "asked at most", ""), rows))
    target = save("nearness", {"numbers": [asdict(n) | {"reached": n.reached} for n in measured]})
    print(f"\nwritten to {target.relative_to(ROOT)}")
    return 0 if all(number.reached for number in measured) else 1


# ---------------------------------------------------------------------------------------------
# Whether anything lies outside
# ---------------------------------------------------------------------------------------------


def drawn(index: int) -> tuple[Array, Array]:
    """Return the model of that number: dense, graded, triangular or nearly uncontrollable."""
    rng = np.random.default_rng([SEED, index])
    n, m = int(rng.integers(1, 13)), int(rng.integers(1, 4))
    A, B = rng.standard_normal((n, n)), rng.standard_normal((n, m))
    kind = index % 4
    if kind == 1:
        scale = 10.0 ** rng.uniform(-2, 2, n)
        A, B = A * scale[:, None] / scale, B * scale[:, None]
    elif kind == 2:
        A = np.triu(A, -1)
        B[1:] *= 0.1
    elif kind == 3 and n > 1:
        A[n // 2 :, : n // 2] *= 1e-3
        B[n // 2 :] *= 1e-3
    return A, B


def lowest(A: Array, B: Array) -> float:
    """Return the least value found by a dense grid and local minimisation, in doubles."""
    n = len(A)
    field_of_values = np.linalg.eigvalsh((A + A.T) / 2)
    top = float(np.abs(np.linalg.eigvals((A - A.T) / 2)).max())
    xs = np.linspace(field_of_values[0], field_of_values[-1], 80)
    ys = np.linspace(0.0, top, 40)
    points = (xs[None, :] + 1j * ys[:, None]).ravel()
    points = np.concatenate([points, np.linalg.eigvals(A)])
    stack = np.broadcast_to(np.hstack([A, B]).astype(complex), (len(points), n, n + B.shape[1]))
    stack = stack.copy()
    stack[:, range(n), range(n)] -= points[:, None]
    values = np.linalg.svd(stack, compute_uv=False)[:, -1]

    def sigma(point: Array) -> float:
        M = np.hstack([A - (point[0] + 1j * point[1]) * np.eye(n), B])
        return float(np.linalg.svd(M, compute_uv=False)[-1])

    best = math.inf
    for index in np.argsort(values)[:8]:
        start = np.array([points[index].real, points[index].imag])
        options = {"xatol": 1e-12, "fatol": 1e-16, "maxiter": 600}
        best = min(best, float(minimize(sigma, start, method="Nelder-Mead", options=options).fun))
    return best


def outside(found: Distance, value: float, size: float) -> str | None:
    """Return what is wrong with the bounds beside a value found, None when nothing is."""
    noise = 1e-14 * size
    if value < found.lower - noise:
        return f"found {value!r} below the proved lower bound {found.lower!r}"
    if found.upper < found.lower:
        return f"upper {found.upper!r} below lower {found.lower!r}"
    if found.upper - found.lower > 0.1 * found.upper:
        return f"bounds {found.lower!r}, {found.upper!r} farther apart than asked"
    return None


def models(count: int) -> int:
    wrong, better, seconds = [], 0, 0.0
    for index in range(count):
        A, B = drawn(index)
        began = time.process_time()
        found = distance_to_uncontrollability(model_of(A, B))
        seconds += time.process_time() - began
        value = lowest(A, B)
        better += found.upper <= value * (1 + 1e-9)
        fault = outside(found, value, float(np.linalg.norm(np.hstack([A, B]))))
        pair = found._pair.get()
        if pair is None or pair.square > Fraction(found.upper) ** 2:
            fault = "the exact pair does not prove the upper bound"
        if fault is not None:
            wrong.append({"model": index, "fault": fault})
            print(f"model {index}: {fault}")
    print(
        f"{count} models, {len(wrong)} with a value outside the bounds; the upper bound was the "
        f"least value found for {better}; {1000 * seconds / count:.3g} ms each"
    )
    save(
        "nearness-models",
        {"seed": SEED, "models": count, "wrong": wrong, "upper_least": better, "seconds": seconds},
    )
    return 1 if wrong else 0


if __name__ == "__main__":
    if sys.argv[1:2] == ["models"]:
        sys.exit(models(int(sys.argv[2]) if len(sys.argv) > 2 else MODELS))
    sys.exit(numbers())
