"""The commands as a user meets them: what they say, what they write, and where."""

from __future__ import annotations

import csv
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
from broken.table import GOOD
from scipy import constants

from trapsim.app import main

#: of Rb-87, kg: 86.909180531 u, AME2020 (value from memory)
MASS = 86.909180531 * constants.atomic_mass
#: g / (2 pi f)^2 along z, um: the sag of a cloud in a trap of 90 Hz
SAG = -9.80665 / (2 * math.pi * 90) ** 2 * 1e6
FIGURES = {"figures/flight.png", "figures/columns.png", "figures/strip.png"}
RESULT = {".lock", "plan.json", "run.h5", "summary.json", "track.csv"}


@pytest.fixture
def ask(capsys, tmp_path, monkeypatch):
    """Ask trapsim in this process, from a folder that holds one good plan; returns (exit code, out, err)."""
    monkeypatch.chdir(tmp_path)
    (tmp_path / "push.toml").write_text(GOOD)

    def asked(*argv: str) -> tuple[int, str, str]:
        capsys.readouterr()
        return main(argv), *capsys.readouterr()

    return asked


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


# check


def test_check_prints_derived_numbers_and_leaves_nothing(ask, tmp_path):
    code, out, err = ask("check", "push.toml")
    assert (code, err) == (0, "")
    assert files(tmp_path) == {"push.toml"}
    # Thomas-Fermi: mu = (hbar w/2) (15 N a/a_ho)^(2/5), R_j = sqrt(2 mu/m)/w_j.
    # Source: F. Dalfovo et al., Rev. Mod. Phys. 71, 463 (1999)
    mass, a = MASS, 100.4 * constants.physical_constants["Bohr radius"][0]
    f = np.array([60.0, 90.0, 90.0])
    w = 2 * math.pi * f
    mean = w.prod() ** (1 / 3)
    mu = constants.hbar * mean / 2 * (15 * 1e4 * a / math.sqrt(constants.hbar / (mass * mean))) ** 0.4
    radius = 1e6 * np.sqrt(2 * mu / mass) / w
    shown = " ".join(out.split())
    assert f"chemical potential / h {mu / constants.h:.1f} Hz" in shown
    assert f"radius x, y, z {radius[0]:.3f}, {radius[1]:.3f}, {radius[2]:.3f} um" in shown
    assert f"resting place x, y, z 0, 0, {SAG:.2f} um" in shown
    # free fall over 5 ms: g t^2/2 = 122.6 um
    assert f"0, 0, {-0.5 * 9.80665 * 0.005**2 * 1e6:.1f}" in shown
    assert f"N a / a_ho = {1e4 * a / math.sqrt(constants.hbar / (mass * mean)):.4g}" in shown


def test_check_computes_no_ground_state_and_no_march(ask, monkeypatch):
    def never(*given, **named):
        raise AssertionError("check computes nothing long")

    monkeypatch.setattr("trapsim.corridor.run.relax", never)
    monkeypatch.setattr("trapsim.corridor.run.march", never)
    assert ask("check", "push.toml")[0] == 0
    assert ask("run", "push.toml")[0] == 1  # the trap works


def test_check_shows_what_a_change_does(ask):
    before, after = ask("check", "push.toml"), ask("check", "push.toml", "--set", "atoms.scattering_length=0 a0")
    assert "Thomas-Fermi" in before[1] and "ideal-gas scaling law" in after[1]
    # an ideal gas rests with sqrt(hbar / 2 m w), and after the release grows with sqrt(1 + (w t)^2): a free Gaussian
    w = 2 * math.pi * np.array([60.0, 90.0, 90.0])
    width = 1e6 * np.sqrt(constants.hbar / (2 * MASS * w) * (1 + (w * 0.005) ** 2))
    assert f"release 6.000 ms {width[0]:.3f}, {width[1]:.3f}, {width[2]:.3f}" in " ".join(after[1].split())


# run


def test_run_writes_a_folder_named_after_plan_and_key(ask, tmp_path):
    code, out, err = ask("run", "push.toml", "--no-figures")
    assert (code, err) == (0, "")
    (folder,) = (tmp_path / "results").iterdir()
    told = json.loads((folder / "summary.json").read_text())
    assert folder.name == f"push-{told['key']}" and len(told["key"]) == 12
    assert files(folder) == RESULT
    assert out.startswith("Invented: a small round cloud, pushed and released\n")
    assert out.rstrip().endswith(f"Results are in\n  results/{folder.name}")
    assert "already" not in out


