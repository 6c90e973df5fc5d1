"""Lab text to SI numbers and back: "150(2) Hz" is 2 pi 150 rad/s with a 1-sigma of 2 pi 2 rad/s.

The number is read here, exactly, as a fraction; only the text of the unit is shown to pint, in a
registry of our own that knows a turn as a dimension (so Hz and rad/s cannot be confused). The exact
product is rounded once, so "40 um", "0.04 mm" and "4e-5 m" are the same float. This is the only
door to pint, and it opens when the first unit is read.
"""

from __future__ import annotations

import difflib
import functools
import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from decimal import Decimal
from fractions import Fraction
from types import MappingProxyType
from typing import Any, NamedTuple

from trapsim.constants import ATOMIC_MASS, BOHR_RADIUS, K_B, POLARISABILITY, H

NO_UNITS: Mapping[str, float] = MappingProxyType({})

_TWO_PI = "6.283185307179586476925286766559005768394338798750211641949889"
_DEFINITIONS = (
    "pico- = 1e-12 = p-", "nano- = 1e-9 = n-", "micro- = 1e-6 = u- = µ- = μ-", "milli- = 1e-3 = m-",
    "centi- = 1e-2 = c-", "kilo- = 1e3 = k-", "mega- = 1e6 = M-", "giga- = 1e9 = G-",
    "kibi- = 1024 = Ki-", "mebi- = 1048576 = Mi-", "gibi- = 1073741824 = Gi-",
    "metre = [length] = m", "second = [time] = s", "kilogram = [mass] = kg", "gram = 1e-3 kg = g",
    "kelvin = [temperature] = K", "ampere = [current] = A", "radian = [turn] = rad", "byte = [memory] = B",
    f"turn = {_TWO_PI} rad = turn", "hertz = turn/s = Hz", "degree = turn/360 = deg = °",
    "minute = 60 s = min", "newton = kg*m/s**2 = N", "joule = N*m = J", "watt = J/s = W",
    "tesla = N/A/m = T", "gauss = 1e-4 T = G", "percent = 0.01 = %",
    f"dalton = {ATOMIC_MASS!r} kg = u", f"bohr = {BOHR_RADIUS!r} m = a0",
    f"polarisability_au = {POLARISABILITY!r} A**2*s**4/kg = au",
)


class QuantityError(ValueError):
    """A text that is not a number with a suitable unit; says the rule and the way out."""

    def __init__(self, rule: str, way_out: str = "") -> None:
        super().__init__(rule, way_out)
        self.rule = rule
        self.way_out = way_out


class Quantity(NamedTuple):
    """A number in SI units and its 1-sigma uncertainty (0 when none was given)."""

    value: float
    sigma: float


@dataclass(frozen=True)
class Kind:
    """What sort of quantity an entry is.

    Parameters
    ----------
    si : str
        The unit of the float inside; it also fixes the dimension. Empty for plain numbers.
    units : tuple of str
        Units people use, named in messages; the first one is written for zero.
    ladder : tuple of str
        Units that numbers for humans climb, ascending.
    also : tuple of (str, Fraction)
        SI units of other dimensions that are understood, and what one of each is in `si`.
    """

    si: str
    units: tuple[str, ...] = ()
    ladder: tuple[str, ...] = ()
    also: tuple[tuple[str, Fraction], ...] = ()

    @property
    def plain(self) -> bool:
        """Whether a bare number is a quantity of this kind."""
        return not self.si

    @property
    def named(self) -> str:
        """The units to offer in a message."""
        return ", ".join(self.units)


_ENERGIES = (("K", Fraction(repr(K_B))), ("turn/s", Fraction(repr(H))))

KINDS: Mapping[str, Kind] = MappingProxyType({
    "number": Kind(""),
    "length": Kind("m", ("um", "nm", "mm", "cm", "m", "a0"), ("a0", "nm", "um", "mm", "m")),
    "time": Kind("s", ("ms", "us", "ns", "s"), ("ns", "us", "ms", "s")),
    "frequency": Kind("rad/s", ("Hz", "kHz", "MHz", "rad/s"), ("mHz", "Hz", "kHz", "MHz")),
    "velocity": Kind("m/s", ("mm/s", "um/s", "um/ms", "cm/s", "m/s"), ("um/s", "mm/s", "m/s")),
    "acceleration": Kind("m/s^2", ("m/s^2", "cm/s^2", "mm/s^2", "um/ms^2"), ("um/s^2", "mm/s^2", "m/s^2")),
    "mass": Kind("kg", ("u", "kg", "g"), ("u", "kg")),
    "energy": Kind("J", ("nK", "uK", "Hz", "kHz", "J"), ("pK", "nK", "uK", "mK", "K"), _ENERGIES),
    "temperature": Kind("K", ("nK", "uK", "mK", "pK", "K"), ("pK", "nK", "uK", "mK", "K")),
    "angle": Kind("rad", ("rad", "mrad", "deg"), ("urad", "mrad", "rad")),
    "power": Kind("W", ("mW", "W", "uW"), ("uW", "mW", "W")),
    "polarisability": Kind("A^2*s^4/kg", ("au",), ("au",)),
    "memory": Kind("B", ("GB", "MB", "GiB", "MiB"), ("B", "kB", "MB", "GB")),
})

