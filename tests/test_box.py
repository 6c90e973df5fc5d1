"""A cloud in a soft box: at rest, held, shaken, under gravity and let go, beside a plain run on a fixed grid in the lab.

The plain run (reference/bruteforce.py) shares nothing with the program: its own grid, its own walls, its own relaxation.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import cache
from math import pi

import numpy as np
import pytest
from scipy import optimize
from scipy.constants import Boltzmann, hbar

import light
import motion
import trapsim
from reference import bruteforce, units
from trapsim.prepare.setup import prepare
from trapsim.record.series import Track

Solved = Callable[[trapsim.Plan], trapsim.Run]
Array = np.ndarray

NUMBER, A = 3000.0, 100.4 * units.A0
SIZE, HEIGHT, EDGE = (14e-6, 10e-6, 10e-6), 25e-9 * Boltzmann, 2e-6
FLIGHT = 4e-3
#: m/s^2; some of the chemical potential across the box
WEIGHT = 0.05


def box(shape: str) -> str:
    return (
        f'[trap.walls]\nkind = "box"\nshape = "{shape}"\nsize = ["14 um", "10 um", "10 um"]\n'
        'height = "25 nK"\nedge = "2 um"\n'
    )


def plan(shape: str, *stages: str, gravity: bool = False, **more: object) -> trapsim.Plan:
    weight = f'[gravity]\ndirection = "-z"\nvalue = "{WEIGHT} m/s^2"\n' if gravity else ""
    return light.plain(*stages, parts=box(shape), rest=weight, number=NUMBER, **more)


@dataclass(frozen=True)
class Plain:
    """A plain run: at rest, and after a flight."""

    rest: bruteforce.Seen
    flown: bruteforce.Seen


#: with a quarter fewer points its energies are off by 1e-4
GRID = bruteforce.Grid((56, 48, 48), (30e-6, 26e-6, 26e-6), motion.RB)


@cache
def plain(shape: str, gravity: bool = False) -> Plain:
    x = GRID.places()
    if shape == "cuboid":
        walls = bruteforce.cuboid(x, size=SIZE, height=HEIGHT, edge=EDGE)
    else:
        walls = bruteforce.cylinder(x, length=SIZE[0], diameter=SIZE[1], height=HEIGHT, edge=EDGE)
    weight = motion.RB * WEIGHT * gravity * x[2]
    g = GRID.coupling(NUMBER, A)
    # far out in the walls the weight would win; there the cloud is not
    u = bruteforce.ground(GRID, walls + weight - weight.min(), g, np.exp(-3 * walls / HEIGHT))
    # a free fall is taken off: the flight is that of a weightless cloud, which falls with it
    flown = bruteforce.play(GRID, u, lambda t: 0 * walls, g, duration=FLIGHT, steps=160)
    return Plain(bruteforce.look(GRID, u, g), bruteforce.look(GRID, flown, g))


@pytest.mark.slow
def test_the_plain_run_keeps_its_energy() -> None:
    seen = plain("cuboid")
    before, after = (s.kinetic.sum() + s.interaction for s in (seen.rest, seen.flown))
    assert after == pytest.approx(before, rel=1e-5, abs=0)


@pytest.mark.slow
@pytest.mark.parametrize("accuracy", ["draft", "normal", "fine"])
@pytest.mark.parametrize("shape", ["cuboid", "cylinder"])
def test_a_cloud_in_a_soft_box_and_after_it_is_let_go(solved: Solved, shape: str, accuracy: str) -> None:
    tolerance = {"draft": 2e-3, "normal": 2e-4, "fine": 2e-5}[accuracy]
    # an energy of its own is less exact than what they are together, which flies away
    each = {"draft": 2e-3, "normal": 1e-3, "fine": 2e-5}[accuracy]
    run = solved(plan(shape, motion.stage("release", FLIGHT), accuracy=accuracy))
    exact, track = plain(shape), run.track
    # a plain run on a fixed grid
    assert track["width"][0] == pytest.approx(exact.rest.width, rel=tolerance, abs=0)
    assert track["width"][-1] == pytest.approx(exact.flown.width, rel=tolerance, abs=0)
    assert track["kinetic"][0] == pytest.approx(exact.rest.kinetic, rel=each, abs=0)
    assert track["interaction"][0] == pytest.approx(exact.rest.interaction, rel=each, abs=0)
    release = exact.rest.kinetic.sum() + exact.rest.interaction
    for i in (0, -1):
        assert track["kinetic"][i].sum() + track["interaction"][i] == pytest.approx(release, rel=tolerance, abs=0)
    assert run.summary.numerics.axes == (
        ("mirror", "radial", "radial") if shape == "cylinder" else ("mirror",) * 3
    )


@pytest.mark.slow
def test_a_box_under_gravity_fills_from_below_and_falls_when_it_opens(solved: Solved) -> None:
    run = solved(plan("cylinder", motion.stage("release", FLIGHT), gravity=True))
    exact, track = plain("cylinder", True), run.track
    # a plain run on a fixed grid
    assert exact.rest.centre[2] < -0.3e-6
    assert track["centre"][0] == pytest.approx(exact.rest.centre, abs=5e-10)
    assert track["width"][0] == pytest.approx(exact.rest.width, rel=2e-4)
    assert track["width"][-1] == pytest.approx(exact.flown.width, rel=3e-4)
    # free fall
    fallen = exact.rest.centre[2] - WEIGHT * FLIGHT**2 / 2
    assert track["centre"][-1][2] == pytest.approx(fallen, abs=5e-10)
    assert track["velocity"][-1][2] == pytest.approx(-WEIGHT * FLIGHT, rel=1e-4)


def energy(track: Track, i: int) -> float:
    """All of a cloud's energy in the cuboid at a sample: the track counts the trap's from the cloud's centre."""
    centre = [np.array(c) for c in track["centre"][i]]
    there = float(bruteforce.cuboid(centre, size=SIZE, height=HEIGHT, edge=EDGE)[0])
    own = track["kinetic"][i].sum() + track["trap"][i] + track["interaction"][i]
    return own + track["centre_kinetic"][i] + there


