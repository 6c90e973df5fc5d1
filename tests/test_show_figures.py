"""The figures show what is true: curves through the samples, densities in their place, plain digits."""

from __future__ import annotations

import dataclasses
import math
import os
import re
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.colors import to_rgb
from matplotlib.figure import Figure
from matplotlib.image import AxesImage
from matplotlib.text import Text
from scipy import constants

import invented_run
from trapsim.errors import FileTrouble
from trapsim.record.series import ColumnSeries, Track
from trapsim.record.store import Contents
from trapsim.record.summary import StageEnd
from trapsim.show.curves import alike, apart, smooth
from trapsim.show.density import columns_figure, strip_figure, window_of
from trapsim.show.figures import figures_of, write_figures
from trapsim.show.flight import draw_centre, draw_widths, flight_figure
from trapsim.show.look import DENSITY, LOOKS, png
from trapsim.show.wording import times_asked_for


def words(figure: Figure) -> list[str]:
    FigureCanvasAgg(figure).draw()
    return [one.get_text() for one in figure.findobj(Text) if one.get_text() and one.get_visible()]


def cut(track: Track, wanted: slice) -> Track:
    series = {name: dataclasses.replace(one, values=one.values[wanted]) for name, one in track.series.items()}
    return Track(track.time[wanted], track.stage[wanted], series, track.stage_names)


# --- curves ---------------------------------------------------------------------------------------------------------


def test_the_curve_between_samples_is_the_cubic_of_hermite() -> None:
    """A cubic with its exact rates is reproduced exactly (Hermite interpolation, textbook)."""
    t = np.array([0.0, 0.4, 1.0, 2.5])
    fine, curve = smooth(t, 1 + t - t**3, 1 - 3 * t**2)
    assert np.allclose(curve, 1 + fine - fine**3, rtol=0, atol=1e-13)
    fine, slope = smooth(t, 1 + t - t**3, 1 - 3 * t**2, slope=True)
    assert np.allclose(slope, 1 - 3 * fine**2, rtol=0, atol=1e-13)


def test_the_curve_of_a_falling_cloud_follows_the_closed_form() -> None:
    """sigma0 sqrt(1 + (w t)^2) between 14 samples of it, to 2e-4 of the width."""
    kept = cut(invented_run.track(), slice(4, None))
    t, curve = smooth(kept.time, kept["width"][:, 1], kept["expansion_rate"][:, 1])
    exact, _ = invented_run.gaussian((20.0, 120.0, 120.0), t - invented_run.HOLD)
    assert np.max(np.abs(curve / exact[:, 1] - 1)) < 2e-4


def test_a_jump_and_a_kick_do_not_bend_the_curve() -> None:
    # a cloud at rest whose velocity jumps at 1 s: recorded twice, then recorded only after the jump
    _, twice = smooth(np.array([0.0, 1, 1, 2]), np.array([0.0, 0, 0, 1]), np.array([0.0, 0, 1, 1]))
    t, once = smooth(np.array([0.0, 1, 2]), np.array([0.0, 0, 1]), np.array([0.0, 1, 1]))
    assert twice.min() == 0.0 and twice.max() == 1.0
    assert np.all(once[t <= 1] == 0.0)


def test_curves_that_cannot_be_told_apart_share_a_label() -> None:
    t = np.linspace(1, 2, 5)
    assert alike(np.stack([t, 2 * t, 2.0001 * t], axis=1)) == [(0,), (1, 2)]
    assert alike(np.stack([t, 2 * t, 2.1 * t], axis=1)) == [(0,), (1,), (2,)]
    assert alike(np.stack([t, np.full(5, np.nan), t], axis=1)) == [(0, 2)]
    assert alike(np.array([[1e-9, -3e-9, 1.0]]), nothing=1e-3) == [(0, 1), (2,)]


def test_labels_keep_their_distance() -> None:
    moved = apart(np.array([0.5, 0.52, 0.99, 0.0]), 0.1, high=0.96)
    assert np.all(np.diff(np.sort(moved)) >= 0.1 - 1e-12)
    assert list(np.argsort(moved)) == [3, 0, 1, 2] and moved.max() <= 0.96 and moved[3] == 0.0


# --- sizes and path -------------------------------------------------------------------------------------------------


