"""What was asked: a tree of frozen objects holding SI numbers, and the key that names the result."""

from __future__ import annotations

import dataclasses
import hashlib
import json
import math
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from trapsim.constants import PHYSICS_VERSION
from trapsim.fields import Entry, Triple, entries, entry
from trapsim.measure.camera import Camera
from trapsim.plan.stages import Stage
from trapsim.quantities import KINDS
from trapsim.species import Atoms
from trapsim.terms.field import Gravity
from trapsim.terms.part import Part

#: Resolved entries that leave the result alone: they enter no key.
UNKEYED = ("title", "name", "atoms.species", "numerics.threads", "numerics.memory")

Whole3 = tuple[int, int, int]


@dataclass(frozen=True, kw_only=True)
class Numerics:
    """How exactly the equation is solved, and with what."""

    accuracy: str = entry(
        "choice", "errors of widths of about 1e-3 (draft), 1e-4 (normal), 1e-6 (fine)", default="normal",
        choices=("draft", "normal", "fine"),
    )
    ground: str = entry(
        "choice", "how the ground state is found", default="conjugate gradient",
        choices=("conjugate gradient", "imaginary time"),
    )
    axes: str | tuple[str, str, str] = entry(
        "choice", "kinds of axis along x, y, z; \"auto\" uses the symmetry of the plan, \"full\" uses none of it; "
        "\"radial\" stands twice, for the two directions it covers; \"wall\" ends at perfectly reflecting walls until "
        "they open",
        default="auto", count=3, choices=("wave", "mirror", "wall", "radial"), words=("auto", "full"),
    )
    points: Whole3 = entry(
        "whole", "number of points along x, y, z; 0 or \"auto\": chosen; in a box with a hard edge, between its walls",
        default=(0, 0, 0), count=3, low=0, high=65536, each=("auto",),
    )
    extent: Triple = entry(
        "length", "full length of the axis along x, y, z; makes a direction that nothing traps uniform and periodic; "
        "around a box with a hard edge, that of the axis when it has opened",
        default=(0.0, 0.0, 0.0), count=3, above=0.0, each=("auto",),
    )
    frame: str = entry(
        "choice", "the grid moves and grows with the cloud, or stays in the lab", default="moving",
        choices=("moving", "lab"),
    )
    precision: str = entry("choice", "of the numbers on the grid", default="double", choices=("double",))
    threads: int = entry("whole", "how many; 0: all the machine has", default=0, low=0, high=4096)
    memory: float | None = entry(
        "memory", "the most that may be used; by default what the machine has free", default=None, above=0.0
    )


@dataclass(frozen=True, kw_only=True)
class Track:
    """The time series of observables."""

    at: tuple[float, ...] = entry(
        "time", "extra times to land on exactly, from the start of the sequence", default=(), count=None, low=0.0
    )


@dataclass(frozen=True, kw_only=True)
class Plan:
    """All that is asked, in SI units.

    Parameters
    ----------
    title, name : str
        What people call it, and what files call it.
    atoms : Atoms
        With mass and scattering length filled in.
    trap : mapping of str to Part
        The parts by name, in the order they were written.
    gravity : Gravity or None
    sequence : tuple of Stage
        With every default filled in that hangs on other entries.
    camera : mapping of str to Camera
    numerics : Numerics
    track : Track
    sigma : mapping of str to float
        1-sigma uncertainties in SI units by path, such as "trap.dipole.frequency[0]".
    source : str
        The text as it was given.
    """

    title: str = entry("text", "one line for people", default="")
    name: str = "plan"
    atoms: Atoms
    trap: Mapping[str, Part] = field(default_factory=dict)
    gravity: Gravity | None = None
    sequence: tuple[Stage, ...] = ()
    camera: Mapping[str, Camera] = field(default_factory=dict)
    numerics: Numerics = Numerics()
    track: Track = Track()
    sigma: Mapping[str, float] = field(default_factory=dict, compare=False)
    source: str = field(default="", compare=False, repr=False)

    @property
    def duration(self) -> float:
        """How long the whole sequence takes, in s."""
        return math.fsum(stage.duration for stage in self.sequence)

    def resolved(self) -> dict[str, Any]:
        """Every value as it is used, with its SI unit, in plain lists and dictionaries."""
        return {
            "title": self.title,
            "name": self.name,
            "atoms": _plain(self.atoms),
            "trap": {name: {"kind": part.kind, **_plain(part)} for name, part in self.trap.items()},
            "gravity": None if self.gravity is None else _plain(self.gravity),
            "sequence": [{"stage": stage.kind, **_plain(stage, self.target)} for stage in self.sequence],
            "camera": {name: _plain(camera) for name, camera in self.camera.items()},
            "numerics": _plain(self.numerics),
            "track": _plain(self.track),
        }

    def target(self, path: str) -> Entry:
        """The entry that a stage changes under the path "dipole.frequency"."""
        name, _, key = path.partition(".")
        return entries(Atoms if name == "atoms" else type(self.trap[name]))[key]

    @property
    def march_key(self) -> str:
        """Twelve hex digits that change whenever the march would.

        They hash the resolved values and the version of the physics: never title, name, species
        (its mass and scattering length count), threads, memory, uncertainties or the text.
        """
        return _hash({name: value for name, value in keyed(self.resolved()).items() if name != "camera"})

    @property
    def key(self) -> str:
        """The march key and all that is done with the cloud afterwards (cameras); the result folder's name."""
        return _hash(keyed(self.resolved())) if self.camera else self.march_key


