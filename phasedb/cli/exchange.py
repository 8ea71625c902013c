"""Commands that bring entries in and out: import, export, merge."""

from __future__ import annotations

import sys
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING, Any, Final

import click

from phasedb.cli.common import examples, json_option, note, open_library, print_json

if TYPE_CHECKING:
    from phasedb.library.exchange import Plan, RowWarning
    from phasedb.library.exchange_rows import BadRow


_SHOWN_ON_A_TERMINAL: Final = 40


def _watch() -> Callable[[str, int, int], None]:
    """Return a callable that shows progress on a terminal, each kind of work on a line of its own."""
    from phasedb.cli.progress import Progress

    shown: dict[str, Progress] = {}

    def watch(what: str, done: int, total: int) -> None:
        if what not in shown:
            for other in shown.values():
                other.__exit__(None, None, None)
            shown[what] = Progress(total, what)
        shown[what].step(done - shown[what].done)
        if done >= total:
            shown[what].__exit__(None, None, None)

    return watch


def _list(what: str, rows: Sequence[RowWarning]) -> None:
    """Print all warnings; on a terminal only the first, which is what a person can read."""
    shown = rows[:_SHOWN_ON_A_TERMINAL] if sys.stderr.isatty() else rows
    for row in shown:
        note(f"{what}: {row}")
    if len(rows) > len(shown):
        note(f"and {len(rows) - len(shown)} more; send them to a file with 2> FILE, or use --json")


def _bad_document(row: BadRow) -> dict[str, Any]:
    return {
        "file": row.file,
        "row": row.row or None,
        "name": row.name or None,
        "column": row.column or None,
        "reason": row.reason,
    }


def _warning_document(row: RowWarning) -> dict[str, Any]:
    return {
        "file": row.file,
        "row": row.row or None,
        "name": row.name,
        "kind": row.warning.kind,
        "text": row.warning.text,
    }


@click.command(
    "import",
    epilog=examples("phasedb import cubic_phases.csv", "phasedb import other-lab.json tin.cif --skip-bad"),
)
@click.argument("files", metavar="FILE...", nargs=-1, required=True)
@click.option("--skip-bad", is_flag=True, help="Leave out rows that cannot be brought in, and say which.")
@json_option
@click.pass_context
def import_(ctx: click.Context, files: tuple[str, ...], skip_bad: bool, as_json: bool) -> None:
    """Bring entries in from CSV, JSON or CIF.

    All rows of all files are written, or none. A table needs the columns name, formula, lattice_type and
    a_angstrom. What the library has already is left as it is. With --json the schema is phasedb.import/1.
    """
    from phasedb.library.exchange_import import GivenFile, import_files, kind_of
    from phasedb.measured.textfile import read_source
    from phasedb.report.table import printable

    given = []
    for file in files:
        kind = kind_of(file)
        source = read_source(file)
        for remark in source.notes:
            note(f"note: {printable(file)}: {remark}")
        given.append(GivenFile(printable(file), source.text.removeprefix("\ufeff"), source.sha256, kind))
    library = open_library(ctx, write=True)
    done = import_files(library, given, skip_bad=skip_bad, progress=_watch())
    for text in done.notes:
        note(f"note: {text}")
    _list("warning", done.warnings)
    for row in done.left_out:
        note(f"left out: {row}")
    if as_json:
        print_json(
            {
                "schema": "phasedb.import/1",
                "new": done.new,
                "brought_up_to_date": done.newer,
                "already_here": done.same,
                "here_in_a_later_state": done.older,
                "left_out": [_bad_document(row) for row in done.left_out],
                "warnings": [_warning_document(row) for row in done.warnings],
                "notes": list(done.notes),
                "measurements": done.measurements,
                "history_rows_carried_over": done.carried,
                "history_head": library.history_head,
            }
        )
        return
    click.echo(_summary(done.new, done.newer, done.same, done.older, len(done.left_out)))
    if done.carried:
        click.echo(f"{done.carried} rows of history carried over")


