"""What a list alone tells of an unknown: its cell by indexing (unless it is given), and a by refinement."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

from phasedb.characterise.cells import StartingCell
from phasedb.characterise.indexing import IndexResult, Solution, index_lines
from phasedb.characterise.refined import Refinement
from phasedb.characterise.refinement import refine
from phasedb.errors import InputError
from phasedb.identify.settings import ShiftPrior
from phasedb.measured.peaklist import PeakList

SURE_FROM: Final = 0.5
"""A cell must be more probable than this to be taken without being named by the analyst."""
LEAST_SHARE: Final = 0.6
"""Share of the lines that one cell must index to be taken for the list's."""


@dataclass(frozen=True, slots=True)
class Unknown:
    """A characterised unknown: how it was indexed (None: the cell was given), and the refined cell."""

    solution: Solution | None
    refinement: Refinement
    cautions: tuple[str, ...]


def characterise_unknown(
    peaks: PeakList, *, cell: StartingCell | None = None, shift_prior: ShiftPrior | None = None
) -> Unknown:
    """Return lattice type and refined a of the one cubic phase that a list holds.

    Parameters
    ----------
    cell : StartingCell, optional
        What the analyst knows; then the list is not indexed, and lines of other phases may be in it.

    Raises
    ------
    InputError
        If no cell is given and the list does not index, or not for certain, as one cubic phase.
    """
    solution = None
    cautions: tuple[str, ...] = ()
    if cell is None:
        solution = sure_solution(index_lines(peaks, shift_prior=shift_prior), peaks)
        cell = StartingCell(solution.lattice_type, solution.a_angstrom)
        cautions = tuple(
            f"{other.lattice_type} with a = {other.a_angstrom:.4f} Å would explain the same lines"
            + (
                f"; a line at 2theta {other.deciding_line_two_theta_deg:.2f} deg would decide"
                if other.deciding_line_two_theta_deg is not None
                else ""
            )
            for other in solution.ambiguous_with
        )
    found = refine(peaks, lattice_type=cell.lattice_type, a_angstrom=cell.a_angstrom, shift_prior=shift_prior)
    return Unknown(solution, found, (*cautions, *found.cautions))


def sure_solution(found: IndexResult, peaks: PeakList) -> Solution:
    """Return the first solution of an index if it is sure and holds most of the lines.

    Raises
    ------
    InputError
        If it is not.
    """
    hint = "give what you know with --lattice and --a, or take known phases out with --left-over"
    best = found.solutions[0] if found.solutions else None
    if best is None or found.nothing_cubic >= SURE_FROM:
        raise InputError(
            "the list does not index as one cubic phase "
            f"(probability {found.nothing_cubic:.2f} that none explains it)",
            where=peaks.source,
            hint=hint,
        )
    if best.probability < SURE_FROM:
        others = ", ".join(
            f"{one.lattice_type} {one.a_angstrom:.4f} Å ({one.probability:.2f})"
            for one in found.solutions[:3]
        )
        raise InputError(f"the list does not index for certain: {others}", where=peaks.source, hint=hint)
    if best.lines_indexed < LEAST_SHARE * found.line_count:
        raise InputError(
            f"{best.lattice_type} with a = {best.a_angstrom:.4f} Å indexes only {best.lines_indexed} of "
            f"{found.line_count} lines",
            where=peaks.source,
            hint=hint,
        )
    return best
