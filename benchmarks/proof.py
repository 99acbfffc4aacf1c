"""What certificates cost: to make, and to check with plain Python.

``python -m benchmarks.proof`` measures, prints a table and writes a dated record. The exit status
is 1 when a number is not reached.
"""

from __future__ import annotations

import json
import math
import resource
import statistics
import subprocess
import sys
import tempfile
import time
import warnings
from fractions import Fraction
from pathlib import Path
from typing import Any, Final

import numpy as np

from benchmarks.measure import ROOT, interleaved, ratio, save
from benchmarks.numbers import Number, plain, planted, report, three_masses
from realize import (
    HiddenInstabilityWarning,
    Realization,
    certify,
    distance_to_uncontrollability,
    exact,
    floating,
    same_transfer,
)

CHECKER: Final = ROOT / "realize" / "checker.py"
ROUNDS: Final = 15


def making() -> list[Number]:
    """A minimal realization with its certificate, over the minimal realization alone."""
    model, facts = planted()

    def reduce() -> Any:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", HiddenInstabilityWarning)  # hidden modes grow here
            return exact.minimal(model)

    # A reduction keeps its evidence once asked for it, so each certificate gets a fresh one.
    seconds = interleaved({"minimal": reduce, "both": lambda: certify(reduce())}, rounds=11)
    text = certify(reduce()).to_json()
    facts |= {"characters": len(text)}
    return [
        Number(
            what="exact minimal and its certificate, 200 states / exact minimal",
            asked=1.5,
            measured=ratio(seconds, "both", "minimal"),
            unit="times",
            seconds={name: statistics.median(values) for name, values in seconds.items()},
            facts=facts,
        ),
        _checked("check of that certificate, plain Python", text, asked=60.0, rounds=3),
    ]


def small() -> list[Number]:
    """Certificates of six states: how long the checker takes from its start to its answer."""
    model = three_masses(hidden=True)
    exactly = certify(exact.minimal(model.read("written"))).to_json()
    delivered = certify(floating.minimal(model), reading="written").to_json()
    return [
        _checked("check of 6 states, read as written", exactly, asked=0.08, rounds=ROUNDS),
        _checked("check of 6 states, with doubles", delivered, asked=0.08, rounds=ROUNDS),
    ]


def comparing() -> list[Number]:
    """The planted model against its reduction, and against a model with one entry changed."""
    model, _ = planted()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", HiddenInstabilityWarning)
        reduced = exact.minimal(model).model
    A = model.A.copy()
    A[0, 0] += 1
    other = type(model)(A, model.B, model.C)
    found = []
    for what, second in (("equal", reduced), ("different", other)):
        began = time.process_time()
        comparison = same_transfer(model, second)
        took = time.process_time() - began
        if bool(comparison) != (what == "equal"):
            raise AssertionError(f"the models should be {what}")
        text = certify(comparison).to_json()
        found.append(
            Number(
                what=f"same_transfer, 200 states, {what}",
                asked=None,
                measured=took,
                unit="seconds",
                seconds={"same_transfer": took},
                facts={"characters": len(text)},
            )
        )
        found.append(_checked(f"check of that, {what}", text, asked=60.0, rounds=1))
    return found


def distances() -> list[Number]:
    """Bounds of a distance: what their certificate takes beside the distance itself, and its check.

    The pair of Gao and Neumann (1993), companion pairs of (s + 1)^n, and seeded random pairs.
    """
    gao = Realization([[1, 1, 1], ["1/10", 3, 5], [0, -1, -1]], [[1], ["1/10"], [0]], [[1, 0, 0]])
    cases = {"3 states, 1 input": (gao, 0.1), "3 states, 1 input, to 1e-6": (gao, 1e-6)}
    for n in (5, 10):
        A = np.eye(n, k=1)
        A[-1] = [-math.comb(n, k) for k in range(n)]
        cases[f"companion, {n} states"] = Realization(A, np.eye(n)[:, -1:], np.eye(n)[:1]), 0.1
    draw = np.random.default_rng(20261201)
    for n, m in ((6, 1), (6, 2), (10, 1), (10, 3), (20, 1), (20, 4), (40, 8)):
        pair = draw.standard_normal((n, n)), draw.standard_normal((n, m))
        cases[f"random, {n} states, {m} inputs"] = Realization(*pair, np.eye(n)[:1]), 0.1
    found = []
    for what, (model, rtol) in cases.items():
        began = time.process_time()
        distance = distance_to_uncontrollability(model, rtol=rtol)
        middle = time.process_time()
        text = certify(distance).to_json()
        seconds = {"distance": middle - began, "certify": time.process_time() - middle}
        document = json.loads(text)
        lower, upper = (float(Fraction(document["claim"][key])) for key in ("lower", "upper"))
        squares = sum(word.count(".") for word in document["evidence"]["squares"])
        facts = {"lower": lower, "upper": upper, "squares": squares, "characters": len(text)}
        found.append(
            Number(
                what=f"certify a distance, {what}",
                asked=None,
                measured=seconds["certify"],
                unit="seconds",
                seconds=seconds,
                facts=facts,
            )
        )
        check = f"check of it, upper/lower {upper / lower:.3g}, {squares} squares"
        found.append(_checked(check, text, asked=60.0, rounds=1))
    return found


def _checked(what: str, text: str, *, asked: float, rounds: int) -> Number:
    """Run the checker as a file, in a process of its own, start of Python and all.

    What counts is the processor time of that process, which on a quiet machine is the time on the
    wall; both are in the record.
    """
    processor, wall = [], []
    with tempfile.TemporaryDirectory() as folder:
        file = Path(folder) / "certificate.json"
        file.write_text(text, "ascii")
        command = [sys.executable, "-I", str(CHECKER), str(file)]
        for _ in range(rounds):
            before, began = _spent(), time.perf_counter()
            subprocess.run(command, check=True, stdout=subprocess.DEVNULL)
            wall.append(time.perf_counter() - began)
            processor.append(_spent() - before)
    return Number(
        what=what,
        asked=asked,
        measured=statistics.median(processor),
        unit="seconds",
        seconds={"processor": statistics.median(processor), "wall": statistics.median(wall)},
        facts={"characters": len(text)},
    )


def _spent() -> float:
    """Return the processor time of all processes that were started and have ended."""
    used = resource.getrusage(resource.RUSAGE_CHILDREN)
    return used.ru_utime + used.ru_stime


def main() -> int:
    numbers = [*making(), *small(), *comparing(), *distances()]
    print(report(numbers))
    target = save("proof", {"numbers": [plain(number) for number in numbers]})
    print(f"\nwritten to {target.relative_to(ROOT)}")
    return 0 if all(number.reached for number in numbers) else 1


if __name__ == "__main__":
    sys.exit(main())
