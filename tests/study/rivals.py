"""The usual practice, for comparison: four textbook ways to rank phases and to decide how many are there.

All use the stored lattice constants, the positions as measured and a fixed tolerance, without a shared
shift, a drift or a probability. They stand for common practice and for the published figure of merit, not
for a program.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from phasedb.crystal.lattice import LATTICE_TYPES, allowed_n
from phasedb.crystal.phases import PhaseTable
from phasedb.crystal.radiation import radiation_from_name
from phasedb.measured.peaklist import PeakList
from study.physics import two_theta
from study.truth import FloatArray

TOLERANCE_DEG = 0.1
"""Fixed tolerance in 2theta (common practice, no source)."""

STRONG = 0.05
"""Lines weaker than this part of the strongest are not asked for (common practice, no source)."""

MOST_PHASES = 4


@dataclass(frozen=True, slots=True)
class Answer:
    """A ranking of entries, and those that the practice would report."""

    ranking: tuple[str, ...]
    claimed: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class _Entry:
    """Agreement of one entry: for each expected line the nearest measured one, or -1."""

    name: str
    expected: FloatArray
    weight: FloatArray
    hit: np.ndarray
    deviation: FloatArray
    n_possible: int

    @property
    def matched(self) -> np.ndarray:
        return np.unique(self.hit[self.hit >= 0])

    @property
    def fraction(self) -> float:
        return float(self.weight[self.hit >= 0].sum() / self.weight.sum()) if len(self.weight) else 0.0


def _agreement(peaks: PeakList, table: PhaseTable) -> tuple[list[_Entry], FloatArray]:
    wavelength = (peaks.radiation or radiation_from_name("Cu")).wavelength_angstrom
    angle = two_theta(peaks.d_angstrom, wavelength)
    span = 0.02 * (angle.max() - angle.min()) + 0.2
    low, high = angle.min() - span, angle.max() + span
    entries = []
    for row, name in enumerate(table.name):
        a = float(table.a_angstrom[row])
        top = int((2.0 * a / wavelength) ** 2)
        part = slice(int(table.line_start[row]), int(table.line_start[row + 1]))
        n = table.line_n[part]
        strength = table.line_strength[part]
        if not len(n):
            n = allowed_n(LATTICE_TYPES[int(table.lattice[row])], max(top, 1))
            strength = np.ones(len(n))
        lines = two_theta(a / np.sqrt(n), wavelength)
        inside = np.isfinite(lines) & (lines > low) & (lines < high)
        lines, strength = (
            lines[inside],
            strength[inside] / np.maximum(np.sin(np.radians(lines[inside]) / 2), 0.05) ** 2,
        )
        if not len(lines):
            continue
        keep = strength >= STRONG * strength.max()
        lines, strength = lines[keep], strength[keep]
        gap = np.abs(lines[:, None] - angle[None, :])
        nearest = np.argmin(gap, axis=1)
        deviation = gap[np.arange(len(lines)), nearest]
        hit = np.where(deviation < TOLERANCE_DEG, nearest, -1)
        last = lines[hit >= 0].max() if (hit >= 0).any() else lines[0]
        entries.append(_Entry(name, lines, strength, hit, deviation, int(np.count_nonzero(lines <= last))))
    return entries, angle


def line_counting(peaks: PeakList, table: PhaseTable) -> Answer:
    """Rank by the number of measured lines inside the tolerance; report while new lines are explained."""
    entries, _ = _agreement(peaks, table)
    return _report(sorted(entries, key=lambda one: (-len(one.matched), one.name)))


def merit_f(peaks: PeakList, table: PhaseTable) -> Answer:
    """Rank by F_N of the lines inside the tolerance (Smith & Snyder 1979)."""
    entries, _ = _agreement(peaks, table)

    def merit(one: _Entry) -> float:
        hit = one.hit >= 0
        if np.count_nonzero(hit) < 3:
            return 0.0
        return len(one.matched) / (max(float(one.deviation[hit].mean()), 0.002) * one.n_possible)

    return _report(sorted(entries, key=lambda one: (-merit(one), one.name)))


def matched_fraction(peaks: PeakList, table: PhaseTable) -> Answer:
    """Rank by (strength found / strength expected) times the share of measured lines explained."""
    entries, angle = _agreement(peaks, table)
    return _report(sorted(entries, key=lambda one: (-one.fraction * len(one.matched) / len(angle), one.name)))


def greedy_residual(peaks: PeakList, table: PhaseTable) -> Answer:
    """Take the best entry by matched fraction, strike its lines, and go on with what is left."""
    entries, angle = _agreement(peaks, table)
    left = np.ones(len(angle), dtype=bool)
    claimed: list[_Entry] = []

    def value(one: _Entry) -> float:
        fresh = one.matched[left[one.matched]] if len(one.matched) else one.matched
        return one.fraction * len(fresh) / len(angle)

    rest = list(entries)
    while rest and len(claimed) < MOST_PHASES:
        best = max(rest, key=lambda one: (value(one), one.name))
        fresh = int(np.count_nonzero(left[best.matched])) if len(best.matched) else 0
        if fresh < 3 or best.fraction < 0.6:
            break
        claimed.append(best)
        left[best.matched] = False
        rest.remove(best)
    order = [one.name for one in claimed]
    order += [one.name for one in sorted(rest, key=lambda one: (-value(one), one.name))]
    return Answer(tuple(order), tuple(one.name for one in claimed))


def _report(ranked: list[_Entry]) -> Answer:
    seen: set[int] = set()
    claimed = []
    for one in ranked[:10]:
        fresh = set(one.matched.tolist()) - seen
        if len(fresh) >= 3 and one.fraction >= 0.6 and len(claimed) < MOST_PHASES:
            claimed.append(one.name)
            seen |= fresh
    return Answer(tuple(one.name for one in ranked), tuple(claimed))


RIVALS: dict[str, Callable[[PeakList, PhaseTable], Answer]] = {
    "line counting": line_counting,
    "F_N ranking": merit_f,
    "matched fraction": matched_fraction,
    "greedy residual": greedy_residual,
}
