"""Ground state and release of a condensate on one fixed grid, in plain NumPy and SciPy: what trapsim is measured against.

It knows the published methods and nothing else, and nothing of trapsim:

* the ground state by normalised gradient flow (imaginary time) with split steps: W. Bao and Q. Du, SIAM J. Sci. Comput.
  25, 1674 (2004);
* the flight by the split-step Fourier method: J. A. C. Weideman and B. M. Herbst, SIAM J. Numer. Anal. 23, 485 (1986);
  for the Gross-Pitaevskii equation W. Bao, D. Jaksch and P. A. Markowich, J. Comput. Phys. 187, 318 (2003).

i psi_t = [ -(q/2) laplacian + V/hbar + c |psi|^2 ] psi with q = hbar/m, c = 4 pi q a N and norm 1; SI units; no gravity,
since the grid falls with the cloud. The peer is meant to be fair: transforms on all cores, real ones for the ground state,
one phase per step in flight, no work array made twice where NumPy allows it.

    python scripts/textbook.py coarse|fine [milliseconds]     the cloud of configs/release.toml; answers in JSON
"""

from __future__ import annotations

import json
import os
import sys
import time
from dataclasses import dataclass

import numpy as np
from scipy import constants, fft

Array = np.ndarray
WORKERS = os.cpu_count() or 1
MOST_STEPS = 5000


@dataclass(frozen=True)
class Cloud:
    """Atoms in a harmonic trap: q = hbar/m (m^2/s), frequencies (rad/s), c = 4 pi q a N (m^3/s)."""

    q: float
    omega: tuple[float, float, float]
    c: float


@dataclass(frozen=True)
class Setting:
    """Points and full lengths (m) of the grid, the residual of the ground state, the step in flight (s)."""

    points: tuple[int, int, int]
    lengths: tuple[float, float, float]
    residual: float
    step: float


class Grid:
    """Midpoints of equal cells, and the wave numbers that go with them."""

    def __init__(self, points: tuple[int, int, int], lengths: tuple[float, float, float]) -> None:
        self.shape = tuple(points)
        spacing = [length / n for n, length in zip(points, lengths, strict=True)]
        self.cell = float(np.prod(spacing))
        self.x = np.meshgrid(
            *((np.arange(n) - (n - 1) / 2) * d for n, d in zip(points, spacing, strict=True)), indexing="ij", sparse=True
        )
        k = [2 * np.pi * fft.fftfreq(n, d) for n, d in zip(points, spacing, strict=True)]
        half = [*k[:2], 2 * np.pi * fft.rfftfreq(points[2], spacing[2])]
        self.k2, self.half_k2 = (sum(a**2 for a in np.meshgrid(*ks, indexing="ij", sparse=True)) for ks in (k, half))

    def widths(self, psi: Array) -> Array:
        """The rms half-widths, m."""
        density = np.abs(psi) ** 2
        density /= density.sum()
        return np.array([np.sqrt((x**2 * density).sum() - (x * density).sum() ** 2) for x in self.x])


def relax(cloud: Cloud, grid: Grid, residual: float) -> tuple[Array, float, int]:
    """The ground state (real), its chemical potential over hbar (rad/s), and the steps taken.

    Each step is half a potential, a kinetic and half a potential decay, with the density of its start; its fixed point is
    off by the second order of the step. So the step is halved once u hardly moves any more although the residual
    ||H u - mu u||/mu is still too high.
    """
    V = sum(w**2 * x**2 for w, x in zip(cloud.omega, grid.x, strict=True)) / (2 * cloud.q)
    K = 0.5 * cloud.q * grid.half_k2

    def spectral(u: Array, factor: Array) -> Array:
        spectrum = fft.rfftn(u, workers=WORKERS)
        spectrum *= factor
        return fft.irfftn(spectrum, grid.shape, workers=WORKERS, overwrite_x=True)

    def norm(u: Array) -> float:
        return float(np.sqrt(np.vdot(u, u) * grid.cell))

    fermi = (15 * cloud.c * np.prod(cloud.omega) / (8 * np.pi * (2 * cloud.q) ** 1.5)) ** 0.4
    u = np.sqrt(np.maximum(fermi - V, 0) + np.mean(cloud.omega) * np.exp(-V / max(fermi, np.mean(cloud.omega))))
    u /= norm(u)
    dt, steps = 0.5 / (fermi + sum(cloud.omega) / 2), 0
    while True:
        damp = np.exp(-dt * K)
        for _ in range(10):
            half = np.exp(-0.5 * dt * (V + cloud.c * u * u))
            before, u = u, half * spectral(half * u, damp)
            u /= norm(u)
        steps += 10
        Hu = spectral(u, K) + (V + cloud.c * u * u) * u
        mu = float(np.vdot(u, Hu) * grid.cell)
        left = norm(Hu - mu * u) / mu
        if left < residual:
            return u, mu, steps
        if norm(u - before) < 0.3 * left * dt * mu:
            dt /= 2
        if steps > MOST_STEPS:
            raise RuntimeError(f"the ground state stays at a residual of {left:.1e} after {steps} steps")


