"""Plan text becomes SI objects, with every default filled in.

Expected numbers are the plan's own, converted by hand.
"""

from __future__ import annotations

import dataclasses
import math
import pickle
from pathlib import Path

import pytest

from trapsim.errors import FileTrouble, PlanError
from trapsim.plan.plan import Plan
from trapsim.plan.reader import plan_from_text, read_plan
from trapsim.plan.stages import Hold, Kick, Pulse, Ramp, Release
from trapsim.terms.field import Gradient
from trapsim.terms.harmonic import Harmonic

TWO_PI = 2 * math.pi

PLANS = Path(__file__).parent / "plans"
FULL = (PLANS / "full.toml").read_text(encoding="utf-8")
SHORT = (PLANS / "short.toml").read_text(encoding="utf-8")


@pytest.fixture(scope="module")
def plan() -> Plan:
    return plan_from_text(FULL, "example")


def stage(text: str, *, before: str = SHORT) -> object:
    """The last stage of a short plan."""
    return plan_from_text(f"{before}\n[[sequence]]\n{text}").sequence[-1]


def test_the_short_plan_has_the_defaults():
    plan = plan_from_text(SHORT)
    assert (plan.title, plan.name, plan.sequence, plan.gravity) == ("", "plan", (), None)
    assert plan.duration == 0
    assert (plan.numerics.accuracy, plan.numerics.ground, plan.numerics.frame) == (
        "normal", "conjugate gradient", "moving")
    assert plan.numerics.axes == "auto"
    assert plan.numerics.points == (0, 0, 0) and plan.numerics.extent == (0.0, 0.0, 0.0)
    assert plan.track.at == () and plan.sigma == {}
    assert plan.trap["dipole"].centre == (0.0, 0.0, 0.0) and plan.trap["dipole"].strength == 1.0


def test_parts_hold_si_numbers_and_know_the_mass(plan):
    dipole, lens, levitation = plan.trap.values()
    assert list(plan.trap) == ["dipole", "lens", "levitation"]
    assert isinstance(dipole, Harmonic) and isinstance(levitation, Gradient)
    assert dipole.frequency == pytest.approx((TWO_PI * 20, TWO_PI * 120, TWO_PI * 120), rel=4e-16, abs=0)
    assert (dipole.centre, dipole.at, lens.at, lens.strength) == ("held", "centre", "cloud", 0.0)
    assert levitation.acceleration == (0.0, 0.0, 9.80665)
    assert {part.mass for part in plan.trap.values()} == {plan.atoms.mass}
    assert plan.gravity.acceleration() == (0.0, 0.0, -9.80665)


def test_the_sequence_is_what_was_written(plan):
    assert [type(s) for s in plan.sequence] == [Hold, Ramp, Kick, Release, Pulse, Hold]
    assert [s.duration for s in plan.sequence] == [0.002, 0.005, 0.0, 0.02, 0.003, 0.02]
    assert plan.duration == pytest.approx(0.05, rel=1e-15, abs=0)
    assert plan.sequence[2].velocity == (0.0, 0.0, 0.0032)


def test_stages_without_a_name_are_called_by_their_kind(plan):
    assert [s.name for s in plan.sequence] == ["hold", "ramp", "kick", "release", "flash", "hold_2"]


def test_changes_take_what_they_do_not_say_from_their_stage(plan):
    to = plan.sequence[1].to
    slow, short, late = to["dipole.frequency"], to["levitation.strength"], to["atoms.scattering_length"]
    assert slow.value == pytest.approx((TWO_PI * 10, TWO_PI * 120, TWO_PI * 120), rel=4e-16, abs=0)
    assert (slow.delay, slow.duration, slow.shape) == (0.0, 0.005, "smooth")
    assert (short.value, short.delay, short.duration, short.shape) == (0.5, 0.001, 0.002, "linear")
    assert late.value == pytest.approx(50 * 5.29177210544e-11, rel=4e-16, abs=0)
    assert (late.delay, late.duration, late.shape) == (0.002, pytest.approx(0.003, rel=1e-14, abs=0), "smooth")


