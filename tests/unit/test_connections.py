"""Connections: hand cases, names, memory of blocks, algebraic loops, and what is refused."""

from __future__ import annotations

import copy
import io
import math
import pickle
import subprocess
import sys
import warnings
from collections.abc import Callable
from fractions import Fraction
from typing import Any

import numpy as np
import pytest
import sympy

import realize
from realize import (
    AlgebraicLoopError,
    AlgebraicLoopWarning,
    EntryError,
    LimitError,
    Realization,
    RealizeError,
    SamplingPeriodError,
    ShapeError,
    TransferMatrix,
    UnknownWordError,
    UnsupportedEntryError,
    assemble,
    block_diagonal,
    cascade,
    examine,
    load,
    loop,
    save,
    stability,
    sum_of,
)
from realize.entries import EXACT_READINGS
from realize.tolerance import LOOP_MARGIN

F = Fraction


def gain(*rows: Any, **options: Any) -> Realization:
    """A model with no states; a number is a row of one."""
    return Realization(
        [], [], [], [row if isinstance(row, list) else [row] for row in rows], **options
    )


def lag(pole: Any, size: Any = 1, **options: Any) -> Realization:
    """size / (s - pole)."""
    return Realization([[pole]], [1], [size], **options)


def flat(model: Realization) -> Realization:
    """The same entries without any memory of blocks."""
    return Realization(
        *model.matrices(),
        sampling_period=model.sampling_period,
        state_names=model.state_names,
        input_names=model.input_names,
        output_names=model.output_names,
    )


def lists(model: Realization) -> list[Any]:
    """The four matrices as lists."""
    return [matrix.tolist() for matrix in model.matrices()]


# Hand cases

ONE = Realization([[1]], [[2, 3]], [[4]], [[5, 6]])
OTHER = Realization([[7]], [8], [[9], [10]], [[11], [12]])


def test_series_by_hand() -> None:
    """Every block of the series connection, written out from its definition."""
    model = cascade(ONE, OTHER)
    assert lists(model) == [
        [[1, 0], [8 * 4, 7]],
        [[2, 3], [8 * 5, 8 * 6]],
        [[11 * 4, 9], [12 * 4, 10]],
        [[11 * 5, 11 * 6], [12 * 5, 12 * 6]],
    ]
    assert model.kind == "rational"


def test_parallel_by_hand() -> None:
    """States side by side, one input to both, outputs added."""
    model = sum_of(ONE, Realization([[7]], [[8, 9]], [[10]], [[11, 12]]))
    assert lists(model) == [[[1, 0], [0, 7]], [[2, 3], [8, 9]], [[4, 10]], [[16, 18]]]


def test_side_by_side_by_hand() -> None:
    """All four matrices are block diagonal."""
    model = block_diagonal(ONE, OTHER)
    assert lists(model) == [
        [[1, 0], [0, 7]],
        [[2, 3, 0], [0, 0, 8]],
        [[4, 0], [0, 9], [0, 10]],
        [[5, 6, 0], [0, 0, 11], [0, 0, 12]],
    ]


@pytest.mark.parametrize(("word", "sign"), [("negative", 1), ("positive", -1)])
def test_loop_by_hand(word: str, sign: int) -> None:
    """One state each and feedthrough in both: solved by hand for e = r - sign y, y, u."""
    a, b, c, d = 2, 3, 5, F(1, 2)
    p, q, f, g = -1, 4, 7, F(1, 3)
    model = loop(Realization([[a]], [b], [c], d), Realization([[p]], [q], [f], g), feedback=word)
    share = 1 / (1 + sign * d * g)
    # y = c x + d u, u = f z + g e, so e = share (r - sign (c x + d f z)).
    e_x, e_z, e_r = -sign * share * c, -sign * share * d * f, share
    u_x, u_z, u_r = g * e_x, f + g * e_z, g * e_r
    assert lists(model) == [
        [[a + b * u_x, b * u_z], [q * e_x, p + q * e_z]],
        [[b * u_r], [q * e_r]],
        [[c + d * u_x, d * u_z]],
        [[d * u_r]],
    ]
    assert (model.input_names, model.output_names) == (("u1",), ("y1",))


def test_negative_is_the_default() -> None:
    """Without a word the output of the plant is subtracted: 1/(s - 1) under gain 3 has pole -2."""
    assert loop(lag(1), gain(3)).A.tolist() == [[-2]]
    assert loop(lag(1), gain(3), feedback="positive").A.tolist() == [[4]]


def test_blocks_without_states() -> None:
    """Static gains connect like everything else: a product, a sum, a loop solved."""
    assert cascade(gain([1, 2]), gain(3, 4)).D.tolist() == [[3, 6], [4, 8]]
    assert sum_of(gain([1, 2]), gain([3, 4])).D.tolist() == [[4, 6]]
    closed = loop(gain(2), gain("1/2"))
    assert (closed.order, closed.D.tolist()) == (0, [[F(1, 2)]])
    assert closed.kind == "rational"


def test_blocks_without_inputs_or_outputs() -> None:
    """A block with no outputs feeds nothing, a block with no inputs is driven by nothing."""
    deaf = Realization([[1]], np.zeros((1, 0)), [[2]])
    mute = Realization([[3]], [[4]], np.zeros((0, 1)))
    chain = cascade(deaf, lag(5))
    assert lists(chain) == [[[1, 0], [2, 5]], [[], []], [[0, 1]], [[]]]
    assert cascade(mute, deaf).A.tolist() == [[3, 0], [0, 1]]
    assert block_diagonal(deaf, mute).D.shape == (1, 1)
    assert loop(mute, deaf).B.shape == (2, 0)