_DIGITS = r"(?:\d+(?:_\d+)*(?:\.\d*)?|\.\d+)"
_NUMBER = re.compile(
    rf"(?P<mantissa>[+-]?{_DIGITS})(?:\((?P<last>\d+(?:\.\d+)?)\))?(?:[eE](?P<exponent>[+-]?\d+))?(?![\d.,(_])"
)
_PLUS_MINUS = re.compile(r"\s*(?:\+/-|\+-|±)\s*")
_POWER_OF_NAME = r"(?:[A-Za-zµμ°]+0?|%)(?:(?:\^|\*\*)-?\d|[²³])?"
_UNIT = re.compile(rf"(?:1\s*/\s*)?{_POWER_OF_NAME}(?:(?:\s*[*/·⋅]\s*|\s+){_POWER_OF_NAME})*")
_UNIT_SPELLINGS = str.maketrans({"²": "^2", "³": "^3", "·": "*", "⋅": "*"})


@functools.cache
def _registry() -> Any:
    """Our own units, built when the first unit is read."""
    import pint

    registry = pint.UnitRegistry(None, non_int_type=Fraction, cache_folder=None)
    for line in _DEFINITIONS:
        registry.define(line)
    return registry


@functools.cache
def _unit(text: str) -> tuple[Fraction, frozenset[tuple[str, Fraction]]] | None:
    """Exact size of a unit in base units and its dimension; None when nobody knows the unit."""
    if not text:
        return Fraction(1), frozenset()
    if not _UNIT.fullmatch(text):
        return None
    registry = _registry()
    try:
        unit = registry.parse_units(text.translate(_UNIT_SPELLINGS))
        size, _ = registry.get_base_units(unit)
        dimension = frozenset(registry.get_dimensionality(unit).items())
    except Exception:  # whatever pint makes of a stranger's text, it is not a unit of ours
        return None
    return Fraction(size), dimension


def _size(unit: str, kind: Kind, context: Mapping[str, float]) -> Fraction:
    """What one `unit` is in the SI unit of `kind`, exactly."""
    if unit in context:
        return Fraction(context[unit])
    found = _unit(unit)
    if found is None:
        raise QuantityError(f'"{unit}" is not a unit', _nearest_unit(unit, kind, context))
    for si, size in ((kind.si, Fraction(1)), *kind.also):
        reference, dimension = _unit(si)
        if found[1] == dimension:
            return found[0] / reference * size
    if kind.plain:
        raise QuantityError(f'a plain number, without the unit "{unit}"', "leave the unit out")
    if not unit:
        raise QuantityError("a number with its unit", f"write the unit: {_offer(kind, context)}")
    if kind is KINDS["frequency"] and found[1] == _unit("1/s")[1]:
        raise QuantityError(
            f'"{unit}" does not say whether cycles or radians are counted', f"write one of {kind.named}"
        )
    raise QuantityError(f'"{unit}" is the wrong sort of unit here', f"use one of {_offer(kind, context)}")


def _offer(kind: Kind, context: Mapping[str, float]) -> str:
    return ", ".join([*kind.units, *context])


def _nearest_unit(unit: str, kind: Kind, context: Mapping[str, float]) -> str:
    offer = [*kind.units, *context]
    for known in offer:
        if known.casefold() == unit.casefold():
            return f'did you mean "{known}"? use one of {", ".join(offer)}'
    near = difflib.get_close_matches(unit, offer, 1, 0.5)
    hint = f'did you mean "{near[0]}"? ' if near else ""
    return hint + (f"use one of {', '.join(offer)}" if offer else "leave the unit out")


def _number(match: re.Match[str]) -> tuple[Fraction, Fraction]:
    """The exact number of a text like 1.0(1)e5 and its uncertainty."""
    mantissa, last = match["mantissa"].replace("_", ""), match["last"]
    exponent = int(match["exponent"] or 0)
    if abs(exponent) > 400 or len(mantissa) > 100 or len(last or "") > 100:
        raise QuantityError("a number of ordinary size", "write it with fewer digits")
    scale = Fraction(10) ** exponent
    decimals = len(mantissa.partition(".")[2])
    sigma = Fraction(0)
    if last:
        sigma = Fraction(Decimal(last)) * (1 if "." in last else Fraction(1, 10**decimals))
    return Fraction(Decimal(mantissa)) * scale, sigma * scale


def _split(text: str) -> tuple[re.Match[str], str]:
    """A number and what follows it."""
    match = _NUMBER.match(text)
    if not match:
        comma = re.match(r"[+-]?\d+,\d", text)
        way_out = "write a decimal point, not a comma" if comma else 'write it like "20 Hz", "150(2) Hz" or "1.0e5"'
        raise QuantityError("a finite number, then its unit", way_out)
    return match, text[match.end():].strip()


