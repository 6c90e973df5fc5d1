"""The space: its axes together, quadrature and planned transforms."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from functools import cached_property

import numpy as np

from trapsim.space.axes import COMPLEX, Array, Axis, Mirror, Radial, build
from trapsim.space.pieces import share, slabs
from trapsim.space.plans import Transform, aligned, along, inner, outer

#: (slab of an array, where it lies) -> None
Pointwise = Callable[[Array, slice], None]


class Space:
    """Axes that together cover x, y and z, each once.

    One array dimension per axis, the radial axis first (its transform is then one matrix product), else in the
    order x, y, z. Transforms are planned on first use, work in place and carry no factor: a round trip multiplies
    by `round_trip`, which belongs in whatever is multiplied in between.

    Parameters
    ----------
    axes : sequence of Axis
    threads : int
        For the transforms.
    """

    def __init__(self, axes: Sequence[Axis], *, threads: int = 1) -> None:
        covered = sorted(j for axis in axes for j in axis.covers)
        if covered != [0, 1, 2]:
            raise ValueError(f"the axes of a space cover x, y and z once each, not {covered}")
        self.axes = tuple(sorted(axes, key=lambda a: (not isinstance(a, Radial), a.covers)))
        self.shape = tuple(a.n for a in self.axes)
        self.threads = threads
        self.round_trip = float(np.prod([a.round_trip for a in self.axes]))

    @property
    def size(self) -> int:
        return int(np.prod(self.shape))

    def dim(self, j: int) -> int:
        """The array dimension that covers lab direction j."""
        return next(d for d, a in enumerate(self.axes) if j in a.covers)

    def axis(self, j: int) -> Axis:
        """The axis that covers lab direction j."""
        return self.axes[self.dim(j)]

    def along(self, d: int, values: Array) -> Array:
        """Values (n,) along array dimension d, shaped to broadcast against samples."""
        shape = [1] * len(self.axes)
        shape[d] = -1
        return np.reshape(values, shape)

    def coordinates(self) -> tuple[Array, Array, Array]:
        """Broadcastable x, y, z of the points; on a radial axis, r and 0."""
        out: list[Array] = []
        for j in range(3):
            axis = self.axis(j)
            own = j == axis.covers[0]
            out.append(self.along(self.dim(j), axis.points if own else np.zeros(axis.n)))
        return tuple(out)

    def empty(self) -> Array:
        """A complex work array, aligned for the transforms."""
        return aligned(self.shape)

    def array(self, samples: Array) -> Array:
        """A complex, aligned copy of samples that broadcast to the shape."""
        out = self.empty()
        out[...] = samples
        return out

    # quadrature

    @cached_property
    def _weights(self) -> list[Array]:
        return [a.weights for a in self.axes]

    @cached_property
    def _spectral_weights(self) -> list[Array]:
        return [a.spectral_weights for a in self.axes]

    def integral(self, density: Array) -> float:
        """Integral over all space of real samples (broadcast to the shape)."""
        out = np.broadcast_to(density, self.shape)
        for weights in reversed(self._weights):
            out = out @ weights
        return float(out)

    def marginals(self, density: Array) -> list[Array]:
        """Per array dimension, the density with all other directions integrated away."""
        return _marginals(np.broadcast_to(density, self.shape), self._weights)

    def spectral_marginals(self, power: Array) -> list[Array]:
        """The same for |spectrum|^2."""
        return _marginals(power, self._spectral_weights)

    def moment(self, marginals: Sequence[Array], values: Sequence[Array], j: int) -> float:
        """Weighted sum of values[d] (n,) with the marginal of the axis that covers j."""
        d = self.dim(j)
        return float(np.dot(marginals[d] * self._weights[d], values[d]))

    def quadratic(self, coefficients: Sequence[float]) -> Array:
        """sum_j c_j x_j^2 on the points."""
        return sum(self.along(d, v) for d, v in enumerate(self.per_axis(coefficients, "square")))

    def per_axis(self, coefficients: Sequence[float], power: str) -> list[Array]:
        """Per array dimension, the sum over its directions of c_j times x1, x2, square or k2."""
        return [sum(coefficients[j] * getattr(a, power)(j) for j in a.covers) for a in self.axes]

    # transforms

    @cached_property
    def _slabs(self) -> tuple[list[slice], list[slice]]:
        """Slabs of the first dimension, in which the others are transformed, and of the second, for the first."""
        return slabs(self.shape, 0), slabs(self.shape, 1)

    @cached_property
    def _inner(self) -> tuple[Transform, Transform]:
        return inner(self.axes, self.empty()[self._slabs[0][0]], self.threads)

    @cached_property
    def _outer(self) -> tuple[Transform, Transform]:
        return outer(self.axes, self.empty()[:, self._slabs[1][0]], self.threads)

    def _share(self, dim: int, work: Callable[[slice], None]) -> None:
        share(self._slabs[dim], work, threads=self.threads)

    def pointwise(self, a: Array, work: Pointwise) -> None:
        """Do `work(a[slab], slab)` on slabs of the first dimension."""
        self._share(0, lambda slab: work(a[slab], slab))

    def forward(self, a: Array) -> Array:
        """Overwrite samples `a` with their spectrum; returns it."""
        self._share(0, lambda slab: self._inner[0](a[slab]))
        self._share(1, lambda slab: self._outer[0](a[:, slab]))
        return a

    def inverse(self, a: Array) -> Array:
        """Overwrite a spectrum `a` with its samples times `round_trip`; returns them."""
        self._share(1, lambda slab: self._outer[1](a[:, slab]))
        self._share(0, lambda slab: self._inner[1](a[slab]))
        return a

    def sandwich(
        self, a: Array, multiply: Pointwise, *, before: Pointwise | None = None, after: Pointwise | None = None
    ) -> Array:
        """Overwrite samples `a` by way of their spectrum, each slab while it is in the cache; returns them.

        Parameters
        ----------
        a : complex array of the shape
        multiply : callable
            (spectrum[:, slab], slab) -> None, changes a slab of the second dimension of the spectrum.
        before, after : callable
            (samples[slab], slab) -> None, changes a slab of the first dimension of the samples.
        """

        def there(slab: slice) -> None:
            if before is not None:
                before(a[slab], slab)
            self._inner[0](a[slab])

        def middle(slab: slice) -> None:
            field = a[:, slab]
            self._outer[0](field)
            multiply(field, slab)
            self._outer[1](field)

        def back(slab: slice) -> None:
            self._inner[1](a[slab])
            if after is not None:
                after(a[slab], slab)

        _ = self._inner, self._outer  # planned here, and not by two threads at once
        for dim, work in ((0, there), (1, middle), (0, back)):
            self._share(dim, work)
        return a

    def gradient(self, a: Array, d: int) -> Array:
        """The derivative of samples along the coordinate of array dimension d, as a new array."""
        axis = self.axes[d]
        if axis.gradient_matrix is not None:
            return self.array(np.moveaxis(np.tensordot(axis.gradient_matrix, a, axes=(1, d)), 0, d))
        out = self.array(a)
        if axis.uniform:
            out[...] = 0.0
            return out
        there, back = self._lines[d]
        factor = self.along(d, 1j * axis.derivative_k() / axis.n)

        def slope(slab: slice) -> None:
            field = out[slab] if d else out[:, slab]
            there(field)
            field *= factor
            back(field)

        self._share(0 if d else 1, slope)
        return out

    @cached_property
    def _lines(self) -> dict[int, tuple[Transform, Transform]]:
        slab = {bool(d): self.empty()[self._slabs[0][0]] if d else self.empty()[:, self._slabs[1][0]] for d in (0, 1)}
        waves = [d for d, a in enumerate(self.axes) if a.fftw == COMPLEX]
        return {d: along(self.axes, (d,), slab[d > 0], self.threads) for d in waves}

    def unfolded(self, samples: Array) -> tuple[Array, Space]:
        """The same function with both sides of every mirror axis, and the space that it is then on."""
        axes = [a.unfolded() if isinstance(a, Mirror) else a for a in self.axes]
        if not any(isinstance(a, Mirror) for a in self.axes):
            return samples, self
        for d, axis in enumerate(self.axes):
            if isinstance(axis, Mirror):
                samples = np.concatenate([np.flip(samples, d), samples], axis=d)
        whole = Space(axes, threads=self.threads)
        return whole.array(samples), whole

    def grown(self, points: Sequence[float], extent: Sequence[float]) -> Space:
        """The space with so many times the points and the extent, (3,) each; itself where nothing changes."""
        axes = [a.grown(points[a.covers[0]], extent[a.covers[0]]) for a in self.axes]
        if all(new is old for new, old in zip(axes, self.axes, strict=True)):
            return self
        return Space(axes, threads=self.threads)

    # words

    def words(self) -> list[str]:
        """The kind of axis that covers each lab direction."""
        return [self.axis(j).kind if not self.axis(j).uniform else "uniform" for j in range(3)]

    def points_per_direction(self) -> list[int]:
        """Points of the whole axis that covers each lab direction, as a plan asks for them."""
        return [self.axis(j).whole for j in range(3)]

    def describe(self) -> list[dict[str, object]]:
        """What it takes to build the same space again."""
        return [a.describe() for a in self.axes]

    @classmethod
    def from_description(cls, description: Sequence[dict[str, object]], *, threads: int = 1) -> Space:
        return cls([build(d) for d in description], threads=threads)


def _marginals(density: Array, weights: Sequence[Array]) -> list[Array]:
    """Contract all dimensions but one with their weights, sharing the contractions."""
    if density.ndim == 1:
        return [density]
    if density.ndim == 2:
        return [density @ weights[1], weights[0] @ density]
    last_gone = density @ weights[2]
    first_gone = np.tensordot(weights[0], density, axes=(0, 0))
    return [last_gone @ weights[1], weights[0] @ last_gone, weights[1] @ first_gone]
