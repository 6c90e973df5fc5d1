"""The momentum distribution in flight, beside a direct Fourier sum over the wave function in the lab and closed forms.

At 10 ms the phase of a released cloud winds hundreds of times across it; the direct sum has a grid fine enough for that.
"""

from __future__ import annotations

from math import erf, pi, sqrt

import numpy as np
import pytest

import light
import motion
from reference import units
from trapsim.cloud.cloud import Cloud
from trapsim.measure.momentum import Momentum, momentum, order_motion, order_shares
from trapsim.prepare.setup import prepare
from trapsim.space.axes import Mirror, Radial, Wave
from trapsim.space.frame import Frame
from trapsim.space.space import Space
from trapsim.terms.lattice import Lattice

Array = np.ndarray
Q = units.hbar / motion.RB
TIMES = (0.05e-3, 0.3e-3, 1e-3, 2e-3, 4e-3, 10e-3)


def direct(cloud: Cloud, j: int, k: Array, *, finer: int = 24) -> Array:
    """|psi(k)|^2 along direction j in the lab, summed over the others: a plain sum over a fine grid in lab metres.

    psi = B^(-1/2) phi exp{ (i/q) [ bdot y^2/(2 b) + Xdot y ] }, as the frame is defined.
    """
    cloud = light.whole(cloud)
    axis, d, frame = cloud.space.axis(j), cloud.space.dim(j), cloud.frame
    length, n = 2 * axis.half_extent, axis.n * finer
    xi = (np.arange(n) + 0.5) / n * length - length / 2
    y = frame.b[j] * xi
    # the samples' own trigonometric series, summed here
    coefficients = np.fft.fft(np.moveaxis(np.asarray(cloud.phi), d, 0), axis=0) / axis.n
    series = np.exp(1j * np.outer(xi - axis.points[0], 2 * pi * np.fft.fftfreq(axis.n, length / axis.n)))
    phi = np.tensordot(series, coefficients, axes=(1, 0))
    wound = np.exp(1j / cloud.q * (frame.bdot[j] * y**2 / (2 * frame.b[j]) + frame.Xdot[j] * y))
    psi = wound.reshape(-1, *(1,) * (phi.ndim - 1)) * phi / sqrt(frame.b[j])
    power = np.abs(np.tensordot(np.exp(-1j * np.outer(k, y)), psi, axes=(1, 0)) * frame.b[j] * length / n) ** 2
    for weights in (a.weights for e, a in enumerate(cloud.space.axes) if e != d):
        power = np.tensordot(power, weights, axes=(1, 0))
    return power / (2 * pi)


def flown(a: str, frequency: tuple[float, float, float] = (60, 90, 90)) -> list[Cloud]:
    """A kicked and released cloud at TIMES."""
    times = "[" + ", ".join(motion.seconds(t) for t in TIMES) + "]"
    setup = prepare(motion.cloud(
        motion.stage("kick", velocity='["1.5 mm/s", "0 mm/s", "0 mm/s"]'),
        motion.stage("release", TIMES[-1], pictures=times), frequency=frequency, a=a, number=2e4, accuracy="fine",
    ))  # fmt: skip
    return [t.state.cloud for t in motion.play(setup, motion.begin(setup)) if t.reason != "step"]


def is_far(seen: Momentum, cloud: Cloud) -> bool:
    """Whether the distribution was read off in the far field: its points are then not those of the axis' spectrum."""
    return abs(np.diff(seen.k)[0] * cloud.space.axis(0).half_extent * cloud.frame.b[0] / pi - 1) > 1e-6


