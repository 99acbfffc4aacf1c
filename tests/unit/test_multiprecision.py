"""The multiprecision path: digits, cutoffs, results, multiple modes, steps of precision."""

from __future__ import annotations

import pickle
import threading
from fractions import Fraction
from typing import Any

import mpmath
import numpy as np
import pytest
import sympy

import realize
from realize import Realization, TransferMatrix, errors, exact, multiprecision
from realize.arithmetic import reflections
from realize.arithmetic.multiprecision import MAX_DIGITS, MIN_DIGITS, MultiprecisionPath, Numbers
from realize.arithmetic.steps import Trend, precision_steps
from realize.tolerance import check_tolerance, digits_tolerance

F = Fraction

quiet = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")


def weakly_coupled(size: Any) -> Realization:
    """Two states of which the second is reached only through a coupling of the size given."""
    return Realization([[-1, 0], [size, -2]], [1, 0], [1, 1])


# --------------------------------------------------------------------------- digits and tolerance


def test_the_default_tolerance_takes_half_of_the_digits() -> None:
    """One power of ten for two digits, times the order; a change here is a breaking one."""
    assert digits_tolerance(4, 50) == F(4, 10**25)
    assert digits_tolerance(1, 51) == F(1, 10**25)
    assert digits_tolerance(0, 1000) == F(1, 10**500)


@pytest.mark.parametrize("digits", [MIN_DIGITS - 1, 0, -5, MAX_DIGITS + 1, 10**9])
def test_too_few_or_too_many_digits(digits: int) -> None:
    """The limits are named, and the number that came."""
    with pytest.raises(errors.LimitError, match=f"digits is {digits}") as caught:
        multiprecision.staircase(weakly_coupled(1), digits=digits)
    assert caught.value.what == "digits"
    assert caught.value.limit in (MIN_DIGITS, MAX_DIGITS)


@pytest.mark.parametrize("digits", [50.0, "50", None, True])
def test_digits_are_an_integer(digits: Any) -> None:
    """Other things are refused by their type."""
    with pytest.raises(errors.UnsupportedEntryError, match="wanted an integer"):
        multiprecision.minimal(weakly_coupled(1), digits=digits)
    assert multiprecision.minimal(weakly_coupled(1), digits=np.int64(30)).order == 2


def test_bad_tolerances_are_refused() -> None:
    """As on the floating face."""
    for tolerance in (-1.0, float("nan"), "small"):
        with pytest.raises(errors.ToleranceError):
            multiprecision.minimal(weakly_coupled(1), tolerance=tolerance)  # type: ignore[arg-type]
    assert check_tolerance(0) == 0.0


def test_a_weak_coupling_is_kept_when_the_digits_reach_it() -> None:
    """A chain coupled by 1e-30 and back by 1: 50 digits drop it, 80 keep it, and so does 1e-40.

    Scaling by powers of two lifts a coupling that stands alone, so it is measured against the
    loop in which it stands.
    """
    loop = Realization([[-1, 1], ["1e-30", -2]], [1, 0], [1, 1])
    assert multiprecision.staircase(loop, digits=40).dimension == 1
    assert multiprecision.staircase(loop, digits=80).dimension == 2
    assert multiprecision.staircase(loop, digits=40, tolerance=1e-40).dimension == 2
    assert multiprecision.staircase(loop, digits=80, tolerance=1e-9).dimension == 1
    assert exact.staircase(loop).dimension == 2


@quiet
def test_decisions_are_doubles_with_the_cutoff_applied() -> None:
    """Cutoff = tolerance * scale; the numbers on both sides of each decision lie on its sides."""
    model = Realization([[-1, 1, 0], ["1/3", -2, 0], [0, 5, 7]], [1, 0, 0], [1, 1, 0])
    found = multiprecision.minimal(model, digits=30)
    assert found.order == 2
    for decision in found.decisions:
        assert type(decision.cutoff) is type(decision.scale) is float
        assert decision.cutoff == pytest.approx(3e-15 * decision.scale, rel=1e-15)
        assert decision.smallest_kept is None or decision.smallest_kept > decision.cutoff
        assert decision.largest_dropped is None or decision.largest_dropped <= decision.cutoff
    assert found.decisions[0].where == "reached, stage 1"
    assert realize.exact.minimal(model).order == 2


