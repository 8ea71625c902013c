"""What a standard's list tells of an instrument: zero error, displacement of the mount, line width."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from phasedb.characterise.cells import StartingCell
from phasedb.characterise.refined import Refinement
from phasedb.characterise.refinement import refine
from phasedb.errors import InputError
from phasedb.identify.settings import ShiftPrior
from phasedb.measured.peaklist import PeakList

FEWEST_LINES: Final = 4
WIDE: Final = ShiftPrior(zero_scale_deg=0.3, displacement_scale_mm=0.3)
"""Before a standard was measured an instrument may be badly aligned."""
ZERO_WANDERS_DEG: Final = 0.01
"""How far the zero moves between alignments of an instrument; `common practice, no source`."""
MOUNT_VARIES_MM: Final = 0.05
"""How far one specimen's surface lies from another's; `common practice, no source`."""
NO_DISPLACEMENT_MM: Final = 1e-6
STANDARD_RELATIVE_ESD: Final = 5e-6
"""Least relative uncertainty of a standard's a."""


@dataclass(frozen=True, slots=True)
class Calibration:
    """The shift prior that a standard gives, the median line width (degrees), and the fit behind them."""

    prior: ShiftPrior
    line_width_deg: float | None
    fit: Refinement


def calibrate(
    peaks: PeakList, cell: StartingCell, *, a_esd_angstrom: float | None, transmission: bool
) -> Calibration:
    """Return what the list of a standard of known a tells of the instrument.

    The zero is the instrument's and is kept; the displacement is this mount's, so for other specimens only
    its usual size is.

    Raises
    ------
    InputError
        If the list is not on 2theta, or fewer than four of its lines are the standard's.
    """
    if peaks.two_theta_deg is None:
        raise InputError(
            "a standard's list must be on 2theta", where=peaks.source, hint="give --radiation or --wavelength"
        )
    relative = max((a_esd_angstrom or 0.0) / cell.a_angstrom, STANDARD_RELATIVE_ESD)
    before = WIDE
    if transmission:
        before = ShiftPrior(WIDE.zero_deg, WIDE.zero_scale_deg, 0.0, NO_DISPLACEMENT_MM)
    fit = refine(
        peaks,
        lattice_type=cell.lattice_type,
        a_angstrom=cell.a_angstrom,
        allowed=cell.allowed,
        shift_prior=before,
        a_prior_relative=relative,
        reach=2e-3,
    )
    if len(fit.lines) < FEWEST_LINES:
        raise InputError(
            f"{len(fit.lines)} lines of the list are the standard's: expected at least {FEWEST_LINES}",
            where=peaks.source,
            hint="check the standard's name, the radiation and the list",
        )
    assert fit.zero_deg is not None and fit.zero_esd_deg is not None
    prior = ShiftPrior(
        zero_deg=fit.zero_deg,
        zero_scale_deg=float(np.hypot(fit.zero_esd_deg, ZERO_WANDERS_DEG)),
        displacement_mm=0.0,
        displacement_scale_mm=NO_DISPLACEMENT_MM if transmission else MOUNT_VARIES_MM,
    )
    width = None
    if peaks.fwhm is not None:
        width = float(np.nanmedian(peaks.fwhm[[line.line - 1 for line in fit.lines]]))
    return Calibration(prior, width if width is not None and np.isfinite(width) else None, fit)
