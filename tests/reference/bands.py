"""Bands of V = s sin^2(k x) by plane waves, in recoil units; energies count from the potential's minimum.

The Bloch state of quasi-momentum p (in k, the zone is -1 ... 1) is a sum of plane waves p + 2 n. Force in units of
E_R per spacing where it is called alpha, so that the Bloch period is h/(alpha E_R).
"""

from __future__ import annotations

from math import exp, pi

import numpy as np
from scipy import integrate

from reference.planewaves import KEPT, matrix

Array = np.ndarray


def bloch(s: float, p: float = 0.0, *, band: int = 0, kept: int = KEPT) -> tuple[float, Array]:
    """Energy (E_R) of a Bloch state and its amplitudes of orders -kept ... kept."""
    energies, states = np.linalg.eigh(matrix(s, p, kept=kept))
    return float(energies[band]), states[:, band]


def populations(s: float, p: float = 0.0, *, kept: int = KEPT) -> dict[str, float]:
    """Populations by order of the lowest Bloch state: what a sudden release of it shows."""
    return {str(n - kept): float(abs(a) ** 2) for n, a in enumerate(bloch(s, p, kept=kept)[1])}


def hopping(s: float, *, neighbours: int = 1, samples: int = 64) -> float:
    """J (E_R) from the band itself: E(p) = E_0 - 2 J cos(pi p) - 2 J_2 cos(2 pi p) - ..."""
    p = 2 * np.arange(samples) / samples
    energies = [bloch(s, (x + 1) % 2 - 1)[0] for x in p]
    return -float(np.mean(energies * np.cos(neighbours * pi * p)))


def velocity(s: float, p: float, *, h: float = 1e-4) -> float:
    """Mean velocity of the lowest Bloch state, in recoils: (1/2) dE/dp."""
    return (bloch(s, p + h)[0] - bloch(s, p - h)[0]) / (4 * h)


def landau_zener(s: float, alpha: float) -> float:
    """The share that changes bands at the zone's edge, exp(-pi^2 s^2/(32 alpha)): E. Peik et al., PRA 55, 2989 (1997)."""
    return exp(-(pi**2) * s**2 / (32 * alpha))


def driven(s: float, alpha: float, tau: float, p: float = 0.0, *, waves: int = 8) -> Array:
    """Amplitudes of p + 2 n in the accelerated frame after a force alpha (E_R per spacing) for tau (hbar/E_R).

    The quasi-momentum grows as p + alpha tau/pi; starts in the lowest Bloch state. `waves` are kept on either side. DOP853.
    """
    coupling = matrix(s, kept=waves) - np.diag((2 * np.arange(-waves, waves + 1)) ** 2)
    n = np.arange(-waves, waves + 1)

    def slope(t: float, c: Array) -> Array:
        return -1j * ((p + alpha * t / pi + 2 * n) ** 2 * c + coupling @ c)

    first = bloch(s, p, kept=waves)[1].astype(complex)
    solution = integrate.solve_ivp(slope, (0.0, tau), first, method="DOP853", rtol=1e-9, atol=1e-11)
    return np.pad(solution.y[:, -1], KEPT - waves)


def lowest_share(amplitudes: Array, s: float, p: float) -> float:
    """How much of some amplitudes p + 2 n is in the lowest band."""
    return float(abs(np.vdot(bloch(s, p, kept=len(amplitudes) // 2)[1], amplitudes)) ** 2)


#: depth s: band bottom, band top, J/E_R, J of next neighbours (independent calculation; 4 J is also printed by I. Bloch,
#: J. Dalibard and W. Zwerger, Rev. Mod. Phys. 80, 885 (2008), for s = 3, 5, 10, 20, values from memory)
ROWS = (
    (1.0, 0.46896060, 1.24242883, 0.17811823),
    (2.0, 0.87823446, 1.47065435, 0.14275502),
    (3.0, 1.23412197, 1.68601632, 0.11102732),
    (5.0, 1.81877404, 2.08298529, 0.06576735),
    (10.0, 2.84692166, 2.92366849, 0.01918245),
    (20.0, 4.19995398, 4.20991940, 0.00249135),
    (30.0, 5.21289154, 5.21474307, 0.00046288),
)
#: s, alpha: exact share left behind after one passage (independent calculation)
PASSAGES = ((1.0, 0.1, 0.04617), (1.0, 0.2, 0.21673), (1.0, 0.5, 0.54516), (2.0, 0.5, 0.09239), (2.0, 1.0, 0.31243))
