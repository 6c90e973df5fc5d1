"""From one space to another: products of basis matrices, the only way between spaces."""

from __future__ import annotations

import numpy as np

from trapsim.space.space import Array, Space


def resample(samples: Array, old: Space, new: Space) -> Array:
    """The same function sampled on another space (zero outside the old one), as a new aligned array.

    A round function may go onto axes of its own for each direction; the way back is not offered, because
    nothing guarantees that what is there is still round.

    Parameters
    ----------
    samples : complex array of the old space's shape
    old, new : Space

    Raises
    ------
    ValueError
        When an axis of the new space covers directions that the old one keeps apart.
    """
    out = np.asarray(samples)
    # keep one array dimension per old axis, in front; each pass replaces the first by its new dimensions at the end
    order: list[tuple[int, ...]] = []
    for axis in old.axes:
        covers = axis.covers
        targets = [a for a in new.axes if set(a.covers) & set(covers)]
        if any(not set(a.covers) <= set(covers) for a in targets):
            raise ValueError("a cloud with separate axes cannot be put on a radial axis")
        if len(targets) == 1:
            points = targets[0].points
        else:
            grids = np.meshgrid(*(a.points for a in targets), indexing="ij")
            points = np.sqrt(sum(g**2 for g in grids)).ravel()
        matrix = axis.basis(points)
        out = np.moveaxis(out, 0, -1)
        out = out @ matrix.T
        out = out.reshape(*out.shape[:-1], *(a.n for a in targets))
        order.extend(a.covers for a in targets)
    back = [order.index(a.covers) for a in new.axes]
    return new.array(np.transpose(out, back))
