"""Delimited text: comments with `key: value`, a header row, cells with their places, decimal commas."""

from __future__ import annotations

import math
import re
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Final

from phasedb.errors import InputError, at

_NUMBER: Final = re.compile(r"[+-]?(\d+(\.\d*)?|\.\d+)([eE][+-]?\d+)?\Z")
_COMMA_NUMBER: Final = re.compile(r"[+-]?\d+,\d+([eE][+-]?\d+)?\Z")
_LINE_END: Final = re.compile(r"\r\n|\n|\r")
_KEY: Final = re.compile(r"#+\s*([A-Za-z_][\w -]*?)\s*:\s*(.*?)\s*\Z")


@dataclass(frozen=True, slots=True)
class Cell:
    """One cell: its text without quotes and spaces, and where it stands (both counted from 1)."""

    text: str
    line: int
    column: int


@dataclass(frozen=True, slots=True)
class HeaderValue:
    """The value of a ``# key: value`` comment and its line."""

    value: str
    line: int


@dataclass(frozen=True, slots=True)
class DelimitedText:
    """A text taken apart.

    Attributes
    ----------
    header : dict of casefolded key to value
    names : tuple of Cell
        The header row; empty if there is none.
    rows : tuple of tuple of Cell
    """

    header: dict[str, HeaderValue]
    names: tuple[Cell, ...]
    rows: tuple[tuple[Cell, ...], ...]


def split_text(text: str, source: str, *, keys: frozenset[str]) -> DelimitedText:
    """Take `text` apart: comments, header row (if the first row's first cell is not a number), rows.

    `keys` are the casefolded keys that a comment may set; other comments are passed over.

    Raises
    ------
    InputError
        If a comma may be a decimal comma or a delimiter, or a key has two values.
    """
    lines = _LINE_END.split(text)
    header = header_values(lines, source, keys=keys)
    content = [(number, line) for number, line in enumerate(lines, 1) if _is_content(line)]
    if not content:
        return DelimitedText(header, (), ())
    delimiter = delimiter_of(content, source)
    rows = (_without_empty_tail(_cells(line, number, delimiter)) for number, line in content)
    kept = tuple(row for row in rows if row)
    if kept and not looks_numeric(kept[0][0].text):
        return DelimitedText(header, kept[0], kept[1:])
    return DelimitedText(header, (), kept)


def header_values(lines: list[str], source: str, *, keys: frozenset[str]) -> dict[str, HeaderValue]:
    """Return the values of the comments ``# key: value`` whose casefolded key is in `keys`.

    Raises
    ------
    InputError
        If a key has two values.
    """
    header: dict[str, HeaderValue] = {}
    for number, line in enumerate(lines, 1):
        if line.lstrip().startswith("#"):
            _take_key(line.strip(), number, header, keys, source)
    return header


def _is_content(line: str) -> bool:
    bare = line.strip()
    return bool(bare) and bare[0] != "#"


def looks_numeric(text: str) -> bool:
    """Return whether `text` is meant as a number (NaN, inf and an empty cell too)."""
    bare = text.strip().casefold().lstrip("+-")
    return not bare or bare in ("nan", "inf", "infinity") or bare[0].isdigit() or bare[0] in ".,"


def read_number(text: str) -> float:
    """Return the finite number in `text`, with a decimal point or a decimal comma.

    Raises
    ------
    ValueError
        If it is anything else.
    """
    bare = text.strip()
    if _COMMA_NUMBER.match(bare):
        bare = bare.replace(",", ".")
    elif not _NUMBER.match(bare):
        raise ValueError(text)
    value = float(bare)
    if not math.isfinite(value):
        raise ValueError(text)
    return value


