"""The published benches once more, through the examination: as given, and as doubles.

Each page must say what the source says: the order, what is hidden and in which part, and whether
the two questions (stabilizable, detectable) are answered yes. Sources stand beside the same checks
in the modules for decompositions and for circuits and filters.
"""

from __future__ import annotations

from fractions import Fraction
from math import gcd
from typing import Any

import pytest

import realize
from realize import Realization
from tests.helpers import (
    CONTROLLABLE_UNOBSERVABLE,
    ONE,
    UNCONTROLLABLE_OBSERVABLE,
    UNCONTROLLABLE_UNOBSERVABLE,
    Polynomial,
    identity,
)
from tests.published.test_circuits_and_filters import bridge, masses, two_pendulums
from tests.published.test_decompositions import chebyshev_second_half, cycle_graph, path_graph
from tests.published.tools import (
    column,
    data,
    diagonal,
    matrix,
    model,
    poly,
    row,
    transfer,
    unit,
    with_roots,
)

F = Fraction
TABLE = data("filters")


def examined(
    system: Realization, order: int, hidden: dict[str, Polynomial], *, stable: tuple[bool, bool]
) -> None:
    """The page of a model as given, and that of its doubles: order, parts, the two questions."""
    answers = ["yes" if yes else "no" for yes in stable]
    found = realize.examine(system)
    assert found.minimal_order == {"given": order}
    assert found.routes["given"] == {"state": order, "polynomial": order, "hankel": order}
    wanted = dict.fromkeys(
        (CONTROLLABLE_UNOBSERVABLE, UNCONTROLLABLE_UNOBSERVABLE, UNCONTROLLABLE_OBSERVABLE), ONE
    )
    assert found.hidden_parts["given"] == wanted | hidden
    assert [found.stabilizable, found.detectable] == answers
    assert (found.status == 0) is (order == system.order)
    doubles = realize.examine(system.to_float())
    assert doubles.answer.order == order
    assert doubles.floating_order == order
    for told, answer in zip((doubles.stabilizable, doubles.detectable), answers, strict=True):
        # What lies on the boundary, or within rounding of it, may be beyond doubles to tell.
        assert told in (answer, "cannot tell")


