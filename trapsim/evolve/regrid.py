"""A larger grid for a cloud that outgrows the one it is on.

An axis that is nearly full at one end is given twice its extent or twice its points; where there is nothing near the
other end, the points stay as many and what is empty is given up instead. The samples are evaluated by the axis' own
series, so that nothing is lost but what was not there.
"""

from __future__ import annotations

import numpy as np

from trapsim.cloud.cloud import Cloud
from trapsim.errors import Notice
from trapsim.evolve.door import Afford, through
from trapsim.evolve.guards import Guards, share_beyond
from trapsim.evolve.state import Leg
from trapsim.measure.observables import spectral_marginals
from trapsim.space.space import Array, Space

#: more than this share of what the guards allow is reason enough
NEARLY = 0.3
#: the half that is given up holds less than this share of what they allow
EMPTY = 1e-3
#: where the guards' outer part starts once an axis is half as long
HALF = 0.4


def nearly_full(guards: Guards, edge: Array, spectrum: Array) -> bool:
    """Whether populations (3,) near the watched edges, or near the highest wave numbers, are close to what is allowed."""
    return bool(edge.max() > NEARLY * guards.edge or spectrum.max() > NEARLY * guards.spectrum)


def roomier(
    cloud: Cloud, leg: Leg, *, guards: Guards, edge: Array, spectrum: Array, afford: Afford
) -> tuple[Cloud, Notice] | None:
    """The same cloud on a space with more room where it is needed; None when that is too large to afford.

    Parameters
    ----------
    edge, spectrum : (3,)
        Populations near the edges that are watched, and near the highest wave numbers; where they are nearly full, more
        room is made.
    afford : callable
        Whether there is memory for so many points.
    """
    space = cloud.space
    density, spectral = space.marginals(cloud.density()), spectral_marginals(cloud)
    points, extent = np.ones(3), np.ones(3)
    for d, axis in enumerate(space.axes):
        along = list(axis.covers)
        # a lattice that holds atoms wants its own period to remain a whole number of spacings
        free = all(leg.moving[j] or not leg.split[j] for j in along)
        if max(edge[j] for j in along) > NEARLY * guards.edge:
            extent[along] = 2.0
            slow = free and share_beyond(spectral[d] * axis.spectral_weights, axis.k, HALF) < EMPTY * guards.spectrum
            points[along] = 1.0 if slow else 2.0
        if max(spectrum[j] for j in along) > NEARLY * guards.spectrum:
            narrow = free and share_beyond(density[d] * axis.weights, axis.points, HALF) < EMPTY * guards.edge
            points[along] *= 1.0 if narrow else 2.0
            extent[along] *= 0.5 if narrow else 1.0
    larger = space.grown(points, extent)
    if larger is space or not afford(larger.size):
        return None
    told = Notice("regrid", _told(cloud, leg, larger))
    return through(cloud, larger)[0], told


def _told(cloud: Cloud, leg: Leg, larger: Space) -> str:
    changed = []
    for axis, new in zip(cloud.space.axes, larger.axes, strict=True):
        if new is not axis:
            names = " and ".join("xyz"[j] for j in axis.covers)
            what = [f"{axis.counted} to {new.counted} points"] if new.counted != axis.counted else []
            if new.half_extent != axis.half_extent:
                what.append(f"{new.half_extent / axis.half_extent:g} times its extent")
            changed.append(f"along {names} from {' and '.join(what)}" if len(what) == 2 else f"along {names} {what[0]}")
    when = f"at {1e3 * cloud.time:.4g} ms, in stage {leg.name}"
    return f"{when}, the cloud outgrew its grid, which was changed: {'; '.join(changed)}"


def grown_alike(planned: Space, now: Space, before: Space) -> Space:
    """The space planned for a leg, with the growth that the one before it has seen on the way."""
    points, extent = np.ones(3), np.ones(3)
    for j in range(3):
        there, was = now.axis(j), before.axis(j)
        if not (there.uniform or there.walled):
            points[j], extent[j] = there.counted / was.counted, there.half_extent / was.half_extent
    return planned.grown(points, extent)
