"""The march: it can be taken up anywhere, lands where it is told, and moves traps as the independent solver does."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from math import pi, sqrt

import numpy as np
import pytest
from scipy.interpolate import CubicHermiteSpline

import motion
import trapsim
from motion import Natural
from reference import expansion
from trapsim.evolve.march import march
from trapsim.evolve.state import Books, State
from trapsim.prepare.setup import Setup, prepare

Solved = Callable[[trapsim.Plan], trapsim.Run]

TWO_PI = 2 * pi
OWN = Natural(beta=40.0)


def journey(**words: object) -> trapsim.Plan:
    """A bit of everything: jump, ramp, kick, slow release, lens, flight; roundness is lost on the way."""
    lens = '[trap.lens]\nkind = "harmonic"\nfrequency = ["40 Hz", "30 Hz", "20 Hz"]\nstrength = 0\nat = "cloud"'
    return motion.cloud(
        motion.stage("pulse", 5e-4, to='{ "dipole.frequency" = ["80 Hz", "80 Hz", "70 Hz"] }'),
        motion.stage("ramp", 1e-3, to='{ "dipole.frequency" = ["60 Hz", "60 Hz", "90 Hz"] }'),
        motion.stage("kick", velocity='["1 mm/s", "0 mm/s", "2 mm/s"]'),
        motion.stage("release", 2e-3, switch_off='{ shape = "linear", duration = "200 us" }', pictures='["1 ms"]'),
        motion.stage("pulse", 3e-4, to='{ "lens.strength" = 1 }'),
        motion.stage("release", 2e-3),
        frequency=(70, 70, 100), number=3e3, gravity=True, parts=lens, **words,
    )  # fmt: skip


# ---- taking it up again --------------------------------------------------------------------------------------------


@pytest.fixture(scope="module")
def walked() -> tuple[Setup, list[State], list[str]]:
    setup = prepare(journey())
    ticks = motion.play(setup, motion.begin(setup))
    return setup, [t.state for t in ticks], [t.reason for t in ticks]


def same(one: State, other: State) -> None:
    """Two states are the same to 1e-12 in all that counts."""
    assert (one.leg, one.cloud.time, one.books.steps, one.books.rejected) == (
        other.leg, other.cloud.time, other.books.steps, other.books.rejected,
    )  # fmt: skip
    scale = np.abs(other.cloud.phi).max()
    assert np.abs(one.cloud.phi - other.cloud.phi).max() <= 1e-12 * scale
    for name in ("b", "bdot", "X", "Xdot"):
        assert getattr(one.cloud.frame, name) == pytest.approx(getattr(other.cloud.frame, name), rel=1e-12, abs=1e-18)
    assert one.books.pairs == pytest.approx(other.books.pairs, rel=1e-12)


def test_the_journey_has_every_kind_of_tick(walked: tuple[Setup, list[State], list[str]]) -> None:
    setup, states, reasons = walked
    assert reasons.count("edge") == len(setup.legs)
    assert "landing" in reasons and reasons.count("step") > 20
    assert [s.cloud.time for s in states] == sorted(s.cloud.time for s in states)
    assert len({tuple(leg.space.words()) for leg in setup.legs}) == 2


def test_from_any_state_it_goes_on_exactly_as_it_did(walked: tuple[Setup, list[State], list[str]]) -> None:
    setup, states, reasons = walked
    chosen = {i for i, r in enumerate(reasons) if r != "step"} | set(range(0, len(states), 17))
    for i in sorted(chosen - {len(states) - 1}):
        rest = motion.play(setup, states[i].copy())
        assert len(rest) == len(states) - i - 1
        assert [t.reason for t in rest] == reasons[i + 1 :]
        same(rest[-1].state, states[-1])


def test_a_plan_prepared_anew_goes_on_as_well(walked: tuple[Setup, list[State], list[str]]) -> None:
    """As another process would: spaces, transforms and laws are all made again from what a state holds."""
    _, states, _ = walked
    again = prepare(journey())
    middle = states[len(states) // 2]
    space = next(
        leg.space for leg in again.legs if leg.space.describe() == middle.cloud.space.describe()
    )
    taken_up = replace(middle, cloud=replace(middle.cloud, space=space, phi=space.array(middle.cloud.phi)))
    same(motion.play(again, taken_up)[-1].state, states[-1])


def test_a_state_is_borrowed_until_the_next_step() -> None:
    setup = prepare(journey(accuracy="draft"))
    ticks = march(motion.begin(setup), setup.legs, pace=setup.pace, guards=setup.guards)
    first = next(ticks).state
    kept, lent = first.copy(), first.cloud.phi
    next(ticks)
    assert kept.cloud.phi is not lent
    assert np.abs(kept.cloud.phi - lent).max() > 0


# ---- landing -------------------------------------------------------------------------------------------------------


def test_it_lands_exactly_where_it_is_told() -> None:
    wanted = (0.1e-3, 1 / 3 * 1e-3, 0.7000000001e-3, 2.9999e-3)
    plan = motion.cloud(
        motion.stage("release", 3e-3, pictures='["0.5 ms", "1.25 ms"]'), frequency=(50, 80, 80), number=2e3, at=wanted
    )
    setup = prepare(plan)
    ticks = motion.play(setup, motion.begin(setup))
    landings = [t.state.cloud.time for t in ticks if t.reason == "landing"]
    assert landings == sorted([*plan.track.at, 0.5e-3, 1.25e-3])
    assert ticks[-1].state.cloud.time == 3e-3 and ticks[-1].reason == "edge"


def test_landings_do_not_change_the_flight(solved: Solved) -> None:
    t = OWN.s(4)
    free, landed = (
        solved(motion.cloud(
            motion.stage("release", t), frequency=OWN.hz(1, 1, 1.5), a=OWN.a, accuracy="fine", at=at
        )).summary
        for at in ((), tuple(np.linspace(0.05, 0.95, 19) * t))
    )  # fmt: skip
    # the same equation with other steps
    assert landed.end.width_um == pytest.approx(free.end.width_um, rel=1e-6)
    assert landed.numerics.march.steps > free.numerics.march.steps


def test_widths_between_the_ticks_follow_from_widths_and_rates(solved: Solved) -> None:
    """Cubic Hermite interpolation with the exact rates, against landings at those times."""
    t = OWN.s(5)
    own = {"frequency": OWN.hz(1, 1, 1.5), "a": OWN.a, "accuracy": "fine"}
    asked = np.linspace(0.03, 0.99, 25) * t
    free = solved(motion.cloud(motion.stage("release", t), **own)).track
    landed = solved(motion.cloud(motion.stage("release", t), at=tuple(asked), **own)).track
    _, first = np.unique(free.time, return_index=True)
    between = CubicHermiteSpline(free.time[first], free["width"][first], free["expansion_rate"][first])
    truth = np.array([landed["width"][motion.at(landed, one)] for one in asked])
    # exact rates make the interpolation good to the fourth power of the step
    assert between(asked) == pytest.approx(truth, rel=3e-6)
    # and a rate that is wrong by a per cent would show
    wrong = CubicHermiteSpline(free.time[first], free["width"][first], 1.01 * free["expansion_rate"][first])
    assert np.abs(wrong(asked) / truth - 1).max() > 3e-5


def test_rates_are_the_slopes_of_the_widths(solved: Solved) -> None:
    run = solved(journey(accuracy="fine", at=(2.2e-3, 2.21e-3, 2.22e-3, 2.23e-3, 2.24e-3)))
    track = run.track
    i = [motion.at(track, t) for t in (2.2e-3, 2.21e-3, 2.22e-3, 2.23e-3, 2.24e-3)]
    for name, rate in (("width", "expansion_rate"), ("centre", "velocity")):
        w = track[name][i]
        # five-point difference quotient at the middle one
        slope = (w[0] - 8 * w[1] + 8 * w[3] - w[4]) / (12 * 1e-5)
        assert track[rate][i[2]] == pytest.approx(slope, rel=1e-6, abs=1e-9)


# ---- traps that change ---------------------------------------------------------------------------------------------


def between(start: float, stop: float, before: float, after: float, shape: str) -> Callable[[float], float]:
    def value(t: float) -> float:
        s = min(max((t - start) / (stop - start), 0.0), 1.0)
        return before + (after - before) * (s * s * (3 - 2 * s) if shape == "smooth" else s)

    return value


@pytest.mark.parametrize("shape", ["linear", "smooth"])
def test_a_ramped_trap_moves_the_cloud_as_the_independent_solver_says(solved: Solved, shape: str) -> None:
    """Frequencies ramp, a hold, and free flight: widths and interaction energy at each end."""
    ends = (1.5, 2.5, 5.0)
    to = f'{{ "dipole.frequency" = {motion.hertz(OWN.hz(0.6, 0.6, 1.9))} }}'
    run = solved(motion.cloud(
        motion.stage("ramp", OWN.s(1.5), to=to, shape=f'"{shape}"'), motion.stage("hold", OWN.s(1.0)),
        motion.stage("release", OWN.s(2.5)), frequency=OWN.hz(1, 1, 1.4), a=OWN.a, accuracy="fine", gravity=True,
    ))  # fmt: skip
    ramps = [between(0, 1.5, 1.0, 0.6, shape), between(0, 1.5, 1.4, 1.9, shape)]
    traps = [lambda t, r=r: r(t) if t < 2.5 else 0.0 for r in ramps]
    start = expansion.ground((2, 1), (1.0, 1.4), OWN.beta, counts=(20, 16))
    seen = expansion.march(start, (1.0, 1.4), OWN.beta, ends, trap=traps, edges=(1.5, 2.5))
    assert run.summary.numerics.axes == ("radial", "radial", "mirror")
    for stage, flight in zip(run.summary.stages, seen, strict=True):
        # independent calculation: oscillator functions in stretched coordinates, DOP853
        widths = [flight.widths[0], flight.widths[0], flight.widths[1]]
        assert np.array(stage.end.width_um) * 1e-6 / OWN.unit.length == pytest.approx(widths, rel=5e-6)
        energy = stage.end.interaction_nk * 1.380649e-32 / OWN.unit.energy
        assert energy == pytest.approx(flight.interaction, rel=2e-5)
        kinetic = stage.end.internal_kinetic_nk * 1.380649e-32 / OWN.unit.energy
        assert kinetic == pytest.approx(sum(flight.kinetic), rel=2e-5)


def test_a_trap_that_jumps_and_jumps_back(solved: Solved) -> None:
    to = f'{{ "dipole.frequency" = {motion.hertz(OWN.hz(1.5, 1.5, 1.5))} }}'
    run = solved(motion.cloud(
        motion.stage("pulse", OWN.s(0.7), to=to), motion.stage("hold", OWN.s(1.1)), motion.stage("release", OWN.s(1.2)),
        frequency=OWN.hz(1, 1, 1), a=OWN.a, accuracy="fine",
    ))  # fmt: skip
    seen = expansion.isotropic_flight(
        OWN.beta, [0.7, 1.8, 3.0], trap=lambda t: 1.5 if t < 0.7 else (1.0 if t < 1.8 else 0.0), edges=(0.7, 1.8)
    )
    for stage, flight in zip(run.summary.stages, seen, strict=True):
        # independent calculation: oscillator functions in stretched coordinates, DOP853
        assert np.array(stage.end.width_um) * 1e-6 / OWN.unit.length == pytest.approx([flight.widths[0]] * 3, rel=5e-6)


def test_a_strength_multiplies_the_energy_so_frequencies_go_with_its_root(solved: Solved) -> None:
    by_strength, by_frequency = (
        solved(motion.cloud(
            motion.stage("pulse", OWN.s(0.9), to=to), motion.stage("release", OWN.s(0.9)),
            frequency=OWN.hz(1, 1, 1), a=OWN.a, accuracy="fine",
        )).summary.end
        for to in ('{ "dipole.strength" = 0.49 }', f'{{ "dipole.frequency" = {motion.hertz(OWN.hz(0.7, 0.7, 0.7))} }}')
    )  # fmt: skip
    # exact: V = s m w^2 x^2/2
    assert by_strength.width_um == pytest.approx(by_frequency.width_um, rel=1e-9)


def test_a_ramped_scattering_length_meets_the_closed_form_in_two_dimensions(solved: Solved) -> None:
    """In a plane <rho^2>'' = 4 E/m; switching a off in flight freezes the kinetic energy: <rho^2> is a parabola again."""
    length = 20e-6
    beta = 80.0
    a = beta * length / (4 * pi * motion.NUMBER)
    t1, t2 = OWN.s(1.0), OWN.s(2.0)
    run = solved(motion.cloud(
        motion.stage("release", t1), motion.stage("pulse", t2 - t1, to='{ "atoms.scattering_length" = "0 a0" }'),
        frequency=OWN.hz(1, 1, 0), a=f"{a!r} m", accuracy="fine",
        numerics=f'extent = ["auto", "auto", "{length!r} m"]',
    ))  # fmt: skip
    track = run.track
    square = (track["width"][:, :2] ** 2).sum(axis=1)
    slope = 2 * (track["width"][:, :2] * track["expansion_rate"][:, :2]).sum(axis=1)
    i = motion.at(track, t1)
    kinetic = track["kinetic"][-1].sum()
    # exact: free motion from t1 on
    assert square[-1] == pytest.approx(
        square[i] + slope[i] * (t2 - t1) + 2 * kinetic / motion.RB * (t2 - t1) ** 2, rel=1e-6
    )
    assert kinetic == pytest.approx(track["kinetic"][i].sum(), rel=1e-6)
    assert track["interaction"][-1] == pytest.approx(0.0, abs=1e-12 * kinetic)


def test_a_rising_scattering_length_frees_more_energy(solved: Solved) -> None:
    """The release energy per atom: kinetic plus interaction, the latter in proportion to a at the jump."""
    run = solved(motion.cloud(
        motion.stage("release", OWN.s(0.2)), motion.stage("pulse", OWN.s(3.0), to=(
            f'{{ "atoms.scattering_length" = "{2 * OWN.beta * OWN.unit.length / (4 * pi * motion.NUMBER)!r} m" }}'
        )), frequency=OWN.hz(1, 1, 1), a=OWN.a, accuracy="fine",
    ))  # fmt: skip
    track = run.track
    i = motion.at(track, OWN.s(0.2))
    energy = track["kinetic"][-1].sum() + track["interaction"][-1]
    # exact: energy is conserved on either side, and the interaction doubles at the jump
    assert energy == pytest.approx(track["kinetic"][i].sum() + 2 * track["interaction"][i], rel=2e-6)


# ---- the books -----------------------------------------------------------------------------------------------------


def test_the_books_count_what_was_done() -> None:
    setup = prepare(motion.cloud(motion.stage("hold", 1e-3), motion.stage("release", 2e-3), frequency=(50, 80, 80)))
    ticks = motion.play(setup, motion.begin(setup))
    held, flown = (next(t.state for t in ticks if t.state.leg == n) for n in (1, 2))
    assert held.books.flight_pairs == 0 and held.books.pairs > held.books.steps
    flight = flown.books.pairs - held.books.pairs
    assert flown.books.flight_pairs == pytest.approx(flight, rel=1e-12)
    # three pairs a step in flight, and little for looking
    steps = flown.books.steps - held.books.steps + flown.books.rejected - held.books.rejected
    assert 3 * steps <= flight <= 3 * steps + 2 + 1.5 * 20
    assert flown.books.error > 0 and (flown.books.edge < setup.guards.edge).all()
    assert Books().spent(2.0, flight=True).flight_pairs == 2.0


def test_a_finer_accuracy_costs_more_and_errs_less(solved: Solved) -> None:
    truth = expansion.round_flight(1.4, OWN.beta, [3.0])[0]
    width = np.array([truth.widths[0], truth.widths[0], truth.widths[1]])
    off, pairs = [], []
    for accuracy in ("draft", "normal", "fine"):
        summary = solved(motion.cloud(
            motion.stage("release", OWN.s(3)), frequency=OWN.hz(1, 1, 1.4), a=OWN.a, accuracy=accuracy,
        )).summary  # fmt: skip
        found = np.array(summary.end.width_um) * 1e-6 / OWN.unit.length
        # independent calculation: oscillator functions in stretched coordinates, DOP853
        off.append(float(np.abs(found / width - 1).max()))
        pairs.append(summary.numerics.march.pairs)
        assert off[-1] < summary.numerics.error.width_relative
    assert pairs == sorted(pairs) and pairs[0] < pairs[2]
    assert off[0] < 2e-3 and off[1] < 1e-4 and off[2] < 3e-6


def test_the_classical_centre_of_a_kicked_ramp_is_kept_to_rounding(solved: Solved) -> None:
    """The summary's centre error is the distance to the classical path, which Kohn's theorem makes exact."""
    error = solved(journey(accuracy="fine")).summary.numerics.error
    assert error.centre_um < 1e-9
    assert sqrt(error.width_relative) < 1e-2
