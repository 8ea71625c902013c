"""The facts that a ``# key: value`` header, or the same names in JSON, may set."""

from __future__ import annotations

import math
import re
from collections.abc import Callable
from dataclasses import replace
from typing import Any, Final

from phasedb.errors import InputError, at
from phasedb.measured.delimited import HeaderValue, read_number
from phasedb.measured.options import ReadOptions, check_positive

_POSITIVE: Final = {
    "wavelength_angstrom": "wavelength_angstrom",
    "goniometer_radius_mm": "goniometer_radius_mm",
    "temperature_k": "temperature_k",
    "energy_kv": "energy_kev",
    "camera_length_mm": "camera_length_mm",
    "camera_constant_mm_angstrom": "camera_constant_mm_angstrom",
}
"""Casefolded header key to the field of `ReadOptions`."""

HEADER_KEYS: Final = frozenset({*_POSITIVE, "radiation", "range", "sample"})
SPELLING: Final = {"temperature_k": "temperature_K", "energy_kv": "energy_kV"}


def facts_from_header(header: dict[str, HeaderValue], source: str) -> ReadOptions:
    """Return the facts in the comments of a text file.

    Raises
    ------
    InputError
        With the line, for a value that cannot be.
    """
    facts = ReadOptions()
    for key, found in header.items():
        facts = _with_fact(facts, key, found.value, at(source, found.line))
    return facts


def facts_from_json(document: dict[str, Any], source: str) -> ReadOptions:
    """Return the facts in the top level of a ``phasedb.peaks/1`` document; null means not known.

    Raises
    ------
    InputError
        For a value that cannot be.
    """
    facts = ReadOptions()
    for key, value in document.items():
        name = key.casefold()
        if name in HEADER_KEYS and value is not None:
            if isinstance(value, list):
                value = " ".join(str(part) for part in value)
            facts = _with_fact(facts, name, str(value), f"{source}, key {key!r}")
    return facts


def _with_fact(facts: ReadOptions, key: str, value: str, where: str) -> ReadOptions:
    if key in _POSITIVE:
        spelled = SPELLING.get(key, key)
        number = _number(value, spelled, where)
        checked: Any = check_positive(number, spelled, where=where)
        return replace(facts, **{_POSITIVE[key]: checked})
    set_text: dict[str, Callable[[], ReadOptions]] = {
        "radiation": lambda: replace(facts, radiation=value),
        "sample": lambda: replace(facts, sample=value),
        "range": lambda: replace(facts, measured_range=_two_numbers(value, where)),
    }
    return set_text[key]()


def _number(text: str, name: str, where: str) -> float:
    try:
        return read_number(text)
    except ValueError:
        raise InputError(
            f"read {text!r}, expected a number ({name})", where=where, hint="the unit is in the name"
        ) from None


def _two_numbers(text: str, where: str) -> tuple[float, float]:
    for pattern in (r"\s+to\s+|\s+|;", r"[\s;,]+"):
        parts = [part.strip(" ,;") for part in re.split(pattern, text.strip())]
        parts = [part for part in parts if part]
        if len(parts) == 2:
            low, high = (_number(part, "range", where) for part in parts)
            if math.isfinite(low) and low < high:
                return low, high
            break
    raise InputError(
        f"read {text!r}, expected two numbers, the lower first (range)",
        where=where,
        hint="for example: # range: 20 100",
    )
