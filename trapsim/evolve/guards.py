"""Guards: what is watched during the march, and when it must stop.

A cloud that reaches the edge of its box comes back in on the other side, and one that fills its spectrum is folded back
in wave number; both look like physics. The populations near the edges of both are watched at every step.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from trapsim.errors import PhysicsRefused
from trapsim.space.space import Array, Space

#: an axis' outer part starts at this share of its half extent
OUTER = 0.9
#: a spectrum's upper part starts at this share of the highest wave number
UPPER = 0.8


@dataclass(frozen=True)
class Guards:
    """The highest populations allowed at the edge of any axis and of its spectrum, and of norm drift.

    Directions that the plan itself makes periodic have no edge; they are not `watched` there.
    """

    edge: float
    spectrum: float
    norm: float
    watched: tuple[bool, bool, bool] = (True, True, True)

    def check(self, *, time: float, norm: float, edge: Array, spectrum: Array, place: str) -> Alarm | None:
        """What is wrong, if anything is.

        Raises
        ------
        PhysicsRefused
            When the wave function is no longer a number, or its norm has drifted away.
        """
        when = f"at {1e3 * time:.4g} ms"
        if not np.isfinite(norm):
            raise PhysicsRefused.at(
                place, f"not a number {when}", "the wave function must stay finite",
                "try numerics.accuracy = \"fine\"; if that does not help, look at the plan's strengths and durations",
            )  # fmt: skip
        if abs(norm - 1) > self.norm:
            raise PhysicsRefused.at(
                place, f"norm off by {norm - 1:.1e} {when}", f"the norm may drift by {self.norm:.0e}",
                "take a finer accuracy (numerics.accuracy), which shortens the steps",
            )  # fmt: skip
        edge = np.where(self.watched, edge, 0.0)
        if edge.max() > self.edge:
            return Alarm("edge", int(edge.argmax()), float(edge.max()), self.edge)
        if spectrum.max() > self.spectrum:
            return Alarm("spectrum", int(spectrum.argmax()), float(spectrum.max()), self.spectrum)
        return None


@dataclass(frozen=True)
class Alarm:
    """A cloud that outgrows its space: at the `edge` of an axis or of its `spectrum`."""

    where: str
    direction: int
    population: float
    limit: float

    def refuse(self, *, time: float, place: str, space: Space, attractive: bool = False) -> PhysicsRefused:
        """The error to raise when no larger space is to be had; an attractive cloud may be collapsing."""
        name = "xyz"[self.direction]
        axis = space.axis(self.direction)
        if self.where == "edge":
            got = f"{self.population:.1e} of the atoms within 10 % of the edge along {name} at {1e3 * time:.4g} ms"
            rule = f"at most {self.limit:.0e} may be there, or the cloud comes back in on the other side"
            remedy = f"numerics.extent along {name} (now {2e6 * axis.half_extent:.4g} um full length, before scaling)"
        else:
            got = f"{self.population:.1e} of the atoms near the highest wave number along {name} at {1e3 * time:.4g} ms"
            rule = f"at most {self.limit:.0e} may be there, or fast atoms appear as slow ones"
            remedy = f"numerics.points along {name} (now {axis.counted})"
        way_out = f"give more room with {remedy}, numerics.memory to grow into, or a finer numerics.accuracy"
        if attractive:
            rule += "; and the atoms attract each other: if the cloud collapses, no grid holds it"
            way_out = f"take fewer atoms or a weaker attraction; or {way_out}"
        return PhysicsRefused.at(place, got, rule, way_out)


def edge_population(space: Space, marginals: Sequence[Array]) -> Array:
    """Share (3,) of a density in the outer 10 % of the axis of each direction; zero where nothing can leave it."""
    shares = [
        0.0 if a.uniform or a.walled else _share(m * a.weights, np.abs(a.points) > OUTER * a.half_extent)
        for a, m in zip(space.axes, marginals, strict=True)
    ]
    return np.array([shares[space.dim(j)] for j in range(3)])


def spectrum_population(space: Space, marginals: Sequence[Array]) -> Array:
    """Share (3,) of a spectrum beyond 0.8 of the highest wave number of each direction's axis."""
    shares = [
        0.0 if a.uniform else _share(m * a.spectral_weights, _upper(np.abs(a.k)))
        for a, m in zip(space.axes, marginals, strict=True)
    ]
    return np.array([shares[space.dim(j)] for j in range(3)])


def share_beyond(population: Array, places: Array, part: float) -> float:
    """The share of a population beyond a part of the furthest |place|."""
    return _share(population, np.abs(places) > part * np.abs(places).max())


def _upper(k: Array) -> Array:
    """Which wave numbers (absolute) lie in the upper part: at least two of them, as a round cloud may have none in one."""
    return (k > UPPER * k.max()) | (k >= np.unique(k)[-2:][0] * (1 - 1e-9))


def _share(population: Array, chosen: Array) -> float:
    return float(population[chosen].sum() / population.sum())
