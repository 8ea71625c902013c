"""The lines that candidate phases would show on a scoring axis, as padded columns.

A candidate is a listed phase, or an unlisted one of some lattice type, place on the ln a axis and line
pattern.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Final

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.lattice import LatticeType, allowed_n, multiplicity
from phasedb.identify.axis import KIND_ALPHA2, KIND_BETA, KIND_TUNGSTEN, Axis

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

MOST_LINES_OF_A_PHASE: Final = 64
WEAKEST_LINE: Final = 4e-4  # of the strongest in range: below any measured list's floor
GHOST_PARENT: Final = {KIND_ALPHA2: 0.04, KIND_BETA: 0.05, KIND_TUNGSTEN: 0.1}  # least height of a parent
EDGE_REACH: Final = 0.03  # ln a: how far a candidate may move; lines that could enter the range are kept


@dataclass(frozen=True, slots=True)
class LineTable:
    """Lines of many candidates, padded to a common length with lines that are never seen.

    Attributes
    ----------
    n : (n_candidates, n_lines) int64, N = h²+k²+l² (0 pads)
    half_ln_n : (n_candidates, n_lines), ½ ln N + ln(wavelength ratio); ascending (+inf pads)
    ln_height : (n_candidates, n_lines), ln of the height relative to the strongest line in range (-inf pads)
    frequency : (n_candidates, n_lines), 1 for a line (0 pads)
    kind : (n_candidates, n_lines) int8
    """

    n: IntArray
    half_ln_n: FloatArray
    ln_height: FloatArray
    frequency: FloatArray
    kind: NDArray[np.int8]

    def take(self, rows: IntArray) -> LineTable:
        """Return the lines of some candidates."""
        return LineTable(
            self.n[rows],
            self.half_ln_n[rows],
            self.ln_height[rows],
            self.frequency[rows],
            self.kind[rows],
        )


def stack(tables: list[LineTable]) -> LineTable:
    """Return several tables as one, padded to the longest."""
    width = max(table.n.shape[1] for table in tables)

    def column(values: list[NDArray[Any]], pad: float) -> NDArray[Any]:
        return np.concatenate(
            [np.pad(value, ((0, 0), (0, width - value.shape[1])), constant_values=pad) for value in values]
        )

    return LineTable(
        n=column([t.n for t in tables], 0),
        half_ln_n=column([t.half_ln_n for t in tables], np.inf),
        ln_height=column([t.ln_height for t in tables], -np.inf),
        frequency=column([t.frequency for t in tables], 0.0),
        kind=column([t.kind for t in tables], 0),
    )


def polarisation_factor(axis: Axis, x_true: FloatArray) -> FloatArray:
    """Return the Lorentz-polarisation factor (1 + cos² 2theta)/(sin² theta cos theta); 1 for rings.

    References
    ----------
    International Tables for Crystallography Vol. C (2006), section 6.2 (no monochromator, randomly oriented
    powder).
    """
    if axis.is_angle:
        theta = np.radians(np.clip(x_true, 1.0, 178.0)) / 2.0
    elif axis.likely_wavelength is not None:
        sine = axis.likely_wavelength / 2.0 * np.exp(np.clip(x_true, -5.0, 5.0))
        theta = np.arcsin(np.clip(sine, 0.01, 0.999))
    else:
        return np.ones_like(x_true)
    return np.asarray((1.0 + np.cos(2.0 * theta) ** 2) / (np.sin(theta) ** 2 * np.cos(theta)))


def generic_strengths(lattice: LatticeType, n_max: int) -> tuple[IntArray, FloatArray]:
    """Return N and strengths of a phase of which only the lattice type is known.

    Multiplicity times a fall with N like that of an atom's scattering power squared.
    """
    n = allowed_n(lattice, n_max)
    counts = np.array([multiplicity(lattice, int(value)) for value in n], dtype=np.float64)
    return n, counts * np.exp(-0.06 * n)


def make_lines(
    axis: Axis,
    ln_a: FloatArray,
    patterns: list[tuple[NDArray[np.integer], FloatArray]],
    *,
    with_ghosts: bool = True,
) -> LineTable:
    """Return the lines of candidates at `ln_a` with (N, strength) `patterns`, those that the range can show.

    Strength is multiplicity times |F|² without Lorentz-polarisation, which is put on here.
    """
    count = len(patterns)
    lengths = np.array([len(pattern[0]) for pattern in patterns])
    longest = int(lengths.max(initial=1))
    filled: NDArray[np.bool_] = np.arange(longest)[None, :] < lengths[:, None]
    n = np.zeros((count, longest), dtype=np.int64)
    strength = np.zeros((count, longest))
    if count:
        n[filled] = np.concatenate([pattern[0] for pattern in patterns])
        strength[filled] = np.concatenate([pattern[1] for pattern in patterns])
    with np.errstate(divide="ignore"):
        half = np.where(n > 0, 0.5 * np.log(np.maximum(n, 1)), np.inf)
    x = axis.positions(half, ln_a[:, None])
    slope = np.abs(axis.slope(np.nan_to_num(x, nan=179.0)))
    margin = EDGE_REACH * slope + axis.resolution
    visible = filled & (x > axis.low - margin) & (x < axis.high + margin)
    inside = filled & (x >= axis.low) & (x <= axis.high)
    height = np.where(visible, strength * polarisation_factor(axis, np.nan_to_num(x, nan=90.0)), 0.0)
    strongest = np.where(inside, height, 0.0).max(axis=1, keepdims=True)
    strongest = np.where(strongest > 0, strongest, height.max(axis=1, keepdims=True))
    height = height / np.where(strongest > 0, strongest, 1.0)
    x, height, half, n = _merge_own(axis, x, height, half, n)
    keep = min(MOST_LINES_OF_A_PHASE, longest)
    if longest > keep:
        chosen = np.sort(np.argpartition(-height, keep - 1, axis=1)[:, :keep], axis=1)
        height, half = (np.take_along_axis(column, chosen, axis=1) for column in (height, half))
        n = np.take_along_axis(n, chosen, axis=1)
    gone = height < WEAKEST_LINE
    height = np.where(gone, 0.0, height)
    half = np.where(gone, np.inf, half)
    kind = np.zeros(height.shape, dtype=np.int8)
    frequency = np.where(gone, 0.0, 1.0)
    table = _sorted_table(n, half, height, frequency, kind)
    if with_ghosts and axis.ghosts:
        table = _with_ghosts(axis, table)
    used = int(np.isfinite(table.half_ln_n).sum(axis=1).max(initial=1))
    return LineTable(
        table.n[:, :used],
        table.half_ln_n[:, :used],
        table.ln_height[:, :used],
        table.frequency[:, :used],
        table.kind[:, :used],
    )


def _merge_own(
    axis: Axis, x: FloatArray, height: FloatArray, half: FloatArray, n: IntArray
) -> tuple[FloatArray, FloatArray, FloatArray, IntArray]:
    """Merge lines of one phase that are closer than the resolution into the stronger of the two."""
    merged = height.copy()
    centre = half.copy()
    for column in range(1, x.shape[1]):
        with np.errstate(invalid="ignore"):
            close = (x[:, column] - x[:, column - 1] < axis.resolution) & (merged[:, column] > 0)
        close &= merged[:, column - 1] > 0
        if not close.any():
            continue
        first, second = merged[close, column - 1], merged[close, column]
        total = first + second
        centre[close, column] = (first * centre[close, column - 1] + second * centre[close, column]) / total
        merged[close, column] = total
        merged[close, column - 1] = 0.0
        n[close, column] = np.where(first > second, n[close, column - 1], n[close, column])
    return x, merged, centre, n


def _sorted_table(
    n: IntArray, half: FloatArray, height: FloatArray, frequency: FloatArray, kind: NDArray[np.int8]
) -> LineTable:
    order = np.argsort(half, axis=1, kind="stable")
    with np.errstate(divide="ignore"):
        ln_height = np.log(height)

    def ordered(column: NDArray[Any]) -> NDArray[Any]:
        return np.take_along_axis(column, order, axis=1)

    return LineTable(ordered(n), ordered(half), ordered(ln_height), ordered(frequency), ordered(kind))


def _with_ghosts(axis: Axis, table: LineTable) -> LineTable:
    height = np.exp(table.ln_height)
    n, half, heights = [table.n], [table.half_ln_n], [height]
    frequency, kind = [table.frequency], [table.kind]
    for ghost in axis.ghosts:
        parent = height >= GHOST_PARENT[ghost.kind]
        n.append(table.n)
        half.append(np.where(parent, table.half_ln_n + np.log(ghost.wavelength_ratio), np.inf))
        heights.append(np.where(parent, height * ghost.height, 0.0))
        frequency.append(np.where(parent, 1.0, 0.0))
        kind.append(np.full(height.shape, ghost.kind, dtype=np.int8))
    return _sorted_table(
        np.concatenate(n, axis=1),
        np.concatenate(half, axis=1),
        np.concatenate(heights, axis=1),
        np.concatenate(frequency, axis=1),
        np.concatenate(kind, axis=1),
    )
