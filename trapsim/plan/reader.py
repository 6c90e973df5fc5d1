"""The only door to plan files: text to a tree, the tree varied, the tree read into a Plan."""

from __future__ import annotations

import dataclasses
import difflib
import math
import os
import re
import tomllib
from collections.abc import Mapping, Sequence
from pathlib import Path
from typing import Any

from trapsim.errors import Complaint, FileTrouble, PlanError
from trapsim.fields import Entry, entries
from trapsim.plan import checks
from trapsim.plan.kinds import ATOMS_TARGETS, PARTS, STAGES, rampable
from trapsim.plan.parse import Context, Reading, parse, read, shown, unknown
from trapsim.plan.plan import Numerics, Plan, Track
from trapsim.plan.tables import kind_of, read_cameras, read_trap, with_functions
from trapsim.plan.variants import NAME, TABLES, Tree, stage_names, stage_paths, vary
from trapsim.species import Atoms
from trapsim.terms.field import Gravity
from trapsim.terms.function import Potential
from trapsim.terms.part import Part

#: kg; stands in for the mass of atoms that could not be read, so that the rest of the plan still can
UNKNOWN_MASS = 1e-25


def read_plan(
    path: str | os.PathLike[str],
    changes: Mapping[str, Any] | None = None,
    *,
    functions: Mapping[str, Potential] | None = None,
) -> Plan:
    """Read a plan file, with some values replaced by path if wanted.

    Parameters
    ----------
    path : path
        A TOML file.
    changes : mapping of str to object, optional
        New values by path, written as in the file: {"atoms.number": "2e5"}; None takes an entry out.
    functions : mapping of str to callable, optional
        For every part of the kind "function", by the part's name: V(x, y, z, t) in J on broadcastable arrays in m.

    Returns
    -------
    Plan

    Raises
    ------
    FileTrouble
        When the file cannot be read.
    PlanError
        When what it says is not a plan; all complaints at once.
    """
    return _read(_text(Path(path)), Path(path).stem, changes, str(path), functions)


def plan_from_text(
    text: str,
    name: str = "plan",
    changes: Mapping[str, Any] | None = None,
    *,
    functions: Mapping[str, Potential] | None = None,
) -> Plan:
    """Read a plan from its text; see `read_plan`."""
    return _read(text, name, changes, name, functions)


def settings(texts: Sequence[str]) -> dict[str, Any]:
    """The changes asked for by texts like "atoms.number=2e5", such as the command line's --set options.

    Raises
    ------
    PlanError
        When one of them is not `path=value`.
    """
    changes: dict[str, Any] = {}
    for text in texts:
        path, equals, value = text.partition("=")
        if not equals or not path.strip() or not value.strip():
            raise PlanError.at(f"--set {text}", "", "this is written path=value", 'such as --set "atoms.number=2e5"')
        changes[path.strip()] = interpret(value.strip())
    return changes


def interpret(text: str) -> Any:
    """A value typed on the command line: what a plan would understand, else plain text.

    Quotes may be left out, also inside a list: [20 Hz, 120 Hz, 120 Hz].
    """
    try:
        tree = tomllib.loads(f"value = {text}")
    except (ValueError, RecursionError):
        if text.startswith("[") and text.endswith("]"):
            return [interpret(item.strip()) for item in text[1:-1].split(",") if item.strip()]
        return text
    return tree["value"] if set(tree) == {"value"} else text


