"""Copies of a store: made while it is in use, proved, and put back without losing what was there."""

from __future__ import annotations

import contextlib
import os
import shutil
import sqlite3
import uuid
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import TYPE_CHECKING

import sqlalchemy as sa

from phasedb.errors import RuleRefusedError, StoreError
from phasedb.library import connect, tables
from phasedb.library.audit import audit
from phasedb.library.making import put_in_place, sync_folder
from phasedb.library.store import revision_of

if TYPE_CHECKING:
    from phasedb.library.store import Library


@dataclass(frozen=True, slots=True)
class Proof:
    """What a copy that passed the audit holds."""

    revision: str
    phase_count: int
    history_count: int
    history_head: str

    @property
    def is_older(self) -> bool:
        """Whether it has to be upgraded before it can be used."""
        return self.revision != tables.REVISIONS[-1]


@dataclass(frozen=True, slots=True)
class Copied:
    """A proved copy: where it lies, what it holds, and where the replaced store was put (None: none was)."""

    path: Path
    proof: Proof
    kept_aside: Path | None = None


def stamp() -> str:
    """Return the time in UTC as part of a file name."""
    return datetime.now(UTC).strftime("%Y%m%dT%H%M%S.%fZ")


def _file_of(place: str) -> Path:
    if connect.is_url(place):
        raise StoreError(
            "a store on a server is backed up and restored with the server's own tools",
            where=connect.hidden_password(place),
        )
    return Path(place).resolve()  # a link stays a link to the store


@contextmanager
def _beside(path: Path) -> Iterator[Path]:
    """Give the name of a new file beside `path`; it is gone afterwards unless it was put in place."""
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
    except OSError as error:
        raise StoreError(f"the folder cannot be made ({error.strerror})", where=str(path.parent)) from None
    beside = path.with_name(f".{path.name}.{os.getpid()}-{uuid.uuid4().hex[:8]}.new")
    try:
        yield beside
    finally:
        for leftover in (beside, Path(f"{beside}-journal")):
            with contextlib.suppress(OSError):
                leftover.unlink(missing_ok=True)


def copy_database(source: Path, target: Path) -> None:
    """Copy a SQLite database with its backup interface, also while others write to it.

    Raises
    ------
    StoreError
        Naming the file that failed.
    """
    connect.check_file(source)
    with connect.store_errors(str(source)):
        read = connect.open_sqlite(source, write=False)
    try:
        with connect.store_errors(str(target)):
            written = sqlite3.connect(target, timeout=connect.BUSY_SECONDS)
            try:
                read.backup(written)
                written.execute("PRAGMA synchronous=FULL")
            finally:
                written.close()
    finally:
        read.close()


def proved(path: Path, *, library_class: type[Library], called: str) -> Proof:
    """Return the proof of a copy; one of an older revision is proved through an upgrade in memory.

    Raises
    ------
    StoreError
        If it is not whole, not a library, or made by a newer program.
    """
    engine = connect.open_engine(str(path), write=False)
    try:
        with connect.store_errors(called), engine.connect() as connection:
            revision = revision_of(connection, called)
            state = connection.execute(sa.select(tables.state)).one()
    finally:
        engine.dispose()
    with connect.store_errors(called), _current(path, revision, library_class) as copy:
        found = audit(copy)
    if found.faults:
        raise StoreError(
            f"the copy is not whole: {found.faults[0]}"
            + (f" (and {len(found.faults) - 1} more)" if len(found.faults) > 1 else ""),
            where=called,
            hint="run 'phasedb audit'; nothing was written",
        )
    return Proof(revision, found.phase_count, state.history_count, state.history_head)


def _current(path: Path, revision: str, library_class: type[Library]) -> Library:
    if revision not in tables.REVISIONS[:-1]:
        return library_class.open(str(path))  # refuses what a newer program made
    from phasedb.library.people import acting
    from phasedb.library.upgrading import upgraded_in_memory

    engine, _ = upgraded_in_memory(path, acting(None))
    return library_class(engine, str(path))


def backup(place: str, target: Path, *, library_class: type[Library]) -> Copied:
    """Copy the store at `place` to `target`, which must not exist, and prove the copy.

    Raises
    ------
    RuleRefusedError
        If there is something at `target`.
    StoreError
    """
    source = _file_of(place)
    with library_class.open(place):  # says what is wrong with the store, if anything is
        pass
    if target.exists():
        raise RuleRefusedError(
            "there is a file there already; nothing was written",
            where=str(target),
            hint="give the backup a name of its own, with the date in it",
        )
    with _beside(target) as beside:
        copy_database(source, beside)
        found = proved(beside, library_class=library_class, called=place)
        put_in_place(beside, target)
    return Copied(target, found)


def restore(place: str, copy: Path, *, replace: bool, library_class: type[Library]) -> Copied:
    """Put the backup `copy` in the store's place, proved; a store that was there is kept beside it.

    Raises
    ------
    RuleRefusedError
        If there is a store and `replace` is false.
    StoreError
    """
    path = _file_of(place)
    there = path.exists()
    if there and not replace:
        raise RuleRefusedError(
            "there is a store there; nothing was changed",
            where=str(path),
            hint="give --replace to put the backup in its place; the old one is kept beside it",
        )
    if there and copy.exists() and copy.samefile(path):
        raise RuleRefusedError("the backup is the store itself; nothing was changed", where=str(path))
    with _beside(path) as beside:
        copy_database(copy, beside)
        found = proved(beside, library_class=library_class, called=str(copy))
        if not there:
            put_in_place(beside, path)
            return Copied(path, found)
        aside = path.with_name(f"{path.name}.{stamp()}.replaced")
        shutil.copymode(path, beside)
        with beside.open("rb+") as stream:
            os.fsync(stream.fileno())
        with _nobody_writing(path):
            _swap(beside, path, aside)
    return Copied(path, found, aside)


@contextmanager
def _nobody_writing(path: Path) -> Iterator[None]:
    """Hold the old store's lock, so that no write of another command is cut in two by the swap."""
    try:
        held = sqlite3.connect(path, timeout=connect.BUSY_SECONDS, isolation_level=None)
    except sqlite3.Error:
        yield
        return
    try:
        try:
            held.execute("BEGIN EXCLUSIVE")
        except sqlite3.Error as error:
            if "locked" in str(error):
                raise connect.translated(error, str(path)) from error
            # the old store is damaged: there is no write to wait for
        yield
    finally:
        held.close()


def _swap(beside: Path, path: Path, aside: Path) -> None:
    try:
        try:
            os.link(path, aside)
        except FileExistsError:
            raise
        except OSError:  # no hard links here: a copy does as well
            shutil.copy2(path, aside)
        # A journal that SQLite could not undo belongs to the old store and must never meet the new one.
        journal = Path(f"{path}-journal")
        if journal.exists():
            journal.rename(f"{aside}-journal")
        beside.replace(path)
    except OSError as error:
        raise StoreError(
            f"the backup could not be put in place ({error.strerror})",
            where=str(path),
            hint="check that the folder may be written",
        ) from None
    sync_folder(path.parent)
