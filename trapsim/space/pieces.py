"""Work on an array slab by slab, in pieces that fit the processor's cache, shared by some threads."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from concurrent.futures import ThreadPoolExecutor
from functools import cache

#: points per piece: few enough for the processor's cache, enough for threads to be worth their while
PIECE = 131072
#: below this many points, pieces and threads cost more than they save
ALONE = 150000


def slabs(shape: tuple[int, ...], dim: int) -> list[slice]:
    """Equal slabs of one dimension, each at most about a piece; a single one when there are few points."""
    n, size = shape[dim], 1
    for other in shape:
        size *= other
    if size < ALONE:
        return [slice(0, n)]
    width = max((w for w in range(1, n + 1) if n % w == 0 and w * (size // n) <= PIECE), default=1)
    return [slice(start, start + width) for start in range(0, n, width)]


def share(pieces: Sequence[slice], work: Callable[[slice], None], *, threads: int) -> None:
    """Do `work` on every piece."""
    if threads == 1 or len(pieces) == 1:
        for piece in pieces:
            work(piece)
    else:
        list(_pool(threads).map(work, pieces))


@cache
def _pool(threads: int) -> ThreadPoolExecutor:
    return ThreadPoolExecutor(threads)
