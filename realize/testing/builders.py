"""The families' models, exactly: one function for each, from a difficulty and a generator.

Every function returns a `Draft` in coordinates that hide what was planted, and says what is known
by construction. Nothing is computed that would need a rank decision.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import Any, Final

import numpy as np

from realize.polynomials import Polynomial
from realize.results import Part
from realize.testing.planting import Draft, companion_block, times, zeros

__all__ = [
    "Plan",
    "buried_mode",
    "common_factor",
    "fast_sampling",
    "hidden_modes",
    "near_cancellation",
    "quiet_staircase",
    "repeated_blocks",
    "stiff_scales",
    "weak_cascade",
    "wilkinson_chain",
]

Array = np.ndarray[Any, Any]

VISIBLE, UNSEEN = Part.CONTROLLABLE_OBSERVABLE, Part.CONTROLLABLE_UNOBSERVABLE
UNREACHED, NEITHER = Part.UNCONTROLLABLE_OBSERVABLE, Part.UNCONTROLLABLE_UNOBSERVABLE

ONE: Final = Fraction(1)


@dataclass(frozen=True, kw_only=True, slots=True, eq=False)
class Plan:
    """A draft, its time domain, and what is known of the distance to uncontrollability."""

    draft: Draft
    sampling_period: Fraction | None = None
    distance: tuple[float, float] | None = None


@dataclass(frozen=True, slots=True)
class _Block:
    """One real eigenvalue, or one complex pair."""

    A: Array
    polynomial: Polynomial


def hidden_modes(difficulty: int, rng: np.random.Generator) -> Plan:
    """Modes of all four parts, in coordinates of condition 10**difficulty.

    A change of B or C by about 10**-difficulty of its size hides one mode more.
    """
    draft, period = _with_hidden_modes(rng)
    _turn(draft, rng)
    # Powers of two, between two turns: no choice of units undoes them.
    last = max(draft.order - 1, 1)
    for i in range(draft.order):
        draft.scale(i, Fraction(1, 2 ** round(difficulty * i / last * np.log2(10.0))))
    _turn(draft, rng)
    return Plan(draft=draft, sampling_period=period)


def wilkinson_chain(difficulty: int, rng: np.random.Generator) -> Plan:
    """A chain of n lags at -1 ... -n with links n, n = 2 + 2 difficulty, and two hidden modes."""
    length = 2 + 2 * difficulty
    order = length + 2
    A, B, C = zeros(order, order), zeros(order, 1), zeros(1, order)
    for i in range(length):
        A[i, i] = -Fraction(i + 1)
        if i:
            A[i, i - 1] = Fraction(length)
    B[0, 0] = C[0, length - 1] = ONE
    # Between two poles of the chain, so that no two modes are equal.
    unreached, unseen = (Fraction(2 * int(k) + 1, 2) for k in rng.choice(length, 2, replace=False))
    A[length, length] = -unreached
    A[0, length] = _digit(rng)
    A[length + 1, length + 1] = -unseen
    A[length + 1, length - 1] = _digit(rng)
    draft = Draft(
        A,
        B,
        C,
        zeros(1, 1),
        states={VISIBLE: range(length), UNREACHED: [length], UNSEEN: [length + 1]},
        polynomials={
            VISIBLE: times(*((1, i + 1) for i in range(length))),
            UNREACHED: (ONE, unreached),
            UNSEEN: (ONE, unseen),
        },
    )
    _turn(draft, rng)
    return Plan(draft=draft, distance=(0.0, 0.0))


def common_factor(difficulty: int, rng: np.random.Generator) -> Plan:
    """The companion form of n consecutive integer poles, n = 2 + difficulty, some cancelled.

    Zeros lie half way between poles. A change of the coefficients by 1e-9 of their size is enough
    to make such a pair meet when there are eleven; with twenty it would be within rounding.
    """
    order = 2 + difficulty
    hidden = 1 + difficulty // 3
    cancelled = sorted(int(k) + 1 for k in rng.choice(order, hidden, replace=False))
    kept = [k for k in range(1, order + 1) if k not in cancelled]
    common = times(*((1, k) for k in cancelled))
    # Zeros half way between poles: never a pole.
    count = int(rng.integers(0, len(kept)))
    zeros_at = [Fraction(2 * int(k) + 1, 2) for k in rng.choice(order, count, replace=False)]
    numerator = times(*((2, 2 * z) for z in zeros_at))
    denominator = times(*((1, k) for k in kept))
    draft = _companion(times(numerator, common), times(denominator, common))
    reduced = _companion(numerator, denominator)
    draft.dimensions = {**reduced.dimensions, str(UNSEEN): hidden}
    draft.polynomials = {**reduced.polynomials, str(UNSEEN): common}
    draft.visible = reduced.visible
    return Plan(draft=draft)


def near_cancellation(difficulty: int, rng: np.random.Generator) -> Plan:
    """A pole and a zero 10**-difficulty apart, in series with a chain of three lags."""
    gap = Fraction(1, 10**difficulty)
    # Even, so that no zero meets a pole while the gap is 1.
    poles = [Fraction(2 * int(k)) for k in rng.choice(np.arange(1, 8), 4, replace=False)]
    order = 4
    A, B, C = zeros(order, order), zeros(order, 1), zeros(1, order)
    # (s + a + gap) / (s + a): a state that is driven fully, and passed on by the gap only; in the
    # dual it is driven by the gap only.
    A[0, 0] = -poles[0]
    for i in range(1, order):
        A[i, i] = -poles[i]
        if i > 1:
            A[i, i - 1] = _digit(rng)
    C[0, order - 1] = ONE
    B[1, 0] = ONE
    B[0, 0] = ONE
    A[1, 0] = gap
    draft = Draft(
        A,
        B,
        C,
        zeros(1, 1),
        states={VISIBLE: range(order)},
        polynomials={VISIBLE: times(*((1, p) for p in poles))},
    )
    distance = None
    if rng.integers(2):
        draft = _dual(draft)
        distance = (0.0, float(gap))
    _turn(draft, rng)
    return Plan(draft=draft, distance=distance)


def weak_cascade(difficulty: int, rng: np.random.Generator) -> Plan:
    """Four subsystems in series, each link 10**(-0.4 difficulty); by chance the last is cut.

    A change of B by about the product of three links hides the last; at difficulty 9 that is 1e-11.
    """
    link = Fraction(1, round(10 ** (0.4 * difficulty)))
    cut = bool(rng.integers(2))
    blocks = _distinct(rng, 4)
    places = _places(blocks)
    order = places[-1].stop
    A, B, C = zeros(order, order), zeros(order, 1), zeros(2, order)
    for k, (block, place) in enumerate(zip(blocks, places, strict=True)):
        A[np.ix_(place, place)] = block.A
        if k:
            A[place.start, places[k - 1].stop - 1] = Fraction(0) if cut and k == 3 else link
    B[0, 0] = C[0, order - 1] = C[1, places[2].stop - 1] = ONE
    visible = range(places[3].start) if cut else range(order)
    draft = Draft(
        A,
        B,
        C,
        zeros(2, 1),
        states={VISIBLE: visible, UNREACHED: range(len(visible), order)},
        polynomials={
            VISIBLE: times(*(block.polynomial for block in blocks[: 3 if cut else 4])),
            UNREACHED: times(*(block.polynomial for block in blocks[3 if cut else 4 :])),
        },
    )
    _turn(draft, rng)
    return Plan(draft=draft, distance=(0.0, 0.0 if cut else float(link)))


def quiet_staircase(difficulty: int, rng: np.random.Generator) -> Plan:
    """A slow mode behind n - 1 equal lags, n = 3 + 2 difficulty: reached, by 4**-(n - 1) only.

    Every entry that a staircase decides on is 1. With w = |5 + z| the columns of [A - z, B] but the
    last hold a bidiagonal matrix with ones, whose inverse has norm at most 1 + w + ... + w^(n-1);
    for w > 4 (1 + 1/n) the columns of A - z alone do with diagonal -w, and the last |1 + z|, which
    is at least 4/n. So the distance is at least 4**-n; the vector (1, 4, ..., 4^(n-1)) shows that
    it is at most 4**-(n - 1).
    """
    order = 3 + 2 * difficulty
    draft = _lags(order, twin=False)
    _turn(draft, rng)
    return Plan(draft=draft, distance=(4.0**-order, 4.0 ** -(order - 1)))


def buried_mode(difficulty: int, rng: np.random.Generator) -> Plan:
    """The same model with a second slow mode beside the first, which nothing tells apart."""
    draft = _lags(3 + 2 * difficulty, twin=True)
    _turn(draft, rng)
    return Plan(draft=draft, distance=(0.0, 0.0))


def stiff_scales(difficulty: int, rng: np.random.Generator) -> Plan:
    """Compartments with rates over 2 * difficulty decades, in units over as many.

    One is a twin of another, so that their difference is out of reach; one is not looked at.
    """
    length = 4
    order = length + 2
    rates = []
    for i in range(length):
        decade = round(difficulty * (2 * i / (length - 1) - 1))
        rates.append(int(rng.integers(1, 10)) * Fraction(10) ** decade)
    # A chain with two equal rates is a chain all the same; the twin has the rate of one of them.
    flow = [rates[k] for k in rng.permutation(length)]
    A, B, C = zeros(order, order), zeros(order, 1), zeros(1, order)
    for i in range(length):
        A[i, i] = -flow[i]
        if i:
            A[i, i - 1] = flow[i]
    B[0, 0] = C[0, length - 1] = C[0, length] = ONE
    A[length, length] = -flow[length - 1]
    unlooked = Fraction(19, 2) * Fraction(10) ** int(rng.integers(-difficulty, difficulty + 1))
    A[length + 1, length + 1] = -unlooked
    A[length + 1, 0] = unlooked
    # The output sees the last compartment and its twin alike: as one of twice the size, and their
    # difference, which nothing drives. It has the rate of the last, so that one output cannot tell
    # the two apart.
    C[0, length - 1] = Fraction(2)
    draft = Draft(
        A,
        B,
        C,
        zeros(1, 1),
        states={VISIBLE: range(length), NEITHER: [length], UNSEEN: [length + 1]},
        polynomials={
            VISIBLE: times(*((1, rate) for rate in flow)),
            NEITHER: (ONE, flow[length - 1]),
            UNSEEN: (ONE, unlooked),
        },
    )
    # Back to the two compartments themselves: twin = last + difference.
    draft.add(length, length - 1, -1)
    draft.permute(rng.permutation(order).tolist(), [1] * order)
    for i in range(order):
        draft.scale(i, Fraction(10) ** int(rng.integers(-difficulty, difficulty + 1)))
    return Plan(draft=draft, distance=(0.0, 0.0))


def repeated_blocks(difficulty: int, rng: np.random.Generator) -> Plan:
    """Copies of one Jordan block, 2 to 6 of size 1 to 6, some hidden: all with one eigenvalue."""
    copies, size = 2 + difficulty // 2, 1 + (difficulty + 1) // 2
    parts = [(VISIBLE, UNREACHED, UNSEEN, NEITHER, VISIBLE, UNREACHED)[k] for k in range(copies)]
    value = -Fraction(int(rng.integers(1, 6)), 2)
    order = copies * size
    reached = [k for k, part in enumerate(parts) if part in (VISIBLE, UNSEEN)]
    seen = [k for k, part in enumerate(parts) if part in (VISIBLE, UNREACHED)]
    A, B, C = zeros(order, order), zeros(order, len(reached)), zeros(len(seen), order)
    for k in range(copies):
        for i in range(k * size, (k + 1) * size):
            A[i, i] = value
            if i > k * size:
                A[i, i - 1] = ONE
    for j, k in enumerate(reached):
        B[k * size, j] = ONE
    for i, k in enumerate(seen):
        C[i, (k + 1) * size - 1] = ONE
    states: dict[str, list[int]] = {}
    for k, part in enumerate(parts):
        states.setdefault(part, []).extend(range(k * size, (k + 1) * size))
    draft = Draft(
        A,
        B,
        C,
        zeros(len(seen), len(reached)),
        states=states,
        polynomials={
            part: times(*[(ONE, -value)] * len(of_part)) for part, of_part in states.items()
        },
    )
    _turn(draft, rng)
    return Plan(draft=draft, distance=(0.0, 0.0) if len(reached) < copies else None)


def fast_sampling(difficulty: int, rng: np.random.Generator) -> Plan:
    """A model with hidden modes, sampled every 10**-difficulty by Euler's rule: A = 1 + h M."""
    step = Fraction(1, 10**difficulty)
    draft, _ = _with_hidden_modes(rng, continuous=True)
    _turn(draft, rng)
    for i in range(draft.order):
        draft.A[i] *= step
        draft.A[i, i] += ONE
    draft.B = draft.B * step
    A, B, C = draft.visible
    A = A * step
    for i in range(A.shape[0]):
        A[i, i] += ONE
    draft.visible = (A, B * step, C)
    draft.polynomials = {part: _stepped(p, step) for part, p in draft.polynomials.items()}
    return Plan(draft=draft, sampling_period=step)


