"""Column densities: the density summed along a line of sight, as plain samples in lab metres.

Everything downstream (files, figures, cameras) knows only a `Column`, never the space it came from.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import interpolate

from trapsim.cloud.cloud import Cloud
from trapsim.measure.views import VIEWS
from trapsim.space.axes import Array, Radial, Wave
from trapsim.space.space import Space

#: samples per side of a raster
RASTER = 128
#: waves summed at a time
CHUNK = 32


@dataclass(frozen=True)
class Column:
    """A column density along one line of sight.

    Parameters
    ----------
    x, y : (C,), (R,)
        Lab coordinates of the columns (to the right) and rows (upwards), m.
    values : (R, C)
        Per unit of area, 1/m^2, for a wave function normalised to 1.
    view : str
        The line of sight, "x", "y" or "z".
    time : float
        s.
    """

    x: Array
    y: Array
    values: Array
    view: str
    time: float

    def integral(self) -> float:
        """Sum over the raster; the share of the atoms on it."""
        return float(self.values.sum() * (self.x[1] - self.x[0]) * (self.y[1] - self.y[0]))


class ColumnViews:
    """Column densities of clouds on one space; what depends on the space alone is made once.

    The density is taken where it is as well resolved as the field itself: on a radial axis the field is evaluated on
    twice the points before it is squared (its square has twice the bandwidth).

    Parameters
    ----------
    space : Space
    raster : int
        Samples per side.
    finer : float
        At least that many samples per point of an axis, for pictures.
    """

    def __init__(self, space: Space, *, raster: int = RASTER, finer: float = 0.0) -> None:
        self.seen = space
        space = self.space = space.unfolded(space.empty())[1]
        self.samples = [max(raster, int(finer * a.n)) for a in space.axes]
        self.finer = [a.finer() if isinstance(a, Radial) else a for a in space.axes]
        self._onto_finer = space.axes[0].basis(self.finer[0].points) if isinstance(space.axes[0], Radial) else None
        self._lines = [midpoints(a.half_extent, n) for a, n in zip(self.finer, self.samples, strict=True)]
        #: per axis, the matrix from samples to the raster: the side view on a radial axis, else the axis' own series;
        #: none where both are midpoints of equal cells, so that a longer transform sums the series
        self._onto = [
            None if isinstance(a, Wave) and 1 < a.n <= len(line)
            else a.project(line) if isinstance(a, Radial) else a.density_basis(line)
            for a, line in zip(self.finer, self._lines, strict=True)
        ]  # fmt: skip

    def density(self, cloud: Cloud) -> Array:
        """|phi|^2 on the finer points."""
        phi, _ = cloud.space.unfolded(cloud.phi)
        if self._onto_finer is not None:
            phi = np.tensordot(self._onto_finer, phi, axes=(1, 0))
        return phi.real**2 + phi.imag**2

    def see(self, cloud: Cloud, views: tuple[str, ...] = tuple(VIEWS)) -> dict[str, Column]:
        """Column densities of a cloud along the given lines of sight."""
        density = self.density(cloud)
        return {view: self._column(cloud, density, view) for view in views}

    def _column(self, cloud: Cloud, density: Array, view: str) -> Column:
        along = "xyz".index(view)
        right, up = ("xyz".index(d) for d in VIEWS[view])
        space, frame = self.space, cloud.frame
        if space.axis(along).covers == (along,):
            d = space.dim(along)
            rest = np.tensordot(self.finer[d].weights, density, axes=(0, d))
            values = self._round(rest) if rest.ndim == 1 else self._flat(rest, d, up, right)
        else:
            values = self._side(density, up, right, along)
        lines = [self._lines[space.dim(j)] for j in (right, up)]
        values = values / (frame.b[right] * frame.b[up])
        return Column(frame.lab(lines[0], right), frame.lab(lines[1], up), values, view, cloud.time)

    def see_turned(self, cloud: Cloud, view: str, turn: float, *, finest: float = 0.0) -> Column:
        """A column density along a line of sight that is turned about the picture's upward direction.

        With along, right and up of the plain view, the line of sight is along cos(turn) + right sin(turn), and what
        points right is right cos(turn) - along sin(turn). By the Fourier slice theorem: the spectrum of the side view is
        a straight cut through that of the density. Detail shorter than `finest` (m) may be left out.
        """
        along = "xyz".index(view)
        right, up = ("xyz".index(d) for d in VIEWS[view])
        frame = cloud.frame
        cosine, sine = np.cos(turn), np.sin(turn)
        half = sum(abs(c) * frame.b[j] * self.space.axis(j).half_extent for c, j in ((cosine, right), (sine, along)))
        samples = max(self.samples[self.space.dim(j)] for j in (right, along))
        waves = np.pi / half * np.arange(-samples // 2, samples // 2)
        if finest:
            waves = waves[np.abs(waves) <= np.pi / finest]
        cut, waves = self._cut(cloud, waves, cosine, sine, (right, up, along))
        s = midpoints(half, samples)
        profile = np.real(np.exp(1j * np.outer(s, waves)) @ cut) / (2 * half)
        rows = self._lines[self.space.dim(up)]
        axis = self.space.axis(up)
        if isinstance(axis, Radial):
            spread = profile  # a round cloud was spread over the raster's own line
        else:
            spread = self._rastered(profile, self.space.dim(up))
        middle = frame.X[right] * cosine - frame.X[along] * sine
        # grid measures along and right cancel against the density's own; up is left
        return Column(s + middle, frame.lab(rows, up), spread.T / frame.b[up], view, cloud.time)

    def _cut(
        self, cloud: Cloud, waves: Array, cosine: float, sine: float, directions: tuple[int, int, int]
    ) -> tuple[Array, Array]:
        """The density's spectrum along a straight line in the plane of right and along, for every up: (waves, up).

        On a radial axis that covers up, the places up are those of the raster, else those of the axis. Waves that the
        points do not resolve are left out.
        """
        right, up, along = directions
        density, frame = self.density(cloud), cloud.frame
        radial = self._onto_finer is not None
        lines = [self._lines[0] if radial and j in self.finer[0].covers else self.space.axis(j).points for j in range(3)]
        for j, factor in ((right, cosine), (along, sine)):
            spacing = frame.b[j] * (lines[j][1] - lines[j][0])
            waves = waves[np.abs(waves * factor) <= np.pi / spacing]

        def turns(j: int) -> Array:
            factor = -cosine if j == right else sine
            return (lines[j][1] - lines[j][0]) * np.exp(1j * factor * frame.b[j] * np.outer(lines[j], waves))

        if not radial:
            order = [self.space.dim(j) for j in (right, up, along)]
            return _contract(np.transpose(density, order), turns(along), turns(right)), waves
        (other,) = self.finer[1].covers
        if other == up:
            square = self._spread(density)
            return _contract(np.transpose(square, (0, 2, 1)), turns(along), turns(right)), waves
        # the flat axis first, which leaves one radial profile per wave
        profiles = density @ turns(other)
        square = self._spread(profiles.real) + 1j * self._spread(profiles.imag)
        return np.einsum("ruk,rk->ku", square, turns(right if other == along else along)), waves

    def _spread(self, profile: Array) -> Array:
        """Samples (n_r, ...) of round functions on the square raster of the radial axis, (raster, raster, ...)."""
        axis, line = self.finer[0], self._lines[0]
        radii = np.linspace(0.0, axis.half_extent, 8 * axis.n)
        spline = interpolate.CubicSpline(radii, axis.basis(radii) @ profile, axis=0)
        r = np.sqrt(line[:, None] ** 2 + line[None, :] ** 2)
        inside = (r <= axis.half_extent).reshape(r.shape + (1,) * (profile.ndim - 1))
        return np.where(inside, spline(np.minimum(r, axis.half_extent)), 0.0)

    def _flat(self, rest: Array, gone: int, up: int, right: int) -> Array:
        """Two axes of their own are left: their own series evaluated on the raster."""
        dims = [d for d in range(len(self.space.axes)) if d != gone]
        if dims != [self.space.dim(up), self.space.dim(right)]:
            rest = rest.T
        across = self._rastered(rest, self.space.dim(right))
        return self._rastered(across.T, self.space.dim(up)).T

    def _rastered(self, values: Array, d: int) -> Array:
        """Real samples along array dimension d (here the last) on the raster's line."""
        axis, matrix, m = self.finer[d], self._onto[d], len(self._lines[d])
        if matrix is not None:
            return values @ matrix.T
        n = axis.n
        spectrum = np.fft.rfft(values, axis=-1)
        spectrum *= np.exp(2j * np.pi * np.arange(n // 2 + 1) * (self._lines[d][0] - axis.points[0]) / (n * axis.spacing))
        if n % 2 == 0 and m > n:
            # the highest wave has no sign: half of it goes to either
            spectrum[..., -1] *= 0.5
        return np.fft.irfft(spectrum, m, axis=-1) * (m / n)

    def _round(self, profile: Array) -> Array:
        """A round cloud seen along its axis: a profile in r, spread over the raster."""
        return self._spread(profile)

    def _side(self, density: Array, up: int, right: int, along: int) -> Array:
        """A round cloud seen from the side: the Fourier slice of the radial axis, the other axis' own series."""
        values = self._rastered(self._onto[0] @ density, 1)
        across = next(j for j in self.space.axes[0].covers if j != along)
        return values if across == up else values.T


def _contract(density: Array, along: Array, right: Array) -> Array:
    """Sum (right, up, along) samples with (along, waves) and (right, waves) phases to (waves, up), in chunks of waves."""
    out = np.empty((along.shape[1], density.shape[1]), dtype=complex)
    for start in range(0, len(out), CHUNK):
        chunk = slice(start, start + CHUNK)
        summed = density @ along[:, chunk].real + 1j * (density @ along[:, chunk].imag)
        out[chunk] = np.einsum("ruk,rk->ku", summed, right[:, chunk])
    return out


def midpoints(half: float, samples: int) -> Array:
    """The midpoints of equal cells from -half to half."""
    return ((np.arange(samples) + 0.5) / samples * 2 - 1) * half
