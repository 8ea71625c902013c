"""Scans in text: two or three columns of numbers, any delimiter, lines of text before them passed over."""

from __future__ import annotations

from typing import Final

import numpy as np

from phasedb.errors import InputError, at
from phasedb.measured.delimited import delimiter_of, header_values, read_number
from phasedb.measured.header import HEADER_KEYS, facts_from_header
from phasedb.measured.scan import RawScan

_MOST_TEXT_LINES: Final = 100


def read_text_scan(text: str, source: str) -> RawScan:
    """Return the columns of a scan.

    Raises
    ------
    InputError
        With file, line and column, for a row that is not two or three numbers like the others.
    """
    lines = text.replace("\r\n", "\n").replace("\r", "\n").split("\n")
    facts = facts_from_header(header_values(lines, source, keys=HEADER_KEYS), source)
    rows = [
        (number, line) for number, line in enumerate(lines, 1) if line.strip() and line.lstrip()[0] != "#"
    ]
    skipped = 0
    while rows and not _is_numeric_row(rows[0][1]):
        skipped += 1
        rows = rows[1:]
        if skipped > _MOST_TEXT_LINES:
            break
    if not rows:
        raise InputError(
            "no row of numbers", where=source, hint="expected columns 2theta, counts and perhaps esd"
        )
    delimiter = delimiter_of(rows, source)
    width = len(_cells(rows[0][1], delimiter))
    if width not in (2, 3):
        raise InputError(
            f"read {width} column{'s' if width > 1 else ''}, expected 2theta, counts and perhaps esd",
            where=at(source, rows[0][0]),
            hint="export the scan as two or three columns",
        )
    table = _fast_table(rows, delimiter, width)
    if table is None:
        table = _slow_table(rows, delimiter, width, source)
    notes = (f"{skipped} lines of text before the numbers were passed over",) if skipped else ()
    return RawScan(table[:, 0], table[:, 1], table[:, 2] if width == 3 else None, facts, notes)


def _is_numeric_row(line: str) -> bool:
    cells = line.replace(";", " ").replace("\t", " ").split()
    return bool(cells) and all(
        _is_number(part) for cell in cells for part in (cell.split(",") or [cell]) if part
    )


def _is_number(text: str) -> bool:
    try:
        read_number(text)
    except ValueError:
        return False
    return True


def _cells(line: str, delimiter: str) -> list[str]:
    cells = line.split() if delimiter == " " else [cell.strip() for cell in line.split(delimiter)]
    while cells and not cells[-1]:
        cells.pop()
    return cells


def _fast_table(rows: list[tuple[int, str]], delimiter: str, width: int) -> np.ndarray | None:
    """Return the table if every row is plain numbers, else None: a million rows take about a second."""
    body = "\n".join(line for _, line in rows)
    if delimiter != " ":
        if "," in body and delimiter != ",":
            body = body.replace(",", ".")
        body = body.replace(delimiter, " ")
    elif "," in body:
        body = body.replace(",", ".")
    tokens = body.split()
    if len(tokens) != width * len(rows):
        return None
    try:
        table = np.array(tokens, dtype=np.float64).reshape(-1, width)
    except ValueError:
        return None
    return table if np.isfinite(table).all() else None


def _slow_table(rows: list[tuple[int, str]], delimiter: str, width: int, source: str) -> np.ndarray:
    table = np.empty((len(rows), width))
    for index, (number, line) in enumerate(rows):
        cells = _cells(line, delimiter)
        if len(cells) != width:
            raise InputError(
                f"read {len(cells)} cells, expected {width} as in the first row",
                where=at(source, number),
                hint="correct or remove the row",
            )
        for place, cell in enumerate(cells):
            try:
                table[index, place] = read_number(cell)
            except ValueError:
                raise InputError(
                    f"read {cell!r}, expected a finite number",
                    where=at(source, number, line.find(cell) + 1),
                    hint="correct or remove the row; a line that starts with # is a comment",
                ) from None
    return table
