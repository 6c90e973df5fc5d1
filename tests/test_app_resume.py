"""A run that is killed or interrupted goes on later as if nothing had happened; and what its terminal shows."""

from __future__ import annotations

import errno
import io
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

from broken.folders import agree
from broken.table import GOOD
from trapsim.app import _Bar, _Stopper, main

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
duration = "600 ms"
[[sequence]]
stage = "release"
duration = "10 ms"
pictures = ["3 ms"]
"""
COMMAND = [sys.executable, "-m", "trapsim.app"]
#: the same, with checkpoints ten times as often as a user gets them
EAGER = [sys.executable, "-c", "import sys; from trapsim.corridor import run; run.FIRST = 0.2; "
         "from trapsim.app import main; sys.exit(main(sys.argv[1:]))"]  # fmt: skip


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


@pytest.mark.slow
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
        monkeypatch.setattr("trapsim.corridor.ground.relax", lambda *a, n=number, **k: os.kill(os.getpid(), n))
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
