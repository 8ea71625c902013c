"""Lines nearer to each other than the list's resolution become one line."""

from __future__ import annotations

from typing import Final

import numpy as np

from phasedb.measured.peaklist import FloatArray

RESOLUTION_DEG: Final = 0.02
RESOLUTION_RELATIVE: Final = 2e-4
"""Closer lines are one line, where no width is given."""

_Columns = tuple[
    FloatArray, FloatArray, FloatArray | None, FloatArray | None, FloatArray | None, FloatArray | None
]


def merge_close(
    values: FloatArray,
    d: FloatArray,
    two_theta: FloatArray | None,
    strength: FloatArray | None,
    esd: FloatArray | None,
    fwhm: FloatArray | None,
    remarks: list[str],
) -> _Columns:
    """Merge lines nearer than the resolution; the scale is degrees 2theta, or ln d without a wavelength."""
    scale = two_theta if two_theta is not None else -np.log(d)
    default = RESOLUTION_DEG if two_theta is not None else RESOLUTION_RELATIVE
    width = np.full(len(scale), np.nan) if fwhm is None else fwhm
    reach = np.fmin(width[:-1], width[1:])
    reach = np.where(np.isnan(reach), default, reach)
    if not (np.diff(scale) < reach).any():
        return values, d, two_theta, strength, esd, fwhm
    start = [0]
    for index in range(1, len(scale)):
        first = start[-1]
        limit = np.fmin(width[first], width[index])
        if scale[index] - scale[first] >= (default if np.isnan(limit) else limit):
            start.append(index)
    group = np.repeat(np.arange(len(start)), np.diff([*start, len(scale)]))
    weight = np.ones(len(scale)) if strength is None else strength
    total = np.bincount(group, weight).astype(np.float64)

    def mean(column: FloatArray) -> FloatArray:
        return np.bincount(group, weight * column) / total

    spread = mean((scale - mean(scale)[group]) ** 2)

    def widened(column: FloatArray | None, factor: float, power: int) -> FloatArray | None:
        """Combine widths of a group; a spread of positions widens the merged line."""
        if column is None:
            return None
        known = np.where(np.isnan(column), 0.0, column)
        share = weight if power == 1 else weight**2
        norm = total if power == 1 else total**2
        squared = np.bincount(group, share * known**2) / norm + factor * spread
        return np.where(np.bincount(group, np.isnan(column)) > 0, np.nan, np.sqrt(squared))

    merged = [index for index, size in enumerate(np.bincount(group)) if size > 1]
    centre = mean(values)
    named = ", ".join(f"{centre[index]:.4f}" for index in merged[:5])
    named += ", ..." if len(merged) > 5 else ""
    remarks.append(
        f"lines nearer to each other than the list's resolution were merged "
        f"({len(scale)} lines became {len(start)}): at {named}"
    )
    merged_d = mean(d)
    return (
        centre,
        merged_d,
        None if two_theta is None else mean(two_theta),
        None if strength is None else total,
        widened(esd, 1.0, 2),
        widened(fwhm, 8.0 * np.log(2.0), 1),
    )
