"""From what the engine did to the figures of the summary."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

import numpy as np

import trapsim
from trapsim.cloud.cloud import Cloud
from trapsim.corridor.doubts import Balance, doubts, energy_drift, kink_error
from trapsim.errors import Notice
from trapsim.estimate.law import ScalingLaw
from trapsim.evolve.relax import Relaxed
from trapsim.evolve.state import State
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
from trapsim.space.axes import Array

_HZ = 1 / (2 * np.pi)
#: a numerical error of the widths, relative, from which on a reader is warned of them
ROUGH = 0.05


def ground_figures(
    setup: Setup, relaxed: Relaxed, cloud: Cloud, seen: Moments, law: ScalingLaw | None, balanced: Balance | None
) -> Ground:
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
        virial=None if balanced is None else balanced.virial,
    )


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
    slack: float,
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
    error = doubts(
        setup, state, track, residual=ground.residual or 0.0, slack=slack, drift=drift or 0.0, kink=kink,
        lit={plan.trap[part].direction for one in stages if one.end for part in one.end.orders or {}},
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
            error=ErrorEstimate(
                error.width, error.rate, None if error.centre is None else 1e6 * error.centre, error.orders
            ),
        ),
        pictures=tuple(_picture_figures(p, timeline.released) for p in album.pictures.values()),
        warnings=(*notices, *_told_of(kink), *_rough(error.width), *_outside(album.pictures.values())),
    )  # fmt: skip


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


def wave_function(cloud: Cloud, origin: Array) -> WaveFunction:
    """A cloud as it is kept in a file, positions counted from the origin."""
    axes = tuple(AxisRecord(a.kind, a.covers, a.points, a.weights) for a in cloud.space.axes)
    frame = cloud.frame
    return WaveFunction(
        cloud.time, np.array(cloud.phi), axes, frame.b, frame.bdot, frame.X - np.asarray(origin), frame.Xdot
    )
