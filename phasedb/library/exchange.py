"""Bringing entries in: what each one means for the library is decided before anything is written.

A reader gives candidates and bad rows, and `plan` compares the candidates with the store;
`phasedb.library.exchange_writing` carries the plan out.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field, replace
from typing import TYPE_CHECKING, Any, Final

from phasedb.errors import InputError
from phasedb.library import entering
from phasedb.library.differences import changed_lines
from phasedb.library.door import Warned
from phasedb.library.door_many import warnings_for_many
from phasedb.library.entry import Entry, compact, entry_from_json, key_of
from phasedb.library.exchange_known import Known
from phasedb.library.exchange_rows import BadRow, Candidate
from phasedb.library.preparing import entry_of

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

_FIELDS_SHOWN: Final = 4
BROUGHT_IN: Final = ("imported", "merged")
"""Actions after which an entry is as another library gave it."""


@dataclass(frozen=True, slots=True)
class RowWarning:
    """What looks wrong with a row that is written all the same."""

    file: str
    row: int
    name: str
    warning: Warned

    def __str__(self) -> str:
        row = f", row {self.row}" if self.row else ""
        return f"{self.file}{row}, {self.name!r}: {self.warning.text}"


@dataclass(frozen=True, slots=True)
class Newer:
    """An entry that came from the same place before and has moved on there."""

    candidate: Candidate
    phase_id: int
    old: Entry
    new: Entry


@dataclass(slots=True)
class Plan:
    """What bringing the candidates in would do.

    Attributes
    ----------
    new : list of (Candidate, Entry)
    newer : list of Newer
    same, older : lists of Candidate
        Already in the library as they are, or in a state that the library has moved on from.
    clashes : list of BadRow
    warnings : list of RowWarning
    remarks : list of str
        What else the user should know.
    """

    new: list[tuple[Candidate, Entry]] = field(default_factory=list)
    newer: list[Newer] = field(default_factory=list)
    same: list[Candidate] = field(default_factory=list)
    older: list[Candidate] = field(default_factory=list)
    clashes: list[BadRow] = field(default_factory=list)
    warnings: list[RowWarning] = field(default_factory=list)
    remarks: list[str] = field(default_factory=list)


Past = Callable[[str], Sequence[dict[str, Any]]]
"""Gives the documents that an entry (by uid) had in the library that it comes from, if that is known."""


def _no_past(uid: str) -> Sequence[dict[str, Any]]:
    return ()


def plan(
    connection: Connection, candidates: Sequence[Candidate], *, by: str, at: str, past: Past = _no_past
) -> Plan:
    """Decide what each candidate means for the store; nothing is written.

    Parameters
    ----------
    by, at : str
        Who brings the entries in and when: entries without custody are entered by them.
    past : callable
        The earlier states of an entry in the library that it comes from.
    """
    planner = _Planner(connection, candidates, by, at, past)
    for candidate in candidates:
        planner.place(candidate)
    planner.settle_replacements()
    found = planner.plan
    in_use = [candidate for candidate, entry in found.new if entry.standing != "withdrawn"]
    warned = warnings_for_many(connection, [candidate.prepared for candidate in in_use])
    for candidate, warnings in zip(in_use, warned, strict=True):
        found.warnings += [RowWarning(candidate.file, candidate.row, candidate.name, w) for w in warnings]
    return found


class _Planner:
    def __init__(
        self, connection: Connection, candidates: Sequence[Candidate], by: str, at: str, past: Past
    ) -> None:
        self.plan = Plan()
        self._known = Known(connection, candidates)
        self._by, self._at, self._past = by, at, past
        self._taken: dict[str, Candidate] = {}
        self._seen_uids: dict[str, Candidate] = {}
        self._uid_here: dict[str, str] = {}  # uid elsewhere: uid here, of entries that are the same

    # --- one candidate

    def place(self, candidate: Candidate) -> None:
        """Put one candidate where it belongs in the plan."""
        first = self._taken.get(key_of(candidate.name))
        if candidate.entry is not None:
            first = self._seen_uids.get(candidate.entry.uid, first)
        if first is not None:
            self._place_repeated(candidate, first)
            return
        self._taken[key_of(candidate.name)] = candidate
        if candidate.entry is not None:
            self._seen_uids[candidate.entry.uid] = candidate
            known = self._known.id_of_uid.get(candidate.entry.uid)
            if known is not None:
                self._place_known(candidate, candidate.entry, known)
                return
        by_name = self._known.id_of_name.get(key_of(candidate.name))
        if by_name is not None:
            self._place_named(candidate, self._known.entries[by_name])
            return
        clash = self._name_clash(candidate, own_id=None)
        if clash is None:
            self._place_new(candidate)
        else:
            self.plan.clashes.append(clash)

    def _place_repeated(self, candidate: Candidate, first: Candidate) -> None:
        """Place a second row of one name or one uid: nothing new if it says the same."""
        same_content = candidate.project(candidate.prepared.content) == candidate.project(
            first.prepared.content
        )
        if same_content and candidate.entry == first.entry:
            self.plan.same.append(candidate)
            return
        if candidate.entry is not None and first.entry is not None and candidate.entry.uid == first.entry.uid:
            column, what = "uid", "uid"
        else:
            column, what = "name", f"name {candidate.name!r}"
        self.plan.clashes.append(
            candidate.bad(column, f"{first.place(candidate)} has the {what} already, with other values")
        )

    def _place_new(self, candidate: Candidate) -> None:
        for alias in candidate.prepared.content.aliases:
            self._taken[key_of(alias)] = candidate
        entry = candidate.entry
        if entry is None:
            entry = entry_of(candidate.prepared, uid=entering.new_uid(), by=self._by, at=self._at)
            if candidate.withdrawn_reason:
                entry = replace(entry, standing="withdrawn", withdrawn_reason=candidate.withdrawn_reason)
        self.plan.new.append((candidate, entry))

    def _place_known(self, candidate: Candidate, entry: Entry, phase_id: int) -> None:
        """Place an entry whose uid the store knows."""
        here = self._known.entries[phase_id]
        theirs, ours = entering.document_of(entry), entering.document_of(here)
        if theirs == ours:
            self.plan.same.append(candidate)
            return
        past_here = self._known.past(entry.uid)
        if any(document == theirs for _, document in past_here):
            self.plan.older.append(candidate)
            return
        untouched = past_here[-1][0] in BROUGHT_IN and entry.version > here.version
        if not untouched and ours not in self._past(entry.uid):
            self.plan.clashes.append(
                candidate.bad(
                    "",
                    f"{candidate.name!r} was changed here (version {here.version}) and there "
                    f"(version {entry.version}): (here -> there) {_differences(ours, theirs)}",
                )
            )
            return
        clash = self._name_clash(candidate, own_id=phase_id)
        if clash is not None:
            self.plan.clashes.append(clash)
            return
        self.plan.newer.append(Newer(candidate, phase_id, here, entry))

    def _place_named(self, candidate: Candidate, here: Entry) -> None:
        """Place an entry whose name the store has, under another uid or none."""
        content = candidate.project(candidate.prepared.content)
        if content == candidate.project(here.content):
            if candidate.entry is not None:
                self._uid_here[candidate.entry.uid] = here.uid
            self.plan.same.append(candidate)
            self._note_standing(candidate, here)
            return
        if candidate.entry is None and any(
            content == candidate.project(entry_from_json(document).content)
            for _, document in self._known.past(here.uid)
        ):
            self.plan.older.append(candidate)
            return
        differences = _differences(dict(candidate.project(here.content)), dict(content))
        self.plan.clashes.append(
            candidate.bad(
                "name", f"{here.name!r} is in the library with other values (here -> there): {differences}"
            )
        )

    def _note_standing(self, candidate: Candidate, here: Entry) -> None:
        there = candidate.entry.standing if candidate.entry is not None else ""
        if candidate.withdrawn_reason:
            there = "withdrawn"
        if there and there != here.standing:
            self.plan.remarks.append(f"{here.name!r} stays {here.standing}; {candidate.file} has it {there}")

    def _name_clash(self, candidate: Candidate, *, own_id: int | None) -> BadRow | None:
        for column, names in (("name", (candidate.name,)), ("aliases", candidate.prepared.content.aliases)):
            for name in names:
                key = key_of(name)
                for held in (self._known.id_of_name.get(key), self._known.id_of_alias.get(key)):
                    if held is not None and held != own_id:
                        return candidate.bad(column, f"the name {name!r} belongs to another entry")
                other = self._taken.get(key)
                if other is not None and other is not candidate:
                    return candidate.bad(
                        column, f"the name {name!r} belongs to the entry in {other.place(candidate)}"
                    )
        return None

    # --- replacements

    def settle_replacements(self) -> None:
        """Make each `replaced_by` the uid of an entry that the library has or gets; others are clashes."""
        coming = {entry.uid for _, entry in self.plan.new}
        named = {key_of(entry.name): entry.uid for _, entry in self.plan.new}
        kept = []
        for candidate, entry in self.plan.new:
            try:
                uid = self._replacement(candidate, entry, coming, named)
            except InputError as error:
                self.plan.clashes.append(candidate.bad("replaced_by", error.what))
            else:
                kept.append(
                    (candidate, replace(entry, replaced_by=uid) if uid != entry.replaced_by else entry)
                )
        self.plan.new = kept
        newer = []
        for step in self.plan.newer:
            try:
                uid = self._replacement(step.candidate, step.new, coming, named)
            except InputError as error:
                self.plan.clashes.append(step.candidate.bad("replaced_by", error.what))
            else:
                newer.append(replace(step, new=replace(step.new, replaced_by=uid)))
        self.plan.newer = newer

    def _replacement(
        self, candidate: Candidate, entry: Entry, coming: set[str], named: dict[str, str]
    ) -> str | None:
        if candidate.replaced_by:
            key = key_of(candidate.replaced_by)
            if key in named:
                return named[key]
            held = self._known.id_of_name.get(key, self._known.id_of_alias.get(key))
            if held is None:
                raise InputError(
                    f"its replacement {candidate.replaced_by!r} is not in the file or the library"
                )
            return self._known.uid_of(held)
        uid = entry.replaced_by
        if uid is None or uid in coming or uid in self._known.id_of_uid:
            return uid
        if uid in self._uid_here:
            return self._uid_here[uid]
        raise InputError("the entry that replaces it is not in the file or the library")


def _differences(here: dict[str, Any], there: dict[str, Any]) -> str:
    lines = changed_lines(compact(here), compact(there))
    more = f"; and {len(lines) - _FIELDS_SHOWN} more" if len(lines) > _FIELDS_SHOWN else ""
    return "; ".join(lines[:_FIELDS_SHOWN]) + more
