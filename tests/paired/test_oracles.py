"""General-purpose libraries as independent judges, over seeded models.

SymPy, FLINT's own matrices and polynomials, mpmath and SciPy's conversions share nothing with
the library but, in FLINT's case, the number types.
"""

from __future__ import annotations

from fractions import Fraction
from types import ModuleType
from typing import Any

import flint
import mpmath
import numpy as np
import pytest
import scipy.signal
import sympy
from sympy.polys.matrices import DomainMatrix

from realize import (
    Realization,
    TransferMatrix,
    as_realization,
    as_transfer_matrix,
    exact,
    floating,
    polynomials,
)
from tests.helpers import (
    CONTROLLABLE_OBSERVABLE,
    PARTS,
    Polynomial,
    controllability_matrix,
    strip,
    times,
)
from tests.strategies import FACTORS, Planted, plant

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")

SEEDS = range(12)

s = sympy.Symbol("s")


def generated(seed: int, *, most: int = 2) -> Planted:
    """A planted model in general coordinates."""
    rng = np.random.default_rng([seed, 1])
    chain = {
        part: tuple(
            FACTORS[int(i)] for i in rng.integers(0, len(FACTORS), rng.integers(0, most + 1))
        )
        for part in PARTS
    }
    return plant(
        [chain],
        rng=rng,
        more_inputs=int(rng.integers(0, 2)),
        more_outputs=int(rng.integers(0, 2)),
        steps=int(rng.integers(0, 10)),
        largest=2,
    )


def to_sympy(array: np.ndarray) -> DomainMatrix:
    """The same matrix over the rationals of SymPy."""
    rows = [[sympy.QQ(v.numerator, v.denominator) for v in line] for line in array.tolist()]
    return DomainMatrix(rows, array.shape, sympy.QQ)


def to_flint(array: np.ndarray) -> flint.fmpq_mat:
    """The same matrix over the rationals of FLINT."""
    entries = [flint.fmpq(v.numerator, v.denominator) for v in array.ravel().tolist()]
    return flint.fmpq_mat(*array.shape, entries)


def hankel(system: Realization, count: int) -> np.ndarray:
    """The block Hankel matrix of the Markov parameters, by definition."""
    C, block = system.C, system.B
    values = []
    for _ in range(2 * count):
        values.append(C @ block)
        block = system.A @ block
    return np.vstack([np.hstack(values[i : i + count]) for i in range(count)])


@pytest.mark.parametrize("seed", SEEDS)
def test_orders_by_sympy(seed: int) -> None:
    """The reachable dimension and the order are ranks of SymPy's matrices."""
    system = generated(seed).model
    if system.order == 0:
        assert exact.minimal(system).order == 0
        return
    reached = controllability_matrix(system.A, system.B)
    assert exact.staircase(system).dimension == to_sympy(reached).rank()
    seen = controllability_matrix(system.A.T, system.C.T)
    assert exact.staircase(system, side="output").dimension == to_sympy(seen).rank()
    assert exact.minimal(system).order == to_sympy(hankel(system, system.order)).rank()


@pytest.mark.parametrize("seed", SEEDS)
def test_orders_by_flint(seed: int) -> None:
    """The order is the rank of FLINT's Hankel matrix, on larger models too."""
    case = generated(seed, most=4)
    system = case.model
    if system.order == 0:
        assert exact.minimal(system).order == 0
        return
    wanted = to_flint(hankel(system, system.order)).rank()
    assert case.order == wanted
    assert exact.minimal(system).order == wanted


@pytest.mark.parametrize("seed", SEEDS)
def test_characteristic_polynomial_by_flint(seed: int) -> None:
    """The four polynomials multiply to FLINT's characteristic polynomial of A."""
    system = generated(seed, most=3).model
    if system.order == 0:
        return
    found = exact.kalman_parts(system).polynomials
    coefficients = to_flint(system.A).charpoly().coeffs()
    wanted = tuple(Fraction(int(c.p), int(c.q)) for c in reversed(coefficients))
    assert times(*found.values()) == wanted


def sympy_transfer(system: Realization) -> list[list[tuple[Polynomial, Polynomial]]]:
    """C (sI - A)^-1 B + D in lowest terms, by SymPy's polynomial matrices."""
    size = system.order
    ring = sympy.QQ[s]
    pencil = to_sympy(-system.A).convert_to(ring) + DomainMatrix.eye(size, ring) * ring.from_sympy(
        s
    )
    inverse, denominator = pencil.inv_den()
    product = to_sympy(system.C).convert_to(ring) * inverse * to_sympy(system.B).convert_to(ring)
    below = sympy.Poly(ring.to_sympy(denominator), s, domain="QQ")
    out = []
    for i in range(system.output_count):
        line = []
        for j in range(system.input_count):
            above = sympy.Poly(ring.to_sympy(product[i, j].element), s, domain="QQ")
            d = system.D[i, j]
            above += sympy.Rational(d.numerator, d.denominator) * below
            line.append(lowest(above, below))
        out.append(line)
    return out


