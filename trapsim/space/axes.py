"""The family of axes: wave, mirror, wall and radial. Their contract is that of `Axis`."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from scipy import special

from trapsim.space.axis import COMPLEX, COSINE, SINE, Array, Axis


class Wave(Axis):
    """Periodic along one direction; plane waves.

    Parameters
    ----------
    covers : sequence of one int
        The lab direction.
    n : int
        Number of points, at the midpoints of n equal cells; 1 makes the direction uniform.
    half_extent : float
        Half the period, m.
    """

    kind = "wave"

    def __init__(self, covers: Sequence[int], n: int, half_extent: float) -> None:
        (direction,) = covers
        self.covers = (direction,)
        self.half_extent = float(half_extent)
        spacing = 2 * self.half_extent / n
        self.spacing = spacing
        self.points = (np.arange(n) - (n - 1) / 2) * spacing
        self.weights = np.full(n, spacing)
        self.k = 2 * np.pi * np.fft.fftfreq(n, spacing)
        self.spectral_weights = np.full(n, spacing / n)
        self.lever = self.points
        self.drift = 1.0
        self.fftw = COMPLEX if n > 1 else None
        self.round_trip = float(n)
        self.carries_velocity = n > 1
        if n == 1:
            self.forward_matrix = self.inverse_matrix = np.ones((1, 1))

    def x1(self, j: int) -> Array:
        return self.points

    def x2(self, j: int) -> Array:
        return self.points**2

    def k2(self, j: int) -> Array:
        return self.k**2

    def derivative_k(self) -> Array:
        """k with the highest even-n mode left out: it has no sign, so it has no first derivative."""
        k = self.k.copy()
        if self.n % 2 == 0:
            k[self.n // 2] = 0.0
        return k

    def basis(self, x: Array) -> Array:
        """Periodic sinc (Dirichlet kernel) on each point, zero outside the extent."""
        x = np.asarray(x, dtype=float)
        if self.n == 1:
            return np.ones((len(x), 1))
        angle = np.pi * (x[:, None] - self.points[None, :]) / (self.n * self.spacing)
        sine = np.sin(angle)
        close = np.abs(sine) < 1e-14
        safe = np.where(close, 1.0, sine)
        kernel = np.sin(self.n * angle) / (self.n * safe)
        if self.n % 2 == 0:
            kernel = kernel * np.cos(angle)
        kernel = np.where(close, 1.0, kernel)
        return np.where(np.abs(x)[:, None] <= self.half_extent, kernel, 0.0)

    def project(self, x: Array) -> Array:
        """(len(x), n): a round density's samples seen from the side; a flat axis has no side view of its own."""
        raise TypeError("a wave axis is integrated over, it has no side view")


class Mirror(Axis):
    """Even about its middle; cosines on the half-cell midpoints of one side.

    Its points are the positive ones of a wave axis with twice as many, and its results the same.

    Parameters
    ----------
    covers : sequence of one int
        The lab direction.
    n : int
        Number of points on the one side.
    half_extent : float
        Half the period, m.
    """

    kind = "mirror"
    fftw = COSINE

    def __init__(self, covers: Sequence[int], n: int, half_extent: float) -> None:
        (direction,) = covers
        self.covers = (direction,)
        self.half_extent = float(half_extent)
        self.spacing = self.half_extent / n
        self.points = (np.arange(n) + 0.5) * self.spacing
        self.weights = np.full(n, 2 * self.spacing)
        self.k = np.pi * np.arange(n) / self.half_extent
        self.spectral_weights = np.full(n, self.spacing / n)
        self.spectral_weights[0] /= 2
        self.lever = self.points
        self.round_trip = 2.0 * n
        # the series of samples f: (1/2n) [ Y_0 + 2 sum_m Y_m cos(k_m x) ] with Y = forward f
        self._forward = 2 * np.cos(np.outer(self.k, self.points))
        self._shares = np.where(np.arange(n) == 0, 1.0, 2.0) / (2 * n)
        slopes = -np.sin(np.outer(self.points, self.k)) * (self.k * self._shares)[None, :]
        self.gradient_matrix = np.ascontiguousarray(slopes @ self._forward)

    def x1(self, j: int) -> Array:
        return np.zeros(self.n)

    def x2(self, j: int) -> Array:
        return self.points**2

    def k2(self, j: int) -> Array:
        return self.k**2

    def basis(self, x: Array) -> Array:
        """The cosine series on each point, zero outside the extent."""
        x = np.abs(np.asarray(x, dtype=float))
        series = np.cos(np.outer(x, self.k)) * self._shares[None, :]
        series[x > self.half_extent] = 0.0
        return series @ self._forward

    @property
    def counted(self) -> int:
        return 2 * self.n

    @property
    def whole(self) -> int:
        return 2 * self.n

    @property
    def k_max(self) -> float:
        """That of the wave axis with both sides, whose highest wave has no even part on these points."""
        return np.pi / self.spacing

    def unfolded(self) -> Wave:
        """The wave axis with both sides."""
        return Wave(self.covers, 2 * self.n, self.half_extent)