def _summary(new: int, newer: int, same: int, older: int, left_out: int) -> str:
    parts = [f"{new} {'entry' if new == 1 else 'entries'} brought in"]
    for count, what in (
        (newer, "brought up to date"),
        (same, "already here"),
        (older, "here in a later state"),
        (left_out, "left out"),
    ):
        if count:
            parts.append(f"{count} {what}")
    return ", ".join(parts)


@click.command(epilog=examples("phasedb export library.json --with-history", "phasedb export library.csv"))
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--with-history", is_flag=True, help="With the whole history (JSON only).")
@json_option
@click.pass_context
def export(ctx: click.Context, file: Path, with_history: bool, as_json: bool) -> None:
    """Write all entries to CSV, JSON or CIF, withdrawn ones too.

    JSON says everything; the same entries give the same bytes. In CSV cells that start with = + - or @ get an
    apostrophe before them, which import takes off again. With --json the schema is phasedb.export/1.
    """
    from phasedb.library.exchange_export import export as write
    from phasedb.report.table import printable

    library = open_library(ctx)
    done = write(library, file, with_history=with_history, progress=_watch())
    for text in done.notes:
        note(f"note: {text}")
    if as_json:
        print_json(
            {
                "schema": "phasedb.export/1",
                "file": str(file),
                "entries": done.entries,
                "history_rows": done.history_rows,
                "fingerprint": library.fingerprint,
                "history_head": library.history_head,
                "notes": list(done.notes),
            }
        )
        return
    history = f" and {done.history_rows} rows of history" if with_history else ""
    click.echo(f"wrote {done.entries} entries{history} to {printable(str(file))}")


@click.command(epilog=examples("phasedb merge other-lab.sqlite --dry-run", "phasedb merge other-lab.sqlite"))
@click.argument("other", metavar="STORE")
@click.option("--dry-run", is_flag=True, help="Only say what would happen.")
@click.option("--keep-ours", is_flag=True, help="Leave out entries that contradict this library.")
@json_option
@click.pass_context
def merge(ctx: click.Context, other: str, dry_run: bool, keep_ours: bool, as_json: bool) -> None:
    """Bring another library's entries in, each with its history.

    Close neighbours, names that clash and entries that both sides changed are listed before anything is
    written; a clash stops everything unless --keep-ours leaves it out. Instruments and saved identifications
    stay where they are. With --json the schema is phasedb.merge/1.
    """
    from phasedb.library.merge import merge as bring

    library = open_library(ctx, write=not dry_run)
    watch = _watch()
    done = bring(
        library,
        other,
        dry_run=dry_run,
        keep_ours=keep_ours,
        announce=lambda plan: _announce(plan, dry_run),
        progress=lambda count, total: watch("entries written", count, total),
    )
    plan = done.plan
    counts = (len(plan.new), len(plan.newer), len(plan.same), len(plan.older), len(done.left_out))
    if as_json:
        print_json(
            {
                "schema": "phasedb.merge/1",
                "dry_run": dry_run,
                "new": [entry.name for _, entry in plan.new],
                "brought_up_to_date": [step.new.name for step in plan.newer],
                "already_here": len(plan.same),
                "here_in_a_later_state": len(plan.older),
                "clashes": [_bad_document(row) for row in plan.clashes],
                "neighbours": [_warning_document(row) for row in plan.warnings],
                "notes": list(plan.remarks),
                "measurements": done.measurements,
                "history_rows_carried_over": done.carried,
                "history_head": library.history_head,
            }
        )
        return
    if dry_run:
        for _, entry in plan.new:
            content = entry.content
            click.echo(
                f"new: {entry.name}: {content.formula}, {content.lattice_type}, {content.a_angstrom:.10g} Å"
            )
        for step in plan.newer:
            click.echo(
                f"brought up to date: {step.new.name}: version {step.old.version} -> {step.new.version}"
            )
        click.echo(f"would be: {_summary(*counts)}; nothing was written")
        return
    click.echo(_summary(*counts))
    click.echo(f"{done.carried} rows of history carried over")


def _announce(plan: Plan, dry_run: bool) -> None:
    """List what a merge meets, before it writes."""
    _list("neighbour", plan.warnings)
    for text in plan.remarks:
        note(f"note: {text}")
    if dry_run:
        for row in plan.clashes:
            note(f"clash: {row}")
