"""Carrying a plan out: the lock is taken only for the writing, and the plan must still hold then."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import replace
from typing import TYPE_CHECKING, Final

from phasedb.library import changes, entering
from phasedb.library.door import Warned, accepted_text
from phasedb.library.exchange import Plan
from phasedb.library.exchange_rows import Candidate

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

    from phasedb.library.store import Library
    from phasedb.library.writing import Writing

_ROWS_AT_ONCE: Final = 5000


@contextmanager
def planned_write(
    library: Library, make: Callable[[Connection], Plan], judge: Callable[[Plan], None]
) -> Iterator[tuple[Writing, Plan]]:
    """Give an open write transaction and the plan that holds in it.

    Planning takes most of the time, so it is done before others are kept from writing; if they wrote in the
    meantime it is done again.

    Parameters
    ----------
    judge : callable
        Raises if the plan must not be carried out.
    """
    with library.reading() as connection:
        found, head = make(connection), library.history_head
    judge(found)
    with library.begin_write() as writing:
        if writing.history_head != head:
            found = make(writing.connection)
            judge(found)
        yield writing, found


def write_plan(
    writing: Writing,
    found: Plan,
    *,
    action: str,
    remark: Callable[[Candidate], str],
    progress: Callable[[int], None] | None = None,
) -> None:
    """Write what is new and newer in the open transaction, with one history row for each entry.

    Parameters
    ----------
    action : str
        For the history rows; one of `BROUGHT_IN`.
    remark : callable
        What the history says of a candidate's origin; accepted warnings are added.
    progress : callable, optional
        Called with the number of entries written since the last call.
    """
    warned: dict[tuple[str, int, str], list[Warned]] = {}
    for row in found.warnings:
        warned.setdefault((row.file, row.row, row.name), []).append(row.warning)
    for start in range(0, len(found.new), _ROWS_AT_ONCE):
        chunk = [
            (c, entry if c.entry is not None else replace(entry, entered_at=writing.at))
            for c, entry in found.new[start : start + _ROWS_AT_ONCE]
        ]
        said = [
            "; ".join(
                part for part in (remark(c), accepted_text(warned.get((c.file, c.row, c.name), ()))) if part
            )
            for c, _ in chunk
        ]
        entering.write_new(writing, [entry for _, entry in chunk], action=action, remarks=said)
        if progress is not None:
            progress(len(chunk))
    for step in found.newer:
        changes.write_changed(
            writing, step.phase_id, step.old, step.new, action=action, remark=remark(step.candidate)
        )
        if progress is not None:
            progress(1)
