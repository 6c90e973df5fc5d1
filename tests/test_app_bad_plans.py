"""Whatever is wrong with a plan or a command line is said in words, with a fixed exit code, and nothing is left."""

from __future__ import annotations

import os
import subprocess
import sys
from collections.abc import Sequence
from pathlib import Path
from typing import NamedTuple

import pytest

from broken.table import COMMAND_LINES, FILES, GOOD, OPTIONS, SLIPS
from trapsim.app import main


class Answer(NamedTuple):
    """What a command line gave back."""

    code: int
    out: str
    err: str


@pytest.fixture
def ask(capsys, tmp_path, monkeypatch):
    """Ask trapsim in this process, from an empty folder of its own."""
    monkeypatch.chdir(tmp_path)

    def asked(*argv: str) -> Answer:
        capsys.readouterr()
        try:
            code = main(argv)
        except SystemExit as exit_:
            code = exit_.code
        return Answer(code, *capsys.readouterr())

    return asked


def everything(folder: Path) -> list[tuple[str, int]]:
    """All files and folders below a folder, with their sizes."""
    return sorted((str(p.relative_to(folder)), p.stat().st_size if p.is_file() else -1) for p in folder.rglob("*"))


def refused(answer: Answer, code: int, place: str, way_out: str) -> None:
    """An answer that refuses, says where, and what to do."""
    assert answer.code == code, answer
    assert answer.out == ""
    assert answer.err.startswith("trapsim: ")
    assert "Traceback" not in answer.err and "Warning" not in answer.err
    assert place in answer.err
    hints = [line.strip() for line in answer.err.splitlines() if line.strip().startswith("-> ")]
    assert any(way_out in hint for hint in hints), answer.err
    assert all(len(line) < 900 for line in answer.err.splitlines())


@pytest.mark.parametrize("command", [["check"], ["run", "--out", "out"]], ids=["check", "run"])
@pytest.mark.parametrize("slip", SLIPS.values(), ids=SLIPS)
def test_a_slip_of_the_pen_is_refused_and_leaves_nothing(ask, tmp_path, slip, command):
    assert GOOD.count(slip.old) == 1, "the slip must spoil one place"
    (tmp_path / "plan.toml").write_text(GOOD.replace(slip.old, slip.new))
    before = everything(tmp_path)
    refused(ask(command[0], "plan.toml", *command[1:]), 2, slip.place, slip.way_out)
    assert everything(tmp_path) == before


@pytest.mark.parametrize("content", FILES.values(), ids=FILES)
def test_a_file_that_is_no_plan_is_refused(ask, tmp_path, content):
    raw, fragment, way_out = content
    (tmp_path / "plan.toml").write_bytes(raw)
    for command in (["check", "plan.toml"], ["run", "plan.toml"]):
        before = everything(tmp_path)
        answer = ask(*command)
        refused(answer, 2, "plan.toml" if fragment != "atoms" else "atoms", way_out)
        assert fragment in answer.err
        assert everything(tmp_path) == before


@pytest.mark.parametrize("options", OPTIONS.values(), ids=OPTIONS)
def test_an_option_that_cannot_work_is_refused(ask, tmp_path, options):
    extra, place, way_out = options
    (tmp_path / "plan.toml").write_text(GOOD)
    for command in ("check", "run"):
        before = everything(tmp_path)
        refused(ask(command, "plan.toml", *extra), 2, place, way_out)
        assert everything(tmp_path) == before


@pytest.mark.parametrize("line", COMMAND_LINES.values(), ids=COMMAND_LINES)
def test_a_command_line_that_cannot_be_read_is_refused(ask, tmp_path, line):
    words, fragment = line
    (tmp_path / "plan.toml").write_text(GOOD)
    answer = ask(*("plan.toml" if word == "PLAN" else word for word in words))
    assert (answer.code, answer.out) == (2, "")
    assert answer.err.startswith("usage: trapsim") and fragment.replace("PLAN", "") in answer.err
    assert everything(tmp_path) == [("plan.toml", len(GOOD))]


# files that cannot be read


def test_a_plan_that_is_not_there_is_named(ask, tmp_path):
    refused(ask("check", "plan.toml"), 4, "plan.toml", "check the name")
    (tmp_path / "release.toml").write_text(GOOD)
    refused(ask("run", "relase.toml"), 4, "relase.toml", "did you mean release.toml")
    refused(ask("run", "nowhere/release.toml"), 4, "nowhere/release.toml", "check the name")
    refused(ask("run", "release.toml/release.toml"), 4, "release.toml/release.toml", "check the path")
    (tmp_path / "gone.toml").symlink_to("elsewhere.toml")
    refused(ask("run", "gone.toml"), 4, "gone.toml", "gone.toml")
    refused(ask("check", "x" * 300), 4, "xxx", "check the path")
    refused(ask("check", "a\0b"), 4, "a", "check the name")
    refused(ask("check", ""), 4, ".", "name a .toml file")
    assert {name for name, _ in everything(tmp_path)} == {"gone.toml", "release.toml"}


