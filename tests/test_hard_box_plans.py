"""Perfectly reflecting walls in a plan: which axes they make, and what cannot be asked of them."""

from __future__ import annotations

import re
from collections.abc import Callable

import pytest

import boxes
import motion
import trapsim
from trapsim.prepare.setup import prepare
from trapsim.space.axes import Wall

Solved = Callable[[trapsim.Plan], trapsim.Run]

HOLD, RELEASE = motion.stage("hold", 1e-3), motion.stage("release", 2e-3)
LIGHT = '[trap.light]\nkind = "lattice"\nspacing = "1 um"\ndepth = "4 Er"\nstrength = 0'
SOFT = '[trap.other]\nkind = "box"\nsize = ["9 um", "9 um", "9 um"]\nheight = "90 nK"\nedge = "1 um"'
WALLS, EVEN = ("wall",) * 3, ("mirror",) * 3


@pytest.mark.parametrize(
    ("numerics", "after"),
    [
        ("", EVEN), ('axes = "full"', ("wave",) * 3), ('axes = ["wall", "wall", "wall"]', ("wave",) * 3),
        ('axes = ["wave", "mirror", "wall"]', ("wave", "mirror", "wave")),
    ],
)  # fmt: skip
def test_axes_end_at_the_walls_until_they_open(numerics: str, after: tuple[str, ...]) -> None:
    setup = prepare(boxes.plan(HOLD, RELEASE, accuracy="draft", numerics=numerics))
    assert tuple(setup.space.words()) == WALLS
    assert [tuple(leg.space.words()) for leg in setup.legs] == [WALLS, after]
    # the walls stand where the plan says, and half a spacing beyond the last points
    for j, size in enumerate((40e-6, 30e-6, 30e-6)):
        axis = setup.space.axis(j)
        assert isinstance(axis, Wall) and 2 * axis.half_extent == pytest.approx(size, rel=1e-14)
        assert axis.points[-1] + axis.spacing / 2 == pytest.approx(size / 2, rel=1e-14)
        # and at a cell boundary of the axis that takes over, which leaves room for the flight
        wide = setup.legs[1].space.axis(j)
        assert size / 2 / wide.spacing == pytest.approx(round(size / 2 / wide.spacing), abs=1e-9)
        assert wide.half_extent >= size
    assert "perfectly reflecting" in setup.why if not numerics else "forces" in setup.why


def test_points_and_extent_asked_for_are_those_of_the_box_and_of_the_flight() -> None:
    numerics = 'points = [48, "auto", 30]\nextent = ["auto", "150 um", "auto"]'
    setup = prepare(boxes.plan(HOLD, RELEASE, accuracy="draft", numerics=numerics))
    assert setup.space.points_per_direction()[::2] == [48, 30]
    wide = setup.legs[1].space
    assert [wide.axis(j).spacing for j in (0, 2)] == pytest.approx([40e-6 / 96, 30e-6 / 60])
    assert wide.axis(1).half_extent == pytest.approx(75e-6, rel=0.1)


def test_a_pulse_inside_keeps_the_walls_and_a_centre_moves_them() -> None:
    pulse = motion.stage("pulse", 1e-5, to='{ "light.strength" = 1 }')
    walls = 'size = ["40 um", "30 um", "30 um"]\ncentre = ["3 um", "0 um", "-2 um"]'
    setup = prepare(boxes.plan(HOLD, pulse, HOLD, rest=LIGHT, walls=walls, accuracy="draft"))
    assert {tuple(leg.space.words()) for leg in setup.legs} == {WALLS}
    assert all(not any(leg.moving) for leg in setup.legs)
    assert setup.timeline.origin == pytest.approx((3e-6, 0, -2e-6))
    assert pytest.approx([3e-6, 0, -2e-6]) == setup.frame().X


