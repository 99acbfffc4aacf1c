"""Poles and zeros that nearly cancel: hand cases, uncertainties, edges."""

from __future__ import annotations

import math
import pickle
from fractions import Fraction
from types import ModuleType
from typing import Any

import numpy as np
import pytest
import sympy
from scipy.special import chdtr

from realize import Stability, TransferMatrix, Uncertainty, errors, exact, floating, multiprecision
from realize.arithmetic.nearby_divisors import Metric, has_no_real_root, level_weights
from realize.results import Cancellation, NearFactor
from tests.helpers import times

F = Fraction

pytestmark = pytest.mark.filterwarnings("ignore::realize.HiddenInstabilityWarning")

PAIR = TransferMatrix([1, "1.001"], times((1, 1), (1, 2)))


def only(found: Cancellation) -> NearFactor:
    """The one factor that is near."""
    assert len(found.near) == 1
    return found.near[0]


def test_a_pair_on_every_face(face: ModuleType) -> None:
    """Pole -1 and zero -1.001: named on each face alike, and not common."""
    found = face.cancel(PAIR, uncertainty=0.001)
    assert tuple(found.common) == (1,)
    near = only(found)
    assert near.pole == pytest.approx(-1, abs=1e-12)
    assert near.zero == pytest.approx(-1.001, abs=1e-12)
    assert near.degree == 1
    assert near.stability is Stability.STABLE
    assert near.allowed == "yes"
    assert near.deviations is None
    assert near.least_change <= near.change < 2e-4
    # Exactly common in the witness, whose coefficients lie within the uncertainty.
    root = -near.factor[1]
    for table, given in (
        (near.witness.numerators, PAIR.numerators),
        (near.witness.denominators, PAIR.denominators),
    ):
        value = F(0)
        for after, before in zip(table[0][0], given[0][0], strict=True):
            assert abs(after - before) <= abs(before) * (F(1, 1000) + F(1, 10**12))
            value = value * root + after
        assert value == 0


def test_the_response_change_of_a_pair() -> None:
    """(s + 1.001)/((s + 1)(s + 2)) loses 0.001 |s/((s + 1)(s + 2))|, its gain at zero kept."""
    near = only(exact.cancel(PAIR, uncertainty=0.001))
    change = near.response_change
    # |s/((s+1)(s+2))| is largest at sqrt(2), where it is 1/3: by hand.
    assert change.size == pytest.approx(0.001 / 3, rel=1e-6)
    assert change.frequency == pytest.approx(math.sqrt(2), rel=1e-3)
    assert change.relative == pytest.approx(0.001 / 3 / 0.5005, rel=1e-6)


def test_the_gain_may_be_kept_at_infinity() -> None:
    """A slow pair where the response is small: with the gain at infinity kept less changes."""
    source = TransferMatrix(times((1, "1.01e-3"), (1, "0.1")), times((1, "1e-3"), (1, 1)))
    near = min(exact.cancel(source, uncertainty=0.02).near, key=lambda each: abs(each.pole))
    # At zero frequency it falls from 0.101 to 0.1; else it would grow from 1 to 1.01 far out.
    assert near.response_change.size == pytest.approx(0.001, rel=1e-6)
    assert near.response_change.frequency == 0


CLOSE = TransferMatrix([1, "1.00001"], times((1, 1), (1, 2)))


def test_words_for_what_the_bounds_allow() -> None:
    """Just enough is yes; far too little, and nothing at all, is no."""
    # At w = -1 the numerator misses zero by 10^-5, and two coefficients of which each may move by
    # r can make up for 2 r.
    words = {}
    for figure in ("1e-5", "1e-7", "0"):
        near = only(exact.cancel(CLOSE, uncertainty=Uncertainty(absolute=figure)))
        words[figure] = near.allowed
    assert words == {"1e-5": "yes", "1e-7": "no", "0": "no"}


