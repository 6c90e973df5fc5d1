"""What no single entry can know: words and numbers that must fit together across the tables."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping, Sequence

import numpy as np

from trapsim.errors import Complaint
from trapsim.fields import ORIGIN
from trapsim.plan.plan import Numerics, Track
from trapsim.plan.stages import Stage, Switches
from trapsim.quantities import human
from trapsim.terms.field import Gravity
from trapsim.terms.part import Part

AXES = "xyz"


def settle_sequence(
    stages: Sequence[Stage | None], paths: Sequence[str], *, names: Sequence[str], trap: Mapping[str, Part],
    known: Sequence[str],
) -> tuple[tuple[Stage, ...], list[Complaint]]:
    """The stages with their defaults filled in, and complaints about all that does not fit together.

    Parameters
    ----------
    stages : sequence of Stage or None
        None stands for one that could not be read.
    paths, names : sequence of str
        Where each stage stands in the plan, and what it is called.
    trap : mapping of str to Part
        The parts that could be read.
    known : sequence of str
        The names of all parts, readable or not.
    """
    now = {name: trap[name].strength if name in trap else 1.0 for name in known}
    switches = Switches(now, frozenset(name for name, strength in now.items() if strength > 0))
    settled: list[Stage] = []
    complaints: list[Complaint] = []
    for stage, path, name in zip(stages, paths, names, strict=True):
        if stage is None:
            continue
        stage, wrong = stage.settled(path, trap, switches)
        switches = stage.switched(switches, trap)
        complaints += wrong
        settled.append(dataclasses.replace(stage, name=name))
    return tuple(settled), complaints


def check_parts(trap: Mapping[str, Part]) -> list[Complaint]:
    """Where a part sits is said once."""
    complaints = []
    for name, part in trap.items():
        follows = getattr(part, "at", "centre") == "cloud"
        centre = getattr(part, "centre", ORIGIN)
        if follows and centre != ORIGIN:
            got = f'"{centre}"' if isinstance(centre, str) else ", ".join(human(x, "length") for x in centre)
            complaints.append(Complaint(f"trap.{name}.centre", got, 'at = "cloud" already says where the centre is',
                                        "leave centre out, or leave at out"))
        elif follows and part.strength > 0:
            complaints.append(Complaint(
                f"trap.{name}.at", '"cloud"',
                "a part can be put on the cloud only when it is switched on during the sequence",
                "write strength = 0, and switch it on in a pulse or ramp; or give its centre",
            ))
    return complaints


def check_hold(trap: Mapping[str, Part], gravity: Gravity | None, numerics: Numerics, mass: float) -> list[Complaint]:
    """Every direction has something that holds the atoms at the start, or a length."""
    holds = np.zeros(3, dtype=bool)
    force = np.zeros(3) if gravity is None else mass * np.asarray(gravity.acceleration())
    for part in trap.values():
        pull, curvature = _centred(part).steer(ORIGIN)
        holds |= part.confines & (np.asarray(curvature) > 0)
        force = force + (np.zeros(3) if part.confines else np.asarray(pull))
    if not trap and not any(numerics.extent):
        return [Complaint("trap", "", "a plan needs a part that holds the atoms",
                          'write [trap.dipole], kind = "harmonic", frequency = ["20 Hz", "120 Hz", "120 Hz"]; '
                          "or give numerics.extent for all three directions")]
    complaints = []
    for j, axis in enumerate(AXES):
        if holds[j]:
            continue
        if not numerics.extent[j]:
            lengths = ", ".join('"40 um"' if k == j else '"auto"' for k in range(3))
            complaints.append(Complaint("trap", "", f"nothing holds the atoms along {axis} at the start",
                                        f"give a trap frequency along {axis}, or numerics.extent = [{lengths}], "
                                        "which makes that direction uniform and periodic"))
        elif abs(force[j]) > 1e-6 * mass:
            rule = f"the atoms fall along {axis} and nothing holds them at the start"
            way_out = f"trap them along {axis}, levitate them with a gradient, or leave [gravity] out"
            complaints.append(Complaint("trap", "", rule, way_out))
    return complaints


def _centred(part: Part) -> Part:
    """The part with a number for its centre."""
    return dataclasses.replace(part, centre=ORIGIN) if isinstance(getattr(part, "centre", None), str) else part


def check_numerics(numerics: Numerics) -> list[Complaint]:
    """A radial axis covers two directions."""
    axes = numerics.axes
    if isinstance(axes, str) or axes.count("radial") in (0, 2):
        return []
    got = ", ".join(f'"{word}"' for word in axes)
    return [Complaint("numerics.axes", f"[{got}]", "a radial axis covers two directions, so the word stands twice",
                      'such as ["wave", "radial", "radial"]')]


def check_track(track: Track, total: float) -> list[Complaint]:
    """Times to land on lie within the sequence."""
    return [
        Complaint(f"track.at[{i}]", human(time, "time"), f"the sequence ends at {human(total, 'time')}",
                  "ask for an earlier time, or make a stage longer")
        for i, time in enumerate(track.at) if time > total * (1 + 1e-12)
    ]