def _text(path: Path) -> str:
    """The text of a file, or what is wrong with it."""
    try:
        raw = path.read_bytes()
    except FileNotFoundError:
        names = [p.name for p in path.parent.glob("*.toml")] if path.parent.is_dir() else []
        close = difflib.get_close_matches(path.name, names, 1, 0.5)
        way_out = f"did you mean {path.parent / close[0]}?" if close else "check the name"
        raise FileTrouble.at(str(path), "", "there is no such file", way_out) from None
    except IsADirectoryError:
        raise FileTrouble.at(str(path), "", "this is a folder, not a plan file", "name a .toml file in it") from None
    except OSError as trouble:
        rule = f"the file cannot be read: {trouble.strerror}"
        raise FileTrouble.at(str(path), "", rule, "check the path and its permissions") from None
    except ValueError:
        raise FileTrouble.at(repr(str(path)), "", "this is not a path", "check the name") from None
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as trouble:
        line = raw[: trouble.start].count(b"\n") + 1
        rule = f"a plan is text in UTF-8; line {line} has a byte that is not"
        raise PlanError.at(str(path), "", rule, "save it as UTF-8 text, or name a .toml file") from None
    if "\0" in text:
        raise PlanError.at(str(path), "", "this is a binary file, not a plan", "name a .toml file")
    return text


def _read(
    text: str, name: str, changes: Mapping[str, Any] | None, source: str, functions: Mapping[str, Potential] | None
) -> Plan:
    tree, complaints = vary(_tree(text, source), changes or {})
    plan, wrong = assemble(tree, name=name, source=text, functions=functions or {})
    complaints += wrong
    if plan is None or complaints:
        raise PlanError.from_complaints(_in_file_order(complaints, tree), source)
    return plan


def _tree(text: str, source: str) -> Tree:
    try:
        tree = tomllib.loads(text)
    except ValueError as trouble:  # also numbers with thousands of digits
        hint = "texts and quantities are quoted: \"20 Hz\"; a name stands once"
        raise PlanError.at(source, "", f"this is not TOML: {trouble}", hint) from None
    except RecursionError:
        raise PlanError.at(source, "", "this is nested too deeply for a plan", "see `trapsim keys`") from None
    if not tree:
        raise PlanError.at(source, "", "the plan is empty", "begin with [atoms] and [trap.NAME]; see `trapsim keys`")
    return tree


def assemble(
    tree: Tree, *, name: str, source: str = "", functions: Mapping[str, Potential] | None = None
) -> tuple[Plan | None, list[Complaint]]:
    """The plan that a text tree describes, or None, and everything that is wrong with it."""
    complaints = [unknown(key, key, TABLES, sort="a table") for key in tree if key not in TABLES]
    sigma: dict[str, float] = {}

    def keep(reading: Reading) -> Any:
        complaints.extend(reading.complaints)
        sigma.update(reading.sigma)
        return reading.value

    title = keep(read(tree["title"], entries(Plan)["title"], "title")) if "title" in tree else ""
    atoms = _atoms(tree, keep, complaints)
    mass = atoms.mass if atoms is not None else UNKNOWN_MASS
    trap = read_trap(tree.get("trap", {}), keep, complaints, mass)
    gravity = keep(parse(Gravity, tree["gravity"], "gravity")) if "gravity" in tree else None
    cameras = read_cameras(tree.get("camera", {}), atoms, keep, complaints)
    numerics = keep(parse(Numerics, tree.get("numerics", {}), "numerics"))
    track = keep(parse(Track, tree.get("track", {}), "track"))
    trap, wrong = with_functions(trap, functions or {})
    complaints += wrong
    sequence = _sequence(tree, trap, keep, complaints, mass)

    complaints += checks.check_parts(trap)
    if numerics is not None:
        complaints += checks.check_numerics(numerics) + checks.check_walls(trap, sequence, numerics)
    if track is not None and not any(c.place.startswith("sequence") for c in complaints):
        complaints += checks.check_track(track, math.fsum(stage.duration for stage in sequence))
        track = dataclasses.replace(track, at=tuple(sorted(set(track.at))))
    if not any(c.place.partition(".")[0] in ("trap", "gravity", "numerics") for c in complaints):
        complaints += checks.check_hold(trap, gravity, numerics)
    if complaints:
        return None, complaints
    return Plan(title=title, name=name, atoms=atoms, trap=trap, gravity=gravity, sequence=sequence, camera=cameras,
                numerics=numerics,
                track=track, sigma=sigma, source=source), []


