"""The ready plans do what their comments promise: lattices, boxes and beams.

They are checked against plane waves, bands, optics and a brute grid that know nothing of the program.
"""

from __future__ import annotations

import numpy as np
import pytest
from scipy import optimize, special
from scipy.constants import c, epsilon_0, g, h, k

import trapsim
from ready import CONFIGS, MASS, MS, SCATTERING_LENGTH, Play, end_of, hz, law
from reference import bands, bruteforce, classical, planewaves
from reference.planewaves import Recoil
from reference.units import A0, thomas_fermi
from trapsim.prepare.setup import prepare

pytestmark = pytest.mark.slow


def shares(run: trapsim.Run, stage: str) -> dict[str, float]:
    orders = end_of(run, stage).orders
    assert orders is not None
    return {"-2": 0.0, "-1": 0.0, "0": 0.0, "1": 0.0, "2": 0.0} | dict(orders["light"])


#: the lattices of the plans
GREEN, RED = Recoil(MASS, 1064e-9 / 2), Recoil(MASS, 780.241e-9 / 2)


@pytest.mark.parametrize(("depth", "duration"), [(12, 20e-6), (120, 2e-6)])
def test_lattice_diffracts(depth: float, duration: float, play: Play) -> None:
    """Plane waves at rest, by the exponential of their matrix; the cloud's spread and mean field are worth some 3e-3."""
    changes = {"trap.light.depth": f"{depth} Er", "sequence.flash.duration": f"{1e6 * duration} us"}
    seen = shares(play("lattice", changes), "flash")
    exact = planewaves.populations(planewaves.pulse(planewaves.start(), depth, duration / GREEN.time))
    for order in ("-2", "-1", "0", "1", "2"):
        assert seen[order] == pytest.approx(exact[order], abs=4e-3)
    # ten times the depth for a tenth of the time: the rule for short pulses, which 12 Er for 20 us break
    theta = depth * duration / GREEN.time / 2
    rule = {str(n): special.jv(n, theta) ** 2 for n in range(3)}
    off = max(abs(seen[n] - rule[n]) for n in rule)
    assert off < 2e-3 if depth == 120 else off > 0.04


def test_lattice_says_what_its_comment_says() -> None:
    """Shares in per cent by the rule and exactly, 2 v_R t, and the depth that the rule finds in the exact P_0."""
    text = " ".join((CONFIGS / "lattice.toml").read_text(encoding="utf-8").replace("#", " ").split())
    tau = 20e-6 / GREEN.time
    exact = planewaves.populations(planewaves.pulse(planewaves.start(), 12, tau))
    rule = [special.jv(n, 6 * tau) ** 2 for n in range(3)]
    assert "{:.1f} % stay, {:.1f} % go into each first order, {:.1f} %".format(*(100 * p for p in rule)) in text
    assert "{:.1f}, {:.1f} and {:.1f} %".format(*(100 * exact[n] for n in "012")) in text
    assert f"2 v_R t = {2e6 * GREEN.velocity * 15e-3:.0f} um" in text
    found = optimize.brentq(lambda s: special.jv(0, s * tau / 2) ** 2 - exact["0"], 1, 15)
    assert f"{found:.1f} Er in place of 12" in text
    assert f"{1e-3 * GREEN.hertz:.2f} kHz" in text


def test_lattice_orders_lie_where_recoils_take_them(play: Play) -> None:
    """Order n has flown 2 n v_R t (closed form), each with its share of the atoms; the cloud falls meanwhile."""
    run = play("lattice")
    picture = run.pictures["side_flight_15ms"]
    across = picture.optical_density.sum(axis=0) * picture.atoms_per_od
    apart = 2 * GREEN.velocity * 15e-3
    exact = planewaves.populations(planewaves.pulse(planewaves.start(), 12, 20e-6 / GREEN.time))
    for n in (-2, -1, 0, 1, 2):
        near = np.abs(picture.x - n * apart) < apart / 2
        assert across[near].sum() / 2e4 == pytest.approx(exact[str(n)], abs=5e-3)
        # the mean field of the other orders pushes them apart by a little
        assert across[near] @ picture.x[near] / across[near].sum() == pytest.approx(n * apart, abs=0.01 * apart)
    place, _ = classical.fall(0, 0, np.array(18.02 * MS), acceleration=-g)
    assert (across.sum(), np.mean(picture.y)) == pytest.approx((2e4, float(place)), rel=2e-3)


