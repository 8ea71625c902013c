"""The ideal line list of one phase: what its cell and structure say a perfect powder shows."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from phasedb.crystal.intensity import D_MIN_ANGSTROM, N_MOST, line_strengths, relative_intensities
from phasedb.crystal.lattice import Hkl, allowed_n, families, hkl_text, multiplicity
from phasedb.crystal.phases import Phase
from phasedb.crystal.radiation import Radiation, two_theta_from_d

TWO_THETA_MAX_DEG: Final = 150.0
"""Where a line list ends unless asked: few instruments go further."""


@dataclass(frozen=True, slots=True)
class IdealLine:
    """One powder line: all families of one N.

    Attributes
    ----------
    n : int
        h² + k² + l².
    hkl : tuple of (h, k, l)
        Families, sorted by h.
    multiplicity : int
        Sum over the families.
    d_angstrom, two_theta_deg : float
    intensity : float or None
        0 to 100; None if the structure is not known.
    """

    n: int
    hkl: tuple[Hkl, ...]
    hkl_text: str
    multiplicity: int
    d_angstrom: float
    two_theta_deg: float
    intensity: float | None


def ideal_lines(
    phase: Phase,
    radiation: Radiation,
    *,
    two_theta_max_deg: float = TWO_THETA_MAX_DEG,
    monochromator_two_theta_deg: float | None = None,
) -> tuple[IdealLine, ...]:
    """Return the lines of a phase in order of 2theta.

    With a structure, systematic absences are left out; without one, all lines that the lattice type allows
    are given and intensities are None. Lines with d below 0.36 Å or N above 2500 are left out.
    """
    a = phase.a_angstrom
    d_min = radiation.wavelength_angstrom / (2.0 * np.sin(np.radians(min(two_theta_max_deg, 180.0)) / 2.0))
    n_max = min(int((a / max(d_min, D_MIN_ANGSTROM)) ** 2 * (1 + 1e-12)), N_MOST)
    if n_max < 1:
        return ()
    known = line_strengths(phase, n_max=n_max, radiation=radiation)
    n = allowed_n(phase.lattice_type, n_max) if known is None else known[0]
    d = a / np.sqrt(n)
    two_theta = two_theta_from_d(d, radiation.wavelength_angstrom)
    intensity = (
        None if known is None else relative_intensities(*known, a, radiation, monochromator_two_theta_deg)
    )
    return tuple(
        IdealLine(
            n=int(value),
            hkl=families(int(value), phase.lattice_type),
            hkl_text=hkl_text(int(value), phase.lattice_type),
            multiplicity=multiplicity(phase.lattice_type, int(value)),
            d_angstrom=float(d[i]),
            two_theta_deg=float(two_theta[i]),
            intensity=None if intensity is None else float(intensity[i]),
        )
        for i, value in enumerate(n)
    )
