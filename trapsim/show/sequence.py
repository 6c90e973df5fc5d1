"""The sequence drawn to scale: steps as blocks, parts of the trap as curves, kicks as arrows, pictures as marks."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from html import escape

from trapsim.record.summary import StageEnd, Summary
from trapsim.show.levels import Curve, curves
from trapsim.show.look import BAND, INK, LOOKS, QUIET, RULE
from trapsim.show.numbers import brief, nice_length, signed
from trapsim.show.wording import Raw, kick_vector, times_asked_for, words

#: Pixels: the whole width, what stands left of the time line, a row of names, a block, a curve, a kick.
WIDE, LEFT, NAMES, BLOCK, LANE, KICKS = 1000, 118, 17, 30, 34, 24
#: A letter of a name, in pixels, and so many rows of names at most.
LETTER, ROWS = 6.7, 4
#: A block is at least this wide.
THIN = 2.5
SHADES = ("#c9dfe3", "#e4eef0")
CURVE, KICK, MARK = LOOKS["x"].colour, LOOKS["y"].colour, LOOKS["z"].colour


@dataclass(frozen=True)
class _Line:
    """The time line: milliseconds to pixels."""

    begin: float
    span: float

    def x(self, ms: float) -> float:
        return LEFT + (WIDE - LEFT - 14) * (ms - self.begin) / self.span


def sequence_svg(plan: Raw, summary: Summary) -> str:
    """The sequence as a drawing of its own, or nothing where the plan has none.

    Parameters
    ----------
    plan : mapping
        The plan as it was understood.
    summary : Summary
        Its stages give the times, its pictures the marks.
    """
    stages = summary.stages
    if not stages:
        return ""
    begin = stages[0].start_ms
    line = _Line(begin, max(one.start_ms + one.duration_ms for one in stages) - begin or 1.0)
    steps = list(plan.get("sequence", ()))
    body: list[str] = []
    top = 6.0
    drawn, tall = _names(stages, line, top)
    body += drawn
    top += tall
    body += _blocks(stages, line, top)
    top += BLOCK + 10
    timed = [(raw, 1e-3 * one.start_ms, 1e-3 * one.duration_ms) for raw, one in zip(steps, stages, strict=False)]
    for name, curve in curves(plan, timed).items() if timed else ():
        body += _lane(name, curve, line, top)
        top += LANE + 8
    pairs = zip(steps, stages, strict=False)
    kicks = [(one.start_ms, kick_vector(raw)) for raw, one in pairs if raw.get("stage") == "kick"]
    if kicks:
        drawn, tall = _kicks(kicks, line, top)
        body += drawn
        top += tall
    if moments := _moments(plan, summary):
        body += _marks(moments, line, top)
        top += LANE - 6
    body += _axis(line, top)
    height = top + 42
    return (
        f'<svg class="sequence" viewBox="0 0 {WIDE} {height:.0f}" role="img" '
        f'aria-label="The sequence against time, to scale">'
        f"{''.join(body)}</svg>"
    )


def _text(x: float, y: float, text: str, *, colour: str = INK, anchor: str = "start", size: float = 12.5,
          over: bool = False) -> str:  # fmt: skip
    """Words; with a white rim where they stand over lines."""
    halo = ' stroke="#ffffff" stroke-width="4" stroke-linejoin="round" paint-order="stroke"' if over else ""
    return (
        f'<text x="{x:.1f}" y="{y:.1f}" fill="{colour}" text-anchor="{anchor}" font-size="{size:g}"{halo}>'
        f"{escape(text)}</text>"
    )


def _stroke(points: Sequence[tuple[float, float]], colour: str, *, wide: float = 1.0, dash: str = "") -> str:
    where = " ".join(f"{x:.1f},{y:.1f}" for x, y in points)
    dashes = f' stroke-dasharray="{dash}"' if dash else ""
    return f'<polyline points="{where}" fill="none" stroke="{colour}" stroke-width="{wide:g}"{dashes}/>'


def _names(stages: Sequence[StageEnd], line: _Line, top: float) -> tuple[list[str], float]:
    """Number, name and duration of each step, in rows where they do not meet, with a line down to its block."""
    rows: list[float] = []
    placed = []
    for number, one in enumerate(stages, start=1):
        length = f" {duration(one.duration_ms)}" if one.duration_ms else ""
        text = f"{number} {one.name}{length}"
        x = line.x(one.start_ms)
        x = min(x, WIDE - 4 - LETTER * len(text)) if x + LETTER * len(text) > WIDE - 4 else x
        row = next((r for r, end in enumerate(rows) if x >= end), len(rows))
        if row >= ROWS:
            text, row = str(number), ROWS - 1
            if x < rows[row]:
                continue
        end = x + LETTER * (len(text) + 1.5)
        rows = [*rows[:row], end, *rows[row + 1 :]]
        placed.append((text, x, row, line.x(one.start_ms)))
    tall = NAMES * len(rows)
    lines, texts = [], []
    for text, x, row, start in placed:
        y = top + tall - NAMES * row
        lines.append(_stroke([(start, y - 11), (start, top + tall + 3)], RULE))
        texts.append(_text(x + 3, y - 4, text, over=True))
    return lines + texts, tall + 3


def duration(ms: float) -> str:
    """A duration in the unit that suits it."""
    return words({"value": 1e-3 * ms, "unit": "s"})


def _blocks(stages: Sequence[StageEnd], line: _Line, top: float) -> list[str]:
    out = [_text(LEFT - 10, top + 20, "steps", colour=QUIET, anchor="end")]
    for number, one in enumerate(stages):
        x = line.x(one.start_ms)
        wide = max(line.x(one.start_ms + one.duration_ms) - x, THIN)
        missed = one.end is None
        fill = "#ffffff" if missed else CURVE if wide <= 2 * THIN else SHADES[number % 2]
        edge = f' stroke="{QUIET}" stroke-dasharray="4 3"' if missed else ""
        out.append(f'<rect x="{x:.1f}" y="{top:.1f}" width="{wide:.1f}" height="{BLOCK}" fill="{fill}"{edge}/>')
        text = one.kind + (", not reached" if missed else "")
        if wide > LETTER * (len(text) + 2):
            out.append(_text(x + wide / 2, top + 20, text, anchor="middle"))
    flies = next((one for one in reversed(stages) if one.kind == "release"), None)
    if flies is not None:
        x = line.x(flies.start_ms)
        out.append(_stroke([(x, top - 3), (x, top + BLOCK + 3)], INK, wide=2))
    return out


def _lane(name: str, curve: Curve, line: _Line, top: float) -> list[str]:
    """How strong a part is, as a filled curve; full height is its largest strength."""
    floor = top + LANE
    points = [(line.x(1e3 * time), floor - level * (LANE - 4)) for time, level in curve]
    points.append((max(line.x(line.begin + line.span), points[-1][0]), points[-1][1]))
    spread = _widened(points)
    area = " ".join(f"{x:.1f},{y:.1f}" for x, y in [(spread[0][0], floor), *spread, (spread[-1][0], floor)])
    return [
        f'<polygon points="{area}" fill="{BAND}"/>',
        _stroke([(LEFT, floor), (WIDE - 14, floor)], RULE),
        _stroke(spread, CURVE, wide=1.6),
        _text(LEFT - 10, floor - 8, _short(name), colour=INK, anchor="end"),
    ]


def _widened(points: Sequence[tuple[float, float]]) -> list[tuple[float, float]]:
    """A pulse narrower than a line is drawn as wide as one."""
    out = list(points)
    for n in range(1, len(out) - 2):
        (x0, y0), (x1, y1) = out[n], out[n + 1]
        rises = y0 == y1 and out[n - 1][1] > y0 and out[n + 2][1] > y1 and out[n - 1][0] == x0 and out[n + 2][0] == x1
        if rises and x1 - x0 < THIN:
            out[n + 1], out[n + 2] = (x0 + THIN, y1), (x0 + THIN, out[n + 2][1])
    return out


def _short(name: str) -> str:
    return name if len(name) <= 15 else name[:14] + "…"


def _kicks(kicks: Sequence[tuple[float, Sequence[float]]], line: _Line, top: float) -> tuple[list[str], float]:
    """An arrow for every kick with its velocity, in rows where the words do not meet; and how tall that is."""
    out = [_text(LEFT - 10, top + 17, "kicks", colour=QUIET, anchor="end")]
    rows: list[float] = []
    for ms, velocity in kicks:
        along = [f"{words({'value': v, 'unit': 'm/s'})} along {d}" for d, v in zip("xyz", velocity, strict=True) if v]
        text, x = ", ".join(along) or "0", line.x(ms)
        room = LETTER * (len(text) + 1)
        left = x - 8 - room if x + 8 + room > WIDE else x - 6
        row = next((r for r, end in enumerate(rows) if left >= end), len(rows))
        rows = [*rows[:row], left + 14 + room, *rows[row + 1 :]]
        y = top + KICKS * row
        out.append(_stroke([(x, y + 21), (x, y + 8)], KICK, wide=2.4))
        tip = f"{x - 5:.1f},{y + 10:.1f} {x:.1f},{y + 1:.1f} {x + 5:.1f},{y + 10:.1f}"
        out.append(f'<polygon points="{tip}" fill="{KICK}"/>')
        anchor, shift = ("end", -8) if left < x - 6 else ("start", 8)
        out.append(_text(x + shift, y + 17, text, colour=KICK, anchor=anchor))
    return out, KICKS * len(rows) + 6


def _marks(moments: Sequence[tuple[float, float | None]], line: _Line, top: float) -> list[str]:
    """A mark for every moment at which there is a picture; its time of flight beside it where there is room."""
    flies = all(flight is not None for _, flight in moments)
    out = [_text(LEFT - 10, top + 13, "pictures at" if flies else "pictures", colour=QUIET, anchor="end")]
    taken = -math.inf
    for n, (ms, flight) in enumerate(moments):
        x = line.x(ms)
        out.append(f'<rect x="{x - 4.5:.1f}" y="{top + 4:.1f}" width="9" height="9" fill="{MARK}" '
                   f'transform="rotate(45 {x:.1f} {top + 8.5:.1f})"/>')  # fmt: skip
        text = f"{brief(flight)} ms of flight" if flies else f"{brief(ms)} ms"
        room = LETTER * (len(text) + 1)
        following = line.x(moments[n + 1][0]) - 10 if n + 1 < len(moments) else WIDE
        places = [low for low in (x + 10, x - 10 - room) if low > taken and low + room < (following if low > x else x)]
        taken = x + 8
        if places:
            out.append(_text(places[0], top + 13, text, colour=MARK))
            taken = max(taken, places[0] + room)
    return out


def _moments(plan: Raw, summary: Summary) -> list[tuple[float, float | None]]:
    """When pictures were taken, or asked for where there is no camera: ms, each once, with the time of flight."""
    taken: Mapping[float, float | None] = {one.time_ms: one.flight_ms for one in summary.pictures}
    if not taken:
        taken = {1e3 * time: None for time in times_asked_for(plan, summary)}
    return sorted(taken.items(), key=lambda pair: pair[0])


def _axis(line: _Line, top: float) -> list[str]:
    """Time in ms since the start of the sequence."""
    out = [_stroke([(LEFT, top + 4), (WIDE - 14, top + 4)], QUIET)]
    step = nice_length(line.span / 4)
    first = math.ceil(line.begin / step - 1e-9)
    for n in range(first, math.floor((line.begin + line.span) / step + 1e-9) + 1):
        x = line.x(n * step)
        out.append(_stroke([(x, top + 4), (x, top + 9)], QUIET))
        out.append(_text(x, top + 22, signed(brief(n * step)), colour=INK, anchor="middle", size=12))
    out.append(_text(WIDE - 14, top + 38, "time since the start of the sequence (ms), to scale", colour=QUIET, anchor="end",
                     size=12))  # fmt: skip
    return out
