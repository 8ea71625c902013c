"""An index as a document (schema ``phasedb.index/1``) and as text."""

from __future__ import annotations

from typing import Any, Final

from phasedb.characterise.indexing import Alternative, IndexResult, Solution
from phasedb.crystal.lattice import hkl_text
from phasedb.measured.peaklist import PeakList
from phasedb.report.document import merit_document, rounded
from phasedb.report.table import Column, paragraph, table
from phasedb.report.text import Style, plain
from phasedb.report.wording import (
    LATTICE_WORDS,
    POSITION_TITLES,
    chance,
    lattice_constant,
    merit_f,
    merit_m,
    plural,
    position,
    probability,
)

SCHEMA: Final = "phasedb.index/1"
SURE_FROM: Final = 0.5


def index_document(found: IndexResult, peaks: PeakList) -> dict[str, Any]:
    """Return an index as JSON values; unknown is None."""
    return {
        "schema": SCHEMA,
        "source": peaks.source,
        "sha256": peaks.sha256,
        "line_count": found.line_count,
        "solutions": [_solution(solution) for solution in found.solutions],
        "nothing_cubic": rounded(found.nothing_cubic, "probability"),
        "cautions": list(found.cautions),
    }


def _solution(solution: Solution) -> dict[str, Any]:
    return {
        "lattice_type": solution.lattice_type,
        "a_angstrom": rounded(solution.a_angstrom, "angstrom"),
        "a_esd_angstrom": rounded(solution.a_esd_angstrom, "angstrom"),
        "probability": rounded(solution.probability, "probability"),
        "merit": merit_document(solution.merit_f, solution.merit_m),
        "lines_indexed": solution.lines_indexed,
        "expected_by_chance": rounded(solution.expected_by_chance, "probability"),
        "ambiguous_with": [
            {
                "lattice_type": other.lattice_type,
                "a_angstrom": rounded(other.a_angstrom, "angstrom"),
                "deciding_line_two_theta_deg": rounded(other.deciding_line_two_theta_deg, "degree"),
                "deciding_line_d_angstrom": rounded(other.deciding_line_d_angstrom, "angstrom"),
            }
            for other in solution.ambiguous_with
        ],
        "n": list(solution.n),
    }


def index_text(found: IndexResult, peaks: PeakList, *, width: int = 80, style: Style = plain) -> str:
    """Return an index as text, `width` columns wide."""
    parts = ["\n".join(paragraph(sentence, width) for sentence in _verdict(found))]
    if found.solutions:
        parts.append(style("Cells", "heading") + "\n" + _cells(found, width))
        parts.append(style("Lines of the first cell", "heading") + "\n" + _lines(found, peaks, width))
    if found.cautions:
        cautions = "\n".join(paragraph(caution, width, first="- ") for caution in found.cautions)
        parts.append(style("Cautions", "heading") + "\n" + cautions)
    return "\n\n".join(parts)


def _verdict(found: IndexResult) -> list[str]:
    best = found.solutions[0] if found.solutions else None
    if best is None or found.nothing_cubic >= SURE_FROM:
        said = [
            "Not cubic, or not one cubic phase: probability that no cubic cell explains the list "
            f"{probability(found.nothing_cubic)}."
        ]
    else:
        sure = "indexes" if best.probability >= SURE_FROM else "indexes best, not for certain,"
        said = [
            f"The list {sure} as {LATTICE_WORDS[best.lattice_type]} cubic ({best.lattice_type}), "
            f"a = {lattice_constant(best.a_angstrom, best.a_esd_angstrom)} Å: "
            f"probability {probability(best.probability)}, {best.lines_indexed} of "
            f"{plural(found.line_count, 'line')}; {chance(best.expected_by_chance)} such cells by luck."
        ]
    if best is not None:
        said += [_alternative(other) for other in best.ambiguous_with]
    return said


def _alternative(other: Alternative) -> str:
    place = "no line in reach would decide"
    if other.deciding_line_two_theta_deg is not None:
        place = f"the line at 2theta {other.deciding_line_two_theta_deg:.2f} deg would decide"
    elif other.deciding_line_d_angstrom is not None:
        place = f"the line at d = {other.deciding_line_d_angstrom:.4f} Å would decide"
    return f"{other.lattice_type} with a = {other.a_angstrom:.4f} Å explains the same lines: {place}."


def _cells(found: IndexResult, width: int) -> str:
    columns = (
        Column("p", "right"),
        Column("type"),
        Column("a, Å", "right"),
        Column("lines", "right"),
        Column("F"),
        Column("M"),
        Column("by luck", "right"),
    )
    rows = [
        (
            probability(one.probability),
            one.lattice_type,
            lattice_constant(one.a_angstrom, one.a_esd_angstrom),
            str(one.lines_indexed),
            merit_f(one.merit_f),
            merit_m(one.merit_m),
            chance(one.expected_by_chance),
        )
        for one in found.solutions
    ]
    return table(columns, rows, width)


def _lines(found: IndexResult, peaks: PeakList, width: int) -> str:
    best = found.solutions[0]
    columns = (Column("line", "right"), Column(POSITION_TITLES[peaks.unit], "right"), Column("hkl"))
    rows = [
        (
            str(rank),
            position(float(peaks.position[rank - 1]), peaks.unit),
            hkl_text(n, best.lattice_type) if n else "not indexed",
        )
        for rank, n in enumerate(best.n, 1)
    ]
    return table(columns, rows, width)
