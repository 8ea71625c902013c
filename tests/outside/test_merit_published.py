"""F_N against its published printed example."""

from __future__ import annotations

import gemmi
import numpy as np

from phasedb.crystal.lattice import families
from phasedb.identify.merit import merit_f, possible_lines


def _n_of_a15(n_max: int) -> np.ndarray:
    """Return the N that the A15 structure's space group P m -3 n allows, by a general crystallographic
    library.
    """
    operations = gemmi.SpaceGroup("P m -3 n").operations()
    return np.array(
        [
            n
            for n in range(1, n_max + 1)
            if any(not operations.is_systematically_absent(list(hkl)) for hkl in families(n))
        ]
    )


def test_smith_and_snyder_example_of_chromium_rhodium() -> None:
    """Smith & Snyder (1979), J. Appl. Cryst. 12, 60: F20 = 101 (0.009, 22) for Cr3Rh (as quoted by others).

    22 possible lines need the space group's absences; the lattice's alone give 29.
    """
    allowed = _n_of_a15(34)
    assert len(allowed) == 22
    assert len(possible_lines("P", 34, None)) == 29
    observed = np.r_[allowed[:19], 34]
    found = merit_f(observed, np.full(20, 0.009), allowed)
    assert found is not None
    assert (found.n, found.n_possible) == (20, 22)
    assert round(found.value) == 101
