"""The ready plans do what their comments promise: releases, kicks, ramps and lenses.

They are checked against paths and laws that know nothing of the program.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import pytest
from scipy.constants import g, hbar, k

import trapsim
from ready import CONFIGS, MASS, MS, NAMES, NEAR, Play, Solver, end_of, hz, law
from reference import classical

#: plans that take more than a second or two at draft
LONG = ("bragg", "lattice", "loaded")


def test_every_plan_is_looked_at() -> None:
    assert tuple(sorted(path.stem for path in CONFIGS.glob("*.toml"))) == NAMES


@pytest.mark.parametrize("name", [pytest.param(n, marks=pytest.mark.slow) if n in LONG else n for n in NAMES])
def test_a_ready_plan_says_that_it_is_invented_and_runs(name: str, play: Play) -> None:
    """A complete run ends at the time the file's own durations add up to, with an error within its accuracy."""
    run = play(name)
    summary = run.summary
    assert summary.title.startswith("Invented: ")
    assert summary.status == "complete"
    assert [stage.end is not None for stage in summary.stages] == [True] * len(run.plan.sequence)
    whole = {
        "beams": 17.0, "box": 50.0, "bragg": 20.1326, "kick": 21.0, "lattice": 18.02, "lens": 71.96, "loaded": 26.0,
        "ramp": 40.0, "release": 20.0,
    }
    assert summary.end.time_ms == pytest.approx(whole[name], rel=1e-12)
    assert 0 < summary.numerics.error.width_relative < 1e-2
    assert not [notice.code for notice in summary.warnings if notice.code not in ("scaling_law",)]


@pytest.mark.slow
@pytest.mark.parametrize("name", NAMES)
def test_a_ready_plan_runs_as_it_is_and_agrees_with_its_draft(name: str, play: Play, solved: Solver) -> None:
    """At the accuracy it is written for; two results differ by no more than their errors, three sigma for luck."""
    plain = solved(trapsim.read_plan(CONFIGS / f"{name}.toml", {"numerics.threads": 1})).summary
    draft = play(name).summary
    error = 3 * (draft.numerics.error.width_relative + plain.numerics.error.width_relative)
    assert plain.status == "complete"
    assert plain.end.width_um == pytest.approx(draft.end.width_um, rel=error)


def test_release_inverts_the_cigar(play: Play) -> None:
    """Thomas-Fermi radii of this cloud after 20 ms: 38.2 and 62.3 um (independent calculation, scaling law)."""
    end = play("release").summary.end
    assert np.array(end.width_um) == pytest.approx(np.array([38.2, 62.3, 62.3]) / np.sqrt(7), rel=0.025)
    widths, rates = law(hz(20, 120, 120), 1e5, [0, 20 * MS])
    assert np.array(end.width_um) == pytest.approx(widths[-1], rel=0.025)
    assert np.array(end.expansion_rate_mm_per_s) == pytest.approx(rates[-1], rel=0.025)
    assert end.aspect_ratio["xz"] == pytest.approx(0.6, abs=0.03)


def test_release_is_round_after_ten_milliseconds(play: Play) -> None:
    """The aspect ratio of this cloud passes one at 9.78 ms (independent calculation, scaling law)."""
    track = play("release").track
    ratio = track["width"][:, 0] / track["width"][:, 2]
    later = int(np.argmax(ratio < 1))
    assert track.time[later - 1] < 9.78 * MS * 1.03
    assert track.time[later] > 9.78 * MS * 0.97
    crossing = np.interp(1, ratio[later : later - 2 : -1], track.time[later : later - 2 : -1])
    assert crossing == pytest.approx(9.78 * MS, rel=0.05)


def test_release_lands_on_its_pictures_and_falls(play: Play) -> None:
    """Column densities are kept at the times asked for, hold all atoms, and fall with g t^2/2."""
    run = play("release")
    for view in run.columns.values():
        for asked in (5 * MS, 10 * MS, 20 * MS):
            (index,) = np.flatnonzero(np.abs(view.times - asked) < 1e-12)
            cell = np.diff(view.rows[index])[0] * np.diff(view.cols[index])[0]
            seen = view.values[index].sum()
            assert seen * cell == pytest.approx(1e5, rel=2e-3)
            if view.up == "z":
                height = view.values[index].sum(axis=1) @ view.rows[index] / seen
                assert height == pytest.approx(-g * asked**2 / 2, rel=1e-3)
    end = run.summary.end
    place, velocity = classical.fall(0, 0, np.array(20 * MS), acceleration=-g)
    assert end.centre_um[2] == pytest.approx(1e6 * place, abs=NEAR)
    assert end.velocity_mm_per_s[2] == pytest.approx(1e3 * velocity, abs=NEAR)


