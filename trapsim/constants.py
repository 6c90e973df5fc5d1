"""Constants of nature, CODATA as shipped with scipy, and the version of the physics in the engine."""

from __future__ import annotations

from scipy import constants as _codata

HBAR = _codata.hbar
H = _codata.h
K_B = _codata.k
ATOMIC_MASS = _codata.atomic_mass
BOHR_RADIUS = _codata.physical_constants["Bohr radius"][0]
#: atomic unit of polarisability, C^2 m^2/J
POLARISABILITY = _codata.physical_constants["atomic unit of electric polarizability"][0]
STANDARD_GRAVITY = _codata.g

#: Enters every key: raise it when the same plan would give another result.
PHYSICS_VERSION = 7
