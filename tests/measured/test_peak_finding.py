"""From a scan to its lines: positions and uncertainties on scans of known truth, and troublesome scans."""

import numpy as np
import pytest

from phasedb.crystal.radiation import EMISSION_LINES, d_from_two_theta, radiation_from_name, two_theta_from_d
from phasedb.measured.line_fit import model_of
from phasedb.measured.list_writing import peaks_document, peaks_text
from phasedb.measured.options import ReadOptions
from phasedb.measured.peak_finding import find_lines
from phasedb.measured.profile import Doublet
from phasedb.measured.reading import peak_list_from_text
from phasedb.measured.scan import RawScan, build_scan
from phasedb.measured.textfile import SourceText

STEP = 0.02


def simulated(seed, centre, area, *, radiation="Cu", background=100.0, low=20.0, high=110.0, width=0.08):
    """Return a scan of lines of known position and area, counted photon by photon."""
    rng = np.random.default_rng(seed)
    x = np.arange(low, high, STEP)
    centre, area = np.asarray(centre, dtype=float), np.asarray(area, dtype=float)
    fwhm = width + 0.0008 * (centre - low)
    count = len(centre)
    lines = model_of(
        x,
        centre,
        area,
        fwhm,
        np.full(count, 0.5),
        Doublet.of(radiation_from_name(radiation)),
        np.full(count, 0.5),
    )
    y = rng.poisson(background * (1 + np.exp(-(x - low) / 20)) + lines)
    return scan_of(x, y, radiation=radiation)


def scan_of(x, y, esd=None, **options):
    return build_scan(RawScan(x, np.asarray(y, dtype=float), esd, ReadOptions()), ReadOptions(**options))


def positions(result):
    return np.array([line.two_theta_deg for line in result.lines])


def test_positions_areas_and_widths_are_right_within_their_uncertainties():
    rng = np.random.default_rng(20)
    pulls, area_pulls, missed, extra = [], [], 0, 0
    for seed in range(12):
        centre = np.sort(rng.uniform(22, 105, 16))
        centre = centre[np.append(True, np.diff(centre) > 0.6)]
        area = 10 ** rng.uniform(1.3, 3.5, len(centre))
        result = find_lines(simulated(seed, centre, area, radiation=["Cu", "Cu-Ka1"][seed % 2]))
        found = positions(result)
        for true, true_area in zip(centre, area, strict=True):
            nearest = int(np.argmin(np.abs(found - true)))
            line = result.lines[nearest]
            if abs(line.two_theta_deg - true) > 0.1:
                missed += 1
                continue
            pulls.append((line.two_theta_deg - true) / line.two_theta_esd_deg)
            area_pulls.append((line.area - true_area) / line.area_esd)
        extra += max(len(found) - len(centre), 0)
    # about 170 lines: a standard deviation of 1 is known to 0.06 from so many
    assert np.std(pulls) == pytest.approx(1.0, abs=0.2)
    assert abs(np.mean(pulls)) < 0.3
    assert np.std(area_pulls) == pytest.approx(1.0, abs=0.35)
    assert missed <= 2 and extra == 0


def test_noise_alone_gives_no_more_lines_than_stated():
    rng = np.random.default_rng(5)
    found = 0
    for level in (3, 30, 300) * 8:
        x = np.arange(20, 100, STEP)
        y = rng.poisson(level * (1 + np.exp(-(x - 20) / 15)))
        found += len(find_lines(scan_of(x, y, radiation="Cu"), false_lines=0.5).lines)
    assert found <= 24 * 0.5 + 3 * np.sqrt(24 * 0.5)


def test_alpha2_is_not_taken_for_a_line():
    centre = np.array([30.0, 60.0, 95.0])
    result = find_lines(simulated(3, centre, [3000, 3000, 3000]))
    assert positions(result) == pytest.approx(centre, abs=0.01)
    assert result.doublet_ratio == pytest.approx(0.5, abs=0.05)


def test_without_a_radiation_both_lines_of_a_resolved_doublet_are_found():
    scan = simulated(3, [95.0], [3000])
    bare = scan_of(scan.two_theta_deg, scan.counts)
    assert len(find_lines(bare).lines) == 2


