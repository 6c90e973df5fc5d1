"""Half an axis does where the cloud is even: the same answers, to rounding."""

from __future__ import annotations

import numpy as np
import pytest

import trapsim
from trapsim.space.axes import Mirror, Radial, Wave
from trapsim.space.space import Space


def even(x: np.ndarray) -> np.ndarray:
    """A chirped Gaussian; its spectrum is far below rounding at the highest wave number."""
    return np.exp(-(0.5 - 0.3j) * x**2)


@pytest.mark.parametrize("others", ["wave", "mirror", "radial"])
def test_a_mirror_axis_transforms_as_the_wave_axis_with_both_sides(others: str) -> None:
    half, n = 7.0, 24
    rest = {"wave": [Wave((1,), 18, 6.0), Wave((2,), 20, 6.0)], "mirror": [Mirror((1,), 9, 6.0), Mirror((2,), 10, 6.0)],
            "radial": [Radial((1, 2), 16, 6.0)]}[others]  # fmt: skip
    mirror, wave = Space([Mirror((0,), n, half), *rest]), Space([Wave((0,), 2 * n, half), *rest])
    a, b = (s.array(np.prod(np.broadcast_arrays(*(even(x) for x in s.coordinates())), axis=0)) for s in (mirror, wave))
    for space, samples in ((mirror, a), (wave, b)):
        space.forward(samples)
        samples *= np.exp(-0.1j * space.along(space.dim(0), space.axis(0).k2(0)) - 0.05 * space.along(
            space.dim(0), space.axis(0).k2(0))) / space.round_trip  # fmt: skip
        space.inverse(samples)
    d = mirror.dim(0)
    # exact: cosines are the even plane waves
    assert np.abs(a - np.take(b, range(n, 2 * n), axis=d)).max() < 1e-13 * np.abs(b).max()
    if others == "wave":
        assert mirror.unfolded(a)[0] == pytest.approx(b, abs=1e-13)


PLAN = """
[atoms]
species = "Rb-87"
number = "2e4"
[trap.dipole]
kind = "harmonic"
frequency = ["40 Hz", "90 Hz", "130 Hz"]
[gravity]
[numerics]
accuracy = "draft"
axes = {axes}
threads = 1
[[sequence]]
stage = "kick"
velocity = ["1 mm/s", "0 mm/s", "2 mm/s"]
[[sequence]]
stage = "hold"
duration = "2 ms"
[[sequence]]
stage = "release"
duration = "6 ms"
"""


def test_a_run_on_mirror_axes_is_the_run_on_wave_axes() -> None:
    runs = [trapsim.run(trapsim.plan_from_text(PLAN.format(axes=axes))) for axes in ('"auto"', '"full"')]
    mirror, wave = (r.summary for r in runs)
    assert mirror.numerics.axes == ("mirror",) * 3 and wave.numerics.axes == ("wave",) * 3
    assert mirror.numerics.points == wave.numerics.points
    # exact: one equation on half the points; a kicked, falling cloud is even in the frame that goes with it
    for name in ("width_um", "expansion_rate_mm_per_s", "velocity_spread_mm_per_s"):
        assert getattr(mirror.end, name) == pytest.approx(getattr(wave.end, name), rel=1e-10, abs=0)
    assert mirror.end.centre_um == pytest.approx(wave.end.centre_um, rel=1e-10)
    assert mirror.ground.chemical_potential_hz == pytest.approx(wave.ground.chemical_potential_hz, rel=1e-11)
    for view in "xyz":
        a, b = (r.columns[view].values for r in runs)
        assert np.abs(a - b).max() < 1e-6 * b.max()


@pytest.mark.slow
def test_what_breaks_the_evenness_moves_the_cloud_to_whole_axes() -> None:
    light = """
[trap.light]
kind = "lattice"
wavelength = "1064 nm"
depth = "4 Er"
strength = 0
phase = "{phase} rad"
"""
    words = {}
    for phase in (0.0, 0.4):
        plan = PLAN.split("[gravity]")[0] + light.format(phase=phase) + """
[numerics]
accuracy = "draft"
threads = 1
[[sequence]]
stage = "release"
duration = "1 ms"
[[sequence]]
stage = "pulse"
duration = "20 us"
to = { "light.strength" = 1 }
"""
        legs = trapsim.run(trapsim.plan_from_text(plan)).summary.numerics.legs
        words[phase] = [leg.axes[0] for leg in legs]
    assert words == {0.0: ["mirror", "mirror"], 0.4: ["mirror", "wave"]}
