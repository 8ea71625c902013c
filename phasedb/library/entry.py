"""What a person enters (Draft), what the store keeps of it (Entry), and both as plain JSON values."""

from __future__ import annotations

import hashlib
import json
import unicodedata
from dataclasses import dataclass, fields, replace
from typing import Any, Final, Literal, get_args

from phasedb.crystal.lattice import LatticeType
from phasedb.crystal.phases import DriftClass, Phase, Site, Standing, Structure

SourceKind = Literal["standard", "handbook", "paper", "data package", "measured here", "from memory"]
SOURCE_KINDS: Final[tuple[SourceKind, ...]] = get_args(SourceKind)


@dataclass(frozen=True, slots=True)
class Source:
    """Where a value comes from.

    Attributes
    ----------
    citation, doi : str
    year : int or None
    kind : str
        What the source is.
    how : str
        How the value was obtained: ``read_in_source``, ``library_value``, ``from_memory``; empty if not said.
    a_angstrom, density_g_cm3 : float or None
        What this source gives, where that is kept.
    """

    citation: str = ""
    doi: str = ""
    year: int | None = None
    kind: SourceKind = "paper"
    how: str = ""
    a_angstrom: float | None = None
    density_g_cm3: float | None = None


@dataclass(frozen=True, slots=True)
class Draft:
    """The content of an entry: everything that a person says about a phase.

    Build one from text with `phasedb.library.intake.draft_from_fields`, which checks the values.
    """

    name: str
    formula: str
    lattice_type: LatticeType
    a_angstrom: float
    mineral_name: str = ""
    a_esd_angstrom: float | None = None
    a_text: str = ""
    temperature_k: float | None = None
    expansion_per_k: float | None = None
    structure_type: str | None = None
    free_parameters: str = ""
    space_group: str = ""
    formula_units_per_cell: float | None = None
    sites: tuple[Site, ...] = ()
    assumed: tuple[str, ...] = ()
    drift_class: DriftClass = "line compound"
    drift_reason: str = ""
    a_min_angstrom: float | None = None
    a_max_angstrom: float | None = None
    measured_density_g_cm3: float | None = None
    remarks: str = ""
    aliases: tuple[str, ...] = ()
    tags: tuple[str, ...] = ()
    sources: tuple[Source, ...] = ()


@dataclass(frozen=True, slots=True)
class Entry:
    """One entry as the store holds it.

    Attributes
    ----------
    content : Draft
    uid : str
        Never changes, even when the entry is renamed; 32 hex digits.
    standing : str
    version : int
        Counts from 1; every change of any kind adds one.
    entered_by, entered_at, changed_by, changed_at, checked_by, checked_at : str or None
        Who, and when in UTC (ISO 8601). `changed_by` is who last changed the content.
    withdrawn_reason : str or None
    replaced_by : str or None
        uid of the entry to use instead.
    elements : tuple of str
    formula_key : str
        The reduced formula, for finding entries of the same composition.
    """

    content: Draft
    uid: str
    standing: Standing
    version: int
    entered_by: str
    entered_at: str
    changed_by: str | None = None
    changed_at: str | None = None
    checked_by: str | None = None
    checked_at: str | None = None
    withdrawn_reason: str | None = None
    replaced_by: str | None = None
    elements: tuple[str, ...] = ()
    formula_key: str = ""

    @property
    def name(self) -> str:
        return self.content.name

    def phase(self) -> Phase:
        """Return what science needs of the entry."""
        c = self.content
        limits = (c.a_min_angstrom, c.a_max_angstrom)
        low, high = limits
        return Phase(
            name=c.name,
            formula=c.formula,
            lattice_type=c.lattice_type,
            a_angstrom=c.a_angstrom,
            a_esd_angstrom=c.a_esd_angstrom,
            temperature_k=c.temperature_k,
            expansion_per_k=c.expansion_per_k,
            structure_type=c.structure_type,
            structure=Structure(c.space_group, c.sites, c.assumed) if c.sites else None,
            drift_class=c.drift_class,
            a_range_angstrom=(low, high) if low is not None and high is not None else None,
            measured_density_g_cm3=c.measured_density_g_cm3,
            formula_units_per_cell=c.formula_units_per_cell,
            standing=self.standing,
            tags=c.tags,
            elements=self.elements,
        )


