"""The timeline: every rampable number as a function of time; a part itself knows none.

It is cut at every edge (stage boundary, start or end of a change), so that inside each `Stretch` all numbers are smooth,
and a stretch answers for its closed interval with the values of its inside: nothing is ever evaluated at a jump.
"""

from __future__ import annotations

import math
from collections.abc import Collection, Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from scipy import integrate

from trapsim.constants import HBAR
from trapsim.errors import Notice, PlanError
from trapsim.fields import ORIGIN, Triple
from trapsim.plan.plan import Plan
from trapsim.plan.stages import Change, Kick, Pulse, Ramp, Release, Stage
from trapsim.prepare.rest import equilibrium
from trapsim.prepare.stretch import HELD, SCATTERING, Stretch
from trapsim.terms.lattice import Lattice
from trapsim.terms.part import Array, Part, steered
from trapsim.terms.ramps import Course, Value

#: kinds of stage in which a box or a lattice that is on holds the cloud; a pulse only passes over it, unless the walls
#: are perfectly reflecting
STANDING = ("hold", "ramp", "release")


@dataclass(frozen=True)
class Step:
    """A stretch together with the stage it belongs to and the kick at its start.

    `stands` are the directions in which a box or a lattice holds the cloud where it is; `fallen` the velocities (3,)
    that forces and kicks have given to the classical centre since each lattice first acted, at the end of the step, with
    what it then was faster than a whole order.
    """

    stretch: Stretch
    stage: int
    first: bool
    last: bool
    kick: Triple
    stands: frozenset[int]
    fallen: Mapping[str, Array]


@dataclass(frozen=True)
class Timeline:
    """The whole sequence as smooth stretches.

    Parameters
    ----------
    initial : Stretch
        What holds the cloud before the sequence.
    origin : (3,)
        Where the cloud's classical centre sits before the sequence, m.
    steps : tuple of Step
        In order; a kick is a step of no duration.
    stage_times : tuple of (start, stop)
        s, per stage.
    path : tuple of (6,)
        Classical centre and velocity at the end of every step.
    released : float or None
        When the flight clock starts: the start of the last release's switch-off.
    notices : tuple of Notice
    """

    initial: Stretch
    origin: Triple
    steps: tuple[Step, ...]
    stage_times: tuple[tuple[float, float], ...]
    path: tuple[Array, ...]
    released: float | None
    notices: tuple[Notice, ...] = ()


def build_timeline(plan: Plan) -> Timeline:
    """Cut a plan's sequence into smooth stretches, and follow the classical centre through them."""
    return _Builder(plan).build()


def _span(change: Change, start: float, stop: float) -> tuple[float, float]:
    """When a change begins and ends; one meant to last until the stage ends does so exactly."""
    begin = start + change.delay
    end = stop if change.duration is None else begin + change.duration
    return begin, (stop if end > stop - 1e-9 * (stop - start) else end)


