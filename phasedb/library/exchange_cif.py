"""CIF files in and out of the library."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from typing import Any

from phasedb.library.cif import CifProblem, parse_cif
from phasedb.library.cif_writing import cif_of
from phasedb.library.entry import Draft, Entry
from phasedb.library.exchange_rows import BadRow, Candidate, prepared_or_bad


def read_cif_rows(text: str, file: str, notes: list[str]) -> Iterator[Candidate | BadRow]:
    """Yield what each block of a CIF means for the library; rows count blocks with a unit cell.

    Raises
    ------
    InputError
        If the text is not CIF, or no block has a unit cell.
    """
    for row, found in enumerate(parse_cif(text, file), start=1):
        if isinstance(found, CifProblem):
            yield BadRow(file, row, "", f"block {found.block}: {found.reason}")
            continue
        notes.extend(f"{file}, block {found.block}: {note}" for note in found.notes)
        prepared = prepared_or_bad(found.draft, file, row, keep_sites=bool(found.draft.sites))
        if isinstance(prepared, BadRow):
            yield prepared
        else:
            yield Candidate(file, row, prepared, entry=None, project=_said_in_cif)


def _said_in_cif(content: Draft) -> Mapping[str, Any]:
    return {"cif": cif_of(content)}


def cif_text(entries: Iterable[Entry], notes: list[str]) -> Iterator[str]:
    """Yield the CIF text of entries, a block each; names of blocks are made unique."""
    seen: dict[str, int] = {}
    without: int = 0
    for entry in entries:
        text = cif_of(entry.content)
        head, _, rest = text.partition("\n")
        seen[head.casefold()] = seen.get(head.casefold(), 0) + 1
        count = seen[head.casefold()]
        yield f"{head}_{count}\n{rest}\n" if count > 1 else f"{text}\n"
        without += not entry.content.sites
    if without:
        notes.append(f"{without} entries have no sites: their blocks hold the cell and the lattice type")
