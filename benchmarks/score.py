"""How many problems with known answers the floating path solves, and plain numpy and scipy.

``python -m benchmarks.score`` scores four routines on every family of problems, difficulties 0 to
9, seeds 0 to 9; then examines every problem and counts the wrong orders that nothing was said
about, and the false alarms on trivial problems of other seeds. It prints tables and writes a dated
record.
"""

from __future__ import annotations

import os
import sys

if not __package__:
    # As a script this directory would come first, and numbers.py in it hides a standard module.
    os.chdir(os.path.dirname(os.path.dirname(os.path.abspath(__file__))))
    os.execv(sys.executable, [sys.executable, "-m", "benchmarks.score", *sys.argv[1:]])

from collections.abc import Callable
from typing import Any, Final

import numpy as np
import scipy.signal

from benchmarks.measure import ROOT, save, table
from realize import Realization, examine, floating
from realize.testing import families, score

CLEAN_SEEDS: Final = range(100, 150)
CLOSE: Final = 1e-6
"""Relative distance within which a pole and a zero are taken for one."""


def floating_order(A: Any, B: Any, C: Any, D: Any) -> int:
    """The floating path at its default: the order."""
    return floating.minimal(Realization(A, B, C, D)).order


def floating_model(A: Any, B: Any, C: Any, D: Any) -> Any:
    """The floating path at its default: the model, which must also have the right response."""
    return floating.minimal(Realization(A, B, C, D)).model.matrices()


def numpy_ranks(A: Any, B: Any, C: Any, D: Any) -> int:
    """The rank of the observability matrix times the controllability matrix, at numpy's cutoff."""
    powers = [np.linalg.matrix_power(A, k) for k in range(len(A))]
    controllability = np.hstack([power @ B for power in powers])
    observability = np.vstack([C @ power for power in powers])
    return int(np.linalg.matrix_rank(observability @ controllability))


def scipy_roots(A: Any, B: Any, C: Any, D: Any) -> Any:
    """To zeros and poles with scipy.signal, without those that match, and back."""
    if B.shape[1] != 1 or C.shape[0] != 1:
        raise NotImplementedError("one input and one output only")
    zeros, poles, gain = scipy.signal.ss2zpk(A, B, C, D)
    kept = list(poles)
    left = []
    for zero in zeros:
        near = min(kept, key=lambda pole: abs(pole - zero), default=None)
        if near is not None and abs(near - zero) <= CLOSE * max(abs(near), abs(zero)):
            kept.remove(near)
        else:
            left.append(zero)
    return scipy.signal.zpk2ss(left, kept, gain)


ROUTINES: Final[dict[str, Callable[..., Any]]] = {
    "floating path, order": floating_order,
    "floating path, model": floating_model,
    "numpy ranks": numpy_ranks,
    "scipy roots": scipy_roots,
}


def flags() -> dict[str, dict[str, int]]:
    """Examine every problem; count wrong orders, those not flagged, and right ones flagged."""
    found = {}
    for family in families():
        counts = dict.fromkeys(
            ("problems", "wrong", "unflagged", "answer_wrong", "and_unflagged", "clean", "alarms"),
            0,
        )
        for problem in family.problems():
            examination = examine(problem.model)
            wrong = examination.floating_order != problem.order
            counts["problems"] += 1
            counts["wrong"] += wrong
            counts["unflagged"] += wrong and not examination.fragile
            wrong = examination.answer.order != problem.order
            counts["answer_wrong"] += wrong
            counts["and_unflagged"] += wrong and not examination.fragile
        for problem in family.problems(difficulties=[0], seeds=CLEAN_SEEDS):
            counts["clean"] += 1
            counts["alarms"] += bool(examine(problem.model).fragile)
        found[family.name] = counts
    return found


def main() -> int:
    cards = {name: score(routine, name=name) for name, routine in ROUTINES.items()}
    for card in cards.values():
        print(f"{card}\n")
    names = [family.name for family in families()]
    rows = [[name, *(str(card.count("right", name)) for card in cards.values())] for name in names]
    rows.append(["all", *(str(card.right) for card in cards.values())])
    print(table(("right of 100", *cards), rows))
    counts = flags()
    columns = list(next(iter(counts.values())))
    rows = [[name, *(str(counts[name][column]) for column in columns)] for name in names]
    rows.append(["all", *(str(sum(each[c] for each in counts.values())) for c in columns)])
    print()
    print(table(("examined", *columns), rows))
    content = {
        "clean_seeds": [CLEAN_SEEDS.start, CLEAN_SEEDS.stop],
        "right_by_difficulty": {
            name: {
                family: [card.count("right", family, d) for d in card.difficulties]
                for family in card.families
            }
            for name, card in cards.items()
        },
        "counts": {
            name: {"right": card.right, "wrong": card.wrong, "crashed": card.crashed}
            for name, card in cards.items()
        },
        "examined": counts,
    }
    print(f"\nwritten to {save('score', content).relative_to(ROOT)}")
    return 0


if __name__ == "__main__":
    sys.exit(main())
