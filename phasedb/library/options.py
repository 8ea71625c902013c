"""From the options of add, revise and list to drafts, changes and filters."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any, Final

from phasedb.crystal.lattice import check_lattice_type
from phasedb.crystal.quantity import parse_lattice_constant
from phasedb.errors import InputError
from phasedb.library.entry import Draft
from phasedb.library.intake import FieldError, draft_from_fields

# Option (as click names it): (column of a text table, attribute of Draft, how the user wrote it).
_OPTIONS: Final = {
    "name": ("name", "name", "--name"),
    "formula": ("formula", "formula", "--formula"),
    "lattice": ("lattice_type", "lattice_type", "--lattice"),
    "a_text": ("a_angstrom", "a_angstrom", "--a"),
    "structure": ("structure_type", "structure_type", "--structure"),
    "free_parameters": ("free_parameters", "free_parameters", "--free-parameters"),
    "temperature": ("temperature_K", "temperature_k", "--temperature"),
    "expansion": ("thermal_expansion_per_k", "expansion_per_k", "--expansion"),
    "drift": ("drift_class", "drift_class", "--drift"),
    "a_min": ("a_min_angstrom", "a_min_angstrom", "--a-min"),
    "a_max": ("a_max_angstrom", "a_max_angstrom", "--a-max"),
    "density": ("measured_density_g_cm3", "measured_density_g_cm3", "--density"),
    "formula_units": ("formula_units_per_cell", "formula_units_per_cell", "--formula-units"),
    "remarks": ("remarks", "remarks", "--remarks"),
    "source": ("source", "sources", "--source"),
    "doi": ("doi", "sources", "--doi"),
    "source_kind": ("source_kind", "sources", "--source-kind"),
}
_OPTION_OF_COLUMN: Final = {column: option for column, _, option in _OPTIONS.values()}


def _draft(fields: dict[str, str]) -> Draft:
    try:
        return draft_from_fields(fields)
    except FieldError as error:
        raise InputError(
            error.what, where=_OPTION_OF_COLUMN.get(error.field, error.field), hint=error.hint
        ) from None


def _refuse_blank(given: dict[str, Any], names: Sequence[str]) -> None:
    for name in names:
        if given.get(name) is not None and not given[name].strip():
            raise InputError("the text is empty", where=_OPTIONS[name][2], hint="give a value")


def draft_from_options(given: dict[str, Any]) -> Draft:
    """Return the draft of the options of ``add``.

    Raises
    ------
    InputError
        Naming the option.
    """
    _refuse_blank(given, ("name", "formula", "lattice", "a_text"))
    fields = {_OPTIONS[name][0]: given[name] for name in _OPTIONS if given.get(name)}
    return replace(_draft(fields), aliases=tuple(given["aliases"]), tags=tuple(given["tags"]))


def changes_from_options(given: dict[str, Any], old: Draft) -> dict[str, Any]:
    """Return what ``revise`` changes, as attributes of `Draft`.

    Only options that were given count. A new value of a drops the stored esd unless it brings its own; a new
    source replaces the first one and keeps the others.

    Raises
    ------
    InputError
        Naming the option, or if there was none.
    """
    said = {name: given[name] for name in _OPTIONS if given.get(name) is not None}
    if not said and not given["aliases"] and not given["tags"]:
        raise InputError("nothing to change was given", hint="see 'phasedb revise --help'")
    _refuse_blank(given, ("name", "formula", "lattice", "a_text", "drift"))
    fields = {
        "name": old.name,
        "formula": old.formula,
        "lattice_type": old.lattice_type,
        "a_angstrom": f"{old.a_angstrom!r} Å",
    }
    fields.update({_OPTIONS[name][0]: text for name, text in said.items()})
    draft = _draft(fields)
    changed = {_OPTIONS[name][1]: getattr(draft, _OPTIONS[name][1]) for name in said}
    if "a_text" in said:
        changed.update(a_esd_angstrom=draft.a_esd_angstrom, a_text=draft.a_text)
    if "drift" in said:
        changed["drift_reason"] = ""
    if "sources" in changed:
        changed["sources"] = _new_sources(said, draft, old)
    for name in ("aliases", "tags"):
        if given[name]:
            changed[name] = () if tuple(given[name]) == ("none",) else tuple(given[name])
    return changed


def _new_sources(said: dict[str, Any], draft: Draft, old: Draft) -> tuple[Any, ...]:
    first = draft.sources[:1]
    if (
        first and "source" not in said and old.sources
    ):  # only the DOI or the kind of the stored source changes
        kept = old.sources[0]
        first = (replace(kept, doi=first[0].doi or kept.doi, kind=said.get("source_kind", kept.kind)),)
    return (*first, *old.sources[1:])


def _limit(text: str | None, option: str) -> float | None:
    """Return a limit of a in Å; 0 is no limit."""
    if text is None or text.strip() == "0":
        return None
    try:
        return parse_lattice_constant(text).angstrom
    except InputError as error:
        raise InputError(error.what, where=option, hint=error.hint) from None


def filters_from_options(
    elements: Sequence[str],
    lattice: str | None,
    a_min: str | None,
    a_max: str | None,
    structure: str | None,
    text: str | None,
) -> dict[str, Any]:
    """Return the filters of ``list`` as arguments of `Library.list`.

    Raises
    ------
    InputError
        Naming the option.
    """
    from phasedb.crystal.elements import element
    from phasedb.library.preparing import canonical_type

    symbols = [part.strip() for text_part in elements for part in text_part.split(",") if part.strip()]
    return {
        "elements": [element(symbol).symbol for symbol in symbols],
        "lattice": None if lattice is None else check_lattice_type(lattice),
        "a_min": _limit(a_min, "--a-min"),
        "a_max": _limit(a_max, "--a-max"),
        "structure": None if structure is None else canonical_type(structure),
        "text": text or None,
    }
