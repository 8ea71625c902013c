"""What a reader gives: candidates to bring in, and rows that cannot be."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from typing import Any, Final

from phasedb.errors import InputError
from phasedb.library.entry import Draft, Entry, content_to_json
from phasedb.library.preparing import Prepared, prepare


@dataclass(frozen=True, slots=True)
class BadRow:
    """A row that cannot be brought in, and why.

    Attributes
    ----------
    file : str
    row : int
        The header of a table is row 1; 0 for an entry of another library, which has no rows.
    column : str
        Empty if it is not one column's fault.
    reason : str
    name : str
        What the row calls itself, if that could be read.
    """

    file: str
    row: int
    column: str
    reason: str
    name: str = ""

    def __str__(self) -> str:
        column = f", column {self.column}" if self.column else ""
        return f"{_where(self.file, self.row, self.name)}{column}: {self.reason}"


def _where(file: str, row: int, name: str) -> str:
    return f"{file}, row {row}" if row else f"{file}, {name!r}"


@dataclass(frozen=True, slots=True)
class Candidate:
    """One entry that a file or another library brings, its values checked.

    Attributes
    ----------
    file, row : str, int
        Where it stands, as in `BadRow`.
    prepared : Prepared
    entry : Entry or None
        With uid, standing and who did what, where the file has them.
    project : callable
        What a file of this kind can say of a content: two contents that give the same are the same to it.
    withdrawn_reason : str
        Not empty for an entry without custody that is withdrawn.
    replaced_by : str
        Name of the entry that replaces it.
    """

    file: str
    row: int
    prepared: Prepared
    entry: Entry | None
    project: Callable[[Draft], Mapping[str, Any]]
    withdrawn_reason: str = ""
    replaced_by: str = ""

    @property
    def name(self) -> str:
        return self.prepared.content.name

    def bad(self, column: str, reason: str) -> BadRow:
        """Return this row as one that cannot be brought in."""
        return BadRow(self.file, self.row, column, reason, self.name)

    def place(self, beside: Candidate) -> str:
        """Return where this row stands, for a remark about the row `beside`."""
        if self.row and self.file == beside.file:
            return f"row {self.row}"
        return _where(self.file, self.row, self.name)


def whole_content(content: Draft) -> Mapping[str, Any]:
    """Project nothing away: for files that say everything."""
    return content_to_json(content)


def prepared_or_bad(draft: Draft, file: str, row: int, *, keep_sites: bool = False) -> Prepared | BadRow:
    """Return the checked draft, or the row with the column whose value is wrong."""
    try:
        return prepare(draft, keep_sites=keep_sites)
    except InputError as error:
        return BadRow(file, row, _column_at_fault(draft), reason_of(error))


def reason_of(error: InputError) -> str:
    """Return what was wrong and what to do, without the place."""
    return "; ".join(part for part in (error.what, error.hint) if part)


_HARMLESS: Final[dict[str, Any]] = {"name": "x", "formula": "Fe", "lattice_type": "P", "a_angstrom": 3.0}
_PUBLIC: Final = {"temperature_k": "temperature_K", "expansion_per_k": "thermal_expansion_per_k"}


def _column_at_fault(draft: Draft) -> str:
    """Return the field without which the draft would pass: the checks themselves name values, not columns."""
    blank = Draft(**_HARMLESS)
    for name in sorted(Draft.__dataclass_fields__, key=_HARMLESS.__contains__):  # a last: others depend on it
        cured = {name: getattr(blank, name)}
        if name == "a_angstrom":
            cured |= {"a_min_angstrom": None, "a_max_angstrom": None, "a_esd_angstrom": None}
        try:
            prepare(replace(draft, **cured), keep_sites=True)
        except InputError:
            continue
        return _PUBLIC.get(name, name)
    return ""
