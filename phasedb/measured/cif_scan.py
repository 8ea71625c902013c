"""Scans in CIF: `_pd_meas_*` and `_pd_proc_*` items of the powder dictionary."""

from __future__ import annotations

import math
from typing import Any, Final

import numpy as np

from phasedb.errors import InputError
from phasedb.measured.cif_items import blocks_of, facts_of, numbers, single
from phasedb.measured.scan import RawScan

_COUNTS: Final = (
    ("meas", "counts_total"),
    ("meas", "intensity_total"),
    ("proc", "intensity_total"),
    ("proc", "intensity_net"),
)
_ANGLES: Final = {"meas": ("2theta_scan",), "proc": ("2theta_corrected",)}


def read_cif_scan(text: str, source: str) -> RawScan:
    """Return the first profile in a CIF.

    Raises
    ------
    InputError
        If no block holds one, or its columns differ in length.
    """
    for block in blocks_of(text, source):
        for step, item in _COUNTS:
            found = numbers(block, source, f"_pd_{step}_{item}", f"_pd_{step}.{item}")
            if found is not None and len(found[0]) > 1:
                return _profile(block, source, step, item, found)
    raise InputError(
        "no data block holds a profile (_pd_meas_counts_total, _pd_meas_intensity_total, "
        "_pd_proc_intensity_total or _pd_proc_intensity_net)",
        where=source,
        hint="a list of peaks is read by: phasedb match FILE",
    )


def _profile(
    block: Any, source: str, step: str, item: str, found: tuple[list[float], list[float]]
) -> RawScan:
    counts, esd = (np.array(column) for column in found)
    angle = _angles(block, source, step, len(counts))
    keep = np.isfinite(counts) & np.isfinite(angle)
    notes = []
    if not keep.all():
        notes.append(f"{int((~keep).sum())} points have no value and were left out")
    stated = np.isfinite(esd[keep]).all() and item != "counts_total"
    return RawScan(
        angle[keep], counts[keep], esd[keep] if stated else None, facts_of(block, source), tuple(notes)
    )


def _angles(block: Any, source: str, step: str, count: int) -> np.ndarray:
    others = [name for name in ("meas", "proc") if name != step]
    for kind in (step, *others):
        for item in _ANGLES[kind]:
            found = numbers(block, source, f"_pd_{kind}_{item}", f"_pd_{kind}.{item}")
            if found is not None:
                if len(found[0]) != count:
                    raise InputError(
                        f"{len(found[0])} angles and {count} counts", where=f"{source}, block {block.name}"
                    )
                return np.array(found[0])
        low, step_size, high = (
            single(block, source, f"_pd_{kind}_2theta_range_{end}", f"_pd_{kind}.2theta_range_{end}")
            for end in ("min", "inc", "max")
        )
        if low is not None and (step_size is not None or high is not None):
            if step_size is None and high is not None:
                step_size = (high - low) / (count - 1)
            return low + np.arange(count) * (step_size if step_size is not None else math.nan)
    raise InputError(
        "the profile has no angles (_pd_meas_2theta_scan, _pd_proc_2theta_corrected or a range)",
        where=f"{source}, block {block.name}",
    )
