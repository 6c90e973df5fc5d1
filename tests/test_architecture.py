"""The house keeps its walk: text, plan, setup, ground state, march, track, folder, figures.

Nothing looks up, every library has one door, files stay short. Each rule is also shown a small program that breaks it,
so that a rule which sees nothing is noticed.
"""

from __future__ import annotations

import ast
import subprocess
import sys
from collections.abc import Callable, Iterator
from graphlib import CycleError, TopologicalSorter
from pathlib import Path
from typing import NamedTuple

import pytest

PACKAGE = Path(__file__).parents[1] / "trapsim"

#: A room may import only rooms before it; DEVELOPERS.md says what each is for.
ROOMS = (
    "errors", "constants", "quantities", "fields", "species", "space", "cloud", "terms", "measure", "evolve", "record",
    "plan", "prepare", "estimate", "corridor", "study", "show", "app",
)  # fmt: skip
#: Library -> the files that may import it.
DOORS = {
    "pyfftw": ("space/plans.py",),
    "h5py": ("record/store.py",),
    "tomllib": ("plan/reader.py",),
    "pint": ("quantities.py",),
    "matplotlib": ("show/",),
    "tqdm": ("app.py",),
    "dask": ("study/",),
}
#: Where an import may wait inside a function: the command line, figures, and the unit registry built at the first unit.
HIDING_PLACES = ("app.py", "show/", "quantities.py")
LONGEST = 350


class Source(NamedTuple):
    """One file of the package: its path in it, its text."""

    path: str
    text: str

    @property
    def room(self) -> str:
        return self.path.partition("/")[0].removesuffix(".py")

    @property
    def module(self) -> str:
        return "trapsim." + self.path.removesuffix(".py").replace("/", ".")

    @property
    def tree(self) -> ast.Module:
        return ast.parse(self.text)


SOURCES = tuple(
    Source(path.relative_to(PACKAGE).as_posix(), path.read_text(encoding="utf-8"))
    for path in sorted(PACKAGE.rglob("*.py"))
)
MODULES = {source.module for source in SOURCES}


def imported(tree: ast.AST) -> Iterator[tuple[str, int]]:
    """Every module a piece of program imports, and the line; of ours the module a name comes from."""
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            yield from ((alias.name, node.lineno) for alias in node.names)
        elif isinstance(node, ast.ImportFrom):
            name = "." * node.level + (node.module or "")
            for alias in node.names:
                whole = f"{name}.{alias.name}"
                yield (whole if whole in MODULES else name), node.lineno


def looks_up(source: Source) -> Iterator[str]:
    """Imports of rooms that come later in the walk, or of no room at all."""
    if source.path == "__init__.py":
        return
    for name, line in imported(source.tree):
        if name.startswith("."):
            yield f"line {line}: write the whole name instead of {name}"
        top, _, rest = name.partition(".")
        room = rest.partition(".")[0]
        if top != "trapsim" or not room:
            continue
        if ROOMS.index(room) > ROOMS.index(source.room):
            yield f"line {line}: {source.room} looks up to {room}"


def wrong_door(source: Source) -> Iterator[str]:
    """Libraries that come in elsewhere than through their door."""
    for name, line in imported(source.tree):
        doors = DOORS.get(name.partition(".")[0])
        if doors and not source.path.startswith(doors):
            yield f"line {line}: {name} comes in through {doors[0]} only"


def hidden_imports(source: Source) -> Iterator[str]:
    """Imports inside functions."""
    if source.path.startswith(HIDING_PLACES) or source.path.endswith("__init__.py"):
        return
    for function in ast.walk(source.tree):
        if isinstance(function, ast.FunctionDef | ast.AsyncFunctionDef | ast.Lambda):
            yield from (f"line {line}: {name} is imported inside a function" for name, line in imported(function))


