"""The page is whole, harmless and says what the summary says; the sequence is drawn to scale."""

from __future__ import annotations

import base64
import dataclasses
import math
import re
from html import unescape
from html.parser import HTMLParser
from pathlib import Path

import pytest
from scipy import constants

import invented_run
from trapsim.app import main
from trapsim.errors import Notice
from trapsim.record.store import Contents, write_results
from trapsim.record.summary import ErrorEstimate, Run
from trapsim.show.levels import curves
from trapsim.show.markup import pretty
from trapsim.show.page import page_html, write_page
from trapsim.show.sequence import LEFT, WIDE, sequence_svg
from trapsim.show.wording import parts_in_words, recoil_energy, what_changes, words

#: Elements that HTML never closes (HTML standard, void elements).
VOID = {"area", "base", "br", "col", "embed", "hr", "img", "input", "link", "meta", "source", "track", "wbr"}
PNG = {"flight": b"\x89PNG one", "pictures_side": b"\x89PNG two"}
NASTY = '</title></pre><script src="http://evil.example/x.js">alert(1)</script>"\'&<img src=//evil.example/a onerror=b>'


class Reader(HTMLParser):
    """Elements, attributes and text of a page; complains about what is left open or closed twice."""

    def __init__(self, text: str) -> None:
        super().__init__(convert_charrefs=True)
        self.open: list[str] = []
        self.elements: list[tuple[str, dict[str, str | None]]] = []
        self.said: list[str] = []
        self.feed(text)
        self.close()
        assert self.open == []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, dict(attrs)))
        assert len(dict(attrs)) == len(attrs)
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.elements.append((tag, dict(attrs)))

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        if self.open and self.open[-1] != "style":
            self.said.append(data)


@pytest.fixture(scope="module")
def contents() -> Contents:
    return invented_run.contents()


@pytest.fixture(scope="module")
def page(contents: Contents) -> str:
    return page_html(contents, PNG)


def rows(page: str) -> dict[str, list[str]]:
    """The first table row with each name, its cells as text."""
    found: dict[str, list[str]] = {}
    for row in re.findall(r"<tr[^>]*>(.*?)</tr>", page, re.DOTALL):
        cells = [unescape(re.sub(r"<[^>]*>", "", cell)) for cell in re.findall(r"<t[hd][^>]*>(.*?)</t[hd]>", row)]
        found.setdefault(cells[0], cells[1:])
    return found


def harmless(page: str) -> Reader:
    """Read a page and make sure that it neither fetches nor runs anything."""
    reader = Reader(page)
    names = {tag for tag, _ in reader.elements}
    assert not names & {"script", "link", "iframe", "object", "embed", "form", "base", "a"}
    for _, attrs in reader.elements:
        assert not [name for name in attrs if name.startswith("on") or name in ("href", "action", "srcset")]
        assert (attrs.get("src") or "data:image/png;base64,").startswith("data:image/png;base64,")
    assert "url(" not in page and "@import" not in page
    return reader


# --- the page -------------------------------------------------------------------------------------------------------


def test_the_page_is_well_formed_and_fetches_nothing(page: str) -> None:
    reader = harmless(page)
    assert "http:" not in page and "https:" not in page
    assert [tag for tag, _ in reader.elements].count("h1") == 1
    policy = [attrs["content"] for tag, attrs in reader.elements if tag == "meta" and "content" in attrs]
    assert any(one.startswith("default-src 'none'") for one in policy)


def test_what_the_plan_says_cannot_become_markup(contents: Contents) -> None:
    plan = invented_run.plan()
    plan["trap"] = {NASTY: plan["trap"]["dipole"]}
    plan["sequence"][2]["off"] = [NASTY]
    plan["atoms"]["species"] = NASTY
    stages = tuple(dataclasses.replace(one, name=NASTY) for one in contents.summary.stages)
    pictures = tuple(dataclasses.replace(one, name=NASTY) for one in contents.summary.pictures)
    end = dataclasses.replace(contents.summary.end, law=dataclasses.replace(contents.summary.end.law, model=NASTY))
    summary = dataclasses.replace(
        contents.summary, title=NASTY, stages=stages, pictures=pictures, end=end, warnings=(Notice(NASTY, NASTY),)
    )
    kept = dataclasses.replace(contents, summary=summary, plan=plan, plan_text=NASTY)
    reader = harmless(page_html(kept, {NASTY: b"a figure", f"pictures_{NASTY}": b"another"}))
    said = "".join(reader.said)
    assert said.count(NASTY) >= 8  # shown as it was written: title twice, warning, steps, pictures, part, plan
    assert {"title", "h1", "pre"} <= {tag for tag, _ in reader.elements}


