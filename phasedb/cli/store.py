"""Commands that keep the store: audit, backup, restore, upgrade."""

from __future__ import annotations

from pathlib import Path

import click

from phasedb.cli import Settings
from phasedb.cli.common import examples, json_option, note, open_library, print_json
from phasedb.errors import StoreError


@click.command(
    epilog=examples(
        "phasedb audit",
        "phasedb audit --expect 3f2a9c0d11e7",
    )
)
@click.option("--expect", metavar="HEAD", help="A history head kept outside, as a backup or report gives it.")
@json_option
@click.pass_context
def audit(ctx: click.Context, expect: str | None, as_json: bool) -> None:
    """Prove that the store is whole.

    Checks the file, the chain of the history and every entry against the replay of its history. A chain
    cannot see that its end was cut off: --expect compares it with a head kept outside the store.
    """
    from phasedb.library.audit import audit as prove

    library = open_library(ctx)
    found = prove(library, expect=expect)
    if as_json:
        print_json(
            {
                "schema": "phasedb.audit/1",
                "store": library.place,
                "whole": not found.faults,
                "faults": found.faults,
                "history": {"count": found.history_count, "head": found.history_head},
                "expected": expect,
                "rows_since_expected": found.since_expected,
                "library_id": found.library_id,
                "fingerprint": found.fingerprint,
                "entries": found.phase_count,
                "records": found.record_count,
            }
        )
    else:
        for fault in found.faults:
            click.echo(f"fault: {fault}")
        if not found.faults:
            click.echo(f"The store is whole: {found.phase_count} entries equal the replay of their history.")
        click.echo(f"history  {found.history_count} rows, head {found.history_head}")
        if found.since_expected is not None:
            click.echo(f"expected head found; {found.since_expected} rows were added since")
    if found.faults:
        count = "a fault" if len(found.faults) == 1 else f"{len(found.faults)} faults"
        raise StoreError(
            f"the audit found {count}",
            where=library.place,
            hint="keep this file for inspection and restore a backup with 'phasedb restore FILE --replace'",
        )


@click.command(
    epilog=examples(
        "phasedb backup lab-2026-03-01.sqlite",
        "phasedb --store lab.sqlite backup copy.sqlite --json",
    )
)
@click.argument("file", type=click.Path(path_type=Path))
@json_option
@click.pass_context
def backup(ctx: click.Context, file: Path, as_json: bool) -> None:
    """Copy the store while it is in use, and prove the copy."""
    from phasedb.library import Library
    from phasedb.library.backup import backup as copy_store
    from phasedb.library.connect import store_place

    settings: Settings = ctx.find_root().obj
    copied = copy_store(store_place(settings.store), file, library_class=Library)
    if as_json:
        print_json(
            {
                "schema": "phasedb.backup/1",
                "file": str(copied.path),
                "entries": copied.proof.phase_count,
                "history": {"count": copied.proof.history_count, "head": copied.proof.history_head},
            }
        )
        return
    click.echo(f"wrote {copied.path}: {copied.proof.phase_count} entries, proved whole")
    click.echo(f"history  {copied.proof.history_count} rows, head {copied.proof.history_head}")
    note("Keep the head outside the store: 'phasedb audit --expect HEAD' compares with it.")


@click.command(
    epilog=examples(
        "phasedb restore lab-2026-03-01.sqlite --replace",
        "phasedb --store new.sqlite restore lab-2026-03-01.sqlite",
    )
)
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--replace", is_flag=True, help="Replace the store; the old one is kept beside it.")
@json_option
@click.pass_context
def restore(ctx: click.Context, file: Path, replace: bool, as_json: bool) -> None:
    """Put a backup in the store's place."""
    from phasedb.library import Library
    from phasedb.library.backup import restore as put_back
    from phasedb.library.connect import store_place

    settings: Settings = ctx.find_root().obj
    copied = put_back(store_place(settings.store), file, replace=replace, library_class=Library)
    if as_json:
        print_json(
            {
                "schema": "phasedb.restore/1",
                "store": str(copied.path),
                "kept_aside": None if copied.kept_aside is None else str(copied.kept_aside),
                "entries": copied.proof.phase_count,
                "history": {"count": copied.proof.history_count, "head": copied.proof.history_head},
            }
        )
        return
    click.echo(f"restored {copied.path}: {copied.proof.phase_count} entries, proved whole")
    click.echo(f"history  {copied.proof.history_count} rows, head {copied.proof.history_head}")
    if copied.proof.is_older:
        note("It is of an older revision: run 'phasedb upgrade' before using it.")
    if copied.kept_aside is not None:
        click.echo(f"the store that was there is kept as {copied.kept_aside}")


@click.command(
    epilog=examples(
        "phasedb upgrade --dry-run",
        "phasedb --store lab.sqlite upgrade",
    )
)
@click.option("--dry-run", is_flag=True, help="Try it on a copy in memory; change nothing.")
@json_option
@click.pass_context
def upgrade(ctx: click.Context, dry_run: bool, as_json: bool) -> None:
    """Bring an older store up to date, after a proved backup.

    Colleagues with an older program cannot use the store afterwards.
    """
    from phasedb.library.connect import store_place
    from phasedb.library.upgrading import upgrade as bring_up

    settings: Settings = ctx.find_root().obj
    done = bring_up(store_place(settings.store), by=settings.by, dry_run=dry_run)
    if as_json:
        print_json(
            {
                "schema": "phasedb.upgrade/1",
                "store": done.place,
                "from": done.before,
                "to": done.after,
                "dry_run": dry_run,
                "backup": None if done.backup is None else str(done.backup),
                "rows": done.rows,
            }
        )
        return
    if done.before == done.after:
        click.echo(f"{done.place} is up to date (revision {done.after})")
    elif dry_run:
        click.echo(f"{done.place}: revision {done.before} would become {done.after}; nothing was changed")
    else:
        click.echo(f"upgraded {done.place} from revision {done.before} to {done.after}")
        if done.backup is not None:
            click.echo(f"backup   {done.backup} (put it back with 'phasedb restore')")
