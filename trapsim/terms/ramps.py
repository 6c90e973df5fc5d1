"""The shapes of a change in time: a share from 0 (as it was) to 1 (as it will be)."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

Value = float | tuple[float, ...]


def linear(s: float, sharpness: float) -> float:
    return s


def smooth(s: float, sharpness: float) -> float:
    """Zero slope at both ends: s^2 (3 - 2 s)."""
    return s * s * (3 - 2 * s)


def exponential(s: float, sharpness: float) -> float:
    """1 - exp(-t/tau), sharpness = duration/tau; what is left at s = 1 is left."""
    return -math.expm1(-sharpness * s)


SHAPES = {"linear": linear, "smooth": smooth, "exponential": exponential}
#: the integrals of the shapes from 0 to s
INTEGRALS = {
    "linear": lambda s, sharpness: s**2 / 2,
    "smooth": lambda s, sharpness: s**3 - s**4 / 2,
    "exponential": lambda s, sharpness: s + math.expm1(-sharpness * s) / sharpness,
}


@dataclass(frozen=True)
class Course:
    """A number (or three) that goes from one value to another over a stretch of time.

    Parameters
    ----------
    start, stop : float
        s; only times inside are ever asked for.
    before, after : float or tuple
    shape : str
        A name of `SHAPES`.
    sharpness : float
        Duration over time constant, for the exponential.
    """

    start: float
    stop: float
    before: Value
    after: Value
    shape: str = "linear"
    sharpness: float = 1.0

    def at(self, t: float) -> Value:
        """The value at a time inside; time is a fraction of the stretch, so the ends are exact."""
        share = SHAPES[self.shape]((t - self.start) / (self.stop - self.start), self.sharpness)
        if isinstance(self.before, tuple):
            before = np.asarray(self.before)
            return tuple(before + share * (np.asarray(self.after) - before))
        return self.before + share * (self.after - self.before)

    def gained(self, t: float) -> float:
        """The integral of the value from the start until t."""
        length = self.stop - self.start
        s = (t - self.start) / length
        done = length * INTEGRALS[self.shape](s, self.sharpness)
        return self.before * (t - self.start) + (self.after - self.before) * done

    def left_over(self) -> float:
        """The share of the change that has not happened at its end."""
        return 1.0 - SHAPES[self.shape](1.0, self.sharpness)
