"""Single steps: order of the splitting, exact turns, exact reversal, honest estimates."""

from __future__ import annotations

from math import pi, sqrt

import numpy as np
import pytest

import motion
from motion import Natural
from trapsim.evolve.march import _enter, stepper
from trapsim.evolve.pace import Buffers, Flight, Stride, Trapped
from trapsim.evolve.splitstep import SplitStep
from trapsim.evolve.state import State
from trapsim.prepare.setup import Setup, prepare

OWN = Natural(beta=40.0)


def at_the_door(kind: str, duration: float, **words: object) -> tuple[Setup, State, SplitStep]:
    """A ground state whose trap has jumped or gone, with its stepper on the only leg."""
    if kind == "flight":
        stage = motion.stage("release", OWN.s(duration))
    else:
        to = f'{{ "dipole.frequency" = {motion.hertz(OWN.hz(1.3, 1.3, 0.9))} }}'
        stage = motion.stage("pulse", OWN.s(duration), to=to)
    words = {"a": OWN.a, "accuracy": "fine", **words}
    setup = prepare(motion.cloud(stage, frequency=OWN.hz(1, 1, 1.4), **words))
    state = _enter(motion.begin(setup), setup.legs[0], setup.space, guards=setup.guards, afford=lambda points: False)
    return setup, state, stepper(state.law, setup.legs[0], setup.q)


def distance(step: SplitStep, a: np.ndarray, b: np.ndarray) -> float:
    return sqrt(step.space.integral(np.abs(a - b) ** 2))


def strang(step: SplitStep, state: State, span: float, count: int) -> np.ndarray:
    phi = step.space.array(state.cloud.phi)
    edges = np.linspace(0, span, count + 1)
    for t0, t1 in zip(edges[:-1], edges[1:], strict=True):
        step.strang(phi, t0, t1 - t0)
    return phi


def extrapolated(step: SplitStep, state: State, span: float, count: int) -> np.ndarray:
    phi = step.space.array(state.cloud.phi)
    edges = np.linspace(0, span, count + 1)
    free = Flight(tolerance=np.inf)
    work = Buffers(step)
    for t0, t1 in zip(edges[:-1], edges[1:], strict=True):
        assert free.take(step, phi, t0, Stride(t1 - t0), t1 - t0, work).h == t1 - t0
    return phi


@pytest.mark.parametrize("kind", ["flight", "trap"])
def test_strang_is_of_second_order_and_its_extrapolation_of_fourth(kind: str) -> None:
    span = OWN.s(0.8)
    _, state, step = at_the_door(kind, 0.8)
    truth = extrapolated(step, state, span, 160)
    plain = [distance(step, strang(step, state, span, n), truth) for n in (20, 40, 80)]
    # textbook: halving the step divides the error by 4
    assert plain[0] / plain[1] == pytest.approx(4, rel=0.1)
    assert plain[1] / plain[2] == pytest.approx(4, rel=0.03)
    better = [distance(step, extrapolated(step, state, span, n), truth) for n in (10, 20, 40)]
    # Richardson: by 16
    assert better[0] / better[1] == pytest.approx(16, rel=0.35)
    assert better[1] / better[2] == pytest.approx(16, rel=0.15)
    assert better[1] < 0.02 * plain[0]


def test_the_estimate_of_a_step_is_its_error() -> None:
    _, state, step = at_the_door("flight", 0.8)
    h = OWN.s(0.1)
    coarse = step.strang(step.space.array(state.cloud.phi), 0.0, h)
    truth = extrapolated(step, state, h, 20)
    work = Buffers(step)
    phi = step.space.array(state.cloud.phi)
    taken = Flight(np.inf).take(step, phi, 0.0, Stride(h), h, work)
    # |F - C|/3 is a quarter of the error of the whole step C, up to higher orders
    assert taken.error == pytest.approx(distance(step, coarse, truth) / 4, rel=0.05)
    assert distance(step, phi, truth) < taken.error


