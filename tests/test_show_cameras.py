"""Pictures of cameras are drawn pixel by pixel, in their place, with what a reader needs to read them."""

from __future__ import annotations

import dataclasses
import math

import numpy as np
import pytest
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.contour import ContourSet
from matplotlib.figure import Figure
from matplotlib.text import Text
from scipy import constants

import invented_run
from trapsim.measure.picture import Picture
from trapsim.show.cameras import MOST, READABLE, camera_figure, windows_of


@pytest.fixture(scope="module")
def pictures() -> list[Picture]:
    return list(invented_run.contents().pictures.values())


@pytest.fixture(scope="module")
def figure(pictures: list[Picture]) -> Figure:
    made = camera_figure(invented_run.contents().summary, pictures)
    FigureCanvasAgg(made).draw()
    return made


def drawn(figure: Figure) -> list[Axes]:
    """The axes that hold pictures, in order."""
    return [ax for ax in figure.axes if ax.images and ax.get_ylabel()]


def words(figure: Figure) -> list[str]:
    FigureCanvasAgg(figure).draw()
    return [one.get_text() for one in figure.findobj(Text) if one.get_text()]


def test_a_picture_stands_in_its_place_with_its_optical_densities(figure: Figure, pictures: list[Picture]) -> None:
    ax = drawn(figure)[-1]
    (image,) = ax.images
    assert np.array_equal(image.get_array(), pictures[-1].optical_density)
    assert image.get_interpolation() == "nearest"
    left, right, bottom, top = image.get_extent()
    # 80 x 60 pixels of 2 um about the cloud: 4 mm/s and free fall for 20 ms
    assert (right - left, top - bottom) == pytest.approx((160.0, 120.0))
    fallen = -0.5 * constants.g * 0.02**2 * 1e6
    assert (0.5 * (left + right), 0.5 * (bottom + top)) == pytest.approx((80.0, fallen), abs=1e-6)
    assert ax.get_xlim()[0] < 80.0 < ax.get_xlim()[1] and ax.get_ylim()[0] < fallen < ax.get_ylim()[1]


def test_what_is_drawn_holds_all_atoms_and_says_so(figure: Figure, pictures: list[Picture]) -> None:
    data = np.asarray(drawn(figure)[-1].images[0].get_array())
    assert data.sum() * pictures[-1].atoms_per_od == pytest.approx(1e5, rel=1e-6)
    peak = 3 * 780.241e-9**2 / (2 * math.pi) * 1e5  # resonant cross-section times N/(2 pi sx sz), next to the middle
    (sx, _, sz), pixel = invented_run.track()["width"][-1], 1e-6
    peak *= math.exp(-(pixel**2) / 2 * (1 / sx**2 + 1 / sz**2)) / (2 * math.pi * sx * sz)
    assert f"100000 atoms, peak optical density {peak:.3g}" in words(figure)


def test_up_right_pixels_and_the_time_of_flight_are_said(figure: Figure) -> None:
    seen = words(figure)
    assert "camera side, 80 x 60 pixels of 2.000 µm at the atoms; right is x, up is z" in seen
    assert "20 ms of flight" in seen and {"x (µm) →", "z (µm) →"} <= set(seen)
    assert any(one.startswith("optical density") for one in seen)


def test_the_side_profile_is_the_picture_summed_up(figure: Figure) -> None:
    ax = drawn(figure)[-1]
    box = ax.get_position()
    above = next(one for one in figure.axes if one.get_title(loc="left") == "20 ms of flight")
    assert (above.get_position().x0, above.get_position().x1) == pytest.approx((box.x0, box.x1))
    assert above.get_xlim() == pytest.approx(ax.get_xlim())
    # the profile of a Gaussian peaks at N/(sqrt(2 pi) sigma), one half pixel beside the middle
    sigma = invented_run.track()["width"][-1, 0] * 1e6
    peak = max(path.vertices[:, 1].max() for path in above.collections[0].get_paths())
    exact = 1e5 / (math.sqrt(2 * math.pi) * sigma) * math.exp(-1 / (2 * sigma**2))
    assert peak == pytest.approx(exact, rel=1e-6)


def test_pictures_of_a_camera_share_one_scale_with_square_pixels(figure: Figure) -> None:
    spans = []
    for ax in drawn(figure):
        box = ax.get_window_extent()
        wide, tall = np.ptp(ax.get_xlim()), np.ptp(ax.get_ylim())
        assert box.width / wide == pytest.approx(box.height / tall, rel=1e-6)
        spans.append((wide, tall))
    assert len(spans) == 2 and spans[0] == pytest.approx(spans[1])


