"""Motion between perfectly reflecting walls: revivals, mirrors, bounces, and what opening them costs.

Source of the revivals: D. L. Aronstein and C. R. Stroud, Phys. Rev. A 55, 4526 (1997), abstract; E_n = (n pi hbar/L)^2/2m
is textbook. All else is closed form.
"""

from __future__ import annotations

from dataclasses import replace
from math import pi

import numpy as np
import pytest
from scipy import special

import boxes
from boxes import Q
from trapsim.cloud.cloud import regauge
from trapsim.measure.observables import profile
from trapsim.space.axes import Wave
from trapsim.space.space import Space

UM = 1e-6
SIZE = 20 * UM


def packet(space: Space, places: list[float], speeds: list[float], width: float) -> np.ndarray:
    """A Gaussian packet with an rms half-width, off the middle and moving."""
    out = 1.0
    for x, place, speed in zip(space.coordinates(), places, speeds, strict=False):
        out = out * np.exp(-((x - place) ** 2) / (4 * width**2) + 1j * speed * x / Q)
    return out * np.ones(space.shape)


@pytest.mark.slow
@pytest.mark.parametrize("directions", [1, 2, 3])
def test_a_packet_comes_back_and_shows_its_mirror_image_half_way(directions: int) -> None:
    space = boxes.space([SIZE] * directions, {1: 48, 2: 32, 3: 20}[directions])
    width = {1: 0.9, 2: 1.2, 3: 1.6}[directions] * UM
    phi = packet(space, [2.3 * UM, -1.1 * UM, 0.7 * UM], [0.2e-3, -0.1e-3, 0.15e-3], width)
    # the corners of the packet that reach beyond the walls are cut off, whatever is left is the state
    time = boxes.revival(SIZE)
    # L = 20 um: E_1/h = 1.43480 Hz, T = 0.6969614 s, value from memory, and computed for Rb-87
    assert time == pytest.approx(0.6969614, rel=1e-6)
    legs = [boxes.leg(space, 0.0, time, landings=(time / 2,))]
    seen = [t.state.copy().cloud for t in boxes.play(phi, space, legs) if t.reason != "step"]
    start = phi / np.sqrt(space.integral(np.abs(phi) ** 2))
    half, whole = (c.phi for c in seen)
    flipped = start[tuple(slice(None, None, -1) if n > 1 else slice(None) for n in space.shape)]
    # psi(T) = psi(0); psi(x, T/2) = -psi(-x, 0) in every direction of the box
    for now, then in ((whole, start), (half, (-1) ** directions * flipped)):
        assert np.sqrt(space.integral(np.abs(now - then) ** 2)) < 1e-6


@pytest.mark.slow
def test_a_periodic_box_would_come_back_four_times_as_soon() -> None:
    """What a box without walls would do, so that the test above can tell them apart."""
    walls = boxes.space([SIZE], 64)
    phi = packet(walls, [2.3 * UM], [0.2e-3], 0.9 * UM)
    seen = [t.state.copy().cloud for t in boxes.play(phi, walls, [boxes.leg(walls, 0.0, boxes.revival(SIZE) / 4)])]
    start = phi / np.sqrt(walls.integral(np.abs(phi) ** 2))
    assert walls.integral(np.abs(seen[-1].phi - start) ** 2) > 0.5


def test_a_packet_is_thrown_back_by_a_wall() -> None:
    size, speed, width = 40 * UM, 6e-3, 1.5 * UM
    space = boxes.space([size], 400)
    # the wall is 20 um away; after 5 ms the packet has gone 30 um
    legs = [boxes.leg(space, 0.0, 5e-3, landings=(1e-3,))]
    ticks = boxes.play(packet(space, [0.0], [speed], width), space, legs)
    there, back = (profile(t.state.copy().cloud) for t in ticks if t.reason != "step")
    assert Q * there.k_mean[0] == pytest.approx(speed, rel=1e-6)
    assert Q * back.k_mean[0] == pytest.approx(-speed, rel=1e-6)
    # as if it had flown on into the mirror
    assert there.mean[0] == pytest.approx(speed * 1e-3, rel=1e-6)
    assert back.mean[0] == pytest.approx(size - speed * 5e-3, rel=1e-6)
    for seen, t in ((there, 1e-3), (back, 5e-3)):
        # free spreading of a Gaussian (closed form)
        assert seen.var[0] == pytest.approx(width**2 + (Q * t / (2 * width)) ** 2, rel=1e-5)


def test_a_frame_that_comes_to_rest_between_walls_leaves_the_kick_to_the_packet() -> None:
    space = boxes.space([SIZE], 240)
    phi = packet(space, [0.0], [0.0], UM)
    kick = boxes.leg(space, 0.0, 0.0, kick=(1.5e-3, 0.0, 0.0))
    kick = replace(kick, moving=(True, True, True))
    ticks = boxes.play(phi, space, [kick, boxes.leg(space, 0.0, 2e-3)])
    last = [t.state.copy().cloud for t in ticks][-1]
    seen = profile(last)
    assert last.frame.Xdot[0] == 0 and last.frame.X[0] == 0
    assert Q * seen.k_mean[0] == pytest.approx(1.5e-3, rel=1e-7)
    assert seen.mean[0] == pytest.approx(3 * UM, abs=1e-12)


