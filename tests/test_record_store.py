"""What is kept can be read back, by us and by strangers, and a failed write harms nothing."""

from __future__ import annotations

import csv
import dataclasses
import io
import json
import math
import os
import subprocess
import sys
from pathlib import Path

import h5py
import numpy as np
import pytest
import xarray
from scipy import constants

import invented_run
from trapsim.errors import FileTrouble
from trapsim.record.series import OBSERVABLES, VIEWS, ColumnSeries, Track, WaveFunction, track_csv
from trapsim.record.store import (
    Contents,
    read_run,
    write_results,
    write_run,
)
from trapsim.record.summary import ErrorEstimate, Moment, Summary, moment_of

GROUPS = [
    "/", "plan", "ground", "track", "columns/x", "columns/y", "columns/z", "pictures/side_late", "momentum/2_light",
    "flow/y", "final", "notices",
]  # fmt: skip


@pytest.fixture(scope="module")
def contents() -> Contents:
    return invented_run.contents()


@pytest.fixture(scope="module")
def folder(contents: Contents, tmp_path_factory: pytest.TempPathFactory) -> Path:
    place = tmp_path_factory.mktemp("kept") / "a result"
    write_results(place, contents)
    return place


def same_bits(a: np.ndarray, b: np.ndarray) -> bool:
    return a.dtype == b.dtype and a.shape == b.shape and a.tobytes() == b.tobytes()


def no_constant(name: str) -> None:
    raise AssertionError(f"{name} is not JSON")


# --- the summary ----------------------------------------------------------------------------------------------------


def test_a_summary_survives_its_own_json(folder: Path, contents: Contents) -> None:
    text = (folder / "summary.json").read_text()
    raw = json.loads(text, parse_constant=no_constant)
    assert Summary.from_dict(raw) == contents.summary
    assert raw["end"]["law"]["model"] == "scaling law"


def test_numbers_keep_every_bit_in_json(folder: Path, contents: Contents) -> None:
    raw = json.loads((folder / "summary.json").read_text())
    exact = contents.track["width"][-1] * 1e6
    assert [float(one).hex() for one in raw["end"]["width_um"]] == [float(one).hex() for one in exact]


def test_what_does_not_apply_is_null_and_never_not_a_number() -> None:
    kept = invented_run.track()
    before = moment_of(kept, 0, mass=invented_run.MASS)
    assert before.flight_ms is None
    estimate = ErrorEstimate(width_relative=math.nan, rate_relative=np.float64(np.inf), centre_um=np.float64(2.0))
    assert estimate.as_dict() == {"width_relative": None, "rate_relative": None, "centre_um": 2.0, "orders": None}
    assert type(estimate.centre_um) is float


def test_a_moment_speaks_in_lab_units() -> None:
    """sigma(t) = sigma0 sqrt(1 + (w t)^2), sigma0^2 = hbar/(2 m w), m v_rms^2 = hbar w/2; z = -g t^2/2 (textbook)."""
    moment = moment_of(invented_run.track(), -1, mass=invented_run.MASS)
    w, t = 2 * math.pi * 20.0, 20e-3
    sigma = math.sqrt(constants.hbar / (2 * invented_run.MASS * w) * (1 + (w * t) ** 2))
    assert moment.width_um[0] == pytest.approx(sigma * 1e6, rel=1e-12)
    assert moment.expansion_energy_nk[0] == pytest.approx(0.5 * constants.hbar * w / constants.k * 1e9, rel=1e-12)
    assert moment.centre_um[2] == pytest.approx(-0.5 * constants.g * t**2 * 1e6, rel=1e-12)
    assert moment.velocity_mm_per_s == pytest.approx((4.0, 0.0, -constants.g * t * 1e3), rel=1e-12)
    rate = constants.hbar / (2 * invented_run.MASS * w) * w**2 * t / sigma  # d sigma/dt = sigma0^2 w^2 t/sigma
    assert moment.expansion_rate_mm_per_s[0] == pytest.approx(rate * 1e3, rel=1e-12)
    assert (moment.time_ms, moment.flight_ms) == pytest.approx((22.0, 20.0), rel=1e-12)
    # the three directions of the oscillator's ground state hold hbar w/4 of kinetic energy each (virial theorem)
    three = constants.h * (20 + 120 + 120) / 4 / constants.k * 1e9
    assert moment.internal_kinetic_nk == pytest.approx(three, rel=1e-12)


def test_every_observable_is_shown_in_a_unit_of_its_own_kind() -> None:
    """SI prefixes (BIPM), and energies over Boltzmann's constant."""
    per_si = {"um": ("m", 1e6), "ms": ("s", 1e3), "mm/s": ("m/s", 1e3), "nK": ("J", 1e9 / constants.k), "": ("1", 1.0)}
    for name, (unit, words, shown, factor) in OBSERVABLES.items():
        assert (unit, factor) == (per_si[shown][0], pytest.approx(per_si[shown][1])), name
        assert words[0].islower() and len(words) > 10


