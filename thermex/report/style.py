"""One style for all figures: sizes, colours safe for colour-blind readers, marks, clean axes."""

from __future__ import annotations

import io
from typing import TYPE_CHECKING

import matplotlib
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

from thermex.report.caution import SHORT_CAUTION

if TYPE_CHECKING:
    from matplotlib.axes import Axes

#: Okabe and Ito, Color Universal Design (2008).
BLUE, VERMILION, GREEN, ORANGE = "#0072B2", "#D55E00", "#009E73", "#E69F00"
PURPLE, SKY, BLACK, GREY = "#CC79A7", "#56B4E9", "#000000", "#6E6E6E"

#: Colours of lines in the order of use.
LINES = (BLUE, VERMILION, GREEN, PURPLE, ORANGE, SKY)
#: Dashes that tell lines apart in a grey print.
DASHES = ("-", "--", "-.", ":", (0, (5, 1, 1, 1, 1, 1)))
#: Marks of measured series: (marker, edge colour).
MARKS = (
    ("o", BLACK),
    ("s", GREEN),
    ("^", PURPLE),
    ("D", ORANGE),
    ("v", GREY),
    ("P", SKY),
    ("X", VERMILION),
    ("<", BLACK),
    (">", GREEN),
)

#: Width and height, inches: one column of a journal, with room for a legend.
SIZE = (5.2, 3.7)
DPI = 200


def new_axes(size: tuple[float, float] = SIZE) -> Axes:
    """Return axes on a figure of their own, drawn off screen and known to no global state."""
    figure = Figure(figsize=size, layout="constrained")
    FigureCanvasAgg(figure)
    return figure.add_subplot()


def dress(ax: Axes, *, x: str, y: str) -> None:
    """Label the axes and give them the common look."""
    ax.set_xlabel(x, fontsize=10)
    ax.set_ylabel(y, fontsize=10)
    for side in ("top", "right"):
        ax.spines[side].set_visible(False)
    ax.grid(True, color="#DDDDDD", linewidth=0.6)
    ax.set_axisbelow(True)
    ax.tick_params(direction="out", length=3, labelsize=9)


def legend(ax: Axes) -> None:
    """Place the legend where it hides least; none when nothing is named."""
    handles, labels = ax.get_legend_handles_labels()
    if handles:
        ax.legend(handles, labels, fontsize=7.5, frameon=True, framealpha=0.85, edgecolor="none", loc="best")


def png_bytes(ax: Axes) -> bytes:
    """Return the figure of these axes as PNG, 200 dots an inch."""
    return _saved(ax, "png")


def svg_bytes(ax: Axes) -> bytes:
    """Return the figure of these axes as SVG, the same bytes for the same figure."""
    return _saved(ax, "svg")


def _saved(ax: Axes, kind: str) -> bytes:
    figure = ax.figure.figure if ax.figure is not None else None
    assert isinstance(figure, Figure)
    stream = io.BytesIO()
    words: dict[str, str | None] = {"Title": "thermex", "Description": SHORT_CAUTION}
    words |= {"Software": "thermex"} if kind == "png" else {"Date": None, "Creator": "thermex"}
    with matplotlib.rc_context({"svg.hashsalt": "thermex", "svg.fonttype": "path"}):
        figure.savefig(stream, format=kind, dpi=DPI, facecolor="white", metadata=words)
    return stream.getvalue()
