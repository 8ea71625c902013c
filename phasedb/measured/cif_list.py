"""Peak lists in CIF: `_pd_peak_*` items of the powder dictionary."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any, Final

from phasedb.errors import InputError
from phasedb.measured.cif_items import blocks_of, facts_of, numbers, single
from phasedb.measured.peaklist import PositionUnit
from phasedb.measured.raw import RawLines

_POSITIONS: Final[tuple[tuple[PositionUnit, str], ...]] = (
    ("two-theta", "2theta_centroid"),
    ("two-theta", "2theta_maximum"),
    ("d", "d_spacing"),
)


def read_cif_list(text: str, source: str, *, unit: PositionUnit | None) -> RawLines:
    """Return the lines in the first data block that lists peaks.

    Raises
    ------
    InputError
        If no block does, or a value is not a number.
    """
    for block in blocks_of(text, source):
        for item_unit, item in _POSITIONS:
            found = numbers(block, source, f"_pd_peak_{item}", f"_pd_peak.{item}")
            if found is not None and unit in (None, item_unit):
                return _lines_of(block, source, item_unit, item, found)
    raise InputError(
        "no data block lists peaks (_pd_peak_2theta_centroid, _pd_peak_2theta_maximum or _pd_peak_d_spacing)",
        where=source,
        hint="a measured profile is read with: phasedb peaks FILE",
    )


def _lines_of(
    block: Any,
    source: str,
    unit: PositionUnit,
    item: str,
    found: tuple[list[float], list[float]],
) -> RawLines:
    position, esd = found
    stated = numbers(block, source, f"_pd_peak_{item}_su", f"_pd_peak.{item}_su")
    if stated is not None:
        esd = stated[0]
    intensity = numbers(block, source, "_pd_peak_intensity", "_pd_peak.intensity")
    width = numbers(block, source, "_pd_peak_width_2theta", "_pd_peak.width_2theta")
    place = f"{source}, block {block.name}, _pd_peak_{item}"
    return RawLines(
        position=position,
        unit=unit,
        intensity=intensity[0] if intensity else None,
        esd=None if all(math.isnan(value) for value in esd) else esd,
        fwhm=width[0] if width else None,
        fwhm_in_deg=True,
        places=[f"{place}, row {row}" for row in range(1, len(position) + 1)],
        facts=replace(facts_of(block, source), measured_range=_range_of(block, source, unit)),
    )


def _range_of(block: Any, source: str, unit: PositionUnit) -> tuple[float, float] | None:
    if unit != "two-theta":
        return None
    ends = [
        single(block, source, f"_pd_{step}_2theta_range_{end}", f"_pd_{step}.2theta_range_{end}")
        for step in ("meas", "proc")
        for end in ("min", "max")
    ]
    for low, high in (ends[:2], ends[2:]):
        if low is not None and high is not None:
            return low, high
    return None