# ------------------------------------------------------------------------- pieces


def _digit(rng: np.random.Generator) -> Fraction:
    """Return a whole number from 1 to 3, of either sign."""
    return Fraction(int(rng.choice([-3, -2, -1, 1, 2, 3])))


def _digits(rng: np.random.Generator, rows: int, columns: int) -> Array:
    table = zeros(rows, columns)
    for i in range(rows):
        for j in range(columns):
            table[i, j] = _digit(rng)
    return table


def _turn(draft: Draft, rng: np.random.Generator) -> None:
    """Turn the state space by two rational reflections, so that every state is in every other."""
    if draft.order > 1:
        for _ in range(2):
            draft.reflect([int(_digit(rng)) for _ in range(draft.order)])


def _distinct(rng: np.random.Generator, count: int, *, continuous: bool = True) -> list[_Block]:
    """Return blocks without a common eigenvalue: one in three a complex pair.

    Continuous: real parts -1/2, -1, -3/2, ... Discrete: 1/20, 2/20, ... Each once.
    """
    places = rng.choice(np.arange(1, 17), count, replace=False)
    blocks = []
    for place in places.tolist():
        real = -Fraction(place, 2) if continuous else Fraction(place, 20)
        if rng.integers(3):
            blocks.append(_Block(np.array([[real]], dtype=object), (ONE, -real)))
        else:
            turn = Fraction(int(rng.integers(1, 4)), 1 if continuous else 10)
            A = np.array([[real, turn], [-turn, real]], dtype=object)
            blocks.append(_Block(A, (ONE, -2 * real, real * real + turn * turn)))
    return blocks


