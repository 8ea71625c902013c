"""The work of a batch: one list at a time, in this process or spread over several, none stopping the rest."""

from __future__ import annotations

from collections import deque
from collections.abc import Iterable, Iterator
from concurrent.futures import FIRST_COMPLETED, Executor, Future, ProcessPoolExecutor, wait
from concurrent.futures.process import BrokenProcessPool
from contextlib import suppress
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

from phasedb.cli.matching import MatchOptions, TableOnce, foreign_positions, run_match
from phasedb.cli.peak_options import Reading
from phasedb.errors import InputError, PhasedbError, StoreError

if TYPE_CHECKING:
    from phasedb.identify.settings import MatchSettings
    from phasedb.measured.peaklist import PeakList

_AHEAD: Final = 4  # lists handed out for each worker: enough to keep it busy, few enough to keep memory flat


@dataclass(frozen=True, slots=True)
class Plan:
    """All that a worker needs to match any list of the batch."""

    store: str | None
    by: str | None
    asked: MatchOptions
    reading: Reading
    settings: MatchSettings
    fingerprint: str
    full: bool


@dataclass(frozen=True, slots=True)
class Item:
    """One list: where it lies, its name in the table, and the hash of its content."""

    path: str
    file: str
    sha256: str


class Bench:
    """An open library with everything read once, for many lists."""

    def __init__(self, plan: Plan) -> None:
        from phasedb.library import Library

        self.plan = plan
        self._library = Library.open(plan.store, by=plan.by, as_of=plan.asked.as_of)
        self._source = TableOnce(self._library)
        self._foreign: PeakList | None = None
        if plan.asked.foreign is not None:
            self._foreign = plan.reading.read(plan.asked.foreign)

    def close(self) -> None:
        """Close the library."""
        self._library.close()

    def matched(self, item: Item) -> dict[str, Any]:
        """Return the record of one list: its match, or why there is none.

        Raises
        ------
        StoreError
            If the library changed since the batch began.
        """
        from dataclasses import replace

        from phasedb.report.batch_table import failed_row, matched_row

        if self._source.fingerprint != self.plan.fingerprint:
            raise StoreError("the library changed while the batch began", hint="run the same command again")
        record: dict[str, Any] = {"file": item.file, "sha256": item.sha256}
        try:
            peaks = self.plan.reading.read(item.path)
            settings = self.plan.settings
            if self._foreign is not None:
                settings = replace(settings, foreign_positions=foreign_positions(self._foreign, peaks))
            return record | matched_row(run_match(peaks, self._source, settings), full=self.plan.full)
        except StoreError:
            raise
        except PhasedbError as error:
            return record | failed_row(error)
        except Exception as error:  # a bug met in one list must not stop the others
            what = f"unexpected fault: {type(error).__name__}: {error}"
            fault = InputError(what, where=item.file, hint="this is a bug: report it")
            return record | failed_row(fault, again=True)


_bench: Bench | None = None  # one for each worker process


def _start_worker(plan: Plan) -> None:
    import multiprocessing
    import os
    import signal
    import threading

    global _bench
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # the parent stops its workers
    parent = multiprocessing.parent_process()

    def leave_with_parent() -> None:
        if parent is not None:
            parent.join()  # returns when the parent is gone, killed or not
            os._exit(1)

    threading.Thread(target=leave_with_parent, daemon=True).start()
    _bench = Bench(plan)


def _work(item: Item) -> dict[str, Any]:
    assert _bench is not None
    return _bench.matched(item)


def _crashed(item: Item) -> dict[str, Any]:
    from phasedb.report.batch_table import failed_row

    fault = InputError(
        "the worker process died on this list", where=item.file, hint="match it alone to see why"
    )
    return {"file": item.file, "sha256": item.sha256} | failed_row(fault, again=True)


def results(items: Iterable[Item], plan: Plan, workers: int) -> Iterator[list[dict[str, Any]]]:
    """Yield the records of all items as they are finished, a few at a time, in no fixed order."""
    if workers == 1:
        bench = Bench(plan)
        try:
            for item in items:
                yield [bench.matched(item)]
        finally:
            bench.close()
        return
    waiting = deque(items)
    while waiting:
        with _pool(plan, workers) as pool:
            in_flight: dict[Future[dict[str, Any]], Item] = {}
            try:
                yield from _spread(pool, waiting, in_flight, workers)
            except BrokenProcessPool:
                suspects = list(in_flight.values())
            else:
                return
            finally:
                pool.shutdown(wait=False, cancel_futures=True)
        for item in suspects:  # one of them killed a worker: each gets a process of its own
            yield [_alone(item, plan)]


def _pool(plan: Plan, workers: int) -> ProcessPoolExecutor:
    import multiprocessing

    return ProcessPoolExecutor(
        workers, mp_context=multiprocessing.get_context("spawn"), initializer=_start_worker, initargs=(plan,)
    )


def _spread(
    pool: Executor, waiting: deque[Item], in_flight: dict[Future[dict[str, Any]], Item], workers: int
) -> Iterator[list[dict[str, Any]]]:
    while waiting or in_flight:
        while waiting and len(in_flight) < _AHEAD * workers:
            item = waiting.popleft()
            try:
                in_flight[pool.submit(_work, item)] = item
            except BrokenProcessPool:
                waiting.appendleft(item)
                raise
        done, _ = wait(in_flight, return_when=FIRST_COMPLETED)
        finished = []
        for future in done:
            finished.append(future.result())
            del in_flight[future]
        yield finished


def _alone(item: Item, plan: Plan) -> dict[str, Any]:
    with _pool(plan, 1) as pool, suppress(BrokenProcessPool):
        return pool.submit(_work, item).result()
    return _crashed(item)


def hashed(path: Path) -> str:
    """Return the SHA-256 of a file's content; empty if it cannot be read."""
    import hashlib

    try:
        with path.open("rb") as stream:
            return hashlib.file_digest(stream, "sha256").hexdigest()
    except OSError:
        return ""
