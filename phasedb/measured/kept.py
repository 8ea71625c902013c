"""A peak list as plain JSON values, every bit of it: a saved match is repeated without the file."""

from __future__ import annotations

import math
from dataclasses import asdict, fields
from typing import Any, Final

import numpy as np

from phasedb.crystal.radiation import Radiation
from phasedb.errors import InputError
from phasedb.measured.peaklist import FloatArray, PeakList

SCHEMA: Final = "phasedb.kept_peaks/1"
_ARRAYS: Final = frozenset({"position", "d_angstrom", "two_theta_deg", "intensity", "esd", "fwhm"})


def peak_list_to_json(peaks: PeakList) -> dict[str, Any]:
    """Return `peaks` as JSON values; unlike ``phasedb.peaks/1`` nothing is worked out again on reading."""
    document: dict[str, Any] = {"schema": SCHEMA}
    for column in fields(PeakList):
        value = getattr(peaks, column.name)
        if isinstance(value, np.ndarray):
            value = [None if math.isnan(number) else number for number in value.tolist()]
        elif isinstance(value, Radiation):
            value = asdict(value)
        elif isinstance(value, tuple):
            value = list(value)
        document[column.name] = value
    return document


def peak_list_from_json(document: dict[str, Any]) -> PeakList:
    """Return the peak list of a document made by `peak_list_to_json`.

    Raises
    ------
    InputError
        If it is of another schema, or something is missing.
    """
    if document.get("schema") != SCHEMA:
        raise InputError(f"schema {document.get('schema')!r}: expected {SCHEMA!r}")
    known = {column.name for column in fields(PeakList)}
    values = {name: value for name, value in document.items() if name in known}
    for name in _ARRAYS & values.keys():
        values[name] = _array(values[name])
    try:
        if values["radiation"] is not None:
            values["radiation"] = Radiation(**values["radiation"])
        values["notes"] = tuple(values["notes"])
        return PeakList(**values)
    except (KeyError, TypeError) as error:
        raise InputError(f"the kept peak list is incomplete: {error}") from None


def _array(values: list[float | None] | None) -> FloatArray | None:
    if values is None:
        return None
    return np.array([math.nan if value is None else value for value in values], dtype=np.float64)
