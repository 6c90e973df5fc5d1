"""The validity card: hand values of textbook measures, and the sides of their limits."""

from __future__ import annotations

from math import pi, sqrt
from typing import Any

import numpy as np
import pytest

import motion
import trapsim
from motion import RB, Natural
from reference import expansion, units
from trapsim.estimate.law import scaling_law
from trapsim.estimate.trust import Trust, trust
from trapsim.estimate.validity import CARE, DOUBT, FINE, Check, validity
from trapsim.evolve.state import Books
from trapsim.prepare.setup import prepare

A_RB = 100.4 * units.A0


def card(**words: object) -> dict[str, Check]:
    setup = prepare(motion.cloud(motion.stage("release", 1e-3), **words))
    return {c.code: c for c in validity(setup, scaling_law(setup))}


def test_beyond_mean_field_is_the_formula_of_lee_huang_and_yang() -> None:
    one = card(frequency=(100, 100, 100))["beyond_mean_field"]
    # n0 a^3 of the worked cloud: independent calculation, closed form (3.41e-5)
    n0 = units.thomas_fermi(RB, (2 * pi * 100,) * 3, 1e5, A_RB).peak_density
    assert n0 * A_RB**3 == pytest.approx(3.41e-5, abs=5e-8)
    # Lee, Huang and Yang, Phys. Rev. 106, 1135 (1957), from memory: mu shifts by 32/(3 sqrt(pi)) sqrt(n a^3)
    assert one.value == pytest.approx(32 / (3 * sqrt(pi)) * sqrt(n0 * A_RB**3), rel=1e-6)
    # 1.9031 % at n a^3 = 1e-5 (the same source): the ratio is that of the roots
    assert one.value / 0.019031 == pytest.approx(sqrt(n0 * A_RB**3 / 1e-5), rel=3e-5)
    assert one.level == FINE


@pytest.mark.parametrize(("a", "level"), [("100 a0", FINE), ("200 a0", CARE), ("2000 a0", DOUBT)])
def test_a_stronger_gas_is_doubted(a: str, level: str) -> None:
    # common practice: 5 % and 20 % of mu; hand values 3.4 %, 7.9 % and 125 % for 1e5 atoms in 100 Hz
    assert card(frequency=(100, 100, 100), a=a)["beyond_mean_field"].level == level


@pytest.mark.parametrize(
    ("strength", "level"), [(796.0, FINE), (401.0, FINE), (399.0, CARE), (51.0, CARE), (49.0, DOUBT)]
)
def test_the_scaling_law_wants_a_large_cloud(strength: float, level: str) -> None:
    own = Natural(4 * pi * strength)
    one = card(frequency=own.hz(1, 1, 1), a=own.a)["scaling_law"]
    # common practice: N a/a_ho from 400 on the law is good to a per cent, below 50 it is a guide
    assert one.value == pytest.approx(strength, rel=1e-6)
    assert one.level == level


def test_the_size_of_an_anisotropic_trap_is_the_geometric_mean() -> None:
    one = card(frequency=(8, 180, 180), number=1e5)["scaling_law"]
    mean = 2 * pi * (8 * 180 * 180) ** (1 / 3)
    # closed form: N a/a_ho with a_ho of the geometric mean
    assert one.value == pytest.approx(1e5 * A_RB / sqrt(units.hbar / (RB * mean)), rel=1e-6)


@pytest.mark.parametrize(
    ("frequency", "number", "level"),
    [((20, 120, 120), 1e5, FINE), ((29.3, 922, 926), 1e4, CARE), ((29.3, 922, 926), 5e2, DOUBT)],
)
def test_a_thin_cloud_is_nearly_one_dimensional(
    frequency: tuple[float, float, float], number: float, level: str
) -> None:
    one = card(frequency=frequency, number=number)["one_dimensional"]
    mu = units.thomas_fermi(RB, tuple(2 * pi * f for f in frequency), number, A_RB).mu
    # common practice: mu against the spacing of the tight directions, limits 3 and 1; 2.75 for the chip trap
    assert one.value == pytest.approx(mu / (units.hbar * pi * (frequency[1] + frequency[2])), rel=1e-6)
    assert one.level == level