def test_named_blocks_by_hand() -> None:
    """Short and long ends of wires, gains, sums, an input straight through, an idle port."""
    plant = Realization(
        [[2]], [[1, 1]], [[1], [3]], input_names=["force", "gust"], output_names=["place", "other"]
    )
    model = assemble(
        {"plant": plant, "controller": gain(5)},
        [
            ("wanted", "controller"),
            ("plant.place", "controller.u1", -1),
            ("controller", "plant.force"),
            ("controller.y1", "plant.force", "1/2"),
            ("plant.other", "seen"),
            ("wanted", "seen", F(1, 4)),
        ],
        inputs=["wanted", "idle"],
        outputs=["seen", "nothing"],
    )
    assert lists(model) == [
        [[2 - F(15, 2)]],
        [[F(15, 2), 0]],
        [[3], [0]],
        [[F(1, 4), 0], [0, 0]],
    ]
    assert model.state_names == ("plant.x1",)
    assert (model.input_names, model.output_names) == (("wanted", "idle"), ("seen", "nothing"))


def test_one_model_may_be_several_blocks() -> None:
    """The same model under two names is two blocks, with states of their own."""
    twice = assemble(
        {"a": lag(-1), "b": lag(-1)}, [("in", "a"), ("a", "b"), ("b", "out")],
        inputs=["in"], outputs=["out"],
    )  # fmt: skip
    assert lists(twice) == lists(cascade(lag(-1), lag(-1)))


def test_wires_alone() -> None:
    """Without blocks there are only gains from the inputs to the outputs."""
    model = assemble({}, [["r", "y", 2], ("r", "y", "1/2")], inputs=["r"], outputs=["y"])
    assert (model.order, model.D.tolist(), model.kind) == (0, [[F(5, 2)]], "rational")
    assert assemble({}, [], inputs=[], outputs=[]).D.shape == (0, 0)


def test_a_thousand_gains_in_a_row() -> None:
    """Long chains of feedthroughs are no deep recursion, and no loop."""
    blocks = {f"g{i}": gain("1/2" if i % 2 else 2) for i in range(400)}
    wires = [(f"g{i}", f"g{i + 1}") for i in range(399)]
    model = assemble(
        blocks, [("in", "g0"), *reversed(wires), ("g399", "out")], inputs=["in"], outputs=["out"]
    )
    assert model.D.tolist() == [[1]]


# Names


def test_states_are_named_after_their_blocks() -> None:
    """They are called "block.state", also when names of states are equal, and when nested."""
    inner = cascade(lag(-1, state_names=["level"]), lag(-2, state_names=["level"]))
    assert inner.state_names == ("first.level", "second.level")
    assert loop(inner, gain(1)).state_names == ("plant.first.level", "plant.second.level")
    assert block_diagonal(gain(1), gain(2)).state_names == ()


def test_ports_keep_their_names() -> None:
    """Inputs of what is driven from outside, outputs of what is seen there."""
    pump = lag(-1, input_names=["voltage"], output_names=["flow"])
    tank = lag(-2, input_names=["inflow"], output_names=["level"])
    chain = cascade(pump, tank)
    assert (chain.input_names, chain.output_names) == (("voltage",), ("level",))
    both = sum_of(pump, tank)
    assert (both.input_names, both.output_names) == (("voltage",), ("flow",))
    closed = loop(tank, pump)
    assert (closed.input_names, closed.output_names) == (("voltage",), ("level",))


def test_ports_side_by_side_are_told_apart() -> None:
    """Different names stay, equal ones get the block in front, all of them."""
    pump = lag(-1, input_names=["voltage"], output_names=["out"])
    tank = lag(-2, input_names=["inflow"], output_names=["out"])
    pair = block_diagonal(pump, tank)
    assert pair.input_names == ("voltage", "inflow")
    assert pair.output_names == ("first.out", "second.out")


def test_names_with_dots_are_found_in_nested_blocks() -> None:
    """A wire finds the port "first.u1" of a block by cutting at the first dot alone."""
    pair = block_diagonal(lag(-1), lag(-2))
    model = assemble(
        {"pair": pair},
        [("a", "pair.first.u1"), ("b", "pair.second.u1", 5), ("pair.second.y1", "y")],
        inputs=["a", "b"],
        outputs=["y"],
    )
    assert lists(model)[1:3] == [[[1, 0], [0, 5]], [[0, 1]]]
    assert model.state_names == ("pair.first.x1", "pair.second.x1")


# Time


def test_blocks_keep_their_time() -> None:
    """Equal sampling periods are that of the connection."""
    for period in (None, F(1, 10), 0.1):
        model = cascade(lag(F(1, 2), sampling_period=period), lag(0, sampling_period=period))
        assert model.sampling_period == period
        assert type(model.sampling_period) is type(period)


@pytest.mark.parametrize(("first", "second"), [(0.5, F(1, 2)), (F(1, 2), 0.5)])
def test_an_exact_period_beside_an_equal_float(first: Any, second: Any) -> None:
    """Half a second is half a second; the exact one is kept, and no reading changes it."""
    model = cascade(lag(0.25, sampling_period=first), lag(0.25, sampling_period=second))
    assert type(model.sampling_period) is Fraction
    assert {model.read(word).sampling_period for word in EXACT_READINGS} == {F(1, 2)}


