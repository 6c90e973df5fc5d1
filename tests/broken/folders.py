"""Two result folders, compared."""

from __future__ import annotations

import csv
import json
from pathlib import Path

import pytest


def numbers(folder: Path) -> dict[str, object]:
    """All figures of a summary, by path, but what the clock on the wall says."""
    flat: dict[str, object] = {}

    def walk(value: object, path: str) -> None:
        if isinstance(value, dict):
            for key, inner in value.items():
                walk(inner, f"{path}.{key}")
        elif isinstance(value, list):
            for i, inner in enumerate(value):
                walk(inner, f"{path}[{i}]")
        elif not path.endswith("seconds"):
            flat[path] = value

    walk(json.loads((folder / "summary.json").read_text()), "")
    return flat


def table(folder: Path) -> list[list[str]]:
    with open(folder / "track.csv", newline="") as file:
        return list(csv.reader(file))


def agree(one: Path, other: Path, tolerance: float = 1e-10) -> None:
    """Two result folders that tell the same, to a relative tolerance and the same in lab units."""
    a, b = numbers(one), numbers(other)
    assert a.keys() == b.keys() and a[".status"] == "complete"
    for path, value in a.items():
        if isinstance(value, float):
            assert b[path] == pytest.approx(value, rel=tolerance, abs=tolerance), path
        else:
            assert b[path] == value, path
    rows, others = table(one), table(other)
    assert rows[0] == others[0] and len(rows) == len(others)
    for row, again in zip(rows[1:], others[1:], strict=True):
        for x, y in zip(row, again, strict=True):
            if x != y:
                assert float(y) == pytest.approx(float(x), rel=tolerance, abs=tolerance)
