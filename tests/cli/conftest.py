"""Stores and lists for the tests of commands."""

from __future__ import annotations

import shutil
from pathlib import Path

import pytest

from phasedb.library import Library

DEMO = Path(__file__).parents[2] / "seed_data" / "demo"


@pytest.fixture(scope="session")
def starter_store(tmp_path_factory):
    """A library with the starter phases, for tests that only read it."""
    path = tmp_path_factory.mktemp("starter") / "library.sqlite"
    Library.create(path, by="Ann").close()
    return path


@pytest.fixture
def store(starter_store, tmp_path):
    """A fresh copy of it, for tests that write."""
    return shutil.copyfile(starter_store, tmp_path / "library.sqlite")


@pytest.fixture
def knife():
    """An invented list of a nitride coating on steel."""
    return DEMO / "bread_knife_17.csv"
