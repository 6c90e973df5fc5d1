"""The independent solvers of tests/reference reproduce published figures, remembered tables and exact laws.

Nothing here touches the program: this file makes sure that the yardstick is straight.
"""

from __future__ import annotations

from math import pi, sqrt
from pathlib import Path

import pytest
from scipy.constants import atomic_mass, h, k

from reference import anisotropic, flights, modes, newton, stationary, tables, units

HERE = Path(__file__).parent / "reference"
RB = units.MASSES["Rb-87"]
A_RB = 100.4 * units.A0


def half_unit(digits: int) -> float:
    """Half a unit of the last decimal, and a little for a printed 5."""
    return 0.5001 * 10.0**-digits


def test_the_yardstick_does_not_use_what_it_measures() -> None:
    for file in [*HERE.glob("*.py")]:
        text = file.read_text()
        assert "trapsim" not in text, file.name
        # one plain grid in the lab is kept on purpose, for what no other method reaches
        assert "fft" not in text.lower() or file.name == "bruteforce.py", file.name


# ---- ground states -------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("row", tables.ISOTROPIC_PUBLISHED, ids=lambda r: f"{r.beta:g}")
def test_isotropic_chemical_potentials_of_bao_and_tang(row: tables.Published) -> None:
    # Bao & Tang, J. Comput. Phys. 187, 230 (2003), value from memory. They cut or round the last digit: one whole unit.
    assert stationary.isotropic(3, row.beta).mu == pytest.approx(row.mu, abs=1.01 * 10.0**-row.digits)


@pytest.mark.parametrize("row", tables.ISOTROPIC, ids=lambda r: f"{r.beta:g}")
def test_isotropic_ground_states(row: tables.Isotropic) -> None:
    s = stationary.isotropic(3, row.beta)
    # Independent calculation: Chebyshev collocation with other node counts, all printed digits.
    for name in ("mu", "energy", "kinetic", "potential", "interaction", "width"):
        assert getattr(s, name) == pytest.approx(getattr(row, name), abs=1.1e-8), name
    assert s.peak_density == pytest.approx(row.peak_density, rel=1e-8)
    # Virial theorem and mu = E + E_int, exact.
    assert 2 * s.kinetic - 2 * s.potential + 3 * s.interaction == pytest.approx(0, abs=1e-9)
    assert s.mu == pytest.approx(s.energy + s.interaction, abs=1e-9)


@pytest.mark.parametrize("row", tables.ATTRACTIVE, ids=lambda r: f"{r.na:g}")
def test_attractive_ground_states(row: tables.Attractive) -> None:
    s = stationary.isotropic(3, -4 * pi * row.na)
    # Independent calculation: Chebyshev collocation with other node counts, all printed digits.
    for name in ("mu", "energy", "kinetic", "potential", "interaction", "width"):
        assert getattr(s, name) == pytest.approx(getattr(row, name), abs=1.1e-8), name
    assert s.peak_density == pytest.approx(row.peak_density, rel=1e-8)


@pytest.mark.parametrize("row", tables.LINE_PUBLISHED, ids=lambda r: f"{r.beta:g}")
def test_chemical_potentials_on_a_line_of_bao_and_tang(row: tables.Published) -> None:
    # Bao & Tang, J. Comput. Phys. 187, 230 (2003), value from memory. They cut or round the last digit: one whole unit.
    assert stationary.isotropic(1, row.beta).mu == pytest.approx(row.mu, abs=1.01 * 10.0**-row.digits)


@pytest.mark.parametrize(
    ("dimension", "row"),
    [*((1, r) for r in tables.LINE), *((2, r) for r in tables.PLANE)],
    ids=lambda v: f"{v.beta:g}" if isinstance(v, tables.LowDimension) else f"{v}d",
)
def test_ground_states_in_one_and_two_dimensions(dimension: int, row: tables.LowDimension) -> None:
    s = stationary.isotropic(dimension, row.beta)
    # Independent calculation: collocation with other node counts (line), Laguerre functions (plane).
    for name in ("mu", "energy", "kinetic", "interaction", "width"):
        assert getattr(s, name) == pytest.approx(getattr(row, name), abs=1.1e-8), name
    # One tabulated peak (line, -5) is not converged in its last digit.
    assert s.peak_density == pytest.approx(row.peak_density, abs=1.3e-7 if row.beta == -5 else 1.1e-8)


