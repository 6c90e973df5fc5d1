"""What no single entry can know: words and numbers that must fit together across the tables."""

from __future__ import annotations

import dataclasses
from collections.abc import Mapping, Sequence

import numpy as np

from trapsim.errors import Complaint
from trapsim.fields import ORIGIN
from trapsim.plan.parse import listed
from trapsim.plan.plan import Numerics, Track, with_mass
from trapsim.plan.stages import Pulse, Ramp, Release, Stage, Switches
from trapsim.quantities import human
from trapsim.terms.beam import Beam
from trapsim.terms.box import HARD, Box
from trapsim.terms.field import Gravity
from trapsim.terms.part import Part

AXES = "xyz"
#: m/s^2; what a levitation may leave over without anybody minding
_NO_FALL = 1e-6


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
        complaints += wrong + _walls_stand(stage, path, trap)
        settled.append(dataclasses.replace(stage, name=name))
    return tuple(settled), complaints


def _walls_stand(stage: Stage, path: str, trap: Mapping[str, Part]) -> list[Complaint]:
    """Perfectly reflecting walls do not change, but for the release that takes them away at once."""
    rule, soft = "perfectly reflecting walls neither move nor fade", 'write a soft edge, such as edge = "1 um"'
    if isinstance(stage, Ramp | Pulse):
        changed = [t for t, c in stage.to.items() if c.value == HARD or _closes(trap.get(t.partition(".")[0]))]
        way_out = f"leave it to a release to take them away, or {soft}"
        return [Complaint(f"{path}.to.{target}", "", rule, way_out) for target in changed]
    if isinstance(stage, Release) and stage.switch_off is not None and any(_closes(trap.get(n)) for n in stage.off or ()):
        return [Complaint(f"{path}.switch_off", "", rule, f"leave switch_off out, or {soft}")]
    return []


def _closes(part: Part | None) -> bool:
    """Whether a part has perfectly reflecting walls."""
    return part is not None and bool(part.walls)


def check_walls(trap: Mapping[str, Part], sequence: Sequence[Stage], numerics: Numerics) -> list[Complaint]:
    """Perfectly reflecting walls are the ends of their axes, and those of one box."""
    complaints = []
    hard = [name for name, part in trap.items() if _closes(part)]
    boxes = [name for name, part in trap.items() if isinstance(part, Box)]
    if hard and len(boxes) > 1:
        complaints.append(Complaint(
            f"trap.{hard[-1]}.edge", f'"{HARD}", beside {listed(n for n in boxes if n != hard[-1])}',
            "a box with perfectly reflecting walls is the only box", "leave the other box out, or give all soft edges",
        ))  # fmt: skip
    axes = numerics.axes if not isinstance(numerics.axes, str) else ()
    if not hard:
        complaints += [
            Complaint(f"numerics.axes[{j}]", '"wall"', "a wall axis ends at perfectly reflecting walls",
                      'write edge = "hard" for a box, or "wave" here')
            for j, word in enumerate(axes) if word == "wall"
        ]  # fmt: skip
        return complaints
    size = trap[hard[0]].size
    opens = any(isinstance(s, Release) and hard[0] in (s.off or ()) for s in sequence)
    for j, extent in enumerate(numerics.extent):
        if extent and not opens:
            complaints.append(Complaint(f"numerics.extent[{j}]", human(extent, "length"),
                                        "the axis ends at the perfectly reflecting walls of the box", 'write "auto"'))
        elif extent and extent < size[j]:
            complaints.append(Complaint(
                f"numerics.extent[{j}]", human(extent, "length"), f"the box is {human(size[j], 'length')} long",
                'write a longer extent, or "auto"',
            ))  # fmt: skip
    return complaints


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


def check_hold(trap: Mapping[str, Part], gravity: Gravity | None, numerics: Numerics) -> list[Complaint]:
    """Every direction has something that holds the atoms at the start, or a length."""
    if not trap and not any(numerics.extent):
        return [Complaint("trap", "", "a plan needs a part that holds the atoms",
                          'write [trap.dipole], kind = "harmonic", frequency = ["20 Hz", "120 Hz", "120 Hz"]; '
                          "or give numerics.extent for all three directions")]
    holds = np.zeros(3, dtype=bool)
    fall = np.zeros(3) if gravity is None else np.asarray(gravity.acceleration())
    for part in trap.values():
        pull, curvature = _of_unit_mass(part).steer(ORIGIN)
        holds |= part.confines & (np.asarray(curvature) > 0)
        if part.strength > 0 and (isinstance(part, Box) or (isinstance(part, Beam) and part.full_depth > 0)):
            # a box holds the atoms without a curvature, a beam where they come to rest, which is looked for later
            holds |= True
        fall = fall + (np.zeros(3) if part.confines else np.asarray(pull))
    loose = [j for j in range(3) if not holds[j] and not numerics.extent[j]]
    falling = [j for j in range(3) if not holds[j] and numerics.extent[j] and abs(fall[j]) > _NO_FALL]
    complaints = []
    if loose:
        along = ", ".join(AXES[j] for j in loose)
        lengths = ", ".join('"40 um"' if k in loose else '"auto"' for k in range(3))
        complaints.append(Complaint("trap", "", f"nothing holds the atoms along {along} at the start",
                                    f"give a trap frequency along {along}; or numerics.extent = [{lengths}], "
                                    "which makes such a direction uniform and periodic"))
    if falling:
        along = ", ".join(AXES[j] for j in falling)
        rule = f"the atoms fall along {along} and nothing holds them at the start"
        way_out = f"trap them along {along}, levitate them with a gradient, or leave [gravity] out"
        complaints.append(Complaint("trap", "", rule, way_out))
    return complaints


def _of_unit_mass(part: Part) -> Part:
    """The part as it acts on a mass of 1 kg, with a number for its centre."""
    return with_mass(dataclasses.replace(part, centre=ORIGIN) if hasattr(part, "centre") else part, 1.0)


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