def test_the_figures_are_in_the_page(page: str) -> None:
    sources = [attrs["src"] for tag, attrs in Reader(page).elements if tag == "img"]
    assert [base64.b64decode(one.partition(",")[2]) for one in sources] == list(PNG.values())
    assert "What camera side records: resonant light, no noise." in page


def test_without_figures_handed_in_they_are_drawn(contents: Contents) -> None:
    lean = Contents("", contents.plan, contents.summary, contents.track)
    sources = [attrs["src"] for tag, attrs in Reader(page_html(lean)).elements if tag == "img"]
    assert len(sources) == 2 and all(base64.b64decode(s.partition(",")[2])[:4] == b"\x89PNG" for s in sources)


def test_the_numbers_that_matter_stand_with_errors_and_the_law_beside(page: str) -> None:
    """Widths of the free Gaussian for 20 and 120 Hz after 20 ms: 4.61229 and 10.52034 um (closed form)."""
    seen = rows(page)
    assert seen["half-width (µm)"] == ["4.6123 ± 0.0001", "10.5203 ± 0.0003", "10.5203 ± 0.0003"]
    assert seen["scaling law"] == ["4.705 (+2 %)", "10.73 (+2 %)", "10.73 (+2 %)"]
    assert seen["centre (µm)"] == ["80.0000 ± 0.0001", "0 ± 0.0001", "−1961.3300 ± 0.0001"]  # v t; 0; -g t^2/2
    assert seen["velocity (mm/s)"] == ["4.000", "0", "−196.1"]
    assert seen["aspect ratios"] == ["x:y 0.4384, x:z 0.4384, y:z 1.000"]
    three = constants.h * 260 / 4 / constants.k * 1e9  # h f/4 per direction (virial theorem)
    assert seen["internal kinetic energy"] == [f"{three:.3f} nK"]
    assert seen["chemical potential / h"] == ["130.0 Hz"]  # half of 20 + 120 + 120 Hz
    assert seen["error of the widths"] == ["3 · 10−5", "estimated, relative"]


def test_every_number_of_the_summary_is_that_of_the_page(contents: Contents, page: str) -> None:
    end, seen = contents.summary.end, rows(page)
    for name, values, digits in (
        ("half-width (µm)", end.width_um, 4), ("expansion rate (mm/s)", end.expansion_rate_mm_per_s, 4),
        ("velocity spread (mm/s)", end.velocity_spread_mm_per_s, 4), ("expansion energy (nK)", end.expansion_energy_nk, 4),
    ):  # fmt: skip
        told = [float(cell.split(" ")[0].replace("−", "-")) for cell in seen[name]]
        assert told == pytest.approx(values, rel=0.5 * 10.0 ** (1 - digits))
    for one in contents.summary.pictures:
        time, flight, atoms, peak, size, place = seen[one.name]
        assert (float(time), float(flight), float(atoms), float(peak)) == pytest.approx(
            (one.time_ms, one.flight_ms, one.atoms, one.peak_optical_density), rel=6e-4
        )
        assert [float(v) for v in size.split(", ")] == pytest.approx(one.width_um, rel=6e-4)
        assert [float(v.replace("−", "-")) for v in place.split(", ")] == pytest.approx(one.centre_um, rel=6e-4)


def test_the_orders_stand_in_a_table(page: str) -> None:
    seen = rows(page)
    assert seen["order of light"] == ["end of 2. nudge", "end of 3. release", "last velocity (mm/s)", "spread (mm/s)"]
    # two recoils of h/(m lambda) = 4.315 mm/s (CODATA), each order 0.05 of one wide
    assert seen["−1"] == ["15.0 %", "20.0 %", "−8.630", "0.2158"]
    assert seen["0"] == ["75.0 %", "70.0 %", "0", "0.2158"]
    assert seen["+1"] == ["10.0 %", "10.0 %", "8.630", "0.2158"]


def test_the_page_says_what_must_be_said(page: str) -> None:
    said = " ".join("".join(Reader(page).said).split())
    for part in ("This is a calculation, not a permit.", "limits and interlocks", "The mean field is off",
                 "m (velocity spread)^2 / k_B", "round about x", 'title = "Invented µ"', "key 9f3c2a71d0",
                 "trapsim 0.1.0", "complete"):  # fmt: skip
        assert part in said, part
    assert not re.search(r"\b(None|nan|inf)\b", said)