def _places(blocks: Sequence[_Block]) -> list[range]:
    places, at = [], 0
    for block in blocks:
        places.append(range(at, at + block.A.shape[0]))
        at = places[-1].stop
    return places


def _with_hidden_modes(
    rng: np.random.Generator, *, continuous: bool | None = None
) -> tuple[Draft, Fraction | None]:
    """Return blocks side by side, each driven and seen as its part says; no two share a mode.

    A block with an eigenvalue of its own is reached when any input drives it, seen when any output
    sees it.
    """
    if continuous is None:
        continuous = bool(rng.integers(2))
    hidden = [int(k) for k in rng.multinomial(int(rng.integers(1, 4)), [1 / 3] * 3)]
    counts = {
        VISIBLE: int(rng.integers(2, 5)),
        **dict(zip((UNSEEN, UNREACHED, NEITHER), hidden, strict=True)),
    }
    parts = [part for part, count in counts.items() for _ in range(count)]
    blocks = _distinct(rng, len(parts), continuous=continuous)
    places = _places(blocks)
    order = places[-1].stop
    inputs, outputs = int(rng.integers(1, 3)), int(rng.integers(1, 3))
    A, B, C = zeros(order, order), zeros(order, inputs), zeros(outputs, order)
    states: dict[str, list[int]] = {}
    found: dict[str, Polynomial] = {}
    for part, block, place in zip(parts, blocks, places, strict=True):
        A[np.ix_(place, place)] = block.A
        if part in (VISIBLE, UNSEEN):
            B[place] = _digits(rng, len(place), inputs)
        if part in (VISIBLE, UNREACHED):
            C[:, place] = _digits(rng, outputs, len(place))
        states.setdefault(part, []).extend(place)
        found[part] = times(found.get(part, (ONE,)), block.polynomial)
    draft = Draft(A, B, C, _digits(rng, outputs, inputs), states=states, polynomials=found)
    return draft, None if continuous else Fraction(1, 10)


