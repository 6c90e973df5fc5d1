"""Every convention, once, as a sentence: signs, centring, norm, order of arrays, units."""

from __future__ import annotations

from collections.abc import Callable
from math import pi

import numpy as np
import pytest
from scipy import constants

import proofs
import trapsim
from trapsim.cloud.cloud import Cloud
from trapsim.evolve.scaling import StandingLaw, measure_law
from trapsim.evolve.splitstep import SplitStep
from trapsim.measure.columns import ColumnViews
from trapsim.measure.flow import current
from trapsim.measure.observables import moments, profile
from trapsim.measure.views import VIEWS
from trapsim.prepare.timeline import build_timeline
from trapsim.space.axes import Radial, Wall, Wave
from trapsim.space.frame import Frame
from trapsim.space.space import Space
from trapsim.terms.field import Gradient, Gravity
from trapsim.terms.harmonic import Harmonic

Solve = Callable[[trapsim.Plan], trapsim.Run]

Q = 0.7
G = constants.g
#: kg; of order one, so that forces and energies can be compared
MASS = 1.4


def box(n: int = 32, half: float = 5.0) -> Space:
    return Space([Wave((j,), n, half) for j in range(3)])


def packet(
    space: Space, *, at: tuple[float, float, float] = (0, 0, 0), k: tuple[float, float, float] = (0, 0, 0)
) -> Cloud:
    """A Gaussian somewhere in a space, with a phase exp(i k.x)."""
    phi = 1.0
    for x, x0, kx in zip(space.coordinates(), at, k, strict=True):
        phi = phi * proofs.packet(x - x0, 1, s=0.7) * np.exp(1j * kx * x)
    return Cloud(space, space.array(phi), Frame(), 0.0, Q)


def velocity(cloud: Cloud) -> np.ndarray:
    return moments(cloud, profile(cloud), coupling=0.0, curvature=np.zeros(3), rest=0.0).velocity


PLAN = """
[atoms]
species = "Rb-87"
number = 2e4
scattering_length = "100.4 a0"
[trap.dipole]
kind = "harmonic"
frequency = ["50 Hz", "80 Hz", "110 Hz"]
[gravity]
direction = "-z"
[numerics]
accuracy = "draft"
threads = 1
[[sequence]]
stage = "hold"
duration = "1 ms"
[[sequence]]
stage = "kick"
velocity = ["3 mm/s", "-2 mm/s", "0 mm/s"]
[[sequence]]
stage = "release"
duration = "4 ms"
"""


@pytest.fixture(scope="module")
def flown(solved: Solve) -> trapsim.Run:
    return solved(trapsim.plan_from_text(PLAN, "conventions"))


# arrays and grids


def test_array_axes_0_1_2_are_x_y_z() -> None:
    space = Space([Wave((2,), 6, 1.0), Wave((0,), 4, 1.0), Wave((1,), 5, 1.0)])
    assert space.shape == (4, 5, 6)
    assert [x.shape for x in space.coordinates()] == [(4, 1, 1), (1, 5, 1), (1, 1, 6)]


def test_on_a_radial_axis_the_radius_stands_first_and_the_lone_direction_second() -> None:
    assert Space([Wave((1,), 6, 1.0), Radial((0, 2), 4, 1.0)]).shape == (4, 6)


def test_the_middle_of_a_grid_is_the_frames_centre_and_lies_between_points() -> None:
    axis = Wave((0,), 8, 4.0)
    np.testing.assert_allclose(axis.points, -axis.points[::-1])
    assert axis.points[4] == pytest.approx(axis.spacing / 2)
    assert profile(packet(box())).mean == pytest.approx(np.zeros(3), abs=1e-12)


def test_a_wave_function_is_normalised_to_one_and_atoms_are_counted_beside_it(flown: trapsim.Run) -> None:
    cloud = packet(box())
    assert cloud.space.integral(cloud.density()) == pytest.approx(1)
    assert flown.track["norm"][0] == pytest.approx(1)
    assert flown.summary.end.atoms == pytest.approx(2e4, rel=1e-2)


