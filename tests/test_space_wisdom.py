"""What planning has learnt: kept in the user's cache folder, and never in the way."""

from __future__ import annotations

import logging
import os
import subprocess
import sys
import threading
from pathlib import Path

import pytest

from trapsim.space import wisdom

#: plans one transform, and says whether an earlier plan was taken up: FFTW knows more than its empty preamble then
CHILD = """
import logging, sys
logging.basicConfig(stream=sys.stderr, level=logging.INFO, format="%(levelname)s %(message)s")
import pyfftw
from trapsim.space import plans
from trapsim.space.axes import Wave
from trapsim.space.space import Space
plans.WORTH_KEEPING = 0.0
n = int(sys.argv[1])
plans._remembered()
print(len(pyfftw.export_wisdom()[0].splitlines()) > 2, flush=True)
whole = Space([Wave((j,), n, 1.0) for j in range(3)])
whole.forward(whole.array(1.0))
"""


def plan_in_a_process(cache: Path, n: int = 12) -> tuple[bool, str]:
    """Whether anything was remembered before planning, and the log."""
    done = subprocess.run(
        [sys.executable, "-c", CHILD, str(n)], env=environment(cache), check=True, capture_output=True, text=True,
    )  # fmt: skip
    return done.stdout.strip() == "True", done.stderr


def environment(cache: Path) -> dict[str, str]:
    return {"XDG_CACHE_HOME": str(cache), "PYTHONPATH": os.pathsep.join(sys.path)}


def kept(cache: Path) -> Path:
    (file,) = (cache / "trapsim").iterdir()
    return file


@pytest.mark.slow
def test_a_second_process_remembers_what_the_first_has_planned(tmp_path: Path) -> None:
    assert plan_in_a_process(tmp_path) == (False, "")
    name = kept(tmp_path).name
    assert name.startswith("fftw-3.") and "double" in name and name.endswith("cpu.wisdom")
    assert plan_in_a_process(tmp_path) == (True, "")


@pytest.mark.slow
def test_what_another_process_learns_meanwhile_is_not_lost(tmp_path: Path) -> None:
    # this one began before the other had planned anything, and writes after it
    child = CHILD.replace("whole = ", "sys.stdin.readline()\nwhole = ")
    late = subprocess.Popen(
        [sys.executable, "-c", child, "12"], env=environment(tmp_path), stdin=subprocess.PIPE, stdout=subprocess.PIPE,
        text=True,
    )  # fmt: skip
    assert late.stdout.readline() == "False\n"
    plan_in_a_process(tmp_path, 20)
    first = set(kept(tmp_path).read_bytes().splitlines())
    late.communicate("go\n")
    assert late.returncode == 0
    assert first < set(kept(tmp_path).read_bytes().splitlines())


@pytest.mark.slow
@pytest.mark.parametrize("content", [b"", b"(fftw-2.0 rubbish", b"\x00\xff" * 40], ids=["empty", "foreign", "binary"])
def test_a_damaged_file_is_ignored_with_a_notice_and_replaced(tmp_path: Path, content: bytes) -> None:
    plan_in_a_process(tmp_path)
    kept(tmp_path).write_bytes(content)
    remembered, told = plan_in_a_process(tmp_path)
    assert not remembered
    assert "WARNING" in told and "damaged or foreign" in told
    assert plan_in_a_process(tmp_path) == (True, "")


@pytest.mark.slow
def test_half_a_file_is_ignored(tmp_path: Path) -> None:
    plan_in_a_process(tmp_path)
    whole = kept(tmp_path).read_bytes()
    kept(tmp_path).write_bytes(whole[: len(whole) // 2])
    assert "damaged or foreign" in plan_in_a_process(tmp_path)[1]


def test_where_nothing_can_be_written_planning_goes_on(tmp_path: Path) -> None:
    (tmp_path / "trapsim").write_text("a file stands where the folder should be")
    remembered, told = plan_in_a_process(tmp_path)
    assert not remembered
    assert "WARNING" not in told and "cannot be kept" in told


def test_a_reader_beside_many_writers_never_sees_half_a_file(tmp_path: Path) -> None:
    path = tmp_path / "new" / "some.wisdom"
    texts = [bytes([65 + i]) * 200_000 for i in range(4)]
    seen: list[bytes] = []
    writers = [threading.Thread(target=lambda t=t: [wisdom.keep(path, t) for _ in range(20)]) for t in texts]
    for writer in writers:
        writer.start()
    while any(w.is_alive() for w in writers):
        wisdom.recall(path, lambda kept: seen.append(kept) or True)
    assert set(seen) <= set(texts) and seen
    assert [p.name for p in path.parent.iterdir()] == ["some.wisdom"]


def test_the_folder_follows_the_users_environment(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    # XDG base directory specification: a relative path is to be ignored, unset means ~/.cache
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path))
    assert wisdom.folder() == tmp_path / "trapsim"
    monkeypatch.setenv("HOME", str(tmp_path / "home"))
    for unusable in ("", "relative/place"):
        monkeypatch.setenv("XDG_CACHE_HOME", unusable)
        assert wisdom.folder() == tmp_path / "home" / ".cache" / "trapsim"


def test_what_cannot_be_read_is_told_and_ignored(tmp_path: Path, caplog: pytest.LogCaptureFixture) -> None:
    with caplog.at_level(logging.INFO):
        wisdom.recall(tmp_path, lambda kept: pytest.fail("a folder is no wisdom"))
    assert "cannot be read" in caplog.text
