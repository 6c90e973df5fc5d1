"""The camera: what it records of a column density, pixel by pixel."""

from __future__ import annotations

from dataclasses import dataclass

from trapsim.errors import Complaint
from trapsim.fields import ORIGIN, Triple, entry
from trapsim.measure.views import VIEWS

#: m; in numbers much larger than this a pixel is lost
FARTHEST = 10.0


@dataclass(frozen=True, kw_only=True)
class Camera:
    """One camera of the lab, ideal: resonant light, no noise, no blur."""

    view: str = entry("choice", "the line of sight", choices=("x", "y", "z"))
    turn: float = entry(
        "angle", "turns the line of sight about the picture's upward direction, towards the picture's right",
        default=0.0,
    )
    pixel: float = entry("length", "side of a pixel on the sensor", above=0.0, example='"6.5 um"')
    magnification: float = entry("number", "sensor over atoms", above=0.0, example="2.0")
    size: tuple[int, int] = entry(
        "whole", "pixels to the right and upwards", count=2, low=1, default=(512, 512), example="512"
    )
    follow: bool = entry("flag", "keeps the cloud's centre of mass in the middle", default=False)
    aim: Triple = entry("length", "what is in the middle, in the lab, unless it follows", default=ORIGIN, count=3)
    wavelength: float | None = entry(
        "length", "of the resonant probe; by default the probe line of the species", default=None, above=0.0,
        example='"780.24 nm"',
    )

    def complaints(self, place: str) -> list[Complaint]:
        """What does not fit together in its entries."""
        if any(abs(a) > FARTHEST for a in self.aim):
            return [Complaint(f"{place}.aim", f"{max(self.aim, key=abs):.4g} m",
                              f"no camera of a lab looks further off than {FARTHEST:.0f} m",
                              'write it like aim = ["0 um", "0 um", "-500 um"]')]
        if self.follow and self.aim != ORIGIN:
            return [Complaint(f"{place}.aim", "", "a camera that follows the cloud has no aim of its own",
                              "leave aim out, or follow = false")]
        return []

    @property
    def object_pixel(self) -> float:
        """Side of a pixel at the atoms, m."""
        return self.pixel / self.magnification

    @property
    def axes(self) -> tuple[str, str]:
        """The lab directions that point right and up; with a turn, right is turned too."""
        return VIEWS[self.view]
