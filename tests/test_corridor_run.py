"""A run that is stopped anywhere, any number of times, ends with the numbers of one that never was."""

from __future__ import annotations

import numpy as np
import pytest

import trapsim
from trapsim.corridor.run import Silent
from trapsim.errors import Interrupted

#: radial at first (x and y alike), through a kick, a ramp that sets all three apart, a pulse and a release
CROSSING = """\
title = "Invented: from a round trap to one with three frequencies"
[atoms]
species = "Rb-87"
number = "5e3"
[trap.dipole]
kind = "harmonic"
frequency = ["80 Hz", "80 Hz", "120 Hz"]
[trap.flash]
kind = "harmonic"
frequency = ["30 Hz", "20 Hz", "10 Hz"]
strength = 0
at = "cloud"
[gravity]
direction = "-z"
[[sequence]]
stage = "kick"
velocity = ["0 mm/s", "0 mm/s", "0.5 mm/s"]
[[sequence]]
stage = "hold"
duration = "1 ms"
[[sequence]]
stage = "ramp"
duration = "2 ms"
shape = "smooth"
to = { "dipole.frequency" = ["80 Hz", "90 Hz", "120 Hz"] }
[[sequence]]
stage = "kick"
velocity = ["1 mm/s", "0 mm/s", "0 mm/s"]
[[sequence]]
stage = "release"
duration = "3 ms"
switch_off = { shape = "linear", duration = "50 us" }
pictures = ["1 ms"]
[[sequence]]
stage = "pulse"
duration = "0.5 ms"
to = { "flash.strength" = 1 }
[[sequence]]
stage = "hold"
name = "drift"
duration = "1 ms"
[numerics]
accuracy = "draft"
threads = 1
[track]
at = ["0.4 ms", "2.2 ms"]
"""
PLAN = trapsim.plan_from_text(CROSSING, "crossing")


@pytest.fixture(scope="module")
def whole() -> trapsim.Run:
    """The run in one go, in memory."""
    return trapsim.run(PLAN)


class CrashError(Exception):
    """What a power cut looks like from inside: nothing is saved any more."""


class Fragile(Silent):
    """Progress that lets the run crash after so many ticks."""

    def __init__(self, ticks: int) -> None:
        self.left = ticks

    def at(self, time: float, stage: str) -> None:
        self.left -= 1
        if self.left < 0:
            raise CrashError


def same(value: object, other: object, path: str = "summary") -> None:
    """The same figures, to 1e-12 of their size or of a lab unit; but for seconds on the wall."""
    if isinstance(value, dict):
        assert value.keys() == other.keys(), path
        for key in value.keys() - {"seconds"}:
            same(value[key], other[key], f"{path}.{key}")
    elif isinstance(value, list):
        assert len(value) == len(other), path
        for i, (one, two) in enumerate(zip(value, other, strict=True)):
            same(one, two, f"{path}[{i}]")
    elif isinstance(value, float):
        assert other == pytest.approx(value, rel=1e-12, abs=1e-12), path
    else:
        assert value == other, path


def equal(run: trapsim.Run, whole: trapsim.Run) -> None:
    """Two runs that saw the same."""
    same(run.summary.as_dict(), whole.summary.as_dict())
    assert list(run.track) == list(whole.track)
    for name in ("time", "stage", *whole.track):
        values = whole.track[name]
        size = np.nanmax(np.abs(values))
        np.testing.assert_allclose(run.track[name], values, rtol=1e-12, atol=1e-12 * size, err_msg=name)
    for view, series in whole.columns.items():
        again = run.columns[view]
        np.testing.assert_allclose(again.times, series.times, rtol=1e-12)
        np.testing.assert_allclose(again.rows, series.rows, rtol=1e-12, atol=1e-18)
        # kept in single precision, in which the last bit is 6e-8
        np.testing.assert_allclose(again.values, series.values, rtol=1e-6, atol=1e-6 * series.values.max())
    values = whole.final.values
    np.testing.assert_allclose(run.final.values, values, rtol=0, atol=1e-11 * np.abs(values).max())


def test_the_plan_crosses_what_it_should(whole):
    words = [leg.axes for leg in whole.summary.numerics.legs]
    assert words[0] == ("radial", "radial", "mirror") and words[-1] == ("mirror", "mirror", "mirror")
    assert whole.summary.numerics.march.steps > 30
    assert whole.summary.numerics.continuity is not None


@pytest.mark.parametrize("every", [pytest.param(1, marks=pytest.mark.slow), 4, 13])
def test_a_run_stopped_at_every_nth_tick_ends_undisturbed(whole, tmp_path, every):
    stops = 0
    while True:
        asked = iter([False] * (every - 1) + [True] * 10**6)
        try:
            run = trapsim.run(PLAN, tmp_path / "r", stop=lambda asked=asked: next(asked))
        except Interrupted as told:
            assert "the same command goes on from there" in str(told)
            stops += 1
            assert stops < 1000
        else:
            break
    assert stops >= whole.summary.numerics.march.steps // every
    equal(run, whole)
    equal(trapsim.open_run(tmp_path / "r"), whole)


@pytest.mark.parametrize("ticks", [0, 1, 2, 20])
def test_a_run_that_crashes_goes_on_from_its_last_checkpoint(whole, tmp_path, ticks):
    # here only the ground state has been kept: the first checkpoint in the march comes after two seconds
    with pytest.raises(CrashError):
        trapsim.run(PLAN, tmp_path / "r", progress=Fragile(ticks))
    assert (tmp_path / "r" / "checkpoint.npz").exists()
    equal(trapsim.run(PLAN, tmp_path / "r"), whole)


@pytest.mark.slow
def test_checkpoints_at_every_tick_change_nothing(whole, tmp_path, monkeypatch):
    monkeypatch.setattr("trapsim.corridor.run.FIRST", 0.0)
    monkeypatch.setattr("trapsim.corridor.run.PATIENCE", 0.0)
    for ticks in (3, 8, 15):
        with pytest.raises(CrashError):
            trapsim.run(PLAN, tmp_path / "r", progress=Fragile(ticks))
    equal(trapsim.run(PLAN, tmp_path / "r"), whole)


def test_a_run_in_memory_keeps_nothing_when_it_is_stopped(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    with pytest.raises(Interrupted, match="nothing was kept"):
        trapsim.run(PLAN, stop=lambda: True)
    assert not list(tmp_path.iterdir())


def test_progress_is_told_where_a_run_is_taken_up(tmp_path):
    class Heard(Silent):
        def __init__(self) -> None:
            self.times: list[float] = []
            self.total = 0.0

        def begin(self, total: float) -> None:
            self.total = total

        def at(self, time: float, stage: str) -> None:
            self.times.append(time)

    first, second = Heard(), Heard()
    with pytest.raises(Interrupted):
        trapsim.run(PLAN, tmp_path / "r", progress=first, stop=lambda: len(first.times) > 20)
    trapsim.run(PLAN, tmp_path / "r", progress=second)
    assert first.total == second.total == pytest.approx(7.5e-3, rel=1e-12)
    assert first.times[0] == 0 and second.times[0] == first.times[-1] and second.times[-1] == first.total
    assert first.times == sorted(first.times) and second.times == sorted(second.times)
