"""Sizes and path of the cloud against time, with the instant model beside them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.lines import Line2D

from trapsim.record.series import DIRECTIONS, Track
from trapsim.record.summary import StageEnd, Summary
from trapsim.show.curves import alike, apart, smooth
from trapsim.show.look import BAND, INK, LOOKS, QUIET, SMALL, TYPE, dress, new_figure
from trapsim.show.numbers import brief, drawn, percent, signed

Array = np.ndarray
MARKS = 9
DASHES = (4, 2.5)
TITLE = {"size": TYPE, "color": INK, "weight": "bold"}
#: Names of stages: rows at most, points between them, and the width of a letter as a share of the panel.
ROWS, ROW, LETTER = 3, 14, 0.0118
LAW = ("law_width", "law_expansion_rate")
#: A centre (um) and a rate (mm/s) below which there is nothing to see.
STILL_CENTRE, STILL_RATE = 2e-3, 1e-4
#: A stage shorter than this share of the whole is a dotted line, not a band.
SHORTEST = 0.006


def flight_figure(summary: Summary, track: Track) -> Figure:
    """Three panels over one time axis: rms half-widths, expansion rates, and the centre of mass."""
    figure = new_figure(8.7, summary.title or "Sizes and path of the cloud", _subtitle(summary))
    panels, names = panels_over_time(figure, summary.stages, (1.3, 1, 1))
    draw_widths(panels[0], track)
    draw_rates(panels[1], track)
    draw_centre(panels[2], track)
    if "law_width" in track:
        explain_lines(figure)
    finish(panels, track, names=names)
    return figure


def panels_over_time(
    figure: Figure, stages: Sequence[StageEnd], heights: Sequence[float], *, right: float = 0.80
) -> tuple[Sequence[Axes], float]:
    """Panels above each other with the stages in them, their names over the first, just below the figure's title.

    Returns
    -------
    panels : sequence of Axes
    names : float
        Points that the names take.
    """
    tall = figure.get_size_inches()[1]
    panels = figure.subplots(
        len(heights), 1, sharex=True, squeeze=False,
        gridspec_kw={"height_ratios": heights, "hspace": 0.3, "left": 0.095, "right": right, "bottom": 0.68 / tall},
    )[:, 0]  # fmt: skip
    rows = [draw_stages(ax, stages, names=ax is panels[0]) for ax in panels]
    names = ROW * rows[0]
    figure.subplots_adjust(top=1 - (1.0 + names / 72) / tall)
    return panels, names


def finish(panels: Sequence[Axes], track: Track, *, names: float) -> None:
    """The first title above the names of the stages, the whole track from left to right, and what that axis is."""
    panels[0].set_title(panels[0].get_title(loc="left"), loc="left", pad=6 + names, **TITLE)
    span = float(np.ptp(track.time)) * 1e3 or 1.0
    begin = float(track.time[0]) * 1e3
    panels[-1].set_xlim(begin - 0.005 * span, begin + 1.005 * span)
    panels[-1].set_xlabel("time since the start of the sequence (ms)", color=INK, size=TYPE)


def _subtitle(summary: Summary) -> str:
    if summary.end is None:
        return "the cloud at rest"
    flight = summary.end.flight_ms
    until = f"{brief(flight)} ms after the release" if flight else f"{brief(summary.end.time_ms)} ms"
    return f"{brief(summary.end.atoms)} atoms, followed until {until}"


def draw_widths(ax: Axes, track: Track) -> None:
    """Rms half-width of each direction, the scaling law dashed, the last value written at its end."""
    dress(ax)
    ends = _draw(ax, track, "width", "expansion_rate", law=LAW)
    ax.set_ylim(bottom=0.0)
    entitle(ax, "How large: rms half-width", "half-width (µm)")
    write_ends(ax, ends, "µm")


def draw_rates(ax: Axes, track: Track) -> None:
    """Rate of change of each rms half-width, the scaling law dashed."""
    dress(ax)
    ends = _draw(ax, track, "width", "expansion_rate", law=LAW, slope=True, nothing=STILL_RATE)
    ax.axhline(0.0, color=QUIET, linewidth=0.8)
    _spread(ax, 5 * STILL_RATE)
    entitle(ax, "How fast it grows: expansion rate", "rate (mm/s)")
    write_ends(ax, ends, "mm/s", nothing=STILL_RATE)


def draw_centre(ax: Axes, track: Track) -> None:
    """Centre of mass in each direction, counted from where the cloud rested at the start."""
    dress(ax)
    ends = _draw(ax, track, "centre", "velocity", nothing=STILL_CENTRE)
    _spread(ax, 50 * STILL_CENTRE)
    entitle(ax, "Where it is: centre of mass, from where it rested", "centre (µm)")
    write_ends(ax, ends, "µm", nothing=STILL_CENTRE)


def _spread(ax: Axes, least: float) -> None:
    """Keep a panel from enlarging what is nothing: it shows at least this much up and down."""
    low, high = ax.get_ylim()
    if high - low < 2 * least:
        middle = 0.5 * (low + high)
        ax.set_ylim(middle - least, middle + least)


def draw_stages(ax: Axes, stages: Sequence[StageEnd], *, names: bool = False) -> int:
    """Light bands for the stages, a line where the flight starts and, if asked, the names above.

    Returns
    -------
    int
        How many rows the names take.
    """
    if not stages:
        return 0
    begin = stages[0].start_ms
    span = max(one.start_ms + one.duration_ms for one in stages) - begin or 1.0
    sudden = [one for one in stages if one.duration_ms < SHORTEST * span]
    for one in sudden:
        ax.axvline(one.start_ms, color=QUIET, linewidth=0.9, linestyle=(0, (1, 2)))
    for one in [one for one in stages if one not in sudden][::2]:
        ax.axvspan(one.start_ms, one.start_ms + one.duration_ms, color=BAND, linewidth=0, zorder=0)
    last_release = next((one for one in reversed(stages) if one.kind == "release"), None)
    if last_release is not None:
        ax.axvline(last_release.start_ms, color=INK, linewidth=1.3)
    return _name_stages(ax, stages, begin=begin, span=span, flies=last_release) if names else 0


def _name_stages(ax: Axes, stages: Sequence[StageEnd], *, begin: float, span: float, flies: StageEnd | None) -> int:
    """Names above the panel where their stages start, in the first row with room, the start of the flight first."""
    rows: list[list[tuple[float, float]]] = [[] for _ in range(ROWS)]
    for one in sorted(stages, key=lambda one: one is not flies):
        text = f"{one.name}: flight starts" if one is flies else one.name
        room = LETTER * (len(text) + 1)
        start = min((one.start_ms - begin) / span, max(0.0, 1.0 - room))
        free = [row for row in rows if all(start + room <= low or start >= high for low, high in row)]
        if not free:
            continue
        free[0].append((start, start + room))
        height = next(number for number, row in enumerate(rows) if row is free[0])
        ax.annotate(
            text, xy=(begin + start * span, 1.0), xycoords=("data", "axes fraction"), xytext=(1, 4 + ROW * height),
            textcoords="offset points", size=SMALL, color=INK if one is flies else QUIET,
            weight="bold" if one is flies else "normal", annotation_clip=False, parse_math=False,
        )  # fmt: skip
    return sum(bool(row) for row in rows)


def explain_lines(figure: Figure) -> None:
    """Say in the upper right corner which line is which."""
    lines = [Line2D([], [], color=QUIET, linewidth=2), Line2D([], [], color=QUIET, linewidth=1.6, dashes=DASHES)]
    figure.legend(
        lines, ["full calculation", "scaling law"], loc="upper right", ncols=2, frameon=False, fontsize=TYPE,
        labelcolor=INK, bbox_to_anchor=(0.985, 1 - 0.42 / figure.get_size_inches()[1]), borderaxespad=0, borderpad=0,
    )  # fmt: skip


def entitle(ax: Axes, title: str, label: str) -> None:
    """A panel's title and what is upwards in it."""
    ax.set_title(title, loc="left", pad=6, **TITLE)
    ax.set_ylabel(label, size=TYPE, color=INK)


