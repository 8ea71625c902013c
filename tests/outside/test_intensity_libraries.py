"""|F|², form factors and intensities against general-purpose libraries that no one here wrote."""

import numpy as np
import pytest
from starter_phases import one_phase_of_each_type, starter_phases

from phasedb.crystal.formula import parse_formula
from phasedb.crystal.intensity import (
    anomalous_dispersion,
    form_factor,
    line_strengths,
    relative_intensities,
)
from phasedb.crystal.radiation import radiation_from_name
from phasedb.crystal.structure import cell_atoms
from phasedb.library.cif_writing import cif_of
from phasedb.library.entry import Draft

PHASES = one_phase_of_each_type()
COPPER = radiation_from_name("Cu-Ka1")
HKL = np.array(list(np.ndindex(13, 13, 13))) - 6
N = (HKL**2).sum(axis=1)
SPHERE = HKL[(N > 0) & (N <= 36)]
SPHERE_N = N[(N > 0) & (N <= 36)]


def per_line(values):
    """Return the sum over all planes of each N from 0 to 36."""
    return np.bincount(SPHERE_N, values, minlength=37)


def ours(phase, **options):
    n, strength = line_strengths(phase, n_max=36, **options)
    values = np.zeros(37)
    values[n] = strength
    return values


@pytest.mark.parametrize("name", sorted(PHASES))
def test_structure_factors_of_every_type_against_gemmi(name):
    """Same form factors and f', its own symmetry and sum; every plane of the sphere, so multiplicity too."""
    import gemmi

    phase = PHASES[name]
    structure = gemmi.SmallStructure()
    structure.cell.set(*[phase.a_angstrom] * 3, 90, 90, 90)
    structure.spacegroup = gemmi.find_spacegroup_by_name(phase.structure.space_group)
    symbols = set()
    for index, site in enumerate(phase.structure.sites):
        for symbol, part in site.species:
            atom = gemmi.SmallStructure.Site()
            atom.label, atom.type_symbol, atom.element = f"{symbol}{index}", symbol, gemmi.Element(symbol)
            atom.fract, atom.occ = gemmi.Fractional(*site.position), part
            atom.u_iso = site.b_iso / (8 * np.pi**2)
            structure.add_site(atom)
            symbols.add(symbol)
    structure.setup_cell_images()
    structure.change_occupancies_to_crystallographic(max_dist=0.05)
    calculator = gemmi.StructureFactorCalculatorX(structure.cell)
    for symbol in symbols:
        calculator.addends.set(
            gemmi.Element(symbol), anomalous_dispersion(symbol, COPPER.wavelength_angstrom)[0]
        )
    theirs = per_line(
        [abs(calculator.calculate_sf_from_small_structure(structure, hkl.tolist())) ** 2 for hkl in SPHERE]
    )
    # f'' is not in their sum; it adds the square of its own sum to ours
    assert ours(phase) - _absorption(phase) == pytest.approx(theirs, rel=1e-4, abs=1e-6 * theirs.max())


def _absorption(phase):
    """Return the part of |F|² that f'' adds, summed atom by atom."""
    atoms = cell_atoms(phase.structure)
    s = np.sqrt(SPHERE_N) / (2 * phase.a_angstrom)
    amplitude = np.zeros(len(SPHERE), dtype=complex)
    for index, site in enumerate(phase.structure.sites):
        second = sum(
            part * anomalous_dispersion(symbol, COPPER.wavelength_angstrom)[1]
            for symbol, part in site.species
        )
        waves = np.exp(2j * np.pi * SPHERE @ atoms.positions[atoms.site == index].T).sum(axis=1)
        amplitude += second * np.exp(-site.b_iso * s * s) * waves
    return per_line(np.abs(amplitude) ** 2)


# hydrogen: their table is of the free atom, ours of the bonded one (both International Tables C, 6.1.1.4)
NO_HYDROGEN = sorted(
    name for name, phase in PHASES.items() if "H" not in parse_formula(phase.formula).composition
)
QUICK = ("spinel", "pyrite", "yttrium aluminium garnet (YAG)", "gamma brass Cu5Zn8")


def against_dans_diffraction(name, folder):
    dans = pytest.importorskip("Dans_Diffraction")
    phase = PHASES[name]
    path = folder / "phase.cif"
    draft = Draft(
        phase.name,
        phase.formula,
        phase.lattice_type,
        phase.a_angstrom,
        space_group=phase.structure.space_group,
        sites=phase.structure.sites,
    )
    path.write_text(cif_of(draft), encoding="utf-8")
    crystal = dans.Crystal(str(path))
    theirs = per_line(crystal.Scatter.intensity(SPHERE, scattering_type="xray"))
    assert ours(phase, dispersion=False) == pytest.approx(theirs, rel=1e-4, abs=1e-6 * theirs.max())


