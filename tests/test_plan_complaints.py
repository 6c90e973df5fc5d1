"""Broken plans: each is refused with the path, the rule and the way out, all complaints at once.

Every row is an invented slip of the pen: a good plan with one thing replaced.
"""

from __future__ import annotations

import copy
import tomllib

import pytest
from hypothesis import given
from hypothesis import strategies as st

from broken.reading import complaints
from trapsim.plan.plan import Plan
from trapsim.plan.reader import assemble, plan_from_text

GOOD = """
title = "invented"

[atoms]
species = "Rb-87"
number = "1e5"

[trap.dipole]
kind = "harmonic"
frequency = ["20 Hz", "120 Hz", "120 Hz"]

[trap.lens]
kind = "harmonic"
frequency = ["10 Hz", "10 Hz", "10 Hz"]
strength = 0

[trap.push]
kind = "gradient"
acceleration = ["0 m/s^2", "0 m/s^2", "1 m/s^2"]

[gravity]
direction = "-z"

[[sequence]]
stage = "hold"
duration = "2 ms"

[[sequence]]
stage = "ramp"
duration = "5 ms"
to = { "dipole.frequency" = ["10 Hz", "120 Hz", "120 Hz"] }

[[sequence]]
stage = "kick"
velocity = ["0 mm/s", "0 mm/s", "3.2 mm/s"]

[[sequence]]
stage = "release"
duration = "20 ms"
switch_off = { shape = "linear", duration = "50 us" }

[[sequence]]
stage = "pulse"
name = "flash"
duration = "3 ms"
to = { "lens.strength" = 1 }

[numerics]
accuracy = "normal"

[track]
at = ["1 ms"]
"""

RAMP_TO = 'to = { "dipole.frequency" = ["10 Hz", "120 Hz", "120 Hz"] }'
SWITCH = 'switch_off = { shape = "linear", duration = "50 us" }'
DIPOLE = '"20 Hz", "120 Hz", "120 Hz"'
PULSE_TO = 'to = { "lens.strength" = 1 }'
HOLD = 'stage = "hold"\nduration = "2 ms"'
LENS_OFF = '"10 Hz"]\nstrength = 0'

