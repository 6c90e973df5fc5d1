"""The march: a cloud through the legs of a plan, one accepted step at a time.

`march` is a generator that can be restarted: from any state it yielded, a new march is exactly the rest of the run.
Recording, checkpoints and progress are consumers of what it yields.
"""

from __future__ import annotations

from collections.abc import Callable, Generator, Iterator, Sequence
from dataclasses import replace

import numpy as np

from trapsim.cloud.cloud import Cloud, regauge
from trapsim.constants import HBAR
from trapsim.evolve.door import FULL_TAIL, Afford, made_fit, settled, through
from trapsim.evolve.guards import Guards, edge_population, spectrum_population
from trapsim.evolve.pace import Buffers
from trapsim.evolve.regrid import grown_alike, nearly_full, roomier
from trapsim.evolve.scaling import LawStart, MovingLaw, StandingLaw, measure_law
from trapsim.evolve.splitstep import Rest, SplitStep
from trapsim.evolve.state import Leg, Pace, State, Tick
from trapsim.measure.observables import Profile, profile, reach, spectral_marginals
from trapsim.space.space import Array, Space
from trapsim.terms.part import remainder

#: the frame law is measured again when a width in the frame has moved by this share
MOVED = 0.15
#: the frame takes up a mean wave number beyond this share of the spread
FOLLOW = 1e-3
#: a spectrum is full when all but FULL_TAIL of it reaches this share of its axis; then the frame takes up a correlation
#: of xi and k beyond CHIRPED
FULL, CHIRPED = 0.5, 0.1
#: in flight the frame grows so that less than this share of what the guards allow comes near the edge
HELD_BACK = 0.1
#: share of an axis' highest wave number to which the phase at the cloud's edge may wind before the frame is settled again
WOUND = 0.8
#: by how much an axis is stretched to see what is not steered change
STRETCH = 1e-4
#: transform pairs a full profile costs: half a pair, and one derivative per direction
PROFILE_PAIRS = 1.5
#: plain steps between two looks at the spectrum, where something may shift it
LOOK = 8


def march(
    state: State, legs: Sequence[Leg], *, pace: Pace, guards: Guards, afford: Afford = lambda points: False
) -> Iterator[Tick]:
    """Play the legs from a state on; yields after every accepted step.

    Parameters
    ----------
    state : State
    legs : sequence of Leg
    pace : Pace
    guards : Guards
    afford : callable
        Whether there is memory for so many points, when a cloud outgrows its grid; without it the grids stay as they are.

    Raises
    ------
    PhysicsRefused
        When a guard stops the march.
    """
    while state.leg < len(legs):
        leg = legs[state.leg]
        if state.law is None:
            before = legs[state.leg - 1].space if state.leg else state.cloud.space
            state = _enter(state, leg, before, guards=guards, afford=afford)
        state = yield from _play(state, leg, pace=pace, guards=guards, afford=afford)


def _enter(state: State, leg: Leg, before: Space, *, guards: Guards, afford: Afford) -> State:
    """Put the cloud on the leg's space, kick it, settle the frame, and measure the frame law on it."""
    place = f"stage {leg.name}"
    cloud = replace(state.cloud, time=leg.start)
    cloud, lost = through(cloud, grown_alike(leg.space, cloud.space, before))
    cloud = replace(cloud, frame=replace(cloud.frame, Xdot=cloud.frame.Xdot + np.asarray(leg.kick)))
    cloud = settled(made_fit(cloud, leg.moving, place=place, afford=afford), leg.moving)
    cloud, seen = _followed(cloud, profile(cloud), leg)
    books = replace(state.books.spent(PROFILE_PAIRS, flight=not leg.trapped), kink=np.maximum(state.books.kink, lost))
    spectrum = spectrum_population(cloud.space, seen.spectrum)
    notices = state.notices
    if nearly_full(guards, np.zeros(3), spectrum):
        found = roomier(cloud, leg, guards=guards, edge=np.zeros(3), spectrum=spectrum, afford=afford)
        if found is not None:
            cloud, told = found
            seen, notices = profile(cloud), (*notices, told)
            books = books.spent(PROFILE_PAIRS, flight=not leg.trapped)
    books = replace(books, spectrum=np.maximum(books.spectrum, spectrum))
    _stop_at(cloud, leg, guards, norm=seen.norm, spectrum=spectrum_population(cloud.space, seen.spectrum))
    law = _law_start(cloud, seen, leg, guards)
    return replace(state, cloud=cloud, law=law, stride=None, books=books, notices=notices)


