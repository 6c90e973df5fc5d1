"""The summary as plain text: what the terminal shows at the end of a run, and what can be read aloud."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from textwrap import wrap

from trapsim.record.summary import (
    Ground,
    Law,
    LegSpace,
    Moment,
    Numerics,
    PictureFigures,
    SpaceFigures,
    StageEnd,
    Summary,
)
from trapsim.show.certificate import HEAD, compared, steps_of, verdict
from trapsim.show.numbers import MISSING, brief, figures, four, percent, percentage, with_error

SAFETY = (
    "This is a calculation, not a permit. Before you use a pulse, power, current or field from it, check it against "
    "the limits and interlocks of your equipment and the safety rules of your laboratory (lasers, coils, high "
    "voltage, vacuum). trapsim controls no hardware and does not know your limits."
)
CONVENTIONS = (
    "Half-width: root mean square, along one direction. Velocity: of the centre of mass. Positions count from the "
    "origin, where the cloud's centre rested at the start. Energies are per atom. Expansion energy: "
    "m (velocity spread)^2 / k_B of one direction, the centre's motion taken out."
)
_LINE = 100
_NAME = 30
_CELL = 22
#: In lab units: less than this is rounding noise.
_NOTHING = 1e-6
#: Orders with less than this share of the atoms are not worth a word.
FAINT = 5e-4
STATUS = {
    "complete": "complete",
    "interrupted": "interrupted: the state is saved, the same command goes on from there",
    "stopped": "stopped before the end of the sequence",
}


def summary_text(summary: Summary) -> str:
    """The whole summary, four significant figures, errors where they are known.

    Parameters
    ----------
    summary : Summary

    Returns
    -------
    str
        Lines of at most about a hundred characters, ending with a newline.
    """
    head = summary.title or "Untitled plan"
    lines = [head, "=" * len(head), f"{STATUS.get(summary.status, summary.status)}", ""]
    lines += _ground(summary.ground)
    if summary.stages:
        lines += ["", *_stages(summary.stages)]
    if summary.end is not None:
        lines += ["", *_end(summary)]
    if summary.pictures:
        lines += ["", *_pictures(summary.pictures)]
    lines += ["", *_numerics(summary.numerics), *_certificate(summary.numerics)]
    if summary.warnings:
        lines += ["", "Warnings"]
        for notice in summary.warnings:
            lines += wrap(notice.text, _LINE, initial_indent="  ! ", subsequent_indent="    ")
    lines += ["", f"trapsim {summary.version}, key {summary.key}, march {summary.march_key}"]
    lines += ["", *wrap(CONVENTIONS, _LINE), "", *wrap(SAFETY, _LINE), ""]
    return "\n".join(lines)


def _row(name: str, cells: Iterable[str]) -> str:
    return f"  {name:<{_NAME - 1}} " + "".join(f"{cell:<{_CELL}}" for cell in cells).rstrip()


def _ground(ground: Ground) -> list[str]:
    """The cloud at rest."""
    shares = (("kinetic", ground.kinetic_hz), ("trap", ground.trap_hz), ("interaction", ground.interaction_hz))
    energy = f"{four(ground.energy_hz)} Hz: " + ", ".join(f"{name} {four(value)}" for name, value in shares)
    lines = ["The cloud at rest", _row("origin (um)", _along(ground.origin_um))]
    if any(width is not None for width in ground.width_um):
        lines.append(_row("half-width (um)", _along(ground.width_um)))
    if any(radius is not None for radius in ground.thomas_fermi_radius_um):
        lines.append(_row("Thomas-Fermi radius (um)", _along(ground.thomas_fermi_radius_um)))
    lines += [
        _row("chemical potential / h", [f"{four(ground.chemical_potential_hz)} Hz"]),
        _row("energy / h", [energy]),
        _row("peak density", [f"{four(ground.peak_density_per_um3)} atoms per um^3"]),
    ]
    if ground.healing_length_um is not None:
        lines.append(_row("healing length", [f"{four(ground.healing_length_um)} um"]))
    if ground.gas_parameter is not None:
        lines.append(_row("gas parameter n a^3", [four(ground.gas_parameter)]))
    lines.append(_row("residual", [figures(ground.residual, 2)]))
    lines.append(_row("virial residual", [figures(ground.virial, 2)]))
    return lines


def _along(values: Sequence[float | None]) -> list[str]:
    return [f"{name} {small(value)}" for name, value in zip("xyz", values, strict=True)]


def small(value: float | None) -> str:
    """Four figures; rounding noise is written as 0."""
    return "0" if value is not None and abs(value) < _NOTHING else four(value)


def _stages(stages: Sequence[StageEnd]) -> list[str]:
    """Each stage with the cloud's half-widths and centre at its end."""
    lines = ["The sequence, each stage with the cloud at its end"]
    for number, one in enumerate(stages, start=1):
        stop = one.start_ms + one.duration_ms
        span = f"{brief(one.start_ms)} to {brief(stop)} ms" if one.duration_ms else f"at {brief(one.start_ms)} ms"
        kind = "" if one.kind == one.name else f" ({one.kind})"
        lines.append(f"  {number}. {one.name}{kind}, {span}")
        if one.end is None:
            lines.append("     not reached")
            continue
        lines.append(_row("   half-width (um)", _along(one.end.width_um)))
        lines.append(_row("   centre (um)", _along(one.end.centre_um)))
        lines.append(_row("   velocity (mm/s)", _along(one.end.velocity_mm_per_s)))
        lines += _orders(one.end, indent="   ")
    return lines


