"""What a plan will cost, before it is run."""

from __future__ import annotations

import time
from dataclasses import dataclass

import numpy as np

from trapsim.evolve.march import PROFILE_PAIRS
from trapsim.evolve.splitstep import SAMPLED
from trapsim.evolve.state import Leg
from trapsim.prepare.setup import Setup, memory_needed
from trapsim.space.space import Array, Space

#: a step's pointwise work, in units of a bare transform pair
OVERHEAD = 2.5
#: transform pairs of a ground state by conjugate gradient; between 20 and 40 for smooth traps
GROUND_PAIRS = 35.0


@dataclass(frozen=True)
class Cost:
    """Predicted cost.

    Parameters
    ----------
    pairs : float
        Transform pairs of ground state and march.
    memory : float
        Bytes.
    seconds : float
        On this machine, from one timed pair per space.
    """

    pairs: float
    memory: float
    seconds: float


def predict(setup: Setup) -> Cost:
    """Predict a plan's cost; plans and times one transform pair for each of its spaces."""
    timed = {id(s): _pair_seconds(s) for s in {id(s): s for s in (setup.space, *(g.space for g in setup.legs))}.values()}
    pairs = GROUND_PAIRS
    seconds = GROUND_PAIRS * timed[id(setup.space)] * OVERHEAD
    elapsed = 0.0
    for leg, place in zip(setup.legs, setup.timeline.path, strict=True):
        length = leg.stop - leg.start
        if leg.trapped and not leg.brief:
            steps = length * _trapped_rate(setup, leg.space) / setup.pace.cap
            spent = steps * (1 + PROFILE_PAIRS / 4)
        else:
            # found by counting: the steps of a flight grow with its length, so that their number goes as a logarithm
            tight = float(setup.omega.max()) if setup.omega.any() else 1.0
            steps = 10 * (1e-4 / setup.pace.tolerance) ** 0.3 * np.log1p(tight * (length + elapsed))
            steps = max(steps, length * _passing(leg, np.abs(place[3:])) / SAMPLED)
            spent = steps * (3 + PROFILE_PAIRS)
            elapsed += length
        pairs += spent
        seconds += spent * timed[id(leg.space)] * OVERHEAD
    memory = memory_needed(max(g.space.size for g in (setup, *setup.legs)))
    return Cost(float(pairs), memory, float(seconds))


def _passing(leg: Leg, speed: Array) -> float:
    """How fast (rad/s) light goes past a cloud of that speed (3,), in m/s: every step samples it."""
    parts = leg.interval.parts_at(0.5 * (leg.start + leg.stop))
    return max((p.rate(speed) for p in parts if not p.quadratic), default=0.0)


def _trapped_rate(setup: Setup, space: Space) -> float:
    """Phase per second of the highest wave number and the mean field, rad/s."""
    kinetic = 0.5 * setup.q * sum(space.axis(j).k_max ** 2 / len(space.axis(j).covers) for j in range(3))
    return kinetic + abs(setup.lengths.mu)


def _pair_seconds(space: Space) -> float:
    a = space.empty()
    a[...] = 0.0
    space.inverse(space.forward(a))
    began = time.perf_counter()
    space.inverse(space.forward(a))
    return time.perf_counter() - began
