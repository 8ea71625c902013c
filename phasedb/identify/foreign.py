"""Lines of a holder or a known non-cubic companion: claimed first, and shown so."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.identify.result import Claim
from phasedb.measured.peaklist import PeakList

FloatArray = NDArray[np.float64]

FOREIGN_REACH_DEG: Final = 0.10  # about the shift that a holder's lines may have (common practice, no source)
FOREIGN_REACH_RELATIVE: Final = 2e-3


@dataclass(frozen=True, slots=True)
class ForeignLines:
    """Which lines of a list are foreign (`taken`), which are left (`kept`), by index, and where they lie."""

    kept: NDArray[np.int64]
    taken: NDArray[np.int64]
    distance: FloatArray  # of each line of the list to the nearest foreign one: degrees, or relative
    in_degrees: bool
    blocked: tuple[tuple[float, float], ...]

    def claim(self, number: int) -> Claim:
        """Return the claim of the foreign line on a line of the list."""
        value = float(self.distance[number])
        return Claim(
            name="foreign",
            hkl=(),
            kind="foreign",
            delta_two_theta_deg=value if self.in_degrees else None,
            delta_relative=0.0 if self.in_degrees else value,
            probability=1.0,
        )


def set_aside(peaks: PeakList, x: FloatArray, foreign_x: FloatArray | None, is_angle: bool) -> ForeignLines:
    """Return which lines are foreign: each foreign line takes the nearest line within reach.

    Parameters
    ----------
    x, foreign_x : positions on the scoring coordinate
    """
    reach = FOREIGN_REACH_DEG if is_angle else FOREIGN_REACH_RELATIVE
    everything = np.arange(len(peaks))
    if foreign_x is None or len(foreign_x) == 0:
        none = np.array([], dtype=np.int64)
        return ForeignLines(everything, none, np.zeros(len(peaks)), is_angle, ())
    gap = x[:, None] - foreign_x[None, :]
    nearest = np.abs(gap).argmin(axis=0)
    taken = {int(line) for column, line in enumerate(nearest) if abs(gap[line, column]) <= reach}
    chosen = np.array(sorted(taken), dtype=np.int64)
    distance = gap[everything, np.abs(gap).argmin(axis=1)]
    width = reach if peaks.fwhm is None else max(reach, float(np.nanmedian(peaks.fwhm)))
    blocked = tuple((float(place - width), float(place + width)) for place in foreign_x)
    return ForeignLines(np.setdiff1d(everything, chosen), chosen, distance, is_angle, blocked)


def keep_lines(peaks: PeakList, kept: NDArray[np.int64]) -> PeakList:
    """Return a list of some of the lines, with the same range."""

    def part(column: FloatArray | None) -> FloatArray | None:
        return None if column is None else column[kept]

    return replace(
        peaks,
        position=peaks.position[kept],
        d_angstrom=peaks.d_angstrom[kept],
        two_theta_deg=part(peaks.two_theta_deg),
        intensity=part(peaks.intensity),
        esd=part(peaks.esd),
        fwhm=part(peaks.fwhm),
    )
