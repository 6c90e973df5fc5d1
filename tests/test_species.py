"""The atoms: masses against an independent table, scattering lengths against the publications."""

from __future__ import annotations

import periodictable
import pytest

from trapsim.species import SPECIES, Atoms, find, nearest

ATOMIC_MASS = 1.66053906892e-27  # kg, CODATA 2022
BOHR_RADIUS = 5.29177210544e-11  # m, CODATA 2022


@pytest.mark.parametrize("name", SPECIES)
def test_masses_agree_with_the_periodictable_package(name):
    # periodictable ships the isotope masses of the atomic mass evaluation
    element, number = name.split("-")
    expected = getattr(periodictable, element)[int(number)].mass * ATOMIC_MASS
    assert SPECIES[name].mass == pytest.approx(expected, rel=2e-8, abs=0)


@pytest.mark.parametrize(("name", "length_a0", "sigma_a0"), [
    ("Rb-87", 100.4, 0.1),  # van Kempen et al., PRL 88, 093201 (2002), value from memory
    ("Na-23", 54.54, 0.20),  # Knoop et al., PRA 83, 042704 (2011), value from memory
    ("K-41", 60.5, 0.1),  # Falke et al., PRA 78, 012503 (2008), value from memory
    ("Sr-84", 123.0, 1.0),  # Stein et al. (2010), value from memory
    ("Sr-88", -1.4, 0.6),  # Martinez de Escobar et al., PRA 78, 062708 (2008), abstract
    ("Yb-174", 5.55e-9 / BOHR_RADIUS, 0.08e-9 / BOHR_RADIUS),  # Kitagawa et al., PRA 77, 012719 (2008), abstract
])
def test_scattering_lengths_are_the_published_ones(name, length_a0, sigma_a0):
    assert SPECIES[name].scattering_length / BOHR_RADIUS == pytest.approx(length_a0, abs=0.1 * sigma_a0)


def test_probe_lines_are_where_the_alkali_d2_lines_are():
    # 780.24, 589.16, 766.70, 852.35 nm: common practice, no source
    for name, line in {"Rb-87": 780.24, "Na-23": 589.16, "K-39": 766.70, "Cs-133": 852.35}.items():
        assert SPECIES[name].probe_wavelength == pytest.approx(line * 1e-9, rel=1e-5, abs=0)


def test_every_row_says_where_it_comes_from():
    for species in SPECIES.values():
        assert "mass: " in species.source and "line: " in species.source
        assert (species.scattering_length is None) == any(
            words in species.source for words in ("field dependent", "fermion", "values differ")
        )


@pytest.mark.parametrize("name", ["Rb-87", "Rb87", "87Rb", "rb-87", " Rb 87 "])
def test_people_write_isotopes_in_several_ways(name):
    assert find(name) is SPECIES["Rb-87"]


@pytest.mark.parametrize("name", ["Rb-88", "rubidium", "", "87", "Rb-87-1"])
def test_a_strange_isotope_is_not_found(name):
    assert find(name) is None


def test_the_nearest_isotope_is_of_the_same_element():
    assert nearest("Rb-88") == "Rb-87"
    assert nearest("Yb-171") == "Yb-174"
    assert nearest("unobtainium") == ""


def test_atoms_take_from_the_species_what_is_not_given():
    atoms, complaints = Atoms(species="87Rb", number=1e5).settled()
    assert complaints == []
    assert atoms.species == "Rb-87"
    assert atoms.mass == SPECIES["Rb-87"].mass
    assert atoms.scattering_length == SPECIES["Rb-87"].scattering_length


def test_what_is_given_wins_over_the_species():
    atoms, _ = Atoms(species="Rb-87", number=1e5, scattering_length=0.0).settled()
    assert atoms.scattering_length == 0.0
    atoms, _ = Atoms(mass=1e-25, number=1e5, scattering_length=1e-9).settled()
    assert (atoms.species, atoms.mass, atoms.scattering_length) == (None, 1e-25, 1e-9)


@pytest.mark.parametrize(("given", "place", "way_out"), [
    ({"species": "Rb-88"}, "atoms.species", "Rb-87"),
    ({}, "atoms", "mass"),
    ({"species": "Li-7"}, "atoms.scattering_length", "0 a0"),
    ({"mass": 1e-25}, "atoms.scattering_length", "0 a0"),
    ({"species": "Rb-87", "mass": 1.41e-25}, "atoms.mass", "leave the mass out"),
])
def test_atoms_that_cannot_be_settled_say_the_way_out(given, place, way_out):
    _, complaints = Atoms(number=1e5, **given).settled()
    assert [c.place for c in complaints] == [place]
    assert way_out in complaints[0].way_out
