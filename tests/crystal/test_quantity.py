"""Numbers as people write them: units, uncertainties, likely slips, and back to text."""

from __future__ import annotations

from math import isclose

import pytest
from hypothesis import given
from hypothesis import strategies as st
from uncertainties import ufloat_fromstr

from phasedb.crystal.quantity import (
    KX_IN_ANGSTROM,
    format_measured,
    parse_lattice_constant,
    parse_measured,
)
from phasedb.errors import InputError


@pytest.mark.parametrize(
    ("text", "angstrom", "esd"),
    [
        ("4.2417", 4.2417, None),
        ("4.2417(2)", 4.2417, 0.0002),
        (" 4.2417 (12) ", 4.2417, 0.0012),
        ("0.42417 nm", 4.2417, None),
        ("0.42417(2)nm", 4.2417, 0.0002),
        ("424.17 pm", 4.2417, None),
        ("4.2417 Å", 4.2417, None),  # the letter
        ("4.2417 Å", 4.2417, None),  # the old sign of the unit
        ("4.2417 A", 4.2417, None),
        ("4.2417 angstrom", 4.2417, None),
        ("12", 12.0, None),
        ("0.36 Å", 0.36, None),  # written out: left to the warnings at the door
    ],
)
def test_lattice_constants_are_read_in_every_unit(text, angstrom, esd):
    read = parse_lattice_constant(text)
    assert read.angstrom == angstrom
    assert read.esd_angstrom == esd
    assert read.text == text.strip()


def test_kx_is_converted_by_the_factor_of_1947_and_carries_its_doubt():
    read = parse_lattice_constant("4.2332 kX")
    assert isclose(read.angstrom, 4.2332 * KX_IN_ANGSTROM, rel_tol=1e-15)
    assert isclose(read.esd_angstrom, 6e-5 * read.angstrom)
    assert isclose(parse_lattice_constant("4.233(2) kX").esd_angstrom, 0.002 * 1.00202)


@pytest.mark.parametrize(
    ("text", "said"),
    [
        ("0.42417", "4.2417 (Å)"),
        ("1.5", "15 (Å)"),
        ("0.2", "2 (Å)"),
        ("424.17", "4.2417 (Å)"),
        ("150", "1.5 (Å)"),
        ("2500", "25 (Å)"),
        ("0", "expected 1.5 to 150"),
        ("4000", "expected 1.5 to 150"),
        ("-4.2", "expected 1.5 to 150"),
        ("1e5", "expected 1.5 to 150"),
        ("4,2417", "decimal point"),
        ("4.2417()", "brackets"),
        ("4.2417(2.)", "brackets"),
        ("4.2417(0)", "uncertainty of 0"),
        ("4.2417 inch", "nm, pm or kX"),
        ("nan", "not a number"),
        ("inf", "not a number"),
        ("", "not a number"),
        ("1e999 nm", "too large"),
        ("0 Å", "not possible"),
        ("4000 Å", "not possible"),
        ("٤.٢", "not a number"),
    ],
)
def test_likely_slips_are_refused_with_what_was_meant(text, said):
    with pytest.raises(InputError) as error:
        parse_lattice_constant(text)
    assert said in str(error.value)


@given(
    value=st.decimals("0.001", "99999", places=6),
    esd=st.integers(1, 9999),
)
def test_reading_agrees_with_an_independent_reader(value, esd):
    text = f"{value}({esd})"
    witness = ufloat_fromstr(text)
    read = parse_measured(text)
    assert isclose(read.value, witness.nominal_value, rel_tol=1e-14)
    assert isclose(read.esd, witness.std_dev, rel_tol=1e-9)


@pytest.mark.parametrize(
    ("value", "esd", "text"),
    [
        (5.43102, 0.00005, "5.43102(5)"),
        (12345.6, 123.0, "12350(120)"),
        (4.1, 0.0196, "4.10(2)"),
        (4.1, 0.0194, "4.100(19)"),
        (4.2417, None, "4.2417"),
        (5.0, None, "5"),
        (1e-7, None, "0.0000001"),
    ],
)
def test_numbers_are_written_with_two_to_nineteen_in_the_last_digits(value, esd, text):
    assert format_measured(value, esd) == text


@given(
    value=st.floats(0.1, 1e4),
    esd=st.floats(1e-7, 10.0),
)
def test_what_is_written_reads_back_within_the_rounding(value, esd):
    read = parse_measured(format_measured(value, esd))
    assert abs(read.value - value) <= 0.257 * esd + 1e-12 * value  # half a unit; a unit is at most esd/1.95
    assert isclose(read.esd, esd, rel_tol=0.26)


@given(value=st.floats(1e-9, 1e9))
def test_without_uncertainty_nothing_is_lost(value):
    assert parse_measured(format_measured(value, None)).value == value
