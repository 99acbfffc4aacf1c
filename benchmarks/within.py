"""How many of the three answers under uncertainty are right, wrong and left open.

``python -m benchmarks.within`` weighs 500 seeded models whose answer is known because it was
planted, prints a table and writes a dated record.

A planted factor is the least by which the radii must be multiplied for a model that is not minimal
to lie within them: below 1 the answer is "not minimal", above it is "minimal". Where only a model
within the uncertainty was planted, its distance is an upper bound on the factor; where a bound in
the 2-norm was, a lower one.
"""

from __future__ import annotations

import os
import sys

if not __package__:
    # As a script this directory would come first, and numbers.py in it hides a standard module.
    os.chdir(os.path.dirname(os.path.dirname(os.path.abspath(__file__))))
    os.execv(sys.executable, [sys.executable, "-m", "benchmarks.within", *sys.argv[1:]])

import itertools
import statistics
import time
from collections.abc import Callable
from dataclasses import dataclass, field
from fractions import Fraction
from typing import Any, Final

import numpy as np

from benchmarks.measure import ROOT, save, table
from realize import Realization, Uncertainty, examine

SEED: Final = 20260301
EACH: Final = 50


@dataclass(frozen=True, slots=True)
class Planted:
    """A model, its uncertainty, and whether all models within it are minimal."""

    model: Realization
    uncertainty: Uncertainty
    minimal: bool


def _tenths(
    rng: np.random.Generator, shape: tuple[int, ...], low: int = -20, high: int = 21
) -> Any:
    """Return random multiples of a tenth, none zero."""
    numbers = rng.integers(low, high, shape)
    numbers[numbers == 0] = 7
    result = np.empty(shape, dtype=object)
    result[...] = np.vectorize(lambda k: Fraction(int(k), 10), otypes=[object])(numbers)
    return result


def _factor(rng: np.random.Generator, minimal: bool) -> Fraction:
    """Return a factor at which the answer changes, off 1 by a few to some tens of percent."""
    off = Fraction(int(rng.integers(2, 40)), 100)
    return 1 + off if minimal else 1 - off


def parallel(rng: np.random.Generator, minimal: bool) -> Planted:
    """First-order lags side by side: minimal as long as no two poles can be equal."""
    n = int(rng.integers(2, 9))
    poles = [Fraction(int(k), 10) for k in -np.cumsum(rng.integers(3, 12, n))]
    gaps = [b - a for a, b in zip(poles[1:], poles, strict=False)]
    # Each radius takes half of the narrowest gap, over the factor.
    radius = min(gaps) / (2 * _factor(rng, minimal))
    A = np.diag(np.array(poles, dtype=object))
    A[A == 0] = Fraction(0)
    fixed = {"A": [[radius if i == j else 0 for j in range(n)] for i in range(n)]}
    return Planted(
        Realization(A, _tenths(rng, (n, 1)), _tenths(rng, (1, n))),
        Uncertainty(absolute=fixed, relative={"B": "1/10", "C": "1/10"}),
        minimal,
    )


def oscillators(rng: np.random.Generator, minimal: bool) -> Planted:
    """Damped oscillators side by side: minimal as long as no two can have one polynomial.

    The ranges of damping overlap; those of stiffness do when the planted factor is below 1.
    """
    n = int(rng.integers(2, 5))
    stiff = [Fraction(int(k), 10) for k in 20 + np.cumsum(rng.integers(3, 12, n))]
    damp = [Fraction(int(k), 100) for k in rng.integers(20, 24, n)]
    gap = min(b - a for a, b in itertools.pairwise(stiff))
    radius = gap / (2 * _factor(rng, minimal))
    A, B, C = _zeros(2 * n, 2 * n), _zeros(2 * n, 1), _zeros(1, 2 * n)
    radii = [[0] * (2 * n) for _ in range(2 * n)]
    for k in range(n):
        p, q = 2 * k, 2 * k + 1
        A[p, q], A[q, p], A[q, q] = Fraction(1), -stiff[k], -damp[k]
        B[q, 0], C[0, p] = _tenths(rng, (1,), 5)[0], _tenths(rng, (1,), 5)[0]
        radii[q][p], radii[q][q] = radius, Fraction(1, 20)
    return Planted(Realization(A, B, C), Uncertainty(absolute={"A": radii}), minimal)


