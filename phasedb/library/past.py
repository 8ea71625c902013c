"""The library as it was: replaying the history up to a moment."""

from __future__ import annotations

import json
import re
import sqlite3
from collections.abc import Iterable, Iterator
from typing import TYPE_CHECKING, Any, Final

import sqlalchemy as sa

from phasedb.errors import InputError
from phasedb.library import mapping, reading, tables
from phasedb.library.chain import GENESIS
from phasedb.library.entry import content_checksum, entry_from_json, with_composition
from phasedb.library.people import end_of
from phasedb.library.writing import fingerprint_of

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection, Engine

    from phasedb.library.store import Library

_HEAD: Final = re.compile(r"[0-9a-f]{8,64}")
_ROWS_AT_ONCE: Final = 5000


def replay(rows: Iterable[tuple[str, str, str | None]]) -> dict[tuple[str, str], str]:
    """Return the last state (canonical JSON) of each thing; rows are (kind, key, after) in order."""
    states: dict[tuple[str, str], str] = {}
    for kind, key, after in rows:
        if after is None:
            states.pop((kind, key), None)
        else:
            states[kind, key] = after
    return states


def past_engine(library: Library, as_of: str) -> tuple[Engine, str]:
    """Return an in-memory store of the library as it was, and the moment or head in full.

    Raises
    ------
    InputError
        If `as_of` is neither a date nor the head of a row.
    """
    history = tables.history.c
    with library.reading() as connection:
        last, head, said = _last_row(connection, as_of)
        rows = connection.execute(
            sa.select(history.kind, history.key, history.after)
            .where(history.number <= last)
            .order_by(history.number)
        )
        states = replay((row.kind, row.key, row.after) for row in rows)
        phases = [json.loads(after) for (kind, _), after in states.items() if kind == "phase"]
        engine = _memory_engine()
        with engine.begin() as copy:
            tables.metadata.create_all(copy)
            _fill(copy, phases, _cached_lines(connection))
            copy.execute(
                sa.insert(tables.state).values(
                    id=1,
                    library_id=library.library_id,
                    phase_count=sum(document["standing"] != "withdrawn" for document in phases),
                    fingerprint=fingerprint_of(content_checksum(document) for document in phases),
                    history_count=last,
                    history_head=head,
                )
            )
            _copy_history(connection, copy, last)
    return engine, said


def _last_row(connection: Connection, as_of: str) -> tuple[int, str, str]:
    history = tables.history.c
    text = as_of.strip()
    if _HEAD.fullmatch(text) and not (len(text) == 8 and text.isdigit()):
        if text == GENESIS:
            return 0, GENESIS, text
        found = connection.execute(
            sa.select(history.number, history.hash).where(history.hash.startswith(text))
        ).all()
        if len(found) != 1:
            raise InputError(
                f"no history row, or more than one, has the hash {text!r}",
                where="--as-of",
                hint="give more of its digits, or a date",
            )
        return found[0].number, found[0].hash, found[0].hash
    moment = end_of(text)
    last = connection.execute(sa.select(sa.func.max(history.number)).where(history.at <= moment)).scalar()
    if last is None:
        return 0, GENESIS, moment
    head = connection.execute(sa.select(history.hash).where(history.number == last)).scalar_one()
    return last, head, moment


def _memory_engine() -> Engine:
    from sqlalchemy.pool import StaticPool

    return sa.create_engine(
        "sqlite://",
        creator=lambda: sqlite3.connect(":memory:", check_same_thread=False),
        poolclass=StaticPool,
    )


def _cached_lines(connection: Connection) -> dict[str, tuple[str, Any]]:
    """Return the cached lines by uid, with the checksum of the content that they belong to."""
    phase, cache = tables.phase.c, tables.strength_cache.c
    rows = connection.execute(
        sa.select(phase.uid, phase.checksum, cache.n, cache.strength, cache.checksum.label("own"))
        .join(tables.strength_cache, cache.phase_id == phase.id)
        .where(cache.method == reading.METHOD)
    )
    return {row.uid: (row.checksum, row) for row in rows}


def _fill(copy: Connection, phases: list[dict[str, Any]], cached: dict[str, tuple[str, Any]]) -> None:
    for start in range(0, len(phases), _ROWS_AT_ONCE):
        documents = phases[start : start + _ROWS_AT_ONCE]
        entries = [with_composition(entry_from_json(document)) for document in documents]
        checksums = [content_checksum(document) for document in documents]
        ids = mapping.insert_entries(copy, entries, checksums)
        lines = [
            {
                "phase_id": phase_id,
                "method": reading.METHOD,
                "n": cached[entry.uid][1].n,
                "strength": cached[entry.uid][1].strength,
                "checksum": cached[entry.uid][1].own,
            }
            for phase_id, entry, checksum in zip(ids, entries, checksums, strict=True)
            if entry.uid in cached and cached[entry.uid][0] == checksum
        ]
        if lines:
            copy.execute(sa.insert(tables.strength_cache), lines)


def _copy_history(connection: Connection, copy: Connection, last: int) -> None:
    rows: Iterator[Any] = iter(
        connection.execute(sa.select(tables.history).where(tables.history.c.number <= last)).mappings()
    )
    while chunk := [dict(row) for _, row in zip(range(_ROWS_AT_ONCE), rows, strict=False)]:
        copy.execute(sa.insert(tables.history), chunk)
