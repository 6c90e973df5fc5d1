"""Column densities of Gaussians, from every side, on every kind of space; which way is up."""

from __future__ import annotations

from collections.abc import Callable
from math import pi

import numpy as np
import pytest

import proofs
import trapsim
from reference import units
from trapsim.cloud.cloud import Cloud
from trapsim.measure.columns import RASTER, Column, ColumnViews
from trapsim.measure.views import VIEWS
from trapsim.space.axes import Axis, Radial, Wave
from trapsim.space.frame import Frame
from trapsim.space.space import Space

Q = 0.7


def space_around(lone: int | None) -> Space:
    """A space with one radial axis around a direction, or with none."""
    if lone is None:
        return Space([Wave((0,), 40, 6.0), Wave((1,), 36, 5.5), Wave((2,), 32, 5.0)])
    pair = tuple(j for j in range(3) if j != lone)
    axes: list[Axis] = [Wave((lone,), 40, 6.0), Radial(pair, 28, 5.5)]
    return Space(axes)


def normal(x: np.ndarray, s: float, centre: float = 0.0) -> np.ndarray:
    return np.exp(-((x - centre) ** 2) / (2 * s**2)) / (np.sqrt(2 * pi) * s)


@pytest.mark.parametrize("view", VIEWS)
@pytest.mark.parametrize("lone", [None, 0, 1, 2])
def test_the_column_density_of_a_gaussian(lone: int | None, view: str) -> None:
    # Closed form: the product of the two remaining normal densities, in lab metres of the scaled and displaced frame.
    sizes = (0.9, 0.8, 0.7) if lone is None else tuple(0.9 if j == lone else 0.7 for j in range(3))
    b = np.array([1.5, 2.0, 0.8]) if lone is None else np.array([1.5 if j == lone else 2.0 for j in range(3)])
    centre = np.array([1.0, -2.0, 3.0])
    space = space_around(lone)
    cloud = Cloud(space, proofs.cloud_samples(space, sizes=sizes, chirps=(0.2, 0.2, 0.2)), Frame(b=b, X=centre), 0.5, Q)
    column = ColumnViews(space).see(cloud, (view,))[view]
    right, up = ("xyz".index(d) for d in VIEWS[view])
    expected = (
        normal(column.y, b[up] * sizes[up], centre[up])[:, None]
        * normal(column.x, b[right] * sizes[right], centre[right])[None, :]
    )
    assert (column.view, column.time) == (view, 0.5)
    assert column.values.shape == (RASTER, RASTER)
    np.testing.assert_allclose(column.values, expected, atol=1e-7 * expected.max())
    # all atoms are on the raster
    assert column.integral() == pytest.approx(1, abs=1e-6)


@pytest.mark.parametrize(("view", "right", "up"), [("x", 1, 2), ("y", 0, 2), ("z", 0, 1)])
def test_a_cloud_off_centre_is_seen_on_the_right_and_above(view: str, right: int, up: int) -> None:
    # Seen along x, y points right and z up; along y, x right and z up; along z, x right and y up.
    space = space_around(None)
    at = (0.8, -0.5, 1.1)
    phi = 1.0
    for x, c in zip(space.coordinates(), at, strict=True):
        phi = phi * proofs.packet(x - c, 1, s=0.7)
    column = ColumnViews(space).see(Cloud(space, space.array(phi), Frame(), 0.0, Q))[view]
    assert np.all(np.diff(column.x) > 0) and np.all(np.diff(column.y) > 0)
    across, upwards = (column.values.sum(axis=0), column.values.sum(axis=1))
    assert across @ column.x / across.sum() == pytest.approx(at[right], abs=1e-6)
    assert upwards @ column.y / upwards.sum() == pytest.approx(at[up], abs=1e-6)


def test_all_views_are_seen_unless_some_are_asked_for() -> None:
    space = space_around(0)
    cloud = Cloud(space, proofs.cloud_samples(space, sizes=(0.9, 0.7, 0.7), chirps=(0, 0, 0)), Frame(), 0.0, Q)
    views = ColumnViews(space, raster=32)
    assert set(views.see(cloud)) == {"x", "y", "z"}
    assert set(views.see(cloud, ("z",))) == {"z"}
    assert views.see(cloud)["x"].values.shape == (32, 32)


