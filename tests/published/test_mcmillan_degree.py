"""McMillan degrees and pole polynomials of transfer matrices from the literature."""

from fractions import Fraction
from types import ModuleType
from typing import Any

import numpy as np
import pytest

from realize import exact, floating
from tests.helpers import ONE, characteristic_polynomial, times
from tests.published.tools import (
    assert_transfer,
    poly,
    scaled,
    transfer,
    with_roots,
)

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")

s1, s2, s3, s4, s5 = (with_roots(-k) for k in range(1, 6))
ROSENBROCK = times(s1, s1, s2, s2)


def over(denominator: Any, rows: Any) -> list[list[tuple[Any, Any]]]:
    """Numerators over one denominator."""
    return [[(numerator, denominator) for numerator in line] for line in rows]


SHARED_BY_GILBERT = [
    [((1,), s1), ((2,), s1)],
    [((-1,), times(s1, s2)), ((1,), s2)],
]

KALMAN = [
    [
        (scaled(3, times(s3, s5)), times(s1, s2, s4)),
        (scaled(6, s1), times(s2, s4)),
        ((2, 7), times(s3, s4)),
        ((2, 5), times(s2, s3)),
    ],
    [
        ((2,), times(s3, s5)),
        ((1,), s3),
        ((2, -10), times(s1, s2, s3)),
        (scaled(8, s2), times(s1, s3, s5)),
    ],
    [
        ((2, 14, 36), times(s1, s3, s5)),
        ((-2, 0), times(s1, s3)),
        ((1,), s3),
        ((10, 54, 68), times(s1, s3, s5)),
    ],
]

# id -> (rows of (numerator, denominator), pole polynomial)
TABLES: dict[str, tuple[Any, Any]] = {
    # Public question-and-answer page on zeros and poles that do not meet (poles -1, -1, -2 and
    # zero 1 read there). Published; recomputed.
    "M-01": ([[((2,), s1), ((3,), s2)], [((1,), s1), ((1,), s1)]], times(s1, s1, s2)),
    # Gilbert 1963, Controllability and observability in multivariable control systems.
    # Memory; recomputed.
    "M-02": (SHARED_BY_GILBERT, times(s1, s1, s2)),
    # Rosenbrock 1970, State-space and Multivariable Theory; Kailath 1980, Linear Systems, ch. 6.
    # Memory; recomputed. The pole -2 has multiplicity 3, though no entry has more than 2.
    "M-03": (
        over(
            ROSENBROCK,
            [
                [(1, 0), times((1, 0), s1, s1)],
                [times((-1, 0), s1, s1), times((-1, 0), s1, s1)],
            ],
        ),
        times(s1, s1, s2, s2, s2),
    ),
    # Chen 1999, Linear System Theory and Design, sections 4.4 and 7.8. Memory; recomputed.
    "M-04": (
        [
            [((4, -10), (2, 1)), ((3,), s2)],
            [((1,), times((2, 1), s2)), ((1, 1), times(s2, s2))],
        ],
        times((1, "1/2"), s2, s2),
    ),
    # Kalman 1963, Mathematical description of linear dynamical systems; the entries are from
    # memory, the residue ranks 3, 2, 3, 1, 1 at -1..-5 hold for these. Memory; recomputed.
    "M-05": (KALMAN, times(s1, s1, s1, s2, s2, s3, s3, s3, s4, s5)),
    # Chen 1999, example 7.4. Memory; recomputed.
    "M-06 rank one": (over(s1, [[(1,), (1,)], [(1,), (1,)]]), s1),
    "M-06 rank two": (over(s1, [[(2,), (1,)], [(1,), (1,)]]), times(s1, s1)),
    # Chen 1999, example 7.5. Memory; recomputed.
    "M-07": (
        [
            [((1, 0), s1), ((1,), times(s1, s2)), ((1,), s3)],
            [((-1,), s1), ((1,), times(s1, s2)), ((1,), (1, 0))],
        ],
        times((1, 0), s1, s2, s3),
    ),
    # Skogestad and Postlethwaite, Multivariable Feedback Control, ch. 4. Memory; recomputed.
    "M-08": (
        over(scaled("5/4", times(s1, s2)), [[(1, -1), (1, 0)], [(-6,), (1, -2)]]),
        times(s1, s2),
    ),
    # Same book and chapter: the zero 1 stands at a pole and does not cancel. Memory; recomputed.
    "M-09": (
        over(
            times(s1, s2, (1, -1)),
            [
                [times((1, -1), s2), (0,), times((1, -1), (1, -1))],
                [scaled(-1, times(s1, s2)), times((1, -1), s1), times((1, -1), s1)],
            ],
        ),
        times(s1, s2, s2, (1, -1)),
    ),
    # Maciejowski 1989, Multivariable Feedback Design, ch. 2. Memory; recomputed.
    "M-10": (
        over(
            (1, 3, 2),
            [[(1,), (-1,)], [(1, 1, -4), (2, -1, -8)], [(1, 0, -4), (2, 0, -8)]],
        ),
        times(s1, s1, s2),
    ),
    # Chen 1999, section 7.5: s + 1 cancels. Memory; recomputed.
    "M-11": ([[((4, -2, -6), (2, 2, 2, 3, 1))]], poly(1, 0, 1, "1/2")),
}


