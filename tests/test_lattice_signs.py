"""Signs and zeros of the lattice, one sentence each.

A wrong sign passes every look at a symmetric picture; here nothing is symmetric. The expected values are the definition
V = depth sin^2(pi x/spacing + phase), and plane waves in it.
"""

from __future__ import annotations

from collections.abc import Callable
from math import pi

import numpy as np
import pytest

import light
import motion
import trapsim
from light import RECOIL, SPACING
from reference import bands, planewaves
from trapsim.constants import HBAR
from trapsim.prepare.setup import prepare
from trapsim.prepare.timeline import build_timeline
from trapsim.terms.lattice import Lattice

Solved = Callable[[trapsim.Plan], trapsim.Run]

#: hbar/E_R, half of a Bragg pi pulse in a lattice of one recoil energy
HALF = pi


@pytest.mark.parametrize(("detuning", "order"), [(4.0, "1"), (-4.0, "-1")])
def test_a_positive_detuning_moves_the_lattice_towards_plus_and_throws_atoms_there(
    solved: Solved, detuning: float, order: str
) -> None:
    run = solved(light.plane_wave(light.pulse(2 * pi, detuning=detuning), parts=light.lattice(1)))
    assert light.orders(run)[order] > 0.99
    assert run.summary.end.velocity_mm_per_s[0] == pytest.approx(
        2e3 * RECOIL.velocity * np.sign(detuning), rel=1e-2
    )


def test_the_detuning_times_the_spacing_is_the_velocity() -> None:
    still = Lattice(spacing=SPACING, depth=1.0, mass=motion.RB)
    plan = light.plane_wave(light.wait(1.0), parts=light.lattice(1, strength=1, detuning='"2 kHz"'))
    (step,) = build_timeline(plan).steps
    t = 0.6 * step.stretch.stop
    (moved,) = (p for p in step.stretch.parts_at(t) if isinstance(p, Lattice))
    x = np.linspace(0, 2 * SPACING, 33)
    expected = still.energy(x - 2e3 * SPACING * t, 0.0, 0.0) * moved.depth
    np.testing.assert_allclose(moved.energy(x, 0.0, 0.0), expected, atol=1e-12 * moved.depth)


@pytest.mark.parametrize("degrees", [0.0, 30.0, -50.0])
def test_the_phase_puts_a_minimum_at_minus_spacing_times_phase_over_pi(solved: Solved, degrees: float) -> None:
    plan = motion.cloud(
        frequency=(5000, 50, 50), a="0 a0", parts=light.lattice(30, strength=1, phase=f'"{degrees} deg"'),
        trap=f'centre = ["{-SPACING * degrees / 180!r} m", "0 um", "0 um"]',
    )  # fmt: skip
    # trap and lattice agree where the minimum is, so the cloud sits there
    assert solved(plan).track["centre"][0][0] == pytest.approx(0.0, abs=1e-12)
    assert solved(plan).summary.ground.origin_um[0] == pytest.approx(-1e6 * SPACING * degrees / 180, abs=1e-6)


def test_a_cloud_in_a_lattice_gathers_where_the_phase_says() -> None:
    plan = light.plane_wave(parts=light.lattice(8, strength=1, phase='"30 deg"'), sites=2)
    amplitudes = light.amplitudes(motion.begin(prepare(plan)).cloud)
    # the density is 1 + 2 c cos(2 k (x - x0)) + ...: its first wave is the autocorrelation of the orders
    first = np.sum(amplitudes[1:] * amplitudes[:-1].conj())
    place = -np.angle(first) / (2 * RECOIL.k)
    assert place == pytest.approx(-SPACING / 6, abs=1e-4 * SPACING)


def test_a_flash_pushes_atoms_towards_its_minima(solved: Solved) -> None:
    """A quarter period beside a minimum the force is largest; a cloud much smaller than a site feels that alone."""
    tau, s = 2e-3, 100.0
    plan = motion.cloud(
        light.pulse(tau, phase='"45 deg"'), frequency=(1e6, 50, 50), a="0 a0", parts=light.lattice(s), number=10,
    )  # fmt: skip
    end = solved(plan).summary.end
    # V = V0 sin^2(k x + 45 deg): at x = 0 the force is -k V0, and no curvature; a cloud of width w feels exp(-2 k^2 w^2)
    # of it. The trap turns the push: v = F sin(omega t)/(m omega)
    omega = 2 * pi * 1e6
    felt = np.exp(-(RECOIL.k**2) * HBAR / (motion.RB * omega))
    push = -RECOIL.k * s * RECOIL.energy * felt * np.sin(omega * tau * RECOIL.time) / (motion.RB * omega)
    assert 1e-3 * end.velocity_mm_per_s[0] == pytest.approx(push, rel=2e-3)


