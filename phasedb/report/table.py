"""Aligned text tables and wrapped paragraphs: they fit the width given and never lose a character."""

from __future__ import annotations

import os
import re
import shutil
import sys
import unicodedata
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Final, Literal, TextIO

PIPED_WIDTH: Final = 80
"""Columns that are used when the output is not a terminal."""

GAP: Final = "  "
_NARROWEST: Final = 10  # a column that may wrap is not squeezed below this
_BEFORE_UNIT: Final = re.compile(r"(?<=[\d)]) (?=(?:%|Å|deg|mm|K)(?:\W|$))")


@dataclass(frozen=True, slots=True)
class Column:
    """A column: its title, which side its cells stand on, and whether its cells may take several lines."""

    title: str
    align: Literal["left", "right"] = "left"
    wraps: bool = False


def output_width(stream: TextIO | None = None) -> int:
    """Return the columns to fill: the terminal's (at least 40), or 80 when `stream` is no terminal."""
    stream = sys.stdout if stream is None else stream
    if not stream.isatty():
        return PIPED_WIDTH
    return max(40, shutil.get_terminal_size((PIPED_WIDTH, 24)).columns)


def colour_wanted(stream: TextIO | None = None) -> bool:
    """Return whether to colour `stream` (stdout): a terminal that is not dumb, and no NO_COLOR."""
    stream = sys.stdout if stream is None else stream
    return stream.isatty() and not os.environ.get("NO_COLOR") and os.environ.get("TERM") != "dumb"


def printable(text: str) -> str:
    r"""Return `text` on one line with control characters as escapes, so that no name steers a terminal.

    >>> printable("red \x1b[31m")
    'red \\x1b[31m'
    """
    if text.isprintable():
        return text
    return "".join(c if c.isprintable() else c.encode("unicode_escape").decode("ascii") for c in text)


def display_width(text: str) -> int:
    """Return the columns of `text`: two for East Asian wide characters, none for combining marks.

    >>> display_width("4.2417(2) Å"), display_width("相")
    (11, 2)
    """
    if text.isascii():
        return len(text)
    return sum(
        0 if unicodedata.combining(c) else 2 if unicodedata.east_asian_width(c) in "WF" else 1 for c in text
    )


def _pad(text: str, width: int, align: str) -> str:
    space = " " * max(0, width - display_width(text))
    return space + text if align == "right" else text + space


def wrap(text: str, width: int) -> list[str]:
    """Return `text` in lines of at most `width` columns; words longer than a line are divided.

    A number stays with the unit after it.
    """
    if display_width(text) <= width:
        return [text]
    lines, line = [], ""
    for word in _BEFORE_UNIT.sub("\0", text).split(" "):
        if line and display_width(line) + 1 + display_width(word) <= width:
            line += " " + word
            continue
        if line:
            lines.append(line)
        *full, line = _divided(word, max(2, width))
        lines.extend(full)
    return [row.replace("\0", " ") for row in (*lines, line)]


def _divided(word: str, width: int) -> list[str]:
    """A word in pieces of at most `width` columns."""
    pieces = [""]
    for character in word:
        if display_width(pieces[-1] + character) > width:
            pieces.append("")
        pieces[-1] += character
    return pieces


def paragraph(text: str, width: int, *, first: str = "", rest: str | None = None) -> str:
    """Return `text` wrapped to `width`, its first line led by `first`, the others by `rest` (or spaces)."""
    lead = " " * display_width(first) if rest is None else rest
    lines = wrap(printable(text), max(20, width - display_width(first)))
    return "\n".join((first if index == 0 else lead) + line for index, line in enumerate(lines))


def _widths(columns: Sequence[Column], rows: Sequence[Sequence[str]], width: int) -> list[int]:
    natural = [
        max([display_width(column.title), *(display_width(row[i]) for row in rows)])
        for i, column in enumerate(columns)
    ]
    excess = sum(natural) + len(GAP) * (len(columns) - 1) - width
    while excess > 0:  # take from the widest column that may wrap, a column at a time
        candidates = [i for i, c in enumerate(columns) if c.wraps and natural[i] > _NARROWEST]
        if not candidates:
            break
        widest = max(candidates, key=natural.__getitem__)
        natural[widest] -= 1
        excess -= 1
    return natural


def table(columns: Sequence[Column], rows: Iterable[Sequence[str]], width: int, *, indent: str = "") -> str:
    """Return an aligned table with a title row, at most `width` columns wide if its fixed columns allow it.

    Cells of a column that wraps continue on the next line; nothing is ever cut off.

    Examples
    --------
    >>> columns = [Column("phase"), Column("a, Å", "right")]
    >>> print(table(columns, [("silver", "4.0862(1)"), ("MgO", "4.211")], 80))
    phase        a, Å
    silver  4.0862(1)
    MgO         4.211
    """
    cells = [[printable(cell) for cell in row] for row in rows]
    widths = _widths(columns, cells, width - len(indent))
    lines: list[str] = []
    for row in [[column.title for column in columns], *cells]:
        parts = [
            wrap(cell, size) if column.wraps else [cell]
            for cell, size, column in zip(row, widths, columns, strict=True)
        ]
        for index in range(max(len(part) for part in parts)):
            text = GAP.join(
                _pad(part[index] if index < len(part) else "", size, column.align)
                for part, size, column in zip(parts, widths, columns, strict=True)
            )
            lines.append((indent + text).rstrip())
    return "\n".join(lines)