def test_a_thousand_digits() -> None:
    """Numbers below the range of doubles are decided with all digits and shown as zero."""
    model = Realization([[0, 1], [-2, "-1/3"]], [0, 1], [1, 0])
    found = multiprecision.staircase(model, digits=1000)
    assert found.dimension == 2
    assert found.decisions[0].cutoff == 0.0
    faint = Realization([[-1, 1], [F(1, 10**450), -2]], [1, 0], [1, 1])
    assert multiprecision.staircase(faint, digits=1000).dimension == 2
    assert multiprecision.staircase(faint, digits=800).dimension == 1


# --------------------------------------------------------------------------- what results hold


def test_numbers_are_rounded_to_nearest() -> None:
    """Rationals on both sides of a middle go to the nearer number of the path."""
    numbers = Numbers(20)
    unit = numbers.roundoff
    for sign in (1, -1):
        for part, expected in ((F(1, 3), 0), (F(2, 3), 1), (F(4, 3), 1), (F(5, 3), 2)):
            rounded = numbers.rounded(sign * (1 + part * unit), "entry")
            assert rounded == sign * (1 + expected * unit)
    assert numbers.rounded(0.1, "entry") == F(0.1)


def test_results_are_rational_models_of_binary_fractions() -> None:
    """Denominators are powers of two, and 1/3 comes back good to the digits asked for."""
    model = Realization([["-1/3", 1], [0, "-1/7"]], [0, 1], [1, 0], ["2/3"], sampling_period="1/10")
    found = multiprecision.staircase(model, digits=40)
    assert found.model.kind == "rational"
    assert found.model.sampling_period == F(1, 10)
    for matrix in (*found.model.matrices(), found.transformation):
        for entry in matrix.flat:
            assert type(entry) is Fraction
            assert entry.denominator.bit_count() == 1
    assert 0 < abs(found.model.D[0, 0] - F(2, 3)) < F(1, 10**40)


def test_rationals_beside_floats_are_rounded_to_the_digits_not_to_doubles() -> None:
    """In a mixed model 1/3 is good to 50 digits, and 0.1 is the double it is."""
    model = Realization([["1/3", 0.1], [0, 1]], [0, 1], [1, 0])
    parameters = multiprecision.markov_parameters(model, 4)[:, 0, 0]
    assert parameters[2] == F(0.1)
    assert abs(parameters[3] - F(0.1) * F(4, 3)) < F(1, 10**50)
    fraction = TransferMatrix([1], [1, "1/3", 0.1])
    below = multiprecision.cancel(fraction).transfer.denominators[0][0]
    assert below[2] == F(0.1)
    assert 0 < abs(below[1] - F(1, 3)) < F(1, 10**50)


def test_a_result_can_be_used_like_any_rational_model() -> None:
    """Saved, evaluated exactly, read, compared; and asked again it hardly changes."""
    transfer = multiprecision.transfer_matrix(Realization([[-1, 1], [0, -3]], [0, 1], [1, 0]))
    assert transfer.read("given") is transfer
    assert transfer.evaluate(0)[0, 0] == F(1, 3)
    again = multiprecision.cancel(transfer)
    assert len(again.common) == 1
    assert pickle.loads(pickle.dumps(transfer)) == transfer


@quiet
def test_names_are_kept() -> None:
    """Inputs and outputs keep their names; new coordinates have no names of their own."""
    model = Realization(
        [[1, 0], [0, 2]], [1, 1], [1, 0], input_names=["force"], output_names=["speed"]
    )
    for found in (
        multiprecision.minimal(model).model,
        multiprecision.staircase(model).model,
        multiprecision.transfer_matrix(model),
    ):
        assert (found.input_names, found.output_names) == (("force",), ("speed",))


def test_units_by_powers_of_two_change_nothing() -> None:
    """States in other units, beyond the range of doubles: the same decisions, digit by digit."""
    model = Realization([[-1, 1, 0], [1, -2, 1], [0, 1, -3]], [1, 0, 0], [0, 0, 1])
    units = [F(2) ** 700, F(1, 2**900), F(1)]
    A = [[model.A[i, j] * units[i] / units[j] for j in range(3)] for i in range(3)]
    B = [[model.B[i, 0] * units[i]] for i in range(3)]
    C = [[model.C[0, j] / units[j] for j in range(3)]]
    other = Realization(A, B, C)
    first, second = multiprecision.staircase(model), multiprecision.staircase(other)
    assert second.stairs == first.stairs == (1, 1, 1)
    assert second.decisions == first.decisions


