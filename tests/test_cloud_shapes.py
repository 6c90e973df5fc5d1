"""First guesses: the best Gaussian and the Thomas-Fermi cloud."""

from __future__ import annotations

from math import pi, sqrt

import numpy as np
import pytest
from scipy import optimize
from scipy.constants import hbar

import proofs
from reference import tables, units
from trapsim.cloud import shapes
from trapsim.cloud.cloud import Cloud
from trapsim.space.axes import Radial, Wave
from trapsim.space.frame import Frame
from trapsim.space.space import Space

ROUND_TRAP = np.ones(3)


def test_a_gaussian_has_the_widths_asked_for() -> None:
    for make in proofs.SPACES.values():
        space = make()
        u = shapes.gaussian(space, np.array(proofs.SIZES))
        np.testing.assert_allclose(u, proofs.cloud_samples(space, chirps=(0, 0, 0)).real, atol=1e-10)


def test_a_gaussian_is_flat_along_a_uniform_direction() -> None:
    space = Space([Wave((0,), 32, 6.0), Wave((1,), 1, 2.0), Wave((2,), 1, 0.5)])
    u = shapes.gaussian(space, np.array([0.9, np.inf, np.inf]))
    assert space.integral(u**2) == pytest.approx(1)
    assert u.ravel() ** 2 == pytest.approx(np.abs(proofs.packet(space.axes[0].points, 1)) ** 2 / 4)


def test_the_widths_of_an_ideal_gas_are_those_of_the_oscillator() -> None:
    # Textbook: <x^2> = hbar/(2 m w).
    omega = np.array([1.0, 4.0, 0.25])
    widths = shapes.gaussian_widths(omega, 0.5, 0.0)
    np.testing.assert_allclose(widths, np.sqrt(0.5 / (2 * omega)), rtol=1e-9)


@pytest.mark.parametrize("na", [0.1, 1.0, 10.0, 1000.0])
def test_the_best_gaussian_of_an_isotropic_trap(na: float) -> None:
    # Perez-Garcia et al., Phys. Rev. Lett. 77, 5320 (1996): w^5 - w = sqrt(2/pi) N a/a_ho for the width w = sqrt(2) s.
    root = optimize.brentq(lambda w: w**5 - w - sqrt(2 / pi) * na, 1, 100)
    np.testing.assert_allclose(shapes.gaussian_widths(ROUND_TRAP, 1.0, na), root / sqrt(2), rtol=1e-5)


def test_the_best_gaussian_on_a_line_and_in_a_plane() -> None:
    # The energy of a Gaussian, 1/(4 w^2) + w^2/4 per direction and beta/(2 (2 pi)^(d/2) w^d), has the minimum
    # w^(d+2) - w^(d-2) = beta/(2 pi)^(d/2), with beta = 4 pi N a/(lengths).
    beta = 10.0
    for d, omega in ((1, [1.0, 0.0, 0.0]), (2, [1.0, 1.0, 0.0])):
        root = optimize.brentq(lambda w, d=d: w ** (d + 2) - w ** (d - 2) - beta / (2 * pi) ** (d / 2), 1, 9)
        widths = shapes.gaussian_widths(np.array(omega), 1.0, beta / (4 * pi))
        np.testing.assert_allclose(widths[:d], root / sqrt(2), rtol=1e-5)
        assert np.isinf(widths[d:]).all()


@pytest.mark.parametrize("row", tables.ISOTROPIC, ids=lambda r: f"{r.beta:g}")
def test_the_chemical_potential_of_the_best_gaussian_is_a_little_high(row: tables.Isotropic) -> None:
    # Independent calculation: tables. A Gaussian is not the ground state, so its energy can only be too high.
    mu = shapes.chemical_potential_guess(ROUND_TRAP, 1.0, row.beta / (4 * pi))
    assert row.mu * (1 - 1e-9) <= mu < 1.12 * row.mu


def test_a_thomas_fermi_cloud_of_100000_rubidium_atoms() -> None:
    # Baym & Pethick, Phys. Rev. Lett. 76, 6 (1996): mu, R, n0 = mu/g, <x^2> = R^2/7.
    omega = 2 * pi * np.array([40.0, 80.0, 80.0])
    mass, number, a = units.MASSES["Rb-87"], 1e5, 100.4 * units.A0
    tf = units.thomas_fermi(mass, tuple(omega), number, a)
    q = hbar / mass
    half = 1.15 * np.array(tf.radii)
    coupling = 4 * pi * q * number * a
    for space in (
        Space([Wave((j,), 64, half[j]) for j in range(3)]),
        Space([Wave((0,), 64, half[0]), Radial((1, 2), 40, half[1])]),
    ):
        potential = space.quadratic(omega**2 / (2 * q))
        u = shapes.thomas_fermi(space, potential, coupling, soft=1.0)
        cloud = Cloud(space, space.array(u), Frame(), 0.0, q)
        n = cloud.density()
        assert space.integral(n) == pytest.approx(1, rel=1e-12)
        assert number * n.max() == pytest.approx(tf.peak_density, rel=5e-3)
        for j in range(3):
            axis = space.axis(j)
            var = (space.marginals(n)[space.dim(j)] * axis.weights) @ axis.x2(j)
            assert sqrt(var) == pytest.approx(tf.widths[j], rel=2e-3)


def test_the_edge_of_a_thomas_fermi_cloud_is_rounded_off() -> None:
    space = Space([Wave((j,), 32, 6.0) for j in range(3)])
    u = shapes.thomas_fermi(space, space.quadratic([0.5] * 3), 200.0, soft=0.3)
    assert u.min() > 0
    assert space.integral(u**2) == pytest.approx(1, rel=1e-12)
