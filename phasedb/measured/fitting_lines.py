"""The lines of a scan while they are being fitted, and which of them overlap."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.measured.line_fit import GroupFit, model_of
from phasedb.measured.peaklist import FloatArray
from phasedb.measured.profile import Doublet, moved_by_ratio

TAIL_WIDTHS: Final = 4.0
"""So many widths beside a line belong to its fit."""
MOST_IN_GROUP: Final = 12


@dataclass(slots=True)
class FittingLines:
    """Arrays of one length, ascending in `centre`; degrees, counts times degrees, shares.

    `ratio` is K-alpha2 over K-alpha1, `chi2` that of the group a line was fitted in (NaN before a fit).
    """

    centre: FloatArray
    area: FloatArray
    fwhm: FloatArray
    mixing: FloatArray
    ratio: FloatArray
    centre_esd: FloatArray
    area_esd: FloatArray
    fwhm_esd: FloatArray
    chi2: FloatArray

    @classmethod
    def started(
        cls, centre: FloatArray, area: FloatArray, fwhm: FloatArray, *, mixing: float
    ) -> FittingLines:
        """Return lines that were not fitted yet."""
        count = len(centre)
        blank = [np.full(count, np.nan) for _ in range(4)]
        return cls(centre, area, fwhm, np.full(count, mixing), np.full(count, 0.5), *blank)

    def __len__(self) -> int:
        return len(self.centre)

    def taken(self, keep: NDArray[np.bool_] | NDArray[np.intp]) -> FittingLines:
        """Return the lines that a mask or an index array picks."""
        return FittingLines(*(getattr(self, name)[keep] for name in self.__dataclass_fields__))

    def joined(self, other: FittingLines) -> FittingLines:
        """Return these and the other lines, ascending."""
        names = self.__dataclass_fields__
        both = FittingLines(*(np.concatenate([getattr(self, name), getattr(other, name)]) for name in names))
        return both.taken(np.argsort(both.centre, kind="stable"))

    def store(self, index: NDArray[np.int64], fit: GroupFit) -> None:
        """Take over a group's fit; esds are widened where the shapes do not fit."""
        misfit = float(np.sqrt(max(fit.chi2_reduced, 1.0)))
        self.centre[index], self.area[index] = fit.centre, fit.area
        self.fwhm[index], self.mixing[index] = fit.fwhm, fit.mixing
        self.centre_esd[index], self.area_esd[index] = misfit * fit.centre_esd, misfit * fit.area_esd
        self.fwhm_esd[index] = misfit * fit.fwhm_esd
        self.ratio[index], self.chi2[index] = fit.doublet_ratio, fit.chi2_reduced

    def model(self, x: FloatArray, doublet: Doublet | None) -> FloatArray:
        """Return the counts of all lines at ascending `x`."""
        return model_of(x, self.centre, self.area, self.fwhm, self.mixing, doublet, self.ratio)

    def alpha2(self, doublet: Doublet | None) -> FloatArray:
        """Return where each line ends: its K-alpha2, or itself without a doublet."""
        return self.centre if doublet is None else moved_by_ratio(self.centre, doublet.ratio_alpha2)[0]

    def span(self, doublet: Doublet | None) -> tuple[float, float]:
        """Return the 2theta interval that a fit of these lines needs."""
        low = self.centre[0] - TAIL_WIDTHS * self.fwhm[0]
        return float(low), float(self.alpha2(doublet)[-1] + TAIL_WIDTHS * self.fwhm[-1])

    def groups(self, doublet: Doublet | None) -> list[tuple[int, int]]:
        """Return the groups of overlapping lines as (first, end); long chains are cut at wide gaps."""
        gap = self.centre[1:] - self.alpha2(doublet)[:-1]
        apart = gap / (0.5 * (self.fwhm[1:] + self.fwhm[:-1]))
        borders = [0, *(np.flatnonzero(apart > 0.9 * TAIL_WIDTHS) + 1).tolist(), len(self)]
        found = []
        pending = list(pairwise(borders))
        while pending:
            first, end = pending.pop(0)
            if end - first <= MOST_IN_GROUP:
                found.append((first, end))
                continue
            cut = first + 3 + int(np.argmax(apart[first + 2 : end - 3]))
            pending = [(first, cut), (cut, end), *pending]
        return found

    def without_vanished(self, same_line: float) -> FittingLines:
        """Return the lines that have an area; those within `same_line` widths of each other become one."""
        lines = self.taken(np.argsort(self.centre, kind="stable"))
        lines = lines.taken(np.isfinite(lines.area_esd) & (lines.area > 0))
        index = 1
        while index < len(lines):
            pair = slice(index - 1, index + 1)
            width = 0.5 * float(lines.fwhm[pair].sum())
            if lines.centre[index] - lines.centre[index - 1] >= same_line * width:
                index += 1
                continue
            stronger = index - 1 + int(np.argmax(lines.area[pair]))
            lines.centre[stronger] = np.average(lines.centre[pair], weights=lines.area[pair])
            lines.area[stronger] = lines.area[pair].sum()
            keep = np.arange(len(lines)) != (index if stronger == index - 1 else index - 1)
            lines = lines.taken(keep)
            index = max(index - 1, 1)
        return lines