def lowest(above: sympy.Poly, below: sympy.Poly) -> tuple[Polynomial, Polynomial]:
    """Numerator and monic denominator without their common factor, by SymPy."""
    common = above.gcd(below)
    above, below = above.quo(common), below.quo(common)
    lead = below.LC()
    return from_sympy(above / lead), from_sympy(below / lead)


def from_sympy(p: Any) -> Polynomial:
    """Coefficients of a SymPy polynomial as fractions."""
    coefficients = sympy.Poly(p, s, domain="QQ").all_coeffs()
    return strip(Fraction(int(c.p), int(c.q)) for c in coefficients)


@pytest.mark.parametrize("seed", SEEDS)
def test_transfer_matrices_by_sympy(seed: int) -> None:
    """The transfer matrix in lowest terms is SymPy's, before and after the reduction."""
    system = generated(seed, most=1).model
    if system.order == 0:
        return
    wanted = sympy_transfer(system)
    for source in (system, exact.minimal(system).model):
        coprime = exact.cancel(exact.transfer_matrix(source)).transfer
        for i, line in enumerate(wanted):
            for j, (numerator, denominator) in enumerate(line):
                found = coprime.denominators[i][j]
                assert tuple(c / found[0] for c in found) == denominator
                assert tuple(c / found[0] for c in coprime.numerators[i][j]) == numerator


def random_fraction(seed: int) -> tuple[Polynomial, Polynomial]:
    """A proper fraction with a common factor of random degree and rational coefficients."""
    rng = np.random.default_rng([seed, 2])

    def draw(degree: int) -> Polynomial:
        values = [
            Fraction(int(rng.integers(-9, 10)), int(rng.integers(1, 6))) for _ in range(degree)
        ]
        return strip([1, *values])

    common, extra = draw(int(rng.integers(0, 5))), draw(int(rng.integers(1, 5)))
    return times(draw(len(extra) - 2), common), times(extra, common)


def to_sympy_poly(p: Polynomial) -> sympy.Poly:
    """The same polynomial in SymPy."""
    return sympy.Poly([sympy.Rational(c.numerator, c.denominator) for c in p], s, domain="QQ")


def to_flint_poly(p: Polynomial) -> flint.fmpq_poly:
    """The same polynomial in FLINT."""
    return flint.fmpq_poly([flint.fmpq(c.numerator, c.denominator) for c in reversed(p)])


@pytest.mark.parametrize("seed", range(25))
def test_common_divisors_by_sympy_and_flint(seed: int) -> None:
    """What cancels is the monic gcd of SymPy and of FLINT; the rest is SymPy's lowest terms."""
    numerator, denominator = random_fraction(seed)
    found = exact.cancel(TransferMatrix(numerator, denominator))
    assert found.common == from_sympy(to_sympy_poly(numerator).gcd(to_sympy_poly(denominator)))
    by_flint = to_flint_poly(numerator).gcd(to_flint_poly(denominator)).coeffs()
    assert found.common == tuple(Fraction(int(c.p), int(c.q)) for c in reversed(by_flint))
    above, below = lowest(to_sympy_poly(numerator), to_sympy_poly(denominator))
    lead = found.transfer.denominators[0][0][0]
    assert tuple(c / lead for c in found.transfer.numerators[0][0]) == above
    assert tuple(c / lead for c in found.transfer.denominators[0][0]) == below


@pytest.mark.parametrize("seed", range(25))
def test_factors_by_sympy(seed: int) -> None:
    """The irreducible factors and their multiplicities are SymPy's."""
    numerator, denominator = random_fraction(seed)
    p = times(numerator, denominator, denominator)
    wanted: dict[Polynomial, int] = {}
    for factor, multiplicity in to_sympy_poly(p).factor_list()[1]:
        wanted[from_sympy(factor.monic())] = multiplicity
    assert dict(polynomials.factor(p)) == wanted


@pytest.mark.parametrize("seed", range(25))
def test_roots_by_mpmath(seed: int) -> None:
    """Every root lies within its radius of a root that mpmath finds with 60 digits."""
    _, denominator = random_fraction(seed)
    # mpmath is slow to converge on multiple roots: let it see each root once.
    once = times(*(f for f, _ in polynomials.factor(denominator)))
    found = polynomials.roots(denominator)
    assert sum(root.multiplicity for root in found) == len(denominator) - 1
    with mpmath.workdps(60):
        coefficients = [mpmath.mpf(c.numerator) / c.denominator for c in once]
        judged = mpmath.polyroots(coefficients, maxsteps=500, extraprec=400)
        assert len(judged) == len(found)
        left = list(judged)
        for root in found:
            value = mpmath.mpc(root.value.real, root.value.imag)
            nearest = min(left, key=lambda z: abs(z - value))
            assert abs(nearest - value) <= mpmath.mpf(root.radius) + mpmath.mpf(10) ** -50
            left.remove(nearest)


