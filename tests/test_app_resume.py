"""A run that is killed, interrupted or refused by the disk goes on later as if nothing had happened."""

from __future__ import annotations

import csv
import errno
import io
import json
import math
import os
import pty
import signal
import subprocess
import sys
import termios
import time
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path

import pytest
from broken.table import GOOD

from trapsim.app import _Bar, _Stopper, main
from trapsim.corridor.folder import locked
from trapsim.record import files
from trapsim.record.files import read_checkpoint, write_checkpoint

#: some seconds of small steps in a trap, then a flight
LONG = """\
title = "Invented: a long hold"
[atoms]
species = "Rb-87"
number = "2e4"
[trap.dipole]
kind = "harmonic"
frequency = ["60 Hz", "90 Hz", "130 Hz"]
[gravity]
direction = "-z"
[numerics]
accuracy = "draft"
axes = "full"
threads = 1
[[sequence]]
stage = "kick"
velocity = ["0 mm/s", "1 mm/s", "0 mm/s"]
[[sequence]]
stage = "ramp"
duration = "20 ms"
to = { "dipole.frequency" = ["50 Hz", "90 Hz", "130 Hz"] }
[[sequence]]
stage = "hold"
duration = "300 ms"
[[sequence]]
stage = "release"
duration = "10 ms"
pictures = ["3 ms"]
"""
COMMAND = [sys.executable, "-m", "trapsim.app"]
#: the same, with checkpoints ten times as often as a user gets them
EAGER = [sys.executable, "-c", "import sys; from trapsim.corridor import run; run.FIRST = 0.2; "
         "from trapsim.app import main; sys.exit(main(sys.argv[1:]))"]  # fmt: skip


def numbers(folder: Path) -> dict[str, object]:
    """All figures of a summary, by path, but what the clock on the wall says."""
    flat: dict[str, object] = {}

    def walk(value: object, path: str) -> None:
        if isinstance(value, dict):
            for key, inner in value.items():
                walk(inner, f"{path}.{key}")
        elif isinstance(value, list):
            for i, inner in enumerate(value):
                walk(inner, f"{path}[{i}]")
        elif not path.endswith("seconds"):
            flat[path] = value

    walk(json.loads((folder / "summary.json").read_text()), "")
    return flat


def table(folder: Path) -> list[list[str]]:
    with open(folder / "track.csv", newline="") as file:
        return list(csv.reader(file))


def agree(one: Path, other: Path, tolerance: float = 1e-10) -> None:
    """Two result folders that tell the same, to a relative tolerance and the same in lab units."""
    a, b = numbers(one), numbers(other)
    assert a.keys() == b.keys() and a[".status"] == "complete"
    for path, value in a.items():
        if isinstance(value, float):
            assert b[path] == pytest.approx(value, rel=tolerance, abs=tolerance), path
        else:
            assert b[path] == value, path
    rows, others = table(one), table(other)
    assert rows[0] == others[0] and len(rows) == len(others)
    for row, again in zip(rows[1:], others[1:], strict=True):
        for x, y in zip(row, again, strict=True):
            if x != y:
                assert float(y) == pytest.approx(float(x), rel=tolerance, abs=tolerance)


@contextmanager
def started(command: Sequence[str], *argv: str, cwd: Path) -> Iterator[subprocess.Popen[str]]:
    """A process that is gone when the test ends, whatever happens."""
    process = subprocess.Popen([*command, *argv], cwd=cwd, text=True, stdout=subprocess.PIPE, stderr=subprocess.PIPE)
    try:
        yield process
    finally:
        if process.poll() is None:
            process.kill()
        process.communicate()


def wait_for_checkpoints(path: Path, process: subprocess.Popen[str], count: int) -> None:
    """Wait until a checkpoint has been written so many times."""
    seen: set[int] = set()
    deadline = time.monotonic() + 60
    while len(seen) < count:
        assert process.poll() is None, "the run was over before it could be disturbed"
        assert time.monotonic() < deadline, "no checkpoint in a minute"
        if path.exists():
            seen.add(path.stat().st_mtime_ns)
        time.sleep(0.01)


@pytest.fixture(scope="module")
def undisturbed(tmp_path_factory) -> Path:
    """The folder of the long plan, run in one go."""
    folder = tmp_path_factory.mktemp("undisturbed")
    (folder / "long.toml").write_text(LONG)
    subprocess.run([*COMMAND, "run", "long.toml", "--out", "r", "--quiet", "--no-figures"], cwd=folder, check=True,
                   timeout=300)  # fmt: skip
    return folder / "r"


