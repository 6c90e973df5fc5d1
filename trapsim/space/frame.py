"""The frame: how grid coordinates map to the lab.

x_j = b_j xi_j + X_j and, with y = x - X and q = hbar/m,
psi = (b_x b_y b_z)^(-1/2) phi(xi) exp{ (i/q) sum_j [ bdot_j y_j^2/(2 b_j) + Xdot_j y_j ] }.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

Array = np.ndarray


def _three(value: float) -> Array:
    return np.full(3, value)


@dataclass(frozen=True)
class Frame:
    """Scale b and its rate, centre X and its velocity, per direction.

    Parameters
    ----------
    b, bdot : (3,)
        Scale, and its rate in 1/s.
    X, Xdot : (3,)
        Centre in m, and its velocity in m/s.
    """

    b: Array = field(default_factory=lambda: _three(1.0))
    bdot: Array = field(default_factory=lambda: _three(0.0))
    X: Array = field(default_factory=lambda: _three(0.0))
    Xdot: Array = field(default_factory=lambda: _three(0.0))

    @property
    def B(self) -> float:
        """The volume scale: density in the lab is |phi|^2/B."""
        return float(np.prod(self.b))

    def lab(self, xi: Array, j: int) -> Array:
        """Lab coordinate of the grid coordinate xi along direction j, m."""
        return self.b[j] * xi + self.X[j]
