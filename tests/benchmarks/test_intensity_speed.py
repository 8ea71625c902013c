"""Line lists of many phases, as a ratio to a general-purpose powder calculator in the same run."""

from __future__ import annotations

import statistics
import subprocess
import sys
import time
from dataclasses import replace

import numpy as np
import pytest
from benchmarks.timing import environment
from starter_phases import starter_phases

from phasedb.crystal.intensity import line_strengths, relative_intensities
from phasedb.crystal.phases import Phase
from phasedb.crystal.radiation import radiation_from_name
from phasedb.crystal.structure import cell_atoms

pytestmark = [pytest.mark.benchmark, pytest.mark.filterwarnings("ignore")]
COPPER = radiation_from_name("Cu-Ka1")
ROUNDS = 5


def thousand_phases() -> list[Phase]:
    """Return 1,000 phases with the structures of the starter library, each with an a of its own."""
    known = sorted(starter_phases().values(), key=lambda phase: phase.name)
    rng = np.random.default_rng(20260301)
    chosen = [known[i % len(known)] for i in range(1000)]
    return [replace(one, a_angstrom=one.a_angstrom * rng.uniform(0.99, 1.01)) for one in chosen]


def ours(phases: list[Phase]) -> float:
    start = time.perf_counter()
    for phase in phases:
        lines = line_strengths(phase)
        assert lines is not None
        relative_intensities(*lines, phase.a_angstrom, COPPER)
    return time.perf_counter() - start


def theirs(phases: list[Phase]) -> float:
    """Return the time of pymatgen's calculator, its structures made before the clock starts."""
    from pymatgen.analysis.diffraction.xrd import XRDCalculator
    from pymatgen.core import Lattice, Structure

    made = []
    for phase in phases:
        atoms = cell_atoms(phase.structure)
        species = [dict(phase.structure.sites[index].species) for index in atoms.site]
        made.append(Structure(Lattice.cubic(phase.a_angstrom), species, atoms.positions))
    calculator = XRDCalculator(wavelength=COPPER.wavelength_angstrom)
    start = time.perf_counter()
    for structure in made:
        calculator.get_pattern(structure, two_theta_range=(0, 150))
    return time.perf_counter() - start


def test_lines_of_a_thousand_phases_against_a_general_library() -> None:
    """Under a tenth of its time; it is given every fortieth phase and its time is counted forty times."""
    pytest.importorskip("pymatgen")
    phases = thousand_phases()
    sample = phases[::40]
    theirs(sample[:2])
    ratio = statistics.median(ours(phases) / (40 * theirs(sample)) for _ in range(3))
    print(f"1,000 phases: {ratio:.4f} of the general library's time")
    assert ratio < 0.1


_COLD = """
import sys, time
sys.path.insert(0, {tests!r})
from benchmarks.test_intensity_speed import ours, thousand_phases
phases = thousand_phases()
print(ours(phases), ours(phases))
"""


def test_the_first_time_costs_little_more() -> None:
    """Phase sums of each distinct site are made once: a fresh process needs at most 12 times as long."""
    code = _COLD.format(tests=str(__file__).rsplit("/benchmarks", 1)[0])
    ratios = []
    for _ in range(ROUNDS):
        done = subprocess.run(
            [sys.executable, "-c", code], capture_output=True, env=environment(), check=True
        )
        first, second = map(float, done.stdout.split())
        ratios.append(first / second)
    ratio = statistics.median(ratios)
    print(f"first pass {ratio:.1f} times the second")
    assert ratio < 12
