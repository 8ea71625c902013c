"""One phase in JSON, field by field: types and who did what are checked here, values at the door."""

from __future__ import annotations

import math
import re
from typing import Any, Final

from phasedb.crystal.lattice import check_lattice_type
from phasedb.crystal.phases import DRIFT_CLASSES, STANDINGS, Site
from phasedb.crystal.quantity import parse_lattice_constant
from phasedb.errors import InputError
from phasedb.library.cleaning import clean_text
from phasedb.library.entry import SOURCE_KINDS, Draft, Source
from phasedb.library.intake import FieldError, likely_drift_class
from phasedb.library.people import same_person

_TEXTS: Final = (
    "mineral_name",
    "a_text",
    "free_parameters",
    "space_group",
    "drift_reason",
    "remarks",
)
_NUMBERS: Final = {
    "a_esd_angstrom": "a_esd_angstrom",
    "temperature_K": "temperature_k",
    "thermal_expansion_per_k": "expansion_per_k",
    "formula_units_per_cell": "formula_units_per_cell",
    "a_min_angstrom": "a_min_angstrom",
    "a_max_angstrom": "a_max_angstrom",
    "measured_density_g_cm3": "measured_density_g_cm3",
}
_LISTS: Final = ("assumed", "aliases", "tags")
_CUSTODY: Final = (
    "uid",
    "standing",
    "version",
    "entered_by",
    "entered_at",
    "changed_by",
    "changed_at",
    "checked_by",
    "checked_at",
    "withdrawn_reason",
    "replaced_by",
)
_OTHERS: Final = (
    "name",
    "formula",
    "lattice_type",
    "a_angstrom",
    "structure_type",
    "drift_class",
    "sites",
    "sources",
)
FIELDS: Final = frozenset([*_OTHERS, *_TEXTS, *_NUMBERS, *_LISTS, *_CUSTODY])
"""Every field of a phase in JSON."""
_UID: Final = re.compile(r"[0-9a-f]{32}")
_TIME: Final = re.compile(r"\d{4}-\d\d-\d\dT\d\d:\d\d:\d\d(\.\d{1,6})?Z")
_LONGEST_LIST: Final = 10_000
_MOST_VERSIONS: Final = 1_000_000_000


def short(value: object) -> str:
    """Return a value as it may stand in an error."""
    text = repr(value)
    return text if len(text) <= 60 else text[:57] + "..."


def _wrong(field: str, value: object, expected: str) -> FieldError:
    return FieldError(field, InputError(f"read {short(value)}, expected {expected}"))


def _text(value: dict[str, Any], field: str, *, needed: bool = False) -> str:
    found = value.get(field)
    if found is None and not needed:
        return ""
    if not isinstance(found, str) or (needed and not found.strip()):
        raise _wrong(field, found, "a text")
    return found


def _number(value: dict[str, Any], field: str, *, name: str = "") -> float | None:
    found = value.get(field)
    if found is None:
        return None
    if isinstance(found, bool) or not isinstance(found, (int, float)):
        raise _wrong(name or field, found, "a number")
    try:
        number = float(found)
    except OverflowError:
        number = math.inf
    if not math.isfinite(number):
        raise _wrong(name or field, found, "a finite number")
    return number


def _whole(value: dict[str, Any], field: str, low: int, high: int, *, name: str = "") -> int | None:
    found = value.get(field)
    if found is None:
        return None
    if isinstance(found, bool) or not isinstance(found, int) or not low <= found <= high:
        raise _wrong(name or field, found, f"a whole number from {low} to {high}")
    return found


def _items(value: dict[str, Any], field: str, kind: type, expected: str) -> list[Any]:
    found = value.get(field)
    if found is None:
        return []
    if not isinstance(found, list) or len(found) > _LONGEST_LIST:
        raise _wrong(field, found, "a list")
    for item in found:
        if not isinstance(item, kind):
            raise _wrong(field, item, expected)
    return found


