"""The figures of a run, in the units of the lab: what a person reads first.

The suffix of a name is its unit; energies are per atom, and divided by Planck's (`_hz`) or Boltzmann's (`_nk`)
constant. A figure that does not apply is None, in the file null, never not-a-number. Widths are rms half-widths,
normalised by the atoms present; `velocity` is that of the centre of mass; `expansion_rate` the rate of change of the
width; `expansion_energy` is m (velocity spread)^2 / k_B of each direction, the centre's motion taken out.
"""

from __future__ import annotations

import json
import math
from collections.abc import Mapping
from dataclasses import asdict, dataclass, field, fields, is_dataclass
from pathlib import Path
from typing import Any, ClassVar, get_args, get_type_hints

import numpy as np

from trapsim.constants import K_B
from trapsim.errors import FileTrouble, Notice
from trapsim.record.series import ColumnSeries, Track, WaveFunction, track_csv

Number = float | None
Triple = tuple[Number, Number, Number]

__all__ = [
    "ColumnSeries", "Effort", "ErrorEstimate", "Ground", "Law", "LegSpace", "MarchEffort", "Moment", "Notice",
    "Numerics", "PictureFigures", "Run", "StageEnd", "Summary", "Track", "WaveFunction", "moment_of", "track_csv",
]  # fmt: skip


@dataclass(frozen=True)
class _Record:
    """Plain values only: arrays become tuples, numpy numbers Python's, and what is not finite becomes None."""

    #: Properties that are written beside the fields.
    derived: ClassVar[tuple[str, ...]] = ()

    def __post_init__(self) -> None:
        for one in fields(self):
            object.__setattr__(self, one.name, _tidy(getattr(self, one.name)))

    def as_dict(self) -> dict[str, Any]:
        """The record as JSON knows it: objects, lists, numbers, words, null."""
        names = [*(one.name for one in fields(self)), *self.derived]
        return {name: _plain(getattr(self, name)) for name in names}


@dataclass(frozen=True)
class Law(_Record):
    """What the instant model says for the same moment; `model` names it."""

    model: str
    width_um: Triple
    expansion_rate_mm_per_s: Triple


@dataclass(frozen=True)
class Moment(_Record):
    """The cloud at one moment; `flight_ms` counts from the start of the last release."""

    derived = ("aspect_ratio",)

    time_ms: float
    flight_ms: Number
    atoms: float
    width_um: Triple
    expansion_rate_mm_per_s: Triple
    centre_um: Triple
    velocity_mm_per_s: Triple
    velocity_spread_mm_per_s: Triple
    expansion_energy_nk: Triple
    internal_kinetic_nk: Number
    centre_kinetic_nk: Number
    trap_nk: Number
    interaction_nk: Number
    orders: Mapping[str, Mapping[str, float]] | None = None
    law: Law | None = None

    @property
    def aspect_ratio(self) -> dict[str, Number]:
        """Width over width: "xy" is the width along x over the width along y."""
        wide = dict(zip("xyz", self.width_um, strict=True))
        return {a + b: wide[a] / wide[b] if wide[a] is not None and wide[b] else None for a, b in ("xy", "xz", "yz")}


@dataclass(frozen=True)
class Ground(_Record):
    """The cloud at rest in its trap; `origin_um` is the lab position that all reported positions count from."""

    origin_um: Triple
    chemical_potential_hz: Number
    energy_hz: Number
    kinetic_hz: Number
    trap_hz: Number
    interaction_hz: Number
    width_um: Triple
    thomas_fermi_radius_um: Triple
    peak_density_per_um3: Number
    healing_length_um: Number
    gas_parameter: Number
    residual: Number
    virial: Number


@dataclass(frozen=True)
class StageEnd(_Record):
    """One step of the sequence and the cloud at its end; `end` is None when the run stopped earlier."""

    name: str
    kind: str
    start_ms: float
    duration_ms: float
    end: Moment | None


@dataclass(frozen=True)
class ErrorEstimate(_Record):
    """How wrong the numerics may be, from the step estimates and the guards: one sigma, not a bound."""
    width_relative: Number = None
    rate_relative: Number = None
    centre_um: Number = None


@dataclass(frozen=True)
class LegSpace(_Record):
    """The grid of one stretch of the march: axis kind and number of points per lab direction, and why so."""

    name: str
    start_ms: float
    stop_ms: float
    axes: tuple[str, str, str]
    points: tuple[int, int, int]
    reason: str = ""


@dataclass(frozen=True)
class Effort(_Record):
    """What finding the ground state cost: transform pairs and seconds."""

    pairs: Number
    seconds: Number


@dataclass(frozen=True)
class MarchEffort(_Record):
    """What the march cost: steps, the transform pairs of the steps and of looking at the cloud, seconds of both."""

    steps: int
    pairs: Number
    observing_pairs: Number
    seconds: Number


@dataclass(frozen=True)
class PictureFigures(_Record):
    """What a picture shows; widths and centre are to the right and upwards, at the atoms, and null where none is."""

    name: str
    camera: str
    time_ms: float
    flight_ms: Number
    atoms: float
    peak_optical_density: float
    width_um: tuple[Number, Number]
    centre_um: tuple[Number, Number]


@dataclass(frozen=True)
class Numerics(_Record):
    """How it was computed, what that cost and how far it can be trusted; axes and points per lab direction."""

    axes: tuple[str, str, str]
    points: tuple[int, int, int]
    legs: tuple[LegSpace, ...]
    ground: Effort
    march: MarchEffort | None
    seconds: Number
    norm_drift: Number = None
    energy_drift: Number = None
    continuity: Number = None
    error: ErrorEstimate = field(default_factory=ErrorEstimate)


