"""Two spectral discretisations, neither of them Fourier: Chebyshev points on a radius, and oscillator functions.

Lengths and energies are in oscillator units (hbar = m = 1).
"""

from __future__ import annotations

from dataclasses import dataclass
from math import gamma, pi

import numpy as np
from scipy.linalg import eigh_tridiagonal

Array = np.ndarray


def sphere(dimension: int) -> float:
    """The area of the unit sphere: 2 in one dimension, 2 pi in two, 4 pi in three."""
    return 2 * pi ** (dimension / 2) / gamma(dimension / 2)


def chebyshev(count: int) -> tuple[Array, Array]:
    """Chebyshev extreme points, falling from 1 to -1, and their differentiation matrix.

    Source: Trefethen, Spectral Methods in MATLAB (SIAM, 2000), chapter 6.
    """
    x = np.cos(pi * np.arange(count + 1) / count)
    c = np.ones(count + 1)
    c[[0, -1]] = 2
    c *= (-1.0) ** np.arange(count + 1)
    d = np.outer(c, 1 / c) / (x[:, None] - x[None, :] + np.eye(count + 1))
    return x, d - np.diag(d.sum(axis=1))


def interpolation(x: Array, points: Array) -> Array:
    """The matrix that evaluates the polynomial through Chebyshev extreme points at other points.

    Source: Berrut & Trefethen, SIAM Review 46, 501 (2004), barycentric formula.
    """
    w = (-1.0) ** np.arange(len(x))
    w[[0, -1]] /= 2
    terms = w / (points[:, None] - x[None, :])
    return terms / terms.sum(axis=1, keepdims=True)


@dataclass(frozen=True)
class Radius:
    """Chebyshev collocation on a radius, for functions of one parity that vanish at the far end.

    Matrices act on the values at `r`; `sample` and `slope` give value and derivative at the quadrature points `q`.
    """

    r: Array
    first: Array
    second: Array
    q: Array
    weights: Array
    sample: Array
    slope: Array
    at_zero: Array
    dimension: int

    def hamiltonian(self, angular: int = 0) -> Array:
        """Kinetic energy at an angular momentum plus the isotropic trap r^2/2."""
        d = self.dimension
        radial = self.second + (d - 1) * self.first / self.r[:, None]
        return -radial / 2 + np.diag(angular * (angular + d - 2) / (2 * self.r**2) + self.r**2 / 2)

    def integral(self, samples: Array) -> float:
        """The integral over all space of a function given at the quadrature points."""
        return float(self.weights @ samples)


def radius(dimension: int, reach: float, *, points: int = 60, odd: bool = False) -> Radius:
    """A radius from 0 to `reach`, folded by parity so that no point sits at the origin.

    Source: Trefethen, chapter 11 (the disk); the integrals are Gauss-Legendre sums of the interpolated functions.
    """
    x, d = chebyshev(2 * points + 1)
    half = points + 1
    sign = -1 if odd else 1

    def folded(matrix: Array) -> Array:
        return (matrix[:, :half] + sign * matrix[:, half:][:, ::-1])[:, 1:]

    nodes, weights = np.polynomial.legendre.leggauss(2 * points + 20)
    q = (nodes + 1) / 2
    at_q = interpolation(x, q)
    return Radius(
        r=reach * x[1:half],
        first=folded(d)[1:half] / reach,
        second=folded(d @ d)[1:half] / reach**2,
        q=reach * q,
        weights=weights / 2 * reach * sphere(dimension) * (reach * q) ** (dimension - 1),
        sample=folded(at_q),
        slope=folded(at_q @ d) / reach,
        at_zero=folded(interpolation(x, np.zeros(1)))[0],
        dimension=dimension,
    )


def _laguerre(alpha: float, count: int, x: Array) -> Array:
    """Laguerre functions with their weight exp(-x/2), orthonormal under x^alpha dx; shape (len(x), count)."""
    out = np.empty((len(x), count))
    out[:, 0] = np.exp(-x / 2) / np.sqrt(gamma(alpha + 1))
    if count > 1:
        out[:, 1] = (1 + alpha - x) / np.sqrt(1 + alpha) * out[:, 0]
    for n in range(1, count - 1):
        up, down = np.sqrt((n + 1) * (n + 1 + alpha)), np.sqrt(n * (n + alpha))
        out[:, n + 1] = ((2 * n + 1 + alpha - x) * out[:, n] - down * out[:, n - 1]) / up
    return out


@dataclass(frozen=True)
class Oscillator:
    """Isotropic oscillator functions of zero angular momentum in 1, 2 or 3 directions, of width `scale`.

    `kinetic`, `square` (of r) and `dilation` (imaginary part of (x k + k x)/2) are exact matrices; `values` holds the
    functions at `r`, where `weights` make the integral of any product of four of them exact.
    """

    dimension: int
    r: Array
    weights: Array
    values: Array
    at_zero: Array
    kinetic: Array
    square: Array
    dilation: Array


def oscillator(dimension: int, count: int, *, scale: float = 1.0) -> Oscillator:
    """The `count` lowest of these functions; in one direction they are the even Hermite functions.

    Gauss-Laguerre points of twice the exponent integrate the mean field of the truncated basis exactly.
    """
    alpha = dimension / 2 - 1
    n = np.arange(count)
    ladder = -np.sqrt((n[:-1] + 1) * (n[:-1] + 1 + alpha))
    square = np.diag(2 * n + alpha + 1) + np.diag(ladder, 1) + np.diag(ladder, -1)
    energy = 2 * n + dimension / 2

    m = np.arange(2 * count + 1)
    doubled, _ = eigh_tridiagonal(2 * m + alpha + 1, np.sqrt(m[1:] * (m[1:] + alpha)))
    christoffel = 1 / (_laguerre(alpha, len(m), doubled) ** 2).sum(axis=1)
    unit = np.sqrt(2 / sphere(dimension)) * scale ** (-dimension / 2)
    return Oscillator(
        dimension=dimension,
        r=scale * np.sqrt(doubled / 2),
        weights=christoffel * sphere(dimension) / 2 * scale**dimension / 2 ** (alpha + 1),
        values=unit * _laguerre(alpha, count, doubled / 2),
        at_zero=unit * _laguerre(alpha, count, np.zeros(1))[0],
        kinetic=(np.diag(energy) - square / 2) / scale**2,
        square=square * scale**2,
        dilation=(energy[:, None] - energy[None, :]) * square / 2,
    )
