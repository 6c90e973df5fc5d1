"""The reference of the plan file and its JSON schema, both written from the classes themselves."""

from __future__ import annotations

import dataclasses
import inspect
import textwrap
from dataclasses import dataclass
from typing import Any

from trapsim.errors import PlanError
from trapsim.fields import REQUIRED, Entry
from trapsim.measure.camera import Camera
from trapsim.plan.kinds import PARTS, STAGES
from trapsim.plan.parse import example, listed, nearest
from trapsim.plan.plan import Numerics, Plan, Track
from trapsim.plan.variants import NAME
from trapsim.quantities import KINDS, human
from trapsim.species import Atoms
from trapsim.terms.field import Gravity

_HEAD = """\
A plan is a TOML file. A number with a unit is a text in quotes, "20 Hz", and may carry its 1-sigma
uncertainty: "150(2) Hz", "1.0(1)e5", "20 +/- 0.5 Hz". Frequencies are cycles per second. Positions
are in the lab. Three values stand for x, y, z. An entry without a default is needed.
"""


@dataclass(frozen=True)
class Spot:
    """One entry of the plan: its path, what it means, and its default (REQUIRED when it has none)."""

    path: str
    about: Entry
    default: Any


def tables() -> dict[str, type]:
    """Every table of the plan by the path of its reference, such as trap.harmonic or sequence.ramp."""
    return {
        "atoms": Atoms,
        **{f"trap.{kind}": cls for kind, cls in PARTS.items()},
        "gravity": Gravity,
        **{f"sequence.{kind}": cls for kind, cls in STAGES.items()},
        "camera": Camera,
        "numerics": Numerics,
        "track": Track,
    }


def spots(cls: type, prefix: str = "") -> list[Spot]:
    """The entries of a class in the order they are written, each followed by those of its inner table."""
    out: list[Spot] = []
    for field in dataclasses.fields(cls):
        if "entry" in field.metadata:
            about = field.metadata["entry"]
            out.append(Spot(f"{prefix}{field.name}", about, field.default))
            if about.of is not None:
                out += spots(about.of, f"{prefix}{field.name}.")
    return out


def reference(path: str | None = None) -> str:
    """The entries of the plan file for people: all of them, or those under one path.

    Parameters
    ----------
    path : str, optional
        A table or an entry: "atoms", "trap.harmonic", "sequence.release.switch_off".

    Raises
    ------
    PlanError
        For a path nobody knows, with the nearest one that is known.
    """
    if path is None:
        top = "\n".join(_lines(spot) for spot in spots(Plan))
        return "\n".join([_HEAD, top, "", *(_section(name, cls) for name, cls in tables().items())]).rstrip() + "\n"
    sections = [_section(name, cls) for name, cls in tables().items() if f"{name}.".startswith(f"{path}.")]
    if sections:
        return "\n".join(sections).rstrip() + "\n"
    every = spots(Plan) + [spot for name, cls in tables().items() for spot in spots(cls, f"{name}.")]
    found = [spot for spot in every if f"{spot.path}.".startswith(f"{path}.")]
    if found:
        return "\n".join(_lines(spot) for spot in found) + "\n"
    close = nearest(path, [*tables(), "trap", "sequence", *(spot.path for spot in every)])
    hint = f"did you mean {close}? " if close else ""
    raise PlanError.at(path, "", "the plan has no such entry", f"{hint}tables: {listed(tables())}")


def _section(name: str, cls: type) -> str:
    """One table: how it is opened in the file, what it is, its entries."""
    table, _, kind = name.partition(".")
    opening = {"trap": f'[trap.NAME]  kind = "{kind}"', "sequence": f'[[sequence]]  stage = "{kind}"',
               "camera": "[camera.NAME]"}
    first = inspect.getdoc(cls).partition("\n")[0]
    lines = [opening.get(table, f"[{name}]"), f"    {first}", *(_lines(spot) for spot in spots(cls))]
    return "\n".join(lines) + "\n"


def _lines(spot: Spot) -> str:
    about = spot.about
    facts = [kind_in_words(about), *_limits(about)]
    if spot.default is not REQUIRED:
        facts.append(f"default {default_as_written(spot)}")
    if about.ramp:
        facts.append("can be ramped")
    text = f"{about.about} ({'; '.join(facts)})"
    return f"  {spot.path}\n" + textwrap.fill(text, 100, initial_indent=" " * 6, subsequent_indent=" " * 6)


