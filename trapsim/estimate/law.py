"""The scaling law: what a large (or an ideal) cloud does, at once, beside the full answer."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy import integrate

from trapsim.prepare.setup import Setup
from trapsim.prepare.stretch import Stretch
from trapsim.terms.harmonic import Harmonic
from trapsim.terms.lattice import Lattice
from trapsim.terms.part import Array, steered

THOMAS_FERMI = "Thomas-Fermi scaling law"
IDEAL = "ideal-gas scaling law"


@dataclass(frozen=True)
class ScalingLaw:
    """Widths and rates against time in closed or nearly closed form.

    Parameters
    ----------
    model : str
    radius : (3,) or None
        Thomas-Fermi radii at the start, m; None for the ideal gas.
    mu : float or None
        Thomas-Fermi chemical potential over hbar, rad/s.
    at : callable
        t -> (widths (3,) m, rates (3,) m/s), not-a-number along directions that nothing traps.
    """

    model: str
    radius: Array | None
    mu: float | None
    at: Callable[[float], tuple[Array, Array]]


def thomas_fermi(omega: Array, q: float, number: float) -> tuple[float, Array]:
    """Chemical potential over hbar (rad/s) and radii (3,) of a Thomas-Fermi cloud, infinite where untrapped.

    For three trapped directions mu = (wbar/2) (15 N a/a_ho)^(2/5); with d of them, the same integral of mu - V in d
    dimensions. Source: G. Baym and C. J. Pethick, Phys. Rev. Lett. 76, 6 (1996).

    Parameters
    ----------
    omega : (3,)
        rad/s; zero where untrapped.
    q : float
        hbar/m.
    number : float
        N a over the lengths of the untrapped directions; positive.
    """
    w = omega[omega > 0]
    d = len(w)
    coupling = 4 * np.pi * q * number
    # int (mu - sum w^2 x^2/2q) over the ellipsoid = mu prod(R) * volume_factor, R = sqrt(2 q mu)/w
    volume_factor = {1: 4 / 3, 2: np.pi / 2, 3: 8 * np.pi / 15}[d]
    mu = (coupling * np.prod(w) / (volume_factor * (2 * q) ** (d / 2))) ** (2 / (d + 2))
    with np.errstate(divide="ignore"):
        return float(mu), np.where(omega > 0, np.sqrt(2 * q * mu) / omega, np.inf)


def _turned(stretch: Stretch) -> bool:
    """Whether a trap that couples the directions is on in a stretch."""
    return any(isinstance(p, Harmonic) and any(p.turn) for p in stretch.parts_at(stretch.start))


def _first_light(stretches: list[Stretch]) -> Array:
    """When a lattice first acts along each direction, s: from then on no scaling law holds there."""
    first = np.full(3, np.inf)
    for stretch in stretches:
        for part in stretch.parts_at(0.5 * (stretch.start + stretch.stop)):
            if isinstance(part, Lattice):
                first[part.direction] = min(first[part.direction], stretch.start)
    return first


def scaling_law(setup: Setup) -> ScalingLaw | None:
    """The law for a plan's timeline; None where there is none (attraction at any time, nothing trapped, a turned trap).

    b_j'' = w_j(0)^2/(b_j b_x b_y b_z) - w_j(t)^2 b_j for a Thomas-Fermi cloud (Y. Castin and R. Dum, Phys. Rev. Lett. 77,
    5315 (1996)), b_j'' = w_j(0)^2/b_j^3 - w_j(t)^2 b_j for the ideal gas.
    """
    trapped = setup.omega > 0
    stretches = [step.stretch for step in setup.timeline.steps]
    couplings = [setup.coupling, *(s.coupling(t) for s in stretches for t in (s.start, s.stop))]
    repelling = min(couplings) >= 0 and (max(couplings) == 0 or setup.coupling > 0)
    if not repelling or not trapped.any() or any(_turned(s) for s in stretches):
        return None
    w0 = setup.omega
    if setup.coupling == 0:
        model, radius, mu = IDEAL, None, None
        start = np.where(trapped, np.sqrt(setup.q / (2 * np.where(trapped, w0, 1.0))), np.nan)
    else:
        model = THOMAS_FERMI
        mu, radius = thomas_fermi(w0, setup.q, setup.scattering_number)
        start = np.where(trapped, radius / np.sqrt(trapped.sum() + 4), np.nan)
    mass = setup.plan.atoms.mass

    def slope_in(stretch: object) -> Callable[[float, Array], Array]:
        def slope(t: float, y: Array) -> Array:
            b, bdot = y[:3], y[3:]
            _, curvature = steered(stretch.parts_at(t), setup.timeline.origin)
            push = w0**2 / b**3
            if radius is not None:
                push = w0**2 / (b * np.prod(b)) * (stretch.coupling(t) / setup.coupling)
            return np.concatenate([bdot, push - curvature / mass * b])

        return slope

    y = np.concatenate([np.ones(3), np.zeros(3)])
    lit = _first_light(stretches)
    pieces = []
    for step in setup.timeline.steps:
        stretch = step.stretch
        if stretch.stop > stretch.start:
            solution = integrate.solve_ivp(
                slope_in(stretch), (stretch.start, stretch.stop), y, method="DOP853", rtol=1e-10, atol=1e-12,
                dense_output=True,
            )  # fmt: skip
            if not solution.success:
                return None
            pieces.append((stretch.start, stretch.stop, solution.sol))
            y = solution.y[:, -1]

    def at(t: float) -> tuple[Array, Array]:
        for begin, end, solution in pieces:
            if begin <= t <= end:
                now = solution(t)
                told = np.where(t > lit, np.nan, start)
                return told * now[:3], told * now[3:]
        return start.copy(), 0 * start

    return ScalingLaw(model, radius, mu, at)
