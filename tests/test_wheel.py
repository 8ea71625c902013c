"""What is shipped works away from the checkout: the wheel in a fresh environment and an empty folder."""

from __future__ import annotations

import json
import os
import subprocess
import sys
import tarfile
import zipfile
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parents[1]
FOREIGN_TO_A_WHEEL = ("tests/", "seed_data/", "migrations/", ".ci/")

pytestmark = pytest.mark.long


def _run(*words: object, folder: Path) -> str:
    kept = {k: v for k, v in os.environ.items() if not k.startswith(("PHASEDB_", "XDG_", "PYTHONPATH"))}
    done = subprocess.run(
        [str(word) for word in words],
        capture_output=True,
        text=True,
        cwd=folder,
        env={**kept, "HOME": str(folder)},
        check=False,
    )
    assert done.returncode == 0, done.stdout + done.stderr
    return done.stdout


@pytest.fixture(scope="module")
def built(tmp_path_factory):
    """The folder with the source archive, and the wheel that was built from it."""
    pytest.importorskip("build", reason="needs the extra dev")
    folder = tmp_path_factory.mktemp("dist")
    _run(sys.executable, "-m", "build", "--outdir", folder, ROOT, folder=folder)
    return folder


@pytest.fixture(scope="module")
def installed(built, tmp_path_factory):
    """A fresh environment that holds the wheel and what it needs; an empty folder beside it."""
    folder = tmp_path_factory.mktemp("away")
    [wheel] = built.glob("*.whl")
    _run(sys.executable, "-m", "venv", folder / "env", folder=folder)
    _run(folder / "env" / "bin" / "python", "-m", "pip", "install", "--quiet", wheel, folder=folder)
    (folder / "empty").mkdir()
    return folder


def _shipped(folder, suffix=""):
    return {
        str(path.relative_to(ROOT / folder)) for path in (ROOT / folder).rglob(f"*{suffix}") if path.is_file()
    }


def test_the_wheel_holds_all_data_and_nothing_else(built):
    [wheel] = built.glob("*.whl")
    names = set(zipfile.ZipFile(wheel).namelist())
    for folder, inside in (("migrations", "_migrations"), ("seed_data", "_seed_data")):
        wanted = {f"phasedb/{inside}/{name}" for name in _shipped(folder) if "__pycache__" not in name}
        assert wanted
        assert wanted <= names
    for name in ("py.typed", "identify/archetypes.json", "report/templates/match.html"):
        assert f"phasedb/{name}" in names
    assert not [name for name in names if name.startswith(FOREIGN_TO_A_WHEEL) or "__pycache__" in name]


def test_the_source_archive_holds_the_project(built):
    [archive] = built.glob("*.tar.gz")
    with tarfile.open(archive) as opened:
        names = {name.partition("/")[2] for name in opened.getnames()}
    assert {"README.md", "DEVELOPERS.md", "LICENSE", "pyproject.toml", "tests/test_wheel.py"} <= names
    assert {"migrations/env.py", "seed_data/starter.csv", "phasedb/identify/archetypes.json"} <= names


def test_the_demo_runs_from_the_wheel_in_an_empty_folder(installed):
    out = _run(installed / "env" / "bin" / "phasedb", "demo", folder=installed / "empty")
    last = " ".join(out.partition("Step 5 of 5")[2].split())
    assert "holds workshop green (magnesium indium stannate)" in last
    assert list((installed / "empty").iterdir()) == []


def test_a_store_is_made_and_used_from_the_wheel(installed):
    program = [installed / "env" / "bin" / "python", "-m", "phasedb", "--store", "lab.sqlite"]
    assert json.loads(_run(*program, "init", "--json", folder=installed))["phase_count"] >= 300
    assert json.loads(_run(*program, "audit", "--json", folder=installed))["whole"] is True
    place = _run(
        installed / "env" / "bin" / "python",
        "-c",
        "import phasedb; print(phasedb.__file__)",
        folder=installed,
    )
    assert str(ROOT) not in place
    _run(*program, "report", ROOT / "seed_data/demo/bread_knife_17.csv", "-o", "a.html", folder=installed)
    assert "<svg" in (installed / "a.html").read_text(encoding="utf-8")
