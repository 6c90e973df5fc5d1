"""What the README shows is what there is."""

from __future__ import annotations

import re

import numpy as np
import pytest

import trapsim
from ready import HOME, MS, Play, hz, law

README = (HOME / "README.md").read_text(encoding="utf-8")


def block(language: str) -> str:
    """The one piece of the README that is written in a language."""
    (text,) = re.findall(rf"^```{language}\n(.*?)^```", README, re.MULTILINE | re.DOTALL)
    return text


def test_the_plan_in_the_readme_is_a_plan() -> None:
    """It is read as it is written there: 20, 120, 120 cycles per second, a push of 3 mm/s, 26 ms in all."""
    plan = trapsim.plan_from_text(block("toml"))
    assert plan.trap["dipole"].frequency == pytest.approx(hz(20, 120, 120), rel=1e-15)
    assert plan.sequence[0].velocity == pytest.approx((0, 0, 3e-3), rel=1e-15)
    assert plan.duration == pytest.approx(26e-3, rel=1e-15)
    assert plan.sigma["atoms.number"] == pytest.approx(1e4, rel=1e-15)


def test_the_program_in_the_readme_runs(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    """Twice the atoms are wider by 2^(1/5) (Thomas-Fermi, closed form), and the picture holds them all."""
    monkeypatch.chdir(HOME)
    names: dict[str, object] = {}
    exec(compile(block("python"), "README.md", "exec"), names)
    assert capsys.readouterr().out.startswith("(")
    widths, _ = law(hz(20, 120, 120), 2e5, [0, 20 * MS])
    assert 1e6 * names["width"][-1] == pytest.approx(widths[-1], rel=0.02)
    picture = names["picture"]
    cell = np.diff(picture.rows[-1])[0] * np.diff(picture.cols[-1])[0]
    assert picture.values[-1].sum() * cell == pytest.approx(2e5, rel=2e-3)


@pytest.mark.slow
def test_the_names_in_the_readme_are_in_the_summary(play: Play) -> None:
    """Every name in the README's table of results is a name of summary.json."""

    def names(tree: object) -> set[str]:
        if isinstance(tree, dict):
            return set(tree) | {name for value in tree.values() for name in names(value)}
        return {name for value in tree for name in names(value)} if isinstance(tree, list) else set()

    told = re.search(r"^\| name \| what it is \|$(.*?)^$", README, re.MULTILINE | re.DOTALL)
    mentioned = set(re.findall(r"`(\w+)`", told[1]))
    assert len(mentioned) > 20
    assert mentioned - names(play("lattice").summary.as_dict()) == set()


def test_the_pictures_in_the_readme_are_there() -> None:
    """Small enough to be kept with the text."""
    pictures = [HOME / path for path in re.findall(r"!\[.*?\]\((.*?)\)", README)]
    assert len(pictures) == 2
    assert [path for path in pictures if not 1000 < path.stat().st_size < 200_000] == []
