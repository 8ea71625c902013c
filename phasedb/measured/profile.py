"""The shape of a line: pseudo-Voigt of unit area, its derivatives, and the K-alpha doublet."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from phasedb.crystal.radiation import Radiation
from phasedb.measured.peaklist import FloatArray

_LN2: Final = float(np.log(2.0))
_GAUSS: Final = 2.0 * float(np.sqrt(_LN2 / np.pi))
_LORENTZ: Final = 2.0 / float(np.pi)
NEAR_LINE: Final = 2e-4
"""A wavelength within this share of an anode's K-alpha1 or mean is that line."""


@dataclass(frozen=True, slots=True)
class Doublet:
    """K-alpha1 and K-alpha2 over the wavelength that positions refer to, in that order.

    Not certain where only a number near an anode's line was given: the scan itself must show it.
    """

    ratio_alpha1: float
    ratio_alpha2: float
    is_certain: bool
    is_on_mean: bool = False

    @classmethod
    def of(cls, radiation: Radiation | None) -> Doublet | None:
        """Return the doublet of a radiation; None for monochromatic ones.

        Positions refer to K-alpha1, save for a radiation that is named as the mean: there they refer to the
        mean. A mean wavelength given as a number is used literally; resolved lines are then K-alpha1's.
        """
        if radiation is None or radiation.lines is None or radiation.convention in ("alpha1", "electron"):
            return None
        lines, base = radiation.lines, radiation.wavelength_angstrom
        on_mean = abs(base / lines.mean - 1.0) < NEAR_LINE
        if not on_mean and abs(base / lines.alpha1 - 1.0) > NEAR_LINE:
            return None
        if radiation.convention == "mean":
            return cls(lines.alpha1 / lines.mean, lines.alpha2 / lines.mean, is_certain=True)
        is_certain = radiation.convention == "doublet"
        return cls(1.0, lines.alpha2 / lines.alpha1, is_certain=is_certain, is_on_mean=on_mean)


def pseudo_voigt(
    x: FloatArray, centre: FloatArray, fwhm: FloatArray, mixing: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Return the unit-area pseudo-Voigt and its derivatives by centre, ln fwhm and mixing.

    Parameters
    ----------
    x : (n_points,) degrees
    centre, fwhm : (n_lines,) degrees
    mixing : (n_lines,) Lorentzian share, 0 to 1

    Returns
    -------
    four (n_lines, n_points) arrays, 1/degree (and 1/degree² for the derivative by centre)
    """
    width = fwhm[:, None]
    u = (x[None, :] - centre[:, None]) / width
    square = u**2
    gauss = _GAUSS / width * np.exp(-4.0 * _LN2 * square)
    bell = 1.0 / (1.0 + 4.0 * square)
    lorentz = _LORENTZ / width * bell
    share = mixing[:, None]
    value = share * lorentz + (1.0 - share) * gauss
    by_centre = (share * lorentz * 8.0 * u * bell + (1.0 - share) * gauss * 8.0 * _LN2 * u) / width
    by_ln_width = share * lorentz * (8.0 * square * bell - 1.0)
    by_ln_width = by_ln_width + (1.0 - share) * gauss * (8.0 * _LN2 * square - 1.0)
    return value, by_centre, by_ln_width, lorentz - gauss


def pseudo_voigt_height(fwhm: FloatArray, mixing: FloatArray) -> FloatArray:
    """Return the height of the unit-area pseudo-Voigt, 1/degree."""
    return np.asarray((mixing * _LORENTZ + (1.0 - mixing) * _GAUSS) / fwhm)


def moved_by_ratio(two_theta_deg: FloatArray, ratio: float) -> tuple[FloatArray, FloatArray]:
    """Return where lines of `ratio` times the wavelength lie (degrees), and the derivative by 2theta.

    Lines that the longer wavelength cannot give are put at 180 degrees.
    """
    half = np.radians(two_theta_deg) / 2.0
    sine = np.minimum(ratio * np.sin(half), 1.0 - 1e-12)
    moved = np.arcsin(sine)
    return np.degrees(2.0 * moved), np.asarray(ratio * np.cos(half) / np.cos(moved))
