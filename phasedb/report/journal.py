"""An append-only file of finished work: whenever the program is killed, no piece is lost or done twice.

The first line says what the work is; each further line is one finished piece, written and synced before it
counts. A line that was cut short by a kill is dropped when the journal is opened again, and a piece marked
``again`` is done once more.
"""

from __future__ import annotations

import json
import os
from collections.abc import Iterable, Iterator
from pathlib import Path
from types import TracebackType
from typing import Any, Final, Self

from phasedb.errors import InputError

FORMAT: Final = "phasedb.journal/1"


def _lock(descriptor: int, path: Path) -> None:
    try:
        import fcntl
    except ImportError:  # no such locks on this platform: two batches on one output are the user's care
        return
    try:
        fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError:
        raise InputError(
            "another batch is writing this output", where=str(path), hint="wait for it, or choose another -o"
        ) from None


class Journal:
    """The finished pieces of one piece of work.

    Attributes
    ----------
    finished : dict
        Key of each finished piece -> its place in the file.
    """

    def __init__(self, path: Path, work: str) -> None:
        """Open or start the journal at `path` for the work that the text `work` identifies.

        Raises
        ------
        InputError
            If the journal holds unfinished work of another kind, or cannot be written.
        """
        self.path = path
        self.finished: dict[tuple[str, str], int] = {}
        try:
            self._file = path.open("a+b")
        except OSError as error:
            raise InputError(
                f"cannot write beside the output: {error.strerror}", where=str(path), hint="choose another -o"
            ) from error
        try:
            _lock(self._file.fileno(), path)
            self._take_up(work)
        except BaseException:
            self._file.close()
            raise

    def __enter__(self) -> Self:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self._file.close()

    def _take_up(self, work: str) -> None:
        self._file.seek(0)
        head = self._read_line()
        same = head is not None and head.get("format") == FORMAT and head.get("work") == work
        ended = False
        if same:
            good = self._file.tell()
            while (place := self._file.tell()) == good and (record := self._read_line()) is not None:
                good = self._file.tell()
                ended = "end" in record
                if not ended and not record.get("again"):
                    self.finished[record["file"], record["sha256"]] = place
            self._file.truncate(good)
            return
        if head is not None and not self._has_ended():
            raise InputError(
                "the output has a journal of unfinished work with other settings, another library or another"
                " program version",
                where=str(self.path),
                hint="finish it as it was begun, delete the journal to start over, or choose another -o",
            )
        self._file.truncate(0)
        self._append([{"format": FORMAT, "work": work}])

    def _read_line(self) -> dict[str, Any] | None:
        """The next whole line, or None at the end or before a line that was cut short."""
        place = self._file.tell()
        line = self._file.readline()
        if line.endswith(b"\n"):
            try:
                record = json.loads(line)
            except ValueError:
                record = None
            if isinstance(record, dict):
                return record
        self._file.seek(place)
        return None

    def _has_ended(self) -> bool:
        """Whether the last whole line marks the end of the work."""
        last: dict[str, Any] | None = None
        while (record := self._read_line()) is not None:
            last = record
        return last is not None and "end" in last

    def _append(self, records: Iterable[dict[str, Any]]) -> None:
        self._file.seek(0, os.SEEK_END)
        for record in records:
            self._file.write(json.dumps(record, ensure_ascii=False, allow_nan=False).encode("utf-8") + b"\n")
        self._file.flush()
        os.fsync(self._file.fileno())

    def add(self, records: Iterable[dict[str, Any]]) -> None:
        """Keep finished pieces (each with ``file`` and ``sha256``), on the disk before this returns."""
        for record in records:
            self._file.seek(0, os.SEEK_END)
            self.finished[record["file"], record["sha256"]] = self._file.tell()
            self._file.write(json.dumps(record, ensure_ascii=False, allow_nan=False).encode("utf-8") + b"\n")
        self._file.flush()
        os.fsync(self._file.fileno())

    def end(self) -> None:
        """Mark the work as finished: another kind of work may then replace it."""
        self._append([{"end": True}])

    def read(self, keys: Iterable[tuple[str, str]]) -> Iterator[dict[str, Any]]:
        """Yield the finished pieces of those keys, in that order, one at a time."""
        for key in keys:
            self._file.seek(self.finished[key])
            record = self._read_line()
            assert record is not None
            yield record