def test_entries_beyond_the_range_of_doubles() -> None:
    """Entries of 1e900 and 1e-900 are decided like any others."""
    model = Realization([["-1e900", 0], ["1e900", "-3e900"]], ["1e-900", 0], [0, "1e900"])
    assert multiprecision.minimal(model).order == 2
    assert multiprecision.kalman_parts(model).dimensions["controllable, observable"] == 2
    with pytest.warns(realize.HiddenInstabilityWarning):
        reduced = multiprecision.minimal(Realization([["1e900", 0], [0, -1]], [0, 1], [1, 1]))
    assert reduced.order == 1
    with pytest.raises(errors.EntryError, match=r"2\^2990 is too large for a double"):
        _ = reduced.removed.modes


@quiet
def test_the_condition_of_the_state_map() -> None:
    """An orthogonal reduction of a scaled model: the condition is a double, or infinite."""
    model = Realization([[-1, 0, 0], [0, -2, 0], [0, 0, 3]], [1, 1, 0], [1, 1, 1])
    found = multiprecision.minimal(model)
    assert found.state_map is not None
    assert found.state_map.shape == (2, 3)
    expected = np.linalg.cond(found.state_map.astype(float))
    assert found.state_map_condition == pytest.approx(expected, rel=1e-12)
    assert multiprecision.minimal(Realization([], [], [], [1])).state_map_condition == 1.0
    assert multiprecision.minimal(TransferMatrix([1], [1, 2])).state_map_condition is None


# --------------------------------------------------------------------------- modes


def hidden(block: list[list[Any]], period: Any = None) -> Realization:
    """A visible state and a hidden block that nothing reaches, in mixed coordinates."""
    size = len(block) + 1
    A = [[F(-5)] + [F(0)] * (size - 1)] + [[F(0), *map(F, row)] for row in block]
    T = [[F(int(i == j) + (i + 2 * j) % 3) for j in range(size)] for i in range(size)]
    A_, T_ = sympy.Matrix(A), sympy.Matrix(T)
    back = T_.inv()
    return Realization(
        (T_ * A_ * back).tolist(),
        (T_ * sympy.eye(size)[:, :1]).tolist(),
        (sympy.ones(1, size) * back).tolist(),
        sampling_period=period,
    )


@quiet
@pytest.mark.parametrize(
    ("block", "expected"),
    [
        ([[2, 1, 0], [0, 2, 1], [0, 0, 2]], [(2, 3, "unstable")]),
        ([[-2, 1, 0], [0, -2, 1], [0, 0, -2]], [(-2, 3, "stable")]),
        ([[0, 1, 0], [0, 0, 1], [0, 0, 0]], [(0, 3, "cannot tell")]),
        (
            [[0, 1, 1, 0], [-1, 0, 0, 1], [0, 0, 0, 1], [0, 0, -1, 0]],
            [(-1j, 2, "cannot tell"), (1j, 2, "cannot tell")],
        ),
        (
            [[-1, 1, 1, 0], [-1, -1, 0, 1], [0, 0, -1, 1], [0, 0, -1, -1]],
            [(-1 - 1j, 2, "stable"), (-1 + 1j, 2, "stable")],
        ),
        ([["-1e-20", 1], [0, -1]], [(-1, 1, "stable"), (-1e-20, 1, "stable")]),
        ([["1e-20", 1], [0, -1]], [(-1, 1, "stable"), (1e-20, 1, "unstable")]),
        ([["1e-30", 1], [0, -1]], [(-1, 1, "stable"), (1e-30, 1, "cannot tell")]),
    ],
    ids=lambda value: str(value)[:30],
)
def test_multiple_modes_are_one_mode(
    block: list[list[Any]], expected: list[tuple[complex, int, str]]
) -> None:
    """Eigenvalues that rounding has spread are put together again, at their common value.

    In 50 digits 1e-20 is told from zero, 1e-30 is not: what may be double is known to 25 digits.
    """
    modes = multiprecision.minimal(hidden(block)).removed.modes
    assert len(modes) == len(expected)
    for mode, (value, multiplicity, stability) in zip(modes, expected, strict=True):
        # What cannot be told from zero has no digits.
        absolute = 1e-24 if stability == "cannot tell" else 0.0
        assert mode.value == pytest.approx(value, rel=1e-8, abs=absolute)
        assert (mode.multiplicity, mode.stability) == (multiplicity, stability)


