"""The validity card: does the model hold for this cloud? Textbook measures with their customary limits."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from trapsim.constants import HBAR, K_B
from trapsim.estimate.law import ScalingLaw
from trapsim.prepare.setup import Setup
from trapsim.terms.lattice import Lattice

FINE, CARE, DOUBT = "fine", "care", "doubt"
#: U/J of the transition at one atom a site in 3D, mean-field theory: 5.8 for each of six neighbours
MOTT = 34.8
#: recoil energies; in a shallower lattice the formulas for deep ones say nothing
SHALLOW = 2.0


@dataclass(frozen=True)
class Check:
    """One line of the card.

    Parameters
    ----------
    code : str
        A short fixed word.
    value : float
    level : str
        "fine", "care" or "doubt".
    text : str
        A sentence with the value in it.
    """

    code: str
    value: float
    level: str
    text: str


def validity(setup: Setup, law: ScalingLaw | None) -> tuple[Check, ...]:
    """The checks that apply to a plan; limits are common practice unless a source is named."""
    out: list[Check] = []
    atoms, omega = setup.plan.atoms, setup.omega
    a, q = atoms.scattering_length, setup.q
    trapped = omega[omega > 0]
    if (ratio := crowding(setup)) > 0:
        out.append(_check("sites", ratio, 0.15 * MOTT, 0.6 * MOTT,
                          f"lattices along all three directions: U/J = {ratio:.3g}; one atom a site is a Mott insulator "
                          f"beyond {MOTT}, which no mean field describes"))
    if not len(trapped):
        return tuple(out)
    mean = float(np.exp(np.log(trapped).mean()))
    strength = atoms.number * abs(a) / np.sqrt(q / mean)
    full = len(trapped) == 3
    if law is not None and law.mu is not None and full:
        gas = law.mu / (4 * np.pi * q * a) * a**3
        # T. D. Lee, K. Huang and C. N. Yang, Phys. Rev. 106, 1135 (1957)
        shift = 32 / (3 * np.sqrt(np.pi)) * np.sqrt(gas)
        out.append(_check("beyond_mean_field", shift, 0.05, 0.2,
                          f"quantum fluctuations shift the chemical potential by {100 * shift:.2g} %"))
        out.append(_check("scaling_law", -strength, -400, -50,
                          f"N a / a_ho = {strength:.4g}: the scaling law {_law_word(strength)}"))
        tight = np.sort(omega)[1:].mean()
        out.append(_check("one_dimensional", -law.mu / tight, -3, -1,
                          f"mu is {law.mu / tight:.3g} times the zero-point spacing of the tight directions"))
    if a < 0 and full:
        # collapse: P. A. Ruprecht et al., Phys. Rev. A 51, 4704 (1995); measured 0.459, J. L. Roberts et al., Phys. Rev.
        # Lett. 86, 4211 (2001)
        out.append(_check("collapse", strength, 0.35, 0.46, f"N |a| / a_ho = {strength:.3g}; collapse near 0.46 to 0.575"))
    if atoms.temperature and full:
        critical = HBAR * mean * (atoms.number / special.zeta(3)) ** (1 / 3) / K_B
        thermal = min((atoms.temperature / critical) ** 3, 1.0)
        out.append(_check("thermal", thermal, 0.1, 0.5,
                          f"about {100 * thermal:.2g} % of the atoms are thermal and not in this model"))
    return tuple(out)


def crowding(setup: Setup) -> float:
    """The largest U/J of the sequence, repulsion at a site over tunnelling between sites; 0 without a lattice in 3D.

    J/E_R = 4/sqrt(pi) s^(3/4) exp(-2 sqrt s), averaged over the directions, and U/E_R = sqrt(8/pi) k a (s_x s_y s_z)^(1/4),
    both for deep lattices (W. Zwerger, J. Opt. B 5, S9 (2003)).
    """
    worst, a = 0.0, setup.plan.atoms.scattering_length
    stretches = [setup.timeline.initial, *(step.stretch for step in setup.timeline.steps)]
    for stretch, t in [(one, t) for one in stretches for t in (one.start, one.stop)]:
        light = {p.direction: p for p in stretch.parts_at(t) if isinstance(p, Lattice) and p.strength * p.depth > 0}
        if len(light) < 3:
            continue
        s = np.array([p.strength * p.depth / p.recoil_energy for p in light.values()])
        recoil, k = (np.array([getattr(p, word) for p in light.values()]) for word in ("recoil_energy", "k"))
        if s.min() < SHALLOW:
            continue
        hop = float(np.mean(recoil * 4 / np.sqrt(np.pi) * s**0.75 * np.exp(-2 * np.sqrt(s))))
        if hop > 0:
            worst = max(worst, float(np.sqrt(8 / np.pi) * abs(a) * np.mean(recoil * k) * np.prod(s) ** 0.25) / hop)
    return worst


def _law_word(strength: float) -> str:
    if strength >= 400:
        return "is good to a per cent"
    return "is off by a few per cent" if strength >= 50 else "is only a guide"


def _check(code: str, value: float, care: float, doubt: float, text: str) -> Check:
    level = DOUBT if value > doubt else (CARE if value > care else FINE)
    return Check(code, abs(value), level, text)
