"""Bringing another lab's library in: all or nothing, every conflict named before anything is written."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from phasedb.errors import InputError, RuleRefusedError, StoreError
from phasedb.library import connect
from phasedb.library.audit import audit
from phasedb.library.exchange import Plan, plan
from phasedb.library.exchange_history import CARRIED_KIND, ForeignHistory, carry, history_rows
from phasedb.library.exchange_measurements import bring_measurements, measurements_of
from phasedb.library.exchange_rows import BadRow, Candidate, whole_content
from phasedb.library.exchange_writing import planned_write, write_plan
from phasedb.library.preparing import Prepared

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

    from phasedb.library.entry import Entry
    from phasedb.library.store import Library
    from phasedb.library.writing import Writing


@dataclass(frozen=True, slots=True)
class Merged:
    """What a merge did, or would do.

    Attributes
    ----------
    plan : Plan
    left_out : tuple of BadRow
        Clashes that were left as they are here.
    measurements : int
        Lists that belong to entries, brought in with them.
    carried : int
        History rows of the other library that were carried along.
    written : bool
    """

    plan: Plan
    left_out: tuple[BadRow, ...]
    measurements: int
    carried: int
    written: bool


class ClashesRefusedError(RuleRefusedError):
    """Entries of the two libraries contradict each other; nothing was written."""

    def __init__(self, clashes: Sequence[BadRow]) -> None:
        lines = "".join(f"\n  - {row}" for row in clashes)
        count = "an entry contradicts" if len(clashes) == 1 else f"{len(clashes)} entries contradict"
        super().__init__(
            f"{count} this library, and nothing was written; rename or revise one side, or keep this "
            f"library's side with --keep-ours:{lines}"
        )
        self.clashes = tuple(clashes)


def merge(
    library: Library,
    place: str,
    *,
    dry_run: bool = False,
    keep_ours: bool = False,
    announce: Callable[[Plan], None] | None = None,
    progress: Callable[[int, int], None] | None = None,
) -> Merged:
    """Bring the entries of the library at `place` in, with the history of each.

    Parameters
    ----------
    dry_run : bool
        Only say what would happen.
    keep_ours : bool
        Leave out entries that contradict this library.
    announce : callable, optional
        Gets the plan before anything is written.

    Raises
    ------
    ClashesRefusedError
    InputError
        If it is the same store.
    StoreError
        If the other library cannot be used, or is not whole.
    """
    _refuse_itself(library, place)
    with type(library).open(place) as other, connect.store_errors(place):
        found = audit(other)
        if found.faults:
            raise StoreError(
                f"the other library is not whole: {found.faults[0]}",
                where=place,
                hint=f"run 'phasedb --store {place} audit'; nothing was written",
            )
        with other.reading() as connection:
            entries = list(other.entries())
            rows = tuple(
                r for r in history_rows(connection) if r.kind == "phase" or r.kind.startswith(CARRIED_KIND)
            )
            foreign = ForeignHistory(other.library_id, rows)
            measurements = list(measurements_of(connection))
            origin = f"from library {other.library_id[:8]} at {place}, history head {other.history_head[:16]}"
    candidates = [_candidate(entry, place) for entry in entries]
    if dry_run:
        with library.reading() as connection:
            found_plan = _plan(connection, candidates, foreign)
        if announce is not None:
            announce(found_plan)
        return Merged(found_plan, tuple(found_plan.clashes), 0, 0, False)

    def judge(found_plan: Plan) -> None:
        if announce is not None:
            announce(found_plan)
        if found_plan.clashes and not keep_ours:
            raise ClashesRefusedError(found_plan.clashes)

    def make(connection: Connection) -> Plan:
        return _plan(connection, candidates, foreign)

    with planned_write(library, make, judge) as (writing, found_plan):
        _write(writing, found_plan, origin, progress)
        brought = _uids(found_plan)
        measured = bring_measurements(writing, measurements, brought, action="merged", remark=origin)
        carried = carry(writing, foreign, brought, remark=origin)
    return Merged(found_plan, tuple(found_plan.clashes), measured, carried, True)


def _write(writing: Writing, found: Plan, origin: str, progress: Callable[[int, int], None] | None) -> None:
    total = len(found.new) + len(found.newer)
    done = 0

    def written(count: int) -> None:
        nonlocal done
        done += count
        if progress is not None:
            progress(done, total)

    write_plan(writing, found, action="merged", remark=lambda _: origin, progress=written)


def _refuse_itself(library: Library, place: str) -> None:
    same = place == library.place
    if not same and not connect.is_url(place) and not connect.is_url(library.place):
        one, other = Path(place), Path(library.place)
        same = one.exists() and other.exists() and one.samefile(other)
    if same:
        raise InputError("this is the library itself", where=place, hint="name another library's store")


def _candidate(entry: Entry, place: str) -> Candidate:
    prepared = Prepared(entry.content, entry.elements, entry.formula_key)
    return Candidate(place, 0, prepared, entry, project=whole_content)


def _plan(connection: Connection, candidates: Sequence[Candidate], foreign: ForeignHistory) -> Plan:
    # by and at are for entries without custody; those of a library have theirs
    return plan(connection, candidates, by="", at="", past=foreign.past)


def _uids(found: Plan) -> set[str]:
    """Return the entries that were brought in."""
    return {entry.uid for _, entry in found.new} | {step.new.uid for step in found.newer}
