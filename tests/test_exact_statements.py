"""What holds exactly for every cloud: mechanics of the centre, conservation, reversal, the gas in two dimensions."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from math import pi

import numpy as np
import pytest

import motion
import trapsim
from motion import RB, Natural
from reference import classical, gaussian
from trapsim.evolve import march as marching
from trapsim.evolve.scaling import LawStart
from trapsim.evolve.state import State
from trapsim.measure.flow import current
from trapsim.prepare.setup import prepare

Solved = Callable[[trapsim.Plan], trapsim.Run]

TWO_PI = 2 * pi
G = 9.80665
STILL = '["0 mm/s", "0 mm/s", "0 mm/s"]'


# ---- the centre ----------------------------------------------------------------------------------------------------


def slosh(a: str, **words: object) -> trapsim.Plan:
    """Kicked in its trap, which then jumps aside for a while; gravity along z."""
    return motion.cloud(
        motion.stage("kick", velocity='["0.7 mm/s", "0 mm/s", "-0.4 mm/s"]'), motion.stage("hold", 6e-3),
        motion.stage("pulse", 4e-3, to='{ "dipole.centre" = ["0 um", "1.5 um", "-2 um"] }'), motion.stage("hold", 5e-3),
        frequency=(40, 70, 100), a=a, gravity=True, number=3e3, **words,
    )  # fmt: skip


@pytest.mark.parametrize("a", ["0 a0", "100.4 a0"], ids=["ideal", "interacting"])
def test_a_sloshing_cloud_follows_the_classical_path(solved: Solved, a: str) -> None:
    run = solved(slosh(a))
    sag = np.array([0, 0, -classical.sag(TWO_PI * 100)])
    assert np.array(run.summary.ground.origin_um) == pytest.approx(1e6 * sag, rel=1e-12, abs=1e-12)
    moved = np.array([0, 1.5e-6, -2e-6])
    edges = (6e-3, 10e-3)
    for j, (f, v) in enumerate(zip((40, 70, 100), (0.7e-3, 0.0, -0.4e-3), strict=True)):

        def centre(t: float, j: int = j) -> float:
            return moved[j] if edges[0] <= t < edges[1] else 0.0

        push = -G if j == 2 else 0.0
        x, dx = classical.path(
            sag[j], v, run.track.time, omega=TWO_PI * f, centre=centre, acceleration=push, edges=edges
        )
        # exact (Kohn, Phys. Rev. 123, 1242 (1961)); independent calculation: Newton's law by DOP853
        assert run.track["centre"][:, j] == pytest.approx(x - sag[j], rel=1e-10, abs=1e-15)
        # the kick comes between the first two samples, which show the same instant
        after = run.track.time > 0
        assert run.track["velocity"][after, j] == pytest.approx(dx[after], rel=1e-9, abs=1e-12)


def test_the_centre_moves_alike_with_and_without_interaction(solved: Solved) -> None:
    ideal, full = (solved(slosh(a)).summary for a in ("0 a0", "100.4 a0"))
    for one, other in zip(ideal.stages, full.stages, strict=True):
        # exact: Kohn's theorem; to 1e-9 um
        assert one.end.centre_um == pytest.approx(other.end.centre_um, rel=1e-10, abs=1e-9)
        assert one.end.velocity_mm_per_s == pytest.approx(other.end.velocity_mm_per_s, rel=1e-9, abs=1e-9)


@pytest.mark.slow
def test_a_sloshing_cloud_keeps_its_shape(solved: Solved) -> None:
    """Only the trap's jump of place acts here, which pushes all atoms alike."""
    run = solved(slosh("100.4 a0", accuracy="fine"))
    # exact: Dobson, Phys. Rev. Lett. 73, 2244 (1994)
    assert run.track["width"] == pytest.approx(np.broadcast_to(run.track["width"][0], (len(run.track), 3)), rel=1e-5)


