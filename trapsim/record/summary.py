"""The figures of a run, in the units of the lab: what a person reads first.

The suffix of a name is its unit; energies are per atom, and divided by Planck's (`_hz`) or Boltzmann's (`_nk`)
constant. A figure that does not apply is None, in the file null, never not-a-number. Widths are rms half-widths,
normalised by the atoms present; `velocity` is that of the centre of mass; `expansion_rate` the rate of change of the
width; `expansion_energy` is m (velocity spread)^2 / k_B of each direction, the centre's motion taken out.
"""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import numpy as np

from trapsim.constants import K_B
from trapsim.errors import FileTrouble, Notice
from trapsim.record.numerics import (
    Certificate,
    Difference,
    Effort,
    ErrorEstimate,
    LegSpace,
    MarchEffort,
    Numerics,
    Overestimate,
    SpaceFigures,
)
from trapsim.record.plain import Number, Record, Triple, built
from trapsim.record.series import ColumnSeries, Track, WaveFunction, track_csv

__all__ = [
    "Certificate", "ColumnSeries", "Difference", "Effort", "ErrorEstimate", "Ground", "Law", "LegSpace", "MarchEffort",
    "Moment", "Notice", "Numerics", "Overestimate", "PictureFigures", "Run", "SpaceFigures", "StageEnd", "Summary",
    "Track", "WaveFunction", "moment_of", "track_csv",
]  # fmt: skip


@dataclass(frozen=True)
class Law(Record):
    """What the instant model says for the same moment; `model` names it."""

    model: str
    width_um: Triple
    expansion_rate_mm_per_s: Triple


@dataclass(frozen=True)
class Moment(Record):
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
class Ground(Record):
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
class StageEnd(Record):
    """One step of the sequence and the cloud at its end; `end` is None when the run stopped earlier."""

    name: str
    kind: str
    start_ms: float
    duration_ms: float
    end: Moment | None


@dataclass(frozen=True)
class PictureFigures(Record):
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
class Summary(Record):
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
            return built(cls, raw)
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
