"""A plan with some values replaced by path, in the text tree, before anything is read into numbers."""

from __future__ import annotations

import copy
import re
from collections.abc import Mapping
from typing import Any

from trapsim.errors import Complaint
from trapsim.plan.kinds import STAGES
from trapsim.plan.parse import listed, nearest, shown, unknown

#: The tables of a plan, and those that hold named tables of their own.
TABLES = ("title", "atoms", "trap", "gravity", "sequence", "camera", "numerics", "track")
NAME = re.compile(r"[A-Za-z][A-Za-z0-9_-]*")
_SEGMENT = re.compile(r'(?:"(?P<quoted>[^"]+)"|(?P<bare>[A-Za-z0-9_-]+))(?:\[(?P<index>\s*\d+\s*(?:,\s*\d+\s*)*)\])?')

Tree = dict[str, Any]


def stage_names(sequence: Any) -> list[str]:
    """What each stage of a text tree is called, or "" where that cannot be said.

    A stage is called by its name, else by its kind: hold, hold_2, ... A name used before is
    nobody's, so that a path never means two stages.
    """
    names: list[str] = []
    counts: dict[str, int] = {}
    for stage in sequence if isinstance(sequence, list) else ():
        name = stage.get("name") if isinstance(stage, Mapping) else None
        kind = stage.get("stage") if isinstance(stage, Mapping) else None
        if name is None and isinstance(kind, str) and kind in STAGES:
            counts[kind] = counts.get(kind, 0) + 1
            name = kind if counts[kind] == 1 else f"{kind}_{counts[kind]}"
        good = isinstance(name, str) and NAME.fullmatch(name) and name not in names
        names.append(name if good else "")
    return names


def stage_paths(sequence: Any) -> list[str]:
    """The path of each stage: sequence.release, or sequence[2] where it has no name of its own."""
    return [f"sequence.{name}" if name else f"sequence[{i}]" for i, name in enumerate(stage_names(sequence))]


def vary(tree: Tree, changes: Mapping[str, Any]) -> tuple[Tree, list[Complaint]]:
    """The text tree with values replaced by path; a value of None takes the entry out.

    Parameters
    ----------
    tree : dict
        As the file gave it; it stays as it is.
    changes : mapping of str to object
        `atoms.number`, `trap.dipole.frequency[0]`, `trap.dipole.frequency[1,2]` (both get the same
        value), `sequence.release.duration` or `sequence[1].duration`.

    Returns
    -------
    dict, list of Complaint
        The new tree, and a complaint for every path that leads nowhere.
    """
    out = copy.deepcopy(tree)
    complaints = [complaint for path, value in changes.items() if (complaint := _put(out, path, value))]
    return out, complaints


def _put(tree: Tree, path: str, value: Any) -> Complaint | None:
    """Change the tree at one path; a complaint when the path leads nowhere."""
    steps = _steps(path)
    if not steps:
        return Complaint(path, "", "this is not a path", "write it like trap.dipole.frequency[0]")
    (top, index), rest = steps[0], steps[1:]
    if top not in TABLES:
        return unknown(path, top, TABLES, sort="a table")
    if top == "sequence" and (rest or index):
        stages = tree.get("sequence", [])
        found = _stage(stages, index, rest[0][0] if rest else "")
        if found is None or (not index and rest[0][1]):
            return _no_stage(path, stages, rest)
        rest = rest if index else rest[1:]
        if not rest:
            stages[found : found + 1] = [] if value is None else [value]
            return None
        return _put_inside(stages[found], rest, path, value)
    if top == "trap" and rest and not (len(rest) == 1 and isinstance(value, Mapping)):
        parts = tree.get("trap", {})
        name = rest[0][0]
        if not isinstance(parts, Mapping) or name not in parts:
            return unknown(path, name, list(parts), sort="a part of the trap")
    return _put_inside(tree, steps, path, value)


