"""The classical path of a particle in a time-dependent harmonic trap under gravity.

It is the exact path of the centre of any cloud there: Kohn, PR 123, 1242 (1961); Dobson, PRL 73, 2244 (1994). One
direction at a time; SI or natural units alike.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
from scipy.integrate import solve_ivp
from scipy.special import airy, jv, yv

Array = np.ndarray


def exponential(duration: float, time_constant: float) -> Callable[[float], float]:
    """A strength that falls as exp(-t/time_constant) during `duration` and is 0 afterwards."""
    return lambda t: 1.0 if t < 0 else float(np.exp(-t / time_constant)) if t < duration else 0.0


def linear(duration: float) -> Callable[[float], float]:
    """A strength that falls in a straight line from 1 to 0."""
    return lambda t: float(np.clip(1 - t / duration, 0, 1))


def smooth(duration: float) -> Callable[[float], float]:
    """A strength that falls from 1 to 0 as 1 - 3 u^2 + 2 u^3, with zero slope at both ends."""

    def strength(t: float) -> float:
        u = min(max(t / duration, 0.0), 1.0)
        return 1 - u * u * (3 - 2 * u)

    return strength


def sag(omega: float, gravity: float = 9.80665) -> float:
    """How far gravity pulls the resting point below the trap's centre."""
    return gravity / omega**2


def path(
    x: float,
    v: float,
    times: Sequence[float],
    *,
    omega: float,
    strength: Callable[[float], float] = lambda t: 1.0,
    centre: Callable[[float], float] = lambda t: 0.0,
    acceleration: float = 0.0,
    kicks: Sequence[tuple[float, float]] = (),
    edges: Sequence[float] = (),
) -> tuple[Array, Array]:
    """Position and velocity at the given rising times, started at time 0 in x, v.

    x'' = -omega^2 strength(t) (x - centre(t)) + acceleration, plus sudden changes of velocity `kicks` = (time, dv).
    Strength multiplies the potential energy. `edges` name the times where strength or centre jump or have a kink. A
    value asked at the instant of a kick is the one after it.
    """
    asked = np.asarray(times, float)
    positions, velocities = np.empty(len(asked)), np.empty(len(asked))
    end = float(asked[-1])
    stops = sorted({0.0, end, *(e for e in (*edges, *(t for t, _ in kicks)) if 0 <= e <= end)})
    y = np.array([x, v], float)
    for index, start in enumerate(stops):
        y[1] += sum(dv for t, dv in kicks if t == start)
        positions[asked == start], velocities[asked == start] = y
        if index + 1 == len(stops):
            break
        stop = stops[index + 1]
        inside = (asked > start) & (asked < stop)
        low, high = np.nextafter(start, stop), np.nextafter(stop, start)

        def rate(t: float, y: Array, low: float = low, high: float = high) -> list[float]:
            t = min(max(t, low), high)
            return [y[1], -(omega**2) * strength(t) * (y[0] - centre(t)) + acceleration]

        moved = max(abs(centre(t)) for t in (low, (start + stop) / 2, high))
        size = max(abs(y[0]), abs(y[1]) / omega, abs(acceleration) / omega**2, moved, 1e-30)
        tolerance = 1e-14 * np.array([size, size * omega])
        done = solve_ivp(
            rate, (start, stop), y, method="DOP853", t_eval=[*asked[inside], stop], rtol=1e-12, atol=tolerance
        )
        positions[inside], velocities[inside] = done.y[:, :-1]
        y = done.y[:, -1].copy()
    return positions, velocities


def swing(x: float, v: float, t: Array, *, omega: float, acceleration: float = 0.0) -> tuple[Array, Array]:
    """The path in a steady trap, about the point where the constant force holds it; closed form."""
    rest = acceleration / omega**2
    c, s = np.cos(omega * t), np.sin(omega * t)
    return rest + (x - rest) * c + v / omega * s, -omega * (x - rest) * s + v * c


def fall(x: float, v: float, t: Array, *, acceleration: float = 0.0) -> tuple[Array, Array]:
    """The free path: x + v t + acceleration t^2/2."""
    return x + v * t + acceleration * t**2 / 2, v + acceleration * t


def fading_swing(x: float, v: float, t: Array, *, omega: float, time_constant: float) -> Array:
    """The path without gravity while the trap fades as exp(-t/time_constant): Bessel functions, closed form.

    x'' = -omega^2 exp(-t/T) x is solved by J0(s), Y0(s) with s = 2 omega T exp(-t/2T).
    """
    first = 2 * omega * time_constant
    s = first * np.exp(-t / (2 * time_constant))
    matrix = [[jv(0, first), yv(0, first)], [omega * jv(1, first), omega * yv(1, first)]]
    a, b = np.linalg.solve(matrix, [x, v])
    return a * jv(0, s) + b * yv(0, s)


def waning_swing(x: float, v: float, t: Array, *, omega: float, duration: float) -> Array:
    """The path without gravity while the trap's strength falls as 1 - t/duration: Airy functions, closed form.

    x'' = -omega^2 (1 - t/T) x is solved by Ai(z), Bi(z) with z = (omega^2/T)^(1/3) (t - T).
    """
    rate = (omega**2 / duration) ** (1 / 3)
    ai, aip, bi, bip = airy(-rate * duration)
    a, b = np.linalg.solve([[ai, bi], [rate * aip, rate * bip]], [x, v])
    z = rate * (t - duration)
    return a * airy(z)[0] + b * airy(z)[2]
