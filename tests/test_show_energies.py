"""Energies, shapes and the flow are drawn as they are."""

from __future__ import annotations

import dataclasses
import math

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.quiver import Quiver
from matplotlib.text import Text
from scipy import constants

import invented_run
from trapsim.measure.flow import FlowPlane
from trapsim.record.series import Track
from trapsim.show.currents import draw_flow, flow_figure
from trapsim.show.energies import draw_energies, draw_ratios, energies_figure, sudden_stages

FREQUENCIES = np.array([20.0, 120.0, 120.0])
#: The ground state of an oscillator holds h f/4 of kinetic and of potential energy per direction (virial theorem), nK.
QUARTERS = constants.h * FREQUENCIES / 4 / constants.k * 1e9


def words(figure: Figure) -> list[str]:
    FigureCanvasAgg(figure).draw()
    return [one.get_text() for one in figure.findobj(Text) if one.get_text() and one.get_visible()]


def lines(ax) -> dict[str, tuple[np.ndarray, np.ndarray]]:
    return {one.get_label(): one.get_data() for one in ax.lines if not one.get_label().startswith("_")}


# --- energies -------------------------------------------------------------------------------------------------------


def test_the_energies_of_an_ideal_gas_are_those_of_its_oscillator() -> None:
    kept = invented_run.track()
    draw_energies(ax := Figure().subplots(), kept, sudden=sudden_stages(invented_run.summary(kept)))
    seen = lines(ax)
    assert set(seen) == {"kinetic x", "kinetic y, z", "trap", "total"}  # nothing interacts
    assert seen["kinetic x"][1] == pytest.approx(QUARTERS[0], rel=1e-9)
    assert seen["kinetic y, z"][1] == pytest.approx(QUARTERS[1], rel=1e-9)
    time, trap = seen["trap"]
    assert trap[time < 2] == pytest.approx(QUARTERS.sum(), rel=1e-9) and trap[time > 2] == pytest.approx(0.0)
    assert seen["total"][1][0] == pytest.approx(2 * QUARTERS.sum(), rel=1e-9)
    assert ax.get_ylim()[0] == 0.0


def test_a_potential_that_is_switched_falls_at_once() -> None:
    """A release after a hold without a second sample at its start: the trap's line falls at 2 ms, not slowly until 7 ms."""
    kept = invented_run.track()
    wanted = [0, 2, len(kept) - 5, len(kept) - 1]
    sparse = Track(kept.time[wanted], kept.stage[wanted], {
        name: dataclasses.replace(one, values=one.values[wanted]) for name, one in kept.series.items()
    })  # fmt: skip
    assert sparse.time[2] > 5e-3
    draw_energies(ax := Figure().subplots(), sparse, sudden=sudden_stages(invented_run.summary(kept)))
    for name, share in (("trap", 1), ("total", 2)):
        time, values = lines(ax)[name]
        at_release = values[time == 2.0]
        assert at_release[0] == pytest.approx(share * QUARTERS.sum()) and at_release[-1] == pytest.approx(
            (share - 1) * QUARTERS.sum(), abs=1e-12
        )
    draw_energies(bare := Figure().subplots(), sparse)
    assert np.sum(lines(bare)["trap"][0] == 2.0) == 1


def test_only_pulses_and_releases_switch_at_once() -> None:
    summary = invented_run.summary(invented_run.track())
    kinds = ("hold", "pulse", "hold", "ramp", "release", "hold")
    stages = tuple(dataclasses.replace(summary.stages[0], kind=kind) for kind in kinds)
    assert sudden_stages(dataclasses.replace(summary, stages=stages)) == {1, 2, 4}


def test_the_aspect_ratio_is_width_over_width() -> None:
    """sigma0 sqrt(1 + (w t)^2), sigma0^2 = hbar/(2 m w) for 20 and 120 Hz: sqrt(6) at rest, 0.43842 after 20 ms."""
    draw_ratios(ax := Figure().subplots(), invented_run.track())
    time, ratio = lines(ax)["x:y, x:z"]
    flight = 2 * math.pi * np.maximum(time - 2.0, 0.0) * 1e-3
    between = np.sqrt(6 * (1 + (20 * flight) ** 2) / (1 + (120 * flight) ** 2))
    assert ratio == pytest.approx(between, rel=2e-3)  # between the samples as well
    assert set(lines(ax)) == {"x:y, x:z"}  # y:z is always one
    slow, fast = (1 + (2 * math.pi * f * 0.02) ** 2 for f in (20.0, 120.0))
    assert (ratio[0], ratio[-1]) == pytest.approx((math.sqrt(6.0), math.sqrt(6.0 * slow / fast)), rel=1e-9)
    assert "law 0 %" in [one.get_text() for one in ax.texts]  # the invented law is as much too wide along x as along y


