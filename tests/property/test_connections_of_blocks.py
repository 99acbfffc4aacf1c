"""Laws of connections: responses, orders, associativity, duality, memory of blocks.

What is expected is worked out by the plain exact algebra of the tests: the response of a
connection at a rational point from the responses of its blocks, and orders from polynomials.
"""

from __future__ import annotations

import warnings
from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from functools import reduce
from typing import Any

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from realize import (
    AlgebraicLoopError,
    AlgebraicLoopWarning,
    Realization,
    assemble,
    block_diagonal,
    cascade,
    exact,
    loop,
    sum_of,
)
from realize.entries import EXACT_READINGS
from realize.polynomials import divide_exact, multiply
from tests.helpers import (
    Polynomial,
    assert_close,
    assert_equal_exact,
    assert_same_response,
    common_factor,
    controllable_companion,
    identity,
    inverse,
    join,
    plus,
    product,
    rank,
    times,
    zeros,
)
from tests.helpers import exact as as_exact
from tests.strategies import PlantedFraction, coprime_fractions

pytestmark = [
    pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning"),
    pytest.mark.filterwarnings("ignore::realize.AlgebraicLoopWarning"),
]

READINGS = tuple(map(str, EXACT_READINGS))
fractions = coprime_fractions()
counts = st.integers(0, 2)
points = st.sampled_from([Fraction(7, 3), Fraction(-5, 2), Fraction(11), Fraction(1, 7)])


@st.composite
def systems(
    draw: st.DrawFn, inputs: int, outputs: int, *, divided: int = 1, static: bool = False
) -> Realization:
    """Small models of the sizes given: rational, or doubles of integers divided."""
    order = 0 if static else draw(st.integers(0, 2))

    def entries(rows: int, columns: int) -> np.ndarray:
        numbers = st.lists(st.integers(-3, 3), min_size=rows * columns, max_size=rows * columns)
        result = np.array(draw(numbers), dtype=int).reshape(rows, columns)
        return result if divided == 1 else result / divided

    return Realization(
        entries(order, order),
        entries(order, inputs),
        entries(outputs, order),
        entries(outputs, inputs),
    )


def response(model: Realization, point: Fraction) -> np.ndarray:
    """The transfer matrix at a point, by its definition; discards what has a pole there."""
    A, B, C, D = (as_exact(matrix) for matrix in model.matrices())
    pencil = point * identity(len(A)) - A
    assume(rank(pencil) == len(A))
    return product(C, inverse(pencil), B) + D


def at_infinity(model: Realization) -> np.ndarray:
    """The direct feedthrough, exact."""
    return as_exact(model.D)


def is_regular(matrix: np.ndarray) -> bool:
    """Whether a square matrix has an inverse."""
    return rank(matrix) == len(matrix)


# Responses


@given(st.data(), counts, counts, counts, points)
def test_series_multiplies(
    data: st.DataObject, inputs: int, between: int, outputs: int, point: Fraction
) -> None:
    """The response in series is that of the second times that of the first."""
    first, second = data.draw(systems(inputs, between)), data.draw(systems(between, outputs))
    expected = product(response(second, point), response(first, point))
    assert_equal_exact(response(cascade(first, second), point), expected)


@given(st.data(), counts, counts, points)
def test_parallel_adds(data: st.DataObject, inputs: int, outputs: int, point: Fraction) -> None:
    """The response in parallel is the sum."""
    first, second = data.draw(systems(inputs, outputs)), data.draw(systems(inputs, outputs))
    expected = response(first, point) + response(second, point)
    assert_equal_exact(response(sum_of(first, second), point), expected)


@given(st.data(), counts, counts, counts, counts, points)
def test_side_by_side_stays_apart(
    data: st.DataObject, inputs: int, outputs: int, more_in: int, more_out: int, point: Fraction
) -> None:
    """The response side by side is block diagonal."""
    first, second = data.draw(systems(inputs, outputs)), data.draw(systems(more_in, more_out))
    expected = join(
        [
            [response(first, point), zeros(outputs, more_in)],
            [zeros(more_out, inputs), response(second, point)],
        ]
    )
    assert_equal_exact(response(block_diagonal(first, second), point), expected)


