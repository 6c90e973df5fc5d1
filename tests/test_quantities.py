"""Lab text and SI numbers.

Expected numbers are worked out by hand from the definitions of the units (BIPM, The International
System of Units, 9th edition, 2019: h and k_B are exact) and CODATA 2022 as shipped with scipy.
"""

from __future__ import annotations

import math
import pickle
import subprocess
import sys

import pytest
from hypothesis import given
from hypothesis import strategies as st

from trapsim.quantities import KINDS, Quantity, QuantityError, human, in_unit, parse

TWO_PI = 2 * math.pi
H = 6.62607015e-34  # J s, exact in the SI of 2019
K_B = 1.380649e-23  # J/K, exact in the SI of 2019


@pytest.mark.parametrize(("text", "kind", "value", "sigma"), [
    ("40 um", "length", 4e-5, 0.0),
    ("1.5(2) mm", "length", 1.5e-3, 2e-4),
    ("100 a0", "length", 5.29177210544e-9, 0.0),  # CODATA 2022 Bohr radius
    ("20 ms", "time", 0.02, 0.0),
    ("2 min", "time", 120.0, 0.0),
    ("20 Hz", "frequency", TWO_PI * 20, 0.0),
    ("150(2) Hz", "frequency", TWO_PI * 150, TWO_PI * 2),
    ("1.50(25) kHz", "frequency", TWO_PI * 1500, TWO_PI * 250),
    ("125.66 rad/s", "frequency", 125.66, 0.0),
    ("20 +/- 0.5 Hz", "frequency", TWO_PI * 20, TWO_PI * 0.5),
    ("20 ± 0.5 Hz", "frequency", TWO_PI * 20, TWO_PI * 0.5),
    ("(20 ± 0.5) Hz", "frequency", TWO_PI * 20, TWO_PI * 0.5),
    ("20 Hz ± 2 %", "frequency", TWO_PI * 20, TWO_PI * 0.4),
    ("1 kHz +/- 3 Hz", "frequency", TWO_PI * 1000, TWO_PI * 3),
    ("-3.2 mm/s", "velocity", -3.2e-3, 0.0),
    ("1 um/ms", "velocity", 1e-3, 0.0),
    ("9.80665 m/s^2", "acceleration", 9.80665, 0.0),
    ("980.665 cm/s²", "acceleration", 9.80665, 0.0),
    ("86.909 u", "mass", 86.909 * 1.66053906892e-27, 0.0),  # CODATA 2022 atomic mass constant
    ("1.4431e-22 g", "mass", 1.4431e-25, 0.0),
    ("30 nK", "energy", 30e-9 * K_B, 0.0),
    ("1 kHz", "energy", 1e3 * H, 0.0),
    ("1 rad/s", "energy", H / TWO_PI, 0.0),
    ("2e-31 J", "energy", 2e-31, 0.0),
    ("120 nK", "temperature", 1.2e-7, 0.0),
    ("90 deg", "angle", math.pi / 2, 0.0),
    ("0.25 turn", "angle", math.pi / 2, 0.0),
    ("4 GB", "memory", 4e9, 0.0),
    ("4 GiB", "memory", 4 * 2.0**30, 0.0),
    ("1.0(1)e5", "number", 1e5, 1e4),
    ("1.0e5", "number", 1e5, 0.0),
    ("5 %", "number", 0.05, 0.0),
    ("1_000", "number", 1e3, 0.0),
    (3, "number", 3.0, 0.0),
    (0.3, "number", 0.3, 0.0),
])
def test_text_becomes_the_si_number_worked_out_by_hand(text, kind, value, sigma):
    got = parse(text, kind)
    assert got.value == pytest.approx(value, rel=4e-16, abs=0)
    assert got.sigma == pytest.approx(sigma, rel=4e-16, abs=0)


@pytest.mark.parametrize(("kind", "same"), [
    ("length", ["40 um", "0.04 mm", "4e-5 m", "40e-6 m", "40000 nm", "40 µm", "40 μm"]),
    ("length", ["0.3 um", "300 nm", "3e-7 m", "0.0003 mm"]),
    ("time", ["1.1 ms", "1100 us", "0.0011 s"]),
    ("frequency", ["123.4 Hz", "0.1234 kHz", "123400 mHz"]),
    ("velocity", ["3.2 mm/s", "3.2 um/ms", "0.32 cm/s", "0.0032 m/s"]),
    ("number", ["1.0e5", "100000", "1e5", "0.1e6"]),
])
def test_the_same_length_in_other_units_is_the_same_float(kind, same):
    assert len({parse(text, kind).value for text in same}) == 1


def test_both_code_points_of_micro_are_micro():
    assert parse("1 \u00b5m", "length") == parse("1 \u03bcm", "length") == Quantity(1e-6, 0.0)


@given(st.decimals(-10**6, 10**6, places=4, allow_nan=False), st.sampled_from(["um", "nm", "mm", "m"]))
def test_a_length_is_rounded_once(number, unit):
    power = {"um": -6, "nm": -9, "mm": -3, "m": 0}[unit]
    assert parse(f"{number} {unit}", "length").value == float(f"{number}e{power}")


@given(st.floats(1e-3, 1e6))
def test_cycles_and_radians_differ_by_two_pi(number):
    hertz, radians = parse(f"{number!r} Hz", "frequency").value, parse(f"{number!r} rad/s", "frequency").value
    assert hertz == pytest.approx(TWO_PI * radians, rel=4e-16, abs=0)
    assert in_unit(hertz, "Hz") == pytest.approx(number, rel=4e-16, abs=0)