@dataclass(frozen=True)
class End:
    """What is written at the right end of a curve."""

    value: float
    names: str
    colour: str
    beside: str


def _draw(
    ax: Axes, track: Track, name: str, rate: str, *, law: tuple[str, str] | None = None, slope: bool = False,
    nothing: float = 0.0,
) -> list[End]:  # fmt: skip
    """Curves of one observable, a colour and a mark per direction; what differs by less than `nothing` is one curve."""
    shown = track.series[rate if slope else name]
    time = track.time * 1e3
    uniform = (track["width"] == 0).all(axis=0)
    present = np.where(uniform, np.nan, shown.lab)
    ends = []
    for number, group in enumerate(alike(present, nothing=nothing)):
        j = group[0]
        look = LOOKS[DIRECTIONS[j]]
        names = ", ".join(DIRECTIONS[i] for i in group)
        t, curve = smooth(track.time, track[name][:, j], track[rate][:, j], slope=slope)
        ax.plot(t * 1e3, curve * shown.factor, color=look.colour, linewidth=2.0, zorder=3, label=names)
        marked = _marked(time, offset=number / 3)
        ax.plot(
            time[marked], present[marked, j], linestyle="", marker=look.marker, markersize=5.5, color=look.colour,
            markeredgecolor="white", markeredgewidth=0.6, zorder=4,
        )  # fmt: skip
        beside = ""
        if law is not None and law[0] in track:
            t, curve = smooth(track.time, track[law[0]][:, j], track[law[1]][:, j], slope=slope)
            ax.plot(t * 1e3, curve * shown.factor, color=look.colour, linewidth=1.6, dashes=DASHES, zorder=5)
            if abs(present[-1, j]) > nothing:
                beside = gap(track[law[1] if slope else law[0]][-1, j], shown.values[-1, j])
        ends.append(End(float(present[-1, j]), names, look.colour, beside))
    return ends


