"""Between entries and the rows of their tables: the one place that knows both."""

from __future__ import annotations

import json
from collections import defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import fields
from typing import TYPE_CHECKING, Any, Final, cast

import sqlalchemy as sa

from phasedb.crystal.phases import Site
from phasedb.library import tables
from phasedb.library.connect import damaged_row
from phasedb.library.entry import Draft, Entry, Source, canonical_json, key_of

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

_CHILD_FIELDS: Final = frozenset({"sites", "aliases", "tags", "sources", "assumed"})
_PLAIN_CONTENT: Final = tuple(f.name for f in fields(Draft) if f.name not in _CHILD_FIELDS)
_CUSTODY: Final = tuple(f.name for f in fields(Entry) if f.name not in ("content", "elements", "formula_key"))
_SOURCE_FIELDS: Final = tuple(f.name for f in fields(Source))
_IDS_AT_ONCE: Final = 500  # well below the variable limit of any SQLite in use (999 before 3.32)


def phase_values(entry: Entry, checksum: str) -> dict[str, Any]:
    """Return the row of table phase."""
    content = entry.content
    values = {name: getattr(content, name) for name in _PLAIN_CONTENT}
    for name in _CUSTODY:
        values[name] = getattr(entry, name)
    values["name_key"] = key_of(content.name)
    values["formula_key"] = entry.formula_key
    values["elements"] = f" {' '.join(entry.elements)} "
    values["assumed"] = canonical_json(list(content.assumed)) if content.assumed else "[]"
    values["checksum"] = checksum
    return values


def child_values(content: Draft, phase_id: int) -> dict[sa.Table, list[dict[str, Any]]]:
    """Return the rows of the tables that hang on a phase."""
    return {
        tables.site: [
            {
                "phase_id": phase_id,
                "position": position,
                "label": site.label,
                "species": canonical_json([[element, share] for element, share in site.species]),
                "x": site.position[0],
                "y": site.position[1],
                "z": site.position[2],
                "b_iso": site.b_iso,
            }
            for position, site in enumerate(content.sites)
        ],
        tables.source: [
            {
                "phase_id": phase_id,
                "position": position,
                **{name: getattr(s, name) for name in _SOURCE_FIELDS},
            }
            for position, s in enumerate(content.sources)
        ],
        tables.alias: [
            {"phase_id": phase_id, "alias": alias, "alias_key": key_of(alias)} for alias in content.aliases
        ],
        tables.tag: [{"phase_id": phase_id, "tag": tag} for tag in content.tags],
    }


def insert_rows(connection: Connection, table: sa.Table, rows: Sequence[dict[str, Any]]) -> None:
    """Insert many rows that all give the same columns; straight to the driver where that is quicker."""
    if not rows:
        return
    if connection.dialect.name != "sqlite":
        connection.execute(sa.insert(table), rows)
        return
    names = tuple(rows[0])
    marks = ", ".join("?" * len(names))
    columns = ", ".join(f'"{name}"' for name in names)
    values = [tuple(row.values()) for row in rows]  # one builder made them all, so the order is the same
    connection.exec_driver_sql(f'INSERT INTO "{table.name}" ({columns}) VALUES ({marks})', values)  # noqa: S608


def insert_entries(connection: Connection, entries: Sequence[Entry], checksums: Sequence[str]) -> list[int]:
    """Insert new entries with all that hangs on them; return their ids in order."""
    last = connection.execute(sa.select(sa.func.max(tables.phase.c.id))).scalar() or 0
    insert_rows(
        connection, tables.phase, [phase_values(e, c) for e, c in zip(entries, checksums, strict=True)]
    )
    found = connection.execute(
        sa.select(tables.phase.c.uid, tables.phase.c.id).where(tables.phase.c.id > last)
    )
    id_of = {row.uid: row.id for row in found}
    ids = [id_of[entry.uid] for entry in entries]
    gathered: dict[sa.Table, list[dict[str, Any]]] = defaultdict(list)
    for entry, phase_id in zip(entries, ids, strict=True):
        content = entry.content
        if content.sites or content.sources or content.aliases or content.tags:
            for table, rows in child_values(content, phase_id).items():
                gathered[table].extend(rows)
    for table, rows in gathered.items():
        insert_rows(connection, table, rows)
    return ids


