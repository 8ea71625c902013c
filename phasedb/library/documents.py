"""Rows of instruments, measurements, identifications and signatures, each change with its history row.

The history keeps such a row as a document: its columns without the id, references by uid, and long texts by
their SHA-256. The audit compares every row with the last document that the history has of it.
"""

from __future__ import annotations

import hashlib
from typing import TYPE_CHECKING, Any, Final

import sqlalchemy as sa

from phasedb.library import tables
from phasedb.library.entering import new_uid

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

    from phasedb.library.writing import Writing

RECORD_TABLES: Final = (tables.instrument, tables.measurement, tables.identification, tables.signature)
_LONG: Final = 500
_REFERENCES: Final = {
    "phase_id": tables.phase,
    "measurement_id": tables.measurement,
    "identification_id": tables.identification,
}


def record_document(connection: Connection, table: sa.Table, row: Any) -> dict[str, Any]:
    """Return the document of one row (a mapping of all its columns)."""
    document: dict[str, Any] = {}
    for column in table.columns:
        value = row[column.name]
        if column.name == "id" or value is None:
            continue
        if column.name in _REFERENCES:
            target = _REFERENCES[column.name]
            value = connection.execute(sa.select(target.c.uid).where(target.c.id == value)).scalar()
            document[column.name.removesuffix("_id")] = value
        elif isinstance(value, str) and len(value) > _LONG:
            document[f"{column.name}_sha256"] = hashlib.sha256(value.encode("utf-8")).hexdigest()
        else:
            document[column.name] = value
    return document


def _row_of(connection: Connection, table: sa.Table, uid: str) -> dict[str, Any]:
    return dict(connection.execute(sa.select(table).where(table.c.uid == uid)).mappings().one())


def insert_record(
    writing: Writing,
    table: sa.Table,
    values: dict[str, Any],
    *,
    action: str = "entered",
    remark: str = "",
    uid: str | None = None,
) -> dict[str, Any]:
    """Insert a row of one of `RECORD_TABLES` with its history row; return the whole row.

    It gets a new uid, unless it comes from another library and keeps its own.
    """
    uid = uid or new_uid()
    writing.connection.execute(sa.insert(table).values(uid=uid, **values))
    row = _row_of(writing.connection, table, uid)
    document = record_document(writing.connection, table, row)
    writing.append(action, table.name, uid, after=document, remark=remark)
    return row


def update_record(
    writing: Writing,
    table: sa.Table,
    uid: str,
    values: dict[str, Any],
    *,
    action: str = "revised",
    remark: str = "",
) -> dict[str, Any]:
    """Change a row of one of `RECORD_TABLES`, with its history row; return the whole row."""
    connection = writing.connection
    before = record_document(connection, table, _row_of(connection, table, uid))
    connection.execute(sa.update(table).where(table.c.uid == uid).values(**values))
    row = _row_of(connection, table, uid)
    after = record_document(connection, table, row)
    writing.append(action, table.name, uid, before=before, after=after, remark=remark)
    return row