def gap(law: float, full: float) -> str:
    """How far the law is off at the end, where that can be said."""
    if not np.isfinite(law) or not full:
        return ""
    return f"law {signed(percent(law / full - 1))}"


def _marked(time: Array, *, offset: float) -> Array:
    """Samples that carry a mark: a few, spread over the time, shifted so that directions do not hide each other."""
    if len(time) <= 3:
        return np.arange(len(time))
    wanted = time[0] + (np.arange(MARKS) + offset) / MARKS * (time[-1] - time[0])
    return np.unique([int(np.argmin(np.abs(time - one))) for one in wanted])


def write_ends(ax: Axes, ends: Sequence[End], unit: str, *, nothing: float = 0.0, digits: int = 4) -> None:
    """The last values in the right margin, level with their curves as far as there is room."""
    low, high = ax.get_ylim()
    tall = ax.get_position().height * ax.figure.get_size_inches()[1]
    line = (TYPE + 1) / 72 / tall * 1.15
    gap = line * (2 if any(one.beside for one in ends) else 1)
    places = apart(np.array([(one.value - low) / (high - low) for one in ends]), gap, low=0.02, high=0.96)
    for one, place in zip(ends, places, strict=True):
        number = drawn(one.value, digits) if abs(one.value) > nothing else "0"
        ax.text(
            1.012, place, f"{one.names}  {number} {unit}", transform=ax.transAxes, color=one.colour, size=TYPE,
            weight="bold", va="center",
        )  # fmt: skip
        if one.beside:
            ax.text(1.012, place - line, one.beside, transform=ax.transAxes, color=QUIET, size=SMALL, va="center")
