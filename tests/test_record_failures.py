"""A write that fails harms nothing, damage is explained, and a checkpoint gives back every bit."""

from __future__ import annotations

import math
import os
import resource
import subprocess
import sys
from pathlib import Path

import h5py
import numpy as np
import pytest

import invented_run
from trapsim.errors import FileTrouble
from trapsim.record import files
from trapsim.record.store import (
    Contents,
    read_checkpoint,
    read_run,
    write_atomic,
    write_checkpoint,
    write_results,
    write_run,
)


@pytest.fixture(scope="module")
def contents() -> Contents:
    return invented_run.contents()


def same_bits(a: np.ndarray, b: np.ndarray) -> bool:
    return a.dtype == b.dtype and a.shape == b.shape and a.tobytes() == b.tobytes()


# --- when writing or reading fails ----------------------------------------------------------------------------------


@pytest.mark.parametrize("damage", ["missing", "text", "cut", "folder", "group gone", "newer"])
def test_a_result_that_cannot_be_read_is_explained(tmp_path: Path, contents: Contents, damage: str) -> None:
    path = write_run(tmp_path, contents)
    if damage == "missing":
        path.unlink()
    elif damage == "text":
        path.write_text("not a result")
    elif damage == "cut":
        path.write_bytes(path.read_bytes()[:5000])
    elif damage == "folder":
        path.unlink()
        path.mkdir()
    else:
        with h5py.File(path, "a") as file:
            if damage == "newer":
                file.attrs["layout"] = 99
            else:
                del file["plan"]
    with pytest.raises(FileTrouble, match="run.h5") as caught:
        read_run(tmp_path)
    assert "->" in str(caught.value)