def test_run_draws_figures_that_are_pictures(finished):
    assert files(finished) == RESULT | FIGURES
    for name in FIGURES:
        raw = (finished / name).read_bytes()
        # PNG signature, ISO/IEC 15948, 5.2
        assert raw[:8] == b"\x89PNG\r\n\x1a\n" and len(raw) > 10000


def test_json_is_one_document_on_standard_output(ask, tmp_path):
    code, out, err = ask("run", "push.toml", "--json", "--out", "r")
    told = json.loads(out)
    assert code == 0 and told["status"] == "complete"
    assert told == json.loads((tmp_path / "r" / "summary.json").read_text())
    assert "Results are in" in err and "r/figures/flight.png" in err
    code, again, err = ask("run", "push.toml", "--json", "--out", "r", "--no-figures")
    assert json.loads(again) == told and "already holds" in err
    assert json.loads(ask("show", "r", "--json", "--no-figures")[1]) == told
    assert ask("run", "push.toml", "--json", "--quiet", "--no-figures", "--out", "r") == (0, out, "")


def test_quiet_says_nothing(ask, tmp_path):
    assert ask("run", "push.toml", "--quiet", "--out", "r") == (0, "", "")
    assert files(tmp_path / "r") == RESULT | FIGURES
    assert ask("run", "push.toml", "--quiet", "--out", "r") == (0, "", "")


def test_running_a_finished_plan_again_says_so_and_computes_nothing(ask, tmp_path, monkeypatch):
    assert ask("run", "push.toml", "--no-figures", "--out", "r")[0] == 0
    before = {p.name: p.stat().st_mtime_ns for p in (tmp_path / "r").iterdir()}

    def never(*given, **named):
        raise AssertionError("computed again")

    monkeypatch.setattr("trapsim.corridor.run.relax", never)
    code, out, _ = ask("run", "push.toml", "--no-figures", "--out", "r")
    assert code == 0 and out.startswith("r already holds this plan's result\n\nInvented")
    assert {p.name: p.stat().st_mtime_ns for p in (tmp_path / "r").iterdir()} == before
    # what enters no key makes no other run
    for harmless in ("title=Something else", "numerics.threads=2", "numerics.memory=1 GB"):
        assert "already holds" in ask("run", "push.toml", "--no-figures", "--out", "r", "--set", harmless)[1]
    assert ask("run", "push.toml", "--no-figures", "--out", "r", "--force")[0] == 1  # the trap works


def test_force_computes_anew_and_clears_what_was_there(ask, tmp_path):
    assert ask("run", "push.toml", "--quiet", "--out", "r")[0] == 0
    (tmp_path / "r" / "notes.txt").write_text("mine")
    code, out, _ = ask("run", "push.toml", "--set", "atoms.number=2e4", "--no-figures", "--out", "r", "--force")
    assert code == 0 and "already" not in out
    assert files(tmp_path / "r") == RESULT | {"notes.txt"}
    assert json.loads((tmp_path / "r" / "summary.json").read_text())["end"]["atoms"] == pytest.approx(2e4, rel=1e-6)


def test_set_changes_the_run_and_its_folder(ask, tmp_path):
    for number in ("1e4", "3e4"):
        assert ask("run", "push.toml", "--set", f"atoms.number={number}", "--quiet", "--no-figures")[0] == 0
    told = [json.loads((p / "summary.json").read_text()) for p in (tmp_path / "results").iterdir()]
    assert sorted(round(one["end"]["atoms"]) for one in told) == [10000, 30000]
    assert len({one["key"] for one in told}) == 2


def test_a_plan_without_a_sequence_stops_after_the_ground_state(ask, tmp_path):
    (tmp_path / "still.toml").write_text(GOOD.partition("[[sequence]]")[0] + '[numerics]\naccuracy = "draft"\n')
    assert ask("run", "still.toml", "--out", "r", "--quiet")[0] == 0
    told = json.loads((tmp_path / "r" / "summary.json").read_text())
    assert (told["status"], told["end"], told["stages"]) == ("complete", None, [])
    assert told["ground"]["chemical_potential_hz"] > 0


