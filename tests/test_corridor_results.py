"""The result folder as a stranger meets it: names, units, figures, and xarray on every group of run.h5."""

from __future__ import annotations

import csv
import json
import math
from pathlib import Path

import h5py
import numpy as np
import pytest
import xarray

from broken.table import GOOD
from trapsim.app import main

#: g / (2 pi f)^2 along z, um: the sag of a cloud in a trap of 90 Hz
SAG = -9.80665 / (2 * math.pi * 90) ** 2 * 1e6


@pytest.fixture(scope="session")
def finished(tmp_path_factory) -> Path:
    """The result folder of the good plan, with figures; to be read only."""
    folder = tmp_path_factory.mktemp("finished")
    plan = folder / "push.toml"
    plan.write_text(GOOD)
    assert main(["run", str(plan), "--out", str(folder / "result"), "--quiet"]) == 0
    return folder / "result"


def files(folder: Path) -> set[str]:
    return {p.relative_to(folder).as_posix() for p in folder.rglob("*") if p.is_file()}


FIGURES = {f"figures/{name}.png" for name in ("flight", "columns", "strip", "energies", "flow")}


def test_run_draws_figures_that_are_pictures(finished):
    assert files(finished) == {".lock", "plan.json", "run.h5", "summary.json", "track.csv"} | FIGURES | {"page.html"}
    for name in FIGURES:
        raw = (finished / name).read_bytes()
        # PNG signature, ISO/IEC 15948, 5.2
        assert raw[:8] == b"\x89PNG\r\n\x1a\n" and len(raw) > 10000


TRIPLES = "width_um expansion_rate_mm_per_s centre_um velocity_mm_per_s velocity_spread_mm_per_s expansion_energy_nk"
MOMENT = {
    "time_ms", "flight_ms", "atoms", *TRIPLES.split(), "internal_kinetic_nk", "centre_kinetic_nk", "trap_nk",
    "interaction_nk", "aspect_ratio", "orders", "law",
}  # fmt: skip
GROUND = {
    "origin_um", "chemical_potential_hz", "energy_hz", "kinetic_hz", "trap_hz", "interaction_hz", "width_um",
    "thomas_fermi_radius_um", "peak_density_per_um3", "healing_length_um", "gas_parameter", "residual", "virial",
}  # fmt: skip
SUMMARY = {
    "title", "status", "key", "march_key", "version", "ground", "stages", "end", "pictures", "numerics", "warnings",
}  # fmt: skip
NUMERICS = {
    "axes", "points", "legs", "ground", "march", "seconds", "norm_drift", "energy_drift", "continuity", "error",
    "certified",
}  # fmt: skip


def never_nan(word: str) -> None:
    raise AssertionError(f"{word} is not JSON")


def test_summary_json_has_the_names_that_were_promised_and_no_nan(finished):
    text = (finished / "summary.json").read_text()
    told = json.loads(text, parse_constant=never_nan)
    assert set(told) == SUMMARY
    assert set(told["ground"]) == GROUND
    assert [set(one) for one in told["stages"]] == 2 * [{"name", "kind", "start_ms", "duration_ms", "end"}]
    for moment in (told["end"], *(one["end"] for one in told["stages"])):
        assert set(moment) == MOMENT
        assert all(len(moment[name]) == 3 for name in TRIPLES.split())
        assert set(moment["aspect_ratio"]) == {"xy", "xz", "yz"}
        assert set(moment["law"]) == {"model", "width_um", "expansion_rate_mm_per_s"}
    assert set(told["numerics"]) == NUMERICS
    assert set(told["numerics"]["ground"]) == {"pairs", "seconds"}
    assert set(told["numerics"]["march"]) == {"steps", "pairs", "observing_pairs", "seconds"}
    assert set(told["numerics"]["error"]) == {"width_relative", "rate_relative", "centre_um", "orders"}
    assert all(set(one) == {"code", "text"} for one in told["warnings"])