@pytest.mark.parametrize("a", ["0 a0", "100.4 a0"])
def test_the_distribution_is_that_of_a_direct_sum_all_along_a_flight(a: str) -> None:
    far = []
    for cloud in flown(a)[1:]:
        seen = momentum(cloud, 0)
        exact = direct(cloud, 0, seen.k)
        tolerance = 1e-6 if cloud.time == TIMES[-1] else 5e-6
        assert np.abs(seen.density - exact).max() < tolerance * exact.max()
        assert seen.density @ np.gradient(seen.k) == pytest.approx(1, abs=1e-6)
        assert seen.mean() * Q == pytest.approx(1.5e-3, rel=1e-8)
        far.append(is_far(seen, cloud))
    # both ways of taking it were used, and the hand-over is somewhere between
    assert far == sorted(far) and far[-1] and not far[0]


def test_an_ideal_gas_keeps_the_momenta_it_had_at_rest() -> None:
    sigma = sqrt(2 * pi * 60 / (2 * Q))
    for cloud in flown("0 a0")[1:]:
        seen = momentum(cloud, 0)
        # textbook: |psi(k)|^2 of the oscillator's ground state, moved by the kick
        exact = np.exp(-((seen.k - 1.5e-3 / Q) ** 2) / (2 * sigma**2)) / (sqrt(2 * pi) * sigma)
        assert seen.density == pytest.approx(exact, abs=1e-6 * exact.max())


# ---- closed forms --------------------------------------------------------------------------------------------------

WIDTH, CHIRP = 1.1, 0.35


def packet(axis: Wave | Mirror, *, b: float, bdot: float, Xdot: float = 0.0, other: Wave | Radial | None = None) -> Cloud:
    """A chirped Gaussian packet along x in a frame; natural units, q = 1."""
    x = axis.points
    line = (2 * pi * WIDTH**2) ** -0.25 * np.exp(-(1 / (4 * WIDTH**2) - 0.5j * CHIRP) * x**2)
    space = Space([axis, *((other,) if other else (Wave((1,), 1, 0.5), Wave((2,), 1, 0.5)))])
    phi = space.along(space.dim(0), line) * np.ones(space.shape)
    phi = phi / sqrt(space.integral(np.abs(phi) ** 2))
    frame = Frame(b=np.array([b, 1.0, 1.0]), bdot=np.array([bdot, 0.0, 0.0]), Xdot=np.array([Xdot, 0.0, 0.0]))
    return Cloud(space, space.array(phi), frame, 0.0, 1.0)


@pytest.mark.parametrize(
    "axis", [Wave((0,), 96, 14.0), Wave((0,), 97, 14.0), Mirror((0,), 48, 14.0)], ids=lambda a: f"{a.kind} {a.n}"
)
@pytest.mark.parametrize("b", [1.0, 7.0])
@pytest.mark.parametrize("bdot", [-3.0, -0.4, -1e-3, 0.0, 1e-6, 0.4, 3.0, 40.0])
def test_a_gaussian_packet_in_any_frame(axis: Wave | Mirror, b: float, bdot: float) -> None:
    """sigma_k^2 = 1/(4 s^2) + c^2 s^2, with s = b w and the chirps of packet and frame added."""
    seen = momentum(packet(axis, b=b, bdot=bdot, Xdot=2.5), 0)
    s, c = b * WIDTH, CHIRP / b**2 + bdot / b
    sigma = sqrt(1 / (4 * s**2) + c**2 * s**2)
    exact = np.exp(-((seen.k - 2.5) ** 2) / (2 * sigma**2)) / (sqrt(2 * pi) * sigma)
    assert seen.density == pytest.approx(exact, abs=1e-6 * exact.max())
    assert (np.diff(seen.k) > 0).all()
    for low, high in ((-1.0, 1.0), (0.3, 9.0)):
        share = seen.share(2.5 + low * sigma, 2.5 + high * sigma)
        expected = (erf(high / sqrt(2)) - erf(low / sqrt(2))) / 2
        # cells are cut at the limits: good to the second power of the spacing
        assert share == pytest.approx(expected, abs=0.1 * (np.diff(seen.k)[0] / sigma) ** 2 + 1e-6)


