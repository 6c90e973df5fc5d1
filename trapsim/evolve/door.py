"""The door between two legs: the same cloud on another space, in a frame that comes to rest."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace

import numpy as np

from trapsim.cloud.cloud import Cloud, regauge
from trapsim.errors import PhysicsRefused
from trapsim.measure.observables import profile, reach, spectral_marginals
from trapsim.space.resample import resample
from trapsim.space.space import Array, Space

#: what may be left out when the reach of a cloud is asked for
FULL_TAIL = 1e-4

#: whether there is memory for so many points
Afford = Callable[[int], bool]


def through(cloud: Cloud, space: Space) -> tuple[Cloud, Array]:
    """The same cloud on another space, and the variance of k (3,) 1/m^2 in the lab that was lost on the way.

    Only what leaves perfectly reflecting walls loses anything: a wave function that ends there at a slope has atoms of
    every velocity, the share beyond k falling as 1/k^3, and no other space holds them all.
    """
    if cloud.space is space or cloud.space.describe() == space.describe():
        return cloud, np.zeros(3)
    out = replace(cloud, phi=resample(cloud.phi, cloud.space, space), space=space)
    opened = [j for j in range(3) if cloud.space.axis(j).walled and not space.axis(j).walled]
    lost = np.zeros(3)
    if opened:
        before, after = _square_k(cloud), _square_k(out)
        lost[opened] = (np.abs(after - before) / cloud.frame.b**2)[opened]
    return out, lost


def settled(cloud: Cloud, moving: Sequence[bool]) -> Cloud:
    """The same cloud in a frame at rest in the directions in which it does not move; exact."""
    frame = cloud.frame
    bdot = np.where(moving, frame.bdot, 0.0)
    Xdot = np.where(moving, frame.Xdot, 0.0)
    if (bdot == frame.bdot).all() and (Xdot == frame.Xdot).all():
        return cloud
    return regauge(cloud, bdot=bdot, Xdot=Xdot)


def made_fit(cloud: Cloud, moving: Sequence[bool], *, place: str, afford: Afford) -> Cloud:
    """The same cloud on a grid that holds the velocities which a frame that comes to rest leaves to the wave function.

    Raises
    ------
    PhysicsRefused
        When no such grid is to be had: they would be folded back to other velocities.
    """
    frame, first = cloud.frame, cloud.space
    stopped = [
        j for j in range(3)
        if not moving[j] and (frame.Xdot[j] or frame.bdot[j]) and first.axis(j).carries_velocity
    ]  # fmt: skip
    if not stopped:
        return cloud
    seen = profile(cloud)
    points = np.ones(3)
    for j in stopped:
        axis, d = first.axis(j), first.dim(j)
        own = reach(axis.k, seen.spectrum[d] * axis.spectral_weights, FULL_TAIL)
        far = reach(axis.points, seen.density[d] * axis.weights, FULL_TAIL)
        wind = frame.b[j] / cloud.q * (abs(frame.Xdot[j]) + abs(frame.bdot[j]) * far)
        points[j] = 2.0 ** max(0, int(np.ceil(np.log2((own + wind) / axis.k_max))))
    space = first.grown(points, np.ones(3))
    if space is not first and not afford(space.size):
        j = int(points.argmax())
        axis = first.axis(j)
        fastest = 1e3 * axis.k_max * cloud.q / frame.b[j]
        raise PhysicsRefused.at(
            place, f"a cloud that moves at {1e3 * frame.Xdot[j]:.4g} mm/s along {'xyz'[j]} as it is held",
            f"the grid that stands there holds velocities up to {fastest:.4g} mm/s",
            f"give more numerics.points along {'xyz'[j]} (now {axis.whole}), or let it be held before it moves",
        )  # fmt: skip
    return through(cloud, space)[0]


def _square_k(cloud: Cloud) -> Array:
    """<k_j^2> (3,)."""
    space = cloud.space
    marginals = spectral_marginals(cloud)
    norm = float(marginals[0] @ space.axes[0].spectral_weights)
    weighted = [m * a.spectral_weights / norm for m, a in zip(marginals, space.axes, strict=True)]
    return np.array([float(weighted[space.dim(j)] @ space.axis(j).k2(j)) for j in range(3)])
