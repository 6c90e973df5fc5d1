"""The atoms: which isotope, how many, how strongly they repel each other."""

from __future__ import annotations

import dataclasses
import difflib
import re
from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction
from types import MappingProxyType

from trapsim.constants import ATOMIC_MASS, BOHR_RADIUS
from trapsim.errors import Complaint
from trapsim.fields import entry

_AME = "mass: AME 2020, Wang et al., Chin. Phys. C 45, 030003 (2021), value from memory"
_TIECKE = "mass: Tiecke, Properties of potassium (2011)"
_LINE = "line: common practice, value from memory"


@dataclass(frozen=True)
class Species:
    """An isotope that people condense.

    Parameters
    ----------
    name : str
        Element and mass number, "Rb-87".
    mass : float
        kg, of the neutral atom.
    scattering_length : float or None
        m, of the state that is usually condensed; None where it hangs on the magnetic field so
        much that a default would mislead.
    probe_wavelength : float or None
        m, in vacuum, of the line that is usually used for absorption pictures.
    source : str
        Where the numbers come from.
    """

    name: str
    mass: float
    scattering_length: float | None
    probe_wavelength: float | None
    source: str


def _row(name: str, mass_u: float, length_a0: float | None, line_nm: float, *source: str) -> Species:
    length = None if length_a0 is None else _times(length_a0, BOHR_RADIUS)
    return Species(name, _times(mass_u, ATOMIC_MASS), length, _times(line_nm, 1e-9), "; ".join((*source, _LINE)))


def _times(number: float, unit: float) -> float:
    """The product as text with a unit would give it: the exact decimals, rounded once."""
    return float(Fraction(repr(number)) * Fraction(repr(unit)))


_TABLE = (
    _row("Rb-87", 86.90918053, 100.4, 780.241, _AME,
         "100.4(1) a0 for F=1, mF=-1: van Kempen et al., PRL 88, 093201 (2002), value from memory"),
    _row("Rb-85", 84.91178974, None, 780.241, _AME, "scattering length strongly field dependent"),
    _row("Na-23", 22.98976928, 54.54, 589.158, _AME,
         "54.54(20) a0 for F=1, mF=1: Knoop et al., PRA 83, 042704 (2011), value from memory; "
         "F=1, mF=-1 has 55.4(1.2) a0: van Abeelen and Verhaar, PRA 59, 578 (1999)"),
    _row("K-39", 38.96370668, None, 766.701, _TIECKE, "scattering length strongly field dependent"),
    _row("K-40", 39.96399848, None, 766.701, _TIECKE, "a fermion: give the scattering length you mean"),
    _row("K-41", 40.96182576, 60.5, 766.701, _TIECKE,
         "60.5 a0 triplet: Falke et al., PRA 78, 012503 (2008), value from memory"),
    _row("Li-7", 7.0160034, None, 670.976, _AME, "scattering length strongly field dependent"),
    _row("Cs-133", 132.90545196, None, 852.347, _AME, "scattering length strongly field dependent"),
    _row("Sr-84", 83.913419, 123.0, 460.862, _AME,
         "about 123 a0: Stein et al., Eur. Phys. J. D 57, 171 (2010), value from memory"),
    _row("Sr-88", 87.905612, -1.4, 460.862, _AME,
         "-1.4(6) a0: Martinez de Escobar et al., PRA 78, 062708 (2008)"),
    _row("Cr-52", 51.9405047, None, 425.553, _AME, "published values differ (96 to 112 a0), and dipoles matter"),
    _row("Er-166", 165.930301, None, 400.912, _AME, "scattering length strongly field dependent"),
    _row("Er-168", 167.932378, None, 400.912, _AME, "scattering length strongly field dependent"),
    _row("Yb-174", 173.938868, 104.9, 398.911, _AME, "5.55(8) nm = 104.9 a0: Kitagawa et al., PRA 77, 012719 (2008)"),
    _row("Dy-162", 161.926805, None, 421.291, _AME, "scattering length field dependent, and dipoles matter"),
    _row("Dy-164", 163.929181, None, 421.291, _AME, "scattering length field dependent, and dipoles matter"),
)