@pytest.mark.parametrize(
    ("first", "second", "texts"),
    [
        (0.1, 0.2, ("period 0.1", "period 0.2")),
        (0.1, F(1, 10), ("period 0.1", "period 1/10")),
        (None, 1, ("continuous time", "period 1")),
    ],
)
@pytest.mark.parametrize("connect", [cascade, sum_of, block_diagonal, loop])
def test_different_periods_are_refused(
    first: Any, second: Any, texts: tuple[str, ...], connect: Callable[..., Realization]
) -> None:
    """The error names both periods and both blocks; 0.1 as a double is not 1/10."""
    with pytest.raises(SamplingPeriodError) as caught:
        connect(lag(0, sampling_period=first), gain(1, sampling_period=second))
    for text in (*texts, "plant" if connect is loop else "first"):
        assert text in str(caught.value)
    assert caught.value.found is not None
    assert all(text in caught.value.found for text in texts)


def test_a_float_period_is_read_with_the_blocks() -> None:
    """A rational connection with a float period keeps its blocks when the period is read."""
    model = cascade(lag(F(1, 2), sampling_period=0.1), lag(F(1, 3), sampling_period=0.1))
    read = model.read("written")
    assert (model.kind, read.sampling_period) == ("rational", F(1, 10))
    assert read._connection is not None
    assert [block.sampling_period for block in read._connection.blocks] == [F(1, 10)] * 2


# Kinds and readings


def test_floats_make_a_floating_connection() -> None:
    """One float anywhere, in a block or a gain, makes doubles of all entries."""
    for model in (
        cascade(lag(-1), lag(-2.0)),
        sum_of(lag(-1.0), lag(-2)),
        assemble({"a": lag(-1)}, [("r", "a", 0.5), ("a", "y")], inputs=["r"], outputs=["y"]),
    ):
        assert model.kind == "floating"
        assert {matrix.dtype for matrix in model.matrices()} == {np.dtype(float)}


def test_rationals_among_floats_are_not_rounded_before_they_are_read() -> None:
    """A third in one block, a gain of a seventh, and a tenth that was written in doubles."""
    model = assemble(
        {"a": lag(F(-1, 3)), "b": Realization([[-0.1]], [1], ["1/3"])},
        [("r", "a", "1/7"), ("a", "b", 0.3), ("b", "y")],
        inputs=["r"],
        outputs=["y"],
    )
    written = model.read("written")
    assert lists(written)[:3] == [
        [[F(-1, 3), 0], [F(3, 10), F(-1, 10)]],
        [[F(1, 7)], [0]],
        [[0, F(1, 3)]],
    ]
    assert written.kind == "rational"
    assert model.read("stored").A.tolist()[1] == [F(0.3), F(-0.1)]


def test_gains_to_one_place_are_added_exactly() -> None:
    """A tenth, two tenths and minus three tenths: nothing as written, something as stored."""
    tenths = [("r", "y", 0.1), ("r", "y", 0.2), ("r", "y", -0.3)]
    model = assemble({}, tenths, inputs=["r"], outputs=["y"])
    total = F(0.1) + F(0.2) - F(0.3)
    assert model.D.tolist() == [[float(total)]]
    assert model.read("stored").D.tolist() == [[total]]
    assert model.read("written").D.tolist() == [[0]]


def test_a_cancellation_that_only_the_blocks_show() -> None:
    """(s + 0.1 + 0.2) over (s + 0.3): multiplied out in doubles it is gone for every reading.

    As written the zero of the second block is the pole of the first; as stored it is not.
    """
    model = cascade(
        Realization([[-0.3]], [0.7], [1.1]), Realization([[-0.1]], [0.2], [0.3], [[0.3]])
    )
    found = examine(model)
    assert found.minimal_order == {"stored": 2, "written": 1, "intended": 1}
    assert [mode.value for mode in found.hidden_modes] == [-0.3]


def test_what_was_read_still_knows_its_blocks() -> None:
    """A reading of a connection is a rational connection of the blocks as read."""
    first, second = lag(-0.1), lag(-0.7)
    read = cascade(first, second).read("written")
    assert read == cascade(first.read("written"), second.read("written"))
    assert read.read("stored") is read
    assert read.read("given") is read
    assert read._connection is not None
    assert read._connection.blocks == (first.read("written"), second.read("written"))


# Memory


def tenths() -> Realization:
    """A loop in doubles whose entries no longer show the decimals of its blocks."""
    plant = Realization([[0.1, 0.7], [0.3, -0.9]], [0.7, 0.1], [0.3, 1.1])
    return loop(plant, Realization([[-0.6]], [0.3], [0.7], [[0.9]]))


def by_blocks(reading: str) -> Realization:
    """The same loop of the blocks as read."""
    model = tenths()
    assert model._connection is not None
    plant, controller = model._connection.blocks
    return loop(plant.read(reading), controller.read(reading))


@pytest.mark.parametrize("reading", list(map(str, EXACT_READINGS)))
def test_readings_go_back_to_the_blocks(reading: str) -> None:
    """The reading of the connection is the connection of the readings, not of the entries."""
    assert tenths().read(reading) == by_blocks(reading)
    assert flat(tenths()).read(reading) != by_blocks(reading)


