"""How wrong the numerics may be, in the user's own quantities, from what the march itself has measured."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from trapsim.evolve.state import Books


@dataclass(frozen=True)
class Trust:
    """Estimated numerical errors.

    Parameters
    ----------
    width, rate : float
        Relative, of rms widths and expansion rates.
    centre : float or None
        m.
    """

    width: float
    rate: float
    centre: float | None


def trust(
    books: Books, *, residual: float, virial: float, energy_drift: float, swing: float, centre_off: float | None,
    kink: float = 0.0,
) -> Trust:
    """From step estimates, guards and exact statements to widths, rates and centre.

    Time: the extrapolated steps of a flight have an L2 error far below their estimate e, and a width feels the square
    of what has added up; a plain step in a trap leaves a bounded error that goes with the step squared, e^(2/3). Space:
    what the grid cannot hold is folded back, s^(3/4) of the population near the highest wave numbers and a share of that
    near the edge. Two exact statements feel both: the virial theorem at rest, and the energy while nothing changes;
    widths are off by up to what these are missed by, rates by twice as much. The forms follow from the orders of the
    methods; the factors were found by comparing with converged runs of round, cigar-shaped and flat clouds from an
    ideal gas to 1e6 atoms at every accuracy, where the estimate lies between the truth and some thirty times it (more
    at accuracy fine).

    Parameters
    ----------
    books : Books
    residual : float
        Of the ground state.
    virial : float
        By how much the ground state misses the virial theorem, relative.
    energy_drift : float
        Relative, the worst over stretches where nothing changed in time.
    swing : float
        Relative, of swings in a trap, from the drift of the energy there and how long it lasted.
    kink : float
        Relative, of rates, from atoms too fast for the grid that perfectly reflecting walls let go.
    centre_off : float or None
        Distance of the measured centre from the classical path, m; None where that is not exact.
    """
    time = 2 * books.error**2 + 5e-3 * books.local ** (2 / 3)
    space = 1.2 * float(np.max(books.spectrum)) ** 0.75 + 0.05 * float(np.max(books.edge))
    width = float(np.linalg.norm([time, space, swing, 1.5 * virial, 1.2 * energy_drift, kink])) + residual
    rate = max(1.5 * width, 2.5 * energy_drift)
    return Trust(width, rate, centre_off)
