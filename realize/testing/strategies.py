"""Hypothesis strategies: models, and models whose hidden parts are known because they were planted.

They shrink to few states, zero couplings, planted coordinates and continuous time.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any, Final

import numpy as np
from hypothesis import currently_in_test_context, note
from hypothesis import strategies as st

from realize import polynomials
from realize.entries import known_word
from realize.errors import UnsupportedEntryError
from realize.model.realization import Realization
from realize.polynomials import Polynomial
from realize.results import Part
from realize.testing.planting import Chain, Draft, Planted, Small, plant, shown, zeros

__all__ = [
    "CONTINUOUS_STABLE",
    "DISCRETE_STABLE",
    "FACTORS",
    "RATIONAL_FACTORS",
    "SAMPLING_PERIODS",
    "STRUCTURES",
    "planted",
    "realizations",
]

Array = np.ndarray[Any, Any]


def _factors(*found: tuple[int | Fraction, ...]) -> tuple[Polynomial, ...]:
    return tuple(tuple(Fraction(c) for c in p) for p in found)


FACTORS: Final = _factors(
    (1, 1), (1, 0), (1, 2), (1, -1), (1, 3), (1, -2),
    (1, 0, 1), (1, 1, 1), (1, 2, 5), (1, 0, -2), (1, -1, 1),
)  # fmt: skip
"""Distinct monic polynomials, irreducible over the rationals, with small integer coefficients:
real, complex, irrational, on both boundaries of stability and at the origin."""

RATIONAL_FACTORS: Final = _factors(
    (1, Fraction(1, 2)), (1, Fraction(-1, 3)), (1, Fraction(-3, 5), Fraction(1, 4))
)
"""Irreducible polynomials whose coefficients are not integers."""

CONTINUOUS_STABLE: Final = _factors(
    (1, 1), (1, 2), (1, 3), (1, 1, 1), (1, 2, 5), (1, Fraction(1, 2))
)
"""Factors with every root in the open left half plane."""

DISCRETE_STABLE: Final = _factors(
    (1, 0), (1, Fraction(1, 2)), (1, Fraction(-1, 3)), (1, Fraction(-3, 5), Fraction(1, 4))
)
"""Factors with every root inside the unit circle."""

SAMPLING_PERIODS: Final = (None, Fraction(1, 10), 1)

STRUCTURES: Final = ("any", "diagonal", "triangular", "chain", "blocks")
"""Patterns of zeros in A: none; all off the diagonal; above it; all but the diagonal and the one
below; two blocks side by side."""


@st.composite
def realizations(
    draw: st.DrawFn,
    *,
    min_states: int = 0,
    max_states: int = 4,
    min_inputs: int = 1,
    max_inputs: int = 2,
    min_outputs: int = 1,
    max_outputs: int = 2,
    largest: int = 2,
    structure: str | None = None,
    units: Sequence[Any] = (1,),
    floating: bool = False,
    sampling_periods: Sequence[Any] = SAMPLING_PERIODS,
) -> Realization:
    """Draw models with no plan: low ranks by accident, zero rows, zero columns.

    Parameters
    ----------
    min_states, max_states, min_inputs, max_inputs, min_outputs, max_outputs : int
        Bounds, both included.
    largest : int
        Entries are whole numbers up to this size.
    structure : str, optional
        One of `STRUCTURES`; None draws one.
    units : sequence of rational numbers
        What each state's unit is drawn from, the simplest first; `(1, "1e-6", 1000)` gives entries
        of very different sizes.
    floating : bool
        Round the entries to doubles.
    sampling_periods : sequence
        What to draw from; None is continuous time.
    """
    order = draw(st.integers(min_states, max_states))
    inputs = draw(st.integers(min_inputs, max_inputs))
    outputs = draw(st.integers(min_outputs, max_outputs))
    small = _small(draw, largest)
    pattern = draw(st.sampled_from(STRUCTURES)) if structure is None else structure
    A = small(order, order)
    A[~_pattern(pattern, order)] = Fraction(0)
    draft = Draft(
        A,
        small(order, inputs),
        small(outputs, order),
        small(outputs, inputs),
        states={Part.CONTROLLABLE_OBSERVABLE: range(order)},
        polynomials={},
    )
    _change_units(draw, draft, [Fraction(unit) for unit in units])
    exact = draft.exact(draw(st.sampled_from(list(sampling_periods))))
    model = exact.to_float() if floating else exact
    if currently_in_test_context():
        # The short form of a model, which a failing test prints, has none of its numbers.
        note(f"model: {shown(model)}")
    return model


def planted(
    *,
    dimensions: Mapping[str, int] | None = None,
    factors: Sequence[Polynomial] = FACTORS + RATIONAL_FACTORS,
    most: int = 2,
    chains: int = 2,
    repeated: bool = False,
    near: Any = None,
    max_more_inputs: int = 2,
    max_more_outputs: int = 2,
    moves: int = 12,
    largest: int = 3,
    units: Sequence[Any] = (1,),
    floating: bool = False,
    sampling_periods: Sequence[Any] = SAMPLING_PERIODS,
) -> st.SearchStrategy[Planted]:
    """Return a strategy of models in general coordinates, with their parts known.

    Parameters
    ----------
    dimensions : dict, optional
        Part -> number of states; a part left out is empty. None draws them.
    factors : sequence of polynomials
        Monic factors of the characteristic polynomial, drawn with replacement: an eigenvalue that
        occurs twice in one chain is defective, in two chains it need not be.
    most : int
        Factors in each part of the first chain at most, when dimensions are drawn.
    chains : int
        Independent chains at most, when dimensions are drawn.
    repeated : bool
        Plant a defective eigenvalue in the visible part at least; dimensions are then drawn.
    near : rational number, optional
        Plant a pole and a zero this far apart, on the real axis, in series before the first input.
        The pole is one more visible state; hence the model hides nothing there, however small.
    max_more_inputs, max_more_outputs : int
        Beyond one of each for every chain.
    moves, largest : int
        Elementary changes of coordinates at most, and the size of their factors; with 0 moves the
        coordinates are those of the parts, permuted and with signs.
    units : sequence of rational numbers
        What each state's unit is drawn from, the simplest first; `(1, "1e-6", 1000)` gives entries
        of very different sizes.
    floating : bool
        Round the entries to doubles; what was planted is then true of `Planted.exact`.
    sampling_periods : sequence
        What to draw from; None is continuous time.

    Returns
    -------
    SearchStrategy of Planted

    Raises
    ------
    UnsupportedEntryError
        When near is zero or no rational number, or dimensions are not whole numbers, or they leave
        nothing visible behind a near cancellation.
    """
    wanted = None if dimensions is None else _checked(dimensions)
    gap = None if near is None else _gap(near)
    if wanted is not None and repeated:
        raise UnsupportedEntryError(
            "dimensions and repeated are both given; wanted one of them: repeated draws dimensions"
        )
    if wanted is not None and gap is not None:
        # The pole of the pair is one of the visible states asked for.
        wanted[Part.CONTROLLABLE_OBSERVABLE] -= 1
        if wanted[Part.CONTROLLABLE_OBSERVABLE] < 1:
            raise UnsupportedEntryError(
                "dimensions leave no visible state behind the near cancellation; wanted 2 states "
                f'in "{Part.CONTROLLABLE_OBSERVABLE}" at least'
            )
    listed: st.SearchStrategy[list[Chain]] = (
        _chains(tuple(factors), most=most, most_chains=chains)
        if wanted is None
        else _chain_of(tuple(factors), wanted).map(lambda chain: [chain])
    )
    if repeated:
        listed = st.tuples(listed, st.sampled_from(tuple(factors))).map(
            lambda pair: _with_visible(pair[0], (pair[1], pair[1]))
        )
    elif gap is not None and wanted is None:
        listed = st.tuples(listed, st.sampled_from(tuple(factors))).map(
            lambda pair: _with_visible(pair[0], (pair[1],))
        )
    return _planted(
        listed,
        gap=gap,
        more=(max_more_inputs, max_more_outputs),
        moves=moves,
        largest=largest,
        units=[Fraction(unit) for unit in units],
        floating=floating,
        sampling_periods=list(sampling_periods),
    )


@st.composite
def _planted(
    draw: st.DrawFn,
    listed: st.SearchStrategy[list[Chain]],
    *,
    gap: Fraction | None,
    more: tuple[int, int],
    moves: int,
    largest: int,
    units: list[Fraction],
    floating: bool,
    sampling_periods: list[Any],
) -> Planted:
    found = draw(listed)
    draft = plant(
        found,
        small=_small(draw, 2),
        more_inputs=draw(st.integers(0, more[0])),
        more_outputs=draw(st.integers(0, more[1])),
    )
    if gap is not None:
        draft = _with_near_cancellation(draft, found[0], gap)
    order = draft.order
    places = draw(st.permutations(range(order)))
    signs = draw(st.lists(st.sampled_from([1, -1]), min_size=order, max_size=order))
    draft.permute(places, signs)
    if order > 1:
        move = st.tuples(
            st.integers(0, order - 1), st.integers(1, order - 1), st.integers(-largest, largest)
        )
        for i, step, factor in draw(st.lists(move, max_size=moves)):
            draft.add(i, (i + step) % order, factor)
    _change_units(draw, draft, units)
    return draft.planted(sampling_period=draw(st.sampled_from(sampling_periods)), floating=floating)


def _small(draw: st.DrawFn, largest: int) -> Small:
    def small(rows: int, columns: int) -> Array:
        count = rows * columns
        numbers = draw(st.lists(st.integers(-largest, largest), min_size=count, max_size=count))
        table = zeros(rows, columns)
        for k, number in enumerate(numbers):
            table[k // columns, k % columns] = Fraction(number)
        return table

    return small


def _change_units(draw: st.DrawFn, draft: Draft, units: Sequence[Fraction]) -> None:
    if any(unit != 1 for unit in units):
        for i in range(draft.order):
            draft.scale(i, draw(st.sampled_from(units)))


def _pattern(structure: str, order: int) -> Array:
    """Return where A may be other than zero."""
    rows, columns = np.indices((order, order))
    patterns = {
        "any": rows >= 0,
        "diagonal": rows == columns,
        "triangular": rows >= columns,
        "chain": (rows == columns) | (rows == columns + 1),
        "blocks": (rows < order // 2) == (columns < order // 2),
    }
    if structure not in patterns:
        raise UnsupportedEntryError(
            f"structure is {structure!r}; wanted one of {', '.join(STRUCTURES)}, or None for any "
            "of them"
        )
    return np.asarray(patterns[structure])


def _checked(dimensions: Mapping[str, int]) -> dict[Part, int]:
    wanted = dict.fromkeys(Part, 0)
    for part, count in dimensions.items():
        if isinstance(count, bool) or not isinstance(count, int) or count < 0:
            raise UnsupportedEntryError(
                f"dimensions hold {count!r} for {part!r}; wanted a number of states, not negative"
            )
        wanted[known_word(Part, part, "dimensions")] = count
    return wanted


def _gap(near: Any) -> Fraction:
    try:
        gap = Fraction(near)
    except (TypeError, ValueError, OverflowError) as error:
        raise UnsupportedEntryError(
            f"near is {near!r}; wanted a rational number, the distance of pole and zero"
        ) from error
    if not gap:
        raise UnsupportedEntryError("near is 0: that cancels; wanted another number, or None")
    return gap


def _chains(
    factors: tuple[Polynomial, ...], *, most: int, most_chains: int
) -> st.SearchStrategy[list[Chain]]:
    """Lists of chains, with up to `most` factors in each part of the first."""

    def chain(limit: int) -> st.SearchStrategy[dict[str, tuple[Polynomial, ...]]]:
        part = st.lists(st.sampled_from(factors), max_size=limit).map(tuple)
        visible = st.lists(st.sampled_from(factors), min_size=1, max_size=limit + 1).map(tuple)
        nothing: st.SearchStrategy[tuple[Polynomial, ...]] = st.just(())
        visible_too = {Part.CONTROLLABLE_OBSERVABLE: visible}
        return st.one_of(
            st.fixed_dictionaries(dict.fromkeys(Part, part)),
            st.fixed_dictionaries(dict.fromkeys(Part, part) | visible_too),
            st.fixed_dictionaries(dict.fromkeys(Part, nothing) | visible_too),
        )

    return st.tuples(chain(most), st.lists(chain(1), max_size=most_chains - 1)).map(
        lambda pair: [pair[0], *pair[1]]
    )


@st.composite
def _chain_of(
    draw: st.DrawFn, factors: tuple[Polynomial, ...], dimensions: dict[Part, int]
) -> Chain:
    """One chain with a number of states in each part."""
    chain: dict[str, tuple[Polynomial, ...]] = {}
    for part, count in dimensions.items():
        chosen: list[Polynomial] = []
        left = count
        while left:
            fitting = [p for p in factors if len(p) - 1 <= left]
            if not fitting:
                raise UnsupportedEntryError(
                    f"no factor has degree {left} or less; the {count} states of {part!r} cannot "
                    "be made up of the factors given"
                )
            chosen.append(draw(st.sampled_from(fitting)))
            left -= len(chosen[-1]) - 1
        chain[str(part)] = tuple(chosen)
    return chain


def _with_visible(chains: list[Chain], added: tuple[Polynomial, ...]) -> list[Chain]:
    """Return the chains with factors added to the visible part of the first."""
    first = dict(chains[0])
    first[Part.CONTROLLABLE_OBSERVABLE] = (*first[Part.CONTROLLABLE_OBSERVABLE], *added)
    return [first, *chains[1:]]


def _with_near_cancellation(draft: Draft, chain: Chain, gap: Fraction) -> Draft:
    """Return the model with (s + a + gap) / (s + a) in series before its first input.

    The pole shows if the first input's way to the first output, which has no zeros, does not
    vanish there, and the zero hides nothing if no pole of the way lies at it; a is chosen so.
    """
    taken = [p for factors in chain.values() for p in factors]
    a = Fraction(1, 7)
    while any(not polynomials.evaluate(p, x) for p in taken for x in (-a, -a - gap)):
        a += 1
    order = draft.order
    A, B = zeros(order + 1, order + 1), zeros(order + 1, draft.B.shape[1])
    A[:order, :order] = draft.A
    A[order, order] = -a
    B[:order] = draft.B
    B[order, 0] = Fraction(1)
    A[:order, order] = gap * draft.B[:, 0]
    # Without feedthrough the way from the first input to the first output has no zeros.
    D = draft.D.copy()
    D[0, 0] = Fraction(0)
    C = np.concatenate([draft.C, gap * D[:, :1]], axis=1)
    states = {part: list(places) for part, places in draft.states.items()}
    states[Part.CONTROLLABLE_OBSERVABLE].append(order)
    visible = draft.polynomials[Part.CONTROLLABLE_OBSERVABLE]
    pair = (Fraction(1), a)
    return Draft(
        A,
        B,
        C,
        D,
        states=states,
        polynomials=draft.polynomials
        | {Part.CONTROLLABLE_OBSERVABLE: polynomials.multiply(visible, pair)},
    )
