"""The timeline: edges where the plan jumps, exact stage ends, and numbers that are only asked inside their stretch."""

from __future__ import annotations

from math import exp, pi

import numpy as np
import pytest

import motion
import trapsim
from trapsim.prepare.setup import prepare
from trapsim.prepare.stretch import Stretch
from trapsim.prepare.timeline import Timeline, build_timeline

ROUND = (80.0, 80.0, 80.0)
TWO_PI = 2 * pi


def timeline(*stages: str, **words: object) -> Timeline:
    return build_timeline(motion.cloud(*stages, frequency=ROUND, **words))


def edges(line: Timeline) -> list[float]:
    return [line.steps[0].stretch.start, *(s.stretch.stop for s in line.steps)]


def frequency(line: Timeline, index: int, t: float) -> float:
    """The x frequency of the dipole in one stretch, in cycles per second."""
    (dipole,) = (p for p in line.steps[index].stretch.parts_at(t) if p.kind == "harmonic")
    return dipole.frequency[0] / TWO_PI


RAMP = '{{ "dipole.frequency" = {{ value = ["40 Hz", "80 Hz", "80 Hz"], {} }} }}'


# ---- edges ---------------------------------------------------------------------------------------------------------


def test_a_stage_is_cut_where_a_change_begins_and_where_it_ends() -> None:
    line = timeline(
        motion.stage("hold", 1e-3), motion.stage("ramp", 5e-3, to=RAMP.format('delay = "1 ms", duration = "2 ms"')),
        motion.stage("hold", 1e-3),
    )  # fmt: skip
    assert edges(line) == pytest.approx([0, 1e-3, 2e-3, 4e-3, 6e-3, 7e-3], rel=1e-15)
    assert [s.stage for s in line.steps] == [0, 1, 1, 1, 2]
    assert [(s.first, s.last) for s in line.steps] == [
        (True, True), (True, False), (False, False), (False, True), (True, True),
    ]  # fmt: skip
    assert [s.stretch.steady for s in line.steps] == [True, True, False, True, True]


def test_a_delayed_change_waits_and_then_stays() -> None:
    line = timeline(motion.stage("ramp", 5e-3, to=RAMP.format('delay = "1 ms", duration = "2 ms"')))
    # a straight line from 80 to 40 Hz between 1 and 3 ms
    assert frequency(line, 0, 0.5e-3) == pytest.approx(80, rel=1e-15)
    assert frequency(line, 1, 1.5e-3) == pytest.approx(70, rel=1e-12)
    assert frequency(line, 1, 2.9e-3) == pytest.approx(42, rel=1e-12)
    assert frequency(line, 2, 4e-3) == pytest.approx(40, rel=1e-15)


def test_two_changes_of_one_stage_keep_their_own_timing() -> None:
    line = timeline(motion.stage("ramp", 4e-3, to=(
        '{ "dipole.frequency" = { value = ["40 Hz", "80 Hz", "80 Hz"], duration = "3 ms" }, '
        '"atoms.scattering_length" = { value = "50 a0", delay = "2 ms" } }'
    )))  # fmt: skip
    assert edges(line) == pytest.approx([0, 2e-3, 3e-3, 4e-3], rel=1e-15)
    start = line.initial.coupling(0.0)
    assert frequency(line, 1, 2.5e-3) == pytest.approx(80 - 40 * 2.5 / 3, rel=1e-12)
    # straight from 100.4 to 50 a0 between 2 and 4 ms
    assert line.steps[1].stretch.coupling(2.5e-3) / start == pytest.approx((100.4 - 50.4 * 0.25) / 100.4, rel=1e-12)
    assert line.steps[2].stretch.coupling(3.9e-3) / start == pytest.approx((100.4 - 50.4 * 0.95) / 100.4, rel=1e-12)


@pytest.mark.parametrize(
    ("shape", "share"),
    [
        ('shape = "linear"', lambda s: s),
        ('shape = "smooth"', lambda s: 3 * s**2 - 2 * s**3),
        ('shape = "exponential"\ntime_constant = "1 ms"', lambda s: 1 - exp(-4 * s)),
    ],
    ids=["linear", "smooth", "exponential"],
)
def test_the_shapes_of_a_ramp(shape: str, share: object) -> None:
    to = motion.stage("ramp", 4e-3, to='{ "dipole.frequency" = ["40 Hz", "80 Hz", "80 Hz"] }') + "\n" + shape
    line = timeline(to)
    for s in (0.1, 0.37, 0.5, 0.99):
        # closed forms of the three shapes
        assert frequency(line, 0, 4e-3 * s) == pytest.approx(80 - 40 * share(s), rel=1e-12)


