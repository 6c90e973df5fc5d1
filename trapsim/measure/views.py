"""Which lab directions point right and up, by line of sight."""

from __future__ import annotations

from collections.abc import Mapping

#: line of sight -> the lab directions that point right and up in its pictures
VIEWS: Mapping[str, tuple[str, str]] = {"x": ("y", "z"), "y": ("x", "z"), "z": ("x", "y")}
