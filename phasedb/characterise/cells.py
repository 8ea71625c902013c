"""What a refinement starts from: a stored phase, or a lattice type and a rough a."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.lattice import LatticeType, check_lattice_type
from phasedb.crystal.phases import Phase
from phasedb.crystal.quantity import parse_lattice_constant

SEEN_STRENGTH: Final = 1e-4
"""Lines weaker than this share of the strongest are not expected in a list."""
STARTER_TEMPERATURE_K: Final = 298.0


@dataclass(frozen=True, slots=True)
class StartingCell:
    """Lattice type, rough a (Å) as measured, the N that may show (None: all), thermal expansion (1/K)."""

    lattice_type: LatticeType
    a_angstrom: float
    allowed: NDArray[np.int64] | None = None
    expansion_per_k: float | None = None


def cell_from_phase(phase: Phase, temperature_k: float | None) -> StartingCell:
    """Return the cell of a phase at `temperature_k` (K), with the lines that its structure shows."""
    a = phase.a_angstrom
    if temperature_k is not None and phase.expansion_per_k is not None:
        recorded = phase.temperature_k if phase.temperature_k is not None else STARTER_TEMPERATURE_K
        a *= 1.0 + phase.expansion_per_k * (temperature_k - recorded)
    return StartingCell(phase.lattice_type, a, _seen_lines(phase), phase.expansion_per_k)


def cell_from_values(lattice: str, a_text: str) -> StartingCell:
    """Return the cell that a user wrote.

    Raises
    ------
    InputError
        For an unknown lattice type or an impossible lattice constant.
    """
    return StartingCell(check_lattice_type(lattice), parse_lattice_constant(a_text).angstrom)


def _seen_lines(phase: Phase) -> NDArray[np.int64] | None:
    from phasedb.crystal.intensity import line_strengths

    lines = line_strengths(phase)
    if lines is None or not len(lines[0]):
        return None
    seen: NDArray[np.int64] = lines[0][lines[1] > SEEN_STRENGTH * lines[1].max()].astype(np.int64)
    return seen
