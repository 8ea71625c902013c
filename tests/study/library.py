"""The starter library as a table, without a database, and smaller or larger tables made from it."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace
from functools import lru_cache
from pathlib import Path

import numpy as np

from phasedb.crystal.phases import LATTICE_TYPES, Phase, PhaseTable

ROOT = Path(__file__).resolve().parents[2]


@lru_cache(maxsize=1)
def starter_phases() -> tuple[Phase, ...]:
    """Return every phase of the starter library."""
    return _fallback_phases()


@lru_cache(maxsize=1)
def starter_table() -> PhaseTable:
    """Return the starter library as the matcher takes it, with line strengths where a structure is known."""
    return table_of(starter_phases())


def table_of(phases: Iterable[Phase]) -> PhaseTable:
    """Return a table of `phases` with their line strengths."""
    rows = list(phases)
    return PhaseTable.from_phases(rows, [_lines(row) for row in rows])


def take(table: PhaseTable, keep: Iterable[int]) -> PhaseTable:
    """Return the rows `keep` of `table`, in that order."""
    rows = np.array(list(keep), dtype=np.int64)
    counts = np.diff(table.line_start)[rows]
    picks = [np.arange(table.line_start[row], table.line_start[row + 1]) for row in rows]
    lines = np.concatenate(picks) if picks else np.empty(0, dtype=np.int64)

    def text(values: tuple[str, ...]) -> tuple[str, ...]:
        return tuple(values[row] for row in rows)

    return replace(
        table,
        name=text(table.name),
        formula=text(table.formula),
        structure_type=text(table.structure_type),
        standing=text(table.standing),
        elements=tuple(table.elements[row] for row in rows),
        lattice=table.lattice[rows],
        a_angstrom=table.a_angstrom[rows],
        a_esd_angstrom=table.a_esd_angstrom[rows],
        temperature_k=table.temperature_k[rows],
        expansion_per_k=table.expansion_per_k[rows],
        drift=table.drift[rows],
        a_low_angstrom=table.a_low_angstrom[rows],
        a_high_angstrom=table.a_high_angstrom[rows],
        is_starter=table.is_starter[rows],
        line_start=np.concatenate([[0], np.cumsum(counts)]).astype(np.int64),
        line_n=table.line_n[lines],
        line_strength=table.line_strength[lines],
    )


def without(table: PhaseTable, names: Iterable[str]) -> PhaseTable:
    """Return `table` without the entries called `names`."""
    gone = set(names)
    return take(table, [row for row, name in enumerate(table.name) if name not in gone])


def lattice_of(table: PhaseTable, row: int) -> str:
    """Return the lattice type of one row."""
    return LATTICE_TYPES[int(table.lattice[row])]


# --- temporary, until the starter file and the intensities are there -------------------------------------------


def _fallback_phases() -> tuple[Phase, ...]:
    import csv
    import re

    path = ROOT.parent / "shared" / "reference" / "cubic_phases.csv"
    found = []
    with path.open(encoding="utf-8") as file:
        for row in csv.DictReader(file):
            kind = row["structure_type"]
            elements = tuple(sorted(set(re.findall(r"[A-Z][a-z]?", row["formula"]))))
            drift = "line compound"
            if kind in {"A1", "A2", "A15", "L1_2", "B2", "C15", "D0_3", "L2_1"}:
                drift = "alloy"
            elif kind == "B1" and {"C", "N"} & set(elements):
                drift = "solid solution"
            found.append(
                Phase(
                    name=row["name"],
                    formula=row["formula"],
                    lattice_type=row["lattice_type"],
                    a_angstrom=float(row["a_angstrom"]),
                    temperature_k=float(row["temperature_K"]) if row["temperature_K"] else None,
                    structure_type=kind,
                    drift_class=drift,
                    tags=("starter",),
                    elements=elements,
                )
            )
    return tuple(found)


def _lines(phase: Phase):
    from zlib import crc32

    from phasedb.crystal.lattice import allowed_n, multiplicity

    n = allowed_n(phase.lattice_type, max(48, int((2.0 * phase.a_angstrom / 0.7) ** 2)))
    if phase.structure_type in {"A4", "H1_1", "C15"}:
        n = n[~((n % 16 == 4) | (n % 16 == 12))] if phase.structure_type == "A4" else n
    rng = np.random.default_rng(crc32((phase.structure_type or "").encode()))
    spread = 0.3 if phase.structure_type in {"A1", "A2", "A4"} else 1.5
    factor = np.exp(spread * rng.standard_normal(n[-1] + 1))[n]
    m = np.array([multiplicity(phase.lattice_type, int(value)) for value in n], dtype=float)
    return n.astype(np.int32), m * factor * np.exp(-1.5 * n / (4.0 * phase.a_angstrom**2) * 4.0)
