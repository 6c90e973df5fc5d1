"""What a run may take of a machine: its grid and its pictures, counted before they are there."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest

import trapsim
from trapsim.corridor.bounds import set_up

PLAN = """
[atoms]
species = "Rb-87"
number = "3e4"
[trap.dipole]
kind = "harmonic"
frequency = ["60 Hz", "80 Hz", "100 Hz"]
[[sequence]]
stage = "hold"
duration = "0.1 ms"
[[sequence]]
stage = "release"
duration = "1 ms"
[camera.side]
view = "y"
pixel = "6.5 um"
magnification = 2.0
[camera.small]
view = "x"
pixel = "6.5 um"
magnification = 2.0
size = [8, 8]
[numerics]
axes = "full"
threads = 1
"""

#: a run in a process of its own, which tells its peak before and after; what Linux calls the high-water mark
WATCHED = """
import sys, trapsim
from pathlib import Path
from trapsim.prepare.cost import predict
from trapsim.prepare.setup import prepare

def peak():
    lines = Path("/proc/self/status").read_text().splitlines()
    return 1024 * next(int(line.split()[1]) for line in lines if line.startswith("VmHWM"))

def plan(n):
    return trapsim.plan_from_text(sys.argv[1], "memory", {"numerics.points": [n, n, n]})

trapsim.run(plan(16))
predicted, before = predict(prepare(plan(80))).memory, peak()
trapsim.run(plan(80))
print(predicted, peak() - before)
"""


@pytest.mark.slow
@pytest.mark.skipif(not Path("/proc/self/status").exists(), reason="this machine does not tell the memory of a process")
def test_a_run_takes_no_more_memory_than_is_said_before() -> None:
    environment = os.environ | {"PYTHONPATH": str(Path(trapsim.__file__).parents[1])}
    told = subprocess.run(
        [sys.executable, "-c", WATCHED, PLAN.replace("[camera.side]", "[camera.side]\nsize = [16, 16]")],
        capture_output=True, text=True, check=True, env=environment,
    )  # fmt: skip
    predicted, used = map(float, told.stdout.split())
    # measured by the operating system; twice as much would refuse plans that fit
    assert used < predicted < 2 * used


def test_pictures_count_as_memory_too() -> None:
    changes = {"camera.side.size": [6000, 4000], "numerics.memory": "1 GB", "numerics.points": [16, 16, 16]}
    set_up(trapsim.plan_from_text(PLAN, "cameras", changes))
    # a picture of 24 megapixels in double precision is 0.192 GB; so many cannot be kept in one
    many = changes | {"sequence.release.pictures": [f"{0.1 * i:.1f} ms" for i in range(1, 7)]}
    with pytest.raises(trapsim.PlanError, match=r"camera\.side\.size: got \[6000, 4000\] pixels(.|\n)*fewer pictures"):
        set_up(trapsim.plan_from_text(PLAN, "cameras", many))


def test_a_camera_that_looks_out_of_the_lab_is_refused() -> None:
    for far in ("20 m", "-1e300 m"):
        with pytest.raises(trapsim.PlanError, match=r"camera\.side\.aim(.|\n)*no camera of a lab"):
            trapsim.plan_from_text(PLAN, "cameras", {"camera.side.aim": ["0 um", far, "0 um"]})
