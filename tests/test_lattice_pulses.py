"""Flashes of a lattice on a cloud at rest: Kapitza-Dirac and Bragg diffraction, beside exact plane waves.

A uniform ideal gas, periodic over a whole number of sites, is one plane wave; a released cloud in a weak trap is a narrow
packet of them.
"""

from __future__ import annotations

from collections.abc import Callable
from math import pi, sqrt

import numpy as np
import pytest
from scipy import special
from scipy.constants import hbar

import light
import motion
import trapsim
from light import RECOIL
from reference import planewaves, units
from trapsim.prepare.cost import predict
from trapsim.prepare.setup import prepare
from trapsim.terms.lattice import Lattice

Solved = Callable[[trapsim.Plan], trapsim.Run]

#: Hz along the lattice, and the spread of wave numbers of its ideal ground state, in k
WEAK = 2.0
NARROW = sqrt(motion.RB * 2 * pi * WEAK / (2 * hbar)) / RECOIL.k


def released(*stages: str, s: float, **more: object) -> trapsim.Plan:
    """A long ideal cloud, let go, then flashed."""
    return motion.cloud(
        motion.stage("release", 1e-4), *stages, frequency=(WEAK, 50, 50), a="0 a0", parts=light.lattice(s), **more
    )


# ---- the reference itself ------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("s", "tau", "printed"), planewaves.SHORT_PULSES)
def test_the_matrix_of_orders_gives_the_printed_populations(s: float, tau: float, printed: tuple[float, ...]) -> None:
    found = planewaves.pulsed(s, tau)
    # independent calculation
    assert [found[n] for n in "012"] == pytest.approx(printed, abs=6e-7)
    assert sum(found.values()) == pytest.approx(1, abs=1e-12)


@pytest.mark.parametrize(("s", "printed"), planewaves.BRAGG_PULSES)
def test_the_matrix_of_orders_gives_the_printed_bragg_pulses(s: float, printed: float) -> None:
    # independent calculation
    assert planewaves.pulsed(s, 2 * pi / s, detuning=4.0)["1"] == pytest.approx(printed, abs=6e-7)


def test_a_very_short_pulse_follows_bessel_functions() -> None:
    # P. L. Gould et al., Phys. Rev. Lett. 56, 827 (1986), from memory: P_n = J_n(V0 tau/2 hbar)^2
    for theta, order, population in planewaves.BESSEL:
        found = planewaves.pulsed(2e5 * theta, 1e-5)
        assert found[str(order)] == pytest.approx(special.jv(order, theta) ** 2, abs=1e-5)
        assert found[str(order)] == pytest.approx(population, abs=1e-5)
        # the sum rule of Bessel functions, <n^2> = theta^2/2
        assert sum(int(n) ** 2 * p for n, p in found.items()) == pytest.approx(theta**2 / 2, rel=1e-4)


@pytest.mark.parametrize(("atom", "wavelength", "kilohertz", "nanokelvin", "velocity", "talbot"), planewaves.RECOILS)
def test_recoil_units_are_the_printed_ones(
    atom: str, wavelength: float, kilohertz: float, nanokelvin: float, velocity: float, talbot: float
) -> None:
    mass = units.MASSES[atom]
    own = Lattice(wavelength=wavelength * 1e-9, depth=0.0, mass=mass)
    recoil = planewaves.Recoil(mass, wavelength * 1e-9 / 2)
    assert (own.recoil_energy, own.recoil_velocity) == pytest.approx((recoil.energy, recoil.velocity), rel=1e-12, abs=0)
    # independent calculation
    assert 1e-3 * recoil.hertz == pytest.approx(kilohertz, abs=6e-6)
    assert 1e9 * recoil.kelvin == pytest.approx(nanokelvin, rel=1e-5)
    assert 1e3 * own.recoil_velocity == pytest.approx(velocity, abs=6e-6)
    assert 1e6 * recoil.talbot == pytest.approx(talbot, rel=5e-6)
    if atom == "Na-23":
        # L. Deng et al., Phys. Rev. Lett. 83, 5407 (1999): measured to the digits printed
        assert 1e6 * recoil.talbot == pytest.approx(planewaves.SODIUM_TALBOT, rel=1e-3)


# ---- a plane wave --------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("sites", [1, 4])
@pytest.mark.parametrize(("s", "tau", "printed"), planewaves.SHORT_PULSES)
def test_a_flash_on_a_plane_wave(solved: Solved, s: float, tau: float, printed: tuple[float, ...], sites: int) -> None:
    found = light.orders(solved(light.plane_wave(light.pulse(tau), parts=light.lattice(s), sites=sites)))
    # matrix exponential, and independent calculation
    assert light.off(found, planewaves.pulsed(s, tau)) < 1e-5
    assert [found.get(n, 0.0) for n in "012"] == pytest.approx(printed, abs=1e-5)


