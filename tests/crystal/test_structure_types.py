import pytest
from hypothesis import given
from hypothesis import strategies as st
from starter_phases import starter_phases, starter_rows

from phasedb.crystal.formula import parse_formula
from phasedb.crystal.own_type import is_complete, structure_from_sites
from phasedb.crystal.structure import cell_contents, space_group
from phasedb.crystal.structure_types import (
    STRUCTURE_TYPES,
    resolve_structure_type,
    structure_from_type,
    structure_type_symbols,
)
from phasedb.errors import InputError, UnknownNameError


def species(structure):
    return {site.label: {symbol: round(part, 4) for symbol, part in site.species} for site in structure.sites}


def test_every_spelling_of_the_starter_library_is_known():
    spelled = {row["structure_type"] for row in starter_rows()}
    assert len(spelled) == 69
    assert {text: resolve_structure_type(text) for text in spelled} == {text: text for text in spelled}


@pytest.mark.parametrize(
    ("text", "symbol"),
    [
        ("rock salt", "B1"),
        ("Rock-Salt structure", "B1"),
        ("A_h", "Ah"),
        ("simple cubic", "Ah"),
        ("zinc blende", "B3"),
        ("fluorite", "C1"),
        ("antifluorite", "C1 (anti)"),
        ("anti C1", "C1 (anti)"),
        ("L12", "L1_2"),
        ("half-Heusler", "C1_b"),
        ("bixbyite", "D5_3"),
        ("spinel", "H1_1"),
        ("H1_1 (normal)", "H1_1"),
        ("inverse spinel", "H1_1 (inverse)"),
        ("h11 (partly inverse)", "H1_1 (partly inverse)"),
        ("perovskite", "E2_1"),
        ("bcc", "A2"),
        ("A15 type", "A15"),
    ],
)
def test_names_of_types(text, symbol):
    assert resolve_structure_type(text) == symbol


@pytest.mark.parametrize("text", ["", "type", "B9", "structure", "spinels!"])
def test_unknown_names_are_none(text):
    assert resolve_structure_type(text) is None


def test_unknown_type_says_what_is_known():
    with pytest.raises(UnknownNameError) as caught:
        structure_from_type("B99", "NaCl")
    assert all(symbol in caught.value.hint for symbol in structure_type_symbols())


def test_every_type_names_a_cubic_space_group_and_uses_its_parameters():
    for kind in STRUCTURE_TYPES:
        assert space_group(kind.space_group).number >= 195
        text = " ".join(coordinate for site in kind.sites for coordinate in site.position)
        assert all(name in text for name in kind.parameters)


