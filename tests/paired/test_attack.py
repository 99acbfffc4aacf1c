"""What a hostile user would try: extreme units, rounding that poses as structure, spent budgets.

Each test holds something that the two paths together promise. All draws are seeded.
"""

from __future__ import annotations

import itertools
import json
import math
from collections.abc import Iterator
from concurrent.futures import ThreadPoolExecutor
from fractions import Fraction
from typing import Any

import flint
import mpmath
import numpy as np
import pytest

import realize
from realize import Realization, Reduction, TransferMatrix, exact, floating, polynomials
from realize.arithmetic import modular
from tests.helpers import (
    PARTS,
    Polynomial,
    assert_close,
    assert_equal_exact,
    identity,
    join,
    matrix,
    rank,
    times,
    zeros,
)
from tests.strategies import FACTORS, Planted, plant

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")

EPS = 2.0**-52


def planted(seed: int, *, chains: int = 2, most: int = 2, steps: int = 4) -> Planted:
    """A seeded planted model with up to ``most`` factors in each part of each chain."""
    rng = np.random.default_rng(seed)
    drawn = [
        {
            part: tuple(FACTORS[k] for k in rng.integers(0, 9, rng.integers(0, most + 1)))
            for part in PARTS
        }
        for _ in range(chains)
    ]
    return plant(drawn, rng=rng, more_inputs=1, more_outputs=1, steps=steps, largest=1)


def rotation(rng: np.random.Generator, size: int) -> np.ndarray:
    """A random orthogonal matrix, to rounding."""
    return np.linalg.qr(rng.standard_normal((size, size)))[0]


def turned(case: Planted, seed: int, *, units: bool) -> Realization:
    """The planted model in rotated coordinates, in doubles; with ``units``, states rescaled too."""
    rng = np.random.default_rng(seed)
    A, B, C, D = case.model.to_float().matrices()
    Q = rotation(rng, len(A))
    A, B, C = Q.T @ A @ Q, Q.T @ B, C @ Q
    if units:
        x = 2.0 ** rng.integers(-8, 9, len(A)) * rng.uniform(1.0, 2.0, len(A))
        A, B, C = A * x / x[:, None], B / x[:, None], C * x
    return Realization(A, B, C, D)


# ------------------------------------------------------------------ every combination of parts


@pytest.mark.parametrize("sizes", list(itertools.product(range(3), repeat=4)))
def test_every_combination_of_parts_is_found_exactly(sizes: tuple[int, ...]) -> None:
    """Dimensions 0 to 2 for each of the four parts: polynomials exactly, dimensions in doubles."""
    rng = np.random.default_rng(sum(3**k * size for k, size in enumerate(sizes)))
    chain = {
        part: tuple(FACTORS[k] for k in rng.integers(0, 6, size))
        for part, size in zip(PARTS, sizes, strict=True)
    }
    case = plant([chain], rng=rng, more_inputs=1, more_outputs=1, steps=8, largest=1)
    assert dict(exact.kalman_parts(case.model).polynomials) == case.polynomials
    assert dict(floating.kalman_parts(case.model).dimensions) == case.dimensions
    examination = realize.examine(case.model)
    assert examination.parts == {"given": case.polynomials}
    assert sum(mode.multiplicity for mode in examination.modes) == sum(sizes)


# ------------------------------------------------------------------ units


@pytest.mark.parametrize("seed", range(60))
def test_units_of_every_kind_change_no_bit(seed: int) -> None:
    """States over 30 binades, B by 2^-40, C by 2^25, time by 2^17: the very same decisions."""
    case = planted(seed, most=1 + seed % 2)
    rng = np.random.default_rng(seed)
    A, B, C, _ = case.model.to_float().matrices()
    if seed % 3 == 0:
        Q = rotation(rng, len(A))
        A, B, C = Q.T @ A @ Q, Q.T @ B, C @ Q
        # A channel that should be empty must not be filled with the noise of the rotation.
        A, B, C = (np.where(abs(M) < 1e-13, 0.0, M) for M in (A, B, C))
    x = 2.0 ** rng.integers(-15, 16, len(A))
    old = floating.minimal(Realization(A, B, C))
    new = floating.minimal(
        Realization(
            2.0**17 * A * x / x[:, None], 2.0 ** (17 - 40) * B / x[:, None], 2.0**25 * C * x
        )
    )
    assert old.order == case.order
    assert new.decisions == old.decisions


