"""Every change of an entry: entering, revising, checking, withdrawing, restoring."""

from __future__ import annotations

import secrets
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass, replace
from itertools import islice
from typing import TYPE_CHECKING, Any, Final

import sqlalchemy as sa

from phasedb.errors import InputError, RuleRefusedError
from phasedb.library import door, finding, mapping, reading, tables
from phasedb.library.cleaning import clean_text
from phasedb.library.door import Warned
from phasedb.library.entry import Draft, Entry, compact, content_checksum, entry_to_json, key_of
from phasedb.library.people import same_person
from phasedb.library.preparing import entry_of, prepare

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

    from phasedb.library.store import Library
    from phasedb.library.writing import Writing

_ROWS_AT_ONCE: Final = 5000

CHECKED_FIELDS: Final = (
    "formula",
    "lattice_type",
    "a_angstrom",
    "a_esd_angstrom",
    "temperature_k",
    "structure_type",
    "free_parameters",
    "space_group",
    "formula_units_per_cell",
    "sites",
    "sources",
)
"""What a check vouches for; a change of any of these makes a checked entry a draft again."""

_STRUCTURE_FIELDS: Final = ("formula", "structure_type", "free_parameters", "space_group", "sites")


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


# --- entering -------------------------------------------------------------------------------------


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

    Warnings are not looked for: see `phasedb.library.door.warnings_for_many`.

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
            raise _name_taken(name, content.name)
        taken[key] = name


def _name_taken(name: str, of: str) -> InputError:
    what = f"the name {name!r} is taken" if name == of else f"the alias {name!r} of {of!r} is taken"
    return InputError(what, hint="see 'phasedb show' for that entry; choose another name, or revise it")


def refuse_taken_names(connection: Connection, content: Draft, *, own_id: int | None = None) -> None:
    """Raise InputError if a name or alias belongs to another entry."""
    for name in (content.name, *content.aliases):
        found = finding.id_of_name(connection, name)
        if found is not None and found != own_id:
            raise _name_taken(name, content.name)


# --- changing -------------------------------------------------------------------------------------


def revise(
    library: Library,
    name: str,
    new: dict[str, Any],
    *,
    expect_version: int | None = None,
    accept_warnings: bool = False,
    reason: str = "",
) -> Outcome:
    """Change some fields of an entry (attributes of `Draft`) and add one to its version.

    A change of what a check vouches for (`CHECKED_FIELDS`) makes a checked entry a draft again. Sites given
    in `new` are kept as they are; otherwise they follow from the structure type and the formula.

    Raises
    ------
    UnknownNameError, InputError
    RuleRefusedError
        If the version is not the expected one, the entry is withdrawn, or warnings were not accepted.
    """
    with library.begin_write() as writing:
        phase_id, old = _open_entry(writing, name, expect_version, new)
        if old.standing == "withdrawn":
            raise RuleRefusedError(
                f"{old.name!r} is withdrawn: {old.withdrawn_reason}",
                hint="make it a draft again first: phasedb restore-entry NAME --reason TEXT",
            )
        touches_structure = any(field in new for field in _STRUCTURE_FIELDS)
        draft = replace(old.content, **new)
        if touches_structure and "sites" not in new:
            draft = replace(draft, sites=(), assumed=(), space_group=new.get("space_group", ""))
        prepared = prepare(draft, keep_sites="sites" in new or not touches_structure)
        if prepared.content == old.content:
            raise InputError(f"{old.name!r} already has these values", hint="nothing was changed")
        refuse_taken_names(writing.connection, prepared.content, own_id=phase_id)
        warnings = door.warnings_for(writing.connection, prepared, own_id=phase_id, before=old)
        if warnings and not accept_warnings:
            raise WarningsRefusedError(old.name, warnings)
        revoked = old.standing == "checked" and any(
            getattr(prepared.content, field) != getattr(old.content, field) for field in CHECKED_FIELDS
        )
        entry = replace(
            old,
            content=prepared.content,
            elements=prepared.elements,
            formula_key=prepared.formula_key,
            version=old.version + 1,
            changed_by=writing.person.who,
            changed_at=writing.at,
            standing="draft" if revoked else old.standing,
            checked_by=None if revoked else old.checked_by,
            checked_at=None if revoked else old.checked_at,
        )
        said = "; ".join(
            part
            for part in (
                clean_text(reason, what="reason"),
                door.accepted_text(warnings),
                "the check no longer holds" if revoked else "",
            )
            if part
        )
        write_changed(writing, phase_id, old, entry, action="revised", remark=said)
    return Outcome(entry, warnings)


