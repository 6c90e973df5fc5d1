"""One space per leg: as small as the symmetry allows, as large as the cloud needs, and refused where it is too small."""

from __future__ import annotations

from collections.abc import Callable
from itertools import product
from math import pi

import numpy as np
import pytest

import light
import motion
import trapsim
from reference import units
from trapsim.prepare.setup import prepare

Solved = Callable[[trapsim.Plan], trapsim.Run]

CIGAR = (30.0, 90.0, 90.0)
SPLIT = '{ "dipole.frequency" = ["30 Hz", "60 Hz", "90 Hz"] }'
ROUND, EVEN, FULL = ("mirror", "radial", "radial"), ("mirror",) * 3, ("wave",) * 3


def words(*stages: str, frequency: tuple[float, ...] = CIGAR, **more: object) -> list[tuple[str, ...]]:
    """Kinds of axis of the ground state and of every leg."""
    setup = prepare(motion.cloud(*stages, frequency=frequency, **more))
    return [tuple(s.words()) for s in (setup.space, *(leg.space for leg in setup.legs))]


# ---- which axes ----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("frequency", "kinds"),
    [
        ((30.0, 90.0, 90.0), ("mirror", "radial", "radial")),
        ((90.0, 30.0, 90.0), ("radial", "mirror", "radial")),
        ((90.0, 90.0, 30.0), ("radial", "radial", "mirror")),
        ((30.0, 60.0, 90.0), ("mirror", "mirror", "mirror")),
    ],
)
def test_two_like_directions_share_a_radial_axis(frequency: tuple[float, ...], kinds: tuple[str, ...]) -> None:
    assert words(motion.stage("release", 1e-3), frequency=frequency) == [kinds, kinds]


@pytest.mark.parametrize(
    "stage",
    [
        motion.stage("kick", velocity='["1 mm/s", "2 mm/s", "-3 mm/s"]'),
        motion.stage("pulse", 1e-3, to='{ "dipole.centre" = ["1 um", "2 um", "3 um"] }'),
        motion.stage("ramp", 1e-3, to='{ "dipole.frequency" = ["50 Hz", "70 Hz", "70 Hz"] }'),
    ],
    ids=["kick", "jump of place", "round ramp"],
)
def test_what_the_frame_takes_up_costs_no_symmetry(stage: str) -> None:
    kinds = words(stage, motion.stage("release", 1e-3), gravity=True)
    assert kinds == [ROUND] * 3


def test_roundness_that_is_lost_is_lost_from_there_on() -> None:
    hold = motion.stage("hold", 1e-3)
    back = motion.stage("ramp", 1e-3, to='{ "dipole.frequency" = ["30 Hz", "90 Hz", "90 Hz"] }')
    kinds = words(hold, motion.stage("ramp", 1e-3, to=SPLIT), back, motion.stage("release", 1e-3))
    assert kinds == [ROUND, ROUND, EVEN, EVEN, EVEN]


def test_the_summary_says_why() -> None:
    run = trapsim.run(motion.cloud(
        motion.stage("hold", 1e-4), motion.stage("ramp", 1e-4, to=SPLIT), frequency=CIGAR, number=1e3, accuracy="draft",
    ))  # fmt: skip
    assert run.summary.numerics.axes == ROUND
    assert [leg.axes for leg in run.summary.numerics.legs] == [ROUND, EVEN]
    assert "alike at first" in run.summary.numerics.legs[0].reason


def test_radial_axes_cannot_be_forced_on_a_cloud_that_is_not_round() -> None:
    with pytest.raises(trapsim.PlanError, match=r"numerics.axes(.|\n)*not round about x"):
        words(
            motion.stage("hold", 1e-3), frequency=(30.0, 60.0, 90.0),
            numerics='axes = ["wave", "radial", "radial"]',
        )  # fmt: skip


def test_a_frame_that_stands_sees_what_breaks_the_roundness() -> None:
    lab = 'frame = "lab"'
    along = words(motion.stage("kick", velocity='["1 mm/s", "0 mm/s", "0 mm/s"]'), numerics=lab)
    across = words(motion.stage("kick", velocity='["0 mm/s", "1 mm/s", "0 mm/s"]'), numerics=lab)
    assert along == [ROUND, ("wave", "radial", "radial")] and across == [ROUND, ("mirror", "wave", "mirror")]


