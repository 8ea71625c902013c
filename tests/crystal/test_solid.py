import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from starter_phases import starter_phases

from phasedb.crystal.formula import parse_formula
from phasedb.crystal.phases import Phase, Site, Structure
from phasedb.crystal.solid import (
    EQUAL_SPHERES,
    contact_radius,
    formula_units_from_density,
    nearest_neighbours,
    packing_fraction,
    solid_of,
    whole_number_step,
    xray_density,
)
from phasedb.crystal.structure_types import structure_from_type

ONE_SPHERE = {"P": "Ah", "I": "A2", "F": "A1"}


def phase(formula, lattice, a, symbol=None, **values):
    structure = structure_from_type(symbol, formula) if symbol else None
    return Phase(formula, formula, lattice, a, structure=structure, structure_type=symbol, **values)


@pytest.mark.parametrize(
    ("lattice", "atoms", "neighbours", "filled"),
    [("P", 1, 6, 0.5236), ("I", 2, 8, 0.6802), ("F", 4, 12, 0.7405)],
)
def test_equal_spheres(lattice, atoms, neighbours, filled):
    # the facts of any textbook: 1, 2, 4 atoms; 6, 8, 12 neighbours; 52, 68, 74 %
    solid = solid_of(phase("Fe", lattice, 3.0, ONE_SPHERE[lattice]))
    assert solid.atoms == atoms
    assert solid.nearest[0].count == pytest.approx(neighbours)
    assert solid.packing_fraction == pytest.approx(filled, abs=5e-5)
    assert EQUAL_SPHERES[lattice] == (neighbours, pytest.approx(filled, abs=5e-5))


@given(st.sampled_from("PIF"), st.floats(2.0, 8.0))
def test_contact_radius_inverts_the_textbook_formulas(lattice, a):
    r = contact_radius(lattice, a)
    assert {"P": 2 * r, "I": 4 * r / np.sqrt(3), "F": 2 * np.sqrt(2) * r}[lattice] == pytest.approx(a)
    assert solid_of(phase("Fe", lattice, a, ONE_SPHERE[lattice])).sphere_radius_angstrom == pytest.approx(r)


@pytest.mark.parametrize(
    ("name", "expected"),
    [
        ("sodium chloride", {"Na1": (6, 0.5), "Cl1": (6, 0.5)}),
        ("caesium chloride", {"Cs1": (8, np.sqrt(0.75)), "Cl1": (8, np.sqrt(0.75))}),
        ("silicon", {"Si1": (4, np.sqrt(3) / 4)}),
        ("calcium fluoride", {"Ca1": (8, np.sqrt(3) / 4), "F1": (4, np.sqrt(3) / 4)}),
        ("copper(I) oxide", {"Cu1": (2, np.sqrt(3) / 4), "O1": (4, np.sqrt(3) / 4)}),
        ("strontium titanate", {"Sr1": (12, np.sqrt(0.5)), "Ti1": (6, 0.5), "O1": (2, 0.5)}),
        ("spinel", {"Mg1": (4, None), "Al1": (6, None)}),
        ("Laves ZrV2", {"Zr1": (12, np.sqrt(11) / 8), "V1": (6, np.sqrt(2) / 4)}),
    ],
)
def test_neighbours_of_every_site(name, expected):
    # coordination numbers of the structure types: any textbook of crystal chemistry
    found = starter_phases()[name]
    near = {item.site: item for item in nearest_neighbours(found.structure, found.a_angstrom)}
    for site, (count, distance) in expected.items():
        assert near[site].count == pytest.approx(count)
        if distance is not None:
            assert near[site].distance_angstrom == pytest.approx(distance * found.a_angstrom)


def test_vacancies_and_split_sites_count_with_their_occupancy():
    carbide = phase("TiC0.5", "F", 4.3, "B1")
    near = {item.site: item for item in nearest_neighbours(carbide.structure, 4.3)}
    assert near["Ti1"].count == pytest.approx(3.0)
    split = Structure(
        "P m -3 m", (Site("O1", (("O", 0.25),), (0.02, 0.0, 0.0)), Site("W1", (("W", 1.0),), (0.5, 0.5, 0.5)))
    )
    # six places 0.1 Å apart hold one and a half atoms between them; the nearest real neighbour is tungsten
    oxygen = nearest_neighbours(split, 4.0)[0]
    assert oxygen.to == ("W",)
    assert oxygen.distance_angstrom > 3.0