def fly(cloud: Cloud, grid: Grid, psi: Array, duration: float, steps: int) -> Array:
    """psi after a free flight of that many equal steps; the half kinetic flows between two steps are made as one."""
    dt = duration / steps
    whole = np.exp(-0.5j * cloud.q * dt * grid.k2)
    half = np.exp(-0.25j * cloud.q * dt * grid.k2)
    spectrum = fft.fftn(psi.astype(complex), workers=WORKERS, overwrite_x=True)
    spectrum *= half
    for step in range(steps):
        psi = fft.ifftn(spectrum, workers=WORKERS, overwrite_x=True)
        psi *= np.exp(-1j * dt * cloud.c * (psi.real**2 + psi.imag**2))
        spectrum = fft.fftn(psi, workers=WORKERS, overwrite_x=True)
        spectrum *= whole if step < steps - 1 else half
    return fft.ifftn(spectrum, workers=WORKERS, overwrite_x=True)


def play(cloud: Cloud, setting: Setting, duration: float) -> dict[str, object]:
    """Relax and release a cloud; what came out and what it took, for JSON."""
    began, used = time.perf_counter(), time.process_time()
    grid = Grid(setting.points, setting.lengths)
    u, mu, relaxing = relax(cloud, grid, setting.residual)
    relaxed = time.perf_counter()
    steps = int(np.ceil(duration / setting.step - 1e-9))
    psi = fly(cloud, grid, u, duration, steps)
    flown = time.perf_counter()
    return {
        "points": list(setting.points), "mu_hz": mu / (2 * np.pi), "relaxing_steps": relaxing, "flight_steps": steps,
        "ground_seconds": relaxed - began, "march_seconds": flown - relaxed,
        "processor_seconds": time.process_time() - used, "width_um": (1e6 * grid.widths(psi)).tolist(),
    }  # fmt: skip


def release_cloud() -> Cloud:
    """The cloud of configs/release.toml: 1e5 atoms of Rb-87 (86.909 u, 100.4 Bohr radii) at 20/120/120 Hz."""
    q = constants.hbar / (86.909180531 * constants.atomic_mass)
    a = 100.4 * constants.physical_constants["Bohr radius"][0]
    return Cloud(q, tuple(2 * np.pi * f for f in (20.0, 120.0, 120.0)), 4 * np.pi * q * a * 1e5)


# Found by making each number in turn finer until the widths after 6 ms stood still, then coarser again to the error aimed
# at. Along y the step costs 5e-8 (step/us)^2; the grid 9e-5, 1.3e-5 and 8e-7 with 80, 90 and 108 points. The lengths are
# those of the expanded cloud, 2 sqrt(7) widths, and an edge; the spacing must hold the final speed of the fastest atoms.
SETTINGS = {
    "coarse": Setting((40, 72, 72), (60e-6, 45e-6, 45e-6), residual=1e-3, step=150e-6),  # 1e-3
    "medium": Setting((48, 80, 80), (60e-6, 46e-6, 46e-6), residual=3e-5, step=50e-6),  # 5e-5
    "fine": Setting((72, 108, 108), (66e-6, 52e-6, 52e-6), residual=3e-7, step=5e-6),  # 1e-6
}

if __name__ == "__main__":
    milliseconds = float(sys.argv[2]) if len(sys.argv) > 2 else 6.0
    print(json.dumps(play(release_cloud(), SETTINGS[sys.argv[1]], 1e-3 * milliseconds)))
