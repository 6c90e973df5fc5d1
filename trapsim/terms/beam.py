"""A focused laser beam, far from resonance: it attracts (or, with a negative depth, repels)."""

from __future__ import annotations

from dataclasses import dataclass
from typing import ClassVar

import numpy as np
from scipy import constants as codata

from trapsim.errors import Complaint
from trapsim.fields import ORIGIN, Triple, entry
from trapsim.terms.part import About, Array, Part, Symmetry

DIRECTIONS = {"x": (1.0, 0.0, 0.0), "y": (0.0, 1.0, 0.0), "z": (0.0, 0.0, 1.0)}


@dataclass(frozen=True, kw_only=True)
class Beam(Part):
    """A Gaussian beam: V = -depth (w0/w)^2 exp(-2 rho^2/w^2), w = w0 sqrt(1 + (s/z_R)^2), z_R = pi w0^2/wavelength.

    From power P and polarisability alpha the depth is alpha P/(pi eps0 c w0^2) (R. Grimm, M. Weidemueller and Y. B.
    Ovchinnikov, Adv. At. Mol. Opt. Phys. 42, 95 (2000), with I0 = 2 P/(pi w0^2)).
    """

    kind: ClassVar[str] = "beam"

    direction: str | Triple = entry(
        "number", "where the light goes: \"x\", \"y\", \"z\", or three numbers such as [1, 1, 0]", count=3,
        words=("x", "y", "z"), default="x", example="[1, 1, 0]",
    )
    waist: float = entry(
        "length", "radius at the focus where the intensity is 1/e^2 of its peak", above=0.0, ramp=True,
        example='"50 um"',
    )
    wavelength: float = entry("length", "of the light", above=0.0, example='"1064 nm"')
    focus: Triple = entry("length", "where the focus is", default=ORIGIN, count=3, ramp=True)
    depth: float | None = entry("energy", "how deep it is at the focus", default=None, ramp=True, example='"5 uK"')
    power: float | None = entry(
        "power", "of the light, together with the polarisability", default=None, low=0.0, ramp=True,
        example='"100 mW"',
    )
    polarisability: float | None = entry(
        "polarisability", "of the atoms at this wavelength, in atomic units", default=None, example='"687 au"'
    )

    def complaints(self, place: str) -> list[Complaint]:
        out = []
        if not isinstance(self.direction, str) and not any(self.direction):
            out.append(Complaint(f"{place}.direction", "[0, 0, 0]", "this points nowhere", "write \"x\" or [1, 1, 0]"))
        light = {"power": self.power, "polarisability": self.polarisability}
        given = [name for name, value in light.items() if value is not None]
        if (self.depth is None) == (not given):
            got = f"a depth and a {given[0]}" if given else "neither"
            out.append(Complaint(f"{place}.depth", got, "a beam has either a depth, or a power and a polarisability",
                                 'write depth = "5 uK", or power = "100 mW" and polarisability = "687 au"'))
        elif len(given) == 1:
            (lacking,) = set(light) - set(given)
            example = {"power": "100 mW", "polarisability": "687 au"}[lacking]
            out.append(Complaint(f"{place}.{lacking}", "", f"a {given[0]} goes with a {lacking}: both make the depth",
                                 f'write {lacking} = "{example}", or a depth in place of both'))
        return out

    def along(self) -> Array:
        """Unit vector of the beam."""
        v = np.asarray(DIRECTIONS[self.direction] if isinstance(self.direction, str) else self.direction, dtype=float)
        return v / np.linalg.norm(v)

    @property
    def full_depth(self) -> float:
        """J, at strength 1."""
        if self.depth is not None:
            return self.depth
        return self.polarisability * self.power / (np.pi * codata.epsilon_0 * codata.c * self.waist**2)

    @property
    def rayleigh(self) -> float:
        """m."""
        return np.pi * self.waist**2 / self.wavelength

    def energy(self, x: Array, y: Array, z: Array) -> Array:
        u = [v - f for v, f in zip((x, y, z), self.focus, strict=True)]
        n = self.along()
        s = sum(a * b for a, b in zip(u, n, strict=True))
        rho2 = sum(a**2 for a in u) - s**2
        shrink = 1 / (1 + (s / self.rayleigh) ** 2)
        return -self.strength * self.full_depth * shrink * np.exp(-2 * rho2 * shrink / self.waist**2)

    def steer(self, centre: Triple) -> tuple[Array, Array]:
        """Slope and curvature at a point, from the derivatives of the profile; what is left is not small far away."""
        u = np.asarray(centre, dtype=float) - np.asarray(self.focus)
        n = self.along()
        s = float(u @ n)
        across = u - s * n
        rho2 = float(across @ across)
        zr2, w2 = self.rayleigh**2, self.waist**2
        g = 1 / (1 + s * s / zr2)
        # with G = -1/V_0: V = V_0 g exp(E), E = -2 rho2 g/w2; g' = -2 s g^2/zr2, g'' = g^2 (8 s^2 g/zr2 - 2)/zr2
        g1 = -2 * s * g * g / zr2
        g2 = g * g * (8 * s * s * g / zr2 - 2) / zr2
        value = -self.strength * self.full_depth * g * np.exp(-2 * rho2 * g / w2)
        ln_s = g1 / g - 2 * rho2 * g1 / w2
        ln_ss = g2 / g - (g1 / g) ** 2 - 2 * rho2 * g2 / w2
        gradient = ln_s * n - 4 * g * across / w2
        # diagonal of the second derivatives of ln|V|
        mixed = -8 * g1 / w2 * n * across
        second = ln_ss * n**2 - 4 * g / w2 * (1 - n**2) + mixed
        return -value * gradient, value * (gradient**2 + second)

    def symmetry(self) -> Symmetry:
        along = [j for j in range(3) if abs(self.along()[j]) == 1.0]
        even = tuple(About(f) for f in self.focus) if along else ("none",) * 3
        return Symmetry(even, frozenset(along))

    def finest(self) -> float:
        return self.waist