@pytest.mark.parametrize("protocol", range(pickle.HIGHEST_PROTOCOL + 1))
def test_pickles_remember(protocol: int) -> None:
    """A pickled connection is equal and reads alike."""
    again = pickle.loads(pickle.dumps(tenths(), protocol))
    assert again == tenths()
    assert again.read("written") == by_blocks("written")


def test_copies_remember() -> None:
    """A copy is the model itself, memory included."""
    model = tenths()
    assert copy.copy(model) is model
    assert copy.deepcopy(model).read("written") == by_blocks("written")


def test_rounding_remembers_the_blocks_rounded() -> None:
    """After to_float the blocks are doubles, which read as written are what they were."""
    exact = by_blocks("written")
    rounded = exact.to_float()
    assert rounded.kind == "floating"
    assert rounded.A.tolist() == [[float(entry) for entry in row] for row in exact.A.tolist()]
    assert rounded.read("written") == exact
    assert rounded.read("stored") == by_blocks("stored")
    assert tenths().to_float().read("written") == exact


def test_the_dual_remembers_the_dual_blocks() -> None:
    """Dual and reading commute, and the dual of the dual is the model."""
    for reading in map(str, EXACT_READINGS):
        assert tenths().dual().read(reading) == by_blocks(reading).dual()
    assert tenths().dual().dual() == tenths()
    assert tenths().dual().dual().read("written") == by_blocks("written")


def test_the_dual_of_a_wiring_is_the_wiring_of_the_duals() -> None:
    """More inputs than outputs, gains, and an input straight through: all of it is transposed."""
    model = assemble(
        {"one": Realization([[-0.1]], [[0.2, 0.3]], [[0.7]], [[0.3, 0.0]]), "two": lag(-0.7, 0.9)},
        [("a", "one.u1", 0.3), ("b", "one.u2"), ("one", "two", 0.7), ("two", "one.u1", -0.1),
         ("two", "y"), ("b", "y", 0.9)],
        inputs=["a", "b"], outputs=["y"],
    )  # fmt: skip
    assert model.dual().read("written") == model.read("written").dual()


def test_nested_connections_remember() -> None:
    """A connection of connections reads the innermost blocks as they were given."""
    outer = cascade(block_diagonal(tenths(), tenths()), gain([0.1, 0.7]))
    inner = by_blocks("written")
    assert outer.read("written") == cascade(
        block_diagonal(inner, inner), gain([F(1, 10), F(7, 10)])
    )


def test_memory_is_no_part_of_identity() -> None:
    """Equality, hash, digest, text and model file are those of the entries."""
    model, plain = tenths(), flat(tenths())
    assert model == plain
    assert hash(model) == hash(plain)
    assert model.digest == plain.digest
    assert repr(model) == repr(plain)


def test_what_is_computed_from_a_connection_has_no_memory() -> None:
    """Forms give new models, which stand for their own entries."""
    assert realize.floating.minimal(tenths()).model._connection is None
    assert realize.exact.staircase(by_blocks("written")).model._connection is None


def test_an_observer_loop_hides_its_estimator() -> None:
    """Two-digit blocks: the four error modes are out of reach of the reference, exactly.

    Multiplied out in doubles the same loop is exactly minimal under every reading.
    """
    A = [[0.0, 1.0, 0.0, 0.0], [-1.2, -0.3, 1.2, 0.1], [0.0, 0.0, 0.0, 1.0], [0.8, 0.1, -0.8, -0.2]]
    B, C = [0.1, 0.7, -0.2, 0.3], [1.1, 0.0, 0.3, 0.0]
    back, correct = [0.7, 1.3, 0.4, 0.9], [2.1, 1.9, 0.7, 1.3]
    estimator = Realization(
        A,
        [list(row) for row in zip(B, correct, strict=True)],
        [back, C],
        input_names=["drive", "surprise"],
        output_names=["feedback", "estimate"],
    )
    observed = assemble(
        {"plant": Realization(A, B, C), "estimator": estimator},
        [
            ("reference", "plant"),
            ("reference", "estimator.drive"),
            ("estimator.feedback", "plant", -1),
            ("estimator.feedback", "estimator.drive", -1),
            ("plant", "estimator.surprise"),
            ("estimator.estimate", "estimator.surprise", -1),
            ("plant", "output"),
        ],
        inputs=["reference"],
        outputs=["output"],
    )
    found = examine(observed)
    assert (found.minimal_order["written"], found.answer.order) == (4, 4)
    parts = found.hidden_parts["written"]
    error = sympy.Matrix(4, 4, lambda i, j: _tenth(A[i][j]) - _tenth(correct[i]) * _tenth(C[j]))
    expected = tuple(F(int(c.p), int(c.q)) for c in error.charpoly().all_coeffs())
    assert parts["uncontrollable, observable"] == expected
    assert {mode.part for mode in found.hidden_modes} == {"uncontrollable, observable"}
    assert examine(flat(observed)).minimal_order == {"stored": 8, "written": 8, "intended": 8}


def _tenth(value: float) -> sympy.Rational:
    return sympy.Rational(round(value * 10), 10)


# Algebraic loops