@pytest.mark.parametrize("name", TABLES)
def test_degree_and_poles(name: str) -> None:
    """M-01 to M-11: the exact minimal order is the degree of the pole polynomial of the source.

    The poles are those of the reduced A, by FLINT's characteristic polynomial; the reduced model
    has the transfer matrix given, entry by entry.
    """
    rows, poles = TABLES[name]
    reduction = exact.minimal(transfer(rows))
    assert reduction.order == len(poles) - 1
    assert reduction.model.order == reduction.order
    assert characteristic_polynomial(reduction.model.A) == poles
    assert_transfer(exact.transfer_matrix(reduction.model), rows)


@pytest.mark.parametrize("name", TABLES)
def test_degree_in_floats(name: str) -> None:
    """M-01 to M-11 on the floating face: the same order and the same transfer matrix."""
    rows, poles = TABLES[name]
    reduction = floating.minimal(transfer(rows))
    assert reduction.order == len(poles) - 1
    assert_transfer(floating.transfer_matrix(reduction.model), rows)


@pytest.mark.parametrize("name", TABLES)
def test_degree_from_markov_parameters(name: str) -> None:
    """M-01 to M-11: the Markov parameters alone give the same order and the same poles.

    This is the third way, by the rank of the Hankel matrix: Ho and Kalman 1966.
    """
    rows, poles = TABLES[name]
    order = len(poles) - 1
    # 2 * order + 1 of them (D and 2n more) always determine a model of order n.
    parameters = exact.markov_parameters(exact.minimal(transfer(rows)).model, 2 * order + 1)
    reduction = exact.from_markov_parameters(parameters)
    assert reduction.order == order
    assert characteristic_polynomial(reduction.model.A) == poles
    assert_transfer(exact.transfer_matrix(reduction.model), rows)


def test_gilbert_markov_parameters(face: ModuleType) -> None:
    """M-02: H1 = [[1, 2], [0, 1]], H2 = [[-1, -2], [-1, -2]], H3 = [[1, 2], [3, 4]].

    Source: Gilbert 1963. Memory; recomputed.
    """
    reduced = face.minimal(transfer(SHARED_BY_GILBERT)).model
    found = np.asarray(face.markov_parameters(reduced, 4), dtype=float)
    wanted = [[[0, 0], [0, 0]], [[1, 2], [0, 1]], [[-1, -2], [-1, -2]], [[1, 2], [3, 4]]]
    assert found == pytest.approx(np.array(wanted, dtype=float), abs=1e-12)
    if face is exact:
        assert face.markov_parameters(reduced, 4).tolist() == wanted


