"""Making a new store: all of it, or nothing."""

from __future__ import annotations

import contextlib
import os
import uuid
from pathlib import Path
from typing import TYPE_CHECKING

import sqlalchemy as sa

from phasedb.errors import RuleRefusedError, StoreError
from phasedb.library import connect, tables
from phasedb.library.chain import GENESIS

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

    from phasedb.library.store import Library


def make_store(library_class: type[Library], place: str, *, by: str | None, starter: bool) -> None:
    """Make the store at `place`, in a file beside it that is put in place only when it is whole.

    Raises
    ------
    RuleRefusedError
        If there is something at `place`.
    StoreError
    """
    if connect.is_url(place):
        _make_on_server(library_class, place, by=by, starter=starter)
        return
    path = Path(place)
    _refuse_existing(path)
    beside = path.with_name(f".{path.name}.{os.getpid()}-{uuid.uuid4().hex[:8]}.new")
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        beside.touch(exist_ok=False)
    except OSError as error:
        raise StoreError(
            f"the library cannot be made there ({error.strerror})",
            where=str(path),
            hint="choose a folder that you may write to, with --store",
        ) from None
    try:
        _fill(library_class, beside, by=by, starter=starter)
        put_in_place(beside, path)
    finally:
        for leftover in (beside, Path(f"{beside}-journal")):
            with contextlib.suppress(OSError):
                leftover.unlink(missing_ok=True)


def _refuse_existing(path: Path) -> None:
    if path.exists() or path.is_symlink():
        raise RuleRefusedError(
            "there is something there already; nothing was changed",
            where=str(path),
            hint="use it as it is, or choose another place with --store",
        )


def _fill(library_class: type[Library], path: Path, *, by: str | None, starter: bool) -> None:
    engine = connect.sqlite_engine(lambda: connect.open_sqlite(path, write=True))
    library = library_class(engine, str(path), by=by, writable=True)
    with library, connect.store_errors(str(path)):
        with engine.connect().execution_options(phasedb_write=True) as connection, connection.begin():
            _prepare(connection)
        _first_rows(library, starter=starter)


def _prepare(connection: Connection) -> None:
    from phasedb.library.migrate import run_revisions

    run_revisions(connection)
    connection.execute(
        sa.insert(tables.state).values(
            id=1,
            library_id=uuid.uuid4().hex,
            phase_count=0,
            fingerprint="0" * 64,
            history_count=0,
            history_head=GENESIS,
        )
    )


def _first_rows(library: Library, *, starter: bool) -> None:
    with library.begin_write() as writing:
        library_id = library.library_id
        writing.append("made", "library", library_id, after={"library_id": library_id})
        if starter:
            from phasedb.library.seed import STARTER_AUTHOR, starter_drafts

            library.add_many(starter_drafts(), author=STARTER_AUTHOR, remark="starter library")


def _make_on_server(library_class: type[Library], url: str, *, by: str | None, starter: bool) -> None:
    engine = connect.open_engine(url, write=True)
    with connect.store_errors(url):
        if sa.inspect(engine).has_table("alembic_version"):
            engine.dispose()
            raise RuleRefusedError(
                "there is a library there already; nothing was changed", where=connect.hidden_password(url)
            )
        with engine.begin() as connection:
            _prepare(connection)
        with library_class(engine, url, by=by, writable=True) as library:
            _first_rows(library, starter=starter)


def put_in_place(beside: Path, path: Path) -> None:
    """Give the finished file its name, never over something that is there.

    Raises
    ------
    RuleRefusedError
        If someone else made a store there in the meantime.
    """
    with beside.open("rb+") as stream:
        os.fsync(stream.fileno())
    try:
        os.link(beside, path)
    except FileExistsError:
        _refuse_existing(path)
    except OSError:  # a file system without hard links
        _refuse_existing(path)
        beside.rename(path)
    sync_folder(path.parent)


def sync_folder(folder: Path) -> None:
    """Make a new name last through a power cut, where the system can."""
    with contextlib.suppress(OSError):
        handle = os.open(folder, os.O_RDONLY)
        try:
            os.fsync(handle)
        finally:
            os.close(handle)
