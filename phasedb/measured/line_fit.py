"""Least-squares fit of a group of overlapping lines on a straight background, with priors on their shapes."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from phasedb.measured.peaklist import FloatArray
from phasedb.measured.profile import Doublet, moved_by_ratio, pseudo_voigt

PER_LINE: Final = 4
"""Parameters of a line: centre, area, ln fwhm, logit of the Lorentzian share."""
MOST_STEPS: Final = 25
LEAST_GAIN: Final = 1e-4


@dataclass(frozen=True, slots=True)
class ShapePrior:
    """Where shapes are expected: ln fwhm and logit of the Lorentzian share of each line, with scales.

    `doublet_scale` is the scale of ln(intensity ratio) of the doublet about `doublet_ratio`.
    """

    ln_fwhm: FloatArray
    ln_fwhm_scale: FloatArray
    logit_mixing: FloatArray
    logit_mixing_scale: float
    doublet_ratio: float
    doublet_scale: float


@dataclass(frozen=True, slots=True)
class GroupFit:
    """Fitted lines of a group.

    Attributes
    ----------
    centre, area, fwhm, mixing : (n_lines,) degrees, counts·degrees, degrees, 0 to 1
    centre_esd, area_esd, fwhm_esd : (n_lines,), not yet widened by the misfit
    doublet_ratio : float
    slope : (2,) straight background: height at the middle and slope per degree
    chi2_reduced : float
    """

    centre: FloatArray
    area: FloatArray
    fwhm: FloatArray
    mixing: FloatArray
    centre_esd: FloatArray
    area_esd: FloatArray
    fwhm_esd: FloatArray
    doublet_ratio: float
    slope: FloatArray
    chi2_reduced: float


def fit_group(
    x: FloatArray,
    y: FloatArray,
    sigma: FloatArray,
    *,
    centre: FloatArray,
    area: FloatArray,
    prior: ShapePrior,
    doublet: Doublet | None,
    steps: int = MOST_STEPS,
) -> GroupFit:
    """Return the fit of lines that start at `centre` (degrees) with `area` to counts less background `y`.

    Damped Gauss-Newton (Levenberg 1944; Marquardt 1963), analytic derivatives; priors are extra residuals.
    """
    n = len(centre)
    start = np.stack([centre, area, prior.ln_fwhm, prior.logit_mixing], axis=1).ravel()
    parameters = np.concatenate([start, [np.log(prior.doublet_ratio)], np.zeros(2)])
    problem = _Problem(x, y, sigma, prior, doublet, centre.copy(), n)
    residual, slope = problem.at(parameters)
    cost, damping = float(residual @ residual), 1e-3
    normal, gradient = slope @ slope.T, slope @ residual
    for _ in range(steps):
        # columns are scaled first: areas may be counted in any unit
        scale = np.sqrt(np.maximum(np.diag(normal), 1e-300))
        even = normal / np.outer(scale, scale) + (damping + 1e-12) * np.eye(len(scale))
        step = np.linalg.solve(even, gradient / scale) / scale
        trial = problem.within(parameters + step)
        new_residual, new_slope = problem.at(trial)
        new_cost = float(new_residual @ new_residual)
        if new_cost < cost:
            gain = (cost - new_cost) / max(cost, 1e-300)
            parameters, residual, cost = trial, new_residual, new_cost
            normal, gradient = new_slope @ new_slope.T, new_slope @ new_residual
            damping = max(damping * 0.3, 1e-9)
            if gain < LEAST_GAIN:
                break
        else:
            damping *= 6.0
            if damping > 1e8:
                break
    return problem.result(parameters, residual, normal)


@dataclass(frozen=True, slots=True)
class _Problem:
    x: FloatArray
    y: FloatArray
    sigma: FloatArray
    prior: ShapePrior
    doublet: Doublet | None
    start: FloatArray
    n: int

    def at(self, parameters: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Return (observed - calculated) / sigma, the priors' below, and their derivatives."""
        shape = parameters[: PER_LINE * self.n].reshape(self.n, PER_LINE)
        centre, area = shape[:, 0], shape[:, 1]
        fwhm, mixing = np.exp(shape[:, 2]), 1.0 / (1.0 + np.exp(-shape[:, 3]))
        ratio = float(np.exp(parameters[PER_LINE * self.n]))
        middle = self.x - 0.5 * (self.x[0] + self.x[-1])
        model = parameters[-2] + parameters[-1] * middle
        points = len(self.x)
        slope = np.zeros((len(parameters), points + 2 * self.n + 1))
        columns = slope[:, :points]
        for which, (moved, by_centre, share) in enumerate(components(centre, self.doublet, ratio)):
            value, d_centre, d_width, d_mixing = pseudo_voigt(self.x, moved, fwhm, mixing)
            height = share * area[:, None]
            model = model + (height * value).sum(axis=0)
            columns[0 : PER_LINE * self.n : PER_LINE] += height * d_centre * by_centre[:, None]
            columns[1 : PER_LINE * self.n : PER_LINE] += share * value
            columns[2 : PER_LINE * self.n : PER_LINE] += height * d_width
            columns[3 : PER_LINE * self.n : PER_LINE] += height * d_mixing * (mixing * (1 - mixing))[:, None]
            if which == 1:
                columns[PER_LINE * self.n] = (height * value).sum(axis=0)
        columns[-2], columns[-1] = 1.0, middle
        columns /= self.sigma
        below = self._add_priors(parameters, slope[:, points:])
        return np.concatenate([(self.y - model) / self.sigma, below]), slope

    def _add_priors(self, parameters: FloatArray, slope: FloatArray) -> FloatArray:
        """Return the priors' residuals (widths, shares, ratio) and put their derivatives into `slope`."""
        shape = parameters[: PER_LINE * self.n].reshape(self.n, PER_LINE)
        prior = self.prior
        row = np.arange(self.n)
        slope[PER_LINE * row + 2, row] = 1.0 / prior.ln_fwhm_scale
        slope[PER_LINE * row + 3, self.n + row] = 1.0 / prior.logit_mixing_scale
        slope[PER_LINE * self.n, 2 * self.n] = 1.0 / prior.doublet_scale
        return np.concatenate(
            [
                (prior.ln_fwhm - shape[:, 2]) / prior.ln_fwhm_scale,
                (prior.logit_mixing - shape[:, 3]) / prior.logit_mixing_scale,
                [(np.log(prior.doublet_ratio) - parameters[PER_LINE * self.n]) / prior.doublet_scale],
            ]
        )

    def within(self, parameters: FloatArray) -> FloatArray:
        """Keep lines near their start and shapes in reason."""
        shape = parameters[: PER_LINE * self.n].reshape(self.n, PER_LINE)
        reach = np.exp(self.prior.ln_fwhm)
        shape[:, 0] = np.clip(shape[:, 0], self.start - reach, self.start + reach)
        shape[:, 2] = np.clip(shape[:, 2], self.prior.ln_fwhm - 2.0, self.prior.ln_fwhm + 2.0)
        shape[:, 3] = np.clip(shape[:, 3], -6.0, 6.0)
        parameters[PER_LINE * self.n] = np.clip(parameters[PER_LINE * self.n], -5.0, 0.5)
        return parameters

    def result(self, parameters: FloatArray, residual: FloatArray, normal: FloatArray) -> GroupFit:
        shape = parameters[: PER_LINE * self.n].reshape(self.n, PER_LINE)
        scale = np.sqrt(np.maximum(np.diag(normal), 1e-300))
        even = normal / np.outer(scale, scale) + 1e-12 * np.eye(len(scale))
        variance = np.diag(np.linalg.inv(even)) / scale**2
        esd = np.sqrt(np.maximum(variance[: PER_LINE * self.n], 0.0)).reshape(self.n, PER_LINE)
        points = len(self.x)
        freedom = max(points - 3 * self.n - 2, 1)
        fwhm = np.exp(shape[:, 2])
        return GroupFit(
            centre=shape[:, 0].copy(),
            area=shape[:, 1].copy(),
            fwhm=fwhm,
            mixing=1.0 / (1.0 + np.exp(-shape[:, 3])),
            centre_esd=esd[:, 0],
            area_esd=esd[:, 1],
            fwhm_esd=esd[:, 2] * fwhm,
            doublet_ratio=float(np.exp(parameters[PER_LINE * self.n])),
            slope=parameters[-2:].copy(),
            chi2_reduced=float((residual[:points] ** 2).sum() / freedom),
        )


