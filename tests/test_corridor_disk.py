"""What the disk can do to a run: be full, lose bytes, be shared. Nothing that was finished is lost."""

from __future__ import annotations

import errno
import json
import math
import subprocess
import sys
from pathlib import Path

import pytest

from broken.folders import agree
from broken.table import GOOD
from trapsim.app import _Stopper, main
from trapsim.corridor.folder import locked
from trapsim.record import files
from trapsim.record.files import read_checkpoint, write_checkpoint


@pytest.fixture
def run_here(tmp_path, monkeypatch, capsys):
    """Run the good plan into the folder `r`; returns (exit code, standard error)."""
    monkeypatch.chdir(tmp_path)
    (tmp_path / "push.toml").write_text(GOOD)

    def asked(*options: str) -> tuple[int, str]:
        capsys.readouterr()
        code = main(["run", "push.toml", "--out", "r", "--quiet", *options])
        out, err = capsys.readouterr()
        assert out == ""
        return code, err

    return asked


def full_disk(monkeypatch, name: str) -> None:
    """Let the disk be full for files of this name."""
    sync = files._sync

    def refuse(path: Path) -> None:
        if path.name.startswith(name):
            raise OSError(errno.ENOSPC, "No space left on device")
        sync(path)

    monkeypatch.setattr(files, "_sync", refuse)


def test_a_disk_full_from_the_start_leaves_nothing(run_here, tmp_path, monkeypatch):
    full_disk(monkeypatch, "checkpoint")
    code, err = run_here()
    assert code == 4 and "r/checkpoint.npz: got No space left" in err and "-> free some space" in err
    assert [p.name for p in tmp_path.iterdir()] == ["push.toml"]


@pytest.mark.slow
def test_a_disk_full_at_the_end_costs_nothing(run_here, tmp_path, monkeypatch):
    for name in ("run.h5", "track.csv", "summary.json"):
        with monkeypatch.context() as patch:
            full_disk(patch, name)
            code, err = run_here("--no-figures")
            assert code == 4 and f"r/{name}: got No space left" in err
            assert not list((tmp_path / "r").glob("*.part"))
    with monkeypatch.context() as patch:  # it goes on from the checkpoint, with no second ground state
        patch.setattr("trapsim.corridor.ground.relax", None)
        assert run_here("--no-figures") == (0, "")
    assert main(["run", "push.toml", "--out", "whole", "--quiet", "--no-figures"]) == 0
    agree(tmp_path / "whole", tmp_path / "r")


@pytest.mark.slow
def test_a_full_disk_leaves_the_old_result_as_it_was(run_here, tmp_path, monkeypatch, capsys):
    assert run_here()[0] == 0
    before = {p: p.read_bytes() for p in (tmp_path / "r").rglob("*") if p.is_file()}
    with monkeypatch.context() as patch:
        full_disk(patch, "checkpoint")
        code, err = run_here("--force", "--set", "atoms.number=3e4")
        assert code == 4 and "No space left" in err
    assert {p: p.read_bytes() for p in (tmp_path / "r").rglob("*") if p.is_file()} == before
    assert main(["show", "r", "--no-figures"]) == 0
    assert run_here("--no-figures") == (0, "")


@pytest.mark.slow
def test_figures_that_cannot_be_written_cost_no_result(run_here, tmp_path, monkeypatch):
    with monkeypatch.context() as patch:
        full_disk(patch, "flight.png")
        code, err = run_here()
        assert code == 4 and "figures/flight.png" in err
    monkeypatch.setattr("trapsim.corridor.ground.relax", None)
    assert run_here() == (0, "")
    assert (tmp_path / "r" / "figures" / "flight.png").exists()


# checkpoints that are no good


@pytest.fixture
def interrupted(run_here, tmp_path, monkeypatch):
    """A run that was left in the middle: its checkpoint."""
    with monkeypatch.context() as patch:
        patch.setattr(_Stopper, "asked", lambda self: True)
        code, err = run_here()
    assert code == 130 and "interrupted at" in err
    return tmp_path / "r" / "checkpoint.npz"


DAMAGE = {
    "cut short": lambda raw: raw[: len(raw) // 2],
    "empty": lambda raw: b"",
    "noise": lambda raw: bytes(range(256)) * 40,
    "a few bytes changed": lambda raw: raw[:-900] + bytes(b ^ 255 for b in raw[-900:-880]) + raw[-880:],
}


@pytest.mark.parametrize("damage", DAMAGE.values(), ids=DAMAGE)
def test_a_damaged_checkpoint_is_named_and_there_is_a_way_out(run_here, interrupted, damage):
    interrupted.write_bytes(damage(interrupted.read_bytes()))
    code, err = run_here()
    assert code == 4 and err.startswith("trapsim: r/checkpoint.npz") and "damaged" in err
    assert "-> " in err and "Traceback" not in err
    assert run_here("--force", "--no-figures") == (0, "")


@pytest.mark.parametrize("missing", ["phi", "frame_b", "edge", "recorder_rows", "recorder_x_rows"])
def test_a_checkpoint_with_something_missing_is_named(run_here, interrupted, missing):
    arrays, told = read_checkpoint(interrupted)
    del arrays[missing]
    write_checkpoint(interrupted, arrays, told)
    code, err = run_here()
    assert code == 4 and err.startswith("trapsim: r/checkpoint.npz") and "--force" in err and "damaged" in err


@pytest.mark.parametrize("change", [{"layout": 0}, {"march_key": "0123456789ab"}], ids=["layout", "plan"])
def test_a_checkpoint_of_another_run_is_not_taken_up(run_here, interrupted, change):
    arrays, told = read_checkpoint(interrupted)
    write_checkpoint(interrupted, arrays, told | change)
    code, err = run_here()
    assert code == 4 and "another plan" in err and "--force" in err
    assert run_here("--force", "--no-figures") == (0, "")


def test_an_interrupted_run_shows_nothing_yet_and_says_why(interrupted, capsys):
    assert main(["show", "r"]) == 4
    assert "r/run.h5" in capsys.readouterr().err


def test_an_interrupted_run_goes_on_with_other_threads_and_title(run_here, interrupted, tmp_path, monkeypatch):
    monkeypatch.setattr("trapsim.corridor.ground.relax", None)
    assert run_here("--no-figures", "--threads", "2", "--set", "title=renamed") == (0, "")
    assert json.loads((tmp_path / "r" / "summary.json").read_text())["title"] == "renamed"


def test_a_folder_in_which_another_run_is_at_work_is_refused(run_here, tmp_path):
    with locked(tmp_path / "r"):
        code, err = run_here()
        assert code == 4 and err.startswith("trapsim: r: got another run is at work in it") and "-> wait for it" in err
    assert run_here("--no-figures") == (0, "")


@pytest.mark.slow
def test_a_lock_is_no_hindrance_after_its_owner_died(run_here, tmp_path):
    code = "import os; from pathlib import Path; from trapsim.corridor.folder import locked\n"
    code += "with locked(Path('r')): os._exit(9)"
    assert subprocess.run([sys.executable, "-c", code], cwd=tmp_path, check=False).returncode == 9
    assert (tmp_path / "r" / ".lock").exists()
    assert run_here("--no-figures") == (0, "")
    assert math.isfinite(json.loads((tmp_path / "r" / "summary.json").read_text())["end"]["width_um"][0])
