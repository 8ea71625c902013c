import itertools
from dataclasses import replace

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from starter_phases import starter_phases

from phasedb.crystal.formula import parse_formula
from phasedb.crystal.intensity import (
    absolute_intensities,
    anomalous_dispersion,
    form_factor,
    line_strengths,
    lorentz_polarisation,
    relative_intensities,
)
from phasedb.crystal.lattice import multiplicity
from phasedb.crystal.phases import Phase, Site, Structure
from phasedb.crystal.radiation import radiation_from_name, two_theta_from_d
from phasedb.crystal.structure import cell_atoms
from phasedb.errors import InputError

COPPER = radiation_from_name("Cu-Ka1")


def direct_sum(phase, n_max, wavelength=COPPER.wavelength_angstrom):
    """Add |F|² of every hkl of the sphere, both signs, atom by atom: slow and without shortcuts."""
    atoms = cell_atoms(phase.structure)
    top = int(np.sqrt(n_max))
    total = {}
    for hkl in itertools.product(range(-top, top + 1), repeat=3):
        n = sum(index * index for index in hkl)
        if not 0 < n <= n_max:
            continue
        s = np.sqrt(n) / (2 * phase.a_angstrom)
        amplitude = 0j
        for index, position in zip(atoms.site, atoms.positions, strict=True):
            site = phase.structure.sites[index]
            factor = sum(
                part * (float(form_factor(symbol, s)) + complex(*anomalous_dispersion(symbol, wavelength)))
                for symbol, part in site.species
            )
            phase_angle = 2 * np.pi * np.dot(hkl, position)
            amplitude += factor * np.exp(-site.b_iso * s * s) * np.exp(1j * phase_angle)
        total[n] = total.get(n, 0.0) + abs(amplitude) ** 2
    return total


@pytest.mark.parametrize(
    "name",
    [
        "GaAs",
        "pyrite",
        "manganese silicide MnSi",
        "silicon",
        "copper(I) oxide",
        "titanium carbide",
        "iron nitride gamma'",
    ],
)
def test_strengths_are_the_plain_sum_over_atoms_and_planes(name):
    # GaAs and MnSi lack an inversion centre, so hkl and its opposite differ through f''; in MnSi and pyrite
    # hkl and khl differ too
    phase = starter_phases()[name]
    n, strength = line_strengths(phase, n_max=14)
    expected = direct_sum(phase, 14)
    strongest = max(expected.values())
    found = dict(zip(n.tolist(), strength.tolist(), strict=True))
    for line, value in expected.items():
        assert found.get(line, 0.0) == pytest.approx(value, rel=1e-9, abs=1e-8 * strongest)


def copper_phase(**changes):
    copper = Phase(
        "copper",
        "Cu",
        "F",
        3.615,
        structure=Structure("F m -3 m", (Site("Cu1", (("Cu", 1.0),), (0, 0, 0), 0.55),)),
    )
    return replace(copper, **changes)


def test_one_atom_at_each_lattice_point_gives_sixteen_f_squared():
    n, strength = line_strengths(copper_phase())
    s = np.sqrt(n) / (2 * 3.615)
    first, second = anomalous_dispersion("Cu", COPPER.wavelength_angstrom)
    squared = (form_factor("Cu", s) + first) ** 2 + second**2
    planes = np.array([multiplicity("F", value) for value in n])
    assert strength == pytest.approx(planes * 16 * squared * np.exp(-2 * 0.55 * s * s), rel=1e-12)


def test_a_phase_without_structure_has_no_strengths():
    assert line_strengths(copper_phase(structure=None)) is None


def test_the_range_of_lines_is_what_was_asked():
    n, _ = line_strengths(copper_phase(), n_max=11)
    assert n.tolist() == [3, 4, 8, 11]
    n, _ = line_strengths(copper_phase(), d_min_angstrom=1.0)
    assert n.tolist() == [3, 4, 8, 11, 12]
    n, strength = line_strengths(copper_phase(a_angstrom=0.4))
    assert len(n) == len(strength) == 0


def test_the_lines_of_a_huge_cell_are_limited():
    n, _ = line_strengths(copper_phase(a_angstrom=100.0))
    assert n[-1] <= 2500


def test_mixed_and_partial_occupancy_average_the_atoms():
    mixed = replace(
        copper_phase(),
        structure=Structure("F m -3 m", (Site("M", (("Cu", 0.5), ("Ni", 0.5)), (0, 0, 0), 0.0),)),
    )
    n, strength = line_strengths(mixed, dispersion=False)
    s = np.sqrt(n) / (2 * 3.615)
    mean = (form_factor("Cu", s) + form_factor("Ni", s)) / 2
    planes = np.array([multiplicity("F", value) for value in n])
    assert strength == pytest.approx(planes * 16 * mean**2, rel=1e-12)
    half = replace(
        copper_phase(), structure=Structure("F m -3 m", (Site("M", (("Cu", 0.5),), (0, 0, 0), 0.55),))
    )
    assert line_strengths(half)[1] == pytest.approx(line_strengths(copper_phase())[1] / 4, rel=1e-12)


