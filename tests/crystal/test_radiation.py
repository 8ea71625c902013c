import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from phasedb.crystal.radiation import (
    EMISSION_LINES,
    d_from_q,
    d_from_ring_radius,
    d_from_two_theta,
    electron_wavelength,
    q_from_d,
    radiation_from_name,
    radiation_from_wavelength,
    ring_radius_from_d,
    two_theta_from_d,
)
from phasedb.errors import InputError


@pytest.mark.parametrize(
    ("energy_kev", "wavelength"),
    # International Tables C (2006), table 4.3.2.1 (from memory)
    [(100, 0.037014), (120, 0.033492), (200, 0.025079), (300, 0.019687)],
)
def test_electron_wavelengths(energy_kev, wavelength):
    assert electron_wavelength(energy_kev) == pytest.approx(wavelength, abs=6e-7)


@pytest.mark.parametrize(
    ("anode", "alpha1"),
    # Hölzer et al., Phys. Rev. A 56 (1997) 4554; Deslattes et al., Rev. Mod. Phys. 75 (2003) 35
    [
        ("Cu", 1.5405929),
        ("Co", 1.788996),
        ("Fe", 1.936041),
        ("Cr", 2.289726),
        ("Mo", 0.70931715),
        ("Ag", 0.55942178),
    ],
)
def test_k_alpha1_wavelengths(anode, alpha1):
    assert radiation_from_name(anode).wavelength_angstrom == pytest.approx(alpha1, abs=1e-6)


def test_doublet_mean_and_single_line_differ():
    copper = EMISSION_LINES["Cu"]
    assert copper.mean == pytest.approx(1.54187, abs=1e-5)  # International Tables C, 2.3.5.2 (from memory)
    assert radiation_from_name("Cu").convention == "doublet"
    assert radiation_from_name("cu-KA1").convention == "alpha1"
    assert radiation_from_name("Cu-Ka1").anode is None
    assert radiation_from_name("Cu-mean").wavelength_angstrom == copper.mean


def test_a_wavelength_near_an_anode_keeps_its_ghosts():
    assert radiation_from_wavelength(1.5406).anode == "Cu"
    assert radiation_from_wavelength(1.5418).anode == "Cu"
    assert radiation_from_wavelength(1.0).anode is None


@pytest.mark.parametrize("wavelength", [0.0, -1.0, float("nan"), float("inf"), 11.0, 1e-4])
def test_impossible_wavelengths_are_refused(wavelength):
    with pytest.raises(InputError):
        radiation_from_wavelength(wavelength)


@pytest.mark.parametrize("name", ["", "Zr", "Cu-Kb", "Cu Ka1", "electron"])
def test_unknown_radiations_are_refused_with_what_to_write(name):
    with pytest.raises(InputError) as caught:
        radiation_from_name(name)
    assert caught.value.hint


@pytest.mark.parametrize("energy", [0.0, -5.0, float("nan"), float("inf")])
def test_impossible_electron_energies_are_refused(energy):
    with pytest.raises(InputError):
        electron_wavelength(energy)


@given(st.floats(0.3, 30.0), st.floats(0.02, 2.5))
def test_two_theta_and_d_are_inverse(d, wavelength):
    two_theta = float(two_theta_from_d(d, wavelength))
    if wavelength <= 2 * d:
        # near 180 degrees the inverse sine loses half of the digits
        assert float(d_from_two_theta(two_theta, wavelength)) == pytest.approx(d, rel=1e-12)
    else:
        assert np.isnan(two_theta)


@given(st.floats(0.1, 100.0))
def test_q_and_d_are_inverse(d):
    assert float(d_from_q(q_from_d(d))) == pytest.approx(d, rel=1e-14)
    assert float(q_from_d(d)) == pytest.approx(2 * np.pi / d)


@given(st.floats(0.5, 10.0), st.floats(60.0, 400.0), st.floats(100.0, 3000.0))
def test_rings_and_d_are_inverse(d, energy_kev, length_mm):
    wavelength = electron_wavelength(energy_kev)
    radius = ring_radius_from_d(d, wavelength, length_mm)
    back = d_from_ring_radius(radius, wavelength_angstrom=wavelength, camera_length_mm=length_mm)
    assert float(back) == pytest.approx(d, rel=1e-10)


def test_camera_constant_is_the_small_angle_limit():
    wavelength = electron_wavelength(200.0)
    exact = d_from_ring_radius(10.0, wavelength_angstrom=wavelength, camera_length_mm=1000.0)
    simple = d_from_ring_radius(10.0, camera_constant_mm_angstrom=wavelength * 1000.0)
    # d = (L lambda / r)(1 + 3/8 (r/L)^2 ...)
    assert float(exact / simple) == pytest.approx(1 + 0.375 * 0.01**2, abs=1e-8)


def test_rings_without_calibration_are_refused():
    with pytest.raises(InputError, match="camera constant"):
        d_from_ring_radius(10.0, camera_length_mm=1000.0)


def test_rings_beyond_ninety_degrees_do_not_exist():
    assert np.isnan(ring_radius_from_d(0.6, 1.0, 100.0))
