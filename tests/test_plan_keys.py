"""The keys of a plan, its reference and its JSON schema.

The schema is checked with a small validator of the few words it uses, written after the JSON Schema
specification, draft 2020-12 (json-schema.org).
"""

from __future__ import annotations

import dataclasses
import json
import re
import tomllib
from pathlib import Path

import pytest

from trapsim.errors import PlanError
from trapsim.fields import entries
from trapsim.plan import plan as plan_module
from trapsim.plan.keys import reference, schema, tables
from trapsim.plan.plan import differences
from trapsim.plan.reader import plan_from_text

PLANS = Path(__file__).parent / "plans"
FULL = (PLANS / "full.toml").read_text(encoding="utf-8")
SHORT = (PLANS / "short.toml").read_text(encoding="utf-8")


def test_a_key_is_twelve_hex_digits():
    plan = plan_from_text(FULL)
    assert re.fullmatch("[0-9a-f]{12}", plan.key) and re.fullmatch("[0-9a-f]{12}", plan.march_key)


@pytest.mark.parametrize("changes", [
    {"atoms.number": 100000},
    {"atoms.number": "1.0(3)e5"},
    {"atoms.species": "87Rb"},
    {"atoms.species": None, "atoms.mass": "86.90918053 u"},
    {"atoms.scattering_length": None},
    {"trap.dipole.frequency": ["0.02 kHz", "120000 mHz", "0.12 kHz"]},
    {"sequence.hold.duration": "2000 us"},
    {"sequence.release.pictures": ["5 ms", "0.01 s", "20000 us", "5 ms"]},
    {"sequence.release.off": ["lens", "dipole"]},
    {"sequence.ramp.to.dipole.frequency.duration": "5 ms"},
    {"sequence.flash.to.lens.strength": 1},
    {"trap.lens.strength": -0.0},
    {"gravity": {}},
    {"gravity.value": "980.665 cm/s^2"},
    {"title": "other"},
    {"numerics.threads": 7},
    {"numerics.memory": None},
    {"numerics.ground": "conjugate gradient"},
])
def test_equal_plans_have_equal_keys_however_they_are_written(changes):
    plan, other = plan_from_text(FULL, "one"), plan_from_text(FULL, "two", changes)
    assert (other.key, other.march_key) == (plan.key, plan.march_key)
    assert differences(plan.resolved(), other.resolved()) == []


@pytest.mark.parametrize("changes", [
    {"atoms.number": "1.01e5"},
    {"atoms.scattering_length": "100.5 a0"},
    {"atoms.species": "Rb-85"},
    {"trap.dipole.frequency[1]": "120.000001 Hz"},
    {"trap.dipole.centre": ["0 um", "0 um", "0 um"]},
    {"trap.dipole.strength": 0.9},
    {"trap.lens.at": "centre"},
    {"trap.levitation.acceleration[0]": "1 um/s^2"},
    {"gravity.direction": "-y"},
    {"gravity.value": "9.81 m/s^2"},
    {"sequence.hold.duration": "2.1 ms"},
    {"sequence.hold.name": "wait"},
    {"sequence.hold.pictures": ["1 ms"]},
    {"sequence.ramp.shape": "linear"},
    {"sequence.ramp.to.dipole.frequency[0]": "11 Hz"},
    {"sequence.ramp.to.levitation.strength.delay": "1.1 ms"},
    {"sequence.ramp.to.levitation.strength.duration": "2.1 ms"},
    {"sequence.ramp.to.levitation.strength.shape": "smooth"},
    {"sequence.kick.velocity[0]": "1 um/s"},
    {"sequence.release.off": ["dipole"]},
    {"sequence.release.switch_off": None},
    {"sequence.release.switch_off.time_constant": "31 us"},
    {"sequence.flash.to.lens.strength": 0.9},
    {"numerics.accuracy": "draft"},
    {"numerics.ground": "imaginary time"},
    {"numerics.axes": "full"},
    {"numerics.points[0]": 80},
    {"numerics.extent[1]": "201 um"},
    {"numerics.frame": "lab"},
    {"track.at[0]": "1.6 ms"},
], ids=lambda changes: next(iter(changes)))
def test_keys_differ_when_anything_physical_differs(changes):
    plan, other = plan_from_text(FULL), plan_from_text(FULL, changes=changes)
    assert other.key != plan.key and other.march_key != plan.march_key
    assert differences(plan.resolved(), other.resolved())


