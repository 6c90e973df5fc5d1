"""The frame is a pure mapping, a change of its rates is exact, and clouds go from space to space."""

from __future__ import annotations

import numpy as np
import pytest

import proofs
from trapsim.cloud.cloud import Cloud, regauge
from trapsim.measure.observables import profile
from trapsim.space.axes import Radial, Wave
from trapsim.space.frame import Frame
from trapsim.space.resample import resample
from trapsim.space.space import Space

Q = 0.7
CHIRPS = (0.3, -0.5, -0.5)


def frame() -> Frame:
    return Frame(
        b=np.array([1.5, 2.0, 0.8]), bdot=np.array([0.4, -0.3, 0.2]), X=np.array([1.0, -2.0, 3.0]),
        Xdot=np.array([0.5, 0.0, -0.7]),
    )  # fmt: skip


def on_waves() -> Cloud:
    space = proofs.SPACES["waves"]()
    return Cloud(space, proofs.cloud_samples(space, chirps=CHIRPS), frame(), 0.3, Q)


def lab_wave_function(cloud: Cloud) -> np.ndarray:
    """psi on the cloud's points, from the definition of the frame (the transformation of the published scaling laws).

    Y. Castin and R. Dum, Phys. Rev. Lett. 77, 5315 (1996): psi = B^(-1/2) phi exp(i m b' y^2/(2 hbar b)), and for a
    centre in motion exp(i m v y/hbar).
    """
    f = cloud.frame
    angle = 0.0
    for j, xi in enumerate(cloud.space.coordinates()):
        y = f.lab(xi, j) - f.X[j]
        angle = angle + (f.bdot[j] * y**2 / (2 * f.b[j]) + f.Xdot[j] * y) / cloud.q
    return cloud.phi * np.exp(1j * angle) / np.sqrt(f.B)


def test_a_frame_at_rest_is_the_lab() -> None:
    still = Frame()
    assert still.B == 1.0
    assert still.lab(np.array([1.0, 2.0]), 2).tolist() == [1.0, 2.0]


def test_a_frame_maps_to_the_lab_by_its_scale_and_its_centre() -> None:
    f = frame()
    assert pytest.approx(1.5 * 2.0 * 0.8) == f.B
    assert f.lab(np.array([2.0]), 1).tolist() == [2.0]
    assert f.lab(np.array([1.0]), 2) == pytest.approx([3.8])


def test_another_gauge_leaves_the_wave_function_in_the_lab_alone() -> None:
    cloud = on_waves()
    new = regauge(cloud, bdot=np.array([0.0, 0.1, -0.2]), Xdot=np.array([0.2, 0.3, 0.0]))
    assert new.frame.bdot.tolist() == [0.0, 0.1, -0.2]
    assert new.frame.Xdot.tolist() == [0.2, 0.3, 0.0]
    assert not np.allclose(new.phi, cloud.phi)
    np.testing.assert_allclose(lab_wave_function(new), lab_wave_function(cloud), atol=1e-13)


def test_a_gauge_that_is_not_given_stays() -> None:
    cloud = on_waves()
    assert regauge(cloud, bdot=np.zeros(3)).frame.Xdot.tolist() == cloud.frame.Xdot.tolist()
    assert regauge(cloud, Xdot=np.zeros(3)).frame.bdot.tolist() == cloud.frame.bdot.tolist()


def test_there_and_back_is_nothing() -> None:
    cloud = on_waves()
    still = regauge(cloud, bdot=np.zeros(3), Xdot=np.zeros(3))
    back = regauge(still, bdot=cloud.frame.bdot, Xdot=cloud.frame.Xdot)
    np.testing.assert_allclose(back.phi, cloud.phi, atol=1e-14)


def test_a_regauged_cloud_is_another_cloud() -> None:
    cloud = on_waves()
    before = cloud.phi.copy()
    regauge(cloud, bdot=np.zeros(3))
    np.testing.assert_array_equal(cloud.phi, before)


