"""``phasedb demo``: the main job from end to end, on invented samples, in a library that is thrown away.

``--json`` gives ``phasedb.demo/1``: steps, each with says, command and result (that command's own document).
"""

from __future__ import annotations

import contextlib
import io
import json
import shlex
import shutil
import tempfile
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from typing import Any, Final

import click

from phasedb.cli.common import examples, json_option, print_json

SAMPLES: Final = ("bread_knife_17.csv", "glaze_test_4.csv", "glaze_test_9.csv")
PIGMENT: Final = "workshop green (magnesium indium stannate)"


@dataclass(frozen=True, slots=True)
class Step:
    """One command of the demo and why a user would type it."""

    says: str
    command: tuple[str, ...]


STEPS: Final = (
    Step("Make a library, with the starter phases in it.", ("init",)),
    Step(
        "A knife came back from the coater. Which phases does its coated side hold? The workshop knows the"
        " elements. The ledger accounts for every line; one, at 33.2 degrees, nothing explains.",
        ("match", SAMPLES[0], "--elements", "Ti,N,Fe,C"),
    ),
    Step(
        "A glaze with a new green pigment. Magnesia is named, but most lines belong to a cubic phase that the"
        " library lacks: its lattice type, its a and its nearest entries are given.",
        ("match", SAMPLES[1], "--elements", "Mg,In,Sn,O"),
    ),
    Step(
        "Another firing shows the pigment alone. The workshop knows it for a spinel. Adopt it: a is refined"
        " from its lines, the usual checks are made, and it enters the library as a draft with its source.",
        (
            "adopt",
            SAMPLES[2],
            "--name",
            PIGMENT,
            "--formula",
            "Mg1.25In1.5Sn0.25O4",
            "--structure",
            "H1_1",
            "--source",
            "glaze notebook 3, page 41 (invented)",
        ),
    ),
    Step(
        "The same glaze again: now the pigment is named.",
        ("match", SAMPLES[1], "--elements", "Mg,In,Sn,O"),
    ),
)


@click.command(epilog=examples("phasedb demo", "phasedb demo --json"))
@json_option
def demo(as_json: bool) -> None:
    """Show the main job in five steps on invented samples, in a temporary library.

    Each step prints the command that a user would type, then what it answers.
    """
    results: list[dict[str, Any]] = []
    with _workshop() as store:
        if not as_json:
            click.echo(_opening())
        for number, step in enumerate(STEPS, 1):
            typed = "phasedb " + shlex.join(step.command)
            if as_json:
                results.append({"says": step.says, "command": typed, "result": _answer(store, step.command)})
                continue
            click.echo(_heading(number, step.says))
            click.echo(f"$ {typed}\n")
            _run(store, step.command)
    if as_json:
        print_json({"schema": "phasedb.demo/1", "steps": results})
    else:
        click.echo(_closing())


@contextmanager
def _workshop() -> Iterator[str]:
    """A folder with the samples and room for a store; the demo runs in it, and it is deleted afterwards."""
    from phasedb.library.migrate import shipped

    with tempfile.TemporaryDirectory(prefix="phasedb-demo-") as folder:
        for name in SAMPLES:
            shutil.copy(shipped("seed_data") / "demo" / name, folder)
        with contextlib.chdir(folder):
            yield str(Path(folder) / "library.sqlite")


def _run(store: str, command: tuple[str, ...]) -> None:
    from phasedb.cli import cli

    cli.main(args=["--store", store, "--by", "demo", *command], prog_name="phasedb", standalone_mode=False)


def _answer(store: str, command: tuple[str, ...]) -> Any:
    with contextlib.redirect_stdout(io.StringIO()) as printed:
        _run(store, (*command, "--json"))
    return json.loads(printed.getvalue())


def _wrapped(text: str) -> str:
    from phasedb.report.table import output_width, paragraph

    return paragraph(text, output_width())


def _heading(number: int, says: str) -> str:
    from phasedb.report.table import output_width

    return f"\n{'=' * output_width()}\n{_wrapped(f'Step {number} of {len(STEPS)}. {says}')}\n"


def _opening() -> str:
    return _wrapped(
        "A small workshop has its bread knives coated and fires its own glazes. Its samples, names and lines"
        " are invented and simulated; the library is temporary and is deleted at the end."
    )


def _closing() -> str:
    from phasedb.report.cautions import CAUTIONS

    parts = [
        f"\n{_wrapped('Done. To start your own: phasedb init, then phasedb match YOUR_LIST.csv.')}\n",
        "Cautions",
        *(_wrapped(f"- {caution}") for caution in CAUTIONS),
    ]
    return "\n".join(parts)
