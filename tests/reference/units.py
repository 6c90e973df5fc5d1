"""Natural units of a harmonic trap, with CODATA constants from scipy, and the Thomas-Fermi formulas in SI."""

from __future__ import annotations

from dataclasses import dataclass
from math import pi, prod, sqrt

from scipy.constants import atomic_mass, hbar, physical_constants

A0 = physical_constants["Bohr radius"][0]

#: Isotope masses, kg: AME 2020, Wang et al., Chin. Phys. C 45, 030003 (2021), values from memory.
MASSES = {
    "Li-7": 7.0160034 * atomic_mass,
    "Na-23": 22.98976928 * atomic_mass,
    "Rb-85": 84.91178974 * atomic_mass,
    "Rb-87": 86.90918053 * atomic_mass,
    "Cs-133": 132.90545196 * atomic_mass,
}


@dataclass(frozen=True)
class Natural:
    """Length m, time s and energy J of an oscillator, and the coupling beta = 4 pi N a/length."""

    length: float
    time: float
    energy: float
    beta: float


def natural(mass: float, omega: float, *, number: float = 1.0, scattering_length: float = 0.0) -> Natural:
    """The units in which hbar = m = omega = 1; omega in rad/s, everything else in SI."""
    length = sqrt(hbar / (mass * omega))
    return Natural(length, 1 / omega, hbar * omega, 4 * pi * number * scattering_length / length)


@dataclass(frozen=True)
class ThomasFermi:
    """A harmonically trapped cloud without kinetic energy, SI: mu J, radii m, peak density m^-3, rms widths m."""

    mu: float
    radii: tuple[float, ...]
    peak_density: float
    widths: tuple[float, ...]
    healing_length: float
    sound_speed: float
    release_energy: float


def thomas_fermi(mass: float, omegas: tuple[float, float, float], number: float, a: float) -> ThomasFermi:
    """The Thomas-Fermi cloud in a trap with three angular frequencies.

    mu = (hbar w/2)(15 N a/a_ho)^(2/5), w the geometric mean; R_i = sqrt(2 mu/m)/w_i; n0 = mu/g; <x^2> = R^2/7; healing
    length hbar/sqrt(2 m mu); release energy 2 mu/7. Source: Baym & Pethick, PRL 76, 6 (1996); Dalfovo et al., RMP 71,
    463 (1999).
    """
    mean = prod(omegas) ** (1 / 3)
    mu = hbar * mean / 2 * (15 * number * a / sqrt(hbar / (mass * mean))) ** 0.4
    radii = tuple(sqrt(2 * mu / mass) / omega for omega in omegas)
    return ThomasFermi(
        mu=mu,
        radii=radii,
        peak_density=mu * mass / (4 * pi * hbar**2 * a),
        widths=tuple(r / sqrt(7) for r in radii),
        healing_length=hbar / sqrt(2 * mass * mu),
        sound_speed=sqrt(mu / mass),
        release_energy=2 * mu / 7,
    )
