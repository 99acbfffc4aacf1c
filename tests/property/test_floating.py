"""Laws of the floating face, on models whose planted structure rounding cannot blur.

The coordinates stay near the planted ones, so every rank in question is far from the cutoff. What
is structure (orders, stairs, dimensions, zeros) must then be right; what is a number must be right
to a small multiple of the rounding unit.
"""

from __future__ import annotations

import itertools
from fractions import Fraction

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize import Realization, TransferMatrix, floating
from tests.helpers import PARTS, assert_close
from tests.strategies import (
    FACTORS,
    Planted,
    PlantedFraction,
    fractions_with_common_factor,
    generators,
    permutation,
    plant,
    planted_mild,
)

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")

sides = st.sampled_from(["input", "output"])

#: Backward errors, relative to the norm of the model: a few hundred rounding units.
ROUNDING = 1e-12


def norm(model: Realization) -> float:
    """The Frobenius norm over all four matrices."""
    return float(np.sqrt(sum((m**2).sum() for m in model.matrices())))


def assert_coordinates(old: Realization, new: Realization, transformation: np.ndarray) -> None:
    """A T = T A', B = T B', C T = C', D = D', to rounding, each beside the size of its terms."""
    T = transformation
    for name, left, right, size in (
        ("A", old.A @ T, T @ new.A, abs(old.A) @ abs(T) + abs(T) @ abs(new.A)),
        ("B", old.B, T @ new.B, abs(old.B) + abs(T) @ abs(new.B)),
        ("C", old.C @ T, new.C, abs(old.C) @ abs(T) + abs(new.C)),
    ):
        bound = ROUNDING * max(1.0, float(size.max(initial=0.0)))
        assert_close(left, right, relative=0.0, absolute=bound, what=name)
    assert (old.D == new.D).all()


@given(planted_mild())
def test_the_planted_order_is_found(case: Planted) -> None:
    """The minimal order is the planted one, and what is left shows the planted poles."""
    reduction = floating.minimal(case.model.to_float())
    assert reduction.order == case.order == reduction.model.order
    assert reduction.removed.count == case.model.order - case.order


@given(planted_mild())
def test_the_planted_dimensions_are_found(case: Planted) -> None:
    """Each part has the dimension that was planted."""
    found = floating.kalman_parts(case.model.to_float()).dimensions
    assert dict(found) == case.dimensions


@given(planted_mild(), sides)
def test_the_staircase_has_the_coordinates_named(case: Planted, side: str) -> None:
    """New matrices are T^-1 A T, T^-1 B, C T to rounding, and D as it was."""
    model = case.model.to_float()
    form = floating.staircase(model, side=side)
    assert_coordinates(model, form.model, form.transformation)


@given(planted_mild())
def test_the_decomposition_has_the_coordinates_named(case: Planted) -> None:
    """The same for the Kalman decomposition."""
    model = case.model.to_float()
    form = floating.kalman_parts(model)
    assert_coordinates(model, form.model, form.transformation)


@given(planted_mild(), sides)
def test_what_must_be_zero_in_the_staircase_is_zero(case: Planted, side: str) -> None:
    """Dropped blocks are set to zero and not left as noise."""
    form = floating.staircase(case.model.to_float(), side=side)
    A, B, C, _ = form.model.matrices()
    if side == "output":
        A, B = A.T, C.T
    k = form.dimension
    assert sum(form.stairs) == k
    assert not A[k:, :k].any()
    assert not B[k:].any()
    start = 0
    for here, below in zip(form.stairs, (*form.stairs, 0)[1:], strict=True):
        assert not A[start + here + below :, start : start + here].any()
        start += here
    if form.stairs:
        assert not B[form.stairs[0] :].any()


@given(planted_mild())
def test_what_must_be_zero_in_the_decomposition_is_zero(case: Planted) -> None:
    """Blocks that vanish in the Kalman decomposition are exactly zero."""
    form = floating.kalman_parts(case.model.to_float())
    ends = np.cumsum([0, *(form.dimensions[part] for part in PARTS)])
    at = [slice(a, b) for a, b in itertools.pairwise(ends)]
    A, B, C, _ = form.model.matrices()
    for row, column in ((1, 0), (1, 2), (2, 0), (2, 1), (3, 0), (3, 1), (3, 2)):
        assert not A[at[row], at[column]].any(), f"block {PARTS[row]} from {PARTS[column]}"
    assert not B[at[2]].any()
    assert not B[at[3]].any()
    assert not C[:, at[0]].any()
    assert not C[:, at[2]].any()