def components(
    centre: FloatArray, doublet: Doublet | None, ratio: float
) -> list[tuple[FloatArray, FloatArray, float]]:
    """Return centre, its derivative by the line's own centre, and share of each component of lines."""
    if doublet is None:
        return [(centre, np.ones_like(centre), 1.0)]
    first = moved_by_ratio(centre, doublet.ratio_alpha1) if doublet.ratio_alpha1 != 1.0 else None
    alpha1 = (centre, np.ones_like(centre)) if first is None else first
    alpha2 = moved_by_ratio(centre, doublet.ratio_alpha2)
    return [(*alpha1, 1.0), (*alpha2, ratio)]


def model_of(
    x: FloatArray,
    centre: FloatArray,
    area: FloatArray,
    fwhm: FloatArray,
    mixing: FloatArray,
    doublet: Doublet | None,
    ratio: FloatArray,
) -> FloatArray:
    """Return the counts that lines give at ascending `x`, each computed within 30 widths only."""
    total = np.zeros_like(x)
    for line in range(len(centre)):
        one = slice(line, line + 1)
        for moved, _, share in components(centre[one], doublet, float(ratio[line])):
            low, high = np.searchsorted(x, [moved[0] - 30.0 * fwhm[line], moved[0] + 30.0 * fwhm[line]])
            value, *_ = pseudo_voigt(x[low:high], moved, fwhm[one], mixing[one])
            total[low:high] += share * area[line] * value[0]
    return total
