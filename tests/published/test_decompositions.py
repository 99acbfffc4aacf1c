"""Staircases, reachable and observable parts, and the four parts of worked examples."""

from fractions import Fraction
from math import gcd
from types import ModuleType
from typing import Any

import numpy as np
import pytest

from realize import HiddenInstabilityWarning, Realization, exact, floating, multiprecision
from tests.helpers import (
    CONTROLLABLE_OBSERVABLE,
    CONTROLLABLE_UNOBSERVABLE,
    UNCONTROLLABLE_OBSERVABLE,
    UNCONTROLLABLE_UNOBSERVABLE,
    characteristic_polynomial,
    identity,
    rank,
    times,
)
from tests.published.tools import (
    assert_transfer,
    column,
    companion_matrix,
    controllability_matrix,
    determinant,
    diagonal,
    matrix,
    model,
    poly,
    row,
    same_span,
    shift,
    unit,
    with_roots,
)

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")

BOTH = CONTROLLABLE_OBSERVABLE
UNSEEN = CONTROLLABLE_UNOBSERVABLE
UNREACHED = UNCONTROLLABLE_OBSERVABLE
NEITHER = UNCONTROLLABLE_UNOBSERVABLE


def reached_polynomial(system: Realization) -> tuple[Any, Any]:
    """The characteristic polynomials of what the inputs do not reach, the outputs do not see."""
    parts = exact.kalman_parts(system).polynomials
    return times(parts[UNREACHED], parts[NEITHER]), times(parts[UNSEEN], parts[NEITHER])


SHARED_MODE = model([[1, 1, 0], [0, 1, 0], [0, 1, 1]], [[0, 1], [1, 0], [0, 1]], [[1, 1, 1]])

FOUR_PARTS = model(
    [[-4, -3, 0, -2], [6, 5, 0, 2], [4, 1, 1, -6], [-1, -1, 0, -3]],
    column(-1, 1, 2, 0),
    row(-3, -2, 0, 1),
)

TWO_INPUTS = model([[0, -1, 1], [1, -2, 1], [0, 1, -1]], [[1, 0], [1, 1], [1, 2]], row(0, 1, 0))

PENDULUM_A = [[0, 1, 0, 0], [0, 0, -1, 0], [0, 0, 0, 1], [0, 0, 5, 0]]


def satellite(speed: int, inputs: np.ndarray, outputs: np.ndarray) -> Realization:
    """A point mass on a circular orbit, linearised: radius, its rate, angle, its rate."""
    w = Fraction(speed)
    A = matrix([[0, 1, 0, 0], [3 * w * w, 0, 0, 2 * w], [0, 0, 0, 1], [0, -2 * w, 0, 0]])
    return model(A, inputs, outputs)


def test_mode_hidden_on_both_sides(face: ModuleType) -> None:
    """S-01: rank 2 of 3 in one stair, and a transfer matrix of order 2.

    Source: Chen 1999, Linear System Theory and Design, example 6.8; data and the rank of
    [A - I, B] read on a public page about the Hautus test. Published; recomputed.
    """
    stairs = face.staircase(SHARED_MODE)
    assert tuple(stairs.stairs) == (2,)
    assert stairs.dimension == 2
    assert face.staircase(SHARED_MODE, side="output").dimension == 2
    assert face.minimal(SHARED_MODE).order == 2
    assert_transfer(
        face.transfer_matrix(SHARED_MODE),
        [[((1, 1), (1, -2, 1)), ((2,), (1, -1))]],
        proved=face is exact,
    )


