"""Where the atoms go: velocity field, probability current, and how well they obey continuity."""

from __future__ import annotations

import numpy as np

from trapsim.cloud.cloud import Cloud
from trapsim.space.axes import Array


def current(cloud: Cloud) -> tuple[Array, ...]:
    """The probability current j = n v in the lab, per array dimension, on the points; 1/(m^2 s).

    n v_j = n (bdot_j xi_j + Xdot_j) + (q/b_j) Im(phi* d_j phi)/B with n = |phi|^2/B, so that nothing is divided by a
    vanishing density. On a radial axis it is the component along the radius (about a centre at rest).
    """
    space, frame = cloud.space, cloud.frame
    n = cloud.density() / frame.B
    out = []
    for d, axis in enumerate(space.axes):
        j = axis.covers[0]
        drift = frame.Xdot[j] if len(axis.covers) == 1 else 0.0
        carried = n * (frame.bdot[j] * space.along(d, axis.points) + drift)
        out.append(carried + (cloud.q / (frame.b[j] * frame.B)) * _twist(cloud, d))
    return tuple(out)


def _twist(cloud: Cloud, d: int) -> Array:
    """Im(phi* d phi) along array dimension d."""
    return (np.conj(cloud.phi) * cloud.space.gradient(cloud.phi, d)).imag


def divergence(cloud: Cloud) -> Array:
    """Minus the rate at which the density |phi|^2 grows in the frame, 1/(m^3 s): sum_j (q/b_j^2) Im(phi* d_j^2 phi)."""
    space, frame = cloud.space, cloud.frame
    curved = space.forward(space.array(cloud.phi))
    weights = [cloud.q / b**2 / space.round_trip for b in frame.b]
    curved *= sum(space.along(d, v) for d, v in enumerate(space.per_axis(weights, "k2")))
    return -(np.conj(cloud.phi) * space.inverse(curved)).imag


def continuity_residual(before: Cloud, now: Cloud, after: Cloud) -> float:
    """How far d n/dt + div j is from zero, in units of the density times the fastest rate in the flow.

    Parameters
    ----------
    before, now, after : Cloud
        The same cloud at three equally spaced, close times.
    """
    space = now.space
    growth = (after.density() - before.density()) / (after.time - before.time)
    residual = growth + divergence(now)
    n = now.density()
    marginals = space.marginals(n)
    rates = []
    for d, axis in enumerate(space.axes):
        if not axis.uniform:
            j = axis.covers[0]
            spread = marginals[d] * axis.weights
            var = spread @ axis.x2(j) - (spread @ axis.x1(j)) ** 2
            rates.append(abs(now.frame.bdot[j] / now.frame.b[j]) + now.q / (now.frame.b[j] ** 2 * var))
    return float(np.sqrt(space.integral(residual**2) / space.integral(n**2)) / max(rates, default=1.0))
