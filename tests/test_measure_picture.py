"""The camera's picture: pixels, atoms, orientation, aim, turned views, and when pictures are taken.

The yardstick is a Gaussian cloud, whose column is a Gaussian and whose pixels are differences of error functions
(scipy.special.erf).
"""

from __future__ import annotations

from math import cos, pi, radians, sin, sqrt

import numpy as np
import pytest
from scipy.special import erf

import motion
import trapsim
from reference import units
from trapsim.cloud.cloud import Cloud
from trapsim.measure.camera import Camera
from trapsim.measure.columns import Column, ColumnViews
from trapsim.measure.picture import Picture, pixel_edges, pixel_means, resonant_cross_section
from trapsim.show.cameras import camera_figure
from trapsim.show.tables import pictures_table
from trapsim.show.text import summary_text
from trapsim.space.axes import Wave
from trapsim.space.frame import Frame
from trapsim.space.space import Space

Array = np.ndarray

Q = units.hbar / motion.RB
#: Hz, an ideal gas of these widths when it rests
FREQUENCY = (40.0, 90.0, 130.0)
NUMBER, FLIGHT = 2e4, 6e-3
#: m, its rms widths after FLIGHT
WIDTHS = tuple(sqrt(Q / (2 * 2 * pi * f) * (1 + (2 * pi * f * FLIGHT) ** 2)) for f in FREQUENCY)
#: m^2: 3 lambda^2/2 pi at 780.241 nm
SIGMA = 2.906688e-13
VIEWS = {"x": (1, 2), "y": (0, 2), "z": (0, 1)}
G = 9.80665


def cell(edges: Array, centre: float, width: float) -> Array:
    """A normal distribution's share in every cell."""
    return np.diff(erf((edges - centre) / (sqrt(2) * width))) / 2


def edges_of(middles: Array) -> Array:
    side = middles[1] - middles[0]
    return np.append(middles - side / 2, middles[-1] + side / 2)


def density(picture: Picture, centre: tuple[float, float], width: tuple[float, float]) -> Array:
    """The optical density that each pixel of a picture should have."""
    x, y = edges_of(picture.x), edges_of(picture.y)
    area = (x[1] - x[0]) * (y[1] - y[0])
    atoms = NUMBER * np.outer(cell(y, centre[1], width[1]), cell(x, centre[0], width[0]))
    return SIGMA * atoms / area


def camera(name: str, view: str, *, size: str = "[64, 48]", pixel: str = "6.5 um", **words: str) -> str:
    more = "\n".join(f"{key} = {value}" for key, value in words.items())
    return (
        f'[camera.{name}]\nview = "{view}"\npixel = "{pixel}"\nmagnification = 4.0\nsize = {size}\n'
        f'wavelength = "780.241 nm"\n{more}\n'
    )


def taken(*cameras: str, stages: tuple[str, ...] = (), gravity: bool = False, **more: object) -> trapsim.Plan:
    """An ideal gas, let go and looked at."""
    stages = stages or (motion.stage("release", FLIGHT),)
    return motion.cloud(
        *stages, frequency=FREQUENCY, a="0 a0", number=NUMBER, parts="\n".join(cameras), gravity=gravity,
        **{"accuracy": "fine", **more},
    )  # fmt: skip


_RUNS: dict[str, trapsim.Run] = {}


def pictured(plan: trapsim.Plan) -> trapsim.Run:
    """The run of a plan with its cameras; runs of one march differ by what is looked at."""
    if plan.key not in _RUNS:
        _RUNS[plan.key] = trapsim.run(plan)
    return _RUNS[plan.key]


# ---- pixels --------------------------------------------------------------------------------------------------------


def raster(width: tuple[float, float], centre: tuple[float, float], samples: int = 401) -> Column:
    """A Gaussian column on a raster ten widths to either side."""
    x, y = (c + w * np.linspace(-10, 10, samples) for w, c in zip(width, centre, strict=True))
    values = np.outer(
        np.exp(-((y - centre[1]) ** 2) / (2 * width[1] ** 2)), np.exp(-((x - centre[0]) ** 2) / (2 * width[0] ** 2))
    ) / (2 * pi * width[0] * width[1])
    return Column(x, y, values, "y", 0.0)