@pytest.mark.parametrize("share", [F(999, 1000), F(1001, 1000)])
def test_the_smallest_box_is_found(share: Fraction) -> None:
    """With one coefficient free the radius that is needed is known by hand, to one in 1000."""
    # (-1)^2 + 3 (-1) + 2 = 0, and at -1.00001: 1.00001^2 - 3.00003 + 2 = -0.0000099999.
    needed = abs(F("1.00001") ** 2 - 3 * F("1.00001") + 2)
    uncertainty = Uncertainty(absolute={"denominators": [0, 0, needed * share]})
    near = only(exact.cancel(CLOSE, uncertainty=uncertainty))
    assert near.allowed == ("yes" if share > 1 else "no")
    if share > 1:
        assert near.factor == (1, F("1.00001"))
        assert near.witness.numerators == CLOSE.numerators
        assert near.witness.denominators[0][0][2] == 2 + needed


@pytest.mark.parametrize(
    ("f", "g", "radius", "wanted"),
    [
        # |w - 1| <= r (1 + |w|) and |w - 2| <= r (1 + |w|): both need r = 1/5, at w = 3/2.
        ((1, -1), (1, -2), "0.1999", True),
        ((1, -1), (1, -2), "0.2", False),
        # On the negative side alike.
        ((1, 1), (1, 2), "0.1999", True),
        ((1, 1), (1, 2), "0.2", False),
        # Between the signs 0 is the meeting point: |1| <= r.
        ((1, 1), (1, -1), "0.9999", True),
        ((1, 1), (1, -1), "1", False),
        # No real root far and wide: w^2 + 1 <= r (w^2 + |w| + 1) from r = 2/3 on, at w = 1.
        ((1, -1), (1, 0, 1), "0.6666", True),
        ((1, -1), (1, 0, 1), "0.6667", False),
        # Exact ones meet where they share a root only.
        ((1, -1), (1, -3, 2), "0", False),
        ((1, 0), (1, 1, 0), "0", False),
        ((1, -1), (1, -2), "0", True),
    ],
)
def test_real_roots_in_a_box_are_decided(
    f: tuple[int, ...], g: tuple[int, ...], radius: str, wanted: bool
) -> None:
    """Whether polynomials in a box can share a real root, at thresholds found by hand."""
    p, q = tuple(map(F, f)), tuple(map(F, g))
    metric = Metric([F(radius)] * len(p), [F(radius)] * len(q))
    assert has_no_real_root(p, q, metric) is wanted


def test_zeros_stay_zero() -> None:
    """An undamped zero pair keeps no damping under a relative uncertainty."""
    source = TransferMatrix([1, 0, 4], times((1, "0.001", "4.001"), (1, 1)))
    near = only(exact.cancel(source, uncertainty=0.01))
    assert near.allowed == "yes"
    assert near.degree == 2
    assert near.factor[1] == 0
    assert near.witness.numerators[0][0][1] == 0
    # The pole pair lies within what the uncertainty can move of the boundary.
    assert near.stability is Stability.CANNOT_TELL
    absolute = only(exact.cancel(source, uncertainty=Uncertainty(absolute=0.01)))
    assert absolute.witness.numerators[0][0][1] != 0


def test_exact_denominators_hold_their_roots() -> None:
    """With the numerator alone uncertain the factor is one of the denominator's own."""
    source = TransferMatrix([3, "1.01"], times((3, 1), (1, 2)))
    near = only(exact.cancel(source, uncertainty=Uncertainty(relative={"numerators": 0.02})))
    assert near.allowed == "yes"
    assert near.factor == (1, F(1, 3))
    assert near.witness.denominators == source.denominators
    # An irrational root gives no rational witness, and that is said.
    source = TransferMatrix([1, "-0.41421"], times((1, 2, -1), (1, 3)))
    near = only(exact.cancel(source, uncertainty=Uncertainty(relative={"numerators": 0.02})))
    assert near.allowed == "cannot tell"
    assert near.stability is Stability.UNSTABLE


def test_what_is_common_stays_common() -> None:
    """Beside an exact common factor the near one is told of, in the coefficients as given."""
    source = TransferMatrix(times((1, 5), (1, "1.00001")), times((1, 5), (1, 1), (1, 2)))
    for figures in ({"relative": 1e-4}, {"absolute": {"numerators": [0, 1e-3, 1e-3]}}):
        found = exact.cancel(source, uncertainty=Uncertainty(**figures))
        assert found.common == (1, 5)
        near = only(found)
        assert near.zero == pytest.approx(-1.00001)
        assert near.allowed == "yes"
        again = exact.cancel(near.witness)
        assert again.common == times((1, 5), near.factor)
        if "absolute" in figures:
            assert near.witness.numerators[0][0][0] == 1
            assert near.witness.denominators == source.denominators


