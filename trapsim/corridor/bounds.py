"""What a plan must stay within: ordinary numbers, and the memory of the machine."""

from __future__ import annotations

import os
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import numpy as np

from trapsim.errors import PlanError
from trapsim.plan.plan import Plan
from trapsim.prepare.setup import Setup, memory_needed, prepare

#: points along a trapped direction; with fewer there is no spectrum to watch
FEWEST = 8
#: of the memory that is free, what a run may take by itself
SHARE = 0.6
#: how many times the points of the largest grid planned it may come to on the way: doubled thrice in every direction
LARGER = 512
#: arrays as large as a picture that are there while one is taken
TAKING = 4
_FEWER = 'take fewer numerics.points, a shorter numerics.extent, or numerics.accuracy = "draft"'


def set_up(plan: Plan) -> Setup:
    """The engine objects of a plan, if this machine can hold them.

    Raises
    ------
    PlanError
        When the plan cannot be prepared, or needs more memory than there is.
    """
    with ordinary_numbers(plan.name):
        setup = prepare(plan)
    for j, trapped in enumerate(setup.omega > 0):
        if (trapped or setup.space.axis(j).walled) and (n := setup.space.axis(j).whole) < FEWEST:
            raise PlanError.at(
                f"numerics.points[{j}]", str(n), f"a cloud held along {'xyz'[j]} takes at least {FEWEST} points",
                'write more points, or "auto"',
            )  # fmt: skip
    needed, there = pictures_needed(setup), memory_there()
    allowed = SHARE * there if plan.numerics.memory is None else plan.numerics.memory
    if needed > allowed:
        name, camera = max(plan.camera.items(), key=lambda item: item[1].size[0] * item[1].size[1])
        raise PlanError.at(
            f"camera.{name}.size", f"{list(camera.size)} pixels, with which all pictures need about {needed / 1e9:.3g} GB",
            f"of memory {allowed / 1e9:.3g} GB may be used", "take fewer pixels or fewer pictures",
        )  # fmt: skip
    needed, there = max(memory_needed(leg.space.size) for leg in (setup, *setup.legs)), memory_there()
    if plan.numerics.memory is None and needed > SHARE * there:
        shape = " x ".join(map(str, max((leg.space for leg in (setup, *setup.legs)), key=lambda s: s.size).shape))
        raise PlanError.at(
            "numerics.points", f"{shape} points, which need about {needed / 1e9:.3g} GB",
            f"this machine has {there / 1e9:.3g} GB free, and {SHARE:.0%} of that may be used",
            f"{_FEWER}; or set numerics.memory yourself",
        )  # fmt: skip
    return setup


def pictures_needed(setup: Setup) -> float:
    """Bytes for the pictures of all cameras: what is kept, and what the largest needs while it is taken."""
    pixels = {name: float(camera.size[0]) * camera.size[1] for name, camera in setup.plan.camera.items()}
    taken = [pixels[shot.camera] for shot in setup.shots]
    return 8.0 * (sum(taken) + TAKING * max(taken, default=0.0))


def affordable(setup: Setup, points: int) -> bool:
    """Whether a grid of so many points may be used, when a cloud outgrows its own on the way."""
    limit, planned = setup.plan.numerics.memory, max(leg.space.size for leg in (setup, *setup.legs))
    return points <= LARGER * planned and memory_needed(points) <= (SHARE * memory_there() if limit is None else limit)


@contextmanager
def ordinary_numbers(place: str) -> Iterator[None]:
    """Refuse what overflows, divides by zero or becomes not-a-number on the way to the cloud.

    Raises
    ------
    PlanError
    """
    try:
        with np.errstate(over="raise", invalid="raise"):
            yield
    except (ArithmeticError, ValueError) as error:
        raise PlanError.at(
            place, str(error), "a value of this plan is far too large or far too small to compute with",
            "look for an exponent or a unit that is wrong, in [atoms] and [trap] first",
        ) from error  # fmt: skip
    except MemoryError as error:
        raise PlanError.at(place, "a grid larger than all memory", "it must fit into this machine", _FEWER) from error


def memory_there() -> float:
    """Bytes of memory that are free, or that the machine has where that cannot be said."""
    try:
        told = dict(line.split(":", 1) for line in Path("/proc/meminfo").read_text().splitlines())
        return 1024.0 * int(told["MemAvailable"].split()[0])
    except (OSError, KeyError, ValueError):
        return float(os.sysconf("SC_PHYS_PAGES")) * os.sysconf("SC_PAGE_SIZE")
