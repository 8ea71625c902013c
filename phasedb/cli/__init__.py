"""The command line. Only the standard library and click are imported here; a command loads when it runs."""

from __future__ import annotations

import os
import sys
from importlib import import_module
from typing import TYPE_CHECKING, Any, NoReturn

import click

from phasedb import __version__
from phasedb.errors import ExitCode, InputError, PhasedbError

if TYPE_CHECKING:
    from click.shell_completion import CompletionItem

# name: (module, attribute, short help). The help text lives here so that --help imports no command.
COMMANDS: dict[str, tuple[str, str, str]] = {
    "init": ("phasedb.cli.entries", "init", "Make a store, with the starter library."),
    "add": ("phasedb.cli.entries", "add", "Enter a phase as a draft."),
    "show": ("phasedb.cli.entries", "show", "Show one entry: cell, sources, standing."),
    "list": ("phasedb.cli.entries", "list_phases", "List entries that fit some filters."),
    "history": ("phasedb.cli.entries", "history", "Read what changed, by whom, when and why."),
    "revise": ("phasedb.cli.entries", "revise", "Change an entry."),
    "check": ("phasedb.cli.entries", "check", "Confirm an entry as a second person."),
    "withdraw": ("phasedb.cli.entries", "withdraw", "Take an entry out of use, with a reason."),
    "restore-entry": ("phasedb.cli.entries", "restore_entry", "Make a withdrawn entry a draft again."),
    "import": ("phasedb.cli.exchange", "import_", "Bring entries in from CSV, JSON or CIF."),
    "export": ("phasedb.cli.exchange", "export", "Write entries to CSV, JSON or CIF."),
    "merge": ("phasedb.cli.exchange", "merge", "Bring another library's entries in."),
    "lines": ("phasedb.cli.lines", "lines", "Ideal lines of an entry: d, 2theta, hkl."),
    "match": ("phasedb.cli.match", "match", "Say which library phases a peak list holds."),
    "identifications": ("phasedb.cli.records", "identifications", "List or show saved matches."),
    "rerun": ("phasedb.cli.records", "rerun", "Repeat a saved match, then and now."),
    "sign": ("phasedb.cli.records", "sign", "Sign a saved match as a second person."),
    "peaks": ("phasedb.cli.characterise", "peaks", "Find the lines of a scan."),
    "index": ("phasedb.cli.characterise", "index", "Find lattice type and a from a list alone."),
    "refine": ("phasedb.cli.characterise", "refine", "Refine a lattice constant."),
    "adopt": ("phasedb.cli.adopting", "adopt", "Enter a characterised unknown."),
    "instrument": ("phasedb.cli.instruments", "instrument", "Keep instruments and their shifts."),
    "batch": ("phasedb.cli.batch", "batch", "Match a folder of lists in parallel."),
    "report": ("phasedb.cli.report", "report", "Write a self-contained page of a match."),
    "audit": ("phasedb.cli.store", "audit", "Prove that the store is whole."),
    "backup": ("phasedb.cli.store", "backup", "Copy the store while it is in use."),
    "restore": ("phasedb.cli.store", "restore", "Put a backup in place."),
    "upgrade": ("phasedb.cli.store", "upgrade", "Bring an older store up to date."),
    "demo": ("phasedb.cli.demo", "demo", "A short guided run of the main job."),
}


class Settings:
    """What the options before the command said: the store's place and who is acting."""

    def __init__(self, store: str | None, by: str | None, debug: bool) -> None:
        self.store = store
        self.by = by
        self.debug = debug


class LazyGroup(click.Group):
    """A group whose commands are imported only when they run."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        entry = COMMANDS.get(cmd_name)
        if entry is None:
            return None
        module, attribute, _ = entry
        command: click.Command = getattr(import_module(module), attribute)
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        with formatter.section("Commands"):
            formatter.write_dl([(name, text) for name, (_, _, text) in COMMANDS.items()])

    def shell_complete(self, ctx: click.Context, incomplete: str) -> list[CompletionItem[Any]]:
        from click.shell_completion import CompletionItem

        found = [
            CompletionItem(name, help=text)
            for name, (_, _, text) in COMMANDS.items()
            if name.startswith(incomplete)
        ]
        return [*found, *click.Command.shell_complete(self, ctx, incomplete)]

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        name = args[0] if args else ""
        if ctx.resilient_parsing:  # a shell completes: say nothing of a word that is not finished
            return super().resolve_command(ctx, args)
        if name and not name.startswith("-") and name not in COMMANDS:
            from difflib import get_close_matches

            near = get_close_matches(name, COMMANDS, n=3)
            hint = "did you mean " + " or ".join(near) + "?" if near else "see phasedb --help"
            raise InputError(f"no command {name!r}", hint=hint)
        return super().resolve_command(ctx, args)


@click.group(
    cls=LazyGroup, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100}
)
@click.version_option(__version__, prog_name="phasedb")
@click.option(
    "--store", envvar="PHASEDB_STORE", metavar="PATH|URL", help="The library (default: in your user data)."
)
@click.option("--by", envvar="PHASEDB_BY", metavar="WHO", help="Who is acting (default: your login name).")
@click.option("--debug", is_flag=True, hidden=True, help="Show tracebacks.")
@click.pass_context
def cli(ctx: click.Context, store: str | None, by: str | None, debug: bool) -> None:
    """A lab's own library of cubic phases: identify, characterise, record, audit."""
    ctx.obj = Settings(store, by, debug)


def harmless(text: str) -> str:
    """Return text for a terminal: what could steer it or turn its lines around is written as an escape."""
    if text.isascii() and text.isprintable():
        return text
    return "".join(
        sign if sign.isprintable() or sign in "\n\t" else sign.encode("unicode_escape").decode("ascii")
        for sign in text
    )


def _stop(text: str, code: int) -> NoReturn:
    click.echo(f"error: {harmless(text)}", err=True)
    raise SystemExit(int(code))


def main(argv: list[str] | None = None) -> NoReturn:
    """Run the command line; every error of ours becomes one line on stderr and its exit code."""
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")  # a thread per core doubles NumPy's import time
    if "_PHASEDB_COMPLETE" in os.environ:
        from phasedb.cli.completion import register

        register()
    debug = "--debug" in (sys.argv[1:] if argv is None else argv)
    for stream in (sys.stdout, sys.stderr):
        reconfigure: Any = getattr(stream, "reconfigure", None)
        if reconfigure is not None:
            reconfigure(encoding="utf-8", errors="backslashreplace")
    try:
        result = cli.main(args=argv, prog_name="phasedb", standalone_mode=False)
    except PhasedbError as error:
        if debug:
            raise
        _stop(str(error), error.exit_code)
    except click.exceptions.Abort:
        _stop("interrupted", ExitCode.INTERRUPTED)
    except click.exceptions.Exit as stop:
        raise SystemExit(stop.exit_code) from None
    except click.ClickException as error:
        context = getattr(error, "ctx", None)
        hint = f"; see {context.command_path} --help" if context is not None else ""
        _stop(error.format_message().rstrip(".") + hint, ExitCode.INPUT)
    except KeyboardInterrupt:
        _stop("interrupted", ExitCode.INTERRUPTED)
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        raise SystemExit(0) from None
    except Exception as error:
        if debug:
            raise
        _stop(
            f"unexpected fault: {type(error).__name__}: {error};"
            " this is a bug; run again with --debug and report it",
            ExitCode.FAULT,
        )
    raise SystemExit(int(result) if isinstance(result, int) else 0)