@pytest.mark.parametrize(("strength", "level"), [(0.3, FINE), (0.4, CARE), (0.5, DOUBT)])
def test_attraction_nears_collapse(strength: float, level: str) -> None:
    own = Natural(-4 * pi * strength)
    cards = card(frequency=own.hz(1, 1, 1), a=own.a)
    # Roberts et al., Phys. Rev. Lett. 86, 4211 (2001): 0.459 measured
    assert cards["collapse"].value == pytest.approx(strength, rel=1e-6)
    assert cards["collapse"].level == level
    assert "beyond_mean_field" not in cards and "scaling_law" not in cards


@pytest.mark.parametrize(("nk", "level"), [(80.0, FINE), (120.0, CARE), (180.0, DOUBT), (400.0, DOUBT)])
def test_thermal_atoms_are_counted_against_the_critical_temperature(nk: float, level: str) -> None:
    changes = {"atoms.temperature": f"{nk} nK"}
    one = card(frequency=(100, 100, 100), changes=changes)["thermal"]
    # Bagnato, Pritchard and Kleppner (1987): kB Tc = 0.940499 hbar w N^(1/3); 209.507 nK here (independent calculation)
    assert one.value == pytest.approx(min((nk / 209.507) ** 3, 1.0), rel=2e-5)
    assert one.level == level


def test_a_cloud_that_is_not_trapped_in_all_directions_has_no_card_of_three_dimensions() -> None:
    cards = card(frequency=(100, 100, 0), numerics='extent = ["auto", "auto", "30 um"]')
    assert "scaling_law" not in cards and "collapse" not in cards


def test_what_is_doubted_is_told_and_what_is_fine_is_not() -> None:
    own = Natural(4 * pi * 30)
    run = trapsim.run(motion.cloud(motion.stage("release", 1e-4), frequency=own.hz(1, 1, 1), a=own.a, accuracy="draft"))
    codes = {w.code for w in run.summary.warnings}
    assert "scaling_law" in codes and "beyond_mean_field" not in codes


# ---- the numerical error -------------------------------------------------------------------------------------------


def told_by(books: Books | None = None, **but: Any) -> Trust:
    """What is said of a run in which nothing is wrong but what is given."""
    fine = {"residual": 0.0, "slack": 0.0, "energy_drift": 0.0, "swing": 0.0, "resistance": 1.0, "centre_off": None}
    return trust(books or Books(), **(fine | but))


def test_the_error_of_a_perfect_run_is_nothing_but_its_ground_state() -> None:
    told = told_by(residual=1e-9, centre_off=0.0)
    assert (told.width, told.rate, told.centre) == pytest.approx((1e-9, 1.5e-9, 0.0), rel=1e-12, abs=0)
    assert told.orders is None
    assert told_by(residual=1e-9, lit=(1,)).orders == pytest.approx(1e-9, rel=1e-12)


def test_each_cause_of_an_error_is_heard() -> None:
    """Whatever is measured to be wrong makes the estimate larger, and orders hear of steps and of full spectra."""
    full = np.array([0.0, 1e-4, 0.0])
    for books in (Books(extrapolated=1e-4), Books(pull=1e-4), Books(spectrum=full)):
        told = told_by(books, lit=(1,))
        assert told.width > 5e-5 and told.orders > 5e-5
    assert told_by(Books(edge=full)).width > 1e-6
    # a spectrum that is full across a lattice leaves its orders alone
    assert told_by(Books(spectrum=full), lit=(0, 2)).orders == 0
    for cause in ("slack", "energy_drift", "swing", "kink"):
        told = told_by(lit=(1,), **{cause: 1e-4})
        assert told.width > 5e-5 and told.rate > told.width and told.orders == 0
    # walls that have just opened have made rates wrong, and not yet widths
    assert told_by(kink=1e-2, grown=0.0).width == 0 and told_by(kink=1e-2, grown=0.0).rate > 1e-2
    assert told_by(Books(pull=1.0), resistance=1e4).width == pytest.approx(1e-4)
    assert told_by(slack=1e-4, slowed=100.0).rate == pytest.approx(10 * told_by(slack=1e-4).rate)


