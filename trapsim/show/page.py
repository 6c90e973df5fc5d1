"""A run on one page of HTML that needs nothing else: figures, drawing and style are in it, and it opens offline."""

from __future__ import annotations

import base64
from collections.abc import Mapping
from html import escape
from pathlib import Path

from trapsim.plan.plan import Plan
from trapsim.record.files import write_atomic
from trapsim.record.store import Contents
from trapsim.record.summary import Run, Summary
from trapsim.show import tables
from trapsim.show.figures import figures_of, png
from trapsim.show.markup import Html, listed, paragraph, section
from trapsim.show.numbers import brief
from trapsim.show.sequence import sequence_svg
from trapsim.show.style import STYLE
from trapsim.show.text import CONVENTIONS, SAFETY, STATUS

PAGE = "page.html"
#: Nothing from elsewhere, no scripts: a browser that knows the rule enforces it.
_POLICY = "default-src 'none'; img-src data:; style-src 'unsafe-inline'"
#: What each figure shows, in one sentence; figures of cameras have their own.
CAPTIONS = {
    "flight": "Half-widths, expansion rates and the centre of mass against time; the instant model dashed.",
    "momentum": "Momentum along each lattice in photon recoils, plainly and in decades; bands are the even orders.",
    "orders": "Share of the atoms in each diffraction order at the ends of the steps.",
    "columns": "Column densities at the end, seen along x, y and z.",
    "strip": "Column densities at a few times.",
    "energies": "Energies per atom against time, and the shape of the cloud.",
    "flow": "Flow at the end: the longer the arrow, the farther its atoms go in the time that is said above.",
}


def contents_of(kept: Run | Contents) -> Contents:
    """What the page and the figures are made from."""
    if isinstance(kept, Contents):
        return kept
    plan = kept.plan.resolved() if isinstance(kept.plan, Plan) else kept.plan
    text = kept.plan.source if isinstance(kept.plan, Plan) else ""
    return Contents(
        text, plan or {}, kept.summary, kept.track, kept.columns, kept.final, pictures=kept.pictures,
        momenta=kept.momenta, flow=kept.flow,
    )  # fmt: skip


def page_html(kept: Run | Contents, figures: Mapping[str, bytes] | None = None) -> str:
    """The whole page.

    Parameters
    ----------
    kept : Run or Contents
    figures : mapping of str to bytes, optional
        PNG files by name; drawn here when they are not handed in.

    Returns
    -------
    str
        HTML without a reference to anything outside itself.
    """
    kept = contents_of(kept)
    if figures is None:
        figures = {name: png(figure) for name, figure in figures_of(kept).items()}
    summary = kept.summary
    title = summary.title or "Untitled plan"
    parts = [
        _head(summary, title),
        _sequence(kept),
        _end(summary),
        section("Diffraction orders", tables.orders_table(summary, kept.momenta)),
        section("Pictures", tables.pictures_table(summary.pictures)),
        _figures(figures),
        section("The cloud at the end of each step", tables.stage_ends_table(summary)),
        section("The cloud at rest", tables.ground_table(summary.ground)),
        section(
            "Can it be trusted?", tables.validity_table(summary), tables.certificate_table(summary.numerics)
        ),
        section("How it was computed", tables.numerics_table(summary.numerics)),
        section("Conventions", paragraph(CONVENTIONS)),
        _plan(kept),
        _foot(summary),
    ]
    body = "\n".join(part.text for part in parts if part.text)
    return (
        f'<!DOCTYPE html>\n<html lang="en">\n<head>\n<meta charset="utf-8">\n'
        f'<meta http-equiv="Content-Security-Policy" content="{_POLICY}">\n'
        f'<meta name="viewport" content="width=device-width, initial-scale=1">\n<title>{escape(title)}</title>\n'
        f"<style>{STYLE}</style>\n</head>\n<body>\n<main>\n{body}\n</main>\n</body>\n</html>\n"
    )


def write_page(folder: str | Path, kept: Run | Contents, figures: Mapping[str, bytes] | None = None) -> Path:
    """Write `page.html` into the result folder.

    Raises
    ------
    FileTrouble
        When it cannot be written.
    """
    path = Path(folder) / PAGE
    write_atomic(path, page_html(kept, figures).encode())
    return path


def _head(summary: Summary, title: str) -> Html:
    """Title, state, what it is about, and what to heed."""
    status = STATUS.get(summary.status, summary.status)
    look = "status" if summary.status == "complete" else "status open"
    words = "the cloud at rest"
    if summary.end is not None:
        words = f"{brief(summary.end.atoms)} atoms, followed for {brief(summary.end.time_ms)} ms"
    about = f'<span class="{look}">{escape(status)}</span> {escape(words)}'
    heed = listed([notice.text for notice in summary.warnings], kind="heed")
    return Html(f"<header><h1>{escape(title)}</h1><p>{about}</p></header>" + (heed.text if heed else ""))


def _sequence(kept: Contents) -> Html:
    drawing = sequence_svg(kept.plan, kept.summary)
    asked = tables.plan_table(kept.plan)
    return section("What was asked", Html(drawing), tables.steps_table(kept.plan, kept.summary), asked)


def _end(summary: Summary) -> Html:
    if summary.end is None:
        return Html("")
    end = summary.end
    flight = f", {brief(end.flight_ms)} ms of flight" if end.flight_ms is not None else ""
    title = f"The cloud at the end: {brief(end.time_ms)} ms after the start{flight}"
    note = "± is the estimated numerical error, one sigma; it does not hold what the plan itself is uncertain about."
    if end.law is not None:
        note += f" Below in grey the instant model ({end.law.model}), and how far it is off."
    return section(title, tables.end_table(summary), paragraph(note, kind="quiet"), tables.totals_table(end))


def _figures(figures: Mapping[str, bytes]) -> Html:
    shown = []
    for name, data in figures.items():
        camera = name.removeprefix("pictures_")
        words = CAPTIONS.get(name, f"What camera {camera} records: resonant light, no noise." if camera != name else name)
        source = base64.b64encode(data).decode("ascii")
        shown.append(
            f'<figure><img alt="{escape(words)}" src="data:image/png;base64,{source}">'
            f"<figcaption>{escape(words)}</figcaption></figure>"
        )
    return section("Figures", Html("\n".join(shown)))


def _plan(kept: Contents) -> Html:
    text = kept.plan_text.strip("\n")
    return section("The plan as it was given", Html(f"<pre>{escape(text)}</pre>")) if text else Html("")


def _foot(summary: Summary) -> Html:
    mark = f"trapsim {summary.version}, key {summary.key}, march {summary.march_key}"
    return Html(f'<footer>{paragraph(SAFETY, kind="safety").text}{paragraph(mark, kind="quiet").text}</footer>')
