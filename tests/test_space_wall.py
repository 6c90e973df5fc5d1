"""A wall axis: sines between two walls. The particle in a box has its modes in closed form."""

from __future__ import annotations

from math import pi

import numpy as np
import pytest

import proofs
from trapsim.cloud.cloud import Cloud, regauge
from trapsim.evolve.guards import edge_population
from trapsim.measure.columns import ColumnViews
from trapsim.measure.observables import profile
from trapsim.space.axes import Mirror, Radial, Wall, Wave
from trapsim.space.frame import Frame
from trapsim.space.resample import resample
from trapsim.space.space import Space

HALF = 3.0
LENGTH = 2 * HALF


def mode(axis: Wall, m: int, x: np.ndarray | None = None) -> np.ndarray:
    """The m-th eigenfunction between walls, sqrt(2/L) sin(m pi s/L), s from the wall (closed form)."""
    s = (axis.points if x is None else x) + HALF
    return np.sqrt(2 / LENGTH) * np.sin(m * pi * s / LENGTH)


@pytest.mark.parametrize("n", [24, 25])
def test_each_mode_of_the_box_is_one_line_of_the_spectrum_with_its_own_energy(n: int) -> None:
    axis = Wall((0,), n, HALF)
    x = np.linspace(-HALF, HALF, 40)
    for m in (1, 2, 7, n - 1):
        samples = mode(axis, m)
        lines = axis.spectral_weights * np.abs(proofs.spectrum(axis, samples)) ** 2
        np.testing.assert_allclose(lines, np.eye(n)[m - 1], atol=1e-13)
        # <k^2> = (m pi/L)^2, closed form
        assert lines @ axis.k2(0) == pytest.approx((m * pi / LENGTH) ** 2, rel=1e-13)
        np.testing.assert_allclose(axis.basis(x) @ samples, mode(axis, m, x), atol=1e-12)
        slope = np.sqrt(2 / LENGTH) * m * pi / LENGTH * np.cos(m * pi * (x + HALF) / LENGTH)
        np.testing.assert_allclose(axis.slopes(x) @ samples, slope, atol=1e-11)


def test_the_highest_mode_counts_once() -> None:
    axis = Wall((0,), 16, HALF)
    samples = mode(axis, 16)
    lines = axis.spectral_weights * np.abs(proofs.spectrum(axis, samples)) ** 2
    assert lines.sum() == pytest.approx(axis.weights @ samples**2, rel=1e-13)
    assert np.count_nonzero(lines > 1e-12) == 1


def test_the_walls_are_where_the_field_ends_and_the_density_is_even_there() -> None:
    axis = Wall((2,), 40, HALF)
    x = np.array([-HALF, HALF, 1.001 * HALF, -2 * HALF])
    assert np.abs(axis.basis(x) @ mode(axis, 3)).max() < 1e-13
    # sin^2 = (1 - cos)/2: its own series of cosines (closed form)
    inside = np.linspace(-HALF, HALF, 33)
    np.testing.assert_allclose(axis.density_basis(inside) @ mode(axis, 3) ** 2, mode(axis, 3, inside) ** 2, atol=1e-13)
    np.testing.assert_allclose(axis.density_basis(x[:2]) @ np.ones(40), 1.0, atol=1e-12)
    assert not axis.density_basis(x[2:]).any()


@pytest.mark.parametrize("others", ["wave", "mirror", "wall", "radial"])
def test_beside_any_other_axis_a_kinetic_flow_turns_each_mode_by_its_own_energy(others: str) -> None:
    rest = {
        "wave": [Wave((1,), 12, 6.0), Wave((2,), 10, 6.0)], "mirror": [Mirror((1,), 9, 6.0), Wave((2,), 10, 6.0)],
        "wall": [Wall((1,), 9, 6.0), Mirror((2,), 8, 6.0)], "radial": [Radial((1, 2), 16, 6.0)],
    }[others]  # fmt: skip
    space = Space([Wall((0,), 20, HALF), *rest])
    d, axis = space.dim(0), space.axis(0)
    across = np.exp(-space.quadratic([0.0, 0.5, 0.5])) * np.ones(space.shape)
    phi = space.array(across * space.along(d, 2 * mode(axis, 1) + 1j * mode(axis, 4)))
    space.forward(phi)
    phi *= np.exp(-1j * space.along(d, axis.k2(0))) / space.round_trip
    space.inverse(phi)
    # exp(-i k^2 t/2) for every mode (closed form)
    turned = 2 * mode(axis, 1) * np.exp(-1j * (pi / LENGTH) ** 2) + 1j * mode(axis, 4) * np.exp(-16j * (pi / LENGTH) ** 2)
    np.testing.assert_allclose(phi, across * space.along(d, turned), atol=1e-13)


@pytest.mark.parametrize("wall", [0, 1])
def test_sines_and_cosines_in_one_transform_keep_to_their_own_axes(wall: int) -> None:
    space = Space([Wall((wall,), 20, HALF), Mirror((1 - wall,), 12, 2.0), Wave((2,), 1, 0.5)])
    phi = space.array(space.along(wall, mode(space.axis(wall), 3)) * np.ones(space.shape))
    found = np.abs(space.forward(phi)) > 1e-9
    # one line: the third sine, and the constant of the cosines
    assert np.argwhere(found).tolist() == [[2, 0, 0] if wall == 0 else [0, 2, 0]]