def test_exponential_changes_inherit_the_time_constant():
    ramp = stage('stage = "ramp"\nduration = "5 ms"\nshape = "exponential"\ntime_constant = "1 ms"\n'
                 'to = { "dipole.strength" = 0.5, "dipole.frequency" = { value = ["1 Hz", "1 Hz", "1 Hz"], '
                 'shape = "linear" } }')
    assert (ramp.to["dipole.strength"].shape, ramp.to["dipole.strength"].time_constant) == ("exponential", 0.001)
    assert (ramp.to["dipole.frequency"].shape, ramp.to["dipole.frequency"].time_constant) == ("linear", None)


def test_a_pulse_switches_on_the_part_it_names(plan):
    to = plan.sequence[4].to
    assert to["lens.strength"].value == 1.0
    assert (to["lens.strength"].delay, to["lens.strength"].duration) == (0.0, 0.003)
    assert {change.shape for change in to.values()} == {"sudden"}


def test_a_pulse_switches_on_no_part_that_is_told_otherwise_or_is_on_already():
    lens = SHORT + '[trap.lens]\nkind = "harmonic"\nfrequency = ["1 Hz", "1 Hz", "1 Hz"]\nstrength = 0\n'
    told = stage('stage = "pulse"\nduration = "1 ms"\nto = { "lens.frequency" = ["2 Hz", "2 Hz", "2 Hz"], '
                 '"lens.strength" = 0.5 }', before=lens)
    assert told.to["lens.strength"].value == 0.5
    on = stage('stage = "pulse"\nduration = "1 ms"\nto = { "dipole.frequency" = ["2 Hz", "2 Hz", "2 Hz"] }')
    assert list(on.to) == ["dipole.frequency"]


def test_a_pulse_after_the_release_switches_the_trap_on_again():
    release = SHORT + '[[sequence]]\nstage = "release"\nduration = "1 ms"\n'
    pulse = stage('stage = "pulse"\nduration = "1 ms"\nto = { "dipole.frequency" = ["2 Hz", "2 Hz", "2 Hz"] }',
                  before=release)
    assert pulse.to["dipole.strength"].value == 1.0


def test_a_late_pulse_switches_its_part_on_late():
    lens = SHORT + '[trap.lens]\nkind = "harmonic"\nfrequency = ["1 Hz", "1 Hz", "1 Hz"]\nstrength = 0\n'
    late = stage('stage = "pulse"\nduration = "3 ms"\nto."lens.frequency" = { value = ["2 Hz", "2 Hz", "2 Hz"], '
                 'delay = "1 ms", duration = "1 ms" }', before=lens)
    assert (late.to["lens.strength"].delay, late.to["lens.strength"].duration) == (0.001, 0.001)


def test_a_release_switches_off_every_part_that_confines(plan):
    assert plan.sequence[3].off == ("dipole", "lens")
    some = stage('stage = "release"\nduration = "1 ms"\noff = ["dipole"]')
    assert some.off == ("dipole",)


def test_an_exponential_switch_off_ends_when_nothing_is_left(plan):
    off = plan.sequence[3].switch_off
    assert (off.shape, off.time_constant) == ("exponential", 3e-5)
    assert math.exp(-off.duration / off.time_constant) < 1e-16  # below the rounding of a double
    assert off.duration < 0.02  # and long before the end of the flight
    slow = stage('stage = "release"\nduration = "1 ms"\nswitch_off = { shape = "exponential", time_constant = "1 ms" }')
    assert slow.switch_off.duration == 0.001


def test_times_are_sorted(plan):
    assert plan.sequence[3].pictures == (0.005, 0.01, 0.02)
    assert plan.track.at == (0.001, 0.0015)


def test_numerics_are_read(plan):
    n = plan.numerics
    assert (n.accuracy, n.points, n.axes) == ("fine", (64, 0, 0), ("wave", "radial", "radial"))
    assert n.extent == (0.0, 2e-4, 0.0)
    assert (n.memory, n.threads) == (2e9, 2)


def test_uncertainties_stand_beside_the_values_by_path(plan):
    assert plan.sigma == pytest.approx({
        "atoms.number": 1e4,
        "trap.dipole.frequency[1]": TWO_PI * 2,
        "sequence.ramp.to.levitation.strength.value": 0.1,
        "sequence.kick.velocity[2]": 1e-4,
    }, rel=1e-15, abs=0)


