"""From a plan to engine objects; the only place that does it."""

from __future__ import annotations

import os
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from trapsim.cloud import shapes
from trapsim.constants import HBAR
from trapsim.errors import Notice, PhysicsRefused, PlanError
from trapsim.evolve.guards import Guards
from trapsim.evolve.relax import Hamiltonian
from trapsim.evolve.state import Leg, Pace
from trapsim.plan.plan import Plan
from trapsim.prepare.extent import ACCURACY, Accuracy, Lengths, choose_space
from trapsim.prepare.needs import hold_orders, measure_up, scattering_number
from trapsim.prepare.stretch import Stretch
from trapsim.prepare.symmetry import between, choose_words, even_directions, lasting_axis, round_directions
from trapsim.prepare.timeline import Step, Timeline, build_timeline
from trapsim.record.album import Shot
from trapsim.space.frame import Frame
from trapsim.space.space import Array, Space
from trapsim.terms.box import Box
from trapsim.terms.lattice import Lattice
from trapsim.terms.part import remainder, steered

AXES = "xyz"
#: from this many points on, more than one thread pays
LARGE = 48**3
#: arrays of the grid that are there at the same time, and bytes for all that does not grow with it
COMPLEX_ARRAYS, RECORDED = 18, 16e6
#: a curvature less than this share of the strongest is none
FLAT = 1e-9
#: a part with less strength than this at the end of a stretch is dying away, not holding
DYING = 1e-3


@dataclass(frozen=True)
class Setup:
    """All that the engine needs for a plan.

    Parameters
    ----------
    plan : Plan
    timeline : Timeline
    q : float
        hbar/m, m^2/s.
    coupling : float
        4 pi q a N at the start, m^3/s.
    omega : (3,)
        Trap frequencies at the start, rad/s; zero where untrapped.
    lengths : Lengths
    accuracy : Accuracy
    space : Space
        Of the ground state.
    legs : tuple of Leg
    pace : Pace
    guards : Guards
    shots : tuple of Shot
        Pictures to be taken.
    why : str
        Why these axes, in a sentence.
    notices : tuple of Notice
    """

    plan: Plan
    timeline: Timeline
    q: float
    coupling: float
    omega: Array
    lengths: Lengths
    accuracy: Accuracy
    space: Space
    legs: tuple[Leg, ...]
    pace: Pace
    guards: Guards
    shots: tuple[Shot, ...]
    why: str
    notices: tuple[Notice, ...]

    @property
    def scattering_number(self) -> float:
        """N a over the lengths of uniform directions."""
        return scattering_number(self.coupling, self.q, self.lengths.half, self.omega)

    def frame(self) -> Frame:
        """The frame of the ground state: at rest around the classical centre."""
        return Frame(X=np.array(self.timeline.origin))

    def potential(self, stretch: Sequence[float] = (1.0, 1.0, 1.0)) -> Array:
        """Potential energy (J) before the sequence, from that at the origin, on the points of the space, stretched."""
        initial, origin, frame = self.timeline.initial, self.timeline.origin, self.frame()
        parts = initial.parts_at(0.0)
        along = np.array([j not in initial.gripped() for j in range(3)])
        _, curvature = steered(parts, origin)
        factors = np.asarray(stretch, dtype=float)
        lab = tuple(frame.lab(factors[j] * x, j) for j, x in enumerate(self.space.coordinates()))
        taken = self.space.quadratic(0.5 * curvature * along * factors**2)
        return np.asarray(taken + remainder(parts, origin, *lab, steered_along=along))

    def hamiltonian(self) -> Hamiltonian:
        """What the ground state minimises."""
        return Hamiltonian(self.space, self.potential() / HBAR, coupling=self.coupling, q=self.q)

    def first_guess(self, hamiltonian: Hamiltonian) -> Array:
        """Thomas-Fermi where the mean field rules, the best Gaussian otherwise."""
        number = self.scattering_number
        widths = shapes.gaussian_widths(self.omega, self.q, number) if self.omega.any() else np.full(3, np.inf)
        flat = self.omega.sum() == 0 or bool(self.timeline.initial.gripped())
        if self.coupling > 0 and (flat or self.lengths.mu > 3 * self.omega.sum() / 2):
            soft = 0.3 * max(self.omega.max(), 0.3 * self.lengths.mu)
            guess = shapes.thomas_fermi(self.space, hamiltonian.V, self.coupling, soft=soft)
        else:
            held = np.isinf(widths) & np.isfinite(self.lengths.finest)
            guess = shapes.gaussian(self.space, np.where(held, self.lengths.half / 3, widths))
        return shapes.between_walls(self.space, guess, np.sqrt(self.q / max(self.lengths.mu, 1e-300)))


