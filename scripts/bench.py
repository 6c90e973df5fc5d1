"""What the engine costs, as ratios measured in one run; nothing absolute is asserted.

    bash scripts/bench                                all sections: ten minutes, 5 GB of memory
    bash scripts/bench --quick --json FILE step peer  small sizes, and only these sections

Times on a shared machine wander, so what is compared is measured in turns, and medians are divided.
"""

from __future__ import annotations

import argparse
import datetime
import json
import os
import platform
import subprocess
import sys
import time
from collections.abc import Callable, Sequence
from functools import cache
from pathlib import Path
from statistics import median

import numpy as np
import pyfftw

import bench_jobs as jobs
from bench_jobs import Changes, Row
from trapsim.cloud.cloud import Cloud
from trapsim.errors import PhysicsRefused, PlanError
from trapsim.evolve.march import stepper
from trapsim.evolve.scaling import measure_law
from trapsim.measure.observables import profile
from trapsim.plan.plan import Plan
from trapsim.prepare.setup import LARGE, Setup, prepare

#: what a step is measured on: kinds of axis, and the share of n points each direction then gets
KINDS: dict[str, tuple[Changes, tuple[float, float, float]]] = {
    "wave": ({"numerics.axes": "full"}, (1, 1, 1)),
    "mirror": ({"numerics.axes": ["mirror", "mirror", "mirror"]}, (1, 1, 1)),
    "radial": ({"numerics.axes": ["wave", "radial", "radial"]}, (1, 0.5, 0.5)),
    "wave, single": ({"numerics.axes": "full", "numerics.precision": "single"}, (1, 1, 1)),
}
CLOUDS: dict[str, Changes] = {
    "isotropic 100 Hz": {},
    "20/120/120 Hz": {"trap.dipole.frequency": ["20 Hz", "120 Hz", "120 Hz"]},
    "8/180/180 Hz": {"trap.dipole.frequency": ["8 Hz", "180 Hz", "180 Hz"]},
    "pancake 40/40/200 Hz": {"trap.dipole.frequency": ["40 Hz", "40 Hz", "200 Hz"]},
    "lattice 10 Er, 20/60/60 Hz, 1e4": {
        "trap.dipole.frequency": ["20 Hz", "60 Hz", "60 Hz"], "atoms.number": "1e4", "sequence.release.duration": "10 ms",
    },
}  # fmt: skip
WORDS = ("draft", "normal", "fine")
#: error of the widths -> what trapsim and the textbook program are set to for it
LEVELS = (("1e-3", "draft", "coarse"), ("5e-5", "draft", "medium"), ("1e-6", "fine", "fine"))


def in_turns(works: dict[str, Callable[[], object]], *, repeats: int) -> tuple[dict[str, float], dict[str, float]]:
    """The median and the least seconds of several pieces of work, measured in turns."""
    spent: dict[str, list[float]] = {name: [] for name in works}
    for turn in range(repeats + 1):
        for name, work in works.items():
            began = time.perf_counter()
            work()
            if turn:  # the first plans and warms up
                spent[name].append(time.perf_counter() - began)
    return {name: median(times) for name, times in spent.items()}, {name: min(times) for name, times in spent.items()}


class BarePair:
    """A complex transform and back in place, planned by measuring."""

    def __init__(self, shape: tuple[int, ...], dtype: np.dtype, threads: int) -> None:
        self.array = pyfftw.empty_aligned(shape, dtype=dtype)
        self.there, self.back = (
            pyfftw.FFTW(self.array, self.array, axes=range(3), direction=way, threads=threads, flags=("FFTW_MEASURE",))
            for way in ("FFTW_FORWARD", "FFTW_BACKWARD")
        )
        self.array[...] = 0

    def __call__(self) -> None:
        self.there.execute()
        self.back.execute()


@cache
def steps_measured(sizes: tuple[int, ...], repeats: int) -> list[Row]:
    rows: list[Row] = []
    for n in sizes:
        for kind, (changes, shares) in KINDS.items():
            try:
                plan = jobs.small_plan({**changes, "numerics.points": [int(n * share) for share in shares]})
            except PlanError:
                continue  # not offered
            rows.append(one_step(kind, n, prepare(plan), repeats))
    return rows


