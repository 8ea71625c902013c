"""Classical absences and weak lines: what tells look-alikes apart."""

import numpy as np
import pytest
from starter_phases import one_phase_of_each_type, starter_phases

from phasedb.crystal.intensity import line_strengths, relative_intensities
from phasedb.crystal.radiation import radiation_from_name

COPPER = radiation_from_name("Cu-Ka1")


def intensities(name):
    """Return relative intensities of a starter phase by N, Cu K-alpha1."""
    phase = starter_phases()[name]
    n, strength = line_strengths(phase)
    return dict(
        zip(n.tolist(), relative_intensities(n, strength, phase.a_angstrom, COPPER).tolist(), strict=True)
    )


@pytest.mark.parametrize("name", ["silicon", "germanium", "diamond", "tin (alpha, grey)"])
def test_diamond_shows_only_its_own_lines(name):
    # International Tables A, Fd-3m 8a: hkl all odd, or all even with h + k + l = 4n
    assert sorted(intensities(name))[:12] == [3, 8, 11, 16, 19, 24, 27, 32, 35, 40, 43, 48]


def test_zinc_blende_fills_the_absences_of_diamond_by_the_difference_of_its_atoms():
    # GaAs 200 is 0.1 of 111 (31 and 33 electrons); ZnS 200 is near 9 (30 and 16)
    assert 0.02 < intensities("GaAs")[4] < 0.3
    assert intensities("zinc sulfide (sphalerite)")[4] == pytest.approx(9.5, abs=2)
    assert 4 not in intensities("silicon")


def test_odd_lines_of_rock_salt_show_the_difference_of_the_ions():
    # KCl: two ions of 18 electrons each, the classical example (Bragg 1913); NaCl: 10 and 18
    potassium, sodium = intensities("potassium chloride"), intensities("sodium chloride")
    assert potassium[3] < 1.0
    assert sodium[3] > 5.0
    assert potassium[4] == sodium[4] == 100.0


@pytest.mark.parametrize(
    ("name", "low", "high"),
    [
        ("magnesium oxide", 9, 13),
        ("titanium nitride", 60, 80),
        ("sodium fluoride", 1, 3),
        ("titanium carbide", 75, 95),
    ],
)
def test_first_line_of_rock_salt_types(name, low, high):
    # calculated 111 against 200 = 100: NaF 1.7, MgO 10, TiN 70, TiC 89 (independent calculation)
    found = intensities(name)
    assert low < 100 * found[3] / found[4] < high


def test_superlattice_lines_of_the_caesium_chloride_type():
    # Cs and I have 54 electrons each as ions; Cs and Cl 54 and 18
    assert intensities("caesium iodide")[1] < 0.2
    assert intensities("caesium chloride")[1] > 20.0
    assert intensities("nickel aluminide NiAl")[1] == pytest.approx(17, abs=4)
    assert intensities("iron cobalt (ordered)")[1] < 0.5


@pytest.mark.parametrize(
    ("name", "absent", "present"),
    # International Tables A, reflection conditions of the space groups
    [
        ("pyrite", [1, 2, 10, 15], [3, 4, 5, 6, 8, 9, 11]),  # Pa-3: 0kl k = 2n
        ("yttrium oxide", [2, 10], [4, 6, 8, 12, 14, 16]),  # Ia-3: 0kl k, l = 2n; 310 is absent
        ("yttrium aluminium garnet (YAG)", [2, 4, 10, 12, 18], [6, 8, 14, 16, 20, 22, 24, 26]),  # Ia-3d
        ("chromium silicide Cr3Si", [1, 3, 9, 11], [2, 4, 5, 6, 8, 10]),  # Pm-3n: hhl l = 2n
        ("copper(I) oxide", [1], [2, 3, 4, 6, 8, 11]),  # Pn-3m: 0kl k + l = 2n
        ("manganese silicide MnSi", [1], [2, 3, 4, 5, 6]),  # P213: h00 h = 2n
        ("eulytine", [2, 4, 12], [6, 8, 10, 14]),  # I-43d
        ("spinel", [4, 20], [3, 8, 11, 12, 16, 19, 24]),  # Fd-3m
    ],
)
def test_glide_and_screw_absences(name, absent, present):
    found = intensities(name)
    assert not set(absent) & set(found)
    assert set(present) <= set(found)


@pytest.mark.parametrize("name", sorted(one_phase_of_each_type()))
def test_no_line_breaks_the_space_group(name):
    """Lines with strength are lines of which at least one plane is not systematically absent (gemmi)."""
    import gemmi

    phase = one_phase_of_each_type()[name]
    operations = gemmi.find_spacegroup_by_name(phase.structure.space_group).operations()
    top = 40
    allowed = {
        sum(index * index for index in hkl)
        for hkl in np.ndindex(7, 7, 7)
        if any(hkl) and not operations.is_systematically_absent(hkl)
    }
    n, _ = line_strengths(phase, n_max=top)
    assert set(n.tolist()) <= allowed
