"""Handbook filters, and mechanical and electrical benches on and off the condition of loss."""

from fractions import Fraction
from itertools import product
from math import factorial
from types import ModuleType
from typing import Any

import numpy as np
import pytest

from realize import Realization, exact, floating, polynomials, stability
from tests.helpers import (
    CONTROLLABLE_OBSERVABLE,
    CONTROLLABLE_UNOBSERVABLE,
    ONE,
    UNCONTROLLABLE_OBSERVABLE,
    UNCONTROLLABLE_UNOBSERVABLE,
    Polynomial,
    characteristic_polynomial,
    identity,
    plus,
    times,
)
from tests.published.tools import (
    assert_transfer,
    chebyshev,
    column,
    controllability_matrix,
    data,
    determinant,
    diagonal,
    matrix,
    model,
    poly,
    resultant_size,
    row,
    scaled,
    transfer,
    unit,
    with_roots,
)

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")

TABLE = data("filters")


def left_half(polynomial: Polynomial) -> list[complex]:
    """The roots in the left half plane."""
    return [
        located.root.value
        for located in stability.locate(polynomial, None)
        if located.region == "inside"
        for _ in range(located.root.multiplicity)
    ]


@pytest.mark.parametrize("degree", [4, 5, 6, 7, 8])
def test_butterworth(degree: int) -> None:
    """T-01: the left half of the roots of 1 + (-1)^n s^(2n) gives the factors of the tables.

    Source: Butterworth 1930; the factor table in a public encyclopedia file. Published;
    recomputed.
    """
    both = poly((-1) ** degree, *[0] * (2 * degree - 1), 1)
    roots = left_half(both)
    assert len(roots) == degree
    assert np.abs(roots) == pytest.approx(np.ones(degree), rel=1e-15)
    factors = sorted(-2 * z.real for z in roots if z.imag > 0)
    wanted = [float(text) for text in TABLE["butterworth_factors"][str(degree)]]
    assert factors == pytest.approx(wanted, abs=0.5e-4)
    if str(degree) in TABLE["butterworth_expanded"]:
        expanded = [float(text) for text in TABLE["butterworth_expanded"][str(degree)]]
        assert np.poly(roots).real == pytest.approx(expanded, rel=1e-11)


@pytest.mark.parametrize("degree", range(2, 9))
def test_bessel(degree: int, face: ModuleType) -> None:
    """T-02: the Bessel denominators are stable, and as all-pole filters of full order.

    Source: OEIS A001497, A104548; Grosswald 1978, Bessel Polynomials. Published; recomputed.
    """
    denominator = poly(*TABLE["bessel"][degree - 2])
    assert stability.is_stable(denominator, None)
    if degree >= 4:
        # y_n = (2n - 1) y_n-1 + s^2 y_n-2, by the library's own polynomials.
        last = polynomials.multiply(poly(2 * degree - 1), poly(*TABLE["bessel"][degree - 3]))
        before = polynomials.multiply(poly(1, 0, 0), poly(*TABLE["bessel"][degree - 4]))
        assert polynomials.add(last, before) == denominator
    fraction = transfer([[(denominator[-1:], denominator)]])
    assert face.minimal(fraction).order == degree
    assert face.minimal(face.companion(fraction, side="output")).order == degree


