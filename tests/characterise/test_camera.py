"""The camera from a standard film's rings."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from phasedb.characterise.camera import calibrate_camera
from phasedb.characterise.cells import StartingCell
from phasedb.crystal.radiation import electron_wavelength, ring_radius_from_d
from phasedb.errors import InputError

GOLD = StartingCell("F", 4.0786)
N = np.array([3, 4, 8, 11, 12, 16, 19])


@settings(max_examples=40)
@given(
    st.floats(80.0, 300.0),
    st.floats(200.0, 2000.0),
    st.integers(3, 7),
    st.integers(0, 2**32 - 1),
)
def test_the_length_is_found_exactly_where_the_energy_is_known(energy, length, count, seed):
    wavelength = electron_wavelength(energy)
    radius = ring_radius_from_d(4.0786 / np.sqrt(N[:count]), wavelength, length)
    radius = radius * (1 + 1e-3 * np.random.default_rng(seed).normal(size=count))
    found = calibrate_camera(radius, GOLD, name="gold", wavelength_angstrom=wavelength)
    assert found.camera_constant_mm_angstrom is None
    assert found.n == tuple(N[:count])
    assert found.camera_length_mm == pytest.approx(length, rel=5e-3)
    assert found.esd_relative >= 1e-3


def test_without_an_energy_the_constant_is_found():
    radius = 25.0 * np.sqrt(N) / 4.0786
    found = calibrate_camera(radius, GOLD, name="gold", wavelength_angstrom=None)
    assert found.camera_length_mm is None
    assert found.camera_constant_mm_angstrom == pytest.approx(25.0, rel=1e-9)
    assert "camera constant 25 mm Å" in found.text and "111, 200, 220" in found.text


def test_scatter_widens_the_scale():
    rng = np.random.default_rng(1)
    radius = 25.0 * np.sqrt(N) / 4.0786
    rough = calibrate_camera(
        radius * (1 + 6e-3 * rng.normal(size=7)), GOLD, name="gold", wavelength_angstrom=None
    )
    assert rough.esd_relative > 1.2e-3
    assert rough.camera_constant_mm_angstrom == pytest.approx(25.0, rel=4 * rough.esd_relative)


def test_a_missing_ring_and_one_of_dirt_do_no_harm():
    radius = np.delete(25.0 * np.sqrt(N) / 4.0786, 3)
    radius = np.sort(np.append(radius, 14.2))
    found = calibrate_camera(radius, GOLD, name="gold", wavelength_angstrom=None)
    assert found.camera_constant_mm_angstrom == pytest.approx(25.0, rel=2e-3)


@pytest.mark.parametrize(
    ("radius", "says"),
    [
        ([10.0, 11.5], "at least 3"),
        ([10.0, 10.7, 12.1, 12.9, 13.3], "do not fit gold"),
    ],
)
def test_rings_that_calibrate_nothing_are_errors(radius, says):
    with pytest.raises(InputError, match=says):
        calibrate_camera(np.array(radius), GOLD, name="gold", wavelength_angstrom=None)
