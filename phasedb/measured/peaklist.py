"""A measured list of lines: what every reader gives and the matcher takes."""

from __future__ import annotations

from dataclasses import dataclass, fields
from pathlib import Path
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.radiation import Radiation

PositionUnit = Literal["two-theta", "d", "q", "ring"]
FloatArray = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class PeakList:
    """Measured lines in ascending 2theta (descending d), lines closer than the resolution already merged.

    Attributes
    ----------
    position : (n_lines,) float64
        As measured, in `unit`: degrees, Å, 1/Å or mm.
    unit : str
        ``two-theta``, ``d``, ``q`` or ``ring``.
    d_angstrom : (n_lines,) float64, Å, from `position` as measured (no shift correction).
    two_theta_deg : (n_lines,) float64 or None
        Degrees, from `d_angstrom` and the wavelength; None without a wavelength and for electrons, whose
        common error is one of scale: they are scored on ln d.
    intensity : (n_lines,) float64 or None; any scale, above 0
    esd, fwhm : (n_lines,) float64 or None
        Standard uncertainty and full width of the positions, in degrees where `two_theta_deg` is given, else
        relative (in ln d); NaN where a line has none.
    radiation : Radiation or None
    range_low, range_high : float
        Measured range in `unit` (low < high).
    range_assumed : bool
    goniometer_radius_mm, temperature_k : float or None
    source : str
        File name or other origin.
    sha256 : str
        Of the bytes read; empty if there was no file.
    sample : str
    ring_scale_approximate : bool
        True when d came from a camera constant (small-angle form).
    camera_length_mm : float or None
    scale_esd_relative : float or None
        Relative standard uncertainty of a calibrated camera constant, shared by all lines.
    notes : tuple of str
        Cautions that reading gave rise to, for the user.
    """

    position: FloatArray
    unit: PositionUnit
    d_angstrom: FloatArray
    two_theta_deg: FloatArray | None
    intensity: FloatArray | None
    esd: FloatArray | None
    fwhm: FloatArray | None
    radiation: Radiation | None
    range_low: float
    range_high: float
    range_assumed: bool
    goniometer_radius_mm: float | None = None
    temperature_k: float | None = None
    source: str = ""
    sha256: str = ""
    sample: str = ""
    ring_scale_approximate: bool = False
    camera_length_mm: float | None = None
    scale_esd_relative: float | None = None
    notes: tuple[str, ...] = ()

    def __post_init__(self) -> None:
        for column in fields(self):
            value = getattr(self, column.name)
            if isinstance(value, np.ndarray):
                value.flags.writeable = False

    def __len__(self) -> int:
        return len(self.position)

    @classmethod
    def read(cls, path: str | Path, **options: Any) -> PeakList:
        """Return the peak list in a file; `options` are the fields of `phasedb.measured.options.ReadOptions`.

        Raises
        ------
        InputError
            As `phasedb.measured.reading.read_peak_list`.
        """
        from phasedb.measured.options import ReadOptions
        from phasedb.measured.reading import read_peak_list

        return read_peak_list(path, ReadOptions(**options))
