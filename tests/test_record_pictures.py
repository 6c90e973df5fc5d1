"""Pictures, momenta and the flow come back from run.h5 as they were, and a stranger understands them."""

from __future__ import annotations

from pathlib import Path

import h5py
import numpy as np
import pytest
import xarray

import trapsim

PLAN = """
title = "Invented: a grating on a released cloud"
[atoms]
species = "Rb-87"
number = "2e3"
scattering_length = "0 a0"
[trap.dipole]
kind = "harmonic"
frequency = ["60 Hz", "90 Hz", "90 Hz"]
[trap.light]
kind = "lattice"
wavelength = "1064 nm"
depth = "10 Er"
strength = 0
[numerics]
accuracy = "draft"
threads = 1
[[sequence]]
stage = "release"
duration = "0.5 ms"
[[sequence]]
stage = "pulse"
duration = "10 us"
to = { "light.strength" = 1 }
[[sequence]]
stage = "hold"
name = "flight"
duration = "6 ms"
pictures = ["2 ms", "6 ms"]
[camera.side]
view = "y"
pixel = "6.5 um"
magnification = 2.0
size = [128, 64]
follow = true
[camera.turned]
view = "z"
turn = "45 deg"
pixel = "6.5 um"
magnification = 2.0
size = [96, 64]
"""


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("grating") / "result"


@pytest.fixture(scope="module")
def run(folder: Path) -> trapsim.Run:
    return trapsim.run(trapsim.plan_from_text(PLAN, "grating"), folder)


def test_what_was_seen_comes_back_as_it_was(run: trapsim.Run, folder: Path) -> None:
    again = trapsim.open_run(folder)
    shots = ("release_0.5ms", "flight_2ms", "flight_6ms")
    assert set(again.pictures) == {f"{camera}_{shot}" for camera in ("side", "turned") for shot in shots}
    for name, picture in run.pictures.items():
        kept = again.pictures[name]
        assert np.array_equal(kept.optical_density, picture.optical_density)
        assert (kept.time, kept.right, kept.up, kept.atoms) == (picture.time, picture.right, picture.up, picture.atoms)
    assert [(s.stage, s.part) for s in again.momenta] == [(1, "light"), (2, "light")]
    for kept, seen in zip(again.momenta, run.momenta, strict=True):
        assert np.array_equal(kept.momentum.density, seen.momentum.density) and kept.orders == pytest.approx(seen.orders)
        assert kept.motion == seen.motion and set(kept.motion) == set(kept.orders)
    for view, plane in run.flow.items():
        assert np.array_equal(again.flow[view].right, plane.right, equal_nan=True)


def test_the_atoms_on_a_picture_are_the_atoms(run: trapsim.Run) -> None:
    # exact: what is absorbed is the cross-section times the column density, and the cloud is inside the frame
    for picture in run.pictures.values():
        assert picture.atoms == pytest.approx(2e3, rel=1e-4)


def test_orders_are_shared_alike_by_a_grating_at_rest_and_fly_apart(run: trapsim.Run) -> None:
    first, second = run.momenta
    # exact: a grating at rest has no preferred side, and momenta do not change in flight
    assert first.orders["1"] == pytest.approx(first.orders["-1"], rel=1e-9)
    assert second.orders["1"] == pytest.approx(first.orders["1"], rel=5e-4)
    assert sum(first.orders.values()) == pytest.approx(1, abs=1e-5)


def test_a_stranger_can_read_every_group(run: trapsim.Run, folder: Path) -> None:
    path = folder / "run.h5"
    with h5py.File(path) as file:
        groups = [*(f"pictures/{n}" for n in file["pictures"]), *(f"momentum/{n}" for n in file["momentum"]), "flow/x"]
    for name in groups:
        with xarray.open_dataset(path, group=name, engine="h5netcdf") as data:
            assert set(data.dims) <= set(data.coords)
            assert all("units" in one.attrs and "long_name" in one.attrs for one in data.variables.values())
