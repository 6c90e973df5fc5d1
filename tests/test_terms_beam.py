"""The beam as a part: the Gaussian profile, its expansion, depth from power, and how it holds against gravity.

R. Grimm, M. Weidemueller and Y. B. Ovchinnikov, Adv. At. Mol. Opt. Phys. 42, 95 (2000), for profile and depth.
"""

from __future__ import annotations

from math import pi, sqrt

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import constants, optimize
from scipy.constants import Boltzmann

from reference import units
from trapsim.prepare.rest import equilibrium
from trapsim.terms.beam import Beam
from trapsim.terms.field import Gravity
from trapsim.terms.part import About, remainder

MASS, G = units.MASSES["Rb-87"], 9.80665
MICROKELVIN = 1e-6 * Boltzmann
WAIST, WAVELENGTH = 50e-6, 1064e-9
#: the depth at which a horizontal beam just holds rubidium against gravity, m g w sqrt(e)/2
LEAST = MASS * G * WAIST * sqrt(np.e) / 2


def beam(depth: float, **more: object) -> Beam:
    return Beam(**{"direction": "x", "waist": WAIST, "wavelength": WAVELENGTH, "depth": depth, **more})


def test_the_waist_is_where_the_intensity_is_one_over_e_squared() -> None:
    one = beam(MICROKELVIN)
    assert one.energy(0.0, 0.0, 0.0) == -MICROKELVIN
    assert one.energy(0.0, WAIST, 0.0) == pytest.approx(-MICROKELVIN * np.exp(-2), rel=1e-10, abs=0)
    # a Rayleigh range along the beam the peak is halved and the waist is sqrt(2) larger
    rayleigh = pi * WAIST**2 / WAVELENGTH
    assert one.energy(rayleigh, 0.0, 0.0) == pytest.approx(-MICROKELVIN / 2, rel=1e-10, abs=0)
    assert one.energy(rayleigh, 0.0, sqrt(2) * WAIST) == pytest.approx(-MICROKELVIN / 2 * np.exp(-2), rel=1e-10, abs=0)


@pytest.mark.parametrize("direction", ["x", "y", "z", (1.0, 1.0, 0.0), (1.0, -2.0, 3.0)])
def test_light_goes_where_its_direction_says(direction: object) -> None:
    along = np.eye(3)["xyz".index(direction)] if isinstance(direction, str) else np.array(direction)
    along = along / np.linalg.norm(along)
    focus = np.array([1e-6, -2e-6, 3e-6])
    one = beam(MICROKELVIN, direction=direction, focus=tuple(focus))
    across = np.cross(along, [0.3, 0.5, -0.7])
    across *= WAIST / np.linalg.norm(across)
    assert one.energy(*(focus + 0.1e-3 * along)) == pytest.approx(one.energy(*(focus - 0.1e-3 * along)), rel=1e-12, abs=0)
    assert one.energy(*(focus + across)) == pytest.approx(-MICROKELVIN * np.exp(-2), rel=1e-12, abs=0)


def test_trap_frequencies_are_those_of_the_harmonic_expansion() -> None:
    one = beam(30 * MICROKELVIN)
    force, curvature = one.steer((0.0, 0.0, 0.0))
    assert not force.any()
    rayleigh = pi * WAIST**2 / WAVELENGTH
    # Grimm et al.: omega_r^2 = 4 U/(m w^2), omega_z^2 = 2 U/(m z_R^2)
    assert curvature[1:] == pytest.approx([4 * 30 * MICROKELVIN / WAIST**2] * 2, rel=1e-12, abs=0)
    assert curvature[0] == pytest.approx(2 * 30 * MICROKELVIN / rayleigh**2, rel=1e-12, abs=0)


#: m along the beam and across it, from the focus
places = st.tuples(st.floats(-9e-3, 9e-3), st.floats(-60e-6, 60e-6), st.floats(-60e-6, 60e-6))


@pytest.mark.parametrize("direction", ["x", (1.0, 1.0, 0.0), (1.0, -2.0, 3.0)])
@given(place=places)
def test_force_and_curvature_are_the_derivatives_of_the_energy(direction: object, place: tuple[float, ...]) -> None:
    one = beam(30 * MICROKELVIN, direction=direction, focus=(1e-6, 2e-6, -3e-6))
    along = one.along()
    aside = np.cross(along, [0.36, 0.48, 0.8])
    aside /= np.linalg.norm(aside)
    place = np.array(one.focus) + place[0] * along + place[1] * aside + place[2] * np.cross(along, aside)
    force, curvature = one.steer(tuple(place))
    h = 1e-6
    for j in range(3):
        step = np.zeros(3)
        step[j] = h
        # differences of fourth order
        f = [one.energy(*(place + n * step)) for n in (-2, -1, 0, 1, 2)]
        slope = (f[0] - 8 * f[1] + 8 * f[3] - f[4]) / (12 * h)
        bend = (-f[0] + 16 * f[1] - 30 * f[2] + 16 * f[3] - f[4]) / (12 * h**2)
        assert -force[j] == pytest.approx(slope, abs=1e-6 * 30 * MICROKELVIN / WAIST)
        assert curvature[j] == pytest.approx(bend, abs=1e-5 * 30 * MICROKELVIN / WAIST**2)