@pytest.mark.slow
def test_a_cloud_goes_from_round_to_even_axes_unharmed(solved: Solved) -> None:
    stages = (
        motion.stage("pulse", 1e-3, to='{ "dipole.frequency" = ["33 Hz", "99 Hz", "99 Hz"] }'),
        motion.stage("ramp", 2e-3, to=SPLIT), motion.stage("release", 4e-3),
    )  # fmt: skip
    auto, full = (
        solved(motion.cloud(*stages, frequency=CIGAR, number=2e3, accuracy="fine", numerics=f'axes = "{axes}"'))
        for axes in ("auto", "full")
    )
    assert auto.summary.numerics.axes == ROUND and full.summary.numerics.axes == FULL
    assert [leg.axes for leg in auto.summary.numerics.legs] == [ROUND, EVEN, EVEN]
    for one, other in zip(auto.summary.stages, full.summary.stages, strict=True):
        # exact: one equation on two kinds of axis
        assert one.end.width_um == pytest.approx(other.end.width_um, rel=2e-6)
        assert one.end.expansion_rate_mm_per_s == pytest.approx(other.end.expansion_rate_mm_per_s, rel=5e-6, abs=5e-6)
        assert one.end.interaction_nk == pytest.approx(other.end.interaction_nk, rel=5e-6)
    assert abs(auto.summary.numerics.norm_drift) < 1e-6


# ---- how large, how fine -------------------------------------------------------------------------------------------


def test_a_finer_accuracy_has_more_room_and_more_points() -> None:
    spaces = [
        prepare(motion.cloud(motion.stage("release", 1e-3), frequency=CIGAR, accuracy=a)).space
        for a in ("draft", "normal", "fine")
    ]
    halves = np.array([[s.axis(j).half_extent for j in range(3)] for s in spaces])
    points = np.array([s.points_per_direction() for s in spaces])
    assert (np.diff(halves, axis=0) > 0).all() and (np.diff(points, axis=0) > 0).all()


@pytest.mark.parametrize(
    ("number", "frequency"), [(1e5, CIGAR), (1e3, (100.0, 100.0, 100.0)), (1e5, (40.0, 40.0, 200.0))]
)
def test_the_room_holds_the_thomas_fermi_cloud_and_the_spacing_its_edge(
    number: float, frequency: tuple[float, ...]
) -> None:
    a = 100.4 * units.A0
    exact = units.thomas_fermi(motion.RB, tuple(2 * pi * f for f in frequency), number, a)
    setup = prepare(motion.cloud(motion.stage("release", 1e-3), frequency=frequency, number=number, accuracy="normal"))
    q = units.hbar / motion.RB
    for j, (f, radius) in enumerate(zip(frequency, exact.radii, strict=True)):
        axis = setup.space.axis(j)
        # the edge of a Thomas-Fermi cloud (Dalfovo, Pitaevskii and Stringari, Phys. Rev. A 54, 4213 (1996))
        edge = (q**2 / (2 * (2 * pi * f) ** 2 * radius)) ** (1 / 3)
        assert axis.half_extent > radius + 3 * edge
        assert axis.spacing < 1.6 * edge


def test_extent_and_points_are_as_asked() -> None:
    setup = prepare(motion.cloud(
        motion.stage("release", 1e-3), frequency=(30.0, 60.0, 90.0), number=1e3,
        numerics='extent = ["40 um", "auto", "17 um"]\npoints = [80, "auto", 36]',
    ))  # fmt: skip
    space = setup.space
    assert [2e6 * space.axis(j).half_extent for j in (0, 2)] == pytest.approx([40, 17], rel=1e-12)
    assert [space.axis(j).counted for j in (0, 2)] == [80, 36]


@pytest.mark.parametrize("j", [0, 1, 2])
def test_too_little_room_is_refused_with_its_direction(j: int) -> None:
    extent = ['"auto"'] * 3
    extent[j] = '"9 um"'
    plan = motion.cloud(
        motion.stage("release", 5e-3), frequency=(50.0, 60.0, 70.0), number=2e4,
        numerics=f"extent = [{', '.join(extent)}]",
    )  # fmt: skip
    with pytest.raises(trapsim.PhysicsRefused) as refused:
        trapsim.run(motion.cramped(plan))
    text = str(refused.value)
    assert f"edge along {'xyz'[j]}" in text and "comes back in on the other side" in text
    assert f"numerics.extent along {'xyz'[j]}" in text and "numerics.accuracy" in text


