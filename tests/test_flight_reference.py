"""Free flight beside independent solvers of the full equation, and beside closed forms where there are any."""

from __future__ import annotations

from collections.abc import Callable
from math import pi

import numpy as np
import pytest

import motion
import trapsim
from motion import NUMBER, Natural
from reference import expansion, flights, gaussian, scaling, units
from trapsim.prepare.setup import prepare

Solved = Callable[[trapsim.Plan], trapsim.Run]

SQRT8 = 8**0.5


def _energies(run: trapsim.Run, index: int, unit: float) -> tuple[np.ndarray, float]:
    return run.track["kinetic"][index] / unit, run.track["interaction"][index] / unit


def isotropic(beta: float) -> trapsim.Plan:
    own = Natural(beta)
    times = [own.s(r.time) for r in flights.FREE if r.beta == beta and r.time]
    return motion.cloud(
        motion.stage("release", times[-1]), frequency=own.hz(1, 1, 1), a=own.a, accuracy="fine", at=times
    )


def sqrt8(number: float, *, axes: str = "auto", accuracy: str = "fine") -> trapsim.Plan:
    own = Natural(4 * pi * flights.FREE_ROUND_NA * number / 1000)
    times = [own.s(r.time) for r in flights.FREE_ROUND if r.time]
    return motion.cloud(
        motion.stage("release", times[-1]), frequency=own.hz(1, 1, SQRT8), a=own.a, accuracy=accuracy, at=times,
        numerics=f'axes = "{axes}"',
    )  # fmt: skip


@pytest.mark.parametrize("row", flights.FREE, ids=lambda r: f"beta {r.beta} t {r.time}")
def test_an_isotropic_cloud_expands_as_the_full_equation_says(solved: Solved, row: flights.Free) -> None:
    own = Natural(row.beta)
    run = solved(isotropic(row.beta))
    index = motion.at(run.track, own.s(row.time))
    # independent calculation: radial solver, two grids and two steps
    assert run.track["width"][index] / own.unit.length == pytest.approx([row.width] * 3, rel=1e-6)
    kinetic, interaction = _energies(run, index, own.unit.energy)
    assert kinetic.sum() == pytest.approx(row.kinetic, abs=1e-6)
    assert interaction == pytest.approx(row.interaction, abs=1e-6)
    assert kinetic.sum() + interaction == pytest.approx(row.release_energy, abs=1e-6)


@pytest.mark.parametrize("row", flights.FREE_ROUND, ids=lambda r: f"t {r.time}")
def test_a_flat_cloud_of_1000_atoms_expands_as_the_full_equation_says(solved: Solved, row: flights.FreeRound) -> None:
    own = Natural(4 * pi * flights.FREE_ROUND_NA)
    run = solved(sqrt8(1000))
    index = motion.at(run.track, own.s(row.time))
    x, y, z = run.track["width"][index] / own.unit.length
    # independent calculation: oscillator functions in stretched coordinates, good to 1e-6
    assert x == pytest.approx(y, rel=1e-12)
    assert (x, z) == pytest.approx((row.x_width, row.z_width), rel=3e-6)
    kinetic, interaction = _energies(run, index, own.unit.energy)
    assert kinetic[:2].sum() == pytest.approx(row.kinetic_perp, abs=3e-6)
    assert kinetic[2] == pytest.approx(row.kinetic_z, abs=3e-6)
    assert interaction == pytest.approx(row.interaction, abs=3e-6)
    assert kinetic.sum() + interaction == pytest.approx(flights.FREE_ROUND_RELEASE_ENERGY, abs=3e-6)
    assert x / z == pytest.approx(row.aspect, rel=3e-6)