def _end(summary: Summary) -> list[str]:
    """The cloud at the end, a column per direction, with errors and the law beside it."""
    end, error = summary.end, summary.numerics.error
    assert end is not None
    flight = f", {brief(end.flight_ms)} ms of flight" if end.flight_ms is not None else ""
    lines = [
        f"The cloud at the end: {brief(end.time_ms)} ms after the start{flight}",
        _row("", ["along x", "along y", "along z"]),
        _row("half-width (um)", with_errors(end.width_um, relative=error.width_relative)),
        *_beside(end.law, "width_um", end.width_um),
        _row("expansion rate (mm/s)", rates_with_errors(end, error.rate_relative)),
        *_beside(end.law, "expansion_rate_mm_per_s", end.expansion_rate_mm_per_s),
        _row("centre (um)", with_errors(end.centre_um, absolute=error.centre_um)),
        _row("velocity (mm/s)", [small(one) for one in end.velocity_mm_per_s]),
        _row("velocity spread (mm/s)", [four(one) for one in end.velocity_spread_mm_per_s]),
        _row("expansion energy (nK)", [four(one) for one in end.expansion_energy_nk]),
    ]
    return lines + _totals(end) + _orders(end)


def _totals(end: Moment) -> list[str]:
    ratio = end.aspect_ratio
    ratios = ", ".join(f"{a}:{b} {four(ratio[a + b])}" for a, b in ("xy", "xz", "yz") if ratio[a + b] is not None)
    energies = (
        ("internal kinetic", end.internal_kinetic_nk),
        ("trap", end.trap_nk),
        ("interaction", end.interaction_nk),
        ("centre of mass", end.centre_kinetic_nk),
    )
    lines = [_row("atoms", [brief(end.atoms)])]
    if ratios:
        lines.append(_row("aspect ratios", [ratios]))
    parts = ", ".join(f"{name} {small(value)}" for name, value in energies if value is not None)
    lines.append(_row("energy / k_B (nK)", [parts or MISSING]))
    return lines


def with_errors(
    values: Sequence[float | None], *, relative: float | None = None, absolute: float | None = None
) -> list[str]:
    """Numbers with their errors, relative or absolute; rounding noise is written as 0."""
    cells = []
    for value in values:
        error = absolute if relative is None or value is None else abs(value) * relative
        nothing = value is not None and abs(value) < _NOTHING and (error or 0.0) < _NOTHING
        cells.append("0" if nothing else with_error(value, error))
    return cells


def rates_with_errors(end: Moment, share: float | None) -> list[str]:
    """Expansion rates with their errors, which are shares of the velocity spread."""
    scales = zip(end.expansion_rate_mm_per_s, end.velocity_spread_mm_per_s, strict=True)
    return [
        with_errors([rate], absolute=None if share is None or spread is None else share * spread)[0]
        for rate, spread in scales
    ]


def _beside(law: Law | None, name: str, full: Sequence[float | None]) -> list[str]:
    """What the instant model says, as a row below the full calculation."""
    return [_row(f"   {law.model}", law_beside(law, name, full))] if law is not None else []