SPECIES: Mapping[str, Species] = MappingProxyType({species.name: species for species in _TABLE})


def find(name: str) -> Species | None:
    """The species called "Rb-87", "Rb87" or "87Rb"; None when the table does not know it."""
    match = re.fullmatch(r"(?P<e1>[A-Za-z]+)[ -]?(?P<n1>\d+)|(?P<n2>\d+)[ -]?(?P<e2>[A-Za-z]+)", name.strip())
    if not match:
        return None
    element, number = match["e1"] or match["e2"], match["n1"] or match["n2"]
    return SPECIES.get(f"{element.capitalize()}-{number}")


def nearest(name: str) -> str:
    """The known species whose name looks most like `name`, or an empty text."""
    element = "".join(letter for letter in name if letter.isalpha()).casefold()
    same = [known for known in SPECIES if known.partition("-")[0].casefold() == element]
    if same:
        return same[0]
    close = difflib.get_close_matches(name.strip().casefold(), [known.casefold() for known in SPECIES], 1, 0.5)
    return next((known for known in SPECIES if close and known.casefold() == close[0]), "")


@dataclass(frozen=True, kw_only=True)
class Atoms:
    """The cloud: which atoms, how many, how they scatter.

    Once the plan is read, mass and scattering length are filled in from the species.
    """

    species: str | None = entry(
        "text", "the isotope, such as \"Rb-87\"; gives mass and scattering length", default=None
    )
    mass: float | None = entry("mass", "mass of one atom; by default that of the species", default=None, above=0.0)
    number: float = entry(
        "number", "number of atoms in the condensate", low=1.0, way_out="write a number such as 1e5"
    )
    scattering_length: float | None = entry(
        "length", "s-wave scattering length; by default that of the species; \"0 a0\" switches the mean field off",
        default=None, ramp=True,
    )
    temperature: float = entry(
        "temperature", "temperature of the thermal share, for the validity card only", default=0.0, low=0.0
    )

    def settled(self, place: str = "atoms") -> tuple[Atoms, list[Complaint]]:
        """The atoms with what the species knows filled in, and a complaint for all that stays unknown."""
        known = find(self.species) if self.species is not None else None
        if self.species is not None and known is None:
            close = nearest(self.species)
            hint = f'did you mean "{close}"? ' if close else ""
            rule = "the table of species does not know this isotope"
            way_out = f"{hint}known: {', '.join(SPECIES)}; or give mass and scattering_length instead"
            return self, [Complaint(f"{place}.species", f'"{self.species}"', rule, way_out)]
        mass = self.mass if self.mass is not None else known and known.mass
        length = self.scattering_length if self.scattering_length is not None else known and known.scattering_length
        complaints = []
        if mass is None:
            way_out = 'write species = "Rb-87", or mass = "86.909 u" and scattering_length'
            complaints.append(Complaint(place, "", "either a species or a mass is needed", way_out))
        elif known and abs(mass / known.mass - 1) > 1e-3:
            got, way_out = f"{mass / ATOMIC_MASS:.6g} u", "leave the mass out, or leave the species out"
            complaints.append(Complaint(f"{place}.mass", got, f"this is not the mass of {known.name}", way_out))
        if length is None and (known or mass is not None):
            why = f"; {known.name}: {known.source.split('; ')[1]}" if known else ""
            way_out = 'write scattering_length = "100 a0" with your value; "0 a0" switches the mean field off'
            complaints.append(
                Complaint(f"{place}.scattering_length", "", f"this is needed: no default is known{why}", way_out)
            )
        if complaints:
            return self, complaints
        name = known.name if known else None
        return dataclasses.replace(self, species=name, mass=mass, scattering_length=length), []
