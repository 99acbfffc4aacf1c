"""What a form may ask of an arithmetic.

A form (staircase, minimal, Kalman parts, ...) is written once, over a `Path`. It opens a model on
the path and then asks for a few coarse verbs; each arithmetic answers with its own best method
and keeps the rank decisions that it took. Matrices on a path are whatever the path likes, as long
as they slice, transpose, multiply and add like arrays.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any, Protocol, Self, TypeVar

import numpy as np

from realize.model.realization import Kind, Realization
from realize.results import Evidence, Mode, Part, RankDecision
from realize.stability import Stability

__all__ = [
    "Completion",
    "Frame",
    "Matrix",
    "Opened",
    "Path",
    "Reach",
    "Sequenced",
    "SharedFactor",
    "frozen",
]

Array = np.ndarray[Any, Any]


def frozen(values: Array) -> Array:
    """Return the array, read-only."""
    values.flags.writeable = False
    return values


class Matrix(Protocol):
    """A matrix of one arithmetic."""

    @property
    def shape(self) -> tuple[int, ...]: ...
    @property
    def T(self) -> Self: ...
    def __matmul__(self, other: Self) -> Self: ...
    def __add__(self, other: Self) -> Self: ...
    def __sub__(self, other: Self) -> Self: ...
    def __getitem__(self, key: Any) -> Self: ...


@dataclass(frozen=True, kw_only=True, slots=True)
class Frame:
    """Coordinates adapted to a subspace, with the model in them.

    ``basis`` (n, n) has the subspace in its first columns, ``inverse`` is its inverse, and
    ``A = inverse A basis``, ``B = inverse B``, ``C = C basis``.
    """

    basis: Any
    inverse: Any
    A: Any
    B: Any
    C: Any


@dataclass(frozen=True, kw_only=True, slots=True)
class Completion:
    """A basis that begins with the span of a matrix: ``matrix = basis[:, :k] @ factor``."""

    basis: Any
    inverse: Any
    factor: Any
    factor_inverse: Any


@dataclass(frozen=True, kw_only=True, slots=True)
class SharedFactor:
    """``numerator = common * reduced numerator`` and likewise below, in one arithmetic."""

    common: tuple[Any, ...]
    numerator: tuple[Any, ...]
    denominator: tuple[Any, ...]
    decisions: tuple[RankDecision, ...]


@dataclass(frozen=True, kw_only=True, slots=True)
class Sequenced:
    """A realization of a sequence of Markov parameters, as model arrays, and the decisions."""

    A: Array
    B: Array
    C: Array
    decisions: tuple[RankDecision, ...]


class Reach(Protocol):
    """The subspace reached from B, and the model restricted to it."""

    @property
    def dimension(self) -> int: ...
    @property
    def stairs(self) -> tuple[int, ...]: ...
    @property
    def A(self) -> Any: ...
    @property
    def B(self) -> Any: ...
    @property
    def C(self) -> Any: ...
    @property
    def basis(self) -> Any:
        """Matrix (n, r) whose columns span the subspace."""
        ...

    @property
    def coordinates(self) -> Any:
        """Matrix (r, n) with coordinates @ basis = 1."""
        ...

    def frame(self) -> Frame:
        """Return coordinates of the whole space, the subspace first."""
        ...

    def quotient(self) -> Any:
        """Return A on the space modulo the subspace, (n - r, n - r)."""
        ...

    def decisions(self) -> tuple[RankDecision, ...]:
        """Return the rank decisions taken, in order."""
        ...


R_co = TypeVar("R_co", bound=Reach, covariant=True)


class Opened(Protocol[R_co]):
    """A model opened on a path: its matrices there, and the verbs."""

    @property
    def model(self) -> Realization: ...
    @property
    def A(self) -> Any: ...
    @property
    def B(self) -> Any: ...
    @property
    def C(self) -> Any: ...

    def reached(self, A: Any, B: Any, C: Any, where: str) -> R_co:
        """Return the smallest A-invariant subspace that holds the columns of B."""
        ...

    def flag(self, A: Any, B: Any, C: Any, where: str) -> R_co:
        """Return the same, with a frame adapted to span[B], span[B, AB], ... in turn."""
        ...

    def complete(self, matrix: Any) -> Completion:
        """Complete the independent columns of a matrix to a basis."""
        ...

    def block(self, rows: Sequence[Sequence[Any]]) -> Any:
        """Assemble a matrix from blocks."""
        ...

    def identity(self, size: int) -> Any: ...
    def zeros(self, rows: int, columns: int) -> Any: ...

    def close(self, A: Any, B: Any, C: Any) -> Realization:
        """Return matrices of this path as a model in the user's units."""
        ...

    def transformation(self, basis: Any) -> Array:
        """Return T for the user: state = T @ new state."""
        ...

    def state_map(self, matrix: Any) -> Array:
        """Return a matrix that acts on states, for the user's states."""
        ...

    def evidence(self, reach: Any, sight: Any) -> Evidence:
        """Return what a certificate of a reduction needs, as plain values."""
        ...

    def condition(self, state_map: Array) -> float | None:
        """Return a 2-norm condition number; None where the question is not asked."""
        ...

    def characteristic_polynomial(self, A: Any) -> tuple[Any, ...]:
        """Return det(s - A), monic, descending powers, in the user's unit of time."""
        ...

    def decays(self, block: Any) -> bool:
        """Return whether every mode of a block is known to decay."""
        ...

    def modes(self, blocks: Iterable[tuple[Part, Any]]) -> tuple[Mode, ...]:
        """Return the eigenvalues of blocks, each with its part, stability and multiplicity."""
        ...

    def numerators(self) -> tuple[tuple[Any, ...], tuple[tuple[tuple[Any, ...], ...], ...]]:
        """Return det(s - A), and the numerators over it, D included."""
        ...

    def markov_parameters(self, count: int) -> Array:
        """Return the first Markov parameters, (count, outputs, inputs); item 0 is D."""
        ...