@dataclass
class _Builder:
    """Walks the stages once, carrying the present values and the classical centre."""

    plan: Plan
    notices: list[Notice] = field(default_factory=list)

    def build(self) -> Timeline:
        plan = self.plan
        self.parts = dict(plan.trap)
        self.scattering = plan.atoms.scattering_length
        self.q = HBAR / plan.atoms.mass
        self.gravity = plan.gravity.part(plan.atoms.mass) if plan.gravity is not None else None
        self.still = (0.0, 0.0, 0.0)
        self.first_on = frozenset(n for n, p in self.parts.items() if p.strength > 0)
        self.travel: dict[str, float] = {}
        self.fallen: dict[str, Array] = {}
        self._gain(self.parts, {}, np.zeros(3), came=np.zeros(3))
        at_rest = {n: replace(p, centre=(0.0, 0.0, 0.0)) if getattr(p, "centre", None) == HELD else p
                   for n, p in self.parts.items()}
        origin = equilibrium(self._stretch(0.0, 0.0, {}, at_rest).parts_at(0.0))
        self.still = tuple(origin)
        # a part that is on from the start is where the plan puts it, and the cloud is made there
        self._met = {n for n, p in self.parts.items() if p.strength > 0}
        initial = self._stretch(0.0, 0.0, {})
        self.state = np.concatenate([origin, np.zeros(3)])
        steps: list[Step] = []
        self.path: list[Array] = []
        times: list[tuple[float, float]] = []
        released = None
        durations = [s.duration for s in plan.sequence]
        for index, stage in enumerate(plan.sequence):
            start, stop = math.fsum(durations[:index]), math.fsum(durations[: index + 1])
            times.append((start, stop))
            if isinstance(stage, Release):
                released = start
            steps.extend(self._stage(index, stage, start, stop))
        return Timeline(initial, self.still, tuple(steps), tuple(times), tuple(self.path), released, tuple(self.notices))

    def _stretch(
        self, start: float, stop: float, courses: Mapping[str, Course], parts: Mapping[str, Part] | None = None
    ) -> Stretch:
        now = {n: replace(p, travel=self.travel.get(n, 0.0)) if isinstance(p, Lattice) else p
               for n, p in (self.parts if parts is None else parts).items()}
        return Stretch(
            start, stop, now, self.gravity, dict(courses), self.still, self.first_on,
            self.scattering, 4 * np.pi * self.q * self.plan.atoms.number,
        )  # fmt: skip

    def _stage(self, index: int, stage: Stage, start: float, stop: float) -> list[Step]:
        if isinstance(stage, Kick):
            came = self.state[3:].copy()
            self.state[3:] += stage.velocity
            self.path.append(self.state.copy())
            stretch = self._stretch(start, start, {})
            fallen = self._gain(self.parts, {}, np.array(stage.velocity), came=came)
            return [Step(stretch, index, True, True, stage.velocity, frozenset(), fallen)]
        before = (dict(self.parts), self.scattering)
        courses = self._courses(stage, start, stop)
        windows = self._windows(stage, start, stop)
        edges = {start, stop, *(c.start for c in courses.values()), *(c.stop for c in courses.values())}
        edges |= {t for begin, end, _, _ in windows.values() for t in (begin, end)}
        ordered = sorted(edges)
        steps = []
        for t0, t1 in zip(ordered[:-1], ordered[1:], strict=True):
            for path, (begin, end, inside, outside) in windows.items():
                self._set(path, inside if begin <= t0 and t1 <= end else outside)
            self._meet_cloud(courses, t0)
            running = {p: c for p, c in courses.items() if c.start <= t0 and t1 <= c.stop and c.before != c.after}
            stretch = self._stretch(t0, t1, running)
            leaving = stage.off if isinstance(stage, Release) else ()
            stands = stretch.gripped(leaving) if stage.kind in STANDING else stretch.walled()
            came = self.state[3:].copy()
            gained = self._follow(stretch, stands)
            fallen = self._gain(stretch.parts, stretch.courses, gained, came=came)
            steps.append(Step(stretch, index, t0 == start, t1 == stop, ORIGIN, stands, fallen))
            for name, part in self.parts.items():
                if isinstance(part, Lattice):
                    self.travel[name] = self.travel.get(name, 0.0) + stretch.moved_on(name, t1)
            for path, course in courses.items():
                if course.stop == t1:
                    self._set(path, course.after)
                    self._report_left_over(stage, path, course)
        if isinstance(stage, Pulse):
            self.parts, self.scattering = before
        self._met &= {n for n, p in self.parts.items() if p.strength > 0}
        return steps

    def _courses(self, stage: Stage, start: float, stop: float) -> dict[str, Course]:
        """How the numbers change in a stage; what jumps at its start is set at once."""
        if isinstance(stage, Ramp):
            return {p: self._course(p, c, start, stop) for p, c in stage.to.items()}
        return self._release(stage, start, stop) if isinstance(stage, Release) else {}

    def _windows(self, stage: Stage, start: float, stop: float) -> dict[str, tuple[float, float, Value, Value]]:
        """From when until when a pulse sets a number, to which value, and what it is outside."""
        if not isinstance(stage, Pulse):
            return {}
        return {p: (*_span(c, start, stop), c.value, self._get(p)) for p, c in stage.to.items()}

    def _course(self, path: str, change: Change, start: float, stop: float) -> Course:
        begin, end = _span(change, start, stop)
        sharpness = (end - begin) / change.time_constant if change.time_constant else 1.0
        before, after = self._get(path), change.value
        if HELD in (before, after) and before != after:
            raise PlanError.at(
                f"sequence.{path}", str(after), "a held centre cannot be ramped to or from a place",
                "write the centre as three lengths from the start",
            )  # fmt: skip
        return Course(begin, end, before, after, change.shape or "linear", sharpness)

    def _release(self, stage: Release, start: float, stop: float) -> dict[str, Course]:
        names = stage.off if stage.off is not None else [n for n, p in self.parts.items() if p.confines]
        self._let_go(names, start)
        courses = {}
        for name in names:
            path = f"{name}.strength"
            off = stage.switch_off
            if off is None or self.parts[name].strength == 0:
                self._set(path, 0.0)
                continue
            end = min(stop, start + off.duration) if off.duration else stop
            sharpness = (end - start) / off.time_constant if off.time_constant else 1.0
            courses[path] = Course(start, end, self.parts[name].strength, 0.0, off.shape, sharpness)
        return courses

    def _let_go(self, names: Sequence[str], t: float) -> None:
        """Leave released parts with a held centre where they are: one that dies away holds nothing any more."""
        held = [n for n, p in self.parts.items() if p.strength > 0 and getattr(p, "centre", None) == HELD]
        placed = self._stretch(t, t, {}).parts_at(t)
        for name, part in zip(held, placed[len(placed) - len(held) :], strict=True):
            if name in names:
                self._set(f"{name}.centre", part.centre)

    def _get(self, path: str) -> Value | str:
        if path == SCATTERING:
            return self.scattering
        name, _, key = path.partition(".")
        return getattr(self.parts[name], key)

    def _set(self, path: str, value: Value | str) -> None:
        if path == SCATTERING:
            self.scattering = value
            return
        name, _, key = path.partition(".")
        self.parts[name] = replace(self.parts[name], **{key: value})

    def _meet_cloud(self, courses: Mapping[str, Course], t: float) -> None:
        """Centre parts that say at = "cloud" where the cloud is when they come on."""
        for name, part in self.parts.items():
            if getattr(part, "at", None) != "cloud":
                continue
            course = courses.get(f"{name}.strength")
            on = part.strength > 0 or (course is not None and course.start <= t < course.stop)
            if on and name not in self._met:
                self._met.add(name)
                self.parts[name] = replace(part, centre=tuple(self.state[:3]))

    def _gain(
        self, parts: Mapping[str, Part], courses: Collection[str], gained: Array, *, came: Array
    ) -> dict[str, Array]:
        """Add a velocity (3,) to every lattice that has acted or acts now, and say what each has by then.

        It begins with what the velocity `came` (3,), with which the cloud meets the light, has above the nearest whole
        order: a cloud between two orders would else be counted half to the one and half to the other.
        """
        for name, part in parts.items():
            if not isinstance(part, Lattice):
                continue
            acts = part.strength * part.depth > 0 or not {f"{name}.strength", f"{name}.depth"}.isdisjoint(courses)
            if acts or name in self.fallen:
                if name not in self.fallen:
                    beyond = np.zeros(3)
                    beyond[part.direction] = math.remainder(came[part.direction], 2 * part.recoil_velocity)
                    self.fallen[name] = beyond
                self.fallen[name] = self.fallen[name] + gained
        return dict(self.fallen)

    def _follow(self, stretch: Stretch, stands: frozenset[int]) -> Array:
        """Carry the classical centre through a stretch; where a part holds the cloud, it stands.

        Returns
        -------
        (3,)
            Velocity gained on the way, m/s.
        """
        mass = self.plan.atoms.mass
        free = np.array([j not in stands for j in range(3)], dtype=float)
        self.state[3:] *= free
        before = self.state[3:].copy()

        def slope(t: float, y: Array) -> Array:
            force, _ = steered(stretch.parts_at(t), y[:3])
            return np.concatenate([y[3:], free * force / mass])

        solution = integrate.solve_ivp(
            slope, (stretch.start, stretch.stop), self.state, method="DOP853", rtol=1e-12, atol=1e-17
        )
        self.state = solution.y[:, -1]
        self.path.append(self.state.copy())
        return self.state[3:] - before

    def _report_left_over(self, stage: Stage, path: str, course: Course) -> None:
        left = course.left_over()
        if left > 1e-6:
            self.notices.append(Notice(
                "jump", f"{stage.name}: {path} still has {100 * left:.3g} % of its change to go when its exponential "
                "ends; it jumps there",
            ))  # fmt: skip
