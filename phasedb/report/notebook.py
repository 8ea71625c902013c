"""The public functions for notebooks, and how results show themselves there.

Examples
--------
>>> import tempfile, phasedb
>>> folder = tempfile.TemporaryDirectory()
>>> place = folder.name + "/lab.sqlite"
>>> phasedb.Library.create(place, by="A. First").close()

A list is read, matched, and what the answer says is in its fields:

>>> with open(folder.name + "/mill.csv", "w") as file:
...     _ = file.write("# radiation: Cu\\n# range: 30 100\\ntwo_theta_deg,intensity\\n")
...     _ = file.write("38.11,100\\n44.30,47\\n64.43,24\\n77.39,26\\n81.53,8\\n97.87,4\\n")
>>> peaks = phasedb.PeakList.read(folder.name + "/mill.csv")
>>> len(peaks)
6
>>> with phasedb.Library.open(place) as library:
...     found = phasedb.match(peaks, library, phasedb.MatchSettings(elements=("Ag",)))
...     entry = library.get("silver")
>>> found.phases[0].name, found.phases[0].probability > 0.9
('silver', True)

The same lines alone give lattice type and a; a named phase gives a better a:

>>> best = phasedb.index(peaks).solutions[0]
>>> best.lattice_type, round(best.a_angstrom, 2)
('F', 4.09)
>>> refined = phasedb.refine(peaks, entry)
>>> abs(refined.a_angstrom - 4.086) < 0.003
True
>>> [line.hkl_text for line in phasedb.lines(entry, radiation="Cu", max_two_theta=80)]
['111', '200', '220', '311']
>>> folder.cleanup()
"""

from __future__ import annotations

from collections.abc import Sequence
from html import escape
from typing import TYPE_CHECKING, Protocol

from phasedb.characterise.indexing import IndexResult, index_lines, left_over
from phasedb.characterise.refined import Refinement
from phasedb.crystal.line_list import IdealLine, ideal_lines
from phasedb.crystal.phases import Phase
from phasedb.crystal.quantity import format_measured
from phasedb.crystal.radiation import Radiation, radiation_from_name
from phasedb.errors import InputError
from phasedb.identify.result import Claim, Match
from phasedb.measured.peaklist import PeakList
from phasedb.report import wording
from phasedb.report.page_rows import worth_showing
from phasedb.report.table import printable
from phasedb.report.text import LEAST_SHOWN
from phasedb.report.verdict import verdict

if TYPE_CHECKING:
    pass


class HoldsPhase(Protocol):
    """An entry of the library."""

    def phase(self) -> Phase: ...


class LineTable(tuple[IdealLine, ...]):
    """The ideal lines of a phase, in order of 2theta."""

    __slots__ = ()

    def _repr_html_(self) -> str:
        rows = [
            (
                line.hkl_text,
                str(line.multiplicity),
                f"{line.d_angstrom:.4f}",
                f"{line.two_theta_deg:.3f}",
                "-" if line.intensity is None else f"{line.intensity:.1f}",
            )
            for line in self
        ]
        return _table(("hkl", "multiplicity", "d, Å", "2θ, °", "intensity"), rows)


def index(peaks: PeakList, *, after: Match | None = None) -> IndexResult:
    """Return the cubic cells that explain a list, by probability.

    Parameters
    ----------
    peaks : PeakList
    after : Match, optional
        Index only the lines that this match left unexplained.
    """
    return index_lines(peaks if after is None else left_over(peaks, after))


def refine(
    peaks: PeakList,
    phase: Phase | HoldsPhase | None = None,
    *,
    lattice: str | None = None,
    a: str | None = None,
) -> Refinement:
    """Return the refined lattice constant of one phase in a list.

    Parameters
    ----------
    peaks : PeakList
    phase : Phase or entry of a library, optional
        Where to start; else `lattice` (P, I or F) and a rough `a` as text (``"4.39"``, ``"0.439 nm"``).

    Raises
    ------
    InputError
        If neither, or both, are given, or the list does not hold the phase.
    """
    from phasedb.characterise.cells import cell_from_phase, cell_from_values
    from phasedb.characterise.refinement import refine as refine_lines

    if phase is not None and lattice is None and a is None:
        cell = cell_from_phase(_phase(phase), peaks.temperature_k)
    elif phase is None and lattice is not None and a is not None:
        cell = cell_from_values(lattice, a)
    else:
        raise InputError(
            "a refinement starts from a phase, or from lattice and a", hint="give one of the two"
        )
    return refine_lines(
        peaks,
        lattice_type=cell.lattice_type,
        a_angstrom=cell.a_angstrom,
        allowed=cell.allowed,
        expansion_per_k=cell.expansion_per_k,
    )


