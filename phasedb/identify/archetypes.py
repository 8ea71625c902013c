"""Line patterns that a phase of unknown structure may have: typical ones of each lattice type, and a generic
one.

The typical ones come from the structure types of the starter library (archetypes.json, made by
``python -m study.archetypes``).
"""

from __future__ import annotations

import json
from dataclasses import dataclass
from functools import lru_cache
from pathlib import Path
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.lattice import LatticeType
from phasedb.identify.lines import generic_strengths

FloatArray = NDArray[np.float64]
N_TOP: Final = 360
GENERIC_WEIGHT: Final = 0.15  # of all patterns: structures that no archetype resembles


@dataclass(frozen=True, slots=True)
class Archetype:
    """A line pattern with the range of a where such structures occur and its weight among those of its
    lattice.
    """

    name: str
    n: NDArray[np.int64]
    strength: FloatArray
    a_low: float
    a_high: float
    weight: float


@lru_cache(maxsize=1)
def _typical() -> dict[str, tuple[Archetype, ...]]:
    rows = json.loads((Path(__file__).parent / "archetypes.json").read_text(encoding="utf-8"))
    found: dict[str, list[Archetype]] = {"P": [], "I": [], "F": []}
    for row in rows:
        found[row["lattice_type"]].append(
            Archetype(
                row["structure_type"],
                np.array(row["n"], dtype=np.int64),
                np.array(row["strength"]),
                row["a_low"],
                row["a_high"],
                row["weight"],
            )
        )
    return {lattice: tuple(rows) for lattice, rows in found.items()}


@lru_cache(maxsize=4)
def generic(lattice: LatticeType) -> Archetype:
    """Return the pattern of a phase of which only the lattice type is known."""
    n, strength = generic_strengths(lattice, N_TOP)
    return Archetype("", n, strength, 0.0, 100.0, GENERIC_WEIGHT)


def archetypes(lattice: LatticeType, a_angstrom: float) -> list[tuple[float, Archetype]]:
    """Return (ln weight, pattern) of the patterns that fit a lattice type and a; weights sum to 1, generic
    last.
    """
    fitting = [one for one in _typical()[lattice] if one.a_low <= a_angstrom <= one.a_high]
    total = sum(one.weight for one in fitting)
    if not fitting:
        return [(0.0, generic(lattice))]
    found = [(float(np.log((1.0 - GENERIC_WEIGHT) * one.weight / total)), one) for one in fitting]
    return [*found, (float(np.log(GENERIC_WEIGHT)), generic(lattice))]