def parse(text: object, kind: str, context: Mapping[str, float] = NO_UNITS) -> Quantity:
    """Read a number with its unit, and its 1-sigma uncertainty if one is given.

    Parameters
    ----------
    text : str, int or float
        "150(2) Hz", "1.0(1)e5", "20 +/- 0.5 Hz", "20 Hz ± 2 %". A bare number is a quantity only
        when the kind has no unit.
    kind : str
        A name in `KINDS`.
    context : mapping of str to float, optional
        Units that mean something only here, and what one of them is in the SI unit of the kind.

    Returns
    -------
    Quantity
        Value and sigma in the SI unit of the kind (rad/s for frequencies).

    Raises
    ------
    QuantityError
        With the rule that was broken and the way out.
    """
    sort = KINDS[kind]
    if isinstance(text, bool) or not isinstance(text, str | int | float):
        example = "1.0e5" if sort.plain else f'"20 {sort.units[0]}"'
        raise QuantityError("a number" + ("" if sort.plain else " with its unit, in quotes"), f"such as {example}")
    if not isinstance(text, str):
        return _bare(text, sort, context)
    parts = _PLUS_MINUS.split(text.strip().replace("−", "-"))
    if len(parts) > 2:
        raise QuantityError("one uncertainty at most", 'write it like "20 +/- 0.5 Hz"')
    if len(parts) == 2 and parts[0].startswith("(") and ")" in parts[1]:
        parts = [parts[0][1:].strip(), parts[1].replace(")", "", 1)]
    (value, sigma), unit = _part(parts[0])
    if len(parts) == 2:
        (spread, _), spread_unit = _part(parts[1])
        unit = unit or (spread_unit if spread_unit != "%" else "")
        size = _size(unit, sort, context)
        spread *= abs(value) * size / 100 if spread_unit == "%" else _size(spread_unit or unit, sort, context)
        return Quantity(_round(value * size), abs(_round(spread)))
    size = _size(unit, sort, context)
    return Quantity(_round(value * size), _round(sigma * abs(size)))


def _part(text: str) -> tuple[tuple[Fraction, Fraction], str]:
    match, unit = _split(text)
    return _number(match), unit


def _bare(number: float, kind: Kind, context: Mapping[str, float]) -> Quantity:
    if isinstance(number, float) and not math.isfinite(number):
        raise QuantityError("a finite number", "write a number")
    if not kind.plain:
        raise QuantityError(
            "a number with its unit, in quotes", f'write "{number} {kind.units[0]}"; units: {_offer(kind, context)}'
        )
    return Quantity(_round(Fraction(number)), 0.0)


def _round(exact: Fraction) -> float:
    try:
        return float(exact)
    except OverflowError:
        raise QuantityError("a number of ordinary size", "check the exponent and the unit") from None


def in_unit(value: float, unit: str, kind: str | None = None) -> float:
    """What an SI value is in `unit`; say the kind when the unit is borrowed (an energy in nK or Hz)."""
    if kind is not None:
        return float(Fraction(value) / _size(unit, KINDS[kind], NO_UNITS))
    found = _unit(unit)
    if found is None:
        raise QuantityError(f'"{unit}" is not a unit')
    return float(Fraction(value) / found[0])


def human(value: float, kind: str, *, sigma: float = 0.0, figures: int = 4) -> str:
    """An SI value as a person would write it: "31.2 um", "20 Hz", or "150(2) Hz" with its sigma.

    It has at most `figures` significant figures, in the unit that leaves one to three digits
    before the point where there is one.
    """
    sort = KINDS[kind]
    if not math.isfinite(value):
        return str(value)
    unit = sort.units[0] if sort.units else ""
    for step in sort.ladder if value else ():
        if step == sort.ladder[0] or abs(in_unit(value, step, kind)) >= 0.99995:
            unit = step
    shown = in_unit(value, unit, kind)
    number = _with_sigma(shown, in_unit(sigma, unit, kind)) if sigma > 0 else _figures(shown, figures)
    return f"{number} {unit}".rstrip()


def _figures(value: float, figures: int) -> str:
    """Some significant figures, without needless zeros."""
    mantissa, _, exponent = f"{value:.{figures - 1}e}".partition("e")
    power = int(exponent)
    if value == 0:
        return "0"
    if -4 <= power < 5:
        return f"{Decimal(f'{mantissa}e{power}').normalize():f}"
    return f"{Decimal(mantissa).normalize():f}e{power}"


def _with_sigma(value: float, sigma: float) -> str:
    """A number whose last digit's uncertainty stands in brackets."""
    power = math.floor(math.log10(sigma))
    digit = round(sigma / 10.0**power)
    if digit == 10:
        digit, power = 1, power + 1
    if power > 0:
        top = max(power, math.floor(math.log10(abs(value)))) if value else power
        return f"{value / 10.0**top:.{top - power}f}({digit})e{top}"
    return f"{value:.{-power}f}({digit})"
