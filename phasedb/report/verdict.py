"""The answer of a match in plain sentences: what is there, what may be, and what is left."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Final

from phasedb.identify.result import Match, PhaseResult, UnlistedCandidate
from phasedb.report import wording

WORTH_NAMING: Final = 0.05
"""A phase that is not claimed is mentioned from this probability on."""

_SURE: Final = 0.95  # above this a phase's sentence leaves out what would tell it from its look-alikes
_LUCKY: Final = 0.05  # from this expected number of chance matches on, the sentence says it


def verdict(match: Match) -> tuple[str, ...]:
    """Return the verdict, one sentence or two in each entry, the most important first."""
    named, open_groups, possible = _sorted_out(match.phases)
    sentences: list[str] = []
    for phase in named:
        sentences.append(_named(phase, match, also=bool(sentences)))
    for group in open_groups:
        sentences.append(_group(group, also=bool(sentences)))
    if match.unlisted.probability > wording.CLAIMED_FROM:
        sentences.append(_unlisted(match, also=bool(sentences)))
    if not sentences:
        sentences.append(_nothing(match))
    if possible:
        sentences.append(_possible(possible))
    unlisted = match.unlisted.probability
    if WORTH_NAMING <= unlisted <= wording.CLAIMED_FROM:
        sentences.append(
            f"A cubic phase that the library lacks is possible (probability {wording.probability(unlisted)})"
            f"{_where(match.unlisted.best)}."
        )
    sentences.append(_lines(match))
    return tuple(sentences)


def _sorted_out(
    phases: Sequence[PhaseResult],
) -> tuple[list[PhaseResult], list[list[PhaseResult]], list[PhaseResult]]:
    """Phases that are claimed by name, groups that are claimed without a name, and the rest worth a word."""
    named: list[PhaseResult] = []
    open_groups: list[list[PhaseResult]] = []
    possible: list[PhaseResult] = []
    for group in wording.groups(phases):
        claimed = [phase for phase in group if phase.probability > wording.CLAIMED_FROM]
        named.extend(claimed)
        if claimed:
            continue
        if len(group) > 1 and group[0].group_probability > wording.CLAIMED_FROM:
            open_groups.append(group)
        else:
            possible.extend(phase for phase in group if phase.probability >= WORTH_NAMING)
    return named, open_groups, possible


def _with_formula(phase: PhaseResult) -> str:
    return phase.name if phase.formula in ("", phase.name) else f"{phase.name} ({phase.formula})"


def _named(phase: PhaseResult, match: Match, *, also: bool) -> str:
    start = "It also holds" if also else "This list holds"
    text = f"{start} {_with_formula(phase)}: probability {wording.probability(phase.probability)}"
    if phase.a_fitted_angstrom is not None:
        a = wording.lattice_constant(phase.a_fitted_angstrom, phase.a_fitted_esd_angstrom)
        text += f"; a = {a} Å, {wording.percent(phase.relative_shift, 2)} from the stored one"
    text += f"; {phase.lines_claimed} of {phase.lines_expected:.1f} expected lines."
    if phase.expected_by_chance >= _LUCKY:
        text += (
            f" Matches this good arise {wording.chance(phase.expected_by_chance)} times by luck in a library"
            f" of {match.library_phase_count} phases."
        )
    if phase.look_alikes:
        others = _names(phase.look_alikes, phase.look_alike_count)
        text += (
            f" By its lines alone it could be {others}{_apart(phase) if phase.probability < _SURE else ''}."
        )
    return text


def _names(names: Sequence[str], count: int, joiner: str = "or") -> str:
    shown = list(names[:3])
    hidden = max(count, len(names)) - len(shown)
    if hidden > 0:
        shown.append(f"{hidden} more")
    return wording.listing(shown, joiner)


def _apart(phase: PhaseResult) -> str:
    return f". To tell them apart: {'; or '.join(phase.separated_by[:2])}" if phase.separated_by else ""


def _group(group: Sequence[PhaseResult], *, also: bool) -> str:
    members = [f"{_with_formula(phase)} {wording.probability(phase.probability)}" for phase in group]
    hidden = group[0].look_alike_count + 1 - len(members)
    if hidden > 0:
        members.append(f"{hidden} more, less probable")
    start = "It also holds" if also else "This list holds"
    lead = group[0]
    return (
        f"{start} one of a group of look-alikes, probability {wording.probability(lead.group_probability)},"
        f" but it cannot tell which: {wording.listing(members, 'or')}{_apart(lead)}."
    )


def _where(best: UnlistedCandidate | None) -> str:
    if best is None:
        return ""
    text = f": {best.lattice_type}, a near {wording.lattice_constant(best.a_angstrom, best.a_esd_angstrom)} Å"
    if best.nearest:
        near = [f"{name} ({wording.percent(difference, 2)})" for name, difference in best.nearest[:3]]
        text += f"; nearest entries: {', '.join(near)}"
    return text


def _unlisted(match: Match, *, also: bool) -> str:
    start = "It also holds" if also else "This list holds"
    return (
        f"{start} a cubic phase that the library lacks,"
        f" probability {wording.probability(match.unlisted.probability)}{_where(match.unlisted.best)}."
    )


def _nothing(match: Match) -> str:
    if match.nothing_cubic > wording.CLAIMED_FROM:
        return (
            f"No cubic phase is seen in these lines (probability {wording.probability(match.nothing_cubic)}"
            " that there is none)."
        )
    return "No phase is certain enough to be named: none has a probability above 0.5."


def _possible(possible: Sequence[PhaseResult]) -> str:
    names = [f"{_with_formula(phase)} {wording.probability(phase.probability)}" for phase in possible[:5]]
    if len(possible) > 5:
        names.append(f"{len(possible) - 5} more")
    return f"Possible, not certain: {wording.listing(names)}."


def _lines(match: Match) -> str:
    unit = wording.UNITS[match.measurement.position_unit]
    places = [
        wording.position(line.position, match.measurement.position_unit)
        for line in match.ledger
        if not wording.is_explained(line)
    ]
    total = len(match.ledger)
    if not places:
        return (
            f"All {wording.plural(total, 'line')} are explained." if total != 1 else "The line is explained."
        )
    shown = [f"{place}{unit}" for place in places[:8]]
    if len(places) > 8:
        shown.append(f"{len(places) - 8} more")
    verb = "is" if len(places) == 1 else "are"
    return f"{len(places)} of {wording.plural(total, 'line')} {verb} unexplained: {wording.listing(shown)}."