def test_mode_hidden_on_both_sides_polynomials() -> None:
    """S-01: the eigenvalue 1 is unreached and unseen, and it is one and the same state.

    Source: as above. Recomputed: the right vector (-1, 0, 1) of the unseen mode is not
    orthogonal to the left vector (-1, 0, 1) of the unreached one.
    """
    assert rank(np.hstack([SHARED_MODE.A - identity(3), SHARED_MODE.B])) == 2
    parts = exact.kalman_parts(SHARED_MODE)
    assert dict(parts.dimensions) == {BOTH: 2, UNSEEN: 0, UNREACHED: 0, NEITHER: 1}
    assert parts.polynomials[NEITHER] == with_roots(1)
    assert parts.polynomials[BOTH] == with_roots(1, 1)


def test_eigenvalue_reached_in_part(face: ModuleType) -> None:
    """S-02: an eigenvalue with one Jordan block of size 3, two copies reached and one not.

    Source: a thread of 2012 in a public mathematics collection (the rank 2 was read there).
    Published; recomputed.
    """
    system = model(
        [[-2, 3, 4, 1], [1, 6, 6, 3], [5, 6, 6, 4], [0, -17, -19, -8]],
        column(0, -1, 0, 1),
        identity(4),
    )
    found = face.staircase(system)
    assert tuple(found.stairs) == (1, 1)
    assert found.dimension == 2
    assert face.minimal(system).order == 2


def test_eigenvalue_reached_in_part_polynomials() -> None:
    """S-02: (s - 1)^3 (s + 1) in all, of which (s - 1)(s + 1) is not reached.

    Source: as above; polynomials and left vectors recomputed.
    """
    A = [[-2, 3, 4, 1], [1, 6, 6, 3], [5, 6, 6, 4], [0, -17, -19, -8]]
    system = model(A, column(0, -1, 0, 1), identity(4))
    assert controllability_matrix(system).tolist() == [
        [0, -2, -4, -6],
        [-1, -3, -5, -7],
        [0, -2, -4, -6],
        [1, 9, 17, 25],
    ]
    assert characteristic_polynomial(system.A) == with_roots(1, 1, 1, -1)
    unreached, unseen = reached_polynomial(system)
    assert unreached == with_roots(1, -1)
    assert unseen == poly(1)
    assert exact.kalman_parts(system).polynomials[BOTH] == with_roots(1, 1)
    # The left vectors, against the staircase's own reachable space.
    stairs = exact.staircase(system)
    reached = stairs.transformation[:, : stairs.dimension]
    assert not (row(2, 1, 1, 1) @ reached).any()
    assert not (row(8, 3, 1, 3) @ reached).any()


def test_four_parts_of_one_state_each(face: ModuleType) -> None:
    """S-03: one state in each of the four parts, and 1/(s + 1) for a transfer function.

    Source: worked example of a course on control of networked systems, Politecnico di Bari (the
    spaces were read, the eigenvalues recomputed). Published; recomputed.
    """
    parts = face.kalman_parts(FOUR_PARTS)
    assert dict(parts.dimensions) == {BOTH: 1, UNSEEN: 1, UNREACHED: 1, NEITHER: 1}
    assert face.minimal(FOUR_PARTS).order == 1
    assert_transfer(face.transfer_matrix(FOUR_PARTS), [[((1,), (1, 1))]], proved=face is exact)
    assert_transfer(
        face.transfer_matrix(face.minimal(FOUR_PARTS).model),
        [[((1,), (1, 1))]],
        proved=face is exact,
    )


def test_four_parts_polynomials_and_spaces() -> None:
    """S-03: 2, 1, -1, -3, each in its part; the printed spaces are those of the coordinates.

    Source: as above. The determinant of the system matrix, (s - 2)(s - 1)(s + 3), is the
    product of the three hidden polynomials, since the numerator is 1.
    """
    parts = exact.kalman_parts(FOUR_PARTS)
    assert parts.polynomials[BOTH] == with_roots(-1)
    assert parts.polynomials[UNSEEN] == with_roots(1)
    assert parts.polynomials[UNREACHED] == with_roots(2)
    assert parts.polynomials[NEITHER] == with_roots(-3)
    hidden = times(
        parts.polynomials[UNSEEN], parts.polynomials[UNREACHED], parts.polynomials[NEITHER]
    )
    assert hidden == with_roots(2, 1, -3)
    T = parts.transformation
    e3 = column(0, 0, 1, 0)
    assert same_span(T[:, :1], e3)
    assert same_span(T[:, :2], np.hstack([e3, column(1, -1, 0, 0)]))
    assert same_span(T[:, [0, 2]], np.hstack([e3, column(1, -1, 0, 1)]))


