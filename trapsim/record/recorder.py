"""The recorder: listens to the march and keeps track and columns in memory until the run is over."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np

from trapsim.cloud.cloud import Cloud
from trapsim.constants import HBAR
from trapsim.evolve.march import PROFILE_PAIRS
from trapsim.evolve.scaling import Interval
from trapsim.evolve.state import Leg, Tick
from trapsim.measure.columns import ColumnViews
from trapsim.measure.observables import Moments, moments, profile
from trapsim.measure.views import VIEWS
from trapsim.record.series import Array, ColumnSeries, Track
from trapsim.terms.part import remainder, steered

#: how often columns are kept, as a share of the whole sequence
COLUMNS = 60
#: in a trap, samples of the track are at least this share of a radian of the fastest trap apart
APART = 0.15

#: track name -> where it stands in a row, and how many numbers
_ROW = {
    "time": 1, "stage": 1, "flight_time": 1, "width": 3, "expansion_rate": 3, "centre": 3, "velocity": 3,
    "velocity_spread": 3, "kinetic": 3, "trap": 1, "interaction": 1, "centre_kinetic": 1, "atoms": 1, "law_width": 3,
    "law_expansion_rate": 3, "scale": 3, "norm": 1, "step": 1,
}  # fmt: skip

Law = Callable[[float], tuple[Array, Array]]


class Recorder:
    """Keeps what is seen at the ticks of a march.

    Parameters
    ----------
    origin : (3,)
        Positions are counted from here, m.
    atoms : float
        Number at the start.
    duration : float
        Of the whole sequence, s.
    released : float or None
        When the flight clock starts.
    release_stage : int
        The stage with which it starts.
    law : callable or None
        t -> (widths, rates) of the scaling law.
    stage_names : tuple of str
    """

    def __init__(
        self,
        *,
        origin: Array,
        atoms: float,
        duration: float,
        released: float | None,
        release_stage: int = 0,
        law: Law | None,
        stage_names: tuple[str, ...] = (),
    ) -> None:
        self.origin = np.asarray(origin)
        self.atoms = atoms
        self.every = duration / COLUMNS
        self.released = released
        self.release_stage = release_stage
        self.law = law
        self.stage_names = stage_names
        self.pairs = 0.0
        self._rows: list[Array] = []
        self._columns: dict[str, list[tuple[float, Array, Array, Array]]] = {view: [] for view in VIEWS}
        self._views: ColumnViews | None = None

    # listening

    def begin(self, cloud: Cloud, interval: Interval) -> Moments:
        """The cloud at rest, before the sequence."""
        return self._sample(cloud, interval, stage=0, columns=True)

    def listen(self, tick: Tick, leg: Leg) -> Moments | None:
        """Keep what a tick shows: always at landings and edges, else when it is time again; what was seen, if anything."""
        cloud = tick.state.cloud
        last = self._rows[-1][0] if self._rows else -np.inf
        asked = tick.reason != "step"
        if not asked and leg.trapped and self._too_soon(cloud.time - last, cloud, leg):
            return None
        shown = self._columns["x"][-1][0] if self._columns["x"] else -np.inf
        columns = (tick.reason == "edge" and leg.last) or tick.reason == "landing" or cloud.time - shown >= self.every
        return self._sample(cloud, leg.interval, stage=leg.stage, columns=columns)

    def _too_soon(self, elapsed: float, cloud: Cloud, leg: Leg) -> bool:
        _, curvature = steered(leg.interval.parts_at(cloud.time), tuple(cloud.frame.X))
        fastest = np.sqrt(max(curvature.max(), 0.0) * cloud.q / HBAR)
        return fastest * elapsed < APART and elapsed < self.every / 4

    def _sample(self, cloud: Cloud, interval: Interval, *, stage: int, columns: bool) -> Moments:
        seen = observe(cloud, interval)
        self.pairs += PROFILE_PAIRS
        t = seen.time
        released = self.released is not None and t >= self.released and stage >= self.release_stage
        flight = t - self.released if released else np.nan
        law = self.law(t) if self.law else (np.full(3, np.nan), np.full(3, np.nan))
        previous = self._rows[-1][0] if self._rows else t
        self._rows.append(np.concatenate([
            [t, stage, flight], seen.width, seen.rate, seen.centre - self.origin, seen.velocity, seen.spread,
            seen.kinetic, [seen.trap, seen.interaction, seen.centre_kinetic, self.atoms * seen.norm], *law, seen.scale,
            [seen.norm, t - previous],
        ]))  # fmt: skip
        if columns:
            if self._views is None or self._views.seen is not cloud.space:
                self._views = ColumnViews(cloud.space)
            for view, column in self._views.see(cloud).items():
                right, up = ("xyz".index(d) for d in VIEWS[view])
                kept = (
                    t, column.y - self.origin[up], column.x - self.origin[right],
                    (self.atoms * column.values).astype(np.float32),
                )  # fmt: skip
                self._columns[view].append(kept)
        return seen

    # what was heard

    def track(self) -> Track:
        rows = np.array(self._rows)
        values: dict[str, Array] = {}
        place = 0
        for name, width in _ROW.items():
            values[name] = rows[:, place] if width == 1 else rows[:, place : place + width]
            place += width
        time, stage = values.pop("time"), values.pop("stage")
        return Track.of(time, stage, values, stage_names=self.stage_names)

    def columns(self) -> dict[str, ColumnSeries]:
        return {
            view: ColumnSeries(view, *(np.array(part) for part in zip(*kept, strict=True)))
            for view, kept in self._columns.items()
            if kept
        }

    # checkpoints

    def arrays(self) -> dict[str, Array]:
        """All that was heard so far, for a checkpoint."""
        out = {"rows": np.array(self._rows), "recorder_pairs": np.array(self.pairs)}
        for view, series in self.columns().items():
            out |= {f"{view}_times": series.times, f"{view}_rows": series.rows, f"{view}_cols": series.cols}
            out[f"{view}_values"] = series.values
        return out

    def restore(self, arrays: Mapping[str, Any]) -> None:
        """Take up what `arrays` kept."""
        self._rows = list(arrays["rows"])
        self.pairs = float(arrays["recorder_pairs"])
        for view in VIEWS:
            kept = (arrays[f"{view}_{part}"] for part in ("times", "rows", "cols", "values"))
            self._columns[view] = [(float(t), r, c, v) for t, r, c, v in zip(*kept, strict=True)]


def observe(cloud: Cloud, interval: Interval) -> Moments:
    """The lab quantities of a cloud under what acts in an interval."""
    seen = profile(cloud)
    parts = interval.parts_at(cloud.time)
    centre = cloud.frame.X + cloud.frame.b * seen.mean
    _, curvature = steered(parts, tuple(centre))
    lab = tuple(cloud.frame.lab(x, j) for j, x in enumerate(cloud.space.coordinates()))
    rest = remainder(parts, tuple(centre), *lab)
    return moments(cloud, seen, coupling=interval.coupling(cloud.time), curvature=curvature, rest=rest)
