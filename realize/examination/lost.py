"""How a mode of a connected model was lost: in a block before, or by the connection."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass, replace

import numpy as np

from realize import polynomials
from realize.arithmetic.exact import ExactPath
from realize.arithmetic.floating import FloatingPath
from realize.entries import Reading
from realize.errors import BudgetError, PrecisionError
from realize.forms.kalman import decompose, kalman_parts, reach_and_see
from realize.forms.transfer import transfer_matrix
from realize.model.connections import Connection, listed
from realize.model.realization import Realization
from realize.polynomials import Polynomial
from realize.results import Mode, Part
from realize.tolerance import SAME_MODE

__all__ = ["with_loss"]

_UNREACHED = (Part.UNCONTROLLABLE_OBSERVABLE, Part.UNCONTROLLABLE_UNOBSERVABLE)
_UNSEEN = (Part.CONTROLLABLE_UNOBSERVABLE, Part.UNCONTROLLABLE_UNOBSERVABLE)


@dataclass(frozen=True, slots=True)
class _Block:
    """How often a mode occurs in a block: not reached in it, not seen, at all, and as a zero."""

    name: str
    unreached: Callable[[Mode], int]
    unseen: Callable[[Mode], int]
    poles: Callable[[Mode], int]
    zeros: Callable[[Mode], int]


def with_loss(
    modes: Iterable[Mode], model: Realization, basis: str, budget: float | None
) -> tuple[Mode, ...]:
    """Return hidden modes of a connected model with how each was lost.

    A block's inputs are all that the connection can reach it by. So what is not reached in a
    block alone is not reached in the connection either: modulo what the blocks' inputs reach, A of
    the connection is the blocks' A side by side. The multiplicity on a side (not reached, or not
    seen) that the blocks account for was there before; the connection made the rest, as when a
    pole of one block meets a zero of another.

    ``basis``: a reading, for which the blocks are compared exactly; anything else, for which the
    answer holds only near the doubles, and modes of blocks are told by their computed values.
    """
    found = tuple(modes)
    connection = model._connection
    if connection is None or not found:
        return found
    try:
        if basis in tuple(Reading):
            blocks = _exact_blocks(connection.read(Reading(basis)), budget)
        else:
            blocks = _floating_blocks(connection.to_float())
    except (BudgetError, PrecisionError) as error:
        return tuple(replace(mode, lost=f"not told how it was lost: {error}") for mode in found)
    return tuple(replace(mode, lost=_how(mode, found, blocks)) for mode in found)


def _exact_blocks(connection: Connection, budget: float | None) -> list[_Block]:
    path = ExactPath(budget)
    blocks = []
    for name, block in zip(connection.names, connection.blocks, strict=True):
        parts = kalman_parts(path, block).polynomials
        single = block.input_count == block.output_count == 1
        blocks.append(
            _Block(
                name,
                _copies(*(parts[str(part)] for part in _UNREACHED)),
                _copies(*(parts[str(part)] for part in _UNSEEN)),
                _copies(*parts.values()),
                # With more channels no single zero holds the mode back.
                _copies(*(_zeros(path, block) if single else ())),
            )
        )
    return blocks


def _zeros(path: ExactPath, block: Realization) -> tuple[Polynomial, ...]:
    """Return the numerator of a block, without what its own hidden modes cancel."""
    transfer = transfer_matrix(path, block)
    above, below = transfer.numerators[0][0], transfer.denominators[0][0]
    return (polynomials.divide_exact(above, polynomials.gcd(above, below)),)


def _copies(*factors: Polynomial) -> Callable[[Mode], int]:
    """Return the count of a mode among the roots of a product."""

    def count(mode: Mode) -> int:
        if mode.polynomial is None:
            raise AssertionError("a mode of the exact path has its polynomial")
        return sum(_multiplicity(mode.polynomial, factor) for factor in factors if any(factor))

    return count


def _multiplicity(factor: Polynomial, product: Polynomial) -> int:
    count = 0
    while polynomials.gcd(factor, product) == factor:
        product = polynomials.divide_exact(product, factor)
        count += 1
    return count


def _floating_blocks(connection: Connection) -> list[_Block]:
    path = FloatingPath()
    blocks = []
    for name, block in zip(connection.names, connection.blocks, strict=True):
        opened = path.open(block)
        parts = decompose(opened, *reach_and_see(opened))
        modes = opened.modes((part, parts.block(part)) for part in Part)
        near = SAME_MODE * float(np.abs(block.A).max(initial=0.0))
        blocks.append(
            _Block(
                name,
                _close([mode.value for mode in modes if mode.part in _UNREACHED], near),
                _close([mode.value for mode in modes if mode.part in _UNSEEN], near),
                _close([mode.value for mode in modes], near),
                _close([], near),
            )
        )
    return blocks


def _close(values: list[complex], near: float) -> Callable[[Mode], int]:
    """Return the count of computed values that are a mode's, as far as doubles tell."""

    def count(mode: Mode) -> int:
        return sum(abs(value - mode.value) <= near for value in values)

    return count


def _how(mode: Mode, hidden: tuple[Mode, ...], blocks: list[_Block]) -> str:
    """Return how a mode was lost, in words; on both sides if these differ."""
    told = {}
    for side, parts in (("unreached", _UNREACHED), ("unseen", _UNSEEN)):
        if mode.part in parts:
            total = sum(
                other.multiplicity
                for other in hidden
                if other.part in parts and other.value == mode.value
            )
            told[side] = _on_side(mode, total, side, blocks)
    if len(set(told.values())) == 1:
        return next(iter(told.values()))
    return "; ".join(f"{side}: {text}" for side, text in told.items())


def _on_side(mode: Mode, total: int, side: str, blocks: list[_Block]) -> str:
    def names(count: str) -> tuple[str, ...]:
        return tuple(block.name for block in blocks if getattr(block, count)(mode))

    before = sum(getattr(block, side)(mode) for block in blocks)
    if before >= total:
        return f"there before, in {listed(names(side))}"
    poles, zeros = names("poles"), names("zeros")
    made = "made by the connection"
    if poles:
        made += f" from a mode of {listed(poles)}"
        if zeros:
            made += f" that meets a zero of {listed(zeros)}"
    if before:
        rest = made.replace("made", "the rest made", 1)
        return f"{before} of {total} there before, in {listed(names(side))}; {rest}"
    return made
