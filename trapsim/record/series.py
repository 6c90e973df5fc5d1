"""Arrays that are kept: the track in time, the column densities, the wave function.

SI units throughout. Every series knows its unit, what it is called and how the lab writes it, so that
file, table and figure say the same thing.
"""

from __future__ import annotations

import csv
import io
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field

import numpy as np

from trapsim.constants import K_B
from trapsim.measure.views import VIEWS

Array = np.ndarray
DIRECTIONS = ("x", "y", "z")

_NANOKELVIN = 1e9 / K_B
#: name -> (SI unit, what it is, lab unit, lab units per SI unit)
OBSERVABLES: Mapping[str, tuple[str, str, str, float]] = {
    "flight_time": ("s", "time since the start of the last release", "ms", 1e3),
    "width": ("m", "rms half-width of the cloud", "um", 1e6),
    "expansion_rate": ("m/s", "rate of change of the rms half-width", "mm/s", 1e3),
    "centre": ("m", "centre of mass, counted from the origin of the ground state", "um", 1e6),
    "velocity": ("m/s", "centre-of-mass velocity", "mm/s", 1e3),
    "velocity_spread": ("m/s", "rms velocity about the centre of mass", "mm/s", 1e3),
    "kinetic": ("J", "internal kinetic energy per atom", "nK", _NANOKELVIN),
    "trap": ("J", "potential energy per atom", "nK", _NANOKELVIN),
    "interaction": ("J", "interaction energy per atom", "nK", _NANOKELVIN),
    "centre_kinetic": ("J", "kinetic energy per atom of the centre of mass", "nK", _NANOKELVIN),
    "atoms": ("1", "number of atoms present", "", 1.0),
    "law_width": ("m", "rms half-width after the scaling law", "um", 1e6),
    "law_expansion_rate": ("m/s", "rate of change of the rms half-width after the scaling law", "mm/s", 1e3),
    "scale": ("1", "scale of the moving frame", "", 1.0),
    "norm": ("1", "norm of the wave function", "", 1.0),
    "step": ("s", "length of the time step that led here", "ms", 1e3),
}


@dataclass(frozen=True)
class Series:
    """One observable against time.

    Parameters
    ----------
    values : ndarray, shape (T,) or (T, 3)
        In SI units; three columns are the directions x, y, z.
    unit : str
        The SI unit of `values`.
    label : str
        What it is, in words.
    shown : str
        The unit the lab writes it in; empty for a pure number.
    factor : float
        Lab units per SI unit.
    """

    values: Array
    unit: str
    label: str
    shown: str
    factor: float = 1.0

    @classmethod
    def of(cls, name: str, values: Array) -> Series:
        """The series of a known observable, with the unit and words of `OBSERVABLES`."""
        unit, label, shown, factor = OBSERVABLES[name]
        return cls(np.asarray(values, dtype=float), unit, label, shown, factor)

    @property
    def lab(self) -> Array:
        """The values in lab units."""
        return self.values * self.factor

    @property
    def per_direction(self) -> bool:
        return self.values.ndim == 2


@dataclass(frozen=True)
class Track:
    """What was seen at every step: `track["width"]` is an array in SI units.

    A series that is nowhere known (no law, no release) is dropped, so that it is absent instead of a column of gaps.

    Parameters
    ----------
    time : ndarray, shape (T,), s
        Counted from the start of the sequence; a jump of the timeline may give the same time twice.
    stage : ndarray of int, shape (T,)
        Index of the stage each sample belongs to.
    series : mapping of str to Series
    stage_names : tuple of str
        What the stages are called, in order.
    """

    time: Array
    stage: Array
    series: Mapping[str, Series]
    stage_names: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        time = np.atleast_1d(np.asarray(self.time, dtype=float))
        stage = np.atleast_1d(np.asarray(self.stage, dtype=np.int64))
        if stage.shape != time.shape:
            raise ValueError(f"stage has shape {stage.shape}, time has {time.shape}")
        for name, one in self.series.items():
            if one.values.shape not in {time.shape, (len(time), 3)}:
                raise ValueError(f"series {name} has shape {one.values.shape} for {len(time)} times")
        known = {name: one for name, one in self.series.items() if not np.isnan(one.values).all()}
        for name, value in (("time", time), ("stage", stage), ("series", known)):
            object.__setattr__(self, name, value)
        object.__setattr__(self, "stage_names", tuple(self.stage_names))

    @classmethod
    def of(cls, time: Array, stage: Array, values: Mapping[str, Array], *, stage_names: tuple[str, ...] = ()) -> Track:
        """A track of known observables, given as plain SI arrays by name."""
        return cls(time, stage, {name: Series.of(name, one) for name, one in values.items()}, stage_names)

    def __getitem__(self, name: str) -> Array:
        if name in ("time", "stage"):
            return getattr(self, name)
        return self.series[name].values

    def __contains__(self, name: object) -> bool:
        return name in self.series

    def __iter__(self) -> Iterator[str]:
        return iter(self.series)

    def __len__(self) -> int:
        return len(self.time)


