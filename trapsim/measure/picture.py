"""Pictures: a column density as a camera records it, pixel by pixel."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import interpolate

from trapsim.measure.camera import Camera
from trapsim.measure.columns import Column
from trapsim.space.axes import Array

#: a picture with fewer atoms than this shows none: what is left is the rounding of sums over the cloud
NOTHING = 1e-3

@dataclass(frozen=True)
class Picture:
    """What a camera recorded.

    Parameters
    ----------
    name, camera : str
    time : float
        s, from the start of the sequence.
    x, y : (C,), (R,)
        Centres of the pixels at the atoms, to the right and upwards, m, from the origin of the ground state.
    optical_density : (R, C)
        Of each pixel: resonant cross-section times the column density averaged over it.
    atoms_per_od : float
        Atoms in a pixel of optical density 1.
    right, up : str
        What points to the right and upwards.
    """

    name: str
    camera: str
    time: float
    x: Array
    y: Array
    optical_density: Array
    atoms_per_od: float
    right: str
    up: str

    @property
    def atoms(self) -> float:
        """Atoms on the picture."""
        return float(self.optical_density.sum() * self.atoms_per_od)

    @property
    def empty(self) -> bool:
        """Whether the cloud is outside the picture."""
        return self.atoms < NOTHING

    def moments(self) -> tuple[Array, Array]:
        """Centre and rms half-widths (right, up) on the picture, m; the pixel's own width is not taken off.

        Not a number where no atom is on it.
        """
        if self.empty:
            return np.full(2, np.nan), np.full(2, np.nan)
        total = self.optical_density.sum()
        across, upwards = self.optical_density.sum(axis=0) / total, self.optical_density.sum(axis=1) / total
        centre = np.array([across @ self.x, upwards @ self.y])
        square = np.array([across @ (self.x - centre[0]) ** 2, upwards @ (self.y - centre[1]) ** 2])
        return centre, np.sqrt(square)


def pixel_edges(camera: Camera, middle: tuple[float, float]) -> tuple[Array, Array]:
    """Edges of the pixels at the atoms, to the right and upwards, m."""
    side = camera.object_pixel
    return tuple(m + side * (np.arange(n + 1) - n / 2) for m, n in zip(middle, camera.size, strict=True))


def resonant_cross_section(wavelength: float) -> float:
    """3 lambda^2/(2 pi), m^2, of a closed transition (D. A. Steck, Alkali D Line Data)."""
    return 3 * wavelength**2 / (2 * np.pi)


def pixel_means(column: Column, edges: tuple[Array, Array]) -> Array:
    """A column density averaged over pixels, (rows, columns): the exact integral of the raster's cubic splines.

    Parameters
    ----------
    column : Column
        Its raster must hold the whole cloud.
    edges : (C + 1,), (R + 1,)
        Of the pixels, in the column's coordinates.
    """
    return _averaged(_averaged(column.values, column.x, edges[0]).T, column.y, edges[1]).T


def _averaged(values: Array, points: Array, edges: Array) -> Array:
    """(rows, pixels): samples along the last axis averaged over pixels, by their natural spline; zero outside."""
    integral = interpolate.CubicSpline(points, values, axis=1, bc_type="natural").antiderivative()
    inside = np.clip(edges, points[0], points[-1])
    return np.diff(integral(inside), axis=1) / np.diff(edges)
