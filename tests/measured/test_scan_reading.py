"""Scans from text and CIF, and the scans that make trouble."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from phasedb.errors import InputError
from phasedb.measured.options import ReadOptions
from phasedb.measured.scan import RawScan, build_scan, read_scan


@pytest.fixture
def read(tmp_path):
    def reader(content, **options):
        path = tmp_path / "scan.xy"
        path.write_bytes(content if isinstance(content, bytes) else content.encode())
        return read_scan(path, ReadOptions(**options))

    return reader


@pytest.fixture
def error_of(read):
    def failing(content, **options):
        with pytest.raises(InputError) as caught:
            read(content, **options)
        return caught.value

    return failing


def rows(count=60, form="{:.2f} {}", start=20.0):
    return "".join(form.format(start + 0.02 * i, 100 + i % 7) + "\n" for i in range(count))


def scan_of(x, y, esd=None, **options):
    return build_scan(RawScan(np.array(x), np.array(y), esd, ReadOptions()), ReadOptions(**options))


@pytest.mark.parametrize(
    "form", ["{:.2f} {}", "{:.2f},{}", "{:.2f};{}", "{:.2f}\t{}", "  {:.2f}    {}  ", "{:.2f}, {}"]
)
@pytest.mark.parametrize("ending", ["\n", "\r\n"])
@pytest.mark.parametrize("head", ["", "# radiation: Co\n", "Exported by someone 2020\n2theta counts\n"])
def test_columns_in_many_spellings(form, ending, head, read):
    scan = read((head + rows(form=form)).replace("\n", ending))
    assert len(scan) == 60 and scan.esd is None
    assert scan.two_theta_deg[0] == 20.0 and scan.counts[1] == 101
    assert (scan.radiation is not None) == head.startswith("#")


def test_a_decimal_comma(read):
    scan = read(rows(form="{:.2f};{}.5").replace(".", ","))
    assert (scan.two_theta_deg[1], scan.counts[0]) == (20.02, 100.5)


def test_the_third_column_is_the_standard_uncertainty(read):
    scan = read(rows(form="{:.2f} {} 2.5"))
    assert scan.esd.tolist() == [2.5] * 60


def test_header_and_options(read):
    text = "# radiation: Co\n# goniometer_radius_mm: 240\n# sample: foil\n" + rows()
    scan = read(text, radiation="Cu", measured_range=(20.1, 20.9))
    assert (scan.radiation.name, scan.goniometer_radius_mm, scan.sample) == ("Cu", 240, "foil")
    assert scan.two_theta_deg[0] >= 20.1 and scan.two_theta_deg[-1] <= 20.9


@pytest.mark.parametrize(
    ("text", "place", "says"),
    [
        ("20.0\n" * 50, ":1", "read 1 column"),
        ("20 1 2 3\n" * 50, ":1", "read 4 columns"),
        (rows(40) + "20.9 x\n" + rows(5), ":41:6", "read 'x'"),
        (rows(40) + "20.9\n" + rows(5), ":41", "read 1 cells, expected 2"),
        (rows(40) + "20.9 nan\n" + rows(5), ":41:6", "read 'nan'"),
        (rows(40) + "20.9 1e999\n" + rows(5), ":41:6", "read '1e999'"),
        (rows(10), "", "10 points"),
        ("no numbers at all\n" * 5, "", "no row of numbers"),
        ("".join(f"{20 + 0.02 * i:.2f} 5\n" for i in range(60)), "", "all counts are 5"),
        (rows(start=-0.5), "", "expected 0 to 180"),
        (rows(start=179.5), "", "expected 0 to 180"),
        ("", "", "empty"),
        ("data_x\n_cell_length_a 5\n", "", "no data block holds a profile"),
    ],
)
def test_what_is_no_scan_is_said(text, place, says, error_of):
    error = error_of(text)
    assert says in error.what
    assert error.where.endswith("scan.xy" + place)


def test_steps_out_of_order_are_sorted_and_doubled_ones_averaged():
    x = np.round(np.arange(20.0, 21.0, 0.02), 2)
    scan = scan_of([*x, 20.01, 20.5], [*range(50), 7.0, 45.0])
    assert np.all(np.diff(scan.two_theta_deg) > 0)
    assert len(scan) == 51
    assert scan.counts[scan.two_theta_deg == 20.5].tolist() == [35.0]  # the mean of 25 and 45
    assert any("out of order" in note for note in scan.notes)


def test_a_scan_that_runs_downwards_is_turned_round():
    scan = scan_of(np.arange(21.0, 20.0, -0.02), np.arange(50.0))
    assert scan.counts[0] == 49 and any("downwards" in note for note in scan.notes)


def test_a_gap_parts_the_scan_and_is_said():
    x = np.concatenate([np.arange(20, 22, 0.02), np.arange(30, 33, 0.02)])
    scan = scan_of(x, np.arange(len(x)) % 5 + 1.0)
    assert scan.segments == ((0, 100), (100, 250))
    assert any("21.98 to 30.00" in note for note in scan.notes)


def test_negative_counts_are_kept_and_said():
    y = np.sin(np.arange(100))
    scan = scan_of(20 + 0.02 * np.arange(100), y)
    assert np.array_equal(scan.counts, y)
    assert any("negative" in note for note in scan.notes)


def test_saturated_points_are_left_out_and_said():
    y = np.full(200, 100.0) + np.arange(200) % 3
    y[90:100] = 65535.0
    scan = scan_of(20 + 0.02 * np.arange(200), y)
    assert not scan.usable[90:100].any() and scan.usable[:90].all() and scan.usable[100:].all()
    assert any("saturated" in note and "21.89" in note for note in scan.notes)


def test_points_without_an_uncertainty_are_said():
    esd = np.ones(50)
    esd[3] = 0.0
    scan = scan_of(20 + 0.02 * np.arange(50), np.arange(50.0), esd)
    assert (scan.esd > 0).all() and any("no standard uncertainty" in note for note in scan.notes)


CIF = """data_x
_diffrn_radiation_type 'Cu K\\a'
loop_
_pd_meas_2theta_scan
_pd_meas_counts_total
"""


def test_a_cif_profile(read):
    scan = read(CIF + rows())
    assert len(scan) == 60 and scan.radiation.name == "Cu"
    assert scan.esd is None  # counts carry their own


def test_a_cif_profile_with_uncertainties_and_another_angle(read):
    head = "data_x\n_diffrn_radiation_wavelength 1.5406\nloop_\n_pd_proc_2theta_corrected\n"
    head += "_pd_proc_intensity_total\n"
    scan = read(head + rows(form="{:.2f} {}(11)"))
    assert scan.esd.tolist() == [11.0] * 60
    assert scan.radiation.wavelength_angstrom == 1.5406


def test_a_cif_profile_on_a_stated_range(read):
    counts = "\n".join(str(100 + i % 7) for i in range(51))
    text = (
        "data_x\n_pd_meas_2theta_range_min 20\n_pd_meas_2theta_range_max 25\n_pd_meas_2theta_range_inc 0.1\n"
        f"loop_\n_pd_meas_counts_total\n{counts}\n"
    )
    scan = read(text)
    assert scan.two_theta_deg[-1] == pytest.approx(25.0)


def test_a_cif_profile_without_angles(error_of):
    assert "no angles" in error_of("data_x\nloop_\n_pd_meas_counts_total\n" + "5\n" * 50).what


@given(st.permutations(range(60)))
def test_the_order_of_the_rows_does_not_matter(order):
    x, y = 20 + 0.02 * np.arange(60), np.arange(60.0) % 7
    straight, mixed = scan_of(x, y), scan_of(x[order], y[order])
    assert np.array_equal(straight.two_theta_deg, mixed.two_theta_deg)
    assert np.array_equal(straight.counts, mixed.counts)


@pytest.mark.long
def test_a_million_points_are_read(read):
    x = np.linspace(5, 140, 1_000_000)
    text = "\n".join(f"{a:.6f} {b}" for a, b in zip(x, np.arange(1_000_000) % 97, strict=True))
    assert len(read(text)) == 1_000_000