def test_a_write_that_fails_leaves_what_was_there(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "kept.txt"
    write_atomic(path, b"first")

    def full(part: Path, data: bytes) -> None:
        part.write_bytes(data[:3])
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(files, "_write_bytes", full)
    with pytest.raises(FileTrouble, match="kept.txt.*No space left") as caught:
        write_atomic(path, b"second")
    assert "--out" in str(caught.value)
    assert path.read_bytes() == b"first" and os.listdir(tmp_path) == ["kept.txt"]


def test_an_interrupted_write_leaves_what_was_there(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "kept.txt"
    write_atomic(path, b"first")

    def stop(part: Path, data: bytes) -> None:
        part.write_bytes(data[:3])
        raise KeyboardInterrupt

    monkeypatch.setattr(files, "_write_bytes", stop)
    with pytest.raises(KeyboardInterrupt):
        write_atomic(path, b"second")
    assert path.read_bytes() == b"first" and os.listdir(tmp_path) == ["kept.txt"]


def test_a_file_or_folder_in_the_way_is_explained(tmp_path: Path, contents: Contents) -> None:
    (tmp_path / "taken").write_text("mine")
    with pytest.raises(FileTrouble, match="taken"):
        write_results(tmp_path / "taken", contents)
    assert (tmp_path / "taken").read_text() == "mine"
    (tmp_path / "run.h5").mkdir()
    with pytest.raises(FileTrouble, match="a folder of their own"):
        write_run(tmp_path, contents)
    assert os.listdir(tmp_path / "run.h5") == []


FULL = """
import resource, sys
sys.path.insert(0, sys.argv[2])
import invented_run
from trapsim.errors import FileTrouble
from trapsim.record.store import write_checkpoint, write_run
import numpy as np
contents = invented_run.contents()
resource.setrlimit(resource.RLIMIT_FSIZE, (20000, 20000))
checkpoint = (sys.argv[1] + "/c", {"a": np.ones(9999)}, {})
for write, given in ((write_run, (sys.argv[1], contents)), (write_checkpoint, checkpoint)):
    try:
        write(*given)
    except FileTrouble as trouble:
        print("explained:", "--out" in str(trouble), "room" in str(trouble))
"""


@pytest.mark.slow
def test_a_full_disk_is_explained_and_leaves_the_older_result(tmp_path: Path, contents: Contents) -> None:
    write_run(tmp_path, contents)
    before = (tmp_path / "run.h5").read_bytes()
    root = Path(__file__).parent
    done = subprocess.run(
        [sys.executable, "-c", FULL, str(tmp_path), str(root)],
        capture_output=True, text=True, env={**os.environ, "PYTHONPATH": str(root.parent)},
    )  # fmt: skip
    assert done.returncode == 0, done.stderr
    assert done.stdout.splitlines() == ["explained: True True"] * 2
    assert done.stderr == ""
    assert (tmp_path / "run.h5").read_bytes() == before and os.listdir(tmp_path) == ["run.h5"]
    assert resource.getrlimit(resource.RLIMIT_FSIZE)[0] != 20000


# --- checkpoints ----------------------------------------------------------------------------------------------------

ARRAYS = {
    "phi": np.array([[complex(-0.0, math.nan), complex(math.inf, 5e-324)], [1 / 3 + 2j, 0]]),
    "file": np.arange(5, dtype=np.int32),
    "books/pairs": np.array(2**62, dtype=np.int64),
    "names": np.array(["µ", "release"]),
    "flags": np.array([True, False]),
    "thin": np.linspace(0, 1, 3, dtype=np.float32),
    "none at all": np.zeros((0, 3)),
    "columns first": np.asfortranarray(np.arange(6.0).reshape(2, 3)),
}
ATTRIBUTES = {"leg": 3, "key": "ab12", "alarm": None, "tolerance": 0.1 + 0.2, "open": [1, None, "x", {"deep": True}]}


def test_a_checkpoint_gives_back_every_bit(tmp_path: Path) -> None:
    path = tmp_path / "checkpoint"
    write_checkpoint(path, ARRAYS, ATTRIBUTES)
    arrays, attributes = read_checkpoint(path)
    assert list(arrays) == list(ARRAYS) and attributes == ATTRIBUTES
    assert all(same_bits(one, arrays[name]) for name, one in ARRAYS.items())
    assert os.listdir(tmp_path) == ["checkpoint"]


def test_no_object_of_python_enters_a_checkpoint(tmp_path: Path) -> None:
    with pytest.raises(ValueError, match="Object arrays"):
        write_checkpoint(tmp_path / "c", {"a": np.array([object()])}, {})
    with pytest.raises(TypeError):
        write_checkpoint(tmp_path / "c", {}, {"a": {1, 2}})
    assert os.listdir(tmp_path) == []


def test_no_damage_to_a_checkpoint_goes_unseen(tmp_path: Path) -> None:
    """Turn each byte in turn: the file is refused, or (a date, say) all that it holds is still exact."""
    path = tmp_path / "checkpoint"
    write_checkpoint(path, {"phi": ARRAYS["phi"], "n": np.arange(3)}, {"leg": 3})
    whole = path.read_bytes()
    refused = 0
    for place in range(len(whole)):
        damaged = bytearray(whole)
        damaged[place] ^= 0x55
        path.write_bytes(damaged)
        try:
            arrays, attributes = read_checkpoint(path)
        except FileTrouble as trouble:
            assert "checkpoint" in str(trouble) and "delete this file" in str(trouble)
            refused += 1
            continue
        assert attributes == {"leg": 3} and list(arrays) == ["phi", "n"]
        assert same_bits(arrays["phi"], ARRAYS["phi"]) and same_bits(arrays["n"], np.arange(3))
    assert refused > len(whole) // 2
    for length in (0, 1, len(whole) // 2, len(whole) - 1):
        path.write_bytes(whole[:length])
        with pytest.raises(FileTrouble):
            read_checkpoint(path)
    path.unlink()
    with pytest.raises(FileTrouble, match="no such file"):
        read_checkpoint(path)
