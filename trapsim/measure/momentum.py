"""The momentum distribution along a direction, exact at any moment of a flight, and the diffraction orders in it.

The wave function in the lab carries the frame's curvature of phase, which no grid would hold. Along a direction with
scale b and rate bdot it is a quadratic phase exp(i b bdot xi^2/(2 q)); a Fourier integral over it is, up to phases, the
wave function propagated freely and magnified: with f = inverse[ exp(-i q k^2/(2 b bdot)) forward phi ],
n(k_lab) = |f(xi = q k_lab/bdot)|^2 q/bdot. Where bdot is too small for that to fit the box, the phase fits the grid and
is multiplied on. (Fresnel's integral as a convolution; J. W. Goodman, Introduction to Fourier Optics, on both forms.)
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from trapsim.cloud.cloud import Cloud
from trapsim.measure.observables import reach
from trapsim.space.axes import Array, Mirror, Wall, Wave
from trapsim.terms.lattice import Lattice

#: orders kept in tables: those with more than this share of the atoms
VISIBLE = 1e-6
#: more orders than this are none
MOST = 200
#: population of the spectral tail left out when the forms are weighed against each other
TAIL = 1e-7


@dataclass(frozen=True)
class Momentum:
    """A momentum distribution along one direction.

    Parameters
    ----------
    direction : int
        0, 1, 2 for x, y, z.
    k : (n,)
        Wave numbers in the lab, ascending, 1/m.
    density : (n,)
        Share of the atoms per wave number, m; its integral is 1.
    """

    direction: int
    k: Array
    density: Array

    def share(self, low: float, high: float) -> float:
        """Share of the atoms with low < k < high, by the trapezoidal rule on samples cut at the limits."""
        edges = np.clip(_cell_edges(self.k), low, high)
        return float(self.density @ np.diff(edges))

    def mean(self) -> float:
        return float(self.k @ (self.density * np.diff(_cell_edges(self.k))))


def _cell_edges(k: Array) -> Array:
    middle = (k[1:] + k[:-1]) / 2
    return np.concatenate([[2 * k[0] - middle[0]], middle, [2 * k[-1] - middle[-1]]])


def momentum(cloud: Cloud, direction: int) -> Momentum:
    """The momentum distribution of a cloud along a direction that has an axis of its own.

    Raises
    ------
    ValueError
        When the direction shares a radial axis or is uniform.
    """
    space = cloud.space
    axis = space.axis(direction)
    if not isinstance(axis, Wave | Mirror | Wall) or axis.uniform:
        raise ValueError(f"direction {'xyz'[direction]} has no wave axis of its own")
    d = space.dim(direction)
    frame, q = cloud.frame, cloud.q
    b, bdot, drift = frame.b[direction], frame.bdot[direction], frame.Xdot[direction] / q
    lines = np.moveaxis(np.asarray(cloud.phi), d, -1)
    if isinstance(axis, Mirror):
        axis, lines = axis.unfolded(), np.concatenate([lines[..., ::-1], lines], axis=-1)
    elif isinstance(axis, Wall):
        axis, lines = _with_room(axis, lines)
    weights = _other_weights(cloud, d)
    spectrum = np.fft.fft(lines, axis=-1)
    width_k = reach(axis.k, _marginal(np.abs(spectrum) ** 2, weights), TAIL)
    extent = reach(axis.points, _marginal(np.abs(lines) ** 2, weights), TAIL)
    if abs(b * bdot) * (axis.half_extent - extent) > q * width_k:
        f = np.fft.ifft(spectrum * np.exp(-0.5j * q * axis.k**2 / (b * bdot)), axis=-1)
        k = axis.points * bdot / q
        density = _marginal(np.abs(f) ** 2, weights) * q / abs(bdot)
        order = slice(None) if bdot > 0 else slice(None, None, -1)
        return _normalised(direction, k[order] + drift, density[order])
    # the phase winds by up to b bdot xi/q at the edge: as many points as hold that and the spectrum
    width = width_k + abs(b * bdot) * extent / q
    n = axis.n * max(1, 2 ** int(np.ceil(np.log2(width / axis.k_max))))
    fine = Wave((direction,), n, axis.half_extent)
    padded = _padded(spectrum, n)
    samples = np.fft.ifft(padded, axis=-1) * np.exp(0.5j * b * bdot * _fine_points(axis, n) ** 2 / q)
    power = _marginal(np.abs(np.fft.fft(samples, axis=-1)) ** 2, weights)
    order = np.argsort(fine.k)
    return _normalised(direction, fine.k[order] / b + drift, power[order])


def _with_room(axis: Wall, lines: Array) -> tuple[Wave, Array]:
    """An axis with as much room again beyond the walls, and the samples on it: their spectrum is then that of the lab.

    Twice the length is what it takes to resolve |psi(k)|^2, whose Fourier transform reaches as far as the box is long.
    """
    below = axis.n // 2
    spare = [(0, 0)] * (lines.ndim - 1) + [(below, axis.n - below)]
    return Wave(axis.covers, 2 * axis.n, 2 * axis.half_extent), np.pad(lines, spare)


def _fine_points(axis: Wave, n: int) -> Array:
    """Where the samples of a zero-padded spectrum lie: from the first old point on, at the finer spacing."""
    return axis.points[0] + np.arange(n) * (2 * axis.half_extent / n)


def _padded(spectrum: Array, n: int) -> Array:
    old = spectrum.shape[-1]
    if n == old:
        return spectrum
    out = np.zeros((*spectrum.shape[:-1], n), dtype=complex)
    half = old // 2
    out[..., :half] = spectrum[..., :half]
    out[..., n - (old - half):] = spectrum[..., half:]
    return out


def _other_weights(cloud: Cloud, d: int) -> list[Array]:
    return [a.weights for e, a in enumerate(cloud.space.axes) if e != d]


def _marginal(density: Array, weights: list[Array]) -> Array:
    """Sum over every dimension but the last."""
    for w in weights:
        density = np.tensordot(w, density, axes=(0, 0))
    return density


def _normalised(direction: int, k: Array, density: Array) -> Momentum:
    return Momentum(direction, k, density / (density @ np.diff(_cell_edges(k))))


def order_shares(seen: Momentum, lattice: Lattice, *, fallen: float) -> dict[str, float]:
    """Share of the atoms per diffraction order of a lattice: bins of one recoil about 2 n hbar k.

    Parameters
    ----------
    seen : Momentum
        Along the lattice's axis.
    lattice : Lattice
    fallen : float
        Velocity gained from forces and kicks since the lattice first acted, m/s; taken off.

    Returns
    -------
    dict
        "-1", "0", "1" ... in units of 2 hbar k, those with more than a millionth of the atoms; empty where they are finer
        than the distribution is known, as for a cloud smaller than a period, or too many to be told apart.
    """
    k = lattice.k
    offset = fallen / lattice.recoil_velocity * k
    there = np.nonzero(np.cumsum(seen.density * np.diff(_cell_edges(seen.k))) > VISIBLE / 2)[0]
    back = np.nonzero(np.cumsum((seen.density * np.diff(_cell_edges(seen.k)))[::-1]) > VISIBLE / 2)[0]
    low, high = ((seen.k[i] - offset) / (2 * k) for i in (there[0], len(seen.k) - 1 - back[0]))
    if high - low > MOST or 2 * k < np.diff(seen.k).min():
        return {}
    orders = range(int(np.floor(low)), int(np.ceil(high)) + 1)
    shares = {n: seen.share((2 * n - 1) * k + offset, (2 * n + 1) * k + offset) for n in orders}
    return {str(n): p for n, p in shares.items() if p > VISIBLE}


def order_motion(seen: Momentum, lattice: Lattice, *, fallen: float) -> dict[str, tuple[float, float]]:
    """Mean velocity and rms velocity spread of each visible order, m/s, what forces and kicks gave taken off.

    Parameters
    ----------
    seen, lattice, fallen
        As in `order_shares`.
    """
    k, v = lattice.k, lattice.recoil_velocity
    offset = fallen / v * k
    out = {}
    for name in order_shares(seen, lattice, fallen=fallen):
        edges = np.clip(_cell_edges(seen.k), (2 * int(name) - 1) * k + offset, (2 * int(name) + 1) * k + offset)
        part = seen.density * np.diff(edges)
        part /= part.sum()
        mean = float((seen.k - offset) @ part)
        out[name] = (mean * v / k, float(np.sqrt((seen.k - offset - mean) ** 2 @ part)) * v / k)
    return out
