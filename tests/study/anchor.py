"""The zero error, displacement and drifts that suit one reading of a list best, by least squares with priors.

Zero, displacement and lattice constants are nearly collinear: what one entry reads as a shift, another reads
as its own lattice constant. Two entries can be told apart only as far as their priors and the other phases
allow.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from phasedb.crystal.phases import DRIFT_CLASSES, PhaseTable
from study.evidence import View
from study.truth import Case, FloatArray, TruePhase

ZERO_SCALE_DEG = 0.05
DISPLACEMENT_SCALE_MM = 0.08
FREEDOM = 3.0
"""Priors of the shift: Student's t, as the design states them for real instruments."""

DRIFT_SCALE = {"line compound": 2e-4, "alloy": 1.5e-3, "solid solution": 3e-3}
ROUNDS = 4


@dataclass(frozen=True, slots=True)
class Anchor:
    """A shift (departure from the true one at each line, degrees) and the lattice constants with it."""

    shift_deg: FloatArray
    log_prior: float
    a_angstrom: float
    rest_rows: tuple[int, ...]
    rest_a_angstrom: tuple[float, ...]


def still(view: View, rest_rows: list[int], rest_a: list[float]) -> Anchor:
    """Return the anchor at the true shift and the true lattice constants of the other phases."""
    setting = view.setting
    prior = _log_t(setting.zero_deg, ZERO_SCALE_DEG) + _log_t(setting.displacement_mm, DISPLACEMENT_SCALE_MM)
    return Anchor(np.zeros(len(view.x)), prior, float("nan"), tuple(rest_rows), tuple(rest_a))


def anchor(
    view: View,
    case: Case,
    table: PhaseTable,
    phase: TruePhase,
    rest: list[tuple[int, TruePhase]],
    row: int,
    centre: float,
) -> Anchor:
    """Return the most probable shift and drifts if entry `row` stands in the phase's place near a = `centre`.

    Unknowns: departures of zero (degrees) and displacement (mm) from the true ones, and the drift of the
    entry and of each other phase. The lines of a phase ask that its lattice constant and the shift make up
    for each other; the priors (heavy-tailed, by reweighting) decide between them.
    """
    setting = view.setting
    along = -np.degrees(2.0 / setting.radius_mm) * np.cos(np.radians(view.x) / 2.0)
    members = [(row, centre, phase), *((number, one.a_true, one) for number, one in rest)]
    size = 2 + len(members)
    targets = np.zeros(size)  # prior means of the unknowns
    scales = np.zeros(size)
    targets[:2] = -setting.zero_deg, -setting.displacement_mm
    scales[:2] = ZERO_SCALE_DEG, DISPLACEMENT_SCALE_MM
    normal = np.zeros((size, size))
    for order, (number, a, one) in enumerate(members):
        # unknown: relative change of a from `a`; the stored value is where its prior sits
        targets[2 + order] = table.a_angstrom[number] / a - 1.0
        scales[2 + order] = _drift_scale(table, number)
        owned = np.array([one.name in owner for owner in case.truth.owners])
        rows = np.zeros((int(owned.sum()), size))
        rows[:, 0], rows[:, 1], rows[:, 2 + order] = 1.0, along[owned], -view.slope[owned]
        rows /= view.sigma[owned, None]
        normal += rows.T @ rows
    solution = targets.copy()
    for _ in range(ROUNDS):
        weights = (FREEDOM + 1.0) / (FREEDOM * scales**2 + (solution - targets) ** 2)
        solution = np.linalg.solve(normal + np.diag(weights), weights * targets)
    prior = _log_t(float(solution[0] - targets[0]), ZERO_SCALE_DEG)
    prior += _log_t(float(solution[1] - targets[1]), DISPLACEMENT_SCALE_MM)
    return Anchor(
        shift_deg=solution[0] + solution[1] * along,
        log_prior=prior,
        a_angstrom=centre * (1.0 + float(solution[2])),
        rest_rows=tuple(number for number, _ in rest),
        rest_a_angstrom=tuple(
            one.a_true * (1.0 + float(change)) for (_, one), change in zip(rest, solution[3:], strict=True)
        ),
    )


def _drift_scale(table: PhaseTable, row: int) -> float:
    low, high = table.a_low_angstrom[row], table.a_high_angstrom[row]
    if np.isfinite(low) and np.isfinite(high):
        return max(float(high - low) / (3.0 * float(table.a_angstrom[row])), 3e-4)
    return DRIFT_SCALE[DRIFT_CLASSES[int(table.drift[row])]]


def _log_t(value: float, scale: float) -> float:
    """Return the log density of Student's t, up to a constant."""
    return -0.5 * (FREEDOM + 1.0) * float(np.log1p((value / scale) ** 2 / FREEDOM))
