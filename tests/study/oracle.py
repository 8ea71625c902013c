"""What the best possible reading of a list could say: the ceiling for naming an entry, look-alikes.

The oracle is given the true shift, noise scale, width, floor, shares, the other phases with their true
lattice constants, and the drift distribution of each class. It puts every entry in the place of one true
phase, at the lattice constants that lay its lines on the true ones, and compares evidence. Entries within a
factor 20 of the true one are its look-alikes: this measurement cannot tell them apart.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from phasedb.crystal.lattice import LATTICE_TYPES, allowed_n, multiplicity
from phasedb.crystal.phases import DRIFT_CLASSES, PhaseTable
from study.physics import lorentz_polarisation, two_theta
from study.truth import Case, FloatArray, TruePhase, Truth

LOOK_ALIKE_NATS = float(np.log(20.0))
"""An entry whose evidence is at most this far (natural log) below the true one's cannot be told from it."""

RATIOS = (1.0, 2.0**0.5, 2.0**-0.5, 2.0, 0.5, 3.0**0.5, 3.0**-0.5, 1.5**0.5, 1.5**-0.5)
"""Ratios of lattice constants at which two cells share most lines (METHODS, section on indexing)."""

MOST_DRIFT = 0.015


@dataclass(frozen=True, slots=True)
class Verdict:
    """The oracle's reading of one true phase: is it first, and which entries cannot be told from it."""

    is_first: bool
    probability: float
    look_alikes: frozenset[str]


def judge(case: Case, table: PhaseTable, phase: TruePhase) -> Verdict:
    """Return the oracle's verdict on one true phase; `table` holds every entry, the removed ones too."""
    names = {name: row for row, name in enumerate(table.name)}
    view = _View.of(case)
    rest = [other for other in case.truth.phases if other is not phase]
    base = np.zeros(len(case.peaks))
    for other in rest:
        base += view.rates(table, names[other.name], np.array([other.a_true]), np.array([other.share]))[0][0]
    taken = {other.name for other in rest}
    scores = {}
    for row, a_values in candidates(table, phase):
        name = table.name[row]
        if name not in taken:
            scores[name] = view.evidence(table, row, a_values, phase.share, base)
    own = scores[phase.name]
    values = np.array(list(scores.values()))
    top = values.max()
    probability = float(np.exp(own - top) / np.sum(np.exp(values - top)))
    close = frozenset(
        name for name, value in scores.items() if name != phase.name and value > own - LOOK_ALIKE_NATS
    )
    return Verdict(bool(own >= top), probability, close)


def candidates(table: PhaseTable, phase: TruePhase) -> list[tuple[int, FloatArray]]:
    """Return (row, lattice constants to try) of every entry that could lie on the true phase's lines."""
    ratios = np.array(RATIOS) * phase.a_true
    drift = ratios[None, :] / table.a_angstrom[:, None] - 1.0
    reach = np.full(len(table), MOST_DRIFT)
    ranged = np.isfinite(table.a_low_angstrom) & np.isfinite(table.a_high_angstrom)
    width = np.maximum(
        np.abs(table.a_low_angstrom / table.a_angstrom - 1.0),
        np.abs(table.a_high_angstrom / table.a_angstrom - 1.0),
    )
    reach[ranged] = np.maximum(reach[ranged], width[ranged] + 0.002)
    near = np.abs(drift) < reach[:, None]
    return [(int(row), ratios[near[row]]) for row in np.flatnonzero(near.any(axis=1))]


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
    lognormal = np.exp(-0.5 * ((np.log(size) - np.log(2e-3)) / 0.8) ** 2) / (
        2.0 * size * 0.8 * np.sqrt(2.0 * np.pi)
    )
    heavy = 0.5 * (laplace + lognormal)
    if kind == "alloy":
        return 0.5 * np.exp(-0.5 * (e / 8e-4) ** 2) / (8e-4 * np.sqrt(2.0 * np.pi)) + 0.5 * heavy + 1e-3
    return heavy + 1e-3


