"""The door between two legs: the same cloud on another space."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from trapsim.cloud.cloud import Cloud
from trapsim.space.resample import resample
from trapsim.space.space import Array, Space


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


def _square_k(cloud: Cloud) -> Array:
    """<k_j^2> (3,)."""
    space = cloud.space
    spectrum = space.forward(space.array(cloud.phi))
    marginals = space.spectral_marginals(spectrum.real**2 + spectrum.imag**2)
    norm = float(marginals[0] @ space.axes[0].spectral_weights)
    weighted = [m * a.spectral_weights / norm for m, a in zip(marginals, space.axes, strict=True)]
    return np.array([float(weighted[space.dim(j)] @ space.axis(j).k2(j)) for j in range(3)])
