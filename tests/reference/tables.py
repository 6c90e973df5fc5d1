"""Ground states from publications and from independent calculations, in oscillator units (hbar = m = omega = 1).

Energies are per atom; beta = 4 pi N a/a_ho (in lower dimensions the coefficient of |psi|^2 psi); widths are rms along
one direction. `source` says where a record is from and how it is known.
"""

from __future__ import annotations

from typing import NamedTuple

COLLOCATION = "independent calculation: Chebyshev collocation and Newton's method"
OSCILLATOR = "independent calculation: Laguerre x even Hermite functions and Newton's method, two basis sizes"
BAO_TANG = "Bao & Tang, J. Comput. Phys. 187, 230 (2003); value from memory"
DALFOVO = "Dalfovo & Stringari, PRA 53, 2477 (1996), Table I; value from memory"


class Published(NamedTuple):
    """A chemical potential as printed; `digits` counts the decimals printed."""

    beta: float
    mu: float
    digits: int
    source: str = BAO_TANG


class Isotropic(NamedTuple):
    """An isotropic ground state; `potential` is the trap's energy."""

    beta: float
    mu: float
    energy: float
    kinetic: float
    potential: float
    interaction: float
    peak_density: float
    width: float
    source: str = COLLOCATION


class Attractive(NamedTuple):
    """An isotropic ground state with N |a|/a_ho; beta = -4 pi N |a|/a_ho."""

    na: float
    mu: float
    energy: float
    kinetic: float
    potential: float
    interaction: float
    peak_density: float
    width: float
    source: str = COLLOCATION


class LowDimension(NamedTuple):
    """A ground state in one or two dimensions."""

    beta: float
    mu: float
    energy: float
    kinetic: float
    interaction: float
    width: float
    peak_density: float
    source: str = COLLOCATION


class Round(NamedTuple):
    """A ground state in the sqrt(8) trap, units of the direction across; kinetic and trap energy of all directions."""

    number: int
    mu: float
    energy: float
    kinetic: float
    potential: float
    interaction: float
    x_width: float
    z_width: float
    source: str = OSCILLATOR


class RoundPublished(NamedTuple):
    """Chemical potential and energy per atom as printed (three figures)."""

    number: int
    mu: float
    energy: float
    digits: int
    source: str = DALFOVO


class Critical(NamedTuple):
    """N |a|/a_ho at collapse, a_ho from the geometric mean of the frequencies; lam = omega_z/omega_perp."""

    lam: float
    na: float
    tolerance: float
    source: str


ISOTROPIC_PUBLISHED = (
    Published(3.1371, 1.6774, 4),
    Published(12.5484, 2.0650, 4),
    Published(31.371, 2.5861, 4),
    Published(125.484, 4.0141, 4),
    Published(627.4, 7.2484, 4),
    Published(3137.1, 13.553, 3),
)

ISOTROPIC = (
    Isotropic(0, 1.5, 1.5, 0.75, 0.75, 0.0, 0.179587122, 0.70710678, "closed form of the oscillator's ground state"),
    Isotropic(1, 1.56097150, 1.53089128, 0.72784536, 0.77296570, 0.03008022, 0.167623470, 0.71785128),
    Isotropic(3.1371, 1.67745330, 1.59199489, 0.68917443, 0.81736205, 0.08545841, 0.147653119, 0.73817886),
    Isotropic(10, 1.97379455, 1.75754506, 0.60846066, 0.93283490, 0.21624949, 0.109917585, 0.78859998),
    Isotropic(12.5484, 2.06502088, 1.81085412, 0.58771862, 0.96896875, 0.25416675, 0.101127589, 0.80372829),
    Isotropic(100, 3.71321560, 2.86792041, 0.37734121, 1.64528400, 0.84529519, 0.0346126942, 1.04730893),
    Isotropic(125.484, 4.01411686, 3.07078102, 0.35622071, 1.77122447, 0.94333584, 0.0302123094, 1.08665372),
    Isotropic(1000, 8.67031536, 6.30883486, 0.20256681, 3.74478755, 2.36148049, 8.58163368e-3, 1.58003957),
    Isotropic(10000, 21.44602962, 15.37747177, 0.10303858, 9.20587535, 6.06855785, 2.14109235e-3, 2.47734742),
)

ATTRACTIVE = (
    Attractive(0.1, 1.41547408, 1.45856775, 0.78315096, 0.71851046, -0.04309367, 0.198174461, 0.69210329),
    Attractive(0.3, 1.20500673, 1.36362529, 0.88008585, 0.64215800, -0.15861856, 0.256976494, 0.65429759),
    Attractive(0.55, 0.66225920, 1.19540458, 1.26413401, 0.46441595, -0.53314538, 0.544957115, 0.55642666),
    Attractive(0.57, 0.50474302, 1.17433492, 1.42415733, 0.41976948, -0.66959190, 0.686553093, 0.52900503),
)

