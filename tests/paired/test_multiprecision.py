"""The multiprecision face beside the exact and the floating one, and on irrational models."""

from __future__ import annotations

import pickle
from collections.abc import Iterable
from fractions import Fraction
from typing import Any

import mpmath
import numpy as np
import pytest
import sympy
from hypothesis import assume, given, settings
from hypothesis import strategies as st

import realize
from realize import (
    Realization,
    TransferMatrix,
    errors,
    exact,
    examine,
    floating,
    multiprecision,
)
from realize.arithmetic.steps import precision_steps
from tests.helpers import PARTS, product, times
from tests.strategies import (
    FACTORS,
    Planted,
    PlantedFraction,
    fractions_with_common_factor,
    generators,
    plant,
    planted,
    planted_mild,
    transfer_matrices,
    unstructured,
)

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")

F = Fraction

#: Two precisions that every law is held at.
two_precisions = pytest.mark.parametrize("digits", [40, 90])

models = st.one_of(planted().map(lambda case: case.model), unstructured())
# Every example is computed at least twice, so half as many do.
few = settings(max_examples=settings().max_examples // 2)


def assert_near(actual: Any, expected: Any, digits: int, what: str = "value") -> None:
    """Fractions of one shape whose difference is below 10^-digits of the largest one expected.

    Compared as Fractions: doubles would not see the digits that matter here.
    """
    left, right = np.asarray(actual, dtype=object), np.asarray(expected, dtype=object)
    assert left.shape == right.shape, f"{what}: shape {left.shape}, expected {right.shape}"
    if not left.size:
        return
    assert {type(x) for x in left.flat} <= {Fraction}, what
    size = max(abs(Fraction(x)) for x in right.flat)
    error = max(abs(Fraction(x) - y) for x, y in zip(left.flat, right.flat, strict=True))
    assert error <= max(size, 1) / 10**digits, f"{what}: off by {float(error):.3g}"


def assert_same_fractions(first: TransferMatrix, second: TransferMatrix, digits: int) -> None:
    """Two rational transfer matrices agree to so many digits at points far from their poles."""
    for point in (F(401, 7), F(-977, 3)):
        assert_near(first.evaluate(point), second.evaluate(point), digits)


# --------------------------------------------------------------------------- beside the exact face


@two_precisions
@few
@given(model=models)
def test_stairs_and_orders_are_the_exact_ones(model: Realization, digits: int) -> None:
    """Stairs from both sides, order and number of modes removed are those proved."""
    for side in ("input", "output"):
        proved = exact.staircase(model, side=side)
        computed = multiprecision.staircase(model, side=side, digits=digits)
        assert computed.stairs == proved.stairs
        assert computed.dimension == proved.dimension
    proved, computed = exact.minimal(model), multiprecision.minimal(model, digits=digits)
    assert computed.order == proved.order
    assert computed.removed.count == proved.removed.count
    assert sum(mode.multiplicity for mode in computed.removed.modes) == proved.removed.count


@two_precisions
@few
@given(case=planted())
def test_parts_are_the_planted_ones(case: Planted, digits: int) -> None:
    """Dimensions are equal, and the polynomials of the parts agree to nearly all digits."""
    found = multiprecision.kalman_parts(case.model, digits=digits)
    assert found.dimensions == case.dimensions
    for part in PARTS:
        assert_near(found.polynomials[part], case.polynomials[part], digits - 25, part)


@two_precisions
@few
@given(model=models)
def test_forms_are_the_model_in_other_coordinates(model: Realization, digits: int) -> None:
    """A T = T A', B = T B', C T = C' to nearly all digits, for staircase and Kalman form."""
    A, B, C, D = model.matrices()
    for form in (
        multiprecision.staircase(model, digits=digits),
        multiprecision.staircase(model, side="output", digits=digits),
        multiprecision.kalman_parts(model, digits=digits),
    ):
        T, new = form.transformation, form.model
        assert new.kind == "rational"
        assert_near(product(T, new.A), product(A, T), digits - 20, "A")
        assert_near(product(T, new.B), B, digits - 20, "B")
        assert_near(new.C, product(C, T), digits - 20, "C")
        assert_near(new.D, D, digits - 2, "D")


@two_precisions
@few
@given(model=models)
def test_responses_before_and_after_agree(model: Realization, digits: int) -> None:
    """The reduction has the Markov parameters of the model, and the exact ones.

    To nearly all digits of the terms of which they are sums: in wild coordinates these are far
    larger than the sums.
    """
    count = 2 * model.order + 1
    proved = exact.markov_parameters(model, count)
    terms = exact.markov_parameters(Realization(*map(abs, model.matrices())), count)
    largest = max(terms.flat, default=F(0))
    reduced = multiprecision.minimal(model, digits=digits).model
    for found, lost in (
        (multiprecision.markov_parameters(model, count, digits=digits), 3),
        (exact.markov_parameters(reduced, count), 12),
    ):
        assert all(abs(x) <= largest / 10 ** (digits - lost) for x in (found - proved).flat)


@two_precisions
@few
@given(model=models)
def test_transfer_matrices_agree(model: Realization, digits: int) -> None:
    """Denominators are the exact ones to nearly all digits, and so are the values."""
    proved = exact.transfer_matrix(model)
    computed = multiprecision.transfer_matrix(model, digits=digits)
    for i in range(model.output_count):
        for j in range(model.input_count):
            assert_near(computed.denominators[i][j], proved.denominators[i][j], digits - 20)
            assert len(computed.numerators[i][j]) == len(proved.numerators[i][j])
    assert_same_fractions(computed, proved, digits - 20)


@two_precisions
@few
@given(case=fractions_with_common_factor(), improper=st.booleans())
def test_common_factors_are_the_planted_ones(
    case: PlantedFraction, improper: bool, digits: int
) -> None:
    """The common factor has the planted degree and agrees to many digits; so does what is left."""
    above, below = case.numerator, case.denominator
    if improper and any(above):
        above, below = below, above
    source = TransferMatrix(above, below, improper=True)
    found = multiprecision.cancel(source, digits=digits)
    proved = exact.cancel(source)
    assert_near(found.common, proved.common, digits - 25)
    assert_same_fractions(found.transfer, source, digits - 25)
    assert len(found.transfer.denominators[0][0]) == len(proved.transfer.denominators[0][0])
    if len(found.common) > 1:
        copies = [f for f, multiplicity in found.factors for _ in range(multiplicity)]
        assert_near(times(*copies), proved.common, digits - 30)


@two_precisions
@few
@given(source=transfer_matrices())
def test_transfer_matrices_reduce_to_the_exact_order(source: TransferMatrix, digits: int) -> None:
    """Entries over one denominator or several: the order is the McMillan degree."""
    assert multiprecision.minimal(source, digits=digits).order == exact.minimal(source).order


@pytest.mark.parametrize("digits", [30, 40, 41, 50, 60, 90])
def test_a_constant_in_disguise_is_no_dynamics(digits: int) -> None:
    """The second entry is -3. Over the common denominator rounding must leave no trace of more."""
    source = TransferMatrix(
        [[[-3, "14/5", "-27/20", "1/4"]], [[-3, "9/5", "-3/4"]]],
        [[[1, "2/3", "2/3", "-1/3"]], [[1, "-3/5", "1/4"]]],
    )
    assert not multiprecision.companion(source, digits=digits).C[1].any()
    with pytest.warns(realize.HiddenInstabilityWarning):
        assert multiprecision.minimal(source, digits=digits).order == 2


@two_precisions
@few
@given(case=fractions_with_common_factor(), side=st.sampled_from(["input", "output"]))
def test_companion_forms_are_the_exact_ones(case: PlantedFraction, side: str, digits: int) -> None:
    """Companion forms hold the same numbers, rounded to the digits."""
    source = TransferMatrix(case.numerator, case.denominator)
    proved = exact.companion(source, side=side)
    computed = multiprecision.companion(source, side=side, digits=digits)
    for name, left, right in zip("ABCD", computed.matrices(), proved.matrices(), strict=True):
        assert_near(left, right, digits - 3, name)


@two_precisions
@few
@given(model=unstructured(), count=st.integers(1, 9))
def test_sequences_have_the_exact_order(model: Realization, count: int, digits: int) -> None:
    """Also where the data are too short: the order is that of the exact face, the data come back.

    The whole sequence of a small model, and its first terms alone.
    """
    parameters = exact.markov_parameters(model, count)
    found = multiprecision.from_markov_parameters(parameters, digits=digits)
    assert found.order == exact.from_markov_parameters(parameters).order
    assert_near(exact.markov_parameters(found.model, count), parameters, digits - 20)


# --------------------------------------------------------------------------- beside floating


@few
@given(case=planted_mild())
def test_the_floating_face_agrees_where_it_is_right(case: Planted) -> None:
    """On mild models of doubles both faces that round find the same order and parts."""
    model = case.model.to_float()
    assert multiprecision.minimal(model).order == floating.minimal(model).order
    assert multiprecision.kalman_parts(model).dimensions == floating.kalman_parts(model).dimensions


@few
@given(case=planted_mild())
def test_modes_agree_with_both_faces(case: Planted) -> None:
    """Modes removed are those of the exact path, stability and multiplicity included.

    Where a mode lies on the boundary nothing computed can tell.
    """
    proved = exact.minimal(case.model).removed.modes
    found = multiprecision.minimal(case.model).removed.modes
    assert len(found) == len(proved)
    for mine, theirs in zip(by_value(found), by_value(proved), strict=True):
        assert abs(mine.value - theirs.value) <= 1e-9
        assert mine.multiplicity == theirs.multiplicity
        assert mine.part == theirs.part
        # A double eigenvalue at 50 digits is known to 25 digits, so only the boundary is in doubt.
        if theirs.stability in ("stable", "unstable") and abs(edge(theirs, case.model)) > 1e-9:
            assert mine.stability == theirs.stability
        else:
            assert mine.stability == "cannot tell"


def by_value(modes: Iterable[Any]) -> list[Any]:
    """Modes by part and value, rounded so that nothing hangs on the last digit."""
    return sorted(modes, key=lambda m: (m.part, round(m.value.real, 6), round(m.value.imag, 6)))


def edge(mode: Any, model: Realization) -> float:
    """How far a mode lies outside the boundary of stability."""
    return mode.value.real if model.sampling_period is None else abs(mode.value) - 1.0


@few
@given(case=planted())
def test_more_digits_settle_what_doubles_cannot(case: Planted) -> None:
    """In wild coordinates, where doubles may be wrong, 50 digits give the planted parts."""
    assume(case.model.order)
    found = multiprecision.kalman_parts(case.model)
    assert found.dimensions == case.dimensions


# --------------------------------------------------------------------------- irrational models


def turned(model: Realization, seed: int, angle: Any) -> Realization:
    """A model after rotations by an irrational angle in a few planes of states, exactly."""
    rng = np.random.default_rng(seed)
    A, B, C, D = (sympy.Matrix(*M.shape, [sympy.Rational(x) for x in M.flat])
                  for M in model.matrices())  # fmt: skip
    for _ in range(2):
        i, j = rng.choice(model.order, 2, replace=False)
        T = sympy.eye(model.order)
        T[i, i] = T[j, j] = sympy.cos(angle)
        T[i, j], T[j, i] = -sympy.sin(angle), sympy.sin(angle)
        A, B, C = T.T * A * T, T.T * B, C * T
    return Realization(
        [[cleared(x) for x in row] for row in A.tolist()],
        [[cleared(x) for x in row] for row in B.tolist()],
        [[cleared(x) for x in row] for row in C.tolist()],
        [list(row) for row in D.tolist()],
        sampling_period=model.sampling_period,
    )


def cleared(entry: Any) -> Any:
    """An expression with its products multiplied out, so that what is zero is written as zero."""
    return sympy.expand(sympy.expand(entry).subs(sympy.cos(1) ** 2, 1 - sympy.sin(1) ** 2))


def hidden_in_three_parts(seed: int) -> Planted:
    """Six to eight states with hidden modes of every kind, in coordinates that are not special."""
    picked = np.random.default_rng(seed).choice(9, 4, replace=False)
    chain = {part: (FACTORS[int(k)],) for part, k in zip(PARTS, picked, strict=True)}
    return plant(
        [chain],
        rng=np.random.default_rng(seed),
        more_inputs=0,
        more_outputs=0,
        steps=6,
        largest=1,
    )


@pytest.mark.parametrize("angle", [sympy.Integer(1), sympy.atan(sympy.sqrt(2))], ids=str)
@pytest.mark.parametrize("seed", range(4))
def test_a_rotated_model_shows_the_planted_parts(seed: int, angle: Any) -> None:
    """After a rotation by an irrational angle the hidden parts are still those planted."""
    case = hidden_in_three_parts(seed)
    model = turned(case.model, seed, angle)
    assert model.kind == "parametric"
    for digits in (30, 60):
        found = multiprecision.kalman_parts(model, digits=digits)
        assert found.dimensions == case.dimensions
        for part in PARTS:
            assert_near(found.polynomials[part], case.polynomials[part], digits - 15, part)
    assert multiprecision.minimal(model).order == case.dimensions[PARTS[1]]


def test_a_rotated_model_has_no_reading() -> None:
    """Rounded to doubles, and taken for exact, the rotated model shows more than it has."""
    case = hidden_in_three_parts(0)
    model = turned(case.model, 0, sympy.Integer(1))
    order, doubles = multiprecision.minimal(model).order, model.to_float()
    assert exact.minimal(doubles.read("stored")).order > order == case.dimensions[PARTS[1]]
    assert multiprecision.minimal(doubles).order == exact.minimal(doubles.read("stored")).order
    # Taken as data that are good to the digits of doubles, the same doubles do hide them.
    assert multiprecision.minimal(doubles, tolerance=1e-9).order == order


def sampled(rates: list[Any], period: Any, T: np.ndarray) -> list[list[Any]]:
    """exp(A period) for A with eigenvalues `rates`, in coordinates given by an integer matrix."""
    steps = sympy.diag(*[sympy.exp(rate * period) for rate in rates])
    change = sympy.Matrix(T.tolist())
    return (change * steps * change.inv()).applyfunc(sympy.expand).tolist()


def test_an_exactly_sampled_model_keeps_its_hidden_modes() -> None:
    """Sampled with exp(-1/10) and the like in its entries, a model of order 4 shows order 2."""
    T = np.array([[1, 2, 0, 1], [0, 1, 1, 0], [1, 0, 1, 1], [0, 1, 0, 1]])
    A = sampled([-1, -3, 0, sympy.Rational(1, 2)], sympy.Rational(1, 10), T)
    # The first two modes are driven, the second and the third are seen.
    B = T @ np.array([[1], [1], [0], [0]])
    back = np.round(np.linalg.inv(T) * np.linalg.det(T)).astype(int)
    C = np.array([[0, 1, 1, 0]]) @ back
    model = Realization(A, B, C, sampling_period="1/10")
    found = multiprecision.kalman_parts(model)
    assert found.dimensions == dict.fromkeys(PARTS, 1)
    e = mpmath.mp.clone()
    e.dps = 60
    for part, rate in zip(PARTS, ("-1/10", "-3/10", "1/20", "0"), strict=True):
        root = -found.polynomials[part][1]
        wanted = e.exp(e.mpf(F(rate).numerator) / F(rate).denominator)
        assert abs(e.mpf(root.numerator) / root.denominator - wanted) < 1e-40
    removed = {mode.part: mode for mode in multiprecision.minimal(model).removed.modes}
    assert removed[PARTS[0]].stability == "stable"
    assert removed[PARTS[2]].stability == "unstable"
    assert removed[PARTS[3]].stability == "cannot tell"  # exactly on the circle


def test_a_mode_lost_by_the_choice_of_the_sampling_period() -> None:
    """Sampled at half its period an oscillation of one input cannot be reached any more.

    The step over a period T of s^2 + 2 s + 1 + w^2 is exp(-T) (cos wT + ...): at wT = pi it is
    -exp(-T) times the identity. At a period beside that both states are reached.
    """
    for period, reached in ((sympy.pi / 3, 1), (sympy.Integer(1), 2)):
        w = 3
        c, s = sympy.cos(w * period), sympy.sin(w * period)
        A = [[c, s], [-s, c]]
        decayed = [[sympy.exp(-period) * x for x in row] for row in A]
        model = Realization(decayed, [1, 1], [1, 0], sampling_period=1.0)
        assert multiprecision.staircase(model).stairs == (1,) * reached
        assert realize.staircase(model).stairs == (1,) * reached


def test_irrational_transfer_matrices_cancel() -> None:
    """(s + pi)(s + sqrt 2) over (s + pi)(s + e): the common factor is s + pi."""
    pi, root, e = sympy.pi, sympy.sqrt(2), sympy.E
    source = TransferMatrix([1, pi + root, pi * root], [1, pi + e, pi * e])
    assert source.kind == "parametric"
    found = multiprecision.cancel(source)
    assert len(found.common) == 2
    assert abs(found.common[1] - F(31415926535897932384626433832795028841971, 10**40)) < F(
        1, 10**38
    )
    assert multiprecision.minimal(source).order == 1
    assert multiprecision.companion(source).order == 2
    assert realize.cancel(source).common == found.common


def test_irrational_sequences() -> None:
    """The powers of the golden ratio and of its conjugate have order 2, with the sum alone 1."""
    golden = (1 + sympy.sqrt(5)) / 2
    other = (1 - sympy.sqrt(5)) / 2
    powers = [0] + [sympy.expand(golden**k) for k in range(8)]
    assert multiprecision.from_markov_parameters(powers).order == 1
    both = [0] + [sympy.expand(golden**k + 3 * other**k) for k in range(8)]
    found = multiprecision.from_markov_parameters(both)
    assert found.order == 2
    assert realize.from_markov_parameters(both).model == found.model
    assert floating.from_markov_parameters(both).order == 2
    with pytest.raises(errors.UnsupportedEntryError, match=r"sqrt\(5\).*multiprecision"):
        exact.from_markov_parameters(both)


# --------------------------------------------------------------------------- steps of precision


@few
@given(model=models)
def test_steps_of_precision_agree_with_the_proof(model: Realization) -> None:
    """Every value that the exact ranks drop shrinks, every one that they keep stays."""
    found = precision_steps(model, digits=(40, 70, 100))
    assert found.stairs[0] == exact.staircase(model).stairs
    assert found.order == exact.minimal(model).order
    assert found.is_settled


@given(generators)
@settings(max_examples=6)
def test_steps_of_precision_on_irrational_models(rng: np.random.Generator) -> None:
    """The rounding of the constants shrinks with the precision like any rounding."""
    seed = int(rng.integers(1000))
    case = hidden_in_three_parts(seed)
    found = precision_steps(turned(case.model, seed, sympy.Integer(1)))
    assert found.order == case.dimensions[PARTS[1]]
    assert found.is_settled
    assert any(not step.kept and step.values[-1] > 0.0 for step in found.steps)


def test_results_are_the_same_after_pickling() -> None:
    """Models, decisions and modes of a result survive a pickle, entry by entry."""
    model = turned(hidden_in_three_parts(1).model, 1, sympy.Integer(1))
    found = multiprecision.minimal(model)
    back = pickle.loads(pickle.dumps(found))
    assert back.model == found.model
    assert back.decisions == found.decisions
    assert back.removed == found.removed
    assert (back.state_map == found.state_map).all()
    assert pickle.loads(pickle.dumps(precision_steps(model))) == precision_steps(model)


# --------------------------------------------------------------------------- examinations


def told(modes: Any) -> list[tuple[str, float, float, int, str]]:
    """Part, value, multiplicity and stability of modes, in an order that rounding does not turn.

    On the boundary computed digits cannot tell what a proof can, so there the word is theirs.
    """
    return sorted(
        (
            str(mode.part),
            round(mode.value.real, 9) + 0.0,
            round(mode.value.imag, 9) + 0.0,
            mode.multiplicity,
            "cannot tell" if abs(mode.value.real) < 1e-9 else str(mode.stability),
        )
        for mode in modes
    )


@pytest.mark.parametrize("seed", range(3))
def test_an_irrational_model_is_examined_as_the_rational_one_that_it_was(seed: int) -> None:
    """Turned by an irrational angle nothing is hidden or shown anew: the proof is of the other."""
    case = hidden_in_three_parts(seed)
    found = examine(turned(case.model, seed, sympy.Integer(1)))
    proved = examine(case.model)
    assert (found.answer.basis, proved.answer.basis) == ("multiprecision", "given")
    assert found.answer.order == proved.answer.order == case.dimensions[PARTS[1]]
    assert found.precision_steps["given"].is_settled
    assert told(found.hidden_modes) == told(proved.hidden_modes)
    assert all(mode.why is not None for mode in found.hidden_modes)
    for evident, known in (
        (found.stabilizable, proved.stabilizable),
        (found.detectable, proved.detectable),
    ):
        assert evident in (known, "cannot tell")


@few
@given(model=models)
def test_without_time_the_evidence_is_what_would_be_proved(model: Realization) -> None:
    """At budget 0 the order is the proved one, and a reason by pattern is so on both paths."""
    found, proved = examine(model, budget=0), examine(model)
    if "given" not in found.precision_steps:
        assert model.order == 0
        return
    assert found.answer.order == proved.answer.order
    assert {(str(m.part), m.why == "structural") for m in found.hidden_modes} == {
        (str(m.part), m.why == "structural") for m in proved.hidden_modes
    }