def test_two_inputs_that_reach_two_states(face: ModuleType) -> None:
    """S-04 and D-11: stairs (2), observability stairs (1, 1), minimal order 1.

    Source: Antsaklis and Michel 2006, Linear Systems. Memory; recomputed.
    """
    stairs = face.staircase(TWO_INPUTS)
    assert tuple(stairs.stairs) == (2,)
    seen = face.staircase(TWO_INPUTS, side="output")
    assert tuple(seen.stairs) == (1, 1)
    assert face.minimal(TWO_INPUTS).order == 1
    assert_transfer(
        face.transfer_matrix(TWO_INPUTS), [[((1,), (1, 0)), ((1,), (1, 0))]], proved=face is exact
    )


def test_two_inputs_that_reach_two_states_polynomials() -> None:
    """S-04 and D-11: -2 is not reached (left vector (1, -2, 1)), -1 is not seen.

    Source: as above. The distance to uncontrollability is exactly 0.
    """
    unreached, unseen = reached_polynomial(TWO_INPUTS)
    assert unreached == with_roots(-2)
    assert unseen == with_roots(-1)
    assert exact.kalman_parts(TWO_INPUTS).polynomials[BOTH] == with_roots(0)
    w = row(1, -2, 1)
    assert not (w @ (TWO_INPUTS.A + 2 * identity(3))).any()
    stairs = exact.staircase(TWO_INPUTS)
    assert not (w @ stairs.transformation[:, :2]).any()


def test_inverted_pendulum(face: ModuleType) -> None:
    """S-05: minimal of order 4, G = (s^2 - 3)/(s^2 (s^2 - 5)).

    Source: Chen 1999, example 6.2. Memory; recomputed.
    """
    system = model(PENDULUM_A, column(0, 1, 0, -2), row(1, 0, 0, 0))
    assert tuple(face.staircase(system).stairs) == (1, 1, 1, 1)
    assert face.minimal(system).order == 4
    assert_transfer(
        face.transfer_matrix(system), [[((1, 0, -3), (1, 0, -5, 0, 0))]], proved=face is exact
    )


def test_inverted_pendulum_determinant() -> None:
    """S-05: the controllability matrix and its determinant 36.

    Source: as above.
    """
    system = model(PENDULUM_A, column(0, 1, 0, -2), row(1, 0, 0, 0))
    K = controllability_matrix(system)
    assert K.tolist() == [[0, 1, 0, 2], [1, 0, 2, 0], [0, -2, 0, -10], [-2, 0, -10, 0]]
    assert determinant(K) == 36


@pytest.mark.parametrize(
    ("m", "M", "L", "g"),
    [(1, 10, 1, "9.81"), ("1/3", "5/2", "0.7", "9.80665"), (2, 1, 3, "1.62"), (0, 4, 2, 10)],
)
def test_pendulum_on_a_cart(m: Any, M: Any, L: Any, g: Any) -> None:
    """S-06: the determinant is g^2/(M^4 L^4), so no finite cart or length loses anything.

    Source: course notes on pendulums on carts. Published; recomputed.
    """
    m, M, L, g = (Fraction(value) for value in (m, M, L, g))
    A = matrix(
        [[0, 1, 0, 0], [0, 0, -m * g / M, 0], [0, 0, 0, 1], [0, 0, (M + m) * g / (M * L), 0]]
    )
    system = model(A, column(0, 1 / M, 0, -1 / (M * L)), row(1, 0, 0, 0))
    assert determinant(controllability_matrix(system)) == g**2 / (M**4 * L**4)
    assert exact.staircase(system).dimension == 4
    assert floating.staircase(system).dimension == 4