@pytest.mark.slow
def test_a_cloud_pushed_against_its_walls_keeps_its_energy(solved: Solved) -> None:
    push = '["0.3 mm/s", "0 mm/s", "0 mm/s"]'
    run = solved(plan("cuboid", motion.stage("kick", velocity=push), motion.stage("hold", 18e-3)))
    track = run.track
    energies = np.array([energy(track, i) for i in range(len(track.time))])[track.time > 0]
    assert np.ptp(energies) < 1e-3 * energies.mean()
    # it comes back: the walls stop it
    x = track["centre"][:, 0]
    assert x.max() > 0.4e-6 and track["velocity"][:, 0].min() < -0.1e-3


@pytest.mark.slow
def test_a_push_on_a_held_cloud_goes_to_the_plain_runs_places(solved: Solved) -> None:
    speed, time = 0.3e-3, 5e-3
    push = f'["{speed!r} m/s", "0 mm/s", "0 mm/s"]'
    track = solved(plan("cuboid", motion.stage("kick", velocity=push), motion.stage("hold", time))).track
    x, g = GRID.places(), GRID.coupling(NUMBER, A)
    walls = bruteforce.cuboid(x, size=SIZE, height=HEIGHT, edge=EDGE)
    u = bruteforce.ground(GRID, walls, g, np.exp(-3 * walls / HEIGHT))
    q = bruteforce.hbar / motion.RB
    pushed = bruteforce.play(GRID, u * np.exp(1j * speed * x[0] / q), lambda t: walls, g, duration=time, steps=200)
    seen = bruteforce.look(GRID, pushed, g)
    assert track["centre"][-1] == pytest.approx(seen.centre, abs=2e-9)
    assert track["velocity"][-1] == pytest.approx(seen.velocity, abs=1e-6)
    assert track["width"][-1] == pytest.approx(seen.width, rel=1e-3)


