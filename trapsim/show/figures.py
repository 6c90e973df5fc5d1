"""The figures of a run, by name: what `trapsim run` and `trapsim show` put into the result folder."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

from matplotlib.figure import Figure

from trapsim.record.files import write_atomic
from trapsim.record.series import ColumnSeries, Track
from trapsim.record.summary import Summary
from trapsim.show.density import columns_figure, draw_column, draw_scale_bar, strip_figure, window_of
from trapsim.show.flight import draw_centre, draw_rates, draw_stages, draw_widths, flight_figure
from trapsim.show.look import png

__all__ = [
    "columns_figure", "draw_centre", "draw_column", "draw_rates", "draw_scale_bar", "draw_stages", "draw_widths",
    "figures_of", "flight_figure", "png", "strip_figure", "window_of", "write_figures",
]  # fmt: skip


def figures_of(
    summary: Summary, track: Track | None = None, columns: Mapping[str, ColumnSeries] | None = None
) -> dict[str, Figure]:
    """All figures that a run has the data for.

    Returns
    -------
    dict of str to Figure
        "flight" when there is a track of at least two samples, "columns" when column densities were kept, and
        "strip" when they were kept at three times or more.
    """
    made: dict[str, Figure] = {}
    if track is not None and len(track) > 1:
        made["flight"] = flight_figure(summary, track)
    kept = {view: series for view, series in (columns or {}).items() if len(series)}
    if kept:
        made["columns"] = columns_figure(summary, kept)
        if min(len(series) for series in kept.values()) >= 3:
            made["strip"] = strip_figure(summary, kept)
    return made


def write_figures(folder: str | Path, figures: Mapping[str, Figure]) -> list[Path]:
    """Write each figure as `figures/<name>.png` in the result folder.

    Raises
    ------
    FileTrouble
        When one cannot be written.
    """
    paths = []
    for name, figure in figures.items():
        path = Path(folder) / "figures" / f"{name}.png"
        write_atomic(path, png(figure))
        paths.append(path)
    return paths
