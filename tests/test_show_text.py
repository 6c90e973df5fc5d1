"""The summary in words: right numbers, right digits, nothing invented."""

from __future__ import annotations

import dataclasses
import re

import pytest

import invented_run
from trapsim.record.summary import ErrorEstimate, LegSpace, StageEnd, Summary
from trapsim.show.numbers import brief, figures, four, nice_length, percent, with_error
from trapsim.show.text import summary_text


@pytest.fixture(scope="module")
def summary() -> Summary:
    return invented_run.summary(invented_run.track())


def row(text: str, name: str, *, after: str = "") -> str:
    body = text[text.index(after) :]
    return next(line for line in body.splitlines() if line.strip().startswith(name))


@pytest.mark.parametrize(
    ("value", "said"),
    [
        (25.0612, "25.06"), (0.0123456, "0.01235"), (137249.0, "137200"), (1e5, "100000"), (-1961.33, "-1961"),
        (9.9996, "10.00"), (0.0, "0"), (None, "-"), (float("nan"), "-"), (2e-4, "0.0002000"), (3.14159e-9, "3.142e-9"),
        (6.02214e23, "6.022e23"), (99999.6, "100000"),
    ],
)  # fmt: skip
def test_four_significant_figures(value: float | None, said: str) -> None:
    assert four(value) == said


def test_a_setting_has_no_needless_zeros() -> None:
    assert [brief(one) for one in (20.0, 2.008, 100000.0, 0.05, None)] == ["20", "2.008", "100000", "0.05", "-"]
    assert figures(4e-5, 2) == "4e-5"


@pytest.mark.parametrize(
    ("value", "error", "said"),
    [
        (25.0612, 0.02, "25.06 +- 0.02"), (25.0612, 0.0004, "25.0612 +- 0.0004"), (25.0612, 3.0, "25.06 +- 3"),
        (-1961.33, 1e-4, "-1961.3300 +- 0.0001"), (25.0612, None, "25.06"), (25.0612, 0.0, "25.06"), (None, 0.1, "-"),
        (0.0, 0.01, "0 +- 0.01"), (0.278108, 7e-6, "0.278108 +- 0.000007"), (80.0, 9e-13, "80.00"),
        (-9.184e-15, 0.061, "0 +- 0.06"), (0.005, 0.06, "0 +- 0.06"), (-0.04, 0.06, "-0.04000 +- 0.06"),
    ],
)  # fmt: skip
def test_a_number_has_the_digits_its_error_deserves(value: float | None, error: float | None, said: str) -> None:
    assert with_error(value, error) == said


def test_gaps_and_lengths() -> None:
    gaps = (0.0062, -0.02, 0.123, -0.996, 1.5, 1e-6, -0.00034)
    assert [percent(one) for one in gaps] == ["+0.62 %", "-2 %", "+12 %", "-100 %", "+150 %", "0 %", "-0.03 %"]
    assert [nice_length(one) for one in (7.3, 20.0, 0.0049)] == [5.0, 20.0, 0.002]


def test_the_end_stands_with_errors_and_the_law_beside_it(summary: Summary) -> None:
    """Widths of the free Gaussian for 20 and 120 Hz after 20 ms: 4.61229 and 10.52034 um (closed form)."""
    text = summary_text(summary)
    after = "The cloud at the end: 22 ms after the start, 20 ms of flight"
    cells = re.split(r"\s{2,}", row(text, "half-width (um)", after=after).strip())
    assert cells == ["half-width (um)", "4.6123 +- 0.0001", "10.5203 +- 0.0003", "10.5203 +- 0.0003"]
    cells = re.split(r"\s{2,}", row(text, "scaling law", after=after).strip())
    assert cells == ["scaling law", "4.705 (+2 %)", "10.73 (+2 %)", "10.73 (+2 %)"]
    cells = re.split(r"\s{2,}", row(text, "centre (um)", after=after).strip())
    assert cells == ["centre (um)", "80.0000 +- 0.0001", "0 +- 0.0001", "-1961.3300 +- 0.0001"]  # v t; 0; -g t^2/2
    assert row(text, "velocity (mm/s)", after=after).split()[2:] == ["4.000", "0", "-196.1"]
    assert "x:y 0.4384, x:z 0.4384, y:z 1.000" in text


