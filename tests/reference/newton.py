"""Newton's method for -1/2 lap psi + V psi + beta |psi|^2 psi = mu psi on any discretisation, and starts for it."""

from __future__ import annotations

from collections.abc import Callable
from math import sqrt

import numpy as np
from scipy.optimize import minimize_scalar

from .spectral import Array, sphere

#: Gives the cubic term of a state and the derivative matrix of that term.
Cubic = Callable[[Array], tuple[Array, Array]]


def thomas_fermi_mu(dimension: int, beta: float) -> float:
    """The Thomas-Fermi chemical potential in the trap r^2/2; Dalfovo et al., RMP 71, 463 (1999)."""
    d = dimension
    return 0.5 * (d * (d + 2) * max(beta, 0.0) / sphere(d)) ** (2 / (d + 2))


def soft_thomas_fermi(mu: float, beta: float, potential: Array) -> Array:
    """The Thomas-Fermi profile with its edge smoothed over a layer."""
    layer = mu ** (1 / 3) / 2
    return np.sqrt(layer * np.logaddexp(0, (mu - potential) / layer) / beta)


def stairs(beta: float) -> list[float]:
    """Couplings that lead to `beta` in steps Newton's method can follow; one step suffices for repulsion."""
    return [beta] if beta >= 0 else [*np.linspace(0, beta, 2 + int(abs(beta) / 0.25))[1:]]


def solve(
    hamiltonian: Array, cubic: Cubic, metric: Array, start: tuple[Array, float], beta: float
) -> tuple[Array, float]:
    """Solve H u + beta cubic(u) = mu u with u.metric.u = 1 for (u, mu)."""
    u, mu = start
    count = len(u)
    for _ in range(30):
        value, slope = cubic(u)
        norm = metric @ u
        matrix = np.zeros((count + 1, count + 1))
        matrix[:count, :count] = hamiltonian + beta * slope - mu * np.eye(count)
        matrix[:count, count] = -u
        matrix[count, :count] = 2 * norm
        rest = np.append(hamiltonian @ u + beta * value - mu * u, u @ norm - 1)
        step = np.linalg.solve(matrix, -rest)
        u, mu = u + step[:count], mu + step[count]
        if np.abs(step).max() < 1e-10 * max(1, abs(mu)):
            return u, float(mu)
    raise ArithmeticError(f"no ground state found at beta = {beta}")


def largest_attraction(
    hamiltonian: Array, cubic: Cubic, norm: Callable[[Array], float], start: Array, bracket: tuple[float, float]
) -> tuple[float, float]:
    """The largest |beta| on the branch of attractive states, and mu there.

    H u - cubic(u) = mu u is solved at fixed mu, where the norm of u is |beta| and Newton's method stays regular beyond
    the fold; the maximum over mu inside `bracket` is the point of collapse.
    """
    u = start

    def coupling(mu: float) -> float:
        nonlocal u
        for _ in range(40):
            value, slope = cubic(u)
            step = np.linalg.solve(hamiltonian - slope - mu * np.eye(len(u)), mu * u + value - hamiltonian @ u)
            u = u + step
            if np.abs(step).max() < 1e-10 * np.abs(u).max():
                return norm(u)
        raise ArithmeticError(f"no attractive state found at mu = {mu}")

    found = minimize_scalar(lambda mu: -coupling(mu), bounds=bracket, method="bounded", options={"xatol": 1e-7})
    return -float(found.fun), float(found.x)


def edge(dimension: int, beta: float) -> float:
    """Where the tail has fallen below 1e-8: the Thomas-Fermi radius and an Airy tail, at most 6.5."""
    radius = sqrt(2 * thomas_fermi_mu(dimension, beta))
    return radius + (min(6.5, 9.0 / radius ** (1 / 3)) if beta > 0 else 6.5)