def prepare(plan: Plan) -> Setup:
    """Turn a plan into engine objects.

    Raises
    ------
    PlanError
        When axes are forced that the plan does not allow, memory is too small, or nothing holds the cloud.
    PhysicsRefused
        When perfectly reflecting walls are to open at accuracy fine.
    """
    timeline = build_timeline(plan)
    accuracy = ACCURACY[plan.numerics.accuracy]
    q = HBAR / plan.atoms.mass
    coupling = timeline.initial.coupling(0.0)
    _, curvature = steered(timeline.initial.parts_at(0.0), timeline.origin)
    _rest_in_a_valley(timeline, curvature)
    omega = np.sqrt(np.maximum(curvature, 0.0) / plan.atoms.mass)
    needs = measure_up(plan, timeline, omega, q, coupling, accuracy)
    standing = plan.numerics.frame == "lab"
    still = needs.periodic | standing
    moving = [tuple(not still[j] and j not in s.stands for j in range(3)) for s in timeline.steps]
    lengths = hold_orders(needs, timeline, omega, q, coupling, moving)
    _leave_uniform(timeline, lengths)
    round_about = round_directions(timeline, standing=standing)
    axis = lasting_axis(round_about, lengths.uniform | lengths.periodic)
    even = even_directions(timeline, still=still)
    walls = [timeline.initial.walled(), *(s.stretch.walled() for s in timeline.steps)]
    words = [
        between(w, _words(plan, axis, r, e, lengths)) for r, e, w in zip(round_about, even, walls, strict=True)
    ]
    _open_softly(plan, walls)
    spaces: dict[tuple[str, ...], Space] = {}
    for w in words:
        if w not in spaces:
            spaces[w] = _space(plan, w, lengths, accuracy)
    shots = plan_shots(plan, timeline)
    legs = _legs(plan, timeline, shots, [spaces[w] for w in words[1:]], moving)
    watched = tuple(not p for p in lengths.periodic)
    return Setup(
        plan=plan, timeline=timeline, q=q, coupling=coupling, omega=omega, lengths=lengths, accuracy=accuracy,
        space=spaces[words[0]], legs=legs, pace=Pace(accuracy.tolerance, accuracy.cap),
        guards=Guards(accuracy.edge, accuracy.spectrum, accuracy.norm, watched), shots=shots,
        why=_why(plan, round_about, words), notices=timeline.notices,
    )  # fmt: skip


def _rest_in_a_valley(timeline: Timeline, curvature: Array) -> None:
    """Refuse a cloud made on top of a hill: its size cannot be taken from the trap's curvature there."""
    uphill = [AXES[j] for j in range(3) if curvature[j] < -FLAT * np.abs(curvature).max()]
    if uphill and not any(isinstance(p, Box) for p in timeline.initial.parts_at(0.0)):
        raise PlanError.at(
            "trap", f"the top of a hill along {', '.join(uphill)} where the forces on the atoms balance",
            "the room for a cloud follows from the valley in which it rests",
            "move the beam that repels, or the two that pull apart; hold the cloud in a box as well; or hand that light "
            'over from Python, as a part of the kind "function"',
        )  # fmt: skip