@dataclass(frozen=True)
class ColumnSeries:
    """Column densities along one line of sight, on a raster that moves with the cloud.

    Parameters
    ----------
    view : str
        The line of sight: "x", "y" or "z".
    times : ndarray, shape (P,), s
    rows : ndarray, shape (P, R), m
        Lab coordinate of each row, counted from the origin of the ground state; rows run upwards.
    cols : ndarray, shape (P, C), m
        Lab coordinate of each column; columns run to the right.
    values : ndarray of float32, shape (P, R, C), atoms/m^2
    """

    view: str
    times: Array
    rows: Array
    cols: Array
    values: Array

    def __post_init__(self) -> None:
        count = len(self.times)
        expected = (count, self.rows.shape[-1], self.cols.shape[-1])
        if self.values.shape != expected or len(self.rows) != count or len(self.cols) != count:
            raise ValueError(f"columns along {self.view}: values {self.values.shape}, rows and columns ask {expected}")

    @property
    def right(self) -> str:
        """The lab direction that points to the right."""
        return VIEWS[self.view][0]

    @property
    def up(self) -> str:
        """The lab direction that points up."""
        return VIEWS[self.view][1]

    def __len__(self) -> int:
        return len(self.times)


@dataclass(frozen=True)
class AxisRecord:
    """One axis of a kept wave function: its kind, the lab directions it covers, points (m) and weights."""

    kind: str
    covers: tuple[int, ...]
    points: Array
    weights: Array

    @property
    def name(self) -> str:
        """The directions it covers: "x", or "yz" for a radial axis."""
        return "".join(DIRECTIONS[j] for j in self.covers)


@dataclass(frozen=True)
class WaveFunction:
    """A wave function on its grid, with the frame that places it in the lab.

    With y_j = x_j - centre_j and x_j = scale_j xi_j + centre_j, the lab wave function is
    psi = values / sqrt(product of the scales) * exp(i m/hbar sum_j [scale_rate_j/(2 scale_j) y_j^2 + velocity_j y_j]),
    up to a phase that is the same everywhere; the sum of weights * |values|^2 is the norm.

    Parameters
    ----------
    time : float, s
    values : ndarray of complex, one dimension per axis
    axes : tuple of AxisRecord
    scale, scale_rate, centre, velocity : ndarray, shape (3,)
        Of the frame: 1, 1/s, m, m/s.
    """

    time: float
    values: Array
    axes: tuple[AxisRecord, ...]
    scale: Array = field(default_factory=lambda: np.ones(3))
    scale_rate: Array = field(default_factory=lambda: np.zeros(3))
    centre: Array = field(default_factory=lambda: np.zeros(3))
    velocity: Array = field(default_factory=lambda: np.zeros(3))

    def __post_init__(self) -> None:
        expected = tuple(len(axis.points) for axis in self.axes)
        if self.values.shape != expected:
            raise ValueError(f"wave function of shape {self.values.shape} on axes of {expected} points")


def track_csv(track: Track) -> str:
    """The track as a table in lab units; a gap where a figure does not apply.

    Returns
    -------
    str
        Header `time (ms),stage,flight_time (ms),width_x (um),...`, twelve significant figures.
    """
    header = ["time (ms)", "stage"]
    columns: list[list[str]] = [
        [_number(t) for t in track.time * 1e3],
        [track.stage_names[i] if 0 <= i < len(track.stage_names) else str(i) for i in track.stage],
    ]
    for name, one in track.series.items():
        unit = f" ({one.shown})" if one.shown else ""
        titles = [f"{name}_{d}" for d in DIRECTIONS] if one.per_direction else [name]
        for title, values in zip(titles, one.lab.reshape(len(track), -1).T, strict=True):
            header.append(title + unit)
            columns.append([_number(v) for v in values])
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(header)
    writer.writerows(zip(*columns, strict=True))
    return out.getvalue()


def _number(value: float) -> str:
    return f"{value:.12g}" if np.isfinite(value) else ""
