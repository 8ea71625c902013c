"""Background of a scan: peak clipping first, then a smooth curve through what the fitted lines leave."""

from __future__ import annotations

from typing import Final

import numpy as np

from phasedb.measured.noise import local_mean
from phasedb.measured.peaklist import FloatArray

MOST_BINS: Final = 6000
"""Clipping works on so many averaged points at most."""


def clipped_background(x: FloatArray, y: FloatArray, reach_deg: float) -> FloatArray:
    """Return a background that passes under features narrower than about `reach_deg` (degrees).

    Notes
    -----
    On the square root of the averaged counts each point is lowered to the mean of its neighbours at +-p, for
    p from the reach down to one step (Ryan, Clayton, Griffin, Sie & Cousens, Nucl. Instrum. Methods B 34
    (1988) 396); clipping settles below the noise, so the mean shortfall outside peaks is given back.
    """
    per_bin = max(int(np.ceil(len(x) / MOST_BINS)), 1)
    centre, level = _binned(x, per_bin), _binned(y, per_bin)
    steps = max(int(reach_deg / max(float(np.median(np.diff(centre))), 1e-9)), 2)
    smooth = local_mean(level, max(2 * (steps // 10) + 1, 3))
    lowest = float(smooth.min())
    clipped = np.sqrt(smooth - lowest)
    for p in range(min(steps, (len(clipped) - 1) // 2), 0, -1):
        inner = 0.5 * (clipped[: -2 * p] + clipped[2 * p :])
        clipped[p:-p] = np.minimum(clipped[p:-p], inner)
    found = clipped**2 + lowest
    shortfall = level - found
    typical = 1.4826 * float(np.median(np.abs(shortfall - np.median(shortfall))))
    outside = shortfall < np.median(shortfall) + 2.0 * typical
    found = found + max(float(np.mean(shortfall[outside])), 0.0) if outside.any() else found
    return np.interp(x, centre, found)


def smooth_through(x: FloatArray, left: FloatArray, sigma: FloatArray, spacing_deg: float) -> FloatArray:
    """Return a curve through `left` (counts less fitted lines): weighted means in bins, outliers clipped."""
    count = max(int((x[-1] - x[0]) / spacing_deg), 1)
    number = np.minimum(((x - x[0]) / (x[-1] - x[0]) * count).astype(np.int64), count - 1)
    weight = sigma**-2.0
    keep = np.ones(len(x), dtype=np.bool_)
    mean = np.zeros(count)
    for _ in range(3):
        total = np.bincount(number[keep], weight[keep], minlength=count)
        summed = np.bincount(number[keep], (weight * left)[keep], minlength=count)
        filled = total > 0
        mean[filled] = summed[filled] / total[filled]
        keep = np.abs(left - mean[number]) < 3.0 * np.maximum(sigma, 1e-300)
    centre = np.bincount(number, x, minlength=count) / np.maximum(np.bincount(number, minlength=count), 1)
    usable = filled & (np.bincount(number, minlength=count) > 0)
    return np.interp(x, centre[usable], mean[usable])


def _binned(values: FloatArray, size: int) -> FloatArray:
    whole = len(values) // size * size
    means = values[:whole].reshape(-1, size).mean(axis=1)
    return means if whole == len(values) else np.append(means, values[whole:].mean())
