"""What a form takes as its source."""

from __future__ import annotations

from typing import Any

from realize.errors import UnsupportedEntryError

__all__ = ["accept"]


def accept(source: Any, *classes: type) -> None:
    """Refuse what is not a model of the kinds named.

    Raises
    ------
    UnsupportedEntryError
        Saying what came, and how to make a model of it.
    """
    if not isinstance(source, classes):
        wanted = " or ".join(kind.__name__ for kind in classes)
        raise UnsupportedEntryError(
            f"found {type(source).__name__}, wanted {wanted}. Make one with realize.as_realization "
            "or realize.as_transfer_matrix"
        )