def test_between_walls_a_cloud_moves_as_with_its_odd_image_in_a_periodic_box() -> None:
    """The method of images: no wall is needed where the wave function is odd about it, whatever the mean field."""
    points, time, c = 48, 5e-3, 1e-14
    walls = boxes.space([SIZE], points)
    # the image stands on the other side of the upper wall; seen from there the axis is twice as long
    wide = Space([Wave((0,), 2 * points, SIZE), *walls.axes[1:]])
    phi = packet(walls, [2 * UM], [0.3e-3], 2 * UM)
    image = np.concatenate([phi, -phi[::-1]])
    ends = []
    for space, start, share in ((walls, phi, 1.0), (wide, image, 2.0)):
        ticks = boxes.play(start, space, [boxes.leg(space, 0.0, time, c=c * share)])
        ends.append([t.state.copy().cloud for t in ticks][-1])
    one, both = (e.phi.ravel() for e in ends)
    assert np.abs(np.sqrt(2) * both[:points] - one).max() < 1e-10 * np.abs(one).max()
    assert np.abs(both[:points] + both[::-1][:points]).max() < 1e-10 * np.abs(both).max()
    # the mean field matters
    ideal = list(boxes.play(phi, walls, [boxes.leg(walls, 0.0, time)]))[-1].state.cloud.phi.ravel()
    assert walls.integral(np.abs(ideal - one).reshape(walls.shape) ** 2) > 0.01


@pytest.mark.slow
def test_a_dark_soliton_in_the_middle_of_a_box_stays_and_turns_its_phase_with_the_chemical_potential() -> None:
    # the lowest odd state is one period of Jacobi's sn: psi = A sn(4 K s/L | m), g = 16 K (K - E)/L, mu = 8 K^2 (1 + m)/L^2
    # in units hbar = m = 1 (Carr, Clark and Reinhardt, value from memory): each half holds the ground state of half a box
    m = 0.9
    complete, second = special.ellipk(m), special.ellipe(m)
    space = boxes.space([SIZE], 128)
    sn, _, _, _ = special.ellipj(4 * complete * (space.coordinates()[0] + SIZE / 2) / SIZE, m)
    across = 1e-12  # m^2, of the two directions along which nothing varies
    c = 16 * complete * (complete - second) * Q / SIZE * across
    mu = 8 * complete**2 * (1 + m) * Q / SIZE**2
    time = 20 / mu
    last = list(boxes.play(sn * np.ones(space.shape), space, [boxes.leg(space, 0.0, time, c=c)]))[-1].state.cloud
    start = space.array(sn / np.sqrt(space.integral(sn**2 * np.ones(space.shape))))
    # plain steps under the cap: a phase of 20 rad to 1e-4 of it
    overlap = space.integral((np.conj(start) * last.phi).real) + 1j * space.integral((np.conj(start) * last.phi).imag)
    assert abs(overlap) == pytest.approx(1, abs=1e-7)
    assert np.angle(overlap * np.exp(1j * mu * time)) == pytest.approx(0, abs=2e-3)


@pytest.mark.parametrize("points", [32, 64])
def test_opening_the_walls_costs_what_the_books_say(points: int) -> None:
    walls = boxes.space([SIZE], points)
    wide = Space([Wave((0,), 8 * points, 4 * SIZE), *walls.axes[1:]])
    phi = np.cos(pi * walls.coordinates()[0] / SIZE) * np.ones(walls.shape)
    flight = 20e-3
    legs = [boxes.leg(walls, 0.0, 1e-3), boxes.leg(wide, 1e-3, 1e-3 + flight, trapped=False)]
    states = [t.state.copy() for t in boxes.play(phi, walls, legs)]
    before = next(s for s in states if s.cloud.space is walls and s.cloud.time == 1e-3)
    after = states[-1]
    # the ground state of a box: <x^2> = L^2 (1/12 - 1/(2 pi^2)), <k^2> = (pi/L)^2, and free flight adds q^2 <k^2> t^2
    at_rest = SIZE**2 * (1 / 12 - 1 / (2 * pi**2))
    assert profile(before.cloud).var[0] == pytest.approx(at_rest, rel=3e-6)
    exact = at_rest + (Q * pi / SIZE * flight) ** 2
    seen = profile(after.cloud)
    missing = exact - seen.var[0] * after.cloud.frame.b[0] ** 2
    assert missing > 0
    assert missing == pytest.approx(Q**2 * after.books.kink[0] * flight**2, rel=0.02)
    # the share of a kink's energy beyond the highest wave number goes as one over the number of points
    assert after.books.kink[0] == pytest.approx(0.8 / points * (pi / SIZE) ** 2, rel=0.02)
    assert seen.norm == pytest.approx(1, abs=1e-6)


def test_between_walls_nothing_is_lost() -> None:
    coarse, fine = boxes.space([SIZE], 48), boxes.space([SIZE], 96)
    phi = packet(coarse, [1 * UM], [0.1e-3], 1.5 * UM)
    last = list(boxes.play(phi, coarse, [boxes.leg(coarse, 0.0, 1e-3), boxes.leg(fine, 1e-3, 2e-3)]))[-1].state
    assert not last.books.kink.any()
    still = regauge(last.cloud, Xdot=np.zeros(3))
    assert profile(still).norm == pytest.approx(1, abs=1e-10)