def test_a_smooth_ramp_has_no_slope_at_its_ends() -> None:
    ramp = motion.stage("ramp", 4e-3, shape='"smooth"', to='{ "dipole.frequency" = ["40 Hz", "80 Hz", "80 Hz"] }')
    line = timeline(ramp)
    ends = [frequency(line, 0, t) for t in (0.0, 4e-7, 4e-3 - 4e-7, 4e-3)]
    assert abs(ends[1] - ends[0]) < 1e-5 and abs(ends[3] - ends[2]) < 1e-5
    assert (ends[0], ends[3]) == pytest.approx((80, 40), rel=1e-12)


def test_a_cut_off_exponential_jumps_and_says_so() -> None:
    ramp = motion.stage("ramp", 4e-3, to='{ "dipole.frequency" = ["40 Hz", "80 Hz", "80 Hz"] }')
    line = timeline(ramp + '\nshape = "exponential"\ntime_constant = "1 ms"', motion.stage("hold", 1e-3))
    (notice,) = line.notices
    # exp(-4) = 1.83 % of the way is left
    assert notice.code == "jump" and "1.83 %" in notice.text and "dipole.frequency" in notice.text
    assert frequency(line, 0, 4e-3) == pytest.approx(40 + 40 * exp(-4), rel=1e-12)
    assert frequency(line, 1, 4e-3) == 40


def test_an_exponential_that_has_died_says_nothing() -> None:
    release = motion.stage("release", 5e-3, switch_off='{ shape = "exponential", time_constant = "30 us" }')
    line = timeline(release)
    assert line.notices == ()
    # it ends after forty time constants; from there the flight is free
    assert edges(line) == pytest.approx([0, 1.2e-3, 5e-3], rel=1e-12)
    (dying,) = (p for p in line.steps[0].stretch.parts_at(60e-6) if p.kind == "harmonic")
    assert dying.strength == pytest.approx(exp(-2), rel=1e-12)
    assert not [p for p in line.steps[1].stretch.parts_at(2e-3) if p.kind == "harmonic"]


def test_a_jump_is_reported_in_the_summary() -> None:
    release = motion.stage(
        "release", 1e-3, switch_off='{ shape = "exponential", time_constant = "30 us", duration = "90 us" }'
    )
    run = trapsim.run(motion.cloud(release, frequency=ROUND, number=1e3, accuracy="draft"))
    assert [w.code for w in run.summary.warnings if w.code == "jump"] == ["jump"]


# ---- pulses, releases and kicks ------------------------------------------------------------------------------------


LENS = '[trap.lens]\nkind = "harmonic"\nfrequency = ["30 Hz", "30 Hz", "30 Hz"]\nstrength = 0'


def on(line: Timeline, index: int) -> dict[float, float]:
    """Frequency (cycles per second) -> strength of what is on in the middle of a stretch."""
    stretch = line.steps[index].stretch
    parts = stretch.parts_at((stretch.start + stretch.stop) / 2)
    return {round(p.frequency[0] / TWO_PI, 9): p.strength for p in parts if p.kind == "harmonic"}


def test_a_pulse_opens_windows_and_puts_everything_back() -> None:
    line = timeline(
        motion.stage("release", 3e-3),
        motion.stage("pulse", 1e-3, to='{ "lens.strength" = { value = 0.5, delay = "0.2 ms", duration = "0.3 ms" } }'),
        motion.stage("hold", 1e-3), parts=LENS,
    )  # fmt: skip
    assert edges(line) == pytest.approx([0, 3e-3, 3.2e-3, 3.5e-3, 4e-3, 5e-3], rel=1e-13)
    assert [on(line, i) for i in range(5)] == [{}, {}, {30.0: 0.5}, {}, {}]


def test_naming_a_part_in_a_pulse_switches_it_on() -> None:
    line = timeline(
        motion.stage("release", 3e-3), motion.stage("pulse", 1e-3, to='{ "lens.frequency" = ["9 Hz", "9 Hz", "9 Hz"] }'),
        motion.stage("hold", 1e-3), parts=LENS,
    )  # fmt: skip
    assert [on(line, i) for i in range(3)] == [{}, {9.0: 1.0}, {}]


def test_windows_of_one_pulse_may_overlap() -> None:
    line = timeline(motion.stage("pulse", 1e-3, to=(
        '{ "lens.strength" = { value = 1, duration = "0.6 ms" }, '
        '"dipole.strength" = { value = 0.25, delay = "0.4 ms" } }'
    )), parts=LENS)  # fmt: skip
    assert edges(line) == pytest.approx([0, 0.4e-3, 0.6e-3, 1e-3], rel=1e-13)
    assert [on(line, i) for i in range(3)] == [{80.0: 1.0, 30.0: 1.0}, {80.0: 0.25, 30.0: 1.0}, {80.0: 0.25}]


