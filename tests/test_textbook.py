"""The textbook program that scripts/bench measures against is right, and the bench's pieces find what they should.

A peer that were wrong, or slower than it needs to be for its accuracy, would make the comparison worthless. What it is
held to comes from closed forms and independent calculations, not from trapsim.
"""

from __future__ import annotations

import json
from math import pi, sqrt
from pathlib import Path

import numpy as np
import pytest
from scipy import constants

import bench
import bench_jobs
import textbook
from reference.flights import FREE_IN_LAB
from reference.gaussian import width
from reference.tables import ISOTROPIC, Isotropic

#: natural units: q = 1
OMEGA = (1.0, 2.0, 2.5)
LENGTHS = (12.0, 9.0, 8.0)


def test_an_ideal_gas_relaxes_to_the_oscillator_ground_state() -> None:
    """mu = sum w/2 and widths sqrt(q/2w): closed form. An error of order eps in u is one of eps^2 in mu."""
    grid = textbook.Grid((24, 24, 24), LENGTHS)
    u, mu, _ = textbook.relax(textbook.Cloud(1.0, OMEGA, 0.0), grid, 1e-5)
    assert np.sum(u**2) * grid.cell == pytest.approx(1, abs=1e-12)
    assert mu == pytest.approx(sum(OMEGA) / 2, rel=1e-9)
    assert grid.widths(u) == pytest.approx([width(0, omega=w) for w in OMEGA], rel=1e-5)


@pytest.mark.parametrize("record", [r for r in ISOTROPIC if r.beta in (10, 1000)], ids=lambda r: f"beta {r.beta:g}")
def test_an_interacting_cloud_relaxes_to_the_known_state(record: Isotropic) -> None:
    """Chemical potential and width of an isotropic cloud: independent calculation, named in the table."""
    cloud = textbook.Cloud(1.0, (1.0, 1.0, 1.0), record.beta)
    grid = textbook.Grid((32, 32, 32), (13.0, 13.0, 13.0))
    u, mu, _ = textbook.relax(cloud, grid, 2e-6)
    assert mu == pytest.approx(record.mu, rel=1e-6)
    assert grid.widths(u) == pytest.approx([record.width] * 3, rel=1e-5)


def test_an_ideal_gas_spreads_by_the_gaussian_law() -> None:
    """Closed form: sqrt(q/2w) sqrt(1 + w^2 t^2). Without a mean field any number of steps is exact."""
    cloud = textbook.Cloud(1.0, OMEGA, 0.0)
    grid = textbook.Grid((64, 64, 64), (26.0, 26.0, 26.0))
    start = np.ones(grid.shape)
    for w, x in zip(OMEGA, grid.x, strict=True):
        start = start * (w / pi) ** 0.25 * np.exp(-w * x**2 / 2)
    psi = textbook.fly(cloud, grid, start, 1.2, 3)
    assert np.sum(np.abs(psi) ** 2) * grid.cell == pytest.approx(1, abs=1e-9)
    assert grid.widths(psi) == pytest.approx([width(1.2, omega=w) for w in OMEGA], rel=1e-8)


@pytest.mark.slow
def test_a_released_cloud_expands_as_the_full_equation_says() -> None:
    """1e5 Rb-87 at 20/150/150 Hz, 5 ms: independent calculation (oscillator functions in stretched coordinates)."""
    record = next(r for r in FREE_IN_LAB if r.frequency[0] == 20)
    atoms = textbook.release_cloud()
    cloud = textbook.Cloud(atoms.q, tuple(2 * pi * f for f in record.frequency), atoms.c)
    setting = textbook.Setting((40, 72, 72), (60e-6, 40e-6, 40e-6), residual=1e-4, step=100e-6)
    told = textbook.play(cloud, setting, record.time)
    assert told["width_um"] == pytest.approx([1e6 * w for w in record.width], rel=5e-4)