@given(st.data(), counts, counts, points, st.sampled_from([("negative", 1), ("positive", -1)]))
def test_the_loop_closes(
    data: st.DataObject, inputs: int, outputs: int, point: Fraction, sign: tuple[str, int]
) -> None:
    """y = P K (r - sign y); ill-posed exactly when this has no unique solution at infinity."""
    plant, controller = data.draw(systems(inputs, outputs)), data.draw(systems(outputs, inputs))
    word, factor = sign
    direct = identity(outputs) + factor * product(at_infinity(plant), at_infinity(controller))
    if not is_regular(direct):
        with pytest.raises(AlgebraicLoopError):
            loop(plant, controller, feedback=word)
        return
    closed = loop(plant, controller, feedback=word)
    around = product(response(plant, point), response(controller, point))
    difference = identity(outputs) + factor * around
    assume(is_regular(difference))
    assert_equal_exact(response(closed, point), product(inverse(difference), around))


@dataclass(frozen=True, kw_only=True)
class Net:
    """Named blocks and wires, and the gains of the wires as matrices."""

    blocks: dict[str, Realization]
    wires: list[tuple[str, str, Any]]
    inputs: list[str]
    outputs: list[str]
    K: np.ndarray
    L: np.ndarray
    M: np.ndarray
    N: np.ndarray

    def connected(self) -> Realization:
        """The model that the library makes."""
        return assemble(self.blocks, self.wires, inputs=self.inputs, outputs=self.outputs)

    def together(self, parts: list[np.ndarray]) -> np.ndarray:
        """One matrix of a part for each block, block diagonal."""
        result = zeros(sum(p.shape[0] for p in parts), sum(p.shape[1] for p in parts))
        row = column = 0
        for part in parts:
            result[row : row + part.shape[0], column : column + part.shape[1]] = part
            row, column = row + part.shape[0], column + part.shape[1]
        return result

    def is_well_posed(self) -> bool:
        """Whether I - K D is regular."""
        D = self.together([at_infinity(block) for block in self.blocks.values()])
        return is_regular(identity(len(self.K)) - product(self.K, D))

    def response(self, point: Fraction) -> np.ndarray:
        """Solve v = K w + L u, w = G v, y = M w + N u at a point."""
        G = self.together([response(block, point) for block in self.blocks.values()])
        around = identity(len(self.K)) - product(self.K, G)
        assume(is_regular(around))
        return product(self.M, G, inverse(around), self.L) + self.N


@st.composite
def nets(draw: st.DrawFn, *, divided: int = 1) -> Net:
    """Up to three small blocks and random wires between all their ports."""
    static = draw(st.booleans())
    sizes = draw(st.lists(st.tuples(st.integers(1, 2), st.integers(1, 2)), max_size=3))
    blocks = {
        f"b{i}": draw(systems(m, p, divided=divided, static=static))
        for i, (m, p) in enumerate(sizes)
    }
    ins = [f"{name}.{port}" for name, block in blocks.items() for port in block.input_names]
    outs = [f"{name}.{port}" for name, block in blocks.items() for port in block.output_names]
    inputs, outputs = ["r", "s"][: draw(st.integers(1, 2))], ["y", "z"][: draw(st.integers(1, 2))]
    gains = {
        (False, False): zeros(len(ins), len(outs)),
        (True, False): zeros(len(ins), len(inputs)),
        (False, True): zeros(len(outputs), len(outs)),
        (True, True): zeros(len(outputs), len(inputs)),
    }
    sources = [(False, i) for i in range(len(outs))] + [(True, i) for i in range(len(inputs))]
    targets = [(False, i) for i in range(len(ins))] + [(True, i) for i in range(len(outputs))]
    drawn = st.tuples(st.sampled_from(sources), st.sampled_from(targets), st.integers(-2, 2))
    wires: list[tuple[str, str, Any]] = []
    for (outside, i), (beyond, j), gain in draw(st.lists(drawn, max_size=12)):
        entry = gain if divided == 1 else gain / divided
        wires.append(((inputs if outside else outs)[i], (outputs if beyond else ins)[j], entry))
        gains[outside, beyond][j, i] += Fraction(gain, divided)
    K, L, M, N = gains.values()
    return Net(blocks=blocks, wires=wires, inputs=inputs, outputs=outputs, K=K, L=L, M=M, N=N)