@pytest.mark.parametrize("side", [0.3e-6, 2e-6, 25e-6])
def test_a_pixel_holds_the_column_averaged_over_it(side: float) -> None:
    width, centre = (5e-6, 8e-6), (1.3e-6, -4e-6)
    one = Camera(view="y", pixel=side, magnification=1.0, size=(60, 40))
    edges = pixel_edges(one, (0.0, 0.0))
    exact = np.outer(cell(edges[1], centre[1], width[1]), cell(edges[0], centre[0], width[0])) / side**2
    found = pixel_means(raster(width, centre), edges)
    assert found.shape == (40, 60)
    assert np.abs(found - exact).max() < 1e-6 * exact.max()
    # a large pixel is not its middle: sampling there would be off by a lot
    if side > 20e-6:
        middle = np.exp(-(centre[0] ** 2) / (2 * width[0] ** 2)) / (2 * pi * width[0] * width[1])
        assert middle > 1.5 * exact.max()


def test_the_resonant_cross_section_of_rubidium() -> None:
    # D. A. Steck, Rubidium 87 D Line Data: 2.906e-9 cm^2 at 780.241209686 nm
    assert resonant_cross_section(780.241209686e-9) == pytest.approx(2.906693e-13, rel=1e-6, abs=0)
    assert pytest.approx(3 * 780.241e-9**2 / (2 * pi), rel=1e-5, abs=0) == SIGMA


def test_the_pixel_at_the_atoms_is_that_of_the_sensor_over_the_magnification() -> None:
    one = Camera(view="x", pixel=6.5e-6, magnification=2.6, size=(7, 4))
    assert one.object_pixel == pytest.approx(2.5e-6, rel=1e-12, abs=0)
    x, y = pixel_edges(one, (10e-6, -20e-6))
    assert (len(x), len(y)) == (8, 5)
    assert (x.mean(), y.mean()) == pytest.approx((10e-6, -20e-6), rel=1e-9, abs=0)
    np.testing.assert_allclose(np.diff(x), 2.5e-6)


@pytest.mark.parametrize("n", [16, 17])
@pytest.mark.parametrize("finer", [0.5, 1.0, 3.0])
def test_a_raster_follows_the_axes_own_series_to_the_highest_wave(n: int, finer: float) -> None:
    """Rough samples, which no cloud has: every wave that the axes hold counts."""
    rng = np.random.default_rng(3)
    space = Space([Wave((0,), n, 4.0), Wave((1,), 6, 3.0), Wave((2,), n + 3, 5.0)])
    cloud = Cloud(space, space.array(rng.normal(size=space.shape)), Frame(), 0.0, 1.0)
    column = ColumnViews(space, raster=8, finer=finer).see(cloud, ("y",))["y"]
    along = (cloud.density() * space.along(1, space.axes[1].weights)).sum(axis=1)
    # the trigonometric series of the samples, summed wave by wave; the highest of an even number is a cosine
    for axis, line in ((space.axes[0], column.x), (space.axes[2], column.y)):
        waves = 2 * pi * np.fft.fftfreq(axis.n, axis.spacing)
        matrix = np.exp(1j * waves * (line[:, None, None] - axis.points[None, :, None])).sum(axis=2).real / axis.n
        along = np.moveaxis(np.tensordot(matrix, along, axes=(1, 0)), 0, -1)
    np.testing.assert_allclose(column.values, along.T, atol=1e-12 * np.abs(along).max())


# ---- whole runs ----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("view", ["x", "y", "z"])
def test_every_pixel_of_a_released_gaussian_cloud(view: str) -> None:
    run = pictured(taken(*(camera(v, v) for v in VIEWS)))
    picture = run.pictures[f"{view}_release_6ms"]
    right, up = VIEWS[view]
    exact = density(picture, (0.0, 0.0), (WIDTHS[right], WIDTHS[up]))
    # the free packet of textbooks, pixel by pixel
    assert np.abs(picture.optical_density - exact).max() < 1e-6 * exact.max()
    assert (picture.right, picture.up) == ("xyz"[right], "xyz"[up])
    assert picture.atoms == pytest.approx(NUMBER, rel=1e-4)
    assert picture.time == pytest.approx(FLIGHT, rel=1e-12, abs=0)
    (figures,) = (p for p in run.summary.pictures if p.camera == view)
    assert figures.atoms == pytest.approx(NUMBER, rel=1e-4)
    assert figures.peak_optical_density == pytest.approx(exact.max(), rel=1e-6)