@pytest.mark.parametrize(("depth", "duration"), [(2, 132.6e-6), (2, 66.3e-6), (1, 265.2e-6)])
def test_bragg_reflects_and_splits(depth: float, duration: float, play: Play) -> None:
    """Plane waves, averaged over the cloud's velocities along x: a Thomas-Fermi profile of the spread it has."""
    run = play("bragg", {"trap.light.depth": f"{depth} Er", "sequence.flash.duration": f"{1e6 * duration} us"})
    widest = np.sqrt(7) * 1e-3 * end_of(run, "wait").velocity_spread_mm_per_s[0] / RED.velocity
    nodes, weights = special.roots_jacobi(12, 2, 2)  # the profile (1 - u^2)^2
    exact = dict.fromkeys(("-1", "0", "1", "2"), 0.0)
    for u, weight in zip(nodes, weights / weights.sum(), strict=True):
        moved = planewaves.pulse(planewaves.start(), depth, duration / RED.time, widest * u, detuning=4.0)
        for order, share in planewaves.populations(moved).items():
            if order in exact:
                exact[order] += weight * share
    for stage in ("flash", "flight"):
        seen = shares(run, stage)
        for order, share in exact.items():
            assert seen[order] == pytest.approx(share, abs=3e-3)


def test_bragg_flies_as_the_recoils_say(play: Play) -> None:
    """The centre moves with the mean of the orders, 2 v_R each, and nothing pushes it on the way (closed form)."""
    run = play("bragg")
    after, end = end_of(run, "flash"), run.summary.end
    mean = sum(int(n) * p for n, p in (after.orders or {})["light"].items())
    assert after.velocity_mm_per_s[0] == pytest.approx(2e3 * RED.velocity * mean, abs=0.02)
    assert end.velocity_mm_per_s[0] == pytest.approx(after.velocity_mm_per_s[0], rel=2e-4)
    assert end.centre_um[0] - after.centre_um[0] == pytest.approx(15 * after.velocity_mm_per_s[0], rel=2e-4)


def test_bragg_says_what_its_comment_says() -> None:
    """Closed forms: 4 E_R/h, v_R, h/V, the Doppler shift 2 v/wavelength; 99.2 and 99.8 % by plane waves at rest."""
    text = " ".join((CONFIGS / "bragg.toml").read_text(encoding="utf-8").replace("#", " ").split())
    assert f"4 Er/h, {4e-3 * RED.hertz:.3f} kHz" in text
    assert f"{1e3 * RED.velocity:.3f} mm/s" in text
    assert f"h/V, {1e6 / (2 * RED.hertz):.1f} us for 2 Er" in text
    assert f"1 mm/s, {1e-3 * 2e-3 / 780.241e-9:.3f} kHz" in text
    assert f"detuning={4e-3 * RED.hertz - 1e-3 * 2e-3 / 780.241e-9:.2f}" in text
    for depth, told in ((2, "99.2 % would go"), (1, "keep only 0.2 %")):
        moved = planewaves.pulse(planewaves.start(), depth, 2 * np.pi / depth, detuning=4.0)
        share = 100 * planewaves.populations(moved)["1"]
        assert told in text and f"{share if depth == 2 else 100 - share:.1f}" in told


def test_loaded_shows_the_bloch_state(play: Play) -> None:
    """The plane waves of the lowest Bloch state at 10 E_R (diagonalised); the mean field fills the valleys a little."""
    run = play("loaded")
    exact = bands.populations(10)
    for stage in ("hold", "release"):
        seen = shares(run, stage)
        for order in ("-2", "-1", "0", "1", "2"):
            assert seen[order] == pytest.approx(exact[order], abs=5e-3)
    assert shares(run, "hold")["0"] > exact["0"]
    text = (CONFIGS / "loaded.toml").read_text(encoding="utf-8")
    assert f"{100 * exact['0']:.1f} % at rest and {100 * exact['1']:.1f} % in each" in text


def test_loaded_can_be_any_depth() -> None:
    """A period of 13 points suits no transform, whatever the number of periods; the grid takes a few more."""
    for depth in (36, 40, 44, 70, 130):
        plan = trapsim.read_plan(CONFIGS / "loaded.toml", {"sequence.load.to.light.depth": f"{depth} Er"})
        axis = prepare(plan).space.axis(0)
        assert (2 * axis.half_extent / GREEN.spacing) % 1 == pytest.approx(0, abs=1e-9)