def _law_start(cloud: Cloud, seen: Profile, leg: Leg, guards: Guards) -> LawStart:
    front = 0.0
    if leg.unwalled:
        # a flat cloud let go runs ahead of its own scaling at up to twice the speed of sound
        sound = np.sqrt(cloud.q * max(leg.interval.coupling(cloud.time), 0.0) * cloud.density().max() / cloud.frame.B)
        front = 2 * float(sound)
    tail = None if leg.trapped else HELD_BACK * guards.edge
    squeeze = _squeeze(cloud, seen, leg) if leg.trapped else None
    law = measure_law(
        cloud, seen, tail=tail, moving=leg.moving, split=leg.split, front=front, squeeze=squeeze
    )
    return replace(law, edge=float(np.where(guards.watched, edge_population(cloud.space, seen.density), 0.0).max()))


def _squeeze(cloud: Cloud, seen: Profile, leg: Leg) -> Array | None:
    """How what is not steered holds the widths, <y_j dU/dy_j>/(m <y_j^2>) (1/s^2); None when nothing is left."""
    parts = leg.interval.parts_at(cloud.time)
    if all(p.quadratic for p in parts):
        return None
    space, frame = cloud.space, cloud.frame
    density, coordinates, X = cloud.density(), space.coordinates(), tuple(frame.X)
    out = np.zeros(3)
    for axis in space.axes:
        if axis.uniform:
            continue
        wide, narrow = (
            remainder(parts, X, *(
                frame.lab((1 + sign * STRETCH * (j in axis.covers)) * x, j) for j, x in enumerate(coordinates)
            ), steered_along=leg.moving)
            for sign in (1, -1)
        )  # fmt: skip
        slope = space.integral((wide - narrow) * density) / (2 * STRETCH * seen.norm)
        size = sum(frame.b[j] ** 2 * seen.var[j] for j in axis.covers) * HBAR / cloud.q
        out[list(axis.covers)] = slope / size
    return out


def _followed(cloud: Cloud, seen: Profile, leg: Leg) -> tuple[Cloud, Profile]:
    """The same cloud in a frame that suits it better, where that is needed; exact.

    A mean of k of its own goes into the frame's velocity. When the spectrum fills its axis, the correlation of k and xi
    goes into the rate of scale, which leaves the wave function as narrow in k as it can be.
    """
    moving = np.asarray(leg.moving)
    drift = np.where(moving, seen.k_mean, 0.0)
    drift[np.abs(drift) <= FOLLOW * np.sqrt(seen.k_var)] = 0.0
    chirp = np.zeros(3)
    for j in np.nonzero(moving & (seen.var > 0))[0]:
        axis = cloud.space.axis(j)
        width = reach(axis.k, seen.spectrum[cloud.space.dim(j)] * axis.spectral_weights, FULL_TAIL)
        if width > FULL * axis.k_max and seen.cov[j] ** 2 > CHIRPED**2 * seen.var[j] * seen.k_var[j]:
            chirp[j] = seen.cov[j] / seen.var[j]
    if not (drift.any() or chirp.any()):
        return cloud, seen
    frame, q = cloud.frame, cloud.q
    bdot = frame.bdot + q * chirp / frame.b
    # the rate of scale acts about the frame's centre, so that it gives the mean of xi a velocity too
    Xdot = frame.Xdot + (q / frame.b) * (drift - chirp * seen.mean)
    cloud = regauge(cloud, bdot=bdot, Xdot=Xdot)
    return cloud, profile(cloud)


