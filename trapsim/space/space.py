"""The space: its axes together, quadrature and planned transforms. The only door to pyfftw."""

from __future__ import annotations

from collections.abc import Sequence
from functools import cached_property

import numpy as np
import pyfftw

from trapsim.space.axes import COMPLEX, Array, Axis, Mirror, Radial, build


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
        return float(np.dot(self.marginals(density)[0], self._weights[0]))

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
    def _plans(self) -> tuple[list[_Plan], list[_Plan]]:
        effort = "FFTW_MEASURE" if self.size <= 64**3 else "FFTW_ESTIMATE"
        return tuple(
            [_Plan(self, dims, way, effort) for real in (False, True) if (dims := self._dims(real=real))]
            for way in (0, 1)
        )

    def _dims(self, *, real: bool) -> tuple[int, ...]:
        """Array dimensions with a transform of FFTW: those of plane waves, or the real ones of cosines and sines."""
        return tuple(d for d, a in enumerate(self.axes) if a.fftw and (a.fftw != COMPLEX) == real)

    def forward(self, a: Array) -> Array:
        """Overwrite samples `a` with their spectrum; returns it."""
        for plan in self._plans[0]:
            plan(a)
        self._matrices(a, "forward_matrix")
        return a

    def inverse(self, a: Array) -> Array:
        """Overwrite a spectrum `a` with its samples times `round_trip`; returns them."""
        for plan in self._plans[1]:
            plan(a)
        self._matrices(a, "inverse_matrix")
        return a

    def _matrices(self, a: Array, which: str) -> None:
        if isinstance(self.axes[0], Radial):
            flat = a.reshape(self.shape[0], -1).view(np.float64)
            flat[...] = getattr(self.axes[0], which) @ flat

    def gradient(self, a: Array, d: int) -> Array:
        """The derivative of samples along the coordinate of array dimension d, as a new array."""
        axis = self.axes[d]
        if axis.gradient_matrix is not None:
            return self.array(np.moveaxis(np.tensordot(axis.gradient_matrix, a, axes=(1, d)), 0, d))
        out = self.array(a)
        if axis.uniform:
            out[...] = 0.0
            return out
        there, back = self._line_plans[d]
        there(out)
        out *= self.along(d, 1j * axis.derivative_k() / axis.n)
        return back(out)

    @cached_property
    def _line_plans(self) -> dict[int, tuple[_Plan, _Plan]]:
        lines = self._dims(real=False)
        return {d: tuple(_Plan(self, (d,), way, "FFTW_ESTIMATE") for way in (0, 1)) for d in lines}

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
    """A planned transform in place along some dimensions, without any factor.

    Real transforms of complex samples are done on their real and imaginary parts at once, as a last dimension of two.
    """

    def __init__(self, space: Space, dims: tuple[int, ...], way: int, effort: str) -> None:
        self.real = space.axes[dims[0]].fftw != COMPLEX
        names = tuple(space.axes[d].fftw[way] for d in dims)
        scratch = self._view(space.empty())
        self.plan = pyfftw.FFTW(
            scratch, scratch, axes=dims, direction=names if self.real else names[0], flags=(effort,),
            threads=space.threads,
        )  # fmt: skip

    def _view(self, a: Array) -> Array:
        return a.view(np.float64).reshape(*a.shape, 2) if self.real else a

    def __call__(self, a: Array) -> Array:
        view = self._view(a)
        self.plan.update_arrays(view, view)
        self.plan.execute()
        return a


def _marginals(density: Array, weights: Sequence[Array]) -> list[Array]:
    """Contract all dimensions but one with their weights, sharing the contractions."""
    if density.ndim == 1:
        return [density]
    if density.ndim == 2:
        return [density @ weights[1], weights[0] @ density]
    last_gone = density @ weights[2]
    first_gone = np.tensordot(weights[0], density, axes=(0, 0))
    return [last_gone @ weights[1], weights[0] @ last_gone, weights[1] @ first_gone]
