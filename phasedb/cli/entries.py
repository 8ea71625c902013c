"""Commands that make a library and keep its entries."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, Any, TypeVar

import click

from phasedb.cli import Settings
from phasedb.cli.common import examples, json_option, note, open_library, print_json
from phasedb.cli.completion import complete_phase
from phasedb.errors import InputError

if TYPE_CHECKING:
    from phasedb.library import Entry, Library, Outcome

_Command = TypeVar("_Command", bound=Callable[..., Any])

_VERSION = click.option(
    "--expect-version", type=click.IntRange(min=1), metavar="N", help="Refuse if the entry has moved on."
)


@click.command(
    epilog=examples(
        "phasedb init",
        "phasedb --store lab.sqlite init --empty",
    )
)
@click.option("--empty", is_flag=True, help="Without the starter library.")
@json_option
@click.pass_context
def init(ctx: click.Context, empty: bool, as_json: bool) -> None:
    """Make a store, with the starter library."""
    from phasedb.library import Library

    settings: Settings = ctx.find_root().obj
    with Library.create(settings.store, by=settings.by, starter=not empty) as library:
        count, place = library.phase_count, library.place
        if as_json:
            print_json(
                {
                    "schema": "phasedb.init/1",
                    "store": place,
                    "phase_count": count,
                    "fingerprint": library.fingerprint,
                }
            )
            return
    click.echo(f"made {place} with {count} phases" if count else f"made {place}, empty")
    if count:
        click.echo("They are drafts from published sources; 'phasedb show NAME' gives the source of each.")


def _content_options(*, required: bool) -> Callable[[_Command], _Command]:
    """Return a decorator that adds the options for what an entry says."""
    options = [
        click.option("--name", required=required, metavar="N", help="Its name in the library."),
        click.option("--formula", required=required, metavar="F", help="Like TiN or Ti0.5Al0.5N."),
        click.option("--lattice", required=required, metavar="P|I|F", help="Lattice type."),
        click.option(
            "--a", "a_text", required=required, metavar="A", help="Lattice constant: 4.2417(2), 0.42417 nm."
        ),
        click.option("--structure", metavar="TYPE", help="Structure type, like B1."),
        click.option("--free-parameters", metavar="TEXT", help="Coordinates, like O(0.26,0.26,0.26)."),
        click.option("--temperature", metavar="K", help="Temperature of a, kelvin."),
        click.option("--expansion", metavar="X", help="Linear thermal expansion, 1/K."),
        click.option("--drift", metavar="CLASS", help="line compound, alloy or solid solution."),
        click.option("--a-min", metavar="A", help="Lower end of the range of a."),
        click.option("--a-max", metavar="A", help="Upper end of the range of a."),
        click.option("--density", metavar="D", help="Measured density, g/cm³."),
        click.option("--formula-units", metavar="Z", help="Formula units in the cell."),
        click.option("--source", metavar="TEXT", help="Where the value comes from."),
        click.option("--doi", metavar="D", help="DOI of the source."),
        click.option("--source-kind", metavar="KIND", help="standard, handbook, paper, measured here, ..."),
        click.option("--remarks", metavar="TEXT", help="Anything else."),
        click.option("--alias", "aliases", multiple=True, metavar="N", help="Another name; may be repeated."),
        click.option("--tag", "tags", multiple=True, metavar="T", help="A tag; may be repeated."),
        click.option("--accept-warning", is_flag=True, help="Write in spite of warnings; recorded."),
    ]

    def decorate(command: _Command) -> _Command:
        for option in reversed(options):
            command = option(command)
        return command

    return decorate


@click.command(
    epilog=examples(
        'phasedb add --name "our nitride" --formula TiN --lattice F --a "4.2417(2)" --structure B1',
        'phasedb add --name "mill gold" --formula Au --lattice F --a "0.40786 nm"',
    )
)
@_content_options(required=True)
@json_option
@click.pass_context
def add(ctx: click.Context, /, accept_warning: bool, as_json: bool, **given: Any) -> None:
    """Enter a phase as a draft."""
    from phasedb.library.options import draft_from_options

    draft = draft_from_options(given)
    library = open_library(ctx, write=True)
    _say_outcome(library, library.add(draft, accept_warnings=accept_warning), "entered", as_json)


@click.command(
    epilog=examples(
        'phasedb revise "our nitride" --a "4.2420(1)" --reason "new standard" --expect-version 1',
        'phasedb revise "our nitride" --alias "coating 7" --reason "the coater\'s name for it"',
    )
)
@click.argument("entry", metavar="NAME", shell_complete=complete_phase)
@_content_options(required=False)
@click.option("--reason", default="", metavar="TEXT", help="Why; kept in the history.")
@_VERSION
@json_option
@click.pass_context
def revise(
    ctx: click.Context,
    /,
    entry: str,
    accept_warning: bool,
    reason: str,
    expect_version: int | None,
    as_json: bool,
    **given: Any,
) -> None:
    """Change an entry; what is not given stays.

    An empty text clears a field; "none" clears aliases or tags.
    """
    from phasedb.library.options import changes_from_options

    library = open_library(ctx, write=True)
    outcome = library.revise(
        entry,
        changes_from_options(given, library.get(entry).content),
        expect_version=expect_version,
        accept_warnings=accept_warning,
        reason=reason,
    )
    _say_outcome(library, outcome, "revised", as_json)


def _say_outcome(library: Library, outcome: Outcome, action: str, as_json: bool) -> None:
    for warning in outcome.warnings:
        note(f"warning (accepted): {warning.text}")
    _say(library, outcome.entry, action, as_json, warnings=[w.text for w in outcome.warnings])


def _say(library: Library, entry: Entry, action: str, as_json: bool, **more: Any) -> None:
    if as_json:
        print_json(
            {
                "schema": "phasedb.change/1",
                "action": action,
                "name": entry.name,
                "standing": entry.standing,
                "version": entry.version,
                **more,
                "history_head": library.history_head,
            }
        )
        return
    from phasedb.crystal.quantity import format_measured

    content = entry.content
    click.echo(
        f"{action} {content.name!r}: {content.formula}, {content.lattice_type}, "
        f"a = {format_measured(content.a_angstrom, content.a_esd_angstrom)} Å, {entry.standing}, "
        f"version {entry.version}"
    )


@click.command(
    epilog=examples(
        'phasedb --by "B. Second" check "our nitride"',
        'phasedb --by "B. Second" check silver --remark "compared with the cited table"',
    )
)
@click.argument("name", shell_complete=complete_phase)
@_VERSION
@click.option("--remark", default="", metavar="TEXT", help="How it was checked; kept in the history.")
@json_option
@click.pass_context
def check(ctx: click.Context, name: str, expect_version: int | None, remark: str, as_json: bool) -> None:
    """Confirm an entry as a second person."""
    library = open_library(ctx, write=True)
    _say(library, library.check(name, expect_version=expect_version, remark=remark), "checked", as_json)


@click.command(
    epilog=examples(
        'phasedb withdraw "our nitride" --reason "a was in kX" --replaced-by "titanium nitride"',
        'phasedb withdraw "mill gold" --reason "the powder was an alloy"',
    )
)
@click.argument("name", shell_complete=complete_phase)
@click.option("--reason", required=True, metavar="T", help="Why it is wrong or superseded.")
@click.option("--replaced-by", metavar="N", shell_complete=complete_phase, help="The entry to use instead.")
@_VERSION
@json_option
@click.pass_context
def withdraw(
    ctx: click.Context,
    name: str,
    reason: str,
    replaced_by: str | None,
    expect_version: int | None,
    as_json: bool,
) -> None:
    """Take an entry out of use, with a reason. It keeps its name and history."""
    library = open_library(ctx, write=True)
    entry = library.withdraw(name, reason=reason, replaced_by=replaced_by, expect_version=expect_version)
    _say(library, entry, "withdrawn", as_json, reason=entry.withdrawn_reason)


@click.command(
    "restore-entry",
    epilog=examples(
        'phasedb restore-entry "our nitride" --reason "the value was right"',
        'phasedb restore-entry "mill gold" --reason "withdrawn by mistake" --json',
    ),
)
@click.argument("name", shell_complete=complete_phase)
@click.option("--reason", required=True, metavar="T", help="Why it is right after all.")
@_VERSION
@json_option
@click.pass_context
def restore_entry(
    ctx: click.Context, name: str, reason: str, expect_version: int | None, as_json: bool
) -> None:
    """Make a withdrawn entry a draft again."""
    library = open_library(ctx, write=True)
    entry = library.restore_entry(name, reason=reason, expect_version=expect_version)
    _say(library, entry, "restored", as_json)


@click.command(
    epilog=examples(
        "phasedb show silicon",
        'phasedb show "titanium nitride" --json',
    )
)
@click.argument("name", shell_complete=complete_phase)
@json_option
@click.pass_context
def show(ctx: click.Context, name: str, as_json: bool) -> None:
    """Show one entry: cell, sources, standing."""
    from phasedb.library import showing

    library = open_library(ctx)
    entry = library.get(name)
    if as_json:
        print_json(showing.phase_document(library, entry))
        return
    from phasedb.cli.tables import labelled

    for title, pairs in showing.phase_sections(library, entry):
        click.echo(title)
        for line in labelled(pairs, indent=2):
            click.echo(line)


@click.command(
    "list",
    epilog=examples(
        "phasedb list --element Ti --lattice F --a-min 4.2 --a-max 4.3",
        "phasedb list --text spinel --json",
    ),
)
@click.option("--element", "elements", multiple=True, metavar="E", help="In the formula; may be repeated.")
@click.option("--lattice", metavar="P|I|F", help="Lattice type.")
@click.option("--a-min", metavar="A", help="Least lattice constant, Å or with a unit.")
@click.option("--a-max", metavar="A", help="Greatest lattice constant.")
@click.option("--structure", metavar="TYPE", help="Structure type, like B1.")
@click.option("--text", metavar="TEXT", help="In a name, formula, remark, source or tag.")
@click.option("--withdrawn", is_flag=True, help="Only withdrawn entries.")
@click.option("--as-of", metavar="DATE", help="The library as it was: a date, a time (UTC), a history head.")
@json_option
@click.pass_context
def list_phases(
    ctx: click.Context,
    elements: tuple[str, ...],
    lattice: str | None,
    a_min: str | None,
    a_max: str | None,
    structure: str | None,
    text: str | None,
    withdrawn: bool,
    as_of: str | None,
    as_json: bool,
) -> None:
    """List entries that fit some filters."""
    from phasedb.library import showing
    from phasedb.library.options import filters_from_options

    library = _library_as_of(ctx, as_of)
    entries = library.list(
        **filters_from_options(elements, lattice, a_min, a_max, structure, text), withdrawn=withdrawn
    )
    if as_json:
        print_json(showing.list_document(entries))
        return
    from phasedb.cli.tables import aligned

    if entries:
        for line in aligned(*showing.list_table(entries), right=(3,), shrink={0: 26, 1: 13, 4: 9}):
            click.echo(line)
    total = library.phase_count
    what = "withdrawn entries" if withdrawn else f"of {total} entries in use"
    note(f"{len(entries)} {what}" + (f", as of {library.as_of}" if library.as_of else ""))


def _library_as_of(ctx: click.Context, as_of: str | None) -> Library:
    if as_of is None:
        return open_library(ctx)
    from phasedb.library import Library

    settings: Settings = ctx.find_root().obj
    library = Library.open(settings.store, by=settings.by, as_of=as_of)
    ctx.call_on_close(library.close)
    return library


@click.command(
    epilog=examples(
        "phasedb history silicon",
        "phasedb history --json",
    )
)
@click.argument("name", required=False, shell_complete=complete_phase)
@json_option
@click.pass_context
def history(ctx: click.Context, name: str | None, as_json: bool) -> None:
    """Read what changed, by whom, when and why: of one entry, or of everything."""
    from phasedb.library import showing

    if name is not None and not name.strip():
        raise InputError("the name is empty", hint="leave it out to read the whole history")
    library = open_library(ctx)
    rows = library.history(name)
    if as_json:
        print_json(showing.history_document(rows))
        return
    from phasedb.cli.tables import labelled

    for line, details in showing.history_sections(rows, in_full=name is not None):
        click.echo(line)
        for detail in labelled(details, indent=7):
            click.echo(detail)
