"""`same_transfer`: what it decides, what it finds, what it refuses."""

from __future__ import annotations

import pickle
import warnings
from fractions import Fraction

import numpy as np
import pytest
import sympy

from realize import (
    Comparison,
    HiddenInstabilityWarning,
    Realization,
    TransferMatrix,
    exact,
    same_transfer,
)
from realize.errors import ImproperError, UnknownWordError, UnsupportedEntryError
from tests.helpers import assert_equal_exact, change_coordinates, matrix, product, rank


def one() -> Realization:
    """Poles at -1 and -2, both reached and seen."""
    return Realization([[-1, 0], [0, -2]], [1, 1], [1, 2], [["1/3"]])


def test_coordinates_are_found() -> None:
    """T with state of the first = T @ state of the second: the one that was used."""
    T = matrix([[2, 1], [7, 4]], (2, 2))
    other = Realization(*change_coordinates(one().matrices(), T))
    found = same_transfer(one(), other)
    assert found
    assert found.difference is None
    assert found.counterexample is None
    assert found.orders == (2, 2)
    assert_equal_exact(found.transformation, T)
    assert_equal_exact(product(one().A, T), product(T, other.A))


def test_hidden_parts_do_not_matter() -> None:
    """Equal although one side has more states; then there is no change of coordinates."""
    larger = Realization([[-1, 0, 0], [0, -2, 0], [5, 0, 3]], [1, 1, 0], [1, 2, 0], [["1/3"]])
    found = same_transfer(one(), larger)
    assert found
    assert found.transformation is None
    assert (found.first_hides.count, found.second_hides.count) == (0, 1)
    assert found.second_hides.polynomial == (1, -3)
    # Two sides of one size that hide different things are equal too, and again without T.
    left = Realization([[-1, 0], [0, 4]], [1, 0], [1, 1])
    right = Realization([[-1, 0], [0, 5]], [1, 1], [1, 0])
    found = same_transfer(left, right)
    assert found
    assert found.transformation is None


def test_a_counterexample() -> None:
    """A rational point, which is no pole, and both values there."""
    other = Realization([[-1, 0], [0, -2]], [1, 1], [1, 3], [["1/3"]])
    found = same_transfer(one(), other)
    assert not found
    assert found.difference == "transfer matrix"
    example = found.counterexample
    assert example is not None
    z = example.point
    assert example.first[0, 0] == Fraction(1, 3) + 1 / (z + 1) + 2 / (z + 2)
    assert example.second[0, 0] == Fraction(1, 3) + 1 / (z + 1) + 3 / (z + 2)
    assert "at 1 output 1, input 1 is 3/2 and 11/6" in repr(found)


def test_points_that_are_poles_are_passed_over() -> None:
    """Eigenvalues at 1, -1 and 2, hidden or not, and a difference that vanishes at -2."""
    first = Realization(np.diag([1, -1, 2]), [1, 0, 1], [1, 1, 0])
    second = TransferMatrix(["2", "1"], ["1", "-1"])
    found = same_transfer(first, second)
    assert found.counterexample is not None
    assert found.counterexample.point not in (1, -1, 2)
    zero_at = TransferMatrix(["1", "0", "0"], ["1", "3", "1"])
    other = TransferMatrix(["1", "1", "-1"], ["1", "3", "1"])  # differs by (1 - s) / (...)
    found = same_transfer(zero_at, other)
    assert found.counterexample is not None
    assert found.counterexample.point == -1


def test_time_and_sizes_come_first() -> None:
    """Another sampling period, or other numbers of ports, are differences of their own."""
    sampled = Realization(*one().matrices(), sampling_period=1)
    for first, second, word in (
        (one(), sampled, "sampling period"),
        (sampled, Realization(*one().matrices(), sampling_period="1/2"), "sampling period"),
        (one(), Realization([], [], [], [[1, 2]]), "sizes"),
    ):
        found = same_transfer(first, second)
        assert not found
        assert found.difference == word
        assert found.counterexample is None
        assert found.transformation is None
        assert word in repr(found)
    half = Realization(*one().matrices(), sampling_period=0.5)
    assert same_transfer(half, Realization(*one().matrices(), sampling_period="1/2"))