def test_the_tolerance_decides_what_is_common() -> None:
    """What the uncertainty allows and the tolerance does not is near, never common."""
    source = TransferMatrix([1.0, 1.00001], [1.0, 3.0, 2.0])
    found = floating.cancel(source, tolerance=1e-12, uncertainty=1e-3)
    assert found.common == (1.0,)
    assert only(found).allowed == "yes"
    found = floating.cancel(source, tolerance=1e-3, uncertainty=1e-3)
    assert len(found.common) == 2
    assert found.near == ()


@pytest.mark.parametrize("kind", ["deviations", "covariance"])
def test_distance_in_standard_deviations(kind: str) -> None:
    """One root, independent or correlated coefficients: the closed form on a fine grid.

    For a common root w the squared distance is r' (C S C')^-1 r with r = (f(w), g(w)) and C the
    powers of w (generalised least squares, common practice).
    """
    f, g = np.array([1.0, 1.01]), np.array([1.0, 3.0, 2.0])
    if kind == "deviations":
        deviations = [0.0, 0.01, 0.0, 0.02, 0.005]
        covariance = np.diag(np.square(deviations))
        uncertainty = Uncertainty(
            standard_deviation={"numerators": deviations[:2], "denominators": deviations[2:]}
        )
    else:
        root = np.zeros((5, 3))
        root[[1, 3, 4]] = [[0.01, 0, 0], [0.008, 0.01, 0], [0.002, -0.004, 0.003]]
        covariance = root @ root.T
        uncertainty = Uncertainty(covariance=covariance)
    source = TransferMatrix(["1", "1.01"], [1, 3, 2])
    near = min(exact.cancel(source, uncertainty=uncertainty).near, key=lambda n: n.deviations or 0)
    distances = []
    for w in np.linspace(-1.1, -0.9, 20001):
        C = np.zeros((2, 5))
        C[0, :2], C[1, 2:] = [w, 1], [w * w, w, 1]
        rest = np.array([np.polyval(f, w), np.polyval(g, w)])
        distances.append(rest @ np.linalg.solve(C @ covariance @ C.T, rest))
    assert near.deviations == pytest.approx(math.sqrt(min(distances)), rel=1e-6)
    assert near.confidence == pytest.approx(chdtr(1, min(distances)), rel=1e-6)
    assert near.allowed is None
    # What has no deviation has not moved.
    assert near.witness.numerators[0][0][0] == near.witness.denominators[0][0][0] == 1


def test_confidence_is_what_it_says() -> None:
    """Fractions that truly share a root, seen through noise: the confidence is evenly spread.

    The squared distance to the fractions with a common root has one degree of freedom (Wilks).
    """
    rng = np.random.default_rng(5)
    noise = 1e-4
    figures = {"numerators": [0, noise], "denominators": [0, noise, noise]}
    uncertainty = Uncertainty(standard_deviation=figures, confidence="0.999999")
    values = []
    for _ in range(40):
        a, b, c = (float(x) * noise for x in rng.normal(size=3))
        source = TransferMatrix([1, F(1 + a)], [1, F(3 + b), F(2 + c)])
        found = exact.cancel(source, uncertainty=uncertainty).near
        values.append(min(n.confidence for n in found if n.confidence is not None))
    # Kolmogorov's distance from the even spread; 1.95 / sqrt(40) is passed one time in 1000.
    ordered = np.sort(values)
    gap = np.abs(ordered - (np.arange(40) + 0.5) / 40).max() + 0.5 / 40
    assert gap < 1.95 / math.sqrt(40)


