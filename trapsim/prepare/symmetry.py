"""Which directions are alike, leg by leg, and so how small a space will do."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from trapsim.prepare.timeline import Stretch, Timeline

#: a classical centre that is off by less (m, m/s) has not moved
NOTHING = 1e-15


def round_directions(timeline: Timeline, *, standing: bool) -> list[frozenset[int]]:
    """For the ground state and then for every step, the directions about which the cloud is still round.

    A cloud stays round about a direction as long as everything that has acted on it so far was; once lost, it does
    not come back. A moving frame takes up forces and kicks; a standing one sees them, so there they break roundness.
    """
    still_round = _round_about(timeline.initial)
    out = [still_round]
    for step, centre in zip(timeline.steps, timeline.path, strict=True):
        still_round = still_round & _round_about(step.stretch)
        if standing:
            away = np.abs(centre - np.concatenate([timeline.origin, np.zeros(3)])) > NOTHING
            moved = away[:3] | away[3:]
            still_round = still_round - {a for a in range(3) if moved[(a + 1) % 3] or moved[(a + 2) % 3]}
        out.append(still_round)
    return out


def _samples(stretch: Stretch) -> Sequence[float]:
    if stretch.steady:
        return (stretch.start,)
    return tuple(np.linspace(stretch.start, stretch.stop, 7))


def _round_about(stretch: Stretch) -> frozenset[int]:
    out = frozenset({0, 1, 2})
    for t in _samples(stretch):
        for part in stretch.parts_at(t):
            out &= part.symmetry().round_about
    return out


def choose_words(round_about: frozenset[int], uniform: Sequence[bool]) -> tuple[str, str, str]:
    """Kinds of axis along x, y, z: the radial axis covers two directions that are alike."""
    for axis in sorted(round_about):
        pair = [j for j in range(3) if j != axis]
        if not any(uniform[j] for j in pair):
            return tuple("wave" if j == axis else "radial" for j in range(3))
    return ("wave", "wave", "wave")
