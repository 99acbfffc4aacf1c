"""Models shipped with the package: an invented seed-drying works, and what goes wrong in it."""

from __future__ import annotations

import io
import textwrap
from collections.abc import Iterator
from dataclasses import dataclass
from importlib import resources

import numpy as np

from realize.model.files import load
from realize.model.realization import Realization

__all__ = ["Story", "stories"]


@dataclass(frozen=True, kw_only=True, slots=True)
class Story:
    """One model of the demo, and why it is worth a look."""

    name: str
    title: str
    text: str
    model: Realization

    def lines(self) -> list[str]:
        """Return the text at 80 columns."""
        return textwrap.wrap(self.text, 80)


_TEXTS = (
    (
        "two-chambers",
        "Two chambers on one burner: what the decimals say",
        "A burner warms the air and the seed bed of a drying chamber. The table holds decimals "
        "such as 0.1 and 0.3. As the doubles they are stored in, no two of them match and "
        "nothing cancels. As the decimals that somebody wrote, one mode is out of the burner's "
        "reach.",
    ),
    (
        "drum-tilt",
        "A tilting drum behind a shaping filter: unstable and unseen",
        "The drum of a seed cleaner tips over when left alone. A filter was put before it whose "
        "zero sits on the growing pole, so from setpoint to reading everything looks calm.",
    ),
    (
        "three-fans",
        "Three fans: no tolerance is right",
        "Two fans settle almost alike and can hardly be told apart, and the flue cannot be "
        "reached at all. The staircase must keep a singular value that is smaller than one it "
        "must drop, because rounding grows behind the small one.",
    ),
    (
        "tray-column",
        "A column of fourteen trays: truly minimal",
        "Each tray of a dryer settles half as fast as the one above. The numerical rank of the "
        "controllability matrix (numpy, default tolerance) is {rank} of {order}, yet every tray "
        "is reached and seen, by a wide margin.",
    ),
)


def stories() -> Iterator[Story]:
    """Yield the models of the demo with their texts."""
    for name, title, text in _TEXTS:
        source = resources.files(__name__).joinpath(f"{name}.json").read_text("utf-8")
        model = load(io.StringIO(source))
        if not isinstance(model, Realization):
            raise AssertionError(f"{name}.json holds no realization")
        filled = text.format(rank=_controllability_rank(model), order=model.order)
        yield Story(name=name, title=title, text=filled, model=model)


def _controllability_rank(model: Realization) -> int:
    """Return what a tolerance says of [B, AB, A^2 B, ...]: the practice the demo warns of."""
    floats = model.to_float()
    blocks, power = [], floats.B
    for _ in range(model.order):
        blocks.append(power)
        power = floats.A @ power
    return int(np.linalg.matrix_rank(np.hstack(blocks)))
