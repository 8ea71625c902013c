"""The classical extrapolations: exact lines, known drifts, and a spreadsheet's least squares."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from phasedb.characterise.extrapolation import a_of_lines, cohen, nelson_riley, nelson_riley_function

N = np.array([3, 4, 8, 11, 12, 16, 19, 20])


def angles(a, wavelength, drift=0.0):
    """Return 2theta of lines whose sin² theta is too large by drift * sin² 2theta (Cohen's error)."""
    square = wavelength**2 * N / (4 * a**2)
    for _ in range(100):
        square = wavelength**2 * N / (4 * a**2) + drift * np.sin(2 * np.arcsin(np.sqrt(square))) ** 2
    return 2 * np.degrees(np.arcsin(np.sqrt(square)))


@given(st.floats(3.55, 6.0))
def test_without_errors_both_give_a(a):
    two_theta = angles(a, 1.54)
    assert a_of_lines(two_theta, N, 1.54) == pytest.approx(np.full(8, a), rel=1e-10)
    for found in (nelson_riley(two_theta, N, 1.54), cohen(two_theta, N, 1.54)):
        assert found.a_angstrom == pytest.approx(a, rel=1e-9)
        assert found.a_esd_angstrom < 1e-6
        assert found.trend == pytest.approx(0.0, abs=1e-6)


@given(st.floats(-2e-3, 2e-3))
def test_cohen_takes_out_the_error_that_it_is_made_for(drift):
    found = cohen(angles(3.62, 1.54, drift), N, 1.54)
    assert found.a_angstrom == pytest.approx(3.62, rel=1e-8)
    assert found.trend == pytest.approx(drift / 10.0, abs=1e-9)


def test_the_nelson_riley_function_at_its_ends():
    # 1/2 (cos²/sin + cos²/theta): 0 at theta = 90 degrees, and at 30 degrees by hand
    assert nelson_riley_function(180.0) == pytest.approx(0.0, abs=1e-12)
    assert nelson_riley_function(60.0) == pytest.approx(0.5 * (0.75 / 0.5 + 0.75 / (np.pi / 6)), rel=1e-12)


def test_nelson_riley_is_the_straight_line_of_polyfit():
    rng = np.random.default_rng(1)
    two_theta = angles(3.62, 1.54) + 0.05 * rng.normal(size=8)
    a = a_of_lines(two_theta, N, 1.54)
    (slope, value), covariance = np.polyfit(nelson_riley_function(two_theta), a, 1, cov=True)
    found = nelson_riley(two_theta, N, 1.54)
    assert (found.a_angstrom, found.trend) == pytest.approx((value, slope))
    assert found.a_esd_angstrom == pytest.approx(np.sqrt(covariance[1, 1]))


def test_one_line_cannot_be_extrapolated_and_two_have_no_scatter():
    assert nelson_riley([40.0], [3], 1.54) is None and cohen([40.0], [3], 1.54) is None
    assert nelson_riley([40.0, 60.0], [3, 8], 1.54).a_esd_angstrom is None
    assert cohen([40.0, 60.0], [3, 8], 1.54).a_esd_angstrom is None
