"""A potential of the user's own: a Python function of place and time."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import ClassVar

import numpy as np

from trapsim.fields import entry
from trapsim.terms.part import Array, Part

Potential = Callable[[Array, Array, Array, float], Array]


@dataclass(frozen=True, kw_only=True)
class Function(Part):
    """V(x, y, z, t) in J on broadcastable arrays in m and a time in s, handed over in Python with the plan."""

    kind: ClassVar[str] = "function"

    name: str = entry("text", "says which function this is; enters the key of the result, so change it with the function")
    detail: float = entry("length", "the shortest length over which it changes", above=0.0, example='"1 um"')
    holds: bool = entry(
        "flag", "whether it can hold the cloud where it is, so that the frame stands while it is on", default=False
    )
    changes: bool = entry("flag", "whether it depends on time", default=True)
    function: Potential | None = None  #: set when the plan is read
    time: float = 0.0  #: s; set by the timeline

    def energy(self, x: Array, y: Array, z: Array) -> Array:
        return self.strength * np.asarray(self.function(x, y, z, self.time))

    @property
    def grips(self) -> frozenset[int]:
        return frozenset({0, 1, 2}) if self.holds else frozenset()

    def finest(self) -> float:
        return self.detail
