"""Proving that a store is whole: file, schema, history chain, and every row against the replay."""

from __future__ import annotations

import hashlib
import json
import sqlite3
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any, Final

import sqlalchemy as sa

from phasedb.errors import InputError, StoreError
from phasedb.library import mapping, reading, tables
from phasedb.library.chain import GENESIS, HistoryRow, is_whole
from phasedb.library.differences import changed_lines
from phasedb.library.documents import RECORD_TABLES, record_document
from phasedb.library.entering import document_of
from phasedb.library.entry import Entry, canonical_json, content_checksum, key_of, with_composition
from phasedb.library.schema import schema_faults
from phasedb.library.writing import fingerprint_of

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

    from phasedb.library.store import Library

_SHOWN_AT_MOST: Final = 50
_MODULUS: Final = 1 << 256


@dataclass(slots=True)
class Audit:
    """What an audit found.

    Attributes
    ----------
    faults : list of str
        Empty if the store is whole.
    history_count, history_head : the rows found and the hash of the last.
    since_expected : int or None
        Rows added since the expected head; None if no head was given or it was not found.
    phase_count, record_count : entries and other records compared with the history.
    """

    faults: list[str] = field(default_factory=list)
    history_count: int = 0
    history_head: str = GENESIS
    since_expected: int | None = None
    phase_count: int = 0
    record_count: int = 0
    library_id: str = ""
    fingerprint: str = ""


@dataclass(slots=True)
class _Replayed:
    """The history in one pass: last documents, and the fingerprint after the rows that were asked for."""

    documents: dict[tuple[str, str], str] = field(default_factory=dict)
    hash_at: dict[int, str] = field(default_factory=dict)
    fingerprint_at: dict[int, str] = field(default_factory=dict)
    names: dict[tuple[str, str], str] = field(default_factory=dict)


def audit(library: Library, *, expect: str | None = None) -> Audit:
    """Prove the store; `expect` is a history head kept outside (at least its first 8 hex digits).

    The expected head must be that of some row: later rows may have been added since.

    Raises
    ------
    InputError
        If `expect` is not a hash.
    """
    expected = None
    if expect is not None:
        expected = expect.strip().casefold()
        if not 8 <= len(expected) <= 64 or not set(expected) <= set("0123456789abcdef"):
            raise InputError(
                f"{expect!r} is not a history head", where="--expect", hint="give 8 to 64 hex digits"
            )
    found = Audit()
    with library.reading() as connection:
        steps: tuple[Callable[[], Any], ...] = (
            lambda: _check_file(connection, found),
            lambda: _check_schema(connection, found),
            lambda: _check_contents(connection, found, expected),
        )
        for step in steps:
            try:
                step()
            except (sa.exc.DBAPIError, sqlite3.Error, StoreError) as error:
                found.faults.append(
                    f"the store cannot be read through: {getattr(error, 'orig', None) or error}"
                )
    return found


def _check_file(connection: Connection, found: Audit) -> None:
    if connection.dialect.name != "sqlite":
        return
    for (line,) in connection.exec_driver_sql("PRAGMA integrity_check(20)"):
        if line != "ok":
            found.faults.append(f"the database file is damaged: {line}")
    for table, row, parent, _ in connection.exec_driver_sql("PRAGMA foreign_key_check"):
        found.faults.append(f"row {row} of table {table} refers to a row of {parent} that is not there")


def _check_schema(connection: Connection, found: Audit) -> None:
    found.faults += schema_faults(connection)


def _check_contents(connection: Connection, found: Audit, expected: str | None) -> None:
    wanted = _moments_of_identifications(connection)
    replayed = _check_history(connection, found, expected, wanted)
    live = _check_entries(connection, found, replayed)
    _check_state(connection, found, live)
    _check_aliases(connection, found)
    _check_cache(connection, found)
    _check_records(connection, found, replayed)
    _check_identifications(connection, found, replayed)
    if len(found.faults) > _SHOWN_AT_MOST:
        rest = len(found.faults) - _SHOWN_AT_MOST
        found.faults[_SHOWN_AT_MOST:] = [f"and {rest} more faults"]