def _leave_uniform(timeline: Timeline, lengths: Lengths) -> None:
    """Refuse what would act along a direction that the plan makes uniform or periodic."""
    for step in timeline.steps:
        stretch = step.stretch
        _, curvature = steered(stretch.parts_at(0.5 * (stretch.start + stretch.stop)), timeline.origin)
        for j in range(3):
            if lengths.periodic[j] and curvature[j] != 0:
                raise PlanError.at(
                    "sequence", f"a trap or lens along {AXES[j]}", "that direction was made uniform or periodic",
                    f"trap the cloud along {AXES[j]} from the start, or take this frequency to 0 Hz",
                )  # fmt: skip
            if lengths.uniform[j] and step.kick[j]:
                raise PlanError.at(
                    "sequence", f"a kick along {AXES[j]}", "nothing varies along that direction, so nothing can move there",
                    f"give numerics.points along {AXES[j]}, or trap the cloud along it",
                )  # fmt: skip


def _open_softly(plan: Plan, walls: list[frozenset[int]]) -> None:
    """Refuse to open perfectly reflecting walls where the error that this makes is not wanted."""
    opened = any(before - after for before, after in zip(walls[:-1], walls[1:], strict=True))
    if opened and plan.numerics.accuracy == "fine":
        raise PhysicsRefused.at(
            "sequence", "a cloud let out of perfectly reflecting walls at accuracy fine",
            "their sharp edge leaves atoms faster than any grid holds, and rates come out wrong by parts in a hundred or a "
            "thousand", 'write a soft edge for the box, such as edge = "1 um", or take numerics.accuracy = "normal"',
        )  # fmt: skip


def _words(
    plan: Plan, axis: int | None, round_about: frozenset[int], even: Sequence[bool], lengths: Lengths
) -> tuple[str, str, str]:
    asked = plan.numerics.axes
    if asked == "auto":
        return choose_words(axis, round_about, [e and not u for e, u in zip(even, lengths.uniform, strict=True)])
    words = ("wave", "wave", "wave") if asked == "full" else tuple("wave" if w == "wall" else w for w in asked)
    pair = [j for j in range(3) if words[j] == "radial"]
    if pair:
        (alone,) = set(range(3)) - set(pair)
        if alone not in round_about or any(lengths.uniform[j] or lengths.periodic[j] for j in pair):
            raise PlanError.at(
                "numerics.axes", str(list(words)), f"the plan is not round about {AXES[alone]} all the way",
                "write axes = \"auto\", or \"full\"",
            )  # fmt: skip
    for j in range(3):
        if words[j] == "mirror" and (not even[j] or lengths.uniform[j]):
            raise PlanError.at(
                f"numerics.axes[{j}]", '"mirror"', f"the plan is not even along {AXES[j]} all the way",
                "write axes = \"auto\", or \"wave\" here",
            )  # fmt: skip
    return words


def _space(plan: Plan, words: tuple[str, ...], lengths: Lengths, accuracy: Accuracy) -> Space:
    threads = plan.numerics.threads or os.cpu_count() or 1
    space = choose_space(words, lengths, accuracy, extent=plan.numerics.extent, points=plan.numerics.points, threads=1)
    if space.size >= LARGE:
        space = Space(space.axes, threads=threads)
    needed = memory_needed(space.size)
    if plan.numerics.memory is not None and needed > plan.numerics.memory:
        raise PlanError.at(
            "numerics.memory", f"{plan.numerics.memory / 1e9:.3g} GB",
            f"{' x '.join(map(str, space.shape))} points need about {needed / 1e9:.3g} GB",
            "allow more, take numerics.accuracy = \"draft\", or fewer numerics.points",
        )  # fmt: skip
    return space


def memory_needed(points: int) -> float:
    """Bytes a run takes at most on a grid of so many points, found by measuring: complex arrays, and what is recorded."""
    return 16.0 * COMPLEX_ARRAYS * points + RECORDED


