"""Real samples and their spectra in real arithmetic: half the work of complex samples.

Cosines, sines and Bessel functions are real anyway; along the last dimension of plane waves half of the spectrum stands
for all of it.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import cached_property

import numpy as np

from trapsim.space.axes import COMPLEX
from trapsim.space.pieces import share, slabs
from trapsim.space.plans import Plan, Transform, aligned, along, inner_dims, nothing, outer
from trapsim.space.space import Array, Space


class RealPair:
    """A transform of real samples and back, with a factor on the spectrum.

    Parameters
    ----------
    space : Space

    Attributes
    ----------
    kept : tuple of slices
        Which of the space's spectrum is kept; factors are given on that.
    """

    def __init__(self, space: Space) -> None:
        self.space = space
        waves, _ = inner_dims(space.axes)
        #: whether plane waves are along the first dimension alone, which is then done as complex samples
        self._complex = space.axes[0].fftw == COMPLEX and not waves
        kept = [slice(None)] * len(space.axes)
        if waves:
            kept[waves[-1]] = slice(space.axes[waves[-1]].n // 2 + 1)
        self.kept = tuple(kept)

    @cached_property
    def _work(self) -> tuple[Array, Array]:
        """Samples and spectrum; one array where all is real."""
        space = self.space
        samples = aligned(space.shape, np.complex128 if self._complex else np.float64)
        if not inner_dims(space.axes)[0]:
            return samples, samples
        return samples, aligned(tuple(len(range(n)[k]) for n, k in zip(space.shape, self.kept, strict=True)))

    @cached_property
    def _pieces(self) -> tuple[list[slice], list[slice]]:
        return slabs(self.space.shape, 0), slabs(self._work[1].shape, 1)

    @cached_property
    def _inner(self) -> tuple[Callable[[slice], None], Callable[[slice], None]]:
        """From samples to spectrum and back along all dimensions but the first, for a slab of that."""
        samples, spectrum = self._work
        waves, others = inner_dims(self.space.axes)
        first, threads = self._pieces[0][0], self.space.threads
        there, back = along(self.space.axes, others, samples[first], threads) if others else (nothing, nothing)
        if not waves:
            return lambda slab: there(samples[slab]), lambda slab: back(samples[slab])
        halve = Plan(samples[first], spectrum[first], axes=waves, direction="FFTW_FORWARD", threads=threads)
        complete = Plan(spectrum[first], samples[first], axes=waves, direction="FFTW_BACKWARD", threads=threads)

        def forward(slab: slice) -> None:
            there(samples[slab])
            halve(samples[slab], spectrum[slab])

        def inverse(slab: slice) -> None:
            complete(spectrum[slab], samples[slab])
            back(samples[slab])

        return forward, inverse

    @cached_property
    def _outer(self) -> tuple[Transform, Transform]:
        return outer(self.space.axes, self._work[1][:, self._pieces[1][0]], self.space.threads)

    def __call__(self, a: Array, factor: Array) -> Array:
        """Real samples with their spectrum times a real, even factor, and times `round_trip`; a new array."""
        samples, spectrum = self._work
        out, whole = np.empty(self.space.shape), np.broadcast_to(factor, spectrum.shape)
        (forward, inverse), (across, again) = self._inner, self._outer

        def there(slab: slice) -> None:
            samples[slab] = a[slab]
            forward(slab)

        def middle(slab: slice) -> None:
            across(spectrum[:, slab])
            spectrum[:, slab] *= whole[:, slab]
            again(spectrum[:, slab])

        def back(slab: slice) -> None:
            inverse(slab)
            out[slab] = samples[slab].real

        rows, columns = self._pieces
        for pieces, work in ((rows, there), (columns, middle), (rows, back)):
            share(pieces, work, threads=self.space.threads)
        return out