def test_a_uniform_direction_has_no_size() -> None:
    kept = invented_run.track()
    flat = {name: one.values * ([1, 1, 0] if "width" in name else 1) for name, one in kept.series.items()}
    moment = moment_of(Track.of(kept.time, kept.stage, flat), -1, mass=invented_run.MASS)
    assert moment.width_um[2] is None and moment.expansion_rate_mm_per_s[2] is None and moment.width_um[1] > 0
    assert moment.law is not None and moment.law.width_um[2] is None and moment.velocity_mm_per_s[2] is not None


def test_aspect_ratios_are_width_over_width() -> None:
    moment = moment_of(invented_run.track(), 0, mass=invented_run.MASS)
    # sigma0 goes with frequency^(-1/2): 120 Hz against 20 Hz
    assert moment.aspect_ratio["xy"] == pytest.approx(math.sqrt(6.0), rel=1e-12)
    assert moment.aspect_ratio["yz"] == pytest.approx(1.0, rel=1e-12)
    uniform = dataclasses.replace(moment, width_um=(1.0, 2.0, None))
    assert uniform.as_dict()["aspect_ratio"] == {"xy": 0.5, "xz": None, "yz": None}


def test_a_summary_of_a_later_version_is_read_and_a_broken_one_refused(contents: Contents) -> None:
    raw = contents.summary.as_dict()
    assert Summary.from_dict({**raw, "phase_of_the_moon": 1}) == contents.summary
    for broken in ({}, {**raw, "ground": {"origin_um": [0, 0, 0]}}, {**raw, "ground": 7}):
        with pytest.raises(FileTrouble, match=r"summary\.json"):
            Summary.from_dict(broken)


# --- the track ------------------------------------------------------------------------------------------------------


def test_the_table_has_units_in_its_header_and_lab_numbers_below() -> None:
    kept = invented_run.track()
    rows = list(csv.reader(io.StringIO(track_csv(kept))))
    header, first, last = rows[0], rows[1], rows[-1]
    assert header[:6] == ["time (ms)", "stage", "flight_time (ms)", "width_x (um)", "width_y (um)", "width_z (um)"]
    assert {"velocity_z (mm/s)", "kinetic_x (nK)", "atoms", "scale_y"} <= set(header)
    assert len(rows) == 1 + len(kept)
    seen = dict(zip(header, last, strict=True))
    assert float(seen["time (ms)"]) == pytest.approx(22.0, rel=1e-11)
    assert float(seen["centre_z (um)"]) == pytest.approx(-0.5 * constants.g * 0.02**2 * 1e6, rel=1e-11)  # free fall
    assert seen["stage"] == "release"
    assert dict(zip(header, first, strict=True))["flight_time (ms)"] == ""


def test_a_series_that_is_nowhere_known_is_absent() -> None:
    gaps = np.full((4, 3), np.nan)
    kept = Track.of(np.arange(4.0), np.zeros(4), {"width": np.ones((4, 3)), "law_width": gaps})
    assert "law_width" not in kept and "law_width_x" not in track_csv(kept)
    assert kept["width"].shape == (4, 3)
    with pytest.raises(ValueError, match="shape"):
        Track.of(np.arange(4.0), np.zeros(4), {"width": np.ones((4, 2))})


# --- run.h5 ---------------------------------------------------------------------------------------------------------


def test_what_is_written_is_read_back_bit_by_bit(folder: Path, contents: Contents) -> None:
    again = read_run(folder)
    assert (again.plan_text, again.plan, again.summary) == (contents.plan_text, contents.plan, contents.summary)
    assert list(again.track) == list(contents.track)
    assert again.track.stage_names == contents.track.stage_names
    for name in ("time", "stage", *contents.track):
        assert same_bits(again.track[name], contents.track[name]), name
    for name, one in contents.track.series.items():
        other = again.track.series[name]
        assert (one.unit, one.label, one.shown, one.factor) == (other.unit, other.label, other.shown, other.factor)
    assert set(again.columns) == set(VIEWS)
    for view, series in contents.columns.items():
        for name in ("times", "rows", "cols", "values"):
            assert same_bits(getattr(series, name), getattr(again.columns[view], name)), (view, name)
    for kept, read in ((contents.final, again.final), (contents.ground, again.ground)):
        assert same_bits(kept.values, read.values) and kept.time == read.time
        for name in ("scale", "scale_rate", "centre", "velocity"):
            assert same_bits(getattr(kept, name), getattr(read, name)), name
        for a, b in zip(kept.axes, read.axes, strict=True):
            assert (a.kind, a.covers) == (b.kind, b.covers)
            assert same_bits(a.points, b.points) and same_bits(a.weights, b.weights)


