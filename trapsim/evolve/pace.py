"""How long a step: Richardson's comparison in flight, Strang under a cap while a trap is on.

In flight each step is taken once whole (C) and once in two halves (F); (4 F - C)/3 is of fourth order and |F - C|/3 its
error estimate, for three pairs. In a trap a plain Strang step under the cap on the fastest kinetic phase is cheaper and
keeps norm and energy; it is compared with its two halves only now and then, as the estimate. Beyond the cap the
splitting can be wrong with a perfect norm (J. A. C. Weideman and B. M. Herbst, SIAM J. Numer. Anal. 23, 485 (1986)).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from trapsim.evolve.phases import scaled_density
from trapsim.evolve.splitstep import SplitStep
from trapsim.space.space import Array

#: highest turn of phase space per step, rad; the lens that makes half of it diverges at pi
TURN = 1.6
#: plain steps between two comparisons
BETWEEN = 16


@dataclass(frozen=True)
class Stride:
    """What the pace remembers from step to step.

    Parameters
    ----------
    h : float
        The next step, s, unless a landing comes first.
    since : int
        Plain steps since the last comparison.
    local : float
        Local error of a plain step at the last comparison.
    peak : float
        Highest density in the frame when the leg was entered, 1/m^3.
    """

    h: float
    since: int = 0
    local: float = 0.0
    peak: float = 0.0


@dataclass(frozen=True)
class Taken:
    """One accepted step: its length, the next stride, the steps that were refused before it.

    `error` is the L2 error of a step whose errors add up (flight), `local` that of one whose errors stay bounded.
    """

    h: float
    stride: Stride
    rejected: int = 0
    error: float = 0.0
    local: float = 0.0


class Buffers:
    """Work arrays of a leg, so that a step allocates nothing large."""

    def __init__(self, step: SplitStep) -> None:
        self.coarse = step.space.empty()
        self.fine = step.space.empty()
        self.density = np.empty(step.space.shape)
        #: the samples before the step, in case it has to be taken back
        self.before = step.space.empty()


@dataclass(frozen=True)
class Flight:
    """Fourth-order steps, each with its estimate.

    Parameters
    ----------
    tolerance : float
        L2 error of the wave function per step.
    """

    tolerance: float

    def first(self, step: SplitStep, t: float, peak: float) -> Stride:
        """The first stride: 0.7 rad of the mean field at the highest density in the frame (1/m^3), and of what acts."""
        h = step.law.interval.stop - t
        h = min(h, 0.7 / max(step.rest_phase_rate(t + h / 2), 1e-300))
        while step.mean_field_phase(t, t + h, peak) > 0.7:
            h *= 0.8
        return Stride(h)

    def take(self, step: SplitStep, phi: Array, t: float, stride: Stride, limit: float, work: Buffers) -> Taken:
        """Overwrite phi(t) with phi(t + h), h <= limit."""
        h, rejected = stride.h, 0
        h = min(h, limit, step.longest(t))
        while step.turned(t, t + h) > TURN:
            h /= 2
        while True:
            error = _compare(step, phi, t, h, work)
            wish = h * float(np.clip(0.85 * (self.tolerance / max(error, 1e-30)) ** (1 / 3), 0.3, 4.0))
            if error < 1.5 * self.tolerance or not np.isfinite(error):
                break
            h, rejected = wish, rejected + 1
        # (4 F - C)/3, with F - C in the place of C
        np.multiply(work.coarse, 1 / 3, out=phi)
        phi += work.fine
        # a step cut short by a landing says little about the next one
        keep = max(wish, stride.h) if h < 0.5 * stride.h and not rejected else wish
        return Taken(h, Stride(keep), rejected, error=error)


@dataclass(frozen=True)
class Trapped:
    """Second-order steps under the cap, compared with their halves now and then.

    Parameters
    ----------
    tolerance : float
        L2 error of the wave function per step; a comparison beyond it shortens the steps.
    cap : float
        Highest phase per step, rad, of the highest wave number and the mean field at its peak together.
    """

    tolerance: float
    cap: float

    def first(self, step: SplitStep, t: float, peak: float) -> Stride:
        return Stride(self._capped(step, t, np.inf, peak), since=BETWEEN, peak=peak)

    def _capped(self, step: SplitStep, t: float, limit: float, peak: float) -> float:
        """The longest step under the cap; the law's own integrals decide."""
        end = step.law.interval.stop
        h = min(limit, end - t)
        for _ in range(60):
            phase = step.fastest_phase(t, t + h, peak)
            if phase <= self.cap:
                return h
            h *= max(0.999 * self.cap / phase, 0.05)
        return h

    def take(self, step: SplitStep, phi: Array, t: float, stride: Stride, limit: float, work: Buffers) -> Taken:
        """Overwrite phi(t) with phi(t + h), h <= limit."""
        h, rejected = self._capped(step, t, min(stride.h, limit, step.longest(t)), stride.peak), 0
        if stride.since < BETWEEN:
            step.strang(phi, t, h)
            grown = max(stride.h, min(1.25 * h, 1.02 * stride.h)) if stride.local < self.tolerance else stride.h
            return Taken(h, replace(stride, h=grown, since=stride.since + 1))
        while True:
            local = 4 * _compare(step, phi, t, h, work)
            if local < 1.5 * self.tolerance or not np.isfinite(local):
                break
            h, rejected = h * float(np.clip(0.85 * (self.tolerance / local) ** (1 / 3), 0.3, 0.9)), rejected + 1
        phi[...] = work.fine
        room = float(np.clip(0.85 * (self.tolerance / max(local, 1e-30)) ** (1 / 3), 0.8, 1.5))
        keep = stride.h if h < 0.5 * stride.h and not rejected else h * room
        return Taken(h, replace(stride, h=keep, since=0, local=local), rejected, local=local)


def _compare(step: SplitStep, phi: Array, t: float, h: float, work: Buffers) -> float:
    """Two halves of a step in `work.fine`, less the whole one in `work.coarse`; the L2 norm of that over 3."""
    work.coarse[...] = phi
    work.fine[...] = phi
    step.strang(work.coarse, t, h)
    step.halves(work.fine, t, h)
    np.subtract(work.fine, work.coarse, out=work.coarse)
    step.space.pointwise(work.coarse, lambda part, slab: scaled_density(part, 1.0, work.density[slab]))
    return float(np.sqrt(step.space.integral(work.density))) / 3
