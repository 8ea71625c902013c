"""Entering phases: one with its warnings, or many in one transaction."""

from __future__ import annotations

import secrets
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass
from itertools import islice
from typing import TYPE_CHECKING, Any, Final

import sqlalchemy as sa

from phasedb.errors import InputError, RuleRefusedError
from phasedb.library import door, finding, mapping, reading, tables
from phasedb.library.door import Warned
from phasedb.library.entry import Draft, Entry, compact, content_checksum, entry_to_json, key_of
from phasedb.library.preparing import entry_of, prepare

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

    from phasedb.library.store import Library
    from phasedb.library.writing import Writing

_ROWS_AT_ONCE: Final = 5000


@dataclass(frozen=True, slots=True)
class Outcome:
    """An entry that was written, and the warnings that were accepted with it."""

    entry: Entry
    warnings: tuple[Warned, ...] = ()


class WarningsRefusedError(RuleRefusedError):
    """Nothing was written, because of warnings that nobody accepted."""

    def __init__(self, name: str, warnings: Sequence[Warned]) -> None:
        lines = "".join(f"\n  - {warning.text}" for warning in warnings)
        count = "a warning" if len(warnings) == 1 else f"{len(warnings)} warnings"
        super().__init__(
            f"{name!r} was not written, because of {count}; correct the value, or accept with "
            f"--accept-warning (the history records it):{lines}"
        )
        self.warnings = tuple(warnings)


def new_uid() -> str:
    """Return 32 random hex digits."""
    return secrets.token_hex(16)


def document_of(entry: Entry) -> dict[str, Any]:
    """Return what the history keeps of an entry."""
    return compact(entry_to_json(entry))


def add(
    library: Library, draft: Draft, *, accept_warnings: bool = False, keep_sites: bool = False
) -> Outcome:
    """Enter a phase as a draft.

    Raises
    ------
    InputError
        If a value is impossible or the name is taken.
    WarningsRefusedError
        If the door warns and `accept_warnings` is false; nothing is written.
    """
    prepared = prepare(draft, keep_sites=keep_sites)
    with library.begin_write() as writing:
        refuse_taken_names(writing.connection, prepared.content)
        warnings = door.warnings_for(writing.connection, prepared)
        if warnings and not accept_warnings:
            raise WarningsRefusedError(prepared.content.name, warnings)
        entry = entry_of(prepared, uid=new_uid(), by=writing.person.who, at=writing.at)
        write_new(writing, [entry], action="entered", remarks=[door.accepted_text(warnings)])
    return Outcome(entry, warnings)


def add_many(
    library: Library,
    drafts: Iterable[Draft],
    *,
    progress: Callable[[int], None] | None = None,
    action: str = "entered",
    remark: str = "",
    author: str | None = None,
    remarks: Sequence[str] | None = None,
    keep_sites: bool = False,
) -> int:
    """Enter many phases in one transaction, one history row for each; return how many.

    Warnings are not looked for: see `phasedb.library.door_many`.

    Parameters
    ----------
    progress : callable, optional
        Called with the number of rows written so far.
    action, remark : str
        For the history rows.
    author : str, optional
        Who the entries are by, if it is not the person acting.
    remarks : sequence of str, optional
        A remark of its own for each draft (accepted warnings), added to `remark`.

    Raises
    ------
    InputError
        At the first draft that is wrong or whose name is taken; nothing is written.
    """
    done = 0
    own = iter(remarks) if remarks is not None else None
    with library.begin_write() as writing:
        taken = names_in_use(writing.connection)
        source = iter(drafts)
        while chunk := list(islice(source, _ROWS_AT_ONCE)):
            entries = []
            for draft in chunk:
                prepared = prepare(draft, keep_sites=keep_sites)
                _take_names(taken, prepared.content)
                entries.append(
                    entry_of(prepared, uid=new_uid(), by=author or writing.person.who, at=writing.at)
                )
            said = [
                "; ".join(part for part in (remark, next(own, "") if own is not None else "") if part)
                for _ in entries
            ]
            write_new(writing, entries, action=action, remarks=said)
            done += len(entries)
            if progress is not None:
                progress(done)
    return done


def write_new(writing: Writing, entries: Sequence[Entry], *, action: str, remarks: Sequence[str]) -> None:
    """Insert whole entries, each with its history row, checksum and cached lines."""
    documents = [document_of(entry) for entry in entries]
    checksums = [content_checksum(document) for document in documents]
    ids = mapping.insert_entries(writing.connection, entries, checksums)
    for entry, document, checksum, remark in zip(entries, documents, checksums, remarks, strict=True):
        writing.append(action, "phase", entry.uid, after=document, remark=remark)
        writing.count_content(old=None, new=checksum, phases=0 if entry.standing == "withdrawn" else 1)
    cached = [
        reading.cache_values(phase_id, lines)
        for phase_id, entry in zip(ids, entries, strict=True)
        if entry.content.sites and (lines := reading.lines_of(entry.phase())) is not None
    ]
    if cached:
        writing.connection.execute(sa.insert(tables.strength_cache), cached)


def names_in_use(connection: Connection) -> dict[str, str]:
    """Return every name and alias by its key."""
    taken = {
        row.name_key: row.name
        for row in connection.execute(sa.select(tables.phase.c.name_key, tables.phase.c.name))
    }
    taken.update((row.alias_key, row.alias) for row in connection.execute(sa.select(tables.alias)))
    return taken


def _take_names(taken: dict[str, str], content: Draft) -> None:
    for name in (content.name, *content.aliases):
        key = key_of(name)
        if key in taken:
            raise name_taken(name, content.name)
        taken[key] = name


def name_taken(name: str, of: str) -> InputError:
    what = f"the name {name!r} is taken" if name == of else f"the alias {name!r} of {of!r} is taken"
    return InputError(what, hint="see 'phasedb show' for that entry; choose another name, or revise it")


def refuse_taken_names(connection: Connection, content: Draft, *, own_id: int | None = None) -> None:
    """Raise InputError if a name or alias belongs to another entry."""
    for name in (content.name, *content.aliases):
        found = finding.id_of_name(connection, name)
        if found is not None and found != own_id:
            raise name_taken(name, content.name)
