"""Forces that are the same everywhere: gravity, and gradients of a magnetic or electric field."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from trapsim.constants import STANDARD_GRAVITY
from trapsim.fields import Triple, entry
from trapsim.terms.part import ANYWHERE, Array, Part, Symmetry

EVERYWHERE = Symmetry((ANYWHERE,) * 3, frozenset({0, 1, 2}))


def _tilt(force: Array, x: Array, y: Array, z: Array) -> Array:
    return -(force[0] * x + force[1] * y + force[2] * z)


@dataclass(frozen=True, kw_only=True)
class Gradient(Part):
    """A uniform push, given as the acceleration it gives the atoms (a levitation points up)."""

    kind: ClassVar[str] = "gradient"
    quadratic: ClassVar[bool] = True
    confines: ClassVar[bool] = False

    acceleration: Triple = entry("acceleration", "acceleration of the atoms along x, y, z", count=3, ramp=True)
    mass: float = 0.0  #: kg, of the atoms; set when the plan is read

    def force(self) -> Array:
        return self.strength * self.mass * np.asarray(self.acceleration)

    def energy(self, x: Array, y: Array, z: Array) -> Array:
        return _tilt(self.force(), x, y, z)

    def steer(self, centre: Triple) -> tuple[Array, Array]:
        return self.force(), np.zeros(3)

    def symmetry(self) -> Symmetry:
        return EVERYWHERE


@dataclass(frozen=True, kw_only=True)
class Gravity:
    """The fall of everything; never switched off. Leave the table out for micro-gravity."""

    direction: str = entry(
        "choice", "where things fall to", default="-z", choices=("+x", "-x", "+y", "-y", "+z", "-z")
    )
    value: float = entry("acceleration", "the local value of g", default=STANDARD_GRAVITY, low=0.0)

    def acceleration(self) -> Triple:
        """m/s^2 along x, y, z."""
        out = [0.0, 0.0, 0.0]
        out["xyz".index(self.direction[1])] = self.value if self.direction[0] == "+" else -self.value
        return tuple(out)

    def part(self, mass: float) -> Gradient:
        """Gravity as a part that is always on."""
        return Gradient(acceleration=self.acceleration(), mass=mass)
