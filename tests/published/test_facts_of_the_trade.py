"""Identities that every practitioner relies on, over generated models.

Source of all: common practice, no particular text.
"""

from fractions import Fraction
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize import Realization, TransferMatrix, exact, floating, polynomials
from tests.helpers import (
    CONTROLLABLE_OBSERVABLE,
    CONTROLLABLE_UNOBSERVABLE,
    ONE,
    PARTS,
    Polynomial,
    assert_same_transfer,
    change_coordinates,
    characteristic_polynomial,
    common_factor,
    identity,
    inverse,
    plus,
    product,
    rank,
    strip,
    times,
)
from tests.published.tools import controllability_matrix, scaled, value_at, with_roots
from tests.strategies import Planted, planted, unimodular

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")

ROOTS = st.sampled_from([Fraction(v) for v in ("-3", "-2", "-1", "-1/2", "0", "1/3", "1", "2")])
COEFFICIENTS = st.integers(-6, 6)
#: F-06: everything here holds alike in continuous and in discrete time.
PERIODS = st.sampled_from([None, Fraction(1), Fraction(1, 10)])


def numerators(size: int) -> st.SearchStrategy[Polynomial]:
    """Strictly proper numerators below a denominator of this degree, not zero."""
    return (
        st.lists(COEFFICIENTS, min_size=size, max_size=size)
        .filter(any)
        .map(lambda values: strip(values))
    )


@st.composite
def fractions_over_roots(draw: st.DrawFn) -> tuple[Polynomial, list[Fraction], Fraction | None]:
    """A numerator, the rational roots of the denominator, and a sampling period."""
    roots = draw(st.lists(ROOTS, min_size=1, max_size=6))
    return draw(numerators(len(roots))), roots, draw(PERIODS)


def powers(z: Fraction, size: int) -> np.ndarray:
    """(1, z, z^2, ...)."""
    return np.array([[z**k] for k in range(size)], dtype=object)


def siso(numerator: Polynomial, denominator: Polynomial, period: Fraction | None) -> TransferMatrix:
    """One input, one output."""
    return TransferMatrix(numerator, denominator, sampling_period=period)


@given(fractions_over_roots())
def test_companion_eigenvectors(drawn: tuple[Polynomial, list[Fraction], Any]) -> None:
    """F-01: (1, z, ..., z^(n-1)) is the eigenvector at each root z, and the only one."""
    c, roots, period = drawn
    form = exact.companion(siso(c, with_roots(*roots), period))
    size = len(roots)
    assert form.order == size
    assert form.A[-1].tolist() == [-v for v in reversed(with_roots(*roots)[1:])]
    for z in set(roots):
        v = powers(z, size)
        assert (form.A @ v == z * v).all()
        assert rank(form.A - z * identity(size)) == size - 1


@given(fractions_over_roots())
def test_hidden_modes_of_a_companion_form(drawn: tuple[Polynomial, list[Fraction], Any]) -> None:
    """F-02: C times the eigenvector is c(z); what is unobservable is gcd(c, a), nothing else."""
    c, roots, period = drawn
    a = with_roots(*roots)
    form = exact.companion(siso(c, a, period))
    for z in set(roots):
        assert (form.C @ powers(z, len(roots)))[0, 0] == value_at(c, z)
    common = common_factor(a, c)
    parts = exact.kalman_parts(form)
    assert parts.polynomials[CONTROLLABLE_UNOBSERVABLE] == common
    assert times(common, parts.polynomials[CONTROLLABLE_OBSERVABLE]) == a
    assert exact.cancel(siso(c, a, period)).common == common
    assert exact.minimal(form).order == len(roots) + 1 - len(common)
    assert polynomials.gcd(a, c) == common


@given(fractions_over_roots(), COEFFICIENTS)
def test_feedthrough_changes_nothing_hidden(
    drawn: tuple[Polynomial, list[Fraction], Any], d: int
) -> None:
    """F-03: D turns c into c + D a, and leaves the common roots, the hidden modes, the order."""
    c, roots, period = drawn
    a = with_roots(*roots)
    raised = plus(c, scaled(d, a))
    before, after = exact.companion(siso(c, a, period)), exact.companion(siso(raised, a, period))
    assert after.D[0, 0] == d
    assert (before.A == after.A).all()
    assert (before.B == after.B).all()
    assert (before.C == after.C).all()
    assert exact.cancel(siso(raised, a, period)).common == exact.cancel(siso(c, a, period)).common
    added = Realization(before.A, before.B, before.C, [[Fraction(d)]], sampling_period=period)
    assert dict(exact.kalman_parts(added).polynomials) == dict(
        exact.kalman_parts(before).polynomials
    )
    assert exact.minimal(added).order == exact.minimal(before).order


