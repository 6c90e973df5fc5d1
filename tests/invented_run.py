"""An invented run with a known truth: an ideal gas in its ground state, held, kicked, released, falling.

Every number follows from closed forms: sigma(t) = sigma0 sqrt(1 + (w t)^2) with sigma0^2 = hbar/(2 m w) for the free
Gaussian (textbook), and the ballistic path for the centre. The law beside it is made two per cent too wide.
"""

from __future__ import annotations

import dataclasses

import numpy as np
from scipy import constants

from trapsim.measure.flow import FlowPlane
from trapsim.measure.momentum import Momentum
from trapsim.measure.picture import Picture, resonant_cross_section
from trapsim.record.album import Seen
from trapsim.record.series import AxisRecord, ColumnSeries, Track, WaveFunction
from trapsim.record.store import Contents
from trapsim.record.summary import (
    Effort,
    ErrorEstimate,
    Ground,
    LegSpace,
    MarchEffort,
    Notice,
    Numerics,
    PictureFigures,
    StageEnd,
    Summary,
    moment_of,
)

MASS = 86.909 * constants.atomic_mass
HOLD = 2e-3
#: One photon of 1064 nm, 1/m.
RECOIL = 2 * np.pi / 1064e-9
#: Shares of the orders -1, 0, 1, and the velocity that gravity had given along z by then, m/s.
SHARES, FALLEN = (0.2, 0.7, 0.1), -0.05
#: What forces and kicks had done to the orders at the first look: nothing yet.
FIRST = (0.15, 0.75, 0.1)
STAGES = (("hold", "hold", 0.0, 2.0), ("nudge", "kick", 2.0, 0.0), ("release", "release", 2.0, 20.0))