def test_lab_coordinates_are_scale_times_grid_coordinate_plus_centre() -> None:
    assert Frame(b=np.full(3, 2.0), X=np.full(3, 5.0)).lab(np.array([3.0]), 0).tolist() == [11.0]


# transforms and phases


def test_the_forward_transform_finds_exp_plus_ikx_at_plus_k() -> None:
    space = Space([Wave((0,), 8, 4.0), Wave((1,), 1, 1.0), Wave((2,), 1, 1.0)])
    k = 2 * pi / 8.0
    spectrum = space.forward(space.array(np.exp(1j * k * space.coordinates()[0]))).ravel()
    assert np.argmax(np.abs(spectrum)) == 1
    assert space.axes[0].k[1] == pytest.approx(k)


def test_the_sines_of_a_wall_axis_start_at_the_lower_wall_half_a_spacing_before_the_first_point() -> None:
    space = Space([Wall((0,), 32, 5.0), Wave((1,), 1, 0.5), Wave((2,), 1, 0.5)])
    axis = space.axis(0)
    assert axis.points[0] - axis.spacing / 2 == pytest.approx(-5.0)
    spectrum = space.forward(space.array(np.sin(axis.k[2] * (space.coordinates()[0] + 5.0)))).ravel()
    assert axis.k[2] == pytest.approx(3 * pi / 10) and axis.round_trip == 64
    np.testing.assert_allclose(spectrum, 32 * np.eye(32)[2], atol=1e-12)


def test_transforms_carry_no_factor_and_a_round_trip_multiplies_by_the_number_of_points() -> None:
    space = box(4)
    assert space.round_trip == 64
    samples = np.arange(64.0).reshape(4, 4, 4)
    assert space.forward(space.array(samples))[0, 0, 0] == pytest.approx(samples.sum())
    np.testing.assert_allclose(space.inverse(space.forward(space.array(samples))), 64 * samples, atol=1e-10)


def test_a_phase_exp_plus_ikx_is_a_velocity_of_plus_hbar_k_over_m() -> None:
    assert velocity(packet(box(), k=(1.0, -2.0, 0.5))) == pytest.approx([Q, -2 * Q, 0.5 * Q], rel=1e-9)


def test_the_current_of_exp_plus_ikx_runs_towards_plus_x() -> None:
    cloud = packet(box(), k=(1.0, 0, 0))
    np.testing.assert_allclose(current(cloud)[0], Q * cloud.density(), atol=1e-6)


def test_a_positive_velocity_of_the_frame_moves_the_cloud_towards_plus() -> None:
    space = box()
    cloud = Cloud(space, packet(space).phi, Frame(Xdot=np.array([0.3, 0, 0])), 0.0, Q)
    assert velocity(cloud) == pytest.approx([0.3, 0, 0], abs=1e-12)


def test_a_growing_frame_makes_a_growing_cloud() -> None:
    space = box()
    cloud = Cloud(space, packet(space).phi, Frame(bdot=np.full(3, 0.5)), 0.0, Q)
    m = moments(cloud, profile(cloud), coupling=0.0, curvature=np.zeros(3), rest=0.0)
    assert m.rate == pytest.approx(np.full(3, 0.5 * 0.7), rel=1e-9)


class Nothing:
    """An interval in which nothing acts."""

    start, stop, steady = 0.0, 1.0, True

    def parts_at(self, t: float) -> tuple[()]:
        return ()

    def coupling(self, t: float) -> float:
        return 0.0


def flow(cloud: Cloud, rest: Callable[[float], object]) -> SplitStep:
    start = measure_law(cloud, profile(cloud), tail=None, moving=(False, False, False))
    return SplitStep(cloud.space, StandingLaw(start, Nothing()), q=Q, rest=rest, rate=lambda t: 0.0)


def one_wave(m: int) -> Cloud:
    space = Space([Wave((0,), 8, 4.0), Wave((1,), 1, 1.0), Wave((2,), 1, 1.0)])
    return Cloud(space, space.array(np.exp(2j * pi * m / 8 * space.coordinates()[0]) / np.sqrt(32)), Frame(), 0.0, Q)