def cascade(rng: np.random.Generator, minimal: bool) -> Planted:
    """Sections with a zero each, in series: minimal as long as no zero can meet a later pole.

    Section k: x' = p x + u, y = (p - z) x + u, with p - z an entry of its own. Zeros lie far from
    all poles but for one, which the pole of the section after it nears.
    """
    n = int(rng.integers(2, 7))
    poles = [Fraction(-int(k), 10) for k in 10 * np.arange(1, n + 1) + rng.integers(-2, 3, n)]
    gains = [Fraction(int(k), 10) - 20 for k in rng.integers(0, 9, n)]
    at = int(rng.integers(0, n - 1))
    share = Fraction(int(rng.integers(5, 30)), 100)
    gains[at] = poles[at] - poles[at + 1] - share
    # p - c - q changes sign when the three radii together make up the share.
    radius = share / 3 / _factor(rng, minimal)
    A, B, C = _zeros(n, n), _zeros(n, 1), _zeros(1, n)
    radii = [[0] * n for _ in range(n)]
    for k in range(n):
        B[k, 0], C[0, k] = Fraction(1), gains[k]
        A[k, k], radii[k][k] = poles[k], radius if k in (at, at + 1) else 0
        for before in range(k):
            A[k, before] = gains[before]
            if (k, before) == (at + 1, at):
                radii[k][before] = radius
    return Planted(Realization(A, B, C), Uncertainty(absolute={"A": radii}), minimal)


def chain(rng: np.random.Generator, minimal: bool) -> Planted:
    """Tanks in a row, exchanging both ways: minimal as long as no link can vanish."""
    n = int(rng.integers(3, 11))
    A, B, C = _zeros(n, n), _zeros(n, 1), _zeros(1, n)
    for k in range(n):
        A[k, k] = -_tenths(rng, (1,), 10)[0]
        if k:
            A[k, k - 1], A[k - 1, k] = _tenths(rng, (2,), 3)
    B[0, 0] = C[0, 0] = Fraction(1)
    relative = 1 / _factor(rng, minimal)
    return Planted(Realization(A, B, C), Uncertainty(relative={"A": relative}), minimal)


def hidden(rng: np.random.Generator, count: int, noise: Fraction) -> Planted:
    """A dense model with hidden modes, every entry moved by up to a share of its uncertainty."""
    n, m, p = int(rng.integers(3, 9)), int(rng.integers(1, 3)), int(rng.integers(1, 3))
    A, B, C = _tenths(rng, (n, n)), _tenths(rng, (n, m)), _tenths(rng, (p, n))
    # The last states are not reached; then the coordinates are changed.
    A[n - count :, : n - count] = Fraction(0)
    B[n - count :] = Fraction(0)
    if count == 2:
        A[n - 2 :, n - 2 :] = [[Fraction(-1), Fraction(2)], [Fraction(-2), Fraction(-1)]]
    for _ in range(3 * n):
        i, j = rng.choice(n, 2, replace=False)
        A[i] += A[j]
        A[:, j] -= A[:, i]
        B[i] += B[j]
        C[:, j] -= C[:, i]
    if rng.random() < 0.5:
        A, B, C = A.T.copy(), C.T.copy(), B.T.copy()
    radius = Fraction(int(rng.choice([1, 10, 100])), 1000)
    moved = []
    for matrix in (A, B, C):
        steps = rng.integers(-1000, 1001, matrix.shape)
        change = np.vectorize(lambda k: Fraction(int(k), 1000) * radius * noise, otypes=[object])
        moved.append(matrix + change(steps))
    everywhere = {"A": radius, "B": radius, "C": radius}
    return Planted(Realization(*moved), Uncertainty(absolute=everywhere), minimal=False)


def hidden_mode(rng: np.random.Generator) -> Planted:
    return hidden(rng, 1, Fraction(9, 10))


def hidden_pair(rng: np.random.Generator) -> Planted:
    return hidden(rng, 2, Fraction(9, 10))


def far(rng: np.random.Generator) -> Planted:
    """A dense model whose radii are, in the 2-norm, a share of its distance from the next mode.

    The distance is bounded from below on a grid, between whose points it changes by no more than
    their distance.
    """
    n, m = int(rng.integers(3, 9)), int(rng.integers(1, 3))
    A, B, C = _tenths(rng, (n, n)), _tenths(rng, (n, m)), _tenths(rng, (m, n))
    least = min(
        _least(A.astype(float), B.astype(float)), _least(A.T.astype(float), C.T.astype(float))
    )
    share = Fraction(int(rng.integers(30, 90)), 100)
    weights = [rng.integers(0, 10, matrix.shape) for matrix in (A, B, C)]
    norm = max(
        float(np.linalg.norm(np.hstack([weights[0], weights[1]]), 2)),
        float(np.linalg.norm(np.hstack([weights[0].T, weights[2].T]), 2)),
    )
    unit = Fraction(least) * share / Fraction(norm)
    radii = {
        letter: [[unit * int(k) for k in row] for row in weight]
        for letter, weight in zip("ABC", weights, strict=True)
    }
    return Planted(Realization(A, B, C), Uncertainty(absolute=radii), minimal=True)