def test_an_ill_posed_loop_is_named() -> None:
    """The ports around the loop, in the order of the signal, and nothing beside it."""
    with pytest.raises(AlgebraicLoopError, match="ill-posed") as caught:
        assemble(
            {"before": gain(3), "a": gain(2), "b": gain("1/2", output_names=["back"]), "c": lag(1)},
            [("r", "before"), ("before", "a"), ("a", "b"), ("b", "a"), ("b", "c"), ("c", "a"),
             ("c", "y")],
            inputs=["r"], outputs=["y"],
        )  # fmt: skip
    assert caught.value.ports == ("a.u1", "a.y1", "b.u1", "b.back")
    for port in caught.value.ports:
        assert port in str(caught.value)
    assert "before" not in str(caught.value)
    assert isinstance(caught.value, RealizeError)
    assert isinstance(caught.value, ValueError)


def test_an_ill_posed_loop_within_one_block() -> None:
    """A gain of one from an output of a block to its own input."""
    with pytest.raises(AlgebraicLoopError) as caught:
        assemble(
            {"a": Realization([[1]], [[1, 2]], [3], [[0, 4]])},
            [("a", "a.u2", "1/4"), ("r", "a.u1"), ("a", "y")],
            inputs=["r"],
            outputs=["y"],
        )
    assert caught.value.ports == ("a.u2", "a.y1")


def test_loops_that_share_ports_are_named_together() -> None:
    """Where circles meet, all ports on any of them are named, inputs first."""
    with pytest.raises(AlgebraicLoopError) as caught:
        loop(gain([1, 1], [1, 1]), gain(["-1/2", 0], [0, "-1/2"]))
    ports = caught.value.ports
    assert set(ports) == {
        f"{b}.{p}{i}" for b in ("plant", "controller") for p in "uy" for i in "12"
    }
    assert len(ports) == 8


def test_one_bad_loop_among_good_ones() -> None:
    """Each loop is judged for itself."""
    good = {"a": gain(2), "b": gain(3), "c": gain(1), "d": gain(1)}
    wires = [("r", "a"), ("a", "b"), ("b", "a"), ("b", "c"), ("c", "d"), ("d", "c"), ("d", "y")]
    with pytest.raises(AlgebraicLoopError) as caught:
        assemble(good, wires, inputs=["r"], outputs=["y"])
    assert caught.value.ports == ("c.u1", "c.y1", "d.u1", "d.y1")
    model = assemble(good | {"d": gain(2)}, wires, inputs=["r"], outputs=["y"])
    # a = r + b, b = 6 a / 2, then c = b + 2 c: b = -6/5 r, y = -2 b.
    assert model.D.tolist() == [[F(12, 5)]]


def test_paths_that_cancel_make_no_loop() -> None:
    """Two wires that add up to nothing close no circle; with gains of one it would be ill-posed."""
    model = assemble(
        {"a": gain(1)}, [("r", "a"), ("a", "a", 1), ("a", "a", -1), ("a", "y")],
        inputs=["r"], outputs=["y"],
    )  # fmt: skip
    assert model.D.tolist() == [[1]]


@pytest.mark.parametrize(("plant", "controller"), [(1.0, 1.0), (0.1, 10.0), (1 / 49, 49.0)])
def test_ill_posed_in_doubles(plant: float, controller: float) -> None:
    """What doubles cannot tell from an ill-posed loop is one; the message says why."""
    with pytest.raises(AlgebraicLoopError, match="within the rounding of doubles"):
        loop(gain(plant), gain(controller), feedback="positive")
    assert loop(gain(plant), gain(controller)).D[0, 0] == pytest.approx(0.5)


def test_a_reading_may_be_ill_posed_where_the_doubles_are_not() -> None:
    """65536.1 less 65535.1 is one in decimals, and a little more in doubles.

    Making the model warns; reading it as written is an error with the ports, as stored it is not.
    """
    with pytest.warns(AlgebraicLoopWarning):
        model = assemble(
            {"a": gain(65536.1, -65535.1)},
            [("r", "a"), ("a.y1", "a"), ("a.y2", "a"), ("a.y1", "y")],
            inputs=["r"],
            outputs=["y"],
        )
    share = 1 / (1 - F(65536.1) + F(65535.1))
    assert model.read("stored").D.tolist() == [[F(65536.1) * share]]
    assert model.D[0, 0] == pytest.approx(float(F(65536.1) * share))
    with pytest.raises(AlgebraicLoopError, match="no unique solution") as caught:
        model.read("written")
    assert caught.value.ports == ("a.u1", "a.y1", "a.y2")


def test_nearly_ill_posed_loops_warn_at_the_callers_line() -> None:
    """One warning with the ports and the margin; it points here."""
    with pytest.warns(AlgebraicLoopWarning, match="plant.u1, plant.y1, controller.u1") as caught:
        model = loop(gain(1.0), gain(1 - 2e-9), feedback="positive")
    assert len(caught) == 1
    assert caught[0].filename == __file__
    assert "1e-09" in str(caught[0].message)
    assert model.D[0, 0] == pytest.approx(5e8, rel=1e-6)
    assert issubclass(AlgebraicLoopWarning, realize.RealizeWarning)