def test_the_figure_leaves_out_what_a_round_or_uniform_cloud_lacks() -> None:
    kept = invented_run.track()
    assert len(energies_figure(invented_run.summary(kept), kept).axes) == 2
    round_one = invented_run.track((50.0, 50.0, 50.0))
    figure = energies_figure(invented_run.summary(round_one), round_one)
    assert len(figure.axes) == 1 and "kinetic x, y, z" in lines(figure.axes[0])
    series = dict(kept.series)
    for name in ("width", "expansion_rate", "kinetic"):
        series[name] = dataclasses.replace(series[name], values=series[name].values * [1, 1, 0])
    draw_energies(ax := Figure().subplots(), dataclasses.replace(kept, series=series))
    assert {"kinetic x", "kinetic y"} <= set(lines(ax)) and not [one for one in lines(ax) if "z" in one]
    draw_ratios(ax := Figure().subplots(), dataclasses.replace(kept, series=series))
    assert set(lines(ax)) == {"x:y"}


# --- the flow -------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("view", ["x", "y", "z"])
def test_arrows_reach_as_far_as_the_atoms_go(view: str) -> None:
    """The free Gaussian flows with v = x w^2 t/(1 + (w t)^2); places count from where the cloud rested."""
    kept = invented_run.contents()
    figure = flow_figure(kept.summary, kept.flow, kept.columns)
    right, up = ("xyz".index(d) for d in {"x": "yz", "y": "xz", "z": "xy"}[view])
    ax = figure.axes["xyz".index(view)]
    (arrows,) = [one for one in ax.get_children() if isinstance(one, Quiver)]
    said = next(one.get_text() for one in ax.texts if one.get_text().startswith("next"))
    time = float(said.split()[1]) * 1e-3
    assert said.split()[2] == "ms;"
    w = 2 * np.pi * FREQUENCIES
    pace = w**2 * 0.02 / (1 + (w * 0.02) ** 2)
    middle = np.array([80.0, 0.0, -0.5 * constants.g * 0.02**2 * 1e6])  # kicked by 4 mm/s and fallen
    assert len(arrows.XY) > 20
    assert pytest.approx((arrows.XY[:, 0] - middle[right]) * pace[right] * time, rel=1e-6, abs=1e-7) == arrows.U
    assert pytest.approx((arrows.XY[:, 1] - middle[up]) * pace[up] * time, rel=1e-6, abs=1e-7) == arrows.V
    assert arrows.scale == 1.0 and arrows.angles == "xy"
    assert ax.get_xlim()[0] < middle[right] < ax.get_xlim()[1] and ax.get_ylim()[0] < middle[up] < ax.get_ylim()[1]


def test_arrows_are_not_crowded_and_stay_where_atoms_are() -> None:
    kept = invented_run.contents()
    (plane,) = [p for v, p in kept.flow.items() if v == "y"]
    draw_flow(ax := Figure(figsize=(3, 3)).subplots(), plane, None, origin=kept.summary.ground.origin_um)
    (arrows,) = [one for one in ax.get_children() if isinstance(one, Quiver)]
    x = np.unique(arrows.XY[:, 0].round(6))
    assert np.diff(x).min() >= 0.038 * np.ptp(ax.get_xlim())
    # the Gaussian is above 3e-3 of its peak within sqrt(2 ln(1/3e-3)) = 3.41 sigma
    sigma, middle = kept.track["width"][-1, 0] * 1e6, 80.0
    assert np.abs(x - middle).max() < 3.41 * sigma
    assert len(ax.images) == 1  # the density in the plane, as there is no column


def test_a_cloud_at_rest_has_no_arrows() -> None:
    line = np.linspace(-1e-5, 1e-5, 9)
    bell = np.exp(-(line[:, None] ** 2 + line[None, :] ** 2) / (2 * 3e-6**2))
    plane = FlowPlane("z", line, line, bell, 0 * bell, np.full((9, 9), np.nan))
    for one in (plane, dataclasses.replace(plane, up=0 * bell)):
        draw_flow(ax := Figure().subplots(), one, None, origin=(0.0, 0.0, 0.0))
        assert "nothing flows" in [text.get_text() for text in ax.texts]
        assert not [child for child in ax.get_children() if isinstance(child, Quiver)]


def test_no_figure_shows_a_power_of_ten() -> None:
    kept = invented_run.contents()
    for figure in (energies_figure(kept.summary, kept.track), flow_figure(kept.summary, kept.flow, kept.columns)):
        seen = words(figure)
        assert len(seen) > 15 and not [one for one in seen if "e-" in one or "10^" in one]
        assert not [t for ax in figure.axes for t in (ax.xaxis.get_offset_text(), ax.yaxis.get_offset_text())
                    if t.get_text()]  # fmt: skip


@pytest.mark.parametrize("lit", [True, False])
def test_the_flow_says_that_it_does_not_follow_fringes_where_there_was_a_lattice(lit: bool) -> None:
    kept = invented_run.contents()
    end = dataclasses.replace(kept.summary.end, orders={"light": {"0": 1.0}} if lit else None)
    figure = flow_figure(dataclasses.replace(kept.summary, end=end), kept.flow, kept.columns)
    said = " ".join(text.get_text() for text in figure.texts)
    assert ("fringes" in said) is lit
    assert "where the atoms go next" in said
