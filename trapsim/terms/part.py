"""What every part of the potential answers: the contract of the family."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from trapsim.fields import Triple, entry

Array = np.ndarray

ANYWHERE = "anywhere"
NONE = "none"


@dataclass(frozen=True)
class About:
    """Even about the lab coordinate `x`, and again every `period` metres if that is given."""

    x: float
    period: float | None = None


@dataclass(frozen=True)
class Symmetry:
    """What a potential looks like to a cloud that is centred somewhere.

    Parameters
    ----------
    even : tuple of 3
        Per direction: `ANYWHERE` when, once its local slope is taken away, it is even about every
        point (uniform, linear, quadratic); `About(x, period)`; or `NONE`.
    round_about : frozenset of int
        Directions about which it does not change when the other two are turned into each other.
    """

    even: tuple[object, object, object]
    round_about: frozenset[int]


@dataclass(frozen=True, kw_only=True)
class Part:
    """One named piece of the potential. It knows no time: the timeline hands out its values.

    A member of the family says

    `energy(x, y, z)`
        Potential energy in J on broadcastable lab coordinates in m, at full strength times
        `strength`.
    `steer(centre)`
        Force (N) and curvature (N/m), three each, of the exactly quadratic share about the lab
        point `centre`; zero for everything that is not exactly quadratic.
    `symmetry()`
        A `Symmetry`.
    `finest()`
        The shortest length in m over which it changes, infinity for a parabola.
    """

    kind: ClassVar[str] = ""
    #: whether it can hold atoms; a release switches off every part that confines
    confines: ClassVar[bool] = True
    #: whether what it steers is all there is, so that a moving frame leaves nothing of it
    quadratic: ClassVar[bool] = False

    strength: float = entry(
        "number", "multiplies the part's potential energy: 1 as written, 0 off", default=1.0, low=0.0, ramp=True
    )

    def energy(self, x: Array, y: Array, z: Array) -> Array:
        raise TypeError(f"{type(self).__name__} does not say its energy")

    def steer(self, centre: Triple) -> tuple[Array, Array]:
        return np.zeros(3), np.zeros(3)

    def symmetry(self) -> Symmetry:
        return Symmetry((NONE, NONE, NONE), frozenset())

    def finest(self) -> float:
        return np.inf


def steered(parts: Iterable[Part], centre: Triple) -> tuple[Array, Array]:
    """Force (N) and curvature (N/m), three each, of the exactly quadratic share of all parts about `centre`."""
    force, curvature = np.zeros(3), np.zeros(3)
    for part in parts:
        f, c = part.steer(centre)
        force += f
        curvature += c
    return force, curvature


def remainder(parts: Iterable[Part], centre: Triple, x: Array, y: Array, z: Array) -> Array | float:
    """Potential energy (J) that is not steered, counted from its value at `centre`; 0.0 when nothing is left."""
    total: Array | float = 0.0
    for part in parts:
        if part.quadratic or part.strength == 0:
            continue
        force, curvature = part.steer(centre)
        total = total + part.energy(x, y, z) - part.energy(*(np.asarray(c) for c in centre))
        for u, c, f, k in zip((x, y, z), centre, force, curvature, strict=True):
            if f or k:
                total = total + f * (u - c) - 0.5 * k * (u - c) ** 2
    return total
