"""Writing entries as CIF."""

from __future__ import annotations

import re
from typing import Any

from phasedb.crystal.formula import parse_formula
from phasedb.crystal.quantity import format_measured
from phasedb.crystal.structure import space_group
from phasedb.library.entry import Draft


def cif_of(draft: Draft, *, block: str = "") -> str:
    """Return one CIF data block of an entry; a general library reads the same structure back.

    Without sites it holds cell, lattice type and, if the entry names one, the space group.
    """
    from gemmi import cif

    document = cif.Document()
    holder = document.add_new_block(_block_name(block or draft.name))

    def put(name: str, text: object) -> None:
        if text not in (None, ""):
            holder.set_pair(name, cif.quote(_safe(str(text))))

    formula = parse_formula(draft.formula)
    put("_chemical_name_common", draft.name)
    put("_chemical_name_mineral", draft.mineral_name)
    put("_chemical_name_structure_type", draft.structure_type)
    put("_chemical_formula_sum", _sum(formula.composition))
    put("_chemical_formula_structural", draft.formula)
    edge = _whole(draft.a_angstrom, draft.a_esd_angstrom)
    for axis in "abc":
        put(f"_cell_length_{axis}", edge)
    for angle in ("alpha", "beta", "gamma"):
        put(f"_cell_angle_{angle}", "90")
    put("_cell_formula_units_Z", _plain(draft.formula_units_per_cell))
    put("_cell_measurement_temperature", _plain(draft.temperature_k))
    put("_exptl_crystal_density_meas", _plain(draft.measured_density_g_cm3))
    _put_sources(holder, put, draft)
    put("_space_group_crystal_system", "cubic")
    put("_space_group_Bravais_type", f"c{draft.lattice_type}")
    if draft.sites:
        _put_structure(holder, put, draft)
    return str(document.as_string())


def _block_name(text: str) -> str:
    return re.sub(r"[^A-Za-z0-9_.-]+", "_", text).strip("_")[:60] or "phase"


def _safe(text: str) -> str:
    """Return the text without control characters, which CIF does not allow."""
    return re.sub(r"[\x00-\x08\x0b-\x1f\x7f]", " ", text)


def _whole(value: float, esd: float | None) -> str:
    """Return value and esd with all digits of the value: ``4.156826(80)``, so that nothing is lost."""
    plain = format_measured(value, None)
    decimals = len(plain.partition(".")[2])
    units = 0 if esd is None else round(esd * 10.0**decimals)
    if esd is None or (units and abs(units / (esd * 10.0**decimals) - 1.0) < 0.05):
        return f"{plain}({units})" if units else plain
    return format_measured(value, esd)


def _plain(value: float | None) -> str:
    return "" if value is None else f"{value:.10g}"


def _sum(composition: dict[str, float]) -> str:
    """Return the sum formula in the order of CIF: C and H first if there is carbon, else alphabetical."""
    lead = [symbol for symbol in ("C", "H") if symbol in composition and "C" in composition]
    order = lead + sorted(symbol for symbol in composition if symbol not in lead)
    return " ".join(
        symbol + ("" if composition[symbol] == 1 else _plain(composition[symbol])) for symbol in order
    )


def _put_sources(holder: Any, put: Any, draft: Draft) -> None:
    from gemmi import cif

    cited = [source for source in draft.sources if source.citation or source.doi]
    if not cited:
        return
    first = cited[0]
    put("_journal_paper_doi", first.doi)
    put("_journal_year", first.year)
    put("_exptl_crystal_density_diffrn", _plain(first.density_g_cm3))
    loop = holder.init_loop("_citation_", ["id", "title", "doi", "year"])
    for number, source in enumerate(cited, start=1):
        loop.add_row(
            [
                str(number),
                cif.quote(_safe(source.citation)) if source.citation else "?",
                cif.quote(_safe(source.doi)) if source.doi else "?",
                str(source.year) if source.year else "?",
            ]
        )


def _put_structure(holder: Any, put: Any, draft: Draft) -> None:
    import gemmi
    from gemmi import cif

    group = space_group(draft.space_group)
    put("_space_group_IT_number", group.number)
    put("_space_group_name_H-M_alt", group.name)
    operations = gemmi.find_spacegroup_by_name(group.name).operations()
    loop = holder.init_loop("_space_group_symop_", ["id", "operation_xyz"])
    for number, operation in enumerate(operations, start=1):
        loop.add_row([str(number), cif.quote(operation.triplet())])
    names = ["label", "type_symbol", "fract_x", "fract_y", "fract_z", "occupancy", "B_iso_or_equiv"]
    loop = holder.init_loop("_atom_site_", names)
    seen: set[str] = set()
    for site in draft.sites:
        for symbol, occupancy in site.species:
            place = [f"{value:.10g}" for value in site.position]
            label = _label(symbol, site.label, seen)
            loop.add_row([cif.quote(label), symbol, *place, f"{occupancy:.10g}", f"{site.b_iso:.10g}"])


def _label(symbol: str, wanted: str, seen: set[str]) -> str:
    """Return a label that no other atom has and that starts with the element."""
    tail = re.sub(r"[^A-Za-z0-9()'-]", "", wanted)
    label = tail if tail.startswith(symbol) else symbol + (re.sub(r"\D", "", tail) or "1")
    base, number = label, 1
    while label in seen:
        label, number = f"{base}_{number}", number + 1
    seen.add(label)
    return label
