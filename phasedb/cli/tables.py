"""Plain aligned tables and wrapped text: no colour, nothing cut off when piped."""

from __future__ import annotations

import shutil
import sys
import textwrap
import unicodedata
from collections.abc import Mapping, Sequence

from phasedb.report.table import printable


def text_width(text: str) -> int:
    """Return how many columns `text` takes on a terminal."""
    return sum(
        0 if unicodedata.combining(char) else 2 if unicodedata.east_asian_width(char) in "WF" else 1
        for char in text
    )


def page_width() -> int:
    """Return the width to wrap at: the terminal's, 80 when piped."""
    return min(shutil.get_terminal_size((80, 24)).columns, 120) if sys.stdout.isatty() else 80


def aligned(
    heads: Sequence[str],
    rows: Sequence[Sequence[str]],
    *,
    right: Sequence[int] = (),
    shrink: Mapping[int, int] | None = None,
) -> list[str]:
    """Return the lines of a table; columns in `right` are set flush right.

    A table that is wider than the page has the columns in `shrink` wrapped at the widths given there: nothing
    is cut off.
    """
    table = [list(heads), *([printable(cell) for cell in row] for row in rows)]
    widths = [max(text_width(row[i]) for row in table) for i in range(len(heads))]
    if sum(widths) + 2 * (len(widths) - 1) > page_width():
        for i, most in (shrink or {}).items():
            widths[i] = min(widths[i], most)
    lines = []
    for row in table:
        parts = [_wrapped(cell, width) for cell, width in zip(row, widths, strict=True)]
        for number in range(max(len(cell) for cell in parts)):
            cells = []
            for i, cell in enumerate(parts):
                text = cell[number] if number < len(cell) else ""
                gap = " " * (widths[i] - text_width(text))
                cells.append(gap + text if i in right else text + gap)
            lines.append("  ".join(cells).rstrip())
    return lines


def _wrapped(cell: str, width: int) -> list[str]:
    """Return a cell as lines; those after the first are set in by two."""
    if text_width(cell) <= width:
        return [cell]
    return textwrap.wrap(cell, width, subsequent_indent="  ", break_on_hyphens=False) or [""]


def labelled(pairs: Sequence[tuple[str, str]], *, indent: int = 0) -> list[str]:
    """Return ``label  text`` lines, the text wrapped under itself; pairs without text are left out."""
    kept = [(label, printable(" ".join(text.split()))) for label, text in pairs if text]
    column = max((text_width(label) for label, _ in kept), default=0) + 2
    lines = []
    for label, text in kept:
        first = " " * indent + label + " " * (column - text_width(label))
        wrapped = textwrap.wrap(
            text,
            width=max(page_width(), column + 30),
            initial_indent=first,
            subsequent_indent=" " * (indent + column),
            break_long_words=False,
            break_on_hyphens=False,
        )
        lines += wrapped or [first.rstrip()]
    return lines