def _steps(path: str) -> list[tuple[str, tuple[int, ...]]]:
    """The names of a path with their indices; empty when it is not a path."""
    steps: list[tuple[str, tuple[int, ...]]] = []
    start = 0
    while match := _SEGMENT.match(path, start):
        index = tuple(int(i) for i in match["index"].split(",")) if match["index"] else ()
        steps.append((match["quoted"] or match["bare"], index))
        start = match.end()
        if start == len(path):
            return steps
        if path[start] != ".":
            return []
        start += 1
    return []


def _stage(stages: Any, index: tuple[int, ...], name: str) -> int | None:
    if not isinstance(stages, list):
        return None
    if index:
        return index[0] if len(index) == 1 and index[0] < len(stages) else None
    names = stage_names(stages)
    return names.index(name) if name in names else None


def _no_stage(path: str, stages: Any, rest: list[tuple[str, tuple[int, ...]]]) -> Complaint:
    names = [name for name in stage_names(stages) if name]
    close = nearest(rest[0][0], names) if rest else ""
    hint = f'did you mean "{close}"? ' if close else ""
    return Complaint(path, "", "the sequence has no such stage", f"{hint}stages of this plan: {listed(names)}")


def _put_inside(node: Any, steps: list[tuple[str, tuple[int, ...]]], path: str, value: Any) -> Complaint | None:
    """Change an entry of a table, going down through tables and making them where they are missing."""
    (name, index), rest = steps[0], steps[1:]
    if not isinstance(node, dict):
        return Complaint(path, shown(node), "there is no table to change here", "change the entry as a whole")
    if name == "to" and rest:
        return _put_change(node.setdefault("to", {}), rest, path, value)
    if rest:
        if index:
            return Complaint(path, "", f"{name} is not a list of tables", "leave the index out")
        return _put_inside(node.setdefault(name, {}), rest, path, value)
    if not index:
        return _set(node, name, path, value)
    return _set_items(node.get(name), index, name, path, value)


def _set(node: Tree, name: str, path: str, value: Any) -> Complaint | None:
    if value is not None:
        node[name] = value
    elif node.pop(name, None) is None:
        return Complaint(path, "", "this is not written in the plan, so it cannot be taken out", "leave the path out")
    return None


def _set_items(items: Any, index: tuple[int, ...], name: str, path: str, value: Any) -> Complaint | None:
    if not isinstance(items, list):
        got = "" if items is None else shown(items)
        whole = path.partition("[")[0] if path.count("[") == 1 else name
        return Complaint(path, got, "the plan has no list of values here", f"give all values: {whole}=[..., ..., ...]")
    if max(index) >= len(items):
        return Complaint(path, shown(items), f"there are {len(items)} values", f"count from 0 to {len(items) - 1}")
    for i in index:
        items[i] = value
    return None


def _put_change(changes: Any, steps: list[tuple[str, tuple[int, ...]]], path: str, value: Any) -> Complaint | None:
    """Change a new value of a ramp or pulse, written short or as a table with its own timing."""
    if not isinstance(changes, dict):
        return Complaint(path, shown(changes), "there is no table to change here", "change the entry as a whole")
    unquoted = changes.get(steps[0][0])
    if isinstance(unquoted, dict) and "." not in steps[0][0]:
        return _put_inside(changes, steps, path, value)
    if "." not in steps[0][0] and len(steps) > 1:
        (part, _), (key, index), *rest = steps
        steps = [(f"{part}.{key}", index), *rest]
    (target, index), rest = steps[0], steps[1:]
    if target not in changes and (index or rest):
        return unknown(path, target, list(changes), sort="a change of this stage:")
    present = changes.get(target)
    if rest and not isinstance(present, dict):
        present = changes[target] = {"value": present}
    if rest:
        return _put_inside(present, rest, path, value)
    if isinstance(present, dict) and value is not None and not isinstance(value, Mapping):
        return _put_inside(present, [("value", index)], path, value)
    return _put_inside(changes, [(target, index)], path, value)
