"""A saved match beside the same match done again: what differs, and which changed entries explain it."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import asdict, dataclass
from typing import Any, Final

LEAST_DIFFERENCE: Final = 0.005
"""A probability that moves by less is not worth a line."""

CLAIMED: Final = 0.5


@dataclass(frozen=True, slots=True)
class ChangedEntry:
    """One entry of the library that is not what it was.

    Attributes
    ----------
    names : tuple of str
        Every name it had on either side.
    change : str
        ``new entry``, ``revised``, ``withdrawn``, ``restored``, ``checked`` or ``no longer checked``.
    details : tuple of str
        ``a_angstrom: 4.24 -> 4.2417`` for each field that differs.
    who, at, remark : str
        Of the last change.
    """

    names: tuple[str, ...]
    change: str
    details: tuple[str, ...]
    who: str
    at: str
    remark: str

    def sentence(self) -> str:
        """Return the change as one sentence."""
        said = f"{self.names[-1]!r}: {self.change} by {self.who}, {self.at[:19].replace('T', ' ')} UTC"
        details = "; ".join(self.details)
        return said + (f" ({details})" if details else "") + (f": {self.remark}" if self.remark else "")


@dataclass(frozen=True, slots=True)
class PhaseDifference:
    """One phase whose part in the result changed; None for a side on which it is not listed."""

    name: str
    probability_then: float | None
    probability_now: float | None
    a_stored_then: float | None
    a_stored_now: float | None
    why: tuple[str, ...]

    def sentence(self) -> str:
        """Return the difference as one sentence, without the reasons."""
        then, now = self.probability_then or 0.0, self.probability_now or 0.0
        parts = []
        if abs(then - now) >= LEAST_DIFFERENCE or (then > CLAIMED) != (now > CLAIMED):
            verb = ""
            if then <= CLAIMED < now:
                verb = "now claimed, "
            elif now <= CLAIMED < then:
                verb = "no longer claimed, "
            parts.append(
                f"{verb}probability {_shown(self.probability_then)} -> {_shown(self.probability_now)}"
            )
        if None not in (self.a_stored_then, self.a_stored_now) and self.a_stored_then != self.a_stored_now:
            parts.append(f"stored a {self.a_stored_then:.10g} -> {self.a_stored_now:.10g} Å")
        return f"{self.name}: " + "; ".join(parts)


def _shown(probability: float | None) -> str:
    return "not listed" if probability is None else f"{probability:.3f}"


@dataclass(frozen=True, slots=True)
class Repeated:
    """How a match done again differs from the saved one.

    Attributes
    ----------
    same : bool
        The two say the same, whatever the library's size and fingerprint.
    phases : tuple of PhaseDifference
    unlisted, nothing_cubic : (then, now) probabilities
    played_a_part, others : tuple of ChangedEntry
        Changed entries that either result names, and all others.
    """

    same: bool
    phases: tuple[PhaseDifference, ...]
    unlisted: tuple[float, float]
    nothing_cubic: tuple[float, float]
    played_a_part: tuple[ChangedEntry, ...]
    others: tuple[ChangedEntry, ...]


def compare(then: dict[str, Any], now: dict[str, Any], changed: Sequence[ChangedEntry]) -> Repeated:
    """Return what differs between two ``phasedb.match/1`` documents of one peak list.

    Parameters
    ----------
    changed : sequence of ChangedEntry
        The entries that changed between the two libraries.
    """
    named = _names(then) | _names(now)
    played = tuple(entry for entry in changed if named.intersection(entry.names))
    others = tuple(entry for entry in changed if not named.intersection(entry.names))
    return Repeated(
        same=_said(then) == _said(now),
        phases=tuple(_phase_differences(then, now, played, len(others))),
        unlisted=(then["unlisted"]["probability"], now["unlisted"]["probability"]),
        nothing_cubic=(then["nothing_cubic"], now["nothing_cubic"]),
        played_a_part=played,
        others=others,
    )


def _said(document: dict[str, Any]) -> dict[str, Any]:
    return {name: value for name, value in document.items() if name not in ("library", "program_version")}


def _names(document: dict[str, Any]) -> set[str]:
    found = set()
    for phase in document["phases"]:
        found.update([phase["name"], *phase["look_alikes"]])
    for candidate in (document["unlisted"], *document["unlisted"]["others"]):
        found.update(near["name"] for near in candidate["nearest"])
    for line in document["ledger"]:
        found.update(claim["name"] for claim in line["claims"])
    return found


def _phase_differences(
    then: dict[str, Any], now: dict[str, Any], played: Sequence[ChangedEntry], n_others: int
) -> Iterable[PhaseDifference]:
    new_name = {name: entry.names[-1] for entry in played for name in entry.names}
    before = {new_name.get(phase["name"], phase["name"]): phase for phase in then["phases"]}
    after = {phase["name"]: phase for phase in now["phases"]}
    for name in dict.fromkeys([*after, *before]):
        one, other = before.get(name), after.get(name)
        p_then, p_now = _of(one, "probability"), _of(other, "probability")
        a_then, a_now = _of(one, "a_stored_angstrom"), _of(other, "a_stored_angstrom")
        moved = abs((p_then or 0.0) - (p_now or 0.0)) >= LEAST_DIFFERENCE
        revised = one is not None and other is not None and a_then != a_now
        if moved or revised:
            yield PhaseDifference(name, p_then, p_now, a_then, a_now, tuple(_why(name, played, n_others)))


def _of(phase: dict[str, Any] | None, field: str) -> float | None:
    return None if phase is None else phase[field]


def _why(name: str, played: Sequence[ChangedEntry], n_others: int) -> Iterable[str]:
    own = [entry for entry in played if name in entry.names]
    if own:
        yield from (entry.sentence() for entry in own)
        return
    yield "its own entry did not change"
    if played:
        yield "it follows from " + ", ".join(f"{entry.names[-1]!r} ({entry.change})" for entry in played)
    elif n_others:
        yield f"{n_others} other entries changed, and with them what is expected of each"
    else:
        yield "nor did any other: the program changed"


def repeated_document(repeated: Repeated) -> dict[str, Any]:
    """Return the comparison as JSON values."""
    return {
        "same": repeated.same,
        "phases": [asdict(phase) for phase in repeated.phases],
        "unlisted": dict(zip(("then", "now"), repeated.unlisted, strict=True)),
        "nothing_cubic": dict(zip(("then", "now"), repeated.nothing_cubic, strict=True)),
        "changed_entries": [asdict(entry) for entry in repeated.played_a_part],
        "other_changed_entries": len(repeated.others),
    }


def repeated_lines(repeated: Repeated) -> list[str]:
    """Return the comparison as lines to read."""
    lines = []
    for phase in repeated.phases:
        lines.append(f"- {phase.sentence()}")
        lines += [f"    because {why}" if i == 0 else f"    {why}" for i, why in enumerate(phase.why)]
    for label, (then, now) in (
        ("a cubic phase that the library lacks", repeated.unlisted),
        ("nothing cubic", repeated.nothing_cubic),
    ):
        if abs(then - now) >= LEAST_DIFFERENCE:
            lines.append(f"- {label}: probability {then:.3f} -> {now:.3f}")
    told = {name for phase in repeated.phases for name in [phase.name]}
    rest = [entry for entry in repeated.played_a_part if not told.intersection(entry.names)]
    lines += [f"- changed, without moving the result: {entry.sentence()}" for entry in rest]
    if repeated.others:
        lines.append(f"- {len(repeated.others)} other entries changed; neither result names them")
    return lines
