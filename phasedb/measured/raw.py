"""Lines as they stand in a file, before they are checked: what each format's reader hands over."""

from __future__ import annotations

from dataclasses import dataclass, field

from phasedb.measured.options import ReadOptions
from phasedb.measured.peaklist import PositionUnit


@dataclass(frozen=True, slots=True)
class RawLines:
    """Columns of a list; NaN in an optional column where a line has no value.

    Attributes
    ----------
    position, intensity, esd, fwhm : list of float, or None for a column that is not there
    unit : str or None
        None when the file does not say.
    fwhm_in_deg : bool
    places : list of str, where each line was read
    facts : ReadOptions
    notes : tuple of str
    per_unit : float
        What turns positions, their esds and the range into `unit`: 0.5 for ring diameters.
    """

    position: list[float]
    unit: PositionUnit | None
    intensity: list[float] | None
    esd: list[float] | None
    fwhm: list[float] | None
    places: list[str]
    facts: ReadOptions
    fwhm_in_deg: bool = False
    notes: tuple[str, ...] = field(default=())
    per_unit: float = 1.0
