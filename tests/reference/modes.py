"""Small oscillations of a trapped condensate: Bogoliubov's equations on Chebyshev points, and Thomas-Fermi formulas."""

from __future__ import annotations

from math import sqrt

import numpy as np

from .spectral import Array, radius
from .stationary import isotropic


def frequencies(dimension: int, beta: float, angular: int, *, points: int = 60, count: int = 4) -> Array:
    """The lowest excitation frequencies at one angular momentum in the isotropic trap, in units of its frequency.

    Squares of them are eigenvalues of (H0 + g n - mu)(H0 + 3 g n - mu); here the two factors stand in one block matrix.
    In three dimensions angular = 0 gives the monopole, 1 the centre's motion, 2 the quadrupole.
    """
    even = isotropic(dimension, beta, points=points)
    reach = even.grid.r[0] / np.cos(np.pi / (2 * points + 1))
    grid = radius(dimension, reach, points=points, odd=angular % 2 == 1)
    one = grid.hamiltonian(angular) - even.mu * np.eye(points)
    density = np.diag(beta * even.psi**2)
    zero = np.zeros_like(one)
    values = np.linalg.eigvals(np.block([[zero, one + density], [one + 3 * density, zero]]))
    real = np.sort(values.real[np.abs(values.imag) < 1e-3])
    return real[real > 0.1][:count]


def monopole(beta: float) -> float:
    """The breathing frequency of an isotropic cloud of finite size, in units of the trap's."""
    return float(frequencies(3, beta, 0)[0])


def quadrupole(beta: float) -> float:
    """The quadrupole frequency of an isotropic cloud of finite size, in units of the trap's."""
    return float(frequencies(3, beta, 2)[0])


def thomas_fermi_isotropic(n: int, angular: int) -> float:
    """sqrt(2 n^2 + 2 n l + 3 n + l): modes of a large isotropic cloud; Stringari, PRL 77, 2360 (1996)."""
    return sqrt(2 * n * n + 2 * n * angular + 3 * n + angular)


def ideal_isotropic(n: int, angular: int) -> float:
    """2 n + l: the modes without interaction."""
    return float(2 * n + angular)


def thomas_fermi_round(lam: float) -> tuple[float, float]:
    """The two m = 0 modes of a large cloud in a round trap, in units of the frequency across; Stringari (1996).

    omega^2 = 2 + 3/2 lam^2 -+ 1/2 sqrt(9 lam^4 - 16 lam^2 + 16).
    """
    middle, apart = 2 + 1.5 * lam**2, sqrt(9 * lam**4 - 16 * lam**2 + 16) / 2
    return sqrt(middle - apart), sqrt(middle + apart)
