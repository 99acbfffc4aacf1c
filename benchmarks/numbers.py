"""The numbers to reach, each as a ratio of medians taken in one run.

``python -m benchmarks.numbers`` measures all of them, prints a table and writes a dated record;
``python -m benchmarks.numbers import staircase`` measures those two and writes nothing. The exit
status is 1 when a number is not reached.
"""

from __future__ import annotations

import os
import sys

if not __package__:
    # As a script this directory would come first, and numbers.py in it hides a standard module.
    os.chdir(os.path.dirname(os.path.dirname(os.path.abspath(__file__))))
    os.execv(sys.executable, [sys.executable, "-m", "benchmarks.numbers", *sys.argv[1:]])

import argparse
import re
import statistics
import subprocess
import time
import warnings
from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any, Final

import numpy as np
from flint import nmod_mat
from scipy.linalg import lapack

from benchmarks.measure import ROOT, interleaved, ratio, save, table
from realize import HiddenInstabilityWarning, Realization, exact, examine, floating

SEED: Final = 20240229
PRIME: Final = (1 << 62) - 57
"""The largest prime below 2**62: as long as the primes that the exact path works with."""

BITS: Final = 10
STATES, REACHED, VISIBLE = 200, 170, 160


@dataclass(frozen=True, kw_only=True, slots=True)
class Number:
    """One number: what, how much was asked for at most (None: only told), and what came out."""

    what: str
    asked: float | None
    measured: float
    unit: str
    seconds: dict[str, float]
    facts: dict[str, Any] = field(default_factory=dict)

    @property
    def reached(self) -> bool:
        """Whether it is as small as was asked for."""
        return self.asked is None or self.measured <= self.asked


def _medians(seconds: dict[str, list[float]]) -> dict[str, float]:
    return {name: statistics.median(values) for name, values in seconds.items()}


# ---------------------------------------------------------------------------------------------
# Exact minimal of a planted model
# ---------------------------------------------------------------------------------------------


def planted() -> tuple[Realization, dict[str, Any]]:
    """Return a dense integer model with 200 states: 170 are reached, 160 of them seen.

    In the coordinates of its parts the model has entries -1, 0 and 1. Then 4000 elementary
    changes of coordinates, ``x_i + s x_j`` with s = 1 or -1 in place of ``x_i``, are drawn and
    applied exactly, leaving out each one that would push an entry to 2**10 or beyond. Each adds s
    times row j to row i of A and B and takes s times column i from column j of A and C, so it is
    unimodular, and entries stay integers. It goes on until hardly any change fits any more: no
    part is left where it was, and the basis of what is reached has long entries.
    """
    rng = np.random.default_rng(SEED)
    A = rng.integers(-1, 2, (STATES, STATES))
    B = rng.integers(-1, 2, (STATES, 2))
    C = rng.integers(-1, 2, (2, STATES))
    A[REACHED:, :REACHED] = 0
    A[:VISIBLE, VISIBLE:REACHED] = 0
    B[REACHED:] = 0
    C[:, VISIBLE:REACHED] = 0
    applied = 0
    for _ in range(4000):
        i, j = rng.choice(STATES, 2, replace=False)
        sign = int(rng.choice([-1, 1]))
        kept = A[i].copy(), A[:, j].copy(), B[i].copy(), C[:, j].copy()
        A[i] += sign * A[j]
        A[:, j] -= sign * A[:, i]
        B[i] += sign * B[j]
        C[:, j] -= sign * C[:, i]
        changed = (A[i], A[:, j], B[i], C[:, j])
        if max(int(np.abs(part).max()) for part in changed) < 2**BITS:
            applied += 1
        else:
            A[:, j], B[i], C[:, j] = kept[1:]
            A[i] = kept[0]
    largest = max(int(np.abs(M).max()) for M in (A, B, C))
    density = float(np.count_nonzero(A)) / A.size
    facts = {
        "seed": SEED,
        "changes_of_coordinates": applied,
        "largest_entry": largest,
        "density": density,
    }
    if largest.bit_length() > BITS or density < 0.99:
        raise AssertionError(f"the planted model is not what it should be: {facts}")
    return Realization(A, B, C), facts


