"""A certificate: the plan once more on a finer grid, and the true errors beside the estimates."""

from __future__ import annotations

import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

import invented_run
import trapsim
from broken.folders import numbers
from ready import CONFIGS, NAMES
from trapsim.app import main
from trapsim.corridor.certify import NONE, finer_plan
from trapsim.errors import Interrupted
from trapsim.estimate.truth import certificate, difference, missed
from trapsim.prepare.extent import ACCURACY, finer_than
from trapsim.prepare.setup import Setup, memory_needed, prepare
from trapsim.record.store import read_run
from trapsim.record.summary import Summary
from trapsim.show.page import page_html
from trapsim.show.text import summary_text

PLAN = """\
title = "Invented: a small cloud let go"
[atoms]
species = "Rb-87"
number = "2e4"
[trap.dipole]
kind = "harmonic"
frequency = ["60 Hz", "90 Hz", "90 Hz"]
[numerics]
accuracy = "draft"
threads = 1
[[sequence]]
stage = "release"
duration = "6 ms"
[camera.side]
view = "y"
pixel = "6.5 um"
magnification = 2.0
size = [32, 32]
"""
DIFFERENCES = {"width_relative", "rate_relative", "centre_um", "orders", "picture_atoms_relative"}
#: what an estimate may be of the truth, and from where on the truth is worth comparing with
LEAST, MOST, WORTH = 0.2, 50.0, 1e-6


def plan_of(rest: str = "", *, text: str = PLAN) -> trapsim.Plan:
    return trapsim.plan_from_text(text + rest, "invented", {})


def told(folder: Path) -> dict:
    return json.loads((folder / "summary.json").read_text())


def command(home: Path, *options: str) -> list[str]:
    (home / "plan.toml").write_text(PLAN)
    return ["run", str(home / "plan.toml"), "--out", str(home / "r"), "--no-figures", *options]


@pytest.fixture(scope="module")
def folder(tmp_path_factory) -> Path:
    """A result with its certificate."""
    home = tmp_path_factory.mktemp("certified")
    assert main(command(home, "--certify", "--quiet")) == 0
    return home / "r"


# ---- what is finer -------------------------------------------------------------------------------------------------

HARMONIC = '[trap.dipole]\nkind = "harmonic"\nfrequency = ["60 Hz", "90 Hz", "90 Hz"]\n'
HOLD = '[[sequence]]\nstage = "hold"\nduration = "1 ms"\n'
LET_GO = '[[sequence]]\nstage = "release"\nduration = "1 ms"\n'
LIGHT = '[trap.light]\nkind = "lattice"\naxis = "x"\nspacing = "500 nm"\ndepth = "5 Er"\n'
WALLS = '[trap.walls]\nkind = "box"\nsize = ["12 um", "9 um", "9 um"]\n'
HEAD = '[atoms]\nspecies = "Rb-87"\nnumber = "2e4"\n'
KINDS = {
    "radial and mirror": HARMONIC + LET_GO,
    "three waves": HARMONIC + LET_GO + '[numerics]\naxes = "full"\n',
    "points asked for": HARMONIC + LET_GO + '[numerics]\npoints = [30, 24, 24]\nextent = ["30 um", "25 um", "25 um"]\n',
    "odd points": HARMONIC + LET_GO + '[numerics]\naxes = "full"\npoints = [33, 25, 25]\n',
    "lattice that holds": HARMONIC + LIGHT + HOLD,
    "lattice, extent and points asked for": HARMONIC + LIGHT + HOLD
    + '[numerics]\nextent = ["30 um", "auto", "auto"]\npoints = [600, 0, 0]\n',
    "lattice, points asked for": HARMONIC + LIGHT + HOLD + '[numerics]\npoints = [468, 0, 0]\n',
    "periodic": HARMONIC.replace("60 Hz", "0 Hz") + LIGHT + HOLD + '[numerics]\nextent = ["20 um", "auto", "auto"]\n',
    "soft box": WALLS + 'height = "200 nK"\nedge = "1 um"\n' + LET_GO,
    "soft box, as it is asked for": WALLS + 'height = "200 nK"\nedge = "1 um"\n' + LET_GO
    + '[numerics]\npoints = [48, 40, 40]\nextent = ["24 um", "20 um", "20 um"]\n',
    "hard box that opens": WALLS + 'edge = "hard"\n' + HOLD + LET_GO,
    "hard box, points asked for": WALLS + 'edge = "hard"\n' + LET_GO + '[numerics]\npoints = [24, 18, 18]\n',
    "hard box with a lattice": WALLS + 'edge = "hard"\n' + LIGHT + HOLD,
    "a light flashed on": HARMONIC + LIGHT + "strength = 0\n" + LET_GO
    + '[[sequence]]\nstage = "pulse"\nduration = "10 us"\nto = { "light.strength" = 1 }\n',
}  # fmt: skip


