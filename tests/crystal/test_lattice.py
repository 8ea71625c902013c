import itertools

import gemmi
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from phasedb.crystal.lattice import (
    ATOMS_PER_CELL,
    LATTICE_TYPES,
    allowed_n,
    check_lattice_type,
    d_spacing,
    families,
    family_multiplicity,
    hkl_text,
    is_allowed,
    multiplicity,
    n_possible,
)
from phasedb.errors import InputError

N_TOP = 300


def brute_force(lattice):
    """Count the planes of each N over a whole sphere of hkl."""
    top = int(np.sqrt(N_TOP))
    counts = {}
    for h, k, l in itertools.product(range(-top, top + 1), repeat=3):
        n = h * h + k * k + l * l
        if 0 < n <= N_TOP and is_allowed(lattice, h, k, l):
            counts[n] = counts.get(n, 0) + 1
    return counts


@pytest.mark.parametrize(
    ("lattice", "first"),
    [  # the sequences of any handbook of powder diffraction (from memory)
        ("P", [1, 2, 3, 4, 5, 6, 8, 9, 10, 11, 12, 13, 14, 16, 17, 18, 19, 20, 21, 22, 24]),
        ("I", [2, 4, 6, 8, 10, 12, 14, 16, 18, 20, 22, 24, 26, 30]),
        ("F", [3, 4, 8, 11, 12, 16, 19, 20, 24, 27, 32, 35, 36, 40]),
    ],
)
def test_first_allowed_n(lattice, first):
    assert allowed_n(lattice, first[-1]).tolist() == first


def test_no_sum_of_three_squares_has_legendres_form():
    # Legendre 1798: n is a sum of three squares unless n = 4^a (8b + 7)
    forbidden = {4**a * (8 * b + 7) for a in range(5) for b in range(N_TOP)}
    assert allowed_n("P", N_TOP).tolist() == [n for n in range(1, N_TOP + 1) if n not in forbidden]


@pytest.mark.parametrize("lattice", LATTICE_TYPES)
def test_multiplicities_count_every_plane_of_the_sphere(lattice):
    counts = brute_force(lattice)
    assert allowed_n(lattice, N_TOP).tolist() == sorted(counts)
    assert all(multiplicity(lattice, n) == count for n, count in counts.items())


@pytest.mark.parametrize(("lattice", "symbol"), [("P", "P m -3 m"), ("I", "I m -3 m"), ("F", "F m -3 m")])
def test_absences_agree_with_an_independent_symmetry_library(lattice, symbol):
    operations = gemmi.find_spacegroup_by_name(symbol).operations()
    for hkl in itertools.product(range(-4, 5), repeat=3):
        assert is_allowed(lattice, *hkl) == (not operations.is_systematically_absent(hkl))


def test_family_multiplicities():
    # International Tables C (2006), table 1.2.4.1 (from memory): multiplicities in m-3m
    expected = {
        (1, 0, 0): 6,
        (1, 1, 0): 12,
        (1, 1, 1): 8,
        (2, 1, 0): 24,
        (2, 1, 1): 24,
        (2, 2, 1): 24,
        (3, 2, 1): 48,
    }
    assert {hkl: family_multiplicity(*hkl) for hkl in expected} == expected


def test_families_that_share_a_line_are_listed_together():
    assert families(9) == ((2, 2, 1), (3, 0, 0))
    assert hkl_text(27, "F") == "333/511"
    assert hkl_text(3) == "111"
    assert hkl_text(101, "P") == "764/861/942/10 1 0"
    assert families(7) == ()


def test_atoms_per_cell():
    assert ATOMS_PER_CELL == {"P": 1, "I": 2, "F": 4}


@given(st.floats(1.5, 50.0), st.integers(1, 1000))
def test_d_spacing_is_exact(a, n):
    assert (a / d_spacing(a, n)) ** 2 == pytest.approx(n, rel=1e-12)


def test_lines_possible_between_two_n():
    # counts of distinct N up to 20, 36, 50, 100 (computed independently in brute force above for N to 300)
    assert [n_possible("P", 1, top) for top in (20, 36, 50, 100)] == [18, 31, 43, 85]
    assert [n_possible("I", 1, top) for top in (20, 36, 50, 100)] == [10, 17, 24, 47]
    assert [n_possible("F", 1, top) for top in (20, 36, 50, 100)] == [8, 13, 17, 35]
    assert n_possible("F", 4, 12) == 4


def test_allowed_n_cannot_be_changed_by_a_caller():
    with pytest.raises(ValueError, match="read-only"):
        allowed_n("P", 20)[0] = 7


@pytest.mark.parametrize("text", ["f", " F ", "P"])
def test_lattice_types_are_read(text):
    assert check_lattice_type(text) == text.strip().upper()


@pytest.mark.parametrize("text", ["", "C", "FF", "fcc"])
def test_other_lattice_types_are_refused(text):
    with pytest.raises(InputError, match="expected P, I or F"):
        check_lattice_type(text)