def test_a_stripped_scan_given_as_a_number_has_no_doublet():
    centre = np.array([30.0, 60.0, 95.0])
    scan = simulated(4, centre, [3000, 3000, 3000], radiation="Cu-Ka1")
    number = scan_of(scan.two_theta_deg, scan.counts, wavelength_angstrom=1.5405929)
    result = find_lines(number)
    assert result.doublet_ratio is None
    assert positions(result) == pytest.approx(centre, abs=0.01)


def test_a_real_doublet_given_as_a_number_is_seen():
    centre = np.array([30.0, 60.0, 95.0])
    scan = simulated(4, centre, [3000, 3000, 3000])
    result = find_lines(scan_of(scan.two_theta_deg, scan.counts, wavelength_angstrom=1.5405929))
    assert result.doublet_ratio == pytest.approx(0.5, abs=0.06)
    assert positions(result) == pytest.approx(centre, abs=0.01)


def test_positions_on_the_named_mean_give_the_same_d():
    lines = EMISSION_LINES["Cu"]
    centre = np.array([30.0, 60.0, 95.0])
    scan = simulated(6, centre, [4000, 4000, 4000])
    result = find_lines(scan_of(scan.two_theta_deg, scan.counts, radiation="Cu-mean"))
    d = d_from_two_theta(centre, lines.alpha1)
    assert positions(result) == pytest.approx(two_theta_from_d(d, lines.mean), abs=0.01)


def test_a_close_pair_is_parted_where_a_width_lies_between():
    result = find_lines(simulated(7, [45.0, 45.2], [2000, 1200]))
    assert positions(result) == pytest.approx([45.0, 45.2], abs=0.02)


def test_a_pair_within_a_width_is_one_line():
    result = find_lines(simulated(8, [45.0, 45.03], [2000, 2000]))
    assert len(result.lines) == 1
    assert positions(result)[0] == pytest.approx(45.015, abs=0.01)


def test_background_and_model_are_those_of_the_scan():
    scan = simulated(9, [30.0, 60.0], [3000, 3000])
    result = find_lines(scan)
    misfit = (scan.counts - result.model) / result.sigma
    assert np.std(misfit) == pytest.approx(1.0, abs=0.1)
    far = np.abs(scan.two_theta_deg - 45) < 5
    assert result.background[far] == pytest.approx(
        100 * (1 + np.exp(-(scan.two_theta_deg[far] - 20) / 20)), rel=0.05
    )


# --- troublesome scans -----------------------------------------------------------------------------


def test_a_flat_scan_has_no_lines_and_says_so():
    rng = np.random.default_rng(1)
    x = np.arange(20, 60, STEP)
    result = find_lines(scan_of(x, rng.poisson(100, len(x))))
    assert result.lines == () and any("no line" in note for note in result.notes)
    assert result.background == pytest.approx(100.0, rel=0.05)


def test_a_gap_hides_only_what_lies_in_it():
    scan = simulated(10, [30.0, 45.0, 60.0], [3000, 3000, 3000])
    keep = np.abs(scan.two_theta_deg - 45.0) > 2.0
    result = find_lines(scan_of(scan.two_theta_deg[keep], scan.counts[keep], radiation="Cu"))
    assert positions(result) == pytest.approx([30.0, 60.0], abs=0.01)
    assert any("43.00 to 47.00" in note or "nothing was measured" in note for note in result.notes)


def test_a_saturated_line_keeps_its_place():
    scan = simulated(11, [30.0, 60.0], [3000, 800])
    counts = np.minimum(scan.counts, 9000.0)
    result = find_lines(scan_of(scan.two_theta_deg, counts, radiation="Cu"))
    assert positions(result) == pytest.approx([30.0, 60.0], abs=0.02)
    assert any("saturated" in note for note in result.notes)


def test_negative_counts_of_a_subtracted_scan():
    scan = simulated(12, [30.0, 60.0], [3000, 1500])
    smooth = 100 * (1 + np.exp(-(scan.two_theta_deg - 20) / 20))
    result = find_lines(scan_of(scan.two_theta_deg, scan.counts - smooth, radiation="Cu"))
    assert positions(result) == pytest.approx([30.0, 60.0], abs=0.01)
    assert any("negative" in note for note in result.notes)


