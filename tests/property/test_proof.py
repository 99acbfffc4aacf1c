"""Laws of certificates and comparisons, over generated models."""

from __future__ import annotations

import json
import warnings
from fractions import Fraction

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from realize import (
    CertificateError,
    HiddenInstabilityWarning,
    Realization,
    TransferMatrix,
    certify,
    check,
    exact,
    floating,
    same_transfer,
)
from realize.arithmetic.exact import ExactPath
from realize.forms import reduce
from tests.helpers import assert_equal_exact, change_coordinates, inverse, markov_by_hand, product
from tests.house.oracle import System, truth
from tests.strategies import (
    Planted,
    generators,
    planted,
    planted_mild,
    transfer_matrices,
    unimodular,
    unstructured,
)


def same_by_hand(first: Realization, second: Realization) -> bool:
    """Equal Markov parameters up to the sum of the orders."""
    count = first.order + second.order + 1
    pairs = zip(markov_by_hand(first, count), markov_by_hand(second, count), strict=True)
    return all(np.array_equal(left, right) for left, right in pairs)


@given(planted())
def test_an_exact_reduction_has_a_certificate(case: Planted) -> None:
    """It checks, its claim is true, and it says the order that was planted."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", HiddenInstabilityWarning)
        certificate = certify(exact.minimal(case.model))
    assert check(certificate).startswith("Proved")
    claim = json.loads(certificate.to_json())["claim"]
    assert claim["reduced"]["order"] == case.order
    if case.model.order <= 5:
        assert truth(claim)


@given(transfer_matrices())
def test_a_transfer_matrix_has_a_certificate(transfer: TransferMatrix) -> None:
    """The fractions are part of the claim, and it checks."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", HiddenInstabilityWarning)
        reduction = exact.minimal(transfer)
    words = check(certify(reduction))
    assert "claim.model.transfer: the model realizes these fractions" in words
    found = same_transfer(transfer, reduction.model)
    assert found
    assert check(certify(found)).startswith("Proved")


@given(planted(), generators)
def test_coordinates_do_not_matter(case: Planted, rng: np.random.Generator) -> None:
    """The same model in other coordinates is equal; T is found when nothing is hidden."""
    T = unimodular(rng, case.model.order)
    other = Realization(
        *change_coordinates(case.model.matrices(), T), sampling_period=case.model.sampling_period
    )
    found = same_transfer(case.model, other)
    assert found
    assert check(certify(found)).startswith("Proved")
    if case.order == case.model.order:
        assert_equal_exact(found.transformation, T)
    else:
        assert found.transformation is None
        with warnings.catch_warnings():
            warnings.simplefilter("ignore", HiddenInstabilityWarning)
            left, right = (exact.minimal(model).model for model in (case.model, other))
        between = same_transfer(left, right).transformation
        assert between is not None
        assert_equal_exact(product(inverse(between), left.A, between), right.A)


@given(unstructured(), st.data())
def test_one_number_changed(model: Realization, data: st.DataObject) -> None:
    """Equal exactly when the Markov parameters are; a counterexample is one; both check."""
    tables = [matrix.copy() for matrix in model.matrices()]
    which = data.draw(st.sampled_from([k for k in range(4) if tables[k].size]))
    place = data.draw(st.integers(0, tables[which].size - 1))
    tables[which].flat[place] += data.draw(st.sampled_from([0, 1, Fraction(-1, 3)]))
    other = Realization(*tables, sampling_period=model.sampling_period)
    found = same_transfer(model, other)
    assert bool(found) == same_by_hand(model, other)
    certificate = certify(found)
    assert check(certificate).startswith("Proved")
    claim = json.loads(certificate.to_json())["claim"]
    assert truth(claim)
    if found.counterexample is not None:
        for side, value in (
            ("first", found.counterexample.first),
            ("second", found.counterexample.second),
        ):
            assert System(claim[side]).value(found.counterexample.point) == value.tolist()


@given(planted_mild())
def test_a_floating_reduction_has_a_certificate(case: Planted) -> None:
    """It checks when a reading confirms the order, and is refused when none does."""
    model = case.model.to_float()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", HiddenInstabilityWarning)
        reduction = floating.minimal(model)
    orders = {reduce_order(model.read(reading)) for reading in ("stored", "written")}
    if reduction.order not in orders:
        try:
            certify(reduction)
        except CertificateError as error:
            assert f"order {reduction.order};" in str(error)  # noqa: PT017
            return
        raise AssertionError("a certificate of an order that no reading confirms")
    certificate = certify(reduction)
    assert "claim.delivered" in check(certificate)
    claim = json.loads(certificate.to_json())["claim"]
    assert Fraction(claim["distance"]) < Fraction(1, 10**6)
    if model.order <= 4:
        assert truth(claim)


def reduce_order(model: Realization) -> int:
    """The exact minimal order."""
    return reduce(ExactPath(), model).order
