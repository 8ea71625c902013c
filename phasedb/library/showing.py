"""Entries and history as documents (--json) and as lines to read."""

from __future__ import annotations

import json
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any, Final

from phasedb.crystal.quantity import format_measured
from phasedb.errors import UnknownNameError
from phasedb.library.chain import HistoryRow
from phasedb.library.differences import changed_lines, shown
from phasedb.library.entry import Entry, Source, entry_to_json

if TYPE_CHECKING:
    from phasedb.library.store import Library

Pairs = list[tuple[str, str]]

_LATTICE_WORDS: Final = {"P": "primitive", "I": "body-centred", "F": "face-centred"}
_HOW_WORDS: Final = {
    "read_in_source": "value read in the source",
    "library_value": "value taken from a data package",
    "from_memory": "value recalled from memory, not looked up",
}


def when(text: str | None) -> str:
    """Return a stored time to the second: ``2026-03-01 09:30:00 UTC``."""
    return f"{text[:19].replace('T', ' ')} UTC" if text else ""


# --- one entry ------------------------------------------------------------------------------------


def phase_document(library: Library, entry: Entry) -> dict[str, Any]:
    """Return the document of ``show --json``."""
    phase = entry_to_json(entry)
    sources = phase.pop("sources")
    phase["replaced_by"] = _replacement(library, entry) or None
    return {
        "schema": "phasedb.phase/1",
        "phase": phase,
        "sources": sources,
        "cell": cell_document(entry),
    }


def cell_document(entry: Entry) -> dict[str, Any]:
    """Return what follows from the cell; unknown is None."""
    from phasedb.library.cell import cell_of

    cell = cell_of(entry)
    return {
        "density_g_cm3": _rounded(cell.density_g_cm3, 4),
        "atoms": _rounded(cell.atoms, 4),
        "Z": _rounded(cell.formula_units, 4),
        "packing_fraction": _rounded(cell.packing_fraction, 4),
        "sphere_radius_angstrom": _rounded(cell.sphere_radius_angstrom, 4),
        "nearest": [
            {
                "site": near.site,
                "distance_angstrom": _rounded(near.distance_angstrom, 4),
                "count": _rounded(near.count, 3),
                "to": list(near.to),
            }
            for near in cell.nearest
        ],
    }


def _rounded(value: float | None, digits: int) -> float | None:
    return None if value is None else round(float(value), digits)


def _replacement(library: Library, entry: Entry) -> str:
    if entry.replaced_by is None:
        return ""
    try:
        return library.by_uid(entry.replaced_by).name
    except UnknownNameError:
        return entry.replaced_by


def phase_sections(library: Library, entry: Entry) -> list[tuple[str, Pairs]]:
    """Return ``show`` as titled sections of (label, text)."""
    c = entry.content
    sections = [(c.name, _content_pairs(entry)), ("Standing", _standing_pairs(library, entry))]
    cell = _cell_pairs(entry)
    if cell:
        sections.append(("Cell", cell))
    if c.sites:
        sections.append(("Sites" + (f" ({c.space_group})" if c.space_group else ""), _site_pairs(entry)))
    sources = [(str(number), source_text(source)) for number, source in enumerate(c.sources, 1)]
    sections.append(("Sources", sources or [("none", "no source was given")]))
    return sections


def _content_pairs(entry: Entry) -> Pairs:
    c = entry.content
    a = f"{format_measured(c.a_angstrom, c.a_esd_angstrom)} Å"
    if c.temperature_k is not None:
        a += f" at {c.temperature_k:g} K"
    if (
        c.a_text
        and c.a_text.split()[-1:]
        and not c.a_text.replace("(", "").replace(")", "").replace(".", "").isdigit()
    ):
        a += f"  (entered as {c.a_text})"
    drift = c.drift_class + (f" ({c.drift_reason})" if c.drift_reason else "")
    if c.a_min_angstrom is not None and c.a_max_angstrom is not None:
        drift += f"; a from {c.a_min_angstrom:g} to {c.a_max_angstrom:g} Å"
    structure = c.structure_type or ""
    if c.space_group:
        structure += f"{', ' if structure else ''}space group {c.space_group}"
    return [
        ("formula", c.formula),
        ("mineral name", c.mineral_name),
        ("also called", ", ".join(c.aliases)),
        ("lattice type", f"{c.lattice_type} ({_LATTICE_WORDS[c.lattice_type]})"),
        ("a", a),
        ("structure type", structure),
        ("free parameters", c.free_parameters),
        ("assumed", f"{', '.join(c.assumed)} (typical of the type, not of this phase)" if c.assumed else ""),
        ("formula units", f"{c.formula_units_per_cell:g} in the cell" if c.formula_units_per_cell else ""),
        (
            "thermal expansion",
            f"{c.expansion_per_k:.3g} per K, linear" if c.expansion_per_k is not None else "",
        ),
        ("measured density", f"{c.measured_density_g_cm3:g} g/cm³" if c.measured_density_g_cm3 else ""),
        ("drift class", drift),
        ("tags", ", ".join(c.tags)),
        ("remarks", c.remarks),
    ]


def _standing_pairs(library: Library, entry: Entry) -> Pairs:
    pairs = [
        ("now", f"{entry.standing}, version {entry.version}"),
        ("entered", f"by {entry.entered_by}, {when(entry.entered_at)}"),
        ("changed", f"by {entry.changed_by}, {when(entry.changed_at)}" if entry.changed_by else ""),
        ("checked", f"by {entry.checked_by}, {when(entry.checked_at)}" if entry.checked_by else ""),
        ("withdrawn", entry.withdrawn_reason or ""),
    ]
    if entry.replaced_by:
        pairs.append(("replaced by", _replacement(library, entry)))
    return pairs


