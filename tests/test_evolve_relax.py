"""Relaxing a Hamiltonian in natural units: both methods, how much they cost, and when they say no."""

from __future__ import annotations

from math import pi, prod, sqrt

import numpy as np
import pytest
from scipy import special

from reference import stationary, tables, units
from trapsim.cloud import shapes
from trapsim.evolve.relax import Hamiltonian, Relaxed, relax
from trapsim.space.axes import Axis, Mirror, Radial, Wall, Wave
from trapsim.space.space import Space

Array = np.ndarray


def hamiltonian(space: Space, beta: float, omegas: tuple[float, float, float] = (1.0, 1.0, 1.0)) -> Hamiltonian:
    """A harmonic trap in units of hbar = m = 1."""
    return Hamiltonian(space, space.quadratic([w**2 / 2 for w in omegas]), coupling=beta, q=1.0)


def waves(n: int, half: float) -> Space:
    return Space([Wave((j,), n, half) for j in range(3)])


def round_space(n: int, half: float, *, lone: int = 0) -> Space:
    axes: list[Axis] = [Wave((lone,), n, half), Radial(tuple(j for j in range(3) if j != lone), n // 2 + 2, half)]
    return Space(axes)


def start(h: Hamiltonian, beta: float, omegas: tuple[float, float, float] = (1.0, 1.0, 1.0)) -> Array:
    if beta > 30:
        return shapes.thomas_fermi(h.space, h.V, beta, soft=0.3 * max(omegas))
    return shapes.gaussian(h.space, shapes.gaussian_widths(np.array(omegas), 1.0, beta / (4 * pi)))


def relaxed(space: Space, beta: float, **how: object) -> Relaxed:
    h = hamiltonian(space, beta)
    return relax(h, start(h, beta), **how)


SPACES = {"waves": waves(40, 6.0), "round": round_space(40, 6.0)}
every_space = pytest.mark.parametrize("space", SPACES.values(), ids=SPACES.keys())


@pytest.mark.slow
@every_space
@pytest.mark.parametrize("method", ["conjugate gradient", "imaginary time"])
def test_the_ideal_gas_relaxes_to_the_oscillator(space: Space, method: str) -> None:
    # Textbook: E = 3/2, half of it kinetic, psi = pi^(-3/4) exp(-r^2/2).
    h = hamiltonian(space, 0.0)
    wide = shapes.gaussian(space, np.full(3, 0.9))
    found = relax(h, wide, method=method, tolerance=1e-6)
    assert found.converged
    assert found.mu == pytest.approx(1.5, abs=1e-9)
    assert (found.kinetic, found.potential) == pytest.approx((0.75, 0.75), abs=1e-5)
    assert found.interaction == 0.0
    exact = pi**-0.75 * np.exp(-space.quadratic([0.5] * 3)) * np.ones(space.shape)
    assert space.integral((found.u - exact) ** 2) < 1e-11


@every_space
@pytest.mark.parametrize("row", [r for r in tables.ISOTROPIC if r.beta in (10, 100)], ids=lambda r: f"{r.beta:g}")
def test_both_methods_reach_the_tabulated_chemical_potential(space: Space, row: tables.Isotropic) -> None:
    # Independent calculation: Chebyshev collocation and Newton's method. mu is of second order in the residual.
    methods = ("conjugate gradient", "imaginary time")
    direct, slow = (relaxed(space, row.beta, method=m, tolerance=1e-6) for m in methods)
    assert direct.converged and slow.converged
    assert direct.mu == pytest.approx(row.mu, rel=1e-6)
    assert slow.mu == pytest.approx(direct.mu, rel=1e-6)
    assert slow.energy == pytest.approx(direct.energy, rel=1e-8)
    assert direct.pairs < slow.pairs / 10


@every_space
def test_energies_add_up_and_obey_the_virial_theorem(space: Space) -> None:
    # Exact: mu = E + E_int; 2 K - 2 P + 3 E_int = 0 in a harmonic trap.
    found = relaxed(space, 50.0, tolerance=1e-8)
    assert found.energy == pytest.approx(found.kinetic + found.potential + found.interaction, rel=1e-14)
    assert found.mu == pytest.approx(found.energy + found.interaction, rel=1e-14)
    assert 2 * found.kinetic - 2 * found.potential + 3 * found.interaction == pytest.approx(0, abs=1e-6)
    assert found.u.min() > -1e-9 * found.u.max()
    assert space.integral(found.u**2) == pytest.approx(1, rel=1e-12)


def test_the_zero_of_energy_is_the_potentials_own() -> None:
    space = round_space(32, 6.0)
    plain = hamiltonian(space, 10.0)
    lifted = Hamiltonian(space, space.quadratic([0.5] * 3) + 7.0, coupling=10.0, q=1.0)
    one, two = (relax(h, start(plain, 10.0), tolerance=1e-8) for h in (plain, lifted))
    assert two.mu - one.mu == pytest.approx(7.0, rel=1e-12)
    assert two.residual == pytest.approx(one.residual, rel=1e-3)


def test_the_residual_is_that_of_the_state_returned() -> None:
    # ||H u - mu u|| / (mu - V_min), with the derivative taken by numpy's transform.
    space = waves(32, 6.0)
    h = hamiltonian(space, 20.0)
    found = relax(h, start(h, 20.0), tolerance=1e-4)
    k = 2 * pi * np.fft.fftfreq(32, 12.0 / 32)
    k2 = k[:, None, None] ** 2 + k[None, :, None] ** 2 + k[None, None, :] ** 2
    curved = np.fft.ifftn(k2 / 2 * np.fft.fftn(found.u)).real
    r = curved + (space.quadratic([0.5] * 3) + 20.0 * found.u**2 - found.mu) * found.u
    lowest = float(space.quadratic([0.5] * 3).min())
    assert found.residual == pytest.approx(sqrt(space.integral(r**2)) / (found.mu - lowest), rel=1e-6)
    assert found.residual <= 1.01e-4


def test_giving_up_is_a_result() -> None:
    found = relaxed(SPACES["round"], 100.0, tolerance=1e-9, most_pairs=4)
    assert not found.converged and not found.collapsed
    assert found.residual > 1e-9


def test_a_start_of_either_sign_will_do() -> None:
    space = SPACES["round"]
    h = hamiltonian(space, 10.0)
    sign = np.where(np.arange(space.shape[1]) % 2, -1.0, 1.0)[None, :]
    one, two = relax(h, start(h, 10.0), tolerance=1e-7), relax(h, sign * start(h, 10.0), tolerance=1e-7)
    assert two.mu == pytest.approx(one.mu, rel=1e-12)


# how much it costs: transform pairs, the figures to keep from the table of measured costs


def rubidium(omegas_hz: tuple[float, float, float], number: float) -> tuple[Hamiltonian, Array, float]:
    """A cloud of Rb-87 in units of its stiffest trap, on the axes its symmetry allows; with it the healing length."""
    omegas = tuple(2 * pi * f for f in omegas_hz)
    unit = units.natural(units.MASSES["Rb-87"], max(omegas), number=number, scattering_length=100.4 * units.A0)
    trap = tuple(w / max(omegas) for w in omegas)
    mean = prod(trap) ** (1 / 3)
    mu = mean / 2 * (15 * unit.beta / (4 * pi) * sqrt(mean)) ** 0.4 + sum(trap) / 2
    spacing = 1 / sqrt(2 * mu)
    half = [sqrt(2 * mu) / w + 3.5 / sqrt(w) for w in trap]
    lone = next(j for j in range(3) if trap[(j + 1) % 3] == trap[(j + 2) % 3])
    pair = tuple(j for j in range(3) if j != lone)
    n = [2 * int(np.ceil(x / spacing)) for x in half]
    space = Space([Wave((lone,), n[lone], half[lone]), Radial(pair, n[pair[0]] // 2, half[pair[0]])])
    h = hamiltonian(space, unit.beta, trap)
    return h, start(h, unit.beta, trap), spacing


@pytest.mark.parametrize(
    ("trap", "number", "most"),
    [
        ((100.0, 100.0, 100.0), 1e3, 14),
        ((100.0, 100.0, 100.0), 1e5, 18),
        ((20.0, 150.0, 150.0), 1e5, 27),
        ((200.0, 40.0, 40.0), 1e5, 22),
        ((100.0, 100.0, 100.0), 1.0, 10),
    ],
    ids=["isotropic 1e3", "isotropic 1e5", "cigar 1e5", "pancake 1e5", "one atom"],
)
def test_a_smooth_trap_is_relaxed_to_a_millionth_in_few_pairs(
    trap: tuple[float, float, float], number: float, most: int
) -> None:
    h, guess, _ = rubidium(trap, number)
    found = relax(h, guess, tolerance=1e-6)
    assert found.converged
    assert found.pairs <= most


def test_radial_and_full_agree_to_a_hundred_millionth_at_a_spacing_of_one_healing_length() -> None:
    # The same cloud on two kinds of axis; what they share is only the equation.
    h, guess, spacing = rubidium((100.0, 100.0, 100.0), 2e4)
    half = h.space.axes[1].half_extent
    one = relax(h, guess, tolerance=1e-9)
    full = Space([Wave((j,), 2 * int(np.ceil(half / spacing)), half) for j in range(3)])
    other = hamiltonian(full, h.c)
    two = relax(other, start(other, h.c), tolerance=1e-9)
    assert one.converged and two.converged
    assert two.mu == pytest.approx(one.mu, rel=1e-8)

    def width(space: Space, u: Array, j: int) -> float:
        axis, d = space.axis(j), space.dim(j)
        return sqrt((space.marginals(u**2)[d] * axis.weights) @ axis.x2(j))

    for j in range(3):
        assert width(full, two.u, j) == pytest.approx(width(h.space, one.u, j), rel=1e-8)


# attraction


@pytest.mark.slow
@pytest.mark.parametrize("method", ["conjugate gradient", "imaginary time"])
@pytest.mark.parametrize("row", [r for r in tables.ATTRACTIVE if r.na < 0.56], ids=lambda r: f"{r.na:g}")
def test_both_methods_hold_an_attractive_cloud(row: tables.Attractive, method: str) -> None:
    # Independent calculation: Chebyshev collocation and Newton's method.
    found = relaxed(round_space(56, 5.0), -4 * pi * row.na, method=method, tolerance=1e-6)
    assert found.converged and not found.collapsed
    assert found.mu == pytest.approx(row.mu, rel=1e-5)


@pytest.mark.parametrize("na", [0.576, 0.58, 0.6, 1.0])
@pytest.mark.parametrize("method", ["conjugate gradient", "imaginary time"])
def test_too_strong_an_attraction_collapses(method: str, na: float) -> None:
    # Ruprecht et al., Phys. Rev. A 51, 4704 (1995); Gammal et al., Phys. Rev. A 64, 055602 (2001): 0.57497 (value from
    # memory, confirmed by an independent calculation).
    found = relaxed(round_space(56, 5.0), -4 * pi * na, method=method, tolerance=1e-6)
    assert found.collapsed and not found.converged


def test_a_collapse_is_noticed_while_the_grid_still_resolves_it() -> None:
    # The energy of a Gaussian goes down, and ever faster, as it is drawn together (Perez-Garcia et al., 1996).
    space = round_space(80, 5.0)
    found = relaxed(space, -4 * pi * 0.7, tolerance=1e-6)
    assert found.collapsed
    marginal = space.marginals(found.u**2)[space.dim(0)]
    assert (marginal * space.axis(0).weights) @ space.axis(0).x2(0) > (2 * space.axis(0).spacing) ** 2


@pytest.mark.parametrize(("n", "na"), [(20, 0.576), (24, 0.576), (20, 0.6)])
def test_a_cloud_that_only_the_grid_holds_has_collapsed(n: int, na: float) -> None:
    # On a coarse grid a collapsed cloud comes to rest, but not in balance: 2 K - 2 P + 3 E_int < 0 (virial theorem).
    found = relaxed(round_space(n, 5.0), -4 * pi * na, tolerance=1e-6)
    assert found.collapsed and not found.converged


def test_nothing_collapses_on_a_line() -> None:
    # Independent calculation; and the soliton of the Schroedinger equation, mu -> -beta^2/8 (Zakharov & Shabat, 1971).
    def line(beta: float, n: int) -> Relaxed:
        space = Space([Wave((0,), n, 6.0), Wave((1,), 1, 0.5), Wave((2,), 1, 0.5)])
        h = Hamiltonian(space, space.quadratic([0.5, 0, 0]), coupling=beta, q=1.0)
        return relax(h, shapes.gaussian(space, np.array([0.7, np.inf, np.inf])), tolerance=1e-8)

    row = next(r for r in tables.LINE if r.beta == -5)
    found = line(-5.0, 128)
    assert found.converged and found.mu == pytest.approx(row.mu, rel=1e-6)
    strong = line(-30.0, 1024)
    assert strong.converged and strong.mu == pytest.approx(-(30.0**2) / 8, rel=1e-4)


def test_in_a_plane_the_collapse_is_at_the_norm_of_the_townes_soliton() -> None:
    # Weinstein, Commun. Math. Phys. 87, 567 (1983): beta = 5.850 for -1/2 lap (norm 11.70/2; value from memory). Just
    # below it, an independent calculation: Chebyshev collocation and Newton's method.
    def plane(beta: float, n: int) -> Relaxed:
        space = Space([Radial((0, 1), n, 4.5), Wave((2,), 1, 0.5)])
        h = Hamiltonian(space, space.quadratic([0.5, 0.5, 0]), coupling=beta, q=1.0)
        return relax(h, shapes.gaussian(space, np.array([0.7, 0.7, np.inf])), tolerance=1e-7)

    held = plane(-5.7, 90)
    assert held.converged and held.mu == pytest.approx(stationary.isotropic(2, -5.7, points=140).mu, rel=1e-5)
    for beta in (-5.86, -5.9, -6.5):
        fallen = plane(beta, 90)
        assert fallen.collapsed and not fallen.converged, beta


# from coarse to fine


def test_a_large_cloud_is_relaxed_on_fewer_points_first() -> None:
    # The same state without that, on axes that have no coarser ones; a few pairs less.
    space, beta = waves(48, 6.0), 200.0
    found = relaxed(space, beta, tolerance=1e-7)
    h = hamiltonian(space, beta)
    assert h.coarser() is not None and found.converged
    plain = Hamiltonian(round_space(48, 6.0), round_space(48, 6.0).quadratic([0.5] * 3), coupling=beta, q=1.0)
    other = relax(plain, start(plain, beta), tolerance=1e-7)
    assert plain.coarser() is None and found.pairs < 0.75 * other.pairs
    assert found.mu == pytest.approx(other.mu, rel=1e-8)


@pytest.mark.parametrize("kind", [Wave, Mirror, Wall])
def test_the_coarser_potential_is_that_on_every_second_point(kind: type[Axis]) -> None:
    # Closed form: the mean of x^2 over x - s/2 and x + s/2 is x^2 + s^2/4, the same everywhere.
    space = Space([kind((j,), 32, 6.0) for j in range(3)])
    coarse = hamiltonian(space, 1.0).coarser()
    exact = coarse.space.quadratic([0.5] * 3)
    assert coarse.space.shape == (16, 16, 16)
    assert [a.half_extent for a in coarse.space.axes] == [6.0] * 3
    np.testing.assert_allclose(coarse.V, exact - exact.min(), atol=1e-12)


def test_a_lattice_finer_than_the_coarse_points_misleads_nobody() -> None:
    # Mathieu's equation, scipy.special: the lowest band's edge of V = s sin^2(x) in recoil energies (q = 2) is a_0 + s/2.
    depth, periods, n = 20.0, 4, 40
    space = Space([Wave((0,), n, periods * pi / 2), *(Wave((j,), 24, 3.0) for j in (1, 2))])
    potential = depth * np.sin(space.along(0, space.axes[0].points)) ** 2 * np.ones(space.shape)
    h = Hamiltonian(space, potential, coupling=1e-9, q=2.0)
    found = relax(h, np.ones(space.shape), tolerance=1e-8)
    assert h.coarser() is not None and found.converged
    exact = float(special.mathieu_a(0, depth / 4)) + depth / 2
    assert found.mu == pytest.approx(exact, rel=1e-5)