def test_two_lattices_at_once_have_their_orders_apart() -> None:
    """Along x and y an ideal gas does not know of the other light (exact: the energies add); recoils differ."""
    short = 390e-9
    second = light.lattice(6.0, axis="y").replace("trap.light", "trap.blue").replace("532 nm", "390 nm")
    tau = 0.3
    run = trapsim.run(motion.cloud(
        motion.stage("pulse", tau * RECOIL.time, to='{ "light.strength" = 1, "blue.strength" = 1 }'),
        frequency=(0, 0, 50), a="0 a0", parts=light.lattice(10.0) + second,
        numerics=f'extent = ["{light.SPACING!r} m", "{short!r} m", "auto"]',
    ))  # fmt: skip
    found = run.summary.end.orders
    blue = planewaves.Recoil(motion.RB, short)
    assert light.off(found["light"], planewaves.pulsed(10.0, tau)) < 1e-5
    assert light.off(found["blue"], planewaves.pulsed(6.0, tau * RECOIL.time / blue.time)) < 1e-5
    # exact: 2 n hbar k/m, each of its own lattice
    motions = {seen.part: seen.motion for seen in run.momenta}
    for part, own in (("light", RECOIL), ("blue", blue)):
        found = [motions[part][n][0] for n in ("-1", "1")]
        assert found == pytest.approx([-2 * own.velocity, 2 * own.velocity], rel=1e-9)


def test_a_long_flash_is_nothing_like_bessel(solved: Solved) -> None:
    s, tau, _ = planewaves.SHORT_PULSES[2]
    found = light.orders(solved(light.plane_wave(light.pulse(tau), parts=light.lattice(s))))
    assert found["0"] == pytest.approx(0.306986, abs=1e-5)
    assert special.jv(0, s * tau / 2) ** 2 == pytest.approx(0.002341, abs=1e-6)


@pytest.mark.slow
@pytest.mark.parametrize(("s", "printed"), planewaves.BRAGG_PULSES)
def test_a_bragg_pi_pulse_on_a_plane_wave(solved: Solved, s: float, printed: float) -> None:
    """Detuned by 4 E_R/h and h/V0 long it moves all atoms by +2 hbar k."""
    found = light.orders(solved(light.plane_wave(light.pulse(2 * pi / s, detuning=4.0), parts=light.lattice(s))))
    # M. Kozuma et al., Phys. Rev. Lett. 82, 871 (1999) for the rule, independent calculation for the number
    assert found["1"] == pytest.approx(printed, abs=2e-4)
    assert light.off(found, planewaves.pulsed(s, 2 * pi / s, detuning=4.0)) < 2e-4


@pytest.mark.parametrize(("share", "theta"), [(1.0, 1.2), (0.5, 0.0)])
def test_two_flashes_a_talbot_time_apart(solved: Solved, share: float, theta: float) -> None:
    """A Talbot time apart they act as one of twice the length; half of that apart the second undoes the first."""
    s, tau = 240.0, 0.005
    talbot = RECOIL.talbot / RECOIL.time
    apart = share * talbot - tau
    run = solved(light.plane_wave(light.pulse(tau), light.wait(apart), light.pulse(tau), parts=light.lattice(s)))
    found = light.orders(run)
    exact = planewaves.pulse(planewaves.flight(planewaves.pulse(planewaves.start(), s, tau), apart), s, tau)
    assert light.off(found, planewaves.populations(exact)) < 1e-4
    # L. Deng et al., Phys. Rev. Lett. 83, 5407 (1999): J_n(2 theta)^2, or all in order 0 again
    for n in range(-3, 4):
        assert found.get(str(n), 0.0) == pytest.approx(special.jv(n, theta) ** 2, abs=2e-3)


# ---- a narrow cloud ------------------------------------------------------------------------------------------------


@pytest.mark.slow
@pytest.mark.parametrize(("s", "tau", "printed"), planewaves.SHORT_PULSES[::2])
def test_a_flash_on_a_narrow_cloud_and_where_its_orders_fly(s: float, tau: float, printed: tuple[float, ...]) -> None:
    flight = 15e-3
    camera = '[camera.side]\nview = "y"\npixel = "4 um"\nmagnification = 2.0\nsize = [600, 64]\nwavelength = "780.241 nm"'
    stages = (light.pulse(tau), motion.stage("hold", flight, pictures='["15 ms"]'))
    run = trapsim.run(released(*stages, s=s, numerics=camera))
    found = light.orders(run)
    assert light.off(found, planewaves.averaged(s, tau, NARROW)) < 1e-5
    # independent calculation for a plane wave at rest
    assert [found.get(n, 0.0) for n in "012"] == pytest.approx(printed, abs=1e-3)
    # exact: orders move with 2 n recoils, and each is as narrow as an ideal gas in its trap was
    told = run.momenta[-1].motion
    assert [told[n][0] for n in ("-1", "1")] == pytest.approx([-2 * RECOIL.velocity, 2 * RECOIL.velocity], rel=1e-3)
    assert [told[n][1] for n in ("-1", "0", "1")] == pytest.approx([NARROW * RECOIL.velocity] * 3, rel=1e-2)
    picture = run.pictures["side_hold_15ms"]
    across = picture.optical_density.sum(axis=0)
    for n in (-2, -1, 1, 2):
        # orders leave at 2 n recoils; halfway through a short pulse they begin to
        place = 2 * n * RECOIL.velocity * (flight + tau * RECOIL.time / 2)
        near = np.abs(picture.x - place) < 50e-6
        assert across[near] @ picture.x[near] / across[near].sum() == pytest.approx(place, rel=1e-3)
        assert across[near].sum() / across.sum() == pytest.approx(found[str(n)], abs=1e-4)


