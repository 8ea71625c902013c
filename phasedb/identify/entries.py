"""The library's phases as the search needs them: a at the measuring temperature, drift, prior odds,
patterns.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.lattice import LATTICE_TYPES
from phasedb.crystal.phases import DRIFT_CLASSES, PhaseTable
from phasedb.identify.archetypes import generic
from phasedb.identify.chemistry import chemistry_weights
from phasedb.identify.settings import MatchSettings

FloatArray = NDArray[np.float64]

ROOM_K: Final = 298.0
EXPECTED_LISTED: Final = 1.5  # phases of the library expected in a sample
MOST_LIKELY_PRIOR: Final = 0.35  # odds of one entry before the lines are seen, however sharp the chemistry
# Student-t scales of ln a by drift class: what a real sample's a differs from the stored one by.
# ... and how far it may at most, beyond which the entry is not what the sample holds.
LARGEST_DRIFT: Final = {"line compound": 0.004, "alloy": 0.009, "solid solution": 0.009}
DRIFT_SCALE: Final = {"line compound": 4e-4, "alloy": 2.0e-3, "solid solution": 2.5e-3}
TYPICAL_EXPANSION: Final = (
    1.5e-5  # 1/K, the spread of unknown expansion coefficients (common practice, no source)
)
FAR_IN_TEMPERATURE_K: Final = 150.0


@dataclass(frozen=True, slots=True)
class Entries:
    """Matchable phases as columns, in the order of their name keys.

    In a large library each stands for `crowd` entries that its window holds; `ln_odds` counts them all.
    """

    table: PhaseTable
    rows: NDArray[np.int64]  # rows of the table that may match
    lattice: NDArray[np.int64]
    ln_a: FloatArray
    drift_scale: FloatArray
    largest_drift: FloatArray
    ln_a_low: FloatArray
    ln_a_high: FloatArray
    ln_odds: FloatArray
    crowd: FloatArray
    left_out_for_temperature: tuple[str, ...]

    def __len__(self) -> int:
        return len(self.rows)

    def pattern(self, index: int) -> tuple[NDArray[np.integer], FloatArray]:
        """Return (N, strength) of one entry: from its structure, else the generic one of its lattice type."""
        row = int(self.rows[index])
        first, last = self.table.line_start[row], self.table.line_start[row + 1]
        if last > first:
            return self.table.line_n[first:last], self.table.line_strength[first:last]
        lattice = LATTICE_TYPES[int(self.lattice[index])]
        pattern = generic(lattice)
        return pattern.n, pattern.strength

    def has_structure(self, index: int) -> bool:
        """Return whether the entry's line heights come from its structure."""
        row = int(self.rows[index])
        return bool(self.table.line_start[row + 1] > self.table.line_start[row])


def prepare(
    table: PhaseTable,
    settings: MatchSettings,
    temperature_k: float | None,
    *,
    phase_count: int | None = None,
    crowd: FloatArray | None = None,
) -> Entries:
    """Return the entries that may match: at the measuring temperature, with drift and prior odds."""
    measured_at = temperature_k if temperature_k is not None else ROOM_K
    recorded = np.where(np.isnan(table.temperature_k), ROOM_K, table.temperature_k)
    difference = measured_at - recorded
    expansion = np.nan_to_num(table.expansion_per_k)
    known = ~np.isnan(table.expansion_per_k)
    far = (np.abs(difference) > FAR_IN_TEMPERATURE_K) & ~known
    keep = np.ones(len(table), dtype=bool) if settings.any_temperature else ~far
    weight = chemistry_weights(table.elements, settings)
    keep &= weight > 0
    order = sorted(np.flatnonzero(keep), key=lambda row: (table.name[row].casefold(), table.name[row]))
    rows = np.array(order, dtype=np.int64)
    ln_shift = expansion * difference
    scale = np.array([DRIFT_SCALE[name] for name in DRIFT_CLASSES])[table.drift]
    relative_esd = np.nan_to_num(table.a_esd_angstrom / table.a_angstrom)
    spread = np.where(known, 0.1 * expansion, TYPICAL_EXPANSION) * np.abs(difference)
    scale = np.sqrt(scale**2 + relative_esd**2 + spread**2)
    ln_a = np.log(table.a_angstrom) + ln_shift
    low = np.where(np.isnan(table.a_low_angstrom), ln_a, np.log(table.a_low_angstrom) + ln_shift)
    high = np.where(np.isnan(table.a_high_angstrom), ln_a, np.log(table.a_high_angstrom) + ln_shift)
    ranged = high > low
    scale = np.where(ranged, np.minimum(scale, 2e-3), scale)
    largest = np.array([LARGEST_DRIFT[name] for name in DRIFT_CLASSES])[table.drift]
    largest = np.where(ranged, 0.008, largest) + 3.0 * np.hypot(relative_esd, spread)
    # what is compatible with the chemistry shares the expectation; the rest keeps its share of the whole
    # library
    each = np.ones(len(table)) if crowd is None else crowd
    whole = float(max(phase_count or len(table), 1))
    suits = float((each * (weight >= 1.0)).sum() / max(float(each.sum()), 1e-9))
    compatible = max(whole * suits, 1e-9)
    odds = np.where(weight >= 1.0, EXPECTED_LISTED / compatible, EXPECTED_LISTED * weight / whole)
    odds = np.minimum(odds * each, MOST_LIKELY_PRIOR)
    with np.errstate(divide="ignore"):
        ln_odds = np.log(odds)
    return Entries(
        table=table,
        rows=rows,
        lattice=table.lattice[rows].astype(np.int64),
        ln_a=ln_a[rows],
        drift_scale=scale[rows],
        largest_drift=largest[rows],
        ln_a_low=np.minimum(low, ln_a)[rows],
        ln_a_high=np.maximum(high, ln_a)[rows],
        ln_odds=ln_odds[rows],
        crowd=each[rows],
        left_out_for_temperature=tuple(table.name[row] for row in np.flatnonzero(far & ~keep)),
    )
