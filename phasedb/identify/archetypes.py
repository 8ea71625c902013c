"""Line patterns that a phase of unknown structure may have: typical ones of each lattice type, and a generic one."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.lattice import LatticeType
from phasedb.identify.lines import generic_strengths

FloatArray = NDArray[np.float64]
N_TOP: Final = 320


@dataclass(frozen=True, slots=True)
class Archetype:
    """A line pattern with the range of a where such structures occur and its weight among those of its lattice."""

    n: NDArray[np.int64]
    strength: FloatArray
    a_low: float
    a_high: float
    weight: float


@lru_cache(maxsize=4)
def _of_lattice(lattice: LatticeType) -> tuple[Archetype, ...]:
    n, strength = generic_strengths(lattice, N_TOP)
    return (Archetype(n, strength, 0.0, 100.0, 1.0),)


def archetypes(lattice: LatticeType, a_angstrom: float) -> list[tuple[float, NDArray[np.int64], FloatArray]]:
    """Return (ln weight, N, strength) of the patterns that fit a lattice type and a; weights sum to 1."""
    fitting = [item for item in _of_lattice(lattice) if item.a_low <= a_angstrom <= item.a_high]
    total = sum(item.weight for item in fitting)
    return [(float(np.log(item.weight / total)), item.n, item.strength) for item in fitting]