def keyed(resolved: Mapping[str, Any]) -> dict[str, Any]:
    """The share of the resolved values that enters the keys."""
    out: dict[str, Any] = {}
    for name, value in resolved.items():
        if name not in UNKEYED:
            inside = isinstance(value, Mapping)
            out[name] = {k: v for k, v in value.items() if f"{name}.{k}" not in UNKEYED} if inside else value
    return out


def differences(one: Mapping[str, Any], other: Mapping[str, Any]) -> list[str]:
    """What differs between two resolved plans, of all that enters the keys, one line each."""
    a, b = _flat(keyed(one)), _flat(keyed(other))
    missing = "not there"
    paths = [*a, *(path for path in b if path not in a)]
    return [f"{p}: {a.get(p, missing)} / {b.get(p, missing)}" for p in paths if a.get(p, missing) != b.get(p, missing)]


def _flat(value: Any, path: str = "") -> dict[str, Any]:
    if isinstance(value, Mapping) and set(value) != {"value", "unit"} and value:
        return {k: v for key, inner in value.items() for k, v in _flat(inner, f"{path}.{key}".lstrip(".")).items()}
    if isinstance(value, list) and any(isinstance(inner, Mapping) for inner in value):
        return {k: v for i, inner in enumerate(value) for k, v in _flat(inner, f"{path}[{i}]").items()}
    if isinstance(value, Mapping) and value:
        return {path: f"{value['value']} {value['unit']}"}
    return {path: value}


def _hash(values: Mapping[str, Any]) -> str:
    all_of_it = {"physics": PHYSICS_VERSION, **values}
    text = json.dumps(all_of_it, sort_keys=True, separators=(",", ":"), ensure_ascii=True, allow_nan=False)
    return hashlib.sha256(text.encode()).hexdigest()[:12]


def _plain(thing: Any, target: Any = None) -> dict[str, Any]:
    """The entries of one object, for JSON."""
    return {name: _value(getattr(thing, name), about, target) for name, about in entries(type(thing)).items()}


def _value(value: Any, about: Entry, target: Any) -> Any:
    if value is None:
        return None
    if about.kind == "table":
        return _plain(value)
    if about.kind == "changes":
        return {path: {**_plain(change), "value": _value(change.value, target(path), None)}
                for path, change in value.items()}
    if about.kind == "target" or about.kind not in KINDS or isinstance(value, str):
        return list(value) if isinstance(value, tuple) else value
    plain = list(value) if isinstance(value, tuple) else value
    unit = KINDS[about.kind].si
    return {"value": plain, "unit": unit} if unit else plain


def with_mass(part: Part, mass: float) -> Part:
    """The part as it acts on atoms of this mass (parts that do not care stay as they are)."""
    names = {f.name for f in dataclasses.fields(part)}
    return dataclasses.replace(part, mass=mass) if "mass" in names else part
