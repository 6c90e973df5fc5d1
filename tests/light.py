"""Invented plans for tests of light: lattices, beams and boxes in the words of a plan; what a cloud has of each order."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

import motion
import trapsim
from reference.planewaves import KEPT, Recoil
from trapsim.cloud.cloud import Cloud

Array = np.ndarray

#: m, of every lattice here: 1064 nm, head to head
SPACING = 532e-9
RECOIL = Recoil(motion.RB, SPACING)


def lattice(s: float, *, strength: float = 0, axis: str = "x", **words: str) -> str:
    """A lattice called light, s recoil energies deep; `words` are further TOML values by key."""
    more = "\n".join(f"{key} = {value}" for key, value in words.items())
    return (
        f'[trap.light]\nkind = "lattice"\naxis = "{axis}"\nspacing = "532 nm"\n'
        f'depth = "{float(s)!r} Er"\nstrength = {strength}\n{more}\n'
    )


def pulse(tau: float, *, detuning: float = 0.0, **words: str) -> str:
    """A stage that flashes the lattice for tau hbar/E_R; the detuning in E_R/hbar."""
    to = {"light.strength": "1", **{f"light.{key}": value for key, value in words.items()}}
    if detuning:
        to["light.detuning"] = f'"{detuning * RECOIL.hertz!r} Hz"'
    inside = ", ".join(f'"{key}" = {value}' for key, value in to.items())
    return motion.stage("pulse", tau * RECOIL.time, to=f"{{ {inside} }}")


def wait(tau: float) -> str:
    """A hold of tau hbar/E_R."""
    return motion.stage("hold", tau * RECOIL.time)


def plane_wave(*stages: str, parts: str, sites: int = 1, accuracy: str = "normal", numerics: str = "") -> trapsim.Plan:
    """An ideal gas, uniform along x over a whole number of lattice periods: it is one plane wave."""
    return motion.cloud(
        *stages, frequency=(0, 50, 50), a="0 a0", parts=parts, accuracy=accuracy,
        numerics=f'extent = ["{sites * SPACING!r} m", "auto", "auto"]\n{numerics}',
    )  # fmt: skip


def plain(
    *stages: str,
    parts: str,
    number: float = 1e4,
    a: str = "100.4 a0",
    accuracy: str = "normal",
    numerics: str = "",
    rest: str = "",
    at: Sequence[float] = (),
) -> trapsim.Plan:
    """A plan with whatever parts; `rest` are further tables."""
    text = f"""
[atoms]
mass = "{motion.RB!r} kg"
number = {number!r}
scattering_length = "{a}"
{parts}
{rest}
[numerics]
threads = 1
accuracy = "{accuracy}"
{numerics}
[track]
at = [{', '.join(motion.seconds(t) for t in at)}]
""" + "\n".join(stages)
    return trapsim.plan_from_text(text, "light", {})


def orders(run: trapsim.Run, stage: int | None = None) -> dict[str, float]:
    """Populations of the lattice's orders at the end of the sequence or of a stage."""
    moment = run.summary.end if stage is None else run.summary.stages[stage].end
    return moment.orders["light"]


def off(found: dict[str, float], expected: dict[str, float]) -> float:
    """The largest difference of two sets of populations."""
    return max(abs(found.get(n, 0.0) - expected.get(n, 0.0)) for n in {*found, *expected})


def whole(cloud: Cloud) -> Cloud:
    """The same cloud with both sides of every mirror axis."""
    phi, space = cloud.space.unfolded(cloud.phi)
    return replace(cloud, phi=phi, space=space)


def amplitudes(cloud: Cloud) -> Array:
    """Amplitudes of exp(2 i n k x) in a cloud that is periodic along x and one function across; a common phase is free."""
    phi, space = cloud.space.unfolded(cloud.phi)
    axis, d = space.axis(0), space.dim(0)
    per_site = axis.n * SPACING / (2 * axis.half_extent)
    n = np.arange(-int(per_site / 2 - 0.5), int(per_site / 2 - 0.5) + 1)
    x = cloud.frame.lab(axis.points, 0)
    lines = np.moveaxis(phi, d, 0).reshape(axis.n, -1)
    found = np.exp(-2j * RECOIL.k * np.outer(n, x)) @ lines
    left, _, _ = np.linalg.svd(found, full_matrices=False)
    out = np.zeros(2 * KEPT + 1, dtype=complex)
    out[KEPT + n] = left[:, 0]
    return out
