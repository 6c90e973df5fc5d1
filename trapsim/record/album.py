"""The album: pictures of the cameras, momentum distributions and diffraction orders, kept until the run is over."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from trapsim.cloud.cloud import Cloud
from trapsim.evolve.state import Leg
from trapsim.measure.camera import Camera
from trapsim.measure.columns import ColumnViews
from trapsim.measure.momentum import Momentum, momentum, order_motion, order_shares
from trapsim.measure.picture import Picture, pixel_edges, pixel_means, resonant_cross_section
from trapsim.record.series import Array
from trapsim.space.space import Space
from trapsim.terms.lattice import Lattice

#: raster samples per axis point behind a picture
FINER = 4
#: turned views leave out detail shorter than this share of a pixel
UNRESOLVED = 6


@dataclass(frozen=True)
class Shot:
    """A picture to be taken.

    Parameters
    ----------
    name : str
        "<camera>_<stage>_<time>".
    camera : str
    time : float
        s, from the start of the sequence.
    """

    name: str
    camera: str
    time: float


@dataclass(frozen=True)
class Seen:
    """A momentum distribution at the end of a stage.

    Parameters
    ----------
    stage : int
    part : str
        The lattice along whose axis it is.
    recoil : float
        Wave number of one photon of that lattice, 1/m.
    fallen : float
        Velocity that forces and kicks have given since the lattice first acted, m/s.
    momentum : Momentum
    orders : mapping of str to float
        Share of the atoms in each.
    motion : mapping of str to (float, float)
        Mean velocity and rms velocity spread of each order along the lattice, m/s, `fallen` taken off.
    """

    stage: int
    part: str
    recoil: float
    fallen: float
    momentum: Momentum
    orders: Mapping[str, float]
    motion: Mapping[str, tuple[float, float]]


class Album:
    """Takes pictures and looks at momenta when it is time.

    Parameters
    ----------
    cameras : mapping of str to Camera
    shots : sequence of Shot
    atoms : float
        Number at the start.
    origin : (3,)
        Positions are counted from here, m.
    """

    def __init__(
        self, *, cameras: Mapping[str, Camera], shots: Sequence[Shot], atoms: float, origin: Array
    ) -> None:
        self.cameras = cameras
        self.shots = tuple(shots)
        self.atoms = atoms
        self.origin = np.asarray(origin)
        self.pictures: dict[str, Picture] = {}
        self.seen: list[Seen] = []
        self._views: ColumnViews | None = None

    def look(self, cloud: Cloud, leg: Leg, *, centre: Array, stage_ends: bool, fallen: Mapping[str, Array]) -> None:
        """Take the pictures that are due at the cloud's time; at the end of a stage, look at the momenta.

        Parameters
        ----------
        cloud : Cloud
        leg : Leg
        centre : (3,)
            Of mass, m.
        stage_ends : bool
        fallen : mapping of str to (3,)
            Velocities from forces and kicks since each lattice first acted.
        """
        for shot in self.shots:
            if shot.time == cloud.time and shot.name not in self.pictures:
                self.pictures[shot.name] = self._take(shot, cloud, centre)
        if stage_ends:
            for name, part in leg.interval.parts.items():
                if isinstance(part, Lattice) and name in fallen and _has_axis(cloud.space, part.direction):
                    fell = float(fallen[name][part.direction])
                    spread = momentum(cloud, part.direction)
                    orders = order_shares(spread, part, fallen=fell)
                    motion = order_motion(spread, part, fallen=fell)
                    self.seen.append(Seen(leg.stage, name, part.k, fell, spread, orders, motion))

    def orders(self, stage: int) -> dict[str, dict[str, float]] | None:
        """Populations by lattice at the end of a stage; None where no lattice has acted."""
        found = {s.part: dict(s.orders) for s in self.seen if s.stage == stage}
        return found or None

    def _take(self, shot: Shot, cloud: Cloud, centre: Array) -> Picture:
        camera = self.cameras[shot.camera]
        along = "xyz".index(camera.view)
        right, up = ("xyz".index(d) for d in camera.axes)
        if self._views is None or self._views.seen is not cloud.space:
            self._views = ColumnViews(cloud.space, finer=FINER)
        cosine, sine = np.cos(camera.turn), np.sin(camera.turn)
        where = centre if camera.follow else np.asarray(camera.aim)
        middle = (where[right] * cosine - where[along] * sine, where[up])
        if camera.turn:
            finest = camera.object_pixel / UNRESOLVED
            column = self._views.see_turned(cloud, camera.view, camera.turn, finest=finest)
        else:
            column = self._views.see(cloud, (camera.view,))[camera.view]
        edges = pixel_edges(camera, middle)
        sigma = resonant_cross_section(camera.wavelength)
        density = self.atoms * pixel_means(column, edges)
        start = (self.origin[right] * cosine - self.origin[along] * sine, self.origin[up])
        x, y = ((e[1:] + e[:-1]) / 2 - s for e, s in zip(edges, start, strict=True))
        words = "xyz"[right] if not camera.turn else f"{'xyz'[right]} turned by {np.degrees(camera.turn):.4g} deg"
        return Picture(
            shot.name, shot.camera, cloud.time, x, y, sigma * density, camera.object_pixel**2 / sigma, words, "xyz"[up]
        )

    # checkpoints

    def arrays(self) -> tuple[dict[str, Array], dict[str, Any]]:
        """All that was seen so far, as arrays and plain attributes, for a checkpoint."""
        arrays: dict[str, Array] = {}
        for i, p in enumerate(self.pictures.values()):
            arrays |= {f"picture{i}_od": p.optical_density, f"picture{i}_x": p.x, f"picture{i}_y": p.y}
        for i, s in enumerate(self.seen):
            arrays |= {f"momentum{i}_k": s.momentum.k, f"momentum{i}_density": s.momentum.density}
        told = {
            "pictures": [
                [p.name, p.camera, p.time, p.atoms_per_od, p.right, p.up] for p in self.pictures.values()
            ],
            "seen": [
                [s.stage, s.part, s.recoil, s.fallen, s.momentum.direction, dict(s.orders), dict(s.motion)]
                for s in self.seen
            ],
        }  # fmt: skip
        return arrays, told

    def restore(self, arrays: Mapping[str, Array], told: Mapping[str, Any]) -> None:
        """Take up what `arrays` kept."""
        self.pictures = {
            name: Picture(
                name, camera, time, *(arrays[f"picture{i}_{part}"] for part in ("x", "y", "od")), per_od, right, up
            )
            for i, (name, camera, time, per_od, right, up) in enumerate(told["pictures"])
        }
        self.seen = [
            Seen(
                stage, part, recoil, fallen,
                Momentum(direction, arrays[f"momentum{i}_k"], arrays[f"momentum{i}_density"]), orders,
                {name: tuple(pair) for name, pair in motion.items()},
            )
            for i, (stage, part, recoil, fallen, direction, orders, motion) in enumerate(told["seen"])
        ]  # fmt: skip


def _has_axis(space: Space, direction: int) -> bool:
    axis = space.axis(direction)
    return len(axis.covers) == 1 and not axis.uniform