def key_of(name: str) -> str:
    """Return the key under which a name is unique: Unicode NFC, case folded, runs of spaces as one."""
    return unicodedata.normalize("NFC", " ".join(name.split()).casefold())


_encode = json.JSONEncoder(sort_keys=True, separators=(",", ":"), ensure_ascii=False, allow_nan=False).encode


def canonical_json(value: Any) -> str:
    """Return JSON with sorted keys and no spaces: the same value always gives the same text."""
    return _encode(value)


# Field names in JSON and CSV, where they differ from the attribute.
_JSON_NAMES: Final = {
    "temperature_k": "temperature_K",
    "expansion_per_k": "thermal_expansion_per_k",
}
_CONTENT_FIELDS: Final = tuple((f.name, _JSON_NAMES.get(f.name, f.name)) for f in fields(Draft))
_SOURCE_FIELDS: Final = tuple(f.name for f in fields(Source))
_CUSTODY_FIELDS: Final = (
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
_OUTSIDE_CHECKSUM: Final = frozenset(_CUSTODY_FIELDS) - {"standing", "withdrawn_reason"}


def _site_json(site: Site) -> dict[str, Any]:
    return {
        "label": site.label,
        "species": [[element, occupancy] for element, occupancy in site.species],
        "position": list(site.position),
        "b_iso": site.b_iso,
    }


def _site_from_json(value: dict[str, Any]) -> Site:
    x, y, z = value["position"]
    return Site(
        label=value["label"],
        species=tuple((element, occupancy) for element, occupancy in value["species"]),
        position=(x, y, z),
        b_iso=value["b_iso"],
    )


def content_to_json(content: Draft) -> dict[str, Any]:
    """Return every field of `content` under its public name, unknown as None."""
    document = {public: getattr(content, name) for name, public in _CONTENT_FIELDS}
    document["sites"] = [_site_json(site) for site in content.sites]
    document["sources"] = [{name: getattr(s, name) for name in _SOURCE_FIELDS} for s in content.sources]
    for name in ("assumed", "aliases", "tags"):
        document[name] = list(document[name])
    return document


def content_from_json(document: dict[str, Any]) -> Draft:
    """Return the content of a document made by `content_to_json` or `compact`."""
    values = {name: document[public] for name, public in _CONTENT_FIELDS if public in document}
    values["sites"] = tuple(_site_from_json(site) for site in values.get("sites", ()))
    values["sources"] = tuple(Source(**value) for value in values.get("sources", ()))
    for name in ("assumed", "aliases", "tags"):
        values[name] = tuple(values.get(name, ()))
    return Draft(**values)


def entry_to_json(entry: Entry) -> dict[str, Any]:
    """Return everything that is stored of an entry under its public names."""
    document = content_to_json(entry.content)
    for name in _CUSTODY_FIELDS:
        document[name] = getattr(entry, name)
    return document


def entry_from_json(document: dict[str, Any]) -> Entry:
    """Return the entry of a document made by `entry_to_json` or `compact`; elements are left out."""
    custody = {name: document[name] for name in _CUSTODY_FIELDS if name in document}
    return Entry(content=content_from_json(document), **custody)


def compact(document: dict[str, Any]) -> dict[str, Any]:
    """Return the document without unknown or empty fields, as the history keeps it."""
    kept = {name: value for name, value in document.items() if value is not None and value not in ("", [])}
    if "sources" in kept:
        kept["sources"] = [compact(value) for value in kept["sources"]]
    return kept


def content_checksum(document: dict[str, Any]) -> str:
    """Return the SHA-256 of content and standing (not of who and when), from a compact entry document."""
    text = canonical_json({name: value for name, value in document.items() if name not in _OUTSIDE_CHECKSUM})
    return hashlib.sha256(text.encode("utf-8", "surrogatepass")).hexdigest()


def with_composition(entry: Entry) -> Entry:
    """Return the entry with `elements` and `formula_key` worked out from its formula."""
    from phasedb.crystal.formula import parse_formula

    formula = parse_formula(entry.content.formula)
    return replace(entry, elements=tuple(formula.elements), formula_key=formula.reduced)