def test_the_scaling_law_is_no_short_cut(solved: Solved) -> None:
    """At t = 5 the law says the same aspect ratio for all clouds; the full equation tells them apart."""
    for number in (1000, 10000):
        own = Natural(4 * pi * flights.FREE_ROUND_NA * number / 1000)
        run = solved(sqrt8(number))
        index = motion.at(run.track, own.s(5))
        width, law = run.track["width"][index], run.track["law_width"][index]
        # independent calculations: the scaling law by DOP853, the full equation in stretched coordinates
        assert law[0] / law[2] == pytest.approx(flights.ASPECT_AT_5["law"], abs=5e-5)
        assert width[0] / width[2] == pytest.approx(flights.ASPECT_AT_5[number], abs=5e-5)


def test_the_release_energy_of_ten_thousand_atoms(solved: Solved) -> None:
    own = Natural(4 * pi * flights.FREE_ROUND_NA * 10)
    kinetic, interaction = _energies(solved(sqrt8(10000)), -1, own.unit.energy)
    # independent calculation: oscillator functions in stretched coordinates, to 1e-6
    assert kinetic.sum() + interaction == pytest.approx(flights.RELEASE_ENERGY_10000, rel=3e-6)


def test_a_flight_is_the_same_on_radial_and_on_plain_axes(solved: Solved) -> None:
    runs = [solved(sqrt8(1000, axes=axes)) for axes in ("auto", "full")]
    assert [r.summary.numerics.axes for r in runs] == [("radial", "radial", "mirror"), ("wave",) * 3]
    radial, full = (r.summary.end for r in runs)
    # exact: one equation on two kinds of axis
    assert full.width_um == pytest.approx(radial.width_um, rel=2e-6)
    assert full.expansion_rate_mm_per_s == pytest.approx(radial.expansion_rate_mm_per_s, rel=5e-6)
    assert full.interaction_nk == pytest.approx(radial.interaction_nk, rel=1e-5)


@pytest.mark.parametrize("frequency", [(100, 100, 100), (20, 150, 150)], ids=str)
def test_clouds_of_the_lab(solved: Solved, frequency: tuple[float, float, float]) -> None:
    rows = [r for r in flights.FREE_IN_LAB if r.frequency == frequency]
    times = [r.time for r in rows]
    run = solved(motion.cloud(
        motion.stage("release", times[-1], pictures="[" + ", ".join(motion.seconds(t) for t in times) + "]"),
        frequency=frequency, accuracy="fine",
    ))  # fmt: skip
    for row in rows:
        # independent calculations: radial solver, and stretched coordinates
        assert run.track["width"][motion.at(run.track, row.time)] == pytest.approx(row.width, rel=1e-6)


def test_a_cigar_of_1e5_atoms_flies_in_a_hundred_pairs() -> None:
    plan = motion.cloud(motion.stage("release", 20e-3), frequency=(20, 120, 120))
    setup = prepare(plan)
    books = motion.play(setup, motion.begin(setup))[-1].state.books
    # METHODS, section 3: 54 to 72 pairs were measured for such flights; this is the budget with room to spare
    assert 30 < books.flight_pairs <= 100
    assert books.flight_pairs == books.pairs


@pytest.mark.parametrize("gravity", [False, True], ids=["weightless", "falling"])
def test_an_ideal_gas_spreads_as_the_free_gaussian(solved: Solved, gravity: bool) -> None:
    frequency = (20.0, 50.0, 120.0)
    times = (2e-3, 20e-3)
    run = solved(motion.cloud(
        motion.stage("release", times[-1]), frequency=frequency, a="0 a0", accuracy="fine", gravity=gravity,
        at=times[:1],
    ))  # fmt: skip
    q = units.hbar / motion.RB
    omegas = [2 * pi * f for f in frequency]
    for t in times:
        index = motion.at(run.track, t)
        # textbook: the free packet
        width = [gaussian.width(t, omega=w, q=q) for w in omegas]
        assert run.track["width"][index] == pytest.approx(width, rel=5e-7)
        rates = [gaussian.width_rate(t, omega=w, q=q) for w in omegas]
        assert run.track["expansion_rate"][index] == pytest.approx(rates, rel=5e-7)
        # its velocity spread never changes: sqrt(q omega/2)
        assert run.track["velocity_spread"][index] == pytest.approx(np.sqrt(q * np.array(omegas) / 2), rel=5e-7)
        fall = 9.80665 * t**2 / 2 if gravity else 0.0
        assert run.track["centre"][index][2] == pytest.approx(-fall, rel=1e-12, abs=1e-18)
    assert run.summary.end.width_um[1] / run.summary.ground.width_um[1] == pytest.approx(flights.LENS_IDEAL[0], abs=2e-6)


