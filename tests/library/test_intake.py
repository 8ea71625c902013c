"""Rows of text and Python values at the door: read as meant, or refused with the column named."""

from __future__ import annotations

import math
from dataclasses import replace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from phasedb.errors import InputError
from phasedb.library import Draft, Source
from phasedb.library.entry import SOURCE_KINDS
from phasedb.library.intake import (
    TEXT_FIELDS,
    FieldError,
    draft_from_fields,
    drift_class_from,
    likely_drift_class,
)
from phasedb.library.preparing import prepare
from phasedb.library.sources import cited_source, clean_doi, kind_of_source

ROW = {
    "name": "nickel oxide",
    "formula": "NiO",
    "lattice_type": "F",
    "a_angstrom": "0.41769(2) nm",
    "temperature_K": "298",
    "thermal_expansion": "1.35e-5",
    "drift_class": "line-compound",
    "a_min": "4.17",
    "a_max": "4.18",
    "aliases": "bunsenite; nickel(II) oxide;",
    "tags": "oxides;magnets",
    "source": "Somebody et al. Acta Crystallographica 12 (1959) 345",
    "how": "library_value",
    "source_density_g_cm3": "6.8",
    "second_source": "handbook (from memory)",
    "second_value_angstrom": "4.177",
    "second_how": "from_memory",
    "note": "antiferromagnet",
    "space_group_number": "225",
    "diff_percent": "0.002",
}


def test_a_full_row_is_read():
    draft = draft_from_fields(ROW)
    assert (draft.a_angstrom, draft.a_esd_angstrom, draft.a_text) == (4.1769, 0.0002, "0.41769(2) nm")
    assert (draft.temperature_k, draft.expansion_per_k) == (298.0, 1.35e-5)
    assert (draft.drift_class, draft.a_min_angstrom, draft.a_max_angstrom) == ("line compound", 4.17, 4.18)
    assert [name.strip() for name in draft.aliases] == ["bunsenite", "nickel(II) oxide"]
    assert draft.tags == ("oxides", "magnets")
    assert draft.remarks == "antiferromagnet"
    assert draft.sources == (
        Source(
            "Somebody et al. Acta Crystallographica 12 (1959) 345",
            year=1959,
            kind="paper",
            how="library_value",
            density_g_cm3=6.8,
        ),
        Source("handbook (from memory)", kind="from memory", how="from_memory", a_angstrom=4.177),
    )
    assert prepare(draft).elements == ("Ni", "O")


@pytest.mark.parametrize(
    ("column", "text"),
    [
        ("name", ""),
        ("formula", "  "),
        ("lattice_type", "C"),
        ("lattice_type", "PI"),
        ("a_angstrom", "0.41769"),
        ("a_angstrom", "four"),
        ("a_esd_angstrom", "0.001 nm"),
        ("temperature_K", "25 C"),
        ("thermal_expansion_per_k", "small"),
        ("drift_class", "gas"),
        ("a_min_angstrom", "0.4"),
        ("formula_units_per_cell", "4 or 8"),
        ("measured_density_g_cm3", "1,2"),
        ("second_value_angstrom", "-"),
    ],
)
def test_a_wrong_value_names_its_column(column, text):
    row = {name: value for name, value in ROW.items() if name not in ("a_min", "a_max", "thermal_expansion")}
    with pytest.raises(FieldError) as error:
        draft_from_fields({**row, column: text})
    assert error.value.field == column
    assert column in str(error.value)


@given(
    row=st.fixed_dictionaries(
        {
            name: st.text(max_size=30) | st.sampled_from(["4.2", "Fe", "P", "1e400", "=1", "nan"])
            for name in TEXT_FIELDS
        }
    )
)
def test_whatever_a_row_holds_it_is_read_or_refused(row):
    try:
        prepare(draft_from_fields(row))
    except InputError as error:
        assert str(error)


_any = st.one_of(st.none(), st.floats(), st.integers(), st.text(max_size=5), st.booleans())