BROKEN = [
    # what is replaced, by what, the path of the complaint, a fragment of the way out
    ('title = "invented"', "title = 3", "title", "write"),
    ('title = "invented"', 'titel = "x"', "titel", 'did you mean "title"'),
    ("[atoms]", "[atom]", "atom", 'did you mean "atoms"'),
    ("[gravity]", '[camera.side]\nview = "y"\npixel = "6 um"\n[gravity]', "camera.side.magnification", "write"),
    ("[gravity]", "[scan]\n[gravity]", "scan", "known here: title, atoms, trap"),
    ('[atoms]\nspecies = "Rb-87"\nnumber = "1e5"', "", "atoms", "[atoms]"),
    ('[atoms]\nspecies = "Rb-87"\nnumber = "1e5"', "atoms = 5", "atoms", "[atoms]"),
    ('number = "1e5"', "", "atoms.number", "number ="),
    ('number = "1e5"', 'number = "1e5 Hz"', "atoms.number", "leave the unit out"),
    ('number = "1e5"', "number = 0.5", "atoms.number", "1e5"),
    ('number = "1e5"', "number = -1e5", "atoms.number", "1e5"),
    ('number = "1e5"', "number = nan", "atoms.number", "number"),
    ('number = "1e5"', "number = inf", "atoms.number", "number"),
    ('number = "1e5"', "number = true", "atoms.number", "1.0e5"),
    ('number = "1e5"', 'number = "lots"', "atoms.number", "1.0e5"),
    ('number = "1e5"', "number = 1979-05-27", "atoms.number", "1.0e5"),
    ('number = "1e5"', 'number = "1e5"\nnumbr = 3', "atoms.numbr", 'did you mean "number"'),
    ('"Rb-87"', '"Rb-88"', "atoms.species", 'did you mean "Rb-87"'),
    ('"Rb-87"', '"Li-7"', "atoms.scattering_length", "0 a0"),
    ('"Rb-87"', "87", "atoms.species", "write"),
    ('species = "Rb-87"', "", "atoms", "mass"),
    ('species = "Rb-87"', 'mass = "86.9 u"', "atoms.scattering_length", "0 a0"),
    ('species = "Rb-87"', 'species = "Rb-87"\nmass = "85 u"', "atoms.mass", "leave the mass out"),
    ('species = "Rb-87"', 'species = "Rb-87"\nscattering_length = "5 Hz"', "atoms.scattering_length", "a0"),
    ('species = "Rb-87"', 'species = "Rb-87"\ntemperature = "-5 nK"', "atoms.temperature", "nK"),
    ("[trap.dipole]", "[trap]", "trap.kind", "[trap.dipole]"),
    ("[trap.dipole]", "[trap.atoms]", "trap.atoms", "dipole"),
    ("[trap.dipole]", '[trap."my trap"]', "trap.my trap", "dipole"),
    ('kind = "harmonic"\nfrequency = ["20', 'kind = "harmonc"\nfrequency = ["20', "trap.dipole.kind", "harmonic"),
    ('kind = "harmonic"\nfrequency = ["20', 'kind = "bowl"\nfrequency = ["20', "trap.dipole.kind", "harmonic, box"),
    ('kind = "harmonic"\nfrequency = ["20', 'frequency = ["20', "trap.dipole.kind", 'kind = "harmonic"'),
    ('kind = "harmonic"\nfrequency = ["20', 'kind = 3\nfrequency = ["20', "trap.dipole.kind", "harmonic, box"),
    (DIPOLE, '"20", "120 Hz", "120 Hz"', "trap.dipole.frequency[0]", "Hz"),
    (DIPOLE, '20, "120 Hz", "120 Hz"', "trap.dipole.frequency[0]", '"20 Hz"'),
    (DIPOLE, '"20 Hz", "120 um", "120 Hz"', "trap.dipole.frequency[1]", "rad/s"),
    (DIPOLE, '"20 Hz", "120 Hz", "-120 Hz"', "trap.dipole.frequency[2]", "Hz"),
    (DIPOLE, '"20 Hz", "120 Hz", "nan Hz"', "trap.dipole.frequency[2]", "Hz"),
    (DIPOLE, '"20 hz", "120 Hz", "120 Hz"', "trap.dipole.frequency[0]", 'did you mean "Hz"'),
    (DIPOLE, '"20 Hz", "120 Hz"', "trap.dipole.frequency", "frequency = ["),
    (f"[{DIPOLE}]", '"20 Hz"', "trap.dipole.frequency", "frequency = ["),
    (f"[{DIPOLE}]", "{ x = 3 }", "trap.dipole.frequency", "frequency = ["),
    (f"frequency = [{DIPOLE}]", "", "trap.dipole.frequency", "frequency = ["),
    (f"frequency = [{DIPOLE}]", f"frequncy = [{DIPOLE}]", "trap.dipole.frequncy", 'did you mean "frequency"'),
    (DIPOLE, '"0 Hz", "120 Hz", "120 Hz"', "trap", "numerics.extent"),
    (DIPOLE, DIPOLE + ']\ncentre = ["0 um", "0 um", "5"', "trap.dipole.centre[2]", "um"),
    (f"[{DIPOLE}]", f'[{DIPOLE}]\ncentre = "hold"', "trap.dipole.centre", 'did you mean "held"'),
    (f"[{DIPOLE}]", f"[{DIPOLE}]\nstrength = -1", "trap.dipole.strength", "write"),
    (f"[{DIPOLE}]", f"[{DIPOLE}]\nstrength = 0", "trap", "numerics.extent"),
    (f"[{DIPOLE}]", f'[{DIPOLE}]\nat = "clouds"', "trap.dipole.at", 'did you mean "cloud"'),
    (f"[{DIPOLE}]", f'[{DIPOLE}]\nat = "cloud"', "trap.dipole.at", "strength = 0"),
    (LENS_OFF, LENS_OFF + '\nat = "cloud"\ncentre = "held"', "trap.lens.centre", "leave"),
    (LENS_OFF, LENS_OFF + '\nat = "cloud"\ncentre = ["1 um", "0 um", "0 um"]', "trap.lens.centre", "leave"),
    ('direction = "-z"', 'direction = "down"', "gravity.direction", '"+x"'),
    ('direction = "-z"', 'value = "9.81"', "gravity.value", "m/s^2"),
    (HOLD, 'duration = "2 ms"', "sequence[0].stage", 'stage = "hold"'),
    (HOLD, 'stage = "holds"\nduration = "2 ms"', "sequence[0].stage", 'did you mean "hold"'),
    (HOLD, 'stage = "hold"', "sequence.hold.duration", "duration ="),
    (HOLD, 'stage = "hold"\nduration = "0 ms"', "sequence.hold.duration", "longer"),
    (HOLD, 'stage = "hold"\nduration = "-2 ms"', "sequence.hold.duration", "longer"),
    (HOLD, 'stage = "hold"\nduration = "2 mm"', "sequence.hold.duration", "ms"),
    (HOLD, HOLD + '\nname = "flash"', "sequence[4].name", "name of its own"),
    (HOLD, HOLD + '\nname = "two words"', "sequence[0].name", "expansion"),
    (HOLD, HOLD + '\npictures = ["3 ms"]', "sequence.hold.pictures[0]", "earlier"),
    (HOLD, HOLD + '\npictures = "1 ms"', "sequence.hold.pictures", "pictures = ["),
    (RAMP_TO, "", "sequence.ramp.to", "to ="),
    (RAMP_TO, "to = {}", "sequence.ramp.to", "name an entry"),
    (RAMP_TO, 'to = "dipole"', "sequence.ramp.to", "dipole.frequency"),
    (RAMP_TO, 'to = { "dipol.frequency" = 3 }', "sequence.ramp.to.dipol.frequency", 'did you mean "dipole.frequency"'),
    (RAMP_TO, 'to = { "dipole.frequncy" = 3 }', "sequence.ramp.to.dipole.frequncy", 'did you mean "dipole.frequency"'),
    (RAMP_TO, 'to = { "dipole.at" = "cloud" }', "sequence.ramp.to.dipole.at", "strength"),
    (RAMP_TO, 'to = { "dipole" = 3 }', "sequence.ramp.to.dipole", "of dipole one can change"),
    (RAMP_TO, 'to = { "gravity.value" = "1 m/s^2" }', "sequence.ramp.to.gravity.value", "parts of this plan"),
    (RAMP_TO, 'to = { "dipole.strength" = "1 Hz" }', "sequence.ramp.to.dipole.strength", "leave the unit out"),
    (RAMP_TO, 'to = { "dipole.strength" = { value = 1, delay = "6 ms" } }',
     "sequence.ramp.to.dipole.strength.delay", "earlier"),
    (RAMP_TO, 'to = { "dipole.strength" = { value = 1, delay = "1 ms", duration = "5 ms" } }',
     "sequence.ramp.to.dipole.strength.duration", "shorter"),
    (RAMP_TO, 'to = { "dipole.strength" = { delay = "1 ms" } }', "sequence.ramp.to.dipole.strength.value", "value ="),
    (RAMP_TO, 'to = { "dipole.strength" = { value = 1, shpe = "linear" } }',
     "sequence.ramp.to.dipole.strength.shpe", 'did you mean "shape"'),
    (RAMP_TO, RAMP_TO + '\nshape = "smoth"', "sequence.ramp.shape", 'did you mean "smooth"'),
    (RAMP_TO, RAMP_TO + '\nshape = "exponential"', "sequence.ramp.time_constant", "time_constant ="),
    (RAMP_TO, RAMP_TO + '\ntime_constant = "1 ms"', "sequence.ramp.time_constant", "exponential"),
    (RAMP_TO, 'to = { "dipole.strength" = { value = 1, shape = "exponential" } }',
     "sequence.ramp.to.dipole.strength.time_constant", "time_constant ="),
    (RAMP_TO, 'to = { "lens.frequency" = ["1 Hz", "1 Hz", "1 Hz"] }', "sequence.ramp.to.lens.frequency",
     '"lens.strength" = 1'),
    (RAMP_TO, 'to = { "lens.frequency" = ["1 Hz", "1 Hz", "1 Hz"], "lens.strength" = 0 }',
     "sequence.ramp.to.lens.frequency", '"lens.strength" = 1'),
    ('["0 mm/s", "0 mm/s", "3.2 mm/s"]', '"3 mm/s"', "sequence.kick.velocity", "velocity = ["),
    ('["0 mm/s", "0 mm/s", "3.2 mm/s"]', '["0 mm/s", "0 mm/s", "3 mm"]', "sequence.kick.velocity[2]", "mm/s"),
    ('stage = "kick"', 'stage = "kick"\nduration = "1 ms"', "sequence.kick.duration", "velocity"),
    ('stage = "kick"', 'stage = "kick"\npictures = ["1 ms"]', "sequence.kick.pictures[0]", "earlier"),
    (SWITCH, 'off = ["dipol"]', "sequence.release.off[0]", "parts of this plan: dipole"),
    (SWITCH, 'off = ["gravity"]', "sequence.release.off[0]", "parts of this plan"),
    (SWITCH, "off = []", "sequence.release.off", "name a part"),
    (SWITCH, "off = [3]", "sequence.release.off[0]", "write"),
    (SWITCH, 'switch_off = "30 us"', "sequence.release.switch_off", "table"),
    (SWITCH, 'switch_off = { shape = "linear" }', "sequence.release.switch_off.duration", "duration ="),
    (SWITCH, 'switch_off = { shape = "exponential" }', "sequence.release.switch_off.time_constant", "time_constant ="),
    (SWITCH, 'switch_off = { duration = "30 ms" }', "sequence.release.switch_off.duration", "shorter"),
    (SWITCH, 'switch_off = { duration = "30 us", time_constant = "1 us" }',
     "sequence.release.switch_off.time_constant", "exponential"),
    (PULSE_TO, 'to = { "lens.strength" = { value = 1, shape = "linear" } }',
     "sequence.flash.to.lens.strength.shape", "ramp"),
    (PULSE_TO, 'to = { "lens.strength" = -1 }', "sequence.flash.to.lens.strength", "write"),
    ('accuracy = "normal"', 'accuracy = "finest"', "numerics.accuracy", 'did you mean "fine"'),
    ('accuracy = "normal"', 'axes = ["wave", "radial", "wave"]', "numerics.axes", '"radial", "radial"'),
    ('accuracy = "normal"', 'axes = "ful"', "numerics.axes", 'did you mean "full"'),
    ('accuracy = "normal"', "points = [64, 64.5, 64]", "numerics.points[1]", "64"),
    ('accuracy = "normal"', "points = [64, -1, 64]", "numerics.points[1]", "64"),
    ('accuracy = "normal"', 'extent = ["1 um", "0 um", "auto"]', "numerics.extent[1]", "um"),
    ('accuracy = "normal"', 'precision = "single"', "numerics.precision", "double"),
    ('accuracy = "normal"', "threads = true", "numerics.threads", "64"),
    ('accuracy = "normal"', 'memory = "4 Gb"', "numerics.memory", 'did you mean "GB"'),
    ('at = ["1 ms"]', 'at = ["1 s"]', "track.at[0]", "earlier"),
    ('at = ["1 ms"]', 'at = ["1"]', "track.at[0]", "ms"),
]