def test_a_trap_off_the_middle_leaves_the_frame_in_the_middle_of_the_box() -> None:
    dipole = '[trap.dipole]\nkind = "harmonic"\nfrequency = ["5 Hz", "5 Hz", "5 Hz"]\ncentre = ["4 um", "0 um", "0 um"]'
    setup = prepare(boxes.plan(HOLD, RELEASE, rest=dipole, accuracy="draft"))
    assert pytest.approx([0, 0, 0]) == setup.frame().X
    assert [tuple(leg.space.words()) for leg in setup.legs] == [WALLS, ("wave", "mirror", "mirror")]


def pulse(change: str) -> str:
    return motion.stage("pulse", 1e-3, to=f"{{ {change} }}")


def ramp(change: str) -> str:
    return motion.stage("ramp", 1e-3, to=f"{{ {change} }}")


DEFECTS = {
    "strength in a pulse": ((pulse('"walls.strength" = 0'),), {}, "sequence.pulse.to.walls.strength", "release"),
    "size in a ramp": ((ramp('"walls.size" = ["9 um", "9 um", "9 um"]'),), {}, "sequence.ramp.to.walls.size", "soft edge"),
    "softened": ((ramp('"walls.edge" = "1 um"'),), {}, "sequence.ramp.to.walls.edge", "soft edge"),
    "dying away": (
        (motion.stage("release", 2e-3, switch_off='{ shape = "linear", duration = "1 ms" }'),), {},
        "sequence.release.switch_off", "leave switch_off out",
    ),
    "two boxes": ((HOLD,), {"rest": SOFT}, "trap.walls.edge", "other box"),
    "extent without a release": ((HOLD,), {"numerics": 'extent = ["90 um", "auto", "auto"]'}, "numerics.extent[0]", "auto"),
    "extent shorter than the box": (
        (RELEASE,), {"numerics": 'extent = ["auto", "20 um", "auto"]'}, "numerics.extent[1]", "longer extent",
    ),
    "hardly a point": ((HOLD,), {"numerics": "points = [4, 0, 0]"}, "numerics.points[0]", "more points"),
}  # fmt: skip


@pytest.mark.parametrize("defect", DEFECTS.values(), ids=DEFECTS)
def test_what_hard_walls_cannot_do_is_refused_with_a_way_out(defect: tuple) -> None:
    stages, words, place, way_out = defect
    with pytest.raises(trapsim.PlanError) as refused:
        trapsim.run(boxes.plan(*stages, accuracy="draft", **words))
    text = str(refused.value)
    assert re.search(rf"(?m)^ *{re.escape(place)}(:|$)", text) and way_out in text


def test_a_soft_box_cannot_be_made_hard() -> None:
    with pytest.raises(trapsim.PlanError, match=r"sequence\.ramp\.to\.walls\.edge(.|\n)*neither move nor fade"):
        trapsim.plan_from_text(
            boxes.plan().source.replace('edge = "hard"', 'edge = "1 um"\nheight = "90 nK"') + ramp('"walls.edge" = "hard"')
        )


def test_a_height_may_stay_when_walls_are_made_hard() -> None:
    plan = boxes.plan(walls='size = ["40 um", "30 um", "30 um"]\nheight = "90 nK"')
    assert plan.trap["walls"].hard and plan.trap["walls"].walls == frozenset({0, 1, 2})


def test_opening_hard_walls_is_refused_at_accuracy_fine_and_warned_of_below(solved: Solved) -> None:
    with pytest.raises(trapsim.PhysicsRefused, match=r"accuracy fine(.|\n)*edge = \"1 um\""):
        trapsim.run(boxes.plan(RELEASE, accuracy="fine"))
    assert prepare(boxes.plan(HOLD, accuracy="fine")).legs
    run = solved(boxes.plan(motion.stage("release", 2e-3), accuracy="draft", number=2e4))
    (told,) = (w for w in run.summary.warnings if w.code == "hard_edge")
    assert "soft edge" in told.text and run.summary.numerics.error.rate_relative > 5e-3
