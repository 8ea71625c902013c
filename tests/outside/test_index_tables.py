"""Indexing of published line tables and worked examples (source in each row of the data files), and of lists
of non-cubic samples measured by other laboratories."""

from __future__ import annotations

import numpy as np
import pytest
from study.library import starter_phases
from study.measured import RIGHT, measured_peaks, measured_records, published_tables

from phasedb.characterise.indexing import NOT_CUBIC, NOT_PROOF, index_lines
from phasedb.crystal.radiation import radiation_from_wavelength, two_theta_from_d
from phasedb.errors import InputError
from phasedb.measured.building import build_peak_list

TABLES = {one.name: one for one in published_tables()}
ENTRIES = {phase.name: phase for phase in starter_phases()}
# seven lines each, read from different samples or without any odd line: the list cannot decide
UNDECIDED = {"handbook_of_mineralogy_altaite", "handbook_of_mineralogy_sylvite"}


@pytest.mark.parametrize("name", sorted(RIGHT))
def test_right_cell_of_a_published_table(name: str) -> None:
    entry = ENTRIES[RIGHT[name]]
    found = index_lines(TABLES[name].peaks)
    best = found.solutions[0]
    cells = [(best.lattice_type, best.a_angstrom)]
    if name in UNDECIDED:
        cells += [(one.lattice_type, one.a_angstrom) for one in best.ambiguous_with]
    right = [a for lattice, a in cells if lattice == entry.lattice_type]
    assert right
    assert min(abs(a / entry.a_angstrom - 1.0) for a in right) < 0.007
    assert best.lines_indexed >= 0.85 * len(TABLES[name].peaks)
    assert NOT_PROOF in found.cautions


def test_three_lines_of_a_body_centred_metal_leave_both_cells_open() -> None:
    """2theta = 38.6, 55.7, 70.0 with 1.542 Å: a published exercise whose answer is tantalum, a = 3.302 Å.

    I(a) and P(a/sqrt 2) share their first six lines; the seventh, near 122 degrees, decides.
    """
    peaks = build_peak_list([38.6, 55.7, 70.0], unit="two-theta", radiation=radiation_from_wavelength(1.542))
    best = index_lines(peaks).solutions[0]
    open_cells = {best.lattice_type: best.a_angstrom}
    open_cells |= {one.lattice_type: one.a_angstrom for one in best.ambiguous_with}
    assert open_cells["I"] == pytest.approx(3.302, rel=0.005)
    assert open_cells["P"] == pytest.approx(3.302 / np.sqrt(2.0), rel=0.005)
    deciding = [one.deciding_line_two_theta_deg for one in best.ambiguous_with if one.lattice_type in "PI"]
    assert deciding[0] == pytest.approx(float(two_theta_from_d(3.294 / np.sqrt(14.0), 1.542)), abs=0.5)


@pytest.mark.parametrize("name", ["al2o3_corundum_cu", "ru_rh_hcp_cu"])
def test_a_sample_that_is_not_cubic_is_said_to_be_so(name: str) -> None:
    found = index_lines(measured_peaks(next(one for one in measured_records() if one["id"] == name)))
    assert NOT_CUBIC in found.cautions
    assert found.solutions[0].lines_indexed < 0.6 * found.line_count


def test_two_lines_are_too_few() -> None:
    peaks = build_peak_list([40.0, 58.0], unit="two-theta", radiation=radiation_from_wavelength(1.5406))
    with pytest.raises(InputError, match="at least 3"):
        index_lines(peaks)