def test_no_scaling_law_stands_beside_what_a_lattice_has_done(play: Play) -> None:
    """It holds until the light comes on, then only across."""
    before, after = (end_of(play("lattice"), stage).law for stage in ("wait", "flash"))
    assert before is not None and after is not None
    assert before.width_um[0] is not None
    assert after.width_um[0] is None and after.width_um[1] is not None


def test_loaded_breathes_across(play: Play) -> None:
    """Across it is on its way back in at the end, and still on its way out when the ramp took a quarter of the time."""
    quick = {"sequence.load.duration": "2.5 ms"}
    for changes, back in (({}, True), (quick, False)):
        load, hold = (end_of(play("loaded", changes), stage).width_um[1] for stage in ("load", "hold"))
        assert (hold < load) is back


def test_box_lets_go_of_half_a_chemical_potential(play: Play) -> None:
    """What is set free is conserved (exact), and is mu/2 and a little for the skin."""
    run = play("box")
    rest, end = run.summary.ground, run.summary.end
    free = rest.kinetic_hz + rest.interaction_hz
    assert (end.internal_kinetic_nk + end.interaction_nk) * 1e-9 * k / h == pytest.approx(free, rel=1e-3)
    assert 0.5 < free / rest.chemical_potential_hz < 0.56
    # the cigar of release.toml sets free 2 mu/7: Dalfovo et al., RMP 71, 463 (1999)
    cigar = thomas_fermi(MASS, hz(20, 120, 120), 1e5, SCATTERING_LENGTH).release_energy / h
    assert cigar / free == pytest.approx(16, abs=0.5)
    assert f"{1e3 * np.sqrt(h * rest.chemical_potential_hz / MASS):.2f} mm/s" in (CONFIGS / "box.toml").read_text()


def test_box_keeps_its_middle_until_the_news_arrives(play: Play) -> None:
    """The middle plane is a disk without ends until sound from them arrives: a plain run in two dimensions beside it."""
    run = play("box")
    seen = run.columns["y"]
    lines = [np.interp(0, x, view.sum(axis=0)) * np.diff(r)[0]
             for view, x, r in zip(seen.values, seen.cols, seen.rows, strict=True)]
    assert np.array(lines) == pytest.approx(lines[0], rel=0.02)
    grid = bruteforce.Grid((1, 120, 120), (1.0, 90e-6, 90e-6), MASS)
    places = grid.places()
    # for one metre of an endless tube
    walls = bruteforce.cylinder([0 * places[0], *places[1:]], length=10.0, diameter=30e-6, height=60e-9 * k, edge=2e-6)
    coupling = grid.coupling(lines[0], SCATTERING_LENGTH)
    psi = bruteforce.ground(grid, walls, coupling, np.exp(-walls / (60e-9 * k / 8)))
    before = 0.0
    for time in (10 * MS, 20 * MS):
        (index,) = np.flatnonzero(np.abs(seen.times - time) < 1e-12)
        psi = bruteforce.play(grid, psi, lambda t: 0 * walls, coupling, duration=time - before, steps=100)
        before = time
        plain = lines[0] * bruteforce.column(grid, psi, 1)[0]
        middle = np.argmin(np.abs(seen.cols[index]))
        profile = np.interp(places[2].ravel(), seen.rows[index], seen.values[index][:, middle])
        assert profile == pytest.approx(plain, abs=0.02 * plain.max())


def test_box_is_photographed_before_it_is_opened(play: Play) -> None:
    """A picture at the very start of the sequence is taken too, and holds all atoms."""
    run = play("box", {"sequence.release.pictures": ["0 ms", "5 ms"], "sequence.release.duration": "5 ms"})
    assert list(run.pictures) == ["end_release_0ms", "end_release_5ms"]
    assert run.pictures["end_release_0ms"].atoms == pytest.approx(1e5, rel=2e-3)


def test_box_shows_a_bright_spot_on_the_axis(play: Play) -> None:
    """What its comment promises of the end view after 20 ms."""
    seen = play("box").columns["x"]
    centre = [
        view[np.argmin(np.abs(r)), np.argmin(np.abs(x))]
        for view, r, x in zip(seen.values, seen.rows, seen.cols, strict=True)
    ]
    assert np.interp(20 * MS, seen.times, centre) / centre[0] == pytest.approx(4 / 3, abs=0.05)


