"""Entries as a table: reading and writing CSV.

Columns are those of `phasedb.library.intake.TEXT_FIELDS`, and the standing. A table does not carry sites,
more than two sources, or who checked an entry; JSON does.
"""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Callable, Iterable, Iterator, Mapping
from functools import lru_cache, partial
from typing import Final

from phasedb.crystal.quantity import LEAST_A_ANGSTROM, MOST_A_ANGSTROM
from phasedb.errors import InputError
from phasedb.library.cleaning import clean_text
from phasedb.library.entry import Draft, Entry, Source
from phasedb.library.exchange_rows import BadRow, Candidate, prepared_or_bad, reason_of
from phasedb.library.intake import FIELD_ALIASES, REQUIRED_FIELDS, TEXT_FIELDS, FieldError, draft_from_fields
from phasedb.library.sources import EXPANSION_SOURCE, sources_from_fields

_DELIMITERS: Final = ",;\t"
_LONGEST_CELL: Final = 10_000_000
_NUMBER: Final = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")
_RISKY: Final = re.compile(r"'*[=+\-@\t\r]")
_GUARDED: Final = re.compile(r"'+[=+\-@\t\r]")

STANDING_COLUMNS: Final = ("standing", "withdrawn_reason", "replaced_by")
COLUMNS: Final = (
    "name",
    "formula",
    "mineral_name",
    "structure_type",
    "space_group",
    "lattice_type",
    "a_angstrom",
    "a_esd_angstrom",
    "temperature_K",
    "thermal_expansion_per_k",
    "thermal_expansion_source",
    "free_parameters",
    "formula_units_per_cell",
    "drift_class",
    "drift_reason",
    "a_min_angstrom",
    "a_max_angstrom",
    "measured_density_g_cm3",
    "source",
    "doi",
    "year",
    "source_kind",
    "how",
    "source_density_g_cm3",
    "second_source",
    "second_value_angstrom",
    "second_how",
    "remarks",
    "aliases",
    "tags",
    *STANDING_COLUMNS,
)
_KNOWN: Final = {
    name.casefold(): FIELD_ALIASES.get(name, name)
    for name in (*TEXT_FIELDS, *STANDING_COLUMNS, *FIELD_ALIASES)
}


# --- cells


def guarded(text: str) -> str:
    """Return a cell that no spreadsheet runs as a formula: an apostrophe before ``= + - @``; numbers stay.

    >>> guarded("=1+1"), guarded("-0.5"), guarded("TiN")
    ("'=1+1", '-0.5', 'TiN')
    """
    if _RISKY.match(text) and not _NUMBER.fullmatch(text):
        return "'" + text
    return text


def unguarded(text: str) -> str:
    """Undo `guarded`."""
    return text[1:] if _GUARDED.match(text) else text


def _shown(value: float | None) -> str:
    return "" if value is None else repr(value).removesuffix(".0")


def _length(value: float | None) -> str:
    """Return a length in Å; one that reads as nm or pm typed by mistake has its unit."""
    if value is None or LEAST_A_ANGSTROM < value < MOST_A_ANGSTROM:
        return _shown(value)
    return f"{_shown(value)} Å"


# --- writing


def text_fields(content: Draft) -> dict[str, str]:
    """Return what a table says of a content, by column; an empty text where it says nothing."""
    first, second, expansion = _sources(content)
    return {
        "name": content.name,
        "formula": content.formula,
        "mineral_name": content.mineral_name,
        "structure_type": content.structure_type or "",
        "space_group": content.space_group,
        "lattice_type": content.lattice_type,
        "a_angstrom": _length(content.a_angstrom),
        "a_esd_angstrom": _shown(content.a_esd_angstrom),
        "temperature_K": _shown(content.temperature_k),
        "thermal_expansion_per_k": _shown(content.expansion_per_k),
        "thermal_expansion_source": expansion,
        "free_parameters": content.free_parameters,
        "formula_units_per_cell": _shown(content.formula_units_per_cell),
        "drift_class": content.drift_class,
        "drift_reason": content.drift_reason,
        "a_min_angstrom": _length(content.a_min_angstrom),
        "a_max_angstrom": _length(content.a_max_angstrom),
        "measured_density_g_cm3": _shown(content.measured_density_g_cm3),
        "source": first.citation,
        "doi": first.doi,
        "year": _shown(first.year),
        "source_kind": first.kind if first is not _NO_SOURCE else "",
        "how": first.how,
        "source_density_g_cm3": _shown(first.density_g_cm3),
        "second_source": second.citation,
        "second_value_angstrom": _length(second.a_angstrom),
        "second_how": second.how,
        "remarks": content.remarks,
        "aliases": ";".join(content.aliases),
        "tags": ";".join(content.tags),
    }