def test_scale_bars_have_the_length_they_say(figure: Figure) -> None:
    for ax in drawn(figure):
        (bar,) = ax.lines
        (label,) = [one.get_text() for one in ax.texts]
        assert label == f"{np.ptp(bar.get_xdata()):g} µm"


def test_what_a_camera_hardly_reads_is_outlined(pictures: list[Picture]) -> None:
    """A Gaussian of peak 40 is above 4 within sigma sqrt(2 ln 10)."""
    x = np.linspace(-60e-6, 60e-6, 121)
    bell = np.exp(-(x**2) / (2 * 15e-6**2))
    dense = dataclasses.replace(pictures[0], x=x, y=x, optical_density=40 * bell[:, None] * bell[None, :])
    thin = dataclasses.replace(dense, optical_density=0.05 * dense.optical_density)
    ax = drawn(camera_figure(invented_run.contents().summary, [dense]))[0]
    (outline,) = ax.findobj(ContourSet)
    radii = np.hypot(*outline.get_paths()[0].vertices.T)
    assert radii == pytest.approx(15 * math.sqrt(2 * math.log(40 / READABLE)), rel=5e-3)
    assert not drawn(camera_figure(invented_run.contents().summary, [thin]))[0].findobj(ContourSet)


def test_three_orders_far_apart_are_all_in_the_window_and_not_stretched(pictures: list[Picture]) -> None:
    x, y = np.linspace(-400e-6, 400e-6, 256), np.linspace(-200e-6, 200e-6, 128)
    bells = sum(p * np.exp(-((x - c) ** 2) / (2 * 6e-6**2)) for p, c in ((0.2, -2.6e-4), (1, 0), (0.2, 2.6e-4)))
    wide = dataclasses.replace(
        pictures[0], x=x, y=y, optical_density=np.exp(-(y**2) / (2 * 8e-6**2))[:, None] * bells[None, :]
    )
    (window,) = windows_of([wide])
    assert window.half_right > 260 and window.half_up < 60 and window.enlarged == 1
    ax = drawn(camera_figure(invented_run.contents().summary, [wide]))[0]
    box = ax.get_window_extent()
    assert box.width / np.ptp(ax.get_xlim()) == pytest.approx(box.height / np.ptp(ax.get_ylim()), rel=1e-6)
    assert box.height / ax.figure.dpi > 0.9  # inches


def test_a_cloud_beside_the_camera_leaves_an_empty_picture(pictures: list[Picture]) -> None:
    nothing = dataclasses.replace(pictures[0], name="nothing", optical_density=np.zeros_like(pictures[0].optical_density))
    summary = invented_run.contents().summary
    seen = words(camera_figure(summary, [nothing, pictures[1]]))
    assert "no atoms on this picture" in seen and "the cloud is outside this picture" in seen
    assert "no atoms on this picture" in words(camera_figure(summary, [nothing]))
    part = dataclasses.replace(pictures[1], optical_density=0.25 * pictures[1].optical_density)
    assert any(one.startswith("25000 of 100000 atoms") for one in words(camera_figure(summary, [part])))


def test_a_window_stays_on_the_sensor(pictures: list[Picture]) -> None:
    edges = [line[i] * 1e6 + side for line in (pictures[0].x, pictures[0].y) for i, side in ((0, -1), (-1, 1))]
    whole, corner = np.zeros((2, 60, 80))
    whole[:, -1] = whole[0, :] = 1.0
    corner[40:, 70:] = 1.0
    (window,) = windows_of([dataclasses.replace(pictures[0], optical_density=whole)])
    assert window.extent == pytest.approx(edges)
    (window,) = windows_of([dataclasses.replace(pictures[0], optical_density=corner)])
    left, right, bottom, top = window.extent
    assert (right, top) == pytest.approx((edges[1], edges[3])) and left > edges[0] + 100 and bottom > edges[2] + 60


@pytest.mark.slow
def test_a_film_is_shown_in_a_selection_and_says_so(pictures: list[Picture]) -> None:
    film = [dataclasses.replace(pictures[1], name=f"side_{n}") for n in range(30)]
    figure = camera_figure(invented_run.contents().summary, film)
    assert len(drawn(figure)) == MOST
    assert any(one.startswith("12 of 30 pictures; camera side") for one in words(figure))
