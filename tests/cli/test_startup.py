"""What each command imports before it does anything: heavy packages wait until they are needed."""

from __future__ import annotations

import json
import os
import subprocess
import sys

import pytest

from phasedb.cli import COMMANDS

HEAVY = {
    "alembic",
    "gemmi",
    "jinja2",
    "mako",
    "matplotlib",
    "numpy",
    "platformdirs",
    "rich",
    "scipy",
    "sqlalchemy",
}
_PROBE = """
import json, sys
from phasedb.cli import main
try:
    main(sys.argv[1:])
except SystemExit:
    pass
print("\\n" + json.dumps(sorted({name.partition(".")[0] for name in sys.modules})), file=sys.stderr)
"""


def imported(*words, **environment):
    """Return the top-level packages that a command has imported when it ends."""
    clean = {k: v for k, v in os.environ.items() if not k.startswith(("PHASEDB_", "_PHASEDB_"))}
    done = subprocess.run(
        [sys.executable, "-c", _PROBE, *map(str, words)],
        capture_output=True,
        text=True,
        env={**clean, **environment},
        check=True,
    )
    return set(json.loads(done.stderr.splitlines()[-1])), done.stdout


def foreign_packages(modules):
    """Return what is neither of the standard library nor loaded by the interpreter's own start."""
    ours = {name for name in modules if name not in sys.stdlib_module_names and not name.startswith("_")}
    bare = subprocess.run(
        [sys.executable, "-c", "import sys; print(' '.join(sys.modules))"],
        capture_output=True,
        text=True,
        check=True,
    )
    return ours - {name.partition(".")[0] for name in bare.stdout.split()}


def test_the_first_help_imports_click_and_nothing_else():
    modules, out = imported("--help")
    assert foreign_packages(modules) == {"phasedb", "click"}
    assert "Commands:" in out


@pytest.mark.parametrize("command", COMMANDS)
def test_help_of_a_command_imports_nothing_heavy(command):
    modules, out = imported(command, "--help")
    assert out.startswith("Usage: phasedb")
    assert modules & HEAVY == set()


def test_completing_a_command_imports_no_command():
    modules, out = imported(COMP_WORDS="phasedb\nma", COMP_CWORD="1", _PHASEDB_COMPLETE="bash_complete")
    assert out.split() == ["plain,match"]
    assert modules & HEAVY == set()


def test_completing_a_phase_imports_nothing_heavy(starter_store):
    modules, out = imported(
        COMP_WORDS="phasedb\nmatch\nx\n--internal-standard\nlanthanum\\ hexa",
        COMP_CWORD="4",
        _PHASEDB_COMPLETE="bash_complete",
        PHASEDB_STORE=str(starter_store),
    )
    assert "hexaboride" in out
    assert modules & HEAVY == set()


def test_a_match_does_without_what_it_does_not_show(starter_store, knife):
    modules, out = imported("--store", starter_store, "match", knife)
    assert "Ledger" in out
    assert modules & {"alembic", "gemmi", "jinja2", "matplotlib", "rich", "scipy"} == set()