@given(st.sampled_from(sorted(starter_phases())), st.floats(0.97, 1.03))
def test_strengths_change_smoothly_with_a(name, factor):
    phase = starter_phases()[name]
    n, strength = line_strengths(phase, n_max=12)
    moved_n, moved = line_strengths(replace(phase, a_angstrom=phase.a_angstrom * factor), n_max=12)
    both = np.isin(n, moved_n) & (strength > 0.01 * strength.max())
    assert moved[np.isin(moved_n, n[both])] == pytest.approx(strength[both], rel=0.3)


def test_an_inverted_structure_has_the_same_powder_lines():
    phase = starter_phases()["GaAs"]
    inverted = replace(
        phase,
        structure=replace(
            phase.structure,
            sites=tuple(
                replace(site, position=tuple(-value for value in site.position))
                for site in phase.structure.sites
            ),
        ),
    )
    assert line_strengths(inverted)[1] == pytest.approx(line_strengths(phase)[1], rel=1e-10)


def test_radiation_changes_dispersion():
    phase = starter_phases()["cobalt aluminide CoAl"]
    # cobalt's K edge lies between Co and Cu K-alpha: f' differs by about 1.5 electrons
    by_cobalt = line_strengths(phase, radiation=radiation_from_name("Co-Ka1"))[1]
    by_molybdenum = line_strengths(phase, radiation=radiation_from_name("Mo-Ka1"))[1]
    assert not np.allclose(by_cobalt, by_molybdenum, rtol=0.05)


def test_electrons_have_their_own_form_factor():
    electron = radiation_from_name("electron", energy_kev=200.0)
    n, strength = line_strengths(copper_phase(), radiation=electron)
    s = np.sqrt(n) / (2 * 3.615)
    planes = np.array([multiplicity("F", value) for value in n])
    expected = planes * 16 * form_factor("Cu", s, probe="electron") ** 2 * np.exp(-2 * 0.55 * s * s)
    assert strength == pytest.approx(expected, rel=1e-12)
    relative = relative_intensities(n, strength, 3.615, electron)
    assert relative == pytest.approx(100 * strength / strength.max())


def test_lorentz_polarisation_by_hand():
    # (1 + cos² 60°) / (2 sin² 30° cos 30°) and, with graphite at 26.6°, c = cos² 26.6° = 0.79952
    assert float(lorentz_polarisation(60.0)) == pytest.approx(1.25 / (2 * 0.25 * np.sqrt(0.75)))
    c = np.cos(np.radians(26.6)) ** 2
    expected = (1 + c * 0.25) / ((1 + c) * 0.25 * np.sqrt(0.75))
    assert float(lorentz_polarisation(60.0, 26.6)) == pytest.approx(expected)


def test_intensities_follow_from_strengths():
    n, strength = line_strengths(copper_phase())
    two_theta = two_theta_from_d(3.615 / np.sqrt(n), COPPER.wavelength_angstrom)
    absolute = absolute_intensities(n, strength, 3.615, COPPER)
    reached = np.isfinite(two_theta)
    assert (absolute[~reached] == 0).all()
    expected = strength[reached] * lorentz_polarisation(two_theta[reached]) / 3.615**6
    assert absolute[reached] == pytest.approx(expected)
    relative = relative_intensities(n, strength, 3.615, COPPER)
    assert relative.max() == 100.0
    assert relative[reached] == pytest.approx(np.minimum(100 * expected / expected[0], 100))


def test_a_line_near_backscattering_does_not_set_the_scale():
    # 2theta = 179.6: the Lorentz factor of the last line is above 300
    phase = copper_phase(a_angstrom=COPPER.wavelength_angstrom / 2 * np.sqrt(20) * 1.000006)
    relative = relative_intensities(*line_strengths(phase, n_max=20), phase.a_angstrom, COPPER)
    assert relative[0] == 100.0


def test_a_lone_line_beyond_the_scale_is_one_hundred():
    assert relative_intensities(
        [20], [5.0], COPPER.wavelength_angstrom / 2 * np.sqrt(20) * 1.0001, COPPER
    ) == [100.0]
    assert relative_intensities([20], [5.0], 1.0, COPPER) == [0.0]


def test_an_element_without_published_form_factor_is_named():
    einsteinium = Phase(
        "x", "Es", "F", 5.0, structure=Structure("F m -3 m", (Site("Es1", (("Es", 1.0),), (0, 0, 0)),))
    )
    with pytest.raises(InputError, match="form factor is at hand for Es"):
        line_strengths(einsteinium)


def test_deuterium_scatters_x_rays_like_hydrogen():
    assert form_factor("D", [0.0, 0.3, 0.7]) == pytest.approx(form_factor("H", [0.0, 0.3, 0.7]))


@given(st.sampled_from(["H", "C", "O", "Si", "Fe", "Mo", "Au", "U", "Cf"]))
def test_forward_scattering_counts_the_electrons(symbol):
    from phasedb.crystal.elements import element

    assert float(form_factor(symbol, 0.0)) == pytest.approx(element(symbol).atomic_number, abs=0.1)


def test_the_formula_of_every_starter_phase_scatters():
    for phase in starter_phases().values():
        n, strength = line_strengths(phase)
        assert (np.diff(n) > 0).all()
        assert np.isfinite(strength).all()
        assert (strength > 0).all()
        assert parse_formula(phase.formula).atoms > 0
