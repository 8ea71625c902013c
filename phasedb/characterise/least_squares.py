"""Weighted least squares with priors, weights for misassigned lines, and esds that the scatter enlarges."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace
from typing import Final

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
Model = Callable[[FloatArray], tuple[FloatArray, FloatArray]]
"""Parameters (k,) to residuals observed - calculated (n,) and d calculated / d parameter (n, k)."""

BAD_SHARE: Final = 0.03
"""Share of lines that belong to something else after assignment (common practice, no source)."""
BAD_WIDTH: Final = 10.0
"""Spread of such lines, in units of the noise."""
FEWEST_FOR_WEIGHTS: Final = 7
"""With fewer lines no line can be told to be an outlier."""
LEAST_NOISE: Final = 0.2
"""Least noise, in units of the nominal one, where the lines' own esds do not describe the scatter.

What zero and displacement leave (axial divergence, line shape) runs smoothly along the list, so a small
scatter does not prove small errors. Chosen so that the measured LaB6 line standard comes out right."""
PRIOR_SCALES: Final = ((0.1, 0.15), (0.3, 0.25), (1.0, 0.40), (1.6, 0.20))
"""How wide the shift priors really are, and how probable each is: from well aligned to neglected instruments.

Chosen so that esds cover simulated shifts of the stated size, much smaller ones, and twice as large ones."""


@dataclass(frozen=True, slots=True)
class Solution:
    """Parameters, covariance (k, k), probability that each line is good (n,), and what the scatter says.

    Attributes
    ----------
    residual : (n,) observed - calculated
    sigma : (n,) noise of each line after enlarging
    chi2_reduced : float or None
        Sum of squares over degrees of freedom with the stated (or nominal) noise; None without freedom.
    freedom : float
        Lines less the number of parameters that the lines (not the priors) determine.
    """

    parameters: FloatArray
    covariance: FloatArray
    good: FloatArray
    residual: FloatArray
    sigma: FloatArray
    chi2_reduced: float | None
    freedom: float


def solve(
    model: Model,
    start: FloatArray,
    *,
    prior_mean: FloatArray,
    prior_precision: FloatArray,
    stated: FloatArray | None,
    nominal: float,
) -> Solution:
    """Return the parameters that minimise the weighted squares of residuals and departures from priors.

    Parameters
    ----------
    prior_mean, prior_precision : (k,)
        Gaussian priors; precision 0 for a free parameter.
    stated : (n,) float or None
        Standard uncertainty of each line; then noise is only ever enlarged, by one added variance. Without
        it the scatter alone sets one noise for all.
    nominal : float
        Noise taken where neither lines nor scatter can tell.

    Notes
    -----
    Lines are good (Gaussian) or bad (ten times wider, 3 % beforehand); each weighs by its probability of
    being good. Covariance (J' W J + priors)^-1. Where the scatter sets the noise, its own uncertainty (few
    degrees of freedom) widens the noise by the ratio of Student's t to the Gaussian at 95 %.
    """
    base = np.zeros_like(model(start)[0]) if stated is None else stated
    freedom = float(len(base))
    floor = LEAST_NOISE * nominal
    parameters, sigma = _robust_start(model, start, prior_mean, prior_precision, base, floor)
    good = np.ones(len(base))
    added = 0.0
    for _ in range(50):
        before = parameters
        parameters, inverse, residual, derivative = _step(
            model, parameters, prior_mean, prior_precision, good / sigma**2
        )
        weight = good / sigma**2
        held = np.einsum("ni,ij,nj->", derivative * weight[:, None], inverse, derivative)
        freedom = float(good.sum() - held)
        added = _added_variance(residual, base, good, freedom, nominal)
        sigma = np.sqrt(base**2 + added)
        good = _probability_good(residual, sigma)
        if np.abs(parameters - before).max() < 1e-12 + 1e-7 * np.sqrt(np.diag(inverse)).min():
            break
    set_by_scatter = added > 0 and freedom >= 0.5
    widened = sigma
    if set_by_scatter:
        widened = np.sqrt(base**2 + added * student_widening(freedom) ** 2)
    _, inverse, residual, _ = _step(
        model, parameters, prior_mean, prior_precision, good / widened**2, move=False
    )
    reference = base if stated is not None else np.full(len(base), nominal)
    chi2 = float((good * (residual / reference) ** 2).sum() / freedom) if freedom >= 0.5 else None
    return Solution(parameters, inverse, good, residual, sigma, chi2, freedom)


def over_prior_scales(
    solution: Solution, model: Model, *, prior_mean: FloatArray, prior_precision: FloatArray, first: int
) -> Solution:
    """Return the solution averaged over how wide the priors of the parameters from `first` on really are.

    How well an instrument is aligned is not known: each scale in `PRIOR_SCALES` multiplies those priors and
    weighs by its evidence (Gaussian, linear about the solution): small shifts are not given the freedom of
    large ones.
    """
    widened = solution.sigma * student_widening(solution.freedom)
    residual, derivative = model(solution.parameters)
    weight = solution.good / widened**2
    data = derivative.T @ (derivative * weight[:, None])
    pull = derivative.T @ (weight * residual)
    evidence, means, covariances = [], [], []
    for factor, share in PRIOR_SCALES:
        precision = prior_precision.copy()
        precision[first:] /= factor**2
        inverse, log_determinant = _inverse(data + np.diag(precision))
        step = inverse @ (pull + precision * (prior_mean - solution.parameters))
        mean = solution.parameters + step
        left = residual - derivative @ step
        square = float((weight * left**2).sum() + (precision * (mean - prior_mean) ** 2).sum())
        evidence.append(
            np.log(share) + 0.5 * (float(np.log(precision[first:]).sum()) - log_determinant - square)
        )
        means.append(mean)
        covariances.append(inverse)
    probability = np.exp(np.array(evidence) - max(evidence))
    probability /= probability.sum()
    centre = np.einsum("s,sk->k", probability, np.array(means))
    apart = np.array(means) - centre
    covariance = np.einsum("s,skl->kl", probability, np.array(covariances))
    covariance = covariance + np.einsum("s,sk,sl->kl", probability, apart, apart)
    return replace(solution, parameters=centre, covariance=covariance, residual=model(centre)[0])


def student_widening(freedom: float) -> float:
    """Return Student's t over the Gaussian at 95 % two-sided: t = z + (z³+z)/4f + (5z⁵+16z³+3z)/96f² + ...

    References
    ----------
    Abramowitz & Stegun, Handbook of Mathematical Functions (1964), 26.7.5; z = 1.959964.
    """
    inverse = 1.0 / max(freedom, 1.0)
    return 1.0 + inverse * (1.2104 + inverse * (1.4400 + inverse * 1.3044))


def _step(
    model: Model,
    parameters: FloatArray,
    prior_mean: FloatArray,
    prior_precision: FloatArray,
    weight: FloatArray,
    *,
    move: bool = True,
) -> tuple[FloatArray, FloatArray, FloatArray, FloatArray]:
    """Return the parameters after one Gauss-Newton step, inverse normal matrix, residuals, derivatives."""
    residual, derivative = model(parameters)
    normal = derivative.T @ (derivative * weight[:, None]) + np.diag(prior_precision)
    inverse, _ = _inverse(normal)
    if move:
        gradient = derivative.T @ (weight * residual) + prior_precision * (prior_mean - parameters)
        parameters = parameters + inverse @ gradient
        residual, derivative = model(parameters)
    return parameters, inverse, residual, derivative


def _inverse(normal: FloatArray) -> tuple[FloatArray, float]:
    """Return the inverse and the log determinant; columns are scaled first, their sizes differ by 1e6."""
    scale = np.sqrt(np.diag(normal))
    even = normal / np.outer(scale, scale)
    log_determinant = float(np.linalg.slogdet(even)[1] + 2.0 * np.log(scale).sum())
    return np.asarray(np.linalg.inv(even) / np.outer(scale, scale)), log_determinant


def _robust_start(
    model: Model,
    start: FloatArray,
    prior_mean: FloatArray,
    prior_precision: FloatArray,
    base: FloatArray,
    floor: float,
) -> tuple[FloatArray, FloatArray]:
    """Return a least-absolute-deviation start and a noise from the median deviation."""
    parameters = start
    sigma = np.sqrt(base**2 + floor**2)
    for _ in range(8):
        residual, _ = model(parameters)
        weight = 1.0 / (sigma * np.maximum(np.abs(residual), sigma))
        parameters, _, residual, _ = _step(model, parameters, prior_mean, prior_precision, weight)
    few = np.sqrt(len(base) / max(len(base) - len(start), 1.0))
    spread = max(1.4826 * float(np.median(np.abs(residual))) * few, floor)
    return parameters, np.sqrt(base**2 + spread**2)


def _added_variance(
    residual: FloatArray, base: FloatArray, good: FloatArray, freedom: float, nominal: float
) -> float:
    """Return the variance that, added to each line's own, makes chi² equal to the degrees of freedom.

    At least the square of the least noise; nothing where the lines' own esds describe the scatter.
    """
    least = (LEAST_NOISE * nominal) ** 2
    square = good * residual**2
    if not base.any():
        return nominal**2 if freedom < 0.5 else max(float(square.sum()) / freedom, least)
    if freedom < 0.5 or (square / base**2).sum() <= freedom + 2.0 * np.sqrt(2.0 * freedom):
        return 0.0
    low, high = 0.0, float(square.sum()) / freedom
    for _ in range(60):
        middle = 0.5 * (low + high)
        too_small = (square / (base**2 + middle)).sum() > freedom
        low, high = (middle, high) if too_small else (low, middle)
    return max(high, least)


def _probability_good(residual: FloatArray, sigma: FloatArray) -> FloatArray:
    if len(residual) < FEWEST_FOR_WEIGHTS:
        return np.ones(len(residual))
    square = (residual / sigma) ** 2
    odds = (1.0 - BAD_SHARE) / (BAD_SHARE / BAD_WIDTH) * np.exp(-0.5 * square * (1.0 - BAD_WIDTH**-2))
    return np.asarray(odds / (1.0 + odds))
