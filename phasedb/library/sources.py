"""Sources of values: what they are, and how a reference table's columns become them."""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from dataclasses import replace

from phasedb.errors import InputError
from phasedb.library.cleaning import clean_text, within
from phasedb.library.entry import SOURCE_KINDS, Source, SourceKind

EXPANSION_SOURCE = "thermal expansion: "
"""How the citation of a source begins that gives the thermal expansion and not a."""

_YEAR_IN_BRACKETS = re.compile(r"\((1[89]\d\d|20\d\d)\)")
_YEAR = re.compile(r"(?<![\d.])(1[89]\d\d|20\d\d)(?![\d]|\.\d)")
_DOI = re.compile(r"\bdoi:\s*(10\.\d{4,9}/[^\s;,]+)", re.IGNORECASE)
_JOURNAL = re.compile(
    r"\bet al\b|\bjournal\b|\bacta\b|\bphys|\bzeitschrift|\bmineral|\bchem|\bproceedings"
    r"|\bamcsd entry|\bnational bureau|\bfiat\b|\breview"
)


def clean_source(source: Source) -> Source:
    if source.kind not in SOURCE_KINDS:
        raise InputError(
            f"source kind {source.kind!r} is not known", hint="expected one of " + ", ".join(SOURCE_KINDS)
        )
    if source.year is not None and not 1800 <= source.year <= 2200:
        raise InputError(f"source year {source.year!r} is not possible: expected 1800 to 2200")
    return replace(
        source,
        citation=clean_text(source.citation, what="source"),
        doi=clean_doi(source.doi),
        how=clean_text(source.how, what="source's way"),
        a_angstrom=within(source.a_angstrom, 0.1, 250, what="the source's a", unit="Å"),
        density_g_cm3=within(source.density_g_cm3, 1e-3, 50, what="the source's density", unit="g/cm³"),
    )


def clean_doi(text: str) -> str:
    """Return a bare DOI (``10.1000/182``); a leading address or ``doi:`` is taken off.

    Raises
    ------
    InputError
        If it does not look like a DOI.
    """
    doi = re.sub(r"^(https?://(dx\.)?doi\.org/|doi:\s*)", "", text.strip(), flags=re.IGNORECASE)
    if doi and not re.fullmatch(r"10\.\d{4,9}/\S{1,200}", doi):
        raise InputError(f"{text[:80]!r} is not a DOI", hint="expected something like 10.1000/182")
    return doi


def kind_of_source(citation: str, how: str = "") -> SourceKind:
    """Return what a cited source is, from its words; ``from memory`` if `how` or the citation says so."""
    text = citation.casefold()
    if how == "from_memory" or "(from memory)" in text:
        return "from memory"
    if re.search(r"\bsrm\b|\bcertificate\b", text):
        return "standard"
    if re.search(r"\bhandbook\b|\bwyckoff\b|\bencyclop", text):
        return "handbook"
    if _JOURNAL.search(text):
        return "paper"
    if re.search(
        r"package|\bpredefined\b|dabax|\.ini\b|prototype|data set|data table|web tables|\bcod\b|\d\.\d+\.\d",
        text,
    ):
        return "data package"
    return "paper"


def cited_source(
    citation: str,
    *,
    how: str = "",
    kind: str = "",
    doi: str = "",
    year: int | None = None,
    a_angstrom: float | None = None,
    density_g_cm3: float | None = None,
) -> Source:
    """Return the source of a citation; year, DOI and kind are read from it where not given."""
    if kind and kind not in SOURCE_KINDS:
        raise InputError(
            f"source kind {kind!r} is not known", hint="expected one of " + ", ".join(SOURCE_KINDS)
        )
    found_year = _YEAR_IN_BRACKETS.search(citation) or _YEAR.search(citation)
    found_doi = _DOI.search(citation)
    return Source(
        citation=citation,
        doi=doi or (found_doi[1] if found_doi else ""),
        year=year if year is not None else (int(found_year[1]) if found_year else None),
        kind=next((known for known in SOURCE_KINDS if known == kind), kind_of_source(citation, how)),
        how=how,
        a_angstrom=a_angstrom,
        density_g_cm3=density_g_cm3,
    )


def sources_from_fields(
    fields: Mapping[str, str], number: Callable[[str], float | None], length: Callable[[str], float | None]
) -> tuple[Source, ...]:
    """Return the sources of a row: of its a, the second one with its own value, and of its expansion."""
    found = []
    citation, doi = fields.get("source", ""), fields.get("doi", "")
    density = number("source_density_g_cm3")
    if citation or doi or density is not None:
        year = number("year")
        found.append(
            cited_source(
                citation,
                how=fields.get("how", ""),
                kind=fields.get("source_kind", ""),
                doi=doi,
                year=None if year is None else int(year),
                density_g_cm3=density,
            )
        )
    if fields.get("second_source"):
        found.append(
            cited_source(
                fields["second_source"],
                how=fields.get("second_how", ""),
                a_angstrom=length("second_value_angstrom"),
            )
        )
    if fields.get("thermal_expansion_source"):
        found.append(cited_source(EXPANSION_SOURCE + fields["thermal_expansion_source"]))
    return tuple(found)