def test_a_short_change_keeps_a_short_path_for_its_uncertainty():
    text = SHORT + '[[sequence]]\nstage = "ramp"\nduration = "1 ms"\nto = { "dipole.strength" = "0.5(1)" }'
    assert plan_from_text(text).sigma == {"sequence.ramp.to.dipole.strength": 0.1}


def test_changes_may_be_written_without_quotes_around_their_path():
    quoted = SHORT + '[[sequence]]\nstage = "ramp"\nduration = "1 ms"\nto = { "dipole.strength" = 0.5 }'
    assert plan_from_text(quoted) == plan_from_text(quoted.replace('"dipole.strength"', "dipole.strength"))


def test_uniform_directions_need_no_trap():
    text = SHORT.replace('"120 Hz", "120 Hz"', '"0 Hz", "0 Hz"') + '[numerics]\nextent = ["auto", "4 um", "5 um"]'
    assert plan_from_text(text).numerics.extent == (0.0, 4e-6, 5e-6)
    bare = '[atoms]\nspecies = "Rb-87"\nnumber = 1e3\n[numerics]\nextent = ["1 um", "1 um", "1 um"]'
    assert plan_from_text(bare).trap == {}


def test_a_levitated_cloud_may_be_uniform_along_gravity():
    text = SHORT.replace('"120 Hz"]', '"0 Hz"]') + '[gravity]\n[numerics]\nextent = ["auto", "auto", "5 um"]\n' \
        '[trap.push]\nkind = "gradient"\nacceleration = ["0 m/s^2", "0 m/s^2", "9.80665 m/s^2"]'
    assert plan_from_text(text).numerics.extent[2] == 5e-6


def test_a_plan_travels_to_another_process(plan):
    again = pickle.loads(pickle.dumps(plan))
    assert again == plan and again.key == plan.key and again.source == FULL


def test_a_plan_is_frozen(plan):
    with pytest.raises(dataclasses.FrozenInstanceError):
        plan.title = "other"


def test_a_file_is_read_with_its_name(tmp_path, plan):
    path = tmp_path / "example.toml"
    path.write_bytes(b"\xef\xbb\xbf" + FULL.replace("\n", "\r\n").encode())  # as some editors save it
    again = read_plan(path)
    assert again.name == "example" and again == plan
    assert read_plan(str(path), {"atoms.number": "2e5"}).atoms.number == 2e5


@pytest.mark.parametrize(("content", "words"), [
    (b"", "empty"), (b"  # only a remark\n", "empty"),
    (b"\x89PNG\r\n\x1a\n\x00\x00", "UTF-8"), (b"a = 1\nb\0", "binary"),
    (b"title = 'ok'\ntitle = '\xe9t\xe9'", "line 2"),
    (b"[atoms\n", "line 1"), (b"a = 1\nb = 20 Hz\n", "line 2"), (b"[a]\n[a]\n", "not TOML"),
    (b"a = " + b"1" * 5000, "not TOML"), (b"a = " + b"[" * 5000, "nested"),
], ids=lambda item: repr(item)[:24])
def test_a_file_that_is_no_plan_says_why(tmp_path, content, words):
    path = tmp_path / "bad.toml"
    path.write_bytes(content)
    with pytest.raises(PlanError) as trouble:
        read_plan(path)
    assert trouble.value.exit_code == 2
    assert str(path) in str(trouble.value) and words in str(trouble.value)


def test_a_file_that_cannot_be_read_says_why(tmp_path, monkeypatch):
    (tmp_path / "release.toml").write_text(SHORT)
    for path, words in [(tmp_path / "relase.toml", "release.toml"), (tmp_path / "no" / "x.toml", "no such file"),
                        (tmp_path, "folder"), ("bad\0name", "not a path")]:
        with pytest.raises(FileTrouble) as trouble:
            read_plan(path)
        assert trouble.value.exit_code == 4 and words in str(trouble.value)

    def refuse(self):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr("pathlib.Path.read_bytes", refuse)
    with pytest.raises(FileTrouble, match="Permission denied"):
        read_plan(tmp_path / "release.toml")