def _choice(value: dict[str, Any], field: str, choices: tuple[str, ...], *, name: str = "") -> Any:
    found = value.get(field)
    if found not in choices:
        raise _wrong(name or field, found, "one of " + ", ".join(choices))
    return found


def draft_from(value: dict[str, Any], *, trusted: bool) -> Draft:
    """Return the content of a phase in JSON; its types are checked here, its values at the door.

    Parameters
    ----------
    trusted : bool
        A bare number as lattice constant is Å; else it gets the door's check for a slip of unit.

    Raises
    ------
    FieldError
    """
    a, esd, a_text = _lattice_constant(value, trusted=trusted)
    numbers: Any = {name: _number(value, field) for field, name in _NUMBERS.items()}
    if numbers["a_esd_angstrom"] is None:
        numbers["a_esd_angstrom"] = esd
    texts: Any = {name: _text(value, name) for name in _TEXTS}
    texts["a_text"] = texts["a_text"] or a_text
    formula = _text(value, "formula", needed=True)
    drift, reason = _drift(value, formula, texts.pop("drift_reason"))
    try:
        lattice_type = check_lattice_type(_text(value, "lattice_type", needed=True))
    except InputError as error:
        raise FieldError("lattice_type", error) from None
    lists: Any = {name: tuple(_items(value, name, str, "a text")) for name in _LISTS}
    return Draft(
        name=_text(value, "name", needed=True),
        formula=formula,
        lattice_type=lattice_type,
        a_angstrom=a,
        structure_type=_text(value, "structure_type") or None,
        drift_class=drift,
        drift_reason=reason,
        sites=tuple(_site(site) for site in _items(value, "sites", dict, "an object")),
        sources=tuple(_source(source) for source in _items(value, "sources", dict, "an object")),
        **texts,
        **numbers,
        **lists,
    )


def _lattice_constant(value: dict[str, Any], *, trusted: bool) -> tuple[float, float | None, str]:
    """Return a, its esd if the text has one, and the text."""
    found = value.get("a_angstrom")
    if isinstance(found, str) or not trusted:
        if not isinstance(found, str):
            _number(value, "a_angstrom")
            found = "" if found is None else repr(found)
        try:
            read = parse_lattice_constant(found)
        except InputError as error:
            raise FieldError("a_angstrom", error) from None
        return read.angstrom, read.esd_angstrom, read.text
    number = _number(value, "a_angstrom")
    if number is None:
        raise _wrong("a_angstrom", found, "a number")
    return number, None, ""


def _drift(value: dict[str, Any], formula: str, reason: str) -> tuple[Any, str]:
    if value.get("drift_class") is None:
        try:
            return likely_drift_class(formula)
        except InputError as error:
            raise FieldError("formula", error) from None
    return _choice(value, "drift_class", DRIFT_CLASSES), reason


def _site(value: dict[str, Any]) -> Site:
    position = value.get("position")
    species = value.get("species")
    if not isinstance(position, list) or len(position) != 3:
        raise _wrong("sites", position, "a position of three numbers")
    if not isinstance(species, list) or not 0 < len(species) <= 100:
        raise _wrong("sites", species, "species: [[element, occupancy], ...]")
    pairs = []
    for pair in species:
        if not isinstance(pair, list) or len(pair) != 2 or not isinstance(pair[0], str):
            raise _wrong("sites", pair, "[element, occupancy]")
        pairs.append((pair[0], _needed({"occupancy": pair[1]}, "occupancy")))
    x, y, z = (_needed({"position": number}, "position") for number in position)
    b_iso = 0.5 if value.get("b_iso") is None else _needed(value, "b_iso")
    try:
        label = clean_text(_text(value, "label"), what="site label")
    except InputError as error:
        raise FieldError("sites", error) from None
    return Site(label, tuple(pairs), (x, y, z), b_iso)


