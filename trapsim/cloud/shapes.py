"""First guesses of a trapped cloud: Gaussian and Thomas-Fermi."""

from __future__ import annotations

import numpy as np
from scipy import optimize

from trapsim.space.space import Array, Space


def gaussian_widths(omega: Array, q: float, scattering_number: float) -> Array:
    """Rms widths of the Gaussian of least energy in a harmonic trap, m; infinite where omega is zero.

    Source: V. M. Perez-Garcia et al., Phys. Rev. Lett. 77, 5320 (1996): the energy per atom over hbar of a Gaussian
    with rms widths s_j is sum_j [ q/(8 s_j^2) + w_j^2 s_j^2/(2 q) ] + q N a/(4 sqrt(pi) s_x s_y s_z).
    For attraction the widths of the ideal gas are given: wider than the cloud, and outside any collapsed state.

    Parameters
    ----------
    omega : (3,)
        rad/s; directions with zero are left out (the caller's business is to have folded their length into
        `scattering_number`).
    q : float
        hbar/m.
    scattering_number : float
        N a in m when all three directions are trapped; N a / L or N a / (L L') with untrapped lengths L.
    """
    trapped = np.asarray(omega) > 0
    w = np.asarray(omega, dtype=float)[trapped]
    ideal = np.sqrt(q / (2 * w))
    out = np.full(3, np.inf)
    # each untrapped direction replaces one factor 1/(2 sqrt(pi) s) by 1/L
    strength = 2 * np.pi * q * scattering_number / (2 * np.sqrt(np.pi)) ** len(w)
    if scattering_number <= 0:
        out[trapped] = ideal
        return out
    unit = w.mean()

    def energy(logs: Array) -> float:
        s = ideal * np.exp(logs)
        return float(np.sum(q / (8 * s**2) + w**2 * s**2 / (2 * q)) + strength / np.prod(s)) / unit

    best = optimize.minimize(energy, np.zeros(len(w)), method="BFGS", options={"gtol": 1e-6})
    out[trapped] = ideal * np.exp(best.x)
    return out


def chemical_potential_guess(omega: Array, q: float, scattering_number: float) -> float:
    """mu/hbar of the best Gaussian, rad/s: exact for an ideal gas, some 10 % high for a large cloud."""
    s = gaussian_widths(omega, q, scattering_number)
    trapped = np.isfinite(s)
    w, s = np.asarray(omega)[trapped], s[trapped]
    mean_field = 2 * np.pi * q * scattering_number / (2 * np.sqrt(np.pi)) ** len(w) / np.prod(s)
    return float(np.sum(q / (8 * s**2) + w**2 * s**2 / (2 * q)) + 2 * mean_field)


def gaussian(space: Space, widths: Array) -> Array:
    """A normalised real Gaussian amplitude with rms density half-widths (3,), on the points of a space."""
    inverse = np.where(np.isfinite(widths), 1 / (4 * np.asarray(widths) ** 2), 0.0)
    u = np.exp(-space.quadratic(inverse)) * np.ones(space.shape)
    return u / np.sqrt(space.integral(u**2))


def thomas_fermi(space: Space, potential: Array, coupling: float, *, soft: float) -> Array:
    """A normalised Thomas-Fermi amplitude in a potential/hbar (rad/s), with a soft edge.

    The chemical potential is found by bisection so that int max(mu - V, 0)/coupling = 1; `soft` (rad/s) rounds
    the edge off, as a Gaussian tail of that energy scale would.
    """
    lowest = float(potential.min())

    def excess(mu: float) -> float:
        return space.integral(_rounded(mu - potential, soft)) / coupling - 1.0

    high = lowest + soft
    while excess(high) < 0:
        high = lowest + 2 * (high - lowest)
    mu = optimize.brentq(excess, lowest - 40 * soft, high, rtol=1e-6)
    u = np.sqrt(_rounded(mu - potential, soft))
    return u / np.sqrt(space.integral(u**2))


def between_walls(space: Space, u: Array, healing: float) -> Array:
    """An amplitude brought to zero at perfectly reflecting walls, as tanh(distance/healing), and normalised.

    That is the profile of a large cloud at a wall (textbook).
    """
    for d, axis in enumerate(space.axes):
        if axis.walled:
            low, high = axis.half_extent + axis.points, axis.half_extent - axis.points
            u = u * space.along(d, np.tanh(low / healing) * np.tanh(high / healing))
    return u / np.sqrt(space.integral(u**2))


def _rounded(x: Array, soft: float) -> Array:
    """A smooth max(x, 0): soft * log(1 + exp(x/soft))."""
    return soft * np.logaddexp(0.0, x / soft)
