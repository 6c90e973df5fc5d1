"""Momenta along a lattice: the distribution in photon recoils, and how many atoms are in each diffraction order."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure
from matplotlib.ticker import FuncFormatter, LogLocator, MultipleLocator, NullLocator

from trapsim.constants import HBAR
from trapsim.record.album import Seen
from trapsim.record.summary import Summary
from trapsim.show.look import BAND, DENSITY, INK, LOOKS, QUIET, SMALL, TYPE, WIDTH, box, dress, new_figure
from trapsim.show.numbers import brief, drawn, percentage, signed

Array = np.ndarray
#: Orders with less than this share of the atoms are neither named nor given room.
NAMED = 2e-3
#: The panel in decades goes down to this share of the peak.
DEEP = 1e-6
#: Populations that differ by less are shown as one, and so many different sets of them at most.
SAME, SETS = 2e-3, 4
#: An order that is at least so many recoils wide on a page of about a hundred letters has room for its name.
LETTERS = 100
FULL, EARLIER = LOOKS["x"].colour, LOOKS["y"].colour


def by_lattice(momenta: Sequence[Seen]) -> dict[str, list[Seen]]:
    """What was seen along each lattice, in order."""
    found: dict[str, list[Seen]] = {}
    for seen in momenta:
        found.setdefault(seen.part, []).append(seen)
    return found


def momentum_figure(summary: Summary, momenta: Sequence[Seen], *, mass: float) -> Figure:
    """For every lattice the momentum distribution at the last look and at the first one, plainly and in decades."""
    lattices = by_lattice(momenta)
    plain, decades = 2.2, 1.35
    cell = 0.62 + plain + 0.12 + decades + 0.72
    height = 0.75 + cell * len(lattices)
    figure = new_figure(height, summary.title or "Momenta", "how fast the atoms are along the lattices, in photon recoils")
    for number, (part, seen) in enumerate(lattices.items()):
        top = height - 0.75 - cell * number - 0.62
        above = box(figure, 0.95, top - plain, WIDTH - 1.3, plain)
        below = box(figure, 0.95, top - plain - 0.12 - decades, WIDTH - 1.3, decades)
        draw_momentum(above, seen, mass=mass)
        draw_momentum(below, seen, mass=mass, decades=True)
        above.tick_params(labelbottom=False)
        _name_orders(above, seen[-1])
        along = "xyz"[seen[-1].momentum.direction]
        title = f"{part}, along {along}: at the end of {_stage(summary, seen[-1].stage)}"
        above.set_title(title, loc="left", size=TYPE, weight="bold", color=INK, pad=22, parse_math=False)
        if len(seen) > 1:
            above.set_title(
                f"dashed: at the end of {_stage(summary, seen[0].stage)}", loc="right", size=SMALL, color=EARLIER,
                pad=22, parse_math=False,
            )  # fmt: skip
        above.set_ylabel("share per recoil", size=TYPE, color=INK)
        below.set_ylabel("in decades", size=TYPE, color=INK)
        fallen = seen[-1].fallen * 1e3
        off = f"; {signed(brief(fallen))} mm/s from forces and kicks taken off" if abs(fallen) > 1e-6 else ""
        below.set_xlabel(f"momentum along {along} (photon recoils){off}", size=TYPE, color=INK)
    return figure


def _stage(summary: Summary, index: int) -> str:
    return summary.stages[index].name if index < len(summary.stages) else f"stage {index + 1}"


def in_recoils(seen: Seen, *, mass: float) -> tuple[Array, Array]:
    """Momentum in photon recoils, what forces and kicks gave taken off, and the share of the atoms per recoil."""
    return (seen.momentum.k - mass * seen.fallen / HBAR) / seen.recoil, seen.momentum.density * seen.recoil


def draw_momentum(ax: Axes, seen: Sequence[Seen], *, mass: float, decades: bool = False) -> None:
    """The last distribution filled and, dashed, the first; light bands hold the even orders."""
    recoils, share = in_recoils(seen[-1], mass=mass)
    reach = _reach(seen)
    dress(ax, rules=not decades)
    for n in range(-reach, reach + 1):
        if n % 2 == 0:
            ax.axvspan(2 * n - 1, 2 * n + 1, color=BAND, linewidth=0, zorder=0)
    ax.fill_between(recoils, share, color=DENSITY(0.5), alpha=0.55, linewidth=0, zorder=2)
    ax.plot(recoils, share, color=FULL, linewidth=1.3, zorder=3)
    top = max(float(share.max()), 1e-30)
    if len(seen) > 1:
        first = in_recoils(seen[0], mass=mass)
        top = max(top, min(2 * top, float(first[1].max())))
        ax.plot(*first, color=EARLIER, linewidth=1.0, dashes=(3, 2), zorder=4)
    ax.set_xlim(-2 * reach - 1, 2 * reach + 1)
    ax.xaxis.set_major_locator(MultipleLocator(2 * max(1, reach // 6)))
    ax.xaxis.set_major_formatter(FuncFormatter(lambda value, _: signed(f"{value:g}")))
    if decades:
        ax.set_yscale("log")
        ax.set_ylim(DEEP * top, 3 * top)
        ax.yaxis.set_major_locator(LogLocator(10, numticks=4))
        ax.yaxis.set_minor_locator(NullLocator())
        ax.yaxis.set_major_formatter(FuncFormatter(lambda value, _: drawn(value, 1)))
    else:
        ax.set_ylim(0, 1.06 * top)


def _reach(seen: Sequence[Seen]) -> int:
    """The highest order that is shown, at least the first."""
    shares = [(abs(int(n)), p) for one in (seen[0], seen[-1]) for n, p in one.orders.items()]
    return max((n for n, p in shares if p >= NAMED), default=0) + 1


def _name_orders(ax: Axes, seen: Seen) -> None:
    """The number of each order and its share of the atoms above the panel."""
    low, high = ax.get_xlim()
    room = 2 / (high - low) * LETTERS
    for name, share in seen.orders.items():
        if share >= NAMED:
            text = f"{_order(name)}: {percentage(share)}" if room > 13 else _order(name)
            ax.annotate(
                text, xy=(2 * int(name), 1.0), xycoords=("data", "axes fraction"), xytext=(0, 4), ha="center",
                textcoords="offset points", size=SMALL, color=INK, annotation_clip=False,
            )  # fmt: skip


def _order(name: str) -> str:
    """An order with its sign: +1, 0, −1."""
    return signed(f"{int(name):+d}") if int(name) else "0"


def orders_figure(summary: Summary, momenta: Sequence[Seen]) -> Figure:
    """For every lattice the populations of its orders, a bar for every stage at whose end they differ."""
    lattices = by_lattice(momenta)
    tall, cell = 2.1, 2.1 + 1.35
    height = 0.75 + cell * len(lattices)
    figure = new_figure(height, summary.title or "Diffraction orders", "share of the atoms in each diffraction order")
    for number, (part, seen) in enumerate(lattices.items()):
        ax = box(figure, 0.95, height - 0.75 - cell * number - 0.5 - tall, WIDTH - 3.2, tall)
        draw_orders(ax, [(words, orders) for words, orders in sets_of(summary, seen)])
        along = "xyz"[seen[0].momentum.direction]
        title = f"{part}: orders in pairs of photon recoils along {along}"
        ax.set_title(title, loc="left", size=TYPE, weight="bold", color=INK, pad=14, parse_math=False)
    return figure


def sets_of(summary: Summary, seen: Sequence[Seen]) -> list[tuple[str, Mapping[str, float]]]:
    """Stages in whose ends the populations are the same, by name, and the populations at the last of them."""
    sets: list[tuple[list[Seen], Mapping[str, float]]] = []
    for one in seen:
        if sets and _alike(sets[-1][1], one.orders):
            sets[-1] = ([*sets[-1][0], one], one.orders)
        else:
            sets.append(([one], one.orders))
    out = []
    for members, orders in sets[-SETS:]:
        first, last = (_stage(summary, member.stage) for member in (members[0], members[-1]))
        out.append((first if len(members) == 1 else f"{first} to {last}", orders))
    return out


def _alike(one: Mapping[str, float], other: Mapping[str, float]) -> bool:
    return all(abs(one.get(n, 0.0) - other.get(n, 0.0)) < SAME for n in {*one, *other})


def draw_orders(ax: Axes, sets: Sequence[tuple[str, Mapping[str, float]]]) -> None:
    """Bars in per cent, darker for later stages; the last one with its numbers."""
    dress(ax, ticks=4)
    shown = [int(n) for _, orders in sets for n, p in orders.items() if p >= NAMED] or [0]
    numbers = np.arange(min(shown), max(shown) + 1)
    wide = 0.8 / len(sets)
    for i, (words, orders) in enumerate(sets):
        heights = np.array([100 * orders.get(str(n), 0.0) for n in numbers])
        shade = DENSITY(0.72 if len(sets) == 1 else 0.25 + 0.55 * i / (len(sets) - 1))
        places = numbers + (i - 0.5 * (len(sets) - 1)) * wide
        ax.bar(places, heights, 0.92 * wide, color=shade, label=f"end of {words}", zorder=3)
        if i == len(sets) - 1 and len(numbers) <= 15:
            for x, y in zip(places, heights, strict=True):
                ax.annotate(
                    percentage(y / 100), xy=(x, y), xytext=(0, 2), textcoords="offset points", ha="center",
                    size=SMALL, color=INK,
                )  # fmt: skip
    ax.set_ylim(0, 1.14 * max(max(one.values(), default=1.0) for _, one in sets) * 100)
    ax.set_xlim(numbers[0] - 0.6, numbers[-1] + 0.6)
    ax.xaxis.set_major_locator(MultipleLocator(1 if len(numbers) <= 15 else 2))
    ax.xaxis.set_major_formatter(FuncFormatter(lambda value, _: _order(str(round(value)))))
    ax.set_xlabel("diffraction order", size=TYPE, color=INK)
    ax.set_ylabel("atoms (%)", size=TYPE, color=INK)
    legend = ax.legend(
        loc="upper left", bbox_to_anchor=(1.01, 1.0), frameon=False, fontsize=SMALL, labelcolor=INK, borderaxespad=0,
    )  # fmt: skip
    for text in legend.get_texts():
        text.set_parse_math(False)
        text.set_color(QUIET if text is not legend.get_texts()[-1] else INK)