@given(
    a=_any,
    esd=_any,
    temperature=_any,
    expansion=_any,
    low=_any,
    high=_any,
    density=_any,
    lattice=st.sampled_from(["P", "I", "F", "Q", ""]),
    drift=st.text(max_size=5) | st.just("alloy"),
)
def test_whatever_a_program_passes_only_finite_sensible_numbers_get_in(
    a, esd, temperature, expansion, low, high, density, lattice, drift
):
    draft = Draft(
        "x", "Fe", lattice, a, a_esd_angstrom=esd, temperature_k=temperature, expansion_per_k=expansion,
        a_min_angstrom=low, a_max_angstrom=high, measured_density_g_cm3=density, drift_class=drift,
    )  # fmt: skip
    try:
        content = prepare(draft).content
    except InputError:
        return
    assert math.isfinite(content.a_angstrom)
    assert 0.1 <= content.a_angstrom <= 250
    for value in (content.a_esd_angstrom, content.temperature_k, content.measured_density_g_cm3):
        assert value is None or (isinstance(value, float) and value > 0)


@given(name=st.text(min_size=1, max_size=250), remarks=st.text(max_size=300))
def test_preparing_twice_changes_nothing_more(name, remarks):
    try:
        once = prepare(Draft(name, "TiN", "F", 4.24, structure_type="rock salt", remarks=remarks)).content
    except InputError:
        return
    assert prepare(once).content == once
    assert once.structure_type == "B1"


def test_sites_of_its_own_are_kept_only_when_asked():
    from phasedb.crystal.phases import Site

    own = (Site("X", (("Ti", 0.5),), (0.0, 0.0, 0.0)),)
    draft = Draft("x", "TiN", "F", 4.24, structure_type="B1", sites=own, space_group="F m -3 m")
    assert prepare(draft, keep_sites=True).content.sites == own
    assert len(prepare(draft).content.sites) == 2


@pytest.mark.parametrize(
    ("text", "found"),
    [("Solid Solution", "solid solution"), ("line_compound", "line compound"), (" alloy ", "alloy")],
)
def test_drift_classes_are_read_in_any_spelling(text, found):
    assert drift_class_from(text) == found


def test_the_likely_drift_class_of_what_nobody_classed():
    assert likely_drift_class("Ni3Al")[0] == "alloy"
    assert likely_drift_class("Fe")[0] == "alloy"
    for formula in ("NaCl", "SiC", "Si", "Fe3O4", "Ar"):
        assert likely_drift_class(formula)[0] == "line compound"
    assert "not stated" in likely_drift_class("Fe")[1]


@pytest.mark.parametrize(
    ("citation", "how", "kind"),
    [
        ("NIST SRM 660c certificate", "read_in_source", "standard"),
        (
            "Wyckoff, Crystal Structures 2nd ed. vol. 1 (1963); entry read from a package",
            "library_value",
            "handbook",
        ),
        ("Hom et al. Journal of Applied Crystallography 8 (1975) 457", "library_value", "paper"),
        ("somepackage 1.8.0 predefined material PbTe", "library_value", "data package"),
        ("standard powder-pattern value", "from_memory", "from memory"),
        ("handbook (from memory)", "", "from memory"),
        ("A. Author, private communication", "", "paper"),
    ],
)
def test_what_a_source_is(citation, how, kind):
    assert kind_of_source(citation, how) == kind


def test_years_and_dois_are_read_from_the_words():
    source = cited_source(
        "A, J. Phys. 66 (1937) 1436, citing doi:10.1107/S0365110X66001749; package 2026.1.0"
    )
    assert (source.year, source.doi) == (1937, "10.1107/S0365110X66001749")
    assert cited_source("package 2026.1.0").year is None
    assert cited_source("x", kind="standard").kind == "standard"
    assert set(SOURCE_KINDS) >= {source.kind}
    with pytest.raises(InputError):
        cited_source("x", kind="blog")


@pytest.mark.parametrize(
    "text", ["https://doi.org/10.1000/182", "doi: 10.1000/182", "DOI:10.1000/182", "10.1000/182"]
)
def test_dois_are_bared(text):
    assert clean_doi(text) == "10.1000/182"


@pytest.mark.parametrize("text", ["10.1000", "http://example.org/10.1000/182", "10.1000/1 82", "x"])
def test_what_is_no_doi(text):
    with pytest.raises(InputError):
        clean_doi(text)


def test_a_source_that_is_wrong_is_refused():
    good = Draft("x", "Fe", "I", 2.87)
    for source in (Source("x", year=99), Source("x", kind="blog"), Source("x", a_angstrom=math.nan)):
        with pytest.raises(InputError):
            prepare(replace(good, sources=(source,)))
