"""Closed forms: the free Gaussian packet, its current, kicks and lenses, and other exact statements about flight.

`q` = hbar/m (1 in natural units), `omega` = frequency of the trap whose ground state is released. Textbook quantum
mechanics unless a publication is named.
"""

from __future__ import annotations

from math import pi, sqrt

import numpy as np

Array = np.ndarray


def width(t: float, *, omega: float, q: float = 1.0) -> float:
    """The rms width of a released oscillator ground state: sqrt(q/2 omega) sqrt(1 + omega^2 t^2)."""
    return sqrt(q / (2 * omega) * (1 + (omega * t) ** 2))


def width_rate(t: float, *, omega: float, q: float = 1.0) -> float:
    """The rate at which that width grows."""
    return width(t, omega=omega, q=q) * curvature(t, omega=omega)


def curvature(t: float, *, omega: float) -> float:
    """b'/b of the packet, 1/s: its phase is + curvature x^2/(2 q), positive when it spreads."""
    return omega**2 * t / (1 + (omega * t) ** 2)


def packet(
    x: Array, t: float, *, omega: float, q: float = 1.0, x0: float = 0.0, v0: float = 0.0, force: float = 0.0
) -> Array:
    """The wave function of a released, kicked and falling ground state, its norm 1 and all phases right.

    Signs: i psi_t = -(q/2) psi_xx - (force/q) x psi, where `force` is an acceleration, and the kick
    multiplies psi by exp(+i v0 x/q).
    """
    centre, velocity = x0 + v0 * t + force * t**2 / 2, v0 + force * t
    c = 1 + 1j * omega * t
    y = x - centre
    # Phase of the moving frame: the classical action over hbar, from the centre's starting phase v0 x0/q on.
    kinetic = v0**2 * t + v0 * force * t**2 + force**2 * t**3 / 3
    potential = x0 * t + v0 * t**2 / 2 + force * t**3 / 6
    action = v0 * x0 + kinetic / 2 + force * potential
    exponent = -omega * y**2 / (2 * q * c) + 1j * (velocity * y + action) / q
    return (omega / (pi * q)) ** 0.25 / np.sqrt(c) * np.exp(exponent)


def density(x: Array, t: float, *, omega: float, q: float = 1.0, centre: float = 0.0) -> Array:
    """The packet's density about its centre."""
    s = width(t, omega=omega, q=q)
    return np.exp(-((x - centre) ** 2) / (2 * s**2)) / (sqrt(2 * pi) * s)


def current(x: Array, t: float, *, omega: float, q: float = 1.0, centre: float = 0.0, velocity: float = 0.0) -> Array:
    """The packet's probability current: density times the local velocity."""
    flow = velocity + curvature(t, omega=omega) * (x - centre)
    return flow * density(x, t, omega=omega, q=q, centre=centre)


def density_rate(
    x: Array, t: float, *, omega: float, q: float = 1.0, centre: float = 0.0, velocity: float = 0.0
) -> Array:
    """The density's rate of change in place, minus the divergence of `current` by the law of continuity."""
    s, rate, y = width(t, omega=omega, q=q), curvature(t, omega=omega), x - centre
    return density(x, t, omega=omega, q=q, centre=centre) * ((velocity + rate * y) * y / s**2 - rate)


def column(u: Array, v: Array, t: float, *, omegas: tuple[float, float], q: float = 1.0) -> Array:
    """The column density of a released three-dimensional packet on a picture's two directions, norm 1."""
    return density(u, t, omega=omegas[0], q=q)[:, None] * density(v, t, omega=omegas[1], q=q)[None, :]


def kinetic_energy(t: float, *, omega: float) -> tuple[float, float]:
    """Kinetic energy per atom and direction over hbar: (all, the part in the ordered flow). The sum stays omega/4."""
    tau2 = (omega * t) ** 2
    return omega / 4, omega / 4 * tau2 / (1 + tau2)


def lens_strength(t: float, *, omega: float) -> float:
    """omega_l^2 tau of the thin lens that stops a packet's spreading after time t, 1/s: equal to its b'/b.

    Source: Ammann & Christensen, PRL 78, 2088 (1997).
    """
    return curvature(t, omega=omega)


def lens_gain(t: float, *, omega: float) -> float:
    """What is left of the momentum variance behind that lens: 1/b^2 (Liouville)."""
    return 1 / (1 + (omega * t) ** 2)


def plane_wave_phase(k: float, t: float, *, q: float = 1.0) -> complex:
    """The factor exp(-i q k^2 t/2) that a free plane wave has gained."""
    return complex(np.exp(-0.5j * q * k**2 * t))


def mean_square_radius_2d(t: float, *, start: float, release_energy: float, mass: float = 1.0) -> float:
    """<x^2 + y^2> of a gas that is uniform along z, at rest and released from any trap, for any contact interaction.

    <rho^2>(t) = <rho^2>(0) + 2 e t^2/m. Source: Pitaevskii & Rosch, PRA 55, R853 (1997).
    """
    return start + 2 * release_energy * t**2 / mass


def bogoliubov(k: float, gn: float) -> float:
    """The frequency of a phonon of wave number k in a uniform gas, natural units: sqrt(e0 (e0 + 2 g n)), e0 = k^2/2.

    Source: Bogoliubov (1947). A weak imprint exp(+i phi cos kx) gives dn/n = 2 phi (e0/eps) sin(eps t) cos kx.
    """
    e0 = k**2 / 2
    return sqrt(e0 * (e0 + 2 * gn))


def imprint_response(t: float, *, k: float, gn: float, phase: float) -> float:
    """The amplitude of dn/n along cos kx at time t after that imprint."""
    eps = bogoliubov(k, gn)
    return 2 * phase * (k**2 / 2 / eps) * float(np.sin(eps * t))
