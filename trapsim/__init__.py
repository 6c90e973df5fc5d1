"""trapsim: what trapped cold atoms do when the trap changes, and what the camera then shows.

Public names are resolved on first use, so that importing the package starts nothing and loads little.
"""

from __future__ import annotations

from importlib import import_module
from typing import Any

__version__ = "0.1.0"

_WHERE = {
    "read_plan": "trapsim.plan.reader",
    "plan_from_text": "trapsim.plan.reader",
    "Plan": "trapsim.plan.plan",
    "run": "trapsim.corridor.run",
    "open_run": "trapsim.corridor.run",
    "Run": "trapsim.record.summary",
    "TrapsimError": "trapsim.errors",
    "PlanError": "trapsim.errors",
    "PhysicsRefused": "trapsim.errors",
    "FileTrouble": "trapsim.errors",
    "Interrupted": "trapsim.errors",
}
__all__ = ["__version__", *_WHERE]


def __getattr__(name: str) -> Any:
    if name in _WHERE:
        return getattr(import_module(_WHERE[name]), name)
    raise AttributeError(f"module 'trapsim' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