def one_step(kind: str, n: int, setup: Setup, repeats: int) -> Row:
    """A step in flight, the space's own pair, and the bare complex pair of the whole n^3, in turns."""
    leg = setup.legs[0]
    start = setup.space.array(setup.first_guess(setup.hamiltonian()))
    start /= np.sqrt(setup.space.integral(np.abs(start) ** 2))
    cloud = Cloud(leg.space, start, setup.frame(), 0.0, setup.q)
    step = stepper(measure_law(cloud, profile(cloud), tail=None), leg, setup.q)
    space, phi, empty = leg.space, leg.space.array(start), leg.space.array(0.0)
    threads = os.cpu_count() if n**3 >= LARGE else 1
    whole = BarePair((n, n, n), phi.dtype, threads)
    seconds, least = in_turns(
        {
            "step": lambda: step.strang(phi, 0.0, 2e-5), "own": lambda: space.inverse(space.forward(empty)), "whole": whole,
        },
        repeats=repeats,
    )  # fmt: skip
    return {
        "axes": kind, "n": n, "points": " x ".join(map(str, space.shape)), "threads": space.threads,
        "step / own pair": seconds["step"] / seconds["own"], "own pair / bare n^3 pair": seconds["own"] / seconds["whole"],
        "step / bare n^3 pair": seconds["step"] / seconds["whole"], "of the fastest": least["step"] / least["whole"],
        "measured": {"seconds": seconds, "least": least, "size": space.size},
    }  # fmt: skip


def sizes_of(quick: bool) -> tuple[tuple[int, ...], int]:
    return ((32, 64), 7) if quick else ((32, 64, 128, 256), 9)


def step(quick: bool) -> list[Row]:
    """One step in flight over one bare pair of transforms."""
    return steps_measured(*sizes_of(quick))


def growth(quick: bool) -> list[Row]:
    """How the cost of step and pair (their fastest) grows against N log N, the smallest size being 1."""
    rows: list[Row] = []
    first: dict[object, tuple[float, float]] = {}
    for row in steps_measured(*sizes_of(quick)):
        size, least = row["measured"]["size"], row["measured"]["least"]
        work = size * np.log2(size)
        here = (least["step"] / work, least["own"] / work)
        base = first.setdefault(row["axes"], here)
        rows.append({"axes": row["axes"], "n": row["n"], "step": here[0] / base[0], "own pair": here[1] / base[1]})
    return rows


def pairs(quick: bool) -> list[Row]:
    """Errors of the widths, and pairs of transforms (ground state + march) to get below 1e-3 and 1e-5."""
    rows: list[Row] = []
    for name, changes in list(CLOUDS.items())[: 2 if quick else None]:
        extra = jobs.LATTICE if "lattice" in name else ""

        def read(more: Changes, changes: Changes = changes, extra: str = extra) -> Plan:
            return jobs.small_plan({**changes, **more}, extra)

        true = jobs.converged(read)
        row: Row = {"cloud": name}
        reached: dict[str, tuple[float, str]] = {}
        for word in WORDS:
            setup = prepare(read({"numerics.accuracy": word}))
            try:
                found = jobs.engine(setup)
            except PhysicsRefused:
                row[word] = "refused"
                continue
            error = row[word] = jobs.error_of(found["width_um"], true)
            shape = "x".join(map(str, setup.space.shape))
            reached[word] = error, f"{found['ground_pairs']:.0f} + {found['march_pairs']:.0f} on {shape}, {word}"
        for goal in (1e-3, 1e-5):
            row[f"to {goal:.0e}"] = next((text for error, text in reached.values() if error <= goal), "not reached")
        rows.append(row)
    return rows


def memory(quick: bool) -> list[Row]:
    """Memory predicted, and used by a whole run beyond that of a process that has only prepared it."""
    rows: list[Row] = []
    for n in (48, 64) if quick else (64, 96, 128):
        changes = {"numerics.axes": "full", "numerics.points": [n, n, n], "sequence.release.duration": "0.2 ms"}
        told = jobs.task("memory", changes)
        rows.append({"points": f"{n} x {n} x {n}", "used / predicted": told["used"] / told["predicted"],
                     "predicted, complex arrays": told["predicted"] / (16 * n**3)})  # fmt: skip
    return rows


def parallel(quick: bool) -> list[Row]:
    """Two independent plans side by side, one thread each, over one alone."""
    n = 32 if quick else 64
    changes = {"numerics.axes": "full", "numerics.points": [n, n, n], "numerics.threads": 1}
    alone: list[Row] = []
    together: list[Row] = []
    for _ in range(3):
        alone.append(jobs.task("engine", changes))
        both = [jobs.start_task("engine", changes) for _ in range(2)]
        together += [jobs.finish_task(process) for process in both]
    seconds, used = (
        median(how(told) for told in alone) / median(how(told) for told in together)
        for how in (jobs.engine_seconds, lambda told: told["processor_seconds"])
    )
    return [{"points": f"{n} x {n} x {n}", "efficiency of two": seconds, "by processor time": used}]


