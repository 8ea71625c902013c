"""A measured scan: counts against 2theta, from text or CIF."""

from __future__ import annotations

import re
from dataclasses import dataclass, fields, replace
from itertools import pairwise
from pathlib import Path
from typing import Final

import numpy as np

from phasedb.crystal.radiation import Radiation
from phasedb.errors import InputError
from phasedb.measured.options import ReadOptions
from phasedb.measured.peaklist import FloatArray
from phasedb.measured.textfile import read_source

FEWEST_POINTS: Final = 30
"""Fewer points are no scan."""
GAP_STEPS: Final = 6.0
"""A step longer than this many usual ones is a gap: nothing was measured there."""
FLAT_TOP: Final = 4
"""So many equal highest counts in a row are a saturated detector."""


@dataclass(frozen=True, slots=True)
class RawScan:
    """Columns as they stand in a file, what the file says beside them, and remarks."""

    two_theta_deg: FloatArray
    counts: FloatArray
    esd: FloatArray | None
    facts: ReadOptions
    notes: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class Scan:
    """Counts against 2theta, ascending.

    Attributes
    ----------
    two_theta_deg, counts : (n_points,) float64, degrees and counts (or any intensity unit)
    esd : (n_points,) float64 or None
        Standard uncertainty of the counts, where the file gives it.
    usable : (n_points,) bool
        False where the detector was saturated.
    segments : tuple of (first, end) indices between gaps
    radiation, goniometer_radius_mm, temperature_k, source, sha256, sample, notes : as in `PeakList`
    """

    two_theta_deg: FloatArray
    counts: FloatArray
    esd: FloatArray | None
    usable: np.ndarray[tuple[int], np.dtype[np.bool_]]
    segments: tuple[tuple[int, int], ...]
    radiation: Radiation | None
    goniometer_radius_mm: float | None = None
    temperature_k: float | None = None
    source: str = ""
    sha256: str = ""
    sample: str = ""
    notes: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        for column in fields(self):
            value = getattr(self, column.name)
            if isinstance(value, np.ndarray):
                value.flags.writeable = False

    def __len__(self) -> int:
        return len(self.two_theta_deg)


def read_scan(path: str | Path, overrides: ReadOptions | None = None) -> Scan:
    """Return the scan in the file at `path` (``-`` is standard input): text of two or three columns, or CIF.

    Raises
    ------
    InputError
        With the place, for what is not a scan.
    """
    given = read_source(path)
    if re.match(r"(?:[^\S\n]*(?:#[^\n]*)?\n)*[^\S\n]*data_", given.text, re.IGNORECASE):
        from phasedb.measured.cif_scan import read_cif_scan

        raw = read_cif_scan(given.text, given.source)
    else:
        from phasedb.measured.text_scan import read_text_scan

        raw = read_text_scan(given.text, given.source)
    raw = replace(raw, notes=(*given.notes, *raw.notes))
    return build_scan(raw, overrides or ReadOptions(), source=given.source, sha256=given.sha256)


