"""The store: entries with their sources, standing and history; reads out the phase table for the matcher.

`Library` and the few types that go with it load on first use: importing SQLAlchemy takes a while.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from phasedb.library.entering import Outcome
    from phasedb.library.entry import Draft, Entry, Source
    from phasedb.library.store import Library

_HOMES = {
    "Draft": "phasedb.library.entry",
    "Entry": "phasedb.library.entry",
    "Library": "phasedb.library.store",
    "Outcome": "phasedb.library.entering",
    "Source": "phasedb.library.entry",
}

__all__ = ["Draft", "Entry", "Library", "Outcome", "Source"]


def __getattr__(name: str) -> Any:
    if name in _HOMES:
        return getattr(import_module(_HOMES[name]), name)
    raise AttributeError(f"module 'phasedb.library' has no attribute {name!r}")
