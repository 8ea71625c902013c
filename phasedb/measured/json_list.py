"""Peak lists in JSON: ``{"schema": "phasedb.peaks/1", "unit", "peaks": [{"position", ...}], ...}``."""

from __future__ import annotations

import json
import math
from typing import Any, Final, NoReturn

from phasedb.errors import InputError, at
from phasedb.measured.header import HEADER_KEYS, facts_from_json
from phasedb.measured.options import check_unit
from phasedb.measured.raw import RawLines

SCHEMA: Final = "phasedb.peaks/1"
_PEAK_KEYS: Final = ("position", "intensity", "esd", "fwhm")
_OUR_EXTRAS: Final = frozenset({"fwhm_esd", "area", "area_esd", "height", "lorentzian", "chi2_reduced"})
"""What ``phasedb peaks --json`` tells of a line beside what a match needs."""
_TOP_KEYS: Final = frozenset({"schema", "peaks", "unit", "scan", *HEADER_KEYS})


def read_json_list(text: str, source: str) -> RawLines:
    """Return the lines in a JSON document.

    Raises
    ------
    InputError
        For text that is not JSON, another schema, or a value that is not a number.
    """
    document = _document(text, source)
    if document.get("schema") != SCHEMA:
        raise InputError(
            f"schema {document.get('schema')!r}: expected {SCHEMA!r}",
            where=source,
            hint="only peak lists in this schema are read from JSON",
        )
    peaks = document.get("peaks")
    if not isinstance(peaks, list) or not peaks:
        raise InputError(
            "'peaks' holds no lines", where=source, hint='expected "peaks": [{"position": 28.44}, ...]'
        )
    columns: dict[str, list[float]] = {name: [] for name in _PEAK_KEYS}
    ignored: set[str] = set()
    places = []
    for number, peak in enumerate(peaks, start=1):
        place = f"{source}, peaks[{number - 1}]"
        places.append(place)
        if not isinstance(peak, dict):
            raise InputError(f"read {peak!r}, expected an object with 'position'", where=place)
        ignored.update(str(key) for key in peak if key not in _PEAK_KEYS and key not in _OUR_EXTRAS)
        for name in _PEAK_KEYS:
            columns[name].append(_number(peak.get(name), name, place))
    unit = document.get("unit")
    notes = [f"keys ignored: {', '.join(sorted(ignored))}"] if ignored else []
    others = sorted(key for key in document if key.casefold() not in _TOP_KEYS)
    notes += [f"keys ignored: {', '.join(others)}"] if others else []
    return RawLines(
        position=columns["position"],
        unit=check_unit(str(unit), where=f"{source}, key 'unit'") if unit is not None else None,
        intensity=_if_any(columns["intensity"]),
        esd=_if_any(columns["esd"]),
        fwhm=_if_any(columns["fwhm"]),
        places=places,
        facts=facts_from_json({key: document[key] for key in document if key != "unit"}, source),
        notes=tuple(notes),
    )


def _document(text: str, source: str) -> dict[str, Any]:
    def refuse(word: str) -> NoReturn:
        raise InputError(
            f"read {word}, expected a finite number", where=source, hint="JSON has no such number"
        )

    try:
        document = json.loads(text, parse_constant=refuse)
    except json.JSONDecodeError as error:
        raise InputError(
            f"not valid JSON: {error.msg}",
            where=at(source, error.lineno, error.colno),
            hint="correct the file",
        ) from None
    except InputError:
        raise
    except (ValueError, RecursionError) as error:
        raise InputError(f"not usable JSON: {error}", where=source) from None
    if not isinstance(document, dict):
        raise InputError("expected one JSON object", where=source, hint=f'{{"schema": "{SCHEMA}", ...}}')
    return document


def _number(value: object, name: str, place: str) -> float:
    if value is None and name != "position":
        return math.nan
    if isinstance(value, (int, float)) and not isinstance(value, bool):
        try:
            number = float(value)
        except OverflowError:
            number = math.inf
        if math.isfinite(number):
            return number
    raise InputError(
        f"read {value!r}, expected a finite number ({name})", where=place, hint="numbers stand without quotes"
    )


def _if_any(column: list[float]) -> list[float] | None:
    return None if all(math.isnan(value) for value in column) else column
