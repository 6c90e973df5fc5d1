"""Plans and command lines that cannot work, each with the exit code, the place and the way out that must be named.

All are invented slips: of the pen, of the hand on the keyboard, of the file manager. `GOOD` is the plan they spoil.
"""

from __future__ import annotations

from typing import NamedTuple

GOOD = """\
title = "Invented: a small round cloud, pushed and released"

[atoms]
species = "Rb-87"
number = "1e4"

[trap.dipole]
kind = "harmonic"
frequency = ["60 Hz", "90 Hz", "90 Hz"]

[trap.lens]
kind = "harmonic"
frequency = ["10 Hz", "10 Hz", "10 Hz"]
strength = 0

[gravity]
direction = "-z"

[[sequence]]
stage = "hold"
duration = "1 ms"

[[sequence]]
stage = "release"
duration = "5 ms"

[numerics]
accuracy = "draft"
threads = 1
"""


class Slip(NamedTuple):
    """One thing replaced in `GOOD`: what, by what, the place that is named, a word of the way out."""

    old: str
    new: str
    place: str
    way_out: str


DIPOLE = '["60 Hz", "90 Hz", "90 Hz"]'
HOLD = 'stage = "hold"\nduration = "1 ms"'

#: Read, and refused with exit code 2.
SLIPS = {
    "unknown key": Slip("threads", "thread", "numerics.thread", 'did you mean "threads"'),
    "unknown table": Slip("[gravity]", "[gravitation]", "gravitation", 'did you mean "gravity"'),
    "missing unit": Slip('["60 Hz"', '["60"', "trap.dipole.frequency[0]", "Hz"),
    "bare number": Slip('["60 Hz"', "[60", "trap.dipole.frequency[0]", '"60 Hz"'),
    "wrong dimension": Slip('["60 Hz"', '["60 um"', "trap.dipole.frequency[0]", "rad/s"),
    "unit unsaid": Slip('["60 Hz"', '["60 1/s"', "trap.dipole.frequency[0]", "Hz"),
    "unit misspelt": Slip('"1 ms"', '"1 msec"', "sequence.hold.duration", "ms"),
    "negative frequency": Slip('["60 Hz"', '["-60 Hz"', "trap.dipole.frequency[0]", "Hz"),
    "negative number": Slip('"1e4"', "-10000", "atoms.number", "1e5"),
    "no atoms at all": Slip('"1e4"', "0", "atoms.number", "1e5"),
    "nan": Slip('"1e4"', "nan", "atoms.number", "number"),
    "nan in a text": Slip('["60 Hz"', '["nan Hz"', "trap.dipole.frequency[0]", "Hz"),
    "inf": Slip('"1e4"', "inf", "atoms.number", "number"),
    "inf in a text": Slip('"1 ms"', '"inf ms"', "sequence.hold.duration", "write it like"),
    "1e400": Slip('"1e4"', '"1e400"', "atoms.number", "exponent"),
    "1e400 as a number": Slip('"1e4"', "1e400", "atoms.number", "number"),
    "1e400 Hz": Slip('["60 Hz"', '["1e400 Hz"', "trap.dipole.frequency[0]", "exponent"),
    "decimal comma": Slip('["60 Hz"', '["60,5 Hz"', "trap.dipole.frequency[0]", "decimal point"),
    "zero duration": Slip('"1 ms"', '"0 ms"', "sequence.hold.duration", "take the stage out"),
    "negative duration": Slip('"5 ms"', '"-5 ms"', "sequence.release.duration", "longer"),
    "no duration": Slip(HOLD, 'stage = "hold"', "sequence.hold.duration", "duration ="),
    "part that is not there": Slip(
        HOLD, HOLD + '\n[[sequence]]\nstage = "pulse"\nduration = "1 ms"\nto = { "lense.strength" = 1 }',
        "sequence.pulse.to.lense.strength", "lens.strength",
    ),
    "release of nothing": Slip('"5 ms"', '"5 ms"\noff = ["dipol"]', "sequence.release.off[0]", "dipole"),
    "stage that is not there": Slip('"hold"', '"wait"', "sequence[0].stage", "hold, ramp"),
    "the same name twice": Slip(HOLD, HOLD + '\nname = "release"', "sequence[1].name", "name of its own"),
    "picture after the end": Slip('"5 ms"', '"5 ms"\npictures = ["6 ms"]', "sequence.release.pictures[0]", "earlier"),
    "kind that is not there": Slip(f'"harmonic"\nfrequency = {DIPOLE}', f'"harmonics"\nfrequency = {DIPOLE}',
                                   "trap.dipole.kind", "harmonic"),
    "two values of three": Slip(DIPOLE, '["60 Hz", "90 Hz"]', "trap.dipole.frequency", "frequency = ["),
    "untrapped direction": Slip(DIPOLE, '["60 Hz", "90 Hz", "0 Hz"]', "trap", "numerics.extent"),
    "nothing that holds": Slip(DIPOLE, DIPOLE + "\nstrength = 0", "trap", "numerics.extent"),
    "falls where it is not held": Slip('accuracy = "draft"', 'accuracy = "draft"\nextent = ["auto", "auto", "40 um"]\n'
                                       "[trap.flat]\nkind = \"harmonic\"\nfrequency = 3",
                                       "trap.flat.frequency", "frequency = ["),
    "unknown species": Slip('"Rb-87"', '"Rb-88"', "atoms.species", "Rb-87"),
    "text where a table is needed": Slip(f'[trap.dipole]\nkind = "harmonic"\nfrequency = {DIPOLE}',
                                         '[trap]\ndipole = "120 Hz"', "trap.dipole", "[trap.dipole]"),
    "table where a text is needed": Slip('"Rb-87"', '{ name = "Rb-87" }', "atoms.species", "write"),
    "stages as one table": Slip(f"[[sequence]]\n{HOLD}", f"[[ sequence ]]\n{HOLD}\n[sequence.more]\nlonger = true",
                                "sequence.hold.more", "known here"),
    "atoms as a text": Slip('[atoms]\nspecies = "Rb-87"\nnumber = "1e4"', "", "atoms", "[atoms]"),
    "radial axes on a plan that is not round": Slip(
        'accuracy = "draft"', 'accuracy = "draft"\naxes = ["radial", "radial", "wave"]', "numerics.axes", '"auto"'
    ),
    "one radial axis": Slip('accuracy = "draft"', 'accuracy = "draft"\naxes = ["wave", "wave", "radial"]',
                            "numerics.axes", "radial"),
    "radial axes in a lab frame under a push": Slip(
        'accuracy = "draft"', 'accuracy = "draft"\nframe = "lab"\naxes = ["wave", "radial", "radial"]',
        "numerics.axes", '"auto"',
    ),
    "one point in a trap": Slip('accuracy = "draft"', 'accuracy = "draft"\npoints = [1, 0, 0]', "numerics.points[0]",
                                '"auto"'),
    "hardly a point in a trap": Slip('accuracy = "draft"', 'accuracy = "draft"\naxes = "full"\npoints = [0, 4, 0]',
                                     "numerics.points[1]", '"auto"'),
    "memory too small": Slip('accuracy = "draft"', 'accuracy = "draft"\nmemory = "1 kB"', "numerics.memory", "allow"),
    "no memory": Slip('accuracy = "draft"', 'accuracy = "draft"\nmemory = "0 GB"', "numerics.memory", "write"),
    "more points than memory": Slip(
        'accuracy = "draft"', 'accuracy = "draft"\naxes = "full"\npoints = [4096, 4096, 4096]', "numerics.points",
        "fewer",
    ),
    "half a point": Slip('accuracy = "draft"', 'accuracy = "draft"\npoints = [9, 9.5, 9]', "numerics.points[1]",
                         "write"),
    "walls lower than the cloud": Slip(
        f'"harmonic"\nfrequency = {DIPOLE}',
        '"box"\nsize = ["30 um", "30 um", "30 um"]\nheight = "0.1 nK"\nedge = "1 um"', "trap", "higher",
    ),
    "hard walls around a cylinder": Slip(
        f'"harmonic"\nfrequency = {DIPOLE}',
        '"box"\nshape = "cylinder"\nsize = ["30 um", "30 um", "30 um"]\nedge = "hard"', "trap.dipole.edge",
        'edge = "1 um"',
    ),
    "hard walls that fade": Slip(
        f'"harmonic"\nfrequency = {DIPOLE}', '"box"\nsize = ["30 um", "30 um", "30 um"]\nstrength = 0.5\nedge = "hard"',
        "trap.dipole.strength", "leave strength out",
    ),
    "soft walls of no height": Slip(
        f'"harmonic"\nfrequency = {DIPOLE}', '"box"\nsize = ["30 um", "30 um", "30 um"]\nedge = "1 um"',
        "trap.dipole.height", 'height = "200 nK"',
    ),
    "wall axes without hard walls": Slip(
        'accuracy = "draft"', 'accuracy = "draft"\naxes = ["wall", "wave", "wave"]', "numerics.axes[0]", '"hard"',
    ),
    "beam too shallow for gravity": Slip(
        f'"harmonic"\nfrequency = {DIPOLE}', '"beam"\nwaist = "50 um"\nwavelength = "1064 nm"\ndepth = "3 uK"',
        "trap", "deeper",
    ),
    "beam that repels": Slip(
        f'"harmonic"\nfrequency = {DIPOLE}', '"beam"\nwaist = "50 um"\nwavelength = "1064 nm"\ndepth = "-3 uK"',
        "trap", "numerics.extent",
    ),
    "two lattices of different spacing": Slip(
        "[gravity]", '[trap.a]\nkind = "lattice"\nspacing = "532 nm"\ndepth = "5 Er"\n'
        '[trap.b]\nkind = "lattice"\nspacing = "700 nm"\ndepth = "5 Er"\n[gravity]', "trap", "same spacing",
    ),
    "an extent of half a lattice period too much": Slip(
        "threads = 1", 'threads = 1\nextent = ["4.3 um", "auto", "auto"]\n'
        '[trap.a]\nkind = "lattice"\nspacing = "532 nm"\ndepth = "5 Er"', "numerics.extent[0]", "4.256 um",
    ),
    "function without a function": Slip(
        "[gravity]", '[trap.ring]\nkind = "function"\nname = "ring"\ndetail = "1 um"\n[gravity]', "trap.ring",
        "functions=",
    ),
    "number of atoms out of this world": Slip('"1e4"', '"1e300"', "plan", "exponent"),
    "frequency out of this world": Slip('["60 Hz"', '["1e300 Hz"', "plan.toml", "exponent"),
    "strength out of this world": Slip(DIPOLE, DIPOLE + "\nstrength = 1e-300", "plan", "exponent"),
    "time out of this world": Slip('"5 ms"', '"1e300 s"', "plan", "exponent"),
    "gravity out of this world": Slip('"-z"', '"-z"\nvalue = "1e300 m/s^2"', "trap", "deeper"),
}

