"""Sizes, rates, velocities and energies of closed-form packets, in whatever frame they are kept."""

from __future__ import annotations

from collections.abc import Callable
from math import pi

import numpy as np
import pytest
from scipy.constants import hbar

import proofs
from reference import gaussian
from trapsim.cloud.cloud import Cloud
from trapsim.measure.observables import Moments, moments, peak_density, profile
from trapsim.space.axes import Radial, Wave
from trapsim.space.frame import Frame
from trapsim.space.space import Space

Q = 0.7
OMEGAS = (1.1, 1.9, 1.9)
every_space = pytest.mark.parametrize("make", proofs.SPACES.values(), ids=proofs.SPACES.keys())


def released(space: Space, t: float, *, b: tuple[float, float, float], rates: tuple[float, float, float]) -> Cloud:
    """The released ground state of three oscillators after a time t, kept in a frame with any scale and rate."""
    frame = Frame(b=np.array(b), bdot=np.array(rates))
    sizes = tuple(gaussian.width(t, omega=w, q=Q) / s for w, s in zip(OMEGAS, b, strict=True))
    chirps = tuple(
        s**2 * (gaussian.curvature(t, omega=w) - r / s) / Q for w, s, r in zip(OMEGAS, b, rates, strict=True)
    )
    return Cloud(space, proofs.cloud_samples(space, sizes=sizes, chirps=chirps), frame, t, Q)


def seen(cloud: Cloud, *, coupling: float = 0.0, curvature: np.ndarray | None = None) -> Moments:
    return moments(
        cloud, profile(cloud), coupling=coupling, curvature=np.zeros(3) if curvature is None else curvature, rest=0.0
    )


@every_space
@pytest.mark.parametrize(
    ("t", "b", "rates"),
    [
        (0.0, (1.0, 1.0, 1.0), (0.0, 0.0, 0.0)),
        (0.6, (1.0, 1.0, 1.0), (0.0, 0.0, 0.0)),
        (2.0, (2.0, 3.0, 3.0), (0.9, 1.6, 1.6)),
        (2.0, (2.5, 3.5, 3.5), (1.4, 1.2, 1.2)),
        (-1.0, (1.4, 1.7, 1.7), (-0.6, -1.1, -1.1)),
    ],
)
def test_a_free_gaussian_in_any_frame(
    make: Callable[[], Space], t: float, b: tuple[float, float, float], rates: tuple[float, float, float]
) -> None:
    # The free Gaussian packet, closed form: width, its rate, a kinetic energy of hbar w/4 whatever the time.
    m = seen(released(make(), t, b=b, rates=rates))
    for j, w in enumerate(OMEGAS):
        assert m.width[j] == pytest.approx(gaussian.width(t, omega=w, q=Q), rel=1e-9)
        assert m.rate[j] == pytest.approx(gaussian.width_rate(t, omega=w, q=Q), rel=1e-7, abs=1e-9)
        assert m.kinetic[j] / hbar == pytest.approx(w / 4, rel=1e-7)
        assert m.spread[j] == pytest.approx(np.sqrt(Q * w / 2), rel=1e-7)
    assert m.norm == pytest.approx(1, abs=1e-10)
    assert m.internal / hbar == pytest.approx(sum(OMEGAS) / 4, rel=1e-7)
    assert m.scale.tolist() == list(b)


def test_a_packet_off_centre_and_under_way() -> None:
    # <x> = X + b x0; v(x) = X' + b' xi + (q/b)(k0 + c (xi - x0)); the spread adds in quadrature.
    space = proofs.SPACES["waves"]()
    x0, k0, c = (0.4, -0.3, 0.2), (0.5, 0.3, -0.8), (0.3, -0.5, 0.1)
    b, bdot = np.array([1.5, 2.0, 0.8]), np.array([0.4, -0.3, 0.2])
    frame = Frame(b=b, bdot=bdot, X=np.array([1.0, -2.0, 3.0]), Xdot=np.array([0.5, 0.0, -0.7]))
    phi = 1.0
    for j, xi in enumerate(space.coordinates()):
        phi = phi * proofs.packet(xi - x0[j], 1, s=proofs.SIZES[j], c=c[j]) * np.exp(1j * k0[j] * xi)
    m = seen(Cloud(space, space.array(phi), frame, 0.0, Q))
    s, x0, k0, c = (np.array(v) for v in (proofs.SIZES, x0, k0, c))
    velocity = frame.Xdot + bdot * x0 + Q / b * k0
    np.testing.assert_allclose(m.centre, frame.X + b * x0, rtol=1e-9)
    np.testing.assert_allclose(m.velocity, velocity, rtol=1e-8)
    np.testing.assert_allclose(m.width, b * s, rtol=1e-9)
    np.testing.assert_allclose(m.rate, b * s * (bdot / b + Q * c / b**2), rtol=1e-7)
    np.testing.assert_allclose(m.spread, np.sqrt((bdot + Q * c / b) ** 2 * s**2 + (Q / b) ** 2 / (4 * s**2)), rtol=1e-7)
    assert m.centre_kinetic / hbar == pytest.approx(float(velocity @ velocity) / (2 * Q), rel=1e-8)