def lines(
    phase: Phase | HoldsPhase, *, radiation: Radiation | str = "Cu", max_two_theta: float = 150.0
) -> LineTable:
    """Return the ideal lines of a phase: hkl, multiplicity, d, 2theta, intensity."""
    beam = radiation_from_name(radiation) if isinstance(radiation, str) else radiation
    return LineTable(ideal_lines(_phase(phase), beam, two_theta_max_deg=max_two_theta))


def _phase(given: Phase | HoldsPhase) -> Phase:
    return given if isinstance(given, Phase) else given.phase()


# --- how results show themselves ------------------------------------------------------------------


def show_in_notebooks() -> None:
    """Give the result types their HTML form; they themselves know nothing of reports."""
    for kind, render in (
        (Match, match_html),
        (PeakList, peaks_html),
        (IndexResult, index_html),
        (Refinement, refinement_html),
    ):
        setattr(kind, "_repr_html_", render)  # noqa: B010 (mypy knows no such attribute)


def _table(titles: Sequence[str], rows: Sequence[Sequence[str]]) -> str:
    head = "".join(f"<th>{escape(title)}</th>" for title in titles)
    body = "".join(
        "<tr>" + "".join(f"<td>{escape(printable(cell))}</td>" for cell in row) + "</tr>" for row in rows
    )
    return f"<table><thead><tr>{head}</tr></thead><tbody>{body}</tbody></table>"


def _paragraphs(texts: Sequence[str]) -> str:
    return "".join(f"<p>{escape(printable(text))}</p>" for text in texts)


def match_html(match: Match) -> str:
    """Return a match as HTML: the verdict, the ranking, the ledger."""
    ranking = [
        (
            phase.name,
            phase.lattice_type,
            wording.probability(phase.probability),
            wording.lattice_constant(phase.a_fitted_angstrom, phase.a_fitted_esd_angstrom),
            wording.percent(phase.relative_shift),
            wording.merit_f(phase.merit_f),
        )
        for phase in match.phases
        if phase.probability >= LEAST_SHOWN
    ]
    unit = match.measurement.position_unit
    ledger = [
        (
            str(line.line),
            wording.position(line.position, unit),
            f"{line.d_angstrom:.4f}",
            "; ".join(_claim_text(claim) for claim in worth_showing(line)) or "unexplained",
        )
        for line in match.ledger
    ]
    return (
        _paragraphs(verdict(match))
        + _table(("phase", "type", "p", "a, Å", "from stored", "merit"), ranking)
        + _table(("line", wording.AXIS_TITLES[unit], "d, Å", "claimed by"), ledger)
    )


def _claim_text(claim: Claim) -> str:
    p = wording.probability(claim.probability)
    return f"{wording.claimant(claim)} {wording.hkl_text(claim.hkl)} ({p})"


def peaks_html(peaks: PeakList) -> str:
    """Return a peak list as HTML."""
    titles = ["line", wording.AXIS_TITLES[peaks.unit], "d, Å"]
    if peaks.intensity is not None:
        titles.append("intensity")
    rows = []
    for i, (position, d) in enumerate(zip(peaks.position, peaks.d_angstrom, strict=True)):
        row = [str(i + 1), wording.position(float(position), peaks.unit), f"{d:.4f}"]
        if peaks.intensity is not None:
            row.append(f"{peaks.intensity[i]:g}")
        rows.append(row)
    return _paragraphs([peaks.sample or peaks.source or "Peak list"]) + _table(titles, rows)


def index_html(result: IndexResult) -> str:
    """Return the solutions of an indexing as HTML."""
    rows = [
        (
            solution.lattice_type,
            format_measured(solution.a_angstrom, solution.a_esd_angstrom),
            wording.probability(solution.probability),
            f"{solution.lines_indexed} of {result.line_count}",
            wording.merit_f(solution.merit_f),
            wording.chance(solution.expected_by_chance),
        )
        for solution in result.solutions
    ]
    return _table(("type", "a, Å", "p", "lines", "merit", "such by chance"), rows) + _paragraphs(
        result.cautions
    )


def refinement_html(result: Refinement) -> str:
    """Return a refinement as HTML: a, its lines, and the cautions."""
    rows = [
        (
            str(line.line),
            wording.hkl_text(line.hkl),
            f"{line.position:.4f}",
            f"{line.residual_deg:+.4f}"
            if line.residual_deg is not None
            else f"{line.residual_relative:+.2e}",
            "outlier" if line.is_outlier else f"{line.weight:.2f}",
        )
        for line in result.lines
    ]
    a = format_measured(result.a_angstrom, result.a_esd_angstrom)
    return (
        _paragraphs([f"{result.lattice_type}, a = {a} Å"])
        + _table(("line", "hkl", "position", "residual", "weight"), rows)
        + _paragraphs(result.cautions)
    )