@pytest.mark.parametrize("axes", ["auto", "full"])
@pytest.mark.parametrize("accuracy", ["draft", "normal"])
def test_the_atoms_on_a_picture_are_those_of_the_plan(axes: str, accuracy: str) -> None:
    plan = motion.cloud(
        motion.stage("release", 8e-3), frequency=(40, 120, 120), number=3e4, accuracy=accuracy,
        parts=camera("side", "y", size="[160, 120]", pixel="8 um"), numerics=f'axes = "{axes}"',
    )  # fmt: skip
    run = pictured(plan)
    (picture,) = run.pictures.values()
    assert picture.atoms == pytest.approx(3e4, rel=1e-4)
    centre, width = picture.moments()
    # each pixel smears what is on it over its side, which adds side^2/12
    side = picture.x[1] - picture.x[0]
    lab = 1e-6 * np.array(run.summary.end.width_um)[[0, 2]]
    assert width == pytest.approx(np.sqrt(lab**2 + side**2 / 12), rel=1e-3)
    assert centre == pytest.approx([0, 0], abs=1e-9)


def test_right_and_up_are_the_directions_of_the_lab() -> None:
    """A cloud kicked by different speeds along x, y, z is seen where it is."""
    speed = (1.0, -2.0, 3.0)
    kick = "[" + ", ".join(f'"{v} mm/s"' for v in speed) + "]"
    stages = (motion.stage("kick", velocity=kick), motion.stage("release", FLIGHT))
    run = pictured(taken(*(camera(v, v, size="[128, 128]") for v in VIEWS), stages=stages))
    place = [1e-3 * v * FLIGHT for v in speed]
    for view, (right, up) in VIEWS.items():
        picture = run.pictures[f"{view}_release_6ms"]
        exact = density(picture, (place[right], place[up]), (WIDTHS[right], WIDTHS[up]))
        assert np.abs(picture.optical_density - exact).max() < 2e-6 * exact.max()
        # rows go upwards, columns to the right
        row, column = np.unravel_index(picture.optical_density.argmax(), picture.optical_density.shape)
        assert picture.y[row] == pytest.approx(place[up], abs=2e-6)
        assert picture.x[column] == pytest.approx(place[right], abs=2e-6)


def test_a_camera_aims_in_the_lab_or_follows_the_cloud() -> None:
    fallen = G * FLIGHT**2 / 2
    sag = G / (2 * pi * FREQUENCY[2]) ** 2
    run = pictured(taken(
        camera("aimed", "y", aim='["0 um", "0 um", "-150 um"]'), camera("following", "y", follow="true"),
        gravity=True,
    ))  # fmt: skip
    aimed, following = (run.pictures[f"{name}_release_6ms"] for name in ("aimed", "following"))
    # positions on pictures count from where the cloud hung, which is `sag` below the trap's centre
    assert aimed.y.mean() == pytest.approx(-150e-6 + sag, abs=1e-11)
    assert following.y.mean() == pytest.approx(-fallen, abs=1e-10)
    for picture in (aimed, following):
        exact = density(picture, (0.0, -fallen), (WIDTHS[0], WIDTHS[2]))
        assert np.abs(picture.optical_density - exact).max() < 2e-6 * exact.max()


def test_a_cloud_outside_the_picture_has_no_width_there_and_is_said_to_be_outside() -> None:
    # 128 pixels of 0.25 um: the left edge of the second camera cuts the cloud in halves
    far, near = (f'["{x} um", "0 um", "0 um"]' for x in (900, 16))
    small = {"pixel": "1 um", "size": "[128, 128]"}
    run = pictured(taken(
        camera("away", "y", aim=far, **small), camera("beside", "y", aim=near, **small), accuracy="draft",
    ))  # fmt: skip
    away, beside = run.summary.pictures
    assert (away.atoms, away.peak_optical_density) == (0.0, 0.0)
    # null in the summary, which knows no NaN
    assert away.as_dict()["width_um"] == away.as_dict()["centre_um"] == [None, None]
    assert [n.text.split(":")[0] for n in run.summary.warnings if n.code == "outside"] == ["picture away_release_6ms"]
    assert "no atom is on it" in " ".join(summary_text(run.summary).split())
    assert str(pictures_table(run.summary.pictures)).count("–, –") == 2
    # half of a normal distribution: its mean is sqrt(2/pi) widths from the edge, its variance 1 - 2/pi
    assert beside.atoms == pytest.approx(NUMBER / 2, rel=1e-3)
    assert 1e-6 * beside.centre_um[0] == pytest.approx(WIDTHS[0] * sqrt(2 / pi), rel=5e-3)
    assert 1e-6 * beside.width_um[0] == pytest.approx(WIDTHS[0] * sqrt(1 - 2 / pi), rel=5e-3)
    words = [
        " ".join(text.get_text() for ax in camera_figure(run.summary, [picture]).axes for text in ax.texts)
        for picture in run.pictures.values()
    ]
    assert "the cloud is outside this picture" in words[0] and "atoms," not in words[0]
    assert "outside" not in words[1] and "10000 of 20000 atoms" in words[1]