def test_the_plan_is_good_before_it_is_broken():
    assert plan_from_text(GOOD).title == "invented"


@pytest.mark.parametrize(("old", "new", "path", "way_out"), BROKEN, ids=lambda item: item[:40])
def test_a_broken_plan_names_the_path_and_the_way_out(old, new, path, way_out):
    assert GOOD.count(old) == 1, "the row must break one place"
    blocks = complaints(GOOD.replace(old, new))
    about = [block for block in blocks if block[0] == path or block[0].startswith(f"{path}: got ")]
    assert about, f"nobody complains about {path}: {blocks}"
    _, rule, hint = about[0]
    assert rule and hint.startswith("-> ")
    assert way_out in hint


def test_the_value_given_is_shown():
    assert complaints(GOOD.replace('"20 Hz"', '"20 um"'))[0][0] == 'trap.dipole.frequency[0]: got "20 um"'


def test_one_slip_makes_one_complaint():
    takes_more_away = ("[atom]", "[trap]", "[trap.atoms]", '[trap."my trap"]', f"[{DIPOLE}]\nstrength = 0",
                       "kind = 3", 'at = "cloud"')
    for old, new, *_ in BROKEN:
        if not new.startswith(takes_more_away) and not new.endswith(takes_more_away):
            assert len(complaints(GOOD.replace(old, new))) == 1, (old, new)