def test_both_clocks_and_the_fall_are_told(finished):
    told = json.loads((finished / "summary.json").read_text())
    hold, release = told["stages"]
    assert (hold["kind"], hold["start_ms"], hold["duration_ms"], hold["end"]["time_ms"]) == ("hold", 0, 1, 1)
    assert (release["start_ms"], release["end"]["time_ms"], release["end"]["flight_ms"]) == (1, 6, 5)
    assert told["end"] == release["end"]
    # free fall from rest: g t^2/2 and g t
    assert told["end"]["centre_um"] == pytest.approx([0, 0, -0.5 * 9.80665 * 0.005**2 * 1e6], abs=1e-6)
    assert told["end"]["velocity_mm_per_s"] == pytest.approx([0, 0, -9.80665 * 5], abs=1e-6)
    assert told["ground"]["origin_um"] == pytest.approx([0, 0, SAG], abs=1e-6)


def test_track_csv_is_a_table_a_stranger_understands(finished):
    with open(finished / "track.csv", newline="") as file:
        header, *rows = list(csv.reader(file))
    assert header[:3] == ["time (ms)", "stage", "flight_time (ms)"]
    for name, unit in (("width", "um"), ("expansion_rate", "mm/s"), ("centre", "um"), ("velocity", "mm/s")):
        place = header.index(f"{name}_x ({unit})")
        assert header[place : place + 3] == [f"{name}_{d} ({unit})" for d in "xyz"]
    assert all(len(row) == len(header) for row in rows)
    assert {row[1] for row in rows} == {"hold", "release"} and (rows[0][0], rows[-1][0]) == ("0", "6")
    told = json.loads((finished / "summary.json").read_text())
    last = dict(zip(header, rows[-1], strict=True))
    assert [float(last[f"width_{d} (um)"]) for d in "xyz"] == pytest.approx(told["end"]["width_um"], rel=1e-11)
    for row in rows:
        for cell in (*row[:1], *row[2:]):
            assert cell == "" or math.isfinite(float(cell))


def groups(path: Path) -> list[str]:
    """Every group of a file that holds something."""
    found = ["/"]
    with h5py.File(path) as file:
        file.visititems(lambda name, one: found.append(name) if isinstance(one, h5py.Group) else None)
    return found


def test_run_h5_opens_with_xarray_group_by_group(finished):
    path = finished / "run.h5"
    names = groups(path)
    assert {"plan", "ground", "track", "columns/x", "columns/y", "columns/z", "final", "notices"} <= set(names)
    for name in names:
        with xarray.open_dataset(path, group=name, engine="h5netcdf") as data:
            for one in data.variables.values():
                assert "units" in one.attrs and "long_name" in one.attrs, (name, one)
                assert not any(dim.startswith("phony") for dim in one.dims)
            assert set(data.sizes) <= set(data.variables), f"a dimension of {name} has no scale"
    with h5py.File(path) as file:
        assert file["plan/text"].asstr()[()] == GOOD
        assert json.loads(file["plan/resolved"].asstr()[()])["atoms"]["number"] == 1e4
        assert json.loads(file["summary"].asstr()[()]) == json.loads((finished / "summary.json").read_text())


def test_atoms_on_every_column_add_up_to_the_number(finished):
    path = finished / "run.h5"
    for view in "xyz":
        with xarray.open_dataset(path, group=f"columns/{view}", engine="h5netcdf") as data:
            density = data["column_density"].astype(float)
            assert density.dims == ("time", "row", "column") and density.shape[1:] == (128, 128)
            assert density.attrs["units"] == "m^-2"
            right, up = (data[f"{data.attrs[side]}_lab"].values for side in ("right", "up"))
            cell = np.diff(right, axis=1)[:, 0] * np.diff(up, axis=1)[:, 0]
            # the raster is a plain rectangle rule over a smooth cloud: better than its float32
            assert density.sum(("row", "column")).values * cell == pytest.approx(1e4, rel=2e-3)
            assert len(data["time"]) > 10 and data["time"].values[-1] == pytest.approx(6e-3)
