"""What a terminal user meets: help with examples, suggestions, colour, completion."""

from __future__ import annotations

import os
import re
import shlex
import shutil
import sys

import pytest
from running import run
from shells import in_terminal, type_and_tab

from phasedb.cli import COMMANDS


def examples_in(text):
    """Return the words of each example in a help text, from the command on."""
    found = []
    for line in text.split("Examples:")[1].splitlines():
        words = shlex.split(line)
        if words:
            assert words[0] == "phasedb"
            start = 1
            while words[start] in ("--by", "--store"):
                start += 2
            found.append(words[start:])
    return found


@pytest.mark.parametrize("command", COMMANDS)
def test_every_help_has_two_examples_of_its_own(command):
    ran = run(command, "--help")
    assert ran.code == 0
    found = examples_in(ran.out)
    assert len({tuple(words) for words in found}) >= 2
    assert all(words[0] == command for words in found)


@pytest.mark.parametrize("command", COMMANDS)
def test_every_option_in_an_example_exists(command):
    usage, _, _ = (helped := run(command, "--help").out).partition("Examples:")
    for words in examples_in(helped):
        known = usage
        if command == "instrument":
            known = run(command, words[1], "--help").out.partition("Examples:")[0]
        for option in (word for word in words if word.startswith("-")):
            assert re.search(rf"(?<![\w-]){option}(?![\w-])", known), option


@pytest.mark.parametrize("command", ["", *COMMANDS])
def test_help_is_no_wider_than_80_columns_in_a_pipe(command):
    ran = run(*([command] if command else []), "--help")
    long = [
        line for line in ran.out.splitlines() if len(line) > 80 and not line.strip().startswith("phasedb ")
    ]
    assert long == []


def test_every_command_that_prints_a_result_has_json():
    without = [name for name in COMMANDS if name != "instrument" and "--json" not in run(name, "--help").out]
    assert without == []


def test_short_help_lines_are_short():
    assert all(len(text) <= 60 for _, _, text in COMMANDS.values())


@pytest.mark.parametrize(("typed", "meant"), [("mach", "match"), ("lst", "list"), ("exprot", "export")])
def test_a_mistyped_command_is_suggested(typed, meant):
    ran = run(typed)
    assert ran.code == 2
    assert f"did you mean {meant}" in ran.err


def test_a_mistyped_phase_is_suggested(starter_store):
    ran = run("show", "titanum nitride", store=starter_store)
    assert ran.code == 2
    assert "titanium nitride" in ran.err


def test_in_a_terminal_headings_stand_out_and_the_width_is_used(starter_store, knife):
    command = [sys.executable, "-m", "phasedb", "--store", str(starter_store), "match", str(knife)]
    wide = in_terminal(command, columns=150)
    assert "\x1b[1mRanking" in wide
    assert max(len(re.sub(r"\x1b\[\d*m", "", line)) for line in wide.splitlines()) > 100
    narrow = in_terminal(command, columns=80, NO_COLOR="1")
    assert "\x1b[" not in narrow
    assert max(map(len, narrow.splitlines())) <= 80


def shell(name):
    path = shutil.which(name)
    if path is None:
        pytest.skip(f"{name} is not installed here")
    return path


SHELLS = {
    "bash": (["--norc", "-i"], 'eval "$(_PHASEDB_COMPLETE=bash_source phasedb)"'),
    "zsh": (
        ["-f", "-i"],
        'autoload -U compinit; compinit -u -D; eval "$(_PHASEDB_COMPLETE=zsh_source phasedb)"',
    ),
    "fish": (["--no-config", "-i"], "_PHASEDB_COMPLETE=fish_source phasedb | source"),
}


@pytest.mark.parametrize("name", SHELLS)
@pytest.mark.parametrize(
    ("typed", "shown"),
    [
        ("phasedb dem", "demo"),
        ("phasedb match x --intern", "--internal-standard"),
        ("phasedb show lanthanum\\ hexa", "lanthanum\\ hexaboride"),
        ("phasedb lines iron\\ \\(alp", "iron\\ \\(alpha,\\ ferrite\\)"),
        ('phasedb refine x --phase "iron (alp', '"iron (alpha, ferrite)"'),
    ],
)
def test_pressing_tab_in_a_real_shell(name, typed, shown, starter_store, tmp_path):
    flags, setup = SHELLS[name]
    here = os.path.dirname(sys.executable)
    environment = {
        **os.environ,
        "PATH": here + os.pathsep + os.environ["PATH"],
        "PHASEDB_STORE": str(starter_store),
        "TERM": "xterm",
        "HOME": str(tmp_path),
    }
    assert shown in type_and_tab([shell(name), *flags], setup, typed, environment)