def test_a_release_switches_off_what_confines_and_starts_the_flight_clock() -> None:
    gradient = '[trap.field]\nkind = "gradient"\nacceleration = ["0 m/s^2", "0 m/s^2", "2 m/s^2"]'
    line = timeline(motion.stage("hold", 2e-3), motion.stage("release", 3e-3), parts=LENS + "\n" + gradient)
    assert on(line, 1) == {}
    assert [p.kind for p in line.steps[1].stretch.parts_at(4e-3)] == ["gradient"]
    assert line.released == 2e-3


def test_a_release_of_some_parts_leaves_the_others() -> None:
    line = timeline(
        motion.stage("release", 3e-3, off='["dipole"]'), parts=LENS.replace("strength = 0", "strength = 0.5")
    )
    assert on(line, 0) == {30.0: 0.5}


def test_the_flight_clock_starts_with_the_last_release() -> None:
    run = trapsim.run(motion.cloud(
        motion.stage("hold", 1e-4), motion.stage("release", 2e-4), motion.stage("hold", 1e-4),
        motion.stage("release", 2e-4), motion.stage("kick", velocity='["0 m/s", "0 m/s", "1 m/s"]'),
        motion.stage("hold", 3e-4), frequency=ROUND, number=1e3, accuracy="draft",
    ))  # fmt: skip
    ends = [s.end for s in run.summary.stages]
    assert [e.time_ms for e in ends] == pytest.approx([0.1, 0.3, 0.4, 0.6, 0.6, 0.9], rel=1e-12)
    assert [e.flight_ms for e in ends[:3]] == [None, None, None]
    assert [e.flight_ms for e in ends[3:]] == pytest.approx([0.2, 0.2, 0.5], rel=1e-12)
    assert ends[5].velocity_mm_per_s[2] == pytest.approx(1000, rel=1e-12)


def test_a_kick_is_a_step_of_no_duration() -> None:
    line = timeline(
        motion.stage("release", 1e-3), motion.stage("kick", velocity='["1 mm/s", "0 mm/s", "-2 mm/s"]'),
        motion.stage("hold", 2e-3),
    )  # fmt: skip
    kick = line.steps[1]
    assert kick.kick == (1e-3, 0.0, -2e-3) and kick.stretch.start == kick.stretch.stop == 1e-3
    # x = v t
    assert line.path[2] == pytest.approx([2e-6, 0, -4e-6, 1e-3, 0, -2e-3], rel=1e-12, abs=1e-20)


# ---- exactness -----------------------------------------------------------------------------------------------------


def test_stages_end_exactly_where_their_durations_say() -> None:
    """Ten tenths make a whole: no running sum of steps."""
    stages = [motion.stage("hold", 1e-4) for _ in range(9)] + [motion.stage("release", 1e-4)]
    plan = motion.cloud(*stages, frequency=ROUND, number=1e3, accuracy="draft")
    run = trapsim.run(plan)
    starts = [s.start_ms for s in run.summary.stages]
    assert starts == pytest.approx(0.1 * np.arange(10), rel=1e-14)
    legs = prepare(plan).legs
    assert [leg.stop for leg in legs[:-1]] == [leg.start for leg in legs[1:]]
    for i in range(10):
        stop = prepare(plan).timeline.stage_times[i][1]
        assert stop in run.track.time
    assert run.track.time[-1] == plan.duration


@pytest.mark.parametrize("frame", ["moving", "lab"])
def test_nothing_is_evaluated_at_a_jump(monkeypatch: pytest.MonkeyPatch, frame: str) -> None:
    """A stretch is never asked outside its own closed interval, where another one has other values."""
    asked: list[tuple[float, float, float]] = []
    answer = Stretch.parts_at

    def noted(self: Stretch, t: float) -> object:
        asked.append((self.start, t, self.stop))
        return answer(self, t)

    monkeypatch.setattr(Stretch, "parts_at", noted)
    trapsim.run(motion.cloud(
        motion.stage("ramp", 1e-3, to=RAMP.format('delay = "0.2 ms", duration = "0.5 ms"')),
        motion.stage("pulse", 2e-4, to='{ "dipole.strength" = 0.3 }'),
        motion.stage("release", 4e-4, switch_off='{ shape = "linear", duration = "100 us" }'),
        frequency=(80, 80, 60), number=1e3, accuracy="draft",
        numerics=f'frame = "{frame}"\nextent = ["14 um", "14 um", "16 um"]',
    ))  # fmt: skip
    assert len(asked) > 100
    late = [row for row in asked if not row[0] * (1 - 1e-12) <= row[1] <= row[2] * (1 + 1e-12)]
    assert late == []


def test_a_ramp_to_the_present_value_is_a_hold() -> None:
    line = timeline(motion.stage("ramp", 1e-3, to='{ "dipole.frequency" = ["80 Hz", "80 Hz", "80 Hz"] }'))
    assert [s.stretch.steady for s in line.steps] == [True]