@given(nets(), points)
def test_any_wiring_responds_as_its_equations_say(net: Net, point: Fraction) -> None:
    """The assembled model solves the equations of the wires; it exists exactly when they do."""
    if not net.is_well_posed():
        with pytest.raises(AlgebraicLoopError) as caught:
            net.connected()
        assert set(caught.value.ports) <= {
            f"{name}.{port}"
            for name, block in net.blocks.items()
            for port in (*block.input_names, *block.output_names)
        }
        return
    model = net.connected()
    assert model.kind == "rational"
    assert model.order == sum(block.order for block in net.blocks.values())
    assert_equal_exact(response(model, point), net.response(point))


@given(nets(divided=10), points)
def test_any_wiring_of_decimals_is_read_as_written(net: Net, point: Fraction) -> None:
    """Doubles of tenths, multiplied out; read as written the equations hold exactly."""
    written = Net(
        blocks={name: block.read("written") for name, block in net.blocks.items()},
        wires=[(source, target, Fraction(str(gain))) for source, target, gain in net.wires],
        inputs=net.inputs, outputs=net.outputs, K=net.K, L=net.L, M=net.M, N=net.N,
    )  # fmt: skip
    try:
        model = net.connected()
    except AlgebraicLoopError:
        return  # the exact test above says when
    assume(written.is_well_posed())
    read = model.read("written")
    assert read == written.connected()
    assert_equal_exact(response(read, point), written.response(point))


@given(nets(divided=10))
def test_doubles_are_near_what_was_written(net: Net) -> None:
    """Where no loop is nearly ill-posed the doubles are those of the exact matrices, nearly."""
    with warnings.catch_warnings():
        warnings.simplefilter("error", AlgebraicLoopWarning)
        try:
            model = net.connected()
        except (AlgebraicLoopError, AlgebraicLoopWarning):
            assume(False)
    for computed, proved in zip(model.matrices(), model.read("written").matrices(), strict=True):
        assert_close(computed, proved, relative=1e-9, absolute=1e-12)


@given(nets(), points)
def test_the_dual_connects_the_duals(net: Net, point: Fraction) -> None:
    """The dual has the transposed response, and joins again from its dual blocks."""
    assume(net.is_well_posed())
    dual = net.connected().dual()
    assert_equal_exact(response(dual, point), net.response(point).T)
    assert dual._connection is not None
    for again, entries in zip(dual._connection.join().matrices, dual.matrices(), strict=True):
        assert_equal_exact(again, entries)


# Orders


def by_hand(case: PlantedFraction) -> Realization:
    """A controllable companion form, written down by the tests."""
    return Realization(*controllable_companion(case.numerator, case.denominator))


def assert_lost(model: Realization, lost: Polynomial) -> None:
    """The hidden modes are the roots of a polynomial, and the order is what is left."""
    assert exact.minimal(model).order == model.order - (len(lost) - 1)
    parts = exact.kalman_parts(model).polynomials
    hidden = times(*(p for part, p in parts.items() if part != "controllable, observable"))
    assert_equal_exact(hidden, lost)


@given(fractions, fractions)
def test_series_loses_what_cancels(first: PlantedFraction, second: PlantedFraction) -> None:
    """Zeros of one that are poles of the other; Kailath (1980), section 2.4 (memory)."""
    lost = times(
        common_factor(first.numerator, second.denominator),
        common_factor(second.numerator, first.denominator),
    )
    assert_lost(cascade(by_hand(first), by_hand(second)), lost)


@given(fractions, fractions)
def test_parallel_loses_what_the_sum_loses(first: PlantedFraction, second: PlantedFraction) -> None:
    """The factor that the sum of the fractions has in common; none without common poles."""
    top = plus(
        times(first.numerator, second.denominator), times(second.numerator, first.denominator)
    )
    lost = common_factor(times(first.denominator, second.denominator), top)
    assert_lost(sum_of(by_hand(first), by_hand(second)), lost)