def _needed(value: dict[str, Any], field: str) -> float:
    found = _number(value, field, name="sites")
    if found is None:
        raise _wrong("sites", found, f"a number ({field})")
    return found


def _source(value: dict[str, Any]) -> Source:
    try:
        kind: Any = "paper" if value.get("kind") is None else _choice(value, "kind", SOURCE_KINDS)
        return Source(
            citation=_text(value, "citation"),
            doi=_text(value, "doi"),
            year=_whole(value, "year", 1800, 2200),
            kind=kind,
            how=_text(value, "how"),
            a_angstrom=_number(value, "a_angstrom"),
            density_g_cm3=_number(value, "density_g_cm3"),
        )
    except FieldError as error:
        raise FieldError("sources", InputError(f"{error.field}: {error.what}")) from None


# --- who did what


def refuse_custody(value: dict[str, Any]) -> None:
    """Refuse who-did-what without a uid: an entry by hand is a draft of who brings it in."""
    for field in _CUSTODY[2:]:
        if value.get(field) is not None:
            raise FieldError(
                field, InputError(f"{field} is given, but no uid", hint="leave it out, or export again")
            )
    if value.get("standing") not in (None, "draft"):
        raise FieldError("standing", InputError("an entry without a uid comes as a draft"))


def custody_from(value: dict[str, Any]) -> dict[str, Any]:
    """Return who did what and when, checked for being possible.

    Raises
    ------
    FieldError
        Also where the rules of a library do not allow it: checked by who entered it, for example.
    """
    custody: dict[str, Any] = {
        "uid": _uid(value, "uid"),
        "standing": _choice(value, "standing", STANDINGS),
        "version": _whole(value, "version", 1, _MOST_VERSIONS),
        "replaced_by": _uid(value, "replaced_by"),
        "withdrawn_reason": _clean(value, "withdrawn_reason"),
    }
    for did in ("entered", "changed", "checked"):
        who, when = _clean(value, f"{did}_by"), _text(value, f"{did}_at") or None
        if (who is None) != (when is None):
            raise FieldError(f"{did}_by", InputError(f"{did}_by and {did}_at go together"))
        if when is not None and not _TIME.fullmatch(when):
            raise _wrong(f"{did}_at", when, "a time in UTC such as 2026-03-01T09:30:00Z")
        custody[f"{did}_by"], custody[f"{did}_at"] = who, when
    if custody["version"] is None:
        raise _wrong("version", None, "a whole number")
    if custody["entered_by"] is None:
        raise _wrong("entered_by", None, "a text")
    _refuse_impossible(custody)
    return custody


def _refuse_impossible(custody: dict[str, Any]) -> None:
    standing, checker = custody["standing"], custody["checked_by"]
    if (standing == "checked") != (checker is not None):
        raise FieldError("checked_by", InputError(f"a {standing} entry is checked by {checker!r}"))
    for did in ("entered_by", "changed_by"):
        if checker is not None and custody[did] is not None and same_person(checker, custody[did]):
            raise FieldError("checked_by", InputError(f"{did} and checked_by are one person, {checker!r}"))
    if (standing == "withdrawn") != (custody["withdrawn_reason"] is not None):
        raise FieldError("withdrawn_reason", InputError("a withdrawn entry, and only that, has a reason"))
    if custody["replaced_by"] is not None and (
        standing != "withdrawn" or custody["replaced_by"] == custody["uid"]
    ):
        raise FieldError("replaced_by", InputError("only a withdrawn entry is replaced, and by another one"))


def _uid(value: dict[str, Any], field: str) -> str | None:
    found = value.get(field)
    if found is None and field != "uid":
        return None
    if not isinstance(found, str) or not _UID.fullmatch(found):
        raise _wrong(field, found, "32 hex digits")
    return found


def _clean(value: dict[str, Any], field: str) -> str | None:
    try:
        return clean_text(_text(value, field), what=field) or None
    except FieldError:
        raise
    except InputError as error:
        raise FieldError(field, error) from None