def test_pictures_momenta_and_flow_are_read_back_bit_by_bit(folder: Path, contents: Contents) -> None:
    again = read_run(folder)
    assert list(again.pictures) == list(contents.pictures) and list(again.flow) == list(contents.flow)
    pairs = [(contents.pictures[name], again.pictures[name]) for name in contents.pictures]
    pairs += [(contents.flow[view], again.flow[view]) for view in contents.flow]
    pairs += [(one.momentum, other.momentum) for one, other in zip(contents.momenta, again.momenta, strict=True)]
    for kept, read in pairs:
        for one in dataclasses.fields(kept):
            a, b = getattr(kept, one.name), getattr(read, one.name)
            assert same_bits(a, b) if isinstance(a, np.ndarray) else (type(a), a) == (type(b), b), one.name
    for kept, read in zip(contents.momenta, again.momenta, strict=True):
        for name in ("stage", "part", "recoil", "fallen", "orders"):
            assert getattr(kept, name) == getattr(read, name)
        assert list(read.orders) == ["-1", "0", "1"]


def test_a_lean_picture_and_a_lattice_without_orders_are_kept_too(tmp_path: Path, contents: Contents) -> None:
    lean = dataclasses.replace(
        contents.pictures["side_late"], optical_density=np.zeros((60, 80), dtype=np.float32), name="lean"
    )
    none = dataclasses.replace(contents.momenta[0], orders={})
    write_run(tmp_path, dataclasses.replace(contents, pictures={"lean": lean, "a_later": lean}, momenta=(none,)))
    again = read_run(tmp_path)
    assert list(again.pictures) == ["lean", "a_later"]  # in their order
    assert again.pictures["lean"].optical_density.dtype == np.float32
    assert again.momenta[0].orders == {}


def test_every_dimension_has_a_scale_and_every_dataset_a_unit_and_a_name(folder: Path) -> None:
    seen = []

    def look(name: str, item: h5py.Group | h5py.Dataset) -> None:
        if not isinstance(item, h5py.Dataset):
            return
        seen.append(name)
        assert item.attrs["units"] and item.attrs["long_name"], name
        for dim in item.dims if not item.is_scale else ():
            assert len(dim) == 1, f"a dimension of {name} has no scale"

    with h5py.File(folder / "run.h5") as file:
        file.visititems(look)
    assert {"track/width", "track/direction", "columns/y/column_density", "final/psi_real", "notices/text"} <= set(seen)