SATELLITE = [
    pytest.param((2, 4), (1, 3), (2, 2), (2, 2), 4, id="both-thrusters"),
    pytest.param((4,), (1, 3), (1, 1, 1, 1), (2, 2), 4, id="tangential-alone"),
    pytest.param((2,), (1, 3), (1, 1, 1), (2, 2), 3, id="radial-alone"),
    pytest.param((2, 4), (3,), (2, 2), (1, 1, 1, 1), 4, id="angle-alone"),
    pytest.param((2, 4), (1,), (2, 2), (1, 1, 1), 3, id="radius-alone"),
]


@pytest.mark.parametrize("speed", [1, 3])
@pytest.mark.parametrize(("inputs", "outputs", "stairs", "seen", "order"), SATELLITE)
def test_satellite(
    face: ModuleType,
    speed: int,
    inputs: tuple[int, ...],
    outputs: tuple[int, ...],
    stairs: tuple[int, ...],
    seen: tuple[int, ...],
    order: int,
) -> None:
    """S-07: which thruster may fail, and which sensor.

    Source: Brockett 1970, Finite Dimensional Linear Systems; Chen 1999, example 6.5; the
    question read in three course pages, the answers from memory. Memory; recomputed.
    """
    system = satellite(speed, unit(4, *inputs), unit(4, *outputs).T)
    assert tuple(face.staircase(system).stairs) == stairs
    assert tuple(face.staircase(system, side="output").stairs) == seen
    assert face.minimal(system).order == order


@pytest.mark.parametrize("speed", [1, 2])
def test_satellite_determinants_and_lost_modes(speed: int) -> None:
    """S-07: determinant -12 w^4 for the tangential thruster and for the angle; lost mode 0.

    Source: as above.
    """
    w = Fraction(speed)
    tangential = satellite(speed, unit(4, 4), unit(4, 1, 3).T)
    assert determinant(controllability_matrix(tangential)) == -12 * w**4
    angle = satellite(speed, unit(4, 2, 4), unit(4, 3).T)
    assert determinant(controllability_matrix(angle.dual())) == -12 * w**4
    radial = satellite(speed, unit(4, 2), identity(4))
    assert reached_polynomial(radial) == (with_roots(0), poly(1))
    radius = satellite(speed, identity(4), unit(4, 1).T)
    assert reached_polynomial(radius) == (poly(1), with_roots(0))
    # The left vector (2w, 0, 0, 1) of the mode that the radial thruster does not reach.
    found = exact.staircase(radial)
    assert not (row(2 * w, 0, 0, 1) @ found.transformation[:, :3]).any()


def test_satellite_transfer_matrix(face: ModuleType) -> None:
    """S-07: the transfer matrix at w = 1.

    Source: as above.
    """
    system = satellite(1, unit(4, 2, 4), unit(4, 1, 3).T)
    wanted = [
        [((1,), (1, 0, 1)), ((2,), (1, 0, 1, 0))],
        [((-2,), (1, 0, 1, 0)), ((1, 0, -3), (1, 0, 1, 0, 0))],
    ]
    assert_transfer(face.transfer_matrix(system), wanted, proved=face is exact)


def path_graph(size: int) -> np.ndarray:
    """Minus the Laplacian of a path."""
    A = [[0] * size for _ in range(size)]
    for i in range(size - 1):
        A[i][i] -= 1
        A[i + 1][i + 1] -= 1
        A[i][i + 1] += 1
        A[i + 1][i] += 1
    return matrix(A)


def odd_primes(size: int) -> list[int]:
    """The odd primes that divide a number."""
    return [
        p for p in range(3, size + 1, 2) if size % p == 0 and all(p % q for q in range(3, p, 2))
    ]


