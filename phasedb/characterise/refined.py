"""The result of a refinement."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from phasedb.characterise.extrapolation import Extrapolation
from phasedb.crystal.lattice import Hkl, LatticeType

BlendChoice = Literal["none", "unresolved"]
"""Whether lines whose K-alpha splitting is below their width were taken as K-alpha1 or as blends."""


@dataclass(frozen=True, slots=True)
class RefinedLine:
    """One line of the phase.

    Attributes
    ----------
    line : int, 1-based rank in the list
    n : int
    hkl : families of N that the lattice allows
    position : float, as measured, in the list's unit
    residual_deg, residual_relative : float or None
        Observed - calculated, in degrees 2theta, or in ln d where the list is not on 2theta.
    weight : float, 0 to 1, relative to the heaviest line
    is_outlier : bool
    a_angstrom : float, from this line alone, uncorrected
    """

    line: int
    n: int
    hkl: tuple[Hkl, ...]
    position: float
    residual_deg: float | None
    residual_relative: float
    weight: float
    is_outlier: bool
    a_angstrom: float


@dataclass(frozen=True, slots=True)
class EsdParts:
    """What the uncertainty of a is made of, Å each; None: not known, and not in the total.

    `statistical` holds the scatter and the shift terms, `scale` the common scale of a d list or camera.
    """

    statistical: float
    wavelength: float | None
    temperature: float | None
    scale: float | None

    @property
    def total(self) -> float:
        """The parts in quadrature, Å."""
        parts = (self.statistical, self.wavelength, self.temperature, self.scale)
        return float(np.sqrt(sum(part**2 for part in parts if part is not None)))


@dataclass(frozen=True, slots=True)
class Refinement:
    """A refined lattice constant, at the measuring temperature.

    Attributes
    ----------
    correlation_zero, correlation_displacement : float or None
        Correlations of a with the shift terms; None off the 2theta axis.
    noise : float
        Typical position noise after enlarging, degrees 2theta or relative.
    left_over : tuple of int
        1-based ranks of the lines that are not this phase's.
    """

    lattice_type: LatticeType
    a_start_angstrom: float
    a_angstrom: float
    a_esd_angstrom: float
    a_esd_parts: EsdParts
    zero_deg: float | None
    zero_esd_deg: float | None
    displacement_mm: float | None
    displacement_esd_mm: float | None
    goniometer_radius_mm: float | None
    radius_assumed: bool
    correlation_zero: float | None
    correlation_displacement: float | None
    chi2_reduced: float | None
    noise: float
    lines: tuple[RefinedLine, ...]
    left_over: tuple[int, ...]
    blends: BlendChoice
    nelson_riley: Extrapolation | None
    cohen: Extrapolation | None
    cautions: tuple[str, ...]