@pytest.mark.parametrize("index", range(6))
def test_chebyshev_filters(index: int) -> None:
    """T-03: the left half of the roots of 1 + eps^2 T_n(s/i)^2 gives the denominators.

    Source: filter handbooks (four figures remembered). Memory; recomputed.
    """
    entry = TABLE["chebyshev"][index]
    wanted = [float(text) for text in entry["denominator"]]
    degree = len(wanted) - 1
    # eps^2 = 10^(ripple/10) - 1, to double precision, which is enough for ten digits.
    ripple = Fraction(10.0 ** (float(entry["ripple"]) / 10) - 1)
    square = times(chebyshev(degree), chebyshev(degree))
    turned = [c * (-1) ** ((2 * degree - i) // 2) for i, c in enumerate(square)]
    both = plus((Fraction(1),), scaled(ripple, turned))
    roots = left_half(both)
    assert len(roots) == degree
    assert np.poly(roots).real == pytest.approx(wanted, rel=1e-9)


def test_chebyshev_ripples() -> None:
    """T-03: the ripple factors 0.3493114, 0.50884714, 0.99762835 of the tables."""
    for ripple, factor in ((0.5, 0.3493114), (1.0, 0.50884714), (3.0, 0.99762835)):
        assert (10 ** (ripple / 10) - 1) ** 0.5 == pytest.approx(factor, rel=1e-7)


@pytest.mark.parametrize("degree", range(1, 6))
def test_delay_approximants(degree: int, face: ModuleType) -> None:
    """T-04: N(-s)/N(s) is an all-pass of order exactly n: stable, and nothing cancels.

    Source: classical. Memory; recomputed.
    """
    rising = poly(*reversed(TABLE["pade"][degree - 1]))
    mirrored = poly(*(c * (-1) ** (degree - i) for i, c in enumerate(rising)))
    fraction = transfer([[(mirrored, rising)]])
    assert tuple(face.cancel(fraction).common) == (1,)
    assert face.minimal(fraction).order == degree
    assert stability.is_stable(rising, None)
    assert resultant_size(rising, mirrored) == TABLE["pade_resultants"][degree - 1]
    # |G| = 1 on the axis, exactly: N(s) N(-s) is the same above and below.
    assert exact.transfer_matrix(exact.minimal(fraction).model).evaluate(0)[0, 0] == 1


@pytest.mark.parametrize("degree", range(1, 6))
def test_delay_approximants_from_moments(degree: int) -> None:
    """T-04: the Markov parameters 1/k! are realized by the approximant of exp, read backwards.

    Source: as above. With x = 1/z, sum z^-k/k! = exp(x), and the realization of the first 2n
    terms is the diagonal approximant; its next term is off by the classical leading error.
    """
    terms = [Fraction(1, factorial(k)) for k in range(2 * degree + 2)]
    parameters = np.array([[[t]] for t in terms[:-1]], dtype=object)
    reduction = exact.from_markov_parameters(parameters, sampling_period=1)
    assert reduction.order == degree
    numerator = poly(*TABLE["pade"][degree - 1])
    denominator = poly(*(c * (-1) ** i for i, c in enumerate(numerator)))
    assert_transfer(exact.transfer_matrix(reduction.model), [[(numerator, denominator)]])
    found = exact.markov_parameters(reduction.model, 2 * degree + 2)[-1][0][0]
    n = degree
    assert found - terms[-1] == (-1) ** (n + 1) * Fraction(
        factorial(n) ** 2, factorial(2 * n) * factorial(2 * n + 1)
    )


# ----------------------------------------------------------------- two masses and a spring


def masses(m1: Any, m2: Any, k: Any, forces: tuple[Any, Any], outputs: Any) -> Realization:
    """Two masses and a spring: positions, then speeds."""
    m1, m2, k, f1, f2 = (Fraction(v) for v in (m1, m2, k, *forces))
    A = matrix([[0, 0, 1, 0], [0, 0, 0, 1], [-k / m1, k / m1, 0, 0], [k / m2, -k / m2, 0, 0]])
    return model(A, column(0, 0, f1 / m1, f2 / m2), outputs)


MASSES = [("1", "1", "1"), ("2", "3/5", "7"), ("0.1", "12", "250")]


@pytest.mark.parametrize(("m1", "m2", "k"), MASSES)
@pytest.mark.parametrize("case", ["first", "both", "rigid", "flexible"])
def test_two_masses(case: str, m1: str, m2: str, k: str, face: ModuleType) -> None:
    """T-05: two forces lose a mode exactly when f1 + f2 = 0 or f1/m1 = f2/m2.

    Source: Wie and Bernstein 1992; that pushing equal masses equally hides the oscillation is
    common knowledge. Memory; recomputed.
    """
    a, b, c = Fraction(m1), Fraction(m2), Fraction(k)
    f1, f2 = {
        "first": (Fraction(1), Fraction(0)),
        "both": (Fraction(2), Fraction(-1, 3)),
        "rigid": (Fraction(3, 2), Fraction(-3, 2)),
        "flexible": (a, b),
    }[case]
    system = masses(m1, m2, k, (f1, f2), identity(4))
    wanted = -(c**2) * (f1 + f2) ** 2 * (f1 * b - f2 * a) ** 2 / (a**4 * b**4)
    assert determinant(controllability_matrix(system)) == wanted
    dimension = face.staircase(system).dimension
    assert dimension == (4 if case in ("first", "both") else 2)
    assert face.minimal(system).order == dimension
    if face is exact and dimension == 2:
        hidden = exact.kalman_parts(system).polynomials[UNCONTROLLABLE_OBSERVABLE]
        # The rigid mode is a double integrator, the flexible one an oscillation.
        assert hidden == (poly(1, 0, 0) if case == "rigid" else poly(1, 0, c / a + c / b))


@pytest.mark.parametrize(("m1", "m2", "k"), MASSES)
def test_two_masses_that_are_not_seen(m1: str, m2: str, k: str, face: ModuleType) -> None:
    """T-05: x1 - x2 hides the rigid mode, m1 x1 + m2 x2 the flexible one, whatever the values.

    Source: as above; and from force 1 to x2, k/(s^2 (m1 m2 s^2 + k (m1 + m2))).
    """
    a, b, c = Fraction(m1), Fraction(m2), Fraction(k)
    for outputs in (row(1, -1, 0, 0), row(a, b, 0, 0)):
        system = masses(m1, m2, k, (1, 0), outputs)
        assert face.staircase(system, side="output").dimension == 2
        assert face.minimal(system).order == 2
    system = masses(m1, m2, k, (1, 0), row(0, 1, 0, 0))
    denominator = poly(a * b, 0, c * (a + b), 0, 0)
    assert_transfer(face.transfer_matrix(system), [[((c,), denominator)]], proved=face is exact)


@pytest.mark.parametrize(
    ("m1", "m2", "k", "b1", "b2"), [(1, 1, 1, 1, 1), (2, "3/5", 7, "1/4", 3), (1, 5, 2, 0, "1/9")]
)
def test_two_damped_masses(m1: Any, m2: Any, k: Any, b1: Any, b2: Any) -> None:
    """T-06: with dampers to ground, force on mass 1 and output x1.

    Source: answer in a physics help forum of 2014. Published; recomputed.
    """
    m1, m2, k, b1, b2 = (Fraction(v) for v in (m1, m2, k, b1, b2))
    A = matrix(
        [
            [0, 0, 1, 0],
            [0, 0, 0, 1],
            [-k / m1, k / m1, -b1 / m1, 0],
            [k / m2, -k / m2, 0, -b2 / m2],
        ]
    )
    system = model(A, column(0, 0, 1 / m1, 0), row(1, 0, 0, 0))
    assert abs(determinant(controllability_matrix(system))) == k**2 / (m1**4 * m2**2)
    wanted = (
        (m2, b2, k),
        (m1 * m2, m2 * b1 + m1 * b2, k * (m1 + m2) + b1 * b2, k * (b1 + b2), 0),
    )
    for face in (exact, floating):
        assert_transfer(face.transfer_matrix(system), [[wanted]])
        assert face.minimal(system).order == 4


# ----------------------------------------------------------------------- pendulums and loads


def two_pendulums(M: Any, m1: Any, m2: Any, l1: Any, l2: Any, g: Any, out: Any) -> Realization:
    """Two pendulums on one cart, standing up: angle and rate of each."""
    M, m1, m2, l1, l2, g = (Fraction(v) for v in (M, m1, m2, l1, l2, g))
    A = matrix(
        [
            [0, 1, 0, 0],
            [(1 + m1 / M) * g / l1, 0, m2 * g / (M * l1), 0],
            [0, 0, 0, 1],
            [m1 * g / (M * l2), 0, (1 + m2 / M) * g / l2, 0],
        ]
    )
    return model(A, column(0, -1 / (M * l1), 0, -1 / (M * l2)), out)


PENDULUMS = [(10, 1, 1, 1, 2, "9.81"), (1, 2, "1/3", "1/2", 3, 10), (3, "1/5", 4, 1, "0.99", 10)]


@pytest.mark.parametrize(("M", "m1", "m2", "l1", "l2", "g"), PENDULUMS)
def test_two_pendulums(M: Any, m1: Any, m2: Any, l1: Any, l2: Any, g: Any) -> None:
    """T-07: lost exactly at equal lengths, whatever the masses; two states then go at once.

    Source: Kailath 1980, Linear Systems; folklore. Memory; recomputed.
    """
    M, m1, m2, l1, l2, g = (Fraction(v) for v in (M, m1, m2, l1, l2, g))
    first, difference = row(1, 0, 0, 0), row(1, 0, -1, 0)
    system = two_pendulums(M, m1, m2, l1, l2, g, first)
    reached = abs(determinant(controllability_matrix(system)))
    assert reached == g**2 * (l1 - l2) ** 2 / (M**4 * l1**4 * l2**4)
    seen = abs(determinant(controllability_matrix(system.dual())))
    assert seen == g**2 * m2**2 / (M**2 * l1**2)
    other = two_pendulums(M, m1, m2, l1, l2, g, difference)
    seen = abs(determinant(controllability_matrix(other.dual())))
    assert seen == g**2 * (l1 - l2) ** 2 * (M + m1 + m2) ** 2 / (M**2 * l1**2 * l2**2)
    for face in (exact, floating):
        assert face.staircase(system).dimension == 4
        assert face.minimal(system).order == 4
        equal = two_pendulums(M, m1, m2, l1, l1, g, first)
        assert face.staircase(equal).dimension == 2
        assert face.staircase(equal, side="output").dimension == 4
        assert face.minimal(equal).order == 2
    hidden = exact.kalman_parts(equal).polynomials[UNCONTROLLABLE_OBSERVABLE]
    assert hidden == poly(1, 0, -g / l1)


@pytest.mark.parametrize(("M", "m1", "m2", "l1", "l2", "g"), PENDULUMS)
def test_crane_with_two_loads(M: Any, m1: Any, m2: Any, l1: Any, l2: Any, g: Any) -> None:
    """T-08: the determinant -g^6 (l1 - l2)^2/(M^6 l1^6 l2^6).

    Source: a public notebook (the model was read, the determinant is ours). Published (data);
    recomputed.
    """
    M, m1, m2, l1, l2, g = (Fraction(v) for v in (M, m1, m2, l1, l2, g))

    def crane(l1: Fraction, l2: Fraction) -> Realization:
        A = matrix(
            [
                [0, 1, 0, 0, 0, 0],
                [0, 0, -m1 * g / M, 0, -m2 * g / M, 0],
                [0, 0, 0, 1, 0, 0],
                [0, 0, -(M + m1) * g / (M * l1), 0, -m2 * g / (M * l1), 0],
                [0, 0, 0, 0, 0, 1],
                [0, 0, -m1 * g / (M * l2), 0, -(M + m2) * g / (M * l2), 0],
            ]
        )
        return model(A, column(0, 1 / M, 0, 1 / (M * l1), 0, 1 / (M * l2)), unit(6, 1).T)

    wanted = -(g**6) * (l1 - l2) ** 2 / (M**6 * l1**6 * l2**6)
    assert determinant(controllability_matrix(crane(l1, l2))) == wanted
    for face in (exact, floating):
        assert face.staircase(crane(l1, l2)).dimension == 6
        assert face.staircase(crane(l1, l1)).dimension == 4


# ------------------------------------------------------------------------------- networks


@pytest.mark.parametrize(
    ("R1", "R2", "C", "L", "order"),
    [
        pytest.param(1, 2, 3, 5, 2, id="general"),
        pytest.param("100", "47", "1e-6", "0.01", 2, id="real-values"),
        pytest.param(2, 3, "1/2", 3, 1, id="R1 R2 = L/C"),
        pytest.param(3, 3, "1/9", 1, 0, id="and R1 = R2"),
        pytest.param("1000", "1000", "1e-9", "1e-3", 0, id="constant resistance"),
    ],
)
def test_two_branches_on_one_source(R1: Any, R2: Any, C: Any, L: Any, order: int) -> None:
    """T-09: admittance of R1-L beside R2-C: order 2, 1 at R1 R2 = L/C, 0 if also R1 = R2.

    Source: constant-resistance network; Kalman 1963; Chen 1999. Memory; recomputed.
    """
    R1, R2, C, L = (Fraction(v) for v in (R1, R2, C, L))
    system = model(
        diagonal(-R1 / L, -1 / (R2 * C)), column(1 / L, 1 / (R2 * C)), row(1, -1 / R2), [[1 / R2]]
    )
    loss = R1 * R2 * C - L
    assert abs(determinant(controllability_matrix(system))) == abs(loss) / (C**2 * L**2 * R2**2)
    seen = abs(determinant(controllability_matrix(system.dual())))
    assert seen == abs(loss) / (C * L * R2**2)
    for face in (exact, floating):
        assert face.minimal(system).order == order
    reduced = exact.minimal(system).model
    if order == 0:
        assert reduced.D.tolist() == [[1 / R1]]
    elif order == 1:
        wanted = ((R1 * C, 1), (R1 * R2 * C, R1))
        assert_transfer(exact.transfer_matrix(reduced), [[wanted]])


def bridge(R1: Any, R2: Any, R3: Any, R4: Any, C: Any) -> Realization:
    """Four arms, a capacitor as detector; the output is its voltage."""
    R1, R2, R3, R4, C = (Fraction(v) for v in (R1, R2, R3, R4, C))
    # Each half of the bridge, seen from the capacitor, is a source behind its parallel resistance.
    resistance = R1 * R2 / (R1 + R2) + R3 * R4 / (R3 + R4)
    source = R2 / (R1 + R2) - R4 / (R3 + R4)
    return model([[-1 / (resistance * C)]], [[source / (resistance * C)]], [[1]])


def test_bridge(face: ModuleType) -> None:
    """T-10: the capacitor is not reached exactly at balance, R1 R4 = R2 R3.

    Source: Kalman, Gilbert; Chen 1999, figure 6.1. Memory; recomputed.
    """
    for arms in product((1, 2, 3), repeat=4):
        R1, R2, R3, R4 = arms
        balanced = R1 * R4 == R2 * R3
        system = bridge(*arms, "1/7")
        assert face.staircase(system).dimension == (0 if balanced else 1), arms
        assert face.minimal(system).order == (0 if balanced else 1), arms


@pytest.mark.parametrize(
    ("R", "R1", "C1", "R2", "C2"),
    [
        pytest.param(1, 1, 1, 2, 3, id="general"),
        pytest.param("1/3", 5, 2, "7/2", 1, id="fractions"),
        pytest.param(1, 2, 3, 3, 2, id="balanced"),
        pytest.param(10, "1/2", 4, 4, "1/2", id="balanced fractions"),
        pytest.param(5, 1, 1, 1, 1, id="twins"),
    ],
)
def test_bridged_sections(R: Any, R1: Any, C1: Any, R2: Any, C2: Any) -> None:
    """T-11: two RC sections, bridged: at R1 C1 = R2 C2 one mode is lost on each side, and G = 0.

    Source: Robinson and Robinson 1971, An instructive example on controllability and
    observability, IEEE Transactions on Education (that it uses a balanced bridge was read, the
    circuit is from memory). Memory; recomputed.
    """
    R, R1, C1, R2, C2 = (Fraction(v) for v in (R, R1, C1, R2, C2))
    A = [
        [-(1 / R1 + 1 / R) / C1, 1 / (R * C1)],
        [1 / (R * C2), -(1 / R2 + 1 / R) / C2],
    ]
    system = model(A, column(1 / (R1 * C1), 1 / (R2 * C2)), row(1, -1))
    loss = R1 * C1 - R2 * C2
    reached = abs(determinant(controllability_matrix(system)))
    assert reached == abs(loss) * (R + R1 + R2) / (C1**2 * C2**2 * R * R1**2 * R2**2)
    seen = abs(determinant(controllability_matrix(system.dual())))
    assert seen == abs(loss) / (C1 * C2 * R1 * R2)
    wanted = (
        (-R * loss, 0),
        (
            R * R1 * R2 * C1 * C2,
            R * R1 * C1 + R1 * R2 * C1 + R * R2 * C2 + R1 * R2 * C2,
            R + R1 + R2,
        ),
    )
    for face in (exact, floating):
        assert_transfer(face.transfer_matrix(system), [[wanted]])
        assert face.minimal(system).order == (2 if loss else 0)
        parts = face.kalman_parts(system).dimensions
        lost = 0 if loss else 1
        assert parts[CONTROLLABLE_UNOBSERVABLE] == lost
        assert parts[UNCONTROLLABLE_OBSERVABLE] == lost
        assert parts[UNCONTROLLABLE_UNOBSERVABLE] == 0


@pytest.mark.parametrize(
    ("R1", "C1", "R2", "C2"), [(1, 1, 2, 1), (2, 3, 3, 2), (1, "1/3", 1, "1/3"), (5, 1, 1, "4.99")]
)
def test_two_sections_on_one_source(R1: Any, C1: Any, R2: Any, C2: Any) -> None:
    """T-12: det = -(R1 C1 - R2 C2)/(R1 C1 R2 C2)^2: equal time constants hide one state.

    Source: classical. Common practice; recomputed.
    """
    t1, t2 = Fraction(R1) * Fraction(C1), Fraction(R2) * Fraction(C2)
    system = model(diagonal(-1 / t1, -1 / t2), column(1 / t1, 1 / t2), row(1, 1))
    assert abs(determinant(controllability_matrix(system))) == abs(t1 - t2) / (t1 * t2) ** 2
    for face in (exact, floating):
        assert face.staircase(system).dimension == (1 if t1 == t2 else 2)
    reduced = exact.minimal(system).model
    wanted = with_roots(-1 / t1) if t1 == t2 else with_roots(-1 / t1, -1 / t2)
    assert characteristic_polynomial(reduced.A) == wanted
    parts = exact.kalman_parts(system).polynomials
    assert parts[CONTROLLABLE_OBSERVABLE] == wanted
    assert parts[UNCONTROLLABLE_UNOBSERVABLE] == (with_roots(-1 / t1) if t1 == t2 else ONE)