@pytest.mark.parametrize("size", range(2, 21))
def test_path_graph_node_rule(size: int) -> None:
    """S-08: a node reaches a path of n nodes unless (n-i) = (i-1) modulo an odd prime of n.

    Source: Parlangeli and Notarstefano, On the reachability and observability of path and
    cycle graphs, arXiv:1109.3556 (every node reaches it exactly when n is a power of two: read;
    the rule for one node: from memory). Published; recomputed.
    """
    A = path_graph(size)
    reaches = []
    for node in range(1, size + 1):
        found = exact.staircase(model(A, unit(size, node), row(*[1] * size)))
        rule = all((size - node - (node - 1)) % p for p in odd_primes(size))
        assert (found.dimension == size) is rule, node
        reaches.append(found.dimension == size)
    assert all(reaches) is (size & (size - 1) == 0)


@pytest.mark.parametrize(
    "ranks",
    [
        pytest.param((9, 8, 9, 9, 5, 9, 9, 8, 9), id="n=9"),
        pytest.param((15, 14, 13, 15, 14, 15, 15, 8, 15, 15, 14, 15, 13, 14, 15), id="n=15"),
    ],
)
def test_path_graph_ranks(face: ModuleType, ranks: tuple[int, ...]) -> None:
    """S-08: the rank reached from each node of paths with 9 and with 15 nodes.

    Source: as above; the table recomputed.
    """
    size = len(ranks)
    A = path_graph(size)
    found = tuple(
        face.staircase(model(A, unit(size, node), row(*[1] * size))).dimension
        for node in range(1, size + 1)
    )
    assert found == ranks


@pytest.mark.parametrize(("size", "node"), [(64, 23), (64, 64), (105, 1), (105, 53), (105, 2)])
def test_long_path_graphs(size: int, node: int) -> None:
    """S-08: paths of 64 nodes are reached from any node; of 3 x 5 x 7 nodes, by the mode count.

    Source: as above. The eigenvectors of the Laplacian are cos((2i-1) k pi/(2n)): mode k is
    not reached from node i exactly when (2i-1) k is an odd multiple of n (common knowledge).
    """
    missed = sum(
        1 for k in range(size) if (2 * node - 1) * k % size == 0 and (2 * node - 1) * k // size % 2
    )
    found = exact.staircase(model(path_graph(size), unit(size, node), row(*[1] * size)))
    assert found.dimension == size - missed


def cycle_graph(size: int) -> np.ndarray:
    """The Laplacian of a cycle."""
    A = [[0] * size for _ in range(size)]
    for i in range(size):
        j = (i + 1) % size
        A[i][i] += 1
        A[j][j] += 1
        A[i][j] -= 1
        A[j][i] -= 1
    return matrix(A)


@pytest.mark.parametrize(
    ("size", "ranks"),
    [
        pytest.param(6, (6, 6, 4, 6, 6), id="n=6"),
        pytest.param(9, (9, 9, 8, 9, 9, 8, 9, 9), id="n=9"),
    ],
)
def test_cycle_graph_ranks(face: ModuleType, size: int, ranks: tuple[int, ...]) -> None:
    """S-09: the rank reached from node 1 together with each other node.

    Source: Parlangeli and Notarstefano, as above. Published; recomputed.
    """
    A = cycle_graph(size)
    found = tuple(
        face.staircase(model(A, unit(size, 1, node), row(*[1] * size))).dimension
        for node in range(2, size + 1)
    )
    assert found == ranks


@pytest.mark.parametrize("size", range(3, 18))
def test_cycle_graph_needs_a_prime(size: int) -> None:
    """S-09: every pair of nodes reaches the cycle exactly when n is prime; one node never does.

    Source: as above. One pair stands for all with the same distance, by rotation.
    """
    A = cycle_graph(size)
    full = [
        exact.staircase(model(A, unit(size, 1, node), row(*[1] * size))).dimension == size
        for node in range(2, size + 1)
    ]
    assert all(full) is all(size % d for d in range(2, size))
    alone = exact.staircase(model(A, unit(size, 1), row(*[1] * size)))
    assert alone.dimension < size


