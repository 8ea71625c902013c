"""The door: every value of a draft is checked once, here, and put in its normal form."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, replace
from functools import lru_cache
from typing import Final

from phasedb.crystal.lattice import LatticeType, check_lattice_type
from phasedb.crystal.phases import DRIFT_CLASSES, Structure
from phasedb.errors import InputError
from phasedb.library.cleaning import clean_name, clean_text, within
from phasedb.library.entry import Draft, Entry, key_of
from phasedb.library.sources import clean_source

_COUNT_LIMIT: Final = 100


@dataclass(frozen=True, slots=True)
class Prepared:
    """A checked draft, with what its formula and structure type gave.

    `structure_problem` says why the structure type could not be given sites; empty if nothing is wrong.
    """

    content: Draft
    elements: tuple[str, ...]
    formula_key: str
    structure_problem: str = ""


def _unique(names: Iterable[str], *, what: str) -> tuple[str, ...]:
    found = {key_of(name): clean_name(name, what=what) for name in names}
    if len(found) > _COUNT_LIMIT:
        raise InputError(f"{len(found)} {what} entries: expected at most {_COUNT_LIMIT}")
    return tuple(found[key] for key in sorted(found))


@lru_cache(maxsize=20_000)
def _composition(text: str) -> tuple[str, tuple[str, ...], str]:
    """Return a formula's clean text, elements and key; large libraries hold the same formula many times."""
    from phasedb.crystal.formula import parse_formula

    formula = parse_formula(text)
    return formula.text, formula.elements, formula.reduced


def prepare(draft: Draft, *, keep_sites: bool = False) -> Prepared:
    """Check every value of a draft and put it in its normal form.

    Sites are worked out from the structure type and the formula, unless the draft brings its own space group
    and sites (from a CIF), or `keep_sites` says that those it has still hold.

    Raises
    ------
    InputError
        Naming the value that is wrong.
    """
    name = clean_name(draft.name)
    formula, elements, formula_key = _composition(draft.formula)
    if draft.drift_class not in DRIFT_CLASSES:
        raise InputError(
            f"drift class {draft.drift_class!r} is not known",
            hint="expected one of " + ", ".join(DRIFT_CLASSES),
        )
    a = within(draft.a_angstrom, 0.1, 250.0, what="lattice constant", unit="Å")
    if a is None:
        raise InputError("the lattice constant is missing", where=name)
    low = within(draft.a_min_angstrom, 0.1, 250.0, what="lower end of the range of a", unit="Å")
    high = within(draft.a_max_angstrom, 0.1, 250.0, what="upper end of the range of a", unit="Å")
    if (low is None) != (high is None):
        raise InputError("a range of a needs both ends", where=name)
    if low is not None and high is not None and not low <= a <= high:
        raise InputError(f"the range of a, {low:g} to {high:g} Å, does not hold a = {a:g} Å", where=name)
    esd = within(draft.a_esd_angstrom, 0.0, 0.1 * a, what="esd of a", unit="Å")
    content = replace(
        draft,
        name=name,
        mineral_name=clean_name(draft.mineral_name, what="mineral name") if draft.mineral_name else "",
        formula=formula,
        lattice_type=check_lattice_type(draft.lattice_type),
        a_angstrom=a,
        a_esd_angstrom=esd or None,
        a_text=clean_text(draft.a_text, what="lattice constant"),
        temperature_k=within(draft.temperature_k, 0.1, 5000, what="temperature", unit="K"),
        expansion_per_k=within(draft.expansion_per_k, -1e-3, 1e-3, what="thermal expansion", unit="1/K"),
        structure_type=canonical_type(draft.structure_type),
        free_parameters=clean_text(draft.free_parameters, what="free parameters"),
        space_group=clean_text(draft.space_group, what="space group"),
        formula_units_per_cell=within(
            draft.formula_units_per_cell, 1e-3, 1e4, what="formula units per cell", unit=""
        ),
        drift_reason=clean_text(draft.drift_reason, what="reason of the drift class"),
        a_min_angstrom=low,
        a_max_angstrom=high,
        measured_density_g_cm3=within(
            draft.measured_density_g_cm3, 1e-3, 50, what="measured density", unit="g/cm³"
        ),
        remarks=clean_text(draft.remarks, what="remarks"),
        aliases=tuple(x for x in _unique(draft.aliases, what="alias") if key_of(x) != key_of(name)),
        tags=_unique(draft.tags, what="tag"),
        sources=tuple(clean_source(source) for source in draft.sources),
    )
    problem = ""
    if not keep_sites:
        content, problem = _with_sites(content)
    return Prepared(content, elements, formula_key, problem)


def canonical_type(text: str | None) -> str | None:
    if text is None or not text.strip():
        return None
    label = clean_name(text, what="structure type")
    from phasedb.crystal.structure_types import resolve_structure_type

    return resolve_structure_type(label) or label


def _with_sites(content: Draft) -> tuple[Draft, str]:
    """Return the content with the sites of its structure type, and what is wrong with the type (or "")."""
    if content.structure_type is None:
        return content, ""
    structure, problem = _structure_of(
        content.structure_type,
        content.formula,
        content.free_parameters,
        content.space_group,
        content.lattice_type,
    )
    if problem:
        return replace(content, sites=(), assumed=()), problem
    if structure is None:
        return content, ""
    return (
        replace(content, sites=structure.sites, assumed=structure.assumed, space_group=structure.space_group),
        "",
    )


@lru_cache(maxsize=4096)
def _structure_of(
    structure_type: str, formula: str, given: str, space_group: str, lattice_type: LatticeType
) -> tuple[Structure | None, str]:
    """Return the structure of a known type, or of an own type with sites (else None), and a problem."""
    from phasedb.crystal.own_type import is_complete, structure_from_sites
    from phasedb.crystal.structure import check_structure
    from phasedb.crystal.structure_types import resolve_structure_type, structure_from_type

    try:
        if resolve_structure_type(structure_type) is not None:
            structure = structure_from_type(structure_type, formula, free_parameters=given or None)
        elif space_group and is_complete(given, formula):
            structure = structure_from_sites(space_group, given, formula)
        else:
            return None, ""
        check_structure(structure, lattice_type)
    except InputError as error:
        return None, str(error)
    return structure, ""


def entry_of(prepared: Prepared, *, uid: str, by: str, at: str) -> Entry:
    """Return the new draft entry of a checked content."""
    return Entry(
        content=prepared.content,
        uid=uid,
        standing="draft",
        version=1,
        entered_by=by,
        entered_at=at,
        elements=prepared.elements,
        formula_key=prepared.formula_key,
    )