@pytest.mark.slow
def test_a_sloshing_cloud_obeys_kohn_on_a_grid_that_stands_still() -> None:
    """In the lab frame nothing moves by itself: the wave function carries the whole slosh."""
    runs = [
        trapsim.run(motion.cloud(
            motion.stage("kick", velocity='["0.3 mm/s", "0 mm/s", "0 mm/s"]'), motion.stage("hold", 10e-3),
            frequency=(60, 90, 90), a=a, number=2e3, accuracy="normal",
            numerics='frame = "lab"\nextent = ["26 um", "16 um", "16 um"]',
        ))
        for a in ("0 a0", "100.4 a0")
    ]  # fmt: skip
    x, v = classical.swing(0.0, 0.3e-3, np.array(10e-3), omega=TWO_PI * 60)
    for run in runs:
        # exact: Kohn's theorem; what is left is the error of the plain steps
        assert run.summary.end.centre_um[0] == pytest.approx(1e6 * x, abs=2e-3)
        assert run.summary.end.velocity_mm_per_s[0] == pytest.approx(1e3 * v, abs=1e-3)


def test_a_kick_moves_the_cloud_and_leaves_its_shape(solved: Solved) -> None:
    velocity = '["3 mm/s", "-20 mm/s", "0.5 mm/s"]'
    kicked, still = (
        solved(motion.cloud(
            motion.stage("kick", velocity=v), motion.stage("release", 12e-3), frequency=(30, 90, 90), number=1e4
        ))
        for v in (velocity, STILL)
    )  # fmt: skip
    end = kicked.summary.end
    # exact (Ehrenfest): x = v t
    assert end.centre_um == pytest.approx((36.0, -240.0, 6.0), rel=1e-12)
    assert end.velocity_mm_per_s == pytest.approx((3.0, -20.0, 0.5), rel=1e-12)
    assert end.width_um == pytest.approx(still.summary.end.width_um, rel=1e-12)
    # a kicked cloud costs no more than a still one
    assert kicked.summary.numerics.axes == still.summary.numerics.axes
    assert end.centre_kinetic_nk == pytest.approx(
        0.5 * RB * (3e-3**2 + 20e-3**2 + 0.5e-3**2) / 1.380649e-23 * 1e9, rel=1e-12
    )


def test_a_released_cloud_falls(solved: Solved) -> None:
    run = solved(motion.cloud(motion.stage("release", 20e-3), frequency=(30, 90, 90), number=1e4, gravity=True))
    t = run.track.time
    # exact: g t^2/2 down, from the place where gravity had pulled it
    assert run.track["centre"][:, 2] == pytest.approx(-G * t**2 / 2, rel=1e-11, abs=1e-17)
    assert run.track["velocity"][:, 2] == pytest.approx(-G * t, rel=1e-11, abs=1e-15)
    assert run.track["centre"][:, :2] == pytest.approx(0, abs=1e-17)
    assert run.summary.ground.origin_um[2] == pytest.approx(-1e6 * classical.sag(TWO_PI * 90), rel=1e-12)


# ---- continuity, conservation, virial ------------------------------------------------------------------------------


BREATH = Natural(beta=200.0)


def breathing(**words: object) -> trapsim.Plan:
    """A jump of all frequencies by different shares, then a long look."""
    return motion.cloud(
        motion.stage("pulse", 12e-3, to=f'{{ "dipole.frequency" = {motion.hertz([115.0, 90.0, 130.0])} }}'),
        frequency=(100, 100, 100), a=BREATH.a, **words,
    )  # fmt: skip


def test_the_density_changes_as_the_current_says(solved: Solved) -> None:
    flight = solved(motion.cloud(motion.stage("release", 10e-3), frequency=(30, 90, 120), number=1e4))
    # exact: d n/dt + div j = 0; the residual is measured by two short steps back in time
    assert 0 < flight.summary.numerics.continuity < 1e-5
    assert 0 < solved(breathing()).summary.numerics.continuity < 1e-4