def test_what_was_not_reached_or_estimated_is_said_to_be_so(contents: Contents) -> None:
    stages = (*contents.summary.stages[:2], dataclasses.replace(contents.summary.stages[2], end=None))
    numerics = dataclasses.replace(contents.summary.numerics, error=ErrorEstimate())
    summary = dataclasses.replace(
        contents.summary, stages=stages, end=stages[1].end, status="stopped", numerics=numerics, pictures=()
    )
    page = page_html(dataclasses.replace(contents, summary=summary), {})
    assert "stopped before the end of the sequence" in page and "(not reached)" in page
    assert rows(page)["error of the widths"] == ["–", "not estimated"]
    assert not [cell for cells in rows(page).values() for cell in cells if "±" in cell]


def test_a_cloud_at_rest_has_a_page_too() -> None:
    rest = invented_run.summary(None)
    page = page_html(Contents("", {}, rest))
    harmless(page)
    assert "The cloud at rest" in page and "The cloud at the end" not in page and "<svg" not in page and "<img" not in page


def test_a_run_in_memory_has_the_same_page(contents: Contents) -> None:
    run = Run(
        contents.plan, contents.summary, contents.track, contents.columns, contents.pictures, momenta=contents.momenta
    )
    assert page_html(run, PNG) == page_html(dataclasses.replace(contents, plan_text=""), PNG)


@pytest.mark.slow
def test_show_writes_figures_and_page_or_neither(
    tmp_path: Path, contents: Contents, capsys: pytest.CaptureFixture[str]
) -> None:
    folder = tmp_path / "r"
    write_results(folder, contents)
    before = {path.name for path in folder.iterdir()}
    assert main(["show", str(folder), "--no-figures"]) == 0
    assert {path.name for path in folder.iterdir()} == before
    assert main(["show", str(folder)]) == 0
    assert {path.name for path in folder.iterdir()} == before | {"figures", "page.html"}
    assert str(folder / "page.html") in capsys.readouterr().out
    page = (folder / "page.html").read_text(encoding="utf-8")
    harmless(page)
    embedded = [base64.b64decode(a["src"].partition(",")[2]) for tag, a in Reader(page).elements if tag == "img"]
    kept = sorted(path.read_bytes() for path in (folder / "figures").iterdir())
    assert len(embedded) == 8 and sorted(embedded) == kept
    assert 'title = "Invented µ"' in "".join(Reader(page).said)
    assert write_page(folder, contents, {}) == folder / "page.html"
    assert "<img" not in (folder / "page.html").read_text(encoding="utf-8")


# --- the sequence ---------------------------------------------------------------------------------------------------


def test_steps_are_drawn_to_scale(contents: Contents) -> None:
    """Hold from 0 to 2 ms, release from 2 to 22 ms: one eleventh and ten elevenths of the line."""
    svg = sequence_svg(contents.plan, contents.summary)
    found = re.findall(r'<rect x="([\d.]+)" y="[\d.]+" width="([\d.]+)" height="30"', svg)
    blocks = [(float(x), float(wide)) for x, wide in found]
    (hold, wide), _, (flies, long) = blocks
    whole = WIDE - LEFT - 14
    assert (hold, wide) == pytest.approx((LEFT, whole / 11), abs=0.06)
    assert (flies, long) == pytest.approx((LEFT + whole / 11, whole * 10 / 11), abs=0.06)
    assert {"1 hold 2 ms", "2 nudge", "3 release 20 ms", "4 mm/s along x"} <= set(re.findall(r">([^<>]+)</text>", svg))
    # the kick is an arrow where the release starts
    assert f"{LEFT + whole / 11:.1f}," in re.findall(r'<polygon points="([^"]*)" fill="#d0652b"', svg)[0]
    assert svg.count("rotate(45") == 2  # two pictures
    assert "<svg" in page_html(contents, {}) and Reader(svg)


def test_pictures_that_no_camera_takes_are_marked_where_they_were_asked_for(contents: Contents) -> None:
    bare = dataclasses.replace(contents.summary, pictures=())
    marks = [float(one) for one in re.findall(r"rotate\(45 ([\d.]+)", sequence_svg(contents.plan, bare))]
    whole = WIDE - LEFT - 14
    assert marks == pytest.approx([LEFT + whole * 7 / 22, LEFT + whole], abs=0.06)  # 5 and 20 ms after 2 ms


