"""From one table of text to one frozen object, by walking the entries its class describes."""

from __future__ import annotations

import dataclasses
import difflib
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

from trapsim import quantities
from trapsim.errors import Complaint
from trapsim.fields import REQUIRED, Entry, entries
from trapsim.quantities import KINDS, QuantityError


@dataclass(frozen=True)
class Context:
    """What a table's text may refer to.

    Parameters
    ----------
    units : mapping of str to mapping
        Units that mean something only here (recoils), by kind of entry, in SI.
    targets : mapping of str to Entry
        What a stage may change, by path.
    unsure : frozenset of str
        Parts whose kind could not be read, so that nobody knows what may be changed in them.
    target : Entry or None
        What the change being read is a change of.
    units_of : mapping of str to mapping
        The `units` of the part of that name.
    """

    units: Mapping[str, Mapping[str, float]] = field(default_factory=dict)
    targets: Mapping[str, Entry] = field(default_factory=dict)
    unsure: frozenset[str] = frozenset()
    target: Entry | None = None
    units_of: Mapping[str, Mapping[str, Mapping[str, float]]] = field(default_factory=dict)


NOWHERE = Context()


@dataclass(frozen=True)
class Reading:
    """An object, or what is wrong with its text; and the uncertainties that were written."""

    value: Any = None
    complaints: tuple[Complaint, ...] = ()
    sigma: Mapping[str, float] = field(default_factory=dict)


def parse(cls: type, raw: Any, where: str, context: Context = NOWHERE, *, also: Iterable[str] = ()) -> Reading:
    """Read one table into an object of `cls`, or say everything that is wrong with it.

    Parameters
    ----------
    cls : type
        A frozen dataclass whose fields carry an `Entry`.
    raw : object
        The table as the file gave it.
    where : str
        Its path in the plan.
    context : Context, optional
    also : iterable of str, optional
        Names that are read elsewhere, such as the kind.
    """
    if not isinstance(raw, Mapping):
        return _wrong(where, raw, "a table of entries", f"write a table: [{where}]")
    known = entries(cls)
    also = tuple(also)
    strange = [key for key in raw if key not in known and key not in also]
    complaints = [unknown(f"{where}.{key}".lstrip("."), key, [*also, *known]) for key in strange]
    misspelt = {nearest(key, known) for key in strange}
    values: dict[str, Any] = {}
    sigma: dict[str, float] = {}
    for spot in dataclasses.fields(cls):
        about = known.get(spot.name)
        path = f"{where}.{spot.name}".lstrip(".")
        if about is None:
            continue
        if spot.name in raw:
            reading = read(raw[spot.name], about, path, context)
            complaints += reading.complaints
            sigma |= reading.sigma
            values[spot.name] = reading.value
        elif spot.default is REQUIRED and spot.name not in misspelt:
            complaints.append(Complaint(path, "", f"this is needed: {about.about}", f"write {_line(spot.name, about)}"))
    return Reading(None, tuple(complaints)) if complaints else Reading(cls(**values), (), sigma)


def unknown(path: str, name: str, known: Sequence[str], *, sort: str = "an entry") -> Complaint:
    """The complaint about a name nobody knows, with the nearest one that is known."""
    close = nearest(name, known)
    hint = f'did you mean "{close}"? ' if close else ""
    return Complaint(path, f'"{name}"', f"this is not {sort} trapsim knows here", f"{hint}known here: {listed(known)}")


def nearest(name: str, known: Iterable[str]) -> str:
    """The known name that looks most like `name`, or an empty text."""
    names = {candidate.casefold(): candidate for candidate in known}
    close = difflib.get_close_matches(name.casefold(), names, 1, 0.55)
    return names[close[0]] if close else ""


def listed(names: Iterable[str]) -> str:
    """Names for a message, or the word none."""
    return ", ".join(names) or "none"


def shown(raw: Any) -> str:
    """What the user wrote, short enough for one line."""
    text = f'"{raw}"' if isinstance(raw, str) else str(raw).lower() if isinstance(raw, bool) else str(raw)
    text = text.replace("'", '"').replace("\n", " ") if isinstance(raw, list | Mapping) else text.replace("\n", " ")
    return text if len(text) <= 80 else text[:77] + "..."


