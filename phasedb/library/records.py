"""Saved identifications: what was matched, against which library, with what result, and who signed it.

The peaks themselves are kept, so that a match can be repeated without the file. The rows hold JSON text; the
rooms that own peak lists, settings and results turn it into their types.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, Final

import sqlalchemy as sa

from phasedb.errors import RuleRefusedError, StoreError, UnknownNameError
from phasedb.library import tables
from phasedb.library.cleaning import clean_text
from phasedb.library.documents import insert_record
from phasedb.library.entry import canonical_json, content_checksum, key_of
from phasedb.library.people import same_person

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

    from phasedb.library.store import Library
    from phasedb.library.writing import Writing

_ROWS_AT_ONCE: Final = 1000
_MODULUS: Final = 1 << 256


@dataclass(frozen=True, slots=True)
class Signature:
    """Who else stands for an identification, and when (UTC)."""

    signed_by: str
    signed_at: str
    remark: str


@dataclass(frozen=True, slots=True)
class Identification:
    """One saved match.

    Attributes
    ----------
    number : int
        How people call it; counts from 1.
    uid : str
    source, sample, file_sha256 : str
        Of the list that was matched.
    peaks, settings : dict
        The list and the settings, in full.
    program_version : str
    library_fingerprint : str
    history_head, history_count : str, int
        The last history row of the library that was matched against.
    result : dict
        The document ``phasedb.match/1`` with its axis.
    result_text : str
        The result as it was kept, byte for byte.
    made_by, made_at : str
    signatures : tuple of Signature
    """

    number: int
    uid: str
    source: str
    sample: str
    file_sha256: str
    peaks: dict[str, Any]
    settings: dict[str, Any]
    program_version: str
    library_fingerprint: str
    history_head: str
    history_count: int
    result_text: str
    result: dict[str, Any]
    made_by: str
    made_at: str
    signatures: tuple[Signature, ...]


# --- saving


def save_measurement(writing: Writing, peaks: dict[str, Any], *, phase_id: int | None = None) -> int:
    """Keep a measured list (as `phasedb.measured.kept` gives it), perhaps of an entry; return its id."""
    radiation = peaks.get("radiation") or {}
    row = insert_record(
        writing,
        tables.measurement,
        {
            "source": peaks["source"],
            "sha256": peaks["sha256"],
            "sample": peaks["sample"],
            "radiation": radiation.get("name"),
            "wavelength_angstrom": radiation.get("wavelength_angstrom"),
            "peaks": canonical_json(peaks),
            "phase_id": phase_id,
            "entered_by": writing.person.who,
            "entered_at": writing.at,
        },
    )
    return int(row["id"])


def save_identification(
    library: Library, peaks: dict[str, Any], settings: dict[str, Any], result: dict[str, Any]
) -> int:
    """Keep a match with all that is needed to repeat it; return its number.

    Parameters
    ----------
    peaks : dict, from `phasedb.measured.kept.peak_list_to_json`
    settings : dict, from `phasedb.identify.kept.settings_to_json`
    result : dict, from `phasedb.report.document.match_document`

    Raises
    ------
    StoreError
        If the library cannot be written, or never had the fingerprint that the result names.
    """
    text = canonical_json(result)
    fingerprint = result["library"]["fingerprint"]
    with library.begin_write() as writing:
        head, count = _moment_of(writing, fingerprint)
        row = insert_record(
            writing,
            tables.identification,
            {
                "measurement_id": save_measurement(writing, peaks),
                "settings": canonical_json(settings),
                "program_version": result["program_version"],
                "library_fingerprint": fingerprint,
                "history_head": head,
                "history_count": count,
                "result": text,
                "result_sha256": hashlib.sha256(text.encode("utf-8")).hexdigest(),
                "made_by": writing.person.who,
                "made_at": writing.at,
            },
            action="saved",
        )
    return int(row["id"])


def _moment_of(writing: Writing, fingerprint: str) -> tuple[str, int]:
    """Return head and length of the history when the library last had this fingerprint.

    Others may have written since the match read the library: the history is walked back to that moment.
    """
    if writing.fingerprint == fingerprint:
        return writing.history_head, writing.history_count
    history = tables.history.c
    now = int(writing.fingerprint, 16)
    rows = writing.connection.execution_options(yield_per=_ROWS_AT_ONCE).execute(
        sa.select(
            history.number, history.kind, history.before, history.after, history.previous_hash
        ).order_by(history.number.desc())
    )
    for row in rows:
        if row.kind == "phase":
            now = (now - _checksum(row.after) + _checksum(row.before)) % _MODULUS
            if f"{now:064x}" == fingerprint:
                return row.previous_hash, row.number - 1
    raise StoreError(
        "the result is not of this library: it never had that fingerprint; nothing was saved",
        hint="match again and save",
    )


def _checksum(text: str | None) -> int:
    return 0 if text is None else int(content_checksum(json.loads(text)), 16)


# --- reading


def list_identifications(library: Library) -> Sequence[Identification]:
    """Return every saved match, oldest first."""
    with library.reading() as connection:
        return _load(connection, None)


def get_identification(library: Library, number: str | int) -> Identification:
    """Return the saved match of that number.

    Raises
    ------
    UnknownNameError
        If there is none.
    """
    with library.reading() as connection:
        return _get(connection, number)


def _get(connection: Connection, number: str | int) -> Identification:
    text = str(number).strip()
    if text.isascii() and text.isdigit() and len(text) < 10:
        for found in _load(connection, tables.identification.c.id == int(text)):
            return found
    raise UnknownNameError(
        f"no identification has the number {text[:40]!r}", hint="see 'phasedb identifications'"
    )


def _load(connection: Connection, condition: sa.ColumnElement[bool] | None) -> list[Identification]:
    made, measured, signed = tables.identification, tables.measurement, tables.signature
    query = (
        sa.select(made, measured.c.source, measured.c.sample, measured.c.sha256, measured.c.peaks)
        .join(measured, measured.c.id == made.c.measurement_id)
        .order_by(made.c.id)
    )
    if condition is not None:
        query = query.where(condition)
    signatures: dict[int, list[Signature]] = {}
    for row in connection.execute(sa.select(signed).order_by(signed.c.id)):
        signatures.setdefault(row.identification_id, []).append(
            Signature(row.signed_by, row.signed_at, row.remark)
        )
    return [
        Identification(
            number=row.id,
            uid=row.uid,
            source=row.source,
            sample=row.sample,
            file_sha256=row.sha256,
            peaks=json.loads(row.peaks),
            settings=json.loads(row.settings),
            program_version=row.program_version,
            library_fingerprint=row.library_fingerprint,
            history_head=row.history_head,
            history_count=row.history_count,
            result_text=row.result,
            result=json.loads(row.result),
            made_by=row.made_by,
            made_at=row.made_at,
            signatures=tuple(signatures.get(row.id, ())),
        )
        for row in connection.execute(query)
    ]


# --- signing


def sign(library: Library, number: str | int, *, remark: str = "") -> Identification:
    """Sign a saved match as someone who did not make it; return it as it is now.

    Raises
    ------
    UnknownNameError
    RuleRefusedError
        If the same person made it, or has signed it already.
    """
    with library.begin_write() as writing:
        found = _get(writing.connection, number)
        who = writing.person.who
        if same_person(found.made_by, who):
            raise RuleRefusedError(
                f"{who} made identification {found.number} and cannot sign it",
                hint="a second person has to sign it; say who with --by",
            )
        for signature in found.signatures:
            if same_person(signature.signed_by, who):
                raise RuleRefusedError(
                    f"{who} has signed identification {found.number} already, at {signature.signed_at}",
                    hint="nothing was changed",
                )
        insert_record(
            writing,
            tables.signature,
            {
                "identification_id": found.number,
                "signed_by_key": key_of(who),
                "signed_by": who,
                "signed_at": writing.at,
                "remark": clean_text(remark, what="remark"),
            },
            action="signed",
        )
        return _get(writing.connection, found.number)


# --- what changed since


@dataclass(frozen=True, slots=True)
class EntryChange:
    """How one entry differs from what it was at some moment.

    Attributes
    ----------
    before, after : dict or None
        Its documents then and now; None if it was not there yet.
    who, at, remark : str
        Of the last change.
    """

    before: dict[str, Any] | None
    after: dict[str, Any] | None
    who: str
    at: str
    remark: str


def entry_changes_since(library: Library, history_count: int) -> list[EntryChange]:
    """Return the entries that changed after that history row, in the order of their last change."""
    history = tables.history.c
    found: dict[str, EntryChange] = {}
    with library.reading() as connection:
        rows = connection.execute(
            sa.select(history.key, history.before, history.after, history.who, history.at, history.remark)
            .where(history.number > history_count, history.kind == "phase")
            .order_by(history.number)
        )
        for row in rows:
            earlier = found.pop(row.key, None)
            before = earlier.before if earlier is not None else _parsed(row.before)
            found[row.key] = EntryChange(before, _parsed(row.after), row.who, row.at, row.remark)
    return list(found.values())


def _parsed(text: str | None) -> dict[str, Any] | None:
    document: dict[str, Any] | None = None if text is None else json.loads(text)
    return document
