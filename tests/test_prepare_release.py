"""Releases that take their time, traps that hold against gravity, lenses that follow the fall."""

from __future__ import annotations

from collections.abc import Callable
from math import pi, sqrt

import numpy as np
import pytest

import motion
import trapsim
from motion import RB
from reference import classical, expansion, flights, gaussian, scaling, units
from trapsim.estimate.law import scaling_law
from trapsim.prepare.setup import prepare

Solved = Callable[[trapsim.Plan], trapsim.Run]

G = 9.80665
TWO_PI = 2 * pi
#: the cigar the anchors are given for, cycles per second
CIGAR = (20.0, 120.0, 120.0)


def dying(text: str, duration: float = 20e-3, **words: object) -> trapsim.Plan:
    words = {"frequency": CIGAR, "accuracy": "draft", **words}
    return motion.cloud(motion.stage("release", duration, switch_off=text), gravity=True, **words)


def exponential(tau: float) -> str:
    return f'{{ shape = "exponential", time_constant = {motion.seconds(tau)} }}'


SHAPES = {
    "exponential": (exponential(1e-4), classical.exponential(4e-3, 1e-4), (4e-3,)),
    "linear": ('{ shape = "linear", duration = "300 us" }', classical.linear(3e-4), (3e-4,)),
    "smooth": ('{ shape = "smooth", duration = "2 ms" }', classical.smooth(2e-3), (2e-3,)),
    "cut": (
        '{ shape = "exponential", time_constant = "100 us", duration = "150 us" }',
        classical.exponential(1.5e-4, 1e-4), (1.5e-4,),
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", SHAPES)
def test_a_dying_trap_throws_the_cloud_as_newton_says(solved: Solved, name: str) -> None:
    text, strength, edges = SHAPES[name]
    run = solved(dying(text, number=2e3, duration=8e-3))
    omega = TWO_PI * 120
    start = -classical.sag(omega)
    t = run.track.time
    x, v = classical.path(start, 0.0, t, omega=omega, strength=strength, acceleration=-G, edges=edges)
    # independent calculation: Newton's law by DOP853
    assert run.track["centre"][:, 2] == pytest.approx(x - start, rel=1e-8, abs=1e-14)
    assert run.track["velocity"][:, 2] == pytest.approx(v, rel=1e-8, abs=1e-12)
    assert run.track["centre"][:, :2] == pytest.approx(0.0, abs=1e-17)


@pytest.mark.parametrize(
    ("text", "kick", "within"),
    [
        (exponential(20e-6), 0.196e-3, 0.003), (exponential(100e-6), 0.98e-3, 0.01), (exponential(300e-6), 3.0e-3, 0.02),
        (exponential(1e-3), 12.5e-3, 0.02), ('{ shape = "linear", duration = "100 us" }', 0.49e-3, 0.01),
    ],
    ids=["20 us", "100 us", "300 us", "1 ms", "linear"],
)  # fmt: skip
def test_the_kick_of_a_slow_switch_off(text: str, kick: float, within: float) -> None:
    """About g tau less velocity than free fall while tau is short; the anchors of the trade."""
    line = prepare(dying(text)).timeline
    late = G * 20e-3 + line.path[-1][5]
    # independent calculation: Newton's law for the same cigar (20/120/120 Hz), rounded to the digits given
    assert late == pytest.approx(kick, rel=within)


@pytest.mark.parametrize(
    ("tau", "ratio"), [(20e-6, 0.9989), (100e-6, 0.992), (300e-6, 0.960), (500e-6, 0.909), (1e-3, 0.725)]
)
def test_a_slow_switch_off_leaves_a_smaller_cloud(tau: float, ratio: float) -> None:
    laws = [scaling_law(prepare(plan)) for plan in (
        dying(exponential(tau)), motion.cloud(motion.stage("release", 20e-3), frequency=CIGAR)
    )]  # fmt: skip
    slow, sudden = (law.at(20e-3)[0] for law in laws)
    # independent calculation: the scaling law by DOP853, rounded to the digits given
    assert slow[2] / sudden[2] == pytest.approx(ratio, abs=1.01e-3 if tau >= 1e-3 else 5.5e-4)
    omegas = [TWO_PI * f for f in CIGAR]
    fading = classical.exponential(40 * tau, tau)
    traps = [lambda t, w=w: w * sqrt(fading(t)) for w in omegas]
    b, _ = scaling.castin_dum(omegas, traps, [20e-3], edges=(40 * tau,))
    assert slow[2] / laws[0].at(0.0)[0][2] == pytest.approx(b[0, 2], rel=1e-7)


def test_the_full_equation_feels_the_slow_switch_off_as_the_law_does(solved: Solved) -> None:
    slow = solved(dying(exponential(300e-6), accuracy="normal")).summary.end
    sudden = solved(motion.cloud(motion.stage("release", 20e-3), frequency=CIGAR)).summary.end
    # independent calculation: scaling law, 0.960; a cloud of 1e5 atoms is large enough to follow it to 0.2 %
    assert slow.width_um[2] / sudden.width_um[2] == pytest.approx(0.960, abs=2e-3)


def test_a_dying_trap_under_an_interacting_cloud(solved: Solved) -> None:
    """The wave function through the switch-off, beside the independent solver with the same fading trap."""
    own = motion.Natural(beta=40.0)
    tau, end, lam = 0.4, 3.0, 1.6
    plan = motion.cloud(
        motion.stage("release", own.s(end), switch_off=(
            f'{{ shape = "exponential", time_constant = {motion.seconds(own.s(tau))}, '
            f"duration = {motion.seconds(own.s(2.0))} }}"
        )), frequency=own.hz(1, 1, lam), a=own.a, accuracy="fine", gravity=True,
    )  # fmt: skip
    run = solved(plan)
    fading = classical.exponential(2.0, tau)
    start = expansion.ground((2, 1), (1.0, lam), own.beta, counts=(20, 16))
    (flight,) = expansion.march(
        start, (1.0, lam), own.beta, [end], edges=(2.0,), trap=[lambda t, w=w: w * sqrt(fading(t)) for w in (1.0, lam)]
    )
    # independent calculation: oscillator functions in stretched coordinates, DOP853
    expected = [flight.widths[0], flight.widths[0], flight.widths[1]]
    assert run.track["width"][-1] / own.unit.length == pytest.approx(expected, rel=5e-6)
    assert run.track["interaction"][-1] / own.unit.energy == pytest.approx(flight.interaction, rel=1e-5)


# ---- held centres --------------------------------------------------------------------------------------------------


def test_a_held_trap_weakens_without_dropping_the_cloud(solved: Solved) -> None:
    ramp = motion.stage("ramp", 4e-3, to='{ "dipole.frequency" = ["20 Hz", "60 Hz", "40 Hz"] }')
    plans = [
        motion.cloud(
            ramp, motion.stage("hold", 3e-3), frequency=(20, 120, 120), number=3e3, gravity=True, trap=trap,
            accuracy="draft",
        )
        for trap in ('centre = "held"', "")
    ]  # fmt: skip
    held, loose = (solved(p).track["centre"][:, 2] for p in plans)
    # exact: the force is balanced at the equilibrium all the time
    assert held == pytest.approx(0.0, abs=1e-16)
    omega = TWO_PI * 120
    x, _ = classical.path(
        -classical.sag(omega), 0.0, [4e-3, 7e-3], omega=1.0, acceleration=-G, edges=(4e-3,),
        strength=lambda t: (TWO_PI * (120 - 80 * min(t / 4e-3, 1))) ** 2,
    )  # fmt: skip
    # independent calculation: without that the cloud falls, by Newton's law
    assert loose[-1] == pytest.approx(x[1] + classical.sag(omega), rel=1e-7)
    assert loose[-1] < -2e-5


def test_a_held_trap_that_is_released_slowly_still_lets_the_cloud_fall() -> None:
    """What holds is only the trap's place at the start: a switch-off multiplies its potential energy."""
    tau = 3e-4
    held, plain = (prepare(dying(exponential(tau), trap=t)).timeline for t in ('centre = "held"', ""))
    assert held.path[-1] == pytest.approx(plain.path[-1], rel=1e-12, abs=1e-20)
    assert held.path[-1][5] < -0.15


# ---- lenses --------------------------------------------------------------------------------------------------------


def lens(frequency: float, at: str) -> str:
    return (
        f'[trap.lens]\nkind = "harmonic"\nfrequency = {motion.hertz([frequency] * 3)}\nstrength = 0\nat = "{at}"'
    )


FLASH = '{ "lens.strength" = 1 }'


def test_a_lens_that_follows_the_cloud_does_not_throw_it(solved: Solved) -> None:
    t, tau = 8e-3, 4e-4
    following, fixed = (
        solved(motion.cloud(
            motion.stage("release", t), motion.stage("pulse", tau, to=FLASH), motion.stage("release", 5e-3),
            frequency=(60, 60, 60), number=2e3, gravity=True, parts=lens(25.0, at), accuracy="draft",
        ))
        for at in ("cloud", "centre")
    )  # fmt: skip
    omega = TWO_PI * 25
    start = -classical.sag(TWO_PI * 60)
    x, v = classical.fall(start, 0.0, np.array(t), acceleration=-G)
    for run, middle in ((following, float(x)), (fixed, 0.0)):
        y, u = classical.path(
            float(x), float(v), [tau], omega=omega, centre=lambda _, c=middle: c, acceleration=-G
        )  # fmt: skip
        pulse = run.summary.stages[1].end
        # independent calculation: Newton's law by DOP853
        assert pulse.centre_um[2] == pytest.approx(1e6 * (y[0] - start), rel=1e-9)
        assert pulse.velocity_mm_per_s[2] == pytest.approx(1e3 * u[0], rel=1e-9)
    # the lens in the cloud only feels what it falls within the flash, the one left behind throws it back up
    freely = 1e3 * (v - G * tau)
    assert abs(following.summary.stages[1].end.velocity_mm_per_s[2] - freely) < 0.01 * abs(freely)
    assert abs(fixed.summary.stages[1].end.velocity_mm_per_s[2] - freely) > 0.02 * abs(freely)


def test_a_lens_stops_the_spreading_of_an_ideal_gas(solved: Solved) -> None:
    """Thin enough: the flash takes 2 us, during which nothing moves."""
    omega, t, tau = TWO_PI * 50, 20e-3, 2e-6
    growth, strength, left = flights.LENS_IDEAL
    strong = sqrt(gaussian.lens_strength(t, omega=omega) / tau)
    run = solved(motion.cloud(
        motion.stage("release", t), motion.stage("pulse", tau, to=FLASH), motion.stage("release", 30e-3),
        frequency=(50, 50, 50), a="0 a0", parts=lens(strong / TWO_PI, "cloud"), accuracy="fine",
    ))  # fmt: skip
    assert gaussian.lens_strength(t, omega=omega) == pytest.approx(strength, abs=1e-4)
    first, flashed, end = (s.end for s in run.summary.stages)
    assert first.width_um[0] / run.summary.ground.width_um[0] == pytest.approx(growth, rel=1e-6)
    # exact (Ammann and Christensen, Phys. Rev. Lett. 78, 2088 (1997)): the flow is stopped up to the flash's length
    assert abs(flashed.expansion_rate_mm_per_s[0]) < 2e-4 * first.expansion_rate_mm_per_s[0]
    # exact (Liouville): what is left of the velocity spread is 1/b
    assert (flashed.velocity_spread_mm_per_s[0] / first.velocity_spread_mm_per_s[0]) ** 2 == pytest.approx(left, rel=1e-3)
    # behind it the packet spreads as one of this waist: sigma^2 (1 + (q t/2 sigma^2)^2)
    q, waist = units.hbar / RB, flashed.width_um[0] * 1e-6
    spread = 1e6 * waist * sqrt(1 + (q * 30e-3 / (2 * waist**2)) ** 2)
    assert end.width_um[0] == pytest.approx(spread, rel=1e-4)


def test_a_lens_of_the_wrong_sign_would_double_the_spreading(solved: Solved) -> None:
    """Half a lens slows, none leaves alone: the rate behind a thin lens of strength s is sigma (b'/b - s)."""
    omega, t, tau = TWO_PI * 50, 10e-3, 1e-6
    rate = gaussian.curvature(t, omega=omega)
    for share in (0.5, 2.0):
        strong = sqrt(share * rate / tau) / TWO_PI
        run = solved(motion.cloud(
            motion.stage("release", t), motion.stage("pulse", tau, to=FLASH),
            frequency=(50, 50, 50), a="0 a0", parts=lens(strong, "cloud"), accuracy="fine",
        ))  # fmt: skip
        first, flashed = (s.end for s in run.summary.stages)
        # exact: thin lens
        expected = first.width_um[0] * rate * (1 - share) * 1e-3
        assert flashed.expansion_rate_mm_per_s[0] == pytest.approx(expected, abs=1e-3 * first.expansion_rate_mm_per_s[0])


def test_a_lens_through_an_interacting_cloud(solved: Solved) -> None:
    """Flight, a thick lens, flight again, beside the independent solver with the same switched trap."""
    own = motion.Natural(beta=30.0)
    t1, t2, t3, wl = 2.0, 2.4, 5.0, 0.9
    run = solved(motion.cloud(
        motion.stage("release", own.s(t1)), motion.stage("pulse", own.s(t2 - t1), to=FLASH),
        motion.stage("release", own.s(t3 - t2)), frequency=own.hz(1, 1, 1), a=own.a, accuracy="fine", gravity=True,
        parts=lens(own.omega * wl / TWO_PI, "cloud"),
    ))  # fmt: skip
    seen = expansion.isotropic_flight(
        own.beta, [t1, t2, t3], trap=lambda t: wl if t1 < t < t2 else 0.0, edges=(t1, t2)
    )
    for stage, flight in zip(run.summary.stages, seen, strict=True):
        # independent calculation: oscillator functions in stretched coordinates, DOP853
        assert np.array(stage.end.width_um) * 1e-6 / own.unit.length == pytest.approx([flight.widths[0]] * 3, rel=5e-6)
    assert run.track["interaction"][-1] / own.unit.energy == pytest.approx(seen[-1].interaction, rel=2e-5)
    # the lens slows the flow to less than half
    before, behind = (s.end.expansion_rate_mm_per_s[0] for s in run.summary.stages[:2])
    assert 0 < behind < 0.5 * before