@pytest.mark.slow
def test_two_halves_of_a_pulse_are_the_whole_of_it(solved: Solved) -> None:
    """The phase that the detuning has added up is carried from stage to stage."""
    parts = light.lattice(1, detuning=f'"{4 * RECOIL.hertz!r} Hz"')
    whole = solved(light.plane_wave(light.pulse(2 * HALF), parts=parts))
    halves = solved(light.plane_wave(light.pulse(HALF), light.pulse(HALF), parts=parts))
    assert light.off(light.orders(whole), light.orders(halves)) < 3e-4
    assert light.orders(halves)["1"] > 0.99


@pytest.mark.parametrize("detuning", [4.0, 4.3, 3.6])
def test_the_phase_runs_on_while_the_light_is_off(solved: Solved, detuning: float) -> None:
    """Ramsey's two pulses: the fringe says how far the lattice has travelled meanwhile."""
    s, apart = 1.0, 4.0
    parts = light.lattice(s, detuning=f'"{detuning * RECOIL.hertz!r} Hz"')
    found = light.orders(solved(light.plane_wave(light.pulse(HALF), light.wait(apart), light.pulse(HALF), parts=parts)))
    first = planewaves.pulse(planewaves.start(), s, HALF, detuning=detuning)
    exact = planewaves.pulse(
        planewaves.flight(first, apart), s, HALF, detuning=detuning, phase=-detuning * (HALF + apart) / 2
    )
    assert light.off(found, planewaves.populations(exact)) < 3e-4
    stopped = planewaves.pulse(planewaves.flight(first, apart), s, HALF, detuning=detuning)
    assert abs(planewaves.populations(stopped)["1"] - found["1"]) > 0.05


def test_a_detuning_that_is_ramped_adds_up_as_its_integral() -> None:
    """A lattice that speeds up evenly is half as far as one that had its last velocity all the time."""
    stages = (
        motion.stage("ramp", 1e-3, to='{ "light.detuning" = "6 kHz" }', shape='"linear"'),
        motion.stage("ramp", 1e-3, to='{ "light.detuning" = "2 kHz" }', shape='"smooth"'),
        motion.stage("hold", 0.5e-3),
    )  # fmt: skip
    timeline = build_timeline(light.plane_wave(*stages, parts=light.lattice(1, strength=1)))
    cycles = (3e3 * 1e-3, 4e3 * 1e-3, 2e3 * 0.5e-3)
    for step, turned in zip(timeline.steps, np.cumsum(cycles), strict=True):
        (part,) = (p for p in step.stretch.parts_at(step.stretch.stop) if isinstance(p, Lattice))
        # V goes through one period per cycle of the detuning, so its phase through half a turn
        assert part.travel == pytest.approx(-pi * turned, rel=1e-12)


def test_a_phase_jump_of_half_a_period_turns_the_second_pulse_round(solved: Solved) -> None:
    parts = light.lattice(1, detuning=f'"{4 * RECOIL.hertz!r} Hz"')
    stages = (light.pulse(HALF), light.pulse(HALF, phase='"90 deg"'))
    found = light.orders(solved(light.plane_wave(*stages, parts=parts)))
    first = planewaves.pulse(planewaves.start(), 1.0, HALF, detuning=4.0)
    exact = planewaves.pulse(first, 1.0, HALF, detuning=4.0, phase=pi / 2 - 4.0 * HALF / 2)
    assert light.off(found, planewaves.populations(exact)) < 3e-4
    assert found["0"] > 0.95


def test_a_kick_of_two_recoils_is_order_one(solved: Solved) -> None:
    stages = (motion.stage("kick", recoils="2", of='"light"'), light.pulse(0.01))
    found = light.orders(solved(light.plane_wave(*stages, parts=light.lattice(1))))
    assert found["1"] == pytest.approx(1.0, abs=1e-4)


@pytest.mark.slow
@pytest.mark.parametrize("p", [2.0, 3.0, -5.3])
def test_a_cloud_that_comes_with_a_velocity_is_not_cut_in_two(solved: Solved, p: float) -> None:
    """Light that moves along with the atoms does to them what standing light does to atoms at rest (Galilei)."""
    s, tau = 20.0, 0.05
    stages = (kick(p), light.pulse(tau, detuning=4 * p))
    plan = motion.cloud(
        motion.stage("release", 1e-4), *stages, frequency=(2, 50, 50), a="0 a0", parts=light.lattice(s), accuracy="draft"
    )
    exact = planewaves.pulsed(s, tau)
    found = light.orders(solved(plan))
    shift = round(p / 2)
    # matrix exponential; a cloud midway between two orders may be said to have come in either
    moved = [{str(int(n) + m): share for n, share in exact.items()} for m in (shift - 1, shift, shift + 1)]
    assert min(light.off(found, one) for one in moved) < 1e-3
    assert exact["0"] < 0.9


