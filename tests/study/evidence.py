"""How well an entry explains a list, for an oracle that knows the experiment.

The likelihood is that of the simulator seen from the list: each line is spurious or a line of one of the
phases; each predicted line is seen or not. Noise scale, widths, floor, scatter of the heights and the number
of spurious lines are the true ones.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from phasedb.crystal.lattice import LATTICE_TYPES, allowed_n, multiplicity
from phasedb.crystal.phases import DRIFT_CLASSES, PhaseTable
from study.experiment import Experiment
from study.physics import lorentz_polarisation, two_theta
from study.truth import Case, FloatArray

DRIFT_STEPS = np.linspace(-4.0, 4.0, 21)
SHARE_FACTORS = np.exp(np.array([-0.5, 0.0, 0.5]))
OWN_HEIGHT_SPREAD = 0.4
"""Scatter of ln height beyond the list's own: texture, blends and the fall of intensity with angle."""


def drift_density(table: PhaseTable, row: int, e: FloatArray) -> FloatArray:
    """Return the density of the relative drift e, as the simulator draws it (plus a floor of 1e-3)."""
    kind = DRIFT_CLASSES[int(table.drift[row])]
    if kind == "line compound":
        scaled = e / 2e-4
        return 0.375 / (1.0 + scaled**2 / 4.0) ** 2.5 / 2e-4 + 1e-3
    low, high = table.a_low_angstrom[row], table.a_high_angstrom[row]
    if np.isfinite(low) and np.isfinite(high) and high > low:
        a = table.a_angstrom[row] * (1.0 + e)
        return table.a_angstrom[row] / (high - low) * ((a >= low * 0.9998) & (a <= high * 1.0002)) + 1e-3
    size = np.maximum(np.abs(e), 1e-6)
    laplace = np.exp(-size / 0.003) / 0.006
    spread = 0.8
    departure = (np.log(size) - np.log(2e-3)) / spread
    lognormal = np.exp(-0.5 * departure**2) / (2.0 * size * spread * np.sqrt(2.0 * np.pi))
    heavy = 0.5 * (laplace + lognormal)
    if kind == "alloy":
        return 0.5 * np.exp(-0.5 * (e / 8e-4) ** 2) / (8e-4 * np.sqrt(2.0 * np.pi)) + 0.5 * heavy + 1e-3
    return heavy + 1e-3


