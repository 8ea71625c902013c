"""What the store has already of the entries that somebody wants to bring in."""

from __future__ import annotations

import json
from collections.abc import Iterable, Sequence
from typing import TYPE_CHECKING, Any, Final

import sqlalchemy as sa

from phasedb.library import mapping, tables
from phasedb.library.entry import Entry, key_of
from phasedb.library.exchange_rows import Candidate

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

_KEYS_AT_ONCE: Final = 500  # well below the variable limit of any SQLite in use


class Known:
    """What the store has under the names, aliases and uids of the candidates."""

    def __init__(self, connection: Connection, candidates: Sequence[Candidate]) -> None:
        self._connection = connection
        names = {key_of(name) for c in candidates for name in (c.name, *c.prepared.content.aliases)}
        names |= {key_of(c.replaced_by) for c in candidates if c.replaced_by}
        uids = {uid for c in candidates if c.entry for uid in (c.entry.uid, c.entry.replaced_by) if uid}
        phase, alias = tables.phase.c, tables.alias.c
        self.id_of_name: dict[str, int] = dict(self._look_up(phase.name_key, phase.id, names))
        self.id_of_alias: dict[str, int] = dict(self._look_up(alias.alias_key, alias.phase_id, names))
        self.id_of_uid: dict[str, int] = dict(self._look_up(phase.uid, phase.id, uids))
        wanted = {self.id_of_name.get(key_of(c.name)) for c in candidates}
        wanted |= {self.id_of_uid.get(c.entry.uid) for c in candidates if c.entry}
        self.entries: dict[int, Entry] = {}
        for chunk in _chunks(sorted(number for number in wanted if number is not None)):
            self.entries |= mapping.load_entries(connection, phase.id.in_(chunk))

    def _look_up(
        self, key: sa.ColumnElement[Any], value: sa.ColumnElement[Any], wanted: set[str]
    ) -> Iterable[tuple[str, int]]:
        for chunk in _chunks(sorted(wanted)):
            for row in self._connection.execute(sa.select(key, value).where(key.in_(chunk))):
                yield row[0], row[1]

    def uid_of(self, phase_id: int) -> str:
        """Return the uid of an entry."""
        if phase_id in self.entries:
            return self.entries[phase_id].uid
        phase = tables.phase.c
        return str(self._connection.execute(sa.select(phase.uid).where(phase.id == phase_id)).scalar_one())

    def past(self, uid: str) -> list[tuple[str, dict[str, Any]]]:
        """Return action and document of each state that the entry had here, oldest first."""
        history = tables.history.c
        rows = self._connection.execute(
            sa.select(history.action, history.after)
            .where(history.key == uid, history.kind == "phase", history.after.is_not(None))
            .order_by(history.number)
        )
        return [(row.action, json.loads(row.after)) for row in rows]


def uids_here(connection: Connection, uids: Iterable[str]) -> set[str]:
    """Return those uids that belong to an entry of this library."""
    phase = tables.phase.c
    found: set[str] = set()
    for chunk in _chunks(sorted(set(uids))):
        found.update(connection.execute(sa.select(phase.uid).where(phase.uid.in_(chunk))).scalars())
    return found


def _chunks(values: Sequence[Any]) -> Iterable[Sequence[Any]]:
    for start in range(0, len(values), _KEYS_AT_ONCE):
        yield values[start : start + _KEYS_AT_ONCE]
