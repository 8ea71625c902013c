"""Peak lists in delimited text."""

from __future__ import annotations

import math
from typing import Final

from phasedb.errors import InputError, at
from phasedb.measured.building import MOST_LINES
from phasedb.measured.delimited import (
    Cell,
    DelimitedText,
    cell_number,
    check_one_decimal_sign,
    split_text,
)
from phasedb.measured.header import HEADER_KEYS, facts_from_header
from phasedb.measured.peaklist import PositionUnit
from phasedb.measured.raw import RawLines

POSITION_COLUMNS: Final[dict[str, PositionUnit]] = {
    "two_theta_deg": "two-theta",
    "d_angstrom": "d",
    "q_per_angstrom": "q",
    "ring_radius_mm": "ring",
    "ring_diameter_mm": "ring",
}
_OTHER_COLUMNS: Final = ("intensity", "esd", "fwhm_deg", "fwhm")
_WITHOUT_NAMES: Final = ("position", "intensity", "esd", "fwhm")


def read_text_list(text: str, source: str, *, unit: PositionUnit | None) -> RawLines:
    """Return the lines in delimited `text`; `unit` (from an option) picks between two position columns.

    Raises
    ------
    InputError
        With file, line and column.
    """
    table = split_text(text, source, keys=HEADER_KEYS)
    if not table.rows:
        what = "a header row but no lines" if table.names else "comments but no lines"
        raise InputError(
            f"the file holds {what}", where=source, hint="write one line position in each row below it"
        )
    if len(table.rows) > MOST_LINES:
        raise InputError(
            f"{len(table.rows)} lines: expected at most {MOST_LINES}",
            where=source,
            hint="this looks like a scan; find its lines with: phasedb peaks SCAN",
        )
    check_one_decimal_sign(table.rows, source)
    facts = facts_from_header(table.header, source)
    columns, found_unit, ignored = _columns_of(table, source, unit)
    _check_row_lengths(table, columns, source)

    def column(name: str) -> list[float] | None:
        index = columns.get(name)
        if index is None:
            return None
        values = [
            cell_number(row[index], source, name, lowest=0.0) if index < len(row) else math.nan
            for row in table.rows
        ]
        return None if all(math.isnan(value) for value in values) else values

    position = []
    index = columns["position"]
    for row in table.rows:
        if index >= len(row) or not row[index].text:
            raise InputError(
                "the row has no position",
                where=at(source, row[0].line, row[min(index, len(row) - 1)].column),
                hint="give one or remove the row",
            )
        position.append(cell_number(row[index], source, "position"))
    is_diameter = bool(table.names) and table.names[index].text.casefold() == "ring_diameter_mm"
    in_deg = "fwhm_deg" in columns
    notes = (f"columns ignored: {', '.join(ignored)}",) if ignored else ()
    return RawLines(
        position=position,
        unit=found_unit,
        intensity=column("intensity"),
        esd=column("esd"),
        fwhm=column("fwhm_deg" if in_deg else "fwhm"),
        places=[at(source, row[index].line, row[index].column) for row in table.rows],
        facts=facts,
        fwhm_in_deg=in_deg,
        notes=notes,
        per_unit=0.5 if is_diameter else 1.0,
    )


def _columns_of(
    table: DelimitedText, source: str, wanted: PositionUnit | None
) -> tuple[dict[str, int], PositionUnit | None, list[str]]:
    """Return the index of each column, the unit its name tells, and the names of columns not used."""
    if not table.names:
        return {name: index for index, name in enumerate(_WITHOUT_NAMES)}, None, []
    found: dict[str, int] = {}
    ignored: list[str] = []
    positions: list[tuple[Cell, int, PositionUnit]] = []
    for index, cell in enumerate(table.names):
        name = cell.text.casefold()
        if name in found or any(cell.text.casefold() == other.text.casefold() for other, _, _ in positions):
            raise InputError(
                f"two columns are called {cell.text!r}",
                where=at(source, cell.line, cell.column),
                hint="rename or remove one",
            )
        if name in POSITION_COLUMNS:
            positions.append((cell, index, POSITION_COLUMNS[name]))
        elif name in _OTHER_COLUMNS:
            found[name] = index
        elif name:
            ignored.append(cell.text)
    chosen = _chosen_position(positions, table.names, source, wanted)
    ignored += [cell.text for cell, _, _ in positions if cell is not chosen[0]]
    found["position"] = chosen[1]
    return found, chosen[2], ignored


def _chosen_position(
    positions: list[tuple[Cell, int, PositionUnit]],
    names: tuple[Cell, ...],
    source: str,
    wanted: PositionUnit | None,
) -> tuple[Cell, int, PositionUnit]:
    expected = ", ".join(POSITION_COLUMNS)
    if not positions:
        first = names[0]
        raise InputError(
            f"read {first.text!r}, expected a number, or a header row with a position column",
            where=at(source, first.line, first.column),
            hint=f"name the position column one of {expected}",
        )
    fitting = [entry for entry in positions if entry[2] == wanted] if wanted else positions
    if len(fitting) == 1 and (len(positions) > 1 or wanted is None or fitting):
        return fitting[0]
    if not fitting:
        cell = positions[0][0]
        raise InputError(
            f"unit {wanted} is asked for and the position column is {cell.text!r}",
            where=at(source, cell.line, cell.column),
            hint="leave --unit out, or rename the column",
        )
    second = fitting[1][0]
    raise InputError(
        f"two position columns, {fitting[0][0].text!r} and {second.text!r}: expected one",
        where=at(source, second.line, second.column),
        hint="remove one, or choose with --unit",
    )


def _check_row_lengths(table: DelimitedText, columns: dict[str, int], source: str) -> None:
    most = len(table.names) or len(_WITHOUT_NAMES)
    for row in table.rows:
        if len(row) > most:
            extra = row[most]
            names = "the header row" if table.names else "position, intensity, esd, fwhm"
            raise InputError(
                f"read {len(row)} cells, {extra.text!r} the first too many; expected {most} ({names})",
                where=at(source, extra.line, extra.column),
                hint="add or correct the header row, or check the delimiter",
            )
