"""The work that scripts/bench measures: plans, the engine alone, and what needs a process of its own."""

from __future__ import annotations

import json
import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Sequence
from pathlib import Path

import numpy as np

import trapsim
from trapsim.cloud.cloud import Cloud
from trapsim.corridor.ground import ground_state
from trapsim.evolve.march import march
from trapsim.evolve.relax import relax
from trapsim.evolve.state import Pace, State
from trapsim.measure.observables import profile
from trapsim.plan.plan import Plan
from trapsim.prepare.cost import predict
from trapsim.prepare.setup import Setup, prepare

Row = dict[str, object]
Changes = dict[str, object]

ROOT = Path(__file__).parents[1]
RELEASE = ROOT / "configs" / "release.toml"

PLAN = """
[atoms]
species = "Rb-87"
number = "1e5"
[trap.dipole]
kind = "harmonic"
frequency = ["100 Hz", "100 Hz", "100 Hz"]
[[sequence]]
stage = "release"
duration = "20 ms"
"""
LATTICE = """
[trap.light]
kind = "lattice"
axis = "x"
wavelength = "1064 nm"
depth = "10 Er"
"""

def small_plan(changes: Changes, extra: str = "") -> Plan:
    return trapsim.plan_from_text(PLAN + extra, "bench", changes)


def release_plan(changes: Changes, milliseconds: float) -> Plan:
    """The cloud of configs/release.toml with another time of flight."""
    flight = f"{milliseconds:g} ms"
    return trapsim.read_plan(
        RELEASE, {"sequence.release.duration": flight, "sequence.release.pictures": [flight], **changes}
    )


# the engine alone


def engine(setup: Setup, *, pace: Pace | None = None, residual: float | None = None) -> Row:
    """Ground state and march, with nobody listening."""
    began, used = time.perf_counter(), time.process_time()
    if residual is None:
        relaxed = ground_state(setup)
    else:
        hamiltonian = setup.hamiltonian()
        relaxed = relax(hamiltonian, setup.first_guess(hamiltonian), tolerance=residual)
    ground = time.perf_counter()
    state = State(Cloud(setup.space, setup.space.array(relaxed.u), setup.frame(), 0.0, setup.q))
    for tick in march(state, setup.legs, pace=pace or setup.pace, guards=setup.guards):
        state = tick.state
    return {
        "ground_seconds": ground - began, "march_seconds": time.perf_counter() - ground,
        "ground_pairs": float(relaxed.pairs), "march_pairs": state.books.pairs,
        "processor_seconds": time.process_time() - used, "width_um": widths(state.cloud),
    }  # fmt: skip


def widths(cloud: Cloud) -> list[float]:
    return (1e6 * cloud.frame.b * np.sqrt(profile(cloud).var)).tolist()


def converged(read: Callable[[Changes], Plan]) -> list[float]:
    """Widths (um) of a plan at finer settings than any word stands for: closer points, more room, shorter steps.

    Where the grid fits a lattice it gets whole multiples of both.
    """
    chosen = prepare(read({"numerics.accuracy": "fine"}))
    points, extents = [], []
    for j, n in enumerate(chosen.space.points_per_direction()):
        fits = chosen.lengths.period[j] > 0
        points.append(4 * n if fits else 2 * round(0.7 * n))
        extents.append(f"{2e6 * (2 if fits else 1.1) * chosen.space.axis(j).half_extent:.12g} um")
    finer = {"numerics.accuracy": "fine", "numerics.points": points, "numerics.extent": extents}
    return engine(prepare(read(finer)), pace=Pace(1e-6, 0.4), residual=1e-10)["width_um"]


def error_of(found: Sequence[float], true: Sequence[float]) -> float:
    """The worst relative error of three widths."""
    return float(np.max(np.abs(np.asarray(found) / np.asarray(true) - 1)))


def engine_seconds(told: Row) -> float:
    return told["ground_seconds"] + told["march_seconds"]


# in a process of their own


def whole_job(word: str, milliseconds: float) -> float:
    """Seconds of `trapsim run --no-figures`, from nothing to the finished folder."""
    flight = f"{milliseconds:g} ms"
    stage = "sequence.release"
    changes = [f"numerics.accuracy={word}", f"{stage}.duration={flight}", f'{stage}.pictures=["{flight}"]']
    with tempfile.TemporaryDirectory() as folder:
        command = [sys.executable, "-c", "from trapsim.app import entry_point; entry_point()", "run", str(RELEASE)]
        command += ["--no-figures", "--quiet", "--out", str(Path(folder) / "out")]
        command += [word for change in changes for word in ("--set", change)]
        began = time.perf_counter()
        subprocess.run(command, check=True, capture_output=True, env=environment())
        return time.perf_counter() - began


def environment() -> dict[str, str]:
    return {**os.environ, "PYTHONPATH": os.pathsep.join(filter(None, (str(ROOT), os.environ.get("PYTHONPATH"))))}


def start_task(name: str, changes: Changes, **more: object) -> subprocess.Popen:
    command = [sys.executable, __file__, json.dumps({"name": name, "changes": changes, **more})]
    return subprocess.Popen(command, stdout=subprocess.PIPE, text=True, env=environment())


def finish_task(process: subprocess.Popen) -> Row:
    told, _ = process.communicate()
    if process.returncode:
        raise RuntimeError(f"a task ended with {process.returncode}")
    return json.loads(told)


def task(name: str, changes: Changes, **more: object) -> Row:
    return finish_task(start_task(name, changes, **more))


def do_task(asked: Row) -> Row:
    if asked["name"] == "release":
        return engine(prepare(release_plan(asked["changes"], asked["milliseconds"])))
    plan = small_plan(asked["changes"])
    setup = prepare(plan)
    if asked["name"] == "engine":
        return engine(setup)
    predicted, before = predict(setup).memory, peak_memory()
    trapsim.run(plan)
    return {"predicted": predicted, "used": peak_memory() - before}


def peak_memory() -> int:
    """The most memory this process has had so far, bytes."""
    for line in Path("/proc/self/status").read_text(encoding="ascii").splitlines():
        if line.startswith("VmHWM"):
            return 1024 * int(line.split()[1])
    raise OSError("this machine does not tell the memory of a process")



if __name__ == "__main__":
    print(json.dumps(do_task(json.loads(sys.argv[1]))))