@pytest.mark.slow
def test_orders_are_told_in_free_fall(solved: Solved) -> None:
    """Gravity along the lattice moves every order alike; what is told is as if there were none."""
    found = {}
    for gravity in ("", '[gravity]\ndirection = "-x"\n'):
        plan = motion.cloud(
            motion.stage("release", 1e-4), light.pulse(0.05), motion.stage("hold", 5e-3), frequency=(20, 50, 50),
            a="0 a0", parts=light.lattice(20, phase='"20 deg"') + gravity,
        )  # fmt: skip
        found[gravity] = light.orders(solved(plan))
        fell = -9.80665 * (5.1e-3 + 0.05 * RECOIL.time) * bool(gravity)
        assert 1e-3 * solved(plan).summary.end.velocity_mm_per_s[0] == pytest.approx(fell, rel=1e-6, abs=2e-4)
    one, other = found.values()
    # over 4 us the fall in the lattice matters little, and before it the atoms fell for 0.1 ms, 0.23 recoils
    assert light.off(one, other) < 0.02
    assert one["1"] > 0.05


def kick(recoils: float) -> str:
    return motion.stage("kick", velocity=f'["{recoils * RECOIL.velocity!r} m/s", "0 m/s", "0 m/s"]')


@pytest.mark.slow
@pytest.mark.parametrize("p", [-1.4, 2.6])
def test_a_kick_after_the_light_leaves_every_atom_in_its_order(solved: Solved, p: float) -> None:
    """A second flash meets the atoms as they then move, and changes orders by what that light does alone."""
    s, tau = 20.0, 0.05
    flash, wait = light.pulse(tau), light.wait(0.3)
    first = planewaves.pulse(planewaves.start(), s, tau)
    second = planewaves.pulse(planewaves.flight(first, 0.3, p), s, tau, p)
    for stages, expected in (((flash, kick(p), wait), first), ((flash, kick(p), wait, flash), second)):
        run = solved(light.plane_wave(*stages, parts=light.lattice(s), sites=10))
        # matrix exponential
        assert light.off(light.orders(run), planewaves.populations(expected)) < 1e-4
    assert run.summary.stages[1].kind == "kick" and light.orders(run, 1) == pytest.approx(light.orders(run, 0), abs=1e-9)
    # not all is in one order, so that orders counted from elsewhere are told apart
    assert planewaves.populations(first)["0"] < 0.9


@pytest.mark.parametrize("kicked_first", [True, False])
def test_a_kick_as_the_lattice_lets_go_is_taken_off_before_and_after(solved: Solved, kicked_first: bool) -> None:
    """A lattice that is on from the start has acted before the sequence begins."""
    s, release = 5.0, motion.stage("release", 1e-4)
    stages = (kick(1.4), release) if kicked_first else (release, kick(1.4), light.wait(0.1))
    run = solved(light.plane_wave(*stages, parts=light.lattice(s, strength=1), sites=10))
    # plane waves, diagonalised
    assert light.off(light.orders(run), bands.populations(s)) < 1e-4


def test_what_a_trap_takes_back_of_a_fall_or_a_kick_is_not_taken_off() -> None:
    """At rest in a trap nothing falls, whatever gravity does; half a period after a kick all goes the other way."""
    omega, speed = 2 * pi * 100, 4e-3
    stages = (
        light.pulse(0.01), motion.stage("hold", 3e-3),
        motion.stage("kick", velocity=f'["{speed!r} m/s", "0 m/s", "0 m/s"]'), motion.stage("hold", pi / omega),
        motion.stage("release", 2e-3),
    )  # fmt: skip
    parts = light.lattice(5) + '[gravity]\ndirection = "-x"\n'
    steps = build_timeline(motion.cloud(*stages, frequency=(100, 100, 100), parts=parts)).steps
    found = [step.fallen["light"][0] for step in steps]
    # Newton's laws
    assert found == pytest.approx([0, 0, speed, -speed, -speed - 9.80665 * 2e-3], abs=1e-9)


def test_the_depth_is_from_top_to_bottom() -> None:
    part = Lattice(spacing=SPACING, depth=7e-31, mass=motion.RB)
    x = np.linspace(-SPACING, SPACING, 2001)
    energy = part.energy(x, np.zeros(1), np.zeros(1))
    assert (energy.min(), energy.max()) == pytest.approx((0.0, 7e-31), abs=1e-36)
    assert part.recoil_velocity == pytest.approx(HBAR * pi / (SPACING * motion.RB), rel=1e-15)
