"""Rarely trodden paths, each with its exact statement: symmetry, frames and couplings must not be taken for granted."""

from __future__ import annotations

from math import cos, pi

import pytest

import motion
import trapsim
from trapsim.errors import PhysicsRefused, PlanError

CLOUD = """
[atoms]
species = "Rb-87"
number = "2e3"
scattering_length = "{a} a0"
[trap.dipole]
kind = "harmonic"
frequency = {frequency}
{more}
[numerics]
accuracy = "draft"
threads = 1
{numerics}
{stages}
"""
LATTICE = """
[trap.light]
kind = "lattice"
wavelength = "1064 nm"
depth = "8 Er"
strength = {strength}
detuning = "{detuning}"
"""


def plan(
    stages: str, *, more: str = "", a: float = 100.4, numerics: str = "", frequency: str = '["40 Hz", "90 Hz", "130 Hz"]'
) -> trapsim.Plan:
    text = CLOUD.format(a=a, more=more, numerics=numerics, stages=stages, frequency=frequency)
    return trapsim.plan_from_text(text)


def stage(kind: str, **entries: str) -> str:
    return "\n".join([f"[[sequence]]\nstage = \"{kind}\"", *(f"{k} = {v}" for k, v in entries.items())]) + "\n"


FLASH = stage("pulse", duration='"0.1 ms"', to='{ "light.strength" = 1 }')


@pytest.mark.slow
def test_a_lattice_that_moves_a_whole_number_of_periods_is_still_not_even() -> None:
    # 30 kHz for 0.1 ms are three periods: it starts and ends on a symmetric point, and is on none in between
    light = LATTICE.format(strength=0, detuning="30 kHz")
    free, forced = (
        trapsim.run(plan(FLASH, more=light, numerics=n)).summary
        for n in ("", 'axes = ["wave", "mirror", "mirror"]')
    )
    assert free.numerics.legs[0].axes[0] == "wave"
    assert free.end.orders["light"] == pytest.approx(forced.end.orders["light"], rel=1e-9)
    # Bragg's rule: light that moves towards +x pushes the atoms that way
    assert free.end.orders["light"]["1"] > 1.05 * free.end.orders["light"]["-1"]


def test_a_turned_trap_that_comes_up_from_nothing_acts_as_one_that_was_hardly_on() -> None:
    def turned(strength: str) -> trapsim.Plan:
        part = f"""
[trap.second]
kind = "harmonic"
frequency = ["30 Hz", "80 Hz", "0 Hz"]
turn = ["0 deg", "0 deg", "25 deg"]
strength = {strength}
"""
        ramp = stage("ramp", duration='"3 ms"', to='{ "second.strength" = 1 }')
        return plan(ramp, more=part)

    nothing, hardly = (trapsim.run(turned(s)).summary.end for s in ("0", "1e-9"))
    # exact: the two differ by a billionth of a trap
    assert nothing.width_um == pytest.approx(hardly.width_um, rel=1e-5)


@pytest.mark.slow
@pytest.mark.parametrize("recoils", [1, 16])
def test_a_kick_in_a_lattice_is_kept_or_refused_but_never_folded_back(recoils: int) -> None:
    light = LATTICE.format(strength=1, detuning="0 Hz")
    kicked = plan(
        stage("kick", recoils=str(recoils), of='"light"') + stage("hold", duration='"1 us"'), more=light, a=0.0,
        numerics='extent = ["auto", "auto", "auto"]',
    )  # fmt: skip
    if recoils == 16:
        with pytest.raises(PhysicsRefused, match="holds velocities up to"):
            trapsim.run(motion.cramped(kicked))
    # exact: a kick adds its velocity to the mean; one microsecond of an 8 Er lattice takes little of it
    end = trapsim.run(kicked).summary.end
    assert end.velocity_mm_per_s[0] == pytest.approx(4.315 * recoils, rel=2e-2)  # h/(m lambda), CODATA


