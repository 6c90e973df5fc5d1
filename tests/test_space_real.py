"""Real samples in real arithmetic: the same spectra as those of complex samples."""

from __future__ import annotations

from itertools import product

import numpy as np
import pytest

from trapsim.space.axes import Axis, Mirror, Radial, Wall, Wave
from trapsim.space.real import RealPair
from trapsim.space.space import Space

FAMILY = {"wave": Wave, "mirror": Mirror, "wall": Wall}
SIZES = (6, 7, 10)


def spaces() -> dict[str, list[Axis]]:
    out: dict[str, list[Axis]] = {
        " ".join(kinds): [FAMILY[kind]((j,), SIZES[j], 1.0 + 0.1 * j) for j, kind in enumerate(kinds)]
        for kinds in product(FAMILY, repeat=3)
    }
    for kind, cls in FAMILY.items():
        out[f"radial {kind}"] = [Radial((0, 1), 6, 1.0), cls((2,), 9, 1.2)]
    out["uniform wave uniform"] = [Wave((0,), 1, 1.0), Wave((1,), 8, 1.0), Wave((2,), 1, 1.0)]
    out["wave uniform uniform"] = [Wave((0,), 8, 1.0), Wave((1,), 1, 1.0), Wave((2,), 1, 1.0)]
    return out


@pytest.mark.parametrize("threads", [1, 2])
@pytest.mark.parametrize("axes", spaces().values(), ids=spaces().keys())
def test_real_arithmetic_gives_what_complex_arithmetic_gives(
    axes: list[Axis], threads: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    if threads > 1:
        # slabs of a few points, as on the largest grids
        monkeypatch.setattr("trapsim.space.pieces.ALONE", 0)
        monkeypatch.setattr("trapsim.space.pieces.PIECE", 80)
    space, rng = Space(axes, threads=threads), np.random.default_rng(4)
    samples = rng.normal(size=space.shape)
    k2 = sum(space.along(d, v) for d, v in enumerate(space.per_axis([1.0, 1.0, 1.0], "k2")))
    factor = 1 / (1 + 0.1 * k2)
    spectrum = space.forward(space.array(samples))
    expected = space.inverse(space.array(spectrum * factor))
    pair = RealPair(space)
    before = samples.copy()
    found = pair(samples, factor[pair.kept])
    np.testing.assert_allclose(found, expected.real, atol=1e-13 * np.abs(expected).max())
    assert found.dtype == np.float64 and (samples == before).all()
