"""The independent solvers of tests/reference reproduce remembered flights and exact laws of motion.

Nothing here touches the program: this file makes sure that the yardstick is straight.
"""

from __future__ import annotations

from collections.abc import Callable
from math import pi, sqrt

import numpy as np
import pytest

from reference import anisotropic, classical, expansion, flights, gaussian, scaling, tables, units

RB = units.MASSES["Rb-87"]
A_RB = 100.4 * units.A0


# ---- scaling laws --------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("row", flights.LAW_ROWS, ids=lambda r: f"{r.lam:.3g}-{r.time}")
def test_scaling_law(row: flights.Law) -> None:
    b, rate = scaling.castin_dum((1, 1, row.lam), (scaling.off,) * 3, [row.time])
    # Independent calculation: the same law marched by other code at 1e-12.
    assert (b[0, 0], rate[0, 0], b[0, 2], rate[0, 2]) == pytest.approx(row[2:6], abs=1e-8)
    assert row.lam * b[0, 0] / b[0, 2] == pytest.approx(row.aspect, abs=6e-7)


@pytest.mark.parametrize("row", flights.ASYMPTOTES, ids=lambda r: f"{r.lam:.3g}")
def test_scaling_law_long_after_release(row: flights.Asymptote) -> None:
    _, rate = scaling.castin_dum((1, 1, row.lam), (scaling.off,) * 3, [1e6])
    # sqrt(2/3) for a sphere (Castin & Dum 1996, from memory); independent calculation for the others.
    assert (rate[0, 0], rate[0, 2]) == pytest.approx((row.rate_perp, row.rate_z), abs=6e-8)
    assert row.lam * rate[0, 0] / rate[0, 2] == pytest.approx(row.aspect, abs=6e-7)
    # All of the mean-field energy has become motion: (2 b_perp'^2 + b_z'^2/lam^2)/7 = 2/7, exact.
    assert 2 * rate[0, 0] ** 2 + (rate[0, 2] / row.lam) ** 2 == pytest.approx(2, abs=1e-8)


def test_scaling_law_of_a_sphere_keeps_its_energy() -> None:
    b, rate = scaling.castin_dum((1, 1, 1), (scaling.off,) * 3, [0.3, 1, 4])
    # b'^2 = (2/3)(1 - b^-3): Castin & Dum 1996, from memory; exact.
    assert rate**2 == pytest.approx(2 / 3 * (1 - b**-3), abs=1e-11)


@pytest.mark.parametrize("row", flights.LAW_IN_LAB, ids=lambda r: f"{r.frequency[2]}Hz")
def test_scaling_law_in_laboratory_units(row: flights.LawInLab) -> None:
    omegas = tuple(2 * pi * f for f in row.frequency)
    b, _ = scaling.castin_dum(omegas, (scaling.off,) * 3, [row.time])
    # Independent calculation: the same law marched by other code at 1e-12.
    assert b[0] == pytest.approx(row.b, abs=6e-6)
    radii = b[0] * units.thomas_fermi(RB, omegas, 1e5, A_RB).radii
    assert radii == pytest.approx(row.radius, abs=6e-10)


def test_ideal_scaling_law_is_the_free_gaussian() -> None:
    b, rate = scaling.ideal(3.0, scaling.off, [0, 0.2, 2])
    assert b == pytest.approx([gaussian.width(t, omega=3) / gaussian.width(0, omega=3) for t in (0, 0.2, 2)], rel=1e-11)
    assert rate / b == pytest.approx([gaussian.curvature(t, omega=3) for t in (0, 0.2, 2)], abs=1e-10)


def test_ideal_scaling_law_breathes_after_a_jump() -> None:
    times = np.linspace(0, 5, 7)
    b, _ = scaling.ideal(1.0, lambda t: 1.0 if t < 1 else 2.0, times, edges=(1.0,))
    # Exact: b^2 = 1 before the jump, cos^2 + (w0/w)^2 sin^2 after it.
    after = np.cos(2 * (times - 1)) ** 2 + np.sin(2 * (times - 1)) ** 2 / 4
    assert b**2 == pytest.approx(np.where(times < 1, 1, after), abs=1e-10)