@pytest.mark.slow
def test_odd_titles_and_names_are_no_trouble(ask, tmp_path):
    for title in ("Wölkchen µ ☁", "cost $5 \\\\frac{ $ x_", "a\\u0000b\\nc\\td", "x" * 5000, ""):
        argv = ("run", "push.toml", "--set", f'title="{title}"', "--out", "r", "--quiet", "--force")
        assert ask(*argv)[0] == 0
    assert json.loads((tmp_path / "r" / "summary.json").read_text())["title"] == "push"
    strange = os.fsdecode(b"\xffname \xc3\xa4.toml")
    (tmp_path / strange).write_text(GOOD.partition("\n")[2])
    assert ask("run", strange, "--out", "s", "--quiet")[0] == 0
    assert json.loads((tmp_path / "s" / "summary.json").read_text())["title"] == "name ä"


# show


def test_show_tells_a_result_from_its_folder_alone(ask, finished, tmp_path):
    (tmp_path / "copy").mkdir()
    (tmp_path / "copy" / "run.h5").write_bytes((finished / "run.h5").read_bytes())
    code, out, err = ask("show", "copy")
    assert (code, err) == (0, "")
    assert out.startswith("Invented: a small round cloud") and "expansion rate (mm/s)" in out
    assert files(tmp_path / "copy") == {"run.h5"} | FIGURES
    assert f"z {SAG:.2f}" in out


# keys


def test_keys_prints_the_reference(ask):
    code, whole, err = ask("keys")
    assert (code, err) == (0, "") and "[trap.NAME]" in whole and 'stage = "release"' in whole
    code, part, err = ask("keys", "gravity")
    assert code == 0 and "direction" in part and "harmonic" not in part and part.strip() in whole


def test_keys_prints_a_schema_that_editors_can_read(ask):
    code, out, err = ask("keys", "--schema")
    schema = json.loads(out)
    assert (code, err) == (0, "") and schema["type"] == "object"
    assert {"atoms", "trap", "sequence", "gravity", "numerics", "track"} <= set(schema["properties"])


# the result folder

TRIPLES = "width_um expansion_rate_mm_per_s centre_um velocity_mm_per_s velocity_spread_mm_per_s expansion_energy_nk"
MOMENT = {
    "time_ms", "flight_ms", "atoms", *TRIPLES.split(), "internal_kinetic_nk", "centre_kinetic_nk", "trap_nk",
    "interaction_nk", "aspect_ratio", "law",
}  # fmt: skip
GROUND = {
    "origin_um", "chemical_potential_hz", "energy_hz", "kinetic_hz", "trap_hz", "interaction_hz", "width_um",
    "thomas_fermi_radius_um", "peak_density_per_um3", "healing_length_um", "gas_parameter", "residual", "virial",
}  # fmt: skip
SUMMARY = {
    "title", "status", "key", "march_key", "version", "ground", "stages", "end", "numerics", "warnings",
}  # fmt: skip
NUMERICS = {
    "axes", "points", "legs", "ground", "march", "seconds", "norm_drift", "energy_drift", "continuity", "error",
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
    assert set(told["numerics"]["march"]) == {"steps", "pairs", "seconds"}
    assert set(told["numerics"]["error"]) == {"width_relative", "rate_relative", "centre_um"}
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


# what is loaded


def loaded_by(code: str, folder: Path) -> set[str]:
    """The libraries that a fresh Python has loaded after some code."""
    tell = "import sys; print('loaded', *{name.partition('.')[0] for name in sys.modules}, file=sys.stderr)"
    done = subprocess.run([sys.executable, "-c", f"{code}\n{tell}"], cwd=folder, capture_output=True, text=True,
                          timeout=120, check=True)  # fmt: skip
    return set(done.stderr.rpartition("loaded")[2].split())


def test_importing_the_package_and_checking_a_plan_load_no_heavy_library(tmp_path):
    (tmp_path / "push.toml").write_text(GOOD)
    heavy = {"matplotlib", "h5py", "dask", "tqdm"}
    bare = loaded_by("import trapsim", tmp_path)
    assert not bare & (heavy | {"numpy", "scipy", "pint", "pyfftw"})
    checked = loaded_by("from trapsim.app import main; main(['check', 'push.toml'])", tmp_path)
    assert "pint" in checked and not checked & heavy
    told = loaded_by("import trapsim.app; trapsim.app.main(['keys'])", tmp_path)
    assert not told & (heavy | {"pyfftw"})
    ran = loaded_by("from trapsim.app import main; main(['run', 'push.toml', '--quiet', '--no-figures'])", tmp_path)
    assert "h5py" in ran and "matplotlib" not in ran
