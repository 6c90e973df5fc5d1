"""Every kind of axis passes every proof; what only one kind can do is checked below."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from scipy import special

import proofs
from trapsim.space.axes import KINDS, Axis, Radial, Wave


@pytest.mark.parametrize("proof", proofs.PROOFS.values(), ids=proofs.PROOFS.keys())
@pytest.mark.parametrize("axis", proofs.AXES.values(), ids=proofs.AXES.keys())
def test_axis(axis: Axis, proof: Callable[[Axis], None]) -> None:
    proof(axis)


def test_every_kind_of_axis_is_proved() -> None:
    assert {axis.kind for axis in proofs.AXES.values()} == set(KINDS)


def test_a_wave_axis_spans_its_period_with_cells_around_the_middle() -> None:
    axis = Wave((1,), 10, 5.0)
    np.testing.assert_allclose(axis.points, np.arange(-4.5, 5.0, 1.0))
    assert axis.weights.sum() == pytest.approx(10.0)
    # a periodic function sampled beyond one end comes in at the other
    assert axis.k_max == pytest.approx(np.pi / axis.spacing)


def test_the_highest_wave_of_an_even_axis_counts_in_energy_but_not_in_current() -> None:
    axis = Wave((0,), 8, 4.0)
    assert axis.k2(0).max() == pytest.approx(np.pi**2)
    assert np.abs(axis.derivative_k()).max() == pytest.approx(0.75 * np.pi)


def test_a_wave_series_is_exact_for_every_wave_it_holds() -> None:
    # A trigonometric polynomial is its own interpolant.
    axis = Wave((0,), 16, 2.0)
    x = np.linspace(-2, 2, 33)
    for m in range(-7, 8):
        wave = np.exp(1j * np.pi * m * axis.points / 2)
        np.testing.assert_allclose(axis.basis(x) @ wave, np.exp(1j * np.pi * m * x / 2), atol=1e-13)


def test_one_point_makes_a_direction_uniform() -> None:
    axis = Wave((2,), 1, 5.0)
    assert axis.uniform and not axis.fftw
    assert axis.weights.sum() == pytest.approx(10.0)
    assert axis.k2(2).tolist() == [0.0]
    assert axis.basis(np.array([-3.0, 0.0, 3.0])).ravel().tolist() == [1.0, 1.0, 1.0]
    assert axis.finer().n == 1


def test_a_radial_axis_has_its_points_on_the_zeros_of_the_bessel_function() -> None:
    # Guizar-Sicairos & Gutierrez-Vega, J. Opt. Soc. Am. A 21, 53 (2004): r_n = alpha_n R/alpha_(N+1).
    axis = Radial((0, 1), 20, 3.0)
    zeros = special.jn_zeros(0, 21)
    np.testing.assert_allclose(axis.points, zeros[:20] / zeros[20] * 3.0, rtol=1e-14)
    np.testing.assert_allclose(special.j0(axis.k * 3.0), 0.0, atol=1e-12)


def test_each_bessel_mode_is_one_line_of_the_radial_spectrum() -> None:
    # J0(alpha_n r/R)/(sqrt(pi) R |J1(alpha_n)|) are the normalised round modes of a disc that vanish at R.
    axis = Radial((0, 2), 24, 2.0)
    for n in (0, 3, 11):
        mode = special.j0(axis.k[n] * axis.points) / (np.sqrt(np.pi) * 2.0 * abs(special.j1(axis.k[n] * 2.0)))
        np.testing.assert_allclose(np.abs(axis.forward_matrix @ mode), np.eye(24)[n], atol=1e-6)


def test_the_radial_transform_is_exactly_orthogonal() -> None:
    axis = Radial((0, 1), 40, 5.0)
    np.testing.assert_allclose(axis.inverse_matrix @ axis.forward_matrix, np.eye(40), atol=2e-14)
    root = np.sqrt(axis.weights)
    transform = axis.forward_matrix / root[None, :]
    np.testing.assert_allclose(transform @ transform.T, np.eye(40), atol=2e-14)


def test_a_round_gaussian_seen_from_the_side_is_a_gaussian() -> None:
    axis = proofs.AXES["radial"]
    x = np.linspace(-5, 5, 31)
    side = axis.project(x) @ np.abs(proofs.on(axis)) ** 2
    np.testing.assert_allclose(side, np.abs(proofs.packet(x, 1)) ** 2, atol=1e-9)


def test_a_paraboloid_seen_from_the_side_has_the_abel_transform() -> None:
    # Abel transform of (1 - r^2)^2: (16/15)(1 - x^2)^(5/2).
    axis = Radial((0, 1), 60, 1.6)
    x = np.linspace(-1.5, 1.5, 25)
    side = axis.project(x) @ np.maximum(1 - axis.points**2, 0) ** 2
    np.testing.assert_allclose(side, 16 / 15 * np.maximum(1 - x**2, 0) ** 2.5, atol=2e-4)
    assert not axis.project(np.array([1.7])).any()


def test_a_flat_axis_has_no_side_view() -> None:
    with pytest.raises(TypeError, match="side view"):
        Wave((0,), 8, 1.0).project(np.zeros(1))


def test_an_unfinished_kind_of_axis_says_what_it_lacks() -> None:
    for ask in (lambda a: a.x1(0), lambda a: a.x2(0), lambda a: a.k2(0), lambda a: a.basis(0)):
        with pytest.raises(TypeError, match="Axis does not say"):
            ask(Axis())
