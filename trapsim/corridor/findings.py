"""From what the engine did to the figures of the summary."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np

import trapsim
from trapsim.cloud.cloud import Cloud
from trapsim.constants import HBAR
from trapsim.errors import Notice
from trapsim.estimate.law import ScalingLaw
from trapsim.estimate.trust import trust
from trapsim.evolve.relax import Relaxed
from trapsim.evolve.state import Leg, State
from trapsim.measure.observables import Moments, peak_density
from trapsim.measure.picture import Picture
from trapsim.prepare.setup import Setup
from trapsim.record.album import Album
from trapsim.record.series import AxisRecord, Track, WaveFunction
from trapsim.record.summary import (
    Effort,
    ErrorEstimate,
    Ground,
    LegSpace,
    MarchEffort,
    Moment,
    Numerics,
    PictureFigures,
    StageEnd,
    Summary,
    moment_of,
)
from trapsim.space.axes import Array, Axis, Wall
from trapsim.terms.part import steered

_HZ = 1 / (2 * np.pi)
#: a numerical error of the widths, relative, from which on a reader is warned of them
ROUGH = 0.05
#: by how much an axis is stretched to see the potential change
STRETCH = 1e-4


def ground_figures(setup: Setup, relaxed: Relaxed, cloud: Cloud, seen: Moments, law: ScalingLaw | None) -> Ground:
    """The figures of the ground state."""
    atoms = setup.plan.atoms
    peak = atoms.number * peak_density(cloud)
    a = atoms.scattering_length
    return Ground(
        origin_um=1e6 * np.array(setup.timeline.origin),
        chemical_potential_hz=relaxed.mu * _HZ,
        energy_hz=relaxed.energy * _HZ,
        kinetic_hz=relaxed.kinetic * _HZ,
        trap_hz=relaxed.potential * _HZ,
        interaction_hz=relaxed.interaction * _HZ,
        width_um=np.where(setup.lengths.periodic, np.nan, 1e6 * seen.width),
        thomas_fermi_radius_um=np.full(3, np.nan) if law is None or law.radius is None else 1e6 * law.radius,
        peak_density_per_um3=1e-18 * peak,
        healing_length_um=1e6 / np.sqrt(8 * np.pi * peak * a) if a > 0 else None,
        gas_parameter=peak * abs(a) ** 3,
        residual=relaxed.residual,
        virial=virial(setup, cloud, seen),
    )


def virial(setup: Setup, cloud: Cloud, seen: Moments) -> float | None:
    """The worst of |2 K_j - <y_j dV/dy_j> + E_int| over the axes that something confines, relative to the energy.

    On a radial axis the sum over its two directions. The derivative is that of the potential under a stretch of one axis;
    perfectly reflecting walls push with (hbar^2/2m) |d_j psi|^2 per area.
    """
    size = max(seen.internal, float(seen.kinetic.sum()))
    off = []
    for axis in cloud.space.axes:
        if axis.uniform or any(setup.lengths.periodic[j] for j in axis.covers):
            continue
        wide, narrow = (
            setup.potential([1 + sign * STRETCH * (j in axis.covers) for j in range(3)]) for sign in (1, -1)
        )
        slope = cloud.space.integral((wide - narrow) * cloud.density()) / (2 * STRETCH) + _pressure(cloud, axis)
        off.append(abs(2 * seen.kinetic[list(axis.covers)].sum() - slope + len(axis.covers) * seen.interaction))
    return float(max(off) / size) if off else None


def _pressure(cloud: Cloud, axis: Axis) -> float:
    """The push of perfectly reflecting walls at both ends of an axis times their distance from its middle, J."""
    if not isinstance(axis, Wall):
        return 0.0
    d = cloud.space.axes.index(axis)
    steep = np.abs(np.tensordot(axis.slopes([-axis.half_extent, axis.half_extent]), cloud.phi, axes=(1, d))) ** 2
    for other in reversed([a for a in cloud.space.axes if a is not axis]):
        steep = steep @ other.weights
    return float(0.5 * HBAR * cloud.q * axis.half_extent * steep.sum())


@dataclass(frozen=True)
class Spent:
    """Pairs and wall-clock seconds."""

    ground_pairs: float
    ground_seconds: float
    march_seconds: float
    seconds: float
    recorder_pairs: float


def summarise(
    setup: Setup,
    *,
    status: str,
    ground: Ground,
    state: State,
    track: Track,
    law: ScalingLaw | None,
    spent: Spent,
    continuity: float | None,
    album: Album,
    notices: Sequence[Notice],
) -> Summary:
    """All figures of a run, complete or not."""
    plan, timeline = setup.plan, setup.timeline
    mass = plan.atoms.mass
    model = law.model if law else ""
    ends = _stage_ends(track, timeline.stage_times, state.cloud.time)
    stages = tuple(
        StageEnd(
            name=stage.name, kind=stage.kind, start_ms=1e3 * start, duration_ms=1e3 * stage.duration,
            end=None if index is None else moment_of(track, index, mass=mass, law_model=model, orders=album.orders(i)),
        )
        for i, (stage, (start, _), index) in enumerate(zip(plan.sequence, timeline.stage_times, ends, strict=True))
    )  # fmt: skip
    end: Moment | None = None
    if plan.sequence:
        orders = album.orders(int(track["stage"][-1])) if status == "complete" else None
        end = moment_of(track, -1, mass=mass, law_model=model, orders=orders)
    drift = energy_drift(track, setup.legs, timeline.origin)
    kink = kink_error(state.books.kink, track, setup.q)
    error = trust(
        state.books, residual=ground.residual or 0.0, virial=ground.virial or 0.0, energy_drift=drift or 0.0,
        swing=swing_error(track, setup.legs, setup.q, timeline.origin), centre_off=_centre_off(setup, state, track),
        kink=kink,
    )  # fmt: skip
    return Summary(
        title=printable(plan.title or plan.name),
        status=status,
        key=plan.key,
        march_key=plan.march_key,
        version=trapsim.__version__,
        ground=ground,
        stages=stages,
        end=end,
        numerics=Numerics(
            axes=tuple(setup.space.words()),
            points=tuple(setup.space.points_per_direction()),
            legs=_leg_spaces(setup),
            ground=Effort(spent.ground_pairs, spent.ground_seconds),
            march=None if not setup.legs else MarchEffort(
                state.books.steps, state.books.pairs, spent.recorder_pairs, spent.march_seconds
            ),
            seconds=spent.seconds,
            norm_drift=float(track["norm"][-1] - track["norm"][0]),
            energy_drift=drift,
            continuity=continuity,
            error=ErrorEstimate(error.width, error.rate, None if error.centre is None else 1e6 * error.centre),
        ),
        pictures=tuple(_picture_figures(p, timeline.released) for p in album.pictures.values()),
        warnings=(*notices, *_told_of(kink), *_rough(error.width), *_outside(album.pictures.values())),
    )  # fmt: skip


def kink_error(lost: Array, track: Track, q: float) -> float:
    """By what share the last rates are too small, for the variance of k (3,) lost when hard walls opened."""
    spread = track["velocity_spread"][-1]
    return float(np.max(0.5 * q**2 * lost / np.where(lost > 0, spread**2, 1.0)))


def _told_of(kink: float) -> tuple[Notice, ...]:
    if not kink:
        return ()
    return (Notice(
        "hard_edge", "the perfectly reflecting walls let go of a cloud that ends on them at a slope; its fastest atoms are "
        f"beyond this grid, so that expansion rates and late widths are up to {100 * kink:.2g} % too small. A soft edge, "
        "or more numerics.points, make that less",
    ),)  # fmt: skip


def _rough(error: float | None) -> tuple[Notice, ...]:
    """What to say of widths whose numerical error is larger than anything a lab would put up with."""
    if error is None or error < ROUGH:
        return ()
    size = "larger than they are" if error > 1 else f"of {100 * error:.2g} %"
    return (Notice(
        "rough", f"the numerical error of the widths may be {size}: do not use them. Take a finer numerics.accuracy or "
        "more numerics.points; if that does not help, something in the plan is sharper than any grid, such as an edge",
    ),)  # fmt: skip


def _picture_figures(picture: Picture, released: float | None) -> PictureFigures:
    centre, width = picture.moments()
    flight = None if released is None or picture.time < released else 1e3 * (picture.time - released)
    atoms, peak = (0.0, 0.0) if picture.empty else (picture.atoms, float(picture.optical_density.max()))
    return PictureFigures(
        picture.name, picture.camera, 1e3 * picture.time, flight, atoms, peak, tuple(1e6 * width), tuple(1e6 * centre)
    )


def _outside(pictures: Iterable[Picture]) -> list[Notice]:
    """What to say of pictures that the cloud is not on."""
    return [
        Notice(
            "outside", f"picture {p.name}: the cloud is outside it, no atom is on it; change aim or size of camera "
            f"{p.camera}, or let it follow the cloud",
        )
        for p in pictures if p.empty
    ]  # fmt: skip


def printable(text: str) -> str:
    """The text in one line, without what files and terminals choke on."""
    return " ".join("".join(c if c.isprintable() else " " for c in text).split())


def _leg_spaces(setup: Setup) -> tuple[LegSpace, ...]:
    return tuple(
        LegSpace(
            leg.name, 1e3 * leg.start, 1e3 * leg.stop, tuple(leg.space.words()),
            tuple(leg.space.points_per_direction()), setup.why,
        )
        for leg in setup.legs
    )  # fmt: skip


def _stage_ends(track: Track, times: Sequence[tuple[float, float]], now: float) -> list[int | None]:
    """Where in the track each stage ends; None for a stage that was not finished."""
    out: list[int | None] = []
    for index, (_, stop) in enumerate(times):
        there = np.nonzero((track["stage"] == index) & (track.time == stop))[0]
        out.append(int(there[-1]) if len(there) and now >= stop else None)
    return out


def energy_drift(track: Track, legs: Sequence[Leg], origin: Sequence[float]) -> float | None:
    """The worst relative change of the internal energy over stretches in which nothing changes in time."""
    known = [d for leg in legs if (d := _drift_in(track, leg, origin)) is not None]
    return max(known, default=None)


def _drift_in(track: Track, leg: Leg, origin: Sequence[float]) -> float | None:
    """The relative change of the internal energy over a leg; None where it need not be constant, or was not seen."""
    inside = (track["stage"] == leg.stage) & (track.time > leg.start) & (track.time <= leg.stop)
    if not leg.interval.steady or inside.sum() < 2:
        return None
    values = np.nansum(track["kinetic"], axis=1) + track["trap"] + track["interaction"]
    scale = np.abs(values[inside]).max()
    parts = leg.interval.parts_at(0.5 * (leg.start + leg.stop))
    if not all(p.quadratic for p in parts):
        # only in a parabola is the cloud's own energy kept apart from that of its centre
        place = (track["centre"] + np.asarray(origin)).T
        values = values + track["centre_kinetic"] + sum(p.energy(*place) for p in parts if p.strength > 0)
    values = values[inside]
    return float(np.max(np.abs(values - values[0])) / scale)


def swing_error(track: Track, legs: Sequence[Leg], q: float, origin: Sequence[float]) -> float:
    """What the swings of the cloud in its traps may be out by, relative.

    Plain steps keep a Hamiltonian that is a little wrong: the energy wobbles by that share within a swing, and the
    swing itself runs fast or slow by about half of it per radian.
    """
    total = 0.0
    for leg in legs:
        drift = _drift_in(track, leg, origin) if leg.trapped else None
        if drift is not None:
            _, curvature = steered(leg.interval.parts_at(leg.start), tuple(origin))
            turns = np.sqrt(max(float(curvature.max()), 0.0) * q / HBAR) * (leg.stop - leg.start)
            total += drift * (1 + turns / 2)
    return total


def _centre_off(setup: Setup, state: State, track: Track) -> float | None:
    """How far the centre is from the classical path where the last finished leg ended, m.

    The path is exact for everything that is exactly quadratic (Kohn's theorem), whatever the interaction; else None.
    """
    parts = [p for leg in setup.legs for p in leg.interval.parts_at(0.5 * (leg.start + leg.stop))]
    if not all(p.quadratic for p in parts) or not all(all(leg.moving) for leg in setup.legs):
        return None
    finished = state.leg if state.law is None else state.leg - 1
    if finished < 1 or finished > len(setup.timeline.path):
        return 0.0
    where = np.nonzero(track.time == setup.legs[finished - 1].stop)[0]
    if not len(where):
        return 0.0
    here = track["centre"][where[-1]] + np.array(setup.timeline.origin)
    return float(np.abs(here - setup.timeline.path[finished - 1][:3]).max())


def wave_function(cloud: Cloud, origin: Array) -> WaveFunction:
    """A cloud as it is kept in a file, positions counted from the origin."""
    axes = tuple(AxisRecord(a.kind, a.covers, a.points, a.weights) for a in cloud.space.axes)
    frame = cloud.frame
    return WaveFunction(
        cloud.time, np.array(cloud.phi), axes, frame.b, frame.bdot, frame.X - np.asarray(origin), frame.Xdot
    )
