"""The Kalman decomposition."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import Any, TypeVar

from realize.arithmetic.path import Opened, Path, Reach
from realize.errors import PrecisionError
from realize.forms.sources import accept
from realize.model.realization import Realization
from realize.results import Deferred, KalmanParts, Part

__all__ = [
    "Decomposition",
    "decompose",
    "hidden_blocks",
    "kalman_parts",
    "reach_and_see",
    "zeroed",
]

# A maps each part into itself, into what is both reached and unseen, and, from the part that is
# neither, anywhere (Kailath, Linear Systems, section 2.4).
_MAY_BE_NON_ZERO = (
    (True, True, True, True),
    (False, True, False, True),
    (False, False, True, True),
    (False, False, False, True),
)


R = TypeVar("R", bound=Reach)


def reach_and_see(opened: Opened[R]) -> tuple[R, R]:
    """Return what the inputs reach, and what the outputs see of it (in the dual)."""
    reach = opened.reached(opened.A, opened.B, opened.C, "reached")
    return reach, opened.reached(reach.A.T, reach.C.T, reach.B.T, "seen")


@dataclass(frozen=True, kw_only=True, slots=True)
class Decomposition:
    """The four parts in the coordinates of a path."""

    T: Any
    A: Any
    B: Any
    C: Any
    spans: tuple[slice, ...]
    outside: Reach

    def block(self, part: Part) -> Any:
        """Return the diagonal block of A that belongs to a part."""
        span = self.spans[list(Part).index(part)]
        return self.A[span, span]

    def hidden_blocks(self) -> list[tuple[Part, Any]]:
        """Return the blocks that the transfer matrix does not show."""
        return [(part, self.block(part)) for part in Part if part.hidden]


def kalman_parts(path: Path, model: Realization) -> KalmanParts:
    """Return the four parts: controllable or not, observable or not."""
    accept(model, Realization)
    opened = path.open(model)
    reach, sight = reach_and_see(opened)
    parts = decompose(opened, reach, sight)
    return KalmanParts(
        model=opened.close(parts.A, parts.B, parts.C),
        transformation=opened.transformation(parts.T),
        dimensions={
            str(part): span.stop - span.start for part, span in zip(Part, parts.spans, strict=True)
        },
        _polynomials=Deferred(
            lambda: {
                str(part): opened.characteristic_polynomial(parts.block(part)) for part in Part
            }
        ),
        _decisions=Deferred(
            lambda: reach.decisions() + sight.decisions() + parts.outside.decisions()
        ),
    )


def decompose(opened: Opened[Reach], reach: Reach, sight: Reach) -> Decomposition:
    """Return the four parts, from what is reached and what of that is seen.

    One more subspace is asked for: modulo the reachable and unseen part R n N, the rest of the
    unobservable subspace N. It meets the reachable subspace R only in zero, so its vectors,
    corrected by vectors of R, complete R n N to N without touching R (Kailath, Linear Systems,
    section 2.4).
    """
    order = opened.A.shape[0]
    outer = reach.frame()
    inner = sight.frame()
    r, visible = reach.dimension, sight.dimension
    hidden = r - visible
    # The dual frame has the seen part first; the unobservable part of R goes in front of it.
    basis, inverse = inner.inverse.T, inner.basis.T
    basis = opened.block([[basis[:, visible:], basis[:, :visible]]])
    inverse = opened.block([[inverse[visible:, :]], [inverse[:visible, :]]])
    T = outer.basis @ _beside(opened, basis, order - r)
    T_inverse = _beside(opened, inverse, order - r) @ outer.inverse
    A = T_inverse @ opened.A @ T
    C = opened.C @ T
    rest = order - hidden
    # Modulo R n N, what else do the outputs not see?
    outside = opened.reached(
        A[hidden:, hidden:].T, C[:, hidden:].T, opened.zeros(0, rest), "seen beyond"
    )
    unseen = rest - outside.dimension
    if unseen > order - r:
        raise PrecisionError(
            f"the rank decisions contradict each other: {unseen} unseen states outside a reachable "
            f"part that leaves room for {order - r}. Give another tolerance, or more digits, or "
            "use the exact path"
        )
    beyond = outside.frame().inverse.T[:, outside.dimension :]
    completion = opened.complete(beyond[visible:, :])
    lean = opened.block(
        [
            [
                beyond[:visible, :] @ completion.factor_inverse,
                opened.zeros(visible, order - r - unseen),
            ]
        ]
    )
    inside, above = opened.identity(r), opened.zeros(hidden, order - r)
    below = opened.zeros(order - r, r)
    T = T @ opened.block([[inside, opened.block([[above], [lean]])], [below, completion.basis]])
    shear = opened.zeros(visible, order - r) - lean @ completion.inverse
    T_inverse = (
        opened.block([[inside, opened.block([[above], [shear]])], [below, completion.inverse]])
        @ T_inverse
    )
    A, B, C = T_inverse @ opened.A @ T, T_inverse @ opened.B, opened.C @ T
    edges = (0, hidden, r, r + unseen, order)
    spans = [slice(low, high) for low, high in pairwise(edges)]

    A, B, C = zeroed(opened, A, B, C, spans)
    return Decomposition(T=T, A=A, B=B, C=C, spans=tuple(spans), outside=outside)


def hidden_blocks(opened: Opened[R], reach: R, sight: R) -> list[tuple[Part, Any]]:
    """Return the hidden blocks; where the path cannot split them all, those it can."""
    try:
        return decompose(opened, reach, sight).hidden_blocks()
    except PrecisionError:
        # At this tolerance what is not reached cannot be split by what is seen of it.
        return [
            (Part.CONTROLLABLE_UNOBSERVABLE, sight.quotient()),
            (Part.UNCONTROLLABLE_UNOBSERVABLE, reach.quotient()),
        ]


def zeroed(
    opened: Opened[Reach], A: Any, B: Any, C: Any, spans: Sequence[slice]
) -> tuple[Any, Any, Any]:
    """Return the matrices with exact zeros where the four subspaces make them zero.

    What the four subspaces make zero is zero, whatever rounding left there.
    """

    def kept(matrix: Any, rows: slice, columns: slice, keep: bool) -> Any:
        part = matrix[rows, columns]
        return part if keep else opened.zeros(*part.shape)

    inputs, outputs = slice(0, B.shape[1]), slice(0, C.shape[0])
    return (
        opened.block(
            [
                [kept(A, spans[i], spans[j], _MAY_BE_NON_ZERO[i][j]) for j in range(4)]
                for i in range(4)
            ]
        ),
        opened.block([[kept(B, span, inputs, k < 2)] for k, span in enumerate(spans)]),
        opened.block([[kept(C, outputs, span, k % 2 == 1) for k, span in enumerate(spans)]]),
    )


def _beside(opened: Opened[Reach], first: Any, size: int) -> Any:
    """Return diag(first, identity)."""
    rows = first.shape[0]
    return opened.block(
        [
            [first, opened.zeros(rows, size)],
            [opened.zeros(size, rows), opened.identity(size)],
        ]
    )