def test_a_lens_stops_the_spreading() -> None:
    omega, t = 2 * pi * 50, 20e-3
    gain, strength, left = flights.LENS_IDEAL
    # Ammann & Christensen, PRL 78, 2088 (1997), formula from memory; numbers from the closed form.
    assert gaussian.width(t, omega=omega) / gaussian.width(0, omega=omega) == pytest.approx(gain, abs=1e-7)
    assert gaussian.lens_strength(t, omega=omega) == pytest.approx(strength, abs=1e-4)
    assert gaussian.lens_gain(t, omega=omega) == pytest.approx(left, abs=1e-7)
    # Independent calculation: scaling law of a sphere.
    size, strength, left = flights.LENS_THOMAS_FERMI
    b, rate = scaling.castin_dum((omega,) * 3, (scaling.off,) * 3, [t])
    assert b[0, 0] == pytest.approx(size, abs=1e-6)
    assert rate[0, 0] / b[0, 0] == pytest.approx(strength, abs=1e-5)
    assert b[0, 0] ** -3 == pytest.approx(left, abs=6e-7)
    # A short real flash of that strength leaves a cloud that stands still, up to (duration/t).
    flash = 20e-6
    lens = sqrt(strength / flash)
    _, rate = scaling.castin_dum((omega,) * 3, (lambda s: lens if s > t else 0.0,) * 3, [t + flash], edges=(t,))
    assert abs(rate[0, 0]) < 2e-3 * strength * size


# ---- interacting flight --------------------------------------------------------------------------------------------


@pytest.mark.parametrize("beta", [10, 100])
def test_isotropic_flight(beta: float) -> None:
    rows = [r for r in flights.FREE if r.beta == beta]
    for row, found in zip(rows, expansion.isotropic_flight(beta, [r.time for r in rows]), strict=True):
        # Independent calculation: radial solver of another kind, all printed digits.
        assert found.widths[0] == pytest.approx(row.width, abs=2e-8)
        assert found.kinetic[0] == pytest.approx(row.kinetic, abs=2e-8)
        assert found.interaction == pytest.approx(row.interaction, abs=2e-8)
        assert found.release_energy == pytest.approx(row.release_energy, abs=2e-8)
        assert found.norm == pytest.approx(1, abs=1e-9)


def test_round_flight() -> None:
    rows = flights.FREE_ROUND
    flown = expansion.round_flight(tables.ROUND_LAM, 4 * pi * flights.FREE_ROUND_NA, [r.time for r in rows])
    for row, found in zip(rows, flown, strict=True):
        # Independent calculation: oscillator functions of other widths, agreed to 1e-6.
        assert found.widths == pytest.approx((row.x_width, row.z_width), abs=1.5e-6)
        assert found.kinetic == pytest.approx((row.kinetic_perp, row.kinetic_z), abs=1.5e-6)
        assert found.interaction == pytest.approx(row.interaction, abs=1e-6)
        assert found.widths[0] / found.widths[1] == pytest.approx(row.aspect, abs=3e-6)
        assert found.release_energy == pytest.approx(flights.FREE_ROUND_RELEASE_ENERGY, abs=1e-6)


def test_the_scaling_law_is_no_short_cut() -> None:
    seen = flights.ASPECT_AT_5
    b, _ = scaling.castin_dum((1, 1, tables.ROUND_LAM), (scaling.off,) * 3, [5])
    assert tables.ROUND_LAM * b[0, 0] / b[0, 2] == pytest.approx(seen["law"], abs=6e-5)
    for number in (1000, 10000):
        start, found = expansion.round_flight(tables.ROUND_LAM, 4 * pi * tables.ROUND_A * number, [0, 5])
        # Independent calculation: oscillator functions of other widths.
        assert found.widths[0] / found.widths[1] == pytest.approx(seen[number], abs=6e-5)
    assert start.release_energy == pytest.approx(flights.RELEASE_ENERGY_10000, abs=2e-6)


def test_isotropic_flight_in_laboratory_units() -> None:
    rows = [r for r in flights.FREE_IN_LAB if len(set(r.frequency)) == 1]
    n = units.natural(RB, 2 * pi * 100, number=1e5, scattering_length=A_RB)
    flown = expansion.isotropic_flight(n.beta, [r.time / n.time for r in rows], count=60)
    for row, found in zip(rows, flown, strict=True):
        # Independent calculation: radial solver of another kind, all printed digits.
        assert found.widths[0] * n.length == pytest.approx(row.width[0], abs=6e-12)