@dataclass(frozen=True)
class Summary(_Record):
    """All figures of a run; `end` is None for a plan without a sequence."""

    title: str
    status: str
    key: str
    march_key: str
    version: str
    ground: Ground
    stages: tuple[StageEnd, ...]
    end: Moment | None
    numerics: Numerics
    pictures: tuple[PictureFigures, ...] = ()
    warnings: tuple[Notice, ...] = ()

    def as_json(self) -> str:
        """The summary as the text of summary.json, numbers at full precision."""
        return json.dumps(self.as_dict(), indent=2, ensure_ascii=False, allow_nan=False) + "\n"

    @classmethod
    def from_dict(cls, raw: Mapping[str, Any], *, place: str = "summary.json") -> Summary:
        """The summary that `as_dict` wrote; entries of a later version are passed over.

        Raises
        ------
        FileTrouble
            When entries are missing or are not what they should be.
        """
        try:
            return _built(cls, raw)
        except (TypeError, KeyError, AttributeError, ValueError) as error:
            raise FileTrouble.at(
                place, str(error), "a summary written by trapsim is needed here", "run the plan again with --force"
            ) from error


@dataclass(frozen=True)
class Run:
    """A run as a program sees it: what was asked, the figures, and the arrays behind them.

    Parameters
    ----------
    plan : object
        The plan that was run.
    summary : Summary
    track : Track or None
    columns : mapping of str to ColumnSeries
        By line of sight, "x", "y", "z".
    pictures : mapping
        What the cameras recorded, by picture name.
    final : WaveFunction or None
        The last wave function.
    folder : Path or None
        Where it is kept; None when only in memory.
    momenta : tuple of album.Seen
        Momentum distributions along the lattices at the ends of the stages.
    flow : mapping of str to flow.FlowPlane
        By line of sight, at the end.
    """

    plan: Any
    summary: Summary
    track: Track | None = None
    columns: Mapping[str, ColumnSeries] = field(default_factory=dict)
    pictures: Mapping[str, Any] = field(default_factory=dict)
    final: WaveFunction | None = None
    folder: Path | None = None
    momenta: tuple[Any, ...] = ()
    flow: Mapping[str, Any] = field(default_factory=dict)


def moment_of(
    track: Track,
    index: int,
    *,
    mass: float,
    law_model: str = "scaling law",
    orders: Mapping[str, Mapping[str, float]] | None = None,
) -> Moment:
    """The cloud at one sample of the track, in lab units; a direction without a width is uniform and has no size.

    Parameters
    ----------
    track : Track
        Holds at least width, expansion_rate, centre, velocity, velocity_spread, kinetic and atoms.
    index : int
        Which sample; -1 is the last.
    mass : float, kg
    law_model : str
        What the law beside it is called, where the track has one.
    orders : mapping, optional
        Populations of diffraction orders by lattice.
    """

    uniform = track["width"][index] == 0

    def lab(name: str) -> Any:
        if name not in track:
            return None
        one = track.series[name]
        here = one.values[index] * one.factor
        return np.where(uniform, np.nan, here) if "width" in name or "rate" in name else here

    spread = track["velocity_spread"][index]
    kinetic = lab("kinetic")
    law = None
    if "law_width" in track and np.isfinite(track["law_width"][index]).any():
        law = Law(law_model, lab("law_width"), lab("law_expansion_rate"))
    return Moment(
        time_ms=track.time[index] * 1e3,
        flight_ms=lab("flight_time"),
        atoms=lab("atoms"),
        width_um=lab("width"),
        expansion_rate_mm_per_s=lab("expansion_rate"),
        centre_um=lab("centre"),
        velocity_mm_per_s=lab("velocity"),
        velocity_spread_mm_per_s=lab("velocity_spread"),
        expansion_energy_nk=mass * spread**2 / K_B * 1e9,
        internal_kinetic_nk=np.nansum(kinetic) if np.isfinite(kinetic).any() else None,
        centre_kinetic_nk=lab("centre_kinetic"),
        trap_nk=lab("trap"),
        interaction_nk=lab("interaction"),
        orders=orders,
        law=law,
    )


def _tidy(value: Any) -> Any:
    if isinstance(value, np.ndarray | np.generic):
        value = value.tolist()
    if isinstance(value, float) and not math.isfinite(value):
        return None
    if isinstance(value, list | tuple):
        return tuple(_tidy(one) for one in value)
    return value


def _plain(value: Any) -> Any:
    if isinstance(value, _Record):
        return value.as_dict()
    if is_dataclass(value) and not isinstance(value, type):
        return asdict(value)
    if isinstance(value, tuple):
        return [_plain(one) for one in value]
    return value


def _built(cls: type, raw: Mapping[str, Any]) -> Any:
    hints = get_type_hints(cls)
    given = {one.name: _read(hints[one.name], raw[one.name]) for one in fields(cls) if one.name in raw}
    return cls(**given)


def _read(hint: Any, raw: Any) -> Any:
    if isinstance(raw, list):
        return tuple(_read(hint, one) for one in raw)
    inner = _record_in(hint)
    return _built(inner, raw) if inner and raw is not None else raw


def _record_in(hint: Any) -> type | None:
    if is_dataclass(hint):
        return hint
    return next((found for one in get_args(hint) if (found := _record_in(one))), None)
