"""``phasedb batch``: match a folder of lists in parallel, one table out.

The table's columns are `phasedb.report.batch_table.COLUMNS`; a line of JSON is ``phasedb.batch-row/1``: file,
sha256, status (matched or failed), match (``phasedb.match/1``) or error (what, where, hint). ``--json`` sums
up as ``phasedb.batch/1``: output, lists, taken_up (finished in an earlier run), matched, failed.
"""

from __future__ import annotations

import os
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from phasedb.cli.common import examples, json_option, note, open_library, print_json
from phasedb.cli.matching import MatchOptions, match_options
from phasedb.cli.peak_options import PeakOptions, peak_options
from phasedb.errors import InputError

if TYPE_CHECKING:
    from phasedb.cli.batch_work import Plan


@click.command(
    epilog=examples(
        "phasedb batch lists/ -o results.csv --radiation Cu",
        "phasedb batch lists/ -o results.jsonl --workers 2 --figure matrix.pdf",
    )
)
@click.argument("folder", type=click.Path())
@click.option("-o", "--output", metavar="FILE", required=True, help="The table: .csv or .jsonl.")
@click.option("--workers", type=click.IntRange(1, 256), help="Processes (default: one for each core).")
@click.option("--figure", metavar="FILE", help="Also draw samples against phases: .svg, .png or .pdf.")
@peak_options
@match_options
@json_option
@click.pass_context
def batch(
    ctx: click.Context,
    folder: str,
    output: str,
    workers: int | None,
    figure: str | None,
    measured: PeakOptions,
    asked: MatchOptions,
    as_json: bool,
) -> None:
    """Match every peak list in FOLDER and its subfolders; write one row for each.

    A list that cannot be read is a row with its error. A batch that was stopped goes on where it was when the
    same command is run again: a journal beside the output keeps what is finished.
    """
    target = Path(output)
    if target.suffix.lower() not in (".csv", ".jsonl"):
        raise InputError(
            f"a table cannot be written as {output!r}", where="-o", hint="end the name with .csv or .jsonl"
        )
    if figure is not None:
        from phasedb.report.drawing import figure_format

        figure_format(Path(figure))
    paths = _lists(Path(folder), [target, journal_path(target), *([Path(figure)] if figure else [])])
    plan = _plan(ctx, measured, asked, full=target.suffix.lower() == ".jsonl")
    outcome = _run(plan, Path(folder), paths, target, workers or _cores())
    if figure is not None:
        from phasedb.report.matrix import matrix_figure

        matrix_figure(outcome.cells, Path(figure))
    _say(outcome, output, as_json=as_json)


def journal_path(target: Path) -> Path:
    """Return where the journal of an output lies."""
    return target.with_name(target.name + ".journal")


def _cores() -> int:
    if hasattr(os, "sched_getaffinity"):
        return len(os.sched_getaffinity(0))
    return os.cpu_count() or 1


def _lists(folder: Path, ours: list[Path]) -> list[Path]:
    """Return all files in a folder but hidden ones and our own outputs, in order of their names."""
    if not folder.is_dir():
        raise InputError(
            "not a folder" if folder.exists() else "no such folder",
            where=str(folder),
            hint="give the folder that holds the peak lists",
        )
    left_out = {path.resolve() for path in ours}
    found = []
    for place, folders, names in os.walk(folder):
        folders[:] = sorted(name for name in folders if not name.startswith("."))
        found += [
            path
            for name in names
            if not name.startswith(".") and (path := Path(place, name)).resolve() not in left_out
        ]
    if not found:
        raise InputError(
            "the folder holds no files", where=str(folder), hint="give the folder that holds the peak lists"
        )
    return sorted(found, key=lambda path: path.relative_to(folder).as_posix())


def _plan(ctx: click.Context, measured: PeakOptions, asked: MatchOptions, *, full: bool) -> Plan:
    from phasedb.cli import Settings
    from phasedb.cli.batch_work import Plan

    said: Settings = ctx.find_root().obj
    library = open_library(ctx, as_of=asked.as_of)
    return Plan(
        store=said.store,
        by=said.by,
        asked=asked,
        reading=measured.reading(ctx),
        settings=asked.settings(library, measured.shift_prior(ctx)),
        fingerprint=library.fingerprint,
        full=full,
    )