def test_each_stage_has_its_place(summary: Summary) -> None:
    text = summary_text(summary)
    assert "1. hold, 0 to 2 ms" in text and "2. nudge (kick), at 2 ms" in text and "3. release, 2 to 22 ms" in text
    missed = dataclasses.replace(summary, stages=(StageEnd("lens", "pulse", 0.0, 1.0, None),), status="interrupted")
    text = summary_text(missed)
    assert "not reached" in text and "the same command goes on from there" in text


def test_warnings_safety_and_conventions_are_always_said(summary: Summary) -> None:
    text = summary_text(summary)
    assert "! The mean field is off" in text
    flat = " ".join(text.split())
    for said in (
        "not a permit",
        "limits and interlocks",
        "safety rules",
        "controls no hardware",
        "m (velocity spread)^2",
    ):
        assert said in flat
    assert "march 4b1e77a210" in flat and "1 of" not in flat
    assert max(len(line) for line in text.splitlines()) <= 110


def test_the_grid_is_told_again_only_where_it_changes(summary: Summary) -> None:
    first = LegSpace("hold", 0.0, 2.0, summary.numerics.axes, summary.numerics.points, "round about x")
    same = dataclasses.replace(first, name="pulse", start_ms=2.0)
    other = LegSpace("release", 3.0, 22.0, ("wave", "wave", "wave"), (64, 48, 48), "nothing is round")
    numerics = dataclasses.replace(summary.numerics, legs=(first, same, other))
    text = summary_text(dataclasses.replace(summary, numerics=numerics))
    assert text.count("round about x") == 1 and "from 2 ms" not in text and text.count("y radial 48") == 1
    assert re.search(r"from 3 ms, release +x wave 64, y wave 48, z wave 48\n", text)
    assert "nothing is round" in text


def test_a_long_name_of_a_law_keeps_its_distance(summary: Summary) -> None:
    law = dataclasses.replace(summary.end.law, model="Thomas-Fermi scaling law")
    text = summary_text(dataclasses.replace(summary, end=dataclasses.replace(summary.end, law=law)))
    assert "Thomas-Fermi scaling law   4.705 (+2 %)" in text


def test_a_cloud_at_rest_has_no_end(summary: Summary) -> None:
    rest = invented_run.summary(None)
    rest = dataclasses.replace(rest, numerics=dataclasses.replace(rest.numerics, march=None, error=ErrorEstimate()))
    text = summary_text(rest)
    assert "The cloud at the end" not in text and "The sequence" not in text and "march  " not in text
    assert row(text, "chemical potential / h").split()[-2:] == ["130.0", "Hz"]  # half of 20 + 120 + 120 Hz
    assert "Thomas-Fermi" not in text and "healing" not in text and "None" not in text and "nan" not in text


def test_what_is_not_estimated_is_said_to_be_so(summary: Summary) -> None:
    numerics = dataclasses.replace(summary.numerics, error=ErrorEstimate())
    text = summary_text(dataclasses.replace(summary, numerics=numerics))
    assert "not estimated" in text and "+-" not in text


def test_orders_and_pictures_are_told() -> None:
    """Populations 20, 70 and 10 %; 4 mm/s and free fall for 20 ms; sqrt(hbar/2mw) sqrt(1 + (wt)^2) for 20 and 120 Hz."""
    text = summary_text(invented_run.contents().summary)
    told = "-1 20.0 %, 0 70.0 %, +1 10.0 %"
    assert text.count(told) == 2 and "orders of light" in text  # with its stage, and at the end
    assert "-1 15.0 %, 0 75.0 %, +1 10.0 %" in text
    after = "side_late: 22 ms, 20 ms of flight"
    assert row(text, "atoms, peak optical", after=after).split()[-2].rstrip(",") == "100000"
    assert row(text, "half-width, centre (um)", after=after).split()[-4:] == ["4.612,", "10.52;", "80.00,", "-1961"]
    assert max(len(line) for line in text.splitlines()) <= 110


def test_many_orders_are_wrapped_and_faint_ones_left_out() -> None:
    summary = invented_run.contents().summary
    many = {"light": {str(n): 0.04 for n in range(-12, 13)} | {"13": 1e-5}}
    text = summary_text(dataclasses.replace(summary, end=dataclasses.replace(summary.end, orders=many)))
    assert "-12 4.0 %" in text and "+12 4.0 %" in text and "+13" not in text
    assert max(len(line) for line in text.splitlines()) <= 110


def test_without_lattice_or_camera_neither_is_mentioned(summary: Summary) -> None:
    text = summary_text(summary)
    assert "orders" not in text and "pictures" not in text.lower()
