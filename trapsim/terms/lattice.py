"""The optical lattice: a standing or moving light wave along one direction."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from trapsim import quantities
from trapsim.constants import HBAR
from trapsim.errors import Complaint
from trapsim.fields import entry
from trapsim.terms.part import ANYWHERE, About, Array, Part, Symmetry

#: points per lattice period that hold a cloud bound in it: at least FEWEST, and PER_DEPTH times the fourth root of the
#: depth in recoil energies, as the cloud at a site is so much narrower; its energy is then good to 1e-7 recoil energies
FEWEST, PER_DEPTH = 8, 5.0


@dataclass(frozen=True, kw_only=True)
class Lattice(Part):
    """V = strength * depth * sin^2(pi x/spacing + phase), peak to peak; the recoil follows the spacing."""

    kind: ClassVar[str] = "lattice"

    axis: str = entry("choice", "the direction along which it is periodic", default="x", choices=("x", "y", "z"))
    wavelength: float | None = entry(
        "length", "of the light, for two beams head to head: the period is half of it", default=None, above=0.0,
        example='"1064 nm"',
    )
    spacing: float | None = entry(
        "length", "the period, for beams at an angle: wavelength/(2 sin(angle/2))", default=None, above=0.0,
        example='"700 nm"',
    )
    depth: float = entry(
        "energy", "peak to peak; also in Er, the recoil energy of one photon of that spacing", low=0.0, ramp=True,
        example='"12 Er"', way_out='no depth is negative: phase = "90 deg" swaps hills and valleys',
    )
    phase: float = entry("angle", "where it is: a minimum at x = -spacing phase/pi", default=0.0, ramp=True,
                         example='"90 deg"')
    detuning: float = entry(
        "frequency", "moves it towards +axis at detuning times spacing, its phase continuous over the stages; also in Er",
        default=0.0, ramp=True, example='"4 Er"',
    )
    mass: float = 0.0  #: kg, of the atoms; set when the plan is read
    travel: float = 0.0  #: rad, what the detuning has added up to; set by the timeline

    @property
    def direction(self) -> int:
        return "xyz".index(self.axis)

    @property
    def period(self) -> float:
        """m."""
        return self.spacing if self.spacing is not None else self.wavelength / 2

    @property
    def k(self) -> float:
        """Wave number of one photon along the axis, pi/spacing, 1/m."""
        return np.pi / self.period

    @property
    def recoil_velocity(self) -> float:
        """hbar k/m, m/s."""
        return HBAR * self.k / self.mass

    @property
    def recoil_energy(self) -> float:
        """(hbar k)^2/(2 m), J."""
        return (HBAR * self.k) ** 2 / (2 * self.mass)

    @classmethod
    def units(cls, table: Mapping[str, Any], mass: float) -> Mapping[str, Mapping[str, float]]:
        """The recoil energy Er (Er/h of a frequency), from the spacing as written; none when that cannot be read."""
        for name, share in (("spacing", 1.0), ("wavelength", 0.5)):
            if name in table:
                try:
                    period = share * quantities.parse(table[name], "length").value
                except quantities.QuantityError:
                    return {}
                recoil = cls(spacing=period, depth=0.0, mass=mass).recoil_energy if period > 0 else 0.0
                return {"energy": {"Er": recoil}, "frequency": {"Er": recoil / HBAR}} if recoil else {}
        return {}

    def complaints(self, place: str) -> list[Complaint]:
        if (self.wavelength is None) == (self.spacing is None):
            got = "neither" if self.spacing is None else "both"
            return [Complaint(f"{place}.wavelength", got, "a lattice has a wavelength or a spacing",
                              'write wavelength = "1064 nm" for two beams head to head, or spacing = "700 nm"')]
        return []

    def energy(self, x: Array, y: Array, z: Array) -> Array:
        along = (x, y, z)[self.direction]
        return self.strength * self.depth * np.sin(self.k * along + self.phase + self.travel) ** 2

    @property
    def grips(self) -> frozenset[int]:
        return frozenset({self.direction})

    def symmetry(self) -> Symmetry:
        even: list[object] = [ANYWHERE] * 3
        even[self.direction] = About(-(self.phase + self.travel) / self.k, self.period / 2)
        return Symmetry(tuple(even), frozenset({self.direction}))

    def finest(self) -> float:
        return self.period

    def rate(self, speed: Array) -> float:
        return 2 * self.k * float(speed[self.direction]) + abs(self.detuning)

    def points_per_period(self) -> int:
        """How many grid points hold a cloud that is bound in it."""
        recoils = self.strength * self.depth / self.recoil_energy
        return max(FEWEST, int(np.ceil(PER_DEPTH * recoils**0.25)))

    def nearest_minimum(self, x: float) -> float:
        """The minimum nearest to the lab coordinate x, m."""
        offset = (self.phase + self.travel) / self.k
        return self.period * round((x + offset) / self.period) - offset
