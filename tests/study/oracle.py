"""What the best possible reading of a list could say: the ceiling for naming an entry, and look-alikes.

The oracle (`study.evidence`) puts every entry in the place of one true phase, at the lattice constants that
lay its lines on the true ones, and compares evidence, twice.

* *Ceiling.* Given the true shift, the drift distribution of each class and the other phases with their
  lattice constants: is the true entry first?
* *Look-alikes* are entries whose lines agree with the true ones within the uncertainty, whatever their
  heights (heights only help to choose among them). As for anyone who measures, zero error and displacement
  are unknown (Student's t, scales 0.05 degrees and 0.08 mm), and so is the drift of the other phases: each
  entry is compared at the zero, displacement and drifts that suit it best (`study.anchor`), with what those
  cost. Those within a factor 20 of the true one are its look-alikes.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from phasedb.crystal.phases import PhaseTable
from study.anchor import Anchor, anchor, still
from study.evidence import View, drift_density
from study.truth import Case, FloatArray, TruePhase

LOOK_ALIKE_NATS = float(np.log(20.0))
"""An entry whose evidence is at most this far (natural log) below the true one's cannot be told from it."""

RATIOS = (1.0, 2.0**0.5, 2.0**-0.5, 2.0, 0.5, 3.0**0.5, 3.0**-0.5, 1.5**0.5, 1.5**-0.5)
"""Ratios of lattice constants at which two cells share most lines (common practice, no source)."""

MOST_DRIFT = 0.015

FIT_NATS = 12.0
"""An entry whose lines fit this much worse even at the lattice constant that suits it best is no rival."""


@dataclass(frozen=True, slots=True)
class Verdict:
    """The oracle's reading of one true phase: is it first, and which entries cannot be told from it."""

    is_first: bool
    probability: float
    look_alikes: frozenset[str]


def judge(case: Case, table: PhaseTable, phase: TruePhase) -> Verdict:
    """Return the oracle's verdict on one true phase; `table` holds every entry, the removed ones too."""
    rows = {name: row for row, name in enumerate(table.name)}
    view = View.of(case)
    rest = [other for other in case.truth.phases if other is not phase]
    quiet = still(view, [rows[other.name] for other in rest], [other.a_true for other in rest])
    base = view.base(table, _placed(quiet, rest), quiet.shift_deg)
    bare = replace(view, intensity=None)
    bare_base = bare.base(table, _placed(quiet, rest), quiet.shift_deg)
    entries = [
        (row, a) for row, a in candidates(table, phase) if table.name[row] not in {one.name for one in rest}
    ]
    fits = {row: bare.best_fit(table, row, a, phase.share, bare_base) for row, a in entries}
    known: dict[str, float] = {}
    unknown: dict[str, float] = {}
    for row, a_values in entries:
        if fits[row] < fits[rows[phase.name]] - FIT_NATS:
            continue
        sure = [view.evidence(table, row, a, phase.share, base, quiet.shift_deg) for a in a_values]
        known[table.name[row]] = max(sure)
        cost = quiet.log_prior + sum(
            float(np.log(drift_density(table, rows[one.name], np.array([one.drift]))[0])) for one in rest
        )
        placed = [bare.evidence(table, row, a, phase.share, bare_base, quiet.shift_deg) for a in a_values]
        free = [_read(bare, case, table, phase, rest, row, float(a)) for a in a_values]
        unknown[table.name[row]] = max(max(placed) + cost, *free)
    values = np.array(list(known.values()))
    own, top = known[phase.name], values.max()
    probability = float(np.exp(own - top) / np.sum(np.exp(values - top)))
    least = unknown[phase.name] - LOOK_ALIKE_NATS
    close = frozenset(name for name, value in unknown.items() if name != phase.name and value > least)
    return Verdict(bool(own >= top), probability, close)


def _read(
    view: View,
    case: Case,
    table: PhaseTable,
    phase: TruePhase,
    rest: list[TruePhase],
    row: int,
    centre: float,
) -> float:
    """Return the log evidence of an entry at the shift and drifts that suit it best, with their prior."""
    rows = {name: number for number, name in enumerate(table.name)}
    found = anchor(view, case, table, phase, [(rows[one.name], one) for one in rest], row, centre)
    base = view.base(table, _placed(found, rest), found.shift_deg)
    value = view.evidence(table, row, found.a_angstrom, phase.share, base, found.shift_deg)
    drifts = sum(
        float(np.log(drift_density(table, number, np.array([a / table.a_angstrom[number] - 1.0]))[0]))
        for number, a in zip(found.rest_rows, found.rest_a_angstrom, strict=True)
    )
    return value + found.log_prior + drifts


def _placed(where: Anchor, rest: list[TruePhase]) -> list[tuple[int, float, float]]:
    return [
        (row, a, one.share) for row, a, one in zip(where.rest_rows, where.rest_a_angstrom, rest, strict=True)
    ]


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
