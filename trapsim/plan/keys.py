"""The reference of the plan file and its JSON schema, both written from the classes themselves."""

from __future__ import annotations

import dataclasses
import textwrap
from collections.abc import Iterator
from typing import Any

from trapsim.errors import PlanError
from trapsim.fields import REQUIRED, Entry, entries
from trapsim.plan.kinds import PARTS, STAGES
from trapsim.plan.parse import listed, nearest
from trapsim.plan.plan import Numerics, Plan, Track
from trapsim.plan.variants import NAME
from trapsim.quantities import KINDS, human
from trapsim.species import Atoms
from trapsim.terms.field import Gravity

_HEAD = """\
The plan file is TOML. A number with a unit is a text in quotes: "20 Hz"; any of them may carry its
1-sigma uncertainty: "150(2) Hz", "1.0(1)e5", "20 +/- 0.5 Hz". Frequencies are cycles per second.
Positions are in the lab; three values are for x, y, z. Entries without a default are needed.
"""


def tables() -> dict[str, type]:
    """Every table of the plan by the path of its reference, such as trap.harmonic or sequence.ramp."""
    return {
        "atoms": Atoms,
        **{f"trap.{kind}": cls for kind, cls in PARTS.items()},
        "gravity": Gravity,
        **{f"sequence.{kind}": cls for kind, cls in STAGES.items()},
        "numerics": Numerics,
        "track": Track,
    }


def reference(path: str | None = None) -> str:
    """The entries of the plan file for people, all of them or those under one path.

    Parameters
    ----------
    path : str, optional
        A table or an entry: "atoms", "trap.harmonic", "sequence.release.switch_off.shape".

    Raises
    ------
    PlanError
        For a path nobody knows, with the nearest one that is known.
    """
    if path is None:
        sections = [_HEAD, *_lines("", Plan)]
        sections += [_section(name, cls) for name, cls in tables().items()]
        return "\n".join(sections).rstrip() + "\n"
    under = [name for name in tables() if name == path or name.startswith(f"{path}.")]
    if under:
        return "\n".join(_section(name, tables()[name]) for name in under).rstrip() + "\n"
    spots = dict(spots_of_plan())
    if path in spots:
        about = spots[path]
        inside = [s for s in spots if s.startswith(f"{path}.")]
        return "\n".join(_entry_lines(s, spots[s]) for s in (path, *inside)) + ("" if about.kind else "")
    known = [*tables(), "trap", "sequence", *spots]
    close = nearest(path, known) or next((s for s in spots if s.rpartition(".")[2] == path.rpartition(".")[2]), "")
    hint = f"did you mean {close}? " if close else ""
    raise PlanError.at(path, "", "the plan has no such entry", f"{hint}tables: {listed(['trap', 'sequence', *tables()])}")


def spots_of_plan() -> Iterator[tuple[str, Entry]]:
    """Every entry of the plan with its path, those of inner tables too."""
    yield from _spots("", Plan)
    for name, cls in tables().items():
        yield from _spots(f"{name}.", cls)


def _spots(prefix: str, cls: type) -> Iterator[tuple[str, Entry]]:
    for name, about in _with_defaults(cls).items():
        yield f"{prefix}{name}", about
        if about.entry.of is not None:
            yield from _spots(f"{prefix}{name}.", about.entry.of)
