"""The corridor: plan in, finished folder out.

text -> plan -> setup -> ground state -> march through the legs -> track and columns -> folder. Figures are drawn from
the finished folder by whoever wants them.
"""

from __future__ import annotations

import logging
import time
from collections.abc import Callable
from contextlib import ExitStack
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from typing import Any, Protocol

from trapsim.cloud.cloud import Cloud
from trapsim.corridor import folder as place
from trapsim.corridor.bounds import affordable, ordinary_numbers, set_up
from trapsim.corridor.certify import certified
from trapsim.corridor.doubts import balance
from trapsim.corridor.findings import Spent, ground_figures, summarise, wave_function
from trapsim.corridor.ground import ground_state
from trapsim.errors import FileTrouble, Interrupted, Notice, PhysicsRefused
from trapsim.estimate.law import scaling_law
from trapsim.estimate.validity import FINE, validity
from trapsim.evolve.continuity import continuity
from trapsim.evolve.march import march
from trapsim.evolve.state import Leg, State, Tick
from trapsim.measure.flow import flow_plane
from trapsim.measure.views import VIEWS
from trapsim.plan.plan import Plan
from trapsim.prepare.setup import Setup
from trapsim.record.album import Album
from trapsim.record.recorder import Recorder
from trapsim.record.store import RUN_FILE, Contents, read_run, write_results
from trapsim.record.summary import Ground, Run

log = logging.getLogger(__name__)

#: a checkpoint is due when this many times what the last one took has passed, but not more often than FIRST seconds
PATIENCE = 50.0
FIRST = 2.0


class Progress(Protocol):
    """Who is told how far a run is."""

    def begin(self, total: float) -> None: ...

    def at(self, time: float, stage: str) -> None: ...

    def end(self) -> None: ...


class Silent:
    """Nobody is told."""

    def begin(self, total: float) -> None:
        pass

    def at(self, time: float, stage: str) -> None:
        pass

    def end(self) -> None:
        pass


def run(
    plan: Plan,
    out: str | Path | None = None,
    *,
    progress: Progress | None = None,
    stop: Callable[[], bool] = lambda: False,
    force: bool = False,
    certify: bool = False,
) -> Run:
    """Play a plan: relax the cloud, march through the sequence, keep what was seen.

    Parameters
    ----------
    plan : Plan
    out : path, optional
        The result folder; without one everything stays in memory. A finished result of the same plan is opened again,
        an interrupted one taken up where it was left.
    progress : Progress, optional
    stop : callable, optional
        Asked after every step; when it says True the state is saved and the run stops.
    force : bool
        Begin anew, and throw away the result that is in the folder as soon as there is a new ground state.
    certify : bool
        Play the plan once more on a finer space with a tighter tolerance, and put the true differences beside the
        estimates (`summary.numerics.certified`); where that is refused, a notice says why. A result that is there
        already is not computed anew.

    Returns
    -------
    Run

    Raises
    ------
    PlanError
        When the plan cannot be prepared, or the folder holds another plan's result.
    PhysicsRefused
        On collapse, when the ground state does not converge, or when a guard stops the march.
    Interrupted
        When `stop` said so; a folder then holds what was done so far.
    FileTrouble
        When the folder cannot be read or written.
    """
    setup = set_up(plan)
    again = partial(run, progress=progress, stop=stop)
    if out is None:
        done = _Corridor(setup, None, progress or Silent(), stop).walk()
        return certified(done, again) if certify else done
    folder = Path(out)
    with place.locked(folder):
        place.claim(folder, plan, force=force)
        if not force and place.is_finished(folder, plan):
            done = _opened_again(folder, plan)
        else:
            done = _Corridor(setup, folder, progress or Silent(), stop, force=force).walk()
        return certified(done, again) if certify else done


def _opened_again(folder: Path, plan: Plan) -> Run:
    try:
        return open_run(folder, plan=plan)
    except FileTrouble as error:
        raise FileTrouble.at(
            str(folder / RUN_FILE), "", "the finished result cannot be read: it is damaged",
            "run again with --force to compute it anew",
        ) from error  # fmt: skip


