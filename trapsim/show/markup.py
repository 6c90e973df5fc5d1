"""Small pieces of HTML; whatever text is handed in is escaped here."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass
from html import escape

from trapsim.show.numbers import MISSING

#: a figure that there is not, by itself or in a row of figures
_ABSENT = re.compile(rf"(?<![^\s(]){MISSING}(?=$|[,;)\s])")


@dataclass(frozen=True)
class Html:
    """Text that is HTML already."""

    text: str


Cell = str | Html


def html(one: Cell) -> str:
    """The cell as HTML."""
    return one.text if isinstance(one, Html) else escape(one)


def pretty(text: str) -> str:
    """The signs of print in a number written for the terminal."""
    return _ABSENT.sub("–", text).replace("+-", "±").replace("-", "−").replace("um", "µm")


def numbers(cells: Sequence[str]) -> list[str]:
    """Numbers written for the terminal, with the signs of print."""
    return [pretty(cell) for cell in cells]


def table(head: Sequence[Cell], rows: Sequence[Sequence[Cell]], *, quiet: Sequence[int] = (), kind: str = "") -> Html:
    """A table; the first cell of a row is what the row is about.

    Parameters
    ----------
    head : sequence of str
        Empty for a table without a head.
    rows : sequence of sequences of str
    quiet : sequence of int
        Rows that are only beside the one above.
    kind : str
        How it looks.
    """
    body = []
    for number, (name, *cells) in enumerate(rows):
        look = ' class="beside"' if number in quiet else ""
        inside = "".join(f"<td>{html(cell)}</td>" for cell in cells)
        body.append(f'<tr{look}><th scope="row">{html(name)}</th>{inside}</tr>')
    top = "".join(f'<th scope="col">{html(one)}</th>' for one in head)
    top = f"<thead><tr>{top}</tr></thead>" if head else ""
    look = f' class="{kind}"' if kind else ""
    return Html(f'<div class="wide"><table{look}>{top}<tbody>{"".join(body)}</tbody></table></div>')


def section(title: str, *inside: Html | None, name: str = "") -> Html:
    """A part of the page with its heading; nothing where there is nothing in it."""
    body = "".join(one.text for one in inside if one is not None)
    look = f' class="{name}"' if name else ""
    return Html(f"<section{look}><h2>{escape(title)}</h2>{body}</section>" if body else "")


def paragraph(text: str, *, kind: str = "") -> Html:
    look = f' class="{kind}"' if kind else ""
    return Html(f"<p{look}>{escape(text)}</p>")


def listed(items: Sequence[Cell], *, kind: str = "") -> Html | None:
    """A list; None where nothing is in it."""
    look = f' class="{kind}"' if kind else ""
    return Html(f"<ul{look}>{''.join(f'<li>{html(one)}</li>' for one in items)}</ul>") if items else None