def gaussian(frequency: tuple[float, float, float], flight: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Rms half-width and its rate, (T, 3), of the ground state of a trap after so much free flight."""
    w = 2 * np.pi * np.asarray(frequency)
    sigma0 = np.sqrt(constants.hbar / (2 * MASS * w))
    t = np.maximum(flight, 0.0)[:, None]
    root = np.sqrt(1 + (w * t) ** 2)
    return sigma0 * root, sigma0 * w**2 * t / root


def track(
    frequency: tuple[float, float, float] = (20.0, 120.0, 120.0),
    *,
    samples: int = 14,
    kick: tuple[float, float, float] = (4.0, 0.0, 0.0),
    gravity: float = constants.g,
    atoms: float = 1e5,
) -> Track:
    """Hold for 2 ms, kick (mm/s), release for 20 ms; the kick and the release are jumps at one time."""
    time = np.concatenate([np.linspace(0, HOLD, 3), [HOLD], HOLD + 20e-3 * np.linspace(0, 1, samples) ** 2])
    stage = np.concatenate([np.zeros(3), [1], np.full(samples, 2)]).astype(int)
    flight = np.where(stage == 2, time - HOLD, np.nan)
    free = np.nan_to_num(flight)
    width, rate = gaussian(frequency, free)
    v0 = np.where((stage >= 1)[:, None], np.array(kick) * 1e-3, 0.0)
    acceleration = np.array([0.0, 0.0, -gravity])
    velocity = v0 + acceleration * free[:, None]
    centre = v0 * free[:, None] + 0.5 * acceleration * free[:, None] ** 2
    w = 2 * np.pi * np.asarray(frequency)
    spread = np.tile(np.sqrt(constants.hbar * w / (2 * MASS)), (len(time), 1))
    return Track.of(
        time,
        stage,
        {
            "flight_time": flight,
            "width": width,
            "expansion_rate": rate,
            "centre": centre,
            "velocity": velocity,
            "velocity_spread": spread,
            "kinetic": 0.5 * MASS * spread**2,
            "trap": np.where(stage < 2, constants.hbar * w.sum() / 4, 0.0),
            "interaction": np.zeros(len(time)),
            "centre_kinetic": 0.5 * MASS * (velocity**2).sum(axis=1),
            "atoms": np.full(len(time), atoms),
            "law_width": 1.02 * width,
            "law_expansion_rate": 1.02 * rate,
            "scale": width / width[0],
            "norm": np.ones(len(time)),
            "step": np.append(0.0, np.diff(time)),
        },
        stage_names=tuple(name for name, *_ in STAGES),
    )


def columns(kept: Track, *, pictures: int = 6, pixels: int = 128) -> dict[str, ColumnSeries]:
    """Column densities of the Gaussian cloud of a track, at some of its samples."""
    chosen = np.unique(np.linspace(0, len(kept) - 1, pictures).round().astype(int))
    out = {}
    for view, (r, u) in {"x": (1, 2), "y": (0, 2), "z": (0, 1)}.items():
        sigma, middle = kept["width"][chosen], kept["centre"][chosen]
        line = np.linspace(-6, 6, pixels)
        cols = middle[:, r, None] + sigma[:, r, None] * line
        rows = middle[:, u, None] + sigma[:, u, None] * line
        height = kept["atoms"][chosen] / (2 * np.pi * sigma[:, r] * sigma[:, u])
        bell = np.exp(-(line**2) / 2)
        values = height[:, None, None] * bell[:, None] * bell[None, :]
        out[view] = ColumnSeries(view, kept.time[chosen], rows, cols, values.astype(np.float32))
    return out


def summary(kept: Track | None, *, title: str = "Invented: an ideal gas let go", status: str = "complete") -> Summary:
    """The figures of the track, with invented numerics around them."""
    w = 2 * np.pi * np.array([20.0, 120.0, 120.0])
    width, _ = gaussian((20.0, 120.0, 120.0), np.zeros(1))
    stages = ()
    if kept is not None:
        ends = [int(np.flatnonzero(kept.stage == number)[-1]) for number in range(3)]
        stages = tuple(
            StageEnd(*stage, end=moment_of(kept, last, mass=MASS)) for stage, last in zip(STAGES, ends, strict=True)
        )
    zero_point = w.sum() / (4 * np.pi)
    ground = Ground(
        origin_um=(0.0, 0.0, -17.25), chemical_potential_hz=zero_point, energy_hz=zero_point, kinetic_hz=zero_point / 2,
        trap_hz=zero_point / 2, interaction_hz=0.0, width_um=width[0] * 1e6, thomas_fermi_radius_um=(None, None, None),
        peak_density_per_um3=1e5 / ((2 * np.pi) ** 1.5 * np.prod(width[0] * 1e6)), healing_length_um=None,
        gas_parameter=0.0, residual=3.1e-9, virial=2.2e-8,
    )  # fmt: skip
    spaces = (LegSpace("hold", 0.0, 2.0, ("wave", "radial", "radial"), (160, 48, 48), "round about x"),)
    numerics = Numerics(
        axes=("wave", "radial", "radial"), points=(160, 48, 48), legs=spaces, ground=Effort(22, 0.31),
        march=MarchEffort(18, 54.0, 9.0, 2.4), seconds=3.9, norm_drift=2.1e-7, continuity=4.0e-5,
        error=ErrorEstimate(width_relative=3e-5, rate_relative=6e-5, centre_um=1.2e-4),
    )  # fmt: skip
    return Summary(
        title=title, status=status, key="9f3c2a71d0", march_key="4b1e77a210", version="0.1.0", ground=ground,
        stages=stages, end=stages[-1].end if stages else None, numerics=numerics,
        warnings=(Notice("ideal gas", "The mean field is off: 1.0e5 atoms would not fit this width."),),
    )  # fmt: skip


def wave() -> WaveFunction:
    """A small wave function on a wave axis and a radial one, in a frame that moves."""
    rng = np.random.default_rng(5)
    axes = (
        AxisRecord("wave", (0,), np.linspace(-3e-6, 3e-6, 8), np.full(8, 6e-6 / 7)),
        AxisRecord("radial", (1, 2), np.array([1e-6, 2e-6, 3.5e-6]), np.array([1e-12, 2e-12, 3e-12])),
    )
    values = rng.normal(size=(8, 3)) + 1j * rng.normal(size=(8, 3))
    values[0, 0] = complex(-0.0, 1e-300)
    frame = ([1.0, 2.0, 2.0], [0.0, 3.0, 3.0], [0.0, 0.0, -2e-3], [0.0, 0.0, 0.2])
    return WaveFunction(0.022, values, axes, *(np.array(one) for one in frame))


def pictures(kept: Track, *, pixel: float = 2e-6, size: tuple[int, int] = (80, 60)) -> dict[str, Picture]:
    """The Gaussian cloud seen along y at two times, x to the right and z upwards, the camera on the centre of mass."""
    sigma = resonant_cross_section(780.241e-9)
    out = {}
    for index, name in ((-3, "side_early"), (-1, "side_late")):
        (wide, _, tall), (x0, _, z0) = kept["width"][index], kept["centre"][index]
        x, z = (pixel * (np.arange(n) - (n - 1) / 2) for n in size)
        height = sigma * kept["atoms"][index] / (2 * np.pi * wide * tall)
        od = height * np.exp(-(z[:, None] ** 2) / (2 * tall**2) - x[None, :] ** 2 / (2 * wide**2))
        out[name] = Picture(name, "side", float(kept.time[index]), x + x0, z + z0, od, pixel**2 / sigma, "x", "z")
    return out


def momenta() -> tuple[Seen, ...]:
    """Gaussians of 0.05 recoils at the even recoils along z, at the end of the second and of the third stage."""
    out = []
    for stage, shares, fallen in ((1, FIRST, 0.0), (2, SHARES, FALLEN)):
        k = RECOIL * np.linspace(-16, 16, 6401)
        offset = MASS * fallen / constants.hbar
        wide = 0.05 * RECOIL
        orders = dict(zip(("-1", "0", "1"), shares, strict=True))
        away = {n: (k - offset - 2 * int(n) * RECOIL) / wide for n in orders}
        density = sum(p * np.exp(-(away[n] ** 2) / 2) for n, p in orders.items()) / (np.sqrt(2 * np.pi) * wide)
        speed = constants.hbar * RECOIL / MASS
        told = {n: (2 * int(n) * speed, 0.05 * speed) for n in orders}
        out.append(Seen(stage, "light", RECOIL, fallen, Momentum(2, k, density), orders, told))
    return tuple(out)


def flow(kept: Track, *, points: int = 25) -> dict[str, FlowPlane]:
    """A free Gaussian flows as its width grows, v = (rate/width) x; in lab coordinates, unknown where nothing is."""
    origin = np.array([0.0, 0.0, -17.25e-6])
    out = {}
    for view, (r, u) in {"x": (1, 2), "y": (0, 2), "z": (0, 1)}.items():
        width, rate, centre = kept["width"][-1], kept["expansion_rate"][-1], kept["centre"][-1] + origin
        line = np.linspace(-5, 5, points)
        density = np.exp(-(line[:, None] ** 2 + line[None, :] ** 2) / 2)
        x, y = width[r] * line, width[u] * line
        right, up = (np.where(density > 1e-4, v, np.nan) for v in np.meshgrid(rate[r] * line, rate[u] * line))
        out[view] = FlowPlane(view, x + centre[r], y + centre[u], 1e15 * density, right, up)
    return out


def plan() -> dict[str, object]:
    """The plan as it was understood: a hold, a kick of 4 mm/s along x, a release, and pictures after 5 and 20 ms."""
    quantity = lambda value, unit: {"value": value, "unit": unit}  # noqa: E731
    hz = [2 * np.pi * f for f in (20.0, 120.0, 120.0)]
    return {
        "title": "Invented",
        "atoms": {"number": 1e5, "species": "Rb-87", "mass": quantity(MASS, "kg")},
        "trap": {"dipole": {"kind": "harmonic", "strength": 1.0, "frequency": quantity(hz, "rad/s")}},
        "gravity": {"direction": "-z", "value": quantity(constants.g, "m/s^2")},
        "sequence": [
            {"stage": "hold", "name": "hold", "pictures": quantity([], "s"), "duration": quantity(HOLD, "s")},
            {"stage": "kick", "name": "nudge", "velocity": quantity([4e-3, 0.0, 0.0], "m/s")},
            {"stage": "release", "name": "release", "off": ["dipole"], "switch_off": None,
             "pictures": quantity([5e-3, 20e-3], "s"), "duration": quantity(20e-3, "s")},
        ],
    }  # fmt: skip


def told(picture: Picture) -> PictureFigures:
    """The figures of a picture."""
    (x, y), (wide, tall) = picture.moments()
    return PictureFigures(
        picture.name, picture.camera, 1e3 * picture.time, 1e3 * (picture.time - HOLD), picture.atoms,
        float(picture.optical_density.max()), (1e6 * wide, 1e6 * tall), (1e6 * x, 1e6 * y),
    )  # fmt: skip


def contents() -> Contents:
    """All of it in one."""
    kept = track()
    taken, seen, whole = pictures(kept), momenta(), summary(kept)
    orders = {one.stage: {one.part: one.orders} for one in seen}
    stages = tuple(
        dataclasses.replace(stage, end=dataclasses.replace(stage.end, orders=orders.get(n)))
        for n, stage in enumerate(whole.stages)
    )
    whole = dataclasses.replace(
        whole, stages=stages, end=stages[-1].end, pictures=tuple(told(one) for one in taken.values())
    )
    return Contents(
        'title = "Invented µ"\n', plan(), whole, kept, columns(kept), wave(), wave(), taken, seen, flow(kept)
    )
