"""What a list alone tells of an unknown, and when it tells too little."""

import numpy as np
import pytest

from phasedb.characterise.adoption import characterise_unknown
from phasedb.characterise.cells import StartingCell, cell_from_phase, cell_from_values
from phasedb.crystal.phases import Phase
from phasedb.crystal.radiation import radiation_from_name
from phasedb.errors import InputError
from phasedb.measured.building import build_peak_list


def test_an_unknown_is_indexed_and_refined(simulate):
    peaks = simulate(np.random.default_rng(1), a=4.387, noise=0.01)
    found = characterise_unknown(peaks)
    assert found.solution.lattice_type == found.refinement.lattice_type == "F"
    assert found.solution.lines_indexed == len(peaks)
    assert abs(found.refinement.a_angstrom - 4.387) < 3 * found.refinement.a_esd_angstrom < 6e-3


def test_a_known_cell_is_not_indexed(simulate):
    peaks = simulate(np.random.default_rng(2), a=4.387, noise=0.01, extra=9)
    found = characterise_unknown(peaks, cell=StartingCell("F", 4.40))
    assert found.solution is None
    assert abs(found.refinement.a_angstrom - 4.387) < 4 * found.refinement.a_esd_angstrom


def test_a_list_that_is_not_one_cubic_phase_is_refused():
    rng = np.random.default_rng(3)
    copper = radiation_from_name("Cu-Ka1")
    peaks = build_peak_list(np.sort(rng.uniform(22, 100, 12)), unit="two-theta", radiation=copper)
    with pytest.raises(InputError, match="index") as caught:
        characterise_unknown(peaks)
    assert "--left-over" in caught.value.hint


def test_a_stored_phase_is_taken_to_the_measuring_temperature():
    phase = Phase("x", "Al", "F", 4.05, temperature_k=300.0, expansion_per_k=2e-5)
    assert cell_from_phase(phase, 400.0).a_angstrom == pytest.approx(4.05 * 1.002)
    assert cell_from_phase(phase, None).a_angstrom == 4.05
    unknown = Phase("x", "Al", "F", 4.05)
    assert cell_from_phase(unknown, 400.0).a_angstrom == 4.05


@pytest.mark.parametrize(("lattice", "a"), [("Q", "4.39"), ("F", "0.439"), ("F", "439"), ("F", "wide")])
def test_a_cell_that_cannot_be_is_an_error(lattice, a):
    with pytest.raises(InputError):
        cell_from_values(lattice, a)


def test_a_cell_may_be_written_with_its_unit():
    assert cell_from_values("f", "0.439 nm") == StartingCell("F", 4.39)
