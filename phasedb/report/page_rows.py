"""The rows of a report page: every value as text, beside the mark that links it to the figures."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Final

from phasedb.identify.result import Claim, LedgerLine, Match, PhaseResult
from phasedb.report import wording
from phasedb.report.drawing import FOREIGN_MARK, Mark
from phasedb.report.table import printable

_SHAPES: Final[dict[str, str]] = {
    "o": '<circle cx="5" cy="5" r="4.4"/>',
    "s": '<rect x="1" y="1" width="8" height="8"/>',
    "^": '<path d="M5 .5 9.7 9.3H.3z"/>',
    "v": '<path d="M5 9.5 9.7.7H.3z"/>',
    "D": '<path d="M5 0 10 5 5 10 0 5z"/>',
    "P": '<path d="M3.4 0h3.2v3.4H10v3.2H6.6V10H3.4V6.6H0V3.4h3.4z"/>',
    "*": '<path d="M5 0 6.2 3.6H10L7 5.9 8.1 9.6 5 7.4 1.9 9.6 3 5.9 0 3.6h3.8z"/>',
    "x": '<path d="M1 1 9 9M9 1 1 9" stroke="currentColor" stroke-width="1.8"/>',
}


@dataclass(frozen=True, slots=True)
class Key:
    """A mark as the page shows it: its letter and its shape as a small picture."""

    letter: str
    icon: str


def key(mark: Mark) -> Key:
    """Return the page's form of a mark."""
    shape = _SHAPES[mark.shape]
    return Key(mark.letter, f'<svg viewBox="0 0 10 10" aria-hidden="true" fill="{mark.colour}">{shape}</svg>')


def line_rows(match: Match, marks: dict[str, Mark]) -> list[dict[str, Any]]:
    """Return one row for each ledger line, with its claims."""
    unit = match.measurement.position_unit
    strongest = max((line.intensity for line in match.ledger if line.intensity is not None), default=1.0)
    rows = []
    for line in match.ledger:
        claims = [_claim(claim, marks) for claim in worth_showing(line)]
        if not wording.is_explained(line):
            unexplained = {
                "unexplained": True,
                "p": wording.probability(line.unexplained),
                "mark": None,
                "by": "",
                "hkl": "",
                "deviation": "",
            }
            claims.insert(0, unexplained)
        intensity = "-" if line.intensity is None else f"{100 * line.intensity / strongest:.1f}"
        letters = [
            marks[claim.name].letter
            for claim in worth_showing(line)
            if claim.kind != "foreign" and claim.name in marks and wording.is_explained(line)
        ]
        row = {
            "number": line.line,
            "position": wording.position(line.position, unit),
            "d": f"{line.d_angstrom:.4f}",
            "intensity": intensity,
            "claims": claims,
            "letters": " ".join(dict.fromkeys(letters)),
        }
        row["say"] = _line_said(line, row, unit)
        rows.append(row)
    return rows


def worth_showing(line: LedgerLine) -> list[Claim]:
    """Return the claims of a line that have a probability of 0.05 or more, the most probable first."""
    return sorted((claim for claim in line.claims if claim.probability >= 0.05), key=lambda c: -c.probability)


def _claim(claim: Claim, marks: dict[str, Mark]) -> dict[str, Any]:
    mark = FOREIGN_MARK if claim.kind == "foreign" else marks.get(claim.name)
    return {
        "unexplained": False,
        "mark": None if mark is None else key(mark),
        "by": printable(wording.claimant(claim)),
        "hkl": wording.hkl_text(claim.hkl),
        "deviation": wording.deviation(claim),
        "p": wording.probability(claim.probability),
    }


def _line_said(line: LedgerLine, row: dict[str, Any], unit: str) -> str:
    parts = [f"Line {line.line}: {row['position']}{wording.UNITS[unit]}"]
    if unit != "d":
        parts.append(f"d {row['d']} Å")
    if line.intensity is not None:
        parts.append(f"intensity {row['intensity']} %")
    text = ", ".join(parts)
    for claim in row["claims"]:
        if claim["unexplained"]:
            text += f"; unexplained, probability {claim['p']}"
        else:
            degrees = "" if claim["deviation"].endswith("%") else "°"
            text += f"; {claim['by']} {claim['hkl']}, deviation {claim['deviation']}{degrees}"
            text += f", probability {claim['p']}"
    return text + "."


def phase_rows(match: Match, marks: dict[str, Mark], *, least: float) -> list[dict[str, Any]]:
    """Return a row for each phase of at least that probability; one without a mark is known by its rank."""
    rows = []
    for rank, phase in enumerate(match.phases, 1):
        mark = marks.get(phase.name)
        if phase.probability < least and mark is None:
            continue
        row = {
            "letter": str(rank) if mark is None else mark.letter,
            "mark": None if mark is None else key(mark),
            "name": printable(phase.name),
            "formula": "" if phase.formula == phase.name else printable(phase.formula),
            "type": phase.lattice_type,
            "p": wording.probability(phase.probability),
            "a": wording.lattice_constant(phase.a_fitted_angstrom, phase.a_fitted_esd_angstrom),
            "stored": wording.lattice_constant(phase.a_stored_angstrom, None),
            "drift": wording.percent(phase.relative_shift),
            "share": "-" if phase.share is None else f"{phase.share:.2f}",
            "lines": f"{phase.lines_claimed} / {phase.lines_expected:.1f}",
            "f": wording.merit_f(phase.merit_f),
            "m": wording.merit_m(phase.merit_m),
            "more": _more(phase),
        }
        row["say"] = (
            f"{row['letter']} {row['name']}, {row['type']}: probability {row['p']}, a = {row['a']} Å"
            f" ({row['drift']} from the stored {row['stored']} Å), lines {row['lines']}, {row['f']}."
        )
        rows.append(row)
    return rows


def _more(phase: PhaseResult) -> str:
    parts = [
        f"structure type {printable(phase.structure_type)}" if phase.structure_type else "no structure type",
        phase.standing,
        f"absences from the {phase.absences.replace('_', ' ')}",
        f"log10 odds {phase.log10_odds:+.1f}",
        f"{wording.chance(phase.expected_by_chance)} such matches by chance",
    ]
    if phase.look_alikes:
        hidden = phase.look_alike_count - len(phase.look_alikes)
        names = ", ".join(printable(name) for name in phase.look_alikes)
        parts.append(
            f"look-alikes, {wording.probability(phase.group_probability)} together: {names}"
            + (f" and {hidden} more" if hidden > 0 else "")
        )
    if phase.separated_by:
        parts.append("told apart by: " + ", or ".join(printable(text) for text in phase.separated_by))
    return "; ".join(parts) + "."