def test_a_step_beyond_the_tolerance_is_refused_and_shortened() -> None:
    _, state, step = at_the_door("flight", 0.8)
    work = Buffers(step)
    phi = step.space.array(state.cloud.phi)
    h = OWN.s(0.4)
    taken = Flight(1e-6).take(step, phi, 0.0, Stride(h), h, work)
    assert taken.rejected > 0 and taken.h < h and taken.error < 1.5e-6


@pytest.mark.parametrize("kind", ["flight", "trap"])
def test_a_step_backwards_undoes_a_step(kind: str) -> None:
    _, state, step = at_the_door(kind, 0.8)
    phi = step.space.array(state.cloud.phi)
    h = OWN.s(0.07)
    step.strang(phi, 0.0, h)
    assert distance(step, phi, state.cloud.phi) > 1e-3
    step.strang(phi, h, -h)
    # exact: a symmetric splitting is reversible
    assert distance(step, phi, state.cloud.phi) < 1e-12


@pytest.mark.parametrize("kind", ["flight", "trap"])
def test_an_ideal_gas_is_moved_without_error_by_steps_of_any_length(kind: str) -> None:
    """The kinetic energy and the parabola turn phase space, and that turn is done exactly."""
    _, state, step = at_the_door(kind, 1.2, a="0 a0")
    span = OWN.s(1.2)
    one, many = strang(step, state, span, 1), strang(step, state, span, 50)
    # exact: Chin and Krotscheck, Phys. Rev. E 72, 036705 (2005); phi is what the grid leaves of it
    assert distance(step, one, many) < 1e-6
    assert distance(step, one, state.cloud.phi) > 0.1


def test_a_plain_step_in_a_trap_stays_under_the_cap() -> None:
    _, state, step = at_the_door("trap", 0.8, accuracy="normal")
    peak = float(state.cloud.density().max())
    held = Trapped(1e-2, cap=2.4)
    first = held.first(step, 0.0, peak)
    assert step.fastest_phase(0.0, first.h, peak) == pytest.approx(2.4, rel=5e-3)
    # the phase of the highest wave number along all directions at b = 1: q k_max^2 h/2
    q = state.cloud.q
    k2 = sum(step.space.axis(j).k_max ** 2 / len(step.space.axis(j).covers) for j in range(3))
    _, mean_field = step.law.integrals(0.0, first.h)
    assert step.fastest_phase(0.0, first.h, peak) == pytest.approx(q * k2 * first.h / 2 + mean_field * peak, rel=1e-3)


@pytest.mark.slow
def test_beyond_the_cap_the_splitting_is_wrong_with_a_perfect_norm() -> None:
    """Why there is a cap: Weideman and Herbst, SIAM J. Numer. Anal. 23, 485 (1986)."""
    own = Natural(beta=500.0)
    to = f'{{ "dipole.frequency" = {motion.hertz(own.hz(1.05, 1.05, 1.05))} }}'
    setup = prepare(motion.cloud(
        motion.stage("pulse", own.s(12), to=to), frequency=own.hz(1, 1, 1), a=own.a, accuracy="draft",
        numerics='axes = "full"\npoints = [32, 32, 32]',
    ))  # fmt: skip
    state = _enter(motion.begin(setup), setup.legs[0], setup.space, guards=setup.guards, afford=lambda points: False)
    step = stepper(state.law, setup.legs[0], setup.q)
    peak = float(state.cloud.density().max())
    unit = step.fastest_phase(0.0, own.s(1e-3), peak) / own.s(1e-3)
    cold, hot = (strang(step, state, own.s(12), int(own.s(12) * unit / phase) + 1) for phase in (2.0, 9.5))

    def share_of_fast(phi: np.ndarray) -> float:
        samples = step.space.forward(step.space.array(phi))
        power = np.abs(samples) ** 2
        k2 = sum(step.space.along(d, v) for d, v in enumerate(step.space.per_axis(np.ones(3), "k2")))
        return float(power[np.broadcast_to(k2, power.shape) > 0.5 * k2.max()].sum() / power.sum())

    norms = [step.space.integral(np.abs(phi) ** 2) for phi in (cold, hot)]
    assert norms == pytest.approx([1, 1], abs=1e-11)
    assert share_of_fast(cold) < 1e-7
    assert share_of_fast(hot) > 100 * share_of_fast(cold)


