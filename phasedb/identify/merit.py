"""Figures of merit of an indexed pattern, as published."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.lattice import LatticeType, allowed_n
from phasedb.identify.result import MeritF, MeritM

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.integer]

MOST_LINES_F = 30
MOST_LINES_M = 20
LEAST_DELTA_DEG = 1e-4  # a list cannot be known better: keeps exact lists finite
LEAST_DELTA_RELATIVE = 1e-6


def possible_lines(lattice: LatticeType, n_top: int, structure_n: IntArray | None) -> IntArray:
    """Return the distinct N up to `n_top` that the structure (or, without one, the lattice) allows."""
    if structure_n is None:
        return allowed_n(lattice, n_top)
    return structure_n[structure_n <= n_top]


def merit_f(
    n_observed: IntArray, delta_two_theta_deg: FloatArray, possible: IntArray, *, n_first_in_range: int = 1
) -> MeritF | None:
    """Return F_N = (1/<|delta 2theta|>)(N/N_possible) from the first 30 observed lines.

    Parameters
    ----------
    n_observed : (n,) N = h²+k²+l² of each observed line, ascending
    delta_two_theta_deg : (n,) observed minus calculated, degrees
    possible : distinct N that could be seen, from the first line of the cell
    n_first_in_range : the first N inside the measured range

    References
    ----------
    Smith & Snyder (1979), J. Appl. Cryst. 12, 60-65.
    """
    if len(n_observed) == 0:
        return None
    n, delta = n_observed[:MOST_LINES_F], np.abs(delta_two_theta_deg[:MOST_LINES_F])
    mean = max(float(delta.mean()), LEAST_DELTA_DEG)
    upto = possible[possible <= n[-1]]
    count = max(len(upto), len(n))
    windowed = max(int(np.count_nonzero(upto >= n_first_in_range)), len(n))
    return MeritF(len(n) / (mean * count), len(n), mean, count, windowed)


def merit_m(
    n_observed: IntArray, d_observed: FloatArray, a_angstrom: float, possible: IntArray
) -> MeritM | None:
    """Return M_N = (1/d_N²)/(2 <|delta(1/d²)|> N_possible) from the first 20 observed lines.

    References
    ----------
    de Wolff (1968), J. Appl. Cryst. 1, 108-113.
    """
    if len(n_observed) == 0:
        return None
    n, d = n_observed[:MOST_LINES_M], d_observed[:MOST_LINES_M]
    calculated = n / a_angstrom**2
    mean = float(np.abs(1.0 / d**2 - calculated).mean())
    mean = max(mean, LEAST_DELTA_RELATIVE * float(calculated.mean()))
    count = max(int(np.count_nonzero(possible <= n[-1])), len(n))
    return MeritM(float(calculated[-1]) / (2.0 * mean * count), len(n), count)
