"""One step: half a potential flow, a kinetic flow, half a potential flow (Strang).

In the frame, i phi_t = [ sum_j -(q/2 b_j^2) d_j^2 + U/hbar + c/B |phi|^2 ] phi. The kinetic energy and the share A_j of
the parabola turn the cloud in phase space by theta_j = sqrt(A_j) dK_j, and that turn is done without error: with
a = sqrt(A), a turn by theta is

    exp(-i a tan(theta/2) xi^2/2q) exp(-i q k^2 sin(theta)/2a) exp(-i a tan(theta/2) xi^2/2q)

(S. A. Chin and E. Krotscheck, Phys. Rev. E 72, 036705 (2005), give it for the rotating trap). What is left is exact
too, exp(-i [ dJ ( |phi|^2 + sum_j i_j xi_j^2/(2 q) ) + int V_rest dt/hbar ]); only the two together are split. So an
ideal gas in any harmonic trap, or in flight, moves without error at any step. All integrals are those of the frame law
over the very interval of the flow, so that nothing is ever evaluated at a jump.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import reduce

import numpy as np

from trapsim.constants import HBAR
from trapsim.evolve.phases import rotate, scaled_density, scratch
from trapsim.evolve.scaling import MovingLaw, StandingLaw, gauss
from trapsim.space.space import Array, Pointwise, Space

#: rad of the fastest change of the potential per step, for Gauss's rule of two points on its halves to be good to 1e-6
SAMPLED = 0.6
Rest = Callable[[float], Array | float]


class SplitStep:
    """Steps on one space under one frame law.

    Parameters
    ----------
    space : Space
    law : MovingLaw or StandingLaw
    q : float
        hbar/m.
    rest : callable
        t -> potential energy not steered, J on the points, or 0.0.
    rate : callable
        t -> how fast that energy changes at the points, rad/s.
    """

    def __init__(
        self, space: Space, law: MovingLaw | StandingLaw, *, q: float, rest: Rest, rate: Callable[[float], float]
    ) -> None:
        self.space = space
        self.law = law
        self.q = q
        self.rest = rest
        self.rate = rate
        self.pairs = 0.0
        self._fastest = np.array([space.axis(j).k_max ** 2 / len(space.axis(j).covers) for j in range(3)])

    def strang(self, phi: Array, t: float, h: float) -> Array:
        """Overwrite phi(t) with phi(t + h); returns it. One pair."""
        middle = t + h / 2
        lens, drift = self._turn(t, t + h)
        return self._flow(phi, drift, self._potential((t, middle, lens)), self._potential((middle, t + h, lens)))

    def halves(self, phi: Array, t: float, h: float) -> Array:
        """Overwrite phi(t) with phi(t + h) in two steps, whose potential flows in the middle are one; two pairs."""
        first, second, third = t + h / 4, t + h / 2, t + 3 * h / 4
        lens, drift = self._turn(t, second)
        later, further = self._turn(second, t + h)
        middle = self._potential((first, second, lens), (second, third, later))
        self._flow(phi, drift, self._potential((t, first, lens)), middle)
        return self._flow(phi, further, None, self._potential((third, t + h, later)))

    def _turn(self, t0: float, t1: float) -> tuple[Array, Array]:
        """Lens and drift of the turn of phase space over an interval."""
        return self.law.turn(self.law.integrals(t0, t1)[0])

    def potential(self, phi: Array, t0: float, t1: float, lens: Array) -> None:
        """Overwrite phi with its potential flow from t0 to t1, and with lenses (3,) 1/s: exp(-i lens xi^2/(2 q))."""
        self.space.pointwise(phi, self._potential((t0, t1, lens)))

    def _potential(self, *spans: tuple[float, float, Array]) -> Pointwise:
        """The potential flows over some spans of time, each with its lenses; they commute, so they are one."""
        dJ, coefficients, rest = 0.0, np.zeros(3), 0.0
        for t0, t1, lens in spans:
            more = self.law.integrals(t0, t1)[1]
            # exp(-i theta) is turned by 2i times -theta/2
            dJ = dJ - 0.5 * more
            coefficients -= (lens + self.law.start.i * more) / (4 * self.q)
            rest = rest - 0.5 * self._rest_phase(t0, t1)
        first, *others = (
            self.space.along(d, values) for d, values in enumerate(self.space.per_axis(coefficients, "square"))
        )
        # what does not vary along the first dimension is summed once
        flat = sum(others) + (rest if np.ndim(rest) == 0 or rest.shape[0] == 1 else 0.0)
        steep = rest if np.ndim(rest) and rest.shape[0] > 1 else None
        turn = rotate()

        def flow(field: Array, slab: slice) -> None:
            half = scratch("half", field.shape)
            scaled_density(field, dJ, half)
            half += flat
            half += first[slab]
            if steep is not None:
                half += steep[slab]
            turn(field, half)

        return flow

    def _rest_phase(self, t0: float, t1: float) -> Array | float:
        """The phase of what is not steered, by Gauss's rule of two points."""
        first, second = (self.rest(t) for t in gauss(t0, t1))
        return (first + second) * ((t1 - t0) / (2 * HBAR))

    def _flow(self, phi: Array, drift: Array, before: Pointwise | None, after: Pointwise | None) -> Array:
        """Overwrite phi with exp(-i q/2 sum_j k_j^2 drift_j) phi, drift (3,) in s, between two flows; one pair."""
        first, *others = (
            self.space.along(d, np.exp(-0.5j * self.q * values) / axis.round_trip)
            for d, (axis, values) in enumerate(zip(self.space.axes, self.space.per_axis(drift, "k2"), strict=True))
        )
        flat = reduce(np.multiply, others)

        def multiply(spectrum: Array, slab: slice) -> None:
            spectrum *= flat[:, slab]
            spectrum *= first

        self.space.sandwich(phi, multiply, before=before, after=after)
        self.pairs += 1
        return phi

    def kinetic(self, phi: Array, drift: Array) -> None:
        """Overwrite phi with its kinetic flow; one pair."""
        self._flow(phi, drift, None, None)

    def fastest_phase(self, t0: float, t1: float, peak: float) -> float:
        """Phase over an interval of the highest wave number, sum_j q k_max^2 dK_j/2, with the mean field at its peak.

        The sum is about the phase of the highest Bogoliubov mode; the splitting is unstable from pi on.
        """
        dK, dJ = self.law.integrals(t0, t1)
        return float(0.5 * self.q * self._fastest @ dK) + abs(dJ) * peak

    def turned(self, t0: float, t1: float) -> float:
        """By how much phase space turns over an interval, rad."""
        return float(np.max(np.sqrt(np.abs(self.law.start.A)) * self.law.integrals(t0, t1)[0]))

    def longest(self, t: float) -> float:
        """The longest step, s, that still samples what is not steered well at two points."""
        return SAMPLED / max(self.rate(t), 1e-300)

    def rest_phase_rate(self, t: float) -> float:
        """Range of the potential energy that is not steered, over hbar, rad/s."""
        rest = self.rest(t)
        return 0.0 if np.isscalar(rest) else float(np.ptp(rest)) / HBAR

    def mean_field_phase(self, t0: float, t1: float, peak: float) -> float:
        """Phase of the mean field over an interval where the density in the frame is `peak`."""
        return abs(self.law.integrals(t0, t1)[1]) * peak