@pytest.mark.parametrize("kind", [F, float])
def test_the_margin_is_a_relative_change_of_the_gains(kind: type) -> None:
    """For a single circle with gain 1 - x the margin is x / 2, in both arithmetics.

    Both gains changed by that much make it one. A margin above the limit warns of nothing.
    """
    for small in (2.0**-10, 2.0**-18):
        model = loop(gain(kind(1 - small)), gain(kind(1)), feedback="positive")
        assert model._connection is not None
        (found,) = model._connection.join().loops
        assert found.margin == pytest.approx(small / 2, rel=2 * small)
        assert found.margin > LOOP_MARGIN
    with pytest.warns(AlgebraicLoopWarning):
        loop(gain(kind(1 - 2.0**-20)), gain(kind(1)), feedback="positive")


@pytest.mark.parametrize("kind", [F, float])
def test_the_margin_does_not_depend_on_units(kind: type) -> None:
    """A loop gain of minus one half has one margin, in three units of the signal between.

    |S^-1| |G| has the eigenvalue (1/2 + sqrt(1/2)) / (3/2), by hand.
    """
    margins = []
    for unit in (1, 2**40, 2**200):
        model = loop(gain(kind(unit)), gain(kind(F(1, 2 * unit))))
        assert model._connection is not None
        margins += [found.margin for found in model._connection.join().loops]
    assert margins == pytest.approx([1.5 / (0.5 + 0.5**0.5)] * 3)


def test_extreme_loop_gains_are_no_reason_to_warn() -> None:
    """A loop gain of a million is far from one, and so is one that underflows."""
    assert loop(gain(1e-200), gain(1e-200)).D[0, 0] == 0
    assert loop(gain(1e6), gain(1.0)).D[0, 0] == pytest.approx(1, abs=2e-6)
    beyond = loop(gain(10**400), gain(1))
    assert beyond.D.tolist() == [[F(10**400, 10**400 + 1)]]


def test_the_caution_defers() -> None:
    """The caution about such loops says what to do and whose decision it is."""
    caution = stability.NEARLY_ILL_POSED_LOOP
    assert "codes that bind" in caution
    assert "delays" in caution


def test_the_error_pickles() -> None:
    """The ports survive pickling."""
    error = AlgebraicLoopError("text", ports=["a.u1", "a.y1"])
    again = pickle.loads(pickle.dumps(error))
    assert (again.ports, str(again)) == (("a.u1", "a.y1"), "text")


# What is refused


@pytest.mark.parametrize(
    ("connect", "first", "second", "found", "wanted"),
    [
        (cascade, gain([1, 1]), gain([1, 1]), 2, 1),
        (sum_of, gain([1, 1]), gain([1]), 1, 2),
        (sum_of, gain(1, 1), gain(1, 1, 1), 3, 2),
        (loop, gain([1, 1]), gain([1]), 2, 1),
        (loop, gain(1, 1), gain(1), 1, 2),
    ],
)
def test_counts_that_do_not_fit(
    connect: Callable[..., Realization],
    first: Realization,
    second: Realization,
    found: int,
    wanted: int,
) -> None:
    """Inputs and outputs that meet must be equally many; the error has both counts."""
    with pytest.raises(ShapeError) as caught:
        connect(first, second)
    assert (caught.value.found, caught.value.wanted) == (found, wanted)
    assert str(found) in str(caught.value)
    assert caught.value.where in ("second", "controller", "plant")


@pytest.mark.parametrize("connect", [cascade, sum_of, block_diagonal, loop])
@pytest.mark.parametrize("thing", [TransferMatrix([1], [1, 1]), 2, None, ([1], [1], [1], [1])])
def test_only_realizations_are_connected(connect: Callable[..., Any], thing: Any) -> None:
    """Other things are refused by name, with the way to make a model of them."""
    for arguments, name in (((thing, gain(1)), ("first", "plant")),
                            ((gain(1), thing), ("second", "controller"))):  # fmt: skip
        with pytest.raises(UnsupportedEntryError, match="as_realization") as caught:
            connect(*arguments)
        assert caught.value.where in name
        assert caught.value.found == type(thing).__name__


def test_unknown_feedback() -> None:
    """The two words are listed."""
    with pytest.raises(UnknownWordError) as caught:
        loop(gain(1), gain(1), feedback="unity")
    assert caught.value.allowed == ("negative", "positive")


# --------------------------------------------------------------------------- constants

ROOT = sympy.sqrt(2)


def test_irrational_constants_stay_what_they_are() -> None:
    """In series nothing is rounded: the entries are the expressions that the formulas give."""
    chain = cascade(lag(-1), Realization([[-ROOT]], [ROOT], [1], [[1 + ROOT]]))
    assert chain.kind == "parametric"
    assert chain.A.tolist() == [[-1, 0], [ROOT, -ROOT]]
    assert chain.C.tolist() == [[1 + ROOT, 1]]
    assert all(isinstance(entry, sympy.Expr) for M in chain.matrices() for entry in M.flat)
    assert pickle.loads(pickle.dumps(chain)) == chain
    assert chain.dual().dual() == chain
    assert np.allclose(chain.to_float().A, [[-1, 0], [math.sqrt(2), -math.sqrt(2)]], rtol=1e-15)


def test_an_irrational_gain_of_a_wire() -> None:
    """A gain may be a constant, gains with one place add up, and what cancels is a zero."""
    wires = [("u", "a", ROOT), ("u", "a", -ROOT), ("a", "y", 1 + ROOT), ("u", "y", sympy.pi)]
    model = assemble({"a": lag(1)}, wires, inputs=["u"], outputs=["y"])
    assert model.B.tolist() == [[0]]
    assert model.C.tolist() == [[1 + ROOT]]
    assert model.D.tolist() == [[sympy.pi]]
    rounded = assemble({"a": lag(1.0)}, wires, inputs=["u"], outputs=["y"])
    assert (rounded.kind, rounded.D[0, 0]) == ("floating", math.pi)


