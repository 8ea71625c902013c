"""Make the line patterns of unlisted phases from the starter library.

Run from tests/ as ``python -m study.archetypes``; writes phasedb/identify/archetypes.json. For each structure
type: the entry whose pattern is nearest to the mean of its type, and, where another differs much, the one
farthest from it; weight by how many entries the type has. Types of a single entry are left out: their pattern
would be that entry's own, and the study takes entries out of the library.
"""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np

from phasedb.crystal.lattice import LATTICE_TYPES
from phasedb.crystal.phases import PhaseTable
from study.library import starter_table

N_TOP = 360
WEAKEST = 2e-4
TARGET = Path(__file__).resolve().parents[2] / "phasedb" / "identify" / "archetypes.json"


def pattern(table: PhaseTable, row: int) -> np.ndarray:
    """Return strength by N (index), with the fall of Lorentz-polarisation put on and the strongest line at
    1.
    """
    dense = np.zeros(N_TOP + 1)
    first, last = table.line_start[row], table.line_start[row + 1]
    n, strength = table.line_n[first:last], table.line_strength[first:last]
    keep = n <= N_TOP
    dense[n[keep]] = strength[keep]
    return dense


def _profile(dense: np.ndarray) -> np.ndarray:
    height = np.sqrt(dense / np.maximum(np.arange(N_TOP + 1), 1))
    return height / np.linalg.norm(height)


def make(table: PhaseTable) -> list[dict]:
    """Return the archetypes, in a fixed order."""
    groups: dict[tuple[str, str], list[int]] = {}
    for row in range(len(table)):
        if table.line_start[row + 1] > table.line_start[row]:
            key = (LATTICE_TYPES[int(table.lattice[row])], table.structure_type[row])
            groups.setdefault(key, []).append(row)
    made = []
    for (lattice, kind), rows in sorted(groups.items()):
        if len(rows) < 2:
            continue
        rows.sort(key=lambda row: table.name[row])
        dense = [pattern(table, row) for row in rows]
        profiles = np.array([_profile(one) for one in dense])
        mean = profiles.mean(axis=0)
        closeness = profiles @ mean / np.linalg.norm(mean)
        chosen = [int(np.argmax(closeness))]
        apart = profiles @ profiles[chosen[0]]
        if apart.min() < 0.93:
            chosen.append(int(np.argmin(apart)))
        a = table.a_angstrom[rows]
        for index in chosen:
            relative = dense[index] / dense[index].max()
            n = np.flatnonzero(relative > WEAKEST)
            made.append(
                {
                    "lattice_type": lattice,
                    "structure_type": kind,
                    "from": table.name[rows[index]],
                    "a_low": round(float(0.9 * a.min()), 3),
                    "a_high": round(float(1.1 * a.max()), 3),
                    "weight": round(len(rows) / len(chosen), 2),
                    "n": n.tolist(),
                    "strength": [float(f"{value:.4g}") for value in relative[n]],
                }
            )
    return made


if __name__ == "__main__":
    TARGET.write_text(json.dumps(make(starter_table()), separators=(",", ":")) + "\n", encoding="utf-8")
