"""The pages for ten situations, as they were approved, and one of them under uncertainty.

Each page was read with one question: what does the engineer decide from it, and do the first ten
lines suffice? What the page begins with is kept as text. Sizes of rounding differ from machine to
machine; they are masked.
"""

from __future__ import annotations

import re
from pathlib import Path

import pytest

import realize
from realize.examination.page import findings

HERE = Path(__file__).parent
SITUATIONS = {
    "observer-loop": (1, "the estimator's error modes are out of the reference's reach, and decay"),
    "drive": (4, "an unstable mode sits behind the zero of a filter: do not ship"),
    "rigid-body": (4, "a hidden double integrator in rotated doubles: no sign can be told"),
    "twelve-decades": (1, "units over twelve decades do not hide what shows"),
    "two-sections": (1, "one section's zeros are the other's poles, as the doubles are stored"),
    "fitted": (0, "a fitted model: nothing is hidden, and no uncertainty was weighed"),
    "weak-chain": (0, "a long weak chain: weak is not hidden"),
    "sampled-spring": (1, "sampled at half its period, a spring loses a mode"),
    "delay-twice": (1, "the same delay, approximated once for each branch, is there twice"),
    "plain": (0, "simply minimal"),
}
# The fitted model again, with the standard deviations of its coefficients: small, and ten times so.
DEVIATIONS = {"A": [[0.012, 0.011], [0, 0]], "C": [[0.004, 0.004]]}
UNCERTAIN = {
    "fitted-well": (0, 1, "minimal: every model that the data allow shows both states"),
    "fitted-badly": (4, 10, "a model that the data allow hides a mode: go back for better data"),
}
TINY = re.compile(r"\b\d(\.\d+)?e-(1[2-9]|[2-9]\d)\b")


def masked(text: str) -> str:
    """The text with line breaks folded, and numbers of rounding size and their stages masked."""
    folded = TINY.sub("<tiny>", re.sub(r"\s+", " ", text)).strip()
    return re.sub(r"(reached|seen), stage \d+: must keep <tiny>", "<stage>", folded)


@pytest.mark.parametrize("name", SITUATIONS)
def test_the_page_is_the_approved_one(name: str) -> None:
    """What the page begins with is what was approved, and so is the exit status."""
    examination = realize.examine(realize.load(HERE / f"{name}.json"))
    approved = (HERE / f"{name}.txt").read_text("utf-8")
    assert masked(findings(examination)) == masked(approved)
    assert examination.status == SITUATIONS[name][0]


@pytest.mark.parametrize("name", UNCERTAIN)
def test_the_page_of_a_fitted_model_weighs_its_deviations(name: str) -> None:
    """The same for a model fitted to data, with standard deviations."""
    status, times, _ = UNCERTAIN[name]
    spread = realize.Uncertainty(
        standard_deviation={
            letter: [[times * figure for figure in row] for row in rows]
            for letter, rows in DEVIATIONS.items()
        }
    )
    examination = realize.examine(realize.load(HERE / "fitted.json"), uncertainty=spread)
    approved = (HERE / f"{name}.txt").read_text("utf-8")
    assert masked(findings(examination)) == masked(approved)
    assert examination.status == status


@pytest.mark.parametrize("name", SITUATIONS)
def test_the_page_fits_80_columns(name: str) -> None:
    """No line of the whole page is longer than a terminal is wide."""
    page = str(realize.examine(realize.load(HERE / f"{name}.json")))
    assert max(map(len, page.split("\n"))) <= 80
    assert page.split("\n")[0].startswith("Model ")


def test_every_situation_has_its_files() -> None:
    """One model and one page for each, and nothing else."""
    files = {path.stem for path in HERE.iterdir() if path.suffix in (".json", ".txt")}
    assert files == set(SITUATIONS) | set(UNCERTAIN)
