"""The harmonic trap (and, flashed on during flight, the harmonic lens)."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from trapsim.fields import ORIGIN, Triple, entry
from trapsim.terms.part import ANYWHERE, Array, Part, Symmetry


@dataclass(frozen=True, kw_only=True)
class Harmonic(Part):
    """A parabola along each direction: V = strength * (m/2) * sum of (2 pi f)^2 (x - centre)^2."""

    kind: ClassVar[str] = "harmonic"
    quadratic: ClassVar[bool] = True

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
    mass: float = 0.0  #: kg, of the atoms; set when the plan is read

    def stiffness(self) -> Array:
        """Curvature of the potential energy, N/m, per direction."""
        return self.strength * self.mass * np.square(self.frequency)

    def energy(self, x: Array, y: Array, z: Array) -> Array:
        terms = (0.5 * k * (u - c) ** 2 for k, u, c in zip(self.stiffness(), (x, y, z), self.centre, strict=True))
        return sum(terms)

    def steer(self, centre: Triple) -> tuple[Array, Array]:
        stiffness = self.stiffness()
        return -stiffness * (np.asarray(centre) - np.asarray(self.centre)), stiffness

    def symmetry(self) -> Symmetry:
        f = self.frequency
        alike = frozenset(a for a in range(3) if f[(a + 1) % 3] == f[(a + 2) % 3])
        return Symmetry((ANYWHERE,) * 3, alike)
