"""A stretch of the timeline: what acts between two edges, where every number is smooth."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np

from trapsim.fields import Triple
from trapsim.terms.function import Function
from trapsim.terms.lattice import Lattice
from trapsim.terms.part import Part, gripped, steered, walled
from trapsim.terms.ramps import Course

HELD = "held"
SCATTERING = "atoms.scattering_length"


@dataclass(frozen=True)
class Stretch:
    """The plan between two edges: an `Interval` for the engine.

    Parameters
    ----------
    start, stop : float
        s.
    parts : mapping of str to Part
        As they are at the start.
    gravity : Part or None
    courses : mapping of str to Course
        "dipole.frequency" -> how it changes meanwhile.
    equilibrium : (3,)
        Where parts with a held centre keep the cloud.
    balanced : frozenset of str
        The parts against which they hold it, with gravity: those that were on before the sequence.
    scattering : float
        m, unless it has a course.
    factor : float
        Coupling (m^3/s) per metre of scattering length.
    """

    start: float
    stop: float
    parts: Mapping[str, Part]
    gravity: Part | None
    courses: Mapping[str, Course]
    equilibrium: Triple
    balanced: frozenset[str]
    scattering: float
    factor: float

    @cached_property
    def steady(self) -> bool:
        """Whether nothing changes in it."""
        return not self.courses and not any(p.strength and _has_a_clock(p) for p in self.parts.values())

    @cached_property
    def _fixed(self) -> tuple[Part, ...]:
        return self._parts(self.start)

    def parts_at(self, t: float) -> tuple[Part, ...]:
        """The parts that are on (and gravity) with their values at a time inside."""
        return self._fixed if self.steady else self._parts(t)

    def _parts(self, t: float) -> tuple[Part, ...]:
        now = dict(self.parts)
        for path, course in self.courses.items():
            name, _, key = path.partition(".")
            if name in now:
                now[name] = replace(now[name], **{key: course.at(t)})
        for name, part in now.items():
            if isinstance(part, Lattice):
                now[name] = replace(part, travel=part.travel + self.moved_on(name, t))
            elif isinstance(part, Function):
                now[name] = replace(part, time=t)
        on = {n: p for n, p in now.items() if p.strength > 0 and getattr(p, "centre", None) != HELD}
        held = [p for p in now.values() if p.strength > 0 and getattr(p, "centre", None) == HELD]
        always = [] if self.gravity is None else [self.gravity]
        return (*on.values(), *always, *self._held(held, [*always, *(p for n, p in on.items() if n in self.balanced)]))

    def moved_on(self, name: str, t: float) -> float:
        """Phase (rad) that the detuning of a lattice adds from the start until t: half of it, as V has twice the phase."""
        course = self.courses.get(f"{name}.detuning")
        if course is None:
            return -0.5 * self.parts[name].detuning * (t - self.start)
        return -0.5 * (course.gained(t) - course.gained(self.start))

    def _held(self, held: list[Part], others: list[Part]) -> list[Part]:
        """Parts with a held centre, put where the others' force is balanced at the equilibrium."""
        if not held:
            return []
        force, _ = steered(others, self.equilibrium)
        stiffness = sum(p.stiffness() for p in held)
        shift = np.divide(force, stiffness, out=np.zeros(3), where=stiffness > 0)
        centre = tuple(np.asarray(self.equilibrium) - shift)
        return [replace(p, centre=centre) for p in held]

    def coupling(self, t: float) -> float:
        """4 pi q a N at a time inside, m^3/s."""
        course = self.courses.get(SCATTERING)
        return self.factor * (course.at(t) if course else self.scattering)

    def gripped(self, leaving: Collection[str] = ()) -> frozenset[int]:
        """Directions in which a part holds the atoms all the time without steering them, but for those `leaving`."""
        middle = 0.5 * (self.start + self.stop)
        staying = replace(self, parts={n: p for n, p in self.parts.items() if n not in leaving})
        return gripped(staying.parts_at(middle))

    def walled(self) -> frozenset[int]:
        """Directions that perfectly reflecting walls close."""
        return walled(self.parts_at(0.5 * (self.start + self.stop)))


def _has_a_clock(part: Part) -> bool:
    """Whether a part changes in time by itself."""
    return (isinstance(part, Lattice) and part.detuning != 0) or (isinstance(part, Function) and part.changes)
