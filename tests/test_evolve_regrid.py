"""A cloud that outgrows its grid goes on on a larger one, and nothing but the grid changes.

In a frame that stands in the lab everything that happens to a cloud happens on its grid, so that it outgrows it soon; and
without mean field its path and its widths are known exactly: a Gaussian spreads as sigma sqrt(1 + (omega t)^2) and falls
as Galilei says (textbook laws; any book on quantum mechanics).
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.constants import g, hbar

import motion
import trapsim
from trapsim.corridor import folder as place
from trapsim.evolve.door import through
from trapsim.evolve.march import march
from trapsim.prepare.setup import Setup, prepare
from trapsim.space.axes import Mirror, Radial, Wave
from trapsim.space.space import Space

FREQUENCY = (60.0, 80.0, 110.0)
OMEGA = 2 * np.pi * np.array(FREQUENCY)
SIGMA = np.sqrt(hbar / (2 * motion.RB * OMEGA))


def in_the_lab(*stages: str, **words: object) -> trapsim.Plan:
    """An ideal gas on a grid that is just large enough for it at rest."""
    size = ", ".join(f'"{1e6 * 11 * s:.4f} um"' for s in SIGMA)
    numerics = f'frame = "lab"\nextent = [{size}]'
    return motion.cloud(*stages, frequency=FREQUENCY, a="0 a0", number=1e3, numerics=numerics, **words)


def told(run: trapsim.Run) -> list[str]:
    return [notice.text for notice in run.summary.warnings if notice.code == "regrid"]


def test_a_gaussian_outgrows_its_grid_and_spreads_as_it_should() -> None:
    run = trapsim.run(in_the_lab(motion.stage("release", 8e-3)))
    exact = 1e6 * SIGMA * np.sqrt(1 + (OMEGA * 8e-3) ** 2)
    assert len(told(run)) >= 2 and "along z" in "; ".join(told(run))
    assert run.summary.end.width_um == pytest.approx(exact, rel=2e-5)
    assert run.summary.numerics.norm_drift < 1e-5


@pytest.mark.slow
def test_a_cloud_that_falls_on_a_standing_grid_takes_up_room_and_points() -> None:
    """It falls by g t^2/2 and gains k = m g t/hbar, which is beyond what its first grid holds."""
    t = 2e-3
    run = trapsim.run(in_the_lab(motion.stage("release", t), gravity=True))
    grown = "; ".join(told(run))
    assert "points" in grown and "times its extent" in grown

    assert run.summary.end.velocity_mm_per_s[2] == pytest.approx(-1e3 * g * t, rel=1e-5)
    assert run.summary.end.centre_um[2] == pytest.approx(-0.5e6 * g * t**2, rel=1e-5)


def begun(plan: trapsim.Plan) -> tuple[Setup, list]:
    setup = prepare(plan)
    ticks = march(motion.begin(setup), setup.legs, pace=setup.pace, guards=setup.guards, afford=lambda points: True)
    return setup, [t.state.copy() for t in ticks]


def test_the_march_from_any_state_is_the_rest_of_the_run_also_on_a_larger_grid() -> None:
    setup, states = begun(in_the_lab(motion.stage("release", 3e-3), motion.stage("hold", 1e-3)))
    larger = [s for s in states if s.cloud.space.size > setup.space.size]
    assert larger and len({s.cloud.space.size for s in states}) > 1
    for state in (larger[0], next(s for s in states if s.leg == 1)):
        *_, last = march(
            state.copy(), setup.legs, pace=setup.pace, guards=setup.guards, afford=lambda points: True
        )
        assert last.state.cloud.space.describe() == states[-1].cloud.space.describe()
        # exact: the same steps again
        assert np.abs(last.state.cloud.phi - states[-1].cloud.phi).max() < 1e-10 * np.abs(states[-1].cloud.phi).max()


def test_a_later_leg_keeps_the_room_that_was_made() -> None:
    setup, states = begun(in_the_lab(motion.stage("release", 3e-3), motion.stage("hold", 1e-3)))
    at_the_door = next(s for s in states if s.leg == 1)
    assert setup.legs[1].space is setup.legs[0].space
    assert states[-1].cloud.space.size >= at_the_door.cloud.space.size > setup.space.size


def test_a_checkpoint_on_a_larger_grid_is_taken_up_there(tmp_path) -> None:
    plan = in_the_lab(motion.stage("release", 3e-3))
    setup, states = begun(plan)
    state = next(s for s in states if s.cloud.space.size > setup.space.size)
    place.save(tmp_path, plan, state, heard={}, ground={}, seconds=1.0)
    kept, *_ = place.load(tmp_path, plan, [setup.space])
    assert kept.cloud.space.describe() == state.cloud.space.describe()
    assert np.array_equal(kept.cloud.phi, state.cloud.phi)


@pytest.mark.parametrize("axis", [Wave((2,), 48, 4e-6), Mirror((2,), 24, 4e-6)])
def test_more_room_or_more_points_leave_a_function_as_it_is(axis) -> None:
    """A Gaussian on the larger axis is the Gaussian (exact; its tails are below 1e-12 at the edge)."""
    space = Space([Radial((0, 1), 28, 4e-6), axis])

    def gaussian(on: Space) -> np.ndarray:
        r, _, z = on.coordinates()
        return on.array(np.exp(-((r**2 + z**2) / (2 * (0.55e-6) ** 2))))

    for points, extent in (((1, 1, 2), (1, 1, 1)), ((2, 2, 2), (2, 2, 2)), ((2, 2, 1), (1, 1, 1))):
        larger = space.grown(points, extent)
        cloud = replace(motion.begin(prepare(in_the_lab())).cloud, space=space, phi=gaussian(space))
        moved, lost = through(cloud, larger)
        assert np.abs(moved.phi - gaussian(larger)).max() < 1e-9
        assert not lost.any()
    assert space.grown(np.ones(3), np.ones(3)) is space


@pytest.mark.slow
def test_a_lattice_keeps_a_whole_number_of_points_per_period() -> None:
    """A cloud let run against a lattice that holds it: the grid grows, and its spacing still divides the period."""
    light = '[trap.light]\nkind = "lattice"\nwavelength = "1064 nm"\ndepth = "8 Er"\n'
    plan = motion.cloud(
        motion.stage("kick", recoils="16", of='"light"'), motion.stage("hold", 2e-6), frequency=(60.0, 90.0, 90.0),
        a="0 a0", parts=light,
    )  # fmt: skip
    setup, states = begun(plan)
    spacing = [s.cloud.space.axis(0).spacing for s in (states[0], states[-1])]
    per_period = 532e-9 / states[-1].cloud.space.axis(0).spacing
    assert states[-1].cloud.space.axis(0).counted > setup.space.axis(0).counted
    assert per_period == pytest.approx(round(per_period), abs=1e-9)
    assert spacing[0] <= setup.space.axis(0).spacing


def test_a_collapse_on_the_way_ends_with_words_about_attraction() -> None:
    """N |a|/a_ho far beyond 0.57: no ground state, and no grid that holds it (Ruprecht et al., PRA 51, 4704 (1995))."""
    quench = motion.stage("ramp", 0.1e-3, to='{ "atoms.scattering_length" = "-100 a0" }')
    plan = motion.cloud(
        quench, motion.stage("hold", 5e-3), frequency=(60.0, 60.0, 60.0), a="50 a0", number=2e4, accuracy="draft"
    )
    with pytest.raises(trapsim.PhysicsRefused, match=r"attract each other(.|\n)*take fewer atoms"):
        trapsim.run(motion.cramped(plan))
