"""How a run was computed, what that cost, and how wrong it may be."""

from __future__ import annotations

from dataclasses import dataclass, field

from trapsim.record.plain import Number, Record


@dataclass(frozen=True)
class ErrorEstimate(Record):
    """How wrong the numerics may be, from the step estimates and the guards: one sigma, not a bound.

    Widths relative; rates as a share of the velocity spread of their direction; `orders` as shares of the atoms, null
    where no lattice has acted; `centre_um` null where no classical path is exact.
    """

    width_relative: Number = None
    rate_relative: Number = None
    centre_um: Number = None
    orders: Number = None


@dataclass(frozen=True)
class Difference(Record):
    """By how much a run differs from its finer repetition, the worst of all directions, in the units of the estimate.

    Rates are compared at the end; widths, the centre and orders at the end of every stage, atoms on pictures as shares
    of all atoms there are.
    """

    width_relative: Number = None
    rate_relative: Number = None
    centre_um: Number = None
    orders: Number = None
    picture_atoms_relative: Number = None


@dataclass(frozen=True)
class Overestimate(Record):
    """The estimate of an error over the difference that was found; null where there is one of them only."""

    width: Number = None
    rate: Number = None
    centre: Number = None
    orders: Number = None


@dataclass(frozen=True)
class SpaceFigures(Record):
    """A grid: axis kind and number of points per lab direction."""

    axes: tuple[str, str, str]
    points: tuple[int, int, int]


@dataclass(frozen=True)
class Certificate(Record):
    """What a repetition on a finer space with a tighter tolerance has shown.

    `space` is that of its ground state, `tolerance` the L2 error of the wave function allowed per step in flight.
    """

    space: SpaceFigures
    tolerance: float
    difference: Difference
    estimate_over_truth: Overestimate
    seconds: Number = None


@dataclass(frozen=True)
class LegSpace(Record):
    """The grid of one stretch of the march: axis kind and number of points per lab direction, and why so."""

    name: str
    start_ms: float
    stop_ms: float
    axes: tuple[str, str, str]
    points: tuple[int, int, int]
    reason: str = ""


@dataclass(frozen=True)
class Effort(Record):
    """What finding the ground state cost: transform pairs and seconds."""

    pairs: Number
    seconds: Number


@dataclass(frozen=True)
class MarchEffort(Record):
    """What the march cost: steps, the transform pairs of the steps and of looking at the cloud, seconds of both."""

    steps: int
    pairs: Number
    observing_pairs: Number
    seconds: Number


@dataclass(frozen=True)
class Numerics(Record):
    """How it was computed, what that cost and how far it can be trusted; axes and points per lab direction."""

    axes: tuple[str, str, str]
    points: tuple[int, int, int]
    legs: tuple[LegSpace, ...]
    ground: Effort
    march: MarchEffort | None
    seconds: Number
    norm_drift: Number = None
    energy_drift: Number = None
    continuity: Number = None
    error: ErrorEstimate = field(default_factory=ErrorEstimate)
    certified: Certificate | None = None
