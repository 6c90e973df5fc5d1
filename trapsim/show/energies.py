"""Where the energy is, against time, and the shape of the cloud."""

from __future__ import annotations

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from trapsim.record.series import DIRECTIONS, Track
from trapsim.record.summary import Summary
from trapsim.show.curves import alike, smooth
from trapsim.show.flight import DASHES, End, entitle, explain_lines, finish, gap, panels_over_time, write_ends
from trapsim.show.look import INK, LOOKS, PLUM, QUIET, SAND, dress, new_figure

Array = np.ndarray
#: The ratios of widths: which directions, colour, dashes of the full calculation's line.
RATIOS = (((0, 1), INK), ((0, 2), PLUM), ((1, 2), SAND))
#: nK; less than this is nothing.
NOTHING = 1e-4
_SOLID = (1, 0)


def energies_figure(summary: Summary, track: Track) -> Figure:
    """Two panels over one time axis: energies per atom in nK, and width over width."""
    words = "energies are per atom and divided by Boltzmann's constant"
    ratios = len(_ratios(track)) > 0
    figure = new_figure(6.9 if ratios else 4.6, summary.title or "Energies and shape", words)
    panels, names = panels_over_time(figure, summary.stages, (1.5, 1) if ratios else (1,), right=0.78)
    draw_energies(panels[0], track, sudden=sudden_stages(summary))
    if ratios:
        draw_ratios(panels[1], track)
        if "law_width" in track:
            explain_lines(figure)
    finish(panels, track, names=names)
    return figure


def sudden_stages(summary: Summary) -> frozenset[int]:
    """The stages at whose start the potential jumps: what is pulsed or released, and what comes after a pulse."""
    kinds = [one.kind for one in summary.stages]
    return frozenset(i for i, kind in enumerate(kinds) if kind in ("pulse", "release") or (i and kinds[i - 1] == "pulse"))


def draw_energies(ax: Axes, track: Track, *, sudden: frozenset[int] = frozenset()) -> None:
    """Internal kinetic energy of each direction, potential and interaction energy, and their sum, the centre's apart.

    The potential energy jumps where one of the `sudden` stages starts; the other energies cannot.
    """
    dress(ax)
    before, now = _with_jumps(track, sudden)
    time = track.time[before] * 1e3
    kinetic = track.series["kinetic"].lab[before]
    still = (track["width"] == 0).all(axis=0) & ~(np.nan_to_num(kinetic) > NOTHING).any(axis=0)
    present = np.where(still, np.nan, kinetic)
    lines = []
    for group in alike(present, nothing=NOTHING):
        look = LOOKS[DIRECTIONS[group[0]]]
        names = f"kinetic {', '.join(DIRECTIONS[i] for i in group)}"
        lines.append((names, present[:, group[0]], look.colour, _SOLID, look.marker))
    places = {"trap": now, "interaction": before}
    rest = [(name, track.series[name].lab[places[name]]) for name in places if name in track]
    looks = {"trap": (QUIET, (2, 1.5), "v"), "interaction": (PLUM, (6, 2), "D")}
    lines += [(name, values, *looks[name]) for name, values in rest if np.abs(values).max() > NOTHING]
    total = np.nansum(kinetic, axis=1) + sum(values for _, values in rest)
    lines.append(("total", total, INK, (1, 2), ""))
    ends = []
    for names, values, colour, dashes, marker in lines:
        ax.plot(time, values, color=colour, linewidth=1.9, dashes=dashes, marker=marker, markersize=4, zorder=3,
                markevery=max(1, len(time) // 9), markeredgecolor="white", markeredgewidth=0.5, label=names)  # fmt: skip
        ends.append(End(float(values[-1]), names, colour, ""))
    if ax.get_ylim()[0] > 0 or min(np.nanmin(values) for _, values, *_ in lines) >= 0:
        ax.set_ylim(bottom=0.0)
    ax.axhline(0.0, color=QUIET, linewidth=0.8)
    entitle(ax, "Where the energy is: per atom, the centre's motion apart", "energy / k$_B$ (nK)")
    write_ends(ax, ends, "", nothing=NOTHING, digits=3)


def _with_jumps(track: Track, sudden: frozenset[int]) -> tuple[Array, Array]:
    """Samples in order, one more at the start of each sudden stage: which just before, and which just after the jump."""
    starts = np.flatnonzero(np.diff(track.stage) > 0) + 1
    jumps = [n for n in starts if track.stage[n] in sudden and track.time[n] > track.time[n - 1]]
    every = np.arange(len(track))
    return np.insert(every, jumps, [n - 1 for n in jumps]), np.insert(every, jumps, jumps)


def _ratios(track: Track) -> list[tuple[str, Array, tuple[int, int], str]]:
    """Name, values, directions and colour of the ratios that are not always one."""
    width = track["width"]
    found = [(pair, colour) for pair, colour in RATIOS if (width[:, pair] > 0).all()]
    if not found:
        return []
    values = np.stack([width[:, i] / width[:, j] for (i, j), _ in found], axis=1)
    out = []
    for group in alike(values):
        names = ", ".join("{}:{}".format(*(DIRECTIONS[i] for i in found[g][0])) for g in group)
        pair, colour = found[group[0]]
        out.append((names, values[:, group[0]], pair, colour))
    return [one for one in out if np.abs(one[1] - 1).max() > 1e-3]


def draw_ratios(ax: Axes, track: Track) -> None:
    """Half-width over half-width, the scaling law dashed."""
    dress(ax)
    ends = []
    for names, values, pair, colour in _ratios(track):
        curve = _ratio(track, "width", "expansion_rate", pair)
        ax.plot(*curve, color=colour, linewidth=2.0, zorder=3, label=names)
        beside = ""
        if "law_width" in track:
            law = _ratio(track, "law_width", "law_expansion_rate", pair)
            ax.plot(*law, color=colour, linewidth=1.6, dashes=DASHES, zorder=4)
            beside = gap(law[1][-1], curve[1][-1])
        ends.append(End(float(values[-1]), names, colour, beside))
    ax.axhline(1.0, color=QUIET, linewidth=0.8)
    ax.set_ylim(bottom=0.0)
    entitle(ax, "What shape it has: width over width", "aspect ratio")
    write_ends(ax, ends, "")


def _ratio(track: Track, name: str, rate: str, pair: tuple[int, int]) -> tuple[Array, Array]:
    """Time in ms and the ratio of two widths, between the samples by their rates."""
    (a, b), (da, db) = (track[which][:, pair].T for which in (name, rate))
    time, curve = smooth(track.time, a / b, (da * b - a * db) / b**2)
    return time * 1e3, curve