_NO_SOURCE: Final = Source(citation="")


def _sources(content: Draft) -> tuple[Source, Source, str]:
    """Return the first source, the second, and that of the thermal expansion."""
    plain = [s for s in content.sources if not s.citation.startswith(EXPANSION_SOURCE)]
    expansion = next(
        (
            s.citation.removeprefix(EXPANSION_SOURCE)
            for s in content.sources
            if s.citation.startswith(EXPANSION_SOURCE)
        ),
        "",
    )
    first, second = (*plain[:2], _NO_SOURCE, _NO_SOURCE)[:2]
    return first, second, expansion


def is_whole_in_a_table(content: Draft) -> bool:
    """Return whether a table says all of a content: nothing of it is lost when it is read back."""
    if any(";" in text for text in (*content.aliases, *content.tags)):
        return False
    if content.sites and content.structure_type is None:
        return False
    fields = text_fields(content)

    def number(name: str) -> float | None:
        return float(fields[name]) if fields[name] else None

    return sources_from_fields(fields, number, number) == content.sources


def csv_text(entries: Iterable[Entry], name_of: Mapping[str, str]) -> Iterator[str]:
    """Yield the lines of a table of all entries, withdrawn ones included.

    Parameters
    ----------
    name_of : mapping
        The name of each entry that replaces another, by uid.
    """
    buffer = io.StringIO()
    writer = csv.writer(buffer, lineterminator="\n")

    def line(cells: Iterable[str]) -> str:
        buffer.seek(0)
        buffer.truncate()
        writer.writerow([guarded(cell) for cell in cells])
        return buffer.getvalue()

    yield line(COLUMNS)
    for entry in entries:
        fields = text_fields(entry.content)
        fields["standing"] = entry.standing
        fields["withdrawn_reason"] = entry.withdrawn_reason or ""
        fields["replaced_by"] = name_of.get(entry.replaced_by, "") if entry.replaced_by else ""
        yield line(fields[name] for name in COLUMNS)


# --- reading


def read_csv(text: str, file: str, notes: list[str]) -> Iterator[Candidate | BadRow]:
    """Yield each row of a table, as a candidate or as a bad row.

    Parameters
    ----------
    notes : list of str
        Gets what the user should know of the table as a whole.

    Raises
    ------
    InputError
        If there is no header row, or it lacks a column that is needed.
    """
    rows = _rows(text)
    header = _header(rows, file, notes)
    demoted = 0
    for number, cells in rows:
        if isinstance(cells, str):
            yield BadRow(file, number, "", cells)
            continue
        if not any(cell.strip() for cell in cells):
            continue
        if len(cells) != len(header):
            yield BadRow(file, number, "", f"the row has {len(cells)} cells, the header {len(header)}")
            continue
        fields = {name: unguarded(cell) for name, cell in zip(header, cells, strict=True) if name and cell}
        found = _candidate(fields, file, number)
        demoted += isinstance(found, Candidate) and fields.get("standing", "").strip() == "checked"
        yield found
    if demoted:
        what = (
            "a checked entry comes as a draft"
            if demoted == 1
            else f"{demoted} checked entries come as drafts"
        )
        notes.append(f"{file}: {what}: a table does not say who checked it")


