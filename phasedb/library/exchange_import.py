"""Importing files: all their rows are read first, then written in one transaction, or none is."""

from __future__ import annotations

import gc
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final, Literal, get_args

from phasedb.errors import InputError
from phasedb.library.exchange import Past, Plan, RowWarning, plan
from phasedb.library.exchange_history import ForeignHistory, carry, read_history
from phasedb.library.exchange_known import uids_here
from phasedb.library.exchange_measurements import bring_measurements, read_measurements
from phasedb.library.exchange_rows import BadRow, Candidate
from phasedb.library.exchange_writing import planned_write, write_plan
from phasedb.library.people import now_utc

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

    from phasedb.library.store import Library
    from phasedb.library.writing import Writing

Kind = Literal["csv", "json", "cif"]
KINDS: Final[tuple[Kind, ...]] = get_args(Kind)

Progress = Callable[[str, int, int], None]
"""Called with what is being done, how much of it is done, and how much there is (0 if not known)."""

_STEP: Final = 500


@dataclass(frozen=True, slots=True)
class GivenFile:
    """A file's text, already decoded; `name` is printable."""

    name: str
    text: str
    sha256: str
    kind: Kind


def kind_of(path: str) -> Kind:
    """Return the format that a file's suffix names.

    Raises
    ------
    InputError
    """
    suffix = Path(path).suffix.casefold().removeprefix(".")
    if suffix in ("tsv", "txt"):
        return "csv"
    for kind in KINDS:
        if suffix == kind:
            return kind
    raise InputError(
        f"the format of the file is not known by its suffix {Path(path).suffix!r}",
        where=path,
        hint="expected .csv, .json or .cif",
    )


class BadRowsError(InputError):
    """Rows that cannot be brought in, and nobody said to leave them out; nothing was written."""

    def __init__(self, rows: Sequence[BadRow], total: int) -> None:
        lines = "".join(f"\n  - {row}" for row in rows)
        count = "a row" if len(rows) == 1 else f"{len(rows)} rows"
        super().__init__(
            f"{count} of {total} cannot be brought in, and nothing was written; correct them, or leave them "
            f"out with --skip-bad:{lines}"
        )
        self.rows = tuple(rows)


@dataclass(frozen=True, slots=True)
class Imported:
    """What an import did.

    Attributes
    ----------
    new, newer, same, older : int
        Entries entered, brought up to date, already here, and here in a later state.
    left_out : tuple of BadRow
    warnings : tuple of RowWarning
    notes : tuple of str
    measurements : int
        Lists that belong to entries, brought in with them.
    carried : int
        History rows of other libraries that were carried along.
    """

    new: int
    newer: int
    same: int
    older: int
    left_out: tuple[BadRow, ...]
    warnings: tuple[RowWarning, ...]
    notes: tuple[str, ...]
    measurements: int
    carried: int


@dataclass(slots=True)
class _Read:
    candidates: list[Candidate] = field(default_factory=list)
    bad: list[BadRow] = field(default_factory=list)
    notes: list[str] = field(default_factory=list)
    histories: dict[str, ForeignHistory] = field(default_factory=dict)  # by file, as the next
    measurements: dict[str, list[dict[str, Any]]] = field(default_factory=dict)

    @property
    def total(self) -> int:
        return len(self.candidates) + len(self.bad)


def import_files(
    library: Library, files: Sequence[GivenFile], *, skip_bad: bool = False, progress: Progress | None = None
) -> Imported:
    """Bring in all rows of the files in one transaction.

    Parameters
    ----------
    skip_bad : bool
        Leave out rows that cannot be brought in; else one such row stops everything.
    progress : callable, optional

    Raises
    ------
    BadRowsError
    InputError
        If a file as a whole cannot be read.
    """
    with _no_collector():
        return _import(library, files, skip_bad=skip_bad, say=progress or _silent)


@contextmanager
def _no_collector() -> Iterator[None]:
    """Keep the cycle collector off: it would walk through all rows read so far again and again."""
    was_on = gc.isenabled()
    gc.disable()
    try:
        yield
    finally:
        if was_on:
            gc.enable()