def _least(A: np.ndarray, B: np.ndarray) -> float:
    """Return a lower bound on the distance to uncontrollability, from a grid refined near it."""
    reach = float(np.linalg.norm(A, 2))
    side = reach / 8
    x, y = np.arange(-8, 8) + 0.5, np.arange(0, 8) + 0.5
    z = side * (x[:, None] + 1j * y[None, :]).ravel()
    eye = np.eye(*np.hstack([A, B]).shape)
    for _ in range(12):
        M = np.hstack([A, B]) - z[:, None, None] * eye
        bound = np.linalg.svd(M, compute_uv=False)[:, -1] - side / np.sqrt(2)
        if bound.min() > 0.8 * (bound.min() + side * np.sqrt(2)):
            break
        level = (bound + side * np.sqrt(2)).min()
        z = z[bound < level]
        quarter = side / 4 * np.array([-1 - 1j, -1 + 1j, 1 - 1j, 1 + 1j])
        z, side = (z[:, None] + quarter).ravel(), side / 2
    return max(float(bound.min()), 1e-9) * (1 - 1e-9)


def _zeros(rows: int, columns: int) -> Any:
    result = np.empty((rows, columns), dtype=object)
    result[:] = Fraction(0)
    return result


FAMILIES: Final[dict[str, Callable[[np.random.Generator], Planted]]] = {
    "parallel, apart": lambda rng: parallel(rng, True),
    "parallel, meeting": lambda rng: parallel(rng, False),
    "oscillators, apart": lambda rng: oscillators(rng, True),
    "oscillators, meeting": lambda rng: oscillators(rng, False),
    "cascade, apart": lambda rng: cascade(rng, True),
    "cascade, meeting": lambda rng: cascade(rng, False),
    "chain, linked": lambda rng: chain(rng, True),
    "dense, far": far,
    "dense, hidden mode": hidden_mode,
    "dense, hidden pair": hidden_pair,
}


@dataclass(kw_only=True, slots=True)
class Score:
    """Counts over the models of one family."""

    family: str
    minimal: bool = True
    models: int = 0
    right: int = 0
    open: int = 0
    wrong: int = 0
    seconds: list[float] = field(default_factory=list)

    def row(self) -> tuple[str, ...]:
        """Return the counts as text."""
        return (
            self.family,
            "minimal" if self.minimal else "not minimal",
            str(self.models),
            str(self.right),
            str(self.open),
            str(self.wrong),
            f"{statistics.median(self.seconds):.2f}",
            f"{max(self.seconds):.1f}",
        )


def score(family: str, count: int) -> Score:
    """Weigh the models of one family."""
    found = Score(family=family)
    rng = np.random.default_rng([SEED, list(FAMILIES).index(family)])
    for _ in range(count):
        planted = FAMILIES[family](rng)
        began = time.perf_counter()
        examination = examine(planted.model, uncertainty=planted.uncertainty)
        found.seconds.append(time.perf_counter() - began)
        word = str(examination.within_uncertainty)
        found.minimal = planted.minimal
        found.models += 1
        found.open += word == "open"
        found.right += word == ("minimal" if planted.minimal else "not minimal")
    found.wrong = found.models - found.right - found.open
    return found


def main() -> int:
    found = []
    for family in FAMILIES:
        found.append(score(family, EACH))
        print(".", end="", file=sys.stderr, flush=True)
    print(file=sys.stderr)
    header = ("family", "planted", "models", "right", "open", "wrong", "median s", "longest s")
    print(table(header, [each.row() for each in found]))
    models, left = sum(each.models for each in found), sum(each.open for each in found)
    wrong = sum(each.wrong for each in found)
    print(f"\n{models} models: {wrong} wrong, {left} left open ({100 * left / models:.1f} %)")
    plain = [{name: getattr(each, name) for name in Score.__slots__} for each in found]
    target = save("within", {"seed": SEED, "scores": plain})
    print(f"written to {target.relative_to(ROOT)}")
    return 1 if wrong else 0


if __name__ == "__main__":
    sys.exit(main())