def test_confidence_decides_what_is_told() -> None:
    """A pair two standard deviations away is worth a line at 99 %, and not at 50 %."""
    source = TransferMatrix([1, "1.02"], [1, 3, 2])
    figures = {"numerators": [0, "0.01"]}
    for confidence, count in (("0.99", 1), ("0.5", 0)):
        uncertainty = Uncertainty(standard_deviation=figures, confidence=confidence)
        found = exact.cancel(source, uncertainty=uncertainty).near
        assert len(found) == count
    # By hand: the pole is fixed, the zero has a deviation of 0.01.
    uncertainty = Uncertainty(standard_deviation=figures, confidence="0.99")
    near = only(exact.cancel(source, uncertainty=uncertainty))
    assert near.deviations == pytest.approx(2, rel=1e-9)
    assert near.confidence == pytest.approx(0.954499736, rel=1e-8)


def test_a_double_pole_beside_a_zero() -> None:
    """One of a complex pair cannot be dropped alone: the change is that of the witness's rest."""
    source = TransferMatrix([1, 1], [1, 2, "1.000001"])
    near = only(exact.cancel(source))
    assert near.degree == 1
    assert len(near.factor) == 2
    assert 0 < near.response_change.size < 1e-6
    assert near.response_change.relative == pytest.approx(near.response_change.size, rel=1e-3)


def test_poles_on_the_boundary() -> None:
    """Dropping an integrator changes the response without bound; keeping one does not matter."""
    near = only(exact.cancel(TransferMatrix([1, "0.00001"], [1, 1, 0])))
    assert near.pole == 0
    assert near.stability is Stability.MARGINAL
    assert near.response_change.size == math.inf
    assert near.response_change.frequency == 0
    near = only(exact.cancel(TransferMatrix([1, "1.00001"], [1, 1, 0])))
    assert near.pole == -1
    assert near.response_change.size == pytest.approx(1e-5, rel=1e-3)
    # A resonance in discrete time at a quarter of the sampling frequency.
    source = TransferMatrix([1, 0, "0.99999"], times((1, 0, 1), (2, 1)), sampling_period="1/2")
    near = only(exact.cancel(source))
    assert near.stability is Stability.MARGINAL
    assert near.response_change.frequency == pytest.approx(math.pi)


def test_repeated_poles_on_the_boundary_grow() -> None:
    """A near-cancelled double integrator is not marginal."""
    near = only(exact.cancel(TransferMatrix([1, "0.00001"], [1, 1, 0, 0])))
    assert near.pole == 0
    assert near.stability is Stability.UNSTABLE


def test_every_entry_is_looked_at() -> None:
    """Several entries, discrete time: each by its own coefficients and their uncertainty."""
    source = TransferMatrix(
        [[[1, "-0.50001"], [2]], [[1, 2], [1, "-0.3"]]],
        [[[1, "-0.7", "0.1"], [1, 1]], [[1, "0.1", "0.2"], [1, "-0.30001"]]],
        sampling_period=1,
    )
    found = exact.cancel(source, uncertainty=1e-3).near
    assert {(n.output, n.input) for n in found} == {(0, 0), (1, 1)}
    assert all(n.allowed == "yes" for n in found)
    assert all(n.witness.sampling_period == 1 for n in found)
    # In standard deviations: the covariance of all coefficients, each entry by its own block.
    count = sum(len(p) for t in (source.numerators, source.denominators) for r in t for p in r)
    table = np.eye(count) * 1e-10
    found = exact.cancel(source, uncertainty=Uncertainty(covariance=table)).near
    assert {(n.output, n.input) for n in found} == {(0, 0), (1, 1)}
    single = TransferMatrix([1, "-0.3"], [1, "-0.30001"], sampling_period=1)
    alone = only(exact.cancel(single, uncertainty=Uncertainty(standard_deviation=1e-5)))
    beside = next(n for n in found if n.output == 1)
    assert beside.deviations == pytest.approx(alone.deviations, rel=1e-9)


@pytest.mark.parametrize(
    "source",
    [
        TransferMatrix(["1e300", "1.00001e300"], ["1e-300", "3e-300", "2e-300"]),
        TransferMatrix(["1e-18", "1.00001e-9"], ["1e-18", "3e-9", 2]),
        TransferMatrix(["1e18", "1.00001e27"], ["1e-36", "3e-27", "2e-18"]),
    ],
    ids=["gain", "time", "both"],
)
def test_units_do_not_matter(source: TransferMatrix) -> None:
    """The same fraction in other units has the same change and the same relative response."""
    plain = only(exact.cancel(CLOSE))
    near = only(exact.cancel(source))
    assert near.change == pytest.approx(plain.change, rel=1e-5)
    assert near.response_change.relative == pytest.approx(plain.response_change.relative, rel=1e-5)