@dataclass(frozen=True, slots=True)
class View:
    """A list with its true shift taken off, and what the oracle knows of it.

    `shift` arguments are departures from the true shift, one for each line, in degrees.
    """

    x: FloatArray
    intensity: FloatArray | None
    low: float
    high: float
    sigma: FloatArray
    background: float
    setting: Experiment

    @classmethod
    def of(cls, case: Case) -> View:
        """Return the oracle's view of a list."""
        truth, peaks, setting = case.truth, case.peaks, case.truth.setting
        angle = two_theta(peaks.d_angstrom, setting.declared.wavelength_angstrom)
        rounding = 0.29 * setting.step_deg if peaks.unit == "two-theta" else 0.0
        if peaks.unit == "d":
            slope = np.degrees(2.0 * np.tan(np.radians(angle) / 2.0))
            rounding = 0.29 * 10.0**-setting.d_decimals * slope / peaks.d_angstrom
        sigma = np.sqrt(setting.noise_deg**2 + rounding**2) * np.ones(len(angle))
        intensity = None if peaks.intensity is None else peaks.intensity / peaks.intensity.max()
        low, high = setting.low, setting.high
        if peaks.range_assumed:
            low, high = float(angle.min()) - 1.0, float(angle.max()) + 1.0
        spurious = sum(not owner for owner in truth.owners)
        return cls(angle - truth.shift_at_lines_deg, intensity, low, high, sigma, max(spurious, 0.3), setting)

    @property
    def floor(self) -> float:
        """Density of lines that nothing explains, 1/degree."""
        return self.background / (self.high - self.low)

    @property
    def slope(self) -> FloatArray:
        """Degrees of 2theta for one unit of -ln a, at each line."""
        return np.degrees(2.0 * np.tan(np.radians(self.x) / 2.0))

    @property
    def a_width(self) -> float:
        """A generous standard uncertainty of ln a from the lines of one phase."""
        return float(1.0 / np.sqrt(0.3 * np.sum((self.slope / self.sigma) ** 2) + 1.0))

    def rates(
        self, table: PhaseTable, row: int, a: FloatArray, share: FloatArray, shift: FloatArray
    ) -> tuple[FloatArray, FloatArray]:
        """Return the rate at each line, (n_trials, n_lines), and the sum of log(1 - p), (n_trials,)."""
        setting = self.setting
        n, strength = entry_lines(table, row, float(a.max()), setting.emission.alpha1)
        angle = setting.maxima(a[:, None] / np.sqrt(n)[None, :])[0]
        inside = np.isfinite(angle) & (angle > self.low) & (angle < self.high)
        angle = np.where(inside, angle, 1.0)
        height = np.where(inside, strength[None, :] * lorentz_polarisation(angle, 1.0), 0.0)
        top = height.max(axis=1, keepdims=True)
        height = share[:, None] * height / np.where(top > 0.0, top, 1.0)
        p = 0.97 / (1.0 + np.exp(-np.log(np.maximum(height, 1e-12) / setting.floor) / 0.5))
        p = np.where(inside, np.maximum(p, 1e-4), 0.0)
        offset = (self.x - shift - angle[:, :, None]) / self.sigma
        density = np.exp(-0.5 * np.minimum(offset**2, 60.0)) / (self.sigma * np.sqrt(2.0 * np.pi))
        density = density + 2e-4 * (np.abs(offset) < 8.0)
        if self.intensity is not None:
            spread = float(np.hypot(setting.intensity_spread, OWN_HEIGHT_SPREAD))
            ratio = np.log(self.intensity / np.maximum(height, 1e-6)[:, :, None]) / spread
            likeness = np.exp(-0.5 * np.minimum(ratio**2, 60.0)) / (spread * np.sqrt(2.0 * np.pi))
            density = density * (0.9 * likeness * np.log(1.0 / setting.floor) + 0.1)
        rate = np.einsum("tk,tki->ti", p / (1.0 - p), density)
        return rate, np.log1p(-p).sum(axis=1)

    def base(
        self, table: PhaseTable, others: list[tuple[int, float, float]], shift: FloatArray
    ) -> FloatArray:
        """Return the rate at each line of other phases: rows, lattice constants (Å) and shares."""
        total = np.zeros(len(self.x))
        for row, a, share in others:
            total += self.rates(table, row, np.array([a]), np.array([share]), shift)[0][0]
        return total

    def best_fit(
        self, table: PhaseTable, row: int, a_values: FloatArray, share: float, base: FloatArray
    ) -> float:
        """Return the best log likelihood of an entry at the true shift, whatever its drift."""
        steps = np.linspace(-3.0, 3.0, 7) * self.a_width
        still = np.zeros(len(self.x))
        best = -np.inf
        for centre in a_values:
            a = centre * (1.0 + steps)
            rate, missing = self.rates(table, row, a, np.full(len(a), share), still)
            best = max(best, float(np.max(np.log(self.floor + base + rate).sum(axis=1) + missing)))
        return best

    def evidence(
        self, table: PhaseTable, row: int, centre: float, share: float, base: FloatArray, shift: FloatArray
    ) -> float:
        """Return the log evidence of an entry near a = `centre` (Å), its drift and share integrated out."""
        steps = DRIFT_STEPS * self.a_width
        a = np.repeat(centre * (1.0 + steps), len(SHARE_FACTORS))
        w = np.tile(share * SHARE_FACTORS, len(steps))
        rate, missing = self.rates(table, row, a, w, shift)
        fit = np.log(self.floor + base + rate).sum(axis=1) + missing
        prior = np.log(drift_density(table, row, a / table.a_angstrom[row] - 1.0))
        return float(np.logaddexp.reduce(fit + prior + np.log(steps[1] - steps[0])))


def entry_lines(table: PhaseTable, row: int, a: float, wavelength: float) -> tuple[np.ndarray, FloatArray]:
    """Return N and strength of an entry's lines; plain ones where its structure is not known."""
    top = int((2.0 * a / wavelength) ** 2)
    part = slice(int(table.line_start[row]), int(table.line_start[row + 1]))
    n, strength = table.line_n[part], table.line_strength[part]
    if not len(n):
        lattice = LATTICE_TYPES[int(table.lattice[row])]
        n = allowed_n(lattice, top)
        planes = np.array([multiplicity(lattice, int(value)) for value in n])
        return n, planes * np.exp(-n / (n[len(n) // 3] + 1.0))
    keep = (n <= top) & (strength > 1e-4 * strength.max())
    return n[keep], strength[keep]
