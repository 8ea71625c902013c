"""The library: opening, making and closing a store, reading from it, writing to it."""

from __future__ import annotations

import contextlib
import os
from collections.abc import Callable, Iterable, Iterator, Sequence
from contextlib import contextmanager
from typing import TYPE_CHECKING, Any, Self

import sqlalchemy as sa

from phasedb.crystal.lattice import LatticeType
from phasedb.crystal.phases import PhaseTable
from phasedb.errors import InputError, StoreError
from phasedb.library import changes, connect, entering, finding, reading, tables
from phasedb.library.chain import HistoryRow
from phasedb.library.entry import Draft, Entry
from phasedb.library.people import acting
from phasedb.library.writing import Writing

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection, Engine

    from phasedb.library.entering import Outcome


class Library:
    """A store of phases, open for reading or also for writing.

    Use it as a context manager. Every change is one transaction with one history row for each thing changed;
    `begin_write` puts several changes into one transaction.
    """

    def __init__(
        self, engine: Engine, place: str, *, by: str | None = None, writable: bool = False, as_of: str = ""
    ) -> None:
        self.place = place
        self.person = acting(by)
        self.writable = writable
        self.as_of = as_of
        self._engine = engine
        self._writing: Writing | None = None
        with connect.store_errors(place):
            self._connection = engine.connect()
            self._write_connection: Connection | None = None

    # --- opening and closing ----------------------------------------------------------------------

    @classmethod
    def open(
        cls,
        store: str | os.PathLike[str] | None = None,
        *,
        by: str | None = None,
        write: bool = False,
        as_of: str | None = None,
    ) -> Self:
        """Open the library at `store` (path or URL; else PHASEDB_STORE, else the user's own).

        Parameters
        ----------
        by : str, optional
            Who acts; else PHASEDB_BY, else the login name.
        write : bool
            Without it the store's file is opened read-only, also from a read-only folder.
        as_of : str, optional
            A date, a time (UTC), or a history head (its first 8 or more hex digits): the library as it was
            then, read-only, rebuilt from the history.

        Raises
        ------
        StoreError
            If the store is absent, empty, foreign, locked, damaged, older or newer than this program.
        InputError
            If `as_of` is not a date or a known head.
        """
        place = connect.store_place(store)
        if write and as_of is not None:
            raise InputError("the library as it was cannot be changed", where="as_of")
        engine = connect.open_engine(place, write=write)
        try:
            with connect.store_errors(place):
                _check_revision(engine, place)
            library = cls(engine, place, by=by, writable=write)
        except BaseException:
            engine.dispose()
            raise
        if as_of is None:
            return library
        from phasedb.library.past import past_engine

        with library:
            then, said = past_engine(library, as_of)
        return cls(then, place, by=by, as_of=said)

    @classmethod
    def create(
        cls, store: str | os.PathLike[str] | None = None, *, by: str | None = None, starter: bool = True
    ) -> Self:
        """Make a new library, with the starter library unless `starter` is false, and open it for writing.

        Raises
        ------
        RuleRefusedError
            If there is one already.
        StoreError
            If the place cannot be written.
        """
        from phasedb.library.making import make_store

        place = connect.store_place(store)
        make_store(cls, place, by=by, starter=starter)
        return cls.open(place, by=by, write=True)

    def close(self) -> None:
        """Close the library; closing twice does nothing."""
        with contextlib.suppress(sa.exc.SQLAlchemyError):
            self._connection.close()
        if self._write_connection is not None:
            with contextlib.suppress(sa.exc.SQLAlchemyError):
                self._write_connection.close()
        self._engine.dispose()

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *exc_info: object) -> None:
        self.close()

    # --- transactions -----------------------------------------------------------------------------

    @contextmanager
    def reading(self) -> Iterator[Connection]:
        """Give a connection inside a read transaction (or the write transaction that is open)."""
        with connect.store_errors(self.place):
            if self._writing is not None:
                yield self._writing.connection
            elif self._connection.in_transaction():
                yield self._connection
            else:
                with self._connection.begin():
                    yield self._connection

    @contextmanager
    def begin_write(self) -> Iterator[Writing]:
        """Open a write transaction (BEGIN IMMEDIATE), or join the one that is open.

        All of it is committed when the outermost block ends, none of it if the block raises.

        Raises
        ------
        StoreError
            If the library was opened for reading, or the store is locked, full or read-only.
        """
        if self._writing is not None:
            yield self._writing
            return
        if not self.writable:
            raise StoreError("the library was opened for reading only", where=self.place)
        with connect.store_errors(self.place):
            if self._write_connection is None:
                self._write_connection = self._engine.connect().execution_options(phasedb_write=True)
            with self._write_connection.begin():
                self._writing = Writing(self._write_connection, self.person)
                try:
                    yield self._writing
                    self._writing.finish()
                finally:
                    self._writing = None

    # --- reading ----------------------------------------------------------------------------------

    def _state(self, column: str) -> Any:
        with self.reading() as connection:
            return connection.execute(sa.select(tables.state.c[column])).scalar_one()

    @property
    def phase_count(self) -> int:
        """How many entries are in use (not withdrawn)."""
        return int(self._state("phase_count"))

    @property
    def fingerprint(self) -> str:
        """The sum modulo 2**256 of the content checksums of all entries, in hex: the same content gives the
        same fingerprint, whatever the order."""
        return str(self._state("fingerprint"))

    @property
    def history_head(self) -> str:
        """The hash of the last history row, in hex."""
        return str(self._state("history_head"))

    @property
    def history_count(self) -> int:
        """How many rows the history has."""
        return int(self._state("history_count"))

    @property
    def library_id(self) -> str:
        """A random number given when the library was made, in hex."""
        return str(self._state("library_id"))

    def table(self, *, checked_only: bool = False) -> PhaseTable:
        """Return all entries that can be matched (not withdrawn), sorted by name key."""
        with self.reading() as connection:
            return reading.read_table(connection, checked_only=checked_only)

    def within(
        self,
        lattice: LatticeType,
        a_low: float,
        a_high: float,
        *,
        centre: float | None = None,
        limit: int,
        checked_only: bool = False,
    ) -> tuple[PhaseTable, int]:
        """Return the entries of one lattice type with `a_low` <= a <= `a_high` (Å), and how many there are.

        At most `limit` are returned, nearest to `centre` first (else lowest a first), ties by name key.
        """
        with self.reading() as connection:
            return reading.read_within(
                connection, lattice, a_low, a_high, centre=centre, limit=limit, checked_only=checked_only
            )

    def get(self, name: str) -> Entry:
        """Return the entry of that name or alias (case does not matter).

        Raises
        ------
        UnknownNameError
        """
        with self.reading() as connection:
            return finding.find_entry(connection, name)[1]

    def by_uid(self, uid: str) -> Entry:
        """Return the entry with that uid."""
        with self.reading() as connection:
            return finding.entry_with_uid(connection, uid)

    def list(
        self,
        *,
        elements: Sequence[str] = (),
        lattice: LatticeType | None = None,
        a_min: float | None = None,
        a_max: float | None = None,
        structure: str | None = None,
        text: str | None = None,
        tag: str | None = None,
        withdrawn: bool = False,
    ) -> Sequence[Entry]:
        """Return the entries that fit all filters, by name key.

        Parameters
        ----------
        elements : sequence of str
            Each must be in the formula.
        a_min, a_max : float, optional
            Å, both ends included.
        structure : str, optional
            A structure type, any spelling.
        text : str, optional
            Part of a name, alias, formula, remark or source, or a tag.
        withdrawn : bool
            List only withdrawn entries; they are left out otherwise.
        """
        with self.reading() as connection:
            return finding.list_entries(
                connection,
                elements=elements,
                lattice=lattice,
                a_min=a_min,
                a_max=a_max,
                structure=structure,
                text=text,
                tag=tag,
                withdrawn=withdrawn,
            )

    def entries(self) -> Sequence[Entry]:
        """Return every entry, withdrawn ones included, by name key."""
        with self.reading() as connection:
            return finding.all_entries(connection)

    def history(self, name: str | None = None) -> Sequence[HistoryRow]:
        """Return the history, oldest first: of one entry (any name it ever had), or of everything."""
        with self.reading() as connection:
            return finding.history_rows(connection, name)

    # --- changing ---------------------------------------------------------------------------------

    def add(self, draft: Draft, *, accept_warnings: bool = False, keep_sites: bool = False) -> Outcome:
        """Enter a phase as a draft; see `phasedb.library.entering.add`."""
        return entering.add(self, draft, accept_warnings=accept_warnings, keep_sites=keep_sites)

    def add_many(
        self,
        drafts: Iterable[Draft],
        *,
        progress: Callable[[int], None] | None = None,
        action: str = "entered",
        remark: str = "",
        author: str | None = None,
        remarks: Sequence[str] | None = None,
        keep_sites: bool = False,
    ) -> int:
        """Enter many phases in one transaction; see `phasedb.library.entering.add_many`."""
        return entering.add_many(
            self,
            drafts,
            progress=progress,
            action=action,
            remark=remark,
            author=author,
            remarks=remarks,
            keep_sites=keep_sites,
        )

    def revise(
        self,
        name: str,
        new: dict[str, Any],
        *,
        expect_version: int | None = None,
        accept_warnings: bool = False,
        reason: str = "",
    ) -> Outcome:
        """Change some fields of an entry; see `phasedb.library.changes.revise`."""
        return changes.revise(
            self, name, new, expect_version=expect_version, accept_warnings=accept_warnings, reason=reason
        )

    def check(self, name: str, *, expect_version: int | None = None, remark: str = "") -> Entry:
        """Confirm a draft as a second person; see `phasedb.library.changes.check`."""
        return changes.check(self, name, expect_version=expect_version, remark=remark)

    def withdraw(
        self, name: str, *, reason: str, replaced_by: str | None = None, expect_version: int | None = None
    ) -> Entry:
        """Take an entry out of use; see `phasedb.library.changes.withdraw`."""
        return changes.withdraw(
            self, name, reason=reason, replaced_by=replaced_by, expect_version=expect_version
        )

    def restore_entry(self, name: str, *, reason: str, expect_version: int | None = None) -> Entry:
        """Make a withdrawn entry a draft again; see `phasedb.library.changes.restore_entry`."""
        return changes.restore_entry(self, name, reason=reason, expect_version=expect_version)