def test_many_eigenvalues_are_not_one() -> None:
    """Thirty eigenvalues are thirty, also the three that are a million times smaller."""
    rng = np.random.default_rng(3)
    A = rng.normal(size=(30, 30))
    A[:3, 3:] = 0.0
    A[:3, :3] *= 1e-6
    opened = MultiprecisionPath(50).open(Realization(A, A[:, :1], A[:1]))
    found = opened.judged(opened.A, None)
    assert [multiplicity for _, multiplicity, _ in found] == [1] * 30
    wanted = sorted(np.linalg.eigvals(A).tolist(), key=abs)
    for value, other in zip(sorted((v for v, _, _ in found), key=abs), wanted, strict=True):
        assert abs(value) == pytest.approx(abs(other), rel=1e-8)


@quiet
def test_modes_on_the_circle_are_judged_with_all_digits() -> None:
    """|z| = 1 in doubles may be 1 + 1e-20 or 1 exactly, which only the digits tell apart."""
    turn = [["3/5", "4/5"], ["-4/5", "3/5"]]
    on_circle = multiprecision.minimal(hidden(turn, 1)).removed.modes
    assert [mode.stability for mode in on_circle] == ["cannot tell"] * 2
    factor = 1 + F(1, 10**20)
    outside = [[F(x) * factor for x in row] for row in turn]
    modes = multiprecision.minimal(hidden(outside, 1)).removed.modes
    assert [mode.stability for mode in modes] == ["unstable"] * 2
    assert {abs(mode.value) for mode in modes} == {1.0}


@quiet
def test_a_warning_names_what_was_removed() -> None:
    """Like the other faces."""
    with pytest.warns(realize.HiddenInstabilityWarning, match="unstable"):
        multiprecision.minimal(hidden([[1]]))


def test_factors_have_multiplicities() -> None:
    """(s + 1)^3 (s^2 + 2)^2 common to both sides comes out as these two factors."""
    common = np.polymul(np.poly([-1, -1, -1]), np.polymul([1, 0, 2], [1, 0, 2]))
    common = [int(c) for c in common]
    source = TransferMatrix(common, np.polymul(common, [1, 5]).astype(int).tolist())
    found = multiprecision.cancel(source)
    assert len(found.common) == 8
    assert [(len(f), m) for f, m in found.factors] == [(2, 3), (3, 2)]
    linear, square = (f for f, _ in found.factors)
    assert abs(linear[1] - 1) < F(1, 10**12)
    assert abs(square[2] - 2) < F(1, 10**20)
    assert any("cannot tell" in c or "Hidden mode" in c for c in found.cautions)


def test_no_common_factor() -> None:
    """What is coprime stays as it is; a zero numerator leaves the constant; a near one is near."""
    coprime = TransferMatrix([1, 2], [1, 3, 5])
    assert multiprecision.cancel(coprime).transfer == coprime
    zero = multiprecision.cancel(TransferMatrix([0], [2, 3]))
    assert (zero.transfer.numerators, zero.transfer.denominators) == ((((0,),),), (((2,),),))
    near = TransferMatrix([1, 1 + F(1, 10**15)], [1, 3, 2])
    found = multiprecision.cancel(near)
    assert len(found.common) == 1
    assert found.near[0].change < 1e-15
    assert len(multiprecision.cancel(near, tolerance=1e-9).common) == 2


def test_leading_noise_of_a_numerator_is_dropped() -> None:
    """After an irrational rotation the relative degree is still that of the model."""
    c, s = sympy.cos(1), sympy.sin(1)
    # x1' = x2, x2' = u, y = x1, turned by one radian: C B = 0.
    model = Realization([[c * s, c**2], [-(s**2), -c * s]], [s, c], [c, -s])
    transfer = multiprecision.transfer_matrix(model)
    assert len(transfer.numerators[0][0]) == 1
    assert abs(transfer.numerators[0][0][0] - 1) < F(1, 10**48)


# --------------------------------------------------------------------------- shapes without entries


