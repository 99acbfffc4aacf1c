"""From which inputs a mode is reached, and in which outputs it is seen."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace
from typing import Final

from flint import nmod_mat

from realize.arithmetic import modular
from realize.arithmetic.exact import OpenedExact
from realize.polynomials import Polynomial
from realize.results import Mode

__all__ = ["with_channels"]

_WORK: Final = 4e9
"""Products of numbers spent on one factor at most; beyond, the channels are left open."""

Channels = tuple[tuple[str, ...], tuple[str, ...]]


def with_channels(modes: Iterable[Mode], opened: OpenedExact) -> tuple[Mode, ...]:
    """Return modes with the inputs that reach them and the outputs that see them.

    An input reaches a mode when some left eigenvector of the mode does not vanish on its column
    of B (the PBH test, channel by channel; Kailath, Linear Systems, section 2.4). For all roots
    of an irreducible factor f at once, the left eigenvectors span the left kernel of f(A); it is
    taken modulo a word-size prime, where something that vanishes over the rationals vanishes too.
    """
    known: dict[Polynomial, Channels | None] = {}
    found: list[Mode] = []
    for mode in modes:
        factor = mode.polynomial
        if factor is None:
            found.append(mode)
            continue
        if factor not in known:
            known[factor] = _channels(factor, opened)
        channels = known[factor]
        if channels is None:
            found.append(mode)
        else:
            found.append(replace(mode, inputs=channels[0], outputs=channels[1]))
    return tuple(found)


def _channels(factor: Polynomial, opened: OpenedExact) -> Channels | None:
    model = opened.model
    if (len(factor) - 1) * model.order**3 > _WORK:
        return None
    for A, B, C in modular.images(opened.A, opened.B, opened.C):
        prime = A.modulus()
        if any(c.denominator % prime == 0 for c in factor):
            continue
        value = nmod_mat(model.order, model.order, [0] * model.order**2, prime)
        for coefficient in factor:
            scalar = coefficient.numerator * pow(coefficient.denominator, -1, prime) % prime
            value = value * A + _diagonal(model.order, scalar, prime)
        left = _kernel(value.transpose()).transpose() * B
        right = C * _kernel(value)
        return (
            tuple(
                name
                for j, name in enumerate(model.input_names)
                if any(int(left[i, j]) for i in range(left.nrows()))
            ),
            tuple(
                name
                for i, name in enumerate(model.output_names)
                if any(int(right[i, j]) for j in range(right.ncols()))
            ),
        )
    raise AssertionError("the primes never end")


def _diagonal(size: int, scalar: int, prime: int) -> nmod_mat:
    entries = [0] * (size * size)
    entries[:: size + 1] = [scalar] * size
    return nmod_mat(size, size, entries, prime)


def _kernel(matrix: nmod_mat) -> nmod_mat:
    """Return a basis of what the matrix takes to zero, as columns."""
    basis, nullity = matrix.nullspace()
    size, width = matrix.ncols(), basis.ncols()
    entries = basis.entries()
    kept = [entries[i * width + j] for i in range(size) for j in range(nullity)]
    return nmod_mat(size, nullity, kept, matrix.modulus())