def test_the_lines_are_the_widths_in_micrometres_against_milliseconds() -> None:
    kept = invented_run.track()
    ax = Figure().subplots()
    draw_widths(ax, kept)
    solid = [line for line in ax.lines if line.get_linestyle() == "-"]
    marked = [line for line in ax.lines if line.get_marker() not in (None, "None", "")]
    dashed = [line for line in ax.lines if line.get_linestyle() == "--"]
    assert [line.get_label() for line in solid] == ["x", "y, z"]
    assert {line.get_marker() for line in marked} == {LOOKS["x"].marker, LOOKS["y"].marker}
    w = 2 * math.pi * 120.0
    sigma = math.sqrt(constants.hbar / (2 * invented_run.MASS * w) * (1 + (w * 0.02) ** 2))  # the free Gaussian
    assert (solid[1].get_xdata()[-1], solid[1].get_ydata()[-1]) == pytest.approx((22.0, sigma * 1e6), rel=1e-9)
    assert dashed[1].get_ydata()[-1] == pytest.approx(1.02 * sigma * 1e6, rel=1e-9)  # the invented law: 2 % wide
    assert ax.get_ylim()[0] == 0.0


def test_the_flight_figure_names_what_it_shows() -> None:
    kept = invented_run.track()
    seen = words(flight_figure(invented_run.summary(kept), kept))
    assert "Invented: an ideal gas let go" in seen
    assert {"full calculation", "scaling law", "hold", "nudge", "release: flight starts"} <= set(seen)
    assert {"half-width (µm)", "rate (mm/s)", "centre (µm)", "time since the start of the sequence (ms)"} <= set(seen)
    assert seen.count("law +2 %") == 4
    # sqrt(hbar/2mw) sqrt(1 + (wt)^2) for 20 and 120 Hz after 20 ms; 4 mm/s for 20 ms; g t^2/2
    assert {"x  4.612 µm", "y, z  10.52 µm", "x  80.00 µm", "y  0 µm", "z  −1961 µm"} <= set(seen)


def test_a_title_is_shown_as_it_was_written() -> None:
    kept = invented_run.track()
    written = dataclasses.replace(invented_run.summary(kept), title="costs $5 or $6_a " + "and so on " * 20)
    figure = flight_figure(written, kept)
    (seen,) = [one for one in words(figure) if one.startswith("costs")]
    assert not [one for one in figure.texts if one.get_text() == seen and one.get_parse_math()]  # no formula in it
    assert seen.startswith("costs $5 or $6_a and so on") and seen.endswith(" ...") and len(seen) <= 68


@pytest.mark.slow
def test_no_figure_shows_a_power_of_ten() -> None:
    kept = invented_run.track()
    tiny = Track(kept.time * 1e-4, kept.stage, {k: dataclasses.replace(s, values=s.values * 1e-6)
                                               for k, s in kept.series.items()})  # fmt: skip
    summary = invented_run.summary(kept)
    columns = invented_run.columns(kept)
    dim = {v: dataclasses.replace(c, values=c.values * np.float32(1e-6)) for v, c in columns.items()}
    drawn = [flight_figure(summary, tiny), columns_figure(summary, columns), strip_figure(summary, columns)]
    for figure in [flight_figure(summary, kept), *drawn, columns_figure(summary, dim)]:
        seen = words(figure)
        assert len(seen) > 20 and not [one for one in seen if re.search(r"\de[-+\u2212\d]|10\^|\\times", one)]
        assert not [t for ax in figure.axes for t in (ax.xaxis.get_offset_text(), ax.yaxis.get_offset_text())
                    if t.get_text()]  # fmt: skip


def test_a_centre_that_rests_is_drawn_as_rest() -> None:
    kept = invented_run.track(kick=(1e-9, 0, 0), gravity=1e-9)
    ax = Figure().subplots()
    draw_centre(ax, kept)
    assert [one.get_text() for one in ax.texts] == ["x, y, z  0 µm"]
    assert ax.get_ylim()[1] - ax.get_ylim()[0] >= 0.2


def test_a_direction_that_is_uniform_is_left_out() -> None:
    kept = invented_run.track()
    series = dict(kept.series)
    for name in ("width", "expansion_rate"):
        series[name] = dataclasses.replace(series[name], values=series[name].values * [1, 1, 0])
    ax = Figure().subplots()
    draw_widths(ax, dataclasses.replace(kept, series=series))
    assert [one.get_text() for one in ax.texts if "µm" in one.get_text()] == ["x  4.612 µm", "y  10.52 µm"]


def test_without_law_no_dashed_line_is_explained() -> None:
    kept = invented_run.track()
    bare = dataclasses.replace(kept, series={n: s for n, s in kept.series.items() if not n.startswith("law")})
    seen = words(flight_figure(invented_run.summary(kept), bare))
    assert not [one for one in seen if "law" in one]


