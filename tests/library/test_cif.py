"""Reading CIF: what a block gives, what is refused and why, and files that were never CIF."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from phasedb.errors import InputError
from phasedb.library.cif import CifPhase, CifProblem, decode_cif, parse_cif, read_cif
from phasedb.library.cif_writing import cif_of
from phasedb.library.entry import Draft, Source

SALT = """data_{name}
_cell_length_a {a}
_cell_length_b {b}
_cell_length_c {c}
_cell_angle_alpha {alpha}
_cell_angle_beta 90
_cell_angle_gamma 90
_space_group_name_H-M_alt '{group}'
{more}
loop_
_atom_site_label
_atom_site_type_symbol
_atom_site_fract_x
_atom_site_fract_y
_atom_site_fract_z
_atom_site_occupancy
{atoms}
"""
ATOMS = "Na1 Na+ 0 0 0 1\nCl1 Cl- 0.5 0.5 0.5 1"


def salt(**changes):
    a = changes.get("a", "5.6402(2)")
    values = {"name": "salt", "b": a, "c": a, "alpha": "90", "group": "F m -3 m", "more": "", "atoms": ATOMS}
    return SALT.format(**(values | {"a": a} | changes))


def read(text):
    (found,) = parse_cif(text, "salt.cif")
    return found


def draft(text):
    found = read(text)
    assert isinstance(found, CifPhase), found
    return found.draft


def reason(text):
    found = read(text)
    assert isinstance(found, CifProblem), found
    return found.reason


def test_cell_sites_and_formula():
    found = draft(salt())
    assert (found.formula, found.lattice_type, found.space_group) == ("NaCl", "F", "F m -3 m")
    assert (found.a_angstrom, found.a_esd_angstrom, found.a_text) == (
        5.6402,
        pytest.approx(2e-4),
        "5.6402(2)",
    )
    assert [(site.species, site.position) for site in found.sites] == [
        ((("Na", 1.0),), (0.0, 0.0, 0.0)),
        ((("Cl", 1.0),), (0.5, 0.5, 0.5)),
    ]


def test_everything_else_that_a_file_states():
    more = """_chemical_name_mineral Halite
_chemical_name_common 'table salt'
_chemical_name_structure_type 'rock salt'
_chemical_formula_sum 'Cl Na'
_cell_formula_units_Z 4
_cell_measurement_temperature 293(2)
_exptl_crystal_density_meas 2.165
_exptl_crystal_density_diffrn 2.163
_journal_name_full 'Journal of Examples'
_journal_volume 12
_journal_year 1999
_journal_page_first 345
_journal_paper_doi https://doi.org/10.1000/abc
_publ_section_title 'On salt'
loop_
_publ_author_name
'A. One'
'B. Two'"""
    found = draft(salt(more=more))
    assert (found.name, found.mineral_name, found.structure_type) == ("table salt", "Halite", "rock salt")
    assert (found.temperature_k, found.measured_density_g_cm3, found.formula_units_per_cell) == (
        293.0,
        2.165,
        4.0,
    )
    (source,) = found.sources
    assert source.citation == "A. One; B. Two, On salt, Journal of Examples 12 (1999) 345"
    assert (source.doi, source.year, source.kind, source.density_g_cm3) == (
        "10.1000/abc",
        1999,
        "paper",
        2.163,
    )


def test_dotted_names_of_the_newer_dictionary_are_read():
    text = salt().replace("_cell_length_", "_cell.length_").replace("_cell_angle_", "_cell.angle_")
    text = text.replace("_atom_site_", "_atom_site.").replace(
        "_space_group_name_H-M_alt", "_space_group.name_H-M_alt"
    )
    assert draft(text).formula == "NaCl"


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"c": "5.9"}, ["not cubic", "5.6402, 5.6402, 5.9 Å"]),
        ({"alpha": "60"}, ["not cubic", "60, 90, 90 degrees"]),
        ({"group": "P 4/m m m"}, ["tetragonal, not cubic"]),
        ({"group": "F m -3 q"}, ["not known"]),
        ({"group": "?"}, ["symmetry is not given"]),
        ({"a": "?"}, ["unit cell"]),
        ({"a": "five"}, ["'five' is not a number"]),
        ({"a": "-5.6"}, ["not above 0"]),
        ({"a": "5.64 nm"}, ["not valid CIF"]),
        ({"atoms": "Xx1 Xx 0 0 0 1"}, ["names no element"]),
        ({"atoms": "Na1 Na 0 0 0 2"}, ["occupancy"]),
        ({"atoms": "Na1 Na 0 0 zero 1"}, ["coordinate of Na1", "'zero'"]),
        ({"atoms": "Na1 Na 0 0 0 1\nCl1 Cl 0 0 0 1"}, ["sum to 2"]),
        ({"atoms": "Na1 Na 0 0 0"}, ["not valid CIF"]),
    ],
)
def test_what_cannot_be_a_phase_is_refused_with_the_reason(changes, words):
    try:
        text = reason(salt(**changes))
    except InputError as error:
        text = str(error)
    assert all(word in text for word in words), text


def test_operations_decide_the_setting():
    operations = """loop_
