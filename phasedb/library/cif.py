"""Reading phases from CIF: cell, symmetry, sites, temperature, density, citation."""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any, Final

from phasedb.crystal.lattice import LatticeType, check_lattice_type
from phasedb.crystal.quantity import Measured, parse_measured
from phasedb.errors import InputError, at
from phasedb.library.cif_sites import atom_rows, stated_formula, structure_of
from phasedb.library.cif_symmetry import bravais_lattice, first, space_groups_of
from phasedb.library.entry import Draft, Source
from phasedb.library.intake import likely_drift_class
from phasedb.library.sources import kind_of_source

MOST_CHARACTERS: Final = 20_000_000
_EQUAL_EDGES: Final = 1e-4
_RIGHT_ANGLE_DEG: Final = 0.02


@dataclass(frozen=True, slots=True)
class CifProblem:
    """A block that cannot be brought in, and why."""

    block: str
    reason: str


@dataclass(frozen=True, slots=True)
class CifPhase:
    """A phase of a CIF block, with remarks on what was left out or read with a choice."""

    block: str
    draft: Draft
    notes: tuple[str, ...] = ()


def decode_cif(data: bytes) -> tuple[str, str]:
    """Return the text of a file, and a remark if it is not UTF-8.

    Raises
    ------
    InputError
        If it is no text.
    """
    if data.startswith((b"\xff\xfe", b"\xfe\xff")):
        try:
            return data.decode("utf-16"), "read as UTF-16"
        except UnicodeDecodeError:
            raise InputError("the file is not text") from None
    if b"\0" in data[:100_000]:
        raise InputError("the file is not text: it holds zero bytes")
    try:
        return data.decode("utf-8-sig"), ""
    except UnicodeDecodeError:
        return data.decode("latin-1"), "not UTF-8: read as Latin-1, letters with accents may be wrong"


def read_cif(path: str | Path) -> list[CifPhase | CifProblem]:
    """Return what each block of a CIF file with a unit cell gives.

    Raises
    ------
    InputError
        If the file cannot be read, is not CIF, or has no block with a unit cell.
    """
    try:
        data = Path(path).read_bytes()
    except OSError as error:
        raise InputError(f"the file cannot be read ({error.strerror})", where=str(path)) from None
    try:
        text, _ = decode_cif(data)
    except InputError as error:
        raise InputError(error.what, where=str(path), hint="expected a CIF") from None
    return list(parse_cif(text, str(path)))


def parse_cif(text: str, source: str) -> Iterator[CifPhase | CifProblem]:
    """Yield what each block of a CIF text with a unit cell gives; `source` names it in errors.

    Raises
    ------
    InputError
        If the text is not CIF, or no block has a unit cell.
    """
    if len(text) > MOST_CHARACTERS:
        raise InputError(
            f"{len(text) / 1e6:.0f} million characters: a CIF of up to {MOST_CHARACTERS / 1e6:.0f} is read",
            where=source,
        )
    found = 0
    for block in _blocks(text, source):
        if not first(block, "_cell_length_a", "_cell.length_a"):
            continue
        found += 1
        try:
            yield phase_of_block(block)
        except InputError as error:
            yield CifProblem(str(block.name), str(error))
    if not found:
        raise InputError("no block of the file has a unit cell (_cell_length_a)", where=source)


def _blocks(text: str, source: str) -> list[Any]:
    from gemmi import cif

    try:
        return list(cif.read_string(text))
    except (ValueError, RuntimeError) as error:
        place = re.match(r"(?:string)?:(\d+)(?::(\d+))?(?:\(\d+\))?:?\s*(.*)", str(error), re.DOTALL)
        where = at(source, int(place[1]), int(place[2] or 0) or None) if place else source
        reason = (place[3] if place else str(error)).strip() or "syntax"
        raise InputError(f"not valid CIF: {reason.splitlines()[0]}", where=where) from None


def phase_of_block(block: Any) -> CifPhase:
    """Return the phase of one block.

    Raises
    ------
    InputError
        If the cell or its symmetry is not cubic, or a value cannot be read.
    """
    notes: list[str] = []
    a, a_esd, a_text = _cubic_edge(block)
    groups = space_groups_of(block)
    rows = atom_rows(block, notes)
    structure, formula = structure_of(groups, rows, stated_formula(block, notes), notes)
    if formula is None and rows:
        raise InputError("the symmetry is not given: neither operations nor a space-group name")
    if formula is None:
        raise InputError("neither a formula nor atom sites are given")
    if structure is not None:
        lattice: LatticeType = next(
            group.lattice_type for group in groups if group.name == structure.space_group
        )
    elif groups:
        lattice = groups[0].lattice_type
    elif bravais_lattice(block):
        lattice = check_lattice_type(bravais_lattice(block))
    else:
        raise InputError("the symmetry is not given: neither operations nor a space-group name")
    mineral = first(block, "_chemical_name_mineral", "_chemical.name_mineral")
    common = first(
        block,
        "_chemical_name_common",
        "_chemical.name_common",
        "_pd_phase_name",
        "_pd_phase.name",
        "_chemical_name_systematic",
        "_chemical.name_systematic",
    )
    drift, reason = likely_drift_class(formula.text)
    draft = Draft(
        name=_one_line(common or mineral or formula.text, 200),
        mineral_name=_one_line(mineral, 200),
        formula=formula.text,
        lattice_type=lattice,
        a_angstrom=a,
        a_esd_angstrom=a_esd,
        a_text=a_text,
        temperature_k=_number(
            block,
            "_cell_measurement_temperature",
            "_cell_measurement.temperature",
            "_diffrn_ambient_temperature",
            "_diffrn.ambient_temperature",
        ),
        structure_type=first(block, "_chemical_name_structure_type", "_chemical.name_structure_type") or None,
        space_group=structure.space_group if structure else (groups[0].name if len(groups) == 1 else ""),
        formula_units_per_cell=_number(block, "_cell_formula_units_Z", "_cell.formula_units_Z"),
        sites=structure.sites if structure else (),
        drift_class=drift,
        drift_reason=reason,
        measured_density_g_cm3=_number(block, "_exptl_crystal_density_meas", "_exptl_crystal.density_meas"),
        sources=_sources(block),
    )
    return CifPhase(str(block.name), draft, tuple(notes))