@pytest.mark.parametrize(
    ("symbol", "formula", "expected"),
    [
        ("A2", "Fe0.7Cr0.3", {"Fe/Cr1": {"Fe": 0.7, "Cr": 0.3}}),
        ("A1", "Fe0.96C0.04", {"Fe1": {"Fe": 1.0}, "C1": {"C": 0.0417}}),
        ("B1", "TiC0.85", {"Ti1": {"Ti": 1.0}, "C1": {"C": 0.85}}),
        ("B1", "Fe0.947O", {"Fe1": {"Fe": 0.947}, "O1": {"O": 1.0}}),
        ("B1", "(Ti,V)N", {"Ti/V1": {"Ti": 0.5, "V": 0.5}, "N1": {"N": 1.0}}),
        ("C1", "Zr0.85Y0.15O1.925", {"Zr/Y1": {"Zr": 0.85, "Y": 0.15}, "O1": {"O": 0.9625}}),
        ("C1 (anti)", "Li2O", {"Li1": {"Li": 1.0}, "O1": {"O": 1.0}}),
        ("C1", "Li2O", {"O1": {"O": 1.0}, "Li1": {"Li": 1.0}}),
        ("C1_b", "MgAgAs", {"Mg1": {"Mg": 1.0}, "Ag1": {"Ag": 1.0}, "As1": {"As": 1.0}}),
        ("B2", "Fe0.55Al0.45", {"Al/Fe1": {"Al": 0.9, "Fe": 0.1}, "Fe1": {"Fe": 1.0}}),
        ("A15", "Nb0.76Sn0.24", {"Nb1": {"Nb": 1.0}, "Sn/Nb1": {"Sn": 0.96, "Nb": 0.04}}),
        ("E2_1", "La0.7Sr0.3MnO3", {"La/Sr1": {"La": 0.7, "Sr": 0.3}, "Mn1": {"Mn": 1.0}, "O1": {"O": 1.0}}),
        ("E2_1 (inverse)", "LiBaF3", {"Ba1": {"Ba": 1.0}, "Li1": {"Li": 1.0}, "F1": {"F": 1.0}}),
        ("E2_1 (anti)", "Mn3GaN", {"Mn1": {"Mn": 1.0}, "Ga1": {"Ga": 1.0}, "N1": {"N": 1.0}}),
        ("H1_1", "MgAl2O4", {"Mg1": {"Mg": 1.0}, "Al1": {"Al": 1.0}, "O1": {"O": 1.0}}),
        ("H1_1", "Fe2GeO4", {"Ge1": {"Ge": 1.0}, "Fe1": {"Fe": 1.0}, "O1": {"O": 1.0}}),
        (
            "H1_1 (inverse)",
            "NiFe2O4",
            {"Fe1": {"Fe": 1.0}, "Ni/Fe1": {"Ni": 0.5, "Fe": 0.5}, "O1": {"O": 1.0}},
        ),
        (
            "H1_1 (inverse)",
            "Mg2TiO4",
            {"Mg1": {"Mg": 1.0}, "Mg/Ti1": {"Mg": 0.5, "Ti": 0.5}, "O1": {"O": 1.0}},
        ),
        ("H1_1", "Li4Ti5O12", {"Li1": {"Li": 1.0}, "Li/Ti1": {"Li": 0.1667, "Ti": 0.8333}, "O1": {"O": 1.0}}),
        ("H1_1", "Zn0.5Ni0.5Fe2O4", {"Zn/Ni1": {"Zn": 0.5, "Ni": 0.5}, "Fe1": {"Fe": 1.0}, "O1": {"O": 1.0}}),
        ("H1_1", "Fe2O3", {"Fe1": {"Fe": 1.0}, "Fe2": {"Fe": 0.8333}, "O1": {"O": 1.0}}),
        (
            "defect spinel",
            "Fe2O3",
            {
                "Fe1": {"Fe": 1.0},
                "Fe2": {"Fe": 1.0},
                "Fe3": {"Fe": 0.3333},
                "O1": {"O": 1.0},
                "O2": {"O": 1.0},
            },
        ),
        ("garnet", "Y3Al5O12", {"Y1": {"Y": 1.0}, "Al1": {"Al": 1.0}, "Al2": {"Al": 1.0}, "O1": {"O": 1.0}}),
    ],
)
def test_elements_take_the_sites(symbol, formula, expected):
    assert species(structure_from_type(symbol, formula)) == expected


def test_inversion_is_a_matter_of_degree():
    normal, random, inverse = (
        structure_from_type("partly inverse spinel", "MgFe2O4", free_parameters=f"inversion={value}")
        for value in (0, 2 / 3, 1)
    )
    assert dict(normal.sites[0].species) == {"Mg": 1.0}
    assert dict(random.sites[0].species) == pytest.approx({"Mg": 1 / 3, "Fe": 2 / 3})
    assert dict(random.sites[1].species) == pytest.approx({"Mg": 1 / 3, "Fe": 2 / 3})
    assert dict(inverse.sites[0].species) == {"Fe": 1.0}
    for structure in (normal, random, inverse):
        assert cell_contents(structure) == pytest.approx({"Mg": 8, "Fe": 16, "O": 32})


