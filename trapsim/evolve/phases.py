"""Multiplying by exp(-i theta), point by point, in pieces that fit the processor's cache.

With t = tan(theta/2), exp(-i theta) = ((1 - t^2) - 2 i t)/(1 + t^2), exact to rounding. Where the processor has vector
instructions that numpy uses for the tangent this is several times faster than a sine and a cosine; elsewhere it is slower.
Which is the case is measured once, when it is first asked.
"""

from __future__ import annotations

import time
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from functools import cache

import numpy as np

from trapsim.space.space import Array

#: points per piece: few enough for the processor's cache, enough for threads to be worth their while
PIECE = 131072
#: below this many points, threads cost more than they save
ALONE = 150000

Rotate = Callable[[Array, Array], None]


def by_tangent(phi: Array, theta: Array) -> None:
    """Overwrite phi with exp(-i theta) phi; theta is overwritten too."""
    theta *= -0.5
    np.tan(theta, out=theta)
    weight = theta * theta
    weight += 1.0
    np.divide(2.0, weight, out=weight)
    phase = np.empty(phi.shape, dtype=np.complex128)
    np.multiply(theta, weight, out=phase.imag)
    np.subtract(weight, 1.0, out=phase.real)
    phi *= phase


def by_sine(phi: Array, theta: Array) -> None:
    """Overwrite phi with exp(-i theta) phi; theta is overwritten too."""
    phase = np.empty(phi.shape, dtype=np.complex128)
    np.cos(theta, out=phase.real)
    np.sin(theta, out=phase.imag)
    np.negative(phase.imag, out=phase.imag)
    phi *= phase


@cache
def rotate() -> Rotate:
    """The faster of the two on this machine."""
    theta = np.linspace(-1.0, 1.0, PIECE)
    phi = np.ones(PIECE, dtype=np.complex128)

    def fastest(way: Rotate) -> float:
        spent = []
        for _ in range(5):
            angles = theta.copy()
            began = time.perf_counter()
            way(phi, angles)
            spent.append(time.perf_counter() - began)
        return min(spent)

    return min((by_tangent, by_sine), key=fastest)


@cache
def _pool(threads: int) -> ThreadPoolExecutor:
    return ThreadPoolExecutor(threads)


def in_pieces(shape: tuple[int, ...], work: Callable[[slice], None], *, threads: int) -> None:
    """Do `work` on slabs of the first dimension, each about a piece long, shared by some threads."""
    rows = max(1, PIECE * shape[0] // max(int(np.prod(shape)), 1))
    slabs = [slice(start, min(start + rows, shape[0])) for start in range(0, shape[0], rows)]
    if threads == 1 or len(slabs) == 1 or np.prod(shape) < ALONE:
        for slab in slabs:
            work(slab)
    else:
        list(_pool(threads).map(work, slabs))
