"""The starter library as phases with structures, read from its table without a store."""

from __future__ import annotations

import csv
from functools import lru_cache
from pathlib import Path

from phasedb.crystal.phases import Phase
from phasedb.crystal.structure_types import structure_from_type

STARTER = Path(__file__).parents[1] / "seed_data" / "starter.csv"


@lru_cache(maxsize=1)
def starter_rows() -> tuple[dict[str, str], ...]:
    """Return the rows of the starter table."""
    with STARTER.open(encoding="utf-8", newline="") as file:
        return tuple(csv.DictReader(file))


def phase_of_row(row: dict[str, str]) -> Phase:
    """Return the phase of a row of the starter table, with the structure of its type."""
    return Phase(
        name=row["name"],
        formula=row["formula"],
        lattice_type=row["lattice_type"],
        a_angstrom=float(row["a_angstrom"]),
        structure_type=row["structure_type"],
        structure=structure_from_type(
            row["structure_type"], row["formula"], free_parameters=row["free_parameters"] or None
        ),
    )


@lru_cache(maxsize=1)
def starter_phases() -> dict[str, Phase]:
    """Return all starter phases by name."""
    return {row["name"]: phase_of_row(row) for row in starter_rows()}


@lru_cache(maxsize=1)
def one_phase_of_each_type() -> dict[str, Phase]:
    """Return one phase of each structure type; of types with variants, one of each variant."""
    found: dict[tuple[object, ...], Phase] = {}
    for phase in starter_phases().values():
        held = [tuple(symbol for symbol, _ in site.species) for site in phase.structure.sites]
        shape = tuple((held.index(symbols), len(symbols)) for symbols in held)
        found.setdefault((phase.structure_type, phase.structure.space_group, shape), phase)
    return {phase.name: phase for phase in found.values()}
