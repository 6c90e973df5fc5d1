"""A variant is the plan with some values replaced by path, as if the file had been edited there."""

from __future__ import annotations

import copy

import pytest
from hypothesis import given
from hypothesis import strategies as st

from trapsim.errors import PlanError
from trapsim.plan.plan import Plan
from trapsim.plan.reader import interpret, plan_from_text, settings
from trapsim.plan.variants import vary

#: An invented plan.
PLAN = """
[atoms]
species = "Rb-87"
number = "1e5"
[trap.dipole]
kind = "harmonic"
frequency = ["20 Hz", "120 Hz", "121 Hz"]
[[sequence]]
stage = "hold"
duration = "2 ms"
[[sequence]]
stage = "ramp"
duration = "5 ms"
to = { "dipole.frequency" = ["10 Hz", "60 Hz", "61 Hz"], "dipole.strength" = { value = 0.5, delay = "1 ms" } }
[[sequence]]
stage = "release"
duration = "20 ms"
[[sequence]]
stage = "hold"
name = "wait"
duration = "3 ms"
[[sequence]]
stage = "hold"
duration = "4 ms"
"""


@pytest.mark.parametrize(("path", "value", "old", "new"), [
    ("atoms.number", "2e5", '"1e5"', '"2e5"'),
    ("atoms.scattering_length", "0 a0", 'number = "1e5"', 'number = "1e5"\nscattering_length = "0 a0"'),
    ("trap.dipole.frequency[0]", "25 Hz", '"20 Hz"', '"25 Hz"'),
    ("trap.dipole.frequency[1,2]", "99 Hz", '"120 Hz", "121 Hz"', '"99 Hz", "99 Hz"'),
    ("trap.dipole.frequency", ["1 Hz", "2 Hz", "3 Hz"], '"20 Hz", "120 Hz", "121 Hz"', '"1 Hz", "2 Hz", "3 Hz"'),
    ("trap.dipole.strength", 0.5, 'kind = "harmonic"', 'kind = "harmonic"\nstrength = 0.5'),
    ("sequence.release.duration", "30 ms", '"20 ms"', '"30 ms"'),
    ("sequence.hold.duration", "9 ms", '"2 ms"', '"9 ms"'),
    ("sequence.wait.duration", "9 ms", '"3 ms"', '"9 ms"'),
    ("sequence.hold_2.duration", "9 ms", '"4 ms"', '"9 ms"'),
    ("sequence[0].duration", "9 ms", '"2 ms"', '"9 ms"'),
    ("sequence[2].switch_off", {"duration": "1 ms"}, '"20 ms"', '"20 ms"\nswitch_off = { duration = "1 ms" }'),
    ("sequence.release.switch_off.duration", "1 ms", '"20 ms"', '"20 ms"\nswitch_off = { duration = "1 ms" }'),
    ('sequence.ramp.to."dipole.frequency"[0]', "11 Hz", '"10 Hz"', '"11 Hz"'),
    ("sequence.ramp.to.dipole.frequency[1,2]", "11 Hz", '"60 Hz", "61 Hz"', '"11 Hz", "11 Hz"'),
    ("sequence.ramp.to.dipole.strength", 0.6, "value = 0.5", "value = 0.6"),
    ("sequence.ramp.to.dipole.strength.value", 0.6, "value = 0.5", "value = 0.6"),
    ("sequence.ramp.to.dipole.strength.delay", "2 ms", 'delay = "1 ms"', 'delay = "2 ms"'),
    ("sequence.ramp.to.dipole.frequency.delay", "2 ms", '["10 Hz", "60 Hz", "61 Hz"]',
     '{ value = ["10 Hz", "60 Hz", "61 Hz"], delay = "2 ms" }'),
    ("sequence.ramp.to.atoms.scattering_length", "50 a0", "to = {", 'to = { "atoms.scattering_length" = "50 a0",'),
    ("numerics.accuracy", "fine", "[atoms]", '[numerics]\naccuracy = "fine"\n[atoms]'),
    ("gravity", {"direction": "-y"}, "[atoms]", '[gravity]\ndirection = "-y"\n[atoms]'),
    ("gravity.direction", "-y", "[atoms]", '[gravity]\ndirection = "-y"\n[atoms]'),
    ("trap.push", {"kind": "gradient", "acceleration": ["1 m/s^2"] * 3}, "[atoms]",
     '[trap.push]\nkind = "gradient"\nacceleration = ["1 m/s^2", "1 m/s^2", "1 m/s^2"]\n[atoms]'),
    ("sequence.wait", None, '[[sequence]]\nstage = "hold"\nname = "wait"\nduration = "3 ms"\n', ""),
    ("sequence", [{"stage": "hold", "duration": "1 s"}], PLAN[PLAN.index("[[sequence]]"):],
     '[[sequence]]\nstage = "hold"\nduration = "1 s"'),
    ("title", "x", "[atoms]", 'title = "x"\n[atoms]'),
])
def test_a_variant_is_the_plan_edited_by_hand(path, value, old, new):
    assert PLAN.count(old) == 1
    edited = plan_from_text(PLAN.replace(old, new))
    assert edited != plan_from_text(PLAN)
    assert plan_from_text(PLAN, changes={path: value}) == edited