def moved(system: Realization, seed: int) -> Realization:
    """The same model in other coordinates, exactly."""
    T = unimodular(np.random.default_rng(seed), system.order)
    matrices = change_coordinates(system.matrices(), T)
    return Realization(*matrices, sampling_period=system.sampling_period)


@given(planted(), st.integers(0, 2**32 - 1))
def test_change_of_coordinates(case: Planted, seed: int) -> None:
    """F-04: transfer matrix, Markov parameters and the four polynomials stay as they are."""
    system = case.model
    other = moved(system, seed)
    assert_same_transfer(exact.transfer_matrix(system), exact.transfer_matrix(other))
    count = 2 * system.order + 1
    first = exact.markov_parameters(system, count)
    assert (first == exact.markov_parameters(other, count)).all()
    parts = [dict(exact.kalman_parts(m).polynomials) for m in (system, other)]
    assert parts[0] == parts[1]
    assert set(parts[0]) == set(PARTS)


@given(planted())
def test_minimal_means_controllable_and_observable(case: Planted) -> None:
    """F-05: a realization is minimal exactly when it is controllable and observable."""
    system = case.model
    both = (
        exact.staircase(system).dimension
        == exact.staircase(system, side="output").dimension
        == system.order
    )
    reduced = exact.minimal(system)
    assert (reduced.order == system.order) is both
    for side in ("input", "output"):
        assert exact.staircase(reduced.model, side=side).dimension == reduced.order
    parts = exact.kalman_parts(reduced.model).polynomials
    assert parts[CONTROLLABLE_OBSERVABLE] == characteristic_polynomial(reduced.model.A)
    assert all(parts[part] == ONE for part in PARTS if part != CONTROLLABLE_OBSERVABLE)


@given(planted(), st.integers(0, 2**32 - 1))
def test_minimal_realizations_are_related_once(case: Planted, seed: int) -> None:
    """F-05: two minimal realizations of one transfer matrix differ by exactly one T."""
    first = exact.minimal(case.model).model
    second = exact.minimal(moved(case.model, seed)).model
    size = first.order
    assert second.order == size
    if size == 0:
        assert (first.D == second.D).all()
        return
    K, L = controllability_matrix(first), controllability_matrix(second)
    # Every T with second = T^-1 first T satisfies K = T L; L has full row rank, so T is unique.
    assert rank(L) == size
    gram = product(L, L.T)
    T = product(product(K, L.T), inverse(gram))
    assert (product(T, L) == K).all()
    assert (product(first.A, T) == product(T, second.A)).all()
    assert (product(T, second.B) == first.B).all()
    assert (product(first.C, T) == second.C).all()
    assert (first.D == second.D).all()


@given(fractions_over_roots())
def test_time_domain_is_no_part_of_the_algebra(
    drawn: tuple[Polynomial, list[Fraction], Any],
) -> None:
    """F-06: orders, parts and factors are the same with s and with z; the period is kept."""
    c, roots, _ = drawn
    a = with_roots(*roots)
    found = []
    for period in (None, Fraction(1, 10)):
        form = exact.companion(siso(c, a, period))
        reduced = exact.minimal(form).model
        assert form.sampling_period == period
        assert reduced.sampling_period == period
        assert exact.transfer_matrix(form).sampling_period == period
        assert exact.cancel(siso(c, a, period)).transfer.sampling_period == period
        found.append((reduced.matrices(), exact.kalman_parts(form).polynomials))
    for left, right in zip(found[0][0], found[1][0], strict=True):
        assert left.tolist() == right.tolist()
    assert dict(found[0][1]) == dict(found[1][1])


@pytest.mark.parametrize("period", [None, 1])
@pytest.mark.parametrize(
    ("numerator", "denominator", "common"),
    [
        ((1, 3, 2), (1, 6, 11, 6), (1, 3, 2)),
        ((1, 1), (1, 2, 2), (1,)),
        ((2, -2), (1, -3, 2), (1, -1)),
    ],
)
def test_facts_in_floats(
    numerator: tuple[int, ...],
    denominator: tuple[int, ...],
    common: tuple[int, ...],
    period: int | None,
) -> None:
    """F-02, F-06: the floating face finds the same common factors on plain cases."""
    fraction = siso(strip(numerator), strip(denominator), period)
    found = floating.cancel(fraction)
    assert list(found.common) == pytest.approx(list(common), abs=1e-9)
    assert floating.minimal(fraction).order == len(denominator) - len(common)