def test_a_large_cloud_in_a_box_is_a_uniform_gas(solved: Solved) -> None:
    size, height, edge, number = (40e-6, 30e-6, 30e-6), 60e-9 * Boltzmann, 2e-6, 2e5
    walls = box("cylinder").replace('"14 um", "10 um", "10 um"', '"40 um", "30 um", "30 um"').replace("25 nK", "60 nK")
    run = solved(light.plain(parts=walls, number=number, accuracy="draft"))
    ground = run.summary.ground
    grid = bruteforce.Grid((80, 80, 80), (44e-6, 34e-6, 34e-6), motion.RB)
    walls = bruteforce.cylinder(grid.places(), length=size[0], diameter=size[1], height=height, edge=edge) / bruteforce.hbar
    g = grid.coupling(1, A)

    def missing(mu: float) -> float:
        return float(np.maximum(mu - walls, 0).sum() * grid.cell / g - number)

    # Thomas and Fermi: g n = mu - V; what it leaves out is the kinetic energy of the edges, which only adds
    mu = optimize.brentq(missing, 1.0, height / bruteforce.hbar)
    assert 1.0 < 2 * pi * ground.chemical_potential_hz / mu < 1.12
    assert 1e18 * ground.peak_density_per_um3 == pytest.approx(2 * pi * ground.chemical_potential_hz / g, rel=2e-3)
    density = np.maximum(mu - walls, 0)
    spread = [float(np.sqrt((density * x**2).sum() / density.sum())) for x in grid.places()]
    assert run.track["width"][0] == pytest.approx(spread, rel=0.03)
    # and that is most of a homogeneous body's, L/sqrt(12) and D/4
    assert run.track["width"][0] == pytest.approx([size[0] / np.sqrt(12), size[1] / 4, size[2] / 4], rel=0.15)


def test_walls_lower_than_the_cloud_needs_are_refused() -> None:
    with pytest.raises(trapsim.PlanError, match=r"would spill over them(.|\n)*make the walls higher"):
        trapsim.run(light.plain(parts=box("cuboid"), number=1e6))


# ---- a box among other parts ---------------------------------------------------------------------------------------

WIDE = (
    '[trap.{}]\nkind = "box"\nsize = ["90 um", "90 um", "90 um"]\nheight = "25 nK"\nedge = "2 um"\n'
)
FAINT = '[trap.bowl]\nkind = "harmonic"\nfrequency = ["1 Hz", "1 Hz", "1 Hz"]\n'


def test_walls_that_the_cloud_does_not_reach_do_nothing_whichever_is_written_first(solved: Solved) -> None:
    inner, outer = box("cuboid"), WIDE.format("outer")
    plans = [light.plain(parts=parts, number=NUMBER, accuracy="draft") for parts in (outer + inner, inner + outer)]
    one, other = (prepare(plan).space for plan in plans)
    assert [a.describe() for a in one.axes] == [a.describe() for a in other.axes]
    both = solved(plans[0]).summary.ground
    alone = solved(light.plain(parts=box("cuboid"), number=NUMBER, accuracy="draft")).summary.ground
    assert both.chemical_potential_hz == pytest.approx(alone.chemical_potential_hz, rel=1e-4)
    assert both.width_um == pytest.approx(alone.width_um, rel=1e-4)


def test_a_faint_trap_in_a_box_adds_its_mean_energy(solved: Solved) -> None:
    """First-order perturbation theory: per atom (m/2) w^2 <x^2 + y^2 + z^2>, 0.2 % of the energy here."""
    both = solved(light.plain(parts=box("cuboid") + FAINT, number=NUMBER, accuracy="draft")).summary.ground
    alone = solved(light.plain(parts=box("cuboid"), number=NUMBER, accuracy="draft")).summary.ground
    spread = sum(w**2 for w in alone.width_um) * 1e-12
    added = motion.RB / 2 * (2 * pi * 1.0) ** 2 * spread / (2 * pi * hbar)
    assert both.energy_hz - alone.energy_hz == pytest.approx(added, rel=0.1)
    assert added > 1e-3 * alone.energy_hz


@pytest.mark.slow
def test_a_run_that_is_good_for_nothing_says_so(solved: Solved) -> None:
    """An edge of 10 nm on a grid of half a micrometre; a run whose error is small says nothing."""
    codes = {}
    for edge in ("0.01 um", "2 um"):
        parts = f'[trap.walls]\nkind = "box"\nsize = ["20 um", "20 um", "20 um"]\nheight = "60 nK"\nedge = "{edge}"\n'
        summary = solved(light.plain(motion.stage("release", 5e-3), parts=parts, accuracy="draft")).summary
        codes[edge] = (summary.numerics.error.width_relative > 0.05, "rough" in [n.code for n in summary.warnings])
    assert codes == {"0.01 um": (True, True), "2 um": (False, False)}
