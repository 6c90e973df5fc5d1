"""The kinds of part and of stage a plan may name. A new kind is a new class and a new name here."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

from trapsim.fields import Entry, entries
from trapsim.plan.stages import Hold, Kick, Pulse, Ramp, Release, Stage
from trapsim.species import Atoms
from trapsim.terms.beam import Beam
from trapsim.terms.box import Box
from trapsim.terms.field import Gradient
from trapsim.terms.function import Function
from trapsim.terms.harmonic import Harmonic
from trapsim.terms.lattice import Lattice
from trapsim.terms.part import Part

PARTS: Mapping[str, type[Part]] = MappingProxyType(
    {cls.kind: cls for cls in (Harmonic, Box, Lattice, Beam, Gradient, Function)}
)
STAGES: Mapping[str, type[Stage]] = MappingProxyType({cls.kind: cls for cls in (Hold, Ramp, Pulse, Kick, Release)})


def rampable(name: str, cls: type) -> dict[str, Entry]:
    """What a stage may change of the part (or the atoms) called `name`, by path: "dipole.frequency"."""
    return {f"{name}.{key}": entry for key, entry in entries(cls).items() if entry.ramp}


ATOMS_TARGETS: Mapping[str, Entry] = MappingProxyType(rampable("atoms", Atoms))
