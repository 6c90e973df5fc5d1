"""The box: a flat bottom between walls, soft or perfectly hard."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from scipy import special

from trapsim.errors import Complaint
from trapsim.fields import ORIGIN, Triple, entry
from trapsim.terms.part import About, Array, Part, Symmetry

#: the word for an edge of no width
HARD = "hard"
#: 10-90 % width of an error-function edge, in its standard deviations
EDGE = 2 * np.sqrt(2) * special.erfinv(0.8)


@dataclass(frozen=True, kw_only=True)
class Box(Part):
    """Walls around a flat bottom: of finite height, their profile an error function; or perfectly reflecting ones."""

    kind: ClassVar[str] = "box"

    shape: str = entry(
        "choice", "a cuboid, or a cylinder along `axis`", default="cuboid", choices=("cuboid", "cylinder")
    )
    axis: str = entry("choice", "of the cylinder", default="x", choices=("x", "y", "z"))
    size: Triple = entry(
        "length", "full size along x, y, z where the wall has half its height; across a cylinder, its diameter twice",
        count=3, above=0.0, ramp=True, example='"40 um"',
    )
    height: float | None = entry(
        "energy", "of the walls; needed unless the edge is hard", default=None, above=0.0, ramp=True, example='"200 nK"'
    )
    edge: float | str = entry(
        "length", "from 10 to 90 % of the wall's height; \"hard\": perfectly reflecting walls, which stand still until a "
        "release takes them away at once", above=0.0, ramp=True, words=(HARD,), example='"1 um"',
    )
    centre: Triple = entry("length", "the middle of the box", default=ORIGIN, count=3, ramp=True)

    @property
    def hard(self) -> bool:
        """Whether its walls are perfectly reflecting: the wave function vanishes on them."""
        return self.edge == HARD

    @property
    def along(self) -> int:
        return "xyz".index(self.axis)

    @property
    def across(self) -> tuple[int, ...]:
        return tuple(j for j in range(3) if j != self.along)

    def complaints(self, place: str) -> list[Complaint]:
        first, second = self.across
        out = []
        if self.shape == "cylinder" and self.size[first] != self.size[second]:
            out.append(Complaint(
                f"{place}.size", f"{1e6 * self.size[first]:g} um and {1e6 * self.size[second]:g} um across",
                "a cylinder has one diameter", "write it twice, or shape = \"cuboid\"",
            ))  # fmt: skip
        if self.hard:
            return out + self._hard_complaints(place)
        if self.height is None:
            out.append(Complaint(f"{place}.height", "", "soft walls have a height", 'write height = "200 nK"'))
        if self.edge > min(self.size) / 2:
            out.append(Complaint(
                f"{place}.edge", f"{1e6 * self.edge:g} um", "walls softer than half the box leave no flat bottom",
                "write a smaller edge",
            ))  # fmt: skip
        return out

    def _hard_complaints(self, place: str) -> list[Complaint]:
        if self.shape != "cuboid":
            return [Complaint(f"{place}.edge", f'"{HARD}"', "only a cuboid has perfectly reflecting walls",
                              'write a soft edge, such as edge = "1 um", or shape = "cuboid"')]
        if self.strength != 1:
            return [Complaint(
                f"{place}.strength", f"{self.strength:g}",
                "perfectly reflecting walls are there from the start, and nothing weakens them",
                'leave strength out, or write a soft edge, such as edge = "1 um"',
            )]  # fmt: skip
        return []

    def _inside(self, distance: Array, half: float) -> Array:
        """1 inside, 0 outside, 1/2 at `half`, for a distance from the middle that may have either sign."""
        width = np.sqrt(2) * self.edge / EDGE
        return 0.5 * (special.erf((distance + half) / width) - special.erf((distance - half) / width))

    def energy(self, x: Array, y: Array, z: Array) -> Array | float:
        if self.hard:
            return 0.0  # between the walls; beyond them nobody is
        u = [v - c for v, c in zip((x, y, z), self.centre, strict=True)]
        if self.shape == "cuboid":
            inside = np.prod([1.0])
            for distance, size in zip(u, self.size, strict=True):
                inside = inside * self._inside(distance, size / 2)
        else:
            first, second = self.across
            radius = np.sqrt(u[first] ** 2 + u[second] ** 2)
            width = np.sqrt(2) * self.edge / EDGE
            tube = 0.5 * special.erfc((radius - self.size[first] / 2) / width)
            inside = self._inside(u[self.along], self.size[self.along] / 2) * tube
        return self.strength * self.height * (1 - inside)

    @property
    def grips(self) -> frozenset[int]:
        return frozenset({0, 1, 2})

    @property
    def walls(self) -> frozenset[int]:
        return frozenset({0, 1, 2}) if self.hard else frozenset()

    def symmetry(self) -> Symmetry:
        even = tuple(About(c) for c in self.centre)
        return Symmetry(even, frozenset({self.along}) if self.shape == "cylinder" else frozenset())

    def finest(self) -> float:
        return np.inf if self.hard else self.edge
