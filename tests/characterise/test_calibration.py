"""What a standard's list tells of an instrument."""

import numpy as np
import pytest

from phasedb.characterise.calibration import calibrate
from phasedb.characterise.cells import StartingCell
from phasedb.characterise.refinement import refine
from phasedb.crystal.lattice import allowed_n
from phasedb.errors import InputError
from phasedb.measured.building import build_peak_list

SILICON = StartingCell("F", 5.43123, np.array([n for n in allowed_n("F", 200) if n % 8 in (0, 3)]))


def test_the_zero_is_learned_and_the_mount_only_in_size(simulate):
    rng = np.random.default_rng(1)
    peaks = simulate(rng, a=5.43123, noise=0.004, zero=0.12, displacement=-0.1, high=140.0)
    found = calibrate(peaks, SILICON, a_esd_angstrom=4e-5, transmission=False)
    assert abs(found.prior.zero_deg - 0.12) < 2 * found.prior.zero_scale_deg < 0.06
    assert (found.prior.displacement_mm, found.prior.displacement_scale_mm) == (0.0, 0.05)
    assert abs(found.fit.displacement_mm + 0.1) < 3 * found.fit.displacement_esd_mm


def test_what_was_learned_makes_the_next_specimen_right(simulate):
    rng = np.random.default_rng(2)
    standard = simulate(rng, a=5.43123, noise=0.004, zero=0.15, high=140.0)
    learned = calibrate(standard, SILICON, a_esd_angstrom=4e-5, transmission=False)
    peaks = simulate(rng, a=4.05, noise=0.01, zero=0.15, displacement=0.03, high=90.0)
    blind = refine(peaks, lattice_type="F", a_angstrom=4.05)
    knowing = refine(peaks, lattice_type="F", a_angstrom=4.05, shift_prior=learned.prior)
    assert abs(knowing.a_angstrom - 4.05) < 2.5 * knowing.a_esd_angstrom
    assert knowing.a_esd_angstrom < blind.a_esd_angstrom


def test_transmission_has_no_displacement(simulate):
    peaks = simulate(np.random.default_rng(3), a=5.43123, noise=0.004, zero=0.05)
    found = calibrate(peaks, SILICON, a_esd_angstrom=None, transmission=True)
    assert found.prior.displacement_scale_mm < 1e-5
    assert abs(found.fit.displacement_mm) < 1e-4


def test_the_median_width_is_kept(simulate):
    peaks = simulate(np.random.default_rng(4), a=5.43123)
    wide = build_peak_list(
        peaks.position, unit="two-theta", radiation=peaks.radiation, fwhm=np.linspace(0.08, 0.12, len(peaks))
    )
    assert calibrate(peaks, SILICON, a_esd_angstrom=None, transmission=False).line_width_deg is None
    found = calibrate(wide, SILICON, a_esd_angstrom=None, transmission=False)
    assert found.line_width_deg == pytest.approx(0.1, abs=0.01)


def test_a_list_of_something_else_is_an_error(simulate):
    peaks = simulate(np.random.default_rng(5), a=3.2, lattice="I", low=30.0, high=60.0)
    with pytest.raises(InputError, match="no line of the list"):
        calibrate(peaks, SILICON, a_esd_angstrom=None, transmission=False)


def test_a_list_without_angles_is_an_error():
    with pytest.raises(InputError, match="on 2theta"):
        calibrate(build_peak_list([3.1, 1.9], unit="d"), SILICON, a_esd_angstrom=None, transmission=False)
