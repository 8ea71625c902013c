"""Where the lines of a phase are expected: Bragg's law, zero error, displacement, unresolved blends."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Final, Self

import numpy as np
from numpy.typing import NDArray

from phasedb.characterise.assignment import Assignment
from phasedb.characterise.least_squares import Model, Solution
from phasedb.characterise.refined import BlendChoice
from phasedb.identify.settings import ShiftPrior
from phasedb.measured.peaklist import PeakList

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

DEFAULT_RADIUS_MM: Final = 200.0
"""Goniometer radius where none is given."""
SHORTEST_X_RAY_ANGSTROM: Final = 0.2
"""Below it a wavelength is an electron's, whose common error is one of scale."""
UNRESOLVED_BELOW_DEG: Final = 0.12
"""Width below which a list without widths does not resolve the doublet; `common practice, no source`."""
BLENDS_NEED: Final = 6.0
"""Twice the log-likelihood ratio above which the unresolved lines are blends, though K-alpha1 was said."""


@dataclass(frozen=True, slots=True)
class PositionModel:
    """The positions of a list and what moves them.

    Attributes
    ----------
    two_theta_deg, wavelength_angstrom : None where the list is scored on ln d
    ln_d : (n_lines,)
    radius_mm : float
    shift_mean, shift_precision : (2,) zero (degrees) and displacement (mm); empty on ln d
    blend_ratio : (n_lines,) wavelength of the unresolved blend over the list's, 1 for resolved lines
    ratio : (n_lines,) the ratio in use
    """

    two_theta_deg: FloatArray | None
    wavelength_angstrom: float | None
    ln_d: FloatArray
    radius_mm: float
    shift_mean: FloatArray
    shift_precision: FloatArray
    blend_ratio: FloatArray
    ratio: FloatArray

    @classmethod
    def of(cls, peaks: PeakList, prior: ShiftPrior) -> Self:
        """Return the model of a peak list under a prior of its shifts."""
        radiation = peaks.radiation
        ones = np.ones(len(peaks))
        radius = peaks.goniometer_radius_mm or DEFAULT_RADIUS_MM
        is_angle = (
            peaks.two_theta_deg is not None
            and radiation is not None
            and radiation.wavelength_angstrom > SHORTEST_X_RAY_ANGSTROM
        )
        if not is_angle or radiation is None or peaks.two_theta_deg is None:
            empty = np.zeros(0)
            return cls(None, None, np.log(peaks.d_angstrom), radius, empty, empty, ones, ones)
        scales = np.maximum([prior.zero_scale_deg, prior.displacement_scale_mm], 1e-9)
        return cls(
            two_theta_deg=peaks.two_theta_deg,
            wavelength_angstrom=radiation.wavelength_angstrom,
            ln_d=np.log(peaks.d_angstrom),
            radius_mm=radius,
            shift_mean=np.array([prior.zero_deg, prior.displacement_mm]),
            shift_precision=scales**-2.0,
            blend_ratio=_blend_ratio(peaks),
            ratio=ones,
        )

    @property
    def is_angle(self) -> bool:
        """Whether the list is scored on 2theta."""
        return self.two_theta_deg is not None

    def with_blends(self, choice: BlendChoice) -> Self:
        """Return the model with the unresolved lines taken as blends, or as K-alpha1."""
        return replace(self, ratio=self.ratio_for(choice))

    def ratio_for(self, choice: BlendChoice) -> FloatArray:
        """Return, for each line, its wavelength over the list's under `choice`."""
        return self.blend_ratio if choice == "unresolved" else np.ones_like(self.blend_ratio)

    def at(self, line: IntArray, n: IntArray) -> Model:
        """Return residuals and derivatives of these lines as a function of (ln a, zero, displacement)."""
        half_ln_n = 0.5 * np.log(n)
        if self.two_theta_deg is None or self.wavelength_angstrom is None:
            observed = self.ln_d[line]
            ones = np.ones((len(line), 1))
            return lambda parameters: (observed - (parameters[0] - half_ln_n), ones)
        angle = self.two_theta_deg[line]
        half_wavelength = 0.5 * self.wavelength_angstrom * self.ratio[line]
        per_mm = np.degrees(2.0 / self.radius_mm)

        def model(parameters: FloatArray) -> tuple[FloatArray, FloatArray]:
            ln_a, zero, displacement = parameters
            sine = np.minimum(half_wavelength * np.exp(half_ln_n - ln_a), 0.999999)
            cosine = np.sqrt(1.0 - sine**2)
            calculated = np.degrees(2.0 * np.arcsin(sine)) + zero - displacement * per_mm * cosine
            along_a = np.degrees(-2.0 * sine / cosine)
            derivative = np.stack([along_a, np.ones_like(sine), -per_mm * cosine], axis=1)
            return angle - calculated, derivative

        return model

    def offset(self, parameters: FloatArray) -> float | FloatArray:
        """Return what to take off each measured position (degrees) to reach K-alpha1 free of shifts."""
        if self.two_theta_deg is None:
            return 0.0
        half = np.radians(self.two_theta_deg) / 2.0
        shift = parameters[1] - parameters[2] * np.degrees(2.0 / self.radius_mm) * np.cos(half)
        return np.asarray(shift + np.degrees(2.0 * np.tan(half)) * (self.ratio - 1.0))


def _blend_ratio(peaks: PeakList) -> FloatArray:
    ratio = np.ones(len(peaks))
    radiation = peaks.radiation
    if radiation is None or radiation.convention != "doublet" or peaks.two_theta_deg is None:
        return ratio
    lines = radiation.lines
    if lines is None:
        return ratio
    splitting = np.degrees(2.0 * np.tan(np.radians(peaks.two_theta_deg) / 2.0)) * (
        lines.alpha2 / lines.alpha1 - 1.0
    )
    width = np.full(len(peaks), UNRESOLVED_BELOW_DEG)
    if peaks.fwhm is not None:
        width = np.where(np.isfinite(peaks.fwhm), peaks.fwhm, width)
    return np.where(splitting < width, lines.mean / lines.alpha1, ratio)


def choose_blends(
    model: PositionModel, found: Assignment, fit: Callable[[PositionModel], Solution]
) -> tuple[BlendChoice, Solution]:
    """Return whether the unresolved lines are blends, and the fit under that choice.

    A list on a K-alpha doublet may hold K-alpha1 positions throughout, or blends wherever the splitting is
    below the width. The list is taken at its word (K-alpha1) unless blends fit clearly better.
    """
    plain = fit(model.with_blends("none"))
    if not (model.blend_ratio[found.line] > 1.0).any():
        return "none", plain
    blended = fit(model.with_blends("unresolved"))
    gain = _twice_log_likelihood(blended) - _twice_log_likelihood(plain)
    return ("unresolved", blended) if gain > BLENDS_NEED else ("none", plain)


def _twice_log_likelihood(solution: Solution) -> float:
    weighed = solution.good * ((solution.residual / solution.sigma) ** 2 + 2.0 * np.log(solution.sigma))
    return -float(weighed.sum())
