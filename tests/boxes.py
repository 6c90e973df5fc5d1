"""Hard boxes put together by hand from the engine's own pieces, along as many directions as one likes."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from math import pi

import numpy as np
from scipy.constants import hbar

import trapsim
from reference import units
from trapsim.cloud.cloud import Cloud
from trapsim.evolve.guards import Guards
from trapsim.evolve.march import march
from trapsim.evolve.state import Leg, Pace, State, Tick
from trapsim.space.axes import Wall, Wave
from trapsim.space.frame import Frame
from trapsim.space.space import Space
from trapsim.terms.part import Part

Array = np.ndarray

RB = units.MASSES["Rb-87"]
Q = hbar / RB
STILL = (False, False, False)


@dataclass(frozen=True)
class Inside:
    """What acts between two times: nothing but the walls, or some parts."""

    start: float
    stop: float
    parts: tuple[Part, ...] = ()
    c: float = 0.0
    steady: bool = True

    def parts_at(self, t: float) -> Sequence[Part]:
        return self.parts

    def coupling(self, t: float) -> float:
        return self.c


def space(sizes: Sequence[float], points: int) -> Space:
    """Walls along the first directions, of these distances; nothing varies along the others, which are 1 um long."""
    walls = [Wall((j,), points, size / 2) for j, size in enumerate(sizes)]
    return Space([*walls, *(Wave((j,), 1, 0.5e-6) for j in range(len(sizes), 3))])


def leg(of: Space, start: float, stop: float, *, landings: tuple[float, ...] = (), **words: object) -> Leg:
    """A hold between walls, or with trapped=False a flight."""
    held = words.pop("trapped", True)
    inside = {name: words.pop(name) for name in ("parts", "c") if name in words}
    return Leg(
        name="hold" if held else "release", kind="hold" if held else "release", stage=0, start=start, stop=stop, space=of,
        interval=Inside(start, stop, **inside), trapped=held, moving=STILL if held else (True, True, True),
        landings=landings, **words,
    )  # fmt: skip


def play(phi: Array, of: Space, legs: Sequence[Leg]) -> Iterator[Tick]:
    """March a wave function through legs; it is normalised first."""
    samples = of.array(phi)
    samples /= np.sqrt(of.integral(np.abs(samples) ** 2))
    state = State(Cloud(of, samples, Frame(), legs[0].start, Q))
    pace, guards = Pace(1e-5, 2.4), Guards(1e-3, 1e-3, 1e-4)
    return march(state, legs, pace=pace, guards=guards)


def revival(size: float) -> float:
    """s, after which every wave function in a box is what it was: 4 m L^2/(pi hbar) (Aronstein and Stroud)."""
    return 4 * size**2 / (pi * Q)


def plan(*stages: str, walls: str = "", rest: str = "", number: float = 1e5, accuracy: str = "normal",
         numerics: str = "", a: str = "100.4 a0") -> trapsim.Plan:
    """A plan with one hard box, 40 x 30 x 30 um unless `walls` says otherwise."""
    text = f"""
[atoms]
mass = "{RB!r} kg"
number = {number!r}
scattering_length = "{a}"
[trap.walls]
kind = "box"
{walls or 'size = ["40 um", "30 um", "30 um"]'}
edge = "hard"
{rest}
[numerics]
threads = 1
accuracy = "{accuracy}"
{numerics}
""" + "\n".join(stages)
    return trapsim.plan_from_text(text, "box")
