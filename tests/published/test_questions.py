"""Published models put to the paired examination: orders, parts, modes and verdicts."""

from typing import Any, NamedTuple

import numpy as np
import pytest

import realize
from realize import Realization
from tests.helpers import (
    CONTROLLABLE_OBSERVABLE,
    CONTROLLABLE_UNOBSERVABLE,
    ONE,
    PARTS,
    UNCONTROLLABLE_OBSERVABLE,
    UNCONTROLLABLE_UNOBSERVABLE,
)
from tests.published.tools import (
    column,
    diagonal,
    model,
    row,
    shift,
    unit,
    with_roots,
)


class Case(NamedTuple):
    """A model and what is known of it."""

    model: Realization
    order: int
    stabilizable: str
    detectable: str
    hidden: dict[str, Any]


CASES = {
    # Chen 1999, example 6.8: the mode 1 is hidden on both sides. Published; recomputed.
    "S-01": Case(
        model([[1, 1, 0], [0, 1, 0], [0, 1, 1]], [[0, 1], [1, 0], [0, 1]], row(1, 1, 1)),
        2,
        "no",
        "no",
        {UNCONTROLLABLE_UNOBSERVABLE: with_roots(1)},
    ),
    # Worked example of a course, Politecnico di Bari: unreached 2 and -3, unseen 1 and -3.
    # Published; recomputed.
    "S-03": Case(
        model(
            [[-4, -3, 0, -2], [6, 5, 0, 2], [4, 1, 1, -6], [-1, -1, 0, -3]],
            column(-1, 1, 2, 0),
            row(-3, -2, 0, 1),
        ),
        1,
        "no",
        "no",
        {
            UNCONTROLLABLE_OBSERVABLE: with_roots(2),
            CONTROLLABLE_UNOBSERVABLE: with_roots(1),
            UNCONTROLLABLE_UNOBSERVABLE: with_roots(-3),
        },
    ),
    # Antsaklis and Michel 2006: what is hidden, -2 and -1, settles. Memory; recomputed.
    "S-04": Case(
        model([[0, -1, 1], [1, -2, 1], [0, 1, -1]], [[1, 0], [1, 1], [1, 2]], row(0, 1, 0)),
        1,
        "yes",
        "yes",
        {
            UNCONTROLLABLE_OBSERVABLE: with_roots(-2),
            CONTROLLABLE_UNOBSERVABLE: with_roots(-1),
        },
    ),
    # Chen 1999, example 6.2: nothing is hidden. Memory; recomputed.
    "S-05": Case(
        model(
            [[0, 1, 0, 0], [0, 0, -1, 0], [0, 0, 0, 1], [0, 0, 5, 0]],
            column(0, 1, 0, -2),
            row(1, 0, 0, 0),
        ),
        4,
        "yes",
        "yes",
        {},
    ),
    # Brockett 1970: with the radial thruster alone the drift of the angle is not reached.
    # Memory; recomputed.
    "S-07": Case(
        model(
            [[0, 1, 0, 0], [3, 0, 0, 2], [0, 0, 0, 1], [0, -2, 0, 0]],
            unit(4, 2),
            unit(4, 1, 3).T,
        ),
        3,
        "no",
        "yes",
        {UNCONTROLLABLE_OBSERVABLE: with_roots(0)},
    ),
}


@pytest.mark.parametrize("name", CASES)
def test_answers(name: str) -> None:
    """S-01 to S-07: the order, by three routes and on both paths, the parts, the two questions."""
    case = CASES[name]
    found = realize.examine(case.model)
    assert found.order == case.model.order
    assert found.minimal_order == {"given": case.order}
    assert set(found.routes["given"].values()) == {case.order}
    assert set(found.routes["given"]) == {"state", "polynomial", "hankel"}
    assert found.floating_order == case.order
    assert found.paths_agree
    assert found.readings_agree
    assert (found.answer.order, found.answer.basis) == (case.order, "given")
    assert found.stabilizable == case.stabilizable
    assert found.detectable == case.detectable
    for part in PARTS:
        if part != CONTROLLABLE_OBSERVABLE:
            assert found.parts["given"][part] == case.hidden.get(part, ONE), part


