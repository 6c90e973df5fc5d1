"""The ground state: conjugate gradient on the sphere, or imaginary time.

H/hbar = K + V + c |u|^2, K = -(q/2) laplacian, c = 4 pi q a N, integral of u^2 = 1, u real. Energies are rad/s per
atom.

Sources: preconditioned nonlinear conjugate gradient, X. Antoine, A. Levitt and Q. Tang, J. Comput. Phys. 343, 92
(2017); normalised gradient flow, W. Bao and Q. Du, SIAM J. Sci. Comput. 25, 1674 (2004).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from trapsim.evolve.hamiltonian import Hamiltonian, means
from trapsim.space.resample import resample
from trapsim.space.space import Array

#: an attractive cloud that is drawn together by more than this share of E_kin has collapsed: only the grid holds it
UNBALANCED = 2e-3
#: it pays to relax on every second point first, where those are no further apart than this many healing lengths
#: sqrt(q/(2 mu))
COARSEST = 3.0


@dataclass(frozen=True)
class Relaxed:
    """What relaxing came to.

    Parameters
    ----------
    u : real array
        The wave function, positive, normalised to 1.
    mu, energy, kinetic, potential, interaction : float
        rad/s per atom.
    residual : float
        ||H u - mu u|| / (mu - V_min).
    pairs : float
        Transform pairs spent.
    converged : bool
    collapsed : bool
        The cloud fell in on itself.
    signed : bool
        The wave function changes sign, so it is not the ground state.
    """

    u: Array
    mu: float
    energy: float
    kinetic: float
    potential: float
    interaction: float
    residual: float
    pairs: float
    converged: bool
    collapsed: bool = False
    signed: bool = False


def relax(
    hamiltonian: Hamiltonian,
    start: Array,
    *,
    method: str = "conjugate gradient",
    tolerance: float = 1e-6,
    most_pairs: int = 20000,
) -> Relaxed:
    """The ground state of a Hamiltonian, from a positive first guess.

    Parameters
    ----------
    hamiltonian : Hamiltonian
    start : real array
        First guess; its modulus is used.
    method : str
        "conjugate gradient" or "imaginary time".
    tolerance : float
        Goal for the relative residual.
    most_pairs : int
        Give up after this many transform pairs; the result then says `converged = False`.
    """
    u = np.abs(start)
    u = u / np.sqrt(hamiltonian.dot(u, u))
    search = _conjugate_gradient if method == "conjugate gradient" else _imaginary_time
    hamiltonian.pairs = 0
    if method == "conjugate gradient":
        u = _from_coarser(hamiltonian, u, tolerance, most_pairs)
    u, collapsed = search(hamiltonian, u, tolerance, most_pairs)
    return _result(hamiltonian, u, tolerance, collapsed)


def _from_coarser(h: Hamiltonian, u: Array, tolerance: float, most_pairs: int) -> Array:
    """A better start: relaxed on every second point, where those are close enough for the cloud's edge."""
    coarse = h.coarser()
    if coarse is None:
        return u
    n = u * u
    mu = h.dot(h.V, n) + h.c * h.dot(n, n)
    if max(a.spacing for a in coarse.space.axes if not a.uniform) ** 2 * 2 * mu > COARSEST**2 * h.q:
        return u
    found = relax(coarse, means(u, h.space), tolerance=tolerance, most_pairs=most_pairs)
    h.pairs += found.pairs * coarse.space.size / h.space.size
    better = np.abs(resample(found.u, coarse.space, h.space).real)
    return better / np.sqrt(h.dot(better, better))


def _energies(h: Hamiltonian, u: Array, Ku: Array) -> tuple[float, float, float]:
    n = u * u
    return h.dot(u, Ku), h.dot(h.V, n), 0.5 * h.c * h.dot(n, n)


def _result(h: Hamiltonian, u: Array, tolerance: float, collapsed: bool) -> Relaxed:
    pairs = h.pairs
    Ku = h.kinetic(u)
    kin, pot, inter = _energies(h, u, Ku)
    mu = kin + pot + 2 * inter
    r = Ku + (h.V + h.c * u * u - mu) * u
    residual = np.sqrt(h.dot(r, r)) / max(abs(mu), 1e-3 * _scale(kin, pot, inter))
    signed = bool(u.min() < -1e-4 * u.max())
    if h.c < 0 and not collapsed:
        collapsed = h.rms_too_small(u) or h.unbalanced(u, kin, inter) < -UNBALANCED
    return Relaxed(
        u=u, mu=mu + h.lowest, energy=kin + pot + inter + h.lowest, kinetic=kin, potential=pot + h.lowest,
        interaction=inter, residual=float(residual), pairs=pairs,
        converged=bool(residual <= 1.01 * tolerance) and not collapsed and not signed, collapsed=collapsed,
        signed=signed,
    )  # fmt: skip


def _scale(kin: float, pot: float, inter: float) -> float:
    """About mu - V_min, positive for either sign of the interaction."""
    return kin + pot + 2 * abs(inter)


def _falling_in(h: Hamiltonian, u: Array, kin: float, pot: float, inter: float) -> bool:
    """Whether an attractive cloud is past the point where anything holds it up.

    Drawn together by a factor s in d directions its energy is s^2 kin + pot/s^2 + s^d inter: it falls in when that
    goes down, and ever faster.
    """
    if h.c >= 0:
        return False
    d = h.extended
    radial_force = 2 * kin - 2 * pot + d * inter
    curvature = 2 * kin + 6 * pot + d * (d - 1) * inter
    return (radial_force < 0 and curvature < 0) or h.rms_too_small(u)


