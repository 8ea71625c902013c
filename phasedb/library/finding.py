"""Finding entries and history rows: by name, by filters."""

from __future__ import annotations

from collections.abc import Sequence
from difflib import get_close_matches
from typing import TYPE_CHECKING, Any, Final

import sqlalchemy as sa

from phasedb.crystal.lattice import LatticeType
from phasedb.errors import UnknownNameError
from phasedb.library import mapping, tables
from phasedb.library.chain import HistoryRow
from phasedb.library.entry import Entry, canonical_json, key_of

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

_P = tables.phase.c
_NAMES_TO_COMPARE: Final = 20_000


def id_of_name(connection: Connection, name: str) -> int | None:
    """Return the id of the entry with that name or alias, or None."""
    key = key_of(name)
    found = connection.execute(sa.select(_P.id).where(_P.name_key == key)).scalar()
    if found is None:
        aliases = tables.alias.c
        found = connection.execute(sa.select(aliases.phase_id).where(aliases.alias_key == key)).scalar()
    return found


def _id_of_mineral(connection: Connection, name: str) -> int | None:
    """Return the id of the only entry with that mineral name; several may share one (iron, diamond)."""
    named = sa.func.lower(_P.mineral_name) == key_of(name)
    found = connection.execute(sa.select(_P.id).where(named).limit(2)).scalars().all()
    return found[0] if len(found) == 1 else None


def find_entry(connection: Connection, name: str) -> tuple[int, Entry]:
    """Return id and entry of that name, alias, or mineral name (if only one entry has it).

    Raises
    ------
    UnknownNameError
        With the nearest names.
    """
    phase_id = id_of_name(connection, name)
    if phase_id is None and name.strip():
        phase_id = _id_of_mineral(connection, name)
    if phase_id is None:
        raise UnknownNameError(f"no entry is called {name[:100]!r}", hint=_suggestion(connection, name))
    return phase_id, mapping.load_entries(connection, _P.id == phase_id)[phase_id]


def entry_with_uid(connection: Connection, uid: str) -> Entry:
    """Return the entry with that uid."""
    for entry in mapping.load_entries(connection, _P.uid == uid).values():
        return entry
    raise UnknownNameError(f"no entry has the uid {uid!r}")


def _suggestion(connection: Connection, name: str) -> str:
    key = key_of(name)
    same = sa.func.lower(_P.formula) == "".join(key.split())
    names = connection.execute(sa.select(_P.name).where(same).order_by(_P.name_key).limit(4)).scalars().all()
    if names:
        return f"of that formula there {_are(len(names))} " + ", ".join(repr(n) for n in names)
    known: dict[str, str] = {}
    for query in (
        sa.select(_P.name_key, _P.name).order_by(_P.name_key),
        sa.select(tables.alias.c.alias_key, tables.alias.c.alias).order_by(tables.alias.c.alias_key),
    ):
        known.update((row[0], row[1]) for row in connection.execute(query.limit(_NAMES_TO_COMPARE)))
    near = get_close_matches(key, known, n=3, cutoff=0.6)
    if not near:
        near = sorted(other for other in known if key and key in other)[:3]
    if near:
        return "did you mean " + " or ".join(repr(known[other]) for other in near) + "?"
    return "see 'phasedb list'"


def _are(count: int) -> str:
    return "is" if count == 1 else "are"


def contains(column: sa.ColumnElement[str], part: str) -> sa.ColumnElement[bool]:
    """Return the condition that a text column holds `part`, whatever its case (ASCII in the database)."""
    return sa.func.lower(column).contains(part.lower(), autoescape=True)


def list_entries(
    connection: Connection,
    *,
    elements: Sequence[str],
    lattice: LatticeType | None,
    a_min: float | None,
    a_max: float | None,
    structure: str | None,
    text: str | None,
    tag: str | None,
    withdrawn: bool,
) -> list[Entry]:
    """Return the entries that fit all filters, by name key; see `Library.list`."""
    conditions: list[sa.ColumnElement[bool]] = [
        _P.standing == "withdrawn" if withdrawn else _P.standing != "withdrawn"
    ]
    conditions += [_P.elements.contains(f" {symbol} ", autoescape=True) for symbol in elements]
    if lattice is not None:
        conditions.append(_P.lattice_type == lattice)
    if a_min is not None:
        conditions.append(_P.a_angstrom >= a_min)
    if a_max is not None:
        conditions.append(_P.a_angstrom <= a_max)
    if structure is not None:
        conditions.append(_P.structure_type == structure)
    if tag is not None:
        conditions.append(sa.exists().where(tables.tag.c.phase_id == _P.id, tables.tag.c.tag == tag))
    if text is not None:
        conditions.append(_mentions(text))
    return list(mapping.load_entries(connection, sa.and_(*conditions)).values())


def _mentions(text: str) -> sa.ColumnElement[bool]:
    key = key_of(text)
    of_phase = tables.alias.c.phase_id == _P.id
    return sa.or_(
        _P.name_key.contains(key, autoescape=True),
        sa.func.lower(_P.formula).contains(key, autoescape=True),
        contains(_P.mineral_name, text),
        contains(_P.remarks, text),
        sa.exists().where(of_phase, tables.alias.c.alias_key.contains(key, autoescape=True)),
        sa.exists().where(tables.source.c.phase_id == _P.id, contains(tables.source.c.citation, text)),
        sa.exists().where(tables.tag.c.phase_id == _P.id, contains(tables.tag.c.tag, text)),
    )


def all_entries(connection: Connection) -> list[Entry]:
    """Return every entry, by name key."""
    return list(mapping.load_entries(connection).values())


def history_rows(connection: Connection, name: str | None) -> list[HistoryRow]:
    """Return the history of an entry (or an instrument), or all of it, oldest first.

    Raises
    ------
    UnknownNameError
    """
    query = sa.select(tables.history).order_by(tables.history.c.number)
    if name is not None:
        query = query.where(tables.history.c.key == _key_of_name(connection, name))
    return [HistoryRow(*row) for row in connection.execute(query)]


def _key_of_name(connection: Connection, name: str) -> Any:
    instruments = tables.instrument.c
    found = connection.execute(
        sa.select(instruments.uid).where(instruments.name_key == key_of(name))
    ).scalar()
    if found is not None and id_of_name(connection, name) is None:
        return found
    try:
        return find_entry(connection, name)[1].uid
    except UnknownNameError:
        earlier = _key_of_earlier_name(connection, name)
        if earlier is None:
            raise
        return earlier


def _key_of_earlier_name(connection: Connection, name: str) -> str | None:
    """Return the uid of the entry that once had that name (as it was written)."""
    history = tables.history.c
    written = f'"name":{canonical_json(" ".join(name.split()))}'
    found = connection.execute(
        sa.select(history.key)
        .where(history.kind == "phase", history.after.contains(written, autoescape=True))
        .order_by(history.number.desc())
        .limit(1)
    )
    return found.scalar()
