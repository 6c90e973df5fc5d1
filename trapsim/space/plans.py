"""Planned transforms of slabs, and what planning has learnt. The only door to pyfftw."""

from __future__ import annotations

import time
from collections.abc import Callable, Sequence
from functools import cache
from pathlib import Path

import numpy as np
import pyfftw

from trapsim.space import wisdom
from trapsim.space.axes import COMPLEX, Array, Axis, Radial

#: planning that takes longer than this, s, is worth keeping for later runs
WORTH_KEEPING = 0.03
#: overwrites a slab
Transform = Callable[[Array], None]


class Plan:
    """A transform of one slab, planned for all slabs like it, without any factor.

    Only slabs are planned: that takes a fraction of a second at any size of the whole, and several threads share the
    slabs.

    Parameters
    ----------
    source, target : array
        A slab to plan on, which is overwritten; the same one for a transform in place.
    axes : tuple of int
    direction : str or tuple of str
        FFTW's name of the transform, or one for each of the axes.
    threads : int
        How many may use it at once.
    """

    def __init__(
        self, source: Array, target: Array, *, axes: tuple[int, ...], direction: str | tuple[str, ...], threads: int
    ) -> None:
        #: one for each thread; lists hand out and take back safely
        self.idle = [_planned(source, target, axes=axes, direction=direction) for _ in range(threads)]

    def __call__(self, source: Array, target: Array) -> None:
        plan = self.idle.pop()
        plan.update_arrays(source, target)
        plan.execute()
        self.idle.append(plan)


def aligned(shape: tuple[int, ...], dtype: type = np.complex128) -> Array:
    """A work array, aligned for the transforms."""
    return pyfftw.empty_aligned(shape, dtype=dtype)


def parts(a: Array) -> Array:
    """Real and imaginary parts of complex samples, as a last dimension of two; real samples as they are."""
    return a[..., None].view(np.float64) if np.iscomplexobj(a) else a


def along(axes: Sequence[Axis], dims: tuple[int, ...], slab: Array, threads: int) -> tuple[Transform, Transform]:
    """There and back along some dimensions of slabs, all of plane waves or all of cosines and sines.

    The latter transform complex samples as their real and imaginary parts at once.
    """
    waves = axes[dims[0]].fftw == COMPLEX
    view = slab if waves else parts(slab)
    there, back = (
        Plan(view, view, axes=dims, direction=names[0] if waves else names, threads=threads)
        for names in zip(*(axes[d].fftw for d in dims), strict=True)
    )
    if waves:
        return lambda a: there(a, a), lambda a: back(a, a)
    return lambda a: there(parts(a), parts(a)), lambda a: back(parts(a), parts(a))


def inner_dims(axes: Sequence[Axis]) -> tuple[tuple[int, ...], tuple[int, ...]]:
    """Dimensions but the first that FFTW transforms: those of plane waves, and those of cosines and sines."""
    dims = [d for d in range(1, len(axes)) if axes[d].fftw]
    return tuple(d for d in dims if axes[d].fftw == COMPLEX), tuple(d for d in dims if axes[d].fftw != COMPLEX)


def inner(axes: Sequence[Axis], slab: Array, threads: int) -> tuple[Transform, Transform]:
    """There and back along all dimensions but the first, in slabs of the first."""
    pairs = [along(axes, dims, slab, threads) for dims in inner_dims(axes) if dims]

    def each(way: int) -> Transform:
        def transform(a: Array) -> None:
            for pair in pairs:
                pair[way](a)

        return transform

    return each(0), each(1)


def outer(axes: Sequence[Axis], slab: Array, threads: int) -> tuple[Transform, Transform]:
    """There and back along the first dimension, in slabs of the second."""
    if isinstance(axes[0], Radial):
        return _product(axes[0].forward_matrix), _product(axes[0].inverse_matrix)
    if axes[0].fftw is None:
        return nothing, nothing
    return along(axes, (0,), slab, threads)


def nothing(a: Array) -> None:
    """The transform along a direction in which nothing varies."""


def _product(matrix: Array) -> Transform:
    """A transform by a real matrix along the first dimension."""

    def transform(a: Array) -> None:
        flat = parts(a)
        flat[...] = (matrix @ flat.reshape(len(flat), -1)).reshape(flat.shape)

    return transform


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