def kind_in_words(about: Entry) -> str:
    """What an entry accepts, in words."""
    sorts = {"text": "text", "flag": "true or false", "whole": "whole number", "table": "table",
             "changes": "table of new values", "target": "as the entry that is changed",
             "choice": " | ".join(f'"{word}"' for word in about.choices)}
    words = sorts.get(about.kind, about.kind)
    if about.kind in KINDS and not KINDS[about.kind].plain:
        words += f" in {KINDS[about.kind].named}"
    if about.count is None:
        words = f"list of: {words}"
    elif about.count > 1:
        words = f"{about.count} times {words}"
    return " | ".join([words, *(f'"{word}"' for word in (*about.words, *about.each))])


def _limits(about: Entry) -> list[str]:
    def written(bound: float) -> str:
        return human(bound, about.kind) if about.kind in KINDS else f"{bound:g}"

    bounds = (("more than", about.above), ("at least", about.low), ("at most", about.high))
    return [f"{words} {written(bound)}" for words, bound in bounds if bound is not None]


def default_as_written(spot: Spot) -> str:
    """The default of an entry as one would write it in a plan."""
    value, about = spot.default, spot.about
    if value is None or value == () or value == "":
        return "none"
    if isinstance(value, tuple):
        return "[" + ", ".join(_written(item, about) for item in value) + "]"
    return _written(value, about)


def _written(value: Any, about: Entry) -> str:
    if about.each and value == 0:
        return f'"{about.each[0]}"'
    if about.kind not in KINDS or isinstance(value, str):
        return f'"{value}"' if isinstance(value, str) else str(value)
    text = human(value, about.kind, figures=9)
    return text if KINDS[about.kind].plain else f'"{text}"'


def schema() -> dict[str, Any]:
    """The JSON schema (draft 2020-12) of the plan file, for editors."""
    named = {"pattern": f"^{NAME.pattern}$"}
    parts = [_table(cls, {"kind": {"const": kind}}) for kind, cls in PARTS.items()]
    stages = [_table(cls, {"stage": {"const": kind}}) for kind, cls in STAGES.items()]
    title = spots(Plan)[0]
    return {
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        "title": "trapsim plan",
        "type": "object",
        "properties": {
            "title": _entry(title),
            "atoms": _table(Atoms),
            "trap": {"type": "object", "propertyNames": named, "additionalProperties": {"oneOf": parts}},
            "gravity": _table(Gravity),
            "sequence": {"type": "array", "items": {"oneOf": stages}},
            "camera": {"type": "object", "propertyNames": named, "additionalProperties": _table(Camera)},
            "numerics": _table(Numerics),
            "track": _table(Track),
        },
        "required": ["atoms"],
        "additionalProperties": False,
    }


def _table(cls: type, fixed: dict[str, Any] | None = None) -> dict[str, Any]:
    """The schema of one class; `fixed` are entries that name its kind."""
    own = [spot for spot in spots(cls) if "." not in spot.path]
    return {
        "description": inspect.getdoc(cls).partition("\n")[0],
        "type": "object",
        "properties": {**(fixed or {}), **{spot.path: _entry(spot) for spot in own}},
        "required": [*(fixed or {}), *(spot.path for spot in own if spot.default is REQUIRED)],
        "additionalProperties": False,
    }


def _entry(spot: Spot) -> dict[str, Any]:
    """The schema of one entry."""
    about = spot.about
    out: dict[str, Any] = {"description": " ".join([about.about, *(f"({limit})" for limit in _limits(about))])}
    if about.kind == "table":
        return {**_table(about.of), **out}
    if about.kind == "target":
        return out
    if about.kind == "changes":
        long = _table(about.of)
        short = {"type": ["string", "number", "array"]}
        return {**out, "type": "object", "minProperties": 1, "additionalProperties": {"anyOf": [short, long]}}
    one = _one(about)
    if about.each:
        one = {"anyOf": [one, {"enum": list(about.each)}]}
    if about.count != 1:
        size = {} if about.count is None else {"minItems": about.count, "maxItems": about.count}
        one = {"type": "array", "items": one, **size}
    if about.words:
        one = {"anyOf": [{"enum": list(about.words)}, one]}
    return {**one, **out}


def _one(about: Entry) -> dict[str, Any]:
    """The schema of one value."""
    if about.kind == "choice":
        return {"enum": list(about.choices)}
    if about.kind == "whole":
        bounds = {"minimum": about.low, "maximum": about.high}
        return {"type": "integer", **{name: bound for name, bound in bounds.items() if bound is not None}}
    if about.kind in ("text", "flag"):
        return {"type": {"text": "string", "flag": "boolean"}[about.kind]}
    if KINDS[about.kind].plain:
        return {"type": ["number", "string"], "examples": [1.0, "1.0(1)e5"]}
    return {"type": "string", "pattern": r"^\s*[(+\-.\d]", "examples": [example(about).strip('"')]}
