"""Isotropic ground states of a trapped condensate and their collapse, by Chebyshev collocation and Newton's method.

-1/2 lap psi + r^2/2 psi + beta |psi|^2 psi = mu psi with the norm 1; beta = 4 pi N a/a_ho in three dimensions.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import pi, sqrt

import numpy as np

from . import newton
from .spectral import Array, Radius, radius


@dataclass(frozen=True)
class Isotropic:
    """An isotropic ground state: energies per atom, `width` = rms along one direction, `psi` at `grid.r`."""

    mu: float
    energy: float
    kinetic: float
    potential: float
    interaction: float
    peak_density: float
    width: float
    psi: Array
    grid: Radius
    beta: float


def _cubic(u: Array) -> tuple[Array, Array]:
    return u**3, np.diag(3 * u**2)


def isotropic(dimension: int, beta: float, *, points: int = 120, reach: float | None = None) -> Isotropic:
    """The ground state in the trap r^2/2 in 1, 2 or 3 dimensions, for any beta that has one."""
    grid = radius(dimension, reach or newton.edge(dimension, beta), points=points)
    hamiltonian = grid.hamiltonian()
    metric = grid.sample.T @ (grid.weights[:, None] * grid.sample)
    state = pi ** (-dimension / 4) * np.exp(-(grid.r**2) / 2), dimension / 2
    if beta > 5:
        mu = newton.thomas_fermi_mu(dimension, beta)
        state = newton.soft_thomas_fermi(mu, beta, grid.r**2 / 2), mu
    for step in newton.stairs(beta):
        state = newton.solve(hamiltonian, _cubic, metric, state, step)
    psi, mu = state
    u, slope = grid.sample @ psi, grid.slope @ psi
    square = grid.integral(grid.q**2 * u**2)
    kinetic, interaction = grid.integral(slope**2) / 2, beta * grid.integral(u**4) / 2
    return Isotropic(
        mu=mu,
        energy=kinetic + square / 2 + interaction,
        kinetic=kinetic,
        potential=square / 2,
        interaction=interaction,
        peak_density=float(grid.at_zero @ psi) ** 2,
        width=sqrt(square / dimension),
        psi=psi,
        grid=grid,
        beta=beta,
    )


def critical_isotropic(*, points: int = 120) -> tuple[float, float]:
    """N |a|/a_ho beyond which an attractive gas in an isotropic trap collapses, and mu there.

    Quantity: Ruprecht et al., PRA 51, 4704 (1995); Gammal et al., PRA 64, 055602 (2001).
    """
    first = isotropic(3, -4 * pi * 0.57, points=points)
    grid = first.grid

    def norm(u: Array) -> float:
        return grid.integral((grid.sample @ u) ** 2)

    start = sqrt(-first.beta) * first.psi
    beta, mu = newton.largest_attraction(grid.hamiltonian(), _cubic, norm, start, (0.25, 0.48))
    return beta / (4 * pi), mu