def test_the_phase_of_a_free_gaussian_is_curved_as_it_should_be(solved: Solved) -> None:
    """Width and sign of the chirp: a wrong sign passes every look at the density."""
    frequency, t = (20.0, 50.0, 120.0), 20e-3
    final = solved(motion.cloud(
        motion.stage("release", t), frequency=frequency, a="0 a0", accuracy="fine", at=(2e-3,),
    )).final  # fmt: skip
    q = units.hbar / motion.RB
    for j, f in enumerate(frequency):
        x = final.axes[j].points
        middle = [len(a.points) // 2 for a in final.axes]
        line = np.moveaxis(final.values, j, 0)[(slice(None), *(m for i, m in enumerate(middle) if i != j))]
        near = np.abs(line) > 0.2 * np.abs(line).max()
        own = np.polyfit(x[near], np.unwrap(np.angle(line[near])), 2)[0]
        b, bdot = final.scale[j], final.scale_rate[j]
        # textbook: the phase is + curvature x^2/(2 q)
        assert bdot / b + 2 * q * own / b**2 == pytest.approx(gaussian.curvature(t, omega=2 * pi * f), rel=1e-6)


def test_a_falling_cloud_of_any_kind_expands_as_the_independent_solver_says(solved: Solved) -> None:
    """A cigar between ideal and Thomas-Fermi, kicked and falling, which tables do not list."""
    own = Natural(beta=30.0, omega=2 * pi * 80)
    lam, t = 0.4, 3.0
    run = solved(motion.cloud(
        motion.stage("kick", velocity='["1 mm/s", "-2 mm/s", "0 mm/s"]'), motion.stage("release", own.s(t)),
        frequency=own.hz(1, 1, lam), a=own.a, accuracy="fine", gravity=True,
    ))  # fmt: skip
    (flight,) = expansion.round_flight(lam, own.beta, [t])
    # independent calculation: oscillator functions in stretched coordinates, DOP853
    width = np.array([flight.widths[0], flight.widths[0], flight.widths[1]]) * own.unit.length
    assert run.track["width"][-1] == pytest.approx(width, rel=3e-6)
    assert run.track["interaction"][-1] == pytest.approx(flight.interaction * own.unit.energy, rel=1e-5)


def test_the_law_beside_the_flight_is_the_published_one(solved: Solved) -> None:
    row = flights.LAW_IN_LAB[1]
    run = solved(motion.cloud(motion.stage("release", row.time), frequency=row.frequency))
    # independent calculation: Castin and Dum's law by DOP853; a Thomas-Fermi width is R/sqrt(7)
    assert np.array(run.summary.end.law.width_um) * 1e-6 * 7**0.5 == pytest.approx(row.radius, rel=2e-5)
    b, _ = scaling.castin_dum([2 * pi * f for f in row.frequency], (scaling.off,) * 3, [row.time])
    first = np.array(run.summary.ground.thomas_fermi_radius_um) * 1e-6
    assert run.track["law_width"][-1] * 7**0.5 == pytest.approx(b[0] * first, rel=1e-8)
    assert first == pytest.approx(
        units.thomas_fermi(motion.RB, tuple(2 * pi * f for f in row.frequency), NUMBER, 100.4 * units.A0).radii, rel=1e-9
    )