@given(planted_mild())
def test_markov_parameters_survive_the_reduction(case: Planted) -> None:
    """The first Markov parameters of the reduced model are those of the model."""
    model = case.model.to_float()
    count = 2 * model.order + 1
    before = floating.markov_parameters(model, count)
    after = floating.markov_parameters(floating.minimal(model).model, count)
    assert_close(after, before, relative=1e-9, absolute=1e-12)


@given(planted_mild())
def test_duality_swaps_reachable_and_observable(case: Planted) -> None:
    """Stairs of the dual are those of the other side."""
    model = case.model.to_float()
    for here, there in (("input", "output"), ("output", "input")):
        form = floating.staircase(model.dual(), side=here)
        assert form.stairs == floating.staircase(model, side=there).stairs


@given(planted_mild())
def test_a_second_reduction_removes_nothing(case: Planted) -> None:
    """A minimal realization is minimal."""
    first = floating.minimal(case.model.to_float())
    second = floating.minimal(first.model)
    assert second.order == first.order
    assert second.removed.count == 0


@given(planted_mild(), generators)
def test_permutations_change_no_answer(case: Planted, rng: np.random.Generator) -> None:
    """Orders and stairs do not depend on the order in which anything is listed."""
    A, B, C, D = case.model.to_float().matrices()
    P, Q, R = (permutation(rng, size).astype(float) for size in (len(A), B.shape[1], C.shape[0]))
    new = Realization(P.T @ A @ P, P.T @ B @ Q, R @ C @ P, R @ D @ Q)
    old = Realization(A, B, C, D)
    assert floating.minimal(new).order == floating.minimal(old).order
    for side in ("input", "output"):
        assert (
            floating.staircase(new, side=side).stairs == floating.staircase(old, side=side).stairs
        )
    assert floating.kalman_parts(new).dimensions == floating.kalman_parts(old).dimensions


@given(planted_mild(), generators, st.integers(-30, 30))
def test_units_change_no_answer(case: Planted, rng: np.random.Generator, time: int) -> None:
    """Orders, stairs and dimensions stand when states, inputs, outputs and time change units.

    Units are powers of two over 30 binades, and rescaling by them is exact.
    """
    A, B, C, D = case.model.to_float().matrices()
    x, u, y = (2.0 ** rng.integers(-15, 16, size) for size in (len(A), B.shape[1], C.shape[0]))
    t = 2.0**time
    new = Realization(
        t * A * x / x[:, None], t * B * u / x[:, None], C * x * y[:, None], D * u * y[:, None]
    )
    assert floating.minimal(new).order == case.order
    old = Realization(A, B, C, D)
    for side in ("input", "output"):
        assert (
            floating.staircase(new, side=side).stairs == floating.staircase(old, side=side).stairs
        )
    assert dict(floating.kalman_parts(new).dimensions) == case.dimensions


@given(planted_mild())
def test_every_stage_is_recorded(case: Planted) -> None:
    """Decisions agree with the stairs and with the cutoff that they name."""
    form = floating.staircase(case.model.to_float())
    assert case.model.order == 0 or form.decisions
    for decision in form.decisions:
        if decision.smallest_kept is not None:
            assert decision.smallest_kept > decision.cutoff
        if decision.largest_dropped is not None:
            assert decision.largest_dropped <= decision.cutoff
        assert 0 <= decision.rank <= min(decision.shape)
    assert len({decision.cutoff for decision in form.decisions}) <= 1


@given(fractions_with_common_factor(factors=FACTORS[:6], most_common=1), sides)
def test_a_fraction_is_realized_as_given(case: PlantedFraction, side: str) -> None:
    """Companion forms keep common factors on the floating face too."""
    source = TransferMatrix(case.numerator, case.denominator).to_float()
    model = floating.companion(source, side=side)
    assert model.order == len(case.denominator) - 1
    count = 2 * model.order + 1
    expected = long_division(case.numerator, case.denominator, count)
    found = floating.markov_parameters(model, count)
    assert_close(found.ravel(), expected, relative=1e-12)


