"""The result folder as a place: whose it is, who is working in it, and where a run was left."""

from __future__ import annotations

import fcntl
import json
import os
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from dataclasses import asdict
from pathlib import Path
from typing import Any

from trapsim.cloud.cloud import Cloud
from trapsim.errors import FileTrouble, Notice, PlanError
from trapsim.evolve.march import Books, State
from trapsim.evolve.pace import Stride
from trapsim.evolve.scaling import LawStart
from trapsim.plan.plan import Plan, differences
from trapsim.record.files import read_checkpoint, write_atomic, write_checkpoint
from trapsim.space.frame import Frame
from trapsim.space.space import Space

CHECKPOINT = "checkpoint.npz"
PLAN = "plan.json"
_FRAME = ("b", "bdot", "X", "Xdot")


def default_folder(plan: Plan) -> Path:
    """results/<plan name>-<key>."""
    return Path("results") / f"{plan.name}-{plan.key}"


@contextmanager
def locked(folder: Path) -> Iterator[None]:
    """Hold the folder's lock; a process that dies leaves none behind.

    Raises
    ------
    FileTrouble
        When another run works in the folder, or it cannot be made.
    """
    made = [p for p in (folder, *folder.parents) if not p.exists()]
    try:
        folder.mkdir(parents=True, exist_ok=True)
        handle = os.open(folder / ".lock", os.O_RDWR | os.O_CREAT, 0o644)
    except OSError as error:
        raise FileTrouble.at(
            str(folder), error.strerror or str(error), "results go into a folder that trapsim may write",
            "choose another place with --out",
        ) from error  # fmt: skip
    try:
        fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError as error:
        os.close(handle)
        raise FileTrouble.at(
            str(folder), "another run is at work in it", "one run at a time per folder",
            "wait for it, or choose another place with --out",
        ) from error  # fmt: skip
    try:
        yield
    finally:
        if {p.name for p in folder.iterdir()} <= {".lock"}:
            (folder / ".lock").unlink(missing_ok=True)
            for empty in made:
                empty.rmdir()
        os.close(handle)


def claim(folder: Path, plan: Plan) -> None:
    """Make sure that a folder is empty or this plan's.

    Raises
    ------
    PlanError
        When it holds another plan's result; says what differs.
    """
    lines = _differences(folder, plan)
    if lines:
        shown = "\n      ".join(lines[:12]) + ("\n      ..." if len(lines) > 12 else "")
        raise PlanError.at(
            str(folder), "a result of another plan; there / now:\n      " + shown, "one folder holds one plan's result",
            "choose another place with --out, or --force to overwrite it",
        )  # fmt: skip
    if lines is None and any(p.name != ".lock" for p in folder.iterdir()):
        raise PlanError.at(
            str(folder), "a folder with other things in it", "results go into a folder of their own",
            "choose another place with --out",
        )  # fmt: skip


def belongs_to(folder: Path, plan: Plan) -> bool:
    """Whether a folder is marked as this plan's."""
    return _differences(folder, plan) == []


def _differences(folder: Path, plan: Plan) -> list[str] | None:
    """How the plan a folder is marked with differs from this one; None when it is not marked."""
    path = folder / PLAN
    if not path.exists():
        return None
    try:
        return differences(json.loads(path.read_text()), plan.resolved())
    except (OSError, ValueError) as error:
        raise FileTrouble.at(
            str(path), str(error), "the file is damaged", "choose another place with --out, or --force"
        ) from error


def mark(folder: Path, plan: Plan) -> None:
    """Write whose folder it is."""
    write_atomic(folder / PLAN, (json.dumps(plan.resolved(), indent=1) + "\n").encode())


def clear(folder: Path) -> None:
    """Take out what a run wrote, and nothing else."""
    for name in (CHECKPOINT, PLAN, "run.h5", "summary.json", "track.csv", "page.html"):
        (folder / name).unlink(missing_ok=True)
    for figure in (folder / "figures").glob("*.png"):
        figure.unlink()


def save(folder: Path, state: State, heard: Mapping[str, Any], ground: Mapping[str, Any], seconds: float) -> None:
    """Write a checkpoint: the state of the march, what the recorder heard, the ground state's figures."""
    cloud, law, stride = state.cloud, state.law, state.stride
    arrays = {f"recorder_{k}": v for k, v in heard.items()}
    arrays |= {"phi": cloud.phi} | {f"frame_{n}": getattr(cloud.frame, n) for n in _FRAME}
    arrays |= {"edge": state.books.edge, "spectrum": state.books.spectrum}
    if law is not None:
        arrays |= {f"law_{n}": getattr(law, n) for n in ("A", "i", "var")}
        arrays |= {f"law_frame_{n}": getattr(law.frame, n) for n in _FRAME}
    books = {k: v for k, v in asdict(state.books).items() if k not in ("edge", "spectrum")}
    attributes = {
        "time": cloud.time, "q": cloud.q, "leg": state.leg, "space": cloud.space.describe(), "books": books,
        "law_time": None if law is None else law.time, "stride": None if stride is None else asdict(stride),
        "notices": [asdict(n) for n in state.notices], "ground": dict(ground), "seconds": seconds,
    }  # fmt: skip
    write_checkpoint(folder / CHECKPOINT, arrays, attributes)


def load(folder: Path, spaces: list[Space]) -> tuple[State, dict[str, Any], dict[str, Any], float] | None:
    """What `save` wrote, on one of the spaces of the run; None when there is no checkpoint.

    Raises
    ------
    FileTrouble
        When it is damaged, or fits none of the spaces.
    """
    path = folder / CHECKPOINT
    if not path.exists():
        return None
    arrays, told = read_checkpoint(path)
    space = next((s for s in spaces if s.describe() == told["space"]), None)
    if space is None:
        raise FileTrouble.at(str(path), "a checkpoint of another grid", "it must fit the plan", "run again with --force")
    frame = Frame(*(arrays[f"frame_{n}"] for n in _FRAME))
    law = None
    if told["law_time"] is not None:
        law_frame = Frame(*(arrays[f"law_frame_{n}"] for n in _FRAME))
        law = LawStart(told["law_time"], law_frame, arrays["law_A"], arrays["law_i"], arrays["law_var"])
    state = State(
        cloud=Cloud(space, space.array(arrays["phi"]), frame, told["time"], told["q"]), leg=told["leg"],
        stride=None if told["stride"] is None else Stride(**told["stride"]), law=law,
        books=Books(**told["books"], edge=arrays["edge"], spectrum=arrays["spectrum"]),
        notices=tuple(Notice(**n) for n in told["notices"]),
    )  # fmt: skip
    heard = {k.removeprefix("recorder_"): v for k, v in arrays.items() if k.startswith("recorder_")}
    return state, heard, told["ground"], float(told["seconds"])


