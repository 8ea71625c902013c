"""Every change of an entry: revising, checking, withdrawing, restoring."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any, Final

import sqlalchemy as sa

from phasedb.errors import InputError, RuleRefusedError
from phasedb.library import door, finding, mapping, reading, tables
from phasedb.library.cleaning import clean_text
from phasedb.library.entering import Outcome, WarningsRefusedError, document_of, refuse_taken_names
from phasedb.library.entry import Draft, Entry, content_checksum
from phasedb.library.people import same_person
from phasedb.library.preparing import prepare

if TYPE_CHECKING:
    from phasedb.library.store import Library
    from phasedb.library.writing import Writing

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
