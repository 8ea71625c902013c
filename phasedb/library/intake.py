"""From text fields (a row of a table, the options of a command) to a Draft."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from typing import Any, Final, TypeVar

from phasedb.crystal.lattice import check_lattice_type
from phasedb.crystal.phases import DRIFT_CLASSES, DriftClass
from phasedb.crystal.quantity import parse_lattice_constant, parse_measured
from phasedb.errors import InputError
from phasedb.library.entry import Draft
from phasedb.library.sources import sources_from_fields

_Value = TypeVar("_Value")

REQUIRED_FIELDS: Final = ("name", "formula", "lattice_type", "a_angstrom")
FIELD_ALIASES: Final = {
    "temperature_k": "temperature_K",
    "expansion_per_k": "thermal_expansion_per_k",
    "thermal_expansion": "thermal_expansion_per_k",
    "a_min": "a_min_angstrom",
    "a_max": "a_max_angstrom",
    "density_g_cm3": "measured_density_g_cm3",
    "note": "remarks",
}
TEXT_FIELDS: Final = (
    *REQUIRED_FIELDS,
    "a_esd_angstrom",
    "mineral_name",
    "structure_type",
    "space_group",
    "space_group_number",
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
    "remarks",
    "aliases",
    "tags",
    "source",
    "doi",
    "year",
    "source_kind",
    "how",
    "source_density_g_cm3",
    "second_source",
    "second_value_angstrom",
    "second_how",
    "diff_percent",
)
"""Columns that a text table may have; space_group_number and diff_percent follow from others."""


class FieldError(InputError):
    """A value of one field is wrong; `field` names it."""

    def __init__(self, field: str, error: InputError) -> None:
        super().__init__(error.what, where=f"column {field}", hint=error.hint)
        self.field = field


def draft_from_fields(given: Mapping[str, str | None]) -> Draft:
    """Return the draft of one row of text fields, as in the columns of the starter library.

    Lists (aliases, tags) are parted by semicolons.

    Raises
    ------
    FieldError
        Naming the column whose value is wrong.
    """
    fields = {FIELD_ALIASES.get(name, name): (value or "").strip() for name, value in given.items()}
    for name in REQUIRED_FIELDS:
        if not fields.get(name):
            raise FieldError(name, InputError(f"{name} is missing"))

    def number(name: str) -> float | None:
        text = fields.get(name, "")
        if not text:
            return None
        try:
            read = parse_measured(text, what=name)
            if read.unit:
                raise InputError(f"{name} {text!r} has a unit", hint="write the number alone")
        except InputError as error:
            raise FieldError(name, error) from None
        return read.value

    def length(name: str) -> float | None:
        if not fields.get(name):
            return None
        try:
            return parse_lattice_constant(fields[name], what=name).angstrom
        except InputError as error:
            raise FieldError(name, error) from None

    try:
        a = parse_lattice_constant(fields["a_angstrom"])
    except InputError as error:
        raise FieldError("a_angstrom", error) from None
    stated_esd = number("a_esd_angstrom")
    reason = fields.get("drift_reason", "")
    if fields.get("drift_class"):
        drift = _field("drift_class", drift_class_from, fields["drift_class"])
    else:
        drift, reason = _field("formula", likely_drift_class, fields["formula"])
    return Draft(
        name=fields["name"],
        mineral_name=fields.get("mineral_name", ""),
        formula=fields["formula"],
        lattice_type=_field("lattice_type", check_lattice_type, fields["lattice_type"]),
        a_angstrom=a.angstrom,
        a_esd_angstrom=a.esd_angstrom if stated_esd is None else stated_esd,
        a_text=a.text,
        temperature_k=number("temperature_K"),
        expansion_per_k=number("thermal_expansion_per_k"),
        structure_type=fields.get("structure_type") or None,
        free_parameters=fields.get("free_parameters", ""),
        space_group=fields.get("space_group", ""),
        formula_units_per_cell=number("formula_units_per_cell"),
        drift_class=drift,
        drift_reason=reason,
        a_min_angstrom=length("a_min_angstrom"),
        a_max_angstrom=length("a_max_angstrom"),
        measured_density_g_cm3=number("measured_density_g_cm3"),
        remarks=fields.get("remarks", ""),
        aliases=_parts(fields.get("aliases", "")),
        tags=_parts(fields.get("tags", "")),
        sources=_field("source_kind", sources_from_fields, fields, number, length),
    )


def _field(name: str, read: Callable[..., _Value], *given: Any) -> _Value:
    """Return what `read` makes of a field; an error says which one it was."""
    try:
        return read(*given)
    except FieldError:
        raise
    except InputError as error:
        raise FieldError(name, error) from None


def _parts(text: str) -> tuple[str, ...]:
    return tuple(part for part in text.split(";") if part.strip())


def drift_class_from(text: str) -> DriftClass:
    """Return `text` as a drift class (case, hyphens and underscores do not matter)."""
    found = re.sub(r"[\s_-]+", " ", text.strip()).casefold()
    for name in DRIFT_CLASSES:
        if found == name:
            return name
    raise InputError(f"drift class {text!r} is not known", hint="expected one of " + ", ".join(DRIFT_CLASSES))


# Everything else counts as a metal here: what matters is whether metals replace each other freely.
_NOT_METALS: Final = frozenset(
    [
        "H",
        "D",
        "T",
        "He",
        "B",
        "C",
        "N",
        "O",
        "F",
        "Ne",
        "Si",
        "P",
        "S",
        "Cl",
        "Ar",
        "Ge",
        "As",
        "Se",
        "Br",
        "Kr",
        "Sb",
        "Te",
        "I",
        "Xe",
        "At",
        "Rn",
    ]
)


def likely_drift_class(formula: str) -> tuple[DriftClass, str]:
    """Return the drift class of a phase of which nobody said one, and the reason to store with it."""
    from phasedb.crystal.formula import parse_formula

    if _NOT_METALS.isdisjoint(parse_formula(formula).elements):
        return "alloy", "not stated; metals only, which take up other metals"
    return "line compound", "not stated; taken as a compound of fixed composition"