def test_a_mistyped_cell_with_vacancies_still_has_neighbours():
    half = Structure("F m -3 m", (Site("Cu1", (("Cu", 0.5),), (0.0, 0.0, 0.0)),))
    assert nearest_neighbours(half, 0.3615)[0].distance_angstrom == pytest.approx(0.3615 / np.sqrt(2))


def test_a_little_carbon_does_not_decide_which_atoms_touch():
    austenite = solid_of(phase("Fe0.96C0.04", "F", 3.6, "A1"))
    assert austenite.sphere_radius_angstrom == pytest.approx(3.6 / np.sqrt(8))
    assert austenite.packing_fraction == pytest.approx(0.7405, abs=5e-5)
    iron, carbon = austenite.nearest
    assert (iron.to, iron.count) == (("Fe",), 12.0)
    assert (carbon.to, carbon.count, carbon.distance_angstrom) == (("Fe",), 6.0, pytest.approx(1.8))


@pytest.mark.parametrize(
    ("name", "density"),
    # CRC Handbook of Chemistry and Physics (from memory), g/cm³ near 298 K
    [
        ("copper", 8.96),
        ("gold", 19.3),
        ("silicon", 2.329),
        ("sodium chloride", 2.17),
        ("magnesium oxide", 3.6),
        ("calcium fluoride", 3.18),
        ("tungsten", 19.3),
        ("potassium chloride", 1.988),
        ("iron (alpha, ferrite)", 7.87),
    ],
)
def test_densities_of_a_handbook(name, density):
    assert solid_of(starter_phases()[name]).density_g_cm3 == pytest.approx(density, rel=0.01)


def test_formula_units_and_density_are_inverse():
    formula = parse_formula("MgAl2O4")
    density = xray_density(formula, 8, 8.0836)
    assert formula_units_from_density(formula, density, 8.0836) == pytest.approx(8.0)


def test_packing_with_given_radii():
    # NaCl with Shannon's radii 1.02 and 1.81 Å: 4 (4/3) pi (1.02³ + 1.81³) / 5.64³
    salt = phase("NaCl", "F", 5.64, "B1")
    expected = 4 * 4 / 3 * np.pi * (1.02**3 + 1.81**3) / 5.64**3
    assert packing_fraction(salt.structure, 5.64, {"Na": 1.02, "Cl": 1.81}) == pytest.approx(expected)
    with pytest.raises(KeyError):
        packing_fraction(salt.structure, 5.64, {"Na": 1.02})


def test_without_sites_the_formula_units_give_the_density():
    solid = solid_of(phase("NaCl", "F", 5.64, formula_units_per_cell=4.0))
    assert solid.density_g_cm3 == pytest.approx(2.164, rel=1e-3)
    assert (solid.atoms, solid.packing_fraction, solid.nearest) == (8.0, None, ())
    assert solid_of(phase("NaCl", "F", 5.64)).density_g_cm3 is None


def test_hydrogen_without_sites_still_weighs():
    # potassium alum 1.76 g/cm³: CRC Handbook (from memory); without hydrogen it would be 1.66
    assert solid_of(starter_phases()["potassium alum"]).density_g_cm3 == pytest.approx(1.757, rel=0.01)


@pytest.mark.parametrize(
    ("lattice", "formula", "expected"),
    [
        ("F", "NaCl", (1, 4)),
        ("F", "Fe4O6", (2, 4)),
        ("I", "Fe", (1, 2)),
        ("P", "CsCl", (1, 1)),
        ("F", "TiC0.85", None),
    ],
)
def test_allowed_multiples_of_z(lattice, formula, expected):
    assert whole_number_step(lattice, parse_formula(formula)) == expected
