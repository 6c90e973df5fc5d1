"""What the plan asks of the space: room and fineness for the cloud at rest, and for what light makes of it."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from trapsim.constants import HBAR
from trapsim.errors import PlanError
from trapsim.plan.plan import Plan
from trapsim.prepare.boxes import box_lengths, hard_lengths
from trapsim.prepare.extent import Accuracy, Lengths, cloud_lengths
from trapsim.prepare.growth import scales
from trapsim.prepare.stretch import Stretch
from trapsim.prepare.timeline import Timeline
from trapsim.quantities import human
from trapsim.space.axes import Array
from trapsim.terms.beam import Beam
from trapsim.terms.box import Box
from trapsim.terms.function import Function
from trapsim.terms.lattice import Lattice
from trapsim.terms.part import Part, steered

#: lattice orders kept beyond the highest that is populated, in pairs of recoils
BEYOND = 1.5
#: more room along a lattice whose orders fly apart: they run off before the frame has gathered speed
WINGS = 1.25
#: m, the step of differences of forces
NEARBY = 1e-8
#: grid points per detail of a user's own potential
PER_DETAIL = 3
#: points along a direction when the rim of a shallow trap is looked for
SCAN = 400


def measure_up(
    plan: Plan, timeline: Timeline, omega: Array, q: float, coupling: float, accuracy: Accuracy
) -> Lengths:
    """Lengths of the cloud at rest, whatever holds it."""
    parts = timeline.initial.parts_at(0.0)
    extent = np.asarray(plan.numerics.extent, dtype=float)
    boxes = [p for p in parts if isinstance(p, Box)]
    box = _holding(boxes)
    free = omega == 0
    length = np.where(extent > 0, extent, box.size if box else 0.0)
    most = max([coupling, *(s.stretch.coupling(s.stretch.stop) for s in timeline.steps)]) if coupling >= 0 else coupling
    number = scattering_number(most, q, length / 2, omega)
    lengths = _along_lab(timeline, omega, q, number, accuracy)
    if box is not None and box.hard:
        force, _ = steered(parts, timeline.origin)
        lengths = hard_lengths(lengths, box, q, most, force, trapped=bool(omega.any()))
    elif box is not None:
        lengths = box_lengths(_squeezed(lengths, box, omega, most, q), box, q, accuracy, free | _reaches(lengths, box))
    elif any(isinstance(p, Beam) for p in parts):
        lengths = _within_rim(lengths, parts, timeline.origin, omega)
    periodic = free if box is None else np.zeros(3, dtype=bool)
    return replace(lengths, half=np.where(extent > 0, extent / 2, lengths.half), periodic=periodic)


def _holding(boxes: Sequence[Box]) -> Box | None:
    """What several boxes are together: the nearest walls, the greatest height and the sharpest edge of them."""
    if len(boxes) < 2:
        return boxes[0] if boxes else None
    return replace(
        boxes[0], size=tuple(np.min([p.size for p in boxes], axis=0)), strength=1.0,
        height=max(p.strength * p.height for p in boxes), edge=min(p.edge for p in boxes),
    )  # fmt: skip


def _reaches(lengths: Lengths, box: Box) -> Array:
    """Directions (3,) of a trap in which the cloud would be larger than the box that stands in it."""
    return np.isfinite(lengths.half) & (lengths.half > np.asarray(box.size) / 2)


def _squeezed(lengths: Lengths, box: Box, omega: Array, coupling: float, q: float) -> Lengths:
    """The lengths with at least the chemical potential that the box's walls alone would make."""
    reached = _reaches(lengths, box)
    if not reached.any():
        return lengths
    alone = scattering_number(coupling, q, np.asarray(box.size) / 2, np.zeros(3))
    return replace(lengths, mu=max(lengths.mu, 4 * np.pi * q * alone + float(omega[~reached].sum()) / 2))


def _along_lab(timeline: Timeline, omega: Array, q: float, number: float, accuracy: Accuracy) -> Lengths:
    """Lengths along the lab directions of a cloud whose trap may be turned: its own are those of the principal axes."""
    matrix = _hessian(timeline)
    coupled = np.abs(matrix - np.diag(np.diag(matrix))).max() > 1e-6 * np.abs(matrix).max()
    if not coupled:
        return cloud_lengths(omega, q, number, accuracy)
    values, vectors = np.linalg.eigh(matrix * q / HBAR)
    own = cloud_lengths(np.sqrt(np.maximum(values, 0.0)), q, number, accuracy)
    shares = vectors**2
    seen = shares > 1e-3
    half = np.sqrt(np.sum(np.where(seen, shares * np.where(np.isfinite(own.half), own.half, 0.0) ** 2, 0.0), axis=1))
    finest = np.min(np.where(seen, own.finest[None, :], np.inf), axis=1)
    held = omega > 0
    return replace(own, half=np.where(held, half, np.inf), finest=np.where(held, finest, np.inf))


def _hessian(timeline: Timeline) -> Array:
    """Second derivatives of the steerable potential at the origin, N/m, from the forces around it."""
    parts, origin = timeline.initial.parts_at(0.0), np.array(timeline.origin)
    columns = [
        steered(parts, tuple(origin - NEARBY * e))[0] - steered(parts, tuple(origin + NEARBY * e))[0] for e in np.eye(3)
    ]
    return np.array(columns) / (2 * NEARBY)


