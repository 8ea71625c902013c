"""Telling the second of two editors what the first one changed."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING, Any

import sqlalchemy as sa

from phasedb.errors import InputError, RuleRefusedError
from phasedb.library import tables
from phasedb.library.differences import changed_lines
from phasedb.library.entry import Entry, compact, entry_to_json

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection


def stale_edit(
    connection: Connection, entry: Entry, expected: int, new: dict[str, Any]
) -> RuleRefusedError | InputError:
    """Return the error for an edit of version `expected` of an entry that has moved on."""
    if expected > entry.version or expected < 1:
        return RuleRefusedError(
            f"{entry.name!r} is at version {entry.version}; there is no version {expected}",
            hint="see 'phasedb show' for the version",
        )
    history = tables.history.c
    rows = connection.execute(
        sa.select(history.after, history.who, history.at)
        .where(history.key == entry.uid, history.after.is_not(None))
        .order_by(history.number)
    ).all()
    then: dict[str, Any] = {}
    last_by = last_at = "?"
    for after, who, at in rows:
        document = json.loads(after)
        if document["version"] == expected:
            then = document
        last_by, last_at = who, at
    now = compact(entry_to_json(entry))
    lines = "".join(f"\n    {line}" for line in changed_lines(then, now))
    yours = "".join(f"\n    {name}: {value}" for name, value in new.items())
    return RuleRefusedError(
        f"{entry.name!r} is at version {entry.version}, not {expected}: changed by {last_by} at {last_at}"
        f"\n  from version {expected} to {entry.version}:{lines}"
        + (f"\n  your change, not made:{yours}" if yours else "")
        + f"\n  look at it again, then give --expect-version {entry.version}"
    )