def test_a_very_short_pulse_can_still_be_seen(contents: Contents) -> None:
    stages = (
        dataclasses.replace(contents.summary.stages[0], duration_ms=10.0),
        dataclasses.replace(contents.summary.stages[1], name="grating", kind="pulse", start_ms=10.0, duration_ms=0.01),
        dataclasses.replace(contents.summary.stages[2], start_ms=10.01, duration_ms=30.0),
    )
    plan = {"trap": {"light": {"kind": "lattice", "strength": 0.0}}, "sequence": [
        {"stage": "hold"}, {"stage": "pulse", "to": {"light.strength": {"value": 1.0, "duration": quantity(1e-5, "s")}}},
        {"stage": "hold"},
    ]}  # fmt: skip
    svg = sequence_svg(plan, dataclasses.replace(contents.summary, stages=stages))
    assert min(float(one) for one in re.findall(r'width="([\d.]+)" height="30"', svg)) >= 2.5
    curve = re.findall(r'<polyline points="([^"]*)" fill="none" stroke="#173f6b" stroke-width="1.6"', svg)[0]
    points = [tuple(map(float, pair.split(","))) for pair in curve.split()]
    top = min(y for _, y in points)
    on = [x for x, y in points if y == top]
    assert max(on) - min(on) >= 2.4 and max(y for _, y in points) - top == pytest.approx(30, abs=0.2)


def test_without_a_plan_the_steps_are_drawn_alone(contents: Contents) -> None:
    svg = sequence_svg({}, contents.summary)
    assert "1 hold 2 ms" in svg and "dipole" not in svg
    assert sequence_svg({}, invented_run.summary(None)) == ""


def quantity(value: object, unit: str) -> dict[str, object]:
    return {"value": value, "unit": unit}


def change(value: object, **rest: object) -> dict[str, object]:
    return {"value": value, "delay": quantity(0.0, "s"), "shape": "linear", "time_constant": None, **rest}


def at(curve: list[tuple[float, float]], time: float) -> float:
    """The level at a time, between corners."""
    pairs = zip(curve, curve[1:], strict=False)
    (t0, a), (t1, b) = next(pair for pair in pairs if pair[0][0] <= time <= pair[1][0] > pair[0][0])
    return a + (b - a) * (time - t0) / (t1 - t0)


def test_levels_follow_ramps_pulses_and_switch_offs() -> None:
    """Linear: half-way in the middle; smooth: u^2 (3 - 2u); exponential: exp(-t/tau) is left."""
    hz = 2 * math.pi
    plan = {"trap": {
        "trap": {"kind": "harmonic", "strength": 1.0, "frequency": quantity([20 * hz, 0.0, 0.0], "rad/s")},
        "light": {"kind": "lattice", "strength": 1.0, "depth": quantity(0.0, "J")},
    }}  # fmt: skip
    steps = [
        {"stage": "ramp", "to": {
            "trap.frequency": change(quantity([40 * hz, 0.0, 0.0], "rad/s"), duration=quantity(4.0, "s")),
            "light.depth": change(
                quantity(3.0, "J"), shape="smooth", delay=quantity(1.0, "s"), duration=quantity(2.0, "s")
            ),
        }},
        {"stage": "pulse", "to": {
            "trap.strength": {"value": 0.5, "delay": quantity(0.25, "s"), "duration": quantity(0.5, "s")},
        }},
        {"stage": "release", "off": ["trap"], "switch_off": {
            "shape": "exponential", "time_constant": quantity(0.5, "s"), "duration": quantity(2.0, "s")}},
    ]  # fmt: skip
    made = curves(plan, [(steps[0], 0.0, 4.0), (steps[1], 4.0, 1.0), (steps[2], 5.0, 2.0)])
    trap, light = made["trap"], made["light"]
    assert (at(trap, 0.0), at(trap, 2.0), at(trap, 4.0)) == pytest.approx((0.5, 0.75, 1.0), abs=1e-9)
    assert (at(light, 0.5), at(light, 2.0), at(light, 3.5)) == pytest.approx((0.0, 0.5, 1.0), abs=2e-2)
    assert at(light, 1.5) == pytest.approx(0.25**2 * 2.5, abs=5e-3)
    assert (at(trap, 4.1), at(trap, 4.5), at(trap, 4.9)) == pytest.approx((1.0, 0.5, 1.0), abs=1e-9)
    assert at(trap, 5.5) == pytest.approx(math.exp(-1), abs=2e-3)
    assert trap[-1][0] == 7.0 and at(light, 6.0) == pytest.approx(1.0)


