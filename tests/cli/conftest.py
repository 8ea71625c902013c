"""Stores and lists for the tests of commands."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest
from running import run

from phasedb.library import Library

DEMO = Path(__file__).parents[2] / "seed_data" / "demo"


@pytest.fixture(scope="session")
def starter_store(tmp_path_factory):
    """A library with the starter phases, for tests that only read it."""
    path = tmp_path_factory.mktemp("starter") / "library.sqlite"
    Library.create(path, by="Ann").close()
    return path


@pytest.fixture(scope="session")
def small_store(tmp_path_factory):
    """A library of four phases, in which a match costs little; for tests that only read it."""
    path = tmp_path_factory.mktemp("small") / "library.sqlite"
    run("init", "--empty", store=path)
    for name, formula, lattice, a in (
        ("silver", "Ag", "F", "4.0862"),
        ("iron", "Fe", "I", "2.8665"),
        ("titanium nitride", "TiN", "F", "4.2439"),
        ("magnesium oxide", "MgO", "F", "4.2112"),
    ):
        ran = run("add", "--name", name, "--formula", formula, "--lattice", lattice, "--a", a, store=path)
        assert ran.code == 0, ran.err
    return path


@pytest.fixture
def store(starter_store, tmp_path):
    """A fresh copy of it, for tests that write."""
    return shutil.copyfile(starter_store, tmp_path / "library.sqlite")


@pytest.fixture
def knife():
    """An invented list of a nitride coating on steel."""
    return DEMO / "bread_knife_17.csv"
