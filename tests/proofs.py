"""Closed forms shared by families: every kind of axis, and every space, goes through the same proof.

The yardstick is the chirped Gaussian packet, psi = (2 pi s^2)^(-d/4) exp[ -(1/(4 s^2) - i c/2) rho^2 ] in the d
directions an axis covers: <x^2> = s^2, <k^2> = 1/(4 s^2) + c^2 s^2, <x k>_sym = c s^2 along each of them. Its integrals
are those of Gauss; nothing in here comes from the program.
"""

from __future__ import annotations

from math import pi

import numpy as np
import pytest

from trapsim.space.axes import Axis, Mirror, Radial, Wall, Wave, build
from trapsim.space.space import Space

Array = np.ndarray

#: every kind of axis, long and fine enough for `WIDTH` and `CHIRP`
AXES = {
    "wave": Wave((0,), 64, 8.0),
    "wave with an odd number of points": Wave((2,), 63, 8.0),
    "mirror": Mirror((1,), 32, 8.0),
    "wall": Wall((0,), 64, 8.0),
    "wall with an odd number of points": Wall((1,), 63, 8.0),
    "radial": Radial((1, 2), 36, 8.0),
}
WIDTH, CHIRP = 0.9, 0.8


def packet(x: Array, directions: int, *, s: float = WIDTH, c: float = 0.0) -> Array:
    """The packet's values at a distance x from its centre."""
    return (2 * pi * s**2) ** (-directions / 4) * np.exp(-(1 / (4 * s**2) - 0.5j * c) * x**2)


def on(axis: Axis, *, s: float = WIDTH, c: float = 0.0) -> Array:
    """The packet on an axis' points."""
    return packet(axis.points, len(axis.covers), s=s, c=c)


def alone(axis: Axis) -> Space:
    """A space in which only this axis has more than one point; the others are 1 m long."""
    others = [j for j in range(3) if j not in axis.covers]
    return Space([axis, *(Wave((j,), 1, 0.5) for j in others)])


def spectrum(axis: Axis, samples: Array) -> Array:
    """Samples along one axis, transformed by the space it lives in."""
    space = alone(axis)
    return space.forward(space.array(samples.reshape(space.shape))).reshape(-1)


def prove_norm_and_moments(axis: Axis) -> None:
    """The density integrates to 1 and has the variance s^2 along every direction covered."""
    weighted = axis.weights * np.abs(on(axis)) ** 2
    assert weighted.sum() == pytest.approx(1, abs=1e-12)
    for j in axis.covers:
        assert weighted @ axis.x1(j) == pytest.approx(0, abs=1e-12)
        assert weighted @ axis.x2(j) == pytest.approx(WIDTH**2, rel=1e-11)


def prove_spectrum(axis: Axis) -> None:
    """The spectrum has the same norm (Parseval) and the variance 1/(4 s^2) + c^2 s^2."""
    weighted = axis.spectral_weights * np.abs(spectrum(axis, on(axis, c=CHIRP))) ** 2
    assert weighted.sum() == pytest.approx(1, abs=1e-12)
    for j in axis.covers:
        assert weighted @ axis.k2(j) == pytest.approx(1 / (4 * WIDTH**2) + CHIRP**2 * WIDTH**2, rel=1e-10)


def prove_round_trip(axis: Axis) -> None:
    """Forward and inverse give back any samples times the round trip's factor, to rounding."""
    rng = np.random.default_rng(7)
    space = alone(axis)
    samples = rng.normal(size=space.shape) + 1j * rng.normal(size=space.shape)
    back = space.inverse(space.forward(space.array(samples)))
    np.testing.assert_allclose(back / axis.round_trip, samples, atol=2e-13)


def prove_basis(axis: Axis) -> None:
    """The axis' own series goes through the samples, follows the packet between them and is zero outside."""
    samples, d = on(axis, c=CHIRP), len(axis.covers)
    np.testing.assert_allclose(axis.basis(axis.points) @ samples, samples, atol=1e-12)
    between = np.linspace(0.01, 0.95 * axis.half_extent, 41)
    np.testing.assert_allclose(axis.basis(between) @ samples, packet(between, d, c=CHIRP), atol=1e-8)
    assert not np.any(axis.basis(np.array([1.01, 1.7]) * axis.half_extent))


def prove_gradient(axis: Axis) -> None:
    """d psi/dx = -(1/(2 s^2) - i c) x psi, and the lever turns it into <x k>_sym = c s^2 along each direction."""
    space, samples = alone(axis), on(axis, c=CHIRP)
    dim = space.axes.index(axis)
    slope = space.gradient(space.array(samples.reshape(space.shape)), dim).reshape(-1)
    np.testing.assert_allclose(slope, -(1 / (2 * WIDTH**2) - 1j * CHIRP) * axis.points * samples, atol=1e-7)
    twist = axis.weights * axis.lever @ (samples.conj() * slope).imag
    assert twist == pytest.approx(CHIRP * WIDTH**2, rel=1e-9)


def prove_finer_twin(axis: Axis) -> None:
    """The finer twin covers the same stretch with twice the points, and resolves the density as well."""
    twin = axis.finer()
    assert (twin.kind, twin.covers, twin.n, twin.half_extent) == (axis.kind, axis.covers, 2 * axis.n, axis.half_extent)
    density = np.abs(axis.basis(twin.points) @ on(axis)) ** 2
    assert twin.weights @ density**2 == pytest.approx((4 * pi * WIDTH**2) ** (-len(axis.covers) / 2), rel=1e-8)


def prove_description(axis: Axis) -> None:
    """What an axis says of itself is enough to build it again, to the last bit."""
    again = build(axis.describe())
    assert type(again) is type(axis)
    for name in ("points", "weights", "k", "spectral_weights"):
        np.testing.assert_array_equal(getattr(again, name), getattr(axis, name))


PROOFS = {
    "norm and moments": prove_norm_and_moments,
    "spectrum": prove_spectrum,
    "round trip": prove_round_trip,
    "basis": prove_basis,
    "gradient": prove_gradient,
    "finer twin": prove_finer_twin,
    "description": prove_description,
}

#: lengths (half extents) and points of spaces that hold a packet of widths `SIZES`
SIZES = (0.9, 0.7, 0.7)
SPACES = {
    "waves": lambda: Space([Wave((0,), 48, 8.0), Wave((1,), 42, 6.5), Wave((2,), 40, 6.5)]),
    "round about x": lambda: Space([Wave((0,), 48, 8.0), Radial((1, 2), 30, 6.5)]),
}


def cloud_samples(
    space: Space, *, sizes: tuple[float, float, float] = SIZES, chirps: tuple[float, float, float]
) -> Array:
    """A chirped Gaussian packet with three widths on a space, its norm 1."""
    exponent = space.quadratic([-1 / (4 * s**2) + 0.5j * c for s, c in zip(sizes, chirps, strict=True)])
    return space.array((2 * pi) ** -0.75 / np.sqrt(np.prod(sizes)) * np.exp(exponent))