@pytest.mark.parametrize("size", [8, 9, 15])
def test_paths(size: int) -> None:
    """S-08: a path seen everywhere, driven at one node; its hidden modes decay, or are the rest."""
    A = path_graph(size)
    for node in (1, 2, (size + 1) // 2):
        missed = [
            k
            for k in range(size)
            if (2 * node - 1) * k % (2 * size) == size  # mode k vanishes
        ]
        system = model(A, unit(size, node), identity(size))
        found = realize.examine(system)
        assert found.answer.order == size - len(missed)
        assert found.stabilizable == found.detectable == "yes"


def test_cycles() -> None:
    """S-09: n = 6 from node 1 and another: 6, 6, 4, 6, 6. The Laplacian itself grows."""
    for node, rank in zip(range(2, 7), (6, 6, 4, 6, 6), strict=True):
        system = model(cycle_graph(6), unit(6, 1, node), identity(6))
        found = realize.examine(system)
        assert found.answer.order == rank
        assert found.stabilizable == ("yes" if rank == 6 else "no")


@pytest.mark.parametrize(("size", "node"), [(8, 3), (11, 3), (11, 4), (11, 6), (7, 4)])
def test_chains(size: int, node: int) -> None:
    """S-10: rank n + 1 - gcd(j, n + 1), and the hidden factor U_(g-1)(s/2)."""
    rows = [[int(abs(i - j) == 1) for j in range(size)] for i in range(size)]
    g = gcd(node, size + 1)
    factor = chebyshev_second_half(g - 1)
    hidden = {UNCONTROLLABLE_OBSERVABLE: factor} if g > 1 else {}
    system = model(matrix(rows), unit(size, node), identity(size))
    # A symmetric chain has modes on both sides of zero, so what is hidden does not all decay.
    examined(system, size + 1 - g, hidden, stable=(g == 1, True))


@pytest.mark.parametrize("degree", range(2, 9))
def test_bessel_filters(degree: int) -> None:
    """T-01 to T-03, here T-02: designed filters are of full order, in doubles too."""
    denominator = poly(*TABLE["bessel"][degree - 2])
    system = realize.companion(transfer([[(denominator[-1:], denominator)]]))
    examined(system, degree, {}, stable=(True, True))


@pytest.mark.parametrize("table", ["butterworth_expanded", "chebyshev"])
def test_tables_of_filters(table: str) -> None:
    """T-01 and T-03: handbook coefficients, read as printed, are minimal under every reading."""
    rows = TABLE[table]
    printed = list(rows.values()) if isinstance(rows, dict) else [r["denominator"] for r in rows]
    for texts in printed:
        system = realize.companion(
            realize.TransferMatrix([float(texts[-1])], [float(text) for text in texts])
        )
        found = realize.examine(system)
        assert set(found.minimal_order.values()) == {found.floating_order} == {len(texts) - 1}
        assert found.readings_agree
        assert not found.fragile


@pytest.mark.parametrize("degree", range(1, 6))
def test_delays(degree: int) -> None:
    """T-04: the all-pass approximants of a delay hide nothing."""
    rising = poly(*reversed(TABLE["pade"][degree - 1]))
    mirrored = poly(*(c * (-1) ** (degree - i) for i, c in enumerate(rising)))
    system = realize.companion(transfer([[(mirrored, rising)]]))
    examined(system, degree, {}, stable=(True, True))


def test_two_masses() -> None:
    """T-05: opposite forces hide the rigid mode, which grows; forces like masses, the other."""
    rigid, swing = poly(1, 0, 0), poly(1, 0, F(7, 2) + F(35, 3))
    seen = identity(4)
    examined(masses(2, "3/5", 7, (1, 0), seen), 4, {}, stable=(True, True))
    examined(
        masses(2, "3/5", 7, (1, -1), seen),
        2,
        {UNCONTROLLABLE_OBSERVABLE: rigid},
        stable=(False, True),
    )
    examined(
        masses(2, "3/5", 7, (2, F(3, 5)), seen),
        2,
        {UNCONTROLLABLE_OBSERVABLE: swing},
        stable=(False, True),
    )
    examined(
        masses(2, "3/5", 7, (1, 0), row(1, -1, 0, 0)),
        2,
        {CONTROLLABLE_UNOBSERVABLE: rigid},
        stable=(True, False),
    )
    page = str(realize.examine(masses(2, "3/5", 7, (1, -1), seen)))
    assert "unstable" in page.split("Hidden")[0]  # a double integrator grows


def test_two_damped_masses() -> None:
    """T-06: with dampers to ground, nothing is hidden from force and position of the first."""
    A = matrix([[0, 0, 1, 0], [0, 0, 0, 1], [-1, 1, "-1/4", 0], [2, -2, 0, "-1/3"]])
    examined(model(A, unit(4, 3), row(1, 0, 0, 0)), 4, {}, stable=(True, True))


def test_two_pendulums() -> None:
    """T-07: equal lengths hide one pendulum against the other, which falls."""
    args: tuple[Any, ...] = (10, 1, 3)
    examined(two_pendulums(*args, 1, 2, "9.81", row(1, 0, 0, 0)), 4, {}, stable=(True, True))
    examined(
        two_pendulums(*args, 2, 2, "9.81", row(1, 0, 0, 0)),
        2,
        {UNCONTROLLABLE_OBSERVABLE: poly(1, 0, F("-9.81") / 2)},
        stable=(False, True),
    )


@pytest.mark.parametrize("equal", [False, True])
def test_two_loads(equal: bool) -> None:
    """T-08: a crane with loads on equal ropes cannot damp one against the other."""
    g, (l1, l2) = F(10), (F(2), F(2) if equal else F(3))
    M, m1, m2 = F(4), F(1), F(2)
    rows = [[F(0)] * 6 for _ in range(6)]
    rows[0][1] = rows[2][3] = rows[4][5] = F(1)
    rows[1][2], rows[1][4] = -m1 * g / M, -m2 * g / M
    rows[3][2], rows[3][4] = -(M + m1) * g / (M * l1), -m2 * g / (M * l1)
    rows[5][2], rows[5][4] = -m1 * g / (M * l2), -(M + m2) * g / (M * l2)
    system = model(matrix(rows), column(0, 1 / M, 0, 1 / (M * l1), 0, 1 / (M * l2)), identity(6))
    hidden = {UNCONTROLLABLE_OBSERVABLE: poly(1, 0, g / l1)} if equal else {}
    examined(system, 4 if equal else 6, hidden, stable=(not equal, True))


@pytest.mark.parametrize(
    ("R1", "R2", "C", "L", "order"), [(1, 2, 3, 5, 2), (2, 3, "1/2", 3, 1), (3, 3, "1/9", 1, 0)]
)
def test_two_branches(R1: Any, R2: Any, C: Any, L: Any, order: int) -> None:
    """T-09: R1-L beside R2-C loses one mode on each side at R1 R2 = L/C: all of it decays."""
    R1, R2, C, L = (F(v) for v in (R1, R2, C, L))
    system = model(
        diagonal(-R1 / L, -1 / (R2 * C)), column(1 / L, 1 / (R2 * C)), row(1, -1 / R2), [[1 / R2]]
    )
    found = realize.examine(system)
    assert found.minimal_order == {"given": order}
    assert found.stabilizable == found.detectable == "yes"
    assert realize.examine(system.to_float()).answer.order == order


def test_bridges() -> None:
    """T-10: at balance the capacitor of a bridge is not reached; off balance it is."""
    for arms, order in (((1, 2, 3, 6), 0), ((1, 2, 3, 5), 1)):
        system = bridge(*arms, "1/7")
        hidden = {} if order else {UNCONTROLLABLE_OBSERVABLE: with_roots(system.A[0, 0])}
        examined(system, order, hidden, stable=(True, True))


@pytest.mark.parametrize("balanced", [False, True])
def test_bridged_sections(balanced: bool) -> None:
    """T-11: at equal time constants one mode is lost on each side, not the same one."""
    R, R1, C1, R2, C2 = F(1), F(2), F(3), F(3), F(2) if balanced else F(1)
    A = [
        [-(1 / R1 + 1 / R) / C1, 1 / (R * C1)],
        [1 / (R * C2), -(1 / R2 + 1 / R) / C2],
    ]
    system = model(A, column(1 / (R1 * C1), 1 / (R2 * C2)), row(1, -1))
    found = realize.examine(system)
    assert found.answer.order == (0 if balanced else 2)
    degrees = {part: len(p) - 1 for part, p in found.hidden_parts["given"].items()}
    lost = int(balanced)
    assert degrees == {
        CONTROLLABLE_UNOBSERVABLE: lost,
        UNCONTROLLABLE_UNOBSERVABLE: 0,
        UNCONTROLLABLE_OBSERVABLE: lost,
    }
    assert found.stabilizable == found.detectable == "yes"
    assert realize.examine(system.to_float()).answer.order == found.answer.order