def _import(library: Library, files: Sequence[GivenFile], *, skip_bad: bool, say: Progress) -> Imported:
    read = _Read()
    for file in files:
        _read_file(file, read, say)
    sha256 = {file.name: file.sha256[:16] for file in files}
    measured = 0
    carried = 0

    def make(connection: Connection) -> Plan:
        who, at = library.person.who, now_utc()
        return plan(connection, read.candidates, by=who, at=at, past=_past(read))

    def judge(found: Plan) -> None:
        if not skip_bad and (read.bad or found.clashes):
            raise BadRowsError(_all_bad(read, found), read.total)

    with planned_write(library, make, judge) as (writing, found):
        _write(writing, found, sha256, say)
        for file in files:
            remark = f"from {file.name} (sha256 {sha256[file.name]})"
            here = uids_here(writing.connection, _uids(read, file))
            measured += bring_measurements(
                writing, read.measurements.get(file.name, ()), here, action="imported", remark=remark
            )
            if file.name in read.histories:
                carried += carry(writing, read.histories[file.name], here, remark=remark)
    return Imported(
        new=len(found.new),
        newer=len(found.newer),
        same=len(found.same),
        older=len(found.older),
        left_out=tuple(_all_bad(read, found)),
        warnings=tuple(found.warnings),
        notes=(*read.notes, *found.remarks),
        measurements=measured,
        carried=carried,
    )


def _all_bad(read: _Read, found: Plan) -> list[BadRow]:
    return sorted([*read.bad, *found.clashes], key=lambda row: (row.file, row.row))


def _silent(what: str, done: int, total: int) -> None:
    """Show no progress."""


def _past(read: _Read) -> Past:
    def past(uid: str) -> list[dict[str, Any]]:
        return [document for history in read.histories.values() for document in history.past(uid)]

    return past


def _write(writing: Writing, found: Plan, sha256: dict[str, str], say: Progress) -> None:
    total = len(found.new) + len(found.newer)
    done = 0

    def written(count: int) -> None:
        nonlocal done
        done += count
        say("entries written", done, total)

    def remark(candidate: Candidate) -> str:
        return f"from {candidate.file}, row {candidate.row} (sha256 {sha256[candidate.file]})"

    write_plan(writing, found, action="imported", remark=remark, progress=written)


def _uids(read: _Read, file: GivenFile) -> set[str]:
    """Return the uids of the entries in a file."""
    return {c.entry.uid for c in read.candidates if c.entry is not None and c.file == file.name}


# --- reading


def _read_file(file: GivenFile, read: _Read, say: Progress) -> None:
    first = len(read.candidates)
    before = read.total
    total = file.text.count("\n") if file.kind == "csv" else 0
    history = None
    if file.kind == "json":
        from phasedb.library.exchange_json import parse_document, read_phases

        document = parse_document(file.text, file.name)
        total = len(document["phases"])
        rows = read_phases(document, file.name, read.notes)
        history = document
        read.measurements[file.name] = read_measurements(document, file.name)
    elif file.kind == "csv":
        from phasedb.library.exchange_csv import read_csv

        rows = read_csv(file.text, file.name, read.notes)
    else:
        from phasedb.library.exchange_cif import read_cif_rows

        rows = read_cif_rows(file.text, file.name, read.notes)
    for number, row in enumerate(rows, start=1):
        if isinstance(row, BadRow):
            read.bad.append(row)
        else:
            read.candidates.append(row)
        if number % _STEP == 0:
            say("rows read", number, total)
    if read.total == before:
        read.notes.append(f"{file.name}: there is no row in it")
    if history is not None and len(read.candidates) - first == total:
        entries = [c.entry for c in read.candidates[first:] if c.entry is not None]
        proved = read_history(history, file.name, entries)
        if proved is not None:
            read.histories[file.name] = proved
    elif history is not None and history.get("history") is not None:
        read.notes.append(f"{file.name}: its history was not carried over, since rows of it are bad")
