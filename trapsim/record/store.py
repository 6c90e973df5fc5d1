"""The result folder: everything in `run.h5`, the figures in summary.json, the track in track.csv.

The only door to h5py. Every dimension of `run.h5` has a scale and every dataset its `units` and `long_name`, so that
xarray opens each group with the engine h5netcdf and a stranger understands it.
"""

from __future__ import annotations

import io
import json
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import h5py
import numpy as np

from trapsim.errors import FileTrouble
from trapsim.measure.flow import FlowPlane
from trapsim.measure.picture import Picture
from trapsim.record.album import Seen
from trapsim.record.files import read_checkpoint, reading, write_atomic, write_checkpoint
from trapsim.record.series import DIRECTIONS, AxisRecord, ColumnSeries, Series, Track, WaveFunction, track_csv
from trapsim.record.shelves import (
    COUNTED,
    put_flow,
    put_momentum,
    put_picture,
    read_flow,
    read_momentum,
    read_picture,
)
from trapsim.record.summary import Summary

__all__ = [
    "RUN_FILE", "Contents", "read_checkpoint", "read_run", "write_atomic", "write_checkpoint", "write_results",
    "write_run", "write_summary",
]  # fmt: skip
RUN_FILE = "run.h5"
LAYOUT = 1
_TEXT = h5py.string_dtype()
_PSI = (
    "psi(x) = (psi_real + i psi_imag) / sqrt(product of scale) "
    "* exp(i m/hbar sum_j [scale_rate_j/(2 scale_j) y_j^2 + velocity_j y_j]), y = x - centre, "
    "x = scale * xi + centre, xi the axes here; positions count from the origin of the ground state"
)


@dataclass(frozen=True)
class Contents:
    """All that `run.h5` holds.

    Parameters
    ----------
    plan_text : str
        The plan as it was given.
    plan : mapping
        The plan as it was understood: JSON-able, defaults filled in.
    summary : Summary
    track : Track or None
    columns : mapping of str to ColumnSeries
        By line of sight.
    final, ground : WaveFunction or None
        The wave function at the end, and at rest before the sequence.
    pictures : mapping of str to Picture
    momenta : tuple of Seen
        Momentum distributions along lattices at the ends of stages.
    flow : mapping of str to FlowPlane
        By line of sight, at the end.
    """

    plan_text: str
    plan: Mapping[str, Any]
    summary: Summary
    track: Track | None = None
    columns: Mapping[str, ColumnSeries] = field(default_factory=dict)
    final: WaveFunction | None = None
    ground: WaveFunction | None = None
    pictures: Mapping[str, Picture] = field(default_factory=dict)
    momenta: tuple[Seen, ...] = ()
    flow: Mapping[str, FlowPlane] = field(default_factory=dict)


def write_results(folder: str | Path, contents: Contents) -> None:
    """Put run.h5, track.csv and, last, summary.json into the folder, which is made when it is not there."""
    folder = Path(folder)
    write_run(folder, contents)
    if contents.track is not None:
        write_atomic(folder / "track.csv", track_csv(contents.track).encode())
    write_atomic(folder / "summary.json", contents.summary.as_json().encode())


def write_run(folder: str | Path, contents: Contents) -> Path:
    """Write `run.h5` into the folder, replacing an older one only when the new one is complete.

    Raises
    ------
    FileTrouble
        When it cannot be written; what was there before stays.
    """
    path = Path(folder) / RUN_FILE
    memory = io.BytesIO()  # a full disk in the middle of HDF5's own writing ends the process, so it never meets one
    with h5py.File(memory, "w") as file:
        _fill(file, contents)
    write_atomic(path, memory.getbuffer())
    return path


def write_summary(folder: str | Path, summary: Summary) -> None:
    """Put other figures into a result folder, into run.h5 and summary.json; all else in them stays as it is.

    Raises
    ------
    FileTrouble
        When the result cannot be read, or the new one not be written; what was there before stays.
    """
    path = Path(folder) / RUN_FILE
    with reading(path, "a finished run's folder is needed here; run the plan again to make it"):
        memory = io.BytesIO(path.read_bytes())
        with h5py.File(memory, "r+") as file:
            del file["summary"], file["notices"]
            _put_summary(file, summary)
    write_atomic(path, memory.getbuffer())
    write_atomic(path.with_name("summary.json"), summary.as_json().encode())