def _companion(numerator: Polynomial, denominator: Polynomial) -> Draft:
    """Return the controllable companion form of a strictly proper coprime fraction."""
    order = len(denominator) - 1
    B, C = zeros(order, 1), zeros(1, order)
    B[order - 1, 0] = ONE
    for j, coefficient in enumerate(reversed(numerator)):
        C[0, j] = coefficient
    return Draft(
        companion_block(denominator),
        B,
        C,
        zeros(1, 1),
        states={VISIBLE: range(order)},
        polynomials={VISIBLE: denominator},
    )


def _dual(draft: Draft) -> Draft:
    """Return the dual of a draft that hides nothing."""
    return Draft(
        draft.A.T.copy(),
        draft.C.T.copy(),
        draft.B.T.copy(),
        draft.D.T.copy(),
        states={VISIBLE: range(draft.order)},
        polynomials=draft.polynomials,
    )


def _lags(order: int, *, twin: bool) -> Draft:
    """Return order - 1 lags at -5 in series and a mode at -1 behind them; its twin beside it."""
    count = order + twin
    A, B, C = zeros(count, count), zeros(count, 1), zeros(1, count)
    for i in range(order):
        A[i, i] = Fraction(-5 if i < order - 1 else -1)
        if i:
            A[i, i - 1] = ONE
    B[0, 0] = C[0, order - 1] = ONE
    hidden: dict[str, Polynomial] = {}
    if twin:
        # The difference of the two is driven by nothing, and one output cannot tell it from the
        # mode at -1 that is.
        A[order, order] = -ONE
        C[0, order] = ONE
        C[0, order - 1] = Fraction(2)
        hidden = {NEITHER: (ONE, ONE)}
    draft = Draft(
        A,
        B,
        C,
        zeros(1, 1),
        states={VISIBLE: range(order), NEITHER: range(order, count)},
        polynomials={VISIBLE: times(*[(1, 5)] * (order - 1), (1, 1)), **hidden},
    )
    if twin:
        draft.add(order, order - 1, -1)
    return draft


def _stepped(p: Polynomial, step: Fraction) -> Polynomial:
    """Return the monic polynomial with roots 1 + step * root: p((z - 1) / step), made monic."""
    degree = len(p) - 1
    result: Polynomial = (Fraction(0),)
    for k, coefficient in enumerate(p):
        power = times((coefficient * step**k,), *[(1, -1)] * (degree - k))
        width = max(len(result), len(power))
        padded = [(Fraction(0),) * (width - len(q)) + q for q in (result, power)]
        result = tuple(x + y for x, y in zip(*padded, strict=True))
    return result
