"""Lattice constant of one cubic phase from its lines, with shift terms, esds and outliers."""

from __future__ import annotations

from collections.abc import Sequence
from functools import partial
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.characterise.assignment import REACH, Assignment, assign, assign_near
from phasedb.characterise.extrapolation import Extrapolation, cohen, nelson_riley
from phasedb.characterise.least_squares import Solution, over_prior_scales, solve
from phasedb.characterise.refined import BlendChoice, EsdParts, RefinedLine, Refinement
from phasedb.characterise.remarks import remarks_on
from phasedb.characterise.shift_model import PositionModel, choose_blends
from phasedb.crystal.lattice import LatticeType, allowed_n, families
from phasedb.errors import InputError
from phasedb.identify.settings import ShiftPrior
from phasedb.measured.peaklist import PeakList

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

NOMINAL_NOISE_DEG: Final = 0.02
"""Position noise of an ordinary laboratory list; `common practice, no source`."""
NOMINAL_NOISE_RELATIVE: Final = 6e-4
NOMINAL_NOISE_CAMERA: Final = 3e-3
SCALE_ESD_D_LIST: Final = 7e-4
SCALE_ESD_CAMERA: Final = 5e-3
"""Common scale error of a d list, and of an uncalibrated electron camera; `common practice, no source`."""
TEMPERATURE_ESD_K: Final = 1.0
"""Standard uncertainty of a stated measuring temperature; `common practice, no source`."""
HIGHEST_N: Final = 4000


def refine(
    peaks: PeakList,
    *,
    lattice_type: LatticeType,
    a_angstrom: float,
    allowed: Sequence[int] | IntArray | None = None,
    expansion_per_k: float | None = None,
    shift_prior: ShiftPrior | None = None,
    a_prior_relative: float | None = None,
    reach: float = REACH,
) -> Refinement:
    """Return the lattice constant in Å of the phase near `a_angstrom` by weighted least squares.

    Only the list's lines that lie near lines of the phase are used, so a list of several phases may be given.

    Parameters
    ----------
    allowed : N = h²+k²+l² that the structure shows, or None for all of the lattice type
    expansion_per_k : linear thermal expansion, for the temperature part of the uncertainty
    shift_prior : ShiftPrior or None
        Shifts learned for the instrument; None for those of an ordinary one, well or badly aligned.
    a_prior_relative : float or None
        Relative esd of `a_angstrom` as a prior (a certified standard); None leaves a free.
    reach : float
        How far, relatively, a may lie from `a_angstrom`.

    Raises
    ------
    InputError
        If `a_angstrom` cannot be, or none of the lines belongs to such a phase.

    Notes
    -----
    Minimises sum of (2theta_i - 2theta(N_i, a) - z + (2 s / R) cos theta_i)² / sigma_i² + z²/sigma_z² +
    s²/sigma_s²; without a wavelength, and for electrons, (ln d_i - ln a + ln N_i / 2)².
    """
    if not (np.isfinite(a_angstrom) and 0.5 <= a_angstrom <= 250.0):
        raise InputError(f"lattice constant {a_angstrom:g} Å: expected 0.5 to 250 Å")
    prior = shift_prior or ShiftPrior()
    n_allowed = _allowed(peaks, lattice_type, a_angstrom, allowed)
    model = PositionModel.of(peaks, prior)
    found = assign(
        model.two_theta_deg,
        peaks.d_angstrom,
        model.wavelength_angstrom,
        a_angstrom=a_angstrom,
        allowed=n_allowed,
        reach=reach,
    )
    if not len(found.line):
        raise InputError(
            f"no line of the list fits lattice type {lattice_type} with a near {a_angstrom:g} Å",
            where=peaks.source,
            hint="check lattice type and a; find them from the list alone with: phasedb index PEAKS",
        )
    ln_a_prior = (np.log(a_angstrom), a_prior_relative)
    nominal = _nominal(peaks, is_angle=model.is_angle)
    found, solution, blends = _settled(
        peaks, model, found, n_allowed, nominal, ln_a_prior, learned=shift_prior is not None
    )
    return _result(peaks, model, found, solution, blends, lattice_type, a_angstrom, expansion_per_k)