@pytest.mark.slow
def test_cigar_flight_in_laboratory_units() -> None:
    row = flights.FREE_IN_LAB[2]
    n = units.natural(RB, 2 * pi * row.frequency[1], number=1e5, scattering_length=A_RB)
    lam = row.frequency[0] / row.frequency[1]
    (found,) = expansion.round_flight(lam, n.beta, [row.time / n.time], counts=(26, 36))
    # Independent calculation elsewhere; here the widths are converged to 1e-7 of themselves.
    assert np.array(found.widths) * n.length == pytest.approx((row.width[1], row.width[0]), abs=1e-12)


def test_flight_of_an_ideal_gas_is_the_free_gaussian() -> None:
    (found,) = expansion.isotropic_flight(1e-9, [3.0])
    assert found.widths[0] == pytest.approx(gaussian.width(3, omega=1), rel=1e-8)
    assert found.kinetic[0] == pytest.approx(0.75, abs=1e-8)


def test_two_dimensional_clouds_obey_the_exact_law() -> None:
    start = anisotropic.ground((2,), (1.0,), 100, counts=(30,))
    free = expansion.march(start, (1.0,), 100, [0, 1, 4])
    for found in free:
        # Pitaevskii & Rosch, PRA 55, R853 (1997): exact for every coupling.
        law = gaussian.mean_square_radius_2d(
            found.time, start=2 * free[0].widths[0] ** 2, release_energy=free[0].release_energy
        )
        assert 2 * found.widths[0] ** 2 == pytest.approx(law, rel=1e-8)
    # In a trap that has become 1.3 times stiffer <rho^2> swings at exactly twice its frequency.
    half = pi / 1.3 / 2
    swung = expansion.march(start, (1.0,), 100, [half, 2 * half], trap=(lambda t: 1.3,))
    assert swung[1].widths[0] == pytest.approx(free[0].widths[0], rel=1e-8)
    assert swung[0].widths[0] < 0.8 * free[0].widths[0]


def test_a_flash_during_flight_takes_out_the_ordered_motion() -> None:
    found = expansion.isotropic_flight(
        1e-9, [3.0, 3.001], trap=lambda t: sqrt(0.3 / 1e-3) if 3 < t < 3.001 else 0.0, edges=(3.0, 3.001)
    )
    # The lens of strength b'/b = t/(1 + t^2) = 0.3 leaves the momentum variance 1/b^2; thin to 1e-3.
    assert found[1].kinetic[0] / found[0].kinetic[0] == pytest.approx(gaussian.lens_gain(3, omega=1), rel=1e-3)


def test_a_weak_squeeze_excites_the_monopole() -> None:
    times = np.linspace(0, 30, 121)
    width = np.array([f.widths[0] for f in expansion.isotropic_flight(100, times, trap=lambda t: 1.002, count=24)])
    # The march and the eigenvalues are separate calculations; 1.002 scales the frequency of a slightly stiffer trap.
    grid = np.linspace(2.1, 2.3, 2001)
    basis = np.exp(1j * np.outer(grid, times)) * np.hanning(len(times))
    found = grid[np.abs(basis @ (width - width.mean())).argmax()]
    assert found == pytest.approx(1.002 * flights.MODE_ROWS[1].monopole, abs=2e-3)


# ---- paths and packets ---------------------------------------------------------------------------------------------


def test_sag_under_gravity() -> None:
    # g/omega^2 in a 100 Hz trap: closed form.
    assert classical.sag(2 * pi * 100) == pytest.approx(flights.SAG_100_HZ, abs=6e-11)


