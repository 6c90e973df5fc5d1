"""Ground states in traps with different frequencies, on products of oscillator functions, by Newton's method.

A trap is a product of factors, each covering 1, 2 or 3 alike directions: (3,) isotropic, (2, 1) round. Natural units of
the trap with frequency 1; beta = 4 pi N a/a of that trap in three dimensions.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import reduce
from math import pi, prod, sqrt

import numpy as np

from . import newton
from .spectral import Array, Oscillator, oscillator

Bases = tuple[Oscillator, ...]


@dataclass(frozen=True)
class Ground:
    """A ground state: energies per atom, one figure per factor where a tuple; `widths` = rms along one direction."""

    mu: float
    kinetic: tuple[float, ...]
    potential: tuple[float, ...]
    interaction: float
    peak_density: float
    widths: tuple[float, ...]
    coefficients: Array
    bases: Bases

    @property
    def energy(self) -> float:
        """Energy per atom."""
        return sum(self.kinetic) + sum(self.potential) + self.interaction


def thomas_fermi_mu(dimensions: Sequence[int], omegas: Sequence[float], beta: float) -> float:
    """The Thomas-Fermi chemical potential, from the geometric mean of the frequencies."""
    total = sum(dimensions)
    mean = prod(w**d for w, d in zip(omegas, dimensions, strict=True)) ** (1 / total)
    return mean * newton.thomas_fermi_mu(total, beta * mean ** (total / 2 - 1))


def choose_bases(dimensions: Sequence[int], omegas: Sequence[float], beta: float, counts: Sequence[int]) -> Bases:
    """Oscillator functions, `counts` of them per factor, that reach just beyond the cloud's edge.

    The last of n functions of width s reaches 2 s sqrt(n); nine Airy lengths outside a Thomas-Fermi edge leave room for
    what a flight throws ahead, and every further function then adds momentum. For a small or attractive cloud the
    width is fixed.
    """
    mu = thomas_fermi_mu(dimensions, omegas, beta)

    def scale(omega: float, count: int) -> float:
        if beta <= 5:
            return (0.5 if beta < -1 else 1.0) / sqrt(omega)
        edge = sqrt(2 * mu) / omega
        return (edge + 9 / (2 * omega**2 * edge) ** (1 / 3)) / sqrt(4 * count)

    return tuple(oscillator(d, n, scale=scale(w, n)) for d, n, w in zip(dimensions, counts, omegas, strict=True))


def along(axis: int, matrix: Array, a: Array) -> Array:
    """Act with a matrix on one axis of an array."""
    return np.moveaxis(np.tensordot(matrix, a, axes=(1, axis)), 0, axis)


def across(matrices: Sequence[Array], a: Array) -> Array:
    """Act with one matrix on each axis of an array."""
    return reduce(lambda done, pair: along(pair[0], pair[1], done), enumerate(matrices), a)


def _operators(bases: Bases, omegas: Sequence[float]) -> tuple[Array, newton.Cubic]:
    """The one-atom Hamiltonian on the product basis, and the cubic term with its slope, as plain matrices."""
    sizes = [len(b.square) for b in bases]
    hamiltonian = np.zeros((prod(sizes), prod(sizes)))
    for j, (basis, omega) in enumerate(zip(bases, omegas, strict=True)):
        parts = [np.eye(n) for n in sizes]
        parts[j] = basis.kinetic + omega**2 * basis.square / 2
        hamiltonian += reduce(np.kron, parts)
    values = reduce(np.kron, [b.values for b in bases])
    weights = reduce(np.kron, [b.weights for b in bases])
    kept = weights * (values**2).max(axis=1) > 1e-22
    values, weights = values[kept], weights[kept]

    def cubic(c: Array) -> tuple[Array, Array]:
        psi = values @ c
        return values.T @ (weights * psi**3), values.T @ ((3 * weights * psi**2)[:, None] * values)

    return hamiltonian, cubic


def ground(dimensions: Sequence[int], omegas: Sequence[float], beta: float, *, counts: Sequence[int]) -> Ground:
    """The ground state in a harmonic trap with one frequency per factor."""
    bases = choose_bases(dimensions, omegas, beta, counts)
    hamiltonian, cubic = _operators(bases, omegas)
    at_zero = reduce(np.kron, [b.at_zero for b in bases])
    if beta > 5:
        mu = thomas_fermi_mu(dimensions, omegas, beta)
        squares = (w**2 * b.r**2 / 2 for b, w in zip(bases, omegas, strict=True))
        profile = newton.soft_thomas_fermi(mu, beta, reduce(np.add.outer, squares))
        vector = across([b.values.T * b.weights for b in bases], profile).ravel()
        state = vector / np.linalg.norm(vector), mu
    else:
        energies, vectors = np.linalg.eigh(hamiltonian)
        state = vectors[:, 0] * np.sign(at_zero @ vectors[:, 0]), float(energies[0])
    for step in newton.stairs(beta):
        state = newton.solve(hamiltonian, cubic, np.eye(len(hamiltonian)), state, step)
    vector, mu = state
    c = vector.reshape([len(b.square) for b in bases])
    squares = [float(np.vdot(c, along(j, b.square, c))) for j, b in enumerate(bases)]
    return Ground(
        mu=mu,
        kinetic=tuple(float(np.vdot(c, along(j, b.kinetic, c))) for j, b in enumerate(bases)),
        potential=tuple(w**2 * s / 2 for w, s in zip(omegas, squares, strict=True)),
        interaction=beta * float(vector @ cubic(vector)[0]) / 2,
        peak_density=float(at_zero @ vector) ** 2,
        widths=tuple(sqrt(s / b.dimension) for s, b in zip(squares, bases, strict=True)),
        coefficients=c,
        bases=bases,
    )


def round_trap(lam: float, beta: float, *, counts: tuple[int, int] = (20, 16)) -> Ground:
    """The ground state in V = (rho^2 + lam^2 z^2)/2, beta = 4 pi N a/a_perp; the factors are (x and y, z)."""
    return ground((2, 1), (1.0, lam), beta, counts=counts)


def critical_round(lam: float, *, counts: tuple[int, int] = (14, 14)) -> float:
    """N |a|/a_ho at collapse in a round trap, a_ho from the geometric mean of the frequencies.

    Quantity: Gammal, Frederico & Tomio, PRA 64, 055602 (2001).
    """
    mean = lam ** (1 / 3)
    near = round_trap(lam, -4 * pi * 0.53 / sqrt(mean), counts=counts)
    hamiltonian, cubic = _operators(near.bases, (1.0, lam))
    start = sqrt(4 * pi * 0.53 / sqrt(mean)) * near.coefficients.ravel()
    bracket = near.mu - 0.45, near.mu
    beta, _ = newton.largest_attraction(hamiltonian, cubic, lambda u: float(u @ u), start, bracket)
    return beta / (4 * pi) * sqrt(mean)