def stepper(law_start: LawStart, leg: Leg, q: float) -> SplitStep:
    """Steps on a leg under the frame law that starts from `law_start`."""
    law = MovingLaw(law_start, leg.interval, q=q, moving=leg.moving) if any(leg.moving) else StandingLaw(
        law_start, leg.interval
    )
    return SplitStep(leg.space, law, q=q, rest=_rest(law, leg), rate=_rate(law, leg))


def _rest(law: MovingLaw | StandingLaw, leg: Leg) -> Rest:
    """What the frame does not take, as a function of time; evaluated once where nothing changes."""
    coordinates = leg.space.coordinates()

    def left(t: float) -> Array | float:
        frame = law.frame(t)
        lab = tuple(frame.lab(x, j) for j, x in enumerate(coordinates))
        return remainder(leg.interval.parts_at(t), tuple(frame.X), *lab, steered_along=leg.moving)

    # in the middle, because a part that is ramped up from nothing is off at the start
    parts = leg.interval.parts_at(0.5 * (leg.start + leg.stop))
    if all(leg.moving) and all(p.quadratic for p in parts):
        return lambda t: 0.0
    if leg.interval.steady and not any(leg.moving):
        always = left(0.5 * (leg.start + leg.stop))
        return lambda t: always
    return left


def _rate(law: MovingLaw | StandingLaw, leg: Leg) -> Callable[[float], float]:
    """How fast (rad/s) the potential changes at the points of the grid, which move past it with the frame."""
    half = np.array([leg.space.axis(j).half_extent for j in range(3)])

    def rate(t: float) -> float:
        frame = law.frame(t)
        speed = np.abs(frame.Xdot) + np.abs(frame.bdot) * half
        parts = (p for p in leg.interval.parts_at(t) if not p.quadratic and p.strength > 0)
        return max((p.rate(speed) for p in parts), default=0.0)

    if all(p.quadratic for p in leg.interval.parts_at(0.5 * (leg.start + leg.stop))):
        return lambda t: 0.0
    return rate