#: Known to the digits kept in `tolerance`; an imaginary-time relaxation succeeds below and fails above.
CRITICAL_ISOTROPIC = Critical(
    1.0, 0.574966, 1e-6, "independent calculation: continuation in mu; published as 0.57497 at mu = 0.364"
)
CRITICAL_PUBLISHED = (
    Critical(1.0, 0.575, 5e-4, "Ruprecht et al., PRA 51, 4704 (1995); value from memory"),
    Critical(1.0, 0.57497, 5e-6, "Gammal et al., PRA 64, 055602 (2001); value from memory"),
    Critical(1.0, 0.574, 1e-3, "Roberts et al., PRL 86, 4211 (2001), abstract: predicted value"),
    Critical(6.80 / 17.35, 0.55, 5e-3, "Gammal et al., PRA 64, 055602 (2001), abstract; trap from memory"),
)
CRITICAL_MU = 0.364
#: 2 sqrt(2 pi)/5^(5/4), 17 % too high: a relaxation that still converges here is wrong.
CRITICAL_GAUSSIAN = Critical(1.0, 0.6705, 5e-5, "Perez-Garcia et al., PRL 77, 5320 (1996); value from memory")
#: Roberts et al., PRL 86, 4211 (2001), abstract: value, statistical and systematic uncertainty, Rb-85.
CRITICAL_MEASURED = (0.459, 0.012, 0.054)

#: omega_z/omega_perp and a/a_perp of Dalfovo & Stringari's trap (a = 100 a0, a_perp = 1.222e-4 cm; values from memory).
ROUND_LAM = 8**0.5
ROUND_A = 4.33e-3

ROUND_PUBLISHED = (
    RoundPublished(100, 2.88, 2.66, 2),
    RoundPublished(200, 3.21, 2.86, 2),
    RoundPublished(500, 3.94, 3.30, 2),
    RoundPublished(1000, 4.77, 3.84, 2),
    RoundPublished(2000, 5.93, 4.61, 2),
    RoundPublished(5000, 8.14, 6.12, 2),
    RoundPublished(10000, 10.5, 7.76, 1),
    RoundPublished(15000, 12.2, 8.98, 1),
    RoundPublished(20000, 13.7, 9.98, 1),
)

ROUND = (
    Round(1, 2.420006, 2.417113, 1.204940, 1.209280, 0.002893, 0.708131, 0.420663),
    Round(100, 2.877417, 2.661828, 1.061428, 1.384811, 0.215589, 0.788139, 0.436935),
    Round(500, 3.938603, 3.303232, 0.857403, 1.810459, 0.635370, 0.960346, 0.471220),
    Round(1000, 4.771331, 3.841086, 0.757737, 2.153104, 0.930245, 1.080365, 0.496467),
    Round(5000, 8.143528, 6.124290, 0.538098, 3.566955, 2.019238, 1.471648, 0.591863),
    Round(10000, 10.503915, 7.762920, 0.455217, 4.566709, 2.740995, 1.690963, 0.653329),
    Round(20000, 13.66026, 9.975317, 0.381480, 5.908895, 3.684942, 1.944332, 0.729464),
)

LINE_PUBLISHED = (
    Published(3.1371, 1.5266, 4),
    Published(12.5484, 3.5966, 4),
    Published(31.371, 6.5527, 4),
    Published(62.742, 10.369, 3),
    Published(156.855, 19.070, 3),
    Published(313.71, 30.259, 3),
    Published(627.42, 48.024, 3),
    Published(1254.8, 76.226, 3),
)

LINE = (
    LowDimension(3.1371, 1.52659450, 1.04409765, 0.16017618, 0.48249686, 0.89601854, 0.41726667),
    LowDimension(12.5484, 3.59656106, 2.23300826, 0.09383953, 1.36355280, 1.24548459, 0.28063328),
    LowDimension(62.742, 10.36946331, 6.25697583, 0.04412231, 4.11248747, 2.04956876, 0.16488446),
    LowDimension(313.71, 30.25917917, 18.17097176, 0.01933032, 12.08820741, 3.48236530, 0.09642954),
    LowDimension(627.42, 48.02446970, 28.82535939, 0.01334696, 19.19911031, 4.38472396, 0.07653448),
    LowDimension(1254.8, 76.22642899, 45.74317754, 0.00915018, 30.48325146, 5.52282100, 0.06074526),
    LowDimension(400, 35.57746089, 21.36006970, 0.01699145, 14.21739119, 3.77509922, 0.08892607),
    LowDimension(-1, 0.06274560, 0.28822221, 0.31321857, -0.22547661, 0.63321443, 0.64791351),
    LowDimension(-5, -3.17284326, -0.98005350, 1.15456556, -2.19278975, 0.34108851, 1.30921020),
)

PLANE = (
    LowDimension(10, 2.06375191, 1.59231902, 0.32472663, 0.47143288, 0.89227771, 0.16845226, OSCILLATOR),
    LowDimension(100, 5.75975365, 3.94594419, 0.15916264, 1.81380945, 1.40462525, 0.05669084, OSCILLATOR),
    LowDimension(500, 12.67831930, 8.51184484, 0.08944796, 4.16647446, 2.06298871, 0.02527714, OSCILLATOR),
    LowDimension(1254.8, 20.02860690, 13.39461716, 0.06331883, 6.63398974, 2.58791588, 0.01594163, OSCILLATOR),
)
