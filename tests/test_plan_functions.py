"""A user's own potential is tried before it is used, and what is wrong with it is said in words."""

from __future__ import annotations

import numpy as np
import pytest

import trapsim
from trapsim.terms.function import Potential

PLAN = """
[atoms]
species = "Rb-87"
number = "2e4"
[trap.bowl]
kind = "harmonic"
frequency = ["30 Hz", "30 Hz", "80 Hz"]
[trap.mine]
kind = "function"
name = "mine"
detail = "2 um"
"""
K_B = 1.380649e-23

BAD = {
    "collapsed": (lambda x, y, z, t: 1e-20 * np.ones((2, 4, 4)), "real number at every point"),
    "in kelvin": (lambda x, y, z, t: 5e-8 + 0 * x, "is in J"),
    "not finite": (lambda x, y, z, t: np.log(x) * K_B * 1e-9, "finite everywhere"),
    "complex": (lambda x, y, z, t: 1j * x, "real number at every point"),
    "raises": (lambda x, y, z, t: {}[0], "KeyError"),
    "no time": (lambda x, y, z: 0 * x, "TypeError"),
    "a list": (lambda x, y, z, t: [1e-30, 2e-30, 3e-30], "real number at every point"),
    "a word": ("V", "is needed"),
}


@pytest.mark.parametrize("name", BAD)
def test_a_function_that_is_no_potential_is_refused(name: str) -> None:
    function, said = BAD[name]
    with pytest.raises(trapsim.PlanError, match=rf"trap\.mine(.|\n)*{said}(.|\n)*->"):
        trapsim.plan_from_text(PLAN, "mine", functions={"mine": function})


@pytest.mark.parametrize(
    "function",
    [
        lambda x, y, z, t: K_B * 50e-9 * np.exp(-2 * (x**2 + y**2) / 5e-6**2),
        lambda x, y, z, t: 1e-31 * t,
        lambda x, y, z, t: np.where(np.abs(x) < 5e-6, 0.0, K_B * 1e-3),
        lambda x, y, z, t: 0,
    ],
    ids=["along x and y", "of time alone", "steep", "none"],
)
def test_a_function_that_is_a_potential_is_taken(function: Potential) -> None:
    assert trapsim.plan_from_text(PLAN, "mine", functions={"mine": function}).trap["mine"].function is function