def _identity(plan: Plan) -> str:
    """Everything that decides a result, but the list: work with another identity is other work."""
    import hashlib

    from phasedb import __version__
    from phasedb.cli.batch_work import hashed

    foreign = "" if plan.asked.foreign is None else hashed(Path(plan.asked.foreign))
    said = repr((__version__, plan.asked, plan.reading, plan.settings, plan.fingerprint, plan.full, foreign))
    return hashlib.sha256(said.encode("utf-8")).hexdigest()


@dataclass(slots=True)
class Outcome:
    """What a batch came to; `cells` holds (file, {phase: probability}) for the figure."""

    lists: int
    taken_up: int
    failed: int = 0
    first_error: str = ""
    cells: list[tuple[str, dict[str, float]]] = field(default_factory=list)


def _run(plan: Plan, folder: Path, paths: list[Path], target: Path, workers: int) -> Outcome:
    from phasedb.cli.batch_work import Item, hashed, results
    from phasedb.cli.progress import Progress
    from phasedb.report.journal import Journal

    items = [Item(str(path), path.relative_to(folder).as_posix(), hashed(path)) for path in paths]
    with Journal(journal_path(target), _identity(plan)) as journal:
        to_do = [item for item in items if (item.file, item.sha256) not in journal.finished]
        with Progress(len(to_do), "lists") as progress:
            for records in results(to_do, plan, min(workers, max(1, len(to_do)))):
                journal.add(records)
                progress.step(len(records))
        journal.end()
        outcome = Outcome(lists=len(items), taken_up=len(items) - len(to_do))
        _write(target, _noted(journal.read((item.file, item.sha256) for item in items), outcome))
    return outcome


def _noted(records: Iterable[dict[str, Any]], outcome: Outcome) -> Iterator[dict[str, Any]]:
    """Pass the records on, one at a time, and note in `outcome` what the summary and the figure need."""
    from phasedb.report.batch_table import error_text, phase_cells

    for record in records:
        if record["status"] == "failed":
            outcome.failed += 1
            outcome.first_error = outcome.first_error or f"{record['file']}: {error_text(record)}"
        outcome.cells.append((record["file"], phase_cells(record)))
        yield record


def _write(target: Path, records: Iterable[dict[str, Any]]) -> None:
    """Write the table whole or not at all, in the order of the files."""
    from phasedb.report.batch_table import csv_lines, json_lines

    rows = json_lines(records) if target.suffix.lower() == ".jsonl" else csv_lines(records)
    partial = target.with_name(f".{target.name}.{os.getpid()}.partial")
    try:
        with partial.open("w", encoding="utf-8", newline="") as stream:
            stream.writelines(rows)
        partial.replace(target)
    except OSError as error:
        partial.unlink(missing_ok=True)
        raise InputError(
            f"cannot write the table: {error.strerror}", where=str(target), hint="choose another -o"
        ) from error


def _say(outcome: Outcome, output: str, *, as_json: bool) -> None:
    """Report what was done; a batch in which nothing worked is bad input."""
    matched = outcome.lists - outcome.failed
    if not matched:
        raise InputError(
            f"none of the {outcome.lists} lists could be matched",
            where=output,
            hint=f"the first error: {outcome.first_error}",
        )
    if as_json:
        summary = {"output": output, "lists": outcome.lists, "taken_up": outcome.taken_up}
        print_json({"schema": "phasedb.batch/1", **summary, "matched": matched, "failed": outcome.failed})
        return
    taken = f" ({outcome.taken_up} of them taken up from before)" if outcome.taken_up else ""
    note(f"{outcome.lists} lists{taken}: {matched} matched, {outcome.failed} failed")
    if outcome.first_error:
        note(f"the first error: {outcome.first_error}")
    note(f"table written to {output}")
