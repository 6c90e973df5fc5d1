"""What reading a broken plan says."""

from __future__ import annotations

import pytest

from trapsim.errors import PlanError
from trapsim.plan.reader import plan_from_text


def complaints(text: str) -> list[list[str]]:
    """The complaints about a plan, each as its lines."""
    with pytest.raises(PlanError) as trouble:
        plan_from_text(text, "invented")
    assert trouble.value.exit_code == 2
    head, *lines = str(trouble.value).splitlines()
    blocks: list[list[str]] = []
    for line in lines:
        if line.startswith("    "):
            blocks[-1].append(line.strip())
        else:
            blocks.append([line])
    count = len(blocks)
    assert head == f"invented: {count} thing{'s' if count > 1 else ''} to mend"
    return blocks
