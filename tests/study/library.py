"""The starter library as a table, without a database, and smaller or larger tables made from it."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace
from functools import lru_cache

import numpy as np

from phasedb.crystal.phases import Phase, PhaseTable
from phasedb.library.preparing import entry_of, prepare
from phasedb.library.reading import lines_of
from phasedb.library.seed import starter_drafts


@lru_cache(maxsize=1)
def starter_phases() -> tuple[Phase, ...]:
    """Return every phase of the starter library."""
    found = []
    for number, draft in enumerate(starter_drafts()):
        entry = entry_of(prepare(draft), uid=f"{number:032x}", by="study", at="1970-01-01T00:00:00Z")
        found.append(entry.phase())
    return tuple(found)


@lru_cache(maxsize=1)
def starter_table() -> PhaseTable:
    """Return the starter library as the matcher takes it, with line strengths where a structure is known."""
    return table_of(starter_phases())


def table_of(phases: Iterable[Phase]) -> PhaseTable:
    """Return a table of `phases` with their line strengths."""
    rows = list(phases)
    return PhaseTable.from_phases(rows, [lines_of(row) for row in rows])


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