@given(fractions, fractions, st.sampled_from([("negative", 1), ("positive", -1)]))
def test_the_loop_loses_what_cancels_in_it(
    plant: PlantedFraction, controller: PlantedFraction, sign: tuple[str, int]
) -> None:
    """Whatever cancels between plant and controller is hidden from the reference, nothing else."""
    word, factor = sign
    try:
        model = loop(by_hand(plant), by_hand(controller), feedback=word)
    except AlgebraicLoopError:
        direct = at_infinity(by_hand(plant)) * at_infinity(by_hand(controller))
        assert factor * direct[0, 0] == -1
        return
    forward = times(plant.numerator, controller.numerator)
    around = plus(
        times(plant.denominator, controller.denominator),
        tuple(factor * coefficient for coefficient in forward),
    )
    lost = common_factor(around, forward)
    meets = times(
        common_factor(plant.numerator, controller.denominator),
        common_factor(controller.numerator, plant.denominator),
    )
    assert_equal_exact(lost, meets)
    assert_lost(model, lost)


@given(fractions, fractions)
def test_side_by_side_nothing_is_lost(first: PlantedFraction, second: PlantedFraction) -> None:
    """Minimal models with ports of their own stay minimal, whatever their poles."""
    assert_lost(block_diagonal(by_hand(first), by_hand(second)), (Fraction(1),))


# Associativity and memory


@given(st.data(), counts, counts, counts, counts)
def test_series_is_associative(data: st.DataObject, a: int, b: int, c: int, d: int) -> None:
    """Entry by entry the same matrices, however three are grouped."""
    one, two, three = (data.draw(systems(m, p)) for m, p in ((a, b), (b, c), (c, d)))
    left, right = cascade(cascade(one, two), three), cascade(one, cascade(two, three))
    for first, second in zip(left.matrices(), right.matrices(), strict=True):
        assert_equal_exact(first, second)


@given(st.data(), counts, counts)
def test_sums_are_associative(data: st.DataObject, inputs: int, outputs: int) -> None:
    """So it is for sums and for models side by side."""
    one, two, three = (data.draw(systems(inputs, outputs)) for _ in range(3))
    for connect in (sum_of, block_diagonal):
        left, right = connect(connect(one, two), three), connect(one, connect(two, three))
        for first, second in zip(left.matrices(), right.matrices(), strict=True):
            assert_equal_exact(first, second)


@given(st.data(), counts, counts, counts)
def test_duality_turns_series_around(data: st.DataObject, a: int, b: int, c: int) -> None:
    """The dual of a series is the series of the duals, the second first."""
    first, second = data.draw(systems(a, b)), data.draw(systems(b, c))
    assert_same_response(cascade(first, second).dual(), cascade(second.dual(), first.dual()))


@given(st.data(), st.sampled_from(READINGS))
def test_nesting_forgets_nothing(data: st.DataObject, reading: str) -> None:
    """Read, then connect three deep; or connect in doubles, three deep, then read: the same."""
    one, two, three, four = (data.draw(systems(1, 1, divided=10)) for _ in range(4))

    def nest(one: Realization, two: Realization, three: Realization, four: Realization) -> Any:
        inner = cascade(sum_of(one, two), three)
        return assemble(
            {"inner": loop(inner, four), "side": block_diagonal(one, inner)},
            [("r", "inner"), ("inner", "side.first.u1", 3), ("r", "side.second.u1"),
             ("side.first.y1", "y"), ("side.second.y1", "y", -1)],
            inputs=["r"], outputs=["y"],
        )  # fmt: skip

    try:
        model = nest(one, two, three, four)
        expected = nest(*(block.read(reading) for block in (one, two, three, four)))
    except AlgebraicLoopError:
        assume(False)
    assert model.read(reading) == expected
    assert model.to_float().read(reading) == expected
    assert model.dual().read(reading) == expected.dual()


@given(data=st.data())
def test_what_blocks_hide_stays_hidden(data: st.DataObject) -> None:
    """The unreached polynomials of the blocks divide that of the connection; so do the unseen."""

    def hidden(model: Realization, side: Callable[[str], bool]) -> Polynomial:
        parts = exact.kalman_parts(model).polynomials
        return reduce(multiply, (p for part, p in parts.items() if side(part)), (Fraction(1),))

    first, second = data.draw(systems(1, 1)), data.draw(systems(1, 1))
    for model in (cascade(first, second), sum_of(first, second)):
        for side in (
            lambda part: part.startswith("un"),
            lambda part: part.endswith("unobservable"),
        ):
            before = multiply(hidden(first, side), hidden(second, side))
            divide_exact(hidden(model, side), before)  # raises where it does not divide
