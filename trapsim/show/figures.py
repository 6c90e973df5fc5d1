"""The figures of a run, by name: what `trapsim run` and `trapsim show` put into the result folder and on the page."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import numpy as np
from matplotlib.figure import Figure

from trapsim.record.files import write_atomic
from trapsim.record.store import Contents
from trapsim.show.cameras import camera_figure, draw_picture
from trapsim.show.currents import draw_flow, flow_figure
from trapsim.show.density import columns_figure, draw_column, draw_scale_bar, strip_figure, window_of
from trapsim.show.energies import draw_energies, draw_ratios, energies_figure
from trapsim.show.flight import draw_centre, draw_rates, draw_stages, draw_widths, flight_figure
from trapsim.show.look import png
from trapsim.show.orders import draw_momentum, draw_orders, momentum_figure, orders_figure
from trapsim.show.wording import times_asked_for

__all__ = [
    "columns_figure", "camera_figure", "draw_centre", "draw_column", "draw_energies", "draw_flow", "draw_momentum",
    "draw_orders", "draw_picture", "draw_rates", "draw_ratios", "draw_scale_bar", "draw_stages", "draw_widths",
    "energies_figure", "figures_of", "flight_figure", "flow_figure", "momentum_figure", "orders_figure", "png",
    "strip_figure", "window_of", "write_figures",
]  # fmt: skip
#: The strip has so many pictures in a row.
STRIP = 6


def figures_of(kept: Contents) -> dict[str, Figure]:
    """All figures that a run has the data for.

    Returns
    -------
    dict of str to Figure
        In the order in which one would look at them: "flight" and "energies" when there is a track of at least two
        samples, "pictures_<camera>" of each camera, "columns" when column densities were kept, "strip" when they were
        kept at three times or more, "momentum" and "orders" where there was a lattice to look along, "flow" where the
        velocity at the end was kept.
    """
    summary, track = kept.summary, kept.track
    made: dict[str, Figure] = {}
    if track is not None and len(track) > 1:
        made["flight"] = flight_figure(summary, track)
    for camera in dict.fromkeys(one.camera for one in kept.pictures.values()):
        made[f"pictures_{camera}"] = camera_figure(summary, [p for p in kept.pictures.values() if p.camera == camera])
    if kept.momenta:
        made["momentum"] = momentum_figure(summary, kept.momenta, mass=_mass(kept))
        made["orders"] = orders_figure(summary, kept.momenta)
    columns = {view: series for view, series in kept.columns.items() if len(series)}
    if columns:
        made["columns"] = columns_figure(summary, columns)
        if min(len(series) for series in columns.values()) >= 3:
            made["strip"] = strip_figure(summary, columns, times=_strip_times(kept))
    if track is not None and len(track) > 1:
        made["energies"] = energies_figure(summary, track)
    if kept.flow:
        made["flow"] = flow_figure(summary, kept.flow, columns)
    return made


def _mass(kept: Contents) -> float:
    """kg; without it, what fell cannot be taken off."""
    return float(kept.plan.get("atoms", {}).get("mass", {}).get("value", 0.0))


def _strip_times(kept: Contents) -> list[float] | None:
    """The beginning, and the times asked for, the last one among them; None where nothing was asked for."""
    asked = times_asked_for(kept.plan, kept.summary)
    if not asked:
        return None
    picked = np.unique(np.linspace(0, len(asked) - 1, STRIP - 1).round().astype(int))
    return [0.0, *(asked[i] for i in picked)] if asked[0] > 0 else [asked[i] for i in picked]


def write_figures(folder: str | Path, figures: Mapping[str, bytes]) -> list[Path]:
    """Write each figure, a PNG, as `figures/<name>.png` in the result folder.

    Raises
    ------
    FileTrouble
        When one cannot be written.
    """
    paths = []
    for name, figure in figures.items():
        path = Path(folder) / "figures" / f"{name}.png"
        write_atomic(path, figure)
        paths.append(path)
    return paths
