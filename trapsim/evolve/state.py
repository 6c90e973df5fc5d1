"""What the march walks through and where it stands: legs, state, books, ticks."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np

from trapsim.cloud.cloud import Cloud
from trapsim.errors import Notice
from trapsim.evolve.pace import Flight, Stride, Trapped
from trapsim.evolve.scaling import Interval, LawStart
from trapsim.fields import ORIGIN, Triple
from trapsim.space.space import Array, Space
from trapsim.terms.part import ALL

#: orders that overlap beat, and steps in time with the beat mix them: a weak order then takes all of a step's error
BEATING = 0.1


@dataclass(frozen=True)
class Leg:
    """A stretch of the march on one space, from one edge of the timeline to the next.

    Parameters
    ----------
    name, kind : str
        The stage it belongs to.
    stage : int
        Index of that stage.
    start, stop : float
        s, from the start of the sequence.
    space : Space
    interval : Interval
        What acts, smooth on [start, stop].
    trapped : bool
        Whether a part that confines is on.
    moving : three bools
        Directions in which the frame follows the cloud; in the others it stands, and forces and kicks act on the wave
        function itself.
    brief : bool
        Whether it is a pulse: its steps are always those of a flight.
    split : three bools
        Directions in which light may have split the cloud into orders, so that it has no flow to speak of.
    unwalled : bool
        Whether a box held the cloud before and no longer does.
    landings : tuple of float
        Times to hit exactly.
    kick : (3,)
        Velocity given to the whole cloud at the start, m/s.
    last : bool
        Whether the stage ends with it.
    """

    name: str
    kind: str
    stage: int
    start: float
    stop: float
    space: Space
    interval: Interval
    trapped: bool
    moving: tuple[bool, bool, bool] = ALL
    brief: bool = False
    split: tuple[bool, bool, bool] = (False, False, False)
    unwalled: bool = False
    landings: tuple[float, ...] = ()
    kick: Triple = ORIGIN
    last: bool = True


@dataclass(frozen=True)
class Books:
    """What the march has cost and how wrong it may be, so far.

    Parameters
    ----------
    pairs : float
        Transform pairs.
    steps, rejected : int
    error : float
        Sum of the L2 error estimates of the steps in flight.
    extrapolated : float
        Sum of these estimates to the power 5/3, each about the L2 error of the step that was taken.
    local : float
        Highest L2 error of a plain step in a trap.
    pull : float
        Highest such error over the length of its step, rad/s: how hard what the steps get wrong pulls at the cloud.
    edge, spectrum : (3,)
        Highest populations seen near the edges of the axes and of their spectra.
    kink : (3,)
        Variance of k in the lab that was lost when perfectly reflecting walls opened, 1/m^2.
    flight_pairs : float
        The share of `pairs` spent with no trap on.
    """

    pairs: float = 0.0
    steps: int = 0
    rejected: int = 0
    error: float = 0.0
    extrapolated: float = 0.0
    local: float = 0.0
    pull: float = 0.0
    edge: Array = field(default_factory=lambda: np.zeros(3))
    spectrum: Array = field(default_factory=lambda: np.zeros(3))
    kink: Array = field(default_factory=lambda: np.zeros(3))
    flight_pairs: float = 0.0

    def spent(self, pairs: float, *, flight: bool) -> Books:
        return replace(self, pairs=self.pairs + pairs, flight_pairs=self.flight_pairs + pairs * flight)


@dataclass(frozen=True)
class State:
    """Where the march stands: all that a checkpoint needs.

    Parameters
    ----------
    cloud : Cloud
    leg : int
        Index of the leg it is in; `law` is None until that leg is entered.
    stride : Stride or None
    law : LawStart or None
    books : Books
    notices : tuple of Notice
    """

    cloud: Cloud
    leg: int = 0
    stride: Stride | None = None
    law: LawStart | None = None
    books: Books = field(default_factory=Books)
    notices: tuple[Notice, ...] = ()

    def copy(self) -> State:
        """The same state with its own samples, to keep beyond the next step."""
        return replace(self, cloud=self.cloud.copy())


@dataclass(frozen=True)
class Tick:
    """One accepted step; its state is borrowed until the next one."""

    state: State
    reason: str  #: "step", "landing" (a time asked for) or "edge" (the end of a leg)


@dataclass(frozen=True)
class Pace:
    """How long the steps may be.

    Parameters
    ----------
    tolerance : float
        L2 error of the wave function per step in flight.
    cap : float
        Highest phase per plain step in a trap, rad.
    """

    tolerance: float
    cap: float

    def of(self, leg: Leg) -> Flight | Trapped:
        if leg.trapped and not leg.brief:
            # in a trap the errors of plain steps do not add up, so that one step may be that much worse
            return Trapped(30 * self.tolerance, self.cap)
        return Flight(self.tolerance * (BEATING if any(leg.split) else 1.0))
