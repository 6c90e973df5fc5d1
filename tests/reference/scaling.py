"""Scaling laws of clouds in time-dependent harmonic traps, by an eighth-order Runge-Kutta method."""

from __future__ import annotations

from bisect import bisect_left
from collections.abc import Callable, Sequence

import numpy as np
from scipy.integrate import solve_ivp

Array = np.ndarray
Frequency = Callable[[float], float]


def off(t: float) -> float:
    """A trap that is switched off."""
    return 0.0


def follow(
    force: Callable[[float, Array], Array], count: int, end: float, edges: Sequence[float] = ()
) -> Callable[[float], Array]:
    """March b'' = force(t, b) from b = 1, b' = 0 at time 0 and give the solution (b, b') as a function of time.

    The march stops and starts again at every edge, so that no step straddles a jump of a frequency.
    """
    y = np.concatenate([np.ones(count), np.zeros(count)])
    stops = [0.0, *sorted(e for e in edges if 0 < e < end), end]
    pieces = []
    for start, stop in zip(stops, stops[1:], strict=False):
        # A frequency may jump at the ends of the interval: evaluate strictly inside it.
        low, high = np.nextafter(start, stop), np.nextafter(stop, start)

        def rate(t: float, y: Array, low: float = low, high: float = high) -> Array:
            return np.concatenate([y[count:], force(min(max(t, low), high), y[:count])])

        done = solve_ivp(rate, (start, stop), y, method="DOP853", dense_output=True, rtol=1e-12, atol=1e-14)
        y = done.y[:, -1]
        pieces.append(done.sol)
    return lambda t: pieces[min(bisect_left(stops[1:], t), len(pieces) - 1)](t)


def castin_dum(
    omegas: Sequence[float], trap: Sequence[Frequency], times: Sequence[float], *, edges: Sequence[float] = ()
) -> tuple[Array, Array]:
    """The scaling factors b_i and their rates for a Thomas-Fermi cloud, each (len(times), 3).

    b_i'' = omega_i(0)^2/(b_i b_x b_y b_z) - omega_i(t)^2 b_i. The cloud starts at rest in the trap `omegas`; `trap`
    gives the later frequencies, `times` rise from 0 and `edges` name the times where `trap` jumps.
    Source: Castin & Dum, PRL 77, 5315 (1996); Kagan, Surkov & Shlyapnikov, PRA 54, R1753 (1996).
    """
    start = np.asarray(omegas, float) ** 2

    def force(t: float, b: Array) -> Array:
        return start / (b * b.prod()) - np.array([w(t) for w in trap]) ** 2 * b

    solution = follow(force, 3, float(times[-1]), edges)
    out = np.array([solution(t) for t in times])
    return out[:, :3], out[:, 3:]


def ideal(omega: float, trap: Frequency, times: Sequence[float], *, edges: Sequence[float] = ()) -> tuple[Array, Array]:
    """The scaling factor of one direction, and its rate, for a gas without interaction, each (len(times),).

    b'' = omega^2/b^3 - omega(t)^2 b; exact for the oscillator ground state and for a classical gas in equilibrium.
    Source: Ermakov's equation; Lewis & Riesenfeld, J. Math. Phys. 10, 1458 (1969).
    """
    solution = follow(lambda t, b: omega**2 / b**3 - trap(t) ** 2 * b, 1, float(times[-1]), edges)
    out = np.array([solution(t) for t in times])
    return out[:, 0], out[:, 1]