def test_the_cloud_it_plays_is_that_of_the_plan() -> None:
    """Mass 86.909180531 u (AME2020) and a = 100.4 Bohr radii, 1e5 atoms: c = 4 pi q a N, and the plan's own numbers."""
    cloud, plan = textbook.release_cloud(), bench_jobs.release_plan({}, 6)
    q = constants.hbar / plan.atoms.mass
    assert cloud.q / q == pytest.approx(1, rel=1e-9)
    assert cloud.c / (4 * pi * q * plan.atoms.scattering_length * plan.atoms.number) == pytest.approx(1, rel=1e-9)
    assert cloud.omega == pytest.approx(plan.trap["dipole"].frequency)


def test_what_is_called_converged_is() -> None:
    """Widths after 20 ms from 100 Hz, 1e5 atoms: independent calculation (radial solver), printed to 1e-7."""
    record = next(r for r in FREE_IN_LAB if r.frequency[0] == 100 and r.time == 20e-3)
    found = bench_jobs.converged(bench_jobs.small_plan)
    assert bench_jobs.error_of(found, [1e6 * w for w in record.width]) < 3e-7


def test_a_step_is_compared_with_the_pair_of_the_whole_grid() -> None:
    """Each kind of axis that there is gives one row; the grid it stands for is n^3 (closed form: halves of it)."""
    bench.steps_measured.cache_clear()
    rows = bench.steps_measured((8,), 1)
    shapes = {row["axes"]: row["points"] for row in rows}
    assert shapes["wave"] == "8 x 8 x 8" and shapes["mirror"] == "4 x 4 x 4" and shapes["radial"] == "4 x 8"
    for row in rows:
        seconds = row["measured"]["seconds"]
        assert row["step / own pair"] * row["own pair / bare n^3 pair"] == pytest.approx(seconds["step"] / seconds["whole"])


def test_the_bare_pair_is_a_transform_there_and_back() -> None:
    """numpy's transform is the outside source: the pair gives back what it was given."""
    pair = bench.BarePair((4, 6, 5), np.dtype(complex), 1)
    given = np.random.default_rng(1).normal(size=(4, 6, 5)) + 0j
    pair.array[...] = given
    pair.there.execute()
    assert pair.array == pytest.approx(np.fft.fftn(given))
    pair.array[...] = given
    pair()
    assert pair.array == pytest.approx(given * given.size)


def test_a_longer_flight_costs_the_peer_a_larger_box() -> None:
    """By hand: twice the widths along two axes and twice the time are 8 N log 4N / log N."""
    told = {"points": [10, 10, 10], "ground_seconds": 1.0, "march_seconds": 3.0}
    once = bench.at_other_time(told, [1, 1, 1], [1, 1, 1], 1)
    assert once == pytest.approx(4)
    longer = bench.at_other_time(told, [1, 1, 1], [1, 2, 2], 2)
    assert longer == pytest.approx((1 + 6) * 4 * np.log(4000) / np.log(1000))


@pytest.mark.slow
def test_memory_is_seen_in_a_process_of_its_own() -> None:
    """Whoever has written to an array has had that much memory: arithmetic."""
    before = bench_jobs.peak_memory()
    held = np.ones(before // 8 + 25_000_000)
    after = bench_jobs.peak_memory()
    assert 0.98 * held.nbytes < after < 1.02 * (before + held.nbytes)


def test_tables_are_markdown() -> None:
    """Small numbers keep their power of ten; sqrt(2) to three digits is 1.41."""
    text = bench.table([{"a": sqrt(2), "b": 2e-6, "c": "x"}])
    assert text.splitlines() == ["| a | b | c |", "| --- | --- | --- |", "| 1.41 | 2.0e-06 | x |"]


@pytest.mark.slow
def test_the_quick_bench_writes_its_figures(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    """One section by name; an unknown name is refused with the list."""
    target = tmp_path / "figures.json"
    assert bench.main(["--quick", "--json", str(target), "memory"]) == 0
    told = json.loads(target.read_text())
    assert set(told) == {"date", "machine", "quick", "memory"}
    assert "| points |" in capsys.readouterr().out
    assert all(0.3 < row["used / predicted"] < 4 for row in told["memory"])
    with pytest.raises(SystemExit):
        bench.main(["nonsense"])
    assert "parallel" in capsys.readouterr().err
