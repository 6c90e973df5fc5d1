"""The box as a part: its profile is the integral of a normal distribution (scipy.stats), its edge is 10 to 90 % wide."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import optimize

from reference import bruteforce
from trapsim.terms.box import Box
from trapsim.terms.part import About, gripped, walled

HEIGHT = 3e-30
SIZE = (40e-6, 24e-6, 30e-6)
CUBOID = Box(size=SIZE, height=HEIGHT, edge=1.5e-6)
TUBE = Box(shape="cylinder", axis="x", size=(40e-6, 24e-6, 24e-6), height=HEIGHT, edge=1.5e-6)
ZERO = np.zeros(1)


@pytest.mark.parametrize("box", [CUBOID, TUBE], ids=lambda b: b.shape)
@pytest.mark.parametrize("j", [0, 1, 2])
def test_half_the_height_is_met_at_half_the_size_and_the_edge_is_10_to_90_percent_wide(box: Box, j: int) -> None:
    def wall(u: float) -> float:
        place = [ZERO, ZERO, ZERO]
        place[j] = np.array([u])
        return float(np.squeeze(box.energy(*place))) / HEIGHT

    half = box.size[j] / 2
    assert wall(half) == pytest.approx(0.5, abs=1e-12)
    assert wall(-half) == pytest.approx(0.5, abs=1e-12)
    assert wall(0.0) == pytest.approx(0.0, abs=1e-12)
    inner, outer = (optimize.brentq(lambda u, s=s: wall(u) - s, half - 3e-6, half + 3e-6, xtol=1e-15) for s in (0.1, 0.9))
    assert outer - inner == pytest.approx(box.edge, rel=1e-9, abs=0)


def test_the_profile_is_the_integral_of_a_normal_distribution() -> None:
    x = np.linspace(-24e-6, 24e-6, 41)[:, None, None]
    y = np.linspace(-16e-6, 16e-6, 33)[None, :, None]
    z = np.linspace(-18e-6, 18e-6, 29)[None, None, :]
    # scipy.stats.norm, another road to the error function
    expected = bruteforce.cuboid((x, y, z), size=SIZE, height=HEIGHT, edge=1.5e-6)
    np.testing.assert_allclose(CUBOID.energy(x, y, z), expected, atol=1e-13 * HEIGHT)
    expected = bruteforce.cylinder((x, y, z), length=40e-6, diameter=24e-6, height=HEIGHT, edge=1.5e-6)
    np.testing.assert_allclose(TUBE.energy(x, y, z), expected, atol=1e-13 * HEIGHT)


@pytest.mark.parametrize("axis", ["x", "y", "z"])
def test_a_cylinder_is_round_about_its_axis(axis: str) -> None:
    j = "xyz".index(axis)
    size = [24e-6] * 3
    size[j] = 40e-6
    tube = Box(shape="cylinder", axis=axis, size=tuple(size), height=HEIGHT, edge=2e-6, centre=(1e-6, 2e-6, 3e-6))
    angle = np.linspace(0, 2 * np.pi, 13)
    place = [np.full(13, c) for c in tube.centre]
    first, second = (i for i in range(3) if i != j)
    place[first] = place[first] + 11e-6 * np.cos(angle)
    place[second] = place[second] + 11e-6 * np.sin(angle)
    energy = tube.energy(*place)
    np.testing.assert_allclose(energy, energy[0], rtol=1e-10)
    assert tube.symmetry().round_about == frozenset({j})
    assert tube.symmetry().even == tuple(About(c) for c in tube.centre)


def test_perfectly_reflecting_walls_leave_the_inside_alone() -> None:
    box = Box(size=SIZE, edge="hard")
    assert box.energy(np.linspace(-20e-6, 20e-6, 5), ZERO, ZERO) == 0.0
    assert box.walls == gripped([box]) == frozenset({0, 1, 2}) and walled([box]) == frozenset({0, 1, 2})
    assert CUBOID.walls == walled([CUBOID, TUBE]) == frozenset()
    assert box.finest() == np.inf and not np.any(box.steer((1e-6, 0, 0)))


def test_strength_multiplies_it_and_it_steers_nothing() -> None:
    place = (np.array([19e-6]), ZERO, ZERO)
    half = Box(size=SIZE, height=HEIGHT, edge=1.5e-6, strength=0.5)
    assert half.energy(*place) == pytest.approx(0.5 * CUBOID.energy(*place), rel=1e-14, abs=0)
    assert not np.any(CUBOID.steer((1e-6, 2e-6, 3e-6)))
    assert gripped([CUBOID]) == frozenset({0, 1, 2})
    assert gripped([Box(size=SIZE, height=HEIGHT, edge=1.5e-6, strength=0.0)]) == frozenset()
    assert CUBOID.finest() == 1.5e-6
