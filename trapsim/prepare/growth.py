"""How far the frame will have grown, before anything is computed: the frame law of the cloud's best Gaussian."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from trapsim.cloud.shapes import gaussian_widths
from trapsim.evolve.scaling import LawStart, MovingLaw
from trapsim.prepare.timeline import Timeline
from trapsim.space.axes import Array
from trapsim.space.frame import Frame


def scales(
    timeline: Timeline, omega: Array, q: float, scattering_number: float, moving: Sequence[Sequence[bool]]
) -> list[tuple[Array, Array]]:
    """The frame's scale b (3,) at the start and the end of every step, in the directions that a trap holds.

    Parameters
    ----------
    timeline : Timeline
    omega : (3,)
        Trap frequencies at the start, rad/s.
    q : float
        hbar/m.
    scattering_number : float
        N a over the lengths of the untrapped directions, m.
    moving : three flags per step
    """
    widths = gaussian_widths(omega, q, scattering_number) if omega.any() else np.full(3, np.inf)
    A = np.where(np.isfinite(widths), (q / (2 * widths**2)) ** 2, 0.0)
    i = omega**2 - A
    coupling = timeline.initial.coupling(0.0)
    frame = Frame(X=np.array(timeline.origin))
    out = []
    for step, flags in zip(timeline.steps, moving, strict=True):
        start = frame.b
        stands = np.where(flags, 1.0, 0.0)
        frame = Frame(frame.b, frame.bdot * stands, frame.X, frame.Xdot * stands + np.array(step.kick))
        constants = LawStart(step.stretch.start, frame, A, i / coupling if coupling else 0 * i, widths**2)
        frame = MovingLaw(constants, step.stretch, q=q, moving=flags).frame(step.stretch.stop)
        out.append((start, frame.b))
    return out
