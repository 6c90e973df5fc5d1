"""What a finer run has shown about the errors, in rows for the terminal and for the page."""

from __future__ import annotations

from typing import NamedTuple

from trapsim.estimate.truth import missed
from trapsim.record.summary import Certificate, Numerics
from trapsim.show.numbers import figures

HEAD = ("found", "estimated", "estimate over found")
LOW = "An estimate is less than a fifth of what was found here: trust what was found."


class Compared(NamedTuple):
    """One quantity: its words, the difference found, the estimate, and the second over the first."""

    name: str
    found: float
    estimated: float | None
    over: float | None

    def cells(self) -> tuple[str, str, str]:
        return figures(self.found, 2), figures(self.estimated, 2), figures(self.over, 2)


def compared(numerics: Numerics) -> list[Compared]:
    """All that could be compared."""
    certified, error = numerics.certified, numerics.error
    if certified is None:
        return []
    found, over = certified.difference, certified.estimate_over_truth
    rows = (
        Compared("widths, relative", found.width_relative, error.width_relative, over.width),
        Compared("rates, of the velocity spread", found.rate_relative, error.rate_relative, over.rate),
        Compared("centre (um)", found.centre_um, error.centre_um, over.centre),
        Compared("orders, of all atoms", found.orders, error.orders, over.orders),
        Compared("atoms on pictures, of all", found.picture_atoms_relative, None, None),
    )
    return [row for row in rows if row.found is not None]


def verdict(certified: Certificate) -> str:
    """What to heed, if anything is."""
    return LOW if missed(certified) else ""


def steps_of(certified: Certificate) -> str:
    """How long its steps may be, in words."""
    return f"steps in flight to {figures(certified.tolerance, 2)}"