def chebyshev_second_half(degree: int) -> tuple[Fraction, ...]:
    """U_degree(s/2), by its three-term recurrence: p_k+1 = s p_k - p_k-1."""
    previous, current = poly(0), poly(1)
    for _ in range(degree):
        longer = [*current, Fraction(0)]
        for i, value in enumerate(reversed(previous)):
            longer[len(longer) - 1 - i] -= value
        previous, current = current, poly(*longer)
    return current


@pytest.mark.parametrize("size", [*range(2, 15), 24])
def test_chain_fixed_at_both_ends(size: int) -> None:
    """S-10: a push at node j reaches n + 1 - gcd(j, n + 1); the rest is U_g-1(s/2).

    Source: follows from gcd(U_a-1, U_b-1) = U_gcd(a,b)-1. Common practice; recomputed.
    """
    A = shift(size) + shift(size).T
    for node in range(1, size + 1):
        common = gcd(node, size + 1)
        system = model(A, unit(size, node), unit(size, node).T)
        assert exact.staircase(system).dimension == size + 1 - common, node
        parts = exact.kalman_parts(system)
        assert parts.polynomials[NEITHER] == chebyshev_second_half(common - 1), node
        assert exact.minimal(system).order == size + 1 - common, node


@pytest.mark.parametrize("size", [5, 8, 11, 14])
def test_chain_fixed_at_both_ends_in_floats(size: int) -> None:
    """S-10 on the floating face: the same dimensions.

    Source: as above.
    """
    A = shift(size) + shift(size).T
    for node in range(1, size + 1):
        system = model(A, unit(size, node), unit(size, node).T)
        wanted = size + 1 - gcd(node, size + 1)
        assert floating.staircase(system).dimension == wanted, node
        assert floating.minimal(system).order == wanted, node


def test_numerical_rank_of_the_controllability_matrix_misleads(face: ModuleType) -> None:
    """D-04: A = diag(1, 1/2, ..., 2^-9), b of ones is controllable, and safely so.

    Source: Paige 1981, Properties of numerical algorithms related to computing controllability,
    IEEE Transactions on Automatic Control 26. Its smallest singular values, 0.712e-7, 0.364e-9
    and 0.613e-12, come from memory; recomputed. The distance to uncontrollability is 2^-10.
    """
    system = model(
        diagonal(*(Fraction(1, 2**k) for k in range(10))), column(*[1] * 10), row(*[1] * 10)
    )
    assert face.staircase(system).dimension == 10
    assert face.minimal(system).order == 10
    K = controllability_matrix(system)
    assert rank(K) == 10
    values = np.linalg.svd(K.astype(float), compute_uv=False)
    assert values[0] == pytest.approx(3.62983670113405, rel=1e-12)
    assert values[7] == pytest.approx(7.12469694396808e-8, rel=1e-6)
    assert values[8] == pytest.approx(3.64025562164081e-10, rel=1e-4)
    assert values[9] == pytest.approx(6.12894363020716e-13, rel=1e-2)


@pytest.mark.parametrize("inputs", ["last", "all"])
def test_sensitive_spectrum_is_still_controllable(face: ModuleType, inputs: str) -> None:
    """D-05: diagonal 20..1 with 20 above it: distances 0.1 and 0.3, so all 20 states are reached.

    Source: matrix from Wilkinson 1965, The Algebraic Eigenvalue Problem; values recomputed.
    """
    A = diagonal(*range(20, 0, -1)) + 20 * shift(20)
    B = unit(20, 20) if inputs == "last" else column(*[1] * 20)
    assert face.staircase(model(A, B, unit(20, 1).T)).dimension == 20


