"""How long and how finely divided the axes must be."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field, replace

import numpy as np
from scipy import fft, optimize

from trapsim.cloud.shapes import chemical_potential_guess
from trapsim.errors import PlanError
from trapsim.evolve.guards import OUTER
from trapsim.quantities import human
from trapsim.space.axes import Array, Axis, Mirror, Radial, Wall, Wave
from trapsim.space.space import Space

#: points of a whole axis: transforms do with more, but the matrices of a mirror, wall or radial axis grow as their square
LONGEST = {"wave": 2**20, "mirror": 3 * 2**12, "wall": 2**13, "radial": 2**12}


@dataclass(frozen=True)
class Accuracy:
    """What one of the words draft, normal, fine stands for.

    Parameters
    ----------
    spacing : float
        In units of the cloud's finest length.
    tolerance : float
        L2 error of the wave function per step in flight.
    cap : float
        Highest phase per plain step in a trap, rad.
    tail : float
        The ground state falls to exp(-tail) at the edge.
    room, inner : float
        Edge thicknesses kept free around the Thomas-Fermi radius, up to the edge and up to where the guard looks.
    residual : float
        Of the ground state.
    edge, spectrum, norm : float
        Where the guards stop.
    finer, wider : float
        How many times as many points per length, whatever else asks for them, and how many times as much room where the
        plan or a box says how much.
    """

    spacing: float
    tolerance: float
    cap: float
    tail: float
    room: float
    inner: float
    residual: float
    edge: float
    spectrum: float
    norm: float
    finer: float = 1.0
    wider: float = 1.0

    def outdone(self) -> Accuracy:
        """What shows the errors of this one: more points, more room, shorter steps, a better ground state."""
        return replace(
            self, tolerance=self.tolerance / 10, cap=self.cap / 2, tail=self.tail + 2, room=self.room + 1.5,
            inner=self.inner + 1, residual=self.residual / 10, edge=self.edge / 10, spectrum=self.spectrum / 2,
            norm=self.norm / 2, finer=1.4 * self.finer, wider=1.2 * self.wider,
        )  # fmt: skip


#: spacings of the axis that takes over when such a wall opens, per spacing between the walls
OPENED = 2
#: points per lattice period between walls, that need not stand a whole number of periods apart, in those elsewhere
UNMATCHED = 1.5

ACCURACY = {
    "draft": Accuracy(2.2, 3e-4, 2.4, 4.0, 3.5, 0.5, 1e-6, 4e-3, 4e-3, 1e-2),
    "normal": Accuracy(1.4, 1e-4, 2.4, 5.5, 5.0, 1.5, 1e-7, 1e-4, 1e-4, 1e-3),
    "fine": Accuracy(1.0, 1e-5, 0.8, 7.0, 6.0, 4.0, 1e-9, 2e-6, 5e-5, 1e-4),
}


def finer_than(word: str) -> str:
    """What the accuracy is called that shows the errors of another; no plan can ask for it."""
    return f"finer than {word}"


ACCURACY |= {finer_than(word): accuracy.outdone() for word, accuracy in ACCURACY.items()}


@dataclass(frozen=True)
class Lengths:
    """What a trapped cloud needs per direction.

    Parameters
    ----------
    half : (3,)
        Half the room, m; infinite where nothing says.
    finest : (3,)
        Its finest length, m; infinite where nothing varies.
    mu : float
        About the chemical potential over hbar, rad/s.
    spacing : (3,)
        The widest spacing allowed for other reasons, m (fast orders of a lattice); infinite where there are none.
    period : (3,)
        Period that the grid must be commensurate with, m; 0 where there is none.
    per_period : (3,)
        Points per period that are enough.
    walls : (3,)
        Half the distance of perfectly reflecting walls, m; 0 where there are none.
    periodic : (3,)
        Whether the plan makes the direction periodic: it has a length, and nothing that confines.
    """

    half: Array
    finest: Array
    mu: float
    spacing: Array = field(default_factory=lambda: np.full(3, np.inf))
    period: Array = field(default_factory=lambda: np.zeros(3))
    per_period: Array = field(default_factory=lambda: np.zeros(3, dtype=int))
    walls: Array = field(default_factory=lambda: np.zeros(3))
    periodic: Array = field(default_factory=lambda: np.zeros(3, dtype=bool))

    @property
    def uniform(self) -> Array:
        """Directions (3,) along which nothing varies."""
        return np.isinf(self.finest) & np.isinf(self.spacing) & (self.period == 0)


def cloud_lengths(omega: Array, q: float, scattering_number: float, accuracy: Accuracy) -> Lengths:
    """Lengths of a cloud in a harmonic trap, from the chemical potential of its best Gaussian.

    Per direction the energy available is mu less the zero point of the others, R = sqrt(2 q mu_j)/w_j; outside it the
    wave function falls as exp(-S), S = [x sqrt(x^2 - R^2) - R^2 arccosh(x/R)]/2 in oscillator lengths (WKB), over an
    edge of thickness delta = (q^2/(2 w^2 R))^(1/3) (F. Dalfovo, L. Pitaevskii and S. Stringari, Phys. Rev. A 54, 4213
    (1996)).

    Parameters
    ----------
    omega : (3,)
        rad/s; zero where untrapped.
    q : float
        hbar/m.
    scattering_number : float
        N a over the lengths of the untrapped directions.
    accuracy : Accuracy
    """
    omega = np.asarray(omega, dtype=float)
    mu = chemical_potential_guess(omega, q, scattering_number) if omega.any() else 4 * np.pi * q * scattering_number
    half, finest = np.full(3, np.inf), np.full(3, np.inf)
    for j in np.nonzero(omega)[0]:
        w = omega[j]
        others = omega.sum() - w
        available = max(mu - others / 2, w / 2)
        oscillator = np.sqrt(q / w)
        radius = np.sqrt(2 * q * available) / w
        edge = (q**2 / (2 * w**2 * radius)) ** (1 / 3)
        half[j] = max(
            _tail_end(radius / oscillator, accuracy.tail) * oscillator,
            radius + accuracy.room * edge,
            (radius + accuracy.inner * edge) / OUTER,
        )
        finest[j] = min(edge, 0.42 * oscillator)
    if scattering_number < 0 and omega.any():
        finest *= _drawn_together(omega, q, abs(scattering_number))
    return Lengths(half, finest, mu)


def _drawn_together(omega: Array, q: float, attraction: float) -> float:
    """How much finer than an ideal gas an attractive cloud is.

    In three directions it shrinks until it collapses at N |a|/a_ho = 0.575, in two until N |a|/L = 0.466, there as the
    fourth root of what is left; on a line it goes over into a soliton of half-width 2/(4 pi N |a| a_ho/(L L')) a_ho.
    """
    trapped = omega[omega > 0]
    if len(trapped) == 1:
        return 1 / (1.6 + 12 * attraction * float(np.sqrt(q / trapped[0])))
    if len(trapped) == 2:
        return 0.7 * max(1 - attraction / 0.466, 0.01) ** 0.5
    return 0.7 * max(1 - attraction / np.sqrt(q / np.exp(np.log(trapped).mean())), 0.3)


def _tail_end(radius: float, tail: float) -> float:
    """x with S(x) = tail, oscillator lengths."""

    def missing(x: float) -> float:
        return (x * np.sqrt(x**2 - radius**2) - radius**2 * np.arccosh(x / radius)) / 2 - tail

    return float(optimize.brentq(missing, radius, radius + 2 * tail + 2))


def choose_space(
    words: Sequence[str],
    lengths: Lengths,
    accuracy: Accuracy,
    *,
    extent: Sequence[float],
    points: Sequence[int],
    threads: int,
) -> Space:
    """The smallest space of the given kinds of axis that serves the lengths.

    Parameters
    ----------
    words : three of "wave", "mirror", "wall", "radial"
    lengths : Lengths
    extent : (3,)
        Full lengths asked for, m; 0 where none is.
    points : (3,)
        Points asked for; 0 where none are. Where there are perfectly reflecting walls, those between them.
    """
    axes: list[Axis] = []
    pair = tuple(j for j in range(3) if words[j] == "radial")
    groups = ([pair] if pair else []) + [(j,) for j in range(3) if words[j] != "radial"]
    finer = accuracy.finer
    wider = np.where(lengths.periodic, 1.0, accuracy.wider)
    for group in groups:
        half = max(wider[j] * extent[j] / 2 if extent[j] else lengths.half[j] for j in group)
        spacing = min(min(accuracy.spacing * lengths.finest[j], lengths.spacing[j]) / finer for j in group)
        j = group[0]
        asked = _more(max(points[j] for j in group), finer * (wider[j] if extent[j] else 1.0))
        if group == pair:
            n = asked or int(np.ceil(max(8 * finer, half / spacing + 2 * finer)))
            axes.append(Radial(group, _bounded(n, half / n, group, words, lengths), half))
        elif lengths.walls[j]:
            asked = _more(points[j], finer)
            axes.append(_around_walls(j, half, spacing, lengths, asked, finer, words=words))
        elif lengths.period[j]:
            axes.append(_commensurate(
                j, half, spacing, lengths, points[j], finer, fixed=bool(extent[j]), words=words
            ))
        elif np.isinf(spacing):
            axes.append(Wave(group, asked or 1, half))
        else:
            n = asked or _fast_even(_bounded(max(12 * finer, 2 * half / spacing), spacing, group, words, lengths))
            axes.append(Wave(group, _bounded(n, spacing, group, words, lengths), half))
    axes = [_mirrored(a) if words[a.covers[0]] == "mirror" else a for a in axes]
    return Space(axes, threads=threads)


def _bounded(n: float, spacing: float, group: Sequence[int], words: Sequence[str], lengths: Lengths) -> float:
    """The number of points of a whole axis, if it is not absurd: looked at before anything of that size is made.

    Raises
    ------
    PlanError
    """
    j = group[0]
    most = LONGEST[words[j]]
    if n <= most:
        return n
    fine = lengths.period[j] > 0 or np.isfinite(lengths.spacing[j])
    raise PlanError.at(
        f"numerics.points[{j}]", f"{n:.4g} points along {'xyz'[j]}, {1e9 * spacing:.3g} nm apart",
        f"a {words[j]} axis has at most {most}",
        "the light, or the potential of yours, that acts along it asks for this: look at its depth, spacing, detuning and "
        "duration" if fine else 'take a shorter numerics.extent, or numerics.accuracy = "draft"',
    )  # fmt: skip


def _more(points: int, times: float) -> int:
    """So many times the points that a plan asks for."""
    return points if points <= 1 or times == 1 else _fast_even(times * points)


def _mirrored(axis: Axis) -> Axis:
    """Half of a wave axis; an odd number of points is made even."""
    return Mirror(axis.covers, (axis.n + 1) // 2, axis.half_extent)


def _around_walls(
    j: int, half: float, spacing: float, lengths: Lengths, asked: int, finer: float, *, words: Sequence[str]
) -> Axis:
    """The axis between perfectly reflecting walls, or that which takes over when they are opened.

    The walls are at cell boundaries of the second too: a density that is even about its ends is then summed exactly.
    """
    wall = lengths.walls[j]
    if lengths.period[j]:
        spacing = min(spacing, lengths.period[j] / (UNMATCHED * lengths.per_period[j] * finer))
    across = max(12 * finer, 2 * wall / spacing)
    n = asked or fft.next_fast_len(int(np.ceil(_bounded(across, spacing, (j,), words, lengths))))
    if words[j] == Wall.kind:
        return Wall((j,), n, wall)
    spacing = 2 * wall / (OPENED * n)
    whole = _fast_even(_bounded(2 * half / spacing, spacing, (j,), words, lengths))
    return Wave((j,), whole, whole * spacing / 2)


def _commensurate(
    j: int, half: float, spacing: float, lengths: Lengths, asked: int, finer: float, *, fixed: bool, words: Sequence[str]
) -> Wave:
    """A wave axis with a whole number of points per lattice period, and a whole number of periods.

    A grid that is not commensurate with a lattice that holds the cloud gives another lattice at every site.
    """
    period, place = lengths.period[j], f"numerics.extent[{j}]"
    periods = 2 * half / period
    if fixed:
        if finer == 1 and (abs(periods - round(periods)) > 1e-6 or round(periods) < 1):
            raise PlanError.at(
                place, human(2 * half, "length"), f"a whole number of lattice periods of {human(period, 'length')}",
                f"write {human(max(round(periods), 1) * period, 'length', figures=9)}",
            )  # fmt: skip
        periods = round(periods)
    per = max(
        int(np.ceil(finer * lengths.per_period[j])), int(np.ceil(period / spacing)) if np.isfinite(spacing) else 1
    )
    _bounded(asked or np.ceil(periods) * per, period / per, (j,), words, lengths)
    per = fft.next_fast_len(per)  # a large prime would spoil every number of periods
    if asked and finer > 1:
        # there may be more periods now than the plan had points for
        per = fft.next_fast_len(int(np.ceil(finer**2 * asked / round(periods))))
    elif asked:
        per = asked / (periods if fixed else round(asked * 2 * half / (asked * period)))
        if per != int(per):
            raise PlanError.at(
                f"numerics.points[{j}]", str(asked), "a whole number of points per lattice period",
                f"write a multiple of the number of periods, {round(periods)}",
            )  # fmt: skip
        per = int(per)
    if asked and finer == 1:
        periods = round(periods)
    elif not fixed:
        # a number of periods that makes the number of points transform well
        periods = next(m for m in range(int(np.ceil(periods)), 10**7) if _fast(m * per))
    return Wave((j,), int(periods * per), periods * period / 2)


def _fast(n: int) -> bool:
    return n % 2 == 0 and fft.next_fast_len(n) == n


def _fast_even(n: float) -> int:
    """The next even length that transforms well."""
    return 2 * fft.next_fast_len(int(np.ceil(n / 2)))