@every_space
def test_mean_field_and_trap_energy_of_a_gaussian(make: Callable[[], Space]) -> None:
    # E_int = (g/2) int n^2 with int n^2 = 1/(8 pi^(3/2) s_x s_y s_z); E_pot = sum (k/2) s^2.
    b = np.array([1.5, 2.0, 2.0])
    space = make()
    cloud = Cloud(space, proofs.cloud_samples(space, chirps=(0, 0, 0)), Frame(b=b), 0.0, Q)
    stiffness = np.array([2.0, 0.5, 0.5])
    m = seen(cloud, coupling=11.0, curvature=hbar * stiffness)
    widths = b * proofs.SIZES
    mean_field, trap = 11.0 / 2 / (8 * pi**1.5 * np.prod(widths)), 0.5 * float(stiffness @ widths**2)
    assert m.interaction / hbar == pytest.approx(mean_field, rel=1e-8)
    assert m.trap / hbar == pytest.approx(trap, rel=1e-8)
    kinetic = sum(Q / 8 / w**2 for w in widths)
    assert m.internal / hbar == pytest.approx(kinetic + trap + mean_field, rel=1e-8)


def test_a_potential_that_is_not_steered_counts_as_trap_energy() -> None:
    # <x^4> of a Gaussian is 3 s^4.
    space = proofs.SPACES["waves"]()
    phi = 0.6**0.5 * proofs.cloud_samples(space, chirps=(0, 0, 0))
    cloud = Cloud(space, space.array(phi), Frame(), 0.0, Q)
    x = space.coordinates()[0]
    m = moments(cloud, profile(cloud), coupling=0.0, curvature=np.zeros(3), rest=hbar * x**4)
    assert m.trap / hbar == pytest.approx(3 * proofs.SIZES[0] ** 4, rel=1e-8)


@every_space
def test_figures_are_per_atom_still_there(make: Callable[[], Space]) -> None:
    # With a share f left and the same shape all means stay; the mean field per atom goes with f.
    space = make()
    phi = proofs.cloud_samples(space, chirps=(0.3, -0.5, -0.5))
    full, left = (seen(Cloud(space, space.array(a * phi), Frame(), 0.0, Q), coupling=3.0) for a in (1.0, 0.6**0.5))
    assert left.norm == pytest.approx(0.6, rel=1e-10)
    for name in ("width", "rate", "spread", "kinetic"):
        np.testing.assert_allclose(getattr(left, name), getattr(full, name), rtol=1e-10)
    assert left.interaction / full.interaction == pytest.approx(0.6, rel=1e-10)


def test_a_uniform_direction_has_neither_width_nor_rate() -> None:
    space = Space([Wave((0,), 48, 8.0), Wave((1,), 1, 2.0), Wave((2,), 1, 2.0)])
    phi = proofs.packet(space.axes[0].points, 1)[:, None, None] / 4
    m = seen(Cloud(space, space.array(phi), Frame(), 0.0, Q))
    assert m.width == pytest.approx([proofs.WIDTH, 0, 0], rel=1e-9)
    assert m.rate.tolist()[1:] == [0.0, 0.0]


every_middle = pytest.mark.parametrize(
    "space",
    [
        Space([Wave((j,), 28, 5.0) for j in range(3)]),
        Space([Wave((j,), 29, 5.0) for j in range(3)]),
        Space([Wave((0,), 28, 5.0), Radial((1, 2), 18, 5.0)]),
    ],
    ids=["between points", "on a point", "radial"],
)


@every_middle
def test_the_peak_density_of_a_gaussian(space: Space) -> None:
    # n(0) = (2 pi)^(-3/2)/(s_x s_y s_z), in the lab over b_x b_y b_z.
    frame = Frame(b=np.array([1.5, 2.0, 2.0]))
    phi = proofs.cloud_samples(space, sizes=(0.9, 0.8, 0.8), chirps=(0, 0, 0))
    expected = (2 * pi) ** -1.5 / (0.9 * 0.8 * 0.8) / 6.0
    assert peak_density(Cloud(space, phi, frame, 0.0, Q)) == pytest.approx(expected, rel=1e-9)


@every_middle
def test_the_peak_density_of_a_cloud_that_is_no_gaussian(space: Space) -> None:
    # n = 1/cosh^2(r/w): 1 at the centre.
    r = np.sqrt(space.quadratic([1.0, 1.0, 1.0]))
    phi = 1 / np.cosh(r / 1.5)
    assert peak_density(Cloud(space, space.array(phi), Frame(), 0.0, Q)) == pytest.approx(1.0, rel=1e-6)


def test_the_peak_density_of_a_cloud_off_centre_is_that_of_its_highest_point() -> None:
    space = Space([Wave((j,), 32, 6.0) for j in range(3)])
    at = space.axes[0].points[20]
    phi = 1.0
    for x in space.coordinates():
        phi = phi * proofs.packet(x - at, 1, s=0.8)
    assert peak_density(Cloud(space, space.array(phi), Frame(), 0.0, Q)) == pytest.approx(
        (2 * pi) ** -1.5 / 0.8**3, rel=1e-12
    )
