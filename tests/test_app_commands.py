"""The commands as a user meets them: what they say, what they write, and where."""

from __future__ import annotations

import json
import math
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from scipy import constants

from broken.table import GOOD
from trapsim.app import main

#: of Rb-87, kg: 86.909180531 u, AME2020 (value from memory)
MASS = 86.909180531 * constants.atomic_mass
#: g / (2 pi f)^2 along z, um: the sag of a cloud in a trap of 90 Hz
SAG = -9.80665 / (2 * math.pi * 90) ** 2 * 1e6
FIGURES = {f"figures/{name}.png" for name in ("flight", "columns", "strip", "energies", "flow")} | {"page.html"}
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

    monkeypatch.setattr("trapsim.corridor.ground.relax", never)
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


@pytest.mark.slow
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

    monkeypatch.setattr("trapsim.corridor.ground.relax", never)
    code, out, _ = ask("run", "push.toml", "--no-figures", "--out", "r")
    assert code == 0 and out.startswith("r already holds this plan's result\n\nInvented")
    assert {p.name: p.stat().st_mtime_ns for p in (tmp_path / "r").iterdir()} == before
    # what enters no key makes no other run
    for harmless in ("title=Something else", "numerics.threads=2", "numerics.memory=1 GB"):
        assert "already holds" in ask("run", "push.toml", "--no-figures", "--out", "r", "--set", harmless)[1]
    assert ask("run", "push.toml", "--no-figures", "--out", "r", "--force")[0] == 1  # the trap works


@pytest.mark.slow
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


@pytest.mark.slow
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


def never_nan(word: str) -> None:
    raise AssertionError(f"{word} is not JSON")


UNIFORM = ('numerics.extent=["40 um", "auto", "auto"]', "trap.dipole.frequency[0]=0 Hz")


def test_figures_that_do_not_apply_are_null(ask, tmp_path):
    def told(*changes: str) -> dict:
        argv = (f"--set={change}" for change in changes)
        assert ask("run", "push.toml", "--out", "r", "--quiet", "--no-figures", "--force", *argv)[0] == 0
        return json.loads((tmp_path / "r" / "summary.json").read_text(), parse_constant=never_nan)

    uniform = told(*UNIFORM)
    for moment in (uniform["end"], uniform["ground"]):
        assert [width is None for width in moment["width_um"]] == [True, False, False]
    assert uniform["end"]["law"]["width_um"][0] is None and uniform["end"]["aspect_ratio"]["xy"] is None
    attractive = told("atoms.scattering_length=-1 a0", "atoms.number=1e3")
    assert attractive["end"]["law"] is None and attractive["ground"]["healing_length_um"] is None
    ideal = told("atoms.scattering_length=0 a0")
    assert ideal["ground"]["healing_length_um"] is None and ideal["ground"]["thomas_fermi_radius_um"] == 3 * [None]


# show


@pytest.mark.slow
def test_show_tells_a_result_from_its_folder_alone(ask, tmp_path):
    assert ask("run", "push.toml", "--out", "r", "--quiet", "--no-figures")[0] == 0
    (tmp_path / "copy").mkdir()
    (tmp_path / "r" / "run.h5").rename(tmp_path / "copy" / "run.h5")
    code, out, err = ask("show", "copy")
    assert (code, err) == (0, "")
    assert out.startswith("Invented: a small round cloud") and "expansion rate (mm/s)" in out
    assert files(tmp_path / "copy") == {"run.h5"} | FIGURES
    assert f"z {SAG:.2f}" in out
    code, again, _ = ask("show", "copy/run.h5", "--no-figures")
    assert code == 0 and again == out.partition("\n  copy/figures")[0] + "\n"


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


def test_check_says_where_the_scaling_law_does_not_hold(ask, tmp_path):
    light = '\n[trap.light]\nkind = "lattice"\nwavelength = "1064 nm"\ndepth = "5 Er"\nstrength = 0\n'
    flash = '\n[[sequence]]\nstage = "pulse"\nduration = "10 us"\nto = { "light.strength" = 1 }\n'
    for text, told in ((GOOD, False), (GOOD.replace("\n[[sequence]]", light + "\n[[sequence]]", 1) + flash, True)):
        (tmp_path / "plan.toml").write_text(text)
        _, out, _ = ask("check", "plan.toml")
        assert ("-: the scaling law does not hold" in out) is told
        assert "free" not in out
