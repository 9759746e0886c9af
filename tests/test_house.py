"""The house: imports point down, one module prints, one draws maps, one fetches."""

from __future__ import annotations

import ast
import re
import subprocess
import sys
from functools import cache
from pathlib import Path

import pytest

import climarisk

PACKAGE = Path(climarisk.__file__).parent

#: Each module's floor.  A module may import only from floors below its own.
FLOORS = {
    "errors": 0,
    "units": 0,
    "progress": 0,
    "findings": 1,
    "atmosphere": 1,
    "daylight": 1,
    "localtime": 1,
    "inputs": 1,
    "lapse": 1,
    "fields": 2,
    "aircraft": 2,
    "observations": 2,
    "archives": 3,
    "results": 3,
    "seasons": 3,
    "largest_mass": 5,
    "flights": 4,
    "clock": 3,
    "store": 3,
    "performance": 4,
    "stations": 4,
    "study": 5,
    "timing": 5,
    "rules": 5,
    "climatology": 6,
    "quality": 6,
    "reduction": 5,
    "pressure": 6,
    "transfer_error": 7,
    "pressure_kind": 7,
    "extremes": 7,
    "near_saturation": 7,
    "icing": 7,
    "engine_power": 7,
    "trend": 7,
    "transfer": 8,
    "risk": 7,
    "verify": 9,
    "online": 8,
    "weather": 9,
    "reporting": 10,
    "provenance": 10,
    "region": 11,
    "scene": 12,
    "weights": 13,
    "windows": 13,
    "occasions": 13,
    "schedule_sums": 14,
    "schedule": 15,
    "pipeline": 16,
    "scenarios": 17,
    "bases": 13,
    "evidence": 18,
    "verification_scores": 12,
    "verification": 14,
    "outputs": 19,
    "terminal": 20,
    "cli": 21,
    "__init__": 22,
    "__main__": 22,
}
NETWORK = {
    "meteostat",
    "requests",
    "urllib",
    "http",
    "httpx",
    "aiohttp",
    "urllib3",
    "socket",
    "ftplib",
}
CONSOLE = {"typer", "rich", "click", "logging"}
PHYSICS = {"atmosphere", "daylight"}

MODULES = {
    ".".join(path.relative_to(PACKAGE).with_suffix("").parts): path
    for path in sorted(PACKAGE.rglob("*.py"))
    if "demo_fields" not in path.parts
}


@cache
def parsed(name: str) -> ast.Module:
    return ast.parse(MODULES[name].read_text(encoding="utf-8"))


