"""How strong every part of the trap is during the sequence, for the drawing of it: shares of its largest strength."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from trapsim.show.wording import Raw, plain
from trapsim.terms.ramps import SHAPES

#: What makes a part strong, by its kind; its strength multiplies it.
_MAIN = {"harmonic": "frequency", "lattice": "depth", "box": "height", "gradient": "acceleration"}
_POINTS = 13
Curve = list[tuple[float, float]]


def curves(plan: Raw, stages: Sequence[tuple[Raw, float, float]]) -> dict[str, Curve]:
    """Time (s) and share of the largest strength for each part, as corners of a line; parts that are never on are flat.

    Parameters
    ----------
    plan : mapping
        The plan as it was understood.
    stages : sequence of (mapping, float, float)
        Each step, its start and its duration, s.
    """
    out: dict[str, Curve] = {}
    for name, raw in plan.get("trap", {}).items():
        line = _walk(name, raw, stages)
        top = max((level for _, level in line), default=0.0)
        out[name] = [(time, level / top if top > 0 else 0.0) for time, level in line]
    return out


def _walk(name: str, raw: Raw, stages: Sequence[tuple[Raw, float, float]]) -> Curve:
    main = _main_key(raw)
    now = {"strength": float(plain(raw.get("strength", 1.0))), main: _size(raw.get(main))}
    line: Curve = [(0.0, _level(now))]
    for stage, start, duration in stages:
        kind, stop = stage.get("stage"), start + duration
        own = {
            path.partition(".")[2]: change for path, change in (stage.get("to") or {}).items()
            if path.partition(".")[0] == name and path.partition(".")[2] in now
        }  # fmt: skip
        if kind == "release" and name in (stage.get("off") or ()):
            own = {"strength": _switch_off(stage, duration)}
        if kind == "pulse":
            for low, high in _windows(own.values()):
                during = {key: _size(change["value"]) for key, change in own.items()}
                line += [(start + low, _level(now)), (start + low, _level(now | during)),
                         (start + high, _level(now | during)), (start + high, _level(now))]  # fmt: skip
        elif own:
            for u in np.linspace(0.0, 1.0, 4 * _POINTS):
                line.append((start + u * duration, _level({**now, **_during(now, own, u * duration)})))
            now |= {key: _size(change["value"]) for key, change in own.items()}
        line.append((stop, _level(now)))
    return line


def _main_key(raw: Raw) -> str:
    key = _MAIN.get(raw.get("kind", ""))
    if key is None:
        key = "power" if raw.get("power") is not None else "depth"
    return key


def _size(value: Any) -> float:
    """One number for how large an entry is; 1 for what has no size."""
    number = plain(value)
    if isinstance(number, list | tuple):
        return math.sqrt(math.fsum(v * v for v in number))
    return float(number) if isinstance(number, int | float) else 1.0


def _level(now: Mapping[str, float]) -> float:
    return math.prod(now.values())


def _switch_off(stage: Raw, duration: float) -> Raw:
    switch = stage.get("switch_off") or {}
    return {
        "value": 0.0, "shape": switch.get("shape", "sudden"), "duration": plain(switch.get("duration")) or duration,
        "time_constant": switch.get("time_constant"),
    }  # fmt: skip


def _during(now: Mapping[str, float], own: Mapping[str, Raw], time: float) -> dict[str, float]:
    """Values on their way at a time since the start of the stage."""
    out = {}
    for key, change in own.items():
        since = max(time - (plain(change.get("delay")) or 0.0), 0.0)
        length, shape = plain(change.get("duration")) or 0.0, change.get("shape")
        share = 1.0
        if shape != "sudden" and since <= length and length > 0:
            sharpness = length / (plain(change.get("time_constant")) or length)
            share = SHAPES[shape or "linear"](since / length, sharpness)
        out[key] = now[key] + share * (_size(change["value"]) - now[key])
    return out


def _windows(changes: Any) -> list[tuple[float, float]]:
    """When a pulse is on, from the start of its stage; several changes are drawn as one."""
    times = [(plain(c.get("delay")) or 0.0, plain(c.get("duration")) or 0.0) for c in changes]
    return [(min(a for a, _ in times), max(a + b for a, b in times))] if times else []