def spaces(setup: Setup) -> list:
    return [setup.space, *(leg.space for leg in setup.legs)]


@pytest.mark.parametrize("accuracy", ["draft", "normal"])
@pytest.mark.parametrize("kind", KINDS)
def test_finer_means_more_points_per_length_and_no_less_room_on_every_kind_of_axis(kind: str, accuracy: str) -> None:
    plan = trapsim.plan_from_text(HEAD + KINDS[kind], "invented", {"numerics.accuracy": accuracy})
    plain, finer = prepare(plan), prepare(finer_plan(plan))
    for one, other in zip(spaces(plain), spaces(finer), strict=True):
        assert one.words() == other.words()
        for j in range(3):
            a, b = one.axis(j), other.axis(j)
            if a.uniform:
                assert b.uniform
                continue
            assert b.k_max > 1.25 * a.k_max, (kind, j)
            same = a.walled or plain.lengths.periodic[j]
            assert b.half_extent >= a.half_extent * (1 - 1e-12), (kind, j)
            assert not same or b.half_extent == pytest.approx(a.half_extent, rel=1e-12)
            if plain.lengths.period[j] and not a.walled:
                # a lattice that holds the cloud stays a whole number of spacings long
                per = plain.lengths.period[j] * b.counted / (2 * b.half_extent)
                assert per == pytest.approx(round(per), rel=1e-9)
    assert finer.pace.tolerance == pytest.approx(plain.pace.tolerance / 10)
    assert finer.accuracy.residual < plain.accuracy.residual


def test_no_plan_can_ask_for_what_certifies_it() -> None:
    for word in ("draft", "normal", "fine"):
        assert finer_than(word) in ACCURACY
        with pytest.raises(trapsim.PlanError, match="accuracy"):
            plan_of(text=PLAN.replace("draft", finer_than(word)))


# ---- what is compared ----------------------------------------------------------------------------------------------


def shifted(summary: Summary, **changes: object) -> Summary:
    """The same summary with another end."""
    end = replace(summary.end, **changes)
    return replace(summary, end=end, stages=(*summary.stages[:-1], replace(summary.stages[-1], end=end)))


def test_differences_are_those_that_were_put_in() -> None:
    """Hand-made ends: a width 1 % too large, a rate off by a hundredth of its spread, orders moved, a centre off."""
    right = shifted(invented_run.summary(invented_run.track()), orders={"light": {"-1": 0.25, "0": 0.5, "1": 0.25}})
    end = right.end
    wide = (end.width_um[0], 1.01 * end.width_um[1], end.width_um[2])
    rate, spread = end.expansion_rate_mm_per_s, end.velocity_spread_mm_per_s
    fast = (*rate[:2], rate[2] + 0.01 * spread[2])
    centre = (end.centre_um[0] - 0.5, *end.centre_um[1:])
    orders = {"light": {"-1": 0.25, "0": 0.48, "1": 0.24, "2": 0.03}}
    wrong = shifted(right, width_um=wide, expansion_rate_mm_per_s=fast, centre_um=centre, orders=orders)
    found = difference(wrong, right)
    assert found.width_relative == pytest.approx(0.01)
    assert found.rate_relative == pytest.approx(0.01)
    assert found.centre_um == pytest.approx(0.5)
    assert found.orders == pytest.approx(0.03)
    assert found.picture_atoms_relative is None
    same = certificate(right, right, tolerance=1e-5)
    assert same.difference.width_relative == 0 and same.estimate_over_truth.width is None
    # the invented estimates, 3e-5 of the widths, are far below what was put in
    over = certificate(wrong, right, tolerance=1e-5)
    assert over.estimate_over_truth.width == pytest.approx(3e-5 / 0.01)
    assert set(missed(over)) == {"width", "rate", "centre"}