# from outside


@pytest.mark.slow
def test_a_killed_run_goes_on_from_its_checkpoint(undisturbed, tmp_path):
    (tmp_path / "long.toml").write_text(LONG)
    argv = ("run", "long.toml", "--out", "r", "--no-figures")
    kept = tmp_path / "r" / "checkpoint.npz"
    with started(EAGER, *argv, cwd=tmp_path) as first:
        wait_for_checkpoints(kept, first, 3)
        second = subprocess.run([*COMMAND, *argv], cwd=tmp_path, capture_output=True, text=True, timeout=60)
        assert second.returncode == 4 and "another run is at work in it" in second.stderr and second.stdout == ""
        first.send_signal(signal.SIGKILL)
        assert first.wait(60) == -signal.SIGKILL
    assert kept.exists() and not (tmp_path / "r" / "summary.json").exists()
    with started(EAGER, *argv, cwd=tmp_path) as again:  # killed once more, from where it was taken up
        wait_for_checkpoints(kept, again, 2)
        again.kill()
    done = subprocess.run([*COMMAND, *argv], cwd=tmp_path, capture_output=True, text=True, timeout=300, check=False)
    assert (done.returncode, done.stderr) == (0, "")
    assert not kept.exists()
    agree(undisturbed, tmp_path / "r")


@pytest.mark.slow
def test_signals_save_and_the_same_command_goes_on(undisturbed, tmp_path):
    (tmp_path / "long.toml").write_text(LONG)
    argv = ("run", "long.toml", "--out", "r", "--no-figures")
    kept = tmp_path / "r" / "checkpoint.npz"
    before = 0.0
    for number in (signal.SIGINT, signal.SIGTERM, signal.SIGHUP):
        with started(EAGER, *argv, cwd=tmp_path) as process:
            wait_for_checkpoints(kept, process, 2)  # the first may be an older one: after the second it marches
            process.send_signal(number)
            out, err = process.communicate(timeout=60)
        assert (process.returncode, out) == (130, ""), err
        assert "saving after this step" in err and "Traceback" not in err
        told = err.strip().splitlines()[-1]
        assert told.startswith("trapsim: interrupted at ")
        assert told.endswith("saved in r: the same command goes on from there")
        reached = float(told.split()[3])
        assert before < reached < 330
        before = reached
        assert {p.name for p in (tmp_path / "r").iterdir()} == {".lock", "plan.json", "checkpoint.npz"}
    done = subprocess.run([*COMMAND, *argv], cwd=tmp_path, capture_output=True, text=True, timeout=300, check=False)
    assert (done.returncode, done.stderr) == (0, "")
    agree(undisturbed, tmp_path / "r")


def test_a_terminal_sees_a_bar_with_the_stage_and_the_time_left(tmp_path):
    (tmp_path / "push.toml").write_text(GOOD)
    ours, theirs = pty.openpty()
    termios.tcsetwinsize(theirs, (30, 100))
    argv = [*COMMAND, "run", "push.toml", "--no-figures"]
    with subprocess.Popen(argv, cwd=tmp_path, stdout=subprocess.PIPE, stderr=theirs, text=True) as process:
        os.close(theirs)
        shown = b""
        try:
            while piece := os.read(ours, 4096):
                shown += piece
        except OSError as error:  # so Linux tells that the other side is closed
            assert error.errno == errno.EIO
        out = process.stdout.read()
    os.close(ours)
    text = shown.decode()
    assert process.returncode == 0 and "left" not in out
    assert "of 6.00 ms" in text and "left" in text and "Traceback" not in text


def test_the_time_left_is_reckoned_from_where_a_run_was_taken_up(monkeypatch):
    screen = io.StringIO()
    screen.isatty = lambda: True
    monkeypatch.setattr(sys, "stderr", screen)
    bar = _Bar()
    bar.begin(0.2)
    bar.at(0.15, "flight")
    bar.at(0.16, "flight")
    told = bar._bar.format_dict
    bar.end()
    # 10 ms in a second leave 40 ms, four seconds; counted from the beginning they would leave a quarter of a second
    assert "flight" in bar._bar.format_meter(**told | {"elapsed": 1.0, "rate": None})
    assert "160.00 of 200.00 ms, 00:04 left" in bar._bar.format_meter(**told | {"elapsed": 1.0, "rate": None})