def test_chen_markov_parameters(face: ModuleType) -> None:
    """M-11: after D = 0 come 0, 2, -3, -2, 2, 7/2, -1, -9/2, also when s + 1 is cancelled.

    Source: Chen 1999, section 7.5. Memory; recomputed.
    """
    wanted = [Fraction(v) for v in ("0", "2", "-3", "-2", "2", "7/2", "-1", "-9/2")]
    given = face.companion(transfer(TABLES["M-11"][0]))
    assert given.order == 4
    for system in (given, face.minimal(given).model):
        found = [block[0][0] for block in face.markov_parameters(system, 9)[1:]]
        if face is exact:
            assert found == wanted
        else:
            assert found == pytest.approx([float(v) for v in wanted], abs=1e-12)


def test_chen_cancelled_factor(face: ModuleType) -> None:
    """M-11: what cancels is s + 1, and 2(2s - 3)/(2s^3 + 2s + 1) is left.

    Source: as above.
    """
    found = face.cancel(transfer(TABLES["M-11"][0]))
    left = [[((4, -6), (2, 0, 2, 1))]]
    assert_transfer(found.transfer, left, proved=face is exact)
    assert len(found.transfer.denominators[0][0]) == 4
    if face is exact:
        assert found.common == poly(1, 1)
    else:
        assert list(found.common) == pytest.approx([1, 1], abs=1e-8)


@pytest.mark.parametrize(
    ("a", "poles"),
    [
        pytest.param(a, times((1, 0, 1 - Fraction(a)), (1, 0, 1 + Fraction(a))), id=f"a={a}")
        for a in ("0", "1", "-1", "1/2", "2", "-7/3", "1/1000003")
    ],
)
def test_degree_of_a_parametric_table(a: str, poles: Any) -> None:
    """M-12 at numbers: degree 4 for every a, also at a = 0, where the structure jumps.

    Source: public question-and-answer page on the Smith-McMillan form of a transfer matrix (the
    form for a != 0 read there; at a = 1 and a = -1 the pole polynomial is s^2 (s^2 + 2)).
    Published; recomputed. s^4 + 2 s^2 - a^2 + 1 = (s^2 + 1 - a)(s^2 + 1 + a).
    """
    value = Fraction(a)
    denominator = poly(1, 0, 2, 0, 1 - value**2)
    assert denominator == poles
    rows = over(
        denominator,
        [[(1, 0, 1), (-2 * value,)], [(value,), (-2, 0, -2)], [(0,), (0,)], [(0,), (0,)]],
    )
    reduction = exact.minimal(transfer(rows))
    assert reduction.order == 4
    assert characteristic_polynomial(reduction.model.A) == poles
    assert_transfer(exact.transfer_matrix(reduction.model), rows)


@pytest.mark.parametrize("a", ["0", "1", "1/2", "2"])
def test_degree_of_a_parametric_table_in_floats(a: str) -> None:
    """M-12 on the floating face, away from values where a double root is split by rounding.

    Source: as above.
    """
    value = Fraction(a)
    rows = over(
        poly(1, 0, 2, 0, 1 - value**2),
        [[(1, 0, 1), (-2 * value,)], [(value,), (-2, 0, -2)], [(0,), (0,)], [(0,), (0,)]],
    )
    assert floating.minimal(transfer(rows)).order == 4


@pytest.mark.filterwarnings("error")
@pytest.mark.parametrize("a", ["1", "1/2", "2"])
def test_no_alarm_about_states_of_our_own_making(a: str, face: ModuleType) -> None:
    """M-12: where no entry cancels, nothing is hidden, and `minimal` must not warn.

    Source: as above; common practice. The poles are not stable, and a realization made entry by
    entry has each of them several times; those copies are no part of any plant.
    """
    value = Fraction(a)
    denominator = poly(1, 0, 2, 0, 1 - value**2)
    rows = [[((1, 0, 1), denominator), ((-2 * value,), denominator)]]
    assert exact.cancel(transfer(rows)).common == ((ONE, ONE),)
    rows.append([((value,), denominator), ((-2, 0, -2), denominator)])
    assert face.minimal(transfer(rows)).order == 4
