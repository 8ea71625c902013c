"""Plays the README's commands; ``python tests/readme.py`` writes real output into it.

Blocks marked ``console`` are played in order in one fresh folder: lines that start with ``$`` are commands,
the lines below them what they print (stdout and stderr). Blocks that need a file that is not there are left
alone.
"""

from __future__ import annotations

import contextlib
import os
import re
import shutil
import subprocess
import sys
import tempfile
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path

import click
from running import run

from phasedb.cli import COMMANDS, cli

ROOT = Path(__file__).resolve().parents[1]
README = ROOT / "README.md"
FIGURE = ROOT / "tests" / "readme_figure.svg"
SCAN = ROOT.parent / "shared" / "reference" / "measured" / "lab6_lab_cu" / "lab6.xye"
_BLOCK = re.compile(
    r"(?:^<!-- needs: (?P<needs>\S+) -->\n)?^```(?P<kind>\w+)\n(?P<body>.*?)^```$", re.MULTILINE | re.DOTALL
)
_LONGEST_COMMAND_SECONDS = 120


@dataclass(frozen=True, slots=True)
class Step:
    """One command of a console block, and what the page says that it prints."""

    command: str
    printed: str


@dataclass(frozen=True, slots=True)
class Block:
    """One fenced block: its kind, the file that it needs, its text and where that lies in the page."""

    kind: str
    needs: str
    body: str
    span: tuple[int, int]

    @property
    def steps(self) -> list[Step]:
        """The commands of a console block."""
        found = re.split(r"^\$ ", self.body, flags=re.MULTILINE)[1:]
        return [Step(*(part.partition("\n")[::2])) for part in found]


def blocks(text: str) -> list[Block]:
    """Return the fenced blocks of a page."""
    return [
        Block(found["kind"], found["needs"] or "", found["body"], found.span("body"))
        for found in _BLOCK.finditer(text)
    ]


def environment(folder: Path) -> dict[str, str]:
    """Return the environment of a new user: this program first on the path, 80 columns, a home of its own."""
    kept = {name: value for name, value in os.environ.items() if not name.startswith(("PHASEDB_", "XDG_"))}
    path = os.pathsep.join([str(Path(sys.executable).parent), kept.get("PATH", "")])
    return {**kept, "PATH": path, "COLUMNS": "80", "HOME": str(folder), "OPENBLAS_NUM_THREADS": "1"}


def lay_out(folder: Path) -> None:
    """Put what the README's commands find beside them into a folder."""
    (folder / "seed_data").symlink_to(ROOT / "seed_data", target_is_directory=True)
    if SCAN.exists():
        shutil.copyfile(SCAN, folder / "scan.xye")


def play(text: str, folder: Path) -> Iterator[tuple[Block, list[str]]]:
    """Run the console blocks of a page in order; yield each with what its commands printed."""
    variables = environment(folder)
    for block in blocks(text):
        if block.kind == "console" and not (block.needs and not (folder / block.needs).exists()):
            yield block, [_run(step.command, folder, variables) for step in block.steps]


def _run(command: str, folder: Path, variables: dict[str, str]) -> str:
    if command.startswith("export "):
        lines = subprocess.run(
            ["bash", "-c", f"{command}; env -0"], capture_output=True, text=True, env=variables, check=True
        ).stdout.split("\0")
        variables.update(line.split("=", 1) for line in lines if line.startswith("PHASEDB_"))
        return ""
    done = subprocess.run(
        ["bash", "-c", command],
        stdout=subprocess.PIPE,
        stderr=subprocess.STDOUT,
        text=True,
        cwd=folder,
        env=variables,
        timeout=_LONGEST_COMMAND_SECONDS,
        check=False,
    )
    return done.stdout


# --- what is generated -----------------------------------------------------------------------------


def _help_of(name: str, command: click.Command) -> str:
    context = click.Context(
        command,
        info_name=name,
        terminal_width=80,
        max_content_width=80,
        help_option_names=["-h", "--help"],
    )
    return command.get_help(context).rstrip()


def reference() -> str:
    """Return the ``--help`` of every command, as the README prints it."""
    parts = [_help_of("phasedb", cli)]
    for name in COMMANDS:
        command = cli.get_command(click.Context(cli), name)
        assert command is not None
        parts.append(_help_of(f"phasedb {name}", command))
        if isinstance(command, click.Group):
            parts += [
                _help_of(f"phasedb {name} {sub}", part) for sub, part in sorted(command.commands.items())
            ]
    return "\n\n".join(f"```text\n{part}\n```" for part in parts)


