"""Clouds that live in a lattice: ground states, bands, Bloch oscillations, tunnelling between bands, sudden release.

The bands are those of Mathieu's equation, and of plane waves diagonalised (reference/bands.py).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from math import pi, sqrt

import numpy as np
import pytest
from scipy import interpolate, special
from scipy.constants import h, hbar

import light
import motion
import trapsim
from light import RECOIL, SPACING
from reference import bands, planewaves
from trapsim.prepare.setup import prepare
from trapsim.terms.lattice import Lattice

Solved = Callable[[trapsim.Plan], trapsim.Run]
Array = np.ndarray

#: Hz, across the lattice
ACROSS = 50.0


def ideal(*stages: str, s: float, strength: float = 1, sites: int = 1, **more: str) -> trapsim.Plan:
    """A uniform ideal gas in a lattice that is on from the start."""
    return light.plane_wave(*stages, parts=light.lattice(s, strength=strength), sites=sites, **more)


# ---- the reference itself ------------------------------------------------------------------------------------------


@pytest.mark.parametrize(("s", "bottom", "top", "hopping"), bands.ROWS)
def test_the_bands_by_plane_waves_are_mathieus(s: float, bottom: float, top: float, hopping: float) -> None:
    lowest, highest = bands.bloch(s)[0], bands.bloch(s, 1.0)[0]
    # scipy's Mathieu characteristic values, an independent implementation: a_0(s/4) + s/2 and b_1(s/4) + s/2
    assert lowest == pytest.approx(special.mathieu_a(0, s / 4) + s / 2, abs=1e-8)
    assert highest == pytest.approx(special.mathieu_b(1, s / 4) + s / 2, abs=1e-8)
    # I. Bloch, J. Dalibard and W. Zwerger, Rev. Mod. Phys. 80, 885 (2008), and independent calculation
    assert (lowest, highest) == pytest.approx((bottom, top), abs=6e-9)
    assert bands.hopping(s) == pytest.approx(hopping, abs=6e-9)


@pytest.mark.parametrize(("s", "alpha", "left_behind"), bands.PASSAGES)
def test_one_period_of_force_leaves_behind_what_is_printed(s: float, alpha: float, left_behind: float) -> None:
    after = bands.driven(s, alpha, 2 * pi / alpha)
    # independent calculation; Landau and Zener's formula is close to it, and a constant off in its exponent is not
    assert 1 - bands.lowest_share(after, s, 2.0) == pytest.approx(left_behind, abs=6e-6)
    assert bands.landau_zener(s, alpha) == pytest.approx(left_behind, rel=0.09)


# ---- ground states -------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("s", [1.0, 5.0, 10.0, 15.0, 20.0, 40.0, 80.0])
@pytest.mark.parametrize("accuracy", ["normal", "fine"])
def test_the_ground_state_has_the_energy_of_the_bands_bottom(solved: Solved, s: float, accuracy: str) -> None:
    ground = solved(ideal(s=s, sites=2, accuracy=accuracy)).summary.ground
    # the two directions across are oscillators of ACROSS each, half a quantum per direction
    energy = (ground.energy_hz - ACROSS) * h / RECOIL.energy
    # Mathieu's characteristic value, scipy
    assert energy == pytest.approx(special.mathieu_a(0, s / 4) + s / 2, abs=1e-6)
    assert ground.chemical_potential_hz == pytest.approx(ground.energy_hz, rel=1e-12)


@pytest.mark.parametrize("s", [2.0, 10.0, 30.0])
def test_the_ground_state_is_the_bloch_state_at_rest(s: float) -> None:
    found = light.amplitudes(motion.begin(prepare(ideal(s=s, sites=2, accuracy="fine"))).cloud)
    # plane waves, diagonalised
    assert bands.lowest_share(found, s, 0.0) == pytest.approx(1.0, abs=1e-8)


# ---- the band ------------------------------------------------------------------------------------------------------


def in_band(solved: Solved, s: float, p: float) -> tuple[float, float]:
    """Energy (E_R) and velocity (recoils) of a gas that was set moving at p recoils before the lattice came up slowly."""
    run = solved(light.plane_wave(
        motion.stage("kick", velocity=f'["{p * RECOIL.velocity!r} m/s", "0 m/s", "0 m/s"]'),
        motion.stage("ramp", 50 * RECOIL.time, shape='"smooth"', to=f'{{ "light.depth" = "{s} Er" }}'),
        parts=light.lattice(0, strength=1), sites=10,
    ))  # fmt: skip
    axes = run.final.axes
    along = next(i for i, axis in enumerate(axes) if axis.covers == (0,))
    line = np.moveaxis(np.abs(run.final.values) ** 2, along, 0) @ axes[1 - along].weights
    x = axes[along].points
    potential = s * float(line @ np.sin(RECOIL.k * x) ** 2) / line.sum()
    track = run.track
    kinetic = (track["kinetic"][-1][0] + track["centre_kinetic"][-1]) / RECOIL.energy
    return kinetic + potential, track["velocity"][-1][0] / RECOIL.velocity


@pytest.mark.slow
def test_hopping_between_sites_from_the_band_itself(solved: Solved) -> None:
    """E(p) at four quasi-momenta, halfway between those that would not tell it from a constant."""
    s = 4.0
    energies, p = [], np.array([0.2, 0.4, 0.6, 0.8])
    for one in p:
        energy, velocity = in_band(solved, s, float(one))
        assert energy == pytest.approx(bands.bloch(s, one)[0], abs=2e-4)
        # near the zone's edge the gap is small while the lattice comes up, and some atoms stay in motion
        assert velocity == pytest.approx(bands.velocity(s, one), abs=1e-2)
        energies.append(energy)
    # at rest, and nothing else is needed but the symmetric band: E = E0 - 2 J cos(pi p) - 2 J2 cos(2 pi p) - ...
    energies.insert(0, (solved(ideal(s=s, sites=2)).summary.ground.energy_hz - ACROSS) * h / RECOIL.energy)
    waves = np.cos(pi * np.outer([0.0, *p], np.arange(5)))
    hopping = -np.linalg.solve(waves, energies)[1] / 2
    # plane waves, diagonalised
    assert hopping == pytest.approx(bands.hopping(s), abs=2e-4)


# ---- forces --------------------------------------------------------------------------------------------------------


@pytest.mark.slow
@pytest.mark.parametrize(("s", "alpha", "left_behind"), bands.PASSAGES)
def test_a_lattice_that_speeds_up_leaves_atoms_behind(s: float, alpha: float, left_behind: float) -> None:
    """In its own frame it drives the atoms once through the zone; Landau and Zener say how many change bands."""
    period = 2 * pi / alpha * RECOIL.time
    # two recoils of velocity in one Bloch period, towards plus
    ramp = motion.stage("ramp", period, shape='"linear"', to=f'{{ "light.detuning" = "{8 * RECOIL.hertz!r} Hz" }}')
    setup = prepare(ideal(ramp, s=s))
    cloud = motion.play(setup, motion.begin(setup))[-1].state.cloud
    (lattice,) = (p for p in setup.legs[-1].interval.parts_at(period) if isinstance(p, Lattice))
    minimum = -(lattice.phase + lattice.travel) / RECOIL.k
    # seen from the lattice the waves of the lab are slower by two recoils, and count from its minimum
    orders = np.arange(-planewaves.KEPT, planewaves.KEPT + 1)
    seen = light.amplitudes(cloud) * np.exp(2j * RECOIL.k * minimum * orders)
    # independent calculation
    assert 1 - bands.lowest_share(seen, s, -2.0) == pytest.approx(left_behind, abs=1e-3)
    driven = bands.driven(s, -alpha, 2 * pi / alpha)
    assert np.abs(np.abs(seen) ** 2 - np.abs(driven) ** 2).max() < 1.2e-3


def pulled(s: float, alpha: float, periods: float, *, weak: float = 2.0, switch: float = 1e-6) -> trapsim.Plan:
    """A narrow cloud in a lattice whose trap is exchanged for a uniform force, alpha E_R per site."""
    acceleration = alpha * RECOIL.energy / (SPACING * motion.RB)
    push = (
        f'[trap.push]\nkind = "gradient"\nstrength = 0\n'
        f'acceleration = ["{acceleration!r} m/s^2", "0 m/s^2", "0 m/s^2"]\n'
    )
    period = 2 * pi / alpha * RECOIL.time
    return motion.cloud(
        motion.stage("ramp", switch, shape='"smooth"', to='{ "push.strength" = 1, "dipole.strength" = 0 }'),
        motion.stage("hold", periods * period - switch / 2), motion.stage("release", 1e-6),
        frequency=(weak, 50, 50), a="0 a0", parts=light.lattice(s, strength=1) + push,
    )  # fmt: skip


def spread(s: float, weak: float) -> Array:
    """Quasi-momenta (k) and weights of the ideal ground state of a weak trap in a lattice: heavier atoms, m*."""
    small = 0.01
    curved = bands.bloch(s, small)[0] - 2 * bands.bloch(s)[0] + bands.bloch(s, -small)[0]
    mass = motion.RB * 2 * small**2 / curved
    x, w = np.polynomial.hermite_e.hermegauss(5)
    # m* omega: the trap pulls with m omega^2, so the oscillation is slower by sqrt(m/m*)
    sigma = sqrt(sqrt(motion.RB * mass) * 2 * pi * weak / (2 * hbar)) / RECOIL.k
    return np.array([sigma * x, w / w.sum()])


def averaged(s: float, alpha: float, tau: float, weak: float = 2.0) -> Array:
    """Populations of the orders after a force alpha for tau, for the spread of a weakly trapped cloud."""
    return sum(w * np.abs(bands.driven(s, alpha, tau, p)) ** 2 for p, w in spread(s, weak).T)


@pytest.mark.slow
@pytest.mark.parametrize("periods", [1.0, pytest.param(0.8, marks=pytest.mark.slow)])
def test_a_cloud_under_a_force_oscillates_with_blochs_period(solved: Solved, periods: float) -> None:
    s, alpha = 4.0, 0.6
    run = solved(pulled(s, alpha, periods))
    exact = averaged(s, alpha, 2 * pi / alpha * periods)
    # the force has moved every wave by 2 periods recoils; bins are about whole orders in the lab
    orders = light.orders(run)
    shift = 1
    for n in range(-2, 3):
        assert orders.get(str(n), 0.0) == pytest.approx(exact[planewaves.KEPT + n - shift], abs=1.5e-3)
    track = run.track
    for share in (0.15, 0.3, 0.5, 0.7):
        i = int(np.abs(track.time - share * 2 * pi / alpha * RECOIL.time).argmin())
        tau = (track.time[i] - 0.5e-6) / RECOIL.time
        waves = alpha * tau / pi + 2 * np.arange(-planewaves.KEPT, planewaves.KEPT + 1)
        mean = averaged(s, alpha, tau) @ waves
        assert track["velocity"][i, 0] / RECOIL.velocity == pytest.approx(mean, abs=4e-3)


@pytest.mark.slow
def test_blochs_period_is_that_of_one_site(solved: Solved) -> None:
    """Atoms that their weight pulls along a lattice of 1064 nm turn round after half a period and after a whole one."""
    weight = motion.RB * 9.80665 * SPACING / RECOIL.energy
    # it comes up slowly, which does half as much as if it were all there at once
    switch = 0.4e-3
    track = solved(pulled(5.0, weight, 1.1, switch=switch)).track
    times, velocity = track.time - switch / 2, track["velocity"][:, 0]
    # M. Ben Dahan et al., Phys. Rev. Lett. 76, 4508 (1996): T = h/(F d), twice that if d were a wavelength; for its weight
    # 0.88005 ms (independent calculation)
    period = 0.88005e-3
    assert h / (motion.RB * 9.80665 * SPACING) == pytest.approx(period, rel=1e-5, abs=0)
    for share, sign in ((0.5, -1), (1.0, 1)):
        near = np.nonzero(np.abs(times - share * period) < 0.1 * period)[0]
        # the weight turns them round at the zone's edge, from plus to minus, and the other way at its middle
        line = interpolate.CubicSpline(times[near], velocity[near])
        (turn,) = line.roots(extrapolate=False)
        assert turn == pytest.approx(share * period, rel=1e-3, abs=0)
        assert np.sign(line(turn, 1)) == sign


# ---- release -------------------------------------------------------------------------------------------------------


@pytest.mark.slow
@pytest.mark.parametrize(("s", "number", "a"), [(5.0, 1e3, "0 a0"), (7.0, 300, "100.4 a0")])
def test_a_slowly_loaded_cloud_released_at_once_shows_its_bloch_state(
    solved: Solved, s: float, number: float, a: str
) -> None:
    run = solved(motion.cloud(
        motion.stage("ramp", 2e-3, shape='"smooth"', to=f'{{ "light.depth" = "{s} Er" }}'), motion.stage("release", 1e-3),
        frequency=(2, 30, 30), a=a, number=number, parts=light.lattice(0, strength=1),
    ))  # fmt: skip
    # plane waves, diagonalised
    assert light.off(light.orders(run), bands.populations(s)) < 1e-3


@pytest.mark.slow
@pytest.mark.parametrize(
    ("s", "microseconds", "number", "frequency"), [(15, 45, 1e4, (20, 100, 100)), (16, 45, 1e4, (20, 100, 100))]
)
def test_dense_clouds_fly_out_of_a_strong_flash_within_their_grid(
    solved: Solved, s: float, microseconds: float, number: float, frequency: Sequence[float]
) -> None:
    tau = 1e-6 * microseconds / RECOIL.time
    run = solved(motion.cloud(
        motion.stage("release", 1e-4), light.pulse(tau), motion.stage("hold", 12e-3), frequency=frequency, number=number,
        parts=light.lattice(s),
    ))  # fmt: skip
    # the matrix of orders; the mean field moves some atoms about afterwards
    assert light.off(light.orders(run, 1), planewaves.pulsed(s, tau)) < 0.01
    assert sum(light.orders(run).values()) == pytest.approx(1, abs=1e-3)


@pytest.mark.slow
@pytest.mark.parametrize(
    ("s", "number", "frequency"), [(10.0, 5e3, (8, 50, 50)), (5.0, 2e4, (20, 100, 100)), (20.0, 2e3, (20, 40, 40))]
)
def test_dense_clouds_fly_out_of_a_lattice_within_their_grid(
    solved: Solved, s: float, number: float, frequency: Sequence[float]
) -> None:
    run = solved(motion.cloud(
        motion.stage("ramp", 2e-3, shape='"smooth"', to=f'{{ "light.depth" = "{s} Er" }}'), motion.stage("release", 15e-3),
        frequency=frequency, number=number, parts=light.lattice(0, strength=1),
    ))  # fmt: skip
    orders = light.orders(run)
    # the mean field softens the lattice a little; without it plane waves, diagonalised
    assert light.off(orders, bands.populations(s)) < 0.01
    assert sum(orders.values()) == pytest.approx(1, abs=1e-4)
    assert run.summary.numerics.norm_drift == pytest.approx(0, abs=1e-3)