def test_a_kick_moves_it_and_nothing_else() -> None:
    still, moved = (momentum(packet(Wave((0,), 96, 14.0), b=2.0, bdot=1.0, Xdot=v), 0) for v in (0.0, 3.0))
    np.testing.assert_allclose(moved.k - still.k, 3.0, rtol=1e-12)
    np.testing.assert_allclose(moved.density, still.density, rtol=1e-12)


def test_directions_without_an_axis_of_their_own_are_refused() -> None:
    cloud = packet(Wave((0,), 32, 8.0), b=1.0, bdot=0.0, other=Radial((1, 2), 12, 5.0))
    assert momentum(cloud, 0).density.sum() > 0
    with pytest.raises(ValueError, match="direction y has no wave axis of its own"):
        momentum(cloud, 1)


# ---- orders --------------------------------------------------------------------------------------------------------

LIGHT = Lattice(spacing=light.SPACING, depth=0.0, mass=motion.RB)


def comb(shares: dict[int, float], *, offset: float = 0.0, width: float = 0.02) -> Momentum:
    """Narrow peaks at 2 n k, as a distribution; widths in k, offsets in recoils."""
    k = np.arange(-9, 9, 0.001) * LIGHT.k
    density = sum(
        p * np.exp(-((k / LIGHT.k - 2 * n - offset) ** 2) / (2 * width**2)) / (sqrt(2 * pi) * width * LIGHT.k)
        for n, p in shares.items()
    )
    return Momentum(0, k, density)


def test_orders_are_told_by_name_and_place() -> None:
    shares = {-2: 0.05, -1: 0.2, 0: 0.4, 1: 0.3, 3: 0.05}
    found = order_shares(comb(shares), LIGHT, fallen=0.0)
    assert list(found) == ["-2", "-1", "0", "1", "3"]
    assert found == pytest.approx({str(n): p for n, p in shares.items()}, abs=1e-9)
    motion = order_motion(comb(shares), LIGHT, fallen=0.0)
    assert {n: v for n, (v, _) in motion.items()} == pytest.approx(
        {str(n): 2 * n * LIGHT.recoil_velocity for n in shares}, rel=1e-9, abs=1e-12
    )
    assert [spread for _, spread in motion.values()] == pytest.approx([0.02 * LIGHT.recoil_velocity] * 5, rel=1e-6)


@pytest.mark.parametrize("recoils", [-3.2, 0.7, 25.0])
def test_what_uniform_forces_gave_is_taken_off(recoils: float) -> None:
    shares = {-1: 0.2, 0: 0.5, 1: 0.3}
    seen = comb(shares)
    moved = Momentum(0, seen.k + recoils * LIGHT.k, seen.density)
    fallen = recoils * LIGHT.recoil_velocity
    assert order_shares(moved, LIGHT, fallen=fallen) == pytest.approx({str(n): p for n, p in shares.items()}, abs=1e-9)
    places = {n: v for n, (v, _) in order_motion(moved, LIGHT, fallen=fallen).items()}
    assert places == pytest.approx({str(n): 2 * n * LIGHT.recoil_velocity for n in shares}, rel=1e-9, abs=1e-12)


def test_an_order_reaches_one_recoil_to_either_side() -> None:
    for offset, name in ((0.98, "0"), (1.02, "1"), (-0.98, "0"), (-1.02, "-1")):
        found = order_shares(comb({0: 1.0}, offset=offset, width=0.001), LIGHT, fallen=0.0)
        assert found == pytest.approx({name: 1.0}, abs=1e-6)


def test_a_lattice_whose_period_dwarfs_the_cloud_has_no_orders() -> None:
    """A cloud within one period is not diffracted but pushed; a million orders would be told, each of no meaning."""
    shares = {-1: 0.2, 0: 0.6, 1: 0.2}
    seen = comb(shares)
    assert order_shares(seen, LIGHT, fallen=0.0)["0"] == pytest.approx(0.6, abs=1e-6)
    for longer in (1e3, 1e6):
        assert order_shares(seen, Lattice(spacing=longer * 532e-9, depth=0.0, mass=motion.RB), fallen=0.0) == {}