def prints(source: Source) -> Iterator[str]:
    """Talk to the terminal outside the command line."""
    if source.path == "app.py":
        return
    for node in ast.walk(source.tree):
        if isinstance(node, ast.Call) and isinstance(node.func, ast.Name) and node.func.id == "print":
            yield f"line {node.lineno}: print"
        if isinstance(node, ast.Attribute) and node.attr in ("stdout", "stderr"):
            yield f"line {node.lineno}: {node.attr}"


def state_machine_figures(source: Source) -> Iterator[str]:
    """The plotting interface that keeps a current figure somewhere."""
    if "pyplot" in source.text:
        yield "pyplot"


def too_long(source: Source) -> Iterator[str]:
    """Files that nobody can hold in the head."""
    if (count := source.text.count("\n")) > LONGEST:
        yield f"{count} lines, {LONGEST} at most"


RULES = (looks_up, wrong_door, hidden_imports, prints, state_machine_figures, too_long)
#: A program that breaks each rule, and where it would stand.
OFFENCES = {
    looks_up: Source("space/axes.py", "from trapsim.evolve import march\n"),
    wrong_door: Source("record/summary.py", "import h5py.h5f as low\n"),
    hidden_imports: Source("plan/plan.py", "def f():\n    if True:\n        from trapsim.fields import entry\n"),
    prints: Source("evolve/march.py", "def f():\n    print(1)\n"),
    state_machine_figures: Source("show/look.py", "import matplotlib.pyplot as plt\n"),
    too_long: Source("errors.py", "\n" * (LONGEST + 1)),
}


@pytest.mark.parametrize("rule", RULES, ids=lambda rule: rule.__name__)
def test_every_file_keeps_the_rule(rule: Callable[[Source], Iterator[str]]) -> None:
    broken = [f"{source.path} {what}" for source in SOURCES for what in rule(source)]
    assert broken == []


@pytest.mark.parametrize("rule", RULES, ids=lambda rule: rule.__name__)
def test_the_rule_sees_an_offence(rule: Callable[[Source], Iterator[str]]) -> None:
    assert list(rule(OFFENCES[rule]))


def test_the_house_has_the_rooms_that_are_drawn() -> None:
    rooms = {source.room for source in SOURCES} - {"__init__"}
    # study comes with the first study
    assert rooms | {"study"} == set(ROOMS)


def circles(sources: tuple[Source, ...]) -> list[str]:
    """The modules of a circle of imports; empty when there is none."""
    graph = {s.module: {name for name, _ in imported(s.tree) if name.startswith("trapsim.")} for s in sources}
    try:
        TopologicalSorter(graph).prepare()
    except CycleError as error:
        return list(error.args[1])
    return []


def test_there_are_no_circles() -> None:
    assert circles(SOURCES) == []


def test_a_circle_is_seen() -> None:
    there, back = "from trapsim.plan.stages import Hold\n", "from trapsim.plan.plan import Plan\n"
    assert circles((Source("plan/plan.py", there), Source("plan/stages.py", back)))


def test_init_files_of_rooms_are_empty() -> None:
    full = [s.path for s in SOURCES if s.path.endswith("/__init__.py") and s.text.strip()]
    assert full == []


@pytest.mark.parametrize("module", ["trapsim", "trapsim.plan.reader"])
def test_importing_starts_little(module: str) -> None:
    """Neither figures nor files nor clusters are loaded before they are needed."""
    program = f"import sys, {module}; print(*sorted({{name.partition('.')[0] for name in sys.modules}}))"
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=True)
    loaded = set(done.stdout.split())
    assert "trapsim" in loaded
    assert loaded & {"matplotlib", "h5py", "dask", "tqdm", "pyfftw"} == set()


def test_public_names_are_there() -> None:
    """What `import trapsim` offers can be had; a name that is not offered says so."""
    import trapsim

    assert [name for name in trapsim.__all__ if not hasattr(trapsim, name)] == []
    assert not hasattr(trapsim, "no_such_name")