def test_an_entry_can_be_taken_out():
    text = PLAN.replace("[atoms]", "[gravity]\n[atoms]")
    assert plan_from_text(text, changes={"gravity": None}) == plan_from_text(PLAN)


def test_several_changes_are_made_together():
    plan = plan_from_text(PLAN, changes={"atoms.number": 3e4, "sequence.hold.duration": "1 ms"})
    assert (plan.atoms.number, plan.sequence[0].duration) == (3e4, 1e-3)


def test_the_given_tree_stays_as_it_is():
    tree = {"atoms": {"number": 1}, "trap": {"t": {"frequency": ["1 Hz"] * 3}}}
    before = copy.deepcopy(tree)
    varied, complaints = vary(tree, {"trap.t.frequency[0]": "2 Hz", "atoms.number": 5})
    assert tree == before and complaints == []
    assert varied == {"atoms": {"number": 5}, "trap": {"t": {"frequency": ["2 Hz", "1 Hz", "1 Hz"]}}}


@pytest.mark.parametrize(("path", "value", "way_out"), [
    ("atom.number", 3, 'did you mean "atoms"'),
    ("atoms.numbr", 3, 'did you mean "number"'),
    ("trap.dipol.frequency[0]", "1 Hz", 'did you mean "dipole"'),
    ("trap.dipole.frequncy", "1 Hz", 'did you mean "frequency"'),
    ("trap.dipole.frequency[3]", "1 Hz", "count from 0 to 2"),
    ("trap.dipole.centre[0]", "1 um", "give all values: trap.dipole.centre=[..., ..., ...]"),
    ("trap.dipole.kind.x", 1, "as a whole"),
    ("sequence.releas.duration", "1 ms", 'did you mean "release"'),
    ("sequence[9].duration", "1 ms", "stages of this plan: hold, ramp, release, wait, hold_2"),
    ("sequence.hold[0].duration", "1 ms", "stages of this plan"),
    ("sequence.ramp.to.dipole.frequncy[0]", "1 Hz", 'did you mean "dipole.frequency"'),
    ("atoms..number", 3, "write it like"),
    ("", 3, "write it like"),
    ("atoms[0].number", 3, "leave the index out"),
    ("gravity", None, "leave the path out"),
    ("atoms.number", "lots", "1.0e5"),
])
def test_a_path_that_leads_nowhere_says_the_way_out(path, value, way_out):
    with pytest.raises(PlanError) as trouble:
        plan_from_text(PLAN, changes={path: value})
    assert "1 thing to mend" in str(trouble.value) and way_out in str(trouble.value)
    assert path in str(trouble.value)


@pytest.mark.parametrize(("text", "value"), [
    ("5", 5), ("2e5", 2e5), ("0.5", 0.5), ("true", True), ("20 Hz", "20 Hz"), ('"20 Hz"', "20 Hz"), ("'a'", "a"),
    ("150(2) Hz", "150(2) Hz"), ("fine", "fine"), ('["1 Hz", "2 Hz"]', ["1 Hz", "2 Hz"]), ("[64, 0, 64]", [64, 0, 64]),
    ("[1 Hz, 2 Hz, 3 Hz]", ["1 Hz", "2 Hz", "3 Hz"]), ("[auto, auto, 40 um]", ["auto", "auto", "40 um"]),
    ("5\natoms = 3", "5\natoms = 3"), ("{ duration = \"1 ms\" }", {"duration": "1 ms"}),
])
def test_values_typed_on_the_command_line_need_no_quotes(text, value):
    got = interpret(text)
    assert got == value and type(got) is type(value)


def test_settings_are_path_equals_value():
    assert settings(["atoms.number=2e5", "trap.dipole.frequency = [1 Hz, 2 Hz, 3 Hz]", "title=a=b"]) == {
        "atoms.number": 2e5, "trap.dipole.frequency": ["1 Hz", "2 Hz", "3 Hz"], "title": "a=b"}
    for text in ("atoms.number", "=5", "atoms.number="):
        with pytest.raises(PlanError, match="path=value"):
            settings([text])


names = st.sampled_from(["trap", "dipole", "sequence", "ramp", "to", "frequency", "strength", "value", "delay", "x"])
steps = st.tuples(names, st.sampled_from(["", "[0]", "[1,2]", "[7]"])).map("".join)
paths = st.lists(steps, max_size=6).map(".".join) | st.text(max_size=12)


@given(st.dictionaries(paths, st.text(max_size=6).map(interpret) | st.none() | st.just({"x": 1}), max_size=3))
def test_any_path_gives_a_plan_or_a_complaint(changes):
    try:
        plan = plan_from_text(PLAN, changes=changes)
    except PlanError as trouble:
        assert "to mend" in str(trouble)
    else:
        assert isinstance(plan, Plan)