def test_path_in_a_steady_trap_with_gravity_and_a_kick() -> None:
    omega, g, times = 2 * pi * 60, -9.80665, np.array([0, 1e-3, 4e-3, 9e-3])
    x, v = classical.path(2e-6, 1e-3, times, omega=omega, acceleration=g, kicks=((4e-3, 5e-3),))
    first = classical.swing(2e-6, 1e-3, times, omega=omega, acceleration=g)
    later = classical.swing(first[0][2], first[1][2] + 5e-3, times[3] - times[2], omega=omega, acceleration=g)
    # Kohn's theorem: the harmonic path, closed form.
    assert x == pytest.approx([*first[0][:3], later[0]], abs=1e-16, rel=1e-10)
    assert v == pytest.approx([*first[1][:2], first[1][2] + 5e-3, later[1]], abs=1e-13, rel=1e-10)


def test_path_after_release_falls() -> None:
    x, v = classical.path(0.0, 2e-3, [5e-3, 25e-3], omega=600.0, strength=lambda t: 0.0, acceleration=-9.80665)
    expected = classical.fall(0.0, 2e-3, np.array([5e-3, 25e-3]), acceleration=-9.80665)
    assert (x, v) == (pytest.approx(expected[0], rel=1e-11), pytest.approx(expected[1], rel=1e-11))


def test_path_in_a_trap_that_fades() -> None:
    times = np.array([0.2, 1.0, 3.0])
    x, _ = classical.path(1.0, 0.4, times, omega=2.0, strength=classical.exponential(9.0, 0.7))
    # Closed forms by Bessel and Airy functions (scipy.special).
    assert x == pytest.approx(classical.fading_swing(1.0, 0.4, times, omega=2.0, time_constant=0.7), abs=1e-10)
    x, _ = classical.path(1.0, 0.4, times, omega=2.0, strength=classical.linear(3.0))
    assert x == pytest.approx(classical.waning_swing(1.0, 0.4, times, omega=2.0, duration=3.0), abs=1e-10)


def test_a_quick_switch_off_under_gravity_is_a_release() -> None:
    g, omega, t = -9.80665, 2 * pi * 100, 20e-3
    for shape in (classical.smooth(1e-6), classical.linear(1e-6), classical.exponential(1e-6, 1e-7)):
        start = -classical.sag(omega)
        x, v = classical.path(start, 0.0, [t], omega=omega, strength=shape, acceleration=g, edges=(1e-6,))
        # In the limit of an instant switch-off: the fall from rest, up to g t duration.
        assert x[0] - start == pytest.approx(g * t**2 / 2, abs=abs(g) * t * 1.1e-6)
        assert abs(v[0]) < abs(g) * t


def test_a_moving_trap_drags_its_load() -> None:
    times = np.linspace(0, 3, 4)
    x, _ = classical.path(0.0, 0.0, times, omega=2.0, centre=lambda t: 0.5 * t)
    # Exact: x = u t - (u/omega) sin(omega t).
    assert x == pytest.approx(0.5 * times - 0.25 * np.sin(2 * times), abs=1e-11)


def test_falling_packet_obeys_the_schroedinger_equation() -> None:
    given = {"omega": 2.0, "q": 0.7, "x0": 0.3, "v0": 1.1, "force": -0.8}
    x, t, e = np.linspace(-2, 3, 41), 0.9, 2e-3
    stencil = ((-2, 1), (-1, -8), (1, 8), (2, -1))
    in_time = sum(c * gaussian.packet(x, t + s * e, **given) for s, c in stencil) / (12 * e)
    bend = ((-2, -1), (-1, 16), (0, -30), (1, 16), (2, -1))
    in_space = sum(c * gaussian.packet(x + s * e, t, **given) for s, c in bend) / (12 * e**2)
    psi = gaussian.packet(x, t, **given)
    left = 1j * in_time + 0.35 * in_space - 0.8 / 0.7 * x * psi
    assert np.abs(left).max() < 1e-8
    # It starts as the kicked ground state, and its density is the Gaussian about the classical path.
    kicked = (2 / 0.7 / pi) ** 0.25 * np.exp(-((x - 0.3) ** 2) / 0.7 + 1j * 1.1 * x / 0.7)
    assert gaussian.packet(x, 0, **given) == pytest.approx(kicked, abs=1e-14)
    centre = classical.fall(0.3, 1.1, np.array(t), acceleration=-0.8)[0]
    assert np.abs(psi) ** 2 == pytest.approx(gaussian.density(x, t, omega=2, q=0.7, centre=centre), abs=1e-14)


