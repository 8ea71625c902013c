"""Noise of a scan: stated, from counting statistics, or from the scatter of neighbouring points."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from phasedb.measured.peaklist import FloatArray
from phasedb.measured.scan import Scan

WINDOWS: Final = 24
"""Into so many windows a scan is cut to follow noise that changes along it."""
MAD_TO_SIGMA: Final = 1.4826
"""Standard deviation of a Gaussian over its median absolute deviation."""


@dataclass(frozen=True, slots=True)
class Noise:
    """Standard deviation of each point (n_points,) and where it comes from, in words."""

    sigma: FloatArray
    origin: str


def noise_of(scan: Scan) -> Noise:
    """Return the noise of a scan.

    Stated uncertainties are taken as they are. Whole numbers are counts: the variance is the mean count.
    Anything else was scaled or summed: the variance over the intensity is judged in windows from second
    differences (the variance itself where a background was taken off and counts are negative).
    """
    smooth = local_mean(scan.counts, 5)
    if scan.esd is not None:
        return Noise(scan.esd.copy(), "stated in the file")
    if _are_counts(scan.counts):
        return Noise(np.sqrt(np.maximum(smooth, 0.0) + 0.5), "counting statistics")
    return Noise(_from_scatter(scan.counts, smooth), "scatter of neighbouring points")


def local_mean(values: FloatArray, width: int) -> FloatArray:
    """Return the running mean over `width` points (odd), shorter at the ends."""
    half = width // 2
    total = np.concatenate([[0.0], np.cumsum(values)])
    index = np.arange(len(values))
    low, high = np.maximum(index - half, 0), np.minimum(index + half + 1, len(values))
    return np.asarray((total[high] - total[low]) / (high - low))


def _are_counts(counts: FloatArray) -> bool:
    return bool((counts >= 0).all() and np.mean(np.abs(counts - np.round(counts)) < 1e-6) > 0.999)


def _from_scatter(counts: FloatArray, smooth: FloatArray) -> FloatArray:
    """Return sigma with sigma² = gain(x) times intensity; a second difference has variance 6 sigma²."""
    floor = max(float(np.median(np.abs(smooth))) * 1e-2, 1e-300)
    level = np.ones_like(counts) if (counts < 0).any() else np.maximum(smooth, floor)
    second = counts[:-2] - 2.0 * counts[1:-1] + counts[2:]
    relative = np.abs(second) / np.sqrt(6.0 * level[1:-1])
    pieces = np.array_split(np.arange(len(relative)), min(WINDOWS, max(len(relative) // 40, 1)))
    centre = np.array([piece.mean() + 1.0 for piece in pieces])
    gain = np.array([(MAD_TO_SIGMA * np.median(relative[piece])) ** 2 for piece in pieces])
    known = gain > 0
    if not known.any():
        return np.full(len(counts), max(float(np.ptp(counts)) * 1e-6, 1e-300))
    spread = np.exp(np.interp(np.arange(len(counts)), centre[known], np.log(gain[known])))
    return np.asarray(np.sqrt(spread * level))
