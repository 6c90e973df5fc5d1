"""The Hamiltonian that a ground state minimises, on a space, in real arithmetic.

H/hbar = K + V + c |u|^2, K = -(q/2) laplacian, c = 4 pi q a N, integral of u^2 = 1, u real.
"""

from __future__ import annotations

import numpy as np

from trapsim.space.real import RealPair
from trapsim.space.space import Array, Space

#: from this many points on it pays to relax on every second one first; an axis keeps at least so many
LARGE, FEWEST = 24**3, 8


class Hamiltonian:
    """K, V and the mean field on a space, acting on real wave functions.

    Parameters
    ----------
    space : Space
    potential : array
        V/hbar on the points, rad/s.
    coupling : float
        4 pi q a N, m^3/s.
    q : float
        hbar/m.
    """

    def __init__(self, space: Space, potential: Array, *, coupling: float, q: float) -> None:
        self.space = space
        self.lowest = float(potential.min())
        self.V = np.ascontiguousarray(np.broadcast_to(potential - self.lowest, space.shape))
        self.c = coupling
        self.q = q
        #: number of directions in which the cloud can draw together
        self.extended = sum(len(axis.covers) for axis in space.axes if not axis.uniform)
        self._pair = RealPair(space)
        #: on what is kept of a spectrum
        self.K = sum(space.along(d, v) for d, v in enumerate(space.per_axis([q / 2] * 3, "k2")))[self._pair.kept]
        self.pairs = 0.0
        self._scale = 1 / space.round_trip
        #: the volume of a cell, where all are alike
        alike = all(np.ptp(a.weights) == 0 for a in space.axes)
        self._cell = float(np.prod([a.weights[0] for a in space.axes])) if alike else 0.0

    def dot(self, a: Array, b: Array) -> float:
        """Integral of the product of two contiguous arrays."""
        if self._cell:
            return float(np.vdot(a, b)) * self._cell
        return self.space.integral(a * b)

    def spectral(self, a: Array, factor: Array) -> Array:
        """Multiply the spectrum of real samples, as far as it is kept, by a real factor; one pair."""
        self.pairs += 1
        return self._pair(a, factor * self._scale)

    def kinetic(self, u: Array) -> Array:
        return self.spectral(u, self.K)

    def coarser(self) -> Hamiltonian | None:
        """The same on every second point, with means of the potential; None where there is nothing to be gained."""
        space = self.space
        varied = [a for a in space.axes if not a.uniform]
        if space.size < LARGE or self.c < 0 or any(len(a.covers) > 1 or a.n % 2 or a.n < 2 * FEWEST for a in varied):
            return None
        fewer = space.grown((0.5,) * 3, (1,) * 3)
        return Hamiltonian(fewer, means(self.V, space), coupling=self.c, q=self.q)

    def rms_too_small(self, u: Array) -> bool:
        """Whether the cloud is narrower than one grid spacing along some axis, as a collapsed one is."""
        marginals = self.space.marginals(u**2)
        for d, axis in enumerate(self.space.axes):
            if not axis.uniform:
                weighted = marginals[d] * axis.weights
                if any(weighted @ axis.x2(j) < axis.spacing**2 for j in axis.covers):
                    return True
        return False

    def unbalanced(self, u: Array, kin: float, inter: float) -> float:
        """What still draws the cloud together, 2 E_kin - <r.grad V> + d E_int, relative to E_kin (virial theorem).

        By parts, <r.grad V> = -int V (d n + r.grad n): the cloud is smooth where a potential need not be.
        """
        phi = self.space.array(u)
        lever = sum(
            self.space.along(i, axis.points) * self.space.gradient(phi, i).real
            for i, axis in enumerate(self.space.axes)
            if not axis.uniform
        )
        outward = -self.space.integral(self.V * u * (self.extended * u + 2 * lever))
        return (2 * kin - outward + self.extended * inter) / kin


def means(a: Array, space: Space) -> Array:
    """Means over every two neighbours along each direction in which something varies."""
    for d, axis in enumerate(space.axes):
        if not axis.uniform:
            front, back = (np.take(a, range(side, axis.n, 2), axis=d) for side in (0, 1))
            a = (front + back) / 2
    return a