def test_all_complaints_come_at_once_in_file_order():
    text = GOOD
    for old, new in [('number = "1e5"', "number = 0"), ('"20 Hz"', '"20"'), ('duration = "20 ms"', 'duration = "0 s"'),
                     ('"0 mm/s", "0 mm/s"', '"0", "0 mm"'), ('accuracy = "normal"', 'accuracy = "best"'),
                     ('title = "invented"', "[plot]")]:
        text = text.replace(old, new)
    assert [block[0].partition(":")[0] for block in complaints(text)] == [
        "plot", "atoms.number", "trap.dipole.frequency[0]", "sequence.kick.velocity[0]", "sequence.kick.velocity[1]",
        "sequence.release.duration", "numerics.accuracy",
    ]


def test_a_sequence_that_is_not_a_list_of_stages_is_refused():
    bare = '[atoms]\nspecies = "Rb-87"\nnumber = 5\n[trap.t]\nkind = "harmonic"\nfrequency = ["1 Hz", "1 Hz", "1 Hz"]\n'
    assert complaints(bare + '[sequence]\nstage = "hold"')[0][2] == "-> write [[sequence]] for each"
    assert complaints('sequence = [3]\n' + bare)[0][0] == "sequence: got [3]"
    assert complaints('trap = 3\n' + bare.partition("[trap")[0])[0][0] == "trap: got 3"


