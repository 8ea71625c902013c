"""The classical extrapolations of a lattice constant to theta = 90 degrees, beside the least squares."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Extrapolation:
    """An extrapolated lattice constant, its esd (None with two lines: no scatter), and the trend found.

    Attributes
    ----------
    a_angstrom, a_esd_angstrom : float, Å
    trend : float
        Nelson-Riley: slope of a against the extrapolation function, Å. Cohen: the coefficient D.
    n_lines : int
    """

    a_angstrom: float
    a_esd_angstrom: float | None
    trend: float
    n_lines: int


def a_of_lines(two_theta_deg: ArrayLike, n: ArrayLike, wavelength_angstrom: float) -> FloatArray:
    """Return a in Å from each line alone: lambda sqrt(N) / (2 sin theta)."""
    theta = np.radians(np.asarray(two_theta_deg, dtype=np.float64)) / 2.0
    return np.asarray(wavelength_angstrom * np.sqrt(np.asarray(n, dtype=np.float64)) / (2.0 * np.sin(theta)))


def nelson_riley_function(two_theta_deg: ArrayLike) -> FloatArray:
    """Return (cos² theta / sin theta + cos² theta / theta) / 2, theta in radians in the second term.

    References
    ----------
    Nelson & Riley, Proc. Phys. Soc. 57 (1945) 160; Taylor & Sinclair, Proc. Phys. Soc. 57 (1945) 126.
    """
    theta = np.radians(np.asarray(two_theta_deg, dtype=np.float64)) / 2.0
    return np.asarray(0.5 * np.cos(theta) ** 2 * (1.0 / np.sin(theta) + 1.0 / theta))


def nelson_riley(two_theta_deg: ArrayLike, n: ArrayLike, wavelength_angstrom: float) -> Extrapolation | None:
    """Return a at theta = 90 degrees from the straight line of a against the Nelson-Riley function.

    All lines weigh the same. None with fewer than two lines.

    Parameters
    ----------
    two_theta_deg : (n_lines,) array-like, degrees, uncorrected
    n : (n_lines,) array-like, N = h²+k²+l²
    """
    a = a_of_lines(two_theta_deg, n, wavelength_angstrom)
    if len(a) < 2:
        return None
    design = np.stack([np.ones_like(a), nelson_riley_function(two_theta_deg)], axis=1)
    value, esd = _least_squares(design, a)
    return Extrapolation(float(value[0]), esd, float(value[1]), len(a))


def cohen(
    two_theta_deg: ArrayLike, n: ArrayLike, wavelength_angstrom: float, *, like_nelson_riley: bool = False
) -> Extrapolation | None:
    """Return a from Cohen's least squares, sin² theta = A N + D delta, A = lambda² / (4 a²).

    delta = 10 sin² 2 theta, times (1/sin theta + 1/theta) where `like_nelson_riley`. None with fewer than two
    lines, or if A comes out negative.

    References
    ----------
    Cohen, Rev. Sci. Instrum. 6 (1935) 68.
    """
    theta = np.radians(np.atleast_1d(np.asarray(two_theta_deg, dtype=np.float64))) / 2.0
    if len(theta) < 2:
        return None
    delta = 10.0 * np.sin(2.0 * theta) ** 2
    if like_nelson_riley:
        delta = delta * (1.0 / np.sin(theta) + 1.0 / theta)
    design = np.stack([np.asarray(n, dtype=np.float64), delta], axis=1)
    value, esd = _least_squares(design, np.sin(theta) ** 2)
    if value[0] <= 0:
        return None
    a = float(wavelength_angstrom / (2.0 * np.sqrt(value[0])))
    a_esd = None if esd is None else float(a * esd / (2.0 * value[0]))
    return Extrapolation(a, a_esd, float(value[1]), len(theta))


def _least_squares(design: FloatArray, values: FloatArray) -> tuple[FloatArray, float | None]:
    """Return the unweighted solution and the esd of its first parameter from the scatter."""
    found, _, rank, _ = np.linalg.lstsq(design, values, rcond=None)
    solution: FloatArray = found.astype(np.float64)
    freedom = len(values) - 2
    if freedom < 1 or rank < 2:
        return solution, None
    scatter = float(((values - design @ solution) ** 2).sum()) / freedom
    return solution, float(np.sqrt(scatter * np.linalg.inv(design.T @ design)[0, 0]))
