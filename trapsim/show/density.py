"""Column densities: what a perfect camera would see along each direction."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from trapsim.record.series import ColumnSeries
from trapsim.record.summary import Summary
from trapsim.show.look import DENSITY, INK, QUIET, RULE, SMALL, TYPE, WIDTH, box, dress, new_figure
from trapsim.show.numbers import brief, drawn, nice_length

Array = np.ndarray
#: The window shows all that is denser than this share of the peak of the side profile.
FAINTEST = 3e-3
#: Longer clouds than this are drawn with the short side enlarged.
LONGEST = 3.5
#: Inches: a picture with all that belongs to it, its side, and the depth of its side profiles.
CELL, SIDE, EDGE = 4.85, 2.9, 0.5
ENLARGE = (2, 5, 10, 20, 50, 100, 200, 500, 1000)


@dataclass(frozen=True)
class Window:
    """The piece of the lab a picture shows, in um: its middle and half-widths to the right and up.

    `enlarged` is how many times larger the short side is drawn, `up_is_short` which one that is.
    """

    right: float
    up: float
    half_right: float
    half_up: float
    enlarged: int = 1
    up_is_short: bool = True

    @property
    def extent(self) -> tuple[float, float, float, float]:
        return (
            self.right - self.half_right, self.right + self.half_right, self.up - self.half_up, self.up + self.half_up,
        )  # fmt: skip


def window_of(series: ColumnSeries, indices: Sequence[int]) -> list[Window]:
    """Windows of one size around the cloud at each of some times, square on paper.

    Very long clouds get a whole-number enlargement of the short side, the same at all the times.
    """
    boxes = []
    for p in indices:
        right = reach(series.cols[p], series.values[p].sum(axis=0))
        up = reach(series.rows[p], series.values[p].sum(axis=1))
        boxes.append((*right, *up))
    half_right, half_up = max(one[1] for one in boxes), max(one[3] for one in boxes)
    long, short = max(half_right, half_up), min(half_right, half_up)
    enlarged = max((n for n in ENLARGE if n <= long / short), default=1) if long > LONGEST * short else 1
    up_is_short = half_up <= half_right
    sides = (long, long / enlarged) if up_is_short else (long / enlarged, long)
    return [Window(one[0], one[2], *sides, enlarged, up_is_short) for one in boxes]


def reach(places: Array, profile: Array) -> tuple[float, float]:
    """Middle and half-width, in um, of what can be seen in a profile."""
    places = places * 1e6
    bright = np.flatnonzero(profile > FAINTEST * profile.max()) if profile.max() > 0 else np.arange(len(places))
    low, high = places[bright[0]], places[bright[-1]]
    pixel = abs(places[-1] - places[0]) / max(len(places) - 1, 1)
    return 0.5 * (low + high), 0.5 * (high - low) * 1.12 + pixel


def draw_column(ax: Axes, series: ColumnSeries, index: int, window: Window, *, peak: float | None = None) -> None:
    """One column density with scale bar, in atoms/um^2, zero to peak from paper to ink."""
    image = series.values[index] * 1e-12
    cols, rows = series.cols[index] * 1e6, series.rows[index] * 1e6
    ax.imshow(
        image, origin="lower", extent=(*_edges(cols), *_edges(rows)), cmap=DENSITY, vmin=0.0,
        vmax=peak or _peak(image), interpolation="bilinear", aspect="auto",
    )  # fmt: skip
    ax.set_facecolor(DENSITY(0.0))
    left, right, bottom, top = window.extent
    ax.set(xlim=(left, right), ylim=(bottom, top), box_aspect=1)
    for side in ax.spines.values():
        side.set_color(QUIET)
    draw_scale_bar(ax, window)


def draw_scale_bar(ax: Axes, window: Window) -> None:
    """A bar of round length in the lower left corner; a second, upright one when a side is enlarged."""
    left, _, bottom, _ = window.extent
    x, y = left + 0.14 * window.half_right, bottom + 0.14 * window.half_up
    wide = nice_length(0.55 * window.half_right)
    ax.plot([x, x + wide], [y, y], color=INK, linewidth=2.5, solid_capstyle="butt")
    ax.annotate(
        f"{_round(wide)} µm", xy=(x + wide, y), xytext=(4, 0), textcoords="offset points", va="center", size=SMALL,
        color=INK,
    )  # fmt: skip
    if window.enlarged > 1:
        tall = nice_length(0.55 * window.half_up)
        ax.plot([x, x], [y, y + tall], color=INK, linewidth=2.5, solid_capstyle="butt")
        ax.annotate(
            f"{_round(tall)} µm", xy=(x, y + tall), xytext=(0, 3), textcoords="offset points", ha="left",
            va="bottom", size=SMALL, color=INK,
        )  # fmt: skip


def _round(length: float) -> str:
    """A round length in plain digits."""
    return drawn(length, 1)


def _edges(centres: Array) -> tuple[float, float]:
    """Outer edges of evenly spaced pixels from their centres."""
    half = 0.5 * (centres[-1] - centres[0]) / max(len(centres) - 1, 1)
    return float(centres[0] - half), float(centres[-1] + half)


def _peak(image: Array) -> float:
    peak = float(image.max())
    return peak if peak > 0 else 1.0


def columns_figure(summary: Summary, columns: Mapping[str, ColumnSeries], *, index: int = -1) -> Figure:
    """The cloud seen along x, y and z at one time, each with its side profiles, density scale and scale bar."""
    views = [view for view in "xyz" if view in columns and len(columns[view])]
    height = 0.75 + CELL * -(-(len(views) + 1) // 2)
    moment = float(columns[views[0]].times[index]) * 1e3
    figure = new_figure(height, summary.title or "Column densities", f"column density {_when(summary, moment)}")
    corners = [(0.5 * WIDTH * (n % 2), height - 0.7 - CELL * (n // 2)) for n in range(len(views) + 1)]
    for view, corner in zip(views, corners, strict=False):
        _draw_view(figure, corner, columns[view], index)
    _write_facts(figure, corners[-1], summary, columns, index=index)
    return figure


def _when(summary: Summary, moment: float) -> str:
    releases = [one for one in summary.stages if one.kind == "release"]
    if not summary.stages:
        return "of the cloud at rest"
    if releases and moment > releases[-1].start_ms:
        return f"{brief(moment - releases[-1].start_ms)} ms after the release"
    return f"{brief(moment)} ms after the start of the sequence"


def _draw_view(figure: Figure, corner: tuple[float, float], series: ColumnSeries, index: int) -> None:
    """One picture with all that belongs to it; `corner` is its upper left one, in inches."""
    left, top = corner[0] + 0.85, corner[1] - 0.3 - EDGE
    window = window_of(series, [index])[0]
    ax = box(figure, left, top - SIDE, SIDE, SIDE)
    draw_column(ax, series, index, window)
    dress(ax, ticks=4, rules=False)
    for side in ax.spines.values():
        side.set_visible(True)
    ax.set_xlabel(f"{series.right} (µm) →", size=TYPE, color=INK)
    ax.set_ylabel(f"{series.up} (µm) →", size=TYPE, color=INK)
    above = box(figure, left, top + 0.04, SIDE, EDGE)
    beside = box(figure, left + SIDE + 0.04, top - SIDE, EDGE, SIDE)
    above.set_xlim(ax.get_xlim())
    beside.set_ylim(ax.get_ylim())
    _draw_profiles(above, beside, series, index)
    note = f"seen along {series.view}"
    if window.enlarged > 1:
        note += f"; {series.up if window.up_is_short else series.right} drawn {window.enlarged} times larger"
    above.set_title(note, loc="left", size=TYPE, weight="bold", color=INK)
    _draw_density_scale(box(figure, left, top - SIDE - 0.7, SIDE, 0.12), _peak(series.values[index] * 1e-12))


def _draw_profiles(above: Axes, beside: Axes, series: ColumnSeries, index: int) -> None:
    """Atoms per length along both sides of the picture."""
    image, cols, rows = series.values[index] * 1e-12, series.cols[index] * 1e6, series.rows[index] * 1e6
    right = image.sum(axis=0) * _pixel(rows)
    up = image.sum(axis=1) * _pixel(cols)
    above.fill_between(cols, right, color=DENSITY(0.5), linewidth=0)
    beside.fill_betweenx(rows, up, color=DENSITY(0.5), linewidth=0)
    above.set_ylim(0, _peak(right) * 1.05)
    beside.set_xlim(0, _peak(up) * 1.05)
    for ax, profile, spot, side in ((above, right, (0.99, 0.95), "right"), (beside, up, (0.5, -0.02), "center")):
        ax.axis("off")
        text = f"{drawn(float(profile.max()), 3)}/µm"
        ax.text(*spot, text, transform=ax.transAxes, ha=side, va="top", size=SMALL - 1, color=QUIET)


def _pixel(centres: Array) -> float:
    return abs(centres[-1] - centres[0]) / max(len(centres) - 1, 1)


def _draw_density_scale(bar: Axes, peak: float) -> None:
    """A strip from nothing to the peak density."""
    bar.imshow(np.linspace(0, 1, 256)[None, :], cmap=DENSITY, aspect="auto", extent=(0, peak, 0, 1))
    bar.set(yticks=[], xticks=[0.0, 0.5 * peak, peak])
    bar.set_xticklabels(["0", drawn(0.5 * peak, 3), f"{drawn(peak, 3)} atoms/µm²"])
    bar.tick_params(labelsize=SMALL, colors=QUIET, labelcolor=INK)
    for side in bar.spines.values():
        side.set_color(RULE)


def _write_facts(
    figure: Figure, corner: tuple[float, float], summary: Summary, columns: Mapping[str, ColumnSeries], *, index: int
) -> None:
    """What the pictures do not say: atoms, sizes, how to read them."""
    ax = box(figure, corner[0] + 0.85, corner[1] - CELL + 0.3, 0.5 * WIDTH - 1.1, CELL - 0.6)
    ax.axis("off")
    lines = []
    end = summary.end
    if end is not None and index == -1:
        lines += [("atoms", brief(end.atoms))]
    if end is None or index == -1:
        widths = zip("xyz", (end or summary.ground).width_um, strict=True)
        lines += [(f"half-width {d}", f"{drawn(w)} µm") for d, w in widths if w]
    if end is not None and index == -1:
        centres = zip("xyz", end.centre_um, strict=True)
        lines += [(f"centre {d}", f"{_rounded(c)} µm") for d, c in centres if c is not None]
    peaks = [(view, series.values[index].max() * 1e-12) for view, series in columns.items() if len(series)]
    lines += [(f"densest along {view}", f"{drawn(float(peak))} /µm²") for view, peak in peaks]
    y = 0.98
    for name, value in lines:
        ax.text(0.0, y, name, size=TYPE, color=QUIET, va="top")
        ax.text(1.0, y, value, size=TYPE, color=INK, va="top", ha="right")
        y -= 0.066
    reading = (
        "Lab coordinates, counted from where the cloud\nrested at the start. Arrows point to larger ones.\n"
        "Shaded edges: atoms per µm, summed across."
    )
    ax.text(0.0, y - 0.03, reading, size=SMALL, color=QUIET, va="top", linespacing=1.5)


def _rounded(value: float) -> str:
    """A centre in um; less than a nanometre is written as nothing."""
    return drawn(value) if abs(value) >= 1e-3 else "0"


def strip_figure(
    summary: Summary, columns: Mapping[str, ColumnSeries], *, times: Sequence[float] | None = None, count: int = 5
) -> Figure:
    """The cloud at a few times, one row per line of sight, one scale in a row, each picture from nothing to its peak.

    Parameters
    ----------
    summary : Summary
    columns : mapping of str to ColumnSeries
    times : sequence of float, s, optional
        The nearest pictures kept are shown; evenly spread from the first to the last otherwise.
    count : int
        How many, when `times` is not given.
    """
    views = [view for view in "xyz" if view in columns and len(columns[view])]
    kept = columns[views[0]].times
    wanted = np.linspace(kept[0], kept[-1], count) if times is None else np.asarray(times)
    indices = list(dict.fromkeys(int(np.argmin(np.abs(kept - one))) for one in wanted))
    side = (WIDTH - 0.75 - 0.1 * len(indices)) / max(len(indices), 3)
    height = 1.1 + (side + 0.32) * len(views)
    which = "a few times after the start" if times is None else "the times asked for, after the start"
    subtitle = f"the cloud at {which}, one scale in each row"
    figure = new_figure(height, summary.title or "Column densities", subtitle)
    for row, view in enumerate(views):
        series = columns[view]
        for column, (index, window) in enumerate(zip(indices, window_of(series, indices), strict=True)):
            corner = (0.6 + column * (side + 0.1), height - 1.0 - row * (side + 0.32) - side)
            ax = figure.add_axes((corner[0] / WIDTH, corner[1] / height, side / WIDTH, side / height))
            draw_column(ax, series, index, window)
            ax.set(xticks=[], yticks=[])
            peak = drawn(float(series.values[index].max()) * 1e-12, 3)
            ax.text(
                0.97, 0.97, f"{peak} /µm²", transform=ax.transAxes, ha="right", va="top", size=SMALL - 0.5, color=QUIET
            )
            if row == 0:
                ax.set_title(f"{brief(float(kept[index]) * 1e3)} ms", size=TYPE, color=INK, weight="bold")
            if column == 0:
                enlarged = f" (x{window.enlarged})" if window.enlarged > 1 else ""
                ax.set_ylabel(f"{series.up}{enlarged if window.up_is_short else ''} →", size=TYPE, color=INK)
            if column == 0:
                sideways = enlarged if not window.up_is_short else ""
                ax.set_xlabel(f"{series.right}{sideways} →   seen along {view}", size=SMALL, color=INK, loc="left")
    return figure