def test_a_part_that_is_released_at_once_falls_at_once(contents: Contents) -> None:
    stages = [(raw, start, length) for raw, start, length in zip(
        contents.plan["sequence"], (0.0, 2e-3, 2e-3), (2e-3, 0.0, 20e-3), strict=True)]  # fmt: skip
    dipole = curves(contents.plan, stages)["dipole"]
    assert at(dipole, 1e-3) == 1.0 and {level for time, level in dipole if time == 2e-3} == {0.0, 1.0}
    assert at(dipole, 3e-3) == 0.0


# --- words ----------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("value", "said"),
    [
        (quantity([2 * math.pi * f for f in (20.0, 120.0, 120.0)], "rad/s"), "20, 120, 120 Hz"),
        (quantity(15e-6, "s"), "15 µs"), (quantity([0.0, 0.0, -3.2e-3], "m/s"), "0, 0, −3.2 mm/s"),
        (quantity([40e-6, 1.2e-3, 30e-6], "m"), "40 µm, 1.2 mm, 30 µm"), (quantity(math.pi / 4, "rad"), "45 deg"),
        (quantity("held", "m"), "held"), (1.0, "1"), ("x", "x"), (None, "-"), (quantity(9.80665, "m/s^2"), "9.807 m/s²"),
    ],
)  # fmt: skip
def test_a_value_is_written_as_the_lab_writes_it(value: object, said: str) -> None:
    assert words(value) == said


def test_depths_are_told_in_recoil_energies() -> None:
    """Er = h^2/(2 m lambda^2) (textbook)."""
    light = {"kind": "lattice", "wavelength": quantity(1064e-9, "m"), "spacing": None, "strength": 0.0, "axis": "x"}
    plan = {"atoms": {"mass": quantity(invented_run.MASS, "kg")}, "trap": {"light": light}}
    recoil = constants.h**2 / (2 * invented_run.MASS * 1064e-9**2)
    assert recoil_energy(plan, "light") == pytest.approx(recoil, rel=1e-12)
    light["depth"] = quantity(12 * recoil, "J")
    assert parts_in_words(plan) == [("light", "lattice, wavelength 1.064 µm, axis x, depth 12 Er, off at the start")]
    ramp = {"stage": "ramp", "to": {"light.depth": change(quantity(10 * recoil, "J"), shape="smooth")}}
    assert what_changes(plan, ramp) == "light depth to 10 Er, smooth"
    angled = {"atoms": plan["atoms"], "trap": {"light": {**light, "wavelength": None, "spacing": quantity(532e-9, "m")}}}
    assert recoil_energy(angled, "light") == pytest.approx(recoil, rel=1e-12)
    assert recoil_energy({"trap": {"light": light}}, "light") is None


def test_each_step_is_told_in_a_sentence(contents: Contents) -> None:
    hold, kick, release = contents.plan["sequence"]
    assert what_changes(contents.plan, hold) == "everything stays as it is"
    assert what_changes(contents.plan, kick) == "4 mm/s along x given to all atoms"
    assert what_changes(contents.plan, release) == "dipole off at once"
    slow = {**release, "switch_off": {"shape": "exponential", "time_constant": quantity(30e-6, "s")}}
    assert what_changes(contents.plan, slow) == "dipole off, exponential in 30 µs"
    pulse = {"stage": "pulse", "to": {"dipole.strength": change(1.0, shape="sudden", delay=quantity(2e-6, "s"))}}
    assert what_changes(contents.plan, pulse) == "dipole on, from 2 µs on"
    pushed = {"stage": "kick", "velocity": quantity([0.0, 0.0, -8.6e-3], "m/s"), "recoils": -2.0, "of": "light"}
    assert what_changes(contents.plan, pushed) == "−8.6 mm/s along z given to all atoms (−2 recoils of light)"


def test_what_there_is_not_is_a_dash_and_what_is_below_zero_has_a_minus_sign() -> None:
    said = {
        "-": "–", "-, -": "–, –", "-, -176.5": "–, −176.5", "3.4 (-1.7 %)": "3.4 (−1.7 %)",
        "-1e-6 +- 2e-7 um": "−1e−6 ± 2e−7 µm",
    }  # fmt: skip
    assert {one: pretty(one) for one in said} == said
