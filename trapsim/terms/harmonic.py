"""The harmonic trap (and, flashed on during flight, the harmonic lens)."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from trapsim.errors import Complaint
from trapsim.fields import ORIGIN, Triple, entry
from trapsim.terms.part import ANYWHERE, NONE, Array, Part, Symmetry


@dataclass(frozen=True, kw_only=True)
class Harmonic(Part):
    """A parabola along each direction: V = strength * (m/2) * sum of (2 pi f)^2 (x - centre)^2, turned if wanted."""

    kind: ClassVar[str] = "harmonic"

    frequency: Triple = entry(
        "frequency", "trap frequency along x, y, z, in cycles per second", count=3, low=0.0, ramp=True
    )
    centre: Triple | str = entry(
        "length",
        "where the minimum is without gravity; \"held\" moves it so that the equilibrium stays in place",
        default=ORIGIN, count=3, words=("held",), ramp=True,
    )
    at: str = entry(
        "choice",
        "\"centre\", or \"cloud\": centred on the cloud's classical centre when the part is switched on",
        default="centre", choices=("centre", "cloud"),
    )
    turn: Triple = entry(
        "angle", "turns it about its centre: about x, then y, then z, right-handed", default=ORIGIN, count=3
    )
    mass: float = 0.0  #: kg, of the atoms; set when the plan is read

    @property
    def quadratic(self) -> bool:
        """A turned trap couples the directions, which no frame takes up."""
        return not any(self.turn)

    def stiffness(self) -> Array:
        """Curvature of the potential energy, N/m, per direction."""
        return self.strength * self.mass * np.square(self.frequency)

    def matrix(self) -> Array:
        """Second derivatives of the potential energy in the lab, N/m."""
        rotation = np.eye(3)
        for axis, angle in enumerate(self.turn):
            c, s = np.cos(angle), np.sin(angle)
            first, second = (axis + 1) % 3, (axis + 2) % 3
            step = np.eye(3)
            step[first, first] = step[second, second] = c
            step[second, first], step[first, second] = s, -s
            rotation = step @ rotation
        return (rotation * self.stiffness()) @ rotation.T

    def energy(self, x: Array, y: Array, z: Array) -> Array:
        u = [v - c for v, c in zip((x, y, z), self.centre, strict=True)]
        if self.quadratic:
            return sum(0.5 * k * v**2 for k, v in zip(self.stiffness(), u, strict=True))
        matrix = self.matrix()
        return sum(0.5 * matrix[i, j] * u[i] * u[j] for i in range(3) for j in range(3))

    def steer(self, centre: Triple) -> tuple[Array, Array]:
        away = np.asarray(centre, dtype=float) - np.asarray(self.centre)
        if self.quadratic:
            stiffness = self.stiffness()
            return -stiffness * away, stiffness
        matrix = self.matrix()
        return -matrix @ away, np.diag(matrix).copy()

    def symmetry(self) -> Symmetry:
        f = self.frequency
        alike = frozenset(a for a in range(3) if f[(a + 1) % 3] == f[(a + 2) % 3])
        if self.quadratic or len(alike) == 3:
            return Symmetry((ANYWHERE,) * 3, alike)
        about = [axis for axis in range(3) if self.turn[axis]]
        return Symmetry((NONE,) * 3, alike & frozenset(about) if len(about) == 1 else frozenset())

    def complaints(self, place: str) -> list[Complaint]:
        if self.centre == "held" and not self.quadratic:
            return [Complaint(f"{place}.turn", "", "a trap whose centre is held is not turned", "give its centre")]
        return []
