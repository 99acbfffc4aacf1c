"""Three independent ways to the minimal order agree (exact face)."""

from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import given

from realize import Realization, exact, examine
from tests.helpers import remainder
from tests.strategies import FACTORS, RATIONAL_FACTORS, Planted, planted, unstructured

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")


@given(planted(most=1))
def test_reduction_and_hankel_rank_agree(case: Planted) -> None:
    """The reduced order equals the order of a model made from Markov parameters alone."""
    order = case.model.order
    parameters = exact.markov_parameters(case.model, 2 * order + 1)
    assert exact.from_markov_parameters(parameters).order == exact.minimal(case.model).order


@given(planted(most=1))
def test_reduction_of_the_model_and_of_its_transfer_matrix_agree(case: Planted) -> None:
    """The model and its transfer matrix lead to one minimal order."""
    transfer = exact.transfer_matrix(case.model)
    assert exact.minimal(transfer).order == case.order


@given(planted(most=1))
def test_the_examination_takes_all_three_to_one_answer(case: Planted) -> None:
    """State, polynomial and Hankel route each give the planted order."""
    found = examine(case.model)
    assert set(found.routes) == {"given"}
    assert dict(found.routes["given"]) == {
        "state": case.order,
        "polynomial": case.order,
        "hankel": case.order,
    }
    assert dict(found.minimal_order) == {"given": case.order}


@given(unstructured())
def test_the_routes_agree_on_unplanned_models(model: Realization) -> None:
    """The same for models in which nothing was planted: the order is the one of `minimal`."""
    routes = examine(model).routes["given"]
    assert set(routes.values()) == {exact.minimal(model).order}


@given(planted(most=1))
def test_the_examination_has_the_parts_planted(case: Planted) -> None:
    """The four polynomials in the examination are those planted."""
    parts = examine(case.model).parts["given"]
    assert {str(part): tuple(p) for part, p in parts.items()} == case.polynomials


@given(planted(most=1))
def test_every_mode_is_listed_once(case: Planted) -> None:
    """Multiplicities in each part add up to its dimension; the modes name the parts they are in."""
    counts = dict.fromkeys(case.dimensions, 0)
    for mode in examine(case.model).modes:
        counts[str(mode.part)] += mode.multiplicity
    assert counts == case.dimensions


@given(planted(most=1, factors=FACTORS + RATIONAL_FACTORS))
def test_stabilizable_and_detectable_follow_the_polynomials(case: Planted) -> None:
    """Yes exactly when no unreachable (unseen) mode lies on or beyond the boundary."""
    found = examine(case.model)
    discrete = case.model.sampling_period is not None
    lost = {
        "stabilizable": ("uncontrollable, observable", "uncontrollable, unobservable"),
        "detectable": ("controllable, unobservable", "uncontrollable, unobservable"),
    }
    for question, parts in lost.items():
        polynomials = [case.polynomials[part] for part in parts]
        good = all(strictly_stable(p, discrete) for p in polynomials)
        assert getattr(found, question) == ("yes" if good else "no"), question


def strictly_stable(p: tuple[Fraction, ...], discrete: bool) -> bool:
    """Whether every root is inside, for products of the pool: by trial division."""
    for factor in FACTORS + RATIONAL_FACTORS:
        if remainder(p, factor) != (0,) or len(p) == 1:
            continue
        if not _inside(factor, discrete):
            return False
    return True


def _inside(p: tuple[Fraction, ...], discrete: bool) -> bool:
    """The textbook conditions for degree one and two."""
    if len(p) == 2:
        root = -p[1]
        return abs(root) < 1 if discrete else root < 0
    _, a, b = p
    return abs(b) < 1 and abs(a) < 1 + b if discrete else a > 0 and b > 0