_SCHEMA_RUNS = """
--store other.sqlite init
init
add --name ours --formula TiN --lattice F --a 4.2417(2) --source notebook
show silicon
list --element Au
history silicon
check ours
lines silicon
match seed_data/demo/bread_knife_17.csv --elements Ti,N,Fe,C --save
identifications
identifications 1
sign 1
rerun 1
peaks made.xy --radiation Cu
index seed_data/demo/glaze_test_9.csv
refine seed_data/demo/glaze_test_9.csv --lattice F --a 9.03
adopt seed_data/demo/glaze_test_9.csv --name green --formula Mg1.25In1.5Sn0.25O4 --structure H1_1
instrument add D1 --radiation Cu
instrument list
report seed_data/demo/bread_knife_17.csv -o knife.html
batch seed_data/demo -o results.csv --workers 1
export all.json
import all.json
merge other.sqlite --dry-run
audit
backup copy.sqlite
restore copy.sqlite --replace
upgrade --dry-run
demo
"""
_SECOND_PERSON = ("check", "sign")
# Facts that only repeat what stands elsewhere, or hold another document whole.
_NOT_OPENED = {"result", "refinement", "rows", "before", "after", "settings", "peaks_used"}


def _shape(value: object, depth: int, name: str = "") -> str:
    if isinstance(value, dict) and depth and name not in _NOT_OPENED and value:
        inner = ", ".join(f'"{key}"{_shape(item, depth - 1, key)}' for key, item in value.items())
        return f": {{{inner}}}" if name else f"{{{inner}}}"
    if isinstance(value, list) and value and isinstance(value[0], dict):
        inner = _shape(value[0], depth, "-")
        return f": [{inner[2:]}]" if inner else ": [...]"
    if isinstance(value, dict):
        return ": {...}"
    return ": [...]" if isinstance(value, list) else ""


def documents(folder: Path) -> dict[str, tuple[str, dict[str, object]]]:
    """Run one command of each kind with ``--json``; return what it printed by schema, with the command."""
    lay_out(folder)
    _make_scan(folder / "made.xy")
    found: dict[str, tuple[str, dict[str, object]]] = {}
    with contextlib.chdir(folder):
        for words in map(str.split, _SCHEMA_RUNS.strip().splitlines()):
            person = "B. Second" if words[0] in _SECOND_PERSON else "A. First"
            document = run(*words, "--json", store="lab.sqlite", by=person).json
            command = next(word for word in words if word in COMMANDS)
            found.setdefault(document["schema"], (command, document))
    return found


def _make_scan(path: Path) -> None:
    """Write a small made-up scan: two Gaussian lines on a flat background."""
    import numpy as np

    x = np.arange(30.0, 50.0, 0.02)
    height = 100 + sum(5000 * np.exp(-0.5 * ((x - at) / 0.05) ** 2) for at in (38.1, 44.3))
    counts = np.random.default_rng(1).poisson(height)
    path.write_text("".join(f"{a:.2f} {b}\n" for a, b in zip(x, counts, strict=True)))


def schemas(folder: Path) -> str:
    """Return the README's list of JSON documents."""
    lines = []
    for schema, (command, document) in sorted(documents(folder).items()):
        fields = ", ".join(
            f'"{key}"{_shape(value, 3, key)}' for key, value in document.items() if key != "schema"
        )
        lines.append(f"* `{schema}` ({command}): `{fields}`")
    return "\n".join(lines)


def between(text: str, name: str) -> str:
    """Return what stands between two marks of the page."""
    return text.partition(f"<!-- {name} begin -->\n")[2].partition(f"<!-- {name} end -->")[0]


def _put(text: str, name: str, content: str) -> str:
    begin, end = f"<!-- {name} begin -->\n", f"<!-- {name} end -->"
    head, _, rest = text.partition(begin)
    return f"{head}{begin}{content}\n{end}{rest.partition(end)[2]}"


def write() -> None:
    """Write the generated parts, real output and the figure into the README and beside it."""
    text = README.read_text(encoding="utf-8")
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        lay_out(folder)
        for block, printed in reversed(list(play(text, folder))):
            said = zip(block.steps, printed, strict=True)
            body = "".join(f"$ {step.command}\n{output}" for step, output in said)
            text = text[: block.span[0]] + body + text[block.span[1] :]
        shutil.copyfile(folder / "knife.svg", FIGURE)
    with tempfile.TemporaryDirectory() as name:
        text = _put(text, "schemas", schemas(Path(name)))
    README.write_text(_put(text, "commands", reference()), encoding="utf-8")


if __name__ == "__main__":
    with contextlib.chdir(ROOT):
        write()