def _atoms(tree: Tree, keep: Any, complaints: list[Complaint]) -> Atoms | None:
    if "atoms" not in tree:
        way_out = 'write [atoms], species = "Rb-87", number = "1e5"'
        complaints.append(Complaint("atoms", "", "a plan needs atoms", way_out))
        return None
    atoms = keep(parse(Atoms, tree["atoms"], "atoms"))
    if atoms is None:
        return None
    atoms, wrong = atoms.settled()
    complaints.extend(wrong)
    return atoms


def _changeable(trap: Any, mass: float) -> Context:
    """What a stage may change, also in parts that are not written well."""
    targets: dict[str, Entry] = {}
    units: dict[str, Mapping[str, Mapping[str, float]]] = {}
    unsure = set()
    for name, table in trap.items() if isinstance(trap, Mapping) else ():
        kind = table.get("kind") if isinstance(table, Mapping) else None
        if isinstance(kind, str) and kind in PARTS:
            targets |= rampable(name, PARTS[kind])
            units[name] = PARTS[kind].units(table, mass)
        else:
            unsure.add(name)
    return Context(targets={**targets, **ATOMS_TARGETS}, unsure=frozenset(unsure), units_of=units)


def _sequence(
    tree: Tree, trap: Mapping[str, Part], keep: Any, complaints: list[Complaint], mass: float
) -> tuple[Any, ...]:
    raw = tree.get("sequence", [])
    if not isinstance(raw, list) or not all(isinstance(stage, Mapping) for stage in raw):
        got = "" if isinstance(raw, Mapping) else shown(raw)
        complaints.append(Complaint("sequence", got, "the sequence is a list of stages", "write [[sequence]] for each"))
        return ()
    context = _changeable(tree.get("trap", {}), mass)
    paths, stages = stage_paths(raw), []
    for i, (table, place, name) in enumerate(zip(raw, paths, stage_names(raw), strict=True)):
        cls = kind_of(table, place, "stage", STAGES)
        if isinstance(cls, Complaint):
            complaints.append(cls)
            stages.append(None)
            continue
        if not name:
            complaints.append(_bad_name(table.get("name", cls.kind), f"sequence[{i}].name"))
        stages.append(keep(parse(cls, table, place, context, also=("stage",))))
    parts = tree.get("trap", {})
    known = [name for name, part in parts.items() if isinstance(part, Mapping)] if isinstance(parts, Mapping) else []
    sequence, wrong = checks.settle_sequence(stages, paths, names=stage_names(raw), trap=trap, known=known)
    complaints.extend(wrong)
    return sequence


def _bad_name(name: Any, place: str) -> Complaint:
    if isinstance(name, str) and NAME.fullmatch(name):
        return Complaint(place, f'"{name}"', "another stage already has this name", "give each stage a name of its own")
    rule = "a stage is called by letters, digits, _ and -, beginning with a letter"
    return Complaint(place, shown(name), rule, 'write a name such as "expansion"')


def _in_file_order(complaints: Sequence[Complaint], tree: Tree) -> list[Complaint]:
    """Complaints in the order in which their places stand in the file; places that are nowhere come last."""
    order: dict[str, int] = {}

    def walk(node: Any, path: str) -> None:
        order.setdefault(path, len(order))
        if isinstance(node, Mapping):
            for key, inner in node.items():
                walk(inner, f"{path}.{key}".lstrip("."))
        elif isinstance(node, list):
            spots = stage_paths(node) if path == "sequence" else [f"{path}[{i}]" for i in range(len(node))]
            for inner, spot in zip(node, spots, strict=True):
                walk(inner, spot)

    walk(tree, "")

    def position(complaint: Complaint) -> int:
        place = complaint.place
        while place and place not in order:
            place = re.sub(r"(\.[^.\[]*|\[[^\[]*|^[^.\[]*)$", "", place)
        return order[place] if place else len(order)

    return sorted(complaints, key=position)
