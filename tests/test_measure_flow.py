"""Current and continuity of closed-form packets."""

from __future__ import annotations

from math import prod

import numpy as np
import pytest

import proofs
from reference import gaussian
from trapsim.cloud.cloud import Cloud
from trapsim.measure.flow import continuity_residual, current, divergence
from trapsim.space.axes import Radial, Wave
from trapsim.space.frame import Frame
from trapsim.space.space import Space

Q = 0.7
OMEGAS = (1.1, 1.9, 1.9)
V = (0.4, -0.2, 0.3)


def flying(space: Space, t: float, *, frame: Frame | None = None, kicks: tuple[float, float, float] = V) -> Cloud:
    """Kicked, freely flying packets along three directions, in the lab's own coordinates."""
    phi = 1.0
    for j, x in enumerate(space.coordinates()):
        phi = phi * gaussian.packet(x, t, omega=OMEGAS[j], q=Q, v0=kicks[j])
    return Cloud(space, space.array(phi), frame or Frame(), t, Q)


def waves() -> Space:
    return Space([Wave((0,), 80, 9.0), Wave((1,), 80, 8.0), Wave((2,), 80, 8.0)])


def densities(space: Space, t: float) -> list[np.ndarray]:
    return [
        gaussian.density(x, t, omega=w, q=Q, centre=v * t)
        for x, w, v in zip(space.coordinates(), OMEGAS, V, strict=True)
    ]


@pytest.mark.slow
def test_the_current_of_flying_packets() -> None:
    # Closed form: j = n [v + (b'/b)(x - v t)] for each of the three packets.
    space, t = waves(), 0.6
    n = densities(space, t)
    for j, found in enumerate(current(flying(space, t))):
        x = space.coordinates()[j]
        own = gaussian.current(x, t, omega=OMEGAS[j], q=Q, centre=V[j] * t, velocity=V[j])
        expected = own * prod(n[i] for i in range(3) if i != j)
        np.testing.assert_allclose(found, expected, atol=1e-7 * np.abs(expected).max())


def test_the_current_of_a_packet_does_not_depend_on_the_frame() -> None:
    # The packet's phase is shared between the frame, b' y^2/(2 q b), and phi, whose chirp is the rest of it.
    space, t = waves(), 1.2
    b, rates = (2.0, 1.5, 2.5), (1.0, 0.4, 2.0)
    sizes = tuple(gaussian.width(t, omega=w, q=Q) / s for w, s in zip(OMEGAS, b, strict=True))
    chirps = tuple(
        s**2 * (gaussian.curvature(t, omega=w) - r / s) / Q for w, s, r in zip(OMEGAS, b, rates, strict=True)
    )
    frame = Frame(b=np.array(b), bdot=np.array(rates), X=np.array(V) * t, Xdot=np.array(V))
    cloud = Cloud(space, proofs.cloud_samples(space, sizes=sizes, chirps=chirps), frame, t, Q)
    lab = [frame.lab(xi, j) for j, xi in enumerate(space.coordinates())]
    n = [gaussian.density(x, t, omega=w, q=Q, centre=v * t) for x, w, v in zip(lab, OMEGAS, V, strict=True)]
    for j, found in enumerate(current(cloud)):
        own = gaussian.current(lab[j], t, omega=OMEGAS[j], q=Q, centre=V[j] * t, velocity=V[j])
        expected = own * prod(n[i] for i in range(3) if i != j)
        np.testing.assert_allclose(found, expected, atol=1e-7 * np.abs(expected).max())


def test_on_a_radial_axis_the_current_runs_along_the_radius() -> None:
    space, t = Space([Wave((0,), 64, 9.0), Radial((1, 2), 40, 8.0)]), 0.6
    r, x = space.axes[0].points[:, None], space.axes[1].points[None, :]
    chirps = tuple(gaussian.curvature(t, omega=w) / Q for w in OMEGAS)
    sizes = tuple(gaussian.width(t, omega=w, q=Q) for w in OMEGAS)
    cloud = Cloud(space, proofs.cloud_samples(space, sizes=sizes, chirps=chirps), Frame(), t, Q)
    # two alike Gaussians of which one is taken at its centre
    n = gaussian.density(x, t, omega=1.1, q=Q) * gaussian.density(r, t, omega=1.9, q=Q)
    n = n / (np.sqrt(2 * np.pi) * sizes[1])
    outward, along = current(cloud)
    np.testing.assert_allclose(outward, gaussian.curvature(t, omega=1.9) * r * n, atol=1e-7 * n.max())
    np.testing.assert_allclose(along, gaussian.curvature(t, omega=1.1) * x * n, atol=1e-7 * n.max())


def test_the_divergence_of_the_current_is_minus_the_growth_of_the_density() -> None:
    # Closed form: the density's rate of change of each packet, product rule.
    space, t = waves(), 0.6
    n = densities(space, t)
    growth = 0.0
    for j, x in enumerate(space.coordinates()):
        own = gaussian.density_rate(x, t, omega=OMEGAS[j], q=Q, centre=V[j] * t, velocity=V[j])
        growth = growth + own * prod(n[i] for i in range(3) if i != j)
    np.testing.assert_allclose(divergence(flying(space, t)), -growth, atol=1e-6 * np.abs(growth).max())


def test_in_a_growing_frame_only_the_flow_beyond_the_frame_counts() -> None:
    # In the frame the velocity of xi is (q/b^2) c xi: div(n v) = n sum_j (q c_j/b_j^2)(1 - xi_j^2/s_j^2).
    b, chirps = np.array([1.5, 2.0, 2.0]), (0.3, -0.5, -0.5)
    for make in proofs.SPACES.values():
        space = make()
        cloud = Cloud(space, proofs.cloud_samples(space, chirps=chirps), Frame(b=b, bdot=np.ones(3)), 0.0, Q)
        rates = Q * np.array(chirps) / b**2
        shape = rates.sum() - space.quadratic(rates / np.array(proofs.SIZES) ** 2)
        expected = cloud.density() * shape
        np.testing.assert_allclose(divergence(cloud), expected, atol=1e-6 * np.abs(expected).max())


def test_exact_packets_obey_continuity_and_the_residual_falls_with_the_square_of_the_interval() -> None:
    # Central differences in time: the only error of exact states.
    space = waves()
    residuals = [continuity_residual(*(flying(space, 0.6 + k * h) for k in (-1, 0, 1))) for h in (0.02, 0.01)]
    assert residuals[1] < 1e-3
    assert residuals[0] / residuals[1] == pytest.approx(4, rel=0.02)


def test_a_cloud_that_does_not_move_as_its_current_says_is_found_out() -> None:
    space = waves()
    before, now, after = (flying(space, 0.6 + k * 0.01) for k in (-1, 0, 1))
    still = Cloud(space, space.array(np.abs(now.phi)), now.frame, now.time, Q)
    assert continuity_residual(before, still, after) > 0.1