def test_what_is_left_has_neither_slope_nor_curvature_at_the_centre() -> None:
    one = beam(30 * MICROKELVIN)
    centre = (0.0, 0.0, -10e-6)
    for j in range(3):
        place = [np.full(3, c) for c in centre]
        place[j] = place[j] + np.array([-1e-7, 0.0, 1e-7])
        low, middle, high = remainder([one], centre, *place)
        assert abs(middle) < 1e-12 * MICROKELVIN
        # of third order
        assert max(abs(low), abs(high)) < 10 * 30 * MICROKELVIN * (1e-7 / WAIST) ** 3


def test_the_depth_of_one_watt() -> None:
    one = Beam(
        direction="x", waist=1e-6, wavelength=WAVELENGTH, power=1.0,
        polarisability=687.3 * constants.physical_constants["atomic unit of electric polarizability"][0],
    )  # fmt: skip
    # 9.84e4 uK um^2/W for rubidium at 1064 nm with 687.3 atomic units (independent calculation)
    assert one.full_depth / MICROKELVIN == pytest.approx(9.84e4, rel=5e-4)


def test_the_power_that_just_holds_rubidium_and_its_radial_frequency() -> None:
    unit = constants.physical_constants["atomic unit of electric polarizability"][0]
    one = Beam(direction="x", waist=WAIST, wavelength=WAVELENGTH, power=0.107, polarisability=687.3 * unit)
    # 107 mW and 4.23 uK (independent calculation); f_r = 9.77e5 sqrt(P)/w^2 Hz, P in W and w in um
    assert one.full_depth / MICROKELVIN == pytest.approx(4.23, rel=5e-3)
    omega = sqrt(one.steer((0.0, 0.0, 0.0))[1][1] / MASS)
    assert omega / (2 * pi) == pytest.approx(9.77e5 * sqrt(0.107) / 50**2, rel=1e-3)


def test_a_horizontal_beam_of_50_um_needs_4_23_microkelvin() -> None:
    # the steepest slope of the profile, at half a waist, is 2 U/(w sqrt(e)); independent calculation
    least = LEAST / MICROKELVIN
    assert least == pytest.approx(4.23, abs=5e-3)
    pull = Gravity().part(MASS)
    for share, holds in ((0.999, False), (1.001, True)):
        z = np.linspace(-WAIST, 0.0, 4001)
        slope = np.gradient(beam(share * LEAST).energy(0.0, 0.0, z) + pull.energy(0.0, 0.0, z), z)
        assert bool(slope.min() < 0) is holds


def test_a_beam_a_quarter_deeper_than_that_sags_and_softens_as_worked_out() -> None:
    one, pull = beam(1.25 * LEAST), Gravity().part(MASS)
    nominal = sqrt(4 * 1.25 * LEAST / (MASS * WAIST**2))
    place = equilibrium((one, pull))
    _, curvature = one.steer(tuple(place))
    along = np.sqrt(curvature / MASS) / nominal
    # independent calculation: sag 14.3 um (12.1 by g/omega^2), f_z 0.76 and f_h 0.92 of nominal, 0.39 uK left
    assert -1e6 * place[2] == pytest.approx(14.3, abs=0.05)
    assert 1e6 * G / nominal**2 == pytest.approx(12.1, abs=0.05)
    assert (along[2], along[1]) == pytest.approx((0.76, 0.92), abs=5e-3)

    def height(z: float) -> float:
        return float(one.energy(0.0, 0.0, z) + pull.energy(0.0, 0.0, z))

    rim = optimize.minimize_scalar(lambda z: -height(z), bounds=(-60e-6, -26e-6), method="bounded").x
    assert (height(rim) - height(place[2])) / MICROKELVIN == pytest.approx(0.39, abs=6e-3)


def test_symmetry_of_beams_along_the_axes_and_across_them() -> None:
    straight = beam(MICROKELVIN, direction="y", focus=(1e-6, 2e-6, 3e-6)).symmetry()
    assert straight.even == (About(1e-6), About(2e-6), About(3e-6)) and straight.round_about == frozenset({1})
    assert beam(MICROKELVIN, direction=(1.0, 1.0, 0.0)).symmetry().round_about == frozenset()
    assert beam(MICROKELVIN, direction=(1.0, 1.0, 0.0)).symmetry().even[0] == "none"