def update_entry(connection: Connection, phase_id: int, entry: Entry, checksum: str) -> None:
    """Write the entry over the one with this id."""
    connection.execute(
        sa.update(tables.phase).where(tables.phase.c.id == phase_id).values(**phase_values(entry, checksum))
    )
    for table, rows in child_values(entry.content, phase_id).items():
        connection.execute(sa.delete(table).where(table.c.phase_id == phase_id))
        if rows:
            connection.execute(sa.insert(table), rows)


def load_entries(connection: Connection, condition: sa.ColumnElement[bool] | None = None) -> dict[int, Entry]:
    """Return entries by id, in the order of their name keys; all of them without a condition."""
    query = sa.select(tables.phase)
    if condition is not None:
        query = query.where(condition)
    rows = sorted(connection.execute(query).mappings(), key=lambda row: str(row["name_key"]))
    ids = [int(row["id"]) for row in rows] if condition is not None else None
    try:
        children = _Children(connection, ids)
        return {int(row["id"]): entry_from_row(row, children) for row in rows}
    except (ValueError, TypeError, AttributeError) as error:
        raise damaged_row(error) from error


class _Children:
    """The rows that hang on the phases of one reading."""

    def __init__(self, connection: Connection, ids: list[int] | None) -> None:
        self.sites: dict[int, list[Site]] = defaultdict(list)
        self.sources: dict[int, list[Source]] = defaultdict(list)
        self.aliases: dict[int, list[str]] = defaultdict(list)
        self.tags: dict[int, list[str]] = defaultdict(list)
        t = tables
        for row in _of_phases(connection, t.site, ids, t.site.c.position):
            species = tuple((str(e), float(share)) for e, share in json.loads(row.species))
            self.sites[row.phase_id].append(Site(row.label, species, (row.x, row.y, row.z), row.b_iso))
        for row in _of_phases(connection, t.source, ids, t.source.c.position):
            self.sources[row.phase_id].append(Source(*(getattr(row, name) for name in _SOURCE_FIELDS)))
        for row in _of_phases(connection, t.alias, ids, t.alias.c.alias_key):
            self.aliases[row.phase_id].append(row.alias)
        for row in _of_phases(connection, t.tag, ids, t.tag.c.tag):
            self.tags[row.phase_id].append(row.tag)


def _of_phases(
    connection: Connection, table: sa.Table, ids: list[int] | None, order: sa.ColumnElement[Any]
) -> Iterable[Any]:
    query = sa.select(table).order_by(table.c.phase_id, order)
    if ids is None:
        yield from connection.execute(query)
        return
    for start in range(0, len(ids), _IDS_AT_ONCE):
        yield from connection.execute(query.where(table.c.phase_id.in_(ids[start : start + _IDS_AT_ONCE])))


def entry_from_row(row: Any, children: _Children) -> Entry:
    """Return the entry of a row of table phase and of what hangs on it."""
    phase_id = row["id"]
    values = {name: row[name] for name in _PLAIN_CONTENT}
    content = Draft(
        **values,
        assumed=tuple(json.loads(row["assumed"])),
        sites=tuple(children.sites.get(phase_id, ())),
        sources=tuple(children.sources.get(phase_id, ())),
        aliases=tuple(sorted(children.aliases.get(phase_id, ()), key=key_of)),
        tags=tuple(sorted(children.tags.get(phase_id, ()))),
    )
    return Entry(
        content=content,
        elements=tuple(cast(str, row["elements"]).split()),
        formula_key=row["formula_key"],
        **{name: row[name] for name in _CUSTODY},
    )
