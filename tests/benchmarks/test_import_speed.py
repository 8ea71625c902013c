"""100,000 rows imported beside a bare insert of the same rows: checks and history cost at most 10 times."""

from __future__ import annotations

import csv
import io
import random
import sqlite3
import statistics
import time
from pathlib import Path

import pytest

from phasedb.crystal.elements import ELEMENTS
from phasedb.crystal.radii import METALLIC
from phasedb.library import Library
from phasedb.library.exchange_import import GivenFile, import_files

pytestmark = pytest.mark.benchmark

ROWS = 100_000
ROUNDS = 3
METALS = [symbol for symbol in ELEMENTS if symbol in METALLIC]
FILLED = ("phase", "source")


def made_up_table(rows: int) -> str:
    """Return a table of made-up entries: name, formula, lattice type, a, temperature and a source each."""
    rng = random.Random(20261201)
    buffer = io.StringIO()
    writer = csv.writer(buffer)
    writer.writerow(["name", "formula", "lattice_type", "a_angstrom", "temperature_K", "source", "how"])
    for number in range(rows):
        one, other = rng.sample(METALS, 2)
        formula = f"{one}{rng.randint(1, 9)}{other}{rng.randint(1, 9)}"
        a = f"{rng.uniform(2.5, 14.0):.5f}"
        source = f"made-up table, row {number}"
        writer.writerow([f"phase {number}", formula, rng.choice("PIF"), a, "298", source, "library_value"])
    return buffer.getvalue()


def import_seconds(path: Path, table: str) -> float:
    with Library.create(path, by="benchmark", starter=False) as library:
        began = time.perf_counter()
        done = import_files(library, [GivenFile("table.csv", table, "0" * 64, "csv")])
        took = time.perf_counter() - began
    assert done.new == ROWS
    return took


def bare_seconds(filled: Path, path: Path) -> float:
    """Time the insert of the rows that the import left, into the same tables with the same indexes."""
    Library.create(path, by="benchmark", starter=False).close()
    source = sqlite3.connect(filled)
    rows = {name: source.execute(f"SELECT * FROM {name}").fetchall() for name in FILLED}
    source.close()
    target = sqlite3.connect(path, isolation_level=None)
    began = time.perf_counter()
    target.execute("BEGIN IMMEDIATE")
    for name, values in rows.items():
        target.executemany(f"INSERT INTO {name} VALUES ({', '.join('?' * len(values[0]))})", values)
    target.execute("COMMIT")
    took = time.perf_counter() - began
    target.close()
    return took


def test_an_import_costs_at_most_ten_bare_inserts(tmp_path: Path) -> None:
    table = made_up_table(ROWS)
    ratios = []
    for number in range(ROUNDS):
        filled = tmp_path / f"filled-{number}.sqlite"
        took = import_seconds(filled, table)
        bare = bare_seconds(filled, tmp_path / f"bare-{number}.sqlite")
        ratios.append(took / bare)
        print(f"import {took:.1f} s, bare insert {bare:.2f} s, ratio {ratios[-1]:.1f}")
    assert statistics.median(ratios) <= 10.0
