"""Entries as JSON (schema ``phasedb.library/1``): loss-free, with the history on request.

The members are ``schema``, ``program_version``, ``phase_count``, ``fingerprint``, ``phases``,
``measurements`` (the lists that adopted phases came from) and ``history`` (null unless asked for). Each phase
has every stored field under its name in `phasedb.library.exchange_fields`; the
same entries give the same bytes.
"""

from __future__ import annotations

import json
import math
from collections.abc import Iterable, Iterator
from functools import lru_cache
from typing import Any, Final, NoReturn

from phasedb import __version__
from phasedb.crystal.lattice import LatticeType
from phasedb.crystal.phases import Structure
from phasedb.errors import InputError, at
from phasedb.library.entry import Entry, canonical_json, entry_to_json
from phasedb.library.exchange_fields import FIELDS, custody_from, draft_from, refuse_custody, short
from phasedb.library.exchange_rows import BadRow, Candidate, prepared_or_bad, reason_of, whole_content
from phasedb.library.intake import FieldError

SCHEMA: Final = "phasedb.library/1"


# --- writing


def json_text(
    entries: Iterable[Entry],
    *,
    phase_count: int,
    fingerprint: str,
    measurements: Iterable[str],
    history: Iterable[str] | None = None,
) -> Iterator[str]:
    """Yield the document of all entries, one line for each.

    Parameters
    ----------
    measurements : iterable of str
        The text of the member ``measurements``, in pieces.
    history : iterable of str, optional
        The text of the member ``history``, in pieces.
    """
    yield (
        f'{{"schema": {json.dumps(SCHEMA)}, "program_version": {json.dumps(__version__)},\n'
        f'"phase_count": {phase_count}, "fingerprint": {json.dumps(fingerprint)},\n"phases": ['
    )
    separator = "\n"
    for entry in entries:
        yield separator + canonical_json(entry_to_json(entry))
        separator = ",\n"
    yield '\n],\n"measurements": '
    yield from measurements
    yield ',\n"history": '
    yield from ["null"] if history is None else history
    yield "\n}\n"


# --- the document


def parse_document(text: str, file: str) -> dict[str, Any]:
    """Return the document in a file.

    Raises
    ------
    InputError
        If it is not JSON, or not of the schema.
    """

    def refuse(word: str) -> NoReturn:
        raise InputError(f"read {word}, expected a finite number", where=file, hint="JSON has no such number")

    def number(text: str) -> float:
        value = float(text)
        if not math.isfinite(value):
            raise InputError(
                f"read {text[:40]}, expected a smaller number", where=file, hint="correct the file"
            )
        return value

    def members(pairs: list[tuple[str, Any]]) -> dict[str, Any]:
        found = dict(pairs)
        if len(found) != len(pairs):
            double = next(name for name, _ in pairs if [n for n, _ in pairs].count(name) > 1)
            raise InputError(f"an object has {double[:40]!r} twice", where=file, hint="leave one of them out")
        return found

    try:
        document = json.loads(text, parse_constant=refuse, parse_float=number, object_pairs_hook=members)
    except json.JSONDecodeError as error:
        raise InputError(
            f"not valid JSON: {error.msg}", where=at(file, error.lineno, error.colno), hint="correct the file"
        ) from None
    except InputError:
        raise
    except (ValueError, RecursionError) as error:
        raise InputError(f"not usable JSON: {error}", where=file) from None
    if not isinstance(document, dict) or document.get("schema") != SCHEMA:
        said = document.get("schema") if isinstance(document, dict) else type(document).__name__
        raise InputError(
            f"schema {str(said)[:60]!r}: expected {SCHEMA!r}",
            where=file,
            hint=f'{{"schema": "{SCHEMA}", "phases": [...]}} is what export writes',
        )
    if not isinstance(document.get("phases"), list):
        raise InputError("'phases' is not a list", where=file, hint='expected "phases": [{...}, ...]')
    return document


def read_phases(document: dict[str, Any], file: str, notes: list[str]) -> Iterator[Candidate | BadRow]:
    """Yield each phase of the document, as a candidate or as a bad row; rows count from 1."""
    ignored: dict[str, None] = {}
    for row, value in enumerate(document["phases"], start=1):
        if not isinstance(value, dict):
            yield BadRow(file, row, "", f"read {short(value)}, expected an object")
            continue
        ignored.update(dict.fromkeys(name for name in value if name not in FIELDS))
        try:
            yield _candidate(value, file, row)
        except FieldError as error:
            yield BadRow(file, row, error.field, reason_of(error))
    if ignored:
        names = ", ".join(repr(name[:40]) for name in sorted(ignored)[:10])
        notes.append(f"{file}: fields not known and left out: {names}")


def _candidate(value: dict[str, Any], file: str, row: int) -> Candidate | BadRow:
    has_custody = value.get("uid") is not None
    draft = draft_from(value, trusted=has_custody)
    if draft.sites:
        try:
            _check_structure(Structure(draft.space_group, draft.sites, draft.assumed), draft.lattice_type)
        except InputError as error:
            raise FieldError("sites", error) from None
    keeps_sites = has_custody or bool(draft.sites)
    prepared = prepared_or_bad(draft, file, row, keep_sites=keeps_sites)
    if isinstance(prepared, BadRow):
        return prepared
    if not has_custody:
        refuse_custody(value)
        return Candidate(file, row, prepared, entry=None, project=whole_content)
    entry = Entry(
        content=prepared.content,
        elements=prepared.elements,
        formula_key=prepared.formula_key,
        **custody_from(value),
    )
    return Candidate(file, row, prepared, entry, project=whole_content)


@lru_cache(maxsize=2000)
def _check_structure(structure: Structure, lattice_type: LatticeType) -> None:
    from phasedb.crystal.structure import check_structure

    check_structure(structure, lattice_type)