def _conjugate_gradient(h: Hamiltonian, u: Array, tolerance: float, most_pairs: int) -> tuple[Array, bool]:
    Ku = h.kinetic(u)
    p = Kp = r_old = z_old_r = None
    use_potential = True
    milestones = [np.inf]
    step = 0
    while h.pairs < most_pairs:
        kin, pot, inter = _energies(h, u, Ku)
        if _falling_in(h, u, kin, pot, inter):
            return u, True
        a = _scale(kin, pot, inter)
        mu = kin + pot + 2 * inter
        field = h.V + h.c * u * u
        r = Ku + (field - mu) * u
        norm = np.sqrt(h.dot(r, r))
        rel = norm / max(abs(mu), 1e-3 * a)
        if rel <= tolerance:
            return u, False
        if step and step % 25 == 0:
            if use_potential and rel > milestones[-1] / 5:
                use_potential, p = False, None
            milestones.append(rel)
        if use_potential:
            q = r / (a + h.V + max(h.c, 0.0) * u * u)
            z = h.spectral(q, a / (a + h.K))
            Kz = a * (q - z)
        else:
            z = h.spectral(r, 1 / (a + h.K))
            Kz = r - a * z
        overlap = h.dot(u, z)
        z, Kz = z - overlap * u, Kz - overlap * Ku
        zr = h.dot(r, z)
        if p is None:
            p, Kp = -z, -Kz
        else:
            beta = max(0.0, (zr - h.dot(r_old, z)) / z_old_r)
            p, Kp = beta * p - z, beta * Kp - Kz
        overlap = h.dot(u, p)
        p, Kp = p - overlap * u, Kp - overlap * Ku
        if h.dot(p, r) >= 0:
            p, Kp = -z, -Kz
            if h.dot(p, r) >= 0:
                p = -r
                Kp = h.kinetic(p)
        length = np.sqrt(h.dot(p, p))
        p, Kp = p / length, Kp / length
        t = _first_minimum(h, u, Ku, p, Kp)
        if t is None:
            p = None
        else:
            cosine = 1 / np.sqrt(1 + t * t)
            u, Ku, p, Kp = (
                (u + t * p) * cosine, (Ku + t * Kp) * cosine,
                (p - t * u) * (length * cosine), (Kp - t * Ku) * (length * cosine),
            )  # fmt: skip
        r_old, z_old_r = r, zr
        step += 1
        if step % 20 == 0:
            u = u / np.sqrt(h.dot(u, u))
            Ku = h.kinetic(u)
            if p is not None:
                Kp = h.kinetic(p)
    return u, False


def _first_minimum(h: Hamiltonian, u: Array, Ku: Array, p: Array, Kp: Array) -> float | None:
    """tan(theta) > 0 of the first minimum of E(u cos + p sin): a root of a quartic, found exactly."""
    uu, up, pp = u * u, u * p, p * p
    a0 = h.dot(u, Ku) + h.dot(h.V, uu)
    a1 = h.dot(p, Ku) + h.dot(h.V, up)
    a2 = h.dot(p, Kp) + h.dot(h.V, pp)
    c0, c1, c2 = h.dot(uu, uu), 4 * h.dot(uu, up), 6 * h.dot(uu, pp)
    c3, c4 = 4 * h.dot(up, pp), h.dot(pp, pp)
    half = 0.5 * h.c
    quartic = [
        -2 * a1 - half * c3,
        2 * (a2 - a0) + half * (4 * c4 - 2 * c2),
        half * (3 * c3 - 3 * c1),
        2 * (a2 - a0) + half * (2 * c2 - 4 * c0),
        2 * a1 + half * c1,
    ]
    roots = np.roots(quartic)
    good = roots.real[(np.abs(roots.imag) < 1e-6 * np.abs(roots)) & (roots.real > 0)]
    return float(good.min()) if len(good) else None


def _imaginary_time(h: Hamiltonian, u: Array, tolerance: float, most_pairs: int) -> tuple[Array, bool]:
    """Strang steps with the density of the step's start (an error of second order in dt), dt annealed."""
    Ku = h.kinetic(u)
    # near collapse the error of a long step is enough to push an attractive cloud over the edge
    dt = (0.5 if h.c >= 0 else 0.05) / _scale(*_energies(h, u, Ku))
    check = 10
    while h.pairs < most_pairs:
        damp = np.exp(-h.K * dt)
        for _ in range(check):
            half = np.exp(-0.5 * dt * (h.V + h.c * u * u))
            new = half * h.spectral(half * u, damp)
            new /= np.sqrt(h.dot(new, new))
            change = np.sqrt(h.dot(new - u, new - u))
            u = new
            if h.c < 0 and h.rms_too_small(u):
                return u, True
        Ku = h.kinetic(u)
        kin, pot, inter = _energies(h, u, Ku)
        if _falling_in(h, u, kin, pot, inter):
            return u, True
        mu = kin + pot + 2 * inter
        size = max(abs(mu), 1e-3 * _scale(kin, pot, inter))
        r = Ku + (h.V + h.c * u * u - mu) * u
        rel = np.sqrt(h.dot(r, r)) / size
        if rel <= tolerance:
            return u, False
        if change / (dt * size) < 0.3 * rel:
            dt /= 2
    return u, False
