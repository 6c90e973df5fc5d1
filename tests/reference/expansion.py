"""Motion of an interacting cloud from its ground state, by the method of lines on oscillator functions.

The wave function is a sum of oscillator functions in coordinates stretched by the Castin-Dum factors b_j(t), marched
with an adaptive Runge-Kutta method: no periodic grid, no splitting. Natural units (hbar = m = 1). Factors of the trap
as in `anisotropic`.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import reduce
from math import prod, sqrt

import numpy as np
from scipy.integrate import solve_ivp

from .anisotropic import Bases, Ground, across, along, ground
from .scaling import Frequency, follow, off
from .spectral import Array


@dataclass(frozen=True)
class Flight:
    """A cloud at one time: rms `widths` along one direction of each factor, energies per atom, `kinetic` by factor."""

    time: float
    widths: tuple[float, ...]
    kinetic: tuple[float, ...]
    interaction: float
    norm: float

    @property
    def release_energy(self) -> float:
        """Kinetic and interaction energy together, constant in free flight."""
        return sum(self.kinetic) + self.interaction


def _volume(bases: Bases, b: Array) -> float:
    return prod(float(x) ** basis.dimension for basis, x in zip(bases, b, strict=True))


def _measure(bases: Bases, beta: float, t: float, c: Array, b: Array, rate: Array) -> Flight:
    """Lab widths and energies; the flow b'/b of the stretched coordinates is part of the kinetic energy."""

    def mean(axis: int, matrix: Array) -> float:
        return float(np.vdot(c, along(axis, matrix, c)).real)

    squares = [mean(j, basis.square) for j, basis in enumerate(bases)]
    kinetic = tuple(
        float(rate[j] ** 2 * squares[j] / 2 + rate[j] / b[j] * mean(j, 1j * basis.dilation))
        + mean(j, basis.kinetic) / float(b[j]) ** 2
        for j, basis in enumerate(bases)
    )
    weights = reduce(np.multiply.outer, [x.weights for x in bases])
    quartic = np.sum(weights * np.abs(across([x.values for x in bases], c)) ** 4)
    return Flight(
        time=t,
        widths=tuple(float(b[j]) * sqrt(squares[j] / basis.dimension) for j, basis in enumerate(bases)),
        kinetic=kinetic,
        interaction=beta * float(quartic) / 2 / _volume(bases, b),
        norm=float(np.vdot(c, c).real),
    )


def march(
    start: Ground,
    omegas: Sequence[float],
    beta: float,
    times: Sequence[float],
    *,
    trap: Sequence[Frequency] | None = None,
    edges: Sequence[float] = (),
    tolerance: float = 1e-9,
) -> list[Flight]:
    """Follow a cloud that rested in the trap `omegas` while the frequencies follow `trap` (by default all off).

    One frequency per factor; `edges` name the times where `trap` jumps. The equation is
    i c' = sum_j [T_j/b_j^2 + w_j^2 x_j^2/(2 B)] c + (beta/B) |phi|^2 phi, B = product of the b's, where
    b_j'' = w_j^2/(b_j B) - trap_j(t)^2 b_j (Castin & Dum, PRL 77, 5315 (1996)) takes the rest of the trap away
    exactly, in every harmonic trap and for every cloud.
    """
    bases = start.bases
    count = len(bases)
    squares = np.array(omegas, float) ** 2
    later = trap or [off] * count
    values, back = [x.values for x in bases], [x.values.T * x.weights for x in bases]

    def force(t: float, b: Array) -> Array:
        return squares / (b * _volume(bases, b)) - np.array([w(t) for w in later]) ** 2 * b

    end = float(times[-1])
    scales = follow(force, count, end, edges)

    def rate(t: float, y: Array) -> Array:
        b = scales(t)[:count]
        volume = _volume(bases, b)
        c = y.reshape(start.coefficients.shape)
        phi = across(values, c)
        change = beta / volume * across(back, np.abs(phi) ** 2 * phi)
        for j, basis in enumerate(bases):
            change += along(j, basis.kinetic / b[j] ** 2 + squares[j] / (2 * volume) * basis.square, c)
        return -1j * change.ravel()

    def measured(t: float, y: Array) -> Flight:
        b, rates = np.split(scales(t), 2)
        return _measure(bases, beta, t, y.reshape(start.coefficients.shape), b, rates)

    psi = start.coefficients.astype(complex).ravel()
    stops = sorted({0.0, end, *(e for e in edges if 0 < e < end), *(float(t) for t in times)})
    seen = {0.0: measured(0.0, psi)}
    for first, last in zip(stops, stops[1:], strict=False):
        done = solve_ivp(rate, (first, last), psi, method="DOP853", rtol=tolerance, atol=tolerance / 100)
        psi = done.y[:, -1]
        seen[last] = measured(last, psi)
    return [seen[float(t)] for t in times]


def isotropic_flight(
    beta: float,
    times: Sequence[float],
    *,
    trap: Frequency = off,
    edges: Sequence[float] = (),
    count: int = 40,
    tolerance: float = 1e-9,
) -> list[Flight]:
    """An isotropic ground state after the trap is switched off, or its frequency follows `trap`."""
    start = ground((3,), (1.0,), beta, counts=(count,))
    return march(start, (1.0,), beta, times, trap=(trap,), edges=edges, tolerance=tolerance)


def round_flight(
    lam: float, beta: float, times: Sequence[float], *, counts: tuple[int, int] = (20, 16), tolerance: float = 1e-9
) -> list[Flight]:
    """A ground state of V = (rho^2 + lam^2 z^2)/2 set free: widths (x, z), kinetic energies (x and y together, z)."""
    start = ground((2, 1), (1.0, lam), beta, counts=counts)
    return march(start, (1.0, lam), beta, times, tolerance=tolerance)