def test_a_busy_sequence_keeps_its_names_apart() -> None:
    kept = invented_run.track()
    end = invented_run.summary(kept).end
    many = [StageEnd(f"pulse_{n}", "pulse", 0.1 * n, 0.05, end) for n in range(12)]
    stages = (*many, StageEnd("release", "release", 2.0, 20.0, end))
    figure = flight_figure(dataclasses.replace(invented_run.summary(kept), stages=stages), kept)
    FigureCanvasAgg(figure).draw()
    names = [one for one in figure.axes[0].texts if "pulse" in one.get_text() or "release" in one.get_text()]
    assert "release: flight starts" in [one.get_text() for one in names] and len(names) >= 3
    boxes = [one.get_window_extent() for one in names]
    assert not [1 for i, a in enumerate(boxes) for b in boxes[:i] if a.overlaps(b)]


# --- column densities -----------------------------------------------------------------------------------------------


def axes_seen_along(figure: Figure, view: str) -> tuple[object, AxesImage]:
    right, up = {"x": "yz", "y": "xz", "z": "xy"}[view]
    for ax in figure.axes:
        if ax.get_xlabel().startswith(right) and ax.get_ylabel().startswith(up) and ax.images:
            return ax, ax.images[0]
    raise AssertionError(f"no picture seen along {view}")


@pytest.mark.parametrize("view", ["x", "y", "z"])
def test_a_column_stands_where_the_cloud_is_and_shows_atoms_per_square_micrometre(view: str) -> None:
    kept = invented_run.track()
    figure = columns_figure(invented_run.summary(kept), invented_run.columns(kept))
    ax, image = axes_seen_along(figure, view)
    left, right, bottom, top = image.get_extent()
    where = {"x": 80.0, "y": 0.0, "z": -0.5 * constants.g * 0.02**2 * 1e6}  # kicked by 4 mm/s; free fall
    first, second = {"x": "yz", "y": "xz", "z": "xy"}[view]
    assert (0.5 * (left + right), 0.5 * (bottom + top)) == pytest.approx((where[first], where[second]), abs=1e-6)
    assert ax.get_xlim()[0] < where[first] < ax.get_xlim()[1] and ax.get_ylim()[0] < where[second] < ax.get_ylim()[1]
    # the integral of what is drawn is the number of atoms
    data = np.asarray(image.get_array(), dtype=float)
    pixel = (right - left) / data.shape[1] * (top - bottom) / data.shape[0]
    assert data.sum() * pixel == pytest.approx(1e5, rel=1e-5)
    assert image.norm.vmin == 0.0 and image.norm.vmax == pytest.approx(data.max())


def test_rows_run_upwards_and_columns_to_the_right() -> None:
    """Seen along y: a dense pixel at large x and small z, a thin one at small x and large z."""
    values = np.zeros((1, 8, 8), dtype=np.float32)
    values[0, 1, 6], values[0, 6, 1] = 1e12, 1e11
    line = np.arange(8)[None, :] * 1e-6
    series = ColumnSeries("y", np.zeros(1), line, line, values)
    figure = columns_figure(invented_run.summary(None), {"y": series})
    ax, _ = axes_seen_along(figure, "y")
    canvas = FigureCanvasAgg(figure)
    canvas.draw()
    shot = np.asarray(canvas.buffer_rgba())[..., :3].astype(int)
    (left, right), (bottom, top) = ax.get_xlim(), ax.get_ylim()
    box = ax.get_window_extent()

    def colour(x: float, z: float) -> int:
        column = int(box.x0 + box.width * (x - left) / (right - left))
        return shot[shot.shape[0] - int(box.y0 + box.height * (z - bottom) / (top - bottom)), column].sum()

    assert colour(6, 1) < 150 < 600 < colour(1, 6) < colour(6, 6) == 3 * 255


@pytest.mark.parametrize(
    ("wide", "tall", "times"), [(60, 3, 20), (3, 60, 20), (9, 3, 1), (5, 1.0, 5), (60, 0.05, 1000)]
)
def test_a_long_cloud_is_enlarged_across_and_says_so(wide: float, tall: float, times: int) -> None:
    line = np.linspace(-6, 6, 129)
    bell = np.exp(-(line**2) / 2)
    image = (bell[:, None] * bell[None, :])[None].astype(np.float32) * 1e12
    series = ColumnSeries("y", np.zeros(1), line[None] * tall * 1e-6, line[None] * wide * 1e-6, image)
    window = window_of(series, [0])[0]
    assert window.enlarged == times and (times == 1 or window.up_is_short == (tall < wide))
    assert max(window.half_right, window.half_up) / min(window.half_right, window.half_up) == pytest.approx(times)
    # all that is brighter than 1 % of the peak is inside: 3.03 sigma of a Gaussian
    assert window.half_right > 3.03 * wide and window.half_up > 3.03 * tall
    seen = words(columns_figure(invented_run.summary(None), {"y": series}))
    said = f"seen along y; {'z' if tall < wide else 'x'} drawn {times} times larger" if times > 1 else "seen along y"
    assert said in seen


