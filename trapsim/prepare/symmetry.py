"""Which directions are alike, leg by leg, and so how small a space will do."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from trapsim.fields import Triple
from trapsim.prepare.stretch import Stretch
from trapsim.prepare.timeline import Timeline
from trapsim.terms.part import ANYWHERE, About, Array, steered

#: a classical centre that is off by less (m, m/s) has not moved
NOTHING = 1e-15
#: m; a cloud this close to a part's own centre sits on it
NEAR = 1e-12
GOLDEN = (np.sqrt(5) - 1) / 2


def round_directions(timeline: Timeline, *, standing: bool) -> list[frozenset[int]]:
    """For the ground state and then for every step, the directions about which the cloud is still round.

    A cloud stays round about a direction as long as everything that has acted on it so far was; once lost, it does
    not come back. A moving frame takes up forces and kicks; a standing one sees them, so there they break roundness.

    Parameters
    ----------
    timeline : Timeline
    standing : bool
        Whether the frame stands in the lab all the time.
    """
    origin = np.concatenate([timeline.origin, np.zeros(3)])
    everywhere = frozenset({0, 1, 2})
    pushed = _pushed(timeline.initial, timeline.origin, everywhere if standing else timeline.initial.gripped())
    still_round = _round_about(timeline.initial, origin, pushed)
    out = [still_round]
    before = origin
    for step, after in zip(timeline.steps, timeline.path, strict=True):
        held = everywhere if standing else step.stands
        thrown = frozenset(j for j in held if step.kick[j] or abs(before[3 + j]) > NOTHING)
        pushed = _pushed(step.stretch, tuple(before[:3]), held) | thrown
        if standing:
            away = np.abs(after - origin) > NOTHING
            pushed |= frozenset(np.nonzero(away[:3] | away[3:])[0])
        for place in (before, after):
            still_round = still_round & _round_about(step.stretch, place, pushed)
        out.append(still_round)
        before = after
    return out


def even_directions(timeline: Timeline, *, still: Sequence[bool]) -> list[tuple[bool, bool, bool]]:
    """For the ground state and then for every step, whether the cloud is still even about its centre, per direction.

    Parameters
    ----------
    timeline : Timeline
    still : three flags
        Directions in which the frame never moves.
    """
    origin = np.concatenate([timeline.origin, np.zeros(3)])
    never = frozenset(j for j in range(3) if still[j])
    pushed = _pushed(timeline.initial, timeline.origin, never | timeline.initial.gripped())
    even = [_even(timeline.initial, origin, j) and j not in pushed for j in range(3)]
    out = [tuple(even)]
    before = origin
    for step, after in zip(timeline.steps, timeline.path, strict=True):
        stands = never | step.stands
        pushed = _pushed(step.stretch, tuple(before[:3]), stands)
        for j in range(3):
            thrown = j in stands and (step.kick[j] != 0 or abs(before[3 + j]) > NOTHING)
            ok = all(_even(step.stretch, place, j) for place in (before, after))
            even[j] = even[j] and ok and not thrown and j not in pushed
        out.append(tuple(even))
        before = after
    return out


def _even(stretch: Stretch, place: Array, j: int) -> bool:
    """Whether everything in a stretch is even along a direction about a place, once its slope there is taken away."""
    for t in _samples(stretch):
        for part in stretch.parts_at(t):
            about = part.symmetry().even[j]
            if isinstance(about, About):
                if abs(place[3 + j]) > NOTHING:
                    return False
                off = place[j] - about.x
                if about.period:
                    off -= about.period * round(off / about.period)
                if abs(off) > NEAR:
                    return False
            elif about != ANYWHERE:
                return False
    return True


def _samples(stretch: Stretch) -> Sequence[float]:
    if stretch.steady:
        return (stretch.start,)
    # no round number of periods meets all of these
    share = np.arange(9) * GOLDEN % 1.0
    return tuple(stretch.start + share * (stretch.stop - stretch.start))


def _pushed(stretch: Stretch, place: Triple, held: frozenset[int]) -> frozenset[int]:
    """Those of the directions in which the frame stands along which a steerable force acts at a place."""
    out: frozenset[int] = frozenset()
    for t in _samples(stretch):
        force, curvature = steered(stretch.parts_at(t), place)
        weak = NOTHING * np.abs(curvature).max()
        out |= {j for j in held if abs(force[j]) > weak}
    return out


def _round_about(stretch: Stretch, place: Array, moved: frozenset[int]) -> frozenset[int]:
    """Directions about which everything in a stretch is round, seen from a place, for a cloud pushed along `moved`."""
    out = frozenset(a for a in range(3) if not moved - {a})
    for t in _samples(stretch):
        for part in stretch.parts_at(t):
            symmetry = part.symmetry()
            centred = [not isinstance(e, About) or abs(place[j] - e.x) < NEAR for j, e in enumerate(symmetry.even)]
            out &= frozenset(a for a in symmetry.round_about if all(centred[j] for j in range(3) if j != a))
    return out


def lasting_axis(round_about: Sequence[frozenset[int]], endless: Sequence[bool]) -> int | None:
    """The direction about which the cloud stays round for the most steps; one radial axis serves it all that time.

    A radial axis ends at its edge, so it covers no direction that is uniform or periodic.
    """
    fit = [a for a in sorted(round_about[0]) if not any(endless[j] for j in range(3) if j != a)]
    return max(fit, key=lambda a: sum(a in still_round for still_round in round_about), default=None)


def choose_words(axis: int | None, round_about: frozenset[int], even: Sequence[bool]) -> tuple[str, str, str]:
    """Kinds of axis along x, y, z: radial for the two directions alike about `axis`, mirror where the cloud is even."""
    pair = [j for j in range(3) if j != axis] if axis in round_about else []
    return tuple("radial" if j in pair else ("mirror" if even[j] else "wave") for j in range(3))


def between(walls: frozenset[int], words: Sequence[str]) -> tuple[str, str, str]:
    """Kinds of axis where perfectly reflecting walls close some directions: there an axis ends at them."""
    return tuple("wall" if j in walls else word for j, word in enumerate(words))
