"""The result folder as a place: whose it is, who is working in it, and where a run was left."""

from __future__ import annotations

import fcntl
import json
import os
from collections.abc import Iterator, Mapping
from contextlib import contextmanager, suppress
from dataclasses import asdict
from pathlib import Path
from typing import Any

from trapsim.cloud.cloud import Cloud
from trapsim.constants import PHYSICS_VERSION
from trapsim.errors import FileTrouble, Notice, PlanError
from trapsim.evolve.pace import Stride
from trapsim.evolve.scaling import LawStart
from trapsim.evolve.state import Books, State
from trapsim.plan.plan import Plan, differences
from trapsim.record.store import RUN_FILE, read_checkpoint, write_atomic, write_checkpoint
from trapsim.space.frame import Frame
from trapsim.space.space import Space

CHECKPOINT = "checkpoint.npz"
PLAN = "plan.json"
SUMMARY = "summary.json"
#: where the finer run of a certificate works until it is done
CERTIFICATE = "certificate"
_LOCK = ".lock"
#: how a checkpoint is laid out
LAYOUT = 4
_FRAME = ("b", "bdot", "X", "Xdot")
#: what the books keep per direction
_PER_DIRECTION = ("edge", "spectrum", "kink")


def default_folder(plan: Plan) -> Path:
    """results/<plan name>-<key>."""
    return Path("results") / f"{plan.name}-{plan.key}"


@contextmanager
def trouble(path: Path) -> Iterator[None]:
    """Turn what the system refuses into one explanation with its way out."""
    try:
        yield
    except (OSError, ValueError) as error:
        got = getattr(error, "strerror", None) or str(error)
        raise FileTrouble.at(
            str(path), got, "results go into a folder of their own that trapsim may write",
            "choose another place with --out",
        ) from error  # fmt: skip


@contextmanager
def locked(folder: Path) -> Iterator[None]:
    """Hold the folder's lock; a process that dies leaves none behind.

    A folder that nothing was put into is taken away again.

    Raises
    ------
    FileTrouble
        When another run works in the folder, or it cannot be made.
    """
    with trouble(folder):
        made = [p for p in (folder, *folder.parents) if not p.exists()]
        new = not (folder / _LOCK).exists()
    try:
        handle = _lock(folder)
        try:
            yield
        finally:
            with suppress(OSError):
                if new and not (folder / PLAN).exists():
                    (folder / _LOCK).unlink(missing_ok=True)
            os.close(handle)
    finally:
        for empty in made:
            with suppress(OSError, ValueError):  # what is not empty stays
                empty.rmdir()


def _lock(folder: Path) -> int:
    """Make the folder and take its lock."""
    with trouble(folder):
        folder.mkdir(parents=True, exist_ok=True)
        handle = os.open(folder / _LOCK, os.O_RDWR | os.O_CREAT, 0o644)
    try:
        fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError as error:
        os.close(handle)
        if isinstance(error, BlockingIOError):
            raise FileTrouble.at(
                str(folder), "another run is at work in it", "one run at a time per folder",
                "wait for it, or choose another place with --out",
            ) from error  # fmt: skip
        raise FileTrouble.at(
            str(folder), error.strerror or str(error), "results go to a disk that knows locks",
            "choose another place with --out",
        ) from error  # fmt: skip
    return handle


def claim(folder: Path, plan: Plan, *, force: bool = False) -> None:
    """Make sure that a folder is empty or this plan's; with `force`, that it is some plan's.

    Raises
    ------
    PlanError
        When it holds another plan's result (says what differs), or things that no run has put there.
    """
    if not (folder / PLAN).exists():
        left_behind = {_LOCK, CHECKPOINT, f"{CHECKPOINT}.part", f"{PLAN}.part"}
        if {p.name for p in folder.iterdir()} - left_behind:
            raise PlanError.at(
                str(folder), "a folder with other things in it", "results go into a folder of their own",
                "choose another place with --out",
            )  # fmt: skip
        return
    lines = [] if force else _differences(folder, plan)
    if lines:
        shown = "\n      ".join(lines[:12]) + ("\n      ..." if len(lines) > 12 else "")
        raise PlanError.at(
            str(folder), "a result of another plan; there / now:\n      " + shown, "one folder holds one plan's result",
            "choose another place with --out, or --force to overwrite it",
        )  # fmt: skip


def is_finished(folder: Path, plan: Plan) -> bool:
    """Whether a folder holds the complete result of this very plan.

    Raises
    ------
    FileTrouble
        When the folder cannot be looked into.
    """
    with trouble(folder):
        if not all((folder / name).exists() for name in (RUN_FILE, SUMMARY, PLAN)) or (folder / CHECKPOINT).exists():
            return False
        try:
            told = json.loads((folder / SUMMARY).read_bytes())
            finished = told["status"] == "complete" and told["key"] == plan.key
        except (ValueError, KeyError, TypeError):
            return False
    return finished and not _differences(folder, plan)


def _signed(plan: Plan) -> dict[str, Any]:
    """What a folder is marked with: all that decides the result."""
    return {"physics": PHYSICS_VERSION, **plan.resolved()}


def _differences(folder: Path, plan: Plan) -> list[str]:
    """How the plan that a folder is marked with differs from this one."""
    path = folder / PLAN
    try:
        return differences(json.loads(path.read_bytes()), _signed(plan))
    except (OSError, ValueError, TypeError, KeyError, AttributeError) as error:
        raise FileTrouble.at(
            str(path), "", "the file that says whose result this is cannot be read",
            "choose another place with --out, or --force to overwrite what is there",
        ) from error  # fmt: skip


