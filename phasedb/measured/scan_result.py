"""What was found in a scan."""

from __future__ import annotations

from dataclasses import dataclass, fields

import numpy as np

from phasedb.measured.peaklist import FloatArray
from phasedb.measured.scan import Scan


@dataclass(frozen=True, slots=True)
class FoundLine:
    """One line of a scan.

    Attributes
    ----------
    two_theta_deg, two_theta_esd_deg : float
        On the wavelength that the scan's angles refer to (K-alpha1 for a doublet).
    area, area_esd : float, counts times degrees (of K-alpha1, for a doublet)
    height : float, counts
    fwhm_deg, fwhm_esd_deg : float
    lorentzian : float, share of the Lorentzian, 0 to 1
    chi2_reduced : float, of the group that it was fitted in
    """

    two_theta_deg: float
    two_theta_esd_deg: float
    area: float
    area_esd: float
    height: float
    fwhm_deg: float
    fwhm_esd_deg: float
    lorentzian: float
    chi2_reduced: float


@dataclass(frozen=True, slots=True)
class ScanResult:
    """Lines, background and model of a scan.

    Attributes
    ----------
    background, model, sigma : (n_points,) counts; `model` is lines and background together
    lines : tuple of FoundLine, ascending
    false_lines : float
        How many lines are expected from noise alone.
    threshold : float
        Signal to noise that a line must reach.
    noise_origin : str
    doublet_ratio : float or None
        K-alpha2 over K-alpha1 as fitted; None without a doublet.
    notes : tuple of str
    """

    scan: Scan
    background: FloatArray
    model: FloatArray
    sigma: FloatArray
    lines: tuple[FoundLine, ...]
    false_lines: float
    threshold: float
    noise_origin: str
    doublet_ratio: float | None
    notes: tuple[str, ...]

    def __post_init__(self) -> None:
        for column in fields(self):
            value = getattr(self, column.name)
            if isinstance(value, np.ndarray):
                value.flags.writeable = False
