"""Which measured lines belong to a cubic phase of roughly known a, and which N each of them is."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

REACH: Final = 0.012
"""How far, relatively, a may lie from the value given."""
_STEPS: Final = 121
_ZEROS_DEG: Final = np.linspace(-0.2, 0.2, 9)
_SCALES_RELATIVE: Final = np.linspace(-0.01, 0.01, 9)
_NOISE_DEG: Final = (0.03, 0.1, 0.4)
_NOISE_RELATIVE: Final = (1e-3, 4e-3, 1.5e-2)
_NOISE_PENALTY: Final = (0.0, 1.0, 3.0)
_DRIFT_SCALE: Final = 0.003
_SHIFT_SCALE_DEG: Final = 0.07
_SHIFT_SCALE_RELATIVE: Final = 0.003


@dataclass(frozen=True, slots=True)
class Assignment:
    """Lines of a phase: index into the list (ascending) and N of each; ln a and shift where they fit best."""

    line: IntArray
    n: IntArray
    ln_a: float
    shift: float
    noise: float


def nearest_n(n_float: FloatArray, allowed: IntArray) -> IntArray:
    """Return, for each value, the allowed N whose ln N is nearest. `allowed` is ascending, at least one."""
    borders = np.sqrt(allowed[:-1] * allowed[1:].astype(np.float64))
    return np.asarray(allowed[np.searchsorted(borders, n_float)])


def assign(
    two_theta_deg: FloatArray | None,
    d_angstrom: FloatArray,
    wavelength_angstrom: float | None,
    *,
    a_angstrom: float,
    allowed: IntArray,
    reach: float = REACH,
) -> Assignment:
    """Return the lines that fit a phase with a within `reach` of `a_angstrom`, on one common shift.

    Every line votes for each trial of a, shift and noise by the likelihood of being the nearest allowed line
    against being nobody's; so the lines of other phases do not pull.
    """
    is_angle = two_theta_deg is not None
    drift = np.linspace(-reach, reach, _STEPS)
    shifts = _ZEROS_DEG if is_angle else _SCALES_RELATIVE
    shift_scale = _SHIFT_SCALE_DEG if is_angle else _SHIFT_SCALE_RELATIVE
    best = (-np.inf, 0.0, 0.0, 0.0)
    for shift in shifts:
        ln_d, per_ln_d = _moved(two_theta_deg, d_angstrom, wavelength_angstrom, float(shift))
        ln_a = np.log(a_angstrom) + drift[:, None]
        n = nearest_n(np.exp(2.0 * (ln_a - ln_d)), allowed)
        deviation = (ln_a - 0.5 * np.log(n) - ln_d) * per_ln_d
        span = max(float(np.ptp(two_theta_deg if two_theta_deg is not None else ln_d)), 1e-3)
        density = 0.5 * len(ln_d) / span
        prior = -np.abs(drift) / _DRIFT_SCALE - 0.5 * (shift / shift_scale) ** 2
        for noise, penalty in zip(_NOISE_DEG if is_angle else _NOISE_RELATIVE, _NOISE_PENALTY, strict=True):
            gauss = np.exp(-0.5 * (deviation / noise) ** 2) / (noise * np.sqrt(2.0 * np.pi))
            score = np.log1p(gauss / density).sum(axis=1) + prior - penalty
            top = int(np.argmax(score))
            if score[top] > best[0]:
                best = (float(score[top]), float(ln_a[top, 0]), float(shift), noise)
    return assign_near(
        two_theta_deg,
        d_angstrom,
        wavelength_angstrom,
        ln_a=best[1],
        shift=best[2],
        noise=best[3],
        allowed=allowed,
    )


def assign_near(
    two_theta_deg: FloatArray | None,
    d_angstrom: FloatArray,
    wavelength_angstrom: float | None,
    *,
    ln_a: float,
    shift: float | FloatArray,
    noise: float,
    allowed: IntArray,
) -> Assignment:
    """Return the lines within four times `noise` of an allowed line; each N takes its nearest line only."""
    ln_d, per_ln_d = _moved(two_theta_deg, d_angstrom, wavelength_angstrom, shift)
    n = nearest_n(np.exp(2.0 * (ln_a - ln_d)), allowed)
    deviation = np.abs((ln_a - 0.5 * np.log(n) - ln_d) * per_ln_d)
    order = np.argsort(deviation, kind="stable")
    order = order[deviation[order] <= 4.0 * noise]
    _, first = np.unique(n[order], return_index=True)
    line = np.sort(order[first])
    mean_shift = float(np.mean(shift))
    return Assignment(line.astype(np.int64), n[line], ln_a, mean_shift, noise)


def _moved(
    two_theta_deg: FloatArray | None,
    d_angstrom: FloatArray,
    wavelength_angstrom: float | None,
    shift: float | FloatArray,
) -> tuple[FloatArray, FloatArray]:
    """Return ln d after taking `shift` off, and the size of one unit of ln d on the scoring axis."""
    if two_theta_deg is None or wavelength_angstrom is None:
        return np.log(d_angstrom) + shift, np.ones(len(d_angstrom))
    half = np.radians(np.clip(two_theta_deg - shift, 0.01, 179.99)) / 2.0
    return np.log(wavelength_angstrom / (2.0 * np.sin(half))), np.degrees(2.0 * np.tan(half))