@pytest.mark.parametrize("power", [-1000, -600, -300, 300, 600, 1000])
def test_the_unit_of_time_may_be_extreme(power: int) -> None:
    """A times 2^power, though squares of its entries leave the range of doubles."""
    A = np.array(
        [[-1.0, 1.0, 0.0, 2.0], [0.5, -2.0, 1.0, 1.0], [1.0, 0.0, -3.0, 1.0], [0, 0, 0, 1]]
    )
    B, C = np.array([1.0, 2.0, 1.0, 0.0]), np.array([1.0, 1.0, 0.0, 1.0])
    order = floating.minimal(Realization(A, B, C)).order
    assert order == 3
    assert floating.minimal(Realization(A * 2.0**power, B, C)).order == order


@pytest.mark.parametrize("scale", [1.0, 1e160, 1e-160, 1e300, 1e-300])
def test_a_common_factor_does_not_depend_on_the_size_of_the_coefficients(scale: float) -> None:
    """(s + 1) / (s + 1) (s + 2), numerator and denominator multiplied by one number."""
    source = TransferMatrix([scale, scale], [scale, 3 * scale, 2 * scale])
    assert_close(floating.cancel(source).common, (1.0, 1.0), relative=1e-12)


@pytest.mark.parametrize("scale", [1.0, 1e160, 1e250, 1e-160, 1e-300])
def test_the_order_of_a_sequence_does_not_depend_on_its_size(scale: float) -> None:
    """Impulse response of 1/(s + 1) + 1/(s + 2), multiplied by one number."""
    sequence = [0.0, *(scale * ((-1.0) ** k + (-2.0) ** k) for k in range(6))]
    assert floating.from_markov_parameters(sequence).order == 2


def test_what_overflows_is_refused_and_not_returned() -> None:
    """Results too large for doubles are an error of the library, never infinities."""
    model = Realization([[1e200, 1.0], [0.0, 1e200]], [1.0, 1.0], [1.0, 1.0])
    for form in (
        floating.transfer_matrix,
        floating.companion,
        lambda m: floating.markov_parameters(m, 5),
    ):
        with pytest.raises(realize.RealizeError):
            form(model)


@pytest.mark.parametrize("size", [5e-324, 1e-310, 1e308])
def test_an_examination_survives_the_ends_of_the_range(size: float) -> None:
    """Entries at the smallest and the largest doubles: the page and the record are made."""
    model = Realization([[size, 0.0], [0.0, -size]], [size, 0.0], [1.0, 1.0])
    examination = realize.examine(model)
    assert examination.minimal_order["stored"] == 1
    assert str(examination)
    json.dumps(examination.to_dict(), allow_nan=False)


def test_an_examination_survives_entries_over_all_exponents() -> None:
    """A minimal model that no scaling can hold in doubles: the exact path still answers."""
    rng = np.random.default_rng(0)
    A, B, C = (
        np.ldexp(rng.uniform(1.0, 2.0, shape), rng.integers(-1000, 1000, shape))
        for shape in ((8, 8), (8, 2), (2, 8))
    )
    with np.errstate(all="raise"):
        examination = realize.examine(Realization(A, B, C))
    assert examination.minimal_order["stored"] == 8
    json.dumps(examination.to_dict(), allow_nan=False)


def test_the_exact_path_reduces_what_no_double_can_hold() -> None:
    """A hidden mode at 10^400 is removed exactly; nothing about it needs a double."""
    model = Realization([[-1, 0], [0, 10**400]], [1, 0], [1, 1])
    reduction = exact.minimal(model)
    assert reduction.order == 1
    assert reduction.removed.polynomial == (1, -(10**400))