def test_a_loop_of_constants_is_solved_exactly() -> None:
    """sqrt(2) around itself: 2 / (1 + 2), and with three channels what doubles say."""
    assert loop(gain(ROOT), gain(ROOT)).D.tolist() == [[sympy.Rational(2, 3)]]
    table = [[sympy.sqrt(3 * i + j + 2) for j in range(3)] for i in range(3)]
    closed = loop(Realization([], [], [], table), Realization([], [], [], np.eye(3, dtype=int)))
    K = np.array(table, dtype=float)
    assert np.allclose(closed.to_float().D, np.linalg.solve(np.eye(3) + K, K), rtol=1e-12)


def test_an_ill_posed_loop_of_constants_is_named() -> None:
    """1 - sqrt(2) / sqrt(2), written so that only multiplying out shows the zero."""
    other = (1 + ROOT) / (ROOT + 2)
    with pytest.raises(AlgebraicLoopError, match=r"plant\.u1.*ill-posed: its equations"):
        loop(gain(ROOT), gain(1 / ROOT), feedback="positive")
    with pytest.raises(EntryError, match=r"cannot be told whether it is zero.*row 1, column 1"):
        loop(gain(ROOT), gain(other), feedback="positive")


def test_a_nearly_ill_posed_loop_of_constants_warns() -> None:
    """The margin is measured on decimals of the expressions."""
    with pytest.warns(AlgebraicLoopWarning, match="by 5e-10"):
        loop(gain(ROOT), gain((1 - F(1, 10**9)) / ROOT), feedback="positive")


def test_what_cannot_be_told_from_zero_is_not_connected() -> None:
    """cos^2 + sin^2 - 1 is no entry, and no entry is made of it; (1 + sqrt 2)^2 is multiplied out.

    Nothing is simplified, so the sum of squares is refused; expanding decides the other.
    """
    c, s = sympy.cos(1), sympy.sin(1)
    with pytest.raises(EntryError, match=r"D, row 1, column 1.*Simplify the entries"):
        sum_of(cascade(gain(c), gain(c)), gain(s**2 - 1))
    square = cascade(gain(1 + ROOT), gain(1 + ROOT))
    assert sum_of(square, gain(-3 - 2 * ROOT)).D.tolist() == [[0]]


def test_a_long_loop_of_constants_is_refused() -> None:
    """Four channels make eight signals in one circle, whose expressions would grow for minutes."""
    table = [[sympy.sqrt(4 * i + j + 2) for j in range(4)] for i in range(4)]
    square = Realization([], [], [], table)
    with pytest.raises(LimitError, match=r"has 8 signals.*at most 6"):
        loop(square, square)


def test_constants_beside_floats_are_kept_for_the_blocks_to_tell() -> None:
    """The doubles are rounded; no reading is possible, and the block is named with the constant."""
    mixed = cascade(lag(0.1), lag(-ROOT))
    assert mixed.kind == "floating"
    assert mixed.A[1, 1] == -math.sqrt(2)
    with pytest.raises(UnsupportedEntryError, match=r"block second: A, row 1, column 1.*sqrt"):
        mixed.read("written")
    target = io.StringIO()
    save(mixed, target)
    assert load(io.StringIO(target.getvalue())).A.tolist() == mixed.A.tolist()


def wired(*wires: Any, **changes: Any) -> Realization:
    """Two blocks with the wires given; the arguments can be changed."""
    arguments: dict[str, Any] = {
        "blocks": {"plant": gain([1, 2], input_names=["left", "right"]), "fork": gain(1, 2)},
        "wires": wires,
        "inputs": ["r"],
        "outputs": ["y"],
    } | changes
    return assemble(
        arguments["blocks"], arguments["wires"],
        inputs=arguments["inputs"], outputs=arguments["outputs"],
    )  # fmt: skip


@pytest.mark.parametrize(
    ("wire", "said", "allowed"),
    [
        (("r", "plnt.left"), "no block 'plnt'", "plant.left"),
        (("q", "plant.left"), "no block 'q', and no external input", "r"),
        (("r", "z"), "no block 'z', and no external output", "y"),
        (("y", "plant.left"), "no external input", "r"),
        (("r", "r"), "no external output", "fork.u1"),
        (("r", "plant.up"), "'plant' has no input 'up'", "plant.right"),
        (("plant.left", "y"), "'plant' has no output 'left'", "plant.y1"),
        (("r", "plant"), "'plant' has 2 inputs, so name the port", "plant.left"),
        (("fork", "y"), "'fork' has 2 outputs, so name the port", "fork.y2"),
        (("r", "plant."), "'plant' has no input ''", "plant.left"),
        (("", "y"), "no block ''", "r"),
    ],
)
def test_ends_that_are_no_ports(wire: Any, said: str, allowed: str) -> None:
    """The error names the wire, what is wrong with it and what is known."""
    with pytest.raises(UnknownWordError) as caught:
        wired(("r", "fork"), wire)
    text = str(caught.value)
    assert f"wires, item 2 ({wire[0]!r} to {wire[1]!r})" in text
    assert said in text
    assert allowed in text
    assert allowed in caught.value.allowed
    assert caught.value.found in wire


