"""A cloud in beams: at rest, sloshing, let go; the harmonic expansion where it holds, and laws where it does not."""

from __future__ import annotations

from collections.abc import Callable
from math import pi, sqrt

import numpy as np
import pytest
from scipy.constants import Boltzmann

import light
import motion
import trapsim
from reference import units
from trapsim.prepare.setup import prepare
from trapsim.terms.beam import Beam

Solved = Callable[[trapsim.Plan], trapsim.Run]

G = 9.80665
WAVELENGTH = 1064e-9
GRAVITY = "[gravity]\n"


def beam(name: str, direction: str, *, depth: float, waist: float = 50, **words: str) -> str:
    """A beam of a depth in uK and a waist in um."""
    more = "\n".join(f"{key} = {value}" for key, value in words.items())
    return (
        f'[trap.{name}]\nkind = "beam"\ndirection = {direction}\nwaist = "{waist} um"\nwavelength = "1064 nm"\n'
        f'depth = "{depth} uK"\n{more}\n'
    )


CROSSED = beam("first", '"x"', depth=20) + beam("second", '"y"', depth=15, waist=60)


def radial(depth: float, waist: float) -> float:
    """rad/s, from the harmonic expansion, sqrt(4 U/(m w^2)); uK and um."""
    return sqrt(4 * depth * 1e-6 * Boltzmann / motion.RB) / (waist * 1e-6)


def test_an_ideal_gas_low_in_a_beam_is_a_harmonic_oscillators(solved: Solved) -> None:
    """Across a single beam; along it a weak trap, as light alone holds next to nothing there."""
    depth, waist = 30.0, 50.0
    across = radial(depth, waist)
    run = solved(light.plain(parts=beam("only", '"x"', depth=depth, waist=waist), a="0 a0", number=10))
    q = units.hbar / motion.RB
    along = sqrt(2 * depth * 1e-6 * Boltzmann / motion.RB) / (pi * (waist * 1e-6) ** 2 / WAVELENGTH)
    width = [sqrt(q / (2 * along)), sqrt(q / (2 * across)), sqrt(q / (2 * across))]
    # harmonic oscillator; the quartic term matters by about 3 (width/waist)^2
    assert run.track["width"][0] == pytest.approx(width, rel=1e-3)
    assert run.summary.ground.energy_hz == pytest.approx((2 * across + along) / (4 * pi), rel=1e-3)


def test_the_first_order_shift_of_the_energy_by_the_quartic_term(solved: Solved) -> None:
    depth, waist = 3.0, 20.0
    run = solved(light.plain(parts=beam("only", '"x"', depth=depth, waist=waist), a="0 a0", number=10, accuracy="fine"))
    across, q = radial(depth, waist), units.hbar / motion.RB
    along = sqrt(2 * depth * 1e-6 * Boltzmann / motion.RB) / (pi * (waist * 1e-6) ** 2 / WAVELENGTH)
    # -U exp(-2 r^2/w^2): quartic term -2 U r^4/w^4, and <r^4> = 2 (q/omega)^2 for the round ground state
    shift = -2 * depth * 1e-6 * Boltzmann * 2 * (q / across) ** 2 / (waist * 1e-6) ** 4
    shift /= 2 * pi * units.hbar
    assert run.summary.ground.energy_hz == pytest.approx((2 * across + along) / (4 * pi) + shift, abs=0.1 * abs(shift))


def test_small_swings_in_a_beam_have_its_frequency(solved: Solved) -> None:
    depth, waist = 30.0, 50.0
    omega = radial(depth, waist)
    quarter = pi / 2 / omega
    push = motion.stage("kick", velocity='["0 mm/s", "0 mm/s", "0.2 mm/s"]')
    run = solved(light.plain(
        push, motion.stage("hold", quarter), motion.stage("hold", quarter),
        parts=beam("only", '"x"', depth=depth, waist=waist) + beam("end", '"y"', depth=0.5, waist=500), number=1e3,
    ))  # fmt: skip
    track = run.track
    top, back = (motion.at(track, n * quarter) for n in (1, 2))
    # Kohn's theorem in the harmonic part; the swing is 0.1 um, the cloud 0.7 um, the waist 50 um
    assert track["centre"][top, 2] == pytest.approx(0.2e-3 / omega, rel=2e-3)
    assert track["velocity"][back, 2] == pytest.approx(-0.2e-3, rel=2e-3)


def crossed(*stages: str, **more: object) -> trapsim.Plan:
    return light.plain(*stages, parts=CROSSED, rest=GRAVITY, **more)