def test_two_masses_and_a_spring(face: ModuleType) -> None:
    """D-08: pushed on the first mass, both modes are reached.

    Source: Wie and Bernstein 1992, benchmark problems for robust control; distance to
    uncontrollability 0.333 recomputed.
    """
    A = [[0, 0, 1, 0], [0, 0, 0, 1], [-1, 1, 0, 0], [1, -1, 0, 0]]
    system = model(A, unit(4, 3), unit(4, 2).T)
    assert tuple(face.staircase(system).stairs) == (1, 1, 1, 1)
    assert_transfer(face.transfer_matrix(system), [[((1,), (1, 0, 2, 0, 0))]], proved=face is exact)


@pytest.mark.parametrize(
    "polynomial",
    [
        pytest.param(with_roots(*[-1] * 3), id="D-09 n=3"),
        pytest.param(with_roots(*[-1] * 5), id="D-09 n=5"),
        pytest.param(with_roots(*[-1] * 10), id="D-09 n=10"),
        pytest.param(with_roots(*range(1, 6)), id="D-10 n=5"),
        pytest.param(with_roots(*range(1, 11)), id="D-10 n=10"),
    ],
)
def test_companion_pairs_are_controllable(polynomial: tuple[Fraction, ...]) -> None:
    """D-09 and D-10: companion pairs of (s + 1)^n and (s - 1)...(s - n) reach every state.

    Source: form, Kenney and Laub 1988, Controllability and stability radii for companion form
    systems; the second family is ours, on Wilkinson's polynomial. The nearest uncontrollable
    pair of the last lies at 9.86e-8 (recomputed), still far above rounding.
    """
    size = len(polynomial) - 1
    system = model(companion_matrix(polynomial), unit(size, size), unit(size, 1).T)
    for face in (exact, floating):
        assert face.staircase(system).dimension == size
        assert face.minimal(system).order == size


@pytest.mark.parametrize("size", [8, 20, 40, 60])
def test_perfect_staircase(size: int) -> None:
    """X-01: all stairs are 1 and all couplings are 1, so both faces reach every state.

    Source: ours, not evidence from outside. The nearest uncontrollable pair is at most
    1/sqrt(1 + (4^(n-1) - 1)/3) away, 3e-18 at n = 60; exactly controllable for every n.
    """
    A = [[0] * size for _ in range(size)]
    for i in range(size):
        for j in range(i, size - 1):
            A[i][j] = -1
    for i in range(size - 1):
        A[i + 1][i] = 1
        A[i][size - 1] = 0
    A[size - 1][size - 1] = 0
    A[0][size - 1], A[1][size - 1] = 1, -1
    system = model(A, unit(size, 1), unit(size, size).T)
    for face in (exact, floating):
        assert tuple(face.staircase(system).stairs) == (1,) * size


@pytest.mark.filterwarnings("error")
@pytest.mark.parametrize(
    ("system", "word"),
    [
        pytest.param(SHARED_MODE, "unstable", id="S-01"),
        pytest.param(FOUR_PARTS, "unstable", id="S-03"),
        # 0 is a double eigenvalue of A with one eigenvector: the angle drifts away. A computed
        # one cannot be told from one that settles.
        pytest.param(
            satellite(1, unit(4, 2), identity(4)),
            {exact: "unstable", floating: "cannot tell", multiprecision: "cannot tell"},
            id="S-07",
        ),
        pytest.param(TWO_INPUTS, None, id="S-04"),
    ],
)
def test_alarm_about_a_hidden_mode(
    system: Realization, word: str | dict[ModuleType, str] | None, face: ModuleType
) -> None:
    """S-01, S-03, S-07: a hidden mode that does not settle is named; in S-04 all settle.

    Source: as above; the eigenvalues 1, then 2, 1 and -3, then 0, against -2 and -1.
    """
    if word is None:
        assert face.minimal(system).order == 1
    else:
        expected = word if isinstance(word, str) else word[face]
        with pytest.warns(HiddenInstabilityWarning, match=expected):
            face.minimal(system)
