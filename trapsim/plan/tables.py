"""Tables whose entries have names of their own: parts of the trap, and cameras."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping
from typing import Any

import numpy as np

from trapsim.constants import K_B
from trapsim.errors import Complaint
from trapsim.measure.camera import Camera
from trapsim.plan.kinds import PARTS
from trapsim.plan.parse import Context, listed, nearest, parse, shown
from trapsim.plan.plan import with_mass
from trapsim.plan.variants import NAME
from trapsim.species import SPECIES, Atoms
from trapsim.terms.function import Function, Potential
from trapsim.terms.part import Part

#: m, where a user's function is tried along x, y, z; K, what no potential is everywhere
TRIED, HOT = np.array([-7.3e-6, -1.1e-6, 0.4e-6, 3.7e-6]), 1.0


def kind_of(raw: Mapping[str, Any], place: str, key: str, kinds: Mapping[str, type]) -> type | Complaint:
    """The class that a table names by its kind."""
    given, spot = raw.get(key), f"{place}.{key}"
    if given is None:
        return Complaint(spot, "", f"this is needed: one of {listed(kinds)}", f'write {key} = "{next(iter(kinds))}"')
    if isinstance(given, str) and given in kinds:
        return kinds[given]
    close = nearest(given, kinds) if isinstance(given, str) else ""
    hint = f'did you mean "{close}"? ' if close else ""
    return Complaint(spot, shown(given), f"trapsim does not know this {key}", f"{hint}known here: {listed(kinds)}")


def read_trap(raw: Any, keep: Any, complaints: list[Complaint], mass: float) -> dict[str, Part]:
    if not isinstance(raw, Mapping):
        complaints.append(Complaint("trap", shown(raw), "the trap is made of named parts", "write [trap.dipole]"))
        return {}
    trap: dict[str, Part] = {}
    for name, table in raw.items():
        place = f"trap.{name}"
        if not isinstance(table, Mapping):
            rule, way_out = "every part of the trap has a name of its own", "write [trap.dipole], then its entries"
            complaints.append(Complaint(place, shown(table), rule, way_out))
            continue
        if name == "atoms" or not NAME.fullmatch(name):
            rule = "a part is called by letters, digits, _ and -, beginning with a letter, and not atoms"
            complaints.append(Complaint(place, f'"{name}"', rule, "call it something like dipole"))
            continue
        cls = kind_of(table, place, "kind", PARTS)
        if isinstance(cls, Complaint):
            complaints.append(cls)
            continue
        part = keep(parse(cls, table, place, Context(units=cls.units(table, mass)), also=("kind",)))
        if part is not None:
            complaints.extend(part.complaints(place))
            trap[name] = with_mass(part, mass)
    return trap


def with_functions(
    trap: Mapping[str, Part], functions: Mapping[str, Potential]
) -> tuple[dict[str, Part], list[Complaint]]:
    """The parts with the user's own functions in place."""
    out, complaints = dict(trap), []
    for name, part in trap.items():
        if isinstance(part, Function) and name in functions:
            out[name] = dataclasses.replace(part, function=functions[name])
            complaints.extend(_tried(f"trap.{name}", functions[name]))
        elif isinstance(part, Function):
            complaints.append(Complaint(f"trap.{name}", 'kind = "function"', "its function is handed over in Python",
                                        f'trapsim.read_plan(path, functions={{"{name}": V}}) with V(x, y, z, t) in J'))
    for name in functions:
        if not isinstance(trap.get(name), Function):
            complaints.append(Complaint(f"trap.{name}", "a function", "the plan has no such part of the kind function",
                                        f'write [trap.{name}], kind = "function"'))
    return out, complaints


def _tried(place: str, function: Potential) -> list[Complaint]:
    """What is wrong with the values of a user's function, seen at some points around the origin at the start."""
    x, y, z = (TRIED.reshape(shape) for shape in ((-1, 1, 1), (1, -1, 1), (1, 1, -1)))
    way_out = "write it with numpy functions of x, y, z in m and t in s, and an energy in J as its value"
    if not callable(function):
        return [Complaint(place, shown(function), "a function V(x, y, z, t) is needed", way_out)]
    try:
        with np.errstate(all="ignore"):
            values = np.asarray(function(x, y, z, 0.0))
    except Exception as error:  # whatever a stranger's function may raise
        got = f"{type(error).__name__}: {error}"
        return [Complaint(place, got, "the function must give a value at any x, y, z, t", way_out)]
    fits = len(values.shape) <= 3 and all(n in (1, len(TRIED)) for n in values.shape)
    if not fits or values.dtype.kind not in "fiu":
        got = f"{values.dtype} of shape {values.shape} for x, y, z of {x.shape}, {y.shape}, {z.shape}"
        return [Complaint(place, got, "the function's value is a real number at every point", way_out)]
    if not np.isfinite(values).all():
        return [Complaint(place, "values that are not finite", "a potential is finite everywhere", way_out)]
    if np.abs(values).min() > HOT * K_B:
        return [Complaint(place, f"{values.flat[0]:.3g} J at {1e6 * TRIED[0]:.3g} um along x, y and z",
                          f"that is {np.abs(values).min() / K_B:.2g} K, and a potential for cold atoms is in J",
                          "multiply what is in K by 1.380649e-23 J/K, and what is in Hz by 6.62607015e-34 J s")]
    return []


def read_cameras(raw: Any, atoms: Atoms | None, keep: Any, complaints: list[Complaint]) -> dict[str, Camera]:
    if not isinstance(raw, Mapping):
        complaints.append(Complaint("camera", shown(raw), "every camera has a name of its own", "write [camera.side]"))
        return {}
    if raw and not any(isinstance(table, Mapping) for table in raw.values()):
        rule, way_out = "every camera has a name of its own", "write [camera.side], then its entries"
        complaints.append(Complaint("camera", listed(raw), rule, way_out))
        return {}
    cameras: dict[str, Camera] = {}
    for name, table in raw.items():
        place = f"camera.{name}"
        if not NAME.fullmatch(name):
            rule = "a camera is called by letters, digits, _ and -, beginning with a letter"
            complaints.append(Complaint(place, f'"{name}"', rule, "call it something like side"))
            continue
        camera = keep(parse(Camera, table, place))
        if camera is None:
            continue
        complaints.extend(camera.complaints(place))
        species = SPECIES.get(atoms.species) if atoms is not None else None
        if camera.wavelength is None and species is not None:
            camera = dataclasses.replace(camera, wavelength=species.probe_wavelength)
        if camera.wavelength is None and atoms is not None:
            complaints.append(Complaint(f"{place}.wavelength", "", "the probe line of these atoms is not known here",
                                        'write wavelength = "780.24 nm"'))
        cameras[name] = camera
    return cameras