def test_kick_leaves_with_the_phase_of_the_slosh(play: Play) -> None:
    """Kohn, PR 123, 1242 (1961): the centre is a particle in the trap, then one that falls; closed forms."""
    (w,) = hz(100)
    for hold, changes in ((6 * MS, {}), (7.5 * MS, {"sequence.hold.duration": "7.5 ms"})):
        run = play("kick", changes)
        assert run.summary.ground.origin_um[2] == pytest.approx(-1e6 * classical.sag(w), abs=NEAR)
        place, velocity = classical.swing(0, 3e-3, np.array(hold), omega=w)
        let_go = end_of(run, "hold")
        assert let_go.centre_um[2] == pytest.approx(1e6 * place, abs=NEAR)
        assert let_go.velocity_mm_per_s[2] == pytest.approx(1e3 * velocity, abs=NEAR)
        place, velocity = classical.fall(place, velocity, np.array(15 * MS), acceleration=-g)
        assert run.summary.end.centre_um[2] == pytest.approx(1e6 * place, abs=NEAR)
        assert run.summary.end.velocity_mm_per_s[2] == pytest.approx(1e3 * velocity, abs=NEAR)
    widths, _ = law(hz(50, 80, 100), 5e4, [0, 15 * MS])
    assert np.array(run.summary.end.width_um) == pytest.approx(widths[-1], rel=0.03)


def test_kick_says_what_its_comment_says(play: Play) -> None:
    """The numbers in the file: v cos(2 pi f t) and v sin(2 pi f t)/(2 pi f), to the figures written there."""
    text = (CONFIGS / "kick.toml").read_text(encoding="utf-8")
    angle = 2 * np.pi * 100 * 6 * MS
    assert f"cos gives {3 * np.cos(angle):.2f} mm/s, sin {3e3 * np.sin(angle) / (2 * np.pi * 100):.2f} um" in text
    assert f"{1e6 * classical.sag(2 * np.pi * 100):.1f} um below" in text


def opening(before: float, after: float, duration: float) -> Callable[[float], float]:
    """The angular frequency on a smooth way from one value to another, as a function of time."""
    rising = classical.smooth(duration)
    return lambda t: 2 * np.pi * (after + (before - after) * rising(t))


def test_ramp_decompresses(play: Play) -> None:
    """The scaling law with the same course of the frequencies, and nothing afterwards."""
    run = play("ramp")
    ways = [opening(f, f / 2, 25 * MS) for f in (60.0, 80.0, 100.0)]
    trap = [lambda t, way=way: way(t) if t < 25 * MS else 0.0 for way in ways]
    widths, rates = law(hz(60, 80, 100), 5e4, [0, 25 * MS, 40 * MS], trap, edges=[25 * MS])
    opened, end = end_of(run, "decompress"), run.summary.end
    assert np.array(opened.width_um) == pytest.approx(widths[1], rel=0.03)
    # the switch-off takes some tens of microseconds, which the law here leaves out
    assert np.array(end.width_um) == pytest.approx(widths[2], rel=0.03)
    assert np.array(end.expansion_rate_mm_per_s) == pytest.approx(rates[2], rel=0.03)
    undone = play("kick").summary.end
    assert max(end.expansion_rate_mm_per_s) < 0.75 * max(undone.expansion_rate_mm_per_s)


def test_ramp_holds_the_cloud_where_it_is_until_it_is_released(play: Play) -> None:
    """At rest below a minimum that moves up as the trap opens; then on the classical path while the trap dies away."""
    run = play("ramp")
    opened = end_of(run, "decompress")
    assert np.array(opened.centre_um) == pytest.approx(np.zeros(3), abs=NEAR)
    assert np.array(opened.velocity_mm_per_s) == pytest.approx(np.zeros(3), abs=NEAR)
    (w,) = hz(50)
    dying = classical.exponential(15 * MS, 20e-6)
    (_, place), (_, velocity) = classical.path(
        0, 0, [0, 15 * MS], omega=w, strength=dying, centre=lambda t: classical.sag(w), acceleration=-g
    )
    assert run.summary.end.centre_um[2] == pytest.approx(1e6 * place, abs=1e-3)
    assert run.summary.end.velocity_mm_per_s[2] == pytest.approx(1e3 * velocity, abs=1e-3)


