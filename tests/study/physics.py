"""What a diffractometer does to the lines of a powder: blends, shifts, texture, widths.

Independent of the matcher on purpose: the study judges it with a richer description of the experiment.
"""

from __future__ import annotations

from functools import lru_cache
from itertools import permutations, product

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.lattice import LatticeType, families, family_multiplicity
from phasedb.crystal.radiation import EmissionLines

FloatArray = NDArray[np.float64]


def two_theta(d_angstrom: FloatArray, wavelength_angstrom: float) -> FloatArray:
    """Return 2theta in degrees, NaN where the line does not exist."""
    sine = wavelength_angstrom / (2.0 * d_angstrom)
    return np.where(sine < 1.0, 2.0 * np.degrees(np.arcsin(np.minimum(sine, 1.0))), np.nan)


def shift_deg(
    two_theta_deg: FloatArray, zero_deg: float, displacement_mm: float, radius_mm: float
) -> FloatArray:
    """Return measured minus true 2theta in degrees: z - (2 s / R) (180/pi) cos theta."""
    cosine = np.cos(np.radians(two_theta_deg) / 2.0)
    return zero_deg - np.degrees(2.0 * displacement_mm / radius_mm) * cosine


def lorentz_polarisation(two_theta_deg: FloatArray, monochromator_cos2: float) -> FloatArray:
    """Return (1 + c cos² 2theta) / ((1 + c) sin² theta cos theta); c = 1 without a monochromator."""
    angle = np.radians(two_theta_deg)
    polarisation = (1.0 + monochromator_cos2 * np.cos(angle) ** 2) / (1.0 + monochromator_cos2)
    return polarisation / (np.sin(angle / 2.0) ** 2 * np.cos(angle / 2.0))


def width_deg(two_theta_deg: FloatArray, instrument_deg: float, size_deg: float) -> FloatArray:
    """Return the full width in degrees: an instrument part that grows with angle, and size broadening."""
    theta = np.radians(two_theta_deg) / 2.0
    instrument = instrument_deg * np.sqrt(1.0 + 0.8 * np.tan(theta) ** 2)
    return np.hypot(instrument, size_deg / np.cos(theta))


def doublet_position(
    d_angstrom: FloatArray, lines: EmissionLines, fwhm_deg: FloatArray
) -> tuple[FloatArray, FloatArray, FloatArray]:
    """Return the main maximum, the K-alpha2 maximum (degrees 2theta) and how far they are resolved (0 to 1).

    Below a splitting of half the width the maximum lies at the weighted mean of the two; above 1.1 widths at
    K-alpha1 (common practice, no source).
    """
    first = two_theta(d_angstrom, lines.alpha1)
    second = two_theta(d_angstrom, lines.alpha2)
    resolved = np.clip(((second - first) / fwhm_deg - 0.5) / 0.6, 0.0, 1.0)
    blend = (2.0 * first + second) / 3.0
    return blend + resolved * (first - blend), second, np.nan_to_num(resolved)


@lru_cache(maxsize=4096)
def _cosines(hkl: tuple[int, int, int], axis: tuple[int, int, int]) -> FloatArray:
    vectors = {
        tuple(sign * index for sign, index in zip(signs, order, strict=True))
        for order in set(permutations(hkl))
        for signs in product((1, -1), repeat=3)
    }
    members = np.array(sorted(vectors), dtype=float)
    norm = np.linalg.norm(members, axis=1) * np.linalg.norm(axis)
    return np.clip(members @ np.array(axis, dtype=float) / norm, -1.0, 1.0)


def march_dollase(
    n_values: NDArray[np.int_], lattice: LatticeType, axis: tuple[int, int, int], r: float
) -> FloatArray:
    """Return the texture factor of each line N: the mean of (r² cos² + sin²/r)^(-3/2) over its planes.

    References
    ----------
    Dollase (1986), J. Appl. Cryst. 19, 267 (form from memory).
    """
    factors = np.empty(len(n_values))
    for row, n in enumerate(n_values):
        total = weight = 0.0
        for hkl in families(int(n), lattice):
            cosine = _cosines(hkl, axis)
            value = np.mean((r**2 * cosine**2 + (1.0 - cosine**2) / r) ** -1.5)
            count = family_multiplicity(*hkl)
            total += count * float(value)
            weight += count
        factors[row] = total / weight
    return factors