class Wall(Axis):
    """Between two perfectly reflecting walls, where the field vanishes; sines on half-cell midpoints.

    Its points are those of the wave axis of the same length; the walls are half a spacing beyond the outermost. The
    field is odd about either wall, so that its gradient and its density are even there: series of cosines. Moments are
    the integrals of these series, since a plain sum of x^2 n is no better than the fourth power of the spacing.

    Parameters
    ----------
    covers : sequence of one int
        The lab direction.
    n : int
        Number of points.
    half_extent : float
        Half the distance of the walls, m.
    """

    kind = "wall"
    fftw = SINE
    carries_velocity = True
    walled = True

    def __init__(self, covers: Sequence[int], n: int, half_extent: float) -> None:
        (direction,) = covers
        self.covers = (direction,)
        self.half_extent = float(half_extent)
        spacing = self.spacing = 2 * self.half_extent / n
        self.points = (np.arange(n) - (n - 1) / 2) * spacing
        self.weights = np.full(n, spacing)
        self.k = np.pi * np.arange(1, n + 1) / (2 * self.half_extent)
        self.spectral_weights = np.full(n, spacing / (2 * n))
        self.spectral_weights[-1] /= 2
        self.round_trip = 2.0 * n
        # the series of samples f: (1/2n) [ 2 sum_m Y_m sin(k_m s) + Y_n sin(k_n s) ], s from the wall, Y = forward f
        self._forward = 2 * np.sin(np.outer(self.k, self.points + self.half_extent))
        self._shares = np.where(np.arange(1, n + 1) == n, 1.0, 2.0) / (2 * n)
        self.gradient_matrix = np.ascontiguousarray(self.slopes(self.points))
        self._cosines = self.k - self.k[0]
        self._to_cosines = np.cos(np.outer(self._cosines, self.points + self.half_extent))
        self._to_cosines *= np.where(self._cosines == 0, 1.0, 2.0)[:, None] / n
        # integrals of 1 and x with each sine, of x and x^2 with each cosine, from wall to wall
        length, k, even = 2 * self.half_extent, self.k, np.arange(1, n + 1) % 2 == 0
        sines = (self._shares[:, None] * self._forward) / spacing
        self.drift = np.where(even, 0.0, 2 / k) @ sines
        self.lever = np.where(even, -length / k, 0.0) @ sines
        k, even = np.where(self._cosines > 0, self._cosines, np.inf), np.arange(n) % 2 == 0
        self._x1 = np.where(even, 0.0, -2 / k**2) @ self._to_cosines / spacing
        self._x2 = (np.where(even, 2 * length / k**2, 0.0) + (self._cosines == 0) * length**3 / 12) @ self._to_cosines
        self._x2 /= spacing

    def x1(self, j: int) -> Array:
        return self._x1

    def x2(self, j: int) -> Array:
        return self._x2

    def square(self, j: int) -> Array:
        return self.points**2

    def k2(self, j: int) -> Array:
        return self.k**2

    def basis(self, x: Array) -> Array:
        """The sine series on each point, zero beyond the walls."""
        x = np.asarray(x, dtype=float)
        series = np.sin(np.outer(x + self.half_extent, self.k)) * self._shares[None, :]
        series[np.abs(x) > self.half_extent] = 0.0
        return series @ self._forward

    def density_basis(self, x: Array) -> Array:
        """The cosine series on each point, zero beyond the walls."""
        x = np.asarray(x, dtype=float)
        series = np.cos(np.outer(x + self.half_extent, self._cosines))
        series[np.abs(x) > self.half_extent] = 0.0
        return series @ self._to_cosines

    def slopes(self, x: Array) -> Array:
        """(len(x), n): the derivative of the sine series between the walls and at them."""
        cosines = np.cos(np.outer(np.asarray(x, dtype=float) + self.half_extent, self.k))
        return (cosines * (self.k * self._shares)[None, :]) @ self._forward