def build_scan(raw: RawScan, overrides: ReadOptions, *, source: str = "", sha256: str = "") -> Scan:
    """Return a checked scan: sorted, doubled angles averaged, cut to the range asked for, gaps found.

    Raises
    ------
    InputError
        For values that are not finite, angles outside 0 to 180 degrees, too few points, or no signal at all.
    """
    facts = overrides.over(raw.facts)
    notes = list(raw.notes)
    x, y, esd = _sorted(raw, notes, source)
    if facts.measured_range is not None:
        low, high = facts.measured_range
        keep = (x >= low) & (x <= high)
        x, y, esd = x[keep], y[keep], None if esd is None else esd[keep]
    if len(x) < FEWEST_POINTS:
        raise InputError(
            f"{len(x)} points: a scan needs at least {FEWEST_POINTS}",
            where=source,
            hint="a list of lines is matched directly: phasedb match PEAKS",
        )
    if np.ptp(y) == 0:
        raise InputError(
            f"all counts are {y[0]:g}: there is no signal", where=source, hint="check the export of the scan"
        )
    negative = int((y < 0).sum())
    if negative and esd is None:
        notes.append(
            f"{negative} counts are negative: this is no raw scan; its noise is judged from its scatter"
        )
    usable, saturated = _usable(x, y)
    if saturated:
        notes.append(
            f"saturated (equal highest counts in a row) at {', '.join(saturated)}: these points were left "
            "out, areas of such lines are uncertain"
        )
    segments = _segments(x)
    if len(segments) > 1:
        gaps = [f"{x[end - 1]:.2f} to {x[end]:.2f}" for _, end in segments[:-1]]
        notes.append(f"nothing was measured from {', '.join(gaps[:5])} degrees: lines there cannot be seen")
    return Scan(
        two_theta_deg=x,
        counts=y,
        esd=esd,
        usable=usable,
        segments=segments,
        radiation=facts.resolved_radiation(source),
        goniometer_radius_mm=facts.goniometer_radius_mm,
        temperature_k=facts.temperature_k,
        source=source,
        sha256=sha256,
        sample=facts.sample or "",
        notes=tuple(notes),
    )


def _sorted(raw: RawScan, notes: list[str], source: str) -> tuple[FloatArray, FloatArray, FloatArray | None]:
    x = np.array(raw.two_theta_deg, dtype=np.float64)
    y = np.array(raw.counts, dtype=np.float64)
    esd = None if raw.esd is None else np.array(raw.esd, dtype=np.float64)
    for name, column in (("2theta", x), ("counts", y), ("esd", esd)):
        if column is not None and not np.isfinite(column).all():
            row = int(np.flatnonzero(~np.isfinite(column))[0]) + 1
            raise InputError(f"{name} of point {row} is not a finite number", where=source)
    bad = np.flatnonzero((x <= 0) | (x >= 180))
    if len(bad):
        raise InputError(
            f"2theta {x[bad[0]]:g} of point {bad[0] + 1}: expected 0 to 180 degrees",
            where=source,
            hint="the first column of a scan is 2theta in degrees",
        )
    if esd is not None and (esd <= 0).any():
        count = int((esd <= 0).sum())
        typical = float(np.median(esd[esd > 0])) if (esd > 0).any() else 1.0
        esd = np.where(esd > 0, esd, typical)
        notes.append(f"{count} points have no standard uncertainty above 0: given that of a usual point")
    steps = np.diff(x)
    if (steps <= 0).any():
        order = np.argsort(x, kind="stable")
        if (steps < 0).all():
            notes.append("the scan runs downwards: turned round")
        else:
            notes.append(f"{int((steps <= 0).sum())} steps were out of order or doubled: sorted and averaged")
        x, first = np.unique(x[order], return_index=True)
        size = np.diff(np.append(first, len(order)))
        y = np.add.reduceat(y[order], first) / size
        if esd is not None:
            esd = np.sqrt(np.add.reduceat(esd[order] ** 2, first)) / size
    return x, y, esd


def _usable(x: FloatArray, y: FloatArray) -> tuple[np.ndarray[tuple[int], np.dtype[np.bool_]], list[str]]:
    """Return which points are below saturation, and where they are not."""
    usable = np.ones(len(y), dtype=np.bool_)
    top = float(y.max())
    if top < 10.0 * max(float(np.median(y)), 1e-300):
        return usable, []
    at_top = np.concatenate([[False], y == top, [False]])
    edge = np.flatnonzero(np.diff(at_top.astype(np.int8)))
    places = []
    for start, end in zip(edge[::2], edge[1::2], strict=True):
        if end - start >= FLAT_TOP:
            usable[start:end] = False
            places.append(f"{0.5 * (x[start] + x[end - 1]):.2f}")
    return usable, places


def _segments(x: FloatArray) -> tuple[tuple[int, int], ...]:
    steps = np.diff(x)
    breaks = np.flatnonzero(steps > GAP_STEPS * np.median(steps)) + 1
    ends = [0, *breaks.tolist(), len(x)]
    return tuple((int(a), int(b)) for a, b in pairwise(ends))
