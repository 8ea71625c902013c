"""From plain arrays to a checked list: order, merging, range, conversions."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from phasedb.crystal.radiation import radiation_from_name, two_theta_from_d
from phasedb.errors import InputError
from phasedb.measured.building import build_peak_list

COPPER = radiation_from_name("Cu-Ka1")
ELECTRONS = radiation_from_name("electron", energy_kev=200.0)


def test_lines_are_sorted_by_angle_with_all_their_columns():
    peaks = build_peak_list(
        [60.0, 30.0, 45.0],
        unit="two-theta",
        intensity=[1, 3, 2],
        esd=[0.01, 0.03, np.nan],
        fwhm=[0.1, 0.3, 0.2],
        radiation=COPPER,
        measured_range=(20, 70),
    )
    assert peaks.position.tolist() == [30.0, 45.0, 60.0]
    assert peaks.intensity.tolist() == [3, 2, 1]
    assert np.array_equal(peaks.esd, [0.03, np.nan, 0.01], equal_nan=True)
    assert peaks.fwhm.tolist() == [0.3, 0.2, 0.1]
    assert not peaks.range_assumed and (peaks.range_low, peaks.range_high) == (20, 70)
    assert peaks.notes == ()


def test_arrays_of_a_list_cannot_be_written():
    peaks = build_peak_list([30.0], unit="two-theta", radiation=COPPER)
    with pytest.raises(ValueError, match="read-only"):
        peaks.position[0] = 31.0


@pytest.mark.parametrize(("unit", "of_d"), [("d", lambda d: d), ("q", lambda d: 2 * np.pi / d)])
@given(d=st.lists(st.floats(0.8, 8.0), min_size=1, max_size=30, unique_by=lambda v: round(v, 2)))
def test_every_unit_gives_the_same_angles(unit, of_d, d):
    d = np.array(d)
    peaks = build_peak_list(of_d(d), unit=unit, radiation=COPPER, fwhm=np.full(len(d), 1e-9))
    expected = two_theta_from_d(np.sort(d)[::-1], COPPER.wavelength_angstrom)
    assert np.allclose(peaks.two_theta_deg, expected, rtol=0, atol=1e-9)


def test_an_esd_in_any_unit_is_the_same_esd_in_degrees():
    d, step = np.array([2.0]), 1e-6
    in_degrees = two_theta_from_d(d - step, COPPER.wavelength_angstrom) - two_theta_from_d(
        d, COPPER.wavelength_angstrom
    )
    of_d = build_peak_list(d, unit="d", esd=[step], radiation=COPPER)
    of_q = build_peak_list(2 * np.pi / d, unit="q", esd=[2 * np.pi * step / d[0] ** 2], radiation=COPPER)
    assert of_d.esd == pytest.approx(in_degrees, rel=1e-5)
    assert of_q.esd == pytest.approx(in_degrees, rel=1e-5)


def test_without_a_wavelength_an_esd_is_relative():
    peaks = build_peak_list([2.0], unit="d", esd=[0.01], fwhm=[0.02])
    assert peaks.two_theta_deg is None
    assert peaks.esd.tolist() == [0.005] and peaks.fwhm.tolist() == [0.01]


def test_a_ring_esd_is_the_derivative_of_the_exact_conversion():
    step = 1e-5
    here, there = (
        build_peak_list([r], unit="ring", esd=[step], radiation=ELECTRONS, camera_length_mm=50.0)
        for r in (10.0, 10.0 + step)
    )
    assert here.two_theta_deg is None  # electrons share an error of scale, not of angle
    assert here.esd[0] == pytest.approx(-np.log(there.d_angstrom[0] / here.d_angstrom[0]), rel=1e-4)


def test_rings_go_by_the_camera_constant_and_it_says_so():
    peaks = build_peak_list([10.0, 20.0], unit="ring", camera_constant_mm_angstrom=25.0)
    assert peaks.d_angstrom.tolist() == [2.5, 1.25]
    assert peaks.ring_scale_approximate
    assert any("small-angle" in note for note in peaks.notes)


def test_exact_rings_are_not_approximate():
    peaks = build_peak_list([10.0], unit="ring", radiation=ELECTRONS, camera_length_mm=700.0)
    # d = lambda / (2 sin(atan(r/L) / 2))
    expected = ELECTRONS.wavelength_angstrom / (2 * np.sin(0.5 * np.arctan(10.0 / 700.0)))
    assert peaks.d_angstrom[0] == pytest.approx(expected, rel=1e-12)
    assert not peaks.ring_scale_approximate


def test_an_x_ray_ring_has_an_angle():
    peaks = build_peak_list([30.0], unit="ring", radiation=COPPER, camera_length_mm=30.0)
    assert peaks.two_theta_deg[0] == pytest.approx(45.0)


def test_a_range_that_is_not_given_is_the_span_and_2_percent_on_each_side():
    peaks = build_peak_list([30.0, 80.0], unit="two-theta", radiation=COPPER)
    assert peaks.range_assumed
    assert (peaks.range_low, peaks.range_high) == pytest.approx((29.0, 81.0))
    assert any("range not given" in note for note in peaks.notes)


def test_an_assumed_range_stays_where_lines_can_be():
    peaks = build_peak_list([5.0, 179.0], unit="two-theta", radiation=COPPER)
    assert peaks.range_high <= 180.0 and peaks.range_low > 0.0
    limit = COPPER.wavelength_angstrom / 2
    peaks = build_peak_list([limit * 1.0001, 9.0], unit="d", radiation=COPPER)
    assert peaks.range_low >= limit


@pytest.mark.parametrize(
    ("positions", "options", "says"),
    [
        ([30.0, np.nan], {}, "finite"),
        ([np.inf], {}, "finite"),
        ([0.0], {}, "above 0"),
        ([-5.0], {}, "above 0"),
        ([180.0], {}, "below 180"),
        ([], {}, "no lines"),
        ([30.0], {"measured_range": (40, 80)}, "outside the stated range"),
        ([30.0], {"measured_range": (80, 20)}, "lower first"),
        ([30.0], {"radiation": None}, "need a wavelength"),
        ([30.0], {"intensity": [-1]}, "intensity -1"),
        ([30.0], {"esd": [np.inf]}, "esd inf"),
        (np.linspace(10, 100, 2001), {}, "expected at most 2000"),
    ],
)
def test_what_cannot_be_is_an_error(positions, options, says):
    with pytest.raises(InputError, match=says):
        build_peak_list(positions, **{"unit": "two-theta", "radiation": COPPER, **options})


@pytest.mark.parametrize(("unit", "value"), [("d", 0.77), ("q", 8.2)])
def test_a_line_that_bragg_forbids_is_an_error(unit, value):
    with pytest.raises(InputError, match="half the wavelength"):
        build_peak_list([value], unit=unit, radiation=COPPER)


def test_rings_need_a_camera():
    with pytest.raises(InputError, match="camera constant"):
        build_peak_list([10.0], unit="ring")


def test_errors_name_the_place_that_was_read():
    with pytest.raises(InputError) as caught:
        build_peak_list(
            [40.0, 190.0], unit="two-theta", radiation=COPPER, places=["list.csv:3:1", "list.csv:4:1"]
        )
    assert caught.value.where == "list.csv:4:1"


def test_missing_intensities_are_not_invented():
    peaks = build_peak_list([30.0, 40.0], unit="two-theta", radiation=COPPER, intensity=[5, np.nan])
    assert peaks.intensity is None
    assert any("1 of 2 lines have no intensity" in note for note in peaks.notes)


def test_an_intensity_of_zero_is_a_weak_line():
    peaks = build_peak_list([30.0, 40.0], unit="two-theta", radiation=COPPER, intensity=[5, 0])
    assert peaks.intensity.tolist() == [5.0, 2.5]


def test_close_lines_become_one_with_their_intensities_added():
    peaks = build_peak_list(
        [30.0, 30.016, 40.0],
        unit="two-theta",
        radiation=COPPER,
        intensity=[1, 3, 5],
        esd=[0.004, 0.004, 0.01],
    )
    assert peaks.position == pytest.approx([30.012, 40.0])
    assert peaks.intensity.tolist() == [4, 5]
    assert peaks.esd[0] > 0.006  # the two positions differ by more than their esds
    assert peaks.esd[1] == 0.01
    assert any("merged" in note and "30.0120" in note for note in peaks.notes)


def test_the_lists_own_width_is_its_resolution():
    near = {"unit": "two-theta", "radiation": COPPER}
    assert len(build_peak_list([30.0, 30.1], fwhm=[0.2, 0.2], **near)) == 1
    assert len(build_peak_list([30.0, 30.1], fwhm=[0.09, 0.2], **near)) == 2
    assert len(build_peak_list([30.0, 30.1], **near)) == 2
    assert len(build_peak_list([2.0, 2.0003], unit="d")) == 1


@given(
    st.lists(st.floats(20.0, 25.0), min_size=2, max_size=40),
    st.floats(0.01, 1.0),
)
def test_merging_keeps_intensity_and_leaves_no_close_pair(positions, width):
    ones = np.ones(len(positions))
    peaks = build_peak_list(positions, unit="two-theta", radiation=COPPER, intensity=ones, fwhm=width * ones)
    assert peaks.intensity.sum() == pytest.approx(len(positions))
    assert np.all(np.diff(peaks.position) > 0)
    assert min(positions) - 1e-9 <= peaks.position[0] and peaks.position[-1] <= max(positions) + 1e-9
