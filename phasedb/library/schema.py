"""Whether a store's tables, indexes and triggers are those that this program made."""

from __future__ import annotations

import re
from functools import lru_cache
from typing import TYPE_CHECKING, Final

import sqlalchemy as sa

from phasedb.library import tables

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

TRIGGERS: Final = ("history_no_delete", "history_no_update")


def normalised_schema(connection: Connection) -> dict[str, str]:
    """Return the CREATE statement of each table, index and trigger of a SQLite store, spaces made one."""
    rows = connection.exec_driver_sql(
        "SELECT name, sql FROM sqlite_master WHERE sql IS NOT NULL AND name <> 'alembic_version'"
    )
    return {name: re.sub(r"\s*([(),])\s*", r"\1", " ".join(sql.split())) for name, sql in rows}


@lru_cache(maxsize=1)
def _expected() -> dict[str, str]:
    engine = sa.create_engine("sqlite://")
    with engine.begin() as connection:
        tables.metadata.create_all(connection)
        expected = normalised_schema(connection)
    engine.dispose()
    return expected


def schema_faults(connection: Connection) -> list[str]:
    """Return what differs from the schema that this program makes; nothing for other dialects than SQLite."""
    if connection.dialect.name != "sqlite":
        return []
    found = normalised_schema(connection)
    faults = []
    for name, sql in _expected().items():
        if name not in found:
            faults.append(f"the table or index {name} is missing")
        elif found[name] != sql:
            faults.append(f"the table or index {name} was changed")
    faults += [
        f"the trigger {name}, which keeps the history append-only, is missing"
        for name in TRIGGERS
        if name not in found
    ]
    faults += [
        f"{name} is not part of a library"
        for name in found
        if name not in _expected() and name not in TRIGGERS
    ]
    return faults
