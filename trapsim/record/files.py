"""Files written beside their place, synced and then renamed, so that a reader never meets half a file."""

from __future__ import annotations

import errno
import io
import json
import os
import zipfile
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import numpy as np

from trapsim.errors import FileTrouble

Array = np.ndarray
_CONTENT = "content.json"


def write_atomic(path: str | Path, data: bytes | memoryview) -> None:
    """Write a small file beside its place, sync it and rename it.

    Raises
    ------
    FileTrouble
        When it cannot be written; what was there before stays.
    """
    replace(Path(path), lambda part: _write_bytes(part, data))


def write_checkpoint(path: str | Path, arrays: Mapping[str, Array], attributes: Mapping[str, Any]) -> None:
    """Keep arrays bit by bit, and plain attributes, in one file with a check sum on every part.

    Parameters
    ----------
    path : path
    arrays : mapping of str to ndarray
        Numbers, complex numbers, truth values or text; never Python objects.
    attributes : mapping
        What JSON can say: numbers, words, None, lists, mappings with words as keys.
    """
    text = json.dumps({"arrays": list(arrays), "attributes": dict(attributes)})

    def fill(part: Path) -> None:
        with zipfile.ZipFile(part, "w") as whole:
            whole.writestr(_CONTENT, text)
            for name, one in arrays.items():
                with whole.open(f"{name}.npy", "w", force_zip64=True) as member:
                    np.lib.format.write_array(member, np.asarray(one), allow_pickle=False)

    replace(Path(path), fill)


def read_checkpoint(path: str | Path) -> tuple[dict[str, Array], dict[str, Any]]:
    """The arrays and attributes that `write_checkpoint` kept, exactly.

    Raises
    ------
    FileTrouble
        When the file is not there or is damaged.
    """
    path = Path(path)
    with reading(path, "delete this file: the run then starts from its beginning"):
        with zipfile.ZipFile(path) as whole:
            kept = {name: whole.read(name) for name in whole.namelist()}  # read() checks the sum of the part
        content = json.loads(kept[_CONTENT])
        arrays = {
            name: np.lib.format.read_array(io.BytesIO(kept[f"{name}.npy"]), allow_pickle=False)
            for name in content["arrays"]
        }
    return arrays, content["attributes"]


def _write_bytes(part: Path, data: bytes | memoryview) -> None:
    part.write_bytes(data)


def replace(path: Path, fill: Callable[[Path], None]) -> None:
    """Let `fill` write the file beside its place, sync it and rename it; what was there stays if that fails."""
    part = path.with_name(path.name + ".part")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        if path.is_dir():
            raise IsADirectoryError(errno.EISDIR, "there is a folder of that name")
        try:
            fill(part)
            _sync(part)
            os.replace(part, path)
        finally:
            part.unlink(missing_ok=True)
        _sync(path.parent)
    except (OSError, RuntimeError) as error:
        raise FileTrouble.at(str(path), *_explained(error)) from error


def _sync(path: Path) -> None:
    handle = os.open(path, os.O_RDONLY)
    try:
        os.fsync(handle)
    finally:
        os.close(handle)


def _explained(error: Exception) -> tuple[str, str, str]:
    """What happened, the rule and the way out, for something that could not be written."""
    number = getattr(error, "errno", None)
    got = os.strerror(number) if number else str(error)
    if number in (errno.ENOSPC, errno.EDQUOT, errno.EFBIG):
        return got, "there must be room for the result", "free some space or choose another place with --out"
    if number in (errno.EEXIST, errno.ENOTDIR, errno.EISDIR):
        return got, "results go into a folder of their own", "choose another place with --out"
    return got, "trapsim must be allowed to write here", "choose a folder you may write to with --out"


@contextmanager
def reading(path: Path, way_out: str) -> Iterator[None]:
    """Turn whatever goes wrong while reading a file into one explanation with its way out."""
    try:
        yield
    except FileNotFoundError as error:
        raise FileTrouble.at(str(path), "", "there is no such file", way_out) from error
    except PermissionError as error:
        raise FileTrouble.at(str(path), "", "trapsim is not allowed to read it", "ask its owner for leave") from error
    except (  # a damaged file may raise any of these, deep inside numpy, zipfile or HDF5
        OSError, RuntimeError, KeyError, ValueError, TypeError, IndexError, EOFError, NotImplementedError,
        zipfile.BadZipFile,
    ) as error:  # fmt: skip
        got = " ".join(str(error).split())[:200]
        raise FileTrouble.at(str(path), got, "the file is damaged or is not what its name says", way_out) from error