def imported(name: str) -> list[str]:
    """Full names of everything a module imports, anywhere in it."""
    found = []
    for node in ast.walk(parsed(name)):
        if isinstance(node, ast.Import):
            found += [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{name}: imports are absolute"
            found += [f"{node.module}.{alias.name}" for alias in node.names]
    return found


def own_imports(name: str) -> set[str]:
    """Modules of the package that a module imports."""
    targets = set()
    for full in imported(name):
        parts = full.split(".")
        if parts[0] != "climarisk" or len(parts) == 1:
            continue
        inner = ".".join(parts[1:])
        while inner and inner not in MODULES and f"{inner}.__init__" not in MODULES:
            inner = inner.rpartition(".")[0]
        targets.add(inner if inner in MODULES else f"{inner}.__init__")
    return targets - {name}


def room(name: str) -> str:
    return name.split(".")[0]


@pytest.mark.parametrize("name", MODULES)
def test_every_module_has_a_floor(name):
    assert room(name) in FLOORS, f"give {room(name)!r} a floor in this test"


def test_every_floor_has_a_module():
    assert set(FLOORS) == {room(name) for name in MODULES}


@pytest.mark.parametrize("name", MODULES)
def test_imports_point_down(name):
    upward = [
        target
        for target in own_imports(name)
        if room(target) != room(name) and FLOORS.get(room(target), -1) >= FLOORS.get(room(name), 99)
    ]
    assert upward == []


def test_there_is_no_import_cycle():
    open_, done = [], set()

    def visit(name: str) -> None:
        assert name not in open_, " -> ".join([*open_, name])
        if name in done:
            return
        open_.append(name)
        for target in sorted(own_imports(name)):
            visit(target)
        done.add(open_.pop())

    for name in MODULES:
        visit(name)


@pytest.mark.parametrize("name", MODULES)
def test_no_module_imports_the_package_from_inside(name):
    for node in ast.walk(parsed(name)):
        if isinstance(node, ast.Import):
            assert "climarisk" not in [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            assert node.module != "climarisk"


@pytest.mark.parametrize("name", [n for n in MODULES if room(n) == "outputs"])
def test_outputs_never_import_archives(name):
    assert not [t for t in own_imports(name) if room(t) == "archives"]


def importers(roots: set[str]) -> set[str]:
    return {n for n in MODULES if roots & {full.split(".")[0] for full in imported(n)}}


def test_folium_appears_in_one_module():
    assert importers({"folium", "branca"}) == {"outputs.map"}


def test_the_network_appears_in_one_module():
    assert importers(NETWORK) == {"archives.meteostat"}


def test_only_the_command_line_talks_to_a_console():
    assert importers(CONSOLE) == {"cli", "terminal"}
    assert importers({"typer"}) == {"cli"}
    for name in set(MODULES) - {"cli", "terminal"}:
        for node in ast.walk(parsed(name)):
            called = node.func if isinstance(node, ast.Call) else None
            assert not (isinstance(called, ast.Name) and called.id in ("print", "input")), name
            if isinstance(node, ast.Attribute) and isinstance(node.value, ast.Name):
                assert (node.value.id, node.attr) not in {
                    ("sys", "stdout"),
                    ("sys", "stderr"),
                    ("warnings", "warn"),
                }, name


@pytest.mark.parametrize("name", sorted(PHYSICS))
def test_the_physics_know_no_pandas(name):
    assert {full.split(".")[0] for full in imported(name)} <= {
        *("__future__", "math", "typing", "collections", "functools", "dataclasses"),
        *("numpy", "climarisk"),
    }


def test_the_middle_knows_no_clock():
    # DESIGN 2: nothing in the middle reads files, prints or knows the clock.
    for name in ("transfer", "climatology", "performance", "risk", "atmosphere", "daylight"):
        source = MODULES[name].read_text(encoding="utf-8")
        assert not re.search(
            r"\.now\(|\.today\(|time\.time\(|utcnow|\bopen\(|\.read_text\(", source
        )


def test_nothing_is_pickled_or_compiled():
    assert importers({"pickle", "shelve", "marshal", "dill", "joblib"}) == set()
    for name in MODULES:
        for node in ast.walk(parsed(name)):
            if isinstance(node, ast.Call) and isinstance(node.func, ast.Name):
                assert node.func.id not in ("eval", "exec"), name


def loaded_by(statement: str) -> set[str]:
    """Top packages in memory after a statement in a fresh interpreter."""
    code = f"{statement}; import sys; print(*{{m.split('.')[0] for m in sys.modules}})"
    done = subprocess.run(
        [sys.executable, "-c", code],
        cwd=PACKAGE.parent,
        check=True,
        capture_output=True,
        text=True,
    )
    return set(done.stdout.split())


HEAVY = {"pandas", "geopandas", "folium", "meteostat", "pyarrow", "pyproj", "shapely", "matplotlib"}


def test_importing_the_package_does_no_heavy_work():
    assert not loaded_by("import climarisk") & {*HEAVY, "numpy", "pydantic"}


def test_the_command_line_is_loaded_without_heavy_libraries():
    assert not loaded_by("import climarisk.cli") & HEAVY


def test_a_run_from_files_loads_no_network_library():
    assert "meteostat" not in loaded_by("import climarisk.pipeline, climarisk.outputs.tables")


def test_the_package_is_usable_as_a_library():
    from climarisk import run_study

    assert callable(run_study)
    for name in climarisk.__all__:
        assert getattr(climarisk, name) is not None


def public(body: list[ast.stmt], prefix: str = "") -> list[tuple[str, ast.AST]]:
    found = []
    for node in body:
        if isinstance(node, (ast.FunctionDef, ast.ClassDef)) and not node.name.startswith("_"):
            found.append((prefix + node.name, node))
            if isinstance(node, ast.ClassDef):
                found += public(node.body, f"{node.name}.")
    return found


@pytest.mark.parametrize("name", MODULES)
def test_modules_and_public_names_have_docstrings(name):
    tree = parsed(name)
    bare = [] if ast.get_docstring(tree) else [name]
    for label, node in public(tree.body):
        if not ast.get_docstring(node):
            bare.append(label)
    assert bare == []


@pytest.mark.parametrize("name", MODULES)
def test_no_module_holds_a_note_to_self_or_a_place_of_work(name):
    source = MODULES[name].read_text(encoding="utf-8")
    notes = "|".join(("TO" + "DO", "FIX" + "ME", "X" * 3))
    assert not re.search(rf"\b({notes})\b|/tmp/|/home/", source)


def lines_of_docstrings(tree: ast.AST) -> int:
    documented = (ast.Module, ast.FunctionDef, ast.ClassDef)
    return sum(
        (ast.get_docstring(node, clean=False) or "").count("\n") + 1
        for node in ast.walk(tree)
        if isinstance(node, documented) and ast.get_docstring(node)
    )


@pytest.mark.parametrize("name", MODULES)
def test_modules_and_functions_keep_their_size(name):
    # STYLE, habits 1: modules up to 450 lines, a function fits on a screen; without docstrings.
    lines = len(MODULES[name].read_text(encoding="utf-8").splitlines())
    assert lines - lines_of_docstrings(parsed(name)) <= 450
    for node in ast.walk(parsed(name)):
        if isinstance(node, ast.FunctionDef):
            length = node.end_lineno - node.lineno + 1 - lines_of_docstrings(node)
            assert length <= 60, f"{name}.{node.name} has {length} lines"