def test_a_round_cloud_carries_a_rate_of_scale_but_no_sideways_velocity() -> None:
    space = proofs.SPACES["round about x"]()
    cloud = Cloud(space, proofs.cloud_samples(space, chirps=CHIRPS), Frame(), 0.0, Q)
    grown = regauge(cloud, bdot=np.array([0.1, 0.2, 0.2]), Xdot=np.array([0.3, 0.0, 0.0]))
    # the phase added is -b bdot xi^2/(2 q): a chirp of -bdot/q in grid coordinates
    assert profile(grown).cov[1] == pytest.approx((CHIRPS[1] - 0.2 / Q) * proofs.SIZES[1] ** 2, rel=1e-9)
    assert profile(grown).k_mean[0] == pytest.approx(-0.3 / Q, rel=1e-9)
    with pytest.raises(ValueError, match="direction z has no axis that can carry a velocity"):
        regauge(cloud, Xdot=np.array([0.0, 0.0, 0.1]))


def test_a_uniform_direction_carries_no_velocity() -> None:
    space = Space([Wave((0,), 8, 1.0), Wave((1,), 1, 1.0), Wave((2,), 1, 1.0)])
    cloud = Cloud(space, space.array(1.0), Frame(), 0.0, Q)
    with pytest.raises(ValueError, match="direction y"):
        regauge(cloud, Xdot=np.array([0.0, 0.1, 0.0]))


# from one space to another


def sampled(old: Space, new: Space) -> float:
    """The worst difference between a resampled packet and the packet itself on the new space."""
    there = resample(proofs.cloud_samples(old, chirps=CHIRPS), old, new)
    assert there.shape == new.shape
    return float(np.abs(there - proofs.cloud_samples(new, chirps=CHIRPS)).max())


def test_a_round_cloud_goes_onto_axes_of_its_own() -> None:
    assert sampled(proofs.SPACES["round about x"](), proofs.SPACES["waves"]()) < 1e-8


def test_a_cloud_goes_onto_a_longer_and_finer_space() -> None:
    new = Space([Wave((0,), 90, 10.0), Wave((1,), 80, 8.0), Wave((2,), 72, 8.0)])
    assert sampled(proofs.SPACES["waves"](), new) < 1e-8


def test_a_round_cloud_goes_onto_a_longer_radial_axis() -> None:
    new = Space([Radial((1, 2), 50, 9.0), Wave((0,), 60, 9.0)])
    assert sampled(proofs.SPACES["round about x"](), new) < 1e-8


@pytest.mark.parametrize("lone", [0, 1, 2])
def test_each_lone_axis_finds_its_place(lone: int) -> None:
    pair = tuple(j for j in range(3) if j != lone)
    sizes = tuple(0.9 if j == lone else 0.7 for j in range(3))
    old = Space([Wave((lone,), 44, 7.0), Radial(pair, 30, 6.5)])
    new = Space([Wave((j,), 40 + 2 * j, 6.5) for j in range(3)])
    one, two = (proofs.cloud_samples(s, sizes=sizes, chirps=(0.0, 0.0, 0.0)) for s in (old, new))
    np.testing.assert_allclose(resample(one, old, new), two, atol=1e-8)


def test_beyond_the_old_space_there_is_nothing() -> None:
    old = Space([Wave((j,), 8, 1.0) for j in range(3)])
    new = Space([Wave((j,), 8, 2.0) for j in range(3)])
    there = resample(old.array(1.0), old, new)
    inside = np.abs(new.axes[0].points) <= 1
    expected = np.where(inside[:, None, None] & inside[None, :, None] & inside[None, None, :], 1.0, 0.0)
    np.testing.assert_allclose(there, expected, atol=1e-13)


def test_axes_of_their_own_do_not_go_back_onto_a_radial_axis() -> None:
    old, new = proofs.SPACES["waves"](), proofs.SPACES["round about x"]()
    with pytest.raises(ValueError, match="radial"):
        resample(proofs.cloud_samples(old, chirps=CHIRPS), old, new)