# ---- the command and the folder ------------------------------------------------------------------------------------


def test_the_summary_has_the_certificate_and_the_file_too(folder: Path) -> None:
    summary = told(folder)
    certified = summary["numerics"]["certified"]
    assert set(certified) == {"space", "tolerance", "difference", "estimate_over_truth", "seconds"}
    assert set(certified["difference"]) == DIFFERENCES
    assert 0 < certified["difference"]["width_relative"] < 1e-2
    assert certified["difference"]["orders"] is None
    assert 0 < certified["difference"]["picture_atoms_relative"] < 1e-2
    over = summary["numerics"]["error"]["width_relative"] / certified["difference"]["width_relative"]
    assert certified["estimate_over_truth"]["width"] == pytest.approx(over)
    assert min(np.array(certified["space"]["points"]) / summary["numerics"]["points"]) > 1.2
    assert read_run(folder).summary.as_dict() == summary
    # nothing is left of the finer run, and the plan's key is what it was
    assert {p.name for p in folder.iterdir()} == {".lock", "plan.json", "run.h5", "summary.json", "track.csv"}
    assert summary["key"] == trapsim.read_plan(folder.parent / "plan.toml").key


def test_the_certificate_is_the_difference_to_the_finer_run(folder: Path) -> None:
    finer = trapsim.run(finer_plan(trapsim.read_plan(folder.parent / "plan.toml"))).summary.end
    plain = trapsim.open_run(folder).summary
    off = np.max(np.abs(np.array(plain.end.width_um) / finer.width_um - 1))
    assert plain.numerics.certified.difference.width_relative == pytest.approx(off, rel=1e-6)


def test_without_the_option_there_is_no_certificate_and_all_else_is_the_same(folder: Path, tmp_path: Path) -> None:
    assert main(command(tmp_path, "--quiet")) == 0
    assert told(tmp_path / "r")["numerics"]["certified"] is None
    plain, certified = numbers(tmp_path / "r"), numbers(folder)
    assert {k: v for k, v in plain.items() if "certified" not in k} == {
        k: v for k, v in certified.items() if "certified" not in k
    }


