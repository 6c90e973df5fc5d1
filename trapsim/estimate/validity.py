"""The validity card: does the model hold for this cloud? Textbook measures with their customary limits."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy import special

from trapsim.constants import HBAR, K_B
from trapsim.estimate.law import ScalingLaw
from trapsim.prepare.setup import Setup

FINE, CARE, DOUBT = "fine", "care", "doubt"


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
    if not len(trapped):
        return ()
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


def _law_word(strength: float) -> str:
    if strength >= 400:
        return "is good to a per cent"
    return "is off by a few per cent" if strength >= 50 else "is only a guide"


def _check(code: str, value: float, care: float, doubt: float, text: str) -> Check:
    level = DOUBT if value > doubt else (CARE if value > care else FINE)
    return Check(code, abs(value), level, text)
