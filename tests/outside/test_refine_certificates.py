"""Refinement against certificates, a measured line standard, and two published exercises."""

import csv
import json
from pathlib import Path

import numpy as np
import pytest

from phasedb.characterise.extrapolation import a_of_lines, cohen, nelson_riley
from phasedb.characterise.refinement import refine
from phasedb.crystal.radiation import radiation_from_name, radiation_from_wavelength
from phasedb.measured.building import build_peak_list

DATA = Path(__file__).parent / "data"

# Published exercise (a powder pattern of a face-centred cubic metal, theta in degrees) and what a computation
# independent of this program gives for wavelength 1.5418 Å; Cohen's sums with delta = 10 sin² 2 theta.
EXERCISE_2THETA = 2 * np.array([21.972, 25.475, 37.406, 45.172, 47.754, 58.436, 68.110, 72.048])
EXERCISE_N = np.array([3, 4, 8, 11, 12, 16, 19, 20])
EXERCISE_A = [3.5687, 3.5846, 3.5894, 3.6050, 3.6075, 3.6190, 3.6214, 3.6240]

# Published problem (four lines of a face-centred cubic metal, wavelength 1.5405 Å) and its answer.
PROBLEM_2THETA = np.array([40.663, 47.314, 69.144, 83.448])
PROBLEM_A = [3.8397, 3.8392, 3.8393, 3.8384]


@pytest.mark.parametrize(
    ("table", "a", "expanded"),
    [
        # NIST certificates of SRM 640d and 640e (k = 2), 22.5 °C
        ("nist_srm640d_peak_positions", 5.43123, 8e-5),
        ("nist_srm640e_peak_positions", 5.431179, 8e-5),
    ],
)
@pytest.mark.parametrize("radiation", ["Cu", "Cu-Ka1"])
def test_certified_silicon_positions_give_the_certified_a(table, a, expanded, radiation):
    with (DATA / "published_line_tables.csv").open(encoding="utf-8", newline="") as file:
        listed = [float(row["two_theta_deg"]) for row in csv.DictReader(file) if row["table"] == table]
    assert len(listed) == 11
    peaks = build_peak_list(listed, unit="two-theta", radiation=radiation_from_name(radiation))
    found = refine(peaks, lattice_type="F", a_angstrom=5.43)
    assert len(found.lines) == 11 and not found.left_over
    assert abs(found.a_angstrom - a) < expanded
    assert abs(found.a_angstrom - a) < 2 * found.a_esd_angstrom


@pytest.mark.parametrize("radius", [200.0, 500.0])
def test_the_measured_lab6_standard_gives_its_a(radius):
    # list derived from an open measured scan (Cu, 500 mm class); the certificates of SRM 660 to 660c give
    # 4.1568 to 4.1569 Å at 22.5 °C
    with (DATA / "measured_lists.jsonl").open(encoding="utf-8") as file:
        listed = next(entry for entry in map(json.loads, file) if entry["id"] == "lab6_lab_cu")
    peaks = build_peak_list(
        [position for position, _ in listed["peaks"]],
        unit="two-theta",
        radiation=radiation_from_wavelength(listed["wavelength"]),
        measured_range=tuple(listed["range"]),
        goniometer_radius_mm=radius,
    )
    found = refine(peaks, lattice_type="P", a_angstrom=4.16)
    assert len(found.lines) == 23  # the 24th is a K-beta ghost
    assert abs(found.a_angstrom - 4.1569) < 2 * found.a_esd_angstrom < 4e-4


def test_the_exercise_line_by_line():
    assert a_of_lines(EXERCISE_2THETA, EXERCISE_N, 1.5418).round(4).tolist() == EXERCISE_A
    peaks = build_peak_list(EXERCISE_2THETA, unit="two-theta", radiation=radiation_from_wavelength(1.5418))
    found = refine(peaks, lattice_type="F", a_angstrom=3.62)
    assert [line.n for line in found.lines] == EXERCISE_N.tolist()
    assert [round(line.a_angstrom, 4) for line in found.lines] == EXERCISE_A


def test_the_exercise_by_both_extrapolations():
    riley = nelson_riley(EXERCISE_2THETA, EXERCISE_N, 1.5418)
    assert (round(riley.a_angstrom, 4), round(riley.a_esd_angstrom, 4)) == (3.6230, 0.0028)
    assert round(riley.trend, 4) == -0.0238
    classic = cohen(EXERCISE_2THETA, EXERCISE_N, 1.5418)
    assert (round(classic.a_angstrom, 4), round(classic.a_esd_angstrom, 4)) == (3.6302, 0.0019)
    assert float(f"{classic.trend:.4g}") == 7.485e-4
    other = cohen(EXERCISE_2THETA, EXERCISE_N, 1.5418, like_nelson_riley=True)
    assert other.a_angstrom == pytest.approx(3.6258, abs=1e-4)  # 3.62575 here, printed rounded up
    assert round(other.a_esd_angstrom, 4) == 0.0014


def test_the_exercise_by_cohen_s_printed_sums():
    theta = np.radians(EXERCISE_2THETA / 2)
    delta = 10 * np.sin(2 * theta) ** 2
    square = np.sin(theta) ** 2
    sums = [
        (EXERCISE_N**2).sum(),
        (EXERCISE_N * delta).sum(),
        (delta**2).sum(),
        (EXERCISE_N * square).sum(),
        (delta * square).sum(),
    ]
    assert sums == pytest.approx([1371, 629.018, 442.524, 62.2960, 28.6967], abs=6e-4)
    a_coefficient, d_coefficient = np.linalg.solve([sums[:2], sums[1:3]], sums[3:])
    found = cohen(EXERCISE_2THETA, EXERCISE_N, 1.5418)
    assert found.a_angstrom == pytest.approx(1.5418 / (2 * np.sqrt(a_coefficient)))
    assert found.trend == pytest.approx(d_coefficient)


def test_the_exercise_s_systematic_error_is_said():
    # the three extrapolations differ by up to two combined esds: the model of the errors is wrong
    peaks = build_peak_list(EXERCISE_2THETA, unit="two-theta", radiation=radiation_from_wavelength(1.5418))
    found = refine(peaks, lattice_type="F", a_angstrom=3.62)
    assert found.nelson_riley.a_angstrom == pytest.approx(3.6230, abs=6e-5)
    assert found.cohen.a_angstrom == pytest.approx(3.6302, abs=6e-5)
    assert any("extrapolation lies" in caution for caution in found.cautions)


def test_the_problem_of_four_lines():
    peaks = build_peak_list(PROBLEM_2THETA, unit="two-theta", radiation=radiation_from_wavelength(1.5405))
    found = refine(peaks, lattice_type="F", a_angstrom=3.84)
    assert [line.n for line in found.lines] == [3, 4, 8, 11]
    assert [round(line.a_angstrom, 4) for line in found.lines] == PROBLEM_A
    sine = np.sin(np.radians(PROBLEM_2THETA / 2)) ** 2
    assert (sine / sine[0]).round(3).tolist() == [1.0, 1.334, 2.667, 3.669]
    assert abs(found.a_angstrom - np.mean(PROBLEM_A)) < 2 * found.a_esd_angstrom
