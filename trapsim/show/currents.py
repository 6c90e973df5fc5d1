"""The flow at the end: arrows of the velocity in the middle plane over the density."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from trapsim.measure.flow import FlowPlane
from trapsim.measure.views import VIEWS
from trapsim.record.series import ColumnSeries
from trapsim.record.summary import Summary
from trapsim.show.density import ENLARGE, LONGEST, Window, draw_column, draw_scale_bar, reach
from trapsim.show.look import DENSITY, INK, LOOKS, QUIET, SMALL, TYPE, WIDTH, box, dress, new_figure
from trapsim.show.numbers import brief, drawn, nice_length

Array = np.ndarray
#: The longest arrow takes this share of half the panel.
LONGEST_ARROW = 0.22
#: Neighbouring arrows are at least this share of the panel apart; what is fainter than that share has none.
CLOSEST, FAINTEST = 0.038, 3e-3
#: m/s; a cloud whose flow is slower than this stands still.
STILL = 1e-9
ARROWS = LOOKS["y"].colour


def flow_figure(
    summary: Summary, flow: Mapping[str, FlowPlane], columns: Mapping[str, ColumnSeries] | None = None
) -> Figure:
    """Velocity less that of the centre, one panel per line of sight, over the column density.

    Parameters
    ----------
    summary : Summary
    flow : mapping of str to FlowPlane
        By line of sight, in lab coordinates.
    columns : mapping of str to ColumnSeries, optional
        Column densities whose last one stands behind the arrows; the density in the plane otherwise.
    """
    planes = [flow[view] for view in "xyz" if view in flow]
    side = (WIDTH - 0.35 - 0.85 * len(planes)) / max(len(planes), 2)
    height = side + 2.05
    moment = summary.end.time_ms if summary.end is not None else 0.0
    lit = summary.end is not None and bool(summary.end.orders)
    less = "the centre's velocity taken off" if not lit else "centre at rest; fringes are not followed"
    words = f"{brief(moment)} ms after the start; arrows: where the atoms go next, {less}"
    figure = new_figure(height, summary.title or "Flow", words)
    for n, plane in enumerate(planes):
        ax = box(figure, 0.8 + n * (side + 0.85), height - 1.15 - side, side, side)
        series = (columns or {}).get(plane.view)
        draw_flow(ax, plane, series if series is not None and len(series) else None, origin=summary.ground.origin_um)
    return figure


def draw_flow(
    ax: Axes, plane: FlowPlane, series: ColumnSeries | None, *, origin: Sequence[float | None]
) -> None:
    """Arrows over the density: each reaches as far as its atoms go in the time that is said above."""
    right, up = ("xyz".index(d) for d in VIEWS[plane.view])
    x, y = (1e6 * line - (origin[j] or 0.0) for line, j in ((plane.x, right), (plane.y, up)))
    window = _window(plane, x, y)
    if series is not None:
        draw_column(ax, series, -1, window)
    else:
        ax.imshow(plane.density, origin="lower", extent=(x[0], x[-1], y[0], y[-1]), cmap=DENSITY, vmin=0.0,
                  interpolation="bicubic", aspect="auto")  # fmt: skip
        ax.set(xlim=window.extent[:2], ylim=window.extent[2:], box_aspect=1)
        draw_scale_bar(ax, window)
    dress(ax, ticks=4, rules=False)
    for edge in ax.spines.values():
        edge.set(visible=True, color=QUIET)
    ax.set_xlabel(f"{'xyz'[right]} (µm) →", size=TYPE, color=INK)
    ax.set_ylabel(f"{'xyz'[up]} (µm) →", size=TYPE, color=INK, labelpad=1)
    ax.set_title(_title(plane, window), loc="left", size=TYPE, weight="bold", color=INK, pad=18)
    ax.text(0, 1.02, _arrows(ax, plane, x, y, window), transform=ax.transAxes, size=SMALL, color=ARROWS, va="bottom")


def _title(plane: FlowPlane, window: Window) -> str:
    right, up = VIEWS[plane.view]
    larger = f"; {up if window.up_is_short else right} x{window.enlarged}" if window.enlarged > 1 else ""
    return f"seen along {plane.view}{larger}"


def _arrows(ax: Axes, plane: FlowPlane, x: Array, y: Array, window: Window) -> str:
    """Draw the arrows and say how long they are."""
    speed = np.hypot(plane.right, plane.up)
    known = np.isfinite(speed) & (plane.density > FAINTEST * plane.density.max())
    fastest = float(speed[known].max()) if known.any() else 0.0
    if fastest < STILL:
        return "nothing flows"
    paper = np.hypot(plane.right / window.half_right, plane.up / window.half_up)
    time = nice_length(LONGEST_ARROW * 1e-6 / float(paper[known].max()))
    places, heights = np.meshgrid(x, y)
    known &= _every(x, window.half_right)[None, :] & _every(y, window.half_up)[:, None]
    ax.quiver(
        places[known], heights[known], plane.right[known] * time * 1e6, plane.up[known] * time * 1e6, angles="xy",
        scale_units="xy", scale=1.0, color=ARROWS, width=0.008, headwidth=4, headlength=4.5, headaxislength=4,
        minlength=0.5, zorder=4,
    )  # fmt: skip
    return f"next {_duration(time)}; fastest {drawn(fastest * 1e3, 3)} mm/s"


def _every(line: Array, half: float) -> Array:
    """The points of a line that carry arrows: as many as there is room for, the middle one among them."""
    spacing = (line[-1] - line[0]) / max(len(line) - 1, 1)
    stride = max(1, int(np.ceil(CLOSEST * 2 * half / spacing - 1e-9)))
    return (np.arange(len(line)) - len(line) // 2) % stride == 0


def _duration(seconds: float) -> str:
    """A round time in the largest unit that leaves it above one."""
    unit, size = next(((u, s) for u, s in (("s", 1.0), ("ms", 1e-3), ("µs", 1e-6)) if seconds >= s), ("ns", 1e-9))
    return f"{drawn(seconds / size, 1)} {unit}"


def _window(plane: FlowPlane, x: Array, y: Array) -> Window:
    """What is not empty, square on paper; a long cloud gets its short side enlarged by a whole number."""
    (right, wide), (up, tall) = reach(x * 1e-6, plane.density.sum(axis=0)), reach(y * 1e-6, plane.density.sum(axis=1))
    long, short = max(wide, tall), min(wide, tall)
    enlarged = max((n for n in ENLARGE if n <= long / short), default=1) if long > LONGEST * short else 1
    sides = (long, long / enlarged) if tall <= wide else (long / enlarged, long)
    return Window(right, up, *sides, enlarged, tall <= wide)
