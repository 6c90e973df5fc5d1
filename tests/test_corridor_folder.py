"""The result folder: whose it is, who works in it, and what is taken away again."""

from __future__ import annotations

import json
import os

import numpy as np
import pytest

import trapsim
from broken.table import GOOD
from trapsim.corridor import folder as place
from trapsim.corridor.bounds import memory_there, ordinary_numbers
from trapsim.errors import FileTrouble, PlanError

PLAN = trapsim.plan_from_text(GOOD, "push")
OTHER = trapsim.plan_from_text(GOOD, "push", {"atoms.number": "2e4"})


def test_a_folder_that_nothing_was_put_into_is_taken_away_with_those_made_for_it(tmp_path):
    (tmp_path / "old").mkdir()
    with place.locked(tmp_path / "old" / "new" / "newer"):
        assert (tmp_path / "old" / "new" / "newer" / ".lock").exists()
    assert list((tmp_path / "old").iterdir()) == []


def test_a_folder_made_by_somebody_else_meanwhile_stays(tmp_path):
    with place.locked(tmp_path / "results" / "a"):
        (tmp_path / "results" / "b").mkdir()
    assert [p.name for p in (tmp_path / "results").iterdir()] == ["b"]


def test_a_folder_with_a_result_keeps_its_lock_file(tmp_path):
    with place.locked(tmp_path / "r"):
        place.mark(tmp_path / "r", PLAN)
    assert {p.name for p in (tmp_path / "r").iterdir()} == {".lock", "plan.json"}


def test_a_folder_that_is_deleted_meanwhile_is_no_trouble(tmp_path):
    with place.locked(tmp_path / "r"):
        (tmp_path / "r" / ".lock").unlink()
        (tmp_path / "r").rmdir()
    assert not (tmp_path / "r").exists()


def test_only_one_at_a_time_works_in_a_folder(tmp_path):
    with place.locked(tmp_path):
        with pytest.raises(FileTrouble, match="another run is at work"), place.locked(tmp_path):
            pytest.fail("two at a time")
        with pytest.raises(FileTrouble, match="another run is at work"), place.locked(tmp_path):
            pytest.fail("the refusal must not free the lock")
    with place.locked(tmp_path):
        pass
    assert list(tmp_path.iterdir()) == []


def test_a_marked_folder_belongs_to_its_plan(tmp_path):
    place.mark(tmp_path, PLAN)
    place.claim(tmp_path, PLAN)
    with pytest.raises(PlanError) as refused:
        place.claim(tmp_path, OTHER)
    assert "atoms.number: 10000.0 / 20000.0" in str(refused.value)
    place.claim(tmp_path, OTHER, force=True)


def test_a_result_of_other_physics_is_not_taken_for_one_of_this(tmp_path, monkeypatch):
    place.mark(tmp_path, PLAN)
    before = place.PHYSICS_VERSION
    monkeypatch.setattr(place, "PHYSICS_VERSION", before + 96)
    with pytest.raises(PlanError, match=f"physics: {before} / {before + 96}"):
        place.claim(tmp_path, PLAN)


def test_what_a_kill_left_behind_is_no_stranger(tmp_path):
    for name in (".lock", "plan.json.part", "checkpoint.npz.part"):
        (tmp_path / name).write_text("")
    place.claim(tmp_path, PLAN)
    (tmp_path / "data.csv").write_text("mine")
    with pytest.raises(PlanError, match="other things in it"):
        place.claim(tmp_path, PLAN)


def test_only_a_complete_result_of_this_plan_is_finished(tmp_path):
    def told(**change: str) -> bool:
        summary = {"status": "complete", "key": PLAN.key} | change
        (tmp_path / "summary.json").write_text(json.dumps(summary))
        return place.is_finished(tmp_path, PLAN)

    assert not place.is_finished(tmp_path, PLAN)
    place.mark(tmp_path, PLAN)
    (tmp_path / "run.h5").write_text("")
    assert told()
    assert not told(status="stopped") and not told(status="interrupted") and not told(key=OTHER.key)
    (tmp_path / "summary.json").write_text("{")
    assert not place.is_finished(tmp_path, PLAN)
    assert told()
    (tmp_path / "checkpoint.npz").write_text("")
    assert not place.is_finished(tmp_path, PLAN)


def test_clearing_takes_out_results_and_nothing_else(tmp_path):
    (tmp_path / "figures").mkdir()
    for name in ("run.h5", "summary.json", "track.csv", "figures/flight.png", "figures/mine.svg", "notes.txt"):
        (tmp_path / name).write_text("")
    place.clear(tmp_path)
    assert {p.relative_to(tmp_path).as_posix() for p in tmp_path.rglob("*") if p.is_file()} == {
        "figures/mine.svg", "notes.txt",
    }  # fmt: skip
    (tmp_path / "figures" / "album.png").mkdir()
    with pytest.raises(FileTrouble, match="--out"):
        place.clear(tmp_path)


def test_the_default_folder_is_named_after_plan_and_key():
    assert place.default_folder(PLAN).as_posix() == f"results/push-{PLAN.key}"


def test_numbers_that_overflow_are_refused_and_ordinary_ones_are_not():
    with ordinary_numbers("here"):
        assert np.exp(np.array([-1000.0]))[0] == 0
    for wrong in (lambda: np.exp(np.array([1000.0])), lambda: np.array([np.inf]) - np.inf, lambda: 1 / 0):
        with pytest.raises(PlanError, match="far too large or far too small"), ordinary_numbers("here"):
            wrong()


def test_memory_there_is_what_the_machine_can_have():
    # between a mebibyte and a pebibyte, and no more than is built in
    assert 2**20 < memory_there() <= os.sysconf("SC_PHYS_PAGES") * os.sysconf("SC_PAGE_SIZE") < 2**50
