"""Stores for the tests: a starter library made once and copied, an empty one, and two people."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest

from phasedb.library import Draft, Library, Source


@pytest.fixture(scope="session")
def made_once(tmp_path_factory) -> Path:
    path = tmp_path_factory.mktemp("made") / "starter.sqlite"
    Library.create(path, by="Ann").close()
    return path


@pytest.fixture
def starter(made_once, tmp_path) -> str:
    """The path of a fresh copy of the starter library."""
    path = tmp_path / "starter.sqlite"
    shutil.copyfile(made_once, path)
    return str(path)


@pytest.fixture
def empty(tmp_path) -> str:
    """The path of a library without entries."""
    path = tmp_path / "empty.sqlite"
    Library.create(path, by="Ann", starter=False).close()
    return str(path)


@pytest.fixture
def nitride() -> Draft:
    return Draft(
        name="our nitride",
        formula="TiN",
        lattice_type="F",
        a_angstrom=4.2312,
        a_esd_angstrom=0.0002,
        structure_type="B1",
        sources=(Source("own powder, line 7", kind="measured here"),),
    )
