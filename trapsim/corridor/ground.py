"""The ground state of a plan, or a clear word why there is none."""

from __future__ import annotations

from trapsim.errors import PhysicsRefused
from trapsim.evolve.relax import Relaxed, relax
from trapsim.prepare.setup import Setup

#: with imaginary time, residuals below this would take thousands of pairs
IMAGINARY_RESIDUAL = 1e-6


def ground_state(setup: Setup) -> Relaxed:
    """Relax the cloud of a plan.

    Raises
    ------
    PhysicsRefused
        On collapse, or when it does not converge to a positive state.
    """
    hamiltonian = setup.hamiltonian()
    method = setup.plan.numerics.ground
    tolerance = setup.accuracy.residual
    if method == "imaginary time":
        tolerance = max(tolerance, IMAGINARY_RESIDUAL)
    relaxed = relax(hamiltonian, setup.first_guess(hamiltonian), method=method, tolerance=tolerance)
    if relaxed.collapsed:
        raise PhysicsRefused.at(
            "ground state", f"N a = {1e9 * setup.plan.atoms.number * setup.plan.atoms.scattering_length:.4g} nm",
            "the attraction is too strong for this trap: the cloud collapses (in a round trap at N |a| / a_ho = 0.575)",
            "take fewer atoms, a weaker attraction or a weaker trap",
        )  # fmt: skip
    if relaxed.signed:
        raise PhysicsRefused.at(
            "ground state", "a wave function that changes sign", "a ground state is positive",
            "take numerics.accuracy = \"fine\" or give more numerics.points",
        )  # fmt: skip
    if not relaxed.converged:
        raise PhysicsRefused.at(
            "ground state", f"a residual of {relaxed.residual:.1e} after {relaxed.pairs:.0f} transform pairs",
            f"it must fall below {tolerance:.0e}",
            "try the other numerics.ground, or look at numerics.extent and numerics.points",
        )  # fmt: skip
    return relaxed
