"""Measurements that belong to entries, brought along with them: the lists that adopted phases came from."""

from __future__ import annotations

import json
import re
from collections.abc import Collection, Iterable, Iterator
from typing import TYPE_CHECKING, Any, Final

import sqlalchemy as sa

from phasedb.errors import InputError
from phasedb.library import tables
from phasedb.library.cleaning import clean_text
from phasedb.library.documents import insert_record
from phasedb.library.entry import canonical_json

if TYPE_CHECKING:
    from sqlalchemy.engine import Connection

    from phasedb.library.writing import Writing

_TEXTS: Final = ("source", "sha256", "sample", "radiation", "entered_by", "entered_at")
_FIELDS: Final = frozenset({"uid", "phase", "wavelength_angstrom", "peaks", *_TEXTS})
_UID: Final = re.compile(r"[0-9a-f]{32}")
_SCHEMA: Final = "phasedb.kept_peaks/1"
_LONGEST: Final = 5_000_000


def measurements_of(connection: Connection) -> Iterator[dict[str, Any]]:
    """Yield the measurements that belong to an entry, by uid."""
    measurement, phase = tables.measurement.c, tables.phase.c
    rows = connection.execute(
        sa.select(tables.measurement, phase.uid.label("phase_uid"))
        .join(tables.phase, phase.id == measurement.phase_id)
        .order_by(measurement.uid)
    )
    for row in rows.mappings():
        document = {name: row[name] for name in ("uid", "wavelength_angstrom", *_TEXTS)}
        yield {**document, "phase": row["phase_uid"], "peaks": json.loads(row["peaks"])}


def measurements_text(connection: Connection) -> Iterator[str]:
    """Yield the member ``measurements`` of an export, one line for each."""
    yield "["
    separator = "\n"
    for document in measurements_of(connection):
        yield separator + canonical_json(document)
        separator = ",\n"
    yield "\n]"


def read_measurements(document: dict[str, Any], file: str) -> list[dict[str, Any]]:
    """Return the measurements in an export.

    Raises
    ------
    InputError
        If one is not of the form that an export gives.
    """
    given = document.get("measurements")
    if given is None:
        return []
    if not isinstance(given, list):
        raise InputError("'measurements' is not a list", where=file)
    for number, value in enumerate(given, start=1):
        problem = _problem(value)
        if problem:
            raise InputError(f"measurement {number} cannot be brought in: {problem}", where=file)
    return given


def _problem(value: Any) -> str:
    """Return what is wrong with a measurement; empty if nothing is."""
    if not isinstance(value, dict) or set(value) != _FIELDS:
        return "its fields are not those of a measurement"
    for name in ("uid", "phase"):
        if not isinstance(value[name], str) or not _UID.fullmatch(value[name]):
            return f"its {name} is not 32 hex digits"
    for name in _TEXTS:
        text = value[name]
        if not isinstance(text, str) and not (name == "radiation" and text is None):
            return f"its {name} is not a text"
        try:
            clean_text(text or "", what=name)
        except InputError as error:
            return error.what
    wavelength = value["wavelength_angstrom"]
    if wavelength is not None and (isinstance(wavelength, bool) or not isinstance(wavelength, (int, float))):
        return "its wavelength is not a number"
    peaks = value["peaks"]
    if not isinstance(peaks, dict) or peaks.get("schema") != _SCHEMA:
        return f"its peaks are not of schema {_SCHEMA}"
    if len(canonical_json(peaks)) > _LONGEST:
        return "its peaks are too many"
    return ""


def bring_measurements(
    writing: Writing,
    measurements: Iterable[dict[str, Any]],
    uids: Collection[str],
    *,
    action: str,
    remark: str,
) -> int:
    """Write the measurements of these entries that the library does not have; return how many.

    Parameters
    ----------
    uids : collection of str
        Entries that the library now has under the same uid as the library that the measurements are from.
    """
    own, phase = tables.measurement.c, tables.phase.c
    count = 0
    for value in measurements:
        known = writing.connection.execute(sa.select(own.id).where(own.uid == value["uid"])).first()
        if known is not None or value["phase"] not in uids:
            continue
        phase_id = writing.connection.execute(
            sa.select(phase.id).where(phase.uid == value["phase"])
        ).scalar_one()
        row = {name: value[name] for name in ("wavelength_angstrom", *_TEXTS)}
        row |= {"peaks": canonical_json(value["peaks"]), "phase_id": phase_id}
        insert_record(writing, tables.measurement, row, action=action, remark=remark, uid=value["uid"])
        count += 1
    return count