def test_stiff_models_are_not_near_by_their_stiffness() -> None:
    """Poles and zeros ten per cent apart are not near, however their sizes spread."""
    source = TransferMatrix(
        times((1, "1.1e6"), (1, "1.1e-3")), times((1, "1e6"), (1, "1e-3"), (1, 1))
    )
    assert exact.cancel(source).near == ()


def test_level_weights_by_hand() -> None:
    """Sizes on the hull are their own weights; a small or zero one gets its neighbours'."""
    root = math.sqrt(5)
    found = [float(w) / root for w in level_weights(tuple(map(F, (1, 0, 4, 1, 16))))]
    assert found == pytest.approx([1, 2, 4, 8, 16])
    found = [float(w) / root for w in level_weights(tuple(map(F, (1, 10, -20, 0, 0))))]
    assert found == pytest.approx([1, 10, 20, 40, 80])
    assert level_weights((F(3),)) == [3]


def test_beyond_doubles() -> None:
    """Pole and zero 10^-40 apart: told from each other, and how near is told too."""
    source = TransferMatrix([1, 1 + F(1, 10**40)], [1, 3, 2])
    near = only(exact.cancel(source))
    assert near.change == pytest.approx(only(exact.cancel(CLOSE)).change * 1e-35, rel=1e-4)
    assert near.pole == near.zero == -1
    near = only(exact.cancel(source, uncertainty=F(1, 10**39)))
    assert near.allowed == "yes"


def test_constants() -> None:
    """Irrational constants enter as the numbers that the multiprecision face computes."""
    source = TransferMatrix([1, sympy.sqrt(2)], [1, F(141421356, 10**8), 0])
    near = only(multiprecision.cancel(source, uncertainty=1e-6))
    assert near.allowed == "yes"
    assert near.pole == pytest.approx(-1.41421356)


@pytest.mark.parametrize(
    "source",
    [
        TransferMatrix([0], [1, 1]),
        TransferMatrix([2], [1, 1]),
        TransferMatrix([2], [1]),
        TransferMatrix([1, 5], [1, 3, 2]),
        TransferMatrix([], [], input_names=["u"]),
    ],
)
def test_nothing_is_near(face: ModuleType, source: TransferMatrix) -> None:
    """Zero, constant, far apart, no entries: nothing to tell, with and without uncertainty."""
    assert face.cancel(source).near == ()
    assert face.cancel(source, uncertainty=1e-6).near == ()
    assert face.cancel(source, uncertainty=Uncertainty(standard_deviation=1e-6)).near == ()


def test_improper_fractions() -> None:
    """A numerator of higher degree is looked at just as well."""
    source = TransferMatrix(times((1, "1.00001"), (1, 4)), [1, 1], improper=True)
    near = only(exact.cancel(source))
    assert near.pole == -1
    assert exact.cancel(near.witness).common == near.factor


@pytest.mark.parametrize(
    "uncertainty",
    [-1, math.nan, [0.1], Uncertainty(absolute={"A": 1}), Uncertainty(covariance=[[1.0]])],
)
def test_bad_uncertainties_are_refused_at_once(face: ModuleType, uncertainty: Any) -> None:
    """Not only when `near` is looked at."""
    with pytest.raises(errors.UncertaintyError):
        face.cancel(PAIR, uncertainty=uncertainty)
    with pytest.raises(errors.UnknownWordError):
        face.cancel(PAIR, uncertainty="roughly")


def test_records_pickle_and_print() -> None:
    """A record survives pickling and says what it is in one line."""
    found = pickle.loads(pickle.dumps(exact.cancel(PAIR, uncertainty=0.01)))
    near = only(found)
    assert near == only(exact.cancel(PAIR, uncertainty=0.01))
    assert repr(near).startswith("<NearFactor: degree 1, near -1")