def test_floats_by_the_reading_named() -> None:
    """0.1 is 1/10 as written, and not as stored."""
    floats, exactly = Realization([[0.1]], [1.0], [1.0]), Realization([["1/10"]], [1], [1])
    assert not same_transfer(floats, exactly)
    assert same_transfer(floats, exactly, reading="written")
    assert same_transfer(floats, exactly, reading="written").reading == "written"
    assert same_transfer(exactly, exactly, reading="given")
    with pytest.raises(UnknownWordError, match="given"):
        same_transfer(floats, exactly, reading="given")
    with pytest.raises(UnknownWordError):
        same_transfer(exactly, exactly, reading="rounded")


def test_transfer_matrices() -> None:
    """Fractions with and without their common factors are one transfer matrix."""
    first = TransferMatrix(["1", "-1/4"], ["1", "3/4", "-1/4"])
    second = TransferMatrix(["2"], ["2", "2"])
    found = same_transfer(first, second)
    assert found
    assert (found.first_hides.count, found.second_hides.count) == (1, 0)
    assert same_transfer(exact.companion(first, side="output"), second)


def test_other_things() -> None:
    """Tuples are taken as elsewhere; constants, improper fractions and objects are refused."""
    assert same_transfer(([1], [1, 1]), TransferMatrix([1], [1, 1]))
    root = Realization([[sympy.sqrt(2)]], [1], [1])
    with pytest.raises(UnsupportedEntryError, match=r"sqrt\(2\)"):
        same_transfer(root, one())
    with pytest.raises(ImproperError):
        same_transfer(TransferMatrix([1, 0], [1], improper=True), one())
    with pytest.raises(UnsupportedEntryError):
        same_transfer(object(), one())


@pytest.mark.parametrize(
    ("first", "second", "same"),
    [
        (Realization([], [], [], [[1]]), Realization([], [], [], [[1]]), True),
        (Realization([], [], [], [[1]]), Realization([], [], [], [[2]]), False),
        (Realization([[3]], [0], [1], [[1]]), Realization([], [], [], [[1]]), True),
        (Realization([[3]], [1], [1]), Realization([], [], [], [[0]]), False),
    ],
    ids=["gains", "other gains", "a dead state", "a live state"],
)
def test_models_without_states(first: Realization, second: Realization, same: bool) -> None:
    """Static gains are models."""
    with warnings.catch_warnings():
        warnings.simplefilter("error", HiddenInstabilityWarning)
        assert bool(same_transfer(first, second)) is same


def test_models_without_ports() -> None:
    """Nothing goes in or comes out: nothing can differ."""
    first = Realization(np.eye(2, dtype=int), np.zeros((2, 0), int), [[1, 0]])
    second = Realization([], np.zeros((0, 0), int), np.zeros((1, 0), int), np.zeros((1, 0), int))
    assert same_transfer(first, second)


def test_a_comparison_pickles() -> None:
    """All of it is plain values."""
    found = pickle.loads(pickle.dumps(same_transfer(one(), one())))
    assert isinstance(found, Comparison)
    assert found
    assert_equal_exact(found.transformation, matrix([[1, 0], [0, 1]], (2, 2)))
    assert rank(found.transformation) == 2


def test_sixty_states() -> None:
    """A dense model in other coordinates, and the same with one entry changed."""
    rng = np.random.default_rng(3)
    size = 60
    A = rng.integers(-3, 4, (size, size))
    B, C = rng.integers(-2, 3, (size, 2)), rng.integers(-2, 3, (2, size))
    other = A.copy(), B.copy(), C.copy()
    for _ in range(80):
        i, j = rng.choice(size, 2, replace=False)
        other[0][i] += other[0][j]
        other[0][:, j] -= other[0][:, i]
        other[1][i] += other[1][j]
        other[2][:, j] -= other[2][:, i]
    found = same_transfer(Realization(A, B, C), Realization(*other))
    assert found
    assert found.transformation is not None
    other[0][5, 7] += 1
    assert not same_transfer(Realization(A, B, C), Realization(*other))
