"""Parts of the potential: energy and steering agree, and both are the closed forms of mechanics.

Textbook mechanics (Landau and Lifshitz, Mechanics): V = m omega^2 x^2 / 2, V = -m a x.
"""

from __future__ import annotations

import dataclasses
import math

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from trapsim.terms.field import Gradient, Gravity
from trapsim.terms.harmonic import Harmonic
from trapsim.terms.part import ANYWHERE, NONE, Part

MASS = 1.4431608971788639e-25  # kg, Rb-87: 86.90918053 u
TWO_PI = 2 * math.pi
TRAP = Harmonic(frequency=(TWO_PI * 20, TWO_PI * 120, TWO_PI * 90), centre=(1e-6, -2e-6, 3e-6), strength=0.7, mass=MASS)
PUSH = Gradient(acceleration=(0.3, -0.2, 9.80665), strength=0.5, mass=MASS)

micrometres = st.floats(-50, 50).map(lambda um: um * 1e-6)
points = st.tuples(micrometres, micrometres, micrometres)


def test_the_trap_energy_is_half_m_omega_squared_x_squared():
    one = Harmonic(frequency=(TWO_PI * 20, 0.0, 0.0), mass=MASS)
    assert one.energy(10e-6, 5e-6, 5e-6) == pytest.approx(0.5 * MASS * (TWO_PI * 20 * 10e-6) ** 2, rel=1e-14, abs=0)
    assert one.energy(0.0, 1.0, 1.0) == 0.0


def test_gravity_falls_where_it_says_and_costs_m_g_h():
    assert Gravity().acceleration() == (0.0, 0.0, -9.80665)
    assert Gravity(direction="+x", value=1.6).acceleration() == (1.6, 0.0, 0.0)
    up = Gravity().part(MASS)
    assert up.energy(0.0, 0.0, 1e-3) == pytest.approx(MASS * 9.80665 * 1e-3, rel=1e-15, abs=0)
    assert up.force() == pytest.approx((0.0, 0.0, -MASS * 9.80665), rel=1e-15, abs=0)


def test_a_levitation_cancels_gravity_everywhere():
    lift = Gradient(acceleration=(0.0, 0.0, 9.80665), mass=MASS)
    assert lift.energy(1.0, 2.0, 3.0) + Gravity().part(MASS).energy(1.0, 2.0, 3.0) == 0.0


@pytest.mark.parametrize("part", [TRAP, PUSH], ids=lambda part: part.kind)
@given(here=points, there=points)
def test_force_and_curvature_give_the_whole_energy_difference(part, here, there):
    # for a potential that is exactly quadratic, Taylor's formula about any point ends after two terms
    force, curvature = part.steer(here)
    step = np.subtract(there, here)
    expected = -force @ step + 0.5 * curvature @ step**2
    scale = abs(part.energy(*here)) + abs(part.energy(*there)) + 1e-40
    assert part.energy(*there) - part.energy(*here) == pytest.approx(expected, abs=1e-12 * scale)


@pytest.mark.parametrize("part", [TRAP, PUSH], ids=lambda part: part.kind)
def test_energy_broadcasts_and_is_proportional_to_strength(part):
    x, y, z = np.ogrid[-1e-6:1e-6:3j, -1e-6:1e-6:4j, -1e-6:1e-6:5j]
    energy = part.energy(x, y, z)
    assert energy.shape == (3, 4, 5)
    assert energy[0, 0, 0] == pytest.approx(part.energy(-1e-6, -1e-6, -1e-6), rel=1e-15, abs=0)
    doubled = dataclasses.replace(part, strength=2 * part.strength)
    assert doubled.energy(x, y, z) == pytest.approx(2 * energy, rel=1e-14, abs=0)
    assert doubled.steer((0.0, 0.0, 0.0))[0] == pytest.approx(2 * part.steer((0.0, 0.0, 0.0))[0], rel=1e-14, abs=0)
    off = dataclasses.replace(part, strength=0.0)
    assert not np.any(off.energy(x, y, z)) and not np.any(off.steer((1e-6, 0.0, 0.0)))


def test_a_trap_equilibrium_sags_by_g_over_omega_squared():
    # g/omega^2 = 24.8 um at 100 Hz: closed form, also quoted in common practice
    trap = Harmonic(frequency=(TWO_PI * 100,) * 3, mass=MASS)
    sag = (0.0, 0.0, -9.80665 / (TWO_PI * 100) ** 2)
    assert sag[2] == pytest.approx(-24.84e-6, rel=1e-3, abs=0)
    total = trap.steer(sag)[0] + Gravity().part(MASS).force()
    assert total == pytest.approx(np.zeros(3), abs=1e-12 * MASS)


def test_a_trap_is_round_about_the_direction_whose_other_two_are_alike():
    def round_about(*hertz):
        return Harmonic(frequency=tuple(hertz), mass=MASS).symmetry().round_about

    assert round_about(20, 120, 120) == {0}
    assert round_about(20, 120, 20) == {1}
    assert round_about(20, 20, 120) == {2}
    assert round_about(20, 20, 20) == {0, 1, 2}
    assert round_about(20, 30, 40) == frozenset()


def test_quadratic_and_uniform_parts_are_even_about_any_point():
    for part in (TRAP, PUSH):
        assert part.symmetry().even == (ANYWHERE,) * 3
        assert math.isinf(part.finest())


def test_a_part_that_says_nothing_promises_nothing():
    silent = Part()
    assert silent.symmetry().even == (NONE,) * 3 and silent.symmetry().round_about == frozenset()
    assert not np.any(silent.steer((1.0, 2.0, 3.0)))
    with pytest.raises(TypeError, match="Part does not say its energy"):
        silent.energy(0.0, 0.0, 0.0)


def test_only_traps_confine():
    assert TRAP.confines and not PUSH.confines