def read(raw: Any, about: Entry, path: str, context: Context = NOWHERE) -> Reading:
    """Read one entry: a word, a number, a list of them, a table or a set of changes."""
    if about.kind == "target":
        about = context.target or about
    if about.kind == "table":
        return parse(about.of, raw, path, context)
    if about.kind == "changes":
        return _changes(raw, about, path, context)
    if about.words and isinstance(raw, str) and (about.count != 1 or raw in about.words):
        return Reading(raw) if raw in about.words else _bad_word(raw, about, path)
    if about.count == 1:
        return _one(raw, about, path, context)
    if not isinstance(raw, list) or about.count not in (None, len(raw)):
        return _wrong(path, raw, _how_many(about), f"write {_line(path.rpartition('.')[2], about)}")
    readings = [_one(item, about, f"{path}[{i}]", context) for i, item in enumerate(raw)]
    complaints = tuple(c for reading in readings for c in reading.complaints)
    sigma = {k: v for reading in readings for k, v in reading.sigma.items()}
    return Reading(None if complaints else tuple(r.value for r in readings), complaints, sigma)


def _one(raw: Any, about: Entry, path: str, context: Context) -> Reading:
    """Read one value of an entry."""
    if about.each and isinstance(raw, str) and raw in about.each:
        return Reading(0 if about.kind == "whole" else 0.0)
    if about.kind in ("text", "choice"):
        if not isinstance(raw, str):
            return _wrong(path, raw, "a text in quotes", f"write {example(about)}")
        return Reading(raw) if about.kind == "text" or raw in about.choices else _bad_word(raw, about, path)
    if about.kind == "flag":
        return Reading(raw) if isinstance(raw, bool) else _wrong(path, raw, "true or false", "write true or false")
    if about.kind == "whole":
        if isinstance(raw, bool) or not isinstance(raw, int):
            return _wrong(path, raw, "a whole number", f"write {example(about)}")
        return _within(raw, 0.0, raw, about, path)
    try:
        value, sigma = quantities.parse(raw, about.kind, context.units.get(about.kind, quantities.NO_UNITS))
    except QuantityError as trouble:
        words = [f'"{word}"' for word in (*about.words, *about.each)]
        return _wrong(path, raw, " or ".join([trouble.rule, *words]), _way_out(raw, trouble, about, context))
    return _within(value, sigma, raw, about, path)


def _way_out(raw: Any, trouble: QuantityError, about: Entry, context: Context) -> str:
    """What to do about a number that cannot be read, with an example that fits."""
    recoils = isinstance(raw, str) and raw.strip().endswith("Er") and about.kind == "energy"
    if recoils and "energy" not in context.units:
        return f"Er is the recoil energy of a lattice, known from its wavelength or spacing; {trouble.way_out}"
    if about.example.startswith('"') and trouble.way_out.startswith("write it like"):
        return f"write it like {about.example}"
    return trouble.way_out


def _within(value: Any, sigma: float, raw: Any, about: Entry, path: str) -> Reading:
    def limit(bound: float) -> str:
        return quantities.human(bound, about.kind) if about.kind in KINDS else f"{bound:g}"

    rule = ""
    if about.above is not None and not value > about.above:
        rule = f"more than {limit(about.above)}"
    elif about.low is not None and not value >= about.low:
        rule = f"at least {limit(about.low)}"
    elif about.high is not None and not value <= about.high:
        rule = f"at most {limit(about.high)}"
    if rule:
        return _wrong(path, raw, f"{rule}: {about.about}", about.way_out or f"write {example(about)}")
    return Reading(value, (), {path: sigma} if sigma else {})