@pytest.mark.slow
def test_a_sloshing_cloud_in_crossed_beams_keeps_its_energy(solved: Solved) -> None:
    push = '["0 mm/s", "2 mm/s", "6 mm/s"]'
    setup = crossed(motion.stage("kick", velocity=push), motion.stage("hold", 8e-3))
    run = solved(setup)
    track, origin = run.track, 1e-6 * np.array(run.summary.ground.origin_um)
    centre = [c + o for c, o in zip(track["centre"].T, origin, strict=True)]
    # the beams as Grimm et al. write them, at the cloud's centre, and its weight
    there = motion.RB * G * centre[2]
    for depth, waist, along in ((20e-6, 50e-6, 0), (15e-6, 60e-6, 1)):
        spread = 1 + (centre[along] / (pi * waist**2 / WAVELENGTH)) ** 2
        rho2 = sum(centre[j] ** 2 for j in range(3) if j != along)
        there = there - depth * Boltzmann / spread * np.exp(-2 * rho2 / (waist**2 * spread))
    own = track["kinetic"].sum(axis=1) + track["trap"] + track["interaction"]
    total = (own + track["centre_kinetic"] + there)[track.time > 0]
    swing = np.ptp(track["centre_kinetic"][track.time > 0])
    assert np.ptp(total) < 1e-4 * swing
    assert swing > 2 * own.mean()
    # it passes through the middle about twice in a period
    assert np.ptp(track["centre"][:, 2]) > 4e-6


def test_a_cloud_let_go_from_crossed_beams_falls_freely(solved: Solved) -> None:
    flight = 10e-3
    run = solved(crossed(motion.stage("release", flight)))
    first, last = run.track["centre"][0], run.track["centre"][-1]
    # free fall; the cloud as a whole rests where its mean force vanishes, nanometres from a point atom's place
    assert last - first == pytest.approx([0, 0, -G * flight**2 / 2], abs=1e-10)
    assert run.track["velocity"][-1] == pytest.approx([0, 0, -G * flight], abs=1e-9)
    assert abs(first[2]) < 50e-9
    # nothing acts on the cloud's own energy in flight
    energy = run.track["kinetic"].sum(axis=1) + run.track["interaction"]
    assert np.ptp(energy[1:]) < 2e-4 * energy.mean()


def test_the_cloud_hangs_where_the_beams_carry_its_weight() -> None:
    setup = prepare(crossed())
    place = setup.timeline.origin
    pull = sum(p.steer(place)[0][2] for p in setup.timeline.initial.parts_at(0.0) if isinstance(p, Beam))
    assert pull == pytest.approx(motion.RB * G, rel=1e-9, abs=0)
    assert place[2] < 0 and place[:2] == pytest.approx((0, 0), abs=1e-12)


@pytest.mark.parametrize("depth", [4.0, 4.24])
def test_beams_too_shallow_for_gravity_are_refused_in_words(depth: float) -> None:
    """At 4.23 uK a beam of 50 um just holds rubidium; a little above that it holds no cloud yet."""
    parts = beam("first", '"x"', depth=depth) + beam("end", '"y"', depth=0.01, waist=500)
    with pytest.raises(trapsim.PlanError, match=r"(balance|would leak over it)(.|\n)*(levitate|deeper)"):
        prepare(light.plain(parts=parts, rest=GRAVITY))


def test_a_levitated_cloud_needs_no_more_than_a_shallow_beam() -> None:
    lift = f'[trap.lift]\nkind = "gradient"\nacceleration = ["0 m/s^2", "0 m/s^2", "{G} m/s^2"]\n'
    parts = beam("first", '"x"', depth=1.0) + beam("second", '"y"', depth=1.0) + lift
    assert prepare(light.plain(parts=parts, rest=GRAVITY)).timeline.origin == pytest.approx((0, 0, 0), abs=1e-12)


@pytest.mark.slow
def test_a_beam_that_dies_away_slowly_lets_the_cloud_down_more_gently(solved: Solved) -> None:
    """While the light decays the cloud still hangs in it: it has fallen less, as a point atom would."""
    from scipy import integrate

    tau, flight = 0.3e-3, 5e-3
    switch = f'{{ shape = "exponential", time_constant = "{tau} s" }}'
    run = solved(crossed(motion.stage("release", flight, switch_off=switch)))
    start = 1e-6 * run.summary.ground.origin_um[2]
    end = tau * 14

    def fall(t: float, y: np.ndarray) -> list[float]:
        share = np.exp(-t / tau) if t < end else 0.0
        pull = -sum(
            4 * u * Boltzmann * y[0] / w**2 * np.exp(-2 * y[0] ** 2 / w**2) for u, w in ((20e-6, 50e-6), (15e-6, 60e-6))
        )
        return [y[1], share * pull / motion.RB - G]

    path = integrate.solve_ivp(fall, (0, flight), [start, 0.0], rtol=1e-10, atol=1e-15).y[:, -1]
    assert run.track["centre"][-1][2] == pytest.approx(path[0] - start, rel=1e-3)
    assert path[0] - start > -G * flight**2 / 2 * 0.99
