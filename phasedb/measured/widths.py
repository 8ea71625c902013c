"""Line width as a smooth function of angle, learned from the lines themselves."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from phasedb.measured.peaklist import FloatArray

_BEND_SCALES: Final = (0.7, 0.3)
"""Scales of slope and bend of ln width over half of the scan; `common practice, no source`."""
_LEAST_SPREAD, _MOST_SPREAD = 0.05, 0.5


@dataclass(frozen=True, slots=True)
class WidthModel:
    """ln fwhm = a polynomial of second degree in (2theta - middle) / half span; `spread` of single lines."""

    middle: float
    half_span: float
    coefficients: FloatArray
    spread: float

    def at(self, two_theta_deg: FloatArray) -> FloatArray:
        """Return the full width at half maximum in degrees."""
        t = np.clip((two_theta_deg - self.middle) / self.half_span, -1.2, 1.2)
        return np.exp(self.coefficients @ np.stack([np.ones_like(t), t, t**2]))


def fit_widths(
    two_theta_deg: FloatArray, fwhm: FloatArray, weight: FloatArray, *, low: float, high: float
) -> WidthModel:
    """Return the width model of lines with the given widths (degrees) and weights; robust against odd ones.

    With few lines slope and bend stay near 0.
    """
    middle, half = 0.5 * (low + high), max(0.5 * (high - low), 1e-6)
    t = (two_theta_deg - middle) / half
    design = np.stack([np.ones_like(t), t, t**2], axis=1)
    ln_width = np.log(fwhm)
    share = weight / weight.max()
    prior = np.diag([0.0, *(scale**-2.0 for scale in _BEND_SCALES)])
    order = np.argsort(ln_width)
    half_weight = np.cumsum(share[order])
    start = ln_width[order][np.searchsorted(half_weight, 0.5 * half_weight[-1])]
    coefficients = np.array([start, 0.0, 0.0])
    spread = 0.3
    for _ in range(12):
        left = ln_width - design @ coefficients
        trust = share / (1.0 + (left / spread) ** 2)
        normal = design.T @ (design * trust[:, None]) / spread**2 + prior
        coefficients = np.linalg.solve(normal, design.T @ (trust * ln_width) / spread**2)
        left = np.abs(ln_width - design @ coefficients)
        spread = float(np.clip(1.4826 * np.median(left), _LEAST_SPREAD, _MOST_SPREAD))
    return WidthModel(middle, half, coefficients, spread)