@quiet
@pytest.mark.parametrize("shape", [(0, 2, 3), (2, 0, 1), (2, 1, 0), (2, 0, 0), (0, 0, 0)])
def test_empty_shapes_have_every_form(shape: tuple[int, int, int]) -> None:
    """Without states, inputs or outputs every form answers as the exact face does."""
    states, inputs, outputs = shape
    model = Realization(
        np.full((states, states), F(1), dtype=object),
        np.full((states, inputs), F(1), dtype=object),
        np.full((outputs, states), F(1), dtype=object),
        np.full((outputs, inputs), F(1), dtype=object),
    )
    for side in ("input", "output"):
        proved = exact.staircase(model, side=side)
        assert multiprecision.staircase(model, side=side).stairs == proved.stairs
    reduced, proved_parts = multiprecision.minimal(model), exact.kalman_parts(model)
    assert reduced.order == 0
    assert multiprecision.kalman_parts(model).dimensions == proved_parts.dimensions
    found = multiprecision.transfer_matrix(model)
    assert (found.input_count, found.output_count) == (inputs, outputs)
    assert multiprecision.markov_parameters(model, 2).shape == (2, outputs, inputs)
    assert precision_steps(model).is_settled


@quiet
def test_a_model_of_zeros() -> None:
    """Nothing but zeros: scale zero, no state reached, nothing divided by it."""
    model = Realization([[0, 0], [0, 0]], [0, 0], [0, 0])
    assert multiprecision.minimal(model).order == 0
    found = precision_steps(model)
    assert (found.order, found.is_settled) == (0, True)
    assert multiprecision.from_markov_parameters([0, 0, 0]).order == 0


# --------------------------------------------------------------------------- steps of precision


def test_a_zero_shrinks_and_a_coupling_stays() -> None:
    """Turned by one radian, a hidden state leaves noise that shrinks; the rest stays."""
    c, s = sympy.cos(1), sympy.sin(1)
    turn = sympy.Matrix([[c, -s], [s, c]])
    A = (turn.T * sympy.diag(-1, -2) * turn).applyfunc(sympy.expand)
    model = Realization(A.tolist(), [c, -s], [c, -s])
    found = precision_steps(model, digits=(16, 32, 64))
    assert found.digits == (16, 32, 64)
    assert (found.order, found.stairs) == (1, ((1,), (1,)))
    by_trend = {trend: [x for x in found.steps if x.trend is trend] for trend in Trend}
    assert [x.where for x in by_trend[Trend.SHRINKS]] == ["reached, stage 2"]
    assert [x.where for x in by_trend[Trend.STAYS]] == ["reached, stage 1", "seen, stage 1"]
    noise = by_trend[Trend.SHRINKS][0].values
    assert 0.0 < noise[0] < 1e-15
    assert all(value < 10.0 ** (1 - d) for value, d in zip(noise, found.digits, strict=True))
    assert found.is_settled


def test_a_coupling_that_only_the_last_precision_sees_is_not_settled() -> None:
    """A coupling of 1e-50 in a loop is noise at 40 digits, and at 60 neither noise nor the same."""
    c, s = sympy.cos(1), sympy.sin(1)
    turn = sympy.Matrix([[c, -s], [s, c]])
    loop = sympy.Matrix([[-1, 1], [sympy.Rational(1, 10**50), -2]])
    A = (turn.T * loop * turn).applyfunc(sympy.expand)
    model = Realization(A.tolist(), [c, -s], [c, -s])
    found = precision_steps(model, digits=(40, 60))
    assert Trend.CANNOT_TELL in [step.trend for step in found.steps]
    assert not found.is_settled
    more = precision_steps(model, digits=(40, 80, 120))
    assert more.stairs[0] == (1, 1)
    assert more.is_settled


@pytest.mark.parametrize("digits", [(), (50,), (50, 50), (60, 30), (50, 61), (20, 40, 45)])
def test_steps_want_rising_digits(digits: tuple[int, ...]) -> None:
    """Fewer than two precisions, falling ones or near ones, say nothing about a trend."""
    with pytest.raises(errors.LimitError, match="at least 12 more"):
        precision_steps(weakly_coupled(1), digits=digits)


def test_steps_are_records() -> None:
    """Frozen, equal by value, picklable."""
    found = precision_steps(weakly_coupled(1), digits=(20, 40))
    assert pickle.loads(pickle.dumps(found)) == found
    with pytest.raises(AttributeError):
        found.order = 3  # type: ignore[misc]