@pytest.mark.parametrize("view", ["x", "y", "z"])
@pytest.mark.parametrize("degrees", [30.0, -70.0])
@pytest.mark.parametrize("axes", ["auto", "full"])
def test_a_turned_camera_sees_a_turned_gaussian(view: str, degrees: float, axes: str) -> None:
    """Width^2 to the right = right^2 cos^2 + along^2 sin^2, place = right cos - along sin; what is up is as before."""
    speed = (1.0, -2.0, 3.0)
    kick = "[" + ", ".join(f'"{v} mm/s"' for v in speed) + "]"
    stages = (motion.stage("kick", velocity=kick), motion.stage("release", FLIGHT))
    words = [camera(f"{v}{i}", v, turn=f'"{d} deg"', size="[128, 128]") for v in VIEWS for i, d in enumerate((30.0, -70.0))]
    frequency = (40.0, 110.0, 110.0)
    run = pictured(motion.cloud(
        *stages, frequency=frequency, a="0 a0", number=NUMBER, parts="\n".join(words), accuracy="fine",
        numerics=f'axes = "{axes}"',
    ))  # fmt: skip
    widths = [sqrt(Q / (4 * pi * f) * (1 + (2 * pi * f * FLIGHT) ** 2)) for f in frequency]
    place = [1e-3 * v * FLIGHT for v in speed]
    along, (right, up), turn = "xyz".index(view), VIEWS[view], radians(degrees)
    picture = run.pictures[f"{view}{0 if degrees > 0 else 1}_release_6ms"]
    width = sqrt((widths[right] * cos(turn)) ** 2 + (widths[along] * sin(turn)) ** 2)
    middle = place[right] * cos(turn) - place[along] * sin(turn)
    exact = density(picture, (middle, place[up]), (width, widths[up]))
    assert np.abs(picture.optical_density - exact).max() < 1e-5 * exact.max()
    assert picture.atoms == pytest.approx(NUMBER, rel=1e-4)
    assert picture.right == f"{'xyz'[right]} turned by {degrees:.4g} deg" and picture.up == "xyz"[up]


@pytest.mark.parametrize("aimed", [False, True])
def test_a_turned_camera_keeps_what_it_looks_at_in_its_middle(aimed: bool) -> None:
    speed, turn, there = (1.0, -2.0, 3.0), radians(40.0), (5e-6, 11e-6, -7e-6)
    aim = "[" + ", ".join(f'"{u!r} m"' for u in there) + "]"
    words = {"aim": aim} if aimed else {"follow": "true"}
    stages = (
        motion.stage("kick", velocity="[" + ", ".join(f'"{v} mm/s"' for v in speed) + "]"),
        motion.stage("release", FLIGHT),
    )  # fmt: skip
    run = pictured(taken(camera("tilted", "x", turn='"40 deg"', **words), stages=stages, accuracy="draft"))
    picture = run.pictures["tilted_release_6ms"]
    place = there if aimed else tuple(1e-3 * v * FLIGHT for v in speed)
    # along x it looks towards +y as it turns, so that x counts backwards on its picture
    middle = (place[1] * cos(turn) - place[0] * sin(turn), place[2])
    assert (picture.x.mean(), picture.y.mean()) == pytest.approx(middle, abs=1e-10)


def test_pictures_are_named_and_timed_as_planned() -> None:
    stages = (
        motion.stage("hold", 1e-3, pictures='["0.25 ms"]'), motion.stage("release", 2e-3, pictures='["0.5 ms", "2 ms"]'),
        motion.stage("hold", 1e-3, name='"later"'), motion.stage("release", 1e-3),
    )  # fmt: skip
    run = pictured(taken(camera("one", "x"), camera("two", "z"), stages=stages, accuracy="draft"))
    times = {"hold_0.25ms": 0.25e-3, "release_0.5ms": 1.5e-3, "release_2ms": 3e-3, "release_2_1ms": 5e-3}
    expected = {f"{name}_{shot}": t for shot, t in times.items() for name in ("one", "two")}
    assert {name: p.time for name, p in run.pictures.items()} == pytest.approx(expected)
    assert {name: p.camera for name, p in run.pictures.items()} == {n: n.partition("_")[0] for n in expected}
    assert [p.name for p in run.summary.pictures] == list(run.pictures)
    # each picture lands on its own time: the track has a sample there
    for t in times.values():
        assert motion.at(run.track, t) >= 0


def test_without_a_camera_there_is_no_picture() -> None:
    run = pictured(taken(accuracy="draft"))
    assert run.pictures == {} and run.summary.pictures == ()