def test_scale_bars_have_the_length_they_say() -> None:
    kept = invented_run.track()
    ax, _ = axes_seen_along(columns_figure(invented_run.summary(kept), invented_run.columns(kept)), "y")
    (bar,) = ax.lines
    (label,) = [one.get_text() for one in ax.texts]
    length = bar.get_xdata()[1] - bar.get_xdata()[0]
    assert label == f"{length:g} µm" and length in (1, 2, 5, 10, 20, 50)
    assert 0.1 < length / (ax.get_xlim()[1] - ax.get_xlim()[0]) < 0.5


def test_the_side_profile_stands_over_its_picture() -> None:
    kept = invented_run.track()
    figure = columns_figure(invented_run.summary(kept), invented_run.columns(kept))
    ax, _ = axes_seen_along(figure, "y")
    box = ax.get_position()
    above = [one for one in figure.axes if one.get_title(loc="left") == "seen along y"][0]
    assert above.get_position().x0 == pytest.approx(box.x0) and above.get_position().x1 == pytest.approx(box.x1)
    assert above.get_xlim() == pytest.approx(ax.get_xlim())
    # the peak of the profile of a Gaussian: N/(sqrt(2 pi) sigma)
    sigma = kept["width"][-1, 0] * 1e6
    peak = max(path.vertices[:, 1].max() for path in above.collections[0].get_paths())
    assert peak == pytest.approx(1e5 / (math.sqrt(2 * math.pi) * sigma), rel=2e-3)


def test_the_strip_shows_the_pictures_nearest_to_the_times_asked_for() -> None:
    kept = invented_run.track()
    columns = invented_run.columns(kept, pictures=18)
    figure = strip_figure(invented_run.summary(kept), columns, times=[0.0, 0.012, 0.022])
    titles = [ax.get_title() for ax in figure.axes if ax.get_title()]
    times = [float(one.removesuffix(" ms")) for one in titles]
    near = [1e3 * min(kept.time, key=lambda one: abs(one - wanted)) for wanted in (0.0, 0.012, 0.022)]
    assert times == pytest.approx(near, rel=1e-3)
    assert len(figure.axes) == 9
    # one scale in each row
    spans = {round(ax.get_xlim()[1] - ax.get_xlim()[0], 6) for ax in figure.axes[:3]}
    assert len(spans) == 1


def test_an_empty_picture_is_drawn_white() -> None:
    line = np.arange(8)[None, :] * 1e-6
    series = ColumnSeries("x", np.zeros(1), line, line, np.zeros((1, 8, 8), dtype=np.float32))
    figure = columns_figure(invented_run.summary(None), {"x": series})
    ax, image = axes_seen_along(figure, "x")
    assert image.norm.vmax == 1.0 and ax.get_xlim()[0] < 0 and ax.get_xlim()[1] > 7


# --- the look -------------------------------------------------------------------------------------------------------


def lightness(colour: object) -> float:
    """CIE L* of an sRGB colour, D65 (CIE 1976 and IEC 61966-2-1)."""
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in to_rgb(colour)]
    y = float(np.dot([0.2126, 0.7152, 0.0722], linear))
    return 116 * y ** (1 / 3) - 16 if y > (6 / 29) ** 3 else y * (29 / 3) ** 3


def test_the_density_scale_darkens_steadily_from_white() -> None:
    scale = [lightness(DENSITY(s)) for s in np.linspace(0, 1, 64)]
    assert scale[0] == pytest.approx(100, abs=0.1) and scale[-1] < 10
    assert np.all(np.diff(scale) < -0.5)