@pytest.mark.parametrize(
    ("symbol", "formula", "words"),
    [
        ("B1", "NaCl2", ["4 : 4", "1 Na : 2 Cl"]),
        ("A1", "FeO", ["4 atoms"]),
        ("E2_1", "NaCl", ["1 : 1 : 3"]),
        ("H1_1", "CaF2", ["3 cations to 4 anions", "CaF2 has 2 to 4"]),
        ("H1_1", "MgAl3O4", ["MgAl3O4 has 4 to 4"]),
        ("C2", "Fe", ["4 : 8"]),
        ("sulphohalite", "Na6(SO4)2Cl2", ["sulphohalite holds"]),
        ("H1_1", "Fe", ["3 cations to 4 anions"]),
    ],
)
def test_a_formula_that_does_not_fit_is_refused_with_numbers(symbol, formula, words):
    with pytest.raises(InputError) as caught:
        structure_from_type(symbol, formula)
    assert all(word in str(caught.value) for word in words)


@pytest.mark.parametrize(
    ("symbol", "formula", "parameters", "expected"),
    [
        # the same structure in both origins of Fd-3m, and through the inversion centre
        ("H1_1", "MgAl2O4", "O(0.2617,0.2617,0.2617)", (0.2617, 0.2617, 0.2617)),
        ("H1_1", "MgAl2O4", "O(0.3867,0.3867,0.3867) [setting F d 3 m %var1%]", (0.2617, 0.2617, 0.2617)),
        ("H1_1", "MgAl2O4", "O(-0.1367,-0.1367,-0.1367)", (0.2617, 0.2617, 0.2617)),
        ("H1_1", "MgAl2O4", "u=0.2617", (0.2617, 0.2617, 0.2617)),
        ("H1_1", "MgAl2O4", "u=0.3867", (0.2617, 0.2617, 0.2617)),
        # a spinel far from the typical parameter is not bent towards it
        ("H1_1", "Fe2SiO4", "O(0.2409,0.2409,0.2409)", (0.2409, 0.2409, 0.2409)),
        # lanthanum at the corner or in the middle of the cell
        ("D2_1", "LaB6", "B(0.1975,0.5,0.5)", (0.1975, 0.5, 0.5)),
        ("D2_1", "LaB6", "B(0.3025,0,0)", (0.1975, 0.5, 0.5)),
        ("C2", "FeS2", "S1(0.384,0.384,0.384)", (0.384, 0.384, 0.384)),
        ("C2", "FeS2", "anion 8c x=.384", (0.384, 0.384, 0.384)),
        ("C2", "FeS2", "S(0.616,0.616,0.616)", (0.384, 0.384, 0.384)),
        # the other setting of Ia-3d, axes exchanged
        ("garnet", "Mg3Al2Si3O12", "O(0.03285,0.05015,0.65335)", (0.03285, 0.05015, 0.65335)),
        ("garnet", "Y3Al5O12", "O(.9682,.0511,.1498)", (-0.0318, 0.0511, 0.1498)),
    ],
)
def test_coordinates_are_brought_to_one_setting(symbol, formula, parameters, expected):
    structure = structure_from_type(symbol, formula, free_parameters=parameters)
    assert structure.sites[-1].position == pytest.approx(expected, abs=1e-9)
    assert structure.assumed == ()


def test_typical_values_are_named_as_assumed():
    assert structure_from_type("H1_1", "MgAl2O4").assumed == ("u = 0.2625 (O)",)
    partly = structure_from_type("D5_3", "Y2O3", free_parameters="x=.39, y=.152, z=.38")
    assert partly.assumed == ("x2 = 0.9675 (Y)",)
    assert structure_from_type("B1", "NaCl").assumed == ()


def test_hydrogen_without_known_sites_is_said():
    assert "hydrogen is left out" in starter_phases()["potassium alum"].structure.assumed[-1]