def cell_number(cell: Cell, source: str, name: str, *, lowest: float = -math.inf) -> float:
    """Return the number in `cell`, or NaN if it is empty.

    Raises
    ------
    InputError
        With the place of the cell, if it holds no finite number or one below `lowest`.
    """
    if not cell.text:
        return math.nan
    try:
        value = read_number(cell.text)
    except ValueError:
        value = math.nan
    if value >= lowest:
        return value
    expected = f"a finite number, {lowest:g} or above" if math.isfinite(lowest) else "a finite number"
    raise InputError(
        f"read {cell.text!r}, expected {expected} ({name})",
        where=at(source, cell.line, cell.column),
        hint="correct the cell; a line that starts with # is a comment",
    )


def check_one_decimal_sign(rows: tuple[tuple[Cell, ...], ...], source: str) -> None:
    """Refuse a file that uses a point in one number and a comma in another: one may be for thousands.

    Raises
    ------
    InputError
        At the first number that differs.
    """
    first: str | None = None
    for row in rows:
        for cell in row:
            sign = "," if _COMMA_NUMBER.match(cell.text) else "." if "." in cell.text else None
            if sign is None or (sign == "." and not _NUMBER.match(cell.text)):
                continue
            if first is not None and sign != first:
                raise InputError(
                    f"read {cell.text!r} after numbers with the decimal sign {first!r}",
                    where=at(source, cell.line, cell.column),
                    hint="use one decimal sign throughout, and no thousands separator",
                )
            first = sign


def _take_key(
    line: str, number: int, header: dict[str, HeaderValue], keys: frozenset[str], source: str
) -> None:
    found = _KEY.match(line)
    if found is None or not found[2]:
        return
    key = found[1].casefold()
    if key not in keys:
        return
    earlier = header.get(key)
    if earlier is not None and earlier.value != found[2]:
        raise InputError(
            f"{found[1]!r} is given twice: {earlier.value!r} in line {earlier.line} and {found[2]!r}",
            where=at(source, number),
            hint="keep the one that holds",
        )
    header[key] = HeaderValue(found[2], number)


def delimiter_of(content: list[tuple[int, str]], source: str) -> str:
    """Return ``;``, tab, ``,`` or a space, judged from the first rows (line number, text).

    Raises
    ------
    InputError
        If a comma may be a decimal comma or a delimiter.
    """
    sample = content[:50]
    for sign in (";", "\t"):
        if all(sign in line for _, line in sample[:1]) or sum(sign in line for _, line in sample) > 25:
            return sign
    if not any("," in line for _, line in sample):
        return " "
    number, first = sample[0]
    if not looks_numeric(first.split(",")[0].strip().strip('"')):
        # A header row tells: with commas it is comma-delimited, without them commas below are decimal.
        return "," if "," in first else " "
    words = [line.replace('"', " ").split() for _, line in sample]
    if all(len(row) > 1 and not any(word[0] == "," or word[-1] == "," for word in row) for row in words):
        return " "
    plain = all(re.fullmatch(r"\s*\d+\s*,\s*\d+\s*", line) for _, line in sample)
    spaced = all(re.search(r",\s[^.]*\Z", line) and re.match(r"[^.]*\d,\d", line) for _, line in sample)
    if plain or spaced:
        raise InputError(
            f"read {first.strip()!r}: the comma may be a decimal comma or stand between columns",
            where=at(source, number, first.index(",") + 1),
            hint="write a decimal point, or separate the columns with a semicolon, "
            "or add a header row such as two_theta_deg,intensity",
        )
    return ","


def _without_empty_tail(cells: Iterator[Cell]) -> tuple[Cell, ...]:
    row = list(cells)
    while row and not row[-1].text:
        row.pop()
    return tuple(row)


def _cells(line: str, number: int, delimiter: str) -> Iterator[Cell]:
    if delimiter == " ":
        for found in re.finditer(r'"([^"]*)"|\S+', line):
            yield Cell(found[0].strip('"').strip(), number, found.start() + 1)
        return
    start = 0
    quoted = False
    for index, sign in enumerate(line + delimiter):
        if sign == '"':
            quoted = not quoted
        elif sign == delimiter and (not quoted or index == len(line)):
            raw = line[start:index]
            lead = len(raw) - len(raw.lstrip())
            yield Cell(raw.strip().strip('"').strip(), number, start + lead + 1)
            start = index + 1
