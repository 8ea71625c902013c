"""Who is acting, where and when."""

from __future__ import annotations

import getpass
import os
import socket
from dataclasses import dataclass
from datetime import UTC, datetime, timedelta

from phasedb.errors import InputError


@dataclass(frozen=True, slots=True)
class Person:
    """Who acts: the name given with --by (or PHASEDB_BY), the login name and the host."""

    who: str
    login: str
    host: str


def acting(by: str | None) -> Person:
    """Return the person who acts; `by` else PHASEDB_BY else the login name.

    Raises
    ------
    InputError
        If the name is blank or holds control characters.
    """
    try:
        login = getpass.getuser()
    except (KeyError, OSError, ImportError):
        login = f"user {os.getuid()}" if hasattr(os, "getuid") else "unknown"
    given = by if by is not None else os.environ.get("PHASEDB_BY") or login
    who = " ".join(given.split())
    if not who or not who.isprintable() or len(who) > 100:
        raise InputError(
            f"the name of who is acting {given[:40]!r} cannot be used",
            where="--by",
            hint="give 1 to 100 printable characters",
        )
    return Person(who, login, socket.gethostname())


def same_person(one: str, other: str) -> bool:
    """Return whether two names mean one person (case and spaces do not matter)."""
    return " ".join(one.split()).casefold() == " ".join(other.split()).casefold()


def now_utc() -> str:
    """Return the time in UTC, ISO 8601 with microseconds: ``2026-03-01T09:30:00.123456Z``."""
    return datetime.now(UTC).isoformat(timespec="microseconds").replace("+00:00", "Z")


def end_of(text: str) -> str:
    """Return the moment that `text` (a date, or a date and time) ends, UTC, comparable with `now_utc`.

    A date means the end of that day; a time without an offset is UTC.

    Raises
    ------
    InputError
    """
    try:
        moment = datetime.fromisoformat(text.strip())
    except ValueError:
        raise InputError(
            f"{text!r} is not a date", where="--as-of", hint="write it like 2026-03-01, or 2026-03-01T09:30"
        ) from None
    if moment.tzinfo is None:
        moment = moment.replace(tzinfo=UTC)
    if len(text.strip()) <= len("2026-03-01"):
        moment += timedelta(days=1, microseconds=-1)
    return moment.astimezone(UTC).isoformat(timespec="microseconds").replace("+00:00", "Z")