@pytest.mark.parametrize("row", tables.ROUND_PUBLISHED, ids=lambda r: f"{r.number}")
def test_round_trap_of_dalfovo_and_stringari(row: tables.RoundPublished) -> None:
    s = anisotropic.round_trap(tables.ROUND_LAM, 4 * pi * tables.ROUND_A * row.number)
    # Dalfovo & Stringari, PRA 53, 2477 (1996), Table I, value from memory, to the printed digits.
    assert s.mu == pytest.approx(row.mu, abs=half_unit(row.digits))
    assert s.energy == pytest.approx(row.energy, abs=half_unit(2))


@pytest.mark.parametrize("row", tables.ROUND, ids=lambda r: f"{r.number}")
def test_round_trap_in_all_figures(row: tables.Round) -> None:
    s = anisotropic.round_trap(tables.ROUND_LAM, 4 * pi * tables.ROUND_A * row.number)
    # Independent calculation: oscillator functions, two basis sizes agreed to 2e-6.
    found = (s.mu, s.energy, sum(s.kinetic), sum(s.potential), s.interaction, *s.widths)
    assert found == pytest.approx(row[1:-1], abs=3e-6)
    # Virial theorem, direction by direction (x and y are two of them), exact.
    for alike, kinetic, potential in zip((2, 1), s.kinetic, s.potential, strict=True):
        assert 2 * kinetic - 2 * potential + alike * s.interaction == pytest.approx(0, abs=1e-5)


def test_the_two_discretisations_agree() -> None:
    one, two = stationary.isotropic(3, 100), anisotropic.round_trap(1.0, 100, counts=(26, 24))
    expected = one.mu, one.interaction, one.width, one.width
    assert (two.mu, two.interaction, *two.widths) == pytest.approx(expected, abs=1e-9)
    assert two.peak_density == pytest.approx(one.peak_density, rel=1e-7)


def test_collapse_of_an_isotropic_cloud() -> None:
    na, mu = stationary.critical_isotropic()
    for row in (*tables.CRITICAL_PUBLISHED[:3], tables.CRITICAL_ISOTROPIC):
        # Ruprecht 1995 and Gammal 2001, value from memory; Roberts 2001, abstract; independent calculation.
        assert na == pytest.approx(row.na, abs=row.tolerance), row.source
    assert mu == pytest.approx(tables.CRITICAL_MU, abs=5e-4)
    with pytest.raises(ArithmeticError):
        stationary.isotropic(3, -4 * pi * 0.58)


@pytest.mark.slow
def test_collapse_in_a_round_trap() -> None:
    row = tables.CRITICAL_PUBLISHED[3]
    # Gammal et al., PRA 64, 055602 (2001), abstract: 0.55; the isotropic limit as above.
    assert anisotropic.critical_round(row.lam) == pytest.approx(row.na, abs=row.tolerance)
    assert anisotropic.critical_round(1.0) == pytest.approx(tables.CRITICAL_ISOTROPIC.na, abs=2e-5)


def test_the_gaussian_estimate_of_collapse_is_too_high() -> None:
    # Perez-Garcia et al., PRL 77, 5320 (1996), value from memory: 2 sqrt(2 pi)/5^(5/4).
    row = tables.CRITICAL_GAUSSIAN
    assert 2 * sqrt(2 * pi) / 5**1.25 == pytest.approx(row.na, abs=row.tolerance)
    assert stationary.critical_isotropic()[0] < 0.87 * row.na


def test_thomas_fermi_energy_is_the_limit_from_below() -> None:
    # Dalfovo et al., RMP 71, 463 (1999): the full chemical potential lies a little above.
    for beta in (1e3, 1e4):
        excess = stationary.isotropic(3, beta).mu / newton.thomas_fermi_mu(3, beta) - 1
        assert 0 < excess < 0.04 * (1e3 / beta) ** 0.6


# ---- units ---------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("name", units.MASSES)
def test_masses_are_those_of_another_library(name: str) -> None:
    periodictable = pytest.importorskip("periodictable")
    element, number = name.split("-")
    # periodictable's isotope masses (its own copy of the mass evaluation).
    other = getattr(periodictable, element)[int(number)].mass
    assert units.MASSES[name] / atomic_mass == pytest.approx(other, rel=1e-7)


