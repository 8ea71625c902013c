"""Screening by strongest lines: which entries' own strongest lines are in the list.

The votes on the ln a axis know the lattice type only, and think little of a large cell most of whose lines
are too weak to be seen. An entry with a known structure says which of its lines must be there.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.identify.axis import Axis
from phasedb.identify.curve import Cell
from phasedb.identify.entries import Entries
from phasedb.identify.lines import polarisation_factor

FloatArray = NDArray[np.float64]

N_STRONGEST: Final = 14
LEAST_HEIGHT: Final = 0.02
DRIFT_WIDTHS: Final = 1.0  # drift scales added to the width within which a line is found


@dataclass(frozen=True, slots=True)
class Strongest:
    """The strongest lines in range of every entry with a structure, in one flat list.

    `entry` (n_lines,) index of the entry; `half_ln_n` (n_lines,); `chance` (n_lines,) that such a line is
    seen.
    """

    entry: NDArray[np.int64]
    half_ln_n: FloatArray
    chance: FloatArray


def strongest_lines(axis: Axis, entries: Entries) -> Strongest:
    """Return the strongest lines of all entries that the range can show."""
    table = entries.table
    counts = np.diff(table.line_start)[entries.rows] if len(entries) else np.zeros(0, dtype=np.int64)
    entry = np.repeat(np.arange(len(entries)), counts)
    first = np.repeat(table.line_start[entries.rows], counts) if len(entries) else counts
    within = np.arange(len(entry)) - np.repeat(np.cumsum(counts) - counts, counts)
    flat = first + within
    half = 0.5 * np.log(np.maximum(table.line_n[flat], 1))
    x = axis.positions(half, entries.ln_a[entry])
    inside = (x >= axis.low) & (x <= axis.high)
    entry, half, x = entry[inside], half[inside], x[inside]
    height = table.line_strength[flat][inside] * polarisation_factor(axis, x)
    top = np.zeros(len(entries))
    np.maximum.at(top, entry, height)
    height = height / np.maximum(top[entry], 1e-300)
    order = np.lexsort((-height, entry))
    entry, half, height = entry[order], half[order], height[order]
    starts = np.searchsorted(entry, np.arange(len(entries)))
    rank = np.arange(len(entry)) - starts[entry]
    keep = (rank < N_STRONGEST) & (height > LEAST_HEIGHT)
    return Strongest(entry[keep], half[keep], 0.95 * height[keep] / (height[keep] + 0.12))


def screen(
    axis: Axis, entries: Entries, lines: Strongest, cell: Cell, base: FloatArray, explained: FloatArray
) -> FloatArray:
    """Return a score for each entry: what its strongest lines found in the list, and not found, are worth
    (nats).
    """
    if len(lines.entry) == 0 or len(axis.x) == 0:
        return np.full(len(entries), -np.inf)
    true = axis.positions(lines.half_ln_n, entries.ln_a[lines.entry])
    x = true + axis.shift(true, np.array(cell.phi))
    right = np.clip(np.searchsorted(axis.x, x), 1, max(len(axis.x) - 1, 1))
    left = right - 1
    right = np.minimum(right, len(axis.x) - 1)
    nearest = np.where(np.abs(axis.x[left] - x) <= np.abs(axis.x[right] - x), left, right)
    scale = entries.drift_scale + 0.25 * (entries.ln_a_high - entries.ln_a_low)
    drift = DRIFT_WIDTHS * scale[lines.entry] * np.abs(axis.slope(true))
    own = cell.sigma * axis.noise_profile[nearest]
    width = np.sqrt(own**2 + axis.extra_noise[nearest] ** 2 + drift**2)
    density = np.exp(-0.5 * ((axis.x[nearest] - x) / width) ** 2) / (width * np.sqrt(2.0 * np.pi))
    gain = np.maximum(
        density / base[nearest], explained[nearest] * (np.abs(axis.x[nearest] - x) < 2.0 * width)
    )
    odds = lines.chance / (1.0 - lines.chance)
    value = np.log1p(odds * gain) + np.log1p(-lines.chance)
    score = np.bincount(lines.entry, weights=value, minlength=len(entries))
    has_lines = np.bincount(lines.entry, minlength=len(entries)) > 0
    return np.where(has_lines, score, -np.inf)
