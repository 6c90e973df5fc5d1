"""How pictures, momentum distributions and the flow lie in `run.h5`: one group each, every dimension with its scale."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, Protocol

import numpy as np

from trapsim.measure.flow import FlowPlane
from trapsim.measure.momentum import Momentum
from trapsim.measure.picture import Picture
from trapsim.measure.views import VIEWS
from trapsim.record.album import Seen
from trapsim.record.series import DIRECTIONS

COUNTED = "from the origin of the ground state"


class Shelf(Protocol):
    """A group of the file that names the dimensions of all it is given."""

    @property
    def attrs(self) -> Any: ...

    def scale(self, name: str, values: Any, units: str, long_name: str) -> None: ...

    def put(
        self, name: str, values: Any, dims: Sequence[str], units: str, long_name: str, *, packed: bool = False
    ) -> Any: ...


def put_picture(group: Shelf, picture: Picture) -> None:
    """What a camera recorded, by row and column."""
    group.attrs.update(
        camera=picture.camera, time=picture.time, right=picture.right, up=picture.up, atoms_per_od=picture.atoms_per_od
    )
    group.scale("y", picture.y, "m", f"middle of the row along {picture.up}, upwards, {COUNTED}")
    group.scale("x", picture.x, "m", f"middle of the column along {picture.right}, to the right, {COUNTED}")
    words = "optical density of the pixel; times atoms_per_od: atoms in it"
    group.put("optical_density", picture.optical_density, ("y", "x"), "1", words, packed=True)


def put_momentum(group: Shelf, seen: Seen) -> None:
    """A momentum distribution and the diffraction orders in it."""
    group.attrs.update(
        stage=seen.stage, part=seen.part, direction=DIRECTIONS[seen.momentum.direction],
        recoil_wave_number=seen.recoil, fallen_velocity=seen.fallen,
    )  # fmt: skip
    group.scale("wave_number", seen.momentum.k, "1/m", "wave number in the lab along the lattice")
    group.put("density", seen.momentum.density, ("wave_number",), "m", "share of the atoms per wave number")
    group.scale("order", np.array([*map(int, seen.orders)], int), "1", "diffraction order, in pairs of photon momenta")
    group.put("share", np.array([*seen.orders.values()], float), ("order",), "1", "share of the atoms in the order")
    motion = np.array([seen.motion[name] for name in seen.orders], float).reshape(-1, 2)
    for name, values, words in zip(("velocity", "velocity_spread"), motion.T, ("mean", "rms spread of"), strict=True):
        group.put(name, values, ("order",), "m/s", f"{words} velocity of the order, fallen_velocity taken off")


def put_flow(group: Shelf, plane: FlowPlane) -> None:
    """Density and velocities in the middle plane."""
    right, up = VIEWS[plane.view]
    group.attrs.update(line_of_sight=plane.view, right=right, up=up)
    place = "in the lab, not counted from the ground state's origin"
    group.scale("y", plane.y, "m", f"coordinate {up}, upwards, {place}")
    group.scale("x", plane.x, "m", f"coordinate {right}, to the right, {place}")
    group.put("density", plane.density, ("y", "x"), "m^-3", "density in the middle plane, for one atom")
    for name, towards, values in (("right", right, plane.right), ("up", up, plane.up)):
        words = f"velocity along {towards} less that of the frame's centre; nowhere known where there are no atoms"
        group.put(f"velocity_{name}", values, ("y", "x"), "m/s", words)


def read_picture(name: str, group: Any) -> Picture:
    """What `put_picture` wrote."""
    told = group.attrs
    return Picture(
        name, told["camera"], float(told["time"]), group["x"][()], group["y"][()], group["optical_density"][()],
        float(told["atoms_per_od"]), told["right"], told["up"],
    )  # fmt: skip


def read_momentum(group: Any) -> Seen:
    """What `put_momentum` wrote."""
    told = group.attrs
    momentum = Momentum(DIRECTIONS.index(told["direction"]), group["wave_number"][()], group["density"][()])
    orders = {str(n): float(share) for n, share in zip(group["order"][()], group["share"][()], strict=True)}
    motion = dict(zip(orders, zip(group["velocity"][()], group["velocity_spread"][()], strict=True), strict=True))
    motion = {name: (float(mean), float(spread)) for name, (mean, spread) in motion.items()}
    recoil, fallen = float(told["recoil_wave_number"]), float(told["fallen_velocity"])
    return Seen(int(told["stage"]), told["part"], recoil, fallen, momentum, orders, motion)


def read_flow(group: Any) -> FlowPlane:
    """What `put_flow` wrote."""
    names = ("x", "y", "density", "velocity_right", "velocity_up")
    return FlowPlane(group.attrs["line_of_sight"], *(group[name][()] for name in names))
