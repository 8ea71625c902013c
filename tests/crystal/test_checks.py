import pytest
from starter_phases import starter_phases

from phasedb.crystal.checks import findings_of
from phasedb.crystal.phases import Phase
from phasedb.crystal.structure_types import structure_from_type


def found(formula, lattice, a, symbol=None, **values):
    structure = structure_from_type(symbol, formula) if symbol else None
    phase = Phase(formula, formula, lattice, a, structure=structure, structure_type=symbol, **values)
    return {finding.kind: finding.text for finding in findings_of(phase)}


@pytest.mark.parametrize("name", sorted(starter_phases()))
def test_no_starter_entry_is_warned_of(name):
    assert findings_of(starter_phases()[name]) == ()


def test_nanometres_typed_as_angstrom():
    for formula, a, symbol in [
        ("Cu", 0.3615, "A1"),
        ("NaCl", 0.564, "B1"),
        ("NaCl", 0.564, None),
        ("Cu", 0.3615, None),
    ]:
        texts = found(formula, "F", a, symbol)
        assert texts
        assert all(f"{a:g} Å: nm typed as Å?" in text for text in texts.values())


def test_picometres_typed_as_angstrom():
    assert "361.5 Å: pm typed as Å?" in found("Cu", "F", 361.5, "A1")["contact"]


@pytest.mark.parametrize(
    ("formula", "lattice", "a", "symbol", "instead"),
    [
        ("Cu", "I", 3.615, "A2", "F instead of I"),
        ("Cu", "P", 3.615, "Ah", "F instead of P"),
        ("Fe", "F", 2.8665, "A1", "I instead of F"),
        ("Fe0.7Cr0.3", "F", 2.87, "A1", "I instead of F"),
        ("Po", "F", 3.359, "A1", "P"),
    ],
)
def test_the_wrong_lattice_type_of_a_metal(formula, lattice, a, symbol, instead):
    texts = found(formula, lattice, a, symbol)
    assert instead in texts["contact"]


def test_overfilled_cells_are_named_with_the_limit():
    text = found("Fe", "F", 2.8665, "A1")["packing"]
    assert "would fill 130 % of the cell" in text
    assert "at most 74.05 %" in text
    assert "would fill" in found("Fe", "F", 2.8665)["packing"]


def test_a_cell_too_small_for_any_compound():
    assert "needs" in found("CaF2", "F", 3.2)["packing"] or "need" in found("CaF2", "F", 3.2)["packing"]
    assert found("CaF2", "F", 5.46) == {}


@pytest.mark.parametrize(
    ("formula", "lattice", "a", "density", "words"),
    [
        # an ordered F cell holds 4, 8, 12 ... units
        ("TiO2", "F", 4.2, 5.2, ["Z = 2.9 from density 5.2 g/cm³", "F needs a multiple of 4"]),
        ("TiO2", "I", 4.2, 5.2, ["I needs a multiple of 2"]),
        ("TiO2", "P", 3.0, 2.6, ["Z = 0.529", "P needs a whole number"]),
        ("Fe4O6", "F", 8.2, 5.0, ["F needs a multiple of 2"]),
    ],
)
def test_z_from_density_must_be_a_number_that_the_lattice_allows(formula, lattice, a, density, words):
    text = found(formula, lattice, a, measured_density_g_cm3=density)["density"]
    assert all(word in text for word in words)


def test_density_is_compared_with_the_sites_where_they_are_known():
    assert found("NaCl", "F", 5.64, "B1", measured_density_g_cm3=2.16) == {}
    text = found("NaCl", "F", 5.64, "B1", measured_density_g_cm3=1.0)["density"]
    assert "Z = 1.85" in text
    assert "the sites hold 4" in text


def test_density_of_partly_filled_sites_is_not_judged():
    assert "density" not in found("TiC0.5", "F", 4.3, "B1", measured_density_g_cm3=4.0)
    assert "density" not in found("TiC0.5", "F", 4.3, measured_density_g_cm3=4.0)


def test_a_structure_of_another_lattice_type():
    assert "has lattice type F, the entry says P" in found("NaCl", "P", 5.64, "B1")["structure"]


def test_bonds_that_no_radii_allow():
    short = found("NaCl", "F", 3.0, "B1")["contact"]
    assert "Na1 would lie 1.5 Å from Cl, their radii allow" in short
    assert "contact" in found("NaCl", "F", 12.0, "B1")


@pytest.mark.parametrize(
    ("formula", "symbol", "a"), [("Ar", "A1", 5.256), ("N2", "alpha-N2", 5.644), ("Sn", "A4", 6.49)]
)
def test_solids_that_radii_do_not_describe_pass(formula, symbol, a):
    assert found(formula, "P" if symbol == "alpha-N2" else "F", a, symbol) == {}
