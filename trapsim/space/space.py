"""The space: its axes together, quadrature and planned transforms. The only door to pyfftw."""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence
from functools import cache, cached_property
from pathlib import Path

import numpy as np
import pyfftw

from trapsim.space import wisdom
from trapsim.space.axes import COMPLEX, Array, Axis, Mirror, Radial, build
from trapsim.space.pieces import share, slabs

#: planning that takes longer than this, s, is worth keeping for later runs
WORTH_KEEPING = 0.03
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
        return pyfftw.empty_aligned(self.shape, dtype="complex128")

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
    def _inner(self) -> tuple[list[_Plan], list[_Plan]]:
        """There and back along all dimensions but the first, within one slab."""
        groups = [dims for real in (False, True) if (dims := self._dims(real=real)[0])]
        return tuple([_Plan(self, dims, way) for dims in groups] for way in (0, 1))

    @cached_property
    def _outer(self) -> tuple[Callable[[Array], object], ...]:
        """There and back along the first dimension, within one slab of the second."""
        axis = self.axes[0]
        if isinstance(axis, Radial):
            return _product(axis.forward_matrix), _product(axis.inverse_matrix)
        return tuple(_Plan(self, (0,), way) for way in (0, 1)) if axis.fftw else (_nothing, _nothing)

    def _dims(self, *, real: bool) -> tuple[tuple[int, ...], tuple[int, ...]]:
        """Dimensions with a transform of FFTW, but the first, and with it: of plane waves, or of cosines and sines."""
        own = tuple(d for d, a in enumerate(self.axes) if a.fftw and (a.fftw != COMPLEX) == real)
        return tuple(d for d in own if d), own

    def _share(self, dim: int, work: Callable[[slice], None]) -> None:
        share(self._slabs[dim], work, threads=self.threads)

    def pointwise(self, a: Array, work: Pointwise) -> None:
        """Do `work(a[slab], slab)` on slabs of the first dimension."""
        self._share(0, lambda slab: work(a[slab], slab))

    def forward(self, a: Array) -> Array:
        """Overwrite samples `a` with their spectrum; returns it."""
        self._share(0, lambda slab: _each(self._inner[0], a[slab]))
        self._share(1, lambda slab: self._outer[0](a[:, slab]))
        return a

    def inverse(self, a: Array) -> Array:
        """Overwrite a spectrum `a` with its samples times `round_trip`; returns them."""
        self._share(1, lambda slab: self._outer[1](a[:, slab]))
        self._share(0, lambda slab: _each(self._inner[1], a[slab]))
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
            _each(self._inner[0], a[slab])

        def middle(slab: slice) -> None:
            field = a[:, slab]
            self._outer[0](field)
            multiply(field, slab)
            self._outer[1](field)

        def back(slab: slice) -> None:
            _each(self._inner[1], a[slab])
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
    def _lines(self) -> dict[int, tuple[_Plan, _Plan]]:
        return {d: tuple(_Plan(self, (d,), way) for way in (0, 1)) for d in self._dims(real=False)[1]}

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


class _Plan:
    """A planned transform in place along some dimensions of a slab, without any factor.

    Only slabs are planned: that takes a fraction of a second at any size of the whole, and several threads share the
    slabs. Real transforms of complex samples are done on their real and imaginary parts at once, as a last dimension of
    two.
    """

    def __init__(self, space: Space, dims: tuple[int, ...], way: int) -> None:
        self.real = space.axes[dims[0]].fftw != COMPLEX
        names = tuple(space.axes[d].fftw[way] for d in dims)
        cut = 1 if 0 in dims else 0
        slab = space._slabs[cut][0]
        scratch = space.empty()
        scratch = self._view(scratch[:, slab] if cut else scratch[slab])
        #: one for each thread; lists hand out and take back safely
        self.idle = [
            _planned(scratch, scratch, axes=dims, direction=names if self.real else names[0]) for _ in range(space.threads)
        ]

    def _view(self, a: Array) -> Array:
        return a[..., None].view(np.float64) if self.real else a

    def __call__(self, a: Array) -> None:
        view, plan = self._view(a), self.idle.pop()
        plan.update_arrays(view, view)
        plan.execute()
        self.idle.append(plan)


def _planned(source: Array, target: Array, *, axes: tuple[int, ...], direction: str | tuple[str, ...]) -> pyfftw.FFTW:
    """A transform planned by measuring, or from what earlier runs have measured."""
    path = _remembered()
    began = time.perf_counter()
    plan = pyfftw.FFTW(source, target, axes=axes, direction=direction, flags=("FFTW_MEASURE",))
    if time.perf_counter() - began > WORTH_KEEPING:
        # another process may have learnt something meanwhile
        wisdom.recall(path, _learn)
        wisdom.keep(path, pyfftw.export_wisdom()[0])
    return plan


@cache
def _remembered() -> Path:
    """Take up what earlier runs have learnt; returns where it is kept."""
    library = pyfftw.export_wisdom()[0].split()[0].decode().strip("(")
    path = wisdom.place(library, "double")
    wisdom.recall(path, _learn)
    return path


def _learn(kept: bytes) -> bool:
    return bool(kept) and pyfftw.import_wisdom((kept, b"", b""))[0]


def _each(plans: Sequence[_Plan], a: Array) -> None:
    for plan in plans:
        plan(a)


def _nothing(a: Array) -> None:
    """The transform along a direction in which nothing varies."""


def _product(matrix: Array) -> Callable[[Array], None]:
    """A transform by a real matrix along the first dimension."""

    def transform(a: Array) -> None:
        parts = a[..., None].view(np.float64)
        parts[...] = (matrix @ parts.reshape(len(parts), -1)).reshape(parts.shape)

    return transform


def _marginals(density: Array, weights: Sequence[Array]) -> list[Array]:
    """Contract all dimensions but one with their weights, sharing the contractions."""
    if density.ndim == 1:
        return [density]
    if density.ndim == 2:
        return [density @ weights[1], weights[0] @ density]
    last_gone = density @ weights[2]
    first_gone = np.tensordot(weights[0], density, axes=(0, 0))
    return [last_gone @ weights[1], weights[0] @ last_gone, weights[1] @ first_gone]