def _check_revision(engine: Engine, place: str) -> None:
    """Raise StoreError unless the store is of this program's revision."""
    with engine.connect() as connection:
        revision = revision_of(connection, place)
    shown = connect.hidden_password(place)
    if revision == tables.REVISIONS[-1]:
        return
    if revision in tables.REVISIONS:
        raise StoreError(
            f"the store is of an older revision ({revision}; this program uses {tables.REVISIONS[-1]})",
            where=shown,
            hint="run 'phasedb upgrade' (it makes a backup first); colleagues with an older program "
            "cannot use the store afterwards",
        )
    raise StoreError(
        f"the store was made by a newer program (revision {revision})",
        where=shown,
        hint="update phasedb on this machine; nothing was changed",
    )


def revision_of(connection: Connection, place: str) -> str:
    """Return the revision of an open store.

    Raises
    ------
    StoreError
        If it is a database, but not a phasedb library.
    """
    inspector = sa.inspect(connection)
    names = set(inspector.get_table_names())
    if "alembic_version" in names and {"phase", "state", "history"} <= names:
        revision = connection.execute(sa.text("SELECT version_num FROM alembic_version")).scalar()
        if revision:
            return str(revision)
    raise StoreError(
        "this database is not a phasedb library",
        where=connect.hidden_password(place),
        hint="name a library with --store, or make one with 'phasedb init'",
    )