def test_the_current_carries_the_atoms_that_leave() -> None:
    """Independent of the program's own check: atoms beyond a plane, counted twice, against the flux through it."""
    setup = prepare(motion.cloud(
        motion.stage("release", 4e-3), frequency=(60, 90, 120), number=1e4, accuracy="fine", numerics='axes = "full"'
    ))  # fmt: skip
    ticks = [t.state for t in motion.play(setup, motion.begin(setup))]
    state = next(s for s in ticks if s.cloud.time > 1.5e-3)
    leg = setup.legs[0]
    h = 1e-6
    now = state.cloud
    step = marching.stepper(state.law, leg, now.q)

    def moved(to: float) -> marching.Cloud:
        phi = step.strang(now.space.array(now.phi), now.time, to)
        return replace(now, phi=phi, time=now.time + to, frame=step.law.frame(now.time + to))

    earlier, later = moved(-h), moved(h)
    d = now.space.dim(0)
    axis = now.space.axes[d]
    plane = now.frame.b[0] * (axis.points[2 * axis.n // 3] + axis.spacing / 2)

    def line(cloud: marching.Cloud, values: np.ndarray) -> Callable[[np.ndarray], np.ndarray]:
        """A marginal along x in the lab, evaluated anywhere."""
        marginal = cloud.space.marginals(values)[d] / cloud.frame.b[0]
        return lambda x: axis.finer().basis(x / cloud.frame.b[0]) @ (axis_fine(axis, marginal))

    def axis_fine(axis: object, marginal: np.ndarray) -> np.ndarray:
        return axis.basis(axis.finer().points) @ marginal

    def beyond(cloud: marching.Cloud) -> float:
        x = np.linspace(plane, cloud.frame.b[0] * axis.half_extent, 4001)
        return float(np.trapezoid(line(cloud, cloud.density())(x), x))

    flux = current(now)[d] * now.frame.B  # per volume of grid coordinates, as the density
    through = line(now, flux)(np.array([plane]))[0]
    gain = (beyond(later) - beyond(earlier)) / (2 * h)
    # exact: the law of continuity, integrated over the half space beyond the plane
    assert through == pytest.approx(gain, rel=1e-4)
    assert through > 0


def test_energy_and_norm_stay_where_nothing_changes(solved: Solved) -> None:
    flight = solved(motion.cloud(motion.stage("release", 20e-3), frequency=(30, 90, 120), number=1e4))
    trapped = solved(breathing())
    # exact conservation; the bounds are those of accuracy normal
    for run, tolerance in ((flight, 1e-4), (trapped, 3e-4)):
        assert run.summary.numerics.energy_drift < tolerance
        energy = run.track["kinetic"].sum(axis=1) + run.track["trap"] + run.track["interaction"]
        inside = run.track.time > 0
        assert energy[inside] == pytest.approx(np.full(inside.sum(), energy[inside][0]), rel=2 * tolerance)
    assert abs(flight.summary.numerics.norm_drift) < 1e-5
    assert abs(trapped.summary.numerics.norm_drift) < 1e-8


def test_plain_steps_are_unitary(solved: Solved) -> None:
    to = f'{{ "dipole.frequency" = {motion.hertz([30.0, 110.0, 110.0])} }}'
    run = solved(motion.cloud(motion.stage("pulse", 5e-3, to=to), frequency=(30, 100, 100)))
    # both flows only turn phases
    assert run.summary.numerics.march.steps > 50
    assert abs(run.summary.numerics.norm_drift) < 1e-12


@pytest.mark.slow
def test_the_virial_theorem_rules_the_second_derivative_of_the_size(solved: Solved) -> None:
    """<r^2>'' = (4 E_kin + 6 E_int - 4 E_pot)/m, from the derivative of the exact first one."""
    run = solved(breathing(accuracy="fine", at=tuple(np.arange(400, 425) * 1e-5)))
    chosen = [motion.at(run.track, t) for t in np.arange(400, 425) * 1e-5]
    track = run.track
    first = 2 * (track["width"] * track["expansion_rate"]).sum(axis=1)[chosen]
    # <r^2>' at 25 times 10 us apart, differentiated by a polynomial
    t = (np.arange(25) - 12) * 1e-5
    second = np.polynomial.Polynomial.fit(t, first, 8).deriv()(0.0)
    middle = chosen[12]
    energies = (
        4 * track["kinetic"].sum(axis=1) + 6 * track["interaction"] - 4 * track["trap"]
    )[middle]  # fmt: skip
    # exact: the virial theorem in a harmonic trap
    assert second == pytest.approx(energies / RB, rel=1e-5)


# ---- two dimensions ------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("beta", [0.0, 10.0, 500.0])
def test_a_gas_in_two_dimensions_expands_in_closed_form_for_any_interaction(solved: Solved, beta: float) -> None:
    run = solved(motion.flat(beta, motion.stage("release", 10e-3)))
    track = run.track
    assert run.summary.numerics.axes == ("radial", "radial", "uniform")
    square = (track["width"][:, :2] ** 2).sum(axis=1)
    energy = track["kinetic"].sum(axis=1) + track["interaction"]
    exact = [
        gaussian.mean_square_radius_2d(t, start=square[0], release_energy=energy[0], mass=RB) for t in track.time
    ]
    # exact: Pitaevskii and Rosch, Phys. Rev. A 55, R853 (1997), formula from memory
    assert square == pytest.approx(exact, rel=2e-6)
    # and the start itself: 2 x_rms^2 of the ideal gas is the oscillator length squared
    if beta == 0:
        assert square[0] == pytest.approx(Natural(0.0).unit.length ** 2, rel=1e-7)


# ---- freedom of choice: time's arrow, frame law, frame ---------------------------------------------------------------


def reversed_in_time(state: State, start: float) -> State:
    """The mirror of a state, at a new starting time: psi* runs the film backwards."""
    cloud, frame = state.cloud, state.cloud.frame
    mirrored = replace(frame, bdot=-frame.bdot, Xdot=-frame.Xdot)
    return State(replace(cloud, phi=cloud.space.array(cloud.phi.conj()), frame=mirrored, time=start))


@pytest.mark.slow
@pytest.mark.parametrize(
    "stages",
    [(motion.stage("release", 5e-3),), (motion.stage("hold", 5e-3),)],
    ids=["flight", "trap"],
)
def test_a_film_run_backwards_ends_where_it_began(stages: tuple[str, ...]) -> None:
    plan = motion.cloud(*stages, frequency=(60, 90, 120), number=2e4, accuracy="fine", gravity=True)
    setup = prepare(plan)
    first = motion.begin(setup)
    if plan.sequence[0].kind == "hold":
        # something must move: widen the flow by a small breath, and push
        wave = np.exp(1j * first.cloud.space.quadratic(np.array([1.0, -2.0, 3.0]) * 1e10))
        frame = replace(first.cloud.frame, Xdot=np.array([1e-3, 0.0, 2e-3]))
        first = State(replace(first.cloud, phi=first.cloud.space.array(first.cloud.phi * wave), frame=frame))
    there = motion.play(setup, first)[-1].state
    back = motion.play(setup, reversed_in_time(there, 0.0))[-1].state
    before, after = (motion.seen(c.cloud, setup.legs[0].interval) for c in (first, back))
    away = motion.seen(there.cloud, setup.legs[0].interval)
    # exact: the equation is the same with psi* and -t
    assert after.width == pytest.approx(before.width, rel=2e-6)
    assert after.interaction == pytest.approx(before.interaction, rel=1e-5)
    assert after.centre == pytest.approx(before.centre, rel=1e-9, abs=1e-15)
    assert after.velocity == pytest.approx(-before.velocity, rel=1e-9, abs=1e-13)
    assert not np.allclose(away.width, before.width, rtol=1e-2)


def test_the_frame_law_leaves_the_answer_alone(monkeypatch: pytest.MonkeyPatch) -> None:
    """Castin and Dum's law, the ideal gas' law, and a frame that only follows the centre give one flight."""
    own = Natural(beta=30.0)
    plan = motion.cloud(
        motion.stage("release", own.s(2.0)), frequency=own.hz(1, 1, 0.7), a=own.a, accuracy="fine",
        numerics='extent = ["18 um", "18 um", "22 um"]\npoints = [56, 56, 96]',
    )  # fmt: skip
    setup = prepare(plan)
    w2 = setup.omega**2
    laws = {
        "measured": None,
        "Castin-Dum": (np.zeros(3), w2 / setup.coupling),
        "ideal": (w2, np.zeros(3)),
        "half of each": (w2 / 2, w2 / 2 / setup.coupling),
    }
    first = motion.begin(setup)
    ends = {}
    for name, constants in laws.items():
        with monkeypatch.context() as patch:
            if constants is not None:
                A, i = constants

                def chosen(cloud: object, seen: object, *, A: object = A, i: object = i, **how: object) -> LawStart:
                    return LawStart(cloud.time, cloud.frame, A, i, seen.var)

                patch.setattr(marching, "measure_law", chosen)
            end = motion.play(setup, first)[-1].state.cloud
        ends[name] = motion.seen(end, setup.legs[0].interval)
    scales = [tuple(np.round(e.scale, 3)) for e in ends.values()]
    assert len(set(scales)) == 4, "the laws must really differ"
    for one in ends.values():
        # exact: the law decides where the grid goes, not what the cloud does
        assert one.width == pytest.approx(ends["measured"].width, rel=1e-6)
        assert one.rate == pytest.approx(ends["measured"].rate, rel=2e-6)
        assert one.interaction == pytest.approx(ends["measured"].interaction, rel=5e-6)


def test_a_grid_that_stands_still_in_the_lab_sees_the_same_flight(solved: Solved) -> None:
    own = Natural(beta=10.0)

    def plan(numerics: str) -> trapsim.Plan:
        return motion.cloud(
            motion.stage("kick", velocity='["0 mm/s", "0 mm/s", "0.4 mm/s"]'), motion.stage("release", own.s(1.0)),
            frequency=own.hz(1, 1, 1.3), a=own.a, numerics=numerics, accuracy="fine",
        )  # fmt: skip

    moving = solved(plan(""))
    lab = solved(plan('frame = "lab"\nextent = ["16 um", "16 um", "16 um"]\npoints = [32, 32, 96]'))
    assert lab.track["scale"] == pytest.approx(1.0)
    assert [leg.axes for leg in lab.summary.numerics.legs] == 2 * [("radial", "radial", "wave")]
    # exact: one equation in two frames
    assert lab.summary.end.width_um == pytest.approx(moving.summary.end.width_um, rel=1e-5)
    assert lab.summary.end.centre_um == pytest.approx((0, 0, 1e3 * own.s(1.0) * 0.4), rel=1e-6, abs=1e-9)
    assert lab.summary.end.velocity_mm_per_s == pytest.approx((0, 0, 0.4), rel=1e-6, abs=1e-9)
    assert lab.summary.end.interaction_nk == pytest.approx(moving.summary.end.interaction_nk, rel=1e-4)


@pytest.mark.slow
def test_atoms_too_fast_for_a_grid_in_the_lab_are_refused() -> None:
    """While it falls, the cloud leaves the spectrum, which would fold it back as slow atoms."""
    plan = motion.cloud(
        motion.stage("release", 3e-3), frequency=(100, 100, 130), number=1e3, gravity=True,
        numerics='frame = "lab"\nextent = ["20 um", "20 um", "130 um"]',
    )  # fmt: skip
    with pytest.raises(trapsim.PhysicsRefused, match=r"highest wave number along z(.|\n)*numerics.points along z"):
        trapsim.run(motion.cramped(plan))