@pytest.mark.filterwarnings("ignore")
@pytest.mark.parametrize("name", QUICK)
def test_structure_factors_against_another_library_through_cif(name, tmp_path):
    """Dans_Diffraction reads our CIF, expands the cell by itself and has its own copy of the form factors."""
    against_dans_diffraction(name, tmp_path)


@pytest.mark.long
@pytest.mark.filterwarnings("ignore")
@pytest.mark.parametrize("name", [name for name in NO_HYDROGEN if name not in QUICK])
def test_structure_factors_of_every_type_against_another_library(name, tmp_path):
    against_dans_diffraction(name, tmp_path)


@pytest.mark.long
@pytest.mark.filterwarnings("ignore")
@pytest.mark.parametrize(
    "name", ["silicon", "sodium chloride", "pyrite", "spinel", "caesium chloride", "copper(I) oxide"]
)
def test_relative_intensities_against_a_general_powder_calculator(name):
    """pymatgen: own symmetry, own form factors (without dispersion), own Lorentz-polarisation; B = 0."""
    pytest.importorskip("pymatgen")
    from dataclasses import replace

    from pymatgen.analysis.diffraction.xrd import XRDCalculator
    from pymatgen.core import Lattice, Structure

    phase = starter_phases()[name]
    sites = tuple(replace(site, b_iso=0.0) for site in phase.structure.sites)
    phase = replace(phase, structure=replace(phase.structure, sites=sites))
    atoms = cell_atoms(phase.structure)
    species = [dict(phase.structure.sites[index].species) for index in atoms.site]
    theirs = XRDCalculator(wavelength=COPPER.wavelength_angstrom).get_pattern(
        Structure(Lattice.cubic(phase.a_angstrom), species, atoms.positions), two_theta_range=(10, 120)
    )
    n, strength = line_strengths(phase, dispersion=False)
    relative = relative_intensities(n, strength, phase.a_angstrom, COPPER)
    two_theta = 2 * np.degrees(
        np.arcsin(np.minimum(COPPER.wavelength_angstrom * np.sqrt(n) / (2 * phase.a_angstrom), 1))
    )
    for angle, intensity in zip(theirs.x, theirs.y, strict=True):
        nearest = int(np.argmin(np.abs(two_theta - angle)))
        assert two_theta[nearest] == pytest.approx(angle, abs=1e-3)
        # its form factors are a four-term fit of their own, good to a few per cent
        assert relative[nearest] == pytest.approx(intensity, rel=0.05, abs=0.4)


@pytest.mark.parametrize("symbol", ["H", "C", "O", "Na", "Si", "Cl", "Fe", "Cu", "Mo", "I", "W", "Au", "U"])
def test_form_factors_against_waasmaier_and_kirfel(symbol):
    # xraydb: Waasmaier & Kirfel, Acta Cryst. A51 (1995) 416; ours: International Tables C, table 6.1.1.4
    import xraydb

    s = np.linspace(0.0, 1.5, 31)
    theirs = xraydb.f0(symbol, s)
    allowed = 0.07 if symbol != "H" else 0.1  # hydrogen: free against bonded atom
    assert form_factor(symbol, s) == pytest.approx(theirs, abs=allowed)


@pytest.mark.parametrize("symbol", ["O", "Si", "Cl", "Fe", "Cu", "Mo", "Au"])
def test_dispersion_against_chantler(symbol):
    # xraydb: Chantler 1995; theories differ by up to 0.4 electrons in f' of heavy atoms, 5 % in f''
    import xraydb

    energy_ev = 12398.41984 / COPPER.wavelength_angstrom
    first, second = anomalous_dispersion(symbol, COPPER.wavelength_angstrom)
    assert first == pytest.approx(float(xraydb.f1_chantler(symbol, energy_ev)), abs=0.4)
    assert second == pytest.approx(float(xraydb.f2_chantler(symbol, energy_ev)), rel=0.05, abs=0.02)


def test_electron_form_factor_against_the_mott_bethe_relation():
    # f_e = (Z - f_x) / (8 pi² a0 s²), a0 = 0.529177 Å; holds for fast electrons and s away from 0
    s = np.linspace(0.2, 1.2, 11)
    for symbol, number in [("C", 6), ("Si", 14), ("Cu", 29), ("Au", 79)]:
        expected = (number - form_factor(symbol, s)) / (8 * np.pi**2 * 0.529177 * s**2)
        assert form_factor(symbol, s, probe="electron") == pytest.approx(expected, rel=0.04)