def _rows(text: str) -> Iterator[tuple[int, list[str] | str]]:
    """Yield row numbers, counted from 1, with the cells, or with what is wrong with the row."""
    delimiter = _delimiter(text)
    limit = csv.field_size_limit(_LONGEST_CELL)
    try:
        reader = csv.reader(io.StringIO(text, newline=""), delimiter=delimiter, strict=True)
        number = 0
        while True:
            number += 1
            try:
                cells = next(reader)
            except StopIteration:
                return
            except csv.Error as error:
                yield number, f"this is not a row of a table ({error}): are the quotation marks in pairs?"
                continue
            yield number, cells
    finally:
        csv.field_size_limit(limit)


def _delimiter(text: str) -> str:
    """Return the delimiter that makes the most known columns of the first line that is not blank."""
    first = next((line for line in io.StringIO(text) if line.strip()), "")

    def known(delimiter: str) -> int:
        return sum(name.strip(' "\r\n').casefold() in _KNOWN for name in first.split(delimiter))

    return max(_DELIMITERS, key=known)


def _header(rows: Iterator[tuple[int, list[str] | str]], file: str, notes: list[str]) -> list[str]:
    """Return the column names as this program writes them; empty for a column that it does not know."""
    number, cells = next(
        (row for row in rows if isinstance(row[1], str) or any(cell.strip() for cell in row[1])), (1, [])
    )
    where = f"{file}, row {number}"
    if isinstance(cells, str):
        raise InputError(cells, where=where)
    given = [unguarded(cell).strip() for cell in cells]
    header = [_KNOWN.get(cell.casefold(), "") for cell in given]
    missing = [name for name in REQUIRED_FIELDS if name not in header]
    if missing:
        raise InputError(
            f"the header row lacks {', '.join(missing)}",
            where=where,
            hint="the first row names the columns; needed are " + ", ".join(REQUIRED_FIELDS),
        )
    double = sorted({name for name in header if name and header.count(name) > 1})
    if double:
        raise InputError(f"the header row has {', '.join(double)} twice", where=where)
    ignored = [cell[:40] for cell, name in zip(given, header, strict=True) if cell and not name]
    if ignored:
        notes.append(f"{file}: columns not known and left out: {', '.join(map(repr, ignored))}")
    return header


@lru_cache(maxsize=1000)
def _projection(stated: frozenset[str]) -> Callable[[Draft], dict[str, str]]:
    """Return the projection that all rows share which fill the same columns."""
    return partial(_stated_fields, stated=stated)


def _stated_fields(content: Draft, *, stated: frozenset[str]) -> dict[str, str]:
    """Return what a content says in the columns that a row fills: an empty cell contradicts nothing."""
    return {name: text for name, text in text_fields(content).items() if name in stated}


def _candidate(fields: dict[str, str], file: str, row: int) -> Candidate | BadRow:
    standing = fields.get("standing", "").strip() or "draft"
    if standing not in ("draft", "checked", "withdrawn"):
        reason = f"standing {standing[:40]!r}: expected draft, checked or withdrawn"
        return BadRow(file, row, "standing", reason)
    try:
        draft = draft_from_fields(fields)
        reason = clean_text(fields.get("withdrawn_reason", ""), what="withdrawn_reason")
    except FieldError as error:
        return BadRow(file, row, error.field, reason_of(error))
    except InputError as error:
        return BadRow(file, row, "", reason_of(error))
    if standing == "withdrawn" and not reason:
        return BadRow(file, row, "withdrawn_reason", "a withdrawn entry needs the reason")
    prepared = prepared_or_bad(draft, file, row)
    if isinstance(prepared, BadRow):
        return prepared
    withdrawn = standing == "withdrawn"
    stated = {name for name, cell in fields.items() if cell.strip()}
    if prepared.content.a_esd_angstrom is not None:
        stated.add("a_esd_angstrom")
    return Candidate(
        file,
        row,
        prepared,
        entry=None,
        project=_projection(frozenset(stated)),
        withdrawn_reason=reason if withdrawn else "",
        replaced_by=fields.get("replaced_by", "").strip() if withdrawn else "",
    )
