"""The ready plans, played once each at accuracy draft, and what more than one file of tests asks of them.

Widths of draft are good to about 1e-3; the scaling law is off by its own few per cent, the centre is exact.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path

import numpy as np

import trapsim
from reference.scaling import castin_dum, off
from reference.units import A0, MASSES, thomas_fermi
from trapsim.record.summary import Moment

HOME = Path(__file__).parents[1]
CONFIGS = HOME / "configs"
NAMES = ("beams", "box", "bragg", "kick", "lattice", "lens", "loaded", "ramp", "release")
MASS = MASSES["Rb-87"]
#: a0; van Kempen et al., PRL 88, 093201 (2002), value from memory
SCATTERING_LENGTH = 100.4 * A0
MS = 1e-3
#: The ballistic path is met to this, um: the solvers' own tolerance, far below what a camera sees.
NEAR = 1e-4
Play = Callable[..., trapsim.Run]
Solver = Callable[[trapsim.Plan], trapsim.Run]


def hz(*frequencies: float) -> tuple[float, ...]:
    return tuple(2 * np.pi * f for f in frequencies)


def end_of(run: trapsim.Run, stage: str) -> Moment:
    (found,) = (one.end for one in run.summary.stages if one.name == stage)
    assert found is not None
    return found


def law(
    omegas: Sequence[float],
    number: float,
    times: Sequence[float],
    trap: Sequence[Callable[[float], float]] | None = None,
    edges: Sequence[float] = (),
) -> tuple[np.ndarray, np.ndarray]:
    """Rms widths in um and their rates in mm/s of a Thomas-Fermi cloud: Castin & Dum, PRL 77, 5315 (1996)."""
    start = np.array(thomas_fermi(MASS, tuple(omegas), number, SCATTERING_LENGTH).widths)
    scale, rate = castin_dum(omegas, trap or (off,) * 3, times, edges=edges)
    return 1e6 * start * scale, 1e3 * start * rate