def read_run(folder: str | Path) -> Contents:
    """Read back what `write_run` wrote.

    Raises
    ------
    FileTrouble
        When there is no result, or it is damaged.
    """
    path = Path(folder) / RUN_FILE
    way_out = "a finished run's folder is needed here; run the plan again to make it"
    with reading(path, way_out), h5py.File(path, "r") as file:
        if (layout := int(file.attrs.get("layout", 0))) > LAYOUT:
            rule = f"this trapsim reads layouts up to {LAYOUT}"
            raise FileTrouble.at(str(path), f"layout {layout}", rule, "use a newer trapsim")
        return _contents(file, str(path))


@dataclass(frozen=True)
class _Group:
    """A group that names the dimensions of all it is given."""

    group: h5py.Group

    @property
    def attrs(self) -> h5py.AttributeManager:
        return self.group.attrs

    def scale(self, name: str, values: Any, units: str, long_name: str) -> None:
        """A dimension: its own values, unit and words."""
        self.put(name, values, (), units, long_name).make_scale(name)

    def put(
        self, name: str, values: Any, dims: Sequence[str], units: str, long_name: str, *, packed: bool = False
    ) -> h5py.Dataset:
        if isinstance(values, str | list):
            made = self.group.create_dataset(name, data=np.array(values, dtype=object), dtype=_TEXT)
        else:
            chunk = (1,) * (np.ndim(values) - 2) + np.shape(values)[-2:]
            packing = {"chunks": chunk, "compression": "gzip", "shuffle": True} if packed and np.size(values) else {}
            made = self.group.create_dataset(name, data=values, **packing)
        made.attrs["units"], made.attrs["long_name"] = units, long_name
        for position, dim in enumerate(dims):
            made.dims[position].attach_scale(self.group[dim])
        return made


def _fill(file: h5py.File, contents: Contents) -> None:
    summary = contents.summary
    file.attrs.update(layout=LAYOUT, title=summary.title, status=summary.status, version=summary.version)
    file.attrs.update(key=summary.key, march_key=summary.march_key)
    _put_summary(file, summary)
    plan = _Group(file.create_group("plan"))
    plan.put("text", contents.plan_text, (), "text", "the plan as it was given, TOML")
    plan.put("resolved", json.dumps(contents.plan), (), "text", "the plan as it was understood, JSON, SI units")
    ground = file.create_group("ground")
    ground.attrs.update({name: value for name, value in summary.ground.as_dict().items() if _storable(value)})
    if contents.ground is not None:
        _put_wave(_Group(ground), contents.ground)
    if contents.track is not None:
        _put_track(_Group(file.create_group("track", track_order=True)), contents.track)
    for view, series in contents.columns.items():
        _put_columns(_Group(file.create_group(f"columns/{view}")), series)
    if contents.final is not None:
        _put_wave(_Group(file.create_group("final")), contents.final)
    for name, picture in contents.pictures.items():
        put_picture(_Group(_ordered(file, "pictures").create_group(name)), picture)
    for seen in contents.momenta:
        put_momentum(_Group(_ordered(file, "momentum").create_group(f"{seen.stage}_{seen.part}")), seen)
    for view, plane in contents.flow.items():
        put_flow(_Group(_ordered(file, "flow").create_group(view)), plane)


def _put_summary(file: h5py.File, summary: Summary) -> None:
    _Group(file).put("summary", summary.as_json(), (), "text", "all figures of the run, as JSON, units in the names")
    notices = _Group(file.create_group("notices"))
    notices.scale("notice", np.arange(len(summary.warnings)), "1", "number of the notice")
    notices.put("code", [one.code for one in summary.warnings], ("notice",), "text", "the notice in one word")
    notices.put("text", [one.text for one in summary.warnings], ("notice",), "text", "the notice")


def _storable(value: Any) -> bool:
    return value is not None and not (isinstance(value, list) and None in value)


def _put_direction(group: _Group) -> None:
    group.scale("direction", list(DIRECTIONS), "text", "direction in the lab")


def _put_track(group: _Group, track: Track) -> None:
    group.scale("time", track.time, "s", "time since the start of the sequence")
    _put_direction(group)
    stage = group.put("stage", track.stage, ("time",), "1", "index of the stage of the sequence")
    stage.attrs.create("names", np.array(track.stage_names, dtype=object), dtype=_TEXT)
    for name, one in track.series.items():
        dims = ("time", "direction") if one.per_direction else ("time",)
        made = group.put(name, one.values, dims, one.unit, one.label)
        made.attrs["lab_units"], made.attrs["lab_units_per_si"] = one.shown, one.factor