# ------------------------------------------------------------------ the nearest model


@pytest.mark.parametrize("units", [False, True])
@pytest.mark.parametrize("seed", range(24))
def test_a_rotated_model_is_within_rounding_of_what_was_planted(seed: int, units: bool) -> None:
    """The planted model is within a few roundings, so the answer must not be "minimal".

    A page that says so would also say that no mode is hidden. The witness has the order and lies
    at the distance that are stated.
    """
    case = planted(seed, most=2)
    if case.order == case.model.order:
        pytest.skip("nothing was hidden in this draw")
    model = turned(case, seed, units=units)
    examination = realize.examine(model)
    assert examination.floating_order == case.order
    nearest = examination.nearest
    assert nearest is not None
    assert nearest.relative_distance <= 8 * model.order * EPS
    assert (examination.answer.order, examination.answer.basis) == (case.order, "nearest")
    assert exact.minimal(nearest.witness).order == nearest.order == case.order
    stored = model.read("stored")
    pairs = list(zip(stored.matrices()[:3], nearest.witness.matrices()[:3], strict=True))
    change = sum(((M - W) ** 2).sum() for M, W in pairs)
    size = sum((M**2).sum() for M, _ in pairs)
    assert nearest.relative_distance == pytest.approx(math.sqrt(change / size), rel=1e-6)


@pytest.mark.parametrize("channel", ["input", "output"])
def test_the_unit_of_a_channel_does_not_change_the_answer(channel: str) -> None:
    """Metres or micrometres: a coupling of 1e-11, far above rounding, stays what it is."""
    Q = rotation(np.random.default_rng(3), 3)
    A = Q.T @ np.array([[-1.0, 0.5, 0.2], [0.3, -2.0, 0.4], [1e-11, 0.0, 0.7]]) @ Q
    B, C = Q.T @ np.array([[1.0], [1.0], [0.0]]), np.ones((1, 3)) @ Q
    u, y = (1e6, 1.0) if channel == "input" else (1.0, 1e6)
    before = realize.examine(Realization(A, B, C)).answer
    after = realize.examine(Realization(A, u * B, y * C)).answer
    assert before.order == 3
    assert after == before


# ------------------------------------------------------------------ stability

BOUNDARY: dict[str, tuple[list[list[float]], float | None]] = {
    "integrator": ([[0.0]], None),
    "oscillator": ([[0.0, 2.0], [-2.0, 0.0]], None),
    "double integrator": ([[0.0, 1.0], [0.0, 0.0]], None),
    "accumulator": ([[1.0]], 1.0),
    "turning": ([[0.6, -0.8], [0.8, 0.6]], 1.0),
}


@pytest.mark.parametrize("seed", range(8))
@pytest.mark.parametrize("name", BOUNDARY)
def test_rounding_does_not_decide_the_stability_of_a_hidden_mode(name: str, seed: int) -> None:
    """A hidden mode on the boundary, in rotated coordinates: its sign is the sign of noise."""
    block, period = BOUNDARY[name]
    rng = np.random.default_rng(seed)
    size = len(block)
    A = np.zeros((size + 2, size + 2))
    A[:2, :2] = [[-0.5, 0.25], [-0.3, -0.4]]
    A[:2, 2:] = rng.integers(-2, 3, (2, size))
    A[2:, 2:] = block
    Q = rotation(rng, size + 2)
    B, C = np.array([[1.0], [0.5], *([[0.0]] * size)]), np.ones((1, size + 2))
    model = Realization(Q.T @ A @ Q, Q.T @ B, C @ Q, sampling_period=period)
    examination = realize.examine(model)
    assert examination.answer.order == 2
    for mode in examination.hidden_modes:
        assert mode.stability in ("cannot tell", "marginal")
    assert examination.status == 4


