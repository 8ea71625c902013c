"""CIF against libraries that no one here wrote: they read ours, we read theirs."""

import gemmi
import numpy as np
import pytest
from starter_phases import one_phase_of_each_type, starter_phases

from phasedb.crystal.intensity import line_strengths
from phasedb.crystal.phases import Phase, Structure
from phasedb.crystal.structure import cell_atoms, space_group
from phasedb.library.cif import CifPhase, parse_cif
from phasedb.library.cif_writing import cif_of
from phasedb.library.entry import Draft


def draft_of(phase):
    return Draft(
        phase.name,
        phase.formula,
        phase.lattice_type,
        phase.a_angstrom,
        a_esd_angstrom=0.0002,
        space_group=phase.structure.space_group,
        sites=phase.structure.sites,
    )


def only_phase(text):
    (found,) = parse_cif(text, "test.cif")
    assert isinstance(found, CifPhase), found
    return found.draft


@pytest.mark.parametrize("name", sorted(starter_phases()))
def test_gemmi_reads_our_cif_back_to_the_same_atoms(name):
    phase = starter_phases()[name]
    structure = gemmi.make_small_structure_from_block(
        gemmi.cif.read_string(cif_of(draft_of(phase))).sole_block()
    )
    assert structure.cell.a == pytest.approx(phase.a_angstrom, abs=1e-9)
    assert structure.spacegroup.xhm() == phase.structure.space_group
    atoms = cell_atoms(phase.structure)
    ours = sorted(
        (symbol, *np.round((position + 1e-7) % 1.0, 4).tolist(), round(part, 6))
        for index, position in zip(atoms.site, atoms.positions, strict=True)
        for symbol, part in phase.structure.sites[index].species
    )
    # it merges atoms nearer than 0.4 Å: disordered hydrogen and oxygen are expanded one by one instead
    operations = list(structure.spacegroup.operations())
    theirs = set()
    for site in structure.sites:
        for operation in operations:
            image = np.array(operation.apply_to_xyz(site.fract.tolist()))
            theirs.add((site.type_symbol, *np.round((image + 1e-7) % 1.0, 4).tolist(), round(site.occ, 6)))
    assert {row[:4] for row in ours} == {row[:4] for row in theirs}
    assert {row[0]: row[4] for row in ours}.keys() == {row[0]: row[4] for row in theirs}.keys()
    assert {(row[0], row[4]) for row in ours} == {(row[0], row[4]) for row in theirs}


@pytest.mark.parametrize("name", sorted(one_phase_of_each_type()))
def test_our_own_reader_loses_nothing_that_scatters(name):
    phase = one_phase_of_each_type()[name]
    back = only_phase(cif_of(draft_of(phase)))
    again = Phase(
        back.name,
        back.formula,
        back.lattice_type,
        back.a_angstrom,
        structure=Structure(back.space_group, back.sites),
    )
    assert back.formula == phase.formula
    assert back.a_esd_angstrom == pytest.approx(0.0002)
    n, strength = line_strengths(phase)
    n_back, strength_back = line_strengths(again)
    assert n.tolist() == n_back.tolist()
    assert strength_back == pytest.approx(strength, rel=1e-6)


@pytest.mark.parametrize(
    "name", ["silicon", "pyrite", "spinel", "magnetite", "copper(I) oxide", "titanium carbide"]
)
def test_a_cif_written_by_another_library_is_read(name):
    """gemmi writes the atoms; its writer gives U, and names the group without operations."""
    phase = starter_phases()[name]
    structure = gemmi.make_small_structure_from_block(
        gemmi.cif.read_string(cif_of(draft_of(phase))).sole_block()
    )
    back = only_phase(structure.make_cif_block().as_string())
    assert back.lattice_type == phase.lattice_type
    assert back.a_angstrom == pytest.approx(phase.a_angstrom)
    assert space_group(back.space_group).number == space_group(phase.structure.space_group).number
    again = Phase(
        "x",
        back.formula,
        back.lattice_type,
        back.a_angstrom,
        structure=Structure(back.space_group, back.sites),
    )
    assert line_strengths(again)[1] == pytest.approx(line_strengths(phase)[1], rel=2e-3)


@pytest.mark.long
@pytest.mark.filterwarnings("ignore")
def test_a_cif_written_by_a_materials_library_is_read():
    """pymatgen lists every atom of the cell in P1 unless asked for symmetry; with symmetry it is read."""
    pytest.importorskip("pymatgen")
    from pymatgen.core import Lattice
    from pymatgen.core import Structure as Theirs
    from pymatgen.io.cif import CifWriter

    salt = Theirs.from_spacegroup("Fm-3m", Lattice.cubic(5.6402), ["Na", "Cl"], [[0, 0, 0], [0.5, 0.5, 0.5]])
    back = only_phase(str(CifWriter(salt, symprec=1e-3)))
    assert (back.formula, back.lattice_type, back.a_angstrom) == ("NaCl", "F", 5.6402)
    assert len(back.sites) == 2