#: Contents of a file that is not a plan; refused with exit code 2.
FILES = {
    "empty": (b"", "the plan is empty", "[atoms]"),
    "blank lines and a remark": (b"\n\n# nothing yet\n", "the plan is empty", "[atoms]"),
    "picture": (b"\x89PNG\r\n\x1a\n\x00\x00\x00\rIHDR", "line 1", "UTF-8"),
    "zeros": (bytes(64), "binary", ".toml"),
    "UTF-16": ("title = 'x'".encode("utf-16"), "line 1", "UTF-8"),
    "Latin-1": (b"# fine so far\ntitle = \"W\xf6lkchen\"", "line 2", "UTF-8"),
    "JSON": (b'{"atoms": {"number": 5}}', "not TOML", "quoted"),
    "prose": (b"Please release the cloud.", "not TOML", "quoted"),
    "unclosed quote": (b'title = "half', "not TOML", "quoted"),
    "number without quotes": (b"[trap.dipole]\nfrequency = [20 Hz]", "line 2", "quoted"),
    "a name twice": (b"[atoms]\nnumber = 1\nnumber = 2", "not TOML", "once"),
    "only a title": (b"title = 'x'", "atoms", "[atoms]"),
    "nested beyond measure": (b"a = " + b"[" * 5000 + b"]" * 5000, "nested too deeply", "keys"),
}

