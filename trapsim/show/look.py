"""How trapsim's figures look: colours, marks, paper and type.

The three directions differ in lightness, hue and mark, so that they stay apart in print and for every kind of colour
vision; the density scale darkens evenly from paper to ink.
"""

from __future__ import annotations

import io
from collections.abc import Mapping
from dataclasses import dataclass
from textwrap import shorten

from matplotlib.axes import Axes
from matplotlib.colors import LinearSegmentedColormap
from matplotlib.figure import Figure
from matplotlib.ticker import MaxNLocator, ScalarFormatter

INK = "#1f2a36"
QUIET = "#66727f"
BAND = "#eef1f4"
RULE = "#d9dfe5"
#: Inches; at 100 pixels per inch a figure is 900 pixels wide.
WIDTH = 9.0
TYPE = 11.0
SMALL = 9.5


@dataclass(frozen=True)
class Look:
    """How one direction is drawn."""

    colour: str
    marker: str


LOOKS: Mapping[str, Look] = {
    "x": Look("#173f6b", "o"),
    "y": Look("#d0652b", "s"),
    "z": Look("#2f9c95", "^"),
}

#: Colours beside those of the directions; lines in them are also dashed, dotted or marked differently.
PLUM = "#8a4f9e"
SAND = "#a08527"

DENSITY = LinearSegmentedColormap.from_list(
    "paper to ink", ["#ffffff", "#dcebea", "#a3cfd0", "#5ea6b5", "#2f7699", "#1d4875", "#13244a", "#090d1e"]
)


def new_figure(height: float, title: str, subtitle: str = "") -> Figure:
    """White paper with a title in its upper left corner."""
    figure = Figure(figsize=(WIDTH, height), facecolor="white")
    title = shorten(title, 68, placeholder=" ...")
    figure.text(0.02, 1 - 0.16 / height, title, size=TYPE + 3, weight="bold", color=INK, va="top", parse_math=False)
    figure.text(0.02, 1 - 0.48 / height, subtitle, size=TYPE, color=QUIET, va="top")
    return figure


def box(figure: Figure, left: float, bottom: float, width: float, height: float) -> Axes:
    """Axes placed in inches from the lower left corner of the page."""
    wide, tall = figure.get_size_inches()
    return figure.add_axes((left / wide, bottom / tall, width / wide, height / tall))


def dress(ax: Axes, *, ticks: int = 6, rules: bool = True) -> None:
    """Open frame, quiet ticks in plain digits, thin horizontal rules."""
    for side in ("top", "right"):
        ax.spines[side].set_visible(False)
    for side in ("left", "bottom"):
        ax.spines[side].set_color(QUIET)
    ax.tick_params(colors=QUIET, labelcolor=INK, labelsize=SMALL)
    for axis in (ax.xaxis, ax.yaxis):
        axis.set_major_formatter(plain_digits())
        axis.set_major_locator(MaxNLocator(ticks))
    if rules:
        ax.grid(axis="y", color=RULE, linewidth=0.7)
        ax.set_axisbelow(True)


def plain_digits() -> ScalarFormatter:
    """Tick labels without a power of ten or an offset."""
    formatter = ScalarFormatter(useOffset=False)
    formatter.set_scientific(False)
    return formatter


def png(figure: Figure, *, dpi: float = 160) -> bytes:
    """The figure as the bytes of a PNG file; the same figure gives the same bytes."""
    out = io.BytesIO()
    figure.savefig(out, format="png", dpi=dpi, metadata={"Software": None})
    return out.getvalue()
