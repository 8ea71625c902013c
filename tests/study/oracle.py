"""What the best possible reading of a list could say: the ceiling for naming an entry, and look-alikes.

The oracle is given the true noise scale, width, floor, shares, the other phases with their true lattice
constants, and the drift distribution of each class. It puts every entry in the place of one true phase, at
the lattice constants that lay its lines on the true ones, and compares evidence, twice. With the true shift
as well: is the true entry first? That is the ceiling for naming it. And with the shift unknown, as for anyone
who measures (a shared shift of Student's t, scale 0.05 degrees): entries within a factor 20 of the true one
are its look-alikes, which this measurement cannot tell apart.
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
"""Ratios of lattice constants at which two cells share most lines (common practice, no source)."""

MOST_DRIFT = 0.015

SHAPE_NATS = 12.0
"""An entry whose lines fit this much worse even at the lattice constant that suits it best is no rival."""

SHIFTS_DEG = np.array([-0.2, -0.12, -0.07, -0.04, -0.02, 0.0, 0.02, 0.04, 0.07, 0.12, 0.2])
"""Departures of the shared shift from the true one that are tried when it is unknown, degrees."""

DRIFT_STEPS = np.linspace(-4.0, 4.0, 21)
SHARE_FACTORS = np.exp(np.array([-0.5, 0.0, 0.5]))


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
    others = [(names[other.name], other.a_true, other.share) for other in rest]
    entries = [
        (row, a) for row, a in candidates(table, phase) if table.name[row] not in {o.name for o in rest}
    ]
    known: dict[str, float] = {}
    unknown: dict[str, float] = {}
    weights = np.log(shift_weights(case.truth))
    bases = [view.base(table, others, shift) for shift in SHIFTS_DEG]
    middle = int(np.flatnonzero(SHIFTS_DEG == 0.0)[0])
    shapes = {row: view.shape(table, row, a_values, phase.share, bases[middle]) for row, a_values in entries}
    least_shape = shapes[names[phase.name]] - SHAPE_NATS
    for row, a_values in entries:
        if shapes[row] < least_shape:
            continue
        values = [
            view.evidence(table, row, a_values, phase.share, base, shift)
            for shift, base in zip(SHIFTS_DEG, bases, strict=True)
        ]
        known[table.name[row]] = values[middle]
        unknown[table.name[row]] = float(np.logaddexp.reduce(np.array(values) + weights))
    values = np.array(list(known.values()))
    own, top = known[phase.name], values.max()
    probability = float(np.exp(own - top) / np.sum(np.exp(values - top)))
    least = unknown[phase.name] - LOOK_ALIKE_NATS
    close = frozenset(name for name, value in unknown.items() if name != phase.name and value > least)
    return Verdict(bool(own >= top), probability, close)


def shift_weights(truth: Truth) -> FloatArray:
    """Return the prior weight of each of `SHIFTS_DEG`: Student's t of the whole shift, by its grid cell."""
    middle = float(np.median(truth.shift_at_lines_deg))
    density = (1.0 + ((middle + SHIFTS_DEG) / 0.05) ** 2 / 3.0) ** -2.0
    weights = density * np.gradient(SHIFTS_DEG)
    return weights / weights.sum()


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

    def base(self, table: PhaseTable, others: list[tuple[int, float, float]], shift: float) -> FloatArray:
        """Return the rate at each line of the other phases of the sample."""
        total = np.zeros(len(self.x))
        for row, a, share in others:
            total += self.rates(table, row, np.array([a]), np.array([share]), shift)[0][0]
        return total

    def rates(
        self, table: PhaseTable, row: int, a: FloatArray, share: FloatArray, shift: float
    ) -> tuple[FloatArray, FloatArray]:
        """Return the rate at each line, (n_trials, n_lines), and the sum of log(1 - p), (n_trials,).

        `shift` is the departure from the true shift that is assumed, in degrees.
        """
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
        offset = (self.x[None, None, :] - shift - angle[:, :, None]) / self.sigma[None, None, :]
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

    def shape(
        self, table: PhaseTable, row: int, a_values: FloatArray, share: float, base: FloatArray
    ) -> float:
        """Return the best log likelihood of entry `row` at the true shift, whatever its drift."""
        steps = np.linspace(-3.0, 3.0, 7) / np.sqrt(0.3 * self.information + 1.0)
        best = -np.inf
        for centre in a_values:
            a = centre * (1.0 + steps)
            rate, missing = self.rates(table, row, a, np.full(len(a), share), 0.0)
            best = max(best, float(np.max(np.log(self.floor + base + rate).sum(axis=1) + missing)))
        return best

    @property
    def floor(self) -> float:
        """Density of lines that nothing explains, 1/degree."""
        return self.background / (self.high - self.low)

    @property
    def slope(self) -> FloatArray:
        """Degrees of 2theta for one unit of -ln a, at each line."""
        return np.degrees(2.0 * np.tan(np.radians(self.x) / 2.0))

    @property
    def information(self) -> float:
        """1 / variance of ln a from all lines."""
        return float(np.sum((self.slope / self.sigma) ** 2))

    def evidence(
        self,
        table: PhaseTable,
        row: int,
        a_values: FloatArray,
        share: float,
        base: FloatArray,
        shift: float,
    ) -> float:
        """Return the log evidence of entry `row` in the phase's place, drift and share integrated out."""
        width = 1.0 / np.sqrt(0.3 * self.information + 1.0)
        # where the fit puts ln a under this shift
        moved = shift * np.sum(self.slope / self.sigma**2) / self.information
        steps = moved + DRIFT_STEPS * width
        total = -np.inf
        for centre in a_values:
            a = np.repeat(centre * (1.0 + steps), len(SHARE_FACTORS))
            w = np.tile(share * SHARE_FACTORS, len(steps))
            rate, missing = self.rates(table, row, a, w, shift)
            fit = np.log(self.floor + base + rate).sum(axis=1) + missing
            prior = np.log(drift_density(table, row, a / table.a_angstrom[row] - 1.0))
            terms = fit + prior + np.log(steps[1] - steps[0])
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
