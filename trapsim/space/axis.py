"""The axis: points, weights and spectrum along one or two lab directions, the contract of the family.

A member of the family says, for arrays of n samples along it:

1. `covers`, the lab directions (0, 1, 2 = x, y, z) it stands for;
2. `points` (n,) m and `weights` (n,): integrals are weighted sums of samples;
3. `k` (n,) 1/m and `spectral_weights` (n,): weighted sums of |spectrum|^2 give the same norm;
4. its transform: either a one-dimensional transform of FFTW (`fftw` names the way there and the way back) whose round
   trip multiplies by `round_trip`, or a pair of real matrices (`forward_matrix`, `inverse_matrix`);
5. `x1(j)`, `x2(j)`, `k2(j)` (n,): what makes weighted sums of density and spectrum <x_j>, <x_j^2> and <k_j^2>; and
   `square(j)`, x_j^2 itself on the points;
6. `lever`, `drift` (n,): what makes weighted sums of Im(f* df) <x_j k_j> and <k_j> for every covered direction j;
7. `basis(x)` (len(x), n): the matrix that evaluates the samples' own series anywhere; zero outside; and
   `density_basis(x)`, the same for samples of a density.
"""

from __future__ import annotations

import numpy as np

Array = np.ndarray

COMPLEX = ("FFTW_FORWARD", "FFTW_BACKWARD")
COSINE = ("FFTW_REDFT10", "FFTW_REDFT01")
SINE = ("FFTW_RODFT10", "FFTW_RODFT01")


class Axis:
    """Base of the family; the module's docstring is the contract."""

    kind: str
    covers: tuple[int, ...]
    points: Array
    weights: Array
    k: Array
    spectral_weights: Array
    lever: Array
    drift: Array | float = 0.0
    half_extent: float
    spacing: float
    fftw: tuple[str, str] | None = None
    round_trip = 1.0
    #: whether a field on it may have a mean velocity
    carries_velocity = False
    #: whether it ends at walls, which nothing passes; else what comes to its edge is lost or comes in again
    walled = False
    #: (n, n) derivative along the axis at the points, where it is not a transform of FFTW
    gradient_matrix: Array | None = None
    forward_matrix: Array
    inverse_matrix: Array

    @property
    def n(self) -> int:
        return len(self.points)

    @property
    def whole(self) -> int:
        """Points of the whole axis, of which it may keep a part."""
        return self.n

    @property
    def k_max(self) -> float:
        return float(np.abs(self.k).max())

    @property
    def uniform(self) -> bool:
        """Whether nothing varies along it: one point stands for the whole length."""
        return self.n == 1

    @property
    def counted(self) -> int:
        """Number of points as a plan counts them: both sides of a mirror axis, one of a radius."""
        return self.n

    def x1(self, j: int) -> Array:
        raise TypeError(f"{type(self).__name__} does not say x1")

    def x2(self, j: int) -> Array:
        raise TypeError(f"{type(self).__name__} does not say x2")

    def square(self, j: int) -> Array:
        return self.x2(j)

    def k2(self, j: int) -> Array:
        raise TypeError(f"{type(self).__name__} does not say k2")

    def basis(self, x: Array) -> Array:
        raise TypeError(f"{type(self).__name__} does not say its basis")

    def density_basis(self, x: Array) -> Array:
        """`basis` for samples of |field|^2, which is even where the field vanishes."""
        return self.basis(x)

    def finer(self) -> Axis:
        """The same stretch with twice the points, on which the density is as well resolved as the field."""
        return self.grown(2, 1)

    def grown(self, points: float, extent: float) -> Axis:
        """The same kind of axis with so many times its points and its extent; itself where nothing changes."""
        if self.uniform or (points == 1 and extent == 1):
            return self
        return type(self)(self.covers, round(points * self.n), extent * self.half_extent)

    def describe(self) -> dict[str, object]:
        """What it takes to build the same axis again."""
        return {"kind": self.kind, "covers": list(self.covers), "n": self.n, "half_extent": self.half_extent}