def _play(
    state: State, leg: Leg, *, pace: Pace, guards: Guards, afford: Afford
) -> Generator[Tick, None, State]:
    """From a state inside a leg to the leg's end; returns the state at the next leg's door."""
    cloud, law_start, q = state.cloud, state.law, state.cloud.q
    # it may have outgrown the space that was planned
    leg = replace(leg, space=cloud.space)
    step = stepper(law_start, leg, q)
    steps = pace.of(leg)
    work = Buffers(step)
    stride = state.stride
    books, notices = state.books, state.notices
    phi = cloud.space.array(cloud.phi)
    # a moving frame takes up all that is quadratic; anything else may throw atoms out of the spectrum on the way
    shifting = not all(leg.moving) or not all(p.quadratic for p in leg.interval.parts_at(0.5 * (leg.start + leg.stop)))
    targets = sorted({t for t in leg.landings if leg.start < t < leg.stop} | {leg.stop})
    targets = [t for t in targets if t > cloud.time]
    for target in targets:
        while (t := cloud.time) < target:
            if stride is None:
                stride = steps.first(step, t, float(cloud.density().max()))
            left = target - t
            limit = left if stride.h >= 0.95 * left else (left / 2 if stride.h > 0.5 * left else left)
            spent = step.pairs
            work.before[...] = phi
            taken = steps.take(step, phi, t, stride, limit, work)
            now = target if left - taken.h < 1e-9 * left else t + taken.h
            after = replace(cloud, phi=phi, time=now, frame=step.law.frame(now))
            spent = step.pairs - spent
            marginals = after.space.marginals(after.density())
            edge = np.where(guards.watched, edge_population(after.space, marginals), 0.0)
            spectrum = np.zeros(3)
            if now == leg.stop or books.steps % LOOK == 0 or (shifting and not leg.trapped):
                spectrum, spent = _spectrum(after), spent + 0.5
            norm = float(np.dot(marginals[0], after.space.axes[0].weights))
            if np.isfinite(norm) and nearly_full(guards, edge, spectrum):
                before = replace(cloud, phi=work.before)
                found = roomier(before, leg, guards=guards, edge=edge, spectrum=spectrum, afford=afford)
                if found is not None:
                    # the step is taken back, and taken again with more room
                    cloud, told = found
                    phi, notices, leg = cloud.phi, (*notices, told), replace(leg, space=cloud.space)
                    law_start = _law_start(cloud, profile(cloud), leg, guards)
                    step = stepper(law_start, leg, q)
                    work, stride = Buffers(step), None
                    books = books.spent(spent + PROFILE_PAIRS, flight=not leg.trapped)
                    continue
            cloud, stride = after, taken.stride
            books = replace(
                books.spent(spent, flight=not leg.trapped),
                steps=books.steps + 1, rejected=books.rejected + taken.rejected, error=books.error + taken.error,
                extrapolated=books.extrapolated + taken.error ** (5 / 3), local=max(books.local, taken.local),
                pull=max(books.pull, taken.local / taken.h), edge=np.maximum(books.edge, edge),
                spectrum=np.maximum(books.spectrum, spectrum),
            )  # fmt: skip
            crowded = not leg.trapped and edge.max() > max(HELD_BACK * guards.edge, 2 * law_start.edge)
            moved = _has_moved(cloud, marginals, law_start, leg)
            _stop_at(cloud, leg, guards, norm=norm, edge=edge, spectrum=spectrum)
            if any(leg.moving) and now < leg.stop and (moved or crowded):
                cloud, seen = _followed(cloud, profile(cloud), leg)
                phi = cloud.phi
                law_start = _law_start(cloud, seen, leg, guards)
                books = books.spent(PROFILE_PAIRS, flight=not leg.trapped)
                step = stepper(law_start, leg, q)
            state = replace(state, cloud=cloud, stride=stride, law=law_start, books=books, notices=notices)
            if now == leg.stop:
                state = replace(state, leg=state.leg + 1, law=None, stride=None)
            yield Tick(state, "edge" if now == leg.stop else ("landing" if now == target else "step"))
    if cloud.time >= leg.stop and state.law is not None:
        # a leg of no duration: only its kick
        state = replace(state, leg=state.leg + 1, law=None, stride=None)
        yield Tick(state, "edge")
    return state


def _stop_at(
    cloud: Cloud, leg: Leg, guards: Guards, *, norm: float, spectrum: Array, edge: Array | None = None
) -> None:
    """Let the guards look, and stop where they say so."""
    place = f"stage {leg.name}"
    alarm = guards.check(
        time=cloud.time, norm=norm, edge=np.zeros(3) if edge is None else edge, spectrum=spectrum, place=place
    )
    if alarm:
        attractive = leg.interval.coupling(cloud.time) < 0
        raise alarm.refuse(time=cloud.time, place=place, space=cloud.space, attractive=attractive)


def _spectrum(cloud: Cloud) -> Array:
    """Populations (3,) near the highest wave numbers; for half a pair."""
    return spectrum_population(cloud.space, spectral_marginals(cloud))


def _has_moved(cloud: Cloud, marginals: list[Array], law: LawStart, leg: Leg) -> bool:
    """Whether a width in the frame has changed so much, or in flight so fast, that the frame no longer suits the cloud."""
    for j in range(3):
        axis = cloud.space.axis(j)
        if not axis.uniform and leg.moving[j]:
            weighted = marginals[cloud.space.dim(j)] * axis.weights
            mean = weighted @ axis.x1(j)
            ratio = np.sqrt((weighted @ axis.x2(j) - mean**2) / law.var[j])
            if not 1 / (1 + MOVED) < ratio < 1 + MOVED:
                return True
            if leg.trapped:
                continue
            # a cloud that grows at another rate than its frame winds up its phase, most of all at its edge
            rate = 2 * abs(np.log(ratio)) / (cloud.time - law.time)
            wound = rate * cloud.frame.b[j] ** 2 / cloud.q * reach(axis.points, weighted, FULL_TAIL)
            if wound > WOUND * axis.k_max:
                return True
    return False