def box_cloud(phi: np.ndarray, n: int = 96) -> Cloud:
    axis = Wall((0,), n, HALF)
    space = proofs.alone(axis)
    return Cloud(space, space.array(phi.reshape(-1, 1, 1)), Frame(), 0.0, 1.0)


def test_a_kicked_packet_has_the_kicks_wave_number_and_a_mode_has_none() -> None:
    axis = Wall((0,), 96, HALF)
    cloud = box_cloud(proofs.packet(axis.points - 0.3, 1, s=0.4))
    kicked = regauge(cloud, Xdot=np.array([-2.5, 0.0, 0.0]))
    seen = profile(kicked)
    # exp(i 2.5 x) on a Gaussian: <k> = 2.5, var k = 1/(4 s^2) (closed form)
    assert seen.k_mean[0] == pytest.approx(2.5, rel=1e-9)
    assert seen.k_var[0] == pytest.approx(1 / (4 * 0.16), rel=1e-7)
    assert seen.mean[0] == pytest.approx(0.3, rel=1e-9)
    assert profile(box_cloud(mode(axis, 2))).k_mean[0] == pytest.approx(0, abs=1e-13)


def test_the_mean_wave_number_of_two_modes_is_that_of_quantum_mechanics() -> None:
    # (psi_1 + i psi_2)/sqrt(2): <k> = Im int psi* psi' = -8/(3 L) (closed form), touching both walls
    axis = Wall((0,), 96, HALF)
    seen = profile(box_cloud((mode(axis, 1) + 1j * mode(axis, 2)) / np.sqrt(2)))
    assert seen.k_mean[0] == pytest.approx(-8 / (3 * LENGTH), rel=1e-12)


@pytest.mark.parametrize("n", [12, 25])
def test_moments_of_the_lowest_mode_are_exact_on_few_points(n: int) -> None:
    axis = Wall((0,), n, HALF)
    first, second = mode(axis, 1), mode(axis, 2)
    # <x^2> = L^2 (1/12 - 1/(2 pi^2)); <x> of (1 + 2)/sqrt(2) is -16 L/(9 pi^2); closed forms
    assert axis.weights * first**2 @ axis.x2(0) == pytest.approx(LENGTH**2 * (1 / 12 - 1 / (2 * pi**2)), rel=1e-13)
    assert axis.weights * (first + second) ** 2 / 2 @ axis.x1(0) == pytest.approx(-16 * LENGTH / (9 * pi**2), rel=1e-13)
    # <x k>_sym of (1 + i 3)/sqrt(2): Im int psi* x psi' = int x (psi_1 psi_3' - psi_3 psi_1')/2 = 3/4 (closed form)
    seen = profile(box_cloud((mode(Wall((0,), n, HALF), 1) + 1j * mode(Wall((0,), n, HALF), 3)) / np.sqrt(2), n))
    assert seen.cov[0] == pytest.approx(0.75, rel=1e-12)


def test_a_cloud_at_its_walls_is_not_at_an_edge() -> None:
    wall, wave = (Space([kind((0,), 40, HALF), Wave((1,), 1, 0.5), Wave((2,), 1, 0.5)]) for kind in (Wall, Wave))
    marginals = [np.ones(40), np.ones(1), np.ones(1)]
    assert edge_population(wall, marginals).tolist() == [0, 0, 0]
    assert edge_population(wave, marginals)[0] == pytest.approx(0.1)


def test_the_column_of_a_mode_is_its_density() -> None:
    space = Space([Wall((0,), 24, HALF), Wall((1,), 30, 2.0), Wave((2,), 1, 0.5)])
    along_y = np.sqrt(2 / 4.0) * np.sin(pi * (space.axis(1).points + 2.0) / 4.0)
    phi = space.array((mode(space.axis(0), 2)[:, None] * along_y[None, :])[:, :, None])
    column = ColumnViews(space).see(Cloud(space, phi, Frame(), 0.0, 1.0), ("z",))["z"]
    x, y = np.meshgrid(column.x, column.y)
    exact = (2 / LENGTH) * np.sin(2 * pi * (x + HALF) / LENGTH) ** 2 * 0.5 * np.sin(pi * (y + 2.0) / 4.0) ** 2
    swapped = column.values if column.values.shape == exact.shape else column.values.T
    np.testing.assert_allclose(swapped, exact, atol=1e-12)


def test_a_mode_let_out_of_its_walls_keeps_its_samples_and_its_atoms() -> None:
    wall = Wall((0,), 32, HALF)
    old, new = (proofs.alone(a) for a in (wall, Wave((0,), 64, LENGTH)))
    out = resample(mode(wall, 1).reshape(-1, 1, 1), old, new).reshape(-1)
    np.testing.assert_allclose(out[16:48], mode(wall, 1), atol=1e-13)
    assert np.abs(out[:16]).max() == 0 and np.abs(out[48:]).max() == 0
    # Euler and Maclaurin: a density that is even about its ends is summed exactly by midpoints
    assert new.integral(np.abs(out.reshape(-1, 1, 1)) ** 2) == pytest.approx(1, abs=1e-13)
