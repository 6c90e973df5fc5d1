"""A cloud on a fixed grid in the lab, as plainly as can be: numpy's transforms, plain splitting, nothing clever.

No moving frame, no symmetry, no adaptive step. Good for small clouds and short times, and that is its use: to stand beside
anything. SI units; the wave function is normalised to 1. Split-step: M. D. Feit, J. A. Fleck and A. Steiger, J. Comput.
Phys. 47, 412 (1982).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from math import pi

import numpy as np
from scipy.constants import hbar
from scipy.stats import norm

Array = np.ndarray
Potential = Callable[[Array, Array, Array], Array]


@dataclass(frozen=True)
class Grid:
    """Points and full lengths (m) along x, y, z, for atoms of a mass (kg)."""

    points: tuple[int, int, int]
    lengths: tuple[float, float, float]
    mass: float

    @property
    def cell(self) -> float:
        return float(np.prod([length / n for length, n in zip(self.lengths, self.points, strict=True)]))

    def places(self) -> list[Array]:
        """Coordinates along x, y, z, ready to be broadcast."""
        lines = [(np.arange(n) / n - 0.5) * length for n, length in zip(self.points, self.lengths, strict=True)]
        return list(np.meshgrid(*lines, indexing="ij", sparse=True))

    def waves(self) -> list[Array]:
        lines = [2 * pi * np.fft.fftfreq(n, length / n) for n, length in zip(self.points, self.lengths, strict=True)]
        return list(np.meshgrid(*lines, indexing="ij", sparse=True))

    def kinetic(self) -> Array:
        """(hbar/2m) k^2 on the spectral points, rad/s."""
        return hbar / (2 * self.mass) * sum(k**2 for k in self.waves())

    def coupling(self, number: float, a: float) -> float:
        """Mean-field phase rate per density of a normalised wave function, m^3/s: 4 pi hbar a N/m."""
        return 4 * pi * hbar * a * number / self.mass

    def normalised(self, psi: Array) -> Array:
        return psi / np.sqrt(np.sum(np.abs(psi) ** 2) * self.cell)


def ground(grid: Grid, potential: Array, g: float, guess: Array, *, tolerance: float = 1e-7, most: int = 4000) -> Array:
    """The ground state for a potential (J on the grid) and a coupling g (m^3/s): steepest descent, preconditioned by K."""
    v, kinetic = potential / hbar, grid.kinetic()
    u = grid.normalised(guess)

    def against(field: Array, by: Array) -> float:
        return float(np.sum(field * by) * grid.cell)

    for _ in range(most):
        hu = np.fft.ifftn(kinetic * np.fft.fftn(u)).real + (v + g * u**2) * u
        mu = against(u, hu)
        r = hu - mu * u
        if np.sqrt(against(r, r)) < tolerance * mu:
            return u
        z = np.fft.ifftn(np.fft.fftn(r) / (kinetic + 2 * mu)).real
        z -= against(u, z) * u
        hz = np.fft.ifftn(kinetic * np.fft.fftn(z)).real + (v + 3 * g * u**2 - mu) * z
        u = grid.normalised(u - min(against(r, z) / against(z, hz), 10.0) * z)
    raise RuntimeError("the reference has no ground state")


def play(
    grid: Grid, psi: Array, potential: Callable[[float], Array], g: float, *, duration: float, steps: int
) -> Array:
    """The wave function after a time under a potential (t -> J on the grid), by equal Strang steps."""
    dt = duration / steps
    flow = np.exp(-1j * dt * grid.kinetic())
    psi = psi.astype(complex)
    for i in range(steps):
        v = potential((i + 0.5) * dt) / hbar
        psi *= np.exp(-0.5j * dt * (v + g * np.abs(psi) ** 2))
        psi = np.fft.ifftn(flow * np.fft.fftn(psi))
        psi *= np.exp(-0.5j * dt * (v + g * np.abs(psi) ** 2))
    return psi


@dataclass(frozen=True)
class Seen:
    """Means of x, y, z (m), rms half-widths (m), mean velocities (m/s) and energies per atom (J) of a wave function."""

    centre: Array
    width: Array
    velocity: Array
    kinetic: Array
    interaction: float


def look(grid: Grid, psi: Array, g: float) -> Seen:
    n = np.abs(psi) ** 2 * grid.cell
    centre = np.array([float(np.sum(n * x)) for x in grid.places()])
    width = np.array([float(np.sqrt(np.sum(n * (x - c) ** 2))) for x, c in zip(grid.places(), centre, strict=True)])
    spectrum = np.abs(np.fft.fftn(psi)) ** 2
    spectrum /= spectrum.sum()
    k = np.array([float(np.sum(spectrum * w)) for w in grid.waves()])
    k2 = np.array([float(np.sum(spectrum * w**2)) for w in grid.waves()])
    return Seen(
        centre, width, hbar * k / grid.mass, hbar**2 * k2 / (2 * grid.mass),
        hbar * g / 2 * float(np.sum(np.abs(psi) ** 4) * grid.cell),
    )  # fmt: skip


def column(grid: Grid, psi: Array, along: int) -> Array:
    """The column density along a direction, 1/m^2."""
    return np.sum(np.abs(psi) ** 2, axis=along) * grid.lengths[along] / grid.points[along]


def cuboid(
    x: Sequence[Array], *, size: Sequence[float], height: float, edge: float, centre: Sequence[float] = (0, 0, 0)
) -> Array:
    """Soft walls (J): 10-90 % width `edge`, half their height at half the size; the profile is a normal distribution's."""
    sigma = edge / (norm.ppf(0.9) - norm.ppf(0.1))
    inside: Array = np.ones(1)
    for u, length, c in zip(x, size, centre, strict=True):
        inside = inside * (norm.cdf((u - c + length / 2) / sigma) - norm.cdf((u - c - length / 2) / sigma))
    return height * (1 - inside)


def cylinder(
    x: Sequence[Array], *, length: float, diameter: float, height: float, edge: float
) -> Array:
    """A soft tube along x with soft ends (J)."""
    sigma = edge / (norm.ppf(0.9) - norm.ppf(0.1))
    ends = norm.cdf((x[0] + length / 2) / sigma) - norm.cdf((x[0] - length / 2) / sigma)
    return height * (1 - ends * norm.sf((np.hypot(x[1], x[2]) - diameter / 2) / sigma))
