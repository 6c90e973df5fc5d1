"""Where the atoms go: velocity field, probability current, and how well they obey continuity."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from trapsim.cloud.cloud import Cloud
from trapsim.measure.columns import midpoints
from trapsim.measure.views import VIEWS
from trapsim.space.axes import Array, Axis, Radial


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
    """How far d n/dt + div j is from zero, in units of either or of the density times the cloud's own rates.

    Parameters
    ----------
    before, now, after : Cloud
        The same cloud at three equally spaced, close times.
    """
    space = now.space
    growth = (after.density() - before.density()) / (after.time - before.time)
    outflow = divergence(now)
    residual = growth + outflow
    n = now.density()
    marginals = space.marginals(n)
    rates = []
    for d, axis in enumerate(space.axes):
        if not axis.uniform:
            j = axis.covers[0]
            spread = marginals[d] * axis.weights
            var = spread @ axis.x2(j) - (spread @ axis.x1(j)) ** 2
            rates.append(abs(now.frame.bdot[j] / now.frame.b[j]) + now.q / (now.frame.b[j] ** 2 * var))
    scale = max(np.sqrt(space.integral(n**2)) * max(rates, default=1.0), np.sqrt(space.integral(outflow**2)))
    return float(np.sqrt(space.integral(residual**2)) / scale)


@dataclass(frozen=True)
class FlowPlane:
    """Density and velocity in the plane through the middle of the frame, seen along `view`.

    Parameters
    ----------
    view : str
    x, y : (n,)
        Lab coordinates to the right and upwards, m.
    density : (n, n)
        Rows upwards, 1/m^3 for a wave function normalised to 1.
    right, up : (n, n)
        Velocity less that of the frame's centre, m/s; not-a-number where there is next to nothing.
    """

    view: str
    x: Array
    y: Array
    density: Array
    right: Array
    up: Array


#: densities below this share of the peak show no arrows
FAINT = 1e-3


def flow_plane(cloud: Cloud, view: str, *, n: int = 25) -> FlowPlane:
    """Where the atoms in the middle plane go: v_j = bdot_j xi_j + (q/b_j) Im(phi* d_j phi)/|phi|^2."""
    space, frame, q = cloud.space, cloud.frame, cloud.q
    right, up = ("xyz".index(d) for d in VIEWS[view])
    lines = [midpoints(space.axis(j).half_extent, n) for j in (right, up)]
    phi, slopes = _in_plane(cloud, right, up, lines)
    density = np.abs(phi) ** 2
    seen = density > FAINT * density.max()
    out = []
    for j, slope, own in ((right, slopes[0], lines[0][None, :]), (up, slopes[1], lines[1][:, None])):
        own_flow = np.divide((np.conj(phi) * slope).imag, density, out=np.full(phi.shape, np.nan), where=seen)
        out.append(frame.bdot[j] * own + q / frame.b[j] * own_flow)
    return FlowPlane(view, frame.lab(lines[0], right), frame.lab(lines[1], up), density / frame.B, *out)


def _in_plane(cloud: Cloud, right: int, up: int, lines: list[Array]) -> tuple[Array, tuple[Array, Array]]:
    """The field and its slopes to the right and upwards on the raster of two lines, (rows, columns)."""
    space = cloud.space
    middle = np.zeros(1)
    if isinstance(space.axes[0], Radial) and set(space.axes[0].covers) == {right, up}:
        radial, other = space.axes
        profile = cloud.phi @ other.basis(middle)[0]
        x, y = np.meshgrid(*lines)
        r = np.sqrt(x**2 + y**2)
        h = 1e-4 * radial.half_extent
        value, plus, minus = (radial.basis(np.abs(r.ravel() + s)) @ profile for s in (0.0, h, -h))
        slope = ((plus - minus) / (2 * h)).reshape(r.shape)
        unit = np.divide(1.0, r, out=np.zeros_like(r), where=r > 0)
        return value.reshape(r.shape), (slope * x * unit, slope * y * unit)
    field = np.asarray(cloud.phi)
    order = list(range(len(space.axes)))
    along = ({0, 1, 2} - {right, up}).pop()
    if space.axis(along).covers == (along,):
        d = space.dim(along)
        field = np.tensordot(space.axis(along).basis(middle)[0], field, axes=(0, d))
        order.remove(d)
    if order != [space.dim(up), space.dim(right)]:
        field = field.T
    rows, row_slopes = (make(space.axis(up), lines[1]) for make in (_evaluate, _slope))
    columns, column_slopes = (make(space.axis(right), lines[0]) for make in (_evaluate, _slope))
    return rows @ field @ columns.T, (rows @ field @ column_slopes.T, row_slopes @ field @ columns.T)


def _evaluate(axis: Axis, line: Array) -> Array:
    return axis.basis(np.abs(line) if isinstance(axis, Radial) else line)


def _slope(axis: Axis, line: Array) -> Array:
    """(len(line), n): the derivative of the axis' series, by central differences of its basis."""
    h = 1e-4 * axis.half_extent
    return (_evaluate(axis, line + h) - _evaluate(axis, line - h)) / (2 * h)
