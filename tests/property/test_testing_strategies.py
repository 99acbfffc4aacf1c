"""Laws of the strategies of the kit: what they say was planted is there, and they shrink."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import Phase, find, given, settings
from hypothesis import strategies as st

from realize import Realization, exact, polynomials
from realize.errors import UnknownWordError, UnsupportedEntryError
from realize.results import Part
from realize.testing import strategies
from realize.testing.planting import Planted

PARTS = st.fixed_dictionaries({str(part): st.integers(0, 3) for part in Part})


def assert_planted(found: Planted) -> None:
    """Dimensions and polynomials are those that the exact path proves."""
    parts = exact.kalman_parts(found.exact)
    assert dict(parts.dimensions) == found.dimensions
    assert dict(parts.polynomials) == found.polynomials


@given(st.data(), PARTS)
def test_dimensions_asked_for_are_planted(data: st.DataObject, wanted: dict[str, int]) -> None:
    """Each part has the states that were asked for, and they are what they are said to be."""
    found = data.draw(strategies.planted(dimensions=wanted, units=(1, Fraction(1, 1000), 30)))
    assert found.dimensions == wanted
    assert_planted(found)


@given(
    st.sampled_from([Fraction(1, 10**12), Fraction(-1, 1000), Fraction(1, 2), 3]).flatmap(
        lambda near: st.tuples(st.just(near), strategies.planted(near=near))
    )
)
def test_a_near_cancellation_hides_nothing(pair: tuple[Fraction, Planted]) -> None:
    """A pole of the visible part has a zero of the first entry as far away as was asked."""
    near, found = pair
    assert_planted(found)
    transfer = exact.cancel(exact.transfer_matrix(found.exact)).transfer
    distances = set()
    for above, below in zip(flat(transfer.numerators), flat(transfer.denominators), strict=True):
        zeros = [-p[1] for p, _ in polynomials.factor(above) if len(p) == 2] if any(above) else []
        poles = [-p[1] for p, _ in polynomials.factor(below) if len(p) == 2]
        distances |= {pole - zero for pole in poles for zero in zeros}
    assert near in distances


def flat(table: tuple[tuple[tuple[Fraction, ...], ...], ...]) -> list[tuple[Fraction, ...]]:
    """The entries of a transfer matrix, in one list."""
    return [entry for row in table for entry in row]


@pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")
@given(strategies.planted(repeated=True))
def test_a_repeated_factor_is_defective(found: Planted) -> None:
    """Some eigenvalue has fewer eigenvectors than its multiplicity; what was planted is there."""
    assert_planted(found)
    visible = exact.minimal(found.exact).model
    defective = False
    for factor, multiplicity in polynomials.factor(found.polynomials[Part.CONTROLLABLE_OBSERVABLE]):
        value = evaluated(factor, visible)
        nullity = visible.order - rank(value)
        defective |= nullity < multiplicity * (len(factor) - 1)
    assert defective


def evaluated(polynomial: tuple[Fraction, ...], model: Realization) -> np.ndarray:
    """p(A), exact."""
    identity = np.array(
        [[Fraction(int(i == j)) for j in range(model.order)] for i in range(model.order)],
        dtype=object,
    )
    result = polynomial[0] * identity
    for coefficient in polynomial[1:]:
        result = result @ model.A + coefficient * identity
    return result


def rank(matrix: np.ndarray) -> int:
    """Exact rank: the reachable dimension of (0, matrix)."""
    size = matrix.shape[0]
    still = Realization([[0] * size] * size, matrix, [[0] * size])
    return exact.staircase(still).dimension


@given(strategies.planted(floating=True, units=(1, "1e-9")))
def test_floats_are_the_exact_model_rounded(found: Planted) -> None:
    """The model has doubles; the exact one, what was planted."""
    assert found.model == found.exact.to_float()
    assert_planted(found)


@given(st.data(), st.sampled_from(strategies.STRUCTURES))
def test_structures_and_bounds_are_kept(data: st.DataObject, structure: str) -> None:
    """Numbers of states, inputs, outputs within bounds; zeros where the structure has them."""
    model = data.draw(
        strategies.realizations(
            min_states=2, max_states=5, min_inputs=2, max_inputs=3, min_outputs=3, max_outputs=3,
            largest=1, structure=structure, sampling_periods=[1],
        )
    )  # fmt: skip
    assert 2 <= model.order <= 5
    assert 2 <= model.input_count <= 3
    assert model.output_count == 3
    assert model.sampling_period == 1
    A = model.A
    assert {*A.ravel()} <= {-1, 0, 1}
    for i, j in np.ndindex(A.shape):
        outside = {
            "any": False,
            "diagonal": i != j,
            "triangular": i < j,
            "chain": i not in (j, j + 1),
            "blocks": (i < len(A) // 2) != (j < len(A) // 2),
        }[structure]
        assert not (outside and A[i, j])


def test_units_spread_the_entries() -> None:
    """Units of 1 and 1e-9 give entries a factor of 1e9 apart."""
    strategy = strategies.planted(units=(1, "1e-9"), floating=True)

    def is_spread(found: Planted) -> bool:
        sizes = np.abs(found.model.A[found.model.A != 0.0])
        return bool(sizes.size and sizes.max() / sizes.min() >= 1e9)

    first = settings(database=None, phases=[Phase.generate])
    assert is_spread(find(strategy, is_spread, settings=first))


def test_planted_models_shrink_to_what_can_be_read() -> None:
    """The least model with an unreached mode: one or two states, whole numbers, no mixing."""
    found = find(
        strategies.planted(moves=1, max_more_inputs=0, max_more_outputs=0),
        lambda planted: planted.dimensions[Part.UNCONTROLLABLE_OBSERVABLE] > 0,
        settings=settings(database=None),
    )
    assert found.model.order <= 2
    assert found.model.sampling_period is None
    assert found.model.input_count == found.model.output_count == 1
    assert set(found.model.A.ravel()) <= {-1, 0, 1}
    assert repr(found).startswith("<Planted: A=[[")


def test_models_shrink_to_what_can_be_read() -> None:
    """The least unstable model has one state, all other numbers zero."""
    found = find(
        strategies.realizations(),
        lambda model: model.order > 0 and model.A[0, 0] > 0,
        settings=settings(database=None),
    )
    assert [M.tolist() for M in found.matrices()] == [[[1]], [[0]], [[0]], [[0]]]


@pytest.mark.parametrize(
    ("options", "error", "message"),
    [
        ({"near": 0}, UnsupportedEntryError, "near is 0"),
        ({"near": "x"}, UnsupportedEntryError, "wanted a rational number"),
        ({"dimensions": {"no part": 1}}, UnknownWordError, "no part"),
        ({"dimensions": {"controllable, observable": -1}}, UnsupportedEntryError, "-1"),
        (
            {"dimensions": {"controllable, observable": 1}, "near": 1},
            UnsupportedEntryError,
            "2 states",
        ),
        (
            {"dimensions": {"controllable, observable": 1}, "repeated": True},
            UnsupportedEntryError,
            "wanted one of them",
        ),
    ],
)
def test_what_cannot_be_planted_is_refused(
    options: dict[str, object], error: type[Exception], message: str
) -> None:
    """At the call, with what is wanted."""
    with pytest.raises(error, match=message):
        strategies.planted(**options)  # type: ignore[arg-type]