def crossed(x: float, y: float, z: float) -> float:
    """The potential energy (J) in beams.toml, written out: two Gaussian beams and gravity."""
    au = 4 * np.pi * epsilon_0 * A0**3
    first = 687.3 * au * 0.2 / (np.pi * epsilon_0 * c * 50e-6**2)

    def beam(depth: float, waist: float, along: float, across: float) -> float:
        spread = 1 + (along * 1064e-9 / (np.pi * waist**2)) ** 2
        return -depth / spread * np.exp(-2 * across / (spread * waist**2))

    return beam(first, 50e-6, x, y**2 + z**2) + beam(2e-6 * k, 80e-6, y, x**2 + z**2) + MASS * g * z


def curvature(z: float) -> tuple[float, ...]:
    """Trap frequencies (Hz) along x, y, z at a height, by differences."""
    at, step = np.array([0.0, 0.0, z]), 2e-7
    second = [(crossed(*(at + e)) - 2 * crossed(*at) + crossed(*(at - e))) / step**2 for e in step * np.eye(3)]
    return tuple(np.sqrt(np.array(second) / MASS) / (2 * np.pi))


def test_beams_hold_the_cloud_below_their_crossing(play: Play) -> None:
    """The minimum of the potential and the frequencies there (independent of the program), and Thomas-Fermi in them."""
    low = 1e-6 * optimize.minimize_scalar(lambda u: crossed(0, 0, 1e-6 * u) / k, bounds=(-20, 0), method="bounded",
                                          options={"xatol": 1e-7}).x
    run, found = play("beams"), curvature(low)
    assert run.summary.ground.origin_um == pytest.approx((0, 0, 1e6 * low), abs=2e-3)
    # a beam is softer than its parabola, and the cloud is in part outside of it
    cloud = thomas_fermi(MASS, hz(*found), 5e4, SCATTERING_LENGTH)
    assert run.summary.ground.chemical_potential_hz == pytest.approx(cloud.mu / h, rel=0.015)
    assert np.array(run.summary.ground.width_um) == pytest.approx(1e6 * np.array(cloud.widths), rel=0.03)
    widths, _ = law(hz(*found), 5e4, [0, 15 * MS])
    assert np.array(run.summary.end.width_um) == pytest.approx(widths[-1], rel=0.025)
    text = " ".join((CONFIGS / "beams.toml").read_text(encoding="utf-8").replace("#", " ").split())
    rim = optimize.minimize_scalar(lambda u: -crossed(0, 0, 1e-6 * u) / k, bounds=(-150, 1e6 * low), method="bounded")
    assert f"{-1e6 * low:.1f} um below" in text
    assert f"{found[2]:.0f} Hz along z where the beams' own curvature promises {curvature(0)[2]:.0f} Hz" in text
    assert f"{-1e6 * crossed(0, 0, 0) / k:.1f} uK at the crossing" in text
    assert f"{1e6 * (-rim.fun - crossed(0, 0, low) / k):.1f} uK are left" in text
    # U/w times the steepest slope of a Gaussian, 2/sqrt(e), is m g
    assert f"less than {1e6 * MASS * g * 50e-6 * np.sqrt(np.e) / 2 / k:.1f} uK" in text


def test_beams_let_go_late(play: Play) -> None:
    """While they die away they hold what is left of m g: z = -g (t^2/2 - tau t + tau^2), closed form for so small a way."""
    end = play("beams").summary.end
    t, tau = 15 * MS, 30e-6
    assert end.centre_um[2] == pytest.approx(-1e6 * g * (t**2 / 2 - tau * t + tau**2), abs=0.3)
    assert end.velocity_mm_per_s[2] == pytest.approx(-1e3 * g * (t - tau), abs=0.02)
    assert "4.4 um above" in (CONFIGS / "beams.toml").read_text() and round(1e6 * g * tau * t, 1) == 4.4
    picture = play("beams").pictures["side_release_15ms"]
    up = picture.optical_density.sum(axis=1) @ picture.y / picture.optical_density.sum()
    assert up == pytest.approx(1e-6 * end.centre_um[2], abs=0.1e-6)
    # the aim is a place in the lab, the heights on the picture count from where the cloud hung
    assert np.mean(picture.y) == pytest.approx(-600e-6 - 1e-6 * play("beams").summary.ground.origin_um[2], abs=1e-9)