@dataclass(frozen=True, slots=True)
class _View:
    """The list with its true shift taken off, and what the oracle knows of it."""

    x: FloatArray
    intensity: FloatArray | None
    low: float
    high: float
    sigma: FloatArray
    spread: float
    background: float
    wavelength: float
    truth: Truth

    @classmethod
    def of(cls, case: Case) -> _View:
        truth, peaks = case.truth, case.peaks
        angle = two_theta(peaks.d_angstrom, truth.wavelength_angstrom)
        step = np.diff(np.sort(np.round(peaks.position, 6)))
        rounding = 0.3 * float(step.min()) if len(step) and peaks.unit == "two-theta" else 0.0
        rounding = min(rounding, 0.03)
        tangent = np.tan(np.radians(angle) / 2.0)
        blend = np.degrees(2.0 * tangent * 3e-4) * (truth.fwhm_deg > 0)
        if peaks.unit == "d":
            rounding_d = np.degrees(2.0 * tangent * 3e-4 / peaks.d_angstrom)
            blend = np.hypot(blend, rounding_d)
        sigma = np.sqrt(truth.noise_deg**2 + rounding**2 + blend**2)
        intensity = None if peaks.intensity is None else peaks.intensity / peaks.intensity.max()
        low, high = float(angle.min()) - 1.0, float(angle.max()) + 1.0
        if not peaks.range_assumed and peaks.unit == "two-theta":
            low, high = peaks.range_low, peaks.range_high
        spurious = sum(not owner for owner in truth.owners)
        return cls(angle - truth.shift_at_lines_deg, intensity, low, high, sigma,
                   float(np.hypot(truth.intensity_spread, 0.4)), max(spurious, 0.3),
                   truth.wavelength_angstrom, truth)  # fmt: skip

    def rates(
        self, table: PhaseTable, row: int, a: FloatArray, share: FloatArray
    ) -> tuple[FloatArray, FloatArray]:
        """Return the rate at each line, (n_trials, n_lines), and the sum of log(1 - p), (n_trials,)."""
        n, strength = _lines(table, row, float(a.max()), self.wavelength)
        d = a[:, None] / np.sqrt(n)[None, :]
        angle = two_theta(d, self.wavelength)
        inside = np.isfinite(angle) & (angle > self.low) & (angle < self.high)
        angle = np.where(inside, angle, 1.0)
        height = np.where(inside, strength[None, :] * lorentz_polarisation(angle, 1.0), 0.0)
        top = height.max(axis=1, keepdims=True)
        height = share[:, None] * height / np.where(top > 0.0, top, 1.0)
        p = 0.97 / (1.0 + np.exp(-np.log(np.maximum(height, 1e-12) / self.truth.floor) / 0.5))
        p = np.where(inside, np.maximum(p, 1e-4), 0.0)
        offset = (self.x[None, None, :] - angle[:, :, None]) / self.sigma[None, None, :]
        density = np.exp(-0.5 * np.minimum(offset**2, 60.0)) / (
            self.sigma[None, None, :] * np.sqrt(2.0 * np.pi)
        )
        density = density + 2e-4 * (np.abs(offset) < 8.0)
        if self.intensity is not None:
            ratio = np.log(self.intensity[None, None, :] / np.maximum(height, 1e-6)[:, :, None]) / self.spread
            likeness = np.exp(-0.5 * np.minimum(ratio**2, 60.0)) / (self.spread * np.sqrt(2.0 * np.pi))
            flat = 1.0 / np.log(1.0 / self.truth.floor)
            density = density * (0.9 * likeness / flat + 0.1)
        rate = np.einsum("tk,tki->ti", p / (1.0 - p), density)
        return rate, np.log1p(-p).sum(axis=1)

    def evidence(
        self, table: PhaseTable, row: int, a_values: FloatArray, share: float, base: FloatArray
    ) -> float:
        """Return the log evidence of entry `row` in the phase's place, drift and share integrated out."""
        noise = self.background / (self.high - self.low)
        tangent = np.tan(np.radians(self.x) / 2.0)
        width = 1.0 / np.sqrt(np.sum((np.degrees(2.0 * tangent) / self.sigma) ** 2) * 0.3 + 1.0)
        steps = np.linspace(-4.0, 4.0, 25) * width
        factors = np.exp(np.array([-0.6, -0.3, 0.0, 0.3, 0.6]))
        total = -np.inf
        for centre in a_values:
            a = np.repeat(centre * (1.0 + steps), len(factors))
            w = np.tile(share * factors, len(steps))
            rate, missing = self.rates(table, row, a, w)
            fit = np.log(noise + base[None, :] + rate).sum(axis=1) + missing
            prior = np.log(drift_density(table, row, a / table.a_angstrom[row] - 1.0))
            terms = fit + prior + np.log(steps[1] - steps[0]) - np.log(len(factors))
            total = np.logaddexp(total, np.logaddexp.reduce(terms))
        return float(total)


def _lines(table: PhaseTable, row: int, a: float, wavelength: float) -> tuple[np.ndarray, FloatArray]:
    top = int((2.0 * a / wavelength) ** 2)
    part = slice(int(table.line_start[row]), int(table.line_start[row + 1]))
    n, strength = table.line_n[part], table.line_strength[part]
    if not len(n):
        lattice = LATTICE_TYPES[int(table.lattice[row])]
        n = allowed_n(lattice, top)
        strength = np.array([multiplicity(lattice, int(value)) for value in n]) * np.exp(
            -n / (n[len(n) // 3] + 1.0)
        )
        return n, strength
    keep = (n <= top) & (strength > 1e-4 * strength.max())
    return n[keep], strength[keep]