@pytest.mark.parametrize(
    ("symbol", "formula", "parameters", "words"),
    [
        ("H1_1", "MgAl2O4", "O(0.1,0.2,0.3)", "from where the type has them"),
        ("H1_1", "MgAl2O4", "u=0.1", "from where the type has them"),
        ("H1_1", "MgAl2O4", "Ca(0.26,0.26,0.26)", "no site of the type is left"),
        ("H1_1", "MgAl2O4", "Q(0.26,0.26,0.26)", "names no element"),
        ("H1_1", "MgAl2O4", "nonsense", "is not read"),
        ("H1_1", "MgAl2O4", "O(1/0,0,0)", "is not a number"),
        ("B1", "NaCl", "x=0.3", "no free parameter x"),
        ("D5_3", "Y2O3", "w=0.3", "it has x2, x, y, z"),
        ("partly inverse spinel", "MgFe2O4", "inversion=1.5", "expected 0"),
    ],
)
def test_coordinates_that_do_not_belong_are_refused(symbol, formula, parameters, words):
    with pytest.raises(InputError, match=words):
        structure_from_type(symbol, formula, free_parameters=parameters)


def test_an_own_type_is_taken_from_space_group_and_sites():
    structure = structure_from_sites("F m -3 m", "Ti0.7V0.3(0,0,0); C0.85(1/2,1/2,1/2)", "Ti0.7V0.3C0.85")
    assert cell_contents(structure) == pytest.approx({"Ti": 2.8, "V": 1.2, "C": 3.4})
    assert is_complete("Ti(0,0,0); C(1/2,1/2,1/2)", "TiC")
    assert not is_complete("C(1/2,1/2,1/2)", "TiC")
    assert not is_complete("u=0.3", "TiC")


@pytest.mark.parametrize(
    ("group", "sites", "formula", "words"),
    [
        ("F m -3 m", "Na(0,0,0); Cl(1/4,1/4,1/4)", "NaCl", "33.3 % Na atoms, NaCl has 50.0 %"),
        ("F d -3 m", "Si(1/8,1/8,1/8)", "Si", "two choices of origin"),
        ("P 4/m m m", "Na(0,0,0)", "Na", "not cubic"),
        ("F m -3 m", "", "Na", "not given"),
        ("F m -3 m", "Na(0,0,0); Na(0,1/2,1/2)", "Na", "same place"),
    ],
)
def test_an_own_type_that_does_not_amount_to_the_formula_is_refused(group, sites, formula, words):
    with pytest.raises(InputError, match=words):
        structure_from_sites(group, sites, formula)


FORMULAS = st.lists(
    st.tuples(
        st.sampled_from(["Fe", "Cr", "Ti", "Na", "Mg", "Al", "O", "S", "F", "C", "N", "H", "Si"]),
        st.integers(1, 12),
    ),
    min_size=1,
    max_size=5,
    unique_by=lambda pair: pair[0],
)


@given(st.sampled_from(structure_type_symbols()), FORMULAS, st.sampled_from([1, 2, 10]))
def test_any_formula_fills_a_type_or_is_refused(symbol, counts, divisor):
    """A structure that is given holds the formula: no atom is lost or invented, no site is overfull."""
    formula = "".join(f"{element}{count / divisor:g}" for element, count in counts)
    try:
        structure = structure_from_type(symbol, formula)
    except InputError as error:
        assert formula in str(error) or "sites" in str(error)
        return
    composition = parse_formula(formula).composition
    contents = cell_contents(structure)
    left_out = set(composition) - set(contents)
    assert left_out <= {"H"}
    scale = {symbol: contents[symbol] / composition[symbol] for symbol in contents}
    assert max(scale.values()) == pytest.approx(min(scale.values()), rel=1e-6)


@given(st.text(alphabet="OMgx(),.;=[] 0123456789-/u", max_size=40))
def test_any_parameter_text_is_read_or_refused(text):
    try:
        structure = structure_from_type("H1_1", "MgAl2O4", free_parameters=text)
    except InputError:
        return
    assert len(structure.sites) == 3
