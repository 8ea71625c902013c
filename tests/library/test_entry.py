"""Entries as JSON: nothing lost, one text for one content."""

from __future__ import annotations

import json
from dataclasses import fields

from hypothesis import given
from hypothesis import strategies as st

from phasedb.crystal.phases import Site
from phasedb.library.entry import (
    SOURCE_KINDS,
    Draft,
    Entry,
    Source,
    canonical_json,
    compact,
    content_checksum,
    content_from_json,
    content_to_json,
    entry_from_json,
    entry_to_json,
    key_of,
)

_text = st.text(st.characters(exclude_categories=["Cs"]), max_size=20)
_number = st.floats(allow_nan=False, allow_infinity=False)
_sources = st.builds(
    Source,
    citation=_text,
    doi=_text,
    year=st.none() | st.integers(1900, 2100),
    kind=st.sampled_from(SOURCE_KINDS),
    how=_text,
    a_angstrom=st.none() | _number,
    density_g_cm3=st.none() | _number,
)
_sites = st.builds(
    Site,
    label=_text,
    species=st.tuples(st.tuples(st.sampled_from(["Fe", "C"]), st.floats(0, 1))),
    position=st.tuples(_number, _number, _number),
    b_iso=_number,
)
_drafts = st.builds(
    Draft,
    name=_text.filter(bool),
    formula=st.just("FeC"),
    lattice_type=st.sampled_from("PIF"),
    a_angstrom=_number,
    a_esd_angstrom=st.none() | _number,
    temperature_k=st.none() | _number,
    expansion_per_k=st.none() | _number,
    structure_type=st.none() | _text.filter(bool),
    sites=st.lists(_sites, max_size=3).map(tuple),
    assumed=st.lists(_text, max_size=2).map(tuple),
    remarks=_text,
    aliases=st.lists(_text, max_size=3).map(tuple),
    tags=st.lists(_text, max_size=3).map(tuple),
    sources=st.lists(_sources, max_size=3).map(tuple),
)


@given(content=_drafts)
def test_content_comes_back_from_json_as_it_was(content):
    through_text = json.loads(canonical_json(content_to_json(content)))
    assert content_from_json(through_text) == content
    assert content_from_json(json.loads(canonical_json(compact(content_to_json(content))))) == content


def _entry(content: Draft, **custody) -> Entry:
    values = {"uid": "0" * 32, "standing": "draft", "version": 1, "entered_by": "Ann", "entered_at": "then"}
    return Entry(content=content, **(values | custody))


@given(content=_drafts)
def test_an_entry_comes_back_from_the_history_as_it_was(content):
    entry = _entry(content, checked_by="Bob", checked_at="now", version=3, standing="checked")
    assert entry_from_json(json.loads(canonical_json(compact(entry_to_json(entry))))) == entry


def test_every_attribute_has_a_public_name():
    document = entry_to_json(_entry(Draft("x", "Fe", "I", 2.87)))
    assert len(document) == len(fields(Draft)) + len(fields(Entry)) - 3  # content, elements, formula_key
    assert {"temperature_K", "thermal_expansion_per_k", "a_angstrom", "standing", "version"} <= set(document)


def test_the_checksum_is_of_content_and_standing_alone():
    content = Draft("x", "Fe", "I", 2.87)
    one = content_checksum(compact(entry_to_json(_entry(content))))
    same = _entry(content, uid="1" * 32, version=7, entered_by="Bob", changed_by="Cy", changed_at="later")
    assert content_checksum(compact(entry_to_json(same))) == one
    for other in (_entry(content, standing="checked"), _entry(Draft("x", "Fe", "I", 2.8700000000000006))):
        assert content_checksum(compact(entry_to_json(other))) != one


def test_names_are_one_whatever_their_case_spaces_and_accents():
    assert key_of("  Wüstite \t (FeO)") == key_of("WÜSTITE (feo)")
    assert key_of("wu\u0308stite") == key_of("wüstite")
    assert key_of("STRASSE") == key_of("straße")
    assert key_of("nickel") != key_of("nickel oxide")