def exact_minimal() -> list[Number]:
    model, facts = planted()
    entries = np.random.default_rng(SEED).integers(0, PRIME, (2, STATES * STATES)).tolist()
    left, right = (nmod_mat(STATES, STATES, values, PRIME) for values in entries)

    def reduce() -> Any:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", HiddenInstabilityWarning)  # hidden modes grow here
            return exact.minimal(model)

    reduction = reduce()
    if reduction.order != VISIBLE:
        raise AssertionError(f"order {reduction.order} instead of the {VISIBLE} planted")
    facts["longest_entry_bits"] = max(
        max(value.numerator.bit_length(), value.denominator.bit_length())
        for matrix in reduction.model.matrices()
        for value in matrix.ravel()
    )
    seconds = interleaved({"minimal": reduce, "product": lambda: left * right}, rounds=7)
    return [
        Number(
            what="exact minimal, 200 states / modular product",
            asked=200,
            measured=ratio(seconds, "minimal", "product"),
            unit="times",
            seconds=_medians(seconds),
            facts=facts,
        )
    ]


# ---------------------------------------------------------------------------------------------
# The floating path and the examination
# ---------------------------------------------------------------------------------------------


def staircase() -> list[Number]:
    order = 500
    rng = np.random.default_rng(SEED)
    A, b = rng.standard_normal((order, order)), rng.standard_normal((order, 1))
    model = Realization(A, b, rng.standard_normal((1, order)))
    plain = np.asfortranarray(A)
    space = int(lapack.dgehrd_lwork(order)[0])

    def reduce() -> None:
        reduced, tau, _ = lapack.dgehrd(plain, lwork=space)
        lapack.dorghr(reduced, tau, lwork=space)

    seconds = interleaved(
        {"staircase": lambda: floating.staircase(model), "dgehrd and dorghr": reduce}, rounds=15
    )
    return [
        Number(
            what="floating staircase, n = 500 / dgehrd + dorghr",
            asked=1.5,
            measured=ratio(seconds, "staircase", "dgehrd and dorghr"),
            unit="times",
            seconds=_medians(seconds),
            facts={"seed": SEED},
        )
    ]


def three_masses(*, hidden: bool) -> Realization:
    """Return three masses in a row on springs and dampers: force on the first, the second seen.

    The numbers are decimals that doubles cannot hold. Hidden: nothing acts on the third mass any
    more, so that its two modes are seen and not reached; they decay.
    """
    A = np.zeros((6, 6))
    A[:3, 3:] = np.eye(3)
    A[3:, :3] = [[-4.1, 1.7, 0.0], [1.3, -3.7, 2.1], [0.0, 1.9, -2.3]]
    A[3:, 3:] = [[-0.7, 0.2, 0.0], [0.1, -0.6, 0.3], [0.0, 0.2, -0.9]]
    b = np.array([[0.0], [0.0], [0.0], [0.9], [0.0], [0.0]])
    c = np.array([[0.0, 1.1, 0.0, 0.0, 0.0, 0.0]])
    if hidden:
        A[5] = [0.0, 0.0, -2.3, 0.0, 0.0, -0.9]
    return Realization(A, b, c)


def small() -> list[Number]:
    """Small models: what a call costs beyond arithmetic."""
    whole, partly = three_masses(hidden=False), three_masses(hidden=True)
    orders = floating.minimal(whole).order, floating.minimal(partly).order
    if orders != (6, 4):
        raise AssertionError(f"orders {orders} instead of 6 and 4")
    blocks = [whole.B]
    for _ in range(5):
        blocks.append(whole.A @ blocks[-1])
    ready = np.hstack(blocks)
    seconds = interleaved(
        {
            "matrix_rank": lambda: np.linalg.matrix_rank(ready),
            "minimal": lambda: floating.minimal(whole),
            "minimal, hidden modes": lambda: floating.minimal(partly),
            "examine": lambda: examine(whole),
            "examine, hidden modes": lambda: examine(partly),
            "examine in full": lambda: examine(partly).to_dict(),
        },
        rounds=31,
    )
    medians = _medians(seconds)

    def number(what: str, name: str, asked: float | None, times: float) -> Number:
        return Number(
            what=what,
            asked=asked,
            measured=ratio(seconds, name, "matrix_rank", times=times),
            unit="times",
            seconds={name: medians[name], "matrix_rank": medians["matrix_rank"]},
        )

    return [
        number("floating minimal, n = 6 / two matrix_rank", "minimal", 5, 2),
        number("floating minimal, hidden / two matrix_rank", "minimal, hidden modes", 5, 2),
        number("examine, n = 6, floats / one matrix_rank", "examine", 200, 1),
        number("examine, hidden modes / one matrix_rank", "examine, hidden modes", 200, 1),
        number("examine, every field / one matrix_rank", "examine in full", None, 1),
    ]


