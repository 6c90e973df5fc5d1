"""The tables of the page: the numbers that matter with their errors, the steps, how it was computed."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence

from trapsim.constants import BOHR_RADIUS
from trapsim.record.album import Seen
from trapsim.record.summary import Ground, Moment, Numerics, PictureFigures, Summary
from trapsim.show.certificate import HEAD, compared, steps_of, verdict
from trapsim.show.markup import Cell, Html, numbers, paragraph, pretty, table
from trapsim.show.numbers import MISSING, brief, figures, four, percentage
from trapsim.show.text import grid_words, law_beside, rates_with_errors, small, with_errors
from trapsim.show.wording import Raw, parts_in_words, what_changes, words

#: Orders with less than this share of the atoms have no row.
FAINT = 1e-4
#: um or mm/s.
NOTHING = 1e-4
ALONG = ("along x", "along y", "along z")


def end_table(summary: Summary) -> Html | None:
    """Sizes, rates and path at the end with errors and the law beside them."""
    end, error = summary.end, summary.numerics.error
    if end is None:
        return None
    rows: list[list[Cell]] = []
    quiet = []
    measured = (
        ("half-width (µm)", "width_um", with_errors(end.width_um, relative=error.width_relative)),
        ("expansion rate (mm/s)", "expansion_rate_mm_per_s", rates_with_errors(end, error.rate_relative)),
    )
    for name, field, cells in measured:
        rows.append([name, *numbers(cells)])
        if end.law is not None:
            quiet.append(len(rows))
            rows.append([end.law.model, *numbers(law_beside(end.law, field, getattr(end, field)))])
    rows += [
        ["centre (µm)", *numbers(with_errors(end.centre_um, absolute=error.centre_um))],
        ["velocity (mm/s)", *numbers([small(v) for v in end.velocity_mm_per_s])],
        ["velocity spread (mm/s)", *numbers([small(v) for v in end.velocity_spread_mm_per_s])],
        ["expansion energy (nK)", *numbers([small(v) for v in end.expansion_energy_nk])],
    ]
    return table(("", *ALONG), rows, quiet=quiet, kind="numbers")


def totals_table(end: Moment) -> Html:
    """What has no direction."""
    rows: list[list[Cell]] = [["atoms", brief(end.atoms)]]
    names = ((f"{a}:{b}", end.aspect_ratio[a + b]) for a, b in ("xy", "xz", "yz"))
    ratios = [f"{name} {pretty(four(value))}" for name, value in names if value is not None]
    if ratios:
        rows.append(["aspect ratios", ", ".join(ratios)])
    energies = (
        ("internal kinetic energy", end.internal_kinetic_nk), ("potential energy", end.trap_nk),
        ("interaction energy", end.interaction_nk), ("energy of the centre's motion", end.centre_kinetic_nk),
    )  # fmt: skip
    rows += [[name, f"{pretty(small(value))} nK"] for name, value in energies if value is not None]
    return table((), rows, kind="facts")


def orders_table(summary: Summary, momenta: Sequence[Seen] = ()) -> Html | None:
    """Populations of the diffraction orders of each lattice at the ends of the steps, and how they move at the last.

    None where there was no lattice.
    """
    told = [(f"{n}. {s.name}", s.end.orders) for n, s in enumerate(summary.stages, start=1) if s.end and s.end.orders]
    parts = list(dict.fromkeys(part for _, orders in told for part in orders))
    tables = []
    for part in parts:
        columns = [(name, orders[part]) for name, orders in told if part in orders]
        seen = sorted({int(n) for _, orders in columns for n, share in orders.items() if share >= FAINT})
        motion = next((one.motion for one in reversed(momenta) if one.part == part), {})
        rows = [
            [
                pretty(f"{n:+d}" if n else "0"), *(_share(orders.get(str(n))) for _, orders in columns),
                *numbers([MISSING if v is None else small(1e3 * v) for v in motion.get(str(n), (None, None))]),
            ]
            for n in seen
        ]
        head = (f"order of {part}", *(f"end of {name}" for name, _ in columns), "last velocity (mm/s)", "spread (mm/s)")
        tables.append(table(head, rows, kind="numbers"))
    return Html("".join(one.text for one in tables)) if tables else None


def _share(share: float | None) -> str:
    return percentage(share) if share is not None else "–"


def pictures_table(pictures: Sequence[PictureFigures]) -> Html | None:
    """What the cameras saw."""
    if not pictures:
        return None
    head = ("picture", "time (ms)", "flight (ms)", "atoms", "peak optical density", "half-width right, up (µm)",
            "centre right, up (µm)")  # fmt: skip
    rows = []
    for one in pictures:
        # a nanometre is nothing to a camera
        size, place = (
            ", ".join(small(None if value is None else round(value, 3)) for value in pair)
            for pair in (one.width_um, one.centre_um)
        )
        cells = (brief(one.time_ms), brief(one.flight_ms), brief(one.atoms), four(one.peak_optical_density), size, place)
        rows.append([one.name, *numbers(cells)])
    return table(head, rows, kind="numbers")


def steps_table(plan: Raw, summary: Summary) -> Html | None:
    """Each step: when, how long, what changes in it."""
    if not summary.stages:
        return None
    raw = list(plan.get("sequence", ()))
    rows = []
    for n, one in enumerate(summary.stages):
        name = f"{n + 1}. {one.name}" + (f" ({one.kind})" if one.kind != one.name else "")
        length = words({"value": 1e-3 * one.duration_ms, "unit": "s"}) if one.duration_ms else "at once"
        told = what_changes(plan, raw[n]) if n < len(raw) else "–"
        rows.append([name, f"{brief(one.start_ms)} ms", length, told if one.end is not None else f"{told} (not reached)"])
    return table(("step", "starts", "lasts", "what changes"), rows, kind="steps")


def stage_ends_table(summary: Summary) -> Html | None:
    """The cloud at the end of each step."""
    if not summary.stages:
        return None
    head = ("at the end of", "half-width x, y, z (µm)", "rate x, y, z (mm/s)", "centre x, y, z (µm)",
            "velocity x, y, z (mm/s)")  # fmt: skip
    rows = []
    for n, one in enumerate(summary.stages, start=1):
        name = f"{n}. {one.name}"
        if one.end is None:
            rows.append([name, "not reached", "", "", ""])
            continue
        end = one.end
        triples = (end.width_um, end.expansion_rate_mm_per_s, end.centre_um, end.velocity_mm_per_s)
        rows.append([name, *(", ".join(numbers([_still(v) for v in triple])) for triple in triples)])
    return table(head, rows, kind="numbers small")


def _still(value: float | None) -> str:
    """Four figures of a length in µm or a velocity in mm/s; what is smaller than anything in the lab is nothing."""
    return "0" if value is not None and abs(value) < NOTHING else four(value)


def ground_table(ground: Ground) -> Html:
    """The cloud at rest."""

    def along(values: Sequence[float | None]) -> str:
        return ", ".join(numbers([small(v) for v in values]))

    rows: list[list[Cell]] = [["origin x, y, z", f"{along(ground.origin_um)} µm"]]
    if any(v is not None for v in ground.width_um):
        rows.append(["half-width x, y, z", f"{along(ground.width_um)} µm"])
    if any(v is not None for v in ground.thomas_fermi_radius_um):
        rows.append(["Thomas-Fermi radius x, y, z", f"{along(ground.thomas_fermi_radius_um)} µm"])
    rows.append(["chemical potential / h", f"{pretty(four(ground.chemical_potential_hz))} Hz"])
    shares = (("kinetic", ground.kinetic_hz), ("potential", ground.trap_hz), ("interaction", ground.interaction_hz))
    parts = ", ".join(f"{name} {pretty(small(value))}" for name, value in shares)
    rows.append(["energy / h", f"{pretty(four(ground.energy_hz))} Hz: {parts}"])
    rows.append(["peak density", f"{four(ground.peak_density_per_um3)} atoms/µm³"])
    if ground.healing_length_um is not None:
        rows.append(["healing length", f"{four(ground.healing_length_um)} µm"])
    return table((), rows, kind="facts")


def validity_table(summary: Summary) -> Html:
    """How far the model and the numbers can be trusted: measures, and what they mean."""
    ground, numerics = summary.ground, summary.numerics
    error = numerics.error
    rows: list[list[Cell]] = []
    if ground.gas_parameter:
        # T. D. Lee, K. Huang and C. N. Yang, Phys. Rev. 106, 1135 (1957)
        shift = 32 / (3 * math.sqrt(math.pi)) * math.sqrt(ground.gas_parameter)
        about = f"quantum fluctuations shift the chemical potential by about {figures(100 * shift, 2)} %"
        rows.append(["gas parameter n a³", _small_number(ground.gas_parameter), about])
    measures = (
        ("residual of the ground state", ground.residual, "how far the cloud at rest is from standing still"),
        ("virial theorem", ground.virial, "what it is missed by, share of the energy; exact: 0"),
        ("drift of the norm", numerics.norm_drift, "atoms that the numbers lost or made; exact: 0"),
        ("drift of the energy", numerics.energy_drift, "while nothing changes, share of it; exact: 0"),
        ("continuity", numerics.continuity, "flow against change of density; exact: 0"),
        ("error of the widths", error.width_relative, "estimated, relative"),
        ("error of the rates", error.rate_relative, "estimated, share of the velocity spread"),
        ("error of the centre", error.centre_um, "µm, against the classical path"),
        ("error of the orders", error.orders, "estimated, share of the atoms"),
    )
    rows += [[name, _small_number(value), about] for name, value, about in measures if value is not None]
    if numerics.march is not None and error.width_relative is None:
        rows.append(["error of the widths", "–", "not estimated"])
    return table((), rows, kind="facts three")


def certificate_table(numerics: Numerics) -> Html | None:
    """The errors that a finer run has found, beside their estimates; None without one."""
    certified = numerics.certified
    if certified is None:
        return None
    rows = [[row.name, *numbers(row.cells())] for row in compared(numerics)]
    grid = f"The same once more on a finer grid, {grid_words(certified.space)}, with {steps_of(certified)}."
    words = [paragraph(grid), table(("", *HEAD), rows, kind="numbers")]
    if told := verdict(certified):
        words.append(paragraph(told))
    return Html("".join(one.text for one in words))


def _small_number(value: float) -> Cell:
    """Two figures; very small ones with a power of ten."""
    mantissa, _, power = figures(value, 2).partition("e")
    return Html(f"{pretty(mantissa)} · 10<sup>{pretty(power)}</sup>") if power else pretty(mantissa)


def numerics_table(numerics: Numerics) -> Html:
    """Grid and effort."""
    rows: list[list[Cell]] = [["axes and points", grid_words(numerics)]]
    reason, before = "", grid_words(numerics)
    for leg in numerics.legs:
        if (now := grid_words(leg)) != before:
            rows.append([f"from {brief(leg.start_ms)} ms, {leg.name}", now])
        if leg.reason and leg.reason != reason:
            rows.append(["", leg.reason])
        reason, before = leg.reason, now
    ground = numerics.ground
    rows.append(["ground state", f"{brief(ground.pairs)} transform pairs, {figures(ground.seconds, 2)} s"])
    if numerics.march is not None:
        march = numerics.march
        effort = f"{march.steps} steps, {brief(march.pairs)} transform pairs, {figures(march.seconds, 2)} s"
        rows.append(["march", effort])
    rows.append(["whole run", f"{figures(numerics.seconds, 2)} s"])
    return table((), rows, kind="facts")


def plan_table(plan: Raw) -> Html | None:
    """Atoms and parts of the trap as they were understood."""
    rows: list[list[Cell]] = []
    atoms: Mapping[str, object] = plan.get("atoms", {})
    if isinstance(number := atoms.get("number"), int | float):
        length = atoms.get("scattering_length")
        parts = [f"{brief(number)} of {atoms['species']}" if atoms.get("species") else brief(number)]
        if isinstance(length, Mapping):
            parts.append(f"scattering length {pretty(four(length['value'] / BOHR_RADIUS))} a₀")
        rows.append(["atoms", ", ".join(parts)])
    rows += [[name, text] for name, text in parts_in_words(plan)]
    return table((), rows, kind="facts") if rows else None
