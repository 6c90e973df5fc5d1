"""Small oscillations after a small jump of the trap, beside Bogoliubov's equations for a cloud of finite size."""

from __future__ import annotations

from collections.abc import Callable
from math import pi

import numpy as np
import pytest
from scipy import optimize

import motion
import trapsim
from motion import Natural
from reference import flights, modes

Solved = Callable[[trapsim.Plan], trapsim.Run]
Array = np.ndarray

#: natural time that is watched: some fifteen radians of breathing
WATCH = 7.0
#: how much of the trap's frequency jumps
JUMP = 2e-3


def jumped(beta: float, *ratios: float) -> tuple[Natural, trapsim.Plan]:
    """A cloud that rested in a trap slightly off, in the isotropic trap of this beta."""
    own = Natural(beta)
    isotropic = motion.hertz(own.hz(1, 1, 1))
    return own, motion.cloud(
        motion.stage("pulse", own.s(WATCH), to=f'{{ "dipole.frequency" = {isotropic} }}'),
        frequency=own.hz(*ratios), a=own.a, accuracy="fine", numerics="points = [36, 36, 36]",
    )  # fmt: skip


def frequency(t: Array, signal: Array, guess: float) -> float:
    """The frequency of the strongest cosine that starts at t = 0, beside a weaker faster one."""

    def model(t: Array, mean: float, swing: float, omega: float, other: float, faster: float) -> Array:
        return mean + swing * np.cos(omega * t) + other * np.cos(faster * t)

    start = (signal.mean(), signal[0] - signal.mean(), guess, 0.0, 1.9 * guess)
    scale = np.abs(signal - signal.mean()).max()
    best, _ = optimize.curve_fit(lambda t, *p: model(t, *p) / scale, t, signal / scale, p0=start, maxfev=20000)
    return float(best[2])


def watched(solved: Solved, own: Natural, plan: trapsim.Plan) -> tuple[Array, Array]:
    """Natural times and mean squares along x, y, z after the jump."""
    track = solved(plan).track
    after = track.time > 0
    return track.time[after] * own.omega, (track["width"][after] / own.unit.length) ** 2


@pytest.mark.slow
@pytest.mark.parametrize("row", flights.MODE_ROWS, ids=lambda r: f"beta {r.beta}")
def test_a_cloud_breathes_at_its_own_frequency(solved: Solved, row: flights.Mode) -> None:
    own, plan = jumped(row.beta, *(3 * [1 + JUMP]))
    t, squares = watched(solved, own, plan)
    # independent calculation: eigenvalues of Bogoliubov's equations; not the sqrt(5) of a large cloud
    assert frequency(t, squares.sum(axis=1), row.monopole) == pytest.approx(row.monopole, abs=3e-4)
    assert row.monopole != pytest.approx(modes.thomas_fermi_isotropic(1, 0), abs=1e-2)


@pytest.mark.slow
@pytest.mark.parametrize("row", flights.MODE_ROWS, ids=lambda r: f"beta {r.beta}")
def test_a_cloud_changes_its_shape_at_its_own_frequency(solved: Solved, row: flights.Mode) -> None:
    own, plan = jumped(row.beta, 1 + JUMP, 1 + JUMP, 1 - 2 * JUMP)
    t, squares = watched(solved, own, plan)
    # independent calculation: eigenvalues of Bogoliubov's equations; not the sqrt(2) of a large cloud
    signal = squares[:, 0] - squares[:, 2]
    assert frequency(t, signal, row.quadrupole) == pytest.approx(row.quadrupole, abs=3e-4)
    assert row.quadrupole != pytest.approx(modes.thomas_fermi_isotropic(0, 2), abs=1e-2)


def test_an_ideal_gas_breathes_at_twice_the_frequency_of_each_direction(solved: Solved) -> None:
    own = Natural(0.0)
    to = motion.hertz(own.hz(1, 1.3, 0.6))
    plan = motion.cloud(
        motion.stage("pulse", own.s(WATCH), to=f'{{ "dipole.frequency" = {to} }}'), frequency=own.hz(1.1, 1.2, 0.65),
        a="0 a0",
    )  # fmt: skip
    t, squares = watched(solved, own, plan)
    for j, (before, now) in enumerate(((1.1, 1.0), (1.2, 1.3), (0.65, 0.6))):
        # exact: <x^2> = <x^2>(0) [cos^2 wt + (w0/w)^2 sin^2 wt], Ermakov's equation
        exact = (np.cos(now * t) ** 2 + (before / now * np.sin(now * t)) ** 2) / (2 * before)
        assert squares[:, j] == pytest.approx(exact, rel=1e-5)


@pytest.mark.slow
@pytest.mark.parametrize("lam", [0.1, 8**0.5])
def test_a_large_round_cloud_swings_at_the_two_hydrodynamic_frequencies(lam: float) -> None:
    """Both m = 0 modes at once; a finite cloud is off by a little that shrinks with its size."""
    own = Natural(beta=1e4)
    to = motion.hertz(own.hz(1, 1, lam))
    low, high = flights.ROUND_MODES[lam]
    watch = 4 * pi if lam > 1 else 40.0
    plan = motion.cloud(
        motion.stage("pulse", own.s(watch), to=f'{{ "dipole.frequency" = {to} }}'),
        frequency=own.hz(1.004, 1.004, lam * 0.997), a=own.a,
    )  # fmt: skip
    track = trapsim.run(plan).track
    after = track.time > 0
    t, squares = track.time[after] * own.omega, track["width"][after] ** 2

    def model(t: Array, mean: float, one: float, a: float, two: float, b: float) -> Array:
        return mean + one * np.cos(a * t) + two * np.cos(b * t)

    # each mode is looked at along the direction in which it is strong
    strong = {low: 2, high: 0} if lam < 1 else {low: 0, high: 2}
    for omega, j in strong.items():
        signal = 1e3 * (squares[:, j] / squares[0, j] - 1)
        other = high if omega == low else low
        best, _ = optimize.curve_fit(model, t, signal, p0=(signal.mean(), -signal.mean(), omega, 0.1, other))
        # Stringari, Phys. Rev. Lett. 77, 2360 (1996), formula from memory: the limit of a large cloud
        assert best[2] == pytest.approx(omega, rel=8e-3)


@pytest.mark.parametrize(("beta", "factor"), [(0.0, 1.3), (100.0, 1.05), (100.0, 0.6)])
def test_a_gas_in_two_dimensions_breathes_at_twice_the_trap_frequency(beta: float, factor: float) -> None:
    own = Natural(0.0)
    start = 100 * factor
    plan = motion.flat(
        beta, motion.stage("pulse", own.s(3 * pi), to=f'{{ "dipole.frequency" = {motion.hertz([start, start, 0.0])} }}')
    )
    track = trapsim.run(plan).track
    kept = track.time > 0
    t, square = track.time[kept], (track["width"][kept, :2] ** 2).sum(axis=1)

    def model(t: Array, mean: float, swing: float, omega: float) -> Array:
        return mean + swing * np.cos(omega * t)

    guess = (square.mean(), square[0] - square.mean(), 4 * pi * start)
    best, _ = optimize.curve_fit(model, t, square, p0=guess)
    _, swing, omega = best
    # exact at any strength and amplitude: Pitaevskii and Rosch (1997)
    assert omega / (2 * pi * start) == pytest.approx(2.0, abs=2e-5)
    # one frequency, undamped
    assert np.abs(square - model(t, *best)).max() < 1e-4 * abs(swing)
