"""Completion in a shell: commands, options and phase names, read straight from the store's file.

A user turns it on once: ``eval "$(_PHASEDB_COMPLETE=bash_source phasedb)"`` (or ``zsh_source``), in fish
``_PHASEDB_COMPLETE=fish_source phasedb | source``. Phase names hold spaces, brackets and commas, which the
usual scripts for bash and fish do not survive: hence our own.
"""

from __future__ import annotations

import os
from pathlib import Path
from typing import Any, ClassVar, Final

import click
from click.shell_completion import BashComplete, CompletionItem, FishComplete, add_completion_class

_MOST: Final = 200

_BASH: Final = """\
%(complete_func)s() {
    local line
    COMPREPLY=()
    while IFS= read -r line; do
        case $line in
            plain,*) COMPREPLY+=("${line#plain,}") ;;
            dir,*) compopt -o dirnames ;;
            file,*) compopt -o default ;;
        esac
    done < <(
        IFS=$'\\n'
        env COMP_WORDS="${COMP_WORDS[*]}" COMP_CWORD=$COMP_CWORD %(complete_var)s=bash_complete $1
    )
}
complete -o nosort -F %(complete_func)s %(prog_name)s
"""

_FISH: Final = """\
function %(complete_func)s
    set -l words (commandline -cp)
    set -l word (commandline -ct)
    for line in (env %(complete_var)s=fish_complete COMP_WORDS="$words" COMP_CWORD="$word" %(prog_name)s)
        set -l parts (string split -m 1 "," -- $line)
        switch $parts[1]
            case dir
                __fish_complete_directories $parts[2]
            case file
                __fish_complete_path $parts[2]
            case plain
                echo $parts[2]
        end
    end
end
complete --no-files --command %(prog_name)s --arguments "(%(complete_func)s)"
"""


class _Bash(BashComplete):
    source_template: ClassVar[str] = _BASH

    def format_completion(self, item: CompletionItem[Any]) -> str:
        words = os.environ["COMP_WORDS"].split("\n")
        place = int(os.environ["COMP_CWORD"])
        in_quotes = place < len(words) and words[place].startswith(('"', "'"))
        value = item.value if in_quotes else quoted_for_bash(item.value)
        return f"{item.type},{value}"


class _Fish(FishComplete):
    source_template: ClassVar[str] = _FISH


def register() -> None:
    """Put our scripts in place of the usual ones."""
    add_completion_class(_Bash)
    add_completion_class(_Fish)


def quoted_for_bash(value: str) -> str:
    r"""Return a completed word as bash must have it on the command line: its special characters escaped.

    >>> print(quoted_for_bash("sodium chloride (rock salt)"))
    sodium\ chloride\ \(rock\ salt\)
    """
    return "".join(c if c.isalnum() or c in "-_./:=,+@%" else "\\" + c for c in value)


def complete_phase(ctx: click.Context, param: click.Parameter, incomplete: str) -> list[CompletionItem[Any]]:
    """Return the names of stored phases that start with what was typed (case does not matter)."""
    store = ctx.find_root().params.get("store")
    return [CompletionItem(name, help=formula) for name, formula in _names(store, incomplete)]


def _names(store: str | None, start: str) -> list[tuple[str, str]]:
    import sqlite3

    from phasedb.library.connect import is_url, store_place

    place = store_place(store)
    path = Path(place)
    if is_url(place) or not path.is_file():
        return []
    escaped = start.casefold().replace("\\", "\\\\").replace("%", "\\%").replace("_", "\\_")
    query = (
        "SELECT name, formula FROM phase WHERE name_key LIKE ? ESCAPE '\\' AND standing != 'withdrawn'"
        " ORDER BY name_key LIMIT ?"
    )
    try:
        connection = sqlite3.connect(f"{path.resolve().as_uri()}?mode=ro", uri=True, timeout=0.2)
        try:
            return [(str(n), str(f)) for n, f in connection.execute(query, (escaped + "%", _MOST))]
        finally:
            connection.close()
    except sqlite3.Error:
        return []  # a shell that completes must not show an error