def test_energy_turns_the_phase_backwards_a_plane_wave_by_exp_minus_i_q_k_squared_t_over_2() -> None:
    cloud = one_wave(1)
    phi = flow(cloud, lambda t: 0.0).strang(cloud.space.array(cloud.phi), 0.0, 0.3)
    np.testing.assert_allclose(phi, np.exp(-0.5j * Q * (2 * pi / 8) ** 2 * 0.3) * cloud.phi, atol=1e-13)


def test_a_potential_turns_the_phase_by_exp_minus_i_v_t_over_hbar() -> None:
    cloud = one_wave(0)
    flat = np.full(cloud.space.shape, 2.0 * constants.hbar)
    phi = flow(cloud, lambda t: flat).strang(cloud.space.array(cloud.phi), 0.0, 0.3)
    np.testing.assert_allclose(phi, np.exp(-0.6j) * cloud.phi, atol=1e-13)


# forces


def test_gravity_falls_towards_minus_z_unless_told_otherwise() -> None:
    assert Gravity().acceleration() == (0.0, 0.0, -G)
    assert Gravity(direction="+x").acceleration() == (G, 0.0, 0.0)


def test_the_energy_of_gravity_rises_upwards() -> None:
    part = Gravity().part(MASS)
    assert part.energy(0.0, 0.0, 1.0) - part.energy(0.0, 0.0, 0.0) == pytest.approx(MASS * G)


def test_a_levitation_that_points_up_pushes_up() -> None:
    force, curvature = Gradient(acceleration=(0.0, 0.0, 9.0), mass=MASS).steer((0.0, 0.0, 0.0))
    assert force == pytest.approx([0, 0, 9.0 * MASS])
    assert not curvature.any()


def test_a_trap_pulls_back_towards_its_centre() -> None:
    trap = Harmonic(frequency=(2.0, 3.0, 4.0), centre=(1.0, 0.0, 0.0), mass=MASS)
    force, curvature = trap.steer((0.0, 1.0, 0.0))
    assert force == pytest.approx([4 * MASS, -9 * MASS, 0])
    assert curvature == pytest.approx(MASS * np.array([4.0, 9.0, 16.0]))
    # minus the slope of the energy
    assert -(trap.energy(1e-6, 1.0, 0.0) - trap.energy(-1e-6, 1.0, 0.0)) / 2e-6 == pytest.approx(force[0], rel=1e-6)


def test_frequencies_are_cycles_per_second_in_the_plan_and_radians_per_second_inside() -> None:
    plan = trapsim.plan_from_text(PLAN, "conventions")
    assert plan.trap["dipole"].frequency == pytest.approx([2 * pi * f for f in (50.0, 80.0, 110.0)])


def test_a_cloud_hangs_below_its_trap_by_g_over_omega_squared(flown: trapsim.Run) -> None:
    assert flown.summary.ground.origin_um == pytest.approx((0, 0, -1e6 * G / (2 * pi * 110.0) ** 2), rel=1e-9)


def test_repulsion_costs_energy_and_makes_the_cloud_wider(solved: Solve, flown: trapsim.Run) -> None:
    assert flown.summary.ground.interaction_hz > 0
    ideal = solved(trapsim.plan_from_text(PLAN, "conventions", {"atoms.scattering_length": "0 a0"}))
    assert ideal.summary.ground.interaction_hz == 0
    assert all(a > b for a, b in zip(flown.summary.ground.width_um, ideal.summary.ground.width_um, strict=True))


# what is reported


def test_reported_positions_count_from_where_the_cloud_rested(flown: trapsim.Run) -> None:
    assert flown.summary.stages[0].end.centre_um == pytest.approx((0, 0, 0), abs=1e-9)
    np.testing.assert_allclose(flown.columns["x"].rows[0].mean(), 0.0, atol=1e-10)


def test_a_kick_adds_its_velocity_and_gravity_takes_over(flown: trapsim.Run) -> None:
    end = flown.summary.end
    assert end.velocity_mm_per_s == pytest.approx((3.0, -2.0, -1e3 * G * 4e-3), rel=1e-9)
    assert end.centre_um == pytest.approx((3 * 4, -2 * 4, -1e6 * G * 4e-3**2 / 2), rel=1e-9)


