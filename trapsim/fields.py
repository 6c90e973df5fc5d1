"""How a plan class describes its own entries.

Every entry of the plan is one field of a frozen dataclass, and its unit kind, meaning, default and
range are written once, here, as the field's metadata. The reader, the reference printed by
`trapsim keys`, the JSON schema and the attributes in result files all walk these entries.
"""

from __future__ import annotations

import dataclasses
from dataclasses import dataclass
from typing import Any

REQUIRED = dataclasses.MISSING
Triple = tuple[float, float, float]
ORIGIN: Triple = (0.0, 0.0, 0.0)


@dataclass(frozen=True)
class Entry:
    """What a plan entry means and what it accepts.

    Parameters
    ----------
    kind : str
        A unit kind of `quantities.KINDS` ("length", "frequency", ...), or one of "text", "flag",
        "whole" (an integer), "choice", "table" (a table with entries of its own), "changes" (a
        table of new values for other entries, by their path), "target" (written like the entry
        that is changed).
    about : str
        What a physicist would say it is.
    count : int or None
        Number of values: 1, 3 for one per direction x, y, z, or None for a list of any length.
    low, high : float, optional
        Inclusive limits in SI units.
    above : float, optional
        Exclusive lower limit in SI units.
    choices : tuple of str
        The words a "choice" accepts.
    words : tuple of str
        Words accepted in place of the number, such as "held".
    ramp : bool
        Whether a stage may change it.
    each : tuple of str
        Words accepted in place of any one of several values, and read as 0: "auto".
    of : type or None
        The class that describes a "table", or the long form of one of the "changes".
    way_out : str
        What to do about a value out of range, when there is more to say than the limit.
    example : str
        A value as it would be written, for messages: one of several, or all of them in brackets.
    """

    kind: str
    about: str
    count: int | None = 1
    low: float | None = None
    high: float | None = None
    above: float | None = None
    choices: tuple[str, ...] = ()
    words: tuple[str, ...] = ()
    ramp: bool = False
    each: tuple[str, ...] = ()
    of: type | None = None
    way_out: str = ""
    example: str = ""


def entry(kind: str, about: str, *, default: Any = REQUIRED, **limits: Any) -> Any:
    """A dataclass field that carries an `Entry`; `limits` are the remaining fields of `Entry`."""
    return dataclasses.field(default=default, metadata={"entry": Entry(kind, about, **limits)})


def entries(cls: type) -> dict[str, Entry]:
    """The plan entries of a class by name, in the order they are written."""
    return {f.name: f.metadata["entry"] for f in dataclasses.fields(cls) if "entry" in f.metadata}