_symmetry_equiv_pos_as_xyz
{}"""
    import gemmi

    for origin, x in [(1, 0.0), (2, 0.125)]:
        listed = gemmi.find_spacegroup_by_name(f"F d -3 m:{origin}").operations()
        more = operations.format("\n".join(f"'{operation.triplet()}'" for operation in listed))
        found = draft(salt(a="5.431", group="F d -3 m", more=more, atoms=f"Si1 Si {x} {x} {x} 1"))
        assert found.space_group == f"F d -3 m:{origin}"
        assert found.lattice_type == "F"


def test_two_origins_are_told_apart_by_the_formula_or_refused():
    at_zero = salt(
        a="5.431",
        group="F d -3 m",
        more="_chemical_formula_sum 'Al2 Mg O4'",
        atoms="""Mg1 Mg 0 0 0 1
Al1 Al 0.625 0.625 0.625 1
O1 O 0.3867 0.3867 0.3867 1""",
    )
    assert draft(at_zero).space_group == "F d -3 m:1"
    assert draft(at_zero.replace("F d -3 m'", "F d -3 m S'")).space_group == "F d -3 m:1"
    silicon = salt(a="5.431", group="F d -3 m", atoms="Si1 Si 0.125 0.125 0.125 1")
    assert "two origins" in reason(silicon)
    assert draft(silicon.replace("F d -3 m'", "F d -3 m Z'")).space_group == "F d -3 m:2"


@pytest.mark.parametrize(
    ("operations", "words"),
    [
        ("'x,y,z'\n'x,y'", "cannot be read"),
        ("'x,y,z'\n'-x,-y,-z'", "triclinic, not cubic"),
        ("'x,y,z'\n'x+1/6,y,z'", "tabulated"),
        ("\n".join(["'x,y,z'"] * 193), "at most 192"),
    ],
)
def test_operations_that_mean_no_cubic_group(operations, words):
    assert words in reason(salt(more=f"loop_\n_space_group_symop_operation_xyz\n{operations}"))


def test_a_cubic_cell_with_all_atoms_listed_in_p1_is_refused():
    assert "triclinic, not cubic" in reason(salt(group="P 1"))


def test_mixed_and_partial_occupancy():
    found = draft(salt(atoms="Fe1 Fe 0 0 0 0.7\nCr1 Cr 0 0 0 0.3\nC1 C 0.5 0.5 0.5 0.5", group="F m -3 m"))
    assert found.sites[0].species == (("Fe", 0.7), ("Cr", 0.3))
    assert found.sites[1].species == (("C", 0.5),)
    assert found.formula == "Cr1Fe2.3333C1.6667".replace("Cr1", "Cr")


def test_occupancies_that_only_rounding_makes_too_large():
    found = draft(salt(atoms="Fe1 Fe 0 0 0 0.667\nCr1 Cr 0 0 0 0.334\nC1 C 0.5 0.5 0.5 1"))
    assert sum(part for _, part in found.sites[0].species) == pytest.approx(1.0)


def test_u_and_b_and_neither():
    text = salt().replace("_atom_site_occupancy", "_atom_site_U_iso_or_equiv").replace(" 1\n", " 0.01\n")
    assert draft(text).sites[0].b_iso == pytest.approx(8 * 3.14159265**2 * 0.01)
    assert draft(salt().replace("_atom_site_occupancy", "_atom_site_B_iso_or_equiv")).sites[0].b_iso == 1.0
    assert draft(salt()).sites[0].b_iso > 0


def test_dummies_and_atoms_without_coordinates_are_left_out():
    atoms = ATOMS + "\nH1 H ? ? ? 1"
    found = read(salt(atoms=atoms))
    assert len(found.draft.sites) == 2
    assert "H1 has no coordinates" in found.notes[0]


def test_a_formula_that_the_sites_do_not_hold_is_remarked():
    found = read(salt(more="_chemical_formula_sum 'Cl Na H2 O'"))
    assert "the sites hold NaCl" in found.notes[0]
    assert found.draft.formula == "NaH2ClO"


def test_an_unreadable_formula_is_taken_from_the_sites():
    found = read(salt(more="_chemical_formula_sum 'salt!'"))
    assert found.draft.formula == "NaCl"
    assert "taken from the sites" in found.notes[0]


def test_a_cell_without_sites_is_an_entry_without_structure():
    text = salt(more="_chemical_formula_sum 'Cl Na'").split("loop_")[0]
    found = read(text)
    assert found.draft.sites == ()
    assert found.draft.lattice_type == "F"
    assert "no atom sites" in found.notes[0]


def test_several_blocks_one_without_a_cell_one_not_cubic():
    text = (
        "data_notes\n_audit_creation_method x\n" + salt() + salt(name="other", c="9.9") + salt(name="third")
    )
    found = list(parse_cif(text, "many.cif"))
    assert [type(one).__name__ for one in found] == ["CifPhase", "CifProblem", "CifPhase"]
    assert found[1].block == "other"


@pytest.mark.parametrize(
    "text",
    [
        "",
        "\n\n",
        "not a cif",
        "data_x\n",
        "data_x\n_cell_length_a\n",
        "data_x\nloop_\n_a\n_b\n1\n",
        "data_x\n;text never closed\n",
    ],
)
def test_texts_that_are_no_cif_say_so(text):
    with pytest.raises(InputError) as caught:
        list(parse_cif(text, "bad.cif"))
    assert "bad.cif" in caught.value.where


def test_a_syntax_error_names_the_line():
    with pytest.raises(InputError) as caught:
        list(parse_cif("data_x\n_cell_length_a 5\nloop_\n_a\n_b\n1 2 3\n", "bad.cif"))
    assert caught.value.where.startswith("bad.cif:")


def test_an_item_given_twice_is_an_error():
    with pytest.raises(InputError, match="not valid CIF"):
        list(parse_cif("data_x\n_cell_length_a 5\n_cell_length_a 6\n", "bad.cif"))


def test_huge_files_and_structures_are_refused_quickly():
    with pytest.raises(InputError, match="million characters"):
        list(parse_cif("#" * 20_000_001, "huge.cif"))
    many = "\n".join(f"Na{i} Na 0.{i:04d} 0.1 0.2 1" for i in range(501))
    assert "501 atom sites" in reason(salt(atoms=many))
    wide = "\n".join(f"Na{i} Na 0.{i:04d} 0.13 0.27 1" for i in range(100))
    assert "atoms in the cell" in reason(salt(atoms=wide))


@pytest.mark.parametrize(
    ("data", "text", "remark"),
    [
        ("data_é\n".encode(), "data_é\n", ""),
        ("data_é\n".encode("latin-1"), "data_é\n", "Latin-1"),
        ("\ufeffdata_x\n".encode(), "data_x\n", ""),
        ("data_x\n".encode("utf-16"), "data_x\n", "UTF-16"),
    ],
)
def test_encodings(data, text, remark):
    read_text, note = decode_cif(data)
    assert read_text == text
    assert remark in note


@pytest.mark.parametrize("data", [b"\x89PNG\r\n\x1a\n\0\0", b"\xff\xfe\x00"])
def test_binary_files_are_no_cif(data, tmp_path):
    path = tmp_path / "picture.cif"
    path.write_bytes(data)
    with pytest.raises(InputError, match="not text"):
        read_cif(path)


def test_a_file_that_is_not_there(tmp_path):
    with pytest.raises(InputError, match="cannot be read"):
        read_cif(tmp_path / "nothing.cif")


def test_letters_beyond_ascii_in_names_survive(tmp_path):
    path = tmp_path / "salt.cif"
    path.write_text(salt(more="_chemical_name_common 'Sel gemme, Köln'"), encoding="utf-8")
    (found,) = read_cif(path)
    assert found.draft.name == "Sel gemme, Köln"


@given(st.text(max_size=200))
def test_any_text_is_read_or_refused_with_our_error(text):
    try:
        list(parse_cif(text, "any.cif"))
    except InputError:
        return


@given(st.text(alphabet="datloop_cel ngh.aF m-3'\"\n5;#0()?", max_size=120))
def test_texts_that_look_like_cif_are_read_or_refused(text):
    try:
        list(parse_cif("data_x\n_cell_length_a 5\n" + text, "any.cif"))
    except InputError:
        return


NASTY = st.text(st.characters(exclude_categories=("Cs",)), max_size=60)


@given(NASTY, NASTY, NASTY)
def test_names_and_citations_of_any_letters_come_back(name, mineral, citation):
    given_draft = Draft(
        name.strip() or "x",
        "NaCl",
        "F",
        5.64,
        mineral_name=mineral,
        a_esd_angstrom=2e-4,
        temperature_k=293.0,
        sources=(Source(citation, "10.1000/x", 2001),),
    )
    found = draft(cif_of(given_draft))
    assert (found.a_angstrom, found.a_esd_angstrom, found.temperature_k) == (5.64, pytest.approx(2e-4), 293.0)
    assert found.sources[0].doi == "10.1000/x"
    plain = " ".join("".join(c if c.isprintable() else " " for c in name).split())
    if plain and plain not in "?." and found.name.isprintable():
        assert found.name == plain[:200] or not name.isprintable()


@given(st.floats(1.5, 40.0), st.none() | st.floats(1e-6, 0.05))
def test_lattice_constants_come_back_whole(a, esd):
    a = round(a, 6)
    found = draft(cif_of(Draft("x", "NaCl", "F", a, a_esd_angstrom=esd)))
    assert found.a_angstrom == pytest.approx(a, abs=0.0 if esd is None else esd)
    if esd is not None and found.a_esd_angstrom is not None:
        assert found.a_esd_angstrom == pytest.approx(esd, rel=0.3)
