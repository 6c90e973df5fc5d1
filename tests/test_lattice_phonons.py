"""Sound in a uniform gas: what a weak imprint of phase sets going.

A flash of a weak lattice of spacing d multiplies the wave function by exp(+i phi0 cos(2 pi x/d)), phi0 = V0 tau/(2 hbar).
N. Bogoliubov (1947): dn/n = 2 phi0 (e0/eps) sin(eps t/hbar) cos(2 pi x/d), eps^2 = e0 (e0 + 2 g n), e0 = hbar^2 k^2/2m.
"""

from __future__ import annotations

from math import pi, sin, sqrt

import numpy as np
import pytest

import light
import motion
import trapsim
from reference import units
from trapsim.prepare.setup import prepare

D, LENGTH, FLASH, PHI = 10e-6, 20e-6, 2e-6, 0.01


def imprinted(axis: str, number: float, times: list[float]) -> trapsim.Plan:
    """A gas that is uniform in all three directions, flashed."""
    depth = 2 * PHI / FLASH / (2 * pi)
    lattice = f'[trap.light]\nkind = "lattice"\naxis = "{axis}"\nspacing = "{D} m"\ndepth = "{depth!r} Hz"\nstrength = 0\n'
    return light.plain(
        motion.stage("pulse", FLASH, to='{ "light.strength" = 1 }'), motion.stage("hold", times[-1]),
        parts=lattice, number=number, accuracy="fine", numerics='extent = ["20 um", "20 um", "20 um"]',
        at=[FLASH + t for t in times[:-1]],
    )  # fmt: skip


@pytest.mark.parametrize(
    ("axis", "number"), [("x", 1e5), ("y", 1e5), ("z", 1e5), ("x", 1e4), ("x", 1.0)], ids=lambda v: f"{v}"
)
def test_an_imprint_of_phase_rings_at_bogoliubovs_frequency(axis: str, number: float) -> None:
    q, j = units.hbar / motion.RB, "xyz".index(axis)
    e0 = q * (2 * pi / D) ** 2 / 2
    gn = 4 * pi * q * 100.4 * units.A0 * number / LENGTH**3
    eps = sqrt(e0 * (e0 + 2 * gn))
    times = [share * pi / eps for share in (0.1, 0.5, 1.0, 1.5, 2.2)]
    setup = prepare(imprinted(axis, number, times))
    clouds = [light.whole(t.state.cloud) for t in motion.play(setup, motion.begin(setup)) if t.reason != "step"]
    assert clouds[-1].space.words().count("uniform") == 2
    scale = 2 * PHI * e0 / eps
    for t, cloud in zip(times, clouds[-len(times):], strict=True):
        density = np.ravel(cloud.density())
        x = cloud.frame.lab(cloud.space.axis(j).points, j)
        swing = 2 * np.mean(density * np.cos(2 * pi * x / D)) / density.mean()
        # frequency, amplitude and sign; the imprint itself lasts FLASH and acts as from its middle
        assert swing == pytest.approx(scale * sin(eps * (t + FLASH / 2)), abs=1e-3 * scale)
        assert 2 * abs(np.mean(density * np.sin(2 * pi * x / D))) / density.mean() < 1e-8
