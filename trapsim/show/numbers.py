"""Numbers as a person writes them: four significant figures, never a power of ten where one can do without."""

from __future__ import annotations

import math
from decimal import Decimal

MISSING = "-"


def four(value: float | None) -> str:
    """Four significant figures in plain digits: "0.01234", "25.06", "137200"; a dash where there is no figure."""
    return figures(value, 4)


def figures(value: float | None, digits: int) -> str:
    """So many significant figures in plain digits; below 0.0001, and from ten million on, a power of ten."""
    if value is None or not math.isfinite(value):
        return MISSING
    if value == 0:
        return "0"
    rounded = Decimal(f"{value:.{digits - 1}e}")
    power = rounded.adjusted()
    if -5 < power < 7:
        return f"{rounded.quantize(Decimal(1).scaleb(power - digits + 1)):f}" if power < digits else f"{rounded:.0f}"
    mantissa = rounded.scaleb(-power).normalize()
    return f"{mantissa:f}e{power}"


def brief(value: float | None) -> str:
    """A setting, such as a time: up to four significant figures without needless zeros."""
    text = four(value)
    return text.rstrip("0").rstrip(".") if "." in text and "e" not in text else text


def with_error(value: float | None, error: float | None) -> str:
    """A number and its error, "25.06 +- 0.01"; the number alone where the error is unknown.

    The number has the digits its error deserves; an error beyond its ninth figure is not worth writing.
    """
    if value is None or error is None or not math.isfinite(value) or not (math.isfinite(error) and error > 0):
        return four(value)
    if abs(value) < error / 10:
        return f"0 +- {Decimal(f'{error:.0e}'):f}"
    size = math.floor(math.log10(abs(value))) if value else math.floor(math.log10(error))
    digits = 1 + size - math.floor(math.log10(error))
    if digits > 9:
        return four(value)
    return f"{figures(value, max(digits, 4))} +- {Decimal(f'{error:.0e}'):f}"


def percent(part: float) -> str:
    """A relative gap with its sign: "+0.62 %"; "0 %" below a hundredth of a per cent."""
    if round(part * 1e4) == 0:
        return "0 %"
    return f"{part * 100:+.0f} %" if abs(part) >= 0.0995 else f"{round(part * 100, 2):+.2g} %"


def percentage(share: float) -> str:
    """A share in per cent, "22.9 %", "0.24 %"."""
    value = 100 * share
    return f"{value:.1f} %" if value >= 0.995 else f"{value:.2f} %"


def drawn(value: float | None, digits: int = 4) -> str:
    """So many significant figures for a drawing: plain digits whatever the size, and the minus sign of print."""
    text = figures(value, digits)
    return signed(f"{Decimal(text):f}" if "e" in text else text)


def signed(text: str) -> str:
    """The same number with the minus sign of print."""
    return text.replace("-", "\u2212") if text != MISSING else text


def nice_length(about: float) -> float:
    """The 1, 2 or 5 times a power of ten that is next below a length, for a scale bar."""
    ten = 10.0 ** math.floor(math.log10(about))
    return max(step * ten for step in (1.0, 2.0, 5.0) if step * ten <= about * (1 + 1e-9))