def open_run(folder: str | Path, *, plan: Plan | None = None) -> Run:
    """A finished run, from its folder (or the run.h5 in it).

    Raises
    ------
    FileTrouble
        When there is no result in it, or it is damaged.
    """
    folder = Path(folder)
    if folder.name == RUN_FILE:
        folder = folder.parent
    kept = read_run(folder)
    return Run(
        plan if plan is not None else kept.plan, kept.summary, kept.track, kept.columns, kept.pictures, kept.final,
        folder, momenta=kept.momenta, flow=kept.flow,
    )  # fmt: skip


@dataclass
class _Clock:
    """Wall-clock seconds of this run, earlier attempts included."""

    before: float = 0.0

    def __post_init__(self) -> None:
        self.start = time.perf_counter()

    def seconds(self) -> float:
        return self.before + time.perf_counter() - self.start


class _Corridor:
    """One walk through the corridor, with or without a folder."""

    def __init__(
        self, setup: Setup, folder: Path | None, progress: Progress, stop: Callable[[], bool], *, force: bool = False
    ) -> None:
        self.setup = setup
        self.folder = folder
        self.force = force
        self.progress = progress
        self.stop = stop
        self.clock = _Clock()
        with ordinary_numbers(setup.plan.name):
            self.law = scaling_law(setup)
        plan, timeline = setup.plan, setup.timeline
        self.recorder = Recorder(
            origin=timeline.origin, atoms=plan.atoms.number, duration=plan.duration, released=timeline.released,
            release_stage=max((i for i, s in enumerate(plan.sequence) if s.kind == "release"), default=0),
            law=self.law.at if self.law else None, stage_names=tuple(s.name for s in plan.sequence),
        )  # fmt: skip
        self.album = Album(
            cameras=plan.camera, shots=setup.shots, atoms=plan.atoms.number, origin=timeline.origin
        )
        self.march_seconds = 0.0
        self._probed = -1
        self.next_save = time.perf_counter() + FIRST

    def walk(self) -> Run:
        state, self.ground = self._begin()
        with ExitStack() as stack:
            self.progress.begin(self.setup.plan.duration)
            stack.callback(self.progress.end)
            try:
                state = self._march(state)
            except PhysicsRefused as refused:
                self._finish(self._last, "stopped", extra=(Notice("stopped", str(refused)),))
                if self.folder is None:
                    raise
                raise PhysicsRefused(f"{refused}\n    what was seen until then is in {self.folder}") from refused
        return self._finish(state, "complete")

    # the ground state

    def _begin(self) -> tuple[State, dict[str, Any]]:
        spaces = [self.setup.space, *(leg.space for leg in self.setup.legs)]
        kept = place.load(self.folder, self.setup.plan, spaces) if self.folder and not self.force else None
        if kept is None:
            return self._relax()
        state, heard, ground, seconds = kept
        with place.whole(self.folder / place.CHECKPOINT):
            self.recorder.restore(heard)
            self.album.restore(heard, ground.pop("album"))
            self.march_seconds = ground["march_seconds"]
            Ground(**ground["figures"])
        self.clock.before = seconds
        # a leg that was entered has been probed at its first step
        self._probed = state.leg if state.law is not None else state.leg - 1
        self._last = state
        return state, ground

    def _relax(self) -> tuple[State, dict[str, Any]]:
        setup = self.setup
        began = time.perf_counter()
        relaxed = ground_state(setup)
        cloud = Cloud(setup.space, setup.space.array(relaxed.u), setup.frame(), 0.0, setup.q)
        seen = self.recorder.begin(cloud, setup.timeline.initial)
        if setup.legs:
            self.album.look(cloud, setup.legs[0], centre=seen.centre, stage_ends=False, fallen={})
        balanced = balance(setup, cloud, seen)
        figures = ground_figures(setup, relaxed, cloud, seen, self.law, balanced)
        ground = {
            "figures": figures.as_dict(), "slack": balanced.slack if balanced else 0.0, "pairs": relaxed.pairs,
            "seconds": time.perf_counter() - began, "march_seconds": 0.0, "continuity": None,
        }  # fmt: skip
        state = State(cloud, notices=self._notices())
        self._last = state
        self._save(state, ground)
        if self.folder:
            place.mark(self.folder, setup.plan)
            if self.force:
                place.clear(self.folder)
        return state, ground

    def _notices(self) -> tuple[Notice, ...]:
        card = validity(self.setup, self.law)
        return (*self.setup.notices, *(Notice(c.code, c.text) for c in card if c.level != FINE))

    # the march

    def _march(self, state: State) -> State:
        setup = self.setup
        self.progress.at(state.cloud.time, setup.legs[state.leg].name if state.leg < len(setup.legs) else "")
        afford = partial(affordable, setup)
        for tick in march(state, setup.legs, pace=setup.pace, guards=setup.guards, afford=afford):
            state = self._hear(tick)
        return state

    def _hear(self, tick: Tick) -> State:
        now = time.perf_counter()
        state = tick.state
        leg = self.setup.legs[state.leg - (tick.reason == "edge")]
        seen = self.recorder.listen(tick, leg)
        if seen is not None and tick.reason != "step":
            ended = tick.reason == "edge" and leg.last
            fallen = self.setup.timeline.steps[state.leg - (tick.reason == "edge")].fallen
            self.album.look(state.cloud, leg, centre=seen.centre, stage_ends=ended, fallen=fallen)
        self._probe(tick, leg)
        self.progress.at(state.cloud.time, leg.name)
        self._last = state
        self.march_seconds = self.clock.seconds() - self.ground["seconds"]
        if self.folder and now > self.next_save:
            self._save(state, self.ground)
        if self.stop():
            self._interrupt(state)
        return state

    def _probe(self, tick: Tick, leg: Leg) -> None:
        """Measure the continuity residual once per leg, after its first step; keep the worst."""
        state = tick.state
        if state.law is None or state.leg == self._probed or state.law.time >= state.cloud.time:
            return
        self._probed = state.leg
        residual = continuity(state.cloud, state.law, leg, state.stride.h)
        self.ground["continuity"] = max(residual, self.ground["continuity"] or 0.0)

    def _interrupt(self, state: State) -> None:
        self.progress.end()
        if self.folder:
            self._save(state, self.ground)
            raise Interrupted(
                f"interrupted at {1e3 * state.cloud.time:.4g} ms of {1e3 * self.setup.plan.duration:.4g} ms; "
                f"the state is saved in {self.folder}: the same command goes on from there"
            )
        raise Interrupted("interrupted; without a result folder nothing was kept")

    def _save(self, state: State, ground: dict[str, Any]) -> None:
        if self.folder is None:
            return
        began = time.perf_counter()
        ground = {**ground, "march_seconds": self.march_seconds}
        pictured, told = self.album.arrays()
        heard, seconds = {**self.recorder.arrays(), **pictured}, self.clock.seconds()
        ground["album"] = told
        place.save(self.folder, self.setup.plan, state, heard=heard, ground=ground, seconds=seconds)
        took = time.perf_counter() - began
        self.next_save = time.perf_counter() + max(FIRST, PATIENCE * took)
        log.debug("checkpoint at %.6g s took %.3g s", state.cloud.time, took)

    # the end

    def _finish(self, state: State, status: str, extra: tuple[Notice, ...] = ()) -> Run:
        setup, plan = self.setup, self.setup.plan
        track = self.recorder.track()
        spent = Spent(
            ground_pairs=self.ground["pairs"], ground_seconds=self.ground["seconds"], march_seconds=self.march_seconds,
            seconds=self.clock.seconds(), recorder_pairs=self.recorder.pairs,
        )  # fmt: skip
        summary = summarise(
            setup, status=status, ground=Ground(**self.ground["figures"]), slack=self.ground["slack"], state=state,
            track=track, law=self.law, spent=spent, continuity=self.ground["continuity"], album=self.album,
            notices=(*state.notices, *extra),
        )  # fmt: skip
        # samples are borrowed from the march: after a refused step they are no longer those of the last good state
        final = wave_function(state.cloud, setup.timeline.origin) if status == "complete" else None
        flow = {v: flow_plane(state.cloud, v) for v in VIEWS} if status == "complete" else {}
        columns = self.recorder.columns()
        if self.folder:
            contents = Contents(
                plan.source, plan.resolved(), summary, track, columns, final, pictures=self.album.pictures,
                momenta=tuple(self.album.seen), flow=flow,
            )  # fmt: skip
            write_results(self.folder, contents)
            if status == "complete":
                (self.folder / place.CHECKPOINT).unlink(missing_ok=True)
        seen = tuple(self.album.seen)
        return Run(plan, summary, track, columns, self.album.pictures, final, self.folder, momenta=seen, flow=flow)