def test_ramp_without_a_held_centre_sets_the_cloud_swinging(play: Play) -> None:
    """A particle in a trap that is opened at a fixed place, by an integrator of its own."""
    run = play("ramp", {"trap.dipole.centre": ["0 um"] * 3})
    (w,) = hz(100)
    way = opening(100, 50, 25 * MS)
    (_, place), (_, velocity) = classical.path(
        0, 0, [0, 25 * MS], omega=w, strength=lambda t: (way(t) / w) ** 2, centre=lambda t: classical.sag(w),
        acceleration=-g,
    )  # fmt: skip
    assert abs(velocity) > 1e-3
    opened = end_of(run, "decompress")
    assert opened.centre_um[2] == pytest.approx(1e6 * place, abs=1e-3)
    assert opened.velocity_mm_per_s[2] == pytest.approx(1e3 * velocity, abs=1e-3)


@pytest.mark.parametrize("flash", [1.96 * MS, 2.11 * MS])
def test_lens_stops_the_expansion(flash: float, play: Play) -> None:
    """The scaling law, flashed upon: what is left of the expansion rate, in shares of what there was."""
    run = play("lens", {"sequence.flash.duration": f"{1e3 * flash} ms"})
    (w,) = hz(20)
    trap = [lambda t: w if 30 * MS <= t < 30 * MS + flash else 0.0] * 3
    edges = [30 * MS, 30 * MS + flash]
    widths, rates = law(hz(50, 50, 50), 1e5, [0, *edges, 70 * MS + flash], trap, edges=edges)
    before, after, end = (end_of(run, stage) for stage in ("fly", "flash", "drift"))
    for moment, wide, rate in zip((before, after, end), widths[1:], rates[1:], strict=True):
        assert np.array(moment.width_um) == pytest.approx(wide, rel=0.02)
        assert np.array(moment.expansion_rate_mm_per_s) == pytest.approx(rate, abs=0.01 * rates[1, 0])
    # what the lens cannot take is the rest of the spread the cloud's size asks for: hbar/(2 m width) at the least
    floor = 1e9 * MASS * (hbar / (2 * MASS * 1e-6 * after.width_um[0])) ** 2 / k
    left = 1e9 * MASS * (1e-3 * rates[2, 0]) ** 2 / k
    assert floor < after.expansion_energy_nk[0] < before.expansion_energy_nk[0] / 100
    assert after.expansion_energy_nk[0] - left == pytest.approx(0, abs=3e-3)


def test_the_thin_lens_rule_is_too_long_here(play: Play) -> None:
    """1/(w^2 t) is 2.11 ms (closed form); the law says that it overshoots, and so does the full answer."""
    (w,) = hz(20)
    assert round(1e3 / (w**2 * 30 * MS), 2) == 2.11
    rule, best = (end_of(play("lens", {"sequence.flash.duration": f"{t} ms"}), "flash") for t in (2.11, 1.96))
    assert rule.expansion_energy_nk[0] > 10 * best.expansion_energy_nk[0]
    assert rule.expansion_rate_mm_per_s[0] < -0.05 < -0.01 < best.expansion_rate_mm_per_s[0]


def test_lens_follows_the_fall(play: Play) -> None:
    """It comes on where the cloud is and stays there, so that the cloud falls on through it; classical path."""
    run = play("lens")
    (w,) = hz(20)
    lens_at, _ = classical.fall(0, 0, np.array(30 * MS), acceleration=-g)
    flash = (30 * MS, 31.96 * MS)
    times = [0, *flash, 71.96 * MS]
    places, velocities = classical.path(
        0, 0, times, omega=w, strength=lambda t: float(flash[0] <= t < flash[1]), centre=lambda t: float(lens_at),
        acceleration=-g, edges=flash,
    )  # fmt: skip
    for stage, place, velocity in zip(("fly", "flash", "drift"), places[1:], velocities[1:], strict=True):
        moment = end_of(run, stage)
        assert moment.centre_um[2] == pytest.approx(1e6 * place, abs=1e-3)
        assert moment.velocity_mm_per_s[2] == pytest.approx(1e3 * velocity, abs=1e-3)
