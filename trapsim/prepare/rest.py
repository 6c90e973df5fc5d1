"""Where the cloud rests: the balance of the forces before the sequence."""

from __future__ import annotations

import numpy as np
from scipy import optimize

from trapsim.errors import PlanError
from trapsim.terms.beam import Beam
from trapsim.terms.box import Box
from trapsim.terms.lattice import Lattice
from trapsim.terms.part import Array, Part, gripped, steered

#: m, the unit in which a place of rest is looked for
LENGTH = 1e-6


def equilibrium(parts: tuple[Part, ...]) -> Array:
    """Where the steerable forces balance, m.

    In a box with perfectly reflecting walls its middle, whatever else acts there. Along directions that only a box or a
    lattice holds, the middle of the box or the nearest lattice minimum; zero along directions that nothing holds.

    Raises
    ------
    PlanError
        When the forces balance nowhere near the trap's centre.
    """
    for part in parts:
        if isinstance(part, Box) and part.hard:
            return np.array(part.centre)
    held = gripped(parts)
    start = np.zeros(3)
    for part in parts:
        for j in range(3):
            if isinstance(part, Beam) and part.full_depth > 0:
                start[j] = part.focus[j]
            elif isinstance(part, Box):
                start[j] = part.centre[j]
    for part in parts:
        if isinstance(part, Lattice):
            start[part.direction] = part.nearest_minimum(start[part.direction])
    _, curvature = steered(parts, start)
    free = np.array([curvature[j] > 0 for j in range(3)])
    if not free.any():
        return start

    def pull(u: Array) -> Array:
        x = start.copy()
        x[free] = LENGTH * u
        return steered(parts, x)[0][free] / (LENGTH * curvature[free])

    found = optimize.root(pull, start[free] / LENGTH, tol=1e-13)
    out = start.copy()
    out[free] = LENGTH * found.x
    _, there = steered(parts, out)
    if not np.abs(pull(found.x)).max() < 1e-6 or (there[free] <= 0).any():
        raise PlanError.at(
            "trap", "", "the trap cannot hold the atoms against the other forces: nowhere near its centre do they balance",
            "make it deeper or tighter, levitate the atoms with a gradient, or leave [gravity] out",
        )  # fmt: skip
    out[~free & ~np.isin(np.arange(3), list(held))] = 0.0
    return out