@pytest.mark.slow
@pytest.mark.parametrize("s", [2.0, 4.0])
def test_a_bragg_pi_pulse_on_a_narrow_cloud(solved: Solved, s: float) -> None:
    run = solved(released(light.pulse(2 * pi / s, detuning=4.0), s=s))
    # matrix exponential, averaged over the Gaussian spread of wave numbers
    assert light.off(light.orders(run), planewaves.averaged(s, 2 * pi / s, NARROW, detuning=4.0)) < 1e-5


def test_the_narrow_cloud_is_as_narrow_as_it_is_said_to_be(solved: Solved) -> None:
    end = solved(released(light.pulse(0.01), motion.stage("hold", 1e-4), s=0.0)).summary.end
    # textbook: the ground state's spread of momenta, sqrt(m hbar omega/2)
    assert 1e-3 * end.velocity_spread_mm_per_s[0] / RECOIL.velocity == pytest.approx(NARROW, rel=1e-5)


@pytest.mark.slow
def test_light_that_rushes_past_is_said_to_cost() -> None:
    """Two samples a period of what passes is the least there can be (the sampling theorem), three pairs a step."""
    pairs = {}
    for megahertz in (0, 10, 20):
        flash = light.pulse(0.3, detuning=megahertz * 1e6 / RECOIL.hertz)
        pairs[megahertz] = predict(prepare(released(flash, s=2.0, accuracy="draft"))).pairs
    periods = 1e7 * 0.3 * RECOIL.time
    assert pairs[10] - pairs[0] > 3 * 2 * periods - pairs[0] > 0
    assert pairs[20] - pairs[10] == pytest.approx(pairs[10], rel=0.5)


@pytest.mark.slow
def test_a_flash_on_a_falling_expanding_kicked_cloud_is_the_same_on_a_grid_that_stands(solved: Solved) -> None:
    stages = (
        motion.stage("kick", velocity='["0.7 mm/s", "0 mm/s", "0 mm/s"]'), motion.stage("release", 1e-3),
        light.pulse(0.7), motion.stage("hold", 0.5e-3),
    )  # fmt: skip
    parts = light.lattice(6, phase='"0.4 rad"', detuning='"3 kHz"') + '[gravity]\ndirection = "-x"\nvalue = "0.5 m/s^2"\n'

    def flashed(numerics: str) -> trapsim.Run:
        plan = motion.cloud(*stages, frequency=(80, 80, 80), number=500, parts=parts, numerics=numerics)
        return solved(plan)

    moving = flashed("")
    standing = flashed('frame = "lab"\nextent = ["40 um", "14 um", "14 um"]\npoints = [640, 14, 14]')
    assert light.off(light.orders(moving), light.orders(standing)) < 1e-4
    one, other = moving.summary.end, standing.summary.end
    # one equation in two frames
    assert one.width_um == pytest.approx(other.width_um, rel=3e-4)
    assert one.centre_um == pytest.approx(other.centre_um, abs=1e-3)
    assert one.velocity_mm_per_s == pytest.approx(other.velocity_mm_per_s, abs=1e-3)
    assert one.interaction_nk == pytest.approx(other.interaction_nk, rel=1e-3)
    assert one.orders["light"]["1"] > 0.2


@pytest.mark.slow
def test_weak_orders_keep_their_share_while_they_overlap() -> None:
    """Orders still on top of each other beat through the mean field, and a step in time with the beat would mix them.

    Exact: the energy is constant in flight, and the momentum of a cloud flashed evenly stays zero.
    """
    parts = light.lattice(1.22, phase='"23.2 deg"').replace("532 nm", "431.1 nm")
    flash = motion.stage("pulse", 100.753e-6, to='{ "light.strength" = 1 }')
    run = trapsim.run(motion.cloud(
        motion.stage("release", 1.713e-3), flash, motion.stage("hold", 9.559e-3), frequency=(48.899, 23.805, 124.89),
        number=3811, parts=parts,
    ))  # fmt: skip
    assert run.summary.numerics.energy_drift < 2e-4
    assert run.summary.end.velocity_mm_per_s[0] == pytest.approx(0, abs=1e-6)