def test_the_clock_starts_with_the_sequence_and_the_flight_clock_with_the_release(flown: trapsim.Run) -> None:
    assert flown.summary.end.time_ms == pytest.approx(5.0, rel=1e-12)
    assert flown.summary.end.flight_ms == pytest.approx(4.0, rel=1e-12)
    assert np.isnan(flown.track["flight_time"][0])


def test_the_classical_path_is_known_before_anything_is_computed() -> None:
    timeline = build_timeline(trapsim.plan_from_text(PLAN, "conventions"))
    fall = -G / (2 * pi * 110.0) ** 2 - G * 4e-3**2 / 2
    assert timeline.path[-1][:3] == pytest.approx([3e-3 * 4e-3, -2e-3 * 4e-3, fall], rel=1e-9)


def test_width_is_the_rms_half_width(flown: trapsim.Run) -> None:
    # Baym & Pethick, Phys. Rev. Lett. 76, 6 (1996): <x^2> = R^2/7 for a Thomas-Fermi cloud (not R, not R/sqrt(2)).
    g = flown.summary.ground
    for width, radius in zip(g.width_um, g.thomas_fermi_radius_um, strict=True):
        assert width == pytest.approx(radius / np.sqrt(7), rel=0.05)


def test_energies_are_per_atom_and_mu_counts_the_mean_field_twice(flown: trapsim.Run) -> None:
    g = flown.summary.ground
    assert g.energy_hz == pytest.approx(g.kinetic_hz + g.trap_hz + g.interaction_hz, rel=1e-12)
    assert g.chemical_potential_hz == pytest.approx(g.energy_hz + g.interaction_hz, rel=1e-12)


def test_the_healing_length_is_one_over_the_root_of_8_pi_n_a(flown: trapsim.Run) -> None:
    g = flown.summary.ground
    a = 100.4 * constants.physical_constants["Bohr radius"][0]
    assert g.healing_length_um == pytest.approx(1e6 / np.sqrt(8 * pi * g.peak_density_per_um3 * 1e18 * a), rel=1e-9)
    assert g.gas_parameter == pytest.approx(g.peak_density_per_um3 * 1e18 * a**3, rel=1e-9)


def test_the_expansion_energy_of_a_direction_is_m_spread_squared_over_k(flown: trapsim.Run) -> None:
    end, mass = flown.summary.end, flown.plan.atoms.mass
    for energy, spread in zip(end.expansion_energy_nk, end.velocity_spread_mm_per_s, strict=True):
        assert energy == pytest.approx(mass * (1e-3 * spread) ** 2 / constants.k * 1e9, rel=1e-9)
    internal = sum(end.expansion_energy_nk) / 2
    assert end.internal_kinetic_nk == pytest.approx(internal, rel=1e-9)


def test_an_aspect_ratio_xy_is_the_width_along_x_over_that_along_y(flown: trapsim.Run) -> None:
    end = flown.summary.end
    assert end.aspect_ratio["xy"] == pytest.approx(end.width_um[0] / end.width_um[1])


# pictures


def test_seen_along_x_y_points_right_and_z_up() -> None:
    assert VIEWS["x"] == ("y", "z")


def test_seen_along_y_x_points_right_and_z_up() -> None:
    assert VIEWS["y"] == ("x", "z")


def test_seen_along_z_x_points_right_and_y_up() -> None:
    assert VIEWS["z"] == ("x", "y")


def test_rows_of_a_column_go_upwards_and_columns_to_the_right() -> None:
    space = box()
    seen = ColumnViews(space, raster=200).see(packet(space, at=(1.2, 0.0, -0.8)), ("y",))["y"]
    row, column = np.unravel_index(np.argmax(seen.values), seen.values.shape)
    assert seen.y[row] == pytest.approx(-0.8, abs=0.1)
    assert seen.x[column] == pytest.approx(1.2, abs=0.1)


def test_a_column_is_kept_at_positions_counted_from_the_origin_and_falls_with_the_cloud(flown: trapsim.Run) -> None:
    series = flown.columns["y"]
    assert series.rows[-1].mean() == pytest.approx(-G * 4e-3**2 / 2, rel=1e-6)
    assert series.cols[-1].mean() == pytest.approx(3e-3 * 4e-3, rel=1e-6)
