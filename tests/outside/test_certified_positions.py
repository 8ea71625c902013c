"""Line positions against certificates and published d-lists (the source stands in each row of the data)."""

import csv
from pathlib import Path

import pytest

from phasedb.crystal.lattice import allowed_n, d_spacing, families, multiplicity
from phasedb.crystal.radiation import radiation_from_name, two_theta_from_d

DATA = Path(__file__).parent / "data"


def rows(table):
    with (DATA / "published_intensities.csv").open(encoding="utf-8", newline="") as file:
        return [row for row in csv.DictReader(file) if row["table"] == table]


def hkl_of(row):
    return tuple(sorted((abs(int(row[index])) for index in "hkl"), reverse=True))


def n_of(row):
    return sum(index**2 for index in hkl_of(row))


@pytest.mark.parametrize("table", ["nist_srm640d_peak_positions", "nist_srm640e_peak_positions"])
def test_certified_silicon_positions(table):
    # NIST certificates of SRM 640d and 640e: two-theta of 11 lines for Cu K-alpha1, printed to 0.001 degree
    listed = rows(table)
    assert len(listed) == 11
    copper = radiation_from_name("Cu-Ka1").wavelength_angstrom
    for row in listed:
        d = d_spacing(float(row["a_published_angstrom"]), n_of(row))
        # the last digit, and 2e-7 Å of rounding in the wavelength
        assert float(two_theta_from_d(d, copper)) == pytest.approx(float(row["two_theta_deg"]), abs=6e-4)


@pytest.mark.parametrize(
    "table", ["pyfai_lab6_srm660c", "pyfai_lab6_srm660a", "pyfai_ceo2", "pyfai_au", "pyfai_al"]
)
def test_calibrant_d_lists(table):
    listed = rows(table)
    assert len(listed) >= 5
    for row in listed:
        d = float(d_spacing(float(row["a_published_angstrom"]), n_of(row)))
        # lists are printed with six to eight digits, but some carry a rounded a
        assert d == pytest.approx(float(row["d_angstrom"]), rel=2e-5)


@pytest.mark.parametrize(
    ("table", "lattice"),
    [("pyfai_lab6_srm660c", "P"), ("pyfai_ceo2", "F"), ("neutron_calc_uo2", "F"), ("neutron_calc_cu", "F")],
)
def test_multiplicities_of_published_lists(table, lattice):
    for row in rows(table):
        if row["multiplicity"]:
            assert int(row["multiplicity"]) in {multiplicity(lattice, n_of(row)), family(row)}


def family(row):
    from phasedb.crystal.lattice import family_multiplicity

    return family_multiplicity(*hkl_of(row))


def test_families_of_the_international_tables():
    # International Tables C (2006), table 1.2.6.1: h, k, l with a given sum of squares
    listed = {}
    with (DATA / "itc_hkl_sums.csv").open(encoding="utf-8", newline="") as file:
        for row in csv.DictReader(file):
            listed.setdefault(int(row["s"]), set()).add(hkl_of(row))
    assert listed
    for n, expected in listed.items():
        assert set(families(n)) == expected
        assert n in allowed_n("P", 100)
