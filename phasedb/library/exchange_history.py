"""The history in an export, and how another library's history is carried along.

A library's chain is its own: rows of another one are not put into it as if they had happened here. Each is
kept whole inside a row of its own (action ``carried over``), which this library's chain protects.
"""

from __future__ import annotations

import json
from collections.abc import Collection, Iterable, Iterator, Sequence
from dataclasses import asdict, dataclass
from typing import TYPE_CHECKING, Any, Final

import sqlalchemy as sa

from phasedb.errors import InputError
from phasedb.library import tables
from phasedb.library.chain import COLUMNS, GENESIS, HistoryRow, is_whole
from phasedb.library.entry import Entry, canonical_json, compact, entry_to_json

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

    from phasedb.library.writing import Writing

CARRIED_ACTION: Final = "carried over"
CARRIED_KIND: Final = "earlier row"
"""Kind of a row that holds another library's row: ``earlier row LIBRARY NUMBER``."""

_TEXTS: Final = (
    "at",
    "who",
    "login",
    "host",
    "program_version",
    "action",
    "kind",
    "key",
    "remark",
    "previous_hash",
    "hash",
)


@dataclass(frozen=True, slots=True)
class ForeignHistory:
    """Rows of another library's history, proved, in order."""

    library_id: str
    rows: tuple[HistoryRow, ...]

    def past(self, uid: str) -> Sequence[dict[str, Any]]:
        """Return the documents that an entry had there."""
        return [
            json.loads(row.after)
            for row in self.rows
            if row.kind == "phase" and row.key == uid and row.after is not None
        ]


# --- writing


def row_document(row: HistoryRow) -> dict[str, Any]:
    """Return a row as JSON values; `before` and `after` are documents, not text."""
    document: dict[str, Any] = asdict(row)
    for name in ("before", "after"):
        document[name] = None if document[name] is None else json.loads(document[name])
    return document


def history_text(connection: Connection, library_id: str, count: int, head: str) -> Iterator[str]:
    """Yield the member ``history`` of an export: the whole chain, one line for each row."""
    yield (
        f'{{"library_id": {json.dumps(library_id)}, "count": {count}, "head": {json.dumps(head)}, "rows": ['
    )
    separator = "\n"
    for row in history_rows(connection):
        yield separator + canonical_json(row_document(row))
        separator = ",\n"
    yield "\n]}"


def history_rows(connection: Connection) -> Iterator[HistoryRow]:
    """Yield every row of the history in order."""
    query = sa.select(tables.history).order_by(tables.history.c.number)
    for row in connection.execution_options(yield_per=1000).execute(query):
        yield HistoryRow(*row)


# --- reading and proving


def read_history(document: dict[str, Any], file: str, entries: Iterable[Entry]) -> ForeignHistory | None:
    """Return the history of an export, proved; None if it has none.

    Raises
    ------
    InputError
        If the chain does not hold, or the entries of the file are not what it says.
    """
    given = document.get("history")
    if given is None:
        return None
    rows = tuple(_rows(given, file))
    library_id = given.get("library_id")
    head = rows[-1].hash if rows else GENESIS
    if not isinstance(library_id, str) or len(library_id) != 32 or given.get("head") != head:
        raise _broken(file, "its head is not that of its last row")
    _compare(rows, file, entries)
    return ForeignHistory(library_id, rows)


def _broken(file: str, why: str) -> InputError:
    return InputError(
        f"the history in the file does not hold: {why}",
        where=file,
        hint="the file was changed or cut; export again, or import without its history",
    )


def _rows(given: Any, file: str) -> Iterator[HistoryRow]:
    if not isinstance(given, dict) or not isinstance(given.get("rows"), list):
        raise _broken(file, "it has no rows")
    previous = GENESIS
    for number, value in enumerate(given["rows"], start=1):
        row = _row(value)
        if row is None or row.number != number:
            raise _broken(file, f"row {number} cannot be read")
        if row.previous_hash != previous or not is_whole(row):
            raise _broken(file, f"row {number} was changed")
        previous = row.hash
        yield row


def _row(value: Any) -> HistoryRow | None:
    if not isinstance(value, dict) or set(value) != set(COLUMNS):
        return None
    if not isinstance(value["number"], int) or not all(isinstance(value[name], str) for name in _TEXTS):
        return None
    texts = {
        name: None if value[name] is None else canonical_json(value[name]) for name in ("before", "after")
    }
    if not all(value[name] is None or isinstance(value[name], dict) for name in texts):
        return None
    return HistoryRow(**{**value, **texts})


def _compare(rows: Sequence[HistoryRow], file: str, entries: Iterable[Entry]) -> None:
    last = {row.key: row.after for row in rows if row.kind == "phase"}
    for entry in entries:
        said = last.pop(entry.uid, None)
        if said != canonical_json(compact(entry_to_json(entry))):
            raise _broken(file, f"{entry.name!r} is not what it says")
    if last:
        raise _broken(file, "it tells of entries that are not in the file")


# --- carrying


def carry(writing: Writing, foreign: ForeignHistory, uids: Collection[str], *, remark: str) -> int:
    """Keep the rows of these entries inside rows of this history, those not yet here; return how many."""
    here = _kinds_here(writing.connection)
    count = 0
    for library_id, row in _about(foreign, uids):
        kind = f"{CARRIED_KIND} {library_id} {row['number']}"
        if kind not in here:
            after = {"library_id": library_id, **row}
            writing.append(CARRIED_ACTION, kind, row["key"], after=after, remark=remark)
            count += 1
    return count


def _about(foreign: ForeignHistory, uids: Collection[str]) -> Iterator[tuple[str, dict[str, Any]]]:
    """Yield (library, row) of what happened to these entries; rows carried before are unwrapped."""
    for row in foreign.rows:
        if row.key not in uids:
            continue
        if row.kind == "phase":
            yield foreign.library_id, row_document(row)
        elif row.kind.startswith(CARRIED_KIND) and row.after is not None:
            inner = json.loads(row.after)
            yield inner.pop("library_id"), inner


def carried_row(row: HistoryRow) -> tuple[str, HistoryRow]:
    """Return the row of another library that `row` holds, with that library; else "" and the row itself."""
    if not row.kind.startswith(CARRIED_KIND) or row.after is None:
        return "", row
    inner = json.loads(row.after)
    library_id = str(inner.pop("library_id"))
    texts = {
        name: None if inner[name] is None else canonical_json(inner[name]) for name in ("before", "after")
    }
    return library_id, HistoryRow(**{**inner, **texts})


def _kinds_here(connection: Connection) -> set[str]:
    history = tables.history.c
    query = sa.select(history.kind).where(history.kind.startswith(CARRIED_KIND, autoescape=True))
    return set(connection.execute(query).scalars())