#: Options that cannot work, put behind `check PLAN`; exit code 2.
OPTIONS = {
    "--set without a value": (["--set", "atoms.number"], "path=value", "atoms.number=2e5"),
    "--set without a path": (["--set", "=5"], "--set =5", "atoms.number=2e5"),
    "--set of nothing": (["--set", ""], "path=value", "atoms.number=2e5"),
    "--set of an unknown table": (["--set", "atom.number=5"], "atom.number", 'did you mean "atoms"'),
    "--set of an unknown entry": (["--set", "atoms.numbr=5"], "atoms.numbr", 'did you mean "number"'),
    "--set of an unknown part": (["--set", "trap.dipol.strength=1"], "trap.dipol.strength", 'did you mean "dipole"'),
    "--set of an unknown stage": (["--set", "sequence.hold_2.duration=1 ms"], "sequence.hold_2.duration", "hold"),
    "--set of a stage too many": (["--set", "sequence[7].duration=1 ms"], "sequence[7]", "stages of this plan"),
    "--set of a direction too many": (["--set", "trap.dipole.frequency[3]=1 Hz"], "trap.dipole.frequency[3]", "0 to 2"),
    "--set of something that is no path": (["--set", "atoms..number=5"], "atoms..number", "write it like"),
    "--set of the wrong unit": (["--set", "sequence.hold.duration=2 um"], "sequence.hold.duration", "ms"),
    "no threads": (["--threads", "0"], "--threads", "--threads 2"),
    "fewer threads than none": (["--threads", "-3"], "--threads", "--threads 2"),
    "a million threads": (["--threads", "1000000"], "numerics.threads", "write"),
}

#: Command lines that the reader of options refuses, after the plan's name is put in for PLAN; exit code 2.
COMMAND_LINES = {
    "no command": ([], "COMMAND"),
    "unknown command": (["calculate", "PLAN"], "calculate"),
    "no plan": (["run"], "PLAN"),
    "two plans": (["check", "PLAN", "PLAN"], "PLAN"),
    "unknown option": (["run", "PLAN", "--fast"], "--fast"),
    "half an option": (["run", "PLAN", "--forc"], "--forc"),
    "an option of another command": (["check", "PLAN", "--out", "x"], "--out"),
    "threads in words": (["run", "PLAN", "--threads", "two"], "two"),
    "an option without its value": (["run", "PLAN", "--out"], "--out"),
}
