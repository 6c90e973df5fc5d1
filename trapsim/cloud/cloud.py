"""The cloud: the wave function on a space, in a frame, at a time."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from trapsim.space.frame import Frame
from trapsim.space.space import Space

Array = np.ndarray


@dataclass(frozen=True)
class Cloud:
    """A wave function, normalised to 1, in the coordinates of its frame.

    Parameters
    ----------
    space : Space
    phi : complex array of the space's shape
    frame : Frame
    time : float
        s, from the start of the sequence.
    q : float
        hbar/m, m^2/s.
    """

    space: Space
    phi: Array
    frame: Frame
    time: float
    q: float

    def density(self) -> Array:
        """|phi|^2, per volume of grid coordinates; the lab density is this over `frame.B`."""
        return self.phi.real**2 + self.phi.imag**2

    def copy(self) -> Cloud:
        """The same cloud with its own samples."""
        return replace(self, phi=self.space.array(self.phi))


def regauge(cloud: Cloud, *, bdot: Array | None = None, Xdot: Array | None = None) -> Cloud:
    """The same wave function in a frame with another rate of scale or velocity; exact, no resampling.

    Parameters
    ----------
    bdot, Xdot : (3,), optional
        The new rates; what is not given stays.
    """
    frame = cloud.frame
    new_bdot = frame.bdot if bdot is None else np.asarray(bdot, dtype=float)
    new_Xdot = frame.Xdot if Xdot is None else np.asarray(Xdot, dtype=float)
    space = cloud.space
    slope = frame.b * (frame.Xdot - new_Xdot) / cloud.q
    angle = space.quadratic(frame.b * (frame.bdot - new_bdot) / (2 * cloud.q))
    for j, x in enumerate(space.coordinates()):
        if slope[j]:
            if not space.axis(j).carries_velocity:
                raise ValueError(f"direction {'xyz'[j]} has no axis that can carry a velocity")
            angle = angle + slope[j] * x
    phi = space.array(cloud.phi * np.exp(1j * angle))
    return replace(cloud, phi=phi, frame=replace(frame, bdot=new_bdot, Xdot=new_Xdot))
