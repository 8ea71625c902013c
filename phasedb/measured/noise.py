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
    """Standard deviation of each point, where it comes from, and variance over intensity where that sets it.

    Attributes
    ----------
    sigma : (n_points,)
    origin : str, in words
    gain : (n_points,) or None
        None where the noise does not follow the intensity (stated, or a background was taken off).
    """

    sigma: FloatArray
    origin: str
    gain: FloatArray | None = None

    def at_level(self, level: FloatArray) -> Noise:
        """Return the noise of a scan whose expected intensity is `level`.

        Noise from the counts themselves is low where they are low by chance, which pulls every weighted mean
        down; the fitted curve has no such chance in it.
        """
        if self.gain is None:
            return self
        floor = 0.5 * self.gain
        return Noise(np.sqrt(self.gain * np.maximum(level, 0.0) + floor * self.gain), self.origin, self.gain)


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
        return Noise(np.ones_like(smooth), COUNTING, np.ones_like(smooth)).at_level(smooth)
    gain = _gain_of_scatter(scan.counts, smooth)
    if (scan.counts < 0).any():
        return Noise(np.sqrt(gain), SCATTER)
    return Noise(np.ones_like(smooth), SCATTER, gain).at_level(smooth)


COUNTING: Final = "counting statistics"
SCATTER: Final = "scatter of neighbouring points"


def local_mean(values: FloatArray, width: int) -> FloatArray:
    """Return the running mean over `width` points (odd), shorter at the ends."""
    half = width // 2
    total = np.concatenate([[0.0], np.cumsum(values)])
    index = np.arange(len(values))
    low, high = np.maximum(index - half, 0), np.minimum(index + half + 1, len(values))
    return np.asarray((total[high] - total[low]) / (high - low))


def _are_counts(counts: FloatArray) -> bool:
    return bool((counts >= 0).all() and np.mean(np.abs(counts - np.round(counts)) < 1e-6) > 0.999)


def _gain_of_scatter(counts: FloatArray, smooth: FloatArray) -> FloatArray:
    """Return variance / intensity along the scan (the variance where counts are negative).

    From second differences, whose variance is six times that of a point.
    """
    floor = max(float(np.median(np.abs(smooth))) * 1e-2, 1e-300)
    level = np.ones_like(counts) if (counts < 0).any() else np.maximum(smooth, floor)
    second = counts[:-2] - 2.0 * counts[1:-1] + counts[2:]
    relative = np.abs(second) / np.sqrt(6.0 * level[1:-1])
    pieces = np.array_split(np.arange(len(relative)), min(WINDOWS, max(len(relative) // 40, 1)))
    centre = np.array([piece.mean() + 1.0 for piece in pieces])
    gain = np.array([(MAD_TO_SIGMA * np.median(relative[piece])) ** 2 for piece in pieces])
    known = gain > 0
    if not known.any():
        return np.full(len(counts), max(float(np.ptp(counts)) * 1e-6, 1e-300) ** 2 / floor)
    return np.asarray(np.exp(np.interp(np.arange(len(counts)), centre[known], np.log(gain[known]))))