def test_gravity_enters_the_key():
    other = plan_from_text(SHORT, changes={"gravity": {}})
    assert other.key != plan_from_text(SHORT).key


def test_the_version_of_the_physics_enters_the_key(monkeypatch):
    before = plan_from_text(SHORT).key
    monkeypatch.setattr(plan_module, "PHYSICS_VERSION", plan_module.PHYSICS_VERSION + 1)
    assert plan_from_text(SHORT).key != before


def test_what_differs_between_two_plans_is_said():
    one, two = plan_from_text(FULL), plan_from_text(FULL, changes={"sequence.hold.duration": "3 ms", "title": "x"})
    assert differences(one.resolved(), two.resolved()) == ["sequence[0].duration: 0.002 s / 0.003 s"]


def test_the_resolved_plan_is_plain_data_with_units():
    resolved = plan_from_text(FULL).resolved()
    again = json.loads(json.dumps(resolved, allow_nan=False))
    assert again == resolved
    assert again["atoms"]["mass"]["unit"] == "kg"
    assert again["trap"]["dipole"]["frequency"]["unit"] == "rad/s"
    assert again["sequence"][1]["to"]["atoms.scattering_length"]["value"]["unit"] == "m"


def test_the_reference_tells_of_every_entry():
    text = reference()
    for name, cls in tables().items():
        section = reference(name)
        assert section.strip() in text
        for entry, about in entries(cls).items():
            lines = section.splitlines()
            assert f"  {entry}" in lines, (name, entry)
            assert about.about.split()[0] in section
            for inner in entries(about.of) if about.of else ():
                assert f"  {entry}.{inner}" in lines


def test_the_reference_of_one_path():
    assert reference("atoms.number").splitlines()[0] == "  atoms.number"
    assert 'default "9.80665 m/s^2"' in " ".join(reference("gravity.value").split())
    assert 'default ["0 um", "0 um", "0 um"]' in " ".join(reference("trap.harmonic.centre").split())
    assert "sequence.release.switch_off.shape" in reference("sequence.release.switch_off")
    assert 'stage = "kick"' in reference("sequence") and 'stage = "hold"' in reference("sequence")


def test_the_reference_tells_of_cameras():
    assert reference("camera").startswith("[camera.NAME]")
    assert reference("camera.pixel").splitlines()[0] == "  camera.pixel"


CAMERA = '\n[camera.side]\nview = "y"\npixel = "6.5 um"\nmagnification = 2.0\nsize = [192, 64]\n'


def test_the_schema_knows_cameras():
    assert fits(tomllib.loads(SHORT + CAMERA), schema())
    for old, new in [('"y"', '"w"'), ('pixel = "6.5 um"\n', ""), ("[192, 64]", "[192]"), ("2.0", "true")]:
        assert not fits(tomllib.loads(SHORT + CAMERA.replace(old, new)), schema()), new


@pytest.mark.parametrize(("path", "near"), [
    ("atoms.numbr", "atoms.number"), ("numeric", "numerics"), ("trap.harmonc.frequency", "trap.harmonic.frequency"),
])
def test_an_unknown_path_of_the_reference_offers_the_nearest(path, near):
    with pytest.raises(PlanError, match=f"did you mean {re.escape(near)}\\?"):
        reference(path)


