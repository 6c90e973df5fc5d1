"""How wrong the numerics may be, in the user's own quantities, from what the march itself has measured."""

from __future__ import annotations

from collections.abc import Collection
from dataclasses import dataclass

import numpy as np

from trapsim.evolve.state import Books


@dataclass(frozen=True)
class Trust:
    """Estimated numerical errors.

    Parameters
    ----------
    width : float
        Relative, of rms widths.
    rate : float
        Of expansion rates, as a share of the velocity spread of their direction.
    centre : float or None
        m; None where no classical path is exact.
    orders : float or None
        Of the populations of diffraction orders, as a share of the atoms; None where no lattice acts.
    """

    width: float
    rate: float
    centre: float | None
    orders: float | None = None


def trust(
    books: Books,
    *,
    residual: float,
    slack: float,
    energy_drift: float,
    swing: float,
    resistance: float,
    slowed: float = 1.0,
    centre_off: float | None,
    kink: float = 0.0,
    grown: float = 1.0,
    lit: Collection[int] = (),
) -> Trust:
    """From step estimates, guards and exact statements to widths, rates, centre and orders.

    Time: a step in flight whose estimate e goes with its length cubed is extrapolated to one that goes with the fifth
    power, so that the L2 error of a flight is about the sum of e^(5/3), and a width may be out by as much. A plain step
    in a trap moves the cloud under a Hamiltonian that is a little wrong, by its L2 error over its length; the cloud
    settles in that by about this pull over what it resists with. Space: of what the grid cannot hold, the population near
    the highest wave numbers, about as much is folded back; and a small share of what is near the edge comes back in. Two
    exact statements feel both: the balance of the forces at rest, and the energy while nothing changes. What counts most
    wins over the sum: they are added as squares. A rate is out by half as much again, or by twice the drift of the energy;
    after a lens by more, of what is left: of the error before it, the part that size and rate have in common goes down
    with both, the other stays. Between them lies the square root of how much the lens has slowed the atoms. Orders feel
    the steps, and what is folded back along the lattice.

    The forms follow from the orders of the methods. The factors were found by comparing the ready plans, at draft, normal
    and fine, with their own repetitions on a finer space with shorter steps, one cause at a time.

    Parameters
    ----------
    books : Books
    residual : float
        Of the ground state.
    slack : float
        By how much its widths are out, relative, by what its forces miss their balance by.
    energy_drift : float
        Relative, the worst over stretches where nothing changed in time.
    swing : float
        Relative, of swings in a trap, from the drift of the energy there and how long it lasted.
    resistance : float
        What a cloud in its trap resists a pull with, rad/s.
    slowed : float
        How many times faster than at the end the atoms have been, about their centre.
    kink : float
        Relative, of rates, from atoms too fast for the grid that perfectly reflecting walls let go.
    grown : float
        The share of the mean square width that the cloud has gained since then.
    lit : directions
        Along which lattices have acted.
    centre_off : float or None
        Distance of the measured centre from the classical path, m; None where that is not exact.
    """
    time = 2 * books.extrapolated + books.pull / resistance
    folded, outside = 2 * float(np.max(books.spectrum)), 0.05 * float(np.max(books.edge))
    width = float(np.linalg.norm([time, folded, outside, swing, 2 * slack, 1.2 * energy_drift, kink * grown])) + residual
    rate = max(1.5 * width, 2.5 * energy_drift, 1.5 * kink) * float(np.sqrt(slowed))
    orders = float(np.hypot(time, 2 * max(books.spectrum[j] for j in lit))) + residual if lit else None
    return Trust(width, rate, centre_off, orders)
