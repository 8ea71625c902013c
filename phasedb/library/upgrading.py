"""Bringing an older store up to date: proved backup first, then all revisions or none."""

from __future__ import annotations

import sqlite3
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import sqlalchemy as sa

from phasedb.errors import StoreError
from phasedb.library import connect, tables
from phasedb.library.backup import copy_database, stamp
from phasedb.library.making import put_in_place
from phasedb.library.migrate import run_revisions
from phasedb.library.people import Person, acting
from phasedb.library.schema import schema_faults
from phasedb.library.store import revision_of
from phasedb.library.writing import Writing

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection, Engine

LATEST = tables.REVISIONS[-1]


@dataclass(frozen=True, slots=True)
class Upgraded:
    """What an upgrade did, or with a dry run would do.

    `backup` is None for a dry run, for a store that was up to date, and on a server.
    """

    place: str
    before: str
    after: str
    backup: Path | None
    rows: dict[str, int]


def upgrade(place: str, *, by: str | None = None, dry_run: bool = False) -> Upgraded:
    """Bring the store at `place` to the revision of this program.

    Raises
    ------
    StoreError
        If the store is newer or damaged, the backup cannot be made or proved, or a step goes wrong; the
        store is then as it was.
    """
    person = acting(by)
    engine = connect.open_engine(place, write=not dry_run)
    try:
        with connect.store_errors(place):
            with engine.connect() as connection:
                before = revision_of(connection, place)
                counts = _row_counts(connection)
            if before not in tables.REVISIONS:
                raise StoreError(
                    f"the store was made by a newer program (revision {before})",
                    where=connect.hidden_password(place),
                    hint="update phasedb on this machine; nothing was changed",
                )
            if before == LATEST:
                return Upgraded(place, before, before, None, counts)
            if dry_run:
                return Upgraded(place, before, LATEST, None, _rehearse(place, person))
            if connect.is_url(place):
                return Upgraded(place, before, LATEST, None, _run(engine, person, before))
            path = Path(place)
            kept = _proved_backup(path, before, counts)
            return Upgraded(place, before, LATEST, kept, _run(_migrating_engine(path), person, before))
    finally:
        engine.dispose()


def _row_counts(connection: Connection) -> dict[str, int]:
    names = sorted(set(sa.inspect(connection).get_table_names()) - {"alembic_version"})
    return {
        name: int(connection.execute(sa.select(sa.func.count()).select_from(sa.table(name))).scalar_one())
        for name in names
    }


def _proved_backup(path: Path, revision: str, counts: dict[str, int]) -> Path:
    target = path.with_name(f"{path.name}.{revision}.{stamp()}.bak")
    beside = target.with_name(f".{target.name}.new")
    try:
        copy_database(path, beside)
        with sqlite3.connect(beside) as copy:
            sound = copy.execute("PRAGMA integrity_check(1)").fetchone()[0]
        copy.close()
        engine = connect.sqlite_engine(lambda: connect.open_sqlite(beside, write=False))
        with engine.connect() as connection:
            same = _row_counts(connection) == counts
        if sound != "ok" or not same:
            raise StoreError(
                f"the backup cannot be trusted ({sound if sound != 'ok' else 'rows differ'})",
                where=str(path),
                hint="nothing was upgraded; see that nobody is writing, and audit with the older program",
            )
        put_in_place(beside, target)
    finally:
        beside.unlink(missing_ok=True)
    return target


def _migrating_engine(path: Path) -> Engine:
    """Return an engine whose connections have foreign keys off: it cannot be done inside a transaction."""

    def connected() -> sqlite3.Connection:
        connection = connect.open_sqlite(path, write=True)
        connection.execute("PRAGMA foreign_keys=OFF")
        return connection

    return connect.sqlite_engine(connected)


def _run(engine: Engine, person: Person, before: str) -> dict[str, int]:
    with engine.connect().execution_options(phasedb_write=True) as connection, connection.begin():
        return _revise(connection, person, before)


def _revise(connection: Connection, person: Person, before: str) -> dict[str, int]:
    """Run the revisions inside the open transaction and prove that nothing was lost."""
    counts = _row_counts(connection)
    run_revisions(connection)
    writing = Writing(connection, person)
    writing.append(
        "upgraded",
        "library",
        _library_id(connection),
        before={"library_id": _library_id(connection)},
        after={"library_id": _library_id(connection)},
        remark=f"revision {before} to {LATEST}",
    )
    writing.finish()
    after = _row_counts(connection)
    lost = [name for name, count in counts.items() if name != "history" and after.get(name) != count]
    if lost or after["history"] != counts["history"] + 1:
        raise StoreError(f"the upgrade would have changed rows of {', '.join(lost)}; nothing was changed")
    faults = schema_faults(connection)
    if connection.dialect.name == "sqlite":
        faults += [str(tuple(row)) for row in connection.exec_driver_sql("PRAGMA foreign_key_check")]
    if faults:
        raise StoreError(f"the upgraded store would not be right ({faults[0]}); nothing was changed")
    return after


def _library_id(connection: Connection) -> Any:
    return connection.execute(sa.select(tables.state.c.library_id)).scalar_one()


def _rehearse(place: str, person: Person) -> dict[str, int]:
    """Run the upgrade on a copy in memory, to say beforehand whether it would work."""
    if connect.is_url(place):
        return {}
    engine, rows = upgraded_in_memory(Path(place), person)
    engine.dispose()
    return rows


def upgraded_in_memory(path: Path, person: Person) -> tuple[Engine, dict[str, int]]:
    """Return an upgraded copy in memory of an older store, and how many rows each table has."""
    from sqlalchemy.pool import StaticPool

    source = connect.open_sqlite(path, write=False)
    memory = sqlite3.connect(":memory:", isolation_level=None, check_same_thread=False)
    source.backup(memory)
    source.close()
    engine = sa.create_engine("sqlite://", creator=lambda: memory, poolclass=StaticPool)
    try:
        with engine.begin() as connection:
            rows = _revise(connection, person, revision_of(connection, str(path)))
    except BaseException:
        engine.dispose()
        raise
    return engine, rows
