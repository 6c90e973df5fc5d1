"""What `trapsim check` says: derived quantities, the instant prediction, the validity card, the grid and its cost."""

from __future__ import annotations

from collections.abc import Sequence
from textwrap import wrap

import numpy as np

from trapsim.constants import BOHR_RADIUS
from trapsim.estimate.law import ScalingLaw
from trapsim.estimate.validity import CARE, DOUBT, FINE, Check
from trapsim.prepare.cost import Cost
from trapsim.prepare.setup import Setup
from trapsim.show.numbers import four
from trapsim.show.text import SAFETY

_LINE = 100
_MARKS = {FINE: "fine ", CARE: "care ", DOUBT: "doubt"}


def check_text(setup: Setup, law: ScalingLaw | None, card: Sequence[Check], cost: Cost) -> str:
    """The whole answer of `check`, lines of at most about a hundred characters."""
    plan = setup.plan
    head = plan.title or plan.name
    lines = [head, "=" * len(head), "The plan is in order.", "", "The cloud", *_cloud(setup, law)]
    if plan.sequence:
        lines += ["", *_prediction(setup, law)]
    if card:
        lines += ["", "Does the model hold?", *(f"  {_MARKS[c.level]}  {c.text}" for c in card)]
    if setup.notices:
        lines += ["", "Worth knowing", *(f"  - {n.text}" for n in setup.notices)]
    lines += ["", "The computation", *_computation(setup, cost)]
    lines += ["", f"key {plan.key}, march {plan.march_key}", "", *wrap(SAFETY, _LINE), ""]
    return "\n".join(lines)


def _row(name: str, text: str) -> str:
    return f"  {name:<28}{text}"


def _three(values: Sequence[float], unit: str) -> str:
    return ", ".join("free" if np.isinf(v) else four(v) for v in values) + f" {unit}"


def _cloud(setup: Setup, law: ScalingLaw | None) -> list[str]:
    atoms = setup.plan.atoms
    lines = [
        _row("atoms", f"{four(atoms.number)}, scattering length {four(atoms.scattering_length / BOHR_RADIUS)} a0"),
        _row("trap frequencies x, y, z", _three(setup.omega / (2 * np.pi), "Hz") + " at the start"),
        _row("resting place x, y, z", _three(1e6 * np.array(setup.timeline.origin), "um")),
    ]
    if law is not None and law.radius is not None:
        lines.append(_row("chemical potential / h", f"{four(law.mu / (2 * np.pi))} Hz (Thomas-Fermi)"))
        lines.append(_row("radius x, y, z", _three(1e6 * law.radius, "um") + " (Thomas-Fermi)"))
    return lines


def _prediction(setup: Setup, law: ScalingLaw | None) -> list[str]:
    """The classical centre and the scaling law at the end of every stage."""
    name = law.model if law else "no scaling law for this cloud"
    lines = [f"What to expect at the end of each stage ({name}; centre: classical path)"]
    lines.append(f"  {'stage':<16}{'ends at':>10}   {'half-width x, y, z (um)':<28}{'centre x, y, z (um)'}")
    silent = False
    last = {step.stage: i for i, step in enumerate(setup.timeline.steps)}
    for index, (stage, (_, stop)) in enumerate(zip(setup.plan.sequence, setup.timeline.stage_times, strict=True)):
        centre = setup.timeline.path[last[index]][:3] - np.array(setup.timeline.origin)
        widths = _three(1e6 * law.at(stop)[0], "") if law else "-"
        where = _three(1e6 * _quiet(centre), "")
        lines.append(f"  {stage.name:<16}{four(1e3 * stop):>7} ms   {widths:<28}{where}".rstrip())
        silent = silent or (law is not None and "-," in f"{widths},")
    if silent:
        lines.append(f"  {'':<29}-: the scaling law does not hold here; run the plan")
    return lines


def _quiet(centre: np.ndarray) -> np.ndarray:
    """Rounding residues as zeros."""
    return np.where(np.abs(centre) < 1e-12, 0.0, centre)


def _computation(setup: Setup, cost: Cost) -> list[str]:
    spaces = []
    for space in (setup.space, *(leg.space for leg in setup.legs)):
        words = " x ".join(f"{a.n} {a.kind if a.n > 1 else 'uniform'} ({'xyz'[a.covers[0]]}" + (
            f"{'xyz'[a.covers[1]]})" if len(a.covers) > 1 else ")") for a in space.axes)
        if words not in spaces:
            spaces.append(words)
    return [
        _row("accuracy", setup.plan.numerics.accuracy),
        *(_row("grid" if i == 0 else "", words) for i, words in enumerate(spaces)),
        _row("", setup.why),
        _row("memory", _bytes(cost.memory)),
        _row("cost", f"about {cost.pairs:.0f} transform pairs, {_duration(cost.seconds)} on this machine"),
    ]


def _bytes(size: float) -> str:
    return f"{four(size / 1e6)} MB" if size < 1e9 else f"{four(size / 1e9)} GB"


def _duration(seconds: float) -> str:
    if seconds < 1:
        return "less than a second"
    if seconds < 100:
        return f"about {seconds:.0f} s"
    return f"about {seconds / 60:.0f} min" if seconds < 6000 else f"about {seconds / 3600:.1f} h"
