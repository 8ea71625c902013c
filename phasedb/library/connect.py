"""Opening a store: where it lies, what can be wrong with it, and one switch for what differs by dialect."""

from __future__ import annotations

import os
import random
import sqlite3
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

from phasedb.errors import StoreError

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection, Engine

BUSY_SECONDS: Final = 15.0
"""How long a command waits for another one's write before it gives up."""

_ATTEMPT_MILLISECONDS: Final = 10
_PAUSE_SECONDS: Final = (0.001, 0.015)
"""A write asks for the lock often, at random moments: SQLite's own pauses grow to a tenth of a second, and
with eight writers somebody then never gets a turn."""

SQLITE_MAGIC: Final = b"SQLite format 3\x00"


def is_url(store: str) -> bool:
    """Return whether `store` is a database URL and not a path."""
    return "://" in store


def store_place(store: str | os.PathLike[str] | None) -> str:
    """Return the store's path or URL: as given, else PHASEDB_STORE, else in the platform's user data."""
    if store:
        found = os.fspath(store)
    elif os.environ.get("PHASEDB_STORE"):
        found = os.environ["PHASEDB_STORE"]
    else:
        from platformdirs import user_data_path

        found = str(user_data_path("phasedb", appauthor=False) / "library.sqlite")
    if found.startswith("sqlite:///"):
        found = found.removeprefix("sqlite:///")
    return found


def no_store(place: str) -> StoreError:
    return StoreError(
        "there is no library", where=place, hint="make one with 'phasedb init', or name it with --store"
    )


def check_file(path: Path) -> None:
    """Look at the file before SQLite does.

    Raises
    ------
    StoreError
        If it is absent, a folder, empty, unreadable or not a SQLite file.
    """
    try:
        if path.is_dir():
            raise StoreError("the store is a folder, not a file", where=str(path), hint="name the file in it")
        with path.open("rb") as stream:
            head = stream.read(len(SQLITE_MAGIC))
    except FileNotFoundError:
        raise no_store(str(path)) from None
    except NotADirectoryError:
        raise no_store(str(path)) from None
    except StoreError:
        raise
    except OSError as error:
        raise StoreError(f"the store cannot be read ({error.strerror})", where=str(path)) from None
    if not head:
        raise StoreError(
            "the store is an empty file (zero length)",
            where=str(path),
            hint="restore a backup (phasedb restore FILE --replace), or delete it and run 'phasedb init'",
        )
    if head != SQLITE_MAGIC:
        raise StoreError(
            "this file is not a phasedb library",
            where=str(path),
            hint="name a library with --store; peak lists and exports are not stores",
        )


def _recover(path: Path) -> None:
    """Let SQLite undo a write that was cut off; a read-only connection could not."""
    if not Path(f"{path.resolve()}-journal").exists() or not os.access(path, os.W_OK):
        return
    connection = sqlite3.connect(path, timeout=BUSY_SECONDS)
    try:
        connection.execute("SELECT count(*) FROM sqlite_master").fetchone()
    finally:
        connection.close()


def sqlite_uri(path: Path, mode: str) -> str:
    return f"{path.absolute().as_uri()}?mode={mode}"


def open_sqlite(path: Path, *, write: bool) -> sqlite3.Connection:
    """Return a connection in autocommit mode, foreign keys on, waiting `BUSY_SECONDS` for others."""
    if not write:
        _recover(path)
    connection = sqlite3.connect(
        sqlite_uri(path, "rw" if write else "ro"),
        uri=True,
        timeout=BUSY_SECONDS,
        isolation_level=None,
        check_same_thread=False,
    )
    try:
        connection.execute("PRAGMA foreign_keys=ON")
        connection.execute("PRAGMA synchronous=FULL")
        # a large write stays in memory until its commit: spilling would shut readers out all the while
        connection.execute("PRAGMA cache_spill=OFF")
    except sqlite3.Error:
        connection.close()
        raise
    return connection