def _history(connection: Connection) -> Iterator[HistoryRow]:
    query = sa.select(tables.history).order_by(tables.history.c.number)
    for row in connection.execution_options(yield_per=1000).execute(query):
        yield HistoryRow(*row)


def _check_history(connection: Connection, found: Audit, expected: str | None, wanted: set[int]) -> _Replayed:
    replayed = _Replayed()
    fingerprint = 0
    matched = expected is None or GENESIS.startswith(expected)
    if expected is not None and matched:
        found.since_expected = 0
    previous, number = GENESIS, 0
    for row in _history(connection):
        if row.number != number + 1:
            found.faults.append(f"history rows {number + 1} to {row.number - 1} are missing")
        if row.previous_hash != previous:
            found.faults.append(f"history row {row.number} is not chained to the row before it")
        if not is_whole(row):
            found.faults.append(
                f"history row {row.number} ({row.action} {row.kind}) was changed: its hash differs"
            )
        previous, number = row.hash, row.number
        fingerprint = (fingerprint + _replay_row(row, replayed, found)) % _MODULUS
        if row.number in wanted:
            replayed.hash_at[row.number] = row.hash
            replayed.fingerprint_at[row.number] = f"{fingerprint:064x}"
        if expected is not None and row.hash.startswith(expected):
            matched = True
            found.since_expected = 0
        elif found.since_expected is not None:
            found.since_expected += 1
        found.history_count += 1
    found.history_head = previous
    if not matched:
        found.faults.append(
            f"the expected head {expected} is not in the history: rows were cut off, or it was rebuilt"
        )
    return replayed


def _replay_row(row: HistoryRow, replayed: _Replayed, found: Audit) -> int:
    """Follow one row; return the change of the fingerprint."""
    place = (row.kind, row.key)
    if replayed.documents.get(place) != row.before:
        found.faults.append(
            f"history row {row.number} does not start where the one before it ended ({row.kind} {row.key})"
        )
    if row.after is None:
        replayed.documents.pop(place, None)
    else:
        replayed.documents[place] = row.after
    if row.kind != "phase":
        return 0
    change = 0
    for text, sign in ((row.before, -1), (row.after, 1)):
        if text is not None:
            try:
                document = json.loads(text)
                change += sign * int(content_checksum(document), 16)
            except (ValueError, TypeError, AttributeError):
                found.faults.append(f"history row {row.number} holds text that cannot be read")
    return change


def _check_entries(connection: Connection, found: Audit, replayed: _Replayed) -> list[str]:
    """Compare each entry with the history; return the checksums of the contents as they are."""
    expected = {key: text for (kind, key), text in replayed.documents.items() if kind == "phase"}
    stored = {
        row.id: row
        for row in connection.execute(
            sa.select(tables.phase.c.id, tables.phase.c.checksum, tables.phase.c.name_key)
        )
    }
    live = []
    seen = set()
    for phase_id, entry in mapping.load_entries(connection).items():
        found.phase_count += 1
        seen.add(entry.uid)
        document = document_of(entry)
        checksum = content_checksum(document)
        live.append(checksum)
        text = expected.get(entry.uid)
        if text is None:
            found.faults.append(f"entry {entry.name!r} is not in the history")
        elif canonical_json(document) != text:
            found.faults.append(
                f"entry {entry.name!r} is not what the history says: "
                + "; ".join(changed_lines(_stored_fields(text), _stored_fields(canonical_json(document)))[:5])
                + " (history -> store)"
            )
        if stored[phase_id].checksum != checksum:
            found.faults.append(f"entry {entry.name!r} does not fit its checksum")
        found.faults += _derived_faults(entry, stored[phase_id].name_key)
    for uid, text in expected.items():
        if uid not in seen:
            found.faults.append(f"entry {_parsed(text).get('name')!r} of the history is not in the store")
    return live


def _parsed(text: str) -> dict[str, Any]:
    """Return a document of the history; {} where it was damaged, which the hash of its row has shown."""
    try:
        document = json.loads(text)
    except ValueError:
        return {}
    return document if isinstance(document, dict) else {}