@given(st.floats(1e-12, 1e12), st.sampled_from(sorted(KINDS)))
def test_a_number_for_humans_reads_back_to_four_figures(value, kind):
    assert parse(human(value, kind), kind).value == pytest.approx(value, rel=5.1e-4, abs=0)
    assert parse(human(-value, kind), kind).value == pytest.approx(-value, rel=5.1e-4, abs=0)


@given(st.floats(1e-9, 1e3), st.floats(1e-3, 0.9))
def test_a_number_with_its_uncertainty_reads_back(value, share):
    text = human(value, "length", sigma=share * value)
    back = parse(text, "length")
    assert back.sigma == pytest.approx(share * value, rel=0.51, abs=0)
    assert abs(back.value - value) <= 0.51 * back.sigma


@pytest.mark.parametrize(("value", "kind", "text"), [
    (3.12e-5, "length", "31.2 um"), (5.3129e-9, "length", "5.313 nm"), (0.0, "length", "0 um"),
    (TWO_PI * 20, "frequency", "20 Hz"), (0.002, "time", "2 ms"), (9.80665, "acceleration", "9.807 m/s^2"),
    (1e5, "number", "1e5"), (1234.0, "number", "1234"), (0.0025, "number", "0.0025"), (4e9, "memory", "4 GB"),
    (9.99999e-4, "length", "1 mm"), (K_B * 30e-9, "energy", "30 nK"), (-0.0032, "velocity", "-3.2 mm/s"),
])
def test_numbers_for_humans(value, kind, text):
    assert human(value, kind) == text


def test_numbers_for_humans_carry_their_uncertainty():
    assert human(TWO_PI * 150, "frequency", sigma=TWO_PI * 2) == "150(2) Hz"
    assert human(1e5, "number", sigma=1e4) == "1.0(1)e5"
    assert human(2.002e-5, "length", sigma=4e-7) == "20.0(4) um"
    assert human(1.02, "number", sigma=0.096) == "1.0(1)"


def test_an_si_value_in_a_unit():
    assert in_unit(3e-5, "um") == 30.0
    assert in_unit(9.80665, "cm/s^2") == pytest.approx(980.665, rel=1e-15, abs=0)
    assert in_unit(K_B * 1e-9, "nK", "energy") == pytest.approx(1.0, rel=1e-15, abs=0)
    assert in_unit(H * 1e3, "kHz", "energy") == pytest.approx(1.0, rel=1e-15, abs=0)
    with pytest.raises(QuantityError):
        in_unit(1.0, "furlong")


def test_a_unit_may_come_from_the_context():
    assert parse("12(1) Er", "energy", {"Er": 2e-30}) == pytest.approx((2.4e-29, 2e-30), rel=1e-15, abs=0)


@pytest.mark.parametrize(("text", "kind", "rule", "way_out"), [
    (10, "length", "with its unit", '"10 um"'),
    ("10", "length", "with its unit", "um, nm, mm"),
    ("10 Hz", "length", "wrong sort", "um"),
    ("10 s", "frequency", "wrong sort", "rad/s"),
    ("10 1/s", "frequency", "cycles or radians", "Hz"),
    ("10 hz", "frequency", "not a unit", 'did you mean "Hz"'),
    ("10 NK", "temperature", "not a unit", 'did you mean "nK"'),
    ("10 Hz", "number", "plain number", "leave the unit out"),
    ("20,5 Hz", "frequency", "finite number", "decimal point"),
    ("nan Hz", "frequency", "finite number", "20 Hz"),
    ("inf", "number", "finite number", "1.0e5"),
    ("", "time", "finite number", "20 Hz"),
    ("Hz", "frequency", "finite number", "20 Hz"),
    ("150 2 Hz", "frequency", "not a unit", "Hz"),
    ("1.2.3 m", "length", "finite number", "20 Hz"),
    ("1 +/- 2 +/- 3 m", "length", "one uncertainty", "+/-"),
    ("1e99999 m", "length", "ordinary size", "digits"),
    ("1e390 m", "length", "ordinary size", "exponent"),
    ("1 um^9^9^9", "length", "not a unit", "um"),
    ("1 __import__('os')", "length", "not a unit", "um"),
    ("12 Er", "energy", "not a unit", "nK"),
    (True, "number", "a number", "1.0e5"),
    (math.nan, "number", "finite number", "number"),
    (math.inf, "number", "finite number", "number"),
    (10**400, "number", "ordinary size", "exponent"),
    ([1], "number", "a number", "1.0e5"),
    (None, "time", "with its unit", "20 ms"),
], ids=lambda item: str(item)[:20])
def test_what_is_not_a_quantity_says_the_rule_and_the_way_out(text, kind, rule, way_out):
    with pytest.raises(QuantityError) as trouble:
        parse(text, kind)
    assert rule in trouble.value.rule
    assert way_out in trouble.value.way_out
    again = pickle.loads(pickle.dumps(trouble.value))
    assert (again.rule, again.way_out) == (trouble.value.rule, trouble.value.way_out)


@given(st.text(max_size=30), st.sampled_from(sorted(KINDS)))
def test_any_text_is_a_finite_quantity_or_refused(text, kind):
    try:
        got = parse(text, kind)
    except QuantityError:
        return
    assert math.isfinite(got.value) and got.sigma >= 0


def test_the_unit_library_is_loaded_only_when_a_unit_is_read():
    code = "import sys, trapsim.quantities as q; assert 'pint' not in sys.modules; q.parse('1 m', 'length'); " \
           "assert 'pint' in sys.modules"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
