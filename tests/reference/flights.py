"""Expansions and oscillations from publications and independent calculations; natural units unless named otherwise."""

from __future__ import annotations

from typing import NamedTuple

LAW = "independent calculation: the scaling law of Castin & Dum, PRL 77, 5315 (1996), by DOP853 at 1e-12"
RADIAL = "independent calculation: radial solver, two grids and two steps"
STRETCHED = "independent calculation: oscillator functions in stretched coordinates, DOP853, two bases"
MODES = "independent calculation: eigenvalues of Bogoliubov's equations in a radial basis"


class Law(NamedTuple):
    """Scaling factors after release, time in 1/omega_perp, lam = omega_z/omega_perp; aspect = R_perp/R_z."""

    lam: float
    time: float
    b_perp: float
    rate_perp: float
    b_z: float
    rate_z: float
    aspect: float
    source: str = LAW


class Asymptote(NamedTuple):
    """Rates of the scaling factors long after release."""

    lam: float
    rate_perp: float
    rate_z: float
    aspect: float
    source: str = LAW


class LawInLab(NamedTuple):
    """A Thomas-Fermi cloud of Rb-87 (1e5 atoms, a = 100.4 a0) after release: cycles per second, s, m."""

    frequency: tuple[float, float, float]
    time: float
    b: tuple[float, float, float]
    radius: tuple[float, float, float]
    source: str = LAW


class Free(NamedTuple):
    """An isotropic cloud after release, the full equation: rms width along one direction, energies per atom."""

    beta: float
    time: float
    width: float
    kinetic: float
    interaction: float
    release_energy: float
    source: str = RADIAL


class FreeRound(NamedTuple):
    """A cloud of the sqrt(8) trap after release, the full equation; `kinetic_perp` is x and y together."""

    time: float
    x_width: float
    z_width: float
    kinetic_perp: float
    kinetic_z: float
    interaction: float
    aspect: float
    source: str = STRETCHED


class FreeInLab(NamedTuple):
    """1e5 Rb-87 atoms, a = 100.4 a0, after release, the full equation: cycles per second, s, rms widths in m."""

    frequency: tuple[float, float, float]
    time: float
    width: tuple[float, float, float]
    source: str


class Mode(NamedTuple):
    """Lowest l = 2 and breathing frequency of an isotropic cloud, in units of the trap's."""

    beta: float
    quadrupole: float
    monopole: float
    source: str = MODES


LAW_ROWS = (
    Law(1, 1, 1.39415730, 0.64857148, 1.39415730, 0.64857148, 1.0),
    Law(1, 5, 4.52591227, 0.81208106, 4.52591227, 0.81208106, 1.0),
    Law(1, 10, 8.59953290, 0.81585438, 8.59953290, 0.81585438, 1.0),
    Law(0.1, 1, 1.41397626, 0.70636073, 1.00438257, 0.00783471, 0.140781),
    Law(0.1, 5, 5.08818046, 0.97679262, 1.05191195, 0.01353276, 0.483708),
    Law(0.1, 10, 10.01739225, 0.99034546, 1.12220014, 0.01437757, 0.892656),
    Law(0.1, 20, 19.94249874, 0.99355669, 1.26826239, 0.01473942, 1.572427),
    Law(8**0.5, 1, 1.32625739, 0.49087625, 3.20673217, 3.05090557, 1.169796),
    Law(8**0.5, 5, 3.55642812, 0.57254414, 16.14169519, 3.26752547, 0.623175),
)

ASYMPTOTES = (
    Asymptote(1, 0.8164966, 0.8164966, 1.0, "closed form sqrt(2/3); Castin & Dum (1996), from memory"),
    Asymptote(0.1, 0.9944159, 0.0149245, 6.662971),
    Asymptote(8**0.5, 0.5752240, 3.2719839, 0.497245),
)

LAW_IN_LAB = (
    LawInLab((100, 100, 100), 20e-3, (10.69377,) * 3, (68.493e-6,) * 3),
    LawInLab((200, 200, 20), 20e-3, (25.04319, 25.04319, 1.34409), (76.700e-6, 76.700e-6, 41.165e-6)),
)