@pytest.mark.parametrize(
    ("cosine", "sine"), [(0.6, 0.8), (0.28, 0.96), (0.96, 0.28), (0.936, 0.352), (0.5376, 0.8432)]
)
def test_decimals_on_the_circle_are_not_stable_by_their_rounding(
    cosine: float, sine: float
) -> None:
    """Pythagorean decimals: on the circle as written, beside it as stored.

    A mode that one reading calls marginal must not be called stable, or unstable, for good.
    """
    model = Realization(
        [[0.5, 0.0, 0.0], [0.0, cosine, -sine], [0.0, sine, cosine]],
        [1.0, 0.0, 0.0],
        [1.0, 1.0, 0.0],
        sampling_period=0.1,
    )
    examination = realize.examine(model)
    hidden = [mode for mode in examination.hidden_modes if mode.value.imag]
    assert len(hidden) == 2
    for mode in hidden:
        assert mode.stability in ("cannot tell", "marginal")
    assert "every hidden mode is stable" not in str(examination)


HALF = Fraction(1, 2)
THREE, FOUR = Fraction(3, 5), Fraction(4, 5)


@pytest.mark.parametrize(
    ("block", "period", "stability"),
    [
        ([[0, 0], [0, 0]], None, "marginal"),
        ([[0, 1], [0, 0]], None, "unstable"),
        ([[1, 0], [0, 1]], 1, "marginal"),
        ([[1, 1], [0, 1]], 1, "unstable"),
        ([[-1, 1], [0, -1]], 1, "unstable"),
        ([[THREE, -FOUR], [FOUR, THREE]], 1, "marginal"),
        (
            [[THREE, -FOUR, 1, 0], [FOUR, THREE, 0, 1], [0, 0, THREE, -FOUR], [0, 0, FOUR, THREE]],
            1,
            "unstable",
        ),
        ([[0, 1], [0, 0]], 1, "stable"),
    ],
)
def test_the_jordan_structure_decides_on_the_boundary(
    block: list[list[Any]], period: int | None, stability: str
) -> None:
    """Hidden chains of integrators grow, single ones do not; a hidden delay at z = 0 is stable."""
    size = len(block)
    first = -HALF if period is None else HALF
    A = join(
        [[matrix([[first]], (1, 1)), zeros(1, size)], [zeros(size, 1), matrix(block, (size, size))]]
    )
    B, C = identity(size + 1)[:, :1], matrix([[1] * (size + 1)], (1, size + 1))
    examination = realize.examine(Realization(A, B, C, sampling_period=period))
    hidden = [mode for mode in examination.hidden_modes if mode.value != first]
    assert {str(mode.stability) for mode in hidden} == {stability}


# ------------------------------------------------------------------ why a mode is hidden


@pytest.mark.parametrize("seed", range(30))
def test_the_vector_that_hides_a_mode_is_one(seed: int) -> None:
    """w A = z w and w B = 0 (or A v = z v and C v = 0), with the states in very unlike units."""
    rng = np.random.default_rng(seed)
    case = planted(seed, chains=1, most=2, steps=6)
    A, B, C, D = case.model.matrices()
    x = [Fraction(10) ** int(k) for k in rng.integers(-6, 7, len(A))]
    A = matrix([[a * x[j] / x[i] for j, a in enumerate(row)] for i, row in enumerate(A)], A.shape)
    B = matrix([[b / x[i] for b in row] for i, row in enumerate(B)], B.shape)
    C = matrix([[c * x[j] for j, c in enumerate(row)] for row in C], C.shape)
    model = Realization(A, B, C, D)
    A, B, C = (M.astype(float) for M in (A, B, C))
    for mode in realize.examine(model).hidden_modes:
        if not mode.vector:
            continue
        assert mode.why is not None
        left = "left" in mode.why
        M, N = (A.T, B.T) if left else (A, C)
        v = np.zeros(len(A), dtype=complex)
        for name, value in mode.vector:
            v[model.state_names.index(name)] = complex(value)
        sizes = abs(M) @ abs(v) + abs(mode.value) * abs(v)
        assert (abs(M @ v - mode.value * v) <= 1e-6 * sizes + 1e-9 * sizes.max()).all()
        assert (abs(N @ v) <= 1e-6 * (abs(N) @ abs(v))).all()


