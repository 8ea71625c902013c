import gemmi
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from starter_phases import starter_phases

from phasedb.crystal.phases import Site, Structure
from phasedb.crystal.structure import (
    cell_atoms,
    cell_contents,
    check_structure,
    is_partly_occupied,
    orbit,
    site_multiplicity,
    space_group,
)
from phasedb.errors import InputError

CUBIC = sorted({sg.xhm() for sg in gemmi.spacegroup_table() if sg.number >= 195})


def site(*species, at=(0.0, 0.0, 0.0), label="A1", b_iso=0.5):
    return Site(label, tuple(species), at, b_iso)


@pytest.mark.parametrize(
    ("name", "number", "lattice"),
    [
        ("Fm-3m", 225, "F"),
        ("F m 3 m", 225, "F"),
        ("P213", 198, "P"),
        ("I a -3 d", 230, "I"),
        ("Fd-3m:1", 227, "F"),
    ],
)
def test_space_groups_are_found(name, number, lattice):
    found = space_group(name)
    assert (found.number, found.lattice_type) == (number, lattice)


@pytest.mark.parametrize(
    ("name", "words"),
    [
        ("Fd-3m", "two choices of origin"),
        ("Pn-3", "two choices of origin"),
        ("P4/mmm", "tetragonal, not cubic"),
        ("R-3m", "trigonal, not cubic"),
        ("", "not known"),
        ("Fm-3m" * 20, "not known"),
        ("hello", "not known"),
    ],
)
def test_other_space_groups_are_refused(name, words):
    with pytest.raises(InputError, match=words):
        space_group(name)


@pytest.mark.parametrize("name", CUBIC)
def test_operations_form_a_group_of_the_right_order(name):
    # an independent count: the library's own list of all operations
    found = space_group(name)
    assert len(found.rotations) * len(found.centring) == len(
        list(gemmi.find_spacegroup_by_name(name).operations())
    )
    general = orbit(name, (0.1371, 0.2843, 0.0519))
    assert len(general) == len(found.rotations) * len(found.centring)


@given(
    st.sampled_from(CUBIC),
    st.tuples(*[st.sampled_from([0.0, 0.125, 0.25, 0.375, 0.5, 0.137, 0.29, 0.333])] * 3),
)
def test_orbits_agree_with_an_independent_library(name, position):
    structure = gemmi.SmallStructure()
    structure.cell.set(100, 100, 100, 90, 90, 90)  # it merges atoms nearer than 0.4 Å
    structure.spacegroup = gemmi.find_spacegroup_by_name(name)
    atom = gemmi.SmallStructure.Site()
    atom.label, atom.type_symbol, atom.element = "Fe1", "Fe", gemmi.Element("Fe")
    atom.fract = gemmi.Fractional(*position)
    structure.add_site(atom)
    structure.setup_cell_images()
    theirs = np.array([other.fract.tolist() for other in structure.get_all_unit_cell_sites()]) % 1.0
    ours = orbit(name, position)
    difference = ours[:, None, :] - theirs[None, :, :]
    difference -= np.round(difference)
    distance = np.abs(difference).max(axis=2)
    assert len(ours) == len(theirs)
    assert distance.min(axis=0).max() < 1e-9
    assert distance.min(axis=1).max() < 1e-9


@given(st.sampled_from(CUBIC), st.tuples(*[st.floats(0.0, 0.999)] * 3))
def test_any_image_of_a_position_gives_the_same_orbit(name, position):
    atoms = orbit(name, position)
    again = orbit(name, atoms[-1])
    assert len(again) == len(atoms) == site_multiplicity(name, position)
    order = len(space_group(name).rotations) * len(space_group(name).centring)
    assert order % len(atoms) == 0


def test_a_position_at_the_edge_of_being_special_is_decided_whole():
    # some images lie inside the limit and some just outside: all of them must merge, or none
    for distance in (0.0009, 0.0011, 0.00195, 0.0021, 0.003):
        assert site_multiplicity("F -4 3 c", (0.0, 0.0, 1.0 - distance)) in (8, 48)


def test_a_rounded_special_position_is_one_atom():
    # published as 0.3333 or 0.125 to three decimals, never exactly
    assert site_multiplicity("F d -3 m:2", (0.1249, 0.1251, 0.125)) == 8
    assert site_multiplicity("F m -3 m", (0.2501, 0.2499, 0.25)) == 8


def test_contents_count_occupancies():
    structure = Structure("F m -3 m", (site(("Ti", 1.0)), site(("C", 0.85), at=(0.5, 0.5, 0.5), label="C1")))
    assert cell_contents(structure) == {"Ti": 4.0, "C": pytest.approx(3.4)}
    assert [is_partly_occupied(one) for one in structure.sites] == [False, True]
    assert len(cell_atoms(structure).positions) == 8


@pytest.mark.parametrize(
    ("sites", "words"),
    [
        ((), "no site"),
        ((site(("Xx", 1.0)),), "no element"),
        ((site(("Fe", 0.0)),), "occupancy"),
        ((site(("Fe", 1.2)),), "occupancy"),
        ((site(("Fe", 0.7), ("Cr", 0.7)),), "sum to 1.4"),
        ((site(("Fe", 1.0), at=(float("nan"), 0, 0)),), "not usable"),
        ((site(("Fe", 1.0), b_iso=-1.0),), "B = -1"),
        ((site(("Fe", 1.0)), site(("Cr", 1.0), label="B1")), "hold the same place"),
        ((site(("Fe", 1.0)), site(("Cr", 1.0), at=(0.5, 0.5, 0.0), label="B1")), "hold the same place"),
    ],
)
def test_impossible_structures_are_refused(sites, words):
    with pytest.raises(InputError, match=words):
        check_structure(Structure("F m -3 m", sites))


def test_a_structure_of_another_lattice_type_is_refused():
    with pytest.raises(InputError, match="has lattice type F, the phase has P"):
        check_structure(Structure("F m -3 m", (site(("Cu", 1.0)),)), "P")


def test_two_half_filled_sites_may_share_a_place():
    check_structure(Structure("P m -3 m", (site(("Fe", 0.5)), site(("Cr", 0.5), label="B1"))))


def test_every_starter_structure_passes_the_door():
    for phase in starter_phases().values():
        check_structure(phase.structure, phase.lattice_type)
