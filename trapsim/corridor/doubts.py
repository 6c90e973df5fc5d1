"""What a run can be held against: exact statements that its numbers meet only so well."""

from __future__ import annotations

from collections.abc import Collection, Sequence
from dataclasses import dataclass

import numpy as np

from trapsim.cloud.cloud import Cloud
from trapsim.constants import HBAR
from trapsim.estimate.trust import Trust, trust
from trapsim.evolve.state import Leg, State
from trapsim.measure.observables import Moments
from trapsim.prepare.setup import Setup
from trapsim.record.series import Track
from trapsim.space.axes import Array, Axis, Wall
from trapsim.terms.lattice import Lattice
from trapsim.terms.part import steered

#: by how much an axis is stretched to see the potential change
STRETCH = 1e-4
#: no cloud is softer than this against a stretch, in units of its energy; one about to collapse is
SOFTEST = 0.1


@dataclass(frozen=True)
class Balance:
    """How far a cloud at rest is from the balance of its forces.

    Parameters
    ----------
    virial : float
        By how much it misses the virial theorem, relative to the energy.
    slack : float
        By how much a width is wrong if that is real, relative.
    """

    virial: float
    slack: float


def balance(setup: Setup, cloud: Cloud, seen: Moments) -> Balance | None:
    """The worst over the axes that something confines; None where nothing does.

    Stretching an axis by 1 + s changes the energy by s (<y_j dV/dy_j> - 2 K_j - E_int), which vanishes at rest: its
    share of the energy is the virial residual. With the stiffness <y_j^2 d^2V/dy_j^2> + 6 K_j + 2 E_int against such a
    stretch it says how far the width is out. On a radial axis the sum over its two directions. The derivatives are those of
    the potential under a stretch of one axis; perfectly reflecting walls push with (hbar^2/2m) |d_j psi|^2 per area.
    """
    size = max(seen.internal, float(seen.kinetic.sum()))
    density, off, slack = cloud.density(), [], []
    for axis in cloud.space.axes:
        if axis.uniform or any(setup.lengths.periodic[j] for j in axis.covers):
            continue
        wide, here, narrow = (
            setup.potential([1 + sign * STRETCH * (j in axis.covers) for j in range(3)]) for sign in (1, 0, -1)
        )
        slope = cloud.space.integral((wide - narrow) * density) / (2 * STRETCH) + _pressure(cloud, axis)
        bend = cloud.space.integral((wide - 2 * here + narrow) * density) / STRETCH**2
        ways, kinetic = len(axis.covers), float(seen.kinetic[list(axis.covers)].sum())
        missing = abs(2 * kinetic - slope + ways * seen.interaction)
        off.append(missing / size)
        stiffness = bend + 6 * kinetic + ways * (ways + 1) * seen.interaction
        slack.append(missing / (size if axis.walled else max(stiffness, SOFTEST * size)))
    return Balance(float(max(off)), float(max(slack))) if off else None


def _pressure(cloud: Cloud, axis: Axis) -> float:
    """The push of perfectly reflecting walls at both ends of an axis times their distance from its middle, J."""
    if not isinstance(axis, Wall):
        return 0.0
    d = cloud.space.axes.index(axis)
    steep = np.abs(np.tensordot(axis.slopes([-axis.half_extent, axis.half_extent]), cloud.phi, axes=(1, d))) ** 2
    for other in reversed([a for a in cloud.space.axes if a is not axis]):
        steep = steep @ other.weights
    return float(0.5 * HBAR * cloud.q * axis.half_extent * steep.sum())


def doubts(
    setup: Setup, state: State, track: Track, *, residual: float, slack: float, drift: float, kink: float,
    lit: Collection[int],
) -> Trust:
    """How wrong a run may be, from its books and from what it can be held against.

    Parameters
    ----------
    setup : Setup
    state : State
        The last one.
    track : Track
    residual, slack : float
        Of the ground state.
    drift, kink : float
        `energy_drift` and `kink_error`.
    lit : directions
        Along which lattices have acted.
    """
    legs, origin = setup.legs, setup.timeline.origin
    return trust(
        state.books, residual=residual, slack=slack, energy_drift=drift,
        swing=swing_error(track, legs, setup.q, origin), resistance=resistance(setup),
        slowed=slowed(track), centre_off=_centre_off(setup, state, track),
        kink=kink, grown=grown(track, legs), lit=lit,
    )  # fmt: skip


def kink_error(lost: Array, track: Track, q: float) -> float:
    """By what share the last rates are too small, for the variance of k (3,) lost when hard walls opened."""
    spread = track["velocity_spread"][-1]
    return float(np.max(0.5 * q**2 * lost / np.where(lost > 0, spread**2, 1.0)))


def grown(track: Track, legs: Sequence[Leg]) -> float:
    """The share of the mean square width at the end that was not there when walls opened; the worst of the directions."""
    opened = next((leg.start for leg in legs if leg.unwalled), 0.0)
    before, end = track["width"][np.searchsorted(track.time, opened, side="right") - 1], track["width"][-1]
    return float(max(np.max(1 - before**2 / np.where(end > 0, end, np.inf) ** 2, where=end > 0, initial=0.0), 0.0))


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


def resistance(setup: Setup) -> float:
    """What a cloud held in a trap resists a wrong pull with, rad/s: its chemical potential, and the gap of a lattice.

    The gap is that of a deep lattice, sqrt(4 depth E_r): the frequency of a valley.
    """
    gaps = [0.0]
    for leg in setup.legs:
        if leg.trapped:
            for t in (leg.start, 0.5 * (leg.start + leg.stop), leg.stop):
                lit = [p for p in leg.interval.parts_at(t) if isinstance(p, Lattice)]
                gaps += [float(np.sqrt(4 * abs(p.strength * p.depth) * p.recoil_energy)) / HBAR for p in lit]
    return max(abs(setup.lengths.mu), float(setup.omega.max())) + max(gaps)


def slowed(track: Track) -> float:
    """How many times faster than at the end the atoms have been on the way, about their centre: what a lens has taken.

    The worst of the directions; an error made before a lens stays, while what it is compared with goes.
    """
    spread = track["velocity_spread"]
    end = np.where(spread[-1] > 0, spread[-1], np.inf)
    return float(max(np.max(spread / end), 1.0))


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
