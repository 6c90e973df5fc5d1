"""Broken plans of light: one slip of the pen makes one complaint, with a way out that fits the entry.

Every row is an invented slip: a good plan with one thing replaced.
"""

from __future__ import annotations

import math

import pytest
import scipy.constants

from broken.reading import complaints
from trapsim.plan.reader import plan_from_text

LIGHT = """
[atoms]
species = "Rb-87"
number = "1e4"

[trap.dipole]
kind = "harmonic"
frequency = ["20 Hz", "60 Hz", "60 Hz"]

[trap.light]
kind = "lattice"
wavelength = "1064 nm"
depth = "12 Er"
strength = 0

[trap.walls]
kind = "box"
shape = "cylinder"
size = ["40 um", "30 um", "30 um"]
height = "200 nK"
edge = "1 um"
strength = 0

[trap.beam]
kind = "beam"
direction = "x"
waist = "50 um"
wavelength = "1064 nm"
depth = "8 uK"
strength = 0

[[sequence]]
stage = "kick"
recoils = 2
of = "light"

[[sequence]]
stage = "pulse"
duration = "10 us"
to = { "light.strength" = 1 }

[camera.side]
view = "y"
pixel = "6.5 um"
magnification = 2.0
"""

OF_LIGHT = [
    # the same, about boxes, lattices, beams, recoils and cameras
    ('wavelength = "1064 nm"\ndepth = "12 Er"', 'depth = "12 Er"', "trap.light.depth", "wavelength or spacing"),
    ('wavelength = "1064 nm"\ndepth = "12 Er"', 'depth = "5 kHz"', "trap.light.wavelength", "spacing ="),
    ('"12 Er"', '"12 Er"\nspacing = "532 nm"', "trap.light.wavelength", "spacing ="),
    ('"12 Er"', '"12"', "trap.light.depth", "Er"),
    ('"12 Er"', "12", "trap.light.depth", "Er"),
    ('"12 Er"', '"12 er"', "trap.light.depth", 'did you mean "Er"'),
    ('"12 Er"', '"-12 Er"', "trap.light.depth", 'phase = "90 deg"'),
    ('"12 Er"', '"12 Er"\nphase = "1 Er"', "trap.light.phase", "deg"),
    ('"12 Er"', '"12 Er"\ndetuning = "15"', "trap.light.detuning", "kHz"),
    ('"12 Er"', '"12 Er"\naxis = "w"', "trap.light.axis", 'axis = "x"'),
    ('"12 Er"', '"12 Er"\nwavelenght = "1 um"', "trap.light.wavelenght", 'did you mean "wavelength"'),
    ('"1064 nm"\ndepth = "12 Er"', '"0 nm"\ndepth = "5 kHz"', "trap.light.wavelength", "1064 nm"),
    ('"200 nK"', '"5 Er"', "trap.walls.height", "lattice"),
    ('"200 nK"', '"-5 nK"', "trap.walls.height", "200 nK"),
    ('"200 nK"', "200", "trap.walls.height", '"200 nK"'),
    ('edge = "1 um"', 'edge = "20 um"', "trap.walls.edge", "smaller"),
    ('edge = "1 um"', 'edge = "0 um"', "trap.walls.edge", "1 um"),
    ('edge = "1 um"', 'edge = "hard"', "trap.walls.edge", "1 um"),
    ('edge = "1 um"', "", "trap.walls.edge", 'edge = "1 um"'),
    ('"30 um", "30 um"]', '"30 um", "20 um"]', "trap.walls.size", "cuboid"),
    ('["40 um", "30 um", "30 um"]', '"40 um"', "trap.walls.size", 'size = ["40 um"'),
    ('"cylinder"', '"cylindre"', "trap.walls.shape", 'did you mean "cylinder"'),
    ('depth = "8 uK"', 'depth = "8 uK"\npower = "1 W"\npolarisability = "687 au"', "trap.beam.depth", "power ="),
    ('depth = "8 uK"', "", "trap.beam.depth", "power ="),
    ('depth = "8 uK"', 'power = "100 mW"', "trap.beam.polarisability", "687 au"),
    ('depth = "8 uK"', 'polarisability = "687 au"', "trap.beam.power", "100 mW"),
    ('depth = "8 uK"', 'power = "100 mW"\npolarisability = 687', "trap.beam.polarisability", "687 au"),
    ('depth = "8 uK"', 'depth = "5 Er"', "trap.beam.depth", "lattice"),
    ('direction = "x"', "direction = [0, 0, 0]", "trap.beam.direction", "[1, 1, 0]"),
    ('direction = "x"', "direction = [1, 1]", "trap.beam.direction", "direction = [1, 1, 0]"),
    ('direction = "x"', 'direction = "up"', "trap.beam.direction", "direction = [1, 1, 0]"),
    ('waist = "50 um"', "", "trap.beam.waist", 'waist = "50 um"'),
    ('of = "light"', 'of = "lihgt"', "sequence.kick.of", "light"),
    ('of = "light"', 'of = "dipole"', "sequence.kick.of", "light"),
    ('of = "light"', "", "sequence.kick.of", "light"),
    ('of = "light"', 'of = "light"\nvelocity = ["1 mm/s", "0 mm/s", "0 mm/s"]', "sequence.kick.velocity", "recoils = 2"),
    ('recoils = 2\nof = "light"', "", "sequence.kick.velocity", "recoils = 2"),
    ("recoils = 2", 'velocity = ["1 mm/s", "0 mm/s", "0 mm/s"]', "sequence.kick.of", "leave it out"),
    ("recoils = 2", 'recoils = "2 mm/s"', "sequence.kick.recoils", "leave the unit out"),
    ('"light.strength" = 1', '"light.axis" = "y"', "sequence.pulse.to.light.axis", "depth, detuning, phase"),
    ('"light.strength" = 1', '"light.depth" = "3"', "sequence.pulse.to.light.depth", "Er"),
    ('"light.strength" = 1', '"beam.depth" = "3 Er"', "sequence.pulse.to.beam.depth", "lattice"),
    ('"light.strength" = 1', '"beam.power" = "3 mW"', "sequence.pulse.to.beam.depth", "power ="),
    ('"light.strength" = 1', '"walls.size" = ["40 um", "30 um", "20 um"]', "sequence.pulse.to.walls.size", "cuboid"),
    ('pixel = "6.5 um"', "", "camera.side.pixel", 'pixel = "6.5 um"'),
    ('pixel = "6.5 um"', "pixel = 6.5", "camera.side.pixel", '"6.5 um"'),
    ('pixel = "6.5 um"', 'pixel = "0 um"', "camera.side.pixel", "6.5 um"),
    ("magnification = 2.0", "", "camera.side.magnification", "magnification = 2.0"),
    ("magnification = 2.0", "magnification = 0", "camera.side.magnification", "2.0"),
    ("magnification = 2.0", 'magnification = "2 um"', "camera.side.magnification", "leave the unit out"),
    ('view = "y"', "", "camera.side.view", "view ="),
    ('view = "y"', 'view = "-y"', "camera.side.view", 'did you mean "y"'),
    ('view = "y"', 'view = "y"\nturn = 45', "camera.side.turn", "deg"),
    ('view = "y"', 'view = "y"\nsize = 512', "camera.side.size", "size = [512, 512]"),
    ('view = "y"', 'view = "y"\nsize = [0, 512]', "camera.side.size[0]", "512"),
    ('view = "y"', 'view = "y"\nsize = [512, 9.5]', "camera.side.size[1]", "512"),
    ('view = "y"', 'view = "y"\nfollow = 1', "camera.side.follow", "true or false"),
    ('view = "y"', 'view = "y"\nfollow = true\naim = ["1 um", "0 um", "0 um"]', "camera.side.aim", "follow = false"),
    ('view = "y"', 'view = "y"\nzoom = 3', "camera.side.zoom", "known here"),
    ("[camera.side]", "[camera]", "camera", "[camera.side]"),
    ("[camera.side]", '[camera."my side"]', "camera.my side", "side"),
]


def test_the_plan_of_light_is_good_before_it_is_broken():
    assert list(plan_from_text(LIGHT).camera) == ["side"]


@pytest.mark.parametrize(("old", "new", "path", "way_out"), OF_LIGHT, ids=lambda item: item[:40])
def test_one_slip_about_light_is_one_complaint_with_a_way_out_that_fits(old, new, path, way_out):
    assert LIGHT.count(old) == 1, "the row must break one place"
    (block,) = complaints(LIGHT.replace(old, new))
    assert block[0] == path or block[0].startswith(f"{path}: got ")
    assert way_out in block[2]


def test_recoil_energies_are_understood_where_the_lattice_has_them():
    """E_R/h of rubidium at 1064 nm is 2.02781 kHz (independent calculation); a detuning may be written in it."""
    light = plan_from_text(LIGHT.replace('"12 Er"', '"12 Er"\ndetuning = "4 Er"')).trap["light"]
    assert light.detuning / (2 * math.pi) == pytest.approx(4 * 2027.81, rel=1e-5)
    assert light.depth / scipy.constants.h == pytest.approx(12 * 2027.81, rel=1e-5)
