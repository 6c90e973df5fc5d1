"""Shared by all tests: one thread for the mathematics, and one computation per plan."""

from __future__ import annotations

import atexit
import os
import shutil
import tempfile

# what planning learns is for these tests alone, and for the processes they start
os.environ["XDG_CACHE_HOME"] = tempfile.mkdtemp(prefix="trapsim-cache-")
atexit.register(shutil.rmtree, os.environ["XDG_CACHE_HOME"], ignore_errors=True)
for _name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS"):
    os.environ[_name] = "1"

from collections.abc import Callable  # noqa: E402

import pytest  # noqa: E402

import trapsim  # noqa: E402
from ready import CONFIGS, Play  # noqa: E402

pytest.register_assert_rewrite("proofs")


@pytest.fixture(scope="session")
def solved() -> Callable[[trapsim.Plan], trapsim.Run]:
    """The run of a plan; plans that lead to the same march are computed once in a session.

    Give `numerics.threads = 1` in the plan: transforms of other tests may be running beside it. What comes back is
    shared, so it is to be read and not changed.
    """
    runs: dict[str, trapsim.Run] = {}

    def solve(plan: trapsim.Plan) -> trapsim.Run:
        if plan.march_key not in runs:
            runs[plan.march_key] = trapsim.run(plan)
        return runs[plan.march_key]

    return solve


@pytest.fixture
def play(solved: Callable[[trapsim.Plan], trapsim.Run]) -> Play:
    """A ready plan by name, with changes, at accuracy draft."""

    def play(name: str, changes: dict[str, object] | None = None) -> trapsim.Run:
        quick = {"numerics.accuracy": "draft", "numerics.threads": 1}
        return solved(trapsim.read_plan(CONFIGS / f"{name}.toml", quick | (changes or {})))

    return play
