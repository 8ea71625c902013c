"""What commands share: the JSON switch, printing, and the store named by the options."""

from __future__ import annotations

import json
from collections.abc import Callable
from typing import TYPE_CHECKING, Any, TypeVar

import click

from phasedb.cli import Settings, harmless

if TYPE_CHECKING:
    from phasedb.library import Library

_Command = TypeVar("_Command", bound=Callable[..., Any])

_STYLES: dict[str, dict[str, Any]] = {"heading": {"bold": True}, "weak": {"dim": True}}


def json_option(command: _Command) -> _Command:
    """Add ``--json``."""
    return click.option("--json", "as_json", is_flag=True, help="Print JSON.")(command)


def document_text(document: dict[str, Any]) -> str:
    """Return one JSON document as text, with a line end; NaN is a bug, so it is refused here."""
    return json.dumps(document, allow_nan=False, ensure_ascii=False, indent=1) + "\n"


def print_json(document: dict[str, Any]) -> None:
    """Print one JSON document on stdout."""
    click.echo(document_text(document), nl=False)


def note(text: str) -> None:
    """Print a remark on stderr: stdout carries only the result."""
    click.echo(harmless(text), err=True)


def examples(*lines: str) -> str:
    """Return example commands as the epilog of a ``--help``: ``@click.command(epilog=examples(...))``."""
    return "\n".join(["\b", "Examples:", *(f"  {line}" for line in lines)])


def print_text(render: Callable[..., str], *values: Any) -> None:
    """Print ``render(*values, width=, style=)``: as wide as the terminal, coloured only there."""
    from phasedb.report.table import colour_wanted, output_width

    coloured = colour_wanted()

    def style(text: str, role: str) -> str:
        return click.style(text, **_STYLES[role]) if coloured else text

    click.echo(render(*values, width=output_width(), style=style), color=coloured)


def open_library(ctx: click.Context, *, write: bool = False, as_of: str | None = None) -> Library:
    """Open the library that ``--store`` names, acting as ``--by``; closed when the command ends."""
    from phasedb.library import Library

    settings: Settings = ctx.find_root().obj
    library = Library.open(settings.store, by=settings.by, write=write, as_of=as_of)
    ctx.call_on_close(library.close)
    return library
