"""An adopted unknown, or what a dry run would enter, as a document (``phasedb.adopt/1``) and as text."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, Final

from phasedb.characterise.adoption import Unknown
from phasedb.measured.peaklist import PeakList
from phasedb.report.document import merit_document, rounded
from phasedb.report.refinement import refine_document
from phasedb.report.wording import chance, merit_f, plural, probability

SCHEMA: Final = "phasedb.adopt/1"


def origin_text(found: Unknown, peaks: PeakList) -> str:
    """Return how a was obtained, in one sentence for the entry's remarks."""
    fit = found.refinement
    radiation = "no wavelength" if peaks.radiation is None else peaks.radiation.name
    said = [
        f"a refined from {plural(len(fit.lines), 'line')} of {peaks.source or 'a list'} ({radiation}, "
        f"{peaks.range_low:.4g} to {peaks.range_high:.4g})"
    ]
    if fit.zero_deg is not None and fit.displacement_mm is not None:
        said.append(f"zero {fit.zero_deg:+.3f} deg, displacement {fit.displacement_mm:+.3f} mm")
    if found.solution is not None and found.solution.merit_f is not None:
        said.append(merit_f(found.solution.merit_f))
    return "; ".join(said)


def adopt_document(
    found: Unknown,
    peaks: PeakList,
    entry: dict[str, Any],
    *,
    warnings: Sequence[str],
    written: bool,
    history_head: str | None,
) -> dict[str, Any]:
    """Return the result of an adoption as JSON values; `entry` is the entry's content."""
    solution = found.solution
    return {
        "schema": SCHEMA,
        "written": written,
        "entry": entry,
        "warnings": list(warnings),
        "index": None
        if solution is None
        else {
            "lattice_type": solution.lattice_type,
            "a_angstrom": rounded(solution.a_angstrom, "angstrom"),
            "probability": rounded(solution.probability, "probability"),
            "merit": merit_document(solution.merit_f, solution.merit_m),
            "lines_indexed": solution.lines_indexed,
            "expected_by_chance": rounded(solution.expected_by_chance, "probability"),
        },
        "refinement": refine_document(found.refinement, peaks),
        "cautions": list(found.cautions),
        "history_head": history_head,
    }


def index_sentence(found: Unknown) -> str | None:
    """Return how the cell was found, or None if it was given."""
    solution = found.solution
    if solution is None:
        return None
    return (
        f"Indexed as {solution.lattice_type}: probability {probability(solution.probability)}, "
        f"{solution.lines_indexed} lines, {merit_f(solution.merit_f)}, "
        f"{chance(solution.expected_by_chance)} such cells by luck."
    )
