"""Indexing: lattice type and lattice constant from a list alone, with the alternatives that it cannot
exclude.

The same evidence as the matcher's, over every lattice type and the whole axis of a, with no library.
A perfect cubic index does not prove cubic symmetry: a tetragonal and an orthorhombic cell give the same lines
(Mighell & Santoro 1975; Mighell 2004, J. Res. NIST 109, 569).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np
from numpy.typing import NDArray

from phasedb.crystal.lattice import LATTICE_TYPES, LatticeType, allowed_n
from phasedb.crystal.phases import PhaseTable
from phasedb.crystal.radiation import two_theta_from_d
from phasedb.errors import InputError
from phasedb.identify.axis import KIND_LINE, Axis, make_axis
from phasedb.identify.chance import share_at_least
from phasedb.identify.curve import Cell, vote
from phasedb.identify.entries import prepare
from phasedb.identify.likelihood import N_SHIFT
from phasedb.identify.merit import merit_f, merit_m, possible_lines
from phasedb.identify.result import AxisCurve, Match, MeritF, MeritM
from phasedb.identify.search import SAME_PLACE, Fitted, Search
from phasedb.identify.settings import MatchSettings, ShiftPrior
from phasedb.measured.peaklist import PeakList

FloatArray = NDArray[np.float64]

FEWEST_LINES: Final = 3
MOST_SOLUTIONS: Final = 8
PLACES_OF_EACH_LATTICE: Final = 14
EXPECTED_CUBIC: Final = 1.0  # whoever asks for an index thinks that there is one cubic phase
NOT_PROOF: Final = (
    "a cubic index does not prove cubic symmetry: a tetragonal and an orthorhombic cell give the same lines"
)
NOT_CUBIC: Final = "not cubic, or not one cubic phase"


@dataclass(frozen=True, slots=True)
class Alternative:
    """A cell that explains the same lines, and the first line (if any in reach) that would decide."""

    lattice_type: LatticeType
    a_angstrom: float
    deciding_line_two_theta_deg: float | None
    deciding_line_d_angstrom: float | None


@dataclass(frozen=True, slots=True)
class Solution:
    """One way to index the list."""

    lattice_type: LatticeType
    a_angstrom: float
    a_esd_angstrom: float
    probability: float
    merit_f: MeritF | None
    merit_m: MeritM | None
    lines_indexed: int
    expected_by_chance: float
    ambiguous_with: tuple[Alternative, ...]
    n: tuple[int, ...]  # of each line in the list's order, 0 where it is not indexed


@dataclass(frozen=True, slots=True)
class IndexResult:
    """Solutions by probability, the probability that no single cubic phase explains the list, remarks."""

    solutions: tuple[Solution, ...]
    nothing_cubic: float
    line_count: int
    cautions: tuple[str, ...]
    axis: tuple[AxisCurve, ...] = ()


def left_over(peaks: PeakList, match: Match) -> PeakList:
    """Return the lines that no listed phase of a match claims (probability of being left above one half).

    Raises
    ------
    InputError
        If nothing is left.
    """
    listed = {phase.name for phase in match.phases}
    keep = []
    for row, line in enumerate(match.ledger):
        by_listed = sum(c.probability for c in line.claims if c.name in listed or c.kind == "foreign")
        if by_listed <= 0.5:
            keep.append(row)
    if not keep:
        raise InputError("the listed phases claim every line: nothing is left to index")
    from phasedb.identify.foreign import keep_lines

    return keep_lines(peaks, np.array(keep, dtype=np.int64))


def index_lines(peaks: PeakList, *, shift_prior: ShiftPrior | None = None) -> IndexResult:
    """Return the cubic cells that explain a list, by probability.

    Raises
    ------
    InputError
        For a list of fewer than three lines.
    """
    if len(peaks) < FEWEST_LINES:
        raise InputError(
            f"{len(peaks)} line{'s' if len(peaks) != 1 else ''}: an index needs at least {FEWEST_LINES}",
            where=peaks.source,
            hint="measure a wider range; one or two lines fit a cell of any size",
        )
    axis = make_axis(peaks, shift_prior or ShiftPrior())
    entries = prepare(PhaseTable.from_phases([]), MatchSettings(), peaks.temperature_k)
    search = Search(
        axis,
        entries,
        1,
        places_of_each_lattice=PLACES_OF_EACH_LATTICE,
        expected_unlisted=EXPECTED_CUBIC,
        zones_of_each_kind=0,
    )
    search.run()
    fits = sorted(search.sets(), key=lambda fit: (-fit.log_evidence, fit.key))
    clusters: list[tuple[int, float, list[Fitted]]] = []
    for fit in fits:
        lattice = search.candidates.lattice_of[fit.members[0]]
        ln_a = float(fit.ln_a[0])
        for known in clusters:
            if known[0] == lattice and abs(known[1] - ln_a) < SAME_PLACE:
                known[2].append(fit)
                break
        else:
            clusters.append((lattice, ln_a, [fit]))
    values = [_cluster_evidence(search, members) for _, _, members in clusters]
    total = float(np.logaddexp.reduce([search.empty, *values]))
    order = sorted(range(len(clusters)), key=lambda i: (-values[i], clusters[i][0], clusters[i][1]))
    solutions = tuple(
        _solution(axis, search, clusters[i][2][0], float(np.exp(values[i] - total)))
        for i in order[:MOST_SOLUTIONS]
        if values[i] - total > np.log(1e-4) or i == order[0]
    )
    nothing = float(np.exp(search.empty - total))
    return IndexResult(
        solutions, nothing, len(peaks), _cautions(peaks, solutions, nothing), search.axis_curves()
    )


def _cluster_evidence(search: Search, fits: list[Fitted]) -> float:
    """Add the evidence of the line patterns of one place (doubles of a pattern count once)."""
    best: dict[int, float] = {}
    for fit in fits:
        pattern = search.candidates.pattern_of[fit.members[0]]
        best[pattern] = max(best.get(pattern, -np.inf), fit.log_evidence)
    return float(np.logaddexp.reduce(list(best.values())))


def _solution(axis: Axis, search: Search, fit: Fitted, probability: float) -> Solution:
    lattice_row = search.candidates.lattice_of[fit.members[0]]
    lattice = LATTICE_TYPES[lattice_row]
    ln_a = float(fit.ln_a[0])
    a = float(np.exp(ln_a))
    claims = fit.batch.claims[fit.row, 0]
    best = claims.argmax(axis=1)
    rows = np.arange(len(best))
    lines = search.candidates.pool.lines
    which = fit.batch.claim_line[fit.row, 0][rows, best]
    plain = lines.kind[fit.members[0]][which] == KIND_LINE
    use = (claims.sum(axis=1) > 0.5) & plain
    n = lines.n[fit.members[0]][which]
    delta = fit.batch.claim_delta[fit.row, 0][rows, best]
    true = axis.positions(lines.half_ln_n[fit.members[0]][which], np.array(ln_a))
    d = np.exp(axis.ln_d(np.where(np.isfinite(true), true + delta, axis.x)))
    order = np.argsort(n[use], kind="stable")
    n_used, delta_used, d_used = n[use][order], delta[use][order], d[use][order]
    possible = possible_lines(lattice, int(n_used[-1]) if len(n_used) else 1, None)
    covariance = fit.batch.covariance[fit.row]
    return Solution(
        lattice_type=lattice,
        a_angstrom=a,
        a_esd_angstrom=a * float(np.sqrt(max(covariance[N_SHIFT, N_SHIFT], 0.0))),
        probability=probability,
        merit_f=merit_f(n_used, delta_used, possible) if axis.is_angle else None,
        merit_m=merit_m(n_used, d_used, a, possible),
        lines_indexed=int(use.sum()),
        expected_by_chance=_expected_by_chance(axis, fit, lattice_row, ln_a),
        ambiguous_with=_alternatives(axis, lattice, a, n_used, fit),
        n=tuple(int(value) if used else 0 for value, used in zip(n, use, strict=True)),
    )


def _expected_by_chance(axis: Axis, fit: Fitted, lattice: int, ln_a: float) -> float:
    """Return the number of other places of the axis expected to collect as many votes by luck."""
    base = np.full(len(axis.x), float(fit.batch.background_rate[fit.row]) / axis.span)
    cell = Cell(fit.shift_terms, float(np.exp(fit.ln_sigma)), 0.0)
    curve = vote(axis, cell, base, np.zeros(len(axis.x)))
    grid = curve.start + curve.step * np.arange(curve.values.shape[1])
    score = float(curve.values[lattice][np.abs(grid - ln_a) < max(3 * curve.step, 1.5e-3)].max(initial=0.0))
    total = 0.0
    for row in range(len(LATTICE_TYPES)):
        # places that share part of the line sequence are relatives, not luck
        related = np.zeros(len(grid), dtype=bool)
        for ratio in (1.0, 2.0, 3.0, 4.0, 8.0, 0.5, 1 / 3, 0.25, 0.125):
            related |= np.abs(grid - ln_a - 0.5 * np.log(ratio)) < 0.012
        values = curve.values[row][~related]
        total += len(values) / 4.0 * share_at_least(values, score)
    return float(total)


def _alternatives(
    axis: Axis, lattice: LatticeType, a: float, n_used: NDArray[np.int64], fit: Fitted
) -> tuple[Alternative, ...]:
    """Return cells of related line sequences that explain every line indexed here.

    I(a) and P(a/sqrt 2) share their first six lines; F(a) without its odd lines is P(a/2), and so on.
    """
    related: dict[LatticeType, list[tuple[LatticeType, float]]] = {
        "I": [("P", 0.5), ("F", 2.0)],
        "P": [("I", 2.0), ("F", 4.0)],
        "F": [("P", 0.25), ("I", 0.5)],
    }
    found = []
    for other, ratio in related[lattice]:  # ratio = (a'/a)², so N' = ratio N
        other_n = n_used * ratio
        top = int(np.ceil(4.0 * ratio * max(int(n_used.max(initial=1)), 20))) + 8
        allowed = set(allowed_n(other, top).tolist())
        if not all(abs(value - round(value)) < 1e-9 and round(value) in allowed for value in other_n):
            continue
        place = a * float(np.sqrt(ratio))
        only = _lines_of_one(lattice, other, ratio, n_used)
        if not only or {float(value) for value in n_used} & set(only):
            continue  # a line that only this cell has was seen
        # F(a) and P(a/2) differ by the odd lines of F, which isoelectronic ions extinguish however many there
        # are
        may_be_extinct = {lattice, other} == {"F", "P"}
        if _count_in_range(axis, a, only) > 1 and not may_be_extinct:
            continue
        found.append(Alternative(other, place, *_place_of_first(axis, a, only)))
    return tuple(found)


def _lines_of_one(
    lattice: LatticeType, other: LatticeType, ratio: float, n_used: NDArray[np.int64]
) -> list[float]:
    """Return the N (of this cell) that only one of the two cells has, lowest first."""
    top = max(int(n_used.max(initial=1)), 20) * 3
    mine = {float(value) for value in allowed_n(lattice, top)}
    theirs = {float(value) / ratio for value in allowed_n(other, int(top * ratio) + 1)}
    return sorted(value for value in mine ^ theirs if value <= top)


def _count_in_range(axis: Axis, a: float, only: list[float]) -> int:
    x = axis.positions(0.5 * np.log(np.array(only)), np.array(np.log(a)))
    return int(np.count_nonzero((x >= axis.low) & (x <= axis.high)))


def _place_of_first(axis: Axis, a: float, only: list[float]) -> tuple[float | None, float | None]:
    """Return 2theta (None without a wavelength) and d of the lowest deciding line in reach."""
    for value in only:
        d = a / float(np.sqrt(value))
        if axis.wavelength is None:
            return None, d
        two_theta = float(two_theta_from_d(d, axis.wavelength))
        if np.isfinite(two_theta):
            return two_theta, d
    return None, None


def _cautions(peaks: PeakList, solutions: tuple[Solution, ...], nothing: float) -> tuple[str, ...]:
    found = list(peaks.notes)
    best = solutions[0] if solutions else None
    if best is None or nothing > 0.5 or best.lines_indexed < max(FEWEST_LINES, 0.6 * len(peaks)):
        found.append(NOT_CUBIC)
    elif best.expected_by_chance > 0.1:
        found.append(
            f"about {best.expected_by_chance:.2g} cells would index this list as well by luck: "
            "few or inaccurate lines prove little"
        )
    found.append(NOT_PROOF)
    return tuple(found)


__all__ = ["Alternative", "IndexResult", "Solution", "index_lines", "left_over"]