def peer(quick: bool) -> list[Row]:
    """The cloud of configs/release.toml against scripts/textbook.py, at about equal errors."""
    true = {ms: jobs.converged(lambda more, ms=ms: jobs.release_plan(more, ms)) for ms in (6, 20)}
    rows: list[Row] = []
    for goal, word, setting in LEVELS[: 1 if quick else None]:
        began = time.perf_counter()
        told = json.loads(subprocess.run(
            [sys.executable, str(jobs.ROOT / "scripts" / "textbook.py"), setting, "6"], check=True, capture_output=True
        ).stdout)  # fmt: skip
        process = time.perf_counter() - began
        for ms in (6, 20):
            own = [jobs.task("release", {"numerics.accuracy": word}, milliseconds=ms) for _ in range(3)]
            job = median(jobs.whole_job(word, ms) for _ in range(3))
            ours = median(jobs.engine_seconds(o) for o in own)
            theirs, start = jobs.engine_seconds(told), process - jobs.engine_seconds(told)
            used = told["processor_seconds"] / median(o["processor_seconds"] for o in own)
            if ms != 6:
                used *= at_other_time(told, true[6], true[ms], ms / 6) / theirs
                theirs = at_other_time(told, true[6], true[ms], ms / 6)
            rows.append({
                "widths to": goal, "flight": f"{ms} ms" + ("" if ms == 6 else ", peer extrapolated"),
                "trapsim": f"{word}, error {jobs.error_of(own[0]['width_um'], true[ms]):.0e}",
                "textbook": f"{'x'.join(map(str, told['points']))}, error {jobs.error_of(told['width_um'], true[6]):.0e}",
                "trapsim engine, s": ours, "textbook engine, s": theirs, "engine ratio": theirs / ours,
                "by processor time": used, "process ratio": (theirs + start) / job,
            })  # fmt: skip
    return rows


def at_other_time(told: Row, widths: Sequence[float], then: Sequence[float], longer: float) -> float:
    """Seconds the textbook program would take for a longer flight.

    The fastest atoms are the same, so it keeps spacing and step; its box grows with the cloud, N log N.
    """
    size = float(np.prod(told["points"]))
    grown = size * float(np.prod(np.maximum(np.asarray(then) / np.asarray(widths), 1)))
    per_step = grown * np.log(grown) / (size * np.log(size))
    return (told["ground_seconds"] + longer * told["march_seconds"]) * per_step


# what is printed

SECTIONS: dict[str, Callable[[bool], list[Row]]] = {
    "step": step, "growth": growth, "pairs": pairs, "memory": memory, "parallel": parallel, "peer": peer,
}  # fmt: skip


def machine() -> str:
    name = platform.processor() or platform.machine()
    try:
        lines = Path("/proc/cpuinfo").read_text(encoding="utf-8").splitlines()
        name = next((line.split(":")[1].strip() for line in lines if line.startswith("model name")), name)
    except OSError:
        pass
    return f"{os.cpu_count()} cores, {name}, Python {platform.python_version()}, numpy {np.__version__}"


def cell(value: object) -> str:
    if isinstance(value, float):
        return f"{value:.1e}" if 0 < abs(value) < 5e-3 else f"{value:.3g}"
    return str(value)


def table(rows: Sequence[Row]) -> str:
    """Rows as a table in Markdown; what is not a figure or a word is for the file alone."""
    names = [name for name, value in rows[0].items() if not isinstance(value, dict)]
    lines = [names, ["---"] * len(names), *([cell(row.get(name, "")) for name in names] for row in rows)]
    return "\n".join("| " + " | ".join(line) + " |" for line in lines)


def main(argv: Sequence[str]) -> int:
    parser = argparse.ArgumentParser(prog="scripts/bench", description="What the engine costs, as ratios.")
    parser.add_argument("sections", nargs="*", metavar="SECTION", help=f"some of: {', '.join(SECTIONS)} (default: all)")
    parser.add_argument("--quick", action="store_true", help="small sizes, about a minute")
    parser.add_argument("--json", metavar="FILE", help="write the figures there too")
    options = parser.parse_args(argv)
    unknown = [name for name in options.sections if name not in SECTIONS]
    if unknown:
        parser.error(f"no section {', '.join(unknown)}; there are {', '.join(SECTIONS)}")
    told: Row = {"date": datetime.date.today().isoformat(), "machine": machine(), "quick": options.quick}
    print(f"{told['date']}, {told['machine']}{', quick' if options.quick else ''}")
    for name in options.sections or SECTIONS:
        told[name] = SECTIONS[name](options.quick)
        print(f"\n**{name}**: {SECTIONS[name].__doc__}\n\n{table(told[name])}", flush=True)
    if options.json:
        Path(options.json).write_text(json.dumps(told, indent=1), encoding="utf-8")
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