def _within_rim(lengths: Lengths, parts: Sequence[Part], origin: Sequence[float], omega: Array) -> Lengths:
    """Room that ends before the potential turns down again beyond its rim, as it does in a beam under gravity.

    Raises
    ------
    PlanError
        When the rim is not clearly above what the zero point of the other directions leaves of the chemical potential.
    """
    half = lengths.half.copy()
    here = np.asarray(origin, dtype=float)
    lowest = sum(p.energy(*here) for p in parts)
    for j in range(3):
        if not np.isfinite(half[j]):
            continue
        needed = max(lengths.mu - (omega.sum() - omega[j]) / 2, omega[j] / 2)
        for side in (-1, 1):
            # a trap that is not a parabola lets the cloud reach further out than one
            out = np.linspace(0.0, 2 * half[j], SCAN)
            place = [np.full(SCAN, here[i]) for i in range(3)]
            place[j] = here[j] + side * out
            energy = (sum(p.energy(*place) for p in parts) - lowest) / HBAR
            top = int(np.argmax(energy))
            rim = top if top < SCAN - 1 and energy[-1] < energy[top] else SCAN - 1
            if energy[rim] < 1.3 * needed:
                raise PlanError.at(
                    "trap", f"a rim {human(HBAR * energy[rim], 'energy')} above its lowest point along {'xyz'[j]}",
                    f"the cloud needs {human(HBAR * needed, 'energy')} and would leak over it",
                    "make the trap deeper, take fewer atoms, or levitate them with a gradient",
                )  # fmt: skip
            enough = np.nonzero(energy > 1.3 * needed)[0][0]
            half[j] = max(lengths.half[j], 1.3 * out[enough]) if rim == SCAN - 1 else min(half[j], out[rim])
    return replace(lengths, half=half)


def hold_orders(
    lengths: Lengths,
    timeline: Timeline,
    omega: Array,
    q: float,
    coupling: float,
    moving: Sequence[Sequence[bool]],
) -> Lengths:
    """The lengths, made fine enough for every lattice: commensurate where it holds the cloud, else for its orders.

    Raises
    ------
    PlanError
        When two lattices of different spacing hold the cloud along one direction.
    """
    spacing, period, per = lengths.spacing.copy(), lengths.period.copy(), lengths.per_period.copy()
    half = lengths.half.copy()
    growth = scales(timeline, omega, q, scattering_number(coupling, q, lengths.half, omega), moving)
    still = np.ones(3)
    acting = [(timeline.initial, timeline.initial.gripped(), still, still)]
    acting += [(s.stretch, s.stands, *b) for s, b in zip(timeline.steps, growth, strict=True)]
    for stretch, stands, before, after in acting:
        for part in stretch.parts.values():
            if isinstance(part, Function):
                spacing = np.minimum(spacing, part.detail / (PER_DETAIL * np.maximum(before, after)))
        for lattice in _strongest(stretch):
            j = lattice.direction
            grown = max(before[j], after[j])
            if (j in stands or lengths.periodic[j]) and grown == 1.0:
                if period[j] and abs(period[j] / lattice.period - 1) > 1e-9:
                    raise PlanError.at(
                        "trap", f"lattices with spacings of {human(period[j], 'length')} and "
                        f"{human(lattice.period, 'length')} along {lattice.axis}",
                        "lattices that hold the cloud along one direction have one spacing",
                        "use them in pulses, or give them the same spacing",
                    )  # fmt: skip
                period[j] = lattice.period
                per[j] = max(per[j], lattice.points_per_period())
            if j in stands:
                spacing[j] = min(spacing[j], lattice.period / (lattice.points_per_period() * grown))
            else:
                highest = 2 * lattice.k * (_highest_order(lattice, stretch) + BEYOND)
                spacing[j] = min(spacing[j], np.pi / (grown * highest))
    for j in np.nonzero(np.isfinite(spacing) & ~lengths.periodic)[0]:
        if any(flags[j] for flags in moving) and np.any(omega):
            half[j] *= WINGS
    return replace(lengths, half=half, spacing=spacing, period=period, per_period=per)


def scattering_number(coupling: float, q: float, half: Array, omega: Array) -> float:
    """N a in m over the full lengths of the directions that nothing traps harmonically."""
    free = np.asarray(omega) == 0
    return coupling / (4 * np.pi * q) / float(np.prod(2 * np.asarray(half)[free]))


def _strongest(stretch: Stretch) -> list[Lattice]:
    """The lattices that are on in a stretch, each at the time when it is deepest."""
    found: dict[str, Lattice] = {}
    for t in np.linspace(stretch.start, stretch.stop, 5):
        for part in stretch.parts_at(t):
            if isinstance(part, Lattice):
                name = f"{part.axis}{part.period}"
                if name not in found or _might(part) > _might(found[name]):
                    found[name] = part
    return list(found.values())


def _might(lattice: Lattice) -> tuple[float, float]:
    """What decides how high its orders go: its depth, then its detuning."""
    return lattice.strength * lattice.depth, abs(lattice.detuning)


def _highest_order(lattice: Lattice, stretch: Stretch) -> float:
    """The highest order that a pulse populates: by its area for a short one, by its depth for a long one.

    J_n(theta) falls off beyond n = theta; no atom in a lattice of depth V gets faster than sqrt(2 V/m), plus what it had
    in the lattice's frame.
    """
    depth = lattice.strength * lattice.depth
    theta = depth * (stretch.stop - stretch.start) / (2 * HBAR)
    by_area = theta + 2 * theta ** (1 / 3) + 2
    relative = abs(lattice.detuning) * lattice.period / (2 * np.pi) / (2 * lattice.recoil_velocity)
    by_depth = 2 * relative + np.sqrt(depth / lattice.recoil_energy) / 2 + 2
    return float(min(by_area, by_depth))
