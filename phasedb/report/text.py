"""A match in a terminal: the verdict, the ranking, the ledger, and what else one must know to trust it."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from typing import Final

from phasedb.crystal.quantity import format_measured
from phasedb.identify.result import LedgerLine, Match, PhaseResult, Shift, UnlistedCandidate
from phasedb.report import wording
from phasedb.report.table import Column, paragraph, table
from phasedb.report.verdict import verdict

LEAST_SHOWN: Final = 0.01
"""Phases and places of unlisted phases below this probability are only counted."""

Style = Callable[[str, str], str]
"""Takes a text and a role (``heading``, ``weak``) and returns it styled; the width must not change."""


def plain(text: str, role: str) -> str:
    """Style nothing: the output of a pipe."""
    return text


def match_text(match: Match, *, width: int = 80, style: Style = plain) -> str:
    """Return the whole answer as text, `width` columns wide.

    Parameters
    ----------
    match : Match
    width : int
        Columns to fill; longer text wraps and is never cut off.
    style : callable
        Colours headings and weak remarks; plain by default.
    """
    parts = ["\n".join(paragraph(sentence, width) for sentence in verdict(match))]
    parts.append(_heading("Ranking", style) + "\n" + _ranking(match, width))
    parts.append(_heading("Ledger", style) + "\n" + _ledger(match, width))
    if match.unlisted.probability >= LEAST_SHOWN:
        parts.append(_heading("Not in the library", style) + "\n" + _unlisted(match, width))
    parts.append(_heading("Shift and noise", style) + "\n" + paragraph(shift_text(match.shift), width))
    if match.cautions:
        cautions = "\n".join(paragraph(caution, width, first="- ") for caution in match.cautions)
        parts.append(_heading("Cautions", style) + "\n" + cautions)
    parts.append(style(paragraph(_footer(match), width), "weak"))
    return "\n\n".join(parts)


def _heading(text: str, style: Style) -> str:
    return style(text, "heading")


def _ranking(match: Match, width: int) -> str:
    columns = (
        Column("rank", "right"),
        Column("p", "right"),
        Column("phase", wraps=True),
        Column("type"),
        Column("a fitted, Å", "right"),
        Column("from stored", "right"),
        Column("lines", "right"),
        Column("share", "right"),
    )
    shown = [phase for phase in match.phases if phase.probability >= LEAST_SHOWN]
    left = len(match.phases) - len(shown)
    if not shown:
        return "No listed phase reaches a probability of 0.01."
    rows = [
        (
            str(rank),
            wording.probability(phase.probability),
            _phase_cell(phase),
            phase.lattice_type,
            wording.lattice_constant(phase.a_fitted_angstrom, phase.a_fitted_esd_angstrom),
            wording.percent(phase.relative_shift),
            f"{phase.lines_claimed}/{phase.lines_expected:.1f}",
            "-" if phase.share is None else f"{phase.share:.2f}",
        )
        for rank, phase in enumerate(shown, 1)
    ]
    details = [
        paragraph(text, width, first=f"{rank:>4}  ")
        for rank, phase in enumerate(shown, 1)
        for text in _details(phase)
    ]
    if left:
        details.append(paragraph(f"and {left} below 0.01 (see --json)", width, first="      "))
    return "\n".join([table(columns, rows, width), "", *details])


def _phase_cell(phase: PhaseResult) -> str:
    return phase.name if phase.formula in ("", phase.name) else f"{phase.name}, {phase.formula}"


def _details(phase: PhaseResult) -> Iterator[str]:
    merits = [
        text for text in (wording.merit_f(phase.merit_f), wording.merit_m(phase.merit_m)) if text != "-"
    ]
    facts = [
        *merits,
        f"absences from the {phase.absences.replace('_', ' ')}",
        f"log10 odds {phase.log10_odds:+.1f}",
        f"{wording.chance(phase.expected_by_chance)} such by chance",
    ]
    yield f"{phase.name}: {'; '.join(facts)}"
    if phase.look_alikes:
        hidden = phase.look_alike_count - len(phase.look_alikes)
        more = f" and {hidden} more" if hidden > 0 else ""
        yield (
            f"look-alikes, {wording.probability(phase.group_probability)} together: "
            f"{', '.join(phase.look_alikes)}{more}"
        )
    if phase.separated_by:
        yield f"would be told apart by: {'; '.join(phase.separated_by)}"


def _ledger(match: Match, width: int) -> str:
    unit = match.measurement.position_unit
    with_intensity = any(line.intensity is not None for line in match.ledger)
    strongest = max((line.intensity for line in match.ledger if line.intensity is not None), default=1.0)
    columns = [Column("line", "right"), Column(wording.POSITION_TITLES[unit], "right")]
    if unit != "d":
        columns.append(Column("d, Å", "right"))
    if with_intensity:
        columns.append(Column("I, %", "right"))
    columns += [
        Column("claimed by", wraps=True),
        Column("hkl", wraps=True),
        Column("deviation", "right"),
        Column("p", "right"),
    ]
    rows = []
    for line in match.ledger:
        start = [str(line.line), wording.position(line.position, unit)]
        if unit != "d":
            start.append(f"{line.d_angstrom:.4f}")
        if with_intensity:
            start.append("-" if line.intensity is None else f"{100 * line.intensity / strongest:.1f}")
        for index, claim in enumerate(_claims(line)):
            rows.append([*(start if index == 0 else [""] * len(start)), *claim])
    meaning = "degrees 2theta" if wording.in_degrees(match) else "percent of d"
    note = (
        f"Deviation: observed minus calculated, after the shift, in {meaning}; p: probability of the claim."
    )
    return f"{table(columns, rows, width)}\n{paragraph(note, width)}"


def _claims(line: LedgerLine) -> Iterator[tuple[str, str, str, str]]:
    if not wording.is_explained(line):
        yield "unexplained", "", "", wording.probability(line.unexplained)
    for claim in sorted(line.claims, key=lambda c: -c.probability):
        if claim.probability >= 0.05:
            yield (
                wording.claimant(claim),
                wording.hkl_text(claim.hkl),
                wording.deviation(claim),
                wording.probability(claim.probability),
            )


def candidate_text(candidate: UnlistedCandidate) -> str:
    """Return where an unlisted phase would lie, its lines, merits and nearest entries."""
    a = wording.lattice_constant(candidate.a_angstrom, candidate.a_esd_angstrom)
    text = f"{candidate.lattice_type}, a = {a} Å, p {wording.probability(candidate.probability)}"
    text += f", {wording.plural(candidate.lines_claimed, 'line')}"
    merits = (wording.merit_f(candidate.merit_f), wording.merit_m(candidate.merit_m))
    if candidate.lines_claimed > 1:
        text += "".join(f", {merit}" for merit in merits if merit != "-")
    if candidate.nearest:
        near = [f"{name} ({wording.percent(difference, 2)})" for name, difference in candidate.nearest]
        text += f"; nearest entries: {', '.join(near)}"
    return text


def candidates_shown(match: Match) -> list[UnlistedCandidate]:
    """Return the places of an unlisted phase that are worth showing, the most probable first."""
    best = match.unlisted.best
    places = [] if best is None else [best, *match.unlisted.others]
    return [place for place in places if place.probability >= LEAST_SHOWN]


def _unlisted(match: Match, width: int) -> str:
    probability = wording.probability(match.unlisted.probability)
    head = (
        f"Probability {probability} that a cubic phase is present which the library lacks."
        " Where it would lie:"
    )
    body = [paragraph(candidate_text(place), width, first="- ") for place in candidates_shown(match)]
    if not body:
        return paragraph(head.removesuffix(" Where it would lie:") + " No place stands out.", width)
    return "\n".join([paragraph(head, width), *body])


def shift_text(shift: Shift) -> str:
    """Return the fitted shift and the noise in one sentence."""
    facts: list[str] = []
    if shift.zero_deg is not None:
        facts.append(f"zero error {_signed(shift.zero_deg, shift.zero_esd_deg)} deg")
    if shift.displacement_mm is not None:
        radius = ""
        if shift.goniometer_radius_mm is not None:
            assumed = ", assumed" if shift.radius_assumed else ""
            radius = f" (goniometer radius {shift.goniometer_radius_mm:g} mm{assumed})"
        facts.append(f"displacement {_signed(shift.displacement_mm, shift.displacement_esd_mm)} mm{radius}")
    if shift.scale_relative is not None:
        esd = None if shift.scale_esd_relative is None else 100 * shift.scale_esd_relative
        facts.append(f"common scale error {_signed(100 * shift.scale_relative, esd)} %")
    if shift.noise_deg is not None:
        facts.append(f"positions scatter by {shift.noise_deg:.3f} deg")
    if shift.noise_relative is not None:
        facts.append(f"positions scatter by {100 * shift.noise_relative:.3f} % of d")
    text = "; ".join(facts) or "None was fitted"
    return text[0].upper() + text[1:] + "."


def _signed(value: float, esd: float | None) -> str:
    return f"{value:+.3f}" if esd is None else format_measured(value, esd)


def _footer(match: Match) -> str:
    source = match.measurement.source or "a list without a file"
    return (
        f"{source}: {wording.plural(len(match.ledger), 'line')};"
        f" library of {wording.plural(match.library_phase_count, 'phase')},"
        f" fingerprint {match.library_fingerprint[:12]};"
        f" phasedb {match.program_version}. A match is evidence, not proof; not found is not absent."
    )
