"""Laws of exact minimal realizations."""

from __future__ import annotations

import warnings

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize import HiddenInstabilityWarning, Realization, TransferMatrix, exact
from tests.helpers import (
    PARTS,
    Polynomial,
    assert_equal_exact,
    assert_same_response,
    assert_same_transfer,
    controllability_matrix,
    identity,
    product,
    rank,
    reachable_ranks,
    times,
    zeros,
)
from tests.strategies import (
    CONTINUOUS_STABLE,
    DISCRETE_STABLE,
    FACTORS,
    RATIONAL_FACTORS,
    Planted,
    planted,
    transfer_matrices,
    unstructured,
)

# Planted hidden modes are of every kind; the warnings have tests of their own below.
pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")

HIDDEN = tuple(part for part in PARTS if part != "controllable, observable")


@given(planted())
def test_the_planted_order_is_found(case: Planted) -> None:
    """The minimal order is the dimension of the controllable, observable part."""
    reduction = exact.minimal(case.model)
    assert reduction.order == case.order == reduction.model.order
    assert reduction.source_order == case.model.order


@given(planted())
def test_nothing_the_transfer_matrix_shows_changes(case: Planted) -> None:
    """Markov parameters are equal, as many as prove that all of them are."""
    reduced = exact.minimal(case.model).model
    assert_same_response(case.model, reduced)
    assert reduced.sampling_period == case.model.sampling_period
    assert reduced.input_names == case.model.input_names
    assert reduced.output_names == case.model.output_names


@given(planted(most=1))
def test_transfer_matrices_before_and_after_are_equal(case: Planted) -> None:
    """The two transfer matrices are the same matrix of functions."""
    reduced = exact.minimal(case.model).model
    assert_same_transfer(exact.transfer_matrix(case.model), exact.transfer_matrix(reduced))


@given(planted())
def test_the_result_is_reachable_and_observable(case: Planted) -> None:
    """Both Krylov ranks of the result are full."""
    A, B, C, _ = exact.minimal(case.model).model.matrices()
    assert sum(reachable_ranks(A, B)) == sum(reachable_ranks(A.T, C.T)) == case.order


@given(unstructured())
def test_unplanned_models_reduce_to_the_rank_of_their_hankel_matrix(model: Realization) -> None:
    """The minimal order is the rank of observability matrix times controllability matrix."""
    A, B, C, _ = model.matrices()
    hankel = product(controllability_matrix(A.T, C.T).T, controllability_matrix(A, B))
    assert exact.minimal(model).order == rank(hankel)


@given(planted())
def test_a_minimal_realization_of_a_minimal_realization_is_itself(case: Planted) -> None:
    """The second reduction removes nothing and returns the model it was given."""
    first = exact.minimal(case.model)
    second = exact.minimal(first.model)
    assert second.order == first.order
    assert second.removed.count == 0
    assert second.model == first.model


@given(planted())
def test_what_was_removed_is_what_was_planted(case: Planted) -> None:
    """The polynomial removed is the product of the three hidden polynomials."""
    removed = exact.minimal(case.model).removed
    hidden = times(*(case.polynomials[part] for part in HIDDEN))
    assert removed.count == len(hidden) - 1
    assert_equal_exact(removed.polynomial, hidden)
    assert sum(mode.multiplicity for mode in removed.modes) == removed.count
    assert {str(mode.part) for mode in removed.modes} == {
        part for part in HIDDEN if case.dimensions[part]
    }


@given(planted())
def test_the_state_map_carries_reachable_states(case: Planted) -> None:
    """On the reachable part S A = Ar S and C = Cr S; and S B = Br."""
    reduction = exact.minimal(case.model)
    S = reduction.state_map
    assert S.shape == (case.order, case.model.order)
    A, B, C, _ = case.model.matrices()
    Ar, Br, Cr, _ = reduction.model.matrices()
    reached = controllability_matrix(A, B)
    assert_equal_exact(product(S, B), Br, "S B")
    assert_equal_exact(product(S, A, reached), product(Ar, S, reached), "S A")
    assert_equal_exact(product(Cr, S, reached), product(C, reached), "Cr S")


@given(transfer_matrices())
def test_a_transfer_matrix_keeps_its_functions(source: TransferMatrix) -> None:
    """A minimal realization of a transfer matrix has that transfer matrix."""
    reduction = exact.minimal(source)
    assert_same_transfer(exact.transfer_matrix(reduction.model), source)
    assert reduction.model.sampling_period == source.sampling_period


@given(transfer_matrices())
def test_a_transfer_matrix_gets_a_minimal_model(source: TransferMatrix) -> None:
    """Both Krylov ranks of the realization of a transfer matrix are full."""
    reduction = exact.minimal(source)
    A, B, C, _ = reduction.model.matrices()
    assert sum(reachable_ranks(A, B)) == sum(reachable_ranks(A.T, C.T)) == reduction.order


def _draw_with_known_stability(stable: bool) -> st.SearchStrategy[Planted]:
    """Planted models all of whose eigenvalues are stable, or none of whose are."""
    unstable_everywhere = tuple(p for p in FACTORS if p in ((1, -1), (1, -2), (1, 0, 1)))
    return st.one_of(
        planted(
            factors=CONTINUOUS_STABLE if stable else unstable_everywhere, sampling_periods=(None,)
        ),
        planted(factors=DISCRETE_STABLE if stable else unstable_everywhere, sampling_periods=(1,)),
    )


@given(_draw_with_known_stability(stable=True))
def test_removing_stable_modes_warns_of_nothing(case: Planted) -> None:
    """No warning when every hidden mode is stable."""
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        exact.minimal(case.model)


@given(_draw_with_known_stability(stable=False))
def test_removing_modes_that_are_not_stable_warns(case: Planted) -> None:
    """The warning comes exactly when something was removed."""
    with warnings.catch_warnings(record=True) as caught:
        warnings.simplefilter("always")
        exact.minimal(case.model)
    expected = case.model.order > case.order
    assert [w.category for w in caught] == [HiddenInstabilityWarning] * expected


@given(_draw_with_known_stability(stable=False))
def test_every_mode_removed_is_called_what_it_is(case: Planted) -> None:
    """Beyond the boundary unstable; on it marginal, unless the whole A has too few eigenvectors."""
    for mode in exact.minimal(case.model).removed.modes:
        on_boundary = (
            mode.value.real == 0 if case.model.sampling_period is None else abs(mode.value) == 1
        )
        bounded = on_boundary and semisimple(case.model.A, mode.polynomial)
        assert mode.stability == ("marginal" if bounded else "unstable")


def semisimple(A: np.ndarray, factor: Polynomial) -> bool:
    """Whether f(A) and f(A)^2 have one rank, for an irreducible factor f."""
    value = zeros(*A.shape)
    for coefficient in factor:
        value = product(value, A) + coefficient * identity(len(A))
    return rank(value) == rank(product(value, value))


def test_the_pools_are_what_they_claim() -> None:
    """The pools of factors are distinct and monic, so that planting means what it says."""
    for pool in (FACTORS, RATIONAL_FACTORS, CONTINUOUS_STABLE, DISCRETE_STABLE):
        assert len(set(pool)) == len(pool)
        assert all(p[0] == 1 for p in pool)