@pytest.mark.slow
@pytest.mark.parametrize(
    ("frequency", "to", "a"),
    [
        ((100, 100, 100), (130, 130, 130), "0 a0"),
        ((100, 100, 100), (110, 110, 110), Natural(10.0).a),
        ((100, 100, 100), (115, 115, 90), Natural(200.0).a),
        ((20, 120, 120), (20, 132, 132), "100.4 a0"),
    ],
    ids=["ideal", "beta 10", "beta 200", "cigar"],
)
def test_the_stated_error_covers_swings_in_a_trap(
    frequency: tuple[float, ...], to: tuple[float, ...], a: str
) -> None:
    """Accuracy normal against fine: the truth lies below what normal says of itself, and not absurdly far below."""
    runs = [
        trapsim.run(motion.cloud(
            motion.stage("pulse", 20e-3, to=f'{{ "dipole.frequency" = {motion.hertz([float(f) for f in to])} }}'),
            frequency=[float(f) for f in frequency], a=a, accuracy=accuracy, at=(11e-3, 15e-3),
        ))
        for accuracy in ("fine", "normal")
    ]  # fmt: skip
    fine, normal = (
        [r.track["width"][motion.at(r.track, t)] for t in (11e-3, 15e-3, 20e-3)] for r in runs
    )
    off = max(float(abs(n / f - 1).max()) for n, f in zip(normal, fine, strict=True))
    said = runs[1].summary.numerics.error.width_relative
    assert off < said < 100 * off + 1e-6
    assert said < 1e-3


@pytest.mark.parametrize(("beta", "lam"), [(1.0, 1.0), (10.0, 4.0), (40.0, 0.3), (100.0, 1.4)])
def test_the_stated_error_covers_flights(beta: float, lam: float) -> None:
    own = Natural(beta)
    (flight,) = expansion.round_flight(lam, beta, [4.0])
    truth = np.array([flight.widths[0], flight.widths[0], flight.widths[1]]) * own.unit.length * 1e6
    said = []
    for accuracy in ("draft", "normal"):
        summary = trapsim.run(motion.cloud(
            motion.stage("release", own.s(4)), frequency=own.hz(1, 1, lam), a=own.a, accuracy=accuracy
        )).summary  # fmt: skip
        # independent calculation: oscillator functions in stretched coordinates, DOP853 (good to 1e-6)
        off = float(np.abs(np.array(summary.end.width_um) / truth - 1).max())
        said.append(summary.numerics.error.width_relative)
        assert off < said[-1] + 1e-6
        assert said[-1] < 50 * max(off, 1e-6)
    assert said[1] < said[0] / 10


def deep(s: float, *axes: str) -> str:
    """Lattices of 852 nm, s recoil energies deep, along axes."""
    return "\n".join(
        f'[trap.{j}]\nkind = "lattice"\naxis = "{j}"\nwavelength = "852 nm"\ndepth = "{s!r} Er"' for j in axes
    )


def test_a_deep_lattice_along_all_three_directions_is_doubted() -> None:
    """M. Greiner et al., Nature 415, 39 (2002), value from memory: for Rb-87 at 852 nm U/J is 36 at 13 recoil energies."""
    cubic = {s: card(frequency=(60, 70, 80), number=100, parts=deep(s, *"xyz"), accuracy="draft") for s in (3.0, 8.0, 13.0)}
    assert cubic[13.0]["sites"].value == pytest.approx(36, rel=0.06)
    assert [one["sites"].level for one in cubic.values()] == [FINE, CARE, DOUBT]
    assert "sites" not in card(frequency=(60, 70, 80), number=100, parts=deep(13.0, "x", "y"), accuracy="draft")