def test_a_pattern_with_too_few_ways_in_hides_by_structure() -> None:
    """Two integrators behind one input: no value of the non-zero entries reaches both.

    Source: Lin 1974, Structural controllability, IEEE Trans. Automatic Control 19: a dilation in
    the pattern of [A B], the second of the two ways to be structurally uncontrollable.
    """
    model = Realization([[0, 0], [0, 0]], [1, 1], [1, 1])
    reasons = {mode.why for mode in realize.examine(model).hidden_modes}
    assert reasons == {"structural"}


# ------------------------------------------------------------------ the exact path


def test_the_budget_holds_for_many_inputs_and_outputs() -> None:
    """Forty by forty channels: the exact path gives up near its budget, and says so."""
    rng = np.random.default_rng(0)
    model = Realization(
        rng.integers(-9, 10, (120, 120)),
        rng.integers(-9, 10, (120, 40)),
        rng.integers(-9, 10, (40, 120)),
    )
    examination = realize.examine(model, budget=0.25)
    # Generous, for a busy machine; the work itself is a hundred times the budget.
    assert examination.seconds["exact"] <= 1.5
    assert examination.not_done or examination.minimal_order


def test_lifting_asks_for_no_more_primes_than_the_answer_needs(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """Twice the bits of the largest entry, in primes of 62 bits, and half as many to spare."""
    rng = np.random.default_rng(1)
    model = Realization(
        rng.integers(-3, 4, (24, 24)), rng.integers(-3, 4, (24, 2)), rng.integers(-3, 4, (1, 24))
    )
    used: list[int] = []
    true_primes = modular.primes

    def counted() -> Iterator[int]:
        for prime in true_primes():
            used.append(prime)
            yield prime

    monkeypatch.setattr(modular, "primes", counted)
    form = exact.staircase(model)
    bits = max(
        max(abs(q.numerator).bit_length(), q.denominator.bit_length())
        for q in form.transformation.ravel()
    )
    assert len(used) <= 1.5 * 2 * bits / modular.PRIME_BITS + 10


def test_primes_known_beforehand_break_no_route() -> None:
    """Inputs that vanish modulo the first primes used: an unlucky prime is no disagreement."""
    unlucky = math.prod(itertools.islice(modular.primes(), 4))
    model = Realization([[1, 0], [0, 2]], [unlucky, 1], [1, 1])
    assert realize.examine(model).minimal_order == {"given": 2}
    assert exact.minimal(model).order == 2


def hankel_rank(sequence: list[np.ndarray], rows: int, columns: int) -> int:
    """The rank of the block Hankel matrix of H_1, H_2, ... with the block sizes given."""
    if not rows or not columns:
        return 0
    blocks = [[sequence[i + j] for j in range(columns)] for i in range(rows)]
    return rank(join(blocks))


@pytest.mark.parametrize("seed", range(60))
def test_a_partial_sequence_gets_the_fewest_states(seed: int) -> None:
    """The order is the sum of ranks that bounds every realization of the sequence from below.

    Source: Kalman 1971, On minimal partial realizations of a linear input/output map; Tether 1970,
    IEEE Trans. Automatic Control 15 (the formula from memory): the sum of the ranks of the Hankel
    matrices on the last antidiagonal known, less that of the one before.
    """
    rng = np.random.default_rng(seed)
    outputs, inputs, count = (
        int(k) for k in (rng.integers(1, 4), rng.integers(1, 4), rng.integers(0, 6))
    )
    drawn = rng.integers(-2, 3, (count + 1, outputs, inputs))
    if seed % 2:
        drawn *= rng.random(drawn.shape) < 0.3
    sequence = [matrix(item.tolist(), (outputs, inputs)) for item in drawn[1:]]
    order = sum(hankel_rank(sequence, j, count + 1 - j) for j in range(1, count + 1))
    order -= sum(hankel_rank(sequence, j, count - j) for j in range(1, count))
    for face in (exact, floating):
        assert face.from_markov_parameters(drawn).order == order
    found = exact.from_markov_parameters(drawn).model
    assert_equal_exact(exact.markov_parameters(found, count + 1), drawn, "parameters")


@pytest.mark.parametrize("seed", range(40))
def test_a_root_lies_in_its_enclosure(seed: int) -> None:
    """Against Newton's iteration at 60 digits, for roots apart, close, repeated, near the axis."""
    rng = np.random.default_rng(seed)
    factors: list[Polynomial] = []
    for _ in range(int(rng.integers(1, 4))):
        tiny = Fraction(int(rng.integers(-3, 4)), 10 ** int(rng.integers(3, 25)))
        factors.append((Fraction(1), Fraction(int(rng.integers(-3, 4))) + tiny))
        factors.append((Fraction(1), tiny, Fraction(int(rng.integers(1, 9)), 7)))
    factors += factors[: seed % 3]
    p = times(*factors)
    found = polynomials.roots(p)
    assert sum(root.multiplicity for root in found) == len(p) - 1
    irreducible = polynomials.factor(p)
    with mpmath.workdps(60):
        for root in found:
            f = [mpmath.mpf(c.numerator) / c.denominator for c in irreducible[root.factor][0]]
            z = mpmath.mpc(root.value)
            for _ in range(12):
                value, slope = mpmath.polyval(f, z, derivative=1)
                z -= value / slope
            error = abs(z - mpmath.mpc(root.value))
            assert error <= root.radius * (1 + mpmath.mpf(10) ** -12) + mpmath.mpf(10) ** -50


# ------------------------------------------------------------------ what is claimed of cutoffs


def stairs_of(reduction: Reduction) -> dict[str, int]:
    """Stage -> rank, for the stages that add something."""
    return {decision.where: decision.rank for decision in reduction.decisions if decision.rank}


@pytest.mark.parametrize("seed", range(40))
def test_every_cutoff_in_the_range_gives_the_exact_stairs(seed: int) -> None:
    """Reruns inside the range find the exact stairs of both sides; just above it, others."""
    rng = np.random.default_rng(seed)
    A, B, C, D = planted(seed, most=1).model.to_float().matrices()
    weak = 10.0 ** rng.uniform(-5, 0, len(A))
    model = Realization(A * weak / weak[:, None], B / weak[:, None], C * weak, D)
    if not model.order:
        pytest.skip("no states in this draw")
    examination = realize.examine(model, readings=["stored"])
    span = examination.cutoff_ranges["stored"]
    if span is None:
        assert examination.conflicts["stored"]
        return
    scale = examination.decisions[0].scale
    low, high = span[0], min(span[1], 1e3 * scale)
    proved = stairs_of(exact.minimal(model.read("stored")))
    for share in (0.01, 0.5, 0.99):
        tolerance = low ** (1 - share) * high**share / scale
        assert stairs_of(floating.minimal(model, tolerance=tolerance)) == proved
    if span[1] <= high:
        assert stairs_of(floating.minimal(model, tolerance=1.001 * span[1] / scale)) != proved


# ------------------------------------------------------------------ threads


def test_four_threads_give_the_answers_of_one() -> None:
    """Pages made at once are those made one after the other; FLINT's precision is as before."""

    def answer(model: Realization) -> str:
        record = realize.examine(model).to_dict()
        del record["seconds"], record["peak_memory"]
        return json.dumps(record, sort_keys=True)

    models = [planted(seed, most=1).model for seed in range(4)]
    models += [model.to_float() for model in models]
    precision = flint.ctx.prec
    alone = [answer(model) for model in models]
    with ThreadPoolExecutor(4) as pool:
        assert list(pool.map(answer, models)) == alone
    assert flint.ctx.prec == precision