def test_the_directions_differ_in_mark_and_colour_for_every_eye() -> None:
    """Distances in CIE L*a*b* as normal, red-blind and green-blind eyes see it (Vienot, Brettel & Mollon 1999)."""
    to_lms = np.array([[17.8824, 43.5161, 4.11935], [3.45565, 27.1554, 3.86714], [0.0299566, 0.184309, 1.46709]])
    red_blind = np.array([[0, 2.02344, -2.52581], [0, 1, 0], [0, 0, 1]])
    green_blind = np.array([[1, 0, 0], [0.494207, 0, 1.24827], [0, 0, 1]])
    to_xyz = np.array([[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]])

    def lab(linear: np.ndarray) -> np.ndarray:
        x, y, z = np.cbrt(to_xyz @ np.clip(linear, 1e-4, 1) / (to_xyz @ np.ones(3)))
        return np.array([116 * y - 16, 500 * (x - y), 200 * (y - z)])

    for blind in (np.eye(3), red_blind, green_blind):
        see = np.linalg.inv(to_lms) @ blind @ to_lms
        seen = [lab(see @ (np.array(to_rgb(one.colour)) ** 2.2)) for one in LOOKS.values()]
        apart_by = [np.linalg.norm(seen[i] - seen[j]) for i in range(3) for j in range(i)]
        assert min(apart_by) > 20
    assert len({one.marker for one in LOOKS.values()}) == 3


def test_a_figure_is_at_least_900_pixels_wide_and_always_the_same() -> None:
    kept = invented_run.track()
    first, second = (png(flight_figure(invented_run.summary(kept), kept)) for _ in range(2))
    assert first == second and first[:8] == b"\x89PNG\r\n\x1a\n"
    assert int.from_bytes(first[16:20], "big") >= 900  # the width field of the PNG header (ISO/IEC 15948)


@pytest.mark.slow
def test_a_run_gets_the_figures_it_has_data_for(tmp_path: Path) -> None:
    whole = invented_run.contents()
    names = ["flight", "pictures_side", "momentum", "orders", "columns", "strip", "energies", "flow"]
    assert list(figures_of(whole)) == names
    kept = whole.track
    rest = invented_run.summary(None)
    one = cut(kept, slice(0, 1))
    columns = invented_run.columns(one, pictures=1)
    assert list(figures_of(Contents("", {}, rest, one, columns))) == ["columns"]
    assert list(figures_of(Contents("", {}, rest))) == []
    assert "of the cloud at rest" in "".join(words(figures_of(Contents("", {}, rest, columns=columns))["columns"]))
    assert {"x  1.705 µm"} <= set(words(flight_figure(rest, one)))  # sqrt(hbar/2mw) for 20 Hz
    paths = write_figures(tmp_path, {"flight": png(flight_figure(rest, one))})
    assert [str(path.relative_to(tmp_path)) for path in paths] == ["figures/flight.png"]
    assert paths[0].read_bytes()[:8] == b"\x89PNG\r\n\x1a\n"
    (tmp_path / "taken").write_text("")
    with pytest.raises(FileTrouble):
        write_figures(tmp_path / "taken", {"flight": b""})


def test_the_strip_shows_the_times_that_were_asked_for() -> None:
    """The plan asks for pictures 5 and 20 ms after the release at 2 ms: 7 and 22 ms after the start."""
    whole = invented_run.contents()
    assert times_asked_for(whole.plan, whole.summary) == pytest.approx([7e-3, 22e-3], rel=1e-12)
    every = dataclasses.replace(whole, columns=invented_run.columns(whole.track, pictures=18))
    titles = [ax.get_title() for ax in figures_of(every)["strip"].axes if ax.get_title()]
    times = [float(one.removesuffix(" ms")) for one in titles]
    near = [1e3 * min(whole.track.time, key=lambda one: abs(one - wanted)) for wanted in (0.0, 7e-3, 22e-3)]
    assert times == pytest.approx(near, rel=1e-3)
    # a run that stopped after the hold was asked for nothing yet
    stopped = dataclasses.replace(whole.summary, end=whole.summary.stages[0].end)
    assert times_asked_for(whole.plan, stopped) == []


def test_there_is_no_wide_gap_below_the_title() -> None:
    kept = invented_run.track()
    figure = flight_figure(invented_run.summary(kept), kept)
    FigureCanvasAgg(figure).draw()
    subtitle = next(one for one in figure.texts if "followed until" in one.get_text()).get_window_extent()
    title = next(t for t in figure.axes[0].findobj(Text) if t.get_text().startswith("How large")).get_window_extent()
    assert 0 < (subtitle.y0 - title.y1) / figure.dpi < 0.35  # inches


@pytest.mark.slow
def test_no_figure_loads_pyplot() -> None:
    script = "import sys, trapsim.show.figures; print('matplotlib.pyplot' in sys.modules, 'matplotlib' in sys.modules)"
    done = subprocess.run(
        [sys.executable, "-c", script], capture_output=True, text=True,
        env={**os.environ, "PYTHONPATH": str(Path(__file__).parents[1])},
    )  # fmt: skip
    assert done.stdout.split() == ["False", "True"], done.stderr