FREE = (
    Free(10, 0, 0.78859998, 0.60846066, 0.21624949, 0.82471016),
    Free(10, 1, 1.10973669, 0.74651397, 0.07819619, 0.82471016),
    Free(10, 5, 3.86868957, 0.82280542, 0.00190474, 0.82471016),
    Free(100, 0, 1.04730893, 0.37734121, 0.84529519, 1.22263641),
    Free(100, 0.5, 1.16925991, 0.61460515, 0.60803125, 1.22263641),
    Free(100, 1, 1.46494257, 0.91169346, 0.31094295, 1.22263641),
    Free(100, 2, 2.24985379, 1.13547341, 0.08716300, 1.22263641),
    Free(100, 3, 3.11033669, 1.18926359, 0.03337282, 1.22263641),
    Free(100, 5, 4.88351380, 1.21389343, 0.00874298, 1.22263641),
)

#: N a/a_perp and release energy of the rows below: N = 1000 in Dalfovo & Stringari's trap.
FREE_ROUND_NA = 4.33
FREE_ROUND_RELEASE_ENERGY = 1.687982
FREE_ROUND = (
    FreeRound(0, 1.080365, 0.496466, 0.236944, 0.520794, 0.930245, 2.176108),
    FreeRound(1, 1.453568, 1.537469, 0.466844, 1.053723, 0.167415, 0.945429),
    FreeRound(2, 2.099888, 2.997703, 0.529595, 1.116043, 0.042345, 0.700499),
    FreeRound(5, 4.255847, 7.491342, 0.551955, 1.131733, 0.004294, 0.568102),
    FreeRound(10, 7.950486, 15.013009, 0.554291, 1.133066, 0.000624, 0.529573),
)
#: x/z at t = 5 by the scaling law, and by the full equation for N = 1000 and N = 10000: the law is no short-cut.
ASPECT_AT_5 = {"law": 0.6232, 1000: 0.5681, 10000: 0.5981}

#: Release energy of N = 10000 in the same trap, hbar omega_perp.
RELEASE_ENERGY_10000 = 3.196211

FREE_IN_LAB = (
    FreeInLab((100, 100, 100), 20e-3, (26.06429e-6,) * 3, RADIAL),
    FreeInLab((100, 100, 100), 30e-3, (38.57548e-6,) * 3, RADIAL),
    FreeInLab((20, 150, 150), 5e-3, (11.094671e-6, 6.725184e-6, 6.725184e-6), STRETCHED),
)

MODE_ROWS = (
    Mode(10, 1.813214, 2.083659),
    Mode(100, 1.556953, 2.181071),
    Mode(1000, 1.448371, 2.222890),
)

#: Thomas-Fermi m = 0 modes of a round trap, lam: (low, high) in omega_perp. Formula: Stringari, PRL 77, 2360 (1996),
#: from memory; numbers: independent calculation of that formula.
ROUND_MODES = {8**0.5: (1.797128, 4.976980), 0.1: (0.1580145, 2.001257)}


class Worked(NamedTuple):
    """1e5 Rb-87 atoms, a = 100.4 a0, isotropic 100 Hz: Thomas-Fermi figures and those of the full equation, SI."""

    mu_hz: float = 1763.70
    mu_nk: float = 84.644
    radius: float = 6.40498e-6
    peak_density: float = 2.27142e20
    healing_length: float = 0.18158e-6
    sound_speed: float = 2.84566e-3
    release_nk: float = 24.184
    full_mu_hz: float = 1773.02
    full_peak_density: float = 2.27795e20
    full_width: float = 2.42996e-6
    source: str = "independent calculation: closed forms (Thomas-Fermi) and Chebyshev collocation (full)"


WORKED = Worked()

#: A lens that stops an ideal packet of a 50 Hz trap after 20 ms: growth of the width, omega_l^2 tau (1/s), what is left
#: of the momentum variance. Formula: Ammann & Christensen, PRL 78, 2088 (1997), from memory; numbers: closed form.
LENS_IDEAL = (6.3622651, 48.7648, 0.0247045)
#: The same for an isotropic Thomas-Fermi cloud: b, omega_l^2 tau (1/s), interaction energy left as a share of the
#: release energy. Independent calculation: scaling law.
LENS_THOMAS_FERMI = (5.569458, 45.92305, 5.788e-3)
#: m: how far g = 9.80665 m/s^2 pulls a cloud down in a 100 Hz trap. Closed form.
SAG_100_HZ = 24.8405e-6