@pytest.mark.parametrize("seed", SEEDS)
def test_modes_by_mpmath(seed: int) -> None:
    """The visible polynomial vanishes at the eigenvalues that mpmath finds for the reduced A."""
    system = exact.minimal(generated(seed).model).model
    if system.order == 0:
        return
    polynomial = exact.kalman_parts(system).polynomials[CONTROLLABLE_OBSERVABLE]
    with mpmath.workdps(80):
        A = mpmath.matrix(
            [[mpmath.mpf(v.numerator) / v.denominator for v in line] for line in system.A.tolist()]
        )
        values, _ = mpmath.eig(A)
        found = [mpmath.mpf(1)]
        for value in values:
            found = [a - value * b for a, b in zip([*found, 0], [0, *found], strict=True)]
        for got, wanted in zip(found, polynomial, strict=True):
            exact_value = mpmath.mpf(wanted.numerator) / wanted.denominator
            assert abs(got - exact_value) <= mpmath.mpf(10) ** -15 * (1 + abs(exact_value))


def responses(system: Any, points: np.ndarray) -> np.ndarray:
    """C (zI - A)^-1 B + D by numpy alone."""
    A, B, C, D = (np.asarray(m, dtype=float) for m in system)
    eye = np.eye(A.shape[0])
    return np.array([C @ np.linalg.solve(z * eye - A, B) + D for z in points])


POINTS = np.array([0.3 + 0.8j, 1.7 - 2.2j, -3.1 + 0.4j, 6.0 + 5.0j])


@pytest.mark.parametrize("seed", SEEDS)
def test_state_space_to_fractions_by_scipy(seed: int) -> None:
    """The transfer matrix of a model with one input agrees with SciPy's ss2tf, in value."""
    system = generated(seed).model
    if system.order == 0:
        return
    one = Realization(system.A, system.B[:, :1], system.C, system.D[:, :1])
    numerators, denominator = scipy.signal.ss2tf(*(m.astype(float) for m in one.matrices()))
    found = [face.transfer_matrix(one) for face in (exact, floating)]
    for z in POINTS:
        judged = np.array([np.polyval(row, z) for row in np.atleast_2d(numerators)])
        judged = judged / np.polyval(denominator, z)
        for transfer in found:
            values = np.asarray(transfer.evaluate(z)).reshape(-1)
            assert values == pytest.approx(judged, rel=1e-7, abs=1e-7 * (1 + np.abs(judged).max()))


@pytest.mark.parametrize("seed", SEEDS)
@pytest.mark.parametrize("side", ["input", "output"])
def test_fractions_to_state_space_by_scipy(seed: int, side: str, face: ModuleType) -> None:
    """Companion forms have the response and the order of SciPy's tf2ss."""
    numerator, denominator = random_fraction(seed)
    above, below = ([float(c) for c in p] for p in (numerator, denominator))
    judged = scipy.signal.tf2ss(above, below)
    form = face.companion(TransferMatrix(numerator, denominator), side=side)
    assert form.order == judged[0].shape[0] == len(denominator) - 1
    assert responses(form.matrices(), POINTS) == pytest.approx(
        responses(judged, POINTS), rel=1e-9, abs=1e-9
    )


ZEROS = np.array([-3.0])
POLES = np.array([-1.0, -2.0 + 1.0j, -2.0 - 1.0j])


def scipy_systems() -> list[Any]:
    """Systems as SciPy users hold them, continuous and discrete."""
    found = []
    for more in ({}, {"dt": 0.5}):
        zpk = scipy.signal.ZerosPolesGain(ZEROS, POLES, 4.0, **more)
        found.append(pytest.param(zpk, id=f"zpk {more}"))
        found.append(pytest.param(zpk.to_tf(), id=f"tf {more}"))
        found.append(pytest.param(zpk.to_ss(), id=f"ss {more}"))
    return found


@pytest.mark.parametrize("system", scipy_systems())
def test_scipy_systems_are_taken(system: Any) -> None:
    """A SciPy system is taken in either form, with its response, order and sampling period."""
    judged = system.to_ss()
    found = as_realization(system)
    assert found.sampling_period == system.dt
    assert found.order == 3
    assert responses(found.matrices(), POINTS) == pytest.approx(
        responses((judged.A, judged.B, judged.C, judged.D), POINTS), rel=1e-9
    )
    transfer = as_transfer_matrix(system)
    assert transfer.sampling_period == system.dt
    values = [transfer.evaluate(z)[0, 0] for z in POINTS]
    assert values == pytest.approx([4.0 * np.prod(z - ZEROS) / np.prod(z - POLES) for z in POINTS])


@pytest.mark.parametrize("seed", SEEDS)
def test_impulse_responses_by_scipy(seed: int, face: ModuleType) -> None:
    """Markov parameters of a discrete model are SciPy's impulse response."""
    numerator, denominator = random_fraction(seed)
    above, below = ([float(c) for c in p] for p in (numerator, denominator))
    _, (judged,) = scipy.signal.dimpulse((above, below, 1.0), n=8)
    form = face.companion(TransferMatrix(numerator, denominator, sampling_period=1))
    found = np.asarray(face.markov_parameters(form, 8), dtype=float).reshape(-1)
    scale = np.abs(judged).max()
    assert found == pytest.approx(judged.reshape(-1), rel=1e-9, abs=1e-9 * scale)