def test_steps_out_of_order_change_nothing():
    scan = simulated(13, [30.0, 60.0], [3000, 1500])
    order = np.random.default_rng(0).permutation(len(scan))
    mixed = scan_of(scan.two_theta_deg[order], scan.counts[order], radiation="Cu")
    assert positions(find_lines(mixed)) == pytest.approx(positions(find_lines(scan)), abs=1e-9)


def test_the_same_scan_gives_the_same_bytes():
    scan = simulated(14, [30.0, 60.0, 61.0], [3000, 1500, 700])
    assert peaks_text(find_lines(scan)) == peaks_text(find_lines(scan))


def test_a_scan_cut_inside_a_line_does_no_harm():
    scan = simulated(15, [20.05, 60.0, 109.95], [3000, 1500, 3000])
    found = positions(find_lines(scan))
    assert np.abs(found - 60.0).min() < 0.01


@pytest.mark.parametrize("scale", [1e-6, 1.0, 1e6])
def test_the_unit_of_intensity_does_not_matter(scale):
    scan = simulated(16, [30.0, 60.0], [3000, 1500])
    esd = np.sqrt(np.maximum(scan.counts, 1.0))
    result = find_lines(scan_of(scan.two_theta_deg, scale * scan.counts, scale * esd, radiation="Cu"))
    assert positions(result) == pytest.approx([30.0, 60.0], abs=0.01)


def test_progress_goes_from_nothing_to_all():
    told = []
    find_lines(simulated(17, [30.0], [3000]), progress=lambda share, what: told.append((share, what)))
    shares = [share for share, _ in told]
    assert shares == sorted(shares) and shares[-1] == 1.0 and all(what for _, what in told)


@pytest.mark.long
def test_a_million_points():
    rng = np.random.default_rng(18)
    x = np.linspace(5, 140, 1_000_000)
    centre = np.array([28.4, 47.3, 56.1, 69.1, 76.4, 88.0])
    mean = 50 + 1000 * np.exp(-0.5 * ((x[:, None] - centre) / 0.05) ** 2).sum(axis=1)
    result = find_lines(scan_of(x, rng.poisson(mean), radiation="Cu-Ka1"))
    assert positions(result) == pytest.approx(centre, abs=2e-3)


# --- the list that is written ----------------------------------------------------------------------


@pytest.fixture(scope="module")
def result():
    scan = simulated(19, [30.0, 45.0, 60.0], [3000, 1000, 300])
    facts = ReadOptions(radiation="Cu", goniometer_radius_mm=240.0, temperature_k=295.0, sample="a, b: c")
    return find_lines(build_scan(RawScan(scan.two_theta_deg, scan.counts, None, ReadOptions()), facts))


@pytest.mark.parametrize("form", ["text", "json"])
def test_the_written_list_is_read_back(form, result):
    import json

    text = peaks_text(result) if form == "text" else json.dumps(peaks_document(result))
    peaks = peak_list_from_text(SourceText(text, "found.csv", ""))
    assert peaks.notes == ()
    assert peaks.position == pytest.approx(positions(result), abs=1e-4)
    assert peaks.intensity == pytest.approx(
        [100 * line.area / result.lines[0].area for line in result.lines], rel=0.01
    )
    assert peaks.esd == pytest.approx([line.two_theta_esd_deg for line in result.lines], abs=1e-4)
    assert peaks.fwhm == pytest.approx([line.fwhm_deg for line in result.lines], abs=1e-4)
    assert (peaks.goniometer_radius_mm, peaks.temperature_k, peaks.sample) == (240, 295, "a, b: c")
    assert (peaks.range_low, peaks.range_high) == pytest.approx((20.0, 109.98), abs=1e-3)


def test_a_list_on_the_doublet_is_written_on_alpha1_as_a_number(result):
    # fitted positions are K-alpha1: no line of the list may be read as an unresolved blend
    peaks = peak_list_from_text(SourceText(peaks_text(result), "found.csv", ""))
    assert peaks.radiation.convention == "literal"
    assert peaks.radiation.wavelength_angstrom == EMISSION_LINES["Cu"].alpha1


def test_a_list_without_lines_is_still_a_file():
    x = np.arange(20, 60, STEP)
    empty = find_lines(scan_of(x, np.random.default_rng(1).poisson(100, len(x)), radiation="Cu"))
    assert peaks_text(empty).endswith("two_theta_deg,intensity,esd,fwhm_deg\n")
    assert peaks_document(empty)["peaks"] == []