def _one_line(text: str, most: int = 2000) -> str:
    return " ".join(text.split())[:most]


def _measured(block: Any, *names: str) -> tuple[Measured, str] | None:
    text = first(block, *names)
    if not text:
        return None
    read = parse_measured(text, what=names[0])
    if read.unit:
        raise InputError(f"{names[0]} {text!r} is not a number")
    return read, text


def _number(block: Any, *names: str) -> float | None:
    read = _measured(block, *names)
    return None if read is None else read[0].value


def _cubic_edge(block: Any) -> tuple[float, float | None, str]:
    """Return a, its esd and its text, and refuse a cell that is not cubic."""
    edge = _measured(block, "_cell_length_a", "_cell.length_a")
    if edge is None or not edge[0].value > 0:
        raise InputError("the cell length a is not given, or not above 0")
    a = edge[0].value
    edges = [a]
    edges += [_number(block, f"_cell_length_{axis}", f"_cell.length_{axis}") or a for axis in "bc"]
    angles = [
        _number(block, f"_cell_angle_{angle}", f"_cell.angle_{angle}") or 90.0
        for angle in ("alpha", "beta", "gamma")
    ]
    skewed = max(abs(angle - 90.0) for angle in angles) > _RIGHT_ANGLE_DEG
    if skewed or max(abs(value / a - 1.0) for value in edges) > _EQUAL_EDGES:
        shown = ", ".join(f"{value:g}" for value in edges)
        turned = ", ".join(f"{angle:g}" for angle in angles)
        raise InputError(
            f"the cell is not cubic: edges {shown} Å, angles {turned} degrees",
            hint="only cubic phases are kept; a primitive or rhombohedral cell needs the cubic one",
        )
    return a, edge[0].esd, edge[1]


def _one(block: Any, *names: str) -> str:
    return _one_line(first(block, *names))


def _sources(block: Any) -> tuple[Source, ...]:
    """Return where the block says its values come from: each citation, else the journal items."""
    density = _number(block, "_exptl_crystal_density_diffrn", "_exptl_crystal.density_diffrn")
    listed = _citations(block)
    if not listed:
        listed = [_journal(block)]
    found = [
        Source(citation, doi, year, kind_of_source(citation))
        for citation, doi, year in listed
        if citation or doi
    ] or [Source(f"CIF, block {block.name}", kind="data package")]
    return (replace(found[0], density_g_cm3=density), *found[1:])


def _doi(text: str) -> str:
    bare = re.sub(r"^(https?://(dx\.)?doi\.org/|doi:\s*)", "", text.strip(), flags=re.IGNORECASE)
    return bare if re.fullmatch(r"10\.\d{4,9}/\S{1,200}", bare) else ""


def _year(text: str) -> int | None:
    return int(text) if re.fullmatch(r"1[89]\d\d|20\d\d", text) else None


def _citation_text(title: str, journal: str, volume: str, year: str, page: str, authors: list[str]) -> str:
    where = " ".join(
        part for part in (journal, volume, f"({year})" if year and journal else "", page) if part
    )
    named = "; ".join(authors[:3]) + (" et al." if len(authors) > 3 else "")
    return ", ".join(part for part in (named, title, where) if part)[:2000]


def _values(block: Any, *names: str) -> list[str]:
    from gemmi import cif

    for name in names:
        raws = list(block.find_values(name))
        if raws:
            return ["" if cif.is_null(raw) else _one_line(str(cif.as_string(raw))) for raw in raws]
    return []


def _citations(block: Any) -> list[tuple[str, str, int | None]]:
    """Return the rows of the citation list: text, DOI, year."""
    names = ("title", "journal_full", "journal_volume", "year", "page_first", "doi")
    columns = [_values(block, f"_citation_{name}", f"_citation.{name}") for name in names]
    size = max(len(column) for column in columns)
    rows = []
    for i in range(size):
        title, journal, volume, year, page, doi = (
            column[i] if len(column) == size else "" for column in columns
        )
        authors = _values(block, "_citation_author_name", "_citation_author.name") if size == 1 else []
        rows.append((_citation_text(title, journal, volume, year, page, authors), _doi(doi), _year(year)))
    return rows


def _journal(block: Any) -> tuple[str, str, int | None]:
    year = _one(block, "_journal_year", "_journal.year")
    citation = _citation_text(
        _one(block, "_publ_section_title", "_publ_section.title"),
        _one(block, "_journal_name_full", "_journal.name_full"),
        _one(block, "_journal_volume", "_journal.volume"),
        year,
        _one(block, "_journal_page_first", "_journal.page_first"),
        _values(block, "_publ_author_name", "_publ_author.name"),
    )
    doi = _doi(_one(block, "_journal_paper_doi", "_journal.paper_doi", "_journal_DOI"))
    return citation, doi, _year(year)