def test_a_folder_is_not_a_plan(ask, tmp_path):
    (tmp_path / "plans").mkdir()
    refused(ask("run", "plans"), 4, "plans", "name a .toml file in it")


def test_a_plan_that_may_not_be_read_is_named(ask, tmp_path, monkeypatch):
    (tmp_path / "plan.toml").write_text(GOOD)
    forbidden = PermissionError(13, "Permission denied", "plan.toml")
    monkeypatch.setattr(Path, "read_bytes", lambda self: (_ for _ in ()).throw(forbidden))  # root may read everything
    answer = ask("check", "plan.toml")
    refused(answer, 4, "plan.toml", "permissions")
    assert "Permission denied" in answer.err


# physics


def test_a_collapse_is_refused_before_the_march_and_leaves_nothing(ask, tmp_path):
    # 1e4 atoms at -20 a0: N |a| / a_ho = 8.7, far beyond 0.575
    (tmp_path / "plan.toml").write_text(GOOD)
    before = everything(tmp_path)
    for where in ([], ["--out", "deep/er/out"]):
        answer = ask("run", "plan.toml", "--set", "atoms.scattering_length=-20 a0", *where)
        refused(answer, 3, "collapses", "fewer atoms")
        assert everything(tmp_path) == before


def test_a_collapse_keeps_an_older_result(ask, tmp_path):
    (tmp_path / "plan.toml").write_text(GOOD)
    assert ask("run", "plan.toml", "--quiet", "--no-figures", "--out", "out").code == 0
    before = everything(tmp_path)
    collapse = ("run", "plan.toml", "--set", "atoms.scattering_length=-20 a0", "--out", "out")
    refused(ask(*collapse), 2, "atoms.scattering_length", "--force")
    refused(ask(*collapse, "--force"), 3, "collapses", "fewer atoms")
    assert everything(tmp_path) == before


def test_a_cloud_that_is_too_coarse_stops_with_advice_and_keeps_what_was_seen(ask, tmp_path):
    (tmp_path / "plan.toml").write_text(GOOD)
    numerics = ("axes=full", "points=[16, 14, 14]", "accuracy=fine", "memory=17 MB")
    argv = ["run", "plan.toml", "--out", "out", *(f"--set=numerics.{one}" for one in numerics)]
    refused(ask(*argv), 3, "stage hold", "numerics.points")
    assert '"status": "stopped"' in (tmp_path / "out" / "summary.json").read_text()
    refused(ask(*argv), 3, "stage hold", "numerics.points")  # the same again, not a finished result
    (tmp_path / "out" / "checkpoint.npz").unlink()
    refused(ask(*argv), 3, "stage hold", "numerics.points")


# places for results


def test_results_do_not_go_where_a_file_is(ask, tmp_path):
    (tmp_path / "plan.toml").write_text(GOOD)
    for place in ("plan.toml", "plan.toml/results", "x" * 300, "a\0b", "/proc/results"):
        before = everything(tmp_path)
        refused(ask("run", "plan.toml", "--out", place), 4, place[:3].strip("\0"), "choose another place with --out")
        assert everything(tmp_path) == before
    refused(ask("run", "plan.toml", "--out", ""), 2, "--out", "name one")


def test_a_plan_with_a_very_long_name_says_that_its_folder_cannot_be_made(ask, tmp_path):
    name = "x" * 245 + ".toml"
    (tmp_path / name).write_text(GOOD)
    refused(ask("run", name), 4, "results/xxx", "--out")
    assert everything(tmp_path) == [(name, len(GOOD))]
    assert ask("run", name, "--out", "short", "--quiet", "--no-figures").code == 0


@pytest.mark.parametrize("options", [[], ["--force"]], ids=["plain", "force"])
def test_a_folder_with_other_things_in_it_is_left_alone(ask, tmp_path, options):
    (tmp_path / "plan.toml").write_text(GOOD)
    (tmp_path / "thesis" / "figures").mkdir(parents=True)
    for name in ("summary.json", "track.csv", "run.h5", "figures/best.png", "page.html"):
        (tmp_path / "thesis" / name).write_text("mine")
    before = everything(tmp_path)
    refused(ask("run", "plan.toml", "--out", "thesis", *options), 2, "thesis", "choose another place with --out")
    refused(ask("run", "plan.toml", "--out", ".", *options), 2, ".", "choose another place with --out")
    assert everything(tmp_path) == before


def test_a_folder_of_another_plan_says_what_differs(ask, tmp_path):
    (tmp_path / "plan.toml").write_text(GOOD)
    assert ask("run", "plan.toml", "--out", "out", "--quiet", "--no-figures").code == 0
    before = everything(tmp_path)
    changes = ("--set", "atoms.number=2e4", "--set", "sequence.hold.duration=2 ms")
    answer = ask("run", "plan.toml", "--out", "out", *changes)
    refused(answer, 2, "out: got a result of another plan", "--force")
    assert "atoms.number: 10000.0 / 20000.0" in answer.err
    assert "sequence[0].duration: 0.001 s / 0.002 s" in answer.err
    assert "dipole" not in answer.err
    assert everything(tmp_path) == before


