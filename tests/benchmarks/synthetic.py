"""Synthetic libraries of any size in SQLite, with lattice constants spread like the starter's."""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from pathlib import Path

import numpy as np
from benchmarks.timing import phasedb, seconds
from study.library import starter_table

from phasedb.crystal.lattice import LATTICE_TYPES
from phasedb.crystal.phases import DRIFT_CLASSES

SPREAD = 0.02
"""Scatter of ln a about a starter entry's: smooths the 364 values without changing their spread."""

SYMBOLS = ("Al", "Ti", "Fe", "Ni", "Cu", "Zr", "Nb", "Mo", "Ag", "La", "Ce", "W", "Pt", "Au", "Pb")


def build_library(path: Path, size: int, seed: int = 5) -> Path:
    """Make a store with the starter library and `size` more entries, and return its path.

    Rows are written straight into the phase table: the store's own door takes hours for a million.
    """
    seconds(phasedb("--store", str(path), "init"))
    with sqlite3.connect(path) as connection:
        columns = [row[1] for row in connection.execute("PRAGMA table_info(phase)")]
        template = dict(
            zip(
                columns,
                connection.execute("SELECT * FROM phase WHERE name = 'copper'").fetchone(),
                strict=True,
            )
        )
        marks = ", ".join("?" * len(columns))
        connection.executemany(
            f"INSERT INTO phase ({', '.join(columns)}) VALUES ({marks})",
            _rows(columns, template, size, seed),
        )
        connection.execute("UPDATE state SET phase_count = (SELECT count(*) FROM phase)")
        connection.execute("ANALYZE")
    return path


def _rows(
    columns: list[str], template: dict[str, object], size: int, seed: int
) -> Iterator[tuple[object, ...]]:
    table = starter_table()
    rng = np.random.default_rng(seed)
    parents = rng.integers(0, len(table), size)
    a = table.a_angstrom[parents] * np.exp(SPREAD * rng.standard_normal(size))
    first = rng.integers(0, len(SYMBOLS), (size, 2))
    for number in range(size):
        parent = int(parents[number])
        elements = sorted({SYMBOLS[i] for i in first[number]})
        values = dict(
            template,
            id=1_000_000 + number,
            uid=f"{number:032x}",
            name=f"synthetic {number:07d}",
            name_key=f"synthetic {number:07d}",
            mineral_name="",
            formula="".join(elements),
            formula_key="".join(elements),
            elements=" ".join(elements),
            lattice_type=LATTICE_TYPES[int(table.lattice[parent])],
            a_angstrom=float(a[number]),
            a_text="",
            temperature_k=None,
            structure_type=None,
            space_group="",
            drift_class=DRIFT_CLASSES[int(table.drift[parent])],
            a_min_angstrom=None,
            a_max_angstrom=None,
        )
        yield tuple(values[name] for name in columns)