# signals, one by one


def test_a_signal_before_the_march_ends_at_once_and_leaves_nothing(tmp_path, capsys, monkeypatch):
    monkeypatch.chdir(tmp_path)
    (tmp_path / "push.toml").write_text(GOOD)
    for number in (signal.SIGINT, signal.SIGTERM):
        monkeypatch.setattr("trapsim.corridor.run.relax", lambda *a, n=number, **k: os.kill(os.getpid(), n))
        handlers = [signal.getsignal(n) for n in (signal.SIGINT, signal.SIGTERM)]
        assert main(["run", "push.toml"]) == 130
        out, err = capsys.readouterr()
        assert out == "" and err.startswith("trapsim: interrupted before its first step")
        assert [p.name for p in tmp_path.iterdir()] == ["push.toml"]
        assert [signal.getsignal(n) for n in (signal.SIGINT, signal.SIGTERM)] == handlers


def test_a_second_ctrl_c_is_not_polite_but_a_second_termination_is():
    with _Stopper(talk=False) as stopper:
        assert not stopper.asked()
        os.kill(os.getpid(), signal.SIGTERM)
        assert stopper.asked()
        os.kill(os.getpid(), signal.SIGTERM)
        assert stopper.asked()
        with pytest.raises(KeyboardInterrupt, match="last state that was saved"):
            os.kill(os.getpid(), signal.SIGINT)
            time.sleep(1)


def test_nohup_is_respected():
    before = signal.signal(signal.SIGHUP, signal.SIG_IGN)
    try:
        with _Stopper(talk=False) as stopper:
            os.kill(os.getpid(), signal.SIGHUP)
            assert not stopper.asked()
    finally:
        signal.signal(signal.SIGHUP, before)


# the disk


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


def test_a_disk_full_at_the_end_costs_nothing(run_here, tmp_path, monkeypatch):
    for name in ("run.h5", "track.csv", "summary.json"):
        with monkeypatch.context() as patch:
            full_disk(patch, name)
            code, err = run_here("--no-figures")
            assert code == 4 and f"r/{name}: got No space left" in err
            assert not list((tmp_path / "r").glob("*.part"))
    with monkeypatch.context() as patch:  # it goes on from the checkpoint, with no second ground state
        patch.setattr("trapsim.corridor.run.relax", None)
        assert run_here("--no-figures") == (0, "")
    assert main(["run", "push.toml", "--out", "whole", "--quiet", "--no-figures"]) == 0
    agree(tmp_path / "whole", tmp_path / "r")


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


def test_figures_that_cannot_be_written_cost_no_result(run_here, tmp_path, monkeypatch):
    with monkeypatch.context() as patch:
        full_disk(patch, "flight.png")
        code, err = run_here()
        assert code == 4 and "figures/flight.png" in err
    monkeypatch.setattr("trapsim.corridor.run.relax", None)
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
    "one byte changed": lambda raw: raw[:2000] + bytes([raw[2000] ^ 255]) + raw[2001:],
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
    monkeypatch.setattr("trapsim.corridor.run.relax", None)
    assert run_here("--no-figures", "--threads", "2", "--set", "title=renamed") == (0, "")
    assert json.loads((tmp_path / "r" / "summary.json").read_text())["title"] == "renamed"


def test_a_folder_in_which_another_run_is_at_work_is_refused(run_here, tmp_path):
    with locked(tmp_path / "r"):
        code, err = run_here()
        assert code == 4 and err.startswith("trapsim: r: got another run is at work in it") and "-> wait for it" in err
    assert run_here("--no-figures") == (0, "")


def test_a_lock_is_no_hindrance_after_its_owner_died(run_here, tmp_path):
    code = "import os; from pathlib import Path; from trapsim.corridor.folder import locked\n"
    code += "with locked(Path('r')): os._exit(9)"
    assert subprocess.run([sys.executable, "-c", code], cwd=tmp_path, check=False).returncode == 9
    assert (tmp_path / "r" / ".lock").exists()
    assert run_here("--no-figures") == (0, "")
    assert math.isfinite(json.loads((tmp_path / "r" / "summary.json").read_text())["end"]["width_um"][0])
