"""A scorecard as a picture. Needs matplotlib; its object interface only, so no window is opened."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Final

from realize.errors import NotBuiltError

if TYPE_CHECKING:
    from realize.testing.scoring import Scorecard

__all__ = ["draw"]

_INK: Final = "#1b1b1b"
_ROW: Final = 0.4  # inches
_MAP: Final = "cividis"  # tells light from dark also without colour vision


def draw(card: Scorecard) -> Any:
    """Return a Figure: a cell for each family and difficulty, the share of right answers in it."""
    try:
        from matplotlib.figure import Figure
    except ImportError as error:
        raise NotBuiltError(
            "a picture needs matplotlib, which is not installed; install the extra plot: "
            "pip install 'realize[plot]'",
            feature="picture",
        ) from error

    names, columns = card.families, card.difficulties
    shares = [
        [card.count("right", name, d) / max(len(card.of(name, d)), 1) for d in columns]
        for name in names
    ]
    figure = Figure(figsize=(7.6, 1.5 + _ROW * max(len(names), 1)), layout="constrained")
    axes = figure.add_subplot()
    image = axes.imshow(shares or [[0.0]], vmin=0.0, vmax=1.0, cmap=_MAP, aspect="auto")
    for i, name in enumerate(names):
        for j, d in enumerate(columns):
            ink = _INK if shares[i][j] > 0.5 else "white"
            right, crashed = card.count("right", name, d), card.count("crashed", name, d)
            axes.text(j, i, str(right), ha="center", va="center", fontsize=8, color=ink)
            if crashed:
                axes.text(
                    j,
                    i + 0.34,
                    f"{crashed} crashed",
                    ha="center",
                    va="center",
                    fontsize=5,
                    color=ink,
                )
    axes.set_xticks(range(len(columns)), [str(d) for d in columns])
    axes.set_yticks(range(len(names)), [name.replace("_", " ") for name in names])
    axes.tick_params(length=0)
    axes.set_xlabel("difficulty")
    axes.set_title(
        f"{card.name}\n{card.right} of {len(card.results)} right, {card.wrong} wrong, "
        f"{card.crashed} crashed",
        fontsize=10,
        loc="left",
    )
    bar = figure.colorbar(image, ax=axes, pad=0.02)
    bar.set_label("share of right answers")
    return figure
