"""The frame law: how scale and centre of the frame move, and the integrals a step needs.

    m X'' = F(X, t)                                      (the classical centre)
    b_j'' = -w_j(t)^2 b_j + A_j/b_j^3 + i_j c(t)/(b_j B)

One family: A = 0 with i_j c = w0^2 is the scaling law of Y. Castin and R. Dum, Phys. Rev. Lett. 77, 5315 (1996);
A = w0^2 with i = 0 that of the ideal gas. A and i are measured on the cloud and frozen until it is measured again. The
choice only decides whether the cloud stays well inside its box of coordinates and wave numbers; the equation of motion
in the frame is exact for any of them.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Protocol

import numpy as np
from scipy import integrate

from trapsim.cloud.cloud import Cloud
from trapsim.constants import HBAR
from trapsim.measure.momentum import momentum
from trapsim.measure.observables import Profile, reach
from trapsim.space.frame import Frame
from trapsim.terms.part import ALL, Array, Part, steered

#: the share of the box that those may fill
INSIDE = 0.9
#: atoms nearer to that limit are taken to be this share of it away
CLOSE = 0.3
#: rad, far beyond any turn of phase space in one step
FURTHEST = 300.0


class Interval(Protocol):
    """The plan between two edges: everything in it is smooth on the closed interval."""

    start: float
    stop: float
    steady: bool

    def parts_at(self, t: float) -> Sequence[Part]: ...

    def coupling(self, t: float) -> float: ...


@dataclass(frozen=True)
class LawStart:
    """From where, and with which constants, the frame law is integrated: all that a checkpoint needs.

    Parameters
    ----------
    time : float
    frame : Frame
    A : (3,)
        1/s^2, from the spread of wave numbers.
    i : (3,)
        1/s^2 per unit of coupling, from the mean field.
    var : (3,)
        Variance of xi when measured, m^2.
    edge : float
        Highest population near the edges of the axes when measured.
    """

    time: float
    frame: Frame
    A: Array
    i: Array
    var: Array
    edge: float = 0.0


def measure_law(
    cloud: Cloud,
    seen: Profile,
    *,
    tail: float | None,
    moving: Sequence[bool] = ALL,
    split: Sequence[bool] = (False, False, False),
    front: float = 0.0,
    squeeze: Array | None = None,
) -> LawStart:
    """Measure the constants of the frame law on a cloud.

    Parameters
    ----------
    tail : float or None
        A also holds the fastest and furthest atoms in the box, all but this share; None does not ask for it (in a trap).
    moving : three flags
        Directions in which the frame moves; in the others A and i are zero.
    split : three flags
        Directions in which light may have split the cloud into orders.
    front : float
        Velocity of atoms that run ahead of the rest, m/s, which A must hold as well.
    squeeze : (3,), optional
        <y_j dU/dy_j>/(m <y_j^2>) of what is not steered, 1/s^2: it holds the widths as a trap would.
    """
    A, i = np.zeros(3), np.zeros(3)
    for j in range(3):
        axis = cloud.space.axis(j)
        if axis.uniform or not moving[j]:
            continue
        # the part of the spread of k that is not mere expansion against the frame
        own = seen.k_var[j] - seen.cov[j] ** 2 / seen.var[j]
        A[j] = cloud.q**2 * own / seen.var[j]
        if squeeze is not None:
            A[j] -= squeeze[j] * cloud.frame.b[j] ** 4
        i[j] = cloud.q * seen.quartic / (2 * seen.norm * seen.var[j])
        if tail is not None:
            furthest = reach(axis.points, seen.density[cloud.space.dim(j)] * axis.weights, tail)
            if split[j]:
                # orders that fly apart are held by where they go; their spread of k is that of a cloud far narrower
                A[j] = _holding(cloud, j, _fastest(cloud, j, tail) + front, furthest)
            else:
                # where a flow carries the atoms, the fastest are furthest out and the frame keeps up with them
                A[j] = max(A[j], _holding(cloud, j, _outward(cloud, seen, j, tail, furthest) + front))
    return LawStart(cloud.time, cloud.frame, A, i, seen.var)


def _holding(cloud: Cloud, j: int, velocity: float, furthest: float | None = None) -> float:
    """The A that keeps atoms inside the part of the box that is not watched, 1/s^2.

    With A alone b^2 = b0^2 + 2 b0 bdot t + (bdot^2 + A/b0^2) t^2, and atoms of a velocity (m/s) end up at velocity t < b L
    with the limit L. Those that start with it from `furthest` (grid, m) ask for more: b0 furthest + velocity t < b L at
    any time, one parabola below another.
    """
    b, bdot = cloud.frame.b[j], cloud.frame.bdot[j]
    limit = INSIDE * cloud.space.axis(j).half_extent
    needed = (velocity / limit) ** 2
    if furthest is not None:
        behind = max(furthest * velocity / limit**2 - bdot, 0.0)
        needed += behind**2 / max(1 - (furthest / limit) ** 2, CLOSE**2)
    return float(b**2 * max(needed - max(bdot, 0.0) ** 2, 0.0))


def _outward(cloud: Cloud, seen: Profile, j: int, tail: float, furthest: float) -> float:
    """The highest velocity away from the centre, m/s: that of the flow at its fastest, with the spread of k on top."""
    axis, d = cloud.space.axis(j), cloud.space.dim(j)
    b, bdot, q = cloud.frame.b[j], cloud.frame.bdot[j], cloud.q
    fastest = reach(axis.k, seen.spectrum[d] * axis.spectral_weights, tail)
    inside = np.abs(axis.points) <= furthest
    places, flow = axis.points[inside], seen.flow[d][inside]
    outward = np.max(bdot * np.abs(places) + (q / b) * np.sign(places) * flow)
    spread = np.sqrt(max(fastest**2 - np.max(np.abs(flow)) ** 2, 0.0))
    return max(outward, 0.0) + q * spread / b


def _fastest(cloud: Cloud, j: int, tail: float) -> float:
    """The highest velocity from the frame's, m/s, from the momenta themselves.

    Orders that overlap beat, and between their fringes current over density says nothing.
    """
    spread = momentum(cloud, j)
    return cloud.q * reach(spread.k - cloud.frame.Xdot[j] / cloud.q, spread.density, tail)


class MovingLaw:
    """The frame moves and scales with the cloud, from a `LawStart` to the end of an interval.

    In directions that do not move, b and X stand still (their rates are zero at the start). Integrated once with dense
    output (DOP853) for b, b', X, X', K_j = int dt/b_j^2, J = int c dt/B.
    """

    def __init__(self, start: LawStart, interval: Interval, *, q: float, moving: Sequence[bool] = ALL) -> None:
        self.start = start
        self.interval = interval
        mass = HBAR / q
        free = np.asarray(moving, dtype=float)
        length = interval.stop - start.time

        def slope(t: float, y: Array) -> Array:
            b, bdot, X, Xdot = y[0:3], y[3:6], y[6:9], y[9:12]
            force, curvature = steered(interval.parts_at(t), X)
            coupling = interval.coupling(t)
            inverse = 1 / b
            B = b[0] * b[1] * b[2]
            acceleration = free * (-curvature / mass * b + start.A * inverse**3 + start.i * coupling / B * inverse)
            return np.concatenate([bdot, acceleration, Xdot, free * force / mass, inverse**2, [coupling / B]])

        f = start.frame
        y0 = np.concatenate([f.b, f.bdot, f.X, f.Xdot, np.zeros(4)])
        if length <= 0:
            self._at = lambda t: y0
            return
        rate = 1 / length
        most = max(*(abs(interval.coupling(t)) for t in (start.time, interval.stop)), 1e-40)
        absolute = np.concatenate([
            np.full(3, 1e-13), np.full(3, 1e-13 * rate), np.full(3, 1e-17), np.full(3, 1e-17 * rate),
            np.full(3, 1e-13 * length), [1e-13 * length * most],
        ])  # fmt: skip
        solution = integrate.solve_ivp(
            slope, (start.time, interval.stop), y0, method="DOP853", rtol=1e-12, atol=absolute, dense_output=True
        )
        self._at = solution.sol

    def frame(self, t: float) -> Frame:
        y = self._at(t)
        return Frame(y[0:3].copy(), y[3:6].copy(), y[6:9].copy(), y[9:12].copy())

    def integrals(self, t0: float, t1: float) -> tuple[Array, float]:
        """K_j(t1) - K_j(t0) in s, and the mean-field integral int c dt/B in m^3."""
        change = self._at(t1) - self._at(t0)
        return change[12:15], float(change[15])

    def turn(self, dK: Array) -> tuple[Array, Array]:
        """Lens (1/s) and drift (s) that turn phase space by sqrt(A) dK: sqrt(A) tan(theta/2), sin(theta)/sqrt(A)."""
        root = np.sqrt(np.abs(self.start.A))
        # steps of such a turn are asked about and never taken
        theta = np.clip(root * dK, -FURTHEST, FURTHEST)
        pull = self.start.A >= 0
        lens = np.where(pull, root * np.tan(theta / 2), -root * np.tanh(theta / 2))
        sine = np.where(pull, np.sin(theta), np.sinh(theta))
        return lens, np.where(root > 0, sine / np.where(root > 0, root, 1.0), dK)


class StandingLaw:
    """The frame stands still in the lab; everything acts on the wave function itself."""

    def __init__(self, start: LawStart, interval: Interval) -> None:
        self.start = start
        self.interval = interval

    def frame(self, t: float) -> Frame:
        return self.start.frame

    def integrals(self, t0: float, t1: float) -> tuple[Array, float]:
        frame = self.start.frame
        coupling = float(np.mean([self.interval.coupling(t) for t in gauss(t0, t1)]))
        return (t1 - t0) / frame.b**2, (t1 - t0) * coupling / frame.B

    def turn(self, dK: Array) -> tuple[Array, Array]:
        return np.zeros(3), dK


def gauss(t0: float, t1: float) -> tuple[float, float]:
    """The two points of Gauss's rule, inside the interval."""
    middle, half = (t0 + t1) / 2, (t1 - t0) / (2 * np.sqrt(3))
    return middle - half, middle + half
