"""The space: its axes together, its quadrature, and its transforms."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest

import proofs
from trapsim.space.axes import Radial, Wave
from trapsim.space.space import Space

every_space = pytest.mark.parametrize("make", proofs.SPACES.values(), ids=proofs.SPACES.keys())
CHIRPS = (0.3, -0.5, -0.5)


@pytest.mark.parametrize(
    "axes",
    [
        [Wave((0,), 4, 1.0), Wave((1,), 4, 1.0)],
        [Wave((0,), 4, 1.0), Wave((0,), 4, 1.0), Wave((2,), 4, 1.0)],
        [Radial((0, 1), 4, 1.0), Wave((1,), 4, 1.0)],
    ],
)
def test_a_space_covers_each_direction_once(axes: list[object]) -> None:
    with pytest.raises(ValueError, match="once each"):
        Space(axes)


@pytest.mark.parametrize("lone", [0, 1, 2])
def test_the_radial_axis_comes_first_and_each_direction_finds_its_dimension(lone: int) -> None:
    pair = tuple(j for j in range(3) if j != lone)
    space = Space([Wave((lone,), 6, 1.0), Radial(pair, 5, 1.0)])
    assert space.shape == (5, 6)
    assert [space.dim(j) for j in range(3)] == [1 if j == lone else 0 for j in range(3)]
    assert space.words() == ["wave" if j == lone else "radial" for j in range(3)]
    assert space.points_per_direction() == [6 if j == lone else 5 for j in range(3)]
    assert space.size == 30


def test_wave_axes_stand_in_the_order_x_y_z_however_they_were_given() -> None:
    space = Space([Wave((2,), 4, 1.0), Wave((0,), 2, 1.0), Wave((1,), 1, 1.0)])
    assert space.shape == (2, 1, 4)
    assert space.words() == ["wave", "uniform", "wave"]


@every_space
def test_a_round_trip_gives_back_any_samples(make: Callable[[], Space]) -> None:
    space, rng = make(), np.random.default_rng(3)
    samples = rng.normal(size=space.shape) + 1j * rng.normal(size=space.shape)
    back = space.inverse(space.forward(space.array(samples)))
    np.testing.assert_allclose(back / space.round_trip, samples, atol=1e-12)


@every_space
def test_density_and_spectrum_have_the_norm_and_the_moments_of_a_gaussian(make: Callable[[], Space]) -> None:
    # Gaussian integrals: <x^2> = s^2, <k^2> = 1/(4 s^2) + c^2 s^2, int n^2 = 1/(8 pi^(3/2) s_x s_y s_z).
    space = make()
    phi = proofs.cloud_samples(space, chirps=CHIRPS)
    n = np.abs(phi) ** 2
    assert space.integral(n) == pytest.approx(1, abs=1e-12)
    assert space.integral(n**2) == pytest.approx(1 / (8 * np.pi**1.5 * np.prod(proofs.SIZES)), rel=1e-9)
    power = np.abs(space.forward(space.array(phi))) ** 2
    seen, spectral = space.marginals(n), space.spectral_marginals(power)
    for j, (s, c) in enumerate(zip(proofs.SIZES, CHIRPS, strict=True)):
        axis, d = space.axis(j), space.dim(j)
        assert space.moment(seen, [a.x2(a.covers[0]) for a in space.axes], j) == pytest.approx(s**2, rel=1e-10)
        assert (spectral[d] * axis.spectral_weights) @ axis.k2(j) == pytest.approx(
            1 / (4 * s**2) + c**2 * s**2, rel=1e-9
        )
    for d, axis in enumerate(space.axes):
        assert seen[d] @ axis.weights == pytest.approx(1, abs=1e-12)
        assert spectral[d] @ axis.spectral_weights == pytest.approx(1, abs=1e-12)


@every_space
def test_the_laplacian_of_a_gaussian(make: Callable[[], Space]) -> None:
    # d^2/dx^2 exp(-a x^2) = (4 a^2 x^2 - 2 a) exp(-a x^2), a = 1/(4 s^2) - i c/2.
    space = make()
    phi = proofs.cloud_samples(space, chirps=CHIRPS)
    a = [1 / (4 * s**2) - 0.5j * c for s, c in zip(proofs.SIZES, CHIRPS, strict=True)]
    expected = (space.quadratic([4 * one**2 for one in a]) - 2 * sum(a)) * phi
    curved = space.forward(space.array(phi))
    curved *= -sum(space.along(d, v) for d, v in enumerate(space.per_axis([1.0] * 3, "k2"))) / space.round_trip
    np.testing.assert_allclose(space.inverse(curved), expected, atol=1e-6)


@every_space
def test_the_gradient_along_each_dimension(make: Callable[[], Space]) -> None:
    space = make()
    phi = proofs.cloud_samples(space, chirps=CHIRPS)
    for d, axis in enumerate(space.axes):
        j = axis.covers[0]
        factor = -(1 / (2 * proofs.SIZES[j] ** 2) - 1j * CHIRPS[j])
        expected = factor * space.along(d, axis.points) * phi
        np.testing.assert_allclose(space.gradient(phi, d), expected, atol=1e-6)


def test_a_uniform_direction_has_a_length_and_no_slope() -> None:
    space = Space([Wave((0,), 16, 4.0), Wave((1,), 1, 1.5), Wave((2,), 1, 2.5)])
    assert space.integral(np.ones(space.shape)) == pytest.approx(8 * 3 * 5)
    assert space.integral(1.0) == pytest.approx(8 * 3 * 5)
    assert not space.gradient(space.array(np.ones(space.shape)), 1).any()


@every_space
def test_coordinates_broadcast_to_the_distance_from_the_centre(make: Callable[[], Space]) -> None:
    space = make()
    x, y, z = space.coordinates()
    distance = np.broadcast_to(x**2 + y**2 + z**2, space.shape)
    np.testing.assert_allclose(distance, np.broadcast_to(space.quadratic([1, 1, 1]), space.shape))
    assert np.sqrt(distance.max()) == pytest.approx(np.sqrt(sum(a.points.max() ** 2 for a in space.axes)))


def test_on_a_radial_axis_each_direction_carries_half_of_the_square_of_the_radius() -> None:
    space = Space([Wave((0,), 4, 1.0), Radial((1, 2), 5, 1.0)])
    r = space.axes[0].points
    np.testing.assert_allclose(space.quadratic([0, 2.0, 0])[:, 0], r**2)
    np.testing.assert_allclose(space.quadratic([0, 1.0, 1.0])[:, 0], r**2)


def test_a_space_can_be_built_again_from_its_description() -> None:
    for make in proofs.SPACES.values():
        space = make()
        again = Space.from_description(space.describe(), threads=1)
        assert again.describe() == space.describe()
        assert again.shape == space.shape
        rng = np.random.default_rng(1)
        samples = rng.normal(size=space.shape)
        assert again.integral(samples) == space.integral(samples)


def test_an_array_is_a_copy_of_its_own() -> None:
    space = Space([Wave((j,), 4, 1.0) for j in range(3)])
    one = space.array(np.ones(space.shape))
    two = space.array(one)
    two[...] = 0
    assert one.all()
    assert one.dtype == np.complex128


def test_two_threads_give_what_one_gives() -> None:
    rng = np.random.default_rng(5)
    one, two = (Space([Wave((j,), 12, 1.0) for j in range(3)], threads=t) for t in (1, 2))
    samples = rng.normal(size=one.shape) + 0j
    np.testing.assert_allclose(two.forward(two.array(samples)), one.forward(one.array(samples)), atol=1e-12)


@pytest.mark.parametrize("threads", [1, 2])
@pytest.mark.parametrize("shape", [(6, 8, 10), (4, 9, 7), (1, 12, 5), (8, 3, 1)], ids=str)
def test_slabs_transform_as_numpys_fft_does(shape: tuple[int, ...], threads: int, monkeypatch: pytest.MonkeyPatch) -> None:
    # numpy.fft as the independent calculation; with slabs of a few points, as on the largest grids
    monkeypatch.setattr("trapsim.space.pieces.ALONE", 0)
    monkeypatch.setattr("trapsim.space.pieces.PIECE", 2 * max(shape))
    space = Space([Wave((j,), n, 1.0) for j, n in enumerate(shape)], threads=threads)
    assert max(map(len, space._slabs)) > 1
    rng = np.random.default_rng(5)
    samples = rng.normal(size=shape) + 1j * rng.normal(size=shape)
    np.testing.assert_allclose(space.forward(space.array(samples)), np.fft.fftn(samples), atol=1e-12)
    np.testing.assert_allclose(space.inverse(space.array(samples)), samples.size * np.fft.ifftn(samples), atol=1e-12)
    for d, axis in enumerate(space.axes):
        slope = np.fft.ifft(space.along(d, 1j * axis.derivative_k()) * np.fft.fft(samples, axis=d), axis=d)
        np.testing.assert_allclose(space.gradient(space.array(samples), d), slope, atol=1e-11)


@every_space
def test_a_sandwich_is_its_layers_one_after_the_other(make: Callable[[], Space], monkeypatch: pytest.MonkeyPatch) -> None:
    whole, rng = make(), np.random.default_rng(8)
    samples = rng.normal(size=whole.shape) + 1j * rng.normal(size=whole.shape)
    below, middle, above = rng.normal(size=(3, *whole.shape))
    expected = above * whole.inverse(middle * whole.forward(whole.array(below * samples)))
    monkeypatch.setattr("trapsim.space.pieces.ALONE", 0)
    monkeypatch.setattr("trapsim.space.pieces.PIECE", whole.size // 4)
    space = Space(whole.axes, threads=2)

    def times(layer: np.ndarray, *, second: bool = False) -> Callable[[np.ndarray, slice], None]:
        return lambda part, slab: np.multiply(part, layer[:, slab] if second else layer[slab], out=part)

    phi = space.array(samples)
    found = space.sandwich(phi, times(middle, second=True), before=times(below), after=times(above))
    assert found is phi
    np.testing.assert_allclose(found, expected, atol=1e-12 * np.abs(expected).max())