@pytest.mark.parametrize("j", [0, 1, 2])
def test_too_few_points_are_refused_with_their_direction(j: int) -> None:
    points = ['"auto"'] * 3
    points[j] = "12"
    plan = motion.cloud(
        motion.stage("release", 5e-3), frequency=(50.0, 60.0, 70.0), number=1e4,
        numerics=f"points = [{', '.join(points)}]",
    )  # fmt: skip
    with pytest.raises(trapsim.PhysicsRefused) as refused:
        trapsim.run(motion.cramped(plan))
    text = str(refused.value)
    assert f"highest wave number along {'xyz'[j]}" in text
    assert f"numerics.points along {'xyz'[j]} (now 12)" in text


@pytest.mark.slow
def test_what_passes_the_guards_is_right(solved: Solved) -> None:
    """Room and points are halved until a guard stops it: whatever it lets through is good to its stated error.

    With memory for a larger grid the cloud goes on there, and that is good to its stated error as well.
    """
    frequency = (50.0, 60.0, 70.0)

    def plan(numerics: str, accuracy: str) -> trapsim.Plan:
        return motion.cloud(
            motion.stage("release", 5e-3), frequency=frequency, number=2e4, numerics=numerics, accuracy=accuracy
        )

    truth = np.array(solved(plan("", "fine")).summary.end.width_um)
    refused, grown = {True: 0, False: 0}, 0
    for extent, points, tight in product((18, 14), (32, 24, 16), (True, False)):
        numerics = f'extent = ["{extent} um", "{extent} um", "{extent} um"]\npoints = [{points}, {points}, {points}]'
        asked = plan(numerics, "normal")
        try:
            end = trapsim.run(motion.cramped(asked) if tight else asked).summary
        except trapsim.PhysicsRefused:
            refused[tight] += 1
            continue
        grown += any(notice.code == "regrid" for notice in end.warnings)
        off = np.abs(np.array(end.end.width_um) / truth - 1).max()
        assert off < max(3 * end.numerics.error.width_relative, 2e-4), numerics
    assert refused[True] > refused[False]
    assert grown >= 2


def test_memory_that_is_too_small_is_a_matter_of_the_plan() -> None:
    with pytest.raises(trapsim.PlanError, match=r"numerics.memory(.|\n)*points need about"):
        prepare(motion.cloud(
            motion.stage("release", 1e-3), frequency=(30.0, 60.0, 90.0), numerics='memory = "1 MB"', accuracy="fine"
        ))  # fmt: skip


PLUG = """
[trap.plug]
kind = "beam"
direction = "z"
waist = "4 um"
wavelength = "532 nm"
depth = "-100 nK"
"""


@pytest.mark.parametrize("numerics", ["", 'extent = ["40 um", "40 um", "20 um"]'])
def test_a_cloud_on_a_hill_is_refused_and_not_called_uniform(numerics: str) -> None:
    """A repelling beam in the middle of a trap makes it turn down there, by far faster than the trap turns up."""
    # closed forms: 4 V/w^2 beside m omega^2
    assert motion.RB * (2 * pi * 90) ** 2 < 4 * 1.380649e-23 * 1e-7 / 4e-6**2
    with pytest.raises(trapsim.PlanError, match=r"hill along x, y .* balance(.|\n)*function"):
        prepare(motion.cloud(motion.stage("release", 1e-3), frequency=CIGAR, parts=PLUG, numerics=numerics))


def test_a_cloud_in_a_box_may_have_a_hill_in_its_middle() -> None:
    box = '[trap.walls]\nkind = "box"\nsize = ["30 um", "30 um", "30 um"]\nheight = "60 nK"\nedge = "2 um"\n'
    setup = prepare(light.plain(motion.stage("release", 1e-3), parts=box + PLUG))
    assert not setup.lengths.uniform.any()


@pytest.mark.parametrize(
    ("parts", "stages"),
    [
        (light.lattice(1e6), [motion.stage("release", 1e-3), light.pulse(1.0)]),
        (light.lattice(1, strength=1).replace("532 nm", "1 m"), [motion.stage("release", 1e-3)]),
        (light.lattice(1, strength=1).replace("532 nm", "1 nm"), [motion.stage("release", 1e-3)]),
    ],
    ids=["depth", "long spacing", "short spacing"],
)
def test_an_absurd_lattice_is_refused_before_an_axis_is_made_for_it(
    parts: str, stages: list[str], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("trapsim.prepare.extent.Wave", None)  # what makes an axis here fails
    with pytest.raises(trapsim.PlanError, match=r"points along x, (.|\n)*at most \d+\n.*depth, spacing, detuning"):
        prepare(motion.cloud(*stages, frequency=(30, 60, 90), parts=parts))