def _put_columns(group: _Group, series: ColumnSeries) -> None:
    _, rows, cols = series.values.shape
    group.attrs.update(line_of_sight=series.view, right=series.right, up=series.up)
    group.scale("time", series.times, "s", "time since the start of the sequence")
    group.scale("row", np.arange(rows), "1", "number of the row, upwards")
    group.scale("column", np.arange(cols), "1", "number of the column, to the right")
    group.put(f"{series.up}_lab", series.rows, ("time", "row"), "m", f"lab coordinate {series.up}, upwards, {COUNTED}")
    group.put(f"{series.right}_lab", series.cols, ("time", "column"), "m", f"lab coordinate {series.right}, {COUNTED}")
    made = group.put(
        "column_density",
        np.asarray(series.values, dtype=np.float32),
        ("time", "row", "column"),
        "m^-2",
        f"atoms per area, seen along {series.view}",
        packed=True,
    )
    made.attrs["coordinates"] = f"{series.up}_lab {series.right}_lab"


def _ordered(file: h5py.File, name: str) -> h5py.Group:
    """A group that keeps the order in which it was filled."""
    return file[name] if name in file else file.create_group(name, track_order=True)


def _put_wave(group: _Group, wave: WaveFunction) -> None:
    group.attrs.update(time=wave.time, convention=_PSI)
    dims = [f"xi_{axis.name}" for axis in wave.axes]
    for dim, axis in zip(dims, wave.axes, strict=True):
        group.scale(dim, axis.points, "m", f"grid coordinate along {' and '.join(axis.name)}, in the moving frame")
        group.group[dim].attrs["kind"] = axis.kind
        unit = "m" if len(axis.covers) == 1 else f"m^{len(axis.covers)}"
        words = f"quadrature weight along {' and '.join(axis.name)}"
        group.put(f"weight_{axis.name}", axis.weights, (dim,), unit, words)
    values = np.asarray(wave.values, dtype=np.complex128)
    group.put("psi_real", values.real, dims, "m^-3/2", "real part of the wave function in the moving frame")
    group.put("psi_imag", values.imag, dims, "m^-3/2", "imaginary part of the wave function in the moving frame")
    _put_direction(group)
    frame = (("scale", "1"), ("scale_rate", "s^-1"), ("centre", "m"), ("velocity", "m/s"))
    for name, unit in frame:
        group.put(name, getattr(wave, name), ("direction",), unit, f"{name.replace('_', ' ')} of the moving frame")


def _contents(file: h5py.File, path: str) -> Contents:
    return Contents(
        plan_text=file["plan/text"].asstr()[()],
        plan=json.loads(file["plan/resolved"].asstr()[()]),
        summary=Summary.from_dict(json.loads(file["summary"].asstr()[()]), place=path),
        track=_track(file["track"]) if "track" in file else None,
        columns={view: _columns(group) for view, group in file.get("columns", {}).items()},
        final=_wave(file["final"]) if "final" in file else None,
        ground=_wave(file["ground"]) if "psi_real" in file["ground"] else None,
        pictures={name: read_picture(name, group) for name, group in file.get("pictures", {}).items()},
        momenta=tuple(read_momentum(group) for group in file.get("momentum", {}).values()),
        flow={view: read_flow(group) for view, group in file.get("flow", {}).items()},
    )


def _track(group: h5py.Group) -> Track:
    series = {
        name: Series(
            one[()], one.attrs["units"], one.attrs["long_name"], one.attrs["lab_units"],
            float(one.attrs["lab_units_per_si"]),
        )
        for name, one in group.items() if "lab_units" in one.attrs
    }  # fmt: skip
    return Track(group["time"][()], group["stage"][()], series, tuple(group["stage"].attrs["names"]))


def _columns(group: h5py.Group) -> ColumnSeries:
    view, up, right = (group.attrs[name] for name in ("line_of_sight", "up", "right"))
    return ColumnSeries(
        view, group["time"][()], group[f"{up}_lab"][()], group[f"{right}_lab"][()], group["column_density"][()]
    )


def _wave(group: h5py.Group) -> WaveFunction:
    axes = []
    for dim in (scale[0].name.rsplit("/", 1)[1] for scale in group["psi_real"].dims):
        name = dim.removeprefix("xi_")
        covers = tuple(DIRECTIONS.index(letter) for letter in name)
        axes.append(AxisRecord(group[dim].attrs["kind"], covers, group[dim][()], group[f"weight_{name}"][()]))
    frame = {name: group[name][()] for name in ("scale", "scale_rate", "centre", "velocity")}
    values = np.empty(group["psi_real"].shape, dtype=np.complex128)
    values.real, values.imag = group["psi_real"][()], group["psi_imag"][()]
    return WaveFunction(float(group.attrs["time"]), values, tuple(axes), **frame)
