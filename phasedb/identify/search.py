"""The search for sets of phases: votes propose, evidence decides, sets grow from the best ones."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.lattice import LATTICE_TYPES
from phasedb.identify import zones
from phasedb.identify.archetypes import archetypes
from phasedb.identify.axis import KIND_LINE, Axis
from phasedb.identify.curve import A_LARGEST, A_SMALLEST, Cell, Curve, peaks_of, vote
from phasedb.identify.entries import Entries
from phasedb.identify.likelihood import (
    DETECTION_SLOPE,
    FAR,
    SHIFT_TAIL,
    Evaluated,
    Pool,
    empty_log_likelihood,
    evaluate,
    ln_floor,
    log_student,
)
from phasedb.identify.lines import LineTable, make_lines, stack
from phasedb.identify.result import AxisCurve
from phasedb.identify.strongest import Strongest, screen, strongest_lines
from phasedb.identify.zones import ZONES, zone_pattern

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

EXPECTED_UNLISTED: Final = 0.3  # cubic phases expected that the library lacks
UNLISTED_LATTICE: Final = {"P": 0.27, "I": 0.23, "F": 0.50}  # roughly as in the starter library
LN_A_SPAN: Final = float(np.log(A_LARGEST) - np.log(A_SMALLEST))

N_SINGLE: Final = 70  # proposals evaluated as first phase
N_NEXT: Final = 24  # proposals evaluated as a further phase
N_BY_STRONGEST: Final = 10  # further ones, whose strongest lines are in the list
N_UNLISTED: Final = 5  # places of each lattice type evaluated as unlisted
N_ZONES: Final = 3  # places of each kind of non-cubic zone
MOST_ZONES: Final = 2  # in one set
N_PATTERNS: Final = 5  # line patterns tried for each of them
NOTHING_LEFT: Final = 0.6  # lines unexplained below which a set is not grown
N_PARENTS: Final = 4
N_FINAL: Final = 4  # sets whose members are exchanged one by one at the end
ISOTYPIC_WEIGHT: Final = 0.3  # of the patterns of an unlisted phase: those of entries near its a
ISOTYPIC_REACH: Final = 0.05  # ln a
MOST_ISOTYPIC: Final = 6
ISOTYPIC_SCATTER: Final = 1.0
PATTERN_SCATTER: Final = 1.35  # heights of an assumed line pattern scatter this much more (tuned)
SAME_PLACE: Final = 3e-3  # ln a: candidates of one lattice type closer than this claim the same lines
FAR_BELOW_FIRST: Final = 60.0  # votes (nats) below the best proposal that are not worth an evaluation
FAR_BELOW: Final = 20.0
# nats in the rough evidence below the best, beyond which a set is not fitted to the end
MARGIN_SINGLE: Final = 40.0
MARGIN_NEXT: Final = 20.0
MARGIN_FINAL: Final = 14.0
HOPELESS: Final = 9.0  # sets this far (nats) below the best are not grown
STARTS: Final = 2

UNLISTED: Final = -1
ZONE: Final = -2

Key = tuple[int, ...]


@dataclass(frozen=True, slots=True)
class Fitted:
    """One evaluated set: its row in a batch of evaluations."""

    key: Key
    log_evidence: float
    batch: Evaluated
    row: int
    members: tuple[int, ...]  # in the batch's member order

    @property
    def phi(self) -> FloatArray:
        return np.asarray(self.batch.phi[self.row])

    @property
    def shift_terms(self) -> tuple[float, float, float]:
        zero, displacement, doublet = self.phi.tolist()
        return zero, displacement, doublet

    @property
    def ln_a(self) -> FloatArray:
        return np.asarray(self.batch.ln_a[self.row])

    @property
    def ln_sigma(self) -> float:
        return float(self.batch.ln_sigma[self.row])


@dataclass(frozen=True, slots=True)
class Start:
    """Where the fit of a set begins."""

    members: tuple[int, ...]
    phi: tuple[float, float, float]
    ln_a: tuple[float, ...]
    ln_sigma: float


@dataclass(frozen=True, slots=True)
class Pattern:
    """A line pattern of an unlisted phase: its prior weight, and how much its heights scatter."""

    n: NDArray[np.integer]
    strength: FloatArray
    ln_weight: float
    scatter: float


class Candidates:
    """The growing pool: listed entries by index, unlisted phases by place and pattern."""

    def __init__(self, axis: Axis, entries: Entries, expected_unlisted: float) -> None:
        self.axis = axis
        self.expected_unlisted = expected_unlisted
        self.entries = entries
        self._tables: list[LineTable] = []
        self._stacked: Pool | None = None
        self._columns: list[tuple[float, float, float, float, float, float, float, bool]] = []
        self.entry_of: list[int] = []  # UNLISTED and ZONE for what is not in the library
        self.lattice_of: list[int] = []
        self.pattern_of: list[int] = []  # which line pattern an unlisted phase is given
        self.unlisted_pattern: dict[int, Pattern] = {}  # the same, by pool number
        self._of_entry: dict[int, int] = {}
        self._of_place: dict[tuple[int, int], list[int]] = {}

    def add_entries(self, indices: Iterable[int]) -> list[int]:
        """Return pool numbers of listed entries, making their lines if they are new."""
        wanted = list(indices)
        new = [index for index in dict.fromkeys(wanted) if index not in self._of_entry]
        if new:
            e = self.entries
            rows = np.array(new)
            own = [self._pattern_of_entry(index) for index in new]
            self._tables.append(make_lines(self.axis, e.ln_a[rows], [(one.n, one.strength) for one in own]))
            for index, pattern in zip(new, own, strict=True):
                self._append_entry(index, pattern)
            self._stacked = None
        return [self._of_entry[index] for index in wanted]

    def add_unlisted(self, lattice: int, ln_a: float, cell: Cell) -> list[int]:
        """Return pool numbers of an unlisted phase at a place, one for each of the likeliest line
        patterns.
        """
        place = (lattice, round(ln_a / SAME_PLACE))
        if place not in self._of_place:
            name = LATTICE_TYPES[lattice]
            patterns = self._patterns(lattice, ln_a)
            table = make_lines(
                self.axis, np.full(len(patterns), ln_a), [(one.n, one.strength) for one in patterns]
            )
            rows = self._likeliest_patterns(table, ln_a, cell, [one.ln_weight for one in patterns])
            self._tables.append(table.take(rows))
            density = np.log(self.expected_unlisted * UNLISTED_LATTICE[name] / LN_A_SPAN)
            numbers = []
            for row in rows.tolist():
                numbers.append(len(self._columns))
                self._columns.append(
                    (
                        ln_a,
                        0.0,
                        1.0,
                        ln_a,
                        ln_a,
                        density + patterns[row].ln_weight,
                        patterns[row].scatter,
                        True,
                    )
                )
                self.entry_of.append(-1)
                self.lattice_of.append(lattice)
                self.unlisted_pattern[len(self.pattern_of)] = patterns[row]
                self.pattern_of.append(row)
            self._of_place[place] = numbers
            self._stacked = None
        return self._of_place[place]

    def number_of(self, index: int) -> int | None:
        """Return the pool number of an entry, or None if it is not in the pool."""
        return self._of_entry.get(index)

    def inform_entry(self, index: int, double: int) -> int:
        """Put an entry without a structure in the pool anew, with the line pattern of an unlisted phase."""
        pattern = self.unlisted_pattern[double]
        ln_a = self.entries.ln_a[[index]]
        self._tables.append(make_lines(self.axis, ln_a, [(pattern.n, pattern.strength)]))
        self._append_entry(index, pattern)
        self._stacked = None
        return self._of_entry[index]

    def _append_entry(self, index: int, pattern: Pattern) -> None:
        e = self.entries
        self._of_entry[index] = len(self._columns)
        self._columns.append(
            (
                float(e.ln_a[index]),
                float(e.drift_scale[index]),
                float(e.largest_drift[index]),
                float(e.ln_a_low[index]),
                float(e.ln_a_high[index]),
                float(e.ln_odds[index]) + pattern.ln_weight,
                pattern.scatter,
                False,
            )
        )
        self.entry_of.append(index)
        self.lattice_of.append(int(e.lattice[index]))
        self.pattern_of.append(-1)

    def _pattern_of_entry(self, index: int) -> Pattern:
        scatter = 1.0 if self.entries.has_structure(index) else PATTERN_SCATTER
        return Pattern(*self.entries.pattern(index), 0.0, scatter)

    def add_zone(self, zone: int, ln_a: float) -> int:
        """Return the pool number of a zone of a non-cubic lattice at a place."""
        row = len(LATTICE_TYPES) + zone
        place = (row, round(ln_a / SAME_PLACE))
        if place not in self._of_place:
            self._tables.append(make_lines(self.axis, np.array([ln_a]), [zone_pattern(ZONES[zone])]))
            density = float(np.log(zones.EXPECTED / np.log(zones.A_LARGEST / zones.A_SMALLEST)))
            self._of_place[place] = [len(self._columns)]
            self._columns.append((ln_a, 0.0, 1.0, ln_a, ln_a, density, zones.SCATTER, True))
            self.entry_of.append(ZONE)
            self.lattice_of.append(row)
            self.pattern_of.append(-1)
            self._stacked = None
        return self._of_place[place][0]

    def is_unlisted(self, member: int) -> bool:
        return self.entry_of[member] == UNLISTED

    def is_zone(self, member: int) -> bool:
        return self.entry_of[member] == ZONE

    def _patterns(self, lattice: int, ln_a: float) -> list[Pattern]:
        """Return the line patterns that an unlisted phase may have: archetypes, and those of entries
        nearby.
        """
        name = LATTICE_TYPES[lattice]
        typical = archetypes(name, float(np.exp(ln_a)))
        near = self._isotypic(lattice, ln_a)
        if not near:
            return [Pattern(one.n, one.strength, weight, PATTERN_SCATTER) for weight, one in typical]
        kept = float(np.log1p(-ISOTYPIC_WEIGHT))
        each = float(np.log(ISOTYPIC_WEIGHT / len(near)))
        patterns = [Pattern(one.n, one.strength, kept + weight, PATTERN_SCATTER) for weight, one in typical]
        return [*patterns, *(Pattern(*self.entries.pattern(index), each, ISOTYPIC_SCATTER) for index in near)]

    def _isotypic(self, lattice: int, ln_a: float) -> list[int]:
        """Return the nearest entry of each structure type near a place: a new phase is often like its
        neighbours.
        """
        entries = self.entries
        gap = np.abs(entries.ln_a - ln_a)
        near = np.flatnonzero((entries.lattice == lattice) & (gap < ISOTYPIC_REACH))
        found: dict[str, int] = {}
        for index in near[np.argsort(gap[near], kind="stable")].tolist():
            kind = entries.table.structure_type[int(entries.rows[index])]
            if entries.has_structure(index) and kind not in found:
                found[kind] = index
        return list(found.values())[:MOST_ISOTYPIC]

    def _likeliest_patterns(
        self, table: LineTable, ln_a: float, cell: Cell, ln_weights: list[float]
    ) -> IntArray:
        """Return the rows of the patterns whose seen and unseen lines suit the list best."""
        axis = self.axis
        if len(ln_weights) <= N_PATTERNS:
            return np.arange(len(ln_weights))
        true = np.nan_to_num(axis.positions(table.half_ln_n, np.array(ln_a)), nan=FAR)
        safe = np.minimum(true, 179.9) if axis.is_angle else true
        x = true + axis.shift(safe, np.array(cell.phi))
        plain = (table.kind == KIND_LINE) & (x >= axis.low) & (x <= axis.high)
        sigma = np.hypot(cell.sigma, float(np.median(axis.extra_noise)))
        gap = np.abs(x[:, :, None] - axis.x).min(axis=2)
        seen = gap < 2.5 * sigma + 1e-3 * np.abs(axis.slope(safe))
        best = np.full(len(ln_weights), -np.inf)
        for ln_share in (0.0, -1.5, -3.0):
            ratio = DETECTION_SLOPE * (table.ln_height + ln_share - ln_floor(axis))
            p = 0.97 / (1.0 + np.exp(np.clip(-ratio, -40.0, 40.0)))
            value = np.where(seen, np.log(np.maximum(p, 0.02)), np.log1p(-p))
            best = np.maximum(best, np.where(plain, value, 0.0).sum(axis=1))
        order = np.argsort(-(best + np.array(ln_weights)), kind="stable")
        return np.sort(order[:N_PATTERNS])

    @property
    def pool(self) -> Pool:
        """The candidates as columns."""
        if self._stacked is None:
            lines = stack(self._tables)
            self._tables = [lines]
            columns = np.array([column[:7] for column in self._columns])
            ln_a, scale, largest, low, high, odds, height = columns.T
            unlisted = np.array([column[7] for column in self._columns], dtype=bool)
            self._stacked = Pool(lines, ln_a, scale, largest, low, high, odds, unlisted, height)
        return self._stacked


class Search:
    """One search over sets of phases for one list."""

    def __init__(
        self,
        axis: Axis,
        entries: Entries,
        most_phases: int,
        *,
        always: tuple[int, ...] = (),
        places_of_each_lattice: int = N_UNLISTED,
        expected_unlisted: float = EXPECTED_UNLISTED,
        zones_of_each_kind: int = N_ZONES,
    ) -> None:
        self.axis = axis
        self.entries = entries
        self.candidates = Candidates(axis, entries, expected_unlisted)
        self.n_places = places_of_each_lattice
        self.n_zones = zones_of_each_kind
        self.most_phases = most_phases
        self.always = tuple(self.candidates.add_entries(always))
        self.empty = empty_log_likelihood(axis)
        self.found: dict[Key, Fitted] = {}
        self.first_curves: list[Curve] = []
        self._strongest: Strongest | None = None
        self._proposals: dict[Key, list[tuple[float, Start]]] = {}

    # -- proposals -------------------------------------------------------------------------------

    def _first_cells(self) -> list[Cell]:
        axis = self.axis
        cells = []
        scale = float(axis.shift_scale[0])
        reach = 7.0 * scale
        typical = float(np.median(axis.extra_noise))
        for level in (1.0, 3.0, 9.0):
            sigma = axis.noise_center * level
            if level < 9.0 and typical > 2.0 * sigma:
                continue
            width = np.hypot(sigma, typical)
            count = int(np.ceil(reach / (1.6 * width)))
            for step in range(-count, count + 1):
                shift = reach * step / max(count, 1)
                noise = np.log(level) / axis.noise_spread
                prior = -0.5 * noise**2 + float(
                    log_student(np.array(shift), np.array(1.3 * scale), SHIFT_TAIL)
                    - log_student(np.array(0.0), np.array(1.3 * scale), SHIFT_TAIL)
                )
                cells.append(Cell(self._split_shift(shift), float(sigma), float(prior)))
        return cells

    def _split_shift(self, shift: float) -> tuple[float, float, float]:
        """Return shift terms of which zero and displacement make half of a shift at low angle each."""
        mean = self.axis.shift_mean
        if not self.axis.is_angle:
            return float(mean[0] + shift), 0.0, 0.0
        per_mm = float(self.axis.displacement_basis(np.array([0.0]))[0])
        return float(mean[0] + 0.5 * shift), float(mean[1] + 0.5 * shift / per_mm), float(mean[2])

    def _cells_beside(self, parent: Fitted) -> list[Cell]:
        sigma = float(np.exp(parent.ln_sigma))
        z, s, doublet = parent.shift_terms
        wide = float(np.sqrt(parent.batch.covariance[parent.row, 0, 0]))
        nudge = min(max(wide, sigma), 2.0 * float(self.axis.shift_scale[0]))
        return [
            Cell((z, s, doublet), sigma, 0.0),
            Cell((z, s, doublet), 2.5 * sigma, -0.5),
            Cell((z + nudge, s, doublet), sigma, -0.5),
            Cell((z - nudge, s, doublet), sigma, -0.5),
        ]

    def _propose(self, key: Key, n_listed: int) -> list[tuple[float, Start]]:
        """Return the best candidates beside a set, as (score, start), best first."""
        if key in self._proposals:
            return self._proposals[key]
        axis = self.axis
        parent = self.found.get(key)
        if parent is None:
            base = np.full(len(axis.x), max(1.0, len(axis.x) / 5.0) / axis.span)
            explained = np.zeros(len(axis.x))
            cells = self._first_cells()
        else:
            explained = 1.0 - parent.batch.background[parent.row]
            base = parent.batch.base[parent.row]
            cells = self._cells_beside(parent)
        curves = [vote(axis, cell, base, explained) for cell in cells]
        if parent is None:
            self.first_curves = curves
        known: tuple[int, ...] = parent.members if parent is not None else ()
        known_ln_a = tuple(float(value) for value in parent.ln_a) if parent is not None else ()
        result: list[tuple[float, Start]] = []
        scores, places, which_cell = self._screen(curves)
        unlisted: list[tuple[float, Start]] = []
        n_unlisted = sum(self.candidates.is_unlisted(member) for member in known)
        result += self._propose_zones(curves, known, known_ln_a)
        if n_unlisted < 2:
            for lattice in range(3):
                for score, ln_a, cell in peaks_of(curves, lattice, most=self.n_places, separation=SAME_PLACE):
                    near = [
                        member
                        for member, value in zip(known, known_ln_a, strict=True)
                        if self.candidates.lattice_of[member] == lattice and abs(value - ln_a) < SAME_PLACE
                    ]
                    if near:
                        continue
                    for number in self.candidates.add_unlisted(lattice, ln_a, cell):
                        start = Start(
                            (*known, number), cell.phi, (*known_ln_a, ln_a), float(np.log(cell.sigma))
                        )
                        unlisted.append((score, start))
        taken = {self.candidates.entry_of[member] for member in known}
        best = scores.max(axis=0)
        order = [int(i) for i in np.argsort(-best, kind="stable") if int(i) not in taken][:n_listed]
        order = [index for index in order if np.isfinite(best[index])]
        numbers = self.candidates.add_entries(order)
        for index, number in zip(order, numbers, strict=True):
            ranked = np.argsort(-scores[:, index], kind="stable")
            used: list[Cell] = []
            for which in ranked:
                cell = curves[which_cell[which, index]].cell
                if scores[which, index] < best[index] - 4.0 or len(used) == STARTS:
                    break
                used.append(cell)
                start = Start(
                    (*known, number),
                    cell.phi,
                    (*known_ln_a, float(places[which, index])),
                    float(np.log(cell.sigma)),
                )
                result.append((float(scores[which, index]), start))
        result += self._propose_by_strongest(cells, base, explained, (known, known_ln_a), {*taken, *order})
        result += unlisted
        top = max((score for score, _ in result), default=0.0)
        floor = top - (FAR_BELOW_FIRST if parent is None else FAR_BELOW)
        self._proposals[key] = [item for item in result if item[0] > floor]
        return self._proposals[key]

    def _propose_by_strongest(
        self,
        cells: list[Cell],
        base: FloatArray,
        explained: FloatArray,
        known: tuple[tuple[int, ...], tuple[float, ...]],
        done: set[int],
    ) -> list[tuple[float, Start]]:
        """Return entries whose own strongest lines are in the list, beyond those proposed by votes."""
        if len(self.entries) == 0:
            return []
        if self._strongest is None:
            self._strongest = strongest_lines(self.axis, self.entries)
        scores = np.array(
            [
                screen(self.axis, self.entries, self._strongest, cell, base, explained) + cell.ln_prior
                for cell in cells
            ]
        )
        best = scores.max(axis=0)
        order = [int(i) for i in np.argsort(-best, kind="stable")[: N_BY_STRONGEST + len(done)]]
        chosen = [i for i in order if i not in done and best[i] > 0.0][:N_BY_STRONGEST]
        found = []
        for index, number in zip(chosen, self.candidates.add_entries(chosen), strict=True):
            cell = cells[int(scores[:, index].argmax())]
            ln_a = float(self.entries.ln_a[index])
            start = Start((*known[0], number), cell.phi, (*known[1], ln_a), float(np.log(cell.sigma)))
            found.append((float(best[index]), start))
        return found

    def _propose_zones(
        self, curves: list[Curve], known: tuple[int, ...], known_ln_a: tuple[float, ...]
    ) -> list[tuple[float, Start]]:
        if self.n_zones == 0 or sum(self.candidates.is_zone(member) for member in known) >= MOST_ZONES:
            return []
        found = []
        low, high = np.log(zones.A_SMALLEST), np.log(zones.A_LARGEST)
        for zone in range(len(ZONES)):
            row = len(LATTICE_TYPES) + zone
            for score, ln_a, cell in peaks_of(curves, row, most=self.n_zones, separation=SAME_PLACE):
                if not low < ln_a < high:
                    continue
                number = self.candidates.add_zone(zone, ln_a)
                start = Start((*known, number), cell.phi, (*known_ln_a, ln_a), float(np.log(cell.sigma)))
                found.append((score, start))
        return found

    def _screen(self, curves: list[Curve]) -> tuple[FloatArray, FloatArray, IntArray]:
        """Return the best score of each entry in each group of cells, its ln a, and the cell.

        Cells are grouped by noise level, so that a start is kept for a sharp and for a rough reading.
        """
        entries = self.entries
        levels = sorted({round(float(np.log(curve.cell.sigma)), 6) for curve in curves})
        scores = np.full((len(levels), len(entries)), -np.inf)
        places = np.zeros((len(levels), len(entries)))
        which = np.zeros((len(levels), len(entries)), dtype=np.int64)
        for number, curve in enumerate(curves):
            level = levels.index(round(float(np.log(curve.cell.sigma)), 6))
            best, ln_a = self._best_in_window(curve)
            better = best + curve.cell.ln_prior > scores[level]
            scores[level] = np.where(better, best + curve.cell.ln_prior, scores[level])
            places[level] = np.where(better, ln_a, places[level])
            which[level] = np.where(better, number, which[level])
        return scores, places, which

    def _best_in_window(self, curve: Curve) -> tuple[FloatArray, FloatArray]:
        entries = self.entries
        best = np.full(len(entries), -np.inf)
        place = entries.ln_a.copy()
        reach = 5.0 * entries.drift_scale + 0.5 * (entries.ln_a_high - entries.ln_a_low)
        middle = 0.5 * (entries.ln_a_high + entries.ln_a_low)
        size = np.ceil(np.minimum(reach, 0.04) / curve.step).astype(np.int64)
        for count in np.unique(size):
            rows = np.flatnonzero(size == count)
            offset = curve.step * np.arange(-count, count + 1)
            ln_a = middle[rows, None] + offset
            drift = ln_a - np.clip(ln_a, entries.ln_a_low[rows, None], entries.ln_a_high[rows, None])
            scale = entries.drift_scale[rows, None]
            prior = -2.0 * np.log1p((drift / scale) ** 2 / 3.0)
            value = curve.at(entries.lattice[rows, None], ln_a) + prior
            column = value.argmax(axis=1)
            best[rows] = value[np.arange(len(rows)), column]
            place[rows] = ln_a[np.arange(len(rows)), column]
        return best, place

    # -- evaluation ------------------------------------------------------------------------------

    def _evaluate(
        self, starts: Iterable[Start], margin: float, *, beside: Iterable[Start] = ()
    ) -> list[Fitted]:
        """Evaluate new sets (several starts of one set compete) and remember them.

        `beside` are known sets that the margin is also judged by.
        """
        by_size: dict[int, list[Start]] = {}
        for start in starts:
            if tuple(sorted(start.members)) not in self.found:
                by_size.setdefault(len(start.members), []).append(start)
        for start in beside:
            by_size.setdefault(len(start.members), []).append(start)
        fresh: dict[Key, Fitted] = {}
        for group in by_size.values():
            batch, kept = evaluate(
                self.axis,
                self.candidates.pool,
                np.array([start.members for start in group]),
                np.array([start.phi for start in group]),
                np.array([start.ln_a for start in group]),
                np.array([start.ln_sigma for start in group]),
                margin=margin,
            )
            for row, number in enumerate(kept.tolist()):
                start = group[number]
                evidence = float(batch.log_evidence[row])
                key = tuple(sorted(start.members))
                if not np.isfinite(evidence) or self._collides(start.members, batch.ln_a[row]):
                    continue
                if key not in fresh or evidence > fresh[key].log_evidence:
                    fresh[key] = Fitted(key, evidence, batch, row, start.members)
        self.found.update(fresh)
        return list(fresh.values())

    def _collides(self, members: tuple[int, ...], ln_a: FloatArray) -> bool:
        """Return whether an unlisted member sits where another member of its lattice type does."""
        for i, first in enumerate(members):
            for j in range(i + 1, len(members)):
                second = members[j]
                unlisted = self.candidates.entry_of[first] < 0 or self.candidates.entry_of[second] < 0
                same = self.candidates.lattice_of[first] == self.candidates.lattice_of[second]
                if unlisted and same and abs(float(ln_a[i] - ln_a[j])) < SAME_PLACE:
                    return True
        return False

    def _distinct(self, sets: Iterable[Fitted], most: int, floor: float) -> list[Fitted]:
        """Return the best sets that differ in more than the name of a look-alike."""
        chosen: list[Fitted] = []
        for item in sorted(sets, key=lambda fit: (-fit.log_evidence, fit.key)):
            if item.log_evidence < floor:
                break
            if not any(self._same_modes(item, other) for other in chosen):
                chosen.append(item)
            if len(chosen) == most:
                break
        return chosen

    def _same_modes(self, one: Fitted, other: Fitted) -> bool:
        if len(one.members) != len(other.members):
            return False
        left = sorted(
            (self.candidates.lattice_of[m], float(u)) for m, u in zip(one.members, one.ln_a, strict=True)
        )
        right = sorted(
            (self.candidates.lattice_of[m], float(u)) for m, u in zip(other.members, other.ln_a, strict=True)
        )
        return all(a[0] == b[0] and abs(a[1] - b[1]) < SAME_PLACE for a, b in zip(left, right, strict=True))

    def run(self) -> None:
        """Grow sets level by level, then exchange members of the best ones."""
        level = self._first_level()
        best = max(
            [self.empty, *(fit.log_evidence for fit in level)] if not self.always else [level[0].log_evidence]
        )
        for _ in range(1, self.most_phases):
            parents = [
                fit for fit in self._distinct(level, N_PARENTS, best - HOPELESS) if self._leaves_lines(fit)
            ]
            if not parents:
                break
            starts = [start for parent in parents for _, start in self._propose(parent.key, N_NEXT)]
            level = self._evaluate(starts, MARGIN_NEXT)
            if not level:
                break
            top = max(fit.log_evidence for fit in level)
            if top < best - 6.0:
                break
            best = max(best, top)
        self._exchange(best)

    def _leaves_lines(self, fit: Fitted) -> bool:
        """Return whether a set leaves anything for a further phase to explain."""
        return float(fit.batch.background[fit.row].sum()) > NOTHING_LEFT

    def _first_level(self) -> list[Fitted]:
        starts = [start for _, start in self._propose((), N_SINGLE)]
        if not self.always:
            return self._with_informed_entries(self._evaluate(starts, MARGIN_SINGLE))
        (standard,) = self.always
        own = [start for start in starts if start.members == (standard,)]
        ln_a = float(self.candidates.pool.ln_a[standard])
        own += [
            Start((standard,), cell.phi, (ln_a,), float(np.log(cell.sigma)))
            for cell in (curve.cell for curve in self.first_curves)
        ]
        return self._evaluate(own, MARGIN_SINGLE)

    def _with_informed_entries(self, level: list[Fitted]) -> list[Fitted]:
        """Give entries without a structure the line pattern of the unlisted phase fitted at their place.

        Else such an entry could lose to a double of itself that knows its lines better. The entry is
        evaluated anew, beside the double, and takes the place of its former reading.
        """
        entries, candidates = self.entries, self.candidates
        gone: dict[int, Start] = {}
        doubles = []
        for index in sorted(self._bare_in_pool()):
            old = candidates.number_of(index)
            near = [
                fit
                for fit in level
                if fit.members[0] in candidates.unlisted_pattern
                and candidates.lattice_of[fit.members[0]] == int(entries.lattice[index])
                and abs(float(fit.ln_a[0]) - float(entries.ln_a[index])) < float(entries.largest_drift[index])
            ]
            if not near:
                continue
            double = max(near, key=lambda fit: (fit.log_evidence, fit.key))
            number = candidates.inform_entry(index, double.members[0])
            place = (double.shift_terms, (float(double.ln_a[0]),), float(double.ln_sigma))
            if old is not None:
                gone[old] = Start((number,), *place)
            doubles.append(Start(double.members, *place))
        if not gone:
            return level
        for number in gone:
            self.found.pop((number,), None)
        proposed = self._proposals[()]
        self._proposals[()] = [
            (score, gone.get(start.members[0], start) if len(start.members) == 1 else start)
            for score, start in proposed
        ]
        informed = self._evaluate(gone.values(), MARGIN_SINGLE, beside=doubles)
        kept = [fit for fit in level if fit.members[0] not in gone]
        known = {fit.key for fit in kept}
        return [*kept, *(fit for fit in informed if fit.key not in known)]

    def _bare_in_pool(self) -> set[int]:
        return {
            index
            for index in self.candidates.entry_of
            if index >= 0 and not self.entries.has_structure(index)
        }

    def _exchange(self, best: float) -> None:
        """Try every other candidate in each place of the best sets: look-alikes must all be weighed."""
        for fit in self._distinct(self.found.values(), N_FINAL, best - 5.0):
            if len(fit.members) < 2:
                continue
            starts = []
            for place in range(len(fit.members)):
                if fit.members[place] in self.always:
                    continue
                rest = tuple(sorted(fit.members[:place] + fit.members[place + 1 :]))
                if rest not in self.found:
                    continue
                starts += [start for _, start in self._propose(rest, N_NEXT)]
            self._evaluate(starts, MARGIN_FINAL)

    def axis_curves(self, points: int = 1600) -> tuple[AxisCurve, ...]:
        """Return the first votes, the best over shift and noise, thinned for a figure."""
        curves = self.first_curves
        if not curves:
            return ()
        start = min(curve.start for curve in curves)
        stop = max(curve.start + curve.step * (curve.values.shape[1] - 1) for curve in curves)
        places = np.linspace(start, stop, points)
        width = places[1] - places[0]
        made = []
        for row, lattice in enumerate(LATTICE_TYPES):
            top = np.full(points, -np.inf)
            for curve in curves:
                grid = curve.start + curve.step * np.arange(curve.values.shape[1])
                index = np.clip(np.rint((grid - start) / width).astype(np.int64), 0, points - 1)
                np.maximum.at(top, index, curve.values[row] + curve.cell.ln_prior)
            known = np.isfinite(top)
            ln_a = tuple(np.round(places[known], 5).tolist())
            made.append(AxisCurve(lattice, ln_a, tuple(np.round(top[known], 3).tolist())))
        return tuple(made)

    def sets(self) -> Iterator[Fitted]:
        """Yield all evaluated sets."""
        yield from self.found.values()


__all__ = ["Candidates", "Fitted", "Search", "Start"]