def _allowed(
    peaks: PeakList, lattice_type: LatticeType, a_angstrom: float, given: Sequence[int] | IntArray | None
) -> IntArray:
    highest = min(int(1.1 * (a_angstrom / peaks.d_angstrom.min()) ** 2) + 4, HIGHEST_N)
    every = allowed_n(lattice_type, highest)
    if given is None:
        return every
    chosen = np.intersect1d(every, np.asarray(given, dtype=np.int64))
    return chosen if len(chosen) else every


def _nominal(peaks: PeakList, *, is_angle: bool) -> float:
    if is_angle:
        return NOMINAL_NOISE_DEG
    return NOMINAL_NOISE_CAMERA if _is_camera(peaks) else NOMINAL_NOISE_RELATIVE


def _is_camera(peaks: PeakList) -> bool:
    return peaks.unit == "ring" or peaks.radiation is not None


def _settled(
    peaks: PeakList,
    model: PositionModel,
    found: Assignment,
    allowed: IntArray,
    nominal: float,
    ln_a_prior: tuple[float, float | None],
    *,
    learned: bool,
) -> tuple[Assignment, Solution, BlendChoice]:
    """Fit and reassign until the same lines come back."""
    for _ in range(8):
        fit = partial(_fitted, peaks, found=found, nominal=nominal, ln_a_prior=ln_a_prior, learned=learned)
        blends, solution = choose_blends(model, found, fit)
        noise = max(float(np.sqrt(np.median(solution.sigma**2))), nominal)
        again = assign_near(
            model.two_theta_deg,
            peaks.d_angstrom,
            model.wavelength_angstrom,
            ln_a=float(solution.parameters[0]),
            shift=model.with_blends(blends).offset(solution.parameters),
            noise=noise,
            allowed=allowed,
        )
        if np.array_equal(again.line, found.line) and np.array_equal(again.n, found.n):
            break
        if not len(again.line):
            break
        found = again
    return found, solution, blends


def _fitted(
    peaks: PeakList,
    model: PositionModel,
    *,
    found: Assignment,
    nominal: float,
    ln_a_prior: tuple[float, float | None],
    learned: bool,
) -> Solution:
    mean, precision = model.shift_mean, model.shift_precision
    a_precision = 0.0 if ln_a_prior[1] is None else ln_a_prior[1] ** -2
    stated = None
    if peaks.esd is not None:
        own = peaks.esd[found.line]
        known = own[np.isfinite(own)]
        stated = np.where(np.isfinite(own), own, np.median(known)) if len(known) else None
    residuals = model.at(found.line, found.n)
    priors = {
        "prior_mean": np.array([ln_a_prior[0], *mean]),
        "prior_precision": np.array([a_precision, *precision]),
    }
    start = np.array([found.ln_a, *mean])
    solution = solve(residuals, start, **priors, stated=stated, nominal=nominal)
    if learned or not model.is_angle:
        return solution
    return over_prior_scales(solution, residuals, **priors, first=1)


