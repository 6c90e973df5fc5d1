"""What planning transforms has taught, kept in the user's cache folder from run to run.

The file is a memory aid and never needed: whatever is wrong with it, transforms are planned anew. It belongs to one
version of FFTW, one precision and one number of processors, and says so in its name.
"""

from __future__ import annotations

import logging
import os
import tempfile
from collections.abc import Callable
from pathlib import Path

logger = logging.getLogger(__name__)


def folder() -> Path:
    """The user's cache folder for trapsim; it may not exist yet."""
    root = os.environ.get("XDG_CACHE_HOME", "")
    return (Path(root) if os.path.isabs(root) else Path.home() / ".cache") / "trapsim"


def place(library: str, precision: str) -> Path:
    """Where the wisdom of a library (name and version) at a precision is kept on this machine."""
    return folder() / f"{library}-{precision}-{os.cpu_count()}cpu.wisdom"


def recall(path: Path, learn: Callable[[bytes], bool]) -> None:
    """Hand what was kept to `learn`; when there is nothing, nothing happens, and what is damaged or foreign is ignored.

    Parameters
    ----------
    path : Path
    learn : callable
        Takes up wisdom; returns whether it could.
    """
    try:
        kept = path.read_bytes()
    except FileNotFoundError:
        return
    except OSError as error:
        logger.info("the plans of transforms kept in %s cannot be read (%s), so they are made anew", path, error)
        return
    if not learn(kept):
        logger.warning("the plans of transforms kept in %s are damaged or foreign: ignored, and made anew", path)


def keep(path: Path, known: bytes) -> None:
    """Write wisdom in one go; where the folder cannot be written, it is forgotten."""
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        handle, beside = tempfile.mkstemp(dir=path.parent, prefix=path.name, suffix=".part")
        try:
            with os.fdopen(handle, "wb") as file:
                file.write(known)
            os.replace(beside, path)
        except BaseException:
            Path(beside).unlink(missing_ok=True)
            raise
    except OSError as error:
        logger.info("the plans of transforms cannot be kept in %s (%s)", path, error)