def fits(value: object, rule: dict) -> bool:
    """Whether a value satisfies a schema."""
    types = {"object": dict, "array": list, "string": str, "integer": int, "number": (int, float), "boolean": bool}
    wanted = rule.get("type", [])
    names = wanted if isinstance(wanted, list) else [wanted]
    if names and not any(isinstance(value, types[name]) for name in names):
        return False
    if isinstance(value, bool) and names and "boolean" not in names:
        return False
    tests = {
        "const": lambda r: value == r,
        "enum": lambda r: value in r,
        "anyOf": lambda r: any(fits(value, inner) for inner in r),
        "oneOf": lambda r: sum(fits(value, inner) for inner in r) == 1,
        "minimum": lambda r: value >= r,
        "maximum": lambda r: value <= r,
        "minItems": lambda r: len(value) >= r,
        "maxItems": lambda r: len(value) <= r,
        "minProperties": lambda r: len(value) >= r,
        "items": lambda r: all(fits(item, r) for item in value),
        "required": lambda r: all(name in value for name in r),
        "propertyNames": lambda r: all(fits(name, r) for name in value),
        "pattern": lambda r: re.search(r, value) is not None,
        "properties": lambda r: all(fits(value[name], inner) for name, inner in r.items() if name in value),
    }
    known = {"$schema", "title", "description", "examples", "type", "additionalProperties", *tests}
    assert set(rule) <= known, set(rule) - known
    if not all(test(rule[word]) for word, test in tests.items() if word in rule):
        return False
    more = rule.get("additionalProperties", True)
    extra = [v for k, v in value.items() if k not in rule.get("properties", {})] if isinstance(value, dict) else []
    return not extra if more is False else more is True or all(fits(v, more) for v in extra)


def test_the_schema_is_json_and_names_its_draft():
    assert json.loads(json.dumps(schema()))["$schema"] == "https://json-schema.org/draft/2020-12/schema"


@pytest.mark.parametrize("text", [FULL, SHORT], ids=["full", "short"])
def test_the_schema_accepts_a_good_plan(text):
    assert fits(tomllib.loads(text), schema())


@pytest.mark.parametrize(("old", "new"), [
    ("[atoms]", "[atom]"), ("number =", "numbr ="), ('number = "1.0(1)e5"', ""), ('"20 Hz"', "20"),
    ('"20 Hz", "120(2) Hz"', '"20 Hz"'), ('kind = "gradient"', 'kind = "box"'), ('stage = "kick"', 'stage = "kck"'),
    ('accuracy = "fine"', 'accuracy = "best"'), ("threads = 2", "threads = -2"), ("threads = 2", "threads = 2.5"),
    ('centre = "held"', 'centre = "here"'), ("[trap.lens]", '[trap."my lens"]'),
    ('"hold"\nduration = "2 ms"', '"hold"'),
    ('direction = "-z"', 'direction = "z"'), ("strength = 0", "strength = true"),
    ('{ shape = "exponential"', '{ shpe = "exponential"'), ('delay = "1 ms"', 'dely = "1 ms"'),
])
def test_the_schema_refuses_a_broken_plan(old, new):
    assert FULL.count(old) == 1
    assert not fits(tomllib.loads(FULL.replace(old, new)), schema())


def test_the_schema_wants_atoms():
    assert not fits({"title": "nothing else"}, schema())


def test_every_entry_of_every_class_stands_in_the_schema():
    whole = schema()["properties"]
    parts = {p["properties"]["kind"]["const"]: p for p in whole["trap"]["additionalProperties"]["oneOf"]}
    stages = {s["properties"]["stage"]["const"]: s for s in whole["sequence"]["items"]["oneOf"]}
    for name, cls in tables().items():
        table, _, kind = name.partition(".")
        named = {"trap": parts, "sequence": stages, "camera": {"camera": whole["camera"]["additionalProperties"]}}
        here = named.get(table, whole)[kind or table]
        fields = {f.name for f in dataclasses.fields(cls) if "entry" in f.metadata}
        assert fields <= set(here["properties"])
        needed = {f.name for f in dataclasses.fields(cls) if f.name in fields and f.default is dataclasses.MISSING}
        assert needed == set(here["required"]) - {"kind", "stage"}