def mark(folder: Path, plan: Plan) -> None:
    """Write whose folder it is."""
    write_atomic(folder / PLAN, (json.dumps(_signed(plan), indent=1) + "\n").encode())


def clear(folder: Path) -> None:
    """Take out the results of an earlier run, and nothing else."""
    with trouble(folder):
        for name in (RUN_FILE, SUMMARY, "track.csv", "page.html"):
            (folder / name).unlink(missing_ok=True)
        for figure in (folder / "figures").glob("*.png"):
            figure.unlink()
    discard_certificate(folder)


def drop_damaged_certificate(folder: Path) -> None:
    """Take out what the finer run of a certificate has left where it cannot be taken up; the result itself is not it."""
    path = folder / CERTIFICATE / CHECKPOINT
    if path.exists():
        try:
            read_checkpoint(path)
        except FileTrouble:
            discard_certificate(folder)


def discard_certificate(folder: Path) -> None:
    """Take out what the finer run of a certificate has left."""
    work = folder / CERTIFICATE
    with trouble(work):
        if work.exists():
            for name in (RUN_FILE, "track.csv", SUMMARY, CHECKPOINT, PLAN, _LOCK):
                (work / name).unlink(missing_ok=True)
                (work / f"{name}.part").unlink(missing_ok=True)
            with suppress(OSError):  # what somebody else has put there stays
                work.rmdir()


def save(
    folder: Path, plan: Plan, state: State, *, heard: Mapping[str, Any], ground: Mapping[str, Any], seconds: float
) -> None:
    """Write a checkpoint: the state of the march, what the recorder heard, the ground state's figures."""
    cloud, law, stride = state.cloud, state.law, state.stride
    arrays = {f"recorder_{k}": v for k, v in heard.items()}
    arrays |= {"phi": cloud.phi} | {f"frame_{n}": getattr(cloud.frame, n) for n in _FRAME}
    arrays |= {name: getattr(state.books, name) for name in _PER_DIRECTION}
    if law is not None:
        arrays |= {f"law_{n}": getattr(law, n) for n in ("A", "i", "var")}
        arrays |= {f"law_frame_{n}": getattr(law.frame, n) for n in _FRAME}
    books = {k: v for k, v in asdict(state.books).items() if k not in _PER_DIRECTION}
    attributes = {
        "layout": LAYOUT, "march_key": plan.march_key, "seconds": seconds, "ground": dict(ground),
        "time": cloud.time, "q": cloud.q, "leg": state.leg, "space": cloud.space.describe(), "books": books,
        "law_time": None if law is None else law.time, "law_edge": None if law is None else law.edge,
        "stride": None if stride is None else asdict(stride),
        "notices": [asdict(n) for n in state.notices],
    }  # fmt: skip
    write_checkpoint(folder / CHECKPOINT, arrays, attributes)


def load(folder: Path, plan: Plan, spaces: list[Space]) -> tuple[State, dict[str, Any], dict[str, Any], float] | None:
    """What `save` wrote, on one of the spaces of the run; None when there is no checkpoint.

    Raises
    ------
    FileTrouble
        When it is damaged, or is not of this plan.
    """
    path = folder / CHECKPOINT
    if not path.exists():
        return None
    arrays, told = read_checkpoint(path)
    if told.get("layout") != LAYOUT or told.get("march_key") != plan.march_key:
        raise FileTrouble.at(
            str(path), "a checkpoint of another plan or of another trapsim",
            "a run can only be taken up as it was begun",
            "run again with --force to begin anew",
        )  # fmt: skip
    with whole(path):
        return _state(arrays, told, spaces), _heard(arrays), told["ground"], float(told["seconds"])


@contextmanager
def whole(path: Path) -> Iterator[None]:
    """Say what to do about a checkpoint in which something is missing."""
    try:
        yield
    except (KeyError, TypeError, ValueError, IndexError, StopIteration) as error:
        raise FileTrouble.at(
            str(path), "", "the file is damaged: something is missing in it", "run again with --force to begin anew"
        ) from error


def _heard(arrays: Mapping[str, Any]) -> dict[str, Any]:
    return {k.removeprefix("recorder_"): v for k, v in arrays.items() if k.startswith("recorder_")}


def _state(arrays: Mapping[str, Any], told: Mapping[str, Any], spaces: list[Space]) -> State:
    same = [s for s in spaces if s.describe() == told["space"]]
    # a cloud that has outgrown its grid is on one that nobody planned
    space = same[0] if same else Space.from_description(told["space"], threads=spaces[-1].threads)
    frame = Frame(*(arrays[f"frame_{n}"] for n in _FRAME))
    law = None
    if told["law_time"] is not None:
        law_frame = Frame(*(arrays[f"law_frame_{n}"] for n in _FRAME))
        law = LawStart(told["law_time"], law_frame, arrays["law_A"], arrays["law_i"], arrays["law_var"], told["law_edge"])
    return State(
        cloud=Cloud(space, space.array(arrays["phi"]), frame, told["time"], told["q"]), leg=told["leg"],
        stride=None if told["stride"] is None else Stride(**told["stride"]), law=law,
        books=Books(**told["books"], **{name: arrays[name] for name in _PER_DIRECTION}),
        notices=tuple(Notice(**n) for n in told["notices"]),
    )  # fmt: skip