def _stored_fields(text: str) -> dict[str, Any]:
    """Return a document with its bookkeeping under names that are compared too."""
    document = _parsed(text)
    return {
        f"stored {name}" if name in ("version", "uid") or name.endswith(("_by", "_at")) else name: value
        for name, value in document.items()
    }


def _derived_faults(entry: Entry, name_key: str) -> list[str]:
    """Return what is wrong with the columns that follow from others."""
    faults = []
    if key_of(entry.name) != name_key:
        faults.append(f"entry {entry.name!r} is filed under another name ({name_key!r})")
    try:
        again = with_composition(entry)
    except InputError as error:
        return [*faults, f"entry {entry.name!r}: {error.what}"]
    if (again.elements, again.formula_key) != (entry.elements, entry.formula_key):
        faults.append(f"entry {entry.name!r} is filed under other elements than those of its formula")
    return faults


def _check_state(connection: Connection, found: Audit, live: list[str]) -> None:
    states = connection.execute(sa.select(tables.state)).all()
    if len(states) != 1:
        found.faults.append(f"the table of the library's state has {len(states)} rows, not 1")
        return
    state = states[0]
    found.library_id = state.library_id
    found.fingerprint = fingerprint_of(live)
    if state.fingerprint != found.fingerprint:
        found.faults.append("the library's fingerprint is not that of its entries")
    in_use = connection.execute(
        sa.select(sa.func.count()).select_from(tables.phase).where(tables.phase.c.standing != "withdrawn")
    ).scalar_one()
    if state.phase_count != in_use:
        found.faults.append(f"the state counts {state.phase_count} entries in use, the store has {in_use}")
    if state.history_count != found.history_count:
        found.faults.append(
            f"the state counts {state.history_count} history rows, the store has {found.history_count}: "
            "rows were cut off or added"
        )
    if state.history_head != found.history_head:
        found.faults.append("the state's history head is not that of the last history row")


def _check_aliases(connection: Connection, found: Audit) -> None:
    for row in connection.execute(sa.select(tables.alias)):
        if key_of(row.alias) != row.alias_key:
            found.faults.append(f"alias {row.alias!r} is filed under another name ({row.alias_key!r})")


def _check_cache(connection: Connection, found: Audit) -> None:
    cache = tables.strength_cache.c
    for row in connection.execute(sa.select(cache.phase_id, cache.n, cache.strength, cache.checksum)):
        if reading.cache_checksum(row.n, row.strength) != row.checksum:
            found.faults.append(f"the cached lines of entry {row.phase_id} do not fit their checksum")


def _check_records(connection: Connection, found: Audit, replayed: _Replayed) -> None:
    for table in RECORD_TABLES:
        expected = {key: text for (kind, key), text in replayed.documents.items() if kind == table.name}
        for row in connection.execute(sa.select(table)).mappings().all():
            found.record_count += 1
            text = expected.pop(row["uid"], None)
            document = record_document(connection, table, row)
            if text is None:
                found.faults.append(f"{table.name} {row['uid']} is not in the history")
            elif canonical_json(document) != text:
                lines = "; ".join(changed_lines(_parsed(text), document)[:3])
                found.faults.append(f"{table.name} {row['uid']} is not what the history says: {lines}")
        found.faults += [f"{table.name} {uid} of the history is not in the store" for uid in expected]


def _moments_of_identifications(connection: Connection) -> set[int]:
    return set(connection.execute(sa.select(tables.identification.c.history_count)).scalars())


def _check_identifications(connection: Connection, found: Audit, replayed: _Replayed) -> None:
    for row in connection.execute(sa.select(tables.identification)):
        what = f"identification {row.id}"
        if hashlib.sha256(row.result.encode("utf-8")).hexdigest() != row.result_sha256:
            found.faults.append(f"{what}: the saved result does not fit its SHA-256")
        if row.history_count == 0:
            continue
        if replayed.hash_at.get(row.history_count) != row.history_head:
            found.faults.append(f"{what}: its history head is not that of row {row.history_count}")
        elif replayed.fingerprint_at[row.history_count] != row.library_fingerprint:
            found.faults.append(f"{what}: the library of that moment had another fingerprint")
