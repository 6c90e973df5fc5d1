"""Invented plans for tests of motion: a short way to write a trap, a cloud and a sequence.

`cloud` speaks in lab units, `natural` in the units of the trap's x frequency (hbar = m = omega = 1), so that a run can
stand beside the tables of REFERENCE, which know neither atoms nor metres.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from math import pi

import numpy as np

import trapsim
from reference import units
from trapsim.cloud.cloud import Cloud
from trapsim.corridor.run import ground_state
from trapsim.evolve.march import march
from trapsim.evolve.scaling import Interval
from trapsim.evolve.state import State, Tick
from trapsim.measure.observables import Moments
from trapsim.prepare.setup import Setup, memory_needed, prepare
from trapsim.record.recorder import observe
from trapsim.record.series import Track

Array = np.ndarray

RB = units.MASSES["Rb-87"]
NUMBER = 1e5


def cramped(plan: trapsim.Plan) -> trapsim.Plan:
    """The same plan with memory for the grids it begins with and nothing larger."""
    setup = prepare(plan)
    points = max(leg.space.size for leg in (setup, *setup.legs))
    return trapsim.plan_from_text(plan.source, plan.name, {"numerics.memory": f"{memory_needed(points)!r} B"})


def hertz(values: Sequence[float]) -> str:
    """Three frequencies in cycles per second as a plan writes them."""
    return "[" + ", ".join(f'"{v!r} Hz"' for v in values) + "]"


def seconds(t: float) -> str:
    """A time as a plan writes it, to the last digit."""
    return f'"{float(t)!r} s"'


def stage(kind: str, duration: float | None = None, **words: str) -> str:
    """One stage; `words` are TOML values by key, such as shape='"linear"'."""
    lines = ["[[sequence]]", f'stage = "{kind}"']
    if duration is not None:
        lines.append(f"duration = {seconds(duration)}")
    return "\n".join([*lines, *(f"{key} = {value}" for key, value in words.items())])


def cloud(
    *stages: str,
    frequency: Sequence[float],
    a: str = "100.4 a0",
    number: float = NUMBER,
    trap: str = "",
    parts: str = "",
    gravity: bool = False,
    accuracy: str = "normal",
    numerics: str = "",
    at: Sequence[float] = (),
    changes: Mapping[str, object] | None = None,
) -> trapsim.Plan:
    """A plan with one harmonic trap called dipole; `trap`, `parts` and `numerics` are further lines of TOML."""
    text = f"""
[atoms]
mass = "{RB!r} kg"
number = {number!r}
scattering_length = "{a}"
[trap.dipole]
kind = "harmonic"
frequency = {hertz(frequency)}
{trap}
{parts}
{'[gravity]' if gravity else ''}
[numerics]
threads = 1
accuracy = "{accuracy}"
{numerics}
[track]
at = [{', '.join(seconds(t) for t in at)}]
""" + "\n".join(stages)
    return trapsim.plan_from_text(text, "motion", changes or {})


@dataclass(frozen=True)
class Natural:
    """A trap's own units: omega in rad/s along x, and beta = 4 pi N a/length along x."""

    beta: float
    omega: float = 2 * pi * 100.0

    @property
    def unit(self) -> units.Natural:
        return units.natural(RB, self.omega)

    @property
    def a(self) -> str:
        """The scattering length that makes beta."""
        return f"{self.beta * self.unit.length / (4 * pi * NUMBER)!r} m"

    def hz(self, *ratios: float) -> list[float]:
        """Frequencies in cycles per second from ratios to omega."""
        return [self.omega * r / (2 * pi) for r in ratios]

    def s(self, t: float) -> float:
        """Seconds from natural time."""
        return t / self.omega


def at(track: Track, t: float) -> int:
    """The last sample of a track at a time, s, that was landed on."""
    (where,) = np.nonzero(np.abs(track.time - t) <= 1e-12 * max(t, 1e-6))
    assert len(where), f"the track has no sample at {t} s"
    return int(where[-1])


def begin(setup: Setup) -> State:
    """A plan's ground state at the door of its first leg."""
    relaxed = ground_state(setup)
    return State(Cloud(setup.space, setup.space.array(relaxed.u), setup.frame(), 0.0, setup.q))


def play(setup: Setup, state: State) -> list[Tick]:
    """All ticks of the rest of a run, each with samples of its own."""
    ticks = march(state, setup.legs, pace=setup.pace, guards=setup.guards)
    return [Tick(t.state.copy(), t.reason) for t in ticks]


def seen(cloud: Cloud, interval: Interval) -> Moments:
    """The lab quantities of a cloud under what acts in an interval."""
    return observe(cloud, interval)


#: m, of the uniform direction of `flat`
LENGTH = 20e-6


def flat(a_units: float, *stages: str, **words: object) -> trapsim.Plan:
    """Uniform along z over 20 um, round across; a_units = beta of the two-dimensional gas."""
    own = Natural(beta=0.0)
    beta_length = a_units * LENGTH / (4 * pi * NUMBER)  # beta_2D = 4 pi N a/L
    return cloud(
        *stages, frequency=own.hz(1, 1, 0), a=f"{beta_length!r} m", accuracy="fine",
        numerics=f'extent = ["auto", "auto", "{LENGTH!r} m"]', **words,
    )  # fmt: skip