# --------------------------------------------------------------------------- global state


def test_paths_do_not_share_a_context() -> None:
    """Two paths of other digits work side by side in threads, and mpmath's own stays."""
    before = mpmath.mp.prec, mpmath.iv.prec
    model = Realization([[-1, 1, 0], [1, -2, 1], [0, 1, "-1/3"]], [1, 0, 0], [0, 0, 1])
    expected = {d: multiprecision.minimal(model, digits=d).model for d in (20, 35, 50, 65)}
    found: dict[int, Any] = {}

    def work(digits: int) -> None:
        found[digits] = multiprecision.minimal(model, digits=digits).model

    threads = [threading.Thread(target=work, args=(d,)) for d in expected]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert found == expected
    assert len({m.digest for m in found.values()}) == 4
    assert (mpmath.mp.prec, mpmath.iv.prec) == before


def test_answers_do_not_depend_on_the_precision_set() -> None:
    """Under another global precision the same digits come out."""
    model = Realization([[0, sympy.sqrt(2)], [-sympy.pi, -1]], [0, 1], [1, 0])
    expected = multiprecision.kalman_parts(model).model
    kept = mpmath.mp.prec
    mpmath.mp.prec = 30
    try:
        assert multiprecision.kalman_parts(model).model == expected
        assert mpmath.mp.prec == 30
    finally:
        mpmath.mp.prec = kept


# --------------------------------------------------------------------------- linear algebra


def table(numbers: Numbers, rows: Any) -> Any:
    """An array of numbers of a context."""
    array = np.array(rows, dtype=object)
    return numbers.table(np.array([F(x) for x in array.flat], dtype=object).reshape(array.shape))


def largest(numbers: Numbers, M: Any) -> float:
    """The size of the largest entry."""
    return max((float(abs(x)) for x in M.flat), default=0.0)


@pytest.mark.parametrize("rank", [0, 1, 2, 3])
@pytest.mark.parametrize("shape", [(3, 3), (2, 5), (5, 3), (4, 4)])
def test_rotations_are_orthogonal_whatever_the_rank(shape: tuple[int, int], rank: int) -> None:
    """G is orthogonal, the rows of G M are orthogonal, and the norms are the singular values."""
    numbers = Numbers(60)
    rng = np.random.default_rng(rank)
    factors = rng.integers(-3, 4, (shape[0], rank)), rng.integers(-3, 4, (rank, shape[1]))
    doubles = (factors[0] @ factors[1]).astype(float)
    M = table(numbers, doubles.astype(int).tolist())
    # Entries of rounding noise, as a reduction leaves them.
    M[-1, -1] += numbers.context.mpf(10) ** -58
    G, rows, norms = reflections.orthogonal_rows(numbers.context, M)
    one = reflections.identity(numbers.context, shape[0])
    assert largest(numbers, G @ G.T - one) < 1e-57
    assert largest(numbers, G @ M - rows) < 1e-55
    gram = rows @ rows.T
    np.fill_diagonal(gram, numbers.context.zero)
    assert largest(numbers, gram) < 1e-55
    wanted = np.zeros(shape[0])
    values = np.linalg.svd(doubles, compute_uv=False)
    wanted[: len(values)] = values
    assert [float(x) for x in norms] == pytest.approx(wanted.tolist(), abs=1e-13)
    assert norms == sorted(norms, reverse=True)


def test_least_squares_of_dependent_columns() -> None:
    """A combination is found though the columns are dependent; what is none leaves its distance."""
    numbers = Numbers(40)
    cutoff = numbers.context.mpf(10) ** -20
    M = table(numbers, [[1, 2, 0], [2, 4, 1], [3, 6, 0]])
    x, distance = reflections.least_squares(
        numbers.context, M, M @ table(numbers, [1, 1, 5]), cutoff
    )
    assert largest(numbers, M @ x - M @ table(numbers, [1, 1, 5])) < 1e-37
    assert distance < cutoff
    _, distance = reflections.least_squares(numbers.context, M, table(numbers, [3, 0, -1]), cutoff)
    assert float(distance) == pytest.approx(np.sqrt(10), rel=1e-15)


