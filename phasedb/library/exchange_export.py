"""Exporting all entries to one file, withdrawn ones included; the file is whole or is not there."""

from __future__ import annotations

import contextlib
import os
import uuid
from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Final

import sqlalchemy as sa

from phasedb.errors import InputError
from phasedb.library import mapping, tables
from phasedb.library.entry import Entry
from phasedb.library.exchange_import import kind_of

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

    from phasedb.library.store import Library

_IDS_AT_ONCE: Final = 500
_NAMED: Final = 3


@dataclass(frozen=True, slots=True)
class Exported:
    """What was written: how many entries, history rows, and what the file does not say."""

    entries: int
    history_rows: int
    notes: tuple[str, ...]


def export(
    library: Library,
    path: Path,
    *,
    with_history: bool = False,
    progress: Callable[[str, int, int], None] | None = None,
) -> Exported:
    """Write all entries to `path`, in the format that its suffix names.

    Raises
    ------
    InputError
        If the format is not known, cannot hold a history, or the file cannot be written.
    """
    kind = kind_of(str(path))
    if with_history and kind != "json":
        raise InputError("only JSON holds the history", where=str(path), hint="export to a .json file")
    if _is_store(path, library.place):
        raise InputError("this is the store itself", where=str(path), hint="choose another file")
    notes: list[str] = []
    with library.reading() as connection:
        ids, name_of = _order(connection)
        entries = _entries(connection, ids, progress)
        if kind == "json":
            pieces = _json(library, connection, entries, with_history)
        elif kind == "csv":
            pieces = _csv(entries, name_of, notes)
        else:
            from phasedb.library.exchange_cif import cif_text

            pieces = cif_text(entries, notes)
        write_whole(path, pieces)
        rows = library.history_count if with_history else 0
    return Exported(len(ids), rows, tuple(notes))


def _is_store(path: Path, place: str) -> bool:
    try:
        return path.samefile(place)
    except (OSError, ValueError):  # one of them is not there, or the store is on a server
        return False


def _order(connection: Connection) -> tuple[list[int], dict[str, str]]:
    """Return the ids by name key (sorted here: databases sort text differently), and names by uid."""
    phase = tables.phase.c
    rows = sorted(
        connection.execute(sa.select(phase.name_key, phase.id, phase.uid, phase.name)),
        key=lambda row: str(row.name_key),
    )
    return [row.id for row in rows], {row.uid: row.name for row in rows}


def _entries(
    connection: Connection, ids: list[int], progress: Callable[[str, int, int], None] | None
) -> Iterator[Entry]:
    for start in range(0, len(ids), _IDS_AT_ONCE):
        chunk = ids[start : start + _IDS_AT_ONCE]
        found = mapping.load_entries(connection, tables.phase.c.id.in_(chunk))
        yield from (found[number] for number in chunk)
        if progress is not None:
            progress("entries written", start + len(chunk), len(ids))


def _json(
    library: Library, connection: Connection, entries: Iterable[Entry], with_history: bool
) -> Iterable[str]:
    from phasedb.library.exchange_history import history_text
    from phasedb.library.exchange_json import json_text
    from phasedb.library.exchange_measurements import measurements_text

    history = None
    if with_history:
        history = history_text(connection, library.library_id, library.history_count, library.history_head)
    return json_text(
        entries,
        phase_count=library.phase_count,
        fingerprint=library.fingerprint,
        measurements=measurements_text(connection),
        history=history,
    )


def _csv(entries: Iterable[Entry], name_of: dict[str, str], notes: list[str]) -> Iterator[str]:
    from phasedb.library.exchange_csv import csv_text, is_whole_in_a_table

    partly: list[str] = []

    def watched() -> Iterator[Entry]:
        for entry in entries:
            if not is_whole_in_a_table(entry.content):
                partly.append(entry.name)
            yield entry

    yield from csv_text(watched(), name_of)
    if partly:
        named = ", ".join(map(repr, partly[:_NAMED])) + (", ..." if len(partly) > _NAMED else "")
        notes.append(
            f"{len(partly)} entries have sites, sources or names that a table does not hold ({named}); "
            "a JSON export holds all"
        )


def write_whole(path: Path, pieces: Iterable[str]) -> None:
    """Write text to `path` so that a reader finds the old file or the whole new one.

    Raises
    ------
    InputError
        If it cannot be written.
    """
    try:
        if path.exists() and not path.is_file():  # a device or a pipe; a folder fails here and is named
            with path.open("w", encoding="utf-8", newline="") as stream:
                stream.writelines(pieces)
            return
        target = Path(os.path.realpath(path))
        beside = target.with_name(f".{target.name[:100]}.{os.getpid()}-{uuid.uuid4().hex[:8]}.new")
        try:
            with beside.open("x", encoding="utf-8", newline="") as stream:
                stream.writelines(pieces)
                stream.flush()
                os.fsync(stream.fileno())
            beside.replace(target)
        finally:
            with contextlib.suppress(OSError):
                beside.unlink(missing_ok=True)
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise InputError(
            f"the file cannot be written ({reason})",
            where=str(path),
            hint="check the folder, its permissions and the free space",
        ) from None
