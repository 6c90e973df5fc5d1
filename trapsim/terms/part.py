"""What every part of the potential answers: the contract of the family."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any, ClassVar

import numpy as np

from trapsim.errors import Complaint
from trapsim.fields import Triple, entry

Array = np.ndarray

ANYWHERE = "anywhere"
NONE = "none"
ALL = (True, True, True)


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
    `grips`
        Directions in which it can hold atoms without steering them: while it does, the frame stands still there.
    `walls`
        Directions that it closes with perfectly reflecting walls.
    `rate(speed)`
        How fast (rad/s) its energy changes for a point that moves past it at up to `speed` (3,) m/s.
    """

    kind: ClassVar[str] = ""
    #: whether it can hold atoms; a release switches off every part that confines
    confines: ClassVar[bool] = True
    #: whether what it steers is all there is, so that a moving frame leaves nothing of it
    quadratic: ClassVar[bool] = False

    strength: float = entry(
        "number", "multiplies the part's potential energy: 1 as written, 0 off", default=1.0, low=0.0, ramp=True,
        example="1",
    )

    def energy(self, x: Array, y: Array, z: Array) -> Array:
        raise TypeError(f"{type(self).__name__} does not say its energy")

    def steer(self, centre: Triple) -> tuple[Array, Array]:
        return np.zeros(3), np.zeros(3)

    def symmetry(self) -> Symmetry:
        return Symmetry((NONE, NONE, NONE), frozenset())

    def finest(self) -> float:
        return np.inf

    @property
    def grips(self) -> frozenset[int]:
        return frozenset()

    @property
    def walls(self) -> frozenset[int]:
        return frozenset()

    def rate(self, speed: Array) -> float:
        return 2 * np.pi * float(np.max(speed)) / self.finest()

    @classmethod
    def units(cls, table: Mapping[str, Any], mass: float) -> Mapping[str, Mapping[str, float]]:
        """Units of this part's table (raw text) alone, by kind of entry, in SI, for atoms of a mass in kg."""
        return {}

    def complaints(self, place: str) -> list[Complaint]:
        """What does not fit together in its entries; `place` is its path in the plan."""
        return []


def steered(parts: Iterable[Part], centre: Triple) -> tuple[Array, Array]:
    """Force (N) and curvature (N/m), three each, of the exactly quadratic share of all parts about `centre`."""
    force, curvature = np.zeros(3), np.zeros(3)
    for part in parts:
        f, c = part.steer(centre)
        force += f
        curvature += c
    return force, curvature


def remainder(
    parts: Iterable[Part], centre: Triple, x: Array, y: Array, z: Array, *, steered_along: Sequence[bool] = ALL
) -> Array | float:
    """Potential energy (J) that is not steered, counted from its value at `centre`; 0.0 when nothing is left.

    Parameters
    ----------
    parts : iterable of Part
    centre : (3,)
        About which they are steered, m.
    x, y, z : array
        Broadcastable lab coordinates.
    steered_along : three flags
        The directions in which the frame takes what is steered.
    """
    total: Array | float = 0.0
    for part in parts:
        if part.strength == 0 or (part.quadratic and all(steered_along)):
            continue
        force, curvature = part.steer(centre)
        # the whole part less what the frame takes; of a quadratic one, only what the frame does not take
        sign, along = (1.0, steered_along) if not part.quadratic else (-1.0, [not s for s in steered_along])
        if not part.quadratic:
            total = total + part.energy(x, y, z) - part.energy(*(np.asarray(c) for c in centre))
        for u, c, f, k, taken in zip((x, y, z), centre, force, curvature, along, strict=True):
            if taken and (f or k):
                total = total + sign * (f * (u - c) - 0.5 * k * (u - c) ** 2)
    return total


def walled(parts: Iterable[Part]) -> frozenset[int]:
    """Directions that some part closes with perfectly reflecting walls."""
    return frozenset().union(*(p.walls for p in parts if p.strength > 0))


def gripped(parts: Iterable[Part]) -> frozenset[int]:
    """Directions in which some part holds the atoms without steering them."""
    return frozenset().union(*(p.grips for p in parts if p.strength > 0))