def long_division(p: tuple[Fraction, ...], q: tuple[Fraction, ...], count: int) -> list[Fraction]:
    """The first coefficients of p/q in powers of 1/s, exact."""
    rest = [Fraction(0)] * (len(q) - len(p)) + list(p) + [Fraction(0)] * count
    result = []
    for k in range(count):
        factor = rest[k] / q[0]
        result.append(factor)
        for i, c in enumerate(q):
            rest[k + i] -= factor * c
    return result


@given(fractions_with_common_factor(factors=FACTORS[:6], most_common=1))
def test_a_planted_common_factor_is_found(case: PlantedFraction) -> None:
    """The common factor of integer fractions with separated roots has the planted degree."""
    source = TransferMatrix(case.numerator, case.denominator).to_float()
    found = floating.cancel(source)
    assert len(found.common) == len(case.common)
    assert_close(found.common, case.common, relative=1e-5)
    assert len(found.transfer.denominators[0][0]) - 1 == case.coprime_order


#: Factors whose coefficients are decimals: their products are rounded when they become doubles.
DECIMAL_FACTORS = tuple(
    tuple(Fraction(c) for c in p)
    for p in (("1", "0.5"), ("1", "-0.3"), ("1", "1.2"), ("1", "-0.6", "0.25"), ("1", "0.2", "1.3"))
)


@given(fractions_with_common_factor(factors=DECIMAL_FACTORS, most_common=1))
def test_a_common_factor_is_found_through_rounded_coefficients(case: PlantedFraction) -> None:
    """Coefficients rounded to doubles share the planted factor to rounding, and cancel it.

    Also when all that is left is a gain, so that what should be zero is rounding noise.
    """
    source = TransferMatrix(case.numerator, case.denominator).to_float()
    found = floating.cancel(source)
    assert len(found.common) == len(case.common)
    assert len(found.transfer.denominators[0][0]) - 1 == case.coprime_order
    assert floating.minimal(source).order == case.coprime_order


def test_noise_in_entries_that_should_be_zero_hides_no_mode() -> None:
    """A minimal model with rounding noise where it had zeros stays minimal.

    The noise is what an orthogonal reduction leaves behind. The singular values of its
    controllability and observability matrices lie between 1/2 and 5/2: no mode is near being lost.
    """
    A = [
        [-0.5, -0.7071067811865475, -0.5],
        [-0.7071067811865470, 2.0e-16, 0.7071067811865474],
        [1.5, -0.7071067811865476, -0.5],
    ]
    B = [[1.1e-16, 0.0], [1.0, 0.0], [-1.4142135623730951, 0.0]]
    C = [[1.414213562373095, -1.6e-16, 0.0], [0.0, 0.0, 0.0], [-2.2e-16, -1.0, 0.0]]
    assert floating.minimal(Realization(A, B, C)).order == 3


@pytest.mark.parametrize("seed", range(40))
def test_what_a_reduction_returns_is_minimal(seed: int) -> None:
    """Larger seeded models: reducing what was reduced removes nothing more."""
    rng = np.random.default_rng(seed)
    parts = [
        {part: tuple(FACTORS[k] for k in rng.integers(0, 9, rng.integers(0, 3))) for part in PARTS}
        for _ in range(2)
    ]
    case = plant(parts, rng=rng, more_inputs=1, more_outputs=1, steps=4, largest=1)
    first = floating.minimal(case.model.to_float())
    assert first.order == case.order
    assert floating.minimal(first.model).order == case.order


@given(planted_mild())
def test_markov_parameters_give_the_order_back(case: Planted) -> None:
    """From Markov parameters that doubles hold exactly, the planted order is found."""
    count = 2 * case.order + 1
    parameters = floating.markov_parameters(case.model.to_float(), count)
    found = floating.from_markov_parameters(parameters)
    assert found.order == case.order
    assert_close(
        floating.markov_parameters(found.model, count), parameters, relative=1e-8, absolute=1e-12
    )


@given(planted_mild())
def test_a_larger_tolerance_never_raises_the_order(case: Planted) -> None:
    """The reachable dimension does not grow with the tolerance."""
    model = case.model.to_float()
    dimensions = [
        floating.staircase(model, tolerance=t).dimension for t in (0.0, 1e-12, 1e-8, 1e-4, 1.0)
    ]
    assert dimensions == sorted(dimensions, reverse=True)