def test_worked_example_in_laboratory_units() -> None:
    row, omega = flights.WORKED, 2 * pi * 100
    tf = units.thomas_fermi(RB, (omega,) * 3, 1e5, A_RB)
    # Independent calculation: closed forms.
    assert tf.mu / h == pytest.approx(row.mu_hz, abs=5e-3)
    assert tf.mu / k * 1e9 == pytest.approx(row.mu_nk, abs=5e-4)
    assert tf.release_energy / k * 1e9 == pytest.approx(row.release_nk, abs=6e-4)
    assert tf.radii[0] == pytest.approx(row.radius, rel=1e-6)
    assert tf.peak_density == pytest.approx(row.peak_density, rel=3e-6)
    assert tf.healing_length == pytest.approx(row.healing_length, rel=3e-5)
    assert tf.sound_speed == pytest.approx(row.sound_speed, rel=2e-6)
    # The norm of the parabola: N = (8 pi/15) n0 R^3, exact.
    assert 8 * pi / 15 * tf.peak_density * tf.radii[0] ** 3 == pytest.approx(1e5, rel=1e-12)
    n = units.natural(RB, omega, number=1e5, scattering_length=A_RB)
    full = stationary.isotropic(3, n.beta)
    # Independent calculation: Chebyshev collocation.
    assert full.mu * n.energy / h == pytest.approx(row.full_mu_hz, abs=5e-3)
    assert full.width * n.length == pytest.approx(row.full_width, rel=2e-6)
    assert full.peak_density * 1e5 / n.length**3 == pytest.approx(row.full_peak_density, rel=3e-6)


# ---- small oscillations --------------------------------------------------------------------------------------------


@pytest.mark.parametrize("row", flights.MODE_ROWS, ids=lambda r: f"{r.beta:g}")
def test_modes_of_finite_clouds(row: flights.Mode) -> None:
    # Independent calculation: eigenvalues in an oscillator basis, to the printed digits.
    assert modes.monopole(row.beta) == pytest.approx(row.monopole, abs=6e-7)
    assert modes.quadrupole(row.beta) == pytest.approx(row.quadrupole, abs=6e-7)
    # Kohn, PR 123, 1242 (1961): the centre swings at the trap's frequency, exactly.
    assert modes.frequencies(3, row.beta, 1)[0] == pytest.approx(1, abs=1e-8)


def test_modes_between_their_limits() -> None:
    # Stringari, PRL 77, 2360 (1996), abstract: sqrt(5), sqrt(2), sqrt(l) for large clouds; 2 n + l without interaction.
    assert modes.thomas_fermi_isotropic(1, 0) == pytest.approx(2.236068, abs=5e-7)
    assert modes.thomas_fermi_isotropic(0, 2) == pytest.approx(sqrt(2))
    assert modes.monopole(1e-6) == pytest.approx(modes.ideal_isotropic(1, 0), abs=1e-6)
    assert modes.quadrupole(1e-6) == pytest.approx(modes.ideal_isotropic(0, 2), abs=1e-6)
    assert modes.monopole(1e4) == pytest.approx(sqrt(5), abs=5e-3)
    assert modes.quadrupole(1e4) == pytest.approx(sqrt(2), abs=1.5e-2)


def test_breathing_in_the_plane_is_exactly_two() -> None:
    # Pitaevskii & Rosch, PRA 55, R853 (1997).
    assert modes.frequencies(2, 100, 0)[0] == pytest.approx(2, abs=1e-8)


@pytest.mark.parametrize(("lam", "pair"), flights.ROUND_MODES.items())
def test_thomas_fermi_modes_of_a_round_trap(lam: float, pair: tuple[float, float]) -> None:
    # Formula of Stringari (1996), from memory; numbers independently evaluated.
    assert modes.thomas_fermi_round(lam) == pytest.approx(pair, abs=6e-7)


def test_thomas_fermi_modes_of_needles_and_pancakes() -> None:
    # Stringari (1996), from memory: sqrt(5/2) omega_z and 2; sqrt(10/3) and sqrt(3) omega_z.
    low, high = modes.thomas_fermi_round(1e-4)
    assert (low / 1e-4, high) == pytest.approx((sqrt(5 / 2), 2), rel=1e-6)
    low, high = modes.thomas_fermi_round(1e4)
    assert (low, high / 1e4) == pytest.approx((sqrt(10 / 3), sqrt(3)), rel=1e-6)