class Path(Protocol):
    """One arithmetic carried through a whole computation."""

    @property
    def is_exact(self) -> bool:
        """Whether what the path says is proved."""
        ...

    @property
    def kind(self) -> Kind:
        """The kind of the models that the path returns."""
        ...

    def open(self, model: Realization) -> Opened[Reach]:
        """Open a model on this path."""
        ...

    def admit(self, source: Any) -> Any:
        """Return a Realization or TransferMatrix whose entries this path takes, or raise."""
        ...

    def array(self, values: Sequence[Sequence[Any]], shape: tuple[int, int]) -> Array:
        """Return rows of entries as a model's array of this path's kind."""
        ...

    def common_denominator(
        self, denominators: Sequence[tuple[Any, ...]]
    ) -> tuple[tuple[Any, ...], tuple[tuple[Any, ...], ...]]:
        """Return a monic polynomial that every denominator divides, and each one's cofactor.

        ``denominator * cofactor = leading coefficient * common``.
        """
        ...

    def multiply(self, first: tuple[Any, ...], second: tuple[Any, ...]) -> tuple[Any, ...]: ...

    def difference(self, first: Any, second: Any) -> Any:
        """Return first - second; zero where that is nothing but rounding."""
        ...

    def shared_factor(
        self, numerator: tuple[Any, ...], denominator: tuple[Any, ...], where: str
    ) -> SharedFactor:
        """Return what a numerator and a denominator have in common."""
        ...

    def factors(self, polynomial: tuple[Any, ...]) -> tuple[tuple[tuple[Any, ...], int], ...]:
        """Return irreducible monic factors with multiplicities."""
        ...

    def judged(
        self, factor: tuple[Any, ...], whole: tuple[Any, ...], period: Any
    ) -> Sequence[tuple[complex, Stability]]:
        """Return the roots of a factor of a denominator, and what a mode there does."""
        ...

    def sequence(self, parameters: Array) -> Sequenced:
        """Realize Markov parameters 1, 2, ... (D left out) with the fewest states."""
        ...
