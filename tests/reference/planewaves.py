"""Plane waves in a lattice: the matrix of orders, exponentiated.

Recoil units: energy E_R = (hbar k)^2/(2 m), time hbar/E_R, wave number k, velocity hbar k/m. An atom of wave number p
meets V = s sin^2(x + phase), which couples p + 2 n to its neighbours: s sin^2 = s/2 - (s/4)(e^(2 i (x + phase)) + c.c.).
Textbook quantum mechanics (P. L. Gould, G. A. Ruff and D. E. Pritchard, Phys. Rev. Lett. 56, 827 (1986), for the limit of
short pulses).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import pi, sqrt

import numpy as np
from scipy import linalg
from scipy.constants import Boltzmann, h, hbar

Array = np.ndarray

#: orders kept on either side
KEPT = 14


@dataclass(frozen=True)
class Recoil:
    """The recoil units of a lattice for atoms of a mass (kg) and a spacing (m), in SI."""

    mass: float
    spacing: float

    @property
    def k(self) -> float:
        """1/m, of one photon along the lattice."""
        return pi / self.spacing

    @property
    def energy(self) -> float:
        """J."""
        return (hbar * self.k) ** 2 / (2 * self.mass)

    @property
    def velocity(self) -> float:
        """m/s."""
        return hbar * self.k / self.mass

    @property
    def time(self) -> float:
        """s."""
        return hbar / self.energy

    @property
    def hertz(self) -> float:
        """E_R/h, 1/s."""
        return self.energy / h

    @property
    def kelvin(self) -> float:
        return self.energy / Boltzmann

    @property
    def talbot(self) -> float:
        """After this time all orders of an atom at rest are in phase again, h/(4 E_R), s."""
        return h / (4 * self.energy)


def start(p: float = 0.0, *, kept: int = KEPT) -> Array:
    """Amplitudes of the orders -kept ... kept for one plane wave: all in order 0."""
    out = np.zeros(2 * kept + 1, dtype=complex)
    out[kept] = 1
    return out


def matrix(s: float, p: float = 0.0, *, phase: float = 0.0, detuning: float = 0.0, kept: int = KEPT) -> Array:
    """The energies and couplings of the orders, in E_R.

    `detuning` (rad per hbar/E_R, the difference of the two light frequencies) makes the lattice move with the velocity
    detuning/2 towards +x: sin^2(x + phase - detuning t/2). The matrix is that of amplitudes times exp(i n detuning t),
    in which it stands still.
    """
    n = np.arange(-kept, kept + 1)
    out = np.diag((p + 2 * n) ** 2 + s / 2 - n * detuning).astype(complex)
    upwards = -s / 4 * np.exp(2j * phase)
    return out + np.diag(np.full(2 * kept, upwards), -1) + np.diag(np.full(2 * kept, np.conj(upwards)), 1)


def pulse(amplitudes: Array, s: float, tau: float, p: float = 0.0, **more: float) -> Array:
    """Amplitudes after a square pulse of depth s (E_R) and length tau (hbar/E_R); see `matrix` for the rest."""
    kept = len(amplitudes) // 2
    after = linalg.expm(-1j * tau * matrix(s, p, kept=kept, **more)) @ amplitudes
    return np.exp(-1j * np.arange(-kept, kept + 1) * more.get("detuning", 0.0) * tau) * after


def flight(amplitudes: Array, tau: float, p: float = 0.0) -> Array:
    """Amplitudes after a free flight of tau (hbar/E_R)."""
    return pulse(amplitudes, 0.0, tau, p)


def populations(amplitudes: Array) -> dict[str, float]:
    """Populations by order, "-1", "0", "1" ..."""
    kept = len(amplitudes) // 2
    return {str(n - kept): float(abs(a) ** 2) for n, a in enumerate(amplitudes)}


def pulsed(s: float, tau: float, p: float = 0.0, **more: float) -> dict[str, float]:
    """Populations by order after one square pulse on a plane wave."""
    return populations(pulse(start(), s, tau, p, **more))


def averaged(s: float, tau: float, sigma: float, *, nodes: int = 41, **more: float) -> dict[str, float]:
    """The same for an ideal gas with a Gaussian spread sigma of wave numbers (in k) that fly freely along the lattice."""
    x, w = np.polynomial.hermite_e.hermegauss(nodes)
    rows: Sequence[dict[str, float]] = [pulsed(s, tau, float(sigma * u), **more) for u in x]
    return {name: float(np.dot(w, [r[name] for r in rows]) / sqrt(2 * pi)) for name in rows[0]}


#: depth s, length tau, populations of orders 0, 1, 2: exact for a plane wave at rest (independent calculation)
SHORT_PULSES = (
    (100.0, 0.01, (0.880741, 0.058687, 0.000936)),
    (10.0, 0.1, (0.882245, 0.058037, 0.000836)),
    (10.0, 0.5, (0.306986, 0.338457, 0.008017)),
    (5.0, 1.0, (0.885720, 0.056896, 0.000243)),
)
#: depth s, population of order 1 after a pulse of h/V0 detuned by 4 E_R/h (independent calculation)
BRAGG_PULSES = ((0.2, 0.999922), (0.5, 0.999512), (1.0, 0.998056), (2.0, 0.992333), (4.0, 0.971033))
#: atom, wavelength (nm), E_R/h (kHz), E_R/kB (nK), v_R (mm/s), Talbot time (us) (independent calculation)
RECOILS = (
    ("Li-7", 1064.0, 25.11909, 1205.53, 53.45342, 9.95259),
    ("Na-23", 589.158, 25.00223, 1199.918, 29.46053, 9.99911),
    ("Rb-87", 780.241, 3.77097, 180.978, 5.88454, 66.2959),
    ("Rb-87", 1064.0, 2.02781, 97.3197, 4.31519, 123.2855),
    ("Cs-133", 852.347, 2.06634, 99.1685, 3.52247, 120.987),
)
#: us, of a sodium condensate in light of its D2 line: L. Deng et al., Phys. Rev. Lett. 83, 5407 (1999)
SODIUM_TALBOT = 10.0
#: angles theta at which J_0 or J_1 are special, with the population there
BESSEL = ((1.841184, 1, 0.338567), (2.404826, 0, 0.0), (2.404826, 1, 0.269514), (1.4347, 0, 0.30025))
