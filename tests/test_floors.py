"""Imports go down only: each part of the program may use the parts below it and its own packages, nothing else."""

from __future__ import annotations

import ast
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
PACKAGE = ROOT / "bedplan"

# part -> (floor, packages from outside it may use)
PARTS: dict[str, tuple[int, set[str]]] = {
    "errors": (0, set()),
    "wording": (0, set()),
    "models": (1, {"numpy", "scipy"}),
    "data": (2, {"numpy", "scipy", "pandas", "pyarrow", "openpyxl"}),
    "decision": (2, {"numpy", "scipy"}),
    "charts": (3, {"numpy", "scipy", "pandas", "altair"}),
    "plan": (3, {"numpy", "scipy"}),
    "export": (4, {"numpy", "scipy", "pandas", "altair", "vl_convert", "openpyxl", "xlsxwriter"}),
    "pages": (5, {"numpy", "scipy", "pandas", "altair", "pyarrow", "streamlit"}),
    "__main__": (6, set()),
    "app": (6, {"streamlit"}),
}
# inside these parts, each folder may use those before it
STEPS = {
    "models": ("value_objects", "rhythm", "formulas", "census", "chains", "queue", "sharing", "simulation"),
    # from bytes to text, to meaning, to stays, to wards, to demand
    "data": ("files", "values", "cleaning", "beside", "wards", "ahead", "demand"),
}
# bedplan/__init__.py re-exports the public names for people; nobody inside imports it.
FACE = PACKAGE / "__init__.py"
FILES = sorted(path for path in [*PACKAGE.rglob("*.py"), ROOT / "app.py"] if path.exists() and path != FACE)


def part_of(path: Path) -> str:
    """Return the part a file belongs to."""
    return "app" if path.name == "app.py" else path.relative_to(PACKAGE).parts[0].removesuffix(".py")


def imported(path: Path) -> set[str]:
    """Return every module a file imports, inside functions and for type checkers too."""
    found: set[str] = set()
    for node in ast.walk(ast.parse(path.read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path.name}: write imports in full, not relative"
            found |= {f"{node.module}.{alias.name}" for alias in node.names}
    return found


def test_every_part_has_a_floor() -> None:
    """A new part must be given its floor here before it can be used."""
    present = {part_of(path) for path in FILES}

    assert present <= set(PARTS), f"no floor for {sorted(present - set(PARTS))}"


@pytest.mark.parametrize("path", FILES, ids=lambda path: str(path.relative_to(ROOT)))
def test_imports_go_down_only(path: Path) -> None:
    """A file imports its own part, parts on lower floors, and the packages its part may use."""
    part = part_of(path)
    floor, packages = PARTS[part]
    for name in sorted(imported(path)):
        top, _, rest = name.partition(".")
        if top == "bedplan":
            target = rest.split(".")[0]
            assert target in PARTS, f"{part} imports the top of the package: {name}"
            assert target == part or PARTS[target][0] < floor, f"{part} (floor {floor}) imports {name}"
        else:
            assert top in sys.stdlib_module_names or top in packages, f"{part} may not use {top}"


@pytest.mark.parametrize(
    "path", [path for part in STEPS for path in sorted((PACKAGE / part).glob("*/*.py"))], ids=lambda path: path.stem
)
def test_a_part_flows_one_way(path: Path) -> None:
    """Inside a part, a module imports its own folder and earlier ones, never a later one nor the part's public names."""
    part, folder = path.relative_to(PACKAGE).parts[:2]
    steps = STEPS[part]
    for name in imported(path):
        if name.startswith(f"bedplan.{part}."):
            target = name.split(".")[2]
            assert target in steps, f"{path.name} imports the top of {part}: {name}"
            assert steps.index(target) <= steps.index(folder), f"{path.name} ({folder}) imports {name}"


def _graph() -> dict[str, set[str]]:
    """Return module -> modules of this package it imports, for every file."""
    names = {".".join(path.relative_to(ROOT).with_suffix("").parts).removesuffix(".__init__"): path for path in FILES}
    graph = {}
    for name, path in names.items():
        wanted = set()
        for one in imported(path):
            while one and one not in names:
                one = one.rpartition(".")[0]  # noqa: PLW2901
            wanted |= {one} if one and one != name else set()
        graph[name] = wanted
    return graph


def test_no_circles() -> None:
    """No module imports itself through others, hidden imports included."""
    graph, done, walking = _graph(), set(), []

    def walk(name: str) -> None:
        assert name not in walking, f"circle: {' -> '.join([*walking, name])}"
        if name in done:
            return
        walking.append(name)
        for target in graph[name]:
            walk(target)
        walking.pop()
        done.add(name)

    for name in graph:
        walk(name)
    assert done == set(graph)


def test_models_import_no_other_model() -> None:
    """A model uses value objects and formulas, never another model; only the list of models names them all."""
    models = {"average", "steady", "unlimited", "seasonal", "waiting"}
    functions = {"average_occupancy", "erlang_loss", "unlimited_beds", "seasonal_loss", "waiting", "simulate_ward"}
    for path in (PACKAGE / "models").rglob("*.py"):
        if path == PACKAGE / "models" / "__init__.py":
            continue
        for name in imported(path):
            last = name.rpartition(".")[2]
            assert not (last in functions and name.startswith("bedplan.models")), f"{path.name} imports {name}"
    assert {path.stem for path in (PACKAGE / "models").glob("*.py")} == {*models, "__init__"}
