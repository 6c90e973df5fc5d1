"""What a cloud in a box needs of its axes: between soft walls, and between perfectly reflecting ones."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from scipy import special

from trapsim.constants import HBAR
from trapsim.errors import PlanError
from trapsim.prepare.extent import Accuracy, Lengths
from trapsim.quantities import human
from trapsim.space.axes import Array
from trapsim.terms.box import EDGE, Box

#: room around a box, in half lengths of it
HEAD_START = 2.0
#: finest length of a cloud in a box, and the widest spacing, in lengths over which it ends at the foot of the wall
FOOT, COARSEST_FOOT = 0.95, 1.35

#: finest length of a cloud at a perfectly reflecting wall, in healing lengths, and points across a box at accuracy fine
AT_WALL, ACROSS = 0.45, 32

def box_lengths(lengths: Lengths, box: Box, q: float, accuracy: Accuracy, free: Array) -> Lengths:
    """The lengths of a cloud that a box holds along the directions `free` of other traps.

    From where the wall is as high as the chemical potential the cloud ends within a foot of length (q/2 F)^(1/3), hbar F
    the mean slope of the wall over two such lengths; into the full wall it falls off over sqrt(q hbar/2 (height - mu)).
    """
    height, soft = box.strength * box.height / HBAR, box.edge / EDGE
    mu, turn = lengths.mu, -3.0
    for _ in range(20):
        # a cloud that does not climb far up soft walls has less room than between their half heights
        within = np.maximum(np.asarray(box.size) + 2 * soft * turn, np.asarray(box.size) / 4)[free]
        crowded = max(lengths.mu, 0.0) * np.prod(np.asarray(box.size)[free] / within)
        mu = 0.5 * (mu + crowded + q * np.sum((np.pi / within) ** 2) / 2)
        turn = float(special.ndtri(np.clip(mu / height, 1e-6, 0.9)))
    if height < 1.2 * mu:
        raise PlanError.at(
            "trap", f"walls of {human(box.height, 'energy')}",
            f"the cloud needs {human(HBAR * mu, 'energy')} and would spill over them",
            "make the walls higher, the box larger, or take fewer atoms",
        )  # fmt: skip
    foot = soft
    for _ in range(20):
        slope = (height * special.ndtr(turn + 2 * foot / soft) - mu) / (2 * foot)
        foot = 0.5 * (foot + (q / (2 * slope)) ** (1 / 3))
    healing = np.sqrt(q / (2 * mu))
    decay = np.sqrt(q / (2 * (height - mu)))
    half, finest = lengths.half.copy(), lengths.finest.copy()
    for j in np.nonzero(free)[0]:
        wall = box.size[j] / 2
        # when it is let go, its rim runs off at twice the speed of sound before the frame has gathered speed
        half[j] = max(wall + 1.2 * box.edge + accuracy.tail * decay, accuracy.wider * HEAD_START * wall)
        finest[j] = min(finest[j], min(FOOT, COARSEST_FOOT / accuracy.spacing) * min(foot, healing), box.size[j] / 8)
    return replace(lengths, half=half, finest=finest, mu=mu)


def hard_lengths(lengths: Lengths, box: Box, q: float, coupling: float, force: Array, *, trapped: bool) -> Lengths:
    """The lengths of a cloud between perfectly reflecting walls, at which it ends over the healing length sqrt(q/mu).

    Its chemical potential is that of a uniform gas which at every wall has that length less room (exact for a large one:
    L. D. Carr, C. W. Clark and W. P. Reinhardt, Phys. Rev. A 62, 063610 (2000)), with that of a trap inside on top, and
    of atoms that a force presses against one wall.

    Parameters
    ----------
    coupling : float
        4 pi q a N, m^3/s.
    force : (3,)
        On an atom in the middle, N.
    trapped : bool
        Whether there is a trap, for which the `lengths` are.
    """
    size = np.asarray(box.size)
    push = np.abs(force) / HBAR
    extra = (max(lengths.mu, 0.0) if trapped else 0.0) + q / 2 * float(np.sum((np.pi / size) ** 2))
    areas = np.prod(size) / size
    pressed = np.sqrt(2 * abs(coupling) * push / areas) + (q * push**2 / 2) ** (1 / 3)
    extra += float(np.sum(np.minimum(push * size, pressed)))
    mu = extra
    for _ in range(20):
        within = np.maximum(size - 2 * np.sqrt(q / mu), size / 2)
        mu = 0.5 * (mu + extra + abs(coupling) / float(np.prod(within)))
    with np.errstate(divide="ignore"):
        fallen = np.where(push > 0, (q / (2 * push)) ** (1 / 3), np.inf)
    finest = np.minimum(AT_WALL * np.minimum(np.sqrt(q / (2 * mu)), fallen), size / ACROSS)
    return replace(lengths, half=HEAD_START * size / 2, finest=finest, mu=mu, walls=size / 2)