def test_atoms_that_fall_along_a_uniform_direction_are_refused():
    text = GOOD.replace('"120 Hz", "120 Hz"]\n\n[trap.lens]', '"120 Hz", "0 Hz"]\n\n[trap.lens]')
    text = text.replace('accuracy = "normal"', 'extent = ["auto", "auto", "40 um"]')
    blocks = complaints(text)
    assert blocks[0][:2] == ["trap", "the atoms fall along z and nothing holds them at the start"]
    assert "levitate" in blocks[0][2]


def test_a_plan_without_any_trap_is_refused():
    assert "numerics.extent" in complaints('[atoms]\nspecies = "Rb-87"\nnumber = 5')[0][2]


def test_the_centre_of_a_part_on_the_cloud_cannot_be_changed():
    text = GOOD.replace(LENS_OFF, LENS_OFF + '\nat = "cloud"')
    text = text.replace(PULSE_TO, 'to = { "lens.centre" = ["0 um", "0 um", "0 um"] }')
    assert complaints(text)[0][0] == "sequence.flash.to.lens.centre"


def test_a_part_that_was_on_before_may_be_ramped_while_it_is_off():
    text = GOOD.replace('"lens.strength" = 1', '"dipole.strength" = 0.5')
    text += '[[sequence]]\nstage = "ramp"\nduration = "1 ms"\nto = { "dipole.frequency" = ["1 Hz", "1 Hz", "1 Hz"] }'
    assert plan_from_text(text).sequence[-1].name == "ramp_2"


def spots(node: object, path: tuple = ()) -> list[tuple]:
    """The path of every value inside a tree."""
    inside = node.items() if isinstance(node, dict) else enumerate(node) if isinstance(node, list) else ()
    return [spot for key, inner in inside for spot in ((*path, key), *spots(inner, (*path, key)))]


words = st.sampled_from(["harmonic", "ramp", "release", "1 Hz", "5 ms", "held", "cloud", "dipole.strength", "auto"])
leaves = st.none() | st.booleans() | st.integers() | st.floats() | st.text(max_size=8) | words
values = st.recursive(leaves, lambda inner: st.lists(inner, max_size=4) | st.dictionaries(
    words | st.text(max_size=6) | st.sampled_from(["value", "stage", "kind", "to", "name", "duration"]), inner,
    max_size=4), max_leaves=6)


@given(st.lists(st.tuples(st.sampled_from(spots(tomllib.loads(GOOD))), values), min_size=1, max_size=3))
def test_whatever_stands_in_a_plan_it_is_read_or_complained_about(changes):
    tree = tomllib.loads(GOOD)
    for (*path, last), value in changes:
        node = tree
        try:
            for key in path:
                node = node[key]
        except (TypeError, LookupError):
            continue  # an earlier change took this place away
        if isinstance(node, dict if isinstance(last, str) else list) and (isinstance(last, str) or last < len(node)):
            node[last] = copy.deepcopy(value)
    plan, complaints = assemble(tree, name="invented")
    assert isinstance(plan, Plan) != bool(complaints)
    assert all(c.rule and c.way_out for c in complaints)
