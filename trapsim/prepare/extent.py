"""How long and how finely divided the axes must be."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from scipy import fft, optimize

from trapsim.cloud.shapes import chemical_potential_guess
from trapsim.evolve.guards import OUTER
from trapsim.space.axes import Array, Axis, Radial, Wave
from trapsim.space.space import Space


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


ACCURACY = {
    "draft": Accuracy(2.2, 3e-4, 2.4, 4.0, 3.5, 0.5, 1e-6, 1e-3, 1e-3, 1e-2),
    "normal": Accuracy(1.4, 1e-4, 2.4, 5.5, 5.0, 1.5, 1e-7, 1e-4, 1e-4, 1e-3),
    "fine": Accuracy(1.1, 1e-5, 0.8, 7.0, 6.0, 3.0, 1e-9, 1e-6, 1e-6, 1e-4),
}


@dataclass(frozen=True)
class Lengths:
    """What a trapped cloud needs per direction: half the room, and its finest length, m (infinite where untrapped)."""

    half: Array
    finest: Array
    mu: float


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
    mu = chemical_potential_guess(omega, q, scattering_number) if omega.any() else 0.0
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
    if scattering_number < 0:
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
    words : three of "wave", "radial"
    lengths : Lengths
    extent : (3,)
        Full lengths asked for, m; 0 where none is.
    points : (3,)
        Points asked for; 0 where none are.
    """
    axes: list[Axis] = []
    pair = tuple(j for j in range(3) if words[j] == "radial")
    groups = ([pair] if pair else []) + [(j,) for j in range(3) if words[j] == "wave"]
    for group in groups:
        half = max(extent[j] / 2 if extent[j] else lengths.half[j] for j in group)
        finest = min(lengths.finest[j] for j in group)
        asked = max(points[j] for j in group)
        if group == pair:
            n = asked or max(8, int(np.ceil(half / (accuracy.spacing * finest))) + 2)
            axes.append(Radial(group, n, half))
        elif np.isinf(finest):
            axes.append(Wave(group, asked or 1, half))
        else:
            n = asked or _fast_even(max(12, 2 * half / (accuracy.spacing * finest)))
            axes.append(Wave(group, n, half))
    return Space(axes, threads=threads)


def _fast_even(n: float) -> int:
    """The next even length that transforms well."""
    return 2 * fft.next_fast_len(int(np.ceil(n / 2)))