def test_the_phase_of_a_plane_wave_runs_as_it_should() -> None:
    """exp(-i q k^2 t/2): textbook; sign and factor of the kinetic flow."""
    _, _, step = at_the_door("flight", 0.8, numerics='axes = "full"', a="0 a0")
    d = 2
    axis = step.space.axes[d]
    k, drift = axis.k[3], 1.7e-4
    wave = step.space.array(np.broadcast_to(np.exp(1j * k * step.space.along(d, axis.points)), step.space.shape))
    before = wave.copy()
    step.kinetic(wave, np.array([0.3, 0.5, 1.0]) * drift)
    assert wave / before == pytest.approx(np.full(before.shape, np.exp(-0.5j * step.q * k**2 * drift)), abs=1e-12)


def test_the_mean_field_turns_the_phase_by_its_coupling() -> None:
    """exp(-i 4 pi q a N n t): textbook; a uniform gas that fills a periodic box."""
    length = 10e-6
    plan = motion.cloud(
        motion.stage("hold", 1e-3), frequency=(0.0, 0.0, 90.0), number=1e4, accuracy="normal",
        numerics=f'extent = ["{length!r} m", "{length!r} m", "auto"]',
    )  # fmt: skip
    setup = prepare(plan)
    state = _enter(motion.begin(setup), setup.legs[0], setup.space, guards=setup.guards, afford=lambda points: False)
    step = stepper(state.law, setup.legs[0], setup.q)
    flat = step.space.array(np.full(step.space.shape, 1.0))
    flat /= sqrt(step.space.integral(np.abs(flat) ** 2))
    t = 2e-5
    before = flat.copy()
    step.potential(flat, 0.0, t, np.zeros(3))
    middle = step.space.shape[step.space.dim(2)] // 2
    turned = np.angle((flat / before).reshape(-1)[middle])
    half = step.space.axis(2).half_extent
    density = 1 / (length**2 * 2 * half)
    coupling = 4 * pi * setup.q * 100.4 * 5.29177210544e-11 * 1e4
    # the parabola of the law adds i dJ xi^2/(2 q) at the middle point, half a spacing off
    _, dJ = step.law.integrals(0.0, t)
    parabola = state.law.i[2] * dJ * (step.space.axis(2).points[middle] ** 2) / (2 * setup.q)
    assert turned == pytest.approx(-(coupling * density * t + parabola), rel=1e-9)


@pytest.mark.parametrize("kind", ["flight", "trap"])
@pytest.mark.parametrize("axes", ["auto", "full"])
def test_two_halves_with_one_flow_in_the_middle_are_two_steps(kind: str, axes: str) -> None:
    # closed form: potential flows change no density, so that two in a row are one
    _, state, step = at_the_door(kind, 0.8, accuracy="draft", numerics=f'axes = "{axes}"')
    h = OWN.s(0.2)
    one, two = (step.space.array(state.cloud.phi) for _ in range(2))
    spent = step.pairs
    step.halves(one, 0.1 * h, h)
    assert step.pairs - spent == 2
    step.strang(two, 0.1 * h, h / 2)
    step.strang(two, 0.6 * h, h / 2)
    assert distance(step, one, two) < 1e-13
    # and they are not one whole step
    assert distance(step, one, step.strang(step.space.array(state.cloud.phi), 0.1 * h, h)) > 1e-9
