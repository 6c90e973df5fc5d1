"""The lattice as a part: period, recoil, symmetry, and how finely it must be sampled."""

from __future__ import annotations

from math import pi, sin

import numpy as np
import pytest
from scipy import special

import trapsim
from reference import units
from reference.planewaves import Recoil
from trapsim.terms.lattice import Lattice
from trapsim.terms.part import ANYWHERE, About, gripped, remainder

MASS = units.MASSES["Rb-87"]
LATTICE = Lattice(wavelength=1064e-9, depth=1e-30, phase=0.3, mass=MASS)
ZERO = np.zeros(1)


def test_two_beams_head_to_head_have_half_a_wavelength_between_minima() -> None:
    x = np.linspace(-1e-6, 1e-6, 41)
    np.testing.assert_allclose(LATTICE.energy(x + 532e-9, ZERO, ZERO), LATTICE.energy(x, ZERO, ZERO), atol=1e-43)
    assert LATTICE.finest() == 532e-9


def test_beams_at_an_angle_are_told_by_their_spacing_and_the_recoil_follows_it() -> None:
    angle = pi / 3
    spacing = 1064e-9 / (2 * sin(angle / 2))
    tilted = Lattice(spacing=spacing, depth=1e-30, mass=MASS)
    assert spacing == pytest.approx(1064e-9, rel=1e-12, abs=0)
    assert tilted.recoil_energy == pytest.approx(LATTICE.recoil_energy / 4, rel=1e-12, abs=0)
    assert tilted.recoil_energy == pytest.approx(Recoil(MASS, spacing).energy, rel=1e-12, abs=0)


@pytest.mark.parametrize("axis", ["x", "y", "z"])
def test_it_varies_along_its_axis_only(axis: str) -> None:
    part, j = Lattice(wavelength=1064e-9, depth=1e-30, axis=axis, phase=0.3, mass=MASS), "xyz".index(axis)
    place = [np.array([0.1e-6]), np.array([0.7e-6]), np.array([-0.4e-6])]
    other = [p if i == j else p + 1e-3 for i, p in enumerate(place)]
    assert part.energy(*other) == part.energy(*place)
    assert part.energy(*place) == pytest.approx(1e-30 * sin(pi * place[j][0] / 532e-9 + 0.3) ** 2, rel=1e-12, abs=0)
    symmetry = part.symmetry()
    assert symmetry.round_about == frozenset({j})
    assert gripped([part]) == frozenset({j})
    assert [e == ANYWHERE for e in symmetry.even] == [i != j for i in range(3)]
    about = symmetry.even[j]
    assert isinstance(about, About)
    # even about minima and maxima, a quarter of a wavelength apart
    for n in range(-3, 4):
        centre = about.x + n * about.period
        left, right = (part.energy(*[np.array([centre + s * 77e-9])] * 3) for s in (-1, 1))
        assert left == pytest.approx(right, rel=1e-9, abs=0)
    assert about.period == pytest.approx(266e-9, rel=1e-12, abs=0)


def test_the_nearest_minimum_is_one_and_is_near() -> None:
    for x in np.linspace(-2e-6, 2e-6, 17):
        there = LATTICE.nearest_minimum(float(x))
        assert abs(there - x) <= 266e-9 * (1 + 1e-12)
        assert LATTICE.energy(np.array([there]), ZERO, ZERO)[0] < 1e-46


def test_what_is_left_to_the_wave_function_is_all_of_it() -> None:
    x = np.linspace(-1e-6, 1e-6, 21)
    centre = (0.1e-6, 0.0, 0.0)
    expected = LATTICE.energy(x, ZERO, ZERO) - LATTICE.energy(np.array([0.1e-6]), ZERO, ZERO)
    np.testing.assert_allclose(remainder([LATTICE], centre, x, ZERO, ZERO), expected, atol=1e-44)


@pytest.mark.parametrize("s", [1.0, 5.0, 10.0, 20.0, 50.0, 200.0])
def test_enough_points_per_period_for_the_ground_state(s: float) -> None:
    """With n points a period the plane waves 0, 1 ... n/2 are there; the energy they give, against Mathieu's."""
    part = Lattice(wavelength=1064e-9, depth=s * LATTICE.recoil_energy, mass=MASS)
    n = part.points_per_period()
    x = np.arange(n) / n
    waves = np.fft.fftfreq(n, 1 / n)
    kinetic = np.fft.ifft(((2 * waves) ** 2)[:, None] * np.fft.fft(np.eye(n), axis=0), axis=0).real
    lowest = np.linalg.eigvalsh(kinetic + np.diag(s * np.sin(pi * x) ** 2))[0]
    # scipy's Mathieu characteristic value
    assert lowest == pytest.approx(special.mathieu_a(0, s / 4) + s / 2, abs=1e-6)
    assert n <= 2 * np.ceil(10 + np.sqrt(s))


def test_how_fast_it_changes_for_an_atom_that_flies_past() -> None:
    moving = Lattice(wavelength=1064e-9, depth=1e-30, detuning=2 * pi * 5e3, mass=MASS)
    # an atom at 0.2 m/s meets sites of 532 nm at 376 kHz
    assert LATTICE.rate(np.array([0.2, 0.0, 0.0])) == pytest.approx(2 * pi * 0.2 / 532e-9, rel=1e-12, abs=0)
    assert moving.rate(np.zeros(3)) == pytest.approx(2 * pi * 5e3, rel=1e-12, abs=0)


@pytest.mark.parametrize(
    "written", ['"1064"', '"1064 mn"', "1064", '"x nm"', '["1064 nm"]', "true", '""', "{}", '"1e999 nm"']
)
@pytest.mark.parametrize("entry", ["wavelength", "spacing"])
def test_a_wavelength_that_cannot_be_read_is_complained_of_in_words(entry: str, written: str) -> None:
    text = (
        '[atoms]\nspecies = "Rb-87"\nnumber = 1e4\n'
        f'[trap.light]\nkind = "lattice"\ndepth = "12 Er"\n{entry} = {written}\n'
    )
    with pytest.raises(trapsim.PlanError, match=rf"trap\.light\.{entry}"):
        trapsim.plan_from_text(text, "slip")