def test_what_acts_along_a_uniform_direction_is_refused() -> None:
    long = 'extent = ["30 um", "auto", "auto"]'
    lens = '[trap.lens]\nkind = "harmonic"\nfrequency = ["40 Hz", "0 Hz", "0 Hz"]\nstrength = 0\n'
    tube = '["0 Hz", "90 Hz", "90 Hz"]'
    flash = stage("pulse", duration='"1 ms"', to='{ "lens.strength" = 1 }')
    with pytest.raises(PlanError, match="uniform or periodic"):
        trapsim.run(plan(flash, more=lens, numerics=long, frequency=tube))
    with pytest.raises(PlanError, match="nothing can move there"):
        trapsim.run(plan(stage("kick", velocity='["1 mm/s", "0 mm/s", "0 mm/s"]'), numerics=long, frequency=tube))


def test_an_interaction_that_becomes_attractive_has_no_scaling_law_and_runs() -> None:
    ramp = stage("ramp", duration='"2 ms"', to='{ "atoms.scattering_length" = "-3 a0" }')
    run = trapsim.run(plan(ramp, a=5.0)).summary
    assert run.status == "complete" and run.end.law is None and run.end.interaction_nk < 0


@pytest.mark.slow
def test_an_interaction_that_is_switched_on_slowly_arrives_at_the_larger_cloud() -> None:
    ramp = stage("ramp", duration='"150 ms"', shape='"smooth"', to='{ "atoms.scattering_length" = "100.4 a0" }')
    round_trap = '["100 Hz", "100 Hz", "100 Hz"]'
    slow = trapsim.run(plan(ramp, a=0.0, frequency=round_trap)).summary
    there = trapsim.run(plan("", a=100.4, frequency=round_trap)).summary
    # exact in the limit of a slow ramp: the cloud follows its ground state
    assert slow.end.width_um == pytest.approx(there.ground.width_um, rel=1e-2)


def test_a_held_centre_holds_against_gravity_but_not_against_a_pulse() -> None:
    push = '[trap.push]\nkind = "gradient"\nacceleration = ["3 m/s^2", "0 m/s^2", "0 m/s^2"]\nstrength = 0\n'
    flash = stage("pulse", duration='"1 ms"', to='{ "push.strength" = 1 }')
    text = CLOUD.format(a=100.4, more='centre = "held"\n' + push + "[gravity]\n", numerics="", stages=flash,
                        frequency='["40 Hz", "90 Hz", "130 Hz"]')  # fmt: skip
    end = trapsim.run(trapsim.plan_from_text(text)).summary.end
    # exact: an oscillator under a constant push, x = (a/w^2)(1 - cos w t)
    w = 2 * pi * 40
    assert end.centre_um[0] == pytest.approx(3e6 / w**2 * (1 - cos(w * 1e-3)), rel=1e-6)
    assert end.centre_um[2] == pytest.approx(0, abs=1e-6)


@pytest.mark.parametrize("frame", ["lab", "moving"])
def test_a_push_that_comes_up_from_nothing_moves_the_cloud(frame: str) -> None:
    """On a grid that stands the wave function itself must feel it, though there is no force at the start."""
    omega, far = 2 * pi * 130, 0.3e-6
    push = (
        '[trap.push]\nkind = "gradient"\nstrength = 0\n'
        f'acceleration = ["0 m/s^2", "0 m/s^2", "{far * omega**2!r} m/s^2"]\n'
    )
    ramp = stage("ramp", duration=f'"{pi / 2 / omega!r} s"', shape='"linear"', to='{ "push.strength" = 1 }')
    run = trapsim.run(plan(ramp, more=push, numerics=f'frame = "{frame}"'))
    # Kohn's theorem and Newton: z = far (s - sin(omega t)/(omega T)), s = t/T
    assert run.track["centre"][-1][2] == pytest.approx(far * (1 - 2 / pi), rel=1e-3)