def _changes(raw: Any, about: Entry, path: str, context: Context) -> Reading:
    """Read new values by path; each may be a table with a timing of its own."""
    if not isinstance(raw, Mapping):
        return _wrong(path, raw, "a table of new values", 'write { "dipole.frequency" = ["10 Hz", "10 Hz", "10 Hz"] }')
    if not raw:
        return _wrong(path, "{}", "at least one new value", 'name an entry: { "dipole.strength" = 0.5 }')
    complaints: list[Complaint] = []
    values: dict[str, Any] = {}
    sigma: dict[str, float] = {}
    for target, given, spot in _targets(raw, path, context):
        if target not in context.targets:
            complaints += [] if target.partition(".")[0] in context.unsure else [_no_target(spot, target, context)]
            continue
        own = context.units_of.get(target.partition(".")[0], {})
        inner = dataclasses.replace(context, target=context.targets[target], units=own)
        if isinstance(given, Mapping):
            reading = parse(about.of, given, spot, inner)
        else:
            reading = parse(about.of, {"value": given}, spot, inner)
            short = tuple(dataclasses.replace(c, place=_without_value(c.place, spot)) for c in reading.complaints)
            reading = Reading(reading.value, short, {_without_value(k, spot): v for k, v in reading.sigma.items()})
        complaints += reading.complaints
        sigma |= reading.sigma
        values[target] = reading.value
    return Reading(None, tuple(complaints)) if complaints else Reading(values, (), sigma)


def _no_target(spot: str, target: str, context: Context) -> Complaint:
    """The complaint about a change of something that is not there or cannot be changed."""
    name, dot, key = target.partition(".")
    keys = {known.partition(".")[2] for known in context.targets if known.partition(".")[0] == name}
    if keys:
        close = nearest(key, keys)
        hint = f'did you mean "{name}.{close}"? ' if close else ""
        way_out = f"{hint}of {name} one can change: {listed(sorted(keys))}"
        return Complaint(spot, f'"{target}"', f"{name} has no such entry that a stage can change", way_out)
    names = dict.fromkeys(known.partition(".")[0] for known in context.targets)
    close = nearest(target, context.targets) if dot else nearest(name, names)
    hint = f'did you mean "{close}"? ' if close else ""
    rule = "gravity is never changed" if name == "gravity" else f'there is no part called "{name}" to change'
    return Complaint(spot, f'"{target}"', rule, f"{hint}write part.entry; parts of this plan: {listed(names)}")


def _targets(raw: Mapping[str, Any], path: str, context: Context) -> Iterable[tuple[str, Any, str]]:
    """The changes as (target, new value, path), also where `dipole.frequency` was written without quotes."""
    for name, given in raw.items():
        if isinstance(given, Mapping) and name not in context.targets and not set(given) & {"value", "delay"}:
            yield from ((f"{name}.{key}", inner, f"{path}.{name}.{key}") for key, inner in given.items())
        else:
            yield name, given, f"{path}.{name}"


def _without_value(place: str, spot: str) -> str:
    return spot + place.removeprefix(f"{spot}.value") if place.startswith(f"{spot}.value") else place


def _wrong(path: str, raw: Any, rule: str, way_out: str) -> Reading:
    return Reading(None, (Complaint(path, shown(raw), rule, way_out),))


def _bad_word(raw: str, about: Entry, path: str) -> Reading:
    known = (*about.words, *about.choices)
    close = nearest(raw, known)
    rule = "one of " + ", ".join(f'"{word}"' for word in known)
    if about.kind != "choice":
        rule = f"{_how_many(about)}, or " + rule.removeprefix("one of ")
    name = path.rpartition(".")[2]
    way_out = example(about) if "[" in name else _line(name, about)
    return _wrong(path, raw, rule, f'did you mean "{close}"?' if close else f"write {way_out}")


def _how_many(about: Entry) -> str:
    if about.count is None:
        return "a list of values"
    return f"{about.count} values" + (", one each along x, y, z" if about.count == 3 else f": {about.about}")


def example(about: Entry) -> str:
    """One value that this entry accepts, as it would be written."""
    if about.example:
        return about.example
    if about.kind == "target":
        return '"..."'
    if about.kind == "table":
        return "{ ... }"
    if about.kind == "changes":
        return '{ "dipole.strength" = 0.5 }'
    if about.kind == "choice":
        return f'"{about.choices[0]}"'
    if about.kind == "text":
        return '"..."'
    if about.kind == "flag":
        return "true"
    if about.kind == "whole":
        return "64"
    sort = KINDS[about.kind]
    return '"1.0e5"' if sort.plain else f'"20 {sort.units[0]}"'


def _line(name: str, about: Entry) -> str:
    """The entry as one line of a plan, with an example value."""
    one = example(about)
    if about.count == 1 or one.startswith("["):
        return f"{name} = {one}"
    return f"{name} = [{one}, ...]" if about.count is None else f"{name} = [{', '.join([one] * about.count)}]"
