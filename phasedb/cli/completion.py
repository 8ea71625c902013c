"""Completion of phase names in a shell: reads them straight from the store's file, and never fails."""

from __future__ import annotations

from pathlib import Path
from typing import Final

import click
from click.shell_completion import CompletionItem

_MOST: Final = 200


def complete_phase(ctx: click.Context, param: click.Parameter, incomplete: str) -> list[CompletionItem]:
    """Return the names of stored phases that start with what was typed (case does not matter)."""
    store = ctx.find_root().params.get("store")
    return [CompletionItem(name, help=formula) for name, formula in _names(store, incomplete)]


def _names(store: str | None, start: str) -> list[tuple[str, str]]:
    import sqlite3

    from phasedb.library.connect import is_url, store_place

    place = store_place(store)
    path = Path(place)
    if is_url(place) or not path.is_file():
        return []
    wanted = start.casefold()
    escaped = wanted.replace("\\", "\\\\").replace("%", "\\%").replace("_", "\\_")
    query = (
        "SELECT name, formula FROM phase WHERE name_key LIKE ? ESCAPE '\\' AND standing != 'withdrawn'"
        " ORDER BY name_key LIMIT ?"
    )
    try:
        connection = sqlite3.connect(f"{path.resolve().as_uri()}?mode=ro", uri=True, timeout=0.2)
        try:
            return [(str(n), str(f)) for n, f in connection.execute(query, (escaped + "%", _MOST))]
        finally:
            connection.close()
    except sqlite3.Error:
        return []  # a shell that completes must not show an error
