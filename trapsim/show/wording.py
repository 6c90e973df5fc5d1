"""What a plan asks for, in words: the steps of its sequence and the values in it, from the plan as it was understood."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping, Sequence
from typing import Any

from trapsim.quantities import KINDS, human
from trapsim.record.summary import Summary
from trapsim.show.numbers import brief, signed
from trapsim.terms.lattice import Lattice

Raw = Mapping[str, Any]
_KIND = {kind.si: name for name, kind in KINDS.items() if kind.si}
_MICRO = re.compile(r"\bu(?=(m|s|K|W|rad)\b)")


def plain(value: Any) -> Any:
    """The number or the numbers of an entry, without its unit."""
    return value.get("value") if isinstance(value, Mapping) else value


def words(value: Any, *, recoil: float | None = None) -> str:
    """An entry as the lab writes it: "12 Er", "20, 120, 120 Hz", "1.96 ms", "held".

    Parameters
    ----------
    value : number, text, or mapping of value and unit
    recoil : float, optional
        J; energies are then given in units of it.
    """
    number, unit = plain(value), value.get("unit") if isinstance(value, Mapping) else None
    if isinstance(number, str) or number is None:
        return str(number) if number is not None else "-"
    if isinstance(number, list | tuple):
        return _together([words({"value": one, "unit": unit}, recoil=recoil) for one in number])
    if unit == "J" and recoil:
        return f"{brief(number / recoil)} Er"
    if unit == "rad":
        return f"{brief(math.degrees(number))} deg"
    if unit in _KIND:
        return signed(_MICRO.sub("µ", human(number, _KIND[unit])).replace("^2", "²"))
    return signed(brief(number)) if isinstance(number, int | float) else str(number)


def _together(texts: Sequence[str]) -> str:
    """Several quantities, the unit once where it is the same; zeros have none."""
    split = [text.partition(" ")[::2] for text in texts]
    units = {unit for number, unit in split if number != "0"}
    if len(units) <= 1:
        return ", ".join(number for number, _ in split) + f" {next(iter(units), split[0][1])}".rstrip()
    return ", ".join(texts)


def recoil_energy(plan: Raw, part: str) -> float | None:
    """The recoil energy of a lattice, J; None for any other part."""
    raw = plan.get("trap", {}).get(part, {})
    mass = plain(plan.get("atoms", {}).get("mass"))
    spacing, wavelength = plain(raw.get("spacing")), plain(raw.get("wavelength"))
    if raw.get("kind") != "lattice" or not mass or not (spacing or wavelength):
        return None
    return Lattice(spacing=spacing, wavelength=wavelength, depth=0.0, mass=mass).recoil_energy


def what_changes(plan: Raw, stage: Raw) -> str:
    """One sentence about a step of the sequence."""
    kind = stage.get("stage")
    if kind == "kick":
        return _kick(stage)
    if kind == "release":
        return _release(stage)
    changes = [_change(plan, kind, path, change) for path, change in (stage.get("to") or {}).items()]
    if changes:
        return "; ".join(changes)
    return "everything stays as it is"


def _change(plan: Raw, kind: str | None, path: str, change: Raw) -> str:
    name, _, key = path.partition(".")
    target = {"value": change["value"], "unit": None} if not isinstance(change["value"], Mapping) else change["value"]
    text = words(target, recoil=recoil_energy(plan, name))
    if key == "strength" and plain(target) in (0, 1):
        text = f"{name} {'on' if plain(target) else 'off'}"
    else:
        text = f"{name} {key.replace('_', ' ')} {'to ' if kind == 'ramp' else ''}{text}"
    delay, shape = plain(change.get("delay")) or 0.0, change.get("shape")
    if shape not in (None, "sudden"):
        text += f", {shape}"
        if (constant := plain(change.get("time_constant"))) is not None:
            text += f" with {words({'value': constant, 'unit': 's'})}"
    return text + (f", from {words({'value': delay, 'unit': 's'})} on" if delay else "")


def times_asked_for(plan: Raw, summary: Summary) -> list[float]:
    """When the plan asks for pictures, s from the start of the sequence, up to where the run came."""
    until = summary.end.time_ms * 1e-3 if summary.end is not None else 0.0
    asked = {
        1e-3 * told.start_ms + time
        for told, stage in zip(summary.stages, plan.get("sequence", ()), strict=False)
        for time in plain(stage.get("pictures")) or ()
    }
    return sorted(time for time in asked if time <= until * (1 + 1e-9))


def kick_vector(stage: Raw) -> list[float]:
    """The velocity of a kick along x, y, z, m/s."""
    return list(plain(stage.get("velocity")) or (0.0, 0.0, 0.0))


def _kick(stage: Raw) -> str:
    along = [f"{words({'value': v, 'unit': 'm/s'})} along {d}" for d, v in zip("xyz", kick_vector(stage), strict=True) if v]
    recoils = stage.get("recoils")
    why = f" ({signed(brief(recoils))} recoils of {stage.get('of')})" if recoils is not None else ""
    return (" and ".join(along) or "no velocity") + f" given to all atoms{why}"


def _release(stage: Raw) -> str:
    off = ", ".join(stage.get("off") or ()) or "nothing"
    switch = stage.get("switch_off")
    if not switch:
        return f"{off} off at once"
    time = plain(switch.get("time_constant")) or plain(switch.get("duration"))
    return f"{off} off, {switch.get('shape')} in {words({'value': time, 'unit': 's'})}"


#: Entries of a part that are told elsewhere, or only when they are not as usual.
_ELSEWHERE = ("kind", "strength", "at", "source")
_UNLESS_ZERO = ("centre", "focus", "turn", "phase", "detuning")


def parts_in_words(plan: Raw) -> list[tuple[str, str]]:
    """Name and description of every part of the trap and of gravity."""
    out = []
    for name, raw in plan.get("trap", {}).items():
        told = [str(raw.get("kind"))]
        for key, value in raw.items():
            number = plain(value)
            if key in _ELSEWHERE or number is None or (key in _UNLESS_ZERO and not _any(number)):
                continue
            told.append(f"{key.replace('_', ' ')} {words(value, recoil=recoil_energy(plan, name))}")
        if plain(raw.get("strength")) == 0:
            told.append("off at the start")
        if raw.get("at") == "cloud":
            told.append("centred on the cloud when it comes on")
        out.append((name, ", ".join(told)))
    if isinstance(gravity := plan.get("gravity"), Mapping):
        along = signed(str(gravity.get("direction")))
        out.append(("gravity", f"{words(gravity.get('value'))} along {along}"))
    return out


def _any(number: Any) -> bool:
    return any(number) if isinstance(number, list | tuple) else bool(number)
