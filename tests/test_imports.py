"""The arrows between the rooms: what each room may import, in its text and when it is loaded."""

from __future__ import annotations

import ast
import json
import subprocess
import sys
from pathlib import Path

import pytest

PACKAGE = Path(__file__).resolve().parents[1] / "phasedb"
# Each room, and the rooms that it may lean on.
BELOW = {
    "crystal": set(),
    "measured": {"crystal"},
    "identify": {"crystal", "measured"},
    "characterise": {"crystal", "measured", "identify"},
    "library": {"crystal"},  # and the plain types of ALSO
    "report": {"crystal", "measured", "identify", "characterise"},
    "cli": {"crystal", "measured", "identify", "characterise", "library", "report"},
}
# What an instrument of the library fills in: plain data types of the rooms that use them, and their check.
ALSO = {
    "library": {
        "phasedb.identify.settings.ShiftPrior",
        "phasedb.measured.options.ReadOptions",
        "phasedb.measured.options.check_positive",
    }
}
WITHOUT_A_STORE = ("crystal", "measured", "identify", "characterise")
EDGE = {"sqlalchemy", "alembic", "click"}
LAZY = {"scipy", "gemmi", "matplotlib", "jinja2", "rich", "alembic"}


def _modules(room):
    return sorted((PACKAGE / room).rglob("*.py"))


def _imported(path):
    """Return every name that a file imports, wherever in it; names imported only for types are left out."""
    tree = ast.parse(path.read_text(encoding="utf-8"))
    for_types = {
        id(inner)
        for node in ast.walk(tree)
        if isinstance(node, ast.If) and ast.unparse(node.test) == "TYPE_CHECKING"
        for inner in ast.walk(node)
    }
    for node in ast.walk(tree):
        if id(node) in for_types:
            continue
        if isinstance(node, ast.Import):
            yield from (alias.name for alias in node.names)
        elif isinstance(node, ast.ImportFrom) and node.module:
            yield from (f"{node.module}.{alias.name}" for alias in node.names)


def test_every_room_is_named_here():
    assert set(BELOW) == {path.parent.name for path in PACKAGE.glob("*/__init__.py")}


@pytest.mark.parametrize("room", BELOW)
def test_a_room_leans_only_on_those_below_it(room):
    above = {f"phasedb.{other}" for other in BELOW.keys() - {room} - BELOW[room]}
    wrong = [
        f"{path.relative_to(PACKAGE)} imports {name}"
        for path in _modules(room)
        for name in _imported(path)
        if ".".join(name.split(".")[:2]) in above and name not in ALSO.get(room, ())
    ]
    assert wrong == []


@pytest.mark.parametrize("room", WITHOUT_A_STORE)
def test_science_imports_neither_database_nor_command_line(room):
    wrong = [
        f"{path.relative_to(PACKAGE)} imports {name}"
        for path in _modules(room)
        for name in _imported(path)
        if name.partition(".")[0] in EDGE
    ]
    assert wrong == []


@pytest.mark.parametrize("room", WITHOUT_A_STORE)
def test_loading_the_whole_of_a_room_brings_nothing_heavy_along(room):
    names = [
        ".".join(path.relative_to(PACKAGE.parent).with_suffix("").parts).removesuffix(".__init__")
        for path in _modules(room)
    ]
    code = (
        "import importlib, json, sys\n"
        "for name in json.loads(sys.argv[1]): importlib.import_module(name)\n"
        "print(json.dumps(sorted({name.partition('.')[0] for name in sys.modules})))"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, json.dumps(names)], capture_output=True, text=True, check=True
    )
    assert set(json.loads(done.stdout)) & (EDGE | LAZY) == set()


def test_the_package_itself_imports_nothing():
    code = "import sys; before = set(sys.modules); import phasedb; print(*(set(sys.modules) - before))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert {name.partition(".")[0] for name in done.stdout.split()} <= {"phasedb", *sys.stdlib_module_names}