def sqlite_engine(connect: Callable[[], sqlite3.Connection]) -> Engine:
    """Return an engine over `connect()`, with explicit BEGIN (IMMEDIATE for writes)."""
    import sqlalchemy as sa
    from sqlalchemy.pool import NullPool

    engine = sa.create_engine("sqlite://", creator=connect, poolclass=NullPool)

    @sa.event.listens_for(engine, "begin")
    def _begin(connection: Connection) -> None:
        if connection.get_execution_options().get("phasedb_write", False):
            driver: Any = connection.connection.driver_connection
            _begin_immediate(driver)
        else:
            connection.exec_driver_sql("BEGIN")

    return engine


def _begin_immediate(driver: sqlite3.Connection) -> None:
    """Begin a write, waiting `BUSY_SECONDS` for those of others."""
    deadline = time.monotonic() + BUSY_SECONDS
    driver.execute(f"PRAGMA busy_timeout={_ATTEMPT_MILLISECONDS}")
    try:
        while True:
            try:
                driver.execute("BEGIN IMMEDIATE")
                return
            except sqlite3.OperationalError as error:
                if "locked" not in str(error) or time.monotonic() > deadline:
                    raise
            time.sleep(random.uniform(*_PAUSE_SECONDS))  # noqa: S311 (no secret)
    finally:
        driver.execute(f"PRAGMA busy_timeout={round(1000 * BUSY_SECONDS)}")


def open_engine(place: str, *, write: bool) -> Engine:
    """Return an engine for the store at `place` (path or URL).

    Raises
    ------
    StoreError
    """
    if is_url(place):
        return _url_engine(place)
    path = Path(place)
    check_file(path)
    return sqlite_engine(lambda: open_sqlite(path, write=write))


def _url_engine(url: str) -> Engine:
    import sqlalchemy as sa

    try:
        return sa.create_engine(url)
    except (sa.exc.ArgumentError, sa.exc.NoSuchModuleError, ImportError) as error:
        raise StoreError(
            f"this database URL cannot be used ({error})",
            where=hidden_password(url),
            hint="expected a path, or postgresql+psycopg://USER@HOST/DATABASE with phasedb[server] installed",
        ) from None


def hidden_password(place: str) -> str:
    """Return the place as it may be shown."""
    if not is_url(place):
        return place
    import sqlalchemy as sa

    try:
        return sa.make_url(place).render_as_string(hide_password=True)
    except sa.exc.ArgumentError:
        return "the database URL"


def damaged_row(error: Exception) -> StoreError:
    """Return the error for a row whose values no library would have written."""
    return StoreError(
        f"the store is damaged: a row cannot be read ({type(error).__name__}: {error})",
        hint="run 'phasedb audit', then 'phasedb restore BACKUP --replace'",
    )


_MEANINGS: Final = (
    # part of the driver's message, what it means, what to do
    ("locked", "another command is writing to the store", "wait and try again; nothing was changed"),
    ("readonly", "the store is read-only", "ask for write access to the file and its folder"),
    ("read-only", "the store is read-only", "ask for write access to the file and its folder"),
    ("full", "no space is left for the store", "free some space and try again; nothing was changed"),
    ("malformed", "the store is damaged", "run 'phasedb audit', then 'phasedb restore BACKUP --replace'"),
    ("not a database", "the store is damaged or is not a phasedb library", "restore a backup"),
    ("could not decode", "the store is damaged", "run 'phasedb audit', then restore a backup"),
    ("unable to open", "the store or its folder cannot be opened", "check that it exists and may be written"),
    (
        "disk i/o",
        "the disk refused a read or write of the store",
        "check free space, quota and the disk; nothing was changed",
    ),
    ("no such", "the store lacks a table or column that it should have", "run 'phasedb audit'"),
    ("append-only", "the history is append-only", "nothing was changed"),
)


@contextmanager
def store_errors(place: str) -> Iterator[None]:
    """Turn what the database driver raises into a `StoreError` that says what to do."""
    import sqlalchemy as sa

    try:
        yield
    except (sa.exc.DBAPIError, sqlite3.Error) as error:
        original = getattr(error, "orig", None) or error
        raise translated(original, place) from error


def translated(error: BaseException, place: str) -> StoreError:
    """Return the `StoreError` that says what a driver's error means."""
    text = " ".join(str(error).split())
    for part, meaning, hint in _MEANINGS:
        if part in text.casefold():
            return StoreError(f"{meaning} ({text})", where=hidden_password(place), hint=hint)
    return StoreError(f"the store cannot be used ({text})", where=hidden_password(place))
