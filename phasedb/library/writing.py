"""One write: a transaction that keeps the history's chain and the library's state in step."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, Final

import sqlalchemy as sa

from phasedb import __version__
from phasedb.library import tables
from phasedb.library.chain import COLUMNS, row_hash
from phasedb.library.entry import canonical_json
from phasedb.library.mapping import insert_rows
from phasedb.library.people import Person, now_utc

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

_ROWS_AT_ONCE: Final = 5000
_MODULUS: Final = 1 << 256


def fingerprint_of(checksums: Any) -> str:
    """Return the library fingerprint: the sum of the checksums modulo 2**256, in hex."""
    return f"{sum(int(checksum, 16) for checksum in checksums) % _MODULUS:064x}"


class Writing:
    """An open write transaction.

    Changes of entries go through `Library`; other modules change their own tables on `connection` and call
    `append` once for each change. State and history are written when the transaction ends.
    """

    def __init__(self, connection: Connection, person: Person) -> None:
        self.connection = connection
        self.person = person
        self.at = now_utc()
        row = connection.execute(sa.select(tables.state).with_for_update()).one()
        self.phase_count: int = row.phase_count
        self.history_count: int = row.history_count
        self._count_before = self.history_count
        self.history_head: str = row.history_head
        self._fingerprint = int(row.fingerprint, 16)
        self._pending: list[dict[str, Any]] = []

    @property
    def fingerprint(self) -> str:
        return f"{self._fingerprint:064x}"

    def append(
        self,
        action: str,
        kind: str,
        key: str,
        *,
        before: dict[str, Any] | None = None,
        after: dict[str, Any] | None = None,
        remark: str = "",
    ) -> None:
        """Add one row to the history."""
        values = (
            self.history_count + 1,
            self.at,
            self.person.who,
            self.person.login,
            self.person.host,
            __version__,
            action,
            kind,
            key,
            None if before is None else canonical_json(before),
            None if after is None else canonical_json(after),
            remark,
            self.history_head,
        )
        own_hash = row_hash(values)
        self.history_count += 1
        self.history_head = own_hash
        self._pending.append(dict(zip(COLUMNS, (*values, own_hash), strict=True)))
        if len(self._pending) >= _ROWS_AT_ONCE:
            self._flush()

    def count_content(self, *, old: str | None, new: str | None, phases: int) -> None:
        """Keep the fingerprint and the number of phases in use: a checksum goes, one comes."""
        change = (int(new, 16) if new else 0) - (int(old, 16) if old else 0)
        self._fingerprint = (self._fingerprint + change) % _MODULUS
        self.phase_count += phases

    def finish(self) -> None:
        """Write what is pending; called by the library just before the commit.

        Without a history row nothing was changed, and the file keeps its bytes.
        """
        if self.history_count == self._count_before:
            return
        self._flush()
        self.connection.execute(
            sa.update(tables.state).values(
                phase_count=self.phase_count,
                fingerprint=self.fingerprint,
                history_count=self.history_count,
                history_head=self.history_head,
            )
        )

    def _flush(self) -> None:
        if self._pending:
            insert_rows(self.connection, tables.history, self._pending)
            self._pending = []