def test_the_round_view_vanishes_in_the_corners() -> None:
    space = space_around(1)
    cloud = Cloud(space, proofs.cloud_samples(space, sizes=(0.7, 0.9, 0.7), chirps=(0, 0, 0)), Frame(), 0.0, Q)
    values = ColumnViews(space).see(cloud)["y"].values
    assert values[0, 0] == values[-1, -1] == 0.0
    np.testing.assert_allclose(values, values.T, atol=1e-14)


def test_along_a_uniform_direction_the_column_is_the_density_times_the_length() -> None:
    space = Space([Wave((0,), 40, 6.0), Wave((1,), 40, 6.0), Wave((2,), 1, 2.5)])
    x, y, _ = space.coordinates()
    phi = proofs.packet(x, 1, s=0.9) * proofs.packet(y, 1, s=0.7) / np.sqrt(5.0)
    views = ColumnViews(space).see(Cloud(space, space.array(phi), Frame(), 0.0, Q))
    along_z, along_x = views["z"], views["x"]
    expected = normal(along_z.y, 0.7)[:, None] * normal(along_z.x, 0.9)[None, :]
    np.testing.assert_allclose(along_z.values, expected, atol=1e-8)
    np.testing.assert_allclose(along_x.values, np.tile(normal(along_x.x, 0.7) / 5.0, (RASTER, 1)), atol=1e-8)


def test_a_column_integrates_over_its_raster() -> None:
    column = Column(np.array([0.0, 2.0, 4.0]), np.array([0.0, 0.5]), np.ones((2, 3)), "x", 0.0)
    assert column.integral() == pytest.approx(6.0)


@pytest.mark.parametrize("lone", [None, 0, 2])
def test_the_columns_of_a_thomas_fermi_cloud(lone: int | None) -> None:
    # Ketterle, Durfee, Stamper-Kurn, cond-mat/9904034 (value from memory): n0 (4/3) R_los (1 - x^2/R^2 - y^2/R^2)^1.5
    # with n0 = 15/(8 pi R_x R_y R_z). The edge is sharp, so a grid sees it to 1e-3 only.
    space = Space(
        [Wave((j,), 96, 4.6) for j in range(3)]
        if lone is None
        else [Wave((lone,), 96, 4.6), Radial(tuple(j for j in range(3) if j != lone), 60, 4.6)]
    )
    radii = [4.0 if j == (lone or 0) else 3.2 for j in range(3)]
    n = np.maximum(1 - space.quadratic([r**-2.0 for r in radii]), 0) * 15 / (8 * pi * np.prod(radii))
    cloud = Cloud(space, space.array(np.sqrt(n)), Frame(), 0.0, Q)
    for view, column in ColumnViews(space).see(cloud).items():
        right, up = ("xyz".index(d) for d in VIEWS[view])
        inside = 1 - (column.x[None, :] / radii[right]) ** 2 - (column.y[:, None] / radii[up]) ** 2
        peak = 15 / (8 * pi * np.prod(radii)) * 4 / 3 * radii["xyz".index(view)]
        np.testing.assert_allclose(column.values, peak * np.maximum(inside, 0) ** 1.5, atol=3e-3 * peak)


def test_a_kept_column_counts_all_the_atoms(solved: Callable[[trapsim.Plan], trapsim.Run]) -> None:
    plan = trapsim.plan_from_text(
        """
        [atoms]
        species = "Rb-87"
        number = 2.5e4
        scattering_length = "5e-9 m"
        [trap.dipole]
        kind = "harmonic"
        frequency = ["60 Hz", "100 Hz", "100 Hz"]
        [numerics]
        threads = 1
        """,
        "columns",
    )
    run = solved(plan)
    tf = units.thomas_fermi(units.MASSES["Rb-87"], tuple(2 * pi * f for f in (60.0, 100.0, 100.0)), 2.5e4, 5e-9)
    for view, series in run.columns.items():
        x, y, values = series.cols[0], series.rows[0], series.values[0].astype(float)
        assert values.sum() * (x[1] - x[0]) * (y[1] - y[0]) == pytest.approx(2.5e4, rel=1e-5), view
        # the Thomas-Fermi peak, n0 (4/3) R, of which quantum pressure takes a few per cent
        peak = tf.peak_density * 4 / 3 * tf.radii["xyz".index(view)]
        assert values.max() == pytest.approx(peak, rel=0.03)