def test_a_finished_folder_is_certified_without_being_computed_anew(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(command(tmp_path, "--quiet")) == 0
    kept, before = read_run(tmp_path / "r"), told(tmp_path / "r")
    track = (tmp_path / "r" / "track.csv").stat().st_mtime_ns
    assert main(command(tmp_path, "--certify", "--json")) == 0
    after, shown = told(tmp_path / "r"), json.loads(capsys.readouterr().out)
    assert after == shown and after["numerics"].pop("certified") is not None
    assert before["numerics"].pop("certified") is None
    assert after == before  # the seconds on the wall clock, too
    assert (tmp_path / "r" / "track.csv").stat().st_mtime_ns == track
    again = read_run(tmp_path / "r")
    assert np.array_equal(again.final.values, kept.final.values) and again.plan == kept.plan
    # and once more: nothing happens any more
    stamp = (tmp_path / "r" / "run.h5").stat().st_mtime_ns
    assert main(command(tmp_path, "--certify", "--quiet")) == 0
    assert (tmp_path / "r" / "run.h5").stat().st_mtime_ns == stamp


def test_interrupted_while_certifying_the_result_is_safe_and_the_same_call_goes_on(folder: Path, tmp_path: Path) -> None:
    plan, place = plan_of(), tmp_path / "r"
    trapsim.run(plan, place)
    before = (place / "summary.json").read_bytes()
    with pytest.raises(Interrupted, match="while certifying.*the same command goes on(.|\n)*is complete"):
        trapsim.run(plan, place, stop=lambda: True, certify=True)
    assert (place / "summary.json").read_bytes() == before
    assert trapsim.open_run(place).summary.status == "complete"
    kept = place / "certificate" / "checkpoint.npz"
    assert kept.exists()
    # it goes on from its first step, and does not relax the cloud again
    calls: list[str] = []

    class Watching:
        def begin(self, total: float) -> None:
            calls.append("begin")

        def at(self, time: float, stage: str) -> None:
            calls.append(f"{time:.3e}")

        def end(self) -> None:
            pass

    done = trapsim.run(plan, place, progress=Watching(), certify=True)
    assert calls[0] == "begin" and calls.count("begin") == 1 and float(calls[1]) > 0
    assert not (place / "certificate").exists()
    whole = trapsim.open_run(folder).summary.numerics.certified
    found = done.summary.numerics.certified.difference
    assert found.width_relative == pytest.approx(whole.difference.width_relative, rel=1e-6)
    assert found.picture_atoms_relative == pytest.approx(whole.difference.picture_atoms_relative, rel=1e-6)


@pytest.mark.slow
def test_a_damaged_beginning_of_a_certificate_is_begun_anew_and_the_result_is_not(folder: Path, tmp_path: Path) -> None:
    plan, place = plan_of(), tmp_path / "r"
    trapsim.run(plan, place)
    before = (place / "track.csv").stat().st_mtime_ns
    with pytest.raises(Interrupted):
        trapsim.run(plan, place, stop=lambda: True, certify=True)
    kept = place / "certificate" / "checkpoint.npz"
    kept.write_bytes(kept.read_bytes()[:-200])
    found = trapsim.run(plan, place, certify=True).summary.numerics.certified.difference
    whole = trapsim.open_run(folder).summary.numerics.certified.difference
    assert found.width_relative == pytest.approx(whole.width_relative, rel=1e-6)
    assert (place / "track.csv").stat().st_mtime_ns == before


@pytest.mark.slow
def test_begun_anew_a_result_loses_its_certificate_and_what_was_left_of_one(tmp_path: Path) -> None:
    plan, place = plan_of(), tmp_path / "r"
    trapsim.run(plan, place, certify=True)
    assert trapsim.open_run(place).summary.numerics.certified is not None
    trapsim.run(plan, place, force=True)
    assert trapsim.open_run(place).summary.numerics.certified is None
    with pytest.raises(Interrupted):
        trapsim.run(plan, place, certify=True, stop=lambda: True)
    assert (place / "certificate").exists()
    trapsim.run(plan, place, force=True)
    assert not (place / "certificate").exists()


def test_a_finer_run_that_does_not_fit_is_told_and_the_result_stays(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    """Memory for the plan's own grid, and not for the finer one."""
    plan = plan_of()
    needed, more = (memory_needed(max(s.size for s in spaces(prepare(p)))) for p in (plan, finer_plan(plan)))
    assert more > needed
    argv = command(tmp_path, "--set", f"numerics.memory={0.5 * (needed + more) / 1e3:.6f} kB", "--certify")
    assert main(argv) == 0
    shown = capsys.readouterr()
    assert "there is no certificate" in " ".join(shown.out.split()) and "numerics.memory" in shown.out
    summary = told(tmp_path / "r")
    assert summary["status"] == "complete" and summary["numerics"]["certified"] is None
    assert [n["code"] for n in summary["warnings"]].count(NONE) == 1
    # with more memory the same folder is certified, and the notice goes
    assert main(command(tmp_path, "--certify", "--quiet")) == 0
    summary = told(tmp_path / "r")
    assert summary["numerics"]["certified"] is not None
    assert NONE not in [n["code"] for n in summary["warnings"]]


def test_a_plan_that_is_wrong_or_refused_is_so_as_without_the_option(tmp_path: Path) -> None:
    (tmp_path / "plan.toml").write_text(PLAN.replace("2e4", "minus"))
    argv = ["run", str(tmp_path / "plan.toml"), "--out", str(tmp_path / "r"), "--quiet", "--no-figures", "--certify"]
    assert main(argv) == 2
    # N |a|/a_ho = 0.6 and more: it collapses (Ruprecht et al., PRA 51, 4704 (1995), value from memory)
    collapsing = PLAN.replace('number = "2e4"', 'number = "2e4"\nscattering_length = "-5 a0"')
    (tmp_path / "plan.toml").write_text(collapsing)
    assert main(argv) == 3
    assert not (tmp_path / "r" / "summary.json").exists()


def test_a_plan_without_a_sequence_is_certified_at_rest() -> None:
    run = trapsim.run(plan_of(text=PLAN.partition("[[sequence]]")[0]), certify=True)
    found = run.summary.numerics.certified
    assert run.folder is None
    assert 0 < found.difference.width_relative < 1e-2
    assert found.difference.rate_relative is None and found.estimate_over_truth.rate is None


def test_help_names_the_option(capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as left:
        main(["run", "--help"])
    assert left.value.code == 0
    assert "--certify" in capsys.readouterr().out


# ---- how it is told ------------------------------------------------------------------------------------------------


def test_the_terminal_and_the_page_tell_what_was_found_beside_what_was_estimated(folder: Path) -> None:
    kept = read_run(folder)
    text, page = summary_text(kept.summary), page_html(kept, {})
    certified = kept.summary.numerics.certified
    assert "Certified: the same once more on a finer grid" in text
    (row,) = [line.split() for line in text.splitlines() if line.strip().startswith("widths, relative")]
    assert float(row[2]) == pytest.approx(certified.difference.width_relative, rel=0.05)
    assert float(row[3]) == pytest.approx(kept.summary.numerics.error.width_relative, rel=0.05)
    assert float(row[4]) == pytest.approx(certified.estimate_over_truth.width, rel=0.05)
    assert max(len(line) for line in text.splitlines()) < 160
    trusted = page.partition("Can it be trusted?")[2].partition("<h2>")[0]
    assert "finer grid" in trusted and "widths, relative" in trusted and "atoms on pictures" in trusted
    assert "is less than a fifth" not in text + page
    off = replace(certified, estimate_over_truth=replace(certified.estimate_over_truth, width=0.1))
    low = replace(kept.summary, numerics=replace(kept.summary.numerics, certified=off))
    assert "is less than a fifth" in summary_text(low)
    assert "is less than a fifth" in page_html(replace(kept, summary=low), {})


def test_without_a_certificate_nothing_is_said_of_one(folder: Path) -> None:
    kept = read_run(folder)
    plain = replace(kept.summary, numerics=replace(kept.summary.numerics, certified=None))
    assert "ertified" not in summary_text(plain)
    assert "finer grid" not in page_html(replace(kept, summary=plain), {})


# ---- the ready plans -----------------------------------------------------------------------------------------------


@pytest.mark.slow
@pytest.mark.parametrize("name", NAMES)
def test_what_a_ready_plan_says_of_its_errors_is_what_they_are(name: str) -> None:
    """At draft: no estimate below a fifth of the truth, none above fifty times a truth that is worth comparing with."""
    plan = trapsim.read_plan(CONFIGS / f"{name}.toml", {"numerics.accuracy": "draft", "numerics.threads": 1})
    run = trapsim.run(plan, certify=True)
    certified, estimate = run.summary.numerics.certified, run.summary.numerics.error
    assert certified is not None, [notice.text for notice in run.summary.warnings]
    found = certified.difference
    pairs = {
        "width": (estimate.width_relative, found.width_relative), "rate": (estimate.rate_relative, found.rate_relative),
        "centre": (estimate.centre_um, found.centre_um), "orders": (estimate.orders, found.orders),
    }  # fmt: skip
    lit = name in ("bragg", "lattice", "loaded")
    assert (estimate.orders is not None) == (found.orders is not None) == lit
    for quantity, (said, truth) in pairs.items():
        if said is not None and truth > WORTH:
            assert LEAST * truth < said < MOST * truth, quantity
    assert found.width_relative < 5e-3
    assert len(run.plan.camera) == 0 or found.picture_atoms_relative < 1e-3


@pytest.mark.slow
@pytest.mark.parametrize("held", ["", HARMONIC], ids=["bare", "with a trap inside"])
def test_what_a_hard_box_says_of_its_errors_is_what_they_are(held: str) -> None:
    """Pushed where there is a trap in it, for a cloud at rest has no rate to be wrong about, else let go; at draft."""
    walls = '[trap.walls]\nkind = "box"\nsize = ["12 um", "9 um", "9 um"]\nedge = "hard"\n'
    push = '[[sequence]]\nstage = "kick"\nvelocity = ["1 mm/s", "0 mm/s", "0 mm/s"]\n'
    stages = push + HOLD.replace("1 ms", "5 ms") if held else HOLD + LET_GO
    text = HEAD + walls + held + stages + '[numerics]\nthreads = 1\naccuracy = "draft"\n'
    run = trapsim.run(plan_of(text=text), certify=True)
    over = run.summary.numerics.certified.estimate_over_truth
    assert LEAST < over.width < MOST and LEAST < over.rate < MOST
