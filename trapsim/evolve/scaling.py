"""The frame law: how scale and centre of the frame move, and the integrals a step needs.

    m X'' = F(X, t)                                      (the classical centre)
    b_j'' = -w_j(t)^2 b_j + A_j/b_j^3 + i_j c(t)/(b_j B)

One family: A = 0 with i_j c = w0^2 is the scaling law of Y. Castin and R. Dum, Phys. Rev. Lett. 77, 5315 (1996); A = w0^2
with i = 0 that of the ideal gas. A and i are measured on the cloud and frozen until it is measured again. The choice
only decides whether the cloud stays well inside its box of coordinates and wave numbers; the equation of motion in the
frame is exact for any of them.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Protocol

import numpy as np
from scipy import integrate

from trapsim.cloud.cloud import Cloud
from trapsim.constants import HBAR
from trapsim.measure.observables import Profile
from trapsim.space.frame import Frame
from trapsim.terms.part import Array, Part, steered

#: population of the spectral tail whose wave number counts as the fastest in the cloud
TAIL = 1e-6


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
    """

    time: float
    frame: Frame
    A: Array
    i: Array
    var: Array


def measure_law(cloud: Cloud, seen: Profile, *, floor: bool) -> LawStart:
    """Measure the constants of the frame law on a cloud.

    Parameters
    ----------
    floor : bool
        Whether A must also hold the fastest atoms in the box (in flight, not in a trap).
    """
    A, i = np.zeros(3), np.zeros(3)
    for j in range(3):
        axis = cloud.space.axis(j)
        if axis.uniform:
            continue
        A[j] = cloud.q**2 * seen.k_var[j] / seen.var[j]
        i[j] = cloud.q * seen.quartic / (2 * seen.norm * seen.var[j])
        if floor:
            fastest = tail_k(axis.k, seen.spectrum[cloud.space.dim(j)] * axis.spectral_weights)
            A[j] = max(A[j], (cloud.q * fastest / axis.half_extent) ** 2)
    return LawStart(cloud.time, cloud.frame, A, i, seen.var)


def tail_k(k: Array, population: Array) -> float:
    """The |k| beyond which the share `TAIL` of a spectrum lies, 1/m."""
    order = np.argsort(np.abs(k))
    beyond = population[order][::-1].cumsum()[::-1] / population.sum()
    inside = np.nonzero(beyond > TAIL)[0]
    return float(np.abs(k)[order][inside[-1]])


class MovingLaw:
    """The frame moves and scales with the cloud, from a `LawStart` to the end of an interval.

    Integrated once with dense output (DOP853) for b, b', X, X', K_j = int dt/b_j^2, J = int c dt/B.
    """

    def __init__(self, start: LawStart, interval: Interval, *, q: float) -> None:
        self.start = start
        self.interval = interval
        mass = HBAR / q
        length = interval.stop - start.time

        def slope(t: float, y: Array) -> Array:
            b, bdot, X, Xdot = y[0:3], y[3:6], y[6:9], y[9:12]
            force, curvature = steered(interval.parts_at(t), X)
            coupling = interval.coupling(t)
            inverse = 1 / b
            B = b[0] * b[1] * b[2]
            acceleration = -curvature / mass * b + start.A * inverse**3 + start.i * coupling / B * inverse
            return np.concatenate([bdot, acceleration, Xdot, force / mass, inverse**2, [coupling / B]])

        f = start.frame
        y0 = np.concatenate([f.b, f.bdot, f.X, f.Xdot, np.zeros(4)])
        if length <= 0:
            self._at = lambda t: y0
            return
        rate = 1 / length
        absolute = np.concatenate([
            np.full(3, 1e-13), np.full(3, 1e-13 * rate), np.full(3, 1e-17), np.full(3, 1e-17 * rate),
            np.full(3, 1e-13 * length), [1e-13 * length * max(abs(interval.coupling(start.time)), 1e-300)],
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
        root = np.sqrt(self.start.A)
        theta = root * dK
        return root * np.tan(theta / 2), np.where(root > 0, np.sin(theta) / np.where(root > 0, root, 1.0), dK)


class StandingLaw:
    """The frame stands still in the lab; everything acts on the wave function itself."""

    def __init__(self, start: LawStart, interval: Interval, *, q: float) -> None:
        self.start = start
        self.interval = interval

    def frame(self, t: float) -> Frame:
        return self.start.frame

    def integrals(self, t0: float, t1: float) -> tuple[Array, float]:
        return np.full(3, t1 - t0), (t1 - t0) * float(np.mean([self.interval.coupling(t) for t in gauss(t0, t1)]))

    def turn(self, dK: Array) -> tuple[Array, Array]:
        return np.zeros(3), dK


def gauss(t0: float, t1: float) -> tuple[float, float]:
    """The two points of Gauss's rule, inside the interval."""
    middle, half = (t0 + t1) / 2, (t1 - t0) / (2 * np.sqrt(3))
    return middle - half, middle + half


def standing_start(cloud: Cloud, seen: Profile) -> LawStart:
    """A `LawStart` for a frame that stands."""
    return LawStart(cloud.time, replace(cloud.frame, bdot=np.zeros(3), Xdot=np.zeros(3)), np.zeros(3), np.zeros(3), seen.var)
