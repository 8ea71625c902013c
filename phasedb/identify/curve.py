"""Votes on the ln a axis: where a cubic phase of each lattice type would explain measured lines.

For a cubic phase ln d = ln a - ½ ln N, so every measured line votes, for each allowed N, at
ln a = ln d + ½ ln N. The votes are one curve for each lattice type, whatever the library holds.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.lattice import LATTICE_TYPES, allowed_n, check_lattice_type
from phasedb.identify.axis import Axis
from phasedb.identify.zones import FIRST_CHANCE, ZONES, zone_n

FloatArray = NDArray[np.float64]

A_SMALLEST: Final = 2.3
A_LARGEST: Final = 17.0
MOST_LINES_VOTING: Final = 120  # the strongest ones of a longer list
LEAST_VOTE: Final = 0.02
STAMP_HALF_WIDTH: Final = 3.2  # standard deviations

# Chance that the line of rank r of an unknown phase is seen: high for the first lines, lower as the cell
# grows large (tuned, with the structure types of the starter library in view).
_RANK_P: Final = {
    "P": (0.62, 14.0),
    "I": (0.68, 10.0),
    "F": (0.66, 9.0),
    "square": FIRST_CHANCE,
    "hexagonal": FIRST_CHANCE,
}
_SEQUENCES: Final = (*LATTICE_TYPES, *ZONES)


@dataclass(frozen=True, slots=True)
class Cell:
    """One assumption about the list's shift and noise under which the curve is computed."""

    phi: tuple[float, float, float]
    sigma: float
    ln_prior: float


@dataclass(frozen=True, slots=True)
class Curve:
    """Log evidence against background on an even ln a grid.

    Rows of `values` (5, n_grid): the lattice types as in LATTICE_TYPES, then the zones as in ZONES.
    """

    cell: Cell
    start: float
    step: float
    values: FloatArray

    def at(self, lattice: NDArray[np.integer], ln_a: FloatArray) -> FloatArray:
        """Return the curve at places (nearest grid point; -inf outside); arguments broadcast."""
        index = np.rint((ln_a - self.start) / self.step).astype(np.int64)
        size = self.values.shape[1]
        inside = (index >= 0) & (index < size)
        found = self.values[lattice, np.clip(index, 0, size - 1)]
        return np.where(inside, found, -np.inf)


@lru_cache(maxsize=8)
def _rank_chance(lattice: str, count: int) -> FloatArray:
    first, decay = _RANK_P[lattice]
    return first * np.exp(-np.arange(count) / decay) + 0.04


def _line_numbers(sequence: str, n_max: int) -> NDArray[np.int64]:
    if sequence in ZONES:
        return zone_n(sequence, n_max)
    return allowed_n(check_lattice_type(sequence), n_max)


def vote(axis: Axis, cell: Cell, base: FloatArray, explained: FloatArray) -> Curve:
    """Return the curve under one cell.

    Parameters
    ----------
    base : (n,) density of each observed line under what is already in the set (background included)
    explained : (n,) part of each line that phases of the set already claim, 0 to 1
    """
    use = np.arange(len(axis.x))
    if len(use) > MOST_LINES_VOTING:
        weight = axis.ln_intensity if axis.ln_intensity is not None else -np.abs(axis.x - axis.x.mean())
        use = np.sort(np.argsort(-(weight - 50.0 * explained), kind="stable")[:MOST_LINES_VOTING])
    phi = np.array(cell.phi)
    x = axis.x[use] - axis.shift(np.clip(axis.x[use], 0.2, 179.8) if axis.is_angle else axis.x[use], phi)
    if axis.is_angle:
        x = np.clip(x, 0.2, 179.8)
    ln_d = axis.ln_d(x)
    sigma = np.hypot(cell.sigma * axis.noise_profile[use], axis.extra_noise[use])
    slope = np.abs(axis.slope(x))
    step = max(2e-4, float(np.median(sigma / slope)) * 0.5)
    start = np.log(A_SMALLEST)
    count = int((np.log(A_LARGEST) - start) / step) + 1
    width = np.maximum(sigma / slope, 0.6 * step)
    gain = np.maximum(
        1.0 / (sigma * np.sqrt(2.0 * np.pi) * base[use]) * (sigma / slope) / width, explained[use]
    )
    reach = int(np.ceil(STAMP_HALF_WIDTH * float(width.max()) / step))
    offset = np.arange(-reach, reach + 1)
    # one stamp for each line: to half a step, which the width outweighs, every N lands on a grid point
    stamp = np.exp(-0.5 * (offset * step / width[:, None]) ** 2)
    values = np.empty((len(_SEQUENCES), count))
    grid = start + step * np.arange(count)
    for row, sequence in enumerate(_SEQUENCES):
        n_top = int(np.exp(2.0 * (np.log(A_LARGEST) - ln_d.min()))) + 1
        n = _line_numbers(sequence, min(n_top, 1500))
        chance = _rank_chance(sequence, len(n))
        odds = chance / (1.0 - chance)
        half = 0.5 * np.log(n)
        centre = ln_d[:, None] + half
        middle = np.rint((centre - start) / step).astype(np.int64)
        line, rank = np.nonzero((middle >= 0) & (middle < count))
        strength = odds[rank] * gain[line]
        index = middle[line, rank][:, None] + offset
        weight = strength[:, None] * stamp[line]
        ok = (weight > LEAST_VOTE) & (index >= 0) & (index < count)
        flat = (line[:, None] * count + index)[ok]
        votes = np.bincount(flat, weights=weight[ok], minlength=len(use) * count).reshape(len(use), count)
        total = np.zeros(count)
        for block in range(0, len(use), 40):  # products of up to 40 terms stay finite
            total += np.log(np.prod(1.0 + np.minimum(votes[block : block + 40], 1e7), axis=0))
        lowest = axis.ln_d(np.array([max(axis.low, 1e-3) if axis.is_angle else axis.low]))[0]
        highest = axis.ln_d(np.array([axis.high]))[0]
        missed = np.concatenate([[0.0], np.cumsum(np.log1p(-chance))])
        first = np.searchsorted(half, grid - lowest)
        last = np.searchsorted(half, grid - highest)
        values[row] = total + missed[last] - missed[first]
    return Curve(cell, float(start), step, values)


def peaks_of(
    curves: list[Curve], lattice: int, *, most: int, separation: float
) -> list[tuple[float, float, Cell]]:
    """Return the highest places of a lattice type over several curves: (score, ln a, cell), best first."""
    found: list[tuple[float, float, Cell]] = []
    for curve in curves:
        values = curve.values[lattice] + curve.cell.ln_prior
        inner = (values[1:-1] >= values[:-2]) & (values[1:-1] > values[2:])
        places = np.flatnonzero(inner) + 1
        top = places[np.argsort(-values[places], kind="stable")[: 4 * most]]
        found += [(float(values[i]), curve.start + curve.step * int(i), curve.cell) for i in top]
    found.sort(key=lambda item: (-item[0], item[1]))
    chosen: list[tuple[float, float, Cell]] = []
    for item in found:
        if all(abs(item[1] - other[1]) > separation for other in chosen):
            chosen.append(item)
        if len(chosen) == most:
            break
    return chosen