def test_packet_current_is_the_flow_of_its_phase_and_continuous() -> None:
    given = {"omega": 2.0, "q": 0.7}
    x, t, e, v = np.linspace(-2, 3, 41), 0.9, 1e-3, 1.1
    stencil = ((-2, 1), (-1, -8), (1, 8), (2, -1))

    def slope(f: Callable[[float], np.ndarray]) -> np.ndarray:
        return sum(c * f(s * e) for s, c in stencil) / (12 * e)

    psi = gaussian.packet(x, t, v0=v, **given)
    flow = 0.7 * np.imag(psi.conj() * slope(lambda s: gaussian.packet(x + s, t, v0=v, **given)))
    assert gaussian.current(x, t, centre=v * t, velocity=v, **given) == pytest.approx(flow, abs=1e-9)
    change = gaussian.density_rate(x, t, centre=v * t, velocity=v, **given)
    divergence = slope(lambda s: gaussian.current(x + s, t, centre=v * t, velocity=v, **given))
    in_time = slope(lambda s: gaussian.density(x, t + s, centre=v * (t + s), **given))
    # The law of continuity.
    assert change == pytest.approx(-divergence, abs=1e-9)
    assert change == pytest.approx(in_time, abs=1e-9)


def test_packet_is_a_sum_of_free_plane_waves() -> None:
    q, omega, t, v = 0.7, 2.0, 0.9, 1.1
    k, dk = np.linspace(-15, 18, 1201, retstep=True)
    # Textbook: the kicked ground state's spectrum is a Gaussian about v/q; each wave gains exp(-i q k^2 t/2).
    spectrum = (q / (pi * omega)) ** 0.25 * np.exp(-q * (k - v / q) ** 2 / (2 * omega))
    phases = np.array([gaussian.plane_wave_phase(one, t, q=q) for one in k])
    x = np.linspace(-3, 4, 15)
    summed = np.exp(1j * np.outer(x, k)) @ (spectrum * phases) * dk / sqrt(2 * pi)
    assert gaussian.packet(x, t, omega=omega, q=q, v0=v) == pytest.approx(summed, abs=1e-12)


def test_column_density_of_a_packet() -> None:
    u, v = np.linspace(-12, 12, 241), np.linspace(-15, 15, 301)
    image = gaussian.column(u, v, 1.5, omegas=(2.0, 3.0)) * 0.1 * 0.1
    # It holds all atoms, and its widths are those of the free Gaussian along each direction.
    assert image.sum() == pytest.approx(1, abs=1e-12)
    assert image.sum(axis=1) @ u**2 == pytest.approx(gaussian.width(1.5, omega=2) ** 2, rel=1e-10)
    assert image.sum(axis=0) @ v**2 == pytest.approx(gaussian.width(1.5, omega=3) ** 2, rel=1e-10)


def test_packet_energy_and_width_rate() -> None:
    # The ordered motion carries (width rate)^2/(2 q) over hbar; textbook.
    q, omega, t = 0.7, 2.0, 0.9
    total, ordered = gaussian.kinetic_energy(t, omega=omega)
    rate = gaussian.width_rate(t, omega=omega, q=q)
    step = gaussian.width(t + 1e-5, omega=omega, q=q) - gaussian.width(t - 1e-5, omega=omega, q=q)
    assert rate == pytest.approx(step / 2e-5, rel=1e-8)
    assert ordered == pytest.approx(rate**2 / (2 * q))
    assert total == pytest.approx(ordered + q / (8 * gaussian.width(t, omega=omega, q=q) ** 2))


def test_phonons_have_the_speed_of_sound_and_become_atoms() -> None:
    # Bogoliubov (1947): c k for long waves, k^2/2 + g n for short ones.
    assert gaussian.bogoliubov(1e-4, 2.0) == pytest.approx(1e-4 * sqrt(2), rel=1e-7)
    assert gaussian.bogoliubov(1e3, 2.0) == pytest.approx(1e6 / 2 + 2, rel=1e-9)
    # Right after an imprint the density grows by 2 phi e0 t where the phase has its top.
    assert gaussian.imprint_response(1e-4, k=1.5, gn=2.0, phase=0.01) == pytest.approx(0.01 * 1.5**2 * 1e-4, rel=1e-6)