# ---------------------------------------------------------------------------------------------
# Import and tests
# ---------------------------------------------------------------------------------------------

_TIME_IMPORT = (
    "import time; began = time.perf_counter(); import {0}; print(time.perf_counter() - began)"
)


def import_time() -> list[Number]:
    """Time the import statement in fresh processes; starting Python is not counted."""
    seconds: dict[str, list[float]] = {"realize": [], "numpy": []}
    for turn in range(22):
        for name, found in seconds.items():
            done = subprocess.run(
                [sys.executable, "-c", _TIME_IMPORT.format(name)],
                cwd=ROOT,
                capture_output=True,
                text=True,
                check=True,
            )
            if turn:  # the first turn compiles and fills the caches of the system
                found.append(float(done.stdout))
    return [
        Number(
            what="import realize / import numpy",
            asked=1.15,
            measured=ratio(seconds, "realize", "numpy"),
            unit="times",
            seconds=_medians(seconds),
            facts={"pairs": len(seconds["numpy"])},
        )
    ]


def suite() -> list[Number]:
    """Run the whole test suite on two processes, and time it."""
    began = time.perf_counter()
    done = subprocess.run(
        [sys.executable, "-m", "pytest", "-q", "-n", "2"], cwd=ROOT, capture_output=True, text=True
    )
    took = time.perf_counter() - began
    last = done.stdout.strip().rsplit("\n", 1)[-1]
    if done.returncode:
        raise AssertionError(f"the test suite did not pass, so its time says nothing: {last}")
    passed = re.search(r"(\d+) passed", last)
    return [
        Number(
            what="whole test suite, two processes",
            asked=6.0,
            measured=took / 60.0,
            unit="minutes",
            seconds={"suite": took},
            facts={"passed": int(passed[1]) if passed else 0, "cores": os.cpu_count()},
        )
    ]


MEASURES: Final[dict[str, Callable[[], list[Number]]]] = {
    "exact": exact_minimal,
    "staircase": staircase,
    "small": small,
    "import": import_time,
    "suite": suite,
}


def report(numbers: list[Number]) -> str:
    return table(
        ("what", "asked <=", "measured", ""),
        [
            (
                number.what,
                "-" if number.asked is None else f"{number.asked:g}",
                f"{number.measured:.3g}",
                number.unit + ("" if number.reached else "  MISSED"),
            )
            for number in numbers
        ],
    )


def main() -> int:
    parser = argparse.ArgumentParser(prog="python -m benchmarks.numbers", description=__doc__)
    parser.add_argument(
        "names", nargs="*", metavar="NAME", help=f"some of {', '.join(MEASURES)}; default: all"
    )
    names = parser.parse_args().names
    unknown = sorted(set(names) - set(MEASURES))
    if unknown:
        parser.error(f"no number is called {', '.join(unknown)}; known: {', '.join(MEASURES)}")
    numbers = [number for name in names or MEASURES for number in MEASURES[name]()]
    print(report(numbers))
    if not names:
        target = save("numbers", {"numbers": [plain(number) for number in numbers]})
        print(f"\nwritten to {target.relative_to(ROOT)}")
    return 0 if all(number.reached for number in numbers) else 1


def plain(number: Number) -> dict[str, Any]:
    return {
        "what": number.what,
        "asked_at_most": number.asked,
        "measured": number.measured,
        "unit": number.unit,
        "reached": number.reached,
        "seconds": number.seconds,
        "facts": number.facts,
    }


if __name__ == "__main__":
    sys.exit(main())
