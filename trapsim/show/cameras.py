"""What the cameras recorded: optical densities with scale bar, side profiles and colour scale."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from trapsim.measure.picture import Picture
from trapsim.record.summary import PictureFigures, Summary
from trapsim.show.density import Window, draw_scale_bar, reach
from trapsim.show.look import DENSITY, INK, LOOKS, QUIET, RULE, SMALL, TYPE, WIDTH, box, dress, new_figure
from trapsim.show.numbers import brief, drawn

Array = np.ndarray
#: A figure shows so many pictures of a camera.
MOST = 12
#: Windows wider than this times their height take the whole width of the page.
BROAD = 1.7
#: The shorter side of a window is at least this share of the longer one.
THINNEST = 0.16
#: Optical densities that a camera reads with ease end about here.
READABLE = 4.0
#: A cloud with less than this share of its atoms on the picture is not wholly on it.
WHOLE = 0.995
#: Inches: what stands left of a picture, its side profile, and all that is above and below it.
LEFT, EDGE, ABOVE, BELOW = 0.85, 0.45, 0.55, 1.1
_TALLEST = 4.0
SATURATED = LOOKS["y"].colour


def camera_figure(summary: Summary, pictures: Sequence[Picture]) -> Figure:
    """All pictures of one camera in one scale, each from nothing to its own peak, pixels as they are.

    Parameters
    ----------
    summary : Summary
        Its entries for the pictures give the times of flight.
    pictures : sequence of Picture
        Of one camera.
    """
    shown = _spread_out(pictures)
    windows = windows_of(shown)
    told = {one.name: one for one in summary.pictures}
    broad = windows[0].half_right > BROAD * windows[0].half_up
    across = 1 if broad or len(shown) == 1 else 2
    wide, tall = _paper(windows[0], WIDTH / across - LEFT - EDGE - 0.35)
    rows = -(-len(shown) // across)
    cell = ABOVE + EDGE * 0.8 + tall + BELOW
    height = 0.75 + cell * rows
    figure = new_figure(height, summary.title or "Pictures", _subtitle(pictures, shown))
    for n, (picture, window) in enumerate(zip(shown, windows, strict=True)):
        left, top = WIDTH / across * (n % across) + LEFT, height - 0.75 - cell * (n // across) - ABOVE - EDGE * 0.8
        ax = _draw_one(figure, (left, top - tall, wide, tall), picture, window)
        ax.set_title(_when(picture, told.get(picture.name)), loc="left", size=TYPE, weight="bold", color=INK, pad=20)
        ax.text(
            0.0, 1.0, _amount(picture, summary), transform=ax.transAxes, size=SMALL, color=QUIET, va="bottom"
        )
    return figure


def _spread_out(pictures: Sequence[Picture]) -> list[Picture]:
    """As many as there is room for, the first and the last among them."""
    if len(pictures) <= MOST:
        return list(pictures)
    return [pictures[i] for i in np.unique(np.linspace(0, len(pictures) - 1, MOST).round().astype(int))]


def _subtitle(pictures: Sequence[Picture], shown: Sequence[Picture]) -> str:
    one = pictures[0]
    pixel = f"{drawn((one.x[1] - one.x[0]) * 1e6)} µm at the atoms" if len(one.x) > 1 else "one pixel"
    few = f"{len(shown)} of {len(pictures)} pictures; " if len(shown) < len(pictures) else ""
    size = f"{len(one.x)} x {len(one.y)} pixels of {pixel}"
    return f"{few}camera {one.camera}, {size}; right is {one.right}, up is {one.up}"


def windows_of(pictures: Sequence[Picture]) -> list[Window]:
    """The piece around the cloud in each picture: of one size in all of them, square on paper, inside the sensor."""
    around = []
    for one in pictures:
        seen = np.maximum(one.optical_density, 0.0) * (not one.empty)
        around.append((reach(one.x, seen.sum(axis=0)), reach(one.y, seen.sum(axis=1)), not one.empty))
    sizes = [(right[1], up[1]) for right, up, any_atoms in around if any_atoms] or [(np.inf, np.inf)]
    half_right, half_up = (max(one) for one in zip(*sizes, strict=True))
    half_right, half_up = max(half_right, THINNEST * half_up), max(half_up, THINNEST * half_right)
    windows = []
    for one, (right, up, _) in zip(pictures, around, strict=True):
        (x, wide), (y, tall) = _inside(one.x, right[0], half_right), _inside(one.y, up[0], half_up)
        windows.append(Window(x, y, wide, tall))
    return windows


def _inside(pixels: Array, middle: float, half: float) -> tuple[float, float]:
    """Middle and half-length, in um, moved and cut so as to lie on the sensor."""
    low, high = _edges(pixels)
    half = min(half, 0.5 * (high - low))
    return min(max(middle, low + half), high - half), half


def _edges(pixels: Array) -> tuple[float, float]:
    """Outer edges of a row of pixels in um."""
    half = 0.5 * _side(pixels)
    return float(pixels[0]) * 1e6 - half, float(pixels[-1]) * 1e6 + half


def _side(pixels: Array) -> float:
    """Side of a pixel in um."""
    return float(pixels[-1] - pixels[0]) * 1e6 / max(len(pixels) - 1, 1)


def _paper(window: Window, widest: float) -> tuple[float, float]:
    """Inches to the right and up, both in the same scale."""
    ratio = window.half_up / window.half_right
    return (widest, widest * ratio) if widest * ratio <= _TALLEST else (_TALLEST / ratio, _TALLEST)


def _draw_one(
    figure: Figure, place: tuple[float, float, float, float], picture: Picture, window: Window
) -> Axes:
    """One picture with its sides and its scale, `place` in inches; the axes of its upper side."""
    left, bottom, wide, tall = place
    ax = box(figure, left, bottom, wide, tall)
    draw_picture(ax, picture, window)
    ax.set_xlabel(f"{picture.right} (µm) →", size=TYPE, color=INK)
    ax.set_ylabel(f"{picture.up} (µm) →", size=TYPE, color=INK)
    above = box(figure, left, bottom + tall + 0.04, wide, EDGE * 0.8)
    beside = box(figure, left + wide + 0.04, bottom, EDGE, tall)
    above.set_xlim(ax.get_xlim())
    beside.set_ylim(ax.get_ylim())
    _draw_sides(above, beside, picture)
    strip = box(figure, left, bottom - 0.68, wide, 0.11)
    _draw_scale(strip, _peak(picture))
    return above


def _when(picture: Picture, told: PictureFigures | None) -> str:
    if told is not None and told.flight_ms is not None:
        return f"{brief(told.flight_ms)} ms of flight"
    return f"{brief(picture.time * 1e3)} ms after the start"


def _amount(picture: Picture, summary: Summary) -> str:
    """How many atoms are on the picture, and of how many when the cloud is not wholly on it."""
    if picture.empty:
        return "the cloud is outside this picture"
    whole = summary.end.atoms if summary.end is not None else picture.atoms
    some = f" of {brief(whole)}" if picture.atoms < WHOLE * whole else ""
    return f"{brief(picture.atoms)}{some} atoms, peak optical density {drawn(_peak(picture), 3)}"


def _peak(picture: Picture) -> float:
    return 0.0 if picture.empty else max(float(picture.optical_density.max()), 0.0)


def draw_picture(ax: Axes, picture: Picture, window: Window) -> None:
    """The pixels of a picture with a scale bar; dashed, where there is more than a camera reads with ease."""
    peak = _peak(picture)
    ax.imshow(
        picture.optical_density, origin="lower", extent=(*_edges(picture.x), *_edges(picture.y)), cmap=DENSITY,
        vmin=0.0, vmax=peak or 1.0, interpolation="nearest", aspect="auto",
    )  # fmt: skip
    if peak > READABLE and min(picture.optical_density.shape) > 1:
        x, y = picture.x * 1e6, picture.y * 1e6
        ax.contour(x, y, picture.optical_density, [READABLE], colors=[SATURATED], linestyles="dashed", linewidths=1.0)
    dress(ax, ticks=5 if window.half_up > 0.4 * window.half_right else 3, rules=False)
    left, right, bottom, top = window.extent
    ax.set(xlim=(left, right), ylim=(bottom, top))
    ax.xaxis.get_major_locator().set_params(nbins=6)
    for side in ax.spines.values():
        side.set(visible=True, color=QUIET)
    if peak == 0.0:
        ax.text(0.5, 0.5, "no atoms on this picture", transform=ax.transAxes, ha="center", size=TYPE, color=QUIET)
    draw_scale_bar(ax, window)


def _draw_sides(above: Axes, beside: Axes, picture: Picture) -> None:
    """Atoms per length along both sides of the sensor."""
    seen = picture.optical_density * picture.atoms_per_od * (not picture.empty)
    right, up = seen.sum(axis=0) / _side(picture.x), seen.sum(axis=1) / _side(picture.y)
    above.fill_between(picture.x * 1e6, right, color=DENSITY(0.5), linewidth=0, step="mid")
    beside.fill_betweenx(picture.y * 1e6, up, color=DENSITY(0.5), linewidth=0, step="mid")
    above.set_ylim(0, (right.max() or 1.0) * 1.05)
    beside.set_xlim(0, (up.max() or 1.0) * 1.05)
    for ax, profile, spot, side in ((above, right, (1.0, 0.98), "right"), (beside, up, (0.5, -0.03), "center")):
        ax.axis("off")
        text = f"{drawn(float(profile.max()), 3)}/µm"
        ax.text(*spot, text, transform=ax.transAxes, ha=side, va="top", size=SMALL - 1, color=QUIET)


def _draw_scale(strip: Axes, peak: float) -> None:
    """A strip from nothing to the peak optical density."""
    top = peak or 1.0
    strip.imshow(np.linspace(0, 1, 256)[None, :], cmap=DENSITY, aspect="auto", extent=(0, top, 0, 1))
    strip.set(yticks=[], xticks=[0.0, 0.5 * top, top])
    strip.set_xticklabels(["0", drawn(0.5 * top, 3), drawn(top, 3)])
    strip.get_xticklabels()[-1].set_ha("right")
    words = "optical density"
    if peak > READABLE:
        strip.axvline(READABLE, color=SATURATED, linewidth=1.6, linestyle=(0, (2, 1)))
        words += f"; dashed: {READABLE:g}, about as much as a camera reads"
    strip.set_xlabel(words, size=SMALL, color=QUIET, labelpad=1)
    strip.tick_params(labelsize=SMALL, colors=QUIET, labelcolor=INK)
    for side in strip.spines.values():
        side.set_color(RULE)