def test_polynomials_of_hessenberg_forms() -> None:
    """det(s - A) of an integer matrix is the exact one to nearly all digits."""
    rng = np.random.default_rng(5)
    A = rng.integers(-9, 10, (7, 7))
    numbers = Numbers(50)
    found = reflections.characteristic_polynomial(numbers.context, table(numbers, A.tolist()))
    wanted = exact.transfer_matrix(Realization(A, A[:, :1], A[:1])).denominators[0][0]
    for mine, theirs in zip(found, wanted, strict=True):
        assert abs(numbers.fraction(mine) - theirs) < abs(theirs) * F(1, 10**44)


@pytest.mark.parametrize(
    ("rows", "expected"),
    [
        (np.roll(np.eye(7), 1, axis=0), np.exp(2j * np.pi * np.arange(7) / 7)),
        (np.roll(np.eye(8), 1, axis=0), np.exp(2j * np.pi * np.arange(8) / 8)),
        (np.zeros((4, 4)), np.zeros(4)),
        (np.eye(5, k=1), np.zeros(5)),
        (np.diag([3, 3, -1]), [3, 3, -1]),
        ([[0, 1, 0, 0], [-1, 0, 0, 0], [0, 0, 0, 1], [0, 0, -1, 0]], [1j, 1j, -1j, -1j]),
        ([[0, 0, 1], [1, 0, 0], [0, 1, 0]], np.exp(2j * np.pi * np.arange(3) / 3)),
        (np.zeros((0, 0)), []),
        ([[5]], [5]),
    ],
    ids=["cycle of 7", "cycle of 8", "zero", "nilpotent", "diagonal", "pairs", "cycle of 3",
         "empty", "one"],
)  # fmt: skip
def test_eigenvalues_of_matrices_that_make_iterations_stall(rows: Any, expected: Any) -> None:
    """Cycles, on which plain shifts stand still, and multiple eigenvalues; pairs are exact."""
    numbers = Numbers(50)
    size = len(rows)
    A = table(numbers, np.asarray(rows, dtype=int).tolist()).reshape(size, size)
    found = reflections.eigenvalues(numbers.context, A)
    waiting = list(expected)
    for value in found:
        nearest = min(waiting, key=lambda other: abs(other - complex(value)))
        # An eigenvalue of multiplicity m is good to the m-th part of the digits.
        assert abs(complex(value) - nearest) < 1e-8
        waiting.remove(nearest)
    assert waiting == []
    assert all(value.conjugate() in found for value in found)


def test_eigenvalues_are_good_to_all_digits() -> None:
    """Those of an integer matrix are roots of its exact polynomial to nearly all digits."""
    A = np.random.default_rng(11).integers(-9, 10, (12, 12))
    numbers = Numbers(60)
    polynomial = exact.transfer_matrix(Realization(A, A[:, :1], A[:1])).denominators[0][0]
    coefficients = [numbers.number(c) for c in polynomial]
    found = reflections.eigenvalues(numbers.context, table(numbers, A.tolist()))
    assert len(found) == 12
    for value in found:
        rest = numbers.context.polyval(coefficients, value)
        slope = numbers.context.polyval(np.polyder(np.array(coefficients)).tolist(), value)
        assert abs(rest / slope) < 1e-54


def test_forced_ranks_are_taken() -> None:
    """A replay takes the stairs that it is given, as far as there are rows for them."""
    opened = MultiprecisionPath(30).open(Realization([[1, 1], [0, 2]], [1, 0], [1, 1]))
    assert opened.reached(opened.A, opened.B, opened.C, "reached").stairs == (1,)
    forced = opened.reached(opened.A, opened.B, opened.C, "reached", (1, 1))
    assert forced.stairs == (1, 1)
    none = opened.reached(opened.A, opened.B, opened.C, "reached", ())
    assert (none.stairs, none.dimension) == ((), 0)


@quiet
@pytest.mark.parametrize("tolerance", [1e-3, 0.03, 0.1, 0.3, 1.0])
def test_contradicting_decisions_are_named(tolerance: float) -> None:
    """At a tolerance far too coarse the answer adds up, or says that it cannot."""
    try:
        found = multiprecision.kalman_parts(hidden([[1, 1], [2, -3]]), tolerance=tolerance)
    except errors.PrecisionError as error:
        said = str(error)
    else:
        said = f"{sum(found.dimensions.values())} states in all"
    assert said == "3 states in all" or "contradict" in said
