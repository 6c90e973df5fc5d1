"""Momenta stand at their photon recoils, and bars at their populations."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from matplotlib.text import Text

import invented_run
from trapsim.show.orders import by_lattice, draw_momentum, draw_orders, momentum_figure, orders_figure, sets_of


@pytest.fixture(scope="module")
def momenta() -> tuple:
    return invented_run.momenta()


def words(figure: Figure) -> list[str]:
    FigureCanvasAgg(figure).draw()
    return [one.get_text() for one in figure.findobj(Text) if one.get_text() and one.get_visible()]


@pytest.mark.parametrize("decades", [False, True])
def test_each_order_stands_at_an_even_recoil_without_what_gravity_gave(momenta: tuple, decades: bool) -> None:
    ax = Figure().subplots()
    draw_momentum(ax, momenta, mass=invented_run.MASS, decades=decades)
    line = next(one for one in ax.lines if one.get_linestyle() == "-")
    k, share = line.get_xdata(), line.get_ydata()
    # three Gaussians of 0.05 recoils: the share within one recoil of 2n, and where its mean is
    for n, population in zip((-1, 0, 1), invented_run.SHARES, strict=True):
        inside = np.abs(k - 2 * n) < 1
        assert np.trapezoid(share[inside], k[inside]) == pytest.approx(population, rel=1e-6)
        assert np.average(k[inside], weights=share[inside]) == pytest.approx(2 * n, abs=1e-6)
        assert share[inside].max() == pytest.approx(population / (np.sqrt(2 * np.pi) * 0.05), rel=2e-3)
    assert ax.get_xlim()[0] <= -3 and ax.get_xlim()[1] >= 3
    assert ax.get_yscale() == ("log" if decades else "linear")


def test_the_first_look_is_dashed_beside_the_last(momenta: tuple) -> None:
    ax = Figure().subplots()
    draw_momentum(ax, momenta, mass=invented_run.MASS)
    (dashed,) = [one for one in ax.lines if one.get_linestyle() == "--"]
    k, share = dashed.get_data()
    assert np.trapezoid(share[np.abs(k) < 1], k[np.abs(k) < 1]) == pytest.approx(invented_run.FIRST[1], rel=1e-6)
    draw_momentum(alone := Figure().subplots(), momenta[:1], mass=invented_run.MASS)
    assert not [one for one in alone.lines if one.get_linestyle() == "--"]


def test_the_figure_names_orders_lattices_and_what_was_taken_off(momenta: tuple) -> None:
    summary = invented_run.contents().summary
    second = tuple(dataclasses.replace(one, part="green") for one in momenta)
    seen = words(momentum_figure(summary, (*momenta, *second), mass=invented_run.MASS))
    assert {"light, along z: at the end of release", "green, along z: at the end of release"} <= set(seen)
    assert {"−1: 20.0 %", "0: 70.0 %", "+1: 10.0 %", "dashed: at the end of nudge"} <= set(seen)
    assert "momentum along z (photon recoils); −50 mm/s from forces and kicks taken off" in seen
    assert not [one for one in seen if "e-" in one or "10^" in one or "\\times" in one]


def test_many_orders_keep_their_numbers_apart() -> None:
    seen = invented_run.momenta()[1]
    many = dataclasses.replace(seen, orders={str(n): 1 / 21 for n in range(-10, 11)})
    figure = momentum_figure(invented_run.contents().summary, (many,), mass=invented_run.MASS)
    FigureCanvasAgg(figure).draw()
    boxes = [one.get_window_extent() for one in figure.axes[0].texts]
    assert len(boxes) == 21 and not [1 for i, a in enumerate(boxes) for b in boxes[:i] if a.overlaps(b)]


def test_bars_are_as_tall_as_their_populations(momenta: tuple) -> None:
    ax = Figure().subplots()
    draw_orders(ax, sets_of(invented_run.contents().summary, momenta))
    heights = [[bar.get_height() for bar in group] for group in ax.containers]
    assert heights[0] == pytest.approx([15.0, 75.0, 10.0]) and heights[1] == pytest.approx([20.0, 70.0, 10.0])
    middles = [np.mean([group[i].get_x() + group[i].get_width() / 2 for group in ax.containers]) for i in range(3)]
    assert middles == pytest.approx([-1, 0, 1], abs=1e-9)
    assert [one.get_text() for one in ax.texts] == ["20.0 %", "70.0 %", "10.0 %"]
    assert [one.get_text() for one in ax.get_legend().get_texts()] == ["end of nudge", "end of release"]


def test_stages_that_change_nothing_are_one_bar(momenta: tuple) -> None:
    summary = invented_run.contents().summary
    nearly = dataclasses.replace(momenta[1], stage=2, orders={"-1": 0.2005, "0": 0.6995, "1": 0.1})
    first = dataclasses.replace(momenta[1], stage=1)
    assert [name for name, _ in sets_of(summary, (first, nearly))] == ["nudge to release"]
    other = dataclasses.replace(nearly, orders={"-1": 0.3, "0": 0.6, "1": 0.1})
    assert [name for name, _ in sets_of(summary, (first, other))] == ["nudge", "release"]


def test_every_lattice_has_a_panel(momenta: tuple) -> None:
    second = tuple(dataclasses.replace(one, part="green") for one in momenta)
    assert {name: len(seen) for name, seen in by_lattice((*momenta, *second)).items()} == {"light": 2, "green": 2}
    figure = orders_figure(invented_run.contents().summary, (*momenta, *second))
    titles = [ax.get_title(loc="left") for ax in figure.axes]
    assert titles == [f"{name}: orders in pairs of photon recoils along z" for name in ("light", "green")]
    lone = dataclasses.replace(momenta[1], orders={})
    assert len(orders_figure(invented_run.contents().summary, (lone,)).axes) == 1
