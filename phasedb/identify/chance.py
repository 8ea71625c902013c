"""How many entries of this library would match this well by luck."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.lattice import LATTICE_TYPES
from phasedb.identify.axis import Axis
from phasedb.identify.curve import Cell, vote
from phasedb.identify.entries import Entries
from phasedb.identify.search import Fitted

FloatArray = NDArray[np.float64]

EXCLUDED = 0.012  # ln a around the phase itself
TAIL_QUANTILES = (0.99, 0.999)


def expected_by_chance(
    axis: Axis, entries: Entries, fit: Fitted, member: int, lattice: int, *, phase_count: int
) -> float:
    """Return the expected number of entries that would vote as high as this one by luck.

    The lines are those that the other phases of the set leave; the share of the ln a axis on which the votes
    are at least as high (extrapolated exponentially beyond the highest seen) times the number of entries.
    """
    place = fit.members.index(member)
    row = fit.row
    own = fit.batch.claims[row, place].sum(axis=1)
    base = fit.batch.base[row] * np.maximum(1.0 - own, 1e-6)
    background = fit.batch.background[row]
    explained = np.clip(1.0 - background - own, 0.0, 1.0)
    cell = Cell(fit.shift_terms, float(np.exp(fit.ln_sigma)), 0.0)
    curve = vote(axis, cell, base, explained)
    ln_a = float(fit.ln_a[place])
    grid = curve.start + curve.step * np.arange(curve.values.shape[1])
    reach = max(1, int(2.0 * float(np.median(entries.drift_scale)) / curve.step)) if len(entries) else 1
    near = np.abs(grid - ln_a) < max(3.0 * curve.step, 1.5e-3)
    score = float(curve.values[lattice][near].max())
    total = 0.0
    for index in range(len(LATTICE_TYPES)):
        if len(entries) == 0:
            continue
        count = phase_count * float(np.mean(entries.lattice == index))
        values = _windowed(curve.values[index], reach)
        values = values[np.abs(grid - ln_a) > EXCLUDED]
        total += count * share_at_least(values, score)
    return float(total)


def _windowed(values: FloatArray, reach: int) -> FloatArray:
    """Return the running maximum over 2 reach + 1 points."""
    padded = np.pad(values, reach, constant_values=-np.inf)
    return np.asarray(np.lib.stride_tricks.sliding_window_view(padded, 2 * reach + 1).max(axis=1))


def share_at_least(values: FloatArray, score: float) -> float:
    """Return the share of `values` at or above `score`, extrapolated exponentially beyond the highest
    ones.
    """
    share = float(np.mean(values >= score))
    if share > 1.0 - TAIL_QUANTILES[1]:
        return share
    low, high = (float(value) for value in np.quantile(values, TAIL_QUANTILES))
    slope = max((high - low) / np.log(10.0), 0.2)
    return float((1.0 - TAIL_QUANTILES[1]) * np.exp(-max(score - high, 0.0) / slope))