def test_long_lists_of_known_ports_are_cut_short() -> None:
    """The message shows some of them, the attribute has all."""
    wide = gain([1] * 40)
    with pytest.raises(UnknownWordError, match="and 32 more") as caught:
        assemble({"wide": wide}, [("r", "wide.u41")], inputs=["r"], outputs=[])
    assert len(caught.value.allowed) == 40
    with pytest.raises(
        UnknownWordError, match="has no outputs, so name the port; known here: none"
    ):
        assemble({"mute": gain()}, [("mute", "y")], inputs=[], outputs=["y"])


@pytest.mark.parametrize(
    ("wires", "kind", "said"),
    [
        ("ry", UnsupportedEntryError, "list of pairs"),
        ({"r": "y"}, UnsupportedEntryError, "list of pairs"),
        (3, UnsupportedEntryError, "list of pairs"),
        (["ry"], UnsupportedEntryError, "wires, item 1"),
        ([None], UnsupportedEntryError, "wires, item 1"),
        ([("r", "y"), ("r",)], ShapeError, "wires, item 2: found 1 items"),
        ([("r", "y", 1, 2)], ShapeError, "wires, item 1: found 4 items"),
        ([("r", 1)], UnsupportedEntryError, "found an end of type int"),
        ([("r", "y", "two")], EntryError, "wires, item 1 .*'two' is not a number"),
        ([("r", "y", float("nan"))], EntryError, "wires, item 1"),
        ([("r", "y", 1j)], UnsupportedEntryError, "wires, item 1"),
        ([("r", "y", None)], UnsupportedEntryError, "wires, item 1"),
    ],
)
def test_wires_that_are_none(wires: Any, kind: type[RealizeError], said: str) -> None:
    """Wires of a wrong form are refused with their place."""
    with pytest.raises(kind, match=said):
        wired(wires=wires)


@pytest.mark.parametrize(
    ("changes", "kind", "said"),
    [
        ({"blocks": [gain(1)]}, UnsupportedEntryError, "blocks: found a value of type list"),
        ({"blocks": {"a": 3}}, UnsupportedEntryError, "a: found a value of type int"),
        ({"blocks": {1: gain(1)}}, UnsupportedEntryError, "a name is a text"),
        ({"blocks": {"": gain(1)}}, EntryError, "empty"),
        ({"blocks": {"a.b": gain(1)}}, EntryError, "'a.b' holds a dot"),
        ({"blocks": {"a": TransferMatrix([1], [1, 1])}}, UnsupportedEntryError, "as_realization"),
        ({"inputs": "r"}, UnsupportedEntryError, "inputs"),
        ({"inputs": None}, UnsupportedEntryError, "inputs: found None"),
        ({"outputs": ["y", "y"]}, EntryError, "outputs: 'y' occurs twice"),
        ({"outputs": ["y.1"]}, EntryError, "outputs: the name 'y.1' holds a dot"),
        ({"inputs": ["plant"]}, EntryError, "inputs: 'plant' is also the name of a block"),
        ({"outputs": ["fork"]}, EntryError, "outputs: 'fork' is also the name of a block"),
    ],
)
def test_arguments_that_cannot_serve(
    changes: dict[str, Any], kind: type[RealizeError], said: str
) -> None:
    """Blocks and external names are checked before any wire."""
    with pytest.raises(kind, match=said):
        wired(**changes)


def test_results_too_large_for_a_double() -> None:
    """A product beyond the doubles is an error with its place, not an infinity."""
    with pytest.raises(EntryError, match=r"D, row 1, column 1.*too large") as caught:
        cascade(gain(1e200), gain(1e200))
    assert caught.value.where == "D, row 1, column 1"
    with pytest.raises(EntryError, match="block second: D, row 1, column 1"):
        cascade(gain(1.0), gain(10**400))
    with pytest.raises(EntryError, match="gain of a wire"):
        assemble({"a": gain(1.0)}, [("r", "a", 10**400)], inputs=["r"], outputs=[])
    assert cascade(gain(10**400), gain(10**400)).D.tolist() == [[10**800]]


def test_blocks_are_left_as_they_were() -> None:
    """Connecting changes no block, and the result is read-only."""
    before = lists(ONE), lists(OTHER)
    model = cascade(ONE, OTHER)
    assert (lists(ONE), lists(OTHER)) == before
    for matrix in model.matrices():
        with pytest.raises(ValueError, match="read-only"):
            matrix[0, 0] = 1


def test_no_warning_without_a_loop() -> None:
    """Substitution alone warns of nothing, however large the gains."""
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        model = cascade(gain(1e300), gain(1e-300))
    assert model.D[0, 0] == pytest.approx(1)


def test_connections_are_light() -> None:
    """Connecting floats needs numpy alone, algebraic loops included."""
    code = (
        "import realize, sys\n"
        "lag = realize.Realization([[-0.1]], [0.3], [0.7], 0.9)\n"
        "realize.loop(lag, realize.cascade(lag, lag))\n"
        "print([m for m in ('scipy', 'sympy', 'mpmath', 'flint') if m in sys.modules])\n"
    )
    done = subprocess.run(
        [sys.executable, "-W", "error", "-c", code], capture_output=True, text=True, timeout=60
    )
    assert (done.returncode, done.stdout.strip()) == (0, "[]"), done.stderr