@pytest.mark.parametrize("name", CASES)
def test_modes(name: str) -> None:
    """S-01 to S-07: each hidden mode stands in its part with its value and its stability."""
    case = CASES[name]
    found = realize.examine(case.model)
    assert sum(mode.multiplicity for mode in found.modes) == case.model.order
    hidden = {mode.part: mode for mode in found.modes if mode.part != CONTROLLABLE_OBSERVABLE}
    assert set(hidden) == set(case.hidden)
    for part, mode in hidden.items():
        root = -case.hidden[part][1]
        assert mode.value == float(root)
        assert mode.multiplicity == 1
        # The root 0 of S-07 is a double eigenvalue of A with one eigenvector, so it drifts away.
        assert mode.stability == ("stable" if root < 0 else "unstable")
    cautions = " ".join(found.cautions)
    stabilities = {str(mode.stability) for mode in hidden.values()}
    assert ("unstable" in cautions) is ("unstable" in stabilities)
    assert "marginal" not in cautions


@pytest.mark.parametrize("name", CASES)
def test_cutoff_range_covers_the_default(name: str) -> None:
    """S-01 to S-07 as doubles: their entries are exact, so every reading agrees with the paper.

    The replay finds a range of cutoffs, and every decision carries the exact rank beside it.
    """
    case = CASES[name]
    found = realize.examine(case.model.to_float())
    assert set(found.minimal_order.values()) == {case.order}
    assert set(found.minimal_order) == {"stored", "written", "intended"}
    assert found.floating_order == case.order
    for reading, span in found.cutoff_ranges.items():
        assert span is not None, reading
        assert span[0] < span[1], reading
    for decision in found.decisions:
        assert decision.exact_rank["stored"] == decision.rank


def test_safe_pair_with_a_worthless_controllability_matrix() -> None:
    """D-04: orders agree at 10, though the controllability matrix has numerical rank 8 or so.

    Source: Paige 1981, Properties of numerical algorithms related to computing controllability.
    Memory; recomputed.
    """
    system = model(diagonal(*(f"1/{2**k}" for k in range(10))), column(*[1] * 10), row(*[1] * 10))
    found = realize.examine(system.to_float())
    assert set(found.minimal_order.values()) == {10}
    assert found.floating_order == 10
    assert found.paths_agree
    assert found.answer.order == 10


def test_two_readings_of_one_table() -> None:
    """T-12 with R C = 0.1 twice: equal as written, and equal as stored, since doubles are equal.

    Source: classical. Common practice. With 0.3 against 0.1 + 0.2 the readings part.
    """
    equal = Realization(np.diag([-0.1, -0.1]), [[1.0], [1.0]], [[1.0, 1.0]])
    found = realize.examine(equal)
    assert set(found.minimal_order.values()) == {1}
    apart = Realization(np.diag([-0.3, -(0.1 + 0.2)]), [[1.0], [1.0]], [[1.0, 1.0]])
    found = realize.examine(apart)
    assert found.minimal_order["stored"] == 2
    assert found.minimal_order["written"] == 2
    # The nearest model of lower order lies within rounding, and doubles see one state only.
    assert found.floating_order == 1
    assert found.answer.order == 1
    assert found.answer.basis == "nearest"
    assert found.nearest is not None
    assert 0 < found.nearest.relative_distance < 1e-15


def test_sensitive_spectrum() -> None:
    """D-05: a table whose eigenvalues are wild, and whose order is beyond doubt.

    Source: matrix from Wilkinson 1965, The Algebraic Eigenvalue Problem. Recomputed.
    """
    A = (diagonal(*range(20, 0, -1)) + 20 * shift(20)).astype(float)
    found = realize.examine(Realization(A, np.eye(20)[:, -1:], np.eye(20)[:1]))
    assert set(found.minimal_order.values()) == {20}
    assert found.floating_order == 20
    values = sorted(mode.value.real for mode in found.modes)
    assert values == list(range(1, 21))