class Radial(Axis):
    """Round in two directions; Bessel series on the zeros of J0.

    Source: M. Guizar-Sicairos and J. C. Gutierrez-Vega, J. Opt. Soc. Am. A 21, 53 (2004); the transform
    matrix is made exactly orthogonal once, so that a round trip is exact to rounding.

    Parameters
    ----------
    covers : sequence of two int
        The two lab directions.
    n : int
        Number of points r_i.
    half_extent : float
        The radius R at which the field vanishes, m.
    """

    kind = "radial"

    def __init__(self, covers: Sequence[int], n: int, half_extent: float) -> None:
        first, second = sorted(covers)
        self.covers = (first, second)
        radius = self.half_extent = float(half_extent)
        zeros = special.jn_zeros(0, n + 1)
        alpha, last = zeros[:n], zeros[n]
        j1 = np.abs(special.j1(alpha))
        self.points = alpha * radius / last
        self.k = alpha / radius
        self.weights = 4 * np.pi * radius**2 / (last * j1) ** 2
        self.spectral_weights = np.ones(n)
        self.lever = self.points / 2
        self.spacing = radius * np.pi / last
        transform = 2 * special.j0(np.outer(alpha, alpha) / last) / (np.outer(j1, j1) * last)
        eigenvalues, vectors = np.linalg.eigh((transform + transform.T) / 2)
        transform = (vectors * np.sign(eigenvalues)) @ vectors.T
        root = np.sqrt(self.weights)
        self.forward_matrix = np.ascontiguousarray(transform * root[None, :])
        self.inverse_matrix = np.ascontiguousarray(transform / root[:, None])
        self._norms = 1 / (np.sqrt(np.pi) * radius * j1)
        #: (n, n): d/dr of the samples' series at the points
        slopes = -special.j1(np.outer(self.points, self.k)) * (self.k * self._norms)[None, :]
        self.gradient_matrix = np.ascontiguousarray(slopes @ self.forward_matrix)

    def x1(self, j: int) -> Array:
        return np.zeros(self.n)

    def x2(self, j: int) -> Array:
        return self.points**2 / 2

    def k2(self, j: int) -> Array:
        return self.k**2 / 2

    def basis(self, x: Array) -> Array:
        """The Bessel series at radii x, zero outside R."""
        x = np.abs(np.asarray(x, dtype=float))
        series = special.j0(np.outer(x, self.k)) * self._norms[None, :]
        series[x > self.half_extent] = 0.0
        return series @ self.forward_matrix

    def project(self, x: Array) -> Array:
        """(len(x), n): the side view of a round density on a line, by the Fourier slice theorem.

        N(k) = sum_i w_i n(r_i) J0(k r_i) on k = pi j/R up to the axis' own highest k, then a cosine series.
        """
        x = np.asarray(x, dtype=float)
        radius = self.half_extent
        waves = np.pi * np.arange(int(self.k_max * radius / np.pi) + 1) / radius
        slices = special.j0(np.outer(waves, self.points)) * self.weights[None, :]
        cosines = np.cos(np.outer(x, waves)) / radius
        cosines[:, 0] /= 2
        cosines[np.abs(x) > radius] = 0.0
        return cosines @ slices


KINDS = {cls.kind: cls for cls in (Wave, Mirror, Wall, Radial)}


def build(description: dict[str, object]) -> Axis:
    """The axis that `Axis.describe` described."""
    return KINDS[description["kind"]](tuple(description["covers"]), int(description["n"]), description["half_extent"])
