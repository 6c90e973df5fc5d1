"""What a cloud is doing, in lab quantities: sizes, rates, velocities, energies.

Everything is a weighted sum over the samples and over the spectrum in the cloud's own frame; the wave function is
never built on a lab grid, where its curvature of phase would not fit.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from trapsim.cloud.cloud import Cloud
from trapsim.constants import HBAR
from trapsim.space.axes import Axis, Mirror, Radial
from trapsim.terms.part import Array

#: points on either side of the centre from which the density at the centre is found
NEAR = 7

#: a density below this share of its peak has no flow worth asking for
FAINT = 1e-10


@dataclass(frozen=True)
class Profile:
    """Marginals of a cloud's density and spectrum, and what follows from them, in grid coordinates.

    Parameters
    ----------
    norm : float
        Integral of |phi|^2: the share of the atoms still there.
    density, spectrum : list of (n,) arrays
        Marginals per array dimension.
    mean, var : (3,)
        <xi> in m and its variance.
    k_mean, k_var : (3,)
        <k> in 1/m and its variance.
    cov : (3,)
        Symmetrised covariance of xi and k.
    quartic : float
        Integral of |phi|^4.
    flow : list of (n,) arrays
        Per array dimension, the mean of k at each place; 0 where there is next to nothing.
    """

    norm: float
    density: list[Array]
    spectrum: list[Array]
    mean: Array
    var: Array
    k_mean: Array
    k_var: Array
    cov: Array
    quartic: float
    flow: list[Array]


def spectral_marginals(cloud: Cloud) -> list[Array]:
    """Per array dimension, |spectrum|^2 with all other wave numbers summed away; costs half a transform pair."""
    samples = cloud.space.forward(cloud.space.array(cloud.phi))
    return cloud.space.spectral_marginals(samples.real**2 + samples.imag**2)


def profile(cloud: Cloud) -> Profile:
    """Measure a cloud in its own frame; costs half a transform pair and one derivative per direction."""
    space = cloud.space
    n = cloud.density()
    quartic = space.integral(n**2)
    density = space.marginals(n)
    spectrum = spectral_marginals(cloud)
    norm = float(np.dot(density[0], space.axes[0].weights))
    mean, var, k_mean, k_var, cov = (np.zeros(3) for _ in range(5))
    flow = [np.zeros(a.n) for a in space.axes]
    for d, axis in enumerate(space.axes):
        if axis.uniform:
            continue
        twist = np.conj(cloud.phi) * space.gradient(cloud.phi, d)
        twists = space.marginals(twist.imag)[d]
        lever = float(np.dot(twists, axis.weights * axis.lever)) / norm
        drift = float(np.dot(twists, axis.weights * axis.drift)) / norm
        flow[d] = np.divide(twists, density[d], out=np.zeros(axis.n), where=density[d] > FAINT * density[d].max())
        for j in axis.covers:
            weighted = density[d] * axis.weights / norm
            spectral = spectrum[d] * axis.spectral_weights / norm
            mean[j] = weighted @ axis.x1(j)
            var[j] = max(weighted @ axis.x2(j) - mean[j] ** 2, 0.0)
            k_mean[j] = drift
            # of a plane wave it is rounding, with either sign
            k_var[j] = max(spectral @ axis.k2(j) - k_mean[j] ** 2, 0.0)
            cov[j] = lever - mean[j] * k_mean[j]
    return Profile(norm, density, spectrum, mean, var, k_mean, k_var, cov, quartic, flow)


@dataclass(frozen=True)
class Moments:
    """Lab quantities at one time, SI, normalised by the atoms present; energies in J per atom.

    Parameters
    ----------
    time : float
    norm : float
        Share of the atoms still there.
    centre, velocity : (3,)
        <x> counted from the lab's origin, and <p>/m.
    width, rate, spread : (3,)
        Rms half-width, its time derivative, and the rms velocity spread.
    kinetic : (3,)
        Internal kinetic energy per direction, (m/2) spread^2.
    centre_kinetic : float
        (m/2) |velocity|^2.
    trap : float
        Potential energy of the cloud less that of a point at its centre.
    interaction : float
    scale : (3,)
        The frame's b.
    """

    time: float
    norm: float
    centre: Array
    velocity: Array
    width: Array
    rate: Array
    spread: Array
    kinetic: Array
    centre_kinetic: float
    trap: float
    interaction: float
    scale: Array

    @property
    def internal(self) -> float:
        """Internal energy; constant while nothing changes in time."""
        return float(self.kinetic.sum() + self.trap + self.interaction)


def moments(cloud: Cloud, seen: Profile, *, coupling: float, curvature: Array, rest: Array | float) -> Moments:
    """Lab quantities of a cloud from its profile.

    With sigma = b sd(xi): d sigma/dt = (bdot/b) sigma + (q/b) cov(xi, k)/sd(xi), and
    var v = bdot^2 var xi + (q/b)^2 var k + 2 q (bdot/b) cov(xi, k).

    Parameters
    ----------
    cloud : Cloud
    seen : Profile
        `profile(cloud)`.
    coupling : float
        4 pi q a N, m^3/s.
    curvature : (3,)
        Of the steered potential, N/m.
    rest : array or float
        Potential energy not steered, J, on the samples, counted from its value at the cloud's centre.
    """
    frame, q = cloud.frame, cloud.q
    mass = HBAR / q
    b, bdot = frame.b, frame.bdot
    sd = np.sqrt(np.maximum(seen.var, 0.0))
    width = b * sd
    rate = np.divide(bdot * seen.var + (q / b) * seen.cov, sd, out=np.zeros(3), where=sd > 0)
    spread2 = bdot**2 * seen.var + (q / b) ** 2 * seen.k_var + 2 * q * (bdot / b) * seen.cov
    velocity = frame.Xdot + bdot * seen.mean + (q / b) * seen.k_mean
    unsteered = 0.0 if np.isscalar(rest) else cloud.space.integral(rest * cloud.density()) / seen.norm
    return Moments(
        time=cloud.time,
        norm=seen.norm,
        centre=frame.X + b * seen.mean,
        velocity=velocity,
        width=width,
        rate=rate,
        spread=np.sqrt(np.maximum(spread2, 0.0)),
        kinetic=0.5 * mass * spread2,
        centre_kinetic=0.5 * mass * float(velocity @ velocity),
        trap=float(0.5 * curvature @ width**2) + unsteered,
        interaction=0.5 * HBAR * coupling * seen.quartic / (frame.B * seen.norm),
        scale=b.copy(),
    )


def peak_density(cloud: Cloud) -> float:
    """Highest density in the lab, 1/m^3: on the points, or at the frame's centre between them.

    At the centre the field's own series is at its worst, because what the cloud's edge leaves beyond the highest wave
    number is focused there. The logarithm of the density is smooth in the middle of any cloud, so that is interpolated
    from the nearest points.
    """
    density = cloud.density()
    middle = np.log(np.maximum(density, np.finfo(float).tiny))
    for axis in cloud.space.axes:
        nearest, weights = _towards_centre(axis)
        middle = np.tensordot(weights, middle[nearest], axes=(0, 0))
    return max(float(np.exp(middle)), float(density.max())) / cloud.frame.B


def _towards_centre(axis: Axis) -> tuple[Array, Array]:
    """Points nearest the centre, and Lagrange's weights of their values there (in x^2 on one that is even)."""
    if isinstance(axis, Radial | Mirror):
        nearest = np.arange(min(NEAR, axis.n))
        x = axis.points[nearest] ** 2
    else:
        nearest = np.argsort(np.abs(axis.points), kind="stable")[: 2 * NEAR]
        x = axis.points[nearest]
    others = [np.delete(x, i) for i in range(len(x))]
    return nearest, np.array([np.prod(o / (o - one)) for one, o in zip(x, others, strict=True)])


def reach(places: Array, population: Array, tail: float) -> float:
    """The |place| beyond which only the share `tail` of a population lies."""
    order = np.argsort(np.abs(places))
    beyond = population[order][::-1].cumsum()[::-1] / population.sum()
    inside = np.nonzero(beyond > tail)[0]
    return float(np.abs(places)[order][inside[-1]])