@pytest.mark.parametrize("group", GROUPS)
def test_xarray_opens_each_group(folder: Path, group: str) -> None:
    with xarray.open_dataset(folder / "run.h5", engine="h5netcdf", group=group) as seen:
        if group == "track":
            assert seen.width.dims == ("time", "direction")
            # the clock of the flight ends 20 ms after the release: seconds, not a date
            assert float(seen.flight_time[-1]) == pytest.approx(0.02, rel=1e-12)
            assert list(seen.direction.values) == ["x", "y", "z"]
            assert seen.width.sel(direction="y").attrs["units"] == "m"
        elif group.startswith("columns"):
            view = group[-1]
            right, up = VIEWS[view]
            assert set(seen.coords) == {"time", "row", "column", f"{right}_lab", f"{up}_lab"}
            assert seen[f"{up}_lab"].dims == ("time", "row") and seen[f"{right}_lab"].dims == ("time", "column")
            last = seen.isel(time=-1)
            whole = last.column_density.astype(float)
            pixel = float(last[f"{right}_lab"].diff("column")[0] * last[f"{up}_lab"].diff("row")[0])
            # 1e5 atoms; the raster ends at six sigma, where erf leaves 2e-9
            assert float(whole.sum() * pixel) == pytest.approx(1e5, rel=1e-6)
            # the cloud's middle is where it fell to: -g t^2/2, and kicked by 4 mm/s
            middle = {"x": 80e-6, "y": 0.0, "z": -0.5 * constants.g * 0.02**2}
            for side in (right, up):
                assert float((whole * last[f"{side}_lab"]).sum() / whole.sum()) == pytest.approx(
                    middle[side], abs=1e-12
                )
        elif group.startswith("pictures"):
            assert seen.optical_density.dims == ("y", "x") and seen.attrs["right"] == "x" and seen.attrs["up"] == "z"
            whole = float(seen.optical_density.sum() * seen.attrs["atoms_per_od"])
            assert whole == pytest.approx(1e5, rel=1e-6)  # all atoms are on it
            # the camera is on the cloud: kicked by 4 mm/s and fallen for 20 ms
            assert float(seen.x.mean()) == pytest.approx(80e-6, rel=1e-9)
            assert float(seen.y.mean()) == pytest.approx(-0.5 * constants.g * 0.02**2, rel=1e-9)
        elif group.startswith("momentum"):
            assert seen.density.dims == ("wave_number",) and seen.attrs["direction"] == "z"
            assert float(seen.density.integrate("wave_number")) == pytest.approx(1.0, rel=1e-9)
            assert dict(zip(seen.order.values.tolist(), seen.share.values.tolist(), strict=True)) == {
                -1: 0.2, 0: 0.7, 1: 0.1
            }  # fmt: skip
            # the mean momentum is 2 (0.1 - 0.2) recoils and what gravity gave
            mean = float((seen.density * seen.wave_number).integrate("wave_number"))
            fallen = invented_run.MASS * seen.attrs["fallen_velocity"] / constants.hbar
            assert mean == pytest.approx(-0.2 * seen.attrs["recoil_wave_number"] + fallen, rel=1e-9)
        elif group.startswith("flow"):
            assert seen.velocity_right.dims == ("y", "x") and seen.attrs["up"] == "z"
            # v = x w^2 t/(1 + (w t)^2) for the free Gaussian (textbook), counted from the cloud's middle
            w, t = 2 * math.pi * 20.0, 0.02
            here = seen.isel(x=15, y=12)
            flows = float(here.x - seen.x.mean()) * w**2 * t / (1 + (w * t) ** 2)
            assert float(here.velocity_right) == pytest.approx(flows, rel=1e-9)
            assert bool(seen.velocity_up.isel(x=0, y=0).isnull())
        elif group == "final":
            assert seen.psi_real.dims == ("xi_x", "xi_yz") and float(seen.centre.sel(direction="z")) == -2e-3
        elif group == "ground":
            assert seen.attrs["chemical_potential_hz"] == pytest.approx(130.0)  # half of 20 + 120 + 120 Hz
            assert "healing_length_um" not in seen.attrs
        elif group == "plan":
            assert json.loads(str(seen.resolved.values)) == invented_run.plan()
            assert str(seen.text.values) == 'title = "Invented µ"\n'
        elif group == "notices":
            assert list(seen.code.values) == ["ideal gas"]
        else:
            assert json.loads(str(seen.summary.values))["status"] == "complete"


def test_a_run_without_sequence_track_or_pictures_is_kept_too(tmp_path: Path) -> None:
    only = dataclasses.replace(invented_run.summary(None), warnings=())
    write_run(tmp_path, Contents("", {}, only))
    again = read_run(tmp_path)
    assert again.summary == only and again.summary.end is None
    assert again.track is None and again.final is None and again.ground is None and again.columns == {}
    assert again.pictures == {} and again.momenta == () and again.flow == {}
    with xarray.open_dataset(tmp_path / "run.h5", engine="h5netcdf", group="notices") as seen:
        assert seen.sizes == {"notice": 0}


def test_one_sample_and_no_picture_are_kept_too(tmp_path: Path) -> None:
    one = Track.of(np.zeros(1), np.zeros(1), {"width": np.ones((1, 3))})
    none = ColumnSeries("y", np.zeros(0), np.zeros((0, 4)), np.zeros((0, 4)), np.zeros((0, 4, 4), np.float32))
    write_run(tmp_path, Contents("", {}, invented_run.summary(None), one, {"y": none}))
    again = read_run(tmp_path)
    assert len(again.track) == 1 and len(again.columns["y"]) == 0


def test_the_file_says_which_wave_function_it_holds() -> None:
    axes = invented_run.wave().axes
    with pytest.raises(ValueError, match="axes"):
        WaveFunction(0.0, np.zeros((3, 8), complex), axes)
    with pytest.raises(ValueError, match="along y"):
        ColumnSeries("y", np.zeros(1), np.zeros((1, 4)), np.zeros((1, 5)), np.zeros((1, 5, 4)))


def test_the_summary_needs_neither_h5py_nor_matplotlib() -> None:
    script = "import sys, trapsim.record.summary, trapsim.show.text; print([n for n in sys.modules if n in sys.argv])"
    done = subprocess.run(
        [sys.executable, "-c", script, "h5py", "matplotlib", "json"],
        capture_output=True, text=True, env={**os.environ, "PYTHONPATH": str(Path(__file__).parents[1])},
    )  # fmt: skip
    assert done.stdout.strip() == "['json']", done.stderr


def test_a_moment_without_law_says_so() -> None:
    kept = invented_run.track()
    plain = dataclasses.replace(kept, series={n: s for n, s in kept.series.items() if not n.startswith("law")})
    moment = moment_of(plain, -1, mass=invented_run.MASS)
    assert isinstance(moment, Moment) and moment.law is None and moment.as_dict()["law"] is None