@pytest.mark.parametrize("content", ["", "[]", "3", "{", '{"atoms": 3}', '{"trap": {"x": {"value": 1}}}', "\0\xff"])
def test_a_folder_whose_mark_is_damaged_says_so(ask, tmp_path, content):
    (tmp_path / "plan.toml").write_text(GOOD)
    assert ask("run", "plan.toml", "--out", "out", "--quiet", "--no-figures").code == 0
    (tmp_path / "out" / "plan.json").write_text(content)
    answer = ask("run", "plan.toml", "--out", "out")
    assert answer.code in (2, 4) and "--force" in answer.err and "Traceback" not in answer.err
    assert ask("run", "plan.toml", "--out", "out", "--quiet", "--no-figures", "--force").code == 0


def test_a_finished_result_that_is_damaged_offers_force(ask, tmp_path):
    (tmp_path / "plan.toml").write_text(GOOD)
    assert ask("run", "plan.toml", "--out", "out", "--quiet", "--no-figures").code == 0
    result = tmp_path / "out" / "run.h5"
    result.write_bytes(result.read_bytes()[:5000])
    refused(ask("run", "plan.toml", "--out", "out"), 4, "out/run.h5", "--force")
    refused(ask("show", "out"), 4, "out/run.h5", "run the plan again")
    assert ask("run", "plan.toml", "--out", "out", "--quiet", "--no-figures", "--force").code == 0
    assert ask("show", "out", "--no-figures").code == 0


def test_only_results_are_shown(ask, tmp_path):
    (tmp_path / "plan.toml").write_text(GOOD)
    (tmp_path / "empty").mkdir()
    for place in ("nowhere", "empty", "plan.toml", ".", "x" * 300, "a\0b"):
        refused(ask("show", place), 4, place[:2].strip("\0"), "finished run's folder")


def test_an_unknown_entry_has_no_reference(ask):
    refused(ask("keys", "trap.harmnic"), 2, "trap.harmnic", "harmonic")
    refused(ask("keys", "nothing"), 2, "nothing", "atoms")


# a fault of our own


def test_a_fault_of_trapsim_says_so_without_a_traceback(ask, tmp_path, monkeypatch):
    (tmp_path / "plan.toml").write_text(GOOD)
    monkeypatch.setattr("trapsim.show.text.summary_text", lambda summary: 1 / 0)
    answer = ask("run", "plan.toml", "--no-figures")
    assert answer.code == 1 and "fault of trapsim" in answer.err and "ZeroDivisionError" in answer.err
    assert "--debug" in answer.err and "Traceback" not in answer.err
    with pytest.raises(ZeroDivisionError):
        ask("run", "plan.toml", "--no-figures", "--debug")


# as a user calls it


def asked_outside(argv: Sequence[str], folder: Path, **environment: str) -> Answer:
    done = subprocess.run(
        [sys.executable, "-m", "trapsim.app", *argv], cwd=folder, capture_output=True, text=True,
        env={**os.environ, **environment}, timeout=120, check=False,
    )  # fmt: skip
    return Answer(done.returncode, done.stdout, done.stderr)


@pytest.mark.slow
def test_a_process_of_its_own_answers_alike(tmp_path):
    (tmp_path / "plan.toml").write_text(GOOD.replace('"60 Hz"', '"60 um"'))
    before = everything(tmp_path)
    refused(asked_outside(["run", "plan.toml"], tmp_path), 2, "trap.dipole.frequency[0]", "rad/s")
    refused(asked_outside(["check", "missing.toml"], tmp_path), 4, "missing.toml", "did you mean plan.toml")
    assert everything(tmp_path) == before


@pytest.mark.slow
def test_a_terminal_that_knows_only_ascii_is_no_trouble(tmp_path):
    (tmp_path / "plan.toml").write_text(GOOD.replace("Invented", "Wölkchen µ"), encoding="utf-8")
    answer = asked_outside(["check", "plan.toml"], tmp_path, PYTHONIOENCODING="ascii", PYTHONUTF8="0", LC_ALL="C")
    assert (answer.code, answer.err) == (0, "") and answer.out.startswith("W\\xf6lkchen \\xb5")


@pytest.mark.slow
def test_a_full_disk_behind_the_output_is_said(tmp_path):
    if not Path("/dev/full").exists():
        pytest.skip("this system has no /dev/full")
    (tmp_path / "plan.toml").write_text(GOOD)
    with open("/dev/full", "w") as full:
        done = subprocess.run([sys.executable, "-m", "trapsim.app", "check", "plan.toml"], cwd=tmp_path, stdout=full,
                              stderr=subprocess.PIPE, text=True, timeout=120, check=False,
                              env={k: v for k, v in os.environ.items() if k != "PYTHONUNBUFFERED"})  # fmt: skip
    assert done.returncode == 4 and "No space left" in done.stderr and "Traceback" not in done.stderr