def _result(
    peaks: PeakList,
    model: PositionModel,
    found: Assignment,
    solution: Solution,
    blends: BlendChoice,
    lattice_type: LatticeType,
    a_start: float,
    expansion_per_k: float | None,
) -> Refinement:
    a = float(np.exp(solution.parameters[0]))
    esd = np.sqrt(np.diag(solution.covariance))
    correlation = solution.covariance[0, 1:] / (esd[0] * esd[1:])
    parts = EsdParts(
        statistical=a * float(esd[0]),
        wavelength=_wavelength_part(peaks, model, a),
        temperature=None
        if peaks.temperature_k is None or expansion_per_k is None
        else a * abs(expansion_per_k) * TEMPERATURE_ESD_K,
        scale=None if model.is_angle else a * _scale_esd(peaks),
    )
    lines = _refined_lines(peaks, model, found, solution, blends, lattice_type)
    kept = solution.good >= 0.5
    riley, by_cohen = _extrapolated(model, found, kept, blends)
    is_angle = model.is_angle
    draft = Refinement(
        lattice_type=lattice_type,
        a_start_angstrom=a_start,
        a_angstrom=a,
        a_esd_angstrom=parts.total,
        a_esd_parts=parts,
        zero_deg=float(solution.parameters[1]) if is_angle else None,
        zero_esd_deg=float(esd[1]) if is_angle else None,
        displacement_mm=float(solution.parameters[2]) if is_angle else None,
        displacement_esd_mm=float(esd[2]) if is_angle else None,
        goniometer_radius_mm=model.radius_mm if is_angle else None,
        radius_assumed=is_angle and peaks.goniometer_radius_mm is None,
        correlation_zero=float(correlation[0]) if is_angle else None,
        correlation_displacement=float(correlation[1]) if is_angle else None,
        chi2_reduced=solution.chi2_reduced,
        noise=float(np.sqrt(np.median(solution.sigma**2))),
        lines=lines,
        left_over=tuple(int(rank) + 1 for rank in np.setdiff1d(np.arange(len(peaks)), found.line)),
        blends=blends,
        nelson_riley=riley,
        cohen=by_cohen,
        cautions=(),
    )
    return remarks_on(draft, peaks, model)


def _refined_lines(
    peaks: PeakList,
    model: PositionModel,
    found: Assignment,
    solution: Solution,
    blends: BlendChoice,
    lattice_type: LatticeType,
) -> tuple[RefinedLine, ...]:
    weight = solution.good / solution.sigma**2
    weight = weight / weight.max()
    relative = solution.residual
    if model.is_angle and model.two_theta_deg is not None:
        tangent = np.tan(np.radians(model.two_theta_deg[found.line]) / 2.0)
        relative = -np.radians(solution.residual) / (2.0 * tangent)
    alone = np.sqrt(found.n) * peaks.d_angstrom[found.line] * model.ratio_for(blends)[found.line]
    return tuple(
        RefinedLine(
            line=int(index) + 1,
            n=int(n),
            hkl=families(int(n), lattice_type),
            position=float(peaks.position[index]),
            residual_deg=float(solution.residual[row]) if model.is_angle else None,
            residual_relative=float(relative[row]),
            weight=float(weight[row]),
            is_outlier=bool(solution.good[row] < 0.5),
            a_angstrom=float(alone[row]),
        )
        for row, (index, n) in enumerate(zip(found.line, found.n, strict=True))
    )


def _extrapolated(
    model: PositionModel, found: Assignment, kept: NDArray[np.bool_], blends: BlendChoice
) -> tuple[Extrapolation | None, Extrapolation | None]:
    """Return both extrapolations from the lines that are no outliers; blends are put on K-alpha1 first."""
    if model.two_theta_deg is None or model.wavelength_angstrom is None:
        return None, None
    line = found.line[kept]
    wavelength = model.wavelength_angstrom
    sine = np.sin(np.radians(model.two_theta_deg[line]) / 2.0) / model.ratio_for(blends)[line]
    two_theta = np.degrees(2.0 * np.arcsin(sine))
    return nelson_riley(two_theta, found.n[kept], wavelength), cohen(two_theta, found.n[kept], wavelength)


def _wavelength_part(peaks: PeakList, model: PositionModel, a: float) -> float | None:
    """Return a times the relative esd of the wavelength (of a number: its distance to an anode's line)."""
    radiation = peaks.radiation
    if not model.is_angle or radiation is None:
        return None
    if radiation.wavelength_esd_angstrom is not None:
        return a * radiation.wavelength_esd_angstrom / radiation.wavelength_angstrom
    lines = radiation.lines
    if lines is None:
        return None
    away = min(abs(radiation.wavelength_angstrom - value) for value in (lines.alpha1, lines.mean))
    if away > 1e-4 * lines.alpha1:
        return None
    return a * max(away, lines.alpha1_esd) / radiation.wavelength_angstrom


def _scale_esd(peaks: PeakList) -> float:
    if peaks.scale_esd_relative is not None:
        return peaks.scale_esd_relative
    return SCALE_ESD_CAMERA if _is_camera(peaks) else SCALE_ESD_D_LIST