def check(library: Library, name: str, *, expect_version: int | None = None, remark: str = "") -> Entry:
    """Confirm a draft, as someone who neither entered nor last changed it.

    Raises
    ------
    UnknownNameError
    RuleRefusedError
        If the same person tries, or the entry is not a draft.
    """
    with library.begin_write() as writing:
        phase_id, old = _open_entry(writing, name, expect_version, {})
        if old.standing != "draft":
            detail = (
                f"by {old.checked_by} at {old.checked_at}" if old.standing == "checked" else "and not in use"
            )
            raise RuleRefusedError(
                f"{old.name!r} is {old.standing} {detail}", hint="only a draft can be checked"
            )
        for did, who in (("entered", old.entered_by), ("last changed", old.changed_by)):
            if who is not None and same_person(who, writing.person.who):
                raise RuleRefusedError(
                    f"{writing.person.who} {did} {old.name!r} and cannot check it",
                    hint="a second person has to check it; say who with --by",
                )
        entry = replace(
            old,
            standing="checked",
            version=old.version + 1,
            checked_by=writing.person.who,
            checked_at=writing.at,
        )
        write_changed(
            writing, phase_id, old, entry, action="checked", remark=clean_text(remark, what="remark")
        )
    return entry


def withdraw(
    library: Library,
    name: str,
    *,
    reason: str,
    replaced_by: str | None = None,
    expect_version: int | None = None,
) -> Entry:
    """Take an entry out of use; it keeps its name and history.

    Raises
    ------
    UnknownNameError, InputError
    RuleRefusedError
        If it is withdrawn already, or its replacement is.
    """
    said = _reason(reason)
    with library.begin_write() as writing:
        phase_id, old = _open_entry(writing, name, expect_version, {})
        if old.standing == "withdrawn":
            raise RuleRefusedError(f"{old.name!r} is withdrawn already: {old.withdrawn_reason}")
        successor = None
        if replaced_by is not None:
            other_id, other = finding.find_entry(writing.connection, replaced_by)
            if other_id == phase_id:
                raise InputError(f"{old.name!r} cannot replace itself", where="--replaced-by")
            if other.standing == "withdrawn":
                raise RuleRefusedError(
                    f"{other.name!r} is withdrawn and cannot replace {old.name!r}",
                    hint="name an entry that is in use",
                )
            successor = other.uid
        entry = replace(
            old,
            standing="withdrawn",
            version=old.version + 1,
            checked_by=None,
            checked_at=None,
            withdrawn_reason=said,
            replaced_by=successor,
        )
        write_changed(writing, phase_id, old, entry, action="withdrawn", remark=said)
    return entry


def restore_entry(library: Library, name: str, *, reason: str, expect_version: int | None = None) -> Entry:
    """Make a withdrawn entry a draft again.

    Raises
    ------
    UnknownNameError, InputError
    RuleRefusedError
        If it is not withdrawn.
    """
    said = _reason(reason)
    with library.begin_write() as writing:
        phase_id, old = _open_entry(writing, name, expect_version, {})
        if old.standing != "withdrawn":
            raise RuleRefusedError(f"{old.name!r} is not withdrawn: it is {old.standing}")
        entry = replace(
            old, standing="draft", version=old.version + 1, withdrawn_reason=None, replaced_by=None
        )
        write_changed(writing, phase_id, old, entry, action="restored", remark=said)
    return entry


def _reason(text: str) -> str:
    said = clean_text(text, what="reason")
    if not said:
        raise InputError("a reason is needed", where="--reason", hint="say why, for those who read it later")
    return said


def _open_entry(
    writing: Writing, name: str, expect_version: int | None, new: dict[str, Any]
) -> tuple[int, Entry]:
    phase_id, entry = finding.find_entry(writing.connection, name)
    if expect_version is not None and expect_version != entry.version:
        from phasedb.library.stale import stale_edit

        raise stale_edit(writing.connection, entry, expect_version, new)
    return phase_id, entry


def write_changed(
    writing: Writing, phase_id: int, old: Entry, entry: Entry, *, action: str, remark: str
) -> None:
    """Write an entry over its old state, with its history row, checksum and cached lines."""
    before, after = document_of(old), document_of(entry)
    checksum = content_checksum(after)
    mapping.update_entry(writing.connection, phase_id, entry, checksum)
    writing.append(action, "phase", entry.uid, before=before, after=after, remark=remark)
    in_use = int(entry.standing != "withdrawn") - int(old.standing != "withdrawn")
    writing.count_content(old=content_checksum(before), new=checksum, phases=in_use)
    if _affects_lines(old.content, entry.content):
        cache = tables.strength_cache
        writing.connection.execute(sa.delete(cache).where(cache.c.phase_id == phase_id))
        lines = reading.lines_of(entry.phase())
        if lines is not None:
            writing.connection.execute(sa.insert(cache), [reading.cache_values(phase_id, lines)])


def _affects_lines(old: Draft, new: Draft) -> bool:
    names = ("sites", "space_group", "lattice_type", "a_angstrom")
    return any(getattr(old, name) != getattr(new, name) for name in names)