def _cell_pairs(entry: Entry) -> Pairs:
    from phasedb.library.cell import cell_of

    cell = cell_of(entry)
    pairs = []
    if cell.density_g_cm3 is not None:
        pairs.append(("X-ray density", f"{cell.density_g_cm3:.4g} g/cm³"))
    if cell.atoms is not None:
        z = f", Z = {cell.formula_units:.4g}" if cell.formula_units is not None else ""
        pairs.append(("atoms in the cell", f"{cell.atoms:.5g}{z}"))
    if cell.packing_fraction is not None:
        radius = cell.sphere_radius_angstrom
        touching = f", spheres that touch: r = {radius:.4f} Å" if radius is not None else ""
        pairs.append(("filled, equal spheres", f"{100 * cell.packing_fraction:.1f} %{touching}"))
    pairs += [
        (
            "nearest" if number == 0 else "",
            f"{near.site}: {near.count:g} {'/'.join(near.to)} at {near.distance_angstrom:.4f} Å",
        )
        for number, near in enumerate(cell.nearest)
    ]
    return pairs


def _site_pairs(entry: Entry) -> Pairs:
    pairs = []
    for site in entry.content.sites:
        species = " + ".join(
            element if share == 1 else f"{element} {share:.4g}" for element, share in site.species
        )
        x, y, z = site.position
        pairs.append((site.label, f"{species} at {x:.5g}, {y:.5g}, {z:.5g}; B = {site.b_iso:g} Å²"))
    return pairs


def source_text(source: Source) -> str:
    """Return a source as one sentence."""
    parts = [source.citation]
    if source.doi and source.doi not in source.citation:
        parts.append(f"doi:{source.doi}")
    if source.a_angstrom is not None:
        parts.append(f"gives a = {source.a_angstrom:.10g} Å")
    if source.density_g_cm3 is not None:
        parts.append(f"gives density {source.density_g_cm3:g} g/cm³")
    said: list[str] = [source.kind]
    if source.how and not (source.kind == "from memory" and source.how == "from_memory"):
        said.append(_HOW_WORDS.get(source.how, source.how))
    return "; ".join(part for part in parts if part) + f"  [{'; '.join(said)}]"


# --- many entries ---------------------------------------------------------------------------------


def list_document(entries: Sequence[Entry]) -> dict[str, Any]:
    """Return the document of ``list --json``."""
    return {
        "schema": "phasedb.list/1",
        "phases": [
            {
                "name": entry.name,
                "formula": entry.content.formula,
                "lattice_type": entry.content.lattice_type,
                "a_angstrom": entry.content.a_angstrom,
                "a_esd_angstrom": entry.content.a_esd_angstrom,
                "temperature_K": entry.content.temperature_k,
                "structure_type": entry.content.structure_type,
                "standing": entry.standing,
                "version": entry.version,
            }
            for entry in entries
        ],
    }


def list_table(entries: Sequence[Entry]) -> tuple[list[str], list[list[str]]]:
    """Return heads and rows of ``list``."""
    rows = [
        [
            entry.name,
            entry.content.formula,
            entry.content.lattice_type,
            format_measured(entry.content.a_angstrom, entry.content.a_esd_angstrom),
            entry.content.structure_type or "",
            entry.standing,
        ]
        for entry in entries
    ]
    return ["name", "formula", "lat", "a (Å)", "type", "standing"], rows


# --- history --------------------------------------------------------------------------------------


def _parsed(text: str | None) -> dict[str, Any] | None:
    return None if text is None else json.loads(text)


def history_document(rows: Sequence[HistoryRow]) -> dict[str, Any]:
    """Return the document of ``history --json``."""
    return {
        "schema": "phasedb.history/1",
        "rows": [
            {
                "number": row.number,
                "at": row.at,
                "who": row.who,
                "login": row.login,
                "host": row.host,
                "program_version": row.program_version,
                "action": row.action,
                "kind": row.kind,
                "key": row.key,
                "before": _parsed(row.before),
                "after": _parsed(row.after),
                "remark": row.remark,
                "previous_hash": row.previous_hash,
                "hash": row.hash,
            }
            for row in rows
        ],
    }


def history_sections(rows: Sequence[HistoryRow], *, in_full: bool) -> list[tuple[str, Pairs]]:
    """Return the history as a log: a line for each row, with why, and what changed if `in_full`."""
    from phasedb.library.exchange_history import carried_row

    sections = []
    for own in rows:
        library_id, row = carried_row(own)
        before, after = _parsed(row.before), _parsed(row.after)
        subject = _subject(after or before or {})
        what = f"{row.action} {row.kind}" + (f" {subject!r}" if subject else "")
        details: Pairs = []
        if in_full:
            details.append(("on", f"{row.host}, login {row.login}, hash {row.hash[:16]}"))
            details += _details(before, after)
        if row.remark:
            details.append(("why", row.remark))
        if library_id:
            said = (
                f"library {library_id[:8]}, its row {row.number}; carried over by {own.who}, {when(own.at)}"
            )
            details.append(("in", said))
        sections.append((f"{own.number:>5}  {when(row.at)}  {row.who}  {what}", details))
    return sections


def _subject(document: dict[str, Any]) -> str:
    return str(document.get("name", ""))


def _details(before: dict[str, Any] | None, after: dict[str, Any] | None) -> Pairs:
    if before is None:
        first = ("formula", "lattice_type", "a_angstrom", "a_esd_angstrom", "structure_type", "standing")
        known = after or {}
        return [("with", ", ".join(f"{name} {shown(known[name])}" for name in first if name in known))]
    return [(line.split(": ", 1)[0], line.split(": ", 1)[1]) for line in changed_lines(before, after or {})]
