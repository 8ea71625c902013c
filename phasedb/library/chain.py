"""The history's rows: how one is made, hashed and chained to the one before it."""

from __future__ import annotations

import hashlib
from dataclasses import astuple, dataclass, fields
from typing import Final

GENESIS: Final = "0" * 64
"""What stands for the hash before the first row."""


@dataclass(frozen=True, slots=True)
class HistoryRow:
    """One change of anything.

    Attributes
    ----------
    number : int
        Counts from 1 without gaps.
    at : str
        UTC, ISO 8601 with microseconds.
    who, login, host, program_version : str
    action : str
        ``entered``, ``revised``, ``checked``, ``withdrawn``, ``restored``, ...
    kind, key : str
        What was changed (``library``, ``phase``, ``instrument``, ``identification``, ...) and its uid.
    before, after : str or None
        Canonical JSON; None where there was nothing before, or is nothing after.
    remark : str
        The reason given, warnings accepted.
    previous_hash, hash : str
    """

    number: int
    at: str
    who: str
    login: str
    host: str
    program_version: str
    action: str
    kind: str
    key: str
    before: str | None
    after: str | None
    remark: str
    previous_hash: str
    hash: str


COLUMNS: Final = tuple(field.name for field in fields(HistoryRow))


def row_hash(values: tuple[object, ...]) -> str:
    """Return the SHA-256 of a row's values (all but its own hash), each after its length in characters."""
    parts = []
    for value in values:
        text = "" if value is None else str(value)
        parts.append("-:" if value is None else f"{len(text)}:{text}")
    return hashlib.sha256("".join(parts).encode("utf-8", "surrogatepass")).hexdigest()


def is_whole(row: HistoryRow) -> bool:
    """Return whether the row's hash is that of its values."""
    return row_hash(astuple(row)[:-1]) == row.hash
