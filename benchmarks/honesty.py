"""How often a wrong order is flagged, and a right one needlessly, as the planted gap shrinks.

``python -m benchmarks.honesty`` examines seeded models with a known minimal order, prints a table
and writes a dated record.

Six states form a chain from the input. One link of it, drawn anew for each model, has the strength
of the gap; the others are of size one. Two more states are not reached at all. The order is 6,
however weak the link; a floating path must one day take the gap for zero, and the question is
whether that is said.
"""

from __future__ import annotations

import os
import sys

if not __package__:
    # As a script this directory would come first, and numbers.py in it hides a standard module.
    os.chdir(os.path.dirname(os.path.dirname(os.path.abspath(__file__))))
    os.execv(sys.executable, [sys.executable, "-m", "benchmarks.honesty", *sys.argv[1:]])

from dataclasses import dataclass
from fractions import Fraction
from typing import Any, Final

import numpy as np

from benchmarks.measure import ROOT, save, table
from realize import Examination, Realization, examine

SEED: Final = 20240301
MODELS: Final = 30
CHAIN, UNREACHED = 6, 2
GAPS: Final = (2, 4, 6, 8, 9, 10, 12, 14)
"""Powers of ten; as decimals beside numbers of size one, doubles hold all of them."""

DATA: Final = ("rational", "decimal", "rotated")
"""What the examination is given: the model in fractions; its decimals in doubles; or the model in
orthogonal coordinates computed in doubles, which no reading turns back into the planted one."""


def planted(rng: np.random.Generator, gap: Fraction) -> tuple[np.ndarray, ...]:
    """Return A, B, C of Fractions: short decimals, integer combinations of them, and the gap."""
    order = CHAIN + UNREACHED
    A = _tenths(rng, (order, order))
    A[np.tril_indices(order, -2)] = Fraction(0)
    A[CHAIN:, :CHAIN] = Fraction(0)
    weak = int(rng.integers(1, CHAIN))
    A[weak, weak - 1] = gap
    B, C = np.full((order, 1), Fraction(0)), _tenths(rng, (1, order))
    B[0, 0] = Fraction(1)
    for _ in range(order):
        i, j = rng.choice(order, 2, replace=False)
        A[i] += A[j]
        A[:, j] -= A[:, i]
        B[i] += B[j]
        C[:, j] -= C[:, i]
    return A, B, C


def _tenths(rng: np.random.Generator, shape: tuple[int, int]) -> np.ndarray:
    """Return fractions from 0.5 to 2.0 in size, of both signs."""
    numbers = rng.integers(5, 21, shape) * rng.choice([-1, 1], shape)
    result = np.empty(shape, dtype=object)
    result[:] = [[Fraction(value, 10) for value in row] for row in numbers.tolist()]
    return result


def model(data: str, rng: np.random.Generator, gap: Fraction) -> Realization:
    A, B, C = planted(rng, gap)
    if data == "rational":
        return Realization(A, B, C)
    floats = [matrix.astype(float) for matrix in (A, B, C)]
    if data == "rotated":
        Q = np.linalg.qr(rng.standard_normal(A.shape))[0]
        floats = [Q.T @ floats[0] @ Q, Q.T @ floats[1], floats[2] @ Q]
    return Realization(*floats)


def is_flagged(examination: Examination) -> bool:
    """Whether the examination speaks against the order of the floating path.

    It does when no reading has that order, and when the reading that the answer rests on has no
    range of cutoffs, or one that leaves out the cutoff used.
    """
    if not examination.paths_agree:
        return True
    basis = examination.answer.basis
    if basis not in examination.cutoff_ranges:
        return False
    span, cutoff = examination.cutoff_ranges[basis], examination.decisions[0].cutoff
    return span is None or not span[0] <= cutoff < span[1]


@dataclass(kw_only=True, slots=True)
class Score:
    """Counts over the models of one kind of data and one gap."""

    data: str
    gap: str
    models: int = 0
    wrong: int = 0
    wrong_flagged: int = 0
    right_flagged: int = 0
    answer_right: int = 0

    def add(self, examination: Examination) -> None:
        """Count one examination."""
        flagged, wrong = is_flagged(examination), examination.floating_order != CHAIN
        self.models += 1
        self.wrong += wrong
        self.wrong_flagged += wrong and flagged
        self.right_flagged += flagged and not wrong
        self.answer_right += examination.answer.order == CHAIN

    def row(self) -> tuple[str, ...]:
        """Return the counts as text."""
        return (
            self.data,
            self.gap,
            str(self.wrong),
            str(self.wrong_flagged),
            str(self.models - self.wrong),
            str(self.right_flagged),
            f"{self.answer_right} of {self.models}",
        )


def scores() -> list[Score]:
    found = []
    for data in DATA:
        for power in GAPS:
            score = Score(data=data, gap=f"1e-{power:02}")
            rng = np.random.default_rng([SEED, power])
            for _ in range(MODELS):
                score.add(examine(model(data, rng, Fraction(1, 10**power))))
            found.append(score)
    return found


def main() -> int:
    found = scores()
    header = ("data", "gap", "wrong", "flagged", "right", "flagged", "answer right")
    print(table(header, [score.row() for score in found]))
    target = save("honesty", {"seed": SEED, "scores": [_plain(score) for score in found]})
    print(f"\nwritten to {target.relative_to(ROOT)}")
    return 0


def _plain(score: Score) -> dict[str, Any]:
    return {name: getattr(score, name) for name in Score.__slots__}


if __name__ == "__main__":
    sys.exit(main())