def law_beside(law: Law, name: str, full: Sequence[float | None]) -> list[str]:
    """What the instant model says, and how far that is from the full calculation."""
    cells = []
    for said, value in zip(getattr(law, name), full, strict=True):
        gap = f" ({percent(said / value - 1)})" if said is not None and value else ""
        cells.append(four(said) + gap)
    return cells


def orders_row(orders: Mapping[str, float]) -> str:
    """Populations of diffraction orders from the lowest on: "-1 22.9 %, 0 51.3 %, +1 22.9 %"; the faint ones left out."""
    shown = sorted((int(name), share) for name, share in orders.items() if share >= FAINT)
    return ", ".join(f"{f'{n:+d}' if n else '0'} {percentage(share)}" for n, share in shown)


def _orders(end: Moment, *, indent: str = "") -> list[str]:
    lines = []
    for part, orders in (end.orders or {}).items():
        told = wrap(orders_row(orders), _LINE - _NAME) or [MISSING]
        lines += [_row(f"{indent}orders of {part}" if n == 0 else "", [line]) for n, line in enumerate(told)]
    return lines


def _pictures(pictures: Sequence[PictureFigures]) -> list[str]:
    """What each picture shows: atoms, peak optical density, sizes and places to the right and up."""
    lines = ["The pictures, sizes and places to the right and up"]
    for one in pictures:
        flight = f", {brief(one.flight_ms)} ms of flight" if one.flight_ms is not None else ""
        lines.append(f"  {one.name}: {brief(one.time_ms)} ms{flight}")
        size, place = (", ".join(small(value) for value in pair) for pair in (one.width_um, one.centre_um))
        lines.append(_row("   atoms, peak optical density", [f"{brief(one.atoms)}, {four(one.peak_optical_density)}"]))
        lines.append(_row("   half-width, centre (um)", [f"{size}; {place}"]))
    return lines


def _numerics(numerics: Numerics) -> list[str]:
    """Grid, effort and the books that were kept."""
    error = numerics.error
    lines = ["How it was computed"]
    lines.append(_row("axes and points", [grid_words(numerics)]))
    told: tuple[str, str] = (grid_words(numerics), "")
    for leg in numerics.legs:  # only what changes from leg to leg
        grid, told_grid, told_why = grid_words(leg), *told
        if grid != told_grid:
            lines.append(_row(f"   from {brief(leg.start_ms)} ms, {leg.name}", [grid]))
        if leg.reason and leg.reason != told_why:
            lines.append(_row("", [leg.reason]))
        told = (grid, leg.reason)
    ground, march = numerics.ground, numerics.march
    lines.append(_row("ground state", [f"{brief(ground.pairs)} transform pairs, {_seconds(ground.seconds)}"]))
    if march is not None:
        cost = f"{march.steps} steps, {brief(march.pairs)} transform pairs, {_seconds(march.seconds)}"
        lines.append(_row("march", [cost]))
    lines.append(_row("whole run", [_seconds(numerics.seconds)]))
    books = (
        ("norm drift", numerics.norm_drift), ("energy drift", numerics.energy_drift),
        ("continuity residual", numerics.continuity),
        ("relative error of widths", error.width_relative), ("error of rates over spread", error.rate_relative),
        ("error of the centre (um)", error.centre_um), ("error of orders", error.orders),
    )  # fmt: skip
    lines += [_row(name, [figures(value, 2)]) for name, value in books if value is not None]
    if march is not None and error.width_relative is None:
        lines.append(_row("error of widths", ["not estimated"]))
    return lines


def _certificate(numerics: Numerics) -> list[str]:
    """The errors that a finer run has found, beside their estimates."""
    certified = numerics.certified
    if certified is None:
        return []
    lines = ["", "Certified: the same once more on a finer grid with shorter steps"]
    lines.append(_row("its axes and points", [grid_words(certified.space)]))
    lines.append(_row("its steps", [f"{steps_of(certified)}, {_seconds(certified.seconds)}"]))
    lines.append(_row("", HEAD))
    lines += [_row(row.name, row.cells()) for row in compared(numerics)]
    if told := verdict(certified):
        lines += wrap(told, _LINE, initial_indent="  ! ", subsequent_indent="    ")
    return lines


def grid_words(space: Numerics | LegSpace | SpaceFigures) -> str:
    return ", ".join(f"{d} {kind} {n}" for d, kind, n in zip("xyz", space.axes, space.points, strict=True))


def _seconds(value: float | None) -> str:
    return f"{figures(value, 2)} s"