def _legs(
    plan: Plan, timeline: Timeline, shots: tuple[Shot, ...], spaces: list[Space], moving: list[tuple[bool, bool, bool]]
) -> tuple[Leg, ...]:
    legs = []
    walled = _walls(timeline.initial)
    for step, space, flags in zip(timeline.steps, spaces, moving, strict=True):
        stage, stretch = plan.sequence[step.stage], step.stretch
        begin, _ = timeline.stage_times[step.stage]
        wanted = [begin + t for t in stage.pictures] + list(plan.track.at) + [s.time for s in shots]
        legs.append(Leg(
            name=stage.name, kind=stage.kind, stage=step.stage, start=stretch.start, stop=stretch.stop, space=space,
            interval=stretch, trapped=_held(step), moving=flags, brief=stage.kind == "pulse" and bool(stretch.gripped()),
            landings=tuple(sorted({t for t in wanted if stretch.start < t < stretch.stop})), kick=step.kick,
            last=step.last, unwalled=walled and not _walls(stretch), split=_split(plan, step),
        ))  # fmt: skip
        walled = walled or _walls(stretch)
    return tuple(legs)


def _split(plan: Plan, step: Step) -> tuple[bool, bool, bool]:
    """Directions along which a lattice acts or has acted."""
    lit = {part.direction for name, part in plan.trap.items() if isinstance(part, Lattice) and name in step.fallen}
    return tuple(j in lit for j in range(3))


def plan_shots(plan: Plan, timeline: Timeline) -> tuple[Shot, ...]:
    """Which camera takes a picture when: as the stages ask, else at the end of every release, else at the very end."""
    asked = {i: list(stage.pictures) for i, stage in enumerate(plan.sequence) if stage.pictures}
    for i, stage in enumerate(plan.sequence):
        if stage.kind == "release" and i not in asked:
            asked[i] = [stage.duration]
    if not asked and plan.sequence:
        asked[len(plan.sequence) - 1] = [plan.sequence[-1].duration]
    shots = []
    for i, times in sorted(asked.items()):
        stage, (start, stop) = plan.sequence[i], timeline.stage_times[i]
        for t in times:
            when = stop if t == stage.duration else start + t
            shots += [Shot(f"{name}_{stage.name}_{1e3 * t:.6g}ms", name, when) for name in plan.camera]
    return tuple(shots)


def _walls(stretch: Stretch) -> bool:
    """Whether a box is on all through a stretch."""
    return any(isinstance(p, Box) and p.strength > DYING for p in stretch.parts_at(stretch.stop))


def _held(step: Step) -> bool:
    """Whether a trap is on and stays on; one that is dying away leaves the cloud to fly."""
    return any(p.confines and p.strength > DYING for p in step.stretch.parts_at(step.stretch.stop))


def _why(plan: Plan, round_about: list[frozenset[int]], words: list[tuple[str, ...]]) -> str:
    if plan.numerics.axes != "auto":
        return "the axes are as the plan forces them"
    told = []
    lost = " at first" if words[-1] != words[0] else ""
    alike = [AXES[j] for j in range(3) if words[0][j] == "radial"]
    if alike:
        told.append(f"{' and '.join(alike)} are alike{lost}, so one radial axis covers them")
    closed = [AXES[j] for j in range(3) if words[0][j] == "wall"]
    if closed:
        told.append(f"along {', '.join(closed)} the axes end at the perfectly reflecting walls")
    mirrored = [AXES[j] for j in range(3) if words[0][j] == "mirror"]
    if mirrored:
        told.append(f"along {', '.join(mirrored)} the cloud is even about its centre{lost}, so half an axis does")
    if not told:
        told.append("nothing is alike, so each direction has a whole axis of its own")
    if words[-1] != words[0]:
        told.append("from where the sequence breaks that, larger axes take over" if not closed else
                    "from where they open, larger axes take over")
    return "; ".join(told)
